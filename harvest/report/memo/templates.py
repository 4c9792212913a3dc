"""Templates of a memo: found by name, file or folder, checked, and filled with values."""

from __future__ import annotations

import unicodedata
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from harvest.errors import InputError, MissingExtraError
from harvest.model.case import nearest_name
from harvest.quantities import one_line
from harvest.report.memo.markup import OPEN, Inserted
from harvest.report.memo.names import Names
from harvest.report.memo.values import Known

SHIPPED = Path(__file__).parent.parent.parent / "data" / "templates"
TEMPLATES = {
    "memo": "the design memo, with everything that its reader has to check",
    "summary": "one page: the answer, the drawing, the limits",
    "data-sheet": "the numbers alone",
    "comparison": "two or more cases side by side",
}
MARKUP, PAGE = ".md.j2", ".html.j2"
SUFFIXES = (MARKUP, PAGE, ".md", ".html")
STRANGE = ("Cc", "Co", "Cs", "Cn")
"""Categories of signs that formats refuse, or that stand for what is inserted."""
LARGEST_TEMPLATE = 256 * 1024


@dataclass(frozen=True)
class Template:
    """A template by its folder, beyond which nothing is read, and its name in it."""

    folder: Path
    name: str

    @property
    def is_page(self) -> bool:
        """Whether it makes HTML itself, and no other format."""
        return self.name.endswith((PAGE, ".html"))


def find_template(named: str | Path | None, several: bool) -> Template:
    """Template of a shipped name, a file or a folder; raises InputError.

    A folder holds `memo.md.j2`, and `comparison.md.j2` for several cases.
    """
    standard = "comparison" if several else "memo"
    if named is None or named in TEMPLATES:
        name = str(named or standard)
        if (name == "comparison") != several:
            raise InputError(
                f"template: {name} is for {'two or more cases' if name == 'comparison' else 'one case'}; leave it out"
            )
        return Template(SHIPPED, name + MARKUP)
    path = Path(named)
    if path.is_dir():
        for suffix in (MARKUP, PAGE):
            if (path / f"{standard}{suffix}").is_file():
                return Template(path, f"{standard}{suffix}")
        raise InputError(f"template: {path} holds no {standard}{MARKUP}; begin with harvest memo --show-template")
    if not path.is_file():
        raise InputError(
            f"template: {one_line(str(named))} is no file or folder and no shipped template; "
            f"known are {', '.join(TEMPLATES)}"
        )
    if not path.name.endswith(SUFFIXES):
        raise InputError(f"template: {path.name} ends in neither {MARKUP} nor {PAGE}")
    return Template(path.parent, path.name)


def shipped_text(name: str) -> str:
    """Text of a shipped template; raises InputError for an unknown name."""
    if name == "page":
        return (SHIPPED / f"page{PAGE}").read_text("utf-8")
    if name not in TEMPLATES:
        raise InputError(f"show-template: {nearest_name(one_line(name), [*TEMPLATES, 'page'])}")
    return (SHIPPED / (name + MARKUP)).read_text("utf-8")


def _source(folder: Path, name: str) -> str:
    """Text of a template inside its folder; raises InputError."""
    shown = one_line(name)
    path = folder / name
    try:
        inside = path.resolve().is_relative_to(folder.resolve())
        if not inside or Path(name).is_absolute() or ".." in Path(name).parts or "\0" in name:
            raise InputError(f"template {shown}: lies outside of the template's folder, where nothing is read")
        with path.open("rb") as file:
            content = file.read(LARGEST_TEMPLATE + 1)
        if len(content) > LARGEST_TEMPLATE:
            raise InputError(f"template {shown}: more than {LARGEST_TEMPLATE} bytes")
        text = content.decode("utf-8-sig")
        strange = next((sign for sign in text if not sign.isspace() and unicodedata.category(sign) in STRANGE), "")
        if strange:
            raise InputError(f"template {shown}: holds the sign {strange!a}, which is no text; take it out")
        return text
    except UnicodeDecodeError:
        raise InputError(f"template {shown}: not UTF-8 text") from None
    except OSError as error:
        raise InputError(f"template {shown}: cannot be read ({error.strerror})") from None


class Rendering:
    """One template made ready: its names are checked, and it can be filled with values."""

    def __init__(self, template: Template, known: Mapping[str, Known], *, html_of: Callable[[Any], Any]) -> None:
        """Read and check; raises InputError with template, line and name, MissingExtraError without Jinja2."""
        try:
            import jinja2

            from harvest.report.memo.sandbox import Sandbox
        except ImportError:
            raise MissingExtraError(
                'a memo needs jinja2, which is not installed; install it with pip install "harvest[memo]"'
            ) from None

        def source(name: str) -> str:
            return _source(template.folder, name)

        loader = jinja2.FunctionLoader(lambda name: (source(name), name, lambda: True))
        self.template = template
        self.inserted = Inserted()
        self.environment = Sandbox(loader, html_of if template.is_page else self._marked, html=template.is_page)
        names = Names(lambda name: self.environment.parse(source(name), name, name), set(self.environment.globals))
        self._guarded(lambda: names.check(template.name, dict(known)))
        self.compiled = self._guarded(lambda: self.environment.get_template(template.name))

    def _marked(self, piece: Any) -> str:
        """Mark of a piece, so that markup never sees what it says."""
        if isinstance(piece, bool):
            piece = "yes" if piece else "no"
        elif isinstance(piece, int | float):
            piece = f"{piece:g}"
        # what the template itself has put together holds marks already
        return piece if isinstance(piece, str) and OPEN in piece else self.inserted.mark(piece)

    def text(self, values: Mapping[str, Any]) -> str:
        """Text of the template with values; raises InputError."""
        self.environment.budget.begin()
        return str(self._guarded(lambda: "".join(self.compiled.generate(**values))))

    def _guarded(self, work: Callable[[], Any]) -> Any:
        """Do something with the template; what is wrong with it becomes one line."""
        import jinja2

        from harvest.report.memo.sandbox import TooMuchError

        try:
            return work()
        except jinja2.TemplateSyntaxError as error:
            where = f"{error.name or self.template.name}:{error.lineno}"
            raise InputError(f"template {where}: {one_line(error.message or '', 200)}") from None
        except (jinja2.TemplateError, TooMuchError, ArithmeticError, LookupError, RecursionError, MemoryError) as error:
            raise self._fault(error) from None
        except (TypeError, ValueError, AttributeError) as error:
            raise self._fault(error) from None

    def _fault(self, error: BaseException) -> InputError:
        """Say where in the template something went wrong."""
        place, trace = self.template.name, error.__traceback__
        while trace is not None:
            name = trace.tb_frame.f_code.co_filename
            if name.endswith(SUFFIXES):
                place = f"{name}:{trace.tb_lineno}"
            trace = trace.tb_next
        return InputError(f"template {place}: {one_line(str(error) or type(error).__name__, 300)}")
