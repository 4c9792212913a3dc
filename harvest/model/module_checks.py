"""The checks of the module and of the data it is described by."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from harvest.model.checks import (
    AT_LEAST,
    FILL_FACTORS,
    LARGEST_CORRECTION,
    LARGEST_COUPLE_SEEBECK,
    LARGEST_MERIT,
    PASS,
    SMALLEST_COVERAGE,
    SOLDER_TEMPERATURE,
    WARN,
    BatchCheck,
    celsius,
    for_all,
    graded,
    solder_caution,
)
from harvest.model.module import (
    COOLER,
    GENERATOR,
    LARGEST_DISAGREEMENT,
    fill_factor,
)
from harvest.physics.thermoelectrics import figure_of_merit
from harvest.quantities import format_quantity

if TYPE_CHECKING:
    from harvest.model.solution import Solved


def checks_of_the_module(solved: Solved) -> Iterator[BatchCheck]:
    """Plausibility and range of the module's parameters, fill factor, coverage of the plates, clamping."""
    made, chosen = solved.made, solved.chosen
    batch, module = made.batch, made.batch.base.module
    couples = batch.number("module.couples") if module.legs is None else batch.number("module.legs.couples")
    if np.isfinite(couples).any():
        per_couple = chosen.largest(np.abs(chosen.seebeck)) / couples
        yield BatchCheck(
            "Seebeck of a couple",
            "Seebeck coefficient",
            per_couple,
            for_all(solved, LARGEST_COUPLE_SEEBECK),
            graded(per_couple > LARGEST_COUPLE_SEEBECK, level=WARN),
            lambda i: (
                f"{1e3 * per_couple[i]:.3f} mV/K a couple"
                + (
                    "; common materials stay below 0.5 mV/K: check the Seebeck coefficient and the number of couples."
                    if per_couple[i] > LARGEST_COUPLE_SEEBECK
                    else ", within the reach of common materials."
                )
            ),
        )
    mean = 0.5 * (chosen.state.hot_junction + chosen.state.cold_junction)
    merit = chosen.largest(figure_of_merit(chosen.seebeck, chosen.resistance, chosen.conductance) * mean)
    yield BatchCheck(
        "figure of merit",
        "dimensionless",
        merit,
        for_all(solved, LARGEST_MERIT),
        graded(merit > LARGEST_MERIT, level=WARN),
        lambda i: (
            f"Z T of the module is {merit[i]:.3g}"
            + ("; no module on the market comes near it." if merit[i] > LARGEST_MERIT else ".")
        ),
    )
    lower, upper = made.module.lower, made.module.upper
    if np.isfinite(upper) or lower > 0:
        hottest = chosen.largest(np.maximum(chosen.state.hot_junction, chosen.state.cold_junction))
        coldest = chosen.smallest(np.minimum(chosen.state.hot_junction, chosen.state.cold_junction))
        yield BatchCheck(
            "module data range",
            "temperature",
            hottest,
            for_all(solved, upper),
            graded((hottest > upper) | (coldest < lower), level=WARN),
            lambda i: (
                f"Junctions run from {celsius(coldest[i])} to {celsius(hottest[i])}; the module's data hold from "
                f"{celsius(lower)} to {celsius(upper)}."
            ),
        )
    if module.legs is not None:
        yield _fill_check(solved)
    coverage = made.footprint_area / made.place_area
    yield BatchCheck(
        "coverage",
        "dimensionless",
        coverage,
        for_all(solved, SMALLEST_COVERAGE),
        graded(coverage < SMALLEST_COVERAGE, level=WARN),
        lambda i: (
            f"Modules cover {100 * coverage[i]:.0f} % of the plates"
            + (
                "; heat must converge on them, and the wall's spreading decides."
                if coverage[i] < SMALLEST_COVERAGE
                else "."
            )
        ),
        bound=AT_LEAST,
    )
    pressure = batch.number("stack.clamp_pressure")
    force = pressure * made.footprint_area
    layer = force * batch.number("stack.rows") * batch.number("stack.columns")
    yield BatchCheck(
        "clamping force",
        "force",
        force,
        for_all(solved, np.nan),
        graded(force < 0, PASS),
        lambda i: (
            f"{format_quantity(pressure[i], 'pressure difference')} asks for {force[i] / 1e3:.2f} kN on a module and "
            f"{layer[i] / 1e3:.1f} kN on a layer; plates and bolts must bear it evenly."
        ),
    )


def _fill_check(solved: Solved) -> BatchCheck:
    filled = fill_factor(solved.made.batch)
    low, high = FILL_FACTORS
    sparse, dense = filled < low, filled > high

    def text(i: int) -> str:
        said = f"Legs fill {100 * filled[i]:.0f} % of the module's footprint"
        if not sparse[i] and not dense[i]:
            return f"{said}."
        usual = f"{100 * low:.0f} to {100 * high:.0f} % is common practice (no source)"
        return f"{said}; {usual}: check couples, area of a leg and footprint."

    return BatchCheck(
        "fill factor", "dimensionless", filled, for_all(solved, high), graded(sparse | dense, level=WARN), text
    )


def checks_of_the_module_data(solved: Solved) -> Iterator[BatchCheck]:
    """What the ratings say about themselves, and what a cooler suffers as a generator."""
    made, chosen = solved.made, solved.chosen
    batch, module = made.batch, made.module
    if module.way == GENERATOR and len(batch.base.module.generator_rating or ()) > 1:
        yield BatchCheck(
            "module data, rated points",
            "dimensionless",
            for_all(solved, module.residual),
            for_all(solved, LARGEST_DISAGREEMENT),
            graded(for_all(solved, module.residual) > LARGEST_DISAGREEMENT, level=WARN),
            lambda _: f"The rated points lie within {100 * module.residual:.2g} % of the parameters taken from them.",
        )
    if module.way != COOLER:
        return
    from harvest.model.rated_module import cooler_heat_disagreement, cooler_matched_powers

    apart = cooler_heat_disagreement(batch)
    if np.isfinite(apart).any():
        yield BatchCheck(
            "module data, heat rating",
            "dimensionless",
            np.abs(apart),
            for_all(solved, LARGEST_DISAGREEMENT),
            graded(np.abs(apart) > LARGEST_DISAGREEMENT, level=WARN),
            lambda i: (
                f"The stated heat rating differs by {100 * apart[i]:+.1f} % from the one that the other three imply, "
                "and so do the parameters by the two extractions."
            ),
        )
    hot, cold = chosen.state.hot_junction, chosen.state.cold_junction
    corrected, uncorrected = (chosen.total(each) for each in cooler_matched_powers(batch, hot, cold))
    flattery = np.where(corrected > 0, uncorrected / corrected - 1.0, 0.0)
    yield BatchCheck(
        "module data, rating temperature",
        "dimensionless",
        flattery,
        for_all(solved, LARGEST_CORRECTION),
        graded(np.abs(flattery) > LARGEST_CORRECTION, level=WARN),
        lambda i: (
            f"Into a matched load at these temperatures the modules give {format_quantity(corrected[i], 'power')} with "
            f"the parameters brought from the rating to the operating temperature, and "
            f"{format_quantity(uncorrected[i], 'power')} ({100 * flattery[i]:+.0f} %) with those of the rating; "
            f"{'the first are used.' if module.materials else 'the second are used, as the case asks.'}"
        ),
    )
    hottest = np.maximum(chosen.largest(chosen.hot_face), solved.open_circuit.largest(solved.open_circuit.hot_face))
    yield BatchCheck(
        "module data, solder",
        "temperature",
        hottest,
        for_all(solved, SOLDER_TEMPERATURE),
        graded(hottest > SOLDER_TEMPERATURE, level=WARN),
        lambda i: (
            f"A face of these coolers reaches {celsius(hottest[i])}, with or without load"
            + (f"; {solder_caution()}" if hottest[i] > SOLDER_TEMPERATURE else ".")
        ),
    )
