"""Rates of change of the power that a dipole sends to every destination.

The twin of `source.radiated`. The absorbed part is what all other destinations leave of the
dissipated power. For values that would make the energy balance an identity, so there it is a
volume integral; but what follows from an identity may be differentiated by it.
"""

from optics.kernels.arrays import Complexes, Flags, Floats
from optics.kernels.compiled import borrowing, rowwise
from optics.kernels.dipole import channel, outgoing_factor
from optics.kernels.exits import (
    ABSORBED,
    AIR_BOTTOM,
    AIR_TOP,
    COLUMNS,
    COVER,
    PLANAR,
    SUBSTRATE,
    TOTAL,
    light_returns,
)
from optics.kernels.halfstack import abs2, reciprocal
from optics.kernels.problem import Half, Sides, Source
from optics.kernels.rules import NODES
from optics.kernels.variation import Rates
from optics.kernels.varied_exits import arrival_rates, lit_from_outside, share_rates
from optics.kernels.varied_response import FORMS, THROUGH, Moves, Response, respond
from optics.kernels.varied_solved import Solved, light_inward, solve_outward
from optics.kernels.varied_source import (
    BY_DOWN,
    BY_FILM,
    BY_KZ,
    BY_PLACE,
    BY_UP,
    ITSELF,
    SENT_DOWN,
    TOTAL_POWER,
    VariedScratch,
    combine,
    fill_phases,
    total_rates,
)


@borrowing
def solve_varied(
    source: Source,
    rates: Rates,
    moves: Moves,
    sides: Sides,
    up: Half,
    down: Half,
    solved_up: Solved,
    solved_down: Solved,
    vary_up: Response,
    vary_down: Response,
    u: Complexes,
    u_rate: Floats,
    lit: Flags,
) -> None:
    """Both half stacks, lit from either end, and their rates; where light comes back (n,)."""
    forms = THROUGH + 1
    for i in range(NODES):
        lit[i] = light_returns(sides, u[i].real)
        forms = FORMS if lit[i] else forms
    solve_outward(source, up, down, solved_up, solved_down, u)
    light_inward(solved_up)
    light_inward(solved_down)
    respond(u, u_rate, up, rates.up, moves, solved_up, forms, vary_up)
    respond(u, u_rate, down, rates.down, moves, solved_down, forms, vary_down)


@borrowing
def shares_of_panel(
    pol: int,
    source: Source,
    rates: Rates,
    moves: Moves,
    sides: Sides,
    solved_up: Solved,
    solved_down: Solved,
    vary_up: Response,
    vary_down: Response,
    u: Complexes,
    u_rate: Floats,
    scratch: VariedScratch,
) -> None:
    """Fill phases and shares of one polarization."""
    fill_phases(pol, source, solved_up, solved_down, scratch)
    arrival_rates(
        pol, solved_down, solved_up, vary_down, vary_up, scratch.arrived, scratch.d_arrived
    )
    scratch.stack[:2] = 1.0
    scratch.stack[2] = 0.0
    scratch.d_stack[:, :, :] = 0.0
    if sides.kind[1] == PLANAR:
        lit_from_outside(
            pol, 1, source, rates.kd, solved_up, solved_down, vary_up, vary_down,
            scratch.lit, scratch.stack, scratch.d_stack,
        )  # fmt: skip
    if sides.kind[0] == PLANAR:
        lit_from_outside(
            pol, 0, source, rates.kd, solved_down, solved_up, vary_down, vary_up,
            scratch.lit, scratch.stack, scratch.d_stack,
        )  # fmt: skip
    share_rates(
        pol, u, u_rate, sides, rates, moves.sides, scratch.arrived,
        scratch.d_arrived, scratch.stack, scratch.d_stack, scratch.shares, scratch.d_shares,
    )  # fmt: skip


@borrowing
def _sent_terms(
    c: int,
    side: int,
    source: Source,
    solved_up: Solved,
    solved_down: Solved,
    u: Complexes,
    du: Complexes,
    scratch: VariedScratch,
) -> None:
    """Terms of the power sent to one side, |E|^2 with E down = to_b (1 + a)/(1 - ab)."""
    pol, sign = channel(c)
    terms = scratch.terms[SENT_DOWN + side]
    by_face, by_far = (BY_UP, BY_DOWN) if side == 0 else (BY_DOWN, BY_UP)
    for i in range(NODES):
        kz = solved_up.kz[pol, 0, i]
        scratch.factor[i] = outgoing_factor(c, source, u[i].real, kz) * du[i].real
    for q in range(source.kz_positions.size):
        near_way, far_way = source.kz_positions[q], source.kd - source.kz_positions[q]
        if side == 1:
            near_way, far_way = far_way, near_way
        for i in range(NODES):
            kz, inv, phase = solved_up.kz[pol, 0, i], scratch.inverse[i], solved_up.e[pol, 0, i]
            face, far = solved_up.r_far[pol, 0, i], solved_down.r_far[pol, 0, i]
            to_near, to_far = scratch.to_bottom[q, i], scratch.to_top[q, i]
            if side == 1:
                face, far = far, face
                to_near, to_far = to_far, to_near
            factor, loop = scratch.factor[i].real, inv * phase * phase
            whole = face * far * loop * 2j
            mirror = sign * inv * to_near * to_far * to_far
            e = to_near * inv + face * mirror
            weight = 2.0 * factor * e.conjugate()
            direct = weight * e * 1j
            echo = weight * face * mirror * 2j
            around = weight * e * whole
            power = factor * abs2(e)
            scratch.sent[side, q, i] = power
            terms[ITSELF, q, i] = power
            terms[by_face, q, i] = weight * (mirror + e * loop * far)
            terms[by_far, q, i] = weight * e * loop * face
            terms[BY_KZ, q, i] = direct * near_way + echo * far_way + around * source.kd
            if side == 0:
                terms[BY_FILM, q, i] = kz * (echo + around)
                terms[BY_PLACE, q, i] = kz * (direct - echo)
            else:
                terms[BY_FILM, q, i] = kz * (direct + around)
                terms[BY_PLACE, q, i] = kz * (echo - direct)


@borrowing
def _factor_rates(
    c: int,
    source: Source,
    rates: Rates,
    moves: Moves,
    vary: Response,
    solved: Solved,
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
            turn = 2.0 * (vary.kz[pol, p, i] * reciprocal(solved.kz[pol, 0, i])).real
            rate = steps - rates.bulk[p, 1] - turn
            if c == 0:
                rate = 3.0 * steps + own_film - rates.bulk[p, 0] - turn
            elif c == 1:
                rate = steps - rates.bulk[p, 1]
            own[p, i] = rate + du_rate[p, i] / du[i].real


@borrowing
def sent_rates(
    c: int,
    source: Source,
    rates: Rates,
    moves: Moves,
    solved_up: Solved,
    solved_down: Solved,
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
    _factor_rates(c, source, rates, moves, vary_up, solved_up, u, du, u_rate, du_rate, scratch.own)
    for side in range(2):
        _sent_terms(c, side, source, solved_up, solved_down, u, du, scratch)
        combine(SENT_DOWN + side, pol, rates, moves, vary_up, vary_down, scratch)


@borrowing
def varied_radiated(
    source: Source,
    rates: Rates,
    moves: Moves,
    sides: Sides,
    up: Half,
    down: Half,
    solved_up: Solved,
    solved_down: Solved,
    vary_up: Response,
    vary_down: Response,
    scratch: VariedScratch,
    u: Complexes,
    du: Complexes,
    u_rate: Floats,
    du_rate: Floats,
    first: int,
    values: Floats,
) -> None:
    """Rates of dissipated power and all destinations at real nodes below the outer light lines.

    Parameters
    ----------
    u, du : complex (NODES,), real-valued
    u_rate, du_rate : float (p, NODES)
    first : int
        Place of the first of these nodes.
    values : float (p * 2 * COLUMNS * positions, nodes), output
        Column ((direction * 2 + orientation) * COLUMNS + destination) * positions + position.
    """
    solve_varied(
        source, rates, moves, sides, up, down, solved_up, solved_down, vary_up, vary_down, u,
        u_rate, scratch.lit,
    )  # fmt: skip
    values[:, first : first + NODES] = 0.0
    for c in (2, 0, 1):
        if c != 1:
            shares_of_panel(
                channel(c)[0], source, rates, moves, sides, solved_up, solved_down, vary_up,
                vary_down, u, u_rate, scratch,
            )  # fmt: skip
        total_rates(
            c, source, rates, moves, solved_up, solved_down, vary_up, vary_down, u, du, u_rate,
            du_rate, False, scratch,
        )  # fmt: skip
        sent_rates(
            c, source, rates, moves, solved_up, solved_down, vary_up, vary_down, u, du, u_rate,
            du_rate, scratch,
        )  # fmt: skip
        _book_destinations(0 if c == 0 else 1, scratch, first, values)
    _book_absorbed(u_rate.shape[0], source.kz_positions.size, first, values)


@borrowing
def _book_destinations(
    orientation: int, scratch: VariedScratch, first: int, values: Floats
) -> None:
    """Add one channel's rates to the columns of `varied_radiated`."""
    _, directions, positions, _ = scratch.rates.shape
    rates, sent, shares, d_shares = scratch.rates, scratch.sent, scratch.shares, scratch.d_shares
    for p in range(directions):
        for k in range(COLUMNS):
            column = ((p * 2 + orientation) * COLUMNS + k) * positions
            if k == TOTAL:
                for q in range(positions):
                    _add_row(rates[TOTAL_POWER, p, q], values[column + q, first:])
                continue
            for side in range(2):
                if _blank(shares[k, side]) and _blank(d_shares[p, k, side]):
                    continue
                for q in range(positions):
                    _add_arrived(
                        rates[SENT_DOWN + side, p, q], shares[k, side], sent[side, q],
                        d_shares[p, k, side], values[column + q, first:],
                    )  # fmt: skip


@borrowing
def _blank(row: Floats) -> bool:
    """Whether nothing gets there at any node."""
    found = 0.0
    for i in range(NODES):
        found = max(found, abs(row[i]))
    return found == 0.0


@rowwise
def _add_row(row: Floats, total: Floats) -> None:
    for i in range(NODES):
        total[i] += row[i]


@rowwise
def _add_arrived(
    rate: Floats, share: Floats, sent: Floats, share_rate: Floats, total: Floats
) -> None:
    """Add the rate of what is sent times the share of it that arrives."""
    for i in range(NODES):
        total[i] += rate[i] * share[i] + sent[i] * share_rate[i]


@borrowing
def _book_absorbed(directions: int, positions: int, first: int, values: Floats) -> None:
    """Set the absorbed column to what the other destinations leave of the total."""
    for block in range(2 * directions):
        base = block * COLUMNS * positions
        for q in range(base, base + positions):
            _put_rest(
                values[q + TOTAL * positions, first:], values[q + AIR_BOTTOM * positions, first:],
                values[q + AIR_TOP * positions, first:], values[q + SUBSTRATE * positions, first:],
                values[q + COVER * positions, first:], values[q + ABSORBED * positions, first:],
            )  # fmt: skip


@rowwise
def _put_rest(
    total: Floats, bottom: Floats, top: Floats, substrate: Floats, cover: Floats, rest: Floats
) -> None:
    for i in range(NODES):
        rest[i] = total[i] - bottom[i] - top[i] - substrate[i] - cover[i]
