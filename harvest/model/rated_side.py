"""A side of bought blocks: from its rated curves to the film of a place, with the faults of each case."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from harvest.errors import RangeError
from harvest.model.property_store import stored_table
from harvest.physics.arrays import BoolArray, FloatArray
from harvest.physics.fluids import FluidBatch, FluidSpec
from harvest.physics.rated import RatedFilm, conductance_of_block, mean_from_inlet_resistance, rated_value
from harvest.quantities import format_quantity

if TYPE_CHECKING:
    from harvest.model.batch import Batch
    from harvest.model.design import Faults, Stream

RATING_PRESSURE = 101325.0
SLOPE_STEP = 1e-4
"""Relative change of flow by which the slope of a block's film is taken."""
LEEWAY = 1e-9


def block_rows(batch: Batch, side: str) -> FloatArray:
    """Rows that one block covers [-], (cases,)."""
    duct = f"{side}.duct"
    in_layer = batch.number(f"{duct}.modules_per_block") / batch.number(f"{duct}.faces")
    return in_layer * batch.number(f"{duct}.blocks_in_parallel") / batch.number("stack.columns")


def _rating_fluid(batch: Batch, stream: Stream, faults: Faults | None) -> tuple[FloatArray, ...] | None:
    """Density, heat capacity, viscosity and conductivity at the rating, each (cases,); None where there are none."""
    name, field = getattr(batch.base, stream.name).duct.rated_fluid, f"{stream.name}.duct.rated_temperature"
    temperature = batch.number(field)
    if name == "own":
        assert stream.fluid is not None
        fluid, tables, table_of_case = stream.fluid, stream.tables, stream.table_of_case
    else:
        try:
            low, high = float(temperature.min()), float(temperature.max())
            tables = (stored_table(FluidSpec(name=name), RATING_PRESSURE, low, high),)
        except RangeError as error:
            if faults is not None:
                faults.add(np.ones(batch.cases, dtype=bool), f"{field}: {error}")
            return None
        table_of_case = np.zeros(batch.cases, dtype=np.int64)
        fluid = FluidBatch.stack(tables, table_of_case)
    lower, upper = (
        np.array([getattr(table, limit) for table in tables])[table_of_case] for limit in ("lower_limit", "upper_limit")
    )
    if faults is not None:
        faults.add(
            (temperature < lower) | (temperature > upper),
            lambda i: f"{field}: {tables[table_of_case[i]].outside(float(temperature[i]))}",
        )
    heat_capacity, viscosity, conductivity = fluid.film_properties(temperature[None])
    return fluid.density(temperature[None])[0], heat_capacity[0], viscosity[0], conductivity[0]


def rated_film(batch: Batch, stream: Stream, mass_flow: FloatArray, faults: Faults | None) -> RatedFilm | None:
    """Film of one side's rated blocks, None where nothing can be built; faults are noted where they are asked for.

    Parameters: `mass_flow` [kg/s] of one duct, (cases,).
    """
    side, duct = stream.name, getattr(batch.base, stream.name).duct
    rating = _rating_fluid(batch, stream, faults)
    if rating is None:
        return None
    density, heat_capacity, viscosity, conductivity = rating
    flow = mass_flow / batch.number(f"{side}.duct.blocks_in_parallel") / density
    flows, resistances = np.array(duct.block_resistance.flows), np.array(duct.block_resistance.values)
    drop_flows, drops = np.array(duct.block_pressure_drop.flows), np.array(duct.block_pressure_drop.values)
    solid = batch.number(f"{side}.duct.solid_resistance", 0.0)
    resistance, exponent = rated_value(flow, flows, resistances)

    def film(share: float) -> FloatArray:
        """Conductance of the block's fluid film at a share of the flow, along the same power law."""
        capacity = share * flow * density * heat_capacity
        mean = resistance * share**exponent
        if duct.resistance_refers_to == "inlet":
            mean = mean_from_inlet_resistance(mean, capacity)
        return np.asarray(1.0 / (1.0 / conductance_of_block(mean, capacity) - solid))

    conductance = film(1.0)
    slope = np.log(film(1.0 + SLOPE_STEP) / film(1.0 - SLOPE_STEP)) / np.log((1.0 + SLOPE_STEP) / (1.0 - SLOPE_STEP))
    drop, drop_exponent = rated_value(flow, drop_flows, drops)
    rows = block_rows(batch, side)
    found = RatedFilm(
        flow=flow,
        film_conductance=batch.number(f"{side}.duct.film_factor", 1.0) * conductance,
        solid_resistance=solid,
        modules=batch.number(f"{side}.duct.modules_per_block"),
        in_series=batch.number("stack.rows") / rows,
        reynolds_exponent=slope,
        prandtl_exponent=batch.number(f"{side}.duct.prandtl_exponent"),
        pressure_drop=drop,
        drop_exponent=drop_exponent,
        rated_density=density,
        rated_viscosity=viscosity,
        rated_conductivity=conductivity,
        rated_prandtl=heat_capacity * viscosity / conductivity,
    )
    if faults is not None:
        _rated_faults(batch, stream, found, resistance, heat_capacity, faults)
    return found


def rated_range(batch: Batch, side: str) -> tuple[float, float]:
    """Lowest and highest flow of one block that both its curves hold [m^3/s]."""
    duct = getattr(batch.base, side).duct
    curves = (duct.block_resistance.flows, duct.block_pressure_drop.flows)
    return max(flows[0] for flows in curves), min(flows[-1] for flows in curves)


def _rated_faults(
    batch: Batch,
    stream: Stream,
    film: RatedFilm,
    resistance: FloatArray,
    heat_capacity: FloatArray,
    faults: Faults,
) -> None:
    side, given = stream.name, getattr(batch.base, stream.name)
    low, high = rated_range(batch, side)
    span = f"{format_quantity(low, 'volume flow')} to {format_quantity(high, 'volume flow')}"

    def beyond(flow: FloatArray) -> BoolArray:
        return (flow < low * (1.0 - LEEWAY)) | (flow > high * (1.0 + LEEWAY))

    outside = beyond(film.flow)
    faults.add(
        outside,
        lambda i: (
            f"{side}.duct.block_resistance: {format_quantity(film.flow[i], 'volume flow')} through each block is "
            f"outside its rated {span}; change the flow or blocks_in_parallel"
        ),
    )
    assert stream.fluid is not None
    if given.duct.rated_fluid not in ("own", given.fluid):
        alike = film.rated_flow_of_equal_reynolds(stream.fluid.viscosity(stream.inlet_temperature[None])[0])
        faults.add(
            ~outside & beyond(alike),
            lambda i: (
                f"{side}.duct.block_resistance: the block's Reynolds number with {given.fluid} is that of "
                f"{format_quantity(alike[i], 'volume flow')} of {given.duct.rated_fluid}, outside the rated {span}; "
                "give curves of this fluid"
            ),
        )
    capacity = film.flow * film.rated_density * heat_capacity
    impossible = ~outside & np.isfinite(film.flow) & ~(film.film_conductance > 0)
    by_inlet = given.duct.resistance_refers_to == "inlet"
    least = (1.0 if by_inlet else 0.5) / capacity
    solid = film.solid_resistance
    faults.add(
        impossible,
        lambda i: (
            f"{side}.duct.block_resistance: {format_quantity(resistance[i], 'thermal resistance')} is not possible on "
            f"the {'inlet' if by_inlet else 'mean'} temperature, where the fluid alone takes "
            f"{format_quantity(least[i], 'thermal resistance')}"
            + (f" and the metal {format_quantity(solid[i], 'thermal resistance')}" if solid[i] > 0 else "")
            + "; check resistance_refers_to"
        ),
    )


def arrangement_faults(batch: Batch, side: str, faults: Faults) -> None:
    """Flag cases in which the blocks do not tile the plates."""
    across = batch.number(f"{side}.duct.blocks_in_parallel")
    columns, rows = batch.number("stack.columns"), batch.number("stack.rows")
    along = block_rows(batch, side)
    faults.add(columns % across != 0, f"{side}.duct.blocks_in_parallel: must divide the columns")
    whole = (along >= 1) & (np.abs(along - np.round(along)) < LEEWAY)
    tiles = whole & (np.abs(rows / along - np.round(rows / along)) < LEEWAY)
    faults.add(
        (columns % across == 0) & ~tiles,
        f"{side}.duct.modules_per_block: the blocks do not tile the plate; with faces it must cover whole rows of "
        "columns / blocks_in_parallel modules, and the rows a whole number of blocks",
    )
    faults.add(
        batch.number(f"{side}.fouling", 0.0) > 0,
        f"{side}.fouling: needs the wetted area, which a rated block does not tell; give duct.solid_resistance instead",
    )
    both = (batch.number("hot.duct.faces") == 2) & (batch.number("cold.duct.faces") == 2)
    faults.add(
        both & (side == "cold"),
        f"{side}.duct.faces: a repeating stack ends in half ducts, and there are no half blocks; give 1",
    )
