"""The electrical side of the iteration: Newton's step in the string currents and the bus voltage."""

from __future__ import annotations

import numpy as np

from harvest.model.loads import FIXED_RESISTANCE, FIXED_VOLTAGE, MATCHED, MAXIMUM_POWER, OPEN_CIRCUIT
from harvest.model.stack.problem import Circuit, Load, StackState, take_cases
from harvest.physics.arrays import BoolArray, FloatArray, IntArray

NOTHING = 1e-9
"""Part of the largest emf that counts as no voltage at all."""
SETTLED = 2e-6
"""Relative step in voltage or current below which the load of largest power counts as found; its power is then good to
the square of it."""


class CircuitWork:
    """Strings and load during the iteration, (cases,) or (blocks, cases).

    `held` marks cases whose load of largest power has been found, `switched` those in which a diode just changed state,
    `whole` the strings that are not interrupted.
    """

    def __init__(self, circuit: Circuit, load: Load) -> None:
        blocks, cases = len(circuit.block_starts), len(circuit.lead)
        self.circuit, self.load = circuit, load
        self.last_point = np.full((blocks, cases), np.nan)
        self.last_residual = np.full((blocks, cases), np.nan)
        self.held = np.zeros(cases, dtype=bool)
        broken = circuit.interrupted
        self.whole = np.ones((blocks, cases), dtype=bool) if broken is None else ~broken
        self.conducting = self.whole
        self.switched = np.zeros(cases, dtype=bool)
        self.diodes = bool(np.any(circuit.diode_drop > 0))
        self.gaps = self.diodes or not self.whole.all()

    def take(self, which: IntArray) -> None:
        """Keep a subset of cases."""
        for name, value in self.__dict__.items():
            setattr(self, name, take_cases(value, which))

    def step(
        self,
        state: StackState,
        previous_change: FloatArray,
        emf: FloatArray,
        string_resistance: FloatArray,
        jacobian: FloatArray,
        emf_scale: FloatArray,
    ) -> tuple[FloatArray, FloatArray]:
        """Newton's step in the block currents, and the string voltages after it, (blocks, cases).

        `jacobian` [V/A] is that of the block's voltage, first axis, in each current; `emf_scale` [V] what a string
        would give at the inlets' temperature difference.
        """
        circuit, current = self.circuit, state.current
        voltage = emf - string_resistance * current - circuit.diode_drop
        near = previous_change < 1e-4
        if circuit.independent:
            resistance = np.where(string_resistance > 0, string_resistance, 1.0)
            small = SETTLED * np.abs(current) + NOTHING * emf_scale / resistance
            return self._independent_step(current, near, small, voltage, string_resistance, jacobian)
        conducting = self.conducting
        if self.gaps:
            identity = np.eye(len(current))[:, :, None]
            jacobian_used = np.where(conducting[:, None], jacobian, identity)
            right = np.stack([np.where(conducting, voltage, current), conducting.astype(float)])
        else:
            jacobian_used, right = jacobian, np.stack([voltage, np.ones_like(voltage)])
        solved = _solve_blocks(jacobian_used, right)
        base, per_volt = current - solved[0], solved[1]
        total, total_per_volt = circuit.parallel * base.sum(axis=0), circuit.parallel * per_volt.sum(axis=0)
        bus = state.string_voltage[0]
        new_bus = self._bus_voltage(bus, total, total_per_volt, string_resistance)
        if self.load.mode == MAXIMUM_POWER:
            new_bus = np.where(self.held, bus, new_bus)
            small = SETTLED * np.abs(new_bus) + NOTHING * emf_scale.max(axis=0)
            self.held |= near & (np.abs(new_bus - bus) <= small)
        new = base + per_volt * new_bus
        if self.diodes and self.load.mode == OPEN_CIRCUIT:
            # behind diodes nothing flows, not even between strings, and the highest string sets the bus
            alone = voltage - np.einsum("bt...,t...->b...", jacobian, current)
            alone = np.where(self.whole, alone, 0.0).max(axis=0)
            blocked = circuit.diode_drop > 0
            new = np.where(blocked, 0.0, new)
            new_bus = np.where(blocked, np.maximum(alone, 0.0), new_bus)
        elif self.diodes:
            unloaded = voltage + np.einsum("bt...,t...->b...", jacobian, np.maximum(new, 0.0) - current)
            self.conducting = np.where(conducting, new >= 0.0, unloaded > new_bus) | (circuit.diode_drop <= 0)
            self.conducting &= self.whole
            self.switched = (self.conducting != conducting).any(axis=0)
            new = np.where((circuit.diode_drop > 0) & (new < 0.0), 0.0, new)
        return new - current, np.broadcast_to(new_bus, current.shape)

    def _bus_voltage(
        self, bus: FloatArray, total: FloatArray, total_per_volt: FloatArray, resistance: FloatArray
    ) -> FloatArray:
        """Voltage that the load asks for where the stack gives the current `total` + `total_per_volt` V, (cases,)."""
        load, circuit = self.load, self.circuit
        if load.mode == FIXED_VOLTAGE:
            assert load.voltage is not None
            return load.voltage
        alive = self.conducting.any(axis=0)
        falling = np.where(alive, total_per_volt, -1.0)
        if load.mode == FIXED_RESISTANCE:
            assert load.resistance is not None
            new = load.resistance * total / (1.0 - load.resistance * falling)
        elif load.mode == OPEN_CIRCUIT:
            new = -total / falling
        elif load.mode == MATCHED:
            conductance = circuit.parallel * np.where(self.conducting, 1.0 / resistance, 0.0).sum(axis=0)
            inner = 1.0 / np.where(alive, conductance, 1.0)
            new = (inner * total + circuit.diode_drop) / (1.0 - inner * falling)
        else:
            aim = -total / (2.0 * falling)
            new = self._accelerated(bus[None], (aim - bus)[None])[0]
            if load.lowest is not None and load.highest is not None:
                new = np.clip(new, load.lowest, load.highest)
                # a converter does not feed the stack: below its window it is off
                new = np.where(total + falling * new < 0.0, -total / falling, new)
        return np.where(alive, new, 0.0)

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
        self,
        current: FloatArray,
        near: BoolArray,
        small: FloatArray,
        voltage: FloatArray,
        resistance: FloatArray,
        jacobian: FloatArray,
    ) -> tuple[FloatArray, FloatArray]:
        """The step where each string has its own converter."""
        drop = self.circuit.diode_drop
        if self.load.mode == OPEN_CIRCUIT:
            step = -current
        elif self.load.mode == MATCHED:
            diagonal = np.arange(len(current))
            matrix = jacobian.copy()
            matrix[diagonal, diagonal] -= resistance
            step = self._step_of_whole(matrix, resistance * current + drop - voltage, current)
        else:
            gradient = voltage + np.einsum("bt...,b...->t...", jacobian, current)
            curvature = jacobian + np.swapaxes(jacobian, 0, 1)
            free = self._step_of_whole(curvature, -gradient, current)
            step = self._accelerated(current, free) - current
            if self.load.lowest is not None and self.load.highest is not None:
                wanted = voltage + np.einsum("bt...,t...->b...", jacobian, free)
                bound = np.clip(wanted, self.load.lowest, self.load.highest)
                outside = (wanted != bound) & self.whole
                matrix = np.where(outside[:, None], jacobian, curvature)
                held_in = self._step_of_whole(matrix, np.where(outside, bound - voltage, -gradient), current)
                held_in = np.where(outside & (current + held_in < 0.0), -current, held_in)
                step = np.where(outside.any(axis=0), held_in, step)
            step = np.where(self.held, 0.0, step)
            self.held |= near & (np.abs(step) <= small.max(axis=0)).all(axis=0)
        return step, voltage + np.einsum("bt...,t...->b...", jacobian, step)

    def _step_of_whole(self, matrix: FloatArray, right: FloatArray, current: FloatArray) -> FloatArray:
        """Step in the currents that solves the system; strings that are broken lose what current they have."""
        if not self.whole.all():
            matrix = np.where(self.whole[:, None], matrix, np.eye(len(current))[:, :, None])
            right = np.where(self.whole, right, -current)
        return np.asarray(_solve_blocks(matrix, right[None])[0])


def _solve_blocks(matrix: FloatArray, right: FloatArray) -> FloatArray:
    """Solve (blocks, blocks, cases) systems for several right sides (sides, blocks, cases)."""
    if len(matrix) == 1:
        return np.asarray(right / matrix[0])
    # a string without modules carries nothing: rows that only other cases of the batch have
    empty = (matrix == 0.0).all(axis=1)
    if empty.any():
        matrix = matrix - np.eye(len(matrix))[:, :, None] * empty
    solved = np.linalg.solve(matrix.transpose(2, 0, 1), right.transpose(2, 1, 0))
    return np.asarray(solved.transpose(2, 1, 0))
