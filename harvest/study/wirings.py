"""Every series-parallel grouping of a stack's modules: what each gives, and whether a converter can take it."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from harvest.model.batch import Batch
from harvest.model.case import Case
from harvest.model.checks import SHOCK_VOLTAGE
from harvest.model.loads import MAXIMUM_POWER
from harvest.model.search import Outcomes, search_batch
from harvest.model.solution import MOST_APART
from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.study.limits import broken_limits, limit_path

MOST_BLOCKS = 6
"""Blocks along the flow that are tried at most."""
ALIKE_DIGITS = 8
"""Digits to which net powers are compared; what comes after them is left from the solution, not from the wiring."""
WIRING = ("electrical.strings_across", "electrical.layers_in_series")


@dataclass(frozen=True)
class Wiring:
    """One grouping of a stack and what it gives.

    `strings` are in parallel in the whole stack, each of `modules_in_series` (least and most). `loss` is one less its
    generated power over that of every row with a load of its own and nothing lost in leads. `problem` says what keeps
    it from use, "" if nothing does.
    """

    strings_across: int
    layers_in_series: int
    row_blocks: tuple[int, ...]
    strings: int
    modules_in_series: tuple[int, int]
    voltage: float
    open_circuit_voltage: float
    net_power: float
    loss: float
    problem: str


def even_blocks(rows: int, count: int) -> tuple[int, ...]:
    """So many blocks of rows, as even as can be, short ones first."""
    length, longer = divmod(rows, count)
    return (length,) * (count - longer) + (length + 1,) * longer


def groupings(columns: int, layers: int) -> list[tuple[int, int]]:
    """Strings across a layer and layers in series that are electrically different.

    Only their ratio tells in the circuit; of several with one ratio, the fewest layers in series stand for all.
    """
    found: dict[Fraction, tuple[int, int]] = {}
    for in_series in _divisors(layers):
        for strings in _divisors(columns):
            found.setdefault(Fraction(in_series, strings), (strings, in_series))
    return list(found.values())


def _divisors(number: int) -> list[int]:
    return [each for each in range(1, number + 1) if number % each == 0]


def wired(values: dict[str, FloatArray], blocks_of: str) -> Iterator[dict[str, FloatArray]]:
    """Every grouping of many arrangements, one part for each number of blocks, which it names `blocks_of`."""
    sizes = np.column_stack([values["stack.columns"], values["stack.layers"]])
    pairs, pair = np.unique(sizes, axis=0, return_inverse=True)
    pair = pair.reshape(-1)
    of_pair = [groupings(int(columns), int(layers)) for columns, layers in pairs]
    table = np.zeros((len(pairs), max(map(len, of_pair)), 2))
    for index, each in enumerate(of_pair):
        table[index, : len(each)] = each
    choice, grouping = np.nonzero(table[pair, :, 0])
    wiring = dict(zip(WIRING, table[pair[choice], grouping].T, strict=True))
    every = {path: each[choice] for path, each in values.items()} | wiring
    for count in range(1, MOST_BLOCKS + 1):
        enough = every["stack.rows"] >= count
        if enough.any():
            yield {path: each[enough] for path, each in every.items()} | {
                blocks_of: np.full(int(enough.sum()), float(count))
            }


def _block_choices(case: Case) -> list[tuple[int, ...]]:
    rows = case.stack.rows
    even = [even_blocks(rows, count) for count in range(1, min(rows, MOST_BLOCKS) + 1)]
    given = case.electrical.row_blocks
    return even if given is None or given in even else [*even, given]


def _pairs(case: Case) -> list[tuple[int, int]]:
    """Groupings of a case, its own in place of the one that stands for the same ratio."""
    own = case.electrical.strings_across, case.electrical.layers_in_series
    every = groupings(case.stack.columns, case.stack.layers)
    return [own if Fraction(each[1], each[0]) == Fraction(own[1], own[0]) else each for each in every]


def _power_apart(case: Case) -> float:
    """Generated power with a converter for every row, or for few rows of a long stack, and no leads [W]."""
    electrical = dataclasses.replace(
        case.electrical,
        load=MAXIMUM_POWER,
        row_blocks=even_blocks(case.stack.rows, min(case.stack.rows, MOST_APART)),
        independent=True,
        lead_resistance=0.0,
        blocking_diode_drop=0.0,
        converter_window=None,
    )
    found = search_batch(Batch(dataclasses.replace(case, electrical=electrical)))
    return float(found.scalars["generated_power"][0])


def wirings(case: Case) -> tuple[Wiring, ...]:
    """Every grouping of one design, those that keep to its limits first, of those the strongest first.

    Of groupings that give the same, those come first that stay below the converter's upper end and 60 V DC without
    load, and of these the one of the highest voltage, whose current is the least.
    """
    apart = _power_apart(case)
    found: list[Wiring] = []
    pairs = np.array(_pairs(case), dtype=float)
    values = dict(zip(WIRING, pairs.T, strict=True))
    for blocks in _block_choices(case):
        electrical = dataclasses.replace(case.electrical, row_blocks=blocks)
        wired_case = dataclasses.replace(case, electrical=electrical)
        held = search_batch(Batch(wired_case, len(pairs), values), without_load=True)
        found += _told(case, blocks, pairs.astype(np.int64), held, apart)
    return tuple(sorted(found, key=lambda each: _rank(case, each)))


def _told(case: Case, blocks: tuple[int, ...], pairs: IntArray, held: Outcomes, apart: float) -> list[Wiring]:
    """Groupings with one set of blocks as they are reported."""
    broken = broken_limits(case, held.scalars)
    told = []
    for index, (strings, in_series) in enumerate(pairs.tolist()):
        across = case.stack.columns // strings * in_series
        number = {name: float(values[index]) for name, values in held.scalars.items()}
        told.append(
            Wiring(
                strings,
                in_series,
                blocks,
                strings * case.stack.layers // in_series * len(blocks),
                (across * min(blocks), across * max(blocks)),
                number["voltage"],
                number["highest_open_circuit_voltage"],
                number["net_power"],
                1.0 - number["generated_power"] / apart if apart > 0 else np.nan,
                held.problem[index] or _beyond(broken, index),
            )
        )
    return told


def _beyond(broken: dict[str, BoolArray], index: int) -> str:
    paths = [limit_path(name) for name, wrong in broken.items() if wrong[index]]
    return f"beyond {' and '.join(paths)}" if paths else ""


def compared(power: float) -> float:
    """A power with the digits to which wirings are compared."""
    return float(f"{power:.{ALIKE_DIGITS}g}")


def own_wiring(case: Case, every: Sequence[Wiring]) -> Wiring:
    """The grouping that a design has, of every one that it may have."""
    electrical = case.electrical
    own = electrical.strings_across, electrical.layers_in_series, electrical.row_blocks or (case.stack.rows,)
    return next(each for each in every if (each.strings_across, each.layers_in_series, each.row_blocks) == own)


def _rank(case: Case, found: Wiring) -> tuple[bool, float, bool, int, float]:
    """Sort key of a grouping, the best first."""
    window, opened = case.electrical.converter_window, found.open_circuit_voltage
    above = not opened <= min(SHOCK_VOLTAGE, window[1] if window else np.inf)
    lost = not np.isfinite(found.net_power)
    net = np.inf if lost else -compared(found.net_power)
    return found.problem != "", net, above, len(found.row_blocks), 0.0 if lost else opened if above else -opened
