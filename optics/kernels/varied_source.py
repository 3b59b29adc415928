"""Rates of change of the power that a dipole dissipates per in-plane wavevector.

The twin of `source`: same channels, same columns, along many directions at once. What a node's
power depends on is few numbers, so its rates by each of them are found once and then combined
along every direction.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Flags, Floats
from optics.kernels.compiled import borrowing, inline, rowwise
from optics.kernels.dipole import channel, dissipated_factor
from optics.kernels.elementary import exp_i
from optics.kernels.exits import COLUMNS
from optics.kernels.halfstack import reciprocal
from optics.kernels.problem import Half, Source
from optics.kernels.rules import NODES
from optics.kernels.variation import Rates
from optics.kernels.varied_response import Moves, Response, respond
from optics.kernels.varied_solved import Solved, solve_outward

# Powers whose rates are found, and what they may change by.
TOTAL_POWER, SENT_DOWN, SENT_UP = range(3)
ITSELF, BY_UP, BY_DOWN, BY_KZ, BY_FILM, BY_PLACE = range(6)


class VariedScratch(NamedTuple):
    """Arrays that the rates of one panel need; z positions, p directions, n nodes."""

    to_bottom: Complexes  # (z, n) phase factor from the dipole to the bottom face
    to_top: Complexes  # (z, n)
    inverse: Complexes  # (n,) 1/(1 - ab)
    factor: Complexes  # (n,) what stands before the reflections of a channel's power
    terms: Complexes  # (3, 6, z, n) a power; its rates by reflections, kz, thickness, position
    rates: Floats  # (3, p, z, n) along the directions
    sent: Floats  # (2, z, n) power sent down, up
    own: Complexes  # (p, n) relative rate of the factor before the reflections
    lit: Flags  # (n,) whether light comes back from a slab
    arrived: Floats  # (2, n)
    d_arrived: Floats  # (p, 2, n)
    stack: Floats  # (3, n)
    d_stack: Floats  # (p, 3, n)
    shares: Floats  # (COLUMNS, 2, n)
    d_shares: Floats  # (p, COLUMNS, 2, n)


@inline
def varied_scratch(directions: int, positions: int) -> VariedScratch:
    """Arrays for so many directions and positions."""
    phases = np.zeros((2, positions, NODES), dtype=np.complex128)
    single = np.zeros((2, NODES), dtype=np.complex128)
    return VariedScratch(
        phases[0],
        phases[1],
        single[0],
        single[1],
        np.zeros((3, 6, positions, NODES), dtype=np.complex128),
        np.zeros((3, directions, positions, NODES)),
        np.zeros((2, positions, NODES)),
        np.zeros((directions, NODES), dtype=np.complex128),
        np.zeros(NODES, dtype=np.bool_),
        np.zeros((2, NODES)),
        np.zeros((directions, 2, NODES)),
        np.zeros((3, NODES)),
        np.zeros((directions, 3, NODES)),
        np.zeros((COLUMNS, 2, NODES)),
        np.zeros((directions, COLUMNS, 2, NODES)),
    )


@borrowing
def fill_phases(
    pol: int, source: Source, solved_up: Solved, solved_down: Solved, scratch: VariedScratch
) -> None:
    """Phase factors from every dipole to both faces of the emitter film, and 1/(1 - ab)."""
    for q in range(source.kz_positions.size):
        below = source.kz_positions[q]
        _put_phases(solved_up.kz[pol, 0], below, scratch.to_bottom[q])
        _put_phases(solved_up.kz[pol, 0], source.kd - below, scratch.to_top[q])
    for i in range(NODES):
        phase = solved_up.e[pol, 0, i]
        a_face, b_face = solved_up.r_far[pol, 0, i], solved_down.r_far[pol, 0, i]
        scratch.inverse[i] = reciprocal(1.0 - a_face * b_face * phase * phase)


@rowwise
def _put_phases(kz: Complexes, way: float, phases: Complexes) -> None:
    """Phase factors of one way across the emitter film."""
    for i in range(NODES):
        phases[i] = exp_i(kz[i] * way)


@borrowing
def total_terms(
    c: int,
    source: Source,
    solved_up: Solved,
    solved_down: Solved,
    u: Complexes,
    du: Complexes,
    beyond_bulk: bool,
    scratch: VariedScratch,
) -> None:
    """Terms of the dissipated power of one channel.

    With a, b the reflections seen from the dipole, (1 + a)(1 + b)/(1 - ab) has the rates
    (1 + b)^2/(1 - ab)^2 by a and (1 + a)^2/(1 - ab)^2 by b.
    """
    pol, sign = channel(c)
    terms = scratch.terms[TOTAL_POWER]
    for i in range(NODES):
        kz, inv = solved_up.kz[pol, 0, i], scratch.inverse[i]
        scratch.factor[i] = dissipated_factor(c, source, u[i], kz) * du[i] * inv
    for q in range(source.kz_positions.size):
        low = source.kz_positions[q]
        for i in range(NODES):
            kz, factor = solved_up.kz[pol, 0, i], scratch.factor[i]
            a_face, b_face = solved_up.r_far[pol, 0, i], solved_down.r_far[pol, 0, i]
            steep = factor * scratch.inverse[i] * sign
            up = scratch.to_top[q, i] * scratch.to_top[q, i]
            down = scratch.to_bottom[q, i] * scratch.to_bottom[q, i]
            a, b = sign * a_face * up, sign * b_face * down
            bracket = a + b + 2.0 * a * b if beyond_bulk else (1.0 + a) * (1.0 + b)
            by_a = steep * (1.0 + b) * (1.0 + b) * up
            by_b = steep * (1.0 + a) * (1.0 + a) * down
            turn_a, turn_b = 2j * a_face * by_a, 2j * b_face * by_b
            terms[ITSELF, q, i] = factor * bracket
            terms[BY_UP, q, i] = by_a
            terms[BY_DOWN, q, i] = by_b
            terms[BY_KZ, q, i] = turn_a * (source.kd - low) + turn_b * low
            terms[BY_FILM, q, i] = kz * turn_a
            terms[BY_PLACE, q, i] = kz * (turn_b - turn_a)


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
    """Relative rates of `source.dissipated_factor` times du, along directions with moves.nodes."""
    pol, _ = channel(c)
    for p in range(u_rate.shape[0]):
        if not moves.nodes[p]:
            continue
        own_o, own_e = rates.eps[p, 0] / source.eps_o, rates.eps[p, 1] / source.eps_e
        for i in range(NODES):
            steps = u_rate[p, i] * reciprocal(u[i])
            turn = vary.kz[pol, p, i] * reciprocal(solved.kz[pol, 0, i])
            rate = steps - turn - rates.bulk[p, 1]
            if c == 0:
                rate = 3.0 * steps + own_o - 2.0 * own_e - rates.bulk[p, 0] - turn
            elif c == 1:
                rate = steps + turn - own_o - rates.bulk[p, 1]
            own[p, i] = rate + du_rate[p, i] * reciprocal(du[i])


@borrowing
def combine(
    power: int,
    pol: int,
    rates: Rates,
    moves: Moves,
    vary_up: Response,
    vary_down: Response,
    scratch: VariedScratch,
) -> None:
    """Combine the terms of one power along every direction, into scratch.rates[power]."""
    terms, out = scratch.terms[power], scratch.rates[power]
    for p in range(out.shape[0]):
        a_rate, b_rate = vary_up.r[pol, p], vary_down.r[pol, p]
        for q in range(out.shape[1]):
            row = out[p, q]
            for i in range(NODES):
                row[i] = 0.0
            _add_products(terms[BY_UP, q], a_rate, terms[BY_DOWN, q], b_rate, row)
            if moves.nodes[p]:
                own, kz_rate = scratch.own[p], vary_up.kz[pol, p]
                _add_products(terms[ITSELF, q], own, terms[BY_KZ, q], kz_rate, row)
            thicker, higher = rates.kd[p], rates.kz_positions[p, q]
            if thicker != 0.0:
                _add_times(terms[BY_FILM, q], thicker, row)
            if higher != 0.0:
                _add_times(terms[BY_PLACE, q], higher, row)


@rowwise
def _add_products(a: Complexes, x: Complexes, b: Complexes, y: Complexes, row: Floats) -> None:
    """Add Re(a x + b y) at every node."""
    for i in range(NODES):
        row[i] += a[i].real * x[i].real - a[i].imag * x[i].imag
        row[i] += b[i].real * y[i].real - b[i].imag * y[i].imag


@rowwise
def _add_times(a: Complexes, rate: float, row: Floats) -> None:
    """Add Re(a) times a rate at every node."""
    for i in range(NODES):
        row[i] += a[i].real * rate


@borrowing
def total_rates(
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
    beyond_bulk: bool,
    scratch: VariedScratch,
) -> None:
    """Rates of the dissipated power of one channel, into scratch.rates[TOTAL_POWER]."""
    total_terms(c, source, solved_up, solved_down, u, du, beyond_bulk, scratch)
    _factor_rates(c, source, rates, moves, vary_up, solved_up, u, du, u_rate, du_rate, scratch.own)
    combine(TOTAL_POWER, channel(c)[0], rates, moves, vary_up, vary_down, scratch)


@borrowing
def varied_dissipated(
    source: Source,
    rates: Rates,
    moves: Moves,
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
    beyond_bulk: bool,
    first: int,
    values: Floats,
) -> None:
    """Rates of the dissipated power at the nodes of a panel on any path.

    Parameters
    ----------
    u, du : complex (NODES,)
        Nodes and derivative of the path.
    u_rate, du_rate : float (p, NODES)
        Their rates.
    beyond_bulk : bool
        As in `source.dissipated`.
    first : int
        Place of the first of these nodes.
    values : float (p * 3 * positions, nodes), output
        Column (direction * 3 + channel) * positions + position.
    """
    solve_outward(source, up, down, solved_up, solved_down, u)
    respond(u, u_rate, up, rates.up, moves, solved_up, 1, vary_up)
    respond(u, u_rate, down, rates.down, moves, solved_down, 1, vary_down)
    positions = source.kz_positions.size
    for c in (2, 0, 1):
        if c != 1:
            fill_phases(channel(c)[0], source, solved_up, solved_down, scratch)
        total_rates(
            c, source, rates, moves, solved_up, solved_down, vary_up, vary_down, u, du, u_rate,
            du_rate, beyond_bulk, scratch,
        )  # fmt: skip
        for p in range(u_rate.shape[0]):
            for q in range(positions):
                column = values[(p * 3 + c) * positions + q, first:]
                for i in range(NODES):
                    column[i] = scratch.rates[TOTAL_POWER, p, q, i]
