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
from harvest.model.estimate import estimate, search_batch
from harvest.model.reading import load_case, replace
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
        values: list[float] = [first, first + 1, 2 * first, 3 * first]
    else:
        if own is None or not isinstance(own, float):
            own = parse_quantity(_example(declaration.kind), declaration.kind)
        values = [own, 1.02 * own, 0.5 * own, 1.7 * own] if own else [0.0, 1e-3, 0.3]
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
        singles = []
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
                got = found.numbers[result][place]
                # sums along the rows of one case alone run in another order than those of many side by side
                # and a diode in one of them makes the solver take another way to all, to its own tolerance
                within = 1e-8 if path == "electrical.blocking_diode_drop" else 1e-12
                near = pytest.approx(expected[0], rel=within, abs=1e-12, nan_ok=True)
                assert got == near, (path, values[place], result)
            tried += 1
    assert tried > 60
