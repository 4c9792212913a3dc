"""The estimate: works out what is reported from a batch solved at its loads."""

from __future__ import annotations

import dataclasses

import numpy as np

from harvest.model.assessment import assess
from harvest.model.batch import Batch
from harvest.model.case import Case, case_hash
from harvest.model.checks import PASS, BatchCheck
from harvest.model.costs import costs
from harvest.model.design import BETWEEN, Design, Stream, design, maximum_power_load
from harvest.model.driven_flow import driven_batch
from harvest.model.loads import OPEN_CIRCUIT
from harvest.model.pressure import PressureDrop, side_drive_power
from harvest.model.results import SCALARS, Estimate, Estimates, Rows
from harvest.model.solution import LEAST_SHARE, Solution, Solved, entropy_given, solve, terminal_power
from harvest.model.stack import (
    solve_stack,
)
from harvest.physics.arrays import FloatArray, IntArray, ObjectArray
from harvest.physics.films import Film
from harvest.physics.thermoelectrics import carnot_efficiency
from harvest.version import VERSION


def powers_of(made: Design, chosen: Solution, hot_drop: PressureDrop, cold_drop: PressureDrop) -> dict[str, FloatArray]:
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


def measures_of(made: Design) -> dict[str, FloatArray]:
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
    powers = powers_of(made, chosen, solved.hot_drop, solved.cold_drop)
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
        -entropy_given(made.hot, chosen.hot_outlet, chosen.hot_heat)
        - entropy_given(made.cold, chosen.cold_outlet, -chosen.cold_heat)
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
        **measures_of(made),
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
        solved = solve(made)
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
