"""Light from outside, through the slabs: what a device reflects, lets through and absorbs."""

import numpy as np

from optics.kernels.arrays import Floats
from optics.kernels.compiled import kernel
from optics.kernels.directions import lit_from_outside
from optics.kernels.exits import (
    ABSORBED,
    ABSORBING,
    AIR_BOTTOM,
    AIR_TOP,
    COLUMNS,
    MATCHED,
    PLANAR,
    face_reflectance,
    once_through,
    share_out,
)
from optics.kernels.integrate import at_wavelength
from optics.kernels.problem import Problem


@kernel
def lit_through_slabs(
    problem: Problem, u: Floats, side: int, stack: Floats, powers: Floats
) -> None:
    """Reflectance, transmittance and absorptance of films and slabs, lit from one side.

    Parameters
    ----------
    problem : Problem
    u : float (w, n)
        In-plane wavevectors over k0.
    side : int
        Where the light comes from: 0 bottom, 1 top.
    stack : float (w, 2, n, 5)
        The films lit from the media next to them, see `directions.lit_from_outside`.
    powers : float (w, 2, n, 3), output
        Polarizations s, p; R, T, A. From the light line of the medium that the light comes from
        on: its limit, R = 1 behind any face and A = 1 in an absorbing slab without one.
    """
    found = np.zeros((2, COLUMNS))
    for w in range(u.shape[0]):
        sides = at_wavelength(problem, w)[1]
        kind, n_slab, n_out = sides.kind[side], sides.n_outer[side], sides.n_out[side]
        line = n_out if kind == PLANAR else n_slab
        loss = sides.loss[side]
        for pol in range(2):
            for i in range(u.shape[1]):
                at = u[w, i]
                if at >= line or kind == ABSORBING:
                    swallowed = kind == MATCHED and loss > 0.0
                    powers[w, pol, i, 0] = 0.0 if swallowed else 1.0
                    powers[w, pol, i, 1] = 0.0
                    powers[w, pol, i, 2] = 1.0 if swallowed else 0.0
                    continue
                rho = face_reflectance(pol, at, n_slab, n_out) if kind == PLANAR else 0.0
                once = once_through(at, n_slab, loss)
                arrives = (1.0 - rho) * once
                r = stack[w, pol, i]
                back, absorbed = (r[0], r[3]) if side == 0 else (r[1], r[4])
                p_b, p_t = (back, r[2]) if side == 0 else (r[2], back)
                found[:, :] = 0.0
                share_out(
                    sides, pol, at, (r[0], r[1], r[2], r[3], r[4]),
                    arrives * p_b, arrives * p_t, found,
                )  # fmt: skip
                out_b = found[0, AIR_BOTTOM] + found[1, AIR_BOTTOM]
                out_t = found[0, AIR_TOP] + found[1, AIR_TOP]
                powers[w, pol, i, 0] = rho + (out_b if side == 0 else out_t)
                powers[w, pol, i, 1] = out_t if side == 0 else out_b
                powers[w, pol, i, 2] = (
                    (1.0 - rho) * (1.0 - once)
                    + arrives * absorbed
                    + found[0, ABSORBED]
                    + found[1, ABSORBED]
                )


def lit_device(problem: Problem, u: Floats, side: int) -> Floats:
    """Reflectance, transmittance and absorptance of a device with its slabs.

    Parameters
    ----------
    problem : Problem
        The film that stands for the emitter's must not absorb, or its absorption is left out.
    u : float (w, n)
        In-plane wavevectors over k0, from 0.
    side : int
        Where the light comes from: 0 bottom, 1 top.

    Returns
    -------
    float (w, 2, n, 3)
        Polarizations s, p; R, T, A. A is added up from films, slabs and absorbing surroundings,
        so that R + T + A = 1 is a check.
    """
    w, n = u.shape
    stack, powers = np.zeros((w, 2, n, 5)), np.zeros((w, 2, n, 3))
    lit_from_outside(problem, u, stack)
    lit_through_slabs(problem, u, side, stack, powers)
    return powers
