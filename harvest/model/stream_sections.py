"""Sections of the case file about the site and the two sides: streams, and the ducts, blocks or sinks they wet."""
# ruff: noqa: RUF009 - the declaring functions return dataclasses.field(...), which is no shared default

from __future__ import annotations

from dataclasses import dataclass

from harvest.model.case_fields import (
    MOST_MODULES,
    MOST_ROWS,
    NOT_TO_ZERO,
    FlowCurve,
    FluidRows,
    choice,
    integer,
    other,
    quantity,
    section,
)
from harvest.physics import films, fluids
from harvest.quantities import (
    ENERGY_PRICE,
    STANDARD_VOLUME_FLOW,
    EnergyPrice,
    StandardVolumeFlow,
)

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

_STREAM = ("fluid", STREAMS)
_EXHAUST = ("fluid", ("exhaust gas",))
_FIN = ("kind", FINNED)
_ENGINE = ("drive", ("engine",))
_MACHINE = ("drive", ("pump", "fan"))
_PASSAGE = ("kind", PASSAGES)
_CONNECTED = ("kind", (*PASSAGES, RATED))
_RATED = ("kind", (RATED,))
_SINK = ("kind", (HEAT_SINK,))


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
    film_factor: float = quantity(
        "dimensionless",
        "Factor on the film coefficient that the correlation, the rated curve or the sink's data give: to fit a "
        "measurement, or to be in doubt about.",
        default=1.0,
        above=0.0,
        maximum=100.0,
        applies=("kind", (*PASSAGES, RATED, HEAT_SINK)),
    )
    friction_loss_factor: float = quantity(
        "dimensionless",
        "Factor on the friction along the duct, or on the pressure drop of a block by its rated curve.",
        default=1.0,
        above=0.0,
        maximum=100.0,
        applies=_CONNECTED,
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
