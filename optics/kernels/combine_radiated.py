"""Where the light of many devices goes: tabulated half stacks combined in pairs, at real nodes.

See `combine` for the formulas and the order of loops.
"""

import math
from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.combine import (
    BLOCK,
    Blocks,
    Nodes,
    add_misses,
    add_product,
    emitter_kz,
    film_waves,
    ways_of,
)
from optics.kernels.combine_outside import Outsides, first_arrivals, outsides
from optics.kernels.combine_tables import KNOWN_OF_HALF, R_IM, R_RE
from optics.kernels.compiled import inline, kernel
from optics.kernels.exits import COLUMNS
from optics.kernels.halfstack import abs2
from optics.kernels.problem import Sides, Source
from optics.kernels.rules import DEGREES
from optics.kernels.source import channel, outgoing_factor


class _Work(NamedTuple):
    """What is known of a block at one node."""

    half: Floats  # (KNOWN_OF_HALF, BLOCK)
    stack: Floats  # (5, BLOCK)
    sent: Floats  # (4, BLOCK)
    shares: Floats  # (2, COLUMNS, BLOCK)


@inline
def _weigh_sent(
    source: Source,
    nodes: Nodes,
    k: int,
    c: int,
    a: Floats,
    ways: Complexes,
    zone: Floats,
    weights: Floats,
) -> None:
    """Fill what multiplies the light of a channel, for one upper half.

    Sent down goes K |g|^2 |to_b|^2 |1 + s a to_t^2|^2; sent up K |g|^2 |to_t|^2 |1 + s b to_b^2|^2
    with kz real, where |to_t| = 1, or imaginary, where to_b and to_t are real and |to_b to_t|^2
    is the same everywhere.

    Parameters
    ----------
    a : float (n, 2, KNOWN_OF_HALF)
        From its table.
    ways : complex (nodes, 2, 2, z)
        From `ways_of`.
    weights : float (z + DEGREES, 4 * nodes), output
        Factors of the rows that `_fill_light` fills: at every position, times the weight of the
        node; then averaged over positions, times its rows of degrees.
    """
    first, z = nodes.first[k], zone.size
    pol, sign = channel(c)
    for i in range(ways.shape[0]):
        n = first + i
        u, w = complex(nodes.u[n]), nodes.weight[n]
        kz = emitter_kz(source, pol, u)
        carried = outgoing_factor(c, source, u.real, kz) * nodes.du[n].real
        above = sign * complex(a[n, pol, R_RE], a[n, pol, R_IM])
        weights[z:, 4 * i : 4 * i + 4] = 0.0
        for q in range(z):
            to_top, to_bottom = ways[i, pol, 0, q], ways[i, pol, 1, q]
            down = math.sqrt(abs2(to_bottom)) * abs2(1.0 + above * to_top)
            if oscillates(kz):
                sent = (down, 1.0, sign * to_bottom.real, -sign * to_bottom.imag)
            else:
                sent = (down, math.sqrt(abs2(to_top)), sign, math.sqrt(abs2(to_bottom)))
            for j in range(4):
                weights[q, 4 * i + j] = w * carried * sent[j]
                for d in range(DEGREES):
                    share = zone[q] * nodes.degrees[d, n]
                    weights[z + d, 4 * i + j] += share * carried * sent[j]


@inline
def oscillates(kz: complex) -> bool:
    """Whether kz is real."""
    return abs(kz.real) >= abs(kz.imag)


@inline
def _cut_out(down: Floats, low: int, known: int, half: Floats) -> None:
    """Copy the first rows of what is known of a block's lower halves."""
    for f in range(known):
        row = down[f][low : low + BLOCK]
        for p in range(BLOCK):
            half[f, p] = row[p]


@inline
def _fill_sent(real: bool, turn: float, x: complex, half: Floats, sent: Floats) -> None:
    """Fill rows (4, BLOCK) of |g|^2 times what is sent down, and up; x = a P. See `_weigh_sent`.

    real : whether kz is; turn : |exp(i kz d)|^2.
    """
    xr, xi = x.real, x.imag
    for p in range(BLOCK):
        r, i = half[R_RE, p], half[R_IM, p]
        dr, di = 1.0 - (xr * r - xi * i), xr * i + xi * r
        g = 1.0 / (dr * dr + di * di)
        size, twice = g * (r * r + i * i), 2.0 * g * r
        sent[0, p] = g
        sent[1, p] = g + size if real else g
        sent[2, p] = twice if real else turn * twice
        sent[3, p] = 2.0 * g * i if real else turn * size


@inline
def _fill_light(sent: Floats, to_down: Floats, to_up: Floats, light: Floats, n: int) -> None:
    """Fill rows n to n + 3 with what goes to one destination."""
    for p in range(BLOCK):
        light[n, p] = sent[0, p] * to_down[p]
        light[n + 1, p] = sent[1, p] * to_up[p]
        light[n + 2, p] = sent[2, p] * to_up[p]
        light[n + 3, p] = sent[3, p] * to_up[p]


@inline
def _light_of_block(
    sides: Sides,
    nodes: Nodes,
    k: int,
    outside: Outsides,
    waves: tuple[Complexes, Complexes],
    up: Floats,
    down: Floats,
    low: int,
    work: _Work,
    light: Floats,
) -> None:
    """Fill the light of a block of devices at a panel's nodes.

    Parameters
    ----------
    waves : (complex, complex)
        From `film_waves`.
    up : float (n, 2, KNOWN_OF_HALF)
        The upper half.
    down, low
        Lower halves; the block's begin at low.
    light : float (COLUMNS, 2, 4 * nodes, BLOCK), output
        By destination and polarization.
    """
    half, stack, sent, shares = work
    for i in range(outside.returns.size):
        n = nodes.first[k] + i
        if nodes.weight[n] == 0.0:
            continue
        for pol in range(2):
            real, phase = oscillates(waves[0][i, pol]), waves[1][i, pol]
            x = complex(up[n, pol, R_RE], up[n, pol, R_IM]) * phase * phase
            _cut_out(down[n, pol], low, outside.known[i], half)
            _fill_sent(real, abs2(phase), x, half, sent)
            first_arrivals(sides, outside, i, pol, up[n, pol], half, phase, stack, shares)
            for column in range(1, COLUMNS):
                if not outside.goes[i, column]:
                    continue
                lit = light[column, pol]
                _fill_light(sent, shares[0, column], shares[1, column], lit, 4 * i)


@kernel
def combine_radiated(
    source: Source,
    sides: Sides,
    nodes: Nodes,
    up: Floats,
    down: Floats,
    blocks: Blocks,
    zone: Floats,
    value: Floats,
    misses: Floats,
) -> None:
    """All destinations of every device below the outer light lines.

    Parameters
    ----------
    source : Source
        Of one wavelength, with z positions.
    sides : Sides
    nodes : Nodes
    up, down : float (n, 2, KNOWN_OF_HALF, v)
        From `combine_tables.tabulate_half`; the lower ones with BLOCK more at the end.
    blocks : Blocks
        Of p devices in all.
    zone : float (z,)
        Weights of the average whose error is estimated.
    value : float (2, COLUMNS, z, p), output
        By orientation and destination, as of `source.radiated`, but for the total, which
        `collect` compares with their sum; added to.
    misses : float (2, COLUMNS, p), output
        Estimated errors, added to.
    """
    rows = source.kz_positions.size + DEGREES
    work = _Work(
        np.zeros((KNOWN_OF_HALF, BLOCK)), np.zeros((5, BLOCK)), np.zeros((4, BLOCK)),
        np.zeros((2, COLUMNS, BLOCK)),
    )  # fmt: skip
    product, moments = np.zeros((rows, BLOCK)), np.zeros((2, DEGREES, BLOCK))
    nothing = np.zeros(rows)
    for k in range(nodes.part.size):
        begin, first = 0, nodes.first[k]
        count = nodes.first[k + 1] - first
        ways, outside = ways_of(source, nodes, k), outsides(sides, nodes.u[first : first + count])
        waves = film_waves(source, nodes, k)
        some = outside.goes.sum(axis=0) > 0
        light = np.zeros((COLUMNS, 2, 4 * count, BLOCK))
        weights = np.zeros((3, rows, 4 * count))
        known = -1
        for block in range(blocks.up.size):
            iu, low, length = blocks.up[block], blocks.first[block], blocks.length[block]
            if iu != known:
                known = iu
                for c in range(3):
                    _weigh_sent(source, nodes, k, c, up[:, :, :, iu], ways, zone, weights[c])
            _light_of_block(
                sides, nodes, k, outside, waves, up[:, :, :, iu], down, low, work, light
            )
            for column in range(1, COLUMNS):
                if not some[column]:
                    continue
                moments[:, :, :] = 0.0
                for c in range(3):
                    o = min(c, 1)
                    np.dot(weights[c], light[column, channel(c)[0]], product)
                    add_product(product, nothing, value[o, column], moments[o], begin, length)
                for o in range(2):
                    add_misses(moments[o], misses[o, column, begin : begin + length])
            begin += length
