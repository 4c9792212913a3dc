"""A module by itself, for a person: parameters, where they come from, and its curves."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from harvest.model.module_curve import ModuleCurve, OperatingPoint
from harvest.model.rated_module import CoolerComparison
from harvest.quantities import format_quantity
from harvest.report.layout import heading, pairs, table, wrapped

if TYPE_CHECKING:
    from harvest.study.bench_record import BenchFit
    from harvest.study.heat_pump_record import HeatPumpFit

SHOWN = 9


def _point(point: OperatingPoint) -> str:
    return (
        f"{format_quantity(point.power, 'power', 4)} at {format_quantity(point.voltage, 'voltage', 3)}, "
        f"{format_quantity(point.current, 'current', 3)}; {format_quantity(point.heat_flow, 'power', 4)} of heat, "
        f"efficiency {100 * point.efficiency:.2f} %"
    )


def _share(percent: float) -> str:
    return f"{percent:.2g} %" if percent < 99.5 else f"{percent:.0f} %"


def _parameters(fit: BenchFit | HeatPumpFit) -> list[str]:
    """Table of the fitted parameters with their intervals."""
    rows = [
        (name.replace("_", " "), f"{value:.5g}", f"{low:.5g}", f"{high:.5g}", _share(50 * (high - low) / abs(value)))
        for name, value, low, high in zip(fit.names, fit.values, fit.lower, fit.upper, strict=True)
    ]
    return table(("", "value", "95 % from", "to", "+-"), rows)


def _steady(fit: BenchFit) -> list[str]:
    """What a steady record tells, with intervals, what was left out, and what it cannot tell."""
    scatter = ", ".join(f"{name.replace('_', ' ')} {100 * part:.2g} %" for name, part in fit.noise.items())
    outliers = [
        f"Line {each.line}: {each.quantity.replace('_', ' ')} left out as an outlier, "
        f"{abs(each.studentised_residual):.1f} standard deviations away."
        for each in fit.outliers
    ]
    return [
        heading(f"Fitted at {format_quantity(fit.reference_temperature, 'temperature')} mean face temperature, SI"),
        *_parameters(fit),
        *(wrapped("  ", text) for text in (f"Scatter of the readings: {scatter}.", *outliers)),
    ]


def _transient(fit: HeatPumpFit) -> list[str]:
    """What a transient record tells: heats and coefficient of performance over time, and the parameters."""
    known = [i for i in range(len(fit.time)) if math.isfinite(fit.balance_error[i])]
    pumps = fit.pumps
    shown = known[:: max(1, len(known) // SHOWN)]
    rows = [
        (
            f"{fit.time[i]:.0f}",
            f"{fit.pumped_heat[i]:.2f}",
            f"{fit.delivered_heat[i]:.2f}",
            f"{fit.electrical_power[i]:.2f}",
            f"{fit.coefficient_of_performance[i]:.3f}" if pumps[i] else "-",
            f"{fit.coefficient_of_performance_error[i]:.2g}" if pumps[i] else "-",
            f"{fit.balance_error[i]:+.2f}",
        )
        for i in shown
    ]
    ratio = f"Ratio of the temperature changes {fit.temperature_change_ratio:.3f}"
    return [
        heading("Driven as a heat pump"),
        *table(("s", "pumped W", "delivered W", "electric W", "COP", "+-", "balance W"), rows),
        wrapped("  ", "A coefficient of performance (COP) stands only where electricity pumps heat; - elsewhere."),
        wrapped("  ", f"Over the record, heat and electricity close to {100 * fit.energy_balance_error:+.1f} %."),
        wrapped("  ", f"{ratio}: {fit.temperature_change_ratio_meaning}."),
        heading("Fitted, SI"),
        *_parameters(fit),
        wrapped("  ", f"Scatter: temperatures {fit.temperature_noise:.2g} K, voltage {fit.voltage_noise:.2g} V."),
    ]


def _fitted(fit: BenchFit | HeatPumpFit) -> list[str]:
    """What a record tells, and what it cannot tell."""
    from harvest.study.bench_record import BenchFit

    lines = _steady(fit) if isinstance(fit, BenchFit) else _transient(fit)
    return [*lines, *(wrapped("  - ", text) for text in (*fit.unknown, *fit.remarks))]


def _cooler(found: CoolerComparison) -> list[str]:
    """What the correction to these faces changes, and how the two extractions of a cooler's ratings compare."""
    extractions = [("current, voltage, difference", found.by_voltage), ("current, heat, difference", found.by_heat)]
    rows = [
        (name, f"{each.seebeck:.5g}", f"{each.resistance:.5g}", f"{each.conductance:.5g}")
        for name, each in extractions
        if each is not None
    ]
    stated = "none stated"
    if math.isfinite(found.stated_heat):
        stated = f"{format_quantity(found.stated_heat, 'power', 4)} stated"
    return [
        heading("What the ratings say"),
        *pairs(
            [
                ("matched load", f"{format_quantity(found.corrected_power, 'power', 4)} corrected to these faces"),
                (
                    "",
                    f"{format_quantity(found.uncorrected_power, 'power', 4)} uncorrected, as rated: "
                    f"{found.power_ratio:.3f} of the corrected",
                ),
                ("heat rating", f"{format_quantity(found.implied_heat, 'power', 4)} implied by the others, {stated}"),
            ]
        ),
        "",
        *table(("parameters as rated, from", "a V/K", "R ohm", "K W/K"), rows),
    ]


def module_report(title: str, curve: ModuleCurve, fit: BenchFit | HeatPumpFit | None = None) -> str:
    """The report of one module between two faces, with the fit it comes from if it has one."""
    hot, cold = (
        format_quantity(each, "temperature") for each in (curve.hot_face_temperature, curve.cold_face_temperature)
    )
    step = (len(curve.current) - 1) // (SHOWN - 1)
    rows = [
        (
            f"{curve.current[i]:.3f}",
            f"{curve.voltage[i]:.3f}",
            f"{curve.power[i]:.3f}",
            f"{curve.heat_flow[i]:.1f}",
            f"{100 * curve.efficiency[i]:.2f}",
        )
        for i in range(0, len(curve.current), step)
    ]
    merits = [
        (f"{kelvin - 273.15:.0f}", f"{merit:.3f}")
        for kelvin, merit in list(zip(curve.temperatures, curve.merit_curve, strict=True))[:: max(1, step)]
    ]
    lines = [
        title,
        "=" * len(title),
        "",
        wrapped("", f"Parameters {curve.source}."),
        heading(f"At {format_quantity(curve.mean_temperature, 'temperature')} mean temperature"),
        *pairs(
            [
                ("Seebeck coefficient", format_quantity(curve.seebeck, "Seebeck coefficient")),
                ("resistance", format_quantity(curve.resistance, "resistance")),
                ("conductance", format_quantity(curve.conductance, "conductance")),
                ("figure of merit Z T", f"{curve.figure_of_merit:.3f}"),
                *(
                    [("fill factor", f"{100 * curve.fill_factor:.1f} % of the footprint is legs")]
                    if math.isfinite(curve.fill_factor)
                    else []
                ),
            ]
        ),
        *(_fitted(fit) if fit is not None else []),
        heading(f"Between faces at {hot} and {cold}"),
        *pairs(
            [
                ("without load", format_quantity(curve.voltage[0], "voltage", 4)),
                ("matched load", _point(curve.matched)),
                ("most power", _point(curve.maximum_power)),
                ("best efficiency", _point(curve.best_efficiency)),
                ("ceiling", f"{100 * curve.maximum_efficiency:.2f} % at this figure of merit, constant properties"),
            ]
        ),
        "",
        *table(("A", "V", "W", "heat W", "%"), rows),
        *(_cooler(curve.cooler) if curve.cooler is not None else []),
        heading("Figure of merit over temperature"),
        *table(("degC", "Z T"), merits),
    ]
    if curve.warnings:
        lines += [heading("Warnings"), *(wrapped("  - ", text) for text in curve.warnings)]
    return "\n".join(lines)


def fit_report(title: str, fit: BenchFit | HeatPumpFit, unknown: str) -> str:
    """The report of a bench record that does not tell every parameter, with the sentence on what is `unknown`."""
    lines = [title, "=" * len(title), "", wrapped("", f"Parameters {fit.provenance}."), *_fitted(fit)]
    return "\n".join([*lines, heading("No curves"), wrapped("  ", f"{unknown}.")])
