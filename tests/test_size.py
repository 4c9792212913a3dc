"""Sizing: every choice tried, against exact optima, brute force, and what must hold between searches."""

from __future__ import annotations

import contextlib
import itertools
import json
import os
import pty
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner, Result
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.cli import cli
from harvest.errors import CaseError, NoAnswerError
from harvest.model.batch import Batch
from harvest.model.case import Case
from harvest.model.estimate import estimate, estimate_batch
from harvest.model.reading import load_case, read_case, replace
from harvest.model.search import SEARCHED, search_batch
from harvest.report.files import case_text
from harvest.report.size_sheet import size_report
from harvest.study import size as sizing
from harvest.study.limits import LIMITS, WINDOW
from harvest.study.size import marginal_power, row_blocks, size

EXAMPLES = Path(__file__).parents[1] / "examples"
JACKET = EXAMPLES / "genset-jacket-water.toml"

CONDUCTANCE = 0.5
"""Of one module between two fluids, nearly all of it the module's own [W/K]."""
FLOW = 0.012
CP = 4000.0
PLAIN = """
[hot]
fluid = "table"
inlet_temperature = "360 K"
mass_flow = "{hot_flow!r} kg/s"
pressure = "1 bar"
drive = "free"
[hot.table]
density = "1000 kg/m^3"
heat_capacity = "4000 J/(kg K)"
viscosity = "0.001 Pa s"
conductivity = "0.6 W/(m K)"
[hot.duct]
gap = "1 mm"
area_ratio = 1000
[cold]
fluid = "table"
inlet_temperature = "300 K"
mass_flow = "{cold_flow!r} kg/s"
pressure = "1 bar"
drive = "free"
[cold.table]
density = "1000 kg/m^3"
heat_capacity = "4000 J/(kg K)"
viscosity = "0.001 Pa s"
conductivity = "0.6 W/(m K)"
[cold.duct]
gap = "1 mm"
area_ratio = 1000
[stack]
layers = 1
rows = 10
columns = 1
row_pitch = "40 mm"
column_pitch = "40 mm"
[module]
footprint = ["40 mm", "40 mm"]
couples = 100
seebeck = "1e-4 V/K"
resistance = "1 ohm"
conductance = "0.5 W/K"
[electrical]
{wiring}
[size]
rows = {{ from = 1, to = {most} }}
"""


def plain_case(ratio: float, wiring: str, most: int = 220) -> Case:
    """Counterflow of constant conductance with C_min = FLOW * CP on the hot side and C_min / C_max = `ratio`."""
    return read_case(PLAIN.format(hot_flow=FLOW, cold_flow=FLOW / ratio, wiring=wiring, most=most))


@pytest.mark.parametrize(
    ("ratio", "transfer_units", "wiring"),
    [
        *((ratio, units, "row_blocks") for ratio, units in ((0.25, 1.848), (0.5, 1.386), (1.0, 1.0))),
        *((ratio, units, "series") for ratio, units in ((0.25, 1.257), (0.5, 1.213), (1.0, 1.0))),
    ],
)
def test_the_count_on_a_counterflow_exchanger_is_the_exact_one(
    ratio: float, transfer_units: float, wiring: str
) -> None:
    """Exact with fixed conductance and ZT near 0: effectiveness^2/NTU for a series string, ln(1/Cr)/(1 - Cr) apart."""
    case = plain_case(ratio, "" if wiring == "series" else f"row_blocks = {[1] * 10}\nindependent = true")
    whole = conductance_of(case)
    near = round(transfer_units * FLOW * CP / whole)
    found = size(replace(case, {"size.rows": list(range(1, 221) if wiring == "series" else range(near - 6, near + 7))}))
    counts = found.curve.module_count
    units = counts * whole / (FLOW * CP)
    # in a string the mean difference counts, with converters of its own each row's, squared
    power = effectiveness(units, ratio) ** 2 / units if wiring == "series" else sum_of_squares(units, ratio)
    assert found.arrangement.module_count == counts[np.argmax(power)]
    assert abs(found.arrangement.module_count - transfer_units * FLOW * CP / whole) < 0.6
    assert not found.at_bounds


def effectiveness(units: Any, ratio: float) -> Any:
    """Effectiveness of a counterflow exchanger (Kays and London)."""
    if ratio == 1.0:
        return units / (1.0 + units)
    decay = np.exp(-units * (1.0 - ratio))
    return (1.0 - decay) / (1.0 - ratio * decay)


def sum_of_squares(units: Any, ratio: float) -> Any:
    """Integral of the squared local difference over the exchanger, in inlet differences squared."""
    share = effectiveness(units, ratio)
    first, last = 1.0 - ratio * share, 1.0 - share
    if ratio == 1.0:
        return units * first**2
    return (first**2 - last**2) / (2.0 * (1.0 - ratio))


def conductance_of(case: Case) -> float:
    """Conductance of one module with its films [W/K], from a stack of one row."""
    answer = estimate(replace(case, {"stack.rows": 1, "electrical.row_blocks": [1], "electrical.independent": False}))
    hot_share = answer.hot_heat_flow / (FLOW * CP) / 60.0
    cold_flow = float(answer.cold_mass_flow) * CP
    ratio = FLOW * CP / cold_flow
    if ratio > 0.999999:
        return hot_share / (1.0 - hot_share) * FLOW * CP
    return float(np.log((1.0 - ratio * hot_share) / (1.0 - hot_share)) / (1.0 - ratio) * FLOW * CP)


BRUTE = {
    "genset-jacket-water.toml": {"rows": [4, 9, 14, 30], "columns": [2, 4], "layers": [4, 6, 8]},
    "bakery-flue.toml": {"rows": [2, 5, 8, 12], "columns": [6, 12], "layers": [2, 3, 4]},
    "genset-exhaust.toml": {"rows": [3, 10, 14, 16], "columns": [3, 6], "layers": [2, 4]},
    "hot-spring.toml": {"rows": [4, 11, 25], "columns": [2, 4], "layers": [4, 6, 8]},
}


def sized(name: str, axes: dict[str, list[int]], *more: str) -> Case:
    return load_case(
        EXAMPLES / name, [f"size.{each}={values}" for each, values in axes.items()] + ["size.wiring=as given", *more]
    )


def keeps_to_limits(case: Case) -> tuple[bool, float]:
    """Whether an estimate on its own is valid and passes the checks of the limits, and its net power."""
    answer = estimate(case)
    names = {name.replace("_", " ") for name in (*LIMITS, WINDOW)}
    failed = any(check.name in names and check.status == "fail" for check in answer.checks)
    return answer.valid and not failed, answer.net_power


@pytest.mark.parametrize("name", BRUTE)
def test_a_loop_over_single_estimates_finds_the_same_best(name: str) -> None:
    case = sized(name, BRUTE[name])
    found = size(case)
    best: tuple[float, tuple[int, ...]] = (-np.inf, ())
    invalid = beyond = 0
    for choice in itertools.product(*BRUTE[name].values()):
        values: dict[str, Any] = dict(zip(sizing.COUNTS, choice, strict=True))
        if (blocks := row_blocks(case, choice[0])) is not None:
            values["electrical.row_blocks"] = blocks
        try:
            allowed, net = keeps_to_limits(replace(case, values))
        except CaseError:
            invalid += 1
            continue
        beyond += not allowed
        if allowed and net > best[0]:
            best = net, choice
    chosen = found.arrangement
    assert (chosen.rows_count, chosen.columns_count, chosen.layers_count) == best[1]
    assert found.best.net_power == best[0]
    assert chosen.net_power == pytest.approx(best[0], rel=1e-12)
    assert sum(found.choices_invalid.values()) == invalid
    assert max(found.choices_beyond_limits.values(), default=0) <= beyond <= sum(found.choices_beyond_limits.values())


def test_a_search_gives_the_numbers_of_an_estimate() -> None:
    for name in ("genset-jacket-water.toml", "genset-exhaust.toml", "textbook-array.toml", "stove-wall-sensor.toml"):
        case = load_case(EXAMPLES / name)
        found, whole = search_batch(Batch(case)), estimate_batch(Batch(case))
        assert found.problem[0] == ""
        for result in SEARCHED:
            if result in whole.scalars and np.isfinite(whole.scalars[result][0]):
                assert found.scalars[result][0] == whole.scalars[result][0], (name, result)


@settings(max_examples=12, deadline=None)
@given(st.integers(2, 30), st.integers(1, 20), st.sampled_from([5.0, 12.0, 20.0]))
def test_wider_bounds_never_worsen_and_a_limit_never_improves(most: int, more: int, kilopascal: float) -> None:
    def best(rows: int, limit: float) -> float:
        case = load_case(
            JACKET,
            [
                f"size.rows={{from=1,to={rows}}}",
                "size.columns=[2,4]",
                f"limits.hot_pressure_drop={limit} kPa",
                f"limits.cold_pressure_drop={limit} kPa",
            ],
        )
        try:
            return size(case).best.net_power
        except NoAnswerError:
            return -np.inf

    narrow = best(most, kilopascal)
    assert best(most + more, kilopascal) >= narrow
    assert best(most, 2.0 * kilopascal) >= narrow


def test_choices_without_an_answer_are_counted_by_reason_and_never_as_zero() -> None:
    wide = 'electrical.converter_window=["1 V", "60 V"]'
    case = load_case(JACKET, ["size.rows=[1, 2]", "size.layers=[3, 5, 6]", "hot.drive_efficiency=0.001", wide])
    found = size(case)
    assert found.best.net_power < 0.0  # an invalid choice that counted as zero would win
    assert found.choices_tried == 6
    assert list(found.choices_invalid.values()) == [4]
    assert "even number of layers" in next(iter(found.choices_invalid))
    with pytest.raises(NoAnswerError, match=r"6 choices: stack\.layers: ducts that serve"):
        size(load_case(JACKET, ["size.rows=[1, 2]", "size.layers=[3, 5, 7]"]))


def test_a_limit_that_binds_is_told_with_what_it_costs() -> None:
    axes = ["size.rows={from=1,to=40}", "size.columns=[2,4]", 'electrical.converter_window=["1 V", "60 V"]']
    found = size(load_case(JACKET, [*axes, "limits.hot_pressure_drop=4 kPa"]))
    free = size(load_case(JACKET, [*axes, "limits.hot_pressure_drop=400 kPa"]))
    names = [each.limit for each in found.binding_limits]
    assert "hot_pressure_drop" in names
    told = found.binding_limits[names.index("hot_pressure_drop")]
    assert told.without.net_power == pytest.approx(free.best.net_power, rel=1e-12)
    assert told.net_power_gain > 0.0
    with pytest.raises(NoAnswerError, match=r"beyond limits\.hot_pressure_drop"):
        size(load_case(JACKET, [*axes, "limits.hot_pressure_drop=1 Pa"]))


def test_measures_and_mass_are_limits_too() -> None:
    axes = ["size.rows={from=1,to=30}", "size.columns=[2,4]", "size.layers=[2,4,6]"]
    free = size(load_case(JACKET, axes)).best
    for limit, result, value in (
        ("maximum_length", "stack_length", "0.62 m"),
        ("maximum_width", "stack_width", "10 cm"),
        ("maximum_height", "stack_height", "5 cm"),
        ("maximum_module_mass", "module_mass", "4 kg"),
    ):
        case = load_case(JACKET, [*axes, f"limits.{limit}={value}"])
        found = size(case)
        allowed = getattr(case.limits, limit)
        assert getattr(found.best, result) <= allowed < getattr(free, result)
        assert limit in [each.limit for each in found.binding_limits]  # a narrow stack meets its pressure drop too
        assert found.choices_beyond_limits[limit] > 0
        assert next(each.status for each in found.best.checks if each.name == limit.replace("_", " ")) == "pass"
    with pytest.raises(CaseError, match=r"module\.mass: is missing; limits\.maximum_module_mass"):
        size(replace(plain_case(1.0, ""), {"limits.maximum_module_mass": 3.0}))


def test_a_best_at_a_bound_is_told() -> None:
    found = size(load_case(JACKET, ["size.rows={from=1,to=5}"]))
    assert [(each.field, each.end) for each in found.at_bounds] == [("stack.rows", "highest")]
    assert not size(plain_case(1.0, "")).at_bounds


def test_fields_with_a_unit_are_refined_around_the_best() -> None:
    axes = ["size.rows=[10, 20]", 'size.hot.duct.gap={from="1 mm", to="4 mm", points=4}']
    found = size(load_case(JACKET, axes))
    gap = found.arrangement.fields["hot.duct.gap"]
    case = load_case(JACKET, [f"stack.rows={found.arrangement.rows_count}"])
    gaps = np.linspace(1e-3, 4e-3, 1201)
    fine = search_batch(Batch(case, 1201, {"hot.duct.gap": gaps})).scalars
    inside = np.where(fine["hot_pressure_drop"] <= 30e3, fine["net_power"], -np.inf)
    assert found.best.net_power >= (1.0 - 2e-4) * inside.max()
    assert abs(gap - gaps[np.argmax(inside)]) < 5e-5
    assert found.best.net_power > 1.0001 * max(
        estimate(replace(case, {"hot.duct.gap": each})).net_power for each in (1e-3, 2e-3, 3e-3, 4e-3)
    )


def test_blocks_of_other_rows_are_even_and_no_longer_than_the_longest() -> None:
    case = load_case(EXAMPLES / "genset-exhaust.toml")
    assert case.electrical.row_blocks == (4, 5, 5)
    found = {rows: row_blocks(case, rows) for rows in (1, 5, 6, 14, 15, 16)}
    assert found == {1: (1,), 5: (5,), 6: (3, 3), 14: (4, 5, 5), 15: (5, 5, 5), 16: (4, 4, 4, 4)}


def test_objectives() -> None:
    axes = ["size.rows={from=1,to=30}", "size.columns=[2,4]"]
    most = size(load_case(JACKET, axes))
    target = 0.8 * most.best.net_power
    few = size(load_case(JACKET, [*axes, "size.objective=fewest modules", f"size.target_net_power={target} W"]))
    curve = most.curve
    assert few.best.net_power >= target
    assert few.arrangement.module_count == curve.module_count[curve.net_power >= target].min()
    with pytest.raises(NoAnswerError, match="no choice meets the objective"):
        size(load_case(JACKET, [*axes, "size.objective=fewest modules", "size.target_net_power=9 MW"]))
    costs = ["cost.module=20", "cost.fixed=2000", "cost.layer=15", "cost.currency=EUR", "cost.years=8"]
    cheap = size(load_case(JACKET, [*axes, *costs, "size.objective=cost per net watt"]))
    front = cheap.front
    assert front is not None
    paying = front.net_power > 0
    assert cheap.best.cost_per_net_watt == pytest.approx(
        (front.building_cost / front.net_power)[paying].min(), rel=1e-12
    )
    chosen = cheap.arrangement
    assert chosen.building_cost == 20 * chosen.module_count + 2000 + 15 * chosen.layers_count
    hours = 2.88e7 / 3600.0
    yearly_energy = cheap.arrangement.net_power / 1000.0 * hours
    assert cheap.best.cost_per_kilowatt_hour == pytest.approx(chosen.building_cost / 8 / yearly_energy, rel=1e-12)
    assert np.all(np.diff(front.building_cost) > 0) and np.all(np.diff(front.net_power) > 0)


@settings(max_examples=100, deadline=None)
@given(st.lists(st.floats(-50, 200), min_size=1, max_size=30))
def test_marginal_power_is_the_slope_of_the_upper_hull(net: list[float]) -> None:
    counts, power = np.arange(1.0, len(net) + 1.0) * 2.0, np.array(net)
    slopes = marginal_power(counts, power)
    assert np.all(np.diff(slopes) <= 1e-9)
    hull = np.cumsum(slopes * 2.0)
    assert np.all(hull >= power - 1e-7)
    assert np.isclose(hull, power, atol=1e-7).any()


def test_the_worthwhile_count_is_where_the_next_modules_bring_less() -> None:
    case = load_case(JACKET, ["size.rows={from=1,to=60}", "size.least_net_watts_per_module=0.2 W"])
    found = size(case)
    assert found.worthwhile is not None
    count, curve = found.worthwhile.module_count, found.curve
    place = int(np.searchsorted(curve.module_count, count))
    assert curve.marginal_power[place] >= 0.2 > curve.marginal_power[place + 1]
    one, five = found.fewest_within_1_percent, found.fewest_within_5_percent
    assert one is not None and five is not None and five <= one <= found.arrangement.module_count


def run(*arguments: str) -> Result:
    return CliRunner().invoke(cli, ["size", *arguments])


def test_the_written_case_gives_the_same_estimate_to_the_last_digit(tmp_path: Path) -> None:
    path, plot = tmp_path / "best.toml", tmp_path / "best.svg"
    axes = ("--set", "size.rows={from=3,to=20}", "--set", 'size.hot.duct.gap=["1.7 mm", "2.3 mm"]')
    told = run(str(JACKET), *axes, "--json", "--write", str(path), "--plot", str(plot))
    assert told.exit_code == 0, told.output
    document = json.loads(told.stdout)
    again = CliRunner().invoke(cli, ["estimate", str(path), "--json"])
    best = json.loads(again.stdout)
    for name, value in best.items():
        if name not in ("units",):
            assert document["best"][name] == value, name
    assert "<svg" in plot.read_text()
    assert {"rows_count", "columns_count", "layers_count"} <= document["best"].keys()
    assert {"module_count", "generated_power", "net_power", "rows_count", "columns_count", "layers_count"} <= (
        document["curve"].keys()
    )
    assert document["choices_tried"] == 36 and document["choices_invalid"] == {}
    assert {"fewest_within_1_percent", "fewest_within_5_percent", "binding_limits"} <= document.keys()


def test_a_written_case_finds_its_records_from_another_folder(tmp_path: Path) -> None:
    home, away = tmp_path / "home", tmp_path / "away"
    home.mkdir()
    away.mkdir()
    record = 'footprint = ["40 mm", "40 mm"]\ncouples = 100\nseebeck = "0.05 V/K"\n'
    (home / "own.toml").write_text(f'{record}resistance = "2 ohm"\nconductance = "0.6 W/K"\n')
    text = JACKET.read_text().replace("demo-bismuth-telluride-40", "own.toml")
    (home / "case.toml").write_text(text + "[size]\nrows = [4, 6]\n")
    found = size(load_case(home / "case.toml"))
    (away / "best.toml").write_text(case_text(found.best_case))
    assert estimate(load_case(away / "best.toml")).net_power == found.best.net_power


def test_the_report_gives_the_answer_first() -> None:
    told = run(
        str(JACKET),
        *("--set", "size.rows={from=1,to=60}", "--set", "stack.layers=8"),
        *("--set", "cost.module=20", "--set", "cost.fixed=900"),
    )
    assert told.exit_code == 0, told.output
    lines = told.stdout.splitlines()
    assert lines[3].startswith("Best for the most net power:") and "modules" in lines[3]
    assert all(len(line) <= 120 for line in lines)
    assert "within 1 % of the most net power" in told.stdout and "cost per watt" in told.stdout
    assert "window holds the voltage at 60.00 V" in " ".join(told.stdout.split())
    assert told.stderr == ""


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ((), "size: the section [size] is missing"),
        (("size.rows=[]",), "size.rows: is neither a list nor"),
        (("size.rows=[0]",), "size.rows: 0 is not possible"),
        (("size.rows={from=5,to=2}",), "size.rows: goes from 5 down to 2"),
        (("size.rows={from=1}",), "size.rows: needs from and to"),
        (("size.rows={from=1,to=9,step=0}",), "size.rows: step"),
        (("size.rows=[3]", "size.objective=cost per net watt"), "needs prices"),
        (("size.rows=[3]", "size.objective=fewest modules"), "size.target_net_power: is missing"),
        (("size.rows=[3]", "size.objective=most fun"), "size.objective"),
        (("size.hot.duct.gab=[3]",), "size.hot.duct.gab: is no number that shapes a design; did you mean"),
        (("size.stack.rows=[3]",), "size.stack.rows: is written as rows in [size]"),
        (("size.limits.back_pressure=['1 kPa']",), "size.limits.back_pressure: is no number that shapes a design"),
        (('size.hot.duct.gap=["2 K"]',), "size.hot.duct.gap"),
        (('size.hot.duct.gap={from="2 mm",to="3 mm"}',), "needs step or points"),
        (('size.hot.mass_flow=["1 kg/s"]',), "hot.mass_flow: the base case has none"),
        (
            (
                *(f'size.{side}.duct.gap=["1 mm", "2 mm"]' for side in ("hot", "cold")),
                *(f'size.{side}.duct.wall_thickness=["1 mm", "2 mm"]' for side in ("hot", "cold")),
                'size.stack.row_pitch=["44 mm", "46 mm"]',
            ),
            "at most 4 can be refined",
        ),
        (("size.rows={from=1,to=9999}", "size.columns={from=1,to=9999}"), "at most 2,000,000 are tried"),
    ],
)
def test_what_is_given_wrongly_is_named(options: tuple[str, ...], message: str) -> None:
    told = run(str(JACKET), *(part for each in options for part in ("--set", each)))
    assert told.exit_code == 2, told.output
    assert message in told.stderr


def test_choices_within_the_limits_are_told_and_a_fault_without_load_has_its_remedy() -> None:
    """A hot face that only fails without load is no limit of a search, and its check says how to make it one."""
    axes = ("--set", "size.rows=[10, 14, 20]", "--set", 'size."hot.duct.fin_pitch"=["3 mm", "5 mm"]')
    report = " ".join(run(str(EXAMPLES / "genset-exhaust.toml"), *axes).stdout.split())
    assert "Not acceptable as it stands: hot face without load." in report
    assert "limits.hot_face_temperature_without_load keeps a sizing below" in report
    document = json.loads(run(str(EXAMPLES / "genset-exhaust.toml"), *axes, "--json").stdout)
    beyond, within = document["choices_beyond_limits"], document["choices_within_limits"]
    assert list(beyond) == ["hot_face_temperature"]
    assert within + sum(beyond.values()) == document["choices_tried"] == 6
    assert f"{within} of those tried keep to every limit" in report


def test_each_line_of_curve_and_front_can_be_built_again() -> None:
    """With a field varied, arrangement and field of a line give its net power in an estimate of their own."""
    axes = ["size.rows=[4, 8, 12]", 'size."hot.duct.gap"=["2 mm", "3 mm"]', "cost.module=15", 'cost.currency="EUR"']
    found = size(load_case(JACKET, axes))
    assert found.front is not None
    for told in (found.curve, found.front):
        for place, gap in enumerate(told.fields["hot.duct.gap"]):
            alone = estimate(
                load_case(JACKET, [f"stack.rows={told.rows_count[place]}", f'hot.duct.gap="{float(gap)!r} m"'])
            )
            assert alone.net_power == pytest.approx(told.net_power[place], rel=1e-9)
    assert "Each has its own hot.duct.gap, told by --json." in size_report(load_case(JACKET, axes), found)


def test_one_choice_is_singular() -> None:
    told = run(str(JACKET), "--set", "size.columns=[1, 2, 3]", "--set", "size.rows=[4]")
    assert told.exit_code == 1
    assert "with an answer: 1 choice" in told.stderr and "1 choice: beyond" in told.stderr
    assert "2 choices: electrical.strings_across: must divide columns" in told.stderr


def test_a_long_title_is_not_cut_off_and_no_formula(tmp_path: Path) -> None:
    title = "Two prices, $50 and $60 a module, " * 4
    plot = tmp_path / "best.svg"
    told = run(str(JACKET), "--set", "size.rows=[4, 8]", "--set", f'title="{title}"', "--plot", str(plot))
    assert told.exit_code == 0, told.output
    lines = [line for line in plot.read_text().splitlines() if "$50" in line or "best arrangement" in line]
    assert len(lines) > 1 and max(map(len, lines)) < 250


def test_files_are_judged_before_the_search(tmp_path: Path) -> None:
    there = tmp_path / "there.toml"
    there.write_text("")
    axes = ("--set", "size.rows=[3]")
    assert "exists already" in run(str(JACKET), *axes, "--write", str(there)).stderr
    assert "no folder" in run(str(JACKET), *axes, "--write", str(tmp_path / "no" / "b.toml")).stderr
    assert "a plot ends in" in run(str(JACKET), *axes, "--plot", "b.bmp").stderr
    assert there.read_text() == ""


def test_sizing_changes_no_hash_and_objects_are_library_names() -> None:
    import harvest

    plain, asked = load_case(JACKET), load_case(JACKET, ["size.rows=[3, 4]", "cost.module=3"])
    assert estimate(plain).case_hash == estimate(asked).case_hash
    assert harvest.size is size


@pytest.mark.parametrize("terminal", [True, False])
def test_progress_is_told_at_a_terminal_only(terminal: bool) -> None:
    command = [sys.executable, "-m", "harvest", "size", str(JACKET), "--set", "size.rows={from=1,to=5}"]
    ours, theirs = pty.openpty() if terminal else os.pipe()
    done = subprocess.run(command, stdout=subprocess.PIPE, stderr=theirs, env={**os.environ}, check=True)
    # what a terminal was told can be lost once its other end is closed
    os.set_blocking(ours, False)
    told = b""
    with contextlib.suppress(BlockingIOError):
        while part := os.read(ours, 10_000):
            told += part
    os.close(theirs)
    os.close(ours)
    assert (b"5 of 5 choices" in told) if terminal else told == b""
    assert b"choices\r" not in done.stdout


def test_an_interrupted_search_leaves_no_file(tmp_path: Path) -> None:
    path = tmp_path / "best.toml"
    command = [sys.executable, "-m", "harvest", "size", str(JACKET), "--write", str(path)]
    command += ["--set", "size.rows={from=1,to=200}", "--set", "size.columns={from=2,to=200,step=2}"]
    command += ["--set", "size.layers={from=2,to=40,step=2}"]
    running = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, env={**os.environ})
    time.sleep(2.5)
    running.send_signal(signal.SIGINT)
    out, told = running.communicate(timeout=60)
    assert (running.returncode, out) == (130, b""), told
    assert list(tmp_path.iterdir()) == []
