"""Light of one direction after the slabs: what leaves the device on either side."""

import numpy as np

from optics.kernels.arrays import Floats
from optics.kernels.compiled import CACHE_FOLDER, cache_is_warm, kernel
from optics.kernels.dipole import channel
from optics.kernels.directions import lit_from_outside, sent_into_directions
from optics.kernels.exits import AIR_BOTTOM, AIR_TOP, COLUMNS, PLANAR, share_out
from optics.kernels.integrate import at_wavelength
from optics.kernels.problem import Problem


@kernel
def shares_that_leave(problem: Problem, u: Floats, stack: Floats, shares: Floats) -> None:
    """Share of unit flux sent into an outer medium that leaves on either side.

    Parameters
    ----------
    problem : Problem
    u : float (w, n)
        In-plane wavevectors over k0.
    stack : float (w, 2, n, 5)
        The whole stack lit from outside, see `directions.lit_from_outside`.
    shares : float (w, 2, 2, 3, n), output
        Leaves at the bottom, top; first arrival at the bottom, top; channels vertical p,
        horizontal p, horizontal s. 0 from the light line of that exit on.
    """
    found = np.zeros((2, COLUMNS))
    for w in range(u.shape[0]):
        sides = at_wavelength(problem, w)[1]
        for c in range(3):
            pol, _ = channel(c)
            for i in range(u.shape[1]):
                r = stack[w, pol, i]
                found[:, :] = 0.0
                share_out(sides, pol, u[w, i], (r[0], r[1], r[2], r[3], r[4]), 1.0, 1.0, found)
                for first in range(2):
                    shares[w, 0, first, c, i] = found[first, AIR_BOTTOM]
                    shares[w, 1, first, c, i] = found[first, AIR_TOP]


def leaving(problem: Problem, u: Floats, side: int) -> Floats:
    """Power that leaves the device on one side, per du and divided by u, after all slabs.

    Parameters
    ----------
    problem : Problem
    u : float (w, n)
        In-plane wavevectors over k0, from 0.
    side : int
        0 bottom, 1 top.

    Returns
    -------
    float (w, 3, n, z)
        Channels vertical p, horizontal p, horizontal s; relative to the orientation's own bulk
        rate. Power per solid angle in a medium of index n, where u = n sin(angle), is this
        times n^2 cos(angle) / (2 pi).
    """
    w, n = u.shape
    sent = np.zeros((w, 2, 3, n, problem.source.kz_positions.shape[1]))
    sent_into_directions(problem, u, sent)
    stack = np.zeros((w, 2, n, 5))
    if np.any(problem.sides.kind == PLANAR):  # else no light comes back to the films
        lit_from_outside(problem, u, stack)
    shares = np.zeros((w, 2, 2, 3, n))
    shares_that_leave(problem, u, stack, shares)
    out: Floats = sent[:, 0] * shares[:, side, 0, :, :, None]
    out += sent[:, 1] * shares[:, side, 1, :, :, None]
    return out


def angles_are_compiled() -> bool:
    """Tell whether the kernels of this module lie compiled in the cache, next to the main ones."""
    return cache_is_warm() and any(CACHE_FOLDER.rglob("angles.shares_that_leave*.nbi"))
