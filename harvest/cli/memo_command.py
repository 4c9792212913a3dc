"""The command that writes a design memo."""

from __future__ import annotations

import datetime
import shlex
import sys
from pathlib import Path

import click

from harvest.cli.program import cli, standard_input, with_line
from harvest.errors import CaseError, InputError


@cli.command()
@click.argument("cases", metavar="CASE...", nargs=-1)
@click.option("-o", "--output", type=click.Path(dir_okay=False), help="File to write: .html, .md, .pdf or .docx.")
@click.option("--template", default=None, help="A shipped template, a file, or a folder with memo.md.j2.")
@click.option("--date", default=None, help="Date in the memo, such as 2026-01-31; today unless given.")
@click.option(
    "--without",
    multiple=True,
    type=click.Choice(["size", "doubt"]),
    help="Leave out a study that takes long; repeatable.",
)
@click.option(
    "--set",
    "overrides",
    multiple=True,
    metavar="FIELD=VALUE",
    help='Replace a field of every case, such as --set hot.mass_flow="0.4 kg/s". May be repeated.',
)
@click.option("--json", "as_json", is_flag=True, help="Write the results that the memo's numbers are taken from.")
@click.option("--list", "list_templates", is_flag=True, help="List the shipped templates.")
@click.option("--show-template", default=None, metavar="NAME", help="Print a shipped template, to start one's own.")
def memo(
    cases: tuple[str, ...],
    output: str | None,
    template: str | None,
    date: str | None,
    without: tuple[str, ...],
    overrides: tuple[str, ...],
    as_json: bool,
    list_templates: bool,
    show_template: str | None,
) -> None:
    """The design memo of a CASE for somebody who checks and signs it; two or more CASEs are compared."""
    from harvest.report.memo.templates import TEMPLATES, shipped_text

    if list_templates:
        width = max(map(len, TEMPLATES))
        click.echo("\n".join(f"{name:{width}}  {meaning}" for name, meaning in TEMPLATES.items()))
        return
    if show_template is not None:
        click.echo(shipped_text(show_template), nl=False)
        return
    if not cases:
        raise InputError("memo: no case is given; write harvest memo CASE -o memo.html")
    if output is None and not as_json:
        raise InputError("memo: no output is given; write -o memo.html, .md, .pdf or .docx")
    from harvest.model.reading import read_case
    from harvest.report.memo.compose import format_of
    from harvest.report.memo.compose import memo as make_memo

    form = format_of(output) if output is not None else ".html"
    texts = [_text(case) for case in cases]
    loaded = [
        read_case(text, overrides, label=_label(case), folder=Path(case).parent if case != "-" else Path())
        for case, text in zip(cases, texts, strict=True)
    ]
    day = datetime.date.today().isoformat() if date is None else date
    try:
        made = make_memo(
            loaded,
            template=template,
            date=day,
            command=_command(cases, output, template, day, overrides, without),
            sources=texts,
            form=form,
            without=without,
            progress=_progress if sys.stderr.isatty() else None,
        )
    except CaseError as error:
        raise CaseError(
            [with_line(cases[0], fault) for fault in error.faults] if len(cases) == 1 else error.faults
        ) from None
    if output is not None:
        made.write(Path(output))
    if as_json:
        from harvest.report.documents import json_text

        click.echo(json_text(made.results))


def _label(case: str) -> str:
    return "stdin" if case == "-" else case


def _text(case: str) -> str:
    from harvest.model.case_text import bounded_text

    return standard_input() if case == "-" else bounded_text(Path(case))


def _command(
    cases: tuple[str, ...],
    output: str | None,
    template: str | None,
    date: str,
    overrides: tuple[str, ...],
    without: tuple[str, ...],
) -> str:
    """The command that repeats the memo."""
    words = ["harvest", "memo", *cases, "--date", date]
    for override in overrides:
        words += ["--set", override]
    for study in without:
        words += ["--without", study]
    words += ["--template", template] if template is not None else []
    return shlex.join([*words, "-o", output] if output is not None else words)


def _progress(what: str) -> None:
    click.echo(f"working out {what}", err=True)
