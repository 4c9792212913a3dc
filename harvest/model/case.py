"""The case: everything that describes one design, validated and frozen, in SI numbers.

Each field of the case file is declared once, here. Attribute names are the names in the file; a value that was not
given and has no default is None.
"""
# ruff: noqa: RUF009 - the declaring functions return dataclasses.field(...), which is no shared default

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, NamedTuple

from harvest.errors import InputError
from harvest.model.case_fields import (
    REQUIRED,
    Declaration,
    choice,
    integer,
    other,
    quantity,
    section,
    tables,
    text,
    walk,
)
from harvest.model.loads import LOADS
from harvest.physics import films, fluids
from harvest.quantities import (
    ENERGY_PRICE,
    KINDS,
    STANDARD_VOLUME_FLOW,
    EnergyPrice,
    StandardVolumeFlow,
    allowed_units,
    example_of,
    format_quantity,
    one_line,
    unit_of,
)

MOST_ROWS = 10_000
MOST_MODULES = 1_000_000

FLUIDS = {
    **{name: record.description for name, record in fluids.FLUIDS.items()},
    "reservoir": "no stream: a fixed temperature behind a film coefficient",
}
STREAMS = tuple(fluids.FLUIDS)
GLYCOLS = tuple(name for name, record in fluids.FLUIDS.items() if "volume_fraction" in record.takes)
GASES = tuple(name for name, record in fluids.FLUIDS.items() if record.is_gas)
DRIVES = {
    "free": "the head exists already and costs nothing",
    "pump": "power of a pump with its motor, by drive_efficiency",
    "fan": "power of a fan with its motor, by drive_efficiency",
    "engine": "back pressure costs shaft power, by swept_volume_flow and generator_efficiency",
}
DRIVE_POSITIONS = {
    "inlet": "ahead of the stack: it handles the fluid as it enters",
    "outlet": "behind the stack: it handles the fluid as it leaves, a cooled gas at T_out/T_in of the power",
}
PASSAGES = tuple(films.DUCT_KINDS)
RATED = "rated"
HEAT_SINK = "heat sink"
DUCT_KINDS = {
    **{name: kind.meaning for name, kind in films.DUCT_KINDS.items()},
    RATED: "bought blocks with rated curves of thermal resistance and pressure drop against flow",
    HEAT_SINK: "a sink in still room air on each module of the cold side; with a fan it is a duct of air",
}
RATED_FLUIDS = {
    "own": "the fluid of this side",
    "water": "water",
    "air": "air at 101.325 kPa",
}
REFERENCES = {
    "inlet": "wall to inlet temperature of the fluid, over the heat",
    "mean": "wall to mean of inlet and outlet temperature of the fluid, over the heat",
}
FINNED = ("plain fins", "offset strip fins")
ENTRANCES = {
    "fully developed": "entrance effects left out, which never flatters the film",
    "developing": "mean film coefficient with the thermal entrance; friction is not raised",
}
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

_STREAM = ("fluid", STREAMS)
_EXHAUST = ("fluid", ("exhaust gas",))
_FIN = ("kind", FINNED)
_ENGINE = ("drive", ("engine",))
_MACHINE = ("drive", ("pump", "fan"))
_PASSAGE = ("kind", PASSAGES)
_CONNECTED = ("kind", (*PASSAGES, RATED))
_RATED = ("kind", (RATED,))
_SINK = ("kind", (HEAT_SINK,))

NOT_TO_ZERO = "none unless given, which flatters the result"


@dataclass(frozen=True)
class Curve:
    """A module parameter against mean temperature.

    kind "polynomial": `values` are coefficients in (T - 300 K), lowest power first, `temperatures` is empty;
    kind "table": `values` at `temperatures` [K], ascending.
    """

    kind: str
    values: tuple[float, ...]
    temperatures: tuple[float, ...] = ()


@dataclass(frozen=True)
class FlowCurve:
    """A quantity against volume flow: rising `flows` [m^3/s] and `values` [SI] of the points."""

    flows: tuple[float, ...]
    values: tuple[float, ...]


FluidRows = tuple[tuple[float, float, float, float, float], ...]


@dataclass(frozen=True, kw_only=True)
class Site:
    """Where the stack stands."""

    ambient_pressure: float = quantity(
        "pressure",
        "Absolute pressure of the surroundings: what gauge pressures add to, and the default pressure of the sides.",
        symbol="p_a",
        default=101325.0,
        reason="standard atmosphere",
        above=0.0,
        maximum=2e5,
    )
    ambient_temperature: float = quantity(
        "temperature",
        "Temperature of the surroundings, to which the stack loses heat.",
        symbol="T_a",
        default=293.15,
        reason="common practice, no source",
        minimum=180.0,
        maximum=373.15,
    )
    heat_value: EnergyPrice | None = other(
        "energy price",
        "Worth of the hot stream's heat to somebody who uses it as heat; a screening compares with it.",
        kind=ENERGY_PRICE,
        default=None,
        descriptive=True,
    )
    electricity_value: EnergyPrice | None = other(
        "energy price",
        "Worth of generated electricity, in the currency of heat_value.",
        kind=ENERGY_PRICE,
        default=None,
        descriptive=True,
    )
    yearly_operation: float = quantity(
        "duration",
        "Time in a year in which the streams flow, for the worth of a year; unless given, common practice, no source.",
        default=2.88e7,
        above=0.0,
        maximum=3.16224e7,
        descriptive=True,
    )


@dataclass(frozen=True, kw_only=True)
class Duct:
    """Ducts of one side: the passages that carry the stream along the plates."""

    kind: str | None = choice(DUCT_KINDS, "Shape of the duct's inside.", default="smooth", applies=_STREAM)
    gap: float | None = quantity(
        "length", "Clear height of the duct between its plates.", symbol="b", above=0.0, maximum=10.0, applies=_PASSAGE
    )
    faces: int = integer(
        "Layers that one duct serves: 1, or 2 for a duct between two layers.", default=1, minimum=1, maximum=2
    )
    wall_thickness: float = quantity(
        "length",
        "Thickness of the wall between stream and module interface.",
        symbol="t_w",
        default=0.0,
        reason="no wall resistance and no spreading in the wall unless given, which flatters the result",
        minimum=0.0,
        maximum=1.0,
    )
    wall_conductivity: float | None = quantity(
        "conductivity", "Thermal conductivity of the wall; needed with a wall_thickness.", default=None, above=0.0
    )
    passages: int = integer(
        "Equal parallel passages side by side in one duct.", default=1, minimum=1, maximum=100_000, applies=_PASSAGE
    )
    width: float | None = quantity(
        "length",
        "Clear width of one passage; unless given, the plate's width divided by the passages.",
        symbol="w",
        default=None,
        above=0.0,
        maximum=1000.0,
        applies=_PASSAGE,
    )
    area_ratio: float = quantity(
        "dimensionless",
        "Effective film area over plate area, for surfaces that are not flat.",
        default=1.0,
        above=0.0,
        maximum=1000.0,
        applies=_PASSAGE,
    )
    fin_pitch: float | None = quantity(
        "length", "Distance from one fin to the next, across the flow.", above=0.0, maximum=1.0, applies=_FIN
    )
    fin_thickness: float | None = quantity(
        "length", "Thickness of the fin sheet.", above=0.0, maximum=0.1, applies=_FIN
    )
    strip_length: float | None = quantity(
        "length",
        "Length of one strip along the flow.",
        above=0.0,
        maximum=1.0,
        applies=("kind", ("offset strip fins",)),
    )
    fin_conductivity: float | None = quantity(
        "conductivity", "Thermal conductivity of the fins.", above=0.0, applies=_FIN
    )
    block_resistance: FlowCurve | None = other(
        "flow curve",
        "Thermal resistance of one block from its wall to the fluid against the flow through it.",
        kind="thermal resistance",
        above=0.0,
        maximum=1e4,
        applies=_RATED,
    )
    resistance_refers_to: str | None = choice(
        REFERENCES, "Fluid temperature to which block_resistance refers.", applies=_RATED
    )
    block_pressure_drop: FlowCurve | None = other(
        "flow curve",
        "Pressure drop of one block against the flow through it.",
        kind="pressure difference",
        above=0.0,
        maximum=1e8,
        applies=_RATED,
    )
    rated_fluid: str | None = choice(RATED_FLUIDS, "Fluid with which the block was rated.", applies=_RATED)
    rated_temperature: float | None = quantity(
        "temperature", "Mean temperature of the fluid at the rating.", minimum=100.0, maximum=2000.0, applies=_RATED
    )
    modules_per_block: int | None = integer(
        "Modules that one block serves, on both its faces together.", minimum=1, maximum=MOST_MODULES, applies=_RATED
    )
    blocks_in_parallel: int = integer(
        "Blocks side by side across the flow that share it evenly; further blocks follow along the flow.",
        default=1,
        minimum=1,
        maximum=MOST_ROWS,
        applies=_RATED,
    )
    solid_resistance: float = quantity(
        "thermal resistance",
        "Part of a block's resistance that lies in its metal, or in deposits, and does not change with the fluid.",
        default=0.0,
        reason="all of the rated resistance is film",
        minimum=0.0,
        maximum=1e4,
        applies=_RATED,
    )
    prandtl_exponent: float = quantity(
        "dimensionless",
        "Exponent of the Prandtl number at equal Reynolds number, by which another fluid or temperature is corrected.",
        default=1.0 / 3.0,
        reason="Colburn's analogy; 0 for developed laminar flow",
        minimum=0.0,
        maximum=1.0,
        applies=_RATED,
    )
    sink_resistance: float | None = quantity(
        "thermal resistance",
        "Thermal resistance of the heat sink of one module, from its base to the room, at sink_temperature_rise.",
        default=None,
        above=0.0,
        maximum=1e4,
        applies=_SINK,
    )
    sink_temperature_rise: float | None = quantity(
        "temperature difference",
        "Rise of the base over the room at which sink_resistance holds.",
        default=None,
        above=0.0,
        maximum=1000.0,
        applies=_SINK,
    )
    sink_exponent: float = quantity(
        "dimensionless",
        "Exponent by which the conductance of a sink of given resistance grows with its rise over the room.",
        default=0.25,
        reason="laminar natural convection on plates",
        minimum=0.0,
        maximum=1.0,
        applies=_SINK,
    )
    sink_height: float | None = quantity(
        "length",
        "Height of the sink's base, along its vertical fins.",
        default=None,
        above=0.0,
        maximum=10.0,
        applies=_SINK,
    )
    sink_width: float | None = quantity(
        "length", "Width of the sink's base, across its fins.", default=None, above=0.0, maximum=10.0, applies=_SINK
    )
    sink_fin_height: float | None = quantity(
        "length", "Height of the sink's fins from base to tip.", default=None, above=0.0, maximum=1.0, applies=_SINK
    )
    sink_fin_thickness: float | None = quantity(
        "length", "Thickness of the sink's fins.", default=None, above=0.0, maximum=0.1, applies=_SINK
    )
    sink_fin_spacing: float | None = quantity(
        "length",
        "Clear distance between the sink's fins, of which as many as fit are taken; or give sink_fin_count.",
        default=None,
        above=0.0,
        maximum=1.0,
        applies=_SINK,
    )
    sink_fin_count: int | None = integer(
        "Fins of the sink, evenly over its width, instead of sink_fin_spacing.",
        default=None,
        minimum=2,
        maximum=10_000,
        applies=_SINK,
    )
    sink_conductivity: float | None = quantity(
        "conductivity", "Thermal conductivity of the sink's fins.", default=None, above=0.0, applies=_SINK
    )
    sink_emissivity: float | None = quantity(
        "dimensionless",
        "Emissivity of the sink's surface: anodised or painted about 0.8 to 0.9, bare aluminium about 0.1.",
        default=None,
        above=0.0,
        maximum=1.0,
        applies=_SINK,
    )
    entrance: str = choice(
        ENTRANCES, "What is done about entrance effects.", default="fully developed", applies=_PASSAGE
    )
    roughness: float = quantity(
        "length",
        "Height of the wall's roughness, for friction in turbulent flow.",
        default=0.0,
        minimum=0.0,
        maximum=0.1,
        applies=_PASSAGE,
    )
    minor_loss_coefficient: float = quantity(
        "dimensionless",
        "Velocity heads of the duct lost in bends and fittings of the duct.",
        default=0.0,
        reason=NOT_TO_ZERO,
        minimum=0.0,
        maximum=1e6,
        applies=_PASSAGE,
    )
    connection_diameter: float | None = quantity(
        "length",
        "Inner diameter of the connecting pipe that carries the whole flow; needed with a connection_loss_coefficient.",
        default=None,
        above=0.0,
        maximum=100.0,
        applies=_CONNECTED,
    )
    connection_loss_coefficient: float = quantity(
        "dimensionless",
        "Velocity heads of the connecting pipe lost in connections, headers and bends.",
        default=0.0,
        reason="none unless given; often the largest loss on the gas side, so the drive power is flattered",
        minimum=0.0,
        maximum=1e6,
        applies=_CONNECTED,
    )
    frontal_area_ratio: float = quantity(
        "dimensionless",
        "Free flow area of the passages over the header's frontal area; gives the entrance and exit losses.",
        symbol="sigma",
        default=0.0,
        reason="passages much smaller than the header, the largest entrance and exit losses",
        minimum=0.0,
        maximum=1.0,
        applies=_PASSAGE,
    )
    entrance_loss_coefficient: float | None = quantity(
        "dimensionless",
        "Velocity heads lost at the entrance, instead of what frontal_area_ratio gives; 0 turns it off.",
        default=None,
        minimum=-10.0,
        maximum=1e6,
        applies=_PASSAGE,
    )
    exit_loss_coefficient: float | None = quantity(
        "dimensionless",
        "Velocity heads lost at the exit, instead of what frontal_area_ratio gives; 0 turns it off.",
        default=None,
        minimum=-10.0,
        maximum=1e6,
        applies=_PASSAGE,
    )


@dataclass(frozen=True, kw_only=True)
class StreamSide:
    """What comes to the hot or the cold side, whatever is built there: a stream, or a reservoir."""

    fluid: str = choice(FLUIDS, "What flows on this side.")
    mass_fraction: float | None = quantity(
        "dimensionless",
        "Glycol mass over the mass of the mixture; or give volume_fraction.",
        default=None,
        minimum=0.0,
        maximum=1.0,
        applies=("fluid", GLYCOLS),
    )
    volume_fraction: float | None = quantity(
        "dimensionless",
        "Glycol volume over the volume of the mixture at 20 degC; or give mass_fraction.",
        default=None,
        minimum=0.0,
        maximum=1.0,
        applies=("fluid", GLYCOLS),
    )
    fuel: str | None = other(
        "text",
        'Fuel that was burnt: "diesel", "methane", "natural gas", "propane" or an elemental formula such as "C8H18".',
        applies=_EXHAUST,
    )
    excess_air_ratio: float | None = quantity(
        "dimensionless",
        "Air over the air that complete combustion needs; or give dry_oxygen, or both mass_flow and fuel_flow.",
        symbol="lambda",
        default=None,
        minimum=1.0,
        maximum=1000.0,
        applies=_EXHAUST,
    )
    dry_oxygen: float | None = quantity(
        "dimensionless",
        "Mole fraction of oxygen in the dried exhaust gas, instead of excess_air_ratio.",
        default=None,
        minimum=0.0,
        maximum=0.21,
        applies=_EXHAUST,
    )
    fuel_flow: float | None = quantity(
        "mass flow",
        "Mass flow of the fuel: with an excess air it gives the exhaust flow, with a mass_flow the excess air.",
        default=None,
        above=0.0,
        applies=_EXHAUST,
    )
    intake_humidity: float = quantity(
        "mass ratio",
        "Water in the intake air over dry air, by mass.",
        default=0.0,
        reason="dry intake air, which lowers the water dew point",
        minimum=0.0,
        maximum=0.2,
        applies=_EXHAUST,
    )
    fuel_sulphur: float = quantity(
        "mass ratio",
        "Sulphur in the fuel by mass, for the dew point of sulphuric acid.",
        default=0.0,
        reason="no sulphur, so no dew point of sulphuric acid",
        minimum=0.0,
        maximum=0.1,
        applies=_EXHAUST,
    )
    sulphur_conversion: float = quantity(
        "dimensionless",
        "Part of the fuel's sulphur that becomes sulphur trioxide and so sulphuric acid.",
        default=0.02,
        reason="common practice, no source: one to a few per cent",
        minimum=0.0,
        maximum=1.0,
        applies=_EXHAUST,
    )
    table: FluidRows | None = other(
        "fluid table",
        "Properties of the fluid: lists temperature, density, heat_capacity, viscosity and conductivity of the same "
        "length (a single text is a constant), or the path of a CSV file with these names and units in its header, "
        'such as "temperature [degC]".',
        applies=("fluid", ("table",)),
    )
    film_coefficient: float | None = quantity(
        "film coefficient",
        "Film coefficient of a reservoir, per plate area.",
        above=0.0,
        applies=("fluid", ("reservoir",)),
    )
    inlet_temperature: float = quantity(
        "temperature",
        "Temperature of the stream where it enters, or of the reservoir.",
        minimum=1.0,
        maximum=5000.0,
    )
    mass_flow: float | None = quantity(
        "mass flow",
        "Flow of the whole side, with the stack fitted.",
        default=None,
        above=0.0,
        maximum=1e6,
        applies=_STREAM,
    )
    volume_flow: float | None = quantity(
        "volume flow",
        "Flow of the whole side at inlet temperature and pressure, instead of mass_flow.",
        default=None,
        above=0.0,
        maximum=1e6,
        applies=_STREAM,
    )
    standard_volume_flow: StandardVolumeFlow | None = other(
        "standard volume flow",
        "Flow of the whole side as a volume at a stated reference temperature and pressure, instead of mass_flow; "
        "for exhaust gas with wet or dry.",
        kind=STANDARD_VOLUME_FLOW,
        default=None,
        applies=("fluid", GASES),
    )
    pressure: float = quantity(
        "pressure",
        'Absolute pressure at the inlet; "1.5 bar gauge" adds to the ambient pressure.',
        default=None,
        default_from="site.ambient_pressure",
        reason="the ambient pressure of the site",
        above=0.0,
        maximum=1e9,
        applies=_STREAM,
    )
    fouling: float = quantity(
        "areal thermal resistance",
        "Resistance of deposits per wetted area.",
        symbol="R_f",
        default=0.0,
        reason="clean surfaces, which flatters the result",
        minimum=0.0,
        maximum=1.0,
        applies=_STREAM,
    )
    drive: str = choice(
        DRIVES,
        "What pays for the pressure drop.",
        default="free",
        applies=_STREAM,
        reason=("the pressure drop costs nothing"),
    )
    drive_position: str | None = choice(
        DRIVE_POSITIONS, "Where the pump or fan stands.", default="inlet", applies=_MACHINE
    )
    drive_curve: FlowCurve | None = other(
        "flow curve",
        "Pressure rise of the pump or fan against its volume flow, instead of a flow: where it meets the resistance of "
        "stack and circuit the flow is found.",
        kind="pressure difference",
        default=None,
        minimum=0.0,
        maximum=1e8,
        applies=_MACHINE,
    )
    circuit_flow: float | None = quantity(
        "volume flow",
        "Flow that the drive_curve gives without the stack: the rest of the circuit then takes the whole pressure "
        "rise, which grows with the square of flow. Not given, the stack is the only resistance, which flatters.",
        default=None,
        above=0.0,
        maximum=1e6,
        applies=_MACHINE,
    )
    drive_efficiency: float | None = quantity(
        "dimensionless",
        "Hydraulic power over electrical power of the pump or fan with its motor.",
        default=None,
        default_by=("drive", {"pump": 0.35, "fan": 0.40}),
        reason="common practice, no source: small machines with their motors",
        above=0.0,
        maximum=1.0,
        applies=_MACHINE,
    )
    swept_volume_flow: float | None = quantity(
        "volume flow",
        "Volume that the engine's pistons displace into the exhaust per time; without it the exhaust volume flow "
        "gives an upper bound.",
        default=None,
        above=0.0,
        applies=_ENGINE,
    )
    generator_efficiency: float | None = quantity(
        "dimensionless",
        "Electrical over shaft power of the generator that loses the shaft power.",
        default=None,
        default_by=("drive", {"engine": 0.90}),
        reason="common practice, no source",
        above=0.0,
        maximum=1.0,
        applies=_ENGINE,
    )


@dataclass(frozen=True, kw_only=True)
class Side(StreamSide):
    """The hot or the cold side: a stream with its ducts, or a reservoir."""

    duct: Duct = section(Duct, "Ducts of this side; a reservoir may have a wall.")


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


def _limit(kind: str, meaning: str) -> Any:
    lowest = {"minimum": 1.0, "maximum": 5000.0} if kind == "temperature" else {"above": 0.0, "maximum": 1e9}
    return quantity(kind, meaning, default=None, descriptive=False, **lowest)


@dataclass(frozen=True, kw_only=True)
class Limits:
    """What the design must keep to; an estimate checks it, a sizing obeys it."""

    hot_face_temperature: float | None = _limit("temperature", "Highest allowed temperature of a module's hot face.")
    cold_face_temperature: float | None = _limit("temperature", "Highest allowed temperature of a module's cold face.")
    hot_pressure_drop: float | None = _limit("pressure difference", "Highest allowed pressure drop on the hot side.")
    cold_pressure_drop: float | None = _limit("pressure difference", "Highest allowed pressure drop on the cold side.")
    back_pressure: float | None = _limit("pressure difference", "Highest back pressure that the engine allows.")
    minimum_hot_outlet_temperature: float | None = _limit(
        "temperature", "Lowest allowed outlet temperature of the hot stream."
    )
    maximum_cold_outlet_temperature: float | None = _limit(
        "temperature", "Highest allowed outlet temperature of the cold stream."
    )
    maximum_length: float | None = _limit("length", "Longest plates allowed along the flow.")
    maximum_width: float | None = _limit("length", "Widest plates allowed across the flow.")
    maximum_height: float | None = _limit("length", "Highest stack allowed; needs the module's thickness.")
    maximum_module_mass: float | None = _limit("mass", "Largest mass of the modules allowed; needs the module's mass.")


OBJECTIVES = {
    "net power": "the most net power",
    "fewest modules": "the fewest modules that give target_net_power",
    "cost per net watt": "the least cost of building over net power; needs [cost]",
    "cost per kilowatt-hour": "the least cost of a net kilowatt-hour over the years of use; needs [cost]",
}


def _count_axis(meaning: str) -> Any:
    return other("axis", meaning, default=None, minimum=1, maximum=MOST_ROWS, descriptive=True)


@dataclass(frozen=True, kw_only=True)
class Size:
    """What a sizing may change, and what it looks for."""

    rows: tuple[int, ...] | None = _count_axis(
        "Numbers of rows to try; unless given, that of the stack. Row blocks grow no longer than the longest."
    )
    columns: tuple[int, ...] | None = _count_axis("Numbers of columns to try; unless given, that of the stack.")
    layers: tuple[int, ...] | None = _count_axis("Numbers of layers to try; unless given, that of the stack.")
    objective: str = choice(OBJECTIVES, "What the best design is best in.", default="net power", descriptive=True)
    target_net_power: float | None = quantity(
        "power",
        "Net power that the fewest modules must give.",
        above=0.0,
        maximum=1e9,
        applies=("objective", ("fewest modules",)),
        descriptive=True,
    )
    least_net_watts_per_module: float | None = quantity(
        "power",
        "Net power that a further module must add to be worth its place.",
        default=None,
        above=0.0,
        maximum=1e6,
        descriptive=True,
    )
    fields: dict[str, tuple[float, ...]] | None = other(
        "axes",
        'Further fields to try, written in [size] by their whole names in quotes, such as "hot.duct.gap" = '
        '{ from = "2 mm", to = "6 mm", points = 5 }; those with a unit are refined around the best.',
        default=None,
        descriptive=True,
    )


def _price(meaning: str) -> Any:
    return quantity("dimensionless", meaning, default=0.0, minimum=0.0, maximum=1e12, descriptive=True)


@dataclass(frozen=True, kw_only=True)
class Cost:
    """What a design costs to build, in one currency."""

    currency: str = text("Name of the currency, a label only.")
    module: float = quantity("dimensionless", "Price of one module.", minimum=0.0, maximum=1e9, descriptive=True)
    exchanger_per_area: float = _price(
        "Price of a square metre of plate that faces modules; hot and cold plates both count."
    )
    layer: float = _price("Price of one layer, for clamping and assembly.")
    converter: float = _price("Price of the converter.")
    converter_per_watt: float = _price("Price of the converter a watt that it gives.")
    drive: float = _price("Price of pumps and fans.")
    drive_per_watt: float = _price("Price of pumps and fans a watt that they take.")
    fixed: float = _price("Price of what every design needs, whatever its size.")
    years: float = quantity("dimensionless", "Years of use.", default=10.0, above=0.0, maximum=100.0, descriptive=True)
    discount_rate: float = quantity(
        "dimensionless", "Discount rate a year.", default=0.0, minimum=0.0, maximum=1.0, descriptive=True
    )


@dataclass(frozen=True, kw_only=True)
class Streams:
    """The streams of a case. `given` is the document as typed, `assumed` the paths that were filled by a default."""

    title: str = text("What the case is about.")
    site: Site = section(Site, "Where the stack stands.")
    hot: StreamSide = section(StreamSide, "The hot side.")
    cold: StreamSide = section(StreamSide, "The cold side, in counterflow to the hot side.")
    limits: Limits = section(Limits, "What the design must keep to.")
    given: dict[str, Any] = field(default_factory=dict, compare=False, repr=False)
    assumed: tuple[str, ...] = field(default=(), compare=False, repr=False)
    folder: Path = field(default=Path(), compare=False, repr=False)


@dataclass(frozen=True, kw_only=True)
class Case(Streams):
    """One design: streams, and what is built between them."""

    hot: Side = section(Side, "The hot side.")
    cold: Side = section(Side, "The cold side, in counterflow to the hot side.")
    stack: Stack = section(Stack, "Arrangement of the modules.")
    module: Module = section(Module, "The module.")
    electrical: Electrical = section(Electrical, "Wiring, load and converter.")
    size: Size | None = section(Size, "What a sizing may change, and what it looks for.", optional=True)
    cost: Cost | None = section(Cost, "What a design costs to build, in one currency.", optional=True)
    sweep: dict[str, Any] | None = other(
        "axes",
        "Fields that a sweep varies, by their whole names in quotes, as lists or { from = .., to = .., points = .. }.",
        default=None,
        descriptive=True,
    )


class FieldRecord(NamedTuple):
    """A declared field with its dotted path."""

    path: str
    declaration: Declaration


class Assumption(NamedTuple):
    """A field that was left at its default, the value as text, and why that value."""

    path: str
    value: str
    reason: str


DECLARATIONS: dict[str, Declaration] = dict(walk(Case))


def fields() -> Iterator[FieldRecord]:
    """Every field and section of the case file with its declaration, in the order of the file."""
    for path, declaration in DECLARATIONS.items():
        yield FieldRecord(path, declaration)


def value_at(case: Streams, path: str) -> Any:
    """Value of a field by its dotted path; None inside a section that is not given, a tuple in a list of tables."""
    value: Any = case
    for name in path.split("."):
        if isinstance(value, tuple):
            inside = tuple(getattr(each, name) for each in value)
            return None if all(each is None for each in inside) else inside
        value = getattr(value, name, None)
    return value


def nearest_name(name: str, known: list[str]) -> str:
    """Tell the known name that is most like the given one, as the end of a message; all of them if none is like it."""
    import difflib

    close = difflib.get_close_matches(name, known, 1, 0.6)
    return f"did you mean {close[0]}?" if close else f"known are {', '.join(known)}"


def nearest_field(path: str) -> str:
    """Tell the field that is most like the given path or end of a path; or else the fields of its section."""
    section_path = path.rpartition(".")[0]
    beside = [known for known in DECLARATIONS if known.rpartition(".")[0] == section_path]
    message = nearest_name(path, list(DECLARATIONS))
    if message.startswith("known"):
        message = nearest_name(path.rpartition(".")[2], [known.rpartition(".")[2] for known in DECLARATIONS])
    if message.startswith("known"):
        return nearest_name(path, beside or [known for known in DECLARATIONS if "." not in known])
    return message


def display(value: Any, declaration: Declaration) -> str:
    """Write a field's SI value as a person would, with its unit."""
    if value is None:
        return "not given"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        return f"{value:.6g}" if KINDS[declaration.kind].bare else format_quantity(value, declaration.kind)
    if isinstance(value, tuple) and declaration.form == "pair":
        joint = " x " if declaration.kind == "length" else " to "
        return joint.join(format_quantity(each, declaration.kind) for each in value)
    if isinstance(value, tuple) and declaration.form == "quantity":
        return ", ".join(display(each, declaration) for each in value)
    return one_line(str(value), 300)


def assumptions(case: Streams) -> list[Assumption]:
    """Fields left at a default that matters for the result, with value and reason."""
    return [
        Assumption(path, display(value_at(case, path), DECLARATIONS[path]), DECLARATIONS[path].reason)
        for path in case.assumed
        if DECLARATIONS[path].reason
    ]


def case_hash(case: Streams) -> str:
    """SHA-256 of what the result depends on, in SI with 12 digits: the same however the units were written.

    Titles, descriptions, sizing and sweep are left out; a material that is a file counts by its bytes.
    """
    import hashlib

    content = {
        path: _canonical(value_at(case, path), declaration)
        for path, declaration in DECLARATIONS.items()
        if declaration.section is None and not declaration.descriptive
    }
    return hashlib.sha256(json.dumps(content, sort_keys=True).encode()).hexdigest()


def _canonical(value: Any, declaration: Declaration) -> Any:
    if isinstance(value, float):
        return f"{value:.12g}"
    if isinstance(value, tuple):
        return [_canonical(each, declaration) for each in value]
    if isinstance(value, Curve | FlowCurve | StandardVolumeFlow):
        return {name: _canonical(each, declaration) for name, each in vars(value).items()}
    if declaration.form == "file" and value is not None and Path(value).is_absolute():
        import hashlib

        return hashlib.sha256(Path(value).read_bytes()).hexdigest()
    return value


def explain(path: str) -> str:
    """Meaning, unit, default, range and choices of a field, by its path or the end of its path.

    Raises InputError: no such field, with the nearest known name.
    """
    matching = [known for known in DECLARATIONS if known == path] or [
        known for known in DECLARATIONS if known.endswith(f".{path}")
    ]
    distinct = {id(DECLARATIONS[known]): known for known in reversed(matching)}
    if not matching:
        raise InputError(f"{one_line(path)}: unknown field; {nearest_field(path[:60])}")
    return "\n\n".join(_explanation(known, DECLARATIONS[known]) for known in reversed(distinct.values()))


def _explanation(path: str, declaration: Declaration) -> str:
    lines = [path, f"  {declaration.meaning}"]
    if declaration.section is not None:
        inside = [known for known in DECLARATIONS if known.startswith(f"{path}.")]
        if declaration.form == "tables":
            lines.append(f"  write: [[{path}]] before the fields of each table")
        return "\n".join([*lines, "  fields: " + ", ".join(known.removeprefix(f"{path}.") for known in inside)])
    if declaration.symbol:
        lines.append(f"  symbol: {declaration.symbol}")
    if declaration.form in ("quantity", "pair", "curve", "flow curve", "standard volume flow", "energy price"):
        lines.append(f"  write: {_written(declaration)}")
        lines.append(f"  units: {allowed_units(declaration.kind)}")
        lines.append(f"  inside and in JSON: {unit_of(declaration.kind)}")
    lines += [f'  "{name}": {meaning}' for name, meaning in declaration.choices.items()]
    allowed = limits_text(declaration)
    if allowed:
        lines.append(f"  allowed: {allowed}")
    if declaration.applies is not None:
        selector, values = declaration.applies
        lines.append(f"  applies to: {selector} = {', '.join(values)}")
    lines.append(f"  default: {default_text(declaration)}")
    return "\n".join(lines)


def _written(declaration: Declaration) -> str:
    example = f'"{example_of(declaration.kind)}"'
    if declaration.form == "pair":
        return f"[{example}, {example}]"
    if declaration.form == "flow curve":
        flow = f'"{example_of("volume flow")}"'
        power_law = f"{{ flow = {flow}, value = {example}, exponent = -0.6, from = .., to = .. }}"
        straight = "pairs of flow and value, [[" + f"{flow}, {example}], ...]"
        return straight if declaration.minimum is not None else f"{straight}; or a power law, {power_law}"
    if declaration.form == "curve":
        return (
            f"{example}; or polynomial coefficients in (T - 300 K), T the mean temperature, lowest power first, as "
            f"texts with the unit per power or as plain SI numbers; or pairs of temperature and value, "
            f'[["300 K", {example}], ...]'
        )
    return example


def default_text(declaration: Declaration) -> str:
    """Write a field's default, with its reason, in words."""
    reason = f" ({declaration.reason})" if declaration.reason else ""
    if declaration.default is REQUIRED:
        return "none, the field must be given" + (" where it applies" if declaration.applies else "")
    if declaration.default_from:
        return f"{declaration.default_from}{reason}"
    if declaration.default_by is not None:
        return ", ".join(f"{value:g} for {name}" for name, value in declaration.default_by[1].items()) + reason
    return f"{display(declaration.default, declaration) or 'empty'}{reason}"


def limits_text(declaration: Declaration) -> str:
    """Say the allowed range of a number in the SI unit; empty if there is none."""
    lowest = declaration.minimum if declaration.above is None else declaration.above
    if lowest is None and declaration.maximum is None:
        return ""
    unit = "" if KINDS[declaration.kind].bare else f" {unit_of(declaration.kind)}"
    parts = []
    if lowest is not None:
        parts.append(f"{'at least' if declaration.above is None else 'above'} {lowest:.12g}{unit}")
    if declaration.maximum is not None:
        parts.append(f"at most {declaration.maximum:.12g}{unit}")
    return " and ".join(parts)
