"""Templates of one's own: names checked before anything is computed, nothing read or run, work bounded."""

from __future__ import annotations

import time
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner

from harvest.cli import cli
from harvest.errors import InputError
from harvest.model.case import DECLARATIONS
from harvest.model.reading import load_case, replace
from harvest.model.results import SCALARS
from harvest.report.memo import compose
from harvest.report.memo.compose import memo
from harvest.report.memo.contents import known_contents
from harvest.report.memo.markup import Bullets, Code, Heading, Inserted, Paragraph, Span, Table, read_markup, words_of
from harvest.report.memo.templates import SHIPPED, TEMPLATES, Rendering, find_template, shipped_text
from harvest.report.memo.values import Group, Known, Value
from tests.memos import CASES, DAY, QUICK, ROOT, Page, memo_of

CASE = load_case(ROOT / "examples/textbook-array.toml")


def written(folder: Path, text: str, name: str = "own.md.j2") -> Path:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def markdown_of(folder: Path, text: str) -> str:
    return memo(CASE, template=written(folder, text), date=DAY, without=QUICK).markdown()


@pytest.fixture
def nothing_is_computed(monkeypatch: pytest.MonkeyPatch) -> None:
    def computing(*_: Any, **__: Any) -> None:
        raise AssertionError("computed before the template was checked")

    monkeypatch.setattr(compose, "estimate", computing)


@pytest.mark.usefixtures("nothing_is_computed")
@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("{{ estimate.net_powr }}", "own.md.j2:2: estimate has no 'net_powr': did you mean net_power?"),
        ("{{ nothing_known }}", "own.md.j2:2: 'nothing_known'"),
        ("{{ checks.name }}", "checks is a list"),
        ("{% for one in checks %}{{ one.nmae }}{% endfor %}", "one has no 'nmae': did you mean name?"),
        ("{% for one in checks | selectattr('status') %}{{ one.nmae }}{% endfor %}", "did you mean name?"),
        ("{% set one = checks | first %}{{ one.nmae }}", "did you mean name?"),
        ("{% with one = estimate %}{{ one.net_powr }}{% endwith %}", "did you mean net_power?"),
        ("{{ case.hot.duct.gpa }}", "case.hot.duct has no 'gpa': did you mean gap?"),
        ("{% if size.modul_count %}{% endif %}", "did you mean module_count?"),
        ("{{ title.upper() }}", "title has no 'upper'"),
        ("{% for i in [1] %}{% endfor %}{{ i }}", "'i'"),
        ("{% macro m(a) %}{{ b }}{% endmacro %}", "'b'"),
        ("{% include title %}", "written out"),
        ("{% include 'missing.md.j2' %}", "missing.md.j2: cannot be read"),
        ("{% include 'own.md.j2' %}", "includes itself"),
        ("{% include '/etc/passwd' %}", "outside of the template's folder"),
        ("{% include '../secret.txt' %}", "outside of the template's folder"),
        ("{% include 'link.md.j2' %}", "outside of the template's folder"),
        ("{% import '../secret.txt' as secret %}", "outside of the template's folder"),
        ("{% extends '../secret.txt' %}", "outside of the template's folder"),
        ("{% if %}", "own.md.j2:2: Expected an expression"),
        ("{{ 'x' | center(1000000000) }}", "No filter named 'center'"),
        ("{{ title | attr('__class__') }}", "No filter named 'attr'"),
        ("{{ cycler.__init__.__globals__.os.environ }}", "'cycler'"),
        ("{{ lipsum(1000) }}", "'lipsum'"),
        ("{{ estimate.net_power.__class__ }}", "has no '__class__'"),
        ("{{" + "(" * 3000 + "1" + ")" * 3000 + "}}", "recursion"),
        ("{{ " + "9" * 6000 + " }}", "limit"),
        ("x" * 300_000, "more than 262144 bytes"),
        ("\ue0000\ue001", "'\\ue000', which is no text"),
        ("\0", "'\\x00', which is no text"),
        ("\x1b[31m", "'\\x1b', which is no text"),
    ],
)
def test_faults_are_found_before_computing(tmp_path: Path, text: str, words: str) -> None:
    folder = tmp_path / "templates"
    folder.mkdir()
    written(tmp_path, "root:x:0:0", "secret.txt")
    (folder / "link.md.j2").symlink_to(tmp_path / "secret.txt")
    with pytest.raises(InputError) as raised:
        memo(CASE, template=written(folder, f"one\n{text}\n"), date=DAY, without=QUICK)
    assert words in str(raised.value)
    assert "\n" not in str(raised.value) and len(str(raised.value)) < 400
    assert "root:x" not in str(raised.value)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("{{ ''.__class__.__mro__ }}", "unsafe"),
        ("{{ '{0.__class__}'.format(title) }}", "unsafe"),
        ("{{ '{:>1000000000}'.format(1) }}", "unsafe"),
        ("{{ ([] | string).join }}", "unsafe"),
        ("{{ range(3) | map(attribute='__class__') | first }}", "unsafe"),
        ("{{ 'a' * 10**9 }}", "works on numbers"),
        ("{{ '%1000000000d' % 5 }}", "works on numbers"),
        ("{{ 10 ** 10 ** 10 }}", "power"),
        ("{% for i in range(10**9) %}x{% endfor %}", "Range too big"),
        ("{% for i in range(99999) %}{% for j in range(99999) %}x{% endfor %}{% endfor %}", "more work"),
        ("{% for i in range(99999) %}{% for j in range(99999) %}{% endfor %}{% endfor %}", "more work"),
        ("{% set n = namespace(s='ab') %}{% for i in range(99) %}{% set n.s = n.s ~ n.s %}{% endfor %}", "more work"),
        ("{% macro f(n) %}{{ f(n) }}{% endmacro %}{{ f(1) }}", "recursion"),
        ("{% macro f(n) %}{% if n %}{{ f(n - 1) }}{{ f(n - 1) }}{% endif %}{% endmacro %}{{ f(40) }}", "more work"),
        ("{% set n = namespace(s=1) %}{% for i in range(99) %}{% set n.s = [n.s, n.s] %}{% endfor %}", "more work"),
        (
            "{% set n = namespace(s=1) %}{% for i in range(60) %}{% set n.s = (n.s, n.s) | string %}{% endfor %}",
            "more",
        ),
        (
            "{% set n = namespace(s=1) %}{% for i in range(99) %}{% set n.s = {1: n.s, 2: n.s} %}{% endfor %}",
            "more",
        ),
        ("{{ estimate }}", "is no text"),
        ("{{ drawings.energy }}{{ checks }}", "is no text"),
        ("{{ [title] }}", "is no text"),
        ("{{ estimate.net_power.raw / 0 }}", "division by zero"),
        ("{{ title | digits(3) }}", "own.md.j2:2"),
    ],
)
def test_hostile_or_faulty_work_ends_in_one_line(tmp_path: Path, text: str, words: str) -> None:
    start = time.monotonic()
    with pytest.raises(InputError) as raised:
        memo(CASE, template=written(tmp_path, f"one\n{text}\n"), date=DAY, without=QUICK)
    assert words in str(raised.value) and "own.md.j2" in str(raised.value)
    assert "\n" not in str(raised.value)
    assert time.monotonic() - start < 20


@pytest.mark.parametrize(
    ("text", "words"), [("", "gives no text"), (" \n", "gives no text"), ("::: a\n" * 3000, "stand in each other")]
)
def test_templates_without_end_or_text_end_in_one_line(tmp_path: Path, text: str, words: str) -> None:
    with pytest.raises(InputError, match=words):
        memo(CASE, template=written(tmp_path, text), date=DAY, without=QUICK)


def test_lines_of_code_without_an_end_go_to_the_end(tmp_path: Path) -> None:
    made = memo(CASE, template=written(tmp_path, "\ufeff# a\n```\nb\n"), date=DAY, without=QUICK)
    assert made.markdown() == "# a\n\n```\nb\n```\n"


def test_a_template_of_ones_own(tmp_path: Path) -> None:
    written(tmp_path, "by {{ who }}", "author.md.j2")
    text = (
        "# {{ title }}\n\n{% set who = 'A. Person' %}{% include 'author.md.j2' %}\n\n"
        "{{ estimate.net_power | digits(5) }}; {{ estimate.net_power.raw > 10 }}; {{ (2 + 3) * 4 }}; {{ 'a' ~ 'b' }};"
        "{% for check in warned %} {{ loop.index }} {{ check.name }}{{ ',' if not loop.last }}{% endfor %}\n"
    )
    made = markdown_of(tmp_path, text)
    assert "by A. Person" in made
    assert "46.899 W; yes; 20; ab; 1 open-circuit voltage, 2 Seebeck of a couple" in made.replace("\u00a0", " ")


def test_a_template_of_html(tmp_path: Path) -> None:
    path = written(tmp_path, "<p>{{ title }}</p><b>{{ estimate.net_power }}</b>{{ drawings.stack }}", "own.html.j2")
    case = memo(load_case(ROOT / "examples/textbook-array.toml"), template=path, date=DAY, without=QUICK)
    page = Page(case.html())
    assert page.shown[0].attributes["data-value"] == "estimate.net_power"
    assert "svg" in page.tags and CASE.title in case.html()
    with pytest.raises(InputError, match="makes HTML"):
        memo(CASE, template=path, date=DAY, form=".pdf", without=QUICK)


def test_a_template_of_html_escapes_what_it_inserts(tmp_path: Path) -> None:
    path = written(
        tmp_path, "<p>{{ title }}</p><i>{{ '<b>' ~ title }}</i>{{ [title, title] | join('<br>') }}", "own.html"
    )
    made = memo(replace(CASE, {"title": "<script>x</script> & y"}), template=path, date=DAY, without=QUICK)
    assert "script" not in Page(made.html()).tags
    assert made.html().count("&lt;script&gt;x&lt;/script&gt; &amp; y") == 4
    with pytest.raises(InputError, match="makes HTML only"):
        made.markdown()


def test_a_folder_of_templates(tmp_path: Path) -> None:
    written(tmp_path, "# Ours: {{ title }}\n", "memo.md.j2")
    written(tmp_path, "<!DOCTYPE html><html><body><header>Firm & Co</header>{{ body }}</body></html>", "page.html.j2")
    html = memo(CASE, template=tmp_path, date=DAY, without=QUICK).html()
    assert "Firm & Co" in html and "<h1>Ours: " in html
    with pytest.raises(InputError, match=r"holds no comparison\.md\.j2"):
        memo([CASE, CASE], template=tmp_path, date=DAY, without=QUICK)


def test_what_a_template_inserts_is_never_markup(tmp_path: Path) -> None:
    made = memo(
        CASE, template=written(tmp_path, "{{ '**a** | # `b` ~c~' }}\n\n- {{ '- x' }}\n"), date=DAY, without=QUICK
    )
    assert [type(block) for block in made.blocks] == [Paragraph, Bullets]
    assert "<p>**a** | # `b` ~c~</p>" in made.html()


def test_markup() -> None:
    blocks = read_markup(
        "# One `two`\n\nA **b** *c* H~2~O x^2^ \\*d\\*\nmore\n\n- e\n  f\n- g\n\n1. h\n\n"
        "| a | b |\n|---|---:|\n| 1 | 2 |\n| 3 |\n\n```\n**raw**\n```\n\n::: answer\n### in\n:::\nend\n",
        Inserted(),
    )
    heading, paragraph, bullets, numbers, table, code, box, end = blocks
    assert isinstance(heading, Heading) and heading.content == ("One ", Span("code", ("two",)))
    assert isinstance(paragraph, Paragraph) and words_of(paragraph.content) == "A b c H2O x2 *d* more"
    assert isinstance(bullets, Bullets) and [words_of(item) for item in bullets.items] == ["e f", "g"]
    assert isinstance(numbers, Bullets) and numbers.ordered
    assert isinstance(table, Table) and table.right == (False, True) and len(table.rows[1]) == 2
    assert isinstance(code, Code) and code.text == "**raw**"
    assert words_of(end.content) == "end"  # type: ignore[union-attr]
    assert box.name == "answer"  # type: ignore[union-attr]


def assert_known(value: Any, known: Known, path: str) -> None:
    """A value has just what is declared of it."""
    if known.many:
        assert isinstance(value, tuple), path
        for i, each in enumerate(value):
            assert_known(each, Known(known.meaning, known.unit, known.inside), f"{path}[{i}]")
        return
    if value is None:
        assert known.optional, path
        return
    if known.unit:
        assert isinstance(value, Value | str), path
        return
    for name, inside in (known.inside or {}).items():
        assert_known(getattr(value, name), inside, f"{path}.{name}")
    if isinstance(value, Group):
        assert len(list(value)) == len(known.inside or {}), path


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_every_declared_value_is_there(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    kept: dict[str, Any] = {}

    def keeping(self: Any, values: dict[str, Any]) -> str:
        kept.update({name: value for name, value in values.items() if name != "body"})
        return "#"

    memo_of(path)
    monkeypatch.setattr(Rendering, "text", keeping)
    memo(load_case(path), date=DAY, without=QUICK)
    for name, known in known_contents(several=False).items():
        if name not in ("title", "date", "version", "case_hash"):
            assert_known(kept[name], known, name)


def test_fields_and_results_can_all_be_named() -> None:
    known = known_contents(several=False)
    assert set(known["estimate"].inside or {}) == set(SCALARS)
    hot = (known["case"].inside or {})["hot"].inside or {}
    assert {path for path in DECLARATIONS if path.startswith("hot.") and path.count(".") == 1} == {
        f"hot.{name}" for name in hot
    }


def test_shipped_templates_are_found_and_shown() -> None:
    assert {path.name for path in SHIPPED.iterdir()} == {f"{name}.md.j2" for name in TEMPLATES} | {"page.html.j2"}
    for name in TEMPLATES:
        assert find_template(name, several=name == "comparison").name == f"{name}.md.j2"
        assert shipped_text(name).startswith("# {{ title }}")


def test_a_faulty_template_is_a_usage_error(tmp_path: Path) -> None:
    own = written(tmp_path, "{{ wrong }}")
    out = tmp_path / "memo.html"
    result = CliRunner().invoke(cli, ["memo", str(CASES[0]), "-o", str(out), "--template", str(own)])
    assert result.exit_code == 2
    assert result.stderr.startswith("harvest: template own.md.j2:1: 'wrong'")
    assert not out.exists()
