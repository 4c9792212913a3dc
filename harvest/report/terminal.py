"""Reports for a person at a terminal: the answer first, then what it rests on."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

from harvest.model.case import DECLARATIONS, Case, Streams, assumptions, case_hash, display, typed_at, value_at
from harvest.model.checks import STATUS_NAMES, Check
from harvest.model.results import Estimate
from harvest.model.stream_sections import HEAT_SINK, StreamSide
from harvest.quantities import format_quantity, one_line
from harvest.report.cautions import cautions
from harvest.report.cost_sheet import cost_lines
from harvest.report.layout import WIDTH, heading, pairs, table, wrapped
from harvest.version import VERSION

if TYPE_CHECKING:
    from harvest.model.fluid import FluidSheet

LONGEST_TITLE = 200
MOST_ROWS_SHOWN = 8
MARKS = {"pass": "ok  ", "warn": "WARN", "fail": "FAIL"}


def _q(value: float, kind: str, digits: int = 3) -> str:
    return "-" if not math.isfinite(value) else format_quantity(value, kind, digits)


def _t(kelvin: float) -> str:
    return "-" if not math.isfinite(kelvin) else f"{round(kelvin - 273.15, 1) + 0.0:.1f} degC"


def _percent(share: float, digits: int = 2) -> str:
    if not math.isfinite(share):
        return "-"
    return f"{100 * share:.{digits}f} %" if abs(share) < 10 else f"{100 * share:.3g} %"


def title(case: Streams) -> str:
    """Title of a case as one printable line."""
    return one_line(case.title, LONGEST_TITLE) or "Untitled case"


def counted(number: int, noun: str) -> str:
    """Write a number of things."""
    return f"{number:,} {noun}" + "s" * (number != 1)


def stack_sentence(case: Case, answer: Estimate) -> str:
    """Say how many modules there are and how they are arranged and wired."""
    stack, electrical = case.stack, case.electrical
    blocks = electrical.row_blocks or (stack.rows,)
    strings = electrical.strings_across * stack.layers // electrical.layers_in_series * len(blocks)
    in_a_row = stack.columns // electrical.strings_across * electrical.layers_in_series
    lengths = " or ".join(str(in_a_row * rows) for rows in sorted(set(blocks)))
    joined = ", each with its own converter" if electrical.independent else ", in parallel" * (strings > 1)
    plate = f"{counted(stack.layers, 'layer')} of {counted(stack.rows, 'row')} x {counted(stack.columns, 'column')}"
    wiring = f"{counted(strings, 'string')} of {lengths} in series{joined}"
    return f"{counted(int(answer.module_count), 'module')}: {plate}; {wiring}"


def _streams(case: Case, answer: Estimate) -> list[str]:
    """Both sides as a table."""
    rows = []
    for name, side in (("hot", case.hot), ("cold", case.cold)):
        if side.fluid == "reservoir":
            rows.append((name, "reservoir", "", _t(side.inlet_temperature), "", "", "", ""))
            continue
        if side.duct.kind == HEAT_SINK:
            rows.append((name, "room air", "", _t(side.inlet_temperature), "", "", "", "still air at heat sinks"))
            continue
        cost = (
            "free head"
            if side.drive == "free"
            else f"{_q(getattr(answer, f'{name}_drive_power'), 'power')} {side.drive}"
        )
        rows.append(
            (
                name,
                fluid_words(side),
                _q(getattr(answer, f"{name}_mass_flow"), "mass flow"),
                _t(side.inlet_temperature),
                _t(getattr(answer, f"{name}_outlet_temperature")),
                _q(getattr(answer, f"{name}_velocity"), "speed"),
                _q(getattr(answer, f"{name}_pressure_drop"), "pressure difference"),
                cost,
            )
        )
    return table(("", "", "flow", "in", "out", "velocity", "drop", "driven by"), rows)


def fluid_words(side: StreamSide) -> str:
    """Name a side's fluid with its composition, as in a sentence."""
    if side.volume_fraction is not None:
        return f"{side.fluid} {100 * side.volume_fraction:g} % by volume"
    if side.mass_fraction is not None:
        return f"{side.fluid} {100 * side.mass_fraction:g} % by mass"
    if side.fluid == "exhaust gas":
        return f"{side.fuel} exhaust"
    return "fluid of the table" if side.fluid == "table" else side.fluid


def _energy_path(case: Case, answer: Estimate) -> list[str]:
    """Lines from the hot side's heat to what is left at the end."""
    heat = answer.hot_heat_flow
    electrical = case.electrical
    rows = [
        ("heat from the hot side", heat),
        ("  lost to the surroundings", answer.lost_heat_flow),
        ("  past the modules", answer.bypass_heat_flow),
        ("  through the modules", answer.module_heat_flow),
        ("heat into the cold side", answer.cold_heat_flow),
        ("lost in leads and diodes", answer.lead_loss),
        ("generated at the terminals", answer.generated_power),
        ("  lost in the converter", answer.generated_power - answer.converted_power),
        ("  standby and auxiliaries", electrical.converter_standby_power + electrical.auxiliary_power),
        ("  hot drive", answer.hot_drive_power),
        ("  cold drive", answer.cold_drive_power),
        ("net", answer.net_power),
    ]
    kept = [(name, value) for name, value in rows if not name.startswith((" ", "lost")) or abs(value) > 0]
    return table(
        ("", "", "of the heat"),
        [(f"{name:28}", _q(value, "power"), _percent(value / heat) if heat else "-") for name, value in kept],
    )


def _electrical(case: Case, answer: Estimate) -> list[str]:
    within = " within the converter's window" if case.electrical.converter_window else ""
    a_module = _q(answer.generated_power / answer.module_count, "power")
    lines = [
        (
            "power",
            f"{_q(answer.maximum_power, 'power', 4)} at the true maximum{within}, "
            f"{_q(answer.matched_load_power, 'power', 4)} at matched load",
        )
    ]
    if math.isfinite(answer.voltage):
        lines += [
            ("terminals", f"{_q(answer.voltage, 'voltage')}, {_q(answer.current, 'current')}"),
            (
                "resistance",
                f"internal {_q(answer.internal_resistance, 'resistance')}, no load"
                if not math.isfinite(answer.load_resistance)
                else f"load {_q(answer.load_resistance, 'resistance')}, internal "
                f"{_q(answer.internal_resistance, 'resistance')}, ratio {answer.load_ratio:.3g}",
            ),
            (
                "without load",
                f"{_q(answer.open_circuit_voltage, 'voltage')} settled; emf at this load "
                f"{_q(answer.operating_emf, 'voltage')}",
            ),
        ]
    lines += [
        ("a module", f"{a_module} at this load"),
        ("mismatch", f"{_percent(answer.mismatch_loss)} of the power lost against every row with a load of its own"),
        (
            "efficiency",
            f"{_percent(answer.module_efficiency)} of the modules' heat, {_percent(answer.conversion_efficiency)} of "
            f"all heat; Carnot between the inlets {_percent(answer.carnot_efficiency, 1)}",
        ),
    ]
    return pairs(lines)


def _temperatures(answer: Estimate) -> list[str]:
    """Table of the temperatures along the hot stream, at most a few rows of it."""
    rows = answer.rows
    count = len(rows.current)
    shown = (
        range(count)
        if count <= MOST_ROWS_SHOWN
        else [round(i * (count - 1) / (MOST_ROWS_SHOWN - 1)) for i in range(MOST_ROWS_SHOWN)]
    )
    celsius = (
        rows.hot_stream_temperature,
        rows.hot_face_temperature,
        rows.hot_junction_temperature,
        rows.cold_junction_temperature,
        rows.cold_face_temperature,
        rows.cold_stream_temperature,
    )

    def number(value: float) -> str:
        return "-" if not math.isfinite(value) else f"{value:,.0f}"

    lines = [
        [
            f"{i + 1}",
            *(f"{column[i] - 273.15:.1f}" for column in celsius),
            f"{rows.current[i]:.3g}",
            f"{rows.module_power[i]:.3g}",
            number(rows.hot_reynolds[i]),
            number(rows.cold_reynolds[i]),
        ]
        for i in shown
    ]
    header = (
        "row",
        "hot stream",
        "hot face",
        "junction",
        "junction",
        "cold face",
        "cold stream",
        "A",
        "W",
        "Re hot",
        "Re cold",
    )
    return [
        *table(header, lines),
        "  temperatures in degC; current and power of one module; row 1 is where the hot stream enters",
    ]


def _checks(checks: Sequence[Check]) -> list[str]:
    """Failures and warnings in full, what passed with its value and limit."""
    width = max(len(check.name) for check in checks)
    lines = []
    for status in reversed(STATUS_NAMES):
        for check in checks:
            if check.status == status:
                text = check.text if status != "pass" else _value_and_limit(check)
                lines.append(wrapped(f"  {MARKS[status]}  {check.name:{width}}  ", text))
    return lines


def _value_and_limit(check: Check) -> str:
    def text(number: float) -> str:
        if check.kind == "temperature":
            return _t(number)
        return f"{number:.3g}" if check.kind == "dimensionless" else _q(number, check.kind)

    return text(check.value) + (f", {check.bound} {text(check.limit)}" if math.isfinite(check.limit) else "")


def verdict(answer: Estimate) -> str:
    """One sentence on the answer."""
    failed = [check.name for check in answer.checks if check.status == "fail"]
    warned = [check.name for check in answer.checks if check.status == "warn"]
    worthless = ""
    if answer.net_power <= 0:
        nothing = answer.generated_power <= 0
        worthless = (
            "Nothing is generated at this load." if nothing else "Not worth it: driving it takes more than it gives."
        )
    if failed:
        return f"Not acceptable as it stands: {', '.join(failed)}. {worthless}".rstrip()
    if worthless:
        return worthless
    if warned:
        return f"Read the warnings before relying on it: {', '.join(warned)}."
    return "All checks pass."


def estimate_report(case: Case, answer: Estimate) -> str:
    """The report of one design."""
    heat = max(answer.hot_heat_flow, -answer.cold_heat_flow)
    where = "" if answer.hot_heat_flow >= 0 else ", which flows from the cold to the hot side"
    lines = [
        title(case),
        "=" * min(len(title(case)), WIDTH),
        "",
        f"Net power {_q(answer.net_power, 'power')} from {_q(heat, 'power')} of heat"
        f"{f' ({_percent(answer.net_power / heat)})' if heat else ''}{where}; load: {case.electrical.load}.",
        wrapped("", stack_sentence(case, answer) + "."),
        wrapped("", verdict(answer)),
        heading("Where the energy goes"),
        *_energy_path(case, answer),
        heading("Electrical"),
        *_electrical(case, answer),
        heading("Streams"),
        *_streams(case, answer),
        heading("Along the stack"),
        *_temperatures(answer),
        heading("To build"),
        *pairs(_to_build(answer)),
        *([heading("Cost"), *pairs(cost_lines(case, answer))] if case.cost is not None else []),
        heading("Checks"),
        *_checks(answer.checks),
        heading("Assumed, because not given"),
        *(_assumption_lines(case) or ["  nothing that matters"]),
        heading("Sources"),
        *(wrapped("  ", one_line(source, 300), rest="    ") for source in answer.sources),
        heading("Cautions"),
        *(wrapped("  - ", text) for text in cautions(case, answer)),
        "",
        f"harvest {VERSION}, case {answer.case_hash[:12]}",
    ]
    return "\n".join(lines)


def _to_build(answer: Estimate) -> list[tuple[str, str]]:
    ends = f" and {answer.cold_end_duct_count:.0f} of half height at the ends" if answer.cold_end_duct_count else ""
    size = " x ".join(
        _q(value, "length")
        for value in (answer.stack_length, answer.stack_width, answer.stack_height)
        if math.isfinite(value)
    )
    sides = "length x width x height" if math.isfinite(answer.stack_height) else "length x width"
    lines = [
        ("ducts", f"{answer.hot_duct_count:.0f} hot, {answer.cold_duct_count:.0f} cold{ends}"),
        ("size", f"{size} ({sides}, headers and frame not included)"),
    ]
    if math.isfinite(answer.module_mass):
        lines.append(("mass", f"{_q(answer.module_mass, 'mass')} of modules, without ducts and frame"))
    return lines


def _assumption_lines(case: Case) -> list[str]:
    return [
        wrapped("  ", f"{item.path} = {item.value}" + (f": {item.reason}" if item.reason else ""), rest="      ")
        for item in assumptions(case)
    ]


def check_report(case: Case) -> str:
    """What a case says, and what is assumed."""
    given, of_record = [], []
    for path, declaration in DECLARATIONS.items():
        value = value_at(case, path)
        if declaration.section is not None or value is None or path.startswith(("size.", "sweep.", "uncertainty")):
            continue
        line = wrapped(f"  {path} = ", display(value, declaration), rest="      ")
        if typed_at(case.given, path) is not None:
            given.append(line)
        elif path.startswith("module.") and path not in case.assumed and value != declaration.default:
            of_record.append(line)
    lines = [title(case), "", "The case is well formed. Given:", *given]
    if case.module.use:
        lines += ["", f"From the module record {one_line(case.module.use)}:", *of_record]
    lines += ["", "Assumed, because not given:", *(_assumption_lines(case) or ["  nothing that matters"])]
    return "\n".join([*lines, "", f"case {case_hash(case)[:12]}; nothing was computed"])


def field_list() -> str:
    """All fields of a case file, one line each."""
    width = max(len(path) for path, declaration in DECLARATIONS.items() if declaration.section is None)
    lines = []
    for path, declaration in DECLARATIONS.items():
        if declaration.section is not None:
            lines.append(f"\n[{path}]  {declaration.meaning}")
        else:
            lines.append(wrapped(f"  {path:{width}}  ", declaration.meaning.split("; ")[0]))
    return "\n".join(lines).strip("\n")


def fluid_report(sheet: FluidSheet) -> str:
    """A fluid's properties as a table with range and source."""
    facts = [
        ("served", f"{_t(sheet.lower_limit)} ({sheet.lower_reason}) to {_t(sheet.upper_limit)} ({sheet.upper_reason})"),
        ("freezes", _t(sheet.freezing)),
        ("boils", _t(sheet.boiling)),
        ("water dew point", _t(sheet.water_dew_point)),
        ("molar mass", f"{1e3 * sheet.molar_mass:.2f} g/mol"),
        ("source", sheet.source),
    ]
    shown = [(name, value) for name, value in facts if not value.startswith(("-", "nan")) or value[1:2].isdigit()]
    header = ("degC", "density", "heat capacity", "viscosity", "conductivity", "Prandtl")
    rows = [
        (
            f"{sheet.temperature[i] - 273.15:.1f}",
            f"{_q(sheet.density[i], 'density', 4)}",
            f"{sheet.heat_capacity[i]:.1f} J/(kg K)",
            f"{sheet.viscosity[i] * 1e3:.4g} mPa s",
            f"{sheet.conductivity[i]:.4g} W/(m K)",
            f"{sheet.prandtl[i]:.3g}",
        )
        for i in range(len(sheet.temperature))
    ]
    title = f"{sheet.label} at {_q(sheet.pressure, 'pressure', 6)}"
    return "\n".join([title, "", *table(header, rows), "", *(wrapped(f"  {name:16}", value) for name, value in shown)])
