"""What must hold between the fields of a case."""

from __future__ import annotations

import functools
from collections.abc import Callable, Iterator
from typing import Any

from harvest.model.case import GLYCOLS, MOST_MODULES
from harvest.model.case_fields import Declaration
from harvest.model.loads import FIXED_RESISTANCE, FIXED_VOLTAGE
from harvest.quantities import significant

FLOWS = ("mass_flow", "volume_flow", "standard_volume_flow")
ALTERNATIVES: tuple[tuple[str, ...], ...] = tuple(
    tuple(f"{side}.{name}" for name in names)
    for side in ("hot", "cold")
    for names in (FLOWS, ("mass_fraction", "volume_fraction"), ("excess_air_ratio", "dry_oxygen"))
)
CURVES = ("module.seebeck", "module.resistance", "module.conductance")


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
    owner = selector_path(selector, path, values)
    return None if values[owner] in allowed else (owner, values[owner])


def selector_path(selector: str, path: str, values: Values) -> str:
    """Path of the field of that name beside or above a field."""
    owner = path.rpartition(".")[0]
    while owner and f"{owner}.{selector}" not in values and f"{owner}.{selector}" not in values.faulty:
        owner = owner.rpartition(".")[0]
    return f"{owner}.{selector}"


def flow_is_given_once(side: str, values: Values) -> Faults:
    """Require one flow of a stream; exhaust gas may have it from the fuel."""
    if values[f"{side}.fluid"] == "reservoir":
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


def module_range_is_ordered(values: Values) -> Faults:
    """Require the parameters' lowest temperature below their highest."""
    lower, upper = values["module.minimum_temperature"], values["module.maximum_temperature"]
    if lower is not None and upper is not None and lower >= upper:
        yield "module.minimum_temperature", f"{lower:g} K is not below the maximum_temperature of {upper:g} K"


def module_is_described_once(values: Values) -> Faults:
    """Require either three curves or legs."""
    curves, legs = values.given(*CURVES), values["module.legs.couples"] is not None
    if curves and legs:
        yield curves[0], "is given beside [module.legs]; describe the module in one way"
    if not curves and not legs:
        yield "module", 'is not described; give use = "...", or seebeck, resistance and conductance, or [module.legs]'
    for missing in CURVES:
        if curves and not legs and missing not in curves:
            yield missing, "is missing beside the other parameters of the module"


SIDE_RULES: tuple[Callable[[str, Values], Faults], ...] = (
    flow_is_given_once,
    glycol_fraction_is_given_once,
    wall_is_complete,
    connection_has_a_pipe,
    fins_fit_their_pitch,
)
RULES: tuple[Callable[[Values], Faults], ...] = (
    *(functools.partial(rule, side) for side in ("hot", "cold") for rule in SIDE_RULES),
    substrate_is_complete,
    layers_suit_faces,
    modules_fit,
    modules_can_be_counted,
    strings_divide_the_columns,
    series_divides_the_layers,
    blocks_add_up,
    window_is_ordered,
    own_converters_suit_the_load,
    module_range_is_ordered,
    module_is_described_once,
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
