"""The command line as a stranger meets it: exit codes, what goes where, and one clear line for every mistake."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result

from harvest.cli import cli
from harvest.model.results import ROW_RESULTS, SCALARS, UNITS

REPOSITORY = Path(__file__).parents[1]
EXAMPLE = str(REPOSITORY / "examples" / "genset-jacket-water.toml")
STARTERS = sorted(path.stem for path in (REPOSITORY / "harvest" / "data" / "starters").glob("*.toml"))

PROMISED = [
    "generated_power",
    "converted_power",
    "hot_drive_power",
    "cold_drive_power",
    "net_power",
    "matched_load_power",
    "maximum_power",
    "current",
    "voltage",
    "open_circuit_voltage",
    "operating_emf",
    "internal_resistance",
    "load_resistance",
    "load_ratio",
    "hot_heat_flow",
    "cold_heat_flow",
    "bypass_heat_flow",
    "hot_outlet_temperature",
    "cold_outlet_temperature",
    "hot_pressure_drop",
    "cold_pressure_drop",
    "conversion_efficiency",
    "module_efficiency",
    "carnot_efficiency",
    "mismatch_loss",
    "module_count",
    "energy_closure",
    "rows",
    "checks",
    "valid",
    "problem",
    "sources",
    "version",
    "case_hash",
    "units",
]
PROMISED_ROWS = [
    "hot_stream_temperature",
    "hot_face_temperature",
    "hot_junction_temperature",
    "cold_junction_temperature",
    "cold_face_temperature",
    "cold_stream_temperature",
    "current",
    "module_power",
    "module_heat_flow",
    "hot_reynolds",
    "cold_reynolds",
]


def run(*arguments: str, stdin: str | bytes | None = None) -> Result:
    return CliRunner().invoke(cli, arguments, input=stdin, prog_name="harvest")


def fault_lines(result: Result, code: int) -> list[str]:
    """Lines on stderr of a command that failed with that code and wrote no result."""
    assert result.exit_code == code, (result.stdout, result.stderr, result.exception)
    assert result.stdout == ""
    assert "Traceback" not in result.stderr
    lines = result.stderr.splitlines()
    assert lines and all(line.startswith("harvest: ") and len(line) < 500 for line in lines), lines
    return lines


def subprocess_run(*arguments: str, cache: Path | None = None, program: str | None = None) -> Any:
    environment = {**os.environ, **({"HARVEST_CACHE": str(cache)} if cache else {})}
    command = [sys.executable, "-c", program, *arguments] if program else [sys.executable, "-m", "harvest", *arguments]
    return subprocess.run(command, capture_output=True, text=True, env=environment, cwd=REPOSITORY, timeout=60)


# ---------------------------------------------------------------- answers


def test_estimate_reports_on_stdout_alone() -> None:
    result = run("estimate", EXAMPLE)
    assert result.exit_code == 0 and result.stderr == ""
    for words in ("Checks", "Assumed, because not given", "Sources", "Cautions", "net"):
        assert words in result.stdout
    assert max(map(len, result.stdout.splitlines())) <= 110
    assert "nan" not in result.stdout.lower().split() and "\t" not in result.stdout


def test_json_is_one_document_with_the_promised_names_and_units() -> None:
    result = run("estimate", EXAMPLE, "--json")
    assert result.exit_code == 0 and result.stderr == ""
    document = json.loads(result.stdout)
    assert set(PROMISED) <= set(document) and set(PROMISED_ROWS) <= set(document["rows"])
    assert document["units"] == UNITS
    assert set(document["units"]) == set(SCALARS) | {f"rows.{name}" for name in ROW_RESULTS}
    expected = {
        "generated_power": "W",
        "current": "A",
        "voltage": "V",
        "internal_resistance": "ohm",
        "hot_outlet_temperature": "K",
        "hot_pressure_drop": "Pa",
        "load_ratio": "1",
        "rows.module_heat_flow": "W",
        "rows.hot_face_temperature": "K",
    }
    assert {name: document["units"][name] for name in expected} == expected
    assert document["valid"] is True and document["problem"] == ""
    assert isinstance(document["module_count"], int)
    lengths = {len(column) for column in document["rows"].values()}
    assert len(lengths) == 1
    for check in document["checks"]:
        assert {"name", "value", "limit", "status", "text"} <= set(check)
        assert check["status"] in ("pass", "warn", "fail")


def test_what_is_no_number_is_null() -> None:
    def refuse(constant: str) -> None:
        raise AssertionError(constant)

    spring = str(REPOSITORY / "examples" / "hot-spring.toml")
    apart = run("estimate", spring, "--json", "--set", "electrical.independent=true")
    document = json.loads(apart.stdout, parse_constant=refuse)
    assert document["valid"] is True
    for name in ("current", "voltage", "open_circuit_voltage", "internal_resistance", "load_resistance"):
        assert document[name] is None, name
    opened = json.loads(
        run("estimate", EXAMPLE, "--json", "--set", "electrical.load=open circuit").stdout, parse_constant=refuse
    )
    assert opened["generated_power"] == pytest.approx(0.0, abs=1e-9) and opened["load_resistance"] is None


def test_an_inlet_out_of_range_is_exit_2_with_its_reason() -> None:
    lines = fault_lines(run("estimate", EXAMPLE, "--set", "hot.inlet_temperature=120 degC"), 2)
    assert len(lines) == 1 and "393.15 K is outside" in lines[0] and "to 373.15 K" in lines[0]
    result = run("estimate", EXAMPLE, "--json", "--set", "hot.inlet_temperature=120 degC")
    document = json.loads(result.stdout)
    assert result.exit_code == 2 and document["valid"] is False and document["bad_input"] is True
    assert document["problem"] in result.stderr and document["problem"]
    assert all(document[name] is None for name in SCALARS)
    assert document["checks"] == []


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ("hot.inlet_temperature=2300 K", "2300 K is outside"),
        ("cold.inlet_temperature=-5 degC", "freezes"),
        ("cold.inlet_temperature=150 degC", "boils"),
        ("hot.volume_fraction=0.7", "outside 0.1 to 0.6"),
    ],
)
def test_inlets_that_the_fluid_does_not_have(change: str, words: str) -> None:
    lines = fault_lines(run("estimate", EXAMPLE, "--set", change), 2)
    assert len(lines) == 1 and words in lines[0]


def test_a_title_cannot_steer_the_terminal() -> None:
    """Control characters of a file that somebody else wrote stay out of the report; the heading stays one line."""
    text = Path(EXAMPLE).read_text("utf-8")
    line = next(line for line in text.splitlines() if line.startswith("title"))
    for command in ("estimate", "check"):
        result = run(command, "-", stdin=text.replace(line, 'title = "a\\u001b[31m\\u0007 b\\nc"', 1))
        if result.exit_code == 0:
            assert not any(ord(letter) < 32 for letter in result.stdout.replace("\n", ""))
            assert not any(line.startswith("c") and len(line) < 3 for line in result.stdout.splitlines())
        else:
            assert "title" in fault_lines(result, 2)[0] and "\x1b" not in result.stderr


def test_set_is_repeatable_and_the_last_one_counts() -> None:
    def flow(*changes: str) -> float:
        options = [part for change in changes for part in ("--set", change)]
        return float(json.loads(run("estimate", EXAMPLE, "--json", *options).stdout)["hot_mass_flow"])

    assert flow("hot.mass_flow=0.4 kg/s") == pytest.approx(0.4, rel=1e-15)
    assert flow('hot.mass_flow="0.4 kg/s"') == pytest.approx(0.4, rel=1e-15)
    assert flow("hot.mass_flow=0.4 kg/s", "hot.mass_flow=0.6 kg/s") == pytest.approx(0.6, rel=1e-15)
    assert flow("hot.mass_flow=0.4 kg/s", "stack.columns=8") == pytest.approx(0.4, rel=1e-15)


def test_standard_input_is_a_case() -> None:
    text = Path(EXAMPLE).read_text("utf-8")
    by_name, piped = run("estimate", EXAMPLE, "--json"), run("estimate", "-", "--json", stdin=text)
    assert json.loads(by_name.stdout) == json.loads(piped.stdout)
    assert "stdin:1: not TOML" in fault_lines(run("estimate", "-", stdin="= 3"), 2)[0]
    assert "stdin: is empty" in fault_lines(run("check", "-", stdin=""), 2)[0]
    assert "UTF-8" in fault_lines(run("check", "-", stdin=b"title = '\xff\xfe'"), 2)[0]
    assert "1048576 bytes" in fault_lines(run("check", "-", stdin="#" * (1 << 20) + "\n"), 2)[0].replace(
        "1 MiB", "1048576 bytes"
    )


def test_check_computes_nothing_and_says_what_is_assumed() -> None:
    result = run("check", EXAMPLE)
    assert result.exit_code == 0 and result.stderr == ""
    assert "standard atmosphere" in result.stdout
    document = json.loads(run("check", EXAMPLE, "--json").stdout)
    assert document["values"]["hot.inlet_temperature"] == pytest.approx(365.15)
    assert document["units"]["hot.inlet_temperature"] == "K"
    assert {"field", "value"} <= set(document["assumptions"][0]) or document["assumptions"]
    # a state that only the property library could refuse passes the reading
    assert run("check", EXAMPLE, "--set", "hot.inlet_temperature=120 degC").exit_code == 0


def test_explain_knows_fields_and_sections() -> None:
    field = run("explain", "hot.mass_flow")
    assert field.exit_code == 0 and "kg/s" in field.stdout
    section = run("explain", "hot.duct")
    assert section.exit_code == 0 and "gap" in section.stdout
    listed = run("explain")
    assert listed.exit_code == 0 and "stack.row_pitch" in listed.stdout
    assert "did you mean hot.mass_flow?" in fault_lines(run("explain", "hot.mas_flow"), 2)[0]
    documents = json.loads(run("explain", "stack.rows", "--json").stdout)
    assert [each["field"] for each in documents] == ["stack.rows"]


def test_fluid_gives_properties_with_their_units() -> None:
    """Water at 80 degC and 2.5 bar against IAPWS by memory of its tables: 971.8 kg/m3, 4.196 kJ/(kg K), 0.354 mPa s."""
    document = json.loads(run("fluid", "water", "--at", "80 degC", "--pressure", "2.5 bar", "--json").stdout)
    assert document["temperature"] == [353.15]
    assert document["density"][0] == pytest.approx(971.86, abs=0.1)
    assert document["heat_capacity"][0] == pytest.approx(4196.0, abs=2.0)
    assert document["viscosity"][0] == pytest.approx(3.54e-4, rel=5e-3)
    assert document["boiling"] == pytest.approx(273.15 + 127.41, abs=0.02)
    assert document["units"]["viscosity"] == "Pa s"
    text = run("fluid", "water", "--at", "80 degC", "--at", "20 degC", "--pressure", "2.5 bar")
    assert text.exit_code == 0 and "boils" in text.stdout and "CoolProp" in text.stdout
    gas = run("fluid", "exhaust gas", "--fuel", "diesel", "--excess-air-ratio", "1.5", "--at", "300 degC")
    assert gas.exit_code == 0 and "43.3 degC" in gas.stdout  # water dew point at 1 atm


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("water", "--at", "180 degC"), "boils at 1.013 bar"),
        (("water", "--at", "-10 degC"), "freezes"),
        (("air", "--at", "3000 K"), "2000 K"),
        (("watr",), "known are water"),
        (("exhaust gas", "--at", "300 degC"), "fuel"),
        (("air", "--mass-fraction", "0.5"), "takes no mass_fraction"),
        (("ethylene glycol", "--at", "20 degC"), "fraction"),
        (("air", "--at", "20"), "20"),
        (("air", "--at", "20 C"), "degC"),
        (("air", "--at", "nan K"), "nan"),
        (("air", "--at", "20 degC", "--pressure", "0 Pa"), "pressure"),
    ],
)
def test_fluid_refuses_in_one_line(arguments: tuple[str, ...], words: str) -> None:
    lines = fault_lines(run("fluid", *arguments), 2)
    assert len(lines) == 1 and words in lines[0]


def test_start_lists_its_kinds_and_each_is_a_valid_case(tmp_path: Path) -> None:
    listed = run("start")
    assert listed.exit_code == 0
    assert [line.split()[0] for line in listed.stdout.splitlines()] == STARTERS
    for kind in STARTERS:
        written = run("start", kind)
        assert written.exit_code == 0 and written.stdout.startswith("#")
        assert run("estimate", "-", stdin=written.stdout).exit_code == 0
    target = tmp_path / "case.toml"
    first = run("start", STARTERS[0], "-o", str(target))
    assert first.exit_code == 0 and first.stdout == "" and "next:" in first.stderr
    content = target.read_bytes()
    assert "exists" in fault_lines(run("start", STARTERS[0], "-o", str(target)), 2)[0]
    assert target.read_bytes() == content
    assert "known are" in fault_lines(run("start", "tea-kettle"), 2)[0]
    assert "cannot be written" in fault_lines(run("start", STARTERS[0], "-o", str(tmp_path / "no" / "x.toml")), 2)[0]


# ---------------------------------------------------------------- mistakes

MISTAKES: list[tuple[str, str]] = [
    ("hot.mass_flow=0.4", "has no unit"),
    ("hot.mass_flow=0.4 kW", "unit of power"),
    ("hot.mass_flow=0,4 kg/s", "1.5, not 1,5"),
    ("hot.mass_flow=-0.4 kg/s", "give above 0"),
    ("hot.mass_flow=0 kg/s", "give above 0"),
    ("hot.mass_flow=nan kg/s", "hot.mass_flow"),
    ("hot.mass_flow=inf kg/s", "hot.mass_flow"),
    ("hot.mass_flow=nan", "hot.mass_flow"),
    ("hot.mass_flow=9**9**9 kg/s", "hot.mass_flow"),
    ("hot.inlet_temperature=90 C", "degC"),
    ("hot.inlet_temperature=-300 degC", "hot.inlet_temperature"),
    ("hot.mas_flow=1 kg/s", "did you mean hot.mass_flow?"),
    ("hot.volume_fraction=1.2", "at most 1"),
    ("electrical.converter_efficiency=1.1", "at most 1"),
    ("electrical.load=maximal", "maximum power"),
    ("hot.fluid=watr", "did you mean water?"),
    ("stack.row_pitch=38 mm", "footprint of 40.00 mm"),
    ("stack.rows=1000000000000", "at most 10000"),
    ("stack.rows=12.5", "whole number"),
    ("stack.rows=0", "at least 1"),
    ("stack.layers=3", "odd"),
    ("electrical.row_blocks=[1, 2]", "adds up to 3"),
    ("electrical.strings_across=1000", "does not divide"),
    ("hot.duct.faces=3", "at most 2"),
    ("hot.duct.kind=heat pipe", "known are smooth"),
    ("hot.duct.fin_pitch=2 mm", "does not apply"),
    ("electrical.load_resistance=3 ohm", "does not apply"),
    ("module.use=nothing", "demo-bismuth-telluride"),
    ("hot", 'has no "="'),
    ("=3", "unknown field"),
    ("hot.mass_flow=", "hot.mass_flow"),
]


@pytest.mark.parametrize("change", MISTAKES, ids=[change for change, _ in MISTAKES])
@pytest.mark.parametrize("command", ["estimate", "check"])
def test_a_mistake_gets_one_line_and_exit_2(command: str, change: tuple[str, str]) -> None:
    lines = fault_lines(run(command, EXAMPLE, "--set", change[0]), 2)
    assert len(lines) == 1, lines
    assert change[1] in lines[0], lines


def test_a_second_flow_in_a_file_and_none_at_all(tmp_path: Path) -> None:
    text = Path(EXAMPLE).read_text("utf-8")
    line = next(line for line in text.splitlines() if line.startswith(("mass_flow", "volume_flow")))
    other = 'volume_flow = "1 L/s"' if line.startswith("mass") else 'mass_flow = "1 kg/s"'
    for replacement, words in ((f"{line}\n{other}", "second flow"), ("", "a flow is missing")):
        path = tmp_path / "case.toml"
        path.write_text(text.replace(line, replacement, 1), "utf-8")
        lines = fault_lines(run("estimate", str(path)), 2)
        assert len(lines) == 1 and words in lines[0]


def test_every_fault_of_a_file_gets_its_own_line() -> None:
    lines = fault_lines(
        run("estimate", EXAMPLE, "--set", "hot.mass_flow=1", "--set", "stack.rows=0", "--set", "cold.foo=1"), 2
    )
    assert len(lines) == 3
    for field in ("hot.mass_flow", "stack.rows", "cold.foo"):
        assert sum(field in line for line in lines) == 1


def test_files_that_are_no_case(tmp_path: Path) -> None:
    empty, binary, words, big = (tmp_path / name for name in ("empty.toml", "binary.toml", "words.toml", "big.toml"))
    empty.write_bytes(b"")
    binary.write_bytes(bytes(range(256)))
    words.write_text("Dear engineer,\n", "utf-8")
    with big.open("wb") as file:
        file.truncate(2 << 30)
    for path, message in (
        (empty, "is empty"),
        (binary, "binary.toml"),
        (words, "not TOML"),
        (big, "larger than 1 MiB"),
        (tmp_path, "is a directory"),
        (tmp_path / "missing.toml", "no such file"),
        (tmp_path / ("x" * 300), "x"),
    ):
        for command in ("estimate", "check"):
            lines = fault_lines(run(command, str(path)), 2)
            assert len(lines) == 1 and message in lines[0], lines


def test_usage_errors_are_exit_2() -> None:
    for arguments in (("estimate",), ("estimate", EXAMPLE, "more"), ("cook",), ("estimate", EXAMPLE, "--colour")):
        result = run(*arguments)
        assert result.exit_code == 2 and result.stdout == "" and "Usage:" in result.stderr


# ---------------------------------------------------------------- the process

LOADED = (
    "import sys\nfrom harvest.cli import cli\n"
    "try:\n    cli(sys.argv[1:], prog_name='harvest')\nexcept SystemExit as end:\n    code = end.code\n"
    "heavy = [name for name in ('CoolProp', 'scipy', 'matplotlib', 'pint', 'jinja2') if name in sys.modules]\n"
    "print('LOADED', code or 0, *heavy, file=sys.stderr)"
)


@pytest.mark.parametrize(
    ("arguments", "code"),
    [
        (("--help",), 0),
        (("--version",), 0),
        (("check", EXAMPLE), 0),
        (("explain", "hot.mass_flow"), 0),
        (("start", STARTERS[0]), 0),
        (("cook",), 2),
        (("estimate", EXAMPLE, "--set", "hot.mass_flow=1"), 2),
    ],
)
def test_light_commands_load_no_heavy_library(arguments: tuple[str, ...], code: int) -> None:
    done = subprocess_run(*arguments, program=LOADED)
    assert done.stderr.splitlines()[-1] == f"LOADED {code}"


def test_a_second_estimate_needs_no_property_library(tmp_path: Path) -> None:
    first = subprocess_run("estimate", EXAMPLE, "--json", program=LOADED, cache=tmp_path)
    assert first.stderr.splitlines()[-1] == "LOADED 0 CoolProp"
    second = subprocess_run("estimate", EXAMPLE, "--json", program=LOADED, cache=tmp_path)
    assert second.stderr.splitlines()[-1] == "LOADED 0"
    assert first.stdout == second.stdout
    json.loads(first.stdout)


def test_a_reader_that_leaves_early_is_no_error() -> None:
    command = f"{sys.executable} -m harvest estimate {EXAMPLE} | head -n 1; echo ${{PIPESTATUS[0]}}"
    done = subprocess.run(["bash", "-c", command], capture_output=True, text=True, cwd=REPOSITORY, timeout=60)
    assert done.stderr == "" and len(done.stdout.splitlines()) == 2
    closed = f"{sys.executable} -m harvest explain --json | true; echo ${{PIPESTATUS[0]}}"
    done = subprocess.run(["bash", "-c", closed], capture_output=True, text=True, cwd=REPOSITORY, timeout=60)
    assert done.stderr == "" and done.stdout.strip() in ("0", "141")


def test_stdout_that_cannot_be_written_is_said_without_a_traceback() -> None:
    if not Path("/dev/full").exists():
        pytest.skip("needs /dev/full")
    with open("/dev/full", "w") as full:  # noqa: PTH123 - a device
        done = subprocess.run(
            [sys.executable, "-m", "harvest", "check", EXAMPLE],
            stdout=full,
            stderr=subprocess.PIPE,
            text=True,
            timeout=60,
        )
    assert done.returncode != 0 and "Traceback" not in done.stderr
