"""Who pays for the flow, and the flow that a pump or fan curve gives."""

from __future__ import annotations

import numpy as np
import pytest
from CoolProp.CoolProp import PropsSI

from harvest.errors import CaseError
from harvest.model.batch import Batch
from harvest.model.case import Case
from harvest.model.estimate import estimate, estimate_batch
from harvest.model.reading import read_case, replace
from harvest.physics.drives import circuit_pressure_drop, crossing, curve_pressure

CASE = """
[hot]
fluid = "air"
inlet_temperature = "600 K"
{hot_flow}
drive = "fan"
drive_efficiency = 0.5
[hot.duct]
kind = "plain fins"
gap = "20 mm"
fin_pitch = "5 mm"
fin_thickness = "0.5 mm"
fin_conductivity = "50 W/(m K)"
[cold]
fluid = "water"
inlet_temperature = "290 K"
{cold_flow}
drive = "pump"
drive_efficiency = 0.4
[cold.duct]
gap = "2 mm"
connection_diameter = "16 mm"
connection_loss_coefficient = 3
[stack]
layers = 1
rows = 6
columns = 4
row_pitch = "44 mm"
column_pitch = "44 mm"
[module]
footprint = ["40 mm", "40 mm"]
seebeck = "0.05 V/K"
resistance = "2 ohm"
conductance = "0.6 W/K"
[electrical]
load = "maximum power"
"""
CURVE = 'drive_curve = [["0 L/min", "30 kPa"], ["10 L/min", "22 kPa"], ["25 L/min", "0 kPa"]]'


def fixed() -> Case:
    return read_case(CASE.format(hot_flow='mass_flow = "0.05 kg/s"', cold_flow='mass_flow = "0.2 kg/s"'))


def driven(more: str = "") -> Case:
    return read_case(CASE.format(hot_flow='mass_flow = "0.05 kg/s"', cold_flow=f"{CURVE}\n{more}"))


def test_a_fan_behind_the_stack_handles_cooled_gas() -> None:
    ahead, behind = estimate(fixed()), estimate(replace(fixed(), {"hot.drive_position": "outlet"}))
    assert behind.hot_outlet_temperature < 590.0
    ratio = behind.hot_outlet_temperature / 600.0
    assert behind.hot_drive_power == pytest.approx(ahead.hot_drive_power * ratio, rel=1e-3)


def test_the_flow_found_balances_curve_circuit_and_stack() -> None:
    case = driven('circuit_flow = "20 L/min"')
    answer = estimate(case)
    assert answer.valid
    flows, rises = np.array([0.0, 10.0, 25.0]) / 6e4, np.array([30e3, 22e3, 0.0])
    flow = answer.cold_mass_flow / PropsSI("D", "T", 290.0, "P", 101325.0, "Water")
    of_circuit = np.interp(20.0 / 6e4, flows, rises) * (flow / (20.0 / 6e4)) ** 2
    assert np.interp(flow, flows, rises) == pytest.approx(of_circuit + answer.cold_pressure_drop, rel=1e-8)
    assert flow < 20.0 / 6e4


def test_the_flow_found_is_the_flow_given() -> None:
    found = estimate(driven())
    given = estimate(replace(driven(), {"cold.mass_flow": found.cold_mass_flow}))
    for name in ("generated_power", "net_power", "cold_pressure_drop", "cold_drive_power"):
        assert getattr(found, name) == pytest.approx(getattr(given, name), rel=1e-9), name
    assert {each.name for each in found.checks} >= {"cold drive curve"}
    assert "cold drive curve" not in {each.name for each in given.checks}


def test_a_narrower_duct_gets_less_flow_and_a_batch_is_each_case_alone() -> None:
    gaps = np.array([0.001, 0.002, 0.004])
    many = estimate_batch(Batch(driven(), 3, {"cold.duct.gap": gaps}))
    assert many.valid.all() and np.all(np.diff(many.cold_mass_flow) > 0)
    for index, gap in enumerate(gaps):
        alone = estimate(replace(driven(), {"cold.duct.gap": float(gap)}))
        assert many.cold_mass_flow[index] == pytest.approx(alone.cold_mass_flow, rel=1e-9)
        assert many.net_power[index] == pytest.approx(alone.net_power, rel=1e-8)


def test_a_fan_behind_the_stack_with_a_curve() -> None:
    flow = 'drive_curve = [["0.01 m^3/s", "400 Pa"], ["0.1 m^3/s", "200 Pa"], ["0.2 m^3/s", "0 Pa"]]'
    position = 'drive_position = "outlet"'
    text = CASE.format(hot_flow=f"{flow}\n{position}", cold_flow='mass_flow = "0.2 kg/s"')
    answer = estimate(read_case(text))
    assert answer.valid
    density = 101325.0 * 0.0289655 / (8.314462618 * answer.hot_outlet_temperature)
    rise = np.interp(answer.hot_mass_flow / density, [0.01, 0.1, 0.2], [400.0, 200.0, 0.0])
    assert rise == pytest.approx(answer.hot_pressure_drop, rel=5e-3)


def test_a_curve_that_does_not_reach_is_said() -> None:
    many = estimate_batch(Batch(driven(), 2, {"cold.duct.connection_diameter": np.array([0.016, 5.0])}))
    assert many.valid.all()
    short = 'drive_curve = [["1 L/min", "30 kPa"], ["2 L/min", "29 kPa"]]'
    answer = estimate(read_case(CASE.format(hot_flow='mass_flow = "0.05 kg/s"', cold_flow=short)))
    assert not answer.valid and answer.problem.startswith("cold.drive_curve: meets the resistance")


@pytest.mark.parametrize(
    ("flow", "message"),
    [
        (f'{CURVE}\nmass_flow = "0.2 kg/s"', "is a second flow beside cold.mass_flow"),
        ('mass_flow = "0.2 kg/s"\ncircuit_flow = "20 L/min"', "is used with a drive_curve only"),
        (f'{CURVE}\ncircuit_flow = "26 L/min"', "lies outside the drive_curve"),
        ('drive_curve = [["0 L/min", "30 kPa"], ["10 L/min", "31 kPa"]]', "its pressure does not fall"),
        ('drive_curve = [["0 L/min", "30 kPa"]]', "is not a list of 2 to"),
    ],
)
def test_a_wrong_curve_is_refused(flow: str, message: str) -> None:
    with pytest.raises(CaseError, match=message):
        read_case(CASE.format(hot_flow='mass_flow = "0.05 kg/s"', cold_flow=flow))


def test_crossings_are_found_to_the_last_digits_or_not_at_all() -> None:
    steep = np.array([1.0, 10.0, 1e6, 0.0])
    found = crossing(lambda x: 1.0 - steep * x**2, np.full(4, 1e-6), np.full(4, 2.0))
    np.testing.assert_allclose(found[:3], steep[:3] ** -0.5, rtol=1e-10)
    assert np.isnan(found[3])


def test_curves_are_straight_between_points_and_circuits_are_parabolas() -> None:
    flows, pressures = np.array([0.0, 1.0]), np.array([4.0, 0.0])
    assert curve_pressure(np.array([0.25, 2.0]), flows, pressures) == pytest.approx([3.0, 0.0])
    assert circuit_pressure_drop(np.array([0.5]), np.array([1.0]), np.array([4.0])) == pytest.approx([1.0])
