"""The commands of `harvest`. Heavy modules are imported in the command that needs them."""

from __future__ import annotations

import functools
import os
import sys
from collections.abc import Callable
from importlib import resources
from pathlib import Path
from typing import TYPE_CHECKING, Any, NoReturn

import click

from harvest.errors import HarvestError, InputError
from harvest.version import VERSION

if TYPE_CHECKING:
    from harvest.model.case import Case

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
        click.echo(f"harvest: no valid answer: {answer.problem}", err=True)
        sys.exit(1)


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
@click.option("--pressure", default="101.325 kPa", show_default=True, help="Absolute unless it says gauge.")
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
    cli(prog_name="harvest")
    sys.exit(0)
