"""Numbers as a memo prints them: each knows its SI value, its unit, its rounding and the result that it shows."""

from __future__ import annotations

import dataclasses
import math
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from harvest.model.results import SCALARS
from harvest.quantities import format_quantity, significant, unit_of

NO_VALUE = "–"
NO_BREAK = "\N{NO-BREAK SPACE}"
MINUS = "\N{MINUS SIGN}"
SMALLEST_PERCENT = 0.1
"""Percentages below it have two decimals, however many digits are wanted."""
_RAISED = str.maketrans("0123456789" + MINUS, "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")
_SIGNS = (
    ("degC", "°C"),
    ("kohm", "kΩ"),
    ("mohm", "mΩ"),
    ("uohm", "µΩ"),
    ("ohm", "Ω"),
    ("^2", "²"),
    ("^3", "³"),
    ("uV", "µV"),
    ("um", "µm"),
    ("uPa", "µPa"),
    ("s^-1", "s⁻¹"),
)


def typographic(unit: str) -> str:
    """Write a unit with the signs of print: °C, Ω, m²."""
    for written, printed in _SIGNS:
        unit = unit.replace(written, printed)
    return unit.replace(" ", NO_BREAK)


@dataclass(frozen=True)
class Value:
    """A number of the results.

    `raw` is SI; `path` names the result, or what is made of two or three: a / b, a - b, (a - b) / c; `style` is
    quantity, percent, whole or si; `digits` are significant ones, of a temperature three more than its decimals.
    """

    raw: float
    kind: str
    path: str
    digits: int = 3
    style: str = "quantity"

    @property
    def known(self) -> bool:
        """Whether there is a number."""
        return math.isfinite(self.raw)

    @property
    def si_unit(self) -> str:
        """Unit of `raw`, "1" for a plain number."""
        return unit_of(self.kind)

    def _parts(self) -> tuple[str, str]:
        """Number and unit as the package writes them."""
        if not self.known:
            return NO_VALUE, ""
        if self.style == "whole":
            return f"{self.raw:,.0f}", ""
        if self.style == "percent":
            percent = 100.0 * self.raw
            small = abs(percent) < SMALLEST_PERCENT
            return f"{percent + 0.0:.2f}" if small else significant(percent, self.digits), "%"
        if self.style == "si" or self.kind == "dimensionless":
            unit = self.si_unit
            number = significant(self.raw, self.digits)
            idle = "." in number and "e" not in number
            return number.rstrip("0").rstrip(".") if idle else number, "" if unit == "1" else unit
        number, _, unit = format_quantity(self.raw, self.kind, self.digits).partition(" ")
        return re.sub(r"^-(0(?:\.0*)?)$", r"\1", number), unit

    @property
    def number(self) -> str:
        """The number alone, rounded as stated."""
        mantissa, _, exponent = self._parts()[0].replace("-", MINUS).partition("e")
        return f"{mantissa}×10{exponent.translate(_RAISED)}" if exponent else mantissa

    @property
    def unit(self) -> str:
        """Unit of `number`, with the signs of print."""
        return typographic(self._parts()[1])

    @property
    def text(self) -> str:
        """Number and unit."""
        return f"{self.number}{NO_BREAK}{self.unit}" if self.unit else self.number

    def attributes(self) -> dict[str, str]:
        """Attributes of the number in HTML: which result it shows, in which unit, rounded how."""
        if not self.known:
            return {}
        number, unit = self._parts()
        small = self.style == "percent" and abs(self.raw) < SMALLEST_PERCENT / 100.0
        if self.style == "whole":
            rounding = {"data-decimals": "0"}
        elif small or (self.kind == "temperature" and self.style == "quantity"):
            rounding = {"data-decimals": str(len(number.partition(".")[2]))}
        else:
            rounding = {"data-digits": str(self.digits)}
        return {"data-value": self.path, "data-unit": unit or "1", **rounding}

    def __str__(self) -> str:
        return self.text

    def over(self, other: Value) -> Value:
        """Ratio to another value, as a share."""
        share = self.raw / other.raw if other.raw else math.nan
        path = f"({self.path})" if " " in self.path else self.path
        return Value(share, "dimensionless", f"{path} / {other.path}", 3, "percent")

    def each(self, count: Value) -> Value:
        """Part of one of so many."""
        return Value(self.raw / count.raw if count.raw else math.nan, self.kind, f"{self.path} / {count.path}")

    def less(self, other: Value) -> Value:
        """Difference to another value of the same kind."""
        kind = "temperature difference" if self.kind == "temperature" else self.kind
        return Value(self.raw - other.raw, kind, f"{self.path} - {other.path}", self.digits, self.style)


@dataclass(frozen=True)
class Said:
    """A sentence that a result holds, with its path."""

    text: str
    path: str

    def attributes(self) -> dict[str, str]:
        """Attribute of the sentence in HTML."""
        return {"data-value": self.path}

    def __str__(self) -> str:
        return self.text


@dataclass(frozen=True)
class CodeText:
    """A text that is shown as it is, line by line."""

    text: str


@dataclass(frozen=True)
class Drawing:
    """A drawing as SVG, with the words that stand for it and its height over its width."""

    name: str
    svg: str
    words: str
    slenderness: float


class Group:
    """Values by name, as attributes."""

    def __init__(self, values: Mapping[str, Any]) -> None:
        self._values = dict(values)

    def __getattr__(self, name: str) -> Any:
        try:
            return self.__dict__["_values"][name]
        except KeyError:
            raise AttributeError(name) from None

    def __iter__(self) -> Iterator[Any]:
        return iter(self._values.values())


@dataclass(frozen=True)
class Known:
    """What templates can name: its meaning, its SI unit if it is a number, and what is inside."""

    meaning: str
    unit: str = ""
    inside: Mapping[str, Known] | None = None
    many: bool = False
    optional: bool = False


NUMBER = {
    "text": Known("number and unit as printed"),
    "number": Known("the number as printed"),
    "unit": Known("the unit as printed"),
    "raw": Known("SI value"),
    "si_unit": Known("unit of `raw`"),
    "path": Known("the result that it shows"),
    "known": Known("whether there is a number"),
    "digits": Known("significant digits"),
}


def told(meaning: str, *, unit: str = "", of: Any = None, many: bool = False, optional: bool = False) -> Any:
    """Declare a value of a memo: its meaning; `unit` for a number; `of` a class or mapping of what is inside."""
    if unit:
        inside: Any = NUMBER
    elif isinstance(of, type):
        inside = known_in(of)
    else:
        inside = of
    return dataclasses.field(metadata={"known": Known(meaning, unit, inside, many, optional)})


def known_in(of: type) -> dict[str, Known]:
    """What the declarations of a class let templates name."""
    return {item.name: item.metadata["known"] for item in dataclasses.fields(of) if "known" in item.metadata}


def known_numbers(declared: Mapping[str, Any]) -> dict[str, Known]:
    """What results declared with kind and meaning let templates name."""
    return {name: Known(each["meaning"], unit_of(each["kind"]), NUMBER) for name, each in declared.items()}


def style_of(name: str, kind: str) -> str:
    """How a plain number is printed: counts whole, efficiencies and losses in percent."""
    if kind != "dimensionless":
        return "quantity"
    if name.endswith("_count"):
        return "whole"
    return "percent" if name.endswith(("_efficiency", "_loss")) else "quantity"


def usual_digits(kind: str) -> int:
    """Digits of a result: three, of a temperature one decimal."""
    return 4 if kind == "temperature" else 3


def scalars_of(answer: Any, path: str) -> Group:
    """Every scalar result of an estimate as a value."""
    return Group(
        {
            name: Value(
                getattr(answer, name),
                each["kind"],
                f"{path}.{name}",
                usual_digits(each["kind"]),
                style_of(name, each["kind"]),
            )
            for name, each in SCALARS.items()
        }
    )
