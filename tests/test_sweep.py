"""Sweeps: values of single estimates, order, choices, faults, samples, and what is refused."""

from __future__ import annotations

import dataclasses
import itertools
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.errors import CaseError, InputError
from harvest.model.batch import Batch
from harvest.model.case import DECLARATIONS, Case, value_at
from harvest.model.case_fields import Declaration
from harvest.model.estimate import estimate
from harvest.model.reading import load_case, replace
from harvest.model.search import Outcomes, search_batch
from harvest.quantities import example_of, parse_quantity
from harvest.study.sweep import SweepPart, SweepPlan, planned, varied_field, with_axes

EXAMPLES = Path(__file__).parents[1] / "examples"
EXHAUST = EXAMPLES / "genset-exhaust.toml"
JACKET = EXAMPLES / "genset-jacket-water.toml"
NUMERIC = [
    path
    for path, each in DECLARATIONS.items()
    if each.form in ("quantity", "integer", "curve")
    and not each.descriptive
    and not path.startswith(("limits.", "module.generator_rating"))
]


def solved(plan: SweepPlan) -> SweepPart:
    parts = [plan.solved(plan.chunk(index)) for index in range(plan.chunks)]
    numbers = {name: np.concatenate([part.numbers[name] for part in parts]) for name in plan.results}
    texts = {name: np.concatenate([part.texts[name] for part in parts]) for name in plan.check_texts}
    return SweepPart(numbers, texts, np.concatenate([part.problem for part in parts]))


def tried_values(case: Case, path: str, declaration: Declaration) -> list[float]:
    """A few values of a field around its own, some of them not possible."""
    own = value_at(case, path)
    if declaration.form == "integer":
        first = 1 if own is None else int(own)
        values: list[float] = [first, first + 1, 2 * first]
    else:
        if own is None or not isinstance(own, float):
            own = parse_quantity(_example(declaration.kind), declaration.kind)
        values = [1.02 * own, 0.5 * own] if own else [0.0, 1e-3, 0.3]
    low, high = declaration.minimum, declaration.maximum
    fitting = [
        each
        for each in values
        if (low is None or each >= low) and (high is None or each <= high)
        and (declaration.above is None or each > declaration.above)
    ]  # fmt: skip
    return list(dict.fromkeys(fitting))


def _example(kind: str) -> Any:
    text = example_of(kind)
    return float(text) if text.replace(".", "").isdigit() else text


STUDY = ["genset-jacket-water", "workshop-water-blocks", "stove-wall-sensor", "cooler-from-the-drawer"]


@pytest.mark.parametrize("name", ["genset-exhaust", *(pytest.param(each, marks=pytest.mark.slow) for each in STUDY)])
def test_every_number_gives_what_single_cases_give(name: str) -> None:
    """A combination that a single case refuses has no answer."""
    case = load_case(EXAMPLES / f"{name}.toml")
    tried = 0
    for path in NUMERIC:
        values = tried_values(case, path, DECLARATIONS[path])
        singles: list[Outcomes | None] = []
        for value in values:
            try:
                singles.append(search_batch(Batch(replace(case, {path: value}))))
            except CaseError:
                singles.append(None)
        try:
            found = solved(planned(with_axes(case, {path: values})))
        except CaseError:
            assert not any(singles), path
            continue
        for place, single in enumerate(singles):
            if single is None or single.problem[0]:
                assert found.problem[place], (path, values[place])
                assert np.isnan(found.numbers["net_power"][place])
                continue
            assert not found.problem[place], (path, values[place], found.problem[place])
            for result, expected in single.scalars.items():
                if result not in found.numbers:  # costs without prices
                    assert np.isnan(expected).all()
                    continue
                got = found.numbers[result][place]
                # sums along the rows of one case alone run in another order than those of many side by side
                near = pytest.approx(expected[0], rel=1e-12, abs=1e-12, nan_ok=True)
                assert got == near, (path, values[place], result)
            tried += 1
    assert tried > 60


@pytest.mark.parametrize(
    ("changes", "axes"),
    [
        ({}, {"hot.duct.fin_pitch": [1e-3, 7e-3], "hot.duct.fin_thickness": [5e-4, 1e-3, 2e-3]}),
        ({}, {"stack.columns": [3, 6, 3000], "stack.layers": [4, 600], "electrical.strings_across": [2, 3]}),
        ({}, {"stack.row_pitch": [0.04, 0.046], "hot.duct.width": [0.1, 0.2]}),
        ({}, {"hot.duct.faces": [1, 2], "cold.duct.faces": [1, 2], "stack.layers": [1, 2, 3, 4]}),
        ({}, {"hot.mass_flow": [0.05, 0.09], "electrical.layers_in_series": [1, 2, 3]}),
        ({"hot.duct.connection_diameter": None}, {"hot.duct.connection_loss_coefficient": [0.0, 2.0]}),
        (
            {"hot.duct.wall_thickness": None, "hot.duct.wall_conductivity": None},
            {"hot.duct.wall_thickness": [0.0, 2e-3]},
        ),
    ],
)
def test_what_a_single_case_refuses_has_no_answer(changes: dict[str, Any], axes: dict[str, list[float]]) -> None:
    """Whichever of the combinations comes first, and although no other is refused."""
    if "hot.duct.connection_diameter" in changes:
        changes = {**changes, "hot.duct.connection_loss_coefficient": None}
    case = replace(load_case(EXHAUST), changes)
    for backwards in (False, True):
        given = {path: values[::-1] if backwards else values for path, values in axes.items()}
        found = solved(planned(with_axes(case, given)))
        refused = []
        for place, chosen in enumerate(itertools.product(*given.values())):
            try:
                single = search_batch(Batch(replace(case, dict(zip(given, chosen, strict=True)))))
                refused.append(bool(single.problem[0]))
            except CaseError:
                refused.append(True)
                assert found.problem[place], chosen
        assert any(refused) and not all(refused)
        assert [bool(problem) for problem in found.problem] == refused


def test_a_grid_runs_through_all_values_in_order() -> None:
    case = load_case(EXHAUST)
    axes: dict[str, Any] = {"hot.fuel": ["diesel", "methane"], "hot.mass_flow": [0.07, 0.09], "stack.layers": [4, 6, 8]}
    plan = planned(with_axes(case, axes))
    values = plan.at(np.arange(plan.count))
    found = solved(plan)
    assert (plan.shape, plan.count) == ((2, 2, 3), 12)
    for place, (fuel, flow, layers) in enumerate(itertools.product(("diesel", "methane"), (0.07, 0.09), (4, 6, 8))):
        assert plan.labels("hot.fuel")[values["hot.fuel"][place]] == fuel
        assert (values["hot.mass_flow"][place], values["stack.layers"][place]) == (flow, layers)
        single = estimate(replace(case, {"hot.fuel": fuel, "hot.mass_flow": flow, "stack.layers": layers}))
        assert found.numbers["net_power"][place] == pytest.approx(single.net_power, rel=1e-12)


def test_chunks_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    case = with_axes(load_case(EXHAUST), {"hot.mass_flow": np.linspace(0.05, 0.1, 40), "stack.layers": [4, 6]})
    whole = solved(planned(case))
    monkeypatch.setattr("harvest.study.sweep.CHUNK_CELLS", 14 * 8)
    plan = planned(case)
    assert plan.chunks == 10
    for name, values in solved(plan).numbers.items():
        np.testing.assert_array_equal(values, whole.numbers[name])


CHOICES: dict[str, list[Any]] = {
    "hot.duct.kind": ["smooth", "plain fins"],
    "cold.fluid": ["ethylene glycol", "water"],
    "electrical.load": ["matched", "maximum power", "open circuit"],
    "electrical.independent": [True, False],
    "module.use": ["demo-bismuth-telluride-40", "demo-cooler-40"],
    "electrical.converter_window": [["10 V", "60 V"], ["20 V", "40 V"]],
    "electrical.row_blocks": [[14], [7, 7], [4, 5, 5]],
    "stack.segments": [1, 2],
    "site.ambient_pressure": ["0.9 bar", "1 bar"],
}
WITHOUT_USE = {"hot.duct.kind": ["hot.duct.fin_pitch", "hot.duct.fin_thickness", "hot.duct.fin_conductivity"]}


@pytest.mark.parametrize("path", CHOICES)
def test_choices_are_cases_of_their_own(path: str) -> None:
    """Fields that do not apply to a choice are left out, such as the fins of a smooth duct."""
    case = load_case(EXHAUST)
    found = solved(planned(with_axes(case, {path: CHOICES[path], "hot.mass_flow": [0.07, 0.09]})))
    for place, (value, flow) in enumerate(itertools.product(CHOICES[path], [0.07, 0.09])):
        left_out = WITHOUT_USE.get(path, []) if value == "smooth" else []
        if value == "water":
            left_out = ["cold.volume_fraction"]
        single = estimate(replace(case, {**dict.fromkeys(left_out), path: value, "hot.mass_flow": flow}))
        assert single.valid and not found.problem[place]
        for name in ("net_power", "voltage", "cold_outlet_temperature", "hot_pressure_drop"):
            near = pytest.approx(getattr(single, name), rel=1e-12, abs=1e-12, nan_ok=True)
            assert found.numbers[name][place] == near, (value, name)


def test_a_fault_is_a_row_that_says_why() -> None:
    axes = {
        "stack.layers": [3, 4],
        "hot.inlet_temperature": ["440 degC", "2190 K"],
        "cold.fluid": ["ethylene glycol", "reservoir", "water"],
    }
    plan = planned(with_axes(load_case(EXHAUST), axes))
    found = solved(plan)
    assert len(found.problem) == 12
    problems = found.problem.reshape(2, 2, 3)
    assert all("even number of layers" in each for each in problems[0].ravel() if "cold." not in each)
    assert problems[1, 0, 0] == problems[1, 0, 2] == ""
    assert "cold." in problems[1, 0, 1]
    assert all(problems[1, 1])
    assert np.isnan(found.numbers["net_power"][found.problem != ""]).all()
    assert np.isfinite(found.numbers["net_power"][found.problem == ""]).all()


def test_a_curve_is_varied_as_a_number() -> None:
    """The case gives a polynomial; each value is the estimate with that number in its place."""
    case = load_case(EXAMPLES / "textbook-array.toml", ['module.seebeck=["0.14 V/K", "1e-4 V/K^2"]'])
    axis = {"module.seebeck": {"from": "0.04 V/K", "to": "0.05 V/K", "points": 2}}
    found = solved(planned(with_axes(case, axis)))
    for place, seebeck in enumerate(("0.04 V/K", "0.05 V/K")):
        single = estimate(replace(case, {"module.seebeck": seebeck}))
        assert found.numbers["net_power"][place] == pytest.approx(single.net_power, rel=1e-12)
    with pytest.raises(CaseError, match=r"module.seebeck: is given beside \[module.legs\]"):
        planned(with_axes(load_case(JACKET), axis))


@pytest.mark.parametrize("sample", [None, 4096])
def test_a_structure_that_one_count_makes_valid_is_found(sample: int | None) -> None:
    """Blocks of 96 and 100 rows need 196 rows, one of 200 numbers, which no even choice of few need hit."""
    axes = {"stack.rows": {"from": 1, "to": 200, "step": 1}, "electrical.row_blocks": [[96, 100], [4, 4], [7, 400]]}
    found = planned(with_axes(load_case(EXAMPLES / "genset-jacket-water.toml"), axes, sample=sample))
    part = found.solved(np.arange(found.count))
    values = found.at(np.arange(found.count))
    valid = part.problem == ""
    fits = ((values["stack.rows"] == 196) & (values["electrical.row_blocks"] == 0)) | (
        (values["stack.rows"] == 8) & (values["electrical.row_blocks"] == 1)
    )
    assert fits.any()
    assert (valid == fits).all()
    assert set(part.problem[values["electrical.row_blocks"] == 2]) == {
        "none of 265 combinations tried makes a valid case, the first because of electrical.row_blocks: adds up to 407 "
        "rows, and the stack has 8"
    }


@pytest.mark.parametrize("sequence", ["Sobol", "Halton"])
def test_a_sample_is_even_and_repeatable(sequence: str) -> None:
    axes = {
        "hot.mass_flow": {"from": "0.05 kg/s", "to": "0.1 kg/s"},
        "stack.layers": {"from": 2, "to": 9},
        "cold.fluid": ["ethylene glycol", "water"],
    }
    plan = planned(with_axes(load_case(EXHAUST), axes, sample=512, sequence=sequence, seed=3))
    values = plan.at(np.arange(512))
    counts = np.histogram(values["hot.mass_flow"], 16, (0.05, 0.1))[0]
    assert counts.sum() == 512 and np.abs(counts - 32).max() <= (0 if sequence == "Sobol" else 4)
    assert {*values["stack.layers"]} == {*range(2, 10)}
    assert np.bincount(values["cold.fluid"]).tolist() == pytest.approx([256, 256], abs=8)
    again = planned(with_axes(load_case(EXHAUST), axes, sample=512, sequence=sequence, seed=3))
    other = planned(with_axes(load_case(EXHAUST), axes, sample=512, sequence=sequence, seed=4))
    assert again.digest() == plan.digest() != other.digest()
    assert (again.at(np.arange(512))["hot.mass_flow"] == values["hot.mass_flow"]).all()
    assert (other.at(np.arange(512))["hot.mass_flow"] != values["hot.mass_flow"]).any()


def test_a_whole_estimate_has_all_results_and_names_its_checks() -> None:
    case = load_case(EXHAUST)
    flows = [0.06, 0.09, 0.3]
    found = solved(planned(with_axes(case, {"hot.mass_flow": flows}), full=True))
    for place, flow in enumerate(flows):
        single = estimate(replace(case, {"hot.mass_flow": flow}))
        for name in ("net_power", "open_circuit_voltage", "mismatch_loss", "coolant_lost_face_temperature"):
            assert found.numbers[name][place] == pytest.approx(getattr(single, name), rel=1e-12)
        for column, status in (("failed_checks", "fail"), ("warned_checks", "warn")):
            named = [check.name for check in single.checks if check.status == status]
            assert found.texts[column][place] == "; ".join(named)
        coldest = single.rows.cold_face_temperature.max()
        assert found.numbers["warmest_cold_face_temperature"][place] == pytest.approx(coldest, rel=1e-12)
    assert "back pressure" in found.texts["failed_checks"][2]


def test_prices_and_results_without_load_are_there_where_a_case_asks_for_them() -> None:
    case = load_case(EXAMPLES / "bakery-flue.toml", ['sweep.hot.inlet_temperature=["260 degC"]'])
    found = solved(planned(with_axes(case, {"hot.duct.gap": [0.05, 0.07], "cost.module": [5.0, 14.0]})))
    for place, (gap, price) in enumerate(itertools.product((0.05, 0.07), (5.0, 14.0))):
        single = estimate(replace(case, {"cost.module": price, "hot.duct.gap": gap}))
        for name in ("building_cost", "payback_years", "open_circuit_face_temperature"):
            near = pytest.approx(getattr(single, name), rel=1e-12, nan_ok=True)
            assert found.numbers[name][place] == near, name
    assert np.isfinite(found.numbers["highest_open_circuit_voltage"]).all()
    bare = planned(with_axes(load_case(EXHAUST), {"hot.mass_flow": [0.08]}))
    assert not {"building_cost", "highest_open_circuit_voltage"} & {*bare.results}
    cheap, dear = (
        planned(with_axes(replace(case, {"cost.module": price}), {"hot.duct.gap": [0.05, 0.07]}))
        for price in (5.0, 14.0)
    )
    assert cheap.digest() != dear.digest()


@settings(max_examples=200, deadline=None)
@given(
    st.floats(0.01, 1.0),
    st.floats(0.01, 1.0),
    st.integers(2, 50),
    st.sampled_from(["", " "]),
)
def test_a_range_reads_back(low: float, width: float, points: int, space: str) -> None:
    high = low + width
    text = f"hot.mass_flow{space}={space}{low!r} kg/s{space}:{space}{high!r} kg/s{space}:{space}{points}"
    path, spaced = varied_field(text)
    case = with_axes(load_case(EXHAUST), {path: spaced})
    assert case.sweep is not None and case.sweep.fields is not None
    values = case.sweep.fields[path].values
    assert path == "hot.mass_flow" and len(values) == points
    assert (values[0], values[-1]) == (low, high)
    assert np.allclose(np.diff(values), width / (points - 1), rtol=1e-9)


@settings(max_examples=100, deadline=None)
@given(st.lists(st.floats(1e-4, 1e3), min_size=1, max_size=8, unique=True))
def test_a_list_reads_back_in_its_order(flows: list[float]) -> None:
    path, listed = varied_field("hot.mass_flow=" + ", ".join(f"{flow!r} kg/s" for flow in flows))
    case = with_axes(load_case(EXHAUST), {path: listed})
    assert case.sweep is not None and case.sweep.fields is not None
    assert list(case.sweep.fields[path].values) == flows


@settings(max_examples=200, deadline=None)
@given(st.text(max_size=40))
def test_no_text_of_a_field_gives_anything_but_a_fault_or_values(text: str) -> None:
    try:
        path, listed = varied_field(text)
        with_axes(load_case(EXHAUST), {path: listed}, option="--vary")
    except InputError as error:
        told = error.faults if isinstance(error, CaseError) else (str(error),)
        if any("\n" in each for each in told):
            raise


def test_forms_of_an_axis() -> None:
    for text, expected in (
        ("stack.rows=4:20:5", (4, 8, 12, 16, 20)),
        ("stack.rows=4, 2, 9", (4, 2, 9)),
        ('hot.mass_flow={from="0.1 kg/s", to="0.3 kg/s", step="0.1 kg/s"}', (0.1, 0.2, 0.30000000000000004)),
        ("electrical.independent=true, false", (True, False)),
        ("cold.pressure=1 bar gauge, 2 bar", (201325.0, 2e5)),
        ('electrical.row_blocks=[[14], [7, 7]]', ((14,), (7, 7))),
        ("hot.inlet_temperature=300 degC:400 degC:3", (573.15, 623.15, 673.15)),
    ):  # fmt: skip
        path, axis = varied_field(text)
        case = with_axes(load_case(EXHAUST), {path: axis}, option="--vary")
        assert case.sweep is not None and case.sweep.fields is not None
        assert case.sweep.fields[path].values == pytest.approx(expected) if "row_blocks" not in text else True


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("hot.mas_flow=0.1 kg/s, 0.2 kg/s", "sweep.hot.mas_flow: unknown field; did you mean hot.mass_flow?"),
        (
            "hot=1, 2",
            'sweep.hot: is a section; write the whole name of one of its fields in quotes, such as "hot.fluid"',
        ),
        ("title=a, b", "changes no result"),
        ("limits.back_pressure=1 kPa, 2 kPa", "a limit changes no result"),
        ("module.generator_rating.matched_power=1 W, 2 W", "write each module as a record and vary module.use"),
        ("hot.mass_flow=0.1:0.2:5", "hot.mass_flow: "),
        ("hot.mass_flow=0.2 kg/s:0.1 kg/s:5", "give the lower one first"),
        ("hot.mass_flow=0.1 kg/s:0.2 kg/s", "needs step or points"),
        ("hot.mass_flow=0.1 kg/s:0.2 kg/s:1", "points: give a whole number from 2"),
        ("hot.mass_flow=0.1 kg/s:0.2 kg/s:3:4", "has 4 parts between colons"),
        ("hot.mass_flow=0.1 kg/s, 0.1 kg/s", "twice; give each value once"),
        ("cold.fluid=water, mud", "sweep.cold.fluid: "),
        ("hot.mass_flow=0.1 kg/s:0.1 kg/s:3", 'from "0.1 kg/s" to the same value; give one value as a list'),
        ("stack.rows=4:20:6", "do not fall on whole numbers"),
        ("stack.rows", "is not FIELD=VALUES"),
        ("hot.duct.sink_height=1 mm, 2 mm", "no combination makes a valid case"),
        ("cold.fluid={from=1, to=2}", "has no values between two others"),
    ],
)
def test_what_cannot_be_swept_is_refused_in_one_line(text: str, message: str) -> None:

    def plan() -> None:
        path, axis = varied_field(text)
        planned(with_axes(load_case(EXHAUST), {path: axis}, option="--vary"))

    with pytest.raises(InputError) as told:
        plan()
    assert message in str(told.value)
    assert "\n" not in str(told.value) or "combination" in message


def test_what_is_too_much_or_too_little_is_refused() -> None:
    case = load_case(EXHAUST)
    for axes, message in (
        ({}, "nothing is varied"),
        ({"cold.mass_flow": [0.1, 0.2], "cold.volume_flow": [1e-3, 2e-3]}, "says the same as"),
        ({"hot.mass_flow": np.linspace(0.01, 0.1, 20000), "hot.duct.gap": np.linspace(0.01, 0.1, 20000)}, "at most"),
        ({"electrical.blocking_diode_drop": np.linspace(0, 1, 3000)}, "3,000 structures"),
    ):
        with pytest.raises(InputError, match=message):
            planned(with_axes(case, axes))
    between = {"site.ambient_pressure": {"from": "0.9 bar", "to": "1.1 bar"}}
    with pytest.raises(InputError, match="structure of its own; give points"):
        planned(with_axes(case, between, sample=4))


def test_a_sweep_changes_no_hash() -> None:
    case = load_case(JACKET)
    varied = with_axes(case, {"stack.rows": [3, 4]}, sample=3)
    assert estimate(case).case_hash == estimate(varied).case_hash
    assert dataclasses.replace(varied, sweep=None).given["sweep"]["sample"] == 3
