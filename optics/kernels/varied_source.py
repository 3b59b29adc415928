"""Rates of change of a dipole's power per in-plane wavevector along many directions.

The twin of `source`: same channels, same columns. The absorbed part is what all other
destinations leave of the dissipated power. For values that would make the energy balance an
identity, so there it is a volume integral; but what follows from an identity may be
differentiated by it.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline
from optics.kernels.elementary import exp_i
from optics.kernels.exits import (
    ABSORBED,
    AIR_BOTTOM,
    AIR_TOP,
    COLUMNS,
    COVER,
    MATCHED_BOTTOM,
    MATCHED_TOP,
    SUBSTRATE,
    TOTAL,
)
from optics.kernels.halfstack import P, abs2, inward, outward, reciprocal, waves
from optics.kernels.problem import Half, Sides, Source, Work
from optics.kernels.rules import NODES
from optics.kernels.source import channel, dissipated_factor, outgoing_factor
from optics.kernels.variation import Rates
from optics.kernels.varied_exits import share_rates
from optics.kernels.varied_response import FORMS, Response, respond


class VariedScratch(NamedTuple):
    """Arrays that one node needs; z positions, p directions."""

    to_bottom: Complexes  # (z,) phase factor from the dipole to the bottom face
    to_top: Complexes  # (z,)
    terms: Complexes  # (3, 6, z) total, sent down, sent up; by what `_add` lists
    sent: Floats  # (2, z) power sent down, up
    sent_rates: Floats  # (p, 2, z)
    total_rates: Floats  # (p, z)
    phase_rate: Complexes  # (p,)
    shares: Floats  # (2, COLUMNS)
    d_shares: Floats  # (p, 2, COLUMNS)


@inline
def varied_scratch(directions: int, positions: int) -> VariedScratch:
    """Arrays for so many directions and positions."""
    phases = np.zeros((2, positions), dtype=np.complex128)
    return VariedScratch(
        phases[0],
        phases[1],
        np.zeros((3, 6, positions), dtype=np.complex128),
        np.zeros((2, positions)),
        np.zeros((directions, 2, positions)),
        np.zeros((directions, positions)),
        np.zeros(directions, dtype=np.complex128),
        np.zeros((2, COLUMNS)),
        np.zeros((directions, 2, COLUMNS)),
    )


@inline
def _fill_phases(kz: complex, source: Source, scratch: VariedScratch) -> None:
    for q in range(source.kz_positions.size):
        scratch.to_bottom[q] = exp_i(kz * source.kz_positions[q])
        scratch.to_top[q] = exp_i(kz * (source.kd - source.kz_positions[q]))


@inline
def _dissipated_rate(
    c: int,
    source: Source,
    rates: Rates,
    p: int,
    u: complex,
    u_rate: float,
    kz: complex,
    dkz: complex,
) -> complex:
    """Relative rate of `source.dissipated_factor`."""
    own_o, own_e = rates.eps[p, 0] / source.eps_o, rates.eps[p, 1] / source.eps_e
    steps, turn = u_rate * reciprocal(u), dkz * reciprocal(kz)
    if c == 0:
        return 3.0 * steps + own_o - 2.0 * own_e - rates.bulk[p, 0] - turn
    if c == 1:
        return steps + turn - own_o - rates.bulk[p, 1]
    return steps - turn - rates.bulk[p, 1]


@inline
def _outgoing_rate(
    c: int, source: Source, rates: Rates, p: int, u: float, u_rate: float, kz: complex, dkz: complex
) -> float:
    """Relative rate of `source.outgoing_factor`."""
    steps, turn = u_rate / u, 2.0 * (dkz * reciprocal(kz)).real
    if c == 0:
        own = 2.0 * (rates.eps[p, 0] / source.eps_o - rates.eps[p, 1] / source.eps_e)
        return 3.0 * steps + own - rates.bulk[p, 0] - turn
    if c == 1:
        return steps - rates.bulk[p, 1]
    return steps - rates.bulk[p, 1] - turn


@inline
def _total_terms(
    factor: complex, sign: float, source: Source, kz: complex, a_face: complex, b_face: complex,
    inv: complex, beyond_bulk: bool, scratch: VariedScratch,
) -> None:  # fmt: skip
    """Terms of the dissipated power: itself, and its rates by what `_add` lists.

    With a, b the reflections seen from the dipole, (1 + a)(1 + b)/(1 - ab) has the rates
    (1 + b)^2/(1 - ab)^2 by a and (1 + a)^2/(1 - ab)^2 by b.
    """
    terms = scratch.terms[0]
    a_face, b_face = sign * a_face, sign * b_face
    steep = factor * inv * inv * sign
    for q in range(source.kz_positions.size):
        low = source.kz_positions[q]
        high = source.kd - low
        up, down = (
            scratch.to_top[q] * scratch.to_top[q],
            scratch.to_bottom[q] * scratch.to_bottom[q],
        )
        a, b = a_face * up, b_face * down
        bracket = a + b + 2.0 * a * b if beyond_bulk else (1.0 + a) * (1.0 + b)
        by_a = steep * (1.0 + b) * (1.0 + b) * up
        by_b = steep * (1.0 + a) * (1.0 + a) * down
        turn_a, turn_b = 2j * sign * a_face * by_a, 2j * sign * b_face * by_b
        terms[0, q] = factor * inv * bracket
        terms[1, q] = by_a
        terms[2, q] = by_b
        terms[3, q] = turn_a * high + turn_b * low
        terms[4, q] = kz * turn_a
        terms[5, q] = kz * (turn_b - turn_a)


@inline
def _sent_terms(
    factor: float, sign: float, source: Source, kz: complex, a_face: complex, b_face: complex,
    inv: complex, scratch: VariedScratch,
) -> None:  # fmt: skip
    """Terms of the power sent down and up, |E|^2 with E down = to_b (1 + a)/(1 - ab)."""
    phase = scratch.to_bottom[0] * scratch.to_top[0]
    loop = inv * phase * phase
    whole = a_face * b_face * loop * 2j
    for side in range(2):
        face, far = (a_face, b_face) if side == 0 else (b_face, a_face)
        terms = scratch.terms[1 + side]
        for q in range(source.kz_positions.size):
            near_way, far_way = source.kz_positions[q], source.kd - source.kz_positions[q]
            to_near, to_far = scratch.to_bottom[q], scratch.to_top[q]
            if side == 1:
                near_way, far_way = far_way, near_way
                to_near, to_far = to_far, to_near
            mirror = sign * inv * to_near * to_far * to_far
            e = to_near * inv + face * mirror
            scratch.sent[side, q] = factor * abs2(e)
            weight = 2.0 * factor * e.conjugate()
            by_face = weight * (mirror + e * loop * far)
            by_far = weight * e * loop * face
            direct = weight * e * 1j
            echo = weight * face * mirror * 2j
            round_trip = weight * e * whole
            terms[1 + side, q] = by_face
            terms[2 - side, q] = by_far
            terms[3, q] = direct * near_way + echo * far_way + round_trip * source.kd
            if side == 0:
                terms[4, q] = kz * (echo + round_trip)
                terms[5, q] = kz * (direct - echo)
            else:
                terms[4, q] = kz * (direct + round_trip)
                terms[5, q] = kz * (echo - direct)


@inline
def _add(
    terms: Complexes, p: int, rates: Rates, a_rate: complex, b_rate: complex, kz_rate: complex,
    out: Floats,
) -> None:  # fmt: skip
    """Set out (z,) to the rate along one direction.

    terms : complex (6, z); 1 to 5 by: reflection up, reflection down, kz, film thickness,
    position.
    """
    for q in range(out.size):
        x = terms[1, q] * a_rate + terms[2, q] * b_rate + terms[3, q] * kz_rate
        out[q] = x.real
    if rates.kd[p] != 0.0:
        for q in range(out.size):
            out[q] += terms[4, q].real * rates.kd[p]
    for q in range(out.size):
        out[q] += terms[5, q].real * rates.kz_positions[p, q]


@inline
def _total_rates(
    c: int, i: int, source: Source, rates: Rates, u: Complexes, du: Complexes, u_rate: Floats,
    du_rate: Floats, beyond_bulk: bool, kz: complex, vary_up: Response, vary_down: Response,
    a_face: complex, b_face: complex, inv: complex, scratch: VariedScratch,
) -> None:  # fmt: skip
    """Rates of the dissipated power of one channel at one node, into scratch.total_rates."""
    pol, sign = channel(c)
    factor = dissipated_factor(c, source, u[i], kz)
    _total_terms(factor * du[i], sign, source, kz, a_face, b_face, inv, beyond_bulk, scratch)
    stretch = reciprocal(du[i])
    terms = scratch.terms[0]
    for p in range(u_rate.shape[0]):
        out = scratch.total_rates[p]
        dkz = vary_up.kz[pol, p, i]
        _add(terms, p, rates, vary_up.r[pol, p, i], vary_down.r[pol, p, i], dkz, out)
        own = _dissipated_rate(c, source, rates, p, u[i], u_rate[p, i], kz, dkz)
        own += du_rate[p, i] * stretch
        for q in range(out.size):
            out[q] += (terms[0, q] * own).real


@inline
def varied_dissipated(
    source: Source, rates: Rates, up: Half, down: Half, work_up: Work, work_down: Work,
    vary_up: Response, vary_down: Response, scratch: VariedScratch, u: Complexes, du: Complexes,
    u_rate: Floats, du_rate: Floats, beyond_bulk: bool, values: Floats,
) -> None:  # fmt: skip
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
    respond(u, u_rate, up, rates.up, work_up, 1, vary_up)
    respond(u, u_rate, down, rates.down, work_down, 1, vary_down)
    positions = source.kz_positions.size
    for pol in range(2):
        for i in range(NODES):
            kz = work_up.kz[pol, 0, i]
            _fill_phases(kz, source, scratch)
            a_face, b_face = work_up.r_far[pol, 0, i], work_down.r_far[pol, 0, i]
            phase = scratch.to_bottom[0] * scratch.to_top[0]
            inv = reciprocal(1.0 - a_face * b_face * phase * phase)
            for c in range(3):
                if channel(c)[0] != pol:
                    continue
                _total_rates(
                    c, i, source, rates, u, du, u_rate, du_rate, beyond_bulk, kz, vary_up,
                    vary_down, a_face, b_face, inv, scratch,
                )  # fmt: skip
                for p in range(u_rate.shape[0]):
                    first = (p * 3 + c) * positions
                    for q in range(positions):
                        values[i, first + q] = scratch.total_rates[p, q]


@inline
def solve_varied(
    source: Source, rates: Rates, up: Half, down: Half, work_up: Work, work_down: Work,
    vary_up: Response, vary_down: Response, u: Complexes, u_rate: Floats,
) -> None:  # fmt: skip
    """Both half stacks, lit from either end, and their rates."""
    waves(u, up.eps_o, up.eps_e, up.kd, work_up.kz, work_up.y, work_up.e)
    waves(u, down.eps_o, down.eps_e, down.kd, work_down.kz, work_down.y, work_down.e)
    outward(work_up.y, work_up.e, work_up.r_far, work_up.f, work_up.t)
    outward(work_down.y, work_down.e, work_down.r_far, work_down.f, work_down.t)
    inward(work_up.y, work_up.e, work_up.r_near, work_up.g, work_up.r_out)
    inward(work_down.y, work_down.e, work_down.r_near, work_down.g, work_down.r_out)
    respond(u, u_rate, up, rates.up, work_up, FORMS, vary_up)
    respond(u, u_rate, down, rates.down, work_down, FORMS, vary_down)


@inline
def shared_at_node(
    pol: int, i: int, source: Source, rates: Rates, sides: Sides, work_up: Work, work_down: Work,
    vary_up: Response, vary_down: Response, u: Complexes, u_rate: Floats, scratch: VariedScratch,
) -> complex:  # fmt: skip
    """Fill phases and shares of one node and polarization; return 1/(1 - ab)."""
    kz = work_up.kz[pol, 0, i]
    _fill_phases(kz, source, scratch)
    phase = scratch.to_bottom[0] * scratch.to_top[0]
    for p in range(u_rate.shape[0]):
        turn = vary_up.kz[pol, p, i] * source.kd + kz * rates.kd[p]
        scratch.phase_rate[p] = 1j * phase * turn
    share_rates(
        pol, i, u[i].real, u_rate[:, i], sides, rates, work_down, work_up, phase,
        scratch.phase_rate, vary_down, vary_up, scratch.shares, scratch.d_shares,
    )  # fmt: skip
    a_face, b_face = work_up.r_far[pol, 0, i], work_down.r_far[pol, 0, i]
    return reciprocal(1.0 - a_face * b_face * phase * phase)


@inline
def sent_at_node(
    c: int, i: int, source: Source, rates: Rates, kz: complex, a_face: complex, b_face: complex,
    inv: complex, vary_up: Response, vary_down: Response, u: float, du: float, u_rate: Floats,
    du_rate: Floats, scratch: VariedScratch,
) -> None:  # fmt: skip
    """Power sent down and up by one channel at one real node, and its rates, into scratch."""
    pol, sign = channel(c)
    factor = outgoing_factor(c, source, u, kz) * du
    _sent_terms(factor, sign, source, kz, a_face, b_face, inv, scratch)
    for p in range(u_rate.shape[0]):
        dkz = vary_up.kz[pol, p, i]
        own = _outgoing_rate(c, source, rates, p, u, u_rate[p, i], kz, dkz) + du_rate[p, i] / du
        for side in range(2):
            out = scratch.sent_rates[p, side]
            a_rate, b_rate = vary_up.r[pol, p, i], vary_down.r[pol, p, i]
            _add(scratch.terms[1 + side], p, rates, a_rate, b_rate, dkz, out)
            for q in range(out.size):
                out[q] += scratch.sent[side, q] * own


@inline
def varied_radiated(
    source: Source, rates: Rates, sides: Sides, up: Half, down: Half, work_up: Work,
    work_down: Work, vary_up: Response, vary_down: Response, scratch: VariedScratch, u: Complexes,
    du: Complexes, u_rate: Floats, du_rate: Floats, values: Floats,
) -> None:  # fmt: skip
    """Rates of dissipated power and all destinations at real nodes below the outer light lines.

    Parameters
    ----------
    u, du : complex (NODES,), real-valued
    u_rate, du_rate : float (p, NODES)
    values : float (NODES, p * 2 * COLUMNS * positions), output
        Column ((direction * 2 + orientation) * COLUMNS + destination) * positions + position.
    """
    solve_varied(
        source, rates, up, down, work_up, work_down, vary_up, vary_down, u, u_rate
    )  # fmt: skip
    values[:, :] = 0.0
    for pol in range(2):
        for i in range(NODES):
            inv = shared_at_node(
                pol, i, source, rates, sides, work_up, work_down, vary_up, vary_down, u, u_rate,
                scratch,
            )  # fmt: skip
            kz = work_up.kz[pol, 0, i]
            a_face, b_face = work_up.r_far[pol, 0, i], work_down.r_far[pol, 0, i]
            for c in range(3):
                if channel(c)[0] != pol:
                    continue
                _total_rates(
                    c, i, source, rates, u, du, u_rate, du_rate, False, kz, vary_up, vary_down,
                    a_face, b_face, inv, scratch,
                )  # fmt: skip
                sent_at_node(
                    c, i, source, rates, kz, a_face, b_face, inv, vary_up, vary_down, u[i].real,
                    du[i].real, u_rate, du_rate, scratch,
                )  # fmt: skip
                _book_destinations(0 if c == 0 else 1, scratch, values[i])
    _book_absorbed(u_rate.shape[0], source.kz_positions.size, values)


@inline
def _book_destinations(orientation: int, scratch: VariedScratch, row: Floats) -> None:
    """Add one channel's rates to a row of `varied_radiated`."""
    directions, positions = scratch.total_rates.shape
    for p in range(directions):
        base = (p * 2 + orientation) * COLUMNS * positions
        for q in range(positions):
            row[base + TOTAL * positions + q] += scratch.total_rates[p, q]
        for k in range(1, COLUMNS):
            for side in range(2):
                share, rate = scratch.shares[side, k], scratch.d_shares[p, side, k]
                if share == 0.0 and rate == 0.0:
                    continue
                first = base + k * positions
                for q in range(positions):
                    row[first + q] += (
                        scratch.sent_rates[p, side, q] * share + scratch.sent[side, q] * rate
                    )


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


__all__ = [
    "MATCHED_BOTTOM",
    "MATCHED_TOP",
    "P",
    "VariedScratch",
    "varied_dissipated",
    "varied_radiated",
    "varied_scratch",
]
