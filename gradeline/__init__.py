"""From manometer and gauge readings along a pipe to head loss, friction factor and wall roughness.

`read_survey` reads a survey's folder, `reduce` makes a `Reduction` of it: a set of tables. Each name is loaded when
it is first used, so that the command line answers at once.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from gradeline.comparison import Comparison, compare
    from gradeline.errors import GradelineError
    from gradeline.loader import read_plan, read_survey
    from gradeline.planning import Plan, plan
    from gradeline.prediction import Prediction, predict
    from gradeline.reduction import Reduction, reduce
    from gradeline.survey import Survey

__all__ = [
    "Comparison",
    "GradelineError",
    "Plan",
    "Prediction",
    "Reduction",
    "Survey",
    "compare",
    "plan",
    "predict",
    "read_plan",
    "read_survey",
    "reduce",
]

_HOMES = {
    "Comparison": "gradeline.comparison",
    "compare": "gradeline.comparison",
    "GradelineError": "gradeline.errors",
    "Plan": "gradeline.planning",
    "Reduction": "gradeline.reduction",
    "Survey": "gradeline.survey",
    "Prediction": "gradeline.prediction",
    "plan": "gradeline.planning",
    "predict": "gradeline.prediction",
    "read_plan": "gradeline.loader",
    "read_survey": "gradeline.loader",
    "reduce": "gradeline.reduction",
}


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'gradeline' has no attribute {name!r}")
    value = getattr(importlib.import_module(_HOMES[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
