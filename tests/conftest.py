"""What all tests share."""

from __future__ import annotations

import pytest

LEFT_OUT = {
    "slow": ("--run-slow", "run the slow tests too"),
    "study": ("--run-studies", "run the statistical studies of many seeds too, which take minutes"),
}
"""Markers of tests that run only with an option."""


def pytest_addoption(parser: pytest.Parser) -> None:
    for option, meaning in LEFT_OUT.values():
        parser.addoption(option, action="store_true", help=meaning)


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    for marker, (option, _) in LEFT_OUT.items():
        if not config.getoption(option):
            skip = pytest.mark.skip(reason=f"{marker}; run with {option}")
            for item in items:
                if marker in item.keywords:
                    item.add_marker(skip)
