"""Commands that ask the model many times. Heavy modules are imported in the command that needs them."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from harvest.cli.program import case_arguments, cli, progress_in, read_case_of


@cli.command()
@case_arguments
@click.option("--hot-fouling", default=None, help='Growth in 1000 h on the hot side, such as "1e-4 m^2 K/W".')
@click.option("--cold-fouling", default=None, help="Growth in 1000 h on the cold side.")
@click.option("--fouling-time", default=None, help="Time constant towards a final fouling without growth; 1000 h.")
@click.option("--horizon", default=None, help="How long fouling is followed; 16000 h.")
@click.option("--part-load", multiple=True, metavar="FLOW:TEMPERATURE", help='Shares, such as "0.5:0.8"; repeatable.')
@click.option("--coldest-ambient", default=None, help="Coldest surroundings at standstill; else the site's ambient.")
@click.option("--hot-plate", default="stainless steel", show_default=True, help="Material of the hot plates.")
@click.option("--cold-plate", default="aluminium", show_default=True, help="Material of the cold plates.")
def whatif(case: str, overrides: tuple[str, ...], as_json: bool, **texts: Any) -> None:
    """What can go wrong: load, coolant or a module lost, fouling, part load, standstill, expansion."""
    loaded = read_case_of(case, overrides)
    from harvest.study.what_if import what_if, what_if_options

    found = what_if(loaded, what_if_options(**texts))
    if as_json:
        from harvest.report.documents import json_text, what_if_document

        click.echo(json_text(what_if_document(found)))
    else:
        from harvest.report.what_if_sheet import what_if_report

        click.echo(what_if_report(loaded, found))


@cli.command()
@case_arguments
@click.option("--duty", "log", default=None, help="Log over which the yearly energy is to be best; as duty.log.")
@click.option("--plot", default=None, type=click.Path(dir_okay=False), help="Draw the curve (.svg, .png, .pdf).")
@click.option("--write", default=None, type=click.Path(dir_okay=False), help="Save the best as a case; a new file.")
def size(
    case: str, overrides: tuple[str, ...], as_json: bool, log: str | None, plot: str | None, write: str | None
) -> None:
    """How many modules, and how arranged: the best of every choice that [size] in CASE allows."""
    from harvest.report.files import case_text, refuse_existing, write_new

    loaded = read_case_of(case, overrides)
    if write is not None:
        refuse_existing(Path(write))
    if plot is not None:
        from harvest.report.plots import can_plot, size_figure, write_figure

        can_plot(Path(plot))
    from harvest.study.size import for_yearly_energy
    from harvest.study.size import size as size_case

    if log is not None:
        loaded = for_yearly_energy(loaded)
    found = size_case(loaded, progress_in("choices"), log=log)
    if plot is not None:
        write_figure(Path(plot), size_figure(loaded.title, found))
    if write is not None:
        write_new(Path(write), case_text(found.best_case))
    if as_json:
        from harvest.report.documents import json_text, size_document

        click.echo(json_text(size_document(found)))
    else:
        from harvest.report.size_sheet import size_report

        click.echo(size_report(loaded, found))


@cli.command()
@case_arguments
@click.option("--samples", default=4096, show_default=True, help="Cases drawn for the percentiles, a power of two.")
@click.option("--seed", default=1, show_default=True, help="Seed of the sample; the same one draws the same cases.")
@click.option("--plot", default=None, type=click.Path(dir_okay=False), help="Draw net power and inputs (.svg, ...).")
def doubt(case: str, overrides: tuple[str, ...], as_json: bool, samples: int, seed: int, plot: str | None) -> None:
    """How sure the net power is: its band from the tolerances of the inputs, and which to measure."""
    loaded = read_case_of(case, overrides)
    if plot is not None:
        from harvest.report.plots import can_plot

        can_plot(Path(plot))
    from harvest.study.doubt import doubt as doubt_case

    found = doubt_case(loaded, samples, seed, progress_in("cases"))
    if plot is not None:
        from harvest.report.doubt_plots import doubt_figure
        from harvest.report.plots import write_figure

        write_figure(Path(plot), doubt_figure(loaded.title, found))
    from harvest.report.doubt_sheet import doubt_document, doubt_report

    if as_json:
        from harvest.report.documents import json_text

        click.echo(json_text(doubt_document(found)))
    else:
        click.echo(doubt_report(loaded, found))
