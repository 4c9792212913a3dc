"""The corners of the model: a defined answer, or a case that says why it has none."""

from __future__ import annotations

import functools
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from harvest.errors import InputError
from harvest.model.case import Case
from harvest.model.estimate import estimate
from harvest.model.reading import load_case, read_case, replace
from harvest.model.results import SCALARS, Estimate

CASE = """
[hot]
fluid = "water"
inlet_temperature = "90 degC"
mass_flow = "0.5 kg/s"
pressure = "2.5 bar"
[hot.duct]
gap = "3 mm"
faces = 2
[cold]
fluid = "water"
inlet_temperature = "20 degC"
mass_flow = "0.6 kg/s"
pressure = "2.5 bar"
[cold.duct]
gap = "3 mm"
[stack]
layers = 2
rows = 10
columns = 4
row_pitch = "44 mm"
column_pitch = "44 mm"
hot_interface = "3e-5 m^2 K/W"
cold_interface = "3e-5 m^2 K/W"
[module]
footprint = ["40 mm", "40 mm"]
seebeck = "0.05 V/K"
resistance = "2 ohm"
conductance = "0.6 W/K"
[electrical]
load = "maximum power"
"""


@functools.cache
def plain() -> Case:
    return read_case(CASE)


def answer(**changes: Any) -> Estimate:
    """The plain case with changes, `hot__mass_flow` for hot.mass_flow."""
    return estimate(replace(plain(), {name.replace("__", "."): value for name, value in changes.items()}))


def status(found: Estimate) -> dict[str, str]:
    return {check.name: check.status for check in found.checks}


def assert_sound(found: Estimate, closure: float = 1e-8) -> None:
    """Energy closes, entropy grows, and nothing that should be a number is not one."""
    assert found.valid, found.problem
    electricity = found.generated_power
    unclosed = found.hot_heat_flow - found.cold_heat_flow - electricity - found.lost_heat_flow
    assert abs(unclosed) <= closure * max(abs(found.hot_heat_flow), abs(found.cold_heat_flow))
    assert found.entropy_generation > -1e-12
    allowed = {"load_resistance", "load_ratio", "stack_height", "module_mass"}
    allowed |= {"building_cost", "cost_per_net_watt", "cost_per_kilowatt_hour"}
    allowed |= {"payback_years", "discounted_payback_years"}
    if found.maximum_power <= 1e-12 * abs(found.hot_heat_flow):
        allowed |= {"mismatch_loss", "conversion_efficiency", "module_efficiency"}
    for name in SCALARS.keys() - allowed:
        assert math.isfinite(getattr(found, name)) or "velocity" in name or "mass_flow" in name, name
    assert status(found)["energy closure"] == status(found)["second law"] == "pass"


def assert_refused(found: Estimate, words: str) -> None:
    assert not found.valid
    assert words in found.problem and "\n" not in found.problem
    assert all(math.isnan(getattr(found, name)) for name in SCALARS)
    assert found.checks == () and len(found.rows.current) == 0


# ---------------------------------------------------------------- temperatures


def test_a_hot_side_colder_than_the_cold_one_works_backwards_and_says_so() -> None:
    found = answer(hot__inlet_temperature="10 degC")
    assert_sound(found)
    assert found.generated_power > 0.0 and found.hot_heat_flow < 0.0 < found.hot_outlet_temperature - 283.15
    assert found.open_circuit_voltage < 0.0
    assert status(found)["sides"] == "warn"
    assert status(found)["efficiency ceiling"] == "pass"
    swapped = estimate(
        replace(
            plain(),
            {"cold.inlet_temperature": "10 degC", "hot.inlet_temperature": "20 degC"},
        )
    )
    assert found.carnot_efficiency == pytest.approx(swapped.carnot_efficiency, rel=1e-12)
    assert 0.5 < found.generated_power / swapped.generated_power < 2.0
    spring = load_case(Path(__file__).parents[1] / "examples" / "hot-spring.toml")
    cold_spring = estimate(replace(spring, {"hot.inlet_temperature": "5 degC"}))
    assert status(cold_spring)["efficiency ceiling"] == "pass"


@pytest.mark.parametrize("load", ["maximum power", "matched", "open circuit"])
def test_equal_inlets_give_nothing(load: str) -> None:
    found = answer(hot__inlet_temperature="20 degC", electrical__load=load)
    if not found.valid:
        assert "inlet" in found.problem, "a refusal must name the cause, not a solver's trouble"
        return
    for name in ("generated_power", "current", "voltage", "open_circuit_voltage", "hot_heat_flow", "cold_heat_flow"):
        assert getattr(found, name) == pytest.approx(0.0, abs=1e-7), name
    assert found.hot_outlet_temperature == pytest.approx(293.15, abs=1e-10)
    assert [name for name, grade in status(found).items() if grade == "fail"] == []
    assert status(found)["current direction"] == "pass"
    for check in found.checks:
        assert "inf" not in check.text and "nan" not in check.text, check.text


def test_a_thousandth_of_a_kelvin_is_no_special_case() -> None:
    """Power falls with the square of the difference."""
    small, smaller = (answer(hot__inlet_temperature=f"{20.0 + difference} degC") for difference in (0.1, 0.01))
    assert_sound(smaller, closure=1e-7)
    assert smaller.maximum_power == pytest.approx(0.01 * small.maximum_power, rel=1e-3)


# ---------------------------------------------------------------- flows


@pytest.mark.parametrize("side", ["hot", "cold"])
@pytest.mark.parametrize("flow", [1e-7, 1e-5])
def test_a_tiny_flow_is_spent_in_the_first_row(side: str, flow: float) -> None:
    """It takes the other side's temperature, and its heat is m c dT: all that it can give or take."""
    found = answer(**{f"{side}__mass_flow": f"{flow} kg/s"})
    assert_sound(found, closure=1e-6)
    other = 293.15 if side == "hot" else 363.15
    assert getattr(found, f"{side}_outlet_temperature") == pytest.approx(other, abs=0.2)
    assert abs(getattr(found, f"{side}_heat_flow")) == pytest.approx(flow * 4187.0 * 70.0, rel=5e-3)


def test_two_tiny_flows() -> None:
    found = answer(hot__mass_flow="1e-7 kg/s", cold__mass_flow="1e-7 kg/s")
    assert_sound(found, closure=1e-7)
    assert 293.15 < found.hot_outlet_temperature < found.cold_outlet_temperature < 363.15


def test_a_long_string_on_a_spent_stream_cools_it_below_the_cold_inlet() -> None:
    """The first modules drive the last ones as coolers: legitimate, and flagged."""
    found = answer(stack__rows=200, hot__mass_flow="0.02 kg/s")
    assert_sound(found)
    assert found.hot_outlet_temperature < 293.15
    assert status(found)["current direction"] == "warn"
    assert 0.5 < found.mismatch_loss < 1.0
    assert found.rows.module_power[-1] < 0.0 < found.rows.module_power[0]


def test_one_module_and_two_hundred_rows() -> None:
    one = answer(stack__rows=1, stack__columns=1, stack__layers=1, hot__duct__faces=1)
    assert_sound(one)
    assert one.module_count == 1 and one.mismatch_loss == pytest.approx(0.0, abs=1e-12)
    many = answer(stack__rows=200)
    assert_sound(many)
    assert many.module_count == 1600 and len(many.rows.current) == 200
    assert many.generated_power > one.generated_power


# ---------------------------------------------------------------- loads


def test_short_circuit() -> None:
    found = answer(electrical__load="fixed resistance", electrical__load_resistance="1e-9 ohm")
    shorted = answer(electrical__load="fixed voltage", electrical__load_voltage="0 V")
    assert_sound(found)
    assert found.generated_power == pytest.approx(0.0, abs=1e-7)
    assert found.current == pytest.approx(shorted.current, rel=1e-9)
    assert found.current == pytest.approx(found.operating_emf / found.internal_resistance, rel=1e-9)


def test_a_voltage_above_the_emf_drives_the_stack_as_a_heat_pump() -> None:
    found = answer(electrical__load="fixed voltage", electrical__load_voltage="200 V", **PRESSURES)
    assert_sound(found)
    assert found.current < 0.0 and found.generated_power == pytest.approx(200.0 * found.current, rel=1e-12)
    assert status(found)["current direction"] == "warn"
    assert found.cold_heat_flow == pytest.approx(found.hot_heat_flow - found.generated_power, rel=1e-8)


PRESSURES = {"hot__pressure": "30 bar", "cold__pressure": "30 bar"}


def test_a_diode_blocks_what_would_flow_back() -> None:
    found = answer(
        electrical__load="fixed voltage", electrical__load_voltage="200 V", electrical__blocking_diode_drop="0.5 V"
    )
    assert_sound(found)
    assert found.current == 0.0 and found.generated_power == 0.0


def test_a_diode_that_drops_more_than_the_emf_leaves_nothing() -> None:
    """Modules that make 3 V behind a drop of 100 V give no current, no power, and no voltage of the other sign."""
    for load in (
        {"load": "maximum power"},
        {"load": "matched"},
        {"load": "fixed resistance", "load_resistance": "1 ohm"},
    ):
        electrical = {f"electrical__{name}": value for name, value in load.items()}
        found = answer(stack__rows=1, stack__columns=1, electrical__blocking_diode_drop="100 V", **electrical)
        assert_sound(found)
        assert found.current == found.generated_power == found.maximum_power == 0.0
        assert found.voltage >= 0.0 and found.open_circuit_voltage >= 0.0, load


def test_a_diode_costs_its_drop() -> None:
    """At a fixed current the terminals lose the drop; at the maximum they lose about drop times current."""
    without, behind = answer(), answer(electrical__blocking_diode_drop="0.5 V")
    assert_sound(without)
    loss = without.maximum_power - behind.maximum_power
    assert loss == pytest.approx(0.5 * behind.current, rel=0.01)


def test_a_converter_window_holds_the_voltage() -> None:
    free = answer()
    inside = answer(electrical__converter_window=["1 V", "100 V"])
    assert inside.maximum_power == pytest.approx(free.maximum_power, rel=1e-10)
    below = answer(electrical__converter_window=["1 V", "20 V"])
    assert_sound(below)
    assert below.voltage == pytest.approx(20.0, rel=1e-9)
    assert 0.0 < below.maximum_power < free.maximum_power
    above = answer(electrical__converter_window=["80 V", "100 V"])
    assert_sound(above)
    assert above.voltage == pytest.approx(80.0, rel=1e-9)
    assert 0.0 < above.maximum_power < free.maximum_power


def test_a_converter_never_feeds_the_stack() -> None:
    """A window that begins above the open-circuit voltage yields no power; it does not cost hundreds of watts."""
    found = answer(electrical__converter_window=["200 V", "300 V"])
    if found.valid:
        assert found.generated_power >= 0.0 and found.maximum_power >= 0.0
        assert status(found)["converter window"] != "pass"
    else:
        assert "window" in found.problem


@pytest.mark.parametrize(
    "load",
    [
        {"electrical.load": "fixed resistance", "electrical.load_resistance": "10 ohm"},
        {"electrical.load": "fixed voltage", "electrical.load_voltage": "3 V"},
        {"electrical.converter_window": ["1 V", "3 V"]},
    ],
)
def test_own_converters_either_obey_the_load_or_refuse_it(load: dict[str, Any]) -> None:
    """With `independent` a fixed load or a window must not be dropped in silence for the free maximum."""
    free = answer(electrical__independent=True)
    assert_sound_independent(free)
    try:
        found = estimate(replace(plain(), {**load, "electrical.independent": True}))
    except InputError:
        return
    assert not found.valid or found.generated_power != pytest.approx(free.generated_power, rel=1e-9)


def assert_sound_independent(found: Estimate) -> None:
    assert found.valid
    for name in ("current", "voltage", "internal_resistance", "load_resistance", "load_ratio"):
        assert math.isnan(getattr(found, name)), name
    assert found.maximum_power >= answer().maximum_power * (1.0 - 1e-12)


# ---------------------------------------------------------------- extreme parts


def test_perfect_interfaces_and_nearly_perfect_films() -> None:
    perfect = answer(stack__hot_interface="0 m^2 K/W", stack__cold_interface="0 m^2 K/W")
    assert_sound(perfect)
    assert perfect.maximum_power > answer().maximum_power
    np.testing.assert_allclose(perfect.rows.hot_face_temperature, perfect.rows.hot_junction_temperature)


@pytest.mark.parametrize(
    "part",
    [
        {"module__conductance": "1e4 W/K"},
        {"module__conductance": "1e-9 W/K"},
        {"module__resistance": "1e9 ohm"},
        {"module__resistance": "1e-9 ohm"},
        {"module__seebeck": "1e-9 V/K"},
    ],
)
def test_extreme_modules_stay_within_the_laws(part: dict[str, str]) -> None:
    found = answer(**part)
    assert_sound(found)
    assert status(found)["efficiency ceiling"] == "pass"
    assert 0.0 <= found.maximum_power < found.carnot_efficiency * found.hot_heat_flow
    assert found.matched_load_power <= found.maximum_power * (1.0 + 1e-10)


def test_two_reservoirs() -> None:
    text = """
[hot]
fluid = "reservoir"
inlet_temperature = "200 degC"
film_coefficient = "500 W/(m^2 K)"
[cold]
fluid = "reservoir"
inlet_temperature = "20 degC"
film_coefficient = "2000 W/(m^2 K)"
"""
    found = estimate(read_case(text + CASE[CASE.index("[stack]") :]))
    assert_sound(found)
    assert found.hot_outlet_temperature == 473.15 and found.cold_outlet_temperature == 293.15
    assert found.hot_pressure_drop == found.cold_drive_power == 0.0
    assert math.isnan(found.hot_mass_flow) and np.isnan(found.rows.hot_reynolds).all()
    assert found.mismatch_loss == pytest.approx(0.0, abs=1e-10)
    assert np.ptp(found.rows.hot_junction_temperature) < 1e-9


# ---------------------------------------------------------------- where fluids end


def test_water_that_would_boil_is_refused_with_the_temperature() -> None:
    found = answer(cold__pressure="0.2 bar", cold__mass_flow="0.001 kg/s", cold__inlet_temperature="55 degC")
    assert_refused(found, "boils")
    assert "cold" in found.problem and " K " in found.problem


def test_glycol_beyond_its_data_is_refused() -> None:
    changes = {
        "cold.fluid": "propylene glycol",
        "cold.volume_fraction": 0.5,
        "cold.mass_flow": "0.002 kg/s",
        "cold.pressure": "3 bar",
        "hot.inlet_temperature": "150 degC",
        "hot.pressure": "10 bar",
    }
    assert_refused(estimate(replace(plain(), changes)), "373.15 K")


def test_a_driven_stack_that_would_boil_its_streams_is_refused() -> None:
    assert_refused(answer(electrical__load="fixed voltage", electrical__load_voltage="5000 V"), "outside")


def test_a_pressure_drop_above_the_pressure_is_no_answer() -> None:
    """10 m of 3 mm gap at 4 m/s would need more than the inlet pressure: there is no such flow."""
    found = answer(stack__rows=1000, stack__columns=1, hot__mass_flow="0.8 kg/s")
    if found.valid:
        assert found.hot_pressure_drop > 2.5e5
        assert status(found)["hot pressure drop share"] == "fail"


def test_gas_cooled_below_the_cold_inlet_keeps_its_properties() -> None:
    """Air leaves below both inlets, where its table must still hold: enthalpy by a direct property call."""
    from CoolProp.CoolProp import PropsSI

    found = estimate(
        replace(
            plain(),
            {
                "hot.fluid": "air",
                "hot.inlet_temperature": 543.0,
                "hot.mass_flow": "0.01 kg/s",
                "hot.pressure": "101325 Pa",
                "cold.inlet_temperature": 300.0,
                "stack.rows": 60,
            },
        )
    )
    assert found.valid, found.problem
    assert found.hot_outlet_temperature < 299.5
    fall = PropsSI("H", "T", 543.0, "P", 101325.0, "Air") - PropsSI(
        "H", "T", found.hot_outlet_temperature, "P", 101325.0, "Air"
    )
    assert found.hot_heat_flow == pytest.approx(0.01 * fall, rel=1e-8)


@pytest.mark.parametrize(("lowest", "expected"), [("5 V", "pass"), ("19 V", "fail")])
def test_the_window_of_converters_of_their_own_holds_for_every_string(lowest: str, expected: str) -> None:
    changes = [f'electrical.converter_window=["{lowest}", "60 V"]', "electrical.independent=true"]
    found = estimate(
        load_case(Path(__file__).parents[1] / "examples" / "genset-exhaust.toml", [*changes, "electrical.load=matched"])
    )
    (check,) = (each for each in found.checks if each.name == "converter window")
    assert check.status == expected
    assert check.value == pytest.approx(13.84, abs=0.01)
    assert "each converter works from" in check.text
