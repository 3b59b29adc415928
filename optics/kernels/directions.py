"""Light of one direction: what dipoles send into it, and what the whole stack does to it.

A direction is its in-plane wavevector u = n sin(angle), conserved through all films. Values are
per wavevector, node by node, before anything that slabs do to the light.
"""

import numpy as np

from optics.kernels.arrays import Floats
from optics.kernels.compiled import inline, kernel
from optics.kernels.elementary import exp_i
from optics.kernels.exits import ABSORBING
from optics.kernels.halfstack import abs2, outward, reciprocal, waves
from optics.kernels.integrate import at_wavelength
from optics.kernels.problem import Problem, Sides, work_space
from optics.kernels.rules import NODES
from optics.kernels.source import (
    channel,
    outgoing_factor,
    solve_half,
    stack_from_outside,
)

# Stands for u = 0, where the power per du over u is 0/0. Its square vanishes beside every
# permittivity and its cube is 0 in double precision, so the normal direction is exact.
_NORMAL = 1e-120


@inline
def _carries(sides: Sides, side: int, u: float) -> bool:
    """Whether waves of in-plane wavevector u propagate in an outer medium; at 90 deg the limit."""
    return u < sides.n_outer[side]


@kernel
def sent_into_directions(problem: Problem, u: Floats, power: Floats) -> None:
    """Power that dipoles send into the outer media, per du and divided by u.

    Power per solid angle in an outer medium of index n is this times n^2 cos(angle) / (2 pi).

    Parameters
    ----------
    problem : Problem
    u : float (w, n)
        In-plane wavevectors over k0, from 0.
    power : float (w, 2, 3, n, z), output
        Sides bottom, top; channels vertical p, horizontal p, horizontal s; relative to the
        orientation's own bulk rate. 0 from the side's light line on, and 0 where no wave
        propagates. Into absorbing surroundings: the flux at their face.
    """
    n = u.shape[1]
    together = max(1, min(n, NODES))
    work_up = work_space(problem.up.kd.shape[1], together)
    work_down = work_space(problem.down.kd.shape[1], together)
    positions = problem.source.kz_positions.shape[1]
    to_bottom = np.zeros(positions, dtype=np.complex128)
    to_top = np.zeros(positions, dtype=np.complex128)
    nodes = np.zeros(together, dtype=np.complex128)
    for w in range(u.shape[0]):
        source, sides, up, down = at_wavelength(problem, w)
        for start in range(0, n, together):
            for i in range(together):
                nodes[i] = max(u[w, min(start + i, n - 1)], _NORMAL)
            waves(nodes, up.eps_o, up.eps_e, up.kd, work_up.kz, work_up.y, work_up.e)
            waves(nodes, down.eps_o, down.eps_e, down.kd, work_down.kz, work_down.y, work_down.e)
            outward(work_up.y, work_up.e, work_up.r_far, work_up.f, work_up.t)
            outward(work_down.y, work_down.e, work_down.r_far, work_down.f, work_down.t)
            for pol in range(2):
                for i in range(min(together, n - start)):
                    at = nodes[i].real
                    kz = work_up.kz[pol, 0, i]
                    through = exp_i(kz * source.kd)
                    for q in range(positions):
                        to_bottom[q] = exp_i(kz * source.kz_positions[q])
                        to_top[q] = exp_i(kz * (source.kd - source.kz_positions[q]))
                    a_face, b_face = work_up.r_far[pol, 0, i], work_down.r_far[pol, 0, i]
                    inv = reciprocal(1.0 - a_face * b_face * through * through)
                    flux_t = abs2(work_up.t[pol, i]) * work_up.y[pol, -1, i].real
                    flux_b = abs2(work_down.t[pol, i]) * work_down.y[pol, -1, i].real
                    flux_b = flux_b if _carries(sides, 0, at) else 0.0
                    flux_t = flux_t if _carries(sides, 1, at) else 0.0
                    for c in range(3):
                        channel_pol, sign = channel(c)
                        if channel_pol != pol:
                            continue
                        factor = outgoing_factor(c, source, at, kz) / at * abs2(inv)
                        for q in range(positions):
                            to_b, to_t = to_bottom[q], to_top[q]
                            a = 1.0 + sign * a_face * to_t * to_t
                            b = 1.0 + sign * b_face * to_b * to_b
                            power[w, 0, c, start + i, q] = factor * abs2(to_b * a) * flux_b
                            power[w, 1, c, start + i, q] = factor * abs2(to_t * b) * flux_t


@kernel
def lit_from_outside(problem: Problem, u: Floats, powers: Floats) -> None:
    """Reflectance, transmittance and absorptance of the whole stack, lit from outside.

    Parameters
    ----------
    problem : Problem
    u : float (w, n)
        In-plane wavevectors over k0.
    powers : float (w, 2, n, 5), output
        Polarizations s, p; R from the bottom, R from the top, T, absorptance of all films lit
        from the bottom, and from the top (closed-form volume integrals). From a side where no
        wave propagates R = 1 and the rest is 0.
    """
    n = u.shape[1]
    together = max(1, min(n, NODES))
    work_up = work_space(problem.up.kd.shape[1], together)
    work_down = work_space(problem.down.kd.shape[1], together)
    nodes = np.zeros(together, dtype=np.complex128)
    for w in range(u.shape[0]):
        source, sides, up, down = at_wavelength(problem, w)
        for start in range(0, n, together):
            for i in range(together):
                nodes[i] = u[w, min(start + i, n - 1)]
            solve_half(up, work_up, nodes, True)
            solve_half(down, work_down, nodes, True)
            for pol in range(2):
                for i in range(min(together, n - start)):
                    phase = exp_i(work_up.kz[pol, 0, i] * source.kd)
                    found = stack_from_outside(
                        sides.kind[0] != ABSORBING,
                        sides.kind[1] != ABSORBING,
                        work_up,
                        work_down,
                        phase,
                        pol,
                        i,
                    )
                    for k in range(5):
                        powers[w, pol, start + i, k] = found[k]
