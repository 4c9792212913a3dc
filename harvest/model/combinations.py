"""What must hold between the varied numbers of a batch, where a single case is judged when it is read."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from harvest.model.batch import Batch
from harvest.model.case_fields import MOST_MODULES
from harvest.model.stream_sections import HEAT_SINK, RATED
from harvest.physics.arrays import BoolArray


def combination_faults(batch: Batch) -> Iterator[tuple[BoolArray, str]]:
    """Where numbers do not go together, (cases,), with the sentence that says so."""
    counts = (batch.number(f"stack.{name}") for name in ("rows", "columns", "layers"))
    modules = np.prod(list(counts), axis=0)
    yield modules > MOST_MODULES, f"stack.rows: more than {MOST_MODULES:,} modules cannot be solved"
    for side in ("hot", "cold"):
        yield from _duct_faults(batch, side)
    yield _without(batch, "module.legs.substrate_thickness", "module.legs.substrate_conductivity")


def _duct_faults(batch: Batch, side: str) -> Iterator[tuple[BoolArray, str]]:
    duct, kind = f"{side}.duct", getattr(batch.base, side).duct.kind
    yield _without(batch, f"{duct}.wall_thickness", f"{duct}.wall_conductivity")
    yield _without(batch, f"{duct}.connection_loss_coefficient", f"{duct}.connection_diameter")
    pitch, thickness = batch.number(f"{duct}.fin_pitch"), batch.number(f"{duct}.fin_thickness")
    yield thickness >= pitch, f"{duct}.fin_thickness: is not below the fin_pitch; decrease it"
    if kind in (RATED, HEAT_SINK):
        fouled = batch.number(f"{side}.fouling", 0.0) > 0
        yield fouled, f'{side}.fouling: does not apply to kind = "{kind}"; remove it'
    if kind == HEAT_SINK:
        yield batch.number("stack.layers") > 1, "stack.layers: only one layer can carry heat sinks in the room; give 1"
        yield batch.number(f"{duct}.faces") != 1, f"{duct}.faces: a heat sink serves one module; give 1"


def _without(batch: Batch, number: str, needed: str) -> tuple[BoolArray, str]:
    """Where a number is not zero and what it needs is not given."""
    wrong = (batch.number(number, 0.0) > 0) & (not batch.given(needed))
    return wrong, f"{needed}: is missing beside {number}; give it"
