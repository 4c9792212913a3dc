"""Strings of modules in parallel at fixed temperatures: sources with an emf and a resistance."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from harvest.physics.arrays import FloatArray


class BusMaximum(NamedTuple):
    """Largest power [W] of strings on one bus, and the bus voltage [V] and current [A] there, (cases,)."""

    power: FloatArray
    voltage: FloatArray
    current: FloatArray


def bus_maximum(emf: FloatArray, resistance: FloatArray, count: FloatArray) -> BusMaximum:
    """Largest power of parallel strings on one bus at fixed temperatures.

    Parameters: `emf` [V] and `resistance` [ohm] of each kind of string and the `count` of equal ones [-],
    (strings, cases). A string without resistance shorts the bus: no power. An infinite resistance is an open string.
    Source: Millman's theorem; half the voltage without load into the parallel resistance.
    """
    shorted = ((resistance == 0) & (count > 0)).any(axis=0)
    conductance = count / np.where(resistance == 0, 1.0, resistance)
    total = conductance.sum(axis=0)
    unloaded = np.where(total > 0, (emf * conductance).sum(axis=0) / np.where(total > 0, total, 1.0), 0.0)
    voltage = np.where(shorted, 0.0, 0.5 * unloaded)
    current = np.where(shorted, np.nan, voltage * total)
    return BusMaximum(np.where(shorted, 0.0, voltage**2 * total), voltage, current)
