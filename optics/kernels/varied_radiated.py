"""Rates of change of the power that a dipole sends to every destination.

The twin of `source.radiated`. The absorbed part is what all other destinations leave of the
dissipated power. For values that would make the energy balance an identity, so there it is a
volume integral; but what follows from an identity may be differentiated by it.
"""

from optics.kernels.arrays import Complexes, Flags, Floats
from optics.kernels.compiled import inline
from optics.kernels.exits import (
    ABSORBED,
    AIR_BOTTOM,
    AIR_TOP,
    COLUMNS,
    COVER,
    MATCHED,
    PLANAR,
    SUBSTRATE,
    TOTAL,
    exit_line,
)
from optics.kernels.halfstack import abs2, inward, outward, reciprocal, waves
from optics.kernels.problem import Half, Sides, Source, Work
from optics.kernels.rules import NODES
from optics.kernels.source import channel, outgoing_factor
from optics.kernels.variation import Rates
from optics.kernels.varied_exits import arrival_rates, lit_from_outside, share_rates
from optics.kernels.varied_response import FORMS, THROUGH, Moves, Response, respond
from optics.kernels.varied_source import (
    BY_DOWN,
    BY_FILM,
    BY_KZ,
    BY_PLACE,
    BY_UP,
    ITSELF,
    SENT_DOWN,
    SENT_UP,
    TOTAL_POWER,
    VariedScratch,
    combine,
    fill_phases,
    total_rates,
)


@inline
def _comes_back(sides: Sides, u: float) -> bool:
    """Whether some slab sends light of in-plane wavevector u back, in any variant of its faces."""
    line_b = exit_line(sides.kind[0], sides.n_outer[0], sides.n_out[0])
    line_t = exit_line(sides.kind[1], sides.n_outer[1], sides.n_out[1])
    free = u < max(line_b, line_t)
    slab_b, slab_t = sides.kind[0] in (PLANAR, MATCHED), sides.kind[1] in (PLANAR, MATCHED)
    from_b = free or (slab_t and u < max(sides.n_outer[1], line_b))
    from_t = free or (slab_b and u < max(sides.n_outer[0], line_t))
    back_b = sides.kind[0] == PLANAR and u < sides.n_outer[0] and from_b
    return back_b or (sides.kind[1] == PLANAR and u < sides.n_outer[1] and from_t)


@inline
def solve_varied(
    rates: Rates,
    moves: Moves,
    sides: Sides,
    up: Half,
    down: Half,
    work_up: Work,
    work_down: Work,
    vary_up: Response,
    vary_down: Response,
    u: Complexes,
    u_rate: Floats,
    lit: Flags,
) -> None:
    """Both half stacks, lit from either end, and their rates; where light comes back (n,)."""
    forms = THROUGH + 1
    for i in range(NODES):
        lit[i] = _comes_back(sides, u[i].real)
        forms = FORMS if lit[i] else forms
    waves(u, up.eps_o, up.eps_e, up.kd, work_up.kz, work_up.y, work_up.e)
    waves(u, down.eps_o, down.eps_e, down.kd, work_down.kz, work_down.y, work_down.e)
    outward(work_up.y, work_up.e, work_up.r_far, work_up.f, work_up.t)
    outward(work_down.y, work_down.e, work_down.r_far, work_down.f, work_down.t)
    inward(work_up.y, work_up.e, work_up.r_near, work_up.g, work_up.r_out)
    inward(work_down.y, work_down.e, work_down.r_near, work_down.g, work_down.r_out)
    respond(u, u_rate, up, rates.up, moves, work_up, forms, vary_up)
    respond(u, u_rate, down, rates.down, moves, work_down, forms, vary_down)


@inline
def shares_of_panel(
    pol: int,
    source: Source,
    rates: Rates,
    moves: Moves,
    sides: Sides,
    work_up: Work,
    work_down: Work,
    vary_up: Response,
    vary_down: Response,
    u: Complexes,
    u_rate: Floats,
    scratch: VariedScratch,
) -> None:
    """Fill phases and shares of one polarization."""
    fill_phases(pol, source, work_up, work_down, scratch)
    arrival_rates(pol, work_down, work_up, vary_down, vary_up, scratch.arrived, scratch.d_arrived)
    scratch.stack[:2] = 1.0
    scratch.stack[2] = 0.0
    scratch.d_stack[:, :, :] = 0.0
    if scratch.lit.any() and sides.kind[1] == PLANAR:
        lit_from_outside(
            pol, 1, source, rates.kd, scratch.phase, work_up, work_down, vary_up, vary_down,
            scratch.lit, scratch.stack, scratch.d_stack,
        )  # fmt: skip
    if scratch.lit.any() and sides.kind[0] == PLANAR:
        lit_from_outside(
            pol, 0, source, rates.kd, scratch.phase, work_down, work_up, vary_down, vary_up,
            scratch.lit, scratch.stack, scratch.d_stack,
        )  # fmt: skip
    share_rates(
        pol, u, u_rate, sides, rates, moves.sides, scratch.arrived,
        scratch.d_arrived, scratch.stack, scratch.d_stack, scratch.shares, scratch.d_shares,
    )  # fmt: skip


@inline
def _sent_terms(
    c: int,
    side: int,
    source: Source,
    work_up: Work,
    work_down: Work,
    u: Complexes,
    du: Complexes,
    scratch: VariedScratch,
) -> None:
    """Terms of the power sent to one side, |E|^2 with E down = to_b (1 + a)/(1 - ab)."""
    pol, sign = channel(c)
    terms = scratch.terms[SENT_DOWN + side]
    by_face, by_far = (BY_UP, BY_DOWN) if side == 0 else (BY_DOWN, BY_UP)
    for i in range(NODES):
        kz, inv, phase = work_up.kz[pol, 0, i], scratch.inverse[i], scratch.phase[i]
        face, far = work_up.r_far[pol, 0, i], work_down.r_far[pol, 0, i]
        if side == 1:
            face, far = far, face
        factor = outgoing_factor(c, source, u[i].real, kz) * du[i].real
        loop = inv * phase * phase
        whole = face * far * loop * 2j
        for q in range(source.kz_positions.size):
            near_way, far_way = source.kz_positions[q], source.kd - source.kz_positions[q]
            to_near, to_far = scratch.to_bottom[i, q], scratch.to_top[i, q]
            if side == 1:
                near_way, far_way = far_way, near_way
                to_near, to_far = to_far, to_near
            mirror = sign * inv * to_near * to_far * to_far
            e = to_near * inv + face * mirror
            weight = 2.0 * factor * e.conjugate()
            direct = weight * e * 1j
            echo = weight * face * mirror * 2j
            around = weight * e * whole
            power = factor * abs2(e)
            scratch.sent[side, i, q] = power
            terms[ITSELF, i, q] = power
            terms[by_face, i, q] = weight * (mirror + e * loop * far)
            terms[by_far, i, q] = weight * e * loop * face
            terms[BY_KZ, i, q] = direct * near_way + echo * far_way + around * source.kd
            if side == 0:
                terms[BY_FILM, i, q] = kz * (echo + around)
                terms[BY_PLACE, i, q] = kz * (direct - echo)
            else:
                terms[BY_FILM, i, q] = kz * (direct + around)
                terms[BY_PLACE, i, q] = kz * (echo - direct)


@inline
def _factor_rates(
    c: int,
    source: Source,
    rates: Rates,
    moves: Moves,
    vary: Response,
    work: Work,
    u: Complexes,
    du: Complexes,
    u_rate: Floats,
    du_rate: Floats,
    own: Complexes,
) -> None:
    """Relative rates of `source.outgoing_factor` times du, along directions with moves.nodes."""
    pol, _ = channel(c)
    for p in range(u_rate.shape[0]):
        if not moves.nodes[p]:
            continue
        own_film = 2.0 * (rates.eps[p, 0] / source.eps_o - rates.eps[p, 1] / source.eps_e)
        for i in range(NODES):
            steps = u_rate[p, i] / u[i].real
            turn = 2.0 * (vary.kz[pol, p, i] * reciprocal(work.kz[pol, 0, i])).real
            rate = steps - rates.bulk[p, 1] - turn
            if c == 0:
                rate = 3.0 * steps + own_film - rates.bulk[p, 0] - turn
            elif c == 1:
                rate = steps - rates.bulk[p, 1]
            own[p, i] = rate + du_rate[p, i] / du[i].real


@inline
def sent_rates(
    c: int,
    source: Source,
    rates: Rates,
    moves: Moves,
    work_up: Work,
    work_down: Work,
    vary_up: Response,
    vary_down: Response,
    u: Complexes,
    du: Complexes,
    u_rate: Floats,
    du_rate: Floats,
    scratch: VariedScratch,
) -> None:
    """Power sent down and up by one channel at real nodes, and its rates, into scratch."""
    pol = channel(c)[0]
    _factor_rates(c, source, rates, moves, vary_up, work_up, u, du, u_rate, du_rate, scratch.own)
    for side in range(2):
        _sent_terms(c, side, source, work_up, work_down, u, du, scratch)
        combine(SENT_DOWN + side, pol, rates, moves, vary_up, vary_down, scratch)


@inline
def varied_radiated(
    source: Source,
    rates: Rates,
    moves: Moves,
    sides: Sides,
    up: Half,
    down: Half,
    work_up: Work,
    work_down: Work,
    vary_up: Response,
    vary_down: Response,
    scratch: VariedScratch,
    u: Complexes,
    du: Complexes,
    u_rate: Floats,
    du_rate: Floats,
    values: Floats,
) -> None:
    """Rates of dissipated power and all destinations at real nodes below the outer light lines.

    Parameters
    ----------
    u, du : complex (NODES,), real-valued
    u_rate, du_rate : float (p, NODES)
    values : float (NODES, p * 2 * COLUMNS * positions), output
        Column ((direction * 2 + orientation) * COLUMNS + destination) * positions + position.
    """
    solve_varied(
        rates, moves, sides, up, down, work_up, work_down, vary_up, vary_down, u, u_rate,
        scratch.lit,
    )  # fmt: skip
    values[:, :] = 0.0
    for c in (2, 0, 1):
        if c != 1:
            shares_of_panel(
                channel(c)[0], source, rates, moves, sides, work_up, work_down, vary_up,
                vary_down, u, u_rate, scratch,
            )  # fmt: skip
        total_rates(
            c, source, rates, moves, work_up, work_down, vary_up, vary_down, u, du, u_rate,
            du_rate, False, scratch,
        )  # fmt: skip
        sent_rates(
            c, source, rates, moves, work_up, work_down, vary_up, vary_down, u, du, u_rate,
            du_rate, scratch,
        )  # fmt: skip
        _book_destinations(0 if c == 0 else 1, scratch, values)
    _book_absorbed(u_rate.shape[0], source.kz_positions.size, values)


@inline
def _book_destinations(orientation: int, scratch: VariedScratch, values: Floats) -> None:
    """Add one channel's rates to the columns of `varied_radiated`."""
    _, directions, _, positions = scratch.rates.shape
    rates, sent, shares, d_shares = scratch.rates, scratch.sent, scratch.shares, scratch.d_shares
    for i in range(NODES):
        for p in range(directions):
            base = (p * 2 + orientation) * COLUMNS * positions
            for q in range(positions):
                values[i, base + TOTAL * positions + q] += rates[TOTAL_POWER, p, i, q]
            for k in range(1, COLUMNS):
                down, up = shares[k, i, 0], shares[k, i, 1]
                d_down, d_up = d_shares[p, k, i, 0], d_shares[p, k, i, 1]
                first = base + k * positions
                if down != 0.0 or d_down != 0.0:
                    for q in range(positions):
                        values[i, first + q] += (
                            rates[SENT_DOWN, p, i, q] * down + sent[0, i, q] * d_down
                        )
                if up != 0.0 or d_up != 0.0:
                    for q in range(positions):
                        values[i, first + q] += rates[SENT_UP, p, i, q] * up + sent[1, i, q] * d_up


@inline
def _book_absorbed(directions: int, positions: int, values: Floats) -> None:
    """Set the absorbed column to what the other destinations leave of the total."""
    for i in range(values.shape[0]):
        for block in range(2 * directions):
            base = block * COLUMNS * positions
            for q in range(positions):
                values[i, base + ABSORBED * positions + q] = (
                    values[i, base + TOTAL * positions + q]
                    - values[i, base + AIR_BOTTOM * positions + q]
                    - values[i, base + AIR_TOP * positions + q]
                    - values[i, base + SUBSTRATE * positions + q]
                    - values[i, base + COVER * positions + q]
                )
