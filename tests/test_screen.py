"""The first look at two streams: ceilings against closed forms, brute force and estimates of real stacks."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner
from CoolProp.CoolProp import PropsSI
from hypothesis import given, settings
from hypothesis import strategies as st

import harvest
from harvest.cli import cli
from harvest.errors import CaseError, InputError
from harvest.model.batch import StreamBatch
from harvest.model.case import Streams
from harvest.physics import screening
from harvest.physics.arrays import FloatArray
from harvest.report.documents import json_text
from harvest.report.screen_sheet import screen_document
from harvest.study.screen import FIGURE_OF_MERIT, NUMBERS, SOURCES, Screening, screen, screen_batch

ROOT = Path(__file__).parent.parent
CASES = sorted((ROOT / "examples").glob("*.toml")) + sorted((ROOT / "harvest/data/starters").glob("*.toml"))
EXAMPLES = sorted((ROOT / "examples").glob("*.toml"))

TWO_WATERS = """\
[hot]
fluid = "water"
inlet_temperature = "90 degC"
mass_flow = "1 kg/s"
pressure = "2 bar"
[cold]
fluid = "water"
inlet_temperature = "20 degC"
mass_flow = "1.5 kg/s"
pressure = "2 bar"
"""
CONSTANT = """\
[{side}]
fluid = "table"
inlet_temperature = "{inlet} K"
mass_flow = "{flow!r} kg/s"
[{side}.table]
temperature = ["200 K", "900 K"]
density = ["1000 kg/m^3", "1000 kg/m^3"]
heat_capacity = ["2000 J/(kg K)", "2000 J/(kg K)"]
viscosity = ["1 mPa s", "1 mPa s"]
conductivity = ["0.5 W/(m K)", "0.5 W/(m K)"]
"""
RESERVOIR = """\
[{side}]
fluid = "reservoir"
inlet_temperature = "{inlet} K"
film_coefficient = "100 W/(m^2 K)"
"""


def streams(text: str, *overrides: str) -> Streams:
    return harvest.load_streams(text, overrides)


def constant(hot_inlet: float, cold_inlet: float, hot_flow: float | None, cold_flow: float | None) -> Screening:
    text = ""
    for side, inlet, flow in (("hot", hot_inlet, hot_flow), ("cold", cold_inlet, cold_flow)):
        text += (RESERVOIR if flow is None else CONSTANT).format(side=side, inlet=inlet, flow=flow)
    return screen(streams(text))


def powers(
    films: tuple[float, float], inlets: tuple[float, float], merit: float, ratio: FloatArray, load: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Power [W] and the module's part of the difference by the whole heat balance, for conductances and load ratios.

    Seebeck coefficient 1 V/K, Z at the mean of the inlets; found by iteration on the current.
    """
    hot, cold = inlets
    conductance = ratio / (1 / films[0] + 1 / films[1])
    resistance = 0.5 * (hot + cold) / (merit * conductance)
    high, low = np.full(np.broadcast(ratio, load).shape, hot), np.full(np.broadcast(ratio, load).shape, cold)
    for _ in range(200):
        current = (high - low) / (resistance * (1 + load))
        first, second = films[0] + current + conductance, films[1] - current + conductance
        heat = 0.5 * current**2 * resistance
        rights = films[0] * hot + heat, films[1] * cold + heat
        determinant = first * second - conductance**2
        high = 0.5 * (high + (rights[0] * second + conductance * rights[1]) / determinant)
        low = 0.5 * (low + (first * rights[1] + conductance * rights[0]) / determinant)
    current = (high - low) / (resistance * (1 + load))
    return current**2 * resistance * load, (high - low) / (hot - cold)


@pytest.mark.parametrize("merit", [0.2, 0.8, 2.0])
@pytest.mark.parametrize(
    ("inlets", "films", "tolerance"),
    [
        ((301.0, 300.0), (1.0, 1.0), 1e-5),
        ((301.0, 300.0), (0.5, 5.0), 2e-4),
        ((600.0, 300.0), (1.0, 1.0), 0.01),
        ((600.0, 300.0), (0.5, 5.0), 0.03),
    ],
)
def test_joint_optimum_is_the_maximum_over_conductance_and_load(
    merit: float, inlets: tuple[float, float], films: tuple[float, float], tolerance: float
) -> None:
    ratio, load = np.linspace(0.4, 1.2, 201)[:, None], np.linspace(0.9, 2.1, 201)[None, :]
    power, share = powers(films, inlets, merit, ratio, load)
    best = np.unravel_index(power.argmax(), power.shape)
    series = np.array(1 / (1 / films[0] + 1 / films[1]))
    closed = screening.joint_optimum_power(series, np.array(inlets[0]), np.array(inlets[1]), np.array(merit))
    assert power.max() == pytest.approx(float(closed), rel=tolerance)
    if tolerance < 1e-3:
        assert ratio[best[0], 0] == pytest.approx(1 / np.sqrt(1 + merit), abs=0.01)
        assert load[0, best[1]] == pytest.approx(np.sqrt(1 + merit), abs=0.02)
        assert share[best] == pytest.approx(0.5, abs=2e-3)


@settings(max_examples=25, deadline=None)
@given(hot=st.floats(310.0, 850.0), cold=st.floats(220.0, 300.0), flow=st.floats(1e-3, 10.0))
def test_exergy_of_constant_heat_capacity(hot: float, cold: float, flow: float) -> None:
    answer = constant(hot, cold, flow, None)
    rate = 2000.0 * flow
    assert answer.available_heat == pytest.approx(rate * (hot - cold), rel=1e-9)
    exact = rate * (hot - cold - cold * np.log(hot / cold))
    assert answer.hot_exergy == pytest.approx(exact, rel=1e-8)
    assert answer.reversible_power == pytest.approx(exact, rel=1e-8)


@settings(max_examples=25, deadline=None)
@given(hot=st.floats(310.0, 850.0), cold=st.floats(220.0, 300.0), ratio=st.floats(0.1, 10.0))
def test_reversible_power_between_streams_of_constant_heat_capacity(hot: float, cold: float, ratio: float) -> None:
    answer = constant(hot, cold, 1.0, ratio)
    common = hot ** (1 / (1 + ratio)) * cold ** (ratio / (1 + ratio))
    assert answer.reversible_power == pytest.approx(2000.0 * (hot - common - ratio * (common - cold)), rel=1e-7)
    assert 0 < answer.net_power_high < answer.merit_power < answer.reversible_power < answer.hot_exergy


def test_a_hot_reservoir_warms_the_cold_stream() -> None:
    answer = constant(600.0, 300.0, None, 1.0)
    assert answer.reversible_power == pytest.approx(2000.0 * (600.0 * np.log(2.0) - 300.0), rel=1e-9)
    assert np.isnan(answer.available_heat)
    assert answer.net_power_high < answer.merit_power < answer.reversible_power


def test_modules_of_a_boundless_figure_of_merit_reach_the_exergy() -> None:
    places = screening.temperatures_between(np.array([600.0]), np.array([300.0]))
    power = -screening.power_from_hot_slices(
        np.full_like(places, 2.0), places, (np.array([600.0]), np.array([300.0])), np.array([300.0]), np.array(1e12)
    )
    assert power[0] == pytest.approx(2.0 * (300.0 - 300.0 * np.log(2.0)), rel=1e-5)


@pytest.mark.parametrize("ratio", [0.25, 0.5, 1.0])
def test_heat_of_most_power_of_a_counterflow_array(ratio: float) -> None:
    """Effectiveness 1/(1 + Cr) for a small figure of merit and a small difference, in closed form."""
    one = np.ones(1)
    heat = screening.heat_of_most_power(one, one, ratio * one, 1001.0 * one, 1000.0 * one, 1e-4 * one, 0.5 * one)
    assert heat[0] == pytest.approx(1 / (1 + ratio), abs=1e-3)


def test_available_heat_is_the_enthalpy_of_the_property_library() -> None:
    answer = screen(streams(TWO_WATERS))
    ends = [PropsSI("H", "T", kelvin, "P", 2e5, "Water") for kelvin in (363.15, 293.15)]
    entropies = [PropsSI("S", "T", kelvin, "P", 2e5, "Water") for kelvin in (363.15, 293.15)]
    assert answer.available_heat == pytest.approx(ends[0] - ends[1], rel=1e-8)
    exact = ends[0] - ends[1] - 293.15 * (entropies[0] - entropies[1])
    assert answer.hot_exergy == pytest.approx(exact, rel=1e-5)


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_every_shipped_case_is_screened(path: Path) -> None:
    answer = screen(harvest.load_streams(path))
    assert answer.valid
    assert answer.verdict.endswith(".")
    result = CliRunner().invoke(cli, ["screen", str(path)])
    assert result.exit_code == 0, result.output
    assert "nan" not in result.stdout and answer.verdict.split(":")[0] in " ".join(result.stdout.split())


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_no_estimate_is_above_a_ceiling(path: Path) -> None:
    case = harvest.load_case(path)
    answer, estimate = screen(case), harvest.estimate(case)
    if np.isfinite(answer.reversible_power):
        assert estimate.generated_power < answer.merit_power < answer.reversible_power
        assert estimate.hot_heat_flow < answer.available_heat
        assert estimate.generated_power / estimate.module_count < 1.05 * answer.best_module_power_high
    else:
        area = estimate.stack_length * estimate.stack_width * case.stack.layers
        assert estimate.generated_power < answer.joint_optimum_flux_low * area


def test_only_the_streams_are_judged() -> None:
    built = TWO_WATERS + '[hot.duct]\ngap = "no gap"\n[stack]\nrows = "many"\n[module]\nnothing = 1\n'
    documents = [json_text(screen_document(screen(streams(text)))) for text in (built, TWO_WATERS)]
    assert documents[0] == documents[1]
    with pytest.raises(CaseError, match=r"case:2: hot\.fluid: .*did you mean water"):
        streams(TWO_WATERS.replace('"water"', '"watr"', 1))
    with pytest.raises(CaseError, match=r"case:11: cold\.presure: unknown field; did you mean pressure"):
        streams(TWO_WATERS + 'presure = "2 bar"\n')
    with pytest.raises(CaseError, match=r"stack: the section \[stack\] is missing"):
        harvest.load_case(TWO_WATERS)
    changed = harvest.replace(harvest.load_streams(TWO_WATERS), {"hot.mass_flow": 2.0})
    assert screen(changed).available_heat == pytest.approx(2 * screen(streams(TWO_WATERS)).available_heat)


def test_worth_of_a_year() -> None:
    prices = ('site.heat_value="0.05 EUR/kWh"', 'site.electricity_value="80 EUR/MWh"', 'site.yearly_operation="1000 h"')
    answer = screen(streams(TWO_WATERS, prices[0], 'site.electricity_value="0.3 EUR/kWh"', prices[2]))
    assert answer.yearly_heat_worth == pytest.approx(answer.usable_heat / 1000 * 1000 * 0.05)
    assert answer.yearly_electricity_worth_high == pytest.approx(answer.net_power_high / 1000 * 1000 * 0.3)
    assert answer.currency == "EUR"
    assert answer.verdict.startswith("If somebody can use the heat as heat, let them")
    with pytest.raises(CaseError, match=r"site\.electricity_value: .*not a price"):
        streams(TWO_WATERS, prices[0], prices[1])
    with pytest.raises(CaseError, match=r"site\.electricity_value: is in USD, and heat_value in EUR"):
        streams(TWO_WATERS, prices[0], 'site.electricity_value="0.3 USD/kWh"')
    with pytest.raises(CaseError, match=r"site\.heat_value: .*comma"):
        streams(TWO_WATERS, 'site.heat_value="0,05 EUR/kWh"')


def test_lowest_outlet_is_the_limit_or_a_dew_point() -> None:
    exhaust = harvest.load_streams(ROOT / "examples/genset-exhaust.toml")
    dry = harvest.replace(exhaust, {"hot.fuel_sulphur": 0.0, "cold.inlet_temperature": "5 degC"})
    acid, water = screen(exhaust), screen(dry)
    assert 310.0 < water.lowest_outlet_temperature < 330.0
    assert acid.lowest_outlet_temperature > water.lowest_outlet_temperature + 20.0
    limited = screen(harvest.replace(exhaust, {"limits.minimum_hot_outlet_temperature": "150 degC"}))
    assert limited.lowest_outlet_temperature == pytest.approx(423.15)
    assert limited.heat_high <= limited.usable_heat < acid.usable_heat
    nothing = screen(harvest.replace(exhaust, {"limits.minimum_hot_outlet_temperature": "450 degC"}))
    assert nothing.usable_heat == 0.0 and nothing.verdict.startswith("Nothing to take")


def test_equal_and_reversed_inlets_have_no_answer() -> None:
    for inlet in ("20 degC", "10 degC"):
        answer = screen(streams(TWO_WATERS, f'hot.inlet_temperature="{inlet}"'))
        assert not answer.valid and not answer.bad_input
        assert "hot.inlet_temperature: is not above cold.inlet_temperature" in answer.problem
        assert all(np.isnan(getattr(answer, name)) for name in NUMBERS)


def test_a_batch_is_its_cases() -> None:
    case = streams(TWO_WATERS)
    inlets = np.array([353.15, 200.0, 363.15, 280.0])
    batch = screen_batch(StreamBatch(case, 4, {"hot.inlet_temperature": inlets}))
    assert list(batch.bad_input) == [False, True, False, False]
    assert [problem == "" for problem in batch.problem] == [True, False, True, False]
    for index in (0, 2):
        alone = screen(harvest.replace(case, {"hot.inlet_temperature": float(inlets[index])}))
        for name in NUMBERS:
            np.testing.assert_allclose(batch.numbers[name][index], getattr(alone, name), rtol=1e-9)


def test_cold_stream_that_would_boil_takes_no_more_than_it_can() -> None:
    exhaust = harvest.load_streams(ROOT / "examples/bakery-flue.toml")
    answer = screen(harvest.replace(exhaust, {"cold.volume_flow": "0.5 L/min"}))
    assert answer.valid and 0 < answer.net_power_high < answer.merit_power < answer.reversible_power < answer.hot_exergy


def test_small_differences_are_hardly_worth_it() -> None:
    assert "Hardly worth a design" in screen(streams(TWO_WATERS, 'hot.inlet_temperature="35 degC"')).verdict


def test_figure_of_merit_is_stated_and_bounded() -> None:
    case = streams(TWO_WATERS)
    assert screen(case, figure_of_merit=0.4).merit_power < screen(case).merit_power
    assert screen(case).figure_of_merit == FIGURE_OF_MERIT
    for wrong in (0.0, -1.0, 11.0, float("nan")):
        with pytest.raises(InputError, match=r"figure-of-merit: .*give above 0 to 10"):
            screen(case, figure_of_merit=wrong)


def test_json_has_a_unit_and_a_source_for_each_number() -> None:
    result = CliRunner().invoke(cli, ["screen", "-", "--json"], input=TWO_WATERS)
    assert result.exit_code == 0, result.output
    document = json.loads(result.stdout)
    assert set(document["units"]) == set(document["number_sources"]) == set(NUMBERS)
    assert all(SOURCES.values())
    assert document["units"]["hot_exergy"] == "W"
    assert document["yearly_heat_worth"] is None


@pytest.mark.parametrize(
    ("inlet", "code", "message"),
    [
        ("10 degC", 1, "no valid answer: hot.inlet_temperature: is not above"),
        ("130 degC", 2, "stdin: hot.inlet_temperature: 403.15 K is outside"),
    ],
)
def test_exit_codes(inlet: str, code: int, message: str) -> None:
    arguments = ["screen", "-", "--set", f'hot.inlet_temperature="{inlet}"']
    result = CliRunner().invoke(cli, arguments, input=TWO_WATERS)
    assert result.exit_code == code and message in result.stderr


def test_usage_errors_load_nothing_heavy() -> None:
    program = (
        "import sys; from harvest.cli import cli\n"
        "try: cli(['screen', '-', '--set', 'hot.fluid=none'], prog_name='harvest')\n"
        "except SystemExit as end: assert end.code == 2, end.code\n"
        "print([name for name in ('CoolProp', 'scipy', 'matplotlib', 'pint') if name in sys.modules])"
    )
    result = subprocess.run(
        [sys.executable, "-c", program], input=TWO_WATERS, capture_output=True, text=True, check=True
    )
    assert result.stdout.strip() == "[]"
