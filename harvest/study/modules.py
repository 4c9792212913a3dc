"""A module from whatever a person has of it: a case, a module record, a bundled name, or a bench record."""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import tomli_w

from harvest.errors import CaseError, InputError, QuantityError
from harvest.model.case import Case
from harvest.model.case_text import bounded_text, toml_document
from harvest.model.module_curve import ModuleCurve, module_curve
from harvest.model.reading import DATA, load_case, read_case
from harvest.physics.fluids import FLUIDS, FluidSpec
from harvest.quantities import one_line, parse_quantity
from harvest.study.bench_record import NEEDED, PARAMETERS, BenchFit, fit_bench_record, read_bench_record
from harvest.study.heat_pump_record import HeatPumpFit, ThermalMass, fit_heat_pump_record, read_heat_pump_record
from harvest.study.measurement_table import column_names
from harvest.study.screen import LARGEST_MERIT

_MASS = re.compile(r"\s*([0-9.eE+-]+\s*(?:kg|g|lb))\s*(?:,|of )?\s*(\S.*?)\s*")
UNKNOWN_FOOTPRINT = "40 mm"
"""Footprint of a module of which only a bench record is known; it does not matter to the module by itself."""


@dataclass(frozen=True)
class LoadedModule:
    """A module ready to be asked: a case that holds it, its record as written to a file, and a fit if it has one."""

    title: str
    case: Case
    record: dict[str, Any]
    fit: BenchFit | HeatPumpFit | None = None


@dataclass(frozen=True)
class PartlyKnownModule:
    """What a bench record that does not tell every parameter gives: its fit, and one sentence on what is unknown."""

    title: str
    fit: BenchFit | HeatPumpFit
    unknown: str


@dataclass(frozen=True)
class BesideRecord:
    """What a bench record does not say itself.

    `coolant`: the fluid whose flow gives the heat of a steady record; `hot_mass`, `cold_mass` and `ambient_temperature`
    [K]: the bodies between which a transient record was taken; `footprint` of the module, such as "40 mm";
    `figure_of_merit`: Z T [-] assumed at the record's mean temperature, for a record without heat.
    """

    coolant: FluidSpec | None = None
    hot_mass: ThermalMass | None = None
    cold_mass: ThermalMass | None = None
    ambient_temperature: float | None = None
    footprint: str | None = None
    figure_of_merit: float | None = None


def thermal_mass(text: str) -> ThermalMass:
    """Read a body from "0.35 kg water" or "0.8 kg, 900 J/(kg K)"; raises InputError."""
    parts = _MASS.fullmatch(text)
    if parts is None:
        raise InputError(f'{text[:60]!r} is no thermal mass; write "0.35 kg water" or "0.8 kg, 900 J/(kg K)"')
    mass = parse_quantity(parts[1], "mass")
    known = [name for name, fluid in FLUIDS.items() if not fluid.takes]
    if parts[2] in known:
        return ThermalMass(mass, fluid=FluidSpec(name=parts[2]))
    try:
        return ThermalMass(mass, heat_capacity=parse_quantity(parts[2], "heat capacity"))
    except QuantityError:
        raise InputError(
            f"thermal mass: {one_line(parts[2], 60)!r} is neither a fluid known here ({', '.join(known)}) nor a heat "
            'capacity such as "900 J/(kg K)"'
        ) from None


NOTHING_BESIDE = BesideRecord()


def load_module(source: str, *, overrides: tuple[str, ...] = (), beside: BesideRecord = NOTHING_BESIDE) -> LoadedModule:
    """Read a module by a bundled name, or from a file: a case, a module record (TOML), or a bench record (CSV).

    Parameters: `overrides`, texts "module.field=value", of a case or module record only; `beside`, what a bench record
    needs besides: with two masses it is taken as a transient record of the module driven as a heat pump.
    Raises InputError and CaseError for faults, also where a bench record does not tell a parameter; NoAnswerError where
    its readings determine no module.
    """
    loaded = load_module_or_fit(source, overrides=overrides, beside=beside)
    if isinstance(loaded, PartlyKnownModule):
        raise InputError(loaded.unknown)
    return loaded


def load_module_or_fit(
    source: str, *, overrides: tuple[str, ...] = (), beside: BesideRecord = NOTHING_BESIDE
) -> LoadedModule | PartlyKnownModule:
    """Read a module as `load_module`; of a bench record that does not tell every parameter what it does tell."""
    path = Path(source)
    if path.suffix.lower() == ".csv":
        return _of_bench_record(path, overrides, beside)
    _refuse_beside(beside)
    bundled = DATA / "modules" / f"{source.replace(' ', '-')}.toml"
    if not path.exists():
        if not bundled.is_file():
            known = ", ".join(sorted(each.stem for each in (DATA / "modules").glob("*.toml")))
            raise InputError(f"{one_line(source, 100)}: no such file and no bundled module; bundled are {known}")
        path = bundled
    text = bounded_text(path)
    document = toml_document(text, path.name)
    if "module" in document or "hot" in document:
        case = load_case(path, overrides)
        given = case.given.get("module", {})
        return LoadedModule(case.title or f"Module of {path.name}", case, _whole_record(given, path.parent))
    record = _whole_record(document, path.parent)
    title = str(record.get("description") or f"Module of {path.name}")
    return LoadedModule(title, _alone({"use": str(path.resolve())}, path.parent, overrides, path.name), record)


def read_module(
    text: str, *, label: str, overrides: tuple[str, ...] = (), beside: BesideRecord = NOTHING_BESIDE
) -> LoadedModule:
    """Read the text of a case or a module record; `label` names it in faults, relative paths start where one is."""
    _refuse_beside(beside)
    document = toml_document(text, label)
    if "module" in document or "hot" in document:
        case = read_case(text, overrides, label=label, folder=Path())
        return LoadedModule(
            case.title or f"Module of {label}", case, _whole_record(case.given.get("module", {}), Path())
        )
    case = _alone(document, Path(), overrides, label)  # first, because it judges the document
    record = _whole_record(document, Path())
    return LoadedModule(str(record.get("description") or f"Module of {label}"), case, record)


def _refuse_beside(beside: BesideRecord) -> None:
    if beside != NOTHING_BESIDE:
        raise InputError(
            "coolant, masses, ambient, footprint and figure of merit go with a bench record (CSV) only; leave them out"
        )


def _of_bench_record(path: Path, overrides: tuple[str, ...], beside: BesideRecord) -> LoadedModule | PartlyKnownModule:
    """Fit a bench record, with its conductance from an assumed figure of merit where one is given."""
    if overrides:
        raise InputError(
            "--set goes with a case or a module record, not with a bench record (CSV); write a record with --write and "
            "change that"
        )
    fit = _fit(path, beside)
    title, footprint = f"Module of {path.name}", beside.footprint or UNKNOWN_FOOTPRINT
    missing = _not_told(fit)
    merit = beside.figure_of_merit
    if merit is not None and "conductance" not in missing:
        raise InputError(f"figure-of-merit: {path.name} tells the conductance itself; leave the option out")
    if missing and (merit is None or missing != ["conductance"]):
        return PartlyKnownModule(title, fit, _unknown_sentence(fit, path.name))
    record = fitted_record(fit, path.name, footprint, merit)
    return LoadedModule(title, _alone(record, path.parent, (), path.name), record, fit)


def _fit(path: Path, beside: BesideRecord) -> BenchFit | HeatPumpFit:
    """Fit a steady record, or a transient one where the masses are given."""
    names = column_names(path)
    given = (beside.hot_mass, beside.cold_mass, beside.ambient_temperature)
    is_transient = "time" in names and not set(NEEDED) <= set(names)
    if not is_transient and all(each is None for each in given):
        return fit_bench_record(read_bench_record(path, coolant=beside.coolant))
    if beside.hot_mass is None or beside.cold_mass is None or beside.ambient_temperature is None:
        raise InputError(f"{path.name}: transient record: give --hot-mass, --cold-mass and --ambient")
    return fit_heat_pump_record(
        read_heat_pump_record(path), beside.hot_mass, beside.cold_mass, beside.ambient_temperature
    )


def _alone(module: dict[str, Any], folder: Path, overrides: tuple[str, ...], label: str) -> Case:
    """Return a case around one module, so that it is read and judged as any other; its sides do not matter."""
    side = 'fluid = "reservoir"\ninlet_temperature = "{}"\nfilm_coefficient = "1000 W/(m^2 K)"\n'
    stack = 'layers = 1\nrows = 1\ncolumns = 1\nrow_pitch = "10 m"\ncolumn_pitch = "10 m"\n'
    sections = ["[hot]", side.format("150 degC"), "[cold]", side.format("50 degC"), "[stack]", stack]
    text = "\n".join([tomli_w.dumps({"module": module}), *sections])
    try:
        return read_case(text, overrides, label=label, folder=folder)
    except CaseError as error:
        if "use" in module:
            raise
        # the lines are those of this text, which nobody has seen
        place = re.compile(rf"{re.escape(label)}:[0-9]+: ")
        raise CaseError([place.sub(f"{label}: ", fault, count=1) for fault in error.faults]) from None


def _whole_record(module: dict[str, Any], folder: Path) -> dict[str, Any]:
    """Return a module's fields with those of the record that it uses."""
    own = {key: value for key, value in module.items() if key != "use"}
    if "use" not in module:
        return own
    name = str(module["use"])
    bundled = DATA / "modules" / f"{name.replace(' ', '-')}.toml"
    path = bundled if bundled.is_file() else folder / name
    record = toml_document(bounded_text(path), path.name)
    for key, value in own.items():
        both = isinstance(value, dict) and isinstance(record.get(key), dict)
        record[key] = {**record[key], **value} if both else value
    return record


def _not_told(fit: BenchFit | HeatPumpFit) -> list[str]:
    return [name for name in PARAMETERS if name not in fit.names]


def _unknown_sentence(fit: BenchFit | HeatPumpFit, label: str) -> str:
    missing = _not_told(fit)
    about = [text for text in fit.unknown if text.partition(" unknown: ")[0] in missing]
    way_out = ["or assume a conductance by --figure-of-merit"] * (missing == ["conductance"])
    return "; ".join((f"{label}: does not tell {' and '.join(missing)}", *about, *way_out))


def fitted_record(
    fit: BenchFit | HeatPumpFit, label: str, footprint: str, figure_of_merit: float | None = None
) -> dict[str, Any]:
    """Return a module record of a fit, with parameters as polynomials in (T - 300 K).

    `figure_of_merit` Z T [-] gives a conductance K = a^2 T / (R Z T) to a steady record that does not tell it, at the
    mean temperature of its faces, and the source says so.
    Raises InputError where the record does not tell all three parameters, or for the figure of merit.
    """
    missing = _not_told(fit)
    source, assumed = fit.provenance, {}
    if missing == ["conductance"] and figure_of_merit is not None and isinstance(fit, BenchFit):
        if not 0.0 < figure_of_merit <= LARGEST_MERIT:
            raise InputError(f"figure-of-merit: {figure_of_merit:g} is not possible; give above 0 to {LARGEST_MERIT:g}")
        temperature = fit.reference_temperature
        conductance = fit.value("seebeck") ** 2 * temperature / (fit.value("resistance") * figure_of_merit)
        assumed = {"conductance": [conductance]}
        source += (
            f"; conductance assumed, not measured: from a figure of merit Z T of {figure_of_merit:g} at "
            f"{temperature - 273.15:.0f} degC"
        )
    elif missing:
        raise InputError(_unknown_sentence(fit, label))
    told = [name for name in PARAMETERS if name not in missing]
    if isinstance(fit, BenchFit):
        lowest, highest = fit.lowest_temperature, fit.highest_temperature
        curves = {name: list(fit.polynomial(name)) for name in told}
    else:
        lowest, highest = float(fit.fitted_cold_temperature.min()), float(fit.fitted_hot_temperature.max())
        curves = {name: [fit.value(name)] for name in told}
    return {
        "description": f"Module fitted to {label}",
        "source": source,
        "footprint": [footprint, footprint],
        "minimum_temperature": f"{lowest:.2f} K",
        "maximum_temperature": f"{highest:.2f} K",
        **curves,
        **assumed,
    }


def curve_of(loaded: LoadedModule, hot_face_temperature: float, cold_face_temperature: float) -> ModuleCurve:
    """Return the curves of a loaded module between two faces [K]; of a fit with the fit's own provenance."""
    curve = module_curve(loaded.case, hot_face_temperature, cold_face_temperature)
    if loaded.fit is None:
        return curve
    return replace(curve, way="bench record", source=str(loaded.record["source"]))
