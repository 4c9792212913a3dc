"""A module by itself: its curves against closed forms, and the command that shows them."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner, Result

from harvest.cli import cli
from harvest.errors import InputError
from harvest.model.module_curve import module_curve
from harvest.physics.thermoelectrics import maximum_efficiency
from harvest.study.bench_record import BenchFit
from harvest.study.modules import BesideRecord, load_module, thermal_mass

EXAMPLES = Path(__file__).parents[1] / "examples"
CONSTANT = """
source = "invented"
footprint = ["40 mm", "40 mm"]
seebeck = "0.05 V/K"
resistance = "2 ohm"
conductance = "0.5 W/K"
"""
TRANSIENT = (
    str(EXAMPLES / "heat-pump-record.csv"),
    "--hot-mass",
    "0.35 kg water",
    "--cold-mass",
    "0.35 kg water",
    "--ambient",
    "20 degC",
)


def run(*arguments: str) -> Result:
    return CliRunner().invoke(cli, ["module", *arguments])


@pytest.fixture
def constant(tmp_path: Path) -> str:
    path = tmp_path / "constant.toml"
    path.write_text(CONSTANT, encoding="utf-8")
    return str(path)


def test_constant_parameters_give_the_closed_forms(constant: str) -> None:
    hot, cold = 500.0, 300.0
    curve = module_curve(load_module(constant).case, hot, cold)
    largest = (0.05 * (hot - cold)) ** 2 / (4.0 * 2.0)
    assert curve.maximum_power.power == pytest.approx(largest, rel=1e-9)
    assert curve.matched.power == pytest.approx(largest, rel=1e-12)
    assert curve.matched.voltage == pytest.approx(0.5 * 0.05 * (hot - cold), rel=1e-12)
    assert curve.figure_of_merit == pytest.approx(0.05**2 / (2.0 * 0.5) * 400.0)
    ceiling = maximum_efficiency(np.array(curve.figure_of_merit), np.array(hot), np.array(cold))
    assert curve.best_efficiency.efficiency == pytest.approx(float(ceiling), rel=1e-8)
    assert curve.maximum_efficiency == pytest.approx(float(ceiling), rel=1e-12)
    np.testing.assert_allclose(curve.voltage, 0.05 * (hot - cold) - 2.0 * curve.current, atol=1e-12)
    np.testing.assert_allclose(curve.heat_flow, 0.05 * hot * curve.current + 100.0 - curve.current**2, rtol=1e-12)
    assert curve.current[-1] == pytest.approx(5.0, rel=1e-9)


def test_substrates_keep_the_junctions_between_the_faces() -> None:
    """With substrates the same legs give less, and energy still closes between the faces."""
    with_them = module_curve(load_module("demo-bismuth-telluride-40").case)
    none = module_curve(
        load_module("demo-bismuth-telluride-40", overrides=("module.legs.substrate_thickness=0 m",)).case
    )
    assert 0.9 * none.maximum_power.power < with_them.maximum_power.power < none.maximum_power.power
    assert with_them.voltage[0] < none.voltage[0]


def test_the_command_says_parameters_points_and_source() -> None:
    result = run("demo-bismuth-telluride-40", "--hot-face", "200 degC", "--cold-face", "40 degC")
    assert result.exit_code == 0, result.output
    for words in (
        "Seebeck coefficient",
        "Z T",
        "matched load",
        "most power",
        "best efficiency",
        "200.0 degC",
        "invented",
    ):
        assert words in result.output, words


def test_json_has_the_parameters_at_their_temperature_and_the_curve() -> None:
    document = json.loads(run("demo-bismuth-telluride-40", "--json").output)
    assert document["mean_temperature"] == pytest.approx(373.15)
    for name in ("seebeck", "resistance", "conductance", "figure_of_merit", "source", "warnings", "interval", "curve"):
        assert name in document
    assert document["interval"] is None
    assert document["units"]["seebeck"] == "V/K" and document["units"]["curve.power"] == "W"
    lengths = {len(document["curve"][name]) for name in ("current", "voltage", "power", "heat_flow", "efficiency")}
    assert len(lengths) == 1 and lengths.pop() > 10


def test_cooler_and_generator_ratings_are_named_as_the_source() -> None:
    output = run(str(EXAMPLES / "cooler-from-the-drawer.toml")).output
    assert "from cooler ratings at 50" in " ".join(output.split()) and "apart" in output


def test_a_bench_record_gives_intervals_and_a_record_that_a_case_can_use(tmp_path: Path) -> None:
    saved = tmp_path / "bench.toml"
    result = run(str(EXAMPLES / "bench-record.csv"), "--write", str(saved), "--json")
    assert result.exit_code == 0, result.output
    document = json.loads(result.output)
    for name in ("seebeck", "resistance", "conductance"):
        interval = document["interval"][name]
        assert interval["lower"] < interval["value"] < interval["upper"]
    assert document["record"]["outliers"] and document["way"] == "bench record"
    again = json.loads(run(str(saved), "--json").output)
    for name in ("seebeck", "resistance", "conductance", "figure_of_merit"):
        assert again[name] == pytest.approx(document[name], rel=1e-12), name
    assert "fitted to" in again["source"]
    assert run(str(EXAMPLES / "bench-record.csv"), "--write", str(saved)).exit_code == 2


def test_a_transient_record_gives_performance_and_says_what_the_ratio_is_not() -> None:
    result = run(*TRANSIENT)
    assert result.exit_code == 0, result.output
    text = " ".join(result.output.split())
    assert "COP" in text and "heat pump" in text
    assert "neither a coefficient of performance nor an efficiency" in text
    document = json.loads(run(*TRANSIENT, "--json").output)
    assert document["record"]["temperature_change_ratio"] > 0
    assert "hot_loss_conductance" in document["interval"]


def test_plots_are_the_same_bytes_and_another_suffix_is_refused(tmp_path: Path) -> None:
    pytest.importorskip("matplotlib")
    for name, arguments in (("bench", (str(EXAMPLES / "bench-record.csv"),)), ("pump", TRANSIENT)):
        one, other = tmp_path / f"{name}1.svg", tmp_path / f"{name}2.svg"
        for path in (one, other):
            assert run(*arguments, "--plot", str(path)).exit_code == 0
        assert one.read_bytes() == other.read_bytes()
        assert b"current [A]" in one.read_bytes()
    refused = run("demo-bismuth-telluride-40", "--plot", str(tmp_path / "plot.bmp"))
    assert refused.exit_code == 2 and ".svg" in refused.output


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("no-such-module",), "no-such-module"),
        (("demo-bismuth-telluride-40", "--hot-face", "20 degC"), "not above"),
        (("demo-bismuth-telluride-40", "--hot-face", "150"), "hot-face"),
        (("demo-bismuth-telluride-40", "--coolant", "water"), "bench record"),
        ((str(EXAMPLES / "heat-pump-record.csv"), "--hot-mass", "0.35 kg water"), "give --hot-mass, --cold-mass and"),
        ((str(EXAMPLES / "heat-pump-record.csv"),), "transient record: give --hot-mass, --cold-mass and --ambient"),
        ((str(EXAMPLES / "heat-pump-record.csv"), "--hot-mass", "0.35 kg xenon"), "known here (water, air)"),
        ((str(EXAMPLES / "bench-record.csv"), "--set", "module.resistance=1 ohm"), "--set goes with a case"),
        ((str(EXAMPLES / "bench-record.csv"), "--figure-of-merit", "0.8"), "tells the conductance itself"),
        (("demo-bismuth-telluride-40", "--hot-face", "50 degC"), "50 degC (323.15 K); give a hotter one"),
        (("nope",), "bundled are demo-bismuth-telluride-40, "),
        ((str(EXAMPLES / "heat-pump-record.csv"), "--hot-mass", "much water"), "thermal mass"),
    ],
)
def test_bad_input_is_one_line_and_exit_2(arguments: tuple[str, ...], words: str) -> None:
    result = run(*arguments)
    assert result.exit_code == 2
    assert words in result.output and len(result.output.strip().splitlines()) == 1


def test_thermal_masses_are_read_with_fluid_or_heat_capacity() -> None:
    water, metal = thermal_mass("350 g of water"), thermal_mass("0.8 kg, 900 J/(kg K)")
    assert water.mass == pytest.approx(0.35) and water.fluid is not None and water.fluid.name == "water"
    assert metal.mass == 0.8 and metal.heat_capacity == 900.0
    with pytest.raises(InputError):
        thermal_mass("water")
    with pytest.raises(InputError, match="bench record"):
        load_module("demo-bismuth-telluride-40", beside=BesideRecord(footprint="40 mm"))


@pytest.fixture
def without_heat(tmp_path: Path) -> Path:
    """Readings of a module of 0.05 V/K and 2 ohm with a little scatter, no heat measured, one voltage wrong."""
    rows = ["hot_face_temperature [degC];cold_face_temperature [degC];open_circuit_voltage [V];voltage [V];current [A]"]
    for i in range(12):
        difference, current = 60.0 + 4.0 * (i % 4), 0.2 + 0.1 * (i % 6)
        open_circuit = 0.05 * difference * (1.0 + 0.002 * (-1) ** i)
        voltage = (0.05 * difference - 2.0 * current) * (1.0 - 0.002 * (-1) ** (i // 2)) * (1.5 if i == 7 else 1.0)
        cells = (25.0 + difference, 25.0, open_circuit, voltage, current)
        rows.append(";".join(f"{cell:.4f}".replace(".", ",") for cell in cells))
    path = tmp_path / "no-heat.csv"
    path.write_text("\n".join(rows) + "\n", encoding="utf-8")
    return path


def test_a_record_without_heat_shows_what_it_tells(without_heat: Path, tmp_path: Path) -> None:
    result = run(str(without_heat))
    assert result.exit_code == 0, result.output
    text = " ".join(result.output.split())
    for words in ("seebeck", "95 % from", "Scatter of the readings", "outlier", "conductance unknown: no heat"):
        assert words in text, words
    assert "does not tell conductance; conductance unknown: no heat" in text
    document = json.loads(run(str(without_heat), "--json").output)
    assert document["curve"] is None and set(document["interval"]) == {"seebeck", "resistance"}
    for name, value in (("seebeck", 0.05), ("resistance", 2.0)):
        assert document["interval"][name]["value"] == pytest.approx(value, rel=0.02)
    assert len(document["record"]["outliers"]) == 1
    for option, name in (("--write", "new.toml"), ("--plot", "new.svg")):
        refused = run(str(without_heat), option, str(tmp_path / name))
        assert refused.exit_code == 2 and "--figure-of-merit" in refused.output
        assert len(refused.output.strip().splitlines()) == 1 and not (tmp_path / name).exists()
    with pytest.raises(InputError, match="does not tell conductance"):
        load_module(str(without_heat))


def test_an_assumed_figure_of_merit_gives_the_conductance_and_says_so(without_heat: Path, tmp_path: Path) -> None:
    saved = tmp_path / "assumed.toml"
    result = run(str(without_heat), "--figure-of-merit", "0.8", "--write", str(saved), "--json")
    assert result.exit_code == 0, result.output
    assert "conductance assumed, not measured" in " ".join(
        run(str(without_heat), "--figure-of-merit", "0.8").output.split()
    )
    document = json.loads(result.output)
    assert "conductance assumed" in document["source"] and "conductance" not in document["interval"]
    parameters = {name: each["value"] for name, each in document["interval"].items()}
    temperature = document["record"]["reference_temperature"]
    expected = parameters["seebeck"] ** 2 * temperature / (parameters["resistance"] * 0.8)
    assert document["conductance"] == pytest.approx(expected, rel=1e-9)
    again = json.loads(run(str(saved), "--json").output)
    assert again["conductance"] == pytest.approx(expected, rel=1e-9) and "assumed" in again["source"]
    for wrong in ("0", "-1", "nan", "11"):
        refused = run(str(without_heat), "--figure-of-merit", wrong)
        assert refused.exit_code == 2 and "above 0 to 10" in refused.output


def test_standard_input_is_a_record_or_a_case(constant: str) -> None:
    by_file = json.loads(run(constant, "--json").output)
    case = (EXAMPLES / "cooler-from-the-drawer.toml").read_text("utf-8")
    for text in (CONSTANT, 'use = "demo-bismuth-telluride-40"\n', case):
        result = CliRunner().invoke(cli, ["module", "-", "--json"], input=text)
        assert result.exit_code == 0, result.output
        if text == CONSTANT:
            assert json.loads(result.output)["matched"] == by_file["matched"]
    wrong = CliRunner().invoke(cli, ["module", "-"], input=CONSTANT.replace("2 ohm", "2 V"))
    assert wrong.exit_code == 2 and wrong.output.startswith("harvest: stdin: module.resistance")


def test_performance_stands_only_where_heat_is_pumped() -> None:
    lines = run(*TRANSIENT).output.splitlines()
    start = next(i for i, line in enumerate(lines) if "pumped W" in line)
    rows = [line.split() for line in lines[start + 1 :][:10] if line.strip()[:1].isdigit()]
    assert rows and all((float(row[1]) > 0.0 and float(row[3]) > 0.0) == (row[4] != "-") for row in rows)


def test_a_bench_record_in_place_of_a_module_record_is_explained() -> None:
    text = f'use = "{EXAMPLES / "bench-record.csv"}"\n'
    wrong = CliRunner().invoke(cli, ["module", "-"], input=text)
    assert wrong.exit_code == 2 and "--write" in wrong.output


def test_an_outlier_does_not_flatten_the_residuals() -> None:
    pytest.importorskip("matplotlib")
    from harvest.report.plots import module_figure
    from harvest.study.modules import curve_of

    loaded = load_module(str(EXAMPLES / "bench-record.csv"))
    assert isinstance(loaded.fit, BenchFit) and loaded.fit.outliers
    used = np.abs(loaded.fit.residuals[loaded.fit.used]).max()
    figure = module_figure("", curve_of(loaded, 423.15, 323.15), loaded.fit)
    panels = [axes for axes in figure.axes if "residual" in axes.get_ylabel()]
    assert len(panels) == 2 and all(axes.get_ylim()[1] < 2.0 * used for axes in panels)
    assert sum(len(axes.texts) for axes in panels) == len(loaded.fit.outliers)
