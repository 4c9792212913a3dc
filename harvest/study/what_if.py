"""What can go wrong with a design, computed: failed modules, fouling, part load, standstill, expansion.

Loss of load and of coolant are part of every estimate. Each question is one batch: over positions, times or loads.
"""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass

import numpy as np

from harvest.errors import CaseError, InputError, NoAnswerError
from harvest.model.batch import Batch
from harvest.model.case import Case, case_hash
from harvest.model.design import Design, Stream, design, maximum_power_load
from harvest.model.driven_flow import driven_batch
from harvest.model.estimate import estimate, estimate_batch
from harvest.model.fluid import quantity_of
from harvest.model.loads import FIXED_VOLTAGE, OPEN_CIRCUIT
from harvest.model.results import Estimate
from harvest.model.stack import Load, StackState, solve_stack
from harvest.model.stream_sections import GASES, RATED
from harvest.physics.arrays import FloatArray, IntArray, ObjectArray
from harvest.physics.combustion import sulphuric_acid_dew_point, sulphuric_acid_fraction, water_dew_point
from harvest.physics.expansion import EXPANSION, differential_expansion
from harvest.physics.networks import bus_maximum
from harvest.physics.thermoelectrics import JunctionParameters, ModuleModel
from harvest.quantities import format_quantity

MOST_POSITIONS = 64
"""Rows tried as the place of a failure; longer stacks are sampled evenly, both ends included."""
VOLTAGES = 17
"""Bus voltages between nothing and open circuit among which the largest power is looked for."""
TIMES = 97
NET_POWER_LOSSES = (0.05, 0.10)

TEMA_FOULING = {
    "water": 1.8e-4,
    "ethylene glycol": 3.5e-4,
    "propylene glycol": 3.5e-4,
    "table": 1.8e-4,
    "air": 3.5e-4,
    "exhaust gas": 1.76e-3,
}
"""Design fouling resistances after TEMA [m^2 K/W]: treated jacket water, glycol solutions, clean oils, compressed air
and engine exhaust; from memory."""
FOULING_TIME = 1000 * 3600.0
"""Time constant in which fouling nears its final value [s]; common practice, no source."""
HORIZON = 16_000 * 3600.0
PART_LOADS = ((0.75, 0.90), (0.50, 0.80), (0.25, 0.65))
"""Shares of a hot gas's flow and of its temperature above the surroundings; invented, of an engine's shape."""
STEADY_PART_LOADS = ((0.75, 1.0), (0.50, 1.0), (0.25, 1.0))
"""The same of a liquid, whose temperature a thermostat or the process holds."""


@dataclass(frozen=True, kw_only=True)
class WhatIfOptions:
    """What `what_if` is asked, SI. None of a fouling: it nears the case's own value, or TEMA's.

    `hot_fouling_rate`, `cold_fouling_rate` [m^2 K/(W s)] of steady growth; `fouling_time` and `horizon` [s];
    `part_loads` pairs of flow and temperature shares, none for the usual ones of a gas or a liquid;
    `coldest_ambient` [K]; plates are names of `EXPANSION`.
    """

    hot_fouling_rate: float | None = None
    cold_fouling_rate: float | None = None
    fouling_time: float = FOULING_TIME
    horizon: float = HORIZON
    part_loads: tuple[tuple[float, float], ...] = ()
    coldest_ambient: float | None = None
    hot_plate: str = "stainless steel"
    cold_plate: str = "aluminium"


@dataclass(frozen=True)
class FailedModule:
    """One module failed in each of several rows, at the load of largest power, temperatures settled; (positions,).

    `row` from 1 at the hot inlet. `string_current` [A] flows in the string of the failed module, `other_current` in
    an equal whole one beside it, NaN where there is none. `hot_junction_rise` [K] is the largest along the failed
    string. `share_lost` [-] is of the largest power, `share_lost_at_fixed_temperatures` of the network alone, diodes
    and window left out.
    """

    kind: str
    row: IntArray
    power: FloatArray
    power_lost: FloatArray
    voltage: FloatArray
    string_current: FloatArray
    other_current: FloatArray
    hot_junction_rise: FloatArray
    share_lost: FloatArray
    share_lost_at_fixed_temperatures: FloatArray


@dataclass(frozen=True)
class Fouling:
    """Fouling that grows from clean surfaces; arrays (times,). `hours` to a share of net power lost, NaN if never."""

    law: str
    time: FloatArray
    hot_fouling: FloatArray
    cold_fouling: FloatArray
    net_power: FloatArray
    losses: tuple[float, ...]
    hours: tuple[float, ...]


@dataclass(frozen=True)
class PartLoads:
    """The stack with less of the hot stream; arrays (loads,), walls (rows, loads), full load first.

    `water_dew_point` and `acid_dew_point` [K] are NaN without water or sulphur; `wet_rows` and `acid_rows` count the
    rows with a gas-side wall below them. `problem` says why a load has no answer.
    """

    flow_share: FloatArray
    temperature_share: FloatArray
    hot_inlet_temperature: FloatArray
    net_power: FloatArray
    generated_power: FloatArray
    hot_outlet_temperature: FloatArray
    gas_wall_temperature: FloatArray
    water_dew_point: FloatArray
    acid_dew_point: FloatArray
    wet_rows: FloatArray
    acid_rows: FloatArray
    problem: ObjectArray


@dataclass(frozen=True)
class Standstill:
    """A liquid that stands still in the coldest surroundings [K]."""

    side: str
    fluid: str
    freezing: float
    coldest_ambient: float


@dataclass(frozen=True)
class Expansion:
    """How much the hot plates outgrow the cold ones [m] from assembly at the site's temperature, and clamping [N]."""

    hot_plate: str
    cold_plate: str
    hot_temperature: float
    cold_temperature: float
    along: float
    across: float
    clamping_force_of_module: float
    clamping_force_of_layer: float


@dataclass(frozen=True)
class WhatIf:
    """Answers of `what_if`. `healthy_power` [W] is the largest power of the whole stack."""

    estimate: Estimate
    healthy_power: float
    opened: FailedModule
    shorted: FailedModule
    fouling: Fouling | None
    part_loads: PartLoads
    standstill: tuple[Standstill, ...]
    expansion: Expansion
    case_hash: str


@dataclass(frozen=True)
class _PartlyShorted:
    """Rows of which only a part of the modules works; all of them conduct heat. `working` (rows, cases)."""

    model: ModuleModel
    working: FloatArray

    def parameters(
        self, hot_junction_temperature: FloatArray, cold_junction_temperature: FloatArray
    ) -> JunctionParameters:
        """Mean parameters of a row's modules and their slopes; see `ModuleModel`."""
        own = self.model.parameters(hot_junction_temperature, cold_junction_temperature)
        all_conduct = np.ones_like(self.working)
        by_parameter = (self.working, self.working, all_conduct) * 3
        return JunctionParameters(*(part * value for part, value in zip(by_parameter, own, strict=True)))

    def take(self, which: IntArray) -> _PartlyShorted:
        """The same for a subset of cases."""
        return _PartlyShorted(self.model.take(which), self.working[..., which])


class _Strips:
    """The stack cut along the flow into strips that each hold one string of every block.

    Flow divides evenly over places, so a strip with a failed module is a small stack of its own that shares the bus
    alone with the others. Strips are numbered: 0 whole, then shorted by position, then interrupted by block.
    """

    def __init__(self, made: Design, positions: IntArray) -> None:
        self.problem, circuit = made.problem, made.problem.circuit
        rows, starts = self.problem.rows, circuit.block_starts
        self.block_of_row = np.searchsorted(starts, np.arange(rows), side="right") - 1
        self.block = self.block_of_row[positions * made.segments]
        self.in_a_row = float(circuit.series[0]) * made.segments
        shorted = 1 + np.arange(len(positions))
        opened = 1 + len(positions) + np.arange(len(starts))
        self.count = 1 + len(positions) + len(starts)
        self.working = np.ones((rows, self.count))
        of_position = positions[:, None] * made.segments + np.arange(made.segments)
        self.working[of_position, shorted[:, None]] = 1.0 - 1.0 / self.in_a_row
        self.interrupted = np.zeros((len(starts), self.count), dtype=bool)
        self.interrupted[np.arange(len(starts)), opened] = True
        self.shorted, self.opened = shorted, opened[self.block]
        dead = np.add.reduceat(self.working, starts, axis=0) < 1e-12
        self.shorts_the_bus = dead.any(axis=0) & (circuit.lead[0] == 0) & (not circuit.independent)
        if circuit.independent:
            # a string that is shorted as a whole gives its converter nothing
            self.interrupted |= dead

    def solve(self, strip: IntArray, load: Load) -> StackState:
        """Settle strips by number, (cases,), at a load with numbers (cases,)."""
        many = self.problem.take(np.zeros(len(strip), dtype=np.int64))
        module = _PartlyShorted(many.module, self.working[:, strip])
        circuit = dataclasses.replace(many.circuit, interrupted=self.interrupted[:, strip])
        return solve_stack(dataclasses.replace(many, module=module, circuit=circuit), load)

    def at_voltage(self, strip: IntArray, voltage: FloatArray) -> StackState:
        """Settle strips on buses of given voltage, (cases,)."""
        return self.solve(strip, Load(FIXED_VOLTAGE, voltage=voltage))


def _search(strips: _Strips, failed: IntArray, lowest: float, highest: float) -> FloatArray:
    """Bus voltage of the largest power with one strip failed in one of several ways [V], (failures,)."""
    voltage = np.linspace(lowest, highest, VOLTAGES)
    grid = np.repeat(np.arange(strips.count), VOLTAGES)
    state = strips.at_voltage(grid, np.tile(voltage, strips.count))
    current = np.where(state.converged, state.current.sum(axis=0), np.nan).reshape(strips.count, VOLTAGES)
    whole_strips = float(strips.problem.circuit.parallel[0]) - 1.0
    power = voltage * (whole_strips * current[0] + current[failed])
    power = np.where(np.isnan(power), -np.inf, power)
    best = np.clip(power.argmax(axis=1), 1, VOLTAGES - 2)
    before, here, after = (power[np.arange(len(failed)), best + shift] for shift in (-1, 0, 1))
    with np.errstate(invalid="ignore", divide="ignore"):
        bend = before - 2.0 * here + after
        shift = np.where(np.isfinite(bend) & (bend < 0), np.clip(0.5 * (before - after) / bend, -1.0, 1.0), 0.0)
    return np.asarray(voltage[best] + shift * (voltage[1] - voltage[0]))


def _fixed_temperature_loss(made: Design, state: StackState, strips: _Strips, failed: IntArray) -> FloatArray:
    """Share that the network alone loses at the temperatures of the whole stack's best load [-], (failures,)."""
    problem, circuit = made.problem, made.problem.circuit
    seebeck, resistance = problem.module.parameters(state.hot_junction, state.cold_junction)[:2]
    emf = circuit.series * seebeck * (state.hot_junction - state.cold_junction)
    starts = circuit.block_starts
    emfs = np.add.reduceat(emf * strips.working, starts, axis=0)
    resistances = np.add.reduceat(circuit.series * resistance * strips.working, starts, axis=0) + circuit.lead
    resistances = np.where(strips.interrupted, np.inf, resistances)
    others = float(circuit.parallel[0]) - 1.0
    if circuit.independent:
        own = (emfs**2 / (4.0 * resistances)).sum(axis=0)
        power = others * own[0] + own
    else:
        emf_of_all, resistance_of_all = (
            np.concatenate([np.broadcast_to(each[:, :1], each.shape), each]) for each in (emfs, resistances)
        )
        count = np.concatenate([np.full_like(emfs, others), np.ones_like(emfs)])
        power = bus_maximum(emf_of_all, resistance_of_all, count).power
    return np.asarray(1.0 - power[failed] / power[0]) if power[0] > 0 else np.full(len(failed), np.nan)


def _made(batch: Batch) -> Design:
    """Return a batch ready for the solver, with the flows of its drive curves; its faults are noted by case."""
    with np.errstate(all="ignore"):
        return design(driven_batch(batch))


def failed_modules(case: Case) -> tuple[float, FailedModule, FailedModule]:
    """Largest power of the whole stack [W], and one module failed open, and one shorted, in each row.

    A broken module takes its string away, a shorted one its own emf and resistance; both go on conducting heat. Each
    bus voltage is that of the largest power after the failure, within the converter's window, and temperatures
    settle. A row's modules share their temperatures, as in every estimate: where several of a string stand in a row,
    the others profit from the warmth of a shorted one, and the loss lies nearer to the network's than is told.
    Raises NoAnswerError without an answer.
    """
    made = _made(Batch(case))
    if not made.faults.valid[0]:
        raise NoAnswerError(f"no valid answer: {made.faults.text[0]}")
    positions = np.unique(np.linspace(0, case.stack.rows - 1, MOST_POSITIONS).round().astype(np.int64))
    strips, load = _Strips(made, positions), maximum_power_load(made.batch)
    healthy = solve_stack(made.problem, load)
    if not healthy.converged[0]:
        raise NoAnswerError("no valid answer: no solution found at maximum power")
    parallel = float(made.problem.circuit.parallel[0])
    failed = np.concatenate([[0], strips.shorted, strips.opened])
    if made.problem.circuit.independent:
        state = strips.solve(np.arange(strips.count), load.take(np.zeros(strips.count, dtype=np.int64)))
        state = state.take(np.concatenate([np.zeros_like(failed), failed]))
        voltage = np.full(len(failed), np.nan)
    else:
        lowest, highest = 0.0, float(solve_stack(made.problem, Load(OPEN_CIRCUIT), healthy).string_voltage[0, 0])
        if case.electrical.converter_window is not None:
            lowest, highest = np.clip(case.electrical.converter_window, 0.0, max(highest, 0.0))
        voltage = _search(strips, failed, lowest, highest)
        state = strips.at_voltage(np.concatenate([np.zeros_like(failed), failed]), np.tile(voltage, 2))
    power = np.where(state.converged, (state.current * state.string_voltage).sum(axis=0), np.nan)
    beside, own = power[: len(failed)], power[len(failed) :]
    total = np.where(strips.shorts_the_bus[failed], 0.0, np.maximum((parallel - 1.0) * beside + own, 0.0))
    return _told(made, strips, positions, healthy, state, voltage, total, failed)


def _told(
    made: Design,
    strips: _Strips,
    positions: IntArray,
    healthy: StackState,
    state: StackState,
    voltage: FloatArray,
    power: FloatArray,
    failed: IntArray,
) -> tuple[float, FailedModule, FailedModule]:
    """Put the settled strips, whole ones before failed ones, into what is reported."""
    count, places = len(failed), len(positions)
    fixed = _fixed_temperature_loss(made, healthy, strips, failed)
    rise = (state.hot_junction[:, count:] - state.hot_junction[:, [count]]).max(axis=0)
    share = 1.0 - power / power[0] if power[0] > 0 else np.full(count, np.nan)
    generating = np.where(power > 0, voltage, np.nan)
    beside_others = made.problem.circuit.parallel[0] > 1

    def one(kind: str, which: IntArray) -> FailedModule:
        return FailedModule(
            kind=kind,
            row=positions + 1,
            power=power[which],
            power_lost=power[0] - power[which],
            voltage=generating[which],
            string_current=state.current[strips.block, count + which],
            other_current=state.current[strips.block, which] if beside_others else np.full(places, np.nan),
            hot_junction_rise=rise[which],
            share_lost=share[which],
            share_lost_at_fixed_temperatures=fixed[which],
        )

    first = 1 + np.arange(places)
    return float(power[0]), one("open", first + places), one("shorted", first)


def fouling_growth(case: Case, options: WhatIfOptions) -> Fouling | None:
    """Net power while both sides foul from clean surfaces on; None without ducts of a known wetted area.

    Without a rate, fouling follows Kern and Seaton (1959), R (1 - exp(-t/t0)), towards the case's own value or else
    TEMA's for the fluid. Narrower passages and a higher pressure drop are left out. Raises NoAnswerError.
    """
    # closer in the beginning, when fouling changes fastest
    time = options.horizon * np.linspace(0.0, 1.0, TIMES) ** 2
    grown, laws = {}, []
    for name, rate in (("hot", options.hot_fouling_rate), ("cold", options.cold_fouling_rate)):
        side = getattr(case, name)
        if side.fluid not in TEMA_FOULING or side.duct.kind == RATED:
            continue
        if rate is not None:
            grown[name] = rate * time
            laws.append(f"{name} side: steady growth, as asked")
            continue
        final = side.fouling or TEMA_FOULING[side.fluid]
        grown[name] = final * -np.expm1(-time / options.fouling_time)
        origin = "the case's own value" if side.fouling else "common practice after TEMA, from memory"
        laws.append(
            f"{name} side: nears {format_quantity(final, 'areal thermal resistance')} ({origin}) with a time constant "
            f"of {format_quantity(options.fouling_time, 'duration')} (Kern and Seaton 1959)"
        )
    if not grown:
        return None
    answers = estimate_batch(Batch(case, TIMES, {f"{name}.fouling": each for name, each in grown.items()}))
    net = answers.net_power
    if not answers.valid[0]:
        raise NoAnswerError(f"no valid answer with clean surfaces: {answers.problem[0]}")
    nothing = np.zeros(TIMES)
    return Fouling(
        law="; ".join(laws),
        time=time,
        hot_fouling=grown.get("hot", nothing),
        cold_fouling=grown.get("cold", nothing),
        net_power=net,
        losses=NET_POWER_LOSSES,
        hours=tuple(time_to_loss(time, net, loss) / 3600.0 for loss in NET_POWER_LOSSES),
    )


def time_to_loss(time: FloatArray, net_power: FloatArray, loss: float) -> float:
    """Time at which a share of the first net power is lost [s], between the given times; NaN if it never is."""
    lost = 1.0 - net_power / net_power[0] if net_power[0] > 0 else np.full_like(net_power, np.nan)
    beyond = np.flatnonzero(lost >= loss)
    if not len(beyond):
        return np.nan
    after = int(beyond[0])
    part = (loss - lost[after - 1]) / (lost[after] - lost[after - 1])
    return float(time[after - 1] + part * (time[after] - time[after - 1]))


def usual_part_loads(case: Case) -> tuple[tuple[float, float], ...]:
    """Return the shares of flow and temperature that are taken where none are asked for."""
    return PART_LOADS if case.hot.fluid in GASES else STEADY_PART_LOADS


def part_loads(case: Case, shares: tuple[tuple[float, float], ...]) -> PartLoads:
    """The stack at shares of the hot flow and of the hot inlet's excess over the surroundings, in one batch."""
    made = _made(Batch(case))
    flow, temperature = np.array([(1.0, 1.0), *shares]).T
    surroundings = case.site.ambient_temperature
    inlet = surroundings + temperature * (case.hot.inlet_temperature - surroundings)
    varied = {"hot.inlet_temperature": inlet}
    base = case
    if case.hot.fluid != "reservoir":
        # the flow by mass and the gas by its excess air, in whatever other way the case gives them
        mass_flow, excess = float(made.hot.mass_flow[0]), float(made.hot.excess_air_ratio[0])
        hot = dataclasses.replace(
            case.hot,
            mass_flow=mass_flow,
            volume_flow=None,
            standard_volume_flow=None,
            fuel_flow=None,
            dry_oxygen=None,
            excess_air_ratio=excess if case.hot.fluid == "exhaust gas" else None,
        )
        base = dataclasses.replace(case, hot=hot)
        varied["hot.mass_flow"] = mass_flow * flow
    batch = Batch(base, len(flow), varied)
    answers = estimate_batch(batch)
    wall = answers.rows["hot_wall_temperature"]
    water, acid = _dew_points(_made(batch).hot, batch)
    return PartLoads(
        flow_share=flow,
        temperature_share=temperature,
        hot_inlet_temperature=inlet,
        net_power=answers.net_power,
        generated_power=answers.generated_power,
        hot_outlet_temperature=answers.hot_outlet_temperature,
        gas_wall_temperature=wall,
        water_dew_point=water,
        acid_dew_point=acid,
        wet_rows=(wall < water).sum(axis=0).astype(float),
        acid_rows=(wall < acid).sum(axis=0).astype(float),
        problem=answers.problem,
    )


def _dew_points(stream: Stream, batch: Batch) -> tuple[FloatArray, FloatArray]:
    """Dew points of water and of sulphuric acid in the hot gas [K], (cases,); NaN without water or sulphur."""
    nothing = np.full(batch.cases, np.nan)
    if stream.fluid is None:
        return nothing, nothing
    fraction = stream.table_value("water_fraction")
    if not (fraction > 0).all():
        return nothing, nothing
    water = water_dew_point(fraction * stream.pressure)
    sulphur = batch.number("hot.fuel_sulphur", 0.0)
    if not (sulphur > 0).all():
        return water, nothing
    acid = sulphuric_acid_fraction(
        batch.base.hot.fuel or "",
        stream.excess_air_ratio,
        batch.number("hot.intake_humidity", 0.0),
        sulphur,
        batch.number("hot.sulphur_conversion", 0.0),
    )
    return water, sulphuric_acid_dew_point(fraction * stream.pressure, acid * stream.pressure)


def standstill(case: Case, coldest_ambient: float) -> tuple[Standstill, ...]:
    """Liquids of the case that freeze somewhere, beside the coldest surroundings [K]."""
    made = _made(Batch(case))
    return tuple(
        Standstill(stream.name, stream.tables[0].label, stream.tables[0].freezing, coldest_ambient)
        for stream in (made.hot, made.cold)
        if stream.tables and np.isfinite(stream.tables[0].freezing)
    )


def expansion(case: Case, answer: Estimate, hot_plate: str, cold_plate: str) -> Expansion:
    """Expansion of the plates from the site's temperature to that of operation, and clamping forces."""
    rows = answer.rows
    hot, cold = float(rows.hot_wall_temperature.mean()), float(rows.cold_wall_temperature.mean())
    force = case.stack.clamp_pressure * case.module.footprint[0] * case.module.footprint[1]
    along, across = differential_expansion(
        np.array([answer.stack_length, answer.stack_width]),
        EXPANSION[hot_plate],
        np.full(2, hot),
        EXPANSION[cold_plate],
        np.full(2, cold),
        np.full(2, case.site.ambient_temperature),
    )
    return Expansion(
        hot_plate=hot_plate,
        cold_plate=cold_plate,
        hot_temperature=hot,
        cold_temperature=cold,
        along=float(along),
        across=float(across),
        clamping_force_of_module=force,
        clamping_force_of_layer=force * case.stack.rows * case.stack.columns,
    )


def what_if(case: Case, options: WhatIfOptions | None = None) -> WhatIf:
    """Everything that can go wrong with a design, computed; raises NoAnswerError where it has no estimate."""
    asked = options or WhatIfOptions()
    answer = estimate(case)
    if answer.bad_input:
        raise CaseError(list(answer.faults))
    if not answer.valid:
        raise NoAnswerError(f"no valid answer: {answer.problem}")
    healthy, opened, shorted = failed_modules(case)
    ambient = case.site.ambient_temperature if asked.coldest_ambient is None else asked.coldest_ambient
    return WhatIf(
        estimate=answer,
        healthy_power=healthy,
        opened=opened,
        shorted=shorted,
        fouling=fouling_growth(case, asked),
        part_loads=part_loads(case, asked.part_loads or usual_part_loads(case)),
        standstill=standstill(case, ambient),
        expansion=expansion(case, answer, asked.hot_plate, asked.cold_plate),
        case_hash=case_hash(case),
    )


PER_HOURS = 1000 * 3600.0
COLDEST, WARMEST = 180.0, 373.15


def what_if_options(
    *,
    hot_fouling: str | None = None,
    cold_fouling: str | None = None,
    fouling_time: str | None = None,
    horizon: str | None = None,
    part_load: tuple[str, ...] = (),
    coldest_ambient: str | None = None,
    hot_plate: str = WhatIfOptions.hot_plate,
    cold_plate: str = WhatIfOptions.cold_plate,
) -> WhatIfOptions:
    """Options from texts with units, fouling as growth in 1000 h; raises InputError that names the option."""
    for name, plate in (("hot-plate", hot_plate), ("cold-plate", cold_plate)):
        if plate not in EXPANSION:
            raise InputError(f"{name}: {plate!r} is not known; known are {', '.join(EXPANSION)}")

    def above_zero(name: str, given: str | None, default: float) -> float:
        value = default if given is None else quantity_of(name, given, "duration")
        if not value > 0:
            raise InputError(f"{name}: must be above zero")
        return value

    def rate(name: str, given: str | None) -> float | None:
        if given is None:
            return None
        value = quantity_of(name, given, "areal thermal resistance")
        if value < 0:
            raise InputError(f"{name}: must not be negative")
        return value / PER_HOURS

    ambient = None if coldest_ambient is None else quantity_of("coldest-ambient", coldest_ambient, "temperature")
    if ambient is not None and not COLDEST <= ambient <= WARMEST:
        raise InputError(f"coldest-ambient: {ambient:g} K is outside {COLDEST:g} to {WARMEST:g} K")
    return WhatIfOptions(
        hot_fouling_rate=rate("hot-fouling", hot_fouling),
        cold_fouling_rate=rate("cold-fouling", cold_fouling),
        fouling_time=above_zero("fouling-time", fouling_time, FOULING_TIME),
        horizon=above_zero("horizon", horizon, HORIZON),
        part_loads=tuple(_shares(each) for each in part_load),
        coldest_ambient=ambient,
        hot_plate=hot_plate,
        cold_plate=cold_plate,
    )


def _shares(given: str) -> tuple[float, float]:
    """Flow and temperature share of a text such as "0.5:0.8"."""
    flow, mark, temperature = given.partition(":")
    if not mark:
        raise InputError(f'part-load: {given!r} is not FLOW:TEMPERATURE, two shares such as "0.5:0.8"')
    pair = (quantity_of("part-load", flow, "dimensionless"), quantity_of("part-load", temperature, "dimensionless"))
    if not all(0 < each <= 2 for each in pair):
        raise InputError(f'part-load: {given!r} is not two shares above 0 and up to 2, such as "0.5:0.8"')
    return pair
