"""Why cases have no answer, added up: reasons that differ in numbers only are one."""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import Generic, TypeVar

import numpy as np

from harvest.model.design import BETWEEN
from harvest.physics.arrays import ObjectArray

Weight = TypeVar("Weight", int, float)
OTHERS = "other reasons"
_NUMBER = re.compile(r"-?\d[\d.e+-]*")


@dataclass
class Reasons(Generic[Weight]):
    """Sums of cases, or of their times, by reason in its first wording; beyond `most` of them, others are together."""

    most: int | None = None
    sums: dict[str, Weight] = field(default_factory=dict)
    _wordings: dict[str, str] = field(default_factory=dict)

    def add(self, problem: str, weight: Weight) -> None:
        """Add to the first reason of a problem."""
        reason = problem.split(BETWEEN)[0]
        known = self._wordings.get(key := _NUMBER.sub("#", reason))
        if known is None:
            full = self.most is not None and len(self._wordings) >= self.most
            known = OTHERS if full else self._wordings.setdefault(key, reason)
        before = self.sums.get(known)
        self.sums[known] = weight if before is None else before + weight


def counted_reasons(problems: ObjectArray) -> dict[str, int]:
    """Numbers of cases without an answer by reason, the most frequent first; `problems` (cases,), "" where valid."""
    found = Reasons[int]()
    words, counts = np.unique(problems[problems != ""].astype(str), return_counts=True)
    for word, count in zip(words.tolist(), counts.tolist(), strict=True):
        found.add(word, count)
    return dict(sorted(found.sums.items(), key=lambda each: -each[1]))
