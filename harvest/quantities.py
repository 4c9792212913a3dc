"""Text with units to SI floats and back.

A closed table of unit spellings with their factors: a text is split by a strict pattern into a number and a unit, and
only a unit of the expected kind is accepted. pint objects are accepted at the library's edge by `from_pint`.
"""

from __future__ import annotations

import functools
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from harvest.errors import QuantityError

LONGEST_TEXT = 100
LONGEST_CURRENCY = 10
STANDARD_EXAMPLE = "at 0 degC, 101.325 kPa"

INCH = 0.0254
FOOT = 12 * INCH
POUND = 0.45359237
GALLON = 231 * INCH**3
PSI = POUND * 9.80665 / INCH**2
BTU = 1055.05585262
FAHRENHEIT_STEP = 5 / 9


@dataclass(frozen=True)
class QuantityKind:
    """One kind of quantity: SI unit, accepted spellings with factors to SI, and the units to print it in."""

    name: str
    si_unit: str
    units: Mapping[str, float]
    shown: tuple[str, ...] = ()
    offsets: Mapping[str, float] = field(default_factory=dict)
    example: str = ""
    pint_unit: str = ""

    @property
    def bare(self) -> bool:
        """Whether a plain number is accepted, because the kind has no unit."""
        return "" in self.units


@dataclass(frozen=True)
class EnergyPrice:
    """Money for energy: `amount` per joule, in a `currency` that is a label only."""

    amount: float
    currency: str

    def __str__(self) -> str:
        """Text that reads back as the same price."""
        return f"{self.amount * KINDS['energy'].units['kWh']:.12g} {self.currency}/kWh"


@dataclass(frozen=True)
class StandardVolumeFlow:
    """A volume flow [m^3/s] that the gas would have at the stated temperature [K] and pressure [Pa]."""

    volume_flow: float
    temperature: float
    pressure: float
    basis: str | None = None

    def __str__(self) -> str:
        """Text that reads back as the same flow."""
        basis = f", {self.basis}" if self.basis else ""
        return f"{self.volume_flow!r} m^3/s at {self.temperature!r} K, {self.pressure!r} Pa{basis}"


_PRESSURES = {
    "Pa": 1.0,
    "kPa": 1e3,
    "MPa": 1e6,
    "bar": 1e5,
    "mbar": 1e2,
    "hPa": 1e2,
    "atm": 101325.0,
    "psi": PSI,
    "mmHg": 133.322387415,
    "inHg": 25.4 * 133.322387415,
    "mmH2O": 9.80665,
    "mm H2O": 9.80665,
    "inH2O": 249.08891,
    "in H2O": 249.08891,
}

KINDS: dict[str, QuantityKind] = {
    kind.name: kind
    for kind in (
        QuantityKind("dimensionless", "1", {"": 1.0, "%": 0.01}, ("",), example="0.35", pint_unit=""),
        QuantityKind(
            "mass ratio",
            "kg/kg",
            {"": 1.0, "kg/kg": 1.0, "g/kg": 1e-3, "mg/kg": 1e-6, "%": 0.01},
            ("g/kg",),
            example="8 g/kg",
            pint_unit="kg/kg",
        ),
        QuantityKind(
            "temperature",
            "K",
            {
                "degC": 1.0,
                "deg C": 1.0,
                "K": 1.0,
                "degF": FAHRENHEIT_STEP,
                "deg F": FAHRENHEIT_STEP,
                "degR": FAHRENHEIT_STEP,
                "R": FAHRENHEIT_STEP,
            },
            ("degC",),
            offsets={"degC": 273.15, "deg C": 273.15, "degF": 459.67, "deg F": 459.67},
            example="90 degC",
        ),
        QuantityKind(
            "temperature difference",
            "K",
            {
                "K": 1.0,
                "delta degC": 1.0,
                "delta degF": FAHRENHEIT_STEP,
                "R": FAHRENHEIT_STEP,
                "degR": FAHRENHEIT_STEP,
            },
            ("K",),
            example="5 K",
        ),
        QuantityKind("pressure", "Pa", _PRESSURES, ("Pa", "kPa", "MPa"), example="2.5 bar"),
        QuantityKind("pressure difference", "Pa", _PRESSURES, ("Pa", "kPa", "MPa"), example="20 kPa"),
        QuantityKind(
            "mass flow",
            "kg/s",
            {
                "kg/s": 1.0,
                "g/s": 1e-3,
                "kg/min": 1 / 60,
                "g/min": 1e-3 / 60,
                "kg/h": 1 / 3600,
                "g/h": 1e-3 / 3600,
                "t/h": 1000 / 3600,
                "lb/s": POUND,
                "lb/min": POUND / 60,
                "lb/h": POUND / 3600,
            },
            ("g/s", "kg/s"),
            example="0.5 kg/s",
        ),
        QuantityKind(
            "volume flow",
            "m^3/s",
            {
                "m^3/s": 1.0,
                "m^3/min": 1 / 60,
                "m^3/h": 1 / 3600,
                "L/s": 1e-3,
                "L/min": 1e-3 / 60,
                "lpm": 1e-3 / 60,
                "L/h": 1e-3 / 3600,
                "mL/min": 1e-6 / 60,
                "gpm": GALLON / 60,
                "US gal/min": GALLON / 60,
                "cfm": FOOT**3 / 60,
                "ft^3/min": FOOT**3 / 60,
                "ft^3/h": FOOT**3 / 3600,
                "ft^3/s": FOOT**3,
            },
            ("L/min", "m^3/h"),
            example="30 L/min",
        ),
        QuantityKind(
            "length",
            "m",
            {"m": 1.0, "cm": 1e-2, "mm": 1e-3, "um": 1e-6, "in": INCH, "ft": FOOT},
            ("um", "mm", "m"),
            example="3 mm",
        ),
        QuantityKind(
            "area",
            "m^2",
            {"m^2": 1.0, "cm^2": 1e-4, "mm^2": 1e-6, "in^2": INCH**2, "ft^2": FOOT**2},
            ("mm^2", "m^2"),
            example="2 mm^2",
        ),
        QuantityKind("mass", "kg", {"kg": 1.0, "g": 1e-3, "t": 1e3, "lb": POUND}, ("g", "kg"), example="30 g"),
        QuantityKind(
            "duration",
            "s",
            {"s": 1.0, "min": 60.0, "h": 3600.0},
            ("s", "h"),
            example="8000 h",
        ),
        QuantityKind("speed", "m/s", {"m/s": 1.0, "ft/s": FOOT}, ("m/s",), example="1 m/s"),
        QuantityKind("force", "N", {"N": 1.0, "kN": 1e3}, ("N", "kN"), example="1.6 kN"),
        QuantityKind(
            "power",
            "W",
            {
                "W": 1.0,
                "mW": 1e-3,
                "kW": 1e3,
                "MW": 1e6,
                "Btu/h": BTU / 3600,
                "hp": 550 * FOOT * POUND * 9.80665,
            },
            ("mW", "W", "kW", "MW"),
            example="5 W",
        ),
        QuantityKind(
            "energy",
            "J",
            {"J": 1.0, "kJ": 1e3, "MJ": 1e6, "Wh": 3600.0, "kWh": 3.6e6, "Btu": BTU},
            ("J", "kWh"),
            example="1 kWh",
        ),
        QuantityKind(
            "heat capacity",
            "J/(kg K)",
            {"J/(kg K)": 1.0, "kJ/(kg K)": 1e3, "J/(g K)": 1e3, "Btu/(lb degF)": BTU / (POUND * FAHRENHEIT_STEP)},
            ("J/(kg K)", "kJ/(kg K)"),
            example="4180 J/(kg K)",
        ),
        QuantityKind(
            "conductivity",
            "W/(m K)",
            {
                "W/(m K)": 1.0,
                "mW/(m K)": 1e-3,
                "W/(cm K)": 1e2,
                "Btu/(h ft degF)": BTU / (3600 * FOOT * FAHRENHEIT_STEP),
            },
            ("mW/(m K)", "W/(m K)"),
            example="180 W/(m K)",
        ),
        QuantityKind(
            "conductance",
            "W/K",
            {"W/K": 1.0, "mW/K": 1e-3, "kW/K": 1e3, "Btu/(h degF)": BTU / (3600 * FAHRENHEIT_STEP)},
            ("mW/K", "W/K", "kW/K"),
            example="0.6 W/K",
        ),
        QuantityKind(
            "film coefficient",
            "W/(m^2 K)",
            {
                "W/(m^2 K)": 1.0,
                "kW/(m^2 K)": 1e3,
                "W/(cm^2 K)": 1e4,
                "Btu/(h ft^2 degF)": BTU / (3600 * FOOT**2 * FAHRENHEIT_STEP),
            },
            ("W/(m^2 K)",),
            example="5 W/(m^2 K)",
        ),
        QuantityKind(
            "heat flux",
            "W/m^2",
            {"W/m^2": 1.0, "kW/m^2": 1e3, "W/cm^2": 1e4, "Btu/(h ft^2)": BTU / (3600 * FOOT**2)},
            ("W/m^2", "kW/m^2"),
            example="5 kW/m^2",
        ),
        QuantityKind(
            "thermal resistance",
            "K/W",
            {"K/W": 1.0, "K/kW": 1e-3, "mK/W": 1e-3, "h degF/Btu": 3600 * FAHRENHEIT_STEP / BTU},
            ("K/W",),
            example="0.05 K/W",
        ),
        QuantityKind(
            "areal thermal resistance",
            "m^2 K/W",
            {
                "m^2 K/W": 1.0,
                "cm^2 K/W": 1e-4,
                "mm^2 K/W": 1e-6,
                "m^2 K/kW": 1e-3,
                "h ft^2 degF/Btu": 3600 * FOOT**2 * FAHRENHEIT_STEP / BTU,
            },
            ("m^2 K/W",),
            example="3e-5 m^2 K/W",
        ),
        QuantityKind(
            "resistance", "ohm", {"ohm": 1.0, "mohm": 1e-3, "kohm": 1e3}, ("mohm", "ohm", "kohm"), example="2 ohm"
        ),
        QuantityKind(
            "resistivity",
            "ohm m",
            {"ohm m": 1.0, "ohm cm": 1e-2, "mohm cm": 1e-5, "uohm m": 1e-6},
            ("uohm m", "ohm m"),
            example="10 uohm m",
        ),
        QuantityKind(
            "contact resistivity",
            "ohm m^2",
            {"ohm m^2": 1.0, "ohm cm^2": 1e-4, "uohm cm^2": 1e-10},
            ("ohm m^2",),
            example="1e-10 ohm m^2",
        ),
        QuantityKind("voltage", "V", {"V": 1.0, "mV": 1e-3, "kV": 1e3}, ("mV", "V"), example="24 V"),
        QuantityKind("current", "A", {"A": 1.0, "mA": 1e-3}, ("mA", "A"), example="2 A"),
        QuantityKind(
            "Seebeck coefficient",
            "V/K",
            {"V/K": 1.0, "mV/K": 1e-3, "uV/K": 1e-6},
            ("uV/K", "mV/K", "V/K"),
            example="0.05 V/K",
        ),
        QuantityKind(
            "viscosity",
            "Pa s",
            {"Pa s": 1.0, "mPa s": 1e-3, "uPa s": 1e-6, "cP": 1e-3, "kg/(m s)": 1.0, "lb/(ft h)": POUND / FOOT / 3600},
            ("uPa s", "mPa s", "Pa s"),
            example="1 mPa s",
        ),
        QuantityKind(
            "density",
            "kg/m^3",
            {"kg/m^3": 1.0, "g/cm^3": 1e3, "kg/L": 1e3, "g/L": 1.0, "lb/ft^3": POUND / FOOT**3},
            ("kg/m^3",),
            example="998 kg/m^3",
        ),
    )
}

STANDARD_VOLUME_FLOW = "standard volume flow"
ENERGY_PRICE = "energy price"
ENERGY_PRICE_EXAMPLE = "0.06 EUR/kWh"
HIGHEST_DEGREE = 8


def per_kelvin(kind: str, power: int) -> str:
    """Name of the kind of a polynomial's coefficient: the given kind per K^power, power from 0 to HIGHEST_DEGREE."""
    return f"{kind} per K^{power}" if power else kind


def _divided_by_kelvin(unit: str, power: int) -> str:
    numerator, per_kelvin_already, _ = unit.partition("/K")
    exponent = power + bool(per_kelvin_already)
    return f"{numerator}/K^{exponent}" if exponent > 1 else f"{numerator}/K"


for _base in ("Seebeck coefficient", "resistance", "conductance"):
    for _power in range(1, HIGHEST_DEGREE + 1):
        _units = {_divided_by_kelvin(unit, _power): f for unit, f in KINDS[_base].units.items() if "deg" not in unit}
        _unit = next(iter(_units))
        KINDS[per_kelvin(_base, _power)] = QuantityKind(
            per_kelvin(_base, _power), _unit, _units, (_unit,), example=f"1e-4 {_unit}"
        )

_NUMBER = re.compile(r"\s*([+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)\s*(.*?)\s*", re.DOTALL)
_ATOM = re.compile(r"([A-Za-z%]+)(?:\^?([0-9])|\^(-[0-9]))?[\s-]*")
_PART = re.compile(r"\s*(?:\(([^()]*)\)|([^\s()]*))\s*([^()]*)")
_STANDARD = re.compile(r"(.*?)\s+at\s+([^,]*),([^,]*)(?:,\s*(dry|wet)\s*)?", re.DOTALL)
_REFERENCE = re.compile(r"(.*?)(?:\s+|(?<=bar)\()(gauge|absolute|g\)|a\))")
_SIGNS = str.maketrans(
    {"²": "^2", "³": "^3", "°": "deg", "µ": "u", "\u03bc": "u", "Ω": "ohm", "\u2126": "ohm"}
    | dict.fromkeys("·⋅*_", " ")
)
_SAME_ATOM = {"l": "L", "hr": "h", "lbm": "lb", "Ohm": "ohm", "BTU": "Btu", "GPM": "gpm", "CFM": "cfm", "LPM": "lpm"}
_GAUGE_SPELLINGS = {
    "barg": "bar gauge",
    "psig": "psi gauge",
    "kPag": "kPa gauge",
    "bara": "bar absolute",
    "psia": "psi absolute",
    "kPaa": "kPa absolute",
}
_HINTS = {"C": "degC", "c": "degC", "F": "degF", "f": "degF"}
UnitKey = tuple[tuple[str, int], ...]


@functools.lru_cache(1024)
def _unit_key(text: str) -> UnitKey | None:
    """Powers of the unit's atoms, so that m^2 = m2 and W/(m K) = W/m/K = W/m-K; None if it is not a unit at all."""
    powers: dict[str, int] = {}
    for position, part in enumerate(text.translate(_SIGNS).split("/")):
        split = _PART.fullmatch(part)
        if split is None:
            return None
        for chain, sign in ((split[1] or split[2] or "", -1 if position else 1), (split[3], 1)):
            end = 0
            while end < len(chain):
                atom = _ATOM.match(chain, end)
                if atom is None:
                    return None
                name = _SAME_ATOM.get(atom[1], atom[1])
                powers[name] = powers.get(name, 0) + sign * int(atom[2] or atom[3] or 1)
                end = atom.end()
    if len(powers) > 1 and "degC" in powers:  # in a compound unit a degree Celsius is a step of one kelvin
        powers["K"] = powers.pop("degC")
    return tuple(sorted((name, power) for name, power in powers.items() if power))


@functools.cache
def _spellings(kind_name: str) -> dict[UnitKey | None, str]:
    return {_unit_key(spelling): spelling for spelling in KINDS[kind_name].units}


def unit_of(kind: str) -> str:
    """SI unit of a kind as it is written in headers and JSON, "1" for a plain number."""
    if kind == ENERGY_PRICE:
        return "1/J"
    return "m^3/s" if kind == STANDARD_VOLUME_FLOW else KINDS[kind].si_unit


def allowed_units(kind: str) -> str:
    """List the accepted units of a kind in one line, for messages and explanations."""
    if kind == STANDARD_VOLUME_FLOW:
        return f'{allowed_units("volume flow")}, each followed by "{STANDARD_EXAMPLE}" (and ", wet" or ", dry")'
    if kind == ENERGY_PRICE:
        return f"a currency in letters over one of {', '.join(KINDS['energy'].units)}"
    units = ", ".join(unit or "a plain number" for unit in KINDS[kind].units)
    return f'{units}, each also followed by "gauge"' if kind == "pressure" else units


def example_of(kind: str) -> str:
    """Show how a quantity of this kind is written."""
    if kind == ENERGY_PRICE:
        return ENERGY_PRICE_EXAMPLE
    return f"300 m^3/h {STANDARD_EXAMPLE}" if kind == STANDARD_VOLUME_FLOW else KINDS[kind].example


@dataclass(frozen=True)
class UnitConversion:
    """From numbers in one unit to SI: (number + offset) * factor + reference, the last a gauge pressure's."""

    offset: float
    factor: float
    reference: float = 0.0

    def si(self, number: Any) -> Any:
        """SI value of a number, or of an array of them."""
        return (number + self.offset) * self.factor + self.reference


def unit_conversion(unit: str, kind: str, *, ambient_pressure: float | None = None) -> UnitConversion:
    """Conversion from a unit such as "kg/h" to SI; as `parse_quantity`, for many numbers of one unit."""
    return _conversion(f"1 {unit}", unit, kind, ambient_pressure)


def parse_quantity(given: object, kind: str, *, ambient_pressure: float | None = None) -> float:
    """SI value of a text such as "0.5 kg/s".

    `given` is a text, or a plain number where the kind (a name in KINDS) has no unit. `ambient_pressure` [Pa] is what a
    gauge pressure is added to; without it gauge pressures are refused.
    Raises QuantityError: not a number with a unit of this kind; one line that says what to write.
    """
    number, unit = _number_and_unit(given, kind)
    value = float(_conversion(given, unit, kind, ambient_pressure).si(number))
    if not math.isfinite(value):
        raise QuantityError(f"{shown(given)} is too large a number")
    return value


def _conversion(given: object, unit: str, kind: str, ambient_pressure: float | None) -> UnitConversion:
    record = KINDS[kind]
    if not unit and not record.bare:
        raise QuantityError(f"{shown(given)} has no unit; write for example {_unit_added(given, kind)}")
    gauge = False
    if kind == "pressure":
        unit, gauge = _pressure_reference(unit)
    spelling = _spellings(kind).get(_unit_key(unit))
    if spelling is None:
        raise QuantityError(_wrong_unit(given, unit, kind))
    if gauge and ambient_pressure is None:
        raise QuantityError(f"{shown(given)} is a gauge pressure; give an absolute pressure here")
    reference = float(ambient_pressure or 0.0) if gauge else 0.0
    return UnitConversion(record.offsets.get(spelling, 0.0), record.units[spelling], reference)


def parse_standard_volume_flow(given: object) -> StandardVolumeFlow:
    """Flow of a text such as "300 m^3/h at 0 degC, 101.325 kPa, wet"; raises QuantityError."""
    text = given if isinstance(given, str) else ""
    parts = _STANDARD.fullmatch(text) if len(text) <= LONGEST_TEXT else None
    if parts is None:
        raise QuantityError(
            f"{shown(given)} does not state its reference; write for example "
            f'"300 m^3/h {STANDARD_EXAMPLE}", with ", wet" or ", dry" after it where the gas holds water'
        )
    flow = StandardVolumeFlow(
        volume_flow=parse_quantity(parts[1], "volume flow"),
        temperature=parse_quantity(parts[2], "temperature"),
        pressure=parse_quantity(parts[3], "pressure"),
        basis=parts[4],
    )
    if flow.volume_flow <= 0 or flow.temperature <= 0 or flow.pressure <= 0:
        raise QuantityError(f"{shown(given)} needs a flow, an absolute temperature and a pressure above zero")
    return flow


def parse_energy_price(given: object) -> EnergyPrice:
    """Price of a text such as "0.06 EUR/kWh"; raises QuantityError."""
    wanted = f'write money in letters for an energy, for example "{ENERGY_PRICE_EXAMPLE}"'
    number, unit = _number_and_unit(given, ENERGY_PRICE)
    currency, _, energy = (part.strip() for part in unit.partition("/"))
    spelling = _spellings("energy").get(_unit_key(energy))
    if not 1 <= len(currency) <= LONGEST_CURRENCY or not currency.isalpha() or spelling is None:
        raise QuantityError(f"{shown(given)} is not a price; {wanted}")
    if not 0 <= number < math.inf:
        raise QuantityError(f"{shown(given)} is negative or too large; {wanted}")
    return EnergyPrice(number / KINDS["energy"].units[spelling], currency)


def from_pint(quantity: object, kind: str) -> float:
    """SI value of a pint quantity with one number; pressures are absolute.

    Raises QuantityError: no pint quantity, another dimension, an array, or a temperature where a difference is meant.
    """
    import pint

    if not isinstance(quantity, pint.Quantity):
        raise QuantityError(f"{shown(quantity)} is no pint quantity")
    record = KINDS[kind]
    units = str(quantity.units)
    if kind == "temperature difference" and units in ("degree_Celsius", "degree_Fahrenheit"):
        raise QuantityError(f"{units} is a temperature; a difference is in K, delta_degC or delta_degF")
    if kind == "temperature" and units.startswith("delta_"):
        raise QuantityError(f"{units} is a temperature difference, not a temperature")
    try:
        value = float(quantity.to("" if record.bare else record.si_unit).magnitude)
    except (pint.PintError, TypeError, ValueError) as error:
        raise QuantityError(f"{units} does not convert to one number in {record.si_unit}") from error
    if not math.isfinite(value):
        raise QuantityError(f"{value} {units} is not a finite number")
    return value


def is_pint_quantity(value: object) -> bool:
    """Whether an object is a pint quantity, told without importing pint."""
    return type(value).__module__.split(".")[0] == "pint" and hasattr(value, "magnitude")


def format_quantity(value: float, kind: str, digits: int = 4) -> str:
    """Text of an SI value in the unit that suits its size, with `digits` significant digits.

    Temperatures have digits - 3 decimals, since a degree means the same at 9 and at 900 degC. NaN and infinity
    are "no value".
    """
    if not math.isfinite(value):
        return "no value"
    record = KINDS[kind]
    if kind == "temperature":
        return f"{value - 273.15:.{max(digits - 3, 0)}f} degC"
    fitting = [unit for unit in record.shown if record.units[unit] <= abs(value)]
    unit = fitting[-1] if fitting else record.shown[0]
    if value == 0 and record.si_unit in record.shown:
        unit = record.si_unit
    return f"{significant(value / record.units[unit], digits)} {unit}".rstrip()


def significant(number: float, digits: int) -> str:
    """Write a number with so many significant digits, without an exponent between 0.001 and 1e6."""
    if number == 0:
        return "0"
    mantissa, _, exponent = f"{number:.{digits - 1}e}".partition("e")
    power = int(exponent)
    if -3 <= power < 6:
        return f"{float(f'{mantissa}e{power}'):.{max(digits - 1 - power, 0)}f}"
    return f"{mantissa.rstrip('0').rstrip('.') if '.' in mantissa else mantissa}e{power}"


def _number_and_unit(given: object, kind: str) -> tuple[float, str]:
    if isinstance(given, int | float) and not isinstance(given, bool):
        if isinstance(given, int) and abs(given) > 10**300:
            raise QuantityError("the number is too large")
        if not math.isfinite(given):
            raise QuantityError(f"{given} is not a finite number")
        return float(given), ""
    if not isinstance(given, str):
        raise QuantityError(f'{shown(given)} is not a number with a unit; write for example "{example_of(kind)}"')
    split = _NUMBER.fullmatch(given) if len(given) <= LONGEST_TEXT else None
    if split is None:
        raise QuantityError(f'{shown(given)} is not a number with a unit; write for example "{example_of(kind)}"')
    if split[2].startswith(","):
        raise QuantityError(f"{shown(given)} has a comma in the number; write 1.5, not 1,5, and 1500, not 1,500")
    return float(split[1]), split[2]


def _pressure_reference(unit: str) -> tuple[str, bool]:
    split = _REFERENCE.fullmatch(_GAUGE_SPELLINGS.get(unit, unit))
    return (split[1], split[2][0] == "g") if split else (unit, False)


def _wrong_unit(given: object, unit: str, kind: str) -> str:
    """One line: what the unit is instead, or what is probably meant, and what is allowed."""
    key = _unit_key(unit)
    if kind == "temperature" and unit in _HINTS:
        return f'{shown(given)} has no known unit of {kind} ("{unit}"); write {_HINTS[unit]}'
    if kind == "temperature difference" and key in _spellings("temperature"):
        return f"{shown(given)} is a temperature, and a temperature difference is wanted; write it in K"
    others = [name for name in KINDS if name != kind and key in _spellings(name)]
    what = (
        f"is in a unit of {others[0]}, not of {kind}"
        if others
        else f'has no known unit of {kind} ("{one_line(unit, 30)}")'
    )
    return f"{shown(given)} {what}; use {allowed_units(kind)}"


def _unit_added(given: object, kind: str) -> str:
    example = example_of(kind)
    number = given.strip() if isinstance(given, str) else given
    return f'"{number} {example.partition(" ")[2]}"'


def one_line(text: str, longest: int = 60) -> str:
    """Make a text printable in one line, cut where it is too long."""
    clean = "".join(sign if sign.isprintable() else " " for sign in text[: longest + 1])
    return clean if len(clean) <= longest else f"{clean[: longest - 3]}..."


def shown(given: object) -> str:
    """Show in one short line what was given."""
    if isinstance(given, str):
        return f'"{one_line(given)}"'
    if isinstance(given, bool):
        return str(given).lower()
    if isinstance(given, int) and abs(given) >= 10**20:
        return "the number"
    if isinstance(given, int | float):
        return str(given)
    if isinstance(given, list | tuple):
        return "a list"
    return "a table" if isinstance(given, Mapping) else f"a {type(given).__name__}"
