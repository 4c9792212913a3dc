"""How text is laid out at a terminal: headings, wrapped paragraphs, pairs and tables."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Sequence

WIDTH = 100


def heading(text: str) -> str:
    """Heading of a section, with an empty line before it."""
    return f"\n{text}\n{'-' * len(text)}"


def pairs(items: Iterable[tuple[str, str]], indent: int = 2) -> list[str]:
    """Names and values in two columns."""
    kept = list(items)
    width = max(len(name) for name, _ in kept)
    return [wrapped(f"{' ' * indent}{name:{width}}  ", value) for name, value in kept]


def wrapped(first: str, text: str, rest: str | None = None) -> str:
    """Paragraph that begins with `first` and goes on indented by as much, or by `rest`."""
    return textwrap.fill(
        text,
        WIDTH,
        initial_indent=first,
        subsequent_indent=" " * len(first) if rest is None else rest,
        break_long_words=False,
        break_on_hyphens=False,
    )


def table(header: Sequence[str], rows: Sequence[Sequence[str]], indent: int = 2) -> list[str]:
    """Right-aligned columns under their headers."""
    widths = [max(len(line[i]) for line in (header, *rows)) for i in range(len(header))]
    return [
        " " * indent + "  ".join(f"{cell:>{width}}" for cell, width in zip(line, widths, strict=True)).rstrip()
        for line in (header, *rows)
    ]
