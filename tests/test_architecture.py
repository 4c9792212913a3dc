"""What keeps the code where a reader looks for it: directions of import, homes of libraries, the top level, wording."""

from __future__ import annotations

import ast
import inspect
import re
import subprocess
from collections.abc import Iterator
from importlib import import_module
from pathlib import Path
from types import FunctionType

import pytest

REPOSITORY = Path(__file__).parents[1]
PACKAGE = REPOSITORY / "harvest"
MODULES = sorted(PACKAGE.rglob("*.py"))

# a module imports from its own group and from those with a smaller number
ORDER = {"version": 0, "errors": 0, "quantities": 0, "physics": 1, "model": 2, "study": 3, "report": 4, "cli": 5}
FREE = {"__init__", "__main__"}  # the package's front door and its command

HOMES = {
    "CoolProp": ("physics/coolprop_source.py",),
    "pint": ("quantities.py",),
    "click": ("cli/",),
    "matplotlib": ("report/",),
    "jinja2": ("report/",),
    "scipy": ("study/", "report/"),
    "pyarrow": ("report/",),
    "xarray": ("report/",),
    "distributed": ("study/",),
}


def imported(path: Path) -> Iterator[tuple[str, bool]]:
    """Dotted names that a file imports, and whether only for type checking."""
    tree = ast.parse(path.read_text("utf-8"))
    checking = {
        id(inside)
        for node in ast.walk(tree)
        if isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test)
        for inside in ast.walk(node)
    }
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield alias.name, id(node) in checking
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: a relative import hides its direction"
            yield str(node.module), id(node) in checking
            for alias in node.names:
                yield f"{node.module}.{alias.name}", id(node) in checking
        elif isinstance(node, ast.Call) and ast.unparse(node.func) in (
            "import_module",
            "importlib.import_module",
            "__import__",
        ):
            named = node.args[0]
            if isinstance(named, ast.Constant):
                yield str(named.value), id(node) in checking


def group(dotted: str) -> str | None:
    parts = dotted.split(".")
    return parts[1] if parts[0] == "harvest" and len(parts) > 1 and parts[1] in ORDER else None


def own_group(path: Path) -> str:
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_imports_go_one_way(path: Path) -> None:
    own = own_group(path)
    if own in FREE:
        return
    assert own in ORDER, f"harvest/{own} has no place in the order of imports"
    for name, _ in imported(path):
        other = group(name)
        assert other is None or ORDER[other] <= ORDER[own], f"{own} imports {name}"


def test_no_module_needs_itself_through_others() -> None:
    """No cycle of imports at run time, counted at the top of modules only."""
    names = {".".join(path.relative_to(REPOSITORY).with_suffix("").parts): path for path in MODULES}
    needs: dict[str, set[str]] = {}
    for name, path in names.items():
        top = ast.parse(path.read_text("utf-8")).body
        needs[name] = {
            each
            for node in top
            if isinstance(node, ast.ImportFrom)
            for each in (str(node.module), *(f"{node.module}.{alias.name}" for alias in node.names))
            if each in names and each != name
        }
    done: set[str] = set()

    def visit(name: str, above: tuple[str, ...]) -> None:
        assert name not in above, " -> ".join((*above, name))
        if name not in done:
            for other in needs[name]:
                visit(other, (*above, name))
            done.add(name)

    for name in names:
        visit(name, ())


@pytest.mark.parametrize("library", HOMES)
def test_each_library_has_one_home(library: str) -> None:
    for path in MODULES:
        where = path.relative_to(PACKAGE).as_posix()
        if any(name.split(".")[0] == library for name, _ in imported(path)):
            assert where.startswith(HOMES[library]), f"{where} imports {library}"


@pytest.mark.parametrize("library", ["CoolProp", "pint", "matplotlib", "jinja2", "pyarrow", "xarray", "distributed"])
def test_heavy_libraries_are_imported_where_they_are_used(library: str) -> None:
    # the sandbox derives from Jinja2's classes, so that it counts as the library itself
    sandbox = PACKAGE / "report/memo/sandbox.py"
    wanted = (library, "harvest.report.memo.sandbox" if library == "jinja2" else library)
    for path in MODULES:
        if path == sandbox:
            continue
        for node in ast.parse(path.read_text("utf-8")).body:
            if isinstance(node, ast.Import | ast.ImportFrom):
                names = [alias.name for alias in node.names] if isinstance(node, ast.Import) else [str(node.module)]
                assert all(name not in wanted and name.split(".")[0] != library for name in names), (
                    f"{path} imports {library} at once"
                )


def test_physics_touches_no_files_and_prints_nothing() -> None:
    for path in sorted((PACKAGE / "physics").glob("*.py")):
        if path.name == "coolprop_source.py":  # guards the standard output around the library's import
            continue
        tree = ast.parse(path.read_text("utf-8"))
        called = {ast.unparse(node.func) for node in ast.walk(tree) if isinstance(node, ast.Call)}
        assert not called & {"print", "open", "Path"}, path
        assert not any(isinstance(node, ast.Global) for node in ast.walk(tree)), path


def test_commands_do_no_arithmetic() -> None:
    """A command reads, calls and writes; the one plus sign is the byte that tells a file is too long."""
    for path in sorted((PACKAGE / "cli").glob("*.py")):
        for node in ast.walk(ast.parse(path.read_text("utf-8"))):
            if isinstance(node, ast.BinOp):
                assert isinstance(node.op, ast.Add | ast.Div | ast.BitOr), f"{path}:{node.lineno}"


def tracked() -> list[str]:
    if not (REPOSITORY / ".git").exists():
        pytest.skip("needs the repository")
    done = subprocess.run(["git", "ls-files"], cwd=REPOSITORY, capture_output=True, text=True, check=True)
    return [name for name in done.stdout.splitlines() if (REPOSITORY / name).exists()]


def test_the_top_level_stays_small() -> None:
    top = {name.split("/")[0] for name in tracked()}
    visible = {name for name in top if not name.startswith(".")}
    assert visible == {"README.md", "DEVELOPERS.md", "pyproject.toml", "harvest", "tests", "examples", "docs"}


def test_names_of_files_say_what_is_in_them() -> None:
    for name in tracked():
        stem = Path(name).stem
        assert not re.fullmatch(r"(utils?|helpers?|manager|misc|common)", stem), name


def public_functions() -> list[tuple[str, FunctionType]]:
    found = []
    for path in sorted((PACKAGE / "physics").glob("*.py")):
        if path.stem in ("__init__", "arrays", "chebyshev"):  # no quantities in them
            continue
        module = import_module(f"harvest.physics.{path.stem}")
        for name, item in vars(module).items():
            if isinstance(item, FunctionType) and not name.startswith("_") and item.__module__ == module.__name__:
                found.append((f"{path.stem}.{name}", item))
    return found


FUNCTIONS = public_functions()


@pytest.mark.parametrize(("name", "function"), FUNCTIONS, ids=[name for name, _ in FUNCTIONS])
def test_physics_functions_say_their_units(name: str, function: FunctionType) -> None:
    """A docstring, and where arrays go in or come out, a unit in brackets or a pointer to the one that has them."""
    text = inspect.getdoc(function) or ""
    assert text and text.splitlines()[0].rstrip().endswith((".", ":", "].")), name
    arrays = any("FloatArray" in str(annotation) for annotation in function.__annotations__.values())
    if arrays:
        assert re.search(r"\[[^\]]+\]|[Aa]s `|[Ss]ee `|`\w+`", text), f"{name}: no unit in its docstring"


# words of a workplace, written in halves so that this file does not hold them
STRANGE = [
    "".join(halves)
    for halves in (
        ("assis", "tant"),
        ("trans", "cript"),
        ("lec", "ture"),
        ("chat", "bot"),
        ("lang", "uage model"),
        ("pro", "mpt engineering"),
        ("/wo", "rk/"),
        ("HOU", "SE.md"),
        ("MOD", "EL.md"),
        ("FIND", "INGS.md"),
        ("INTER", "FACE.md"),
        ("REFER", "ENCES.md"),
        ("the sp", "ec "),
    )
]


@pytest.mark.parametrize("word", STRANGE)
def test_files_speak_of_the_subject_only(word: str) -> None:
    for name in tracked():
        text = (REPOSITORY / name).read_text("utf-8")
        assert word.lower() not in text.lower(), f"{name} holds {word!r}"


def test_no_note_is_left_to_do() -> None:
    for path in MODULES:
        for number, line in enumerate(path.read_text("utf-8").splitlines(), 1):
            assert not re.search(r"\b(TO" r"DO|FIX" r"ME|X" r"XX)\b", line), f"{path}:{number}"
