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
def resonance(a: complex, b: Floats, turn: complex, g: Floats, t: Floats, bg: Floats) -> None:
    """Fill g = 1 / (1 - a b P), t = a b P g and b g for lower halves b (2, l); all (2, l)."""
    x, y = (a * turn).real, (a * turn).imag
    for p in range(b.shape[1]):
        br, bi = b[0, p], b[1, p]
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
def add_misses(moments: Floats, misses: Floats) -> None:
    """Add a panel's estimated error, as of `paths.panel_error`, and start anew."""
    for p in range(misses.size):
        size = 0.5 * moments[0, p] + 1e-300
        unresolved = max(abs(moments[1, p]), abs(moments[2, p]))
        misses[p] += 2.0 * unresolved * np.sqrt(min(1.0, unresolved / size))
        moments[0, p] = 0.0
        moments[1, p] = 0.0
        moments[2, p] = 0.0


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
    z = source.kz_positions.size
    widest = (rows.last - rows.first).max()
    space, moments = np.zeros((4, 2, widest)), np.zeros((3, 3, widest))
    to_top, to_bottom = np.zeros(z, dtype=np.complex128), np.zeros(z, dtype=np.complex128)
    for k in range(nodes.part.size):
        part = nodes.part[k]
        begin = 0
        for row in range(rows.up.size):
            low, high = rows.first[row], rows.last[row]
            end = begin + high - low
            g, t = space[0, :, : high - low], space[1, :, : high - low]
            bg, v = space[2, :, : high - low], space[3, :, : high - low]
            for n in range(nodes.first[k], nodes.first[k + 1]):
                weight = nodes.weight[n]
                if weight == 0.0:
                    continue
                for pol in range(2):
                    kz = emitter_kz(source, pol, complex(nodes.u[n]))
                    turn = exp_i(kz * float(source.kd))
                    turn *= turn
                    for q in range(z):
                        to_bottom[q] = exp_i(2.0 * kz * source.kz_positions[q])
                        to_top[q] = exp_i(2.0 * kz * (source.kd - source.kz_positions[q]))
                    mean_t, mean_b = (zone * to_top).sum(), (zone * to_bottom).sum()
                    a = complex(r_up[n, pol, 0, rows.up[row]], r_up[n, pol, 1, rows.up[row]])
                    resonance(a, r_down[n, pol, :, low:high], turn, g, t, bg)
                    for c in range(3):
                        of_pol, sign = channel(c)
                        if of_pol != pol:
                            continue
                        factor = dissipated_factor(c, source, nodes.u[n], kz) * nodes.du[n]
                        bulk = 0.0 if part == NEAR_PART else factor.real
                        x, y = sign * factor * a * mean_t, sign * factor * mean_b
                        for p in range(high - low):
                            v[0, p] = bulk + 2.0 * (factor.real * t[0, p] - factor.imag * t[1, p])
                            v[1, p] = (
                                v[0, p] + x.real * g[0, p] - x.imag * g[1, p]
                                + y.real * bg[0, p] - y.imag * bg[1, p]
                            )  # fmt: skip
                        add_moments(
                            v[1], weight, nodes.last[n], nodes.second[n],
                            moments[c, :, : high - low],
                        )  # fmt: skip
                        for q in range(z):
                            x, y = factor * a * to_top[q], factor * to_bottom[q]
                            x, y = sign * weight * x, sign * weight * y
                            target = value[part, c, q, begin:end]
                            for p in range(high - low):
                                target[p] += (
                                    weight * v[0, p] + x.real * g[0, p] - x.imag * g[1, p]
                                    + y.real * bg[0, p] - y.imag * bg[1, p]
                                )  # fmt: skip
            for c in range(3):
                add_misses(moments[c, :, : high - low], misses[part, c, begin:end])
            begin = end
