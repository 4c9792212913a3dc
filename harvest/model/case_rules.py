"""What must hold between the fields of a case."""

from __future__ import annotations

import functools
from collections.abc import Callable, Iterator
from typing import Any

import numpy as np

from harvest.model.case import selector_path
from harvest.model.case_fields import MOST_MODULES, Declaration
from harvest.model.loads import FIXED_RESISTANCE, FIXED_VOLTAGE
from harvest.model.stream_sections import GASES, GLYCOLS, HEAT_SINK, RATED
from harvest.quantities import significant

FLOWS = ("mass_flow", "volume_flow", "standard_volume_flow", "drive_curve")
ALTERNATIVES: tuple[tuple[str, ...], ...] = tuple(
    tuple(f"{side}.{name}" for name in names)
    for side in ("hot", "cold")
    for names in (FLOWS, ("mass_fraction", "volume_fraction"), ("excess_air_ratio", "dry_oxygen"))
)
CURVES = ("module.seebeck", "module.resistance", "module.conductance")
MODULE_WAYS = ("legs", "cooler_rating", "generator_rating")


class UnknownValueError(Exception):
    """A rule asks for a value that has a fault of its own, so the rule cannot be judged."""


class Values(dict[str, Any]):
    """Values by path; asking for one that has a fault stops the rule that asks."""

    def __init__(self) -> None:
        super().__init__()
        self.faulty: set[str] = set()

    def __missing__(self, path: str) -> Any:
        if path in self.faulty:
            raise UnknownValueError(path)
        raise KeyError(path)

    def given(self, *paths: str) -> list[str]:
        """Those of the paths that have a value."""
        return [path for path in paths if self[path] is not None]


Faults = Iterator[tuple[str, str]]


def applies(declaration: Declaration, path: str, values: Values) -> tuple[str, Any] | None:
    """None if the field applies, otherwise the path and the value of the field that decides so."""
    if declaration.applies is None:
        return None
    selector, allowed = declaration.applies
    owner = selector_path(path, selector)
    return None if values[owner] in allowed else (owner, values[owner])


def flow_is_given_once(side: str, values: Values) -> Faults:
    """Require one flow of a stream; exhaust gas may have it from the fuel."""
    if values[f"{side}.fluid"] == "reservoir" or values.get(f"{side}.duct.kind") == HEAT_SINK:
        return
    flows = values.given(*(f"{side}.{name}" for name in FLOWS))
    if len(flows) > 1:
        yield flows[-1], f"is a second flow beside {flows[0]}; give one of them"
    if values[f"{side}.fluid"] == "exhaust gas":
        yield from _exhaust_is_determined(values, side, flows[:1])
    elif not flows:
        yield f"{side}.mass_flow", 'a flow is missing; give mass_flow, for example "0.5 kg/s", or volume_flow'


def _exhaust_is_determined(values: Values, side: str, flows: list[str]) -> Faults:
    ratios = values.given(f"{side}.excess_air_ratio", f"{side}.dry_oxygen")
    fuel = values.given(f"{side}.fuel_flow")
    if len(ratios) > 1:
        yield ratios[1], "says the same as excess_air_ratio; give one of them"
    if fuel and flows and ratios:
        yield fuel[0], f"is one too many beside {flows[0]} and {ratios[0]}; give two of the three"
    if fuel and flows and not ratios and flows[0] != f"{side}.mass_flow":
        yield fuel[0], f"gives the excess air only with a mass_flow, not with {flows[0]}; give excess_air_ratio instead"
    if not flows and not fuel:
        yield f"{side}.mass_flow", "a flow is missing; give mass_flow, volume_flow, standard_volume_flow or fuel_flow"
    if not ratios and not (fuel and flows):
        yield f"{side}.excess_air_ratio", "is missing; give it, dry_oxygen, or both mass_flow and fuel_flow"
    standard = values[f"{side}.standard_volume_flow"]
    if standard is not None and standard.basis is None:
        yield f"{side}.standard_volume_flow", 'does not say whether the gas is wet or dry; add ", wet" or ", dry"'


def glycol_fraction_is_given_once(side: str, values: Values) -> Faults:
    """Require one fraction of a glycol solution."""
    fractions = values.given(f"{side}.mass_fraction", f"{side}.volume_fraction")
    if len(fractions) > 1:
        yield fractions[1], "is a second fraction beside mass_fraction; give one of them"
    if values[f"{side}.fluid"] in GLYCOLS and not fractions:
        yield f"{side}.volume_fraction", "is missing; give it, for example 0.5, or mass_fraction"


def wall_is_complete(side: str, values: Values) -> Faults:
    """Require a conductivity of a wall with a thickness."""
    yield from _conducts(values, f"{side}.duct.wall_thickness", f"{side}.duct.wall_conductivity")


def substrate_is_complete(values: Values) -> Faults:
    """Require a conductivity of a substrate with a thickness."""
    yield from _conducts(values, "module.legs.substrate_thickness", "module.legs.substrate_conductivity")


def _conducts(values: Values, thickness: str, conductivity: str) -> Faults:
    if values[thickness] and values[conductivity] is None:
        yield conductivity, f'is missing beside {thickness}; give for example "180 W/(m K)"'


def connection_has_a_pipe(side: str, values: Values) -> Faults:
    """Require the pipe in whose velocity heads the connection losses are."""
    duct = f"{side}.duct"
    if values[f"{duct}.connection_loss_coefficient"] and values[f"{duct}.connection_diameter"] is None:
        yield f"{duct}.connection_diameter", 'is missing; the connection losses need it, for example "50 mm"'


def passages_fit_the_plate(side: str, values: Values) -> Faults:
    """Require passages that fit side by side on the plate."""
    width = values[f"{side}.duct.width"]
    if width is None:
        return
    plate = values["stack.columns"] * values["stack.column_pitch"]
    passages = values[f"{side}.duct.passages"]
    if passages * width > plate * (1.0 + 1e-9):
        most = _mm(plate / passages)
        message = f"{passages} passages of {_mm(width)} do not fit on a plate of {_mm(plate)}; give at most {most}"
        yield f"{side}.duct.width", message


def blocks_tile_the_plate(side: str, values: Values) -> Faults:
    """Require rated blocks that cover whole rows of their share of the columns."""
    duct = f"{side}.duct"
    if values.get(f"{duct}.kind") != RATED:
        return
    columns, rows, faces = values["stack.columns"], values["stack.rows"], values[f"{duct}.faces"]
    across, modules = values[f"{duct}.blocks_in_parallel"], values[f"{duct}.modules_per_block"]
    if columns % across:
        yield f"{duct}.blocks_in_parallel", f"{across} does not divide the {columns} columns"
        return
    in_a_row = faces * columns // across
    if modules % in_a_row or rows % (modules // in_a_row):
        on_both = " on both faces" if faces == 2 else ""
        yield (
            f"{duct}.modules_per_block",
            f"{modules} modules do not tile {rows} rows of {columns} columns; with blocks_in_parallel = {across} a "
            f"block holds {in_a_row} modules a row{on_both}, and its rows must divide the {rows} rows",
        )
    if values[f"{side}.fouling"]:
        yield (
            f"{side}.fouling",
            "needs the wetted area, which a rated block does not tell; give duct.solid_resistance instead",
        )
    if side == "cold" and (values["hot.duct.faces"], faces) == (2, 2):
        yield (
            f"{duct}.faces",
            "2 on both sides is a repeating stack, which ends in half ducts, and there are no half blocks; give 1",
        )
    rated, fluid = values[f"{duct}.rated_fluid"], values[f"{side}.fluid"]
    if rated != "own" and (rated in GASES) != (fluid in GASES):
        yield (
            f"{duct}.rated_fluid",
            f"a curve for {rated} tells nothing of {fluid}; give a curve of the own fluid",
        )


SINK_GEOMETRY = tuple(
    f"cold.duct.sink_{name}"
    for name in ("height", "width", "fin_height", "fin_thickness", "conductivity", "emissivity")
)
FIN_COUNTS = ("cold.duct.sink_fin_spacing", "cold.duct.sink_fin_count")


def heat_sink_is_described_once(values: Values) -> Faults:
    """Require room air without a flow, and a resistance with its rise or a whole geometry."""
    if values.get("hot.duct.kind") == HEAT_SINK:
        yield "hot.duct.kind", 'a heat sink in room air is a cold side; for a hot wall give fluid = "reservoir"'
    if values.get("cold.duct.kind") != HEAT_SINK:
        return
    if values["cold.fluid"] != "air":
        yield "cold.fluid", f'{values["cold.fluid"]} cannot surround a heat sink; give "air"'
    for moving in values.given(*(f"cold.{name}" for name in FLOWS)):
        yield moving, 'does not apply to a heat sink in still air; for a fan give kind = "plain fins" or another duct'
    if values["cold.drive"] != "free" or values["cold.fouling"]:
        wrong = "fouling" if values["cold.fouling"] else "drive"
        yield f"cold.{wrong}", "does not apply to a heat sink in still air; remove it"
    if values["cold.duct.faces"] != 1:
        yield "cold.duct.faces", "a heat sink serves one module; give 1"
    if values["stack.layers"] > 1:
        yield (
            "stack.layers",
            "heat sinks stand in the room, so only one layer can carry them; give 1",
        )
    resistance = values.given("cold.duct.sink_resistance", "cold.duct.sink_temperature_rise")
    geometry, fins = values.given(*SINK_GEOMETRY), values.given(*FIN_COUNTS)
    if resistance and (geometry or fins):
        yield resistance[0], f"is given beside {(geometry + fins)[0]}; give a resistance or the geometry of the sink"
    elif len(resistance) == 1:
        missing = {"cold.duct.sink_resistance", "cold.duct.sink_temperature_rise"} - {*resistance}
        yield missing.pop(), f"is missing beside {resistance[0]}: a sink in still air has a resistance at one rise only"
    elif not resistance:
        yield from _sink_geometry_is_whole(geometry, fins)


def _sink_geometry_is_whole(geometry: list[str], fins: list[str]) -> Faults:
    if not geometry and not fins:
        yield (
            "cold.duct.sink_resistance",
            "is missing; give it with sink_temperature_rise, or sink_height, sink_width and the fins",
        )
        return
    for missing in SINK_GEOMETRY:
        if missing not in geometry:
            yield missing, "is missing beside the other measures of the sink"
    if len(fins) != 1:
        yield (
            FIN_COUNTS[len(fins) - 1] if fins else FIN_COUNTS[0],
            "give sink_fin_spacing or sink_fin_count, one of them",
        )


def without_effect(values: Values) -> set[str]:
    """Fields whose default assumes nothing, because the cold side is a heat sink."""
    if values.get("cold.duct.kind") != HEAT_SINK:
        return set()
    by_geometry = values.get("cold.duct.sink_resistance") is None
    return {"cold.fouling", "cold.drive", *(["cold.duct.sink_exponent"] if by_geometry else [])}


def circuit_belongs_to_a_curve(side: str, values: Values) -> Faults:
    """Require a circuit flow on the drive curve that gives it."""
    curve, flow = values[f"{side}.drive_curve"], values[f"{side}.circuit_flow"]
    if flow is None:
        return
    if curve is None:
        yield f"{side}.circuit_flow", "is used with a drive_curve only; give one, or remove it"
    elif not curve.flows[0] <= flow <= curve.flows[-1]:
        yield f"{side}.circuit_flow", "lies outside the drive_curve, which cannot give it"


def fins_fit_their_pitch(side: str, values: Values) -> Faults:
    """Require room between fins."""
    thickness, pitch = values[f"{side}.duct.fin_thickness"], values[f"{side}.duct.fin_pitch"]
    if thickness is not None and pitch is not None and thickness >= pitch:
        yield f"{side}.duct.fin_thickness", f"{_mm(thickness)} is not below the fin_pitch of {_mm(pitch)}"


def layers_suit_faces(values: Values) -> Faults:
    """Require layers in pairs where ducts have two faces."""
    faces = (values["hot.duct.faces"], values["cold.duct.faces"])
    layers = values["stack.layers"]
    if faces == (2, 2) and (layers < 4 or layers % 2):
        yield "stack.layers", f"{layers} is not possible where hot and cold ducts have 2 faces; give 4, 6, 8, ..."
    elif 2 in faces and layers % 2:
        yield "stack.layers", f"{layers} is odd, and a duct with 2 faces serves two layers; give an even number"


def modules_fit(values: Values) -> Faults:
    """Require places at least as large as the module."""
    for pitch, size, direction in zip(
        ("stack.row_pitch", "stack.column_pitch"), values["module.footprint"], ("along", "across"), strict=True
    ):
        if values[pitch] < size * (1 - 1e-9):
            yield (
                pitch,
                (
                    f"{_mm(values[pitch])} is less than the module's footprint of {_mm(size)} {direction} the flow; "
                    f"give at least {_mm(size)}"
                ),
            )


def modules_can_be_counted(values: Values) -> Faults:
    """Require a stack no larger than what can be solved."""
    count = values["stack.layers"] * values["stack.rows"] * values["stack.columns"]
    if count > MOST_MODULES:
        yield "stack.rows", f"layers x rows x columns is {count:,} modules; at most {MOST_MODULES:,} can be solved"


def strings_divide_the_columns(values: Values) -> Faults:
    """Require the same number of columns in each string."""
    columns, strings = values["stack.columns"], values["electrical.strings_across"]
    if columns % strings:
        yield "electrical.strings_across", f"{strings} does not divide the {columns} columns"


def series_divides_the_layers(values: Values) -> Faults:
    """Require the same number of layers in each string."""
    layers, series = values["stack.layers"], values["electrical.layers_in_series"]
    if layers % series:
        yield "electrical.layers_in_series", f"{series} does not divide the {layers} layers"


def blocks_add_up(values: Values) -> Faults:
    """Require blocks that use every row once."""
    blocks, rows = values["electrical.row_blocks"], values["stack.rows"]
    if blocks is not None and sum(blocks) != rows:
        yield "electrical.row_blocks", f"adds up to {sum(blocks)} rows, and the stack has {rows}"


def window_is_ordered(values: Values) -> Faults:
    """Require the converter's lowest voltage below its highest."""
    window = values["electrical.converter_window"]
    if window is not None and window[0] >= window[1]:
        yield "electrical.converter_window", f"{window[0]:g} V is not below {window[1]:g} V; give the lower one first"


def own_converters_suit_the_load(values: Values) -> Faults:
    """Require a load that every string can have for itself, where each has its own converter."""
    if not values["electrical.independent"]:
        return
    load = values["electrical.load"]
    if load in (FIXED_RESISTANCE, FIXED_VOLTAGE):
        yield "electrical.independent", f'each string has its own converter, so the load cannot be "{load}" for all'


def prices_are_in_one_currency(values: Values) -> Faults:
    """Require worths that can be compared."""
    heat, electricity = values["site.heat_value"], values["site.electricity_value"]
    if heat is not None and electricity is not None and heat.currency != electricity.currency:
        yield (
            "site.electricity_value",
            f"is in {electricity.currency}, and heat_value in {heat.currency}; give one currency",
        )


def legs_fit_the_footprint(values: Values) -> Faults:
    """Require legs that stand side by side on the module's face."""
    if values["module.legs"] is None:
        return
    along, across = values["module.footprint"]
    couples, area, face = values["module.legs.couples"], values["module.legs.area"], along * across
    if 2 * couples * area > face * (1.0 + 1e-9):
        yield (
            "module.legs.area",
            f"{2 * couples} legs of {_mm2(area)} need {_mm2(2 * couples * area)}, and the footprint has {_mm2(face)}; "
            "decrease it or module.legs.couples",
        )


def module_range_is_ordered(values: Values) -> Faults:
    """Require the parameters' lowest temperature below their highest."""
    lower, upper = values["module.minimum_temperature"], values["module.maximum_temperature"]
    if lower is not None and upper is not None and lower >= upper:
        yield "module.minimum_temperature", f"{lower:g} K is not below the maximum_temperature of {upper:g} K"


def module_is_described_once(values: Values) -> Faults:
    """Require curves, legs, cooler ratings or generator ratings."""
    curves = values.given(*CURVES)
    tables = [f"module.{way}" for way in MODULE_WAYS if values[f"module.{way}"] is not None]
    if curves and tables:
        yield curves[0], f"is given beside [{tables[0]}]; describe the module in one way"
    for second in tables[1:]:
        yield second, f"is given beside [{tables[0]}]; describe the module in one way"
    if not curves and not tables:
        yield (
            "module",
            'is not described; give use = "...", or seebeck, resistance and conductance, or one of '
            "[module.legs], [module.cooler_rating], [[module.generator_rating]]",
        )
    if values["module.legs"] is not None and values["module.couples"] is not None:
        yield "module.couples", "is given beside [module.legs], which has its own couples; leave it out"
    for missing in CURVES:
        if curves and not tables and missing not in curves:
            yield missing, "is missing beside the other parameters of the module"


def cooler_ratings_agree(values: Values) -> Faults:
    """Require ratings of a cooler that can belong to one part."""
    if values["module.cooler_rating"] is None:
        return
    from harvest.model.rating_rules import cooler_contradictions

    names = ("maximum_current", "maximum_voltage", "maximum_temperature_difference", "maximum_heat")
    given = [values[f"module.cooler_rating.{name}"] for name in (*names, "hot_side_temperature")]
    if given[3] is None and values["module.cooler_rating.extraction"] == "Zhang":
        yield "module.cooler_rating.maximum_heat", 'is missing; extraction = "Zhang" takes the parameters from it'
    with np.errstate(all="ignore"):
        for contradiction in cooler_contradictions(*(np.array([np.nan if v is None else v]) for v in given)):
            if contradiction.where[0]:
                yield f"module.cooler_rating.{contradiction.field}", contradiction.sentence(0)
                return


def generator_ratings_agree(values: Values) -> Faults:
    """Require rated points that determine the module and can be true; the first fault of each point is told."""
    points, merit = values["module.generator_rating"], values["module.figure_of_merit"]
    if points is None:
        if merit is not None:
            yield "module.figure_of_merit", "is used with [[module.generator_rating]] only; remove it"
        return
    from harvest.model.rating_rules import (
        LARGEST_MERIT,
        LARGEST_SCATTER,
        generator_contradictions,
        generator_scatter,
        rating_numbers,
    )

    numbers = rating_numbers(points)
    if merit is not None and merit > LARGEST_MERIT:
        yield "module.figure_of_merit", f"{merit:g} is above {LARGEST_MERIT:g}; no module comes near it, 0.7 is usual"
    if merit is not None and np.isfinite([numbers["efficiency"], numbers["heat_flow"]]).any():
        yield "module.figure_of_merit", "is given beside an efficiency or heat_flow of a point; leave one out"
    told: set[int] = set()
    with np.errstate(all="ignore"):
        for contradiction in generator_contradictions(numbers, merit):
            for index in map(int, np.flatnonzero(contradiction.where)):
                if index not in told:
                    told.add(index)
                    path = f"module.generator_rating[{index + 1}].{contradiction.field}"
                    yield path, contradiction.sentence(index)
    if not told and (scatter := generator_scatter(numbers, merit)) > LARGEST_SCATTER:
        yield (
            "module.generator_rating",
            f"a point lies {100 * scatter:.0f} % from constants or straight lines in mean temperature through all "
            "points; they cannot be of one module",
        )


def limits_can_be_judged(values: Values) -> Faults:
    """Require what a limit of height or mass needs of the module."""
    for limit, needed in (("maximum_height", "thickness"), ("maximum_module_mass", "mass")):
        if values[f"limits.{limit}"] is not None and values[f"module.{needed}"] is None:
            yield f"module.{needed}", f"is missing; limits.{limit} cannot be judged without it"


def prices_are_given(values: Values) -> Faults:
    """Require prices where a sizing looks for the least cost."""
    objective = values["size.objective"]
    if objective is not None and objective.startswith("cost") and values["cost.module"] is None:
        yield "size.objective", f'"{objective}" needs prices; give [cost] with module and more'


def wiring_is_searched_once(values: Values) -> Faults:
    """Require that what a sizing groups by itself is not listed too."""
    fields = values["size.fields"] or {}
    listed = [path for path in ("electrical.strings_across", "electrical.layers_in_series") if path in fields]
    if values["size.wiring"] == "search" and listed:
        yield f"size.{listed[0]}", 'is listed beside wiring = "search", which tries all; leave one out'


SIDE_RULES: tuple[Callable[[str, Values], Faults], ...] = (
    flow_is_given_once,
    glycol_fraction_is_given_once,
    wall_is_complete,
    connection_has_a_pipe,
    fins_fit_their_pitch,
    passages_fit_the_plate,
    blocks_tile_the_plate,
    circuit_belongs_to_a_curve,
)
RULES: tuple[Callable[[Values], Faults], ...] = (
    *(functools.partial(rule, side) for side in ("hot", "cold") for rule in SIDE_RULES),
    heat_sink_is_described_once,
    substrate_is_complete,
    layers_suit_faces,
    modules_fit,
    modules_can_be_counted,
    strings_divide_the_columns,
    series_divides_the_layers,
    blocks_add_up,
    window_is_ordered,
    own_converters_suit_the_load,
    prices_are_in_one_currency,
    prices_are_given,
    wiring_is_searched_once,
    limits_can_be_judged,
    module_range_is_ordered,
    legs_fit_the_footprint,
    module_is_described_once,
    cooler_ratings_agree,
    generator_ratings_agree,
)


def broken_rules(values: Values) -> Faults:
    """Faults of all rules that can be judged."""
    for rule in RULES:
        try:
            yield from rule(values)
        except UnknownValueError:
            continue


def _mm(length: float) -> str:
    return f"{significant(length * 1e3, 4)} mm"


def _mm2(area: float) -> str:
    return f"{significant(area * 1e6, 4)} mm^2"
