"""The documents: generated pages are up to date, and what the hand-written ones name exists."""

from __future__ import annotations

import importlib
import re
from pathlib import Path

import pytest

from harvest.cli import cli
from harvest.model import checks
from harvest.model.case import DECLARATIONS
from harvest.model.estimate import estimate
from harvest.model.reading import load_case
from harvest.model.results import ROW_RESULTS, SCALARS
from harvest.physics.ducts import LAMINAR_LIMIT, OFFSET_STRIP_REYNOLDS_RANGE, TURBULENT_LIMIT
from harvest.report.memo.reference import value_reference
from harvest.report.reference import CheckedNumber, case_reference, check_list, result_reference
from harvest.study.screen import NUMBERS
from tests.test_published import CHECKS
from tests.write_documents import DOCS, ROOT, checked_numbers, command_line, method, readme

PAGES = [ROOT / "README.md", ROOT / "DEVELOPERS.md", *sorted(DOCS.rglob("*.md"))]
SECTIONS = {path.partition(".")[0] for path in DECLARATIONS if "." in path}
NUMBER = re.compile(r"-?\b\d[\d,]*(?:\.\d+)?(?:e[+-]?\d+)?")
SOURCE = (ROOT / "pyproject.toml").read_text(encoding="utf-8") + "".join(
    path.read_text(encoding="utf-8")
    for folder in ("harvest", "tests")
    for path in (ROOT / folder).rglob("*.py")
    if path != Path(__file__)
)
REGENERATE = "is not up to date; run python -m tests.write_documents"

every_page = pytest.mark.parametrize("page", PAGES, ids=lambda page: str(page.relative_to(ROOT)))


def codes(page: Path) -> list[str]:
    """What stands in single backticks outside of fenced blocks."""
    return re.findall(r"`([^`\n]+)`", re.sub(r"```.*?```", "", page.read_text(encoding="utf-8"), flags=re.DOTALL))


def anchors(page: Path) -> set[str]:
    headings = re.findall(r"^#+ (.+)$", page.read_text(encoding="utf-8"), flags=re.MULTILINE)
    return {re.sub(r"[^\w\- ]", "", heading.lower()).replace(" ", "-") for heading in headings}


def assert_same_to_the_last_digits(found: str, made: str) -> None:
    """Compare words exactly and numbers within 0.2 %: other versions of the libraries differ in their last digits."""
    assert NUMBER.sub("#", found).split() == NUMBER.sub("#", made).split(), REGENERATE
    numbers = [[float(number.replace(",", "")) for number in NUMBER.findall(text)] for text in (found, made)]
    assert numbers[0] == pytest.approx(numbers[1], rel=2e-3, abs=1e-9), REGENERATE


def test_readme_shows_what_the_program_prints() -> None:
    assert_same_to_the_last_digits((ROOT / "README.md").read_text(encoding="utf-8"), readme())


def test_table_of_common_tolerances_is_up_to_date() -> None:
    assert (DOCS / "method.md").read_text(encoding="utf-8") == method(), REGENERATE


def test_page_of_checks_is_up_to_date() -> None:
    rows = list(checked_numbers())
    assert [row.name for row in rows] == [check["name"] for check in CHECKS.values()]
    assert_same_to_the_last_digits((DOCS / "checks.md").read_text(encoding="utf-8"), check_list(rows))


@pytest.mark.parametrize(
    ("name", "made"),
    [
        ("case-file.md", case_reference()),
        ("results.md", result_reference()),
        ("memo-values.md", value_reference()),
    ],
    ids=["case", "results", "memo"],
)
def test_page_from_declarations_is_up_to_date(name: str, made: str) -> None:
    assert (DOCS / name).read_text(encoding="utf-8") == made, REGENERATE


def test_page_of_commands_is_up_to_date() -> None:
    # versions of click differ in where they break lines and shorten the list of commands
    commands, pages = (
        re.sub(r"Commands:\n.*?```", "", text, flags=re.DOTALL).split()
        for text in ((DOCS / "command-line.md").read_text(encoding="utf-8"), command_line())
    )
    assert commands == pages, REGENERATE


def test_every_field_and_result_is_in_its_page() -> None:
    rows_of_case = re.findall(r"^\| `(\w+)` ", case_reference(), flags=re.MULTILINE)
    alone = [path for path, each in DECLARATIONS.items() if each.section is None and not path.startswith("cold.")]
    assert rows_of_case == [path.rpartition(".")[2] for path in sorted(alone, key=_place)]
    assert re.findall(r"^\| `(\w+)` ", result_reference(), flags=re.MULTILINE) == [*SCALARS, *ROW_RESULTS, *NUMBERS]


def _place(path: str) -> int:
    """Fields stand by section, sections in the order of their declaration."""
    sections = ["", *(name for name, each in DECLARATIONS.items() if each.section is not None)]
    return sections.index(path.rpartition(".")[0])


def test_a_cell_keeps_its_bars() -> None:
    page = check_list([CheckedNumber("Source", "read", "name", "function", "|x|", "1", "1", "0.1", "exact")])
    assert "\\|x\\|" in page


@every_page
def test_links_resolve(page: Path) -> None:
    for target in re.findall(r"\]\(([^)\s]+)\)", page.read_text(encoding="utf-8")):
        if re.match(r"[a-z]+:", target):
            continue
        name, _, anchor = target.partition("#")
        file = (page.parent / name).resolve() if name else page
        assert file.exists(), f"{target} leads nowhere"
        assert not anchor or anchor in anchors(file), f"{target}: no such heading"


@every_page
def test_named_fields_are_declared(page: Path) -> None:
    for code in codes(page):
        for path in re.findall(r"\b[a-z_]+(?:\.[a-z_]+)+\b", code):
            if path.partition(".")[0] in SECTIONS and not path.endswith((".py", ".toml", ".md")):
                assert path in DECLARATIONS, f"{path} is not a field"


@every_page
def test_named_files_exist(page: Path) -> None:
    for code in codes(page):
        if re.fullmatch(r"(?:harvest|tests|docs|examples|\.ci)/[\w./-]*", code):
            assert (ROOT / code).exists(), f"{code} does not exist"


@every_page
def test_named_commands_exist(page: Path) -> None:
    text = page.read_text(encoding="utf-8")
    blocks = re.findall(r"```sh\n(.*?)```", text, flags=re.DOTALL)
    said = [code for code in codes(page) if code.startswith("harvest ")]
    for line in [line for block in blocks for line in block.splitlines()] + said:
        for name in re.findall(r"(?:^|[/ ])harvest ([a-z]+)", line):
            assert name in cli.commands, f"{line}: no such command"


def _section(page: str, heading: str) -> str:
    text = (ROOT / page).read_text(encoding="utf-8")
    return text.partition(f"\n## {heading}")[2].partition("\n## ")[0]


def test_the_map_of_the_source_is_the_source() -> None:
    folder, mapped = Path(), set()
    for name in re.findall(
        r"^\| (?:\*\*)?`([\w./]+)`", _section("DEVELOPERS.md", "Map of the source"), flags=re.MULTILINE
    ):
        if name.startswith("harvest/"):
            folder = ROOT / name
        elif name.endswith(".py"):
            mapped.add(folder / name)
    assert mapped == {each for each in (ROOT / "harvest").rglob("*.py") if not each.name.startswith("__")}


@every_page
def test_named_code_exists(page: Path) -> None:
    for code in codes(page):
        if re.fullmatch(r"_?[A-Za-z]\w{3,}", code):
            assert re.search(rf"\b{code}\b", SOURCE), f"{code} is not in the source"


def test_checks_of_an_estimate_are_in_the_method() -> None:
    told = re.findall(r"^\| ([^|]+) \|", _section("docs/method.md", "Checks of an estimate"), flags=re.MULTILINE)
    found = {
        check.name for path in sorted((ROOT / "examples").glob("*.toml")) for check in estimate(load_case(path)).checks
    }
    assert len(found) > 20
    assert not {name for name in found if name not in told and re.sub("^(hot|cold) ", "", name) not in told}


def test_limits_of_checks_are_those_of_the_code() -> None:
    section = _section("docs/method.md", "Checks of an estimate")
    for limit in (
        f"| energy closure | {checks.CLOSURE_LIMIT:g} of",
        f"| grid | {100 * checks.GRID_LIMIT:g} %",
        f"| open-circuit voltage | {checks.SHOCK_VOLTAGE:g} V",
        f"with {checks.BOILING_MARGIN:g} K of margin | fail; warn |\n| freezing",
        f"with {checks.FREEZING_MARGIN:g} K of margin | fail; warn |\n| water",
        f"and {checks.ACID_MARGIN:g} K more",
        f"Re {LAMINAR_LIMIT:g} to {TURBULENT_LIMIT:g}; with offset strips none outside Re "
        f"{OFFSET_STRIP_REYNOLDS_RANGE[0]:g} to {OFFSET_STRIP_REYNOLDS_RANGE[1]:g}",
        f"{checks.FASTEST['liquid']:g} m/s of a liquid, {checks.FASTEST['gas']:g} m/s of a gas",
        f"| Mach number | {checks.LARGEST_MACH:g} |",
        f"{100 * checks.LARGEST_DROP_SHARE:g} % of the inlet pressure",
        f"| {1e3 * checks.LARGEST_COUPLE_SEEBECK:g} mV/K |",
        f"Z T of {checks.LARGEST_MERIT:g} |",
        f"| coverage | {100 * checks.SMALLEST_COVERAGE:g} %",
    ):
        assert limit in section, limit


def test_names_of_the_nomenclature_are_names_of_the_code() -> None:
    known = {path.rpartition(".")[2] for path in DECLARATIONS} | set(SCALARS) | set(ROW_RESULTS)
    rows = re.findall(
        r"^\|([^|\n]*)\|([^|\n]*)\|([^|\n]*)\|([^|\n]*)\|$", (DOCS / "nomenclature.md").read_text("utf-8"), re.M
    )
    named = [name for row in rows for name in re.findall(r"`([^`]+)`", row[3])]
    assert len(named) > 40
    for name in named:
        if name.startswith("harvest."):
            module, _, function = name.rpartition(".")
            assert hasattr(importlib.import_module(module), function), f"{name} does not exist"
        else:
            assert name in known or name in DECLARATIONS, f"{name} is neither a field nor a result"


def test_symbols_of_declarations_are_in_the_nomenclature() -> None:
    text = (DOCS / "nomenclature.md").read_text(encoding="utf-8")
    for path, declaration in DECLARATIONS.items():
        if declaration.symbol:
            assert f"| {declaration.symbol} |" in text, f"{path}: symbol {declaration.symbol} is missing"
