"""What a memo of a case holds: everything that templates can name, each with its meaning."""
# ruff: noqa: RUF009 - `told` returns dataclasses.field(...), which is no shared default

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from harvest.model.case import DECLARATIONS
from harvest.model.case_fields import Declaration
from harvest.model.results import ROW_RESULTS, SCALARS
from harvest.report.memo.values import CodeText, Drawing, Group, Known, Said, Value, known_in, known_numbers, told

OF_STUDIES = ("size", "sweep", "duty", "uncertainty")
"""Sections of the case that tell what a study varies, and nothing of the design."""


@dataclass(frozen=True)
class CheckLine:
    """One check of the estimate."""

    name: str = told("Name of the check.")
    value: Value = told("What was found.", unit="SI")
    bound: str = told("Side of the limit on which the value should be: at most or at least.")
    limit: Value = told("The limit; not known where the check has none.", unit="SI")
    margin: Value = told("Distance to the limit, negative beyond it.", unit="SI")
    status: str = told("pass, warn or fail.")
    sentence: Said = told("What the check says.")


@dataclass(frozen=True)
class Counts:
    """How many checks came out how."""

    failed: Value = told("Failed checks.", unit="1")
    warned: Value = told("Checks that warn.", unit="1")
    passed: Value = told("Checks that pass.", unit="1")


@dataclass(frozen=True)
class InputLine:
    """One field of the case."""

    path: str = told("Name of the field in the case file.")
    meaning: str = told("What the field is.")
    given: str = told("As it was written, empty where it was not.")
    values: tuple[Value | str, ...] = told("In SI, one or more numbers or words.", many=True)
    mark: str = told("given, default or derived.")
    reason: str = told("Why the default is what it is, where that matters.")


@dataclass(frozen=True)
class InputSection:
    """Fields of one section of the case."""

    name: str = told("Name of the section in the case file.")
    meaning: str = told("What the section is about.")
    fields: tuple[InputLine, ...] = told("Its fields.", of=InputLine, many=True)


@dataclass(frozen=True)
class StreamLine:
    """One side of the stack."""

    name: str = told("hot or cold.")
    fluid: str = told("Fluid with its composition.")
    mass_flow: Value = told("Mass flow.", unit="kg/s")
    inlet: Value = told("Inlet temperature.", unit="K")
    outlet: Value = told("Outlet temperature.", unit="K")
    velocity: Value = told("Velocity in the ducts at the inlet.", unit="m/s")
    pressure_drop: Value = told("Pressure drop.", unit="Pa")
    drive: str = told("What drives it: pump, fan, engine, free head, or still air.")
    drive_power: Value = told("Power that drives it.", unit="W")


@dataclass(frozen=True)
class EnergyLine:
    """One step of the energy's path."""

    name: str = told("What the power is.")
    part: bool = told("Whether it is a part of the line before.")
    value: Value = told("The power.", unit="W")
    share: Value = told("Its share of the heat from the hot side.", unit="1")


@dataclass(frozen=True)
class AssumptionLine:
    """One default that matters."""

    path: str = told("Field of the case file.")
    value: Value | str = told("What was assumed, a number or words.")
    reason: str = told("Why.")


@dataclass(frozen=True)
class FileLine:
    """A file that the case names."""

    name: str = told("Its path, from the folder of the case where it lies inside.")
    text: CodeText = told("Its text, as a block of lines.")


@dataclass(frozen=True)
class SizeContents:
    """How the number of modules was judged."""

    given: bool = told("Whether the case has a section [size]; else rows around the design were tried.")
    objective: str = told("What the best is best in, as in the case file.")
    tried: Value = told("Choices tried.", unit="1")
    module_count: Value = told("Modules of the best choice.", unit="1")
    rows: Value = told("Rows of the best choice.", unit="1")
    columns: Value = told("Columns of the best choice.", unit="1")
    layers: Value = told("Layers of the best choice.", unit="1")
    net_power: Value = told("Net power of the best choice.", unit="W")
    fewest_within_5_percent: Value = told("Fewest modules within 5 % of the most net power.", unit="1")
    last_module_power: Value = told("What the last module of the best choice adds.", unit="W")
    at_bound: bool = told("Whether the best lies at an end of what was tried.")
    failed: str = told("Names of the checks that the best choice fails; empty where there is none.")
    warned: str = told("Names of the checks that warn of the best choice; empty where there is none.")


@dataclass(frozen=True)
class Costs:
    """What the design costs by the prices of the case; amounts are in its currency."""

    currency: str = told("Currency of the prices.")
    building: Value = told("Cost of building.", unit="1")
    per_net_watt: Value = told("Cost of building over net power, a watt.", unit="1")
    per_kilowatt_hour: Value = told("Cost of a net kilowatt-hour.", unit="1")
    payback_years: Value = told("Years after which electricity has paid the cost back.", unit="1")
    payback: Said = told("Payback in words, or why it cannot be told.")


@dataclass(frozen=True)
class InputDoubt:
    """One field that is not known exactly."""

    field: str = told("Field of the case file.")
    meaning: str = told("What the field is.")
    nominal: Value = told("Its value.", unit="SI")
    tolerance: Said = told("How far it may be off.")
    origin: str = told("given in the case, or default.")
    source: str = told("Where a default tolerance is from.")
    first_order: Value = told("Share of the variance of net power that it brings alone.", unit="1")
    total: Value = told("Its share with all its interactions.", unit="1")
    swing: Value = told("Change of net power from its 10th to its 90th percentile.", unit="W")
    narrowing: Value = told("By how much the band would be narrower if it were known exactly.", unit="1")
    how: str = told("How it can be measured; empty where that is not told.")


@dataclass(frozen=True)
class LimitDoubt:
    """How likely a limit is broken."""

    limit: str = told("Name of the limit, and on which side of it a result must be.")
    value: Value = told("The limit.", unit="SI")
    chance: Value = told("Share of the cases in which it is broken.", unit="1")


@dataclass(frozen=True)
class DoubtContents:
    """How sure the net power is."""

    p5: Value = told("Net power that 5 of 100 cases stay below.", unit="W")
    p10: Value = told("Net power that 10 of 100 cases stay below.", unit="W")
    p50: Value = told("Net power that half of the cases stay below.", unit="W")
    p90: Value = told("Net power that 90 of 100 cases stay below.", unit="W")
    p95: Value = told("Net power that 95 of 100 cases stay below.", unit="W")
    chance_negative: Value = told("Share of the cases with a net power below zero.", unit="1")
    samples: Value = told("Cases drawn.", unit="1")
    valid: Value = told("Cases drawn that have an answer.", unit="1")
    index_cases: Value = told("Further cases for the sensitivity indices.", unit="1")
    seed: Value = told("Seed of the sequence.", unit="1")
    inputs: tuple[InputDoubt, ...] = told("Fields in doubt, those that matter most first.", of=InputDoubt, many=True)
    most: tuple[InputDoubt, ...] = told("Those of them that bring more than a trace.", of=InputDoubt, many=True)
    measure: tuple[InputDoubt, ...] = told("Those of them that are worth measuring.", of=InputDoubt, many=True)
    limits: tuple[LimitDoubt, ...] = told("Limits, at the chosen load or without load.", of=LimitDoubt, many=True)


@dataclass(frozen=True)
class Drawings:
    """Drawings, each None where it does not apply."""

    stack: Drawing = told("The stack to scale, with flows and temperatures.")
    energy: Drawing | None = told("The path of the energy.", optional=True)
    temperatures: Drawing = told("Temperatures along the hot stream.")
    count: Drawing | None = told("Power against the number of modules.", optional=True)
    distribution: Drawing | None = told("Net powers of the cases drawn.", optional=True)
    sensitivity: Drawing | None = told("What each field in doubt does to the net power.", optional=True)


def known_fields() -> dict[str, Known]:
    """Fields of the case by section, as templates name them."""
    known: dict[str, Any] = {}
    for path, declaration in DECLARATIONS.items():
        *parents, name = path.split(".")
        if declaration.form == "tables" or path.partition(".")[0] in OF_STUDIES:
            continue
        inside = known
        for parent in parents:
            inside = inside.setdefault(parent, Known("", inside={})).inside
        if declaration.section is not None:
            inside[name] = Known(declaration.meaning, inside={})
        elif is_number(declaration):
            inside[name] = known_numbers({name: {"kind": declaration.kind, "meaning": declaration.meaning}})[name]
        else:
            inside[name] = Known(declaration.meaning)
    return known


def is_number(declaration: Declaration) -> bool:
    """Whether a field is one number, which templates get as a value."""
    return declaration.form in ("quantity", "integer")


@dataclass(frozen=True)
class Contents:
    """Everything that templates of one case can name."""

    title: str = told("Title of the case.")
    date: str = told("Date of the memo.")
    version: str = told("Version of the program.")
    command: str = told("Command that wrote the memo.")
    case_hash: str = told("Digest of what the result depends on.")
    case_file: CodeText = told("The case file, as a block of lines.")
    files: tuple[FileLine, ...] = told(
        "Files that the case names: records of modules and materials, tables of fluids.", of=FileLine, many=True
    )
    verdict: str = told("The answer in one sentence.")
    arrangement: Said = told("Modules, layers, rows, columns and strings in one sentence.")
    load: str = told("Load of the stack.")
    case: Group = told("Fields of the case file, by section.", of=known_fields())
    estimate: Group = told("Results of the estimate.", of=known_numbers(SCALARS))
    rows: tuple[Group, ...] = told("Results row by row along the hot stream.", of=known_numbers(ROW_RESULTS), many=True)
    streams: tuple[StreamLine, ...] = told("The two sides.", of=StreamLine, many=True)
    energy: tuple[EnergyLine, ...] = told("The path of the energy.", of=EnergyLine, many=True)
    checks: tuple[CheckLine, ...] = told("All checks, the failed first.", of=CheckLine, many=True)
    failed: tuple[CheckLine, ...] = told("Failed checks.", of=CheckLine, many=True)
    warned: tuple[CheckLine, ...] = told("Checks that warn.", of=CheckLine, many=True)
    passed: tuple[CheckLine, ...] = told("Checks that pass.", of=CheckLine, many=True)
    counts: Counts = told("How many checks came out how.", of=Counts)
    inputs: tuple[InputSection, ...] = told("The case, section by section.", of=InputSection, many=True)
    assumptions: tuple[AssumptionLine, ...] = told("Defaults that matter.", of=AssumptionLine, many=True)
    not_modelled: tuple[str, ...] = told("What the method leaves out.", many=True)
    cautions: tuple[Said, ...] = told("What can hurt somebody or the equipment.", many=True)
    sources: tuple[str, ...] = told("Sources of properties and module data.", many=True)
    size: SizeContents | None = told("How the number of modules was judged.", of=SizeContents, optional=True)
    size_problem: Said | None = told("Why no choice of modules has an answer.", optional=True)
    costs: Costs | None = told("Costs, where the case has prices.", of=Costs, optional=True)
    doubt: DoubtContents | None = told("How sure the net power is.", of=DoubtContents, optional=True)
    drawings: Drawings = told("Drawings.", of=Drawings)


@dataclass(frozen=True)
class ComparedInput:
    """A field in which cases differ."""

    path: str = told("Field of the case file.")
    meaning: str = told("What the field is.")
    values: tuple[str, ...] = told("Its value in each case.", many=True)


@dataclass(frozen=True)
class ComparedResult:
    """A result of all cases."""

    meaning: str = told("What the result is.")
    values: tuple[Value, ...] = told("Its value in each case.", unit="SI", many=True)


@dataclass(frozen=True)
class Comparison:
    """Everything that templates of several cases can name."""

    title: str = told("Title: the cases by their letters.")
    date: str = told("Date of the memo.")
    version: str = told("Version of the program.")
    command: str = told("Command that wrote the memo.")
    letters: tuple[str, ...] = told("A letter for each case.", many=True)
    cases: tuple[Contents, ...] = told("The cases, each as in a memo of its own.", of=Contents, many=True)
    results: tuple[ComparedResult, ...] = told("Main results side by side.", of=ComparedResult, many=True)
    differences: tuple[ComparedInput, ...] = told("Fields that differ.", of=ComparedInput, many=True)


def known_contents(several: bool) -> dict[str, Known]:
    """What templates of one or of several cases can name."""
    return known_in(Comparison if several else Contents)
