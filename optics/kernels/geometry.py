"""What a stack says about its integrals before any is done: light lines, plasmons, dangers."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Floats
from optics.kernels.exits import ABSORBING
from optics.kernels.problem import Half, Problem

# A film whose Re eps lies above -(this) * (largest positive Re eps) may carry backward modes:
# between two half spaces it does below 1, absorption and more films blur that.
_RESONANT = 4.0
_HARDLY_ABSORBING = 1e-3  # Im eps of a metal over |Re eps|
# In units of its loss exponent: cosine of the angle in a slab within which light dies out.
_GRAZING = 8.0
# Error over loss^2 of panels that end at the slab's light line alone, as measured, and how much
# of the wanted accuracy it may be.
_GRAZING_ERROR, _GRAZING_SHARE = 4.0, 0.25
_SHORTEST_WAY = 1e-7  # k0 times a distance, where a dipole touches an absorber
_NO_ABSORBER = 1e3


def _media(problem: Problem) -> tuple[NDArray[np.complex128], NDArray[np.bool_]]:
    """All permittivities (w, m) of films and outer media, and which are negative.

    A film of zero thickness is as good as absent and stands as vacuum, which changes nothing.
    """
    parts = []
    for half in (problem.up, problem.down):
        inner = np.ones(half.kd.shape, dtype=np.bool_)
        inner[:, [0, -1]] = False
        absent = inner & (half.kd == 0.0)
        parts += [np.where(absent, 1.0, half.eps_o), np.where(absent, 1.0, half.eps_e)]
    eps = np.hstack(parts)
    return eps, eps.real < 0.0


class MediaFacts(NamedTuple):
    """What the permittivities of films and outer media say, by wavelength (w,)."""

    largest_index: Floats  # largest Re n, ordinary or extraordinary
    plasmon: NDArray[np.bool_]  # whether some film or absorbing surroundings is a metal
    backward: NDArray[np.bool_]  # whether a metal is so near resonance that modes may run backward
    narrow: NDArray[np.bool_]  # whether a metal absorbs so little that nodes may miss its plasmon


def media_facts(problem: Problem) -> MediaFacts:
    """Look at all media of a problem."""
    eps, negative = _media(problem)
    weakest = np.where(negative, eps.real, -np.inf).max(axis=1)
    largest = np.where(negative, 0.0, eps.real).max(axis=1)
    hardly = negative & (eps.imag < _HARDLY_ABSORBING * np.abs(eps.real))
    return MediaFacts(
        np.sqrt(eps).real.max(axis=1),
        np.asarray(negative.any(axis=1)),
        np.asarray(weakest > -_RESONANT * largest),
        np.asarray(hardly.any(axis=1)),
    )


def largest_index(problem: Problem) -> Floats:
    """Largest Re n, ordinary or extraordinary, among films and outer media (w,)."""
    return media_facts(problem).largest_index


def has_plasmon(problem: Problem) -> NDArray[np.bool_]:
    """Tell where some film or absorbing surroundings has a negative permittivity (w,)."""
    return media_facts(problem).plasmon


def backward_modes_possible(problem: Problem) -> NDArray[np.bool_]:
    """Tell where a metal is so close to its plasma resonance that modes may run backward (w,)."""
    return media_facts(problem).backward


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


def grazing_splits(problem: Problem, lines: Floats, tolerance: float) -> Floats:
    """Where paths between light lines are split because an absorbing slab's line ends them.

    Grazing light dies out in a slab: exp(-loss / cos) has an essential singularity at the slab's
    light line, which a panel that ends there does not see.

    Parameters
    ----------
    lines : float (w, p)
        From `light_lines`.
    tolerance : float
        Wanted accuracy; slabs that matter less are left alone.

    Returns
    -------
    float (w, p - 1)
        Parameter of the path from lines[:, i] to lines[:, i + 1], see `paths.place`; 0: no split.
    """
    splits = np.zeros((lines.shape[0], lines.shape[1] - 1))
    span = np.diff(lines, axis=1)
    for side in range(2):
        loss, n = problem.sides.loss[:, side, None], problem.sides.n_outer[:, side, None]
        matters = _GRAZING_ERROR * loss**2 > _GRAZING_SHARE * tolerance
        ends_there = matters & (lines[:, 1:] == n) & (span > 0.0)
        if not ends_there.any():
            continue
        short = n * (1.0 - np.sqrt(1.0 - np.minimum(_GRAZING * loss, 0.5) ** 2))
        share = np.minimum(short / np.where(ends_there, span, 1.0), 0.5)
        split = 1.0 - 2.0 / np.pi * np.arcsin(np.sqrt(share))
        splits = np.where(ends_there, np.maximum(splits, split), splits)
    return splits


def nearest_absorber(problem: Problem) -> Floats:
    """k0 times the shortest way from a dipole to a medium that swallows near fields (w,)."""
    source = problem.source
    to_bottom = source.kz_positions.min(axis=1)
    to_top = source.kd - source.kz_positions.max(axis=1)
    shortest = np.minimum(
        to_bottom + _way_to_absorber(problem.down), to_top + _way_to_absorber(problem.up)
    )
    return np.maximum(shortest, _SHORTEST_WAY)


def _way_to_absorber(half: Half) -> Floats:
    """k0 times the thickness in front of the first absorbing or negative medium (w,)."""
    in_front = np.cumsum(half.kd, axis=1) - half.kd
    swallows = np.zeros(in_front.shape, dtype=np.bool_)
    for eps in (half.eps_o, half.eps_e):
        swallows |= (eps.imag > 0.0) | (eps.real < 0.0)
    way: Floats = np.where(swallows, in_front, _NO_ABSORBER).min(axis=1)
    return way
