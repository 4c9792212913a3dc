"""`harvest duty`: one design over a log of its streams."""

from __future__ import annotations

import shlex
from pathlib import Path

import click

from harvest.cli.program import case_arguments, cli, progress_in, read_case_of, standard_input

OPTIONS = {"drives": "duty.drives", "longest_hold": "duty.longest_hold", "time_zone": "duty.time_zone"}


@cli.command()
@case_arguments
@click.argument("log", required=False)
@click.option("--drives", default=None, help='"when worth it" or "always on"; as duty.drives.')
@click.option("--longest-hold", default=None, help='How long a reading holds at most, such as "3 h".')
@click.option("--time-zone", default=None, help='Of time stamps without an offset, such as "Europe/Berlin".')
@click.option("--strict", is_flag=True, help="Refuse a log with bad readings.")
@click.option(
    "-o",
    "--output",
    default=None,
    type=click.Path(dir_okay=False),
    help="Table to write, a row a reading: .csv, .parquet or .nc; a new file.",
)
@click.option("--plot", default=None, type=click.Path(dir_okay=False), help="Draw curve and course (.svg, .png, .pdf).")
def duty(
    case: str,
    overrides: tuple[str, ...],
    as_json: bool,
    log: str | None,
    strict: bool,
    output: str | None,
    plot: str | None,
    **options: str | None,
) -> None:
    """Energy over a LOG of the streams, or over duty.log of CASE: a year's kilowatt-hours, hours on and off.

    LOG is a CSV file, or - for standard input, with a column time (stamps, or [h]) or hours [h] and columns named by
    fields of the case, such as "hot.inlet_temperature [degC]".
    """
    settings = tuple(f"{OPTIONS[name]}={value}" for name, value in options.items() if value is not None)
    loaded = read_case_of(case, (*overrides, *settings))
    if output is not None:
        from harvest.report.files import refuse_existing
        from harvest.report.tables import table_suffix

        table_suffix(Path(output))
        refuse_existing(Path(output))
    if plot is not None:
        from harvest.report.plots import can_plot

        can_plot(Path(plot))
    from harvest.study.duty import duty as over_log
    from harvest.study.duty_log import LARGEST_LOG

    found = over_log(
        loaded,
        standard_input(LARGEST_LOG) + "\n" if log == "-" else log,
        strict=strict,
        progress=progress_in("conditions"),
    )
    if output is not None:
        from harvest.report.duty_files import write_duty

        given = [part for each in (*overrides, *settings) for part in ("--set", each)]
        write_duty(Path(output), loaded, found, shlex.join(["harvest", "duty", case, *([log] if log else []), *given]))
    if plot is not None:
        from harvest.report.duty_plots import duty_figure
        from harvest.report.plots import write_figure

        write_figure(Path(plot), duty_figure(loaded.title, found))
    if as_json:
        from harvest.report.documents import duty_document, json_text

        click.echo(json_text(duty_document(found)))
    else:
        from harvest.report.duty_sheet import duty_report

        click.echo(duty_report(loaded, found))
