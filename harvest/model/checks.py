"""What a check is - a name, a value, a limit, a status and one sentence - and the limits that estimates are held to."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.quantities import format_quantity

if TYPE_CHECKING:
    from harvest.model.solution import Solved

CLOSURE_LIMIT = 1e-8
GRID_LIMIT = 0.01
AT_LEAST = "at least"
SHOCK_VOLTAGE = 60.0
LARGEST_COUPLE_SEEBECK = 0.5e-3
LARGEST_MERIT = 2.0
FILL_FACTORS = (0.10, 0.80)
"""Legs' share of the footprint between which modules are commonly built; common practice, no source."""
SMALLEST_COVERAGE = 0.5
SMALLEST_DUCT_SHARE = 0.8
LARGEST_ARITHMETIC_UNITS = 0.1
LARGEST_CORRECTION = 0.05
SOLDER_TEMPERATURE = 383.15
SOLDER_MELTS = 411.15
LARGEST_MACH = 0.3
LARGEST_DROP_SHARE = 0.1
BOILING_MARGIN = 10.0
FREEZING_MARGIN = 3.0
ACID_MARGIN = 15.0
SMALLEST_POWER = 1e-9
SPACING_SHARES = (0.7, 1.6)
"""Fin spacing over the best one between which thin fins convect three quarters or more of the most."""
FASTEST = {"liquid": 2.5, "gas": 40.0}
PASS, WARN, FAIL = 0, 1, 2
STATUS_NAMES = ("pass", "warn", "fail")


@dataclass(frozen=True)
class Check:
    """One check of one design. `value` and `limit` are SI, of the `kind` of quantity; `limit` may be NaN.

    `bound` says on which side of the limit the value should be: "at most" or "at least".
    """

    name: str
    kind: str
    value: float
    limit: float
    status: str
    text: str
    bound: str = "at most"


@dataclass(frozen=True, eq=False, repr=False)
class BatchCheck:
    """One check of all cases: arrays (cases,), and a function from a case's index to its sentence."""

    name: str
    kind: str
    value: FloatArray
    limit: FloatArray
    status: IntArray
    text: Callable[[int], str]
    bound: str = "at most"

    def of(self, index: int) -> Check:
        """Return the check of one case."""
        return Check(
            self.name,
            self.kind,
            float(self.value[index]),
            float(self.limit[index]),
            STATUS_NAMES[int(self.status[index])],
            self.text(index),
            self.bound,
        )


def graded(wrong: BoolArray, otherwise: int = PASS, level: int = FAIL) -> IntArray:
    """Return `level` where `wrong`, elsewhere `otherwise`."""
    return np.where(wrong, level, otherwise)


def celsius(kelvin: float) -> str:
    """Write a temperature [K] as a person reads it."""
    return format_quantity(kelvin, "temperature")


def solder_caution() -> str:
    """Words for a cooler's face above `SOLDER_TEMPERATURE`."""
    return (
        f"the bismuth-tin solder of many coolers melts at {celsius(SOLDER_MELTS)} and is kept below "
        f"{celsius(SOLDER_TEMPERATURE)} (common practice, no source): ask what solder the part has."
    )


def for_all(solved: Solved, value: float) -> FloatArray:
    """Return one number for every case of a solved batch, (cases,)."""
    return np.full(solved.made.batch.cases, value)
