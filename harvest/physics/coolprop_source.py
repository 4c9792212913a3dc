"""The one door to CoolProp: states of pure fluids and solutions, with the limits that it does not enforce itself.

Bell, Wronski, Quoilin, Lemort, Ind. Eng. Chem. Res. 53 (2014) 2498 (from memory). Imported at the first call only.
"""

from __future__ import annotations

import os
import sys
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from functools import cache
from importlib.util import find_spec
from pathlib import Path
from typing import Any

import numpy as np

from harvest.errors import RangeError
from harvest.physics.arrays import FloatArray

_FAST_IMPORT = "COOLPROP_DISABLE_SUPERANCILLARIES_ENTIRELY"
_importing = threading.Lock()
DILUTE_DENSITY = 1e-3
"""Molar density that counts as dilute [mol/m3]: steam is a gas at it down to its triple point."""


@contextmanager
def _quiet_standard_output() -> Iterator[None]:
    """Send file descriptor 1 nowhere: the library prints from C++, past sys.stdout."""
    if sys.stdout is not None:
        sys.stdout.flush()
    try:
        saved = os.dup(1)
    except OSError:
        yield
        return
    nowhere = os.open(os.devnull, os.O_WRONLY)
    try:
        os.dup2(nowhere, 1)
        yield
    finally:
        os.dup2(saved, 1)
        os.close(saved)
        os.close(nowhere)


def _library() -> Any:
    """Import CoolProp without its saturation expansions, six times faster with the same single-phase results."""
    loaded = sys.modules.get("CoolProp.CoolProp")
    if loaded is not None:
        return loaded
    with _importing, _quiet_standard_output():
        given = os.environ.get(_FAST_IMPORT)
        os.environ.setdefault(_FAST_IMPORT, "1")
        try:
            from CoolProp import CoolProp
        finally:
            if given is None:
                del os.environ[_FAST_IMPORT]
    return CoolProp


@cache
def library_version() -> str:
    """Version of the installed CoolProp, found without importing it."""
    found = find_spec("CoolProp")
    if found is not None and found.origin is not None:
        records = Path(found.origin).parent.parent.glob("[Cc]ool[Pp]rop-*.dist-info")
        versions = sorted(record.name.removesuffix(".dist-info").split("-", 1)[1] for record in records)
        if len(versions) == 1:
            return versions[0]
    return str(_library().get_global_param_string("version"))


@contextmanager
def _translated(what: str) -> Iterator[None]:
    """Turn the library's refusal into this package's error."""
    try:
        yield
    except ValueError as error:
        reason = " ".join(str(error).split())
        raise RangeError(f"the property library has no answer for {what} ({reason})") from None


def _pure_fluid(name: str, phase: str | None = None) -> Any:
    library = _library()
    state = library.AbstractState("HEOS", name)
    if phase is not None:
        state.specify_phase(getattr(library, phase))
    return state


def _sampled(state: Any, pressure: float, temperatures: FloatArray, what: str) -> FloatArray:
    """Enthalpy, heat capacity, density, viscosity and conductivity, (5, points), of a state at `temperatures`."""
    pressure_temperature = _library().PT_INPUTS
    samples = np.empty((5, len(temperatures)))
    with _translated(what):
        for index, temperature in enumerate(temperatures):
            state.update(pressure_temperature, pressure, float(temperature))
            samples[:, index] = (
                state.hmass(),
                state.cpmass(),
                state.rhomass(),
                state.viscosity(),
                state.conductivity(),
            )
    if not (np.isfinite(samples).all() and (samples[1:] > 0.0).all()):
        raise RangeError(f"the property library has no answer for {what} somewhere in the range")
    return samples


@dataclass(frozen=True)
class PureFluidLimits:
    """Limits of a pure fluid: temperatures [K] and pressures [Pa]."""

    lowest_temperature: float
    highest_temperature: float
    triple_pressure: float
    critical_pressure: float
    molar_mass: float


@cache
def pure_fluid_limits(name: str) -> PureFluidLimits:
    """Limits of a pure fluid or of air, as the library states them."""
    state = _pure_fluid(name)
    return PureFluidLimits(
        state.Tmin(), state.Tmax(), state.keyed_output(_library().iP_triple), state.p_critical(), state.molar_mass()
    )


def water_boiling_temperature(pressure: float) -> float:
    """Saturation temperature of water [K] at `pressure` [Pa], between the triple and the critical point."""
    with _translated("boiling water"):
        state = _pure_fluid("Water")
        state.update(_library().PQ_INPUTS, pressure, 0.0)
        return float(state.T())


def water_freezing_temperature(pressure: float) -> float:
    """Melting temperature of ordinary ice [K] at `pressure` [Pa], from the triple point to 100 MPa."""
    library = _library()
    with _translated("freezing water"):
        return float(_pure_fluid("Water").melting_line(library.iT, library.iP, pressure))


def liquid_water_samples(pressure: float, temperatures: FloatArray) -> FloatArray:
    """Enthalpy [J/kg], heat capacity [J/(kg K)], density, viscosity and conductivity [SI] of liquid water, (5, points).

    The phase is imposed, so the caller keeps `temperatures` [K] between freezing and boiling at `pressure` [Pa].
    """
    return _sampled(_pure_fluid("Water", "iphase_liquid"), pressure, temperatures, "liquid water")


def air_dew_temperature(pressure: float) -> float:
    """Temperature at which air begins to condense [K]; 0 where it never does.

    Parameters: `pressure` [Pa], below the critical one.
    """
    limits = pure_fluid_limits("Air")
    if pressure <= limits.triple_pressure:
        return 0.0
    with _translated("condensing air"):
        state = _pure_fluid("Air")
        state.update(_library().PQ_INPUTS, pressure, 1.0)
        return float(state.T())


def gaseous_air_samples(pressure: float, temperatures: FloatArray) -> FloatArray:
    """The five properties of air as a gas, (5, points), as `liquid_water_samples`; above its dew temperature."""
    return _sampled(_pure_fluid("Air", "iphase_gas"), pressure, temperatures, "air")


def dilute_gas_samples(name: str, temperatures: FloatArray) -> FloatArray:
    """Ideal-gas heat capacity [J/(mol K)], viscosity [Pa s] and conductivity [W/(m K)] at low density, (3, points)."""
    library = _library()
    state = _pure_fluid(name, "iphase_gas")
    samples = np.empty((3, len(temperatures)))
    with _translated(name):
        for index, temperature in enumerate(temperatures):
            state.update(library.DmolarT_INPUTS, DILUTE_DENSITY, float(temperature))
            samples[:, index] = state.cp0molar(), state.viscosity(), state.conductivity()
    return samples


@dataclass(frozen=True)
class SolutionLimits:
    """Limits of one incompressible solution at one fraction, temperatures [K]."""

    lowest_fraction: float
    highest_fraction: float
    lowest_temperature: float
    highest_temperature: float
    freezing_temperature: float


def _solution(code: str, fraction: float) -> Any:
    state = _library().AbstractState("INCOMP", code)
    # Codes beginning with A (ASHRAE) are by volume, the others (Melinder) by mass.
    (state.set_volu_fractions if code.startswith("A") else state.set_mass_fractions)([fraction])
    return state


def solution_limits(code: str, fraction: float) -> SolutionLimits:
    """Limits of a glycol solution as the library states them; no temperatures (NaN) where the fraction is outside."""
    library = _library()
    state = _solution(code, fraction)
    lowest, highest = state.keyed_output(library.ifraction_min), state.keyed_output(library.ifraction_max)
    if not lowest <= fraction <= highest:
        return SolutionLimits(lowest, highest, np.nan, np.nan, np.nan)
    freezing = state.keyed_output(library.iT_freeze)
    return SolutionLimits(lowest, highest, state.Tmin(), state.Tmax(), freezing)


def solution_samples(code: str, fraction: float, pressure: float, temperatures: FloatArray) -> FloatArray:
    """The five properties of a glycol solution, (5, points), as `liquid_water_samples`.

    Its heat capacity leaves out the pressure, which its enthalpy has: it is about 7e-5 a bar off the slope.
    """
    return _sampled(_solution(code, fraction), pressure, temperatures, "the glycol solution")
