"""What a design costs, in words."""

from __future__ import annotations

import math

from harvest.model.case import Case
from harvest.model.results import Estimate
from harvest.quantities import format_quantity, significant


def _money(amount: float, currency: str, digits: int = 3) -> str:
    return f"{amount:,.0f} {currency}" if amount >= 100 else f"{significant(amount, digits)} {currency}"


def payback_words(case: Case, answer: Estimate) -> str:
    """When electricity pays a design back, or why that cannot be told."""
    price, cost = case.site.electricity_value, case.cost
    assert cost is not None
    if answer.net_power <= 0:
        return "never: no net power is left"
    if price is None:
        return "not told: give site.electricity_value"
    if price.currency != cost.currency:
        named = cost.currency or "no named currency"
        return f"not told: site.electricity_value is in {price.currency} and the prices in {named}"
    text = f"{significant(answer.payback_years, 3)} years at {price}"
    last = answer.payback_years
    if cost.discount_rate > 0:
        rate, last = f"at a discount rate of {100 * cost.discount_rate:g} % a year", answer.discounted_payback_years
        text += f" without interest, {f'{significant(last, 3)} years' if math.isfinite(last) else 'never'} {rate}"
    return f"{text}; longer than the {cost.years:g} years of use" if last > cost.years else text


def _energy_basis(case: Case) -> str:
    """Over what a kilowatt-hour's cost is spread."""
    cost = case.cost
    assert cost is not None
    rate = f", discounted at {100 * cost.discount_rate:g} % a year" if cost.discount_rate else ", without interest"
    return f"over {cost.years:g} years of {format_quantity(case.site.yearly_operation, 'duration', 4)}{rate}"


def cost_lines(case: Case, answer: Estimate) -> list[tuple[str, str]]:
    """Names and words of what a design costs, for the report of an estimate."""
    currency = answer.currency or "(currency)"
    lines = [("to build", f"{_money(answer.building_cost, currency)} by the prices in [cost]")]
    if answer.net_power > 0:
        lines += [
            ("a net watt", _money(answer.cost_per_net_watt, currency)),
            ("a kilowatt-hour", f"{_money(answer.cost_per_kilowatt_hour, currency)} {_energy_basis(case)}"),
        ]
    return [*lines, ("payback", payback_words(case, answer))]


def cost_sentence(case: Case, answer: Estimate) -> str:
    """Say in a sentence or two what a design costs."""
    currency = answer.currency or "(currency)"
    text = f"It costs {_money(answer.building_cost, currency)}"
    if answer.net_power > 0:
        text += (
            f": {_money(answer.cost_per_net_watt, currency)} a net watt, "
            f"{_money(answer.cost_per_kilowatt_hour, currency)} a kilowatt-hour {_energy_basis(case)}"
        )
    return f"{text}. Payback {payback_words(case, answer)}."
