"""Integration of the dipole's power along paths whose panels halve themselves.

The kernel of the main job. A task is one path at one wavelength; tasks are independent.
"""

import numpy as np

from optics.kernels.arrays import Floats, Integers
from optics.kernels.compiled import borrowing, inline, kernel
from optics.kernels.panel import (
    light_error,
    light_space,
    light_sum,
    panel_error,
    panel_sum,
    probed_columns,
)
from optics.kernels.paths import first_split, place
from optics.kernels.problem import (
    Half,
    Problem,
    Sides,
    Source,
    scratch_space,
    work_space,
)
from optics.kernels.rules import DEGREES, NODES, PANEL_NODES, STAGES
from optics.kernels.source import dissipated, radiated

# A panel is halved at most this often, and no path takes more batches of nodes than this.
_DEEPEST = 48
_MOST_BATCHES = 1200
# A further stage about squares a panel's error; where that cannot do, halving comes at once.
_HOPELESS = 10.0


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


@borrowing
def _largest(missed: Floats, measure: Floats) -> float:
    """Largest ratio, or NaN if any is."""
    largest = 0.0
    for column in range(missed.size):
        ratio = missed[column] / measure[column]
        if not ratio <= largest:
            largest = ratio
            if ratio != ratio:
                break
    return largest


@kernel
def integrate(
    problem: Problem,
    rows: Integers,
    paths: Floats,
    everything: bool,
    scale: Floats,
    tolerance: float,
    result: Floats,
    error: Floats,
    batches: Integers,
) -> None:
    """Integrate the dipole's power along many paths.

    A panel takes the nodes of its rule stage by stage, and is halved where the last stage does
    not resolve it.

    Parameters
    ----------
    problem : Problem
    rows : int (t,)
        Wavelength of each task.
    paths : float (t, 4)
        kind, lo, hi, depth or split of each path, see `paths`.
    everything : bool
        False: dissipated power, q = 3 * positions columns channel * positions + position. True, for
        real paths below the outer light lines: every destination, q = 2 * COLUMNS * positions
        columns (orientation * COLUMNS + destination) * positions + position.
    scale : float (w, q)
        What errors are measured against, by wavelength.
    tolerance : float
        Largest error of one panel over scale.
    result : float (t, q), output
        Integrals are added.
    error : float (t,), output
        Largest estimated error over scale.
    batches : int (t,), output
        Batches of NODES nodes that were evaluated.
    """
    columns, positions = result.shape[1], problem.source.kz_positions.shape[1]
    work_up, work_down = work_space(problem.up.kd.shape[1]), work_space(problem.down.kd.shape[1])
    scratch = scratch_space()
    u, du = np.zeros(NODES, dtype=np.complex128), np.zeros(NODES, dtype=np.complex128)
    light, power = light_space(positions), np.zeros((3, positions, PANEL_NODES))
    by_column = power.reshape(3 * positions, PANEL_NODES)
    probed = probed_columns(1 if everything else 3, positions)
    moments, misses = np.zeros((DEGREES, probed.size)), np.zeros(columns)
    missed = np.zeros(columns)
    ends = np.zeros((2, 2 * _DEEPEST))
    for task in range(rows.size):
        source, sides, up, down = at_wavelength(problem, rows[task])
        measure = scale[rows[task]]
        missed[:] = 0.0
        kind, lo, hi, depth = paths[task, 0], paths[task, 1], paths[task, 2], paths[task, 3]
        ends[0, 0], ends[1, 0] = 0.0, 1.0
        waiting, count = 1, 0
        split = first_split(kind, depth)
        if split > 0.0:
            ends[1, 0], ends[0, 1], ends[1, 1] = split, split, 1.0
            waiting = 2
        while waiting > 0:
            waiting -= 1
            a, b = ends[0, waiting], ends[1, waiting]
            worst, stage = np.inf, -1
            while worst > tolerance and stage < STAGES - 1:
                if stage >= 0 and worst * worst > _HOPELESS * tolerance:
                    break
                stage += 1
                count += 1
                place(kind, lo, hi, depth, a, b, stage, u, du)
                first = stage * NODES
                if everything:
                    radiated(
                        source, sides, up, down, work_up, work_down, scratch, u, du, first, light
                    )
                    worst = light_error(light, stage, measure, probed, moments, misses)
                else:
                    dissipated(
                        source, up, down, work_up, work_down, scratch, u, du, first, power,
                    )  # fmt: skip
                    worst = panel_error(by_column, stage, measure, probed, misses)
            if worst > tolerance and b - a > 0.5**_DEEPEST and count < _MOST_BATCHES:
                ends[0, waiting], ends[1, waiting] = a, 0.5 * (a + b)
                ends[0, waiting + 1], ends[1, waiting + 1] = 0.5 * (a + b), b
                waiting += 2
            elif everything:
                light_sum(light, stage, misses, result[task], missed)
            else:
                panel_sum(by_column, stage, misses, result[task], missed)
        batches[task] = count
        error[task] = _largest(missed, measure)
