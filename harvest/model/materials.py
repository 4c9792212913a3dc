"""Records of thermoelectric materials: reading a bundled or a user's TOML file into curves."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from harvest.errors import CaseError, InputError
from harvest.physics.curves import Curve, PolynomialCurve, TableCurve
from harvest.physics.thermoelectrics import Material
from harvest.quantities import parse_quantity

FOLDER = Path(__file__).parent.parent / "data" / "materials"
PROPERTIES = ("seebeck", "resistivity", "conductivity")


@dataclass(frozen=True, eq=False, repr=False)
class MaterialRecord:
    """A material with where it comes from and the temperatures [K] in which it holds."""

    name: str
    material: Material
    lower: float
    upper: float
    source: str


def load_material(name: str) -> MaterialRecord:
    """Read a material by its bundled name or the path of a TOML record.

    A record gives `lower` and `upper` temperature, `source`, and for seebeck [V/K], resistivity [ohm m] and
    conductivity [W/(m K)] either polynomial coefficients in (T - `reference_temperature`), lowest power first, or
    pairs of temperature [K] and value. Raises InputError, CaseError.
    """
    bundled = FOLDER / f"{name.replace(' ', '-')}.toml"
    path = bundled if bundled.is_file() else Path(name)
    try:
        record = tomllib.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        known = ", ".join(sorted(each.stem.replace("-", " ") for each in FOLDER.glob("*.toml")))
        raise InputError(f"material {name!r}: no such record or file; bundled are {known}") from None
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as error:
        raise InputError(f"material {name!r}: {error}") from None
    missing = [key for key in (*PROPERTIES, "lower", "upper", "source") if key not in record]
    if missing:
        raise CaseError([f"{path.name}: {key}: missing; a material record needs it" for key in missing])
    reference = parse_quantity(record.get("reference_temperature", "0 K"), "temperature")
    curves = [_curve(record[key], reference, f"{path.name}: {key}") for key in PROPERTIES]
    return MaterialRecord(
        name,
        Material(*curves),
        parse_quantity(record["lower"], "temperature"),
        parse_quantity(record["upper"], "temperature"),
        str(record["source"]),
    )


def _curve(given: Any, reference: float, where: str) -> Curve:
    try:
        values = np.asarray(given, dtype=float)
    except (TypeError, ValueError):
        values = np.empty((0, 0, 0))
    if values.ndim == 1 and values.size and np.isfinite(values).all():
        return PolynomialCurve(values[:, None], reference)
    if values.ndim == 2 and values.shape[1] == 2 and len(values) > 1 and np.isfinite(values).all():
        if np.all(np.diff(values[:, 0]) > 0):
            return TableCurve(values[:, 0].copy(), values[:, 1].copy())
        raise InputError(f"{where}: temperatures must rise from row to row")
    raise InputError(f"{where}: write polynomial coefficients, or two or more pairs of temperature [K] and value")
