"""Random designs of 20 rows, hot air to glycol, that the benchmarks solve."""

from __future__ import annotations

import numpy as np

from harvest.model.batch import Batch
from harvest.model.reading import read_case
from harvest.physics.arrays import FloatArray

BASE = """
[hot]
fluid = "air"
inlet_temperature = "300 degC"
mass_flow = "0.1 kg/s"
[hot.duct]
kind = "plain fins"
gap = "20 mm"
faces = 2
fin_pitch = "3 mm"
fin_thickness = "0.4 mm"
fin_conductivity = "180 W/(m K)"
wall_thickness = "2 mm"
wall_conductivity = "180 W/(m K)"
[cold]
fluid = "ethylene glycol"
volume_fraction = 0.5
inlet_temperature = "30 degC"
mass_flow = "0.6 kg/s"
pressure = "2.5 bar"
[cold.duct]
gap = "3 mm"
wall_thickness = "1.5 mm"
wall_conductivity = "180 W/(m K)"
[stack]
layers = 4
rows = 20
columns = 4
row_pitch = "44 mm"
column_pitch = "44 mm"
hot_interface = "4e-5 m^2 K/W"
cold_interface = "3e-5 m^2 K/W"
filler_conductance = "5 W/(m^2 K)"
[module]
footprint = ["40 mm", "40 mm"]
seebeck = [0.0519, 5e-5, -3e-7]
resistance = [1.72, 0.0071, 4e-6]
conductance = [0.61, -2e-4, 3e-6]
[electrical]
load = "matched"
"""


def random_batch(cases: int, seed: int = 1) -> Batch:
    """Designs with random temperatures, flows, gaps, fins, pitches, interfaces and glycol shares."""
    rng = np.random.default_rng(seed)

    def between(low: float, high: float) -> FloatArray:
        return np.asarray(rng.uniform(low, high, cases))

    return Batch(
        read_case(BASE),
        cases,
        {
            "hot.inlet_temperature": between(400.0, 700.0),
            "hot.mass_flow": 10.0 ** between(-2.0, -0.5),
            "hot.duct.gap": between(0.008, 0.04),
            "hot.duct.fin_pitch": between(0.002, 0.006),
            "cold.inlet_temperature": between(280.0, 330.0),
            "cold.mass_flow": 10.0 ** between(-1.0, 0.5),
            "cold.duct.gap": between(0.002, 0.006),
            "cold.volume_fraction": rng.choice([0.3, 0.4, 0.5, 0.6], cases),
            "stack.layers": 2.0 * rng.integers(1, 5, cases).astype(np.float64),
            "stack.columns": rng.integers(2, 8, cases).astype(np.float64),
            "stack.row_pitch": between(0.042, 0.06),
            "stack.hot_interface": between(1e-5, 1e-4),
        },
    )
