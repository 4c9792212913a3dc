"""Power, heat and checks of thermoelectric modules between a hot and a colder stream.

`load_case(path)` reads a case file, `replace(case, {...})` changes it, `estimate(case)` answers it. Names are loaded
when they are first used, so that importing the package costs nothing.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

from harvest import version

if TYPE_CHECKING:
    from harvest.errors import CaseError, HarvestError, InputError, NoAnswerError, RangeError
    from harvest.model.batch import Batch
    from harvest.model.case import Case
    from harvest.model.estimate import estimate, estimate_batch
    from harvest.model.fluid import fluid
    from harvest.model.reading import load_case, replace
    from harvest.model.results import Estimate, Estimates

__version__ = version.VERSION

_HOMES = {
    "Batch": "harvest.model.batch",
    "Case": "harvest.model.case",
    "CaseError": "harvest.errors",
    "Estimate": "harvest.model.results",
    "Estimates": "harvest.model.results",
    "HarvestError": "harvest.errors",
    "InputError": "harvest.errors",
    "NoAnswerError": "harvest.errors",
    "RangeError": "harvest.errors",
    "estimate": "harvest.model.estimate",
    "estimate_batch": "harvest.model.estimate",
    "fluid": "harvest.model.fluid",
    "load_case": "harvest.model.reading",
    "replace": "harvest.model.reading",
}

__all__ = [
    "Batch",
    "Case",
    "CaseError",
    "Estimate",
    "Estimates",
    "HarvestError",
    "InputError",
    "NoAnswerError",
    "RangeError",
    "__version__",
    "estimate",
    "estimate_batch",
    "fluid",
    "load_case",
    "replace",
]


def __getattr__(name: str) -> Any:
    """Load a public name from its module."""
    if name in _HOMES:
        return getattr(importlib.import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'harvest' has no attribute {name!r}")
