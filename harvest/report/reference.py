"""Reference pages in Markdown, made from the declarations: fields of the case file, results, and the list of checks."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from itertools import groupby
from typing import NamedTuple

from harvest.model.case import DECLARATIONS, default_text, display, limits_text, selector_path
from harvest.model.case_fields import Declaration
from harvest.model.results import ROW_RESULTS, SCALARS
from harvest.quantities import KINDS, allowed_units, example_of, unit_of
from harvest.study.screen import NUMBERS

FORMS_WITH_UNIT = ("quantity", "pair", "curve", "flow curve", "standard volume flow", "energy price")
WRITTEN = {
    "text": "text",
    "file": "name or path",
    "log": "path",
    "integer": "whole number",
    "integers": "whole numbers in a list",
    "boolean": "`true` or `false`",
    "fluid table": "table or path",
    "axis": "list, or `{ from = .., to = .., step = .. }`",
    "axes": "table",
    "tolerances": "table",
}
CASE_INTRODUCTION = """\
# The case file

A TOML file. Numbers with a unit stand in quotes with it (`"0.5 kg/s"`, decimal point); a number without a unit is
refused where the quantity has one. Unknown fields are refused, and all faults are reported at once, with their lines.
`harvest explain FIELD` tells what stands here, `harvest check CASE` what was assumed, and `harvest start` writes a
commented file to begin with. Allowed ranges are in SI units; fields without a default must be given where they apply.

This page is made from the declarations in `harvest/model/*_sections.py`.
"""
CURVES_AND_UNITS = """\
## Curves

`module.seebeck`, `module.resistance` and `module.conductance` hold at the mean of the two junction temperatures and are
one text (`"0.05 V/K"`), a list of polynomial coefficients in (T - 300 K), lowest power first (texts with the unit per
power, or plain SI numbers), or pairs of temperature and value (`[["300 K", "0.05 V/K"], ["400 K", "0.054 V/K"]]`).

`block_resistance`, `block_pressure_drop` and `drive_curve` are pairs of volume flow and value
(`[["2 L/min", "0.03 K/W"], ["6 L/min", "0.015 K/W"]]`). The first two may also be a power law,
`{ flow = "2 L/min", value = "0.03 K/W", exponent = -0.6, from = "1 L/min", to = "6 L/min" }`.

## Units

| quantity | SI unit | accepted units |
|---|---|---|
"""
RESULT_INTRODUCTION = """\
# Results

Names are those of the library's `Estimate` and of `harvest estimate --json`, whose `units` maps each name to its unit.
All numbers are SI, of the whole stack, at its terminals; where a number does not apply, it is NaN in the library
and null in JSON; a case without an answer has `valid` false, says why in `problem`, and has no numbers at all.
Beside the tables below an estimate holds `checks` (each with name, kind, value, limit, bound, status and text),
`sources`, `version` and `case_hash`. The results of a sizing and of a study of doubt, with units and meanings, are in
[memo-values.md](memo-values.md); the JSON of every study has the `units` of its numbers.

This page is made from the declarations in `harvest/model/results.py`.
"""
CHECK_INTRODUCTION = """\
# Checks of the method

Every number that a function of the package is held to, with what the function gives now. A number of kind *exact* is a
closed form or arithmetic, *published* stands in the source, *independent* comes from another library or method,
*common-practice* has no source, *regression* is an own earlier result. Numbers are SI; tolerances are relative unless
they say absolute, and the reason of each stands in `tests/published/`.
"""


class CheckedNumber(NamedTuple):
    """One number that a function is held to, with what the function gives; texts as they are printed."""

    citation: str
    origin: str
    name: str
    function: str
    where: str
    expected: str
    got: str
    tolerance: str
    kind: str


def case_reference() -> str:
    """Page of every field of the case file: meaning, unit, default with its reason, range, choices, units."""
    parts = [CASE_INTRODUCTION]
    for names, section in _sections():
        heading = " and ".join(f"`[{name}]`" for name in names if name) or "Outside of the sections"
        parts.append(f"## {heading}\n")
        if names[0]:
            parts.append(" ".join(dict.fromkeys(DECLARATIONS[name].meaning for name in names)) + "\n")
        parts.append(_table(("field", "meaning", "write", "SI unit", "default", "allowed"), _field_rows(section)))
        parts += [
            f"`{path.rpartition('.')[2]}` is one of\n\n"
            + "".join(f'* `"{choice}"`: {meaning}\n' for choice, meaning in declaration.choices.items())
            for path, declaration in section
            if declaration.choices
        ]
    units = [(kind.name, kind.si_unit, allowed_units(kind.name)) for kind in KINDS.values() if kind.name in _kinds()]
    parts.append(CURVES_AND_UNITS + "".join(_line(row) for row in units))
    return "\n".join(parts)


def result_reference() -> str:
    """Page of every result of an estimate and of a screening with its unit and meaning."""
    parts = [RESULT_INTRODUCTION]
    for heading, results in (
        ("Whole stack", SCALARS),
        ("`rows`: along the hot stream", ROW_RESULTS),
        ("`harvest screen`", NUMBERS),
    ):
        rows = [(f"`{name}`", unit_of(metadata["kind"]), metadata["meaning"]) for name, metadata in results.items()]
        parts += [f"## {heading}\n", _table(("result", "unit", "meaning"), rows)]
    return "\n".join(parts)


def check_list(checks: Iterable[CheckedNumber]) -> str:
    """Page of the numbers that functions are held to, source by source; `checks` of one source stand together."""
    parts = [CHECK_INTRODUCTION]
    for (citation, origin), of_source in groupby(checks, key=lambda check: check[:2]):
        rows = [
            (check.name, f"`{check.function}`", check.where, check.expected, check.got, check.tolerance, check.kind)
            for check in of_source
        ]
        parts.append(f"## {citation}\n\nNumbers: {origin}.\n")
        parts.append(_table(("check", "function", "place", "expected", "got", "tolerance", "kind"), rows))
    return "\n".join(parts)


def _sections() -> Iterator[tuple[list[str], list[tuple[str, Declaration]]]]:
    """Sections with their own fields; sections of the same declarations, such as hot and cold, together."""
    names_of: dict[type | None, list[str]] = {None: [""]}
    for path, declaration in DECLARATIONS.items():
        if declaration.section is not None:
            names_of.setdefault(declaration.section, []).append(path)
    for names in names_of.values():
        own = [
            (path, declaration)
            for path, declaration in DECLARATIONS.items()
            if path.rpartition(".")[0] == names[0] and declaration.section is None
        ]
        yield names, own


def _field_rows(section: Sequence[tuple[str, Declaration]]) -> list[tuple[str, ...]]:
    return [
        (
            f"`{path.rpartition('.')[2]}`",
            declaration.meaning + _where_it_applies(path, declaration),
            _written(declaration),
            unit_of(declaration.kind) if declaration.form in FORMS_WITH_UNIT else "",
            default_text(declaration),
            limits_text(declaration),
        )
        for path, declaration in section
    ]


def _written(declaration: Declaration) -> str:
    if declaration.form == "choice":
        return f'`"{next(iter(declaration.choices))}"`'
    if declaration.form not in FORMS_WITH_UNIT:
        return WRITTEN[declaration.form]
    if declaration.kind == "dimensionless":
        return "number"
    usual = isinstance(declaration.default, float) and declaration.default != 0.0
    example = f'"{display(declaration.default, declaration) if usual else example_of(declaration.kind)}"'
    return f"`[{example}, {example}]`" if declaration.form == "pair" else f"`{example}`"


def _where_it_applies(path: str, declaration: Declaration) -> str:
    """Say for which values of another field this one is asked, or for which not if they are fewer."""
    if declaration.applies is None:
        return ""
    selector, allowed = declaration.applies
    excluded = [choice for choice in DECLARATIONS[selector_path(path, selector)].choices if choice not in allowed]
    if len(excluded) < len(allowed):
        return f" Not for `{selector}` {', '.join(excluded)}."
    return f" For `{selector}` {', '.join(allowed)}."


def _kinds() -> set[str]:
    """Kinds of quantity that fields of the case file have, and those of a fluid table."""
    of_fluids = {"density", "heat capacity", "viscosity", "conductivity"}
    return of_fluids | {each.kind for each in DECLARATIONS.values() if each.form in FORMS_WITH_UNIT}


def _table(header: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    return _line(header) + "|" + "---|" * len(header) + "\n" + "".join(_line(row) for row in rows)


def _line(cells: Sequence[str]) -> str:
    return "| " + " | ".join(cell.replace("|", "\\|") for cell in cells) + " |\n"
