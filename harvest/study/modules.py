"""A module from whatever a person has of it: a case, a module record, a bundled name, or a bench record."""

from __future__ import annotations

import json
import re
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from harvest.errors import InputError
from harvest.model.case import Case
from harvest.model.case_text import bounded_text, toml_document
from harvest.model.module_curve import ModuleCurve, module_curve
from harvest.model.reading import DATA, load_case, read_case
from harvest.physics.fluids import FLUIDS, FluidSpec
from harvest.quantities import parse_quantity
from harvest.study.bench_record import BenchFit, fit_bench_record, read_bench_record
from harvest.study.heat_pump_record import HeatPumpFit, ThermalMass, fit_heat_pump_record, read_heat_pump_record

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
class BesideRecord:
    """What a bench record does not say itself.

    `coolant`: the fluid whose flow gives the heat of a steady record; `hot_mass`, `cold_mass` and `ambient_temperature`
    [K]: the bodies between which a transient record was taken; `footprint` of the module, such as "40 mm".
    """

    coolant: FluidSpec | None = None
    hot_mass: ThermalMass | None = None
    cold_mass: ThermalMass | None = None
    ambient_temperature: float | None = None
    footprint: str | None = None


def thermal_mass(text: str) -> ThermalMass:
    """Read a body from "0.35 kg water" or "0.8 kg, 900 J/(kg K)"; raises InputError."""
    parts = _MASS.fullmatch(text)
    if parts is None:
        raise InputError(f'{text[:60]!r} is no thermal mass; write "0.35 kg water" or "0.8 kg, 900 J/(kg K)"')
    mass = parse_quantity(parts[1], "mass")
    if parts[2] in FLUIDS:
        return ThermalMass(mass, fluid=FluidSpec(name=parts[2]))
    return ThermalMass(mass, heat_capacity=parse_quantity(parts[2], "heat capacity"))


NOTHING_BESIDE = BesideRecord()


def load_module(source: str, *, overrides: tuple[str, ...] = (), beside: BesideRecord = NOTHING_BESIDE) -> LoadedModule:
    """Read a module by a bundled name, or from a file: a case, a module record (TOML), or a bench record (CSV).

    Parameters: `overrides`, texts "module.field=value"; `beside`, what a bench record needs besides: with two masses it
    is taken as a transient record of the module driven as a heat pump.
    Raises InputError and CaseError for faults, NoAnswerError where a bench record does not tell the parameters.
    """
    path = Path(source)
    if path.suffix.lower() == ".csv":
        fit = _fit(path, beside)
        record = fitted_record(fit, path.name, beside.footprint or UNKNOWN_FOOTPRINT)
        return LoadedModule(f"Module of {path.name}", _alone(record, path.parent, overrides, path.name), record, fit)
    if beside != NOTHING_BESIDE:
        raise InputError("coolant, masses, ambient and footprint go with a bench record (CSV) only; leave them out")
    bundled = DATA / "modules" / f"{source.replace(' ', '-')}.toml"
    if not path.is_file() and bundled.is_file():
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


def _fit(path: Path, beside: BesideRecord) -> BenchFit | HeatPumpFit:
    """Fit a steady record, or a transient one where the masses are given."""
    if beside.hot_mass is None and beside.cold_mass is None:
        return fit_bench_record(read_bench_record(path, coolant=beside.coolant))
    if beside.hot_mass is None or beside.cold_mass is None or beside.ambient_temperature is None:
        raise InputError("a transient record needs the hot mass, the cold mass and the ambient temperature")
    return fit_heat_pump_record(
        read_heat_pump_record(path), beside.hot_mass, beside.cold_mass, beside.ambient_temperature
    )


def _alone(module: dict[str, Any], folder: Path, overrides: tuple[str, ...], label: str) -> Case:
    """Return a case around one module, so that it is read and judged as any other; its sides do not matter."""
    side = 'fluid = "reservoir"\ninlet_temperature = "{}"\nfilm_coefficient = "1000 W/(m^2 K)"\n'
    stack = 'layers = 1\nrows = 1\ncolumns = 1\nrow_pitch = "10 m"\ncolumn_pitch = "10 m"\n'
    lines = [f"{key} = {json.dumps(value)}" for key, value in module.items()]
    text = "\n".join(
        ["[module]", *lines, "[hot]", side.format("150 degC"), "[cold]", side.format("50 degC"), "[stack]", stack]
    )
    return read_case(text, overrides, label=label, folder=folder)


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


def fitted_record(fit: BenchFit | HeatPumpFit, label: str, footprint: str) -> dict[str, Any]:
    """Return a module record of a fit, with parameters as polynomials in (T - 300 K).

    Raises InputError where the record does not tell all three parameters.
    """
    missing = [name for name in ("seebeck", "resistance", "conductance") if name not in fit.names]
    if missing:
        raise InputError(f"{label}: does not tell {' and '.join(missing)}; " + " ".join(fit.unknown))
    if isinstance(fit, BenchFit):
        lowest, highest = fit.lowest_temperature, fit.highest_temperature
        curves = {name: list(fit.polynomial(name)) for name in ("seebeck", "resistance", "conductance")}
    else:
        lowest, highest = float(fit.fitted_cold_temperature.min()), float(fit.fitted_hot_temperature.max())
        curves = {name: [fit.value(name)] for name in ("seebeck", "resistance", "conductance")}
    return {
        "description": f"Module fitted to {label}",
        "source": fit.provenance,
        "footprint": [footprint, footprint],
        "minimum_temperature": f"{lowest:.2f} K",
        "maximum_temperature": f"{highest:.2f} K",
        **curves,
    }


def curve_of(loaded: LoadedModule, hot_face_temperature: float, cold_face_temperature: float) -> ModuleCurve:
    """Return the curves of a loaded module between two faces [K]; of a fit with the fit's own provenance."""
    curve = module_curve(loaded.case, hot_face_temperature, cold_face_temperature)
    if loaded.fit is None:
        return curve
    return replace(curve, way="bench record", source=loaded.fit.provenance)
