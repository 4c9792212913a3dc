"""Combustion: atom and mass balances, mixing rules, dew points. Published numbers stand in tests/published."""

from __future__ import annotations

import iapws
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.errors import RangeError
from harvest.physics.combustion import (
    AIR_PER_OXYGEN,
    FUELS,
    HYDROGEN,
    OXYGEN,
    SPECIES_MOLAR_MASS,
    excess_air_from_dry_oxygen,
    excess_air_from_flows,
    exhaust_composition,
    exhaust_flow_from_fuel,
    exhaust_moles,
    fuel_named,
    mixture_molar_mass,
    sulphuric_acid_dew_point,
    sulphuric_acid_fraction,
    wassiljewa_conductivity,
    water_dew_point,
    wilke_viscosity,
)

FUEL_NAMES = st.sampled_from([*FUELS, "C8H18", "C2H6O", "CH1.8", "H2", "CO", "CH4N0.1"])
EXCESS = st.floats(1.0, 100.0)
HUMIDITY = st.floats(0.0, 0.1)


@settings(max_examples=60, deadline=None)
@given(FUEL_NAMES, EXCESS, HUMIDITY)
def test_atoms_and_mass_are_kept(name: str, excess: float, humidity: float) -> None:
    fuel = fuel_named(name)
    carbon_dioxide, water, oxygen, nitrogen = exhaust_moles(name, np.array(excess), np.array(humidity))
    air = excess * fuel.stoichiometric_oxygen
    moisture = humidity * air * AIR_PER_OXYGEN / (2.0 * HYDROGEN + OXYGEN)
    assert carbon_dioxide == fuel.carbon
    assert 2.0 * water == pytest.approx(fuel.hydrogen + 2.0 * moisture, rel=1e-13)
    assert 2.0 * carbon_dioxide + water + 2.0 * oxygen == pytest.approx(fuel.oxygen + 2.0 * air + moisture, rel=1e-13)
    assert 2.0 * nitrogen == pytest.approx(fuel.nitrogen + 2.0 * 3.76 * air, rel=1e-13)
    mass = carbon_dioxide * SPECIES_MOLAR_MASS[0] + water * SPECIES_MOLAR_MASS[1]
    mass += oxygen * SPECIES_MOLAR_MASS[2] + nitrogen * SPECIES_MOLAR_MASS[3]
    assert mass == pytest.approx(fuel.molar_mass + air * AIR_PER_OXYGEN * (1.0 + humidity), rel=1e-13)
    flow = exhaust_flow_from_fuel(name, np.ones(1), np.array([excess]), np.array([np.nan]), np.array([humidity]))
    assert flow[0] == pytest.approx(mass / fuel.molar_mass, rel=1e-13)


@settings(max_examples=60, deadline=None)
@given(FUEL_NAMES, EXCESS, HUMIDITY)
def test_ways_to_say_the_excess_air_agree(name: str, excess: float, humidity: float) -> None:
    composition = exhaust_composition(name, np.array(excess), np.array(humidity))
    dry_oxygen = composition[2] / (1.0 - composition[1])
    assert float(excess_air_from_dry_oxygen(name, dry_oxygen)) == pytest.approx(excess, rel=1e-9)
    ones = np.ones(1)
    flow = exhaust_flow_from_fuel(name, 0.002 * ones, np.nan * ones, dry_oxygen * ones, humidity * ones)
    found = excess_air_from_flows(name, flow, 0.002 * ones, humidity * ones)
    assert found[0] == pytest.approx(excess, rel=1e-9)


def test_dry_oxygen_of_air_itself_has_no_answer() -> None:
    found = excess_air_from_dry_oxygen("diesel", np.array([0.0, 0.2, 0.2101, 0.5]))
    assert found[0] == 1.0
    assert found[1] > 10.0
    assert np.isnan(found[2:]).all()


def test_arrays_of_cases_are_one_call() -> None:
    excess, humidity = np.array([1.0, 1.5, 3.0]), np.array([0.0, 0.01, 0.02])
    together = exhaust_composition("diesel", excess, humidity)
    assert together.shape == (4, 3)
    np.testing.assert_allclose(together.sum(axis=0), 1.0, rtol=1e-14)
    for case in range(3):
        alone = exhaust_composition("diesel", excess[case], humidity[case])
        assert (alone == together[:, case]).all()


def test_a_formula_is_the_named_fuel() -> None:
    for name, formula in (("diesel", "C12H23"), ("methane", "CH4"), ("propane", "C3H8")):
        named, written = fuel_named(name), fuel_named(formula)
        assert (named.carbon, named.hydrogen, named.oxygen) == (written.carbon, written.hydrogen, written.oxygen)
    assert (fuel_named("C2H6O").oxygen, fuel_named("C2H6O").hydrogen) == (1.0, 6.0)


def test_natural_gas_is_the_composition_it_states() -> None:
    # 90 % CH4, 5 % C2H6, 1 % C3H8, 2 % N2, 2 % CO2.
    gas = FUELS["natural gas"]
    assert gas.carbon == pytest.approx(0.90 + 2 * 0.05 + 3 * 0.01 + 0.02)
    assert gas.hydrogen == pytest.approx(4 * 0.90 + 6 * 0.05 + 8 * 0.01)
    assert gas.oxygen == pytest.approx(2 * 0.02)
    assert gas.nitrogen == pytest.approx(2 * 0.02)
    parts = ((0.90, 0.016043), (0.05, 0.03007), (0.01, 0.044097), (0.02, 0.0280134), (0.02, 0.0440098))
    assert gas.molar_mass == pytest.approx(sum(share * mass for share, mass in parts), rel=1e-4)


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("coal", "is no known fuel"),
        ("", "is no known fuel"),
        ("c8h18", "is no known fuel"),
        ("C8H18" * 50, "is no known fuel"),
        ("C1.2.3H4", "is no known fuel"),
        ("CH3CH3", "names an element twice"),
        ("CO2", "is not a fuel that takes up oxygen"),
        ("N2", "is not a fuel that takes up oxygen"),
        ("C0H0", "is not a fuel that takes up oxygen"),
        ("C" + "9" * 50, "is not a fuel that takes up oxygen"),
    ],
)
def test_what_is_not_a_fuel_is_refused(name: str, message: str) -> None:
    with pytest.raises(RangeError, match=message):
        fuel_named(name)


@settings(max_examples=40, deadline=None)
@given(
    st.lists(st.floats(0.0, 1.0), min_size=3, max_size=3).filter(lambda parts: sum(parts) > 0.1),
    st.lists(st.floats(5e-6, 8e-5), min_size=3, max_size=3),
)
def test_a_mixture_of_one_gas_with_itself_is_that_gas(parts: list[float], viscosity: list[float]) -> None:
    share = np.array(parts) / sum(parts)
    same, mass = np.full(3, viscosity[0]), np.full(3, 0.028)
    assert float(wilke_viscosity(share, same, mass)) == pytest.approx(viscosity[0], rel=1e-12)
    assert float(wassiljewa_conductivity(share, np.full(3, 0.03), same, mass)) == pytest.approx(0.03, rel=1e-12)
    only = np.array([0.0, 1.0, 0.0])
    different = np.array([0.044, 0.018, 0.032])
    assert float(wilke_viscosity(only, np.array(viscosity), different)) == pytest.approx(viscosity[1], rel=1e-12)


def test_molar_mass_of_a_pure_species() -> None:
    np.testing.assert_allclose(mixture_molar_mass(np.eye(4)), SPECIES_MOLAR_MASS, rtol=0.0)


@settings(max_examples=20, deadline=None)
@given(st.floats(700.0, 2e6))
def test_dew_point_is_the_saturation_temperature_of_an_independent_library(pressure: float) -> None:
    saturated = iapws.IAPWS97(P=pressure / 1e6, x=0.0)
    assert float(water_dew_point(np.array(pressure))) == pytest.approx(saturated.T, rel=1e-9)


def test_dew_points_without_condensate_are_no_numbers() -> None:
    assert np.isnan(water_dew_point(np.array([0.0, 100.0, 3e7, np.nan]))).all()
    found = sulphuric_acid_dew_point(np.array([1e4, 0.0, 1e4]), np.array([0.0, 1.0, 1.0]))
    assert np.isnan(found[:2]).all()
    assert np.isfinite(found[2])


def test_sulphuric_dew_points_of_diesel_span_the_known_range() -> None:
    # At 2 % conversion, ratio 1.5: about 75 degC at 10 mg/kg sulphur and 134 degC at 1 %.
    sulphur, humidity = np.array([10e-6, 0.01]), np.zeros(2)
    excess = np.full(2, 1.5)
    water = exhaust_composition("diesel", excess, humidity)[1] * 101325.0
    acid = sulphuric_acid_fraction("diesel", excess, humidity, sulphur, np.full(2, 0.02)) * 101325.0
    np.testing.assert_allclose(sulphuric_acid_dew_point(water, acid), [348.15, 407.15], atol=5.0)
