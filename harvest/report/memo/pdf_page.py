"""A memo as PDF pages, by typst: every text is a string of it, so that nothing in a text is ever read as its markup."""

from __future__ import annotations

import datetime
from collections.abc import Iterator, Sequence
from types import ModuleType
from typing import Any

from harvest.errors import MissingExtraError
from harvest.report.memo.markdown_text import drawings_in
from harvest.report.memo.markup import (
    Block,
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
from harvest.report.memo.values import Drawing

PAPER = """\
#set page(paper: "a4", margin: (x: 20mm, top: 20mm, bottom: 22mm), footer: context [
  #set text(8pt, fill: luma(90))
  #title_of_memo #h(1fr) #counter(page).display("1 / 1", both: true)
])
#set text(font: "Libertinus Serif", size: 10pt, lang: "en")
#set par(leading: 0.62em, spacing: 0.85em)
#set list(indent: 0.4em, spacing: 0.6em)
#set enum(indent: 0.4em, spacing: 0.6em)
#set table(stroke: none, inset: (x: 3pt, y: 3.2pt))
#show heading: set text(weight: "semibold")
#show heading.where(level: 1): set text(17pt)
#show heading.where(level: 2): it => block(
  above: 2em, below: 0.8em, sticky: true, width: 100%, stroke: (top: 0.8pt), inset: (top: 6pt), text(12.5pt, it.body))
#show heading.where(level: 3): it => block(above: 1.3em, below: 0.6em, sticky: true, text(10.5pt, it.body))
#show raw: set text(font: "DejaVu Sans Mono", size: 0.8em)
#show table: set text(9pt)
#show table: set par(leading: 0.5em, justify: false)
"""
BOXES = {
    "answer": "stroke: 1pt, inset: 10pt, width: 100%, breakable: false",
    "failed": 'fill: rgb("#fdf1ea"), stroke: (left: 3pt + rgb("#D55E00")), inset: 8pt, width: 100%',
    "warning": 'fill: rgb("#fdf6e6"), stroke: (left: 3pt + rgb("#E69F00")), inset: 8pt, width: 100%',
    "keep": "breakable: false, width: 100%",
}
STYLES = {"strong": "strong", "emphasis": "emph", "sub": "sub", "sup": "super"}
IN_BOXES = {"answer": "#show heading: it => text(17pt, it.body)\n"}
WIDEST_DRAWING, HIGHEST_DRAWING = 140.0, 100.0
"""Sizes of drawings on the page [mm]."""
LONG_CELL = 42
MOST_ROWS_TOGETHER = 12


def typst_library() -> ModuleType:
    """Return typst; raises MissingExtraError without it."""
    try:
        import typst
    except ImportError:
        raise MissingExtraError(
            'a memo as PDF needs typst, which is not installed; install it with pip install "harvest[pdf]"'
        ) from None
    return typst


def pdf(blocks: Sequence[Block], title: str, date: str) -> bytes:
    """Blocks as PDF, the same bytes for the same blocks; raises MissingExtraError without typst."""
    text = "\n\n".join(
        [
            f"#set document(title: {_string(title)}, date: none)",
            f"#let title_of_memo = [{_text(title)}]",
            PAPER,
            *_blocks(blocks),
        ]
    )
    moment = datetime.datetime.fromisoformat(date).replace(tzinfo=datetime.UTC)
    return _compiled(text, list(drawings_in(blocks)), format="pdf", timestamp=int(moment.timestamp()))


def drawing_width(drawing: Drawing) -> float:
    """Width of a drawing on a page [mm]."""
    return round(min(WIDEST_DRAWING, HIGHEST_DRAWING / drawing.slenderness), 1)


def png(drawing: Drawing) -> bytes:
    """A drawing as an image, for a format that takes no SVG."""
    text = (
        f'#set page(width: {WIDEST_DRAWING}mm, height: auto, margin: 0pt)\n#image("/{drawing.name}.svg", width: 100%)'
    )
    return _compiled(text, [drawing], format="png", ppi=220.0)


def _compiled(text: str, drawings: Sequence[Drawing], **wanted: Any) -> bytes:
    files = {"main": text.encode(), **{f"{drawing.name}.svg": drawing.svg.encode() for drawing in drawings}}
    pages = typst_library().compile(files, ignore_system_fonts=True, **wanted)
    return bytes(pages if isinstance(pages, bytes) else pages[0])


def _blocks(blocks: Sequence[Block], *, ruled: bool = True) -> Iterator[str]:
    for block in blocks:
        if isinstance(block, Heading):
            yield f"#heading(level: {block.level})[{_line(block.content)}]"
        elif isinstance(block, Paragraph):
            yield f"#par[{_line(block.content)}]"
        elif isinstance(block, Bullets):
            items = ", ".join(f"[{_line(item)}]" for item in block.items)
            yield f"#{'enum' if block.ordered else 'list'}({items})"
        elif isinstance(block, Table):
            yield _table(block, ruled=ruled)
        elif isinstance(block, Code):
            yield f"#block(stroke: 0.5pt + luma(200), inset: 7pt, width: 100%, raw({_string(block.text)}, block: true))"
        elif isinstance(block, Figure):
            width = drawing_width(block.drawing)
            image = f'image("/{block.drawing.name}.svg", width: {width}mm, alt: {_string(block.drawing.words)})'
            caption = f"text(8.5pt, fill: luma(90), [{_text(block.drawing.words + '.')}])"
            yield f"#align(center, block(above: 1.2em, below: 1.2em, breakable: false, {image} + {caption}))"
        else:
            inside = "\n\n".join(_blocks(block.blocks, ruled=block.name != "facts"))
            yield f"#block({BOXES.get(block.name, 'width: 100%')})[\n{IN_BOXES.get(block.name, '')}{inside}\n]"


def _table(table: Table, *, ruled: bool) -> str:
    """A table whose longest column of words takes the room that the others leave."""
    rows = [table.header, *table.rows]
    longest = [max(len(words_of(row[i])) for row in rows) for i in range(len(table.right))]
    words = [size if not right else 0 for size, right in zip(longest, table.right, strict=True)]
    to_fill_in = is_to_fill_in(table)
    widest = max(words)
    columns = [
        "1fr" if ruled and (words[i] == widest or size > LONG_CELL or (to_fill_in and i > 0)) else "auto"
        for i, size in enumerate(longest)
    ]
    align = ", ".join("right" if right else "left" for right in table.right)
    head = ", ".join(f"[*{_line(cell)}*]" if cell else "[]" for cell in table.header)
    first = f"table.header({head}, table.hline(stroke: 0.7pt))" if any(table.header) else "table.hline(stroke: 0.4pt)"
    rule = "table.hline(stroke: 0.3pt + luma(200))"
    room = "#v(26pt)" if to_fill_in else ""
    lines = [
        ", ".join(f"[{_line(cell, in_table=True)}{room}]" for cell in row) + (f", {rule}" if ruled else "")
        for row in table.rows
    ]
    inside = ",\n".join([*([first] if ruled or any(table.header) else []), *lines])
    made = f"table(columns: ({', '.join(columns)},), align: ({align},),\n{inside}\n)"
    return f"#block(breakable: {'false' if len(table.rows) <= MOST_ROWS_TOGETHER else 'true'}, {made})"


def _line(line: Line, *, in_table: bool = False) -> str:
    return "".join(_inline(each, in_table) for each in line)


def _inline(each: Inline, in_table: bool) -> str:
    if not isinstance(each, Span):
        return _text(str(each))
    if each.style == "code":
        text = words_of(each.inside)
        # a long name may break behind its points and bars where room is short
        breaking = text.replace(".", ".\u200b").replace("_", "_\u200b") if in_table else text
        return f"#raw({_string(breaking)})"
    return f"#{STYLES[each.style]}[{_line(each.inside, in_table=in_table)}]"


def _text(words: str) -> str:
    return f"#{_string(words)};" if words else ""


def _string(words: str) -> str:
    """A text as a string of typst."""
    inside = words.replace("\\", "\\\\").replace('"', '\\"').replace("\n", "\\n").replace("\r", "\\r")
    return f'"{inside}"'
