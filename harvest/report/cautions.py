"""The usual cautions of the trade, those that apply to a case, with its numbers."""

from __future__ import annotations

from harvest.model.case import Case
from harvest.model.results import Estimate
from harvest.model.stream_sections import HEAT_SINK
from harvest.quantities import format_quantity

TOUCH_LIMIT = 333.15
LOW_VOLTAGE = 60.0
LIQUIDS = ("water", "ethylene glycol", "propylene glycol", "table")


def _celsius(kelvin: float) -> str:
    return f"{kelvin - 273.15:.0f} degC"


def cautions(case: Case, answer: Estimate) -> list[str]:
    """Sentences on what can hurt somebody or the equipment in this case."""
    hot, cold = case.hot, case.cold
    values = {check.name: check.value for check in answer.checks}
    limits = {check.name: check.limit for check in answer.checks}
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
            f"Back pressure: {format_quantity(answer.hot_pressure_drop, 'pressure difference', 3)} when clean; the "
            "engine's or burner's maker states how much is allowed; soot raises it with time, so make the ducts "
            "accessible for cleaning.",
        ]
        if "hot water dew point" in values:
            lines.append(
                "Condensate of exhaust gas is acid; water condenses below "
                f"{_celsius(limits['hot water dew point'])}, and the coldest wall is at "
                f"{_celsius(values['hot water dew point'])}. Drain it from the lowest point; expect it in cold starts."
            )
    pressures = [side.pressure for side in (hot, cold) if side.fluid in LIQUIDS]
    if pressures:
        lines.append(
            f"Pressure: a liquid loop, here at up to {format_quantity(max(pressures), 'pressure', 3)} absolute, that "
            "can be shut off while it is heated needs a relief valve and room to expand; keep its protection against "
            "freezing and scaling."
        )
    lines.append(
        f"Loss of load: without current the hottest face settles at {_celsius(answer.open_circuit_face_temperature)}, "
        f"{answer.open_circuit_face_temperature - answer.hottest_face_temperature:.0f} K above that at this load."
    )
    if cold.fluid != "reservoir" and cold.duct.kind != HEAT_SINK:
        lines.append(
            f"Loss of coolant: if the cold stream stops, the modules settle at up to "
            f"{_celsius(answer.coolant_lost_face_temperature)}; provide a trip or a bypass on the hot side if they do "
            "not bear it."
        )
    highest = values["open-circuit voltage"]
    if highest > LOW_VOLTAGE:
        lines.append(
            f"Electrical: a string stands at up to {format_quantity(highest, 'voltage', 3)} DC "
            "whenever the stack is warm, also with the load disconnected; it cannot be switched off. Insulate, mark "
            "and fuse it."
        )
    else:
        lines.append(
            f"Electrical: a string stands at up to {format_quantity(highest, 'voltage', 3)} DC whenever the stack is "
            "warm; fuse parallel strings, since DC arcs do not go out by themselves."
        )
    lines += [
        "Clamping: modules crack under uneven load; tighten each to "
        f"{format_quantity(values['clamping force'], 'force', 3)}, evenly, with springs that follow up to "
        f"{format_quantity(values['thermal expansion'], 'length', 2)} of thermal expansion, and release the force with "
        "care.",
        "Local codes and the judgement of a licensed engineer go before this estimate.",
    ]
    return lines
