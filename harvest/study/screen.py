"""A first look at two streams: what they could give at most, what is realistic, and whether that is worth a design."""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass
from typing import Any

import numpy as np

from harvest.errors import InputError
from harvest.model.batch import StreamBatch
from harvest.model.case import Streams, case_hash
from harvest.model.case_rules import FLOWS
from harvest.model.checks import ACID_MARGIN
from harvest.model.design import BETWEEN, Faults, stream_excess_air_ratio, stream_fluid, stream_mass_flow
from harvest.model.stream_sections import GASES
from harvest.physics.arrays import BoolArray, FloatArray, ObjectArray
from harvest.physics.combustion import sulphuric_acid_dew_point, sulphuric_acid_fraction, water_dew_point
from harvest.physics.fluids import FluidBatch
from harvest.physics.screening import (
    balanced_temperature,
    counterflow_array_power,
    counterflow_differences,
    exergy,
    heat_of_most_power,
    integral_over,
    joint_optimum_power,
    log_mean_difference,
    power_from_hot_slices,
    power_into_cold_slices,
    temperatures_between,
)
from harvest.physics.thermoelectrics import carnot_efficiency, maximum_efficiency
from harvest.quantities import format_quantity, significant, unit_of
from harvest.version import VERSION

PRACTICE = "common practice, no source"
FIGURE_OF_MERIT = 0.8
"""Z T at the mean temperature of modules that can be bought; common practice, no source."""
LARGEST_MERIT = 10.0
"""Beyond any material."""

# common practice, no source: what the realistic band stands on, its low end first
LIQUID_FILM = (1500.0, 5000.0)
"""Film coefficients of a liquid per plate area [W/(m^2 K)]."""
GAS_FILM = (60.0, 300.0)
"""Film coefficients of a gas with fins per plate area [W/(m^2 K)]."""
CONVERTED = (0.85, 0.95)
"""Power after over before the converter [-]."""
LEFT_AFTER_LOSSES = (0.70, 0.90)
"""What pumps, fans, mismatch and contacts leave of the power [-]."""
SMALL_PLANT = 0.10
"""Heat of the low end over the heat of most power [-]; the high end takes it all."""
CLOSEST_APPROACH = 0.80
"""Most heat taken, over what an endless exchanger would take [-]."""
REFERENCE_SIDE, REFERENCE_RESISTANCE = 0.040, 1.5
"""Side [m] and thermal resistance without current [K/W] of the reference module."""
WORTHWHILE_MODULE = 0.5
"""Power of the best placed module below which a plant is hardly built [W]."""

BAND = f"modules along a counterflow exchanger; films, losses and share of the heat by {PRACTICE}"
SECOND_LAW = "second law, with the fluid's own enthalpy and entropy"
IOFFE = "integral of the best efficiency (Ioffe 1957) over the heat, no films"


def _answer(kind: str, meaning: str, source: str) -> Any:
    return dataclasses.field(metadata={"kind": kind, "meaning": meaning, "source": source})


@dataclass(frozen=True, kw_only=True)
class Screening:
    """What two streams could give: SI numbers; NaN where a number does not apply, as with reservoirs."""

    figure_of_merit: float = _answer("dimensionless", "Z T at the mean temperature that is reckoned with.", "stated")
    hot_mass_flow: float = _answer("mass flow", "Mass flow of the hot stream.", "the case")
    cold_mass_flow: float = _answer("mass flow", "Mass flow of the cold stream.", "the case")
    available_heat: float = _answer(
        "power",
        "Heat of the hot stream down to the cold inlet or where its fluid ends; no change of phase.",
        "the fluid's enthalpy",
    )
    lowest_outlet_temperature: float = _answer(
        "temperature",
        "Temperature to which the hot stream may be cooled: the stated limit, or a dew point of exhaust gas with its "
        "margin, or the cold inlet.",
        f"limits.minimum_hot_outlet_temperature; else IAPWS-IF97, Verhoff and Banchero 1974, margin by {PRACTICE}",
    )
    usable_heat: float = _answer(
        "power", "Heat of the hot stream down to the lowest outlet temperature.", "the fluid's enthalpy"
    )
    hot_exergy: float = _answer("power", "Exergy of the hot stream relative to the cold inlet.", SECOND_LAW)
    carnot_efficiency: float = _answer("dimensionless", "Carnot efficiency between the inlet temperatures.", "Carnot")
    reversible_power: float = _answer(
        "power",
        "Most power of any engine whatever between the two streams: they come to one temperature without entropy.",
        SECOND_LAW,
    )
    reversible_efficiency: float = _answer(
        "dimensionless",
        "Reversible power over available heat: the Carnot efficiency of a stream that cools.",
        SECOND_LAW,
    )
    merit_power: float = _answer(
        "power", "Most power of any array of modules of the stated figure of merit, endless and without films.", IOFFE
    )
    joint_optimum_flux_low: float = _answer(
        "heat flux",
        "Power per plate area at the inlets with poor films, module and load at their joint optimum, the films taking "
        "half of the temperature difference.",
        f"Freunek 2009, Apertet 2012 (from memory); films by {PRACTICE}",
    )
    joint_optimum_flux_high: float = _answer(
        "heat flux", "The same with good films.", f"Freunek 2009, Apertet 2012 (from memory); films by {PRACTICE}"
    )
    best_module_power_low: float = _answer(
        "power", "Power of the one reference module where both streams enter, poor films.", BAND
    )
    best_module_power_high: float = _answer("power", "The same with good films.", BAND)
    best_module_hot_face_low: float = _answer(
        "temperature", "Hot face of that module, films equal on both sides, poor films; no limit acts on it.", BAND
    )
    best_module_hot_face_high: float = _answer("temperature", "The same with good films.", BAND)
    module_share_low: float = _answer(
        "dimensionless",
        "Part of the temperature difference that modules take, poor films; the rest is the films'.",
        BAND,
    )
    module_share_high: float = _answer("dimensionless", "The same with good films.", BAND)
    heat_low: float = _answer("power", "Heat taken at the low end of the realistic band.", BAND)
    heat_high: float = _answer("power", "Heat taken at the high end, where the power is largest.", BAND)
    net_power_low: float = _answer("power", "Net power at the low end of the realistic band.", BAND)
    net_power_high: float = _answer("power", "Net power at the high end of the realistic band.", BAND)
    module_count_low: float = _answer("dimensionless", "Reference modules at the low end.", BAND)
    module_count_high: float = _answer("dimensionless", "Reference modules at the high end.", BAND)
    plate_area_low: float = _answer("area", "Area of the plates with modules at the low end.", BAND)
    plate_area_high: float = _answer("area", "Area of the plates with modules at the high end.", BAND)
    module_flux_low: float = _answer("heat flux", "Mean heat flux through the modules at the low end.", BAND)
    module_flux_high: float = _answer("heat flux", "Mean heat flux through the modules at the high end.", BAND)
    yearly_heat_worth: float = _answer(
        "dimensionless", "Worth of the usable heat as heat in a year [currency].", "site.heat_value"
    )
    yearly_electricity_worth_low: float = _answer(
        "dimensionless", "Worth of the low end's net power in a year [currency].", "site.electricity_value"
    )
    yearly_electricity_worth_high: float = _answer(
        "dimensionless", "Worth of the high end's net power in a year [currency].", "site.electricity_value"
    )

    currency: str
    verdict: str
    valid: bool
    problem: str
    faults: tuple[str, ...]
    bad_input: bool
    sources: tuple[str, ...]
    version: str
    case_hash: str


NUMBERS: dict[str, Any] = {item.name: item.metadata for item in dataclasses.fields(Screening) if item.metadata}
UNITS: dict[str, str] = {name: unit_of(metadata["kind"]) for name, metadata in NUMBERS.items()}
SOURCES: dict[str, str] = {name: metadata["source"] for name, metadata in NUMBERS.items()}


@dataclass(frozen=True)
class Screenings:
    """Answers of a batch: `numbers` (cases,) by name; `problem` (cases,) is "" where valid; `bad_input` (cases,)."""

    numbers: dict[str, FloatArray]
    problem: ObjectArray
    bad_input: BoolArray
    sources: tuple[str, ...]


@dataclass(frozen=True)
class _Supply:
    """One side as it comes, (cases,): from `inlet` to at most `end` [K]; a reservoir has no fluid."""

    inlet: FloatArray
    end: FloatArray
    mass_flow: FloatArray
    fluid: FluidBatch | None
    water_fraction: FloatArray
    films: tuple[FloatArray, FloatArray]
    source: str

    def heat(self, temperature: FloatArray) -> FloatArray:
        """Heat between the inlet and a temperature [W]."""
        if self.fluid is None:
            return np.full_like(self.inlet, np.nan)
        ends = self.fluid.enthalpy(np.stack([self.inlet, temperature]))
        return np.asarray(self.mass_flow * np.abs(ends[0] - ends[1]))

    def entropy(self, temperature: FloatArray) -> FloatArray:
        """Entropy between the inlet and a temperature [W/K]."""
        places, rate = self.capacity_rate(temperature)
        return np.abs(integral_over(rate / places, self.inlet, temperature))

    def capacity_rate(self, temperature: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Temperatures [K] between the inlet and a temperature, and the heat capacity rates there [W/K]."""
        places = temperatures_between(self.inlet, temperature)
        if self.fluid is None:
            return places, np.full_like(places, np.nan)
        return places, self.mass_flow * self.fluid.heat_capacity(places)

    def inverse_capacity_rate(self) -> FloatArray:
        """Mean temperature change per heat over all that the side may change [K/W]; 0 for a reservoir."""
        if self.fluid is None:
            return np.zeros_like(self.inlet)
        return np.asarray(np.abs(self.inlet - self.end) / self.heat(self.end))


def _supply(batch: StreamBatch, side: str, faults: Faults) -> _Supply:
    """Read one side of a batch; what is wrong with single cases goes to `faults`."""
    given = getattr(batch.base, side)
    inlet = batch.number(f"{side}.inlet_temperature")
    other = batch.number(f"{'cold' if side == 'hot' else 'hot'}.inlet_temperature")
    if given.fluid == "reservoir":
        nan = np.full(batch.cases, np.nan)
        film = batch.number(f"{side}.film_coefficient")
        return _Supply(inlet, inlet, nan, None, nan, (film, film), "")
    usual = GAS_FILM if given.fluid in GASES else LIQUID_FILM
    films = (np.full(batch.cases, usual[0]), np.full(batch.cases, usual[1]))
    fluid, tables, table_of_case = stream_fluid(batch, side, faults)
    in_still_air = not any(batch.given(f"{side}.{flow}") for flow in (*FLOWS, "fuel_flow"))
    if fluid is None or in_still_air:
        nan = np.full(batch.cases, np.nan)
        return _Supply(inlet, inlet, nan, None, nan, films, "")

    def of_table(name: str) -> FloatArray:
        return np.array([getattr(table, name) for table in tables], dtype=float)[table_of_case]

    water = of_table("water_fraction")
    mass_flow = stream_mass_flow(batch, side, fluid.density(inlet[None])[0], of_table("molar_mass"), water)
    faults.add(~(mass_flow > 0), f"{side}.mass_flow: must be above zero")
    end = (
        np.maximum(other, np.fmax(of_table("lower"), of_table("lower_limit")))
        if side == "hot"
        else np.minimum(other, np.fmin(of_table("upper"), of_table("upper_limit")))
    )
    return _Supply(inlet, end, mass_flow, fluid, water, films, f"{side} fluid: {tables[0].source}")


def _lowest_outlet(batch: StreamBatch, hot: _Supply) -> FloatArray:
    """Temperature to which the hot stream may be cooled [K], (cases,)."""
    if batch.given("limits.minimum_hot_outlet_temperature"):
        return np.maximum(batch.number("limits.minimum_hot_outlet_temperature"), hot.end)
    if batch.base.hot.fluid != "exhaust gas":
        return hot.end
    pressure = batch.number("hot.pressure")
    acid = sulphuric_acid_fraction(
        str(batch.base.hot.fuel),
        stream_excess_air_ratio(batch, "hot"),
        batch.number("hot.intake_humidity", 0.0),
        batch.number("hot.fuel_sulphur", 0.0),
        batch.number("hot.sulphur_conversion", 0.0),
    )
    water_vapour = hot.water_fraction * pressure
    dew = np.fmax(water_dew_point(water_vapour), sulphuric_acid_dew_point(water_vapour, acid * pressure) + ACID_MARGIN)
    return np.fmax(dew, hot.end)


def _reversible_power(hot: _Supply, cold: _Supply) -> FloatArray:
    """Most power of any engine between the two sides [W], (cases,); NaN between reservoirs."""
    if hot.fluid is None:
        return -exergy(cold.heat(cold.end), cold.entropy(cold.end), hot.inlet)
    if cold.fluid is None:
        return exergy(hot.heat(hot.end), hot.entropy(hot.end), cold.inlet)
    common = balanced_temperature(
        lambda each: hot.entropy(np.maximum(each, hot.end)),
        lambda each: cold.entropy(np.minimum(each, cold.end)),
        cold.inlet,
        hot.inlet,
    )
    return hot.heat(np.maximum(common, hot.end)) - cold.heat(np.minimum(common, cold.end))


def _band(
    batch: StreamBatch, hot: _Supply, cold: _Supply, usable: FloatArray, merit: FloatArray
) -> dict[str, FloatArray]:
    """Realistic band: powers, heat, modules and area at its two ends, (cases,)."""
    root = np.sqrt(1.0 + merit)
    module_conductance = root / REFERENCE_RESISTANCE
    module_area = REFERENCE_SIDE**2
    module_film = module_conductance / module_area
    films = [1.0 / (1.0 / hot.films[i] + 1.0 / cold.films[i]) for i in (0, 1)]
    # where films are poor the modules stand apart until the films take half; they never take more
    shares = [np.maximum(0.5, film / (film + module_film)) for film in films]
    coverages = [np.minimum(1.0, film / module_film) for film in films]
    rates = (hot.inverse_capacity_rate(), cold.inverse_capacity_rate())
    inlets = (hot.inlet, cold.inlet)
    warmest = np.fmin(batch.number("limits.maximum_cold_outlet_temperature"), cold.end)
    endless = np.fmin(hot.heat(hot.end), cold.heat(cold.end))
    most = np.fmin(np.fmin(CLOSEST_APPROACH * endless, usable), cold.heat(np.maximum(warmest, cold.inlet)))
    best = heat_of_most_power(most, *rates, *inlets, merit, shares[1])
    numbers: dict[str, FloatArray] = {}
    for end, heat, share, coverage, film, converted, left in zip(
        ("low", "high"), (SMALL_PLANT * best, best), shares, coverages, films, CONVERTED, LEFT_AFTER_LOSSES, strict=True
    ):
        mean = log_mean_difference(*counterflow_differences(heat, *rates, *inlets))
        count = np.ceil(heat / (module_conductance * share * mean))
        difference = hot.inlet - cold.inlet
        beside = 0.5 * (1.0 - share) * difference
        numbers |= {
            f"joint_optimum_flux_{end}": joint_optimum_power(film, *inlets, merit),
            f"best_module_power_{end}": module_conductance
            * share
            * difference
            * maximum_efficiency(merit, hot.inlet - beside, cold.inlet + beside),
            f"best_module_hot_face_{end}": hot.inlet - beside,
            f"module_share_{end}": share * np.ones(batch.cases),
            f"heat_{end}": heat,
            f"net_power_{end}": converted * left * counterflow_array_power(heat, *rates, *inlets, merit, share),
            f"module_count_{end}": count,
            f"plate_area_{end}": count * module_area / coverage,
            f"module_flux_{end}": module_film * share * mean,
        }
    return numbers


def screen_batch(batch: StreamBatch, *, figure_of_merit: float = FIGURE_OF_MERIT) -> Screenings:
    """Screen all cases of a batch at once.

    Parameters: `batch` of cases or of streams alone; `figure_of_merit` Z T at the mean temperature [-], above 0 to 10.
    A case without an answer is NaN throughout and says why in `problem`. Raises InputError for the figure of merit.
    """
    if not 0.0 < figure_of_merit <= LARGEST_MERIT:
        raise InputError(f"figure-of-merit: {figure_of_merit:g} is not possible; give above 0 to {LARGEST_MERIT:g}")
    with np.errstate(all="ignore"):
        faults = Faults(batch.cases)
        hot, cold = _supply(batch, "hot", faults), _supply(batch, "cold", faults)
        bad_input = ~faults.valid
        faults.add(
            (hot.inlet <= cold.inlet) & faults.valid,
            "hot.inlet_temperature: is not above cold.inlet_temperature, so there is nothing to harvest",
        )
        merit = np.full(batch.cases, figure_of_merit)
        lowest = _lowest_outlet(batch, hot)
        usable = np.where(lowest < hot.inlet, hot.heat(np.minimum(lowest, hot.inlet)), 0.0)
        usable = np.where(np.isnan(hot.mass_flow), np.nan, usable)
        available, reversible = hot.heat(hot.end), _reversible_power(hot, cold)
        hot_places, hot_rate = hot.capacity_rate(hot.end)
        cold_places, cold_rate = cold.capacity_rate(cold.end)
        band = _band(batch, hot, cold, usable, merit)
        year = batch.number("site.yearly_operation")
        site = batch.base.site
        heat_price = site.heat_value.amount if site.heat_value else np.nan
        electricity_price = site.electricity_value.amount if site.electricity_value else np.nan
        numbers = {
            "figure_of_merit": merit,
            "hot_mass_flow": hot.mass_flow,
            "cold_mass_flow": cold.mass_flow,
            "available_heat": available,
            "lowest_outlet_temperature": np.where(np.isnan(hot.mass_flow), np.nan, lowest),
            "usable_heat": usable,
            "hot_exergy": exergy(available, hot.entropy(hot.end), cold.inlet),
            "carnot_efficiency": carnot_efficiency(hot.inlet, cold.inlet),
            "reversible_power": reversible,
            "reversible_efficiency": reversible / available,
            # each bound holds by itself, so the smaller one does
            "merit_power": np.fmin(
                -power_from_hot_slices(hot_rate, hot_places, (hot.inlet, hot.end), cold.inlet, merit),
                power_into_cold_slices(cold_rate, cold_places, (cold.inlet, cold.end), hot.inlet, merit),
            ),
            **band,
            "yearly_heat_worth": usable * year * heat_price,
            "yearly_electricity_worth_low": band["net_power_low"] * year * electricity_price,
            "yearly_electricity_worth_high": band["net_power_high"] * year * electricity_price,
        }
        numbers = {name: np.where(faults.valid, numbers[name], np.nan) for name in NUMBERS}
    sources = tuple(side.source for side in (hot, cold) if side.source)
    return Screenings(numbers, faults.text, bad_input, sources)


def screen(case: Streams, *, figure_of_merit: float = FIGURE_OF_MERIT) -> Screening:
    """Ceilings, a realistic band and a verdict for two streams, before anything is designed.

    Parameters: `case`, whole or streams alone as `load_streams` reads them; `figure_of_merit` Z T at the mean
    temperature [-], above 0 to 10. Where there is no answer, `valid` is False, `problem` says why and every number is
    NaN. Raises InputError for a figure of merit that is not possible.
    """
    answers = screen_batch(StreamBatch(case), figure_of_merit=figure_of_merit)
    numbers = {name: float(value[0]) for name, value in answers.numbers.items()}
    problem = str(answers.problem[0])
    prices = [price for price in (case.site.heat_value, case.site.electricity_value) if price is not None]
    answer = Screening(
        **numbers,
        currency=prices[0].currency if prices else "",
        verdict="",
        valid=not problem,
        problem=problem,
        faults=tuple(problem.split(BETWEEN)) if problem else (),
        bad_input=bool(answers.bad_input[0]),
        sources=answers.sources,
        version=VERSION,
        case_hash=case_hash(case),
    )
    return dataclasses.replace(answer, verdict=verdict(answer)) if answer.valid else answer


def verdict(answer: Screening) -> str:
    """One sentence on whether the two streams are worth a design."""
    best = format_quantity(answer.best_module_power_high, "power", 2)
    if answer.best_module_power_high < WORTHWHILE_MODULE:
        return (
            f"Hardly worth a design: even the best placed module gives no more than {best}, and less than "
            f"{WORTHWHILE_MODULE:g} W a module is seldom built ({PRACTICE})."
        )
    if np.isnan(answer.net_power_high):
        return f"Worth an estimate: two reservoirs limit nothing, only the plate area does, with up to {best} a module."
    if answer.usable_heat <= 0:
        lowest = format_quantity(answer.lowest_outlet_temperature, "temperature")
        return f"Nothing to take: the hot stream may not be cooled below {lowest}."
    low, high = (format_quantity(each, "power", 2) for each in (answer.net_power_low, answer.net_power_high))
    realistic = f"{low} to {high} net from {answer.module_count_low:,.0f} to {answer.module_count_high:,.0f} modules"
    if answer.yearly_heat_worth > answer.yearly_electricity_worth_high:
        heat, most = (
            f"{significant(each, 2)} {answer.currency}"
            for each in (answer.yearly_heat_worth, answer.yearly_electricity_worth_high)
        )
        return (
            f"If somebody can use the heat as heat, let them: it is worth {heat} a year against at most {most} of "
            f"electricity; otherwise {realistic}."
        )
    if answer.yearly_heat_worth <= answer.yearly_electricity_worth_high:
        return f"Worth an estimate: {realistic}."
    return f"Worth an estimate where nobody can use the heat as heat: {realistic}."
