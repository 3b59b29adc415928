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
from optics.kernels.problem import Source
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
    last: Floats  # (n,) rows that give the last two Legendre coefficients
    second: Floats  # (n,)
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
def add_moments(
    mean: Floats, flat: float, rule: tuple[float, float, float], rows: Floats, n: int, into: Floats
) -> None:
    """Add a node's value to the moments (3, BLOCK) that tell a panel's error.

    The value is flat plus mean (4,) times rows n to n + 3.
    """
    weight, last, second = rule
    m0, m1, m2, m3 = mean[0], mean[1], mean[2], mean[3]
    for p in range(BLOCK):
        v = flat + m0 * rows[n, p] + m1 * rows[n + 1, p]
        v += m2 * rows[n + 2, p] + m3 * rows[n + 3, p]
        into[0, p] += weight * abs(v)
        into[1, p] += last * v
        into[2, p] += second * v


@inline
def add_misses(moments: Floats, misses: Floats) -> None:
    """Add a panel's estimated error, as of `paths.panel_error`, to misses (l,), l <= BLOCK."""
    for p in range(misses.size):
        size = 0.5 * moments[0, p] + 1e-300
        unresolved = max(abs(moments[1, p]), abs(moments[2, p]))
        misses[p] += 2.0 * unresolved * np.sqrt(min(1.0, unresolved / size))


@inline
def add_product(
    left: Floats,
    right: Floats,
    flat: float,
    product: Floats,
    target: Floats,
    begin: int,
    length: int,
) -> None:
    """Add left (z, k) times right (k, BLOCK), plus flat, to target (z, p), a block of it."""
    np.dot(left, right, product)
    for q in range(target.shape[0]):
        row = target[q][begin : begin + length]
        for p in range(length):
            row[p] += flat + product[q, p]


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
    mean: Floats,
    weights: Floats,
) -> None:
    """Fill what multiplies the waves of a channel, for one upper half.

    Parameters
    ----------
    a : float (n, 2, 2)
        Its reflections.
    flat : float (nodes,), output
        Value without any waves.
    mean : float (nodes, 4), output
        Factors of the rows that `resonance` fills, averaged over positions.
    weights : float (z, 4 * nodes), output
        The same at every position, times the weight of the node.
    """
    first = nodes.first[k]
    pol, sign = channel(c)
    for i in range(flat.size):
        n = first + i
        kz = emitter_kz(source, pol, complex(nodes.u[n]))
        factor = dissipated_factor(c, source, complex(nodes.u[n]), kz) * nodes.du[n]
        above = sign * factor * complex(a[n, pol, 0], a[n, pol, 1])
        to_top, to_bottom = ways[i, pol, 0], ways[i, pol, 1]
        flat[i] = -factor.real if nodes.part[k] != NEAR_PART else -2.0 * factor.real
        x, y = (
            2.0 * factor + above * (zone * to_top).sum(),
            sign * factor * (zone * to_bottom).sum(),
        )
        mean[i, 0], mean[i, 1], mean[i, 2], mean[i, 3] = x.real, -x.imag, y.real, -y.imag
        w = nodes.weight[n]
        for q in range(weights.shape[0]):
            x, y = w * (2.0 * factor + above * to_top[q]), w * sign * factor * to_bottom[q]
            weights[q, 4 * i], weights[q, 4 * i + 1] = x.real, -x.imag
            weights[q, 4 * i + 2], weights[q, 4 * i + 3] = y.real, -y.imag


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
    z = source.kz_positions.size
    product, moments = np.zeros((z, BLOCK)), np.zeros((3, 3, BLOCK))
    for k in range(nodes.part.size):
        part, begin, first = nodes.part[k], 0, nodes.first[k]
        count = nodes.first[k + 1] - first
        ways, through = ways_of(source, nodes, k), film_waves(source, nodes, k)[1]
        waves = np.zeros((2, 4 * count, BLOCK))
        flat, mean, weights = (
            np.zeros((3, count)), np.zeros((3, count, 4)), np.zeros((3, z, 4 * count)),
        )  # fmt: skip
        known = -1
        for block in range(blocks.up.size):
            iu, low, length = blocks.up[block], blocks.first[block], blocks.length[block]
            if iu != known:
                known = iu
                for c in range(3):
                    _weigh_waves(
                        source, nodes, k, c, r_up[:, :, :, iu], ways, zone, flat[c], mean[c],
                        weights[c],
                    )  # fmt: skip
            moments[:, :, :] = 0.0
            for i in range(count):
                n = first + i
                rule = (nodes.weight[n], nodes.last[n], nodes.second[n])
                if rule[0] == 0.0:
                    continue
                for pol in range(2):
                    turn = through[i, pol] * through[i, pol]
                    x = complex(r_up[n, pol, 0, iu], r_up[n, pol, 1, iu]) * turn
                    resonance(x, r_down[n, pol], low, waves[pol], 4 * i)
                    for c in range(0 if pol == P else 2, 2 if pol == P else 3):
                        add_moments(mean[c, i], flat[c, i], rule, waves[pol], 4 * i, moments[c])
            for c in range(3):
                level = (nodes.weight[first : first + count] * flat[c]).sum()
                pol = channel(c)[0]
                add_product(weights[c], waves[pol], level, product, value[part, c], begin, length)
                add_misses(moments[c], misses[part, c, begin : begin + length])
            begin += length
