"""Time stamps of a log as texts: ISO 8601 with or without an offset, and clocks that change twice a year."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta, tzinfo

import numpy as np

from harvest.errors import InputError
from harvest.physics.arrays import BoolArray, FloatArray
from harvest.quantities import shown

QUARTER = 900
"""Clocks are changed at whole quarters of an hour [s]."""
SUNDAY = 6
MONTHS_OF_CHANGE = (3, 4, 5, 9, 10, 11)
LAST_HOUR_OF_CHANGE = 4
EPOCH = datetime(1970, 1, 1)
"""Zero of a clock whose zone does not matter."""


@dataclass(frozen=True, eq=False)
class TimeStamps:
    """Instants of stamps, (stamps,) each: `seconds` since 1970, `offset` [s] of the clock from UTC.

    NaN where a stamp has a fault, and an offset where the clock's zone is not known: then the seconds are the clock's
    own. `repeated`: stamps that the clock shows twice, told apart by the order in which they stand.
    """

    seconds: FloatArray
    offset: FloatArray
    repeated: BoolArray
    faults: tuple[tuple[int, str], ...]


def read_time_stamps(cells: Sequence[str], zone_name: str = "") -> TimeStamps:
    """Read ISO 8601 texts; the first decides whether all have an offset from UTC or none.

    Parameters: `cells`; `zone_name` of the clock that made stamps without an offset, such as "Europe/Berlin": without
    it they are taken as of a clock that never changes. Raises InputError for an unknown zone.
    """
    zone = _zone(zone_name)
    faults: list[tuple[int, str]] = []
    try:
        stamps: list[datetime | None] = [datetime.fromisoformat(cell) for cell in cells]
    except ValueError:
        stamps = [_stamp(cell) for cell in cells]
        faults = [
            (place, f"time: {shown(cell)} is no time stamp; write 2026-03-29T14:00, with +01:00 or Z behind it or not")
            for place, (cell, stamp) in enumerate(zip(cells, stamps, strict=True))
            if stamp is None
        ]
    first = next((stamp for stamp in stamps if stamp is not None), EPOCH)
    has_offset = first.tzinfo is not None
    for place, stamp in enumerate(stamps):
        if stamp is not None and (stamp.tzinfo is not None) != has_offset:
            said = "no offset from UTC, and the first has one" if has_offset else "an offset, and the first has none"
            faults.append((place, f"time: {shown(cells[place])} has {said}"))
            stamps[place] = None
    known = np.array([stamp is not None for stamp in stamps], dtype=bool)
    bare = [EPOCH if stamp is None else stamp.replace(tzinfo=None) for stamp in stamps]
    clock = np.array(bare, dtype="datetime64[us]").astype(np.int64) / 1e6
    clock[~known] = np.nan
    repeated = np.zeros(len(cells), dtype=bool)
    if has_offset:
        offset = np.array([np.nan if stamp is None else _seconds(stamp.utcoffset()) for stamp in stamps])
    elif zone is None:
        return TimeStamps(clock, np.full(len(cells), np.nan), repeated, tuple(faults))
    else:
        before, after = _offsets(clock, known, zone)
        missing = before < after
        faults += [
            (each, f"time: {shown(cells[each])} does not exist in {zone_name}, where the clock was put forward")
            for each in np.flatnonzero(missing).tolist()
        ]
        repeated = before > after
        backwards = known.sum() > 1 and np.median(np.diff(clock[known])) < 0
        along = slice(None, None, -1) if backwards else slice(None)
        second = _second_pass(clock[along], repeated[along])[along]
        offset = np.where(missing, np.nan, np.where(second, after, before))
    return TimeStamps(clock - offset, offset, repeated, tuple(sorted(faults)))


def may_be_changed(clock: FloatArray) -> BoolArray:
    """Whether a clock [s since 1970] could just have been changed, by today's rules: in a Sunday night's few hours."""
    days = np.floor(np.nan_to_num(clock) / 86400.0).astype(np.int64)
    months = days.astype("datetime64[D]").astype("datetime64[M]").astype(np.int64) % 12 + 1
    night = np.nan_to_num(clock) - 86400.0 * days <= 3600.0 * LAST_HOUR_OF_CHANGE
    return np.asarray(((days + 3) % 7 == SUNDAY) & np.isin(months, MONTHS_OF_CHANGE) & night)


def stamp_text(seconds: float, offset: float) -> str:
    """An instant as ISO 8601, with the offset from UTC [s] where it is known."""
    if not np.isfinite(seconds):
        return ""
    if not np.isfinite(offset):
        return (EPOCH + timedelta(seconds=seconds)).isoformat()
    moved = datetime.fromtimestamp(seconds, UTC) + timedelta(seconds=offset)
    sign = "-" if offset < 0 else "+"
    hours, minutes = divmod(round(abs(offset) / 60.0), 60)
    return f"{moved.replace(tzinfo=None).isoformat()}{sign}{hours:02d}:{minutes:02d}"


def _zone(name: str) -> tzinfo | None:
    if not name:
        return None
    from zoneinfo import ZoneInfo

    try:
        return ZoneInfo(name)
    except (KeyError, OSError, ValueError):
        raise InputError(
            f'duty.time_zone: {shown(name)} is no time zone that is known here; write for example "Europe/Berlin"'
        ) from None


def _stamp(cell: str) -> datetime | None:
    try:
        return datetime.fromisoformat(cell)
    except ValueError:
        return None


def _seconds(offset: timedelta | None) -> float:
    return np.nan if offset is None else offset.total_seconds()


def _offsets(clock: FloatArray, known: BoolArray, zone: tzinfo) -> tuple[FloatArray, FloatArray]:
    """Offset of a zone's clock from UTC [s] as before and as after a change, equal where none is near; (stamps,)."""
    quarters, place = np.unique(np.floor(np.where(known, clock, 0.0) / QUARTER), return_inverse=True)
    moments = [EPOCH + timedelta(seconds=float(quarter) * QUARTER) for quarter in quarters]
    before, after = (
        np.array([_seconds(zone.utcoffset(moment.replace(fold=fold))) for moment in moments])[place.reshape(-1)]
        for fold in (0, 1)
    )
    return np.where(known, before, np.nan), np.where(known, after, np.nan)


def _second_pass(clock: FloatArray, repeated: BoolArray) -> BoolArray:
    """Which of the stamps that a clock shows twice are of the second time: those from where it steps back on."""
    second = np.zeros(len(clock), dtype=bool)
    for first, last in _runs(repeated):
        back = np.flatnonzero(np.diff(clock[first:last]) <= 0)
        if len(back):
            second[first + back[0] + 1 : last] = True
    return second


def _runs(marked: BoolArray) -> list[tuple[int, int]]:
    """First place of each run of marked ones, and the place after its last."""
    edges = np.flatnonzero(np.diff(np.concatenate([[False], marked, [False]]).astype(np.int8)))
    return list(zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True))
