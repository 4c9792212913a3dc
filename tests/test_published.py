"""Every number in tests/published against the function that it checks.

A file is one source: `citation`, `origin`, and its checks. Checks of fluids go through the property tables and are read
by the tests of fluids; all others name a pure function by its dotted path.
"""

from __future__ import annotations

import importlib
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pytest

FOLDER = Path(__file__).parent / "published"
KINDS = {"published", "exact", "independent", "common-practice", "regression"}
ORIGINS = {"read", "reproduced", "memory"}
SOURCES: dict[str, dict[str, Any]] = {
    path.stem: tomllib.loads(path.read_text(encoding="utf-8")) for path in sorted(FOLDER.glob("*.toml"))
}
CHECKS: dict[str, dict[str, Any]] = {
    f"{name}:{check['name']}": check for name, source in SOURCES.items() for check in source["check"]
}
FUNCTION_CHECKS = [name for name, check in CHECKS.items() if check["function"] != "fluid"]


def as_argument(value: Any) -> Any:
    return np.asarray(value, dtype=float) if isinstance(value, list) else value


@pytest.mark.parametrize("name", SOURCES)
def test_a_source_says_what_it_is(name: str) -> None:
    source = SOURCES[name]
    assert source.get("citation", "").strip()
    assert source.get("origin") in ORIGINS
    names = [check["name"] for check in source["check"]]
    assert names and len(names) == len(set(names))


@pytest.mark.parametrize("name", CHECKS)
def test_a_check_says_why_it_is_to_be_believed(name: str) -> None:
    check = CHECKS[name]
    assert check.get("kind") in KINDS
    assert check.get("why", "").strip()
    assert check.get("where", "").strip()
    assert ("tolerance" in check) != ("absolute_tolerance" in check), "give one tolerance, relative or absolute"


@pytest.mark.parametrize("name", FUNCTION_CHECKS)
def test_the_function_gives_the_published_number(name: str) -> None:
    check = CHECKS[name]
    module, function = check["function"].rsplit(".", 1)
    inputs = {parameter: as_argument(value) for parameter, value in check["inputs"].items()}
    got = getattr(importlib.import_module(module), function)(**inputs)
    np.testing.assert_allclose(
        got, check["expected"], rtol=check.get("tolerance", 0.0), atol=check.get("absolute_tolerance", 0.0)
    )
