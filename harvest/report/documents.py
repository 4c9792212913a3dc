"""Results as JSON documents: SI numbers, null where there is none."""

from __future__ import annotations

import dataclasses
import json
from typing import TYPE_CHECKING, Any

import numpy as np

from harvest.model.case import DECLARATIONS, Case, assumptions, case_hash, default_text, explain, limits_text, value_at
from harvest.model.results import UNITS, Estimate
from harvest.quantities import unit_of
from harvest.report.reference import FORMS_WITH_UNIT
from harvest.version import VERSION

if TYPE_CHECKING:
    from harvest.model.fluid import FluidSheet
    from harvest.model.module_curve import ModuleCurve
    from harvest.study.bench_record import BenchFit
    from harvest.study.duty import DutyBalance
    from harvest.study.heat_pump_record import HeatPumpFit
    from harvest.study.size import Sizing
    from harvest.study.what_if import WhatIf


def plain(value: Any) -> Any:
    """Turn arrays, dataclasses and not-finite numbers into what JSON has."""
    if isinstance(value, np.ndarray):
        return [plain(item) for item in value.tolist()]
    if isinstance(value, dict):
        return {key: plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {item.name: plain(getattr(value, item.name)) for item in dataclasses.fields(value) if item.compare}
    if isinstance(value, float | np.floating):
        return float(value) if np.isfinite(value) else None
    return value


def json_text(document: Any) -> str:
    """One JSON document as text."""
    return json.dumps(document, indent=2, ensure_ascii=False, allow_nan=False)


def estimate_document(answer: Estimate) -> dict[str, Any]:
    """An estimate with the unit of each number."""
    document: dict[str, Any] = plain(answer)
    document["module_count"] = int(answer.module_count) if answer.valid else None
    return {**document, "units": UNITS}


def case_document(case: Case) -> dict[str, Any]:
    """A case as read: SI values by field, what was assumed, and its hash."""
    values = {
        path: plain(value_at(case, path))
        for path, declaration in DECLARATIONS.items()
        if declaration.section is None and value_at(case, path) is not None
    }
    return {
        "title": case.title,
        "valid": True,
        "values": values,
        "units": {path: unit_of(DECLARATIONS[path].kind) for path in values if DECLARATIONS[path].form == "quantity"},
        "assumptions": [item._asdict() for item in assumptions(case)],
        "case_hash": case_hash(case),
        "version": VERSION,
    }


def field_documents(field: str | None) -> list[dict[str, Any]]:
    """Declarations of all fields, or of the one asked for; raises InputError for an unknown one."""
    if field is not None:
        explain(field)
    return [
        {
            "field": path,
            "meaning": declaration.meaning,
            "unit": unit_of(declaration.kind) if declaration.form in FORMS_WITH_UNIT else None,
            "default": default_text(declaration),
            "allowed": limits_text(declaration) or None,
            "choices": dict(declaration.choices) or None,
        }
        for path, declaration in DECLARATIONS.items()
        if declaration.section is None and (field is None or path == field or path.endswith(f".{field}"))
    ]


WHAT_IF_KINDS = {
    "healthy_power": "power",
    "power": "power",
    "power_lost": "power",
    "voltage": "voltage",
    "string_current": "current",
    "other_current": "current",
    "hot_junction_rise": "temperature difference",
    "share_lost": "dimensionless",
    "share_lost_at_fixed_temperatures": "dimensionless",
    "time": "duration",
    "hot_fouling": "areal thermal resistance",
    "cold_fouling": "areal thermal resistance",
    "net_power": "power",
    "generated_power": "power",
    "hot_inlet_temperature": "temperature",
    "hot_outlet_temperature": "temperature",
    "gas_wall_temperature": "temperature",
    "water_dew_point": "temperature",
    "acid_dew_point": "temperature",
    "freezing": "temperature",
    "coldest_ambient": "temperature",
    "hot_temperature": "temperature",
    "cold_temperature": "temperature",
    "along": "length",
    "across": "length",
    "clamping_force_of_module": "force",
    "clamping_force_of_layer": "force",
}


def what_if_document(found: WhatIf) -> dict[str, Any]:
    """What can go wrong, with the estimate it stands on and the units of its numbers; `hours` are hours."""
    units = {**{name: unit_of(kind) for name, kind in WHAT_IF_KINDS.items()}, "hours": "h"}
    return {**plain(found), "estimate": estimate_document(found.estimate), "units": units, "version": VERSION}


SIZE_KINDS = {
    "curve.generated_power": "power",
    "curve.drive_power": "power",
    "curve.net_power": "power",
    "curve.marginal_power": "power",
    "front.net_power": "power",
    "most_net_power": "power",
    "last_module_power": "power",
    "least_net_watts_per_module": "power",
    "net_power_gain": "power",
    "net_power_without_window": "power",
    "wirings.voltage": "voltage",
    "wirings.open_circuit_voltage": "voltage",
    "wirings.net_power": "power",
    "duty.binned_net_power": "power",
}


def size_document(found: Sizing) -> dict[str, Any]:
    """A sizing: the best with its arrangement, the curve, what was tried and what binds; costs are in `currency`."""
    document: dict[str, Any] = plain(found)
    arrangement = document.pop("arrangement")
    best = {**arrangement, **estimate_document(found.best)}
    units = {name: unit_of(kind) for name, kind in SIZE_KINDS.items()}
    if found.duty is not None:
        document["duty"]["balance"] = duty_document(found.duty.balance)
    return {**document, "best": best, "wirings": plain(found.wirings), "units": units, "version": VERSION}


MOST_NOTES = 1000
"""Notes on a log that its JSON tells one by one."""
DUTY_KINDS = {
    **dict.fromkeys(
        (
            "covered_time",
            "answered_time",
            "time_on",
            "time_off",
            "time_without_answer",
            "time_not_covered",
            "time_beyond_limits",
        ),
        "duration",
    ),
    **dict.fromkeys(("yearly_time", "yearly_from_time"), "duration"),
    **dict.fromkeys(
        (
            "generated_energy",
            "converted_energy",
            "hot_drive_energy",
            "cold_drive_energy",
            "auxiliary_energy",
            "standby_energy",
            "net_energy",
            "yearly_net_energy",
        ),
        "energy",
    ),
    **dict.fromkeys(("mean_net_power", "net_power", "most_net_power"), "power"),
    **dict.fromkeys(("hottest_face_temperature", "hottest_junction_temperature"), "temperature"),
    "exceeded_share": "dimensionless",
    "log.usual_step": "duration",
}


def duty_document(found: DutyBalance) -> dict[str, Any]:
    """A design over a log: energies in J, times in s, and what was odd about the log."""
    from harvest.study.duty_log import NOTES

    log = found.log
    counts = {kind: sum(note.kind == kind for note in log.notes) for kind in NOTES}
    return {
        **plain(found),
        "answered_time": found.answered_time,
        "log": {
            "label": log.label,
            "usual_step": plain(log.usual_step),
            "held_cells": log.held_cells,
            "ignored": list(log.ignored),
            "note_counts": {kind: count for kind, count in counts.items() if count},
            "notes": [
                {"line": note.line, "kind": note.kind, "text": note.text, "done": NOTES[note.kind]}
                for note in log.notes[:MOST_NOTES]
            ],
        },
        "units": {name: unit_of(kind) for name, kind in DUTY_KINDS.items()},
    }


def fluid_document(sheet: FluidSheet) -> dict[str, Any]:
    """A fluid's properties with their units."""
    return {**plain(sheet), "units": sheet.units()}


MODULE_KINDS = {
    "hot_face_temperature": "temperature",
    "cold_face_temperature": "temperature",
    "mean_temperature": "temperature",
    "seebeck": "Seebeck coefficient",
    "resistance": "resistance",
    "conductance": "conductance",
    "figure_of_merit": "dimensionless",
    "maximum_efficiency": "dimensionless",
    "fill_factor": "dimensionless",
    "cooler.corrected_power": "power",
    "cooler.uncorrected_power": "power",
    "cooler.power_ratio": "dimensionless",
    "cooler.implied_heat": "power",
    "cooler.stated_heat": "power",
    **{
        f"cooler.{extraction}.{name}": kind
        for extraction in ("by_voltage", "by_heat")
        for name, kind in (
            ("seebeck", "Seebeck coefficient"),
            ("resistance", "resistance"),
            ("conductance", "conductance"),
        )
    },
    "curve.current": "current",
    "curve.voltage": "voltage",
    "curve.power": "power",
    "curve.heat_flow": "power",
    "curve.efficiency": "dimensionless",
    "temperatures": "temperature",
    "merit_curve": "dimensionless",
}


def module_document(curve: ModuleCurve, fit: BenchFit | HeatPumpFit | None) -> dict[str, Any]:
    """A module's parameters, points and curves, with the intervals of a fit where there is one."""
    document: dict[str, Any] = plain(curve)
    arrays = ("current", "voltage", "power", "heat_flow", "efficiency")
    document["curve"] = {name: document.pop(name) for name in arrays}
    document["interval"] = None
    if fit is not None:
        document |= {"interval": _intervals(fit), "record": plain(fit)}
    document["units"] = {name: unit_of(kind) for name, kind in MODULE_KINDS.items()}
    return document


def fit_document(fit: BenchFit | HeatPumpFit, unknown: str) -> dict[str, Any]:
    """What a bench record tells that does not tell every parameter: no curve, and why in `unknown`."""
    return {
        "way": "bench record",
        "source": fit.provenance,
        "unknown": unknown,
        "curve": None,
        "interval": _intervals(fit),
        "record": plain(fit),
        "units": {name: unit_of(MODULE_KINDS[name]) for name in ("seebeck", "resistance", "conductance")},
    }


def _intervals(fit: BenchFit | HeatPumpFit) -> dict[str, Any]:
    """Fitted parameters with their intervals, by name."""
    names = zip(fit.names, fit.values, fit.lower, fit.upper, fit.standard_errors, strict=True)
    return {
        name: {"value": plain(value), "lower": plain(low), "upper": plain(high), "standard_error": plain(error)}
        for name, value, low, high, error in names
    }
