"""How much coolant pays? One batch of the jacket-water example over a range of flows, with the library."""

from pathlib import Path

import numpy as np

import harvest

case = harvest.load_case(Path(__file__).parent / "genset-jacket-water.toml")
case = harvest.replace(case, {"cold.mass_flow": "1 kg/s"})
flows = np.linspace(0.3, 3.0, 55)
answers = harvest.estimate_batch(harvest.Batch(case, len(flows), {"cold.mass_flow": flows}))
best = int(np.nanargmax(answers.net_power))

print("cold flow  generated  cold pump  net power")
for i in sorted({0, 9, 18, 27, 36, 45, 54, best}):
    mark = "  <- best" if i == best else ""
    print(
        f"{flows[i]:6.2f} kg/s  {answers.generated_power[i]:6.1f} W  {answers.cold_drive_power[i]:6.1f} W"
        f"  {answers.net_power[i]:7.1f} W{mark}"
    )
