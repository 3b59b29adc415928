"""A second look where metals are near their plasma resonance: every interval on another path.

Poles of backward modes lie below the axis, where an arc passes under them unseen; nodes on the
axis see them. Poles of plasmons far out lie close above the axis, where nodes may step over them;
an arc is far enough away. Where both paths agree there is no pole between. That is cheap beside
the careful way, which takes everything apart.
"""

from collections.abc import Iterable

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Floats, Integers
from optics.kernels.paths import ARC_FROM_LINE, REAL, TAIL
from optics.kernels.problem import Problem
from optics.kernels.tasks import Tasks, along_arcs, run_dissipated

_REACH = 8.0  # times the start of the near field: how far out the arc goes


class SecondLook:
    """Differences between two paths, over the scale of errors, at some wavelengths of a problem.

    Attributes
    ----------
    gap : float (w,)
        The largest so far; 0 where nothing was asked.
    """

    def __init__(
        self,
        problem: Problem,
        asked: NDArray[np.bool_],
        scale: Floats,
        per_panel: float,
        batches: Integers,
    ) -> None:
        """Take the wavelengths (w,), the scale (w, 2, z), a panel's accuracy, the count (w,)."""
        self._problem, self._scale, self._per_panel = problem, scale, per_panel
        self._rows, self._batches = np.flatnonzero(asked), batches
        self.gap = np.zeros(asked.size)

    def on_axis(self, lo: Floats, hi: Floats, power: Floats) -> None:
        """Look again at power (w, 3, z) that an arc finds from lo to hi (w,)."""
        rows = self._rows
        self._compare([Tasks.on(rows, REAL, lo[rows], hi[rows]).nonempty()], power)

    def on_arc(self, far: Floats, length: Floats, power: Floats) -> None:
        """Look again at power (w, 3, z) that the axis finds beyond far (w,)."""
        rows = self._rows
        far, length = far[rows], np.maximum(length[rows], _REACH * far[rows])
        arc = along_arcs(rows, ARC_FROM_LINE, far, _REACH * far)
        self._compare([arc, Tasks.on(rows, TAIL, _REACH * far, np.inf, length)], power)

    def _compare(self, paths: Iterable[Tasks], power: Floats) -> None:
        if self._rows.size == 0:
            return
        difference, miss = power.copy(), np.zeros(self.gap.size)
        seen = np.zeros(self.gap.size, dtype=np.bool_)
        for tasks in paths:
            # One path of a kind for each wavelength, so that no row stands twice.
            value, error, used = run_dissipated(self._problem, tasks, self._scale, self._per_panel)
            difference[tasks.rows] -= value
            miss[tasks.rows] += error
            self._batches[tasks.rows] += used
            seen[tasks.rows] = True
        worst = np.abs(difference / self._scale[:, [0, 1, 1]]).max(axis=(1, 2)) + miss
        self.gap = np.where(seen, np.maximum(self.gap, worst), self.gap)


__all__ = ["SecondLook"]
