"""Tables of results as CSV, Parquet, NetCDF or a labelled data set, with a unit and a meaning for every column."""

from __future__ import annotations

import dataclasses
import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from harvest.errors import InputError, MissingExtraError
from harvest.report.files import whole_file, write_whole

if TYPE_CHECKING:
    import xarray

SUFFIXES = (".csv", ".parquet", ".nc")
NUMBER, WHOLE, FLAG, TEXT = "number", "whole", "flag", "text"
CONVENTIONS = "CF-1.8"
FEW = 200
"""Values of a column that are looked at to see whether most of them are alike."""
LARGEST_CLASSIC = 2**31 - 4
"""Bytes of one variable in a NetCDF-3 file."""

Columns = Mapping[str, Any]
"""Arrays by column name: floats, whole numbers, booleans or texts."""


@dataclass(frozen=True)
class Column:
    """One column; `form` is number, whole, flag or text, and only numbers have a unit."""

    name: str
    meaning: str
    unit: str = ""
    form: str = NUMBER

    @property
    def header(self) -> str:
        """Name with the unit, as it stands above the column."""
        return f"{self.name} [{self.unit}]" if self.unit else self.name


@dataclass(frozen=True)
class Table:
    """What a table is, without its rows. `about` says where it comes from, texts by name, `title` among them.

    `dimensions` are the axes of a grid that the rows run through, the last one fastest, each a column with its values
    or texts; without them rows are numbered along `index`.
    """

    columns: tuple[Column, ...]
    rows: int
    about: Mapping[str, str]
    dimensions: Mapping[str, Any] = dataclasses.field(default_factory=dict)
    index: str = "row"

    @property
    def axes(self) -> tuple[str, ...]:
        """Names of the dimensions of every column that is no dimension itself."""
        return tuple(self.dimensions) or (self.index,)

    @property
    def shape(self) -> tuple[int, ...]:
        """Lengths of the dimensions."""
        return tuple(len(values) for values in self.dimensions.values()) or (self.rows,)


def table_suffix(path: Path) -> str:
    """Format of a table's file; raises InputError for another suffix, MissingExtraError without its library."""
    suffix = path.suffix.lower()
    if suffix not in SUFFIXES:
        raise InputError(f"{path}: a table ends in {', '.join(SUFFIXES)}")
    if suffix == ".parquet":
        _pyarrow()
    return suffix


def metadata_path(path: Path) -> Path:
    """File beside a CSV file that tells what is in it, named as the W3C's "CSV on the Web" looks for it."""
    return path.with_name(f"{path.name}-metadata.json")


def csv_head(table: Table) -> str:
    """First line of a CSV file."""
    return ",".join(_cell(column.header) for column in table.columns) + "\n"


def csv_rows(table: Table, columns: Columns) -> str:
    """Lines of a CSV file; numbers read back as the same numbers, empty where there is none."""
    texts = [_texts(column, columns[column.name].tolist()) for column in table.columns]
    return "\n".join([*map(",".join, zip(*texts, strict=True)), ""])


def _texts(column: Column, values: list[Any]) -> list[str]:
    """Texts of a column; where many values are alike, each is written once."""
    write: Any = {TEXT: _cell, FLAG: _flag, WHOLE: str, NUMBER: repr}[column.form]
    if column.form == TEXT or len(set(values[:FEW])) < FEW // 2:
        written = {value: write(value) for value in set(values)}
        texts = list(map(written.__getitem__, values))
    else:
        texts = list(map(write, values))
    return [text if text != "nan" else "" for text in texts] if column.form == NUMBER and "nan" in texts else texts


def _flag(value: bool) -> str:
    return "true" if value else "false"


def _cell(text: str) -> str:
    """One text in CSV; an apostrophe keeps a spreadsheet from taking it for a formula."""
    if text.startswith(("=", "+", "-", "@", "\t", "\r")):
        text = f"'{text}"
    return '"' + text.replace('"', '""') + '"' if any(sign in text for sign in ',"\n\r') else text


def write_csv(path: Path, table: Table, lines: Iterable[bytes]) -> None:
    """Write a CSV file from its lines, and what it holds beside it."""
    datatypes = {NUMBER: "number", WHOLE: "integer", FLAG: "boolean", TEXT: "string"}
    document = {
        "@context": "http://www.w3.org/ns/csvw",
        "url": path.name,
        "dc:title": table.about.get("title", ""),
        "notes": [dict(table.about)],
        "tableSchema": {
            "columns": [
                {
                    "titles": column.header,
                    "name": column.name,
                    "dc:description": column.meaning,
                    "datatype": datatypes[column.form],
                    **({"unit": column.unit} if column.unit else {}),
                }
                for column in table.columns
            ]
        },
    }
    write_whole(metadata_path(path), json.dumps(document, indent=2, ensure_ascii=False) + "\n")
    with whole_file(path) as temporary, temporary.open("wb") as file:
        file.write(csv_head(table).encode())
        file.writelines(lines)


def write_parquet(path: Path, table: Table, parts: Iterable[Columns]) -> None:
    """Write a Parquet file, a row group for each part; units and meanings stand in the metadata of its fields."""
    pyarrow = _pyarrow()
    types = {NUMBER: pyarrow.float64(), WHOLE: pyarrow.int64(), FLAG: pyarrow.bool_(), TEXT: pyarrow.string()}
    fields = [
        pyarrow.field(
            column.header,
            types[column.form],
            metadata={"long_name": column.meaning, **({"units": column.unit} if column.unit else {})},
        )
        for column in table.columns
    ]
    schema = pyarrow.schema(fields, metadata=dict(table.about))
    with whole_file(path) as temporary, pyarrow.parquet.ParquetWriter(temporary, schema) as writer:
        for part in parts:
            arrays = [
                pyarrow.array(part[column.name], type=types[column.form], from_pandas=True) for column in table.columns
            ]
            writer.write_table(pyarrow.Table.from_arrays(arrays, schema=schema))


def write_netcdf(path: Path, table: Table, parts: Iterable[Columns]) -> None:
    """Write a NetCDF-3 file: a grid has its axes as dimensions, texts are numbers of a list of texts."""
    from scipy.io import netcdf_file

    if 8 * table.rows > LARGEST_CLASSIC:
        raise InputError(f"{path}: {table.rows:,} rows are too many for NetCDF-3; write .parquet or .csv")
    inside = [column for column in table.columns if column.name not in table.dimensions]
    types = {NUMBER: "f8", WHOLE: "i4", FLAG: "i1", TEXT: "i4"}
    with whole_file(path) as temporary, netcdf_file(temporary, "w", version=2) as opened:
        file: Any = opened
        _add_attributes(file, table)
        for name, length in zip(table.axes, table.shape, strict=True):
            file.createDimension(name, length)
        named = {column.name: column for column in table.columns}
        for name, values in table.dimensions.items():
            _add_dimension(file, named[name], values)
        variables: dict[str, Any] = {}
        for column in inside:
            variables[column.name] = variable = file.createVariable(column.name, types[column.form], table.axes)
            _describe(variable, column)
        numbers: dict[str, dict[str, int]] = {column.name: {} for column in inside if column.form == TEXT}
        first = 0
        for part in parts:
            for column in inside:
                values = part[column.name]
                if column.form == TEXT:
                    known = numbers[column.name]
                    values = [known.setdefault(text, len(known)) for text in values]
                variables[column.name].data.reshape(-1)[first : first + len(values)] = values
            first += len(values)
        for name, known in numbers.items():
            variables[name].comment = f"number of a text in {name}_text, counted from 0"
            _add_texts(file, f"{name}_text", f"{name}_number", list(known) or [""])


def _add_attributes(file: Any, table: Table) -> None:
    for name, text in table.about.items():
        setattr(file, name, text)
    file.Conventions = CONVENTIONS


def write_table(path: Path, table: Table, columns: Columns) -> None:
    """Write a table that is whole in memory, in the format of the suffix; raises InputError and MissingExtraError."""
    suffix = table_suffix(path)
    if suffix == ".csv":
        write_csv(path, table, [csv_rows(table, columns).encode()])
    elif suffix == ".parquet":
        write_parquet(path, table, [columns])
    else:
        write_netcdf(path, table, [columns])


def _describe(variable: Any, column: Column) -> None:
    variable.long_name = column.meaning
    if column.unit:
        variable.units = column.unit
    if column.form == NUMBER:
        variable._FillValue = np.nan
    if column.form == FLAG:
        variable.flag_values = np.array([0, 1], dtype="i1")
        variable.flag_meanings = "no yes"


def _add_dimension(file: Any, column: Column, values: Any) -> None:
    """Coordinate of a grid's axis: numbers, or texts of fixed length."""
    if column.form == TEXT:
        _add_texts(file, column.name, column.name, list(values)).long_name = column.meaning
        return
    variable = file.createVariable(column.name, "f8" if column.form == NUMBER else "i4", (column.name,))
    variable[:] = values
    variable.long_name = column.meaning
    if column.unit:
        variable.units = column.unit


def _add_texts(file: Any, name: str, dimension: str, texts: list[str]) -> Any:
    encoded = [text.encode("utf-8") for text in texts]
    length = max(1, *map(len, encoded))
    letters = f"{name}_length"
    if dimension not in file.dimensions:
        file.createDimension(dimension, len(texts))
    file.createDimension(letters, length)
    variable = file.createVariable(name, "c", (dimension, letters))
    variable[:] = np.array([list(text.ljust(length, b"\0")) for text in encoded], dtype=np.uint8).view("S1")
    variable._Encoding = "utf-8"
    return variable


def data_set(table: Table, columns: Columns) -> xarray.Dataset:
    """Return the table as a labelled data set in memory; raises MissingExtraError without xarray."""
    try:
        import xarray
    except ImportError:
        raise MissingExtraError(
            'a labelled data set needs xarray, which is not installed; install it with pip install "harvest[xarray]"'
        ) from None

    def attributes(column: Column) -> dict[str, str]:
        return {"long_name": column.meaning, **({"units": column.unit} if column.unit else {})}

    named = {column.name: column for column in table.columns}
    inside = {
        name: (table.axes, np.asarray(columns[name]).reshape(table.shape), attributes(column))
        for name, column in named.items()
        if name not in table.dimensions
    }
    axes = {name: (name, values, attributes(named[name])) for name, values in table.dimensions.items()}
    return xarray.Dataset(inside, axes, {**table.about, "Conventions": CONVENTIONS})


def read_about(path: Path) -> dict[str, str]:
    """What a written table says about itself; nothing where it is no such table."""
    suffix = table_suffix(path)
    try:
        if suffix == ".csv":
            notes: dict[str, str] = json.loads(metadata_path(path).read_text("utf-8"))["notes"][0]
            return notes
        if suffix == ".parquet":
            stored = _pyarrow().parquet.read_schema(path).metadata or {}
            return {key.decode(): value.decode() for key, value in stored.items()}
        from scipy.io import netcdf_file

        with netcdf_file(path, "r", mmap=False) as file:
            return {name: text.decode() for name, text in vars(file)["_attributes"].items() if isinstance(text, bytes)}
    except (OSError, ValueError, TypeError, KeyError, IndexError):
        return {}


def _pyarrow() -> Any:
    try:
        import pyarrow
        import pyarrow.parquet
    except ImportError:
        raise MissingExtraError(
            'a Parquet file needs pyarrow, which is not installed; install it with pip install "harvest[parquet]"'
        ) from None
    return pyarrow
