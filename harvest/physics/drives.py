"""Pump and fan curves, and the flow at which a curve meets a resistance."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from harvest.physics.arrays import FloatArray

MOST_STEPS = 80
FLOW_TOLERANCE = 1e-12


def curve_pressure(flow: FloatArray, flows: FloatArray, pressures: FloatArray) -> FloatArray:
    """Pressure rise of a pump or fan at a flow, straight between the points of its curve [Pa].

    Parameters: `flow` [m^3/s], (cases,), held at the ends of the curve beyond it; rising `flows` [m^3/s] and falling
    `pressures` [Pa], (points,).
    """
    return np.asarray(np.interp(flow, flows, pressures))


def circuit_pressure_drop(flow: FloatArray, circuit_flow: FloatArray, circuit_pressure: FloatArray) -> FloatArray:
    """Pressure drop of the rest of a circuit, growing with the square of flow [Pa].

    Parameters: `flow` and the known `circuit_flow` [m^3/s] at which the rest takes `circuit_pressure` [Pa]; one shape.
    """
    return circuit_pressure * (flow / circuit_flow) ** 2


def crossing(excess: Callable[[FloatArray], FloatArray], lower: FloatArray, upper: FloatArray) -> FloatArray:
    """Where a falling function of each case passes zero between two points; NaN where it does not.

    Parameters: `excess` from points (cases,) to values (cases,), in units of the caller [SI]; bounds `lower`, `upper`,
    (cases,). Source: false position with Illinois weights (Dowell and Jarratt, BIT 11 (1971) 168).
    """
    a, b = lower.astype(float), upper.astype(float)
    at_a, at_b = excess(a), excess(b)
    crossed = (at_a >= 0) & (at_b <= 0)
    point, side = np.where(at_b == 0, b, a), np.zeros(len(a))
    done = ~crossed | (at_a == 0) | (at_b == 0)
    for step in range(MOST_STEPS):
        if done.all():
            break
        fall = np.where(at_a > at_b, at_a - at_b, 1.0)
        # every fourth step halves, for curves with kinks
        new = 0.5 * (a + b) if step % 4 == 3 else a + (b - a) * at_a / fall
        moved = np.abs(new - point)
        point = np.where(done, point, new)
        value = excess(point)
        above = value > 0
        at_b = np.where(above & (side > 0), 0.5 * at_b, at_b)
        at_a = np.where(~above & (side < 0), 0.5 * at_a, at_a)
        a, at_a = np.where(above, point, a), np.where(above, value, at_a)
        b, at_b = np.where(above, b, point), np.where(above, at_b, value)
        side = np.where(above, 1.0, -1.0)
        done = done | (value == 0) | (np.minimum(moved, np.abs(b - a)) <= FLOW_TOLERANCE * np.abs(b))
    return np.where(crossed, point, np.nan)
