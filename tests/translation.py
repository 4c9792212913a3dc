"""Writes a design of the independent solver as a case of the package."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping

from harvest.model.case import Case
from harvest.model.reading import read_case
from tests.independent.stack import Design, Load, Module, Side


def _lines(items: Mapping[str, object]) -> str:
    return "\n".join(f"{key} = {json.dumps(value)}" for key, value in items.items() if value is not None)


def _fluid(side: Side) -> tuple[dict[str, object], str]:
    name = side.fluid.name
    if name == "constant":
        c = side.fluid.constants
        table = {
            "density": f"{c['rho']!r} kg/m^3",
            "heat_capacity": f"{c['cp']!r} J/(kg K)",
            "viscosity": f"{c['mu']!r} Pa s",
            "conductivity": f"{c['k']!r} W/(m K)",
        }
        return {"fluid": "table"}, _lines(table)
    if name == "exhaust":
        fuel = f"C{side.fluid.carbon:g}H{side.fluid.hydrogen:g}"
        return {"fluid": "exhaust gas", "fuel": fuel, "excess_air_ratio": side.fluid.excess_air_ratio}, ""
    if name.startswith("INCOMP::"):
        code, fraction = name.removeprefix("INCOMP::").rstrip("]").split("[")
        glycol = "ethylene glycol" if "E" in code else "propylene glycol"
        kind = "volume_fraction" if code.startswith("A") else "mass_fraction"
        return {"fluid": glycol, kind: float(fraction)}, ""
    return {"fluid": name.lower()}, ""


def _side(name: str, side: Side) -> str:
    temperature = f"{side.inlet_temperature!r} K"
    if side.reservoir_film_coefficient is not None:
        film = f"{side.reservoir_film_coefficient!r} W/(m^2 K)"
        items: dict[str, object] = {"fluid": "reservoir", "inlet_temperature": temperature, "film_coefficient": film}
        table = ""
    else:
        items, table = _fluid(side)
        items |= {
            "inlet_temperature": temperature,
            "mass_flow": f"{side.mass_flow!r} kg/s",
            "pressure": f"{side.pressure!r} Pa",
            "fouling": f"{side.fouling!r} m^2 K/W",
        }
    duct = side.duct
    wall: dict[str, object] = {"faces": duct.faces, "wall_thickness": f"{duct.wall_thickness!r} m"}
    if duct.wall_thickness:
        wall["wall_conductivity"] = f"{duct.wall_conductivity!r} W/(m K)"
    if side.reservoir_film_coefficient is None:
        wall |= {
            "kind": duct.kind,
            "gap": f"{duct.gap!r} m",
            "frontal_area_ratio": duct.frontal_area_ratio,
            "area_ratio": duct.area_ratio if duct.kind == "smooth" else None,
            "passages": duct.passages if duct.kind == "smooth" else None,
            "width": f"{duct.width!r} m" if duct.width else None,
        }
        if duct.kind != "smooth":
            wall |= {
                "fin_pitch": f"{duct.fin_pitch!r} m",
                "fin_thickness": f"{duct.fin_thickness!r} m",
                "fin_conductivity": f"{duct.fin_conductivity!r} W/(m K)",
            }
        if duct.kind == "offset strip fins":
            wall["strip_length"] = f"{duct.strip_length!r} m"
    parts = [f"[{name}]\n{_lines(items)}", f"[{name}.duct]\n{_lines(wall)}"]
    if table:
        parts.append(f"[{name}.table]\n{table}")
    return "\n".join(parts)


def _module(module: Module) -> str:
    items: dict[str, object] = {
        "footprint": [f"{each!r} m" for each in module.footprint],
        "seebeck": list(module.seebeck),
        "resistance": list(module.resistance),
        "conductance": list(module.conductance),
    }
    return f"[module]\n{_lines(items)}"


def case_text(design: Design, load: Load) -> str:
    """The case file of a design at a load."""
    stack: dict[str, object] = {
        "layers": design.layers,
        "rows": design.rows,
        "columns": design.columns,
        "row_pitch": f"{design.row_pitch!r} m",
        "column_pitch": f"{design.column_pitch!r} m",
        "hot_interface": f"{design.hot_interface!r} m^2 K/W",
        "cold_interface": f"{design.cold_interface!r} m^2 K/W",
        "filler_conductance": f"{design.filler_conductance!r} W/(m^2 K)",
        "heat_loss_conductance": f"{design.heat_loss_conductance!r} W/(m^2 K)",
        "spreading": "constriction" if design.spreading else "none",
        "row_model": design.row_model,
        "segments": design.segments,
    }
    electrical: dict[str, object] = {
        "load": load.kind,
        "strings_across": design.strings_across,
        "row_blocks": list(design.row_blocks) or None,
        "layers_in_series": design.layers_in_series,
        "lead_resistance": f"{design.lead_resistance!r} ohm",
        "blocking_diode_drop": f"{design.diode_drop!r} V",
        "independent": load.independent,
    }
    if not math.isnan(load.value):
        name, unit = ("load_resistance", "ohm") if load.kind == "fixed resistance" else ("load_voltage", "V")
        electrical[name] = f"{load.value!r} {unit}"
    return "\n".join(
        [
            f'[site]\nambient_temperature = "{design.ambient_temperature!r} K"',
            _side("hot", design.hot),
            _side("cold", design.cold),
            f"[stack]\n{_lines(stack)}",
            _module(design.module),
            f"[electrical]\n{_lines(electrical)}",
        ]
    )


def case_of(design: Design, load: Load) -> Case:
    """The case of a design at a load."""
    return read_case(case_text(design, load))
