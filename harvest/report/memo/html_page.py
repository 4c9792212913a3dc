"""A memo as HTML: one file with its drawings and styles inside, no script, nothing fetched."""

from __future__ import annotations

from collections.abc import Sequence
from html import escape
from typing import Any

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
    words_of,
)
from harvest.report.memo.svg import attributes
from harvest.report.memo.values import CodeText, Drawing, Known, Said, Value

TAGS = {"strong": "strong", "emphasis": "em", "code": "code", "sub": "sub", "sup": "sup"}
LONG_CELL = 32
PAGE_KNOWN = {
    "title": Known("Title of the memo."),
    "date": Known("Date of the memo."),
    "version": Known("Version of the program."),
    "case_hash": Known("Digest of what the result depends on; of several cases the first's."),
    "body": Known("The memo itself, as HTML."),
}


def html_of(piece: Any) -> Any:
    """What a template of HTML inserts, as safe HTML."""
    from markupsafe import Markup

    if isinstance(piece, Value | Said):
        return Markup(_inline(piece))
    if isinstance(piece, Drawing):
        return Markup(piece.svg)
    if isinstance(piece, CodeText):
        return Markup(f"<pre>{escape(piece.text)}</pre>")
    return {True: "yes", False: "no"}[piece] if isinstance(piece, bool) else piece


def html_body(blocks: Sequence[Block]) -> str:
    """Blocks as HTML."""
    return "\n".join(_block(block) for block in blocks)


def _block(block: Block) -> str:
    if isinstance(block, Heading):
        return f"<h{block.level}>{_line(block.content)}</h{block.level}>"
    if isinstance(block, Paragraph):
        return f"<p>{_line(block.content)}</p>"
    if isinstance(block, Bullets):
        tag = "ol" if block.ordered else "ul"
        return f"<{tag}>{''.join(f'<li>{_line(item)}</li>' for item in block.items)}</{tag}>"
    if isinstance(block, Table):
        return _table(block)
    if isinstance(block, Code):
        return f"<pre>{escape(block.text)}</pre>"
    if isinstance(block, Figure):
        return f"<figure>{block.drawing.svg}<figcaption>{escape(block.drawing.words)}.</figcaption></figure>"
    return f'<div class="{escape(block.name)}">\n{html_body(block.blocks)}\n</div>'


def _table(table: Table) -> str:
    def row(tag: str, cells: Sequence[Line]) -> str:
        inside = "".join(
            f"<{tag}{_class(cell) if right else ''}>{_line(cell)}</{tag}>"
            for right, cell in zip(table.right, cells, strict=True)
        )
        return f"<tr>{inside}</tr>"

    head = f"<thead>{row('th', table.header)}</thead>" if any(table.header) else ""
    body = "\n".join(row("td", cells) for cells in table.rows)
    return f'<div class="wide"><table>{head}<tbody>\n{body}\n</tbody></table></div>'


def _class(cell: Line) -> str:
    """Class of a cell set to the right: what is longer than numbers are may break."""
    return ' class="right long"' if len(words_of(cell)) > LONG_CELL else ' class="right"'


def _line(line: Line) -> str:
    return "".join(_inline(each) for each in line)


def _inline(each: Inline) -> str:
    if isinstance(each, Value | Said):
        named = attributes(each.attributes())
        return f"<span{named}>{escape(each.text)}</span>" if named else escape(each.text)
    if isinstance(each, Span):
        tag = TAGS[each.style]
        return f"<{tag}>{_line(each.inside)}</{tag}>"
    return escape(each)
