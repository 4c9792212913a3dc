"""The command that solves every combination. Heavy modules are imported where they are needed."""

from __future__ import annotations

import shlex
import sys
from pathlib import Path
from typing import Any

import click

from harvest.cli.program import case_arguments, cli, read_case_of
from harvest.errors import InputError, NoAnswerError


@cli.command()
@case_arguments
@click.option(
    "--vary",
    multiple=True,
    metavar="FIELD=VALUES",
    help='"FIELD=FROM:TO:POINTS", or "FIELD=a, b, c" for numbers or choices, or a list or table as in the case file; '
    "in place of, or beside, the fields in [sweep]. May be repeated.",
)
@click.option("--sample", type=int, default=None, help="Draw so many combinations evenly; FIELD=FROM:TO draws between.")
@click.option("--sequence", default=None, help="Points of a sample: Sobol or Halton.")
@click.option("--seed", type=int, default=None, help="Start of a sample's scrambling.")
@click.option(
    "-o", "--output", default=None, type=click.Path(dir_okay=False), help="Table to write: .csv, .parquet or .nc."
)
@click.option("--full", is_flag=True, help="All results and checks of an estimate, in some six times the time.")
@click.option("--plot", default=None, type=click.Path(dir_okay=False), help="Draw net power (.svg, .png, .pdf).")
@click.option("--jobs", type=click.IntRange(1, 256), default=1, show_default=True, help="Processes.")
@click.option("--scheduler", default=None, metavar="ADDRESS", help="Solve on the workers of a dask scheduler.")
@click.option("--resume", is_flag=True, help="Go on with an interrupted run of the same output.")
def sweep(
    case: str,
    overrides: tuple[str, ...],
    as_json: bool,
    vary: tuple[str, ...],
    sample: int | None,
    sequence: str | None,
    seed: int | None,
    output: str | None,
    full: bool,
    plot: str | None,
    jobs: int,
    scheduler: str | None,
    resume: bool,
) -> None:
    """Every combination of fields' values, or a sample of them, as a table of results.

    Without --output the table goes to standard output as CSV, unless --json or --plot ask for something else.
    """
    loaded = read_case_of(case, overrides)
    from harvest.study.sweep import planned, varied_field, with_axes

    if resume and output is None:
        raise InputError("--resume: goes on with an output; give -o FILE too")
    axes: dict[str, Any] = {}
    for field, axis in map(varied_field, vary):
        if field in axes:
            raise InputError(f"--vary {field}: is given twice; give all its values at once")
        axes[field] = axis
    varied = with_axes(loaded, axes, sample=sample, sequence=sequence, seed=seed, option="--vary")
    plan = planned(varied, full=full)
    from harvest.report.sweep_files import is_finished, print_sweep, sweep_table, write_sweep

    run: dict[str, Any] = {"jobs": jobs, "scheduler": scheduler, "keep": ()}
    if plot is not None:
        from harvest.report.plots import can_plot
        from harvest.report.sweep_plots import plotted_results

        can_plot(Path(plot))
        run["keep"] = plotted_results(plan)
    if sys.stderr.isatty():
        from harvest.report.sweep_sheet import progress_teller

        run["progress"] = progress_teller(plan, lambda line, last: click.echo(line, nl=last, err=True))
    settings = {"--sample": sample, "--sequence": sequence, "--seed": seed, "-o": output}
    command = shlex.join(
        [
            *("harvest", "sweep", case),
            *(part for each in overrides for part in ("--set", each)),
            *(part for each in vary for part in ("--vary", each)),
            *(part for name, value in settings.items() if value is not None for part in (name, str(value))),
            *(["--full"] if full else []),
        ]
    )
    if output is None:
        standard_output = None if as_json or plot is not None else sys.stdout.buffer
        found = print_sweep(plan, standard_output, **run)
    else:
        path = Path(output)
        if is_finished(plan, path, resume=resume):
            if plot is None and not as_json:
                click.echo(f"{path} is finished already; nothing is left to do", err=True)
                return
            click.echo(f"{path} is finished already; solved again for what else is asked", err=True)
            found = print_sweep(plan, None, **run)
        else:
            try:
                found = write_sweep(plan, path, command=command, **run)
            except KeyboardInterrupt:
                click.echo(f"\nharvest: interrupted; finished chunks are kept, --resume goes on with {path}", err=True)
                raise
    if plot is not None and found.valid:
        from harvest.report.plots import write_figure
        from harvest.report.sweep_plots import sweep_figure

        write_figure(Path(plot), sweep_figure(plan, found.kept))
    if as_json:
        from harvest.report.documents import json_text
        from harvest.report.sweep_sheet import sweep_document

        click.echo(json_text(sweep_document(plan, sweep_table(plan, command), found, output)))
    elif output is not None or plot is not None:
        from harvest.report.sweep_sheet import sweep_report

        click.echo(sweep_report(plan, found))
    if not found.valid:
        raise NoAnswerError(f"no combination has an answer: {'; '.join(found.reasons.sums)}")
