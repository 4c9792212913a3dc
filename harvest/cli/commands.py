"""The commands of `harvest`. Heavy modules are imported in the command that needs them."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from harvest.cli.program import case_arguments, cli, read_case_of, read_streams_of, require_answer, standard_input
from harvest.errors import InputError

if TYPE_CHECKING:
    from harvest.study.modules import LoadedModule


STARTERS = Path(__file__).parents[1] / "data" / "starters"


def _start_kinds() -> dict[str, str]:
    """Kinds of starter files with their first comment line."""
    kinds = {}
    for item in sorted(STARTERS.iterdir()):
        if item.suffix == ".toml":
            kinds[item.stem] = item.read_text("utf-8").splitlines()[0].lstrip("# ")
    return kinds


@cli.command()
@case_arguments
@click.option("--figure-of-merit", default=0.8, show_default=True, help="Z T of the modules at the mean temperature.")
def screen(case: str, overrides: tuple[str, ...], as_json: bool, figure_of_merit: float) -> None:
    """What two streams could give at most, what is realistic, and whether a design is worth it.

    CASE needs only [hot] and [cold] without ducts; what else it holds is not judged.
    """
    loaded = read_streams_of(case, overrides)
    from harvest.report.documents import json_text
    from harvest.report.screen_sheet import screen_document, screen_report
    from harvest.study.screen import screen as screen_streams

    answer = screen_streams(loaded, figure_of_merit=figure_of_merit)
    if as_json:
        click.echo(json_text(screen_document(answer)))
    elif answer.valid:
        click.echo(screen_report(loaded, answer))
    require_answer(case, answer)


@cli.command()
@case_arguments
def estimate(case: str, overrides: tuple[str, ...], as_json: bool) -> None:
    """Power, heat, temperatures, losses and checks of one design."""
    loaded = read_case_of(case, overrides)
    from harvest.model.estimate import estimate as estimate_case

    answer = estimate_case(loaded)
    if as_json:
        from harvest.report.documents import estimate_document, json_text

        click.echo(json_text(estimate_document(answer)))
    elif answer.valid:
        from harvest.report.terminal import estimate_report

        click.echo(estimate_report(loaded, answer))
    require_answer(case, answer)


@cli.command()
@case_arguments
def check(case: str, overrides: tuple[str, ...], as_json: bool) -> None:
    """Read and validate a case, and say what is assumed; nothing is computed."""
    loaded = read_case_of(case, overrides)
    from harvest.report.documents import case_document, json_text
    from harvest.report.terminal import check_report

    click.echo(json_text(case_document(loaded)) if as_json else check_report(loaded))


@cli.command()
@click.argument("field", required=False)
@click.option("--json", "as_json", is_flag=True, help="Write one JSON document.")
def explain(field: str | None, as_json: bool) -> None:
    """Meaning, unit, default and allowed range of a FIELD of the case file; without one, list them all."""
    from harvest.model import case as declarations
    from harvest.report.documents import field_documents, json_text

    if as_json:
        click.echo(json_text(field_documents(field)))
    elif field is None:
        from harvest.report.terminal import field_list

        click.echo(field_list())
    else:
        click.echo(declarations.explain(field))


@cli.command()
@click.argument("name")
@click.option(
    "--at", "temperatures", multiple=True, metavar="TEMPERATURE", help='Such as --at "80 degC"; may be repeated.'
)
@click.option(
    "--pressure", default="101.325 kPa", show_default=True, help='Absolute; "2 bar gauge" adds to 101.325 kPa.'
)
@click.option("--mass-fraction", default=None, help="Glycol by mass.")
@click.option("--volume-fraction", default=None, help="Glycol by volume at 20 degC.")
@click.option("--fuel", default=None, help="Fuel of an exhaust gas.")
@click.option("--excess-air-ratio", default=None, help="Air over the air for complete combustion.")
@click.option("--dry-oxygen", default=None, help="Oxygen in the dried exhaust gas.")
@click.option("--intake-humidity", default=None, help="Water over dry air in the intake, by mass.")
@click.option("--json", "as_json", is_flag=True, help="Write one JSON document.")
def fluid(name: str, temperatures: tuple[str, ...], pressure: str, as_json: bool, **composition: str | None) -> None:
    """Properties, range, freezing and boiling of a fluid, with their source.

    NAME is water, "ethylene glycol", "propylene glycol", air or "exhaust gas".
    """
    from harvest.model.fluid import fluid as look_up
    from harvest.report.documents import fluid_document, json_text
    from harvest.report.terminal import fluid_report

    sheet = look_up(
        name, at=temperatures, pressure=pressure, **{key: value for key, value in composition.items() if value}
    )
    click.echo(json_text(fluid_document(sheet)) if as_json else fluid_report(sheet))


@cli.command()
@click.argument("module", metavar="CASE-OR-MODULE")
@click.option("--hot-face", default="150 degC", show_default=True, help="Temperature of the hot face.")
@click.option("--cold-face", default="50 degC", show_default=True, help="Temperature of the cold face.")
@click.option("--set", "overrides", multiple=True, metavar="FIELD=VALUE", help="Replace a field of the module or case.")
@click.option("--coolant", default=None, help="Fluid of the coolant in a steady bench record, such as water.")
@click.option("--hot-mass", default=None, help='Body on the hot side of a transient record, such as "0.35 kg water".')
@click.option("--cold-mass", default=None, help="Body on the cold side of a transient record.")
@click.option("--ambient", default=None, help="Temperature around the bodies of a transient record.")
@click.option("--footprint", default=None, help='Side of a module known by a bench record only, such as "40 mm".')
@click.option(
    "--figure-of-merit",
    default=None,
    type=float,
    help="Z T assumed at the mean temperature of a bench record without heat, for its conductance.",
)
@click.option("--plot", default=None, type=click.Path(dir_okay=False), help="Draw the curves (.svg, .png, .pdf).")
@click.option("--write", default=None, type=click.Path(dir_okay=False), help="Save a module record; a new file.")
@click.option("--json", "as_json", is_flag=True, help="Write one JSON document, not the report.")
def module(
    module: str,
    hot_face: str,
    cold_face: str,
    overrides: tuple[str, ...],
    coolant: str | None,
    hot_mass: str | None,
    cold_mass: str | None,
    ambient: str | None,
    footprint: str | None,
    figure_of_merit: float | None,
    plot: str | None,
    write: str | None,
    as_json: bool,
) -> None:
    """Parameters of a module, where they come from, and its curves between two faces.

    CASE-OR-MODULE is a case file, a module record, the name of a bundled one, a bench record (CSV), or - for a case or
    module record from standard input.
    """
    from harvest.model.fluid import quantity_of
    from harvest.physics.fluids import FluidSpec
    from harvest.report.documents import fit_document, json_text, module_document
    from harvest.report.module_sheet import fit_report, module_report
    from harvest.study.modules import (
        BesideRecord,
        PartlyKnownModule,
        curve_of,
        load_module_or_fit,
        read_module,
        thermal_mass,
    )

    faces = [
        quantity_of(name, text, "temperature") for name, text in (("hot-face", hot_face), ("cold-face", cold_face))
    ]
    beside = BesideRecord(
        FluidSpec(name=coolant) if coolant else None,
        thermal_mass(hot_mass) if hot_mass else None,
        thermal_mass(cold_mass) if cold_mass else None,
        quantity_of("ambient", ambient, "temperature") if ambient else None,
        footprint,
        figure_of_merit,
    )
    if module == "-":
        loaded: LoadedModule | PartlyKnownModule = read_module(
            standard_input(), label="stdin", overrides=overrides, beside=beside
        )
    else:
        loaded = load_module_or_fit(module, overrides=overrides, beside=beside)
    if isinstance(loaded, PartlyKnownModule):
        if plot is not None or write is not None:
            raise InputError(loaded.unknown)
        document = json_text(fit_document(loaded.fit, loaded.unknown)) if as_json else None
        click.echo(document or fit_report(loaded.title, loaded.fit, loaded.unknown))
        return
    curve = curve_of(loaded, *faces)
    if plot is not None:
        from harvest.report.plots import module_figure, write_figure

        write_figure(Path(plot), module_figure(loaded.title, curve, loaded.fit))
    if write is not None:
        from harvest.report.files import record_text, write_new

        write_new(Path(write), record_text(loaded.record))
    click.echo(
        json_text(module_document(curve, loaded.fit)) if as_json else module_report(loaded.title, curve, loaded.fit)
    )


@cli.command()
@click.argument("kind", required=False)
@click.option("-o", "--output", type=click.Path(dir_okay=False), help="File to write; it must not exist yet.")
def start(kind: str | None, output: str | None) -> None:
    """Write a commented case file for a KIND of job; without one, list the kinds."""
    kinds = _start_kinds()
    if kind is None:
        width = max(map(len, kinds))
        click.echo("\n".join(f"{name:{width}}  {text}" for name, text in kinds.items()))
        return
    if kind not in kinds:
        raise InputError(f"start: {kind!r} is no kind of starter file; known are {', '.join(kinds)}")
    text = (STARTERS / f"{kind}.toml").read_text("utf-8")
    if output is None:
        click.echo(text, nl=False)
        return
    from harvest.report.files import write_new

    write_new(Path(output), text)
    click.echo(f"{output} written; next: harvest estimate {output}", err=True)
