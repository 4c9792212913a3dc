"""How far a field's value may be off: what `[uncertainty]` says of one field."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from harvest.errors import QuantityError
from harvest.quantities import (
    STANDARD_VOLUME_FLOW,
    format_quantity,
    parse_quantity,
    shown,
)

NORMAL, UNIFORM, FACTOR, NONE = "normal", "uniform", "factor", "none"
DIFFERENCES = {
    "temperature": "temperature difference",
    "pressure": "pressure difference",
    STANDARD_VOLUME_FLOW: "volume flow",
}
"""Kinds whose differences are of another kind."""
LARGEST_FACTOR = 100.0


@dataclass(frozen=True)
class Tolerance:
    """How a value may be off.

    `distribution` "normal": 95 of 100 values lie from value + `low` to value + `high`, which are equally far;
    "uniform": all do, none more likely than another; "factor": 95 of 100 lie from value x `low` to value x `high`, and
    the logarithm is normal; "none": the value is exact. `low` and `high` [SI difference] are shares of the value where
    `relative`.
    """

    distribution: str
    low: float = 0.0
    high: float = 0.0
    relative: bool = False

    def ends(self, value: float) -> tuple[float, float]:
        """Lowest and highest value [SI] around a `value` [SI]: all of a uniform one, 95 of 100 of the others."""
        if self.distribution == FACTOR:
            return value * self.low, value * self.high
        scale = abs(value) if self.relative else 1.0
        return value + self.low * scale, value + self.high * scale

    def text(self, kind: str) -> str:
        """Say it for a field of a kind of quantity."""
        if self.distribution == NONE:
            return "exact"
        if self.distribution == FACTOR:
            return f"within a factor {self.high:g}"
        unit_kind = difference_kind(kind)

        def written(number: float) -> str:
            if self.relative:
                return f"{100.0 * number:g} %"
            text, _, unit = format_quantity(number, unit_kind, 6).partition(" ")
            return f"{float(text):g} {unit}".rstrip()

        if self.distribution == NORMAL:
            return f"+- {written(self.high)}"
        return f"{written(self.low)} to {written(self.high)}, even"


EXACT = Tolerance(NONE)


def difference_kind(kind: str) -> str:
    """Kind of quantity that the difference of two values of a kind is."""
    return DIFFERENCES.get(kind, kind)


def normal(relative: float) -> Tolerance:
    """Tolerance of a share of the value that 95 of 100 keep within."""
    return Tolerance(NORMAL, -relative, relative, relative=True)


def within_factor(factor: float) -> Tolerance:
    """Tolerance of a factor up or down that 95 of 100 keep within."""
    return Tolerance(FACTOR, 1.0 / factor, factor, relative=True)


def parse_tolerance(raw: Any, kind: str) -> Tolerance:
    """Tolerance of a field of a kind as it stands in a case file; raises QuantityError."""
    if raw == NONE:
        return EXACT
    if not isinstance(raw, Mapping):
        return _normal(raw, kind)
    if len(raw) != 1 or (name := next(iter(raw))) not in (NORMAL, UNIFORM, FACTOR):
        raise QuantityError(f"is no tolerance; write for example {example(kind)}")
    given = raw[name]
    if name == NORMAL:
        return _normal(given, kind)
    if name == UNIFORM:
        return _uniform(given, kind)
    if kind == "temperature":
        raise QuantityError('a temperature is not off by a factor; give a difference such as "2 K"')
    factor = parse_quantity(given, "dimensionless")
    if not 1.0 < factor <= LARGEST_FACTOR:
        raise QuantityError(f"factor: {shown(given)} is not possible; give above 1 and at most {LARGEST_FACTOR:g}")
    return within_factor(factor)


def example(kind: str) -> str:
    """Spellings of a tolerance for a field of a kind."""
    share = '"2 K"' if kind == "temperature" else '"5 %"'
    ends = '["-3 K", "3 K"]' if kind == "temperature" else '["-10 %", "5 %"]'
    factor = "" if kind == "temperature" else ", { factor = 1.5 }"
    return f'{share}, {{ uniform = {ends} }}{factor} or "none"'


def _normal(raw: Any, kind: str) -> Tolerance:
    size, relative = _difference(raw, kind)
    if size <= 0 or (relative and size > 1.0):
        most = " and at most 100 %, or { factor = 2 }" if relative else ', or "none"'
        raise QuantityError(f"{shown(raw)} is not possible; give a tolerance above zero{most}")
    return Tolerance(NORMAL, -size, size, relative)


def _uniform(raw: Any, kind: str) -> Tolerance:
    if not isinstance(raw, list | tuple) or len(raw) != 2:
        raise QuantityError(f"uniform: {shown(raw)} is not a pair of differences such as {example(kind)}")
    (low, low_share), (high, high_share) = (_difference(each, kind) for each in raw)
    if low_share != high_share:
        raise QuantityError("uniform: one end is in % and the other is not; write both alike")
    if low_share and low < -1.0:
        raise QuantityError(f"uniform: {shown(raw[0])} takes away more than all of it; give at least -100 %")
    if low >= high:
        raise QuantityError(f"uniform: {shown(raw[0])} is not below {shown(raw[1])}; give the lower end first")
    return Tolerance(UNIFORM, low, high, low_share)


def _difference(raw: Any, kind: str) -> tuple[float, bool]:
    """Difference in SI, or share of the value, and whether it is a share; % is always a share of the value."""
    if isinstance(raw, str) and raw.rstrip().endswith("%"):
        if kind == "temperature":
            raise QuantityError(f'{shown(raw)} of a temperature says nothing; give a difference such as "2 K"')
        return parse_quantity(raw, "dimensionless"), True
    return parse_quantity(raw, difference_kind(kind)), False
