"""Studies over random designs that take longer than the rest of the suite."""

from __future__ import annotations

import numpy as np
import pytest

from harvest.model.design import design
from harvest.model.loads import LOADS, MATCHED, MAXIMUM_POWER
from harvest.model.stack import Load, solve_stack
from tests.bench.random_designs import random_batch
from tests.independent.stack import Design, Duct, Fluid, Module, Side, solve
from tests.independent.stack import Load as TheirLoad

COMPARED = 40


@pytest.mark.slow
def test_ten_thousand_random_designs_all_converge() -> None:
    problem = design(random_batch(10_000, seed=7)).problem
    for mode in LOADS:
        if mode in (MATCHED, MAXIMUM_POWER, "open circuit"):
            state = solve_stack(problem, Load(mode))
            assert state.converged.all(), mode
            assert state.passes.max() <= 12, mode


@pytest.mark.slow
@pytest.mark.parametrize("mode", [MATCHED, MAXIMUM_POWER])
def test_random_designs_agree_with_the_independent_solution(mode: str) -> None:
    batch = random_batch(4 * COMPARED, seed=11)
    made = design(batch)
    state = solve_stack(made.problem, Load(mode))
    power = made.problem.circuit.parallel * (state.current * state.string_voltage).sum(axis=0)
    limit = made.cold.table_value("upper_limit")
    within = np.flatnonzero(state.cold_stream.max(axis=0) < limit - 5.0)[:COMPARED]
    assert len(within) == COMPARED

    def number(path: str, case: int) -> float:
        return float(batch.number(path)[case])

    for case in within:
        hot_duct = Duct(
            "plain fins",
            gap=number("hot.duct.gap", case),
            faces=2,
            wall_thickness=2e-3,
            fin_pitch=number("hot.duct.fin_pitch", case),
            fin_thickness=4e-4,
        )
        glycol = Fluid(f"INCOMP::AEG[{number('cold.volume_fraction', case)}]")
        theirs = Design(
            hot=Side(number("hot.inlet_temperature", case), Fluid("Air"), number("hot.mass_flow", case), duct=hot_duct),
            cold=Side(
                number("cold.inlet_temperature", case),
                glycol,
                number("cold.mass_flow", case),
                2.5e5,
                duct=Duct(gap=number("cold.duct.gap", case), wall_thickness=1.5e-3),
            ),
            module=Module((0.0519, 5e-5, -3e-7), (1.72, 0.0071, 4e-6), (0.61, -2e-4, 3e-6)),
            layers=int(number("stack.layers", case)),
            rows=20,
            columns=int(number("stack.columns", case)),
            row_pitch=number("stack.row_pitch", case),
            hot_interface=number("stack.hot_interface", case),
            cold_interface=3e-5,
            filler_conductance=5.0,
        )
        answer = solve(theirs, TheirLoad(mode))  # type: ignore[arg-type]
        assert power[case] == pytest.approx(answer["generated_power"], rel=1e-6), case
