"""Integration of the dipole's power along paths whose panels halve themselves.

The kernel of the main job. A task is one path at one wavelength; tasks are independent.
"""

import numpy as np

from optics.kernels.arrays import Floats, Integers
from optics.kernels.compiled import inline, kernel
from optics.kernels.exits import COLUMNS
from optics.kernels.paths import TAIL, first_split, panel_error, panel_sum, place, probed_columns
from optics.kernels.problem import (
    Half,
    Problem,
    Sides,
    Source,
    scratch_space,
    work_space,
)
from optics.kernels.rules import NODES, STAGES
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
        False: dissipated power, q = 3 * positions columns as of `source.dissipated`. True, for
        real paths below the outer light lines: every destination, q = 2 * COLUMNS * positions
        columns as of `source.radiated`.
    scale : float (t, q)
        What errors are measured against.
    tolerance : float
        Largest error of one panel over scale.
    result, error : float (t, q), output
        Integrals and their estimated errors are added.
    batches : int (t,), output
        Batches of NODES nodes that were evaluated.
    """
    columns = result.shape[1]
    work_up, work_down = work_space(problem.up.kd.shape[1]), work_space(problem.down.kd.shape[1])
    scratch = scratch_space(problem.source.kz_positions.shape[1], COLUMNS)
    u, du = np.zeros(NODES, dtype=np.complex128), np.zeros(NODES, dtype=np.complex128)
    values = np.zeros((STAGES * NODES, columns))
    positions = problem.source.kz_positions.shape[1]
    probed = probed_columns(columns // positions, positions)
    moments, misses = np.zeros((4, probed.size)), np.zeros(columns)
    ends = np.zeros((2, 2 * _DEEPEST))
    for task in range(rows.size):
        source, sides, up, down = at_wavelength(problem, rows[task])
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
                batch = values[stage * NODES : (stage + 1) * NODES]
                if everything:
                    radiated(source, sides, up, down, work_up, work_down, scratch, u, du, batch)
                else:
                    beyond = kind == TAIL
                    dissipated(source, up, down, work_up, work_down, scratch, u, du, beyond, batch)
                worst = panel_error(values, stage, scale[task], probed, moments, misses)
            if worst > tolerance and b - a > 0.5**_DEEPEST and count < _MOST_BATCHES:
                ends[0, waiting], ends[1, waiting] = a, 0.5 * (a + b)
                ends[0, waiting + 1], ends[1, waiting + 1] = 0.5 * (a + b), b
                waiting += 2
            else:
                panel_sum(values, stage, misses, result[task], error[task])
        batches[task] = count
