"""The package against the independent solution of the same row equations, with direct CoolProp calls."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from harvest.model.batch import Batch
from harvest.model.estimate import estimate, estimate_batch
from harvest.model.reading import load_case, replace
from tests.independent.stack import Design, Duct, Fluid, Load, Module, Side, solve
from tests.translation import case_of

CURVED = Module(seebeck=(0.0519, 5e-5, -3e-7), resistance=(1.72, 0.0071, 4e-6), conductance=(0.61, -2e-4, 3e-6))


def _duct(gap: float, faces: int = 1) -> Duct:
    return Duct(gap=gap, faces=faces, wall_thickness=1.5e-3, wall_conductivity=180.0)


GLYCOL_TO_WATER = Design(
    hot=Side(365.15, Fluid("INCOMP::AEG[0.5]"), 1.3, 2.5e5, 1.8e-4, _duct(3e-3, 2)),
    cold=Side(303.15, Fluid("Water"), 1.3, 2.5e5, 1.8e-4, _duct(3e-3)),
    module=CURVED,
    layers=4,
    rows=10,
    filler_conductance=5.0,
)
EXHAUST_TO_GLYCOL = Design(
    hot=Side(
        753.15,
        Fluid("exhaust", excess_air_ratio=1.6),
        0.09,
        101325.0,
        1e-3,
        Duct("plain fins", 16e-3, 2, 2e-3, 20.0, fin_pitch=4e-3, fin_thickness=5e-4, fin_conductivity=20.0),
    ),
    cold=Side(318.15, Fluid("INCOMP::MPG[0.4]"), 1.1, 2.5e5, 0.0, _duct(3e-3)),
    module=CURVED,
    layers=4,
    rows=12,
    columns=3,
    row_pitch=0.06,
    column_pitch=0.06,
    filler_conductance=4.0,
    heat_loss_conductance=2.0,
    row_blocks=(3, 4, 5),
    lead_resistance=0.05,
)
AIR_TO_AIR = Design(
    hot=Side(
        493.15,
        Fluid("Air"),
        0.15,
        duct=Duct("offset strip fins", 25e-3, 2, 2e-3, 180.0, fin_pitch=4e-3, fin_thickness=3e-4, strip_length=9e-3),
    ),
    cold=Side(
        293.15,
        Fluid("Air"),
        0.3,
        duct=Duct("plain fins", 35e-3, 1, 2e-3, 180.0, fin_pitch=4e-3, fin_thickness=3e-4),
    ),
    module=CURVED,
    layers=4,
    rows=5,
    columns=6,
    row_pitch=0.06,
    column_pitch=0.06,
    strings_across=3,
)
TURBULENT_WATER = Design(
    hot=Side(353.15, Fluid("Water"), 6.0, 3e5, duct=Duct(gap=4e-3, faces=2, passages=4, width=0.04, area_ratio=1.3)),
    cold=Side(283.15, Fluid("Water"), 5.0, 3e5, duct=Duct(gap=4e-3, faces=2, passages=4, width=0.04)),
    module=CURVED,
    layers=4,
    rows=8,
    layers_in_series=2,
)
SPENT_AIR = Design(
    hot=Side(573.15, Fluid("Air"), 0.004, duct=_duct(6e-3)),
    cold=Side(288.15, Fluid("Water"), 0.02, 2e5, duct=_duct(2e-3)),
    module=CURVED,
    layers=1,
    rows=20,
    row_blocks=(5, 5, 10),
)
TRANSITION_EXHAUST = Design(
    hot=Side(673.15, Fluid("exhaust", carbon=1.0, hydrogen=4.0, excess_air_ratio=1.3), 0.02, duct=_duct(12e-3, 2)),
    cold=Side(300.15, Fluid("INCOMP::MEG[0.3]"), 0.5, 2e5, duct=_duct(2.5e-3)),
    module=CURVED,
    layers=2,
    rows=15,
    columns=2,
    row_model="arithmetic",
    segments=2,
)
RESERVOIRS = Design(
    hot=Side(450.0, reservoir_film_coefficient=300.0, duct=_duct(3e-3)),
    cold=Side(290.0, Fluid("Water"), 0.3, 2e5, duct=_duct(3e-3)),
    module=CURVED,
    layers=2,
    rows=6,
)
DESIGNS = {
    "glycol to water, series": GLYCOL_TO_WATER,
    "exhaust to glycol, parallel blocks": EXHAUST_TO_GLYCOL,
    "air to air, offset strips, parallel strings": AIR_TO_AIR,
    "water to water, turbulent": TURBULENT_WATER,
    "spent air, laminar, blocks": SPENT_AIR,
    "exhaust in transition, segments": TRANSITION_EXHAUST,
    "reservoir to water": RESERVOIRS,
}
LOADS: dict[str, Callable[[float, float], Load]] = {
    "matched": lambda r, v: Load("matched"),
    "maximum power": lambda r, v: Load("maximum power"),
    "fixed resistance": lambda r, v: Load("fixed resistance", 1.7 * r),
    "fixed voltage": lambda r, v: Load("fixed voltage", 0.35 * v),
    "open circuit": lambda r, v: Load("open circuit"),
    "independent": lambda r, v: Load("maximum power", independent=True),
}


@pytest.mark.parametrize("name", DESIGNS)
def test_same_row_equations_agree(name: str) -> None:
    design = DESIGNS[name]
    matched = solve(design, Load("matched"))
    resistance, voltage = matched["voltage"] / matched["current"], 2.0 * matched["voltage"]
    for mode, load_of in LOADS.items():
        load = load_of(resistance, voltage)
        theirs, ours = solve(design, load), estimate(case_of(design, load))
        assert ours.valid, (mode, ours.problem)
        span = design.hot.inlet_temperature - design.cold.inlet_temperature
        scale = matched["generated_power"]
        assert ours.generated_power == pytest.approx(theirs["generated_power"], rel=1e-6, abs=1e-9 * scale), mode
        assert ours.hot_heat_flow == pytest.approx(theirs["hot_heat_flow"], rel=1e-6), mode
        assert ours.cold_heat_flow == pytest.approx(theirs["cold_heat_flow"], rel=1e-6), mode
        if design.hot.reservoir_film_coefficient is None:
            assert ours.hot_outlet_temperature == pytest.approx(theirs["hot_outlet_temperature"], abs=1e-6 * span), mode
        assert ours.cold_outlet_temperature == pytest.approx(theirs["cold_outlet_temperature"], abs=1e-6 * span), mode
        assert ours.hot_pressure_drop == pytest.approx(theirs["hot_pressure_drop"], rel=1e-6), mode
        assert ours.cold_pressure_drop == pytest.approx(theirs["cold_pressure_drop"], rel=1e-6), mode
        if theirs["voltage"] is not None:
            assert ours.voltage == pytest.approx(theirs["voltage"], rel=1e-6), mode
            assert ours.current == pytest.approx(theirs["current"], rel=1e-6, abs=1e-9 * voltage / resistance), mode
        rows, segments = theirs["rows"], design.segments
        junction = np.reshape(rows["hot_junction_temperature"], (-1, segments)).mean(axis=1)
        np.testing.assert_allclose(ours.rows.hot_junction_temperature, junction, rtol=0, atol=1e-6 * span)


def test_splitting_rows_converges_to_the_continuum() -> None:
    """The error of the row model falls with the square of the row: each halving takes about four fifths of it away."""
    design = dataclasses.replace(SPENT_AIR, row_blocks=(), rows=8)
    powers = [
        estimate(case_of(dataclasses.replace(design, segments=n), Load("matched"))).generated_power
        for n in (1, 2, 4, 8, 16)
    ]
    steps = np.abs(np.diff(powers))
    assert np.all(steps[1:] < 0.35 * steps[:-1])
    arithmetic = [
        estimate(
            case_of(dataclasses.replace(GLYCOL_TO_WATER, row_model=model, segments=8), Load("matched"))
        ).generated_power
        for model in ("exponential", "arithmetic")
    ]
    assert arithmetic[0] == pytest.approx(arithmetic[1], rel=1e-6)


@pytest.mark.parametrize("name", ["genset-exhaust", "bakery-flue", "genset-jacket-water", "hot-spring"])
def test_the_maximum_of_shipped_cases_is_where_fixed_voltages_have_it(name: str) -> None:
    """Three fixed voltages around the answer put a parabola's top at it: modules from legs, gases, blocks."""
    case = load_case(Path(__file__).parents[1] / "examples" / f"{name}.toml")
    free = replace(case, {"electrical.load": "fixed voltage", "electrical.load_voltage": "1 V"})
    best = estimate(case)
    step = 2e-3 * best.voltage
    powers = estimate_batch(
        Batch(free, 3, {"electrical.load_voltage": best.voltage + np.array([-step, 0.0, step])})
    ).generated_power
    off = 0.5 * step * (powers[0] - powers[2]) / (powers[0] - 2.0 * powers[1] + powers[2])
    assert powers[1] > max(powers[0], powers[2])
    assert abs(off) < 3e-6 * best.voltage
    assert best.generated_power == pytest.approx(best.maximum_power, rel=1e-12)
