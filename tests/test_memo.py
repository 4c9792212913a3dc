"""The memo: its numbers are those of the results, its words leak nothing, and the same case gives the same bytes."""

from __future__ import annotations

import json
import math
import re
import xml.etree.ElementTree as ElementTree
from pathlib import Path

import pytest
from click.testing import CliRunner

import harvest
from harvest.cli import cli
from harvest.model.case import DECLARATIONS
from harvest.model.estimate import estimate
from harvest.model.reading import load_case, read_case, replace
from harvest.quantities import significant
from harvest.report.memo.compose import Memo, memo
from harvest.report.memo.filling import NOT_MODELLED
from harvest.report.memo.templates import TEMPLATES
from harvest.report.memo.values import Value
from tests.memos import CASES, DAY, QUICK, ROOT, Page, memo_of, read_number, result_at, shown_number

EXHAUST = ROOT / "examples/genset-exhaust.toml"
WATER = ROOT / "examples/genset-jacket-water.toml"
TEXTBOOK = ROOT / "examples/textbook-array.toml"
SINGLE = [name for name in TEMPLATES if name != "comparison"]

every_case = pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)


def assert_shows_results(made: Memo) -> int:
    """Every marked number is its result, rounded as it says; return how many there are."""
    page = Page(made.html())
    for shown in page.shown:
        if "data-unit" not in shown.attributes:
            words = str(result_at(made.results, shown.attributes["data-value"]))
            letters = re.compile(r"[^A-Za-z0-9]+|degC|C\b|um\b|m\b|ohm\b|\bx\b|µ|Ω|×|°|±")
            assert letters.sub("", shown.text) == letters.sub("", words)
            continue
        number = shown_number(made.results, shown.attributes)
        printed = read_number(shown.text)
        if "data-decimals" in shown.attributes:
            wanted = round(number, int(shown.attributes["data-decimals"]))
        else:
            wanted = float(significant(number, int(shown.attributes["data-digits"])))
        assert printed == pytest.approx(wanted, rel=1e-9, abs=1e-300), shown
    return len(page.shown)


@every_case
def test_every_number_of_a_memo_is_the_result_it_names(path: Path) -> None:
    assert assert_shows_results(memo_of(path)) > 150


@pytest.mark.parametrize("template", SINGLE)
def test_numbers_of_other_templates_are_results(template: str) -> None:
    assert assert_shows_results(memo_of(WATER, template)) > 20


def test_a_whole_memo_with_its_range_and_costs() -> None:
    made = memo_of(EXHAUST, whole=True)
    assert_shows_results(made)
    assert_no_number_stands_alone(made, EXHAUST)
    net, text = made.results["doubt"]["results"]["net_power"], made.markdown()
    assert net["p10"] < made.results["estimate"]["net_power"] < net["p90"]
    assert "Range of the net power, P10 to P90" in text[: text.index("## Purpose")]
    first = made.results["doubt"]["worth_measuring"][0]
    assert f"`{first}`" in text[text.index("## What to measure next") :]


def test_a_memo_tells_the_chances_of_limits_without_load_and_of_the_converter_window() -> None:
    case = replace(load_case(WATER), {"limits.maximum_open_circuit_voltage": "43 V"})
    made = memo(case, date=DAY, without=("size",))
    assert_shows_results(made)
    text = made.markdown().replace("\N{NO-BREAK SPACE}", " ")
    assert "| maximum open circuit voltage, at most | 43.00 V | " in text
    assert "| converter window, at least | 12.00 V | 0.00 % |" in text


@pytest.mark.slow
@every_case
def test_whole_memos_of_all_cases(path: Path) -> None:
    made = memo_of(path, whole=True)
    assert_shows_results(made)
    assert_no_number_stands_alone(made, path)
    assert_nothing_leaks(made)
    again = memo(load_case(path), date=DAY, command="harvest memo", sources=(path.read_text("utf-8"),))
    assert again.html() == made.html()


def test_costs_and_payback_are_told() -> None:
    prices = {"cost.currency": "EUR", "cost.module": 20.0, "site.electricity_value": "0.30 EUR/kWh"}
    made = memo(replace(load_case(WATER), prices), date=DAY, without=QUICK)
    assert_shows_results(made)
    assert made.results["estimate"]["building_cost"] == pytest.approx(192 * 20.0)
    assert "| Cost of building | 3,840 EUR |" in made.markdown().replace("\N{NO-BREAK SPACE}", " ")
    assert made.results["payback"].startswith(significant(made.results["estimate"]["payback_years"], 3))


def test_numbers_of_a_comparison_are_results() -> None:
    made = memo([load_case(path) for path in (EXHAUST, WATER, TEXTBOOK)], date=DAY)
    assert assert_shows_results(made) > 60
    assert_ids_are_single(made.html())
    assert {result_at(made.results, f"cases[{i}].estimate.module_count") for i in range(3)} == {168, 192, 48}


@every_case
def test_results_of_a_memo_are_those_of_the_estimate(path: Path) -> None:
    made, answer = memo_of(path), estimate(load_case(path))
    assert made.results["estimate"]["net_power"] == answer.net_power
    assert made.results["estimate"]["case_hash"] == answer.case_hash
    assert answer.case_hash in made.html()


@every_case
def test_nothing_of_the_program_leaks(path: Path) -> None:
    assert_nothing_leaks(memo_of(path))


def assert_nothing_leaks(made: Memo) -> None:
    for text in (made.html(), made.markdown()):
        for word in (r"\bNone\b", r"\bnan\b", r"\binf\b", r"\{\{", r"\{%", r"Value\(", r"<harvest", "\ue000", "TODO"):
            assert not re.search(word, text), word


@every_case
def test_no_number_stands_without_its_result(path: Path) -> None:
    assert_no_number_stands_alone(memo_of(path), path)


def assert_no_number_stands_alone(made: Memo, path: Path) -> None:
    """No digit stands outside of marked numbers, inputs, method, sources and the case file."""
    allowed = {"pre", "code", "method", "facts", "repeat", "inputs", "tick", "title", "h1", "style"}
    literal = {load_case(path).title, "5 %", *(declaration.reason for declaration in DECLARATIONS.values())}
    for where, words in Page(made.html()).words:
        if allowed & set(where) or words.strip() in literal:
            continue
        rest = re.sub(r"within 5 % of|\d+ % by (volume|mass)|IAPWS\S*|\bP(10|50|90)|(80|90) of 100", "", words)
        row_number = "td" in where and rest.strip().isdigit()
        assert row_number or not re.search(r"\d", rest), (where, words)


@every_case
def test_html_is_one_file_without_script_or_anything_fetched(path: Path) -> None:
    page = Page(memo_of(path).html())
    assert not page.tags & {"script", "link", "iframe", "img", "object", "embed", "base", "form"}
    html = re.sub(r'xmlns(:\w+)?="[^"]*"', "", memo_of(path).html())
    assert not re.search(r"(?:src|href)\s*=|@import|https?://|javascript:|\bon\w+\s*=", html)
    assert all(re.fullmatch(r"#[\w-]+", target) for target in re.findall(r"url\(([^)]*)\)", html))


@every_case
def test_drawings_are_whole_and_their_patterns_defined(path: Path) -> None:
    assert_drawings_are_whole(memo_of(path).html())


def assert_drawings_are_whole(html: str) -> None:
    drawings = re.findall(r"<svg.*?</svg>", html, flags=re.DOTALL)
    assert len(drawings) >= 2
    for drawing in drawings:
        root = ElementTree.fromstring(drawing)
        assert root.get("aria-label")
        width, height = (float(each) for each in str(root.get("viewBox")).split()[2:])
        defined = {element.get("id") for element in root.iter() if element.get("id")}
        assert set(re.findall(r"url\(#([\w-]+)\)", drawing)) <= defined
        for element in root.iter():
            for name in ("x", "x1", "x2", "cx"):
                assert element.get(name) is None or -1 <= float(str(element.get(name))) <= width + 1
            for name in ("y", "y1", "y2", "cy"):
                assert element.get(name) is None or -1 <= float(str(element.get(name))) <= height + 1
    assert_ids_are_single(html)


def assert_ids_are_single(html: str) -> None:
    names = re.findall(r' id="([\w-]+)"', html)
    assert names and len(names) == len(set(names))


def test_same_case_and_date_give_the_same_bytes() -> None:
    first, again = (memo(load_case(WATER), date=DAY, command="x", sources=("y",), without=QUICK) for _ in range(2))
    assert first.html() == again.html()
    assert first.markdown() == again.markdown()


@pytest.mark.parametrize(
    "title",
    [
        "<script>alert(1)</script> & <b>x</b>",
        "**bold** _it_ `code` # head | cell | [link](http://x) ![](y)",
        "{{ 7 * 7 }} {% for i in [1] %}x{% endfor %} {{ ''.__class__ }}",
        '#set page(width: 1pt) $x$ #read("/etc/passwd") "quoted" \\ end',
        ":::  failed",
        "\ue0000\ue001 mark",
    ],
)
def test_a_hostile_title_is_text(title: str) -> None:
    made = memo(replace(load_case(TEXTBOOK), {"title": title}), date=DAY, without=QUICK)
    clean = title.replace("\ue000", " ").replace("\ue001", " ")
    page = Page(made.html())
    assert "script" not in page.tags and "b" not in page.tags and "a" not in page.tags
    heading = "".join(words for where, words in page.words if "h1" in where)
    assert heading == clean
    first = made.markdown().splitlines()[0]
    assert re.sub(r"\\(.)", r"\1", first.removeprefix("# ")).replace("\\", "") == clean.replace("\\", "")
    assert "\n:::" not in made.markdown()


def test_a_hostile_case_file_is_text() -> None:
    source = "# </pre><script>alert(1)</script> ``` **x** {{ 7 }} #read(1)\n:::\n[hot]\x00\ue000"
    made = memo(load_case(TEXTBOOK), date=DAY, without=QUICK, sources=(source,), command="x `y` </code><script>")
    page = Page(made.html())
    assert "script" not in page.tags
    shown = "".join(words for where, words in page.words if "pre" in where)
    assert shown == source.replace("\x00", " ").replace("\ue000", " ")
    assert "````" in made.markdown()


def test_a_case_that_fails_says_so_at_the_top(tmp_path: Path) -> None:
    case = replace(load_case(EXHAUST), {"limits.hot_face_temperature": 400.0})
    text = memo(case, date=DAY, without=QUICK).markdown()
    assert text.index("not acceptable as it stands") < text.index("## Answer")
    assert "hot face temperature" in text[: text.index("## Answer")]
    assert text.index("### Failed") < text.index("### Warnings") < text.index("### Passed")


def test_a_case_without_an_answer_gives_reasons_and_no_file(tmp_path: Path) -> None:
    out = tmp_path / "memo.html"
    result = CliRunner().invoke(
        cli,
        [
            "memo",
            str(TEXTBOOK),
            "-o",
            str(out),
            "--set",
            "electrical.load=fixed voltage",
            "--set",
            "electrical.load_voltage=100000 V",
        ],
    )
    assert result.exit_code in (1, 2)
    assert result.stderr.startswith("harvest: ")
    assert not out.exists()


def test_the_case_file_and_command_repeat_the_result(tmp_path: Path) -> None:
    out = tmp_path / "memo.html"
    arguments = [
        "memo",
        str(WATER),
        "--date",
        DAY,
        "--set",
        "hot.inlet_temperature=95 degC",
        "-o",
        str(out),
        "--without",
        "doubt",
    ]
    result = CliRunner().invoke(cli, [*arguments, "--json"])
    assert result.exit_code == 0, result.output
    page = Page(out.read_text("utf-8"))
    shown = ["".join(words for where, words in page.words if "pre" in where)]
    command = "".join(words for where, words in page.words if "repeat" in where and "code" in where)
    assert "--set 'hot.inlet_temperature=95 degC'" in command and f"--date {DAY}" in command
    again = estimate(read_case(shown[0], ["hot.inlet_temperature=95 degC"]))
    document = json.loads(result.stdout)
    assert again.case_hash == document["estimate"]["case_hash"]
    assert again.net_power == pytest.approx(document["estimate"]["net_power"], rel=1e-12)


def test_files_that_the_case_names_stand_in_the_memo(tmp_path: Path) -> None:
    record = 'footprint = ["40 mm", "40 mm"]\nseebeck = [["300 K", "0.05 V/K"], ["400 K", "0.054 V/K"]]\n'
    (tmp_path / "own.toml").write_text(f'{record}resistance = "2 ohm"\nconductance = "0.6 W/K"\n', "utf-8")
    text = WATER.read_text("utf-8").replace("demo-bismuth-telluride-40", "own.toml")
    made = memo(read_case(text, folder=tmp_path), date=DAY, without=QUICK, sources=(text,))
    written = made.markdown()
    assert "The file that it names, `own.toml`" in written and record in written
    assert "`module.seebeck` |  | as in the module's record below | derived" in written
    assert "that it names" not in memo_of(WATER).markdown()


def test_the_best_number_of_modules_tells_what_for_and_its_warnings() -> None:
    around = memo(load_case(WATER), date=DAY, without=("doubt",)).markdown()
    assert "Warnings of the best: open-circuit voltage, converter without load" in around
    wanted = {"size.objective": "fewest modules", "size.target_net_power": 40.0, "size.wiring": "as given"}
    case = replace(load_case(ROOT / "harvest/data/starters/coolant-to-water.toml"), wanted)
    assert "The best by fewest modules has" in memo(case, date=DAY, without=("doubt",)).markdown()


def test_inputs_are_marked_given_default_or_derived() -> None:
    text = memo_of(WATER).markdown()

    def mark(path: str) -> str:
        line = next(line for line in text.splitlines() if f"`{path}` |" in line)
        return line.rstrip("| ").rpartition("| ")[2].strip()

    assert mark("hot.inlet_temperature") == "given"
    assert mark("hot.drive_position") == "default"
    assert mark("hot.mass_flow") == "derived"
    assert mark("module.footprint") == "derived"
    assert "92 degC | 365.15" in text


def test_cautions_hold_this_cases_numbers() -> None:
    assert "carbon monoxide" in memo_of(EXHAUST).markdown()
    assert "carbon monoxide" not in memo_of(WATER).markdown()


@pytest.mark.parametrize(
    ("name", "said", "unsaid"),
    [
        ("genset-exhaust", ["swept volume flow", "tanh(", "exp(", "From legs"], ["Bought blocks", "Reservoir"]),
        ("workshop-water-blocks", ["Bought blocks", "exp("], ["Shah and London", "swept", "Bar-Cohen"]),
        ("stove-wall-sensor", ["Reservoir", "Bar-Cohen"], ["exp(", "Shah and London", "A pump or fan"]),
        ("cooler-from-the-drawer", ["Lineykin", "Shah and London"], ["From legs", "Bought blocks"]),
    ],
)
def test_the_method_is_that_of_the_case(name: str, said: list[str], unsaid: list[str]) -> None:
    text = memo_of(ROOT / f"examples/{name}.toml").markdown()
    method = text[text.index("## Method") : text.index("Sources of properties")]
    assert all(each in method for each in said) and not any(each in method for each in unsaid)


def test_what_is_not_modelled_stands_in_the_method() -> None:
    method = " ".join((ROOT / "docs/method.md").read_text("utf-8").split())
    assert ", ".join(NOT_MODELLED).lower() in method.lower()


def test_the_verdict_tells_both_a_failed_check_and_a_loss() -> None:
    case = replace(load_case(WATER), {"electrical.load": "fixed voltage", "electrical.load_voltage": 80.0})
    said = memo(case, date=DAY, without=QUICK).markdown()
    assert "Not acceptable as it stands: converter window. Nothing is generated at this load." in said


def test_a_drawing_tells_where_it_is_not_to_scale() -> None:
    long = memo(replace(load_case(WATER), {"stack.rows": 60}), date=DAY, without=QUICK).html()
    assert "thin parts are drawn thicker than to scale" in long
    assert "thin parts" not in memo_of(WATER).html()


def test_the_curve_passes_through_the_design() -> None:
    results = memo_of(WATER).results
    curve = results["size"]["curve"]
    place = curve["module_count"].index(192)
    assert curve["net_power"][place] == pytest.approx(results["estimate"]["net_power"], rel=1e-9)


def test_printing_of_numbers() -> None:
    def text(raw: float, kind: str, digits: int = 3, style: str = "quantity") -> str:
        return Value(raw, kind, "x", digits, style).text.replace("\N{NO-BREAK SPACE}", " ")

    assert text(62.96, "power") == "63.0 W"
    assert text(-0.004, "power") == "−4.00 mW"
    assert text(273.15 + 84.94, "temperature", 4) == "84.9 °C"
    assert text(273.12, "temperature", 4) == "0.0 °C"
    assert text(9.67e-14, "dimensionless") == "9.67×10⁻¹⁴"
    assert text(0.01, "dimensionless") == "0.01"
    assert text(0.0182, "dimensionless", style="percent") == "1.82 %"
    assert text(1.7e-6, "dimensionless", style="percent") == "0.00 %"
    assert text(1234.0, "dimensionless", style="whole") == "1,234"
    assert text(3e-5, "areal thermal resistance", 6, "si") == "3×10⁻⁵ m² K/W"
    assert text(math.nan, "power") == "–"
    assert Value(math.nan, "power", "x").attributes() == {}


def test_library_and_command(tmp_path: Path) -> None:
    made = harvest.memo(harvest.load_case(TEXTBOOK), date=DAY, without=("doubt",))
    assert isinstance(made, harvest.Memo)
    made.write(tmp_path / "a memo (1).md")
    assert sorted(path.suffix for path in tmp_path.iterdir()) == [".md", ".svg", ".svg", ".svg", ".svg"]
    links = re.findall(r"!\[[^]]*\]\(([^)]+)\)", (tmp_path / "a memo (1).md").read_text("utf-8"))
    assert {link.replace("%20", " ").replace("%28", "(").replace("%29", ")") for link in links} == {
        path.name for path in tmp_path.glob("*.svg")
    }
    run = CliRunner()
    listed = run.invoke(cli, ["memo", "--list"])
    assert all(name in listed.stdout for name in TEMPLATES)
    assert "{{ estimate.net_power }}" in run.invoke(cli, ["memo", "--show-template", "memo"]).stdout


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ([], "no case is given"),
        ([str(WATER)], "no output is given"),
        ([str(WATER), "-o", "no-folder/memo.html"], "there is no folder no-folder"),
        ([str(WATER), "-o", "memo.txt"], "ends in .html, .md, .pdf, .docx"),
        ([str(WATER), "-o", "memo.html", "--date", "yesterday"], "yesterday is no date"),
        ([str(WATER), "-o", "memo.html", "--template", "nothing"], "no file or folder and no shipped template"),
        ([str(WATER), "-o", "memo.html", "--template", "comparison"], "two or more cases"),
        ([str(WATER), str(EXHAUST), "-o", "memo.html", "--template", "summary"], "for one case"),
        (["missing.toml", "-o", "memo.html"], "there is no such file"),
        (["--show-template", "mem"], "did you mean memo"),
    ],
)
def test_usage_errors_are_one_line(arguments: list[str], words: str) -> None:
    result = CliRunner().invoke(cli, ["memo", *arguments])
    assert result.exit_code == 2
    assert words in result.stderr and result.stderr.count("\n") == 1


def test_a_search_without_a_choice_is_told() -> None:
    case = replace(load_case(WATER), {"limits.minimum_hot_outlet_temperature": 364.9})
    made = memo(case, date=DAY, without=("doubt",))
    assert_shows_results(made)
    assert "no choice keeps to the limits" in made.markdown()


ODD = [
    {"electrical.load": "open circuit"},
    {"hot.inlet_temperature": 290.0},
    {"hot.inlet_temperature": 303.15},
    {"electrical.independent": True},
    {"electrical.load": "fixed voltage", "electrical.load_voltage": 60.0},
    {"stack.rows": 1},
    {"stack.rows": 300, "electrical.converter_window": None},
    {"stack.layers": 40},
    {"stack.column_pitch": 1.0},
]


@pytest.mark.parametrize("changes", ODD, ids=str)
def test_odd_designs_have_whole_memos(changes: dict[str, float]) -> None:
    made = memo(replace(load_case(WATER), changes), date=DAY, without=QUICK)
    assert_shows_results(made)
    assert_nothing_leaks(made)
    assert_no_number_stands_alone(made, WATER)
    assert_drawings_are_whole(made.html())
