"""Light of many devices that differ in film thicknesses: tabulated half stacks, combined in pairs.

Nodes are fixed; each half stack is solved once (`combine_tables`), and a pair of them costs a few
multiplications a node. The integrands are those of `source`: with a, b the reflections above and
below, P = exp(2 i kz d) of the emitter film and g = 1 / (1 - a b P), a dipole at z dissipates
Re[G (1 + 2 a b P g + s a g exp(2 i kz (d - z)) + s b g exp(2 i kz z))], and sends down
K |g|^2 |exp(i kz z)|^2 |1 + s a exp(2 i kz (d - z))|^2, up likewise; G, K
and the sign s by channel.
At real nodes kz of the lossless emitter film is real or imaginary, never both.

Points run along the last axis, innermost, so that loops vectorize. A row is one upper half with
neighboring lower ones.
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


class Nodes(NamedTuple):
    """Panels of one wavelength with all their nodes."""

    u: Complexes  # (n,)
    du: Complexes  # (n,)
    weight: Floats  # (n,) of the panel's rule; 0 for nodes that only fill up a batch
    last: Floats  # (n,) rows that give the last two Legendre coefficients
    second: Floats  # (n,)
    first: Integers  # (k + 1,) first node of every panel, and the end
    part: Integers  # (k,) part of the dissipated power that a panel belongs to


class Rows(NamedTuple):
    """Points in their order: one upper half each row, lower halves first to last - 1."""

    up: Integers  # (r,)
    first: Integers  # (r,)
    last: Integers  # (r,)


@inline
def emitter_kz(source: Source, pol: int, u: complex) -> complex:
    """Normal wavevector over k0 in the emitter film."""
    eps_o, eps_e = float(source.eps_o), float(source.eps_e)
    return sqrt_upper(eps_o - (eps_o / eps_e if pol == P else 1.0) * u * u)


@inline
def resonance(
    a: complex, b: Floats, low: int, turn: complex, g: Floats, t: Floats, bg: Floats
) -> None:
    """Fill g = 1 / (1 - a b P), t = a b P g and b g, all (2, l), for halves b (2, v) from low."""
    x, y = (a * turn).real, (a * turn).imag
    for p in range(g.shape[1]):
        br, bi = b[0, low + p], b[1, low + p]
        xr, xi = x * br - y * bi, x * bi + y * br
        dr = 1.0 - xr
        m = 1.0 / (dr * dr + xi * xi)
        gr, gi = dr * m, xi * m
        g[0, p], g[1, p] = gr, gi
        t[0, p], t[1, p] = xr * gr - xi * gi, xr * gi + xi * gr
        bg[0, p], bg[1, p] = br * gr - bi * gi, br * gi + bi * gr


@inline
def add_moments(v: Floats, weight: float, last: float, second: float, moments: Floats) -> None:
    """Add a node's values v (l,) to the moments (3, l) that tell a panel's error."""
    for p in range(v.size):
        moments[0, p] += weight * abs(v[p])
        moments[1, p] += last * v[p]
        moments[2, p] += second * v[p]


@inline
def add_misses(moments: Floats, misses: Floats, begin: int) -> None:
    """Add a panel's estimated error, as of `paths.panel_error`, from begin on, and start anew."""
    for p in range(moments.shape[1]):
        size = 0.5 * moments[0, p] + 1e-300
        unresolved = max(abs(moments[1, p]), abs(moments[2, p]))
        misses[begin + p] += 2.0 * unresolved * np.sqrt(min(1.0, unresolved / size))


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
def add_waves(
    factor: complex,
    sign: float,
    bulk: float,
    a: complex,
    ways: Complexes,
    zone: Floats,
    rule: tuple[float, float, float],
    g: Floats,
    t: Floats,
    bg: Floats,
    v: Floats,
    target: Floats,
    begin: int,
    moments: Floats,
) -> None:
    """Add a node's dissipated power to target (z, p) from begin on, and to its moments (3, l).

    Parameters
    ----------
    factor, sign : complex, float
        G and s of the channel.
    bulk : float
        Re G, or 0 where the bulk term is left out.
    rule : (float, float, float)
        The node's weight and rows for the last two Legendre coefficients.
    g, t, bg, v : float (2, l)
        From `resonance`; v is work space.
    """
    weight, last, second = rule
    points = v.shape[1]
    fr, fi = 2.0 * factor.real, 2.0 * factor.imag
    to_top, to_bottom = ways[0], ways[1]
    factor = sign * factor
    x, y = factor * a * (zone * to_top).sum(), factor * (zone * to_bottom).sum()
    xr, xi, yr, yi = x.real, x.imag, y.real, y.imag
    for p in range(points):
        v[0, p] = bulk + fr * t[0, p] - fi * t[1, p]
        v[1, p] = v[0, p] + xr * g[0, p] - xi * g[1, p] + yr * bg[0, p] - yi * bg[1, p]
    add_moments(v[1], weight, last, second, moments)
    for q in range(target.shape[0]):
        x, y = weight * factor * a * to_top[q], weight * factor * to_bottom[q]
        xr, xi, yr, yi = x.real, x.imag, y.real, y.imag
        for p in range(points):
            new = weight * v[0, p] + xr * g[0, p] - xi * g[1, p]
            target[q, begin + p] += new + yr * bg[0, p] - yi * bg[1, p]


@kernel
def combine_dissipated(
    source: Source,
    nodes: Nodes,
    r_up: Floats,
    r_down: Floats,
    rows: Rows,
    zone: Floats,
    value: Floats,
    misses: Floats,
) -> None:
    """Dissipated power of every point, by part and channel.

    Parameters
    ----------
    source : Source
        Of one wavelength, with z positions.
    nodes : Nodes
    r_up, r_down : float (n, 2, 2, v)
        From `combine_tables.tabulate_reflection`.
    rows : Rows
        Of p points in all.
    zone : float (z,)
        Weights of the average whose error is estimated.
    value : float (PARTS, 3, z, p), output
        Added to.
    misses : float (PARTS, 3, p), output
        Estimated errors, added to.
    """
    for k in range(nodes.part.size):
        part, begin = nodes.part[k], 0
        ways = ways_of(source, nodes, k)
        for row in range(rows.up.size):
            low, points = rows.first[row], rows.last[row] - rows.first[row]
            # Of exactly this length, so that loops over them vectorize.
            g, t = np.zeros((2, points)), np.zeros((2, points))
            bg, v = np.zeros((2, points)), np.zeros((2, points))
            moments = np.zeros((3, 3, points))
            for n in range(nodes.first[k], nodes.first[k + 1]):
                rule = (nodes.weight[n], nodes.last[n], nodes.second[n])
                if rule[0] == 0.0:
                    continue
                for pol in range(2):
                    kz = emitter_kz(source, pol, complex(nodes.u[n]))
                    turn = exp_i(2.0 * kz * float(source.kd))
                    a = complex(r_up[n, pol, 0, rows.up[row]], r_up[n, pol, 1, rows.up[row]])
                    resonance(a, r_down[n, pol], low, turn, g, t, bg)
                    for c in range(0 if pol == P else 2, 2 if pol == P else 3):
                        sign = channel(c)[1]
                        factor = dissipated_factor(c, source, complex(nodes.u[n]), kz) * nodes.du[n]
                        bulk = 0.0 if part == NEAR_PART else factor.real
                        add_waves(
                            factor, sign, bulk, a, ways[n - nodes.first[k], pol], zone, rule,
                            g, t, bg, v, value[part, c], begin, moments[c],
                        )  # fmt: skip
            for c in range(3):
                add_misses(moments[c], misses[part, c], begin)
            begin += points
