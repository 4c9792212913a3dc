"""Checks of an estimate: each has a name, a value, a limit, a status and one sentence."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from harvest.physics.arrays import BoolArray, FloatArray, IntArray

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


@dataclass(frozen=True)
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
