"""Lists of integration paths with moving ends, and their sums by wavelength. See `tasks`."""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Floats
from optics.kernels.exits import COLUMNS
from optics.kernels.problem import Problem
from optics.kernels.tasks import Tasks
from optics.kernels.variation import Rates
from optics.kernels.varied_integrate import integrate_rates


class MovingTasks(NamedTuple):
    """Paths and the rates of their ends."""

    tasks: Tasks
    ends: Floats  # (t, p, 2) rates of lo, hi

    @classmethod
    def between(cls, tasks: Tasks, lo: Floats, hi: Floats) -> "MovingTasks":
        """Paths that have a length; lo, hi (t, p) are the rates of their ends."""
        kept = tasks.paths[:, 2] - tasks.paths[:, 1] > 1e-13
        ends = np.ascontiguousarray(np.stack([lo, hi], axis=2)[kept])
        return cls(Tasks(tasks.rows[kept], tasks.paths[kept]), ends)


def run_dissipated_rates(
    problem: Problem, rates: Rates, moving: MovingTasks, scale: Floats, tolerance: float
) -> tuple[Floats, Floats]:
    """Rates of the dissipated power of every task (t, p, 3, z), error over scale (t, p).

    scale : float (w, p, 2, z)
    """
    _, directions, _, z = scale.shape
    by_channel = scale[:, :, [0, 1, 1]].reshape(scale.shape[0], -1)[moving.tasks.rows]
    value, miss = _run(problem, rates, moving, False, by_channel, tolerance)
    return value.reshape(-1, directions, 3, z), miss


def run_radiated_rates(
    problem: Problem, rates: Rates, moving: MovingTasks, scale: Floats, tolerance: float
) -> tuple[Floats, Floats]:
    """Rates of every destination of every task (t, p, 2, COLUMNS, z), error over scale (t, p)."""
    _, directions, _, z = scale.shape
    by_column = np.repeat(scale, COLUMNS, axis=2).reshape(scale.shape[0], -1)[moving.tasks.rows]
    value, miss = _run(problem, rates, moving, True, by_column, tolerance)
    return value.reshape(-1, directions, 2, COLUMNS, z), miss


def _run(
    problem: Problem,
    rates: Rates,
    moving: MovingTasks,
    everything: bool,
    scale: Floats,
    tolerance: float,
) -> tuple[Floats, Floats]:
    value, miss = np.zeros_like(scale), np.zeros_like(scale)
    (rows, paths), ends = moving
    integrate_rates(problem, rates, rows, paths, ends, everything, scale, tolerance, value, miss)
    relative = (miss / scale).reshape(rows.size, ends.shape[1], scale.shape[1] // ends.shape[1])
    return value, relative.max(axis=2, initial=0.0)


def by_wavelength(
    moving: MovingTasks, w: int, values: Floats, misses: Floats
) -> tuple[Floats, Floats]:
    """Sum values (t, p, ...) and errors (t, p) of the tasks to (w, p, ...) and (w, p)."""
    total, error = np.zeros((w, *values.shape[1:])), np.zeros((w, *misses.shape[1:]))
    np.add.at(total, moving.tasks.rows, values)
    np.add.at(error, moving.tasks.rows, misses)
    return total, error
