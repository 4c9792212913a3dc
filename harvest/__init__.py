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
    from harvest.model.module_curve import ModuleCurve, module_curve
    from harvest.model.reading import load_case, load_streams, replace
    from harvest.model.results import Estimate, Estimates
    from harvest.report.memo.compose import Memo, memo
    from harvest.report.sweep_files import sweep
    from harvest.study.bench_record import fit_bench_record, read_bench_record
    from harvest.study.doubt import Doubt, doubt
    from harvest.study.duty import DutyBalance, duty
    from harvest.study.duty_log import DutyLog, read_duty_log
    from harvest.study.modules import load_module
    from harvest.study.screen import Screening, screen
    from harvest.study.size import Sizing, size
    from harvest.study.what_if import WhatIf, WhatIfOptions, what_if

__version__ = version.VERSION

_HOMES = {
    "Batch": "harvest.model.batch",
    "Case": "harvest.model.case",
    "CaseError": "harvest.errors",
    "Doubt": "harvest.study.doubt",
    "doubt": "harvest.study.doubt",
    "Estimate": "harvest.model.results",
    "Estimates": "harvest.model.results",
    "HarvestError": "harvest.errors",
    "InputError": "harvest.errors",
    "NoAnswerError": "harvest.errors",
    "RangeError": "harvest.errors",
    "estimate": "harvest.model.estimate",
    "estimate_batch": "harvest.model.estimate",
    "fluid": "harvest.model.fluid",
    "fit_bench_record": "harvest.study.bench_record",
    "load_case": "harvest.model.reading",
    "load_streams": "harvest.model.reading",
    "load_module": "harvest.study.modules",
    "Memo": "harvest.report.memo.compose",
    "memo": "harvest.report.memo.compose",
    "ModuleCurve": "harvest.model.module_curve",
    "module_curve": "harvest.model.module_curve",
    "read_bench_record": "harvest.study.bench_record",
    "replace": "harvest.model.reading",
    "sweep": "harvest.report.sweep_files",
    "WhatIf": "harvest.study.what_if",
    "WhatIfOptions": "harvest.study.what_if",
    "what_if": "harvest.study.what_if",
    "DutyBalance": "harvest.study.duty",
    "DutyLog": "harvest.study.duty_log",
    "duty": "harvest.study.duty",
    "read_duty_log": "harvest.study.duty_log",
    "Sizing": "harvest.study.size",
    "size": "harvest.study.size",
    "screen": "harvest.study.screen",
    "Screening": "harvest.study.screen",
}

__all__ = [
    "Batch",
    "Case",
    "CaseError",
    "Doubt",
    "DutyBalance",
    "DutyLog",
    "Estimate",
    "Estimates",
    "HarvestError",
    "InputError",
    "Memo",
    "ModuleCurve",
    "NoAnswerError",
    "RangeError",
    "Screening",
    "Sizing",
    "WhatIf",
    "WhatIfOptions",
    "__version__",
    "doubt",
    "duty",
    "estimate",
    "estimate_batch",
    "fit_bench_record",
    "fluid",
    "load_case",
    "load_module",
    "load_streams",
    "memo",
    "module_curve",
    "read_bench_record",
    "read_duty_log",
    "replace",
    "screen",
    "size",
    "sweep",
    "what_if",
]


def __getattr__(name: str) -> Any:
    """Load a public name from its module."""
    if name in _HOMES:
        return getattr(importlib.import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'harvest' has no attribute {name!r}")
