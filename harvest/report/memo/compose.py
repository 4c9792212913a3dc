"""The memo as a whole: template checked, case computed, text rendered, document written."""

from __future__ import annotations

import datetime
from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from harvest.errors import CaseError, InputError, NoAnswerError
from harvest.model.case import Case, case_hash
from harvest.model.estimate import estimate
from harvest.quantities import one_line
from harvest.report.files import case_source, write_whole
from harvest.report.memo.contents import Comparison, Contents, known_contents
from harvest.report.memo.filling import LETTERS, Computed, comparison, contents, doubt_of, sizing_of
from harvest.report.memo.html_page import PAGE_KNOWN, html_body, html_of
from harvest.report.memo.markdown_text import drawing_file, drawings_in, markdown
from harvest.report.memo.markup import Block, read_markup
from harvest.report.memo.templates import PAGE, SHIPPED, Rendering, Template, find_template
from harvest.study.size import Sizing
from harvest.version import VERSION

FORMATS = {
    ".html": "one self-contained file",
    ".md": "Markdown, its drawings as SVG files beside it",
    ".pdf": "pages, by typst",
    ".docx": "a Word document, by python-docx",
}
STUDIES = {"size": "the number of modules", "doubt": "how sure the net power is"}


@dataclass(frozen=True)
class Memo:
    """A memo that is ready to be written; `results` are what its numbers are taken from."""

    title: str
    date: str
    results: dict[str, Any]
    blocks: tuple[Block, ...]
    page: str

    def markdown(self, drawing_name: str = "memo") -> str:
        """The memo as Markdown, with links to drawings that begin with this name."""
        return markdown(self._blocks(), drawing_name)

    def _blocks(self) -> tuple[Block, ...]:
        if not self.blocks:
            raise InputError("memo: its template makes HTML only; use one that ends in .md.j2 for other formats")
        return self.blocks

    def html(self) -> str:
        """The memo as one HTML file."""
        return self.page

    def pdf(self) -> bytes:
        """The memo as PDF; raises MissingExtraError without typst."""
        from harvest.report.memo.pdf_page import pdf

        return pdf(self._blocks(), self.title, self.date)

    def word(self) -> bytes:
        """The memo as a Word document; raises MissingExtraError without python-docx or typst."""
        from harvest.report.memo.word_page import word

        return word(self._blocks(), self.title, self.date)

    def write(self, path: str | Path) -> None:
        """Write the memo in the format of the suffix, and a Markdown memo's drawings beside it; raises InputError."""
        path = Path(path)
        suffix = format_of(path)
        if suffix == ".html":
            write_whole(path, self.page)
        elif suffix == ".pdf":
            write_whole(path, self.pdf())
        elif suffix == ".docx":
            write_whole(path, self.word())
        else:
            for drawing in drawings_in(self.blocks):
                write_whole(path.parent / drawing_file(path.stem, drawing), drawing.svg)
            write_whole(path, self.markdown(path.stem))


def format_of(path: str | Path) -> str:
    """Format of a memo's file by its suffix, with what would keep it from being written.

    Raises InputError for another suffix or a folder that is not there, MissingExtraError where a library is missing.
    """
    folder, suffix = Path(path).parent, Path(path).suffix.lower()
    if suffix not in FORMATS:
        raise InputError(f"{path}: a memo ends in {', '.join(FORMATS)}")
    if not folder.is_dir():
        raise InputError(f"{path}: cannot be written (there is no folder {folder})")
    if suffix == ".pdf":
        from harvest.report.memo.pdf_page import typst_library

        typst_library()
    if suffix == ".docx":
        from harvest.report.memo.word_page import docx_library

        docx_library()
    return suffix


def memo(
    cases: Case | Sequence[Case],
    *,
    template: str | Path | None = None,
    date: str | None = None,
    command: str = "",
    sources: Sequence[str] = (),
    form: str = ".html",
    without: Collection[str] = (),
    progress: Callable[[str], None] | None = None,
) -> Memo:
    """Work out a case, or compare several, and make the memo.

    Parameters: `template` a shipped name, a file or a folder; `date` YYYY-MM-DD, today unless given; `command` and
    `sources`, the texts of the case files, for the reader who repeats it; `form` the suffix that will be written;
    `without` names what is left out of STUDIES, each of which takes longer than the rest.
    Raises InputError for a wrong template before anything is computed, NoAnswerError for a case without an answer.
    """
    several = [cases] if isinstance(cases, Case) else list(cases)
    if not 1 <= len(several) <= len(LETTERS):
        raise InputError(f"memo: {len(several)} cases; a memo takes one, and a comparison at most {len(LETTERS)}")
    found = find_template(template, len(several) > 1)
    if found.is_page and form != ".html":
        raise InputError(f"template: {found.name} makes HTML, which cannot be written as {form}; use a .md.j2 template")
    rendering = Rendering(found, known_contents(len(several) > 1), html_of=html_of)
    day = _day(date)
    page = None if found.is_page else _page_around(found)
    alone = len(several) == 1
    computed = [_computed(case, without if alone else STUDIES, progress or _unheard) for case in several]
    texts = list(sources) or [case_source(case) for case in several]
    said = one_line(command, 500)
    values, results = _values(computed, day, said, texts)
    text = rendering.text({name: getattr(values, name) for name in known_contents(len(several) > 1)})
    if page is None:
        return Memo(values.title, day, results, (), text)
    blocks = read_markup(text, rendering.inserted)
    if not blocks:
        raise InputError(f"template: {found.name} gives no text")
    from markupsafe import Markup

    of_page = {
        "title": values.title,
        "date": day,
        "version": VERSION,
        "case_hash": case_hash(several[0]),
        "body": Markup(html_body(blocks)),
    }
    return Memo(values.title, day, results, blocks, page.text(of_page))


def _page_around(found: Template) -> Rendering:
    """The HTML page around a memo: the template's own where its folder holds one."""
    folder = found.folder if (found.folder / f"page{PAGE}").is_file() else SHIPPED
    return Rendering(Template(folder, f"page{PAGE}"), PAGE_KNOWN, html_of=html_of)


def _day(date: str | None) -> str:
    if date is None:
        return datetime.date.today().isoformat()
    try:
        return datetime.date.fromisoformat(date).isoformat()
    except ValueError:
        raise InputError(f"date: {one_line(date)} is no date; write it as 2026-01-31") from None


def _unheard(_: str) -> None:
    """Tell nobody."""


def _computed(case: Case, without: Collection[str], progress: Callable[[str], None]) -> Computed:
    """What a memo needs of a case."""
    answer = estimate(case)
    if not answer.valid:
        if answer.bad_input:
            raise CaseError(answer.faults)
        raise NoAnswerError(f"{one_line(case.title)}: no valid answer: {answer.problem}")
    sizing: Sizing | str = ""
    found = None
    if "size" not in without:
        progress(STUDIES["size"])
        sizing = sizing_of(case)
    if "doubt" not in without:
        progress(STUDIES["doubt"])
        found = doubt_of(case)
    return Computed(case, answer, sizing, found)


def _values(
    computed: Sequence[Computed], date: str, command: str, texts: Sequence[str]
) -> tuple[Contents | Comparison, dict[str, Any]]:
    if len(computed) == 1:
        values = contents(computed[0], date=date, command=command, source=texts[0])
        return values, computed[0].document()
    each = [
        contents(one, date=date, command=command, source=text, prefix=f"cases[{i}].", letter=LETTERS[i])
        for i, (one, text) in enumerate(zip(computed, texts, strict=True))
    ]
    together = comparison(each, [one.case for one in computed], date=date, command=command)
    return together, {"cases": [one.document() for one in computed]}
