"""What the solver is given and what it returns: a batch of stacks of one structure, a load, a state."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.physics.films import Film
from harvest.physics.fluids import FluidBatch
from harvest.physics.rated import RatedFilm
from harvest.physics.spreading import Constriction
from harvest.physics.thermoelectrics import ModuleModel

if TYPE_CHECKING:
    from harvest.physics.natural_convection import RoomSink

METAL_PASSES = 8
"""Fixed-point passes from the wall face to the metal that a sink's air meets; each gains two digits or more."""


def take_cases(item: Any, which: IntArray) -> Any:
    """Return the subset of cases of an array, or of anything that has `take`."""
    if item is None or isinstance(item, bool | int | float | str):
        return item
    return item[..., which] if isinstance(item, np.ndarray) else item.take(which)


@dataclass(frozen=True, eq=False, repr=False)
class StackSide:
    """One side of the stack; arrays (cases,).

    A stream has `fluid`, `film` and `mass_flow` [kg/s] per place (times segments); a reservoir has none of them and
    `film_conductance` [W/K] of a place, or a `sink` of a place whose film follows the metal. `wall_resistance` and
    `module_resistance` (interface and substrate) [K/W] are of one place; `constriction` depends on the film.
    """

    inlet_temperature: FloatArray
    mass_flow: FloatArray
    film_conductance: FloatArray
    wall_resistance: FloatArray
    module_resistance: FloatArray
    constriction: Constriction
    place_area: FloatArray
    fluid: FluidBatch | None
    film: Film | RatedFilm | None
    arithmetic: bool
    sink: RoomSink | None = None

    def still_conductance(self, wall: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Conductance from a reservoir or the room to the wall face at `wall` [K], and its film's, [W/K]."""
        if self.sink is None:
            film = np.broadcast_to(self.film_conductance, wall.shape)
            return film / (1.0 + film * self.wall_resistance), film
        metal = wall
        for _ in range(METAL_PASSES if np.any(self.wall_resistance > 0) else 1):
            film = self.sink.conductance(metal, self.inlet_temperature)
            shared = 1.0 / (1.0 + film * self.wall_resistance)
            metal = self.inlet_temperature + (wall - self.inlet_temperature) * shared
        return film * shared, film

    def take(self, which: IntArray) -> StackSide:
        """Return the side of a subset of cases."""
        return replace(self, **{name: take_cases(value, which) for name, value in self.__dict__.items()})


@dataclass(frozen=True, eq=False, repr=False)
class Circuit:
    """How the modules of a stack are wired; arrays (cases,).

    `block_starts` are the rows at which a new string begins, (blocks,), the same in every case. `series` is the number
    of modules in series that one row gives to a string, `parallel` the number of equal strings of a block, `lead` and
    `diode_drop` the resistance [ohm] and voltage [V] of one string's leads and blocking diode. `interrupted`,
    (blocks, cases), marks blocks whose strings are broken and carry nothing.
    """

    block_starts: IntArray
    series: FloatArray
    parallel: FloatArray
    lead: FloatArray
    diode_drop: FloatArray
    independent: bool
    interrupted: BoolArray | None = None

    def take(self, which: IntArray) -> Circuit:
        """Return the circuit of a subset of cases."""
        return Circuit(
            self.block_starts,
            self.series[which],
            self.parallel[which],
            self.lead[which],
            self.diode_drop[which],
            self.independent,
            take_cases(self.interrupted, which),
        )


@dataclass(frozen=True, eq=False, repr=False)
class Load:
    """What the stack feeds: a mode of `LOADS` with its number, (cases,): `resistance` [ohm] or `voltage` [V].

    `lowest` and `highest` voltage [V] bound the maximum-power mode only (a converter's window).
    """

    mode: str
    resistance: FloatArray | None = None
    voltage: FloatArray | None = None
    lowest: FloatArray | None = None
    highest: FloatArray | None = None

    def take(self, which: IntArray) -> Load:
        """Return the load of a subset of cases."""
        return Load(
            self.mode, *(take_cases(item, which) for item in (self.resistance, self.voltage, self.lowest, self.highest))
        )


@dataclass(frozen=True, eq=False, repr=False)
class StackProblem:
    """A batch of stacks of one structure; arrays (cases,).

    `rows` is the number of rows solved (times segments), `active_rows` how many of them each case has. `bypass` [W/K]
    joins the two wall faces of a place, `loss` [W/K] its hot wall face to `ambient_temperature` [K].
    """

    rows: int
    active_rows: IntArray
    hot: StackSide
    cold: StackSide
    bypass: FloatArray
    loss: FloatArray
    ambient_temperature: FloatArray
    module: ModuleModel
    circuit: Circuit

    @property
    def cases(self) -> int:
        """Return the number of cases."""
        return len(self.bypass)

    def take(self, which: IntArray) -> StackProblem:
        """Return the problem of a subset of cases."""
        return replace(self, **{name: take_cases(value, which) for name, value in self.__dict__.items()})


@dataclass
class StackState:
    """A solution, or a start for one: temperatures [K], currents [A], voltages [V].

    `hot_stream` and `cold_stream` stand at the row boundaries, (rows + 1, cases); the metal temperatures in the rows,
    (rows, cases); `current` in one string of each block and `string_voltage` at its terminals, (blocks, cases).
    """

    hot_stream: FloatArray
    cold_stream: FloatArray
    hot_wall: FloatArray
    hot_junction: FloatArray
    cold_junction: FloatArray
    cold_wall: FloatArray
    current: FloatArray
    string_voltage: FloatArray
    converged: BoolArray
    passes: IntArray

    def take(self, which: IntArray) -> StackState:
        """Return the state of a subset of cases."""
        return StackState(**{name: value[..., which] for name, value in self.__dict__.items()})

    def put(self, which: IntArray, other: StackState) -> None:
        """Write the state of a subset of cases."""
        for name, value in self.__dict__.items():
            value[..., which] = getattr(other, name)
