"""Many designs of one structure side by side: a case, and the numbers in which the designs differ."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Self

import numpy as np

from harvest.errors import InputError
from harvest.model.case import DECLARATIONS, Case, Streams, nearest_field, value_at
from harvest.physics.arrays import FloatArray, IntArray
from harvest.quantities import STANDARD_VOLUME_FLOW, StandardVolumeFlow


@dataclass(frozen=True, eq=False)
class StreamBatch:
    """The streams of a case and `varied`, SI numbers (cases,) by field path, that replace the base's.

    A standard volume flow varies in its flow [m^3/s] at its stated reference. All names, choices and the fields that
    are given at all are those of the base case. Raises InputError for a varied field that is unknown, not a single
    number, absent in the base, or of another length.
    """

    base: Streams
    cases: int = 1
    varied: Mapping[str, FloatArray] = field(default_factory=dict)

    def __post_init__(self) -> None:
        """Refuse what would have no effect; raises InputError."""
        for path, numbers in self.varied.items():
            declaration = DECLARATIONS.get(path)
            if declaration is None:
                raise InputError(f"{path}: unknown field; {nearest_field(path)}")
            many = isinstance(value_at(self.base, path), tuple)
            if declaration.form not in ("quantity", "integer", "curve", STANDARD_VOLUME_FLOW) or many:
                raise InputError(f"{path}: is not a single number, so it cannot vary within a batch")
            if value_at(self.base, path) is None:
                raise InputError(f"{path}: the base case has none, or something else in its place; give it there first")
            if np.shape(numbers) != (self.cases,):
                raise InputError(f"{path}: has the shape {np.shape(numbers)}; the batch needs ({self.cases},)")

    def take(self, which: IntArray) -> Self:
        """Return the batch of a subset of cases."""
        varied = {path: np.asarray(each)[which] for path, each in self.varied.items()}
        return replace(self, cases=len(which), varied=varied)

    def number(self, path: str, absent: float = np.nan) -> FloatArray:
        """Return a field's numbers, (cases,); `absent` where the field is not given."""
        if path in self.varied:
            return np.asarray(self.varied[path], dtype=float)
        value = value_at(self.base, path)
        if isinstance(value, StandardVolumeFlow):
            value = value.volume_flow
        return np.full(self.cases, absent if value is None else float(value))

    def given(self, path: str) -> bool:
        """Whether a field has a value."""
        return path in self.varied or value_at(self.base, path) is not None


@dataclass(frozen=True, eq=False)
class Batch(StreamBatch):
    """A base case and the numbers in which designs differ from it; see `StreamBatch`."""

    base: Case
