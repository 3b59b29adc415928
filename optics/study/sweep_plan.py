"""What a sweep is to compute: the grid from the case's `[sweep]` table, checked before any work."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.device.errors import CaseError, Fault
from optics.device.study_names import STUDIES, followers, name_faults
from optics.study.evaluate import Batch, Question
from optics.study.outcomes import default_outcomes, find_outcomes, outcome_names
from optics.study.varied import path_unit, refused

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case

    Floats = NDArray[np.float64]
    Integers = NDArray[np.int64]

_SWEEP = STUDIES["sweep"]
# Numbers of one result, so that it stays well below a gigabyte.
LARGEST_RESULT = 40_000_000


@dataclass(frozen=True, slots=True)
class Axis:
    """Values of one number of the case, in the order of the file."""

    path: str
    values: tuple[float, ...]

    @property
    def units(self) -> str:
        """Unit by the end of the path; 1 for ratios."""
        return path_unit(self.path)


@dataclass(frozen=True, slots=True)
class Plan:
    """A checked sweep.

    Attributes
    ----------
    question : Question
        Varies the axes.
    axes : tuple of Axis
        The last one varies fastest.
    """

    question: Question
    axes: tuple[Axis, ...]

    @property
    def shape(self) -> tuple[int, ...]:
        """Number of values on every axis."""
        return tuple(len(axis.values) for axis in self.axes)

    @property
    def points(self) -> int:
        """Number of grid points."""
        return math.prod(self.shape)

    def values_at(self, places: Integers) -> Floats:
        """Values (n, axes) of grid points given by their places in the flattened grid."""
        indices = np.unravel_index(places, self.shape)
        columns = [np.array(axis.values)[i] for axis, i in zip(self.axes, indices, strict=True)]
        return np.stack(columns, axis=-1)

    def name_of(self, place: int) -> str:
        """Name a grid point for people, such as ``layers.HTL.thickness_nm = 40``."""
        return self.question.name_of(self.values_at(np.array([place]))[0])

    def batch(self, places: Integers) -> Batch:
        """Grid points as points of their own."""
        return Batch(self.question, places, self.values_at(places))


def plan_sweep(case: Case, tolerance: float) -> Plan:
    """Read a case's `[sweep]` table.

    Raises
    ------
    CaseError
        With every fault: no such table, outcomes that are unknown or ambiguous, values given
        twice or refused by the case, links that contradict the axes, too large a grid.
    """
    study: Mapping[str, Any] | None = case.document.get("sweep")
    if study is None:
        raise CaseError([Fault(case.label, "sweep", "no such table", "a table with sweep.axes")])
    axes = tuple(Axis(path, _values(entry)) for path, entry in study["axes"].items())
    faults = name_faults(case.label, _SWEEP, study, outcome_names(case))
    # Of wrong names none is left to be computed.
    asked = () if faults else study.get("outcomes") or default_outcomes()
    outcomes = find_outcomes(case, {f"sweep.outcomes ({name})": name for name in asked})
    paths = tuple(axis.path for axis in axes)
    plan = Plan(Question(case, paths, followers(_SWEEP, study), outcomes, tolerance), axes)
    _check_size(plan, faults)
    for place, axis in enumerate(axes):
        twice = sorted({value for value in axis.values if axis.values.count(value) > 1})
        key = _axis_key(axis.path)
        faults += [Fault(case.label, key, f"{v:.10g} twice", "each value once") for v in twice]
        _check_values(plan, place, faults)
    if faults:
        raise CaseError(faults)
    return plan


def _axis_key(path: str) -> str:
    return f'sweep.axes."{path}"'


def _values(entry: Mapping[str, Any]) -> tuple[float, ...]:
    if entry.get("values") is not None:
        return tuple(float(value) for value in entry["values"])
    start, stop, step = entry["start"], entry["stop"], entry["step"]
    count = round((stop - start) / step)
    # Both ends exact, and decimal steps without the dust of binary sums.
    return tuple(float(f"{start + (stop - start) * i / count:.12g}") for i in range(count + 1))


def _check_size(plan: Plan, faults: list[Fault]) -> None:
    numbers = plan.points * max(len(plan.question.outcomes), 1)
    if numbers > LARGEST_RESULT:
        found = f"{plan.points} grid points of {len(plan.question.outcomes)} outcomes"
        expected = f"at most {LARGEST_RESULT} numbers; split the grid or ask for fewer outcomes"
        faults.append(Fault(plan.question.case.label, "sweep.axes", found, expected))


def _check_values(plan: Plan, place: int, faults: list[Fault]) -> None:
    """Note if the case refuses an axis's smallest or largest value, whatever the others are.

    What is refused only in between, or only together with values of other axes, is told as a
    failed point.
    """
    axis = plan.axes[place]
    alone = [path for path, leader in plan.question.followers if leader == place]
    first = plan.question.changes(np.array([other.values[0] for other in plan.axes]))
    for value in sorted({min(axis.values), max(axis.values)}):
        changes = dict.fromkeys([axis.path, *alone], value)
        faulty = refused(plan.question.case, changes)
        if not faulty or not refused(plan.question.case, first | changes):
            continue
        for fault in faulty:
            known = fault.key == axis.path
            found = fault.found if known else f"{value:.10g}: {fault.key} is {fault.found}"
            faults.append(
                Fault(plan.question.case.label, _axis_key(axis.path), found, fault.expected)
            )
