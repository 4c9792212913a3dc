"""The iteration on all rows of all cases of a chunk, and the chunks."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from harvest.model.loads import FIXED_VOLTAGE, MAXIMUM_POWER, OPEN_CIRCUIT
from harvest.model.stack.circuit import CircuitWork
from harvest.model.stack.problem import Load, StackProblem, StackState, take_cases
from harvest.model.stack.streams import SideWork
from harvest.model.stack.sweep import Ports, Sweep
from harvest.physics.arrays import FloatArray, IntArray

CHUNK_CELLS = 100_000
"""Rows times cases that are solved together: large enough to hide the interpreter, small enough for the caches."""
MAXIMUM_PASSES = 60
PEAK_SHARES = tuple(np.linspace(0.02, 0.98, 49))
PEAK_ROUNDS = 7
"""Scan of the voltage, in parts of the open-circuit voltage, and how often the best of it is narrowed down, where
blocks behind diodes make several peaks of power."""
SMALLEST_SCALE = 0.1
"""Temperature difference below which errors are no longer judged in proportion [K]."""
TOLERANCE = 1e-10
"""Largest error of a temperature that is left, over the difference of the inlets."""


class _Solver:
    """The iteration on one chunk of cases."""

    def __init__(self, problem: StackProblem, load: Load, start: StackState | None) -> None:
        self.problem = problem
        self.maximising = load.mode == MAXIMUM_POWER
        rows, cases = problem.rows, problem.cases
        whole = bool(np.all(problem.active_rows == rows))
        self.active = None if whole else (np.arange(rows)[:, None] < problem.active_rows).astype(float)
        hot_inlet, cold_inlet = problem.hot.inlet_temperature, problem.cold.inlet_temperature
        self.hot = SideWork(problem.hot, cold_inlet, self.active, against_rows=False)
        self.cold = SideWork(problem.cold, hot_inlet, self.active, against_rows=True)
        blocks = len(problem.circuit.block_starts)
        self.scale = np.abs(hot_inlet - cold_inlet) + SMALLEST_SCALE
        self.previous_change = np.full(cases, np.inf)
        self.circuit = CircuitWork(problem.circuit, load)
        self.fresh = start is None
        if start is not None:
            self.state = start.take(np.arange(cases))
            carrying = (start.current > 0.0) | (problem.circuit.diode_drop <= 0)
            self.circuit.conducting = carrying & self.circuit.whole
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
        self.hot.guess(self.state.hot_stream, self.state.hot_wall)
        self.cold.guess(self.state.cold_stream, self.state.cold_wall)
        if self.fresh:
            self.step()
        finished = np.zeros(len(where), dtype=bool)
        for count in range(1, MAXIMUM_PASSES + 1):
            exact_slopes = count == 2 and self.maximising
            self.hot.evaluate(self.state.hot_stream, self.state.hot_wall, count > 1, exact_slopes)
            self.cold.evaluate(self.state.cold_stream, self.state.cold_wall, count > 1, exact_slopes)
            change = self.step()
            rate = np.clip(change / np.maximum(self.previous_change, 1e-300), 1e-3, 0.5)
            done = (change < 1e-5) & (change * rate < TOLERANCE)
            if self.maximising:
                done &= self.circuit.held
            self.previous_change = np.where(count > 1, change, np.inf)
            self.state.passes[:] = count
            self.state.converged = done
            # a case is written in the pass in which it ends, so that its neighbours do not matter
            leaving = done | ~np.isfinite(change)
            if count == MAXIMUM_PASSES:
                leaving[:] = True
            ending = np.flatnonzero(leaving & ~finished)
            result.put(where[ending], self.state.take(ending))
            finished |= leaving
            if finished.all():
                break
            if finished.mean() > 0.1:
                keep = np.flatnonzero(~finished)
                where, finished = where[keep], finished[keep]
                self.keep(keep)
        return result

    def keep(self, which: IntArray) -> None:
        """Go on with a subset of cases."""
        self.problem = self.problem.take(which)
        self.state = self.state.take(which)
        for part in (self.hot, self.cold, self.circuit):
            part.take(which)
        self.active = take_cases(self.active, which)
        self.scale = self.scale[which]
        self.previous_change = self.previous_change[which]

    def step(self) -> FloatArray:
        """One Newton step on temperatures, currents and voltage; returns the largest scaled change, (cases,)."""
        problem, state, circuit = self.problem, self.state, self.problem.circuit
        hot = self.hot.line(state.hot_stream, state.hot_wall)
        cold = self.cold.line(state.cold_stream, state.cold_wall)
        into, out = self.hot.module_resistance(), self.cold.module_resistance()
        module = problem.module.parameters(state.hot_junction, state.cold_junction)
        a, resistance, k = module.seebeck, module.resistance, module.conductance
        rows = problem.rows
        lengths = np.diff(np.append(circuit.block_starts, rows))
        block_of_row = np.repeat(np.arange(len(lengths)), lengths)
        current = state.current[block_of_row]
        difference = state.hot_junction - state.cold_junction

        # heat into the hot junctions u1 Thj + v1 Tcj - s1, heat out of the cold ones, negative, u2 Thj + v2 Tcj - s2
        peltier = a * current
        joule = 0.5 * current * current * resistance
        half_square = 0.5 * current * current
        by_mean = module.conductance_slope * difference, half_square * module.resistance_slope
        by_spread = module.conductance_spread * difference, half_square * module.resistance_spread
        seebeck_mean, seebeck_spread = module.seebeck_slope * current, module.seebeck_spread * current
        hot_mean = seebeck_mean * state.hot_junction + by_mean[0] - by_mean[1]
        hot_spread = seebeck_spread * state.hot_junction + by_spread[0] - by_spread[1]
        cold_mean = seebeck_mean * state.cold_junction + by_mean[0] + by_mean[1]
        cold_spread = seebeck_spread * state.cold_junction + by_spread[0] + by_spread[1]
        hot_by_hot, hot_by_cold = 0.5 * (hot_mean + hot_spread), 0.5 * (hot_mean - hot_spread)
        cold_by_hot, cold_by_cold = 0.5 * (cold_mean + cold_spread), 0.5 * (cold_mean - cold_spread)
        u1, v1 = k + peltier + hot_by_hot, hot_by_cold - k
        u2, v2 = -k - cold_by_hot, k - peltier - cold_by_cold
        s1 = joule + hot_by_hot * state.hot_junction + hot_by_cold * state.cold_junction
        s2 = joule - cold_by_hot * state.hot_junction - cold_by_cold * state.cold_junction

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
        ports = Ports(
            hot.p - hot.r * hot.a + hot_rb * w11, hot_rb * w12, cold_rb * w21, cold.p - cold.r * cold.a + cold_rb * w22
        )
        sweep = Sweep(ports)
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
        if len(lengths) == 1:
            t1, t2 = t1[None], t2[None]
        else:
            own = (block_of_row[None, :] == np.arange(len(lengths))[:, None])[:, :, None]
            t1, t2 = own * t1, own * t2
        hot_heat = u1 * hot_junction + v1 * cold_junction - s1
        cold_heat = u2 * hot_junction + v2 * cold_junction - s2
        e1 = into * t1 - self.hot.constriction_shift(hot_heat)
        e2 = out * t2 - self.cold.constriction_shift(cold_heat)
        d10, d20 = y2 * e1 - y1 * e2, x1 * e2 - x2 * e1
        g1, g2 = t1 - u1 * d10 - v1 * d20, t2 - u2 * d10 - v2 * d20
        dw10, dw20 = n11 * g1 + n12 * g2, n21 * g1 + n22 * g2
        d_hot_stream, d_cold_stream = sweep.derivative(hot_rb * dw10, cold_rb * dw20)
        d_hot_in, d_cold_in = d_hot_stream[:, :-1], d_cold_stream[:, 1:]
        self.hot.keep_derivative(d_hot_stream)
        self.cold.keep_derivative(d_cold_stream)
        d_hot_wall = w11 * d_hot_in + w12 * d_cold_in + dw10
        d_cold_wall = w21 * d_hot_in + w22 * d_cold_in + dw20
        d_hot_junction = y2 * d_hot_wall - y1 * d_cold_wall + d10
        d_cold_junction = x1 * d_cold_wall - x2 * d_hot_wall + d20

        # string voltages, made linear in the currents around the swept temperatures
        hot_shift, cold_shift = hot_junction - state.hot_junction, cold_junction - state.cold_junction
        shift, spread = 0.5 * (hot_shift + cold_shift), 0.5 * (hot_shift - cold_shift)
        difference = hot_junction - cold_junction
        weight = circuit.series if self.active is None else circuit.series * self.active
        starts = circuit.block_starts
        new_resistance = resistance + module.resistance_slope * shift + module.resistance_spread * spread
        new_seebeck = a + module.seebeck_slope * shift + module.seebeck_spread * spread
        row_resistance = weight * new_resistance
        row_emf = weight * new_seebeck * difference
        string_resistance = np.add.reduceat(row_resistance, starts, axis=0) + circuit.lead
        emf = np.add.reduceat(row_emf, starts, axis=0)
        by_mean_shift = module.seebeck_slope * difference - current * module.resistance_slope
        by_spread_shift = module.seebeck_spread * difference - current * module.resistance_spread
        d_row = weight * (
            (a + 0.5 * by_spread_shift) * (d_hot_junction - d_cold_junction)
            + 0.5 * by_mean_shift * (d_hot_junction + d_cold_junction)
        )
        jacobian = np.add.reduceat(d_row, starts, axis=1)
        jacobian = np.swapaxes(jacobian, 0, 1).copy()  # [block b, current t]
        diagonal = np.arange(len(lengths))
        jacobian[diagonal, diagonal] -= string_resistance
        emf_scale = np.add.reduceat(weight * np.abs(a), starts, axis=0) * self.scale
        step, string_voltage = self.circuit.step(
            state, self.previous_change, emf, string_resistance, jacobian, emf_scale
        )
        electrical_change = (np.abs(step) * string_resistance / np.where(emf_scale > 0, emf_scale, 1.0)).max(axis=0)

        hot_junction = _moved(hot_junction, d_hot_junction, step)
        cold_junction = _moved(cold_junction, d_cold_junction, step)
        hot_stream, cold_stream = _moved(hot_stream, d_hot_stream, step), _moved(cold_stream, d_cold_stream, step)
        metal_change = np.maximum(
            np.abs(hot_junction - state.hot_junction), np.abs(cold_junction - state.cold_junction)
        )
        if self.active is not None:
            metal_change = metal_change * self.active
        stream_change = np.maximum(np.abs(hot_stream - state.hot_stream), np.abs(cold_stream - state.cold_stream))
        change = np.maximum(metal_change.max(axis=0), stream_change.max(axis=0)) / self.scale
        self.state = StackState(
            hot_stream=hot_stream,
            cold_stream=cold_stream,
            hot_wall=_moved(hot_wall, d_hot_wall, step),
            hot_junction=hot_junction,
            cold_junction=cold_junction,
            cold_wall=_moved(cold_wall, d_cold_wall, step),
            current=state.current + step,
            string_voltage=string_voltage,
            converged=state.converged,
            passes=state.passes,
        )
        return np.where(self.circuit.switched, 1.0, np.maximum(change, electrical_change))


def _moved(value: FloatArray, derivative: FloatArray, step: FloatArray) -> FloatArray:
    """Values (rows, cases) after a step (blocks, cases) along their derivatives (blocks, rows, cases)."""
    if len(step) == 1:
        return np.asarray(value + derivative[0] * step[0])
    return np.asarray(value + np.einsum("brc,bc->rc", derivative, step))


def _with_rows(state: StackState, rows: int) -> StackState:
    """Return a state with fewer rows, or with more, which repeat the last."""

    def fitted(value: FloatArray, length: int) -> FloatArray:
        if len(value) >= length:
            return value[:length]
        return np.pad(value, ((0, length - len(value)), (0, 0)), mode="edge")

    if rows == len(state.hot_wall):
        return state
    return replace(
        state,
        hot_stream=fitted(state.hot_stream, rows + 1),
        cold_stream=fitted(state.cold_stream, rows + 1),
        hot_wall=fitted(state.hot_wall, rows),
        hot_junction=fitted(state.hot_junction, rows),
        cold_junction=fitted(state.cold_junction, rows),
        cold_wall=fitted(state.cold_wall, rows),
    )


def solve_stack(problem: StackProblem, load: Load, start: StackState | None = None) -> StackState:
    """Solve all cases of one structure at one load.

    Parameters: `problem` with (cases,) arrays; `load`; `start`, a state of the same problem at another load, or None
    to start from open circuit (which keeps to the physical branch). Returns the state; cases that did not converge
    are marked in `converged` and hold whatever the last pass gave. Rows that a case does not have repeat its last.
    """
    cases, blocks = problem.cases, len(problem.circuit.block_starts)
    if start is None and blocks > 1 and load.mode == MAXIMUM_POWER and np.any(problem.circuit.diode_drop > 0):
        return _highest_peak(problem, load)
    in_rows, at_ends, in_blocks = (problem.rows, cases), (problem.rows + 1, cases), (blocks, cases)
    result = StackState(
        hot_stream=np.empty(at_ends),
        cold_stream=np.empty(at_ends),
        hot_wall=np.empty(in_rows),
        hot_junction=np.empty(in_rows),
        cold_junction=np.empty(in_rows),
        cold_wall=np.empty(in_rows),
        current=np.empty(in_blocks),
        string_voltage=np.empty(in_blocks),
        converged=np.empty(cases, dtype=bool),
        passes=np.empty(cases, dtype=np.int64),
    )
    order = np.argsort(problem.active_rows, kind="stable")
    chunk = max(1, int(CHUNK_CELLS / (problem.rows * (1.0 + 0.1 * (blocks - 1)))))
    with np.errstate(all="ignore"):
        for first in range(0, cases, chunk):
            which = order[first : first + chunk]
            part = problem.take(which)
            rows = int(part.active_rows.max())
            begun = None if start is None else _with_rows(start.take(which), rows)
            state = _Solver(replace(part, rows=rows), load.take(which), begun).run()
            result.put(which, _with_rows(state, problem.rows))
    return result


def _highest_peak(problem: StackProblem, load: Load) -> StackState:
    """Solve for the largest power of blocks behind diodes, which has a peak for every set of strings that conduct.

    The voltage is scanned, and around the best of the scan a parabola through three points is narrowed down.
    """
    opened = solve_stack(problem, Load(OPEN_CIRCUIT))
    highest = opened.string_voltage[0]
    best, best_power = opened.take(np.arange(problem.cases)), np.full(problem.cases, -np.inf)

    def power_at(voltage: FloatArray) -> FloatArray:
        """Power at a voltage within the converter's window; the best state so far is kept."""
        if load.lowest is not None and load.highest is not None:
            voltage = np.clip(voltage, load.lowest, np.maximum(load.highest, load.lowest))
        state = solve_stack(problem, Load(FIXED_VOLTAGE, voltage=voltage), best)
        power = np.where(state.converged, (state.current * state.string_voltage).sum(axis=0), -np.inf)
        higher = np.flatnonzero(power > best_power)
        best.put(higher, state.take(higher))
        best_power[higher] = power[higher]
        return power

    for share in PEAK_SHARES:
        power_at(share * highest)
    width = (PEAK_SHARES[1] - PEAK_SHARES[0]) * highest
    for _ in range(PEAK_ROUNDS):
        middle = best.string_voltage[0].copy()
        below, centre, above = power_at(middle - width), best_power.copy(), power_at(middle + width)
        bend = below - 2.0 * centre + above
        shift = np.where(bend < 0, 0.5 * width * (below - above) / np.where(bend < 0, bend, -1.0), 0.0)
        power_at(middle + np.clip(shift, -width, width))
        width = width / 4.0
    return best
