"""Energy Concordance: are a bomb's gross energy and a composition two routes to one number?

Names are loaded when used, so that `import energy` costs nothing.
"""

from __future__ import annotations

from typing import Any

__version__ = "0.1.0"

_HOMES = {
    "read_samples": "energy.intake",
    "Samples": "energy.samples",
    "assess": "energy.assessment",
    "assess_each": "energy.assessment",
    "Assessment": "energy.assessment",
    "equations": "energy.assessment",
    "feed_tolerance": "energy.feedlaw",
    "reduce_runs": "energy.bomb.reduction",
    "calibrate": "energy.bomb.reduction",
    "Problem": "energy.problems",
    "EnergyError": "energy.problems",
    "StructuralProblems": "energy.problems",
    "WrongUse": "energy.problems",
    "UnitProblem": "energy.problems",
    "FormulaProblem": "energy.problems",
    "CatalogueProblem": "energy.problems",
}

__all__ = sorted([*_HOMES, "__version__"])


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        from importlib import import_module

        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'energy' has no attribute '{name}'")


def __dir__() -> list[str]:
    return __all__
