"""What a design costs to build, and what a kilowatt-hour of it costs over the years."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from harvest.model.batch import Batch
from harvest.physics.arrays import FloatArray

JOULES_PER_KILOWATT_HOUR = 3.6e6


def building_cost(batch: Batch, scalars: Mapping[str, FloatArray]) -> FloatArray:
    """Cost of building [currency], (cases,), by the prices in [cost] and each case's powers [W]; NaN without prices."""
    if batch.base.cost is None:
        return np.full(batch.cases, np.nan)
    price = batch.base.cost
    layers = batch.number("stack.layers")
    modules = batch.number("stack.rows") * batch.number("stack.columns") * layers
    plates = 2.0 * modules * batch.number("stack.row_pitch") * batch.number("stack.column_pitch")
    given = np.maximum(scalars["converted_power"], 0.0)
    taken = scalars["hot_drive_power"] + scalars["cold_drive_power"]
    return np.asarray(
        price.module * modules
        + price.exchanger_per_area * plates
        + price.layer * layers
        + price.converter
        + price.converter_per_watt * given
        + price.drive
        + price.drive_per_watt * taken
        + price.fixed
    )


def annuity_factor(rate: float, years: float) -> float:
    """Share of a sum that is paid each year for `years` at a discount rate [1/a]."""
    return 1.0 / years if rate == 0.0 else float(-rate / np.expm1(-years * np.log1p(rate)))


def cost_per_kilowatt_hour(batch: Batch, cost: FloatArray, net_power: FloatArray) -> FloatArray:
    """Yearly cost over yearly net energy [currency/kWh], (cases,); infinite where no net power [W] is left."""
    if batch.base.cost is None:
        return np.full(batch.cases, np.nan)
    yearly = annuity_factor(batch.base.cost.discount_rate, batch.base.cost.years)
    energy = np.maximum(net_power, 0.0) * batch.base.site.yearly_operation / JOULES_PER_KILOWATT_HOUR
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(energy > 0, cost * yearly / energy, np.inf)
