"""What can go wrong: failed modules, lost coolant and load, fouling, part load, standstill, expansion."""

from __future__ import annotations

import functools
import json
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.cli import cli
from harvest.errors import CaseError, InputError, NoAnswerError
from harvest.model.batch import Batch
from harvest.model.case import Case
from harvest.model.estimate import estimate, estimate_batch
from harvest.model.reading import load_case, read_case, replace
from harvest.model.results import Estimate
from harvest.physics.expansion import differential_expansion
from harvest.physics.networks import bus_maximum
from harvest.study.what_if import (
    PART_LOADS,
    WhatIfOptions,
    failed_modules,
    fouling_growth,
    part_loads,
    standstill,
    time_to_loss,
    what_if,
    what_if_options,
)

EXAMPLES = Path(__file__).parents[1] / "examples"
ISOTHERMAL = """
[hot]
fluid = "reservoir"
inlet_temperature = "150 degC"
film_coefficient = "1e9 W/(m^2 K)"
[cold]
fluid = "reservoir"
inlet_temperature = "50 degC"
film_coefficient = "1e9 W/(m^2 K)"
[stack]
layers = 1
rows = 10
columns = 1
row_pitch = "40 mm"
column_pitch = "40 mm"
[module]
footprint = ["40 mm", "40 mm"]
seebeck = "0.05 V/K"
resistance = "2 ohm"
conductance = "0.6 W/K"
"""
EMF, RESISTANCE = 5.0, 2.0  # of one module at these temperatures


@functools.cache
def isothermal() -> Case:
    return read_case(ISOTHERMAL)


@functools.cache
def exhaust() -> Case:
    return load_case(EXAMPLES / "genset-exhaust.toml")


@functools.cache
def jacket() -> Case:
    return load_case(EXAMPLES / "genset-jacket-water.toml")


def held(**changes: Any) -> Case:
    """The case of held temperatures with changes, `stack__rows` for stack.rows."""
    return replace(isothermal(), {name.replace("__", "."): value for name, value in changes.items()})


def checks(found: Estimate) -> dict[str, Any]:
    return {check.name: check for check in found.checks}


# ---------------------------------------------------------------- a failed module at held temperatures, exact


def test_one_open_of_ten_in_one_string_leaves_nothing() -> None:
    healthy, opened, _ = failed_modules(isothermal())
    assert healthy == pytest.approx(10 * EMF**2 / (4 * RESISTANCE), rel=1e-5)
    np.testing.assert_array_equal(opened.power, 0.0)
    np.testing.assert_array_equal(opened.share_lost, 1.0)
    np.testing.assert_array_equal(opened.string_current, 0.0)
    assert np.isnan(opened.other_current).all() and np.isnan(opened.voltage).all()


def test_one_shorted_of_ten_equal_leaves_nine_tenths_of_the_voltage_and_81_of_90_of_the_power() -> None:
    healthy, _, shorted = failed_modules(isothermal())
    np.testing.assert_array_equal(shorted.row, np.arange(1, 11))
    np.testing.assert_allclose(shorted.power / healthy, 81 / 90, rtol=1e-5)
    np.testing.assert_allclose(shorted.voltage, 0.9 * 10 * EMF / 2, rtol=1e-4)
    np.testing.assert_allclose(shorted.string_current, EMF / (2 * RESISTANCE), rtol=1e-4)
    np.testing.assert_allclose(shorted.share_lost_at_fixed_temperatures, 0.1, rtol=1e-6)


@pytest.mark.parametrize("strings", [2, 3, 7])
def test_strings_in_parallel_against_the_network_solved_by_hand(strings: int) -> None:
    healthy, opened, shorted = failed_modules(held(stack__layers=strings))
    np.testing.assert_allclose(opened.share_lost, 1 / strings, rtol=1e-5)
    others = (strings - 1) / (10 * RESISTANCE)
    own = 1 / (9 * RESISTANCE)
    unloaded = (10 * EMF * others + 9 * EMF * own) / (others + own)
    np.testing.assert_allclose(shorted.power, unloaded**2 * (others + own) / 4, rtol=1e-5)
    np.testing.assert_allclose(shorted.string_current, (9 * EMF - unloaded / 2) * own, rtol=1e-3)
    np.testing.assert_allclose(shorted.share_lost, shorted.share_lost_at_fixed_temperatures, atol=1e-5)
    assert (shorted.power_lost < healthy / strings).all()


def test_several_modules_of_a_row_in_series() -> None:
    """Ten rows of four in series: a short takes one of forty, whatever the row."""
    _, opened, shorted = failed_modules(held(stack__columns=4, stack__layers=2, electrical__layers_in_series=2))
    np.testing.assert_allclose(shorted.share_lost, 1 / 80, rtol=1e-3)
    np.testing.assert_allclose(opened.share_lost, 1.0)


def test_blocks_of_rows_are_strings_of_their_own() -> None:
    healthy, opened, shorted = failed_modules(held(electrical__row_blocks=[4, 6]))
    conductance = np.array([1 / (4 * RESISTANCE), 1 / (6 * RESISTANCE)])
    emf = np.array([4 * EMF, 6 * EMF])
    np.testing.assert_allclose(healthy, (emf * conductance).sum() ** 2 / conductance.sum() / 4, rtol=1e-5)
    alone = (emf**2 * conductance / 4)[::-1]  # what the other block gives by itself
    np.testing.assert_allclose(opened.power, np.repeat(alone, [4, 6]), rtol=1e-5)
    conductance[0], emf[0] = 1 / (3 * RESISTANCE), 3 * EMF
    np.testing.assert_allclose(shorted.power[0], (emf * conductance).sum() ** 2 / conductance.sum() / 4, rtol=1e-5)


def test_own_converters_keep_a_failure_to_its_string() -> None:
    healthy, opened, shorted = failed_modules(
        held(stack__layers=3, electrical__row_blocks=[1, 9], electrical__independent=True)
    )
    one = EMF**2 / (4 * RESISTANCE)
    assert healthy == pytest.approx(30 * one, rel=1e-5)
    np.testing.assert_allclose(opened.power_lost, np.repeat([one, 9 * one], [1, 9]), rtol=1e-5)
    np.testing.assert_allclose(shorted.power_lost, one, rtol=1e-5)
    np.testing.assert_allclose(shorted.share_lost_at_fixed_temperatures, 1 / 30, rtol=1e-5)
    assert np.isnan(shorted.voltage).all()


def test_a_string_of_one_module_that_shorts_takes_the_bus_with_it() -> None:
    _, opened, shorted = failed_modules(held(stack__rows=1, stack__layers=4))
    np.testing.assert_array_equal(shorted.power, 0.0)
    np.testing.assert_allclose(opened.share_lost, 0.25, rtol=1e-5)
    np.testing.assert_array_equal(shorted.share_lost_at_fixed_temperatures, 1.0)


def test_blocking_diodes_keep_the_others_from_feeding_a_shorted_string() -> None:
    """Two strings of two, one module shorted: E = 10 V against 5 V, so that the bus at 5 V leaves the weak one idle."""
    changes = {"stack__rows": 2, "stack__layers": 2}
    without = failed_modules(held(**changes))[2]
    behind = failed_modules(held(**changes, electrical__blocking_diode_drop="1e-6 V"))[2]
    # with both: unloaded 20/3 V behind 4/3 ohm, 8.33 W; alone 10 V behind 4 ohm at 5 V, 6.25 W
    np.testing.assert_allclose(without.power, (20 / 3) ** 2 / (4 * 4 / 3), rtol=1e-5)
    np.testing.assert_allclose(behind.power, without.power, rtol=1e-4)
    assert (behind.string_current >= 0).all()


def test_a_converters_window_holds_after_a_failure() -> None:
    found = failed_modules(held(stack__layers=2, electrical__converter_window=["24 V", "40 V"]))[2]
    np.testing.assert_allclose(found.voltage, 24.0)
    whole, failed = (50 - 24) / 20, (45 - 24) / 18
    np.testing.assert_allclose(found.power, 24 * (whole + failed), rtol=1e-5)


# ---------------------------------------------------------------- a failed module, temperatures settled


@pytest.mark.parametrize("name", ["genset-exhaust", "genset-jacket-water", "hot-spring", "bakery-flue"])
def test_the_search_finds_the_largest_power_of_the_whole_stack(name: str) -> None:
    case = load_case(EXAMPLES / f"{name}.toml")
    healthy, opened, shorted = failed_modules(case)
    assert healthy == pytest.approx(estimate(case).maximum_power, rel=1e-4)
    for found in (opened, shorted):
        assert (found.power_lost > 0).all() and (found.power < healthy).all()
        assert (found.hot_junction_rise > 0).all()
    np.testing.assert_array_less(shorted.power_lost, opened.power_lost)


def test_an_open_string_settles_as_the_whole_stack_without_load() -> None:
    case = replace(jacket(), {"stack.layers": 2})
    opened = failed_modules(case)[1]
    best = estimate(case).rows.hot_junction_temperature
    idle = estimate(replace(case, {"electrical.load": "open circuit"})).rows.hot_junction_temperature
    np.testing.assert_allclose(opened.hot_junction_rise, (idle - best).max(), rtol=1e-3)


def test_a_short_settles_as_a_row_solved_by_hand() -> None:
    """Two modules in series behind films of 200 W/(m^2 K), one shorted: half the row works, all of it conducts."""
    film = 200.0 * 0.04**2
    current = np.linspace(0.0, 1.0, 20_001)
    a, r = 0.05 / 2, 2.0 / 2
    # film (423.15 - Th) = a I Th + K (Th - Tc) - I^2 r / 2, film (Tc - 323.15) = a I Tc + K (Th - Tc) + I^2 r / 2
    matrix = np.array([[film + 0.6 + a * current, 0 * current - 0.6], [0 * current - 0.6, film + 0.6 - a * current]])
    right = np.array([film * 423.15 + current**2 * r / 2, film * 323.15 + current**2 * r / 2])
    hot, cold = np.linalg.solve(matrix.transpose(2, 0, 1), right.T[:, :, None])[:, :, 0].T
    by_hand = (2 * current * (a * (hot - cold) - current * r)).max()
    films = {f"{side}__film_coefficient": "200 W/(m^2 K)" for side in ("hot", "cold")}
    shorted = failed_modules(held(stack__rows=1, stack__columns=2, **films))[2]
    assert shorted.power[0] == pytest.approx(by_hand, rel=1e-5)


def test_a_shorted_module_is_no_longer_cooled_by_its_current() -> None:
    case = replace(
        exhaust(),
        {
            "electrical.row_blocks": [14],
            "electrical.strings_across": 3,
            "electrical.converter_window": ["1 V", "400 V"],
            "stack.layers": 4,
        },
    )
    _, _, shorted = failed_modules(case)
    assert (np.abs(shorted.share_lost - shorted.share_lost_at_fixed_temperatures) < 0.01).all()
    assert (shorted.hot_junction_rise > 5.0).all()


def test_segments_change_little() -> None:
    plain, fine = (failed_modules(replace(jacket(), {"stack.segments": count}))[2] for count in (1, 2))
    np.testing.assert_allclose(plain.power_lost, fine.power_lost, rtol=5e-3)


def test_turned_sides_have_failures_too() -> None:
    changes = {"hot.inlet_temperature": "10 degC", "electrical.converter_window": ["1 V", "60 V"]}
    case = replace(jacket(), changes)
    assert failed_modules(case)[0] == 0.0, "the converter takes no voltage of the other sign"


def test_no_answer_is_said() -> None:
    with pytest.raises(CaseError, match=r"hot.inlet_temperature.*outside"):
        what_if(replace(jacket(), {"hot.inlet_temperature": "200 degC"}))
    with pytest.raises(NoAnswerError, match="boils"):
        what_if(replace(jacket(), {"cold.mass_flow": "0.001 kg/s", "cold.pressure": "0.2 bar"}))


# ---------------------------------------------------------------- the network

STRINGS = st.lists(st.tuples(st.floats(0.1, 100), st.floats(0.01, 100), st.integers(1, 9)), min_size=1, max_size=6)


@given(STRINGS)
@settings(max_examples=60, deadline=None)
def test_the_bus_is_bounded_by_its_strings(strings: list[tuple[float, float, int]]) -> None:
    emf, resistance, count = (np.array([column], dtype=float).T for column in zip(*strings, strict=True))
    found = bus_maximum(emf, resistance, count)
    apart = (count * emf**2 / (4 * resistance)).sum()
    assert 0 <= found.power[0] <= apart * (1 + 1e-12)
    assert emf.min() <= 2 * found.voltage[0] * (1 + 1e-12) and 2 * found.voltage[0] <= emf.max() * (1 + 1e-12)
    for voltage in (0.9 * found.voltage, 1.1 * found.voltage):
        assert (voltage * (count * (emf - voltage) / resistance).sum(axis=0))[0] <= found.power[0] * (1 + 1e-12)
    alone = bus_maximum(np.vstack([emf, emf[:1]]), np.vstack([resistance, [[np.inf]]]), np.vstack([count, [[1.0]]]))
    assert alone.power[0] == pytest.approx(found.power[0], rel=1e-12)


# ---------------------------------------------------------------- load and coolant lost


@pytest.mark.parametrize("name", ["genset-exhaust", "genset-jacket-water", "hot-spring", "bakery-flue"])
def test_lost_coolant_is_the_stack_with_its_cold_film_removed(name: str) -> None:
    """Solved again as a case of its own: a cold reservoir behind next to no film, without current."""
    case = load_case(EXAMPLES / f"{name}.toml")
    found = estimate(case).coolant_lost_face_temperature
    text = (EXAMPLES / f"{name}.toml").read_text("utf-8")
    before, _, after = text.partition("\n[cold]")
    rest = after[after.index("\n[stack]") :]
    nothing = '[cold]\nfluid = "reservoir"\ninlet_temperature = "20 degC"\nfilm_coefficient = "1e-7 W/(m^2 K)"\n'
    limits = "\n".join(line for line in rest.splitlines() if not line.startswith(("cold_pressure", "maximum_cold")))
    filmless = read_case(f"{before}\n{nothing}{limits}", ('electrical.load="open circuit"',), folder=EXAMPLES)
    direct = estimate(filmless)
    assert direct.valid, direct.problem
    assert found == pytest.approx(direct.hottest_face_temperature, abs=1e-3)
    assert found <= case.hot.inlet_temperature + 1e-6
    assert case.stack.heat_loss_conductance > 0 or found == pytest.approx(case.hot.inlet_temperature, abs=1e-6)


@pytest.mark.parametrize("loss", [0.0, 5.0, 50.0])
def test_lost_coolant_in_closed_form(loss: float) -> None:
    """A hot reservoir behind a film: the wall divides the difference to the surroundings."""
    film, inlet, ambient = 200.0, 423.15, 293.15
    case = held(
        hot__film_coefficient=f"{film} W/(m^2 K)",
        stack__heat_loss_conductance=f"{loss} W/(m^2 K)",
        limits__hot_face_temperature="140 degC",
    )
    found = estimate(case)
    expected = (film * inlet + loss * ambient) / (film + loss)
    assert found.coolant_lost_face_temperature == pytest.approx(expected, rel=1e-9)
    check = checks(found)["hot face without coolant"]
    assert check.value == found.coolant_lost_face_temperature
    assert check.status == ("warn" if expected > 413.15 else "pass")


def test_lost_coolant_row_by_row_by_hand() -> None:
    """A constant laminar fluid: the first wall stands between what the stream brings and what is lost."""
    heat_capacity, conductivity, flow, loss, gap, place = 1000.0, 0.03, 0.002, 8.0, 0.004, 0.04**2
    fluid = {
        "temperature": ["0 degC", "300 degC"],
        "density": "1 kg/m^3",
        "heat_capacity": f"{heat_capacity} J/(kg K)",
        "viscosity": "1e-4 Pa s",
        "conductivity": f"{conductivity} W/(m K)",
    }
    table = "{ " + ", ".join(f"{name} = {json.dumps(value)}" for name, value in fluid.items() if name != "temperature")
    hot = f"""
[hot]
fluid = "table"
table = {table} }}
inlet_temperature = "150 degC"
mass_flow = "{flow} kg/s"
[hot.duct]
gap = "{gap} m"
"""
    text = hot + ISOTHERMAL[ISOTHERMAL.index("[cold]") :]
    found = estimate(read_case(text, (f'stack.heat_loss_conductance="{loss} W/(m^2 K)"',)))
    assert found.valid, found.problem
    assert found.rows.hot_reynolds.max() < 2300.0
    diameter = 2 * 0.04 * gap / (0.04 + gap)
    film = 5.385 * conductivity / diameter * place
    brought = flow * heat_capacity * -math.expm1(-film / (flow * heat_capacity))
    expected = (brought * 423.15 + loss * place * 293.15) / (brought + loss * place)
    assert found.coolant_lost_face_temperature == pytest.approx(expected, rel=1e-8)


def test_lost_load_is_the_estimate_without_current() -> None:
    loaded, idle = estimate(exhaust()), estimate(replace(exhaust(), {"electrical.load": "open circuit"}))
    assert loaded.open_circuit_face_temperature == pytest.approx(idle.hottest_face_temperature, abs=1e-6)
    assert loaded.open_circuit_voltage == pytest.approx(idle.open_circuit_voltage, rel=1e-8)


def test_a_batch_loses_its_coolant_case_by_case() -> None:
    inlets, losses = np.array([600.0, 700.0, 650.0]), np.array([0.0, 20.0, 5.0])
    batch = Batch(exhaust(), 3, {"hot.inlet_temperature": inlets, "stack.heat_loss_conductance": losses})
    together = estimate_batch(batch).coolant_lost_face_temperature
    for i, (inlet, loss) in enumerate(zip(inlets, losses, strict=True)):
        alone = estimate_batch(
            Batch(
                exhaust(),
                1,
                {"hot.inlet_temperature": np.array([inlet]), "stack.heat_loss_conductance": np.array([loss])},
            )
        )
        assert together[i] == pytest.approx(float(alone.coolant_lost_face_temperature[0]), abs=1e-6)


def test_checks_of_what_can_go_wrong() -> None:
    found = checks(estimate(exhaust()))
    assert found["cold boiling without flow"].status == "warn" and "boils" in found["cold boiling without flow"].text
    assert checks(estimate(jacket()))["cold boiling without flow"].status == "pass"
    assert found["thermal expansion"].status == "pass" and found["thermal expansion"].value > 0
    assert found["cold freezing at standstill"].status == "pass"
    frosty = checks(estimate(replace(jacket(), {"site.ambient_temperature": "-5 degC"})))
    assert frosty["cold freezing at standstill"].status == "warn", "water"
    assert frosty["hot freezing at standstill"].status == "pass", "glycol"
    wet = checks(estimate(replace(exhaust(), {"hot.fuel_sulphur": 0.01, "hot.inlet_temperature": "200 degC"})))
    assert wet["hot acid dew point"].status == "warn" and "rows" in wet["hot acid dew point"].text


# ---------------------------------------------------------------- fouling


def test_time_to_a_loss_lies_between_its_neighbours() -> None:
    time, power = np.array([0.0, 1.0, 2.0, 4.0]), np.array([100.0, 98.0, 94.0, 80.0])
    assert time_to_loss(time, power, 0.05) == pytest.approx(1.75)
    assert time_to_loss(time, power, 0.10) == pytest.approx(2.0 + 2.0 * 4 / 14)
    assert math.isnan(time_to_loss(time, power, 0.5))
    assert math.isnan(time_to_loss(time, -power, 0.05))


def test_hours_of_steady_growth_give_that_loss() -> None:
    options = what_if_options(hot_fouling="5e-4 m^2 K/W", cold_fouling="1e-4 m^2 K/W", horizon="20000 h")
    found = fouling_growth(exhaust(), options)
    assert found is not None
    clean = estimate(replace(exhaust(), {"hot.fouling": 0.0, "cold.fouling": 0.0})).net_power
    assert found.net_power[0] == pytest.approx(clean, rel=1e-9)
    for loss, hours in zip(found.losses, found.hours, strict=True):
        changes = {"hot.fouling": 5e-4 * hours / 1000, "cold.fouling": 1e-4 * hours / 1000}
        assert estimate(replace(exhaust(), changes)).net_power == pytest.approx((1 - loss) * clean, rel=1e-4)


def test_fouling_nears_its_final_value() -> None:
    found = fouling_growth(exhaust(), WhatIfOptions())
    assert found is not None
    assert found.hot_fouling[-1] == pytest.approx(exhaust().hot.fouling, rel=1e-6)
    assert found.net_power[-1] == pytest.approx(estimate(exhaust()).net_power, rel=1e-6)
    one = np.interp(WhatIfOptions().fouling_time, found.time, found.hot_fouling)
    assert one == pytest.approx(exhaust().hot.fouling * (1 - math.exp(-1)), rel=1e-3)
    assert (np.diff(found.net_power) <= 1e-9).all()
    clean = fouling_growth(replace(exhaust(), {"hot.fouling": 0.0}), WhatIfOptions())
    assert clean is not None and "TEMA" in clean.law and "from memory" in clean.law
    assert fouling_growth(isothermal(), WhatIfOptions()) is None


# ---------------------------------------------------------------- part load, standstill, expansion


def test_part_loads_are_estimates_of_their_own() -> None:
    found = part_loads(exhaust(), ((0.5, 0.8),))
    for i, (flow, share) in enumerate(((1.0, 1.0), (0.5, 0.8))):
        ambient = exhaust().site.ambient_temperature
        changes = {
            "hot.mass_flow": (exhaust().hot.mass_flow or 0.0) * flow,
            "hot.inlet_temperature": ambient + share * (exhaust().hot.inlet_temperature - ambient),
        }
        alone = estimate(replace(exhaust(), changes))
        assert found.net_power[i] == pytest.approx(alone.net_power, rel=1e-7)
        np.testing.assert_allclose(found.gas_wall_temperature[:, i], alone.rows.hot_wall_temperature, rtol=1e-9)
        dew = checks(alone)["hot water dew point"]
        assert dew.limit == pytest.approx(float(found.water_dew_point[i]), rel=1e-12)
        assert dew.value == pytest.approx(float(found.gas_wall_temperature[:, i].min()), rel=1e-9)


@pytest.mark.parametrize("name", sorted(path.stem for path in EXAMPLES.glob("*.toml")))
def test_full_load_is_the_estimate_however_the_flow_is_given(name: str) -> None:
    case = load_case(EXAMPLES / f"{name}.toml")
    found = part_loads(case, PART_LOADS)
    assert found.net_power[0] == pytest.approx(estimate(case).net_power, rel=1e-9)
    assert (np.diff(found.generated_power) < 1e-9).all()


def test_less_load_wets_more_rows() -> None:
    """A cold enough coolant: the wall falls below the dew point from the last row on as the gas brings less heat."""
    case = replace(exhaust(), {"cold.inlet_temperature": "15 degC", "hot.fuel_sulphur": 0.002})
    found = part_loads(case, ((0.4, 0.6), (0.2, 0.4)))
    assert (np.diff(found.acid_rows) >= 0).all() and found.acid_rows[-1] > 0
    assert found.wet_rows[0] == 0 and (found.water_dew_point < found.acid_dew_point).all()
    dry = part_loads(jacket(), ((0.5, 0.8),))
    assert np.isnan(dry.water_dew_point).all() and (dry.wet_rows == 0).all()


def test_standstill_tells_each_liquid() -> None:
    hot, cold = standstill(jacket(), 258.15)
    assert (hot.side, cold.side) == ("hot", "cold") and hot.freezing < 258.15 < cold.freezing
    assert cold.freezing == pytest.approx(273.15, abs=0.1)
    assert standstill(isothermal(), 258.15) == ()


def test_expansion_is_length_times_coefficient_times_difference() -> None:
    length, hot, cold, assembled = (np.array([each]) for each in (2.0, 473.15, 323.15, 293.15))
    same = differential_expansion(length, 17e-6, hot, 17e-6, cold, assembled)
    assert same[0] == pytest.approx(2.0 * 17e-6 * 150.0)
    other = differential_expansion(length, 17e-6, hot, 23e-6, cold, assembled)
    assert other[0] == pytest.approx(2.0 * (17e-6 * 180.0 - 23e-6 * 30.0))


# ---------------------------------------------------------------- command


def test_the_command_reports_and_writes_json() -> None:
    path = str(EXAMPLES / "genset-exhaust.toml")
    result = CliRunner().invoke(cli, ["whatif", path, "--coldest-ambient", "-20 degC", "--part-load", "0.5:0.8"])
    assert result.exit_code == 0, result.output
    for words in ("Load or coolant lost", "broken (open)", "shorted", "Fouling", "50 %", "-20.0 degC", "aluminium"):
        assert words in result.stdout
    assert max(map(len, result.stdout.splitlines())) <= 110
    document = json.loads(CliRunner().invoke(cli, ["whatif", path, "--json"]).stdout)
    assert len(document["shorted"]["power_lost"]) == 14 and document["estimate"]["valid"]
    numbers = {name for part in ("opened", "fouling", "part_loads", "expansion") for name in document[part]}
    named = {"kind", "row", "law", "losses", "problem", "hot_plate", "cold_plate"}
    shares = {"flow_share", "temperature_share", "wet_rows", "acid_rows"}
    assert numbers - named - shares <= document["units"].keys()


@pytest.mark.parametrize(
    ("texts", "words"),
    [
        ({"hot_fouling": "1e-4"}, "hot-fouling"),
        ({"cold_fouling": "-1e-4 m^2 K/W"}, "cold-fouling: must not be negative"),
        ({"horizon": "0 h"}, "horizon: must be above zero"),
        ({"part_load": ("0.5",)}, "part-load: '0.5' is not FLOW:TEMPERATURE"),
        ({"part_load": ("0.5:3",)}, "part-load: '0.5:3' is not two shares"),
        ({"hot_plate": "cheese"}, "hot-plate: 'cheese' is not known; known are stainless steel"),
        ({"coldest_ambient": "-20 K"}, "coldest-ambient"),
    ],
)
def test_wrong_options_are_named(texts: dict[str, Any], words: str) -> None:
    with pytest.raises(InputError, match=words):
        what_if_options(**texts)
