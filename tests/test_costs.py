"""What a design costs: by hand, against the sums of its years, and what is said where nothing can be."""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.cli import cli
from harvest.model.batch import Batch
from harvest.model.costs import annuity_factor, discounted_payback
from harvest.model.estimate import estimate, estimate_batch
from harvest.model.reading import load_case

JACKET = Path(__file__).parents[1] / "examples" / "genset-jacket-water.toml"
PRICES = {
    "module": 20.0,
    "exchanger_per_area": 300.0,
    "layer": 15.0,
    "converter": 80.0,
    "converter_per_watt": 0.5,
    "drive": 60.0,
    "drive_per_watt": 2.0,
    "fixed": 500.0,
    "years": 12.0,
    "discount_rate": 0.04,
}
GIVEN = [f"cost.{name}={price}" for name, price in PRICES.items()] + ["cost.currency=EUR"]
ELECTRICITY = "site.electricity_value=0.9 EUR/kWh"


def told(*options: str) -> str:
    arguments = [str(JACKET), *(part for each in options for part in ("--set", each))]
    done = CliRunner().invoke(cli, ["estimate", *arguments])
    assert done.exit_code == 0, done.output
    return " ".join(done.stdout.split())


def test_costs_by_hand() -> None:
    answer = estimate(load_case(JACKET, [*GIVEN, ELECTRICITY, "site.yearly_operation=7000 h"]))
    # 6 layers of 8 rows x 4 columns on 44 mm, a hot and a cold plate each
    drives = answer.hot_drive_power + answer.cold_drive_power
    by_hand = 192 * 20 + 2 * 192 * 0.044**2 * 300 + 6 * 15 + 80 + 0.5 * answer.converted_power + 60 + 2 * drives + 500
    assert answer.building_cost == pytest.approx(by_hand, rel=1e-12)
    assert answer.cost_per_net_watt == pytest.approx(by_hand / answer.net_power, rel=1e-12)
    energy = answer.net_power / 1000.0 * 7000.0
    yearly = by_hand * 0.04 / (1.0 - 1.04**-12)
    assert answer.cost_per_kilowatt_hour == pytest.approx(yearly / energy, rel=1e-12)
    assert answer.payback_years == pytest.approx(by_hand / (0.9 * energy), rel=1e-12)
    assert answer.currency == "EUR"


def test_annuity() -> None:
    assert annuity_factor(np.array([0.0, 0.05]), np.array([10.0, 10.0])) == pytest.approx(
        [0.1, 0.05 / (1 - 1.05**-10)], rel=1e-12
    )


@settings(max_examples=60, deadline=None)
@given(st.floats(0.0, 0.3), st.integers(1, 40), st.floats(1.0, 1e4))
def test_the_discounted_payback_ends_where_the_years_make_up_the_cost(rate: float, years: int, yearly: float) -> None:
    worth = sum(yearly / (1.0 + rate) ** year for year in range(1, years + 1))
    found = discounted_payback(np.array([worth]), np.array([yearly]), np.array([rate]))
    assert found[0] == pytest.approx(years, rel=1e-6)
    assert found[0] >= worth / yearly * (1 - 1e-9)


def test_a_cost_above_all_the_years_to_come_is_never_paid_back() -> None:
    found = discounted_payback(np.array([1000.0, 1000.0, 1000.0]), np.array([49.0, 0.0, np.nan]), np.full(3, 0.05))
    assert found[:2].tolist() == [np.inf, np.inf] and np.isnan(found[2])


def test_without_prices_there_is_no_cost() -> None:
    done = CliRunner().invoke(cli, ["estimate", str(JACKET), "--json"])
    document = json.loads(done.stdout)
    names = ("building_cost", "cost_per_net_watt", "cost_per_kilowatt_hour", "payback_years")
    assert all(document[name] is None for name in (*names, "discounted_payback_years"))
    assert document["currency"] == ""
    assert "Cost ----" not in told()


def test_prices_change_no_other_result_and_no_hash() -> None:
    plain, priced = estimate(load_case(JACKET)), estimate(load_case(JACKET, [*GIVEN, ELECTRICITY]))
    assert plain.case_hash == priced.case_hash
    assert plain.net_power == priced.net_power


def test_prices_can_vary_from_case_to_case() -> None:
    case = load_case(JACKET, ["cost.module=1", ELECTRICITY])
    answers = estimate_batch(Batch(case, 3, {"cost.module": np.array([0.0, 10.0, 20.0])}))
    assert answers.building_cost.tolist() == [0.0, 1920.0, 3840.0]


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ((*GIVEN,), "payback not told: give site.electricity_value"),
        (
            (*GIVEN, "site.electricity_value=0.3 USD/kWh"),
            "payback not told: site.electricity_value is in USD and the prices in EUR",
        ),
        ((*GIVEN, ELECTRICITY, "hot.drive_efficiency=0.001"), "payback never: no net power is left"),
        ((*GIVEN, "site.electricity_value=0.01 EUR/kWh"), "never at a discount rate of 4 % a year; longer than the 12"),
        (("cost.module=1", "cost.currency=EUR", ELECTRICITY), "years at 0.9 EUR/kWh Checks"),
        (("cost.module=1", ELECTRICITY), "the prices in no named currency"),
    ],
)
def test_the_report_says_when_it_is_paid_back_or_why_not(options: tuple[str, ...], words: str) -> None:
    assert words in told(*options)


def test_a_year_of_worth_and_the_payback_agree() -> None:
    answer = estimate(load_case(JACKET, [*GIVEN, ELECTRICITY]))
    assert math.isfinite(answer.discounted_payback_years)
    assert answer.discounted_payback_years > answer.payback_years
