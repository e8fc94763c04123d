"""wideberth: one setpoint with ranges from a response-surface experiment.

The doorway to every step, loaded on first use:

>>> import wideberth as wb
>>> sorted(wb.__all__)[:3]
['InputError', 'NumericalError', 'RefusedError']
"""

from __future__ import annotations

import sys
from importlib import import_module
from types import ModuleType
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from wideberth.chain.plan_files import write_plan
    from wideberth.chain.record import build_record
    from wideberth.decide.frontier import frontier
    from wideberth.decide.recommend import recommend
    from wideberth.errors import InputError, NumericalError, RefusedError, WideberthError
    from wideberth.fit.models import fit
    from wideberth.operate.robustness import robustness
    from wideberth.operate.window import window
    from wideberth.plan.plan import plan_runs
    from wideberth.plan.stage import finished_stage
    from wideberth.report.memo import memo_html, write_memo
    from wideberth.study.checking import check_study
    from wideberth.study.reading import read_draft, read_study
    from wideberth.study.template import start_study
    from wideberth.surface.ridge import shape
    from wideberth.uncertainty.assess import uncertainty

__version__ = "0.1.0"

__all__ = [
    "InputError",
    "NumericalError",
    "RefusedError",
    "WideberthError",
    "build_record",
    "check_study",
    "finished_stage",
    "fit",
    "frontier",
    "memo_html",
    "plan_runs",
    "read_draft",
    "read_study",
    "recommend",
    "robustness",
    "shape",
    "start_study",
    "uncertainty",
    "window",
    "write_memo",
    "write_plan",
]

_HOMES = {
    "InputError": "errors",
    "NumericalError": "errors",
    "RefusedError": "errors",
    "WideberthError": "errors",
    "build_record": "chain.record",
    "check_study": "study.checking",
    "finished_stage": "plan.stage",
    "fit": "fit.models",
    "frontier": "decide.frontier",
    "memo_html": "report.memo",
    "plan_runs": "plan.plan",
    "read_draft": "study.reading",
    "read_study": "study.reading",
    "recommend": "decide.recommend",
    "robustness": "operate.robustness",
    "shape": "surface.ridge",
    "start_study": "study.template",
    "uncertainty": "uncertainty.assess",
    "window": "operate.window",
    "write_memo": "report.memo",
    "write_plan": "chain.plan_files",
}


class _Doorway(ModuleType):
    """The package as a module whose steps win over rooms of the same name.

    Importing the room ``wideberth.fit`` binds it on the package; the step ``fit`` must stay what
    ``wideberth.fit`` means to a caller, so that binding is not taken.
    """

    def __getattr__(self, name: str) -> Any:
        if name not in _HOMES:
            message = f"wideberth has no {name!r}; it offers {', '.join(__all__)}"
            raise AttributeError(message)
        found = getattr(import_module(f"wideberth.{_HOMES[name]}"), name)
        super().__setattr__(name, found)
        return found

    def __setattr__(self, name: str, value: Any) -> None:
        if name in _HOMES and isinstance(value, ModuleType):
            return
        super().__setattr__(name, value)

    def __dir__(self) -> list[str]:
        return sorted({*super().__dir__(), *__all__})


sys.modules[__name__].__class__ = _Doorway
