"""The drawings of a memo: the stack to scale, the path of the energy, temperatures, module counts, how sure it is.

A `prefix` keeps the drawings of several cases apart.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from harvest.model.case import Case
from harvest.model.results import Estimate
from harvest.model.stream_sections import HEAT_SINK, Side
from harvest.physics.arrays import BoolArray, FloatArray
from harvest.report.memo.svg import (
    BLUE,
    GREEN,
    GREY,
    INK,
    ORANGE,
    PALE,
    SKY,
    VERMILION,
    WIDTH,
    Axes,
    Canvas,
    Point,
    apart,
    tick_text,
    ticks,
)
from harvest.report.memo.values import Drawing, Group, Said, Value
from harvest.report.terminal import fluid_words

if TYPE_CHECKING:
    from harvest.study.doubt import Doubt
    from harvest.study.size import SizeCurve

HOT_GROUND, COLD_GROUND, WALL, MODULE = "#fbe3d3", "#dcedf8", "#8c8c8c", "#333333"
NOMINAL_DUCT, NOMINAL_MODULE = 0.02, 0.004
"""Heights [m] drawn where a case gives none; the drawing then says so."""
MOST_MODULES_DRAWN = 1500
MOST_LAYERS_DRAWN = 16
THINNEST = 1.0
"""Height of a slab below which it could not be seen [px]."""
FIN_STEP = 7.0
"""Distance of a heat sink's fins as drawn [px]."""


@dataclass(frozen=True)
class _Slab:
    """One slab of the stack seen from the side: hot, cold or module, with its height and its walls [m]."""

    kind: str
    height: float
    wall: float = 0.0


def _duct(side: Side, kind: str, share: float = 1.0) -> _Slab:
    duct = side.duct
    wall = duct.wall_thickness
    if side.fluid == "reservoir":
        return _Slab(kind, max(wall, NOMINAL_DUCT / 2), wall)
    if duct.kind == HEAT_SINK:
        return _Slab(kind, wall + (duct.sink_fin_height or NOMINAL_DUCT), wall)
    return _Slab(kind, share * (duct.gap or NOMINAL_DUCT) + 2 * wall, wall)


def _heights_given(case: Case) -> bool:
    """Whether every height that is drawn stands in the case."""
    ducts = all(
        side.duct.gap is not None or (side.duct.kind == HEAT_SINK and side.duct.sink_fin_height is not None)
        for side in (case.hot, case.cold)
    )
    return ducts and case.module.thickness is not None


def _slabs(case: Case, layers: int) -> list[_Slab]:
    """Slabs of so many layers, from above."""
    hot, cold = _duct(case.hot, "hot"), _duct(case.cold, "cold")
    module = _Slab("module", case.module.thickness or NOMINAL_MODULE)
    faces = (case.hot.duct.faces, case.cold.duct.faces)
    if faces == (1, 1):
        return [hot, module, cold] * layers
    if faces == (2, 1):
        return [cold, module, hot, module, cold] * (layers // 2)
    if faces == (1, 2):
        return [hot, module, cold, module, hot] * (layers // 2)
    end = _duct(case.cold, "cold", 0.5)
    pairs = [slab for i in range(layers // 2) for slab in ([cold] * (i > 0) + [module, hot, module])]
    return [end, *pairs, end]


def stack_drawing(
    case: Case, answer: Estimate, scalars: Group, inlets: tuple[Value, Value], prefix: str = ""
) -> Drawing:
    """The stack from the side and one layer from above, to scale, with flows and temperatures."""
    shown = min(case.stack.layers, MOST_LAYERS_DRAWN)
    slabs = _slabs(case, shown)
    heights_known = _heights_given(case)
    length, width = answer.stack_length, answer.stack_width
    total = sum(slab.height for slab in slabs)
    room = WIDTH - 200
    scale = min(room / length, 190 / total, 190 / width)
    left = (WIDTH - scale * length) / 2
    top = 44.0
    bottom = top + max(sum(max(scale * slab.height, THINNEST) for slab in slabs), 34.0)
    plan_top = bottom + 86
    height = plan_top + scale * width + 40
    canvas = Canvas(f"{prefix}stack", height)
    hot_ducts, cold_ducts = (_flow_words(case, scalars, name) for name in ("hot", "cold"))
    canvas.text((WIDTH / 2, 14), ["Hot side: ", fluid_words(case.hot), *hot_ducts], anchor="middle", bold=True)
    middles = _draw_side(canvas, case, slabs, (left, top), scale)
    _draw_streams(canvas, case, scalars, inlets, middles, (left, left + scale * length))
    canvas.text(
        (WIDTH / 2, bottom + 24), ["Cold side: ", fluid_words(case.cold), *cold_ducts], anchor="middle", bold=True
    )
    note = "Seen from the side, along the flow"
    if shown < case.stack.layers:
        note += "; sixteen of the layers are drawn"
    if not heights_known:
        note += "; heights are not all given, and not to scale"
    elif scale * min(slab.height for slab in slabs) < THINNEST:
        note += "; thin parts are drawn thicker than to scale"
    canvas.text((WIDTH / 2, bottom + 40), note, size=10, anchor="middle", colour=GREY)
    canvas.text((WIDTH / 2, plan_top - 10), "One layer seen from above", size=10, anchor="middle", colour=GREY)
    _draw_plan(canvas, case, (left, plan_top), scale)
    _dimension(canvas, (left, plan_top + scale * width + 12), scale * length, scalars.stack_length)
    _dimension(canvas, (left - 12, plan_top), scale * width, scalars.stack_width, upright=True)
    if heights_known and scalars.stack_height.known and shown == case.stack.layers:
        _dimension(
            canvas, (left + scale * length + 12, plan_top), 0.0, scalars.stack_height, words="height of the stack "
        )
    return canvas.drawing("The stack to scale, from the side and one layer from above, with flows and temperatures")


def _flow_words(case: Case, scalars: Group, name: str) -> list[str | Value]:
    side = getattr(case, name)
    if side.fluid == "reservoir":
        return [" at a fixed temperature"]
    if side.duct.kind == HEAT_SINK:
        return [", still, at heat sinks"]
    count = getattr(scalars, f"{name}_duct_count")
    flow = getattr(scalars, f"{name}_mass_flow")
    return [", ", flow, " in ", count, " ducts" if count.raw != 1 else " duct"]


def _draw_side(canvas: Canvas, case: Case, slabs: Sequence[_Slab], at: Point, scale: float) -> dict[str, list[float]]:
    """Draw the slabs and return the middles of hot and cold ducts."""
    left, y = at
    length = scale * case.stack.rows * case.stack.row_pitch
    fills = {"hot": canvas.hatch(VERMILION, HOT_GROUND), "cold": COLD_GROUND}
    middles: dict[str, list[float]] = {"hot": [], "cold": []}
    foot = (case.module.footprint or (0.9 * case.stack.row_pitch,))[0]
    for slab in slabs:
        height = max(scale * slab.height, THINNEST)
        if slab.kind == "module":
            canvas.rectangle((left, y), (length, height), "#f4f4f4")
            single = case.stack.rows * len(slabs) <= MOST_MODULES_DRAWN
            for row in range(case.stack.rows if single else 0):
                inset = (case.stack.row_pitch - foot) / 2
                place = left + scale * (row * case.stack.row_pitch + inset)
                canvas.rectangle((place, y), (scale * foot, height), MODULE)
            if not single:
                canvas.rectangle((left, y), (length, height), MODULE)
        elif slab.kind == "cold" and case.cold.duct.kind == HEAT_SINK:
            _draw_fins(canvas, (left, y), (length, height), max(scale * slab.wall, 0.6))
            middles["cold"].append(y + height / 2)
        else:
            wall = max(scale * slab.wall, 0.6)
            canvas.rectangle((left, y), (length, height), fills[slab.kind], WALL, 0.4)
            canvas.rectangle((left, y), (length, wall), WALL)
            canvas.rectangle((left, y + height - wall), (length, wall), WALL)
            middles[slab.kind].append(y + height / 2)
        y += height
    return middles


def _draw_fins(canvas: Canvas, at: Point, size: Point, base: float) -> None:
    """A heat sink: its base, and fins without number below it."""
    (left, top), (length, height) = at, size
    canvas.rectangle(at, size, COLD_GROUND)
    for x in np.arange(left + FIN_STEP / 2, left + length, FIN_STEP).tolist():
        canvas.line([(x, top + base), (x, top + height)], WALL, 1.6)
    canvas.rectangle(at, (length, base), WALL)


def _draw_streams(
    canvas: Canvas,
    case: Case,
    scalars: Group,
    inlets: tuple[Value, Value],
    middles: dict[str, list[float]],
    ends: tuple[float, float],
) -> None:
    """Arrows of both streams at the two ends, with their temperatures."""
    left, right = ends
    hot, cold = min(middles["hot"]), max(middles["cold"])
    hot, cold = min(hot, cold - 14), max(cold, hot + 14)
    reach = 34.0
    if case.hot.fluid == "reservoir":
        canvas.text((left - 8, hot + 4), inlets[0], anchor="end", bold=True)
    else:
        canvas.arrow((left - reach - 4, hot), (left - 4, hot), VERMILION)
        canvas.text((left - reach - 8, hot + 4), inlets[0], anchor="end", bold=True)
        canvas.arrow((right + 4, hot), (right + reach + 4, hot), VERMILION)
        canvas.text((right + reach + 8, hot + 4), scalars.hot_outlet_temperature, bold=True)
    if case.cold.fluid == "reservoir" or case.cold.duct.kind == HEAT_SINK:
        canvas.text((right + 8, cold + 4), inlets[1], bold=True)
    else:
        canvas.arrow((right + reach + 4, cold), (right + 4, cold), BLUE)
        canvas.text((right + reach + 8, cold + 4), inlets[1], bold=True)
        canvas.arrow((left - 4, cold), (left - reach - 4, cold), BLUE)
        canvas.text((left - reach - 8, cold + 4), scalars.cold_outlet_temperature, anchor="end", bold=True)


def _draw_plan(canvas: Canvas, case: Case, at: Point, scale: float) -> None:
    """The modules of one layer on their plate."""
    stack = case.stack
    left, top = at
    size = (scale * stack.rows * stack.row_pitch, scale * stack.columns * stack.column_pitch)
    canvas.rectangle(at, size, "#f4f4f4", INK)
    foot = case.module.footprint or (0.9 * stack.row_pitch, 0.9 * stack.column_pitch)
    if stack.rows * stack.columns > MOST_MODULES_DRAWN:
        canvas.rectangle(at, size, canvas.hatch(MODULE, "#f4f4f4", 0, 3.0), INK)
        return
    for row in range(stack.rows):
        for column in range(stack.columns):
            x = left + scale * (row * stack.row_pitch + (stack.row_pitch - foot[0]) / 2)
            y = top + scale * (column * stack.column_pitch + (stack.column_pitch - foot[1]) / 2)
            canvas.rectangle((x, y), (scale * foot[0], scale * foot[1]), "#bdbdbd", MODULE, 0.6)


def _dimension(
    canvas: Canvas, at: Point, length: float, value: Value, *, upright: bool = False, words: str = ""
) -> None:
    """A measure with its line."""
    x, y = at
    if words:
        canvas.text((x, y + 10), words, size=10)
        canvas.text((x, y + 23), value, size=10)
        return
    end = (x, y + length) if upright else (x + length, y)
    canvas.line([at, end], GREY, 0.8)
    for px, py in (at, end):
        canvas.line([(px - 3, py), (px + 3, py)] if upright else [(px, py - 3), (px, py + 3)], GREY, 0.8)
    if upright:
        canvas.text((x - 5, y + length / 2 + 4), value, size=10, anchor="end")
    else:
        canvas.text((x + length / 2, y + 14), value, size=10, anchor="middle")


def energy_drawing(scalars: Group, losses: Sequence[tuple[str, Value]], prefix: str = "") -> Drawing | None:
    """Where the heat goes, as bands, and where the electricity goes, as bars; None where no heat enters."""
    heat = scalars.hot_heat_flow
    if not heat.raw > 0:
        return None
    through = scalars.cold_heat_flow.less(scalars.bypass_heat_flow)
    flows = [
        ("lost to the surroundings", scalars.lost_heat_flow, ("#eeeeee", GREY, 90)),
        ("past the modules", scalars.bypass_heat_flow, (PALE, GREY, 0)),
        ("through the modules to the cold side", through, (COLD_GROUND, SKY, 45)),
        ("electricity at the terminals", scalars.generated_power, (ORANGE, ORANGE, 0)),
    ]
    flows = [each for each in flows if each[1].raw > 1e-9 * heat.raw]
    top, tall, distance = 34.0, 112.0, 24.0
    bars_top = top + tall + distance * len(flows) + 42
    canvas = Canvas(f"{prefix}energy", bars_top + 20 * len(losses) + 16)
    canvas.text((8, 14), "Heat", bold=True)
    start, split, end = 100.0, 150.0, 262.0
    canvas.rectangle((start, top), (split - start, tall), canvas.hatch(VERMILION, HOT_GROUND), INK, 0.5)
    canvas.text((8, top + tall / 2 - 3), "from the hot side")
    canvas.text((8, top + tall / 2 + 12), heat, bold=True)
    given, right = top, top
    positions = []
    for _, value, (ground, line, angle) in flows:
        share = tall * min(value.raw / heat.raw, 1.0)
        thick = max(share, 1.2)
        fill = canvas.hatch(line, ground, angle) if ground != line else line
        canvas.band((split, given, given + share), (end, right, right + thick), fill)
        positions.append(right + thick / 2)
        given += share
        right += thick + distance
    for (name, value, _), place in zip(flows, apart(positions, 28.0, top, bars_top), strict=True):
        canvas.text((end + 8, place), name)
        canvas.text((end + 8, place + 13), [value, ", ", value.over(heat)], bold=True)
    _draw_losses(canvas, losses, bars_top)
    return canvas.drawing("The path of the energy: heat from the hot side, and electricity to what is left")


def _draw_losses(canvas: Canvas, losses: Sequence[tuple[str, Value]], top: float) -> None:
    """Electricity from the terminals to the net as bars that begin where the one before ends."""
    canvas.text((8, top - 8), "Electricity", bold=True)
    generated = losses[0][1].raw
    level, ends = 0.0, []
    for i, (_, value) in enumerate(losses):
        last = i in (0, len(losses) - 1)
        begin, after = (0.0, value.raw) if last else (level - value.raw, level)
        ends.append((begin, after))
        level = generated if i == 0 else level if last else begin
    low = min(0.0, *(min(each) for each in ends))
    high = max(1e-12, *(max(each) for each in ends))
    left, right = 160.0, 420.0

    def place(value: float) -> float:
        return left + (value - low) / (high - low) * (right - left)

    for i, ((name, value), (begin, after)) in enumerate(zip(losses, ends, strict=True)):
        y = top + 20 * i
        last = i in (0, len(losses) - 1)
        fill = ORANGE if i == 0 else BLUE if last else canvas.hatch(GREY, "#ffffff")
        x1, x2 = sorted((place(begin), place(after)))
        canvas.rectangle((x1, y), (max(x2 - x1, 0.8), 13), fill, INK, 0.5)
        canvas.text((left - 8, y + 11), name, anchor="end", bold=last)
        sign = "" if last else "\N{MINUS SIGN}"
        canvas.text((right + 8, y + 11), [sign, value], bold=last)
    canvas.line([(place(0.0), top - 4), (place(0.0), top + 20 * len(losses) - 4)], INK, 0.8)


PROFILE = (
    ("hot_stream_temperature", "hot stream", VERMILION, ""),
    ("hot_face_temperature", "hot face", VERMILION, "6 3"),
    ("hot_junction_temperature", "hot junction", ORANGE, "2 2"),
    ("cold_junction_temperature", "cold junction", GREEN, "2 2"),
    ("cold_face_temperature", "cold face", BLUE, "6 3"),
    ("cold_stream_temperature", "cold stream", BLUE, ""),
)


def temperature_drawing(case: Case, answer: Estimate, prefix: str = "") -> Drawing:
    """Temperatures of streams, faces and junctions along the hot stream."""
    rows = answer.rows
    count = len(rows.current)
    curves = {name: np.asarray(getattr(rows, name)) - 273.15 for name, *_ in PROFILE}
    inlets = (case.hot.inlet_temperature - 273.15, case.cold.inlet_temperature - 273.15)
    outlets = (answer.hot_outlet_temperature - 273.15, answer.cold_outlet_temperature - 273.15)
    everything = [*np.concatenate(list(curves.values())), *inlets, *(each for each in outlets if math.isfinite(each))]
    canvas = Canvas(f"{prefix}temperatures", 300)
    upward = ticks(min(everything), max(everything))
    across = range(1, count + 1, max(1, math.ceil(count / 8)))
    names = ("row along the hot stream", "temperature [°C]")
    axes = Axes(canvas, (64, 12, 408, 250), across, upward, names, ends=(0.5, count + 0.5))
    along = [float(row) for row in range(1, count + 1)]
    ends = []
    for name, _, colour, dashes in PROFILE:
        stream = {"hot_stream_temperature": (inlets[0], outlets[0]), "cold_stream_temperature": (outlets[1], inlets[1])}
        first, last = stream.get(name, (math.nan, math.nan))
        points = [(0.5, first), *zip(along, curves[name].tolist(), strict=True), (count + 0.5, last)]
        places = [axes.place(*point) for point in points if math.isfinite(point[1])]
        canvas.line(places, colour, 1.8, dashes)
        if count <= 2:
            for place in places:
                canvas.dot(place, 2.2, colour, colour)
        ends.append(places[-1])
    labels = apart([place[1] for place in ends], 13, axes.top + 4, axes.bottom)
    for (_, words, colour, dashes), (x, y), label in zip(PROFILE, ends, labels, strict=True):
        canvas.line([(x + 2, y), (axes.right + 8, label)], PALE, 0.8)
        canvas.line([(axes.right + 9, label), (axes.right + 27, label)], colour, 1.8, dashes)
        canvas.text((axes.right + 31, label + 3.5), words)
    return canvas.drawing("Temperatures along the stack, row by row, from where the hot stream enters")


def count_drawing(curve: SizeCurve, designed: tuple[int, float], best: tuple[int, float]) -> Drawing | None:
    """Generated, drive and net power against the number of modules, with the design and the best of the curve."""
    kept = _well_arranged(curve.net_power)
    counts = curve.module_count[kept].astype(float)
    if len(counts) < 2:
        return None
    lines = (
        ("generated", curve.generated_power[kept], VERMILION, "6 3"),
        ("net", curve.net_power[kept], BLUE, ""),
        ("drives", curve.drive_power[kept], GREEN, "2 2"),
    )
    canvas = Canvas("count", 304)
    powers = [float(value) for _, values, _, _ in lines for value in values]
    upward, across = ticks(min(0.0, *powers), max(powers)), ticks(0.0, float(counts.max()))
    axes = Axes(canvas, (64, 12, 408, 250), across, upward, ("modules", "power [W]"))
    ends = []
    for _, values, colour, dashes in lines:
        places = [axes.place(x, y) for x, y in zip(counts, values, strict=True)]
        canvas.line(places, colour, 1.8, dashes)
        ends.append(places[-1])
    labels = apart([place[1] for place in ends], 14, axes.top + 4, axes.bottom)
    for (words, _, colour, dashes), (x, y), label in zip(lines, ends, labels, strict=True):
        canvas.line([(x + 2, y), (axes.right + 8, label)], PALE, 0.8)
        canvas.line([(axes.right + 9, label), (axes.right + 27, label)], colour, 1.8, dashes)
        canvas.text((axes.right + 31, label + 3.5), words)
    inside = designed[0] <= across[-1] and upward[0] <= designed[1] <= upward[-1]
    if inside:
        place = axes.place(*designed)
        canvas.dot(place, 4.0, INK)
    canvas.dot(axes.place(*best), 6.0, "none")
    if inside:
        canvas.text((WIDTH - 6, axes.bottom + 34), "● this design", size=10, anchor="end")
    canvas.text((WIDTH - 6, axes.bottom + 48), "○ best of the curve", size=10, anchor="end")
    return canvas.drawing("Generated, drive and net power against the number of modules")


def _well_arranged(net_power: FloatArray) -> BoolArray:
    """Counts to draw: none on the way up to the best gives less than a smaller one, none beyond less than a larger."""
    from_below = np.maximum.accumulate(net_power)
    from_above = np.maximum.accumulate(net_power[::-1])[::-1]
    return np.asarray((net_power >= from_below) | (net_power >= from_above))


BINS = 30
MOST_BARS = 10


def distribution_drawing(found: Doubt) -> Drawing:
    """Share of the drawn cases by net power, with the percentiles and the case as it stands."""
    net, sample = found.results["net_power"], found.net_power_sample
    canvas = Canvas("distribution", 226)
    across = ticks(float(sample[0]), float(sample[-1]), 8)
    counts, edges = np.histogram(sample, BINS)
    shares = 100.0 * counts / len(sample)
    upward = ticks(0.0, float(shares.max()), 4)
    axes = Axes(canvas, (64, 42, 500, 182), across, upward, ("net power [W]", "cases [%]"))
    for share, left, right in zip(shares, edges[:-1], edges[1:], strict=True):
        x, y = axes.place(float(left), float(share))
        canvas.rectangle((x, y), (axes.place(float(right), 0.0)[0] - x, axes.bottom - y), PALE, GREY, 0.5)
    marks = [("P10", net.p10, "6 3"), ("P50", net.p50, ""), ("P90", net.p90, "2 2")]
    labels = apart([axes.place(value, 0.0)[0] for _, value, _ in marks], 66, 90, WIDTH - 40)
    for (name, value, dashes), label in zip(marks, labels, strict=True):
        x = axes.place(value, 0.0)[0]
        canvas.line([(label, 30), (x, axes.top), (x, axes.bottom)], BLUE, 1.6, dashes)
        shown = Value(value, "power", f"doubt.results.net_power.{name.lower()}")
        canvas.text((label, 24), [f"{name}  ", shown], anchor="middle", bold=True)
    if across[0] < 0 < across[-1]:
        x = axes.place(0.0, 0.0)[0]
        canvas.line([(x, axes.top), (x, axes.bottom)], INK, 1.4)
    canvas.dot(axes.place(net.nominal, 0.0), 4.5, INK)
    canvas.text((WIDTH - 20, axes.bottom + 34), "● as the case stands", size=10, anchor="end")
    return canvas.drawing("Net power of the cases that were drawn from the tolerances of the inputs")


def sensitivity_drawing(found: Doubt) -> Drawing:
    """Net power with each field alone at its 10th and its 90th percentile, those that matter most first."""
    bars = found.inputs[:MOST_BARS]
    nominal = found.results["net_power"].nominal
    top, step = 44.0, 22.0
    bottom = top + step * len(bars)
    canvas = Canvas("sensitivity", bottom + 40)
    ends = [value for each in bars for value in (each.net_power_at_p10, each.net_power_at_p90)]
    finite = [value for value in ends if math.isfinite(value)]
    across = ticks(min([nominal, *finite]), max([nominal, *finite]), 5)
    left, right = 208.0, 448.0

    def place(value: float) -> float:
        return left + (value - across[0]) / (across[-1] - across[0]) * (right - left)

    for value in across:
        canvas.line([(place(value), top - 4), (place(value), bottom)], PALE, 0.7)
        canvas.text((place(value), bottom + 14), tick_text(value), size=10, anchor="middle", colour=GREY, mark="tick")
    canvas.text(((left + right) / 2, bottom + 30), "net power [W], this field alone changed", anchor="middle")
    low, high = canvas.hatch(VERMILION, "#ffffff"), BLUE
    for x, fill, words in ((left, low, "at its P10"), (left + 90, high, "at its P90")):
        canvas.rectangle((x, 10), (16, 11), fill, INK, 0.5)
        canvas.text((x + 21, 19.5), words, size=10)
    canvas.text((WIDTH - 8, top - 10), "share", size=10, anchor="end", colour=GREY)
    for i, each in enumerate(bars):
        y = top + step * i
        canvas.text((left - 8, y + 7), each.field, size=10, anchor="end")
        tolerance = Said(each.tolerance.replace("+-", "±"), f"doubt.inputs[{i}].tolerance")
        canvas.text((left - 8, y + 17), tolerance, size=8.5, anchor="end", colour=GREY)
        for value, fill in ((each.net_power_at_p10, low), (each.net_power_at_p90, high)):
            if math.isfinite(value):
                x1, x2 = sorted((place(nominal), place(value)))
                canvas.rectangle((x1, y), (max(x2 - x1, 0.6), 15), fill, INK, 0.5)
        share = Value(each.first_order, "dimensionless", f"doubt.inputs[{i}].first_order", 2, "percent")
        canvas.text((WIDTH - 8, y + 11), share, size=10, anchor="end")
    canvas.line([(place(nominal), top - 4), (place(nominal), bottom)], INK, 1.2)
    return canvas.drawing("Net power with each field alone at its P10 and at its P90, all others as they stand")
