"""Tables of measurements: CSV text with names and units in its header, read into SI columns, all faults at once."""

from __future__ import annotations

import csv
import difflib
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import NamedTuple

import numpy as np

from harvest.errors import CaseError, InputError, QuantityError
from harvest.model.case_text import LARGEST_FILE, bounded_text
from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.quantities import KINDS, UnitConversion, allowed_units, example_of, one_line, shown, unit_conversion

MOST_FAULTS = 20
TEXT = "text"
"""Kind of a column without a unit whose cells are kept as they stand."""
BLOCK = 50_000
"""Lines that are taken apart at a time, so that memory does not grow with the cells of a long file."""
SEPARATORS = (",", ";", "\t")
_DECIMAL_COMMA = re.compile(r"[+-]?[0-9]*,[0-9]+(?:[eE][+-]?[0-9]+)?")
_HEADING = re.compile(r"\s*([^\[\]]*?)\s*(?:\[([^\[\]]*)\])?\s*")
_NUMBER_SIGNS = frozenset("0123456789+-.eE")


class CellFault(NamedTuple):
    """What is wrong with a cell, or with a whole line: its reading's place, and a sentence."""

    reading: int
    text: str
    is_comma: bool = False


@dataclass(frozen=True, eq=False)
class MeasurementTable:
    """Columns of a table in SI, by name, each (readings,), NaN where a cell is empty.

    `kinds` says as which kind of quantity each column was read, `lines` (readings,) on which line of the file each
    reading stands, `ignored` the headings of columns that mean nothing here, `texts` the cells of columns of TEXT.
    `faulty`: cells that are wrong, with NaN or "" in their place; who reads the table says what becomes of them.
    """

    label: str
    values: Mapping[str, FloatArray]
    kinds: Mapping[str, str]
    lines: IntArray
    ignored: tuple[str, ...]
    faulty: tuple[CellFault, ...] = ()
    texts: Mapping[str, list[str]] = field(default_factory=dict)

    def column(self, name: str) -> FloatArray:
        """Column of a name [SI], all NaN where the table has none; (readings,)."""
        return self.values[name] if name in self.values else np.full(len(self.lines), np.nan)

    def faults(self, where: BoolArray, message: str) -> list[str]:
        """One line for each reading of `where` (readings,)."""
        return [f"{self.label}:{line}: {message}" for line in self.lines[where]]

    @property
    def cell_faults(self) -> list[str]:
        """One line for each cell that is wrong; decimal commas between commas are one fault of the whole file."""
        lines = [f"{self.label}:{self.lines[each.reading]}: {each.text}" for each in self.faulty if not each.is_comma]
        commas = [each for each in self.faulty if each.is_comma]
        if commas:
            more = f", and {len(commas) - 1} more like it" if len(commas) > 1 else ""
            lines.insert(
                0,
                f"{self.label}:{self.lines[commas[0].reading]}: {commas[0].text}{more}; decimals are written with a "
                "point, 1.5 and not 1,5, where commas separate the values; decimal commas go with semicolons between "
                "the values",
            )
        return lines


class _Column(NamedTuple):
    """A column that means something: its name, unit as typed, kind, and conversion to SI."""

    name: str
    unit: str
    kind: str
    conversion: UnitConversion | None


def read_measurement_table(
    source: str | Path,
    columns: Mapping[str, Sequence[str]],
    needed: Sequence[str],
    most_readings: int,
    *,
    largest: int = LARGEST_FILE,
    ambient_pressure: float | None = None,
) -> MeasurementTable:
    """Read a CSV file, or the text of one if `source` is a str with line ends.

    Parameters: `columns`, for each name the kinds of quantity it may have, told apart by the unit; `needed`, the names
    that must be there with a value in every reading; `most_readings` that are read, out of at most `largest` bytes;
    `ambient_pressure` [Pa], what gauge pressures add to. Values are separated by commas, semicolons or tabs; decimals
    are written with a point, or with a comma where commas do not separate. Lines that start with # are comments; the
    first other line is the header, `name [unit]` for each column.
    Raises CaseError with all faults of the file and its header; those of cells come with the table.
    """
    label, numbered = _numbered_lines(source, largest)
    if not numbered:
        example = f", {_example_header(columns, needed)}" if needed else ", name [unit] for each"
        raise CaseError([f"{label}: is empty; its first line names the columns{example}"])
    header_line, header = numbered[0]
    body = numbered[1:]
    if len(body) > most_readings:
        raise CaseError([f"{label}: has {len(body)} readings; at most {most_readings} are read, so thin them out"])
    separator = _separator(header)
    headings = _cells(header, separator) or [""]
    faults: list[str] = []
    found: dict[int, _Column] = {}
    ignored = []
    for position, heading in enumerate(headings):
        try:
            column = _column(heading, columns, ambient_pressure)
            if column is None:
                ignored.append(one_line(heading.strip()))
            elif any(column.name == other.name for other in found.values()):
                raise QuantityError(f"{column.name}: stands twice in the header; leave one")
            else:
                found[position] = column
        except QuantityError as error:
            faults.append(f"{label}:{header_line}: {error}")
    named = [column.name for column in found.values()]
    missing = [name for name in needed if name not in named]
    if not faults:
        example = _example_header(columns, needed)
        faults += [f"{label}:{header_line}: {name}: missing; write {example}" for name in missing]
    if not faults and not body:
        faults.append(f"{label}: has a header and no readings")
    if faults:
        raise CaseError(_shortened(faults))
    numbers = np.full((len(found), len(body)), np.nan)
    texts: dict[str, list[str]] = {column.name: [] for column in found.values() if column.kind == TEXT}
    faulty: list[CellFault] = []
    for first in range(0, len(body), BLOCK):
        block = [line for _, line in body[first : first + BLOCK]]
        split, bad_lines = _split(block, separator, len(headings))
        broken = {place for place, _ in bad_lines}
        faulty += [
            CellFault(first + place, text, separator == "," and " values for " in text) for place, text in bad_lines
        ]
        for row, (position, column) in zip(numbers, found.items(), strict=True):
            cells = [cell.strip() for cell in split[position]]
            if column.name in needed and "" in cells:
                faulty += [
                    CellFault(first + place, f"{column.name}: empty; every reading needs it")
                    for place, cell in enumerate(cells)
                    if not cell and place not in broken
                ]
            if column.kind == TEXT:
                texts[column.name] += cells
                continue
            row[first : first + len(cells)], wrong = _numbers(column, cells, separator)
            faulty += [each._replace(reading=first + each.reading) for each in wrong]
    faulty.sort(key=lambda each: each.reading)
    values = {column.name: row for row, column in zip(numbers, found.values(), strict=True) if column.kind != TEXT}
    for column in found.values():
        if column.kind == "temperature":
            cold = np.flatnonzero(values[column.name] <= 0.0)
            faulty += [CellFault(int(place), f"{column.name}: not above 0 K") for place in cold]
    lines = np.array([number for number, _ in body], dtype=np.int64)
    kinds = {column.name: column.kind for column in found.values()}
    return MeasurementTable(label, values, kinds, lines, tuple(ignored), tuple(faulty), texts)


def _split(block: Sequence[str], separator: str, width: int) -> tuple[list[Sequence[str]], list[tuple[int, str]]]:
    """Cells by column of a block of lines, (width) of (lines,), and what is wrong with whole lines, which are empty."""
    rows: list[list[str]] = []
    wrong = []
    for place, line in enumerate(block):
        cells = _cells(line, separator) if '"' in line else line.split(separator)
        if cells is None:
            wrong.append((place, "unreadable quotes"))
            cells = []
        elif len(cells) > width:
            wrong.append((place, f"{len(cells)} values for {width} columns"))
            cells = []
        rows.append(cells if len(cells) == width else cells + [""] * (width - len(cells)))
    return list(zip(*rows, strict=True)), wrong


def _numbers(column: _Column, cells: list[str], separator: str) -> tuple[FloatArray, list[CellFault]]:
    """SI values of a column's cells, NaN where one is empty or wrong, and what is wrong."""
    assert column.conversion is not None
    if separator != "," and any("," in cell for cell in cells):
        cells = [cell.replace(",", ".") if _DECIMAL_COMMA.fullmatch(cell) else cell for cell in cells]
    if set().union(*cells) <= _NUMBER_SIGNS:
        try:
            values = np.asarray(column.conversion.si(np.array([cell or "nan" for cell in cells], dtype=float)))
            if np.isfinite(values).all() or not np.isinf(values).any():
                return values, []
        except ValueError:
            pass
    values, wrong = np.full(len(cells), np.nan), []
    for place, cell in enumerate(cells):
        if not cell:
            continue
        if separator == "," and _DECIMAL_COMMA.fullmatch(cell):
            wrong.append(CellFault(place, f"{column.name}: {shown(cell)} has a decimal comma", is_comma=True))
            continue
        try:
            number = float(cell) if _NUMBER_SIGNS.issuperset(cell) else np.inf
        except ValueError:
            number = np.inf
        values[place] = column.conversion.si(number)
        if not np.isfinite(values[place]):
            values[place] = np.nan
            wrong.append(
                CellFault(
                    place,
                    f"{column.name}: {shown(cell)} is not a finite number; leave the cell empty where nothing was "
                    "measured",
                )
            )
    return values, wrong


def column_names(source: str | Path) -> tuple[str, ...]:
    """Names in the header of a CSV file or text, without units, none if it is empty; raises CaseError."""
    _, numbered = _numbered_lines(source, LARGEST_FILE)
    header = numbered[0][1] if numbered else ""
    return tuple(_name_and_unit(heading)[0] for heading in _cells(header, _separator(header)) or [])


def raise_faults(faults: Sequence[str]) -> None:
    """Raise CaseError if there are faults, the first twenty of them."""
    if faults:
        raise CaseError(_shortened(faults))


def _numbered_lines(source: str | Path, largest: int) -> tuple[str, list[tuple[int, str]]]:
    """What a file is called in faults, and its lines with their numbers, without comments and empty lines."""
    is_text = isinstance(source, str) and "\n" in source
    label = "record" if is_text else str(source)
    try:
        text = str(source) if is_text else bounded_text(Path(source), largest)
    except InputError as error:
        raise CaseError([str(error)]) from None
    if len(text) > largest:
        raise CaseError([f"{label}: is larger than {largest >> 20} MiB"])
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
        return next(csv.reader([line], delimiter=separator, strict=True, skipinitialspace=True))
    except csv.Error:
        return None


def _column(heading: str, columns: Mapping[str, Sequence[str]], ambient_pressure: float | None) -> _Column | None:
    """A column as its heading says; None for one that means nothing here."""
    name, unit = _name_and_unit(heading)
    if name not in columns:
        near = difflib.get_close_matches(name[:60], columns, n=1, cutoff=0.8)
        if near:
            raise QuantityError(f"{one_line(name)}: unknown column; is {near[0]} meant?")
        return None
    kinds = [kind for kind in columns[name] if kind != TEXT]
    if not unit and TEXT in columns[name]:
        return _Column(name, "", TEXT, None)
    example = f"{name} [{_unit_in(kinds[0])}]"
    if not unit and not any(KINDS[kind].bare for kind in kinds):
        raise QuantityError(f"{name}: has no unit in the header; write for example {example}")
    for kind in kinds:
        try:
            conversion = unit_conversion("" if unit == "1" else unit, kind, ambient_pressure=ambient_pressure)
        except QuantityError:
            continue
        return _Column(name, unit, kind, conversion)
    allowed = ", ".join(allowed_units(kind) for kind in kinds)
    raise QuantityError(
        f"{name}: [{one_line(unit, 30)}] is no unit of {kinds[0]}; write {example}; known are {allowed}"
    )


def _unit_in(kind: str) -> str:
    """Unit of a kind as an example in a header."""
    return example_of(kind).partition(" ")[2] or "1"


def _name_and_unit(heading: str) -> tuple[str, str]:
    """Name and unit of a heading "name [unit]", the unit empty where there is none."""
    split = _HEADING.fullmatch(heading)
    name = "_".join((split[1] if split else heading).lower().split())
    return name, (split[2] or "").strip() if split else ""


def _example_header(columns: Mapping[str, Sequence[str]], needed: Sequence[str]) -> str:
    return ", ".join(name if TEXT in columns[name] else f"{name} [{_unit_in(columns[name][0])}]" for name in needed)
