"""How sure a case is: closed forms, published indices, coverage of synthetic truths, reading, factors, the command."""

from __future__ import annotations

import dataclasses
import json
import re
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner, Result
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.cli import cli
from harvest.errors import CaseError, InputError, NoAnswerError
from harvest.model.batch import Batch
from harvest.model.case import DECLARATIONS, Case, case_hash, value_at
from harvest.model.estimate import estimate_batch
from harvest.model.reading import load_case, read_case, replace
from harvest.model.search import search_batch
from harvest.model.tolerances import FACTOR, NORMAL, UNIFORM, Tolerance
from harvest.physics.arrays import FloatArray
from harvest.report.doubt_sheet import chance_text, doubt_report
from harvest.study import doubt as doubting
from harvest.study.common_tolerances import COMMON_TOLERANCES
from harvest.study.doubt import Doubt, Drawn, answered, doubt, drawn_inputs, indices, probabilities, spread

EXAMPLES = Path(__file__).parents[1] / "examples"
CASES = sorted(EXAMPLES.glob("*.toml"))
LOOP = EXAMPLES / "genset-jacket-water.toml"
EXHAUST = EXAMPLES / "genset-exhaust.toml"
Z10, Z95 = 1.2815515655446004, 1.6448536269514722
"""Quantiles of the standard normal distribution at 90 and 95 of 100."""


def only(case: Case, tolerances: dict[str, Any]) -> Case:
    """The case with these tolerances and every default switched off."""
    defaults = {each.path: "none" for each in drawn_inputs(case)[0]}
    return replace(case, {"uncertainty": {**defaults, **tolerances}})


# ---- Exact answers


@pytest.fixture(scope="module")
def linear() -> tuple[float, Doubt]:
    """Net power that is a constant less a normal and a uniform number, and its doubt."""
    case = load_case(LOOP, ['electrical.auxiliary_power="10 W"', 'electrical.converter_standby_power="6 W"'])
    tolerances = {
        "electrical.auxiliary_power": "50 %",
        "electrical.converter_standby_power": {"uniform": ["-3 W", "5 W"]},
    }
    case = only(case, tolerances)
    return float(search_batch(Batch(case)).scalars["net_power"][0]), doubt(case)


def test_linear_case_has_its_known_mean_and_variance(linear: tuple[float, Doubt]) -> None:
    nominal, found = linear
    of_normal, of_uniform = (5.0 / 1.959964) ** 2, 8.0**2 / 12.0
    net = found.results["net_power"]
    assert net.nominal == pytest.approx(nominal, rel=1e-12)
    assert net.mean == pytest.approx(nominal - 1.0, abs=0.01)
    assert net.standard_deviation**2 == pytest.approx(of_normal + of_uniform, rel=3e-3)
    inputs = {each.field: each for each in found.inputs}
    for field, variance in (
        ("electrical.auxiliary_power", of_normal),
        ("electrical.converter_standby_power", of_uniform),
    ):
        share = variance / (of_normal + of_uniform)
        assert inputs[field].first_order == pytest.approx(share, abs=0.01)
        assert inputs[field].total == pytest.approx(share, abs=0.01)
        assert inputs[field].band_narrowing == pytest.approx(1.0 - np.sqrt(1.0 - share), abs=0.01)
        low, high = inputs[field].first_order_interval
        assert low < share < high
    assert found.interactions == pytest.approx(0.0, abs=0.01)
    assert inputs["electrical.auxiliary_power"].swing == pytest.approx(-2 * Z10 * 5.0 / 1.959964, rel=2e-4)  # cut at 0
    assert inputs["electrical.converter_standby_power"].swing == pytest.approx(-0.8 * 8.0, rel=1e-6)
    assert inputs["electrical.converter_standby_power"].lower == 3.0
    assert [each.field for each in found.inputs] == sorted(inputs, key=lambda name: -inputs[name].first_order)


def test_one_normal_input_gives_the_quantiles_of_a_normal_distribution() -> None:
    case = load_case(LOOP, ['electrical.auxiliary_power="10 W"'])
    nominal = float(search_batch(Batch(case)).scalars["net_power"][0])
    found = doubt(only(case, {"electrical.auxiliary_power": "4 W"}), samples=1024)
    net, deviation = found.results["net_power"], 4.0 / 1.959964
    expected = [nominal + z * deviation for z in (-Z95, -Z10, 0.0, Z10, Z95)]
    assert [net.p5, net.p10, net.p50, net.p90, net.p95] == pytest.approx(expected, abs=0.02 * deviation)
    (alone,) = found.inputs
    assert (alone.first_order, alone.total, alone.first_order_interval) == (1.0, 1.0, (1.0, 1.0))
    assert alone.band_narrowing == 1.0
    assert found.worth_measuring == ("electrical.auxiliary_power",)


def test_chance_of_a_negative_net_and_of_a_broken_limit() -> None:
    """Net power of zero as it stands, less a normal number: half of the cases; and a limit at an outlet's middle."""
    case = load_case(LOOP, ['electrical.auxiliary_power="10 W"'])
    net = float(search_batch(Batch(case)).scalars["net_power"][0])
    found = doubt(
        only(
            replace(case, {"electrical.auxiliary_power": 10.0 + net}),
            {"electrical.auxiliary_power": "9 W", "hot.inlet_temperature": "1 K"},
        ),
        samples=1024,
    )
    assert found.chance_negative == pytest.approx(0.5, abs=0.01)
    middle = found.results["hot_outlet_temperature"].p50
    limited = replace(case, {"limits.minimum_hot_outlet_temperature": middle})
    again = doubt(only(limited, {"hot.inlet_temperature": "1 K"}), samples=1024)
    chances = {each.limit: each for each in again.limits}
    assert chances["minimum_hot_outlet_temperature"].chance == pytest.approx(0.5, abs=0.01)
    assert chances["minimum_hot_outlet_temperature"].result == "hot_outlet_temperature"
    assert chances["hot_pressure_drop"].chance == 0.0


def test_chances_of_what_stands_without_load_and_of_the_converter_window_are_those_of_estimates() -> None:
    """Each limit at a percentile of estimates of the same draws: so many of 100 cases are beyond it."""
    case = only(
        load_case(LOOP, ["electrical.load=matched"]), {"hot.inlet_temperature": "3 K", "hot.volume_flow": "20 %"}
    )
    inputs, _ = drawn_inputs(case)
    points = np.random.default_rng(5).random((2, 1000))
    values = {each.path: each.values(row) for each, row in zip(inputs, points, strict=True)}
    estimates = estimate_batch(Batch(case, 1000, values), grid=True)
    scalars = estimates.scalars
    low, high = np.quantile(scalars["voltage"], [0.3, 0.8])
    opened = np.quantile(scalars["open_circuit_voltage"], 0.6)
    hot = np.quantile(scalars["open_circuit_face_temperature"], 0.25)
    limited = replace(
        case,
        {
            "electrical.converter_window": [f"{low} V", f"{high} V"],
            "limits.maximum_open_circuit_voltage": float(opened),
            "limits.hot_face_temperature_without_load": float(hot),
        },
    )
    found = doubt(limited, samples=1024)
    chances = {(each.limit, each.bound): each.chance for each in found.limits}
    assert chances["converter_window", "at least"] == pytest.approx(0.3, abs=0.04)
    assert chances["converter_window", "at most"] == pytest.approx(0.2, abs=0.04)
    assert chances["maximum_open_circuit_voltage", "at most"] == pytest.approx(0.4, abs=0.04)
    assert chances["hot_face_temperature_without_load", "at most"] == pytest.approx(0.75, abs=0.04)
    report = " ".join(doubt_report(limited, found).split())
    assert "Caution: the terminals are outside the converter's window with a chance of" in report
    assert f"converter_window: at least {low:.2f} V, broken with a chance of" in report


def test_a_converter_that_keeps_its_window_is_not_told_to_break_it() -> None:
    """At maximum power the voltage stays within; rounding at the edge is no fault."""
    case = load_case(LOOP, ['electrical.converter_window=["21.6 V", "21.7 V"]'])
    found = doubt(case, samples=256)
    assert {each.chance for each in found.limits if each.limit == "converter_window"} == {0.0}


def test_the_report_says_how_sure_its_shares_are() -> None:
    """The widest interval of the JSON; few cases rank nothing."""
    case = load_case(LOOP)
    for samples, coarse in ((256, True), (4096, False)):
        found = doubt(case, samples)
        widest = max(high - low for each in found.inputs for low, high in (each.first_order_interval,))
        report = " ".join(doubt_report(case, found).split())
        told = re.search(r"may be off by up to (\d+) points of 100", report)
        assert told is not None
        assert int(told[1]) == pytest.approx(50.0 * widest, abs=1.0)
        assert ("take more --samples" in report) == coarse


def ishigami(points: FloatArray) -> FloatArray:
    first, second, third = np.pi * (2.0 * points - 1.0)
    return np.asarray(np.sin(first) + 7.0 * np.sin(second) ** 2 + 0.1 * third**4 * np.sin(first))


def test_ishigami_has_its_published_indices() -> None:
    """Ishigami and Homma 1990, a = 7, b = 0.1: exact values of Saltelli et al. 2008 (from memory)."""
    found = indices(ishigami, 3, 16384, seed=1)
    assert found.first_order == pytest.approx([0.3139, 0.4424, 0.0], abs=0.002)
    assert found.total == pytest.approx([0.5576, 0.4424, 0.2437], abs=0.002)
    assert found.cases == 16384 * 5
    for interval, exact in (
        (found.first_order_interval, (0.3139, 0.4424, 0.0)),
        (found.total_interval, (0.5576, 0.4424, 0.2437)),
    ):
        assert (interval[0] < exact).all() and (exact < interval[1]).all()


def test_ishigami_has_its_known_mean_and_variance() -> None:
    """Mean a/2, variance a^2/8 + b pi^4/5 + b^2 pi^8/18 + 1/2."""
    net = spread(0.0, ishigami(probabilities(3, 4096, seed=2)))
    variance = 49.0 / 8.0 + 0.1 * np.pi**4 / 5.0 + 0.01 * np.pi**8 / 18.0 + 0.5
    assert net.mean == pytest.approx(3.5, abs=0.02)
    assert net.standard_deviation**2 == pytest.approx(variance, rel=0.01)


def test_answers_that_are_missing_stand_as_the_mean_of_the_others() -> None:
    def gappy(points: FloatArray) -> FloatArray:
        results = ishigami(points)
        results[:: len(results) // 10] = np.nan
        return results

    found = indices(gappy, 3, 1024, seed=1)
    assert 10 <= found.invalid <= 11
    assert found.total == pytest.approx([0.5576, 0.4424, 0.2437], abs=0.05)


# ---- Coverage


@pytest.mark.parametrize("example", ["genset-jacket-water", "genset-exhaust", "stove-wall-sensor"])
def test_the_band_holds_nine_of_ten_synthetic_truths(example: str) -> None:
    """Truths drawn by numpy's own generator and textbook formulas, not by the code under test."""
    case = load_case(EXAMPLES / f"{example}.toml")
    inputs, _ = drawn_inputs(case)
    rng = np.random.default_rng(20_000)
    truths = {each.path: truth(rng, each.nominal, each.tolerance, 2000) for each in inputs}
    for path, values in truths.items():
        if (most := DECLARATIONS[path].maximum) is not None:
            assert (values <= most).all()  # far from the ends, so that no cut disturbs the comparison
    net = search_batch(Batch(case, 2000, {**truths})).scalars["net_power"]
    assert np.isfinite(net).all()
    found = doubt(case).results["net_power"]
    inside = ((net > found.p5) & (net < found.p95)).mean()
    assert 0.88 <= inside <= 0.92
    assert 0.77 <= ((net > found.p10) & (net < found.p90)).mean() <= 0.83


def truth(rng: np.random.Generator, value: float, tolerance: Tolerance, count: int) -> FloatArray:
    scale = value if tolerance.relative else 1.0
    if tolerance.distribution == UNIFORM:
        return rng.uniform(value + tolerance.low * scale, value + tolerance.high * scale, count)
    if tolerance.distribution == FACTOR:
        return np.asarray(value * np.exp(np.log(tolerance.high) / 1.96 * rng.standard_normal(count)))
    return rng.normal(value, tolerance.high * scale / 1.96, count)


# ---- Distributions


@given(
    st.sampled_from(["electrical.converter_efficiency", "hot.drive_efficiency", "stack.hot_interface"]),
    st.floats(0.01, 0.999),
    st.floats(0.001, 1.0),
)
@settings(max_examples=50)
def test_drawn_values_rise_and_keep_to_the_allowed_range(path: str, value: float, share: float) -> None:
    drawn = Drawn(path, value, Tolerance(NORMAL, -share, share, relative=True), "given", "")
    values = drawn.values(np.linspace(0.0, 1.0, 101))
    declaration = DECLARATIONS[path]
    low = declaration.minimum if declaration.above is None else declaration.above
    assert low is not None and declaration.maximum is not None
    assert (values >= low).all() and (values <= declaration.maximum).all()
    assert (np.diff(values) >= 0).all()


@pytest.mark.parametrize(
    ("tolerance", "expected"),
    [
        (Tolerance(NORMAL, -0.1, 0.1, relative=True), (0.9, 1.0, 1.1)),
        (Tolerance(NORMAL, -0.2, 0.2), (0.8, 1.0, 1.2)),
        (Tolerance(FACTOR, 0.5, 2.0, relative=True), (0.5, 1.0, 2.0)),
        (Tolerance(UNIFORM, -0.2, 0.4), (0.815, 1.1, 1.385)),
    ],
    ids=["share", "difference", "factor", "uniform"],
)
def test_95_of_100_values_keep_within_a_tolerance(tolerance: Tolerance, expected: tuple[float, ...]) -> None:
    drawn = Drawn("hot.duct.film_factor", 1.0, tolerance, "given", "")
    assert drawn.values(np.array([0.025, 0.5, 0.975])) == pytest.approx(expected, rel=1e-9)


def test_a_value_at_the_end_of_its_range_is_drawn_from_one_side() -> None:
    """An efficiency of 1 that is off by 5 %: a half normal distribution, whose middle is .6745 deviations down."""
    drawn = Drawn("electrical.converter_efficiency", 1.0, Tolerance(NORMAL, -0.05, 0.05, relative=True), "given", "")
    assert drawn.values(np.array([0.5]))[0] == pytest.approx(1.0 - 0.67449 * 0.05 / 1.959964, rel=1e-6)


def test_defaults_apply_once_and_the_case_goes_before_them() -> None:
    for path in CASES:
        case = load_case(path)
        inputs, exact = drawn_inputs(case)
        paths = [each.path for each in inputs]
        assert len(paths) == len(set(paths)) >= 8
        assert not {*paths} & {each.field for each in exact}
    stated = replace(load_case(LOOP), {"uncertainty": {"hot.volume_flow": "1 %", "hot.inlet_temperature": "none"}})
    origins = {each.path: (each.origin, each.tolerance.high) for each in drawn_inputs(stated)[0]}
    assert origins["hot.volume_flow"] == ("given", 0.01)
    assert "hot.inlet_temperature" not in origins
    assert "hot.inlet_temperature" in {each.field for each in drawn_inputs(stated)[1]}


def test_defaults_stand_for_fields_that_can_vary_and_tell_their_source() -> None:
    for each in COMMON_TOLERANCES:
        assert each.source
        for path in each.fields:
            declaration = DECLARATIONS[path]
            assert declaration.form in ("quantity", "standard volume flow") and not declaration.descriptive
            assert not (each.tolerance.relative and declaration.kind == "temperature")


def test_an_assumed_perfect_converter_is_not_in_doubt() -> None:
    text = "\n".join(line for line in LOOP.read_text("utf-8").splitlines() if "converter_efficiency" not in line)
    inputs, exact = drawn_inputs(read_case(text))
    assert "electrical.converter_efficiency" not in {each.path for each in inputs}
    assert {each.field: each.reason for each in exact}[
        "electrical.converter_efficiency"
    ] == "is assumed to be without loss"


# ---- Reading

TEXT = LOOP.read_text("utf-8")


@pytest.mark.parametrize(
    ("line", "message"),
    [
        ('"hot.mas_flow" = "5 %"', "hot.mas_flow: unknown field; did you mean hot.mass_flow"),
        ('"hot.mass_flow" = "5 %"', "hot.mass_flow: has no value of its own in this case"),
        ('"hot.volume_flow" = "-5 %"', '"-5 %" is not possible; give a tolerance above zero'),
        ('"hot.volume_flow" = "150 %"', "at most 100 %, or { factor = 2 }"),
        ('"hot.volume_flow" = "5"', "has no unit; write for example"),
        ('"hot.volume_flow" = "5 K"', "5 K"),
        ('"hot.inlet_temperature" = "2 %"', 'of a temperature says nothing; give a difference such as "2 K"'),
        ('"hot.inlet_temperature" = "2 degC"', "degC"),
        ('"hot.inlet_temperature" = { factor = 1.1 }', "a temperature is not off by a factor"),
        ('"hot.inlet_temperature" = { even = "2 K" }', 'is no tolerance; write for example "2 K"'),
        ('"hot.inlet_temperature" = { uniform = "2 K" }', "is not a pair of differences"),
        ('"hot.inlet_temperature" = { uniform = ["2 K", "-1 K"] }', "give the lower end first"),
        ('"hot.volume_flow" = { uniform = ["-150 %", "5 %"] }', "takes away more than all of it; give at least -100 %"),
        ('"hot.volume_flow" = { uniform = ["-2 %", "1 L/min"] }', "one end is in % and the other is not"),
        ('"hot.volume_flow" = { factor = 0.5 }', "give above 1 and at most 100"),
        ('"site.ambient_pressure" = "1 kPa"', "give hot.pressure or cold.pressure a tolerance"),
        ('"stack.rows" = "5 %"', "is no number that a result depends on continuously"),
        ('"limits.hot_pressure_drop" = "5 %"', "is no number that a result depends on continuously"),
        ('"module.seebeck" = "5 %"', "is a curve; give module.seebeck_factor a tolerance instead"),
        ('"cold.film_coefficient" = "5 %"', "has no value of its own in this case"),
        ('"hot" = "5 %"', "unknown field; did you mean"),
    ],
)
def test_a_faulty_tolerance_is_refused_with_its_line(line: str, message: str) -> None:
    text = f"{TEXT}\n[uncertainty]\n{line}\n"
    number = len(text.splitlines())
    with pytest.raises(CaseError) as caught:
        read_case(text, label="case.toml")
    (fault,) = caught.value.faults
    assert fault.startswith(f"case.toml:{number}: uncertainty.")
    assert message in fault


def test_a_name_without_quotes_is_told_how_to_be_written() -> None:
    with pytest.raises(CaseError, match="write the whole name of its field in quotes"):
        read_case(f'{TEXT}\n[uncertainty]\nhot.volume_flow = "5 %"\n')


def test_all_faults_of_tolerances_are_told_at_once() -> None:
    text = TEXT.replace('volume_flow = "75 L/min"', 'volume_flow = "75 furlongs"')
    faulty = '\n[uncertainty]\n"hot.volume_flow" = "5 %"\n"cold.volume_flow" = "5 kg"\n"nothing.here" = "1 %"\n'
    with pytest.raises(CaseError) as caught:
        read_case(text + faulty)
    assert [fault.split(": ")[1] for fault in caught.value.faults] == [
        "hot.volume_flow",
        "uncertainty.cold.volume_flow",
        "uncertainty.nothing.here",
    ]


@pytest.mark.parametrize(
    ("path", "raw", "text"),
    [
        ("hot.volume_flow", "5 %", "+- 5 %"),
        ("hot.volume_flow", {"normal": "2 L/min"}, "+- 2 L/min"),
        ("hot.inlet_temperature", "1.5 K", "+- 1.5 K"),
        ("hot.inlet_temperature", {"uniform": ["-3 K", "3 K"]}, "-3 K to 3 K, even"),
        ("hot.pressure", "10 kPa", "+- 10 kPa"),
        ("hot.drive_efficiency", 0.05, "+- 0.05"),
        ("hot.fouling", {"factor": 2}, "within a factor 2"),
        ("module.seebeck_factor", "3 %", "+- 3 %"),
        ("stack.hot_interface", "none", "exact"),
    ],
)
def test_a_tolerance_is_told_as_it_was_given(path: str, raw: Any, text: str) -> None:
    case = replace(load_case(LOOP), {"uncertainty": {path: raw}})
    assert case.uncertainty is not None
    assert case.uncertainty[path].text(DECLARATIONS[path].kind) == text


def test_tolerances_change_no_hash_and_can_be_set_from_the_command_line() -> None:
    plain, stated = load_case(LOOP), load_case(LOOP, ['uncertainty.hot.volume_flow="1 %"'])
    assert case_hash(plain) == case_hash(stated)
    assert stated.uncertainty == {"hot.volume_flow": Tolerance(NORMAL, -0.01, 0.01, relative=True)}


def test_a_standard_volume_flow_varies_in_its_flow() -> None:
    case = load_case(EXAMPLES / "bakery-flue.toml")
    given_flow = case.hot.standard_volume_flow
    assert given_flow is not None
    varied = estimate_batch(Batch(case, 1, {"hot.standard_volume_flow": np.array([1.1 * given_flow.volume_flow])}))
    written = str(dataclasses.replace(given_flow, volume_flow=1.1 * given_flow.volume_flow))
    stated = estimate_batch(Batch(replace(case, {"hot.standard_volume_flow": written})))
    assert varied.net_power == pytest.approx(stated.net_power, rel=1e-12)


def test_a_tolerance_outlives_a_value_of_zero_and_leaves_with_its_field() -> None:
    """Studies replace values of a case: its tolerances must not make it a faulty one."""
    case = load_case(LOOP, ['uncertainty.hot.fouling="20 %"', 'uncertainty.hot.volume_flow="2 %"'])
    clean = replace(case, {"hot.fouling": 0.0})
    assert "hot.fouling" in {each.field for each in drawn_inputs(clean)[1]}
    by_mass = replace(case, {"hot.mass_flow": "1.2 kg/s"})
    assert by_mass.uncertainty is not None and set(by_mass.uncertainty) == {"hot.fouling"}
    assert "hot.mass_flow" in {each.path for each in drawn_inputs(by_mass)[0]}


def test_a_uniform_tolerance_is_cut_off_at_the_allowed_range() -> None:
    drawn = Drawn("hot.drive_efficiency", 0.9, Tolerance(UNIFORM, -0.2, 0.4), "given", "")
    assert drawn.values(np.array([0.0, 0.5, 1.0])) == pytest.approx([0.7, 0.85, 1.0])


# ---- Factors


def net(case: Case, changes: dict[str, Any]) -> float:
    answer = estimate_batch(Batch(replace(case, changes)))
    assert answer.valid.all()
    return float(answer.generated_power[0])


def test_a_film_factor_is_as_much_area_of_a_smooth_duct() -> None:
    case = replace(load_case(LOOP), {"hot.fouling": 0.0})
    found = net(case, {"hot.duct.film_factor": 1.3})
    assert found == pytest.approx(net(case, {"hot.duct.area_ratio": 1.3}), rel=1e-9)
    assert found > 1.01 * net(case, {})


def test_a_film_factor_with_as_much_better_a_fin_is_as_much_conductance() -> None:
    """h and k of the fins times f: the fins' efficiency stays, so the film is f times as good, fouling f times less."""
    case = load_case(EXHAUST)
    both = {"hot.duct.film_factor": 1.5, "hot.duct.fin_conductivity": 1.5 * 20.0, "hot.fouling": 0.0}
    batch = Batch(replace(case, both)), Batch(replace(case, {"hot.fouling": 0.0}))
    from harvest.model.design import design

    films = [design(each).hot for each in batch]
    conductances = []
    for stream in films:
        assert stream.fluid is not None and stream.film is not None
        conductances.append(stream.film.conductance(*stream.fluid.film_properties(np.array([[600.0]]))))
    assert conductances[0] == pytest.approx(1.5 * conductances[1], rel=1e-12)


def test_a_film_factor_of_rated_blocks_and_of_a_rated_sink() -> None:
    blocks = load_case(EXAMPLES / "workshop-water-blocks.toml")
    from harvest.model.design import design

    films = [design(Batch(replace(blocks, {"cold.duct.film_factor": each}))).cold.film for each in (1.0, 1.2)]
    ratio = films[1].film_conductance / films[0].film_conductance  # type: ignore[union-attr]
    assert ratio == pytest.approx(1.2, rel=1e-12)
    stove = load_case(EXAMPLES / "stove-wall-sensor.toml")
    text = (EXAMPLES / "stove-wall-sensor.toml").read_text("utf-8")
    kept = [line for line in text.splitlines() if not line.startswith("sink_")]
    at = kept.index('kind = "heat sink"')
    kept[at + 1 : at + 1] = ['sink_resistance = "1.5 K/W"', 'sink_temperature_rise = "40 K"']
    rated = read_case("\n".join(kept))
    better = net(rated, {"cold.duct.film_factor": 1.25})
    assert better == pytest.approx(net(rated, {"cold.duct.sink_resistance": 1.5 / 1.25}), rel=1e-9)
    assert net(stove, {"cold.duct.film_factor": 1.2}) > 1.02 * net(stove, {})


def test_a_friction_loss_factor_multiplies_the_friction() -> None:
    blocks = load_case(EXAMPLES / "workshop-water-blocks.toml")
    drops = [
        float(estimate_batch(Batch(replace(blocks, {"cold.duct.friction_loss_factor": each}))).cold_pressure_drop[0])
        for each in (1.0, 1.4)
    ]
    assert drops[1] == pytest.approx(1.4 * drops[0], rel=1e-9)
    loop = load_case(LOOP)
    one, two, three = (
        float(estimate_batch(Batch(replace(loop, {"hot.duct.friction_loss_factor": each}))).hot_pressure_drop[0])
        for each in (1.0, 2.0, 3.0)
    )
    assert three - two == pytest.approx(two - one, rel=1e-9)
    assert one > two - one > 0.2 * one


@pytest.mark.parametrize(("parameter", "unit"), [("seebeck", "V/K"), ("resistance", "ohm"), ("conductance", "W/K")])
def test_a_module_factor_multiplies_the_module_parameter(parameter: str, unit: str) -> None:
    case = load_case(EXAMPLES / "textbook-array.toml")
    value = value_at(case, f"module.{parameter}").values[0]
    found = net(case, {f"module.{parameter}_factor": 1.1})
    assert found == pytest.approx(net(case, {f"module.{parameter}": f"{1.1 * value!r} {unit}"}), rel=1e-9)


# ---- The study


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_every_example_has_an_answer_in_which_the_parts_agree(path: Path) -> None:
    case = load_case(path)
    found = doubt(case, samples=256)
    net_power = found.results["net_power"]
    assert found.valid == 256 == len(found.net_power_sample) and not found.invalid
    assert net_power.p5 < net_power.p10 < net_power.p50 < net_power.p90 < net_power.p95
    assert net_power.p10 < net_power.nominal < net_power.p90
    assert found.index_cases == found.index_samples * (len(found.inputs) + 2)
    for each in found.inputs:
        assert each.lower < each.nominal < each.upper
    report = doubt_report(case, found)
    assert all(len(line) <= 120 for line in report.splitlines())
    assert "nan" not in report.lower().split() and "None" not in report


def test_the_same_seed_draws_the_same_cases() -> None:
    case = load_case(EXAMPLES / "textbook-array.toml")
    first, second, third = (doubt(case, samples=128, seed=each) for each in (1, 1, 2))
    assert first == second
    assert first != third


def test_cases_without_an_answer_are_counted_with_their_reason() -> None:
    """Glycol ends at 100 degC: of inlets spread evenly over 92 to 108 degC half have no answer."""
    case = only(
        load_case(LOOP, ['hot.inlet_temperature="99 degC"']), {"hot.inlet_temperature": {"uniform": ["-7 K", "9 K"]}}
    )
    found = doubt(case, samples=1024)
    assert found.valid == pytest.approx(512, abs=5)
    ((reason, count),) = found.invalid.items()
    assert count == 1024 - found.valid and "100" in reason
    assert found.results["net_power"].nominal > found.results["net_power"].p50
    report = doubt_report(case, found)
    assert f"Caution: {count} of 1,024 cases have no answer" in report


def test_a_curve_that_meets_no_resistance_is_the_reason_told() -> None:
    """A circuit flow beyond the pump's curve leaves no flow, which is no fault of the blocks behind it."""
    case = load_case(EXAMPLES / "workshop-water-blocks.toml")
    found = doubt(only(case, {"hot.circuit_flow": {"uniform": ["-1 L/min", "4 L/min"]}}), samples=256)
    ((reason, count),) = found.invalid.items()
    assert "hot.drive_curve" in reason
    assert count == pytest.approx(256 * 2.0 / 5.0, abs=2)  # the curve ends at 16 L/min, 2 above the stated 14


@pytest.mark.parametrize(("samples", "seed", "message"), [(1000, 1, "power of two"), (32, 1, "64"), (256, -1, "seed")])
def test_wrong_numbers_are_refused(samples: int, seed: int, message: str) -> None:
    with pytest.raises(InputError, match=message):
        doubt(load_case(LOOP), samples, seed)


def test_nothing_in_doubt_and_no_answer_are_told() -> None:
    with pytest.raises(InputError, match="no field is in doubt"):
        doubt(only(load_case(LOOP), {}))
    with pytest.raises(NoAnswerError, match="no answer as it stands"):
        doubt(load_case(LOOP, ['hot.inlet_temperature="120 degC"']))


def test_few_fluids_are_made_and_their_rounding_does_not_show(monkeypatch: pytest.MonkeyPatch) -> None:
    """Air of an exhaust that follows from flows of gas and fuel, all of them different."""
    text = EXHAUST.read_text("utf-8").replace("excess_air_ratio = 1.6", 'fuel_flow = "3.7 g/s"')
    case = read_case(text)
    inputs = tuple(each for each in drawn_inputs(case)[0] if each.path in ("hot.mass_flow", "hot.fuel_flow"))
    assert len(inputs) == 2
    points = probabilities(2, 64, seed=3)
    values = np.stack([each.values(row) for each, row in zip(inputs, points, strict=True)])
    asked: list[Batch] = []

    def recorded(batch: Batch, *, without_load: bool) -> Any:
        asked.append(batch)
        return search_batch(batch, without_load=without_load)

    monkeypatch.setattr(doubting, "search_batch", recorded)
    found = answered(case, inputs, values)
    assert len(np.unique(asked[0].varied["hot.excess_air_ratio"])) < 40
    exact = search_batch(Batch(case, 64, {each.path: row for each, row in zip(inputs, values, strict=True)}))
    apart = found.scalars["net_power"] - exact.scalars["net_power"]
    assert np.abs(apart).max() < 0.02 * np.ptp(exact.scalars["net_power"])


def test_compositions_are_drawn_in_few_steps_with_the_same_spread() -> None:
    """Steps of a twelfth of the 95 % range add a variance of step^2/12, under 1 % of the whole."""
    drawn = Drawn("hot.volume_fraction", 0.5, Tolerance(NORMAL, -0.04, 0.04), "given", "")
    values = drawn.values(probabilities(1, 4096, seed=1)[0])
    stepped = drawn.in_steps(values)
    assert len(np.unique(stepped)) < 30 and 0.5 in stepped
    step = 0.08 / 12
    assert np.abs(stepped - values).max() <= 0.5 * step * (1 + 1e-9)
    assert stepped.var() == pytest.approx(values.var() + step**2 / 12, rel=3e-3)
    flow = Drawn("hot.volume_flow", 1e-3, Tolerance(NORMAL, -0.05, 0.05, relative=True), "given", "")
    assert flow.in_steps(values) is values


def test_chances_that_were_not_met_are_not_called_impossible() -> None:
    assert chance_text(0.0, 4096) == "in none of 4,096 cases"
    assert chance_text(1.0, 64) == "in all of 64 cases"
    assert chance_text(0.0002, 4096) == "with a chance below 0.1 %"
    assert chance_text(0.123, 4096) == "with a chance of 12.3 %"


# ---- The command


def run(*arguments: str) -> Result:
    return CliRunner().invoke(cli, ["doubt", *arguments])


def test_the_command_answers_first_and_names_origin_and_source() -> None:
    result = run(str(EXAMPLES / "hot-spring.toml"), "--samples", "256", "--set", 'uncertainty.hot.fouling="20 %"')
    assert result.exit_code == 0, result.output
    lines = result.stdout.splitlines()
    assert lines[3].startswith("Net power lies between")
    (stated,) = [line for line in lines if line.split()[:1] == ["hot.fouling"]]
    assert "+- 20 %" in stated and "given" in stated
    assert "Wang et al. 2013, from memory" in " ".join(result.stdout.split())
    assert "scrambled Sobol sequence, seed 1" in result.stdout


def test_the_document_has_units_and_no_sample() -> None:
    result = run(str(LOOP), "--json", "--samples", "64", "--seed", "3")
    document = json.loads(result.stdout)
    assert document["seed"] == 3 and document["samples"] == 64
    assert {item.name for item in dataclasses.fields(Doubt)} - {"net_power_sample"} <= set(document)
    assert "net_power_sample" not in document
    assert document["units"]["hot_outlet_temperature"] == "K" and document["units"]["swing"] == "W"
    assert set(document["results"]) <= set(document["units"])
    flow = next(each for each in document["inputs"] if each["field"] == "hot.volume_flow")
    assert flow["unit"] == "m^3/s" and flow["nominal"] == pytest.approx(0.00125)


def test_a_plot_is_the_same_each_time(tmp_path: Path) -> None:
    pytest.importorskip("matplotlib")
    for name in ("a.svg", "b.svg"):
        assert run(str(LOOP), "--samples", "64", "--plot", str(tmp_path / name)).exit_code == 0
    drawn = (tmp_path / "a.svg").read_bytes()
    assert drawn == (tmp_path / "b.svg").read_bytes()
    for word in ("P10", "P50", "P90", "net power [W]", "module.seebeck_factor"):
        assert word in drawn.decode()


@pytest.mark.parametrize(
    ("arguments", "code"),
    [(["--help"], 0), ([str(LOOP), "--samples", "many"], 2), ([str(LOOP), "--samples", "100"], 2), (["no.toml"], 2)],
    ids=["help", "usage", "samples", "file"],
)
def test_help_and_wrong_input_load_nothing_heavy(arguments: list[str], code: int) -> None:
    program = (
        "import sys\nfrom harvest.cli import cli\n"
        f"try:\n    cli(['doubt', *{arguments!r}])\nexcept SystemExit as end:\n    code = end.code\n"
        "print(code, *sorted({'scipy', 'CoolProp', 'pint', 'matplotlib'} & set(sys.modules)), file=sys.stderr)"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert done.stderr.splitlines()[-1] == str(code)
