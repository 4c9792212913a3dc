"""What a design costs to build, what its power and energy cost by that, and when electricity has paid it back."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from harvest.model.batch import Batch
from harvest.physics.arrays import FloatArray

JOULES_PER_KILOWATT_HOUR = 3.6e6


def building_cost(batch: Batch, scalars: Mapping[str, FloatArray]) -> FloatArray:
    """Cost of building [currency], (cases,), by the prices in [cost] and each case's powers [W]; NaN without prices."""
    layers = batch.number("stack.layers")
    modules = batch.number("stack.rows") * batch.number("stack.columns") * layers
    plates = 2.0 * modules * batch.number("stack.row_pitch") * batch.number("stack.column_pitch")
    given = np.maximum(scalars["converted_power"], 0.0)
    taken = scalars["hot_drive_power"] + scalars["cold_drive_power"]
    return np.asarray(
        batch.number("cost.module") * modules
        + batch.number("cost.exchanger_per_area") * plates
        + batch.number("cost.layer") * layers
        + batch.number("cost.converter")
        + batch.number("cost.converter_per_watt") * given
        + batch.number("cost.drive")
        + batch.number("cost.drive_per_watt") * taken
        + batch.number("cost.fixed")
    )


def annuity_factor(rate: FloatArray, years: FloatArray) -> FloatArray:
    """Share of a sum that is paid each year for `years` at a discount rate [1/a]; arrays of one shape."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(rate == 0.0, 1.0 / years, -rate / np.expm1(-years * np.log1p(rate)))


def discounted_payback(cost: FloatArray, yearly: FloatArray, rate: FloatArray) -> FloatArray:
    """Years after which yearly returns, discounted by the end of each year's share, make up a cost; infinite if never.

    The annuity factor solved for its years: n = -ln(1 - r C / Y) / ln(1 + r), and C / Y at no rate.
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        interest = rate * cost / yearly
        years = np.where(rate == 0.0, cost / yearly, -np.log1p(-interest) / np.log1p(rate))
    paid = (yearly > 0) & (interest < 1.0)
    return np.where(np.isnan(yearly) | np.isnan(cost), np.nan, np.where(paid, years, np.inf))


def costs(batch: Batch, scalars: Mapping[str, FloatArray]) -> dict[str, FloatArray]:
    """Cost results by name, (cases,), from each case's powers [W].

    NaN without prices, the payback also without a price of electricity in their currency; infinite where no net power
    is left to pay.
    """
    cost, net = building_cost(batch, scalars), np.maximum(scalars["net_power"], 0.0)
    year, rate = batch.number("site.yearly_operation"), batch.number("cost.discount_rate")
    price = batch.base.site.electricity_value
    comparable = price is not None and batch.base.cost is not None and price.currency == batch.base.cost.currency
    yearly = net * year * (price.amount if price is not None and comparable else np.nan)
    yearly_cost = cost * annuity_factor(rate, batch.number("cost.years"))
    with np.errstate(divide="ignore", invalid="ignore"):
        return {
            "building_cost": cost,
            "cost_per_net_watt": cost / net,
            "cost_per_kilowatt_hour": yearly_cost / (net * year / JOULES_PER_KILOWATT_HOUR),
            "payback_years": cost / yearly,
            "discounted_payback_years": discounted_payback(cost, yearly, rate),
        }
