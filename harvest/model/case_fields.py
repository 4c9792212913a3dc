"""What a field of the case file is: the declaration from which reading, messages and explanations are made."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

REQUIRED: Any = object()
MOST_ROWS = 10_000
MOST_MODULES = 1_000_000
NOT_TO_ZERO = "none unless given, which flatters the result"


@dataclass(frozen=True)
class Curve:
    """A module parameter against mean temperature.

    kind "polynomial": `values` are coefficients in (T - 300 K), lowest power first, `temperatures` is empty;
    kind "table": `values` at `temperatures` [K], ascending.
    """

    kind: str
    values: tuple[float, ...]
    temperatures: tuple[float, ...] = ()


@dataclass(frozen=True)
class FlowCurve:
    """A quantity against volume flow: rising `flows` [m^3/s] and `values` [SI] of the points."""

    flows: tuple[float, ...]
    values: tuple[float, ...]


@dataclass(frozen=True)
class SweepAxis:
    """What a sweep gives one field: `values`, with `labels` where they are no single numbers; or all of a range.

    `between` holds the ends [SI] of a range from which a sample draws, and `values` is empty then.
    """

    values: tuple[Any, ...]
    labels: tuple[str, ...] = ()
    between: tuple[float, float] | None = None


FluidRows = tuple[tuple[float, float, float, float, float], ...]


@dataclass(frozen=True, kw_only=True)
class Declaration:
    """One field: its form, unit, meaning, default with its reason, limits, choices and when it applies.

    `form` is one of quantity, standard volume flow, energy price, pair, curve, text, file, choice, integer, integers,
    boolean, fluid table, axis, axes, log, tolerances, section, tables (a list of sections). `applies` names a field
    beside or above this one and its values for which it is asked. A `reason` marks a default that is an assumption
    worth telling.
    """

    form: str
    meaning: str
    kind: str = "dimensionless"
    symbol: str = ""
    default: Any = REQUIRED
    default_by: tuple[str, Mapping[str, float]] | None = None
    default_from: str = ""
    reason: str = ""
    minimum: float | None = None
    maximum: float | None = None
    above: float | None = None
    choices: Mapping[str, str] = dataclasses.field(default_factory=dict)
    applies: tuple[str, tuple[str, ...]] | None = None
    descriptive: bool = False
    section: type | None = None
    optional: bool = False


def quantity(kind: str, meaning: str, **more: Any) -> Any:
    """Declare a number with a unit."""
    return _declared(form="quantity", kind=kind, meaning=meaning, **more)


def choice(choices: Mapping[str, str], meaning: str, **more: Any) -> Any:
    """Declare a name out of a table of choices."""
    return _declared(form="choice", choices=choices, meaning=meaning, **more)


def integer(meaning: str, **more: Any) -> Any:
    """Declare a whole number."""
    return _declared(form="integer", meaning=meaning, **more)


def text(meaning: str, **more: Any) -> Any:
    """Declare a text that changes no result."""
    return _declared(form="text", meaning=meaning, **{"descriptive": True, "default": "", **more})


def other(form: str, meaning: str, **more: Any) -> Any:
    """Declare a field of a form that has few fields."""
    return _declared(form=form, meaning=meaning, **more)


def section(of: type, meaning: str, optional: bool = False) -> Any:
    """Declare a table of further fields."""
    return _declared(form="section", meaning=meaning, section=of, optional=optional)


def tables(of: type, meaning: str) -> Any:
    """Declare a list of tables, each with the same further fields; None where it is not given."""
    return _declared(form="tables", meaning=meaning, section=of, optional=True, default=None)


def walk(owner: type, prefix: str = "") -> Iterator[tuple[str, Declaration]]:
    """Every declaration under a section with its dotted path, sections before their fields."""
    for name, declaration in declared(owner):
        yield prefix + name, declaration
        if declaration.section is not None:
            yield from walk(declaration.section, f"{prefix}{name}.")


def declared(owner: type) -> list[tuple[str, Declaration]]:
    """Names and declarations of one section's own fields, in order."""
    return [
        (each.name, each.metadata["declaration"])
        for each in dataclasses.fields(owner)
        if "declaration" in each.metadata
    ]


def _declared(**items: Any) -> Any:
    return dataclasses.field(metadata={"declaration": Declaration(**items)})
