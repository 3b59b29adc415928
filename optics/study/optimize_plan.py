"""What an optimization is to find: the case's `[optimize]` table, checked before any work."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.device.errors import CaseError, Fault
from optics.device.study_names import STUDIES, followers, name_faults
from optics.study.evaluate import Question
from optics.study.outcomes import find_outcomes, outcome_names
from optics.study.varied import path_unit, refused

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case

    Floats = NDArray[np.float64]

_STUDY = "optimize"


@dataclass(frozen=True, slots=True)
class Variable:
    """One number of the case and its bounds."""

    path: str
    low: float
    high: float

    @property
    def units(self) -> str:
        """Unit by the end of the path; 1 for ratios."""
        return path_unit(self.path)


@dataclass(frozen=True, slots=True)
class Objective:
    """One outcome to be made large (sign 1) or small (sign -1)."""

    name: str
    sign: int
    place: int  # among the outcomes of the question

    @property
    def kind(self) -> str:
        """Word of the case file."""
        return "maximize" if self.sign > 0 else "minimize"


@dataclass(frozen=True, slots=True)
class Limit:
    """One bound of one outcome: sign 1 for a smallest value, -1 for a largest."""

    name: str
    sign: int
    value: float
    place: int  # among the outcomes of the question

    @property
    def kind(self) -> str:
        """Word of the case file."""
        return "min" if self.sign > 0 else "max"

    @property
    def key(self) -> str:
        """Where it stands in the case file."""
        return f'optimize.constraints."{self.name}".{self.kind}'


@dataclass(frozen=True, slots=True)
class Aim:
    """A checked optimization.

    Attributes
    ----------
    question : Question
        Its paths are the variables, its outcomes those of objectives and limits, each once.
    variables : tuple of Variable
    objectives : tuple of Objective
        Two or more for a Pareto front.
    limits : tuple of Limit
    """

    question: Question
    variables: tuple[Variable, ...]
    objectives: tuple[Objective, ...]
    limits: tuple[Limit, ...]

    @property
    def case(self) -> Case:
        """The case as it stands."""
        return self.question.case

    @property
    def low(self) -> Floats:
        """Lower bounds (variables,)."""
        return np.array([one.low for one in self.variables])

    @property
    def high(self) -> Floats:
        """Upper bounds (variables,)."""
        return np.array([one.high for one in self.variables])

    def values_at(self, unit: Floats) -> Floats:
        """Values (..., variables) of points given as shares of the way between the bounds."""
        return self.low + unit * (self.high - self.low)

    def unit_at(self, values: Floats) -> Floats:
        """Shares of the way between the bounds (..., variables)."""
        return np.asarray((values - self.low) / (self.high - self.low))

    @property
    def start(self) -> Floats:
        """Values (variables,) of the case as it stands; some may lie beyond the bounds."""
        return np.array([float(self.case.value(one.path)) for one in self.variables])


def plan_optimize(case: Case, tolerance: float) -> Aim:
    """Read a case's `[optimize]` table.

    Raises
    ------
    CaseError
        With every fault: no such table, outcomes that are unknown or ambiguous, bounds that the
        case refuses, links that contradict the variables.
    """
    study: Mapping[str, Any] | None = case.document.get(_STUDY)
    if study is None:
        expected = "a table with optimize.variables and maximize, minimize or objectives"
        raise CaseError([Fault(case.label, _STUDY, "no such table", expected)])
    variables = tuple(
        Variable(path, float(entry["min"]), float(entry["max"]))
        for path, entry in study["variables"].items()
    )
    paths = tuple(one.path for one in variables)
    faults = name_faults(case.label, STUDIES[_STUDY], study, outcome_names(case))
    linked = followers(STUDIES[_STUDY], study)
    wanted = _wanted(study)
    limited = study.get("constraints") or {}
    # An outcome may be wanted and limited.
    names = list(dict.fromkeys([*(name for name, _ in wanted), *limited]))
    for place in range(len(variables)):
        _check_bounds(case, variables, place, linked, faults)
    if faults:
        raise CaseError(faults)
    outcomes = find_outcomes(case, {f"optimize ({name})": name for name in names})
    return Aim(
        Question(case, paths, linked, outcomes, tolerance),
        variables,
        tuple(Objective(name, sign, names.index(name)) for name, sign in wanted),
        tuple(
            Limit(name, sign, float(limit[word]), names.index(name))
            for name, limit in limited.items()
            for word, sign in (("min", 1), ("max", -1))
            if limit.get(word) is not None
        ),
    )


def _wanted(study: Mapping[str, Any]) -> list[tuple[str, int]]:
    """Name and sign of every objective."""
    return [
        (entry[word], sign)
        for entry in study.get("objectives") or [study]
        for word, sign in (("maximize", 1), ("minimize", -1))
        if entry.get(word) is not None
    ]


def _check_bounds(
    case: Case,
    variables: tuple[Variable, ...],
    place: int,
    linked: tuple[tuple[str, int], ...],
    faults: list[Fault],
) -> None:
    """Note if the case refuses a bound, whether the others stand as they are or in the middle.

    What is refused only in between, or only together with other values, is told as failed points.
    """
    one = variables[place]
    alone = [path for path, leader in linked if leader == place]
    middle = {other.path: 0.5 * (other.low + other.high) for other in variables}
    middle |= {path: middle[variables[leader].path] for path, leader in linked}
    for word, value in (("min", one.low), ("max", one.high)):
        changes = dict.fromkeys([one.path, *alone], value)
        found = refused(case, changes)
        if not found or not refused(case, middle | changes):
            continue
        key = f'optimize.variables."{one.path}".{word}'
        for fault in found:
            known = fault.key == one.path
            said = fault.found if known else f"{value:.10g}: {fault.key} is {fault.found}"
            faults.append(Fault(case.label, key, said, fault.expected))
