"""The map of a sweep: the same bytes each time, with the case and its limits drawn in."""

from __future__ import annotations

import re
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
OF_MODULE = 'module.maximum_hot_face_temperature="900 degC"'
FLOW: dict[str, Any] = {"hot.mass_flow": np.linspace(0.06, 0.14, 9)}
MAP = {**FLOW, "hot.duct.gap": np.linspace(0.01, 0.03, 7)}


def drawn(axes: dict[str, Any], path: Path, overrides: tuple[str, ...] = ()) -> str:
    plan = planned(with_axes(load_case(EXHAUST, overrides), axes))
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
        (
            {"hot.inlet_temperature": ["300 degC", "500 degC", "700 degC"]},
            ["hot face temperature 230.0 degC", "beyond hot face temperature"],
        ),
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


def test_a_limit_that_is_broken_everywhere_is_drawn_and_one_that_is_kept_everywhere_is_not(tmp_path: Path) -> None:
    limits = ('limits.hot_face_temperature="60 degC"', 'limits.back_pressure="900 kPa"')
    over_two = drawn(MAP, tmp_path / "map.svg", limits)
    assert "beyond hot face temperature 60.0 degC everywhere" in over_two
    assert 'patternUnits="userSpaceOnUse"' in over_two  # the hatching
    over_one = drawn(FLOW, tmp_path / "curve.svg", limits)
    assert "beyond hot face temperature 60.0 degC" in over_one
    assert "back pressure" not in over_two + over_one
    kept = drawn(MAP, tmp_path / "kept.svg", ('limits.hot_face_temperature="900 degC"', limits[1], OF_MODULE))
    assert "beyond" not in kept
    assert "userSpaceOnUse" not in kept


def test_each_module_is_drawn_with_its_own_limit(tmp_path: Path) -> None:
    """The case's own module allows 230 degC; a limit that varies is that of each curve."""
    text = drawn({**FLOW, "module.maximum_hot_face_temperature": ["190 degC", "200 degC"]}, tmp_path / "a.svg")
    assert "module.maximum_hot_face_temperature = 190.0 degC, beyond hot face temperature 190.0 degC" in text
    assert "beyond hot face temperature 200.0 degC" in text
    assert "230.0 degC" not in text


def test_a_case_outside_its_sweep_is_not_drawn_and_does_not_stretch_it(tmp_path: Path) -> None:
    """The case has 0.09 kg/s."""
    assert "the case" in drawn({"hot.mass_flow": [0.09, 0.1, 0.11]}, tmp_path / "a.svg")
    assert "the case" not in drawn({"hot.mass_flow": [0.10, 0.11, 0.12]}, tmp_path / "b.svg")
    assert "the case" not in drawn({**MAP, "hot.mass_flow": [0.10, 0.11]}, tmp_path / "c.svg")


def test_titles_are_whole_and_flows_are_in_the_units_that_people_read(tmp_path: Path) -> None:
    title = "Costs 5 $ and saves 10 $ a year " + "in words that go on and on " * 5
    text = drawn({"cold.volume_flow": ["1 m^3/h", "2 m^3/h"]}, tmp_path / "a.svg", (f'title="{title}"',))
    assert "Costs 5 $ and saves 10 $ a year" in text
    assert max(map(len, re.findall(r">([^<]*words that go on[^<]*)<", text))) <= 90
    assert "cold.volume_flow [m^3/h]" in text


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
