"""Results as JSON documents: SI numbers, null where there is none."""

from __future__ import annotations

import dataclasses
import json
from typing import TYPE_CHECKING, Any

import numpy as np

from harvest.model.case import DECLARATIONS, Case, assumptions, case_hash, default_text, explain, limits_text, value_at
from harvest.model.results import UNITS, Estimate
from harvest.quantities import unit_of
from harvest.version import VERSION

if TYPE_CHECKING:
    from harvest.model.fluid import FluidSheet


def plain(value: Any) -> Any:
    """Turn arrays, dataclasses and not-finite numbers into what JSON has."""
    if isinstance(value, np.ndarray):
        return [plain(item) for item in value.tolist()]
    if isinstance(value, dict):
        return {key: plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {item.name: plain(getattr(value, item.name)) for item in dataclasses.fields(value) if item.compare}
    if isinstance(value, float | np.floating):
        return float(value) if np.isfinite(value) else None
    return value


def json_text(document: Any) -> str:
    """One JSON document as text."""
    return json.dumps(document, indent=2, ensure_ascii=False, allow_nan=False)


def estimate_document(answer: Estimate) -> dict[str, Any]:
    """An estimate with the unit of each number."""
    document: dict[str, Any] = plain(answer)
    document["module_count"] = int(answer.module_count) if answer.valid else None
    return {**document, "units": UNITS}


def case_document(case: Case) -> dict[str, Any]:
    """A case as read: SI values by field, what was assumed, and its hash."""
    values = {
        path: plain(value_at(case, path))
        for path, declaration in DECLARATIONS.items()
        if declaration.section is None and value_at(case, path) is not None
    }
    return {
        "title": case.title,
        "valid": True,
        "values": values,
        "units": {path: unit_of(DECLARATIONS[path].kind) for path in values if DECLARATIONS[path].form == "quantity"},
        "assumptions": [item._asdict() for item in assumptions(case)],
        "case_hash": case_hash(case),
        "version": VERSION,
    }


def field_documents(field: str | None) -> list[dict[str, Any]]:
    """Declarations of all fields, or of the one asked for; raises InputError for an unknown one."""
    if field is not None:
        explain(field)
    return [
        {
            "field": path,
            "meaning": declaration.meaning,
            "unit": unit_of(declaration.kind) if declaration.form in ("quantity", "pair", "curve") else None,
            "default": default_text(declaration),
            "allowed": limits_text(declaration) or None,
            "choices": dict(declaration.choices) or None,
        }
        for path, declaration in DECLARATIONS.items()
        if declaration.section is None and (field is None or path == field or path.endswith(f".{field}"))
    ]


def fluid_document(sheet: FluidSheet) -> dict[str, Any]:
    """A fluid's properties with their units."""
    return {**plain(sheet), "units": sheet.units()}
