"""The lean road to an answer: a batch solved at its own load only, for what asks of very many cases."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from harvest.model.batch import Batch
from harvest.model.costs import costs
from harvest.model.design import BETWEEN, Design, design, maximum_power_load
from harvest.model.driven_flow import driven_batch
from harvest.model.estimate import measures_of, powers_of
from harvest.model.loads import MATCHED, MAXIMUM_POWER, OPEN_CIRCUIT
from harvest.model.pressure import pressure_drop, side_drive_power
from harvest.model.solution import flag_range, pressure_drops, unfold
from harvest.model.stack import (
    Load,
    StackState,
    solve_stack,
)
from harvest.physics.arrays import FloatArray, ObjectArray


@dataclass(frozen=True, eq=False, repr=False)
class Outcomes:
    """What a search asks of many cases: `scalars` by result name, (cases,), NaN where `problem` says why not."""

    scalars: dict[str, FloatArray]
    problem: ObjectArray


SEARCH_CELLS = 200_000
"""Rows times cases that a search prepares and solves at a time, so that memory does not grow with the cases."""

SEARCHED = (
    "generated_power",
    "converted_power",
    "hot_drive_power",
    "cold_drive_power",
    "net_power",
    "voltage",
    "hot_outlet_temperature",
    "cold_outlet_temperature",
    "hot_pressure_drop",
    "cold_pressure_drop",
    "hottest_face_temperature",
    "hottest_junction_temperature",
    "warmest_cold_face_temperature",
    "stack_length",
    "stack_width",
    "stack_height",
    "module_mass",
    "building_cost",
    "cost_per_net_watt",
    "cost_per_kilowatt_hour",
    "payback_years",
    "discounted_payback_years",
)


SEARCHED_WITHOUT_LOAD = ("open_circuit_face_temperature", "highest_open_circuit_voltage")


def search_batch(batch: Batch, *, without_load: bool = False) -> Outcomes:
    """Answer a batch at its own load only, without checks: the numbers in `SEARCHED`, as an estimate has them.

    Parameters: `batch`; `without_load`, whether to solve without current too, for `SEARCHED_WITHOUT_LOAD`. A case
    without an answer is NaN throughout and says why in `problem`. Raises InputError for faults of all.
    """
    with np.errstate(all="ignore"):
        driven = driven_batch(batch)
        made = design(driven)
        wanting = made.faults.valid
        if not wanting.all():
            names = SEARCHED + SEARCHED_WITHOUT_LOAD * without_load
            scalars = {name: np.full(batch.cases, np.nan) for name in names}
            problem = made.faults.text.copy()
            if wanting.any():
                which = np.flatnonzero(wanting)
                found = search_batch(driven.take(which), without_load=without_load)
                problem[which] = found.problem
                for name, values in found.scalars.items():
                    scalars[name][which] = values
            return Outcomes(scalars, problem)
        best = state = solve_stack(made.problem, maximum_power_load(driven))
        if made.load.mode != MAXIMUM_POWER:  # the same road to other loads as in an estimate
            state = solve_stack(made.problem, Load(MATCHED), state)
        if made.load.mode not in (MAXIMUM_POWER, MATCHED):
            state = solve_stack(made.problem, made.load, state)
        made.faults.add(~state.converged, "no solution found at its load; the operating point may not exist")
        chosen = unfold(made, made.problem, state)
        for stream, boundaries in ((made.hot, state.hot_stream), (made.cold, state.cold_stream)):
            flag_range(made, stream, boundaries)
        hot_drop, cold_drop = pressure_drops(made, chosen)
        powers = powers_of(made, chosen, hot_drop, cold_drop)
        scalars = {
            **powers,
            **costs(driven, powers),
            "voltage": np.where(made.problem.circuit.independent, np.nan, state.string_voltage[0]),
            "hot_outlet_temperature": chosen.hot_outlet,
            "cold_outlet_temperature": chosen.cold_outlet,
            "hot_pressure_drop": hot_drop.total,
            "cold_pressure_drop": cold_drop.total,
            "hottest_face_temperature": chosen.largest(chosen.hot_face),
            "hottest_junction_temperature": chosen.largest(state.hot_junction),
            "warmest_cold_face_temperature": chosen.largest(chosen.cold_face),
            **measures_of(made),
            **(_without_load(made, best) if without_load else {}),
        }
        lost = ~np.isfinite(scalars["net_power"]) & made.faults.valid
        made.faults.add(lost, "the result is not a finite number")
    valid = made.faults.valid
    return Outcomes({name: np.where(valid, value, np.nan) for name, value in scalars.items()}, made.faults.text)


def _without_load(made: Design, start: StackState) -> dict[str, FloatArray]:
    """Results of a stack without current by name, (cases,), solved on the road of an estimate."""
    opened = solve_stack(made.problem, Load(OPEN_CIRCUIT), start)
    made.faults.add(~opened.converged & made.faults.valid, "no solution found without current")
    solution = unfold(made, made.problem, opened)
    return {
        "open_circuit_face_temperature": solution.largest(solution.hot_face),
        "highest_open_circuit_voltage": np.abs(opened.string_voltage).max(axis=0),
    }


def drive_power_without_heat(batch: Batch, side: str) -> tuple[FloatArray, ObjectArray]:
    """Drive power of a side whose stream passes the stack at its inlet temperature [W], or why there is none; (cases,).

    The other stream stands, whatever flow the batch has for it.
    """
    with np.errstate(all="ignore"):
        made = design(driven_batch(batch))
        stream = made.hot if side == "hot" else made.cold
        boundaries = np.ones((made.problem.rows + 1, 1)) * stream.inlet_temperature
        active = (np.arange(made.problem.rows)[:, None] < made.problem.active_rows).astype(float)
        row_length = batch.number("stack.row_pitch") / made.segments
        drop = pressure_drop(made.batch, stream, boundaries, stream.inlet_temperature, active, row_length)
        power = side_drive_power(made.batch, stream, drop.total, stream.inlet_temperature)
    problem: ObjectArray = np.full(batch.cases, "", dtype=object)
    for index in np.flatnonzero(made.faults.text != ""):
        own = [text for text in made.faults.text[index].split(BETWEEN) if text.startswith(side)]
        problem[index] = own[0] if own else ""
    return np.where(problem == "", power, np.nan), problem
