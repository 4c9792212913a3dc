"""Fluids: published values, direct calls of the property library, limits, phases, user tables, batches.

Checks of tests/published/*.toml with `function = "fluid"` are read here: their `inputs` are the fields of `FluidSpec`
(`fluid` is its name), `pressure` [Pa], `temperature` [K], and `property`: density, heat_capacity, viscosity,
conductivity, prandtl, freezing or boiling.
"""

from __future__ import annotations

import subprocess
import sys
import tomllib
from pathlib import Path
from typing import Any

import iapws
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from harvest.errors import RangeError
from harvest.physics import coolprop_source as library
from harvest.physics.arrays import FloatArray
from harvest.physics.chebyshev import (
    chebyshev_coefficients,
    chebyshev_nodes,
    derivative,
    expansion_value,
    integral,
    without_tail,
)
from harvest.physics.fluids import (
    CONDUCTIVITY,
    DENSITY,
    ENTHALPY,
    FLUIDS,
    HEAT_CAPACITY,
    VISCOSITY,
    FluidBatch,
    FluidSpec,
    FluidTable,
    check_fluid,
    expansion_range,
    fluid_table,
    glycol_mass_fraction,
    glycol_volume_fraction,
    water_mole_fraction,
)

WATER = FluidSpec("water")
AIR = FluidSpec("air")
ETHYLENE = FluidSpec("ethylene glycol", volume_fraction=0.5)
PROPYLENE = FluidSpec("propylene glycol", mass_fraction=0.3)
DIESEL = FluidSpec("exhaust gas", fuel="diesel", excess_air_ratio=1.5)
OIL_ROWS = (
    (300.0, 860.0, 1900.0, 0.0300, 0.130),
    (350.0, 830.0, 2050.0, 0.0080, 0.126),
    (400.0, 800.0, 2200.0, 0.0030, 0.122),
    (450.0, 770.0, 2350.0, 0.0016, 0.118),
    (500.0, 740.0, 2500.0, 0.0010, 0.114),
)
OIL = FluidSpec("table", table=OIL_ROWS)
PUBLISHED = Path(__file__).parent / "published"
PROPERTIES = ("enthalpy", "heat_capacity", "density", "viscosity", "conductivity")


def published_fluid_checks() -> list[Any]:
    checks = []
    for path in sorted(PUBLISHED.glob("*.toml")):
        for check in tomllib.loads(path.read_text(encoding="utf-8"))["check"]:
            if check["function"] == "fluid":
                checks.append(pytest.param(check, id=f"{path.stem}-{check['name']}"))
    return checks


def batch_of(table: FluidTable) -> FluidBatch:
    return FluidBatch.stack([table], np.zeros(1, dtype=np.int64))


def values_at(table: FluidTable, temperatures: FloatArray) -> FloatArray:
    """The five properties at temperatures (points,), (5, points)."""
    batch = batch_of(table)
    return np.stack([getattr(batch, name)(temperatures[:, None])[:, 0] for name in PROPERTIES])


def random_temperatures(table: FluidTable, seed: int, count: int = 60) -> FloatArray:
    return np.sort(np.random.default_rng(seed).uniform(table.lower, table.upper, count))


@pytest.mark.parametrize("check", published_fluid_checks())
def test_published_value(check: dict[str, Any]) -> None:
    inputs = dict(check["inputs"])
    wanted, pressure, temperature = (inputs.pop(name) for name in ("property", "pressure", "temperature"))
    spec = FluidSpec(name=inputs.pop("fluid"), **inputs)
    table = fluid_table(spec, pressure, temperature, temperature)
    got: float
    if wanted in ("freezing", "boiling"):
        got = getattr(table, wanted)
    elif wanted == "prandtl":
        heat_capacity, viscosity, conductivity = batch_of(table).film_properties(np.array([[temperature]]))
        got = float((heat_capacity * viscosity / conductivity)[0, 0])
    else:
        got = float(getattr(batch_of(table), wanted)(np.array([[temperature]]))[0, 0])
    if "absolute_tolerance" in check:
        assert got == pytest.approx(check["expected"], abs=check["absolute_tolerance"], rel=0.0)
    else:
        assert got == pytest.approx(check["expected"], rel=check["tolerance"])


def test_published_files_have_fluid_checks() -> None:
    assert len(published_fluid_checks()) > 90


LIBRARY_CASES = [
    pytest.param(WATER, 1e4, lambda t: library.liquid_water_samples(1e4, t), 1e-7, id="water-0.1-bar"),
    pytest.param(WATER, 2.5e5, lambda t: library.liquid_water_samples(2.5e5, t), 1e-7, id="water-2.5-bar"),
    pytest.param(WATER, 1e7, lambda t: library.liquid_water_samples(1e7, t), 3e-4, id="water-100-bar"),
    pytest.param(AIR, 101325.0, lambda t: library.gaseous_air_samples(101325.0, t), 1e-6, id="air-1-bar"),
    pytest.param(AIR, 8e5, lambda t: library.gaseous_air_samples(8e5, t), 2e-5, id="air-8-bar"),
]


@pytest.mark.parametrize(("spec", "pressure", "direct", "conductivity_tolerance"), LIBRARY_CASES)
def test_expansion_agrees_with_the_library(
    spec: FluidSpec, pressure: float, direct: Any, conductivity_tolerance: float
) -> None:
    # Above about 430 K water, and air at every pressure, have a kink in the library's conductivity.
    table = fluid_table(spec, pressure, 290.0, 820.0)
    temperatures = random_temperatures(table, seed=5)
    got, wanted = values_at(table, temperatures), direct(temperatures)
    for row in (HEAT_CAPACITY, DENSITY, VISCOSITY):
        np.testing.assert_allclose(got[row], wanted[row], rtol=1e-7)
    np.testing.assert_allclose(got[CONDUCTIVITY], wanted[CONDUCTIVITY], rtol=conductivity_tolerance)
    rise, wanted_rise = got[ENTHALPY] - got[ENTHALPY][0], wanted[ENTHALPY] - wanted[ENTHALPY][0]
    # The library's own enthalpies scatter by this much: its densities are iterated.
    np.testing.assert_allclose(rise, wanted_rise, rtol=0.0, atol=5e-10 * 10.0 * wanted[HEAT_CAPACITY].max())


@settings(max_examples=12, deadline=None)
@given(
    by_mass=st.booleans(),
    name=st.sampled_from(["ethylene glycol", "propylene glycol"]),
    fraction=st.floats(0.1, 0.6),
    seed=st.integers(0, 1000),
)
def test_glycol_agrees_with_the_library(by_mass: bool, name: str, fraction: float, seed: int) -> None:
    code = {"ethylene glycol": "EG", "propylene glycol": "PG"}[name]
    spec = FluidSpec(name, mass_fraction=fraction) if by_mass else FluidSpec(name, volume_fraction=fraction)
    table = fluid_table(spec, 1e5, 300.0, 300.0)
    temperatures = random_temperatures(table, seed, 20)
    got = values_at(table, temperatures)
    wanted = library.solution_samples(("M" if by_mass else "A") + code, fraction, 1e5, temperatures)
    for row in (DENSITY, VISCOSITY, CONDUCTIVITY):
        np.testing.assert_allclose(got[row], wanted[row], rtol=1e-9)
    # The library's heat capacity of solutions leaves out the pressure, which its enthalpy has: 7e-5 a bar.
    np.testing.assert_allclose(got[HEAT_CAPACITY], wanted[HEAT_CAPACITY], rtol=1.2e-4)
    np.testing.assert_allclose(np.diff(got[ENTHALPY]), np.diff(wanted[ENTHALPY]), rtol=0.0, atol=1e-10 * 4e4)


@settings(max_examples=12, deadline=None)
@given(pressure=st.floats(2e3, 5e6), share=st.floats(0.001, 0.999))
def test_water_agrees_with_an_independent_library(pressure: float, share: float) -> None:
    table = fluid_table(WATER, pressure, 0.0, 1.0)
    temperature = max(table.lower, 273.16) + share * (table.upper - max(table.lower, 273.16))
    other = iapws.IAPWS97(T=temperature, P=pressure / 1e6)
    got = values_at(table, np.array([temperature]))[:, 0]
    # The industrial formulation is within its stated tolerances of the scientific one, its transport a little wider.
    assert got[DENSITY] == pytest.approx(other.rho, rel=2e-5)
    assert got[HEAT_CAPACITY] == pytest.approx(1e3 * other.cp, rel=2e-3)
    assert got[VISCOSITY] == pytest.approx(other.mu, rel=1e-3)
    assert got[CONDUCTIVITY] == pytest.approx(other.k, rel=5e-3)


@pytest.mark.parametrize("spec", [WATER, ETHYLENE, PROPYLENE, AIR, DIESEL, OIL], ids=lambda spec: spec.name)
def test_heat_capacity_is_the_slope_of_enthalpy(spec: FluidSpec) -> None:
    table = fluid_table(spec, 2e5, 310.0, 390.0)
    temperatures = random_temperatures(table, seed=1)[5:-5]
    step = 0.05
    rise = values_at(table, temperatures + step)[ENTHALPY] - values_at(table, temperatures - step)[ENTHALPY]
    np.testing.assert_allclose(rise / (2.0 * step), values_at(table, temperatures)[HEAT_CAPACITY], rtol=3e-6)


@settings(max_examples=8, deadline=None)
@given(excess=st.floats(1.0, 20.0), humidity=st.floats(0.0, 0.05), upper=st.floats(400.0, 1900.0))
def test_exhaust_lies_between_its_pure_gases(excess: float, humidity: float, upper: float) -> None:
    spec = FluidSpec("exhaust gas", fuel="methane", excess_air_ratio=excess, intake_humidity=humidity)
    table = fluid_table(spec, 101325.0, 300.0, upper)
    temperatures = random_temperatures(table, seed=2, count=12)
    got = values_at(table, temperatures)
    pure = np.stack(
        [library.dilute_gas_samples(each, temperatures) for each in ("CarbonDioxide", "Water", "Oxygen", "Nitrogen")]
    )
    molar = got[HEAT_CAPACITY] * table.molar_mass
    for found, row in ((molar, 0), (got[VISCOSITY], 1), (got[CONDUCTIVITY], 2)):
        assert (found > pure[:, row].min(axis=0) * 0.999).all()
        assert (found < pure[:, row].max(axis=0) * 1.001).all()
    np.testing.assert_allclose(got[DENSITY], 101325.0 * table.molar_mass / (8.314462618 * temperatures), rtol=1e-9)


def test_much_excess_air_becomes_air() -> None:
    exhaust = fluid_table(FluidSpec("exhaust gas", fuel="diesel", excess_air_ratio=1e6), 101325.0, 300.0, 800.0)
    air = fluid_table(AIR, 101325.0, 300.0, 800.0)
    temperatures = np.linspace(310.0, 790.0, 13)
    got, wanted = values_at(exhaust, temperatures), values_at(air, temperatures)
    # Air of the library has argon and is a real gas; the exhaust has neither.
    np.testing.assert_allclose(got[HEAT_CAPACITY], wanted[HEAT_CAPACITY], rtol=0.01)
    np.testing.assert_allclose(got[VISCOSITY], wanted[VISCOSITY], rtol=0.02)
    np.testing.assert_allclose(got[CONDUCTIVITY], wanted[CONDUCTIVITY], rtol=0.03)


def test_dry_oxygen_is_another_way_to_say_excess_air() -> None:
    ratio = 1.0 + 0.08 * (12.0 + 3.76 * 17.75) / (17.75 * (1.0 - 0.08 * 4.76))
    by_ratio = fluid_table(FluidSpec("exhaust gas", fuel="diesel", excess_air_ratio=ratio), 1e5, 300.0, 700.0)
    by_oxygen = fluid_table(FluidSpec("exhaust gas", fuel="diesel", dry_oxygen=0.08), 1e5, 300.0, 700.0)
    np.testing.assert_allclose(by_oxygen.coefficients[:, :8], by_ratio.coefficients[:, :8], rtol=1e-9, atol=1e-12)
    assert 0.05 < by_oxygen.water_fraction < 0.09


# Limits -------------------------------------------------------------------------------------------------------------


def test_air_above_its_data_is_refused() -> None:
    with pytest.raises(RangeError, match=r"^2300 K is outside 60 to 2000 K for air"):
        fluid_table(AIR, 101325.0, 2300.0, 2300.0)
    assert (
        fluid_table(AIR, 101325.0, 300.0, 2300.0).outside(2300.0).startswith("2300 K is outside 60 to 2000 K for air")
    )


def test_water_ends_where_it_freezes_and_boils() -> None:
    table = fluid_table(WATER, 101325.0, 0.0, 1000.0)
    assert table.boiling == table.upper_limit == pytest.approx(373.124, abs=2e-3)
    assert table.freezing == table.lower_limit == pytest.approx(273.1525, abs=2e-3)
    assert "373.124 K for water (boils at 1.013 bar); raise the pressure" in table.outside(380.0)
    assert "(freezes); raise the temperature" in table.outside(270.0)
    assert values_at(table, np.array([table.upper]))[DENSITY, 0] > 950.0


@pytest.mark.parametrize("pressure", [600.0, 2e7])
def test_water_without_a_liquid_range_is_refused(pressure: float) -> None:
    with pytest.raises(RangeError, match=r"Pa is outside 611\.655 to 1\.6e\+07 Pa for liquid water"):
        fluid_table(WATER, pressure, 300.0, 300.0)


def test_air_is_served_as_a_gas_only() -> None:
    table = fluid_table(AIR, 1e6, 60.0, 300.0)
    assert table.lower == table.lower_limit == pytest.approx(108.1, abs=0.1)
    assert "condenses at 10 bar" in table.outside(90.0)
    with pytest.raises(RangeError, match="critical pressure of air"):
        fluid_table(AIR, 4e6, 300.0, 400.0)
    with pytest.raises(RangeError, match="too near its critical point"):
        fluid_table(AIR, 3.7e6, 100.0, 150.0)


def test_glycol_ends_at_100_degrees_celsius_with_advice() -> None:
    table = fluid_table(ETHYLENE, 3e5, 300.0, 300.0)
    assert table.upper_limit == pytest.approx(373.15)
    assert 'the published data end); give fluid = "table"' in table.outside(380.0)


def test_glycol_boiling_is_an_estimate_above_that_of_water() -> None:
    table = fluid_table(ETHYLENE, 101325.0, 300.0, 300.0)
    fraction = float(water_mole_fraction("ethylene glycol", glycol_mass_fraction("ethylene glycol", np.array(0.5))))
    assert table.boiling == pytest.approx(library.water_boiling_temperature(101325.0 / fraction))
    assert table.boiling > 373.124
    thin = fluid_table(ETHYLENE, 5e4, 300.0, 300.0)
    assert thin.upper_limit == thin.boiling < 373.15
    assert "an estimate by Raoult's law" in thin.upper_reason
    with pytest.raises(RangeError, match="it boils where it freezes"):
        fluid_table(ETHYLENE, 100.0, 300.0, 300.0)


@pytest.mark.parametrize(
    ("spec", "message"),
    [
        (FluidSpec("brine"), '"brine" is no known fluid; give one of water'),
        (FluidSpec("water", mass_fraction=0.2), "water takes no mass_fraction"),
        (FluidSpec("air", fuel="diesel"), "air takes no fuel"),
        (FluidSpec("ethylene glycol"), "needs exactly one of mass_fraction and volume_fraction"),
        (FluidSpec("ethylene glycol", 0.3, 0.3), "needs exactly one of mass_fraction and volume_fraction"),
        (FluidSpec("ethylene glycol", float("nan")), "mass_fraction is nan"),
        (FluidSpec("ethylene glycol", 0.61), "a mass fraction of 0.61 is outside 0 to 0.6 for ethylene glycol"),
        (FluidSpec("propylene glycol", volume_fraction=0.05), "volume fraction of 0.05 is outside 0.1 to 0.6"),
        (FluidSpec("exhaust gas", excess_air_ratio=2.0), "needs a fuel"),
        (FluidSpec("exhaust gas", fuel="diesel"), "exactly one of excess_air_ratio and dry_oxygen"),
        (FluidSpec("exhaust gas", fuel="diesel", excess_air_ratio=0.9), "0.9 is below 1; only complete, lean"),
        (FluidSpec("exhaust gas", fuel="diesel", excess_air_ratio=float("nan")), "excess_air_ratio is nan"),
        (FluidSpec("exhaust gas", fuel="diesel", dry_oxygen=0.21009), "is not below the 0.2101 of air"),
        (FluidSpec("exhaust gas", fuel="coal", excess_air_ratio=2.0), '"coal" is no known fuel; give "diesel"'),
        (FluidSpec("exhaust gas", fuel="CH4", excess_air_ratio=2.0, intake_humidity=-0.1), "intake humidity of -0.1"),
        (FluidSpec("table"), "has no rows"),
        (FluidSpec("table", table=((300.0, 1.0, 0.0, 1.0, 1.0),)), "not finite and above 0"),
        (FluidSpec("table", table=(OIL_ROWS[1], OIL_ROWS[0])), "must rise"),
    ],
)
def test_a_faulty_fluid_is_refused(spec: FluidSpec, message: str) -> None:
    with pytest.raises(RangeError) as caught:
        fluid_table(spec, 2e5, 300.0, 400.0)
    assert message in str(caught.value)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize("pressure", [0.0, -1.0, float("nan"), float("inf")])
def test_a_faulty_pressure_is_refused(pressure: float) -> None:
    with pytest.raises(RangeError, match="is not a finite number above 0"):
        fluid_table(WATER, pressure, 300.0, 400.0)


def test_a_faulty_range_is_refused() -> None:
    with pytest.raises(RangeError, match="is not a range of temperatures"):
        fluid_table(AIR, 1e5, 400.0, 300.0)


def test_check_fluid_accepts_every_kind() -> None:
    specs = (WATER, ETHYLENE, PROPYLENE, AIR, DIESEL, OIL)
    assert {spec.name for spec in specs} == set(FLUIDS)
    for spec in specs:
        check_fluid(spec)


def test_expansion_range_is_shared_by_neighbours() -> None:
    lower, upper = expansion_range("air", np.array([293.0, 300.0, 250.0]), np.array([801.0, 300.0, 900.0]))
    assert lower.tolist() == [200.0, 300.0, 200.0]
    assert upper.tolist() == [900.0, 400.0, 900.0]
    first = fluid_table(AIR, 1e5, 293.0, 801.0)
    again = fluid_table(AIR, 1e5, 210.0, 899.0)
    assert (first.lower, first.upper) == (again.lower, again.upper)
    assert first.coefficients.tobytes() == again.coefficients.tobytes()


# Tables of the user -------------------------------------------------------------------------------------------------


def test_one_row_is_constant_to_the_last_digit() -> None:
    row = (300.0, 998.21, 4181.7, 1.0016e-3, 0.59846)
    table = fluid_table(FluidSpec("table", table=(row,)), 1e5, 300.0, 300.0)
    assert (table.lower_limit, table.upper_limit) == (1.0, 5000.0)
    got = values_at(table, np.array([1.0, 273.15, 366.6, 5000.0]))
    assert (got[HEAT_CAPACITY] == row[2]).all()
    assert (got[DENSITY] == row[1]).all()
    assert (got[VISCOSITY] == row[3]).all()
    assert (got[CONDUCTIVITY] == row[4]).all()
    assert got[ENTHALPY][2] - got[ENTHALPY][1] == pytest.approx(row[2] * (366.6 - 273.15), rel=1e-13)


def test_equal_rows_are_constant_to_the_last_digit() -> None:
    rows = tuple(
        (temperature, 998.21, 4181.7, 1.0016e-3, 0.59846) for temperature in (280.0, 300.0, 333.0, 360.0, 380.0)
    )
    got = values_at(fluid_table(FluidSpec("table", table=rows), 1e5, 300.0, 300.0), np.array([281.0, 345.6]))
    for row, value in ((DENSITY, 998.21), (HEAT_CAPACITY, 4181.7), (VISCOSITY, 1.0016e-3), (CONDUCTIVITY, 0.59846)):
        assert (got[row] == value).all()


@pytest.mark.parametrize("count", [2, 3, 4])
def test_few_rows_are_met_exactly(count: int) -> None:
    rows = np.array(OIL_ROWS[:count])
    got = values_at(fluid_table(FluidSpec("table", table=OIL_ROWS[:count]), 1e5, 300.0, 300.0), rows[:, 0])
    np.testing.assert_allclose(got[[DENSITY, HEAT_CAPACITY, VISCOSITY, CONDUCTIVITY]], rows[:, 1:].T, rtol=1e-12)


def test_many_rows_are_met_within_a_thousandth() -> None:
    table = fluid_table(ETHYLENE, 3e5, 300.0, 300.0)
    temperatures = np.linspace(280.0, 370.0, 10)
    sampled = values_at(table, temperatures)
    columns = (temperatures, *(sampled[row] for row in (DENSITY, HEAT_CAPACITY, VISCOSITY, CONDUCTIVITY)))
    rows = tuple(tuple(map(float, row)) for row in np.stack(columns, axis=1))
    copied = fluid_table(FluidSpec("table", table=rows), 3e5, 300.0, 300.0)  # type: ignore[arg-type]
    between = np.linspace(280.0, 370.0, 91)
    np.testing.assert_allclose(values_at(copied, between)[1:], values_at(table, between)[1:], rtol=2e-3)
    assert (copied.lower_limit, copied.upper_limit) == (280.0, 370.0)
    assert "(the last row); add rows" in copied.outside(371.0)


def test_a_nearly_constant_viscosity_is_met_too() -> None:
    viscosity = (1.0e-3, 1.0008e-3, 1.0012e-3, 1.0015e-3, 1.0018e-3)
    rows = tuple((300.0 + 10.0 * i, 850.0, 2000.0, value, 0.12) for i, value in enumerate(viscosity))
    got = values_at(fluid_table(FluidSpec("table", table=rows), 1e5, 300.0, 300.0), np.array([row[0] for row in rows]))
    np.testing.assert_allclose(got[VISCOSITY], viscosity, rtol=1e-3)


def test_a_misprint_in_a_table_is_refused() -> None:
    temperatures = np.linspace(300.0, 500.0, 21)
    rows = [(float(t), 850.0, 2000.0 + t, 0.002, 0.12) for t in temperatures]
    rows[10] = (rows[10][0], 850.0, 250.0, 0.002, 0.12)
    with pytest.raises(RangeError, match=r"heat capacity of the fluid table within 0\.1 %"):
        fluid_table(FluidSpec("table", table=tuple(rows)), 1e5, 300.0, 400.0)


def test_a_swinging_polynomial_is_refused() -> None:
    conductivity = (0.1, 0.1, 0.1, 0.1, 0.1, 0.5, 0.5, 0.5, 0.5, 0.5)
    rows = tuple((300.0 + 10.0 * i, 850.0, 2000.0, 0.002, value) for i, value in enumerate(conductivity))
    with pytest.raises(RangeError, match="conductivity of the fluid table swings out between its points"):
        fluid_table(FluidSpec("table", table=rows), 1e5, 300.0, 400.0)


# Batches ------------------------------------------------------------------------------------------------------------


def mixed_tables() -> list[FluidTable]:
    return [fluid_table(spec, 2e5, 310.0, 390.0) for spec in (WATER, ETHYLENE, AIR, DIESEL, OIL)]


def test_a_mixed_batch_gives_bitwise_what_single_cases_give() -> None:
    tables = mixed_tables()
    index = np.random.default_rng(0).integers(0, len(tables), 37)
    temperatures = np.random.default_rng(1).uniform(250.0, 420.0, (7, 37))
    batch = FluidBatch.stack(tables, index)
    films = batch.film_properties(temperatures)
    for name in PROPERTIES:
        together = getattr(batch, name)(temperatures)
        assert together.shape == temperatures.shape
        for case in range(37):
            alone = getattr(batch_of(tables[index[case]]), name)(temperatures[:, case : case + 1])
            assert alone.tobytes() == np.ascontiguousarray(together[:, case : case + 1]).tobytes()
    for name, film in zip(("heat_capacity", "viscosity", "conductivity"), films, strict=True):
        assert film.tobytes() == getattr(batch, name)(temperatures).tobytes()


def test_a_subset_of_a_batch_is_the_batch_of_the_subset() -> None:
    tables = mixed_tables()
    index = np.arange(20) % len(tables)
    batch = FluidBatch.stack(tables, index)
    temperatures = np.random.default_rng(2).uniform(310.0, 370.0, (3, 20))
    chosen = np.arange(20) % 3 == 0
    whole = batch.enthalpy(temperatures)[:, chosen]
    assert (batch.take(chosen).enthalpy(temperatures[:, chosen]) == whole).all()
    assert (batch.take(np.flatnonzero(chosen)).enthalpy(temperatures[:, chosen]) == whole).all()


def test_temperatures_outside_are_moved_to_the_end_except_for_enthalpy() -> None:
    table = fluid_table(WATER, 2e5, 0.0, 0.0)
    got = values_at(table, np.array([1.0, table.lower, table.upper, 4000.0]))
    np.testing.assert_allclose(got[1:, 0], got[1:, 1], rtol=1e-13)
    np.testing.assert_allclose(got[1:, 3], got[1:, 2], rtol=1e-13)


@pytest.mark.parametrize("spec", [WATER, AIR, OIL], ids=lambda spec: spec.name)
def test_enthalpy_goes_on_beyond_the_range_without_a_jump(spec: FluidSpec) -> None:
    table = fluid_table(spec, 2e5, 310.0, 390.0)
    for end, step in ((table.lower, -50.0), (table.upper, 50.0)):
        got = values_at(table, np.array([end, end + step]))
        assert got[ENTHALPY, 1] - got[ENTHALPY, 0] == pytest.approx(step * got[HEAT_CAPACITY, 0], rel=1e-12)


@settings(max_examples=20, deadline=None)
@given(hnp.arrays(np.float64, st.integers(1, 12), elements=st.floats(-5.0, 5.0)))
def test_expansions_of_polynomials_are_exact(power_coefficients: FloatArray) -> None:
    lower, upper = 250.0, 410.0

    def scaled(temperature: FloatArray) -> FloatArray:
        return (2.0 * temperature - lower - upper) / (upper - lower)

    wanted = np.polynomial.Polynomial(power_coefficients)
    coefficients = chebyshev_coefficients(wanted(scaled(chebyshev_nodes(lower, upper, 16))))
    at = np.linspace(lower, upper, 33)
    np.testing.assert_allclose(expansion_value(coefficients, scaled(at)), wanted(scaled(at)), atol=1e-12)
    back = derivative(integral(coefficients, lower, upper), lower, upper)
    np.testing.assert_allclose(back[: len(coefficients)], coefficients, atol=1e-12)
    assert integral(coefficients, lower, upper)[[0]].shape == (1,)
    assert without_tail(coefficients, 1e-11).shape == coefficients.shape


@settings(max_examples=30, deadline=None)
@given(st.sampled_from(["ethylene glycol", "propylene glycol"]), st.floats(0.0, 1.0))
def test_fractions_invert_each_other(name: str, fraction: float) -> None:
    mass = glycol_mass_fraction(name, np.array(fraction))
    assert float(glycol_volume_fraction(name, mass)) == pytest.approx(fraction, abs=1e-14)
    assert 0.0 <= float(water_mole_fraction(name, mass)) <= 1.0


# The property library -----------------------------------------------------------------------------------------------


def run_python(code: str) -> str:
    return subprocess.run([sys.executable, "-c", code], check=True, capture_output=True, text=True).stdout


def test_fluids_do_not_load_the_library_before_it_is_needed() -> None:
    code = """
import sys
from harvest.physics.fluids import FluidSpec, check_fluid
from harvest.physics.coolprop_source import library_version
check_fluid(FluidSpec("water")); library_version()
print([name for name in ("CoolProp", "scipy", "pint", "matplotlib") if name in sys.modules])
"""
    assert run_python(code).strip() == "[]"


def test_the_library_is_loaded_silently_and_leaves_the_environment() -> None:
    code = """
import os
before = dict(os.environ)
from harvest.physics.coolprop_source import water_boiling_temperature
water_boiling_temperature(1e5)
assert dict(os.environ) == before
print("only this")
"""
    assert run_python(code) == "only this\n"


def test_the_version_is_that_of_the_library() -> None:
    from importlib.metadata import version

    assert library.library_version() == version("CoolProp")


def test_a_refusal_of_the_library_is_one_line() -> None:
    with pytest.raises(RangeError, match=r"^the property library has no answer for the glycol solution \(") as caught:
        library.solution_samples("AEG", 0.5, 1e5, np.array([500.0]))
    assert "\n" not in str(caught.value)
