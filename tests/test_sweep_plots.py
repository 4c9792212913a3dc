"""The map of a sweep: the same bytes each time, with the case and its limits drawn in."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

from harvest.errors import InputError, NoAnswerError
from harvest.model.reading import load_case
from harvest.report.plots import write_figure
from harvest.report.sweep_files import print_sweep
from harvest.report.sweep_plots import plotted_results, sweep_figure
from harvest.study.sweep import planned, with_axes

EXHAUST = Path(__file__).parents[1] / "examples" / "genset-exhaust.toml"
FLOW: dict[str, Any] = {"hot.mass_flow": np.linspace(0.06, 0.14, 9)}
MAP = {**FLOW, "hot.duct.gap": np.linspace(0.01, 0.03, 7)}


def drawn(axes: dict[str, Any], path: Path) -> str:
    plan = planned(with_axes(load_case(EXHAUST), axes))
    found = print_sweep(plan, None, keep=plotted_results(plan))
    write_figure(path, sweep_figure(plan, found.kept))
    return path.read_text()


@pytest.mark.parametrize(
    ("axes", "words"),
    [
        (FLOW, ["net power [W]", "the case", "hot.mass_flow [kg/s]"]),
        ({**FLOW, "cold.fluid": ["water", "ethylene glycol"]}, ["water", "ethylene glycol", "the case"]),
        (MAP, ["hot.duct.gap [mm]", "the case", "back pressure 6.000 kPa", "hot face temperature 230.0 degC"]),
        ({**MAP, "cold.fluid": ["water", "ethylene glycol"]}, ["back pressure 6.000 kPa", "the case", "water"]),
        ({"hot.inlet_temperature": ["300 degC", "500 degC", "700 degC"]}, ["hot face temperature", "beyond a limit"]),
        ({"stack.layers": [3, 4, 6, 8], "hot.duct.faces": [2]}, ["stack.layers", "the case"]),
    ],
)
def test_a_drawing_is_the_same_each_time_and_says_what_it_shows(
    axes: dict[str, Any], words: list[str], tmp_path: Path
) -> None:
    text = drawn(axes, tmp_path / "first.svg")
    assert text == drawn(axes, tmp_path / "second.svg")
    for word in words:
        assert word in text


def test_what_cannot_be_drawn_is_refused(tmp_path: Path) -> None:
    for axes, message in (
        ({**MAP, "stack.layers": [4, 6]}, "draws net power over one or two numbers, and 3 are varied"),
        ({"cold.fluid": ["water", "ethylene glycol"]}, "and 0 are varied"),
        ({**FLOW, "electrical.blocking_diode_drop": np.linspace(0, 1, 7)}, "7 combinations of choices; at most 6"),
    ):
        with pytest.raises(InputError, match=message):
            drawn(axes, tmp_path / "a.svg")
    with pytest.raises(NoAnswerError, match="nothing to draw"):
        drawn({**FLOW, "stack.layers": [3]}, tmp_path / "a.svg")
