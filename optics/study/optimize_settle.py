"""Numbers that one can write down: rounded, and every limit still met."""

from __future__ import annotations

import itertools
import math
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.device.errors import CaseError
from optics.study.evaluate import answer
from optics.study.optimize_goals import meets

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.study.optimize_local import Goal, Polished
    from optics.study.optimize_plan import Aim

    Floats = NDArray[np.float64]

# Digits are kept down to this share of the bounds' range: 0.01 nm of 100 nm and more.
_GRAIN = 1e-4
_MOST_TRIED = 6
# Variables beyond so many are rounded to the nearest value only.
_MOST_ROUNDED_BOTH_WAYS = 10
_FINER = 3  # times ten


class Settled(NamedTuple):
    """A point as it is written."""

    point: Floats  # (p,)
    found: Floats  # (k + 3,) outcomes and trust
    evaluations: int


def grain(low: float, high: float) -> int:
    """Digits after the point that are kept of a variable with these bounds; never negative."""
    return max(0, -math.floor(math.log10(_GRAIN * (high - low))))


def settle(aim: Aim, goal: Goal, end: Polished, slope: Floats) -> Settled:
    """Round an end so that it meets all limits and is as good as it can be.

    Of the values above and below, the linear change of the outcomes tells which may do; the best
    of those that really meet every limit is taken. Where none does, one digit more is kept.

    Parameters
    ----------
    aim : Aim
    goal : Goal
        That the end was polished for.
    end : Polished
    slope : float (k, p)
        Derivatives of the outcomes there, over the unit box.
    """
    exact = aim.values_at(end.unit)
    evaluations = 0
    for finer in range(_FINER + 1):
        choices = _choices(aim, exact, finer)
        expected = end.outcomes + (aim.unit_at(choices) - end.unit) @ slope.T
        missed, merit = goal.violation(expected), goal.merit(expected)
        for place in np.lexsort((merit, missed))[:_MOST_TRIED]:
            evaluations += 1
            try:
                found = answer(aim.question, choices[place])
            except CaseError:
                continue
            outcomes = found[: len(aim.question.outcomes)]
            if np.isfinite(outcomes).all() and bool(meets(aim, outcomes)):
                return Settled(choices[place], found, evaluations)
    # As it came out, its limits met to within the precision of the search.
    return Settled(exact, answer(aim.question, exact), evaluations + 1)


def _choices(aim: Aim, exact: Floats, finer: int) -> Floats:
    """Rounded values (n, p) around exact ones (p,), within the bounds."""
    both = exact.size <= _MOST_ROUNDED_BOTH_WAYS
    sets = []
    for one, value in zip(aim.variables, exact.tolist(), strict=True):
        digits = grain(one.low, one.high) + finer
        scale = 10.0**digits
        near = (
            [math.floor(value * scale), math.ceil(value * scale)]
            if both
            else [round(value * scale)]
        )
        kept = [round(step / scale, digits) for step in near]
        sets.append(sorted({min(max(x, one.low), one.high) for x in kept}))
    return np.array(list(itertools.product(*sets)))
