"""Where the power of a dipole ends, film by film, at real in-plane wavevectors.

The films' absorption comes from the fields in them (`field`), what leaves from the fluxes into
the outer media: for a film stack without gaps in the account they add up to the dissipated power,
which is found from neither.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats, StackPowers
from optics.kernels.compiled import borrowing, inline, kernel, rowwise
from optics.kernels.dipole import (
    channel,
    fades_out,
    fill_carried,
    fill_dissipated,
    fill_phases,
    first_lane,
    put_dissipated,
    put_sent,
)
from optics.kernels.exits import (
    ABSORBING,
    OPEN,
    bounces,
    exit_line,
    light_returns,
    passage,
    slab_faces,
)
from optics.kernels.field import absorbed_in_film, absorbs
from optics.kernels.halfstack import S, abs2
from optics.kernels.integrate import at_wavelength
from optics.kernels.planar import LANES, at
from optics.kernels.problem import (
    Half,
    Problem,
    Scratch,
    Sides,
    Source,
    Work,
    scratch_space,
    work_space,
)
from optics.kernels.rules import NODES, PANEL_NODES
from optics.kernels.whole import solve_half, solve_stack, solve_waves

# Columns in front of those of the films: dissipated power; then bottom, top of each: leaves the
# device, stays in the slab, absorbed in the slab, enters absorbing surroundings.
DISSIPATED, LEAVES, TRAPPED, SLAB, SURROUNDINGS, FILMS = 0, 1, 3, 5, 7, 9
_ROUNDING = 2.3e-16
_WANTED = 1e-8  # relative accuracy of 1 - R


class Lit(NamedTuple):
    """What each film of a half stack absorbs of unit amplitude, at the nodes of a panel."""

    inside: Floats  # (m, LANES) from the emitter film
    outside: Floats  # (m, LANES) from outside, into the whole stack


@inline
def lit_space(m: int) -> Lit:
    """Arrays for a half stack of m media."""
    return Lit(np.zeros((m, LANES)), np.zeros((m, LANES)))


@borrowing
def fill_films(half: Half, work: Work, back: Floats, amplitude: Floats, absorbed: Floats) -> None:
    """Absorption in each film, absorbed (m, LANES); 0 in lossless ones.

    back, amplitude : float (m, ROW), r_far and f of `outward`, or r_near and g of `inward`.
    """
    for j in range(1, half.kd.size - 1):
        for lane in range(LANES):
            absorbed[j, lane] = 0.0
        if absorbs(half.eps_o[j], half.eps_e[j]):
            absorbed_in_film(
                work.e[j], back[j], amplitude[j], work.alpha[j], work.beta[j], absorbed[j]
            )


@borrowing
def add_films(
    absorbed: Floats, lane: int, scale: float, emitter: int, step: int, row: Floats
) -> None:
    """Add what the films of a half stack absorb, times scale; step: +1 upward, -1 downward."""
    for j in range(1, absorbed.shape[0] - 1):
        row[FILMS + emitter + step * j] += scale * absorbed[j, lane]


@borrowing
def add_lit(
    near: Work, lit_near: Lit, lit_far: Lit, lane: int, intensity: float, emitter: int, step: int,
    row: Floats,
) -> None:  # fmt: skip
    """Add what each film absorbs of light that enters the stack from outside half `near`.

    step : of the half `near`; intensity : flux that arrives.
    """
    scale = intensity / near.y[-1, lane]
    arrived = abs2(at(near.g[0], lane) * at(near.e[0], lane))
    add_films(lit_near.outside, lane, scale, emitter, step, row)
    add_films(lit_far.inside, lane, scale * arrived, emitter, -step, row)


@borrowing
def beyond_exits(kind: int) -> int:
    """Column of light that arrives beyond every exit light line.

    Without a slab there is none but for rounding on the light line itself, where it just leaves.
    """
    if kind == OPEN:
        return LEAVES
    return SURROUNDINGS if kind == ABSORBING else TRAPPED


@borrowing
def outside(
    sides: Sides, pol: int, u: float, p_b: float, p_t: float, stack: StackPowers, row: Floats
) -> tuple[float, float]:
    """Add what becomes of first arrivals p_b, p_t; return what comes back to the films.

    As `exits.fates`, with slabs and surroundings apart.
    """
    kind_b, kind_t = sides.kind[0], sides.kind[1]
    n_b, n_t = sides.n_outer[0], sides.n_outer[1]
    line = max(exit_line(kind_b, n_b, sides.n_out[0]), exit_line(kind_t, n_t, sides.n_out[1]))
    if u >= line:
        row[beyond_exits(kind_b)] += p_b
        row[beyond_exits(kind_t) + 1] += p_t
        return 0.0, 0.0
    once_b, s_b, p_face_b = slab_faces(kind_b, n_b, sides.n_out[0], sides.loss[0], u)
    once_t, s_t, p_face_t = slab_faces(kind_t, n_t, sides.n_out[1], sides.loss[1], u)
    out_b, lost_b, back_b = passage(s_b if pol == S else p_face_b, once_b)
    out_t, lost_t, back_t = passage(s_t if pol == S else p_face_t, once_t)
    bb, bt, tb, tt = bounces(back_b, back_t, stack)
    i_b, i_t = bb * p_b + bt * p_t, tb * p_b + tt * p_t
    row[LEAVES] += i_b * out_b
    row[LEAVES + 1] += i_t * out_t
    row[SURROUNDINGS if kind_b == ABSORBING else SLAB] += i_b * lost_b
    row[(SURROUNDINGS if kind_t == ABSORBING else SLAB) + 1] += i_t * lost_t
    return i_b * back_b, i_t * back_t


@borrowing
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


@borrowing
def fill_emitted(
    source: Source, up: Work, down: Work, scratch: Scratch, u: Complexes, du: Complexes,
    weight: Floats, sent: Floats, emitted: Floats,
) -> None:  # fmt: skip
    """Dissipated power, and squared amplitudes sent down and up: emitted (3, LANES).

    du : complex (NODES,), ones; sent : float (2 * PANEL_NODES,), work space.
    """
    for k in range(3):
        for lane in range(LANES):
            emitted[k, lane] = 0.0
    kz, through, r_up, r_down = up.kz[0], up.e[0], up.r_far[0], down.r_far[0]
    fill_dissipated(source, r_up, r_down, kz, through, u, du, scratch)
    fill_carried(source, r_up, r_down, kz, u, du, scratch)
    fading = fades_out(source, kz)
    for q in range(source.kz_positions.size):
        fill_phases(q, source, kz, through, fading, scratch)
        for c in range(3):
            lane, start, share = first_lane(c, source), channel(c)[0] * NODES, weight[min(c, 1), q]
            by_bottom, by_top = scratch.by_bottom[lane:], scratch.by_top[lane:]
            put_dissipated(
                scratch.plain[c], scratch.before[c, 0], scratch.before[c, 1], by_bottom, by_top,
                sent,
            )  # fmt: skip
            add_weighted(share, sent, emitted[0, start:])
            put_sent(
                scratch.carried[c], scratch.mirrored[c, 0], scratch.mirrored[c, 1],
                scratch.crossed[c, 0], scratch.crossed[c, 1], by_bottom, by_top,
                scratch.fade_bottom[lane:], scratch.fade_top[lane:], sent,
            )  # fmt: skip
            add_weighted(share, sent, emitted[1, start:])
            add_weighted(share, sent[PANEL_NODES:], emitted[2, start:])


@rowwise
def add_weighted(share: float, values: Floats, total: Floats) -> None:
    """Add values at the nodes of one polarization, times share."""
    for i in range(NODES):
        total[i] += share * values[i]


@borrowing
def any_returns(sides: Sides, u: Complexes) -> bool:
    """Whether some slab sends light back at any of the nodes."""
    found = False
    for i in range(u.size):
        found = found or light_returns(sides, u[i].real)
    return found


@borrowing
def solve_films(half: Half, work: Work, lit: Lit, u: Complexes) -> None:
    """Solve a half stack from the emitter film, film by film; the waves are at hand."""
    solve_half(half, work, u)
    fill_films(half, work, work.r_far, work.f, lit.inside)


@borrowing
def follow_sent(
    emitter: int, sides: Sides, works: tuple[Work, Work], lits: tuple[Lit, Lit], scratch: Scratch,
    emitted: Floats, lane: int, u: float, row: Floats,
) -> None:  # fmt: skip
    """Add to row where the power of one polarization at one node ends.

    works, lits : of the lower half, the upper half; emitted : of `fill_emitted`.
    """
    (down, up), (lit_down, lit_up) = works, lits
    row[DISSIPATED] += emitted[0, lane]
    sent_down, sent_up = emitted[1, lane], emitted[2, lane]
    add_films(lit_down.inside, lane, sent_down, emitter, -1, row)
    add_films(lit_up.inside, lane, sent_up, emitter, 1, row)
    flux_b, flux_t = down.y[-1, lane], up.y[-1, lane]
    p_b = sent_down * abs2(at(down.f[-1], lane)) * flux_b
    p_t = sent_up * abs2(at(up.f[-1], lane)) * flux_t
    returns = light_returns(sides, u)
    stack = (0.0, 0.0, 0.0, 0.0, 0.0)
    if returns:
        solved = scratch.stack
        stack = (
            solved[lane], solved[LANES + lane], solved[2 * LANES + lane],
            solved[3 * LANES + lane], solved[4 * LANES + lane],
        )  # fmt: skip
        stack = without_lost_digits(stack, at(scratch.inverse, lane))
    back_b, back_t = outside(sides, lane // NODES, u, p_b, p_t, stack, row)
    if returns and back_b > 0.0 and flux_b > 0.0:
        add_lit(down, lit_down, lit_up, lane, back_b, emitter, -1, row)
    if returns and back_t > 0.0 and flux_t > 0.0:
        add_lit(up, lit_up, lit_down, lane, back_t, emitter, 1, row)


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
    lit_up, lit_down = lit_space(up.kd.size), lit_space(down.kd.size)
    scratch, emitted, sent = scratch_space(), np.zeros((3, LANES)), np.zeros(2 * PANEL_NODES)
    nodes, du = np.zeros(NODES, dtype=np.complex128), np.ones(NODES, dtype=np.complex128)
    n = u.size
    power[:, :] = 0.0
    for start in range(0, n, NODES):
        for i in range(NODES):
            nodes[i] = u[min(start + i, n - 1)]
        solve_waves(source, up, down, work_up, work_down, nodes)
        solve_films(up, work_up, lit_up, nodes)
        solve_films(down, work_down, lit_down, nodes)
        if any_returns(sides, nodes):
            from_bottom, from_top = sides.kind[0] != ABSORBING, sides.kind[1] != ABSORBING
            solve_stack(from_bottom, from_top, up, down, work_up, work_down, scratch.stack)
            fill_films(up, work_up, work_up.r_near, work_up.g, lit_up.outside)
            fill_films(down, work_down, work_down.r_near, work_down.g, lit_down.outside)
        fill_emitted(source, work_up, work_down, scratch, nodes, du, weight, sent, emitted)
        for i in range(min(NODES, n - start)):
            for pol in range(2):
                follow_sent(
                    emitter, sides, (work_down, work_up), (lit_down, lit_up), scratch, emitted,
                    pol * NODES + i, nodes[i].real, power[start + i],
                )  # fmt: skip
