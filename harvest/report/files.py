"""Writing of files: whole or not at all."""

from __future__ import annotations

import contextlib
import os
import tempfile
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from harvest.errors import InputError
from harvest.model.case import DECLARATIONS, Case


@contextlib.contextmanager
def whole_file(path: Path) -> Iterator[Path]:
    """Give a temporary file beside the final one, which it becomes at the end: forced to the disk, never half there.

    Raises InputError where the file cannot be written.
    """
    try:
        handle, name = tempfile.mkstemp(prefix=f".{path.name}.", dir=path.parent)
        os.close(handle)
    except OSError as error:
        raise InputError(f"{path}: cannot be written ({error.strerror})") from None
    temporary = Path(name)
    try:
        yield temporary
        with temporary.open("rb+") as file:
            os.fsync(file.fileno())
        temporary.chmod(0o644)
        temporary.replace(path)
    except OSError as error:
        raise InputError(f"{path}: cannot be written ({error.strerror})") from None
    finally:
        temporary.unlink(missing_ok=True)


def write_whole(path: Path, content: str | bytes) -> None:
    """Write a file by way of a temporary one beside it, so that it is never half there; raises InputError."""
    with whole_file(path) as temporary:
        temporary.write_bytes(content.encode("utf-8") if isinstance(content, str) else content)


def record_text(record: dict[str, Any]) -> str:
    """A module record as TOML text."""
    import tomli_w

    return tomli_w.dumps(record)


def case_text(case: Case) -> str:
    """A case as TOML text that reads back as the same case from any folder."""
    import tomli_w

    document = _as_given(case.given)
    for path, declaration in DECLARATIONS.items():
        *parents, name = path.split(".")
        table: Any = document
        for parent in parents:
            table = table.get(parent) if isinstance(table, dict) else None
        value = table.get(name) if isinstance(table, dict) else None
        if declaration.form not in ("file", "fluid table", "log") or not isinstance(value, str):
            continue
        if (case.folder / value).is_file():
            table[name] = str((case.folder / value).resolve())
    return tomli_w.dumps(document)


def refuse_existing(path: Path) -> None:
    """Raise InputError where a file exists that must not be written over, or its folder does not."""
    if path.exists():
        raise InputError(f"{path}: exists already; remove it or choose another name")
    if not path.parent.is_dir():
        raise InputError(f"{path}: cannot be written (there is no folder {path.parent})")


def write_new(path: Path, content: str) -> None:
    """Write a file that must not exist yet; raises InputError."""
    if path.exists():
        raise InputError(f"{path}: exists already; remove it or choose another name")
    write_whole(path, content)


def case_source(case: Case) -> str:
    """A case as TOML text as it was given, paths as they were written."""
    import tomli_w

    return tomli_w.dumps(_as_given(case.given))


def _as_given(document: Any) -> Any:
    """A copy of a document without the fields that were taken out of it by None."""
    if isinstance(document, dict):
        return {name: _as_given(value) for name, value in document.items() if value is not None}
    return [_as_given(each) for each in document] if isinstance(document, list | tuple) else document
