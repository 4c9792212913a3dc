"""The markup of memo templates: a small part of Markdown, read into blocks that every format writes in its own way.

What a template inserts stands in the text as one mark, so that no inserted text is ever read as markup.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from harvest.errors import InputError
from harvest.report.memo.values import CodeText, Drawing, Said, Value

MOST_DEPTH = 10
OPEN, CLOSE = "\ue000", "\ue001"
MARK = re.compile(f"{OPEN}([0-9]+){CLOSE}")
_INLINE = re.compile(
    rf"{OPEN}(?P<mark>[0-9]+){CLOSE}"
    r"|\\(?P<literal>[\\`*~^|#\[\]:-])"
    r"|`(?P<code>[^`]+)`"
    r"|\*\*(?P<strong>.+?)\*\*"
    r"|\*(?P<emphasis>[^*\s](?:[^*]*[^*\s])?)\*"
    r"|~(?P<sub>[^~\s]+)~"
    r"|\^(?P<sup>[^^\s]+)\^"
)
_CELL = re.compile(r"(?<!\\)\|")
_RULE = re.compile(r":?-{2,}:?")


@dataclass(frozen=True)
class Span:
    """Words in one style: plain, code, strong, emphasis, sub or sup; `inside` what the style holds."""

    style: str
    inside: tuple[Inline, ...]


Inline = str | Value | Said | Span
Line = tuple[Inline, ...]


@dataclass(frozen=True)
class Heading:
    """A heading; the title has level 1."""

    level: int
    content: Line


@dataclass(frozen=True)
class Paragraph:
    """Words."""

    content: Line


@dataclass(frozen=True)
class Bullets:
    """A list."""

    items: tuple[Line, ...]
    ordered: bool


@dataclass(frozen=True)
class Table:
    """A table; `right` tells which columns are set to the right, as numbers are."""

    header: tuple[Line, ...]
    right: tuple[bool, ...]
    rows: tuple[tuple[Line, ...], ...]


@dataclass(frozen=True)
class Code:
    """Lines shown as they are."""

    text: str


@dataclass(frozen=True)
class Figure:
    """A drawing."""

    drawing: Drawing


@dataclass(frozen=True)
class Box:
    """Blocks set apart: answer, failed, warning, method, sign-off or any other name."""

    name: str
    blocks: tuple[Block, ...]


Block = Heading | Paragraph | Bullets | Table | Code | Figure | Box


class Inserted:
    """What a template has inserted, each standing for a mark in its text."""

    def __init__(self) -> None:
        self.pieces: list[Any] = []

    def mark(self, piece: Any) -> str:
        """Mark that stands for a piece."""
        self.pieces.append(piece)
        return f"{OPEN}{len(self.pieces) - 1}{CLOSE}"

    def piece(self, number: str) -> Any:
        """Piece that a mark stands for."""
        return self.pieces[int(number)]


def read_markup(text: str, inserted: Inserted) -> tuple[Block, ...]:
    """Blocks of a rendered template."""
    lines = text.splitlines()
    blocks, _ = _Reader(lines, inserted).blocks(0, 0)
    return tuple(blocks)


class _Reader:
    def __init__(self, lines: Sequence[str], inserted: Inserted) -> None:
        self.lines = lines
        self.inserted = inserted

    def blocks(self, at: int, depth: int) -> tuple[list[Block], int]:
        """Blocks from a line on, to the end of the text or of the box that they stand in, so many around it."""
        if depth > MOST_DEPTH:
            raise InputError(f"template: more than {MOST_DEPTH} blocks between ::: stand in each other; close each")
        found: list[Block] = []
        while at < len(self.lines):
            line = self.lines[at].strip()
            if depth and line == ":::":
                return found, at + 1
            if not line:
                at += 1
            elif line.startswith(":::") and line[3:].strip():
                name = line[3:].strip()
                inside, at = self.blocks(at + 1, depth + 1)
                found.append(Box(name, tuple(inside)))
            elif line.startswith("```"):
                end = next((i for i in range(at + 1, len(self.lines)) if self.lines[i].startswith("```")), None)
                end = len(self.lines) if end is None else end
                found.append(Code(self.plain("\n".join(self.lines[at + 1 : end]))))
                at = min(end + 1, len(self.lines))
            elif heading := re.fullmatch(r"(#{1,4})\s+(.+)", line):
                found.append(Heading(len(heading[1]), self.inline(heading[2])))
                at += 1
            elif self.is_table(at):
                table, at = self.table(at)
                found.append(table)
            elif re.match(r"(?:[-*]|[0-9]+\.)\s", line):
                bullets, at = self.bullets(at)
                found.append(bullets)
            else:
                block, at = self.paragraph(at)
                found.append(block)
        return found, at

    def is_table(self, at: int) -> bool:
        if not self.lines[at].lstrip().startswith("|") or at + 1 >= len(self.lines):
            return False
        cells = _cells(self.lines[at + 1])
        return bool(cells) and all(_RULE.fullmatch(cell) for cell in cells)

    def table(self, at: int) -> tuple[Table, int]:
        header = self.row(at)
        right = tuple(cell.endswith(":") for cell in _cells(self.lines[at + 1]))
        end = at + 2
        while end < len(self.lines) and self.lines[end].lstrip().startswith("|"):
            end += 1
        width = len(header)
        rows = tuple((self.row(i) + ((),) * width)[:width] for i in range(at + 2, end))
        return Table(header, (right + (False,) * width)[:width], rows), end

    def row(self, at: int) -> tuple[Line, ...]:
        return tuple(self.inline(cell) for cell in _cells(self.lines[at]))

    def bullets(self, at: int) -> tuple[Bullets, int]:
        ordered = self.lines[at].lstrip()[0].isdigit()
        items: list[str] = []
        while at < len(self.lines) and self.lines[at].strip():
            line = self.lines[at]
            begun = re.match(r"\s*(?:[-*]|[0-9]+\.)\s+(.*)", line)
            if begun:
                items.append(begun[1])
            elif line.startswith(" ") and items:
                items[-1] += " " + line.strip()
            else:
                break
            at += 1
        return Bullets(tuple(self.inline(item) for item in items), ordered), at

    def paragraph(self, at: int) -> tuple[Block, int]:
        end = at + 1
        while end < len(self.lines) and self.lines[end].strip() and not self.begins(end):
            end += 1
        text = " ".join(line.strip() for line in self.lines[at:end])
        alone = MARK.fullmatch(text)
        piece = self.inserted.piece(alone[1]) if alone else None
        if isinstance(piece, Drawing):
            return Figure(piece), end
        if isinstance(piece, CodeText):
            return Code(piece.text), end
        return Paragraph(self.inline(text)), end

    def begins(self, at: int) -> bool:
        line = self.lines[at].strip()
        return bool(re.match(r":::|```|#{1,4}\s|[-*]\s", line)) or self.is_table(at)

    def inline(self, text: str) -> Line:
        return tuple(self._inline(text.strip()))

    def _inline(self, text: str) -> Iterator[Inline]:
        end = 0
        for found in _INLINE.finditer(text):
            if found.start() > end:
                yield text[end : found.start()]
            end = found.end()
            style = str(found.lastgroup)
            content = found[style]
            if style == "mark":
                piece = self.inserted.piece(content)
                yield piece if isinstance(piece, Value | Said) else _words(piece)
            elif style == "literal":
                yield content
            elif style == "code":
                yield Span("code", (self.plain(content),))
            else:
                yield Span(style, tuple(self._inline(content)))
        if end < len(text):
            yield text[end:]

    def plain(self, text: str) -> str:
        """Text with what was inserted in its place."""
        return MARK.sub(lambda found: _words(self.inserted.piece(found[1])), text)


def _words(piece: Any) -> str:
    if isinstance(piece, Drawing):
        return piece.words
    return piece.text if isinstance(piece, CodeText) else str(piece)


def _cells(line: str) -> list[str]:
    return [cell.strip() for cell in _CELL.split(line.strip().removeprefix("|").removesuffix("|"))]


def words_of(line: Line) -> str:
    """Words of a line without styles."""
    return "".join(words_of(each.inside) if isinstance(each, Span) else str(each) for each in line)


def is_to_fill_in(table: Table) -> bool:
    """Whether a table has nothing beside its first column, so that somebody writes into it by hand."""
    return len(table.right) > 1 and bool(table.rows) and not any(any(row[1:]) for row in table.rows)
