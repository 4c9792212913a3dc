"""The store of fluid tables: same to the last bit, safe against damage, crowds and closed folders."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from harvest.errors import RangeError
from harvest.model import property_store
from harvest.model.property_store import cache_folder, stored_table
from harvest.physics.fluids import FluidSpec, FluidTable, fluid_table

WATER = FluidSpec("water")
DIESEL = FluidSpec("exhaust gas", fuel="diesel", excess_air_ratio=1.5)


@pytest.fixture(autouse=True)
def empty_memory(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(property_store, "_kept", {})


def forget() -> None:
    property_store._kept.clear()


def same(first: FluidTable, second: FluidTable) -> bool:
    texts = [
        {name: value for name, value in vars(table).items() if name != "coefficients"} for table in (first, second)
    ]
    return repr(texts[0]) == repr(texts[1]) and first.coefficients.tobytes() == second.coefficients.tobytes()


def only_file(folder: Path) -> Path:
    (path,) = folder.iterdir()
    return path


@pytest.mark.parametrize(
    "spec", [WATER, FluidSpec("ethylene glycol", volume_fraction=1 / 3), FluidSpec("air"), DIESEL], ids=lambda s: s.name
)
def test_a_table_from_disk_is_the_table_that_was_built(spec: FluidSpec, tmp_path: Path) -> None:
    built = stored_table(spec, 2e5, 293.0, 801.0, folder=tmp_path)
    assert same(built, fluid_table(spec, 2e5, 293.0, 801.0))
    forget()
    assert same(built, stored_table(spec, 2e5, 293.0, 801.0, folder=tmp_path))
    assert only_file(tmp_path).suffix == ".json"


def no_library(*args: object) -> FluidTable:
    raise AssertionError("the table was built again")


def test_memory_and_disk_are_used(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    built = stored_table(DIESEL, 1e5, 293.0, 801.0, folder=tmp_path)
    monkeypatch.setattr(property_store, "fluid_table", no_library)
    assert stored_table(DIESEL, 1e5, 250.0, 899.0, folder=tmp_path) is built
    forget()
    assert same(stored_table(DIESEL, 1e5, 250.0, 899.0, folder=tmp_path), built)


@pytest.mark.parametrize(
    "damage",
    [
        lambda text: "",
        lambda text: text[: len(text) // 2],
        lambda text: "null",
        lambda text: "[" * 100_000,
        lambda text: text.replace('"lower": 2', '"lower": 3', 1),
        lambda text: json.dumps({**json.loads(text), "table": {}}),
        lambda text: text.replace('"recipe": "', '"recipe": "0'),
        lambda text: "\x00\xff" * 100,
    ],
    ids=["empty", "half", "null", "deep", "altered", "hollow", "recipe", "noise"],
)
def test_a_damaged_file_is_built_again(damage, tmp_path: Path) -> None:  # type: ignore[no-untyped-def]
    built = stored_table(WATER, 2e5, 293.0, 353.0, folder=tmp_path)
    path = only_file(tmp_path)
    good = path.read_text()
    damaged = damage(good)
    assert damaged != good
    path.write_text(damaged, encoding="latin-1")
    forget()
    assert same(stored_table(WATER, 2e5, 293.0, 353.0, folder=tmp_path), built)
    assert path.read_text() == good


def test_the_file_of_another_fluid_is_not_taken(tmp_path: Path) -> None:
    stored_table(WATER, 2e5, 293.0, 353.0, folder=tmp_path)
    water = only_file(tmp_path)
    built = stored_table(WATER, 3e5, 293.0, 353.0, folder=tmp_path)
    (other,) = set(tmp_path.iterdir()) - {water}
    other.write_bytes(water.read_bytes())
    forget()
    assert same(stored_table(WATER, 3e5, 293.0, 353.0, folder=tmp_path), built)


def test_another_version_of_the_library_builds_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    stored_table(WATER, 2e5, 293.0, 353.0, folder=tmp_path)
    monkeypatch.setattr(property_store, "library_version", lambda: "0.0.1")
    stored_table(WATER, 2e5, 293.0, 353.0, folder=tmp_path)
    assert len(list(tmp_path.iterdir())) == 2
    monkeypatch.setattr(property_store, "_recipe", lambda: "another way to build a table")
    forget()
    stored_table(WATER, 2e5, 293.0, 353.0, folder=tmp_path)
    assert len(list(tmp_path.iterdir())) == 3


def test_a_folder_that_cannot_be_written_is_done_without(tmp_path: Path) -> None:
    taken = tmp_path / "file"
    taken.write_text("not a folder")
    assert stored_table(WATER, 2e5, 293.0, 353.0, folder=taken / "below").label == "water"
    assert taken.read_text() == "not a folder"


def test_a_refusal_is_not_stored(tmp_path: Path) -> None:
    for _ in range(2):
        with pytest.raises(RangeError, match="liquid water"):
            stored_table(WATER, 100.0, 293.0, 353.0, folder=tmp_path)
    with pytest.raises(RangeError, match="no known fluid"):
        stored_table(FluidSpec("brine"), 1e5, 293.0, 353.0, folder=tmp_path)
    with pytest.raises(RangeError, match="not a range"):
        stored_table(FluidSpec("air"), 1e5, float("nan"), 353.0, folder=tmp_path)
    assert list(tmp_path.iterdir()) == []


def test_a_table_of_the_user_is_not_written_to_disk(tmp_path: Path) -> None:
    spec = FluidSpec("table", table=((300.0, 1e3, 4e3, 1e-3, 0.6),))
    first, again = (stored_table(spec, 1e5, 293.0, 353.0, folder=tmp_path) for _ in range(2))
    assert first is again
    assert list(tmp_path.iterdir()) == []


def test_the_folder_comes_from_the_environment(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.setattr(sys, "platform", "linux")
    monkeypatch.setenv("HOME", str(tmp_path))
    monkeypatch.setenv("HARVEST_CACHE", str(tmp_path / "own"))
    assert cache_folder() == tmp_path / "own"
    monkeypatch.delenv("HARVEST_CACHE")
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "xdg"))
    assert cache_folder() == tmp_path / "xdg" / "harvest"
    monkeypatch.setenv("XDG_CACHE_HOME", "relative")
    assert cache_folder() == tmp_path / ".cache" / "harvest"


BUILD = """
import sys
from pathlib import Path
from harvest.model.property_store import stored_table
from harvest.physics.fluids import FluidSpec
for pressure in (1.1e5, 1.2e5, 1.3e5):
    for fraction in (0.3, 0.4, 0.5):
        spec = FluidSpec("ethylene glycol", volume_fraction=fraction)
        table = stored_table(spec, pressure, 293.0, 353.0, folder=Path(sys.argv[1]))
        print(table.coefficients.tobytes().hex())
print("CoolProp" in sys.modules, "scipy" in sys.modules)
"""


def start(folder: Path) -> subprocess.Popen[str]:
    return subprocess.Popen([sys.executable, "-c", BUILD, os.fspath(folder)], stdout=subprocess.PIPE, text=True)


def test_two_processes_at_once_agree_and_a_third_needs_no_library(tmp_path: Path) -> None:
    both = [start(tmp_path), start(tmp_path)]
    texts = [process.communicate(timeout=60)[0].splitlines() for process in both]
    assert [process.returncode for process in both] == [0, 0]
    assert texts[0][:-1] == texts[1][:-1]
    assert len(list(tmp_path.iterdir())) == 9
    third = start(tmp_path)
    lines = third.communicate(timeout=60)[0].splitlines()
    assert lines == [*texts[0][:-1], "False False"]


def test_stored_coefficients_cannot_be_changed(tmp_path: Path) -> None:
    for _ in range(2):
        table = stored_table(WATER, 2e5, 293.0, 353.0, folder=tmp_path)
        with pytest.raises(ValueError, match="read-only"):
            table.coefficients[0, 0] = np.pi
        forget()
