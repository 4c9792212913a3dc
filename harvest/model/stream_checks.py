"""The checks of a stream in its ducts, blocks or heat sinks: range, boiling, freezing, condensate, flow, drive."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from harvest.model.checks import (
    ACID_MARGIN,
    AT_LEAST,
    BOILING_MARGIN,
    FAIL,
    FASTEST,
    FREEZING_MARGIN,
    LARGEST_ARITHMETIC_UNITS,
    LARGEST_DROP_SHARE,
    LARGEST_MACH,
    PASS,
    SMALLEST_DUCT_SHARE,
    SPACING_SHARES,
    WARN,
    BatchCheck,
    celsius,
    for_all,
    graded,
)
from harvest.model.pressure import handled_density
from harvest.physics.arrays import BoolArray, FloatArray
from harvest.physics.combustion import GAS_CONSTANT, sulphuric_acid_dew_point, sulphuric_acid_fraction, water_dew_point
from harvest.physics.ducts import LAMINAR_LIMIT, OFFSET_STRIP_REYNOLDS_RANGE, TURBULENT_LIMIT
from harvest.physics.films import Film, OffsetStripFilm
from harvest.physics.rated import RatedFilm
from harvest.quantities import format_quantity

if TYPE_CHECKING:
    from harvest.model.design import Stream
    from harvest.model.solution import Solved
    from harvest.physics.natural_convection import FinnedSink


def checks_of_a_stream(solved: Solved, scalars: dict[str, FloatArray], stream: Stream) -> Iterator[BatchCheck]:
    """All checks of one side's stream; none of a reservoir or of still air."""
    if stream.fluid is None or stream.film is None:
        return
    side, chosen = stream.name, solved.chosen
    boundaries = chosen.state.hot_stream if side == "hot" else chosen.state.cold_stream
    metal = chosen.hot_metal if side == "hot" else chosen.cold_metal
    warmest, coldest = chosen.largest(metal), chosen.smallest(metal)
    bulk_high, bulk_low = boundaries.max(axis=0), boundaries.min(axis=0)
    lower, upper = stream.table_value("lower_limit"), stream.table_value("upper_limit")
    label = stream.tables[0].label
    yield BatchCheck(
        f"{side} fluid range",
        "temperature",
        bulk_high,
        upper,
        graded((bulk_high > upper) | (bulk_low < lower)),
        lambda i: (
            f"The stream runs from {celsius(bulk_low[i])} to {celsius(bulk_high[i])}; {label} is served from "
            f"{celsius(lower[i])} to {celsius(upper[i])}."
        ),
    )
    boiling, freezing = stream.table_value("boiling"), stream.table_value("freezing")
    if np.isfinite(boiling).any():
        yield BatchCheck(
            f"{side} boiling at the wall",
            "temperature",
            warmest,
            boiling,
            np.where(warmest >= boiling, FAIL, graded(warmest > boiling - BOILING_MARGIN, level=WARN)),
            lambda i: (
                f"The warmest wetted wall is at {celsius(warmest[i])}; {label} boils at about {celsius(boiling[i])} "
                f"at its inlet pressure, {boiling[i] - warmest[i]:.0f} K of margin."
            ),
        )
    if np.isfinite(freezing).any():
        yield BatchCheck(
            f"{side} freezing at the wall",
            "temperature",
            coldest,
            freezing,
            np.where(coldest <= freezing, FAIL, graded(coldest < freezing + FREEZING_MARGIN, level=WARN)),
            lambda i: (
                f"The coldest wetted wall is at {celsius(coldest[i])}; {label} freezes at {celsius(freezing[i])}."
            ),
            bound=AT_LEAST,
        )
    yield from _of_condensate(solved, stream, metal)
    mean = 0.5 * (boundaries[:-1] + boundaries[1:])
    yield from _of_the_description(solved, scalars, stream, mean)
    yield from _of_the_drive(solved, scalars, stream)
    gas = bool(np.isfinite(stream.table_value("molar_mass")).all())
    if isinstance(stream.film, RatedFilm):
        yield from _of_rated_blocks(solved, stream, stream.film, mean)
    else:
        yield from _of_passages(solved, stream, stream.film, mean, (bulk_low, bulk_high), gas)
    drop = scalars[f"{side}_pressure_drop"]
    part = drop / stream.pressure
    yield BatchCheck(
        f"{side} pressure drop share",
        "dimensionless",
        part,
        for_all(solved, LARGEST_DROP_SHARE),
        np.where(part >= 1.0, FAIL, graded(part > LARGEST_DROP_SHARE, level=WARN)),
        lambda i: (
            f"The drop of {format_quantity(drop[i], 'pressure difference')} is {100 * part[i]:.2g} % of the inlet's "
            "absolute pressure."
        ),
    )


def _of_passages(
    solved: Solved, stream: Stream, film: Film, mean: FloatArray, bulk: tuple[FloatArray, FloatArray], gas: bool
) -> Iterator[BatchCheck]:
    """Flow regime, velocity and Mach number in computed ducts; `mean` and lowest and highest `bulk` [K]."""
    assert stream.fluid is not None
    side, chosen, (bulk_low, bulk_high) = stream.name, solved.chosen, bulk
    reynolds = film.reynolds(stream.fluid.viscosity(mean))
    if isinstance(film, OffsetStripFilm):
        low, high = OFFSET_STRIP_REYNOLDS_RANGE
        odd: BoolArray = (reynolds < low) | (reynolds > high)
        sentence = f"of {side} rows lie outside the offset-strip correlation, Re {low:.0f} to {high:.0f}."
    else:
        odd = (reynolds > LAMINAR_LIMIT) & (reynolds < TURBULENT_LIMIT)
        sentence = (
            f"of {side} rows lie in the transition between laminar and turbulent flow, where films are least sure."
        )
    share = (odd & (chosen.active > 0)).sum(axis=0) / chosen.active.sum(axis=0)
    yield BatchCheck(
        f"{side} flow regime",
        "dimensionless",
        share,
        for_all(solved, 0.0),
        graded(share > 0, level=WARN),
        lambda i: f"{100 * share[i]:.0f} % {sentence}",
    )
    fastest = FASTEST["gas" if gas else "liquid"]
    density = stream.fluid.density(np.stack([bulk_low, bulk_high]))
    velocity = (film.mass_flux / density).max(axis=0)
    yield BatchCheck(
        f"{side} velocity",
        "speed",
        velocity,
        for_all(solved, fastest),
        graded(velocity > fastest, level=WARN),
        lambda i: (
            f"Up to {velocity[i]:.2f} m/s in the {side} ducts; common practice, no source, stays below {fastest:g} m/s."
        ),
    )
    if gas:
        capacity = stream.fluid.heat_capacity(bulk_high[None])[0]
        specific = GAS_CONSTANT / stream.table_value("molar_mass")
        sound = np.sqrt(capacity / (capacity - specific) * specific * bulk_high)
        mach = velocity / sound
        yield BatchCheck(
            f"{side} Mach number",
            "dimensionless",
            mach,
            for_all(solved, LARGEST_MACH),
            graded(mach > LARGEST_MACH, level=WARN),
            lambda i: f"Mach {mach[i]:.3f}; above {LARGEST_MACH:g} the incompressible pressure drop no longer holds.",
        )


def _of_rated_blocks(solved: Solved, stream: Stream, film: RatedFilm, mean: FloatArray) -> Iterator[BatchCheck]:
    """Flow through each rated block, and the flow at the rating that has the same Reynolds number."""
    from harvest.model.rated_side import rated_range

    assert stream.fluid is not None
    batch, side = solved.made.batch, stream.name
    low, high = rated_range(batch, side)
    alike = film.rated_flow_of_equal_reynolds(stream.fluid.viscosity(mean))
    least, most = solved.chosen.smallest(alike), solved.chosen.largest(alike)
    beyond = (least < low) | (most > high)
    across = batch.number(f"{side}.duct.blocks_in_parallel")
    yield BatchCheck(
        f"{side} rated blocks",
        "volume flow",
        film.flow,
        for_all(solved, high),
        graded(beyond, level=WARN),
        lambda i: (
            f"{format_quantity(film.flow[i], 'volume flow')} through each block, {across[i]:.0f} in parallel and "
            f"{film.in_series[i]:.0f} in series in a duct, rated from {format_quantity(low, 'volume flow')} to "
            f"{format_quantity(high, 'volume flow')}; by Reynolds number that is "
            f"{format_quantity(least[i], 'volume flow')} to {format_quantity(most[i], 'volume flow')} at the rating"
            + (", beyond the curve: its slope there is taken." if beyond[i] else ".")
        ),
    )


def _of_the_drive(solved: Solved, scalars: dict[str, FloatArray], stream: Stream) -> Iterator[BatchCheck]:
    """Where a pump or fan curve meets the resistance."""
    batch, side = solved.made.batch, stream.name
    curve = getattr(batch.base, side).drive_curve
    if curve is None:
        return
    outlet = scalars[f"{side}_outlet_temperature"]
    flow = stream.mass_flow / handled_density(batch, stream, outlet)
    without = np.fmin(batch.number(f"{side}.circuit_flow"), curve.flows[-1])
    drop = scalars[f"{side}_pressure_drop"]
    yield BatchCheck(
        f"{side} drive curve",
        "volume flow",
        flow,
        without,
        graded(flow < 0, PASS),
        lambda i: (
            f"The curve drives {format_quantity(flow[i], 'volume flow')} through the stack, which takes "
            f"{format_quantity(drop[i], 'pressure difference')}"
            + (
                f"; without the stack the circuit has {format_quantity(without[i], 'volume flow')}."
                if batch.given(f"{side}.circuit_flow")
                else "; the rest of the circuit is not given and takes nothing."
            )
        ),
    )


def checks_of_heat_sinks(solved: Solved) -> Iterator[BatchCheck]:
    """What heat sinks in still air ask of their place."""
    made, chosen = solved.made, solved.chosen
    if made.cold.sink is None:
        return
    batch, room = made.batch, made.cold.inlet_temperature
    rise = chosen.largest(np.abs(chosen.cold_metal - room))
    above = batch.number("stack.rows") * batch.number("stack.columns") > 1
    yield BatchCheck(
        "heat sink air",
        "temperature difference",
        rise,
        for_all(solved, np.nan),
        graded(above, level=WARN),
        lambda i: (
            f"The warmest heat sink stands {format_quantity(rise[i], 'temperature difference')} above the room"
            + (
                "; each is taken in fresh room air: set them side by side, as one above another meets warmed air."
                if above[i]
                else " in fresh, still air with its fins vertical."
            )
        ),
    )
    from harvest.physics.natural_convection import FinnedSink

    if isinstance(made.cold.sink, FinnedSink):
        yield _spacing_check(solved, made.cold.sink, rise)


def _spacing_check(solved: Solved, sink: FinnedSink, rise: FloatArray) -> BatchCheck:
    room = solved.made.cold.inlet_temperature
    best = sink.optimum_spacing(room + rise, room)
    share = sink.fin_spacing / best
    low, high = SPACING_SHARES
    odd = (share < low) | (share > high)
    return BatchCheck(
        "heat sink fin spacing",
        "length",
        sink.fin_spacing,
        high * best,
        graded(odd, level=WARN),
        lambda i: (
            f"Fins stand {format_quantity(sink.fin_spacing[i], 'length')} apart; at this rise thin fins of this height "
            f"give most heat at {format_quantity(best[i], 'length')}."
        ),
    )


def _of_the_description(
    solved: Solved, scalars: dict[str, FloatArray], stream: Stream, mean: FloatArray
) -> Iterator[BatchCheck]:
    """What in a side's description limits the trust in its numbers."""
    assert stream.fluid is not None and stream.film is not None
    batch, side, chosen = solved.made.batch, stream.name, solved.chosen
    if batch.base.stack.row_model == "arithmetic":
        heat_capacity, viscosity, conductivity = stream.fluid.film_properties(mean)
        problem = solved.made.problem
        capacity = (problem.hot if side == "hot" else problem.cold).mass_flow * heat_capacity
        units = chosen.largest(stream.film.conductance(heat_capacity, viscosity, conductivity) / capacity)
        yield BatchCheck(
            f"{side} row model",
            "dimensionless",
            units,
            for_all(solved, LARGEST_ARITHMETIC_UNITS),
            graded(units > LARGEST_ARITHMETIC_UNITS, level=WARN),
            lambda i: (
                f"Up to {units[i]:.2g} film transfer units in one segment; the arithmetic row model holds to "
                f'{LARGEST_ARITHMETIC_UNITS:g}: take row_model = "exponential" or more segments.'
            ),
        )
    if getattr(batch.base, side).drive == "engine" and not batch.given(f"{side}.swept_volume_flow"):
        power = scalars[f"{side}_drive_power"]
        yield BatchCheck(
            f"{side} engine power",
            "power",
            power,
            for_all(solved, np.nan),
            np.full(batch.cases, WARN),
            lambda i: (
                f"{format_quantity(power[i], 'power', 3)} is an upper bound, taken from the exhaust's own volume flow; "
                f"give {side}.swept_volume_flow."
            ),
        )
    width = batch.number(f"{side}.duct.width") * batch.number(f"{side}.duct.passages", 1.0)
    plate = batch.number("stack.columns") * batch.number("stack.column_pitch")
    share = np.where(np.isnan(width), 1.0, width / plate)
    if (share < SMALLEST_DUCT_SHARE).any():
        yield BatchCheck(
            f"{side} duct width",
            "dimensionless",
            share,
            for_all(solved, SMALLEST_DUCT_SHARE),
            graded(share < SMALLEST_DUCT_SHARE, level=WARN),
            lambda i: (
                f"The passages cover {100 * share[i]:.0f} % of the plate, and the film is taken on all of it; give an "
                f"area_ratio of about {share[i]:.2f} if the rest is not wetted."
            ),
            bound=AT_LEAST,
        )


def _of_condensate(solved: Solved, stream: Stream, metal: FloatArray) -> Iterator[BatchCheck]:
    """Dew points of water and of sulphuric acid against the metal that the gas meets, row by row."""
    water = stream.table_value("water_fraction")
    if not (water > 0).any():
        return
    batch, side, segments = solved.made.batch, stream.name, solved.made.segments
    coldest = solved.chosen.smallest(metal)

    def wet_rows(i: int, limit: float) -> str:
        wet = (metal[:, i] < limit) & (solved.chosen.active[:, i] > 0)
        return f" in {-(-int(wet.sum()) // segments)} of {batch.number('stack.rows')[i]:.0f} rows"

    dew = water_dew_point(water * stream.pressure)
    yield BatchCheck(
        f"{side} water dew point",
        "temperature",
        coldest,
        dew,
        graded(coldest < dew, level=WARN),
        lambda i: (
            f"The coldest gas-side wall is at {celsius(coldest[i])}; water condenses below {celsius(dew[i])}"
            + (f"{wet_rows(i, dew[i])}; drain the condensate, which is acid." if coldest[i] < dew[i] else ".")
        ),
        bound=AT_LEAST,
    )
    sulphur = batch.number(f"{side}.fuel_sulphur", 0.0)
    if (sulphur > 0).any():
        fraction = sulphuric_acid_fraction(
            getattr(batch.base, side).fuel,
            stream.excess_air_ratio,
            batch.number(f"{side}.intake_humidity", 0.0),
            sulphur,
            batch.number(f"{side}.sulphur_conversion", 0.0),
        )
        acid = sulphuric_acid_dew_point(water * stream.pressure, fraction * stream.pressure)
        yield BatchCheck(
            f"{side} acid dew point",
            "temperature",
            coldest,
            acid + ACID_MARGIN,
            graded(coldest < acid + ACID_MARGIN, level=WARN),
            lambda i: (
                f"The coldest gas-side wall is at {celsius(coldest[i])}; sulphuric acid condenses below about "
                f"{celsius(acid[i])} (+-5 K){wet_rows(i, acid[i]) if coldest[i] < acid[i] else ''}; metal is "
                f"kept {ACID_MARGIN:.0f} K above, common practice, no source."
            ),
            bound=AT_LEAST,
        )
