"""Integration of the dipole's power along paths whose panels halve themselves.

The two kernels of the main job. A task is one path at one wavelength; tasks are independent.
"""

import numpy as np

from optics.kernels.arrays import Floats, Integers
from optics.kernels.compiled import inline, kernel
from optics.kernels.exits import COLUMNS
from optics.kernels.paths import NODES, TAIL, panel_error, panel_sum, place
from optics.kernels.problem import Half, Problem, Sides, Source, scratch_space, work_space
from optics.kernels.source import dissipated, radiated

# A panel is halved at most this often, and no path uses more panels than this.
_DEEPEST = 48
_MOST_PANELS = 600


@inline
def at_wavelength(problem: Problem, w: int) -> tuple[Source, Sides, Half, Half]:
    """Source, sides and halves of one wavelength."""
    source, sides, up, down = problem
    return (
        Source(
            source.eps_o[w], source.eps_e[w], source.kd[w], source.kz_positions[w], source.bulk[w]
        ),
        Sides(sides.kind, sides.n_outer[w], sides.n_out[w], sides.loss[w]),
        Half(up.eps_o[w], up.eps_e[w], up.kd[w]),
        Half(down.eps_o[w], down.eps_e[w], down.kd[w]),
    )


@kernel
def integrate_dissipated(
    problem: Problem,
    rows: Integers,
    paths: Floats,
    scale: Floats,
    tolerance: float,
    result: Floats,
    error: Floats,
    panels: Integers,
) -> None:
    """Dissipated power along many paths.

    Parameters
    ----------
    problem : Problem
    rows : int (t,)
        Wavelength of each task.
    paths : float (t, 4)
        kind, lo, hi, depth of each path, see `paths.place`.
    scale : float (t, 3 * positions)
        What errors are measured against.
    tolerance : float
        Largest error of one panel over scale.
    result, error : float (t, 3 * positions), output
        Integrals and their estimated errors; column channel * positions + position.
    panels : int (t,), output
    """
    columns = result.shape[1]
    work_up, work_down = work_space(problem.up.kd.shape[1]), work_space(problem.down.kd.shape[1])
    u, du = np.zeros(NODES, dtype=np.complex128), np.zeros(NODES, dtype=np.complex128)
    values, moments, misses = np.zeros((NODES, columns)), np.zeros((3, columns)), np.zeros(columns)
    scratch = scratch_space(problem.source.kz_positions.shape[1], COLUMNS)
    ends = np.zeros((2, 2 * _DEEPEST))
    for task in range(rows.size):
        source, _, up, down = at_wavelength(problem, rows[task])
        kind, lo, hi, depth = paths[task, 0], paths[task, 1], paths[task, 2], paths[task, 3]
        ends[0, 0], ends[1, 0] = 0.0, 1.0
        waiting, count = 1, 0
        while waiting > 0:
            waiting -= 1
            a, b = ends[0, waiting], ends[1, waiting]
            place(kind, lo, hi, depth, a, b, u, du)
            dissipated(source, up, down, work_up, work_down, scratch, u, du, kind == TAIL, values)
            count += 1
            worst = panel_error(values, scale[task], moments, misses)
            if worst > tolerance and b - a > 0.5**_DEEPEST and count < _MOST_PANELS:
                ends[0, waiting], ends[1, waiting] = a, 0.5 * (a + b)
                ends[0, waiting + 1], ends[1, waiting + 1] = 0.5 * (a + b), b
                waiting += 2
                continue
            panel_sum(values, misses, result[task], error[task])
        panels[task] = count


@kernel
def integrate_radiated(
    problem: Problem,
    rows: Integers,
    paths: Floats,
    scale: Floats,
    tolerance: float,
    result: Floats,
    error: Floats,
    panels: Integers,
) -> None:
    """Dissipated power and every destination along real paths below the outer light lines.

    Parameters as `integrate_dissipated`, but with 2 * COLUMNS * positions columns:
    (orientation * COLUMNS + destination) * positions + position.
    """
    columns = result.shape[1]
    work_up, work_down = work_space(problem.up.kd.shape[1]), work_space(problem.down.kd.shape[1])
    u, du = np.zeros(NODES, dtype=np.complex128), np.zeros(NODES, dtype=np.complex128)
    values, moments, misses = np.zeros((NODES, columns)), np.zeros((3, columns)), np.zeros(columns)
    scratch = scratch_space(problem.source.kz_positions.shape[1], COLUMNS)
    ends = np.zeros((2, 2 * _DEEPEST))
    for task in range(rows.size):
        source, sides, up, down = at_wavelength(problem, rows[task])
        kind, lo, hi, depth = paths[task, 0], paths[task, 1], paths[task, 2], paths[task, 3]
        ends[0, 0], ends[1, 0] = 0.0, 1.0
        waiting, count = 1, 0
        while waiting > 0:
            waiting -= 1
            a, b = ends[0, waiting], ends[1, waiting]
            place(kind, lo, hi, depth, a, b, u, du)
            radiated(source, sides, up, down, work_up, work_down, scratch, u, du, values)
            count += 1
            worst = panel_error(values, scale[task], moments, misses)
            if worst > tolerance and b - a > 0.5**_DEEPEST and count < _MOST_PANELS:
                ends[0, waiting], ends[1, waiting] = a, 0.5 * (a + b)
                ends[0, waiting + 1], ends[1, waiting + 1] = 0.5 * (a + b), b
                waiting += 2
                continue
            panel_sum(values, misses, result[task], error[task])
        panels[task] = count
