"""What tests of memos share: the shipped cases, and numbers read back from HTML."""

from __future__ import annotations

import functools
import re
from dataclasses import dataclass
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

from harvest.model.reading import load_case
from harvest.quantities import ENERGY_PRICE, KINDS, unit_of
from harvest.report.memo.compose import Memo, memo

ROOT = Path(__file__).parent.parent
CASES = [*sorted((ROOT / "examples").glob("*.toml")), *sorted((ROOT / "harvest/data/starters").glob("*.toml"))]
DAY = "2026-01-31"
QUICK = ("size", "doubt")
"""Studies that are left out where a test does not look at them."""
VOID = ("meta", "br", "hr", "img", "rect", "line", "polyline", "polygon", "path", "circle")
LOWERED = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")


@functools.cache
def memo_of(path: Path, template: str = "memo", *, whole: bool = False) -> Memo:
    """Memo of a shipped case; unless `whole` without the studies that take long."""
    case, text = load_case(path), path.read_text("utf-8")
    without = () if whole else ("doubt",) if case.size is None else ("doubt", "size")
    return memo(case, template=template, date=DAY, command="harvest memo", sources=(text,), without=without)


@dataclass
class Shown:
    """An element that shows a result: its attributes and its text."""

    attributes: dict[str, str]
    text: str


class Page(HTMLParser):
    """Reads a memo: elements that show results, and the words that stand elsewhere by class and tag."""

    def __init__(self, html: str) -> None:
        super().__init__()
        self.open: list[tuple[str, dict[str, str]]] = []
        self.shown: list[Shown] = []
        self.words: list[tuple[tuple[str, ...], str]] = []
        self.tags: set[str] = set()
        self.feed(html)
        assert not self.open, "every element is closed"

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.add(tag)
        named = {name: value or "" for name, value in attrs}
        if tag not in VOID:
            self.open.append((tag, named))
        if "data-value" in named:
            self.shown.append(Shown(named, ""))

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.add(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop()[0] == tag

    def handle_data(self, data: str) -> None:
        if any("data-value" in named for _, named in self.open):
            self.shown[-1].text += data
        elif data.strip():
            where = tuple(each for tag, named in self.open for each in (tag, *named.get("class", "").split()))
            self.words.append((where, data))


def result_at(results: Any, path: str) -> Any:
    """Result by a path such as estimate.rows.current[3]."""
    for name, index in re.findall(r"(\w+)|\[(\d+)\]", path):
        results = results[int(index)] if index else results[name]
    return results


def number_at(results: Any, path: str) -> float:
    """Number by a path, or by two with an operation between."""
    for sign in (" / ", " - "):
        left, found, right = path.rpartition(sign)
        if found:
            a, b = (number_at(results, side.strip("()")) for side in (left, right))
            return a / b if sign == " / " else a - b
    return float(result_at(results, path))


def shown_number(results: Any, attributes: dict[str, str]) -> float:
    """What an element should show, in its unit, before it is rounded."""
    value = number_at(results, attributes["data-value"])
    unit = attributes["data-unit"]
    if unit in ("1", unit_of(ENERGY_PRICE)):
        return value
    if unit == "%":
        return 100.0 * value
    kinds = [kind for kind in KINDS.values() if unit in kind.units]
    assert kinds, unit
    return value / kinds[0].units[unit] - kinds[0].offsets.get(unit, 0.0)


def read_number(text: str) -> float:
    """Number that begins a printed value."""
    plain = text.split("\N{NO-BREAK SPACE}")[0].replace("\N{MINUS SIGN}", "-").replace(",", "").removesuffix("%")
    return float(plain.replace("×10", "e").translate(LOWERED))
