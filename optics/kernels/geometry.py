"""What a stack says about its integrals before any is done: light lines, plasmons, dangers."""

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Floats
from optics.kernels.exits import ABSORBING
from optics.kernels.problem import Half, Problem

# A film whose Re eps lies above -(this) * (largest positive Re eps) may carry backward modes.
_RESONANT = 4.0


def _media(problem: Problem) -> tuple[NDArray[np.complex128], NDArray[np.bool_]]:
    """All permittivities (w, m) of films and outer media, and which are a film's or absorber's."""

    def inner(half: Half) -> NDArray[np.complex128]:
        return np.hstack([half.eps_o, half.eps_e])

    eps = np.hstack([inner(problem.up), inner(problem.down)])
    return eps, np.less(eps.real, 0.0)


def largest_index(problem: Problem) -> Floats:
    """Largest Re n, ordinary or extraordinary, among films and outer media (w,)."""
    eps, _ = _media(problem)
    largest: Floats = np.sqrt(eps).real.max(axis=1)
    return largest


def has_plasmon(problem: Problem) -> NDArray[np.bool_]:
    """Tell where some film or absorbing surroundings has a negative permittivity (w,)."""
    _, negative = _media(problem)
    return np.asarray(negative.any(axis=1))


def backward_modes_possible(problem: Problem) -> NDArray[np.bool_]:
    """Tell where a metal is so close to its plasma resonance that modes may run backward (w,)."""
    eps, negative = _media(problem)
    weakest = np.where(negative, eps.real, -np.inf).max(axis=1)
    largest = np.where(negative, 0.0, eps.real).max(axis=1)
    near: NDArray[np.bool_] = weakest > -_RESONANT * largest
    return near


def outer_light_line(problem: Problem) -> Floats:
    """Largest outer light line: slab index or index of transparent surroundings (w,)."""
    open_sides = problem.sides.kind != ABSORBING
    line: Floats = problem.sides.n_outer[:, open_sides].max(axis=1)
    return line


def light_lines(problem: Problem) -> Floats:
    """Ascending break points of the real axis (w, p), 0 to the largest outer light line.

    Lines that coincide or lie beyond are repeated.
    """
    sides, source = problem.sides, problem.source
    open_sides = sides.kind != ABSORBING
    points = np.column_stack(
        [
            np.zeros(source.eps_o.size),
            sides.n_outer[:, open_sides],
            sides.n_out[:, open_sides],
            np.sqrt(source.eps_o),
            np.sqrt(source.eps_e),
        ]
    )
    return np.sort(np.minimum(points, outer_light_line(problem)[:, None]), axis=1)
