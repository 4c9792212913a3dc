"""The cold side as heat sinks in still room air: from the case to the sink of one module."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from harvest.physics.arrays import FloatArray
from harvest.physics.fluids import FluidBatch
from harvest.physics.natural_convection import FinnedSink, RatedSink, RoomSink
from harvest.quantities import format_quantity

if TYPE_CHECKING:
    from harvest.model.batch import Batch
    from harvest.model.design import Faults

LEEWAY = 1e-9
SINK = "cold.duct.sink"


def has_fins(batch: Batch) -> bool:
    """Whether the sink is given by its geometry."""
    return batch.base.cold.duct.sink_resistance is None


def base_area(batch: Batch) -> FloatArray:
    """Area of a sink's base [m^2], (cases,); a sink of given resistance has that of its place."""
    place = batch.number("stack.row_pitch") * batch.number("stack.column_pitch")
    return batch.number(f"{SINK}_height") * batch.number(f"{SINK}_width") if has_fins(batch) else place


def fin_arrangement(batch: Batch) -> tuple[FloatArray, FloatArray]:
    """Number of fins [-] and clear distance between them [m], (cases,)."""
    width, thickness = batch.number(f"{SINK}_width"), batch.number(f"{SINK}_fin_thickness")
    if batch.given(f"{SINK}_fin_count"):
        count = batch.number(f"{SINK}_fin_count")
        return count, (width - count * thickness) / (count - 1.0)
    spacing = batch.number(f"{SINK}_fin_spacing")
    return np.floor((width + spacing) / (spacing + thickness) + LEEWAY), spacing


def room_sink(batch: Batch, air: FluidBatch, faults: Faults) -> RoomSink:
    """Sink of one module; faults of single cases are noted."""
    factor = batch.number("cold.duct.film_factor", 1.0)
    if not has_fins(batch):
        return RatedSink(
            resistance=batch.number(f"{SINK}_resistance") / factor,
            rated_rise=batch.number(f"{SINK}_temperature_rise"),
            exponent=batch.number(f"{SINK}_exponent"),
        )
    count, spacing = fin_arrangement(batch)
    width = batch.number(f"{SINK}_width")
    faults.add(
        (count < 2) | ~(spacing > 0),
        lambda i: (
            f"{SINK}_width: {format_quantity(width[i], 'length')} has no room for two fins or more with air between "
            "them; give fewer, thinner or closer fins"
        ),
    )
    area = base_area(batch)
    along, across = batch.base.module.footprint
    faults.add(
        area < along * across * (1.0 - LEEWAY),
        f"{SINK}_width: the sink's base is smaller than the module; increase it",
    )
    place = batch.number("stack.row_pitch") * batch.number("stack.column_pitch")
    several = batch.number("stack.rows") * batch.number("stack.columns") > 1
    faults.add(
        several & (area > place * (1.0 + LEEWAY)),
        f"{SINK}_width: the sink's base is larger than the place of a module, row pitch x column pitch; increase these",
    )
    return FinnedSink(
        air=air,
        base_height=batch.number(f"{SINK}_height"),
        base_width=width,
        fin_count=count,
        fin_spacing=spacing,
        fin_height=batch.number(f"{SINK}_fin_height"),
        fin_thickness=batch.number(f"{SINK}_fin_thickness"),
        fin_conductivity=batch.number(f"{SINK}_conductivity"),
        emissivity=batch.number(f"{SINK}_emissivity"),
        film_factor=factor,
    )
