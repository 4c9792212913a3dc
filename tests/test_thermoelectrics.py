"""The module: identities, published material values, and a leg-resolved solution as the independent check of legs."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_bvp
from scipy.optimize import minimize_scalar

from harvest.errors import CaseError, InputError
from harvest.model.materials import load_material
from harvest.physics.arrays import FloatArray
from harvest.physics.curves import Curve, PolynomialCurve, TableCurve
from harvest.physics.thermoelectrics import (
    LegModule,
    Material,
    MeanTemperatureModule,
    ModuleModel,
    carnot_efficiency,
    cold_junction_heat,
    efficiency_at_load_ratio,
    figure_of_merit,
    hot_junction_heat,
    maximum_efficiency,
)

LENGTH, AREA = 1.5e-3, 1e-6
P_TYPE, N_TYPE = (load_material(f"bismuth telluride {kind}").material for kind in "pn")


def one(value: float) -> FloatArray:
    return np.array([value])


# ---- The leg-resolved solution: one p leg, properties after the published polynomials, written anew.


def seebeck(temperature: FloatArray) -> FloatArray:
    return (22224.0 + 930.6 * temperature - 0.9905 * temperature**2) * 1e-9


def seebeck_slope(temperature: FloatArray) -> FloatArray:
    return (930.6 - 2.0 * 0.9905 * temperature) * 1e-9


def resistivity(temperature: FloatArray) -> FloatArray:
    return (5112.0 + 163.4 * temperature + 0.6279 * temperature**2) * 1e-10


def conductivity(temperature: FloatArray) -> FloatArray:
    return (62605.0 - 277.7 * temperature + 0.4131 * temperature**2) * 1e-4


@dataclass(frozen=True)
class Leg:
    """Heat into the hot and out of the cold end of one leg [W] at a current [A]."""

    hot: float
    cold: float

    @property
    def power(self) -> float:
        return self.hot - self.cold

    @property
    def efficiency(self) -> float:
        return self.power / self.hot


def leg_resolved(hot: float, cold: float, current: float) -> Leg:
    """Solve (k T')' = J T alpha' T' - rho J^2 along the leg, between fixed ends [K].

    Current runs from the hot to the cold end; T and the conducted flux are the unknowns.
    """
    density = current / AREA

    def equations(_: FloatArray, state: FloatArray) -> FloatArray:
        temperature, flux = state
        gradient = -flux / conductivity(temperature)
        thomson = density * temperature * seebeck_slope(temperature) * gradient
        return LENGTH * np.vstack((gradient, resistivity(temperature) * density**2 - thomson))

    def ends(at_hot: FloatArray, at_cold: FloatArray) -> FloatArray:
        return np.array([at_hot[0] - hot, at_cold[0] - cold])

    along = np.linspace(0.0, 1.0, 41)
    straight = np.vstack((hot + (cold - hot) * along, np.full_like(along, 1.5 * (hot - cold) / LENGTH)))
    solution = solve_bvp(equations, ends, along, straight, tol=1e-8)
    assert solution.success, solution.message
    conducted = solution.y[1]
    return Leg(
        float(AREA * (seebeck(np.array(hot)) * hot * density + conducted[0])),
        float(AREA * (seebeck(np.array(cold)) * cold * density + conducted[-1])),
    )


def best_current(hot: float, cold: float, worth: Callable[[Leg], float]) -> float:
    found = minimize_scalar(
        lambda current: -1e3 * worth(leg_resolved(hot, cold, current)),
        bounds=(0.2, 1.5),
        method="bounded",
        options={"xatol": 1e-6},
    )
    return float(found.x)


@cache
def leg_maximum_power(hot: float, cold: float) -> tuple[float, Leg]:
    current = best_current(hot, cold, lambda leg: leg.power)
    return current, leg_resolved(hot, cold, current)


@cache
def leg_maximum_efficiency(hot: float, cold: float) -> float:
    return leg_resolved(hot, cold, best_current(hot, cold, lambda leg: leg.efficiency)).efficiency


def test_the_leg_resolved_solution_has_the_known_digits() -> None:
    hot, cold = 473.15, 323.15
    temperature = np.linspace(hot, cold, 20001)
    open_circuit_voltage = -np.trapezoid(seebeck(temperature), temperature)
    assert open_circuit_voltage == pytest.approx(35.080e-3, abs=0.5e-6)
    assert leg_resolved(hot, cold, 0.0).hot == pytest.approx(0.18299, abs=0.5e-5)
    current, leg = leg_maximum_power(hot, cold)
    assert current == pytest.approx(0.6650, abs=2e-4)
    assert leg.power == pytest.approx(11.708e-3, abs=0.5e-6)
    assert leg.hot == pytest.approx(0.25078, abs=1e-5)
    assert leg_maximum_efficiency(hot, cold) == pytest.approx(0.04742, abs=0.5e-5)


def test_the_leg_resolved_power_is_voltage_times_current() -> None:
    # A small current I yields I (V - I R), R = V / (2 I) at maximum power = 35.08 mV / 1.33 A.
    leg = leg_resolved(473.15, 323.15, 1e-2)
    assert leg.power / 1e-2 == pytest.approx(35.080e-3 - 1e-2 * 35.080e-3 / 1.33, rel=1e-4)


# ---- Modules of legs


def leg_module(
    material: Material = P_TYPE,
    n_material: Material = N_TYPE,
    couples: float = 1.0,
    contact: float = 0.0,
    filler: float = 0.0,
) -> LegModule:
    return LegModule(n_material, material, one(couples), one(LENGTH), one(AREA), one(contact), one(filler))


def constant_material(seebeck_coefficient: float, rho: float, k: float) -> Material:
    return Material(*(PolynomialCurve.constant(one(value)) for value in (seebeck_coefficient, rho, k)))


@pytest.mark.parametrize(("hot", "cold", "tolerance"), [(503.15, 323.15, 6e-3), (423.15, 313.15, 4e-3)])
def test_legs_lumped_agree_with_legs_resolved(hot: float, cold: float, tolerance: float) -> None:
    a, resistance, k, *_ = (float(value[0]) for value in leg_module().parameters(one(hot), one(cold)))
    power = (a * (hot - cold)) ** 2 / (4.0 * resistance)
    merit = a**2 / (resistance * k) * 0.5 * (hot + cold)
    efficiency = maximum_efficiency(one(merit), one(hot), one(cold))[0]
    # A couple is two legs of the same size: half of it is one leg.
    _, leg = leg_maximum_power(hot, cold)
    assert 0.5 * power == pytest.approx(leg.power, rel=tolerance)
    assert efficiency == pytest.approx(leg_maximum_efficiency(hot, cold), rel=tolerance)


def test_legs_without_current_are_exact() -> None:
    a, _, k, *_ = leg_module().parameters(one(473.15), one(323.15))
    assert 0.5 * a[0] * 150.0 == pytest.approx(35.080e-3, abs=0.5e-6)
    assert 0.5 * k[0] * 150.0 == pytest.approx(leg_resolved(473.15, 323.15, 0.0).hot, rel=1e-6)


def test_constant_materials_give_the_textbook_module() -> None:
    module = leg_module(
        constant_material(210e-6, 1.0e-5, 1.5),
        constant_material(-190e-6, 1.2e-5, 1.3),
        couples=127.0,
        contact=2e-10,
        filler=0.05,
    )
    a, resistance, k, *slopes = (value[0] for value in module.parameters(one(500.0), one(320.0)))
    assert a == pytest.approx(127 * 400e-6, rel=1e-14)
    assert resistance == pytest.approx(127 * (2.2e-5 * LENGTH / AREA + 4 * 2e-10 / AREA), rel=1e-14)
    assert k == pytest.approx(127 * 2.8 * AREA / LENGTH + 0.05, rel=1e-14)
    assert slopes == [0.0] * 6


def test_contacts_and_filler_are_added_and_no_more() -> None:
    bare = leg_module(couples=50.0).parameters(one(470.0), one(330.0))
    real = leg_module(couples=50.0, contact=1e-9, filler=0.02).parameters(one(470.0), one(330.0))
    np.testing.assert_allclose(real[1] - bare[1], 50 * 4 * 1e-9 / AREA, rtol=1e-12)
    np.testing.assert_allclose(real[2] - bare[2], 0.02, rtol=1e-12)
    for index in (0, 3, 4, 5):
        np.testing.assert_array_equal(real[index], bare[index])


def test_a_poor_contact_halves_the_figure_of_merit_of_a_thin_leg() -> None:
    # 100 um, 5e-6 ohm cm2, 1e-3 ohm cm: L / (L + 2 rho_c / rho) = 0.50.
    n_material, p_material = constant_material(-2e-4, 1e-5, 1.5), constant_material(2e-4, 1e-5, 1.5)
    module = LegModule(n_material, p_material, one(1.0), one(100e-6), one(AREA), one(5e-10), one(0.0))
    a, resistance, k, *_ = module.parameters(one(320.0), one(300.0))
    material = 4e-8 / (1e-5 * 1.5)
    assert figure_of_merit(a, resistance, k)[0] / material == pytest.approx(0.50, rel=1e-12)


def test_reversed_temperatures_give_the_same_module() -> None:
    module = leg_module(couples=3.0, contact=1e-10)
    forward, backward = module.parameters(one(480.0), one(310.0)), module.parameters(one(310.0), one(480.0))
    for one_way, other_way in zip(forward[:6], backward[:6], strict=True):
        np.testing.assert_allclose(one_way, other_way, rtol=1e-14)
    for one_way, other_way in zip(forward[6:], backward[6:], strict=True):
        np.testing.assert_allclose(one_way, -other_way, rtol=1e-12)


def test_a_vanishing_temperature_difference_loses_no_digits() -> None:
    module = leg_module(couples=127.0)
    equal = module.parameters(one(400.0), one(400.0))
    assert equal[0][0] == pytest.approx(127 * 2 * float(seebeck(np.array(400.0))), rel=1e-12)
    for difference in (1e-12, 1e-9, 1e-6):
        near = module.parameters(one(400.0 + 0.5 * difference), one(400.0 - 0.5 * difference))
        for got, expected in zip(near[:6], equal[:6], strict=True):
            np.testing.assert_allclose(got, expected, rtol=1e-12)
        for got, value in zip(near[6:], equal[:3], strict=True):
            assert abs(got[0]) <= 1e-3 * difference * abs(value[0]), "even in the difference, so flat at none"


QUADRATIC = PolynomialCurve(np.array([[0.05], [1e-4], [-2e-7]]))
MODELS: dict[str, ModuleModel] = {
    "legs": leg_module(couples=127.0, contact=1e-10, filler=0.03),
    "curves": MeanTemperatureModule(
        QUADRATIC, PolynomialCurve(np.array([[1.6], [5e-3]])), PolynomialCurve(np.array([[0.7], [-1e-3], [3e-6]]))
    ),
}


@pytest.mark.parametrize("name", MODELS)
@settings(max_examples=25)
@given(hot=st.floats(330.0, 520.0), cold=st.floats(260.0, 420.0))
def test_slopes_are_those_of_the_parameters(name: str, hot: float, cold: float) -> None:
    model, step = MODELS[name], 0.05
    here = model.parameters(one(hot), one(cold))
    warmer = model.parameters(one(hot + step), one(cold + step))
    colder = model.parameters(one(hot - step), one(cold - step))
    wider = model.parameters(one(hot + step), one(cold - step))
    closer = model.parameters(one(hot - step), one(cold + step))
    by_mean = zip(here[:3], here[3:6], warmer[:3], colder[:3], strict=True)
    by_spread = zip(here[:3], here[6:], wider[:3], closer[:3], strict=True)
    for value, slope, above, below in (*by_mean, *by_spread):
        difference = (above - below) / (2.0 * step)
        # Judged against the change over 100 K, since a slope may pass through zero.
        np.testing.assert_allclose(slope, difference, rtol=1e-6, atol=1e-6 * abs(value[0]) / 100.0)


def test_curves_are_read_at_the_mean_junction_temperature() -> None:
    a, *_ = MODELS["curves"].parameters(one(420.0), one(320.0))
    assert a[0] == pytest.approx(0.05 + 1e-4 * 70.0 - 2e-7 * 70.0**2, rel=1e-14)


def test_a_subset_of_cases_is_the_same_module() -> None:
    spread = np.array([1.0, 2.0, 3.0])
    material = Material(*(PolynomialCurve.constant(value * spread) for value in (2e-4, 1e-5, 1.5)))
    n_material = Material(*(PolynomialCurve.constant(value * spread) for value in (-2e-4, 1.1e-5, 1.4)))
    module = LegModule(n_material, material, 100 * spread, 1e-3 * spread, AREA * spread, 1e-10 * spread, 0.01 * spread)
    mean = MeanTemperatureModule(*(PolynomialCurve(np.vstack((spread, 0.01 * spread))) for _ in range(3)))
    which, hot, cold = np.array([2, 0]), np.array([500.0, 490.0, 480.0]), np.array([320.0, 310.0, 300.0])
    for model in (module, mean):
        whole, part = model.parameters(hot, cold), model.take(which).parameters(hot[which], cold[which])
        for all_cases, some in zip(whole, part, strict=True):
            np.testing.assert_array_equal(all_cases[which], some)


# ---- Heat balance and ceilings


@settings(max_examples=60)
@given(
    a=st.floats(-0.1, 0.1),
    resistance=st.floats(0.1, 10.0),
    k=st.floats(0.0, 5.0),
    hot=st.floats(250.0, 900.0),
    cold=st.floats(250.0, 900.0),
    current=st.floats(-10.0, 10.0),
)
def test_heat_in_less_heat_out_is_the_electrical_power(
    a: float, resistance: float, k: float, hot: float, cold: float, current: float
) -> None:
    arguments = [one(value) for value in (a, resistance, k, hot, cold, current)]
    heat_in, heat_out = hot_junction_heat(*arguments)[0], cold_junction_heat(*arguments)[0]
    power = (a * (hot - cold) - current * resistance) * current
    size = abs(a * current) * (hot + cold) + 2.0 * k * abs(hot - cold) + current**2 * resistance
    assert abs(heat_in - heat_out - power) <= 1e-14 * size + 1e-300


def test_fixed_junctions_give_most_at_a_load_equal_to_the_resistance() -> None:
    a, resistance, k, hot, cold = 0.05, 2.0, 0.5, 500.0, 300.0
    current = np.linspace(0.0, 5.0, 2001)
    module = [np.array(value) for value in (a, resistance, k, hot, cold)] + [current]
    power = hot_junction_heat(*module) - cold_junction_heat(*module)
    assert current[np.argmax(power)] == pytest.approx(a * (hot - cold) / (2.0 * resistance), abs=1e-9)
    assert power.max() == pytest.approx((a * (hot - cold)) ** 2 / (4.0 * resistance), rel=1e-12)


@settings(max_examples=40)
@given(
    merit=st.floats(0.01, 5.0),
    cold=st.floats(250.0, 400.0),
    difference=st.floats(1.0, 600.0),
    ratio=st.floats(0.05, 8.0),
)
def test_the_best_load_ratio_gives_the_maximum_efficiency(
    merit: float, cold: float, difference: float, ratio: float
) -> None:
    hot = cold + difference
    most = maximum_efficiency(one(merit), one(hot), one(cold))[0]
    best = efficiency_at_load_ratio(one(merit), one(hot), one(cold), one(np.sqrt(1.0 + merit)))[0]
    assert best == pytest.approx(most, rel=1e-12)
    assert efficiency_at_load_ratio(one(merit), one(hot), one(cold), one(ratio))[0] <= most * (1 + 1e-12)
    assert most < carnot_efficiency(one(hot), one(cold))[0]


def test_efficiency_at_a_load_ratio_is_power_over_hot_junction_heat() -> None:
    a, resistance, k, hot, cold, ratio = 0.05, 2.0, 0.5, 500.0, 300.0, 1.4
    current = a * (hot - cold) / (resistance * (1.0 + ratio))
    heat = hot_junction_heat(*(one(value) for value in (a, resistance, k, hot, cold, current)))
    merit = figure_of_merit(one(a), one(resistance), one(k)) * 0.5 * (hot + cold)
    found = efficiency_at_load_ratio(merit, one(hot), one(cold), one(ratio))
    np.testing.assert_allclose(found, current**2 * resistance * ratio / heat, rtol=1e-13)


@dataclass(frozen=True)
class Contacted:
    """A constant module between two reservoirs behind equal contacts, each of `contact` [W/K]."""

    seebeck: float
    resistance: float
    conductance: float
    contact: float
    hot: float
    cold: float

    def junctions(self, current: float) -> tuple[float, float]:
        """Linear balance of both junctions, with the heat functions asked for their own coefficients."""

        def excess(junctions: FloatArray) -> FloatArray:
            arguments = [one(value) for value in (self.seebeck, self.resistance, self.conductance, *junctions, current)]
            return np.array(
                [
                    self.contact * (self.hot - junctions[0]) - hot_junction_heat(*arguments)[0],
                    self.contact * (junctions[1] - self.cold) - cold_junction_heat(*arguments)[0],
                ]
            )

        base = excess(np.zeros(2))
        matrix = np.column_stack([excess(unit) - base for unit in np.eye(2)])
        hot, cold = np.linalg.solve(matrix, -base)
        return float(hot), float(cold)

    def power(self, current: float) -> float:
        hot, cold = self.junctions(current)
        return current * (self.seebeck * (hot - cold) - current * self.resistance)


@pytest.mark.parametrize(
    ("ratio", "load_ratio", "power"),
    [(1e9, 1.0, 12.500), (10.0, 1.0908, 9.4706), (2.0, 1.3325, 4.1694), (1.0, 1.4987, 2.0851), (0.1, 1.9085, 0.0541)],
)
def test_load_ratio_at_maximum_power_behind_contacts(ratio: float, load_ratio: float, power: float) -> None:
    """Apertet et al., EPL 97 (2012) 28001: m = 1 + Z Tmean / (1 + Kc/K), Kc of both contacts in series."""
    module = Contacted(0.05, 2.0, 0.5, 2.0 * ratio * 0.5, 500.0, 300.0)
    found = minimize_scalar(
        lambda current: -module.power(current), bounds=(0.0, 4.0), method="bounded", options={"xatol": 1e-9}
    )
    hot, cold = module.junctions(float(found.x))
    best_ratio = 0.05 * (hot - cold) / (float(found.x) * 2.0) - 1.0
    assert -float(found.fun) == pytest.approx(power, abs=1e-4)
    assert best_ratio == pytest.approx(load_ratio, abs=2e-4)
    assert best_ratio == pytest.approx(1.0 + 0.00125 * 2 * 0.5 * (hot + cold) / (1.0 + ratio), abs=2e-4)


def test_the_textbook_array_of_modules() -> None:
    """Incropera et al., 7th ed., Example 3.13: 48 modules in series on 400 ohm; answers from memory.

    The book's effective resistance of 4 ohm is that of its formula, where it counts twice: 8 ohm in the usual notation.
    """
    side = 0.054
    gas, water = 40.0 * side**2, 500.0 * side**2
    conductance = 2 * 100 * 1.2 * 1.2e-5 / 5e-3
    current = 0.3
    for _ in range(60):
        module = [one(value) for value in (0.1435, 8.0, conductance)]

        def excess(junctions: FloatArray, module: list[FloatArray] = module, current: float = current) -> FloatArray:
            state = [*module, one(junctions[0]), one(junctions[1]), one(current)]
            hot_side = gas * (823.15 - junctions[0]) - hot_junction_heat(*state)[0]
            return np.array([hot_side, water * (junctions[1] - 378.15) - cold_junction_heat(*state)[0]])

        base = excess(np.zeros(2))
        hot, cold = np.linalg.solve(np.column_stack([excess(unit) - base for unit in np.eye(2)]), -base)
        current = 48 * 0.1435 * (hot - cold) / (400.0 + 48 * 8.0)
    assert hot - 273.15 == pytest.approx(173.0, abs=0.5)
    assert cold - 273.15 == pytest.approx(134.0, abs=0.5)
    assert current == pytest.approx(0.342, abs=5e-4)
    assert current**2 * 400.0 == pytest.approx(46.9, abs=0.05)


# ---- Materials


@pytest.mark.parametrize(("kind", "sign"), [("n", -1.0), ("p", 1.0)])
def test_bismuth_telluride_at_300_kelvin(kind: str, sign: float) -> None:
    """Polynomials printed by Xuan et al., Cryogenics 42 (2002) 273 (from memory)."""
    record = load_material(f"bismuth telluride {kind}")
    at = np.array([[300.0]])

    def value(curve: Curve) -> float:
        return float(curve.value_and_slope(at)[0][0, 0])

    assert value(record.material.seebeck) == pytest.approx(sign * 212.26e-6, abs=0.5e-8)
    assert value(record.material.resistivity) == pytest.approx(1.1064e-5, abs=0.5e-9)
    assert value(record.material.conductivity) == pytest.approx(1.6474, abs=0.5e-4)
    assert (record.lower, record.upper) == (200.0, 450.0)
    assert "Xuan" in record.source


@pytest.mark.parametrize("material", [N_TYPE, P_TYPE], ids=["n", "p"])
def test_bundled_curves_are_the_published_polynomials(material: Material) -> None:
    at = np.linspace(200.0, 450.0, 26)
    np.testing.assert_allclose(np.abs(material.seebeck.value_and_slope(at)[0]), seebeck(at), rtol=1e-12)
    np.testing.assert_allclose(material.resistivity.value_and_slope(at)[0], resistivity(at), rtol=1e-12)
    np.testing.assert_allclose(material.conductivity.value_and_slope(at)[0], conductivity(at), rtol=1e-12)


def write_record(folder: Path, seebeck_line: str) -> str:
    path = folder / "own.toml"
    path.write_text(
        f'source = "invented"\nlower = "20 degC"\nupper = "600 K"\n{seebeck_line}\n'
        "resistivity = [1e-5]\nconductivity = [1.5]\n",
        encoding="utf-8",
    )
    return str(path)


def test_a_users_record_may_be_a_table(tmp_path: Path) -> None:
    loaded = load_material(write_record(tmp_path, "seebeck = [[300, 1e-4], [500, 2e-4]]"))
    assert isinstance(loaded.material.seebeck, TableCurve)
    assert loaded.lower == pytest.approx(293.15)
    assert loaded.material.seebeck.value_and_slope(one(400.0))[0][0] == pytest.approx(1.5e-4, rel=1e-14)


@pytest.mark.parametrize(
    ("line", "message"),
    [
        ("seebeck = [[500, 1e-4], [300, 2e-4]]", "temperatures must rise"),
        ("seebeck = [[300, 1e-4]]", "two or more pairs"),
        ("seebeck = [nan]", "write polynomial coefficients"),
        ('seebeck = "high"', "write polynomial coefficients"),
        ("seebeck = []", "write polynomial coefficients"),
        ("seebeck = [[300, 1e-4], [400]]", "write polynomial coefficients"),
        ("seebeck = ", "Invalid value"),
    ],
)
def test_a_faulty_record_is_refused(tmp_path: Path, line: str, message: str) -> None:
    with pytest.raises(InputError, match=message):
        load_material(write_record(tmp_path, line))


def test_an_incomplete_record_names_all_that_is_missing(tmp_path: Path) -> None:
    with pytest.raises(CaseError, match=r"own\.toml: seebeck: missing"):
        load_material(write_record(tmp_path, ""))


def test_an_unknown_material_is_told_the_bundled_ones() -> None:
    with pytest.raises(InputError, match="bundled are bismuth telluride n, bismuth telluride p"):
        load_material("unobtainium")
