"""Tables of measurements: CSV text with names and units in its header, read into SI columns, all faults at once."""

from __future__ import annotations

import csv
import difflib
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from harvest.errors import CaseError, InputError, QuantityError
from harvest.model.case_text import LARGEST_FILE, bounded_text
from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.quantities import allowed_units, example_of, one_line, parse_quantity, shown

MOST_FAULTS = 20
SEPARATORS = (",", ";", "\t")
_DECIMAL_COMMA = re.compile(r"[+-]?[0-9]*,[0-9]+(?:[eE][+-]?[0-9]+)?")
_HEADING = re.compile(r"\s*([^\[\]]*?)\s*(?:\[([^\[\]]*)\])?\s*")


@dataclass(frozen=True, eq=False)
class MeasurementTable:
    """Columns of a table in SI, by name, each (readings,), NaN where a cell is empty.

    `kinds` says as which kind of quantity each column was read, `lines` (readings,) on which line of the file each
    reading stands, `ignored` the headings of columns that mean nothing here. `cell_faults`: one line for each cell that
    is wrong, and NaN in its place; who reads the table raises them with the faults of its own.
    """

    label: str
    values: Mapping[str, FloatArray]
    kinds: Mapping[str, str]
    lines: IntArray
    ignored: tuple[str, ...]
    cell_faults: tuple[str, ...] = ()

    def column(self, name: str) -> FloatArray:
        """Column of a name [SI], all NaN where the table has none; (readings,)."""
        return self.values[name] if name in self.values else np.full(len(self.lines), np.nan)

    def faults(self, where: BoolArray, message: str) -> list[str]:
        """One line for each reading of `where` (readings,)."""
        return [f"{self.label}:{line}: {message}" for line in self.lines[where]]


def read_measurement_table(
    source: str | Path, columns: Mapping[str, Sequence[str]], needed: Sequence[str], most_readings: int
) -> MeasurementTable:
    """Read a CSV file, or the text of one if `source` is a str with line ends.

    Parameters: `columns`, for each name the kinds of quantity it may have, told apart by the unit; `needed`, the names
    that must be there with a number in every reading; `most_readings` that are read. Values are separated by commas,
    semicolons or tabs; decimals are written with a point, or with a comma where commas do not separate. Lines that
    start with # are comments; the first other line is the header, `name [unit]` for each column.
    Raises CaseError with all faults of the file and its header; those of cells come with the table.
    """
    label, numbered = _numbered_lines(source)
    if not numbered:
        raise CaseError([f"{label}: is empty; its first line names the columns, {_example_header(columns, needed)}"])
    (header_line, header), *body = numbered
    if len(body) > most_readings:
        raise CaseError([f"{label}: has {len(body)} readings; at most {most_readings} are read, so thin them out"])
    separator = _separator(header)
    headings = _cells(header, separator) or [""]
    faults: list[str] = []
    found: dict[int, tuple[str, str, str]] = {}
    ignored = []
    for position, heading in enumerate(headings):
        try:
            column = _column(heading, columns)
            if column is None:
                ignored.append(one_line(heading.strip()))
            elif any(column[0] == other for other, _, _ in found.values()):
                raise QuantityError(f"{column[0]}: stands twice in the header; leave one")
            else:
                found[position] = column
        except QuantityError as error:
            faults.append(f"{label}:{header_line}: {error}")
    named = [name for name, _, _ in found.values()]
    missing = [name for name in needed if name not in named]
    if not faults:
        example = _example_header(columns, needed)
        faults += [f"{label}:{header_line}: {name}: missing; write {example}" for name in missing]
    if not faults and not body:
        faults.append(f"{label}: has a header and no readings")
    if faults:
        raise CaseError(_shortened(faults))
    rows = np.full((len(body), len(found)), np.nan)
    commas: list[str] = []
    for row, (number, line) in zip(rows, body, strict=True):
        cells = _cells(line, separator)
        if cells is None or len(cells) > len(headings):
            if cells is None:
                faults.append(f"{label}:{number}: unreadable quotes")
            else:
                too_many = faults if separator != "," else commas
                too_many.append(f"{label}:{number}: {len(cells)} values for {len(headings)} columns")
            continue
        for place, (position, (name, unit, kind)) in enumerate(found.items()):
            cell = cells[position].strip() if position < len(cells) else ""
            if not cell:
                if name in needed:
                    faults.append(f"{label}:{number}: {name}: empty; every reading needs it")
                continue
            if _DECIMAL_COMMA.fullmatch(cell):
                if separator == ",":
                    commas.append(f"{label}:{number}: {name}: {shown(cell)} has a decimal comma")
                    continue
                cell = cell.replace(",", ".")
            try:
                row[place] = parse_quantity(f"{cell} {unit}", kind)
            except QuantityError:
                faults.append(
                    f"{label}:{number}: {name}: {shown(cell)} is not a finite number; leave the cell empty "
                    "where nothing was measured"
                )
    if commas:
        more = f", and {len(commas) - 1} more like it" if len(commas) > 1 else ""
        faults.insert(
            0,
            f"{commas[0]}{more}; decimals are written with a point, 1.5 and not 1,5, where commas separate the values; "
            "decimal commas go with semicolons between the values",
        )
    values = dict(zip(named, rows.T.copy(), strict=True))
    for name, _, kind in found.values():
        if kind == "temperature":
            cold = zip(body, values[name] <= 0.0, strict=True)
            faults += [f"{label}:{number}: {name}: not above 0 K" for (number, _), wrong in cold if wrong]
    lines = np.array([number for number, _ in body], dtype=np.int64)
    kinds = {name: kind for name, _, kind in found.values()}
    return MeasurementTable(label, values, kinds, lines, tuple(ignored), tuple(faults))


def column_names(source: str | Path) -> tuple[str, ...]:
    """Names in the header of a CSV file or text, without units, none if it is empty; raises CaseError."""
    _, numbered = _numbered_lines(source)
    header = numbered[0][1] if numbered else ""
    return tuple(_name_and_unit(heading)[0] for heading in _cells(header, _separator(header)) or [])


def raise_faults(faults: Sequence[str]) -> None:
    """Raise CaseError if there are faults, the first twenty of them."""
    if faults:
        raise CaseError(_shortened(faults))


def _numbered_lines(source: str | Path) -> tuple[str, list[tuple[int, str]]]:
    """What a file is called in faults, and its lines with their numbers, without comments and empty lines."""
    is_text = isinstance(source, str) and "\n" in source
    label = "record" if is_text else str(source)
    try:
        text = str(source) if is_text else bounded_text(Path(source))
    except InputError as error:
        raise CaseError([str(error)]) from None
    if len(text) > LARGEST_FILE:
        raise CaseError([f"{label}: is larger than 1 MiB"])
    return label, [
        (number, line)
        for number, line in enumerate(text.splitlines(), 1)
        if line.strip(" ,;\t") and not line.lstrip(' "').startswith("#")
    ]


def _separator(header: str) -> str:
    return max(SEPARATORS, key=header.count)


def _shortened(faults: Sequence[str]) -> list[str]:
    more = len(faults) - MOST_FAULTS
    return [*faults[:MOST_FAULTS], f"and {more} more faults like these"] if more > 0 else list(faults)


def _cells(line: str, separator: str) -> list[str] | None:
    """Cells of one line, None where it cannot be split."""
    try:
        return next(csv.reader([line], delimiter=separator, strict=True))
    except csv.Error:
        return None


def _column(heading: str, columns: Mapping[str, Sequence[str]]) -> tuple[str, str, str] | None:
    """Name, unit and kind of a column; None for one that means nothing here."""
    name, unit = _name_and_unit(heading)
    if name not in columns:
        near = difflib.get_close_matches(name[:60], columns, n=1, cutoff=0.8)
        if near:
            raise QuantityError(f"{one_line(name)}: unknown column; is {near[0]} meant?")
        return None
    kinds = columns[name]
    example = f"{name} [{example_of(kinds[0]).partition(' ')[2]}]"
    if not unit:
        raise QuantityError(f"{name}: has no unit in the header; write for example {example}")
    for kind in kinds:
        try:
            parse_quantity(f"1 {unit}", kind)
        except QuantityError:
            continue
        return name, unit, kind
    allowed = ", ".join(allowed_units(kind) for kind in kinds)
    raise QuantityError(
        f"{name}: [{one_line(unit, 30)}] is no unit of {kinds[0]}; write {example}; known are {allowed}"
    )


def _name_and_unit(heading: str) -> tuple[str, str]:
    """Name and unit of a heading "name [unit]", the unit empty where there is none."""
    split = _HEADING.fullmatch(heading)
    name = "_".join((split[1] if split else heading).lower().split())
    return name, (split[2] or "").strip() if split else ""


def _example_header(columns: Mapping[str, Sequence[str]], needed: Sequence[str]) -> str:
    return ", ".join(f"{name} [{example_of(columns[name][0]).partition(' ')[2]}]" for name in needed)
