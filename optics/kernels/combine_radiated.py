"""Where the light of many devices goes: tabulated half stacks combined in pairs, at real nodes.

See `combine` for the formulas and the order of loops. Written out, what a dipole sends down is
K |g|^2 times 1 + |a|^2 + 2 s Re(a P exp(-2 i kz z)) with kz real; with kz imaginary, where
exp(2 i kz z) = B and exp(2 i kz (d - z)) = T are real and B T = |P| everywhere, it is
B + |a|^2 |P| T + 2 s Re(a) |P|; up likewise with b, T and B exchanged and the phase turned the
other way. Either way three terms that depend on the place, the same for both ways and all
devices, times what depends on devices only.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.combine import (
    Blocks,
    Nodes,
    add_channel,
    add_misses,
    emitter_kz,
    film_waves,
    sums_of,
    ways_of,
)
from optics.kernels.combine_outside import (
    DOWN,
    G_IM,
    G_RE,
    ROWS,
    SENT_UP,
    UP,
    G,
    Outsides,
    arrivals,
    outsides,
    row_of,
)
from optics.kernels.combine_tables import BLOCK, KNOWN_OF_HALF, R_IM, R_RE, SIZE
from optics.kernels.compiled import inline, kernel
from optics.kernels.dipole import channel, outgoing_factor
from optics.kernels.exits import COLUMNS
from optics.kernels.halfstack import abs2
from optics.kernels.problem import Sides, Source
from optics.kernels.rules import DEGREES

# Terms a node.
_TERMS = 3


class _Panel(NamedTuple):
    """What holds for all devices at a panel's nodes."""

    first: int  # of its nodes among all
    kz: Complexes  # (nodes, 2) of the emitter film
    phase: Complexes  # (nodes, 2) exp(i kz d)
    outside: Outsides
    used: Floats  # (nodes,) 0 where a node only fills up a batch


@inline
def oscillates(kz: complex) -> bool:
    """Whether kz is real."""
    return abs(kz.real) >= abs(kz.imag)


@inline
def _weigh_places(
    source: Source, nodes: Nodes, k: int, c: int, ways: Complexes, zone: Floats, weights: Floats
) -> None:
    """Fill what multiplies the terms of a channel.

    Parameters
    ----------
    ways : complex (nodes, 2, 2, z)
        From `ways_of`.
    weights : float (z + DEGREES, _TERMS * nodes), output
        At every position, times the weight of the node; then averaged over positions, times its
        rows of degrees.
    """
    z = zone.size
    pol, sign = channel(c)
    for i in range(ways.shape[0]):
        n = nodes.first[k] + i
        u = complex(nodes.u[n])
        kz = emitter_kz(source, pol, u)
        carried = outgoing_factor(c, source, u.real, kz) * nodes.du[n].real
        signed = sign * carried
        for q in range(z):
            to_top, to_bottom = ways[i, pol, 0, q], ways[i, pol, 1, q]
            if oscillates(kz):
                terms = (carried, signed * to_bottom.real, signed * to_bottom.imag)
            else:
                terms = (signed, carried * to_bottom.real, carried * to_top.real)
            for j in range(_TERMS):
                weights[q, _TERMS * i + j] = nodes.weight[n] * terms[j]
                for d in range(DEGREES):
                    share = zone[q] * nodes.degrees[d, n]
                    weights[z + d, _TERMS * i + j] += share * terms[j]


@inline
def _fill_g(real: bool, turn: float, x: complex, down: Floats, w: Floats, lanes: int) -> None:
    """Fill rows G_RE to SENT_UP + 2; x = a P, turn = |P|, real : whether kz is."""
    xr, xi = x.real, x.imag
    for p in range(lanes):
        r, i, size = down[R_RE * BLOCK + p], down[R_IM * BLOCK + p], down[SIZE * BLOCK + p]
        dr, di = 1.0 - (xr * r - xi * i), xr * i + xi * r
        g = 1.0 / (dr * dr + di * di)
        w[G_RE * BLOCK + p], w[G_IM * BLOCK + p], w[G * BLOCK + p] = dr * g, di * g, g
        w[SENT_UP * BLOCK + p] = 1.0 + size if real else 2.0 * turn * r
        w[(SENT_UP + 1) * BLOCK + p] = 2.0 * r if real else turn * size
        w[(SENT_UP + 2) * BLOCK + p] = -2.0 * i if real else 1.0


@inline
def _fill_terms(
    sent: tuple[float, float, float], column: int, w: Floats, light: Floats, n: int
) -> None:
    """Fill rows n to n + 2 of `light` (terms, lanes) with what goes to one destination."""
    down, up = row_of(w, DOWN + column), row_of(w, UP + column)
    for j in range(_TERMS):
        row, sent_down, sent_up = light[n + j], sent[j], row_of(w, SENT_UP + j)
        for p in range(row.size):
            row[p] = sent_down * down[p] + sent_up[p] * up[p]


@inline
def _light_of_block(
    panel: _Panel, up: Floats, down: Floats, segment: int, w: Floats, light: Floats
) -> None:
    """Fill the light of a block of devices at a panel's nodes.

    Parameters
    ----------
    up : float (nodes, 2, KNOWN_OF_HALF)
        The upper half.
    down : float (n, 2, segments, KNOWN_OF_HALF * BLOCK)
        The lower halves at all nodes; whole, since a part would lose that its rows are unbroken.
    segment : int
        The block's.
    w : float (ROWS * BLOCK,)
        Work space.
    light : float (COLUMNS, 2, _TERMS * nodes, lanes), output
        By destination and polarization.
    """
    outside, lanes = panel.outside, light.shape[3]
    for i in range(panel.used.size):
        if panel.used[i] == 0.0:
            continue
        for pol in range(2):
            above, phase, real = up[i, pol], panel.phase[i, pol], oscillates(panel.kz[i, pol])
            below = down[panel.first + i, pol, segment]
            a, turn = complex(above[R_RE], above[R_IM]), abs2(phase)
            x = a * phase * phase
            _fill_g(real, turn, x, below, w, lanes)
            arrivals(outside, i, pol, above, below, phase, w, lanes)
            size = abs2(a)
            if real:
                sent = (1.0 + size, 2.0 * x.real, 2.0 * x.imag)
            else:
                sent = (2.0 * turn * a.real, 1.0, turn * size)
            for column in range(1, COLUMNS):
                if outside.goes[i, column]:
                    _fill_terms(sent, column, w, light[column, pol], _TERMS * i)


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
    up, down : float (n, 2, segments, KNOWN_OF_HALF, BLOCK)
        From `combine_tables.tabulate_half`.
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
    rows, lanes = source.kz_positions.size + DEGREES, blocks.lanes
    sums, nothing, w = sums_of(rows, lanes), np.zeros(rows), np.zeros(ROWS * BLOCK)
    below = down.reshape(nodes.u.size, 2, down.shape[2], KNOWN_OF_HALF * BLOCK)
    for k in range(nodes.part.size):
        here = slice(nodes.first[k], nodes.first[k + 1])
        kz, phase = film_waves(source, nodes, k)
        outside = outsides(sides, nodes.u[here])
        panel = _Panel(nodes.first[k], kz, phase, outside, nodes.weight[here])
        some = outside.goes.sum(axis=0) > 0
        ways, terms = ways_of(source, nodes, k), _TERMS * panel.used.size
        light, weights = np.zeros((COLUMNS, 2, terms, lanes)), np.zeros((3, rows, terms))
        for c in range(3):
            _weigh_places(source, nodes, k, c, ways, zone, weights[c])
        # What is known of a segment stays near at hand while upper halves take turns.
        for block in blocks.by_segment:
            one, segment = blocks.up[block], blocks.segment[block]
            above = up[here, :, one // lanes, :, one % lanes]
            _light_of_block(panel, above, below, segment, w, light)
            begin, end = blocks.begin[block], blocks.begin[block + 1]
            lane = blocks.lane[begin:end]
            for column in range(1, COLUMNS):
                if not some[column]:
                    continue
                for c in range(3):
                    target = value[min(c, 1), column]
                    shown = light[column, channel(c)[0]]
                    add_channel(weights[c], shown, nothing, lane, sums, target, begin)
                    if c != 1:
                        # Both polarizations of the horizontal dipole together.
                        add_misses(lane, sums, misses[min(c, 1), column, begin:end])
