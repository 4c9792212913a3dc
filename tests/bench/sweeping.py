"""Speed and memory of sweeps of the shipped exhaust case: against the bare solver, over a million, on two processes."""

from __future__ import annotations

import subprocess
import sys
import tempfile
import time
from pathlib import Path
from typing import NamedTuple

from harvest.model.batch import Batch
from harvest.model.case import Case
from harvest.model.design import design, maximum_power_load
from harvest.model.reading import load_case
from harvest.model.stack import solve_stack
from harvest.report.sweep_files import write_sweep
from harvest.study.sweep import SweepPlan, planned, varied_field, with_axes

EXHAUST = Path(__file__).parents[2] / "examples" / "genset-exhaust.toml"
AXES = ("hot.mass_flow=0.06 kg/s:0.12 kg/s:50", "hot.duct.gap=10 mm:30 mm:50")
TEMPERATURES = "hot.inlet_temperature=600 K:750 K:{}"
MEASURED = (
    "import resource, sys\nfrom harvest.cli import main\n"
    "try:\n    main()\n"
    "finally:\n    own, of_others = map(resource.getrusage, (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN))\n"
    "    seconds = [each.ru_utime + each.ru_stime for each in (own, of_others)]\n"
    "    print(own.ru_maxrss / 1024, *seconds, file=sys.stderr)\n"
)


def plan_of(temperatures: int) -> SweepPlan:
    """Plan of 2,500 combinations a temperature."""
    axes = dict(map(varied_field, (*AXES, TEMPERATURES.format(temperatures))))
    return planned(with_axes(load_case(EXHAUST), axes, option="--vary"))


def solve_barely(plan: SweepPlan) -> None:
    """Design and solve the batches of a sweep, and nothing else."""
    base = plan.bases[0]
    assert isinstance(base, Case)
    for index in range(plan.chunks):
        places = plan.chunk(index)
        batch = Batch(base, len(places), plan.at(places))
        solve_stack(design(batch).problem, maximum_power_load(batch))


def processor_seconds(run: object) -> float:
    """Processor time of a call [s]: what else the machine does counts less."""
    assert callable(run)
    begun = time.process_time()
    run()
    return time.process_time() - begun


class Measured(NamedTuple):
    """Seconds of a sweep by command, peak memory [MiB], processor seconds of the first process and of the others."""

    seconds: float
    peak: float
    own: float
    of_others: float


def measured_command(folder: Path, temperatures: int, jobs: int) -> Measured:
    """Run a sweep by command."""
    output = folder / f"{temperatures}-{jobs}.csv"
    varied = [part for each in (*AXES, TEMPERATURES.format(temperatures)) for part in ("--vary", each)]
    command = [sys.executable, "-c", MEASURED, "sweep", str(EXHAUST), *varied, "-o", str(output), "--jobs", str(jobs)]
    begun = time.perf_counter()
    done = subprocess.run(command, capture_output=True, text=True, check=True)
    seconds = time.perf_counter() - begun
    output.unlink()
    return Measured(seconds, *map(float, done.stderr.split()))


def sweeping() -> None:
    """Rate over that of the bare solver, memory of long sweeps, two processes against one."""
    plan = plan_of(40)
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        solve_barely(plan_of(2))
        bare, whole = [], []
        for turn in range(3):
            bare.append(processor_seconds(lambda: solve_barely(plan)))
            whole.append(processor_seconds(lambda turn=turn: write_sweep(plan, folder / f"{turn}.csv")))
        print(
            f"{plan.count:,} combinations to CSV: {1e6 * min(whole) / plan.count:.1f} us each, the bare solver "
            f"{1e6 * min(bare) / plan.count:.1f} us; its rate {min(bare) / min(whole):.2f} of the solver's (gate 0.8)"
        )
        one, two = ([measured_command(folder, 40, jobs) for _ in range(3)] for jobs in (1, 2))
        faster = min(each.seconds for each in one) / min(each.seconds for each in two)
        # on a busy machine: the time without waiting for a processor, the others sharing their work evenly
        alone = min(each.own for each in one) / min(each.own + each.of_others / 2 for each in two)
        print(
            f"  by command {min(one).seconds:.1f} s, {max(one).peak:.0f} MiB at most (gate 1024); on two processes "
            f"{faster:.2f} times as fast (gate 1.7), by processor time {alone:.2f}"
        )
        long = measured_command(folder, 400, 1)
        print(f"  1,000,000 combinations: {long.seconds:.0f} s, {long.peak:.0f} MiB at most (gate 1024)")
