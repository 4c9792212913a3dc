"""Wiring found by a sizing: against loops over single estimates, and what must hold with windows and limits."""

from __future__ import annotations

import itertools
import json
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.cli import cli
from harvest.errors import CaseError, NoAnswerError
from harvest.model.batch import Batch
from harvest.model.case import Case
from harvest.model.estimate import estimate
from harvest.model.reading import load_case, replace
from harvest.model.search import SEARCHED_WITHOUT_LOAD, search_batch
from harvest.report.files import case_text
from harvest.study.limits import LIMITS, WINDOW
from harvest.study.size import size
from harvest.study.wirings import MOST_BLOCKS, even_blocks, groupings, wirings

EXAMPLES = Path(__file__).parents[1] / "examples"
JACKET = EXAMPLES / "genset-jacket-water.toml"
EXHAUST = EXAMPLES / "genset-exhaust.toml"
SEARCH = "size.wiring=search"


def divisors(number: int) -> list[int]:
    return [each for each in range(1, number + 1) if number % each == 0]


def rewired(case: Case, strings: int, in_series: int, blocks: tuple[int, ...]) -> Case:
    return replace(
        case,
        {
            "electrical.strings_across": strings,
            "electrical.layers_in_series": in_series,
            "electrical.row_blocks": blocks,
        },
    )


def every_wiring(case: Case) -> list[Case]:
    """All divisors, also those that are electrically alike, times all even blocks."""
    rows, columns, layers = case.stack.rows, case.stack.columns, case.stack.layers
    return [
        rewired(case, strings, in_series, even_blocks(rows, count))
        for strings, in_series in itertools.product(divisors(columns), divisors(layers))
        for count in range(1, min(rows, MOST_BLOCKS) + 1)
    ]


def keeps_to_limits(case: Case) -> tuple[bool, float]:
    answer = estimate(case)
    names = {name.replace("_", " ") for name in (*LIMITS, WINDOW)} | {"hot face without load"}
    if case.limits.hot_face_temperature_without_load is None:
        names -= {"hot face without load"}
    failed = any(check.name in names and check.status == "fail" for check in answer.checks)
    return answer.valid and not failed, answer.net_power


@settings(max_examples=60, deadline=None)
@given(st.integers(1, 60), st.integers(1, 60))
def test_groupings_are_every_ratio_once(columns: int, layers: int) -> None:
    found = groupings(columns, layers)
    assert all(columns % strings == 0 and layers % in_series == 0 for strings, in_series in found)
    ratios = [Fraction(in_series, strings) for strings, in_series in found]
    every = {Fraction(in_series, strings) for strings in divisors(columns) for in_series in divisors(layers)}
    assert len(ratios) == len(set(ratios))
    assert set(ratios) == every


@settings(max_examples=60, deadline=None)
@given(st.integers(1, 200), st.integers(1, 12))
def test_even_blocks_add_up_and_differ_by_one_at_most(rows: int, count: int) -> None:
    blocks = even_blocks(rows, min(rows, count))
    assert sum(blocks) == rows and len(blocks) == min(rows, count)
    assert max(blocks) - min(blocks) <= 1


@pytest.mark.parametrize(
    ("path", "options"),
    [
        (JACKET, ["size.rows=[6, 15]", "size.columns=[2, 4]", "size.layers=[4]"]),
        (EXHAUST, ["size.rows=[8, 14]", "size.layers=[2, 4]", "limits.maximum_open_circuit_voltage=60 V"]),
    ],
)
def test_a_loop_over_every_wiring_of_single_estimates_finds_the_same_best(path: Path, options: list[str]) -> None:
    case = load_case(path, [*options, SEARCH])
    found = size(case)
    assert case.size is not None
    axes = (case.size.rows or (), case.size.columns or (case.stack.columns,), case.size.layers or ())
    best = -np.inf
    for rows, columns, layers in itertools.product(*axes):
        values = {"stack.rows": rows, "stack.columns": columns, "stack.layers": layers}
        plain = {"electrical.strings_across": 1, "electrical.layers_in_series": 1, "electrical.row_blocks": (rows,)}
        for wired in every_wiring(replace(case, {**values, **plain})):
            allowed, net = keeps_to_limits(wired)
            best = max(best, net if allowed else -np.inf)
    assert found.best.net_power == pytest.approx(best, rel=1e-8)
    assert keeps_to_limits(found.best_case) == (True, found.best.net_power)


def test_a_free_wiring_answers_where_the_given_one_misses_the_window() -> None:
    axes = ["size.rows=[6, 8]", "electrical.strings_across=4", 'electrical.converter_window=["40 V", "60 V"]']
    with pytest.raises(NoAnswerError, match=r"beyond electrical\.converter_window"):
        size(load_case(JACKET, axes))
    found = size(load_case(JACKET, [*axes, SEARCH]))
    assert 40.0 <= found.best.voltage <= 60.0
    assert found.best.net_power > 0.0


def test_a_free_wiring_is_never_worse_and_a_limit_never_better() -> None:
    axes = ["size.rows=[10, 20, 30]", "size.columns=[2, 4]"]
    given_wiring, free = size(load_case(JACKET, axes)), size(load_case(JACKET, [*axes, SEARCH]))
    assert free.best.net_power > given_wiring.best.net_power
    before = np.inf
    for limit in ("200 V", "60 V", "40 V", "25 V"):
        found = size(load_case(JACKET, [*axes, SEARCH, f"limits.maximum_open_circuit_voltage={limit}"]))
        assert found.best.net_power <= before * (1 + 1e-9)
        assert found.best.open_circuit_voltage <= float(limit.split()[0])
        before = found.best.net_power


def test_every_wiring_of_the_best_is_told_with_what_it_gives() -> None:
    case = load_case(JACKET)
    told = wirings(case)
    assert len(told) == MOST_BLOCKS * len(groupings(4, 6))
    for each in (told[0], told[len(told) // 2], told[-1]):
        answer = estimate(rewired(case, each.strings_across, each.layers_in_series, each.row_blocks))
        assert each.net_power == pytest.approx(answer.net_power, rel=1e-9)
        assert each.open_circuit_voltage == pytest.approx(answer.open_circuit_voltage, rel=1e-9)
        window = next(check.status for check in answer.checks if check.name == "converter window")
        assert (each.problem == "") == (window == "pass")
        least, most = each.modules_in_series
        assert each.strings * least <= answer.module_count <= each.strings * most
    usable = [each for each in told if not each.problem]
    assert all(one.net_power >= (1 - 1e-7) * two.net_power for one, two in itertools.pairwise(usable))


@pytest.mark.parametrize("path", [JACKET, EXHAUST])
def test_the_loss_of_a_wiring_is_the_mismatch_loss_of_its_estimate(path: Path) -> None:
    case = load_case(path)
    free = replace(case, {"electrical.converter_window": None})
    own = next(
        each
        for each in wirings(free)
        if (each.strings_across, each.row_blocks)
        == (case.electrical.strings_across, case.electrical.row_blocks or (case.stack.rows,))
        and each.layers_in_series == 1
    )
    assert own.loss == pytest.approx(estimate(free).mismatch_loss, abs=1e-9)


def test_the_written_wiring_gives_the_same_estimate_to_the_last_digit(tmp_path: Path) -> None:
    path = tmp_path / "best.toml"
    options = ("size.rows=[6, 15]", "size.columns=[2, 3]", SEARCH, "limits.maximum_open_circuit_voltage=50 V")
    arguments = [str(EXHAUST), "--json", "--write", str(path), *(p for each in options for p in ("--set", each))]
    done = CliRunner().invoke(cli, ["size", *arguments])
    assert done.exit_code == 0, done.output
    document = json.loads(done.stdout)
    again = json.loads(CliRunner().invoke(cli, ["estimate", str(path), "--json"]).stdout)
    assert {name: document["best"][name] for name in again if name != "units"} == {
        name: value for name, value in again.items() if name != "units"
    }
    written = load_case(path)
    assert written.electrical.strings_across == document["best"]["strings_across"]
    assert list(written.electrical.row_blocks or ()) == (document["best"]["row_blocks"] or [])
    assert "[size]" not in path.read_text()
    assert document["wirings"] and document["wirings"][0]["problem"] == ""
    assert estimate(load_case(path)).open_circuit_voltage <= 50.0


def test_fields_with_a_unit_are_refined_with_the_wiring_too() -> None:
    options = ["size.rows=[10, 20]", 'size.hot.duct.gap={from="1.5 mm", to="3 mm", points=3}', SEARCH]
    found = size(load_case(JACKET, options))
    assert found.choices_refined > 0
    assert estimate(found.best_case).net_power == found.best.net_power
    assert found.best.net_power >= size(load_case(JACKET, [options[0], SEARCH])).best.net_power


def test_results_without_load_are_those_of_an_estimate() -> None:
    for name in ("genset-jacket-water.toml", "genset-exhaust.toml", "textbook-array.toml"):
        case = load_case(EXAMPLES / name)
        found, whole = search_batch(Batch(case), without_load=True).scalars, estimate(case)
        assert found["open_circuit_face_temperature"][0] == whole.open_circuit_face_temperature
        assert found["highest_open_circuit_voltage"][0] == pytest.approx(whole.open_circuit_voltage, rel=1e-12)
        assert not set(SEARCHED_WITHOUT_LOAD) & search_batch(Batch(case)).scalars.keys()


def test_limits_without_load_are_checked_and_obeyed() -> None:
    axes = ["size.rows={from=1,to=30}", "size.layers=[4, 6, 8]"]
    free = size(load_case(EXHAUST, axes)).best
    hottest, voltage = free.open_circuit_face_temperature, free.open_circuit_voltage
    for option, check, result, allowed in (
        (
            f"limits.hot_face_temperature_without_load={hottest - 5.0} K",
            "hot face without load",
            "open_circuit_face_temperature",
            hottest - 5.0,
        ),
        (
            f"limits.maximum_open_circuit_voltage={voltage - 3.0} V",
            "maximum open circuit voltage",
            "open_circuit_voltage",
            voltage - 3.0,
        ),
    ):
        found = size(load_case(EXHAUST, [*axes, option]))
        assert getattr(found.best, result) <= allowed
        assert found.best.net_power < free.net_power
        assert option.split("=")[0].removeprefix("limits.") in [each.limit for each in found.binding_limits]
        assert next(each.status for each in found.best.checks if each.name == check) == "pass"
    strict = estimate(load_case(EXHAUST, ["limits.maximum_open_circuit_voltage=20 V"]))
    assert next(each.status for each in strict.checks if each.name == "maximum open circuit voltage") == "fail"


def test_a_hot_face_may_be_allowed_more_without_load_but_never_more_than_the_module_bears() -> None:
    case = load_case(EXHAUST)
    opened = estimate(case).open_circuit_face_temperature

    def status(*options: str) -> tuple[str, float]:
        answer = estimate(load_case(EXHAUST, list(options)))
        check = next(each for each in answer.checks if each.name == "hot face without load")
        return check.status, check.limit

    assert status(f"limits.hot_face_temperature={opened - 2.0} K") == ("fail", opened - 2.0)
    of_module = case.module.maximum_hot_face_temperature
    assert of_module is not None and of_module > opened + 1.0
    both = (f"limits.hot_face_temperature={opened - 2.0} K", "limits.hot_face_temperature_without_load=900 K")
    assert status(*both) == ("pass", of_module)


def test_a_wiring_is_not_listed_and_searched() -> None:
    with pytest.raises(CaseError, match=r"size\.electrical\.strings_across: is listed beside wiring"):
        load_case(JACKET, ["size.rows=[4]", SEARCH, "size.electrical.strings_across=[1, 2]"])


def test_the_fewest_modules_are_told_with_their_arrangement() -> None:
    found = size(load_case(JACKET, ["size.rows={from=1,to=40}", "size.columns=[2,4]"]))
    for share, count, fewest in (
        (0.01, found.fewest_within_1_percent, found.fewest_arrangement_within_1_percent),
        (0.05, found.fewest_within_5_percent, found.fewest_arrangement_within_5_percent),
    ):
        assert fewest is not None and fewest.module_count == count
        assert fewest.rows_count * fewest.columns_count * fewest.layers_count == count
        assert fewest.net_power >= (1.0 - share) * found.most_net_power
        counts = {"rows": fewest.rows_count, "columns": fewest.columns_count, "layers": fewest.layers_count}
        case = replace(load_case(JACKET), {f"stack.{name}": count for name, count in counts.items()})
        assert estimate(case).net_power == pytest.approx(fewest.net_power, rel=1e-9)


def test_the_report_tells_wiring_and_case_text_is_whole() -> None:
    arguments = [str(JACKET), "--set", "size.rows=[20, 40]", "--set", SEARCH]
    done = CliRunner().invoke(cli, ["size", *arguments])
    assert done.exit_code == 0, done.output
    assert "Wiring of the best design" in done.stdout and "chosen" in done.stdout
    assert all(len(line) <= 120 for line in done.stdout.splitlines())
    given_wiring = CliRunner().invoke(cli, ["size", *arguments[:-2]])
    assert 'try size.wiring = "search"' in " ".join(given_wiring.stdout.split())
    assert "as given" in given_wiring.stdout
    assert "strings_across" in case_text(size(load_case(JACKET, ["size.rows=[20]", SEARCH])).best_case)


def test_blocks_of_a_driven_stack_that_cannot_be_built_are_a_reason_and_no_crash() -> None:
    case = load_case(EXAMPLES / "workshop-water-blocks.toml", ["size.rows=[1, 2, 3, 4]", SEARCH])
    found = size(case)
    assert sum(found.choices_invalid.values()) > 0
    assert found.arrangement.rows_count in (2, 4)
