"""Tables read back: the same numbers, units and meanings in every format, and nothing that a spreadsheet runs."""

from __future__ import annotations

import csv
import io
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pandas
import pyarrow.parquet
import pytest
import xarray
from hypothesis import given, settings
from hypothesis import strategies as st

import harvest
from harvest.errors import InputError, MissingExtraError
from harvest.model.estimate import estimate
from harvest.model.reading import load_case, replace
from harvest.report import tables
from harvest.report.sweep_files import print_sweep, sweep_table, write_sweep
from harvest.report.tables import FLAG, TEXT, WHOLE, Column, Table, csv_head, csv_rows
from harvest.study.sweep import SweepPlan, planned, with_axes

EXHAUST = Path(__file__).parents[1] / "examples" / "genset-exhaust.toml"
AXES: dict[str, Any] = {
    "hot.mass_flow": [0.06, 0.08, 0.1],
    "hot.fuel": ["diesel", "methane"],
    "stack.layers": [3, 4],
}
TABLE = Table(
    (Column("number", "A number.", "W"), Column("count", "", form=WHOLE), Column("text", "", form=TEXT)), 0, {}
)


def plan(**more: Any) -> SweepPlan:
    return planned(with_axes(load_case(EXHAUST), AXES), **more)


@settings(max_examples=200, deadline=None)
@given(st.lists(st.tuples(st.floats(), st.integers(-(2**53), 2**53), st.text(max_size=20)), max_size=20))
def test_every_number_and_text_reads_back_from_csv(rows: list[tuple[float, int, str]]) -> None:
    columns = {
        "number": np.array([row[0] for row in rows], dtype=float),
        "count": np.array([row[1] for row in rows], dtype=np.int64),
        "text": np.array([row[2] for row in rows], dtype=object),
    }
    text = csv_head(TABLE) + csv_rows(TABLE, columns)
    read = list(csv.reader(io.StringIO(text, newline="")))
    assert read[0] == ["number [W]", "count", "text"]
    assert len(read) == len(rows) + 1
    for (number, count, word), (first, second, third) in zip(rows, read[1:], strict=True):
        assert first == "" if np.isnan(number) else float(first) == number
        assert int(second) == count
        assert third.removeprefix("'") == word.removeprefix("'")
        assert not third.startswith(("=", "+", "-", "@"))


def test_alike_numbers_are_written_as_the_others() -> None:
    values = np.repeat([0.1, np.nan, 1e-300, 5.0], 500)
    flags = np.resize([True, False], 2000)
    table = Table((Column("number", "", "W"), Column("flag", "", form=FLAG)), 2000, {})
    lines = csv_rows(table, {"number": values, "flag": flags}).splitlines()
    assert [lines[0], lines[500], lines[1001], lines[1999]] == ["0.1,true", ",true", "1e-300,false", "5.0,false"]


def test_formats_hold_the_same_as_single_estimates(tmp_path: Path) -> None:
    paths = [tmp_path / f"out{suffix}" for suffix in tables.SUFFIXES]
    for path in paths:
        write_sweep(plan(), path, command="harvest sweep")
    as_csv = pandas.read_csv(paths[0], keep_default_na=False, dtype=str)
    as_parquet = pandas.read_parquet(paths[1])
    assert (
        list(as_csv.columns)
        == list(as_parquet.columns)
        == [column.header for column in sweep_table(plan(), "").columns]
    )
    with xarray.open_dataset(paths[2]) as as_netcdf:
        in_memory = harvest.sweep(load_case(EXHAUST), AXES)
        assert as_netcdf.sizes == {"hot.mass_flow": 3, "hot.fuel": 2, "stack.layers": 2, "problem_number": 2}
        assert in_memory.sizes == {"hot.mass_flow": 3, "hot.fuel": 2, "stack.layers": 2}
        for name in ("net_power", "hot_outlet_temperature", "voltage"):
            expected = in_memory[name].values.ravel()
            header = f"{name} [{in_memory[name].units}]"
            assert np.array_equal(as_netcdf[name].values.ravel(), expected, equal_nan=True)
            assert np.array_equal(as_parquet[header].to_numpy(), expected, equal_nan=True)
            in_csv = [float(text or "nan") for text in as_csv[header]]
            assert np.array_equal(in_csv, expected, equal_nan=True)
            assert as_netcdf[name].units == in_memory[name].units
            assert as_netcdf[name].long_name == in_memory[name].long_name
        assert as_netcdf["hot.fuel"].values.tolist() == ["diesel", "methane"]
        assert as_netcdf["hot.mass_flow"].units == "kg/s"
        texts = as_netcdf["problem_text"].values[as_netcdf["problem"].values]
        assert texts.ravel().tolist() == in_memory["problem"].values.ravel().tolist() == list(as_csv["problem"])
        assert as_netcdf.attrs["Conventions"].startswith("CF-")
        assert as_netcdf.attrs["run"] == in_memory.attrs["run"] == tables.read_about(paths[0])["run"]
        one = in_memory["net_power"].sel({"hot.mass_flow": 0.08, "hot.fuel": "methane", "stack.layers": 4})
        single = estimate(replace(load_case(EXHAUST), {"hot.mass_flow": 0.08, "hot.fuel": "methane"}))
        assert float(one) == pytest.approx(single.net_power, rel=1e-12)
        assert not in_memory["valid"].sel({"stack.layers": 3}).values.any()
    schema = pyarrow.parquet.read_schema(paths[1])
    assert schema.field("net_power [W]").metadata[b"units"] == b"W"
    assert schema.metadata[b"command"] == b"harvest sweep"
    for path in paths:
        about = tables.read_about(path)
        assert about["source"] == f"harvest {harvest.__version__}"
        assert 'fuel = "diesel"' in about["case"] and about["command"] == "harvest sweep"


def test_a_sample_is_numbered(tmp_path: Path) -> None:
    axes = {"hot.mass_flow": {"from": 0.05, "to": 0.1}, "cold.fluid": ["water", "ethylene glycol"]}
    found = harvest.sweep(load_case(EXHAUST), axes, sample=16)
    assert found.sizes == {"combination": 16}
    assert {*found["cold.fluid"].values.tolist()} == {"water", "ethylene glycol"}
    path = tmp_path / "sample.nc"
    write_sweep(planned(with_axes(load_case(EXHAUST), axes, sample=16)), path)
    with xarray.open_dataset(path) as read:
        texts = read["cold.fluid_text"].values[read["cold.fluid"].values]
        assert texts.tolist() == found["cold.fluid"].values.tolist()
        assert read["net_power"].values.tolist() == found["net_power"].values.tolist()


def test_a_whole_estimate_goes_into_every_format(tmp_path: Path) -> None:
    for suffix in tables.SUFFIXES:
        write_sweep(plan(full=True), tmp_path / f"full{suffix}")
    read = pandas.read_csv(tmp_path / "full.csv")
    assert {"open_circuit_voltage [V]", "failed_checks", "warned_checks"} <= {*read.columns}


def test_a_missing_library_is_named_with_its_extra(monkeypatch: pytest.MonkeyPatch) -> None:
    for library in ("pyarrow", "xarray", "distributed"):
        monkeypatch.setitem(sys.modules, library, None)
    with pytest.raises(MissingExtraError, match=r"harvest\[parquet\]"):
        tables.table_suffix(Path("out.parquet"))
    with pytest.raises(MissingExtraError, match=r"harvest\[xarray\]"):
        harvest.sweep(load_case(EXHAUST), {"hot.mass_flow": [0.08]})
    with pytest.raises(MissingExtraError, match=r"harvest\[cluster\]"):
        print_sweep(plan(), None, scheduler="tcp://127.0.0.1:9")


def test_what_no_netcdf_can_hold_is_refused(tmp_path: Path) -> None:
    table = Table((Column("number", "", "W"),), 300_000_000, {})
    with pytest.raises(InputError, match="too many for NetCDF-3"):
        tables.write_netcdf(tmp_path / "out.nc", table, [])
    assert not list(tmp_path.iterdir())
