"""From a batch of cases to what the solver takes: flows, ducts, films, metal and wiring, with each fault by case."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from harvest.errors import RangeError
from harvest.model.batch import Batch
from harvest.model.case import DECLARATIONS, limits_text
from harvest.model.case import Curve as CaseCurve
from harvest.model.loads import MAXIMUM_POWER
from harvest.model.materials import MaterialRecord, load_material
from harvest.model.property_store import stored_table
from harvest.model.stack import (
    Circuit,
    Load,
    StackProblem,
    StackSide,
)
from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.physics.combustion import (
    GAS_CONSTANT,
    excess_air_from_dry_oxygen,
    excess_air_from_flows,
    exhaust_flow_from_fuel,
)
from harvest.physics.curves import Curve, PolynomialCurve, TableCurve
from harvest.physics.films import DUCT_KINDS, DuctMeasures, Film
from harvest.physics.fluids import FluidBatch, FluidSpec, FluidTable, expansion_range
from harvest.physics.spreading import Constriction
from harvest.physics.thermoelectrics import LegModule, MeanTemperatureModule, ModuleModel

OVERSHOOT = 40.0
"""How far past the inlets a gas is expanded [K]; further out there is no answer."""
SPEC_NUMBERS = ("mass_fraction", "volume_fraction", "excess_air_ratio", "dry_oxygen", "intake_humidity")


class Faults:
    """Reasons why cases have no answer; the first one found for a case stands."""

    def __init__(self, cases: int) -> None:
        self.text = np.full(cases, "", dtype=object)

    def add(self, where: BoolArray, text: str | Callable[[int], str]) -> None:
        """Mark cases; `text`, or a function from the case's index to it."""
        for index in np.flatnonzero(where & (self.text == "")):
            self.text[index] = text if isinstance(text, str) else text(int(index))

    @property
    def valid(self) -> BoolArray:
        """Cases without a fault."""
        return np.asarray(self.text == "")


@dataclass(frozen=True)
class Stream:
    """One side's stream, (cases,): total `mass_flow` [kg/s], duct counts, table data. A reservoir has no fluid."""

    name: str
    inlet_temperature: FloatArray
    pressure: FloatArray
    mass_flow: FloatArray
    fluid: FluidBatch | None
    tables: tuple[FluidTable, ...]
    table_of_case: IntArray
    film: Film | None
    ducts: FloatArray
    half_ducts: FloatArray
    excess_air_ratio: FloatArray
    is_reservoir: bool

    def table_value(self, name: str) -> FloatArray:
        """One number of each case's fluid table, (cases,)."""
        return np.array([getattr(table, name) for table in self.tables], dtype=float)[self.table_of_case]


@dataclass(frozen=True)
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
    materials: tuple[MaterialRecord, ...]
    substrate_resistance: FloatArray
    interface_resistance: tuple[FloatArray, FloatArray]


def _fluid(batch: Batch, side: str, faults: Faults) -> tuple[FluidBatch | None, tuple[FluidTable, ...], IntArray]:
    """Property tables of one side, one for each different fluid state of the batch."""
    given = getattr(batch.base, side)
    inlet, pressure = batch.number(f"{side}.inlet_temperature"), batch.number(f"{side}.pressure")
    other = batch.number(f"{'cold' if side == 'hot' else 'hot'}.inlet_temperature")
    numbers = {each: batch.number(f"{side}.{each}") for each in SPEC_NUMBERS if batch.given(f"{side}.{each}")}
    if given.fluid == "exhaust gas":
        numbers.pop("dry_oxygen", None)
        numbers["excess_air_ratio"] = _excess_air_ratio(batch, side)
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


def _excess_air_ratio(batch: Batch, side: str) -> FloatArray:
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


def _mass_flow(
    batch: Batch, side: str, inlet_density: FloatArray, molar_mass: FloatArray, water: FloatArray
) -> FloatArray:
    """Mass flow of one side from whichever way it was given [kg/s], (cases,)."""
    given = getattr(batch.base, side)
    if batch.given(f"{side}.mass_flow"):
        return batch.number(f"{side}.mass_flow")
    if batch.given(f"{side}.volume_flow"):
        return batch.number(f"{side}.volume_flow") * inlet_density
    if given.standard_volume_flow is not None:
        standard = given.standard_volume_flow
        moles = standard.volume_flow * standard.pressure / (GAS_CONSTANT * standard.temperature)
        return np.asarray(moles * molar_mass / (1.0 - water if standard.basis == "dry" else 1.0))
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
    layers, columns = batch.number("stack.layers"), batch.number("stack.columns")
    faces = batch.number(f"{side}.duct.faces")
    other_faces = batch.number(f"{'cold' if side == 'hot' else 'hot'}.duct.faces")
    ducts = duct_count(layers, faces, other_faces, closes_ends=side == "cold")
    half = np.where((faces == 2) & (other_faces == 2) & (side == "cold"), 2.0, 0.0)
    duct = getattr(batch.base, side).duct
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
        excess_air_ratio=_excess_air_ratio(batch, side),
        is_reservoir=getattr(batch.base, side).fluid == "reservoir",
    )
    if nothing_flows.is_reservoir:
        return nothing_flows
    fluid, tables, table_of_case = _fluid(batch, side, faults)
    if fluid is None:
        return nothing_flows
    molar_mass = np.array([table.molar_mass for table in tables])[table_of_case]
    water = np.array([table.water_fraction for table in tables])[table_of_case]
    mass_flow = _mass_flow(batch, side, fluid.density(inlet[None])[0], molar_mass, water)
    passages = batch.number(f"{side}.duct.passages", 1.0)
    width = columns * batch.number("stack.column_pitch")
    passage_width = batch.number(f"{side}.duct.width")
    passage_width = np.where(np.isnan(passage_width), width / passages, passage_width)
    film = DUCT_KINDS[duct.kind].build(
        DuctMeasures(
            mass_flow=mass_flow * faces / layers,
            gap=batch.number(f"{side}.duct.gap"),
            faces=faces,
            length=batch.number("stack.rows") * batch.number("stack.row_pitch"),
            duct_width=width,
            passages=passages,
            passage_width=passage_width,
            area_ratio=batch.number(f"{side}.duct.area_ratio", 1.0),
            place_area=batch.number("stack.row_pitch") * batch.number("stack.column_pitch"),
            fouling=batch.number(f"{side}.fouling", 0.0),
            roughness=batch.number(f"{side}.duct.roughness", 0.0),
            fin_pitch=batch.number(f"{side}.duct.fin_pitch"),
            fin_thickness=batch.number(f"{side}.duct.fin_thickness"),
            fin_conductivity=batch.number(f"{side}.duct.fin_conductivity"),
            strip_length=batch.number(f"{side}.duct.strip_length"),
        ),
        duct.entrance == "developing",
    )
    return dataclasses.replace(
        nothing_flows, mass_flow=mass_flow, fluid=fluid, tables=tables, table_of_case=table_of_case, film=film
    )


def _stack_side(batch: Batch, stream: Stream, module_resistance: FloatArray, segments: int) -> StackSide:
    """One side as the solver takes it."""
    side = stream.name
    place = batch.number("stack.row_pitch") * batch.number("stack.column_pitch")
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
    )


def footprint_area(batch: Batch) -> FloatArray:
    """Area of a module's face [m^2], (cases,)."""
    along, across = batch.base.module.footprint
    return np.full(batch.cases, along * across)


def _curve(batch: Batch, path: str, curve: CaseCurve | None) -> Curve:
    """Turn a case's curve, or the numbers that vary in its place, into one the solver evaluates."""
    if path in batch.varied:
        return PolynomialCurve.constant(batch.number(path))
    assert curve is not None
    if curve.kind == "table" and len(curve.values) > 1:
        return TableCurve(np.array(curve.temperatures), np.array(curve.values))
    return PolynomialCurve(np.array(curve.values)[:, None] * np.ones(batch.cases))


def module_model(batch: Batch) -> tuple[ModuleModel, tuple[MaterialRecord, ...], FloatArray]:
    """Return the module's model, its materials, and the resistance of one substrate [K/W], (cases,)."""
    module = batch.base.module
    if module.legs is None:
        curves = (
            _curve(batch, f"module.{name}", getattr(module, name)) for name in ("seebeck", "resistance", "conductance")
        )
        return MeanTemperatureModule(*curves), (), np.zeros(batch.cases)
    materials = (load_material(module.legs.n_material), load_material(module.legs.p_material))
    couples, length, area = (batch.number(f"module.legs.{name}") for name in ("couples", "length", "area"))
    free_area = np.maximum(footprint_area(batch) - 2.0 * couples * area, 0.0)
    model = LegModule(
        materials[0].material,
        materials[1].material,
        couples,
        length,
        area,
        batch.number("module.legs.contact_resistivity", 0.0),
        batch.number("module.legs.gap_filler", 0.0) * free_area / length,
    )
    thickness = batch.number("module.legs.substrate_thickness", 0.0)
    conductivity = batch.number("module.legs.substrate_conductivity")
    substrate = np.where(thickness > 0, thickness / (conductivity * footprint_area(batch)), 0.0)
    return model, materials, substrate


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
    faults.add(batch.number("stack.row_pitch") < along, "stack.row_pitch: smaller than the module; increase it")
    faults.add(batch.number("stack.column_pitch") < across, "stack.column_pitch: smaller than the module; increase it")
    faults.add(
        columns % batch.number("electrical.strings_across") != 0, "electrical.strings_across: must divide columns"
    )
    faults.add(
        layers % batch.number("electrical.layers_in_series") != 0, "electrical.layers_in_series: must divide layers"
    )
    faces = batch.number("hot.duct.faces") + batch.number("cold.duct.faces")
    faults.add(
        (faces > 2) & (layers % 2 != 0), "stack.layers: ducts that serve two layers need an even number of layers"
    )
    faults.add((faces == 4) & (layers < 4), "stack.layers: a repeating stack needs at least 4 layers")
    if batch.base.electrical.row_blocks is not None:
        faults.add(rows != sum(batch.base.electrical.row_blocks), "electrical.row_blocks: must add up to the rows")
    for path, declaration in DECLARATIONS.items():
        if path in batch.varied:
            number, low, high = batch.varied[path], declaration.minimum, declaration.maximum
            wrong = ~np.isfinite(number)
            if declaration.form == "integer":
                wrong = wrong | (number != np.floor(number))
            if declaration.above is not None:
                wrong = wrong | (number <= declaration.above)
            wrong = wrong | (number < (-np.inf if low is None else low)) | (number > (np.inf if high is None else high))
            faults.add(wrong, f"{path}: out of range; allowed is {limits_text(declaration) or 'a finite number'}")


def design(batch: Batch) -> Design:
    """Make a batch ready for the solver; faults of single cases are noted, not raised.

    Raises InputError for what concerns all cases: an unknown material.
    """
    faults = Faults(batch.cases)
    _arrangement_faults(batch, faults)
    segments = batch.base.stack.segments
    hot, cold = _stream(batch, "hot", faults), _stream(batch, "cold", faults)
    for stream in (hot, cold):
        if stream.fluid is not None:
            flow = f"{stream.name}.mass_flow: must be above zero"
            faults.add(~(stream.mass_flow > 0), flow)
    model, materials, substrate = module_model(batch)
    footprint = footprint_area(batch)
    place = batch.number("stack.row_pitch") * batch.number("stack.column_pitch")
    interfaces = tuple(batch.number(f"stack.{side}_interface", 0.0) / footprint for side in ("hot", "cold"))
    rows = np.where(faults.valid, batch.number("stack.rows"), 1.0).astype(np.int64)
    problem = StackProblem(
        rows=int(rows.max()) * segments,
        active_rows=rows * segments,
        hot=_stack_side(batch, hot, interfaces[0] + substrate, segments),
        cold=_stack_side(batch, cold, interfaces[1] + substrate, segments),
        bypass=batch.number("stack.filler_conductance", 0.0) * (place - footprint),
        loss=batch.number("stack.heat_loss_conductance", 0.0) * place,
        ambient_temperature=batch.number("site.ambient_temperature"),
        module=model,
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
        materials=materials,
        substrate_resistance=substrate,
        interface_resistance=(interfaces[0], interfaces[1]),
    )
