"""Sections of the case file about what a design must keep to, what it costs, and what a study may change."""
# ruff: noqa: RUF009 - the declaring functions return dataclasses.field(...), which is no shared default

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from harvest.model.case_fields import (
    MOST_ROWS,
    SweepAxis,
    choice,
    integer,
    other,
    quantity,
    text,
)


def _limit(kind: str, meaning: str) -> Any:
    lowest = {"minimum": 1.0, "maximum": 5000.0} if kind == "temperature" else {"above": 0.0, "maximum": 1e9}
    return quantity(kind, meaning, default=None, descriptive=False, **lowest)


@dataclass(frozen=True, kw_only=True)
class Limits:
    """What the design must keep to; an estimate checks it, a sizing obeys it."""

    hot_face_temperature: float | None = _limit("temperature", "Highest allowed temperature of a module's hot face.")
    hot_face_temperature_without_load: float | None = _limit(
        "temperature",
        "Highest allowed temperature of a module's hot face when the load is lost; unless given, an estimate judges by "
        "hot_face_temperature, and a sizing does not look at it.",
    )
    cold_face_temperature: float | None = _limit("temperature", "Highest allowed temperature of a module's cold face.")
    hot_pressure_drop: float | None = _limit("pressure difference", "Highest allowed pressure drop on the hot side.")
    cold_pressure_drop: float | None = _limit("pressure difference", "Highest allowed pressure drop on the cold side.")
    back_pressure: float | None = _limit("pressure difference", "Highest back pressure that the engine allows.")
    minimum_hot_outlet_temperature: float | None = _limit(
        "temperature", "Lowest allowed outlet temperature of the hot stream."
    )
    maximum_cold_outlet_temperature: float | None = _limit(
        "temperature", "Highest allowed outlet temperature of the cold stream."
    )
    maximum_open_circuit_voltage: float | None = _limit(
        "voltage", "Highest allowed voltage of a string without load, temperatures settled."
    )
    maximum_length: float | None = _limit("length", "Longest plates allowed along the flow.")
    maximum_width: float | None = _limit("length", "Widest plates allowed across the flow.")
    maximum_height: float | None = _limit("length", "Highest stack allowed; needs the module's thickness.")
    maximum_module_mass: float | None = _limit("mass", "Largest mass of the modules allowed; needs the module's mass.")


OBJECTIVES = {
    "net power": "the most net power",
    "yearly energy": "the most net energy of a year over [duty] log",
    "fewest modules": "the fewest modules that give target_net_power",
    "cost per net watt": "the least cost of building over net power; needs [cost]",
    "cost per kilowatt-hour": "the least cost of a net kilowatt-hour over the years of use; needs [cost]",
}


WIRINGS = {
    "as given": "that of [electrical], with row blocks as even as can be and no longer than the longest given",
    "search": "every grouping of columns and layers into strings, and up to 6 even blocks of rows",
}


def _count_axis(meaning: str) -> Any:
    return other("axis", meaning, default=None, minimum=1, maximum=MOST_ROWS, descriptive=True)


@dataclass(frozen=True, kw_only=True)
class Size:
    """What a sizing may change, and what it looks for."""

    rows: tuple[int, ...] | None = _count_axis(
        "Numbers of rows to try; unless given, that of the stack. Row blocks grow no longer than the longest."
    )
    columns: tuple[int, ...] | None = _count_axis("Numbers of columns to try; unless given, that of the stack.")
    layers: tuple[int, ...] | None = _count_axis("Numbers of layers to try; unless given, that of the stack.")
    objective: str = choice(OBJECTIVES, "What the best design is best in.", default="net power", descriptive=True)
    target_net_power: float | None = quantity(
        "power",
        "Net power that the fewest modules must give.",
        above=0.0,
        maximum=1e9,
        applies=("objective", ("fewest modules",)),
        descriptive=True,
    )
    least_net_watts_per_module: float | None = quantity(
        "power",
        "Net power that a further module must add to be worth its place.",
        default=None,
        above=0.0,
        maximum=1e6,
        descriptive=True,
    )
    wiring: str = choice(WIRINGS, "Which wiring each choice has.", default="as given", descriptive=True)
    fields: dict[str, tuple[float, ...]] | None = other(
        "axes",
        'Further fields to try, written in [size] by their whole names in quotes, such as "hot.duct.gap" = '
        '{ from = "2 mm", to = "6 mm", points = 5 }; those with a unit are refined around the best.',
        default=None,
        descriptive=True,
    )


SEQUENCES = {
    "Sobol": "scrambled Sobol points, most even for a power of two of them",
    "Halton": "scrambled Halton points, even for any number of them",
}
MOST_COMBINATIONS = 100_000_000


@dataclass(frozen=True, kw_only=True)
class Sweep:
    """What a sweep varies: every combination of its fields' values, or a sample of them."""

    sample: int | None = integer(
        "Number of combinations drawn evenly from all that the fields allow, in place of every one of them.",
        default=None,
        minimum=1,
        maximum=MOST_COMBINATIONS,
        descriptive=True,
    )
    sequence: str = choice(
        SEQUENCES, "Points of low discrepancy that a sample takes.", default="Sobol", descriptive=True
    )
    seed: int = integer(
        "Start of the scrambling of a sample; the same seed gives the same sample.",
        default=0,
        minimum=0,
        maximum=2**31,
        descriptive=True,
    )
    fields: dict[str, SweepAxis] | None = other(
        "axes",
        'Fields that are varied, written in [sweep] by their whole names in quotes, such as "hot.mass_flow" = '
        '{ from = "0.05 kg/s", to = "0.12 kg/s", points = 8 }, or with step in place of points, or as a list, '
        "which may also hold choices; a sample also draws between from and to alone.",
        default=None,
        descriptive=True,
    )


def _price(meaning: str) -> Any:
    return quantity("dimensionless", meaning, default=0.0, minimum=0.0, maximum=1e12, descriptive=True)


@dataclass(frozen=True, kw_only=True)
class Cost:
    """What a design costs to build, in one currency."""

    currency: str = text("Name of the currency, a label only.")
    module: float = quantity("dimensionless", "Price of one module.", minimum=0.0, maximum=1e9, descriptive=True)
    exchanger_per_area: float = _price(
        "Price of a square metre of plate that faces modules; hot and cold plates both count."
    )
    layer: float = _price("Price of one layer, for clamping and assembly.")
    converter: float = _price("Price of the converter.")
    converter_per_watt: float = _price("Price of the converter a watt that it gives.")
    drive: float = _price("Price of pumps and fans.")
    drive_per_watt: float = _price("Price of pumps and fans a watt that they take.")
    fixed: float = _price("Price of what every design needs, whatever its size.")
    years: float = quantity("dimensionless", "Years of use.", default=10.0, above=0.0, maximum=100.0, descriptive=True)
    discount_rate: float = quantity(
        "dimensionless", "Discount rate a year.", default=0.0, minimum=0.0, maximum=1.0, descriptive=True
    )


WORTH_IT, ALWAYS_ON = "when worth it", "always on"
DUTY_DRIVES = {
    WORTH_IT: "drives and auxiliaries are off while the stack would give less than them, or a stream stands",
    ALWAYS_ON: "drives of streams that flow and auxiliaries are on all the time",
}


@dataclass(frozen=True, kw_only=True)
class Duty:
    """How the streams change over time, and what is done while the stack is not worth its drives."""

    log: str | None = other(
        "log", "CSV file of the streams over time, from the case's folder.", default=None, descriptive=True
    )
    drives: str = choice(
        DUTY_DRIVES,
        "What pumps, fans and auxiliaries do while they take more than the stack gives.",
        default=WORTH_IT,
        descriptive=True,
    )
    longest_hold: float | None = quantity(
        "duration",
        "Longest time for which a reading holds until the next one; unless given, three usual steps of the log. In a "
        "longer gap the reading holds for one usual step, and the rest of the gap is not covered.",
        default=None,
        above=0.0,
        maximum=1e9,
        descriptive=True,
    )
    time_zone: str = text(
        'Zone of a clock whose time stamps have no offset, such as "Europe/Berlin"; unless given, the clock never '
        "changes."
    )
