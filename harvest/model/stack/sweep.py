"""Rows in counterflow, each a linear two-port, joined by one backward and one forward sweep."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from harvest.physics.arrays import FloatArray


class Ports(NamedTuple):
    """Leaving temperatures of a row per entering temperature, (rows, cases): hot from hot, hot from cold, ..."""

    hot_hot: FloatArray
    hot_cold: FloatArray
    cold_hot: FloatArray
    cold_cold: FloatArray


class Sweep:
    """Joins the rows' two-ports by a backward and a forward sweep over rows."""

    def __init__(self, ports: Ports) -> None:
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
