"""What a module by itself does between two faces: its parameters, its voltage, power and heat against current."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from harvest.errors import InputError, NoAnswerError
from harvest.model.batch import Batch
from harvest.model.case import Case
from harvest.model.checks import LARGEST_MERIT, SOLDER_TEMPERATURE, celsius, solder_caution
from harvest.model.module import (
    COOLER,
    DescribedModule,
    described_module,
    fill_factor,
)
from harvest.model.rated_module import CoolerComparison, cooler_comparison
from harvest.physics.arrays import FloatArray
from harvest.physics.thermoelectrics import figure_of_merit, hot_junction_heat, maximum_efficiency
from harvest.quantities import format_quantity

POINTS = 41
ZOOMS = 4
PASSES = 60
DEFAULT_HOT_FACE = 423.15
DEFAULT_COLD_FACE = 323.15


@dataclass(frozen=True)
class OperatingPoint:
    """One point of a module's curve, SI."""

    current: float
    voltage: float
    power: float
    heat_flow: float
    efficiency: float


@dataclass(frozen=True)
class ModuleCurve:
    """A module between two fixed faces. Curves are arrays over `current`, from open to short circuit; SI.

    `seebeck`, `resistance`, `conductance` and `figure_of_merit` (Z T) are those at `mean_temperature` [K] without
    current; `temperatures` and `merit_curve` give Z T over the module's range. `fill_factor` [-] is the legs' share of
    the footprint, NaN where there are no legs; `cooler` is None where there are no cooler ratings.
    """

    hot_face_temperature: float
    cold_face_temperature: float
    mean_temperature: float
    seebeck: float
    resistance: float
    conductance: float
    figure_of_merit: float
    maximum_efficiency: float
    fill_factor: float
    cooler: CoolerComparison | None
    way: str
    source: str
    warnings: tuple[str, ...]
    current: FloatArray
    voltage: FloatArray
    power: FloatArray
    heat_flow: FloatArray
    efficiency: FloatArray
    matched: OperatingPoint
    maximum_power: OperatingPoint
    best_efficiency: OperatingPoint
    temperatures: FloatArray
    merit_curve: FloatArray


@dataclass(frozen=True)
class _Faces:
    """A module held between two faces, one case a current."""

    module: DescribedModule
    hot: float
    cold: float

    def at(self, current: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
        """Voltage, power, heat flow into the hot face and internal resistance at currents [A], any length."""
        substrate = self.module.substrate_resistance[0]
        hot, cold = np.full_like(current, self.hot), np.full_like(current, self.cold)
        for _ in range(PASSES):
            seebeck, resistance, conductance = (
                each.reshape(current.shape) for each in self.module.model.parameters(hot[:, None], cold[:, None])[:3]
            )
            difference = hot - cold
            heat = hot_junction_heat(seebeck, resistance, conductance, hot, cold, current)
            power = current * (seebeck * difference - current * resistance)
            # the faces are fixed and the junctions lag by the substrates' resistance; a linear solve of the pair
            u, v = conductance + seebeck * current, conductance - seebeck * current
            joule = 0.5 * current**2 * resistance
            a11, a12, b1 = 1.0 + substrate * u, -substrate * conductance, self.hot + substrate * joule
            a21, a22, b2 = -substrate * conductance, 1.0 + substrate * v, self.cold + substrate * joule
            determinant = a11 * a22 - a12 * a21
            new_hot, new_cold = (b1 * a22 - a12 * b2) / determinant, (a11 * b2 - a21 * b1) / determinant
            change = max(np.abs(new_hot - hot).max(), np.abs(new_cold - cold).max())
            hot, cold = new_hot, new_cold
            if change < 1e-11 * (1.0 + abs(self.hot - self.cold)):
                return (
                    power / np.where(current == 0, 1.0, current) + (current == 0) * seebeck * difference,
                    power,
                    heat,
                    resistance,
                )
        raise NoAnswerError("the module has no steady temperatures between these faces")

    def point(self, current: float) -> OperatingPoint:
        """Return one point of the curve."""
        voltage, power, heat, _ = (float(each[0]) for each in self.at(np.array([current])))
        return OperatingPoint(current, voltage, power, heat, power / heat if heat else 0.0)

    def best(self, short: float, of_efficiency: bool) -> OperatingPoint:
        """Point of largest power or efficiency, by looking ever closer around the best of a grid."""
        low, high = 0.0, short
        middle = 0.5 * short
        for _ in range(ZOOMS):
            current = np.linspace(low, high, POINTS)
            _, power, heat, _ = self.at(current)
            aim = power / heat if of_efficiency else power
            top = int(np.clip(np.argmax(aim), 1, POINTS - 2))
            step = current[1] - current[0]
            low, middle, high = current[top] - step, current[top], current[top] + step
        fall, rise = aim[top + 1] - aim[top], aim[top] - aim[top - 1]
        if rise != fall:
            middle += 0.5 * step * (rise + fall) / (rise - fall)
        return self.point(float(middle))

    def short_circuit(self) -> float:
        """Current at which the voltage is nil, by the secant method."""
        voltage, _, _, resistance = self.at(np.zeros(1))
        last, last_voltage = 0.0, float(voltage[0])
        current = last_voltage / float(resistance[0])
        for _ in range(PASSES):
            now = float(self.at(np.array([current]))[0][0])
            if abs(now) < 1e-10 * abs(float(voltage[0])) or now == last_voltage:
                break
            last, last_voltage, current = current, now, current - now * (current - last) / (now - last_voltage)
        return current

    def matched(self) -> OperatingPoint:
        """Point at which the load's resistance is the module's own."""
        current = 0.5 * self.short_circuit()
        for _ in range(PASSES):
            voltage, _, _, resistance = (float(each[0]) for each in self.at(np.array([current])))
            new = 0.5 * (voltage + current * resistance) / resistance
            if abs(new - current) < 1e-12 * abs(new):
                break
            current = new
        return self.point(current)


def _beyond(module: DescribedModule, hot: float, cold: float) -> tuple[str, ...]:
    """Say where the faces [K] leave the range in which the parameters hold."""
    if module.lower <= cold and hot <= module.upper:
        return ()
    lower, upper = format_quantity(module.lower, "temperature"), format_quantity(module.upper, "temperature")
    return (f"The parameters hold from {lower} to {upper}, and the faces lie partly outside.",)


def _at_these_faces(case: Case, module: DescribedModule, hot: float, merit: float) -> tuple[str, ...]:
    """Say what the hot face [K] or a Z T [-] at these faces asks of the module that it cannot bear or be."""
    found = []
    allowed = case.module.maximum_hot_face_temperature
    if allowed is not None and hot > allowed:
        found.append(f"The hot face at {celsius(hot)} is above the {celsius(allowed)} that the module bears for long.")
    if module.way == COOLER and hot > SOLDER_TEMPERATURE:
        found.append(f"A face of this cooler is at {celsius(hot)}; {solder_caution()}")
    if merit > LARGEST_MERIT:
        found.append(f"Z T of the module is {merit:.3g}; no module on the market comes near it.")
    return tuple(found)


def module_curve(
    case: Case, hot_face_temperature: float = DEFAULT_HOT_FACE, cold_face_temperature: float = DEFAULT_COLD_FACE
) -> ModuleCurve:
    """Parameters of a case's module, and its curves between two faces [K].

    Raises InputError where the hot face is not the hotter one, NoAnswerError where there is no steady state.
    """
    if not hot_face_temperature > cold_face_temperature > 0:
        hot_text, cold_text = (
            f"{each - 273.15:.6g} degC ({each:.6g} K)" for each in (hot_face_temperature, cold_face_temperature)
        )
        advice = "swap them" if hot_face_temperature < cold_face_temperature else "give a hotter one"
        raise InputError(f"hot face at {hot_text} is not above the cold face at {cold_text}; {advice}")
    batch = Batch(case)
    module = described_module(batch)
    faces = _Faces(module, hot_face_temperature, cold_face_temperature)
    with np.errstate(divide="ignore", invalid="ignore"):
        short = faces.short_circuit()
        current = np.linspace(0.0, short, POINTS)
        voltage, power, heat, _ = faces.at(current)
        mean = 0.5 * (hot_face_temperature + cold_face_temperature)
        hot, cold = np.array([[hot_face_temperature]]), np.array([[cold_face_temperature]])
        seebeck, resistance, conductance = (float(each[0, 0]) for each in module.model.parameters(hot, cold)[:3])
        lower = max(module.lower, cold_face_temperature - 50.0)
        upper = min(module.upper, hot_face_temperature + 50.0)
        temperatures = np.linspace(lower, upper, POINTS) if upper > lower else np.array([mean])
        column = temperatures[:, None]
        merit_curve = figure_of_merit(*module.model.parameters(column, column)[:3])[:, 0] * temperatures
        merit = float(figure_of_merit(np.array(seebeck), np.array(resistance), np.array(conductance)) * mean)
        ceiling = maximum_efficiency(np.array(merit), np.array(hot_face_temperature), np.array(cold_face_temperature))
        return ModuleCurve(
            hot_face_temperature=hot_face_temperature,
            cold_face_temperature=cold_face_temperature,
            mean_temperature=mean,
            seebeck=seebeck,
            resistance=resistance,
            conductance=conductance,
            figure_of_merit=merit,
            maximum_efficiency=float(ceiling),
            fill_factor=float(fill_factor(batch)[0]),
            cooler=cooler_comparison(batch, hot_face_temperature, cold_face_temperature),
            way=module.way,
            source="; ".join(filter(None, (module.provenance, case.module.source))),
            warnings=(
                *module.warnings,
                *_beyond(module, hot_face_temperature, cold_face_temperature),
                *_at_these_faces(case, module, hot_face_temperature, merit),
            ),
            current=current,
            voltage=voltage,
            power=power,
            heat_flow=heat,
            efficiency=power / heat,
            matched=faces.matched(),
            maximum_power=faces.best(short, of_efficiency=False),
            best_efficiency=faces.best(short, of_efficiency=True),
            temperatures=temperatures,
            merit_curve=merit_curve,
        )
