"""The limits of a case against what a search found, many choices at a time."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from harvest.model.case import Case
from harvest.physics.arrays import BoolArray, FloatArray

LIMITS = {
    "hot_face_temperature": ("hottest_face_temperature", 1.0),
    "hot_face_temperature_without_load": ("open_circuit_face_temperature", 1.0),
    "cold_face_temperature": ("warmest_cold_face_temperature", 1.0),
    "hot_pressure_drop": ("hot_pressure_drop", 1.0),
    "cold_pressure_drop": ("cold_pressure_drop", 1.0),
    "back_pressure": ("hot_pressure_drop", 1.0),
    "minimum_hot_outlet_temperature": ("hot_outlet_temperature", -1.0),
    "maximum_cold_outlet_temperature": ("cold_outlet_temperature", 1.0),
    "maximum_open_circuit_voltage": ("highest_open_circuit_voltage", 1.0),
    "maximum_length": ("stack_length", 1.0),
    "maximum_width": ("stack_width", 1.0),
    "maximum_height": ("stack_height", 1.0),
    "maximum_module_mass": ("module_mass", 1.0),
}
"""Limits of the case with the result they bound, from above (1) or below (-1)."""
WINDOW = "converter_window"
WITHOUT_LOAD = ("hot_face_temperature_without_load", "maximum_open_circuit_voltage")
"""Limits of what stands without load, which takes a solution of its own."""
OF_MODULE = ("hot_face_temperature", "hot_face_temperature_without_load")
ROUNDING = 1e-9
"""Share by which a voltage that a converter holds may lie beside its window."""


def limit_of(case: Case, name: str) -> float:
    """A limit in SI; NaN where the case has none. A hot face obeys the module's limit too."""
    given = getattr(case.limits, name)
    limit = np.nan if given is None else float(given)
    if name == "hot_face_temperature" or (name in OF_MODULE and given is not None):
        of_module = case.module.maximum_hot_face_temperature
        return float(np.fmin(limit, np.nan if of_module is None else of_module))
    return limit


def limit_path(name: str) -> str:
    """Field of the case file in which a limit stands."""
    return f"electrical.{name}" if name == WINDOW else f"limits.{name}"


def asks_without_load(case: Case) -> bool:
    """Whether a limit concerns the stack without load."""
    return any(getattr(case.limits, name) is not None for name in WITHOUT_LOAD)


def bounded_results(case: Case) -> set[str]:
    """Results that the case's limits look at."""
    found = {result for name, (result, _) in LIMITS.items() if np.isfinite(limit_of(case, name))}
    return found | ({"voltage"} if case.electrical.converter_window is not None else set())


def broken_limits(case: Case, results: Mapping[str, FloatArray]) -> dict[str, BoolArray]:
    """Where each limit of the case is broken, (choices,), by the names of limits; results are in SI."""
    limits = {name: limit_of(case, name) for name in LIMITS}
    broken = {
        name: np.asarray(LIMITS[name][1] * results[LIMITS[name][0]] > LIMITS[name][1] * limit)
        for name, limit in limits.items()
        if np.isfinite(limit)
    }
    window = case.electrical.converter_window
    if window is not None:
        voltage = results["voltage"]
        broken[WINDOW] = (voltage < window[0] * (1 - ROUNDING)) | (voltage > window[1] * (1 + ROUNDING))
    return broken
