"""Light of one direction: what dipoles send into it, and what the whole stack does to it.

A direction is its in-plane wavevector u = n sin(angle), conserved through all films. Values are
per wavevector, node by node, before anything that slabs do to the light.
"""

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import borrowing, kernel
from optics.kernels.dipole import (
    channel,
    fades_out,
    fill_carried,
    fill_inverse,
    fill_phases,
    first_lane,
    put_sent,
)
from optics.kernels.exits import ABSORBING
from optics.kernels.halfstack import abs2, outward
from optics.kernels.integrate import at_wavelength
from optics.kernels.planar import LANES, at
from optics.kernels.problem import Problem, Sides, Work, scratch_space, work_space
from optics.kernels.rules import NODES, PANEL_NODES
from optics.kernels.whole import solve_half, solve_stack, solve_waves

# Stands for u = 0, where the power per du over u is 0/0. Its square vanishes beside every
# permittivity and its cube is 0 in double precision, so the normal direction is exact.
_NORMAL = 1e-120


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
    work_up, work_down = work_space(problem.up.kd.shape[1]), work_space(problem.down.kd.shape[1])
    scratch, sent = scratch_space(), np.zeros(2 * PANEL_NODES)
    nodes, per = np.zeros(NODES, dtype=np.complex128), np.zeros(NODES, dtype=np.complex128)
    flux = np.zeros((2, LANES))
    for w in range(u.shape[0]):
        source, sides, up, down = at_wavelength(problem, w)
        for start in range(0, n, NODES):
            for i in range(NODES):
                nodes[i] = max(u[w, min(start + i, n - 1)], _NORMAL)
                per[i] = 1.0 / nodes[i].real
            solve_waves(source, up, down, work_up, work_down, nodes)
            outward(work_up.y, work_up.e, work_up.r_far, work_up.f)
            outward(work_down.y, work_down.e, work_down.r_far, work_down.f)
            _fill_flux(sides, 0, nodes, work_down, flux[0])
            _fill_flux(sides, 1, nodes, work_up, flux[1])
            kz, through = work_up.kz[0], work_up.e[0]
            r_up, r_down = work_up.r_far[0], work_down.r_far[0]
            fill_inverse(r_up, r_down, through, scratch.inverse)
            fill_carried(source, r_up, r_down, kz, nodes, per, scratch)
            fading = fades_out(source, kz)
            for q in range(source.kz_positions.size):
                fill_phases(q, source, kz, through, fading, scratch)
                for c in range(3):
                    lane, pol = first_lane(c, source), channel(c)[0]
                    put_sent(
                        scratch.carried[c], scratch.mirrored[c, 0], scratch.mirrored[c, 1],
                        scratch.crossed[c, 0], scratch.crossed[c, 1], scratch.by_bottom[lane:],
                        scratch.by_top[lane:], scratch.fade_bottom[lane:],
                        scratch.fade_top[lane:], sent,
                    )  # fmt: skip
                    for i in range(min(NODES, n - start)):
                        at_lane = pol * NODES + i
                        power[w, 0, c, start + i, q] = sent[i] * flux[0, at_lane]
                        power[w, 1, c, start + i, q] = sent[PANEL_NODES + i] * flux[1, at_lane]


@borrowing
def _fill_flux(sides: Sides, side: int, u: Complexes, work: Work, flux: Floats) -> None:
    """Flux into the outer medium per unit amplitude from the emitter film; 0 where none goes."""
    last = work.y.shape[0] - 1
    for lane in range(LANES):
        carries = u[lane % NODES].real < sides.n_outer[side]
        flux[lane] = abs2(at(work.f[last], lane)) * work.y[last, lane] if carries else 0.0


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
    work_up, work_down = work_space(problem.up.kd.shape[1]), work_space(problem.down.kd.shape[1])
    nodes, stack = np.zeros(NODES, dtype=np.complex128), np.zeros(5 * LANES)
    for w in range(u.shape[0]):
        source, sides, up, down = at_wavelength(problem, w)
        for start in range(0, n, NODES):
            for i in range(NODES):
                nodes[i] = u[w, min(start + i, n - 1)]
            solve_waves(source, up, down, work_up, work_down, nodes)
            solve_half(up, work_up, nodes)
            solve_half(down, work_down, nodes)
            solve_stack(
                sides.kind[0] != ABSORBING, sides.kind[1] != ABSORBING, up, down, work_up,
                work_down, stack,
            )  # fmt: skip
            for pol in range(2):
                for i in range(min(NODES, n - start)):
                    for k in range(5):
                        powers[w, pol, start + i, k] = stack[k * LANES + pol * NODES + i]
