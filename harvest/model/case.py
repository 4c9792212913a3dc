"""The case: everything that describes one design, validated and frozen, in SI numbers.

Each field of the case file is declared once, here. Attribute names are the names in the file; a value that was not
given and has no default is None.
"""
# ruff: noqa: RUF009 - the declaring functions return dataclasses.field(...), which is no shared default

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, NamedTuple

from harvest.errors import InputError
from harvest.model.case_fields import (
    REQUIRED,
    Curve,
    Declaration,
    FlowCurve,
    other,
    section,
    text,
    walk,
)
from harvest.model.stack_sections import Electrical, Module, Stack
from harvest.model.stream_sections import Side, Site, StreamSide
from harvest.model.study_sections import Cost, Duty, Limits, Size, Sweep
from harvest.model.tolerances import Tolerance
from harvest.quantities import (
    KINDS,
    StandardVolumeFlow,
    allowed_units,
    example_of,
    format_quantity,
    one_line,
    unit_of,
)


@dataclass(frozen=True, kw_only=True)
class Streams:
    """The streams of a case. `given` is the document as typed, `assumed` the paths that were filled by a default."""

    title: str = text("What the case is about.")
    site: Site = section(Site, "Where the stack stands.")
    hot: StreamSide = section(StreamSide, "The hot side.")
    cold: StreamSide = section(StreamSide, "The cold side, in counterflow to the hot side.")
    limits: Limits = section(Limits, "What the design must keep to.")
    given: dict[str, Any] = field(default_factory=dict, compare=False, repr=False)
    assumed: tuple[str, ...] = field(default=(), compare=False, repr=False)
    folder: Path = field(default=Path(), compare=False, repr=False)


@dataclass(frozen=True, kw_only=True)
class Case(Streams):
    """One design: streams, and what is built between them."""

    hot: Side = section(Side, "The hot side.")
    cold: Side = section(Side, "The cold side, in counterflow to the hot side.")
    stack: Stack = section(Stack, "Arrangement of the modules.")
    module: Module = section(Module, "The module.")
    electrical: Electrical = section(Electrical, "Wiring, load and converter.")
    size: Size | None = section(Size, "What a sizing may change, and what it looks for.", optional=True)
    cost: Cost | None = section(Cost, "What a design costs to build, in one currency.", optional=True)
    duty: Duty = section(Duty, "How the streams change over time.")
    sweep: Sweep | None = section(Sweep, "What a sweep varies.", optional=True)
    uncertainty: dict[str, Tolerance] | None = other(
        "tolerances",
        'How far fields may be off, by their whole names in quotes: "hot.mass_flow" = "5 %", of which 95 of 100 values '
        'keep within; or { uniform = ["-3 K", "3 K"] }, { factor = 1.5 }, or "none" for a field without doubt.',
        default=None,
        descriptive=True,
    )


class FieldRecord(NamedTuple):
    """A declared field with its dotted path."""

    path: str
    declaration: Declaration


class Assumption(NamedTuple):
    """A field that was left at its default, the value as text, and why that value."""

    path: str
    value: str
    reason: str


DECLARATIONS: dict[str, Declaration] = dict(walk(Case))


def fields() -> Iterator[FieldRecord]:
    """Every field and section of the case file with its declaration, in the order of the file."""
    for path, declaration in DECLARATIONS.items():
        yield FieldRecord(path, declaration)


def value_at(case: Streams, path: str) -> Any:
    """Value of a field by its dotted path; None inside a section that is not given, a tuple in a list of tables."""
    value: Any = case
    for name in path.split("."):
        if isinstance(value, tuple):
            inside = tuple(getattr(each, name) for each in value)
            return None if all(each is None for each in inside) else inside
        value = getattr(value, name, None)
    return value


def typed_at(document: Any, path: str) -> Any:
    """What a document gives for a field; None where it gives nothing, a list of what tables of a list give."""
    for name in path.split("."):
        if isinstance(document, list):
            document = [each[name] for each in document if isinstance(each, Mapping) and name in each] or None
        else:
            document = document.get(name) if isinstance(document, Mapping) else None
    return document


def selector_path(path: str, selector: str) -> str:
    """Path of the field named `selector` that stands beside a field, or else above it."""
    owner = path.rpartition(".")[0]
    while owner and f"{owner}.{selector}" not in DECLARATIONS:
        owner = owner.rpartition(".")[0]
    return f"{owner}.{selector}"


def nearest_name(name: str, known: list[str]) -> str:
    """Tell the known name that is most like the given one, as the end of a message; all of them if none is like it."""
    import difflib

    close = difflib.get_close_matches(name, known, 1, 0.6)
    return f"did you mean {close[0]}?" if close else f"known are {', '.join(known)}"


def nearest_field(path: str) -> str:
    """Tell the field that is most like the given path or end of a path; or else the fields of its section."""
    section_path = path.rpartition(".")[0]
    beside = [known for known in DECLARATIONS if known.rpartition(".")[0] == section_path]
    message = nearest_name(path, list(DECLARATIONS))
    if message.startswith("known"):
        message = nearest_name(path.rpartition(".")[2], [known.rpartition(".")[2] for known in DECLARATIONS])
    if message.startswith("known"):
        return nearest_name(path, beside or [known for known in DECLARATIONS if "." not in known])
    return message


def display(value: Any, declaration: Declaration) -> str:
    """Write a field's SI value as a person would, with its unit."""
    if value is None:
        return "not given"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        return f"{value:.6g}" if KINDS[declaration.kind].bare else format_quantity(value, declaration.kind)
    if isinstance(value, tuple) and declaration.form == "pair":
        joint = " x " if declaration.kind == "length" else " to "
        return joint.join(format_quantity(each, declaration.kind) for each in value)
    if isinstance(value, tuple) and declaration.form == "quantity":
        return ", ".join(display(each, declaration) for each in value)
    return one_line(str(value), 300)


def assumptions(case: Streams) -> list[Assumption]:
    """Fields left at a default that matters for the result, with value and reason."""
    return [
        Assumption(path, display(value_at(case, path), DECLARATIONS[path]), DECLARATIONS[path].reason)
        for path in case.assumed
        if DECLARATIONS[path].reason
    ]


def case_hash(case: Streams) -> str:
    """SHA-256 of what the result depends on, in SI with 12 digits: the same however the units were written.

    Titles, descriptions, sizing, sweep and tolerances are left out; a material that is a file counts by its bytes.
    """
    import hashlib

    content = {
        path: _canonical(value_at(case, path), declaration)
        for path, declaration in DECLARATIONS.items()
        if declaration.section is None and not declaration.descriptive
    }
    return hashlib.sha256(json.dumps(content, sort_keys=True).encode()).hexdigest()


def _canonical(value: Any, declaration: Declaration) -> Any:
    if isinstance(value, float):
        return f"{value:.12g}"
    if isinstance(value, tuple):
        return [_canonical(each, declaration) for each in value]
    if isinstance(value, Curve | FlowCurve | StandardVolumeFlow):
        return {name: _canonical(each, declaration) for name, each in vars(value).items()}
    if declaration.form == "file" and value is not None and Path(value).is_absolute():
        import hashlib

        return hashlib.sha256(Path(value).read_bytes()).hexdigest()
    return value


def explain(path: str) -> str:
    """Meaning, unit, default, range and choices of a field, by its path or the end of its path.

    Raises InputError: no such field, with the nearest known name.
    """
    matching = [known for known in DECLARATIONS if known == path] or [
        known for known in DECLARATIONS if known.endswith(f".{path}")
    ]
    distinct = {id(DECLARATIONS[known]): known for known in reversed(matching)}
    if not matching:
        raise InputError(f"{one_line(path)}: unknown field; {nearest_field(path[:60])}")
    return "\n\n".join(_explanation(known, DECLARATIONS[known]) for known in reversed(distinct.values()))


def _explanation(path: str, declaration: Declaration) -> str:
    lines = [path, f"  {declaration.meaning}"]
    if declaration.section is not None:
        inside = [known for known in DECLARATIONS if known.startswith(f"{path}.")]
        if declaration.form == "tables":
            lines.append(f"  write: [[{path}]] before the fields of each table")
        return "\n".join([*lines, "  fields: " + ", ".join(known.removeprefix(f"{path}.") for known in inside)])
    if declaration.symbol:
        lines.append(f"  symbol: {declaration.symbol}")
    if declaration.form in ("quantity", "pair", "curve", "flow curve", "standard volume flow", "energy price"):
        lines.append(f"  write: {_written(declaration)}")
        lines.append(f"  units: {allowed_units(declaration.kind)}")
        lines.append(f"  inside and in JSON: {unit_of(declaration.kind)}")
    lines += [f'  "{name}": {meaning}' for name, meaning in declaration.choices.items()]
    allowed = limits_text(declaration)
    if allowed:
        lines.append(f"  allowed: {allowed}")
    if declaration.applies is not None:
        selector, values = declaration.applies
        lines.append(f"  applies to: {selector} = {', '.join(values)}")
    lines.append(f"  default: {default_text(declaration)}")
    return "\n".join(lines)


def _written(declaration: Declaration) -> str:
    example = f'"{example_of(declaration.kind)}"'
    if declaration.form == "pair":
        return f"[{example}, {example}]"
    if declaration.form == "flow curve":
        flow = f'"{example_of("volume flow")}"'
        power_law = f"{{ flow = {flow}, value = {example}, exponent = -0.6, from = .., to = .. }}"
        straight = "pairs of flow and value, [[" + f"{flow}, {example}], ...]"
        return straight if declaration.minimum is not None else f"{straight}; or a power law, {power_law}"
    if declaration.form == "curve":
        return (
            f"{example}; or polynomial coefficients in (T - 300 K), T the mean temperature, lowest power first, as "
            f"texts with the unit per power or as plain SI numbers; or pairs of temperature and value, "
            f'[["300 K", {example}], ...]'
        )
    return example


def default_text(declaration: Declaration) -> str:
    """Write a field's default, with its reason, in words."""
    reason = f" ({declaration.reason})" if declaration.reason else ""
    if declaration.default is REQUIRED:
        return "none, the field must be given" + (" where it applies" if declaration.applies else "")
    if declaration.default_from:
        return f"{declaration.default_from}{reason}"
    if declaration.default_by is not None:
        return ", ".join(f"{value:g} for {name}" for name, value in declaration.default_by[1].items()) + reason
    return f"{display(declaration.default, declaration) or 'empty'}{reason}"


def limits_text(declaration: Declaration) -> str:
    """Say the allowed range of a number in the SI unit; empty if there is none."""
    lowest = declaration.minimum if declaration.above is None else declaration.above
    if lowest is None and declaration.maximum is None:
        return ""
    unit = "" if KINDS[declaration.kind].bare else f" {unit_of(declaration.kind)}"
    parts = []
    if lowest is not None:
        parts.append(f"{'at least' if declaration.above is None else 'above'} {lowest:.12g}{unit}")
    if declaration.maximum is not None:
        parts.append(f"at most {declaration.maximum:.12g}{unit}")
    return " and ".join(parts)
