"""Files and texts before they mean anything: bounded reading, TOML, and the line on which each key stands."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import Any

from harvest.errors import InputError

LARGEST_FILE = 2**20
MOST_KEY_PARTS = 20

_KEY_PART = r"""(?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*')"""
_KEY = rf"\s*({_KEY_PART}(?:\s*\.\s*{_KEY_PART})*)\s*"
_LONG_KEY = re.compile(rf"\s*\[{{0,2}}\s*(?:{_KEY_PART}\s*\.\s*){{{MOST_KEY_PARTS}}}")
_ENTRY = re.compile(rf"{_KEY}=")
_HEADER = re.compile(rf"\s*\[{{1,2}}{_KEY}\]{{1,2}}\s*(?:#.*)?$")


def bounded_text(path: Path, largest: int = LARGEST_FILE) -> str:
    """Text of a file of at most `largest` bytes, read no further than that; raises InputError with one line."""
    try:
        with path.open("rb", buffering=0) as file:
            content = b""
            while len(content) <= largest and (block := file.read(largest + 1 - len(content))):
                content += block
    except FileNotFoundError:
        raise InputError(f"{path}: there is no such file") from None
    except IsADirectoryError:
        raise InputError(f"{path}: is a directory; give the file in it") from None
    except (OSError, ValueError) as error:
        raise InputError(f"{path!s}: cannot be read ({getattr(error, 'strerror', None) or error})") from None
    if len(content) > largest:
        raise InputError(f"{path}: is larger than {largest >> 20} MiB, so it is no file of this kind")
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputError(f"{path}: is not UTF-8 text (byte {error.start}); save it as UTF-8") from None


def toml_document(text: str, label: str) -> dict[str, Any]:
    """Parse TOML; raises InputError with one line that starts with label and line."""
    if len(text) > LARGEST_FILE:
        raise InputError(f"{label}: is larger than 1 MiB")
    for number, line in enumerate(text.splitlines(), 1):  # a key of thousands of parts takes minutes to parse
        if _LONG_KEY.match(line):
            raise InputError(f"{label}:{number}: a key of more than {MOST_KEY_PARTS} parts")
    try:
        return tomllib.loads(text)
    except RecursionError:
        raise InputError(f"{label}: lists or tables are nested too deeply") from None
    except ValueError as error:
        reason, _, place = str(error).partition(" (at ")
        number_of = re.match(r"line ([0-9]+)", place)
        raise InputError(
            f"{label}{f':{number_of[1]}' if number_of else ''}: not TOML: {reason}; "
            'a value with a unit stands in quotes, mass_flow = "0.5 kg/s"'
        ) from None


def key_lines(text: str) -> dict[str, int]:
    """Line number of each table header and key of a TOML text, by dotted path.

    What stands in a list of tables is found by its place, "list[2].key"; without it, the first such key.
    """
    lines: dict[str, int] = {}
    counts: dict[str, int] = {}
    table, place = "", ""
    for number, line in enumerate(text.splitlines(), 1):
        if header := _HEADER.match(line):
            table, place = _dotted(header[1]), ""
            lines.setdefault(table, number)
            if line.lstrip().startswith("[["):
                counts[table] = counts.get(table, 0) + 1
                place = f"[{counts[table]}]"
                lines[table + place] = number
        elif entry := _ENTRY.match(line):
            path = _dotted(entry[1])
            lines.setdefault(f"{table}.{path}" if table else path, number)
            if place:
                lines.setdefault(f"{table}{place}.{path}", number)
    return lines


def toml_value(text: str) -> Any:
    """Value of a text if it is one TOML value, otherwise the text itself."""
    try:
        document = tomllib.loads(f"value = {text}")
    except (ValueError, RecursionError):
        return text
    return document["value"] if len(document) == 1 else text


def _dotted(key: str) -> str:
    return ".".join(part.strip("\"'") for part in re.findall(_KEY_PART, key))
