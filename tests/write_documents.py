"""Writes the pages and the README's output block that are made from the code: `python -m tests.write_documents`."""

from __future__ import annotations

import importlib
import math
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import click
import numpy as np
from click.testing import CliRunner

from harvest.cli import cli
from harvest.model.case import DECLARATIONS
from harvest.physics.fluids import FluidBatch, FluidSpec, fluid_table
from harvest.report.memo.reference import value_reference
from harvest.report.reference import CheckedNumber, case_reference, check_list, result_reference
from harvest.study.common_tolerances import COMMON_TOLERANCES
from tests.test_published import SOURCES, as_argument

ROOT = Path(__file__).parent.parent
DOCS = ROOT / "docs"
EXAMPLE = "examples/genset-jacket-water.toml"
OUTPUT_MARK = "<!-- estimate output -->\n"
TOLERANCES_MARK = "<!-- common tolerances -->\n"
FIRST_HEADING_LEFT_OUT = "\nAlong the stack\n"
ORIGINS = {
    "read": "read in the source",
    "reproduced": "reproduced by an independent calculation",
    "memory": "from memory",
}
COMMAND_LINE_INTRODUCTION = """\
# Command line

CASE is a case file, or `-` for standard input. Results go to stdout, errors to stderr. Exit codes: 0 done; 1 no valid
answer, with the reason; 2 wrong input or usage; 130 interrupted. `--set` takes what the case file would say, with or
without the quotes: `--set hot.mass_flow="0.4 kg/s"`. `python -m harvest` is the same program.

Fluid tables are kept in the user's cache folder, or in the folder named by the environment variable `HARVEST_CACHE`.

This page is made from the program's own help.
"""


def estimate_output() -> str:
    """What `harvest estimate` prints for the README's example, up to the table along the stack."""
    result = CliRunner().invoke(cli, ["estimate", str(ROOT / EXAMPLE)])
    assert result.exit_code == 0, result.output
    return result.stdout.partition(FIRST_HEADING_LEFT_OUT)[0].rstrip() + "\n"


def readme() -> str:
    """The README with its output block as it should be."""
    before, mark, after = (ROOT / "README.md").read_text(encoding="utf-8").partition(OUTPUT_MARK)
    assert mark, f"README.md has no line {OUTPUT_MARK!r}"
    rest = after.removeprefix("```text\n").partition("\n```\n")[2]
    return f"{before}{mark}```text\n{estimate_output()}```\n{rest}"


def method() -> str:
    """The page of the method with its table of common tolerances as it should be."""
    before, mark, after = (DOCS / "method.md").read_text(encoding="utf-8").partition(TOLERANCES_MARK)
    assert mark, f"method.md has no line {TOLERANCES_MARK!r}"
    return f"{before}{mark}{common_tolerance_table()}\n{after.partition(chr(10) * 2)[2]}"


def common_tolerance_table() -> str:
    """Rows of the tolerances that a study of doubt takes where the case states none."""
    lines = ["| field | tolerance | where | source |", "|---|---|---|---|"]
    for each in COMMON_TOLERANCES:
        names = ", ".join(f"`{path}`" for path in each.fields if not path.startswith("cold."))
        kind = DECLARATIONS[each.fields[0]].kind
        lines.append(f"| {names} | {each.tolerance.text(kind)} | {each.where} | {each.source} |")
    return "\n".join([*lines, ""])


def command_line() -> str:
    """Page of the program's help and that of each command."""
    context = cli.make_context("harvest", [], resilient_parsing=True, terminal_width=88)
    parts = [COMMAND_LINE_INTRODUCTION, _help("harvest", cli, context)]
    for name in cli.list_commands(context):
        command = cli.commands[name]
        parts.append(_help(f"harvest {name}", command, click.Context(command, context, name)))
    return "\n".join(parts)


def _help(title: str, command: click.Command, context: click.Context) -> str:
    return f"## {title}\n\n```text\n{command.get_help(context)}\n```\n"


def value_of(check: dict[str, Any]) -> Any:
    """What the package gives for one check of tests/published."""
    if check["function"] != "fluid":
        module, function = check["function"].rsplit(".", 1)
        inputs = {name: as_argument(value) for name, value in check["inputs"].items()}
        return getattr(importlib.import_module(module), function)(**inputs)
    inputs = dict(check["inputs"])
    wanted, pressure, temperature = (inputs.pop(name) for name in ("property", "pressure", "temperature"))
    table = fluid_table(FluidSpec(name=inputs.pop("fluid"), **inputs), pressure, temperature, temperature)
    if wanted in ("freezing", "boiling"):
        return getattr(table, wanted)
    batch = FluidBatch.stack([table], np.zeros(1, dtype=np.int64))
    point = np.array([[temperature]])
    if wanted == "prandtl":
        heat_capacity, viscosity, conductivity = batch.film_properties(point)
        return (heat_capacity * viscosity / conductivity)[0, 0]
    return getattr(batch, wanted)(point)[0, 0]


def checked_numbers() -> Iterator[CheckedNumber]:
    """Every check of tests/published with what the package gives."""
    for source in SOURCES.values():
        for check in source["check"]:
            tolerance = check.get("tolerance", check.get("absolute_tolerance"))
            yield CheckedNumber(
                citation=source["citation"],
                origin=ORIGINS[source["origin"]],
                name=check["name"],
                function=_short(check),
                where=check["where"],
                expected=_numbers(check["expected"]),
                got=_numbers(value_of(check)),
                tolerance=f"{tolerance:g}{' absolute' if 'absolute_tolerance' in check else ''}",
                kind=check["kind"],
            )


def _short(check: dict[str, Any]) -> str:
    if check["function"] == "fluid":
        return f"{check['inputs']['fluid']}: {check['inputs']['property']}"
    return str(check["function"].removeprefix("harvest.physics."))


def _numbers(value: Any) -> str:
    """Print numbers with six digits; what is nothing beside the largest of them is zero."""
    flat = np.asarray(value, dtype=float).ravel()
    nothing = 1e-13 * max(1.0, float(np.abs(flat).max()))
    return ", ".join(f"{0.0 if math.fabs(number) < nothing else number:.6g}" for number in flat)


def documents() -> dict[Path, str]:
    """Every generated file with what should stand in it."""
    return {
        ROOT / "README.md": readme(),
        DOCS / "method.md": method(),
        DOCS / "case-file.md": case_reference(),
        DOCS / "results.md": result_reference(),
        DOCS / "memo-values.md": value_reference(),
        DOCS / "command-line.md": command_line(),
        DOCS / "checks.md": check_list(checked_numbers()),
    }


if __name__ == "__main__":
    for path, content in documents().items():
        path.write_text(content, encoding="utf-8")
