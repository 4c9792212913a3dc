"""Ducts and their films: an independent library, areas worked by hand, and what must hold for any duct."""

from __future__ import annotations

import warnings
from dataclasses import fields, replace

import fluids.friction
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.physics import ducts, losses
from harvest.physics.arrays import FloatArray, IntArray
from harvest.physics.films import DUCT_KINDS, DuctMeasures, Film, OffsetStripFilm

WATER = (4180.0, 6.5e-4, 0.63)
HOT_GAS = (1100.0, 3.0e-5, 0.045)
FLUIDS = pytest.mark.parametrize("fluid", [WATER, HOT_GAS], ids=["water", "hot gas"])
KINDS = pytest.mark.parametrize("kind", DUCT_KINDS)
DEVELOPING = pytest.mark.parametrize("developing", [False, True], ids=["fully developed", "developing"])

# One duct, 200 mm wide and 480 mm long, over places of 40 by 40 mm.
GAP, PITCH, THICKNESS, STRIP = 6e-3, 2e-3, 0.2e-3, 4e-3
WIDTH, PLACE = 0.2, 0.04 * 0.04


def measures(cases: int = 1, **changed: FloatArray | float) -> DuctMeasures:
    values: dict[str, FloatArray | float] = {
        "mass_flow": 0.05, "gap": GAP, "faces": 2.0, "length": 0.48, "duct_width": WIDTH, "passages": 1.0,
        "passage_width": WIDTH, "area_ratio": 1.0, "place_area": PLACE, "fouling": 0.0, "roughness": 0.0,
        "film_factor": 1.0, "fin_pitch": PITCH, "fin_thickness": THICKNESS, "fin_conductivity": 200.0,
        "strip_length": STRIP,
    }  # fmt: skip
    values.update(changed)
    return DuctMeasures(**{name: np.broadcast_to(value, (cases,)).astype(float) for name, value in values.items()})


def part_of(given_measures: DuctMeasures, which: IntArray) -> DuctMeasures:
    return replace(
        given_measures, **{each.name: getattr(given_measures, each.name)[which] for each in fields(DuctMeasures)}
    )


def conductance(film: Film, fluid: tuple[float, float, float], rows: int = 1) -> FloatArray:
    heat_capacity, viscosity, conductivity = (np.full((rows, len(film.mass_flow)), value) for value in fluid)
    return film.conductance(heat_capacity, viscosity, conductivity)


def test_the_explicit_rough_friction_is_within_1_4_percent_of_colebrook() -> None:
    reynolds, roughness = np.meshgrid(np.logspace(np.log10(4e3), 8, 15), np.logspace(-6, np.log10(0.05), 12))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        implicit = np.vectorize(fluids.friction.Colebrook)(reynolds, roughness)
    explicit = ducts.friction_factor_rough(reynolds, roughness)
    np.testing.assert_allclose(explicit, implicit, rtol=0.0145)


@pytest.mark.parametrize("limit", [ducts.LAMINAR_LIMIT, ducts.TURBULENT_LIMIT])
@pytest.mark.parametrize("roughness", [0.0, 1e-3])
def test_friction_and_heat_transfer_join_at_the_regime_limits(limit: float, roughness: float) -> None:
    beside = limit * np.array([1.0 - 1e-9, 1.0 + 1e-9])
    friction = ducts.friction_factor(beside, np.full(2, 20.0), np.full(2, roughness))
    nusselt = ducts.nusselt(beside, np.full(2, 3.0), np.full(2, 5.0))
    gain = ducts.entrance_nusselt_gain(beside, np.full(2, 3.0), np.full(2, 0.05), np.full(2, 5.0))
    for value in (friction, nusselt, gain):
        assert abs(value[1] / value[0] - 1.0) < 1e-6


def test_half_way_through_transition_is_the_mean_of_both_ends() -> None:
    reynolds = np.array([2300.0, 3150.0, 4000.0])
    prandtl, laminar, ratio = np.full(3, 0.7), np.full(3, 8.235), np.full(3, 0.1)
    nusselt = ducts.nusselt(reynolds, prandtl, laminar)
    developing = nusselt * ducts.entrance_nusselt_gain(reynolds, prandtl, ratio, laminar)
    friction = ducts.friction_factor(reynolds, np.full(3, 24.0))
    for low, middle, high in (nusselt, developing, friction):
        assert middle == pytest.approx(0.5 * (low + high), rel=1e-14)


def test_the_ends_of_the_transition_are_laminar_and_turbulent_with_their_own_entrance() -> None:
    one, ratio = np.ones(1), np.array([0.1])
    low = ducts.entrance_nusselt_gain(2300.0 * one, 0.7 * one, ratio, 8.235 * one)
    graetz = 2300.0 * 0.7 * 0.1
    assert low[0] == pytest.approx(1.0 + 0.0668 * graetz / (1.0 + 0.04 * graetz ** (2 / 3)) / 8.235, rel=1e-14)
    high = ducts.entrance_nusselt_gain(np.array([4000.0, 9e4]), 0.7 * one, ratio, 8.235 * one)
    np.testing.assert_allclose(high, 1.0 + 0.1 ** (2 / 3), rtol=1e-14)


def test_a_smooth_wall_is_the_least_rough_one() -> None:
    reynolds = np.logspace(3.7, 7, 20)
    smooth = ducts.friction_factor(reynolds, np.full(20, 24.0))
    np.testing.assert_array_equal(ducts.friction_factor(reynolds, np.full(20, 24.0), np.zeros(20)), smooth)
    assert np.all(ducts.friction_factor(reynolds, np.full(20, 24.0), np.full(20, 1e-6)) >= smooth)


def test_roughness_leaves_laminar_flow_alone() -> None:
    reynolds = np.array([10.0, 500.0, 2300.0])
    np.testing.assert_allclose(
        ducts.friction_factor(reynolds, np.full(3, 16.0), np.full(3, 0.01)), 64.0 / reynolds, rtol=1e-15
    )


@settings(max_examples=50)
@given(
    film=st.floats(0.0, 1e5),
    conductivity=st.floats(1.0, 400.0),
    thickness=st.floats(1e-5, 5e-3),
    height=st.floats(1e-4, 0.1),
)
def test_fin_efficiency_is_a_fraction_that_falls_with_the_film(
    film: float, conductivity: float, thickness: float, height: float
) -> None:
    efficiency = ducts.fin_efficiency(
        np.array([film, 1.5 * film]), np.full(2, conductivity), np.full(2, thickness), np.full(2, height)
    )
    assert np.all((efficiency > 0.0) & (efficiency <= 1.0))
    assert efficiency[1] <= efficiency[0]


def test_fin_efficiency_has_no_step_where_its_series_takes_over() -> None:
    reach = 1e-4 * np.array([1.0 - 1e-9, 1.0 + 1e-9])
    efficiency = ducts.fin_efficiency(0.5 * reach**2, np.ones(2), np.ones(2), np.ones(2))
    assert abs(efficiency[1] - efficiency[0]) < 1e-15


# Finned areas by hand: clear spacing 1.8 mm in a pitch of 2 mm, gap 6 mm; a place of 1600 mm2 has 0.8 m of channel.
# Two heated plates: each has 0.8 m x 1.8 mm of prime area and half of both fin sides, 0.8 m x 2 x 3 mm, adiabatic at
# 3 mm. One heated plate: both fin sides and the far plate, 0.8 m x (2 x 6 + 1.8) mm, adiabatic at 6 mm + half a pitch.
@pytest.mark.parametrize(
    ("faces", "prime", "fin", "height"),
    [(2.0, 0.8 * 1.8e-3, 0.8 * 6e-3, 3e-3), (1.0, 0.8 * 1.8e-3, 0.8 * 13.8e-3, 7e-3)],
)
def test_finned_areas_by_hand(faces: float, prime: float, fin: float, height: float) -> None:
    film = DUCT_KINDS["plain fins"].build(measures(faces=faces), False)
    assert film.prime_area[0] == pytest.approx(prime, rel=1e-14)
    assert film.fin_area[0] == pytest.approx(fin, rel=1e-14)
    assert film.fin_height[0] == pytest.approx(height, rel=1e-14)
    assert film.fin_sheet[0] == pytest.approx(200.0 * 0.2e-3, rel=1e-14)
    assert film.flow_area[0] == pytest.approx(0.2 * 0.9 * 6e-3, rel=1e-14)
    assert film.hydraulic_diameter[0] == pytest.approx(4 * (1.8 * 6.0) / (2 * (1.8 + 6.0)) * 1e-3, rel=1e-14)


def test_offset_strips_add_their_leading_and_trailing_edges() -> None:
    film = DUCT_KINDS["offset strip fins"].build(measures(), False)
    assert isinstance(film, OffsetStripFilm)
    # Two sides of 6 x 4 mm and two edges of 6 x 0.2 mm a strip, half of it for each plate.
    assert film.fin_area[0] == pytest.approx(0.8 * 6e-3 * (1.0 + 0.2 / 4.0), rel=1e-14)
    assert film.thickness_over_length[0] == pytest.approx(0.2 / 4.0, rel=1e-14)
    assert film.thickness_over_spacing[0] == pytest.approx(0.2 / 1.8, rel=1e-14)
    assert film.spacing_over_height[0] == pytest.approx(1.8 / 6.0, rel=1e-14)
    # 4 x free volume over wetted area; the strips' top edges, 0.6 % of it, are in the correlation's diameter only.
    wetted = 2.0 * (film.prime_area[0] + film.fin_area[0])
    assert film.hydraulic_diameter[0] == pytest.approx(4.0 * PLACE * GAP * 0.9 / wetted, rel=0.007)


def test_a_laminar_smooth_duct_by_hand() -> None:
    # 1 g/s of gas in a slot 200 by 6 mm: hydraulic diameter 2400/206 mm, Re = m D / (A mu) = 324.
    film = DUCT_KINDS["smooth"].build(measures(mass_flow=1e-3), False)
    diameter = 2.0 * 0.2 * 6e-3 / 0.206
    reynolds = film.reynolds(np.array([[HOT_GAS[1]]]))
    assert reynolds[0, 0] == pytest.approx(1e-3 * diameter / (0.2 * 6e-3 * 3.0e-5), rel=1e-14)
    assert conductance(film, HOT_GAS)[0, 0] == pytest.approx(8.235 * 0.045 / diameter * PLACE, rel=1e-14)
    one_heated = DUCT_KINDS["smooth"].build(measures(mass_flow=1e-3, faces=1.0), False)
    assert conductance(one_heated, HOT_GAS)[0, 0] == pytest.approx(5.385 * 0.045 / diameter * PLACE, rel=1e-14)


def test_square_passages_have_all_walls_heated() -> None:
    film = DUCT_KINDS["smooth"].build(measures(passages=20.0, passage_width=6e-3, area_ratio=1.8), False)
    assert film.hydraulic_diameter[0] == pytest.approx(6e-3, rel=1e-14)
    assert film.flow_area[0] == pytest.approx(20 * 36e-6, rel=1e-14)
    assert film.laminar_nusselt[0] == pytest.approx(3.608, rel=1e-3)
    assert film.prime_area[0] == pytest.approx(1.8 * PLACE, rel=1e-14)
    assert film.friction_factor(np.array([[1000.0]]))[0, 0] == pytest.approx(4 * 14.227 / 1000.0, rel=1e-3)


@pytest.mark.parametrize("faces", [1.0, 2.0])
def test_a_narrow_plain_fin_passage_has_its_webs_heated(faces: float) -> None:
    film = DUCT_KINDS["plain fins"].build(measures(faces=faces, fin_pitch=6.2e-3), False)
    assert film.laminar_nusselt[0] == pytest.approx(3.608, rel=1e-3)


@KINDS
@DEVELOPING
@FLUIDS
@settings(max_examples=25, deadline=None)
@given(
    flow=st.floats(2e-3, 2.0),
    step=st.floats(1.001, 3.0),
    gap=st.floats(2e-3, 0.02),
    length=st.floats(0.04, 2.0),
    faces=st.sampled_from([1.0, 2.0]),
)
def test_conductance_never_falls_with_flow(
    kind: str,
    developing: bool,
    fluid: tuple[float, float, float],
    flow: float,
    step: float,
    gap: float,
    length: float,
    faces: float,
) -> None:
    made = measures(2, mass_flow=flow * np.array([1.0, step]), gap=gap, length=length, faces=faces)
    film = DUCT_KINDS[kind].build(made, developing)
    slow, fast = conductance(film, fluid)[0]
    assert 0.0 < slow <= fast * (1 + 1e-13)


@KINDS
@settings(max_examples=25, deadline=None)
@given(flow=st.floats(2e-3, 2.0), fouling=st.floats(1e-6, 5e-3), gap=st.floats(2e-3, 0.02))
def test_fouling_never_helps(kind: str, flow: float, fouling: float, gap: float) -> None:
    made = measures(3, mass_flow=flow, gap=gap, fouling=np.array([0.0, fouling, 2 * fouling]))
    clean, fouled, worse = conductance(DUCT_KINDS[kind].build(made, False), WATER)[0]
    assert clean > fouled > worse > 0.0


def test_fouling_of_a_smooth_duct_is_a_resistance_in_series() -> None:
    clean, fouled = conductance(DUCT_KINDS["smooth"].build(measures(2, fouling=np.array([0.0, 2e-4])), False), WATER)[0]
    assert 1.0 / fouled - 1.0 / clean == pytest.approx(2e-4 / PLACE, rel=1e-12)


def test_fouling_acts_inside_the_fin_efficiency() -> None:
    clean, fouled = (DUCT_KINDS["plain fins"].build(measures(fouling=value), False) for value in (0.0, 2e-3))
    film = (
        clean.nusselt(clean.reynolds(np.array([[WATER[1]]])), np.array([[WATER[0] * WATER[1] / WATER[2]]]))[0, 0]
        * WATER[2]
        / clean.hydraulic_diameter[0]
    )
    dirty = 1.0 / (1.0 / film + 2e-3)
    reach = np.sqrt(2.0 * dirty / (200.0 * 0.2e-3)) * 3e-3
    by_hand = dirty * (0.8 * 1.8e-3 + np.tanh(reach) / reach * 0.8 * 6e-3)
    assert conductance(fouled, WATER)[0, 0] == pytest.approx(by_hand, rel=1e-13)


def test_highly_conducting_fins_work_over_their_whole_area() -> None:
    film = DUCT_KINDS["plain fins"].build(measures(fin_conductivity=1e9, mass_flow=1e-3), False)
    coefficient = film.laminar_nusselt[0] * HOT_GAS[2] / film.hydraulic_diameter[0]
    assert conductance(film, HOT_GAS)[0, 0] == pytest.approx(coefficient * 0.8 * 7.8e-3, rel=1e-6)


@KINDS
def test_the_entrance_never_hurts_and_long_ducts_forget_it(kind: str) -> None:
    made = measures(2, length=np.array([0.1, 1e9]), mass_flow=0.004)
    plain, developing = (conductance(DUCT_KINDS[kind].build(made, choice), HOT_GAS)[0] for choice in (False, True))
    assert np.all(developing >= plain)
    assert developing[1] == pytest.approx(plain[1], rel=1e-6)


MIXED = measures(
    5,
    mass_flow=np.array([0.002, 0.03, 0.05, 0.4, 1.7]),
    gap=np.array([4e-3, 6e-3, 3e-3, 12e-3, 6e-3]),
    faces=np.array([1.0, 2.0, 2.0, 1.0, 2.0]),
    passages=np.array([1.0, 20.0, 1.0, 10.0, 1.0]),
    passage_width=np.array([0.2, 8e-3, 0.2, 18e-3, 0.2]),
    fouling=np.array([0.0, 2e-4, 0.0, 1e-3, 0.0]),
    roughness=np.array([0.0, 0.0, 5e-5, 1e-4, 0.0]),
)


@KINDS
@DEVELOPING
def test_a_batch_equals_its_cases_one_by_one_to_the_last_bit(kind: str, developing: bool) -> None:
    film = DUCT_KINDS[kind].build(MIXED, developing)
    together = conductance(film, WATER, rows=3)
    reynolds = film.reynolds(np.full((3, 5), WATER[1]))
    friction = film.friction_factor(reynolds)
    for case in range(5):
        which = np.array([case])
        alone = DUCT_KINDS[kind].build(part_of(MIXED, which), developing)
        np.testing.assert_array_equal(conductance(alone, WATER, rows=3), together[:, which])
        np.testing.assert_array_equal(alone.friction_factor(reynolds[:, which]), friction[:, which])


@KINDS
def test_a_subset_of_a_film_is_the_film_of_the_subset(kind: str) -> None:
    which = np.array([3, 0, 3])
    taken = DUCT_KINDS[kind].build(MIXED, True).take(which)
    made = DUCT_KINDS[kind].build(part_of(MIXED, which), True)
    assert type(taken) is type(made)
    for each in fields(taken):
        np.testing.assert_array_equal(getattr(taken, each.name), getattr(made, each.name), err_msg=each.name)


def test_an_offset_strip_film_is_its_colburn_and_friction_factor() -> None:
    film = DUCT_KINDS["offset strip fins"].build(measures(), False)
    shape = (np.array([0.3]), np.array([0.05]), np.array([0.2 / 1.8]))
    reynolds = np.array([[800.0]])
    colburn = ducts.offset_strip_colburn_factor(reynolds, *shape)
    np.testing.assert_allclose(film.nusselt(reynolds, np.array([[8.0]])), colburn * 800.0 * 2.0, rtol=1e-13)
    fanning = ducts.offset_strip_friction_factor(reynolds, *shape)
    np.testing.assert_allclose(film.friction_factor(reynolds), 4.0 * fanning, rtol=1e-13)


@settings(max_examples=30)
@given(ratio=st.floats(0.0, 1.0))
def test_sharp_ends_cost_least_where_nothing_changes(ratio: float) -> None:
    at, flat = np.array(ratio), np.array(losses.TURBULENT_MOMENTUM_FACTOR)
    assert 0.6 < losses.contraction_coefficient(at) < 1.0
    assert losses.entrance_loss_coefficient(at, flat) >= 0.0
    assert losses.exit_loss_coefficient(at, flat) == pytest.approx((1.0 - ratio) ** 2, abs=1e-15)
    # The sharp entrance of a flat profile is the loss of its jet's enlargement.
    jet = float(losses.contraction_coefficient(at))
    assert losses.entrance_loss_coefficient(at, flat) == pytest.approx((1.0 / jet - 1.0) ** 2, abs=1e-12)
