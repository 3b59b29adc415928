"""Light of many devices that differ in film thicknesses: tabulated half stacks, combined in pairs.

Nodes are fixed; each half stack is solved once (`combine_tables`), and a pair of them costs a few
multiplications a node. The integrands are those of `source`: with a, b the reflections above and
below, P = exp(2 i kz d) of the emitter film and g = 1 / (1 - a b P), so that a b P g = g - 1, a
dipole at z dissipates
Re[G (2 g - 1 + s a g exp(2 i kz (d - z)) + s b g exp(2 i kz z))], and sends down
K |g|^2 |exp(i kz z)|^2 |1 + s a exp(2 i kz (d - z))|^2, up likewise; G, K
and the sign s by channel.
At real nodes kz of the lossless emitter film is real or imaginary, never both.

What depends on a device (g, b g, shares) and what depends on a position (phases, weights) come in
products only. Sums over a panel's nodes are therefore products of two matrices, positions x terms
and terms x devices, which the linear algebra library does many times faster than any loop.
Devices come in blocks, along the last axis, so that loops vectorize: one upper half each with
lower ones that lie side by side in their table.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats, Integers
from optics.kernels.combine_tables import BLOCK, R_IM, R_RE
from optics.kernels.compiled import inline, kernel
from optics.kernels.dipole import channel, dissipated_factor
from optics.kernels.elementary import exp_i
from optics.kernels.halfstack import P, sqrt_upper
from optics.kernels.panel import panel_miss
from optics.kernels.problem import Source
from optics.kernels.rules import DEGREES

# Parts of the dissipated power, in the order of panels' `part`.
TOTAL_PART, GUIDED_PART, BEYOND_PART, NEAR_PART = range(4)
PARTS = 4

# Real terms a node of the dissipated power.
_TERMS = 4


class Nodes(NamedTuple):
    """Panels of one wavelength with all their nodes."""

    u: Complexes  # (n,)
    du: Complexes  # (n,)
    weight: Floats  # (n,) of the panel's rule; 0 for nodes that only fill up a batch
    degrees: Floats  # (4, n) rows of the Legendre coefficients that tell a panel's error
    first: Integers  # (k + 1,) first node of every panel, and the end
    part: Integers  # (k,) part of the dissipated power that a panel belongs to


class Blocks(NamedTuple):
    """Devices in their order: one upper half each block, and lower ones of one segment."""

    up: Integers  # (b,)
    segment: Integers  # (b,) of the lower halves' table
    begin: Integers  # (b + 1,) first device of every block, and the end
    by_segment: Integers  # (b,) numbers of the blocks, those of one segment together
    lane: Integers  # (p,) place of every device's lower half in its segment
    lanes: int  # length of all segments


class Sums(NamedTuple):
    """Sums of one channel of one block."""

    product: Floats  # (z + DEGREES, lanes)
    moments: Floats  # (DEGREES, lanes)


@inline
def emitter_kz(source: Source, pol: int, u: complex) -> complex:
    """Normal wavevector over k0 in the emitter film."""
    eps_o, eps_e = float(source.eps_o), float(source.eps_e)
    return sqrt_upper(eps_o - (eps_o / eps_e if pol == P else 1.0) * u * u)


@inline
def resonance(x: complex, b: Floats, into: Floats, n: int) -> None:
    """Fill rows n to n + 3 of `into` (terms, lanes) with real and imaginary parts of g and b g.

    x = a P; b (2 * BLOCK,) of the lower halves' table.
    """
    xr, xi = x.real, x.imag
    # In two loops: too many rows that might overlap keep one from vectorizing.
    for p in range(into.shape[1]):
        r, i = b[R_RE * BLOCK + p], b[R_IM * BLOCK + p]
        dr, di = 1.0 - (xr * r - xi * i), xr * i + xi * r
        m = 1.0 / (dr * dr + di * di)
        into[n, p], into[n + 1, p] = dr * m, di * m
    for p in range(into.shape[1]):
        r, i = b[R_RE * BLOCK + p], b[R_IM * BLOCK + p]
        gr, gi = into[n, p], into[n + 1, p]
        into[n + 2, p], into[n + 3, p] = r * gr - i * gi, r * gi + i * gr


@inline
def sums_of(rows: int, lanes: int) -> Sums:
    """Work space for so many rows of weights."""
    return Sums(np.zeros((rows, lanes)), np.zeros((DEGREES, lanes)))


@inline
def add_channel(
    weights: Floats,
    terms: Floats,
    flat: Floats,
    lane: Integers,
    sums: Sums,
    target: Floats,
    begin: int,
) -> None:
    """Add one channel of a panel to a block's sums.

    Parameters
    ----------
    weights : float (z + DEGREES, t)
        Factors of the values stand first, then those of the moments.
    terms : float (t, lanes)
    flat : float (z + DEGREES,)
        What comes to it for every device.
    lane : int (l,)
        Of the block's devices.
    sums : Sums
        Moments are added to.
    target : float (z, p), output
        Added to from device number begin on; whole, since a part would lose that its rows are
        unbroken.
    """
    z, end = target.shape[0], begin + lane.size
    product, moments = sums
    np.dot(weights, terms, product)
    unbroken = lane[-1] - lane[0] == lane.size - 1
    for q in range(z):
        row, mine, level = target[q][begin:end], product[q], flat[q]
        if unbroken:
            near = mine[lane[0] : lane[-1] + 1]
            for p in range(row.size):
                row[p] += level + near[p]
        else:
            for p in range(row.size):
                row[p] += level + mine[lane[p]]
    for d in range(DEGREES):
        row, mine, level = moments[d], product[z + d], flat[z + d]
        for p in range(row.size):
            row[p] += level + mine[p]


@inline
def add_misses(lane: Integers, sums: Sums, misses: Floats) -> None:
    """Add a panel's estimated error to misses (l,) of a block, and begin moments anew."""
    moments = sums.moments
    for p in range(lane.size):
        j = lane[p]
        misses[p] += panel_miss(moments[0, j], moments[1, j], moments[2, j], moments[3, j])
    moments[:, :] = 0.0


@inline
def film_waves(source: Source, nodes: Nodes, k: int) -> tuple[Complexes, Complexes]:
    """Wavevectors kz and phase factors exp(i kz d) of the emitter film (both (nodes, 2))."""
    first, end = nodes.first[k], nodes.first[k + 1]
    waves = np.zeros((2, end - first, 2), dtype=np.complex128)
    for n in range(first, end):
        for pol in range(2):
            kz = emitter_kz(source, pol, complex(nodes.u[n]))
            waves[0, n - first, pol] = kz
            waves[1, n - first, pol] = exp_i(kz * float(source.kd))
    return waves[0], waves[1]


@inline
def ways_of(source: Source, nodes: Nodes, k: int) -> Complexes:
    """Phase factors from each dipole to a face of its film and back, at a panel's nodes.

    Returns
    -------
    complex (nodes, 2, 2, z)
        By polarization; to the top face, to the bottom face.
    """
    first, end, z = nodes.first[k], nodes.first[k + 1], source.kz_positions.size
    ways = np.zeros((end - first, 2, 2, z), dtype=np.complex128)
    for n in range(first, end):
        for pol in range(2):
            kz = 2.0 * emitter_kz(source, pol, complex(nodes.u[n]))
            for q in range(z):
                ways[n - first, pol, 0, q] = exp_i(kz * (source.kd - source.kz_positions[q]))
                ways[n - first, pol, 1, q] = exp_i(kz * source.kz_positions[q])
    return ways


@inline
def _factors(source: Source, nodes: Nodes, k: int) -> Complexes:
    """Factors before the bracket of waves, by channel and node of a panel (3, nodes)."""
    first = nodes.first[k]
    factors = np.zeros((3, nodes.first[k + 1] - first), dtype=np.complex128)
    for c in range(3):
        for i in range(factors.shape[1]):
            u, du = complex(nodes.u[first + i]), complex(nodes.du[first + i])
            kz = emitter_kz(source, channel(c)[0], u)
            factors[c, i] = dissipated_factor(c, source, u, kz) * du
    return factors


@inline
def _weigh_below(
    nodes: Nodes,
    k: int,
    c: int,
    factors: Complexes,
    ways: Complexes,
    zone: Floats,
    flat: Floats,
    weights: Floats,
) -> None:
    """Fill what multiplies b g in a channel, and the sums without any waves.

    Parameters
    ----------
    factors : complex (nodes,)
        Of the channel, from `_factors`.
    ways : complex (nodes, 2, 2, z)
        From `ways_of`.
    flat : float (z + DEGREES,), output
        The panel's sums without any waves.
    weights : float (z + DEGREES, _TERMS * nodes), output
        Factors of the last two of the rows that `resonance` fills for a node: at every position,
        times the weight of the node; then averaged over positions, times its rows of degrees.
    """
    first, z = nodes.first[k], zone.size
    pol, sign = channel(c)
    for i in range(factors.size):
        n, factor = first + i, factors[i]
        level = -factor.real if nodes.part[k] != NEAR_PART else -2.0 * factor.real
        mean = 0j
        for q in range(z):
            wave = sign * factor * ways[i, pol, 1, q]
            mean += zone[q] * wave
            _weigh(nodes.weight[n], wave, weights[q], _TERMS * i + 2)
            flat[q] += nodes.weight[n] * level
        for d in range(DEGREES):
            _weigh(nodes.degrees[d, n], mean, weights[z + d], _TERMS * i + 2)
            flat[z + d] += nodes.degrees[d, n] * level


@inline
def _weigh_above(
    nodes: Nodes,
    k: int,
    c: int,
    factors: Complexes,
    a: Floats,
    ways: Complexes,
    zone: Floats,
    weights: Floats,
) -> None:
    """Fill what multiplies g in a channel, for one upper half with reflections a (n, 2, 2).

    As `_weigh_below`, for the first two rows of every node.
    """
    first, z = nodes.first[k], zone.size
    pol, sign = channel(c)
    for i in range(factors.size):
        n, twice = first + i, 2.0 * factors[i]
        above = sign * factors[i] * complex(a[n, pol, R_RE], a[n, pol, R_IM])
        mean = 0j
        for q in range(z):
            wave = twice + above * ways[i, pol, 0, q]
            mean += zone[q] * wave
            _weigh(nodes.weight[n], wave, weights[q], _TERMS * i)
        for d in range(DEGREES):
            _weigh(nodes.degrees[d, n], mean, weights[z + d], _TERMS * i)


@inline
def _weigh(w: float, x: complex, into: Floats, n: int) -> None:
    """Fill two factors, from n on, whose products with `resonance`'s rows are real parts."""
    into[n], into[n + 1] = w * x.real, -w * x.imag


@kernel
def combine_dissipated(
    source: Source,
    nodes: Nodes,
    r_up: Floats,
    r_down: Floats,
    blocks: Blocks,
    zone: Floats,
    value: Floats,
    misses: Floats,
) -> None:
    """Dissipated power of every device, by part and channel.

    Parameters
    ----------
    source : Source
        Of one wavelength, with z positions.
    nodes : Nodes
    r_up, r_down : float (n, 2, segments, 2, BLOCK)
        From `combine_tables.tabulate_reflection`.
    blocks : Blocks
        Of p devices in all.
    zone : float (z,)
        Weights of the average whose error is estimated.
    value : float (PARTS, 3, z, p), output
        Added to.
    misses : float (PARTS, 3, p), output
        Estimated errors, added to.
    """
    rows, lanes = source.kz_positions.size + DEGREES, blocks.lanes
    sums = sums_of(rows, lanes)
    below = r_down.reshape(nodes.u.size, 2, r_down.shape[2], 2 * BLOCK)
    for k in range(nodes.part.size):
        part, first = nodes.part[k], nodes.first[k]
        count = nodes.first[k + 1] - first
        ways, through = ways_of(source, nodes, k), film_waves(source, nodes, k)[1]
        waves = np.zeros((2, _TERMS * count, lanes))
        flat, weights = np.zeros((3, rows)), np.zeros((3, rows, _TERMS * count))
        factors = _factors(source, nodes, k)
        for c in range(3):
            _weigh_below(nodes, k, c, factors[c], ways, zone, flat[c], weights[c])
        known = -1
        for block in range(blocks.up.size):
            up, segment = blocks.up[block], blocks.segment[block]
            r = r_up[:, :, up // lanes, :, up % lanes]
            if up != known:
                known = up
                for c in range(3):
                    _weigh_above(nodes, k, c, factors[c], r, ways, zone, weights[c])
            for i in range(count):
                n = first + i
                if nodes.weight[n] == 0.0:
                    continue
                for pol in range(2):
                    x = complex(r[n, pol, R_RE], r[n, pol, R_IM]) * through[i, pol] ** 2
                    resonance(x, below[n, pol, segment], waves[pol], _TERMS * i)
            begin, end = blocks.begin[block], blocks.begin[block + 1]
            lane = blocks.lane[begin:end]
            for c in range(3):
                terms = waves[channel(c)[0]]
                add_channel(weights[c], terms, flat[c], lane, sums, value[part, c], begin)
                add_misses(lane, sums, misses[part, c, begin:end])
