"""A memo as a Word document, by python-docx: the same bytes for the same memo."""

from __future__ import annotations

import datetime
import io
import zipfile
from collections.abc import Sequence
from types import ModuleType
from typing import Any

from harvest.errors import MissingExtraError
from harvest.report.memo.markup import (
    Block,
    Box,
    Bullets,
    Code,
    Figure,
    Heading,
    Inline,
    Line,
    Paragraph,
    Span,
    Table,
    is_to_fill_in,
    words_of,
)
from harvest.report.memo.pdf_page import drawing_width, png, typst_library
from harvest.report.memo.values import Drawing

ZIP_DATE = (1980, 1, 1, 0, 0, 0)
LONGEST_NUMBER, LONGEST_COLUMN = 18, 60
"""Signs up to which a cell stands in one line, and beyond which a column grows no wider."""
SIGN, BESIDE = 62_000, 4
"""Width of a sign in a table [EMU], and signs that the margins of a cell take."""
LEAST_FOR_WORDS = 0.3
MOST_ROWS_TOGETHER = 12
FILLS = {"failed": "FDF1EA", "warning": "FDF6E6", "answer": "F4F4F2"}
SVG_EXTENSION = "{96DAC541-7B7A-43D3-8B79-37D633B846F1}"


def docx_library() -> ModuleType:
    """Return python-docx; raises MissingExtraError without it, or without typst, which makes images of drawings."""
    try:
        import docx

        typst_library()
    except (ImportError, MissingExtraError):
        raise MissingExtraError(
            "a memo for Word needs python-docx and typst, which are not both installed; install them with "
            'pip install "harvest[word]"'
        ) from None
    return docx


def word(blocks: Sequence[Block], title: str, date: str) -> bytes:
    """Blocks as a Word document; raises MissingExtraError without python-docx or typst."""
    docx_library()
    content = io.BytesIO()
    _Writer(title, date).written(blocks).save(content)
    return _with_fixed_dates(content.getvalue())


def _with_fixed_dates(content: bytes) -> bytes:
    """The same archive without the moment of its writing."""
    fixed = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as read, zipfile.ZipFile(fixed, "w") as written:
        for item in sorted(read.infolist(), key=lambda each: each.filename != "[Content_Types].xml"):
            entry = zipfile.ZipInfo(item.filename, ZIP_DATE)
            entry.compress_type = zipfile.ZIP_DEFLATED
            written.writestr(entry, read.read(item.filename))
    return fixed.getvalue()


class _Writer:
    def __init__(self, title: str, date: str) -> None:
        from docx import Document
        from docx.shared import Mm, Pt, RGBColor

        self.document = Document()
        section = self.document.sections[0]
        section.page_width, section.page_height = Mm(210), Mm(297)
        section.left_margin = section.right_margin = Mm(20)
        section.top_margin = section.bottom_margin = Mm(20)
        properties = self.document.core_properties
        moment = datetime.datetime.fromisoformat(date)
        properties.title, properties.author, properties.comments = title[:250], "", ""
        properties.created = properties.modified = moment
        styles = self.document.styles
        styles["Normal"].font.name, styles["Normal"].font.size = "Georgia", Pt(10)
        styles["Normal"].paragraph_format.space_after = Pt(5)
        for level, size in ((1, 16), (2, 12.5), (3, 10.5), (4, 10)):
            style = styles[f"Heading {level}"]
            style.font.name, style.font.size, style.font.bold = "Arial", Pt(size), True
            style.font.color.rgb = RGBColor(0x1A, 0x1A, 0x1A)
            self.set_font(style.element.get_or_add_rPr(), "Arial")

    @staticmethod
    def set_font(properties: Any, name: str) -> None:
        """Name the font for every script; the template's theme would go before it."""
        from docx.oxml.ns import qn

        fonts = properties.get_or_add_rFonts()
        for theme in ("asciiTheme", "hAnsiTheme", "eastAsiaTheme", "cstheme"):
            fonts.attrib.pop(qn(f"w:{theme}"), None)
        for script in ("ascii", "hAnsi", "cs"):
            fonts.set(qn(f"w:{script}"), name)

    def written(self, blocks: Sequence[Block]) -> Any:
        self.blocks(blocks, self.document)
        return self.document

    def blocks(self, blocks: Sequence[Block], into: Any) -> None:
        for block in blocks:
            if isinstance(block, Heading):
                self.runs(into.add_paragraph(style=f"Heading {block.level}"), block.content)
            elif isinstance(block, Paragraph):
                self.runs(into.add_paragraph(), block.content)
            elif isinstance(block, Bullets):
                for i, item in enumerate(block.items):
                    # numbers are written out: numbering of Word would go on from list to list
                    style = None if block.ordered else "List Bullet"
                    begun = (f"{i + 1}. ", *item) if block.ordered else item
                    self.runs(into.add_paragraph(style=style), begun)
            elif isinstance(block, Table):
                self.table(block, into)
            elif isinstance(block, Code):
                self.code(into.add_paragraph(), block.text)
            elif isinstance(block, Figure):
                self.figure(into.add_paragraph(), block.drawing)
                self.caption(into.add_paragraph(), f"{block.drawing.words}.")
            else:
                self.box(block, into)

    def box(self, box: Box, into: Any) -> None:
        """Blocks in a cell with a ground of its own, or as they are."""
        if box.name not in FILLS:
            self.blocks(box.blocks, into)
            return
        table = into.add_table(1, 1)
        cell = table.cell(0, 0)
        self.shade(cell, FILLS[box.name])
        cell._element.remove(cell.paragraphs[0]._element)
        self.blocks(box.blocks, cell)
        self.gap(cell)
        self.gap(into)

    @staticmethod
    def gap(into: Any) -> None:
        """A low empty paragraph, without which Word joins tables."""
        from docx.shared import Pt

        form = into.add_paragraph().paragraph_format
        form.space_before, form.space_after, form.line_spacing = Pt(0), Pt(0), Pt(7)

    def runs(self, paragraph: Any, line: Line, **style: bool) -> None:
        for each in line:
            self.run(paragraph, each, **style)

    def run(self, paragraph: Any, each: Inline, **style: bool) -> None:
        if isinstance(each, Span):
            name = {"strong": "bold", "emphasis": "italic", "sub": "subscript", "sup": "superscript"}.get(each.style)
            self.runs(paragraph, each.inside, **{**style, name or "code": True})
            return
        from docx.shared import Pt

        run = paragraph.add_run(str(each))
        run.bold, run.italic = style.get("bold"), style.get("italic")
        run.font.subscript, run.font.superscript = style.get("subscript"), style.get("superscript")
        if style.get("code"):
            self.set_font(run._element.get_or_add_rPr(), "Consolas")
            run.font.size = Pt(8.5)

    def code(self, paragraph: Any, text: str) -> None:
        from docx.shared import Pt

        for i, line in enumerate(text.rstrip().split("\n")):
            run = paragraph.add_run(line)
            self.set_font(run._element.get_or_add_rPr(), "Consolas")
            run.font.size = Pt(7.5)
            if i < text.rstrip().count("\n"):
                run.add_break()

    def shade(self, cell: Any, fill: str) -> None:
        self.element(cell._element.get_or_add_tcPr(), "w:shd", {"w:val": "clear", "w:color": "auto", "w:fill": fill})

    @staticmethod
    def element(parent: Any, name: str, named: dict[str, str]) -> Any:
        from docx.oxml import OxmlElement
        from docx.oxml.ns import qn

        element = OxmlElement(name)
        for key, value in named.items():
            element.set(qn(key), value)
        parent.append(element)
        return element

    def table(self, table: Table, into: Any) -> None:
        from docx.enum.text import WD_ALIGN_PARAGRAPH
        from docx.shared import Pt

        header = [table.header] if any(table.header) else []
        made = into.add_table(len(header) + len(table.rows), len(table.right))
        borders = self.element(made._tbl.tblPr, "w:tblBorders", {})
        # Word wants the elements in their order
        made._tbl.tblPr.insert_element_before(borders, "w:shd", "w:tblLayout", "w:tblCellMar", "w:tblLook")
        for side in ("top", "bottom", "insideH"):
            self.element(borders, f"w:{side}", {"w:val": "single", "w:sz": "4", "w:color": "C9C9C9"})
        to_fill_in = is_to_fill_in(table)
        widths = self.widths(table)
        made.autofit = False
        for column, width in zip(made.columns, widths, strict=True):
            column.width = width
        lines = [*header, *table.rows]
        for i, (cells, row) in enumerate(zip(made.rows, lines, strict=True)):
            together = len(lines) <= MOST_ROWS_TOGETHER and i < len(lines) - 1
            if to_fill_in and row is not table.header:
                cells.height = Pt(34)
            for cell, line, right, width in zip(cells.cells, row, table.right, widths, strict=True):
                cell.width = width
                paragraph = cell.paragraphs[0]
                paragraph.paragraph_format.space_after = Pt(1)
                paragraph.paragraph_format.keep_with_next = together
                if right:
                    paragraph.alignment = WD_ALIGN_PARAGRAPH.RIGHT
                self.runs(paragraph, line, **({"bold": True} if header and row is table.header else {}))
                for run in paragraph.runs:
                    run.font.size = Pt(8.5)
        self.gap(into)

    def widths(self, table: Table) -> list[int]:
        """Widths of the columns: numbers stand in one line, longer words share what is left by their length."""
        page: Any = self.document.sections[0]
        room = page.page_width - page.left_margin - page.right_margin
        count = len(table.right)
        if is_to_fill_in(table):
            return [round(room / count)] * count
        body = [max((len(words_of(row[i])) for row in table.rows), default=0) for i in range(count)]
        head = [max(map(len, words_of(cell).split()), default=0) for cell in table.header]
        signs = [min(max(pair), LONGEST_COLUMN) for pair in zip(body, head, strict=True)]
        short = [SIGN * (each + BESIDE) if each <= LONGEST_NUMBER else 0.0 for each in signs]
        words = sum(each for each in signs if each > LONGEST_NUMBER)
        left = max(room - sum(short), LEAST_FOR_WORDS * room if words else 0.0)
        wanted = [width or left * each / words for width, each in zip(short, signs, strict=True)]
        return [round(room * each / sum(wanted)) for each in wanted]

    def caption(self, paragraph: Any, words: str) -> None:
        from docx.enum.text import WD_ALIGN_PARAGRAPH
        from docx.shared import Pt

        paragraph.alignment = WD_ALIGN_PARAGRAPH.CENTER
        paragraph.add_run(words).font.size = Pt(8.5)

    def figure(self, paragraph: Any, drawing: Drawing) -> None:
        """An image, and beside it the drawing itself for readers that take SVG."""
        from docx.enum.text import WD_ALIGN_PARAGRAPH
        from docx.opc.constants import RELATIONSHIP_TYPE
        from docx.opc.packuri import PackURI
        from docx.opc.part import Part
        from docx.oxml import parse_xml
        from docx.shared import Mm

        paragraph.alignment = WD_ALIGN_PARAGRAPH.CENTER
        picture = paragraph.add_run().add_picture(io.BytesIO(png(drawing)), width=Mm(drawing_width(drawing)))
        picture._inline.docPr.set("descr", drawing.words)
        package = self.document.part.package
        number = sum(1 for _ in self.document.inline_shapes)
        part = Part(PackURI(f"/word/media/drawing{number}.svg"), "image/svg+xml", drawing.svg.encode(), package)
        related = self.document.part.relate_to(part, RELATIONSHIP_TYPE.IMAGE)
        blip = picture._inline.graphic.graphicData.pic.blipFill.blip
        blip.append(
            parse_xml(
                '<a:extLst xmlns:a="http://schemas.openxmlformats.org/drawingml/2006/main">'
                f'<a:ext uri="{SVG_EXTENSION}"><asvg:svgBlip '
                'xmlns:asvg="http://schemas.microsoft.com/office/drawing/2016/SVG/main" '
                'xmlns:r="http://schemas.openxmlformats.org/officeDocument/2006/relationships" '
                f'r:embed="{related}"/></a:ext></a:extLst>'
            )
        )
