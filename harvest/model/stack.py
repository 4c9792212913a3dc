"""The coupled stack: all rows of all cases at once, streams in counterflow, modules wired into strings.

Unknowns are the stream temperatures at the row boundaries, four metal temperatures a row, the current of each block of
rows and the bus voltage. One pass of the method evaluates properties, films and module parameters, makes each row a
linear two-port between its two entering streams, joins the rows by one backward and one forward sweep (a scalar
reflection coefficient, stable for spent streams), carries the same sweeps for the derivative in each block's current,
and takes Newton's step on currents and voltage. Properties, films and heat capacity rates enter with secant slopes from
the passes before, so that the whole converges faster than linearly. Cases that have converged leave the batch.

All heat flows inside are those of one place (one module); a row split in segments sees its stream as that many times
larger, which is the same thing.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any, NamedTuple

import numpy as np

from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.physics.films import Film
from harvest.physics.fluids import FluidBatch
from harvest.physics.spreading import Constriction
from harvest.physics.thermoelectrics import ModuleModel

CHUNK_CELLS = 12_000
MAXIMUM_PASSES = 60
TOLERANCE = 1e-10
MATCHED, MAXIMUM_POWER, FIXED_RESISTANCE, FIXED_VOLTAGE, OPEN_CIRCUIT = (
    "matched",
    "maximum power",
    "fixed resistance",
    "fixed voltage",
    "open circuit",
)
LOAD_MODES = (MATCHED, MAXIMUM_POWER, FIXED_RESISTANCE, FIXED_VOLTAGE, OPEN_CIRCUIT)


def _take(item: Any, which: IntArray) -> Any:
    """Return the subset of cases of an array, or of anything that has `take`."""
    if item is None or isinstance(item, bool | int | float | str):
        return item
    return item[..., which] if isinstance(item, np.ndarray) else item.take(which)


@dataclass(frozen=True)
class StackSide:
    """One side of the stack; arrays (cases,).

    A stream has `fluid`, `film` and `mass_flow` [kg/s] per place (times segments); a reservoir has none of them and
    `film_conductance` [W/K] of a place. `wall_resistance` and `module_resistance` (interface and substrate) [K/W] are
    of one place; `constriction` depends on the film.
    """

    inlet_temperature: FloatArray
    mass_flow: FloatArray
    film_conductance: FloatArray
    wall_resistance: FloatArray
    module_resistance: FloatArray
    constriction: Constriction
    place_area: FloatArray
    fluid: FluidBatch | None
    film: Film | None
    arithmetic: bool

    def take(self, which: IntArray) -> StackSide:
        """Return the side of a subset of cases."""
        return replace(self, **{name: _take(value, which) for name, value in self.__dict__.items()})


@dataclass(frozen=True)
class Circuit:
    """How the modules of a stack are wired; arrays (cases,).

    `block_starts` are the rows at which a new string begins, (blocks,), the same in every case. `series` is the number
    of modules in series that one row gives to a string, `parallel` the number of equal strings of a block, `lead` and
    `diode_drop` the resistance [ohm] and voltage [V] of one string's leads and blocking diode.
    """

    block_starts: IntArray
    series: FloatArray
    parallel: FloatArray
    lead: FloatArray
    diode_drop: FloatArray
    independent: bool

    def take(self, which: IntArray) -> Circuit:
        """Return the circuit of a subset of cases."""
        return Circuit(
            self.block_starts,
            self.series[which],
            self.parallel[which],
            self.lead[which],
            self.diode_drop[which],
            self.independent,
        )


@dataclass(frozen=True)
class Load:
    """What the stack feeds: a mode of `LOAD_MODES` with its number, (cases,): `resistance` [ohm] or `voltage` [V].

    `lowest` and `highest` voltage [V] bound the maximum-power mode only (a converter's window).
    """

    mode: str
    resistance: FloatArray | None = None
    voltage: FloatArray | None = None
    lowest: FloatArray | None = None
    highest: FloatArray | None = None

    def take(self, which: IntArray) -> Load:
        """Return the load of a subset of cases."""
        return Load(
            self.mode, *(_take(item, which) for item in (self.resistance, self.voltage, self.lowest, self.highest))
        )


@dataclass(frozen=True)
class StackProblem:
    """A batch of stacks of one structure; arrays (cases,).

    `rows` is the number of rows solved (times segments), `active_rows` how many of them each case has. `bypass` [W/K]
    joins the two wall faces of a place, `loss` [W/K] its hot wall face to `ambient_temperature` [K].
    """

    rows: int
    active_rows: IntArray
    hot: StackSide
    cold: StackSide
    bypass: FloatArray
    loss: FloatArray
    ambient_temperature: FloatArray
    module: ModuleModel
    circuit: Circuit

    @property
    def cases(self) -> int:
        """Return the number of cases."""
        return len(self.bypass)

    def take(self, which: IntArray) -> StackProblem:
        """Return the problem of a subset of cases."""
        return replace(self, **{name: _take(value, which) for name, value in self.__dict__.items()})


@dataclass
class StackState:
    """A solution, or a start for one: temperatures [K], currents [A], voltages [V].

    `hot_stream` and `cold_stream` stand at the row boundaries, (rows + 1, cases); the metal temperatures in the rows,
    (rows, cases); `current` in one string of each block and `string_voltage` at its terminals, (blocks, cases).
    """

    hot_stream: FloatArray
    cold_stream: FloatArray
    hot_wall: FloatArray
    hot_junction: FloatArray
    cold_junction: FloatArray
    cold_wall: FloatArray
    current: FloatArray
    string_voltage: FloatArray
    converged: BoolArray
    passes: IntArray

    def take(self, which: IntArray) -> StackState:
        """Return the state of a subset of cases."""
        return StackState(**{name: value[..., which] for name, value in self.__dict__.items()})

    def put(self, which: IntArray, other: StackState) -> None:
        """Write the state of a subset of cases."""
        for name, value in self.__dict__.items():
            value[..., which] = getattr(other, name)


class _FilmTerms(NamedTuple):
    """Effective conductance from stream to wall face, heat capacity rate and film conductance, (rows, cases)."""

    conductance: FloatArray
    capacity: FloatArray
    film: FloatArray


class _StreamLine(NamedTuple):
    """A row's stream made linear: outlet = p inlet - r heat + w, heat = a inlet - b wall + c."""

    p: FloatArray
    r: FloatArray
    w: FloatArray
    a: FloatArray
    b: FloatArray
    c: FloatArray


class _SideWork:
    """One side during the iteration: film terms at the latest temperatures, with secant slopes."""

    def __init__(self, side: StackSide, other_inlet: FloatArray, active: FloatArray | None, against_rows: bool) -> None:
        self.side = side
        self.active = active
        self.against_rows = against_rows
        self.mean: FloatArray | None = None
        self.terms: _FilmTerms | None = None
        cases = len(side.inlet_temperature)
        self.conductance_slope = np.zeros((1, cases))
        self.capacity_slope = np.zeros((1, cases))
        if side.film is not None:
            # two temperatures, at the inlet and half way to the other stream, give the first films and slopes
            self.ends = np.stack([side.inlet_temperature, 0.5 * (side.inlet_temperature + other_inlet)])
            assert side.fluid is not None
            heat_capacity, viscosity, conductivity = side.fluid.film_properties(self.ends)
            self.end_films = side.film.conductance(heat_capacity, viscosity, conductivity)
            self.end_capacities = side.mass_flow * heat_capacity
            span = self.ends[1] - self.ends[0]
            self.inverse_span = np.where(np.abs(span) > 1e-6, 1.0 / np.where(span == 0, 1.0, span), 0.0)

    def take(self, which: IntArray) -> None:
        """Keep a subset of cases."""
        for name, value in self.__dict__.items():
            if isinstance(value, _FilmTerms):
                setattr(self, name, _FilmTerms(*(item[:, which] for item in value)))
            else:
                setattr(self, name, _take(value, which))

    def ends_of_rows(self, boundaries: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Values at the boundary where the stream enters each row, and where it leaves."""
        before, after = boundaries[:-1], boundaries[1:]
        return (after, before) if self.against_rows else (before, after)

    def _combine(self, film: FloatArray, capacity: FloatArray) -> _FilmTerms:
        """Join film and wall: the stream nears the metal exponentially (or by the arithmetic mean) within a row."""
        transfer_units = film / capacity
        if self.side.arithmetic:
            effective = film / (1.0 + 0.5 * transfer_units)
        else:
            effective = -capacity * np.expm1(-transfer_units)
        return _FilmTerms(effective / (1.0 + effective * self.side.wall_resistance), capacity, film)

    def guess(self, stream: FloatArray) -> None:
        """Take films and capacities from the straight line through the two first evaluations."""
        if self.side.film is None:
            self._reservoir(stream)
            return
        mean = 0.5 * (stream[:-1] + stream[1:])
        share = np.clip((mean - self.ends[0]) * self.inverse_span, -0.2, 2.0)
        film = self.end_films[0] + share * (self.end_films[1] - self.end_films[0])
        capacity = self.end_capacities[0] + share * (self.end_capacities[1] - self.end_capacities[0])
        self.terms = self._combine(
            np.maximum(film, 0.2 * self.end_films[0]), np.maximum(capacity, 0.2 * self.end_capacities[0])
        )
        self.mean = mean

    def evaluate(self, stream: FloatArray) -> None:
        """Evaluate films and capacities at the streams' temperatures and renew the secant slopes."""
        side = self.side
        if side.film is None or side.fluid is None:
            self._reservoir(stream)
            return
        mean = 0.5 * (stream[:-1] + stream[1:])
        heat_capacity, viscosity, conductivity = side.fluid.film_properties(mean)
        enthalpy = side.fluid.enthalpy(stream)
        fall = stream[:-1] - stream[1:]
        enough = np.abs(fall) > 1e-3
        secant = np.where(enough, (enthalpy[:-1] - enthalpy[1:]) / np.where(enough, fall, 1.0), heat_capacity)
        film = side.film.conductance(heat_capacity, viscosity, conductivity)
        terms = self._combine(film, side.mass_flow * np.where(secant > 0, secant, heat_capacity))
        if self.terms is not None and self.mean is not None:
            change = mean - self.mean
            moved = np.abs(change) > 1e-4
            step = np.where(moved, change, 1.0)
            self.conductance_slope = np.where(
                moved, (terms.conductance - self.terms.conductance) / step, self.conductance_slope
            )
            self.capacity_slope = np.where(moved, (terms.capacity - self.terms.capacity) / step, self.capacity_slope)
        self.terms, self.mean = terms, mean

    def _reservoir(self, stream: FloatArray) -> None:
        if self.terms is None:
            film = np.broadcast_to(self.side.film_conductance, stream[1:].shape)
            conductance = film / (1.0 + film * self.side.wall_resistance)
            self.terms = _FilmTerms(conductance, np.ones_like(film), film)
            self.mean = stream[1:]

    def line(self, stream: FloatArray, wall: FloatArray) -> _StreamLine:
        """Return the stream's linear model around the latest temperatures."""
        assert self.terms is not None and self.mean is not None
        conductance, capacity, _ = self.terms
        if self.side.film is None:
            one = np.ones_like(conductance)
            zero = np.zeros_like(conductance)
            return _StreamLine(one, zero, zero, conductance, conductance, zero)
        entering, leaving = self.ends_of_rows(stream)
        half = 0.5 * self.capacity_slope * (entering - leaving)
        r = 1.0 / (capacity - half)
        p = (capacity + half) * r
        w = (-2.0 * half * self.mean) * r
        if self.active is not None:
            p = np.where(self.active > 0, p, 1.0)
            r = r * self.active
            w = w * self.active
        s = self.conductance_slope * (entering - wall)
        d = 1.0 / (1.0 + 0.5 * s * r)
        return _StreamLine(
            p, r, w, (conductance + 0.5 * s * (1.0 + p)) * d, conductance * d, s * (0.5 * w - self.mean) * d
        )

    def module_resistance(self) -> FloatArray:
        """Resistance from the wall face to the junctions of a module [K/W], (rows, cases)."""
        assert self.terms is not None
        return self.side.module_resistance + self.side.constriction.resistance(self.terms.film / self.side.place_area)


class _Solver:
    """The iteration on one chunk of cases."""

    def __init__(self, problem: StackProblem, load: Load, start: StackState | None) -> None:
        self.problem = problem
        self.load = load
        rows, cases = problem.rows, problem.cases
        whole = bool(np.all(problem.active_rows == rows))
        self.active = None if whole else (np.arange(rows)[:, None] < problem.active_rows).astype(float)
        hot_inlet, cold_inlet = problem.hot.inlet_temperature, problem.cold.inlet_temperature
        self.hot = _SideWork(problem.hot, cold_inlet, self.active, against_rows=False)
        self.cold = _SideWork(problem.cold, hot_inlet, self.active, against_rows=True)
        blocks = len(problem.circuit.block_starts)
        self.scale = np.abs(hot_inlet - cold_inlet) + 1e-2
        self.previous_change = np.full(cases, np.inf)
        self.last_point = np.full((blocks, cases), np.nan)
        self.last_residual = np.full((blocks, cases), np.nan)
        self.held = np.zeros(cases, dtype=bool)
        self.conducting = np.ones((blocks, cases), dtype=bool)
        self.diodes = bool(np.any(problem.circuit.diode_drop > 0))
        self.fresh = start is None
        if start is not None:
            self.state = start.take(np.arange(cases))
            self.state.converged[:] = False
            self.state.passes[:] = 0
            return
        third = (hot_inlet - cold_inlet) / 3.0
        in_rows, at_ends = np.ones((rows, 1)), np.ones((rows + 1, 1))
        self.state = StackState(
            hot_stream=at_ends * (hot_inlet - 0.3 * third),
            cold_stream=at_ends * (cold_inlet + 0.3 * third),
            hot_wall=in_rows * (hot_inlet - 0.5 * third),
            hot_junction=in_rows * (hot_inlet - 0.75 * third),
            cold_junction=in_rows * (cold_inlet + 0.75 * third),
            cold_wall=in_rows * (cold_inlet + 0.5 * third),
            current=np.zeros((blocks, cases)),
            string_voltage=np.zeros((blocks, cases)),
            converged=np.zeros(cases, dtype=bool),
            passes=np.zeros(cases, dtype=np.int64),
        )

    def run(self) -> StackState:
        """Iterate until every case has converged or the passes are used up."""
        result = self.state.take(np.arange(self.problem.cases))
        where = np.arange(self.problem.cases)
        if self.fresh:
            for _ in range(2):
                self.hot.guess(self.state.hot_stream)
                self.cold.guess(self.state.cold_stream)
                self.step()
        else:
            self.hot.guess(self.state.hot_stream)
            self.cold.guess(self.state.cold_stream)
        for count in range(1, MAXIMUM_PASSES + 1):
            self.hot.evaluate(self.state.hot_stream)
            self.cold.evaluate(self.state.cold_stream)
            change = self.step()
            finite = np.isfinite(change)
            rate = np.clip(change / np.maximum(self.previous_change, 1e-300), 0.0, 0.5)
            done = finite & (change < 1e-5) & (change * np.maximum(rate, 1e-3) < TOLERANCE)
            if self.load.mode == MAXIMUM_POWER:
                done &= self.held
            self.previous_change = np.where(count > 1, change, np.inf)
            self.state.passes[:] = count
            self.state.converged = done
            leaving = done | ~finite
            if leaving.all() or count == MAXIMUM_PASSES:
                result.put(where, self.state)
                break
            if leaving.mean() > 0.1:
                out = np.flatnonzero(leaving)
                result.put(where[out], self.state.take(out))
                keep = np.flatnonzero(~leaving)
                where = where[keep]
                self.keep(keep)
        return result

    def keep(self, which: IntArray) -> None:
        """Go on with a subset of cases."""
        self.problem = self.problem.take(which)
        self.load = self.load.take(which)
        self.state = self.state.take(which)
        self.hot.take(which)
        self.cold.take(which)
        for name in (
            "active",
            "scale",
            "previous_change",
            "last_point",
            "last_residual",
            "held",
            "conducting",
        ):
            setattr(self, name, _take(getattr(self, name), which))

    def step(self) -> FloatArray:
        """One Newton step on temperatures, currents and voltage; returns the largest scaled change, (cases,)."""
        problem, state, circuit = self.problem, self.state, self.problem.circuit
        hot = self.hot.line(state.hot_stream, state.hot_wall)
        cold = self.cold.line(state.cold_stream, state.cold_wall)
        into, out = self.hot.module_resistance(), self.cold.module_resistance()
        a, resistance, k, a_slope, resistance_slope, k_slope = problem.module.parameters(
            state.hot_junction, state.cold_junction
        )
        rows = problem.rows
        lengths = np.diff(np.append(circuit.block_starts, rows))
        block_of_row = np.repeat(np.arange(len(lengths)), lengths)
        current = state.current[block_of_row]
        difference = state.hot_junction - state.cold_junction
        mean = 0.5 * (state.hot_junction + state.cold_junction)

        # heat into the hot junctions u1 Thj + v1 Tcj - s1, heat out of the cold ones, negative, u2 Thj + v2 Tcj - s2
        peltier = a * current
        joule = 0.5 * current * current * resistance
        half_joule_slope = 0.5 * current * current * resistance_slope
        hot_slope = a_slope * current * state.hot_junction + k_slope * difference - half_joule_slope
        cold_slope = a_slope * current * state.cold_junction + k_slope * difference + half_joule_slope
        v1, u2 = 0.5 * hot_slope - k, -k - 0.5 * cold_slope
        u1, v2 = peltier - v1 + hot_slope, -peltier - u2 - cold_slope
        s1, s2 = joule + hot_slope * mean, joule - cold_slope * mean

        # junctions from wall faces, [1 + r1 u1, r1 v1; r2 u2, 1 + r2 v2] (Thj, Tcj) = (Twh + r1 s1, Twc + r2 s2)
        x1, y1, x2, y2 = 1.0 + into * u1, into * v1, out * u2, 1.0 + out * v2
        inverse = 1.0 / (x1 * y2 - y1 * x2)
        x1, y1, x2, y2 = x1 * inverse, y1 * inverse, x2 * inverse, y2 * inverse
        j10, j20 = y2 * into * s1 - y1 * out * s2, x1 * out * s2 - x2 * into * s1

        # wall faces from the entering streams
        m11 = hot.b + u1 * y2 - v1 * x2 + problem.bypass + problem.loss
        m12 = v1 * x1 - u1 * y1 - problem.bypass
        m21 = u2 * y2 - v2 * x2 - problem.bypass
        m22 = cold.b + v2 * x1 - u2 * y1 + problem.bypass
        inverse = 1.0 / (m11 * m22 - m12 * m21)
        n11, n12, n21, n22 = m22 * inverse, -m12 * inverse, -m21 * inverse, m11 * inverse
        f1 = hot.c + problem.loss * problem.ambient_temperature + s1 - u1 * j10 - v1 * j20
        f2 = cold.c + s2 - u2 * j10 - v2 * j20
        w11, w12, w10 = n11 * hot.a, n12 * cold.a, n11 * f1 + n12 * f2
        w21, w22, w20 = n21 * hot.a, n22 * cold.a, n21 * f1 + n22 * f2

        # the row as a two-port between its entering streams
        hot_rb, cold_rb = hot.r * hot.b, cold.r * cold.b
        ports = _Ports(
            hot.p - hot.r * hot.a + hot_rb * w11, hot_rb * w12, cold_rb * w21, cold.p - cold.r * cold.a + cold_rb * w22
        )
        sweep = _Sweep(ports)
        hot_stream, cold_stream = sweep.solve(
            hot.w - hot.r * hot.c + hot_rb * w10,
            cold.w - cold.r * cold.c + cold_rb * w20,
            problem.hot.inlet_temperature,
            problem.cold.inlet_temperature,
        )
        hot_in, cold_in = hot_stream[:-1], cold_stream[1:]
        hot_wall = w11 * hot_in + w12 * cold_in + w10
        cold_wall = w21 * hot_in + w22 * cold_in + w20
        hot_junction = y2 * hot_wall - y1 * cold_wall + j10
        cold_junction = x1 * cold_wall - x2 * hot_wall + j20

        # derivatives in each block's current, first axis
        t1 = current * resistance - a * hot_junction
        t2 = current * resistance + a * cold_junction
        d10, d20 = y2 * into * t1 - y1 * out * t2, x1 * out * t2 - x2 * into * t1
        g1, g2 = t1 - u1 * d10 - v1 * d20, t2 - u2 * d10 - v2 * d20
        if len(lengths) == 1:
            d10, d20, g1, g2 = d10[None], d20[None], g1[None], g2[None]
        else:
            own = (block_of_row[None, :] == np.arange(len(lengths))[:, None])[:, :, None]
            d10, d20, g1, g2 = own * d10, own * d20, own * g1, own * g2
        dw10, dw20 = n11 * g1 + n12 * g2, n21 * g1 + n22 * g2
        d_hot_stream, d_cold_stream = sweep.derivative(hot_rb * dw10, cold_rb * dw20)
        d_hot_in, d_cold_in = d_hot_stream[:, :-1], d_cold_stream[:, 1:]
        d_hot_wall = w11 * d_hot_in + w12 * d_cold_in + dw10
        d_cold_wall = w21 * d_hot_in + w22 * d_cold_in + dw20
        d_hot_junction = y2 * d_hot_wall - y1 * d_cold_wall + d10
        d_cold_junction = x1 * d_cold_wall - x2 * d_hot_wall + d20

        # string voltages, made linear in the currents around the swept temperatures
        shift = 0.5 * (hot_junction + cold_junction) - mean
        difference = hot_junction - cold_junction
        weight = circuit.series if self.active is None else circuit.series * self.active
        starts = circuit.block_starts
        row_resistance = weight * (resistance + resistance_slope * shift)
        row_emf = weight * (a + a_slope * shift) * difference
        string_resistance = np.add.reduceat(row_resistance, starts, axis=0) + circuit.lead
        emf = np.add.reduceat(row_emf, starts, axis=0)
        d_row = weight * (
            a * (d_hot_junction - d_cold_junction)
            + (a_slope * difference - current * resistance_slope) * (0.5 * (d_hot_junction + d_cold_junction))
        )
        jacobian = np.add.reduceat(d_row, starts, axis=1)
        jacobian = np.swapaxes(jacobian, 0, 1).copy()  # [block b, current t]
        diagonal = np.arange(len(lengths))
        jacobian[diagonal, diagonal] -= string_resistance
        step, string_voltage = self.circuit_step(emf, string_resistance, jacobian)
        emf_scale = np.add.reduceat(weight * np.abs(a), starts, axis=0) * self.scale
        electrical_change = (np.abs(step) * string_resistance / emf_scale).max(axis=0)

        new = (
            hot_stream + np.einsum("b...,b...->...", d_hot_stream, step[:, None]),
            cold_stream + np.einsum("b...,b...->...", d_cold_stream, step[:, None]),
            hot_wall + np.einsum("b...,b...->...", d_hot_wall, step[:, None]),
            hot_junction + np.einsum("b...,b...->...", d_hot_junction, step[:, None]),
            cold_junction + np.einsum("b...,b...->...", d_cold_junction, step[:, None]),
            cold_wall + np.einsum("b...,b...->...", d_cold_wall, step[:, None]),
        )
        change = np.maximum(
            np.abs(new[3] - state.hot_junction).max(axis=0), np.abs(new[4] - state.cold_junction).max(axis=0)
        )
        change = np.maximum(change, np.abs(new[0] - state.hot_stream).max(axis=0))
        change = np.maximum(change, np.abs(new[1] - state.cold_stream).max(axis=0))
        (
            state.hot_stream,
            state.cold_stream,
            state.hot_wall,
            state.hot_junction,
            state.cold_junction,
            state.cold_wall,
        ) = new
        state.current = state.current + step
        state.string_voltage = string_voltage
        return np.asarray(np.maximum(change / self.scale, electrical_change))

    def circuit_step(
        self, emf: FloatArray, string_resistance: FloatArray, jacobian: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Newton's step in the block currents, and the string voltages after it, (blocks, cases)."""
        circuit, current = self.problem.circuit, self.state.current
        voltage = emf - string_resistance * current - circuit.diode_drop
        if circuit.independent:
            return self._independent_step(voltage, string_resistance, jacobian)
        conducting = self.conducting
        if self.diodes:
            identity = np.eye(len(current))[:, :, None]
            jacobian_used = np.where(conducting[:, None], jacobian, identity)
            right = np.stack([np.where(conducting, voltage, current), conducting.astype(float)])
        else:
            jacobian_used, right = jacobian, np.stack([voltage, np.ones_like(voltage)])
        solved = _solve_blocks(jacobian_used, right)
        base, per_volt = current - solved[0], solved[1]
        total, total_per_volt = circuit.parallel * base.sum(axis=0), circuit.parallel * per_volt.sum(axis=0)
        bus = self._bus_voltage(total, total_per_volt, string_resistance)
        new = base + per_volt * bus
        if self.diodes:
            unloaded = voltage + np.einsum("bt...,t...->b...", jacobian, np.maximum(new, 0.0) - current)
            self.conducting = np.where(conducting, new >= 0.0, unloaded > bus) | (circuit.diode_drop <= 0)
            new = np.where((circuit.diode_drop > 0) & (new < 0.0), 0.0, new)
        return new - current, np.broadcast_to(bus, current.shape)

    def _bus_voltage(self, total: FloatArray, total_per_volt: FloatArray, resistance: FloatArray) -> FloatArray:
        """Voltage that the load asks for where the stack gives the current `total` + `total_per_volt` V."""
        load, circuit = self.load, self.problem.circuit
        if load.mode == FIXED_VOLTAGE:
            assert load.voltage is not None
            return load.voltage
        if load.mode == FIXED_RESISTANCE:
            assert load.resistance is not None
            return load.resistance * total / (1.0 - load.resistance * total_per_volt)
        if load.mode == OPEN_CIRCUIT:
            # with every diode blocking, the bus rests at the largest open voltage: any large resistance shows it
            return np.where(total_per_volt < 0, -total / np.where(total_per_volt < 0, total_per_volt, -1.0), 0.0)
        if load.mode == MATCHED:
            inner = 1.0 / (circuit.parallel * np.where(self.conducting, 1.0 / resistance, 0.0).sum(axis=0))
            return (inner * total + circuit.diode_drop) / (1.0 - inner * total_per_volt)
        bus = self.state.string_voltage[0]
        aim = -total / (2.0 * np.where(total_per_volt < 0, total_per_volt, -1.0))
        new = self._accelerated(bus[None], (aim - bus)[None])[0]
        if load.lowest is not None and load.highest is not None:
            new = np.clip(new, load.lowest, load.highest)
        new = np.where(self.held, bus, new)
        settled = (np.abs(new - bus) <= 1e-5 * np.abs(new) + 1e-15) & (self.previous_change < 1e-4)
        self.held |= settled
        return new

    def _accelerated(self, point: FloatArray, residual: FloatArray) -> FloatArray:
        """Next point of a fixed-point step, by a guarded secant on its residual; shape (n, cases)."""
        run = point - self.last_point[: len(point)]
        with np.errstate(invalid="ignore", divide="ignore"):
            slope = (residual - self.last_residual[: len(point)]) / run
        slope = np.where(np.isfinite(slope) & (slope < -0.4) & (slope > -2.5), slope, -1.0)
        self.last_point[: len(point)] = point
        self.last_residual[: len(point)] = residual
        return np.asarray(point - residual / slope)

    def _independent_step(
        self, voltage: FloatArray, resistance: FloatArray, jacobian: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """The step where each string has its own converter."""
        current, drop = self.state.current, self.problem.circuit.diode_drop
        if self.load.mode == OPEN_CIRCUIT:
            step = -current
        elif self.load.mode == MATCHED:
            diagonal = np.arange(len(current))
            matrix = jacobian.copy()
            matrix[diagonal, diagonal] -= resistance
            step = _solve_blocks(matrix, (resistance * current + drop - voltage)[None])[0]
        else:
            gradient = voltage + np.einsum("bt...,b...->t...", jacobian, current)
            step = -_solve_blocks(jacobian + np.swapaxes(jacobian, 0, 1), gradient[None])[0]
            step = self._accelerated(current, step) - current
            step = np.where(self.held, 0.0, step)
            size = (np.abs(step) <= 1e-5 * np.abs(current).max(axis=0) + 1e-15).all(axis=0)
            self.held |= size & (self.previous_change < 1e-4)
        return step, voltage + np.einsum("bt...,t...->b...", jacobian, step)


class _Ports(NamedTuple):
    """Leaving temperatures of a row per entering temperature, (rows, cases): hot from hot, hot from cold, ..."""

    hot_hot: FloatArray
    hot_cold: FloatArray
    cold_hot: FloatArray
    cold_cold: FloatArray


class _Sweep:
    """Joins the rows' two-ports by a backward and a forward sweep over rows."""

    def __init__(self, ports: _Ports) -> None:
        self.ports = ports
        rows, cases = ports.hot_hot.shape
        self.reflection = np.zeros((rows + 1, cases))
        self.gain = np.empty((rows, cases))
        self.echo = np.empty((rows, cases))
        for i in range(rows - 1, -1, -1):
            after = self.reflection[i + 1]
            self.echo[i] = 1.0 / (1.0 - after * ports.hot_cold[i])
            self.gain[i] = after * ports.hot_hot[i] * self.echo[i]
            self.reflection[i] = ports.cold_hot[i] + ports.cold_cold[i] * self.gain[i]

    def solve(
        self, hot_source: FloatArray, cold_source: FloatArray, hot_inlet: FloatArray, cold_inlet: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Temperatures at the row boundaries, (..., rows + 1, cases), for sources of the rows and both inlets."""
        shape = (*hot_source.shape[:-2], hot_source.shape[-2] + 1, hot_source.shape[-1])
        ports, rows = self.ports, hot_source.shape[-2]
        source, offset = np.empty(shape), np.empty(shape)
        source[..., rows, :] = cold_inlet
        for i in range(rows - 1, -1, -1):
            offset[..., i, :] = (self.reflection[i + 1] * hot_source[..., i, :] + source[..., i + 1, :]) * self.echo[i]
            source[..., i, :] = ports.cold_cold[i] * offset[..., i, :] + cold_source[..., i, :]
        hot, cold = np.empty(shape), np.empty(shape)
        hot[..., 0, :] = hot_inlet
        for i in range(rows):
            entering = self.gain[i] * hot[..., i, :] + offset[..., i, :]
            hot[..., i + 1, :] = (
                ports.hot_hot[i] * hot[..., i, :] + ports.hot_cold[i] * entering + hot_source[..., i, :]
            )
            cold[..., i + 1, :] = entering
        cold[..., 0, :] = self.reflection[0] * hot[..., 0, :] + source[..., 0, :]
        return hot, cold

    def derivative(self, hot_source: FloatArray, cold_source: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Change of the boundary temperatures for changes of the rows' sources, inlets held."""
        nothing = np.zeros(hot_source.shape[-1])
        return self.solve(hot_source, cold_source, nothing, nothing)


def _solve_blocks(matrix: FloatArray, right: FloatArray) -> FloatArray:
    """Solve (blocks, blocks, cases) systems for several right sides (sides, blocks, cases)."""
    if len(matrix) == 1:
        return right / matrix[0]
    solved = np.linalg.solve(matrix.transpose(2, 0, 1), right.transpose(2, 1, 0))
    return np.asarray(solved.transpose(2, 1, 0))


def solve_stack(problem: StackProblem, load: Load, start: StackState | None = None) -> StackState:
    """Solve all cases of one structure at one load.

    Parameters: `problem` with (cases,) arrays; `load`; `start`, a state of the same problem at another load, or None
    to start from open circuit (which keeps to the physical branch). Returns the state; cases that did not converge
    are marked in `converged` and hold whatever the last pass gave.
    """
    cases = problem.cases
    order = np.argsort(problem.active_rows, kind="stable")
    chunk = max(1, CHUNK_CELLS // problem.rows)
    result: StackState | None = None
    with np.errstate(all="ignore"):
        for first in range(0, cases, chunk):
            which = order[first : first + chunk]
            part = _Solver(problem.take(which), load.take(which), None if start is None else start.take(which)).run()
            if result is None:
                result = StackState(
                    **{
                        name: np.empty((*value.shape[:-1], cases), dtype=value.dtype)
                        for name, value in part.__dict__.items()
                    }
                )
            result.put(which, part)
    if result is None:
        raise ValueError("a batch needs at least one case")
    return result
