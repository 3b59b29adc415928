"""Directions in which a device may change, and what they do to the arrays of a problem.

The twin of `problem`: `make_rates` does to rates of change what `make_problem` does to values.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline
from optics.kernels.exits import OPEN
from optics.kernels.problem import Problem


class Variation(NamedTuple):
    """Rates of change of a device along each of p directions, the wavelength fixed."""

    eps_o: Complexes  # (p, w, m) films bottom to top; of the emitter film the real part only
    eps_e: Complexes  # (p, w, m)
    thickness_nm: Floats  # (p, m)
    outer: Complexes  # (p, w, 2) permittivity of the media next to the films: bottom, top
    n_out: Floats  # (p, w, 2) index of the surroundings behind the slab; not read without one
    loss: Floats  # (p, w, 2) 4 pi k d / lambda of the slabs
    position_nm: Floats  # (p, z) dipoles, from the bottom face of the emitter film


class HalfRates(NamedTuple):
    """Rates of change of `problem.Half`."""

    eps_o: Complexes  # (w, p, m)
    eps_e: Complexes  # (w, p, m)
    kd: Floats  # (w, p, m)


class Rates(NamedTuple):
    """Rates of change of `problem.Problem`."""

    eps: Floats  # (w, p, 2) emitter film, in-plane and normal
    kd: Floats  # (w, p) emitter film
    kz_positions: Floats  # (w, p, z)
    bulk: Floats  # (w, p, 2) relative: of the logarithm of the bulk rates
    n_outer: Floats  # (w, p, 2)
    n_out: Floats  # (w, p, 2)
    loss: Floats  # (w, p, 2)
    up: HalfRates
    down: HalfRates


def no_variation(directions: int, w: int, m: int, z: int) -> Variation:
    """Directions in which nothing changes yet, to be filled in.

    Parameters
    ----------
    directions, w, m, z : int
        Directions, wavelengths, films, dipole positions.
    """
    films = np.zeros((2, directions, w, m), dtype=np.complex128)
    sides = np.zeros((2, directions, w, 2))
    return Variation(
        films[0],
        films[1],
        np.zeros((directions, m)),
        np.zeros((directions, w, 2), dtype=np.complex128),
        sides[0],
        sides[1],
        np.zeros((directions, z)),
    )


def make_rates(problem: Problem, wavelength_nm: Floats, variation: Variation) -> Rates:
    """Rates of a problem's arrays.

    Parameters
    ----------
    problem : Problem
        Made by `make_problem` for these wavelengths.
    wavelength_nm : float (w,)
        In vacuum.
    variation : Variation
    """
    k0_nm = 2.0 * np.pi / wavelength_nm[:, None]
    emitter = problem.down.kd.shape[1] - 2
    eps_o, eps_e = (np.moveaxis(x, 0, 1) for x in (variation.eps_o, variation.eps_e))
    outer = np.moveaxis(variation.outer, 0, 1)
    kd = k0_nm[:, :, None] * variation.thickness_nm
    own = np.stack([eps_o[:, :, emitter].real, eps_e[:, :, emitter].real], axis=2)
    next_to_films = np.stack([problem.down.eps_o[:, -1], problem.up.eps_o[:, -1]], axis=1)
    n_outer = (outer / (2.0 * np.sqrt(next_to_films))[:, None]).real
    n_out = np.where(problem.sides.kind == OPEN, n_outer, np.moveaxis(variation.n_out, 0, 1))
    return Rates(
        own,
        kd[:, :, emitter].copy(),
        k0_nm[:, :, None] * variation.position_nm,
        _bulk_rates(problem, own),
        np.ascontiguousarray(n_outer),
        np.ascontiguousarray(n_out),
        np.ascontiguousarray(np.moveaxis(variation.loss, 0, 1)),
        _half_rates(eps_o, eps_e, kd, outer[:, :, 1], emitter, 1),
        _half_rates(eps_o, eps_e, kd, outer[:, :, 0], emitter, -1),
    )


def _half_rates(
    eps_o: Complexes, eps_e: Complexes, kd: Floats, outer: Complexes, emitter: int, step: int
) -> HalfRates:
    """Media from the emitter film to one side, as `make_half`; all (w, p, films)."""
    films = slice(emitter, None) if step > 0 else slice(emitter, None, -1)
    thickness = np.concatenate([kd[:, :, films], np.zeros((*kd.shape[:2], 1))], axis=2)
    thickness[:, :, 0] = 0.0
    o, e = (np.concatenate([x[:, :, films], outer[:, :, None]], axis=2) for x in (eps_o, eps_e))
    o[:, :, 0], e[:, :, 0] = o[:, :, 0].real, e[:, :, 0].real
    return HalfRates(o, e, thickness)


def _bulk_rates(problem: Problem, own: Floats) -> Floats:
    """Relative rates (w, p, 2) of n_o and of (3 eps_o + eps_e) / (4 n_o)."""
    eps_o, eps_e = problem.source.eps_o[:, None], problem.source.eps_e[:, None]
    index = own[:, :, 0] / (2.0 * eps_o)
    horizontal = (3.0 * own[:, :, 0] + own[:, :, 1]) / (3.0 * eps_o + eps_e) - index
    return np.stack([index, horizontal], axis=2)


@inline
def rates_at(rates: Rates, w: int) -> Rates:
    """Rates of one wavelength, every array without its first axis."""
    up, down = rates.up, rates.down
    return Rates(
        rates.eps[w],
        rates.kd[w],
        rates.kz_positions[w],
        rates.bulk[w],
        rates.n_outer[w],
        rates.n_out[w],
        rates.loss[w],
        HalfRates(up.eps_o[w], up.eps_e[w], up.kd[w]),
        HalfRates(down.eps_o[w], down.eps_e[w], down.kd[w]),
    )
