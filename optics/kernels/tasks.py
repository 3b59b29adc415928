"""Lists of integration tasks, and their sums by wavelength."""

from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from optics.kernels.arrays import Floats, Integers
from optics.kernels.exits import COLUMNS
from optics.kernels.integrate import integrate
from optics.kernels.paths import REAL, REAL_FROM_ZERO
from optics.kernels.problem import Problem


class Tasks(NamedTuple):
    """One path per entry, each at one wavelength."""

    rows: Integers  # (t,)
    paths: Floats  # (t, 4): kind, lo, hi, depth

    @classmethod
    def on(
        cls, rows: Integers, kind: ArrayLike, lo: ArrayLike, hi: ArrayLike, depth: ArrayLike = 0.0
    ) -> "Tasks":
        """Paths of one kind."""
        paths = np.empty((rows.size, 4))
        for column, value in enumerate((kind, lo, hi, depth)):
            paths[:, column] = value
        return cls(rows, paths)

    @classmethod
    def between(cls, rows: Integers, lines: Floats, splits: ArrayLike = 0.0) -> "Tasks":
        """Real paths between neighboring light lines (w, p), from 0; empty ones are left out.

        splits : float (w, p - 1), where the first panels of a path meet.
        """
        lo, hi = lines[:, :-1].reshape(-1), lines[:, 1:].reshape(-1)
        kind = np.where(lo == 0.0, REAL_FROM_ZERO, REAL)
        split = np.broadcast_to(splits, (rows.size, lines.shape[1] - 1)).reshape(-1)
        return cls.on(np.repeat(rows, lines.shape[1] - 1), kind, lo, hi, split).nonempty()

    def where(self, chosen: NDArray[np.bool_]) -> "Tasks":
        """Only some of the paths (t,)."""
        return Tasks(self.rows[chosen], self.paths[chosen])

    def nonempty(self) -> "Tasks":
        """Only the paths that have a length."""
        return self.where(self.paths[:, 2] - self.paths[:, 1] > 1e-13)


def along_arcs(
    rows: Integers, kind: ArrayLike, lo: Floats, hi: Floats, flatness: float = 1.0
) -> Tasks:
    """Half ellipses below the axis, flatness = 1 half circles at most.

    Deeper than k0 they would pass under too many backward modes.
    """
    return Tasks.on(rows, kind, lo, hi, np.minimum(flatness * 0.5 * (hi - lo), 1.0))


def run_dissipated(
    problem: Problem, tasks: Tasks, scale: Floats, tolerance: float
) -> tuple[Floats, Floats, Integers]:
    """Dissipated power of every task (t, 3, z), its error over scale (t,), batches (t,).

    scale : float (w, 2, z)
    """
    z = scale.shape[2]
    by_channel = scale[:, [0, 1, 1]].reshape(-1, 3 * z)
    value, error, batches = _run(problem, tasks, False, by_channel, tolerance)
    return value.reshape(-1, 3, z), error, batches


def run_radiated(
    problem: Problem, tasks: Tasks, scale: Floats, tolerance: float
) -> tuple[Floats, Floats, Integers]:
    """Every destination of every task (t, 2, COLUMNS, z), its error over scale, batches."""
    z = scale.shape[2]
    by_column = np.repeat(scale, COLUMNS, axis=1).reshape(-1, 2 * COLUMNS * z)
    value, error, batches = _run(problem, tasks, True, by_column, tolerance)
    return value.reshape(-1, 2, COLUMNS, z), error, batches


def _run(
    problem: Problem, tasks: Tasks, everything: bool, scale: Floats, tolerance: float
) -> tuple[Floats, Floats, Integers]:
    count = tasks.rows.size
    value, error, batches = np.zeros((count, scale.shape[1])), np.zeros(count), np.zeros(count, int)
    integrate(problem, tasks.rows, tasks.paths, everything, scale, tolerance, value, error, batches)
    return value, error, batches


def dissipated_power(
    problem: Problem, tasks: Tasks, scale: Floats, tolerance: float, batches: Integers
) -> tuple[Floats, Floats]:
    """Sum of the tasks by wavelength: power (w, 3, z) and error over scale (w,).

    batches (w,) is counted up.
    """
    w, _, z = scale.shape
    value, miss, used = run_dissipated(problem, tasks, scale, tolerance)
    power, error = np.zeros((w, 3, z)), np.zeros(w)
    _add_up(tasks.rows, (value, miss, used), (power, error, batches))
    return power, error


def every_destination(
    problem: Problem, tasks: Tasks, scale: Floats, tolerance: float, batches: Integers
) -> tuple[Floats, Floats]:
    """Sum of the tasks by wavelength: (w, 2, COLUMNS, z) and error over scale (w,)."""
    w, _, z = scale.shape
    value, miss, used = run_radiated(problem, tasks, scale, tolerance)
    power, error = np.zeros((w, 2, COLUMNS, z)), np.zeros(w)
    _add_up(tasks.rows, (value, miss, used), (power, error, batches))
    return power, error


def _add_up(rows: Integers, found: Sequence[NDArray[Any]], totals: Sequence[NDArray[Any]]) -> None:
    """Add what was found by task (t, ...) to totals by wavelength (w, ...).

    rows : int (t,), ascending, as those of every list of tasks are.
    """
    if rows.size == 0:
        return
    starts = np.flatnonzero(np.diff(rows, prepend=-1))
    for values, total in zip(found, totals, strict=True):
        sums = values if starts.size == rows.size else np.add.reduceat(values, starts, axis=0)
        if starts.size == len(total):  # every wavelength
            total += sums
        else:
            total[rows[starts]] += sums
