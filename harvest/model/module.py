"""The module of a case: its model from whichever way it is described, and where it comes from."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from harvest.model.batch import Batch
from harvest.model.case_fields import Curve as CaseCurve
from harvest.model.materials import MaterialRecord, load_material
from harvest.physics.arrays import FloatArray
from harvest.physics.curves import Curve, PolynomialCurve, TableCurve
from harvest.physics.thermoelectrics import LegModule, MeanTemperatureModule, ModuleModel
from harvest.quantities import format_quantity

COOLER = "cooler ratings"
GENERATOR = "generator ratings"
FACTORS = ("module.seebeck_factor", "module.resistance_factor", "module.conductance_factor")
LARGEST_DISAGREEMENT = 0.05
"""Relative disagreement of a module's data that is worth a warning."""
SLENDERNESS = (0.3, 5.0)
"""Length of a leg over its width between which legs are commonly built; common practice, no source."""
SHORT_LEG = 1e-3
"""Length of a leg [m] below which its contacts count."""


@dataclass(frozen=True, eq=False, repr=False)
class DescribedModule:
    """A module with where it comes from.

    `substrate_resistance` (cases,) of one substrate [K/W], `lower` and `upper` [K] the range in which the parameters
    hold (0 and infinity if unknown); `provenance` one sentence that goes after "parameters"; `residual` the largest
    relative residual of fitted rated points.
    """

    model: ModuleModel
    substrate_resistance: FloatArray
    materials: tuple[MaterialRecord, ...]
    lower: float
    upper: float
    way: str
    provenance: str
    warnings: tuple[str, ...] = ()
    residual: float = 0.0


def described_module(batch: Batch) -> DescribedModule:
    """Return the module of a batch from whichever way it is described.

    Raises InputError for an unknown material. Where cases differ in their ratings, words are those of the first case.
    """
    module = batch.base.module
    build: Callable[[Batch], DescribedModule] = _of_curves
    if module.legs is not None:
        build = _of_legs
    elif module.cooler_rating is not None or module.generator_rating is not None:
        from harvest.model.rated_module import of_cooler_ratings, of_generator_ratings

        build = of_cooler_ratings if module.cooler_rating is not None else of_generator_ratings
    described = build(batch)
    factors = np.stack([batch.number(path, 1.0) for path in FACTORS])
    if np.all(factors == 1.0):
        return described
    from harvest.physics.ratings import ScaledModule

    scaled = ScaledModule(described.model, factors)
    return replace(described, model=scaled, provenance=f"{described.provenance}, times the stated factors")


def footprint_area(batch: Batch) -> FloatArray:
    """Area of a module's face [m^2], (cases,)."""
    along, across = batch.base.module.footprint
    return np.full(batch.cases, along * across)


def fill_factor(batch: Batch) -> FloatArray:
    """Legs' share of the module's footprint [-], (cases,); NaN where the module is not described by its legs."""
    couples, area = batch.number("module.legs.couples"), batch.number("module.legs.area")
    return 2.0 * couples * area / footprint_area(batch)


def joined(
    batch: Batch,
    model: ModuleModel,
    way: str,
    provenance: str,
    materials: tuple[MaterialRecord, ...] = (),
    substrate: FloatArray | None = None,
    lower: float = 0.0,
    upper: float = np.inf,
    warnings: tuple[str, ...] = (),
    residual: float = 0.0,
) -> DescribedModule:
    """Join what a way knows with the range that the case states."""
    module = batch.base.module
    return DescribedModule(
        model,
        np.zeros(batch.cases) if substrate is None else substrate,
        materials,
        max(lower, module.minimum_temperature or 0.0),
        min(upper, module.maximum_temperature or np.inf),
        way,
        provenance,
        warnings,
        residual,
    )


def _curve(batch: Batch, path: str, curve: CaseCurve | None) -> Curve:
    """Turn a case's curve, or the numbers that vary in its place, into one the solver evaluates."""
    if path in batch.varied:
        return PolynomialCurve.constant(batch.number(path))
    assert curve is not None
    if curve.kind == "table" and len(curve.values) > 1:
        return TableCurve(np.array(curve.temperatures), np.array(curve.values))
    return PolynomialCurve(np.array(curve.values)[:, None] * np.ones(batch.cases))


def _of_curves(batch: Batch) -> DescribedModule:
    module = batch.base.module
    curves = (
        _curve(batch, f"module.{name}", getattr(module, name)) for name in ("seebeck", "resistance", "conductance")
    )
    return joined(batch, MeanTemperatureModule(*curves), "curves", "from curves of mean temperature")


def _of_legs(batch: Batch) -> DescribedModule:
    legs = batch.base.module.legs
    assert legs is not None
    materials = (load_material(legs.n_material), load_material(legs.p_material))
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
    return joined(
        batch,
        model,
        "legs",
        "from materials and legs",
        materials,
        substrate,
        max(each.lower for each in materials),
        min(each.upper for each in materials),
        _leg_warnings(batch),
    )


def _leg_warnings(batch: Batch) -> tuple[str, ...]:
    """What is odd in the geometry of the first case's legs."""
    length, width = float(batch.number("module.legs.length")[0]), float(batch.number("module.legs.area")[0]) ** 0.5
    warnings = []
    slenderness, (low, high) = length / width, SLENDERNESS
    if not low <= slenderness <= high:
        warnings.append(
            f"A leg's length is {slenderness:.2g} of its width; {low:g} to {high:g} is common practice (no source): "
            "check its length and area."
        )
    thickness = float(batch.number("module.thickness")[0])
    taken = length + 2.0 * float(batch.number("module.legs.substrate_thickness", 0.0)[0])
    if taken > (1.0 + LARGEST_DISAGREEMENT) * thickness:
        warnings.append(
            f"Legs and two substrates are {format_quantity(taken, 'length')} thick together, and the module only "
            f"{format_quantity(thickness, 'length')}: check length, substrate_thickness and thickness."
        )
    if length < SHORT_LEG and not batch.number("module.legs.contact_resistivity", 0.0)[0]:
        warnings.append(
            f"The contacts of legs of {format_quantity(length, 'length')} are taken without resistance, which flatters "
            "short legs: give contact_resistivity."
        )
    return tuple(warnings)
