"""The page of every value that templates of a memo can name, made from their declarations."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from harvest.report.memo.contents import known_contents
from harvest.report.memo.values import NUMBER, Known

INTRODUCTION = """\
# Values of a memo

What a template of [a memo](memo.md) can name. A value with a unit is a number: printed as it stands, it is rounded and
has its unit, and it has

"""
FILTERS = """
and goes through the filters `digits(n)` (that many significant digits), `percent`, `whole`, `share_of(other)` (its
share of another number) and `each(count)` (its part of one of so many). A *list* is gone through with `for`; what is
marked *perhaps* is not there for every case, so ask `if` before. A number that does not apply is printed as a dash,
and its `known` is false. Of the filters of Jinja2 there are
"""
FIELDS = """
`case` holds every field of the [case file](case-file.md) under its own name, by section; those with a unit are numbers,
the others texts, empty where they are not given. Lists of tables and sections of studies, such as `size`, are left out.
"""


def value_reference() -> str:
    """The page as Markdown."""
    from harvest.report.memo.sandbox import KEPT_FILTERS

    one, several = known_contents(several=False), known_contents(several=True)
    filters = ", ".join(f"`{name}`" for name in KEPT_FILTERS)
    parts = [INTRODUCTION + _table(NUMBER) + FILTERS + filters + ".\n"]
    parts += ["## One case\n", _table(one), *_inside(one)]
    parts += ["## Several cases\n", _table(several)]
    parts += list(_inside({name: known for name, known in several.items() if name != "cases"}))
    page = {"title": "Title of the memo.", "body": "The memo itself, as HTML."}
    parts += [
        "## The HTML page around a memo\n",
        "`page.html.j2` has `date`, `version` and `case_hash` as above, and\n",
        _table({name: Known(meaning) for name, meaning in page.items()}),
    ]
    return "\n".join(parts)


def _inside(known: Mapping[str, Known]) -> Iterator[str]:
    for name, each in known.items():
        if each.unit or not each.inside:
            continue
        yield f"### `{name}`\n"
        yield FIELDS.lstrip() if name == "case" else _table(each.inside)
        if name != "case":
            yield from _inside(each.inside)


def _table(known: Mapping[str, Known]) -> str:
    lines = ["| value | unit | meaning |", "|---|---|---|"]
    for name, each in known.items():
        marks = ["list"] * each.many + ["perhaps"] * each.optional
        marked = f" *{', '.join(marks)}*" if marks else ""
        lines.append(f"| `{name}`{marked} | {each.unit} | {each.meaning} |")
    return "\n".join(lines) + "\n"
