"""Light outcoupling of thin-film light-emitting devices.

Names load what they need when they are first used, so that importing the package is quick.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

from optics._version import VERSION as __version__

if TYPE_CHECKING:
    from optics.device.case import Case, read_case
    from optics.device.errors import CaseError
    from optics.outcome.ambient import Ambient, ambient
    from optics.outcome.angular import Angular, angular
    from optics.outcome.budget import Budget, budget
    from optics.outcome.modes import modes
    from optics.outcome.modes_result import Modes
    from optics.study.check import Check, check
    from optics.study.optimize import optimize
    from optics.study.optimum import Optimum
    from optics.study.sensitivity import Sensitivity, sensitivity
    from optics.study.sweep import sweep
    from optics.study.tolerance import tolerance
    from optics.study.tolerance_result import Tolerance

_HOMES = {
    "Ambient": "optics.outcome.ambient",
    "Angular": "optics.outcome.angular",
    "Budget": "optics.outcome.budget",
    "Case": "optics.device.case",
    "CaseError": "optics.device.errors",
    "Check": "optics.study.check",
    "Modes": "optics.outcome.modes_result",
    "Optimum": "optics.study.optimum",
    "Sensitivity": "optics.study.sensitivity",
    "Tolerance": "optics.study.tolerance_result",
    "ambient": "optics.outcome.ambient",
    "angular": "optics.outcome.angular",
    "budget": "optics.outcome.budget",
    "check": "optics.study.check",
    "modes": "optics.outcome.modes",
    "optimize": "optics.study.optimize",
    "read_case": "optics.device.case",
    "sensitivity": "optics.study.sensitivity",
    "sweep": "optics.study.sweep",
    "tolerance": "optics.study.tolerance",
}

__all__ = [
    "Ambient",
    "Angular",
    "Budget",
    "Case",
    "CaseError",
    "Check",
    "Modes",
    "Optimum",
    "Sensitivity",
    "Tolerance",
    "__version__",
    "ambient",
    "angular",
    "budget",
    "check",
    "modes",
    "optimize",
    "read_case",
    "sensitivity",
    "sweep",
    "tolerance",
]


def __getattr__(name: str) -> Any:
    """Load a public name from its home on first use."""
    if name not in _HOMES:
        raise AttributeError(f"module 'optics' has no attribute {name!r}")
    value = getattr(import_module(_HOMES[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    """List the public names, loaded or not."""
    return sorted(__all__)
