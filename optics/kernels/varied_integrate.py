"""Integration of rates of change along paths whose ends may move.

The twin of `integrate`. The nodes move with the ends of their path, so that an integrand that is
smooth between two light lines has a smooth rate too, however the lines move. A path's depth,
and the length of a tail, stay: an integral does not depend on them.
"""

import numpy as np

from optics.kernels.arrays import Complexes, Floats, Integers
from optics.kernels.compiled import borrowing, kernel
from optics.kernels.integrate import at_wavelength
from optics.kernels.panel import panel_error, panel_sum, probed_columns
from optics.kernels.paths import TAIL, first_split, place
from optics.kernels.problem import Problem
from optics.kernels.rules import NODES, PANEL_NODES, STAGES
from optics.kernels.variation import Rates, rates_at
from optics.kernels.varied_radiated import varied_radiated
from optics.kernels.varied_response import find_moves, moves_space, response_space
from optics.kernels.varied_solved import solved_space
from optics.kernels.varied_source import varied_dissipated, varied_scratch

# A panel is halved at most this often, and no path takes more batches of nodes than this.
_DEEPEST = 48
_MOST_BATCHES = 1200
# A further stage about squares a panel's error; where that cannot do, halving comes at once.
_HOPELESS = 10.0


@borrowing
def move(
    kind: float, lo: float, hi: float, ends: Floats, u: Complexes, du: Complexes,
    u_rate: Floats, du_rate: Floats,
) -> None:  # fmt: skip
    """Rates of nodes and path derivative from those of the ends.

    Parameters
    ----------
    ends : float (p, 2)
        Rates of lo and hi.
    u, du : complex (NODES,)
        From `paths.place`.
    u_rate, du_rate : float (p, NODES), output
        Real on every kind of path: an end moves along the real axis.
    """
    inverse = 0.0 if kind == TAIL else 1.0 / (hi - lo)
    for p in range(ends.shape[0]):
        first, spread = ends[p, 0], (ends[p, 1] - ends[p, 0]) * inverse
        for i in range(NODES):
            u_rate[p, i] = first + spread * (u[i].real - lo)
            du_rate[p, i] = spread * du[i].real


@kernel
def integrate_rates(
    problem: Problem,
    rates: Rates,
    rows: Integers,
    paths: Floats,
    ends: Floats,
    everything: bool,
    scale: Floats,
    tolerance: float,
    result: Floats,
    error: Floats,
) -> None:
    """Integrate the rates of the dipole's power along many paths.

    Parameters
    ----------
    problem, rows, paths, everything, tolerance
        As in `integrate.integrate`.
    rates : Rates
    ends : float (t, p, 2)
        Rates of lo and hi of every path.
    scale : float (t, q)
        What errors are measured against; q = p * 3 * positions columns as of
        `varied_dissipated`, or p * 2 * COLUMNS * positions as of `varied_radiated`.
    result, error : float (t, q), output
        Integrals and their estimated errors are added.
    """
    columns, directions = result.shape[1], ends.shape[1]
    solved_up = solved_space(problem.up.kd.shape[1])
    solved_down = solved_space(problem.down.kd.shape[1])
    vary_up, vary_down = response_space(directions), response_space(directions)
    scratch = varied_scratch(directions, problem.source.kz_positions.shape[1])
    moves = moves_space(directions)
    u, du = np.zeros(NODES, dtype=np.complex128), np.zeros(NODES, dtype=np.complex128)
    u_rate, du_rate = np.zeros((directions, NODES)), np.zeros((directions, NODES))
    values = np.zeros((columns, PANEL_NODES))
    probed, misses = probed_columns(columns, 1), np.zeros(columns)
    open_ends = np.zeros((2, 2 * _DEEPEST))
    for task in range(rows.size):
        source, sides, up, down = at_wavelength(problem, rows[task])
        here = rates_at(rates, rows[task])
        find_moves(here, ends[task], moves)
        kind, lo, hi, depth = paths[task, 0], paths[task, 1], paths[task, 2], paths[task, 3]
        open_ends[0, 0], open_ends[1, 0] = 0.0, 1.0
        waiting, count = 1, 0
        split = first_split(kind, depth)
        if split > 0.0:
            open_ends[1, 0], open_ends[0, 1], open_ends[1, 1] = split, split, 1.0
            waiting = 2
        while waiting > 0:
            waiting -= 1
            a, b = open_ends[0, waiting], open_ends[1, waiting]
            worst, stage = np.inf, -1
            while worst > tolerance and stage < STAGES - 1:
                if stage >= 0 and worst * worst > _HOPELESS * tolerance:
                    break
                stage += 1
                count += 1
                place(kind, lo, hi, depth, a, b, stage, u, du)
                move(kind, lo, hi, ends[task], u, du, u_rate, du_rate)
                first = stage * NODES
                if everything:
                    varied_radiated(
                        source, here, moves, sides, up, down, solved_up, solved_down, vary_up,
                        vary_down, scratch, u, du, u_rate, du_rate, first, values,
                    )  # fmt: skip
                else:
                    varied_dissipated(
                        source, here, moves, up, down, solved_up, solved_down, vary_up, vary_down,
                        scratch, u, du, u_rate, du_rate, kind == TAIL, first, values,
                    )  # fmt: skip
                worst = panel_error(values, stage, scale[task], probed, misses)
            if worst > tolerance and b - a > 0.5**_DEEPEST and count < _MOST_BATCHES:
                open_ends[0, waiting], open_ends[1, waiting] = a, 0.5 * (a + b)
                open_ends[0, waiting + 1], open_ends[1, waiting + 1] = 0.5 * (a + b), b
                waiting += 2
            else:
                panel_sum(values, stage, misses, result[task], error[task])
