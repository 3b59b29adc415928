"""Where the light of many devices goes: tabulated half stacks combined in pairs, at real nodes.

See `combine` for the formulas and the order of loops.
"""

import math

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.combine import (
    Nodes,
    Rows,
    add_misses,
    add_moments,
    emitter_kz,
    resonance,
    ways_of,
)
from optics.kernels.combine_outside import first_arrivals
from optics.kernels.combine_tables import HalfTable
from optics.kernels.compiled import inline, kernel
from optics.kernels.elementary import exp_i
from optics.kernels.exits import COLUMNS
from optics.kernels.halfstack import P, abs2
from optics.kernels.problem import Sides, Source
from optics.kernels.source import channel, outgoing_factor


@inline
def directions_of(
    source: Source, ways: Complexes, kz: complex, sign: float, a: complex, basis: Floats
) -> None:
    """What sent-down and sent-up power are made of at every position.

    Parameters
    ----------
    ways : complex (2, z)
        From `ways_of`: to the top face, to the bottom face, and back.
    basis : float (3, z), output
        Row 0, power sent down per (K |g|^2); rows 1 and 2, factors of what `sent_up` says.
    """
    oscillates = abs(kz.real) >= abs(kz.imag)
    turn = abs2(exp_i(kz * float(source.kd)))
    for q in range(ways.shape[1]):
        to_top, to_bottom = ways[0, q], ways[1, q]
        size = math.sqrt(abs2(to_bottom))
        basis[0, q] = size * abs2(1.0 + sign * a * to_top)
        if oscillates:
            basis[1, q], basis[2, q] = to_bottom.real, to_bottom.imag
        else:
            basis[1, q], basis[2, q] = math.sqrt(abs2(to_top)), turn * size


@inline
def sent_up(
    source: Source, kz: complex, sign: float, b: Floats, low: int, carried: Floats, parts: Floats
) -> None:
    """Power sent up as parts[0] + parts[1] basis[1] + parts[2] basis[2], for halves b from low.

    From |to_t|^2 |1 + s b to_b^2|^2 with kz real, where |to_t| = 1, or imaginary, where to_b and
    to_t are real and |to_b to_t|^2 is the same everywhere.
    """
    oscillates = abs(kz.real) >= abs(kz.imag)
    turn = abs2(exp_i(kz * float(source.kd)))
    for p in range(carried.size):
        br, bi = b[0, low + p], b[1, low + p]
        size = carried[p] * (br * br + bi * bi)
        if oscillates:
            parts[0, p] = carried[p] + size
            parts[1, p] = 2.0 * sign * br * carried[p]
            parts[2, p] = -2.0 * sign * bi * carried[p]
        else:
            parts[0, p] = 2.0 * sign * br * turn * carried[p]
            parts[1, p] = carried[p]
            parts[2, p] = size


@inline
def any_goes(to_down: Floats, to_up: Floats) -> bool:
    """Whether anything goes to a destination; mostly the first point tells."""
    p = 0
    while p < to_down.size and to_down[p] == 0.0 and to_up[p] == 0.0:
        p += 1
    return p < to_down.size


@inline
def add_destination(
    to_down: Floats,
    to_up: Floats,
    carried: Floats,
    sent: Floats,
    basis: Floats,
    zone: Floats,
    rule: tuple[float, float, float],
    v: Floats,
    target: Floats,
    begin: int,
    moments: Floats,
) -> None:
    """Add what goes to one destination to target (z, p) from begin on, and its moments (3, l).

    to_down, to_up (l,): share of what is sent down, up; sent (3, l) of `sent_up`; basis (3, z) of
    `directions_of`; v (5, l) work space.
    """
    weight, last, second = rule
    m0, m1, m2 = (zone * basis[0]).sum(), (zone * basis[1]).sum(), (zone * basis[2]).sum()
    for p in range(carried.size):
        v[0, p] = carried[p] * to_down[p]
        v[1, p] = sent[0, p] * to_up[p]
        v[2, p] = sent[1, p] * to_up[p]
        v[3, p] = sent[2, p] * to_up[p]
        v[4, p] = m0 * v[0, p] + v[1, p] + m1 * v[2, p] + m2 * v[3, p]
    add_moments(v[4], weight, last, second, moments)
    for q in range(target.shape[0]):
        x0, x1, x2 = weight * basis[0, q], weight * basis[1, q], weight * basis[2, q]
        for p in range(carried.size):
            new = x0 * v[0, p] + weight * v[1, p]
            target[q, begin + p] += new + x1 * v[2, p] + x2 * v[3, p]


@kernel
def combine_radiated(
    source: Source,
    sides: Sides,
    nodes: Nodes,
    up: HalfTable,
    down: HalfTable,
    rows: Rows,
    zone: Floats,
    value: Floats,
    misses: Floats,
) -> None:
    """All destinations of every point below the outer light lines.

    Parameters
    ----------
    source : Source
        Of one wavelength, with z positions.
    sides : Sides
    nodes : Nodes
    up, down : HalfTable
        From `combine_tables.tabulate_half`.
    rows : Rows
        Of p points in all.
    zone : float (z,)
        Weights of the average whose error is estimated.
    value : float (2, COLUMNS, z, p), output
        By orientation and destination, as of `source.radiated`, but for the total, which
        `collect` compares with their sum; added to.
    misses : float (2, COLUMNS, p), output
        Estimated errors, added to.
    """
    z = source.kz_positions.size
    per_row, basis = np.zeros((2, COLUMNS)), np.zeros((3, z))
    for k in range(nodes.part.size):
        begin, ways = 0, ways_of(source, nodes, k)
        for row in range(rows.up.size):
            low, iu = rows.first[row], rows.up[row]
            points = rows.last[row] - low
            # Of exactly this length, so that loops over them vectorize.
            g, t, bg = np.zeros((2, points)), np.zeros((2, points)), np.zeros((2, points))
            carried, sent, more = np.zeros(points), np.zeros((3, points)), np.zeros((5, points))
            shares, moments = np.zeros((2, COLUMNS, points)), np.zeros((2, COLUMNS, 3, points))
            for n in range(nodes.first[k], nodes.first[k + 1]):
                rule, u = (nodes.weight[n], nodes.last[n], nodes.second[n]), nodes.u[n].real
                if rule[0] == 0.0:
                    continue
                for pol in range(2):
                    kz = emitter_kz(source, pol, complex(nodes.u[n]))
                    phase = exp_i(kz * float(source.kd))
                    a = complex(up.r[n, pol, 0, iu], up.r[n, pol, 1, iu])
                    b = down.r[n, pol]
                    resonance(a, b, low, phase * phase, g, t, bg)
                    first_arrivals(sides, pol, u, up, down, n, iu, low, a, phase, per_row, shares)
                    for c in range(0 if pol == P else 2, 2 if pol == P else 3):
                        o, sign = min(c, 1), channel(c)[1]
                        outgoing = outgoing_factor(c, source, u, kz) * nodes.du[n].real
                        for p in range(points):
                            carried[p] = outgoing * (g[0, p] * g[0, p] + g[1, p] * g[1, p])
                        directions_of(source, ways[n - nodes.first[k], pol], kz, sign, a, basis)
                        sent_up(source, kz, sign, b, low, carried, sent)
                        for column in range(1, COLUMNS):
                            if any_goes(shares[0, column], shares[1, column]):
                                add_destination(
                                    shares[0, column], shares[1, column], carried, sent, basis,
                                    zone, rule, more, value[o, column], begin, moments[o, column],
                                )  # fmt: skip
            for o in range(2):
                for column in range(COLUMNS):
                    add_misses(moments[o, column], misses[o, column], begin)
            begin += points
