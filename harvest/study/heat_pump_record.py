"""A module from a transient record: driven as a heat pump between two known thermal masses.

With the drive current J and voltage U counted positive where the module takes power and pumps heat from the cold to the
hot mass, the balances of the masses and the voltage are
    Ch dTh/dt =  a Th J - K (Th - Tc) + J^2 R / 2 - Gh (Th - Ta)
    Cc dTc/dt = -a Tc J + K (Th - Tc) + J^2 R / 2 - Gc (Tc - Ta)
    U = a (Th - Tc) + J R
with Seebeck coefficient a, resistance R and conductance K between the two masses (interfaces inside), heat capacities
Ch and Cc, and conductances Gh and Gc to the surroundings at Ta.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import isfinite
from pathlib import Path

import numpy as np

from harvest.errors import InputError, NoAnswerError, RangeError
from harvest.model.property_store import stored_table
from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.physics.fluids import FluidBatch, FluidSpec
from harvest.study.measurement_table import raise_faults, read_measurement_table

COLUMNS = {
    "time": ("duration",),
    "hot_mass_temperature": ("temperature",),
    "cold_mass_temperature": ("temperature",),
    "voltage": ("voltage",),
    "current": ("current",),
}
MOST_READINGS = 3000
FEWEST_READINGS = 12
PARAMETERS = ("seebeck", "resistance", "conductance", "hot_loss_conductance", "cold_loss_conductance")
"""What is fitted beside the two temperatures at the start."""
LOSSES = PARAMETERS[3:]

CONFIDENCE = 0.95
CURRENT_STEP = 0.1
"""A change of the current by more than this part of the largest one begins a new stretch of smooth temperatures."""
FEWEST_IN_WINDOW = 7
SMALLEST_POWER = 1e-3
"""Below this part of the largest power a coefficient of performance means nothing."""
LARGEST_CORRELATION = 0.95
POORLY_KNOWN = 0.25
LARGEST_MISFIT = 0.1
SMALLEST_NOISE = 1e-9
_GAUSS_OFFSET = np.sqrt(3.0) / 6.0

RATIO_MEANING = (
    "the ratio of the cold mass's temperature fall to the hot mass's temperature rise is the ratio of heat pumped to "
    "heat delivered only if both masses have the same heat capacity and neither exchanges heat with the surroundings; "
    "it is neither a coefficient of performance nor an efficiency, because it says nothing about the electricity used"
)


@dataclass(frozen=True)
class ThermalMass:
    """A body of one temperature: `mass` [kg] of a specific `heat_capacity` [J/(kg K)] or of a `fluid`.

    The fluid is at `pressure` [Pa]; `added_capacity` [J/K] is that of its vessel and whatever else follows it.
    """

    mass: float
    heat_capacity: float | None = None
    fluid: FluidSpec | None = None
    pressure: float = 101325.0
    added_capacity: float = 0.0


@dataclass(frozen=True, eq=False)
class HeatPumpRecord:
    """Readings over time; arrays (readings,): `time` [s], mass temperatures [K], `voltage` [V], `current` [A].

    Voltage and current are positive where the module takes power and pumps heat from the cold to the hot mass.
    """

    label: str
    lines: IntArray
    time: FloatArray
    hot_mass_temperature: FloatArray
    cold_mass_temperature: FloatArray
    voltage: FloatArray
    current: FloatArray
    remarks: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False)
class HeatPumpFit:
    """Heats and coefficient of performance over time, and the parameters with the losses of the masses.

    Over time (readings,), NaN where too few readings surround a moment: `hot_stored_heat` and `cold_drawn_heat` [W],
    what the masses store and give by their heat capacity; `delivered_heat` and `pumped_heat` [W], the same with the
    fitted exchange with the surroundings, so what the module gives and takes; `electrical_power` [W];
    `coefficient_of_performance` = pumped heat over power and `heating_coefficient_of_performance` = delivered heat over
    power, with standard errors, negative where nothing is pumped: they mean a performance only where `pumps`;
    `balance_error` [W] = delivered - pumped - power.
    `energy_balance_error`: its integral over the integral of the power [-].
    `temperature_change_ratio`: fall of the cold mass over rise of the hot one from the start to the largest difference
    between them [-]; its meaning stands beside it.
    Parameters (parameters,) by `names`: "seebeck" [V/K], "resistance" [ohm], "conductance", "hot_loss_conductance",
    "cold_loss_conductance" [W/K]; intervals of 95 %. `temperature_noise` [K] and `voltage_noise` [V]: scatter found.
    """

    time: FloatArray
    hot_stored_heat: FloatArray
    cold_drawn_heat: FloatArray
    delivered_heat: FloatArray
    pumped_heat: FloatArray
    electrical_power: FloatArray
    coefficient_of_performance: FloatArray
    coefficient_of_performance_error: FloatArray
    heating_coefficient_of_performance: FloatArray
    heating_coefficient_of_performance_error: FloatArray
    balance_error: FloatArray
    energy_balance_error: float
    names: tuple[str, ...]
    values: FloatArray
    standard_errors: FloatArray
    lower: FloatArray
    upper: FloatArray
    covariance: FloatArray
    degrees_of_freedom: int
    fitted_hot_temperature: FloatArray
    fitted_cold_temperature: FloatArray
    fitted_voltage: FloatArray
    temperature_noise: float
    voltage_noise: float
    temperature_change_ratio: float
    temperature_change_ratio_meaning: str
    unknown: tuple[str, ...]
    remarks: tuple[str, ...]
    provenance: str

    @property
    def pumps(self) -> BoolArray:
        """Where heat is pumped out of the cold mass by electricity (readings,): a performance exists there only."""
        return np.isfinite(self.coefficient_of_performance) & (self.pumped_heat > 0.0) & (self.electrical_power > 0.0)

    def value(self, name: str) -> float:
        """Value of a parameter, SI."""
        return float(self.values[self.names.index(name)])


def read_heat_pump_record(source: str | Path) -> HeatPumpRecord:
    """Read a transient record from a CSV file, or from its text if `source` is a str with line ends.

    Columns as in `COLUMNS`, each `name [unit]`, with a number in every cell; times may be uneven and must rise.
    Raises CaseError with all faults, one line each.
    """
    table = read_measurement_table(source, COLUMNS, tuple(COLUMNS), MOST_READINGS)
    raise_faults(table.cell_faults)
    time = table.column("time")
    late = np.concatenate(([True], np.diff(time) > 0.0))
    faults = table.faults(~late, "time: does not rise from the line before")
    if len(time) < FEWEST_READINGS:
        faults.append(f"{table.label}: has {len(time)} readings; at least {FEWEST_READINGS} are needed")
    raise_faults(faults)
    remarks = (f"columns not used: {', '.join(table.ignored)}",) if table.ignored else ()
    return HeatPumpRecord(
        table.label,
        table.lines,
        time,
        table.column("hot_mass_temperature"),
        table.column("cold_mass_temperature"),
        table.column("voltage"),
        table.column("current"),
        remarks,
    )


def fit_heat_pump_record(
    record: HeatPumpRecord, hot_mass: ThermalMass, cold_mass: ThermalMass, ambient_temperature: float
) -> HeatPumpFit:
    """Heat balances and fitted parameters of a module that pumped heat between two masses.

    `ambient_temperature` [K] of the surroundings. Parameters: least squares on temperatures and voltage, the two linear
    balances stepped from reading to reading, each kind of reading with its own scatter; intervals by Student's t,
    widened where residuals follow each other (effective number of readings, Bartlett 1935). Heats over time: slopes of
    the fitted course plus those of local parabolas through what it leaves of the readings (Savitzky and Golay, Anal.
    Chem. 36, 1964, 1627; uneven times Cleveland, J. Am. Stat. Assoc. 74, 1979, 829), which stop at current steps:
    parabolas alone would flatten bends of the course. All from memory.
    Raises InputError for a mass that is none, NoAnswerError where the record determines no module.
    """
    from scipy.special import stdtrit

    if not (isfinite(ambient_temperature) and ambient_temperature > 0.0):
        raise InputError(f"ambient_temperature: {ambient_temperature:g} K is not above 0 K")
    hot_capacity = _capacity(hot_mass, record.hot_mass_temperature, "hot_mass")
    cold_capacity = _capacity(cold_mass, record.cold_mass_temperature, "cold_mass")
    balance = _Balance(record, hot_capacity, cold_capacity, ambient_temperature)
    solution = _solved(balance)
    count = len(PARAMETERS)
    values, covariance = solution.values[:count], solution.covariance[:count, :count]
    errors = np.sqrt(np.diag(covariance))
    half = float(stdtrit(solution.freedom, 0.5 + 0.5 * CONFIDENCE)) * errors
    unknown, remarks = _not_told(values, half, covariance), [*record.remarks, *solution.remarks]

    hot, cold = record.hot_mass_temperature, record.cold_mass_temperature
    model_hot_slope, model_cold_slope = balance.slopes(values, solution.fitted)
    hot_left, hot_slope, slope_weight, hot_noise = _local_parabolas(record, hot - solution.fitted[0])
    cold_left, cold_slope, _, cold_noise = _local_parabolas(record, cold - solution.fitted[1])
    smooth_hot, smooth_cold = solution.fitted[0] + hot_left, solution.fitted[1] + cold_left
    hot_slope, cold_slope = hot_slope + model_hot_slope, cold_slope + model_cold_slope
    stored, drawn = hot_capacity * hot_slope, -cold_capacity * cold_slope
    hot_excess, cold_excess = smooth_hot - ambient_temperature, smooth_cold - ambient_temperature
    delivered, pumped = stored + values[3] * hot_excess, drawn - values[4] * cold_excess
    power = record.voltage * record.current
    enough = np.abs(power) > SMALLEST_POWER * np.abs(power).max()
    divisor = np.where(enough, power, np.nan)
    power_error = solution.voltage_noise * record.current
    pumped_error = np.hypot(cold_capacity * cold_noise * slope_weight, errors[4] * cold_excess)
    delivered_error = np.hypot(hot_capacity * hot_noise * slope_weight, errors[3] * hot_excess)
    cooling, heating = pumped / divisor, delivered / divisor
    error = delivered - pumped - power
    known = np.isfinite(error)
    widest = int(np.argmax(hot - cold))
    rise, fall = float(hot[widest] - hot[0]), float(cold[0] - cold[widest])
    return HeatPumpFit(
        time=record.time,
        hot_stored_heat=stored,
        cold_drawn_heat=drawn,
        delivered_heat=delivered,
        pumped_heat=pumped,
        electrical_power=power,
        coefficient_of_performance=cooling,
        coefficient_of_performance_error=np.hypot(pumped_error, cooling * power_error) / np.abs(divisor),
        heating_coefficient_of_performance=heating,
        heating_coefficient_of_performance_error=np.hypot(delivered_error, heating * power_error) / np.abs(divisor),
        balance_error=error,
        energy_balance_error=float(
            np.trapezoid(error[known], record.time[known]) / np.trapezoid(np.abs(power[known]), record.time[known])
        ),
        names=PARAMETERS,
        values=values,
        standard_errors=errors,
        lower=values - half,
        upper=values + half,
        covariance=covariance,
        degrees_of_freedom=solution.freedom,
        fitted_hot_temperature=solution.fitted[0],
        fitted_cold_temperature=solution.fitted[1],
        fitted_voltage=solution.fitted[2],
        temperature_noise=solution.temperature_noise,
        voltage_noise=solution.voltage_noise,
        temperature_change_ratio=fall / rise if rise > 0.0 else np.nan,
        temperature_change_ratio_meaning=RATIO_MEANING,
        unknown=tuple(unknown),
        remarks=tuple(remarks),
        provenance=f"fitted to {len(record.time)} readings over {record.time[-1] - record.time[0]:.0f} s of the module "
        f"pumping heat between two masses, scatter {solution.temperature_noise:.2g} K and "
        f"{1e3 * solution.voltage_noise:.2g} mV; parameters hold between the masses, interfaces included",
    )


def _capacity(mass: ThermalMass, temperature: FloatArray, name: str) -> FloatArray:
    """Heat capacity of a mass at its temperatures [J/K] (readings,)."""
    if (mass.heat_capacity is None) == (mass.fluid is None):
        raise InputError(f"{name}: give either its heat_capacity or its fluid")
    for what, number, lowest in (("mass", mass.mass, 0.0), ("heat_capacity", mass.heat_capacity or 1.0, 0.0)):
        if not (isfinite(number) and number > lowest):
            raise InputError(f"{name}.{what}: {number:g} is not a finite number above 0")
    if not (isfinite(mass.added_capacity) and mass.added_capacity >= 0.0):
        raise InputError(f"{name}.added_capacity: {mass.added_capacity:g} J/K is not a finite number from 0")
    if mass.fluid is None:
        return np.full(len(temperature), mass.mass * (mass.heat_capacity or 0.0) + mass.added_capacity)
    lowest, highest = float(temperature.min()), float(temperature.max())
    try:
        table = stored_table(mass.fluid, mass.pressure, lowest, highest)
    except RangeError as error:
        raise InputError(f"{name}: {error}") from None
    for each in (lowest, highest):
        if not table.lower_limit <= each <= table.upper_limit:
            raise InputError(f"{name}: {table.outside(each)}")
    specific = FluidBatch.stack([table], np.zeros(1, dtype=np.int64)).heat_capacity(temperature)
    return mass.mass * specific + mass.added_capacity


def _local_parabolas(
    record: HeatPumpRecord, temperature: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray, float]:
    """Smooth value [K], slope [K/s], the slope's standard error per kelvin of scatter [1/s], and the scatter [K]."""
    time, current = record.time, record.current
    count = len(time)
    reach = max(FEWEST_IN_WINDOW, min(count // 15, 200)) // 2
    step = np.abs(np.diff(current)) > CURRENT_STEP * np.abs(current).max()
    stretch = np.concatenate(([0], np.cumsum(step)))
    around = np.arange(count)[:, None] + np.arange(-reach, reach + 1)
    inside = (around >= 0) & (around < count)
    around = np.clip(around, 0, count - 1)
    inside &= stretch[around] == stretch[:, None]
    shift = time[around] - time[:, None]
    width = np.max(np.abs(shift), axis=1, where=inside, initial=0.0)
    enough = inside.sum(axis=1) > 4
    scaled = shift / np.where(enough, width, 1.0)[:, None]
    design = np.where(inside[:, :, None], np.stack([np.ones_like(scaled), scaled, scaled**2], axis=2), 0.0)
    design[~enough, :3] = np.eye(3)
    smoother = np.linalg.pinv(design)
    level, slope = smoother[:, 0], smoother[:, 1] / np.where(enough, width, np.nan)[:, None]
    base = temperature[:, None]
    smooth = np.where(enough, temperature + np.sum(level * (temperature[around] - base) * inside, axis=1), np.nan)
    residual_share = np.sqrt(np.maximum(1.0 - 2.0 * level[:, reach] + np.sum(level**2, axis=1), 1e-12))
    residual = ((temperature - smooth) / residual_share)[enough]
    noise = float(np.sqrt(np.mean(residual**2))) if enough.any() else np.nan
    rate = np.sum(slope * (temperature[around] - base) * inside, axis=1)
    return smooth, rate, np.sqrt(np.sum(slope**2, axis=1)), noise


@dataclass(frozen=True, eq=False)
class _Balance:
    """The two heat balances of a record; heat capacities [J/K] (readings,), ambient temperature [K]."""

    record: HeatPumpRecord
    hot_capacity: FloatArray
    cold_capacity: FloatArray
    ambient: float

    def fitted(self, values: FloatArray) -> FloatArray:
        """Hot and cold temperature [K] and voltage [V] at the readings, (sets, 3, readings).

        `values` (sets, 7): the parameters and the two temperatures at the start. Current and heat capacities are linear
        between readings; a step is the exponential of Magnus' expansion to fourth order, exact for constant current
        (Iserles and Norsett, Phil. Trans. R. Soc. A 357, 1999, 983, from memory).
        """
        record = self.record
        first, second = (self._rates(values[:, :5], 0.5 + offset) for offset in (-_GAUSS_OFFSET, _GAUSS_OFFSET))
        length = np.diff(record.time)[:, None, None]
        turning = second @ first - first @ second
        exponent = 0.5 * length * (first + second) + np.sqrt(3.0) / 12.0 * length**2 * turning
        # temperatures are counted from the surroundings, so that a state at rest is exactly zero
        start = np.concatenate((values[:, 5:] - self.ambient, np.ones((len(values), 1))), axis=1)
        states = _accumulated(_exponential(exponent)) @ start[:, None, :, None]
        excess = np.concatenate((start[:, None, :2], states[..., :2, 0]), axis=1)
        hot, cold = excess[..., 0] + self.ambient, excess[..., 1] + self.ambient
        return np.stack([hot, cold, values[:, :1] * (hot - cold) + values[:, 1:2] * record.current], axis=1)

    def slopes(self, values: FloatArray, fitted: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Rates of change of the fitted temperatures [K/s] at the readings, by the two balances."""
        seebeck, resistance, conductance, hot_loss, cold_loss = values
        hot, cold, _ = fitted
        current = self.record.current
        through, joule = conductance * (hot - cold), 0.5 * resistance * current**2
        into_hot = seebeck * hot * current - through + joule - hot_loss * (hot - self.ambient)
        into_cold = -seebeck * cold * current + through + joule - cold_loss * (cold - self.ambient)
        return into_hot / self.hot_capacity, into_cold / self.cold_capacity

    def _rates(self, parameters: FloatArray, share: float) -> FloatArray:
        """Rates of change [1/s] and [K/s] a share of the way from reading to reading, (sets, steps, 3, 3)."""
        current, hot_capacity, cold_capacity = (
            (1.0 - share) * each[:-1] + share * each[1:]
            for each in (self.record.current, self.hot_capacity, self.cold_capacity)
        )
        seebeck, resistance, conductance, hot_loss, cold_loss = parameters[:, :, None].transpose(1, 0, 2)
        joule, peltier = 0.5 * resistance * current**2, seebeck * current
        rates = np.zeros((*peltier.shape, 3, 3))
        rates[..., 0, 0] = (peltier - conductance - hot_loss) / hot_capacity
        rates[..., 0, 1] = conductance / hot_capacity
        rates[..., 0, 2] = (joule + peltier * self.ambient) / hot_capacity
        rates[..., 1, 0] = conductance / cold_capacity
        rates[..., 1, 1] = (-peltier - conductance - cold_loss) / cold_capacity
        rates[..., 1, 2] = (joule - peltier * self.ambient) / cold_capacity
        return rates


def _exponential(matrices: FloatArray) -> FloatArray:
    """Exponentials of many small matrices (..., 3, 3), by a Taylor series, scaled and squared."""
    norm = float(np.abs(matrices).sum(axis=-1)[..., :2].max())
    if not isfinite(norm):
        return np.full_like(matrices, np.nan)
    squarings = max(0, int(np.ceil(np.log2(max(norm, 1e-300) / 0.25))))
    scaled = matrices / 2.0**squarings
    result = np.eye(3) + scaled / 12.0
    for term in range(11, 0, -1):
        result = np.eye(3) + scaled @ result / term
    for _ in range(squarings):
        result = result @ result
    return result


def _accumulated(steps: FloatArray) -> FloatArray:
    """Products of the first 1, 2, ... of matrices (sets, steps, 3, 3), by doubling: Hillis and Steele 1986."""
    products = steps.copy()
    reach = 1
    while reach < products.shape[1]:
        products[:, reach:] = products[:, reach:] @ products[:, :-reach]
        reach *= 2
    return products


@dataclass(frozen=True, eq=False)
class _Solution:
    values: FloatArray
    covariance: FloatArray
    freedom: int
    fitted: FloatArray
    temperature_noise: float
    voltage_noise: float
    remarks: list[str]


def _solved(balance: _Balance) -> _Solution:
    """Least squares with the scatter of temperatures and of voltages found in turn."""
    from scipy.optimize import least_squares

    record = balance.record
    measured = np.stack([record.hot_mass_temperature, record.cold_mass_temperature, record.voltage])
    sizes, start = _start(record)
    noise = np.array([0.1, 0.1, 0.01 * np.abs(record.voltage).max()])[:, None]

    def residual(scaled: FloatArray) -> FloatArray:
        return np.asarray((balance.fitted((scaled * sizes)[None])[0] - measured) / noise).ravel()

    def slopes(scaled: FloatArray) -> FloatArray:
        step = 1e-6
        moved = scaled + np.concatenate((step * np.eye(7), -step * np.eye(7)))
        fitted = balance.fitted(moved * sizes)
        return np.asarray((fitted[:7] - fitted[7:]) / (2.0 * step) / noise).reshape(7, -1).T

    scaled = start / sizes
    count = measured.shape[1]
    with np.errstate(over="ignore", invalid="ignore"):
        for _ in range(6):
            if np.isfinite(residual(scaled)).all():
                scaled = least_squares(residual, scaled, jac=slopes, method="lm").x
            misfit = balance.fitted((scaled * sizes)[None])[0] - measured
            if not np.isfinite(misfit).all():
                raise NoAnswerError(f"{record.label}: no module follows these readings; check columns, units and signs")
            squares = np.mean(misfit**2, axis=1)
            shared = np.array([np.sqrt(squares[:2].mean())] * 2 + [np.sqrt(squares[2])])
            freedom_share = np.sqrt(count / np.array([count - 2.5, count - 2.5, count - 2.0]))
            new = np.maximum(shared * freedom_share, SMALLEST_NOISE * np.abs(measured).max(axis=1))[:, None]
            settled = np.all(np.abs(np.log(new / noise)) < 1e-3)
            noise = new
            if settled:
                break
    values = scaled * sizes
    spread = np.ptp(measured, axis=1)
    if (
        noise[0, 0] > LARGEST_MISFIT * max(spread[:2].max(), 1e-12)
        or noise[2, 0] > LARGEST_MISFIT * np.abs(record.voltage).max()
    ):
        raise NoAnswerError(
            f"{record.label}: the best module misses the temperatures by {noise[0, 0]:.2g} K and the voltage by "
            f"{noise[2, 0]:.2g} V, too much to mean anything; check columns, units, signs and the masses"
        )
    for name, value in zip(PARAMETERS[:3], values[:3], strict=True):
        if value <= 0.0:
            raise NoAnswerError(
                f"{record.label}: the best {name} is {value:.3g}, not above 0; are voltage and current counted "
                "positive where the module pumps heat from the cold to the hot mass?"
            )
    design = slopes(scaled)
    norms = np.linalg.norm(design, axis=0)
    _, size, directions = np.linalg.svd(design / np.where(norms > 0.0, norms, 1.0), full_matrices=False)
    if size[-1] < 1e-6 * size[0]:
        pairs = zip((*PARAMETERS, "start", "start"), directions[-1], strict=True)
        mixed = " and ".join(name for name, part in pairs if abs(part) > 0.1)
        raise NoAnswerError(
            f"{record.label}: the record cannot tell {mixed} apart; record longer, with the current changed"
        )
    covariance = np.linalg.inv(design.T @ design) * np.outer(sizes, sizes)
    following, remarks = _following(misfit / noise), []
    if following > 1.0:
        remarks.append(
            f"residuals follow each other, so the model misses something (masses not of one temperature, heat stored "
            f"elsewhere): all standard errors are widened {np.sqrt(following):.2g} times"
        )
    return _Solution(
        values,
        covariance * following,
        3 * count - 7,
        balance.fitted(values[None])[0],
        float(noise[0, 0]),
        float(noise[2, 0]),
        remarks,
    )


def _start(record: HeatPumpRecord) -> tuple[FloatArray, FloatArray]:
    """Sizes that make the parameters of order one, and a first guess: a and R from the voltage alone."""
    difference = record.hot_mass_temperature - record.cold_mass_temperature
    if not (record.current.any() and record.voltage.any()):
        raise NoAnswerError(f"{record.label}: current or voltage is 0 in every reading, so no heat was pumped")
    design = np.stack([difference, record.current], axis=1)
    norms = np.linalg.norm(design, axis=0)
    if not norms.all() or np.linalg.svd(design / norms, compute_uv=False)[-1] < 1e-9:
        raise NoAnswerError(
            f"{record.label}: temperature difference and current do not vary independently; record longer"
        )
    seebeck, resistance = np.linalg.lstsq(design, record.voltage, rcond=None)[0]
    seebeck, resistance = max(float(seebeck), 1e-6), max(float(resistance), 1e-6)
    # a first conductance from a figure of merit of 0.7 at 300 K
    conductance = seebeck**2 * 300.0 / (0.7 * resistance)
    start = np.array(
        [
            seebeck,
            resistance,
            conductance,
            0.1 * conductance,
            0.1 * conductance,
            record.hot_mass_temperature[0],
            record.cold_mass_temperature[0],
        ]
    )
    return np.where(start > 1.0, start, np.maximum(np.abs(start), 1e-9)), start


def _following(residuals: FloatArray) -> float:
    """Factor on the variances for residuals (kinds, readings) that follow each other, 1 where none is seen."""
    spread = np.sum(residuals**2, axis=1)
    correlation = np.sum(residuals[:, 1:] * residuals[:, :-1], axis=1) / np.where(spread > 0.0, spread, 1.0)
    largest = min(float(correlation.max()), 0.98)
    return (1.0 + largest) / (1.0 - largest) if largest > 4.0 / np.sqrt(residuals.shape[1]) else 1.0


def _not_told(values: FloatArray, half: FloatArray, covariance: FloatArray) -> list[str]:
    """Sentences on what the record cannot tell."""
    unknown = []
    for name, value, width in zip(PARAMETERS, values, half, strict=True):
        if name in LOSSES and width > abs(value):
            unknown.append(
                f"{name}: {value:.2g} W/K cannot be told from 0; let the masses drift without current for longer"
            )
        elif name not in LOSSES and width > POORLY_KNOWN * value:
            unknown.append(f"{name} to better than {100 * width / value:.0f} %: record longer and at several currents")
    errors = np.sqrt(np.diag(covariance))
    correlation = covariance / np.outer(errors, errors)
    for first, second in np.argwhere(np.triu(np.abs(correlation), 1) > LARGEST_CORRELATION):
        unknown.append(
            f"{PARAMETERS[first]} and {PARAMETERS[second]} apart: their errors are correlated "
            f"{correlation[first, second]:.2f}; only a combination is well known"
        )
    return unknown
