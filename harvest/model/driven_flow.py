"""The flow of a side with a pump or fan curve: where the curve meets the resistance of stack and circuit."""

from __future__ import annotations

import dataclasses
from typing import TYPE_CHECKING, Any

import numpy as np

from harvest.model.design import Design, Stream, design, stream_film
from harvest.model.pressure import handled_density, pressure_drop
from harvest.model.stack import solve_stack
from harvest.physics.arrays import FloatArray
from harvest.physics.drives import circuit_pressure_drop, crossing, curve_pressure

if TYPE_CHECKING:
    from harvest.model.batch import Batch

MOST_PASSES = 12
LEAST_SHARE = 1e-6
"""Part of a curve's largest flow from which it is searched: without flow there is no Reynolds number."""
SETTLED = 1e-9
"""Relative change of the flow between two solutions of the stack at which it is found."""


def driven_sides(batch: Batch) -> tuple[str, ...]:
    """Sides whose flow a drive curve is still to decide."""
    return tuple(
        side
        for side in ("hot", "cold")
        if getattr(batch.base, side).drive_curve is not None and not batch.given(f"{side}.mass_flow")
    )


def driven_batch(batch: Batch) -> Batch:
    """Return the batch with the flows that its drive curves give in place of the curves; the batch itself without.

    The stack is solved at the case's load, its temperatures are held while the flow is found, and both are repeated
    until they agree; at other loads the same flow is kept. A flow is NaN where curve and resistance do not cross.
    """
    sides = driven_sides(batch)
    if not sides:
        return batch
    begun = design(batch)
    found = _with_flows(batch, {side: (begun.hot if side == "hot" else begun.cold).mass_flow for side in sides})
    for _ in range(MOST_PASSES):
        made = design(found)
        state = solve_stack(made.problem, made.load)
        flows = {}
        for stream, boundaries, outlet in (
            (made.hot, state.hot_stream, state.hot_stream[-1]),
            (made.cold, state.cold_stream, state.cold_stream[0]),
        ):
            if stream.name in sides and stream.fluid is not None:
                flows[stream.name] = _flow(made, stream, boundaries, outlet)
        before = {side: found.number(f"{side}.mass_flow") for side in sides}
        found = _with_flows(batch, {**before, **flows})
        changes = [np.abs(flows[side] / before[side] - 1.0) for side in flows]
        if not any(np.any(change > SETTLED) for change in changes):
            break
    return found


def _with_flows(batch: Batch, flows: dict[str, FloatArray]) -> Batch:
    """Return the batch with mass flows [kg/s] of some sides."""
    stated: dict[str, Any] = {side: dataclasses.replace(getattr(batch.base, side), mass_flow=1.0) for side in flows}
    varied = {**batch.varied, **{f"{side}.mass_flow": flow for side, flow in flows.items()}}
    return dataclasses.replace(batch, base=dataclasses.replace(batch.base, **stated), varied=varied)


def _flow(made: Design, stream: Stream, boundaries: FloatArray, outlet: FloatArray) -> FloatArray:
    """Mass flow at which curve and resistance meet, temperatures held [kg/s], (cases,)."""
    batch, curve = made.batch, getattr(made.batch.base, stream.name).drive_curve
    flows, pressures = np.array(curve.flows), np.array(curve.values)
    density = handled_density(batch, stream, outlet)
    active = (np.arange(made.problem.rows)[:, None] < made.problem.active_rows).astype(float)
    row_length = batch.number("stack.row_pitch") / made.segments
    circuit_flow = batch.number(f"{stream.name}.circuit_flow", np.inf)
    possible = np.isinf(circuit_flow) | ((circuit_flow >= flows[0]) & (circuit_flow <= flows[-1]))
    of_circuit = np.where(possible, curve_pressure(circuit_flow, flows, pressures), np.nan)

    def excess(flow: FloatArray) -> FloatArray:
        mass_flow = flow * density
        moved = dataclasses.replace(stream, mass_flow=mass_flow, film=stream_film(batch, stream, mass_flow))
        drop = pressure_drop(batch, moved, boundaries, outlet, active, row_length).total
        return curve_pressure(flow, flows, pressures) - circuit_pressure_drop(flow, circuit_flow, of_circuit) - drop

    lowest = np.full(batch.cases, max(flows[0], LEAST_SHARE * flows[-1]))
    highest = np.full(batch.cases, flows[-1])
    return crossing(excess, lowest, highest) * density
