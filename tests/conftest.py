"""What all tests share."""

from __future__ import annotations

import pytest


def pytest_addoption(parser: pytest.Parser) -> None:
    parser.addoption("--run-slow", action="store_true", help="run the slow studies too")


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    if not config.getoption("--run-slow"):
        skip = pytest.mark.skip(reason="slow study; run with --run-slow")
        for item in items:
            if "slow" in item.keywords:
                item.add_marker(skip)
