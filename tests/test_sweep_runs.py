"""Long sweeps: journal, interruption at any moment, processes that are killed, schedulers, and the command."""

from __future__ import annotations

import json
import os
import random
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result

from harvest.cli import cli
from harvest.errors import InputError, NoAnswerError
from harvest.model.estimate import estimate
from harvest.model.reading import load_case, replace
from harvest.report.sweep_files import is_finished, journal_path, packed, print_sweep, unpacked, write_sweep
from harvest.report.sweep_sheet import sweep_report
from harvest.study.runs import Journal, run_chunks
from harvest.study.sweep import SweepPlan, planned, with_axes

EXHAUST = Path(__file__).parents[1] / "examples" / "genset-exhaust.toml"
AXES = ("--vary", "hot.mass_flow=0.06 kg/s:0.12 kg/s:100", "--vary", "hot.duct.gap=10 mm:30 mm:60")
ONE_RUN = {"run": "this"}


def squares(index: int) -> bytes:
    return str(index * index).encode()


class KillsOnce:
    """A task whose process is killed in its chunk 3 the first time."""

    def __init__(self, mark: Path) -> None:
        self.mark = mark

    def __call__(self, index: int) -> bytes:
        if index == 3 and not self.mark.exists():
            self.mark.touch()
            os.kill(os.getpid(), signal.SIGKILL)
        return squares(index)


def kills_always(index: int) -> bytes:
    os.kill(os.getpid(), signal.SIGKILL)
    return b""


def refuses(index: int) -> bytes:
    raise InputError(f"chunk {index}: refused")


def filled(path: Path, chunks: int) -> Journal:
    journal = Journal(path, ONE_RUN)
    for index in range(chunks):
        journal.add(index, squares(index))
    return journal


def test_a_journal_keeps_what_was_whole_wherever_it_is_cut(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    filled(path, 5).close()
    content = path.read_bytes()
    found = set()
    for length in range(len(content) + 1):
        path.write_bytes(content[:length])
        journal = Journal(path, ONE_RUN)
        kept = len(journal.finished)
        assert list(journal.chunks(kept)) == [squares(index) for index in range(kept)]
        run_chunks(squares, 5, journal)
        assert list(journal.chunks(5)) == [squares(index) for index in range(5)]
        journal.close()
        found.add(kept)
    assert found == {0, 1, 2, 3, 4, 5}


def test_a_journal_distrusts_changed_bytes(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    filled(path, 5).close()
    whole = path.read_bytes()
    last = len(whole) - len(squares(4)) - 20
    for changed in (len(whole) - 1, last, last + 8, last + 15, last + 16):  # content, number, length, its end, check
        content = bytearray(whole)
        content[changed] ^= 1
        path.write_bytes(content)
        journal = Journal(path, ONE_RUN)
        assert sorted(journal.finished) == [0, 1, 2, 3]
        journal.close()


def test_a_journal_of_another_run_or_in_use_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    journal = filled(path, 2)
    with pytest.raises(InputError, match="another run is writing it"):
        Journal(path, ONE_RUN)
    journal.close()
    with pytest.raises(InputError, match="is of another sweep"):
        Journal(path, {"run": "that"})
    path.write_text("something else\n")
    with pytest.raises(InputError, match="is no journal"):
        Journal(path, ONE_RUN)
    with pytest.raises(InputError, match="cannot be written"):
        Journal(tmp_path / "no" / "journal", ONE_RUN)


def test_finished_chunks_are_not_repeated(tmp_path: Path) -> None:
    journal = filled(tmp_path / "journal", 4)
    asked: list[int] = []
    told: list[tuple[int, int]] = []

    def task(index: int) -> bytes:
        asked.append(index)
        return squares(index)

    run_chunks(task, 6, journal, progress=lambda done, of: told.append((done, of)))
    assert asked == [4, 5]
    assert told == [(4, 6), (5, 6), (6, 6)]
    journal.discard()
    assert not (tmp_path / "journal").exists()


def test_a_killed_process_costs_nothing_but_time(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "journal", ONE_RUN)
    run_chunks(KillsOnce(tmp_path / "killed"), 12, journal, jobs=2)
    assert (tmp_path / "killed").exists()
    assert list(journal.chunks(12)) == [squares(index) for index in range(12)]
    journal.close()


def test_processes_that_are_always_killed_end_the_run(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "journal", ONE_RUN)
    with pytest.raises(NoAnswerError, match=r"killed 3 times in a row.*--resume"):
        run_chunks(kills_always, 4, journal, jobs=2)
    with pytest.raises(InputError, match=r"chunk \d: refused"):
        run_chunks(refuses, 4, journal, jobs=2)
    journal.close()


def small_plan(flows: int = 30) -> SweepPlan:
    axes: dict[str, Any] = {
        "hot.mass_flow": {"from": 0.05, "to": 0.1, "points": flows},
        "hot.duct.kind": ["smooth", "plain fins"],
        "stack.layers": [3, 4],
    }
    return planned(with_axes(load_case(EXHAUST), axes))


def test_a_chunk_unpacks_as_it_was() -> None:
    plan = small_plan()
    part = plan.solved(plan.chunk(0))
    again, lines = unpacked(packed(part, b"a,b\n"))
    assert lines == b"a,b\n"
    assert again.problem.tolist() == part.problem.tolist()
    for name, values in part.numbers.items():
        assert values.tobytes() == again.numbers[name].tobytes()


@pytest.mark.parametrize("suffix", [".csv", ".parquet", ".nc"])
def test_files_are_the_same_after_an_interruption(suffix: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("harvest.study.sweep.CHUNK_CELLS", 14 * 10)
    plan = small_plan()
    whole, broken = tmp_path / f"whole{suffix}", tmp_path / f"broken{suffix}"
    found = write_sweep(plan, whole, command="as typed")
    assert (found.combinations, found.valid) == (120, 60)

    def stop(done: int, chunks: int) -> None:
        if done == 5:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        write_sweep(plan, broken, command="as typed", progress=stop)
    assert journal_path(broken).exists() and not broken.exists()
    with pytest.raises(InputError, match="go on with it by --resume"):
        is_finished(plan, broken, resume=False)
    assert not is_finished(plan, broken, resume=True)
    with pytest.raises(InputError, match="is of another sweep"):
        write_sweep(small_plan(31), broken)
    again = write_sweep(plan, broken, command="as typed, with other words")
    assert broken.read_bytes() == whole.read_bytes()
    assert str(again) == str(found)  # some results are NaN, which equals nothing
    assert not journal_path(broken).exists()
    assert is_finished(plan, broken, resume=True)
    with pytest.raises(InputError, match="exists already"):
        is_finished(plan, broken, resume=False)
    with pytest.raises(InputError, match="exists already"):
        is_finished(small_plan(31), broken, resume=True)


def run(*arguments: str) -> Result:
    return CliRunner().invoke(cli, ["sweep", str(EXHAUST), *arguments])


def command(output: Path, *more: str) -> list[str]:
    return [sys.executable, "-m", "harvest", "sweep", str(EXHAUST), *AXES, "-o", str(output), *more]


def test_a_file_that_came_between_is_not_written_over(tmp_path: Path) -> None:
    """A run is stopped, and somebody puts a file in the place of its table meanwhile."""
    path, plan = tmp_path / "out.csv", small_plan(30)
    write_sweep(plan, path)
    Journal(journal_path(path), {"run": plan.digest(), "suffix": ".csv", "command": ""}).close()
    assert not is_finished(plan, path, resume=True)
    path.with_name("out.csv-metadata.json").unlink()
    path.write_text("of somebody else")
    with pytest.raises(InputError, match=r"out\.csv: exists already"):
        is_finished(plan, path, resume=True)
    assert path.read_text() == "of somebody else"


def test_a_finished_sweep_still_gives_its_plot_and_document(tmp_path: Path) -> None:
    path, plot = tmp_path / "out.csv", tmp_path / "out.svg"
    few = ["--vary", "hot.mass_flow=0.08 kg/s:0.1 kg/s:3", "-o", str(path), "--resume"]
    first = run(*few, "--json")
    content = path.read_bytes()
    again = run(*few, "--json", "--plot", str(plot))
    assert (first.exit_code, again.exit_code) == (0, 0)
    assert json.loads(again.stdout) == json.loads(first.stdout)
    assert "is finished already; solved again" in again.stderr
    assert "the case" in plot.read_text()
    assert path.read_bytes() == content
    assert "nothing is left to do" in run(*few).stderr


@pytest.mark.parametrize("full", [False, True])
def test_the_most_net_power_is_told_with_and_without_what_is_refused(full: bool) -> None:
    """Against single estimates of each combination: their results and limits, or their failed checks."""
    axes = {"hot.mass_flow": [0.06, 0.1, 0.16], "hot.inlet_temperature": [650.0, 720.0, 850.0]}
    case = load_case(EXHAUST)
    singles = [
        estimate(replace(case, {"hot.mass_flow": flow, "hot.inlet_temperature": hot}))
        for flow in axes["hot.mass_flow"]
        for hot in axes["hot.inlet_temperature"]
    ]
    limit, drop = case.module.maximum_hot_face_temperature, case.limits.back_pressure
    assert limit is not None and drop is not None
    kept = [
        not any(check.status == "fail" for check in each.checks)
        if full
        else each.hottest_face_temperature <= limit and each.hot_pressure_drop <= drop
        for each in singles
    ]
    plan = planned(with_axes(case, axes), full=full)
    found = print_sweep(plan, None)
    assert 0 < sum(kept) < len(kept)
    assert found.within_limits == sum(kept)
    best = max(one.net_power for one in singles)
    within = max(one.net_power for one, is_kept in zip(singles, kept, strict=True) if is_kept)
    assert best > 1.1 * within
    assert found.best["net_power"] == pytest.approx(best, rel=1e-12)
    assert found.best_within_limits["net_power"] == pytest.approx(within, rel=1e-12)
    report = sweep_report(plan, found)
    for words in (
        ("there a check fails", "Most net power without a failed check: ")
        if full
        else ("there it is beyond a limit of the case", "Most net power within the limits of the case: ")
    ):
        assert words in report
    assert f"{sum(kept)} of 9 combinations with an answer are with" in report
    assert f"{within:.1f} W" in report


def test_a_sweep_of_nothing_but_broken_limits_says_so() -> None:
    case = load_case(EXHAUST, ['limits.back_pressure="1 Pa"'])
    plan = planned(with_axes(case, {"hot.mass_flow": [0.08, 0.09]}))
    found = print_sweep(plan, None)
    assert (found.valid, found.within_limits, found.best_within_limits) == (2, 0, {})
    assert "None of 2 combinations with an answer are within the limits of the case" in sweep_report(plan, found)


def test_a_field_that_is_varied_twice_is_refused() -> None:
    told = run("--vary", "hot.mass_flow=0.1 kg/s, 0.2 kg/s", "--vary", "hot.mass_flow=0.3 kg/s")
    assert told.exit_code == 2
    assert "--vary hot.mass_flow: is given twice; give all its values at once" in told.stderr


def killed_until_done(output: Path, waits: Iterator[float], *more: str) -> int:
    """Kill a sweep at moments, resume it each time, and let the last one end; how often it was killed."""
    kills = 0
    for wait in waits:
        running = subprocess.Popen(command(output, "--resume", *more), stderr=subprocess.PIPE, stdout=subprocess.PIPE)
        try:
            running.wait(wait)
        except subprocess.TimeoutExpired:
            running.kill()
            kills += 1
        running.communicate()
        if running.returncode == 0:
            break
    done = subprocess.run(command(output, "--resume", *more), capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    return kills


def test_a_sweep_killed_at_some_moments_ends_as_one_without_a_break(tmp_path: Path) -> None:
    whole, broken = tmp_path / "whole.csv", tmp_path / "broken.csv"
    subprocess.run(command(whole), check=True, capture_output=True)
    assert killed_until_done(broken, iter([0.5, 0.45, 0.55])) >= 2
    assert broken.read_bytes() == whole.read_bytes()
    assert sorted(path.name for path in tmp_path.iterdir() if path.suffix != ".json") == ["broken.csv", "whole.csv"]


@pytest.mark.slow
@pytest.mark.parametrize("more", [(), ("--jobs", "2")], ids=["one", "two"])
def test_a_sweep_killed_at_twenty_random_moments(tmp_path: Path, more: tuple[str, ...]) -> None:
    whole = tmp_path / "whole.csv"
    subprocess.run(command(whole, *more), check=True, capture_output=True)
    dice, kills, runs = random.Random(6), 0, 0
    while kills < 20:
        broken = tmp_path / f"broken{runs}.csv"
        runs += 1
        kills += killed_until_done(broken, iter([dice.uniform(0.3, 1.1) for _ in range(6)]), *more)
        assert broken.read_bytes() == whole.read_bytes()
        assert not journal_path(broken).exists()


def test_two_processes_write_the_same_bytes(tmp_path: Path) -> None:
    for name, jobs in (("one.csv", "1"), ("two.csv", "2")):
        told = run(*AXES, "-o", str(tmp_path / name), "--jobs", jobs)
        assert told.exit_code == 0, told.output
    assert (tmp_path / "one.csv").read_bytes() == (tmp_path / "two.csv").read_bytes()


def test_an_interrupted_sweep_says_how_to_go_on(tmp_path: Path) -> None:
    path = tmp_path / "out.csv"
    more = ["--vary", "hot.inlet_temperature=400 degC:440 degC:40"]
    running = subprocess.Popen(command(path, *more), stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    wait_for(lambda: journal_path(path).exists() and journal_path(path).stat().st_size > 10_000)
    running.send_signal(signal.SIGINT)
    out, told = running.communicate(timeout=30)
    assert (running.returncode, out) == (130, "")
    assert f"interrupted; finished chunks are kept, --resume goes on with {path}" in told
    assert sorted(each.name for each in tmp_path.iterdir()) == ["out.csv.journal"]


def wait_for(happened: Callable[[], bool], seconds: float = 30.0) -> None:
    end = time.monotonic() + seconds
    while not happened():
        assert time.monotonic() < end
        time.sleep(0.02)


@contextmanager
def cluster(folder: Path) -> Iterator[tuple[str, list[subprocess.Popen[bytes]]]]:
    """A scheduler with two workers, each a process of its own."""
    port = random.Random(os.getpid()).randrange(20_000, 40_000)
    address = f"tcp://127.0.0.1:{port}"
    begun: list[subprocess.Popen[bytes]] = []

    def begin(module: str, *arguments: str) -> subprocess.Popen[bytes]:
        with (folder / f"{len(begun)}.log").open("wb") as log:
            process = subprocess.Popen(
                [sys.executable, "-m", f"distributed.cli.{module}", *arguments, "--no-dashboard"],
                stdout=log,
                stderr=log,
            )
        begun.append(process)
        return process

    try:
        begin("dask_scheduler", "--host", "127.0.0.1", "--port", str(port))
        workers = [
            begin("dask_worker", address, "--nthreads", "1", "--no-nanny", "--local-directory", str(folder))
            for _ in range(2)
        ]
        wait_for(lambda: all("Registered to" in (folder / f"{each}.log").read_text() for each in (1, 2)))
        yield address, workers
    finally:
        for process in begun:
            process.kill()
            process.wait()


@pytest.mark.slow
def test_a_scheduler_loses_nothing_with_a_worker(tmp_path: Path) -> None:
    more = ["--vary", "hot.inlet_temperature=400 degC:440 degC:10"]
    whole, spread = tmp_path / "whole.csv", tmp_path / "spread.csv"
    subprocess.run(command(whole, *more), check=True, capture_output=True)
    with cluster(tmp_path) as (address, workers):
        running = subprocess.Popen(command(spread, *more, "--scheduler", address), stderr=subprocess.PIPE)
        wait_for(lambda: journal_path(spread).exists() and journal_path(spread).stat().st_size > 1_000_000)
        workers[0].kill()
        assert journal_path(spread).exists()
        _, told = running.communicate(timeout=120)
        assert running.returncode == 0, told
    assert spread.read_bytes() == whole.read_bytes()


def test_the_command_tells_what_it_found(tmp_path: Path) -> None:
    path = tmp_path / "out.csv"
    told = run("--vary", "hot.mass_flow=0.06 kg/s:0.12 kg/s:3", "--vary", "stack.layers=3, 4", "-o", str(path))
    assert told.exit_code == 0, told.output
    assert "6 combinations, every one of the grid; 3 with an answer." in told.stdout
    assert "3: stack.layers: ducts that serve two layers need an even number of layers" in told.stdout
    assert told.stderr == ""
    lines = path.read_text().splitlines()
    assert lines[0].startswith("hot.mass_flow [kg/s],stack.layers,generated_power [W],")
    assert lines[0].endswith(",valid,problem")
    assert len(lines) == 7
    document = json.loads((tmp_path / "out.csv-metadata.json").read_text())
    notes = document["notes"][0]
    assert notes["command"].startswith("harvest sweep ") and notes["command"].endswith(f"-o {path}")
    assert 'fuel = "diesel"' in notes["case"] and len(notes["case_hash"]) == 64
    assert notes["source"].startswith("harvest ")
    titles = [column["titles"] for column in document["tableSchema"]["columns"]]
    assert ",".join(titles) == lines[0]
    again = run("--vary", "hot.mass_flow=0.06 kg/s:0.12 kg/s:3", "--vary", "stack.layers=3, 4")
    assert again.stdout == path.read_text()
    as_json = run("--vary", "hot.mass_flow=0.06 kg/s:0.12 kg/s:3", "--json")
    found = json.loads(as_json.stdout)
    assert (found["combinations"], found["valid"], found["units"]["net_power"]) == (3, 3, "W")
    assert found["best"]["hot.mass_flow"] == 0.12


def test_a_sweep_without_any_answer_says_so(tmp_path: Path) -> None:
    path, plot = tmp_path / "out.csv", tmp_path / "map.svg"
    told = run("--vary", "stack.layers=3, 5", "-o", str(path), "--plot", str(plot))
    assert told.exit_code == 1
    assert "no combination has an answer: stack.layers: ducts that serve two layers need an even number" in told.stderr
    assert len(path.read_text().splitlines()) == 3 and not plot.exists()


def test_the_case_written_beside_the_table_gives_it_again(tmp_path: Path) -> None:
    first, second, case = tmp_path / "first.csv", tmp_path / "second.csv", tmp_path / "again.toml"
    run("--set", "stack.rows=14", "--vary", "hot.mass_flow=0.06 kg/s:0.12 kg/s:3", "-o", str(first))
    case.write_text(json.loads((tmp_path / "first.csv-metadata.json").read_text())["notes"][0]["case"])
    told = CliRunner().invoke(cli, ["sweep", str(case), "-o", str(second)])
    assert told.exit_code == 0, told.output
    assert first.read_bytes() == second.read_bytes()


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ((), "sweep: nothing is varied; write [sweep]"),
        (("--vary", "hot.mass_flow=1:2:3"), "--vary: sweep.hot.mass_flow: 1 has no unit"),
        (("--vary", "hot.mass_flow=1 kg/s", "-o", "out.xls"), "out.xls: a table ends in .csv, .parquet, .nc"),
        (("--vary", "hot.mass_flow=1 kg/s", "-o", "no/out.csv"), "there is no folder no"),
        (("--vary", "hot.mass_flow=1 kg/s", "--plot", "a.bmp"), "a.bmp: a plot ends in"),
        (("--vary", "hot.mass_flow=1 kg/s", "--plot", "a.svg"), "--plot: draws net power over one or two numbers"),
        (("--vary", "hot.mass_flow=1 kg/s", "--resume"), "--resume: goes on with an output"),
        (("--vary", "hot.mass_flow=1 kg/s", "--sample", "0"), "sweep.sample: 0 is not possible"),
        (("--vary", "hot.mass_flow=1 kg/s", "--sequence", "Foo"), "sweep.sequence"),
        (("--vary", "hot.mass_flow=1 kg/s:2 kg/s", "--sample", "8", "--plot", "a.svg"), "a sample has no grid"),
        (("--vary", "hot.mass_flow=1 kg/s", "--jobs", "0"), "--jobs"),
        (
            ("--vary", "hot.mass_flow=1 kg/s", "-o", "out.csv", "--scheduler", "tcp://127.0.0.1:9"),
            "--scheduler tcp://127.0.0.1:9: no scheduler answers there",
        ),
    ],
)
def test_what_is_given_wrongly_is_named(
    arguments: tuple[str, ...], message: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("harvest.study.runs.SCHEDULER_PATIENCE", 0.5)
    monkeypatch.chdir(tmp_path)
    told = run(*arguments)
    assert told.exit_code == 2, told.output
    assert message in told.stderr
    assert not list(tmp_path.glob("out.csv"))


def test_a_wrong_call_loads_nothing_heavy() -> None:
    program = (
        "import sys\nfrom click.testing import CliRunner\nfrom harvest.cli import cli\n"
        f"told = CliRunner().invoke(cli, ['sweep', {str(EXHAUST)!r}, '--vary', 'hot.mas_flow=1 kg/s'])\n"
        "assert told.exit_code == 2, told.output\n"
        "print({'scipy', 'CoolProp', 'matplotlib', 'pint', 'pyarrow', 'xarray', 'distributed'} & set(sys.modules))"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "set()"


def test_a_best_within_the_limits_is_told_once() -> None:
    case = load_case(EXHAUST, ['limits.back_pressure="6 kPa"'])
    plan = planned(with_axes(case, {"hot.mass_flow": [0.08, 0.09]}))
    found = print_sweep(plan, None)
    assert found.within_limits == found.valid == 2
    report = sweep_report(plan, found)
    assert report.count("Most net power") == 1
    assert "beyond a limit" not in report
