"""Polishing one point: sequential quadratic programming with gradients, on any landscape."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, NamedTuple, Protocol

import numpy as np

from optics.device.errors import CaseError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

#: Violation of a limit, as a share of its outcome's spread, up to which it counts as met.
FEASIBLE = 1e-7
# Change of the goal, as a share of its spread, below which a step is the last one.
_SETTLED = 1e-10
_MOST_STEPS = 60


class Landscape(Protocol):
    """Outcomes over a box whose sides run from 0 to 1. Picklable, for executors."""

    def value(self, unit: Floats) -> Floats:
        """Outcomes (k,) at a point (p,); NaN where undefined."""

    def slope(self, unit: Floats) -> Floats:
        """Their derivatives (k, p) at a point (p,)."""


class Goal(NamedTuple):
    """What is wanted, linear in the outcomes y and in a slack t that is as small as possible.

    Minimize ``cost @ y + t``, with ``rows @ y + slack * t >= floor`` line by line. Without slack
    in any line, t is left out. One outcome to be maximized is a cost; several are lines with
    slack; so are limits of which the least violation is sought. Lines are in units of the spread
    of what they limit.
    """

    cost: Floats  # (k,)
    rows: Floats  # (m, k)
    floor: Floats  # (m,)
    slack: Floats  # (m,)

    @property
    def slackens(self) -> bool:
        """Whether the slack is one of the unknowns."""
        return bool((self.slack > 0.0).any())

    def least_slack(self, outcomes: Floats) -> Floats:
        """Slack (...) with which every line that has some is met; 0 without any."""
        soft = self.slack > 0.0
        if not self.slackens:
            return np.zeros(outcomes.shape[:-1])
        lacking = self.floor[soft] - outcomes @ self.rows[soft].T
        return np.asarray((lacking / self.slack[soft]).max(axis=-1))

    def violation(self, outcomes: Floats) -> Floats:
        """Largest amount (...) by which lines without slack are missed; 0 if all are met."""
        hard = self.slack == 0.0
        lacking = self.floor[hard] - outcomes @ self.rows[hard].T
        return np.asarray(np.maximum(lacking, 0.0).max(axis=-1, initial=0.0))

    def merit(self, outcomes: Floats) -> Floats:
        """Value (...) to be minimized."""
        return np.asarray(outcomes @ self.cost + self.least_slack(outcomes))


class Start(NamedTuple):
    """A point to be polished, as a task for an executor."""

    landscape: Landscape
    goal: Goal
    unit: Floats  # (p,)


@dataclass(frozen=True, slots=True)
class Polished:
    """Best point that polishing saw.

    Attributes
    ----------
    unit : float (p,)
    outcomes : float (k,)
    merit, violation : float
        As of its goal.
    values, slopes : int
        How often outcomes and their derivatives were computed.
    settled : bool
        Whether it ended at an optimum, and not for want of steps or of computable neighbors.
    """

    unit: Floats
    outcomes: Floats
    merit: float
    violation: float
    values: int
    slopes: int
    settled: bool


class _LeftDomainError(Exception):
    """A point where outcomes are undefined or that is no device."""


@dataclass(slots=True)
class _Memory:
    """Everything computed on the way, each point once, and the best of it."""

    start: Start
    values: dict[bytes, Floats] = field(default_factory=dict)
    slopes: dict[bytes, Floats] = field(default_factory=dict)
    best: tuple[float, float] = (np.inf, np.inf)
    best_unit: Floats | None = None

    def value(self, unit: Floats) -> Floats:
        key = unit.tobytes()
        if key not in self.values:
            try:
                outcomes = self.start.landscape.value(unit)
            except CaseError as error:
                raise _LeftDomainError from error
            if not np.isfinite(outcomes).all():
                raise _LeftDomainError
            self.values[key] = outcomes
            self._weigh(unit, outcomes)
        return self.values[key]

    def slope(self, unit: Floats) -> Floats:
        key = unit.tobytes()
        if key not in self.slopes:
            try:
                slopes = self.start.landscape.slope(unit)
            except CaseError as error:
                raise _LeftDomainError from error
            if not np.isfinite(slopes).all():
                raise _LeftDomainError
            self.slopes[key] = slopes
        return self.slopes[key]

    def _weigh(self, unit: Floats, outcomes: Floats) -> None:
        """Keep the point if it is the best: limits first, then the goal."""
        goal = self.start.goal
        violation = float(goal.violation(outcomes))
        rank = (0.0 if violation <= FEASIBLE else violation, float(goal.merit(outcomes)))
        if rank < self.best:
            self.best, self.best_unit = rank, unit.copy()


def polish(start: Start) -> Polished | None:
    """Follow the gradients from a point to the optimum of its basin.

    Parameters
    ----------
    start : Start

    Returns
    -------
    Polished or None
        None if the outcomes are undefined at the start.

    Notes
    -----
    Sequential least-squares quadratic programming, Kraft, DFVLR-FB 88-28 (1988) (from memory),
    as SciPy keeps it.
    """
    from scipy.optimize import minimize

    memory = _Memory(start)
    goal = start.goal
    size = start.unit.size
    try:
        first = float(goal.least_slack(memory.value(start.unit)))
    except _LeftDomainError:
        return None
    extra = int(goal.slackens)

    def merit(x: Floats) -> float:
        return float(memory.value(x[:size]) @ goal.cost) + (float(x[size]) if extra else 0.0)

    def merit_slope(x: Floats) -> Floats:
        return np.append(goal.cost @ memory.slope(x[:size]), np.ones(extra))

    def lines(x: Floats) -> Floats:
        held = goal.rows @ memory.value(x[:size]) - goal.floor
        return held + goal.slack * x[size] if extra else held

    def lines_slope(x: Floats) -> Floats:
        slopes = goal.rows @ memory.slope(x[:size])
        return np.column_stack([slopes, goal.slack]) if extra else slopes

    x0 = np.append(start.unit, [first] * extra)
    try:
        found = minimize(
            merit,
            x0,
            jac=merit_slope,
            method="SLSQP",
            bounds=[(0.0, 1.0)] * size + [(None, None)] * extra,
            constraints=[{"type": "ineq", "fun": lines, "jac": lines_slope}]
            if goal.floor.size
            else [],
            options={"maxiter": _MOST_STEPS, "ftol": _SETTLED},
        )
        # Status 8: no descent to be had at the precision of the numbers, an end like 0.
        settled = found.status in (0, 8)
    except _LeftDomainError:
        settled = False
    assert memory.best_unit is not None
    outcomes = memory.value(memory.best_unit)
    return Polished(
        memory.best_unit,
        outcomes,
        float(goal.merit(outcomes)),
        float(goal.violation(outcomes)),
        len(memory.values),
        len(memory.slopes),
        settled,
    )
