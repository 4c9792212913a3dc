"""Fluids: what each one is, where it is served, and its properties against temperature at one pressure.

Every property is a Chebyshev expansion in temperature, so that a batch of different fluids costs what one fluid costs.
Heat capacity is the derivative of the enthalpy expansion: a balance in enthalpy and one in heat capacity agree.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, fields, replace
from functools import lru_cache
from math import ceil, isfinite, isnan, nan

import numpy as np

from harvest.errors import RangeError
from harvest.physics import coolprop_source as library
from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.physics.chebyshev import (
    chebyshev_coefficients,
    chebyshev_nodes,
    derivative,
    expansion_value,
    integral,
    without_tail,
)
from harvest.physics.combustion import (
    GAS_CONSTANT,
    HIGHEST_DRY_OXYGEN,
    SPECIES,
    SPECIES_MOLAR_MASS,
    excess_air_from_dry_oxygen,
    exhaust_composition,
    fuel_named,
    mixture_molar_mass,
    wassiljewa_conductivity,
    wilke_viscosity,
)

ENTHALPY, HEAT_CAPACITY, DENSITY, VISCOSITY, CONDUCTIVITY = range(5)
FILM_PROPERTIES = (HEAT_CAPACITY, VISCOSITY, CONDUCTIVITY)

NODES = 64
TAIL = 1e-11
ENTHALPY_TAIL = 1e-13
CONDUCTIVITY_TAIL = 3e-8
COARSEST_TAIL = 1e-7
COARSEST_CONDUCTIVITY_TAIL = 1e-4
"""Last terms above this part of the largest are refused: the fluid is too near its critical point. The published
conductivities of water and air have kinks of up to 1e-4 where their critical enhancement begins."""
GAS_RANGE_STEP = 100.0
HIGHEST_WATER_PRESSURE = 16e6
GLYCOL_REFERENCE_DENSITY = {"ethylene glycol": 1113.5, "propylene glycol": 1036.3, "water": 998.2}
"""Densities at 20 degC [kg/m3] that turn a volume fraction into a mass fraction."""
GLYCOL_MOLAR_MASS = {"ethylene glycol": 0.062068, "propylene glycol": 0.076095, "water": 0.018015}
TABLE_TOLERANCE = 1e-3
TABLE_EXACT_POINTS = 4
TABLE_HIGHEST_DEGREE = 10
CONSTANT_TABLE_RANGE = (1.0, 5000.0)

PUBLISHED_END = "the published data end"
OWN_DATA = 'give fluid = "table" with the supplier\'s data'


@dataclass(frozen=True)
class FluidSpec:
    """What a case says about a fluid.

    Of glycol `mass_fraction` or `volume_fraction` (at 20 degC) [-]; of exhaust gas `fuel` with exactly one of
    `excess_air_ratio` [-] and `dry_oxygen` (mole fraction of the dried gas), and `intake_humidity` [kg water per kg dry
    air]; of a table rows of temperature [K], density [kg/m3], heat capacity [J/(kg K)], viscosity [Pa s] and
    conductivity [W/(m K)].
    """

    name: str
    mass_fraction: float | None = None
    volume_fraction: float | None = None
    fuel: str | None = None
    excess_air_ratio: float | None = None
    dry_oxygen: float | None = None
    intake_humidity: float = 0.0
    table: tuple[tuple[float, float, float, float, float], ...] | None = None


@dataclass(frozen=True, kw_only=True, eq=False, repr=False)
class FluidLimits:
    """Where a fluid is served at one pressure, and why no further; temperatures [K], NaN where not applicable.

    `data_lower` is where the data begin whatever the phase.
    """

    label: str
    lower_limit: float
    upper_limit: float
    data_lower: float
    lower_reason: str
    upper_reason: str
    lower_advice: str = ""
    upper_advice: str = ""
    freezing: float = nan
    boiling: float = nan

    def outside(self, temperature: float) -> str:
        """Sentence for a temperature [K] outside the limits: the limits, the reason and what to do."""
        below = temperature < self.lower_limit
        lowest = self.lower_limit if below else self.data_lower
        reason, advice = (self.lower_reason, self.lower_advice) if below else (self.upper_reason, self.upper_advice)
        text = f"{temperature:.6g} K is outside {lowest:.6g} to {self.upper_limit:.6g} K for {self.label} ({reason})"
        celsius = [round(each - 273.15, 1) + 0.0 for each in (temperature, lowest, self.upper_limit)]
        text = f"{text}; {advice}" if advice else text
        return text + "; in degC {:g}, allowed {:g} to {:g}".format(*celsius)


@dataclass(frozen=True, kw_only=True, eq=False, repr=False)
class FluidTable(FluidLimits):
    """One fluid at one pressure, expanded over `lower` .. `upper` [K].

    `coefficients` (5, terms): Chebyshev in x = (2 T - lower - upper) / (upper - lower), rows ENTHALPY [J/kg],
    HEAT_CAPACITY [J/(kg K)], DENSITY [kg/m3], VISCOSITY (logarithm of viscosity over `viscosity_scale` [Pa s]),
    CONDUCTIVITY [W/(m K)]. `water_fraction` [-] by moles in a gas, else 0. `molar_mass` [kg/mol], NaN for liquids.
    """

    lower: float
    upper: float
    coefficients: FloatArray
    viscosity_scale: float
    water_fraction: float = 0.0
    molar_mass: float = nan
    source: str


@dataclass(frozen=True, eq=False, repr=False)
class FluidRecord:
    """One entry of `FLUIDS`: what it is, its source, the fields of FluidSpec it takes, and how its table is built."""

    description: str
    source: str
    takes: tuple[str, ...]
    limits: str
    is_gas: bool
    build: Callable[[FluidSpec, float, float, float], FluidTable]


def _bar(pressure: float) -> str:
    return f"{pressure / 1e5:.4g} bar"


def _expanded(
    limits: FluidLimits,
    lower: float,
    upper: float,
    enthalpy: FloatArray,
    others: FloatArray,
    source: str,
    water_fraction: float = 0.0,
    molar_mass: float = nan,
) -> FluidTable:
    """Table from enthalpy coefficients (terms,), and density, viscosity and conductivity (3, NODES) at the nodes."""
    viscosity_scale = float(others[1, NODES // 2])
    others = others.copy()
    others[1] = np.log(others[1] / viscosity_scale)
    expanded = chebyshev_coefficients(others)
    coarsest_tails = (COARSEST_TAIL, COARSEST_TAIL, COARSEST_TAIL, COARSEST_CONDUCTIVITY_TAIL)
    for row, coarsest in zip((enthalpy, *expanded), coarsest_tails, strict=True):
        if np.abs(row[-4:]).max() > coarsest * np.abs(row).max():
            raise RangeError(
                f"{limits.label} changes too fast between {lower:.6g} and {upper:.6g} K at this pressure: "
                "it is too near its critical point; change the pressure or the temperature"
            )
    enthalpy = enthalpy.copy()
    enthalpy[0] -= expansion_value(enthalpy, np.zeros(1))[0]
    enthalpy = without_tail(enthalpy, ENTHALPY_TAIL)
    tails = (TAIL, TAIL, CONDUCTIVITY_TAIL)
    shortened = [without_tail(row, tail) for row, tail in zip(expanded, tails, strict=True)]
    rows = [enthalpy, derivative(enthalpy, lower, upper), *shortened]
    return _table(limits, lower, upper, rows, viscosity_scale, source, water_fraction, molar_mass)


def _table(
    limits: FluidLimits,
    lower: float,
    upper: float,
    rows: Sequence[FloatArray],
    viscosity_scale: float,
    source: str,
    water_fraction: float = 0.0,
    molar_mass: float = nan,
) -> FluidTable:
    terms = max(int(np.flatnonzero(row)[-1]) + 1 if row.any() else 1 for row in rows)
    coefficients = np.zeros((5, terms))
    for filled, row in zip(coefficients, rows, strict=True):
        filled[: min(terms, len(row))] = row[:terms]
    coefficients.setflags(write=False)
    return FluidTable(
        **{field.name: getattr(limits, field.name) for field in fields(FluidLimits)},
        lower=lower,
        upper=upper,
        coefficients=coefficients,
        viscosity_scale=viscosity_scale,
        water_fraction=water_fraction,
        molar_mass=molar_mass,
        source=source,
    )


def _library_source(text: str) -> str:
    return f"{text}; from CoolProp {library.library_version()}"


def _water(spec: FluidSpec, pressure: float, lower: float, upper: float) -> FluidTable:
    triple = library.pure_fluid_limits("Water").triple_pressure
    if not triple < pressure <= HIGHEST_WATER_PRESSURE:
        raise RangeError(
            f"a pressure of {pressure:.6g} Pa is outside {triple:.6g} to {HIGHEST_WATER_PRESSURE:.6g} Pa "
            "for liquid water"
        )
    freezing = library.water_freezing_temperature(pressure)
    boiling = library.water_boiling_temperature(pressure)
    limits = FluidLimits(
        label="water",
        lower_limit=freezing,
        upper_limit=boiling,
        data_lower=freezing,
        lower_reason="freezes",
        upper_reason=f"boils at {_bar(pressure)}",
        lower_advice="raise the temperature or use a glycol solution",
        upper_advice="raise the pressure or lower the temperature",
        freezing=freezing,
        boiling=boiling,
    )
    samples = library.liquid_water_samples(pressure, chebyshev_nodes(freezing, boiling, NODES))
    enthalpy = integral(_heat_capacity_terms(samples[HEAT_CAPACITY]), freezing, boiling)
    return _expanded(limits, freezing, boiling, enthalpy, samples[DENSITY:], _library_source(FLUIDS[spec.name].source))


def _heat_capacity_terms(samples: FloatArray) -> FloatArray:
    """Chebyshev coefficients of a heat capacity at the nodes: of a pure fluid smoother than its enthalpy."""
    return without_tail(chebyshev_coefficients(samples), TAIL)


def glycol_mass_fraction(name: str, volume_fraction: FloatArray) -> FloatArray:
    """Mass fraction of glycol [-] from its volume fraction at 20 degC [-], any shape; volumes taken as additive.

    `name` is "ethylene glycol" or "propylene glycol".
    """
    glycol = volume_fraction * GLYCOL_REFERENCE_DENSITY[name]
    return np.asarray(glycol / (glycol + (1.0 - volume_fraction) * GLYCOL_REFERENCE_DENSITY["water"]))


def glycol_volume_fraction(name: str, mass_fraction: FloatArray) -> FloatArray:
    """Volume fraction of glycol at 20 degC [-] from its mass fraction [-]: the inverse of `glycol_mass_fraction`."""
    glycol = mass_fraction / GLYCOL_REFERENCE_DENSITY[name]
    return np.asarray(glycol / (glycol + (1.0 - mass_fraction) / GLYCOL_REFERENCE_DENSITY["water"]))


def water_mole_fraction(name: str, mass_fraction: FloatArray) -> FloatArray:
    """Mole fraction of water in a glycol solution [-]; `name` as in `glycol_mass_fraction`."""
    water = (1.0 - mass_fraction) / GLYCOL_MOLAR_MASS["water"]
    return np.asarray(water / (water + mass_fraction / GLYCOL_MOLAR_MASS[name]))


def _glycol_boiling(name: str, mass_fraction: float, pressure: float) -> float:
    """Temperature at which the water of an ideal solution boils [K]; the vapour of the glycol is neglected.

    NaN where that is above the critical point of water, 0 where it is below its triple point.
    """
    water_pressure = pressure / float(water_mole_fraction(name, np.array(mass_fraction)))
    limits = library.pure_fluid_limits("Water")
    if water_pressure >= limits.critical_pressure:
        return nan
    if water_pressure <= limits.triple_pressure:
        return 0.0
    return library.water_boiling_temperature(water_pressure)


_SOLUTION_CODES = {"ethylene glycol": ("MEG", "AEG"), "propylene glycol": ("MPG", "APG")}


def _glycol(spec: FluidSpec, pressure: float, lower: float, upper: float) -> FluidTable:
    by_mass, by_volume = _SOLUTION_CODES[spec.name]
    if spec.mass_fraction is not None:
        code, fraction, basis, mass_fraction = by_mass, spec.mass_fraction, "mass", spec.mass_fraction
        source = "Melinder 2010, by mass, without inhibitors"
    else:
        assert spec.volume_fraction is not None
        code, fraction, basis = by_volume, spec.volume_fraction, "volume"
        mass_fraction = float(glycol_mass_fraction(spec.name, np.array(fraction)))
        source = "ASHRAE Handbook Fundamentals, physical properties of secondary coolants, by volume, inhibited"
    found = library.solution_limits(code, fraction)
    if not found.lowest_fraction <= fraction <= found.highest_fraction:
        raise RangeError(
            f"a {basis} fraction of {fraction:g} is outside {found.lowest_fraction:g} to {found.highest_fraction:g} "
            f"for {spec.name}; {OWN_DATA}"
        )
    label = f"{spec.name}, {100.0 * fraction:g} % by {basis}"
    boiling = _glycol_boiling(spec.name, mass_fraction, pressure)
    freezes = found.freezing_temperature >= found.lowest_temperature
    boils = boiling < found.highest_temperature
    limits = FluidLimits(
        label=label,
        lower_limit=found.freezing_temperature if freezes else found.lowest_temperature,
        upper_limit=boiling if boils else found.highest_temperature,
        data_lower=found.freezing_temperature if freezes else found.lowest_temperature,
        lower_reason="freezes" if freezes else PUBLISHED_END,
        upper_reason=f"boils at {_bar(pressure)}, an estimate by Raoult's law" if boils else PUBLISHED_END,
        lower_advice="raise the temperature or the glycol fraction" if freezes else OWN_DATA,
        upper_advice="raise the pressure or lower the temperature" if boils else OWN_DATA,
        freezing=found.freezing_temperature,
        boiling=boiling,
    )
    if limits.lower_limit >= limits.upper_limit:
        raise RangeError(f"a pressure of {pressure:.6g} Pa is too low for liquid {label}: it boils where it freezes")
    lower, upper = limits.lower_limit, limits.upper_limit
    samples = library.solution_samples(code, fraction, pressure, chebyshev_nodes(lower, upper, NODES))
    enthalpy = chebyshev_coefficients(samples[ENTHALPY])
    return _expanded(limits, lower, upper, enthalpy, samples[DENSITY:], _library_source(source))


def _gas_range(limits: FluidLimits, lower: float, upper: float) -> tuple[float, float]:
    """Part of lower .. upper [K], rounded outwards, in which a gas is served."""
    inside = max(lower, limits.lower_limit), min(upper, limits.upper_limit)
    if inside[0] >= inside[1]:
        raise RangeError(limits.outside(lower if lower >= limits.upper_limit else upper))
    return inside


def _air(spec: FluidSpec, pressure: float, lower: float, upper: float) -> FluidTable:
    air = library.pure_fluid_limits("Air")
    if pressure >= air.critical_pressure:
        raise RangeError(
            f"a pressure of {pressure:.6g} Pa is not below {air.critical_pressure:.6g} Pa, "
            "the critical pressure of air, up to which it is served as a gas"
        )
    data_lower, dew = float(ceil(air.lowest_temperature)), library.air_dew_temperature(pressure)
    condenses = dew > data_lower
    limits = FluidLimits(
        label="air",
        lower_limit=max(dew, data_lower),
        upper_limit=air.highest_temperature,
        data_lower=data_lower,
        lower_reason=f"condenses at {_bar(pressure)}" if condenses else PUBLISHED_END,
        upper_reason=PUBLISHED_END,
    )
    lower, upper = _gas_range(limits, lower, upper)
    samples = library.gaseous_air_samples(pressure, chebyshev_nodes(lower, upper, NODES))
    enthalpy = integral(_heat_capacity_terms(samples[HEAT_CAPACITY]), lower, upper)
    source = _library_source(FLUIDS[spec.name].source)
    return _expanded(limits, lower, upper, enthalpy, samples[DENSITY:], source, molar_mass=air.molar_mass)


_LIBRARY_SPECIES = ("CarbonDioxide", "Water", "Oxygen", "Nitrogen")


@lru_cache(maxsize=64)
def _species_samples(lower: float, upper: float) -> FloatArray:
    """Heat capacity, viscosity and conductivity of the dilute `SPECIES` at the nodes, (3, species, NODES)."""
    nodes = chebyshev_nodes(lower, upper, NODES)
    samples = np.stack([library.dilute_gas_samples(each, nodes) for each in _LIBRARY_SPECIES], axis=1)
    samples.setflags(write=False)
    return samples


def _exhaust(spec: FluidSpec, pressure: float, lower: float, upper: float) -> FluidTable:
    assert spec.fuel is not None
    if spec.excess_air_ratio is not None:
        excess = spec.excess_air_ratio
    else:
        excess = float(excess_air_from_dry_oxygen(spec.fuel, np.array(spec.dry_oxygen)))
    composition = exhaust_composition(spec.fuel, np.array(excess), np.array(spec.intake_humidity))
    pure = [library.pure_fluid_limits(each) for each in _LIBRARY_SPECIES]
    lowest = max(each.lowest_temperature for each in pure)
    limits = FluidLimits(
        label=f"exhaust gas of {spec.fuel} at excess-air ratio {excess:.4g}",
        lower_limit=lowest,
        upper_limit=min(each.highest_temperature for each in pure),
        data_lower=lowest,
        lower_reason="its water freezes",
        upper_reason=PUBLISHED_END,
    )
    lower, upper = _gas_range(limits, lower, upper)
    molar_mass = float(mixture_molar_mass(composition))
    heat_capacity, viscosity, conductivity = _species_samples(lower, upper)
    density = pressure * molar_mass / (GAS_CONSTANT * chebyshev_nodes(lower, upper, NODES))
    others = np.stack(
        [
            density,
            wilke_viscosity(composition, viscosity, SPECIES_MOLAR_MASS),
            wassiljewa_conductivity(composition, conductivity, viscosity, SPECIES_MOLAR_MASS),
        ]
    )
    mean_heat_capacity = _heat_capacity_terms(composition @ heat_capacity / molar_mass)
    return _expanded(
        limits,
        lower,
        upper,
        integral(mean_heat_capacity, lower, upper),
        others,
        _library_source(FLUIDS[spec.name].source),
        water_fraction=float(composition[SPECIES.index("water")]),
        molar_mass=molar_mass,
    )


_TABLE_COLUMNS = ("density", "heat capacity", "viscosity", "conductivity")


def _table_polynomial(name: str, x: FloatArray, values: FloatArray) -> FloatArray:
    """Chebyshev coefficients of the lowest polynomial through `values` (points,) of a user's table at `x` (points,).

    Up to TABLE_EXACT_POINTS points exactly, more within TABLE_TOLERANCE; it stays in the band of neighbouring points.
    Of viscosity it is the logarithm over the value in the middle row.
    """
    logarithmic = name == "viscosity"
    if (values == values[0]).all():
        return np.zeros(1) if logarithmic else values[:1].copy()
    scale = values[len(values) // 2]
    wanted = np.log(values / scale) if logarithmic else values
    exact = len(values) <= TABLE_EXACT_POINTS
    degrees = [len(values) - 1] if exact else range(min(len(values) - 1, TABLE_HIGHEST_DEGREE) + 1)

    def value(coefficients: FloatArray, at: FloatArray) -> FloatArray:
        found = expansion_value(coefficients, at)
        return scale * np.exp(found) if logarithmic else found

    for degree in degrees:
        basis = np.polynomial.chebyshev.chebvander(x, degree)
        weight = np.ones_like(values) if logarithmic or exact else 1.0 / values
        coefficients = np.linalg.lstsq(basis * weight[:, None], wanted * weight, rcond=None)[0]
        if np.abs(value(coefficients, x) / values - 1.0).max() <= TABLE_TOLERANCE:
            break
    else:
        raise RangeError(
            f"no polynomial up to degree {degrees[-1]} gives the {name} of the fluid table within 0.1 %; "
            "look for a misprint, or give fewer temperatures or a narrower range"
        )
    between = x[:-1, None] + np.linspace(0.0, 1.0, 21) * np.diff(x)[:, None]
    padded = np.pad(values, 1, mode="edge")
    neighbours = np.stack([padded[:-3], padded[1:-2], padded[2:-1], padded[3:]])
    highest, lowest = neighbours.max(axis=0), neighbours.min(axis=0)
    margin = 0.25 * (highest - lowest) + TABLE_TOLERANCE * highest
    found = value(coefficients, between)
    if (
        (found > (highest + margin)[:, None]).any()
        or (found < (lowest - margin)[:, None]).any()
        or (found <= 0.0).any()
    ):
        raise RangeError(
            f"the polynomial through the {name} of the fluid table swings out between its points; "
            "give more temperatures where it changes fast, or a narrower range"
        )
    return np.asarray(coefficients)


def _user_table(spec: FluidSpec, pressure: float, lower: float, upper: float) -> FluidTable:
    assert spec.table is not None
    columns = np.array(spec.table, dtype=np.float64).T
    temperatures = columns[0]
    constant = len(temperatures) == 1
    lower, upper = CONSTANT_TABLE_RANGE if constant else (float(temperatures[0]), float(temperatures[-1]))
    x = (2.0 * temperatures - lower - upper) / (upper - lower)
    density, heat_capacity, viscosity, conductivity = (
        _table_polynomial(name, x, values) for name, values in zip(_TABLE_COLUMNS, columns[1:], strict=True)
    )
    viscosity_scale = float(columns[3, len(temperatures) // 2])
    limits = FluidLimits(
        label="the fluid table",
        lower_limit=lower,
        upper_limit=upper,
        data_lower=lower,
        lower_reason="a single row" if constant else "the first row",
        upper_reason="a single row" if constant else "the last row",
        lower_advice="" if constant else "add rows for lower temperatures",
        upper_advice="" if constant else "add rows for higher temperatures",
    )
    rows = [integral(heat_capacity, lower, upper), heat_capacity, density, viscosity, conductivity]
    rows[0][0] -= expansion_value(rows[0], np.zeros(1))[0]
    return _table(limits, lower, upper, rows, viscosity_scale, FLUIDS[spec.name].source)


FLUIDS: dict[str, FluidRecord] = {
    "water": FluidRecord(
        "liquid water",
        "IAPWS-95 (Wagner and Pruss 2002), viscosity IAPWS R12-08, conductivity IAPWS R15-11",
        (),
        "freezing to boiling temperature at the pressure, up to 16 MPa",
        False,
        _water,
    ),
    "ethylene glycol": FluidRecord(
        "ethylene glycol in water",
        "by mass Melinder 2010; by volume ASHRAE Handbook Fundamentals, secondary coolants, inhibited",
        ("mass_fraction", "volume_fraction"),
        "fractions and temperatures of the library: to 0.60 and 100 degC; boiling estimated by Raoult's law",
        False,
        _glycol,
    ),
    "propylene glycol": FluidRecord(
        "propylene glycol in water",
        "by mass Melinder 2010; by volume ASHRAE Handbook Fundamentals, secondary coolants, inhibited",
        ("mass_fraction", "volume_fraction"),
        "fractions and temperatures of the library: to 0.60 and 100 degC; boiling estimated by Raoult's law",
        False,
        _glycol,
    ),
    "air": FluidRecord(
        "dry air",
        "Lemmon, Jacobsen, Penoncello and Friend 2000, transport properties Lemmon and Jacobsen 2004",
        (),
        "60 to 2000 K as a gas, below the critical pressure",
        True,
        _air,
    ),
    "exhaust gas": FluidRecord(
        "products of complete lean combustion of a fuel in air",
        "ideal-gas mixture of CO2, H2O, O2 and N2: viscosity Wilke 1950, "
        "conductivity Wassiljewa 1904 with Mason and Saxena 1958",
        ("fuel", "excess_air_ratio", "dry_oxygen", "intake_humidity"),
        "273.16 to 2000 K, where all four species are served",
        True,
        _exhaust,
    ),
    "table": FluidRecord(
        "density, heat capacity, viscosity and conductivity of your own against temperature",
        "rows of the case",
        ("table",),
        "first to last temperature of the rows; one row is a constant from 1 to 5000 K",
        False,
        _user_table,
    ),
}


def check_fluid(spec: FluidSpec) -> None:
    """Raise RangeError, without the property library, where `spec` contradicts itself or lacks something."""
    if spec.name not in FLUIDS:
        raise RangeError(f'"{spec.name}" is no known fluid; give one of {", ".join(FLUIDS)}')
    takes = FLUIDS[spec.name].takes
    for field in fields(FluidSpec)[1:]:
        if getattr(spec, field.name) != field.default and field.name not in takes:
            raise RangeError(f"{spec.name} takes no {field.name}; leave it out")
    if spec.name in _SOLUTION_CODES:
        _exactly_one(spec, "mass_fraction", "volume_fraction")
    if spec.name == "exhaust gas":
        _check_exhaust(spec)
    if spec.name == "table":
        _check_table(spec)


def _exactly_one(spec: FluidSpec, first: str, second: str) -> None:
    if (getattr(spec, first) is None) == (getattr(spec, second) is None):
        raise RangeError(f"{spec.name} needs exactly one of {first} and {second}")
    for name in (first, second):
        value = getattr(spec, name)
        if value is not None and not (isfinite(value) and value >= 0.0):
            raise RangeError(f"{name} is {value:g}, which is not a finite number of 0 or more")


def _check_exhaust(spec: FluidSpec) -> None:
    if spec.fuel is None:
        raise RangeError('exhaust gas needs a fuel, for example "diesel"')
    fuel_named(spec.fuel)
    _exactly_one(spec, "excess_air_ratio", "dry_oxygen")
    if spec.excess_air_ratio is not None and spec.excess_air_ratio < 1.0:
        raise RangeError(
            f"an excess-air ratio of {spec.excess_air_ratio:.4g} is below 1; only complete, lean combustion is served"
        )
    if spec.dry_oxygen is not None and spec.dry_oxygen >= HIGHEST_DRY_OXYGEN:
        raise RangeError(f"a dry oxygen of {spec.dry_oxygen:g} is not below the {HIGHEST_DRY_OXYGEN:.4f} of air")
    if not 0.0 <= spec.intake_humidity <= 1.0:
        raise RangeError(f"an intake humidity of {spec.intake_humidity:g} is outside 0 to 1 kg/kg")


def _check_table(spec: FluidSpec) -> None:
    if not spec.table:
        raise RangeError("the fluid table has no rows; give at least one")
    rows = np.array(spec.table, dtype=np.float64)
    if not (np.isfinite(rows).all() and (rows > 0.0).all()):
        raise RangeError("the fluid table has a number that is not finite and above 0")
    if (np.diff(rows[:, 0]) <= 0.0).any():
        raise RangeError("the temperatures of the fluid table must rise from row to row")


def expansion_range(name: str, lower: FloatArray, upper: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Range to ask `fluid_table` for so that lower .. upper [K] is covered; any one shape.

    A gas is expanded between multiples of 100 K, so that neighbouring cases share a table; a liquid over all it has.
    """
    if not FLUIDS[name].is_gas:
        return np.zeros(np.shape(lower)), np.full(np.shape(upper), np.inf)
    rounded_lower = GAS_RANGE_STEP * np.floor(lower / GAS_RANGE_STEP)
    rounded_upper = GAS_RANGE_STEP * np.ceil(upper / GAS_RANGE_STEP)
    return rounded_lower, np.maximum(rounded_upper, rounded_lower + GAS_RANGE_STEP)


def fluid_table(spec: FluidSpec, pressure: float, lower: float, upper: float) -> FluidTable:
    """One fluid at `pressure` [Pa], expanded over at least the part of lower .. upper [K] in which it is served.

    Liquids are expanded over their whole liquid range. The limits of the table say where the fluid is served.
    Raises RangeError where `spec` is faulty, the fluid is not served at the pressure, or nowhere in lower .. upper.
    """
    check_fluid(spec)
    if not (isfinite(pressure) and pressure > 0.0):
        raise RangeError(f"a pressure of {pressure:g} Pa is not a finite number above 0")
    if isnan(lower) or isnan(upper) or lower > upper:
        raise RangeError(f"{lower:g} to {upper:g} K is not a range of temperatures")
    below, above = expansion_range(spec.name, np.array(lower), np.array(upper))
    return FLUIDS[spec.name].build(spec, pressure, float(below), float(above))


@dataclass(frozen=True, eq=False, repr=False)
class FluidBatch:
    """Many tables side by side, one a case; evaluates properties at temperatures (..., cases) [K].

    A temperature outside a table's range is moved to its end, as a solver's iterates may overshoot; enthalpy alone goes
    on with the heat capacity of the end, so that it always rises.
    `coefficients` (5, terms, tables); `lower`, `upper`, `viscosity_scale` (tables,); `index` (cases,) into the tables;
    `lengths` (5): terms that each property needs in the table that needs most.
    """

    coefficients: FloatArray
    lower: FloatArray
    upper: FloatArray
    viscosity_scale: FloatArray
    index: IntArray
    lengths: tuple[int, ...]

    @classmethod
    def stack(cls, tables: Sequence[FluidTable], index: IntArray) -> FluidBatch:
        """Batch of the tables that `index` (cases,) points to."""
        coefficients = np.zeros((5, max(table.coefficients.shape[1] for table in tables), len(tables)))
        for number, table in enumerate(tables):
            coefficients[:, : table.coefficients.shape[1], number] = table.coefficients
        used = np.asarray(coefficients.any(axis=2))
        lengths = tuple(int(np.flatnonzero(row)[-1]) + 1 if row.any() else 1 for row in used)
        return cls(
            coefficients,
            np.array([table.lower for table in tables]),
            np.array([table.upper for table in tables]),
            np.array([table.viscosity_scale for table in tables]),
            np.asarray(index, dtype=np.int64),
            lengths,
        )

    def take(self, which: IntArray | BoolArray) -> FluidBatch:
        """Batch of a subset of the cases."""
        return replace(self, index=self.index[which])

    def enthalpy(self, temperature: FloatArray) -> FloatArray:
        """Specific enthalpy [J/kg], zero in the middle of the table's range; beyond it with the end's heat capacity."""
        value = self._values((ENTHALPY,), temperature)[0]
        beyond = temperature - np.clip(temperature, self._of_cases(self.lower), self._of_cases(self.upper))
        if beyond.any():
            value += beyond * self.heat_capacity(temperature)
        return value

    def heat_capacity(self, temperature: FloatArray) -> FloatArray:
        """Specific heat capacity at constant pressure [J/(kg K)], the slope of the enthalpy."""
        return self._values((HEAT_CAPACITY,), temperature)[0]

    def density(self, temperature: FloatArray) -> FloatArray:
        """Density [kg/m3]."""
        return self._values((DENSITY,), temperature)[0]

    def viscosity(self, temperature: FloatArray) -> FloatArray:
        """Dynamic viscosity [Pa s]."""
        return self._values((VISCOSITY,), temperature)[0]

    def conductivity(self, temperature: FloatArray) -> FloatArray:
        """Thermal conductivity [W/(m K)]."""
        return self._values((CONDUCTIVITY,), temperature)[0]

    def film_properties(self, temperature: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Heat capacity [J/(kg K)], viscosity [Pa s] and conductivity [W/(m K)] at once."""
        heat_capacity, viscosity, conductivity = self._values(FILM_PROPERTIES, temperature)
        return heat_capacity, viscosity, conductivity

    def _of_cases(self, by_table: FloatArray) -> FloatArray:
        """Numbers (..., tables) as (..., cases), or as (..., 1) where all cases share the only table."""
        return by_table if by_table.shape[-1] == 1 else np.take(by_table, self.index, axis=-1)

    def _values(self, properties: tuple[int, ...], temperature: FloatArray) -> list[FloatArray]:
        """Values of some properties in the order asked for, each of the shape of `temperature`."""
        span = self.upper - self.lower
        x = temperature * self._of_cases(2.0 / span)
        x -= self._of_cases((self.lower + self.upper) / span)
        np.clip(x, -1.0, 1.0, out=x)
        by_length = sorted(properties, key=lambda each: -self.lengths[each])
        lengths = [self.lengths[each] for each in by_length]
        coefficients = self.coefficients[by_length].transpose(1, 0, 2)
        evaluated = _clenshaw(x, lengths, lambda term, count: self._of_cases(coefficients[term, :count]))
        values = {each: evaluated[place] for place, each in enumerate(by_length)}
        if VISCOSITY in values:
            viscosity = values[VISCOSITY]
            np.exp(viscosity, out=viscosity)
            viscosity *= self._of_cases(self.viscosity_scale)
        return [values[each] for each in properties]


def _clenshaw(x: FloatArray, lengths: Sequence[int], coefficient: Callable[[int, int], FloatArray]) -> FloatArray:
    """Sums of Chebyshev series at `x` (..., cases) for several properties at once, (properties, ..., cases).

    `lengths` falls from property to property; `coefficient(term, count)` gives one term of the first `count` of them,
    (count, cases) or (count, 1). Source: Clenshaw, Math. Comp. 9 (1955) 118 (from memory).
    """
    shape = (len(lengths), *x.shape)
    last, before, new = np.zeros(shape), np.zeros(shape), np.zeros(shape)
    twice_x = 2.0 * x
    columns = (-1, *(1,) * (x.ndim - 1))
    for term in range(lengths[0] - 1, -1, -1):
        count = sum(length > term for length in lengths)
        added = coefficient(term, count)
        np.multiply(last[:count], twice_x if term else x, out=new[:count])
        new[:count] -= before[:count]
        new[:count] += added.reshape(*columns, added.shape[-1])
        last, before, new = new, last, before
    return last
