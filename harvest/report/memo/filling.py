"""What a memo of a case holds, filled in from the case and its results."""

from __future__ import annotations

import dataclasses
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from harvest.errors import InputError, NoAnswerError
from harvest.model.case import DECLARATIONS, Case, case_hash, display, selector_path, typed_at, value_at
from harvest.model.case_fields import Declaration
from harvest.model.case_text import bounded_text
from harvest.model.checks import STATUS_NAMES, Check
from harvest.model.results import ROW_RESULTS, SCALARS, Estimate
from harvest.model.stream_sections import HEAT_SINK
from harvest.model.study_sections import Size
from harvest.quantities import ENERGY_PRICE, EnergyPrice, StandardVolumeFlow, one_line
from harvest.report.cautions import cautions
from harvest.report.cost_sheet import payback_words
from harvest.report.documents import case_document, estimate_document, size_document
from harvest.report.doubt_sheet import LITTLE, MEASUREMENTS, MOST_INPUTS, doubt_document
from harvest.report.memo import drawings
from harvest.report.memo.contents import (
    OF_STUDIES,
    AssumptionLine,
    CheckLine,
    ComparedInput,
    ComparedResult,
    Comparison,
    Contents,
    Costs,
    Counts,
    DoubtContents,
    Drawings,
    EnergyLine,
    FileLine,
    InputDoubt,
    InputLine,
    InputSection,
    LimitDoubt,
    SizeContents,
    StreamLine,
    is_number,
    known_fields,
)
from harvest.report.memo.values import (
    CodeText,
    Group,
    Known,
    Said,
    Value,
    scalars_of,
    typographic,
    usual_digits,
)
from harvest.report.terminal import fluid_words, stack_sentence, title, verdict
from harvest.study.doubt import Doubt, doubt
from harvest.study.limits import limit_path
from harvest.study.size import Sizing, size
from harvest.version import VERSION

NOT_MODELLED = (
    "maldistribution of flow",
    "heat conduction along the plates",
    "headers and frame",
    "contact pressure's effect on interfaces",
    "temperature differences within a row's modules",
    "transients",
    "ageing",
)
POINTS_OF_CURVE = 20
LETTERS = ("A", "B", "C", "D", "E", "F", "G", "H")
"""Names of compared cases, as many as can be compared."""
LONGEST_GIVEN = 90
SMALLEST_WHOLE_AMOUNT = 100.0
"""Money from which no fractions are printed."""
IN_THE_CASE, IN_A_FILE = "as given, in the case file below", "as in the module's record below"
GIVEN, DEFAULT, DERIVED = "given", "default", "derived"


@dataclass(frozen=True)
class Computed:
    """What was computed for one case."""

    case: Case
    estimate: Estimate
    sizing: Sizing | str = ""
    doubt: Doubt | None = None

    def document(self) -> dict[str, Any]:
        """Results by the paths that numbers of a memo carry."""
        fields: dict[str, Any] = {}
        for path, value in case_document(self.case)["values"].items():
            *parents, name = path.split(".")
            inside = fields
            for parent in parents:
                inside = inside.setdefault(parent, {})
            inside[name] = value
        return {
            "case": fields,
            "estimate": estimate_document(self.estimate),
            "arrangement": stack_sentence(self.case, self.estimate),
            "counts": {
                status: sum(check.status == status for check in self.estimate.checks) for status in STATUS_NAMES
            },
            "cautions": cautions(self.case, self.estimate),
            "payback": None if self.case.cost is None else payback_words(self.case, self.estimate),
            "size": None if isinstance(self.sizing, str) else size_document(self.sizing),
            "size_problem": self.sizing if isinstance(self.sizing, str) else "",
            "doubt": None if self.doubt is None else doubt_document(self.doubt),
        }


def sizing_of(case: Case) -> Sizing | str:
    """Sizing by [size], or else over rows around the design; why there is none where no choice has an answer."""
    if case.size is None:
        rows = case.stack.rows
        around = np.linspace(1, max(2 * rows, 4), POINTS_OF_CURVE).round().astype(int).tolist()
        others: dict[str, Any] = dict.fromkeys(item.name for item in dataclasses.fields(Size))
        wanted = Size(**{**others, "rows": tuple(sorted({*around, rows})), "objective": "net power"})
        case = dataclasses.replace(case, size=wanted)
    try:
        return size(case)
    except NoAnswerError as error:
        return "; ".join(str(error).splitlines())


def doubt_of(case: Case) -> Doubt | None:
    """How sure the net power is; None where nothing is in doubt or no drawn case has an answer."""
    try:
        return doubt(case)
    except (InputError, NoAnswerError):
        return None


def contents(
    computed: Computed, *, date: str, command: str, source: str, prefix: str = "", letter: str = ""
) -> Contents:
    """Everything that templates of one case can name; in a comparison `prefix` begins paths, `letter` names it."""
    case, answer = computed.case, computed.estimate
    scalars = scalars_of(answer, f"{prefix}estimate")
    fields = _fields(case, f"{prefix}case")
    lines = [_check_line(check, f"{prefix}estimate.checks[{i}]") for i, check in enumerate(answer.checks)]
    by_status = {status: tuple(line for line in lines if line.status == status) for status in ("fail", "warn", "pass")}
    electricity = _electricity(case, scalars, fields)
    return Contents(
        title=title(case),
        date=date,
        version=VERSION,
        command=command,
        case_hash=case_hash(case),
        case_file=CodeText(_printable(source)),
        files=_files(case),
        verdict=verdict(answer),
        arrangement=Said(_sentence(stack_sentence(case, answer)), f"{prefix}arrangement"),
        load=case.electrical.load,
        case=fields,
        estimate=scalars,
        rows=_rows(answer, f"{prefix}estimate.rows"),
        streams=(_stream(case, scalars, fields, "hot"), _stream(case, scalars, fields, "cold")),
        energy=_energy(scalars, electricity),
        checks=(*by_status["fail"], *by_status["warn"], *by_status["pass"]),
        failed=by_status["fail"],
        warned=by_status["warn"],
        passed=by_status["pass"],
        counts=Counts(
            *(
                Value(float(len(by_status[status])), "dimensionless", f"{prefix}counts.{status}", style="whole")
                for status in ("fail", "warn", "pass")
            )
        ),
        inputs=_inputs(case, scalars, f"{prefix}case"),
        assumptions=_assumptions(case, f"{prefix}case"),
        not_modelled=NOT_MODELLED,
        cautions=tuple(
            Said(_sentence(text), f"{prefix}cautions[{i}]") for i, text in enumerate(cautions(case, answer))
        ),
        sources=tuple(one_line(source, 300) for source in answer.sources),
        size=_size(computed, f"{prefix}size"),
        size_problem=Said(_sentence(computed.sizing), f"{prefix}size_problem")
        if isinstance(computed.sizing, str) and computed.sizing
        else None,
        costs=_costs(case, answer, scalars, prefix),
        doubt=_doubt(computed.doubt, f"{prefix}doubt"),
        drawings=_drawings(computed, scalars, fields, electricity, f"{letter.lower()}-" if letter else ""),
    )


def _printable(text: str) -> str:
    """Text with its lines, without signs that are no text."""
    return "".join(sign if sign.isprintable() or sign == "\n" else " " for sign in text.replace("\r\n", "\n"))


def _files(case: Case) -> tuple[FileLine, ...]:
    """Files that a case names, each once; records and materials of the package are told by their names."""
    folder = case.folder.resolve()
    found: list[Path] = []
    for path, declaration in DECLARATIONS.items():
        value = value_at(case, path)
        if declaration.form == "file" and value is not None and Path(value).is_absolute():
            found.append(Path(value).resolve())
        elif declaration.form == "fluid table" and isinstance(named := typed_at(case.given, path), str):
            found.append((folder / named).resolve())
    return tuple(
        FileLine(
            one_line(str(file.relative_to(folder) if file.is_relative_to(folder) else file), 300),
            CodeText(_printable(bounded_text(file))),
        )
        for file in dict.fromkeys(found)
    )


def _fields(case: Case, path: str) -> Group:
    """Fields of the case as values, by section."""

    def group(known: Mapping[str, Known], before: str) -> Group:
        found: dict[str, Any] = {}
        for name, each in known.items():
            field = f"{before}{name}"
            declaration = DECLARATIONS[field]
            if declaration.section is not None:
                found[name] = group(each.inside or {}, f"{field}.")
            elif is_number(declaration):
                found[name] = _field_value(value_at(case, field), declaration, f"{path}.{field}")
            else:
                value = value_at(case, field)
                found[name] = "" if value is None else display(value, declaration)
        return Group(found)

    return group(known_fields(), "")


def _field_value(value: Any, declaration: Declaration, path: str, *, si: bool = False) -> Value:
    number = float(value) if isinstance(value, int | float) else math.nan
    if declaration.form == "integer":
        return Value(number, "dimensionless", path, style="whole")
    if si:
        return Value(number, declaration.kind, path, 6, "si")
    return Value(number, declaration.kind, path, 4)


def _check_line(check: Check, path: str) -> CheckLine:
    value = Value(check.value, check.kind, f"{path}.value", usual_digits(check.kind))
    limit = dataclasses.replace(value, raw=check.limit, path=f"{path}.limit")
    margin = limit.less(value) if check.bound == "at most" else value.less(limit)
    if margin.kind == "temperature difference":
        margin = dataclasses.replace(margin, digits=3)
    sentence = Said(_sentence(check.text), f"{path}.text")
    return CheckLine(check.name, value, check.bound, limit, margin, check.status, sentence)


def _sentence(text: str) -> str:
    """A sentence of a result with the signs of print."""
    plain = one_line(text, 600).replace("degC", "°C").replace(" x ", " × ").replace("+-", "±")
    return re.sub(r"(?<=[0-9] )(?:um|uV/K|[mk]?ohm)\b", lambda unit: typographic(unit[0]), plain)


def _rows(answer: Estimate, path: str) -> tuple[Group, ...]:
    """Results row by row."""

    def value(name: str, kind: str, row: int) -> Value:
        return Value(float(getattr(answer.rows, name)[row]), kind, f"{path}.{name}[{row}]", usual_digits(kind))

    return tuple(
        Group({name: value(name, each["kind"], row) for name, each in ROW_RESULTS.items()})
        for row in range(len(answer.rows.current))
    )


def _stream(case: Case, scalars: Group, fields: Group, name: str) -> StreamLine:
    side = getattr(case, name)
    drive = "still air at heat sinks" if side.duct.kind == HEAT_SINK else side.drive or ""
    return StreamLine(
        name,
        "reservoir" if side.fluid == "reservoir" else fluid_words(side),
        getattr(scalars, f"{name}_mass_flow"),
        getattr(fields, name).inlet_temperature,
        getattr(scalars, f"{name}_outlet_temperature"),
        getattr(scalars, f"{name}_velocity"),
        getattr(scalars, f"{name}_pressure_drop"),
        {"free": "free head"}.get(drive, drive),
        getattr(scalars, f"{name}_drive_power"),
    )


def _electricity(case: Case, scalars: Group, fields: Group) -> list[tuple[str, Value]]:
    """Power at the terminals, what is taken from it, and the net; parts that are nothing are left out."""
    electrical = fields.electrical
    taken = [
        ("lost in the converter", scalars.generated_power.less(scalars.converted_power)),
        ("converter standby", electrical.converter_standby_power),
        ("auxiliaries", electrical.auxiliary_power),
        ("back pressure" if case.hot.drive == "engine" else f"hot {case.hot.drive}", scalars.hot_drive_power),
        (f"cold {case.cold.drive}", scalars.cold_drive_power),
    ]
    kept = [(name, dataclasses.replace(value, digits=3)) for name, value in taken if abs(value.raw) > 0]
    return [("at the terminals", scalars.generated_power), *kept, ("net", scalars.net_power)]


def _energy(scalars: Group, electricity: list[tuple[str, Value]]) -> tuple[EnergyLine, ...]:
    heat = scalars.hot_heat_flow
    steps = [
        ("Heat from the hot side", False, heat),
        ("lost to the surroundings", True, scalars.lost_heat_flow),
        ("past the modules", True, scalars.bypass_heat_flow),
        ("through the modules", True, scalars.module_heat_flow),
        ("Heat into the cold side", False, scalars.cold_heat_flow),
        ("Lost in leads and diodes", False, scalars.lead_loss),
        ("Electricity at the terminals", False, electricity[0][1]),
        *((name, True, value) for name, value in electricity[1:-1]),
        ("Net power", False, electricity[-1][1]),
    ]
    always = ("Heat from the hot side", "Heat into the cold side", "Electricity at the terminals", "Net power")
    return tuple(
        EnergyLine(name, part, value, value.over(heat))
        for name, part, value in steps
        if name in always or abs(value.raw) > 0
    )


def _inputs(case: Case, scalars: Group, path: str) -> tuple[InputSection, ...]:
    """Fields that have a value, section by section, with what was derived from them."""
    sections: dict[str, list[InputLine]] = {}
    for field, declaration in DECLARATIONS.items():
        value = value_at(case, field)
        if declaration.section is not None or value is None or field == "title":
            continue
        if field.partition(".")[0] in OF_STUDIES:
            continue
        given = _given(case.given, field)
        if given is None and (declaration.descriptive or not _applies(case, field, declaration)):
            continue
        mark = GIVEN if given is not None else DERIVED if _of_record(case, field, declaration) else DEFAULT
        line = InputLine(
            field,
            declaration.meaning,
            given or "",
            _si_values(value, declaration, f"{path}.{field}") or (IN_A_FILE if mark == DERIVED else IN_THE_CASE,),
            mark,
            declaration.reason if mark == DEFAULT else "",
        )
        sections.setdefault(field.rpartition(".")[0], []).append(line)
    for side in ("hot", "cold"):
        flow = getattr(scalars, f"{side}_mass_flow")
        if flow.known and not any(line.path == f"{side}.mass_flow" for line in sections.get(side, [])):
            value = dataclasses.replace(flow, digits=6, style="si")
            meaning = SCALARS[f"{side}_mass_flow"]["meaning"].partition(";")[0].rstrip(".") + "."
            sections[side].append(InputLine(f"{side}.mass_flow", meaning, "", (value,), DERIVED, ""))
    return tuple(
        InputSection(name, DECLARATIONS[name].meaning.rstrip("."), tuple(lines)) for name, lines in sections.items()
    )


def _applies(case: Case, path: str, declaration: Declaration) -> bool:
    """Whether a field has a meaning in this case, by the field that selects it."""
    if declaration.applies is None:
        return True
    selector, allowed = declaration.applies
    return value_at(case, selector_path(path, selector)) in allowed


def _given(document: Any, path: str) -> str | None:
    """A field as it was written, in one line; None where it was not."""
    typed = typed_at(document, path)
    return None if typed is None else one_line(_written(typed), LONGEST_GIVEN)


def _written(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, list | tuple):
        return f"[{', '.join(_written(each) for each in value)}]"
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{name} = {_written(each)}" for name, each in value.items()) + " }"
    return str(value)


def _assumptions(case: Case, path: str) -> tuple[AssumptionLine, ...]:
    """Defaults that matter."""
    lines = []
    for field in case.assumed:
        declaration, value = DECLARATIONS[field], value_at(case, field)
        if declaration.reason:
            words: Value | str = display(value, declaration)
            if is_number(declaration) and isinstance(value, int | float):
                words = _field_value(value, declaration, f"{path}.{field}")
            lines.append(AssumptionLine(field, words, declaration.reason))
    return tuple(lines)


def _of_record(case: Case, path: str, declaration: Declaration) -> bool:
    """Whether a field comes from the module's record."""
    return path.startswith("module.") and path not in case.assumed and value_at(case, path) != declaration.default


def _si_values(value: Any, declaration: Declaration, path: str) -> tuple[Value | str, ...]:
    """A field in SI; nothing of a curve or a list of them, which stands where it was written."""
    if isinstance(value, tuple) and declaration.form in ("pair", "quantity", "integers", "integer"):
        return tuple(
            Value(float(each), declaration.kind, f"{path}[{i}]", 6, "si")
            for i, each in enumerate(value)
            if each is not None
        )
    if isinstance(value, int | float) and not isinstance(value, bool):
        return (_field_value(value, declaration, path, si=True),)
    if isinstance(value, StandardVolumeFlow):
        return (Value(value.volume_flow, "volume flow", f"{path}.volume_flow", 6, "si"), "at the reference")
    if isinstance(value, EnergyPrice):
        return (Value(value.amount, ENERGY_PRICE, f"{path}.amount", 6, "si"), f"in {one_line(value.currency)}")
    if declaration.form == "file":  # where a file lies is of this machine, and its content stands in the memo
        return (one_line(Path(value).name),)
    if declaration.form in ("choice", "boolean", "text"):
        return (display(value, declaration),)
    return ()


def _size(computed: Computed, path: str) -> SizeContents | None:
    found = computed.sizing
    if isinstance(found, str):
        return None

    def whole(number: float | None, name: str) -> Value:
        return Value(math.nan if number is None else float(number), "dimensionless", f"{path}.{name}", style="whole")

    best = found.arrangement
    return SizeContents(
        given=computed.case.size is not None,
        objective=found.objective,
        tried=whole(found.choices_tried, "choices_tried"),
        module_count=whole(best.module_count, "best.module_count"),
        rows=whole(best.rows_count, "best.rows_count"),
        columns=whole(best.columns_count, "best.columns_count"),
        layers=whole(best.layers_count, "best.layers_count"),
        net_power=Value(found.best.net_power, "power", f"{path}.best.net_power"),
        fewest_within_5_percent=whole(found.fewest_within_5_percent, "fewest_within_5_percent"),
        last_module_power=Value(found.last_module_power, "power", f"{path}.last_module_power", 2),
        at_bound=bool(found.at_bounds),
        failed=_names_of(found.best, "fail"),
        warned=_names_of(found.best, "warn"),
    )


def _names_of(answer: Estimate, status: str) -> str:
    """Names of the checks that came out so."""
    return ", ".join(check.name for check in answer.checks if check.status == status)


def _costs(case: Case, answer: Estimate, scalars: Group, prefix: str) -> Costs | None:
    if case.cost is None:
        return None
    many = scalars.building_cost.raw >= SMALLEST_WHOLE_AMOUNT
    return Costs(
        currency=one_line(answer.currency or "(currency)"),
        building=dataclasses.replace(scalars.building_cost, style="whole" if many else "quantity"),
        per_net_watt=scalars.cost_per_net_watt,
        per_kilowatt_hour=scalars.cost_per_kilowatt_hour,
        payback_years=scalars.payback_years,
        payback=Said(_sentence(payback_words(case, answer)), f"{prefix}payback"),
    )


def _doubt(found: Doubt | None, path: str) -> DoubtContents | None:
    if found is None:
        return None
    net = found.results["net_power"]

    def power(name: str) -> Value:
        return Value(getattr(net, name), "power", f"{path}.results.net_power.{name}")

    def whole(name: str) -> Value:
        return Value(float(getattr(found, name)), "dimensionless", f"{path}.{name}", style="whole")

    def share(number: float, name: str, digits: int = 2) -> Value:
        return Value(number, "dimensionless", f"{path}.{name}", digits, "percent")

    lines = tuple(
        InputDoubt(
            field=each.field,
            meaning=re.split("[;:]", DECLARATIONS[each.field].meaning)[0].rstrip("."),
            nominal=Value(each.nominal, each.kind, f"{path}.inputs[{i}].nominal", 4),
            tolerance=Said(each.tolerance.replace("+-", "±"), f"{path}.inputs[{i}].tolerance"),
            origin=each.origin,
            source=each.source,
            first_order=share(each.first_order, f"inputs[{i}].first_order"),
            total=share(each.total, f"inputs[{i}].total"),
            swing=Value(each.swing, "power", f"{path}.inputs[{i}].swing"),
            narrowing=share(each.band_narrowing, f"inputs[{i}].band_narrowing"),
            how=MEASUREMENTS.get(each.field.rpartition(".")[2], ""),
        )
        for i, each in enumerate(found.inputs)
    )
    return DoubtContents(
        **{name: power(name) for name in ("p5", "p10", "p50", "p90", "p95")},
        **{name: whole(name) for name in ("samples", "valid", "index_cases", "seed")},
        chance_negative=share(found.chance_negative, "chance_negative", 3),
        inputs=lines,
        most=tuple(line for line in lines[:MOST_INPUTS] if max(line.first_order.raw, line.total.raw) > LITTLE),
        measure=tuple(line for name in found.worth_measuring for line in lines if line.field == name),
        limits=tuple(
            LimitDoubt(
                f"{each.limit.replace('_', ' ')}, {each.bound}",
                Value(each.value, DECLARATIONS[limit_path(each.limit)].kind, f"{path}.limits[{i}].value", 4),
                share(each.chance, f"limits[{i}].chance", 3),
            )
            for i, each in enumerate(found.limits)
        ),
    )


def _drawings(
    computed: Computed, scalars: Group, fields: Group, electricity: list[tuple[str, Value]], prefix: str
) -> Drawings:
    case, answer, found = computed.case, computed.estimate, computed.sizing
    inlets = (fields.hot.inlet_temperature, fields.cold.inlet_temperature)
    count = None
    if not isinstance(found, str):
        design = (int(answer.module_count), answer.net_power)
        count = drawings.count_drawing(
            found.curve, design, (found.arrangement.module_count, found.arrangement.net_power)
        )
    return Drawings(
        stack=drawings.stack_drawing(case, answer, scalars, inlets, prefix),
        energy=drawings.energy_drawing(scalars, electricity, prefix),
        temperatures=drawings.temperature_drawing(case, answer, prefix),
        count=count,
        distribution=None if computed.doubt is None else drawings.distribution_drawing(computed.doubt),
        sensitivity=None if computed.doubt is None else drawings.sensitivity_drawing(computed.doubt),
    )


COMPARED = {
    "net_power": "net power",
    "generated_power": "electricity at the terminals",
    "hot_drive_power": "taken by the hot drive",
    "cold_drive_power": "taken by the cold drive",
    "module_count": "modules",
    "hot_heat_flow": "heat from the hot side",
    "conversion_efficiency": "electricity over this heat",
    "hot_outlet_temperature": "hot outlet",
    "cold_outlet_temperature": "cold outlet",
    "hottest_face_temperature": "hottest module face",
    "open_circuit_face_temperature": "hottest module face without load",
    "coolant_lost_face_temperature": "hottest module face if the coolant stops",
    "hot_pressure_drop": "hot pressure drop",
    "cold_pressure_drop": "cold pressure drop",
    "voltage": "voltage",
    "current": "current",
    "open_circuit_voltage": "voltage without load",
    "stack_length": "length along the flow",
    "stack_width": "width",
    "stack_height": "height",
    "module_mass": "mass of the modules",
}


def comparison(each: list[Contents], cases: list[Case], *, date: str, command: str) -> Comparison:
    """Everything that templates of several cases can name."""
    results = [
        ComparedResult(words, tuple(getattr(one.estimate, name) for one in each))
        for name, words in COMPARED.items()
        if any(getattr(one.estimate, name).known for one in each)
    ]
    differences = []
    for path, declaration in DECLARATIONS.items():
        if declaration.section is not None or path.partition(".")[0] in ("title", *OF_STUDIES):
            continue
        texts = [_compared(case, path, declaration) for case in cases]
        if len(set(texts)) > 1:
            differences.append(ComparedInput(path, declaration.meaning, tuple(texts)))
    return Comparison(
        title=f"Comparison of {len(cases)} designs",
        date=date,
        version=VERSION,
        command=command,
        letters=LETTERS[: len(cases)],
        cases=tuple(each),
        results=tuple(results),
        differences=tuple(differences),
    )


def _compared(case: Case, path: str, declaration: Declaration) -> str:
    given = _given(case.given, path)
    value = value_at(case, path)
    return given if given is not None else "–" if value is None else display(value, declaration)
