"""A fluid's properties for a person: values at temperatures, range, freezing, boiling, source."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from harvest.errors import InputError, QuantityError, RangeError
from harvest.model.property_store import stored_table
from harvest.physics.arrays import FloatArray
from harvest.physics.combustion import water_dew_point
from harvest.physics.fluids import FLUIDS, FluidBatch, FluidSpec, expansion_range
from harvest.quantities import parse_quantity, unit_of

STANDARD_ATMOSPHERE = 101325.0
"""What a gauge pressure adds to where there is no site [Pa]."""
COMPOSITION = ("mass_fraction", "volume_fraction", "excess_air_ratio", "dry_oxygen", "intake_humidity")
PROPERTY_KINDS = {
    "temperature": "temperature",
    "density": "density",
    "heat_capacity": "heat capacity",
    "viscosity": "viscosity",
    "conductivity": "conductivity",
    "prandtl": "dimensionless",
}


@dataclass(frozen=True)
class FluidSheet:
    """Properties of one fluid at one pressure [Pa]; arrays (temperatures,), SI. NaN where a number does not apply."""

    label: str
    pressure: float
    lower_limit: float
    lower_reason: str
    upper_limit: float
    upper_reason: str
    freezing: float
    boiling: float
    water_dew_point: float
    molar_mass: float
    temperature: FloatArray
    density: FloatArray
    heat_capacity: FloatArray
    viscosity: FloatArray
    conductivity: FloatArray
    prandtl: FloatArray
    source: str

    def units(self) -> dict[str, str]:
        """SI unit of each property."""
        return {name: unit_of(kind) for name, kind in PROPERTY_KINDS.items()}


def quantity_of(name: str, given: str | float, kind: str) -> float:
    """SI value of an option's text; raises InputError that names the option."""
    try:
        return parse_quantity(given, kind, ambient_pressure=STANDARD_ATMOSPHERE)
    except QuantityError as error:
        raise InputError(f"{name}: {error}") from None


def fluid(
    name: str,
    *,
    at: Sequence[str | float] = (),
    pressure: str | float = 101325.0,
    fuel: str | None = None,
    **composition: str | float,
) -> FluidSheet:
    """Properties of a fluid at temperatures.

    Parameters: `name`, one of water, ethylene glycol, propylene glycol, air, exhaust gas; `at`, temperatures as texts
    with units or [K] (none: a few over the range); `pressure` as text or absolute [Pa]; `fuel` and `composition`
    (mass_fraction, volume_fraction, excess_air_ratio, dry_oxygen, intake_humidity [-]) where the fluid has them.
    Raises InputError for a name or composition that is unknown, RangeError outside the fluid's range.
    """
    known = [each for each in FLUIDS if each != "table"]
    if name not in known:
        raise InputError(f"fluid: {name!r} is not known; known are {', '.join(known)}")
    unknown = sorted(set(composition) - set(COMPOSITION))
    if unknown:
        raise InputError(f"fluid: {unknown[0]!r} is not part of a composition; known are {', '.join(COMPOSITION)}")
    pascal = quantity_of("pressure", pressure, "pressure") if isinstance(pressure, str) else pressure
    kelvin = np.array([quantity_of("at", each, "temperature") if isinstance(each, str) else each for each in at])
    numbers: dict[str, Any] = {key: quantity_of(key, value, "dimensionless") for key, value in composition.items()}
    spec = FluidSpec(name=name, fuel=fuel, **numbers)
    span = kelvin if kelvin.size else np.array([300.0])
    lower, upper = expansion_range(name, np.array([span.min()]), np.array([span.max()]))
    table = stored_table(spec, pascal, float(lower[0]), float(upper[0]))
    if not kelvin.size:
        first, last = max(table.lower, table.lower_limit), min(table.upper, table.upper_limit)
        kelvin = np.linspace(first, last, 5)
    for each in kelvin:
        if not table.lower_limit <= each <= table.upper_limit:
            raise RangeError(f"at: {table.outside(float(each))}")
    batch = FluidBatch.stack([table], np.zeros(1, dtype=np.int64))
    column = kelvin[:, None]
    heat_capacity, viscosity, conductivity = (item[:, 0] for item in batch.film_properties(column))
    dew = float(water_dew_point(np.array(table.water_fraction * pascal))) if table.water_fraction > 0 else np.nan
    return FluidSheet(
        table.label,
        pascal,
        table.lower_limit,
        table.lower_reason,
        table.upper_limit,
        table.upper_reason,
        table.freezing,
        table.boiling,
        dew,
        table.molar_mass,
        kelvin,
        batch.density(column)[:, 0],
        heat_capacity,
        viscosity,
        conductivity,
        heat_capacity * viscosity / conductivity,
        table.source,
    )
