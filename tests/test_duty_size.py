"""A sizing over a log: against every choice answered at every reading, and what must hold in each of them."""

from __future__ import annotations

import itertools
import json
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.cli import cli
from harvest.errors import CaseError, InputError, NoAnswerError
from harvest.model.case import Case
from harvest.model.reading import load_case, replace
from harvest.study.duty import DutyBalance, duty
from harvest.study.duty_log import read_duty_log
from harvest.study.duty_search import MOST_BINS, DutyMeasure, binned
from harvest.study.size import FINALISTS, size

EXAMPLES = Path(__file__).parents[1] / "examples"
JACKET = EXAMPLES / "genset-jacket-water.toml"
HEADER = "hours [h], hot.inlet_temperature [degC], hot.volume_flow [L/min]"
FEW = "\n".join([HEADER, "3000, 90, 75", "2500, 78, 60", "1500, 62, 35", "1000, 40, 0", "700, 25, 20", ""])
ROWS, COLUMNS, LAYERS = [2, 6, 12, 20], [2, 4], [4, 6]


@pytest.fixture(scope="module")
def case() -> Case:
    return replace(
        load_case(JACKET),
        {"size.objective": "yearly energy", "size.rows": ROWS, "size.columns": COLUMNS, "size.layers": LAYERS},
    )


def every_choice(case: Case, log: str) -> dict[tuple[int, int, int], DutyBalance]:
    """Each choice by itself over the whole log."""
    bare = replace(load_case(JACKET), {"duty.drives": case.duty.drives})
    return {
        choice: duty(
            replace(bare, dict(zip(("stack.rows", "stack.columns", "stack.layers"), choice, strict=True))), log
        )
        for choice in itertools.product(ROWS, COLUMNS, LAYERS)
    }


@pytest.mark.parametrize("drives", ["when worth it", "always on"])
def test_the_best_over_bins_is_that_of_every_choice_by_itself(case: Case, drives: str) -> None:
    case = replace(case, {"duty.drives": drives})
    found = size(case, log=FEW)
    alone = every_choice(case, FEW)
    kept = {choice: each for choice, each in alone.items() if not any(each.time_beyond_limits.values())}
    best = max(kept, key=lambda choice: kept[choice].net_energy)
    arrangement = found.arrangement
    assert (arrangement.rows_count, arrangement.columns_count, arrangement.layers_count) == best
    assert found.duty is not None
    assert found.duty.balance.net_energy == pytest.approx(kept[best].net_energy, rel=1e-12)
    assert arrangement.net_power == pytest.approx(kept[best].mean_net_power, rel=1e-12)
    assert found.duty.binned_net_power == pytest.approx(kept[best].mean_net_power, rel=1e-12)
    assert found.duty.bins == found.duty.conditions == 5
    curve = found.curve
    for place in range(len(curve.module_count)):
        choice = (int(curve.rows_count[place]), int(curve.columns_count[place]), int(curve.layers_count[place]))
        assert curve.net_power[place] == pytest.approx(alone[choice].mean_net_power, rel=1e-12, abs=1e-9), choice
        answered = alone[choice].answered_time
        assert curve.generated_power[place] == pytest.approx(
            alone[choice].generated_energy / answered, rel=1e-12, abs=1e-9
        )


def test_one_condition_is_the_sizing_at_a_point(case: Case) -> None:
    point = size(replace(case, {"size.objective": "net power"}))
    inlet = f"{case.hot.inlet_temperature!r}"
    found = size(case, log=f"hours [h], hot.inlet_temperature [K]\n100, {inlet}\n")
    assert str(found.arrangement) == str(point.arrangement)
    # a choice that is never on breaks no limit, so that the curve over a log has more counts, with nothing
    places = np.searchsorted(found.curve.module_count, point.curve.module_count)
    np.testing.assert_allclose(found.curve.net_power[places], np.maximum(point.curve.net_power, 0.0), rtol=1e-12)
    assert not np.delete(found.curve.net_power, places).any()


def long_log(rare: str = "") -> str:
    random = np.random.default_rng(11)
    rows = [
        f"{i}, {random.uniform(60, 95):.2f}, {0 if i % 24 < 6 else random.uniform(20, 80):.2f}" for i in range(24 * 30)
    ]
    return "\n".join([HEADER.replace("hours", "time"), *rows, rare, ""])


def test_a_long_log_is_searched_in_bins_and_answered_whole(case: Case) -> None:
    found = size(case, log=long_log())
    assert found.duty is not None
    assert found.duty.bins < MOST_BINS + 10 < found.duty.conditions == 712
    assert found.duty.finalists == FINALISTS
    assert found.duty.binned_net_power == pytest.approx(found.arrangement.net_power, rel=2e-3)
    alone = every_choice(case, long_log())
    kept = [each.net_energy for each in alone.values() if not any(each.time_beyond_limits.values())]
    assert found.duty.balance.net_energy == pytest.approx(max(kept), rel=1e-12)


def test_a_limit_holds_in_the_rarest_hour(case: Case) -> None:
    """One hour of a doubled flow in a month is in no bin's mean, and yet no choice may break the limit in it."""
    limited = replace(case, {"limits.hot_pressure_drop": "24 kPa", "duty.drives": "always on"})
    usual, with_peak = size(limited, log=long_log()), size(limited, log=long_log("720, 90, 150"))
    assert usual.duty is not None and with_peak.duty is not None
    assert not any(with_peak.duty.balance.time_beyond_limits.values())
    assert with_peak.duty.balance.rows.results["hot_pressure_drop"][-1] <= 24e3
    assert with_peak.arrangement != usual.arrangement
    assert with_peak.choices_beyond_limits["hot_pressure_drop"] > usual.choices_beyond_limits["hot_pressure_drop"]


def test_the_best_over_a_log_gives_no_less_over_it_than_the_best_at_a_point(case: Case) -> None:
    log = "\n".join([HEADER, "500, 92, 75", "8000, 55, 25", ""])
    point = size(replace(case, {"size.objective": "net power"}))
    found = size(case, log=log)
    assert found.duty is not None
    assert found.duty.balance.net_energy >= duty(point.best_case, log).net_energy


def test_hours_that_no_fluid_is_served_for_strike_out_no_choice(case: Case) -> None:
    found = size(case, log=FEW + "200, 150, 60\n")
    assert not found.choices_invalid
    assert found.duty is not None
    (time,) = found.duty.balance.time_without_answer.values()
    assert time == 200 * 3600
    assert str(found.arrangement) == str(size(case, log=FEW).arrangement)
    with pytest.raises(NoAnswerError, match="no reading of the log has an answer"):
        size(case, log=f"{HEADER}\n10, 150, 60\n20, 160, 60\n")


def test_costs_are_of_a_year_over_the_log(case: Case) -> None:
    priced = replace(
        case,
        {
            "cost.currency": "EUR",
            "cost.module": 20.0,
            "cost.converter_per_watt": 1.0,
            "site.electricity_value": "0.3 EUR/kWh",
        },
    )
    found = size(priced, log=FEW)
    assert found.duty is not None and found.front is not None
    balance = found.duty.balance
    assert found.arrangement.building_cost == pytest.approx(balance.building_cost, rel=1e-12)
    assert balance.payback_years == pytest.approx(balance.building_cost / (0.3 * balance.yearly_net_energy / 3.6e6))


columns = st.lists(
    st.tuples(st.floats(280, 370), st.floats(0.1, 3.0), st.floats(0.01, 50.0), st.sampled_from([0, 0, 0, 1, 2])),
    min_size=1,
    max_size=120,
)


@settings(max_examples=60, deadline=None)
@given(columns)
def test_bins_keep_time_means_and_extremes(rows: list[tuple[float, float, float, int]]) -> None:
    temperature, flow, time, kind = map(np.array, zip(*rows, strict=True))
    (bins, kinds), share = binned(np.array([temperature, flow]), time, kind)
    assert bins.shape == (2, len(share)) and len(kinds) == len(share)
    assert len(share) <= max(MOST_BINS, 3) + 4
    assert share.sum() == pytest.approx(1.0)
    for each in np.unique(kind):
        assert share[kinds == each].sum() == pytest.approx(time[kind == each].sum() / time.sum())
    for row, values in zip(bins, (temperature, flow), strict=True):
        assert (row * share).sum() == pytest.approx((values * time).sum() / time.sum())
        if (kind == 0).any():
            assert row[kinds == 0].max() == values[kind == 0].max()
            assert row[kinds == 0].min() == values[kind == 0].min()


def test_a_log_is_needed(case: Case, tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"duty.log: is missing"):
        size(case)
    with pytest.raises(CaseError, match="there is no such file"):
        size(case, log=tmp_path / "none.csv")


def test_bins_of_a_short_log_are_its_conditions(case: Case) -> None:
    measure = DutyMeasure.of(case, read_duty_log(case, FEW))
    assert sorted(np.round(measure.share * 8700)) == [700, 1000, 1500, 2500, 3000]
    assert measure.standing["hot"].sum() == 1 and not measure.standing["cold"].any()


def test_the_command_takes_a_log(tmp_path: Path) -> None:
    (tmp_path / "log.csv").write_text(FEW, "utf-8")
    axes = [part for axis in ("size.rows=[4, 8]", "size.layers=[4, 6]") for part in ("--set", axis)]
    arguments = ["size", str(JACKET), *axes, "--duty", str(tmp_path / "log.csv")]
    report = CliRunner().invoke(cli, arguments)
    assert report.exit_code == 0, report.output
    assert "kWh in a year" in report.stdout and "each of the log's 5 conditions" in report.stdout
    document = json.loads(CliRunner().invoke(cli, [*arguments, "--json"]).stdout)
    assert document["objective"] == "yearly energy"
    assert document["duty"]["balance"]["units"]["net_energy"] == "J"
    assert document["duty"]["binned_net_power"] == pytest.approx(document["duty"]["balance"]["mean_net_power"])


def test_the_shipped_week_is_sized_by_its_log() -> None:
    found = size(load_case(EXAMPLES / "genset-week.toml"))
    assert found.objective == "yearly energy" and found.duty is not None
    assert found.duty.balance.log.label.endswith("genset-week.csv")
    assert found.duty.balance.yearly_net_energy > 0


def test_wirings_are_searched_over_a_log_too() -> None:
    log = (
        "hours [h], hot.inlet_temperature [degC], hot.mass_flow [kg/s]\n2000, 440, 0.09\n3000, 330, 0.06\n1000, 60, 0\n"
    )
    axes = ["size.rows=[6]", "size.columns=[3]", "size.layers=[4]", 'size.objective="yearly energy"']
    given, searched = (
        size(load_case(EXAMPLES / "genset-exhaust.toml", [*axes, f'size.wiring="{wiring}"']), log=log)
        for wiring in ("as given", "search")
    )
    assert given.duty is not None and searched.duty is not None
    assert searched.duty.balance.net_energy >= given.duty.balance.net_energy * (1 - 1e-12)
    again = duty(searched.best_case, log)
    assert again.net_energy == searched.duty.balance.net_energy
    assert searched.arrangement.net_power == pytest.approx(again.mean_net_power, rel=1e-12)


def test_of_wirings_that_give_the_same_over_a_log_one_below_60_volts_is_taken() -> None:
    """Without mismatch the 16 rows give the same in strings of 16 and of 32, of which those of 32 stand at 77 V."""
    week = load_case(EXAMPLES / "genset-week.toml", ["size.rows=[16]", "size.columns=[4]", "size.layers=[8]"])
    given, searched = (size(replace(week, {"size.wiring": wiring})) for wiring in ("as given", "search"))
    assert given.duty is not None and searched.duty is not None
    assert searched.duty.balance.net_energy == pytest.approx(given.duty.balance.net_energy, rel=1e-8)
    assert given.best.open_circuit_voltage > 60 > searched.best.open_circuit_voltage
    narrow = size(replace(week, {"size.wiring": "search", "electrical.converter_window": ["18 V", "60 V"]}))
    assert narrow.duty is not None and not any(narrow.duty.balance.time_beyond_limits.values())
    assert narrow.duty.balance.net_energy >= given.duty.balance.net_energy * (1 - 1e-8)


def test_costs_of_the_best_are_those_over_the_whole_log() -> None:
    found = size(load_case(EXAMPLES / "genset-week.toml", ["size.rows=[12, 16]"]))
    assert found.duty is not None and found.front is not None
    assert found.duty.bins < found.duty.conditions
    cost = found.duty.balance.building_cost
    assert found.arrangement.building_cost == cost and cost in found.front.building_cost
    place = int(np.searchsorted(found.curve.module_count, found.arrangement.module_count))
    generated = found.duty.balance.generated_energy / found.duty.balance.answered_time
    assert found.curve.generated_power[place] == generated


def test_the_report_says_which_powers_are_means_and_which_wiring_gives_as_much() -> None:
    report = CliRunner().invoke(cli, ["size", str(EXAMPLES / "genset-week.toml")]).stdout
    said = " ".join(report.split())
    assert "Powers of arrangements below are means over the log" in said
    assert "All at the case's own streams, not over the log." in said
    assert "32 strings of 16 in series (across 4, layers 1, row blocks 1) give 163.1 W too and stand at 38.29 V" in said


def test_another_goal_is_not_given_up_for_a_log_in_silence() -> None:
    week, log = str(EXAMPLES / "genset-week.toml"), str(EXAMPLES / "genset-week.csv")
    goal = ("--set", 'size.objective="cost per kilowatt-hour"')
    refused = CliRunner().invoke(cli, ["size", week, *goal, "--duty", log])
    assert refused.exit_code == 2
    assert 'size.objective: "cost per kilowatt-hour" is not looked for over a log; set it to' in refused.output
    power = CliRunner().invoke(
        cli, ["size", week, "--set", 'size.objective="net power"', "--set", "size.rows=[4]", "--duty", log, "--json"]
    )
    assert json.loads(power.stdout)["objective"] == "yearly energy"


def test_a_best_that_gives_nothing_over_a_log_is_not_worth_it() -> None:
    week = ["size", str(EXAMPLES / "genset-week.toml")]
    never_on = ["--set", "size.rows=[4]", "--set", 'limits.hot_pressure_drop="0.01 kPa"']
    sentence = "Not worth it: no choice gives more over the log than it takes."
    assert sentence in CliRunner().invoke(cli, [*week, *never_on]).stdout
    assert sentence not in CliRunner().invoke(cli, [*week, "--set", "size.rows=[4]"]).stdout
