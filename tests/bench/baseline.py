"""What an engineer would write first: every unknown of the stack given to a root finder, properties asked each time.

`python -m tests.bench.baseline` prints, for three invented stacks of 20 rows, the calls and seconds a design takes on
CoolProp's low-level interface and on `PropsSI`, and how far the answers lie from the Newton solution.
"""

from __future__ import annotations

import time
from typing import Any

import numpy as np
from scipy.optimize import minimize_scalar, root

from tests.independent.stack import (
    Array,
    Backend,
    Design,
    Duct,
    Fluid,
    Load,
    Module,
    NotSolved,
    Side,
    Stack,
    solve,
)

DEMO_MODULE = Module(seebeck=(0.05, 1e-5), resistance=(2.0, 0.008), conductance=(0.6, 5e-4))

JACKET_WATER = Design(
    hot=Side(
        365.15,
        Fluid("INCOMP::AEG[0.5]"),
        mass_flow=0.5,
        pressure=2.5e5,
        fouling=1.8e-4,
        duct=Duct(gap=3e-3, faces=2, wall_thickness=1.5e-3),
    ),
    cold=Side(293.15, Fluid("Water"), mass_flow=0.6, pressure=2.5e5, duct=Duct(gap=3e-3, wall_thickness=1.5e-3)),
    module=DEMO_MODULE,
    rows=20,
    filler_conductance=5.0,
)
HOT_AIR = Design(
    hot=Side(
        573.15,
        Fluid("Air"),
        mass_flow=0.05,
        duct=Duct("plain fins", gap=0.02, faces=2, wall_thickness=2e-3, fin_pitch=4e-3, fin_thickness=5e-4),
    ),
    cold=JACKET_WATER.cold,
    module=DEMO_MODULE,
    rows=20,
    filler_conductance=5.0,
)
EXHAUST = Design(
    hot=Side(
        723.15,
        Fluid("exhaust", excess_air_ratio=1.5),
        mass_flow=0.05,
        pressure=1.03e5,
        fouling=1.76e-3,
        duct=Duct(
            "plain fins",
            gap=0.012,
            faces=2,
            wall_thickness=2e-3,
            wall_conductivity=20.0,
            fin_pitch=3e-3,
            fin_thickness=4e-4,
            fin_conductivity=25.0,
        ),
    ),
    cold=Side(
        343.15, Fluid("INCOMP::AEG[0.5]"), mass_flow=0.4, pressure=2e5, duct=Duct(gap=4e-3, wall_thickness=1.5e-3)
    ),
    module=DEMO_MODULE,
    layers=4,
    rows=20,
    filler_conductance=5.0,
    heat_loss_conductance=3.0,
    lead_resistance=0.05,
)
DEMO_DESIGNS = {"jacket water": JACKET_WATER, "hot air": HOT_AIR, "exhaust": EXHAUST}


def all_at_once(stack: Stack, start: Array, load: Load) -> Array:
    """Powell's hybrid method on the whole vector, Jacobian by differences over every unknown."""

    def equations(x: Array) -> Array:
        return np.concatenate([stack.thermal_residual(x), stack.circuit_residual(x, load)])

    found = root(equations, start, method="hybr", options={"xtol": 1e-12, "eps": 1e-11})
    worst = float(np.abs(equations(found.x)).max())
    if worst > 1e-7:
        raise NotSolved(f"{load.kind}: residual {worst:.1e}, {found.message}")
    return np.asarray(found.x, dtype=np.float64)


def solve_plainly(design: Design, load: Load, backend: Backend = "low-level") -> dict[str, Any]:
    """The same dictionary as the Newton solution; maximum power by a bounded search over the bus voltage."""
    started = time.perf_counter()
    stack = Stack(design, backend)
    state = all_at_once(stack, stack.substituted(2), Load("open circuit"))
    if load.kind == "maximum power":
        highest = float(stack.strings(state)[2][0])

        def negative_power(voltage: float) -> float:
            nonlocal state
            state = all_at_once(stack, state, Load("fixed voltage", voltage))
            return -voltage * stack.parallel * float(state[4 * stack.rows :].sum())

        best = minimize_scalar(
            negative_power, bounds=(0.3 * highest, highest), method="bounded", options={"xatol": 1e-6 * highest}
        )
        state = all_at_once(stack, state, Load("fixed voltage", float(best.x)))
    else:
        state = all_at_once(stack, state, load)
    calls, seconds = stack.calls(), time.perf_counter() - started
    residual = float(np.abs(stack.thermal_residual(state)).max())
    return {**stack.report(state, load), "residual": residual, "calls": calls, "seconds": seconds}


def compare(backend: Backend, load: Load) -> list[str]:
    """One line a demo design: power, calls, seconds, relative difference of power from the Newton solution."""
    lines = []
    for name, design in DEMO_DESIGNS.items():
        plain, newton = solve_plainly(design, load, backend), solve(design, load, backend)
        apart = plain["generated_power"] / newton["generated_power"] - 1
        lines.append(
            f"{name:14}{load.kind:18}{backend:11}{plain['generated_power']:10.4f} W"
            f"{plain['calls']['function_calls']:8d} evaluations{plain['calls']['property_values']:10d} values"
            f"{plain['seconds']:8.2f} s{newton['calls']['property_values']:10d} values{newton['seconds']:7.2f} s"
            f"{apart:10.1e}"
        )
    return lines


def main() -> None:
    print("root finder: evaluations, property values, seconds; Newton: property values, seconds; apart")
    backends: tuple[Backend, ...] = ("low-level", "props")
    for backend in backends:
        for load in (Load("fixed resistance", 40.0), Load("matched"), Load("maximum power")):
            print("\n".join(compare(backend, load)), flush=True)


if __name__ == "__main__":
    main()
