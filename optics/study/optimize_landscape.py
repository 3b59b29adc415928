"""Outcomes of a device over its variables' box, with derivatives."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from optics.study.evaluate import Question, answer

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

# Step of a difference as a share of the bounds' range: films move by some tenths of a nanometer,
# where the third derivative and the engine's tolerance cost about as much.
_STEP = 1e-3


@dataclass(frozen=True, slots=True)
class DeviceLandscape:
    """Outcomes at shares of the way between the bounds, see `optimize_local.Landscape`."""

    question: Question
    low: Floats  # (p,)
    high: Floats  # (p,)

    @property
    def method(self) -> str:
        """How derivatives are made."""
        return "differences"

    def value(self, unit: Floats) -> Floats:
        """Outcomes (k,) at a point (p,) of the unit box; NaN where undefined."""
        found = answer(self.question, self.low + unit * (self.high - self.low))
        return found[: len(self.question.outcomes)]

    def slope(self, unit: Floats) -> Floats:
        """Derivatives (k, p) by differences of second order, at bounds one-sided."""
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


def _moved(unit: Floats, place: int, value: float) -> Floats:
    moved = unit.copy()
    moved[place] = value
    return moved
