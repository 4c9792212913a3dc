"""Drawings as SVG, written by hand: the same bytes for the same input, text as text, legible without colour."""

from __future__ import annotations

import math
from collections.abc import Sequence
from xml.sax.saxutils import escape, quoteattr

from harvest.report.memo.values import Drawing, Said, Value

WIDTH = 520.0
FONT = "Helvetica, Arial, 'Liberation Sans', sans-serif"
INK, GREY, PALE = "#1a1a1a", "#666666", "#d9d9d9"
# the Okabe-Ito colours; no line rests on its colour alone
BLUE, VERMILION, GREEN, SKY, ORANGE = "#0072B2", "#D55E00", "#009E73", "#56B4E9", "#E69F00"
SIGN_WIDTH = 0.56
"""Width of a sign over the size of the letters, for keeping labels apart."""

LEAST_SPAN = 1e-6
"""Share of the numbers below which their differences are no course to draw."""

Point = tuple[float, float]


def number(value: float) -> str:
    """Coordinate with two decimals, none of them idle."""
    return "0" if abs(value) < 0.005 else f"{value:.2f}".rstrip("0").rstrip(".")


class Canvas:
    """A drawing that grows by shapes; coordinates in px from the upper left corner."""

    def __init__(self, name: str, height: float, width: float = WIDTH) -> None:
        self.name = name
        self.width, self.height = width, height
        self.parts: list[str] = []
        self.patterns: dict[str, str] = {}

    def hatch(self, colour: str, ground: str, angle: int = 45, gap: float = 5.0) -> str:
        """Fill of parallel lines on a ground."""
        name = f"{self.name}-hatch-{len(self.patterns)}"
        pattern = (
            f'width="{number(gap)}" height="{number(gap)}" patternUnits="userSpaceOnUse" '
            f'patternTransform="rotate({angle})"><rect width="{number(gap)}" height="{number(gap)}" fill="{ground}"/>'
            f'<line x1="0" y1="0" x2="0" y2="{number(gap)}" stroke="{colour}" stroke-width="1.2"/></pattern>'
        )
        for known, made in self.patterns.items():
            if made == pattern:
                return f"url(#{known})"
        self.patterns[name] = pattern
        return f"url(#{name})"

    def rectangle(self, at: Point, size: Point, fill: str, line: str = "none", thickness: float = 0.8) -> None:
        """Rectangle by its upper left corner and size."""
        (x, y), (width, height) = at, size
        self.parts.append(
            f'<rect x="{number(x)}" y="{number(y)}" width="{number(width)}" height="{number(height)}" fill="{fill}" '
            f'stroke="{line}" stroke-width="{number(thickness)}"/>'
        )

    def line(self, points: Sequence[Point], colour: str = INK, thickness: float = 1.0, dashes: str = "") -> None:
        """Line through points."""
        dashed = f' stroke-dasharray="{dashes}"' if dashes else ""
        through = " ".join(f"{number(x)},{number(y)}" for x, y in points)
        self.parts.append(
            f'<polyline points="{through}" fill="none" stroke="{colour}" stroke-width="{number(thickness)}" '
            f'stroke-linejoin="round"{dashed}/>'
        )

    def band(self, left: tuple[float, float, float], right: tuple[float, float, float], fill: str) -> None:
        """Curved band from a vertical edge (x, top, bottom) to another."""
        (x1, top1, bottom1), (x2, top2, bottom2) = left, right
        middle = number((x1 + x2) / 2)
        self.parts.append(
            f'<path d="M{number(x1)},{number(top1)} C{middle},{number(top1)} {middle},{number(top2)} {number(x2)},'
            f"{number(top2)} L{number(x2)},{number(bottom2)} C{middle},{number(bottom2)} {middle},{number(bottom1)} "
            f'{number(x1)},{number(bottom1)} Z" fill="{fill}" stroke="{INK}" stroke-width="0.5"/>'
        )

    def dot(self, at: Point, radius: float = 3.0, fill: str = "white", line: str = INK) -> None:
        """Small circle."""
        self.parts.append(
            f'<circle cx="{number(at[0])}" cy="{number(at[1])}" r="{number(radius)}" fill="{fill}" stroke="{line}" '
            'stroke-width="1.2"/>'
        )

    def arrow(self, start: Point, end: Point, colour: str = INK, thickness: float = 1.6) -> None:
        """Straight arrow along one axis."""
        (x1, y1), (x2, y2) = start, end
        length = math.hypot(x2 - x1, y2 - y1)
        u, v = (x2 - x1) / length, (y2 - y1) / length
        head = 6.0
        self.line([start, (x2 - head * u, y2 - head * v)], colour, thickness)
        corners = [
            end,
            (x2 - head * u + 3 * v, y2 - head * v - 3 * u),
            (x2 - head * u - 3 * v, y2 - head * v + 3 * u),
        ]
        path = " ".join(f"{number(x)},{number(y)}" for x, y in corners)
        self.parts.append(f'<polygon points="{path}" fill="{colour}"/>')

    def text(
        self,
        at: Point,
        words: str | Value | Said | Sequence[str | Value | Said],
        *,
        size: float = 11.0,
        anchor: str = "start",
        bold: bool = False,
        colour: str = INK,
        turned: bool = False,
        mark: str = "",
    ) -> None:
        """Words at the base line; values among them carry the result that they show."""
        pieces = [words] if isinstance(words, str | Value | Said) else words
        inside = "".join(
            escape(piece)
            if isinstance(piece, str)
            else f"<tspan{attributes(piece.attributes())}>{escape(piece.text)}</tspan>"
            for piece in pieces
        )
        x, y = number(at[0]), number(at[1])
        more = f' transform="rotate(-90 {x} {y})"' if turned else ""
        more += ' font-weight="bold"' if bold else ""
        more += f' class="{mark}"' if mark else ""
        self.parts.append(
            f'<text x="{x}" y="{y}" font-size="{number(size)}" text-anchor="{anchor}" fill="{colour}"{more}>'
            f"{inside}</text>"
        )

    def drawing(self, words: str) -> Drawing:
        """Finish the drawing; `words` tell what it shows."""
        patterns = "".join(f'<pattern id="{name}" {made}' for name, made in self.patterns.items())
        defined = f"<defs>{patterns}</defs>" if patterns else ""
        size = f"{number(self.width)} {number(self.height)}"
        svg = (
            f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {size}" role="img" aria-label={quoteattr(words)} '
            f"font-family={quoteattr(FONT)}>{defined}{''.join(self.parts)}</svg>"
        )
        return Drawing(self.name, svg, words, self.height / self.width)


def attributes(named: dict[str, str]) -> str:
    """Attributes of an element, with the space before each."""
    return "".join(f" {name}={quoteattr(value)}" for name, value in named.items())


def ticks(low: float, high: float, most: int = 6) -> list[float]:
    """Round numbers from below `low` to above `high`, at most so many steps."""
    span, size = high - low, max(abs(low), abs(high))
    if span <= LEAST_SPAN * size or size == 0.0:
        span = size or 1.0
        low, high = low - 0.5 * span, high + 0.5 * span
    raw = span / most
    power = 10.0 ** math.floor(math.log10(raw))
    step = next(power * each for each in (1.0, 2.0, 2.5, 5.0, 10.0) if power * each >= raw * (1 - 1e-9))
    first, last = math.floor(low / step + 1e-9), math.ceil(high / step - 1e-9)
    return [round(each * step, 12) for each in range(first, last + 1)]


def tick_text(value: float) -> str:
    """Number at an axis."""
    return f"{value:,.10g}".replace("-", "\N{MINUS SIGN}")


class Axes:
    """Two axes with grid on a canvas: turns numbers into places."""

    def __init__(
        self,
        canvas: Canvas,
        box: tuple[float, float, float, float],
        across: Sequence[float],
        upward: Sequence[float],
        names: tuple[str, str],
        ends: tuple[float, float] | None = None,
    ) -> None:
        """`box` is left, top, right, bottom; `across`, `upward` are ticks; `ends` of the axis across, if others."""
        self.canvas, self.upward = canvas, upward
        self.ends = (across[0], across[-1]) if ends is None else ends
        self.left, self.top, self.right, self.bottom = box
        for value in upward:
            y = self.place(across[0], value)[1]
            canvas.line([(self.left, y), (self.right, y)], PALE, 0.7)
            canvas.text((self.left - 6, y + 3.5), tick_text(value), size=10, anchor="end", colour=GREY, mark="tick")
        for value in across:
            x = self.place(value, upward[0])[0]
            canvas.line([(x, self.bottom), (x, self.bottom + 4)], GREY, 0.8)
            canvas.text((x, self.bottom + 15), tick_text(value), size=10, anchor="middle", colour=GREY, mark="tick")
        canvas.line([(self.left, self.bottom), (self.right, self.bottom)], GREY, 1.0)
        if upward[0] < 0 < upward[-1]:
            y = self.place(across[0], 0.0)[1]
            canvas.line([(self.left, y), (self.right, y)], GREY, 1.0)
        canvas.text(((self.left + self.right) / 2, self.bottom + 31), names[0], anchor="middle")
        canvas.text((self.left - 44, (self.top + self.bottom) / 2), names[1], anchor="middle", turned=True)

    def place(self, across: float, upward: float) -> Point:
        """Place of two numbers on the canvas."""
        (x1, x2), (y1, y2) = self.ends, (self.upward[0], self.upward[-1])
        x = self.left + (across - x1) / (x2 - x1) * (self.right - self.left)
        y = self.bottom - (upward - y1) / (y2 - y1) * (self.bottom - self.top)
        return x, y


def apart(places: Sequence[float], distance: float, low: float, high: float) -> list[float]:
    """Move places so that they stand apart, in their order and between two ends, each as little as need be."""
    order = sorted(range(len(places)), key=lambda i: places[i])
    moved = [places[i] for i in order]
    for i in range(1, len(moved)):
        moved[i] = max(moved[i], moved[i - 1] + distance)
    if moved and moved[-1] > high:
        moved[-1] = high
        for i in range(len(moved) - 2, -1, -1):
            moved[i] = min(moved[i], moved[i + 1] - distance)
    if moved and moved[0] < low:
        moved[0] = low
        for i in range(1, len(moved)):
            moved[i] = max(moved[i], moved[i - 1] + distance)
    result = [0.0] * len(places)
    for place, i in zip(moved, order, strict=True):
        result[i] = place
    return result
