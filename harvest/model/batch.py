"""Many designs of one structure side by side: a case, and the numbers in which the designs differ."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from harvest.model.case import Case, value_at
from harvest.physics.arrays import FloatArray


@dataclass(frozen=True)
class Batch:
    """A base case and `varied`, SI numbers (cases,) by field path, that replace the base's.

    All names, choices and the fields that are given at all are those of the base case.
    """

    base: Case
    cases: int = 1
    varied: Mapping[str, FloatArray] = field(default_factory=dict)

    def number(self, path: str, absent: float = np.nan) -> FloatArray:
        """Return a field's numbers, (cases,); `absent` where the field is not given."""
        if path in self.varied:
            return np.asarray(self.varied[path], dtype=float)
        value = value_at(self.base, path)
        return np.full(self.cases, absent if value is None else float(value))

    def given(self, path: str) -> bool:
        """Whether a field has a value."""
        return path in self.varied or value_at(self.base, path) is not None
