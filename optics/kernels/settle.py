"""The careful way, for stacks where one path alone could be fooled.

Two traps. Backward modes (thin metals near their plasma resonance) have poles below the real
axis, which an arc passes under unseen. Resonances narrower than any panel (guides that leak by
tunneling only, lossless metals) have poles on or just above the axis, which real nodes step
over. Here every interval is integrated both on the axis and on an arc; where they agree there
is no pole between them, where they differ the interval is halved. What is left around a pole
that even a tiny interval cannot resolve is settled by the sign: dissipated power is never
negative, so of the arcs below and above the axis the one that finds more has missed nothing. The
axis itself has no say there: next to a narrow pole its nodes may find far too much.
"""

from itertools import pairwise

import numpy as np

from optics.kernels.arrays import Floats
from optics.kernels.exits import AIR_BOTTOM, COLUMNS, MATCHED_BOTTOM, TOTAL
from optics.kernels.paths import ARC_BETWEEN_LINES, REAL, TAIL
from optics.kernels.problem import Problem
from optics.kernels.tasks import Tasks, run_dissipated, run_radiated

# Widths over k0 below which a disagreement is settled. Arcs lose digits next to a pole, so the
# wider the better; where power is shared out by what the axis sees, narrow is exact.
_NARROW_TRAPPED = 1e-4
_NARROW_FREE = 1e-6
_MOST_INTERVALS = 300  # at one level; more are taken as they are, with their disagreement
_POINT = 1e-11  # width at which an unresolved resonance counts as located
_AGREEMENT = 3.0  # two panels' worth of error and a margin
_SHORTEST = 1e-13  # distance at which two light lines are one
_FAR_OCTAVES = 5  # beyond the start of the near field, looked at one by one


class Careful:
    """Integrals of one wavelength, each interval on the axis and on an arc."""

    def __init__(self, problem: Problem, row: int, scale: Floats, tolerance: float) -> None:
        """Take the wavelength's row, the scale (2, z) of errors and a panel's tolerance."""
        self._problem = problem
        self._row = row
        self._scale = np.zeros((row + 1, *scale.shape))
        self._scale[row] = scale
        self._tolerance = tolerance

    def trapped(self, lo: float, hi: float) -> tuple[Floats, float]:
        """Dissipated power (3, z) from lo to hi, both beyond the outer light lines."""
        z = self._scale.shape[2]
        found, error = np.zeros((3, z)), 0.0
        if np.isfinite(hi):
            intervals = _graded(lo, hi)
        else:
            octaves = lo * 2.0 ** np.arange(_FAR_OCTAVES + 1)
            intervals = np.column_stack([octaves[:-1], octaves[1:]])
            tail = Tasks.on(np.array([self._row]), TAIL, octaves[-1:], hi, octaves[-1:])
            value, miss, _ = run_dissipated(self._problem, tail, self._scale, self._tolerance)
            found, error = found + value[0], float(miss[0])
        while intervals.size and hi > lo:
            straight, miss = self._on_axis(intervals)
            below = self._on_arc(intervals, 1.0)
            gap = self._gap(straight - below)
            agree = (gap <= _AGREEMENT * self._tolerance) | (len(gap) > _MOST_INTERVALS)
            narrow = intervals[:, 1] - intervals[:, 0] <= _NARROW_TRAPPED
            found += straight[agree].sum(axis=0)
            error += float(np.maximum(gap, miss)[agree].sum())
            stuck = ~agree & narrow
            if stuck.any():
                above = self._on_arc(intervals[stuck], -1.0)
                found += np.maximum(below[stuck], above).sum(axis=0)
                error += self._tolerance * int(stuck.sum())
            intervals = _halved(intervals[~agree & ~narrow])
        return found, error

    def free(self, lines: Floats) -> tuple[Floats, float]:
        """All destinations (2, COLUMNS, z) between light lines, 0 to the largest outer one.

        The power of a resonance that is narrower than any panel goes where the light goes at
        that point.
        """
        z = self._scale.shape[2]
        found, error = np.zeros((2, COLUMNS, z)), 0.0
        pairs = [(lo, hi) for lo, hi in pairwise(lines.tolist()) if hi - lo > _SHORTEST]
        intervals = np.concatenate([_graded(lo, hi) for lo, hi in pairs])
        while intervals.size:
            straight, miss = self._destinations(intervals)
            lack = self._lack(straight, self._on_arc(intervals, 1.0))
            gap = (np.abs(lack) / self._scale[self._row]).max(axis=(1, 2))
            agree = (gap <= _AGREEMENT * self._tolerance) | (len(gap) > _MOST_INTERVALS)
            narrow = intervals[:, 1] - intervals[:, 0] <= _NARROW_FREE
            found += straight[agree].sum(axis=0)
            error += float(np.maximum(gap, miss)[agree].sum())
            for i in np.flatnonzero(~agree & narrow):
                above = self._lack(straight[i : i + 1], self._on_arc(intervals[i : i + 1], -1.0))
                most = np.maximum(lack[i], above[0])
                if miss[i] > _AGREEMENT * self._tolerance:
                    # The axis has seen part of the resonance: better to take all of it anew.
                    most += straight[i, :, TOTAL]
                else:
                    found += straight[i]
                    error += float(miss[i])
                found += self._resonance(intervals[i], most)
                error += self._tolerance
            intervals = _halved(intervals[~agree & ~narrow])
        return found, error

    def _tasks(self, kind: int, intervals: Floats, depth: Floats | float = 0.0) -> Tasks:
        rows = np.full(len(intervals), self._row)
        return Tasks.on(rows, kind, intervals[:, 0], intervals[:, 1], depth)

    def _on_axis(self, intervals: Floats) -> tuple[Floats, Floats]:
        value, miss, _ = run_dissipated(
            self._problem, self._tasks(REAL, intervals), self._scale, self._tolerance
        )
        return value, miss

    def _on_arc(self, intervals: Floats, side: float) -> Floats:
        """Dissipated power on half circles below (side 1) or above (-1) the axis.

        Below the outer light lines the upper circle lies on the other side of the branch cuts,
        where waves come in from outside. That is right to the order of the leak, and it is asked
        only around resonances that leak too little to be resolved.
        """
        depth = side * np.minimum(0.5 * (intervals[:, 1] - intervals[:, 0]), 1.0)
        tasks = self._tasks(ARC_BETWEEN_LINES, intervals, depth)
        return run_dissipated(self._problem, tasks, self._scale, self._tolerance)[0]

    def _destinations(self, intervals: Floats) -> tuple[Floats, Floats]:
        tasks = self._tasks(REAL, intervals)
        value, miss, _ = run_radiated(self._problem, tasks, self._scale, self._tolerance)
        return value, miss

    def _gap(self, difference: Floats) -> Floats:
        gap: Floats = (np.abs(difference) / self._scale[self._row][[0, 1, 1]]).max(axis=(1, 2))
        return gap

    @staticmethod
    def _lack(straight: Floats, arc: Floats) -> Floats:
        """Power (t, 2, z) that an arc finds and real nodes do not."""
        return np.stack([arc[:, 0], arc[:, 1] + arc[:, 2]], axis=1) - straight[:, :, TOTAL]

    def _resonance(self, interval: Floats, lack: Floats) -> Floats:
        """Give missing power (2, z) to the destinations in the proportions found at its place."""
        a, b = interval
        while b - a > _POINT:
            middle = 0.5 * (a + b)
            left, right = np.abs(self._on_arc(np.array([[a, middle], [middle, b]]), 1.0))
            a, b = (a, middle) if left.max() > right.max() else (middle, b)
        here = self._destinations(np.array([[a, b]]))[0][0]
        known = here[:, AIR_BOTTOM:MATCHED_BOTTOM].sum(axis=1)
        shares = here / np.where(known > 0.0, known, 1.0)[:, None]
        shares[:, TOTAL] = 1.0
        return shares * lack[:, None]


def _graded(lo: float, hi: float) -> Floats:
    """Intervals (t, 2) from lo to hi that shrink toward both ends.

    A mode next to its cut-off changes the integrand within so little of a light line that no
    node of a long panel falls there.
    """
    near = 0.5 * np.append(0.0, 10.0 ** np.arange(-10.0, 1.0, 2.0))
    edges = lo + (hi - lo) * np.append(near, 1.0 - near[-2::-1])
    pairs = np.column_stack([edges[:-1], edges[1:]])
    return pairs[pairs[:, 1] > pairs[:, 0]]


def _halved(intervals: Floats) -> Floats:
    """Both halves of every interval (t, 2)."""
    middle = intervals.mean(axis=1)
    return np.concatenate(
        [
            np.column_stack([intervals[:, 0], middle]),
            np.column_stack([middle, intervals[:, 1]]),
        ]
    )
