"""A module from its ratings: extractions and their inverses, rated points, case files, and what an estimate says."""

from __future__ import annotations

from dataclasses import replace as with_fields
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq, minimize_scalar

from harvest.errors import CaseError, InputError
from harvest.model.batch import Batch
from harvest.model.case import case_hash, explain, value_at
from harvest.model.estimate import estimate, estimate_batch
from harvest.model.materials import load_material
from harvest.model.module import described_module
from harvest.model.rated_module import cooler_heat_disagreement, cooler_matched_powers
from harvest.model.reading import case_from, load_case, read_case, replace
from harvest.model.stack_sections import GeneratorRating
from harvest.physics.arrays import FloatArray
from harvest.physics.curves import HeldCurve, PolynomialCurve, TableCurve
from harvest.physics.ratings import (
    ELECTRICAL_RATINGS,
    cooler_maximum_heat,
    cooler_parameters_by_heat,
    cooler_parameters_by_voltage,
    cooler_ratings,
    generator_parameters,
    generator_ratings,
    generator_voltage_and_resistance,
    largest_matched_efficiency,
    temperature_line,
)
from harvest.physics.thermoelectrics import LegModule, efficiency_at_load_ratio, figure_of_merit, maximum_efficiency
from harvest.report.terminal import check_report
from tests.case_texts import BETWEEN_PLATES

ROOT = Path(__file__).parent.parent


def one(value: float) -> FloatArray:
    return np.array([value])


# ---- Physics

seebecks = st.floats(1e-3, 1.0)
resistances = st.floats(1e-3, 1e3)
merits = st.floats(0.05, 2.5)
hot_temperatures = st.floats(250.0, 600.0)


@settings(max_examples=60, deadline=None)
@given(seebecks, resistances, merits, hot_temperatures)
def test_cooler_ratings_and_back(a: float, r: float, merit: float, hot: float) -> None:
    k = a * a * hot / (r * merit)
    ratings = cooler_ratings(one(a), one(r), one(k), one(hot))
    current, voltage, difference, heat = ratings
    for found in (
        cooler_parameters_by_voltage(current, voltage, difference, one(hot)),
        cooler_parameters_by_heat(current, heat, difference, one(hot)),
    ):
        np.testing.assert_allclose(np.concatenate(found), [a, r, k], rtol=1e-9)
    np.testing.assert_allclose(cooler_maximum_heat(current, voltage, difference, one(hot)), heat, rtol=1e-12)


@settings(max_examples=30, deadline=None)
@given(seebecks, resistances, merits, hot_temperatures)
def test_cooler_ratings_are_the_extremes_of_the_heat_balance(a: float, r: float, merit: float, hot: float) -> None:
    """Search the coldest temperature that a current reaches without heat, by the equations of a cooler alone."""
    k = a * a * hot / (r * merit)

    def coldest(current: float) -> float:  # a Tc I - I^2 R/2 - K (Th - Tc) = 0
        return (0.5 * current**2 * r + k * hot) / (a * current + k)

    found = minimize_scalar(coldest, bounds=(0.0, 2.0 * a * hot / r), method="bounded", options={"xatol": 1e-12})
    ratings = cooler_ratings(one(a), one(r), one(k), one(hot))
    assert ratings.maximum_temperature_difference[0] == pytest.approx(hot - coldest(found.x), rel=1e-6)
    assert ratings.maximum_current[0] == pytest.approx(found.x, rel=1e-3)
    emf = a * ratings.maximum_temperature_difference[0]
    assert ratings.maximum_voltage[0] == pytest.approx(emf + ratings.maximum_current[0] * r, rel=1e-12)
    current = ratings.maximum_current[0]
    assert ratings.maximum_heat[0] == pytest.approx(a * hot * current - 0.5 * current**2 * r, rel=1e-12)


PAIRS = [
    (first, second)
    for first in ELECTRICAL_RATINGS
    for second in ELECTRICAL_RATINGS[ELECTRICAL_RATINGS.index(first) + 1 :]
    if {first, second} != {"matched_voltage", "open_circuit_voltage"}
]


@settings(max_examples=60, deadline=None)
@given(
    seebecks,
    resistances,
    merits,
    hot_temperatures,
    st.floats(5.0, 200.0),
    st.sampled_from([*PAIRS, ELECTRICAL_RATINGS]),
    st.sampled_from(["efficiency", "heat_flow", "both"]),
)
def test_generator_ratings_and_back(
    a: float, r: float, merit: float, hot: float, difference: float, names: tuple[str, ...], heat: str
) -> None:
    cold = hot - difference
    k = a * a * 0.5 * (hot + cold) / (r * merit)
    ratings = generator_ratings(one(a), one(r), one(k), one(hot), one(cold))._asdict()
    told = {name: ratings[name] for name in names}
    told |= {name: ratings[name] for name in (("efficiency", "heat_flow") if heat == "both" else (heat,))}
    found = generator_parameters(one(hot), one(cold), **told)
    np.testing.assert_allclose(np.concatenate(found), [a, r, k], rtol=1e-9)
    assumed = generator_parameters(one(hot), one(cold), **{n: ratings[n] for n in names}, figure_of_merit=one(merit))
    np.testing.assert_allclose(np.concatenate(assumed), [a, r, k], rtol=1e-9)
    # the textbook's efficiencies: at load ratio 1, below the maximum and below what no module reaches
    z = one(merit)
    assert ratings["efficiency"][0] == pytest.approx(
        efficiency_at_load_ratio(z, one(hot), one(cold), one(1.0))[0], rel=1e-11
    )
    assert ratings["efficiency"][0] <= maximum_efficiency(z, one(hot), one(cold))[0]
    assert ratings["efficiency"][0] < largest_matched_efficiency(one(hot), one(cold))[0]


def test_numbers_that_are_too_few_determine_nothing() -> None:
    alone = np.full((5, 7), np.nan)
    alone[range(5), range(5)] = 1.0
    alone[[1, 3], 5] = 1.0  # two voltages
    fit = generator_voltage_and_resistance(alone)
    assert np.isnan(fit.resistance).all() and np.isnan(fit.open_circuit_voltage).all()


def test_redundant_numbers_are_reconciled_in_relative_terms() -> None:
    given_numbers = np.full((5, 1), np.nan)
    given_numbers[:3, 0] = 10.0 * 1.03, 4.0, 2.5
    fit = generator_voltage_and_resistance(given_numbers)
    # by hand: of P = V I with ln P off by d, least squares shifts ln V and ln I by d/3 and ln P by -d/3
    third = np.log(1.03) / 3.0
    assert fit.open_circuit_voltage[0] == pytest.approx(8.0 * np.exp(third), rel=1e-12)
    assert fit.resistance[0] == pytest.approx(1.6, rel=1e-12)
    np.testing.assert_allclose(fit.implied[:3, 0], [10.0, 4.0 * 1.03, 2.5 * 1.03], rtol=1e-12)


@settings(max_examples=50, deadline=None)
@given(
    st.lists(st.floats(250.0, 600.0), min_size=2, max_size=6, unique_by=round),
    st.floats(0.1, 10.0),
    st.floats(-1e-3, 1e-2),
)
def test_points_on_a_line_give_the_line_held_beyond(at: list[float], value: float, slope: float) -> None:
    temperatures = np.array(at)
    values = value * (1.0 + slope * (temperatures - 250.0))
    line = temperature_line(temperatures, values)
    if np.ptp(temperatures) < 10.0:
        assert isinstance(line.curve, PolynomialCurve)
        return
    assert line.largest_residual < 1e-9
    beyond = np.array([temperatures.min() - 50.0, *at, temperatures.max() + 50.0])
    held = np.clip(beyond, temperatures.min(), temperatures.max())
    np.testing.assert_allclose(line.curve.value_and_slope(beyond)[0], value * (1.0 + slope * (held - 250.0)), rtol=1e-9)


def test_points_at_one_mean_temperature_give_the_relative_mean() -> None:
    line = temperature_line(np.array([400.0, 401.0, 402.0]), np.array([2.0, np.nan, 4.0]))
    value, slope = line.curve.value_and_slope(one(500.0))
    # least of (v/2 - 1)^2 + (v/4 - 1)^2 is at v = (1/2 + 1/4)/(1/4 + 1/16)
    assert value[0] == pytest.approx(2.4, rel=1e-12) and slope[0] == 0.0
    assert line.largest_residual == pytest.approx(0.4, rel=1e-12)


def test_a_held_curve_is_constant_beyond_its_range() -> None:
    curve = HeldCurve(PolynomialCurve(np.array([[1.0], [2.0]]), 0.0), 200.0, 450.0)
    value, slope = curve.value_and_slope(np.array([100.0, 200.0, 300.0, 450.0, 900.0]))
    np.testing.assert_array_equal(value, [401.0, 401.0, 601.0, 901.0, 901.0])
    np.testing.assert_array_equal(slope, [0.0, 2.0, 2.0, 2.0, 0.0])
    table = HeldCurve(TableCurve(np.array([0.0, 1.0]), np.array([1.0, 2.0])), 0.2, 0.8)
    assert table.take(np.array([0])).value_and_slope(one(5.0))[0][0] == pytest.approx(1.8)


# ---- Case files

START = 'title = "invented"\n' + BETWEEN_PLATES + 'footprint = ["40 mm", "40 mm"]\n'
COOLER = (
    START
    + """\
[module.cooler_rating]
maximum_current = "7.6 A"
maximum_voltage = "15.9 V"
maximum_temperature_difference = "70 K"
maximum_heat = "75 W"
hot_side_temperature = "300 K"
"""
)
POINT = """\
[[module.generator_rating]]
hot_face_temperature = "250 degC"
cold_face_temperature = "30 degC"
matched_power = "10 W"
matched_voltage = "4 V"
efficiency = 0.045
"""
SECOND = """\
[[module.generator_rating]]   # a cooler point
hot_face_temperature = "150 degC"
cold_face_temperature = "30 degC"
open_circuit_voltage = "4.6 V"
internal_resistance = "1.45 ohm"
heat_flow = "105 W"
"""
GENERATOR = START + POINT


def faults(text: str, *overrides: str) -> tuple[str, ...]:
    with pytest.raises(CaseError) as caught:
        read_case(text, overrides, label="case.toml")
    assert all("\n" not in fault for fault in caught.value.faults)
    return caught.value.faults


def parameters(text: str, hot: float, cold: float, *overrides: str) -> list[float]:
    model = described_module(Batch(read_case(text, overrides))).model
    return [float(each[0]) for each in model.parameters(one(hot), one(cold))[:3]]


def test_a_cooler_has_its_rated_parameters_at_its_rating() -> None:
    assert parameters(COOLER, 300.0, 230.0) == pytest.approx([0.0530, 1.604, 1 / 1.511], rel=3.5e-4)
    zhang = "module.cooler_rating.extraction=Zhang"
    assert parameters(COOLER, 300.0, 230.0, zhang) == pytest.approx([0.05334, 1.6143, 1 / 1.5014], rel=1e-4)
    as_rated = parameters(COOLER, 423.15, 323.15, "module.cooler_rating.temperature_dependence=none")
    assert as_rated == pytest.approx([0.0530, 1.604, 1 / 1.511], rel=3.5e-4)
    disagreement = cooler_heat_disagreement(Batch(read_case(COOLER)))[0]
    assert disagreement == pytest.approx(75.0 / 74.518 - 1.0, rel=1e-4)
    assert disagreement == pytest.approx(0.05334 / 0.0530 - 1.0, abs=1e-4)


def cooler_of_legs(hot: float) -> tuple[LegModule, dict[str, str]]:
    """A module of legs, and the ratings that somebody who drives it as a cooler would measure."""
    n_type, p_type = (load_material(f"bismuth telluride {kind}").material for kind in "np")
    legs = LegModule(n_type, p_type, one(127.0), one(1.6e-3), one(1.96e-6), one(0.0), one(0.0))

    def at(cold: float) -> list[float]:
        return [float(each[0]) for each in legs.parameters(one(hot), one(cold))[:3]]

    def heat(current: float, cold: float) -> float:
        a, r, k = at(cold)
        return a * cold * current - 0.5 * current**2 * r - k * (hot - cold)

    def coldest(current: float) -> float:
        return float(brentq(lambda cold: heat(current, cold), 150.0, hot))

    current = float(minimize_scalar(coldest, bounds=(2.0, 12.0), method="bounded").x)
    cold = coldest(current)
    a, r, _ = at(cold)
    return legs, {
        "maximum_current": f"{current!r} A",
        "maximum_voltage": f"{a * (hot - cold) + current * r!r} V",
        "maximum_temperature_difference": f"{hot - cold!r} K",
        "maximum_heat": f"{heat(current, hot - 1e-9)!r} W",
        "hot_side_temperature": f"{hot!r} K",
    }


@pytest.mark.parametrize(("rated", "flattery"), [(300.15, (0.20, 0.30)), (323.15, (0.18, 0.25))])
def test_a_cooler_is_brought_from_its_rating_to_where_it_works(rated: float, flattery: tuple[float, float]) -> None:
    legs, ratings = cooler_of_legs(rated)
    overrides = [f"module.cooler_rating.{name}={value}" for name, value in ratings.items()]
    batch = Batch(read_case(COOLER, overrides))
    hot, cold = one(423.15), one(323.15)
    a, r, k = (float(each[0]) for each in legs.parameters(hot, cold)[:3])
    truth = (a * 100.0) ** 2 / (4.0 * r)
    corrected, uncorrected = (float(each[0]) for each in cooler_matched_powers(batch, hot, cold))
    assert corrected == pytest.approx(truth, rel=1e-6)
    assert flattery[0] < uncorrected / truth - 1.0 < flattery[1]
    model = described_module(batch).model
    assert [float(each[0]) for each in model.parameters(hot, cold)[:3]] == pytest.approx([a, r, k], rel=1e-6)


def test_the_slopes_of_a_cooler_are_those_of_its_parameters() -> None:
    model = described_module(Batch(read_case(COOLER))).model
    for hot, cold in ((423.15, 323.15), (480.0, 440.0), (600.0, 500.0)):
        found = model.parameters(one(hot), one(cold))
        above, below = (model.parameters(one(hot + d), one(cold + d)) for d in (1e-4, -1e-4))
        for value in range(3):
            slope = (above[value][0] - below[value][0]) / 2e-4
            assert found[value + 3][0] == pytest.approx(slope, rel=1e-5, abs=1e-8)
    held, beyond = model.parameters(one(500.0), one(480.0)), model.parameters(one(900.0), one(800.0))
    np.testing.assert_allclose(np.stack(held), np.stack(beyond))


def test_an_estimate_says_where_a_cooler_comes_from_and_what_the_correction_does() -> None:
    answer = estimate(read_case(COOLER))
    assert answer.valid
    said = next(each for each in answer.sources if each.startswith("module: "))
    assert said.startswith("module: from cooler ratings at 26.9 degC (Lineykin and Ben-Yaakov), two extractions 0.6 %")
    assert "bismuth telluride" in said and said.endswith("as given in the case")
    assert sum(each.startswith("material bismuth telluride") for each in answer.sources) == 2
    checks = {each.name: each for each in answer.checks}
    assert checks["module data, heat rating"].status == "pass"
    flattery = checks["module data, rating temperature"]
    assert flattery.status == "warn" and 0.15 < flattery.value < 0.30 and "the first are used" in flattery.text
    solder = checks["module data, solder"]
    assert solder.status == "warn" and "138.0 degC" in solder.text and solder.limit == pytest.approx(383.15)
    uncorrected = estimate(read_case(COOLER, ["module.cooler_rating.temperature_dependence=none"]))
    assert uncorrected.generated_power > 1.1 * answer.generated_power
    told = next(each for each in uncorrected.checks if each.name == "module data, rating temperature")
    assert told.status == "warn" and "the second are used" in told.text
    assert any("without temperature dependence" in each for each in uncorrected.sources)


def test_without_a_temperature_difference_nothing_is_compared() -> None:
    answer = estimate(read_case(COOLER, ["hot.inlet_temperature=50 degC"]))
    assert answer.valid
    check = next(each for each in answer.checks if each.name == "module data, rating temperature")
    assert (check.status, check.value) == ("pass", 0.0) and "nan" not in check.text


def test_a_heat_rating_that_disagrees_is_a_warning() -> None:
    case = read_case(COOLER, ["module.cooler_rating.maximum_heat=82 W"])
    assert "differs by +10.0 %" in described_module(Batch(case)).warnings[0]
    check = next(each for each in estimate(case).checks if each.name == "module data, heat rating")
    assert check.status == "warn" and check.value == pytest.approx(82.0 / 74.518 - 1.0, rel=1e-4)
    without = read_case(COOLER.replace('maximum_heat = "75 W"\n', ""))
    assert described_module(Batch(without)).warnings == ()
    assert "no fourth rating" in described_module(Batch(without)).provenance
    assert "module data, heat rating" not in {each.name for each in estimate(without).checks}


def test_a_batch_of_coolers_gives_what_each_gives_alone() -> None:
    case = read_case(COOLER)
    varied = {
        "module.cooler_rating.maximum_current": np.array([7.6, 6.0, 7.6, 7.6]),
        "module.cooler_rating.hot_side_temperature": np.array([300.0, 323.15, 250.0, 300.0]),
        "module.cooler_rating.maximum_temperature_difference": np.array([70.0, 75.0, 60.0, 310.0]),
        "module.cooler_rating.maximum_heat": np.array([75.0, 60.0, 90.0, 75.0]),
    }
    answers = estimate_batch(Batch(case, 4, varied))
    assert list(answers.valid) == [True, True, True, False]
    assert "310 K is not below the hot_side_temperature of 300 K" in answers.problem[3]
    for index in range(3):
        alone = estimate(replace(case, {path: float(values[index]) for path, values in varied.items()}))
        for name in ("generated_power", "hot_heat_flow", "voltage", "internal_resistance"):
            assert answers.scalars[name][index] == pytest.approx(getattr(alone, name), rel=1e-9)
        for check in answers.checks:
            if check.name.startswith("module data"):
                same = next(each for each in alone.checks if each.name == check.name)
                assert check.of(index).status == same.status
                assert check.of(index).value == pytest.approx(same.value, rel=1e-9)


def test_one_rated_point_gives_constants() -> None:
    case = read_case(GENERATOR)
    assert case.module.generator_rating == (
        GeneratorRating(
            hot_face_temperature=523.15,
            cold_face_temperature=303.15,
            matched_power=10.0,
            matched_voltage=4.0,
            matched_current=None,
            open_circuit_voltage=None,
            internal_resistance=None,
            efficiency=0.045,
            heat_flow=None,
        ),
    )
    assert parameters(GENERATOR, 350.0, 300.0) == pytest.approx([0.036364, 1.6, 0.81665], rel=1.3e-5)
    module = described_module(Batch(case))
    assert module.way == "generator ratings" and (module.lower, module.upper) == (303.15, 523.15)
    assert "at 250/30 degC" in module.provenance and "without temperature dependence" in module.provenance
    assert any("module: from generator ratings at 250/30 degC" in each for each in estimate(case).sources)
    assert "module data, rated points" not in {each.name for each in estimate(case).checks}


def test_points_at_several_temperatures_give_lines() -> None:
    text = GENERATOR + SECOND
    # at each point's own faces the parameters are those of the point alone
    alone = parameters(START + SECOND, 300.0, 300.0)
    assert alone[:2] == pytest.approx([4.6 / 120.0, 1.45], rel=1e-12)
    assert parameters(text, 423.15, 303.15) == pytest.approx(alone, rel=1e-9)
    assert parameters(text, 523.15, 303.15) == pytest.approx([0.036364, 1.6, 0.81665], rel=1.3e-5)
    half = parameters(text, 473.15, 303.15)
    assert half == pytest.approx([0.5 * (x + y) for x, y in zip(alone, [8 / 220, 1.6, 0.81665], strict=True)], rel=1e-5)
    module = described_module(Batch(read_case(text)))
    assert "straight lines in mean temperature from 90.0 degC to 140.0 degC" in module.provenance
    check = next(each for each in estimate(read_case(text)).checks if each.name == "module data, rated points")
    assert check.status == "pass" and check.value < 1e-9


def test_a_stated_merit_gives_the_conductance_and_can_vary() -> None:
    text = GENERATOR.replace("efficiency = 0.045\n", "")
    assert "no point has one or a heat_flow, so the conductance is unknown" in faults(text)[0]
    case = read_case(text, ["module.figure_of_merit=0.7"])
    a, r, k = parameters(text, 523.15, 303.15, "module.figure_of_merit=0.7")
    assert float(figure_of_merit(one(a), one(r), one(k))[0]) * 413.15 == pytest.approx(0.7, rel=1e-12)
    assert "conductance from an assumed Z T of 0.7" in described_module(Batch(case)).provenance
    merits = np.array([0.7, 0.5, 0.9])
    answers = estimate_batch(Batch(case, 3, {"module.figure_of_merit": merits}))
    for index, merit in enumerate(merits):
        alone = estimate(replace(case, {"module.figure_of_merit": float(merit)}))
        assert answers.scalars["generated_power"][index] == pytest.approx(alone.generated_power, rel=1e-9)
    assert np.all(np.diff(answers.scalars["hot_heat_flow"][[2, 0, 1]]) > 0)


BAD: list[tuple[str, str, str, str]] = [
    # text, what stands in it, what is written instead, the fault after line and field
    (
        COOLER,
        '"70 K"',
        '"301 K"',
        "maximum_temperature_difference: 301 K is not below the hot_side_temperature of 300 K",
    ),
    (COOLER, '"70 K"', '"160 K"', "maximum_temperature_difference: 160 K below 300 K asks for Z T = 4.90 there"),
    (COOLER, '"75 W"', '"750 W"', "maximum_heat: 750.0 W does not belong to the other three ratings, which imply 74.5"),
    (COOLER, '"7.6 A"', "7.6", "maximum_current: 7.6 has no unit"),
    (COOLER, '"7.6 A"', '"-7.6 A"', "maximum_current: "),
    (COOLER, 'maximum_heat = "75 W"', 'extraction = "Zhang"', "maximum_heat: is missing"),
    (COOLER, 'maximum_heat = "75 W"', 'extraction = "Zang"', "extraction: "),
    (
        COOLER,
        'maximum_heat = "75 W"',
        'maximum_heet = "75 W"',
        "maximum_heet: unknown field; did you mean maximum_heat?",
    ),
    (GENERATOR, '"10 W"', '"10 V"', "[1].matched_power: "),
    (GENERATOR, "efficiency = 0.045", "effciency = 0.045", "[1].effciency: unknown field; did you mean efficiency?"),
    (GENERATOR, "efficiency = 0.045", "efficiency = 0.5", "[1].efficiency: 0.5 is not below the Carnot efficiency"),
    (GENERATOR, "efficiency = 0.045", "efficiency = 0.3", "[1].efficiency: 0.3 is not below 0.235, which"),
    (GENERATOR, "efficiency = 0.045", "efficiency = 0.2", "[1].efficiency: asks for Z T = "),
    (GENERATOR, "efficiency = 0.045", 'heat_flow = "40 W"', "[1].heat_flow: 40.00 W is not above the 42.56 W"),
    (GENERATOR, "efficiency = 0.045", 'heat_flow = "50 W"', "[1].heat_flow: asks for Z T = "),
    (GENERATOR, '"250 degC"', '"30 degC"', "[1].hot_face_temperature: 30.0 degC is not above the cold face"),
    (GENERATOR, '"250 degC"', '"30 degC"', "is not above the cold face at 30.0 degC; correct one"),
    (GENERATOR, '"250 degC"', '"20 degC"', "is not above the cold face at 30.0 degC; swap them or correct one"),
    (GENERATOR, 'matched_voltage = "4 V"', 'internal_resistance = "1.6 V"', "[1].internal_resistance: "),
]


@pytest.mark.parametrize(("text", "old", "new", "message"), BAD)
def test_a_contradiction_is_refused_where_it_stands(text: str, old: str, new: str, message: str) -> None:
    changed = text.replace(old, new, 1)
    assert changed != text
    found = [fault for fault in faults(changed) if message in fault]
    assert len(found) == 1, faults(changed)
    section = "module.cooler_rating." if text == COOLER else "module.generator_rating"
    line = next(number for number, each in enumerate(changed.splitlines(), 1) if new in each)
    place = 18 if "is missing" in message else line
    assert found[0].startswith(f"case.toml:{place}: {section}")


def without_heat(*lines: str) -> str:
    electrical = 'matched_power = "10 W"\nmatched_voltage = "4 V"\n'
    return GENERATOR.replace(electrical, "".join(f"{line}\n" for line in lines))


@pytest.mark.parametrize(
    ("lines", "message"),
    [
        (['matched_current = "2.5 A"'], "matched_current: stands without a voltage"),
        (['matched_voltage = "4 V"', 'open_circuit_voltage = "8 V"'], "matched_power: is missing; a voltage alone"),
        (['matched_power = "10 W"'], "matched_voltage: is missing; two of matched_power"),
        ([], "matched_voltage: is missing; two of matched_power"),
        (
            ['matched_power = "12 W"', 'open_circuit_voltage = "8 V"', 'internal_resistance = "1.6 ohm"'],
            "matched_power: 12.00 W is above 10.00 W, the most that the open-circuit voltage E",
        ),
        (
            ['matched_power = "10 W"', 'matched_voltage = "4 V"', 'open_circuit_voltage = "6 V"'],
            "matched_voltage: 4.000 V contradicts the other numbers of the point, from which 3.000 V follows",
        ),
    ],
)
def test_electrical_numbers_that_are_too_few_or_contradict(lines: list[str], message: str) -> None:
    found = faults(without_heat(*lines))
    assert len(found) == 1 and f"module.generator_rating[1].{message}" in found[0]


def test_small_disagreement_is_rounding() -> None:
    text = without_heat('matched_power = "10.2 W"', 'open_circuit_voltage = "8 V"', 'internal_resistance = "1.6 ohm"')
    assert "redundant numbers within 2.0 %" in described_module(Batch(read_case(text))).provenance


def test_each_point_has_its_faults_with_its_lines() -> None:
    text = GENERATOR + SECOND.replace('"105 W"', '"5 W"').replace('"1.45 ohm"', '"1.45 K"')
    found = faults(text)
    assert found[0].startswith("case.toml:28: module.generator_rating[2].internal_resistance: ")
    found = faults(GENERATOR.replace("0.045", "0.5") + SECOND.replace('"105 W"', '"5 W"'))
    assert [each.partition(": ")[0] for each in found] == ["case.toml:23", "case.toml:29"]
    assert "module.generator_rating[1].efficiency" in found[0] and "module.generator_rating[2].heat_flow" in found[1]
    inline = START + 'generator_rating = [{ hot_face_temperature = "250 degC", matched_power = 3 }]\n'
    assert all(each.startswith("case.toml:18: module.generator_rating[1].") for each in faults(inline))
    far = SECOND.replace('"1.45 ohm"', '"4 ohm"').replace('"150 degC"', '"240 degC"')
    assert "they cannot be of one module" in faults(GENERATOR + far)[0]


@pytest.mark.parametrize("value", ["3", "[]", "[3]", "{}", '"text"', "[{}, 3]"])
def test_what_is_no_list_of_tables_is_refused(value: str) -> None:
    found = faults(f"{START}generator_rating = {value}\n")
    assert len(found) == 1 and "is a list of tables; write [[module.generator_rating]]" in found[0]


def test_a_module_is_described_in_one_way() -> None:
    assert faults(COOLER + POINT)[0] == (
        "case.toml:24: module.generator_rating: is given beside [module.cooler_rating]; describe the module in one way"
    )
    curve = 'seebeck = "0.05 V/K"\n'
    assert (
        "module.seebeck: is given beside [module.cooler_rating]"
        in faults(COOLER.replace("[module.cooler_rating]", f"{curve}[module.cooler_rating]"))[0]
    )
    assert "is used with [[module.generator_rating]] only" in faults(COOLER, "module.figure_of_merit=0.7")[0]
    assert "leave one out" in faults(GENERATOR, "module.figure_of_merit=0.7")[0]
    no_heat = GENERATOR.replace("efficiency = 0.045\n", "")
    assert "3.5 is above 3; no module comes near it" in faults(no_heat, "module.figure_of_merit=3.5")[0]


def test_options_reach_into_ratings() -> None:
    case = read_case(COOLER, ["module.cooler_rating.maximum_current=6 A"])
    assert case.module.cooler_rating is not None and case.module.cooler_rating.maximum_current == 6.0
    text = GENERATOR + SECOND
    case = read_case(
        text, ["module.generator_rating[2].heat_flow=110 W", "module.generator_rating[1].efficiency=4.4 %"]
    )
    assert value_at(case, "module.generator_rating.heat_flow") == (None, 110.0)
    assert value_at(case, "module.generator_rating.efficiency") == (pytest.approx(0.044), None)
    assert value_at(case, "module.generator_rating.matched_current") is None
    found = faults(text, "module.generator_rating[1].efficiency=0.5")
    assert found[0].startswith("--set module.generator_rating[1].efficiency: 0.5 is not below the Carnot")
    for path in ("module.generator_rating[3].efficiency", "module.generator_rating.efficiency"):
        assert "is not a table in the case" in faults(text, f"{path}=0.05")[0]
    assert "unknown field" in faults(text, "module.generator_rating[1].effciency=0.05")[0]


def test_points_can_be_put_back_and_count_in_the_hash() -> None:
    case = read_case(GENERATOR + SECOND)
    points = case.module.generator_rating
    assert points is not None
    assert replace(case, {"module.generator_rating": points}) == case
    other = replace(case, {"module.generator_rating": (points[0], with_fields(points[1], heat_flow=106.0))})
    assert case_hash(other) != case_hash(case)
    assert case_hash(read_case(GENERATOR + SECOND.replace('"105 W"', '"0.105 kW"'))) == case_hash(case)
    with pytest.raises(InputError, match="is not a single number, so it cannot vary"):
        Batch(case, 2, {"module.generator_rating.heat_flow": np.array([105.0, 110.0])})


def test_a_record_gives_way_to_what_the_case_says() -> None:
    record = START.replace('footprint = ["40 mm", "40 mm"]\n', 'use = "demo-cooler-40"\n')
    case = read_case(record, ["module.cooler_rating.maximum_current=5.9 A"])
    assert case.module.cooler_rating is not None
    assert (case.module.cooler_rating.maximum_current, case.module.cooler_rating.maximum_voltage) == (5.9, 15.3)
    assert read_case(record + POINT).module.cooler_rating is None
    said = next(each for each in estimate(case).sources if each.startswith("module: "))
    assert said.endswith("invented ratings of a single-stage bismuth telluride cooler")
    legs = record.replace("demo-cooler-40", "demo-bismuth-telluride-40")
    assert read_case(legs + POINT).module.legs is None


def test_ratings_are_explained() -> None:
    assert "fields: maximum_current, maximum_voltage" in explain("module.cooler_rating")
    assert "write: [[module.generator_rating]]" in explain("generator_rating")
    assert "without load at these face temperatures" in explain("module.generator_rating.open_circuit_voltage")


def test_the_example_is_sound() -> None:
    case = load_case(ROOT / "examples" / "cooler-from-the-drawer.toml")
    answer = estimate(case)
    assert answer.valid and answer.net_power > 0 and not [each for each in answer.checks if each.status == "fail"]


@settings(max_examples=100, deadline=None)
@given(
    st.lists(
        st.fixed_dictionaries(
            {"hot": st.floats(300.0, 600.0), "cold": st.floats(250.0, 500.0)},
            optional={name: st.floats(1e-3, 1e3) for name in (*ELECTRICAL_RATINGS, "heat_flow", "efficiency")},
        ),
        min_size=1,
        max_size=4,
    )
)
def test_any_points_give_a_sound_module_or_faults(points: list[dict[str, Any]]) -> None:
    units = dict(zip(ELECTRICAL_RATINGS, ("W", "V", "A", "V", "ohm"), strict=True)) | {"heat_flow": "W"}
    tables = []
    for point in points:
        table = {f"{side}_face_temperature": f"{point[side]!r} K" for side in ("hot", "cold")}
        table |= {name: f"{value!r} {units.get(name, '')}".strip() for name, value in point.items() if name in units}
        if "efficiency" in point:
            table["efficiency"] = point["efficiency"] / 1e4
        tables.append(table)
    document = dict(read_case(GENERATOR).given)
    document["module"] = {"footprint": ["40 mm", "40 mm"], "generator_rating": tables}
    told = ""
    case = None
    try:
        case = case_from(document)
    except CaseError as error:
        told = "".join(error.faults)
    assert "\n" not in told
    if case is None:
        return
    temperatures = np.linspace(200.0, 700.0, 11)[:, None]
    found = described_module(Batch(case)).model.parameters(temperatures, temperatures)[:3]
    assert all(np.all(np.isfinite(each)) and np.all(each > 0) for each in found)


def test_a_check_tells_the_ratings_that_a_case_gives() -> None:
    rating = '[[module.generator_rating]]\nhot_face_temperature = "250 degC"\ncold_face_temperature = "30 degC"\n'
    rating += 'matched_power = "10 W"\nmatched_voltage = "4 V"\nefficiency = 0.045\n'
    report = check_report(read_case(START + rating))
    given = report.partition("Assumed")[0]
    assert "module.generator_rating.matched_power = 10.00 W" in given
    assert "module.generator_rating.efficiency = 0.045" in given
