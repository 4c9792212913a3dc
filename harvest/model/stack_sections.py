"""Sections of the case file about the stack, its module and its wiring."""
# ruff: noqa: RUF009 - the declaring functions return dataclasses.field(...), which is no shared default

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from harvest.model.case_fields import (
    MOST_ROWS,
    NOT_TO_ZERO,
    Curve,
    choice,
    integer,
    other,
    quantity,
    section,
    tables,
    text,
)
from harvest.model.loads import LOADS

SPREADINGS = {
    "constriction": "heat converging from the place to the footprint in the wall has a resistance",
    "none": "no resistance to spreading in the wall",
}
ROW_MODELS = {
    "exponential": "each stream approaches the row's wall exponentially; holds for any flow",
    "arithmetic": "the mean of inlet and outlet of a row; for many rows with little change in each",
}
EXTRACTIONS = {
    "Lineykin": "from current, voltage and temperature difference (Lineykin and Ben-Yaakov 2007)",
    "Zhang": "from current, heat and temperature difference (Zhang 2010); needs maximum_heat",
}
COOLER_MATERIALS = {
    "bismuth telluride": "parameters follow the bundled bismuth telluride from the rating to the operating temperature",
    "none": "parameters stay as rated, which flatters the result at higher temperatures",
}


@dataclass(frozen=True, kw_only=True)
class Stack:
    """Arrangement of the modules and what lies between them and the ducts."""

    layers: int = integer("Module layers in parallel.", minimum=1, maximum=MOST_ROWS)
    rows: int = integer("Modules along the flow in one layer.", minimum=1, maximum=MOST_ROWS)
    columns: int = integer("Modules across the flow in one layer.", minimum=1, maximum=MOST_ROWS)
    row_pitch: float = quantity("length", "Distance from row to row, along the flow.", above=0.0, maximum=10.0)
    column_pitch: float = quantity(
        "length", "Distance from column to column, across the flow.", above=0.0, maximum=10.0
    )
    hot_interface: float = quantity(
        "areal thermal resistance",
        "Resistance between hot wall and module, per module footprint.",
        default=0.0,
        reason=NOT_TO_ZERO,
        minimum=0.0,
        maximum=1.0,
    )
    cold_interface: float = quantity(
        "areal thermal resistance",
        "Resistance between module and cold wall, per module footprint.",
        default=0.0,
        reason=NOT_TO_ZERO,
        minimum=0.0,
        maximum=1.0,
    )
    filler_conductance: float = quantity(
        "film coefficient",
        "Conductance from hot to cold wall per plate area that no module covers.",
        default=0.0,
        reason=NOT_TO_ZERO,
        minimum=0.0,
        maximum=1e6,
    )
    spreading: str = choice(
        SPREADINGS, "Resistance of the heat that spreads in the walls from place to footprint.", default="constriction"
    )
    row_model: str = choice(ROW_MODELS, "How a stream changes along one row.", default="exponential")
    segments: int = integer(
        "Segments of equal current into which each row is split.", default=1, minimum=1, maximum=1000
    )
    heat_loss_conductance: float = quantity(
        "film coefficient",
        "Conductance from the hot ducts to the surroundings, per plate area of the hot ducts.",
        default=0.0,
        reason="no loss to the surroundings unless given",
        minimum=0.0,
        maximum=1e4,
    )
    clamp_pressure: float = quantity(
        "pressure difference",
        "Pressure on the modules' faces by which the stack is clamped.",
        default=1e6,
        reason="common practice, no source",
        minimum=0.0,
        maximum=1e8,
    )


@dataclass(frozen=True, kw_only=True)
class Legs:
    """The module built up from its legs: n and p couples electrically in series, thermally in parallel."""

    couples: int = integer("Couples of one n and one p leg.", minimum=1, maximum=100_000)
    length: float = quantity("length", "Length of a leg between its junctions.", symbol="L", above=0.0, maximum=0.1)
    area: float = quantity("area", "Cross section of one leg.", symbol="A", above=0.0, maximum=0.01)
    n_material: str = other("file", "Material of the n leg: a bundled name or the path of a record.", kind="materials")
    p_material: str = other("file", "Material of the p leg: a bundled name or the path of a record.", kind="materials")
    contact_resistivity: float = quantity(
        "contact resistivity",
        "Electrical resistance times area of one contact; each leg has two.",
        default=0.0,
        reason=NOT_TO_ZERO,
        minimum=0.0,
        maximum=1e-4,
    )
    substrate_thickness: float = quantity(
        "length",
        "Thickness of one substrate; the module has two.",
        default=0.0,
        reason="substrates without thermal resistance",
        minimum=0.0,
        maximum=0.1,
    )
    substrate_conductivity: float | None = quantity(
        "conductivity", "Thermal conductivity of the substrates; needed with a thickness.", default=None, above=0.0
    )
    gap_filler: float = quantity(
        "conductivity",
        "Thermal conductivity of what fills the room between the legs.",
        default=0.0,
        reason="no heat between the legs, which flatters the result",
        minimum=0.0,
        maximum=100.0,
    )


@dataclass(frozen=True, kw_only=True)
class CoolerRating:
    """Ratings of a single-stage cooler that is to generate."""

    maximum_current: float = quantity(
        "current", "Current at the largest temperature difference.", symbol="I_max", above=0.0, maximum=1e5
    )
    maximum_voltage: float = quantity(
        "voltage", "Voltage at the largest temperature difference.", symbol="V_max", above=0.0, maximum=1e5
    )
    maximum_temperature_difference: float = quantity(
        "temperature difference",
        "Largest temperature difference that the cooler reaches without heat.",
        symbol="dT_max",
        above=0.0,
        maximum=1000.0,
    )
    maximum_heat: float | None = quantity(
        "power",
        "Heat pumped without a temperature difference at the maximum current; compared with the other three ratings.",
        symbol="Q_max",
        default=None,
        above=0.0,
        maximum=1e6,
    )
    hot_side_temperature: float = quantity(
        "temperature", "Temperature of the hot side at which the ratings were taken.", minimum=200.0, maximum=600.0
    )
    extraction: str = choice(EXTRACTIONS, "Which ratings the parameters are taken from.", default="Lineykin")
    temperature_dependence: str = choice(
        COOLER_MATERIALS,
        "What is laid over the parameters from the rating to the operating temperature.",
        default="bismuth telluride",
        reason="the common material of coolers",
    )


@dataclass(frozen=True, kw_only=True)
class GeneratorRating:
    """One rated point of a generator at a matched load."""

    hot_face_temperature: float = quantity("temperature", "Temperature of the hot face.", minimum=1.0, maximum=5000.0)
    cold_face_temperature: float = quantity("temperature", "Temperature of the cold face.", minimum=1.0, maximum=5000.0)
    matched_power: float | None = quantity(
        "power", "Power into a load of the module's own resistance.", default=None, above=0.0, maximum=1e6
    )
    matched_voltage: float | None = quantity(
        "voltage", "Voltage at the matched load.", default=None, above=0.0, maximum=1e6
    )
    matched_current: float | None = quantity(
        "current", "Current at the matched load.", default=None, above=0.0, maximum=1e6
    )
    open_circuit_voltage: float | None = quantity(
        "voltage", "Voltage without load at these face temperatures.", default=None, above=0.0, maximum=1e6
    )
    internal_resistance: float | None = quantity(
        "resistance", "Resistance of the module at these face temperatures.", default=None, above=0.0, maximum=1e9
    )
    efficiency: float | None = quantity(
        "dimensionless",
        "Power over heat into the hot face at the matched load; it gives the conductance.",
        default=None,
        above=0.0,
        maximum=1.0,
    )
    heat_flow: float | None = quantity(
        "power",
        "Heat into the hot face at the matched load, instead of efficiency.",
        default=None,
        above=0.0,
        maximum=1e9,
    )


def _factor(parameter: str) -> Any:
    return quantity(
        "dimensionless",
        f"Factor on the {parameter} that the module's data give: to fit a measurement, or to be in doubt about.",
        default=1.0,
        above=0.0,
        maximum=100.0,
    )


@dataclass(frozen=True, kw_only=True)
class Module:
    """One thermoelectric module."""

    use: str | None = other(
        "file",
        "A module record: a bundled name, or a path from the case file. Fields beside it go before the record's.",
        kind="modules",
        default=None,
        descriptive=True,
    )
    footprint: tuple[float, float] = other(
        "pair",
        'Size of the module\'s faces along and across the flow, such as ["40 mm", "40 mm"].',
        kind="length",
        above=0.0,
        maximum=10.0,
    )
    thickness: float | None = quantity(
        "length", "Height of the module between its outer faces.", default=None, above=0.0, maximum=1.0
    )
    mass: float | None = quantity("mass", "Mass of one module.", default=None, above=0.0, maximum=1000.0)
    seebeck: Curve | None = other(
        "curve", "Seebeck coefficient of the whole module.", kind="Seebeck coefficient", symbol="a", default=None
    )
    resistance: Curve | None = other(
        "curve",
        "Electrical resistance of the whole module, contacts included.",
        kind="resistance",
        symbol="R",
        default=None,
        above=0.0,
    )
    conductance: Curve | None = other(
        "curve",
        "Thermal conductance of the whole module without current.",
        kind="conductance",
        symbol="K",
        default=None,
        above=0.0,
    )
    seebeck_factor: float = _factor("Seebeck coefficient")
    resistance_factor: float = _factor("electrical resistance")
    conductance_factor: float = _factor("thermal conductance")
    couples: int | None = integer(
        "Couples in the module, to judge the Seebeck coefficient per couple.", default=None, minimum=1, maximum=100_000
    )
    minimum_temperature: float | None = quantity(
        "temperature", "Lowest temperature at which the parameters hold.", default=None, minimum=1.0, maximum=5000.0
    )
    maximum_temperature: float | None = quantity(
        "temperature", "Highest temperature at which the parameters hold.", default=None, minimum=1.0, maximum=5000.0
    )
    maximum_hot_face_temperature: float | None = quantity(
        "temperature", "Highest temperature the hot face bears for long.", default=None, minimum=1.0, maximum=5000.0
    )
    description: str = text("What the module is.")
    source: str = text("Where the numbers come from.")
    legs: Legs | None = section(Legs, "The module from its materials and legs, instead of curves.", optional=True)
    cooler_rating: CoolerRating | None = section(
        CoolerRating, "The module from the ratings of a single-stage cooler, instead of curves.", optional=True
    )
    generator_rating: tuple[GeneratorRating, ...] | None = tables(
        GeneratorRating,
        "The module from its ratings as a generator, instead of curves: a table [[module.generator_rating]] for each "
        "rated point. Two of power, voltage, current, open-circuit voltage and resistance determine a point; more are "
        "reconciled by least squares. Points at different mean temperatures give straight lines in temperature.",
    )
    figure_of_merit: float | None = quantity(
        "dimensionless",
        "Z T at the mean face temperature, for generator ratings of which no point gives efficiency or heat_flow.",
        default=None,
        above=0.0,
    )


@dataclass(frozen=True, kw_only=True)
class Electrical:
    """Wiring, load and converter."""

    load: str = choice(
        LOADS,
        "What the terminals are connected to.",
        default="maximum power",
        reason=("a converter that finds the maximum"),
    )
    load_resistance: float | None = quantity(
        "resistance",
        "Resistance of the load at the stack's terminals.",
        above=0.0,
        maximum=1e9,
        applies=("load", ("fixed resistance",)),
    )
    load_voltage: float | None = quantity(
        "voltage",
        "Voltage that is held at the stack's terminals.",
        minimum=0.0,
        maximum=1e6,
        applies=("load", ("fixed voltage",)),
    )
    strings_across: int = integer(
        "Parallel strings across the width of one layer; divides the columns.",
        default=1,
        minimum=1,
        maximum=MOST_ROWS,
    )
    row_blocks: tuple[int, ...] | None = other(
        "integers",
        "Rows of each block along the flow, such as [4, 4, 4]; each block is a string of its own.",
        default=None,
        minimum=1,
        maximum=MOST_ROWS,
    )
    layers_in_series: int = integer(
        "Layers connected in series to one string; divides the layers.", default=1, minimum=1, maximum=MOST_ROWS
    )
    independent: bool = other(
        "boolean",
        "Whether each string has a converter of its own, an upper bound; otherwise all are in parallel.",
        default=False,
    )
    converter_efficiency: float = quantity(
        "dimensionless",
        "Power out over power in of the converter.",
        default=1.0,
        reason="no loss in a converter unless given",
        above=0.0,
        maximum=1.0,
    )
    converter_window: tuple[float, float] | None = other(
        "pair",
        'Lowest and highest input voltage of the converter, such as ["18 V", "60 V"].',
        kind="voltage",
        default=None,
        minimum=0.0,
        maximum=1e6,
    )
    converter_standby_power: float = quantity(
        "power", "Power that the converter takes always.", default=0.0, minimum=0.0, maximum=1e9
    )
    lead_resistance: float = quantity(
        "resistance", "Resistance of the leads in series with each string.", default=0.0, minimum=0.0, maximum=1e6
    )
    blocking_diode_drop: float = quantity(
        "voltage", "Forward voltage of a blocking diode in each string.", default=0.0, minimum=0.0, maximum=100.0
    )
    auxiliary_power: float = quantity(
        "power",
        "Power for valves, controls and so on, taken from the net power.",
        default=0.0,
        minimum=0.0,
        maximum=1e9,
    )
