"""A sweep from its plan to a file or a labelled data set: chunks, journal, whole files, and what was found."""

from __future__ import annotations

import json
import struct
from collections import Counter
from collections.abc import Generator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import IO, TYPE_CHECKING, Any

import numpy as np

from harvest.errors import InputError
from harvest.model.case import DECLARATIONS, Case, case_hash
from harvest.physics.arrays import BoolArray, FloatArray
from harvest.quantities import unit_of
from harvest.report.files import refuse_existing
from harvest.report.tables import (
    FLAG,
    NUMBER,
    TEXT,
    WHOLE,
    Column,
    Columns,
    Table,
    csv_head,
    csv_rows,
    data_set,
    read_about,
    table_suffix,
    write_csv,
    write_netcdf,
    write_parquet,
)
from harvest.study.reasons import Reasons
from harvest.study.runs import Journal, Progress, run_chunks
from harvest.study.sweep import SweepPart, SweepPlan, is_structure, planned, with_axes
from harvest.version import VERSION

if TYPE_CHECKING:
    import xarray

JOURNAL_SUFFIX = ".journal"
MOST_REASONS = 20
"""Reasons of combinations without an answer that are told; the rest are counted together."""
_LENGTHS = struct.Struct("<QQ")


@dataclass
class SweepFindings:
    """What is kept of a sweep beside its table: counts, the most net power, and whole columns that were asked for.

    `within_limits` counts combinations with an answer that keep the limits of the case, or fail no check where all are
    made, and `best_within_limits` is the one of those with the most net power.
    """

    combinations: int
    valid: int = 0
    within_limits: int = 0
    reasons: Reasons[int] = field(default_factory=lambda: Reasons(MOST_REASONS))
    best: dict[str, Any] = field(default_factory=dict)
    best_within_limits: dict[str, Any] = field(default_factory=dict)
    kept: dict[str, FloatArray] = field(default_factory=dict)

    def add(self, columns: Columns, places: Any, refused: BoolArray) -> None:
        """Count a part of the table, of which some is beyond a limit."""
        problem, answered = columns["problem"], columns["valid"]
        kept = answered & ~refused
        self.valid += int(answered.sum())
        self.within_limits += int(kept.sum())
        for text, count in Counter(problem[~answered].tolist()).items():
            self.reasons.add(text, count)
        self.best = _better(self.best, columns, answered)
        self.best_within_limits = _better(self.best_within_limits, columns, kept)
        for name, whole in self.kept.items():
            whole[places] = columns[name]


def _better(best: dict[str, Any], columns: Columns, among: BoolArray) -> dict[str, Any]:
    """Row with the most net power of the best one so far and those `among` a part of the table."""
    if not among.any():
        return best
    place = int(np.argmax(np.where(among, columns["net_power"], -np.inf)))
    if best and columns["net_power"][place] <= best["net_power"]:
        return best
    return {name: _plain(values[place]) for name, values in columns.items()}


def _plain(value: Any) -> Any:
    return value.item() if isinstance(value, np.generic) else value


def sweep_table(plan: SweepPlan, command: str) -> Table:
    """Columns of a sweep's table: the varied fields, the results, whether there is an answer, and why not."""
    columns = [Column(path, DECLARATIONS[path].meaning, *_unit_and_form(plan, path)) for path in plan.axes]
    columns += [Column(name, item["meaning"], unit_of(item["kind"])) for name, item in plan.results.items()]
    columns += [Column(name, meaning, form=TEXT) for name, meaning in plan.check_texts.items()]
    columns.append(Column("valid", "Whether the combination has an answer.", form=FLAG))
    columns.append(Column("problem", "Why the combination has no answer.", form=TEXT))
    about = {
        "title": plan.case.title,
        "source": f"harvest {VERSION}",
        "case_hash": case_hash(plan.case),
        "command": command,
        "case": _typed_text(plan.case),
        "run": plan.digest(),
    }
    dimensions = {} if plan.sampled else {path: _along(plan, path) for path in plan.axes}
    return Table(tuple(columns), plan.count, about, dimensions, "combination")


def _unit_and_form(plan: SweepPlan, path: str) -> tuple[str, str]:
    declaration = DECLARATIONS[path]
    if plan.axes[path].labels:
        return "", TEXT
    if declaration.form == "integer":
        return "", WHOLE
    return unit_of(declaration.kind), NUMBER


def _along(plan: SweepPlan, path: str) -> Any:
    """Values of a grid's axis, or their texts."""
    axis = plan.axes[path]
    if axis.labels:
        return plan.labels(path)
    return np.array(axis.values, dtype=np.int64 if DECLARATIONS[path].form == "integer" else np.float64)


def _typed_text(case: Case) -> str:
    """The case as it was typed, in TOML."""
    import tomli_w

    return tomli_w.dumps(case.given)


def sweep_columns(plan: SweepPlan, index: int, part: SweepPart) -> Columns:
    """Columns of a chunk."""
    values: dict[str, Any] = dict(plan.at(plan.chunk(index)))
    for path, axis in plan.axes.items():
        if is_structure(path, axis):
            values[path] = _along(plan, path)[values[path]]
        elif DECLARATIONS[path].form == "integer":
            values[path] = values[path].astype(np.int64)
    return {**values, **part.numbers, **part.texts, "valid": part.problem == "", "problem": part.problem}


@dataclass(frozen=True)
class ChunkTask:
    """Solves a chunk of a plan, and writes its lines where they are wanted, wherever it is called."""

    plan: SweepPlan
    table: Table
    as_csv: bool

    def __call__(self, index: int) -> bytes:
        """Return the chunk packed."""
        part = self.plan.solved(self.plan.chunk(index))
        lines = csv_rows(self.table, sweep_columns(self.plan, index, part)) if self.as_csv else ""
        return packed(part, lines.encode())


def packed(part: SweepPart, lines: bytes = b"") -> bytes:
    """Pack a chunk's results and its lines into bytes."""
    texts: dict[str, Any] = {"problem": part.problem, **part.texts}
    words = {name: list(dict.fromkeys(values.tolist())) for name, values in texts.items()}
    numbers = {name: {word: number for number, word in enumerate(known)} for name, known in words.items()}
    codes = [np.array([numbers[name][word] for word in values], dtype="<i4") for name, values in texts.items()]
    head = json.dumps([len(part.problem), list(part.numbers), words]).encode()
    matrix = np.stack(list(part.numbers.values())).astype("<f8")
    return b"".join(
        (_LENGTHS.pack(len(head), len(lines)), head, matrix.tobytes(), *(each.tobytes() for each in codes), lines)
    )


def unpacked(content: bytes) -> tuple[SweepPart, bytes]:
    """Results and lines of a packed chunk."""
    head_length, lines_length = _LENGTHS.unpack_from(content)
    after = _LENGTHS.size + head_length
    cases, names, words = json.loads(content[_LENGTHS.size : after])
    matrix = np.frombuffer(content, "<f8", cases * len(names), after).reshape(len(names), cases)
    after += matrix.nbytes
    texts = {}
    for name, known in words.items():
        codes = np.frombuffer(content, "<i4", cases, after)
        texts[name] = np.array(known, dtype=object)[codes]
        after += codes.nbytes
    problem = texts.pop("problem")
    return SweepPart(dict(zip(names, matrix, strict=True)), texts, problem), content[len(content) - lines_length :]


def journal_path(path: Path) -> Path:
    """File beside an unfinished table that keeps its finished chunks."""
    return path.with_name(path.name + JOURNAL_SUFFIX)


def is_finished(plan: SweepPlan, path: Path, *, resume: bool) -> bool:
    """Whether a run to go on with is finished already; raises InputError where a file is in the way."""
    table_suffix(path)
    journal = journal_path(path)
    if journal.exists() and not resume:
        raise InputError(f"{journal}: is of an unfinished run; go on with it by --resume, or remove it")
    if resume and path.exists() and read_about(path).get("run") == plan.digest():
        # a run that was stopped after its table was written still has its journal, and writes the same again
        return not journal.exists()
    refuse_existing(path)
    return False


def write_sweep(
    plan: SweepPlan,
    path: Path,
    *,
    command: str = "",
    keep: tuple[str, ...] = (),
    jobs: int = 1,
    scheduler: str | None = None,
    progress: Progress | None = None,
) -> SweepFindings:
    """Solve a sweep and write its table in the format of the suffix, going on with the journal of an unfinished run.

    `keep` names results that are wanted whole. The file appears whole at the end; until then finished chunks stand in
    its journal. Raises InputError where a file cannot be written or the journal is of another sweep.
    """
    suffix = table_suffix(path)
    table = sweep_table(plan, command)
    journal = Journal(journal_path(path), {"run": table.about["run"], "suffix": suffix, "command": command})
    try:
        # an interrupted run keeps its first command, so that its file is the same as that of a run without a break
        table = sweep_table(plan, journal.identity["command"])
        run_chunks(
            ChunkTask(plan, table, suffix == ".csv"),
            plan.chunks,
            journal,
            jobs=jobs,
            scheduler=scheduler,
            progress=progress,
        )
        found = _findings(plan, keep)
        if suffix == ".csv":
            write_csv(path, table, (lines for _, lines in _parts(plan, journal, found)))
        else:
            write = write_parquet if suffix == ".parquet" else write_netcdf
            write(path, table, (columns for columns, _ in _parts(plan, journal, found)))
        journal.discard()
    finally:
        journal.close()
    return found


def print_sweep(
    plan: SweepPlan,
    file: IO[bytes] | None,
    *,
    keep: tuple[str, ...] = (),
    jobs: int = 1,
    scheduler: str | None = None,
    progress: Progress | None = None,
) -> SweepFindings:
    """Solve a sweep and write its CSV to `file` piece by piece; without one, only the findings are made."""
    table = sweep_table(plan, "")
    journal = Journal(None, {"run": table.about["run"]})
    try:
        task = ChunkTask(plan, table, file is not None)
        run_chunks(task, plan.chunks, journal, jobs=jobs, scheduler=scheduler, progress=progress)
        found = _findings(plan, keep)
        if file is not None:
            file.write(csv_head(table).encode())
        for _, lines in _parts(plan, journal, found):
            if file is not None:
                file.write(lines)
    finally:
        journal.close()
    return found


def _findings(plan: SweepPlan, keep: tuple[str, ...]) -> SweepFindings:
    return SweepFindings(plan.count, kept={name: np.full(plan.count, np.nan) for name in keep})


def _parts(plan: SweepPlan, journal: Journal, found: SweepFindings) -> Generator[tuple[Columns, bytes], None, None]:
    """Columns and lines of all chunks in the order of the table, counted on the way."""
    for index, content in enumerate(journal.chunks(plan.chunks)):
        part, lines = unpacked(content)
        columns = sweep_columns(plan, index, part)
        places = plan.chunk(index)
        found.add(columns, places, plan.refused(places, part))
        yield columns, lines


def sweep(
    case: Case,
    axes: Mapping[str, Any] | None = None,
    *,
    sample: int | None = None,
    sequence: str | None = None,
    seed: int | None = None,
    full: bool = False,
    jobs: int = 1,
    progress: Progress | None = None,
) -> xarray.Dataset:
    """Solve every combination of fields' values, or a sample of them, as a labelled data set in memory.

    Parameters: `axes`, values by field beside those in [sweep] of the case: lists, arrays of SI numbers, or mappings
    with from, to and points or step; `sample`, how many combinations to draw, by `sequence` ("Sobol" or "Halton") and
    `seed`; `full`, all results and checks of an estimate; `jobs`, processes, for which a script needs the usual guard
    of its main part; `progress`, told how many of the chunks are done. A grid has its fields as dimensions, a sample
    `combination`. A combination without an answer has `valid` false, says why in `problem`, and is NaN. Raises
    CaseError or InputError for what cannot be swept.
    """
    plan = planned(with_axes(case, axes, sample=sample, sequence=sequence, seed=seed), full=full)
    table = sweep_table(plan, "")
    journal = Journal(None, {"run": table.about["run"]})
    try:
        run_chunks(ChunkTask(plan, table, False), plan.chunks, journal, jobs=jobs, progress=progress)
        found = _findings(plan, ())
        parts = [columns for columns, _ in _parts(plan, journal, found)]
    finally:
        journal.close()
    return data_set(table, {name: np.concatenate([part[name] for part in parts]) for name in parts[0]})
