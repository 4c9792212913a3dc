"""Duty profiles: exact sums, rules of time, and every kind of bad reading by its line."""

from __future__ import annotations

import json
from collections.abc import Sequence
from datetime import datetime, timedelta
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
from harvest.model.case import Case
from harvest.model.costs import building_cost
from harvest.model.estimate import estimate, estimate_batch
from harvest.model.reading import load_case, replace
from harvest.quantities import parse_quantity
from harvest.report.duty_files import duty_table
from harvest.report.duty_sheet import MOST_NOTES
from harvest.report.tables import read_about
from harvest.study.duty import (
    NO_ANSWER,
    NO_FLOW,
    NOT_COVERED,
    NOT_HOTTER,
    NOT_WORTH_IT,
    ON,
    STATES,
    DutyBalance,
    duty,
    exceeded,
)
from harvest.study.duty_log import NOTES, DutyLog, read_duty_log
from harvest.study.time_stamps import read_time_stamps

EXAMPLES = Path(__file__).parents[1] / "examples"
JACKET = EXAMPLES / "genset-jacket-water.toml"
HEADER = "time, hot.inlet_temperature [degC], hot.volume_flow [L/min]"
HOUR = 3600.0


@pytest.fixture(scope="module")
def jacket() -> Case:
    return load_case(JACKET)


def written(rows: Sequence[Sequence[object]], header: str = HEADER) -> str:
    return "\n".join([header, *(", ".join(map(str, row)) for row in rows)]) + "\n"


def hourly(temperatures: Sequence[object], flow: object = 70) -> str:
    begin = datetime(2026, 3, 2)
    return written([((begin + timedelta(hours=i)).isoformat(), t, flow) for i, t in enumerate(temperatures)])


def noted(log: DutyLog) -> list[tuple[int, str]]:
    return [(note.line, note.kind) for note in log.notes]


# ---------------------------------------------------------------- exact sums


@pytest.mark.parametrize(
    ("name", "overrides"),
    [
        ("genset-jacket-water.toml", []),
        ("genset-jacket-water.toml", ['electrical.load="matched"']),
        ("genset-jacket-water.toml", ['electrical.load="fixed resistance"', 'electrical.load_resistance="30 ohm"']),
        ("genset-exhaust.toml", []),
        ("bakery-flue.toml", []),
        ("hot-spring.toml", []),
        ("stove-wall-sensor.toml", []),
        ("workshop-water-blocks.toml", []),
    ],
)
def test_equal_hours_are_hours_times_the_estimate(name: str, overrides: list[str]) -> None:
    case = load_case(EXAMPLES / name, overrides)
    one = estimate(case)
    inlet = f"{case.hot.inlet_temperature!r}"
    found = duty(case, written([(f"{i}", inlet) for i in range(48)], "time [h], hot.inlet_temperature [K]"))
    names = {"generated_energy": "generated_power", "converted_energy": "converted_power", "net_energy": "net_power"}
    names |= {f"{side}_drive_energy": f"{side}_drive_power" for side in ("hot", "cold")}
    assert one.net_power > 0
    for energy, power in names.items():
        assert getattr(found, energy) == pytest.approx(getattr(one, power) * 48 * HOUR, rel=1e-12, abs=0.0), energy
    assert found.time_on == 48 * HOUR == found.covered_time
    assert found.net_power == pytest.approx(np.full(101, one.net_power), rel=1e-12)
    assert found.yearly_net_energy == pytest.approx(one.net_power * found.yearly_time, rel=1e-12)
    stated = "site.yearly_operation" not in case.assumed
    assert found.yearly_time == (case.site.yearly_operation if stated else 8760 * HOUR)
    assert found.hottest_face_temperature is not None
    assert found.hottest_face_temperature.value == one.hottest_face_temperature
    assert found.hottest_junction_temperature is not None
    assert found.hottest_junction_temperature.value == one.rows.hot_junction_temperature.max()
    assert found.conditions == 1


BINS = "hours [h], hot.inlet_temperature [degC], cold.inlet_temperature [degC], hot.volume_flow [L/min]"
bins = st.lists(
    st.tuples(
        st.floats(0.0, 900.0),
        st.sampled_from([20, 61.5, 70, 78.25, 90, 120]),
        st.sampled_from([18, 30, 44]),
        st.sampled_from([0, 25, 70]),
    ),
    min_size=1,
    max_size=12,
)


@settings(max_examples=15, deadline=None)
@given(bins, st.randoms(use_true_random=False))
def test_the_order_of_bins_changes_nothing(rows: list[tuple[float, ...]], random: Any) -> None:
    case = load_case(JACKET)
    rows = [*rows, (10.0, 85, 25, 60)]
    mixed = list(rows)
    random.shuffle(mixed)
    one, other = duty(case, written(rows, BINS)), duty(case, written(mixed, BINS))
    for name in ("net_energy", "generated_energy", "time_on", "time_off", "mean_net_power", "yearly_net_energy"):
        assert getattr(one, name) == getattr(other, name), name
    np.testing.assert_array_equal(one.net_power, other.net_power)
    assert one.time_without_answer == other.time_without_answer


def test_bins_are_the_same_log_sorted(jacket: Case) -> None:
    random = np.random.default_rng(4)
    temperatures = random.choice([55.0, 68.0, 81.0, 93.0], 200)
    flows = random.choice([0.0, 40.0, 75.0], 200)
    log = written(
        [(i, t, f) for i, (t, f) in enumerate(zip(temperatures, flows, strict=True))],
        HEADER.replace("time", "time [h]"),
    )
    counted = {
        (t, f): int(((temperatures == t) & (flows == f)).sum()) for t, f in zip(temperatures, flows, strict=True)
    }
    table = written([(n, t, f) for (t, f), n in sorted(counted.items())], HEADER.replace("time", "hours [h]"))
    one, other = duty(jacket, log), duty(jacket, table)
    assert one.conditions == other.conditions == 12
    for name in ("net_energy", "generated_energy", "hot_drive_energy", "time_on", "yearly_net_energy"):
        assert getattr(one, name) == pytest.approx(getattr(other, name), rel=1e-12), name
    assert one.time_off == pytest.approx(other.time_off)


def test_energies_are_the_sum_of_estimates(jacket: Case) -> None:
    """Independent of the search: the batch of estimates, its net power where that is above zero."""
    random = np.random.default_rng(9)
    hot, cold, flow = random.uniform(45, 98, 60), random.uniform(15, 40, 60), random.uniform(5, 140, 60)
    log = written(
        [(i, *each) for i, each in enumerate(zip(hot, cold, flow, strict=True))],
        "time [h], hot.inlet_temperature [degC], cold.inlet_temperature [degC], hot.volume_flow [L/min]",
    )
    case = replace(jacket, {"limits.hot_pressure_drop": "5 kPa"})
    found = duty(case, log)
    varied = {
        "hot.inlet_temperature": hot + 273.15,
        "cold.inlet_temperature": cold + 273.15,
        "hot.volume_flow": flow / 60e3,
    }
    answers = estimate_batch(Batch(jacket, 60, varied))
    on = answers.net_power > 0
    assert 0 < on.sum() < 60
    assert found.net_energy == pytest.approx((answers.net_power[on] * HOUR).sum(), rel=1e-10)
    assert found.generated_energy == pytest.approx((answers.generated_power[on] * HOUR).sum(), rel=1e-10)
    assert found.time_on == on.sum() * HOUR
    assert found.time_off == {STATES[NOT_WORTH_IT]: (~on).sum() * HOUR}
    beyond = on & (answers.hot_pressure_drop > 5e3)
    assert beyond.any()
    assert found.time_beyond_limits["hot_pressure_drop"] == beyond.sum() * HOUR
    face = answers.hottest_face_temperature
    worst = int(np.argmax(np.where(on, face, 0.0)))
    assert found.hottest_face_temperature is not None
    assert found.hottest_face_temperature.value == pytest.approx(face[worst])
    assert found.hottest_face_temperature.line == worst + 2
    np.testing.assert_array_equal(found.rows.state, np.where(on, ON, NOT_WORTH_IT))


def test_a_fixed_load_stays_fixed() -> None:
    case = load_case(JACKET, ['electrical.load="fixed voltage"', 'electrical.load_voltage="20 V"'])
    log = written([(0, 92, 20), (1, 92, 24)], "time [h], hot.inlet_temperature [degC], electrical.load_voltage [V]")
    found = duty(case, log)
    apart = [estimate(replace(case, {"electrical.load_voltage": f"{volts} V"})).net_power for volts in (20, 24)]
    assert found.rows.results["net_power"] == pytest.approx(apart, rel=1e-12)
    assert found.net_energy == pytest.approx(sum(apart) * HOUR, rel=1e-12)


def test_a_flow_of_the_log_replaces_another_way_to_give_it(jacket: Case) -> None:
    found = duty(jacket, written([(0, 1.1), (1, 1.1)], "time [h], hot.mass_flow [kg/s]"))
    one = estimate(replace(jacket, {"hot.mass_flow": "1.1 kg/s"}))
    assert found.net_energy == pytest.approx(2 * HOUR * one.net_power, rel=1e-12)


# ---------------------------------------------------------------- on and off


MIXED = hourly([90, 90, 60, 20, 90, 150, 90])


def mixed(case: Case, flows: Sequence[object] = (70, 0, 150, 70, 70, 70, 70)) -> DutyBalance:
    lines = MIXED.splitlines()
    rows = [f"{line.rpartition(',')[0]}, {flow}" for line, flow in zip(lines[1:], flows, strict=True)]
    return duty(case, "\n".join([lines[0], *rows, ""]))


def test_each_hour_has_its_state(jacket: Case) -> None:
    found = mixed(jacket)
    expected = [ON, NO_FLOW, NOT_WORTH_IT, NOT_HOTTER, ON, NO_ANSWER, ON]
    np.testing.assert_array_equal(found.rows.state, expected)
    assert found.time_on == 3 * HOUR
    assert found.time_off == {STATES[state]: HOUR for state in (NO_FLOW, NOT_HOTTER, NOT_WORTH_IT)}
    (reason, time), *others = found.time_without_answer.items()
    assert (time, others) == (HOUR, []) and "is outside" in reason and "ethylene glycol" in reason
    assert found.covered_time == 7 * HOUR and found.answered_time == 6 * HOUR
    net = found.rows.results["net_power"]
    assert np.isnan(net[5]) and not net[[1, 2, 3]].any()
    assert found.net_energy == pytest.approx(3 * HOUR * net[0], rel=1e-12)
    assert found.mean_net_power == pytest.approx(found.net_energy / (6 * HOUR))
    assert found.yearly_net_energy == pytest.approx(found.net_energy / 6 * 8760)
    assert np.isnan(found.rows.results["hottest_face_temperature"][[1, 2, 3, 5]]).all()


def test_drives_that_are_always_on_cost_power_in_every_hour(jacket: Case) -> None:
    always = mixed(replace(jacket, {"duty.drives": "always on"}))
    np.testing.assert_array_equal(always.rows.state, [ON, NO_FLOW, ON, NOT_HOTTER, ON, NO_ANSWER, ON])
    results = always.rows.results
    assert results["generated_power"][[1, 3]].tolist() == [0.0, 0.0]
    assert results["hot_drive_power"][1] == 0.0
    # the cold stream alone passes the stack at its inlet temperature: the limit of a very small hot flow
    tiny = estimate(replace(jacket, {"hot.volume_flow": "0.0001 L/min"}))
    assert results["cold_drive_power"][1] == pytest.approx(tiny.cold_drive_power, rel=1e-4)
    assert results["net_power"][1] == -results["cold_drive_power"][1]
    assert results["net_power"][3] == -results["cold_drive_power"][3] - results["hot_drive_power"][3] < 0
    assert results["net_power"][2] < 0
    assert always.net_energy < mixed(jacket).net_energy


def test_an_always_driven_stream_out_of_range_has_no_answer(jacket: Case) -> None:
    log = written(
        [(0, 30, 0), (1, 200, 0), (2, 30, 70)], "time [h], cold.inlet_temperature [degC], hot.volume_flow [L/min]"
    )
    found = duty(replace(jacket, {"duty.drives": "always on"}), log)
    np.testing.assert_array_equal(found.rows.state, [NO_FLOW, NO_ANSWER, ON])


def test_standby_is_taken_always_and_auxiliaries_with_the_drives(jacket: Case) -> None:
    case = replace(jacket, {"electrical.converter_standby_power": "2 W", "electrical.auxiliary_power": "3 W"})
    found, bare = mixed(case), mixed(jacket)
    assert found.standby_energy == 2.0 * 6 * HOUR
    assert found.auxiliary_energy == 3.0 * 3 * HOUR
    assert found.net_energy == pytest.approx(bare.net_energy - found.standby_energy - found.auxiliary_energy, rel=1e-12)
    assert found.rows.results["net_power"][1] == -2.0
    on = mixed(replace(case, {"duty.drives": "always on"}))
    assert on.auxiliary_energy == 3.0 * 6 * HOUR


def test_auxiliaries_beyond_the_power_switch_everything_off(jacket: Case) -> None:
    found = duty(replace(jacket, {"electrical.auxiliary_power": "1 kW"}), hourly([90, 91]))
    assert found.time_on == 0 and found.net_energy == 0 and found.most_net_power is None
    assert found.time_off == {STATES[NOT_WORTH_IT]: 2 * HOUR}


def test_no_reading_with_an_answer_says_why(jacket: Case) -> None:
    with pytest.raises(NoAnswerError, match=r"no reading of the log has an answer\nhot.inlet_temperature: .* outside"):
        duty(jacket, hourly([150, 151]))


# ---------------------------------------------------------------- time


def test_a_reading_holds_until_the_next_and_the_last_for_the_usual_step(jacket: Case) -> None:
    log = read_duty_log(
        jacket, written([(0, 80), (1, 81), (2, 82), (4, 83), (5, 84)], "time [h], hot.inlet_temperature [degC]")
    )
    assert (log.duration / HOUR).tolist() == [1, 1, 2, 1, 1]
    assert log.gap_time == 0 and log.usual_step == HOUR and not log.notes


def test_a_long_gap_is_not_filled(jacket: Case) -> None:
    text = written([(0, 80), (1, 81), (11, 82), (12, 83)], "time [h], hot.inlet_temperature [degC]")
    log = read_duty_log(jacket, text)
    assert (log.duration / HOUR).tolist() == [1, 1, 1, 1] and log.gap_time == 9 * HOUR
    assert noted(log) == [(3, "long gap")] and "10 h later" in log.notes[0].text
    assert duty(jacket, log).time_not_covered == 9 * HOUR
    held = read_duty_log(replace(jacket, {"duty.longest_hold": "10 h"}), text)
    assert (held.duration / HOUR).tolist() == [1, 10, 1, 1] and held.gap_time == 0


def test_empty_cells_keep_the_value_before_for_a_time(jacket: Case) -> None:
    log = read_duty_log(jacket, hourly(["", 80, "", "", "", "", 85]))
    assert noted(log) == [(2, "no value"), (7, "no value")]
    np.testing.assert_allclose(log.values["hot.inlet_temperature"][1:5], 353.15)
    assert log.held_cells == 3
    found = duty(jacket, log)
    assert found.time_not_covered == 2 * HOUR and found.covered_time == 5 * HOUR
    np.testing.assert_array_equal(found.rows.state == NOT_COVERED, [True, *[False] * 4, True, False])


@pytest.mark.parametrize(
    ("stamps", "zone", "hours", "notes"),
    [
        # the night in which the clock leaps from 2 to 3
        (["01:00", "03:00", "04:00"], "Europe/Berlin", [1, 1, 1], [(3, "clock changed")]),
        (
            ["00:00", "01:00", "02:30", "03:00", "04:00"],
            "Europe/Berlin",
            [1, 1, 0, 1, 1],
            [(4, "unreadable"), (5, "clock changed")],
        ),
        (["01:00+01:00", "03:00+02:00", "04:00+02:00"], "", [1, 1, 1], [(3, "clock changed")]),
        (["00:00", "01:00", "03:00", "04:00"], "", [1, 2, 1, 1], [(4, "clock perhaps changed")]),
        (["00:00Z", "01:00Z", "02:00Z", "03:00Z"], "", [1, 1, 1, 1], []),
    ],
)
def test_the_spring_night(
    jacket: Case, stamps: list[str], zone: str, hours: list[float], notes: list[tuple[int, str]]
) -> None:
    log = read_duty_log(
        replace(jacket, {"duty.time_zone": zone}),
        written([(f"2026-03-29T{stamp}", 80) for stamp in stamps], "time, hot.inlet_temperature [degC]"),
    )
    assert (log.duration / HOUR).tolist() == hours
    assert noted(log) == notes


@pytest.mark.parametrize(
    ("stamps", "zone", "hours", "notes"),
    [
        # the night in which the clock shows the hour from 2 to 3 twice
        (["01:00", "02:00", "02:00", "03:00"], "Europe/Berlin", [1, 1, 1, 1], [(4, "clock changed")]),
        (["01:30", "02:00", "02:30", "02:00", "02:30", "03:00"], "Europe/Berlin", [0.5] * 6, [(5, "clock changed")]),
        (
            ["01:30", "02:00", "02:30", "02:00", "02:30", "03:00"],
            "",
            [0.5] * 3 + [0, 0, 0.5],
            [(5, "repeated hour"), (6, "repeated hour")],
        ),
        (["01:00", "02:00", "02:00", "03:00"], "", [1, 1, 0, 1], [(4, "repeated hour")]),
        (["01:00+02:00", "02:00+02:00", "02:00+01:00", "03:00+01:00"], "", [1] * 4, [(4, "clock changed")]),
    ],
)
def test_the_autumn_night(
    jacket: Case, stamps: list[str], zone: str, hours: list[float], notes: list[tuple[int, str]]
) -> None:
    log = read_duty_log(
        replace(jacket, {"duty.time_zone": zone}),
        written([(f"2026-10-25T{stamp}", 80) for stamp in stamps], "time, hot.inlet_temperature [degC]"),
    )
    assert (log.duration / HOUR).tolist() == hours
    assert noted(log) == notes


def test_a_log_that_runs_backwards_is_read_from_its_end(jacket: Case) -> None:
    case = replace(jacket, {"duty.time_zone": "Europe/Berlin"})
    stamps = ["01:30", "02:00", "02:30", "02:00", "02:30", "03:00"]
    rows = [(f"2026-10-25T{stamp}", 80 + i) for i, stamp in enumerate(stamps)]
    header = "time, hot.inlet_temperature [degC]"
    ahead, back = (read_duty_log(case, written(each, header)) for each in (rows, rows[::-1]))
    np.testing.assert_array_equal(back.time[::-1], ahead.time)
    np.testing.assert_array_equal(back.duration[::-1], ahead.duration)
    assert noted(back) == [(2, "out of order"), (4, "clock changed")]
    with pytest.raises(CaseError, match="0 of its readings can be used"):
        read_duty_log(case, written([("x", 80), ("y", 81)], header))


@pytest.mark.parametrize("zone", ["Europe/Berlin", "America/New_York", "Australia/Lord_Howe", "Asia/Kolkata"])
def test_a_year_on_a_local_clock_has_all_its_hours(zone: str) -> None:
    """Against the standard library: stamps of every half hour in UTC, shown by the zone's clock without offset."""
    from datetime import UTC
    from zoneinfo import ZoneInfo

    begin = datetime(2026, 1, 1, tzinfo=UTC)
    instants = [begin + timedelta(minutes=30 * i) for i in range(2 * 8760)]
    local = [each.astimezone(ZoneInfo(zone)) for each in instants]
    read = read_time_stamps([each.replace(tzinfo=None).isoformat() for each in local], zone)
    np.testing.assert_array_equal(read.seconds, [each.timestamp() for each in instants])
    assert not read.faults


def test_an_unknown_zone_is_refused(jacket: Case) -> None:
    for zone in ("Nowhere/Town", "../etc", "Europe"):
        with pytest.raises(InputError, match=r"duty.time_zone: .* is no time zone that is known here"):
            duty(replace(jacket, {"duty.time_zone": zone}), hourly([80, 81]))


# ---------------------------------------------------------------- bad readings


@pytest.mark.parametrize(
    ("row", "kind", "text"),
    [
        ("2026-03-02T02:00, abc, 70", "unreadable", '"abc" is not a finite number'),
        ("2026-03-02T02:00, NaN, 70", "unreadable", '"NaN" is not a finite number'),
        ("2026-03-02T02:00, inf, 70", "unreadable", '"inf" is not a finite number'),
        ("2026-03-02T02:00, 1e999, 70", "unreadable", '"1e999" is not a finite number'),
        ("2026-03-02T02:00, 1_0, 70", "unreadable", '"1_0" is not a finite number'),
        ("2026-03-02T02:00, ８０, 70", "unreadable", "is not a finite number"),
        ('2026-03-02T02:00, "80,5", 70', "unreadable", "has a decimal comma"),
        ("2026-03-02T02:00, 80, 70, 5", "unreadable", "4 values for 3 columns"),
        ('2026-03-02T02:00, "80, 70', "unreadable", "unreadable quotes"),
        ("2026-03-02T02:00, -274, 70", "unreadable", "not above 0 K"),
        ("2026-03-02T02:00, 9999, 70", "out of range", "9999.0 degC is not possible; give at least 1 K"),
        ("2026-03-02T02:00, 80, -3", "out of range", "give 0 where the stream stands, or above 0"),
        ("2. March 2026, 80, 70", "unreadable", '"2. March 2026" is no time stamp'),
        ("2026-02-30T02:00, 80, 70", "unreadable", "is no time stamp"),
        (", 80, 70", "unreadable", '"" is no time stamp'),
        ("2026-03-02T02:00+01:00, 80, 70", "unreadable", "has an offset, and the first has none"),
        ("2026-03-02T01:00, 80, 70", "same time", "the same as on line 3"),
        ("2026-03-02T00:30, 80, 70", "out of order", "earlier than a reading before it"),
    ],
)
def test_a_bad_reading_is_told_by_its_line(jacket: Case, row: str, kind: str, text: str) -> None:
    good = hourly([80, 81, 82, 83, 84, 85, 86]).splitlines()
    log = read_duty_log(jacket, "\n".join([*good[:3], row, *good[4:], ""]))
    assert noted(log) == [(4, kind)]
    assert text in log.notes[0].text
    assert log.notes[0].sentence.endswith(NOTES[kind])
    if NOTES[kind].startswith("left out"):
        assert log.problem[2]
        assert (log.duration / HOUR).tolist() == [1, 2, 0, 1, 1, 1, 1]  # the reading before holds
    else:
        assert (log.duration / HOUR).tolist() == [0.5, 2, 0.5, 1, 1, 1, 1] and log.used.all()
    assert len(log.lines) == 7  # nothing is dropped in silence
    with pytest.raises(CaseError, match="record:4: "):
        read_duty_log(jacket, "\n".join([*good[:3], row, *good[4:], ""]), strict=True)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("hot.inlet_temperature [degC]\n80\n", "time: missing; write time, time"),
        ("time, hours [h], hot.inlet_temperature [degC]\n2026-01-01,1,80\n", "time: stands beside hours"),
        ("time, wind [m/s]\n2026-01-01,80\n", "no column is a field of the case that may change"),
        ("time, hot.inlet_temperature\n2026-01-01,80\n", "has no unit in the header"),
        ("time, hot.inlet_temperatur [degC]\n2026-01-01,80\n", "unknown column; is hot.inlet_temperature meant?"),
        ("time, hot.inlet_temperature [bar]\n2026-01-01,80\n", "is no unit of temperature"),
        (
            "time, hot.pressure [Pa], site.ambient_pressure [Pa]\n2026-01-01,1,80\n",
            "site.ambient_pressure: cannot change",
        ),
        ("time, hot.pressure [Pa], hot.duct.gap [mm]\n2026-01-01,1,80\n", "hot.duct.gap: cannot change in a log"),
        ("time, hot.inlet_temperature [degC]\n2026-01-01,80\n", "1 of its readings can be used"),
        ("time, hot.inlet_temperature [degC]\n2026-01-01,a\n2026-01-02,b\n", '0 of its readings .*\n.*:2: .*"a"'),
        ("time, hot.inlet_temperature [degC]\n", "has a header and no readings"),
        ("hours [h], hot.table [K]\n1,2\n", "hot.table: cannot change in a log"),
    ],
)
def test_a_log_that_cannot_be_read_is_refused(jacket: Case, text: str, message: str) -> None:
    with pytest.raises(CaseError, match=message):
        read_duty_log(jacket, text)


def test_a_bin_needs_every_value(jacket: Case) -> None:
    log = read_duty_log(
        jacket, written([(10, 80), (20, ""), (-1, 80), ("", 80), (5, 70)], "hours [h], hot.inlet_temperature [degC]")
    )
    assert noted(log) == [(3, "incomplete"), (4, "out of range"), (5, "incomplete")]
    assert (log.duration / HOUR).tolist() == [10, 0, 0, 0, 5] and log.gap_time == 20 * HOUR


def test_thousands_of_bad_readings_make_a_short_report(jacket: Case) -> None:
    lines = hourly([80 if i % 2 else "bad" for i in range(8000)])
    result = run("duty", str(JACKET), "-", text=lines)
    assert result.exit_code == 0
    assert "The log has 4,000 odd readings" in result.stdout.splitlines()[5]
    assert "unreadable, 4,000 times: left out" in result.stdout
    assert f"and {4000 - MOST_NOTES:,} more, the last on line 8000" in result.stdout
    assert len(result.stdout.splitlines()) < 80
    document = json.loads(run("duty", str(JACKET), "-", "--json", text=lines).stdout)
    assert document["log"]["note_counts"] == {"unreadable": 4000} and len(document["log"]["notes"]) == 1000
    refused = run("duty", str(JACKET), "-", "--strict", text=lines)
    assert refused.exit_code == 2 and "and 3980 more like these" in refused.stderr


cells = st.one_of(
    st.floats(20, 95).map(lambda number: f"{number:.3f}"),
    st.floats(20, 95).map(repr),
    st.integers(20, 95).map(str),
    st.sampled_from(["5e1", "+60.0", ".7e2"]),
)
bad_cells = st.sampled_from(["x", "NaN", "-", "1e", "--5", "80 degC", "1.2.3", "=80", "5000", "0x10", "1,5,5"])


@settings(max_examples=40, deadline=None)
@given(
    st.lists(st.one_of(cells, cells, bad_cells), min_size=3, max_size=30),
    st.sampled_from([",", ";", "\t"]),
    st.booleans(),
)
def test_cells_are_read_as_single_quantities_are(numbers: list[str], separator: str, comma: bool) -> None:
    case = load_case(JACKET)
    comma = comma and separator != ","
    numbers = [*numbers, "80", "81"]
    typed = [number.replace(".", ",") if comma else number for number in numbers]
    quoted = [f'"{number}"' if separator in number else number for number in typed]
    rows = [f"{i}{separator}{number}" for i, number in enumerate(quoted)]
    log = read_duty_log(case, "\n".join([f"time [h]{separator}hot.inlet_temperature [degF]", *rows, ""]))
    wrong = []
    for place, number in enumerate(numbers):
        try:
            value = parse_quantity(f"{number} degF", "temperature") if number != "80 degC" else 0.0
        except InputError:
            value = 0.0
        if value <= 0 or value > 5000 or (comma and number == "1.2.3"):
            wrong.append(place)
        elif place not in wrong:
            assert log.values["hot.inlet_temperature"][place] == value, number
    assert [note.line - 2 for note in log.notes if note.kind in ("unreadable", "out of range")] == wrong
    np.testing.assert_array_equal(np.flatnonzero(~log.used), wrong)


@settings(max_examples=25, deadline=None)
@given(st.permutations(list(range(12))), st.sets(st.integers(1, 10), max_size=6))
def test_the_order_of_readings_does_not_matter_and_none_is_lost(order: list[int], bad: set[int]) -> None:
    case = load_case(JACKET)
    rows = [(i, "bad" if i in bad else 60 + i) for i in range(12)]
    header = "time [h], hot.inlet_temperature [degC]"
    plain, mixed = (read_duty_log(case, written(each, header)) for each in (rows, [rows[i] for i in order]))
    np.testing.assert_array_equal(mixed.duration, plain.duration[order])
    assert plain.duration.sum() + plain.gap_time == 12 * HOUR
    assert {note.line for note in mixed.notes if note.kind == "unreadable"} == {order.index(i) + 2 for i in bad}


# ---------------------------------------------------------------- distribution, year, worth


@settings(max_examples=50, deadline=None)
@given(st.lists(st.tuples(st.floats(-50, 500), st.floats(0.5, 100)), min_size=1, max_size=30))
def test_the_duration_curve_falls_and_counts_time(pairs: list[tuple[float, float]]) -> None:
    power, time = map(np.array, zip(*pairs, strict=True))
    shares = np.linspace(0, 1, 101)
    curve = exceeded(power, time, shares)
    assert curve[0] == power.max() and curve[-1] == power.min()
    assert np.all(np.diff(curve) <= 0)
    for share, value in zip(shares, curve, strict=True):
        assert time[power >= value].sum() >= share * time.sum() * (1 - 1e-9)
        assert time[power > value].sum() <= share * time.sum() * (1 + 1e-9)


def test_a_stated_yearly_operation_is_of_the_time_with_flow(jacket: Case) -> None:
    text = written([(i, 90, 70 if i % 4 else 0) for i in range(8)], HEADER.replace("time", "time [h]"))
    free, stated = duty(jacket, text), duty(replace(jacket, {"site.yearly_operation": "3000 h"}), text)
    assert (free.yearly_time, free.yearly_from_time) == (8760 * HOUR, 8 * HOUR)
    assert (stated.yearly_time, stated.yearly_from_time) == (3000 * HOUR, 6 * HOUR)
    assert stated.yearly_net_energy == pytest.approx(stated.net_energy * 3000 / 6)


def test_worth_and_payback(jacket: Case) -> None:
    priced = replace(
        jacket,
        {
            "site.electricity_value": "0.3 EUR/kWh",
            "cost.currency": "EUR",
            "cost.module": 20.0,
            "cost.converter_per_watt": 0.5,
            "cost.drive_per_watt": 2.0,
        },
    )
    found = duty(priced, hourly([60, 75, 90, 70]))
    best = estimate(replace(priced, {"hot.inlet_temperature": "90 degC", "hot.volume_flow": "70 L/min"}))
    powers = {name: np.array([getattr(best, name)]) for name in ("converted_power", "cold_drive_power")}
    drives = max(found.rows.results["hot_drive_power"])
    assert found.building_cost == pytest.approx(
        building_cost(Batch(priced), {**powers, "hot_drive_power": np.array([drives])})[0], rel=1e-3
    )
    assert found.yearly_value == pytest.approx(0.3 * found.yearly_net_energy / 3.6e6)
    assert found.payback_years == pytest.approx(found.building_cost / found.yearly_value)
    assert np.isnan(duty(replace(priced, {"cost.currency": "USD"}), hourly([60, 75])).payback_years)


# ---------------------------------------------------------------- the command


def run(*arguments: str, text: str | None = None) -> Result:
    return CliRunner().invoke(cli, list(arguments), input=text)


def test_the_report_answers_first(tmp_path: Path) -> None:
    log = tmp_path / "log.csv"
    log.write_text(MIXED, "utf-8")
    result = run("duty", str(JACKET), str(log))
    assert result.exit_code == 0
    lines = result.stdout.splitlines()
    assert lines[3].startswith("Net ") and "kWh in 6.000 h" in lines[3]
    assert "odd readings" not in result.stdout
    assert "no answer 1.000 h" in result.stdout and "holds until the next one, 3.000 h at most" in result.stdout


def test_json_has_a_unit_for_every_number(tmp_path: Path) -> None:
    document = json.loads(run("duty", str(JACKET), "-", "--json", text=MIXED).stdout)
    units = document["units"]
    assert units["net_energy"] == "J" and units["time_on"] == "s" and units["most_net_power"] == "W"
    without = {"drives", "readings", "readings_used", "conditions", "version", "case_hash", "currency", "log"}
    money = {"yearly_value", "building_cost", "payback_years"}
    assert set(document) - set(units) == {"units", *without, *money}
    assert document["net_energy"] == duty(load_case(JACKET), MIXED).net_energy
    assert document["payback_years"] is None


def test_options_of_the_command_are_fields_of_the_case() -> None:
    log = written([(i, 80) for i in (0, 1, 9)], "time [h], hot.inlet_temperature [degC]")
    document = json.loads(
        run("duty", str(JACKET), "-", "--json", "--longest-hold", "8 h", "--drives", "always on", text=log).stdout
    )
    assert document["drives"] == "always on" and document["covered_time"] == pytest.approx(13.5 * HOUR)
    assert run("duty", str(JACKET), "-", "--drives", "sometimes", text=log).exit_code == 2


def test_a_case_may_name_its_log(tmp_path: Path) -> None:
    (tmp_path / "log.csv").write_text(MIXED, "utf-8")
    (tmp_path / "case.toml").write_text(f'{JACKET.read_text("utf-8")}\n[duty]\nlog = "log.csv"\n', "utf-8")
    result = run("duty", str(tmp_path / "case.toml"))
    assert result.exit_code == 0 and "log.csv: 7 readings" in result.stdout.replace("\n", " ")
    missing = run("duty", str(JACKET))
    assert missing.exit_code == 2 and "duty.log: is missing" in missing.stderr
    nowhere = run("duty", str(JACKET), str(tmp_path / "none.csv"))
    assert nowhere.exit_code == 2 and "there is no such file" in nowhere.stderr


def test_no_answer_is_exit_one() -> None:
    result = run("duty", str(JACKET), "-", text=hourly([150, 151]))
    assert result.exit_code == 1 and "no reading of the log has an answer" in result.stderr


@pytest.mark.parametrize("header", ["time", "time [h]", "hours [h]"])
def test_the_plot_is_the_same_each_time(tmp_path: Path, header: str) -> None:
    rows = [(f"2026-01-0{i + 1}" if header == "time" else i, 80 + i) for i in range(5)]
    (tmp_path / "log.csv").write_text(written(rows, f"{header}, hot.inlet_temperature [degC]"), "utf-8")
    for name in ("one.svg", "other.svg"):
        assert run("duty", str(JACKET), str(tmp_path / "log.csv"), "--plot", str(tmp_path / name)).exit_code == 0
    assert (tmp_path / "one.svg").read_bytes() == (tmp_path / "other.svg").read_bytes()


def test_each_reading_has_a_row(jacket: Case) -> None:
    found = mixed(jacket)
    table, columns = duty_table(jacket, found)
    assert {len(values) for values in columns.values()} == {7} and set(columns) == {each.name for each in table.columns}
    assert columns["time"][1] == "2026-03-02T01:00:00"
    assert list(columns["valid"]) == [True] * 5 + [False, True]


@pytest.mark.parametrize("suffix", [".csv", ".parquet", ".nc"])
def test_the_table_is_written_with_units(tmp_path: Path, suffix: str) -> None:
    (tmp_path / "log.csv").write_text(MIXED.replace("20,", "bad,"), "utf-8")
    path = tmp_path / f"rows{suffix}"
    arguments = ("duty", str(JACKET), str(tmp_path / "log.csv"), "-o", str(path), "--drives", "always on")
    assert run(*arguments).exit_code == 0
    assert read_about(path)["command"].endswith("--set 'duty.drives=always on'")
    assert run(*arguments).exit_code == 2  # it exists already
    if suffix == ".csv":
        header, *rows = path.read_text("utf-8").splitlines()
        assert header.startswith("line,time,duration [s],hot.inlet_temperature [K],hot.volume_flow [m^3/s],state,")
        assert "net_power [W]" in header and header.endswith("valid,problem")
        assert len(rows) == 7
        assert rows[3].startswith("5,2026-03-02T03:00:00,0.0,,") and "false" in rows[3] and "finite number" in rows[3]


WEEK = EXAMPLES / "genset-week.toml"


def said(result: Result) -> str:
    return " ".join(result.output.split())


@pytest.mark.parametrize("bad", ["1e300", "1e9"])
@pytest.mark.parametrize("column", ["hours [h]", "time [h]"])
def test_times_beyond_a_century_are_left_out(column: str, bad: str) -> None:
    """A slip of the unit made a year of infinite energy, paid back at once."""
    good = run("duty", str(WEEK), "-", "--json", text=f"{column}, hot.inlet_temperature [degC]\n1, 90\n2, 80\n")
    log = f"{column}, hot.inlet_temperature [degC]\n1, 90\n2, 80\n{bad}, 70\n"
    result = run("duty", str(WEEK), "-", "--json", text=log)
    document = json.loads(result.stdout)
    assert document["net_energy"] == json.loads(good.stdout)["net_energy"]
    assert document["log"]["note_counts"] == {"out of range": 1}
    assert f"{float(bad):g} h" in document["log"]["notes"][0]["text"]


def test_a_log_without_any_reading_says_why() -> None:
    result = run("duty", str(WEEK), "-", text="hours [h], hot.inlet_temperature [degC]\n1e12, 90\n-3, 80\n")
    assert result.exit_code == 1
    assert "no reading is left" in result.output
    assert "record:2: hours: 1e+12 h is more than 1,000,000 h: left out" in result.output
    assert "record:3: hours: -3 h is below zero: left out" in result.output


def test_decimal_commas_between_commas_are_one_fault_with_its_remedy() -> None:
    lines = "\n".join(f"2026-02-02T{hour:02d}:00,{70 + hour},5,{60 + hour},5" for hour in range(24))
    result = run("duty", str(WEEK), "-", text=f"{HEADER}\n{lines}\n")
    assert result.exit_code == 2
    assert "5 values for 3 columns, and 23 more like it; decimals are written with a point" in result.output
    assert len(result.output.splitlines()) == 2
    strict = run("duty", str(JACKET), "-", "--strict", text=f'{HEADER}\n2026-02-02T00:00,"70,5",60\n' + lines)
    assert strict.exit_code == 2 and strict.output.count("decimals are written with a point") == 1


def test_two_flows_of_a_side_are_one_too_many() -> None:
    log = "time [h], hot.volume_flow [L/min], hot.mass_flow [kg/s]\n0, 60, 1\n1, 60, 1\n"
    result = run("duty", str(WEEK), "-", text=log)
    assert result.exit_code == 2
    assert "record: hot.mass_flow and hot.volume_flow are one flow; leave one column of them" in result.output


def test_a_year_is_not_told_by_streams_that_never_flow() -> None:
    """The week states yearly_operation, and here nothing flows that could be scaled to it."""
    log = "hours [h], hot.volume_flow [L/min]\n24, 0\n"
    text = said(run("duty", str(WEEK), "-", text=log))
    assert "The streams never flow together in this log" in text
    assert "The year has 8760 h like the time with an answer, 24.00 h." in text
    assert "like the time in which the streams flow" not in text


def test_bins_of_more_than_a_year_are_asked_about() -> None:
    log = "hours [h], hot.inlet_temperature [degC]\n5000, 90\n{}, 80\n"
    assert "more than a year: is that meant?" in said(run("duty", str(WEEK), "-", text=log.format(5500)))
    assert "more than a year" not in said(run("duty", str(WEEK), "-", text=log.format(3760)))


def test_a_payback_beyond_the_years_of_use_or_with_interest_says_so() -> None:
    text = said(run("duty", str(WEEK)))
    balance = duty(load_case(WEEK))
    assert f"paid back in {balance.payback_years:.1f} years, longer than the 10 years of use." in text
    options = ("--set", "cost.years=80", "--set", "cost.discount_rate=0.03")
    assert f"{balance.payback_years:.1f} years without interest." in said(run("duty", str(WEEK), *options))


def test_one_is_singular() -> None:
    text = said(run("duty", str(JACKET), "-", text="time [h], hot.inlet_temperature [degC]\n0, 90\n1, bad\n2, 90\n"))
    assert "The log has 1 odd reading; what was done" in text and "unreadable, 1 time: left out" in text
