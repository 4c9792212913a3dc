"""The stack solved one design at a time, in plain scalar Python on CoolProp, importing nothing from the package.

Each row has four unknowns: the hot and cold stream temperatures where they leave it, and the two junction
temperatures. A stream's inlet and outlet give its heat and, through the film, the wall face explicitly; so the four
balances of a row touch its own unknowns, its neighbours' outlets and its string's current. Newton's method solves all
rows and string currents together, from open circuit upwards so as to stay on the physical branch.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from itertools import pairwise
from typing import Any, Literal

import numpy as np
from CoolProp import CoolProp
from numpy.typing import NDArray
from scipy.optimize import brentq, root

Array = NDArray[np.float64]
Backend = Literal["low-level", "props"]
LoadKind = Literal["matched", "maximum power", "fixed resistance", "fixed voltage", "open circuit"]

GAS_CONSTANT = 8.31446261815324
DILUTE_MOLAR_DENSITY = 1e-4  # mol/m3: a few tenths of a pascal, where every species is an ideal gas
TEMPERATURE_STEP = 5e-3  # K, of central differences


class NotSolved(RuntimeError):  # noqa: N818
    """Newton's method did not arrive."""


# ---------------------------------------------------------------- what a design is


@dataclass(frozen=True)
class Fluid:
    """A pure fluid or solution by its CoolProp name, an exhaust gas, or constant properties."""

    name: str = "Water"  # "Water", "Air", "INCOMP::AEG[0.5]" (volume), "INCOMP::MEG[0.5]" (mass), "exhaust", "constant"
    constants: dict[str, float] = field(default_factory=dict)  # cp, mu, k, rho
    carbon: float = 12.0
    hydrogen: float = 23.0
    excess_air_ratio: float = 1.5


@dataclass(frozen=True)
class Duct:
    """One kind of duct, as its neighbours in the stack are built."""

    kind: Literal["smooth", "plain fins", "offset strip fins"] = "smooth"
    gap: float = 3e-3
    faces: int = 1
    wall_thickness: float = 0.0
    wall_conductivity: float = 180.0
    passages: int = 1
    width: float | None = None  # of one passage
    area_ratio: float = 1.0
    fin_pitch: float = 0.0
    fin_thickness: float = 0.0
    strip_length: float = 0.0
    fin_conductivity: float = 180.0
    frontal_area_ratio: float = 0.0


@dataclass(frozen=True)
class Side:
    """A stream in its ducts; with a film coefficient instead of a duct, a reservoir at the inlet temperature."""

    inlet_temperature: float
    fluid: Fluid = Fluid()
    mass_flow: float = math.nan
    pressure: float = 101325.0
    fouling: float = 0.0
    duct: Duct = Duct()
    reservoir_film_coefficient: float | None = None


@dataclass(frozen=True)
class Module:
    """Polynomial coefficients in (mean junction temperature - 300 K), lowest first."""

    seebeck: tuple[float, ...] = (0.05,)
    resistance: tuple[float, ...] = (2.0,)
    conductance: tuple[float, ...] = (0.6,)
    footprint: tuple[float, float] = (0.04, 0.04)
    hot_substrate_resistance: float = 0.0
    cold_substrate_resistance: float = 0.0


@dataclass(frozen=True)
class Design:
    """Everything that does not change when the load does."""

    hot: Side
    cold: Side
    module: Module = Module()
    layers: int = 2
    rows: int = 12
    columns: int = 4
    row_pitch: float = 0.044
    column_pitch: float = 0.044
    hot_interface: float = 3e-5
    cold_interface: float = 3e-5
    filler_conductance: float = 0.0
    heat_loss_conductance: float = 0.0
    ambient_temperature: float = 293.15
    spreading: bool = True
    row_model: Literal["exponential", "arithmetic"] = "exponential"
    segments: int = 1
    strings_across: int = 1
    row_blocks: tuple[int, ...] = ()  # () is one block of all rows
    layers_in_series: int = 1
    lead_resistance: float = 0.0
    diode_drop: float = 0.0


@dataclass(frozen=True)
class Load:
    """What is connected; `value` is the resistance [ohm] or the voltage [V] of the two fixed kinds."""

    kind: LoadKind = "matched"
    value: float = math.nan
    independent: bool = False  # every block its own converter


# ---------------------------------------------------------------- fluids


class Properties:
    """Enthalpy, heat capacity, viscosity, conductivity and density at one pressure, with its calls counted."""

    def __init__(self, fluid: Fluid, pressure: float, backend: Backend) -> None:
        self.fluid, self.pressure, self.backend = fluid, pressure, backend
        self.state_updates = 0
        self.property_values = 0
        self.species: list[tuple[str, float, float]] = []
        self.states: dict[str, Any] = {}
        if fluid.name == "exhaust":
            self.species = exhaust_species(fluid)
            names = [name for name, _, _ in self.species]
        else:
            names = [] if fluid.name == "constant" else [fluid.name]
        if backend == "low-level":
            self.states = {name: abstract_state(name) for name in names}

    def _pure(self, name: str, temperature: float, keys: str) -> list[float]:
        """CoolProp's values at the pressure, or of the dilute gas for the species of a mixture."""
        self.property_values += len(keys)
        if self.backend == "props":
            self.state_updates += len(keys)
            long = {"h": "HMASS", "c": "CPMASS", "m": "VISCOSITY", "k": "CONDUCTIVITY", "r": "DMASS"}
            given = ("DMOLAR", DILUTE_MOLAR_DENSITY) if self.species else ("P", self.pressure)
            return [float(CoolProp.PropsSI(long[key], *given, "T", temperature, name)) for key in keys]
        self.state_updates += 1
        state = self.states[name]
        if self.species:
            state.update(CoolProp.DmolarT_INPUTS, DILUTE_MOLAR_DENSITY, temperature)
        else:
            state.update(CoolProp.PT_INPUTS, self.pressure, temperature)
        read = {"h": state.hmass, "c": state.cpmass, "m": state.viscosity, "k": state.conductivity, "r": state.rhomass}
        return [float(read[key]()) for key in keys]

    def enthalpy(self, temperature: float) -> float:
        if self.fluid.name == "constant":
            return self.fluid.constants["cp"] * temperature
        if self.species:
            names = [name for name, _, _ in self.species]
            return sum(
                w * self._pure(name, temperature, "h")[0] for name, w in zip(names, self._by_mass(), strict=True)
            )
        return self._pure(self.fluid.name, temperature, "h")[0]

    def density(self, temperature: float) -> float:
        if self.fluid.name == "constant":
            return self.fluid.constants["rho"]
        if self.species:
            return self.pressure * sum(x * m for _, x, m in self.species) / (GAS_CONSTANT * temperature)
        return self._pure(self.fluid.name, temperature, "r")[0]

    def transport(self, temperature: float) -> tuple[float, float, float]:
        """Heat capacity, viscosity and conductivity."""
        if self.fluid.name == "constant":
            c = self.fluid.constants
            return c["cp"], c["mu"], c["k"]
        if not self.species:
            cp, mu, k = self._pure(self.fluid.name, temperature, "cmk")
            if self.fluid.name.startswith("INCOMP"):  # the library's tabulated cp is not the slope of its enthalpy
                cp = (self.enthalpy(temperature + 0.05) - self.enthalpy(temperature - 0.05)) / 0.1
            return cp, mu, k
        values = [self._pure(name, temperature, "cmk") for name, _, _ in self.species]
        cp = sum(w * v[0] for w, v in zip(self._by_mass(), values, strict=True))
        fractions = [x for _, x, _ in self.species]
        masses = [m for _, _, m in self.species]
        mu, k = mixture_transport(fractions, masses, [v[1] for v in values], [v[2] for v in values])
        return cp, mu, k

    def _by_mass(self) -> list[float]:
        mean = sum(x * m for _, x, m in self.species)
        return [x * m / mean for _, x, m in self.species]


def abstract_state(name: str) -> Any:
    """The low-level state of a CoolProp name; the letter A or M of a solution tells volume from mass fraction."""
    if not name.startswith("INCOMP::"):
        return CoolProp.AbstractState("HEOS", name)
    kind, fraction = name.removeprefix("INCOMP::").rstrip("]").split("[")
    state = CoolProp.AbstractState("INCOMP", kind)
    if kind.startswith("A"):
        state.set_volu_fractions([float(fraction)])
    else:
        state.set_mass_fractions([float(fraction)])
    return state


def exhaust_species(fluid: Fluid) -> list[tuple[str, float, float]]:
    """(name, mole fraction, molar mass [kg/mol]) of completely burnt CxHy in air of 1 O2 : 3.76 N2."""
    oxygen = fluid.carbon + fluid.hydrogen / 4
    moles = {
        "CarbonDioxide": fluid.carbon,
        "Water": fluid.hydrogen / 2,
        "Oxygen": (fluid.excess_air_ratio - 1) * oxygen,
        "Nitrogen": 3.76 * fluid.excess_air_ratio * oxygen,
    }
    total = sum(moles.values())
    return [(name, n / total, float(CoolProp.PropsSI("M", name))) for name, n in moles.items()]


def mixture_transport(x: list[float], m: list[float], mu: list[float], k: list[float]) -> tuple[float, float]:
    """Wilke's viscosity; Wassiljewa's conductivity with the same interaction numbers (Mason and Saxena)."""
    mixed_mu = mixed_k = 0.0
    for i in range(len(x)):
        weight = 0.0
        for j in range(len(x)):
            ratio = math.sqrt(mu[i] / mu[j]) * (m[j] / m[i]) ** 0.25
            weight += x[j] * (1 + ratio) ** 2 / math.sqrt(8 * (1 + m[i] / m[j]))
        mixed_mu += x[i] * mu[i] / weight
        mixed_k += x[i] * k[i] / weight
    return mixed_mu, mixed_k


# ---------------------------------------------------------------- ducts


def nusselt_h1(aspect: float) -> float:
    """Shah and London 1978, rectangular duct, all walls heated evenly along and isothermal around."""
    a = aspect
    return 8.235 * (1 - 2.0421 * a + 3.0853 * a**2 - 2.4765 * a**3 + 1.0578 * a**4 - 0.1861 * a**5)


def fanning_f_re(aspect: float) -> float:
    a = aspect
    return 24 * (1 - 1.3553 * a + 1.9467 * a**2 - 1.7012 * a**3 + 0.9564 * a**4 - 0.2537 * a**5)


def smooth_friction(reynolds: float) -> float:
    return 1 / (0.790 * math.log(reynolds) - 1.64) ** 2


def gnielinski(reynolds: float, prandtl: float) -> float:
    f8 = smooth_friction(reynolds) / 8
    return f8 * (reynolds - 1000) * prandtl / (1 + 12.7 * math.sqrt(f8) * (math.pow(prandtl, 2 / 3) - 1))


def manglik_bergles(reynolds: float, alpha: float, delta: float, gamma: float) -> tuple[float, float]:
    """Colburn j and Fanning f of offset strip fins (1995)."""
    re = reynolds
    j = 0.6522 * re**-0.5403 * alpha**-0.1541 * delta**0.1499 * gamma**-0.0678
    j *= (1 + 5.269e-5 * re**1.340 * alpha**0.504 * delta**0.456 * gamma**-1.055) ** 0.1
    f = 9.6243 * re**-0.7422 * alpha**-0.1856 * delta**0.3053 * gamma**-0.2659
    f *= (1 + 7.669e-8 * re**4.429 * alpha**0.920 * delta**3.767 * gamma**0.236) ** 0.1
    return j, f


def through_transition(
    reynolds: float, laminar: Callable[[float], float], turbulent: Callable[[float], float]
) -> float:
    if reynolds <= 2300:
        return laminar(reynolds)
    if reynolds >= 4000:
        return turbulent(reynolds)
    share = (reynolds - 2300) / (4000 - 2300)
    return (1 - share) * laminar(2300) + share * turbulent(4000)


@dataclass(frozen=True)
class Face:
    """What a side shows to the module of one place: the state of the path from its stream."""

    heat: float  # leaving the hot stream, or entering the cold one
    wall: float  # temperature of the wall face
    path: float  # resistance from the wall face to the junction
    metal: float


class StreamSide:
    """One side of the stack with its geometry worked out."""

    def __init__(self, design: Design, side: Side, hot: bool, backend: Backend) -> None:
        self.side, self.duct, self.hot = side, side.duct, hot
        self.sign = 1.0 if hot else -1.0
        self.exponential = design.row_model == "exponential"
        self.is_reservoir = side.reservoir_film_coefficient is not None
        self.place = design.row_pitch * design.column_pitch
        self.footprint = design.module.footprint[0] * design.module.footprint[1]
        self.spreading = design.spreading
        interface = design.hot_interface if hot else design.cold_interface
        substrate = design.module.hot_substrate_resistance if hot else design.module.cold_substrate_resistance
        self.series = interface / self.footprint + substrate
        self.properties = Properties(side.fluid, side.pressure, backend)
        self.segment_length = design.row_pitch / design.segments
        if self.is_reservoir:
            return
        d = side.duct
        # A sub-row of 1/segments of a place has the temperatures of a whole place with that many times the flow.
        self.flow = side.mass_flow / (design.layers * design.columns) * design.segments
        duct_flow = side.mass_flow * d.faces / design.layers
        duct_width = design.columns * design.column_pitch
        if d.kind == "smooth":
            width = d.width if d.width is not None else duct_width / d.passages
            area = d.passages * width * d.gap
            self.prime, self.fin, self.fin_height = d.area_ratio, 0.0, 0.0
        else:
            width = d.fin_pitch - d.fin_thickness
            area = duct_width * d.gap * width / d.fin_pitch
            self.prime = width / d.fin_pitch
            if d.faces == 2:
                self.fin, self.fin_height = d.gap / d.fin_pitch, d.gap / 2
            else:
                self.fin, self.fin_height = (2 * d.gap + width) / d.fin_pitch, d.gap + d.fin_pitch / 2
            if d.kind == "offset strip fins":
                self.fin *= 1 + d.fin_thickness / d.strip_length
        self.aspect = min(width, d.gap) / max(width, d.gap)
        self.diameter = 2 * width * d.gap / (width + d.gap)
        if d.kind == "offset strip fins":
            s, h, t, length = width, d.gap, d.fin_thickness, d.strip_length
            self.diameter = 4 * s * h * length / (2 * (s * length + h * length + t * h) + t * s)
            self.strip = (s / h, t / length, t / s)
        if d.kind == "smooth" and d.passages == 1:
            self.laminar_nusselt = 8.235 if d.faces == 2 else 5.385
        else:
            self.laminar_nusselt = nusselt_h1(self.aspect)
        self.mass_velocity = duct_flow / area

    def reynolds(self, viscosity: float) -> float:
        return self.mass_velocity * self.diameter / viscosity

    def film_conductance(self, cp: float, mu: float, k: float) -> float:
        """From the stream to the metal of one place [W/K]."""
        re, pr = self.reynolds(mu), cp * mu / k
        if self.duct.kind == "offset strip fins":
            nusselt = manglik_bergles(re, *self.strip)[0] * re * math.cbrt(pr)
        else:
            nusselt = through_transition(re, lambda _: self.laminar_nusselt, lambda x: gnielinski(x, pr))
        h = nusselt * k / self.diameter
        h /= 1 + h * self.side.fouling
        if self.fin == 0:
            return h * self.prime * self.place
        slenderness = math.sqrt(2 * h / (self.duct.fin_conductivity * self.duct.fin_thickness)) * self.fin_height
        return h * (self.prime + math.tanh(slenderness) / slenderness * self.fin) * self.place

    def film(self, inlet: float, outlet: float) -> tuple[float, float]:
        """Capacity rate and film conductance of a row."""
        cp, mu, k = self.properties.transport((inlet + outlet) / 2)
        conductance = self.film_conductance(cp, mu, k)
        if abs(inlet - outlet) < 1e-6:
            return self.flow * cp, conductance
        drop = self.properties.enthalpy(inlet) - self.properties.enthalpy(outlet)
        return self.flow * drop / (inlet - outlet), conductance

    def face(self, inlet: float, outlet: float, film: tuple[float, float] | None = None) -> Face:
        """Explicit in the stream's temperatures; of a reservoir, `outlet` is the temperature of the metal."""
        if self.is_reservoir:
            h = self.side.reservoir_film_coefficient or 0.0
            conductance = h / (1 + h * self.side.fouling) * self.duct.area_ratio * self.place
            heat = conductance * (inlet - outlet)
            metal = outlet
        else:
            capacity, conductance = film or self.film(inlet, outlet)
            heat = capacity * (inlet - outlet)
            if self.exponential:
                metal = inlet + (inlet - outlet) / math.expm1(-conductance / capacity)
            else:
                metal = (inlet + outlet) / 2 - heat / conductance
        wall = metal
        if self.duct.wall_thickness > 0:
            wall -= heat * self.duct.wall_thickness / (self.duct.wall_conductivity * self.place)
        return Face(self.sign * heat, wall, self.series + self.spreading_resistance(conductance), metal)

    def spreading_resistance(self, film_conductance: float) -> float:
        """Lee, Song, Au and Moran 1995, at the mean temperature of the footprint."""
        thickness, conductivity = self.duct.wall_thickness, self.duct.wall_conductivity
        if not self.spreading or thickness == 0:
            return 0.0
        a, b = math.sqrt(self.footprint / math.pi), math.sqrt(self.place / math.pi)
        eps, tau = a / b, thickness / b
        biot = film_conductance / self.place * b / conductivity
        lam = math.pi + 1 / (math.sqrt(math.pi) * eps)
        phi = (math.tanh(lam * tau) + lam / biot) / (1 + lam / biot * math.tanh(lam * tau))
        return 0.5 * math.pow(1 - eps, 1.5) * phi / (math.sqrt(math.pi) * conductivity * a)

    def pressure_drop(self, temperatures: list[float]) -> float:
        """Of the stream that passes these temperatures, inlet first, one segment between each two."""
        if self.is_reservoir:
            return 0.0
        head = self.mass_velocity**2
        friction = 0.0
        for inlet, outlet in pairwise(temperatures):
            mean = (inlet + outlet) / 2
            re = self.reynolds(self.properties.transport(mean)[1])
            if self.duct.kind == "offset strip fins":
                f = 4 * manglik_bergles(re, *self.strip)[1]
            else:
                f = through_transition(re, lambda x: 4 * fanning_f_re(self.aspect) / x, smooth_friction)
            friction += f * self.segment_length / self.diameter * head / (2 * self.properties.density(mean))
        first, last = temperatures[0], temperatures[-1]
        rho_in, rho_out = self.properties.density(first), self.properties.density(last)
        s = self.duct.frontal_area_ratio
        contraction = 4.374e-4 * math.exp(6.737 * math.sqrt(s)) + 0.621
        momentum_in, momentum_out = (
            1.2 if self.reynolds(self.properties.transport(t)[1]) < 2300 else 1.0 for t in (first, last)
        )
        entrance = (1 - 2 * contraction + contraction**2 * (2 * momentum_in - 1)) / contraction**2
        end = 1 - 2 * momentum_out * s + s**2
        losses = entrance * head / (2 * rho_in) + end * head / (2 * rho_out)
        return friction + head * (1 / rho_out - 1 / rho_in) + losses


# ---------------------------------------------------------------- the stack


def polynomial(coefficients: tuple[float, ...], mean: Array | float) -> Any:
    value: Any = 0.0
    for c in reversed(coefficients):
        value = value * (mean - 300.0) + c
    return value


class Stack:
    """The equations of one design, unknowns ordered (rows x [hot outlet, cold outlet, Thj, Tcj], string currents)."""

    def __init__(self, design: Design, backend: Backend = "low-level") -> None:
        self.design = design
        self.hot = StreamSide(design, design.hot, True, backend)
        self.cold = StreamSide(design, design.cold, False, backend)
        self.rows = design.rows * design.segments
        blocks = design.row_blocks or (design.rows,)
        if sum(blocks) != design.rows:
            raise ValueError("row_blocks must add up to rows")
        self.blocks = len(blocks)
        self.block_of = np.repeat(np.arange(self.blocks), np.array(blocks) * design.segments)
        self.membership = (self.block_of == np.arange(self.blocks)[:, None]).astype(float)
        self.modules_per_row = design.layers_in_series * design.columns / design.strings_across / design.segments
        self.parallel = design.strings_across * design.layers / design.layers_in_series
        place, footprint = self.hot.place, self.hot.footprint
        self.bypass = design.filler_conductance * (place - footprint)
        self.loss = design.heat_loss_conductance * place
        self.span = max(abs(design.hot.inlet_temperature - design.cold.inlet_temperature), 1.0)
        self.heat_scale = float(polynomial(design.module.conductance, 300.0)) * self.span
        self.function_calls = 0
        self.newton_steps = 0

    def row_ends(self, x: Array, i: int) -> tuple[float, float, float, float]:
        """Hot inlet and outlet, cold inlet and outlet of a row."""
        t = x[: 4 * self.rows].reshape(self.rows, 4)
        hot_in = self.design.hot.inlet_temperature if i == 0 or self.hot.is_reservoir else float(t[i - 1, 0])
        last = i == self.rows - 1
        cold_in = self.design.cold.inlet_temperature if last or self.cold.is_reservoir else float(t[i + 1, 1])
        return hot_in, float(t[i, 0]), cold_in, float(t[i, 1])

    def row_balances(self, hot: Face, cold: Face, t_h: float, t_c: float, current: float) -> Array:
        module = self.design.module
        mean = (t_h + t_c) / 2
        seebeck = polynomial(module.seebeck, mean)
        conducted = polynomial(module.conductance, mean) * (t_h - t_c)
        joule = current**2 * polynomial(module.resistance, mean)
        heat_in = seebeck * t_h * current + conducted - joule / 2
        heat_out = seebeck * t_c * current + conducted + joule / 2
        around = self.bypass * (hot.wall - cold.wall)
        lost = self.loss * (hot.wall - self.design.ambient_temperature)
        return np.array(
            [
                (hot.heat - heat_in - around - lost) / self.heat_scale,
                (cold.heat - heat_out - around) / self.heat_scale,
                (hot.wall - t_h - heat_in * hot.path) / self.span,
                (t_c - cold.wall - heat_out * cold.path) / self.span,
            ]
        )

    def thermal_residual(self, x: Array) -> Array:
        """All balances, properties taken anew."""
        self.function_calls += 1
        result = np.empty(4 * self.rows)
        for i in range(self.rows):
            hot_in, hot_out, cold_in, cold_out = self.row_ends(x, i)
            hot, cold = self.hot.face(hot_in, hot_out), self.cold.face(cold_in, cold_out)
            current = float(x[4 * self.rows + self.block_of[i]])
            result[4 * i : 4 * i + 4] = self.row_balances(hot, cold, float(x[4 * i + 2]), float(x[4 * i + 3]), current)
        return result

    def films(self, x: Array) -> list[tuple[tuple[float, float] | None, tuple[float, float] | None]]:
        """Capacity rates and film conductances of all rows, to be held."""
        low = min(self.design.hot.inlet_temperature, self.design.cold.inlet_temperature)
        high = max(self.design.hot.inlet_temperature, self.design.cold.inlet_temperature)
        held = []
        for i in range(self.rows):
            ends = [min(max(t, low), high) for t in self.row_ends(x, i)]
            hot = None if self.hot.is_reservoir else self.hot.film(ends[0], ends[1])
            cold = None if self.cold.is_reservoir else self.cold.film(ends[2], ends[3])
            held.append((hot, cold))
        return held

    def linearised(
        self, x: Array, held: list[tuple[tuple[float, float] | None, tuple[float, float] | None]] | None = None
    ) -> tuple[Array, Array]:
        """The balances and their Jacobian, by central differences row by row."""
        n, d = self.rows, TEMPERATURE_STEP
        residual = np.empty(4 * n)
        jacobian = np.zeros((4 * n, 4 * n + self.blocks))
        for i in range(n):
            hot_film, cold_film = held[i] if held is not None else (None, None)
            hot_in, hot_out, cold_in, cold_out = self.row_ends(x, i)
            t_h, t_c = float(x[4 * i + 2]), float(x[4 * i + 3])
            block = 4 * n + int(self.block_of[i])
            current = float(x[block])
            hot, cold = self.hot.face(hot_in, hot_out, hot_film), self.cold.face(cold_in, cold_out, cold_film)
            own = slice(4 * i, 4 * i + 4)
            residual[own] = self.row_balances(hot, cold, t_h, t_c, current)

            def of_hot(inlet: float, outlet: float) -> Array:
                face = self.hot.face(inlet, outlet, hot_film)  # noqa: B023
                return self.row_balances(face, cold, t_h, t_c, current)  # noqa: B023

            def of_cold(inlet: float, outlet: float) -> Array:
                face = self.cold.face(inlet, outlet, cold_film)  # noqa: B023
                return self.row_balances(hot, face, t_h, t_c, current)  # noqa: B023

            jacobian[own, 4 * i] = (of_hot(hot_in, hot_out + d) - of_hot(hot_in, hot_out - d)) / (2 * d)
            jacobian[own, 4 * i + 1] = (of_cold(cold_in, cold_out + d) - of_cold(cold_in, cold_out - d)) / (2 * d)
            if i > 0 and not self.hot.is_reservoir:
                jacobian[own, 4 * i - 4] = (of_hot(hot_in + d, hot_out) - of_hot(hot_in - d, hot_out)) / (2 * d)
            if i < n - 1 and not self.cold.is_reservoir:
                slope = (of_cold(cold_in + d, cold_out) - of_cold(cold_in - d, cold_out)) / (2 * d)
                jacobian[own, 4 * i + 5] = slope
            for column, (dh, dc, di) in ((4 * i + 2, (d, 0, 0)), (4 * i + 3, (0, d, 0)), (block, (0, 0, d))):
                above = self.row_balances(hot, cold, t_h + dh, t_c + dc, current + di)
                below = self.row_balances(hot, cold, t_h - dh, t_c - dc, current - di)
                jacobian[own, column] = (above - below) / (2 * d)
        return residual, jacobian

    # -------------------------------------------------------- circuit

    def strings(self, x: Array) -> tuple[Array, Array, Array]:
        """Electromotive force, resistance and terminal voltage of each block's strings."""
        t = x[: 4 * self.rows].reshape(self.rows, 4)
        mean, difference = (t[:, 2] + t[:, 3]) / 2, t[:, 2] - t[:, 3]
        module = self.design.module
        row_emf = self.modules_per_row * polynomial(module.seebeck, mean) * difference
        row_resistance = self.modules_per_row * polynomial(module.resistance, mean) * np.ones(self.rows)
        emf = self.membership @ row_emf
        resistance = self.membership @ row_resistance + self.design.lead_resistance
        return emf, resistance, emf - resistance * x[4 * self.rows :] - self.design.diode_drop

    def circuit_residual(self, x: Array, load: Load) -> Array:
        """One equation a block, in volts (or amperes at open circuit)."""
        current = x[4 * self.rows :]
        _, resistance, voltage = self.strings(x)
        drop = self.design.diode_drop
        if load.independent:
            if load.kind == "open circuit":
                return current.copy()
            if load.kind == "matched":
                return voltage - resistance * current - drop
            if load.kind == "fixed voltage":
                return voltage - load.value
            if load.kind == "fixed resistance":
                return voltage - load.value * self.parallel * current
            raise ValueError(load.kind)
        total = self.parallel * float(current.sum())
        if load.kind == "open circuit":
            last = total
        elif load.kind == "matched":
            last = float(voltage[0]) - total / float((self.parallel / resistance).sum()) - drop
        elif load.kind == "fixed voltage":
            last = float(voltage[0]) - load.value
        elif load.kind == "fixed resistance":
            last = float(voltage[0]) - load.value * total
        else:
            raise ValueError(load.kind)
        return np.append(np.diff(voltage), last)

    def circuit_jacobian(self, x: Array, equations: Callable[[Array], Array]) -> Array:
        jacobian = np.zeros((self.blocks, len(x)))
        for j in range(len(x)):
            if j < 4 * self.rows and j % 4 < 2:
                continue
            step = np.zeros(len(x))
            step[j] = TEMPERATURE_STEP
            jacobian[:, j] = (equations(x + step) - equations(x - step)) / (2 * TEMPERATURE_STEP)
        return jacobian

    # -------------------------------------------------------- solution

    def newton(self, x: Array, equations: Callable[[Array], Array]) -> tuple[Array, Array]:
        """Balances and circuit solved together from x; returns the solution and the Jacobian there."""
        scale = np.concatenate([np.full(4 * self.rows, self.span), np.full(self.blocks, 1.0)])
        norm = math.inf
        for _ in range(60):
            self.newton_steps += 1
            thermal, thermal_slope = self.linearised(x)
            residual = np.concatenate([thermal, equations(x)])
            slope = np.vstack([thermal_slope, self.circuit_jacobian(x, equations)])
            norm = float(np.abs(residual).max())
            step = -np.linalg.solve(slope, residual)
            # The residual has a floor: CoolProp's enthalpy of water is noisy by 1e-7 J/kg. The step tells.
            if norm < 1e-6 and float(np.abs(step / scale).max()) < 2e-11:
                return x + step, slope
            fraction = min(1.0, 0.5 * self.span / float(np.abs(step[: 4 * self.rows]).max()))
            for _ in range(12):
                trial = x + fraction * step
                if norm < 1e-8:
                    break
                try:
                    after = np.concatenate([self.thermal_residual(trial), equations(trial)])
                except (ValueError, OverflowError):
                    after = np.full(len(x), np.inf)
                if np.linalg.norm(after) < (1 - 1e-4 * fraction) * np.linalg.norm(residual):
                    break
                fraction /= 2
            x = trial
        raise NotSolved(f"residual {norm:.1e} after 60 steps")

    def substituted(self, passes: int) -> Array:
        """The stack without current by successive substitution: films held, temperatures solved, films taken anew."""
        n = self.rows
        hot, cold = self.design.hot.inlet_temperature, self.design.cold.inlet_temperature
        x = np.zeros(4 * n + self.blocks)
        x[: 4 * n] = np.tile([hot, cold, 0.6 * hot + 0.4 * cold, 0.4 * hot + 0.6 * cold], n)
        for _ in range(passes):
            residual, slope = self.linearised(x, self.films(x))
            x[: 4 * n] -= np.linalg.solve(slope[:, : 4 * n], residual)
        return x

    def still_state(self) -> Array:
        """The stack without current."""
        return self.newton(self.substituted(6), lambda y: y[4 * self.rows :].copy())[0]

    def loaded(self, x: Array, load: Load) -> Array:
        """Steps of current at held temperatures and of temperatures at held current, then all together."""
        n = 4 * self.rows

        def equations(y: Array) -> Array:
            return self.circuit_residual(y, load)

        for share in (0.6, 0.8):
            wanted = x[n:] - np.linalg.solve(self.circuit_jacobian(x, equations)[:, n:], equations(x))
            x = x.copy()
            x[n:] += share * (wanted - x[n:])
            for _ in range(2):
                residual, slope = self.linearised(x)
                x[:n] -= np.linalg.solve(slope[:, :n], residual)
        return self.newton(x, equations)[0]

    def bus_maximum(self, still: Array) -> Array:
        """Root of dP/dV = I + V dI/dV, the derivative taken through all temperatures."""
        open_circuit = self.loaded(still, Load("open circuit"))
        matched = self.loaded(still, Load("matched"))
        v_open, v_matched = (float(self.strings(y)[2][0]) for y in (open_circuit, matched))
        state = matched

        def slope_of_power(voltage: float) -> float:
            nonlocal state
            state, jacobian = self.newton(state, lambda y: self.circuit_residual(y, Load("fixed voltage", voltage)))
            right = np.zeros(len(state))
            right[-1] = 1.0
            change = np.linalg.solve(jacobian, right)[4 * self.rows :].sum()
            return float(state[4 * self.rows :].sum() + voltage * change)

        if v_open == v_matched:
            return open_circuit
        low = v_matched
        sign = slope_of_power(low)
        while sign * slope_of_power(v_open) > 0:
            low -= 0.1 * (v_open - low)
            sign = slope_of_power(low)
        brentq(slope_of_power, low, v_open, xtol=1e-12 * abs(v_open), rtol=1e-14)
        return state

    def independent_maximum(self, still: Array) -> Array:
        """Currents at which the summed power of all blocks is stationary."""
        n = 4 * self.rows
        state = self.loaded(still, Load("matched", independent=True))

        def slope_of_power(current: Array) -> Array:
            nonlocal state
            state, jacobian = self.newton(state, lambda y: y[n:] - current)
            change = -np.linalg.solve(jacobian[:n, :n], jacobian[:n, n:])
            slope = self.circuit_jacobian(state, lambda y: self.strings(y)[2])
            return self.strings(state)[2] + current @ (slope[:, n:] + slope[:, :n] @ change)

        found = root(slope_of_power, state[n:], method="hybr", options={"xtol": 1e-13})
        if float(np.abs(slope_of_power(found.x)).max()) > 1e-8 * float(np.abs(self.strings(state)[2]).max()):
            raise NotSolved("independent maximum")
        return state

    def solved(self, load: Load) -> Array:
        still = self.still_state()
        if load.kind != "maximum power":
            return self.loaded(still, load)
        return self.independent_maximum(still) if load.independent else self.bus_maximum(still)

    def report(self, x: Array, load: Load) -> dict[str, Any]:
        """All that is compared, of the whole stack and along its rows (sub-rows with segments)."""
        design, n = self.design, self.rows
        t = x[: 4 * n].reshape(n, 4)
        current = x[4 * n :]
        emf, resistance, voltage = self.strings(x)
        ends = [self.row_ends(x, i) for i in range(n)]
        hot = [self.hot.face(e[0], e[1]) for e in ends]
        cold = [self.cold.face(e[2], e[3]) for e in ends]
        row_current = current[self.block_of]
        mean = (t[:, 2] + t[:, 3]) / 2
        seebeck = polynomial(design.module.seebeck, mean)
        conducted = polynomial(design.module.conductance, mean) * (t[:, 2] - t[:, 3])
        joule = row_current**2 * polynomial(design.module.resistance, mean)
        heat_in = seebeck * t[:, 2] * row_current + conducted - joule / 2
        heat_out = seebeck * t[:, 3] * row_current + conducted + joule / 2
        hot_wall = np.array([f.wall for f in hot])
        cold_wall = np.array([f.wall for f in cold])
        places = design.layers * design.columns / design.segments
        power = float((self.parallel * voltage * current).sum())
        total_current = self.parallel * float(current.sum())
        hot_temperatures = [design.hot.inlet_temperature, *(float(v) for v in t[:, 0])]
        cold_temperatures = [design.cold.inlet_temperature, *(float(v) for v in t[::-1, 1])]
        hot_heat = places * sum(f.heat for f in hot)
        cold_heat = places * sum(f.heat for f in cold)
        lost = places * self.loss * float((hot_wall - design.ambient_temperature).sum())
        bus = None if load.independent else float(voltage[0])
        dissipated = self.parallel * float((design.lead_resistance * current**2 + design.diode_drop * current).sum())
        return {
            "generated_power": power,
            "current": None if load.independent else total_current,
            "voltage": bus,
            "block_current": current.copy(),
            "block_voltage": voltage,
            "block_emf": emf,
            "block_resistance": resistance,
            "hot_heat_flow": hot_heat,
            "cold_heat_flow": cold_heat,
            "loss_heat_flow": lost,
            "bypass_heat_flow": places * self.bypass * float((hot_wall - cold_wall).sum()),
            "module_heat_flow": places * float(heat_in.sum()),
            "module_heat_rejected": places * float(heat_out.sum()),
            "energy_closure": (hot_heat - cold_heat - lost - power - dissipated) / max(abs(hot_heat), 1e-300),
            "hot_outlet_temperature": hot_temperatures[-1],
            "cold_outlet_temperature": cold_temperatures[-1],
            "hot_pressure_drop": self.hot.pressure_drop(hot_temperatures),
            "cold_pressure_drop": self.cold.pressure_drop(cold_temperatures),
            "rows": {
                "hot_stream_inlet_temperature": np.array([e[0] for e in ends]),
                "hot_stream_outlet_temperature": np.array([e[1] for e in ends]),
                "cold_stream_inlet_temperature": np.array([e[2] for e in ends]),
                "cold_stream_outlet_temperature": np.array([e[3] for e in ends]),
                "hot_metal_temperature": np.array([f.metal for f in hot]),
                "cold_metal_temperature": np.array([f.metal for f in cold]),
                "hot_wall_temperature": hot_wall,
                "cold_wall_temperature": cold_wall,
                "hot_junction_temperature": t[:, 2].copy(),
                "cold_junction_temperature": t[:, 3].copy(),
                "current": row_current.copy(),
                "module_heat_flow": heat_in,
                "module_power": heat_in - heat_out,
            },
        }

    def calls(self) -> dict[str, int]:
        """How often CoolProp was asked, and the equations evaluated, up to now."""
        sides = (self.hot.properties, self.cold.properties)
        return {
            "state_updates": sum(p.state_updates for p in sides),
            "property_values": sum(p.property_values for p in sides),
            "newton_steps": self.newton_steps,
            "function_calls": self.function_calls,
        }


def solve(design: Design, load: Load = Load(), backend: Backend = "low-level") -> dict[str, Any]:
    """One design under one load, to a residual of 1e-10 or better relative to the inlet difference and its heat."""
    started = time.perf_counter()
    stack = Stack(design, backend)
    x = stack.solved(load)
    calls, seconds = stack.calls(), time.perf_counter() - started
    residual = float(np.abs(stack.thermal_residual(x)).max())
    return {**stack.report(x, load), "residual": residual, "calls": calls, "seconds": seconds}
