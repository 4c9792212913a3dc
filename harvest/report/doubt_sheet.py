"""The report of how sure a case is, the answer first, and the same as JSON."""

from __future__ import annotations

from itertools import groupby
from typing import TYPE_CHECKING, Any

import numpy as np

from harvest.model.case import DECLARATIONS, Case, display
from harvest.model.module import FACTORS
from harvest.model.results import SCALARS, UNITS
from harvest.quantities import format_quantity, unit_of
from harvest.report.documents import plain
from harvest.report.layout import WIDTH, heading, table, wrapped
from harvest.report.terminal import title
from harvest.study.doubt import WORTHWHILE
from harvest.study.limits import WINDOW, limit_path
from harvest.version import VERSION

if TYPE_CHECKING:
    from harvest.study.doubt import Doubt, Spread, UncertainInput

MOST_INPUTS = 12
"""Inputs that stand in the table; the others are summed up."""
LITTLE = 0.005
"""Share of the variance below which an input is nothing."""
COARSE = 0.1
"""Share of the variance by which shares may be off before they rank nothing."""
MANY_INVALID = 0.05
"""Share of cases without an answer from which the percentiles are not to be trusted."""


MEASUREMENTS = {
    "seebeck_factor": "the open-circuit voltage of a module on a bench",
    "resistance_factor": "the resistance of a module on a bench",
    "conductance_factor": "the heat through a module on a bench",
    "film_factor": "the heat that one duct takes in a trial",
    "friction_loss_factor": "the pressure drop of one duct in a trial",
    "film_coefficient": "the heat that a plate of known temperature takes in its place",
    "connection_loss_coefficient": "the pressure drop of the connections at a known flow",
    "minor_loss_coefficient": "the pressure drop of the fittings at a known flow",
    "fouling": "the loss of heat in use, or by opening what is in use already",
    "inlet_temperature": "a record over days of use with a calibrated sensor",
    "mass_flow": "a calibrated meter",
    "volume_flow": "a calibrated meter",
    "standard_volume_flow": "a calibrated meter",
    "circuit_flow": "a calibrated meter",
    "fuel_flow": "weighing the fuel",
    "drive_efficiency": "the electrical power of the pump or fan at its working point",
    "hot_interface": "a joint on a bench at its clamping pressure",
    "cold_interface": "a joint on a bench at its clamping pressure",
    "converter_efficiency": "power in and out of the converter at its working point",
}
"""How a field is found out, by its name."""


def _w(value: float) -> str:
    return format_quantity(value, "power", 3)


def _share(value: float) -> str:
    return f"{100.0 * value:.0f} %" if value >= 0.1 or value < LITTLE else f"{100.0 * value:.1f} %"


def chance_text(chance: float, cases: int) -> str:
    """Say a chance that was counted in so many cases; none of them is not never."""
    if chance == 0.0:
        return f"in none of {cases:,} cases"
    if chance == 1.0:
        return f"in all of {cases:,} cases"
    if chance < 0.0005 or chance > 0.9995:
        return f"with a chance {'below 0.1' if chance < 0.5 else 'above 99.9'} %"
    return f"with a chance of {100.0 * chance:.1f} %"


def answer_sentences(found: Doubt) -> str:
    """What is known of the net power, in words."""
    net = found.results["net_power"]
    return (
        f"Net power lies between {_w(net.p10)} (P10) and {_w(net.p90)} (P90) in 80 of 100 cases, with {_w(net.p50)} in "
        f"the middle (P50), and between {_w(net.p5)} and {_w(net.p95)} in 90 of 100. The case as it stands gives "
        f"{_w(net.nominal)}. It is negative {chance_text(found.chance_negative, found.valid)}."
    )


def measuring_lines(found: Doubt) -> list[str]:
    """What is worth measuring, in words, one line an input."""
    inputs = {each.field: each for each in found.inputs}
    lines = []
    for name in found.worth_measuring:
        how = MEASUREMENTS.get(name.rpartition(".")[2])
        narrower = f"the band would be {_share(inputs[name].band_narrowing)} narrower"
        lines.append(f"{name}{f', by {how}' if how else ''}: {narrower}")
    return lines


def bench_line(found: Doubt) -> str:
    """What one bench test of the module would bring, which tells all its factors at once; empty where little."""
    together = sum(max(each.first_order, 0.0) for each in found.inputs if each.field in FACTORS)
    narrowing = 1.0 - float(np.sqrt(1.0 - min(together, 1.0)))
    if narrowing < WORTHWHILE:
        return ""
    return f"A bench test of the module tells its factors at once: the band would be {_share(narrowing)} narrower."


def _measuring(found: Doubt) -> list[str]:
    lines = [wrapped("  ", each, rest="      ") for each in [*measuring_lines(found), bench_line(found)] if each]
    if not lines:
        lines = [
            wrapped(
                "  ", "No input alone matters much: knowing any one exactly would narrow the band by less than 5 %."
            )
        ]
    return [heading("Worth measuring: if known exactly, on average"), *lines]


def _results(found: Doubt) -> list[str]:
    def row(name: str, each: Spread) -> tuple[str, ...]:
        kind = SCALARS[name]["kind"]
        deviation_kind = "temperature difference" if kind == "temperature" else kind
        numbers = (each.nominal, each.p5, each.p10, each.p50, each.p90, each.p95)
        deviation = format_quantity(each.standard_deviation, deviation_kind, 3)
        return (name, *(format_quantity(number, kind, 4) for number in numbers), deviation)

    header = ("", "nominal", "P5", "P10", "P50", "P90", "P95", "deviation")
    return [heading("Results"), *table(header, [row(*each) for each in found.results.items()])]


def _limits(found: Doubt) -> list[str]:
    if not found.limits:
        return []
    lines = []
    for each in found.limits:
        kind = DECLARATIONS[limit_path(each.limit)].kind
        limit, nominal = format_quantity(each.value, kind), format_quantity(each.nominal, kind)
        chance = chance_text(each.chance, found.valid)
        said = f"{each.bound} {limit}, broken {chance}; {nominal} as it stands"
        lines.append(wrapped(f"  {each.limit}: ", said, rest="      "))
    return [heading("Limits, at the chosen load but for those without load"), *lines]


def _value(each: UncertainInput) -> str:
    declaration = DECLARATIONS[each.field]
    if declaration.form == "standard volume flow":
        return format_quantity(each.nominal, "volume flow")
    return display(each.nominal, declaration)


def _inputs(found: Doubt) -> list[str]:
    shown = [
        each for i, each in enumerate(found.inputs) if i < MOST_INPUTS and max(each.first_order, each.total) > LITTLE
    ]
    rows = [
        (
            each.field,
            _value(each),
            each.tolerance,
            each.origin,
            _share(each.first_order),
            _share(each.total),
            f"{'+' if each.swing > 0 else ''}{_w(each.swing)}",
        )
        for each in shown
    ]
    header = ("field", "value", "tolerance", "origin", "share", "total", "swing")
    lines = [heading("What the doubt comes from"), *table(header, rows)]
    rest = found.inputs[len(shown) :]
    if rest:
        together = sum(max(each.first_order, 0.0) for each in rest)
        lines.append(
            wrapped("  ", f"{len(rest)} more bring {_share(together)} together: {', '.join(e.field for e in rest)}.")
        )
    lines.append(
        wrapped(
            "  ",
            "Share: part of the variance of net power that the input brings alone (first-order index); total: with all "
            "its interactions (total index); swing: change of net power from the input's P10 to its P90, the others as "
            "they stand. +- holds 95 of 100 values of a normal distribution, a factor those of a log-normal one.",
        )
    )
    return [*lines, wrapped("  ", sureness_of_shares(found))]


def sureness_of_shares(found: Doubt) -> str:
    """How far shares that are estimated from a sample may be off, in words."""
    intervals = [each for one in found.inputs for each in (one.first_order_interval, one.total_interval)]
    off = max(0.5 * (high - low) for low, high in intervals)
    if off == 0.0:
        return "With one input there is nothing to share out."
    advice = "; that is too coarse for a ranking, so take more --samples" if off > COARSE else ""
    return (
        f"Shares are estimated from the sample: they may be off by up to {np.ceil(100.0 * off):.0f} points of 100 (95 "
        f"% interval by resampling; --json has that of each){advice}."
    )


def _sources(found: Doubt) -> list[str]:
    defaults = sorted((each for each in found.inputs if each.origin == "default"), key=lambda each: each.source)
    lines = [
        wrapped("  ", f"{', '.join(f'{each.field} {each.tolerance}' for each in alike)}: {source}.", rest="      ")
        for source, alike in groupby(defaults, key=lambda each: each.source)
    ]
    if lines:
        lines = [heading("Default tolerances, unless stated in [uncertainty]"), *lines]
    if found.exact:
        lines.append(heading("Taken as exact"))
        lines += [
            wrapped("  ", f"{', '.join(each.field for each in alike)}: {reason}.", rest="      ")
            for reason, alike in groupby(
                sorted(found.exact, key=lambda each: each.reason), key=lambda each: each.reason
            )
        ]
    return lines


def _sample(found: Doubt) -> list[str]:
    lines = [
        heading("Sample"),
        wrapped(
            "  ",
            f"{found.samples:,} cases drawn (scrambled Sobol sequence, seed {found.seed}), {found.valid:,} with an "
            f"answer; indices from {found.index_cases:,} further cases, {found.index_samples:,} x "
            f"({len(found.inputs)} inputs + 2). Inputs are taken to vary independently of each other. The band holds "
            "their doubt, not that of what the model leaves out, such as ageing and heat along the plates.",
        ),
    ]
    lines += [
        wrapped(f"  {count:,} without an answer, in no percentile: ", reason, rest="      ")
        for reason, count in found.invalid.items()
    ]
    if found.index_invalid:
        lines.append(
            f"  {found.index_invalid:,} cases of the indices without an answer stand as the mean of the others."
        )
    return lines


def doubt_report(case: Case, found: Doubt) -> str:
    """The report of how sure a case is."""
    name = title(case)
    lines = [name, "=" * min(len(name), WIDTH), "", wrapped("", answer_sentences(found))]
    if found.valid < (1.0 - MANY_INVALID) * found.samples:
        lines.append(
            wrapped(
                "Caution: ",
                f"{found.samples - found.valid:,} of {found.samples:,} cases have no answer, so the percentiles tell "
                "of the others only.",
            )
        )
    outside = sum(each.chance for each in found.limits if each.limit == WINDOW)
    if outside > 0.0 and case.electrical.load != "maximum power":
        lines.append(
            wrapped(
                "Caution: ",
                f"the terminals are outside the converter's window {chance_text(outside, found.valid)}; the net power "
                "is that of a converter which would work there too.",
            )
        )
    parts = (_measuring, _results, _limits, _inputs, _sources, _sample)
    return "\n".join([*lines, *(line for part in parts for line in part(found))])


def doubt_document(found: Doubt) -> dict[str, Any]:
    """How sure a case is, with the unit of each result; each input tells the `unit` of its own numbers."""
    document: dict[str, Any] = plain(found)
    for each in document["inputs"]:
        each["unit"] = unit_of(each["kind"])
    of_inputs = ("net_power_at_p10", "net_power_at_p90", "swing")
    units = {**{name: UNITS[name] for name in found.results}, **dict.fromkeys(of_inputs, unit_of("power"))}
    return {**document, "units": units, "version": VERSION}
