"""Lists of integration tasks, and their sums by wavelength."""

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from optics.kernels.arrays import Floats, Integers
from optics.kernels.exits import COLUMNS
from optics.kernels.integrate import integrate_dissipated, integrate_radiated
from optics.kernels.problem import Problem


class Tasks(NamedTuple):
    """One path per entry, each at one wavelength."""

    rows: Integers  # (t,)
    paths: Floats  # (t, 4): kind, lo, hi, depth

    @classmethod
    def on(
        cls, rows: Integers, kind: int, lo: ArrayLike, hi: ArrayLike, depth: ArrayLike = 0.0
    ) -> "Tasks":
        """Paths of one kind."""
        paths = np.empty((rows.size, 4))
        for column, value in enumerate((kind, lo, hi, depth)):
            paths[:, column] = value
        return cls(rows, paths)

    @classmethod
    def between(cls, rows: Integers, kind: int, lines: Floats) -> "Tasks":
        """Paths between neighboring break points (w, p); empty ones are left out."""
        count = lines.shape[1] - 1
        tasks = cls.on(
            np.repeat(rows, count), kind, lines[:, :-1].reshape(-1), lines[:, 1:].reshape(-1)
        )
        return tasks.nonempty()

    def nonempty(self) -> "Tasks":
        """Only the paths that have a length."""
        kept = self.paths[:, 2] - self.paths[:, 1] > 1e-13
        return Tasks(self.rows[kept], self.paths[kept])


def along_arcs(rows: Integers, kind: int, lo: Floats, hi: Floats) -> Tasks:
    """Half ellipses below the axis; deeper than k0 they would pass under backward modes."""
    return Tasks.on(rows, kind, lo, hi, np.minimum(0.5 * (hi - lo), 1.0))


def run_dissipated(
    problem: Problem, tasks: Tasks, scale: Floats, tolerance: float
) -> tuple[Floats, Floats, Integers]:
    """Dissipated power of every task (t, 3, z), its error over scale (t,), panels (t,).

    scale : float (w, 2, z)
    """
    z = scale.shape[2]
    by_channel = scale[:, [0, 1, 1]].reshape(-1, 3 * z)[tasks.rows]
    value, error, panels = _run(integrate_dissipated, problem, tasks, by_channel, tolerance)
    return value.reshape(-1, 3, z), error, panels


def run_radiated(
    problem: Problem, tasks: Tasks, scale: Floats, tolerance: float
) -> tuple[Floats, Floats, Integers]:
    """Every destination of every task (t, 2, COLUMNS, z), its error over scale, panels."""
    z = scale.shape[2]
    by_column = np.repeat(scale, COLUMNS, axis=1).reshape(-1, 2 * COLUMNS * z)[tasks.rows]
    value, error, panels = _run(integrate_radiated, problem, tasks, by_column, tolerance)
    return value.reshape(-1, 2, COLUMNS, z), error, panels


def _run(
    kernel: Callable[..., None], problem: Problem, tasks: Tasks, scale: Floats, tolerance: float
) -> tuple[Floats, Floats, Integers]:
    value, miss = np.zeros_like(scale), np.zeros_like(scale)
    panels = np.zeros(tasks.rows.size, dtype=np.int64)
    kernel(problem, tasks.rows, tasks.paths, scale, tolerance, value, miss, panels)
    return value, (miss / scale).max(axis=1, initial=0.0), panels


def dissipated_power(
    problem: Problem, tasks: Tasks, scale: Floats, tolerance: float, panels: Integers
) -> tuple[Floats, Floats]:
    """Sum of the tasks by wavelength: power (w, 3, z) and error over scale (w,).

    panels (w,) is counted up.
    """
    w, _, z = scale.shape
    value, miss, used = run_dissipated(problem, tasks, scale, tolerance)
    power, error = np.zeros((w, 3, z)), np.zeros(w)
    np.add.at(power, tasks.rows, value)
    np.add.at(error, tasks.rows, miss)
    np.add.at(panels, tasks.rows, used)
    return power, error


def every_destination(
    problem: Problem, tasks: Tasks, scale: Floats, tolerance: float, panels: Integers
) -> tuple[Floats, Floats]:
    """Sum of the tasks by wavelength: (w, 2, COLUMNS, z) and error over scale (w,)."""
    w, _, z = scale.shape
    value, miss, used = run_radiated(problem, tasks, scale, tolerance)
    power, error = np.zeros((w, 2, COLUMNS, z)), np.zeros(w)
    np.add.at(power, tasks.rows, value)
    np.add.at(error, tasks.rows, miss)
    np.add.at(panels, tasks.rows, used)
    return power, error
