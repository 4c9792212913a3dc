"""Rated blocks: against the balance they come from, against computed ducts, and where they must be refused."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.errors import CaseError
from harvest.model.batch import Batch
from harvest.model.case import Case
from harvest.model.case_fields import FlowCurve
from harvest.model.design import design
from harvest.model.estimate import estimate, estimate_batch
from harvest.model.reading import case_from, read_case, replace
from harvest.physics.arrays import FloatArray
from harvest.physics.films import Film
from harvest.physics.rated import conductance_of_block, rated_value

FLUID = """
[hot]
fluid = "reservoir"
inlet_temperature = "360 K"
film_coefficient = "2000 W/(m^2 K)"
[cold]
fluid = "table"
inlet_temperature = "300 K"
mass_flow = "0.05 kg/s"
[cold.table]
density = "1000 kg/m^3"
heat_capacity = "4000 J/(kg K)"
viscosity = "0.001 Pa s"
conductivity = "0.6 W/(m K)"
"""
BLOCK = """
[cold.duct]
kind = "rated"
rated_fluid = "own"
rated_temperature = "300 K"
resistance_refers_to = "{refers}"
modules_per_block = {modules}
blocks_in_parallel = {across}
block_resistance = [["1 L/min", "0.05 K/W"], ["2 L/min", "0.03 K/W"], ["6 L/min", "0.0145 K/W"]]
block_pressure_drop = {{ flow = "2 L/min", value = "2 kPa", exponent = 1.75, from = "1 L/min", to = "6 L/min" }}
"""
STACK = """
[stack]
layers = 1
rows = {rows}
columns = {columns}
row_pitch = "40 mm"
column_pitch = "40 mm"
[module]
footprint = ["40 mm", "40 mm"]
seebeck = "0.05 V/K"
resistance = "2 ohm"
conductance = "0.6 W/K"
[electrical]
load = "maximum power"
"""


def block_case(refers: str = "mean", rows: int = 1, columns: int = 1, modules: int = 1, across: int = 1) -> Case:
    text = FLUID + BLOCK.format(refers=refers, modules=modules, across=across)
    return read_case(text + STACK.format(rows=rows, columns=columns))


@pytest.mark.parametrize("refers", ["inlet", "mean"])
def test_one_block_has_its_rated_resistance(refers: str) -> None:
    answer = estimate(block_case(refers))
    inlet, outlet = 300.0, answer.cold_outlet_temperature
    fluid = inlet if refers == "inlet" else 0.5 * (inlet + outlet)
    wall = answer.rows.cold_wall_temperature[0]
    # 0.05 kg/s at 1000 kg/m3 is 3 L/min, on the power law between two and six
    rated = 0.03 * 1.5 ** (np.log(0.0145 / 0.03) / np.log(3.0))
    assert (wall - fluid) / answer.cold_heat_flow == pytest.approx(rated, rel=1e-9)
    assert answer.cold_pressure_drop == pytest.approx(2000.0 * 1.5**1.75, rel=1e-12)


def test_rows_of_one_temperature_make_up_the_block() -> None:
    """Four rows at the wall temperature of the block pass on 1 - 1/(C R_inlet) of the difference, to the last digit."""
    film = design(Batch(block_case("inlet", rows=4, modules=4))).cold.film
    assert film is not None
    of_place = film.conductance(np.array([[4000.0]]), np.array([[0.001]]), np.array([[0.6]]))[0, 0]
    capacity = 0.05 * 4000.0
    rated = 0.03 * 1.5 ** (np.log(0.0145 / 0.03) / np.log(3.0))
    left = np.exp(-of_place / capacity) ** 4
    assert left == pytest.approx(1.0 - 1.0 / (capacity * rated), rel=1e-12)


def test_inlet_and_mean_curves_of_one_block_agree() -> None:
    by_mean = block_case("mean")
    curve = by_mean.cold.duct.block_resistance
    assert curve is not None
    flow = np.geomspace(curve.flows[0], curve.flows[-1], 60)
    mean = rated_value(flow, np.array(curve.flows), np.array(curve.values))[0]
    on_inlet = FlowCurve(tuple(flow), tuple(mean + 0.5 / (flow * 1000.0 * 4000.0)))
    changed = replace(by_mean, {"cold.duct.resistance_refers_to": "inlet", "cold.duct.block_resistance": on_inlet})
    assert estimate(changed).generated_power == pytest.approx(estimate(by_mean).generated_power, rel=1e-6)
    mistaken = estimate(replace(by_mean, {"cold.duct.resistance_refers_to": "inlet"}))
    assert mistaken.generated_power > estimate(by_mean).generated_power


def test_blocks_in_series_and_parallel_share_the_flow() -> None:
    series = estimate(block_case(rows=2, columns=2, modules=2, across=1))
    parallel = estimate(block_case(rows=2, columns=2, modules=2, across=2))
    assert series.cold_pressure_drop == pytest.approx(2 * 2000.0 * 1.5**1.75)
    assert parallel.cold_pressure_drop == pytest.approx(2000.0 * 0.75**1.75)
    assert parallel.generated_power < series.generated_power


DUCT = """
[hot]
fluid = "{hot}"
inlet_temperature = "85 degC"
mass_flow = "{hot_flow} kg/s"
pressure = "2.5 bar"
[hot.duct]
gap = "3 mm"
entrance_loss_coefficient = 0
exit_loss_coefficient = 0
[cold]
fluid = "water"
inlet_temperature = "20 degC"
mass_flow = "{cold_flow} kg/s"
pressure = "2.5 bar"
drive = "pump"
drive_efficiency = 0.4
[cold.duct]
gap = "3 mm"
entrance_loss_coefficient = 0
exit_loss_coefficient = 0
""" + STACK.format(rows=4, columns=4)


def own_curves(case: Case, flows: FloatArray) -> tuple[FlowCurve, FlowCurve]:
    """Curves of one block of all 16 modules, from a computed cold duct at its inlet temperature."""
    batch = Batch(case, len(flows), {"cold.mass_flow": flows})
    made = design(batch)
    fluid, film = made.cold.fluid, made.cold.film
    assert fluid is not None and isinstance(film, Film)
    inlet = made.cold.inlet_temperature[None]
    conductance = 16.0 * film.conductance(*fluid.film_properties(inlet))[0]
    capacity = flows * fluid.heat_capacity(inlet)[0]
    density = fluid.density(inlet)[0]
    resistance = 1.0 / (capacity * -np.expm1(-conductance / capacity)) - 0.5 / capacity
    drops = film.friction_factor(film.reynolds(fluid.viscosity(inlet)))[0] * 0.16 / film.hydraulic_diameter
    drops = drops * 0.5 * film.mass_flux**2 / density
    volume = tuple((flows / density).tolist())
    return FlowCurve(volume, tuple(resistance.tolist())), FlowCurve(volume, tuple(drops.tolist()))


@pytest.mark.parametrize(("cold_flow", "prandtl"), [(0.9, 1 / 3), (0.1, 0.0)], ids=["turbulent", "laminar"])
def test_a_block_fitted_to_a_computed_duct_gives_the_same_estimate(cold_flow: float, prandtl: float) -> None:
    computed = read_case(DUCT.format(hot="water", hot_flow=0.8, cold_flow=cold_flow))
    resistance, drop = own_curves(computed, cold_flow * np.geomspace(0.8, 1.25, 5))
    rated = dict(computed.given)
    rated["cold"] = {
        **computed.given["cold"],
        "duct": {
            "kind": "rated",
            "rated_fluid": "water",
            "rated_temperature": "20 degC",
            "resistance_refers_to": "mean",
            "modules_per_block": 16,
            "prandtl_exponent": prandtl,
            "block_resistance": [
                [f"{q!r} m^3/s", f"{r!r} K/W"] for q, r in zip(resistance.flows, resistance.values, strict=True)
            ],
            "block_pressure_drop": [
                [f"{q!r} m^3/s", f"{p!r} Pa"] for q, p in zip(drop.flows, drop.values, strict=True)
            ],
        },
    }
    one, other = estimate(computed), estimate(case_from(rated))
    for name in ("generated_power", "net_power", "hot_heat_flow", "maximum_power", "cold_pressure_drop"):
        assert getattr(other, name) == pytest.approx(getattr(one, name), rel=5e-3), name
    assert other.generated_power == pytest.approx(one.generated_power, rel=1e-3)


WATER = (
    FLUID.partition("[cold]")[0]
    + """
[cold]
fluid = "{fluid}"
inlet_temperature = "20 degC"
volume_flow = "{flow}"
{more}
[cold.duct]
kind = "rated"
rated_fluid = "water"
rated_temperature = "20 degC"
resistance_refers_to = "inlet"
modules_per_block = 1
block_resistance = [["1 L/min", "0.05 K/W"], ["6 L/min", "{last}"]]
block_pressure_drop = [["1 L/min", "1 kPa"], ["6 L/min", "30 kPa"]]
"""
    + STACK.format(rows=1, columns=1)
)


@pytest.mark.parametrize(
    ("fluid", "flow", "last", "more", "message"),
    [
        ("water", "7 L/min", "0.015 K/W", "", "7.000 L/min through each block is outside its rated 1.000 L/min to 6"),
        ("water", "0.9 L/min", "0.015 K/W", "", "outside its rated"),
        ("ethylene glycol", "1.5 L/min", "0.015 K/W", "volume_fraction = 0.5", "Reynolds number with ethylene glycol"),
        ("water", "6 L/min", "0.0023 K/W", "", "not possible on the inlet temperature"),
    ],
)
def test_what_a_curve_does_not_tell_is_refused(fluid: str, flow: str, last: str, more: str, message: str) -> None:
    answer = estimate(read_case(WATER.format(fluid=fluid, flow=flow, last=last, more=more)))
    assert not answer.valid and answer.bad_input
    assert message in answer.problem and answer.problem.startswith("cold.duct.block_resistance: ")


def test_the_same_fluid_beyond_the_curve_by_reynolds_number_is_told() -> None:
    case = read_case(WATER.format(fluid="water", flow="5.5 L/min", last="0.015 K/W", more=""))
    warm = estimate(replace(case, {"cold.inlet_temperature": "50 degC"}))
    assert {each.name: each.status for each in warm.checks}["cold rated blocks"] == "warn"
    assert {each.name: each.status for each in estimate(replace(case, {"cold.volume_flow": "3 L/min"})).checks}[
        "cold rated blocks"
    ] == "pass"


def test_glycol_in_a_block_rated_with_water_is_worse_and_drops_more() -> None:
    water = estimate(read_case(WATER.format(fluid="water", flow="4 L/min", last="0.015 K/W", more="")))
    text = WATER.format(fluid="ethylene glycol", flow="4 L/min", last="0.015 K/W", more="volume_fraction = 0.2")
    glycol = estimate(read_case(text))
    assert glycol.generated_power < water.generated_power
    assert glycol.cold_pressure_drop > water.cold_pressure_drop


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ('resistance_refers_to = "inlet"\n', "", "cold.duct.resistance_refers_to: is missing; give one of inlet, mean"),
        ("modules_per_block = 1", "modules_per_block = 3", "do not tile 1 rows of 1 columns"),
        ('"6 L/min", "30 kPa"', '"0.5 L/min", "30 kPa"', "its flows do not rise"),
        ('"6 L/min", "30 kPa"', '"6 L/min", "0 kPa"', "not possible; give above 0 Pa"),
        ('kind = "rated"', 'kind = "rated"\ngap = "3 mm"', 'cold.duct.gap: does not apply to cold.duct.kind = "rated"'),
        ('volume_flow = "3 L/min"', 'volume_flow = "3 L/min"\nfouling = "1e-4 m^2 K/W"', "needs the wetted area"),
        ('rated_fluid = "water"', 'rated_fluid = "air"', "a curve for air tells nothing of water"),
    ],
)
def test_a_wrong_block_is_refused_with_what_to_do(old: str, new: str, message: str) -> None:
    text = WATER.format(fluid="water", flow="3 L/min", last="0.015 K/W", more="")
    assert old in text
    with pytest.raises(CaseError) as caught:
        read_case(text.replace(old, new))
    assert message in str(caught.value)


def test_a_batch_of_flows_is_each_case_alone() -> None:
    case = block_case("inlet", rows=4, columns=2, modules=4, across=1)
    flows = np.array([0.02, 0.05, 0.09, 0.2])
    many = estimate_batch(Batch(case, 4, {"cold.mass_flow": flows}))
    assert list(many.valid) == [True, True, True, False]
    for index, flow in enumerate(flows[:3]):
        alone = estimate(replace(case, {"cold.mass_flow": flow}))
        assert many.generated_power[index] == pytest.approx(alone.generated_power, rel=1e-10)
        assert many.cold_pressure_drop[index] == pytest.approx(alone.cold_pressure_drop, rel=1e-10)


@settings(max_examples=30, deadline=None)
@given(st.floats(1e-3, 20.0), st.floats(1.0, 1e4))
def test_the_conductance_of_a_block_gives_its_resistance_back(units: float, capacity: float) -> None:
    mean = (1.0 / -np.expm1(-units) - 0.5) / capacity
    found = conductance_of_block(np.array([mean]), np.array([capacity]))[0]
    # near the limit of a spent stream the resistance hardly depends on the conductance
    assert found == pytest.approx(units * capacity, rel=1e-12 * np.exp(units) + 1e-9)
    assert np.isnan(conductance_of_block(np.array([0.5 / capacity]), np.array([capacity]))[0])
