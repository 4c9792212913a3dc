"""A module from a transient record as a heat pump: heats by the balance, truth inside intervals, exact limits."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from harvest.errors import CaseError, InputError, NoAnswerError
from harvest.physics.arrays import FloatArray
from harvest.physics.fluids import FluidSpec
from harvest.study.heat_pump_record import (
    PARAMETERS,
    HeatPumpFit,
    HeatPumpRecord,
    ThermalMass,
    fit_heat_pump_record,
    read_heat_pump_record,
)

EXAMPLE = Path(__file__).parents[1] / "examples" / "heat-pump-record.csv"
HEADER = "time [s], hot_mass_temperature [degC], cold_mass_temperature [degC], voltage [V], current [A]"
TRUTH = np.array([0.05, 2.0, 0.5, 0.3, 0.2])
HOT, COLD = ThermalMass(0.5, 4180.0), ThermalMass(0.4, 4180.0)
AMBIENT = 293.15


def course(
    time: FloatArray,
    current: FloatArray,
    parameters: FloatArray = TRUTH,
    masses: tuple[ThermalMass, ThermalMass] = (HOT, COLD),
    start: tuple[float, float] = (295.0, 294.0),
) -> FloatArray:
    """Hot and cold temperature and voltage over time, by an integrator with error control, stopped at each reading."""
    a, r, k, hot_loss, cold_loss = parameters
    hot_capacity, cold_capacity = (each.mass * (each.heat_capacity or 0.0) for each in masses)

    def rates(moment: float, state: FloatArray, *drive: float) -> list[float]:
        begin, length, before, after = drive
        j = before + (after - before) * (moment - begin) / length
        hot, cold = state
        return [
            (a * hot * j - k * (hot - cold) + j * j * r / 2 - hot_loss * (hot - AMBIENT)) / hot_capacity,
            (-a * cold * j + k * (hot - cold) + j * j * r / 2 - cold_loss * (cold - AMBIENT)) / cold_capacity,
        ]

    states = [np.array(start)]
    for place in range(len(time) - 1):
        begin, end = time[place], time[place + 1]
        drive = (begin, end - begin, current[place], current[place + 1])
        states.append(solve_ivp(rates, (begin, end), states[-1], args=drive, rtol=1e-10, atol=1e-10).y[:, -1])
    hot, cold = np.array(states).T
    return np.stack([hot, cold, a * (hot - cold) + r * current])


def programme(time: FloatArray) -> FloatArray:
    """Two currents in turn, then none, so that the losses show."""
    end = time[-1]
    return np.select([time < 0.15 * end, time < 0.35 * end, time < 0.6 * end], [1.6, 0.8, 2.2], 0.0)


def uneven_times(generator: np.random.Generator, readings: int, mean_step: float) -> FloatArray:
    time = np.cumsum(generator.uniform(0.4, 1.6, readings)) * mean_step
    return np.asarray(time - time[0])


def recorded(time: FloatArray, measured: FloatArray, current: FloatArray) -> HeatPumpRecord:
    return HeatPumpRecord("pump.csv", np.arange(len(time)) + 2, time, measured[0], measured[1], measured[2], current)


TIME = uneven_times(np.random.default_rng(0), 160, 90.0)
CURRENT = programme(TIME)
COURSE = course(TIME, CURRENT)


def noisy_record(seed: int) -> HeatPumpRecord:
    noise = np.array([[0.05], [0.05], [0.005]]) * np.random.default_rng(seed).standard_normal(COURSE.shape)
    return recorded(TIME, COURSE + noise, CURRENT)


def true_performance() -> FloatArray:
    """Coefficient of performance of the course by the closed form."""
    a, r, k = TRUTH[:3]
    hot, cold, voltage = COURSE
    power = np.where(CURRENT > 0.0, voltage * CURRENT, np.nan)
    return np.asarray((a * cold * CURRENT - k * (hot - cold) - CURRENT**2 * r / 2) / power)


def coverage(seeds: range) -> tuple[FloatArray, float]:
    """Share of seeds whose intervals hold the truth, and the scatter of the performance over its own error."""
    covered, over_error = [], []
    for seed in seeds:
        fit = fit_heat_pump_record(noisy_record(seed), HOT, COLD, AMBIENT)
        covered.append((fit.lower <= TRUTH) & (fit.upper >= TRUTH))
        over_error.append((fit.coefficient_of_performance - true_performance()) / fit.coefficient_of_performance_error)
    return np.mean(covered, axis=0), float(np.sqrt(np.nanmean(np.square(over_error))))


def test_intervals_hold_the_truth_and_errors_are_honest() -> None:
    """Of 40 seeds a share of 0.95 scatters by 0.034: three of these are allowed."""
    share, over_error = coverage(range(40))
    assert np.all(share >= 0.85)
    assert 0.85 < over_error < 1.25


@pytest.mark.study
def test_intervals_hold_the_truth_in_five_hundred_seeds() -> None:
    share, over_error = coverage(range(500))
    assert np.all(share >= 0.92) and np.all(share <= 0.98)
    assert 0.9 < over_error < 1.2


def test_a_course_without_noise_gives_its_parameters_back() -> None:
    fit = fit_heat_pump_record(recorded(TIME, COURSE, CURRENT), HOT, COLD, AMBIENT)
    np.testing.assert_allclose(fit.values[:3], TRUTH[:3], rtol=1e-6)
    np.testing.assert_allclose(fit.values[3:], TRUTH[3:], rtol=1e-5)
    np.testing.assert_allclose([fit.fitted_hot_temperature, fit.fitted_cold_temperature], COURSE[:2], atol=1e-6)


def without_loss(heat_capacities: tuple[float, float] = (4180.0, 4180.0)) -> tuple[FloatArray, HeatPumpFit]:
    time = np.linspace(0.0, 1200.0, 121)
    current = np.full(121, 2.5)
    masses = ThermalMass(0.5, heat_capacities[0]), ThermalMass(0.4, heat_capacities[1])
    exact = course(time, current, np.array([0.05, 2.0, 0.5, 0.0, 0.0]), masses)
    return exact, fit_heat_pump_record(recorded(time, exact, current), *masses, AMBIENT)


def test_without_loss_and_noise_the_performance_is_the_closed_form() -> None:
    exact, fit = without_loss()
    hot, cold, voltage = exact
    a, r, k, j = 0.05, 2.0, 0.5, 2.5
    pumped = a * cold * j - k * (hot - cold) - j**2 * r / 2
    np.testing.assert_allclose(fit.electrical_power, a * (hot - cold) * j + j**2 * r, rtol=1e-12)
    np.testing.assert_allclose(fit.coefficient_of_performance, pumped / (voltage * j), rtol=5e-4)
    np.testing.assert_allclose(fit.heating_coefficient_of_performance, 1.0 + pumped / (voltage * j), rtol=5e-4)
    np.testing.assert_allclose(fit.values, [0.05, 2.0, 0.5, 0.0, 0.0], atol=1e-6)


def test_without_loss_the_masses_store_what_electricity_and_cold_mass_give() -> None:
    exact, fit = without_loss()
    hot, cold, _ = exact
    work = np.trapezoid(fit.electrical_power, fit.time)
    stored, drawn = 0.5 * 4180.0 * (hot[-1] - hot[0]), 0.4 * 4180.0 * (cold[0] - cold[-1])
    assert stored - drawn == pytest.approx(work, rel=1e-5)
    assert abs(fit.energy_balance_error) < 1e-4
    np.testing.assert_allclose(fit.balance_error, 0.0, atol=2e-4 * fit.electrical_power.max())


def test_heats_with_their_losses_close_the_balance() -> None:
    fit = fit_heat_pump_record(recorded(TIME, COURSE, CURRENT), HOT, COLD, AMBIENT)
    np.testing.assert_allclose(
        fit.delivered_heat - fit.hot_stored_heat, fit.value("hot_loss_conductance") * (COURSE[0] - AMBIENT), atol=0.05
    )
    np.testing.assert_allclose(
        fit.pumped_heat - fit.cold_drawn_heat, fit.value("cold_loss_conductance") * (AMBIENT - COURSE[1]), atol=0.05
    )
    assert abs(fit.energy_balance_error) < 5e-3


def test_equal_masses_without_loss_make_the_temperature_ratio_one_of_heats() -> None:
    """Fall over rise is then heat pumped over heat delivered: far from the performance, and below 1 always."""
    exact, fit = without_loss((4180.0, 5225.0))  # 0.5 kg and 0.4 kg of equal heat capacity
    heats = np.trapezoid(fit.pumped_heat, fit.time) / np.trapezoid(fit.delivered_heat, fit.time)
    assert fit.temperature_change_ratio == pytest.approx(heats, rel=1e-3)
    assert fit.temperature_change_ratio == pytest.approx((exact[1, 0] - exact[1, -1]) / (exact[0, -1] - exact[0, 0]))
    assert "neither a coefficient of performance nor an efficiency" in fit.temperature_change_ratio_meaning
    mean = np.trapezoid(fit.pumped_heat, fit.time) / np.trapezoid(fit.electrical_power, fit.time)
    assert fit.temperature_change_ratio == pytest.approx(mean / (1.0 + mean), rel=1e-3)


def test_the_temperature_ratio_is_taken_where_the_masses_are_furthest_apart() -> None:
    fit = fit_heat_pump_record(recorded(TIME, COURSE, CURRENT), HOT, COLD, AMBIENT)
    widest = np.argmax(COURSE[0] - COURSE[1])
    assert 0 < widest < len(TIME) - 1
    rise, fall = COURSE[0, widest] - COURSE[0, 0], COURSE[1, 0] - COURSE[1, widest]
    assert fit.temperature_change_ratio == pytest.approx(fall / rise, rel=1e-12)


def test_other_heat_capacities_change_the_temperature_ratio_and_nothing_else() -> None:
    _, equal = without_loss((4180.0, 5225.0))
    _, light = without_loss((4180.0, 2000.0))
    np.testing.assert_allclose(light.values, equal.values, atol=1e-5)
    assert light.temperature_change_ratio > 1.5 * equal.temperature_change_ratio


def test_performance_has_no_value_without_power() -> None:
    fit = fit_heat_pump_record(noisy_record(0), HOT, COLD, AMBIENT)
    assert np.isnan(fit.coefficient_of_performance[CURRENT == 0.0]).all()
    assert np.isfinite(fit.coefficient_of_performance[CURRENT > 0.0]).all()
    assert np.isfinite(fit.pumped_heat).all()


def test_found_scatter_is_the_one_put_in() -> None:
    fit = fit_heat_pump_record(noisy_record(1), HOT, COLD, AMBIENT)
    assert fit.temperature_noise == pytest.approx(0.05, rel=0.2)
    assert fit.voltage_noise == pytest.approx(0.005, rel=0.2)
    assert fit.degrees_of_freedom == 3 * 160 - 7


@settings(max_examples=8, deadline=None)
@given(factor=st.floats(0.2, 5.0))
def test_heat_capacities_and_time_scale_together(factor: float) -> None:
    """Twice the masses in twice the time is the same course: the parameters stay."""
    record = noisy_record(2)
    other = replace(record, time=factor * record.time)
    first = fit_heat_pump_record(record, HOT, COLD, AMBIENT)
    scaled = replace(HOT, mass=factor * HOT.mass), replace(COLD, mass=factor * COLD.mass)
    second = fit_heat_pump_record(other, *scaled, AMBIENT)
    np.testing.assert_allclose(second.values, first.values, rtol=1e-5)


def test_water_is_a_mass_with_its_own_heat_capacity() -> None:
    """Between 10 and 40 degC water at 1 atm has 4.178 to 4.196 kJ/(kg K) (IAPWS-95, from memory)."""
    fit = fit_heat_pump_record(noisy_record(3), HOT, COLD, AMBIENT)
    water = FluidSpec("water")
    of_water = fit_heat_pump_record(
        noisy_record(3), ThermalMass(0.5, fluid=water), ThermalMass(0.4, fluid=water), AMBIENT
    )
    np.testing.assert_allclose(of_water.values[:3], fit.values[:3], rtol=5e-3)
    vessel = replace(HOT, mass=0.4, added_capacity=0.1 * 4180.0)
    np.testing.assert_allclose(
        fit_heat_pump_record(noisy_record(3), vessel, COLD, AMBIENT).values, fit.values, rtol=1e-9
    )


def test_a_short_record_says_what_it_cannot_tell() -> None:
    time = np.linspace(0.0, 600.0, 60)
    current = np.full(60, 2.5)
    noise = np.random.default_rng(0).standard_normal((3, 60)) * np.array([[0.05], [0.05], [0.005]])
    fit = fit_heat_pump_record(recorded(time, course(time, current) + noise, current), HOT, COLD, AMBIENT)
    assert any("cannot be told from 0" in sentence for sentence in fit.unknown)
    assert any("apart: their errors are correlated" in sentence for sentence in fit.unknown)


def test_a_lag_in_the_masses_widens_the_errors_and_is_said() -> None:
    """A sensor that follows with 200 s of delay is no mass of one temperature."""
    record = noisy_record(4)
    late = np.interp(TIME - 200.0, TIME, record.hot_mass_temperature)
    fit = fit_heat_pump_record(replace(record, hot_mass_temperature=late), HOT, COLD, AMBIENT)
    plain = fit_heat_pump_record(record, HOT, COLD, AMBIENT)
    assert any("residuals follow each other" in remark for remark in fit.remarks)
    assert np.all(fit.standard_errors > 2.0 * plain.standard_errors)


def written(record: HeatPumpRecord) -> str:
    rows = np.stack(
        [
            record.time / 60.0,
            record.hot_mass_temperature - 273.15,
            record.cold_mass_temperature - 273.15,
            1e3 * record.voltage,
            record.current,
        ]
    ).T
    header = HEADER.replace("[s]", "[min]").replace("[V]", "[mV]")
    return "\n".join([header, *(",".join(repr(float(each)) for each in row) for row in rows)])


def test_text_reads_back() -> None:
    record = noisy_record(0)
    read = read_heat_pump_record(written(record))
    for name in ("time", "hot_mass_temperature", "cold_mass_temperature", "voltage", "current"):
        np.testing.assert_allclose(getattr(read, name), getattr(record, name), rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (f"{HEADER}\n0, 20, 20, 5, 2\n10, 20, 20, 5, 2\n10, 20, 20, 5, 2\n", "record:4: time: does not rise"),
        (f"{HEADER}\n0, 20, 20, 5, 2\n", "has 1 readings; at least 12"),
        (f"{HEADER}\n0, 20, 20, , 2\n", "record:2: voltage: empty; every reading needs it"),
        (HEADER.replace(", current [A]", "") + "\n0, 20, 20, 5\n", r"current: missing; write time \[h\]"),
        (HEADER.replace("[s]", "[degC]") + "\n0, 20, 20, 5, 2\n", r"time: \[degC\] is no unit of duration"),
    ],
)
def test_what_is_wrong_is_said(text: str, message: str) -> None:
    with pytest.raises(CaseError, match=message):
        read_heat_pump_record(text)


@pytest.mark.parametrize(
    ("mass", "message"),
    [
        (ThermalMass(0.5), "hot_mass: give either its heat_capacity or its fluid"),
        (ThermalMass(-1.0, 4180.0), r"hot_mass\.mass: -1 is not a finite number above 0"),
        (ThermalMass(1.0, float("nan")), r"hot_mass\.heat_capacity: nan is not"),
        (ThermalMass(1.0, 4180.0, added_capacity=-1.0), r"hot_mass\.added_capacity: -1 J/K"),
        (ThermalMass(1.0, fluid=FluidSpec("mead")), "hot_mass: .* is no known fluid"),
        (ThermalMass(1.0, fluid=FluidSpec("water"), pressure=2000.0), "hot_mass: .* K is outside .*boils"),
    ],
)
def test_a_mass_that_is_none_is_refused(mass: ThermalMass, message: str) -> None:
    with pytest.raises(InputError, match=message):
        fit_heat_pump_record(noisy_record(0), mass, COLD, AMBIENT)


def test_an_ambient_temperature_in_degrees_celsius_below_zero_is_refused() -> None:
    with pytest.raises(InputError, match="ambient_temperature: -5 K is not above 0 K"):
        fit_heat_pump_record(noisy_record(0), HOT, COLD, -5.0)


BASE = noisy_record(0)


@pytest.mark.parametrize(
    ("record", "message"),
    [
        (replace(BASE, current=np.zeros(160)), "0 in every reading, so no heat was pumped"),
        (replace(BASE, voltage=np.zeros(160)), "0 in every reading, so no heat was pumped"),
        (replace(BASE, current=-BASE.current), "not above 0; are voltage and current counted|too much to mean"),
        (replace(BASE, voltage=BASE.voltage[::-1].copy()), "too much to mean anything|not above 0"),
        (replace(BASE, hot_mass_temperature=BASE.cold_mass_temperature), "do not vary independently"),
        (replace(BASE, time=1e9 * BASE.time), "pump.csv: "),
    ],
    ids=["no current", "no voltage", "current sign", "voltage backwards", "one temperature", "absurd times"],
)
def test_readings_that_make_no_heat_pump_are_refused(record: HeatPumpRecord, message: str) -> None:
    with pytest.raises(NoAnswerError, match=message) as caught:
        fit_heat_pump_record(record, HOT, COLD, AMBIENT)
    assert "\n" not in str(caught.value)


def example_text() -> str:
    """An invented module between two beakers of water, driven at two currents and left to drift."""
    generator = np.random.default_rng(11)
    time = uneven_times(generator, 140, 60.0).round(0)
    current = np.select([time < 1500.0, time < 3000.0, time < 4500.0], [2.0, 3.2, 1.2], 0.0)
    masses = ThermalMass(0.35, 4182.0), ThermalMass(0.35, 4182.0)
    exact = course(time, current, np.array([0.048, 1.9, 0.55, 0.35, 0.3]), masses, (293.6, 293.4))
    measured = exact + np.array([[0.04], [0.04], [0.004]]) * generator.standard_normal(exact.shape)
    lines = [
        "# synthetic: an invented module between two beakers of 0.35 kg of water in a room at 20 degC, made from",
        "# known parameters with 0.04 K of noise on temperatures and 4 mV on the voltage",
        HEADER,
    ]
    rows = zip(time, measured[0] - 273.15, measured[1] - 273.15, measured[2], current, strict=True)
    return "\n".join([*lines, *("{:.0f}, {:.2f}, {:.2f}, {:.3f}, {:.1f}".format(*row) for row in rows), ""])


def test_the_example_is_what_it_says_and_gives_its_module_back() -> None:
    assert EXAMPLE.read_text(encoding="utf-8") == example_text()
    beaker, water = ThermalMass(0.35, 4182.0), ThermalMass(0.35, fluid=FluidSpec("water"))
    record = read_heat_pump_record(EXAMPLE)
    fit = fit_heat_pump_record(record, beaker, beaker, AMBIENT)
    truth = np.array([0.048, 1.9, 0.55, 0.35, 0.3])
    assert fit.names == PARAMETERS
    assert np.all(np.abs(fit.values - truth) < 3.5 * fit.standard_errors)
    np.testing.assert_allclose(fit_heat_pump_record(record, water, water, AMBIENT).values, truth, rtol=0.01)
    assert abs(fit.energy_balance_error) < 0.02
