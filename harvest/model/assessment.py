"""The checks of every estimate: closure, second law, grid, limits, hazards and plausibility."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from harvest.model.checks import FAIL, PASS, WARN, BatchCheck, graded
from harvest.model.module import (
    COOLER,
    GENERATOR,
    LARGEST_DISAGREEMENT,
    cooler_heat_disagreement,
    cooler_matched_powers,
)
from harvest.model.pressure import handled_density
from harvest.model.rated_side import rated_range
from harvest.physics.arrays import BoolArray, FloatArray
from harvest.physics.combustion import GAS_CONSTANT, sulphuric_acid_dew_point, sulphuric_acid_fraction, water_dew_point
from harvest.physics.ducts import LAMINAR_LIMIT, OFFSET_STRIP_REYNOLDS_RANGE, TURBULENT_LIMIT
from harvest.physics.expansion import EXPANSION, differential_expansion
from harvest.physics.films import Film, OffsetStripFilm
from harvest.physics.natural_convection import FinnedSink
from harvest.physics.rated import RatedFilm
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
SMALLEST_DUCT_SHARE = 0.8
LARGEST_ARITHMETIC_UNITS = 0.1
LARGEST_CORRECTION = 0.05
SOLDER_TEMPERATURE = 383.15
SOLDER_MELTS = 411.15
LARGEST_MACH = 0.3
LARGEST_DROP_SHARE = 0.1
BOILING_MARGIN = 10.0
FREEZING_MARGIN = 3.0
ACID_MARGIN = 15.0
SMALLEST_POWER = 1e-9
SPACING_SHARES = (0.7, 1.6)
"""Fin spacing over the best one between which thin fins convect three quarters or more of the most."""
FASTEST = {"liquid": 2.5, "gas": 40.0}


def _kelvin(value: float) -> str:
    return format_quantity(value, "temperature")


def assess(solved: Solved, scalars: dict[str, FloatArray], grid_effect: FloatArray) -> tuple[BatchCheck, ...]:
    """All checks of a solved batch that apply to it, in the order in which they are reported."""
    checks = [
        *_of_the_solution(solved, scalars, grid_effect),
        *_of_temperatures(solved, scalars),
        *_of_lost_coolant(solved),
        *_of_electricity(solved, scalars),
        *(check for stream in (solved.made.hot, solved.made.cold) for check in _of_a_stream(solved, scalars, stream)),
        *_of_heat_sinks(solved),
        *_of_limits(solved, scalars),
        *_of_standstill(solved),
        *_of_expansion(solved),
        *_of_the_module(solved),
        *_of_the_module_data(solved),
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
    taken = np.maximum(np.abs(chosen.module_heat), np.abs(chosen.module_heat - chosen.module_power))
    share = chosen.largest(np.where(warm, chosen.module_power / taken / ceiling, 0.0))
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


def _of_lost_coolant(solved: Solved) -> Iterator[BatchCheck]:
    """Where the stack settles when the cold stream stops and the hot one goes on."""
    batch, cold = solved.made.batch, solved.made.cold
    limit = np.fmin(batch.number("limits.hot_face_temperature"), batch.number("module.maximum_hot_face_temperature"))
    face, wall = solved.coolant_lost.hot_face, solved.coolant_lost.cold_wall
    what = "the cold stream stops" if cold.sink is None else "the heat sinks are covered and give no heat"

    def judgement(i: int) -> str:
        if np.isnan(face[i]):
            return ": no solution was found."
        if np.isnan(limit[i]):
            return "; the case states no limit of the face."
        return "; provide a bypass or a trip." if face[i] > limit[i] else ", which it bears."

    yield BatchCheck(
        "hot face without coolant",
        "temperature",
        face,
        limit,
        graded((face > limit) | np.isnan(face), level=WARN),
        lambda i: f"If {what}, the hottest face settles at {_kelvin(face[i])}{judgement(i)}",
    )
    if cold.fluid is None or not np.isfinite(cold.table_value("boiling")).any():
        return
    boiling = cold.table_value("boiling")
    yield BatchCheck(
        "cold boiling without flow",
        "temperature",
        wall,
        boiling,
        graded((wall >= boiling) | np.isnan(wall), level=WARN),
        lambda i: (
            f"If the cold stream stops, its wall settles at {_kelvin(wall[i])}; {cold.tables[0].label} boils at about "
            f"{_kelvin(boiling[i])} at its inlet pressure"
            + ("; give the steam a way out and keep a closed loop relieved." if wall[i] >= boiling[i] else ".")
        ),
    )


def _of_standstill(solved: Solved) -> Iterator[BatchCheck]:
    """Freezing of liquids that stand still in the surroundings."""
    surroundings = solved.made.batch.number("site.ambient_temperature")
    for stream in (solved.made.hot, solved.made.cold):
        if stream.fluid is not None and np.isfinite(stream.table_value("freezing")).any():
            yield _standstill_check(stream.name, stream.tables[0].label, surroundings, stream.table_value("freezing"))


def _standstill_check(side: str, label: str, surroundings: FloatArray, freezing: FloatArray) -> BatchCheck:
    wrong = surroundings < freezing + FREEZING_MARGIN
    return BatchCheck(
        f"{side} freezing at standstill",
        "temperature",
        surroundings,
        freezing,
        graded(wrong, level=WARN),
        lambda i: (
            f"At standstill {label} takes the surroundings' {_kelvin(surroundings[i])}; it freezes at "
            f"{_kelvin(freezing[i])}" + ("; drain it, warm it or take a glycol." if wrong[i] else ".")
        ),
        bound=AT_LEAST,
    )


def _of_expansion(solved: Solved) -> Iterator[BatchCheck]:
    """How far the hot plates outgrow the cold ones along the flow."""
    batch, chosen = solved.made.batch, solved.chosen
    length = batch.number("stack.rows") * batch.number("stack.row_pitch")
    rows = chosen.active.sum(axis=0)
    hot, cold = ((wall * chosen.active).sum(axis=0) / rows for wall in (chosen.state.hot_wall, chosen.state.cold_wall))
    assembled = batch.number("site.ambient_temperature")
    growths = {
        material: differential_expansion(length, coefficient, hot, coefficient, cold, assembled)
        for material, coefficient in EXPANSION.items()
    }
    growth = np.max(list(growths.values()), axis=0)
    yield BatchCheck(
        "thermal expansion",
        "length",
        growth,
        _fixed(solved, np.nan),
        np.full(batch.cases, PASS),
        lambda i: (
            f"Over {format_quantity(length[i], 'length')} plates that are {hot[i] - cold[i]:.0f} K warmer outgrow "
            f"cold ones by {', '.join(f'{1e3 * each[i]:.2f} mm in {material}' for material, each in growths.items())} "
            "(coefficients from memory); springs and clearances must follow it."
        ),
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
            (
                "Nothing is generated at this load."
                if scalars["generated_power"][i] <= 0
                else "The drives, the converter and the auxiliaries take more than the modules give."
            )
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
    yield from _of_condensate(solved, stream, metal)
    mean = 0.5 * (boundaries[:-1] + boundaries[1:])
    yield from _of_the_description(solved, scalars, stream, mean)
    yield from _of_the_drive(solved, scalars, stream)
    gas = bool(np.isfinite(stream.table_value("molar_mass")).all())
    if isinstance(stream.film, RatedFilm):
        yield from _of_rated_blocks(solved, stream, stream.film, mean)
    else:
        yield from _of_passages(solved, stream, stream.film, mean, (bulk_low, bulk_high), gas)
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


def _of_passages(
    solved: Solved, stream: Stream, film: Film, mean: FloatArray, bulk: tuple[FloatArray, FloatArray], gas: bool
) -> Iterator[BatchCheck]:
    """Flow regime, velocity and Mach number in computed ducts; `mean` and lowest and highest `bulk` [K]."""
    assert stream.fluid is not None
    side, chosen, (bulk_low, bulk_high) = stream.name, solved.chosen, bulk
    reynolds = film.reynolds(stream.fluid.viscosity(mean))
    if isinstance(film, OffsetStripFilm):
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
    fastest = FASTEST["gas" if gas else "liquid"]
    density = stream.fluid.density(np.stack([bulk_low, bulk_high]))
    velocity = (film.mass_flux / density).max(axis=0)
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


def _of_rated_blocks(solved: Solved, stream: Stream, film: RatedFilm, mean: FloatArray) -> Iterator[BatchCheck]:
    """Flow through each rated block, and the flow at the rating that has the same Reynolds number."""
    assert stream.fluid is not None
    batch, side = solved.made.batch, stream.name
    low, high = rated_range(batch, side)
    alike = film.rated_flow_of_equal_reynolds(stream.fluid.viscosity(mean))
    least, most = solved.chosen.smallest(alike), solved.chosen.largest(alike)
    beyond = (least < low) | (most > high)
    across = batch.number(f"{side}.duct.blocks_in_parallel")
    yield BatchCheck(
        f"{side} rated blocks",
        "volume flow",
        film.flow,
        _fixed(solved, high),
        graded(beyond, level=WARN),
        lambda i: (
            f"{format_quantity(film.flow[i], 'volume flow')} through each block, {across[i]:.0f} in parallel and "
            f"{film.in_series[i]:.0f} in series in a duct, rated from {format_quantity(low, 'volume flow')} to "
            f"{format_quantity(high, 'volume flow')}; by Reynolds number that is "
            f"{format_quantity(least[i], 'volume flow')} to {format_quantity(most[i], 'volume flow')} at the rating"
            + (", beyond the curve: its slope there is taken." if beyond[i] else ".")
        ),
    )


def _of_the_drive(solved: Solved, scalars: dict[str, FloatArray], stream: Stream) -> Iterator[BatchCheck]:
    """Where a pump or fan curve meets the resistance."""
    batch, side = solved.made.batch, stream.name
    curve = getattr(batch.base, side).drive_curve
    if curve is None:
        return
    outlet = scalars[f"{side}_outlet_temperature"]
    flow = stream.mass_flow / handled_density(batch, stream, outlet)
    without = np.fmin(batch.number(f"{side}.circuit_flow"), curve.flows[-1])
    drop = scalars[f"{side}_pressure_drop"]
    yield BatchCheck(
        f"{side} drive curve",
        "volume flow",
        flow,
        without,
        graded(flow < 0, PASS),
        lambda i: (
            f"The curve drives {format_quantity(flow[i], 'volume flow')} through the stack, which takes "
            f"{format_quantity(drop[i], 'pressure difference')}"
            + (
                f"; without the stack the circuit has {format_quantity(without[i], 'volume flow')}."
                if batch.given(f"{side}.circuit_flow")
                else "; the rest of the circuit is not given and takes nothing."
            )
        ),
    )


def _of_heat_sinks(solved: Solved) -> Iterator[BatchCheck]:
    """What heat sinks in still air ask of their place."""
    made, chosen = solved.made, solved.chosen
    if made.cold.sink is None:
        return
    batch, room = made.batch, made.cold.inlet_temperature
    rise = chosen.largest(np.abs(chosen.cold_metal - room))
    above = batch.number("stack.rows") * batch.number("stack.columns") > 1
    yield BatchCheck(
        "heat sink air",
        "temperature difference",
        rise,
        _fixed(solved, np.nan),
        graded(above, level=WARN),
        lambda i: (
            f"The warmest heat sink stands {format_quantity(rise[i], 'temperature difference')} above the room"
            + (
                "; each is taken in fresh room air: set them side by side, as one above another meets warmed air."
                if above[i]
                else " in fresh, still air with its fins vertical."
            )
        ),
    )
    if isinstance(made.cold.sink, FinnedSink):
        yield _spacing_check(solved, made.cold.sink, rise)


def _spacing_check(solved: Solved, sink: FinnedSink, rise: FloatArray) -> BatchCheck:
    room = solved.made.cold.inlet_temperature
    best = sink.optimum_spacing(room + rise, room)
    share = sink.fin_spacing / best
    low, high = SPACING_SHARES
    odd = (share < low) | (share > high)
    return BatchCheck(
        "heat sink fin spacing",
        "length",
        sink.fin_spacing,
        high * best,
        graded(odd, level=WARN),
        lambda i: (
            f"Fins stand {format_quantity(sink.fin_spacing[i], 'length')} apart; at this rise thin fins of this height "
            f"give most heat at {format_quantity(best[i], 'length')}."
        ),
    )


def _of_the_description(
    solved: Solved, scalars: dict[str, FloatArray], stream: Stream, mean: FloatArray
) -> Iterator[BatchCheck]:
    """What in a side's description limits the trust in its numbers."""
    assert stream.fluid is not None and stream.film is not None
    batch, side, chosen = solved.made.batch, stream.name, solved.chosen
    if batch.base.stack.row_model == "arithmetic":
        heat_capacity, viscosity, conductivity = stream.fluid.film_properties(mean)
        problem = solved.made.problem
        capacity = (problem.hot if side == "hot" else problem.cold).mass_flow * heat_capacity
        units = chosen.largest(stream.film.conductance(heat_capacity, viscosity, conductivity) / capacity)
        yield BatchCheck(
            f"{side} row model",
            "dimensionless",
            units,
            _fixed(solved, LARGEST_ARITHMETIC_UNITS),
            graded(units > LARGEST_ARITHMETIC_UNITS, level=WARN),
            lambda i: (
                f"Up to {units[i]:.2g} film transfer units in one segment; the arithmetic row model holds to "
                f'{LARGEST_ARITHMETIC_UNITS:g}: take row_model = "exponential" or more segments.'
            ),
        )
    if getattr(batch.base, side).drive == "engine" and not batch.given(f"{side}.swept_volume_flow"):
        power = scalars[f"{side}_drive_power"]
        yield BatchCheck(
            f"{side} engine power",
            "power",
            power,
            _fixed(solved, np.nan),
            np.full(batch.cases, WARN),
            lambda i: (
                f"{format_quantity(power[i], 'power', 3)} is an upper bound, taken from the exhaust's own volume flow; "
                f"give {side}.swept_volume_flow."
            ),
        )
    width = batch.number(f"{side}.duct.width") * batch.number(f"{side}.duct.passages", 1.0)
    plate = batch.number("stack.columns") * batch.number("stack.column_pitch")
    share = np.where(np.isnan(width), 1.0, width / plate)
    if (share < SMALLEST_DUCT_SHARE).any():
        yield BatchCheck(
            f"{side} duct width",
            "dimensionless",
            share,
            _fixed(solved, SMALLEST_DUCT_SHARE),
            graded(share < SMALLEST_DUCT_SHARE, level=WARN),
            lambda i: (
                f"The passages cover {100 * share[i]:.0f} % of the plate, and the film is taken on all of it; give an "
                f"area_ratio of about {share[i]:.2f} if the rest is not wetted."
            ),
            bound=AT_LEAST,
        )


def _of_condensate(solved: Solved, stream: Stream, metal: FloatArray) -> Iterator[BatchCheck]:
    """Dew points of water and of sulphuric acid against the metal that the gas meets, row by row."""
    water = stream.table_value("water_fraction")
    if not (water > 0).any():
        return
    batch, side, segments = solved.made.batch, stream.name, solved.made.segments
    coldest = solved.chosen.smallest(metal)

    def wet_rows(i: int, limit: float) -> str:
        wet = (metal[:, i] < limit) & (solved.chosen.active[:, i] > 0)
        return f" in {-(-int(wet.sum()) // segments)} of {batch.number('stack.rows')[i]:.0f} rows"

    dew = water_dew_point(water * stream.pressure)
    yield BatchCheck(
        f"{side} water dew point",
        "temperature",
        coldest,
        dew,
        graded(coldest < dew, level=WARN),
        lambda i: (
            f"The coldest gas-side wall is at {_kelvin(coldest[i])}; water condenses below {_kelvin(dew[i])}"
            + (f"{wet_rows(i, dew[i])}; drain the condensate, which is acid." if coldest[i] < dew[i] else ".")
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
                f"{_kelvin(acid[i])} (+-5 K){wet_rows(i, acid[i]) if coldest[i] < acid[i] else ''}; metal is "
                f"kept {ACID_MARGIN:.0f} K above, common practice, no source."
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
        ("maximum_length", "stack_length", "length", "at most"),
        ("maximum_width", "stack_width", "length", "at most"),
        ("maximum_height", "stack_height", "length", "at most"),
        ("maximum_module_mass", "module_mass", "mass", "at most"),
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
            f"Z T of the module is {merit[i]:.3g}"
            + ("; no module on the market comes near it." if merit[i] > LARGEST_MERIT else ".")
        ),
    )
    lower, upper = made.module.lower, made.module.upper
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


def _of_the_module_data(solved: Solved) -> Iterator[BatchCheck]:
    """What the ratings say about themselves, and what a cooler suffers as a generator."""
    made, chosen = solved.made, solved.chosen
    batch, module = made.batch, made.module
    if module.way == GENERATOR and len(batch.base.module.generator_rating or ()) > 1:
        yield BatchCheck(
            "module data, rated points",
            "dimensionless",
            _fixed(solved, module.residual),
            _fixed(solved, LARGEST_DISAGREEMENT),
            graded(_fixed(solved, module.residual) > LARGEST_DISAGREEMENT, level=WARN),
            lambda _: f"The rated points lie within {100 * module.residual:.2g} % of the parameters taken from them.",
        )
    if module.way != COOLER:
        return
    apart = cooler_heat_disagreement(batch)
    if np.isfinite(apart).any():
        yield BatchCheck(
            "module data, heat rating",
            "dimensionless",
            np.abs(apart),
            _fixed(solved, LARGEST_DISAGREEMENT),
            graded(np.abs(apart) > LARGEST_DISAGREEMENT, level=WARN),
            lambda i: (
                f"The stated heat rating differs by {100 * apart[i]:+.1f} % from the one that the other three imply, "
                "and so do the parameters by the two extractions."
            ),
        )
    hot, cold = chosen.state.hot_junction, chosen.state.cold_junction
    corrected, uncorrected = (chosen.total(each) for each in cooler_matched_powers(batch, hot, cold))
    flattery = np.where(corrected > 0, uncorrected / corrected - 1.0, 0.0)
    yield BatchCheck(
        "module data, rating temperature",
        "dimensionless",
        flattery,
        _fixed(solved, LARGEST_CORRECTION),
        graded(np.abs(flattery) > LARGEST_CORRECTION, level=WARN),
        lambda i: (
            f"Into a matched load at these temperatures the modules give {format_quantity(corrected[i], 'power')} with "
            f"the parameters brought from the rating to the operating temperature, and "
            f"{format_quantity(uncorrected[i], 'power')} ({100 * flattery[i]:+.0f} %) with those of the rating; "
            f"{'the first are used.' if module.materials else 'the second are used, as the case asks.'}"
        ),
    )
    hottest = np.maximum(chosen.largest(chosen.hot_face), solved.open_circuit.largest(solved.open_circuit.hot_face))
    yield BatchCheck(
        "module data, solder",
        "temperature",
        hottest,
        _fixed(solved, SOLDER_TEMPERATURE),
        graded(hottest > SOLDER_TEMPERATURE, level=WARN),
        lambda i: (
            f"A face of these coolers reaches {_kelvin(hottest[i])}, with or without load"
            + (
                f"; the bismuth-tin solder of many coolers melts at {_kelvin(SOLDER_MELTS)} and is kept below "
                f"{_kelvin(SOLDER_TEMPERATURE)} (common practice, no source): ask what solder the part has."
                if hottest[i] > SOLDER_TEMPERATURE
                else "."
            )
        ),
    )
