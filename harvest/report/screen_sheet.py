"""The report of a screening: the verdict first, then ceilings, the realistic band, worth, and what they rest on."""

from __future__ import annotations

import math
from typing import Any

from harvest.model.case import Streams, assumptions
from harvest.model.stream_sections import GASES, StreamSide
from harvest.quantities import format_quantity, one_line, significant
from harvest.report.documents import plain
from harvest.report.layout import WIDTH, heading, pairs, table, wrapped
from harvest.report.terminal import fluid_words, title
from harvest.study.screen import (
    CLOSEST_APPROACH,
    CONVERTED,
    GAS_FILM,
    LEFT_AFTER_LOSSES,
    LIQUID_FILM,
    PRACTICE,
    REFERENCE_RESISTANCE,
    REFERENCE_SIDE,
    SMALL_PLANT,
    SOURCES,
    UNITS,
    Screening,
)
from harvest.version import VERSION

USED_ASSUMPTIONS = ("ambient_pressure", "pressure", "intake_humidity", "fuel_sulphur", "sulphur_conversion")
"""Fields whose defaults a screening stands on."""


COMMON_MODULE_LIMIT = 503.15
"""Hot face that modules of bismuth telluride commonly bear [K]; common practice, no source."""


def screen_document(answer: Screening) -> dict[str, Any]:
    """A screening with the unit and the source of each number."""
    document: dict[str, Any] = plain(answer)
    return {**document, "units": UNITS, "number_sources": SOURCES}


def screen_report(case: Streams, answer: Screening) -> str:
    """The report of two streams."""
    lines = [
        title(case),
        "=" * min(len(title(case)), WIDTH),
        "",
        wrapped("", answer.verdict),
        heading("Streams"),
        *_streams(case, answer),
        heading("At most"),
        *_ceilings(answer),
        heading("Realistic"),
        *_band(answer),
        heading("Worth"),
        *_worth(case, answer),
        heading("The band rests on"),
        *_practice(answer),
        heading("Assumed, because not given"),
        *(_assumed(case) or ["  nothing that matters"]),
        heading("Sources"),
        *(wrapped("  ", one_line(source, 300), rest="    ") for source in answer.sources),
        wrapped("  ", "ceilings: second law; Ioffe 1957 for the figure of merit", rest="    "),
        wrapped("  ", f"power per plate area: {SOURCES['joint_optimum_flux_high']}", rest="    "),
        wrapped("  ", f"lowest outlet: {SOURCES['lowest_outlet_temperature']}", rest="    "),
        heading("Cautions"),
        *(wrapped("  - ", text) for text in _cautions(case, answer)),
        "",
        f"harvest {VERSION}, case {answer.case_hash[:12]}",
    ]
    return "\n".join(lines)


def _q(value: float, kind: str, digits: int = 3) -> str:
    return "-" if not math.isfinite(value) else format_quantity(value, kind, digits)


def _percent(share: float) -> str:
    return "-" if not math.isfinite(share) else f"{significant(100 * share, 3)} %"


def _streams(case: Streams, answer: Screening) -> list[str]:
    def row(name: str, side: StreamSide, flow: float) -> tuple[str, str, str, str]:
        words = "reservoir" if side.fluid == "reservoir" else fluid_words(side)
        return name, words, _q(flow, "mass flow"), _q(side.inlet_temperature, "temperature", 4)

    return table(
        ("", "", "flow", "in"),
        [row("hot", case.hot, answer.hot_mass_flow), row("cold", case.cold, answer.cold_mass_flow)],
    )


def _ceilings(answer: Screening) -> list[str]:
    """Ceilings from the loosest to the tightest."""
    lowest = _q(answer.lowest_outlet_temperature, "temperature", 4)
    heat, best = answer.available_heat, answer.figure_of_merit
    share = f", {_percent(answer.reversible_efficiency)} of the heat" if math.isfinite(heat) else ""
    lines = [
        (
            "available heat",
            f"{_q(heat, 'power')} down to the cold inlet, {_q(answer.usable_heat, 'power')} down to "
            f"{lowest}, the lowest outlet",
        ),
        ("exergy", f"{_q(answer.hot_exergy, 'power')} in the hot stream, relative to the cold inlet"),
        ("Carnot", f"{_percent(answer.carnot_efficiency)} between the inlets, which no stream that cools can have"),
        (
            "any engine",
            f"{_q(answer.reversible_power, 'power')}{share}, if both streams came to one temperature reversibly",
        ),
        ("any modules", f"{_q(answer.merit_power, 'power')} with Z T = {best:g}, endless and without films"),
        (
            "a plate",
            f"{_q(answer.joint_optimum_flux_low, 'heat flux')} to "
            f"{_q(answer.joint_optimum_flux_high, 'heat flux')} at the inlets, module and load free, films taking "
            "half of the difference",
        ),
    ]
    of_streams = math.isfinite(answer.reversible_power)
    known = {
        "available heat": math.isfinite(heat),
        "exergy": math.isfinite(heat),
        "any engine": of_streams,
        "any modules": of_streams,
    }
    return pairs((name, text) for name, text in lines if known.get(name, True))


def _band(answer: Screening) -> list[str]:
    def both(name: str, kind: str, digits: int = 2) -> tuple[str, str]:
        ends = (getattr(answer, f"{name}_low"), getattr(answer, f"{name}_high"))
        return _q(ends[0], kind, digits), _q(ends[1], kind, digits)

    if not math.isfinite(answer.net_power_high):
        best = " to ".join(both("best_module_power", "power"))
        return [f"  {best} from the best placed module, gross; how many there are, no stream tells"]
    counts = [f"{each:,.0f}" for each in (answer.module_count_low, answer.module_count_high)]
    areas = [f"{significant(each, 2)} m^2" for each in (answer.plate_area_low, answer.plate_area_high)]
    shares = [_percent(each) for each in (answer.module_share_low, answer.module_share_high)]
    rows = [
        (f"{'net power':30}", *both("net_power", "power")),
        (f"{'heat taken':30}", *both("heat", "power")),
        (f"{'modules of 40 mm':30}", *counts),
        (f"{'plate area with modules':30}", *areas),
        (f"{'heat flux through modules':30}", *both("module_flux", "heat flux")),
        (f"{'the best placed module, gross':30}", *both("best_module_power", "power")),
        (f"{'its hot face':30}", *both("best_module_hot_face", "temperature", 4)),
        (f"{'modules take of the difference':30}", *shares),
    ]
    return table(("", "small, poor films", "largest power, good films"), rows)


def _worth(case: Streams, answer: Screening) -> list[str]:
    year = _q(case.site.yearly_operation, "duration", 4)
    stated = PRACTICE if "site.yearly_operation" in case.assumed else "as given"

    def money(value: float) -> str:
        return f"{significant(value, 2)} {answer.currency}"

    lines = []
    if math.isfinite(answer.yearly_heat_worth):
        text = f"{money(answer.yearly_heat_worth)} for the usable heat at {case.site.heat_value}"
        lines.append(("as heat", text))
    if math.isfinite(answer.yearly_electricity_worth_high):
        low, high = answer.yearly_electricity_worth_low, answer.yearly_electricity_worth_high
        lines.append(("as electricity", f"{money(low)} to {money(high)} at {case.site.electricity_value}"))
    if not lines:
        return ["  not told: give site.heat_value and site.electricity_value"]
    return pairs([*lines, ("in a year of", f"{year} ({stated})")])


def _practice(answer: Screening) -> list[str]:
    def span(ends: tuple[float, float], unit: str = "") -> str:
        return f"{ends[0]:g} to {ends[1]:g}{unit}"

    film = " W/(m^2 K)"
    return [
        wrapped("  ", f"{text}: {PRACTICE}", rest="    ")
        for text in (
            f"Z T = {answer.figure_of_merit:g} at the mean temperature, as stated; 0.8 unless stated",
            f"reference module {1e3 * REFERENCE_SIDE:g} mm square of {REFERENCE_RESISTANCE:g} K/W without current, "
            "apart from each other where films are poor so that these take half of the difference",
            f"films per plate area: liquid {span(LIQUID_FILM, film)}, gas with fins {span(GAS_FILM, film)}",
            f"converter {span(CONVERTED)}; left after pumps, fans, mismatch and contacts {span(LEFT_AFTER_LOSSES)}",
            f"small: {SMALL_PLANT:.0%} of the heat of the largest power; at most {CLOSEST_APPROACH:.0%} of what an "
            "endless exchanger takes",
        )
    ]


def _assumed(case: Streams) -> list[str]:
    return [
        wrapped("  ", f"{item.path} = {item.value}: {item.reason}", rest="      ")
        for item in assumptions(case)
        if item.path.rpartition(".")[2] in USED_ASSUMPTIONS
    ]


def _cautions(case: Streams, answer: Screening) -> list[str]:
    lines = ["A screening knows no ducts, stack or module; an estimate goes before any money is spent."]
    hottest = max(answer.best_module_hot_face_low, answer.best_module_hot_face_high)
    if hottest > COMMON_MODULE_LIMIT:
        lines.append(
            f"Temperature: nothing here limits the modules; the first ones would see up to "
            f"{format_quantity(hottest, 'temperature', 3)}, and common bismuth telluride bears about "
            f"{format_quantity(COMMON_MODULE_LIMIT, 'temperature', 3)} ({PRACTICE}): keep them cooler, at part of "
            "this power, or take another material."
        )
    if case.hot.fluid == "exhaust gas":
        lines.append(
            "Exhaust: below its dew points it leaves acid condensate, and leaks carry carbon monoxide; the heat of "
            "condensation is not counted."
        )
    if any(side.fluid not in (*GASES, "reservoir") for side in (case.hot, case.cold)):
        lines.append("Pressure: a liquid that is heated in a closed loop needs relief and room to expand.")
    return [*lines, "Local codes and the judgement of a licensed engineer go before this screening."]
