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
products only. Sums over a panel's nodes are therefore products of two matrices, positions x nodes
and nodes x devices, which the linear algebra library does many times faster than any loop.
Devices come in blocks of a fixed length, along the last axis, so that loops vectorize: one upper
half each with neighboring lower ones, filled up with whatever follows.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats, Integers
from optics.kernels.compiled import inline, kernel
from optics.kernels.elementary import exp_i
from optics.kernels.halfstack import P, sqrt_upper
from optics.kernels.paths import panel_miss
from optics.kernels.problem import Source
from optics.kernels.rules import DEGREES
from optics.kernels.source import channel, dissipated_factor

# Parts of the dissipated power, in the order of panels' `part`.
TOTAL_PART, GUIDED_PART, BEYOND_PART, NEAR_PART = range(4)
PARTS = 4

# Devices that are computed together.
BLOCK = 32


class Nodes(NamedTuple):
    """Panels of one wavelength with all their nodes."""

    u: Complexes  # (n,)
    du: Complexes  # (n,)
    weight: Floats  # (n,) of the panel's rule; 0 for nodes that only fill up a batch
    degrees: Floats  # (4, n) rows of the Legendre coefficients that tell a panel's error
    first: Integers  # (k + 1,) first node of every panel, and the end
    part: Integers  # (k,) part of the dissipated power that a panel belongs to


class Blocks(NamedTuple):
    """Devices in their order: one upper half each block, `length` lower halves from `first` on."""

    up: Integers  # (b,)
    first: Integers  # (b,)
    length: Integers  # (b,) at most BLOCK


@inline
def emitter_kz(source: Source, pol: int, u: complex) -> complex:
    """Normal wavevector over k0 in the emitter film."""
    eps_o, eps_e = float(source.eps_o), float(source.eps_e)
    return sqrt_upper(eps_o - (eps_o / eps_e if pol == P else 1.0) * u * u)


@inline
def resonance(x: complex, b: Floats, low: int, into: Floats, n: int) -> None:
    """Fill rows n to n + 3 of `into` with g and b g, real and imaginary parts.

    x = a P; b (2, v) holds real and imaginary parts, the block's from low on.
    """
    xr, xi = x.real, x.imag
    # Cut to length first: an index low + p might be negative, and the loop would not vectorize.
    br, bi = b[0][low : low + BLOCK], b[1][low : low + BLOCK]
    for p in range(BLOCK):
        r, i = br[p], bi[p]
        yr, yi = xr * r - xi * i, xr * i + xi * r
        dr = 1.0 - yr
        m = 1.0 / (dr * dr + yi * yi)
        gr, gi = dr * m, yi * m
        into[n, p], into[n + 1, p] = gr, gi
        into[n + 2, p], into[n + 3, p] = r * gr - i * gi, r * gi + i * gr


@inline
def add_misses(moments: Floats, misses: Floats) -> None:
    """Add a panel's estimated error to misses (l,), l <= BLOCK, from moments (DEGREES, BLOCK)."""
    for p in range(misses.size):
        misses[p] += panel_miss(moments[0, p], moments[1, p], moments[2, p], moments[3, p])


@inline
def add_product(
    product: Floats, flat: Floats, target: Floats, moments: Floats, begin: int, length: int
) -> None:
    """Add a block's product (z + DEGREES, BLOCK), plus flat, to target (z, p) and to moments.

    Factors of the values stand first, then those of the moments (DEGREES, BLOCK).
    """
    z = target.shape[0]
    for q in range(z):
        row = target[q][begin : begin + length]
        for p in range(length):
            row[p] += flat[q] + product[q, p]
    for d in range(DEGREES):
        for p in range(BLOCK):
            moments[d, p] += flat[z + d] + product[z + d, p]


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
def _weigh_waves(
    source: Source,
    nodes: Nodes,
    k: int,
    c: int,
    a: Floats,
    ways: Complexes,
    zone: Floats,
    flat: Floats,
    weights: Floats,
) -> None:
    """Fill what multiplies the waves of a channel, for one upper half.

    Parameters
    ----------
    a : float (n, 2, 2)
        Its reflections.
    flat : float (z + DEGREES,), output
        The panel's sums without any waves.
    weights : float (z + DEGREES, 4 * nodes), output
        Factors of the rows that `resonance` fills: at every position, times the weight of the
        node; then averaged over positions, times its rows of degrees.
    """
    first, z = nodes.first[k], zone.size
    pol, sign = channel(c)
    flat[:] = 0.0
    for i in range(ways.shape[0]):
        n = first + i
        kz = emitter_kz(source, pol, complex(nodes.u[n]))
        factor = dissipated_factor(c, source, complex(nodes.u[n]), kz) * nodes.du[n]
        above = sign * factor * complex(a[n, pol, 0], a[n, pol, 1])
        to_top, to_bottom = ways[i, pol, 0], ways[i, pol, 1]
        level = -factor.real if nodes.part[k] != NEAR_PART else -2.0 * factor.real
        x, y = 0j, 0j
        for q in range(z):
            w = nodes.weight[n]
            at_x, at_y = 2.0 * factor + above * to_top[q], sign * factor * to_bottom[q]
            x, y = x + zone[q] * at_x, y + zone[q] * at_y
            _weigh(w, at_x, at_y, weights[q], 4 * i)
            flat[q] += w * level
        for d in range(DEGREES):
            _weigh(nodes.degrees[d, n], x, y, weights[z + d], 4 * i)
            flat[z + d] += nodes.degrees[d, n] * level


@inline
def _weigh(w: float, x: complex, y: complex, into: Floats, n: int) -> None:
    """Fill four factors, from n on, whose products with `resonance`'s rows are real parts."""
    into[n], into[n + 1] = w * x.real, -w * x.imag
    into[n + 2], into[n + 3] = w * y.real, -w * y.imag


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
    r_up, r_down : float (n, 2, 2, v)
        From `combine_tables.tabulate_reflection`; the lower ones with BLOCK more at the end.
    blocks : Blocks
        Of p devices in all.
    zone : float (z,)
        Weights of the average whose error is estimated.
    value : float (PARTS, 3, z, p), output
        Added to.
    misses : float (PARTS, 3, p), output
        Estimated errors, added to.
    """
    rows = source.kz_positions.size + DEGREES
    product, moments = np.zeros((rows, BLOCK)), np.zeros((DEGREES, BLOCK))
    for k in range(nodes.part.size):
        part, begin, first = nodes.part[k], 0, nodes.first[k]
        count = nodes.first[k + 1] - first
        ways, through = ways_of(source, nodes, k), film_waves(source, nodes, k)[1]
        waves = np.zeros((2, 4 * count, BLOCK))
        flat, weights = np.zeros((3, rows)), np.zeros((3, rows, 4 * count))
        known = -1
        for block in range(blocks.up.size):
            iu, low, length = blocks.up[block], blocks.first[block], blocks.length[block]
            if iu != known:
                known = iu
                for c in range(3):
                    _weigh_waves(
                        source, nodes, k, c, r_up[:, :, :, iu], ways, zone, flat[c], weights[c]
                    )
            for i in range(count):
                n = first + i
                if nodes.weight[n] == 0.0:
                    continue
                for pol in range(2):
                    turn = through[i, pol] * through[i, pol]
                    x = complex(r_up[n, pol, 0, iu], r_up[n, pol, 1, iu]) * turn
                    resonance(x, r_down[n, pol], low, waves[pol], 4 * i)
            for c in range(3):
                moments[:, :] = 0.0
                np.dot(weights[c], waves[channel(c)[0]], product)
                add_product(product, flat[c], value[part, c], moments, begin, length)
                add_misses(moments, misses[part, c, begin : begin + length])
            begin += length
