"""How the break points of the paths move when the device changes.

Where lines coincide they part when one of them moves. What counts then is the line at which a
destination begins; of several such lines the middle between the fastest and the slowest, which
is what a central difference sees of the largest.
"""

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Floats
from optics.kernels.exits import ABSORBING, MATCHED, OPEN
from optics.kernels.geometry import largest_index, light_lines, outer_light_line
from optics.kernels.problem import Problem
from optics.kernels.variation import Rates

_SAME = 1e-13  # distance at which two light lines are one
# What makes a line matter where several coincide.
_SMOOTH, _BRANCH, _EXIT, _OUTER = range(4)


def light_line_rates(problem: Problem, rates: Rates) -> Floats:
    """Rates (w, p, lines) of `geometry.light_lines`."""
    sides, source = problem.sides, problem.source
    w, directions = rates.kd.shape
    zero = np.zeros((w, 1))
    own = np.sqrt(np.stack([source.eps_o, source.eps_e], axis=1))
    values = np.hstack([zero, own, sides.n_out, sides.n_outer])
    moves = np.concatenate(
        [
            np.zeros((w, directions, 1)),
            rates.eps / (2.0 * own)[:, None],
            rates.n_out,
            rates.n_outer,
        ],
        axis=2,
    )
    rank = np.hstack([np.full((w, 3), _SMOOTH), *_side_ranks(problem)])
    lines = light_lines(problem)
    near = np.abs(np.minimum(values, lines[:, -1:])[:, None] - lines[:, :, None]) <= _SAME
    return _leading(near, rank, moves)


def _side_ranks(problem: Problem) -> tuple[Floats, Floats]:
    """Ranks (w, 2) of the lines of the surroundings and of the media next to the films."""
    sides = problem.sides
    next_to_films = (sides.kind == MATCHED) | (sides.kind == OPEN)
    exits = np.where(next_to_films, sides.n_outer, sides.n_out)
    exits = np.where(sides.kind == ABSORBING, 0.0, exits)
    last = exits >= exits.max(axis=1, keepdims=True) - _SAME
    outermost = sides.n_outer >= outer_light_line(problem)[:, None] - _SAME
    beyond = np.where(next_to_films, _SMOOTH, np.where(last, _EXIT, _BRANCH))
    inner = np.where(outermost, _OUTER, np.where(last & next_to_films, _EXIT, _BRANCH))
    absorbing = sides.kind == ABSORBING
    return np.where(absorbing, -1, beyond), np.where(absorbing, -1, inner)


def _leading(near: NDArray[np.bool_], rank: Floats, moves: Floats) -> Floats:
    """Move (w, p, lines) of the lines of highest rank among those that are near.

    near : bool (w, lines, n); rank (w, n); moves (w, p, n)
    """
    ranks = np.where(near, rank[:, None], -2)
    chosen = (ranks == ranks.max(axis=2, keepdims=True))[:, None]
    most = np.where(chosen, moves[:, :, None], -np.inf).max(axis=3)
    least = np.where(chosen, moves[:, :, None], np.inf).min(axis=3)
    middle: Floats = 0.5 * (most + least)
    return middle


def plasmon_start_rates(problem: Problem, rates: Rates, start: Floats, trapped: Floats) -> Floats:
    """Rates (w, p) of where TM power begins to count as plasmon.

    start : float (w,) that place; trapped : float (w, p) rates of the largest outer light line
    """
    n_e = np.sqrt(problem.source.eps_e)
    own = rates.eps[:, :, 1] / (2.0 * n_e)[:, None]
    beyond = (start == n_e) & (start > outer_light_line(problem))
    moved: Floats = np.where(beyond[:, None], own, trapped)
    return moved


def largest_index_rates(problem: Problem, rates: Rates) -> Floats:
    """Rates (w, p) of `geometry.largest_index`."""
    values, moves = [], []
    for half, change in ((problem.up, rates.up), (problem.down, rates.down)):
        absent = half.kd == 0.0
        absent[:, [0, -1]] = False
        for eps, rate in ((half.eps_o, change.eps_o), (half.eps_e, change.eps_e)):
            root = np.sqrt(eps)
            values.append(np.where(absent, 1.0, root.real))
            moves.append(np.where(absent[:, None], 0.0, (rate / (2.0 * root)[:, None]).real))
    found = np.hstack(values)
    near = np.abs(found - largest_index(problem)[:, None]) <= _SAME
    return _leading(near[:, None], np.zeros(found.shape), np.concatenate(moves, axis=2))[:, :, 0]
