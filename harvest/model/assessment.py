"""The checks of every estimate: closure, second law, grid, loss of load and coolant, electricity, the case's limits."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from harvest.model.checks import (
    AT_LEAST,
    CLOSURE_LIMIT,
    FREEZING_MARGIN,
    GRID_LIMIT,
    PASS,
    SHOCK_VOLTAGE,
    SMALLEST_POWER,
    WARN,
    BatchCheck,
    celsius,
    for_all,
    graded,
)
from harvest.physics.arrays import FloatArray
from harvest.physics.expansion import EXPANSION, differential_expansion
from harvest.physics.thermoelectrics import figure_of_merit, maximum_efficiency
from harvest.quantities import format_quantity

if TYPE_CHECKING:
    from harvest.model.solution import Solved

from harvest.model.module_checks import checks_of_the_module, checks_of_the_module_data
from harvest.model.stream_checks import checks_of_a_stream, checks_of_heat_sinks


def assess(solved: Solved, scalars: dict[str, FloatArray], grid_effect: FloatArray) -> tuple[BatchCheck, ...]:
    """All checks of a solved batch that apply to it, in the order in which they are reported."""
    checks = [
        *_of_the_solution(solved, scalars, grid_effect),
        *_of_temperatures(solved, scalars),
        *_of_lost_coolant(solved),
        *_of_electricity(solved, scalars),
        *(
            check
            for stream in (solved.made.hot, solved.made.cold)
            for check in checks_of_a_stream(solved, scalars, stream)
        ),
        *checks_of_heat_sinks(solved),
        *_of_limits(solved, scalars),
        *_of_standstill(solved),
        *_of_expansion(solved),
        *checks_of_the_module(solved),
        *checks_of_the_module_data(solved),
    ]
    return tuple(checks)


def _of_the_solution(solved: Solved, scalars: dict[str, FloatArray], grid_effect: FloatArray) -> Iterator[BatchCheck]:
    closure = scalars["energy_closure"]
    yield BatchCheck(
        "energy closure",
        "dimensionless",
        closure,
        for_all(solved, CLOSURE_LIMIT),
        graded(~(np.abs(closure) < CLOSURE_LIMIT)),
        lambda i: f"Heat in, heat out and electricity close to {abs(closure[i]):.1e} of the heat flow.",
    )
    entropy = scalars["entropy_generation"]
    rounding = CLOSURE_LIMIT * solved.chosen.heat_scale / solved.made.cold.inlet_temperature
    yield BatchCheck(
        "second law",
        "conductance",
        entropy,
        for_all(solved, 0.0),
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
            for_all(solved, GRID_LIMIT),
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
        for_all(solved, 1.0),
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
        for_all(solved, 0.0),
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
    own = batch.number("limits.hot_face_temperature_without_load")
    limit_opened = np.fmin(np.where(np.isfinite(own), own, of_case), of_module)
    hottest, opened = scalars["hottest_face_temperature"], scalars["open_circuit_face_temperature"]
    if np.isfinite(limit).any():
        yield BatchCheck(
            "hot face temperature",
            "temperature",
            hottest,
            limit,
            graded(hottest > limit),
            lambda i: f"The hottest module face is at {celsius(hottest[i])}; allowed is {celsius(limit[i])}.",
        )
    if np.isfinite(limit_opened).any():
        yield BatchCheck(
            "hot face without load",
            "temperature",
            opened,
            limit_opened,
            graded(opened > limit_opened),
            lambda i: (
                f"If the load is lost, the hot face rises by {opened[i] - hottest[i]:.0f} K to {celsius(opened[i])}, "
                f"because the current no longer carries heat away; allowed is {celsius(limit_opened[i])}."
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
            lambda i: f"The warmest cold face is at {celsius(coldest[i])}; allowed is {celsius(of_cold[i])}.",
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
        lambda i: f"If {what}, the hottest face settles at {celsius(face[i])}{judgement(i)}",
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
            f"If the cold stream stops, its wall settles at {celsius(wall[i])}; {cold.tables[0].label} boils at about "
            f"{celsius(boiling[i])} at its inlet pressure"
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
            f"At standstill {label} takes the surroundings' {celsius(surroundings[i])}; it freezes at "
            f"{celsius(freezing[i])}" + ("; drain it, warm it or take a glycol." if wrong[i] else ".")
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
        for_all(solved, np.nan),
        np.full(batch.cases, PASS),
        lambda i: (
            f"Over {format_quantity(length[i], 'length')} plates that are {hot[i] - cold[i]:.0f} K warmer outgrow "
            f"cold ones by {', '.join(f'{1e3 * each[i]:.2f} mm in {material}' for material, each in growths.items())} "
            "(coefficients from memory); springs and clearances must follow it."
        ),
    )


def _of_electricity(solved: Solved, scalars: dict[str, FloatArray]) -> Iterator[BatchCheck]:
    highest = np.abs(solved.open_circuit.state.string_voltage).max(axis=0)
    yield BatchCheck(
        "open-circuit voltage",
        "voltage",
        highest,
        for_all(solved, SHOCK_VOLTAGE),
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
    allowed = solved.made.batch.number("limits.maximum_open_circuit_voltage")
    if np.isfinite(allowed).any():
        yield _limit_check("maximum open circuit voltage", "voltage", highest, allowed, "at most")
    window = solved.made.batch.base.electrical.converter_window
    if window is not None:
        strings = solved.chosen.state.string_voltage
        least, most = strings.min(axis=0), strings.max(axis=0)
        outside = ~((least >= window[0] * (1 - 1e-9)) & (most <= window[1] * (1 + 1e-9)))
        own = solved.made.problem.circuit.independent

        def of_converter(i: int) -> str:
            spread = format_quantity(least[i], "voltage")
            if own and most[i] > least[i]:
                spread += f" to {format_quantity(most[i], 'voltage')}"
            return (
                f"{'Voltages at the strings are' if own else 'The terminal voltage is'} {spread}; "
                f"{'each' if own else 'the'} converter works from {format_quantity(window[0], 'voltage')} to "
                f"{format_quantity(window[1], 'voltage')}."
            )

        yield BatchCheck(
            "converter window",
            "voltage",
            least,
            for_all(solved, window[0]),
            graded(outside),
            of_converter,
            bound=AT_LEAST,
        )
        yield BatchCheck(
            "converter without load",
            "voltage",
            highest,
            for_all(solved, window[1]),
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
        for_all(solved, 0.0),
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
        return f"It is {format_quantity(value[i], kind)}; the case asks for {bound} {format_quantity(limit[i], kind)}."

    return BatchCheck(name, kind, value, limit, graded(wrong), text, bound)
