"""What an estimate holds: each result declared once with its kind of unit and its meaning."""

# ruff: noqa: RUF009

from __future__ import annotations

import dataclasses
from dataclasses import dataclass
from typing import Any

import numpy as np

from harvest.model.checks import BatchCheck, Check
from harvest.physics.arrays import BoolArray, FloatArray, ObjectArray
from harvest.quantities import unit_of


def _result(kind: str, meaning: str) -> Any:
    return dataclasses.field(metadata={"kind": kind, "meaning": meaning})


@dataclass(frozen=True, kw_only=True, eq=False)
class Rows:
    """Results along the hot stream, one number a row; stream temperatures are means, powers of one module."""

    hot_stream_temperature: FloatArray = _result("temperature", "Mean temperature of the hot stream in the row.")
    hot_face_temperature: FloatArray = _result("temperature", "Temperature of the modules' hot faces.")
    hot_junction_temperature: FloatArray = _result("temperature", "Temperature of the hot junctions.")
    cold_junction_temperature: FloatArray = _result("temperature", "Temperature of the cold junctions.")
    cold_face_temperature: FloatArray = _result("temperature", "Temperature of the modules' cold faces.")
    cold_stream_temperature: FloatArray = _result("temperature", "Mean temperature of the cold stream in the row.")
    hot_wall_temperature: FloatArray = _result("temperature", "Temperature of the wall that the hot stream wets.")
    cold_wall_temperature: FloatArray = _result("temperature", "Temperature of the wall that the cold stream wets.")
    current: FloatArray = _result("current", "Current through each module.")
    module_power: FloatArray = _result("power", "Electrical power of one module.")
    module_heat_flow: FloatArray = _result("power", "Heat that enters one module's hot face.")
    hot_reynolds: FloatArray = _result("dimensionless", "Reynolds number in the hot ducts; NaN for a reservoir.")
    cold_reynolds: FloatArray = _result("dimensionless", "Reynolds number in the cold ducts; NaN for a reservoir.")


@dataclass(frozen=True, kw_only=True, eq=False)
class Estimate:
    """The answer for one design: SI numbers of the whole stack, at its terminals. NaN where there is no answer."""

    generated_power: float = _result("power", "DC power at the stack's terminals at the chosen load.")
    converted_power: float = _result("power", "Generated power after the converter.")
    hot_drive_power: float = _result("power", "Power that drives the hot stream through the stack.")
    cold_drive_power: float = _result("power", "Power that drives the cold stream through the stack.")
    net_power: float = _result("power", "Converted power less converter standby, auxiliaries and both drives.")
    matched_load_power: float = _result(
        "power", "Power with load resistance equal to internal resistance, whatever the converter's window."
    )
    maximum_power: float = _result("power", "Largest power of any load, temperatures reacting, within the window.")
    current: float = _result("current", "Current at the terminals.")
    voltage: float = _result("voltage", "Voltage at the terminals.")
    open_circuit_voltage: float = _result("voltage", "Voltage without current, temperatures settled.")
    operating_emf: float = _result("voltage", "Sum of Seebeck voltages at operating temperatures.")
    internal_resistance: float = _result("resistance", "Operating emf less voltage, over current.")
    lead_loss: float = _result("power", "Power lost in leads and blocking diodes, before the terminals.")
    load_resistance: float = _result("resistance", "Voltage over current.")
    load_ratio: float = _result("dimensionless", "Load resistance over internal resistance.")
    hot_heat_flow: float = _result("power", "Heat that the hot side gives, bypass and loss included.")
    cold_heat_flow: float = _result("power", "Heat that the cold side takes.")
    bypass_heat_flow: float = _result("power", "Heat that passes beside the modules.")
    lost_heat_flow: float = _result("power", "Heat that the hot ducts lose to the surroundings.")
    module_heat_flow: float = _result("power", "Heat that enters the modules' hot faces.")
    hot_outlet_temperature: float = _result("temperature", "Temperature of the hot stream where it leaves.")
    cold_outlet_temperature: float = _result("temperature", "Temperature of the cold stream where it leaves.")
    hot_mass_flow: float = _result("mass flow", "Mass flow of the hot stream; NaN for a reservoir.")
    cold_mass_flow: float = _result("mass flow", "Mass flow of the cold stream; NaN for a reservoir.")
    hot_pressure_drop: float = _result("pressure difference", "Pressure drop of the hot stream.")
    cold_pressure_drop: float = _result("pressure difference", "Pressure drop of the cold stream.")
    hot_velocity: float = _result("speed", "Velocity in the hot ducts at the inlet; NaN for a reservoir.")
    cold_velocity: float = _result("speed", "Velocity in the cold ducts at the inlet; NaN for a reservoir.")
    conversion_efficiency: float = _result("dimensionless", "Generated power over hot heat flow.")
    module_efficiency: float = _result("dimensionless", "Generated power over heat through the modules.")
    carnot_efficiency: float = _result("dimensionless", "Carnot efficiency between the inlet temperatures.")
    mismatch_loss: float = _result(
        "dimensionless",
        "One less maximum power over that of every row on its own; leads, drops and window left out.",
    )
    module_count: float = _result("dimensionless", "Modules in the stack.")
    hot_duct_count: float = _result("dimensionless", "Full ducts to build on the hot side.")
    cold_duct_count: float = _result("dimensionless", "Full ducts to build on the cold side.")
    cold_end_duct_count: float = _result("dimensionless", "Ducts of half height that close the stack's ends.")
    stack_length: float = _result("length", "Length of the plates along the flow.")
    stack_width: float = _result("length", "Width of the plates across the flow.")
    stack_height: float = _result("length", "Height of ducts, walls and modules; NaN without the module's thickness.")
    module_mass: float = _result("mass", "Mass of the modules alone; NaN without the module's mass.")
    hottest_face_temperature: float = _result("temperature", "Highest hot face temperature at the chosen load.")
    open_circuit_face_temperature: float = _result("temperature", "Highest hot face temperature without current.")
    coolant_lost_face_temperature: float = _result(
        "temperature", "Highest hot face temperature when the cold stream stops and the hot one goes on."
    )
    energy_closure: float = _result("dimensionless", "Unclosed part of the heat flow, from the reported outlets.")
    entropy_generation: float = _result("conductance", "Entropy that the stack generates per time.")
    building_cost: float = _result("dimensionless", "Cost of building [currency]; NaN without prices, as all costs.")
    cost_per_net_watt: float = _result("dimensionless", "Cost of building over net power [currency/W].")
    cost_per_kilowatt_hour: float = _result(
        "dimensionless", "Cost of building as an annuity over the net energy of a year [currency/kWh]."
    )
    payback_years: float = _result(
        "dimensionless", "Years of net energy at the site's electricity_value that make up the cost of building [a]."
    )
    discounted_payback_years: float = _result(
        "dimensionless", "The same with each year's worth discounted [a]; infinite if they never do."
    )

    currency: str
    rows: Rows
    checks: tuple[Check, ...]
    valid: bool
    problem: str
    faults: tuple[str, ...]
    bad_input: bool
    sources: tuple[str, ...]
    version: str
    case_hash: str


SCALARS: dict[str, Any] = {item.name: item.metadata for item in dataclasses.fields(Estimate) if item.metadata}
ROW_RESULTS: dict[str, Any] = {item.name: item.metadata for item in dataclasses.fields(Rows)}
OF_SEARCHES: dict[str, Any] = {
    "hottest_junction_temperature": {
        "kind": "temperature",
        "meaning": "Highest hot junction temperature at the chosen load.",
    },
    "warmest_cold_face_temperature": {
        "kind": "temperature",
        "meaning": "Highest cold face temperature at the chosen load.",
    },
}
"""Results of a search that an estimate tells row by row."""
UNITS: dict[str, str] = {
    **{name: unit_of(metadata["kind"]) for name, metadata in SCALARS.items()},
    **{f"rows.{name}": unit_of(metadata["kind"]) for name, metadata in ROW_RESULTS.items()},
}


@dataclass(frozen=True, eq=False, repr=False)
class Estimates:
    """Answers of a batch: `scalars` (cases,) and `rows` (rows, cases) by result name.

    `problem` (cases,) is "" where valid; `bad_input` (cases,) where the input is at fault.
    """

    scalars: dict[str, FloatArray]
    rows: dict[str, FloatArray]
    row_counts: FloatArray
    checks: tuple[BatchCheck, ...]
    problem: ObjectArray
    bad_input: BoolArray
    sources: tuple[str, ...]

    @property
    def valid(self) -> BoolArray:
        """Cases that have an answer, (cases,)."""
        return np.asarray(self.problem == "")

    def __getattr__(self, name: str) -> FloatArray:
        """Return one scalar result of all cases, (cases,)."""
        if name in SCALARS:
            return self.scalars[name]
        raise AttributeError(name)
