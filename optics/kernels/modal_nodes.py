"""Integrals over the real in-plane wavevector with nodes that know the modes.

A mode above or below the axis makes a line of half width |Im u| in every power, and one next to
its cut-off changes the power within as little of a light line, on both sides of it, whether it is
bound already or not yet. Each piece of the axis therefore has a variable t of its own, in which
the square roots at its ends are smooth, and panels laid out around the image in t of every zero
of the modes' function, on all sheets, in geometric steps from its distance on; then they are
halved until they are resolved. Lines too narrow for double precision are left out with a window
around them and come back as their residue.
"""

from collections.abc import Callable
from itertools import pairwise
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.geometry import largest_index, light_lines, nearest_absorber
from optics.kernels.halfstack import NEXT_TO_LIGHT_LINE
from optics.kernels.modal_absorption import FILMS, power_by_film
from optics.kernels.modal_narrow import NarrowLines, narrow_lines
from optics.kernels.modal_power import mode_powers
from optics.kernels.modal_sheet import Films
from optics.kernels.poles import Modes, bound_modes, films_of, outer_line, zeros_on_all_sheets
from optics.kernels.problem import Problem
from optics.kernels.rules import WEIGHT, X

_STEP = 6.0  # ratio of neighboring distances from a line
_NARROW = 1e-9  # half width in t of lines that are left out
_WINDOW = 1e-7  # half width in t of the window around them
_SHOWS = 0.05  # |Im u| of modes on other sheets that shape the power on the axis
_ROUNDS = 40
_OF_TOLERANCE = 0.1  # a panel's part: panels are many, and two rules may agree by chance
_EVENLY = 0.5  # longest first panel beyond the light lines
_ELSEWHERE = complex(np.nan, np.nan)
_SHORTEST = 1e-13  # distance at which two light lines are one

#: From t to u and du/dt
Map = Callable[[Floats], tuple[Floats, Floats]]
#: Power per du (n, columns) at u (n,)
Integrand = Callable[[Floats], Floats]


class Account(NamedTuple):
    """Power of one wavelength by where it ends, weighted over zone and orientations."""

    by_place: Floats  # (FILMS + m,) columns of `modal_absorption`
    stays_guided: float  # in modes that nothing absorbs
    miss: float  # estimated error of the worst column
    films: Films
    modes: Modes  # bound ones
    power: Floats  # (n,) of each mode
    content: Floats  # (n, 3, m + 2) of each mode, as of `mode_content`


class _Piece(NamedTuple):
    """A piece of the axis in its own variable t from 0 to end."""

    place: Map
    end: float
    evenly: int  # panels of equal length to begin with
    images: Complexes  # of zeros on all sheets, and of branch points off the axis
    narrow: Complexes  # images of narrow lines; nan for those that belong to other pieces


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
    columns = FILMS + films.kd.size

    def integrand(u: Floats) -> Floats:
        values = np.empty((u.size, columns))
        power_by_film(problem, row, emitter, u, weight, values)
        return values

    others = zeros_on_all_sheets(films, _SHOWS)
    line, lines = outer_line(problem, row), light_lines(problem)[row]

    def powers(some: Modes) -> Floats:
        return mode_powers(problem, row, emitter, films, some, weight)[0]

    narrow = narrow_lines(films, line, modes, others, (power, content), powers, integrand)
    far = max(2.0 * float(largest_index(problem)[row]), 1.2 * float(modes.u.real.max(initial=0.0)))
    pieces = [
        _between(lo, hi, films, (modes, others), narrow)
        for lo, hi in pairwise(lines.tolist())
        if hi - lo > _SHORTEST
    ]
    pieces.append(_beyond(line, far, films, (modes, others), narrow))
    scale = _OF_TOLERANCE * tolerance * max(float(weight.sum()), 1e-300)
    length = max(far, 1.0 / float(nearest_absorber(problem)[row]))
    total, miss = _adaptive(integrand, _tail(far, length), np.linspace(0.0, 1.0, 5), scale, lines)
    stays = 0.0
    for piece in pieces:
        edges, inside = _edges(piece)
        value, error = _adaptive(integrand, piece.place, edges, scale, lines, ~inside)
        held = _held(piece.narrow, edges, inside) @ narrow.ends
        total, stays, miss = total + value + held[:-1], stays + float(held[-1]), miss + error
    return Account(total, stays, miss, films, modes, power, content)


def _between(
    lo: float, hi: float, films: Films, zeros: tuple[Modes, Modes], narrow: NarrowLines
) -> _Piece:
    """From one light line to the next: u = lo + (hi - lo) sin^2(pi t / 2)."""

    def place(t: Floats) -> tuple[Floats, Floats]:
        # From the nearer end, so that u is rounded once.
        near_lo, near_hi = np.sin(0.5 * np.pi * t) ** 2, np.cos(0.5 * np.pi * t) ** 2
        u = np.where(t < 0.5, lo + (hi - lo) * near_lo, hi - (hi - lo) * near_hi)
        return u, (hi - lo) * 0.5 * np.pi * np.sin(np.pi * t)

    def image(u: Complexes) -> Complexes:
        return np.asarray(2.0 / np.pi * np.arcsin(np.sqrt((u - lo) / (hi - lo) + 0j)))

    u = np.concatenate([zeros[0].u, zeros[1].u, _branch_points(films)])
    mine = (narrow.u.real > lo) & (narrow.u.real < hi)
    return _Piece(place, 1.0, 1, image(u), np.where(mine, image(narrow.u), _ELSEWHERE))


def _beyond(
    line: float, far: float, films: Films, zeros: tuple[Modes, Modes], narrow: NarrowLines
) -> _Piece:
    """From the largest outer light line on: u = line + t^2.

    Modes that are not yet bound have their image at negative t.
    """

    def place(t: Floats) -> tuple[Floats, Floats]:
        return line + t * t, 2.0 * t

    bound, others = zeros
    at_line = np.abs(np.sqrt([films.bottom, films.top]) - line) < _SHORTEST
    # On other sheets of the other medium nothing touches this piece.
    near = (others.decay.real > 0.0).all(axis=1, where=~at_line)
    u, way = others.u[near], np.where(others.decay[near].real > 0.0, 1.0, -1.0)
    side = way.max(axis=1, where=at_line, initial=-1.0)
    images = np.concatenate([np.sqrt(bound.u - line), side * np.sqrt(u - line),
                             np.sqrt(_branch_points(films) - line)])  # fmt: skip
    own = np.where(narrow.u.real > line, np.sqrt(narrow.u - line), _ELSEWHERE)
    return _Piece(place, float(np.sqrt(far - line)), int(np.ceil((far - line) / _EVENLY)),
                  images, own)  # fmt: skip


def _branch_points(films: Films) -> Complexes:
    """Those off the axis, of absorbing outer media."""
    outer = np.array([films.bottom, films.top])
    return np.sqrt(outer[outer.imag > 0.0])


def _tail(far: float, length: float) -> Map:
    """From far on to infinity."""

    def place(t: Floats) -> tuple[Floats, Floats]:
        return far + length * t / (1.0 - t), length / (1.0 - t) ** 2

    return place


def _edges(piece: _Piece) -> tuple[Floats, NDArray[np.bool_]]:
    """Panel edges in t, and which panels lie in the window of a narrow line."""
    end = piece.end
    edges = np.linspace(0.0, end, 1 + piece.evenly).tolist()
    narrow = piece.narrow[np.abs(piece.narrow.imag) < _NARROW]
    for image in piece.images.tolist():
        nearest = min(max(image.real, 0.0), end)
        distance = max(abs(image - nearest), _WINDOW)
        edges.append(nearest)
        while distance < end:
            edges += [nearest - distance, nearest + distance]
            distance *= _STEP
    for image in narrow.tolist():
        edges += [image.real - _WINDOW, image.real, image.real + _WINDOW]
    kept = np.unique([edge for edge in edges if 0.0 <= edge < end - _SHORTEST])
    kept = np.append(kept[np.append(True, np.diff(kept) > _SHORTEST)], end)
    middle = 0.5 * (kept[:-1] + kept[1:])
    inside = (np.abs(middle[:, None] - narrow.real[None, :]) < _WINDOW).any(axis=1)
    return kept, inside


def _held(narrow: Complexes, edges: Floats, inside: NDArray[np.bool_]) -> Floats:
    """Part (n,) of each narrow line that lies in panels left out."""
    known = np.abs(narrow.imag) < _NARROW
    turn = np.arctan2(edges[None, :] - narrow.real[:, None], np.abs(narrow.imag)[:, None])
    parts = np.diff(turn, axis=1)[:, inside].sum(axis=1) / np.pi
    return np.where(known, parts, 0.0)


def _adaptive(
    integrand: Integrand, place: Map, edges: Floats, tolerance: float, lines: Floats,
    kept: NDArray[np.bool_] | None = None,
) -> tuple[Floats, float]:  # fmt: skip
    """Integrate over panels of t, halving those whose two rules disagree.

    Parameters
    ----------
    edges : float (p + 1,)
    lines : float (l,)
        Light lines, in u.
    kept : bool (p,), optional
        Panels that count; all if not given.

    Returns
    -------
    float (columns,)
        The finer rule's sums.
    float
        Sum over panels of the difference between both rules, which bounds the finer one's error
        amply, and of what the nodes themselves leave in doubt.
    """
    a, b = edges[:-1], edges[1:]
    if kept is not None:
        a, b = a[kept], b[kept]
    total, miss = np.zeros(integrand(np.ones(1)).shape[1]), 0.0
    for round_ in range(_ROUNDS):
        half = 0.5 * (b - a)
        t = a[:, None] + half[:, None] * (X[None, :] + 1.0)
        u, du = place(t.ravel())
        values = (integrand(u) * du[:, None]).reshape(*t.shape, -1) * half[:, None, None]
        fine = np.einsum("n,pnc->pc", WEIGHT[1], values)
        gap = np.abs(fine - np.einsum("n,pnc->pc", WEIGHT[0], values)).max(axis=1)
        good = (gap <= tolerance) | (round_ == _ROUNDS - 1)
        total += fine[good].sum(axis=0)
        doubt = _doubt(u.reshape(t.shape), values, lines)
        miss += float((gap + doubt)[good].sum())
        if good.all():
            break
        left, middle, right = a[~good], 0.5 * (a + b)[~good], b[~good]
        a, b = np.concatenate([left, middle]), np.concatenate([middle, right])
    return total, miss


def _doubt(u: Floats, values: Floats, lines: Floats) -> Floats:
    """Error (p,) of panels whose nodes are beyond the reach of double precision.

    Rounding of u shows where power changes within few steps of it; and so near to a light line
    that the half stacks stand beside it (`halfstack`) a power is that of a neighboring place.

    u : (p, nodes); values : (p, nodes, columns).
    """
    size = np.abs(np.einsum("n,pnc->pnc", WEIGHT[1], values)).max(axis=2)
    coarse = np.spacing(u.max(axis=1)) / np.maximum(np.ptp(u, axis=1), 1e-300)
    beside = (np.abs(u[:, :, None] ** 2 - lines**2) < NEXT_TO_LIGHT_LINE).any(axis=2)
    doubt: Floats = np.where(beside, size, np.minimum(coarse, 1.0)[:, None] * size).sum(axis=1)
    return doubt
