"""The estimate: solves a batch at its loads and works out what is reported."""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass

import numpy as np

from harvest.model.assessment import assess
from harvest.model.batch import Batch
from harvest.model.case import Case, case_hash
from harvest.model.checks import PASS, BatchCheck
from harvest.model.costs import costs
from harvest.model.design import BETWEEN, Design, Stream, design, maximum_power_load
from harvest.model.driven_flow import driven_batch
from harvest.model.loads import MATCHED, MAXIMUM_POWER, OPEN_CIRCUIT
from harvest.model.pressure import PressureDrop, pressure_drop, side_drive_power
from harvest.model.results import SCALARS, Estimate, Estimates, Rows
from harvest.model.stack import (
    Circuit,
    Load,
    StackProblem,
    StackState,
    solve_stack,
)
from harvest.physics.arrays import FloatArray, IntArray, ObjectArray
from harvest.physics.films import Film
from harvest.physics.thermoelectrics import carnot_efficiency, hot_junction_heat
from harvest.version import VERSION

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


def _entropy_given(stream: Stream, outlet: FloatArray, heat: FloatArray) -> FloatArray:
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


def _solve(made: Design) -> Solved:
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
        _flag_range(made, stream, boundaries)
    open_circuit = unfold(made, problem, opened)
    best_power = terminal_power(problem, best)
    drops = _pressure_drops(made, chosen)
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


def _pressure_drops(made: Design, chosen: Solution) -> list[PressureDrop]:
    """Pressure drops of the hot and the cold side."""
    row_length = made.batch.number("stack.row_pitch") / made.segments
    return [
        pressure_drop(made.batch, stream, boundaries, outlet, chosen.active, row_length)
        for stream, boundaries, outlet in (
            (made.hot, chosen.state.hot_stream, chosen.hot_outlet),
            (made.cold, chosen.state.cold_stream, chosen.cold_outlet),
        )
    ]


def _flag_range(made: Design, stream: Stream, boundaries: FloatArray) -> None:
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


def _powers(made: Design, chosen: Solution, hot_drop: PressureDrop, cold_drop: PressureDrop) -> dict[str, FloatArray]:
    """Power from the terminals to the net, (cases,)."""
    batch = made.batch
    opened_up = made.load.mode == OPEN_CIRCUIT
    generated = np.zeros(batch.cases) if opened_up else terminal_power(made.problem, chosen.state)
    efficiency = batch.number("electrical.converter_efficiency", 1.0)
    hot_drive = side_drive_power(batch, made.hot, hot_drop.total, chosen.hot_outlet)
    cold_drive = side_drive_power(batch, made.cold, cold_drop.total, chosen.cold_outlet)
    # what the stack draws instead of giving has to come through the converter too
    converted = np.where(generated >= 0, efficiency * generated, generated / efficiency)
    return {
        "generated_power": generated,
        "converted_power": converted,
        "hot_drive_power": hot_drive,
        "cold_drive_power": cold_drive,
        "net_power": converted
        - batch.number("electrical.converter_standby_power", 0.0)
        - batch.number("electrical.auxiliary_power", 0.0)
        - hot_drive
        - cold_drive,
    }


def _measures(made: Design) -> dict[str, FloatArray]:
    """Size and mass of the stack, (cases,)."""
    batch = made.batch
    layers = batch.number("stack.layers")
    height = sum(
        (stream.ducts * 1.0) * (_gap(batch, stream) + 2.0 * batch.number(f"{stream.name}.duct.wall_thickness", 0.0))
        + stream.half_ducts
        * (0.5 * _gap(batch, stream) + 2.0 * batch.number(f"{stream.name}.duct.wall_thickness", 0.0))
        for stream in (made.hot, made.cold)
    ) + layers * batch.number("module.thickness")
    return {
        "stack_length": batch.number("stack.rows") * batch.number("stack.row_pitch"),
        "stack_width": batch.number("stack.columns") * batch.number("stack.column_pitch"),
        "stack_height": height,
        "module_mass": made.module_count * batch.number("module.mass"),
    }


def _scalars(solved: Solved) -> dict[str, FloatArray]:
    """Scalar results by name, (cases,)."""
    made, chosen, batch = solved.made, solved.chosen, solved.made.batch
    problem, circuit, state = made.problem, made.problem.circuit, solved.chosen.state
    opened_up = made.load.mode == OPEN_CIRCUIT
    powers = _powers(made, chosen, solved.hot_drop, solved.cold_drop)
    generated = powers["generated_power"]
    current = np.zeros(batch.cases) if opened_up else circuit.parallel * state.current.sum(axis=0)
    voltage = state.string_voltage[0]
    weight = circuit.series * chosen.active
    starts = circuit.block_starts
    string_emf = np.add.reduceat(weight * chosen.seebeck * (state.hot_junction - state.cold_junction), starts, axis=0)
    string_resistance = np.add.reduceat(weight * chosen.resistance, starts, axis=0) + circuit.lead
    carrying = (circuit.diode_drop <= 0) | (state.current > 0) | ~(state.current > 0).any(axis=0)
    string_conductance = np.where(carrying, 1.0 / string_resistance, 0.0)
    emf = (string_emf * string_conductance).sum(axis=0) / string_conductance.sum(axis=0)
    opened = solved.open_circuit.state.string_voltage[0]
    if circuit.independent:
        current = voltage = emf = opened = np.full(batch.cases, np.nan)
    flowing = np.abs(current) > 1e-12
    internal = np.where(flowing, (emf - voltage) / current, 1.0 / (circuit.parallel * string_conductance.sum(axis=0)))
    load_resistance = np.where(flowing, voltage / current, np.inf)
    if circuit.independent:
        internal = load_resistance = current
    lost = problem.loss * (state.hot_wall - problem.ambient_temperature)
    in_leads = circuit.parallel * (state.current**2 * circuit.lead + state.current * circuit.diode_drop).sum(axis=0)
    lost_heat = chosen.total(lost)
    unclosed = chosen.hot_heat - chosen.cold_heat - generated - in_leads - lost_heat
    entropy = (
        -_entropy_given(made.hot, chosen.hot_outlet, chosen.hot_heat)
        - _entropy_given(made.cold, chosen.cold_outlet, -chosen.cold_heat)
        + lost_heat / problem.ambient_temperature
        + in_leads / problem.ambient_temperature
    )
    upper = np.maximum(made.hot.inlet_temperature, made.cold.inlet_temperature)
    lower = np.minimum(made.hot.inlet_temperature, made.cold.inlet_temperature)
    module_heat = chosen.total(chosen.module_heat)
    # where the hot side is the colder one, the cold side gives the heat
    heat_in = np.where(chosen.hot_heat >= 0, chosen.hot_heat, -chosen.cold_heat)
    module_heat_in = np.where(module_heat >= 0, module_heat, generated - module_heat)
    something = solved.maximum_power > LEAST_SHARE * chosen.heat_scale
    return {
        **powers,
        "matched_load_power": solved.matched_power,
        "maximum_power": solved.maximum_power,
        "current": current,
        "voltage": voltage,
        "open_circuit_voltage": opened,
        "operating_emf": emf,
        "internal_resistance": internal,
        "lead_loss": in_leads,
        "load_resistance": load_resistance,
        "load_ratio": load_resistance / internal,
        "hot_heat_flow": chosen.hot_heat,
        "cold_heat_flow": chosen.cold_heat,
        "bypass_heat_flow": chosen.total(problem.bypass * (state.hot_wall - state.cold_wall)),
        "lost_heat_flow": lost_heat,
        "module_heat_flow": module_heat,
        "hot_outlet_temperature": chosen.hot_outlet,
        "cold_outlet_temperature": chosen.cold_outlet,
        "hot_mass_flow": _of_stream(made.hot, made.hot.mass_flow),
        "cold_mass_flow": _of_stream(made.cold, made.cold.mass_flow),
        "hot_pressure_drop": solved.hot_drop.total,
        "cold_pressure_drop": solved.cold_drop.total,
        "hot_velocity": _velocity(made.hot),
        "cold_velocity": _velocity(made.cold),
        "conversion_efficiency": np.where(heat_in > 0, generated / heat_in, np.nan),
        "module_efficiency": np.where(module_heat_in > 0, generated / module_heat_in, np.nan),
        "carnot_efficiency": carnot_efficiency(upper, lower),
        "mismatch_loss": np.where(something, solved.mismatch, np.nan),
        "module_count": made.module_count,
        "hot_duct_count": made.hot.ducts,
        "cold_duct_count": made.cold.ducts,
        "cold_end_duct_count": made.cold.half_ducts,
        **_measures(made),
        "hottest_face_temperature": chosen.largest(chosen.hot_face),
        "open_circuit_face_temperature": solved.open_circuit.largest(solved.open_circuit.hot_face),
        "coolant_lost_face_temperature": solved.coolant_lost.hot_face,
        "energy_closure": unclosed / chosen.heat_scale,
        "entropy_generation": entropy,
        **costs(batch, powers),
    }


def _gap(batch: Batch, stream: Stream) -> FloatArray:
    still = stream.is_reservoir and stream.sink is None
    return np.zeros(batch.cases) if still else batch.number(f"{stream.name}.duct.gap")


def _of_stream(stream: Stream, value: FloatArray) -> FloatArray:
    return value if stream.fluid is not None else np.full(len(value), np.nan)


def _velocity(stream: Stream) -> FloatArray:
    """Velocity in the ducts at inlet density [m/s], (cases,)."""
    if stream.fluid is None or not isinstance(stream.film, Film):
        return np.full(len(stream.inlet_temperature), np.nan)
    return np.asarray(stream.film.mass_flux / stream.fluid.density(stream.inlet_temperature[None])[0])


def _rows(made: Design, chosen: Solution) -> dict[str, FloatArray]:
    """Row results by name, (rows, cases); segments of a row are averaged."""
    state = chosen.state
    hot, cold = (
        0.5 * (state.hot_stream[:-1] + state.hot_stream[1:]),
        0.5 * (state.cold_stream[:-1] + state.cold_stream[1:]),
    )

    def reynolds(stream: Stream, temperature: FloatArray) -> FloatArray:
        if stream.fluid is None or not isinstance(stream.film, Film):
            return np.full_like(temperature, np.nan)
        return stream.film.reynolds(stream.fluid.viscosity(temperature))

    values = {
        "hot_stream_temperature": hot,
        "hot_face_temperature": chosen.hot_face,
        "hot_junction_temperature": state.hot_junction,
        "cold_junction_temperature": state.cold_junction,
        "cold_face_temperature": chosen.cold_face,
        "cold_stream_temperature": cold,
        "hot_wall_temperature": chosen.hot_metal,
        "cold_wall_temperature": chosen.cold_metal,
        "current": chosen.row_current,
        "module_power": chosen.module_power,
        "module_heat_flow": chosen.module_heat,
        "hot_reynolds": reynolds(made.hot, hot),
        "cold_reynolds": reynolds(made.cold, cold),
    }
    segments, cases = made.segments, made.batch.cases
    return {
        name: np.where(chosen.active > 0, value, np.nan).reshape(-1, segments, cases).mean(axis=1)
        for name, value in values.items()
    }


def _sources(made: Design) -> tuple[str, ...]:
    """Where the numbers of a batch come from, one line each."""
    module, source = made.module, made.batch.base.module.source
    lines = [f"{stream.name} fluid: {table.source}" for stream in (made.hot, made.cold) for table in stream.tables[:1]]
    lines.append(f"module: {module.provenance}; {source or 'as given in the case'}")
    lines += [
        f"material {each.name}: {each.source}" for each in {item.name: item for item in module.materials}.values()
    ]
    return tuple(lines)


def _grid_effect(batch: Batch, power: FloatArray) -> FloatArray:
    """Relative change of the maximum power when every row is split in two, (cases,)."""
    stack = dataclasses.replace(batch.base.stack, segments=2 * batch.base.stack.segments)
    finer = design(dataclasses.replace(batch, base=dataclasses.replace(batch.base, stack=stack)))
    state = solve_stack(finer.problem, maximum_power_load(batch))
    return np.where(state.converged, terminal_power(finer.problem, state), np.nan) / power - 1.0


def estimate_batch(batch: Batch, *, grid: bool = False) -> Estimates:
    """Answer all cases of a batch with one run of the solver at each load.

    Parameters: `batch`; `grid`, whether to solve again with every row split in two, for the check of the grid's
    effect. A case without an answer is NaN throughout and says why in `problem`. Raises InputError for faults of all.
    """
    with np.errstate(all="ignore"):
        batch = driven_batch(batch)
        made = design(batch)
        wanting = made.faults.valid
        if not wanting.any():
            nan = np.full(batch.cases, np.nan)
            counts = batch.number("stack.rows")
            return Estimates(dict.fromkeys(SCALARS, nan), {}, counts, (), made.faults.text, ~wanting, _sources(made))
        if not wanting.all():
            which = np.flatnonzero(wanting)
            return _among(estimate_batch(batch.take(which), grid=grid), which, made.faults.text, batch)
        solved = _solve(made)
        scalars = _scalars(solved)
        something = solved.maximum_power > LEAST_SHARE * solved.chosen.heat_scale
        effect = (
            np.where(something, _grid_effect(batch, solved.maximum_power), np.nan)
            if grid
            else np.full(batch.cases, np.nan)
        )
        lost = ~np.isfinite(scalars["net_power"]) & made.faults.valid
        made.faults.add(lost, "the result is not a finite number")
        checks = assess(solved, scalars, effect)
        valid = made.faults.valid
        scalars = {name: np.where(valid, value, np.nan) for name, value in scalars.items()}
        rows = {name: np.where(valid, value, np.nan) for name, value in _rows(made, solved.chosen).items()}
    return Estimates(
        scalars,
        rows,
        batch.number("stack.rows"),
        checks,
        made.faults.text,
        np.zeros(batch.cases, dtype=bool),
        _sources(made),
    )


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
            _flag_range(made, stream, boundaries)
        hot_drop, cold_drop = _pressure_drops(made, chosen)
        powers = _powers(made, chosen, hot_drop, cold_drop)
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
            **_measures(made),
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


def _among(answers: Estimates, which: IntArray, problem: ObjectArray, batch: Batch) -> Estimates:
    """Put the answers of some cases among those that have none."""
    place = {int(case): index for index, case in enumerate(which)}

    def spread(values: FloatArray) -> FloatArray:
        wide = np.full((*values.shape[:-1], batch.cases), np.nan)
        wide[..., which] = values
        return wide

    def spread_check(check: BatchCheck) -> BatchCheck:
        status = np.full(batch.cases, PASS)
        status[which] = check.status
        return dataclasses.replace(
            check,
            value=spread(check.value),
            limit=spread(check.limit),
            status=status,
            text=lambda case: check.text(place[case]),
        )

    problem = problem.copy()
    problem[which] = answers.problem
    return Estimates(
        {name: spread(value) for name, value in answers.scalars.items()},
        {name: spread(value) for name, value in answers.rows.items()},
        batch.number("stack.rows"),
        tuple(spread_check(check) for check in answers.checks),
        problem,
        ~np.isin(np.arange(batch.cases), which),
        answers.sources,
    )


def estimate(case: Case) -> Estimate:
    """Power, heat, temperatures, losses and checks of one design.

    Returns a frozen `Estimate` of SI floats; where there is no answer, `valid` is False, `problem` says why and every
    number is NaN. Raises InputError for a case that names an unknown material.
    """
    answers = estimate_batch(Batch(case), grid=True)
    valid = bool(answers.valid[0])
    rows = {
        item.name: answers.rows[item.name][: case.stack.rows, 0] if valid else np.empty(0)
        for item in dataclasses.fields(Rows)
    }
    return Estimate(
        **{name: float(value[0]) for name, value in answers.scalars.items()},
        currency=case.cost.currency if case.cost is not None else "",
        rows=Rows(**rows),
        checks=tuple(check.of(0) for check in answers.checks) if valid else (),
        valid=valid,
        problem=str(answers.problem[0]),
        faults=tuple(answers.problem[0].split(BETWEEN)) if not valid else (),
        bad_input=bool(answers.bad_input[0]),
        sources=answers.sources,
        version=VERSION,
        case_hash=case_hash(case),
    )
