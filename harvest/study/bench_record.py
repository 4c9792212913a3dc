"""A module from a bench record: steady readings, a robust fit of its parameters, and what the readings cannot tell.

The balance of a module between its faces, V = a dT - I R, Qh = a Th I + K dT - I^2 R / 2 and
Qc = a Tc I + K dT + I^2 R / 2, is linear in Seebeck coefficient a, resistance R and conductance K. Voltages and heats
each scatter in proportion to the reading by an amount that the readings themselves give; temperatures are taken as they
stand, so that their scatter shows as that of the others, and so are currents unless the voltages show their scatter.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from harvest.errors import NoAnswerError, RangeError
from harvest.model.property_store import stored_table
from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.physics.fluids import FluidBatch, FluidSpec
from harvest.study.measurement_table import MeasurementTable, raise_faults, read_measurement_table

COLUMNS = {
    "hot_face_temperature": ("temperature",),
    "cold_face_temperature": ("temperature",),
    "open_circuit_voltage": ("voltage",),
    "voltage": ("voltage",),
    "current": ("current",),
    "load_resistance": ("resistance",),
    "heat_flow": ("power",),
    "coolant_flow": ("volume flow", "mass flow"),
    "coolant_inlet_temperature": ("temperature",),
    "coolant_outlet_temperature": ("temperature",),
}
NEEDED = ("hot_face_temperature", "cold_face_temperature")
COOLANT = ("coolant_flow", "coolant_inlet_temperature", "coolant_outlet_temperature")
MOST_READINGS = 1000

QUANTITIES = ("open_circuit_voltage", "voltage", "heat_flow", "coolant_heat_flow")
GROUPS = ("voltage", "heat_flow", "coolant_heat_flow")
"""Quantities that scatter alike share a group: `_GROUP_OF` leads from quantity to group."""
_GROUP_OF = np.array([0, 0, 1, 2])
PARAMETERS = ("seebeck", "resistance", "conductance")
SLOPE = "_slope"

CONFIDENCE = 0.95
OUTLIER_LEVEL = 0.01
"""Chance that a record without outliers has any reading named as one (Bonferroni over its readings)."""
SUSPECT = 2.5
SLOPE_LEVEL = 0.01
SMALLEST_SPAN = 10.0
"""Mean face temperatures must span this much [K] before a dependence on temperature is looked for."""
SMALLEST_READING = 0.05
"""Readings below this part of their group's median scatter like that part: noise does not vanish at zero."""
SMALLEST_NOISE = 1e-6
LARGEST_NOISE = 0.3
MOST_OUTLIERS = 0.25
SINGULAR = 1e-7
POORLY_KNOWN = 0.25
_STARTS, _CONCENTRATION_STEPS, _MOST_STEPS = 200, 8, 50


@dataclass(frozen=True, eq=False)
class BenchRecord:
    """Steady readings of one module; arrays (readings,), SI, NaN where nothing was measured.

    Face temperatures [K], `open_circuit_voltage` and `voltage` [V], `current` [A] that the module delivers,
    `load_resistance` [ohm], `heat_flow` [W] into the hot face, `coolant_heat_flow` [W] out of the cold face; `lines` of
    the file on which they stand; `remarks`, sentences on how they were read.
    """

    label: str
    lines: IntArray
    hot_face_temperature: FloatArray
    cold_face_temperature: FloatArray
    open_circuit_voltage: FloatArray
    voltage: FloatArray
    current: FloatArray
    load_resistance: FloatArray
    heat_flow: FloatArray
    coolant_heat_flow: FloatArray
    remarks: tuple[str, ...] = ()


@dataclass(frozen=True)
class Outlier:
    """A measured number that the others contradict: its line, quantity and studentised deletion residual."""

    line: int
    quantity: str
    studentised_residual: float


@dataclass(frozen=True, eq=False)
class BenchFit:
    """Parameters of a module as a bench record gives them.

    `names` are "seebeck" [V/K], "resistance" [ohm], "conductance" [W/K] as far as the record tells them, then with
    "_slope" their change [per K]; each parameter is p + slope (T - `reference_temperature`), T [K] the mean of the
    faces. `values`, `standard_errors`, `lower` and `upper` (95 %), `degrees_of_freedom` (parameters,), `covariance`
    (parameters, parameters). `noise`: scatter relative to the reading, by group. The arrays `lines`, `quantities`,
    `measured`, `fitted`, `residuals` (over their scatter) and `used` are one a measured number (observations,).
    `unknown`: sentences on what the record cannot tell; `remarks`: how it was read and fitted.
    """

    names: tuple[str, ...]
    values: FloatArray
    standard_errors: FloatArray
    lower: FloatArray
    upper: FloatArray
    degrees_of_freedom: FloatArray
    covariance: FloatArray
    reference_temperature: float
    lowest_temperature: float
    highest_temperature: float
    noise: dict[str, float]
    outliers: tuple[Outlier, ...]
    lines: IntArray
    quantities: tuple[str, ...]
    measured: FloatArray
    fitted: FloatArray
    residuals: FloatArray
    used: BoolArray
    unknown: tuple[str, ...]
    remarks: tuple[str, ...]
    provenance: str

    def value(self, name: str) -> float:
        """Value of a parameter, SI."""
        return float(self.values[self.names.index(name)])

    def polynomial(self, name: str, reference_temperature: float = 300.0) -> tuple[float, ...]:
        """Coefficients of a parameter in T - `reference_temperature` [K], lowest power first."""
        if name + SLOPE not in self.names:
            return (self.value(name),)
        slope = self.value(name + SLOPE)
        return self.value(name) + slope * (reference_temperature - self.reference_temperature), slope

    def estimate_at(self, name: str, mean_temperature: float) -> tuple[float, float]:
        """Value and standard error of a parameter at a mean face temperature [K]."""
        weights = np.zeros(len(self.names))
        weights[self.names.index(name)] = 1.0
        if name + SLOPE in self.names:
            weights[self.names.index(name + SLOPE)] = mean_temperature - self.reference_temperature
        return float(weights @ self.values), float(np.sqrt(weights @ self.covariance @ weights))


def read_bench_record(
    source: str | Path, *, coolant: FluidSpec | None = None, coolant_pressure: float = 101325.0
) -> BenchRecord:
    """Read steady readings from a CSV file, or from its text if `source` is a str with line ends.

    Columns as in `COLUMNS`, each `name [unit]`; cells may be empty. The heat out of the cold face is worked out from
    the coolant's flow (a volume flow at the inlet temperature) and the rise of its enthalpy: `coolant` says which fluid
    it is, at `coolant_pressure` [Pa]. Raises CaseError with all faults, one line each.
    """
    table = read_measurement_table(source, COLUMNS, NEEDED, MOST_READINGS)
    hot, cold = table.column("hot_face_temperature"), table.column("cold_face_temperature")
    swapped = table.faults(hot <= cold, "the hot face is not hotter than the cold face; are the two columns swapped?")
    if table.cell_faults:
        raise_faults([*table.cell_faults, *swapped])
    voltage, current, load = table.column("voltage"), table.column("current"), table.column("load_resistance")
    open_circuit, heat_flow = table.column("open_circuit_voltage"), table.column("heat_flow")
    coolant_heat, remarks, faults = _coolant_heat(table, coolant, coolant_pressure)
    faults += swapped
    faults += table.faults(load < 0.0, "load_resistance: below 0 ohm")
    loaded: BoolArray = np.isfinite(current) | np.isfinite(load)
    faults += table.faults(
        np.isfinite(voltage) & ~loaded,
        "voltage without current or load_resistance; a voltage without load belongs into open_circuit_voltage",
    )
    faults += table.faults(np.isfinite(load) & np.isnan(current) & np.isnan(voltage), "load_resistance without voltage")
    with_heat: BoolArray = np.isfinite(heat_flow) | np.isfinite(coolant_heat)
    faults += table.faults(
        with_heat & ~loaded & np.isnan(open_circuit), "a heat without current; write a current of 0 for an open circuit"
    )
    raise_faults(faults)
    if table.ignored:
        remarks.append(f"columns not used: {', '.join(table.ignored)}")
    return BenchRecord(
        table.label,
        table.lines,
        hot,
        cold,
        open_circuit,
        voltage,
        current,
        load,
        heat_flow,
        coolant_heat,
        tuple(remarks),
    )


def _coolant_heat(
    table: MeasurementTable, coolant: FluidSpec | None, pressure: float
) -> tuple[FloatArray, list[str], list[str]]:
    """Heat that the coolant takes up [W] (readings,), remarks, and faults."""
    nothing = np.full(len(table.lines), np.nan)
    flow, inlet, outlet = (table.column(name) for name in COOLANT)
    known: BoolArray = np.isfinite(np.stack([flow, inlet, outlet]))
    complete: BoolArray = np.all(known, axis=0)
    some: BoolArray = np.any(known, axis=0)
    if not some.any():
        missing = f"{table.label}: a coolant is given, and no reading has its flow and temperatures"
        return nothing, [], [missing] if coolant else []
    faults = table.faults(some & ~complete, f"a heat by the coolant needs all of {', '.join(COOLANT)}")
    faults += table.faults(flow <= 0.0, "coolant_flow: not above 0")
    if coolant is None:
        return nothing, [], [*faults, f"{table.label}: has a coolant; say which fluid it is"]
    if not complete.any():
        return nothing, [], faults
    span = np.concatenate((inlet[complete], outlet[complete]))
    try:
        properties = stored_table(coolant, pressure, float(span.min()), float(span.max()))
    except RangeError as error:
        return nothing, [], [*faults, f"{table.label}: coolant: {error}"]
    for name, values in (("coolant_inlet_temperature", inlet), ("coolant_outlet_temperature", outlet)):
        for line, value in zip(table.lines[complete], values[complete], strict=True):
            if not properties.lower_limit <= value <= properties.upper_limit:
                faults.append(f"{table.label}:{line}: {name}: {properties.outside(float(value))}")
    batch = FluidBatch.stack([properties], np.zeros(1, dtype=np.int64))
    entering = inlet[complete]
    of_volume = 1.0 if table.kinds["coolant_flow"] == "mass flow" else batch.density(entering)
    heat = nothing
    heat[complete] = flow[complete] * of_volume * (batch.enthalpy(outlet[complete]) - batch.enthalpy(entering))
    return heat, [f"heat out of the cold face by the enthalpy of {properties.label} ({properties.source})"], faults


@dataclass(frozen=True, eq=False)
class _Observations:
    """All measured numbers of a record in one row; arrays (observations,)."""

    reading: IntArray
    quantity: IntArray
    measured: FloatArray
    hot: FloatArray
    cold: FloatArray
    current: FloatArray
    load: FloatArray
    """Load resistance where the current follows from it, else NaN."""

    @property
    def group(self) -> IntArray:
        return _GROUP_OF[self.quantity]

    @property
    def floor(self) -> FloatArray:
        """Smallest size of a reading for its scatter (observations,)."""
        medians = np.zeros(len(GROUPS))
        for group in np.unique(self.group):
            sizes = np.abs(self.measured[self.group == group])
            medians[group] = np.median(sizes[sizes > 0.0])
        return np.asarray(SMALLEST_READING * medians[self.group])


@dataclass(frozen=True, eq=False)
class _Model:
    """What is fitted: observations, which parameters, to which power of the mean temperature."""

    seen: _Observations
    parameters: tuple[int, ...]
    powers: int
    temperature: FloatArray
    """Mean face temperature over the reference (observations,)."""
    current_scatters: bool = False
    """Whether measured currents scatter as the voltages do, or not at all."""

    @property
    def names(self) -> tuple[str, ...]:
        return tuple(PARAMETERS[each] + SLOPE * power for power in range(self.powers) for each in self.parameters)

    @property
    def count(self) -> int:
        return self.powers * len(self.parameters)

    def design(self, current: FloatArray) -> FloatArray:
        """Slopes of the observations in the parameters at given currents (observations, parameters)."""
        seen, difference = self.seen, self.seen.hot - self.seen.cold
        is_heat = seen.quantity >= 2
        peltier = np.select([seen.quantity == 2, seen.quantity == 3], [seen.hot, seen.cold], 0.0)
        joule = np.select([seen.quantity == 2, seen.quantity == 3], [-0.5, 0.5], 0.0)
        of_seebeck = np.where(is_heat, peltier * current, difference)
        of_resistance = np.where(is_heat, joule * current**2, -current)
        of_conductance = np.where(is_heat, difference, 0.0)
        terms = np.stack([of_seebeck, of_resistance, of_conductance])[list(self.parameters)]
        return np.concatenate([terms * self.temperature**power for power in range(self.powers)]).T

    def size(self, values: FloatArray, fitted: FloatArray) -> FloatArray:
        """What the scatter of each observation is in proportion to: its size, and that of the drop by its current."""
        seen, of_voltage = self.seen, np.abs(fitted)
        if self.current_scatters:
            resistance = values.reshape(self.powers, -1)[:, self.parameters.index(1)]
            drop = seen.current * (resistance @ self.temperature ** np.arange(self.powers)[:, None])
            of_voltage = np.where((seen.quantity == 1) & np.isnan(seen.load), np.hypot(fitted, drop), of_voltage)
        return np.maximum(of_voltage, seen.floor)

    def prediction(self, values: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Fitted observations and their slopes; a current through a load resistance is the model's own."""
        seen = self.seen
        by_load = np.isfinite(seen.load)
        if not by_load.any():
            design = self.design(seen.current)
            return design @ values, design
        powers = self.temperature ** np.arange(self.powers)[:, None]
        local = dict(zip(self.parameters, values.reshape(self.powers, -1).T @ powers, strict=True))
        seebeck, resistance = local[0], local[1]
        total = np.where(by_load, seen.load, 1.0) + resistance
        difference = seen.hot - seen.cold
        current = np.where(by_load, seebeck * difference / total, seen.current)
        design = self.design(current)
        of_current = np.select(
            [seen.quantity == 1, seen.quantity == 2, seen.quantity == 3],
            [-resistance, seebeck * seen.hot - current * resistance, seebeck * seen.cold + current * resistance],
            0.0,
        )
        chain = np.zeros((len(PARAMETERS), len(current)))
        chain[0], chain[1] = difference / total, -current / total
        chain = np.where(by_load, of_current * chain, 0.0)[list(self.parameters)]
        return design @ values, design + np.concatenate([chain * power for power in powers]).T


@dataclass(frozen=True, eq=False)
class _Solution:
    """Weighted least squares over the observations `used`, with the noise of each group found on the way."""

    values: FloatArray
    used: BoolArray
    noise: FloatArray
    group_freedom: FloatArray
    covariance: FloatArray
    freedom: FloatArray
    fitted: FloatArray
    relative: FloatArray
    """Residuals over the size of the reading, divided by the noise (observations,)."""
    studentised: FloatArray
    """Residuals over the standard error that they have when the fit does without them (observations,)."""


def fit_bench_record(record: BenchRecord, *, temperature_dependence: bool | None = None) -> BenchFit:
    """Fit a module's parameters to steady readings, robustly, with 95 % intervals.

    `temperature_dependence`: whether the parameters change linearly with the mean face temperature; None lets an F test
    at 1 % decide where the temperatures span enough. Steps: least trimmed squares with concentration from random starts
    (Rousseeuw and Van Driessen, Data Min. Knowl. Disc. 12, 2006, 29); suspects are taken back unless their studentised
    deletion residual is beyond Student's quantile at 1 % over all readings (Bonferroni); weighted least squares with
    one noise for each group of readings, with the currents scattering as the voltages do or not, whichever is likelier;
    intervals by Student's t with Satterthwaite's degrees of freedom (Biometrics Bull. 2, 1946, 110) and Meier's
    correction for estimated weights (Biometrics 9, 1953, 59). From memory.
    Raises NoAnswerError with one sentence where the readings do not determine a module.
    """
    try:
        with np.errstate(over="raise", divide="raise", invalid="raise"):
            return _fit(record, temperature_dependence)
    except (FloatingPointError, np.linalg.LinAlgError):
        raise NoAnswerError(
            f"{record.label}: the readings that agree with each other determine no module; check the columns and their "
            "units, and measure at more temperature differences and loads"
        ) from None


def _fit(record: BenchRecord, temperature_dependence: bool | None) -> BenchFit:
    record, repeated = _without_repeats(record)
    seen = _observations(record)
    parameters, unknown = _told(record, seen)
    mean = 0.5 * (seen.hot + seen.cold)
    lowest, highest = float(mean.min()), float(mean.max())
    reference = float(np.mean(0.5 * (record.hot_face_temperature + record.cold_face_temperature)))
    remarks = [*record.remarks, *repeated]
    constant = _Model(seen, parameters, 1, mean - reference)
    sloped = replace(constant, powers=2)
    obstacle = _obstacle(sloped, highest - lowest)
    if temperature_dependence and obstacle:
        raise NoAnswerError(f"{record.label}: no dependence on temperature can be fitted: {obstacle}")
    if temperature_dependence is None and obstacle:
        unknown.append(f"how the parameters change with temperature: {obstacle}")
    _require_determined(constant, record.label)
    model = constant if temperature_dependence is False or obstacle else sloped
    solution, named = _outliers_left_out(model)
    if np.any(np.isfinite(record.current[np.isfinite(record.voltage)])) and 1 in parameters:
        scattering = replace(model, current_scatters=True)
        other = _outliers_left_out(scattering)
        if _more_likely(scattering, other[0], model, solution):
            model, (solution, named) = scattering, other
            remarks.append("the voltages scatter as if the currents scattered as much, so both are taken to")
    if model.powers > 1 and temperature_dependence is None:
        chance = _chance_of_no_slope(solution, constant.count)
        if chance >= SLOPE_LEVEL:
            remarks.append(
                f"no dependence on temperature shows over {highest - lowest:.0f} K (F test, p = {chance:.2g})"
            )
            model = replace(model, powers=1)
            solution, named = _outliers_left_out(model)
    _require_sound(model, solution, record.label)
    if not named:
        remarks.append("too few readings to tell outliers")
    return _bench_fit(record, model, solution, reference, (lowest, highest), unknown, remarks)


def _bench_fit(
    record: BenchRecord,
    model: _Model,
    solution: _Solution,
    reference: float,
    temperatures: tuple[float, float],
    unknown: list[str],
    remarks: list[str],
) -> BenchFit:
    from scipy.special import stdtrit

    seen = model.seen
    errors = np.sqrt(np.diag(solution.covariance))
    half = stdtrit(solution.freedom, 0.5 + 0.5 * CONFIDENCE) * errors
    for name, value, width in zip(model.names, solution.values, half, strict=True):
        if not name.endswith(SLOPE) and width > POORLY_KNOWN * abs(value):
            unknown.append(f"{name} to better than {100 * width / abs(value):.0f} %: {_ADVICE[name]}")
    present = np.unique(seen.group)
    outliers = tuple(
        Outlier(
            int(record.lines[seen.reading[each]]), QUANTITIES[seen.quantity[each]], float(solution.studentised[each])
        )
        for each in np.flatnonzero(~solution.used)
    )
    noise = {GROUPS[group]: float(solution.noise[group]) for group in present}
    scatter = ", ".join(f"{100 * value:.2g} % of {name}" for name, value in noise.items())
    left_out = f", {len(outliers)} outlier{'s' * (len(outliers) > 1)} left out" if outliers else ""
    return BenchFit(
        names=model.names,
        values=solution.values,
        standard_errors=errors,
        lower=solution.values - half,
        upper=solution.values + half,
        degrees_of_freedom=solution.freedom,
        covariance=solution.covariance,
        reference_temperature=reference,
        lowest_temperature=temperatures[0],
        highest_temperature=temperatures[1],
        noise=noise,
        outliers=outliers,
        lines=record.lines[seen.reading],
        quantities=tuple(QUANTITIES[each] for each in seen.quantity),
        measured=seen.measured,
        fitted=solution.fitted,
        residuals=solution.relative,
        used=solution.used,
        unknown=tuple(unknown),
        remarks=tuple(remarks),
        provenance=f"fitted to {len(record.lines)} steady readings of a bench record at mean face temperatures of "
        f"{temperatures[0] - 273.15:.0f} to {temperatures[1] - 273.15:.0f} degC, scatter {scatter}{left_out}",
    )


_ADVICE = {
    "seebeck": "measure at open circuit and at larger temperature differences",
    "resistance": "measure at more loads, down to half the open-circuit voltage and below",
    "conductance": "measure the heat at more temperature differences, or more precisely",
}


def _without_repeats(record: BenchRecord) -> tuple[BenchRecord, list[str]]:
    """Leave out exact copies of readings: they are no second measurement."""
    names = [name for name, value in vars(record).items() if isinstance(value, np.ndarray) and name != "lines"]
    rows = np.nan_to_num(np.stack([getattr(record, name) for name in names], axis=1), nan=np.inf)
    first = np.sort(np.unique(rows, axis=0, return_index=True)[1])
    copies = len(rows) - len(first)
    if not copies:
        return record, []
    left = {name: getattr(record, name)[first] for name in (*names, "lines")}
    return replace(record, **left), [f"{copies} readings repeat another to the last digit and were left out"]


def _observations(record: BenchRecord) -> _Observations:
    columns = np.stack([getattr(record, quantity) for quantity in QUANTITIES])
    quantity, reading = np.nonzero(np.isfinite(columns))
    open_circuit = quantity == 0
    by_load = np.isnan(record.current) & np.isfinite(record.load_resistance)
    # the voltage over a load gives a first current; one over a short circuit gives none
    resistance = np.where(by_load & (record.load_resistance > 0.0), record.load_resistance, np.inf)
    first = np.where(by_load, record.voltage / resistance, np.nan_to_num(record.current))
    return _Observations(
        reading=reading,
        quantity=quantity,
        measured=columns[quantity, reading],
        hot=record.hot_face_temperature[reading],
        cold=record.cold_face_temperature[reading],
        current=np.where(open_circuit, 0.0, first[reading]),
        load=np.where(by_load[reading] & ~open_circuit, record.load_resistance[reading], np.nan),
    )


def _told(record: BenchRecord, seen: _Observations) -> tuple[tuple[int, ...], list[str]]:
    """Parameters that a record can tell, and sentences on those that it cannot."""
    unknown = []
    heats = np.unique(seen.quantity[seen.quantity >= 2])
    loaded = (seen.current != 0.0) | np.isfinite(seen.load)
    parameters = [0] if (seen.quantity < 2).any() or loaded.any() else []
    if not parameters:
        unknown.append("seebeck unknown: no voltage and no current was measured")
    if loaded.any():
        parameters.append(1)
    else:
        unknown.append("resistance unknown: no current was measured; add readings under load")
    if heats.size:
        parameters.append(2)
    else:
        unknown.append(
            "conductance unknown: no heat was measured; add heat_flow, or the coolant's flow and temperatures"
        )
    if heats.size == 1:
        place = "before the hot face" if heats[0] == 2 else "after the cold face"
        unknown.append(f"heat lost {place}: the conductance includes it; a heat measured on both sides would show it")
    if not seen.measured.size:
        raise NoAnswerError(f"{record.label}: no voltage and no heat was measured, so nothing can be fitted")
    for group in np.unique(seen.group):
        if not seen.measured[seen.group == group].any():
            raise NoAnswerError(f"{record.label}: {GROUPS[group]}: 0 in every reading; leave out what was not measured")
    return tuple(parameters), unknown


def _obstacle(sloped: _Model, span: float) -> str:
    """Why no dependence on temperature can be fitted; empty if it can."""
    if span < SMALLEST_SPAN:
        return f"the mean face temperatures span {span:.1f} K, and {SMALLEST_SPAN:.0f} K are needed"
    if len(sloped.seen.measured) < 2 * sloped.count + 4:
        return f"{len(sloped.seen.measured)} measured numbers are too few for {sloped.count} parameters"
    if _undetermined(sloped):
        return "the readings do not vary temperature difference, load and mean temperature independently"
    return ""


def _scaled(model: _Model) -> tuple[FloatArray, FloatArray]:
    """Design and observations, each relative to the size of the reading."""
    seen = model.seen
    size = np.maximum(np.abs(seen.measured), seen.floor)
    return model.design(seen.current) / size[:, None], seen.measured / size


def _undetermined(model: _Model) -> tuple[str, ...]:
    """Names of the parameters that no set of readings like this can tell apart."""
    design, _ = _scaled(model)
    norms = np.linalg.norm(design, axis=0)
    if not norms.all():
        return tuple(name for name, norm in zip(model.names, norms, strict=True) if norm == 0.0)
    if len(design) < model.count:
        return model.names
    _, sizes, directions = np.linalg.svd(design / norms, full_matrices=False)
    if sizes[-1] > SINGULAR * sizes[0]:
        return ()
    return tuple(name for name, part in zip(model.names, directions[-1], strict=True) if abs(part) > 1e-3)


def _require_determined(model: _Model, label: str) -> None:
    count = len(model.seen.measured)
    if count < model.count + 2:
        raise NoAnswerError(
            f"{label}: {count} measured numbers are too few for {model.count} parameters and their scatter; "
            f"measure at least {model.count + 2}, better twice as many"
        )
    if names := _undetermined(model):
        raise NoAnswerError(
            f"{label}: the readings cannot tell {' and '.join(names)}{' apart' * (len(names) > 1)}; "
            "vary temperature difference and load "
            "independently, with some readings at open circuit"
        )


def _require_sound(model: _Model, solution: _Solution, label: str) -> None:
    """Refuse a fit that is no module, with the sentence that says why."""
    seen = model.seen
    for group in np.unique(seen.group):
        own = seen.group == group
        left_out = int((own & ~solution.used).sum())
        if left_out > MOST_OUTLIERS * own.sum():
            raise NoAnswerError(
                f"{label}: {left_out} of {int(own.sum())} readings of {GROUPS[group]} contradict the others, so no one "
                "module fits; check the columns, their units, and whether each reading was steady"
            )
        if solution.noise[group] > LARGEST_NOISE:
            raise NoAnswerError(
                f"{label}: the readings of {GROUPS[group]} scatter by {100 * solution.noise[group]:.0f} % around the "
                f"best module, more than the {100 * LARGEST_NOISE:.0f} % up to which a fit means something; "
                "check the columns and their units"
            )
    reasons = {
        "seebeck": "are the leads of the voltage, or the two face temperatures, swapped?",
        "resistance": "is the current counted positive where the module delivers it, and the voltage under load?",
        "conductance": "is the heat counted positive from hot to cold, and are the faces those of the module?",
    }
    for name, value in zip(model.names, solution.values, strict=True):
        if name in reasons and value <= 0.0:
            raise NoAnswerError(f"{label}: the best {name} is {value:.3g}, not above 0; {reasons[name]}")


def _outliers_left_out(model: _Model) -> tuple[_Solution, bool]:
    """Solution without outliers, and whether there were enough readings to tell any."""
    from scipy.special import stdtrit

    seen = model.seen
    count = len(seen.measured)
    design, measured = _scaled(model)
    if count < 2 * model.count + 4:
        start = np.asarray(np.linalg.lstsq(design, measured, rcond=None)[0], dtype=np.float64)
        return _solved(model, np.ones(count, dtype=bool), start), False
    start, kept = _trimmed_start(design, measured, seen.group)
    solution = _solved(model, kept, start)
    chance = 1.0 - 0.5 * OUTLIER_LEVEL / count
    returning = ~kept
    while returning.any():
        limit = stdtrit(np.maximum(solution.group_freedom, 1.0), chance)[seen.group]
        # the noise of the readings kept is too small by as much as the others were cut off
        shares = np.bincount(seen.group, kept) / np.maximum(np.bincount(seen.group), 1)
        cut = np.array([_inner_mean_square(share) if share else 1.0 for share in shares])[seen.group]
        returning = ~kept & (np.abs(solution.studentised) <= limit / np.sqrt(cut))
        if returning.any():
            kept = kept | returning
            solution = _solved(model, kept, solution.values)
    for _ in range(count):
        limit = stdtrit(np.maximum(solution.group_freedom - 1.0, 1.0), chance)[seen.group]
        excess = np.where(kept, np.abs(solution.studentised) / limit, 0.0)
        if excess.max() <= 1.0:
            break
        kept = kept & (excess < excess.max())
        solution = _solved(model, kept, solution.values)
    return solution, True


def _inner_mean_square(share: float) -> float:
    """Mean square of the inner share of a standard normal distribution; Croux and Haesbroeck 1999 (from memory)."""
    from scipy.special import ndtri

    if share >= 1.0:
        return 1.0
    edge = float(ndtri(0.5 + 0.5 * share))
    return float(1.0 - 2.0 * edge * np.exp(-0.5 * edge**2) / np.sqrt(2.0 * np.pi) / share)


def _trimmed_start(design: FloatArray, measured: FloatArray, group: IntArray) -> tuple[FloatArray, BoolArray]:
    """Least trimmed squares, half of each group trimmed: parameters, and which observations fit them.

    Many random starts side by side, (starts, observations); a fixed seed, so that a record has one answer.
    """
    count, parameters = design.shape
    norms = np.linalg.norm(design, axis=0)
    scaled = design / norms
    products = (scaled[:, :, None] * scaled[:, None, :]).reshape(count, -1)
    own = [np.flatnonzero(group == each) for each in np.unique(group)]
    halves = [min(len(each), (len(each) + parameters + 1) // 2) for each in own]

    def solved(weights: FloatArray) -> FloatArray:
        weights = weights / weights.max(axis=1, keepdims=True)
        matrices = (weights @ products).reshape(-1, parameters, parameters) + 1e-12 * np.eye(parameters)
        return np.asarray(np.linalg.solve(matrices, ((weights * measured) @ scaled)[:, :, None])[:, :, 0])

    chosen = np.random.default_rng(0).random((_STARTS, count)).argsort(axis=1)[:, : parameters + 2]
    weights = np.zeros((_STARTS, count))
    np.put_along_axis(weights, chosen, 1.0, axis=1)
    for _ in range(_CONCENTRATION_STEPS):
        values = solved(weights)
        squares = (measured - values @ scaled.T) ** 2
        objective = np.zeros(_STARTS)
        for members, half in zip(own, halves, strict=True):
            inside = squares[:, members]
            best = np.partition(inside, half - 1, axis=1)[:, :half]
            variance = best.mean(axis=1) + SMALLEST_NOISE**2
            objective += half * np.log(variance)
            weights[:, members] = (inside <= best.max(axis=1, keepdims=True)) / variance[:, None]
    best_start = int(np.argmin(objective))
    kept = np.ones(count, dtype=bool)
    for members, half in zip(own, halves, strict=True):
        inside = squares[best_start, members]
        # least trimmed squares find too small a scatter in few readings: Rousseeuw and Leroy 1987 (from memory)
        few = (1.0 + 5.0 / max(len(members) - parameters, 1)) ** 2
        variance = np.sort(inside)[:half].mean() * few / _inner_mean_square(half / len(members)) + SMALLEST_NOISE**2
        kept[members] = inside <= max(SUSPECT**2 * variance, np.partition(inside, half - 1)[half - 1])
    return values[best_start] / norms, kept


def _solved(model: _Model, used: BoolArray, values: FloatArray) -> _Solution:
    """Gauss-Newton with weights from the fitted sizes, and the noise of each group from its own residuals.

    A group with fewer than three readings more than there are parameters shares its noise with all others.
    """
    seen = model.seen
    counts = np.bincount(seen.group[used], minlength=len(GROUPS))
    alone = counts >= model.count + 3
    pool = np.where(alone.all(where=counts > 0), np.arange(len(GROUPS)), 0)
    pooled = pool[seen.group]
    noise = np.full(len(GROUPS), 0.01)
    for _ in range(_MOST_STEPS):
        fitted, slopes = model.prediction(values)
        weight = 1.0 / (model.size(values, fitted) * noise[pooled])
        weighted = slopes * weight[:, None]
        norms = np.linalg.norm(weighted[used], axis=0)
        orthogonal, triangle = np.linalg.qr(weighted[used] / norms)
        residual = (seen.measured - fitted) * weight
        projection = orthogonal.T @ residual[used]
        step = np.linalg.solve(triangle, projection) / norms
        values = values + step
        squares = np.bincount(pooled[used], (residual[used] - orthogonal @ projection) ** 2, minlength=len(GROUPS))
        own_counts = np.bincount(pooled[used], minlength=len(GROUPS))
        leverage = np.bincount(pooled[used], np.sum(orthogonal**2, axis=1), minlength=len(GROUPS))
        freedom = np.maximum(own_counts - leverage, np.finfo(float).eps)
        found = np.where(own_counts > 0, noise * np.sqrt(squares / freedom), noise)
        found = np.maximum(found, SMALLEST_NOISE)
        settled = np.all(np.abs(np.log(found / noise)) < 1e-4) and np.all(np.abs(step) <= 1e-7 * np.abs(values))
        noise = found
        if settled:
            break
    fitted, slopes = model.prediction(values)
    size = model.size(values, fitted)
    weighted = slopes / (size * noise[pooled])[:, None]
    norms = np.linalg.norm(weighted[used], axis=0)
    root = np.linalg.inv(np.linalg.qr(weighted[used] / norms, mode="r")) / norms[:, None]
    covariance = root @ root.T
    # Satterthwaite: the part of each parameter's variance that comes from each group
    sources = (weighted[used] @ covariance) ** 2
    parts = np.zeros((len(GROUPS), model.count))
    np.add.at(parts, pooled[used], sources)
    degrees = parts.sum(axis=0) ** 2 / np.sum(parts**2 / freedom[:, None], axis=0)
    # Meier, Biometrics 9, 1953, 59: weights that are found from the readings themselves cost some precision
    shares = parts / parts.sum(axis=0)
    widening = np.sqrt(1.0 + 4.0 * np.sum(shares * (1.0 - shares) / freedom[:, None], axis=0))
    relative = (seen.measured - fitted) / (size * noise[pooled])
    leverage_of = np.sum((weighted @ root) ** 2, axis=1)
    of_others = np.maximum(1.0 - leverage_of, 1e-12)
    within = freedom[pooled]
    # Cook and Weisberg, Residuals and Influence, 1982 (from memory): the noise without the reading itself
    inner = relative**2 / of_others
    kept_noise = np.sqrt(np.maximum((within - inner) / np.maximum(within - 1.0, 1.0), 1e-12))
    studentised = np.where(used, relative / np.sqrt(of_others) / kept_noise, relative / np.sqrt(1.0 + leverage_of))
    studentised = np.where(used & (leverage_of > 1.0 - 1e-9), 0.0, studentised)
    return _Solution(
        values=values,
        used=used,
        noise=noise[pool],
        group_freedom=freedom[pool],
        covariance=covariance * np.outer(widening, widening),
        freedom=degrees,
        fitted=fitted,
        relative=relative,
        studentised=studentised,
    )


def _more_likely(model: _Model, solution: _Solution, other: _Model, its: _Solution) -> bool:
    """Whether a model of the scatter makes the readings more likely than another one does.

    A reading that only one of the two calls an outlier counts against it.
    """
    seen = model.seen
    counted = solution.used | its.used

    def cost(each: _Model, found: _Solution) -> float:
        size = each.size(found.values, found.fitted)[counted]
        squares = ((seen.measured - found.fitted)[counted] / size) ** 2 + SMALLEST_NOISE**2
        group = seen.group[counted]
        counts, sums = np.bincount(group), np.bincount(group, squares)
        present = counts > 0
        return float(np.sum(np.log(size)) + 0.5 * counts[present] @ np.log(sums[present] / counts[present]))

    return cost(model, solution) < cost(other, its)


def _chance_of_no_slope(solution: _Solution, constants: int) -> float:
    """Chance of slopes this large where there are none, by an F test."""
    from scipy.special import fdtrc

    slopes = solution.values[constants:]
    square = slopes @ np.linalg.solve(solution.covariance[constants:, constants:], slopes)
    return float(fdtrc(len(slopes), float(solution.freedom[constants:].min()), square / len(slopes)))
