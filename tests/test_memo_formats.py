"""Memos as PDF and Word documents, and in a browser."""

from __future__ import annotations

import builtins
import io
import re
import shutil
import subprocess
import zipfile
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner

from harvest.cli import cli
from harvest.model.reading import load_case, replace
from harvest.report.memo.compose import memo
from tests.memos import CASES, DAY, QUICK, ROOT, memo_of

EXHAUST = ROOT / "examples/genset-exhaust.toml"
TEXTBOOK = ROOT / "examples/textbook-array.toml"
BROWSER = next(
    (path for name in ("chromium", "chromium-browser", "google-chrome") if (path := shutil.which(name))), None
)
HOSTILE = '#set page(width: 1pt) $x$ #read("/etc/passwd") *b* "quoted" \\ <w:t> & end'


def text_of_pdf(content: bytes) -> str:
    pdfium = pytest.importorskip("pypdfium2")
    document = pdfium.PdfDocument(content)
    return "\n".join(page.get_textpage().get_text_range() for page in document)


def test_pdf_has_the_answer_and_the_same_bytes() -> None:
    pytest.importorskip("typst")
    made = memo_of(EXHAUST)
    content = made.pdf()
    assert content.startswith(b"%PDF-") and content == made.pdf()
    text = text_of_pdf(content)
    for words in ("Exhaust of a 60 kW generator", "369 W net", "carbon monoxide", "Approved", "swept_volume_flow"):
        assert words in " ".join(text.replace("\N{NO-BREAK SPACE}", " ").split())


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_the_summary_is_one_page(path: Path) -> None:
    pytest.importorskip("typst")
    pdfium = pytest.importorskip("pypdfium2")
    assert len(pdfium.PdfDocument(memo_of(path, "summary").pdf())) == 1


def test_a_hostile_title_is_text_in_pdf_and_word() -> None:
    pytest.importorskip("typst")
    docx = pytest.importorskip("docx")
    made = memo(replace(load_case(TEXTBOOK), {"title": HOSTILE}), template="data-sheet", date=DAY, without=QUICK)
    assert '#read("/etc/passwd")' in " ".join(text_of_pdf(made.pdf()).split())
    document = docx.Document(io.BytesIO(made.word()))
    assert document.paragraphs[0].text == HOSTILE
    assert document.core_properties.title == HOSTILE


def test_word_document_is_whole_and_the_same_bytes() -> None:
    docx = pytest.importorskip("docx")
    made = memo_of(EXHAUST)
    content = made.word()
    assert content == made.word()
    document = docx.Document(io.BytesIO(content))
    assert [each.text for each in document.paragraphs if each.style.name == "Heading 1"] == [made.title]
    cells = [cell.text for table in document.tables for row in table.rows for cell in row.cells]
    assert any("Net, after pumps" in cell for cell in cells)
    for table in document.tables:
        widths = [column.width for column in table.columns]
        assert sum(widths) <= 170.1 * 36_000 or len(widths) == 1
        if table.cell(0, 0).text == "field" and len(widths) == 4:
            assert widths[0] == max(widths)
    archive = zipfile.ZipFile(io.BytesIO(content))
    assert archive.testzip() is None
    assert {item.date_time for item in archive.infolist()} == {(1980, 1, 1, 0, 0, 0)}
    names = archive.namelist()
    assert sum(name.endswith(".svg") for name in names) == sum(name.endswith(".png") for name in names) == 4


@pytest.mark.parametrize(
    ("library", "suffix", "words"),
    [
        ("jinja2", ".html", 'pip install "harvest[memo]"'),
        ("typst", ".pdf", 'pip install "harvest[pdf]"'),
        ("docx", ".docx", 'pip install "harvest[word]"'),
    ],
)
def test_a_missing_library_is_one_line(
    library: str, suffix: str, words: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    real = builtins.__import__

    def without(name: str, *more: Any, **named: Any) -> Any:
        if name.partition(".")[0] == library:
            raise ImportError(name)
        return real(name, *more, **named)

    monkeypatch.setattr(builtins, "__import__", without)
    out = tmp_path / f"memo{suffix}"
    result = CliRunner().invoke(cli, ["memo", str(TEXTBOOK), "-o", str(out)])
    assert result.exit_code == 2, result.output
    assert words in result.stderr and result.stderr.count("\n") == 1
    assert not out.exists()


MEASURE = """<script>addEventListener("load", () => {
const wide = [...document.querySelectorAll("body *")].filter((each) => !each.closest(".wide, figure"))
  .filter((each) => each.getBoundingClientRect().right > innerWidth + 1).map((each) => each.tagName);
document.body.setAttribute("data-measured", `${document.documentElement.scrollWidth} ${innerWidth} ${wide.length}`);
});</script></body>"""


def measured(html: str, width: int, folder: Path) -> tuple[int, int, int]:
    """Width of the page's content, of the window, and elements that stick out, in a browser."""
    assert BROWSER is not None
    page, frame = folder / "page.html", folder / "frame.html"
    page.write_text(html.replace("</body>", MEASURE), encoding="utf-8")
    # a window may not be made as narrow as a phone, so the page stands in a frame of that width
    frame.write_text(
        f'<!DOCTYPE html><body style="margin:0"><iframe id="f" src="page.html" style="width:{width}px;height:800px;'
        'border:0"></iframe><script>addEventListener("load", () => { document.body.setAttribute("data-found", '
        'document.getElementById("f").contentDocument.body.getAttribute("data-measured")); });</script></body>',
        encoding="utf-8",
    )
    found = subprocess.run(
        [
            *(BROWSER, "--headless", "--no-sandbox", "--disable-gpu", "--no-first-run"),
            *(
                "--disable-background-networking",
                "--allow-file-access-from-files",
                f"--user-data-dir={folder / 'user'}",
            ),
            *("--window-size=1400,900", "--virtual-time-budget=5000", "--dump-dom", frame.as_uri()),
        ],
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    ).stdout
    numbers = re.search(r'data-found="(\d+) (\d+) (\d+)"', found)
    assert numbers, found[-2000:]
    content, window, beyond = map(int, numbers.groups())
    return content, window, beyond


@pytest.mark.skipif(BROWSER is None, reason="no Chromium or Chrome is installed to open the memo in")
@pytest.mark.parametrize("width", [1280, 390])
@pytest.mark.parametrize("kind", ["memo", "comparison", "long words"])
def test_a_browser_shows_it_without_overflow(kind: str, width: int, tmp_path: Path) -> None:
    if kind == "memo":
        made = memo_of(EXHAUST)
    elif kind == "comparison":
        made = memo([load_case(EXHAUST), load_case(TEXTBOOK)], date=DAY, without=QUICK)
    else:
        made = memo(replace(load_case(TEXTBOOK), {"title": "W" * 190}), date=DAY, command="x" * 400, without=QUICK)
    content, window, beyond = measured(made.html(), width, tmp_path)
    assert window == width
    assert content <= width
    assert beyond == 0
