"""Integrals over the real in-plane wavevector with nodes that know the modes.

A mode just above or below the axis makes a line of half width |Im u| in every power. Panels are
laid out around each in geometric steps from that width on, then halved until they are resolved.
Lines too narrow for double precision are left out with a window around them and come back as
their residue, shared out among the films as the mode's own absorption is.
"""

import math
from collections.abc import Callable
from itertools import pairwise
from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.geometry import largest_index, light_lines, nearest_absorber
from optics.kernels.modal_absorption import DISSIPATED, FILMS, SURROUNDINGS, power_by_film
from optics.kernels.modal_fields import ABSORBED, FLOW, mode_content, residues
from optics.kernels.modal_sheet import Films
from optics.kernels.poles import Modes, bound_modes, films_of, leaky_modes, outer_line
from optics.kernels.problem import Problem
from optics.kernels.rules import WEIGHT, X

_STEP = 6.0  # ratio of neighboring distances from a line
_NARROW = 1e-9  # half width of lines that are left out
_WINDOW = 1e-6  # half width of the window around them
_LEAKY_WIDTH = 0.02  # of leaky modes that show as lines below the outer light lines
_ROUNDS = 40
_TWINS = 1e-7  # distance on the sheet below which modes count as twins
_AROUND = 1e-4  # of the path around twins
_EVENLY = 0.5  # longest first panel beyond the light lines

#: From t to u and du/dt
Map = Callable[[Floats], tuple[Floats, Floats]]


class Account(NamedTuple):
    """Power of one wavelength by where it ends, weighted over zone and orientations."""

    by_place: Floats  # (FILMS + m,) columns of `modal_absorption`
    stays_guided: float  # in modes that nothing absorbs
    miss: float  # estimated error of the worst column
    films: Films
    modes: Modes  # bound ones
    power: Floats  # (n,) of each mode
    content: Floats  # (n, 3, m + 2) of each mode, as of `mode_content`


def mode_powers(
    problem: Problem, row: int, emitter: int, films: Films, modes: Modes, weight: Floats
) -> tuple[Floats, Floats]:
    """Power that each mode takes, and what it holds.

    Parameters
    ----------
    weight : float (2, z)
        Weights of vertical and horizontal dipoles over positions.

    Returns
    -------
    power : float (n,)
        Re(i pi residue) for modes above the axis, its negative below: the integral of the line
        that the mode makes, over the whole axis.
    content : float (n, 3, m + 2)
    """
    source = problem.source
    residue = np.zeros_like(modes.s)
    content = np.zeros((modes.s.size, 3, films.kd.size + 2))
    found = np.zeros((3, source.kz_positions.shape[1]), dtype=np.complex128)

    def weighted(pol: int, s: complex, radius: float) -> complex:
        residues(
            films, emitter, pol, s, radius, source.kz_positions[row], source.eps_e[row],
            source.bulk[row], found,
        )  # fmt: skip
        return complex((found * weight[[0, 1, 1]]).sum())

    for i, (pol, s) in enumerate(zip(modes.polarization.tolist(), modes.s.tolist(), strict=True)):
        mode_content(films, pol, s, content[i])
        residue[i] = weighted(pol, s, 0.0)
    for group in _twins(modes):
        # Each on its own is a small difference; their sum is sound.
        middle = complex(modes.s[group].mean())
        together = weighted(int(modes.polarization[group[0]]), middle, _AROUND)
        alone = residue[group].sum()
        if alone != 0.0:
            residue[group] *= together / alone
    ways = [direction(u, held) for u, held in zip(modes.u.tolist(), content, strict=True)]
    return np.array(ways) * (1j * math.pi * residue).real, content


def _twins(modes: Modes) -> list[list[int]]:
    """Groups of modes too close to each other to be told apart in double precision."""
    groups: list[list[int]] = []
    for i in range(modes.s.size):
        same = modes.polarization == modes.polarization[i]
        group = np.flatnonzero(same & (np.abs(modes.s - modes.s[i]) < _TWINS)).tolist()
        others = same & (np.abs(modes.s - modes.s[i]) < 2.0 * _AROUND)
        if len(group) > 1 and group not in groups and others.sum() == len(group):
            groups.append(group)
    return groups


def direction(u: complex, content: Floats) -> float:
    """Tell a forward mode (1) from a backward one (-1), whose power runs against its phase."""
    # Without loss the pole lies on the axis, and only the flow of power tells.
    deciding = u.imag if abs(u.imag) > 1e-13 else content[FLOW].sum()
    return -1.0 if deciding < 0.0 else 1.0


def account(problem: Problem, row: int, emitter: int, weight: Floats, tolerance: float) -> Account:
    """Follow all power of one wavelength to where it ends.

    Parameters
    ----------
    problem : Problem
    row : int
        Of the wavelength.
    emitter : int
        Index of the emitter film.
    weight : float (2, z)
        Weights of vertical and horizontal dipoles, relative to their own bulk rates.
    tolerance : float
        Wanted accuracy of every column over the weights' sum.
    """
    films = films_of(problem, row)
    modes = bound_modes(films)
    power, content = mode_powers(problem, row, emitter, films, modes, weight)
    integrand = _Integrand(problem, row, emitter, weight, films.kd.size)
    line = outer_line(problem, row)
    scale = tolerance * max(float(weight.sum()), 1e-300)
    leaky = leaky_modes(films, _LEAKY_WIDTH).u
    below, miss_below = _below(integrand, light_lines(problem)[row], modes.u, leaky, scale)
    beyond, miss_beyond = _beyond(integrand, problem, row, line, modes.u, scale)
    total = below + beyond
    stays = _narrow_lines(modes, line, power, content, total)
    return Account(total, stays, miss_below + miss_beyond, films, modes, power, content)


def _narrow_lines(
    modes: Modes, line: float, power: Floats, content: Floats, total: Floats
) -> float:
    """Add the lines that the nodes left out to total; return what nothing absorbs."""
    stays = 0.0
    for i in np.flatnonzero((np.abs(modes.u.imag) < _NARROW) & (modes.u.real > line)).tolist():
        inside = 2.0 / math.pi * math.atan2(_WINDOW, abs(modes.u[i].imag)) * power[i]
        absorbed = content[i, ABSORBED]
        total[DISSIPATED] += inside
        if absorbed.sum() > 0.0:
            share = absorbed / absorbed.sum()
            total[FILMS:] += inside * share[1:-1]
            total[SURROUNDINGS : SURROUNDINGS + 2] += inside * share[[0, -1]]
        else:
            stays += inside
    return stays


class _Integrand(NamedTuple):
    problem: Problem
    row: int
    emitter: int
    weight: Floats
    films: int

    def __call__(self, u: Floats) -> Floats:
        """Power per du (n, columns)."""
        power = np.empty((u.size, FILMS + self.films))
        power_by_film(self.problem, self.row, self.emitter, u, self.weight, power)
        return power


def _below(
    integrand: _Integrand, lines: Floats, bound: Complexes, leaky: Complexes, tolerance: float
) -> tuple[Floats, float]:
    """Integral from 0 to the largest outer light line; square roots at the lines smoothed."""
    total, miss = np.zeros(FILMS + integrand.films), 0.0
    poles = np.concatenate([bound, leaky])
    for lo, hi in pairwise(lines.tolist()):
        if hi - lo < 1e-13:
            continue
        inner = poles[(poles.real > lo) & (poles.real < hi)]
        edges = _edges(lo, hi, inner)
        theta = 2.0 / math.pi * np.arcsin(np.sqrt((edges - lo) / (hi - lo)))

        def place(t: Floats, lo: float = lo, hi: float = hi) -> tuple[Floats, Floats]:
            s = np.sin(0.5 * math.pi * t)
            return lo + (hi - lo) * s * s, (hi - lo) * 0.5 * math.pi * np.sin(math.pi * t)

        value, error = _adaptive(integrand, place, theta, tolerance)
        total, miss = total + value, miss + error
    return total, miss


def _beyond(
    integrand: _Integrand, problem: Problem, row: int, line: float, poles: Complexes, tol: float
) -> tuple[Floats, float]:
    """Integral from the largest outer light line to infinity, without lines too narrow."""
    total, miss = np.zeros(FILMS + integrand.films), 0.0
    poles = poles[poles.real > line]
    narrow = poles[np.abs(poles.imag) < _NARROW].real
    far = max(2.0 * float(largest_index(problem)[row]), 1.2 * float(poles.real.max(initial=0.0)))
    ends = [line]
    for u in np.sort(narrow).tolist():
        # A window never reaches across the light line.
        ends += [max(u - _WINDOW, line), u + _WINDOW]
    ends.append(far)

    def place(t: Floats) -> tuple[Floats, Floats]:
        return line + t * t, 2.0 * t

    for lo, hi in zip(ends[::2], ends[1::2], strict=True):
        if hi <= lo:
            continue
        edges = np.sqrt(np.maximum(_edges(lo, hi, poles) - line, 0.0))
        value, error = _adaptive(integrand, place, edges, tol)
        total, miss = total + value, miss + error
    length = max(far, 1.0 / float(nearest_absorber(problem)[row]))

    def tail(t: Floats) -> tuple[Floats, Floats]:
        return far + length * t / (1.0 - t), length / (1.0 - t) ** 2

    value, error = _adaptive(integrand, tail, np.linspace(0.0, 1.0, 5), tol)
    return total + value, miss + error


def _edges(lo: float, hi: float, poles: Complexes) -> Floats:
    """Panel edges from lo to hi, geometric around the real part of every pole."""
    edges = [lo, hi]
    edges += np.linspace(lo, hi, 1 + math.ceil((hi - lo) / _EVENLY)).tolist()
    for u in poles.tolist():
        distance = max(abs(u.imag), _WINDOW if abs(u.imag) < _NARROW else 1e-12)
        edges.append(u.real)
        while distance < hi - lo:
            edges += [u.real - distance, u.real + distance]
            distance *= _STEP
    return np.unique([edge for edge in edges if lo <= edge <= hi])


def _adaptive(
    integrand: _Integrand, place: Map, edges: Floats, tolerance: float
) -> tuple[Floats, float]:
    """Integrate over panels of t, halving those whose two rules disagree.

    Returns
    -------
    float (columns,)
        The finer rule's sums.
    float
        Sum of the differences between both rules, which bounds the finer one's error amply.
    """
    a, b = edges[:-1], edges[1:]
    total, miss = np.zeros(FILMS + integrand.films), 0.0
    for round_ in range(_ROUNDS):
        half = 0.5 * (b - a)
        t = a[:, None] + half[:, None] * (X[None, :] + 1.0)
        u, du = place(t.ravel())
        values = (integrand(u) * du[:, None]).reshape(*t.shape, -1) * half[:, None, None]
        fine = np.einsum("n,pnc->pc", WEIGHT[1], values)
        gap = np.abs(fine - np.einsum("n,pnc->pc", WEIGHT[0], values)).max(axis=1)
        good = (gap <= tolerance) | (round_ == _ROUNDS - 1)
        total += fine[good].sum(axis=0)
        miss += float(gap[good].sum())
        if good.all():
            break
        left, middle, right = a[~good], 0.5 * (a + b)[~good], b[~good]
        a, b = np.concatenate([left, middle]), np.concatenate([middle, right])
    return total, miss
