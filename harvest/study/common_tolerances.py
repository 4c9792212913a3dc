"""Tolerances that a study of doubt takes where the case states none, each with its source."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from harvest.model.case import Case
from harvest.model.stream_sections import GASES, HEAT_SINK, RATED
from harvest.model.tolerances import NORMAL, Tolerance, normal, within_factor

NO_SOURCE = "common practice, no source"


def _anywhere(_case: Case, _path: str) -> bool:
    return True


@dataclass(frozen=True)
class CommonTolerance:
    """A tolerance of the same kind of fields: where it holds, `where` in words and `holds` for a case and a field."""

    fields: tuple[str, ...]
    tolerance: Tolerance
    source: str
    where: str = ""
    holds: Callable[[Case, str], bool] = _anywhere


def _sides(*names: str) -> tuple[str, ...]:
    return tuple(f"{side}.{name}" for name in names for side in ("hot", "cold"))


def _duct(*kinds: str) -> Callable[[Case, str], bool]:
    return lambda case, path: getattr(case, path.partition(".")[0]).duct.kind in kinds


def _is_liquid(case: Case, path: str) -> bool:
    return getattr(case, path.partition(".")[0]).fluid not in (*GASES, "reservoir")


def _is_cooler(case: Case, _path: str) -> bool:
    return case.module.cooler_rating is not None


FLOWS = _sides("mass_flow", "volume_flow", "standard_volume_flow", "circuit_flow")
STRIPS = "offset strip fins"
GNIELINSKI = (
    "Gnielinski's equation within about 10 % (Incropera et al. 2011, from memory), widened for flow that is uneven "
    "between ducts"
)
MANGLIK = "the correlation holds its data within 20 % (Manglik and Bergles 1995, from memory)"
ROUND_ROBIN = (
    "common practice; together 16 % in Z T, of which laboratories that measured the same pieces were 12 to 21 % apart "
    "(Wang et al. 2013, from memory)"
)
FROM_COOLER = "common practice, no source: a label's ratings, carried from the rating to the operating temperature"

COMMON_TOLERANCES = (
    CommonTolerance(
        _sides("inlet_temperature"),
        Tolerance(NORMAL, -5.0, 5.0),
        f"{NO_SOURCE}: thermocouple, its place and its day",
        "gases, reservoirs",
        lambda case, path: not _is_liquid(case, path),
    ),
    CommonTolerance(
        _sides("inlet_temperature"),
        Tolerance(NORMAL, -2.0, 2.0),
        NO_SOURCE,
        "liquids",
        _is_liquid,
    ),
    CommonTolerance(FLOWS, normal(0.05), f"{NO_SOURCE}: a flow meter as built in", "liquids", _is_liquid),
    CommonTolerance(FLOWS, normal(0.08), f"{NO_SOURCE}: a gas flow", "gases"),
    CommonTolerance(_sides("fuel_flow", "excess_air_ratio", "dry_oxygen"), normal(0.05), NO_SOURCE),
    CommonTolerance(_sides("film_coefficient"), normal(0.20), NO_SOURCE, "reservoirs"),
    CommonTolerance(
        _sides("duct.film_factor"), normal(0.15), GNIELINSKI, "smooth, plain fins", _duct("smooth", "plain fins")
    ),
    CommonTolerance(_sides("duct.film_factor"), normal(0.20), MANGLIK, STRIPS, _duct(STRIPS)),
    CommonTolerance(_sides("duct.film_factor"), normal(0.10), f"{NO_SOURCE}: a rated curve", RATED, _duct(RATED)),
    CommonTolerance(
        _sides("duct.film_factor"), normal(0.20), f"{NO_SOURCE}: still air, draughts", HEAT_SINK, _duct(HEAT_SINK)
    ),
    CommonTolerance(
        _sides("duct.friction_loss_factor"),
        normal(0.15),
        f"{NO_SOURCE}: clean straight ducts within 10 %, widened for burrs and uneven gaps",
        "smooth, plain fins",
        _duct("smooth", "plain fins"),
    ),
    CommonTolerance(_sides("duct.friction_loss_factor"), normal(0.20), MANGLIK, STRIPS, _duct(STRIPS)),
    CommonTolerance(
        _sides("duct.friction_loss_factor"), normal(0.10), f"{NO_SOURCE}: a rated curve", RATED, _duct(RATED)
    ),
    CommonTolerance(
        _sides("duct.minor_loss_coefficient", "duct.connection_loss_coefficient"),
        normal(0.30),
        f"{NO_SOURCE}: loss coefficients of fittings",
    ),
    CommonTolerance(_sides("duct.gap"), normal(0.03), f"{NO_SOURCE}: made and under pressure"),
    CommonTolerance(_sides("duct.wall_conductivity", "duct.fin_conductivity"), normal(0.10), f"{NO_SOURCE}: alloy"),
    CommonTolerance(
        _sides("fouling"),
        within_factor(2.0),
        f"{NO_SOURCE}: a design value, not a measurement",
        "passages",
        _duct("smooth", "plain fins", STRIPS),
    ),
    CommonTolerance(
        ("stack.hot_interface", "stack.cold_interface"),
        within_factor(1.5),
        f"{NO_SOURCE}: flatness, pressure and ageing of the joint",
    ),
    CommonTolerance(("stack.filler_conductance", "stack.heat_loss_conductance"), normal(0.30), NO_SOURCE),
    CommonTolerance(("module.seebeck_factor",), normal(0.06), FROM_COOLER, "cooler ratings", _is_cooler),
    CommonTolerance(("module.resistance_factor",), normal(0.10), FROM_COOLER, "cooler ratings", _is_cooler),
    CommonTolerance(("module.conductance_factor",), normal(0.12), FROM_COOLER, "cooler ratings", _is_cooler),
    CommonTolerance(("module.seebeck_factor",), normal(0.05), ROUND_ROBIN),
    CommonTolerance(("module.resistance_factor",), normal(0.08), ROUND_ROBIN),
    CommonTolerance(("module.conductance_factor",), normal(0.10), ROUND_ROBIN),
    CommonTolerance(_sides("drive_efficiency"), normal(0.20), f"{NO_SOURCE}: small machines with their motors"),
    CommonTolerance(_sides("generator_efficiency"), normal(0.03), NO_SOURCE),
    CommonTolerance(("electrical.converter_efficiency",), normal(0.03), NO_SOURCE),
    CommonTolerance(("electrical.load_resistance", "electrical.load_voltage"), normal(0.05), NO_SOURCE),
    CommonTolerance(
        ("electrical.lead_resistance", "electrical.blocking_diode_drop", "electrical.converter_standby_power"),
        normal(0.20),
        NO_SOURCE,
    ),
    CommonTolerance(("electrical.auxiliary_power",), normal(0.10), NO_SOURCE),
)
"""The first that holds for a field is taken."""
