"""A module from steady bench readings: intervals that hold, outliers that are named, sentences instead of nonsense."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.errors import CaseError, NoAnswerError
from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.physics.fluids import FluidSpec
from harvest.physics.thermoelectrics import cold_junction_heat, hot_junction_heat
from harvest.study.bench_record import (
    QUANTITIES,
    BenchRecord,
    fit_bench_record,
    read_bench_record,
)

EXAMPLE = Path(__file__).parents[1] / "examples" / "bench-record.csv"
TRUTH = np.array([0.05, 1.6, 0.7])
CENTRE = 380.0
SLOPES = np.array([2.5e-5, 4.8e-3, -7e-4])
CONSTANT_FLUID = FluidSpec("table", table=((300.0, 1000.0, 4000.0, 1e-3, 0.6),))

HEADER = "hot_face_temperature [degC], cold_face_temperature [degC], open_circuit_voltage [V], voltage [V], current [A]"


def conditions(readings: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Hot and cold face [K] and load resistance [ohm], none in step with another."""
    hot = np.resize([373.0, 403.0, 433.0, 463.0, 493.0, 513.0], readings)
    cold = np.resize([303.0, 308.0, 313.0, 323.0], readings)
    load = np.resize(np.repeat([1.0, 1.6, 2.5, 5.0], 6), readings)
    return hot, cold, load


def synthetic_record(
    generator: np.random.Generator,
    *,
    readings: int = 24,
    noise: float = 0.01,
    slopes: FloatArray | None = None,
    planted: int = 0,
    cold_heat: bool = False,
    by_load: bool = False,
    current_noise: float = 0.0,
) -> tuple[BenchRecord, set[tuple[int, str]]]:
    """Readings of a module that is known, with relative noise; lines and quantities of the outliers planted in it."""
    hot, cold, load = conditions(readings)
    mean = 0.5 * (hot + cold) - CENTRE
    a, r, k = TRUTH[:, None] + (np.zeros(3) if slopes is None else slopes)[:, None] * mean
    current = a * (hot - cold) / (r + load)
    true = np.stack(
        [
            a * (hot - cold),
            current * load,
            hot_junction_heat(a, r, k, hot, cold, current),
            cold_junction_heat(a, r, k, hot, cold, current),
        ]
    )
    measured = true * (1.0 + noise * generator.standard_normal(true.shape))
    kinds = 4 if cold_heat else 3
    wrong = generator.choice(kinds * readings, planted, replace=False)
    measured.flat[wrong] *= 1.0 + generator.uniform(0.15, 0.3, planted)
    lines = np.arange(readings) + 2
    current *= 1.0 + current_noise * generator.standard_normal(readings)
    nothing = np.full(readings, np.nan)
    record = BenchRecord(
        "bench.csv",
        lines,
        hot,
        cold,
        measured[0],
        measured[1],
        nothing if by_load else current,
        load if by_load else nothing,
        measured[2],
        measured[3] if cold_heat else nothing,
    )
    return record, {(int(lines[each % readings]), QUANTITIES[each // readings]) for each in wrong}


def taken(record: BenchRecord, which: IntArray) -> BenchRecord:
    columns: dict[str, Any] = {
        name: value[which] for name, value in vars(record).items() if isinstance(value, np.ndarray)
    }
    return replace(record, **columns)


def smallest_standard_errors(readings: int, noise: float) -> FloatArray:
    """Bound of Cramer and Rao for constant parameters, from the balance written out anew."""
    hot, cold, load = conditions(readings)
    a, r, _ = TRUTH
    current = a * (hot - cold) / (r + load)
    zero = np.zeros(readings)
    slopes = np.concatenate(
        [
            np.stack([hot - cold, zero, zero], axis=1),
            np.stack([hot - cold, -current, zero], axis=1),
            np.stack([hot * current, -(current**2) / 2, hot - cold], axis=1),
        ]
    )
    relative = slopes / (noise * (slopes @ TRUTH))[:, None]
    return np.asarray(np.sqrt(np.diag(np.linalg.inv(relative.T @ relative))))


class Tally:
    """What many seeds gave: coverage and mean half width of each parameter, outliers named and wrongly named,
    and how often the parameters were found to change with temperature.
    """

    def __init__(self, seeds: Sequence[int], **how: object) -> None:
        slopes = how.get("slopes")
        covered, widths, named, accused, sloped = [], [], [], [], []
        for seed in seeds:
            record, planted = synthetic_record(np.random.default_rng(seed), **how)  # type: ignore[arg-type]
            fit = fit_bench_record(record)
            shift = 0.0 if slopes is None else (fit.reference_temperature - CENTRE) * np.asarray(slopes)
            truth = TRUTH + shift
            covered.append((fit.lower[:3] <= truth) & (truth <= fit.upper[:3]))
            widths.append((fit.upper - fit.lower)[:3] / 2)
            found = {(outlier.line, outlier.quantity) for outlier in fit.outliers}
            named.append(planted <= found)
            accused.append(not found <= planted)
            sloped.append(len(fit.names) > 3)
        self.coverage = np.mean(covered, axis=0)
        self.half_width = np.mean(widths, axis=0)
        self.all_named = float(np.mean(named))
        self.accused = float(np.mean(accused))
        self.sloped = float(np.mean(sloped))


def test_intervals_cover_the_truth() -> None:
    """Of 150 seeds a share of 0.95 scatters by 0.018: three of these are allowed."""
    tally = Tally(range(150))
    assert np.all(tally.coverage >= 0.896) and np.all(tally.coverage <= 1.0)
    assert np.all(tally.half_width <= 1.3 * 1.96 * smallest_standard_errors(24, 0.01))
    assert np.all(tally.half_width >= 0.95 * 1.96 * smallest_standard_errors(24, 0.01))
    assert tally.accused <= 0.04


def test_planted_outliers_are_named() -> None:
    tally = Tally(range(150), planted=3)
    assert np.all(tally.coverage >= 0.88)
    assert tally.all_named >= 0.95
    assert tally.accused <= 0.04


@pytest.mark.study
@pytest.mark.parametrize(
    "how",
    [{}, {"slopes": SLOPES}, {"readings": 12}, {"cold_heat": True}, {"by_load": True}, {"current_noise": 0.01}],
    ids=["plain", "with temperature", "few readings", "heat on both sides", "by load resistance", "scattering current"],
)
def test_intervals_cover_the_truth_in_a_thousand_seeds(how: dict[str, object]) -> None:
    tally = Tally(range(1000), **how)
    assert np.all(tally.coverage >= 0.93) and np.all(tally.coverage <= 0.97)
    assert tally.accused < 0.03
    if not how:
        assert np.all(tally.half_width <= 1.3 * 1.96 * smallest_standard_errors(24, 0.01))


@pytest.mark.study
@pytest.mark.parametrize(
    "how",
    [{}, {"slopes": SLOPES}, {"readings": 12}, {"cold_heat": True}, {"by_load": True}, {"current_noise": 0.01}],
    ids=["plain", "with temperature", "few readings", "heat on both sides", "by load resistance", "scattering current"],
)
def test_three_outliers_are_named_in_a_thousand_seeds(how: dict[str, object]) -> None:
    tally = Tally(range(1000), planted=3, **how)
    assert np.all(tally.coverage >= 0.90)
    assert tally.all_named >= 0.95
    assert tally.accused < 0.03


@pytest.mark.parametrize("by_load", [False, True])
@pytest.mark.parametrize("cold_heat", [False, True])
@pytest.mark.parametrize("slopes", [None, SLOPES], ids=["constant", "sloped"])
def test_readings_without_noise_give_the_parameters_back(
    by_load: bool, cold_heat: bool, slopes: FloatArray | None
) -> None:
    record, _ = synthetic_record(
        np.random.default_rng(0), noise=0.0, by_load=by_load, cold_heat=cold_heat, slopes=slopes
    )
    fit = fit_bench_record(record, temperature_dependence=slopes is not None)
    given = np.zeros(3) if slopes is None else slopes
    for name, value, slope in zip(("seebeck", "resistance", "conductance"), TRUTH, given, strict=True):
        assert fit.estimate_at(name, CENTRE)[0] == pytest.approx(value, rel=1e-9)
        if slopes is not None:
            assert fit.value(f"{name}_slope") == pytest.approx(slope, rel=1e-8)
    assert not fit.outliers


def test_a_dependence_on_temperature_is_found_where_there_is_one() -> None:
    """The F test errs in one of a hundred records without a dependence: of 100 up to 5 are allowed."""
    assert Tally(range(50), slopes=SLOPES).sloped == 1.0
    assert Tally(range(100)).sloped <= 0.05
    record, _ = synthetic_record(np.random.default_rng(0))
    assert any("no dependence on temperature shows" in remark for remark in fit_bench_record(record).remarks)


def test_a_polynomial_is_the_fit_at_another_reference() -> None:
    record, _ = synthetic_record(np.random.default_rng(2), slopes=SLOPES)
    fit = fit_bench_record(record)
    value, slope = fit.polynomial("resistance", 300.0)
    assert value + 55.0 * slope == pytest.approx(fit.estimate_at("resistance", 355.0)[0], rel=1e-12)
    at_reference = fit.estimate_at("resistance", fit.reference_temperature)
    assert at_reference == pytest.approx((fit.values[1], fit.standard_errors[1]), rel=1e-12)


def test_each_group_of_readings_has_its_own_noise() -> None:
    generator = np.random.default_rng(3)
    record, _ = synthetic_record(generator, readings=240, noise=0.002)
    noisy = replace(record, heat_flow=record.heat_flow * (1.0 + 0.05 * generator.standard_normal(240)))
    fit = fit_bench_record(noisy)
    assert fit.noise["voltage"] == pytest.approx(0.002, rel=0.15)
    assert fit.noise["heat_flow"] == pytest.approx(0.05, rel=0.2)
    # the seebeck coefficient rests on the voltages and their many degrees of freedom, the conductance on the heats
    assert fit.degrees_of_freedom[0] > 400 and fit.degrees_of_freedom[2] == pytest.approx(239, abs=3)


def test_currents_that_scatter_are_noticed() -> None:
    exact, _ = synthetic_record(np.random.default_rng(0), readings=96)
    scattering, _ = synthetic_record(np.random.default_rng(0), readings=96, current_noise=0.01)
    sentence = "as if the currents scattered as much"
    assert not any(sentence in remark for remark in fit_bench_record(exact).remarks)
    fit = fit_bench_record(scattering)
    assert any(sentence in remark for remark in fit.remarks)
    assert fit.noise["voltage"] == pytest.approx(0.01, rel=0.2)


def test_an_outlier_is_named_by_line_and_quantity() -> None:
    record, _ = synthetic_record(np.random.default_rng(4))
    heat = record.heat_flow.copy()
    heat[7] *= 1.2
    fit = fit_bench_record(replace(record, heat_flow=heat))
    assert [(each.line, each.quantity) for each in fit.outliers] == [(9, "heat_flow")]
    assert fit.outliers[0].studentised_residual > 10.0
    place = [line == 9 and name == "heat_flow" for line, name in zip(fit.lines, fit.quantities, strict=True)].index(
        True
    )
    assert not fit.used[place] and fit.used.sum() == len(fit.used) - 1
    assert fit.residuals[place] == pytest.approx(
        (fit.measured[place] / fit.fitted[place] - 1.0) / fit.noise["heat_flow"], rel=1e-9
    )
    assert "1 outlier" in fit.provenance


def test_a_third_of_the_readings_may_be_wrong_together() -> None:
    """Nine of 40 heats wrong in the same direction mask each other in least squares, not in trimmed squares."""
    record, _ = synthetic_record(np.random.default_rng(5), readings=40)
    heat = record.heat_flow.copy()
    heat[::5] *= 1.25
    fit = fit_bench_record(replace(record, heat_flow=heat))
    assert [each.line for each in fit.outliers] == list(range(2, 42, 5))
    assert abs(fit.value("conductance") - TRUTH[2]) < 4.0 * fit.standard_errors[2]


@settings(max_examples=15, deadline=None)
@given(scale=st.floats(0.01, 100.0), seed=st.integers(0, 1000))
def test_without_heats_parameters_scale_with_the_voltages(scale: float, seed: int) -> None:
    record, _ = synthetic_record(np.random.default_rng(seed))
    record = replace(record, heat_flow=np.full(24, np.nan))
    other = replace(record, voltage=scale * record.voltage, open_circuit_voltage=scale * record.open_circuit_voltage)
    first, second = fit_bench_record(record), fit_bench_record(other)
    np.testing.assert_allclose(second.values, scale * first.values, rtol=1e-6)
    np.testing.assert_allclose(second.upper, scale * first.upper, rtol=1e-6)


@settings(max_examples=15, deadline=None)
@given(seed=st.integers(0, 1000), order=st.permutations(range(24)))
def test_the_order_of_readings_does_not_matter(seed: int, order: list[int]) -> None:
    record, _ = synthetic_record(np.random.default_rng(seed), planted=2)
    shuffled = taken(record, np.array(order))
    first, second = fit_bench_record(record), fit_bench_record(shuffled)
    np.testing.assert_allclose(second.values, first.values, rtol=1e-6)
    assert {each.line for each in second.outliers} == {each.line for each in first.outliers}


def written(record: BenchRecord, separator: str = ", ") -> str:
    """A record as CSV text in units of the bench."""
    rows = np.stack(
        [
            record.hot_face_temperature - 273.15,
            record.cold_face_temperature - 273.15,
            record.open_circuit_voltage * 1e3,
            record.voltage,
            record.current,
        ]
    ).T
    header = HEADER.replace(", ", separator).replace("open_circuit_voltage [V]", "open_circuit_voltage [mV]")
    return "\n".join([header, *(separator.join(repr(float(each)) for each in row) for row in rows)])


@pytest.mark.parametrize("separator", [", ", ";", "\t"], ids=["comma", "semicolon", "tab"])
def test_text_reads_back(separator: str) -> None:
    record, _ = synthetic_record(np.random.default_rng(0))
    read = read_bench_record(f"# a comment, with a comma\n\n{written(record, separator)}\n")
    np.testing.assert_allclose(read.hot_face_temperature, record.hot_face_temperature, rtol=1e-14)
    np.testing.assert_allclose(read.open_circuit_voltage, record.open_circuit_voltage, rtol=1e-14)
    np.testing.assert_array_equal(read.current, record.current)
    np.testing.assert_array_equal(read.lines, np.arange(24) + 4)
    assert np.isnan(read.heat_flow).all()


@pytest.mark.parametrize(("unit", "flow"), [("kg/min", 3.0), ("L/min", 3.0), ("g/s", 50.0)])
def test_heat_by_the_coolant(unit: str, flow: float) -> None:
    """0.05 kg/s of 4000 J/(kg K) and 1000 kg/m3 warmed by 0.5 K takes up 100 W."""
    header = f"{HEADER}, coolant_flow [{unit}], coolant_inlet_temperature [degC], coolant_outlet_temperature [degC]"
    text = f"{header}\n150, 30, 6, 3, 2, {flow}, 20, 20.5\n150, 30, 6, 3, 2, , ,\n"
    record = read_bench_record(text, coolant=CONSTANT_FLUID)
    assert record.coolant_heat_flow[0] == pytest.approx(100.0, rel=1e-9)
    assert np.isnan(record.coolant_heat_flow[1])
    assert "enthalpy" in record.remarks[0]


def test_water_of_the_coolant_has_its_own_properties() -> None:
    """IAPWS-95 by steam tables at 1 bar: 4.18 kJ/(kg K) between 20 and 30 degC, within 0.1 %."""
    header = f"{HEADER}, coolant_flow [kg/s], coolant_inlet_temperature [degC], coolant_outlet_temperature [degC]"
    record = read_bench_record(f"{header}\n150, 30, 6, 3, 2, 0.01, 20, 30\n", coolant=FluidSpec("water"))
    assert record.coolant_heat_flow[0] == pytest.approx(0.01 * 41800.0, rel=1e-3)


def test_other_columns_are_left_and_said() -> None:
    record = read_bench_record(f"{HEADER}, remark, clock\n150, 30, 6, 3, 2, steady, 12:30\n")
    assert record.remarks == ("columns not used: remark, clock",)


@pytest.mark.parametrize("separator", [";", "\t"], ids=["semicolon", "tab"])
def test_decimal_commas_are_read_where_commas_do_not_separate(separator: str) -> None:
    header = HEADER.replace(", ", separator)
    points = f"{header}\n" + separator.join(("150.5", "30.25", "6e0", "-3.5e-1", "2"))
    read, by_point = (read_bench_record(text) for text in (points.replace(".", ","), points))
    for name in ("hot_face_temperature", "cold_face_temperature", "open_circuit_voltage", "voltage", "current"):
        assert getattr(read, name)[0] == getattr(by_point, name)[0], name


def test_all_faults_at_once_with_their_lines() -> None:
    text = f"{HEADER}, load_resistance [ohm]\n150, 30, 6, x, 2\n# note\n30, 150, 6\n150, 30, 6, 3, nan\n150,,6\n"
    with pytest.raises(CaseError) as caught:
        read_bench_record(text)
    faults = caught.value.faults
    assert len(faults) == 4
    assert faults[0].startswith('record:2: voltage: "x" is not a finite number')
    assert faults[1].startswith('record:5: current: "nan"')
    assert faults[2] == "record:6: cold_face_temperature: empty; every reading needs it"
    assert faults[3].startswith("record:4: the hot face is not hotter")
    with pytest.raises(CaseError) as caught:
        read_bench_record(f"{HEADER}, load_resistance [ohm]\n30, 150, 6\n150, 30, 6, 3\n150, 30, 6, , , 2\n")
    assert [fault.split(":")[1] for fault in caught.value.faults] == ["2", "3", "4"]
    assert "swapped?" in caught.value.faults[0]
    assert "belongs into open_circuit_voltage" in caught.value.faults[1]
    assert "load_resistance without voltage" in caught.value.faults[2]


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("\n", "is empty; its first line names the columns, hot_face_temperature"),
        (f"{HEADER}\n", "has a header and no readings"),
        ("hot_face_temperature [degC], voltage [V]\n1, 2\n", "cold_face_temperature: missing; write"),
        (HEADER.replace("cold_face", "cold_fase") + "\n1,2\n", "unknown column; is cold_face_temperature meant"),
        (HEADER.replace("voltage [V], current", "current [A], current") + "\n1,2\n", "current: stands twice"),
        (HEADER.replace("current [A]", "current") + "\n1,2\n", r"current: has no unit .* current \[A\]"),
        (HEADER.replace("[A]", "[V]") + "\n1,2\n", r"current: \[V\] is no unit of current"),
        (f"{HEADER}\n150, 30, 6, 3, 2, 7\n", "6 values for 5 columns; decimals are written with a point"),
        (f'{HEADER}\n150, 30, 6,"3,5", 2\n', 'voltage: "3,5" has a decimal comma; decimals are written'),
        (f"{HEADER}\n" + "150,5, 30,2, 6, 3, 2\n" * 9, "^record:2: 7 values for 5 columns, and 8 more like it; decim"),
        (HEADER.replace(",", ";") + "\n150;30;6;1.003,5;2\n", 'voltage: "1.003,5" is not a finite number'),
        (f"{HEADER}\n-300, 30, 6, 3, 2\n", "hot_face_temperature: not above 0 K"),
        (f'{HEADER}\n"150, 30, 6, 3, 2\n', "unreadable quotes"),
        (f"{HEADER}, heat_flow [W]\n150, 30, , , , 5\n", "a heat without current"),
        (f"{HEADER}\n" + "150, 30, 6, 3, 2\n" * 1001, "has 1001 readings; at most 1000"),
        (f"{HEADER}\n" + "150, 30, 6, x, 2\n" * 50, "and 30 more faults like these"),
        (f"{HEADER}, coolant_flow [kg/s]\n150, 30, 6, 3, 2, 1\n", "needs all of coolant_flow, .* say which fluid"),
    ],
)
def test_what_is_wrong_is_said(text: str, message: str) -> None:
    with pytest.raises(CaseError) as caught:
        read_bench_record(text)
    assert all("\n" not in fault for fault in caught.value.faults)
    assert re.search(message, " ".join(caught.value.faults))


def test_files_and_fluids_that_do_not_exist(tmp_path: Path) -> None:
    with pytest.raises(CaseError, match="there is no such file"):
        read_bench_record(tmp_path / "none.csv")
    header = f"{HEADER}, coolant_flow [kg/s], coolant_inlet_temperature [degC], coolant_outlet_temperature [degC]"
    text = f"{header}\n150, 30, 6, 3, 2, 0.1, 20, 130\n"
    with pytest.raises(CaseError, match="is no known fluid"):
        read_bench_record(text, coolant=FluidSpec("mead"))
    with pytest.raises(CaseError, match=r"record:2: coolant_outlet_temperature: 403.15 K is outside .* for water"):
        read_bench_record(text, coolant=FluidSpec("water"))
    with pytest.raises(CaseError, match="no reading has its flow"):
        read_bench_record(f"{HEADER}\n150, 30, 6, 3, 2\n", coolant=FluidSpec("water"))


@settings(max_examples=100, deadline=None)
@given(
    header=st.sampled_from([HEADER, "", "a,b", HEADER + ", heat_flow [W]", "#"]),
    body=st.text(alphabet='0123456789.,;-+e "\n\t#x\x00é', max_size=80),
)
def test_any_text_gives_a_record_or_faults(header: str, body: str) -> None:
    faults: tuple[str, ...] = ()
    try:
        read_bench_record(f"{header}\n{body}")
    except CaseError as error:
        faults = error.faults
    assert all("\n" not in fault for fault in faults)


def test_what_the_record_cannot_tell_is_said() -> None:
    record, _ = synthetic_record(np.random.default_rng(6))
    nothing = np.full(24, np.nan)
    no_heat = fit_bench_record(replace(record, heat_flow=nothing))
    assert no_heat.names[:2] == ("seebeck", "resistance") and "conductance" not in no_heat.names
    assert any(sentence.startswith("conductance unknown: no heat was measured") for sentence in no_heat.unknown)
    open_circuit = fit_bench_record(replace(record, heat_flow=nothing, voltage=nothing, current=nothing))
    assert open_circuit.names[0] == "seebeck" and "resistance" not in open_circuit.names
    assert any(sentence.startswith("resistance unknown: no current was measured") for sentence in open_circuit.unknown)
    narrow = replace(
        record,
        hot_face_temperature=np.linspace(430.0, 440.0, 24),
        cold_face_temperature=np.linspace(310.0, 302.0, 24),
        open_circuit_voltage=TRUTH[0] * np.linspace(120.0, 138.0, 24),
        voltage=nothing,
        current=nothing,
        heat_flow=nothing,
    )
    assert any("mean face temperatures span 1.0 K" in sentence for sentence in fit_bench_record(narrow).unknown)
    with pytest.raises(NoAnswerError, match=r"no dependence on temperature can be fitted: .* span 1\.0 K"):
        fit_bench_record(narrow, temperature_dependence=True)


def test_one_heat_includes_what_is_lost_on_its_side() -> None:
    one_side, _ = synthetic_record(np.random.default_rng(6))
    both, _ = synthetic_record(np.random.default_rng(6), cold_heat=True)
    assert any("heat lost before the hot face" in sentence for sentence in fit_bench_record(one_side).unknown)
    assert not any("heat lost" in sentence for sentence in fit_bench_record(both).unknown)


def changed(**columns: object) -> BenchRecord:
    record, _ = synthetic_record(np.random.default_rng(7), by_load=False)
    return replace(record, **columns)  # type: ignore[arg-type]


def first_readings(count: int) -> BenchRecord:
    record, _ = synthetic_record(np.random.default_rng(7))
    return taken(record, np.arange(count))


NOTHING = np.full(24, np.nan)
BASE, _ = synthetic_record(np.random.default_rng(7))


@pytest.mark.parametrize(
    ("record", "message"),
    [
        (first_readings(1), "3 measured numbers are too few for 3 parameters"),
        (changed(open_circuit_voltage=NOTHING, voltage=NOTHING, heat_flow=NOTHING), "nothing can be fitted"),
        (
            changed(
                hot_face_temperature=np.full(24, 450.0),
                cold_face_temperature=np.full(24, 310.0),
                current=np.full(24, 2.0),
                open_circuit_voltage=NOTHING,
                heat_flow=NOTHING,
                voltage=3.8 + 0.01 * np.arange(24),
            ),
            "cannot tell seebeck and resistance apart; vary temperature difference and load",
        ),
        (changed(current=-BASE.current, heat_flow=NOTHING), "best resistance is -.*is the current counted positive"),
        (
            changed(voltage=-BASE.voltage, open_circuit_voltage=-BASE.open_circuit_voltage, heat_flow=NOTHING),
            "best seebeck is -.*swapped",
        ),
        (changed(heat_flow=-BASE.heat_flow), "best conductance is -.*counted positive from hot to cold"),
        (
            changed(heat_flow=BASE.heat_flow * np.exp(np.random.default_rng(0).normal(0.0, 1.0, 24))),
            r"readings of heat_flow (scatter by|contradict)|of 24 readings of heat_flow contradict",
        ),
        (changed(heat_flow=np.zeros(24)), "heat_flow: 0 in every reading; leave out what was not measured"),
        (changed(current=np.full(24, 1e-300), heat_flow=NOTHING), "cannot tell resistance; vary"),
        (changed(voltage=1e3 * BASE.voltage), "voltage contradict|voltage scatter|not above 0"),
    ],
    ids=[
        "few",
        "nothing",
        "one load",
        "current sign",
        "voltage sign",
        "heat sign",
        "all outliers",
        "heat of zero",
        "absurd",
        "units mixed up",
    ],
)
def test_readings_that_make_no_module_are_refused(record: BenchRecord, message: str) -> None:
    with pytest.raises(NoAnswerError, match=message) as caught:
        fit_bench_record(record)
    assert "\n" not in str(caught.value)


def test_copies_of_a_reading_are_no_second_measurement() -> None:
    record, _ = synthetic_record(np.random.default_rng(8))
    doubled = taken(record, np.tile(np.arange(24), 2))
    once, twice = fit_bench_record(record), fit_bench_record(doubled)
    np.testing.assert_allclose(twice.upper, once.upper, rtol=1e-9)
    assert any("24 readings repeat" in remark for remark in twice.remarks)


def test_few_readings_are_fitted_without_naming_outliers() -> None:
    fit = fit_bench_record(first_readings(3))
    assert "too few readings to tell outliers" in fit.remarks
    assert np.all(np.isfinite(fit.upper))


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 10**6), readings=st.integers(1, 20), present=st.lists(st.booleans(), min_size=5, max_size=5))
def test_any_numbers_give_a_fit_or_a_sentence(seed: int, readings: int, present: list[bool]) -> None:
    """Numbers of any size that belong to no module, mixed with those of one."""
    generator = np.random.default_rng(seed)
    module, _ = synthetic_record(generator, readings=readings, cold_heat=True)
    load = np.where(generator.random(readings) < 0.3, generator.integers(0, 3, readings), np.nan)
    columns = np.stack(
        [module.open_circuit_voltage, module.voltage, module.current, module.heat_flow, module.coolant_heat_flow]
    )
    wild = generator.uniform(-1.0, 10.0, columns.shape) * 10.0 ** generator.integers(-6, 7, (5, 1))
    columns = np.where(generator.random(columns.shape) < generator.random(), wild, columns)
    shown: BoolArray = np.array(present)
    columns = np.where(shown[:, None] & (generator.random(columns.shape) < 0.8), columns, np.nan)
    open_circuit, voltage, current, heat, coolant_heat = columns
    record = replace(
        module,
        open_circuit_voltage=open_circuit,
        voltage=np.where(np.isfinite(current) | np.isfinite(load), voltage, np.nan),
        current=current,
        load_resistance=np.where(np.isfinite(voltage), load, np.nan),
        heat_flow=heat,
        coolant_heat_flow=coolant_heat,
    )
    try:
        fit = fit_bench_record(record)
    except NoAnswerError:
        return
    assert np.all(fit.lower <= fit.upper) and np.all(np.isfinite(fit.values)) and np.all(fit.values[:1] > 0.0)


def example_text() -> str:
    """Readings of an invented module on an invented bench; one voltage was written down wrongly."""
    generator = np.random.default_rng(20)
    hot = np.repeat([80.0, 110.0, 140.0, 170.0, 200.0], 4) + generator.uniform(-2.0, 2.0, 20).round(1)
    cold = np.repeat([24.0, 27.0, 29.0, 33.0, 36.0], 4) + generator.uniform(-1.0, 1.0, 20).round(1)
    load = np.tile([0.9, 1.8, 3.3, 8.2], 5)
    mean = 0.5 * (hot + cold) + 273.15 - 350.0
    a, r, k = 0.046 + 2e-5 * mean, 1.85 + 5e-3 * mean, 0.58 - 2e-4 * mean
    current = (a * (hot - cold) / (r + load)).round(3)
    kelvin = hot + 273.15, cold + 273.15
    heat = hot_junction_heat(a, r, k, *kelvin, current)
    true = np.stack([a * (hot - cold), a * (hot - cold) - r * current, heat])
    measured = true * (1.0 + np.array([[0.004], [0.004], [0.012]]) * generator.standard_normal(true.shape))
    measured[1, 13] *= 1.18
    lines = [
        "# synthetic: an invented module between a heater block and a plate cooled by tap water, made from",
        "# known parameters with 0.4 % noise on voltages and 1.2 % on heats; one voltage is 18 % wrong on purpose",
        f"{HEADER}, heat_flow [W]",
    ]
    rows = zip(hot, cold, *measured[:2], current, measured[2], strict=True)
    return "\n".join([*lines, *("{:.1f}, {:.1f}, {:.3f}, {:.3f}, {:.3f}, {:.1f}".format(*row) for row in rows), ""])


def test_the_example_is_what_it_says_and_gives_its_module_back() -> None:
    assert EXAMPLE.read_text(encoding="utf-8") == example_text()
    fit = fit_bench_record(read_bench_record(EXAMPLE))
    assert [(each.line, each.quantity) for each in fit.outliers] == [(17, "voltage")]
    for name, truth in (("seebeck", 0.046), ("resistance", 1.85), ("conductance", 0.58)):
        value, error = fit.estimate_at(name, 350.0)
        assert abs(value - truth) < 3.0 * error and error < 0.03 * truth
    assert fit.noise["voltage"] == pytest.approx(0.004, rel=0.4)
