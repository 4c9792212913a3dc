"""The program that commands belong to, and what they share: reading a case, exit codes, progress."""

from __future__ import annotations

import functools
import gc
import os
import sys
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any, NoReturn

import click

from harvest.errors import CaseError, HarvestError, InputError, NoAnswerError
from harvest.version import VERSION

if TYPE_CHECKING:
    from harvest.model.case import Case, Streams
    from harvest.model.results import Estimate
    from harvest.study.screen import Screening

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


def case_arguments(command: Callable[..., Any]) -> Callable[..., Any]:
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


def read_case_of(case: str, overrides: tuple[str, ...]) -> Case:
    """Read the case that a command was given, with its replaced fields."""
    from harvest.model.reading import load_case, read_case

    if case == "-":
        return read_case(standard_input(), overrides, label="stdin", folder=Path())
    return load_case(Path(case), overrides)


def read_streams_of(case: str, overrides: tuple[str, ...]) -> Streams:
    """Read the streams of a case, whatever else it holds."""
    from harvest.model.reading import load_streams, read_streams

    if case == "-":
        return read_streams(standard_input(), overrides, label="stdin", folder=Path())
    return load_streams(Path(case), overrides)


def with_line(case: str, fault: str) -> str:
    """Name the file and line of the field that a fault begins with, where the case is a file that gives it."""
    from harvest.model.case_text import bounded_text, key_lines

    if case == "-":
        return f"stdin: {fault}"
    line = key_lines(bounded_text(Path(case))).get(fault.partition(":")[0])
    return f"{case}:{line}: {fault}" if line else f"{case}: {fault}"


def require_answer(case: str, answer: Estimate | Screening) -> None:
    """Raise for an answer that is none: CaseError with file and line where the input is at fault, or NoAnswerError."""
    if answer.valid:
        return
    if answer.bad_input:
        raise CaseError([with_line(case, fault) for fault in answer.faults])
    raise NoAnswerError(f"no valid answer: {answer.problem}")


def standard_input(largest: int | None = None) -> str:
    """Read text from standard input, within the bound of a case file or of `largest` bytes; raises InputError."""
    from harvest.model.case_text import LARGEST_FILE

    most = largest or LARGEST_FILE
    content = sys.stdin.buffer.read(most + 1)
    if len(content) > most:
        raise InputError(f"stdin: more than {most} bytes; a file of this kind is smaller")
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError:
        raise InputError("stdin: not UTF-8 text; save the file as UTF-8") from None


def progress_in(noun: str) -> Callable[[int, int], None] | None:
    """What tells a terminal how far a search is; None where standard error is none."""

    def tell(done: int, all_of_them: int) -> None:
        click.echo(f"\r{done:,} of {all_of_them:,} {noun}", nl=done == all_of_them, err=True)

    return tell if sys.stderr.isatty() else None


@click.group(cls=_Group, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(VERSION, prog_name="harvest")
def cli() -> None:
    """What thermoelectric modules between a hot and a colder stream would give.

    CASE is a case file (TOML), or - for standard input. Begin with `harvest start`.
    """


def main() -> NoReturn:
    """Run the command line and exit with its code."""
    # a command makes many small objects and few cycles: looking for those often takes a tenth of a second estimate
    gc.set_threshold(100_000, 50, 50)
    cli(prog_name="harvest")
    sys.exit(0)
