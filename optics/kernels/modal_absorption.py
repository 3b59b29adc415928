"""Where the power of a dipole ends, film by film, at real in-plane wavevectors.

The films' absorption comes from the fields in them (`field`), what leaves from the fluxes into
the outer media: for a film stack without gaps in the account they add up to the dissipated power,
which is found from neither.
"""

import numpy as np

from optics.kernels.arrays import Complexes, Floats, StackPowers
from optics.kernels.compiled import inline, kernel
from optics.kernels.exits import (
    ABSORBING,
    OPEN,
    PLANAR,
    bounces,
    exit_line,
    face_reflectance,
    once_through,
    passage,
)
from optics.kernels.halfstack import abs2, reciprocal
from optics.kernels.integrate import at_wavelength
from optics.kernels.problem import Problem, Scratch, Sides, Source, Work, scratch_space, work_space
from optics.kernels.rules import NODES
from optics.kernels.source import (
    channel,
    dissipated_factor,
    fill_phases,
    light_returns,
    outgoing_factor,
    solve_half,
    stack_from_outside,
)

# Columns in front of those of the films: dissipated power; then bottom, top of each: leaves the
# device, stays in the slab, absorbed in the slab, enters absorbing surroundings.
DISSIPATED, LEAVES, TRAPPED, SLAB, SURROUNDINGS, FILMS = 0, 1, 3, 5, 7, 9
_ROUNDING = 2.3e-16
_WANTED = 1e-8  # relative accuracy of 1 - R


@inline
def lit_films(
    near: Work, far: Work, phase: complex, pol: int, i: int, flux: float, near_first: int,
    near_step: int, far_step: int, intensity: float, row: Floats,
) -> None:  # fmt: skip
    """Add what each film absorbs of light that enters the stack from outside half `near`.

    near_first : place of the emitter film among the films; steps: +1 upward, -1 downward.
    flux : Re Y of the outer medium; intensity : flux that arrives.
    """
    r_near, r_far = near.r_far[pol, 0, i], far.r_far[pol, 0, i]
    toward_far = near.g[pol, 0, i] * phase * reciprocal(1.0 - r_near * r_far * phase * phase)
    toward_near = toward_far * phase * r_far
    scale = intensity / flux
    for j in range(1, far.kz.shape[1] - 1):
        row[FILMS + near_first + far_step * j] += scale * far.a_in[pol, j, i] * abs2(toward_far)
    for j in range(1, near.kz.shape[1] - 1):
        power = near.a_out[pol, j, i] + near.a_in[pol, j, i] * abs2(toward_near)
        power += 2.0 * (toward_near.conjugate() * near.a_cross[pol, j, i]).real
        row[FILMS + near_first + near_step * j] += scale * power


@inline
def beyond_exits(kind: int) -> int:
    """Column of light that arrives beyond every exit light line.

    Without a slab there is none but for rounding on the light line itself, where it just leaves.
    """
    if kind == OPEN:
        return LEAVES
    return SURROUNDINGS if kind == ABSORBING else TRAPPED


@inline
def outside(
    sides: Sides, pol: int, u: float, p_b: float, p_t: float, stack: StackPowers, row: Floats
) -> tuple[float, float]:
    """Add what becomes of first arrivals p_b, p_t; return what comes back to the films.

    As `source.share_out`, with slabs and surroundings apart.
    """
    kind_b, kind_t = sides.kind[0], sides.kind[1]
    n_b, n_t = sides.n_outer[0], sides.n_outer[1]
    line = max(exit_line(kind_b, n_b, sides.n_out[0]), exit_line(kind_t, n_t, sides.n_out[1]))
    if u >= line:
        row[beyond_exits(kind_b)] += p_b
        row[beyond_exits(kind_t) + 1] += p_t
        return 0.0, 0.0
    rho_b = face_reflectance(pol, u, n_b, sides.n_out[0]) if kind_b == PLANAR and u < n_b else 1.0
    rho_t = face_reflectance(pol, u, n_t, sides.n_out[1]) if kind_t == PLANAR and u < n_t else 1.0
    out_b, lost_b, back_b = passage(kind_b, rho_b, once_through(u, n_b, sides.loss[0]))
    out_t, lost_t, back_t = passage(kind_t, rho_t, once_through(u, n_t, sides.loss[1]))
    bb, bt, tb, tt = bounces(back_b, back_t, stack)
    i_b, i_t = bb * p_b + bt * p_t, tb * p_b + tt * p_t
    row[LEAVES] += i_b * out_b
    row[LEAVES + 1] += i_t * out_t
    row[SURROUNDINGS if kind_b == ABSORBING else SLAB] += i_b * lost_b
    row[(SURROUNDINGS if kind_t == ABSORBING else SLAB) + 1] += i_t * lost_t
    return i_b * back_b, i_t * back_t


@inline
def without_lost_digits(stack: StackPowers, resonance: complex) -> StackPowers:
    """Give R as 1 - T - A where rounding has spoiled it.

    resonance : 1 / (1 - r r' exp(2 i kz d)) of the emitter film, which magnifies rounding. Light
    that a slab keeps sending back asks for 1 - R, which next to a guide that leaks by tunneling
    only is as small as what is left of it; T and A are sums without cancellation.
    """
    r_b, r_t, through, a_b, a_t = stack
    spoiled = _ROUNDING * max(1.0, abs2(resonance) ** 0.5) / _WANTED
    if r_b < 1.0 and 1.0 - r_b < spoiled:
        r_b = 1.0 - through - a_b
    if r_t < 1.0 and 1.0 - r_t < spoiled:
        r_t = 1.0 - through - a_t
    return r_b, r_t, through, a_b, a_t


@inline
def sent(
    source: Source, up: Work, down: Work, scratch: Scratch, pol: int, i: int, u: complex,
    weight: Floats, row: Floats,
) -> tuple[float, float]:  # fmt: skip
    """Squared amplitudes sent down and up at one node; adds the dissipated power to row."""
    kz = up.kz[pol, 0, i]
    # Beyond the emitter's light line the bulk term carries no power but would drown the rest.
    beyond = kz.real == 0.0
    phase = scratch.to_bottom[i, 0] * scratch.to_top[i, 0]
    r_t, r_b = up.r_far[pol, 0, i], down.r_far[pol, 0, i]
    inv = reciprocal(1.0 - r_t * r_b * phase * phase)
    sent_down, sent_up = 0.0, 0.0
    for c in range(3):
        channel_pol, sign = channel(c)
        if channel_pol != pol:
            continue
        through = dissipated_factor(c, source, u, kz) * inv
        carried = outgoing_factor(c, source, u.real, kz) * abs2(inv)
        for q in range(source.kz_positions.size):
            to_b, to_t = scratch.to_bottom[i, q], scratch.to_top[i, q]
            share = weight[0 if c == 0 else 1, q]
            a, b = sign * r_t * to_t * to_t, sign * r_b * to_b * to_b
            bracket = a + b + 2.0 * a * b if beyond else (1.0 + a) * (1.0 + b)
            row[DISSIPATED] += share * (through * bracket).real
            sent_down += share * carried * abs2(to_b * (1.0 + a))
            sent_up += share * carried * abs2(to_t * (1.0 + b))
    return sent_down, sent_up


@inline
def any_returns(sides: Sides, u: Complexes) -> bool:
    """Whether some slab sends light back at any of the nodes."""
    found = False
    for i in range(u.size):
        found = found or light_returns(sides, u[i].real)
    return found


@kernel
def power_by_film(
    problem: Problem, w: int, emitter: int, u: Floats, weight: Floats, power: Floats
) -> None:
    """Power per du of dipoles spread over a zone and over orientations.

    Parameters
    ----------
    problem : Problem
    w : int
        Row of the wavelength.
    emitter : int
        Index of the emitter film.
    u : float (n,)
        In-plane wavevectors over k0, above 0.
    weight : float (2, z)
        Weights of vertical and horizontal dipoles, each relative to its own bulk rate.
    power : float (n, FILMS + m), output
        Columns as named above, then the films from the bottom.
    """
    source, sides, up, down = at_wavelength(problem, w)
    work_up, work_down = work_space(up.kd.size), work_space(down.kd.size)
    positions = source.kz_positions.size
    scratch = scratch_space(positions, 1)
    nodes = np.zeros(NODES, dtype=np.complex128)
    n = u.size
    power[:, :] = 0.0
    for start in range(0, n, NODES):
        for i in range(NODES):
            nodes[i] = u[min(start + i, n - 1)]
        some_returns = any_returns(sides, nodes)
        solve_half(up, work_up, nodes, some_returns)
        solve_half(down, work_down, nodes, some_returns)
        for pol in range(2):
            fill_phases(pol, source, work_up, scratch)
            for i in range(min(NODES, n - start)):
                row = power[start + i]
                at = nodes[i].real
                phase = scratch.to_bottom[i, 0] * scratch.to_top[i, 0]
                sent_down, sent_up = sent(
                    source, work_up, work_down, scratch, pol, i, nodes[i], weight, row
                )
                for j in range(1, up.kd.size - 1):
                    row[FILMS + emitter + j] += sent_up * work_up.a_in[pol, j, i]
                for j in range(1, down.kd.size - 1):
                    row[FILMS + emitter - j] += sent_down * work_down.a_in[pol, j, i]
                flux_b, flux_t = work_down.y[pol, -1, i].real, work_up.y[pol, -1, i].real
                p_b = sent_down * abs2(work_down.t[pol, i]) * flux_b
                p_t = sent_up * abs2(work_up.t[pol, i]) * flux_t
                returns = some_returns and light_returns(sides, at)
                stack = (0.0, 0.0, 0.0, 0.0, 0.0)
                if returns:
                    stack = stack_from_outside(
                        sides.kind[0] != ABSORBING,
                        sides.kind[1] != ABSORBING,
                        work_up,
                        work_down,
                        phase,
                        pol,
                        i,
                    )
                    twice = work_up.r_far[pol, 0, i] * work_down.r_far[pol, 0, i] * phase * phase
                    stack = without_lost_digits(stack, reciprocal(1.0 - twice))
                back_b, back_t = outside(sides, pol, at, p_b, p_t, stack, row)
                if returns and back_b > 0.0 and flux_b > 0.0:
                    lit_films(
                        work_down, work_up, phase, pol, i, flux_b, emitter, -1, 1, back_b, row
                    )
                if returns and back_t > 0.0 and flux_t > 0.0:
                    lit_films(
                        work_up, work_down, phase, pol, i, flux_t, emitter, 1, -1, back_t, row
                    )
