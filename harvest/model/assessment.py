"""The checks of every estimate: closure, second law, grid, limits, hazards and plausibility."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from harvest.model.checks import FAIL, PASS, WARN, BatchCheck, graded
from harvest.physics.arrays import BoolArray, FloatArray
from harvest.physics.combustion import GAS_CONSTANT, sulphuric_acid_dew_point, sulphuric_acid_fraction, water_dew_point
from harvest.physics.ducts import LAMINAR_LIMIT, OFFSET_STRIP_REYNOLDS_RANGE, TURBULENT_LIMIT
from harvest.physics.films import OffsetStripFilm
from harvest.physics.thermoelectrics import figure_of_merit, maximum_efficiency
from harvest.quantities import format_quantity

if TYPE_CHECKING:
    from harvest.model.design import Stream
    from harvest.model.estimate import Solved

CLOSURE_LIMIT = 1e-8
GRID_LIMIT = 0.01
AT_LEAST = "at least"
SHOCK_VOLTAGE = 60.0
LARGEST_COUPLE_SEEBECK = 0.5e-3
LARGEST_MERIT = 2.0
SMALLEST_COVERAGE = 0.5
LARGEST_MACH = 0.3
LARGEST_DROP_SHARE = 0.1
BOILING_MARGIN = 10.0
FREEZING_MARGIN = 3.0
ACID_MARGIN = 15.0
SMALLEST_POWER = 1e-9
FASTEST = {"liquid": 2.5, "gas": 40.0}


def _kelvin(value: float) -> str:
    return format_quantity(value, "temperature")


def assess(solved: Solved, scalars: dict[str, FloatArray], grid_effect: FloatArray) -> tuple[BatchCheck, ...]:
    """All checks of a solved batch that apply to it, in the order in which they are reported."""
    checks = [
        *_of_the_solution(solved, scalars, grid_effect),
        *_of_temperatures(solved, scalars),
        *_of_electricity(solved, scalars),
        *(check for stream in (solved.made.hot, solved.made.cold) for check in _of_a_stream(solved, scalars, stream)),
        *_of_limits(solved, scalars),
        *_of_the_module(solved),
    ]
    return tuple(checks)


def _fixed(solved: Solved, value: float) -> FloatArray:
    return np.full(solved.made.batch.cases, value)


def _of_the_solution(solved: Solved, scalars: dict[str, FloatArray], grid_effect: FloatArray) -> Iterator[BatchCheck]:
    closure = scalars["energy_closure"]
    yield BatchCheck(
        "energy closure",
        "dimensionless",
        closure,
        _fixed(solved, CLOSURE_LIMIT),
        graded(~(np.abs(closure) < CLOSURE_LIMIT)),
        lambda i: f"Heat in, heat out and electricity close to {abs(closure[i]):.1e} of the heat flow.",
    )
    entropy = scalars["entropy_generation"]
    rounding = CLOSURE_LIMIT * solved.chosen.heat_scale / solved.made.cold.inlet_temperature
    yield BatchCheck(
        "second law",
        "conductance",
        entropy,
        _fixed(solved, 0.0),
        graded(~(entropy > -rounding)),
        lambda i: (
            f"The stack generates {format_quantity(entropy[i], 'conductance')} of entropy; it must not be negative."
        ),
        bound=AT_LEAST,
    )
    if np.isfinite(grid_effect).any():
        yield BatchCheck(
            "grid",
            "dimensionless",
            grid_effect,
            _fixed(solved, GRID_LIMIT),
            graded(np.abs(grid_effect) > GRID_LIMIT, level=WARN),
            lambda i: f"Splitting every row in two changes the maximum power by {100 * grid_effect[i]:+.2f} %.",
        )
    chosen = solved.chosen
    z = figure_of_merit(chosen.seebeck, chosen.resistance, chosen.conductance)
    hot, cold = chosen.state.hot_junction, chosen.state.cold_junction
    upper, lower = np.maximum(hot, cold), np.minimum(hot, cold)
    ceiling = maximum_efficiency(z * 0.5 * (hot + cold), upper, lower)
    warm = (upper - lower > 1e-6) & (chosen.module_power > 0)
    share = chosen.largest(np.where(warm, np.abs(chosen.module_power / chosen.module_heat) / ceiling, 0.0))
    yield BatchCheck(
        "efficiency ceiling",
        "dimensionless",
        share,
        _fixed(solved, 1.0),
        graded(share > 1.0 + 1e-9),
        lambda i: (
            f"The best row reaches {100 * share[i]:.0f} % of the closed-form ceiling of its junction temperatures."
        ),
    )
    reversed_rows = (chosen.row_current * chosen.seebeck * (hot - cold) < -SMALLEST_POWER) & (chosen.active > 0)
    count = reversed_rows.sum(axis=0).astype(float) / solved.made.segments
    yield BatchCheck(
        "current direction",
        "dimensionless",
        count,
        _fixed(solved, 0.0),
        graded(count > 0, level=WARN),
        lambda i: (
            f"In {count[i]:.0f} rows the current runs against the module's own voltage: they work as coolers."
            if count[i] > 0
            else "Every module generates."
        ),
    )
    turned = solved.made.hot.inlet_temperature < solved.made.cold.inlet_temperature
    if turned.any():
        yield BatchCheck(
            "sides",
            "temperature",
            solved.made.hot.inlet_temperature,
            solved.made.cold.inlet_temperature,
            graded(turned, level=WARN),
            lambda i: (
                "The hot inlet is colder than the cold inlet; heat flows from cold to hot side."
                if turned[i]
                else "The hot inlet is the hotter one."
            ),
        )


def _of_temperatures(solved: Solved, scalars: dict[str, FloatArray]) -> Iterator[BatchCheck]:
    batch = solved.made.batch
    of_case = batch.number("limits.hot_face_temperature")
    of_module = batch.number("module.maximum_hot_face_temperature")
    limit = np.fmin(of_case, of_module)
    hottest, opened = scalars["hottest_face_temperature"], scalars["open_circuit_face_temperature"]
    if np.isfinite(limit).any():
        yield BatchCheck(
            "hot face temperature",
            "temperature",
            hottest,
            limit,
            graded(hottest > limit),
            lambda i: f"The hottest module face is at {_kelvin(hottest[i])}; allowed is {_kelvin(limit[i])}.",
        )
        yield BatchCheck(
            "hot face without load",
            "temperature",
            opened,
            limit,
            graded(opened > limit),
            lambda i: (
                f"If the load is lost, the hot face rises by {opened[i] - hottest[i]:.0f} K to {_kelvin(opened[i])}, "
                "because the current no longer carries heat away."
            ),
        )
        inlet = solved.made.hot.inlet_temperature
        yield BatchCheck(
            "hot face without coolant",
            "temperature",
            inlet,
            limit,
            graded(inlet > limit, level=WARN),
            lambda i: (
                f"If the coolant stops, the hot face drifts towards the hot inlet, {_kelvin(inlet[i])}"
                + ("; provide a bypass or a trip." if inlet[i] > limit[i] else ", which it bears.")
            ),
        )
    of_cold = batch.number("limits.cold_face_temperature")
    if np.isfinite(of_cold).any():
        coldest = solved.chosen.largest(solved.chosen.cold_face)
        yield BatchCheck(
            "cold face temperature",
            "temperature",
            coldest,
            of_cold,
            graded(coldest > of_cold),
            lambda i: f"The warmest cold face is at {_kelvin(coldest[i])}; allowed is {_kelvin(of_cold[i])}.",
        )


def _of_electricity(solved: Solved, scalars: dict[str, FloatArray]) -> Iterator[BatchCheck]:
    strings = solved.open_circuit.state.string_voltage
    highest = np.abs(strings).max(axis=0)
    yield BatchCheck(
        "open-circuit voltage",
        "voltage",
        highest,
        _fixed(solved, SHOCK_VOLTAGE),
        graded(highest > SHOCK_VOLTAGE, level=WARN),
        lambda i: (
            f"Without load the string stands at {format_quantity(highest[i], 'voltage')}"
            + (
                ", above 60 V DC: a shock hazard that cannot be switched off while the stack is warm; treat it as live."
                if highest[i] > SHOCK_VOLTAGE
                else ", below 60 V DC."
            )
        ),
    )
    window = solved.made.batch.base.electrical.converter_window
    if window is not None:
        voltage = scalars["voltage"]
        outside = (voltage < window[0] * (1 - 1e-9)) | (voltage > window[1] * (1 + 1e-9))
        yield BatchCheck(
            "converter window",
            "voltage",
            voltage,
            _fixed(solved, window[0]),
            graded(outside),
            lambda i: (
                f"The terminal voltage is {format_quantity(voltage[i], 'voltage')}; the converter works from "
                f"{format_quantity(window[0], 'voltage')} to {format_quantity(window[1], 'voltage')}."
            ),
            bound=AT_LEAST,
        )
        yield BatchCheck(
            "converter without load",
            "voltage",
            highest,
            _fixed(solved, window[1]),
            graded(highest > window[1], level=WARN),
            lambda i: (
                f"Without load {format_quantity(highest[i], 'voltage')} meet the converter's upper limit of "
                f"{format_quantity(window[1], 'voltage')}"
                + ("; it needs protection when it does not draw." if highest[i] > window[1] else ".")
            ),
        )
    net = scalars["net_power"]
    yield BatchCheck(
        "net power",
        "power",
        net,
        _fixed(solved, 0.0),
        graded(net <= 0, level=WARN),
        lambda i: (
            "Driving the streams costs more than the modules give."
            if net[i] <= 0
            else f"{format_quantity(net[i], 'power')} is left after converter, auxiliaries and drives."
        ),
        bound=AT_LEAST,
    )


def _of_a_stream(solved: Solved, scalars: dict[str, FloatArray], stream: Stream) -> Iterator[BatchCheck]:
    if stream.fluid is None or stream.film is None:
        return
    side, chosen = stream.name, solved.chosen
    boundaries = chosen.state.hot_stream if side == "hot" else chosen.state.cold_stream
    metal = chosen.hot_metal if side == "hot" else chosen.cold_metal
    warmest, coldest = chosen.largest(metal), chosen.smallest(metal)
    bulk_high, bulk_low = boundaries.max(axis=0), boundaries.min(axis=0)
    lower, upper = stream.table_value("lower_limit"), stream.table_value("upper_limit")
    label = stream.tables[0].label
    yield BatchCheck(
        f"{side} fluid range",
        "temperature",
        bulk_high,
        upper,
        graded((bulk_high > upper) | (bulk_low < lower)),
        lambda i: (
            f"The stream runs from {_kelvin(bulk_low[i])} to {_kelvin(bulk_high[i])}; {label} is served from "
            f"{_kelvin(lower[i])} to {_kelvin(upper[i])}."
        ),
    )
    boiling, freezing = stream.table_value("boiling"), stream.table_value("freezing")
    if np.isfinite(boiling).any():
        yield BatchCheck(
            f"{side} boiling at the wall",
            "temperature",
            warmest,
            boiling,
            np.where(warmest >= boiling, FAIL, graded(warmest > boiling - BOILING_MARGIN, level=WARN)),
            lambda i: (
                f"The warmest wetted wall is at {_kelvin(warmest[i])}; {label} boils at about {_kelvin(boiling[i])} "
                f"at its inlet pressure, {boiling[i] - warmest[i]:.0f} K of margin."
            ),
        )
    if np.isfinite(freezing).any():
        yield BatchCheck(
            f"{side} freezing at the wall",
            "temperature",
            coldest,
            freezing,
            np.where(coldest <= freezing, FAIL, graded(coldest < freezing + FREEZING_MARGIN, level=WARN)),
            lambda i: (
                f"The coldest wetted wall is at {_kelvin(coldest[i])}; {label} freezes at {_kelvin(freezing[i])}."
            ),
            bound=AT_LEAST,
        )
    yield from _of_condensate(solved, stream, coldest)
    mean = 0.5 * (boundaries[:-1] + boundaries[1:])
    reynolds = stream.film.reynolds(stream.fluid.viscosity(mean))
    if isinstance(stream.film, OffsetStripFilm):
        low, high = OFFSET_STRIP_REYNOLDS_RANGE
        odd: BoolArray = (reynolds < low) | (reynolds > high)
        sentence = f"of {side} rows lie outside the offset-strip correlation, Re {low:.0f} to {high:.0f}."
    else:
        odd = (reynolds > LAMINAR_LIMIT) & (reynolds < TURBULENT_LIMIT)
        sentence = (
            f"of {side} rows lie in the transition between laminar and turbulent flow, where films are least sure."
        )
    share = (odd & (chosen.active > 0)).sum(axis=0) / chosen.active.sum(axis=0)
    yield BatchCheck(
        f"{side} flow regime",
        "dimensionless",
        share,
        _fixed(solved, 0.0),
        graded(share > 0, level=WARN),
        lambda i: f"{100 * share[i]:.0f} % {sentence}",
    )
    gas = np.isfinite(stream.table_value("molar_mass")).all()
    fastest = FASTEST["gas" if gas else "liquid"]
    density = stream.fluid.density(np.stack([bulk_low, bulk_high]))
    velocity = (stream.film.mass_flux / density).max(axis=0)
    yield BatchCheck(
        f"{side} velocity",
        "speed",
        velocity,
        _fixed(solved, fastest),
        graded(velocity > fastest, level=WARN),
        lambda i: (
            f"Up to {velocity[i]:.2f} m/s in the {side} ducts; common practice, no source, stays below {fastest:g} m/s."
        ),
    )
    if gas:
        capacity = stream.fluid.heat_capacity(bulk_high[None])[0]
        specific = GAS_CONSTANT / stream.table_value("molar_mass")
        sound = np.sqrt(capacity / (capacity - specific) * specific * bulk_high)
        mach = velocity / sound
        yield BatchCheck(
            f"{side} Mach number",
            "dimensionless",
            mach,
            _fixed(solved, LARGEST_MACH),
            graded(mach > LARGEST_MACH, level=WARN),
            lambda i: f"Mach {mach[i]:.3f}; above {LARGEST_MACH:g} the incompressible pressure drop no longer holds.",
        )
    drop = scalars[f"{side}_pressure_drop"]
    part = drop / stream.pressure
    yield BatchCheck(
        f"{side} pressure drop share",
        "dimensionless",
        part,
        _fixed(solved, LARGEST_DROP_SHARE),
        np.where(part >= 1.0, FAIL, graded(part > LARGEST_DROP_SHARE, level=WARN)),
        lambda i: (
            f"The drop of {format_quantity(drop[i], 'pressure difference')} is {100 * part[i]:.2g} % of the inlet's "
            "absolute pressure."
        ),
    )


def _of_condensate(solved: Solved, stream: Stream, coldest: FloatArray) -> Iterator[BatchCheck]:
    """Dew points of water and of sulphuric acid against the coldest metal that the gas meets."""
    water = stream.table_value("water_fraction")
    if not (water > 0).any():
        return
    batch, side = solved.made.batch, stream.name
    dew = water_dew_point(water * stream.pressure)
    yield BatchCheck(
        f"{side} water dew point",
        "temperature",
        coldest,
        dew,
        graded(coldest < dew, level=WARN),
        lambda i: (
            f"The coldest gas-side wall is at {_kelvin(coldest[i])}; water condenses below {_kelvin(dew[i])}"
            + ("; drain the condensate, which is acid." if coldest[i] < dew[i] else ".")
        ),
        bound=AT_LEAST,
    )
    sulphur = batch.number(f"{side}.fuel_sulphur", 0.0)
    if (sulphur > 0).any():
        fraction = sulphuric_acid_fraction(
            getattr(batch.base, side).fuel,
            stream.excess_air_ratio,
            batch.number(f"{side}.intake_humidity", 0.0),
            sulphur,
            batch.number(f"{side}.sulphur_conversion", 0.0),
        )
        acid = sulphuric_acid_dew_point(water * stream.pressure, fraction * stream.pressure)
        yield BatchCheck(
            f"{side} acid dew point",
            "temperature",
            coldest,
            acid + ACID_MARGIN,
            graded(coldest < acid + ACID_MARGIN, level=WARN),
            lambda i: (
                f"The coldest gas-side wall is at {_kelvin(coldest[i])}; sulphuric acid condenses below about "
                f"{_kelvin(acid[i])} (+-5 K); metal is kept {ACID_MARGIN:.0f} K above, common practice, no source."
            ),
            bound=AT_LEAST,
        )


def _of_limits(solved: Solved, scalars: dict[str, FloatArray]) -> Iterator[BatchCheck]:
    batch = solved.made.batch
    limits = (
        ("hot_pressure_drop", "hot_pressure_drop", "pressure difference", "at most"),
        ("cold_pressure_drop", "cold_pressure_drop", "pressure difference", "at most"),
        ("back_pressure", "hot_pressure_drop", "pressure difference", "at most"),
        ("minimum_hot_outlet_temperature", "hot_outlet_temperature", "temperature", AT_LEAST),
        ("maximum_cold_outlet_temperature", "cold_outlet_temperature", "temperature", "at most"),
    )
    for field, result, kind, bound in limits:
        limit = batch.number(f"limits.{field}")
        if np.isfinite(limit).any():
            yield _limit_check(field.replace("_", " "), kind, scalars[result], limit, bound)


def _limit_check(name: str, kind: str, value: FloatArray, limit: FloatArray, bound: str) -> BatchCheck:
    wrong = value < limit if bound == AT_LEAST else value > limit

    def text(i: int) -> str:
        return (
            f"{name}: {format_quantity(value[i], kind)}; the case asks for {bound} {format_quantity(limit[i], kind)}."
        )

    return BatchCheck(name, kind, value, limit, graded(wrong), text, bound)


def _of_the_module(solved: Solved) -> Iterator[BatchCheck]:
    made, chosen = solved.made, solved.chosen
    batch, module = made.batch, made.batch.base.module
    couples = batch.number("module.couples") if module.legs is None else batch.number("module.legs.couples")
    if np.isfinite(couples).any():
        per_couple = chosen.largest(np.abs(chosen.seebeck)) / couples
        yield BatchCheck(
            "Seebeck of a couple",
            "Seebeck coefficient",
            per_couple,
            _fixed(solved, LARGEST_COUPLE_SEEBECK),
            graded(per_couple > LARGEST_COUPLE_SEEBECK, level=WARN),
            lambda i: (
                f"{1e3 * per_couple[i]:.3f} mV/K a couple"
                + (
                    "; common materials stay below 0.5 mV/K: check the Seebeck coefficient and the number of couples."
                    if per_couple[i] > LARGEST_COUPLE_SEEBECK
                    else ", within the reach of common materials."
                )
            ),
        )
    mean = 0.5 * (chosen.state.hot_junction + chosen.state.cold_junction)
    merit = chosen.largest(figure_of_merit(chosen.seebeck, chosen.resistance, chosen.conductance) * mean)
    yield BatchCheck(
        "figure of merit",
        "dimensionless",
        merit,
        _fixed(solved, LARGEST_MERIT),
        graded(merit > LARGEST_MERIT, level=WARN),
        lambda i: (
            f"Z T of the module is {merit[i]:.2f}"
            + ("; no module on the market comes near it." if merit[i] > LARGEST_MERIT else ".")
        ),
    )
    lower = max([each.lower for each in made.materials] + [module.minimum_temperature or 0.0])
    upper = min([each.upper for each in made.materials] + [module.maximum_temperature or np.inf])
    if np.isfinite(upper) or lower > 0:
        hottest = chosen.largest(np.maximum(chosen.state.hot_junction, chosen.state.cold_junction))
        coldest = chosen.smallest(np.minimum(chosen.state.hot_junction, chosen.state.cold_junction))
        yield BatchCheck(
            "module data range",
            "temperature",
            hottest,
            _fixed(solved, upper),
            graded((hottest > upper) | (coldest < lower), level=WARN),
            lambda i: (
                f"Junctions run from {_kelvin(coldest[i])} to {_kelvin(hottest[i])}; the module's data hold from "
                f"{_kelvin(lower)} to {_kelvin(upper)}."
            ),
        )
    coverage = made.footprint_area / made.place_area
    yield BatchCheck(
        "coverage",
        "dimensionless",
        coverage,
        _fixed(solved, SMALLEST_COVERAGE),
        graded(coverage < SMALLEST_COVERAGE, level=WARN),
        lambda i: (
            f"Modules cover {100 * coverage[i]:.0f} % of the plates"
            + (
                "; heat must converge on them, and the wall's spreading decides."
                if coverage[i] < SMALLEST_COVERAGE
                else "."
            )
        ),
        bound=AT_LEAST,
    )
    pressure = batch.number("stack.clamp_pressure")
    force = pressure * made.footprint_area
    layer = force * batch.number("stack.rows") * batch.number("stack.columns")
    yield BatchCheck(
        "clamping force",
        "force",
        force,
        _fixed(solved, np.nan),
        graded(force < 0, PASS),
        lambda i: (
            f"{format_quantity(pressure[i], 'pressure difference')} asks for {force[i] / 1e3:.2f} kN on a module and "
            f"{layer[i] / 1e3:.1f} kN on a layer; plates and bolts must bear it evenly."
        ),
    )
