"""From a case file to a validated Case: all faults at once, each with its line."""

from __future__ import annotations

import copy
import dataclasses
import functools
import itertools
import math
import numbers
import re
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any, NamedTuple, TypeVar

from harvest.errors import CaseError, InputError, QuantityError
from harvest.model.case import DECLARATIONS, Case, Streams, limits_text, nearest_field, nearest_name, selector_path
from harvest.model.case_fields import (
    REQUIRED,
    Curve,
    Declaration,
    FlowCurve,
    FluidRows,
    SweepAxis,
    declared,
    walk,
)
from harvest.model.case_rules import (
    ALTERNATIVES,
    CURVES,
    MODULE_WAYS,
    UnknownValueError,
    Values,
    applies,
    broken_rules,
    without_effect,
)
from harvest.model.case_text import bounded_text, key_lines, toml_document, toml_value
from harvest.model.stream_sections import HEAT_SINK, Side, StreamSide
from harvest.model.tolerances import FACTOR, Tolerance, parse_tolerance
from harvest.quantities import (
    HIGHEST_DEGREE,
    KINDS,
    STANDARD_VOLUME_FLOW,
    EnergyPrice,
    StandardVolumeFlow,
    example_of,
    from_pint,
    is_pint_quantity,
    one_line,
    parse_energy_price,
    parse_quantity,
    parse_standard_volume_flow,
    per_kelvin,
    shown,
    unit_of,
)

OPTION = "--set"
DATA = Path(__file__).parents[1] / "data"
FLUID_COLUMNS = {
    "temperature": "temperature",
    "density": "density",
    "heat_capacity": "heat capacity",
    "viscosity": "viscosity",
    "conductivity": "conductivity",
}
CONSTANT_FLUID_TEMPERATURE = 300.0
MOST_CURVE_POINTS = 1000
MOST_SUGGESTIONS = 50
MOST_SWEEP_POINTS = 1_000_000
NUMBERS = ("quantity", "integer", "curve")
"""Forms of fields that can be one number."""
LEG_MATERIALS = ("n_material", "p_material")
LARGEST_EXPONENT = 4.0
OPEN_TABLES = ("size.", "sweep.", "uncertainty.")
"""Beginnings of paths that go on with the whole name of a field."""
NOT_JUDGED: dict[type, type] = {Streams: Case, StreamSide: Side}
"""Sections that are read in part, with the section whose other fields may stand there without being judged."""
AnyStreams = TypeVar("AnyStreams", bound=Streams)
_PLACE = re.compile(r"\[[0-9]{1,6}\]")


class Origin(NamedTuple):
    """Where a value was given: a file with its line, or an option."""

    label: str
    line: int = 0

    def fault(self, path: str, message: str) -> str:
        """One line that says where, which field, and what is wrong."""
        place = f"{self.label} " if self.label == OPTION else f"{self.label}{f':{self.line}' if self.line else ''}: "
        return f"{place}{one_line(path, 100)}: {message}"


def load_case(source: str | Path, overrides: Sequence[str] = ()) -> Case:
    """Read a case file, or the text of one if `source` is a str with line ends.

    `overrides` are texts "hot.mass_flow=0.4 kg/s" that go before what the file says.
    Raises CaseError with all faults, one line each.
    """
    return _loaded(Case, source, overrides)


def load_streams(source: str | Path, overrides: Sequence[str] = ()) -> Streams:
    """Read the streams of a case file as `load_case`; what is built between them may be missing and is not judged."""
    return _loaded(Streams, source, overrides)


def _loaded(kind: type[AnyStreams], source: str | Path, overrides: Sequence[str]) -> AnyStreams:
    if isinstance(source, str) and "\n" in source:
        return _read(kind, source, overrides)
    path = Path(source)
    try:
        text = bounded_text(path)
    except InputError as error:
        raise CaseError([str(error)]) from None
    return _read(kind, text, overrides, label=str(source), folder=path.parent)


def read_case(text: str, overrides: Sequence[str] = (), *, label: str = "case", folder: Path | None = None) -> Case:
    """Read the text of a case file; `label` names it in faults, `folder` is where its relative paths start.

    Raises CaseError with all faults, one line each.
    """
    return _read(Case, text, overrides, label=label, folder=folder)


def read_streams(
    text: str, overrides: Sequence[str] = (), *, label: str = "case", folder: Path | None = None
) -> Streams:
    """Read the streams of a case file's text as `read_case`; what is built between them is not judged."""
    return _read(Streams, text, overrides, label=label, folder=folder)


def _read(
    kind: type[AnyStreams], text: str, overrides: Sequence[str], *, label: str = "case", folder: Path | None = None
) -> AnyStreams:
    if not text.strip():
        raise CaseError([f'{label}: is empty; a case begins for example with [hot] and fluid = "water"'])
    try:
        document = toml_document(text, label)
    except InputError as error:
        raise CaseError([str(error)]) from None
    origins = {path: Origin(label, line) for path, line in key_lines(text).items()}
    faults = []
    for override in overrides:
        path, equals, value = (part.strip() for part in override.partition("="))
        path = path.replace('"', "")  # size."hot.duct.gap", as whole names stand in the file
        try:
            if not equals:
                raise InputError(f'{one_line(path)}: has no "="; write for example --set hot.mass_flow="0.4 kg/s"')
            _put(document, path, toml_value(value))
            origins[path] = Origin(OPTION)
        except InputError as error:
            faults.append(f"{OPTION} {error}")
    try:
        case = _from(kind, document, label=label, folder=folder, origins=origins)
    except CaseError as error:
        raise CaseError([*error.faults, *faults]) from None
    if faults:
        raise CaseError(faults)
    return case


def case_from(
    document: Mapping[str, Any],
    *,
    label: str = "case",
    folder: Path | None = None,
    origins: Mapping[str, Origin] | None = None,
) -> Case:
    """Validate a nested mapping that is laid out as a case file; raises CaseError with all faults."""
    return _from(Case, document, label=label, folder=folder, origins=origins)


def _from(
    kind: type[AnyStreams],
    document: Mapping[str, Any],
    *,
    label: str = "case",
    folder: Path | None = None,
    origins: Mapping[str, Origin] | None = None,
) -> AnyStreams:
    given = copy.deepcopy(dict(document))
    reading = _Reading(label, folder or Path(), dict(origins or {}))
    reading.read(given, kind)
    if reading.faults:
        raise CaseError([origin.fault(path, message) for origin, path, message in reading.in_order()])
    case: AnyStreams = _built(
        kind, "", reading.values, given=given, assumed=tuple(reading.assumed), folder=reading.folder
    )
    return case


def replace(
    case: AnyStreams, changes: Mapping[str, Any], *, label: str = "case", as_written: bool = False
) -> AnyStreams:
    """Make a validated case, or streams, with other values, by path: SI numbers, texts with units, or pint quantities.

    None takes a value away; `label` names in faults where the changes come from; with `as_written` they are as in a
    case file, where a number needs its unit. Raises CaseError with all faults.
    """
    document = copy.deepcopy(case.given)
    faults = []
    for path, value in changes.items():
        try:
            _put(document, path, value if as_written else _as_typed(path, value))
        except QuantityError as error:
            faults.append(f"{path}: {error}")
        except InputError as error:
            faults.append(str(error))
    if faults:
        raise CaseError(faults)
    return _from(type(case), document, label=label, folder=case.folder)


def _put(document: dict[str, Any], path: str, value: Any) -> None:
    """Set a value in a document; what is an alternative to it goes, with its tolerance."""
    if _PLACE.sub("", path) not in DECLARATIONS and not path.startswith(OPEN_TABLES):
        raise InputError(f"{one_line(path)}: unknown field; {nearest_field(path[:60])}")
    *parents, name = path.split(".", 1) if path.startswith(OPEN_TABLES) else path.split(".")
    table = document
    for parent in parents:
        if _PLACE.search(parent):
            table = _listed(table, parent)
        else:
            table = table.setdefault(parent, {})
        if not isinstance(table, dict):
            raise InputError(f"{path}: {parent} is not a table in the case")
    table[name] = value
    for alternatives in ALTERNATIVES:
        if path in alternatives:
            for other in alternatives:
                if other != path:
                    table.pop(other.rpartition(".")[2], None)
                    if isinstance(tolerances := document.get("uncertainty"), dict):
                        tolerances.pop(other, None)


def _inside(document: Mapping[str, Any], *names: str) -> Any:
    """Value inside of tables in a document; None where there is none."""
    value: Any = document
    for name in names:
        value = value.get(name) if isinstance(value, Mapping) else None
    return value


def _listed(table: dict[str, Any], name: str) -> Any:
    """Table of a list of tables by its place, such as "generator_rating[2]"; None if there is none."""
    listed, _, place = name.rstrip("]").partition("[")
    tables = table.get(listed)
    return tables[int(place) - 1] if isinstance(tables, list) and 1 <= int(place) <= len(tables) else None


def _as_typed(path: str, value: Any) -> Any:
    """Write a value from Python as it would stand in a case file, exact to the last digit."""
    if path.startswith("sweep.") and path not in DECLARATIONS:
        return _typed_axis(path.removeprefix("sweep."), value)
    declaration = DECLARATIONS.get(path)
    if declaration is None or isinstance(value, str | bool | Mapping):
        return value
    if isinstance(value, Curve):
        if value.kind == "polynomial":
            return list(value.values)
        return [
            [f"{t!r} K", f"{v!r} {unit_of(declaration.kind)}"]
            for t, v in zip(value.temperatures, value.values, strict=True)
        ]
    if isinstance(value, FlowCurve):
        return [
            [f"{float(flow)!r} m^3/s", f"{float(each)!r} {unit_of(declaration.kind)}"]
            for flow, each in zip(value.flows, value.values, strict=True)
        ]
    if isinstance(value, StandardVolumeFlow | EnergyPrice):
        return str(value)
    if isinstance(value, tuple | list):
        return [_as_typed(path, each) for each in value]
    if declaration.form == "tables" and dataclasses.is_dataclass(value):
        return {name: _as_typed(f"{path}.{name}", each) for name, each in vars(value).items() if each is not None}
    if is_pint_quantity(value):
        value = from_pint(value, declaration.kind)
    if isinstance(value, numbers.Integral):
        value = int(value)
    elif isinstance(value, numbers.Real):
        value = float(value)
    if declaration.form in ("quantity", "pair") and isinstance(value, int | float) and not KINDS[declaration.kind].bare:
        return f"{value!r} {unit_of(declaration.kind)}"
    return value


def _typed_axis(path: str, value: Any) -> Any:
    """Write what a sweep gives a field as it would stand in a case file."""
    if isinstance(value, Mapping):
        return {name: each if name == "points" else _as_typed(path, each) for name, each in value.items()}
    listed = value.tolist() if hasattr(value, "tolist") else value
    return [_as_typed(path, each) for each in listed] if isinstance(listed, list | tuple | range) else listed


def _built(owner: type, prefix: str, values: Values, **more: Any) -> Any:
    """Make a section's object from the values by path."""
    items = {}
    for name, declaration in declared(owner):
        path = prefix + name
        if declaration.section is None or declaration.form == "tables":
            items[name] = values[path]
        elif declaration.optional and values[path] is None:
            items[name] = None
        else:
            items[name] = _built(declaration.section, f"{path}.", values)
    return owner(**items, **more)


class _Reading:
    """One pass over a document: values by path, and what is wrong."""

    def __init__(self, label: str, folder: Path, origins: dict[str, Origin]) -> None:
        self.label = label
        self.folder = folder
        self.record_folders: dict[str, Path] = {}  # where paths start that stand in a record, by field
        self.origins = origins
        self.values = Values()
        self.assumed: list[str] = []
        self.faults: list[tuple[Origin, str, str]] = []

    def read(self, document: Mapping[str, Any], kind: type[Streams] = Case) -> None:
        """Judge every field of a case, or of its streams, then the rules between them."""
        self.values.faulty.update(DECLARATIONS.keys() - dict(walk(kind)).keys())  # so that no rule asks for the rest
        self.section(kind, "", document)
        if kind is Streams and _inside(document, "cold", "duct", "kind") == HEAT_SINK:
            self.values["cold.duct.kind"] = HEAT_SINK  # the one part of a duct that decides whether there is a flow
        for path, message in broken_rules(self.values):
            self.fault(path, message)
        nothing_assumed = without_effect(self.values)
        self.assumed = [path for path in self.assumed if path not in nothing_assumed]

    def in_order(self) -> list[tuple[Origin, str, str]]:
        """Faults in the order of the file's lines, options last, without repetitions."""
        return sorted(dict.fromkeys(self.faults), key=lambda each: (each[0].label != self.label, each[0].line))

    def fault(self, path: str, message: str) -> None:
        self.values.faulty.add(path)
        self.values.pop(path, None)
        self.faults.append((self.origin(path), path, message))

    def origin(self, path: str) -> Origin:
        """Where the value, or else the table that would hold it, was given."""
        if path in self.origins:
            return self.origins[path]
        while path:
            is_place = path.endswith("]") and _PLACE.search(path)
            path = path.rpartition("[" if is_place else ".")[0]
            if path in self.origins and self.origins[path].label != OPTION:
                return self.origins[path]
        return Origin(self.label)

    def section(self, owner: type, prefix: str, table: Mapping[str, Any]) -> None:
        known = dict(declared(owner))
        may_stand = dict(declared(NOT_JUDGED.get(owner, owner)))
        for name in table:
            if name not in may_stand:
                self.unknown(prefix, str(name), list(may_stand))
        for name, declaration in known.items():
            path = prefix + name
            if declaration.section is None:
                self.field(path, declaration, table.get(name))
            elif declaration.form == "tables":
                self.tables(path, declaration, table.get(name))
            elif isinstance(inside := table.get(name, {}), Mapping):
                self.subsection(path, declaration, inside, name in table)
            else:
                self.fault(path, f"is a section; write [{path}] and its fields below it")
                self.give_up(path, declaration)

    def tables(self, path: str, declaration: Declaration, raw: Any) -> None:
        """Judge each table of a list of tables by its place."""
        assert declaration.section is not None
        if raw is None:
            self.values[path] = None
            return
        if not isinstance(raw, list | tuple) or not raw or not all(isinstance(each, Mapping) for each in raw):
            self.fault(path, f"is a list of tables; write [[{path}]] and its fields below it, once for each")
            return
        if len(raw) > MOST_CURVE_POINTS:
            self.fault(path, f"has {len(raw)} tables; give at most {MOST_CURVE_POINTS}")
            return
        places = [f"{path}[{number}]." for number in range(1, len(raw) + 1)]
        for place, table in zip(places, raw, strict=True):
            self.section(declaration.section, place, table)
        try:
            self.values[path] = tuple(_built(declaration.section, place, self.values) for place in places)
        except UnknownValueError:
            self.values.faulty.add(path)

    def subsection(self, path: str, declaration: Declaration, inside: Mapping[str, Any], is_there: bool) -> None:
        assert declaration.section is not None
        if is_there or not declaration.optional:
            needs = [
                name
                for name, each in declared(declaration.section)
                if each.default is REQUIRED and each.section is None and each.applies is None
            ]
            if needs and not is_there:
                self.fault(path, f"the section [{path}] is missing; it gives {', '.join(needs)} and more")
                self.give_up(path, declaration)
                return
            if path == "module" and "use" in inside:
                try:
                    inside = self.with_record(inside)
                except InputError as error:
                    self.fault("module.use", str(error))
                    self.give_up(path, declaration)
                    return
            if path in ("size", "sweep"):
                inside = _with_fields_apart(inside)
            self.values[path] = path
            self.section(declaration.section, f"{path}.", inside)
        else:
            self.values[path] = None
            for name, _ in walk(declaration.section, f"{path}."):
                self.values[name] = None

    def give_up(self, path: str, declaration: Declaration) -> None:
        """Nothing inside the section can be judged."""
        assert declaration.section is not None
        self.values.faulty.update(name for name, _ in walk(declaration.section, f"{path}."))

    def unknown(self, prefix: str, name: str, known: list[str]) -> None:
        path = prefix + name
        if len(self.faults) > MOST_SUGGESTIONS:  # finding the nearest name takes a millisecond
            message = "unknown field"
        else:
            message = f"unknown field; {nearest_name(name[:60], known)}"
        self.faults.append((self.origin(path), path, message))

    def field(self, path: str, declaration: Declaration, raw: Any) -> None:
        """Value of one field, or its default, or a fault."""
        try:
            decided = applies(declaration, path, self.values)
            if raw is None:
                self.values[path] = self.default(path, declaration, decided is None)
                return
            if decided is not None:
                owner, value = decided
                assert declaration.applies is not None
                self.fault(
                    path,
                    f'does not apply to {owner} = "{value}", only to {", ".join(declaration.applies[1])}; remove it',
                )
                return
            self.values[path] = self.value(path, declaration, raw)
        except UnknownValueError:  # what decides has a fault; the value itself may have another one
            self.values.faulty.add(path)
            if raw is not None:
                self.check_alone(path, declaration, raw)
        except QuantityError as error:
            self.fault(path, str(error))

    def check_alone(self, path: str, declaration: Declaration, raw: Any) -> None:
        """Report what is wrong with a value of which it is not known whether it applies."""
        try:
            self.value(path, declaration, raw)
        except QuantityError as error:
            self.fault(path, str(error))
        except UnknownValueError:
            return

    def default(self, path: str, declaration: Declaration, asked: bool) -> Any:
        if declaration.default is REQUIRED:
            if not asked:
                return None
            raise QuantityError(f"is missing; {_how_to_write(declaration)}")
        if asked and not _PLACE.search(path):
            self.assumed.append(path)
        if declaration.default_from:
            return self.values[declaration.default_from]
        if declaration.default_by is not None and asked:
            selector, defaults = declaration.default_by
            return defaults[self.values[selector_path(path, selector)]]
        if declaration.form == "choice" and not asked:
            return None
        return declaration.default

    def value(self, path: str, declaration: Declaration, raw: Any) -> Any:
        """SI value of what was given; raises QuantityError or UnknownValueError."""
        form, kind = declaration.form, declaration.kind
        if form == "quantity":
            return self.number(path, declaration, raw)
        if form == "integer":
            return _integer(declaration, raw)
        if form == "choice":
            return _choice(declaration, raw)
        if form in ("text", "log"):
            return _text(raw)
        if form == "file":
            return _file(_text(raw), kind, self.record_folders.get(path, self.folder))
        if form == "boolean":
            if not isinstance(raw, bool):
                raise QuantityError(f"{shown(raw)} is not true or false; write it without quotes")
            return raw
        if form == "pair":
            if not isinstance(raw, list | tuple) or len(raw) != 2:
                raise QuantityError(f'{shown(raw)} is not a pair; write ["{example_of(kind)}", "{example_of(kind)}"]')
            return tuple(self.number(path, declaration, each) for each in raw)
        if form == "integers":
            if not isinstance(raw, list | tuple) or not raw:
                raise QuantityError(f"{shown(raw)} is not a list of whole numbers such as [4, 4, 4]")
            return tuple(_integer(declaration, each) for each in raw)
        if form == "standard volume flow":
            return parse_standard_volume_flow(raw)
        if form == "energy price":
            return parse_energy_price(raw)
        if form == "curve":
            return _curve(declaration, raw)
        if form == "flow curve":
            return _flow_curve(declaration, raw)
        if form == "fluid table":
            return _fluid_rows(raw, self.folder)
        if form == "axis":
            return self.axis(path, declaration, raw)
        if form == "tolerances":
            return self.tolerances(path, raw)
        return self.axes(path, raw)

    def number(self, path: str, declaration: Declaration, raw: Any) -> float:
        gauge_reference = None
        may_be_gauge = declaration.kind == "pressure" and isinstance(raw, str) and "g" in raw
        if may_be_gauge and path != "site.ambient_pressure":
            gauge_reference = self.values["site.ambient_pressure"]
        value = parse_quantity(raw, declaration.kind, ambient_pressure=gauge_reference)
        _within(declaration, value, raw)
        return value

    def tolerances(self, path: str, raw: Any) -> dict[str, Tolerance]:
        """Tolerance of each field, by its whole name."""
        if not isinstance(raw, Mapping):
            raise QuantityError(f'is a section; write [{path}] and below it for example "hot.mass_flow" = "5 %"')
        found = {}
        for name, given in raw.items():
            try:
                found[name] = self.tolerance(name, given)
            except QuantityError as error:
                self.fault(f"{path}.{name}", str(error))
            except UnknownValueError:
                continue
        return found

    def tolerance(self, name: str, raw: Any) -> Tolerance:
        """Tolerance of one field around its value; raises QuantityError or UnknownValueError."""
        known = DECLARATIONS.get(name)
        if isinstance(raw, Mapping) and known is not None and known.section is not None:
            raise QuantityError('is a section; write the whole name of its field in quotes, "hot.mass_flow" = "5 %"')
        if known is None or known.section is not None:
            raise QuantityError(f"unknown field; {nearest_field(name[:60])}")
        if name in CURVES or known.form == "flow curve":
            near = {"seebeck", "resistance", "conductance"} & {name.rpartition(".")[2]}
            factor = f"module.{near.pop()}_factor" if near else "the factors beside it, film_factor and its like,"
            raise QuantityError(f"is a curve; give {factor} a tolerance instead")
        if name == "site.ambient_pressure":
            raise QuantityError(
                "acts through the pressures of the sides; give hot.pressure or cold.pressure a tolerance"
            )
        if known.descriptive or name.startswith("limits.") or known.form not in ("quantity", STANDARD_VOLUME_FLOW):
            raise QuantityError("is no number that a result depends on continuously, so it has no tolerance")
        decided = applies(known, name, self.values)
        value = self.values.get(name) if name not in self.values.faulty else self.values[name]
        tolerance = parse_tolerance(raw, known.kind)
        if decided is not None or value is None or isinstance(value, tuple):
            raise QuantityError("has no value of its own in this case, so it has no tolerance; remove it")
        if tolerance.distribution == FACTOR and not isinstance(value, StandardVolumeFlow) and value < 0:
            raise QuantityError("is below zero, where a factor means nothing; give a difference")
        return tolerance

    def axes(self, path: str, raw: Any) -> dict[str, Any]:
        """Values that a sizing or a sweep gives each field, by its whole name."""
        if not isinstance(raw, Mapping):
            raise QuantityError('is written by whole names in quotes, such as "hot.duct.gap" = ["2 mm", "3 mm"]')
        return self.size_fields(raw) if path == "size.fields" else self.sweep_fields(raw)

    def size_fields(self, raw: Mapping[str, Any]) -> dict[str, tuple[float, ...]]:
        """Values of each further field of a sizing, by its whole name."""
        found = {}
        for name, axis in raw.items():
            known = DECLARATIONS.get(name)
            if name in ("stack.rows", "stack.columns", "stack.layers"):
                self.fault(f"size.{name}", f"is written as {name.removeprefix('stack.')} in [size]")
                continue
            fixed = known is None or known.descriptive or name.startswith("limits.")
            if fixed or known is None or known.form not in ("quantity", "integer"):
                self.fault(
                    f"size.{name}",
                    f"is no number that shapes a design; {nearest_field(name[:60])}"
                    if known is None
                    else "is no number that shapes a design, so a sizing cannot vary it",
                )
                continue
            try:
                found[name] = self.axis(name, known, axis)
            except QuantityError as error:
                self.fault(f"size.{name}", str(error))
        return found

    def sweep_fields(self, raw: Mapping[str, Any]) -> dict[str, SweepAxis]:
        """What a sweep gives each field, by its whole name."""
        found = {}
        for name, axis in raw.items():
            try:
                found[name] = self.sweep_axis(name, _swept(name), axis)
            except QuantityError as error:
                self.fault(f"sweep.{name}", str(error))
        return found

    def sweep_axis(self, path: str, declaration: Declaration, raw: Any) -> SweepAxis:
        """Values in the order given, single numbers in SI; raises QuantityError."""
        sampled = self.values["sweep.sample"] is not None
        if isinstance(raw, Mapping):
            if declaration.form not in NUMBERS:
                raise QuantityError("has no values between two others; give a list")
            if sampled and set(raw) == {"from", "to"}:
                ends = (self.single(path, declaration, raw["from"]), self.single(path, declaration, raw["to"]))
                if not ends[0] < ends[1]:
                    raise QuantityError(
                        f"goes from {shown(raw['from'])} to {shown(raw['to'])}; give the lower one first"
                    )
                return SweepAxis((), between=ends)
            one = functools.partial(self.single, path, declaration)
            return SweepAxis(tuple(self.spaced(declaration, raw, one, MOST_SWEEP_POINTS)))
        if not isinstance(raw, list | tuple) or not raw:
            raise QuantityError("is neither a list nor { from = .., to = .., points = .. }")
        single = declaration.form in NUMBERS and not any(isinstance(each, list | tuple) for each in raw)
        read = self.single if single else self.value
        values = tuple(read(path, declaration, each) for each in raw)
        if len(set(values)) < len(values):
            twice = next(each for place, each in enumerate(raw) if values[place] in values[:place])
            raise QuantityError(f"has {shown(twice)} twice; give each value once")
        return SweepAxis(values, () if single else tuple(map(_label, raw)))

    def single(self, path: str, declaration: Declaration, raw: Any) -> float:
        """One number of a field, SI; raises QuantityError."""
        return _integer(declaration, raw) if declaration.form == "integer" else self.number(path, declaration, raw)

    def axis(self, path: str, declaration: Declaration, raw: Any) -> tuple[Any, ...]:
        """Rising values of a list, or from one to another by steps or points; raises QuantityError."""

        def one(given: Any) -> float:
            whole = declaration.form in ("integer", "axis")
            return _integer(declaration, given) if whole else self.number(path, declaration, given)

        if isinstance(raw, list | tuple) and raw:
            values = [one(each) for each in raw[: MOST_CURVE_POINTS * 10]]
        elif isinstance(raw, Mapping):
            values = self.spaced(declaration, raw, one)
        else:
            raise QuantityError("is neither a list nor { from = .., to = .., step = .. }")
        return tuple(sorted(set(values)))

    def spaced(
        self,
        declaration: Declaration,
        raw: Mapping[str, Any],
        one: Callable[[Any], float],
        most: int = MOST_CURVE_POINTS,
    ) -> list[float]:
        """Values from one to another, both included where the steps meet the end."""
        whole = declaration.form in ("integer", "axis")
        if not {"from", "to"} <= set(raw) <= {"from", "to", "step", "points"} or {"step", "points"} <= set(raw):
            raise QuantityError("needs from and to, and step or points")
        lowest, highest = one(raw["from"]), one(raw["to"])
        if lowest > highest:
            raise QuantityError(f"goes from {shown(raw['from'])} down to {shown(raw['to'])}; give the lower one first")
        if "points" in raw and declaration.form != "axis":
            points = raw["points"]
            if isinstance(points, bool) or not isinstance(points, int) or not 2 <= points <= most:
                raise QuantityError(f"points: give a whole number from 2 to {most}")
            if whole:
                if (highest - lowest) % (points - 1) or lowest == highest:
                    raise QuantityError(f"points: {points} of them do not fall on whole numbers; give step instead")
                return list(range(int(lowest), int(highest) + 1, int(highest - lowest) // (points - 1)))
            if lowest == highest:
                raise QuantityError(f"goes from {shown(raw['from'])} to the same value; give one value as a list")
            width = (highest - lowest) / (points - 1)
            return [lowest + width * place for place in range(points - 1)] + [highest]
        if whole:
            step: float = raw.get("step", 1)
            if isinstance(step, bool) or not isinstance(step, int) or step < 1 or "points" in raw:
                raise QuantityError("step: give a whole number of at least 1")
        elif "step" in raw:
            kind = {"temperature": "temperature difference", "pressure": "pressure difference"}
            step = parse_quantity(raw["step"], kind.get(declaration.kind, declaration.kind))
        else:
            raise QuantityError("needs step or points")
        longest = max(most, MOST_CURVE_POINTS * 10)
        if not step > 0 or (highest - lowest) / step > longest:
            raise QuantityError(f"step: must be above zero and make at most {longest} values")
        return [lowest + step * place for place in range(int((highest - lowest) / step * (1 + 1e-12)) + 1)]

    def with_record(self, module: Mapping[str, Any]) -> Mapping[str, Any]:
        """Merge the module's fields over those of its record; raises InputError."""
        use = _text(module["use"])
        if use.lower().endswith(".csv"):
            raise InputError(
                f"{shown(use)} is a bench record and no module record; make one of it by "
                "harvest module FILE.csv --write FILE.toml, and use that"
            )
        path = Path(_file(use, "modules", self.folder))
        if not path.is_absolute():
            path = _bundled(str(path), "modules")
        state = path.stat()
        record, lines = _record(path, state.st_mtime_ns, state.st_size)
        self.origins = {**{f"module.{key}": Origin(path.name, line) for key, line in lines.items()}, **self.origins}
        own = [way for way in MODULE_WAYS if way in module]
        if own:
            others = {*MODULE_WAYS, *(path.rpartition(".")[2] for path in CURVES)} - {*own}
            record = {name: value for name, value in record.items() if name not in others}
        merged = {**record, **module}
        own_legs = module.get("legs")
        for material in LEG_MATERIALS:
            if not (isinstance(own_legs, Mapping) and material in own_legs):
                self.record_folders[f"module.legs.{material}"] = path.parent
        for way in own:
            if isinstance(inside := module[way], Mapping) and isinstance(below := record.get(way), Mapping):
                merged[way] = {**below, **inside}
        return merged


def _swept(path: str) -> Declaration:
    """Declaration of a field that a sweep can vary; raises QuantityError."""
    declaration = DECLARATIONS.get(path)
    if declaration is None:
        raise QuantityError(f"unknown field; {nearest_field(path[:60])}")
    if declaration.section is not None:
        example = f"{path}.{_first_field(declaration)}"
        raise QuantityError(f'is a section; write the whole name of one of its fields in quotes, such as "{example}"')
    if DECLARATIONS.get(path.rpartition(".")[0], declaration).form == "tables":
        raise QuantityError("stands in a list of tables; write each module as a record and vary module.use")
    if path.startswith("limits."):
        raise QuantityError("a limit changes no result, so a sweep cannot vary it; --plot draws the limits of the case")
    shapes = path == "module.use" or (path.startswith("cost.") and declaration.form in NUMBERS)
    if declaration.descriptive and not shapes:
        raise QuantityError("changes no result, so a sweep cannot vary it; leave it out")
    return declaration


def _first_field(declaration: Declaration) -> str:
    assert declaration.section is not None
    return declared(declaration.section)[0][0]


def _label(raw: Any) -> str:
    """Write a value that is no single number as it was typed."""
    if isinstance(raw, str):
        return one_line(raw, 200)
    if isinstance(raw, list | tuple):
        return f"[{', '.join(map(_label, raw))}]"
    return str(raw).lower() if isinstance(raw, bool) else one_line(str(raw), 200)


def _with_fields_apart(size: Mapping[str, Any]) -> Mapping[str, Any]:
    """Put the whole names of fields in a sizing or a sweep together under `fields`."""
    apart = {name: axis for name, axis in size.items() if "." in str(name) or name in DECLARATIONS}
    if not apart or "fields" in size:
        return size
    return {**{name: each for name, each in size.items() if name not in apart}, "fields": apart}


@functools.lru_cache(32)
def _record(path: Path, modified: int, size: int) -> tuple[dict[str, Any], dict[str, int]]:
    """Fields of a module record with their lines; read again when the file has changed."""
    text = bounded_text(path)
    record = toml_document(text, path.name)
    if "use" in record:
        raise InputError(f"{path.name}: use: a record describes a module itself; remove it")
    if not isinstance(record.get("legs", {}), dict):
        raise InputError(f"{path.name}: legs: is a section; write [legs] and its fields below it")
    return record, key_lines(text)


def _bundled(name: str, kind: str) -> Path:
    return DATA / kind / f"{name.replace(' ', '-')}.toml"


def _file(name: str, kind: str, folder: Path) -> str:
    """Keep a bundled record's name, make the path of another record absolute."""
    try:
        if "/" not in name and "\\" not in name and _bundled(name, kind).is_file():
            return name
        if (folder / name).is_file():
            return str((folder / name).resolve())
    except (OSError, ValueError):
        pass  # a name that no file system takes is the name of no file
    known = sorted(each.stem for each in (DATA / kind).glob("*.toml"))
    raise QuantityError(f"{shown(name)} is no file and none of the bundled {kind}; {nearest_name(name[:60], known)}")


def _integer(declaration: Declaration, raw: Any) -> int:
    if isinstance(raw, bool) or not isinstance(raw, int):
        raise QuantityError(f"{shown(raw)} is not a whole number; write for example 4, without quotes")
    _within(declaration, raw, raw)
    return raw


def _choice(declaration: Declaration, raw: Any) -> str:
    if not isinstance(raw, str) or raw not in declaration.choices:
        near = nearest_name(raw[:60], list(declaration.choices)) if isinstance(raw, str) else ""
        listed = "" if near.startswith("known") else f"; known are {', '.join(declaration.choices)}"
        raise QuantityError(
            f"{shown(raw)} is not possible; {near}{listed}"
            if near
            else f"{shown(raw)} is not a text; known are {', '.join(declaration.choices)}"
        )
    return raw


def _text(raw: Any) -> str:
    if not isinstance(raw, str):
        raise QuantityError(f"{shown(raw)} is not a text; write it in quotes")
    return raw


def _within(declaration: Declaration, value: float, raw: Any) -> None:
    low = declaration.minimum is not None and value < declaration.minimum
    low = low or (declaration.above is not None and value <= declaration.above)
    if low or (declaration.maximum is not None and value > declaration.maximum):
        raise QuantityError(f"{shown(raw)} is not possible; give {limits_text(declaration)}")


def _curve(declaration: Declaration, raw: Any) -> Curve:
    """One quantity, polynomial coefficients in (T - 300 K), or pairs of temperature and value."""
    kind = declaration.kind
    if not isinstance(raw, list | tuple):
        values: tuple[float, ...] = (parse_quantity(raw, kind),)
    elif not raw or len(raw) > MOST_CURVE_POINTS:
        raise QuantityError(f"has {len(raw)} entries; give 1 to {MOST_CURVE_POINTS}")
    elif isinstance(raw[0], list | tuple):
        return _curve_table(declaration, raw)
    elif len(raw) > HIGHEST_DEGREE + 1:
        raise QuantityError(f"has {len(raw)} coefficients; give at most {HIGHEST_DEGREE + 1}, or pairs of a table")
    else:
        values = tuple(_coefficient(each, kind, power) for power, each in enumerate(raw))
    _within(declaration, values[0], raw if isinstance(raw, str) else raw[0])
    return Curve("polynomial", values)


def _coefficient(raw: Any, kind: str, power: int) -> float:
    if isinstance(raw, int | float) and not isinstance(raw, bool) and math.isfinite(raw):
        return float(raw)
    return parse_quantity(raw, per_kelvin(kind, power))


def _curve_table(declaration: Declaration, raw: Sequence[Any]) -> Curve:
    if any(not isinstance(pair, list | tuple) or len(pair) != 2 for pair in raw):
        raise QuantityError(f'is not a list of pairs such as ["300 K", "{example_of(declaration.kind)}"]')
    temperatures = tuple(parse_quantity(pair[0], "temperature") for pair in raw)
    values = tuple(parse_quantity(pair[1], declaration.kind) for pair in raw)
    _ascending(temperatures)
    for pair, value in zip(raw, values, strict=True):
        _within(declaration, value, pair[1])
    return Curve("table", values, temperatures)


def _flow_curve(declaration: Declaration, raw: Any) -> FlowCurve:
    """Pairs of flow and value, or a power law between two flows where a value cannot be zero."""
    kind, is_drive = declaration.kind, declaration.minimum is not None
    how = f'[["2 L/min", "{example_of(kind)}"], ...]'
    if isinstance(raw, Mapping) and not is_drive:
        return _power_law(declaration, raw)
    if not isinstance(raw, list | tuple) or not 2 <= len(raw) <= MOST_CURVE_POINTS:
        raise QuantityError(f"is not a list of 2 to {MOST_CURVE_POINTS} pairs of flow and value such as {how}")
    if any(not isinstance(pair, list | tuple) or len(pair) != 2 for pair in raw):
        raise QuantityError(f"is not a list of pairs such as {how}")
    flows = tuple(parse_quantity(pair[0], "volume flow") for pair in raw)
    values = tuple(parse_quantity(pair[1], kind) for pair in raw)
    for lower, upper, pair in zip((-1.0 if is_drive else 0.0, *flows), flows, raw, strict=False):
        if lower >= upper or upper < 0:
            raise QuantityError(
                f"its flows do not rise from above zero: {shown(pair[0])} is not more than the one before"
            )
    for pair, value in zip(raw, values, strict=True):
        _within(declaration, value, pair[1])
    for first, second in itertools.pairwise(range(len(values)) if is_drive else ()):
        if values[first] <= values[second]:
            raise QuantityError(
                f"its pressure does not fall from {shown(raw[first][1])} to {shown(raw[second][1])}; give the stable "
                "part of the curve"
            )
    return FlowCurve(flows, values)


def _power_law(declaration: Declaration, raw: Mapping[str, Any]) -> FlowCurve:
    """Two points of a power law, at the ends of its range: between points a rated curve is a power law anyway."""
    names = ("flow", "value", "exponent", "from", "to")
    if set(raw) != set(names):
        raise QuantityError(f"is a power law and needs {', '.join(names)}, and nothing else")
    at, low, high = (parse_quantity(raw[name], "volume flow") for name in ("flow", "from", "to"))
    value, exponent = parse_quantity(raw["value"], declaration.kind), parse_quantity(raw["exponent"], "dimensionless")
    if not 0 < low < high or at <= 0:
        raise QuantityError("needs flows above zero and its from below its to")
    if abs(exponent) > LARGEST_EXPONENT:
        raise QuantityError(f"its exponent {exponent:g} is not between -{LARGEST_EXPONENT:g} and {LARGEST_EXPONENT:g}")
    _within(declaration, value, raw["value"])
    return FlowCurve((low, high), (value * (low / at) ** exponent, value * (high / at) ** exponent))


def _ascending(temperatures: Sequence[float]) -> None:
    for lower, upper in itertools.pairwise((0.0, *temperatures)):
        if lower >= upper:
            raise QuantityError(f"its temperatures do not rise: {upper:g} K comes after {lower:g} K")


def _fluid_rows(raw: Any, folder: Path) -> FluidRows:
    """Rows of temperature, density, heat capacity, viscosity and conductivity from lists or from a CSV file."""
    columns = _csv_columns(folder / raw) if isinstance(raw, str) else raw
    if not isinstance(columns, Mapping):
        raise QuantityError("is neither a section with lists of texts nor the path of a CSV file")
    if missing := [name for name in FLUID_COLUMNS if name not in columns and name != "temperature"]:
        raise QuantityError(f"has no {', '.join(missing)}")
    if unknown := [name for name in columns if name not in FLUID_COLUMNS]:
        raise QuantityError(
            f"{one_line(str(unknown[0]))}: unknown field; {nearest_name(str(unknown[0])[:60], list(FLUID_COLUMNS))}"
        )
    columns = {"temperature": f"{CONSTANT_FLUID_TEMPERATURE} K", **columns}
    parsed = {name: _fluid_column(name, columns[name]) for name in FLUID_COLUMNS}
    _ascending(parsed["temperature"])
    count = len(parsed["temperature"])
    for name, values in parsed.items():
        if len(values) == 1 and not isinstance(columns[name], list | tuple):
            parsed[name] = values * count
        elif len(values) != count:
            raise QuantityError(f"{name} has {len(values)} entries, and temperature has {count}")
    return tuple(zip(*parsed.values(), strict=True))


def _fluid_column(name: str, raw: Any) -> tuple[float, ...]:
    entries = raw if isinstance(raw, list | tuple) else [raw]
    if not 1 <= len(entries) <= MOST_CURVE_POINTS:
        raise QuantityError(f"{name} has {len(entries)} entries; give 1 to {MOST_CURVE_POINTS}")
    try:
        values = tuple(parse_quantity(each, FLUID_COLUMNS[name]) for each in entries)
    except QuantityError as error:
        raise QuantityError(f"{name}: {error}") from None
    if min(values) <= 0:
        raise QuantityError(f"{name} has a value that is not above zero")
    return values


def _csv_columns(path: Path) -> dict[str, list[str]]:
    """Columns of a CSV file as texts with units, the units out of its header "name [unit]"."""
    try:
        lines = [line.split(",") for line in bounded_text(path).splitlines() if line.strip()]
    except InputError as error:
        raise QuantityError(str(error)) from None
    columns: dict[str, list[str]] = {}
    for position, head in enumerate(lines[0] if lines else []):
        name, _, unit = head.strip().partition("[")
        if any(len(line) != len(lines[0]) for line in lines):
            raise QuantityError(f"{path.name}: its lines do not all have {len(lines[0])} values")
        columns[name.strip()] = [f"{line[position].strip()} {unit.rstrip('] ')}" for line in lines[1:]]
    return columns


def _how_to_write(declaration: Declaration) -> str:
    if declaration.form == "choice":
        return f"give one of {', '.join(declaration.choices)}"
    if declaration.form in ("quantity", "standard volume flow", "energy price"):
        example = example_of(declaration.kind)
        return f"give for example {example}" if KINDS[declaration.kind].bare else f'give for example "{example}"'
    if declaration.form == "pair":
        return f'give for example ["{example_of(declaration.kind)}", "{example_of(declaration.kind)}"]'
    return f"give it: {declaration.meaning[0].lower()}{declaration.meaning[1:].rstrip('.')}"
