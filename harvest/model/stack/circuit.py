"""The electrical side of the iteration: Newton's step in the string currents and the bus voltage."""

from __future__ import annotations

import numpy as np

from harvest.model.loads import FIXED_RESISTANCE, FIXED_VOLTAGE, MATCHED, OPEN_CIRCUIT
from harvest.model.stack.problem import Circuit, Load, StackState, take_cases
from harvest.physics.arrays import FloatArray, IntArray

SETTLED = 2e-6
"""Relative step in voltage or current below which the load of largest power counts as found; its power is then good to
the square of it."""


class CircuitWork:
    """Strings and load during the iteration; `held` marks cases whose load of largest power has been found."""

    def __init__(self, circuit: Circuit, load: Load) -> None:
        blocks, cases = len(circuit.block_starts), len(circuit.lead)
        self.circuit, self.load = circuit, load
        self.last_point = np.full((blocks, cases), np.nan)
        self.last_residual = np.full((blocks, cases), np.nan)
        self.held = np.zeros(cases, dtype=bool)
        self.conducting = np.ones((blocks, cases), dtype=bool)
        self.diodes = bool(np.any(circuit.diode_drop > 0))

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
    ) -> tuple[FloatArray, FloatArray]:
        """Newton's step in the block currents, and the string voltages after it, (blocks, cases)."""
        circuit, current = self.circuit, state.current
        voltage = emf - string_resistance * current - circuit.diode_drop
        if circuit.independent:
            return self._independent_step(current, previous_change, voltage, string_resistance, jacobian)
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
        bus = self._bus_voltage(state.string_voltage[0], previous_change, total, total_per_volt, string_resistance)
        new = base + per_volt * bus
        if self.diodes:
            unloaded = voltage + np.einsum("bt...,t...->b...", jacobian, np.maximum(new, 0.0) - current)
            self.conducting = np.where(conducting, new >= 0.0, unloaded > bus) | (circuit.diode_drop <= 0)
            new = np.where((circuit.diode_drop > 0) & (new < 0.0), 0.0, new)
        return new - current, np.broadcast_to(bus, current.shape)

    def _bus_voltage(
        self,
        bus: FloatArray,
        previous_change: FloatArray,
        total: FloatArray,
        total_per_volt: FloatArray,
        resistance: FloatArray,
    ) -> FloatArray:
        """Voltage that the load asks for where the stack gives the current `total` + `total_per_volt` V."""
        load, circuit = self.load, self.circuit
        if load.mode == FIXED_VOLTAGE:
            assert load.voltage is not None
            return load.voltage
        if load.mode == FIXED_RESISTANCE:
            assert load.resistance is not None
            return np.asarray(load.resistance * total / (1.0 - load.resistance * total_per_volt))
        if load.mode == OPEN_CIRCUIT:
            return np.asarray(-total / np.where(total_per_volt < 0, total_per_volt, -1.0))
        if load.mode == MATCHED:
            inner = 1.0 / (circuit.parallel * np.where(self.conducting, 1.0 / resistance, 0.0).sum(axis=0))
            return np.asarray((inner * total + circuit.diode_drop) / (1.0 - inner * total_per_volt))
        aim = -total / (2.0 * np.where(total_per_volt < 0, total_per_volt, -1.0))
        new = self._accelerated(bus[None], (aim - bus)[None])[0]
        if load.lowest is not None and load.highest is not None:
            new = np.clip(new, load.lowest, load.highest)
        new = np.where(self.held, bus, new)
        self.held |= (np.abs(new - bus) <= SETTLED * np.abs(new) + 1e-15) & (previous_change < 1e-4)
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
        self,
        current: FloatArray,
        previous_change: FloatArray,
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
            step = _solve_blocks(matrix, (resistance * current + drop - voltage)[None])[0]
        else:
            gradient = voltage + np.einsum("bt...,b...->t...", jacobian, current)
            step = -_solve_blocks(jacobian + np.swapaxes(jacobian, 0, 1), gradient[None])[0]
            step = self._accelerated(current, step) - current
            step = np.where(self.held, 0.0, step)
            small = (np.abs(step) <= SETTLED * np.abs(current).max(axis=0) + 1e-15).all(axis=0)
            self.held |= small & (previous_change < 1e-4)
        return step, voltage + np.einsum("bt...,t...->b...", jacobian, step)


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
