"""Fluid tables kept in memory and on disk, so that the property library is loaded for a new fluid only."""

from __future__ import annotations

import contextlib
import functools
import hashlib
import json
import os
import sys
from collections import Counter
from dataclasses import asdict
from dataclasses import fields as fields_of
from pathlib import Path
from typing import Any

import numpy as np

from harvest.physics import chebyshev, combustion, coolprop_source, fluids
from harvest.physics.coolprop_source import library_version
from harvest.physics.fluids import FluidSpec, FluidTable, check_fluid, expansion_range, fluid_table

RECIPE = (fluids, combustion, chebyshev, coolprop_source)
"""Modules that build a table: when one of them changes, tables on disk are built anew."""
MOST_KEPT = 10_000
MOST_WRITTEN = 500
"""Tables that one process writes to a folder: a sweep over a composition makes thousands that nobody asks for again."""

_written: Counter[Path] = Counter()
_kept: dict[tuple[object, ...], FluidTable] = {}


def cache_folder() -> Path | None:
    """Folder of the tables on disk: HARVEST_CACHE, else the user's cache folder; None where there is no home."""
    own = os.environ.get("HARVEST_CACHE")
    if own:
        return Path(own)
    user = os.environ.get("LOCALAPPDATA" if sys.platform == "win32" else "XDG_CACHE_HOME")
    if user and Path(user).is_absolute():
        return Path(user) / "harvest"
    try:
        home = Path.home()
    except RuntimeError:
        return None
    return home / ("Library/Caches" if sys.platform == "darwin" else ".cache") / "harvest"


def stored_table(
    spec: FluidSpec, pressure: float, lower: float, upper: float, *, folder: Path | None = None
) -> FluidTable:
    """`fluid_table`, from memory or from disk where it was built before; the same to the last bit.

    Parameters: as `fluid_table`; `folder` of the files, by default `cache_folder()`. A folder that cannot be read or
    written is done without; a user's own rows stay in memory. Raises RangeError as `fluid_table` does, every time anew.
    """
    check_fluid(spec)
    folder = folder or cache_folder()
    if lower <= upper:
        lower, upper = (float(each) for each in expansion_range(spec.name, np.array(lower), np.array(upper)))
    key = (spec, pressure, lower, upper, library_version(), folder)
    table = _kept.get(key)
    if table is None:
        stated = {
            "recipe": _recipe(),
            "library": library_version(),
            "spec": asdict(spec),
            "pressure": pressure,
            "range": [lower, upper],
        }
        path = folder / f"{_digest(stated)}.json" if folder and spec.name != "table" else None
        table = _read(path, stated) if path else None
        if table is None:
            table = fluid_table(spec, pressure, lower, upper)
            if path and _written[path.parent] < MOST_WRITTEN:
                _write(path, stated, table)
                _written[path.parent] += 1
        if len(_kept) >= MOST_KEPT:
            _kept.clear()
        _kept[key] = table
    return table


@functools.cache
def _recipe() -> str:
    """Digest of the source that builds and stores tables."""
    sources = [Path(str(module.__file__)) for module in RECIPE] + [Path(__file__)]
    return hashlib.sha256(b"".join(source.read_bytes() for source in sources)).hexdigest()


def _digest(content: dict[str, Any]) -> str:
    return hashlib.sha256(json.dumps(content, sort_keys=True).encode()).hexdigest()


def _read(path: Path, stated: dict[str, Any]) -> FluidTable | None:
    """Table in a file; None where there is none, or it is damaged, or it is another one's."""
    try:
        content = json.loads(path.read_bytes())
        table = content["table"]
        if content["stated"] != stated or content["digest"] != _digest(table):
            return None
        coefficients = np.array(table.pop("coefficients"), dtype=np.float64)
        coefficients.setflags(write=False)
        return FluidTable(coefficients=coefficients, **table)
    except (OSError, ValueError, TypeError, KeyError, AttributeError, RecursionError):
        return None


def _write(path: Path, stated: dict[str, Any], table: FluidTable) -> None:
    """Write beside the final file and move it there in one step, so that no reader ever sees half of it."""
    values = {field.name: getattr(table, field.name) for field in fields_of(table)}
    values["coefficients"] = table.coefficients.tolist()
    content = json.dumps({"stated": stated, "digest": _digest(values), "table": values})
    import tempfile

    with contextlib.suppress(OSError):
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, temporary = tempfile.mkstemp(dir=path.parent, prefix=".new-", suffix=".json")
        try:
            with os.fdopen(handle, "w", encoding="ascii") as file:
                file.write(content)
            Path(temporary).replace(path)
        except OSError:
            Path(temporary).unlink(missing_ok=True)
