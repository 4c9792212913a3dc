"""The commands of `harvest`. Heavy modules are imported in the command that needs them."""

from __future__ import annotations

import functools
import gc
import os
import sys
from collections.abc import Callable
from importlib import resources
from pathlib import Path
from typing import TYPE_CHECKING, Any, NoReturn

import click

from harvest.errors import CaseError, HarvestError, InputError, NoAnswerError
from harvest.version import VERSION

if TYPE_CHECKING:
    from harvest.model.case import Case, Streams
    from harvest.study.modules import LoadedModule

INTERRUPTED = 130


class _Group(click.Group):
    """Turns the package's errors into lines on stderr and an exit code."""

    def invoke(self, context: click.Context) -> Any:
        try:
            result = super().invoke(context)
            sys.stdout.flush()
            return result
        except HarvestError as error:
            for line in str(error).splitlines():
                click.echo(f"harvest: {line}", err=True)
            context.exit(error.exit_code)
        except KeyboardInterrupt:
            context.exit(INTERRUPTED)
        except OSError as error:
            # nothing more can be said on standard output: its reader has gone (harvest ... | head), or its disk is full
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
            if isinstance(error, BrokenPipeError):
                context.exit(0)
            click.echo(f"harvest: standard output: {error.strerror}", err=True)
            context.exit(1)


def _start_kinds() -> dict[str, str]:
    """Kinds of starter files with their first comment line."""
    folder = resources.files("harvest") / "data" / "starters"
    kinds = {}
    for item in sorted(folder.iterdir(), key=lambda each: each.name):
        if item.name.endswith(".toml"):
            kinds[item.name.removesuffix(".toml")] = item.read_text("utf-8").splitlines()[0].lstrip("# ")
    return kinds


def _case_arguments(command: Callable[..., Any]) -> Callable[..., Any]:
    """Add what every command on a case takes."""

    @click.argument("case", metavar="CASE")
    @click.option(
        "--set",
        "overrides",
        multiple=True,
        metavar="FIELD=VALUE",
        help='Replace a field of the case, such as --set hot.mass_flow="0.4 kg/s". May be repeated.',
    )
    @click.option("--json", "as_json", is_flag=True, help="Write one JSON document, not the report.")
    @functools.wraps(command)
    def with_arguments(*positional: Any, **named: Any) -> Any:
        return command(*positional, **named)

    return with_arguments


def _read(case: str, overrides: tuple[str, ...]) -> Case:
    from harvest.model.reading import load_case, read_case

    if case == "-":
        return read_case(_standard_input(), overrides, label="stdin", folder=Path())
    return load_case(Path(case), overrides)


def _read_streams(case: str, overrides: tuple[str, ...]) -> Streams:
    from harvest.model.reading import load_streams, read_streams

    if case == "-":
        return read_streams(_standard_input(), overrides, label="stdin", folder=Path())
    return load_streams(Path(case), overrides)


def _with_line(case: str, fault: str) -> str:
    """Name the file and line of the field that a fault begins with, where the case is a file that gives it."""
    from harvest.model.case_text import bounded_text, key_lines

    if case == "-":
        return f"stdin: {fault}"
    line = key_lines(bounded_text(Path(case))).get(fault.partition(":")[0])
    return f"{case}:{line}: {fault}" if line else f"{case}: {fault}"


def _standard_input() -> str:
    from harvest.model.case_text import LARGEST_FILE

    content = sys.stdin.buffer.read(LARGEST_FILE + 1)
    if len(content) > LARGEST_FILE:
        raise InputError(f"stdin: more than {LARGEST_FILE} bytes; a case file is smaller")
    try:
        return content.decode("utf-8")
    except UnicodeDecodeError:
        raise InputError("stdin: not UTF-8 text; save the case file as UTF-8") from None


@click.group(cls=_Group, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(VERSION, prog_name="harvest")
def cli() -> None:
    """What thermoelectric modules between a hot and a colder stream would give.

    CASE is a case file (TOML), or - for standard input. Begin with `harvest start`.
    """


@cli.command()
@_case_arguments
@click.option("--figure-of-merit", default=0.8, show_default=True, help="Z T of the modules at the mean temperature.")
def screen(case: str, overrides: tuple[str, ...], as_json: bool, figure_of_merit: float) -> None:
    """What two streams could give at most, what is realistic, and whether a design is worth it.

    CASE needs only [hot] and [cold] without ducts; what else it holds is not judged.
    """
    loaded = _read_streams(case, overrides)
    from harvest.report.documents import json_text
    from harvest.report.screen_sheet import screen_document, screen_report
    from harvest.study.screen import screen as screen_streams

    answer = screen_streams(loaded, figure_of_merit=figure_of_merit)
    if as_json:
        click.echo(json_text(screen_document(answer)))
    elif answer.valid:
        click.echo(screen_report(loaded, answer))
    if not answer.valid:
        if answer.bad_input:
            raise CaseError([_with_line(case, fault) for fault in answer.faults])
        raise NoAnswerError(f"no valid answer: {answer.problem}")


@cli.command()
@_case_arguments
def estimate(case: str, overrides: tuple[str, ...], as_json: bool) -> None:
    """Power, heat, temperatures, losses and checks of one design."""
    loaded = _read(case, overrides)
    from harvest.model.estimate import estimate as estimate_case

    answer = estimate_case(loaded)
    if as_json:
        from harvest.report.documents import estimate_document, json_text

        click.echo(json_text(estimate_document(answer)))
    elif answer.valid:
        from harvest.report.terminal import estimate_report

        click.echo(estimate_report(loaded, answer))
    if not answer.valid:
        if answer.bad_input:
            raise CaseError([_with_line(case, fault) for fault in answer.faults])
        raise NoAnswerError(f"no valid answer: {answer.problem}")


@cli.command()
@_case_arguments
def check(case: str, overrides: tuple[str, ...], as_json: bool) -> None:
    """Read and validate a case, and say what is assumed; nothing is computed."""
    loaded = _read(case, overrides)
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
            _standard_input(), label="stdin", overrides=overrides, beside=beside
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
@_case_arguments
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
    loaded = _read(case, overrides)
    from harvest.study.what_if import what_if, what_if_options

    found = what_if(loaded, what_if_options(**texts))
    if as_json:
        from harvest.report.documents import json_text, what_if_document

        click.echo(json_text(what_if_document(found)))
    else:
        from harvest.report.what_if_sheet import what_if_report

        click.echo(what_if_report(loaded, found))


@cli.command()
@_case_arguments
@click.option("--plot", default=None, type=click.Path(dir_okay=False), help="Draw the curve (.svg, .png, .pdf).")
@click.option("--write", default=None, type=click.Path(dir_okay=False), help="Save the best as a case; a new file.")
def size(case: str, overrides: tuple[str, ...], as_json: bool, plot: str | None, write: str | None) -> None:
    """How many modules, and how arranged: the best of every choice that [size] in CASE allows."""
    from harvest.report.files import case_text, refuse_existing, write_new

    loaded = _read(case, overrides)
    if write is not None:
        refuse_existing(Path(write))
    if plot is not None:
        from harvest.report.plots import can_plot, size_figure, write_figure

        can_plot(Path(plot))
    from harvest.study.size import size as size_case

    found = size_case(loaded, _progress if sys.stderr.isatty() else None)
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


def _progress(done: int, all_of_them: int) -> None:
    click.echo(f"\r{done:,} of {all_of_them:,} choices", nl=done == all_of_them, err=True)


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
    text = (resources.files("harvest") / "data" / "starters" / f"{kind}.toml").read_text("utf-8")
    if output is None:
        click.echo(text, nl=False)
        return
    from harvest.report.files import write_new

    write_new(Path(output), text)
    click.echo(f"{output} written; next: harvest estimate {output}", err=True)


def main() -> NoReturn:
    """Run the command line and exit with its code."""
    # a command makes many small objects and few cycles: looking for those often takes a tenth of a second estimate
    gc.set_threshold(100_000, 50, 50)
    cli(prog_name="harvest")
    sys.exit(0)
