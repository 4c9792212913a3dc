"""Text with units against pint, against definitions, and against everything that is not a quantity."""

from __future__ import annotations

import math
import re

import pint
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.errors import QuantityError
from harvest.quantities import (
    KINDS,
    StandardVolumeFlow,
    format_quantity,
    from_pint,
    parse_quantity,
    parse_standard_volume_flow,
    per_kelvin,
    unit_of,
)

REGISTRY: pint.UnitRegistry[float] = pint.UnitRegistry()

# How pint spells what it does not read as engineers write it.
PINT_SPELLINGS = {
    "": "dimensionless",
    "%": "percent",
    "gpm": "gallon/minute",
    "US gal/min": "gallon/minute",
    "lpm": "liter/minute",
    "cfm": "foot**3/minute",
    "mm H2O": "mmH2O",
    "mmH2O": "mmH2O",
    "in H2O": "inH2O",
    "delta degC": "delta_degC",
    "delta degF": "delta_degF",
    "deg C": "degC",
    "deg F": "degF",
    "R": "degR",
    "hp": "horsepower",
}
# pint has water at 4 degC with a density of 0.999972 for both; the conventional head takes 1000 kg/m^3
CONVENTIONAL = {"mmH2O": 5e-5, "mm H2O": 5e-5}


def pint_text(spelling: str) -> str:
    text = PINT_SPELLINGS.get(spelling, spelling)
    text = re.sub(r"\bh\b", "hour", text)
    text = re.sub(r"\bdegF\b", "delta_degF", text) if "Btu" in text else text
    text = re.sub(r"\bBtu\b", "Btu_it", text)  # the International Table unit, which the plain name is not in pint
    return re.sub(r"\bt\b", "tonne", text)


ALL_SPELLINGS = [(kind.name, spelling) for kind in KINDS.values() for spelling in kind.units]


@pytest.mark.parametrize(("kind", "spelling"), ALL_SPELLINGS)
def test_every_factor_agrees_with_pint(kind: str, spelling: str) -> None:
    for number in (1.0, 250.0):
        expected = REGISTRY.Quantity(number, pint_text(spelling)).to(
            pint_text(unit_of(kind)) if unit_of(kind) != "1" else ""
        )
        got = parse_quantity(f"{number} {spelling}", kind)
        assert got == pytest.approx(expected.magnitude, rel=CONVENTIONAL.get(spelling, 1e-9))


@pytest.mark.parametrize(
    ("text", "kind", "expected"),
    [
        ("212 degF", "temperature", 373.15),
        ("-459.67 degF", "temperature", 0.0),
        ("491.67 R", "temperature", 273.15),
        ("1 gpm", "volume flow", 231 * 0.0254**3 / 60),
        ("14.5037737730 psi", "pressure", 1e5),
        ("1 psia", "pressure", 6894.757293168),
        ("0 psig", "pressure", 101325.0),
        ("1.5 bar gauge", "pressure", 251325.0),
        ("1.5 bar(g)", "pressure", 251325.0),
        ("1.5barg", "pressure", 251325.0),
        ("2.5 bar absolute", "pressure", 2.5e5),
        ("3412.141633 Btu/h", "power", 1000.0),
        ("35 %", "dimensionless", 0.35),
        ("0.35", "dimensionless", 0.35),
        ("8 g/kg", "mass ratio", 0.008),
    ],
)
def test_texts_with_known_values(text: str, kind: str, expected: float) -> None:
    got = parse_quantity(text, kind, ambient_pressure=101325.0)
    assert got == pytest.approx(expected, rel=1e-9, abs=1e-12)


@pytest.mark.parametrize(
    ("kind", "spellings"),
    [
        ("conductivity", ["2 W/(m K)", "2 W/m/K", "2 W/m-K", "2 W/(m·K)", "2W/(K m)", "2 W m^-1 K^-1", "2 W/(m degC)"]),
        ("film coefficient", ["2 W/(m^2 K)", "2 W/m2K", "2 W/m²K", "2 W/m^2/K", "2 W/m2-K"]),
        ("areal thermal resistance", ["2 m^2 K/W", "2 m2K/W", "2 m²·K/W", "2 K m^2/W"]),
        ("volume flow", ["2 m^3/h", "2 m3/h", "2 m³/hr"]),
        ("resistance", ["2 mohm", "2 mΩ"]),
        ("temperature", ["2 degC", "2 °C", "2°C", "2 deg C", "275.15 K"]),
    ],
)
def test_spellings_of_one_unit_agree(kind: str, spellings: list[str]) -> None:
    values = [parse_quantity(spelling, kind) for spelling in spellings]
    assert values == pytest.approx([values[0]] * len(values), rel=1e-15)


@pytest.mark.parametrize(
    ("given_text", "kind", "message"),
    [
        (0.5, "mass flow", r'0\.5 has no unit; write for example "0\.5 kg/s"'),
        ("0.5", "mass flow", r'"0\.5" has no unit; write for example "0\.5 kg/s"'),
        ("5 kW", "mass flow", "is in a unit of power, not of mass flow; use kg/s, g/s"),
        ("1,5 W", "power", "comma in the number; write 1.5, not 1,5"),
        ("0,05 kg/s", "mass flow", "comma"),
        ("90 C", "temperature", "write degC"),
        ("90 F", "temperature", "write degF"),
        ("5 degC", "temperature difference", "is a temperature, and a temperature difference is wanted"),
        ("9**9**9 W", "power", "no known unit of power"),
        ("nan W", "power", "not a number with a unit"),
        ("inf W", "power", "not a number with a unit"),
        ("1e999 W", "power", "too large"),
        (math.nan, "dimensionless", "not a finite number"),
        (10**400, "dimensionless", "too large"),
        (True, "dimensionless", "true is not a number with a unit"),
        (None, "power", "a NoneType is not a number"),
        ("100 cfm", "length", "in a unit of volume flow"),
        ("5 W/m K", "conductivity", "no known unit of conductivity"),
        ("5 W/mK", "conductivity", "no known unit of conductivity"),
        ("1 bar gauge", "pressure difference", "no known unit"),
        ("1 " + "W" * 200, "power", "not a number with a unit"),
        ("٣ W", "power", "not a number with a unit"),
    ],
)
def test_what_is_no_quantity_is_refused_with_a_hint(given_text: object, kind: str, message: str) -> None:
    with pytest.raises(QuantityError, match=message):
        parse_quantity(given_text, kind)


def test_gauge_pressure_needs_an_ambient_pressure() -> None:
    with pytest.raises(QuantityError, match="is a gauge pressure"):
        parse_quantity("1 bar gauge", "pressure")


def test_standard_volume_flow_keeps_its_reference() -> None:
    flow = parse_standard_volume_flow("300 m^3/h at 0 degC, 101.325 kPa, wet")
    assert flow == StandardVolumeFlow(300 / 3600, 273.15, 101325.0, "wet")
    assert parse_standard_volume_flow(str(flow)) == flow
    assert parse_standard_volume_flow("180 cfm at 70 degF, 14.696 psi").basis is None


@pytest.mark.parametrize(
    "text", ["300 m^3/h", "300 m^3/h at 0 degC", "300 m^3/h at 0 degC, 1 atm, damp", 300, "-3 L/s at 0 degC, 1 atm"]
)
def test_standard_volume_flow_without_its_reference_is_refused(text: object) -> None:
    with pytest.raises(QuantityError, match=r"does not state its reference|above zero|no known unit"):
        parse_standard_volume_flow(text)


@pytest.mark.parametrize(
    ("value", "kind", "expected"),
    [
        (0.01234, "power", "12.34 mW"),
        (3412.0, "power", "3.412 kW"),
        (45200.0, "pressure", "45.20 kPa"),
        (365.15, "temperature", "92.0 degC"),
        (0.0, "power", "0 W"),
        (1e-10, "contact resistivity", "1e-10 ohm m^2"),
        (-5.0, "power", "-5.000 W"),
        (math.nan, "power", "no value"),
        (math.inf, "power", "no value"),
    ],
)
def test_values_are_written_in_a_unit_that_suits(value: float, kind: str, expected: str) -> None:
    assert format_quantity(value, kind) == expected


@settings(max_examples=200)
@given(
    st.sampled_from(sorted(KINDS)),
    st.floats(1e-12, 1e12),
    st.sampled_from([1.0, -1.0]),
)
def test_what_is_written_reads_back(kind: str, size: float, sign: float) -> None:
    value = sign * size
    written = format_quantity(value, kind, 15)
    assert parse_quantity(written, kind) == pytest.approx(value, rel=1e-12, abs=1e-11 if kind == "temperature" else 0)


@settings(max_examples=100)
@given(st.floats(allow_nan=False, allow_infinity=False), st.sampled_from(sorted(set(KINDS) - {"temperature"})))
def test_si_text_is_exact(value: float, kind: str) -> None:
    unit = "" if KINDS[kind].bare else unit_of(kind)
    assert parse_quantity(f"{value!r} {unit}", kind) == value


@settings(max_examples=300)
@given(
    st.one_of(st.text(), st.from_regex(r"[0-9.,eE+-]{0,6} ?[A-Za-z0-9^/() %°²-]{0,12}")), st.sampled_from(sorted(KINDS))
)
def test_no_text_raises_anything_but_a_quantity_error(text: str, kind: str) -> None:
    message = ""
    try:
        value = parse_quantity(text, kind, ambient_pressure=1e5)
    except QuantityError as error:
        value, message = 0.0, str(error)
    assert math.isfinite(value) and "\n" not in message


def test_polynomial_coefficients_have_their_own_units() -> None:
    assert parse_quantity("10 uV/K^2", per_kelvin("Seebeck coefficient", 1)) == pytest.approx(1e-5)
    assert parse_quantity("1 mohm/K", per_kelvin("resistance", 1)) == pytest.approx(1e-3)
    assert parse_quantity("1e-6 W/K^3", per_kelvin("conductance", 2)) == pytest.approx(1e-6)
    with pytest.raises(QuantityError, match=r"no known unit|unit of"):
        parse_quantity("0.05 V/K", per_kelvin("Seebeck coefficient", 1))


def test_pint_quantities_convert_at_the_edge() -> None:
    assert from_pint(REGISTRY.Quantity(90.0, "degC"), "temperature") == pytest.approx(363.15)
    assert from_pint(REGISTRY.Quantity(9.0, "delta_degF"), "temperature difference") == pytest.approx(5.0)
    assert from_pint(REGISTRY.Quantity(1.0, "kg/hour"), "mass flow") == pytest.approx(1 / 3600)
    assert from_pint(REGISTRY.Quantity(35.0, "percent"), "dimensionless") == pytest.approx(0.35)


@pytest.mark.parametrize(
    ("quantity", "kind", "message"),
    [
        (REGISTRY.Quantity(1.0, "watt"), "mass flow", "does not convert"),
        (REGISTRY.Quantity(5.0, "degC"), "temperature difference", "is a temperature"),
        (REGISTRY.Quantity(5.0, "delta_degC"), "temperature", "is a temperature difference"),
        (REGISTRY.Quantity(math.nan, "watt"), "power", "not a finite number"),
        (5.0, "power", "no pint quantity"),
    ],
)
def test_pint_quantities_of_another_kind_are_refused(quantity: object, kind: str, message: str) -> None:
    with pytest.raises(QuantityError, match=message):
        from_pint(quantity, kind)
