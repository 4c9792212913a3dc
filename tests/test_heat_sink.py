"""Heat sinks in still room air: limits of the laws, the balance at the solution, and what is refused."""

from __future__ import annotations

import dataclasses
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.errors import CaseError
from harvest.model.batch import Batch
from harvest.model.case import Case
from harvest.model.design import design
from harvest.model.estimate import estimate, estimate_batch
from harvest.model.reading import load_case, read_case, replace
from harvest.physics.natural_convection import (
    FinnedSink,
    channel_radiation_area,
    channel_rayleigh_number,
    isothermal_channel_nusselt,
    optimum_plate_spacing,
    parallel_rectangle_view_factor,
    radiation_coefficient,
)

EXAMPLE = Path(__file__).parents[1] / "examples" / "stove-wall-sensor.toml"

RATED = """
[hot]
fluid = "reservoir"
inlet_temperature = "420 K"
film_coefficient = "500 W/(m^2 K)"
[cold]
fluid = "air"
inlet_temperature = "295 K"
[cold.duct]
kind = "heat sink"
sink_resistance = "1.2 K/W"
sink_temperature_rise = "50 K"
wall_thickness = "4 mm"
wall_conductivity = "180 W/(m K)"
[stack]
layers = 1
rows = 1
columns = 1
row_pitch = "60 mm"
column_pitch = "60 mm"
[module]
footprint = ["40 mm", "40 mm"]
seebeck = "0.05 V/K"
resistance = "2 ohm"
conductance = "0.6 W/K"
[electrical]
load = "maximum power"
"""


def rated() -> Case:
    return read_case(RATED)


def finned() -> Case:
    return load_case(EXAMPLE)


def finned_sink(case: Case) -> FinnedSink:
    sink = design(Batch(case)).cold.sink
    assert isinstance(sink, FinnedSink)
    return sink


# ---------------------------------------------------------------- laws


def test_the_channel_meets_both_its_limits_and_is_below_them() -> None:
    rayleigh = np.geomspace(1e-3, 1e7, 200)
    nusselt = isothermal_channel_nusselt(rayleigh)
    assert np.all(nusselt < np.minimum(rayleigh / 24.0, 0.59 * rayleigh**0.25 * 1.001))
    assert np.all(np.diff(nusselt) > 0)


def test_the_optimum_spacing_is_where_the_heat_of_a_base_is_largest() -> None:
    """Heat of thin fins on a base is in proportion to Nu/s^2; its largest value by search, the published 2.714."""
    spacing = np.geomspace(0.2, 5.0, 200_001)
    heat = isothermal_channel_nusselt(54.0 * spacing**4) / spacing**2
    best = spacing[np.argmax(heat)]
    assert best == pytest.approx(float(optimum_plate_spacing(np.array(54.0), np.array(1.0))), rel=1e-3)


def test_view_factor_against_the_double_area_integral() -> None:
    """Two 2 x 1 rectangles 0.7 apart, by midpoints of 40 x 40 cells each."""
    n, width, length, distance = 40, 2.0, 1.0, 0.7
    x, y = ((np.arange(n) + 0.5) / n * side for side in (width, length))
    dx, dy = x[:, None] - x[None, :], y[:, None] - y[None, :]
    square = dx[:, None, :, None] ** 2 + dy[None, :, None, :] ** 2 + distance**2
    exchange = (distance**2 / (np.pi * square**2)).sum() * (width * length / n**2) ** 2
    factor = parallel_rectangle_view_factor(np.array(width), np.array(length), np.array(distance))
    assert float(factor) == pytest.approx(exchange / (width * length), rel=1e-3)


def test_a_flat_channel_radiates_as_its_base_and_a_deep_black_one_as_its_openings() -> None:
    one = np.array(1.0)
    flat = channel_radiation_area(np.array(0.05), np.array(1e-7), np.array(0.1), np.array(0.7))
    assert float(flat) == pytest.approx(0.7 * 0.05 * 0.1, rel=1e-4)
    spacing, depth, height = np.array(0.001), np.array(0.5), np.array(1000.0)
    # a slot of endless height is black to its front opening
    assert float(channel_radiation_area(spacing, depth, height, one)) == pytest.approx(0.001 * 1000.0, rel=3e-3)


def test_the_plate_alone_is_near_a_library_of_its_own() -> None:
    """Churchill's correlation in another library, 15 % apart at most between Ra 1e5 and 1e8."""
    from ht import Nu_vertical_plate_Churchill

    for rayleigh in (1e5, 1e6, 1e7, 1e8):
        other = Nu_vertical_plate_Churchill(0.7, rayleigh / 0.7)
        assert 0.59 * rayleigh**0.25 == pytest.approx(other, rel=0.15)


def test_the_rayleigh_number_of_air_at_a_plate() -> None:
    """Air at 300 K from Incropera Table A.4 (memory): rho 1.1614, cp 1007, mu 184.6e-7, k 0.0263; nu, alpha to 1 %."""
    got = channel_rayleigh_number(
        *(np.array(each) for each in (50.0, 0.1, 0.1, 300.0, 1.1614, 1007.0, 184.6e-7, 26.3e-3))
    )
    assert float(got) == pytest.approx(9.81 / 300.0 * 50.0 * 0.1**3 / (15.89e-6 * 22.5e-6), rel=0.01)


# ---------------------------------------------------------------- at the solution


@pytest.mark.parametrize("case", [rated(), finned()], ids=["rated", "finned"])
def test_the_sink_is_the_reservoir_of_its_own_conductance(case: Case) -> None:
    """The film found at the solution, put in as the constant film of a reservoir, gives the same point."""
    loaded = replace(case, {"electrical.load": "fixed voltage", "electrical.load_voltage": "1.2 V"})
    answer = estimate(loaded)
    metal, room = answer.rows.cold_wall_temperature[0], loaded.cold.inlet_temperature
    film = answer.cold_heat_flow / (metal - room)
    sink = design(Batch(loaded)).cold.sink
    assert sink is not None
    assert film == pytest.approx(float(sink.conductance(np.array([[metal]]), np.array([room]))[0, 0]), rel=1e-9)
    place = loaded.stack.row_pitch * loaded.stack.column_pitch
    cold = dataclasses.replace(
        loaded.cold,
        fluid="reservoir",
        film_coefficient=film / place,
        duct=dataclasses.replace(loaded.cold.duct, kind=None),
    )
    as_reservoir = estimate(dataclasses.replace(loaded, cold=cold))
    for name in ("generated_power", "cold_heat_flow", "current"):
        assert getattr(as_reservoir, name) == pytest.approx(getattr(answer, name), rel=1e-8), name


def test_a_given_resistance_holds_at_its_rise_and_falls_beyond_it() -> None:
    answer = estimate(rated())
    rise = answer.rows.cold_wall_temperature[0] - 295.0
    assert rise / answer.cold_heat_flow == pytest.approx(1.2 * (50.0 / rise) ** 0.25, rel=1e-9)


@pytest.mark.parametrize("case", [rated(), finned()], ids=["rated", "finned"])
def test_no_fixed_load_beats_the_maximum(case: Case) -> None:
    best = estimate(case)
    ratios = np.linspace(0.9, 1.1, 21)
    fixed = replace(case, {"electrical.load": "fixed resistance", "electrical.load_resistance": "2 ohm"})
    loads = ratios * best.load_resistance
    tried = estimate_batch(Batch(fixed, len(loads), {"electrical.load_resistance": loads})).generated_power
    assert best.maximum_power == pytest.approx(tried.max(), rel=1e-6)
    assert best.maximum_power >= tried.max() * (1.0 - 1e-9)


def test_films_grow_with_the_rise() -> None:
    sink = finned_sink(finned())
    room = np.array([295.0])
    films = [float(sink.conductance(np.array([[295.0 + rise]]), room)[0, 0]) for rise in (1.0, 10.0, 40.0, 100.0)]
    assert all(second > 1.1 * first for first, second in pairwise(films))


def test_a_black_sink_beats_a_bare_one_and_both_beat_a_denser_array() -> None:
    case = finned()
    black, bare = (estimate(replace(case, {"cold.duct.sink_emissivity": each})) for each in (0.9, 0.05))
    dense = estimate(replace(case, {"cold.duct.sink_fin_count": 40}))
    assert black.generated_power > 1.05 * bare.generated_power
    assert dense.generated_power < black.generated_power
    assert {each.name: each.status for each in dense.checks}["heat sink fin spacing"] == "warn"


def test_the_sink_at_ambient_by_hand() -> None:
    """Two fins 100 mm high, 80 mm apart, 20 mm deep, of a perfect conductor: every part by its own formula."""
    case = replace(
        finned(),
        {
            "cold.duct.sink_height": "100 mm",
            "cold.duct.sink_width": "82 mm",
            "cold.duct.sink_fin_height": "20 mm",
            "cold.duct.sink_fin_thickness": "1 mm",
            "cold.duct.sink_fin_count": 2,
            "cold.duct.sink_conductivity": "1e9 W/(m K)",
            "cold.duct.sink_emissivity": 1.0,
        },
    )
    sink = finned_sink(case)
    wall, room = np.array([[340.0]]), np.array([300.0])
    film_temperature = np.array([[320.0]])
    cp, mu, k = (float(each[0, 0]) for each in sink.air.film_properties(film_temperature))
    rho = float(sink.air.density(film_temperature)[0, 0])
    alpha, nu = k / (rho * cp), mu / rho
    rayleigh = 9.80665 * 40.0 / 320.0 * 0.08**4 / (0.1 * nu * alpha)
    inner = (576.0 / rayleigh**2 + 2.873 / rayleigh**0.5) ** -0.5 * k / 0.08
    outer = (9.80665 * 40.0 / 320.0 * 0.1**3 / (nu * alpha)) ** 0.25 / 2.873**0.5 * k / 0.1
    seen = float(channel_radiation_area(np.array(0.08), np.array(0.02), np.array(0.1), np.array(1.0)))
    black = 5.670374419e-8 * (340.0**4 - 300.0**4) / 40.0
    assert float(radiation_coefficient(wall, room)[0, 0]) == pytest.approx(black, rel=1e-12)
    wetted, sides = 0.08 * 0.1 + 2 * 0.02 * 0.1, 2 * 0.02 * 0.1
    expected = inner * wetted + black * seen + (outer + black) * sides
    assert float(sink.conductance(wall, room)[0, 0]) == pytest.approx(expected, rel=1e-6)


@settings(max_examples=25, deadline=None)
@given(
    hot=st.floats(250.0, 500.0),
    room=st.floats(260.0, 320.0),
    resistance=st.floats(0.05, 20.0),
    exponent=st.floats(0.0, 0.5),
)
def test_any_sink_is_solved_and_closes(hot: float, room: float, resistance: float, exponent: float) -> None:
    changes = {
        "hot.inlet_temperature": hot,
        "cold.inlet_temperature": room,
        "cold.duct.sink_resistance": resistance,
        "cold.duct.sink_exponent": exponent,
    }
    answer = estimate(replace(rated(), changes))
    assert answer.valid, answer.problem
    assert abs(answer.energy_closure) < 1e-8
    assert answer.entropy_generation >= -1e-9


def test_a_batch_is_each_case_alone() -> None:
    rooms, heights = np.array([285.0, 300.0, 310.0]), np.array([0.02, 0.035, 0.06])
    varied = {"cold.inlet_temperature": rooms, "cold.duct.sink_fin_height": heights}
    many = estimate_batch(Batch(finned(), 3, varied))
    for index in range(3):
        alone = estimate(replace(finned(), {path: float(each[index]) for path, each in varied.items()}))
        assert many.generated_power[index] == pytest.approx(alone.generated_power, rel=1e-9)


# ---------------------------------------------------------------- refused


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ('fluid = "air"', 'fluid = "air"\nmass_flow = "1 g/s"', "cold.mass_flow: does not apply to a heat sink"),
        ('sink_temperature_rise = "50 K"\n', "", "sink_temperature_rise: is missing beside cold.duct.sink_resistance"),
        (
            'sink_resistance = "1.2 K/W"\nsink_temperature_rise = "50 K"\n',
            "",
            "sink_resistance: is missing; give it with",
        ),
        (
            'sink_resistance = "1.2 K/W"',
            'sink_resistance = "1.2 K/W"\nsink_height = "1 m"',
            "is given beside cold.duct",
        ),
        ('fluid = "air"', 'fluid = "water"', 'cold.fluid: water cannot surround a heat sink; give "air"'),
        ("layers = 1", "layers = 2", "only one layer can carry them"),
    ],
)
def test_a_wrong_sink_is_refused_with_what_to_do(old: str, new: str, message: str) -> None:
    assert old in RATED
    with pytest.raises(CaseError) as caught:
        read_case(RATED.replace(old, new))
    assert message in str(caught.value)


def test_fins_without_air_between_them_are_refused_in_a_batch() -> None:
    many = estimate_batch(Batch(finned(), 2, {"cold.duct.sink_fin_count": np.array([13.0, 90.0])}))
    assert list(many.valid) == [True, False]
    assert "has no room for two fins or more" in many.problem[1]


def test_several_sinks_are_told_to_stand_side_by_side() -> None:
    case = replace(rated(), {"stack.columns": 3})
    checks = {each.name: each for each in estimate(case).checks}
    assert checks["heat sink air"].status == "warn" and "side by side" in checks["heat sink air"].text
