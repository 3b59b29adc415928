"""Rates of change of the power that a dipole dissipates per in-plane wavevector.

The twin of `source`: same channels, same columns, along many directions at once. What a node's
power depends on is few numbers, so its rates by each of them are found once and then combined
along every direction.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Flags, Floats
from optics.kernels.compiled import inline
from optics.kernels.elementary import exp_i
from optics.kernels.exits import COLUMNS
from optics.kernels.halfstack import outward, reciprocal, waves
from optics.kernels.problem import Half, Source, Work
from optics.kernels.rules import NODES
from optics.kernels.source import channel, dissipated_factor
from optics.kernels.variation import Rates
from optics.kernels.varied_response import Moves, Response, respond

# Powers whose rates are found, and what they may change by.
TOTAL_POWER, SENT_DOWN, SENT_UP = range(3)
ITSELF, BY_UP, BY_DOWN, BY_KZ, BY_FILM, BY_PLACE = range(6)


class VariedScratch(NamedTuple):
    """Arrays that the rates of one panel need; z positions, p directions, n nodes."""

    to_bottom: Complexes  # (n, z) phase factor from the dipole to the bottom face
    to_top: Complexes  # (n, z)
    phase: Complexes  # (n,) of the emitter film
    inverse: Complexes  # (n,) 1/(1 - ab)
    terms: Complexes  # (3, 6, n, z) a power; its rates by reflections, kz, thickness, position
    rates: Floats  # (3, p, n, z) along the directions
    sent: Floats  # (2, n, z) power sent down, up
    own: Complexes  # (p, n) relative rate of the factor before the reflections
    lit: Flags  # (n,) whether light comes back from a slab
    arrived: Floats  # (2, n)
    d_arrived: Floats  # (p, 2, n)
    stack: Floats  # (3, n)
    d_stack: Floats  # (p, 3, n)
    shares: Floats  # (COLUMNS, n, 2)
    d_shares: Floats  # (p, COLUMNS, n, 2)


@inline
def varied_scratch(directions: int, positions: int) -> VariedScratch:
    """Arrays for so many directions and positions."""
    phases = np.zeros((2, NODES, positions), dtype=np.complex128)
    single = np.zeros((2, NODES), dtype=np.complex128)
    return VariedScratch(
        phases[0],
        phases[1],
        single[0],
        single[1],
        np.zeros((3, 6, NODES, positions), dtype=np.complex128),
        np.zeros((3, directions, NODES, positions)),
        np.zeros((2, NODES, positions)),
        np.zeros((directions, NODES), dtype=np.complex128),
        np.zeros(NODES, dtype=np.bool_),
        np.zeros((2, NODES)),
        np.zeros((directions, 2, NODES)),
        np.zeros((3, NODES)),
        np.zeros((directions, 3, NODES)),
        np.zeros((COLUMNS, NODES, 2)),
        np.zeros((directions, COLUMNS, NODES, 2)),
    )


@inline
def fill_phases(
    pol: int, source: Source, work_up: Work, work_down: Work, scratch: VariedScratch
) -> None:
    """Phase factors from every dipole to both faces of the emitter film, and 1/(1 - ab)."""
    for i in range(NODES):
        kz = work_up.kz[pol, 0, i]
        for q in range(source.kz_positions.size):
            scratch.to_bottom[i, q] = exp_i(kz * source.kz_positions[q])
            scratch.to_top[i, q] = exp_i(kz * (source.kd - source.kz_positions[q]))
        phase = scratch.to_bottom[i, 0] * scratch.to_top[i, 0]
        a_face, b_face = work_up.r_far[pol, 0, i], work_down.r_far[pol, 0, i]
        scratch.phase[i] = phase
        scratch.inverse[i] = reciprocal(1.0 - a_face * b_face * phase * phase)


@inline
def total_terms(
    c: int,
    source: Source,
    work_up: Work,
    work_down: Work,
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
        kz, inv = work_up.kz[pol, 0, i], scratch.inverse[i]
        a_face, b_face = work_up.r_far[pol, 0, i], work_down.r_far[pol, 0, i]
        factor = dissipated_factor(c, source, u[i], kz) * du[i] * inv
        steep = factor * inv * sign
        for q in range(source.kz_positions.size):
            low = source.kz_positions[q]
            up = scratch.to_top[i, q] * scratch.to_top[i, q]
            down = scratch.to_bottom[i, q] * scratch.to_bottom[i, q]
            a, b = sign * a_face * up, sign * b_face * down
            bracket = a + b + 2.0 * a * b if beyond_bulk else (1.0 + a) * (1.0 + b)
            by_a = steep * (1.0 + b) * (1.0 + b) * up
            by_b = steep * (1.0 + a) * (1.0 + a) * down
            turn_a, turn_b = 2j * a_face * by_a, 2j * b_face * by_b
            terms[ITSELF, i, q] = factor * bracket
            terms[BY_UP, i, q] = by_a
            terms[BY_DOWN, i, q] = by_b
            terms[BY_KZ, i, q] = turn_a * (source.kd - low) + turn_b * low
            terms[BY_FILM, i, q] = kz * turn_a
            terms[BY_PLACE, i, q] = kz * (turn_b - turn_a)


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
    """Relative rates of `source.dissipated_factor` times du, along directions with moves.nodes."""
    pol, _ = channel(c)
    for p in range(u_rate.shape[0]):
        if not moves.nodes[p]:
            continue
        own_o, own_e = rates.eps[p, 0] / source.eps_o, rates.eps[p, 1] / source.eps_e
        for i in range(NODES):
            steps = u_rate[p, i] * reciprocal(u[i])
            turn = vary.kz[pol, p, i] * reciprocal(work.kz[pol, 0, i])
            rate = steps - turn - rates.bulk[p, 1]
            if c == 0:
                rate = 3.0 * steps + own_o - 2.0 * own_e - rates.bulk[p, 0] - turn
            elif c == 1:
                rate = steps + turn - own_o - rates.bulk[p, 1]
            own[p, i] = rate + du_rate[p, i] * reciprocal(du[i])


@inline
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
    positions = terms.shape[2]
    for i in range(NODES):
        for p in range(out.shape[0]):
            a_rate, b_rate = vary_up.r[pol, p, i], vary_down.r[pol, p, i]
            for q in range(positions):
                x = terms[BY_UP, i, q] * a_rate + terms[BY_DOWN, i, q] * b_rate
                out[p, i, q] = x.real
            if moves.nodes[p]:
                own, kz_rate = scratch.own[p, i], vary_up.kz[pol, p, i]
                for q in range(positions):
                    x = terms[ITSELF, i, q] * own + terms[BY_KZ, i, q] * kz_rate
                    out[p, i, q] += x.real
            if rates.kd[p] != 0.0:
                for q in range(positions):
                    out[p, i, q] += terms[BY_FILM, i, q].real * rates.kd[p]
            if moves.places[p]:
                for q in range(positions):
                    out[p, i, q] += terms[BY_PLACE, i, q].real * rates.kz_positions[p, q]


@inline
def total_rates(
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
    beyond_bulk: bool,
    scratch: VariedScratch,
) -> None:
    """Rates of the dissipated power of one channel, into scratch.rates[TOTAL_POWER]."""
    total_terms(c, source, work_up, work_down, u, du, beyond_bulk, scratch)
    _factor_rates(c, source, rates, moves, vary_up, work_up, u, du, u_rate, du_rate, scratch.own)
    combine(TOTAL_POWER, channel(c)[0], rates, moves, vary_up, vary_down, scratch)


@inline
def varied_dissipated(
    source: Source,
    rates: Rates,
    moves: Moves,
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
    beyond_bulk: bool,
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
    values : float (NODES, p * 3 * positions), output
        Column (direction * 3 + channel) * positions + position.
    """
    waves(u, up.eps_o, up.eps_e, up.kd, work_up.kz, work_up.y, work_up.e)
    waves(u, down.eps_o, down.eps_e, down.kd, work_down.kz, work_down.y, work_down.e)
    outward(work_up.y, work_up.e, work_up.r_far, work_up.f, work_up.t)
    outward(work_down.y, work_down.e, work_down.r_far, work_down.f, work_down.t)
    respond(u, u_rate, up, rates.up, moves, work_up, 1, vary_up)
    respond(u, u_rate, down, rates.down, moves, work_down, 1, vary_down)
    positions = source.kz_positions.size
    for c in (2, 0, 1):
        if c != 1:
            fill_phases(channel(c)[0], source, work_up, work_down, scratch)
        total_rates(
            c, source, rates, moves, work_up, work_down, vary_up, vary_down, u, du, u_rate,
            du_rate, beyond_bulk, scratch,
        )  # fmt: skip
        for p in range(u_rate.shape[0]):
            first = (p * 3 + c) * positions
            for i in range(NODES):
                for q in range(positions):
                    values[i, first + q] = scratch.rates[TOTAL_POWER, p, i, q]
