"""A batch solved at its loads, with what follows from the state row by row."""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass

import numpy as np

from harvest.model.design import Design, Stream, maximum_power_load
from harvest.model.loads import MATCHED, MAXIMUM_POWER, OPEN_CIRCUIT
from harvest.model.pressure import PressureDrop, pressure_drop
from harvest.model.stack import (
    Circuit,
    Load,
    StackProblem,
    StackState,
    solve_stack,
)
from harvest.physics.arrays import FloatArray, IntArray
from harvest.physics.thermoelectrics import hot_junction_heat

MOST_APART = 100
"""Most strings in the ideal that a mismatch is compared with; beyond it, neighbouring rows share one."""

NO_DROP = 1e-9
"""Drop of a diode that blocks and loses nothing [V]."""
LEAST_SHARE = 1e-12
"""Power over heat that counts as none."""

# Gauss-Legendre, five points on -1 to 1, for the integral of cp/T
_INNER, _OUTER = np.sqrt(5.0 - 2.0 * np.sqrt(10.0 / 7.0)) / 3.0, np.sqrt(5.0 + 2.0 * np.sqrt(10.0 / 7.0)) / 3.0
_HEAVY, _LIGHT = 322.0 + 13.0 * np.sqrt(70.0), 322.0 - 13.0 * np.sqrt(70.0)
_POINTS = np.array([-_OUTER, -_INNER, 0.0, _INNER, _OUTER])
_WEIGHTS = np.array([_LIGHT, _HEAVY, 512.0, _HEAVY, _LIGHT]) / 900.0


@dataclass(frozen=True, eq=False, repr=False)
class Solution:
    """A solved batch at one load, with what follows from the state row by row, (rows, cases) unless said."""

    state: StackState
    active: FloatArray
    share: FloatArray
    seebeck: FloatArray
    resistance: FloatArray
    conductance: FloatArray
    row_current: FloatArray
    module_heat: FloatArray
    module_power: FloatArray
    hot_face: FloatArray
    cold_face: FloatArray
    hot_metal: FloatArray
    cold_metal: FloatArray
    hot_heat: FloatArray
    cold_heat: FloatArray
    hot_outlet: FloatArray
    cold_outlet: FloatArray

    @property
    def heat_scale(self) -> FloatArray:
        """Heat flow to which errors are compared [W], (cases,); at equal inlets that of a hundredth of a kelvin."""
        return np.maximum(np.abs(self.hot_heat), np.abs(self.cold_heat)) + 0.01 * self.total(self.conductance)

    def total(self, per_module: FloatArray) -> FloatArray:
        """Sum of a quantity of one module over the whole stack, (cases,)."""
        return np.asarray((per_module * self.share).sum(axis=0))

    def largest(self, values: FloatArray) -> FloatArray:
        """Largest value along the rows that a case has, (cases,)."""
        return np.asarray(np.where(self.active > 0, values, -np.inf).max(axis=0))

    def smallest(self, values: FloatArray) -> FloatArray:
        """Smallest value along the rows that a case has, (cases,)."""
        return np.asarray(np.where(self.active > 0, values, np.inf).min(axis=0))


def terminal_power(problem: StackProblem, state: StackState) -> FloatArray:
    """DC power at the terminals [W], (cases,)."""
    return np.asarray(problem.circuit.parallel * (state.current * state.string_voltage).sum(axis=0))


def _side_heat(
    stream: Stream, problem: StackProblem, solution_wall: FloatArray, outlet: FloatArray, share: FloatArray
) -> FloatArray:
    """Heat that a stream gives by its enthalpies, or a reservoir or sink by its film [W], (cases,)."""
    if stream.fluid is not None:
        ends = stream.fluid.enthalpy(np.stack([stream.inlet_temperature, outlet]))
        return np.asarray(stream.mass_flow * (ends[0] - ends[1]))
    side = problem.hot if stream.name == "hot" else problem.cold
    conductance = side.still_conductance(solution_wall)[0]
    return np.asarray((conductance * (side.inlet_temperature - solution_wall) * share).sum(axis=0))


def unfold(made: Design, problem: StackProblem, state: StackState) -> Solution:
    """Work out heat flows and face temperatures of a solved state."""
    rows = np.arange(problem.rows)[:, None]
    active = (rows < problem.active_rows).astype(float)
    per_row = made.module_count / problem.active_rows
    lengths = np.diff(np.append(problem.circuit.block_starts, problem.rows))
    current = state.current[np.repeat(np.arange(len(lengths)), lengths)]
    seebeck, resistance, conductance = problem.module.parameters(state.hot_junction, state.cold_junction)[:3]
    difference = state.hot_junction - state.cold_junction
    heat = hot_junction_heat(seebeck, resistance, conductance, state.hot_junction, state.cold_junction, current)
    power = current * (seebeck * difference - current * resistance)
    share = active * per_row
    hot_q = (
        heat
        + problem.bypass * (state.hot_wall - state.cold_wall)
        + problem.loss * (state.hot_wall - problem.ambient_temperature)
    )
    cold_q = heat - power + problem.bypass * (state.hot_wall - state.cold_wall)
    return Solution(
        state=state,
        active=active,
        share=share,
        seebeck=seebeck,
        resistance=resistance,
        conductance=conductance,
        row_current=current,
        module_heat=heat,
        module_power=power,
        hot_face=state.hot_junction + heat * made.module.substrate_resistance,
        cold_face=state.cold_junction - (heat - power) * made.module.substrate_resistance,
        hot_metal=state.hot_wall + hot_q * problem.hot.wall_resistance,
        cold_metal=state.cold_wall - cold_q * problem.cold.wall_resistance,
        hot_heat=_side_heat(made.hot, problem, state.hot_wall, state.hot_stream[-1], share),
        cold_heat=-_side_heat(made.cold, problem, state.cold_wall, state.cold_stream[0], share),
        hot_outlet=state.hot_stream[-1],
        cold_outlet=state.cold_stream[0],
    )


def _rows_apart(problem: StackProblem, segments: int) -> StackProblem:
    """Return the same stack with a converter for every row, or few rows, and nothing lost in leads or diodes."""
    together = segments * max(1, -(-problem.rows // segments // MOST_APART))
    starts = np.arange(0, problem.rows, together, dtype=np.int64)
    return dataclasses.replace(problem, circuit=_bare(problem.circuit, starts, independent=True))


def _bare(circuit: Circuit, starts: IntArray, independent: bool) -> Circuit:
    """Return a circuit that loses nothing in leads and diodes; where there are diodes, they still block."""
    drop = np.where((circuit.diode_drop > 0) & (not independent), NO_DROP, 0.0)
    lead = np.zeros_like(circuit.lead)
    return dataclasses.replace(circuit, block_starts=starts, lead=lead, diode_drop=drop, independent=independent)


def _spread_blocks(state: StackState, problem: StackProblem, to: StackProblem) -> StackState:
    """Return a state of one wiring as the start for another wiring of the same stack."""
    ends = np.searchsorted(problem.circuit.block_starts, to.circuit.block_starts, side="right") - 1
    return dataclasses.replace(state, current=state.current[ends], string_voltage=state.string_voltage[ends])


def _mismatch(problem: StackProblem, segments: int, load: Load, maximum: StackState, power: FloatArray) -> FloatArray:
    """One less the maximum power over the maximum with every row on its own, both settled [-], (cases,)."""
    circuit = problem.circuit
    ideal = not (np.any(circuit.lead) or np.any(circuit.diode_drop) or load.lowest is not None)
    if not ideal:
        bare = dataclasses.replace(problem, circuit=_bare(circuit, circuit.block_starts, circuit.independent))
        power = terminal_power(bare, solve_stack(bare, Load(MAXIMUM_POWER), maximum))
    apart = _rows_apart(problem, segments)
    state = solve_stack(apart, Load(MAXIMUM_POWER), _spread_blocks(maximum, problem, apart))
    best = np.where(state.converged, terminal_power(apart, state), np.nan)
    return 1.0 - power / best


def entropy_given(stream: Stream, outlet: FloatArray, heat: FloatArray) -> FloatArray:
    """Entropy that a side gives away [W/K], (cases,): integral of m cp dT / T, or heat over temperature."""
    if stream.fluid is None:
        return heat / stream.inlet_temperature
    middle, half = 0.5 * (stream.inlet_temperature + outlet), 0.5 * (stream.inlet_temperature - outlet)
    points = middle + _POINTS[:, None] * half
    return np.asarray(
        stream.mass_flow * half * (_WEIGHTS[:, None] * stream.fluid.heat_capacity(points) / points).sum(axis=0)
    )


@dataclass(frozen=True, eq=False, repr=False)
class CoolantLost:
    """The stack settled with its cold stream stopped and the hot one flowing, [K], (cases,)."""

    hot_face: FloatArray
    cold_wall: FloatArray


def _without_coolant(problem: StackProblem) -> CoolantLost:
    """Solve with the cold film removed: no heat crosses the modules, so no load can draw a current either."""
    # behind a wall that takes no heat nothing spreads either, whatever its thickness
    no_heat = dataclasses.replace(problem.cold.constriction, reach=np.ones(problem.cases))
    cold = dataclasses.replace(
        problem.cold, fluid=None, film=None, sink=None, film_conductance=np.zeros(problem.cases), constriction=no_heat
    )
    state = solve_stack(dataclasses.replace(problem, cold=cold), Load(OPEN_CIRCUIT))
    active = np.arange(problem.rows)[:, None] < problem.active_rows

    def hottest(values: FloatArray) -> FloatArray:
        return np.where(state.converged, np.where(active, values, -np.inf).max(axis=0), np.nan)

    return CoolantLost(hottest(state.hot_junction), hottest(state.cold_wall))


@dataclass(frozen=True, eq=False, repr=False)
class Solved:
    """All the solutions that an estimate stands on."""

    made: Design
    chosen: Solution
    matched_power: FloatArray
    maximum_power: FloatArray
    open_circuit: Solution
    coolant_lost: CoolantLost
    mismatch: FloatArray
    hot_drop: PressureDrop
    cold_drop: PressureDrop


def solve(made: Design) -> Solved:
    """Solve a design at its own load, matched, at the true maximum and without current."""
    problem, batch = made.problem, made.batch
    best_load = maximum_power_load(batch)
    best = solve_stack(problem, best_load)
    matched = solve_stack(problem, Load(MATCHED), best)
    opened = solve_stack(problem, Load(OPEN_CIRCUIT), best)
    ready = {MAXIMUM_POWER: best, MATCHED: matched, OPEN_CIRCUIT: opened}
    state = ready.get(made.load.mode)
    if state is None:
        state = solve_stack(problem, made.load, matched)
    for name, each in (("at its load", state), ("at maximum power", best), ("at matched load", matched)):
        lost = ~each.converged & made.faults.valid
        made.faults.add(lost, f"no solution found {name}; the operating point may not exist")
    found = state.converged & best.converged & matched.converged
    made.faults.add(found & ~opened.converged, "no solution found without current")
    chosen = unfold(made, problem, state)
    for stream, boundaries in ((made.hot, state.hot_stream), (made.cold, state.cold_stream)):
        flag_range(made, stream, boundaries)
    open_circuit = unfold(made, problem, opened)
    best_power = terminal_power(problem, best)
    drops = pressure_drops(made, chosen)
    return Solved(
        made,
        chosen,
        terminal_power(problem, matched),
        best_power,
        open_circuit,
        _without_coolant(problem),
        _mismatch(problem, made.segments, best_load, best, best_power),
        drops[0],
        drops[1],
    )


def pressure_drops(made: Design, chosen: Solution) -> list[PressureDrop]:
    """Pressure drops of the hot and the cold side."""
    row_length = made.batch.number("stack.row_pitch") / made.segments
    return [
        pressure_drop(made.batch, stream, boundaries, outlet, chosen.active, row_length)
        for stream, boundaries, outlet in (
            (made.hot, chosen.state.hot_stream, chosen.hot_outlet),
            (made.cold, chosen.state.cold_stream, chosen.cold_outlet),
        )
    ]


def flag_range(made: Design, stream: Stream, boundaries: FloatArray) -> None:
    """Flag cases in which a stream leaves the temperatures for which its fluid is served."""
    if not stream.tables:
        return
    warmest, coldest = boundaries.max(axis=0), boundaries.min(axis=0)

    def sentence(index: int) -> str:
        table = stream.tables[stream.table_of_case[index]]
        outside = warmest[index] if warmest[index] > table.upper_limit else coldest[index]
        return f"{stream.name} stream: {table.outside(float(outside))}"

    lower = np.fmax(stream.table_value("lower"), stream.table_value("lower_limit"))
    upper = np.fmin(stream.table_value("upper"), stream.table_value("upper_limit"))
    beyond = (warmest > upper) | (coldest < lower)
    made.faults.add(beyond & made.faults.valid, sentence)
