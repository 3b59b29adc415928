"""Outcomes of a device over its variables' box, with derivatives."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from optics.study.evaluate import Question, answer
from optics.study.gradient import values_and_gradient, why_no_gradient

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

# Step of a difference as a share of the bounds' range: films move by some tenths of a nanometer,
# where the third derivative and the engine's tolerance cost about as much.
_STEP = 1e-3


@dataclass(frozen=True, slots=True)
class DeviceLandscape:
    """Outcomes at shares of the way between the bounds, see `optimize_local.Landscape`.

    Attributes
    ----------
    exact : bool
        Whether derivatives are those of the engine; otherwise they are made by differences.
    """

    question: Question
    low: Floats  # (p,)
    high: Floats  # (p,)
    exact: bool

    def value(self, unit: Floats) -> Floats:
        """Outcomes (k,) at a point (p,) of the unit box; NaN where undefined."""
        found = answer(self.question, self._at(unit))
        return found[: len(self.question.outcomes)]

    def slope(self, unit: Floats) -> Floats:
        """Their derivatives (k, p) there, per share of the way between the bounds."""
        if not self.exact:
            return self._differences(unit)
        # Points are computed in parallel; each keeps to one thread.
        _, gradient, _ = values_and_gradient(self.question, self._at(unit), threads=1)
        return gradient * (self.high - self.low)

    def _at(self, unit: Floats) -> Floats:
        return np.asarray(self.low + unit * (self.high - self.low))

    def _differences(self, unit: Floats) -> Floats:
        """Derivatives by differences of second order, at bounds one-sided."""
        columns = []
        for place in range(unit.size):
            # Three points around the middle one, or beside a bound.
            middle = min(max(unit[place], _STEP), 1.0 - _STEP)
            offset = (unit[place] - middle) / _STEP
            ends = [_moved(unit, place, middle + side * _STEP) for side in (-1.0, 1.0)]
            before, after = (self.value(end) for end in ends)
            column = (after - before) / (2.0 * _STEP)
            if offset != 0.0:
                bend = after - 2.0 * self.value(_moved(unit, place, middle)) + before
                column = column + offset * bend / _STEP
            columns.append(column)
        return np.stack(columns, axis=1)


def landscape_of(question: Question, low: Floats, high: Floats) -> tuple[DeviceLandscape, str]:
    """Landscape over bounds (p,), and how its derivatives are made and why."""
    reasons = why_no_gradient(question)
    method = "exact"
    if reasons:
        why = "; ".join(f"{name}: {reason}" for name, reason in reasons.items())
        method = f"differences ({why})"
    return DeviceLandscape(question, low, high, not reasons), method


def _moved(unit: Floats, place: int, value: float) -> Floats:
    moved = unit.copy()
    moved[place] = value
    return moved
