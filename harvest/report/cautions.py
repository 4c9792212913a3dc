"""The usual cautions of the trade, those that apply to a case, with its numbers."""

from __future__ import annotations

from harvest.model.case import Case
from harvest.model.results import Estimate
from harvest.quantities import format_quantity

TOUCH_LIMIT = 333.15
LOW_VOLTAGE = 60.0
LIQUIDS = ("water", "ethylene glycol", "propylene glycol", "table")


def _celsius(kelvin: float) -> str:
    return f"{kelvin - 273.15:.0f} degC"


def cautions(case: Case, answer: Estimate) -> list[str]:
    """Sentences on what can hurt somebody or the equipment in this case."""
    hot, cold = case.hot, case.cold
    lines = []
    hottest = max(hot.inlet_temperature, cold.inlet_temperature)
    if hottest > TOUCH_LIMIT:
        lines.append(
            f"Hot surfaces: metal reaches up to {_celsius(hottest)}; insulate or guard what can be touched, and keep "
            "fuels and insulation that burns away from it."
        )
    if hot.fluid == "exhaust gas":
        lines += [
            "Exhaust: leaks carry carbon monoxide. Joints, gaskets and thermal expansion need the care of an exhaust "
            "system; ventilate, and use a carbon monoxide alarm where people stay.",
            "Back pressure: the engine's or burner's maker states how much is allowed; soot raises it with time, so "
            "make the ducts accessible for cleaning.",
            "Condensate of exhaust gas is acid; drain it from the lowest point, and expect it in cold starts.",
        ]
    if any(side.fluid in LIQUIDS for side in (hot, cold)):
        lines.append(
            "Pressure: a liquid loop that can be shut off while it is heated needs a relief valve and room to expand; "
            "keep its protection against freezing and scaling."
        )
    if cold.fluid != "reservoir":
        lines.append(
            f"Loss of coolant: if the cold stream stops, the modules drift towards the hot inlet, "
            f"{_celsius(hot.inlet_temperature)}; provide a trip or a bypass on the hot side if they do not bear it."
        )
    if abs(answer.open_circuit_voltage) > LOW_VOLTAGE:
        lines.append(
            f"Electrical: the string stands at up to {format_quantity(answer.open_circuit_voltage, 'voltage', 3)} DC "
            "whenever the stack is warm, also with the load disconnected; it cannot be switched off. Insulate, mark "
            "and fuse it."
        )
    else:
        lines.append(
            "Electrical: the string is live whenever the stack is warm; fuse parallel strings, since DC arcs do not go "
            "out by themselves."
        )
    lines += [
        "Clamping: modules crack under uneven load; tighten evenly with springs that follow thermal expansion, and "
        "release the force with care.",
        "Local codes and the judgement of a licensed engineer go before this estimate.",
    ]
    return lines
