"""What a module's own description says against it: legs and footprint, coolers as generators, figures of merit."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner

from harvest.cli import cli
from harvest.errors import CaseError
from harvest.model.batch import Batch
from harvest.model.estimate import estimate, estimate_batch
from harvest.model.module import described_module, fill_factor
from harvest.model.module_curve import module_curve
from harvest.model.rated_module import cooler_comparison
from harvest.model.reading import load_case, read_case
from tests.case_texts import BETWEEN_PLATES

LEGS = BETWEEN_PLATES + 'use = "demo-bismuth-telluride-40"\n'
COOLER = BETWEEN_PLATES + 'use = "demo-cooler-40"\n'
CURVES = (
    BETWEEN_PLATES
    + 'footprint = ["40 mm", "40 mm"]\nseebeck = "0.05 V/K"\nresistance = "2 ohm"\nconductance = "0.1 W/K"\n'
)


def warnings(text: str, *overrides: str) -> str:
    return " ".join(described_module(Batch(read_case(text, overrides))).warnings)


def shown(*arguments: str) -> tuple[str, dict[str, Any]]:
    """Text, with single spaces, and JSON of `harvest module`."""
    text, document = (CliRunner().invoke(cli, ["module", *arguments, *more]) for more in ((), ("--json",)))
    assert text.exit_code == document.exit_code == 0, text.output
    return " ".join(text.output.split()), json.loads(document.output)


# ---- Legs


def test_legs_that_cover_more_than_the_footprint_are_refused() -> None:
    with pytest.raises(CaseError) as caught:
        read_case(LEGS, ["module.legs.area=7 mm^2"])
    assert caught.value.faults == (
        "--set module.legs.area: 254 legs of 7.000 mm^2 need 1778 mm^2, and the footprint has 1600 mm^2; "
        "decrease it or module.legs.couples",
    )
    full = read_case(LEGS, ["module.legs.couples=400", "module.legs.area=2 mm^2"])
    assert fill_factor(Batch(full))[0] == pytest.approx(1.0, rel=1e-12)


def test_a_case_of_a_batch_with_too_large_legs_is_left_out() -> None:
    case = read_case(LEGS)
    answers = estimate_batch(Batch(case, 3, {"module.legs.area": np.array([1.96e-6, 7e-6, 3e-6])}))
    assert "module.legs.area: " in answers.problem[1] and not answers.problem[0] and not answers.problem[2]
    power = answers.scalars["generated_power"]
    assert np.isnan(power[1]) and power[2] > 0
    assert power[0] == pytest.approx(estimate(case).generated_power, rel=1e-12)


@pytest.mark.parametrize(("couples", "status"), [(40, "warn"), (41, "pass"), (326, "pass"), (327, "warn")])
def test_the_fill_factor_is_judged(couples: int, status: str) -> None:
    """1.96 mm^2 and 1600 mm^2: 10 % are 40.8 couples, 80 % are 326.5."""
    answer = estimate(read_case(LEGS, [f"module.legs.couples={couples}"]))
    check = next(each for each in answer.checks if each.name == "fill factor")
    assert check.status == status and check.value == pytest.approx(2 * couples * 1.96 / 1600)
    assert ("common practice (no source)" in check.text) == (status == "warn")
    assert "fill factor" not in {each.name for each in estimate(read_case(COOLER)).checks}


def test_the_fill_factor_is_shown_where_it_is_known() -> None:
    text, document = shown("demo-bismuth-telluride-40")
    assert "fill factor 31.1 % of the footprint" in text
    assert document["fill_factor"] == pytest.approx(254 * 1.96 / 1600)
    text, document = shown("demo-cooler-40")
    assert "fill factor" not in text and document["fill_factor"] is None


@pytest.mark.parametrize(
    ("override", "words"),
    [
        ("length=0.4 mm", "A leg's length is 0.29 of its width"),
        ("length=7.1 mm", "A leg's length is 5.1 of its width"),
        ("length=2.0 mm", "are 3.6 mm thick together, and the module only 3.4 mm"),
        ("substrate_thickness=1 mm", "are 3.6 mm thick together"),
        ("contact_resistivity=0 ohm m^2", ""),
    ],
)
def test_odd_legs_are_warned_of(override: str, words: str) -> None:
    said = warnings(LEGS, f"module.legs.{override}").replace("3.600 mm", "3.6 mm").replace("3.400 mm", "3.4 mm")
    assert words in said if words else not said
    assert not warnings(LEGS)


def test_short_legs_without_contacts_are_warned_of() -> None:
    no_contacts = "module.legs.contact_resistivity=0 ohm m^2"
    assert "give contact_resistivity" in warnings(LEGS, no_contacts, "module.legs.length=0.99 mm")
    assert not warnings(LEGS, no_contacts, "module.legs.length=1.01 mm")
    assert not warnings(LEGS, "module.legs.length=0.99 mm")


def test_an_unknown_material_in_a_record_is_told_with_its_line(tmp_path: Path) -> None:
    record = tmp_path / "records" / "mine.toml"
    record.parent.mkdir()
    record.write_text(
        'footprint = ["40 mm", "40 mm"]\n[legs]\ncouples = 127\nlength = "1.6 mm"\narea = "1.96 mm^2"\n'
        'n_material = "bismut telluride n"\np_material = "bismuth telluride p"\n',
        encoding="utf-8",
    )
    path = tmp_path / "case.toml"
    path.write_text(BETWEEN_PLATES + 'use = "records/mine.toml"\n', encoding="utf-8")
    (tmp_path / "bismut telluride n").write_text("", encoding="utf-8")  # beside the case, where a record does not look
    with pytest.raises(CaseError) as caught:
        load_case(path)
    assert len(caught.value.faults) == 1
    assert caught.value.faults[0].startswith('mine.toml:6: module.legs.n_material: "bismut telluride n" is no file')
    legs = load_case(path, ["module.legs.n_material=bismuth telluride n"]).module.legs
    assert legs is not None and legs.n_material == "bismuth telluride n"


# ---- Coolers


def test_a_cooler_shows_what_correction_and_extraction_change() -> None:
    hot_side, current, voltage, difference, heat = 300.15, 6.1, 15.3, 66.0, 55.0
    seebeck, share = voltage / hot_side, (hot_side - difference) / hot_side
    uncorrected = (seebeck * 100.0) ** 2 / (4.0 * voltage * share / current)
    implied = 0.5 * current * voltage * (hot_side + difference) / hot_side
    text, document = shown("demo-cooler-40")
    cooler = document["cooler"]
    assert cooler["uncorrected_power"] == pytest.approx(uncorrected, rel=1e-9)
    assert cooler["corrected_power"] == pytest.approx(document["matched"]["power"], rel=1e-9)
    assert cooler["power_ratio"] == pytest.approx(uncorrected / document["matched"]["power"], rel=1e-9)
    assert (cooler["implied_heat"], cooler["stated_heat"]) == (pytest.approx(implied), heat)
    assert cooler["by_voltage"]["seebeck"] == pytest.approx(seebeck)
    for name, value in cooler["by_voltage"].items():
        assert cooler["by_heat"][name] == pytest.approx(value * heat / implied, rel=1e-9)
        assert document["units"][f"cooler.by_heat.{name}"]
    assert document["units"]["cooler.corrected_power"] == "W"
    for words in ("corrected to these faces", "uncorrected, as rated", "implied by the others, 55.00 W stated"):
        assert words in text
    assert shown("demo-bismuth-telluride-40")[1]["cooler"] is None


def test_the_comparison_is_the_same_whatever_the_case_uses() -> None:
    text = BETWEEN_PLATES + 'footprint = ["40 mm", "40 mm"]\n[module.cooler_rating]\nmaximum_current = "6.1 A"\n'
    text += 'maximum_voltage = "15.3 V"\nmaximum_temperature_difference = "66 K"\nhot_side_temperature = "27 degC"\n'
    rated, corrected = (
        cooler_comparison(Batch(read_case(text, overrides)), 400.0, 300.0)
        for overrides in (["module.cooler_rating.temperature_dependence=none"], [])
    )
    assert rated is not None and corrected is not None
    assert rated.power_ratio == corrected.power_ratio > 1.0
    assert rated.by_heat is None and np.isnan(rated.stated_heat)


def test_faces_that_the_module_does_not_bear_are_warned_of() -> None:
    for hot_face, solder in (("111 degC", True), ("109 degC", False)):
        text, document = shown("demo-cooler-40", "--hot-face", hot_face)
        assert any("bismuth-tin solder" in each for each in document["warnings"]) is solder
        assert ("ask what solder the part has" in text) is solder
    for hot_face, said in (("231 degC", True), ("229 degC", False)):
        _, document = shown("demo-bismuth-telluride-40", "--hot-face", hot_face)
        assert any("above the 230.0 degC that the module bears" in each for each in document["warnings"]) is said
        assert not any("solder" in each for each in document["warnings"])


# ---- Figures of merit


@pytest.mark.parametrize(("merit", "warned"), [(1.29, False), (1.31, True), (2.95, True)])
def test_a_cooler_beyond_common_material_is_warned_of(merit: float, warned: bool) -> None:
    """The largest difference follows from Z T by Ioffe's Th - Tc = Z Tc^2/2."""
    coldest = 2.0 * 300.15 / (1.0 + (1.0 + 2.0 * merit) ** 0.5)
    override = f"module.cooler_rating.maximum_temperature_difference={300.15 - coldest!r} K"
    assert (f"ask for Z T = {merit:.2f} at their hot side temperature" in warnings(COOLER, override)) is warned


def test_a_cooler_is_refused_by_its_figure_of_merit_at_the_hot_side() -> None:
    """140 K below 300.15 K is Z T = 3.28 at the hot side and 2.51 at the mean of the rating."""
    with pytest.raises(CaseError, match=r"maximum_temperature_difference: 140 K below 300.15 K asks for Z T = 3.28 "):
        read_case(COOLER, ["module.cooler_rating.maximum_temperature_difference=140 K"])


def test_a_figure_of_merit_that_no_module_has_is_warned_of() -> None:
    said = " ".join(module_curve(read_case(CURVES)).warnings)
    assert "Z T of the module is 4.66; no module on the market comes near it." in said
    assert not module_curve(read_case(CURVES, ["module.conductance=0.5 W/K"])).warnings
