"""From a batch of cases to what the solver takes: flows, ducts, films, metal and wiring, with each fault by case."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from harvest.errors import RangeError
from harvest.model.batch import Batch, StreamBatch
from harvest.model.case import DECLARATIONS, limits_text
from harvest.model.combinations import combination_faults
from harvest.model.loads import MAXIMUM_POWER
from harvest.model.module import DescribedModule, described_module, fill_factor, footprint_area
from harvest.model.property_store import stored_table
from harvest.model.stack import (
    Circuit,
    Load,
    StackProblem,
    StackSide,
)
from harvest.model.stream_sections import HEAT_SINK, RATED
from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.physics.combustion import (
    GAS_CONSTANT,
    excess_air_from_dry_oxygen,
    excess_air_from_flows,
    exhaust_flow_from_fuel,
)
from harvest.physics.films import DUCT_KINDS, DuctMeasures, Film
from harvest.physics.fluids import FluidBatch, FluidSpec, FluidTable, expansion_range
from harvest.physics.rated import RatedFilm
from harvest.physics.spreading import Constriction

if TYPE_CHECKING:
    from harvest.physics.natural_convection import RoomSink

OVERSHOOT = 40.0
"""How far past the inlets a gas is expanded [K]; further out there is no answer."""
SPEC_NUMBERS = ("mass_fraction", "volume_fraction", "excess_air_ratio", "dry_oxygen", "intake_humidity")


BETWEEN = " | "
"""What stands between two faults of one case."""


class Faults:
    """Reasons why cases have no answer, each named by its field; several for a case are joined by `BETWEEN`."""

    def __init__(self, cases: int) -> None:
        self.text = np.full(cases, "", dtype=object)

    def add(self, where: BoolArray, text: str | Callable[[int], str]) -> None:
        """Mark cases; `text`, or a function from the case's index to it."""
        for index in np.flatnonzero(where):
            said = text if isinstance(text, str) else text(int(index))
            self.text[index] = f"{self.text[index]}{BETWEEN}{said}" if self.text[index] else said

    @property
    def valid(self) -> BoolArray:
        """Cases without a fault."""
        return np.asarray(self.text == "")


@dataclass(frozen=True, eq=False, repr=False)
class Stream:
    """One side's stream, (cases,): total `mass_flow` [kg/s], duct counts, table data.

    A reservoir has no fluid, and neither have heat sinks in still air, which have a `sink`.
    """

    name: str
    inlet_temperature: FloatArray
    pressure: FloatArray
    mass_flow: FloatArray
    fluid: FluidBatch | None
    tables: tuple[FluidTable, ...]
    table_of_case: IntArray
    film: Film | RatedFilm | None
    ducts: FloatArray
    half_ducts: FloatArray
    excess_air_ratio: FloatArray
    is_reservoir: bool
    sink: RoomSink | None = None

    def table_value(self, name: str) -> FloatArray:
        """One number of each case's fluid table, (cases,)."""
        return np.array([getattr(table, name) for table in self.tables], dtype=float)[self.table_of_case]


@dataclass(frozen=True, eq=False, repr=False)
class Design:
    """A batch made ready for the solver."""

    batch: Batch
    hot: Stream
    cold: Stream
    problem: StackProblem
    load: Load
    faults: Faults
    segments: int
    module_count: FloatArray
    footprint_area: FloatArray
    place_area: FloatArray
    module: DescribedModule
    interface_resistance: tuple[FloatArray, FloatArray]


def stream_fluid(
    batch: StreamBatch, side: str, faults: Faults
) -> tuple[FluidBatch | None, tuple[FluidTable, ...], IntArray]:
    """Property tables of one side, one for each different fluid state of the batch."""
    given = getattr(batch.base, side)
    inlet, pressure = batch.number(f"{side}.inlet_temperature"), batch.number(f"{side}.pressure")
    other = batch.number(f"{'cold' if side == 'hot' else 'hot'}.inlet_temperature")
    numbers = {each: batch.number(f"{side}.{each}") for each in SPEC_NUMBERS if batch.given(f"{side}.{each}")}
    if given.fluid == "exhaust gas":
        numbers.pop("dry_oxygen", None)
        numbers["excess_air_ratio"] = stream_excess_air_ratio(batch, side)
    # modules that are driven as coolers can take a stream past both inlets
    lower, upper = expansion_range(
        given.fluid, np.minimum(inlet, other) - OVERSHOOT, np.maximum(inlet, other) + OVERSHOOT
    )
    keys, table_of_case = np.unique(
        np.column_stack([*numbers.values(), pressure, lower, upper]), axis=0, return_inverse=True
    )
    table_of_case = table_of_case.reshape(-1).astype(np.int64)
    tables: list[FluidTable | None] = []
    for key in keys:
        values = dict(zip(numbers, map(float, key), strict=False))
        try:
            spec = FluidSpec(name=given.fluid, fuel=given.fuel, table=given.table, **values)
            tables.append(stored_table(spec, *(float(each) for each in key[-3:])))
        except RangeError as error:
            faults.add(table_of_case == len(tables), f"{side}: {error}")
            tables.append(None)
    found = [table for table in tables if table is not None]
    if not found:
        return None, (), table_of_case
    full = tuple(table or found[0] for table in tables)
    low = np.array([table.lower_limit for table in full])[table_of_case]
    high = np.array([table.upper_limit for table in full])[table_of_case]

    def outside(index: int) -> str:
        return f"{side}.inlet_temperature: {full[table_of_case[index]].outside(inlet[index])}"

    faults.add((inlet < low) | (inlet > high), outside)
    return FluidBatch.stack(full, table_of_case), full, table_of_case


def stream_excess_air_ratio(batch: StreamBatch, side: str) -> FloatArray:
    """Excess-air ratio of an exhaust gas from whichever way it was given [-], (cases,); NaN for other fluids."""
    given = getattr(batch.base, side)
    if given.fluid != "exhaust gas" or batch.given(f"{side}.excess_air_ratio"):
        return batch.number(f"{side}.excess_air_ratio")
    if batch.given(f"{side}.dry_oxygen"):
        return excess_air_from_dry_oxygen(given.fuel, batch.number(f"{side}.dry_oxygen"))
    return excess_air_from_flows(
        given.fuel,
        batch.number(f"{side}.mass_flow"),
        batch.number(f"{side}.fuel_flow"),
        batch.number(f"{side}.intake_humidity", 0.0),
    )


def stream_mass_flow(
    batch: StreamBatch, side: str, inlet_density: FloatArray, molar_mass: FloatArray, water: FloatArray
) -> FloatArray:
    """Mass flow of one side from whichever way it was given [kg/s], (cases,)."""
    given = getattr(batch.base, side)
    if batch.given(f"{side}.mass_flow"):
        return batch.number(f"{side}.mass_flow")
    if batch.given(f"{side}.volume_flow"):
        return batch.number(f"{side}.volume_flow") * inlet_density
    if given.standard_volume_flow is not None:
        standard = given.standard_volume_flow
        moles = batch.number(f"{side}.standard_volume_flow") * standard.pressure / (GAS_CONSTANT * standard.temperature)
        return np.asarray(moles * molar_mass / (1.0 - water if standard.basis == "dry" else 1.0))
    if given.drive_curve is not None:  # what the curve gives without the stack
        return batch.number(f"{side}.circuit_flow", given.drive_curve.flows[-1]) * inlet_density
    return exhaust_flow_from_fuel(
        given.fuel,
        batch.number(f"{side}.fuel_flow"),
        batch.number(f"{side}.excess_air_ratio"),
        batch.number(f"{side}.dry_oxygen"),
        batch.number(f"{side}.intake_humidity", 0.0),
    )


def duct_count(layers: FloatArray, faces: FloatArray, other_faces: FloatArray, closes_ends: bool) -> FloatArray:
    """Ducts of full height on one side of a stack [-], (cases,).

    Where the ducts of both sides serve two layers, the stack is a repeating one and the side that `closes_ends` has two
    more ducts of half height and half flow at its ends, which are not counted here.
    """
    both = (faces == 2) & (other_faces == 2)
    return np.where(both & closes_ends, layers / 2 - 1, layers / faces)


def _stream(batch: Batch, side: str, faults: Faults) -> Stream:
    """Flow, property tables and film of one side."""
    inlet = batch.number(f"{side}.inlet_temperature")
    layers = batch.number("stack.layers")
    faces = batch.number(f"{side}.duct.faces")
    other_faces = batch.number(f"{'cold' if side == 'hot' else 'hot'}.duct.faces")
    ducts = duct_count(layers, faces, other_faces, closes_ends=side == "cold")
    half = np.where((faces == 2) & (other_faces == 2) & (side == "cold"), 2.0, 0.0)
    nothing_flows = Stream(
        name=side,
        inlet_temperature=inlet,
        pressure=batch.number(f"{side}.pressure"),
        mass_flow=np.full(batch.cases, np.nan),
        fluid=None,
        tables=(),
        table_of_case=np.zeros(batch.cases, dtype=np.int64),
        film=None,
        ducts=ducts,
        half_ducts=half,
        excess_air_ratio=stream_excess_air_ratio(batch, side),
        is_reservoir=getattr(batch.base, side).fluid == "reservoir",
    )
    if nothing_flows.is_reservoir:
        return nothing_flows
    fluid, tables, table_of_case = stream_fluid(batch, side, faults)
    if fluid is None:
        return nothing_flows
    if getattr(batch.base, side).duct.kind == HEAT_SINK:
        from harvest.model.room_side import room_sink

        sink = room_sink(batch, fluid, faults)
        return dataclasses.replace(nothing_flows, tables=tables, table_of_case=table_of_case, sink=sink)
    molar_mass = np.array([table.molar_mass for table in tables])[table_of_case]
    water = np.array([table.water_fraction for table in tables])[table_of_case]
    mass_flow = stream_mass_flow(batch, side, fluid.density(inlet[None])[0], molar_mass, water)
    stream = dataclasses.replace(
        nothing_flows, mass_flow=mass_flow, fluid=fluid, tables=tables, table_of_case=table_of_case
    )
    return dataclasses.replace(stream, film=stream_film(batch, stream, mass_flow, faults))


def stream_film(
    batch: Batch, stream: Stream, mass_flow: FloatArray, faults: Faults | None = None
) -> Film | RatedFilm | None:
    """Film of a side at its total `mass_flow` [kg/s], (cases,); faults of rated blocks are noted where asked for."""
    side, duct = stream.name, getattr(batch.base, stream.name).duct
    faces = batch.number(f"{side}.duct.faces")
    of_one_duct = mass_flow * faces / batch.number("stack.layers")
    if duct.kind == RATED:
        from harvest.model.rated_side import rated_film

        return rated_film(batch, stream, of_one_duct, faults)
    passages = batch.number(f"{side}.duct.passages", 1.0)
    width = batch.number("stack.columns") * batch.number("stack.column_pitch")
    passage_width = batch.number(f"{side}.duct.width")
    passage_width = np.where(np.isnan(passage_width), width / passages, passage_width)
    return DUCT_KINDS[duct.kind].build(
        DuctMeasures(
            mass_flow=of_one_duct,
            gap=batch.number(f"{side}.duct.gap"),
            faces=faces,
            length=batch.number("stack.rows") * batch.number("stack.row_pitch"),
            duct_width=width,
            passages=passages,
            passage_width=passage_width,
            area_ratio=batch.number(f"{side}.duct.area_ratio", 1.0),
            place_area=batch.number("stack.row_pitch") * batch.number("stack.column_pitch"),
            fouling=batch.number(f"{side}.fouling", 0.0),
            film_factor=batch.number(f"{side}.duct.film_factor", 1.0),
            roughness=batch.number(f"{side}.duct.roughness", 0.0),
            fin_pitch=batch.number(f"{side}.duct.fin_pitch"),
            fin_thickness=batch.number(f"{side}.duct.fin_thickness"),
            fin_conductivity=batch.number(f"{side}.duct.fin_conductivity"),
            strip_length=batch.number(f"{side}.duct.strip_length"),
        ),
        duct.entrance == "developing",
    )


def _stack_side(batch: Batch, stream: Stream, module_resistance: FloatArray, segments: int) -> StackSide:
    """One side as the solver takes it."""
    side = stream.name
    place = batch.number("stack.row_pitch") * batch.number("stack.column_pitch")
    if stream.sink is not None:
        from harvest.model.room_side import base_area

        place = base_area(batch)
    footprint = footprint_area(batch)
    thickness = batch.number(f"{side}.duct.wall_thickness", 0.0)
    conductivity = batch.number(f"{side}.duct.wall_conductivity")
    conductivity = np.where(np.isnan(conductivity), 1.0, conductivity)
    spread = batch.base.stack.spreading == "constriction"
    return StackSide(
        inlet_temperature=stream.inlet_temperature,
        mass_flow=stream.mass_flow * segments / (batch.number("stack.layers") * batch.number("stack.columns")),
        film_conductance=batch.number(f"{side}.film_coefficient") * place,
        wall_resistance=thickness / (conductivity * place),
        module_resistance=module_resistance,
        constriction=Constriction.of(place, footprint, thickness if spread else np.zeros_like(thickness), conductivity),
        place_area=place,
        fluid=stream.fluid,
        film=stream.film,
        arithmetic=batch.base.stack.row_model == "arithmetic",
        sink=stream.sink,
    )


def _circuit(batch: Batch, segments: int) -> Circuit:
    """Wire the stack as the case says."""
    electrical = batch.base.electrical
    strings, in_series = batch.number("electrical.strings_across"), batch.number("electrical.layers_in_series")
    blocks = electrical.row_blocks or (batch.base.stack.rows,)
    return Circuit(
        block_starts=np.concatenate([[0], np.cumsum(blocks)[:-1]]).astype(np.int64) * segments,
        series=in_series * batch.number("stack.columns") / strings / segments,
        parallel=strings * batch.number("stack.layers") / in_series,
        lead=batch.number("electrical.lead_resistance", 0.0),
        diode_drop=batch.number("electrical.blocking_diode_drop", 0.0),
        independent=electrical.independent,
    )


def case_load(batch: Batch) -> Load:
    """Return the load that the case asks for."""
    electrical = batch.base.electrical
    if electrical.load == MAXIMUM_POWER:
        return maximum_power_load(batch)
    return Load(
        electrical.load,
        batch.number("electrical.load_resistance") if batch.given("electrical.load_resistance") else None,
        batch.number("electrical.load_voltage") if batch.given("electrical.load_voltage") else None,
    )


def maximum_power_load(batch: Batch) -> Load:
    """Return the true maximum, within the converter's window if there is one."""
    window = batch.base.electrical.converter_window
    if window is None:
        return Load(MAXIMUM_POWER)
    return Load(MAXIMUM_POWER, lowest=np.full(batch.cases, window[0]), highest=np.full(batch.cases, window[1]))


def _arrangement_faults(batch: Batch, faults: Faults) -> None:
    """Flag cases whose varied numbers do not make a stack; the base case was judged when it was read."""
    for name in ("stack.rows", "stack.columns", "stack.layers", "electrical.strings_across"):
        number = batch.number(name)
        faults.add((number < 1) | (number != np.floor(number)), f"{name}: must be a whole number of at least 1")
    rows, columns, layers = (batch.number(f"stack.{name}") for name in ("rows", "columns", "layers"))
    along, across = batch.base.module.footprint
    faults.add(
        batch.number("stack.row_pitch") < along * (1 - 1e-9), "stack.row_pitch: smaller than the module; increase it"
    )
    faults.add(
        batch.number("stack.column_pitch") < across * (1 - 1e-9),
        "stack.column_pitch: smaller than the module; increase it",
    )
    faults.add(
        columns % batch.number("electrical.strings_across") != 0, "electrical.strings_across: must divide columns"
    )
    faults.add(
        layers % batch.number("electrical.layers_in_series") != 0, "electrical.layers_in_series: must divide layers"
    )
    faults.add(
        fill_factor(batch) > 1.0 + 1e-9,
        "module.legs.area: the legs of all couples are larger than the footprint; decrease it or module.legs.couples",
    )
    for side in ("hot", "cold"):
        taken = batch.number(f"{side}.duct.width") * batch.number(f"{side}.duct.passages", 1.0)
        plate = columns * batch.number("stack.column_pitch") * (1.0 + 1e-9)
        faults.add(taken > plate, f"{side}.duct.width: the passages are wider than the plate; decrease it")
        if getattr(batch.base, side).duct.kind == RATED:
            from harvest.model.rated_side import arrangement_faults

            arrangement_faults(batch, side, faults)
    faces = batch.number("hot.duct.faces") + batch.number("cold.duct.faces")
    faults.add(
        (faces > 2) & (layers % 2 != 0), "stack.layers: ducts that serve two layers need an even number of layers"
    )
    faults.add((faces == 4) & (layers < 4), "stack.layers: a repeating stack needs at least 4 layers")
    if batch.base.electrical.row_blocks is not None:
        faults.add(rows != sum(batch.base.electrical.row_blocks), "electrical.row_blocks: must add up to the rows")
    for where, text in combination_faults(batch):
        faults.add(where, text)
    found = {f"{side}.mass_flow" for side in ("hot", "cold") if batch.given(f"{side}.drive_curve")}
    for path, declaration in DECLARATIONS.items():
        if path in batch.varied and path not in found:
            number, low, high = batch.varied[path], declaration.minimum, declaration.maximum
            wrong = ~np.isfinite(number)
            if declaration.form == "integer":
                wrong = wrong | (number != np.floor(number))
            if declaration.above is not None:
                wrong = wrong | (number <= declaration.above)
            wrong = wrong | (number < (-np.inf if low is None else low)) | (number > (np.inf if high is None else high))
            faults.add(wrong, f"{path}: out of range; allowed is {limits_text(declaration) or 'a finite number'}")


def _no_flow(batch: Batch, side: str) -> str:
    if getattr(batch.base, side).drive_curve is None:
        return f"{side}.mass_flow: must be above zero"
    return (
        f"{side}.drive_curve: meets the resistance of stack and circuit at none of its flows; the stack takes more "
        "than the curve gives at its lowest flow, or less than at its highest"
    )


def design(batch: Batch) -> Design:
    """Make a batch ready for the solver; faults of single cases are noted, not raised.

    Raises InputError for what concerns all cases: an unknown material.
    """
    faults = Faults(batch.cases)
    _arrangement_faults(batch, faults)
    arranged = faults.valid
    segments = batch.base.stack.segments
    hot, cold = _stream(batch, "hot", faults), _stream(batch, "cold", faults)
    for stream in (hot, cold):
        if stream.fluid is not None:
            faults.add(~(stream.mass_flow > 0), _no_flow(batch, stream.name))
    if batch.base.module.cooler_rating is not None:
        from harvest.model.rated_module import cooler_contradictions_of

        for where, sentence in cooler_contradictions_of(batch):
            faults.add(where, sentence)
    module = described_module(batch)
    footprint = footprint_area(batch)
    place = batch.number("stack.row_pitch") * batch.number("stack.column_pitch")
    interfaces = tuple(batch.number(f"stack.{side}_interface", 0.0) / footprint for side in ("hot", "cold"))
    # a case that makes no stack keeps the structure of its neighbours
    fewest = sum(batch.base.electrical.row_blocks or (1,))
    rows = np.where(arranged, batch.number("stack.rows"), fewest).astype(np.int64)
    problem = StackProblem(
        rows=int(rows.max()) * segments,
        active_rows=rows * segments,
        hot=_stack_side(batch, hot, interfaces[0] + module.substrate_resistance, segments),
        cold=_stack_side(batch, cold, interfaces[1] + module.substrate_resistance, segments),
        bypass=batch.number("stack.filler_conductance", 0.0) * (place - footprint),
        loss=batch.number("stack.heat_loss_conductance", 0.0) * place,
        ambient_temperature=batch.number("site.ambient_temperature"),
        module=module.model,
        circuit=_circuit(batch, segments),
    )
    return Design(
        batch=batch,
        hot=hot,
        cold=cold,
        problem=problem,
        load=case_load(batch),
        faults=faults,
        segments=segments,
        module_count=batch.number("stack.rows") * batch.number("stack.columns") * batch.number("stack.layers"),
        footprint_area=footprint,
        place_area=place,
        module=module,
        interface_resistance=(interfaces[0], interfaces[1]),
    )
