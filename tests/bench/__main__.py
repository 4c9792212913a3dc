"""Speeds beside their yardsticks, measured in one run: `python -m tests.bench [PART ...]`.

PART is solver, checks, sizing, duty_profile, sweeping, doubt, start_up or script; all of them without. Solver: 10,000
random designs of 20 rows against one evaluation of both streams' properties and films over the same arrays; the time a
design with the number of designs. Checks: what they add to a batch of estimates. Duty profile: a year of hours, reading
included, against the solver. Doubt: a sample and its indices against the solver alone. Script: what an engineer would
write, one design at a time. Start-up: the commands against importing what they cannot do without.
"""

from __future__ import annotations

import os
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from datetime import datetime, timedelta
from pathlib import Path
from typing import Any

import numpy as np

from harvest.model import estimate as estimating
from harvest.model import solution
from harvest.model.batch import Batch
from harvest.model.case import Case
from harvest.model.design import Design, design, maximum_power_load
from harvest.model.driven_flow import driven_batch, driven_sides
from harvest.model.loads import MATCHED, MAXIMUM_POWER
from harvest.model.reading import load_case, read_case
from harvest.model.stack import Load, solve_stack
from harvest.model.stack.solver import CHUNK_CELLS
from harvest.physics.arrays import FloatArray
from harvest.study import doubt as doubting
from harvest.study.doubt import drawn_inputs
from harvest.study.duty import duty, logged_batch
from harvest.study.duty_log import read_duty_log
from harvest.study.size import size
from tests.bench.baseline import DEMO_DESIGNS, solve_plainly
from tests.bench.random_designs import random_batch
from tests.bench.sweeping import sweeping
from tests.independent.stack import Load as ScriptLoad
from tests.translation import case_text

CASES = 10_000
JUDGING = {"assess": estimating, "_without_coolant": solution}
"""What an estimate does for its checks alone, with the module in which it is called."""
REPEATS = 5
EXAMPLE = Path(__file__).parents[2] / "examples" / "genset-jacket-water.toml"


def best(run: Callable[[], object], repeats: int = REPEATS) -> float:
    """Shortest of several runs [s]."""
    times = []
    for _ in range(repeats):
        begun = time.perf_counter()
        run()
        times.append(time.perf_counter() - begun)
    return min(times)


def properties_and_films(made: Design) -> None:
    """One evaluation of all properties and films of both streams over (rows, cases)."""
    problem = made.problem
    chunk = CHUNK_CELLS // problem.rows
    for side in (problem.hot, problem.cold):
        assert side.fluid is not None and side.film is not None
        for first in range(0, problem.cases, chunk):
            which = np.arange(first, min(first + chunk, problem.cases))
            fluid, film = side.fluid.take(which), side.film.take(which)
            temperature = np.ones((problem.rows, 1)) * side.inlet_temperature[which]
            film.conductance(*fluid.film_properties(temperature))
            fluid.density(temperature)
            fluid.enthalpy(temperature)


def solver() -> None:
    """Multiples of one evaluation, and time a design against the number of designs."""
    made = design(random_batch(CASES))
    print(f"{CASES:,} random designs of {made.problem.rows} rows, air to glycol, to 1e-8")
    once = best(lambda: properties_and_films(made))
    print(f"  one evaluation of properties and films   {1e3 * once:7.1f} ms")
    for mode, allowed in ((MATCHED, 10), (MAXIMUM_POWER, 15)):
        state = solve_stack(made.problem, Load(mode))
        seconds = best(lambda mode=mode: solve_stack(made.problem, Load(mode)))  # type: ignore[misc]
        print(
            f"  {mode:38}   {1e3 * seconds:7.1f} ms  {seconds / once:5.1f} times (gate {allowed}), "
            f"{1e6 * seconds / CASES:.1f} us a design, {state.passes.mean():.2f} passes, "
            f"{(~state.converged).sum()} not converged"
        )
    print("  time a design at matched load")
    for count in (10, 100, 1_000, 10_000, 40_000):
        problem = design(random_batch(count)).problem
        seconds = best(lambda problem=problem: solve_stack(problem, Load(MATCHED)), 3)  # type: ignore[misc]
        print(f"    {count:7,} designs  {1e6 * seconds / count:8.1f} us")


def checks() -> None:
    """What all checks add to a batch of estimates, the solution without coolant included."""
    batch = random_batch(CASES)
    spent: dict[str, float] = {}

    def timed(name: str, function: Callable[..., Any]) -> Callable[..., Any]:
        def run(*arguments: Any) -> Any:
            begun = time.perf_counter()
            result = function(*arguments)
            spent[name] = time.perf_counter() - begun
            return result

        return run

    judging = {name: (home, getattr(home, name)) for name, home in JUDGING.items()}
    ratios = []
    try:
        for name, (home, function) in judging.items():
            setattr(home, name, timed(name, function))
        for _ in range(REPEATS):
            begun = time.perf_counter()
            estimating.estimate_batch(batch)
            whole = time.perf_counter() - begun
            ratios.append(whole / (whole - sum(spent.values())))
    finally:
        for name, (home, function) in judging.items():
            setattr(home, name, function)
    print(
        f"checks of {CASES:,} estimates: {1e3 * spent['assess']:.0f} ms, without coolant "
        f"{1e3 * spent['_without_coolant']:.0f} ms of {1e3 * whole:.0f} ms; with over without all checks "
        f"{statistics.median(ratios):.2f} (gate 1.5)"
    )


def script() -> None:
    """The multiple over an engineer's script, with the same answers."""
    print("script with a root finder and CoolProp, one design at a time (20 rows)")
    for name, plain in DEMO_DESIGNS.items():
        for mode in ("matched", "maximum power"):
            load = ScriptLoad(mode)
            made = design(Batch(read_case(case_text(plain, load)), CASES))
            seconds = best(lambda made=made: solve_stack(made.problem, made.load), 2) / CASES  # type: ignore[misc]
            state = solve_stack(design(Batch(read_case(case_text(plain, load)))).problem, made.load.take(np.arange(1)))
            power = float((made.problem.circuit.parallel[0] * state.current * state.string_voltage).sum())
            for backend in ("low-level", "props"):
                theirs = solve_plainly(plain, load, backend)
                print(
                    f"  {name:13}{mode:14}{backend:10} {theirs['seconds']:7.2f} s a design, "
                    f"{theirs['calls']['function_calls']:6,} evaluations, "
                    f"{theirs['calls']['property_values']:8,} values; "
                    f"here {1e6 * seconds:5.1f} us: {theirs['seconds'] / seconds:9,.0f} times; "
                    f"power apart {theirs['generated_power'] / power - 1:+.0e}"
                )


def sizing() -> None:
    """Cost of a search per row against the solver's in a batch, and the memory of a long search."""
    rows, columns, layers = "rows={from=1,to=60}", "columns=[2, 4, 6, 8, 10, 12, 14]", "layers={from=2,to=24,step=2}"
    case = load_case(EXAMPLE, [f"size.{axis}" for axis in (rows, columns, layers)])
    count = 60 * 7 * 12
    batch = Batch(case, CASES, {"stack.rows": np.full(CASES, 30.0)})
    made = design(batch)
    load = maximum_power_load(batch)
    # yardsticks beside each other: the solver alone, and estimates of a batch
    solver_alone = best(lambda: solve_stack(made.problem, load), 3) / (30 * CASES)
    estimates = best(lambda: estimating.estimate_batch(batch), 2) / (30 * CASES)
    seconds = best(lambda: size(case), 3) / (count * 30.5)
    print(
        f"sizing, {count:,} choices of up to 60 rows: {1e9 * seconds:.0f} ns a row; the solver in a batch "
        f"{1e9 * solver_alone:.0f} ns, estimates {1e9 * estimates:.0f} ns; over the solver "
        f"{seconds / solver_alone:.2f} (gate 2)"
    )
    program = (
        "import resource, sys\nfrom harvest import load_case, size\n"
        "case = load_case(sys.argv[1], ['size.rows={from=1,to=100}', 'size.columns={from=2,to=100,step=2}', "
        "'size.layers={from=2,to=80,step=2}'])\nfound = size(case)\n"
        "print(found.choices_tried, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss)"
    )
    begun = time.perf_counter()
    done = subprocess.run([sys.executable, "-c", program, str(EXAMPLE)], capture_output=True, text=True, check=True)
    tried, peak = map(int, done.stdout.split())
    print(f"  {tried:,} choices: {time.perf_counter() - begun:.0f} s, {peak / 1024:.0f} MiB at most (gate 1024)")


def doubt() -> None:
    """A sample with its percentiles, and its indices with their intervals, against the solver alone."""
    for name in ("genset-jacket-water", "genset-exhaust", "workshop-water-blocks"):
        _doubt_of(EXAMPLE.with_name(f"{name}.toml"))


def _doubt_of(path: Path) -> None:
    case = load_case(path)
    inputs, _ = drawn_inputs(case)
    count, samples, base = len(inputs), doubting.SAMPLES, doubting.SAMPLES // doubting.INDEX_SHARE
    asked = base * (count + 2)

    def batch_of(points: FloatArray) -> Batch:
        values = {each.path: each.values(row) for each, row in zip(inputs, points, strict=True)}
        return Batch(case, points.shape[1], values)

    def net_power(points: FloatArray) -> FloatArray:
        return doubting.answered(case, inputs, np.stack([*batch_of(points).varied.values()])).scalars["net_power"]

    def percentiles() -> None:
        values = np.stack([*batch_of(doubting.probabilities(count, samples, 1)).varied.values()])
        found = doubting.answered(case, inputs, values)
        for result in doubting.RESULTS:
            doubting.spread(0.0, found.scalars[result])

    # the solver's share: as many designs of the same case at its own load, made ready beforehand
    batch = batch_of(doubting.probabilities(count, 2 * samples, 5))
    made = design(driven_batch(batch))
    share = best(lambda: solve_stack(made.problem, made.load), 3) / batch.cases
    if driven_sides(batch):  # a flow that follows from a curve is found by solving too
        share += best(lambda: driven_batch(batch), 2) / batch.cases
    of_sample = best(percentiles, 3)
    of_indices = best(lambda: doubting.indices(net_power, count, base, 1), 2)
    print(
        f"doubt of {path.stem}, {count} inputs: {samples:,} cases {of_sample:.2f} s, "
        f"{of_sample / (samples * share):.2f} times the solver's {1e6 * share:.1f} us a case (gate 3); "
        f"indices of {asked:,} cases {of_indices:.2f} s, {of_indices / (asked * share):.2f} times (gate 3); "
        f"the study {best(lambda: doubting.doubt(case), 2):.2f} s"
    )


def duty_profile() -> None:
    """A year of hours from its CSV file against the solver on as many cases, and the time and memory of minutes."""
    program = (
        "import resource, sys, time\nfrom harvest import duty, load_case\ncase = load_case(sys.argv[1])\n"
        "begun = time.perf_counter()\nfound = duty(case, sys.argv[2])\n"
        "print(time.perf_counter() - begun, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss)"
    )
    for name in ("genset-jacket-water", "genset-exhaust"):
        path = EXAMPLE.with_name(f"{name}.toml")
        case = load_case(path)
        with tempfile.TemporaryDirectory() as folder:
            log = Path(folder) / "log.csv"
            log.write_text(random_log(case, 8760, 60), "utf-8")
            values = read_duty_log(case, log).values
            made = design(logged_batch(case, values)[0])
            yardstick = best(lambda made=made: solve_stack(made.problem, made.load))  # type: ignore[misc]
            reading = best(lambda log=log, case=case: read_duty_log(case, log))  # type: ignore[misc]
            seconds = best(lambda log=log, case=case: duty(case, log))  # type: ignore[misc]
            print(
                f"duty, {name}, 8,760 hours: {1e3 * seconds:.0f} ms, reading {1e3 * reading:.0f} ms of it; the solver "
                f"{1e3 * yardstick:.0f} ms; {seconds / yardstick:.2f} times (gate 3)"
            )
            if name == "genset-jacket-water":
                log.write_text(random_log(case, 525_600, 1), "utf-8")
                command = [sys.executable, "-c", program, str(path), str(log)]
                done = subprocess.run(command, capture_output=True, text=True, check=True)
                minutes, peak = map(float, done.stdout.split())
                print(f"  a year of minutes: {minutes:.0f} s, {peak / 1024:.0f} MiB at most (gate 1024)")


def random_log(case: Case, readings: int, minutes: int) -> str:
    """Text of a log around a case's streams, no two readings the same."""
    random = np.random.default_rng(5)
    begin = datetime(2025, 1, 1)
    hot = case.hot.inlet_temperature - 273.15 - random.uniform(0, 15, readings)
    cold = case.cold.inlet_temperature - 273.15 - random.uniform(0, 10, readings)
    rows = [
        f"{(begin + timedelta(minutes=minutes * i)).isoformat()}, {hot[i]:.4f}, {cold[i]:.4f}" for i in range(readings)
    ]
    return "\n".join(["time, hot.inlet_temperature [degC], cold.inlet_temperature [degC]", *rows, ""])


def start_up() -> None:
    """Processor time of commands against the imports that they cannot do without, other programs running or not."""
    python = sys.executable
    # an installed package has its byte code; let the first run write it here too
    environment = {name: value for name, value in os.environ.items() if name != "PYTHONDONTWRITEBYTECODE"}

    def processor_time(command: list[str]) -> float:
        before = resource.getrusage(resource.RUSAGE_CHILDREN)
        subprocess.run(command, capture_output=True, check=True, env=environment)
        after = resource.getrusage(resource.RUSAGE_CHILDREN)
        return after.ru_utime - before.ru_utime + after.ru_stime - before.ru_stime

    commands = {
        "import click": [python, "-c", "import click"],
        "harvest --help": [python, "-m", "harvest", "--help"],
        "import click, numpy": [python, "-c", "import click, numpy"],
        "harvest estimate, second": [python, "-m", "harvest", "estimate", str(EXAMPLE)],
    }
    seconds: dict[str, list[float]] = {name: [] for name in commands}
    for _ in range(15):
        for name, command in commands.items():
            seconds[name].append(processor_time(command))
    middle = {name: statistics.median(times[1:]) for name, times in seconds.items()}
    print("start-up")
    for name, value in middle.items():
        print(f"  {name:26} {value:6.3f} s")
    print(f"  help over import: {middle['harvest --help'] / middle['import click']:.2f} (gate 2)")
    allowed = 1.5 * middle["import click, numpy"] + 0.1
    print(f"  second estimate over 1.5 imports + .1 s: {middle['harvest estimate, second'] / allowed:.2f} (gate 1)")


if __name__ == "__main__":
    for part in (solver, checks, sizing, duty_profile, sweeping, doubt, start_up, script):
        if len(sys.argv) == 1 or part.__name__ in sys.argv[1:]:
            part()
