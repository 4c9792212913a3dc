"""A memo as Markdown text, with its drawings as files beside it."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence

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
)
from harvest.report.memo.values import Drawing

SPECIAL = re.compile(r"([\\`*_{}\[\]<>#|~^$!&])")
AT_START = re.compile(r"^([-+=]|[0-9]+[.)])(?=\s|$)")


def markdown(blocks: Sequence[Block], drawing_name: str) -> str:
    """Blocks as Markdown; `drawing_name` is the beginning of the names of the drawings' files."""
    return "\n\n".join(_blocks(blocks, drawing_name)) + "\n"


def drawings_in(blocks: Sequence[Block]) -> Iterator[Drawing]:
    """Drawings that stand in blocks, in order."""
    for block in blocks:
        if isinstance(block, Figure):
            yield block.drawing
        elif isinstance(block, Box):
            yield from drawings_in(block.blocks)


def drawing_file(drawing_name: str, drawing: Drawing) -> str:
    """Name of a drawing's file."""
    return f"{drawing_name}-{drawing.name}.svg"


def _blocks(blocks: Sequence[Block], name: str) -> Iterator[str]:
    for block in blocks:
        if isinstance(block, Heading):
            yield f"{'#' * block.level} {_line(block.content)}"
        elif isinstance(block, Paragraph):
            yield _start(_line(block.content))
        elif isinstance(block, Bullets):
            marks = [f"{i + 1}." if block.ordered else "-" for i in range(len(block.items))]
            yield "\n".join(f"{mark} {_start(_line(item))}" for mark, item in zip(marks, block.items, strict=True))
        elif isinstance(block, Table):
            yield _table(block)
        elif isinstance(block, Code):
            fence = "`" * max(3, 1 + max((len(run) for run in re.findall("`+", block.text)), default=0))
            yield f"{fence}\n{block.text.rstrip()}\n{fence}"
        elif isinstance(block, Figure):
            target = drawing_file(name, block.drawing).replace(" ", "%20").replace("(", "%28").replace(")", "%29")
            yield f"![{escaped(block.drawing.words)}]({target})"
        elif block.name in ("failed", "warning"):
            yield "\n".join(f"> {line}".rstrip() for line in "\n\n".join(_blocks(block.blocks, name)).splitlines())
        else:
            yield from _blocks(block.blocks, name)


def _table(table: Table) -> str:
    rules = ["---:" if right else "---" for right in table.right]
    lines = [[_line(cell) for cell in table.header], rules, *([_line(cell) for cell in row] for row in table.rows)]
    return "\n".join(f"| {' | '.join(cells)} |" for cells in lines)


def _start(text: str) -> str:
    """Keep a paragraph from being read as a list."""
    return AT_START.sub(lambda found: f"{found[1][:-1]}\\{found[1][-1]}", text)


def _line(line: Line) -> str:
    return "".join(_inline(each) for each in line)


def _inline(each: Inline) -> str:
    if not isinstance(each, Span):
        return escaped(str(each))
    inside = _line(each.inside)
    if each.style == "code":
        text = "".join(str(part) for part in each.inside)
        fence = "`" * (1 + max((len(run) for run in re.findall("`+", text)), default=0))
        edge = " " if text[:1] == "`" or text[-1:] == "`" else ""
        return f"{fence}{edge}{text}{edge}{fence}".replace("|", "\\|")
    return {
        "strong": f"**{inside}**",
        "emphasis": f"*{inside}*",
        "sub": f"<sub>{inside}</sub>",
        "sup": f"<sup>{inside}</sup>",
    }[each.style]


def escaped(text: str) -> str:
    """Text that Markdown shows as it is."""
    return SPECIAL.sub(r"\\\1", text)
