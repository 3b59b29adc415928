"""Sharp modes of a stack near the real axis, found for the quadrature of the checks."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.check_stack import Layers, Medium, admittance, normal

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

_STEP = 5e-4  # of the scan over u, up to
_EVEN = 6.0
_FINEST, _FINE_STEPS = 1e-10, 120  # of the scan on either side of a light line
_NARROW = 0.02  # wider peaks need no help
_SHARP = 1e-7  # half width under which no quadrature resolves a peak
_GAP = 1e-4  # largest half width of the detour around a sharp mode
_ROUNDS = 40
_LITTLE_LOSS = 1e-6j


class Resonance(NamedTuple):
    """A zero of 1 - a b next to the real axis, in u = kappa / k0."""

    place: complex
    sharp: bool
    forward: bool  # the pole lies above the axis, or comes down to it as losses vanish
    lo: float  # ends of the detour around it
    hi: float


def resonances(layers: Layers, edges: Sequence[float]) -> tuple[Resonance, ...]:
    """Modes near the real axis between the first and the last edge, ascending, one of each.

    Parameters
    ----------
    layers : Layers
    edges : sequence of float
        Ascending ends of the intervals of integration, branch points among them: modes next to
        them are searched in ever finer steps, and detours do not cross them.
    """
    grid = _grid(edges)
    places: list[tuple[complex, str]] = []
    for pol in "sp":
        size = np.abs(_dispersion(layers, grid.astype(np.complex128), pol))
        dips = np.flatnonzero((size[1:-1] < size[:-2]) & (size[1:-1] < size[2:])) + 1
        for index in dips:
            step = float(max(grid[index + 1] - grid[index], grid[index] - grid[index - 1]))
            found = _polished(layers, complex(grid[index]), step, pol)
            near = found is not None and abs(found.real - grid[index]) < 2.0 * step
            if found is not None and near and abs(found.imag) < _NARROW:
                places.append((found, pol))
    places.sort(key=lambda place: place[0].real)
    kept = [p for i, p in enumerate(places) if i == 0 or abs(p[0] - places[i - 1][0]) > 1e-12]
    return _with_gaps(layers, kept, edges)


def _grid(edges: Sequence[float]) -> NDArray[np.float64]:
    """Scan over u: even steps, wider far out, and geometric ones on both sides of each edge."""
    first, last = edges[0], edges[-1]
    even = np.arange(0.5 * _STEP, min(last, _EVEN), _STEP)
    wide = np.geomspace(_EVEN, max(last, _EVEN * 1.001), 4000) if last > _EVEN else np.empty(0)
    fine = np.geomspace(_FINEST, 2.0 * _STEP, _FINE_STEPS)
    beside = [edge + sign * fine for edge in edges for sign in (-1.0, 1.0)]
    grid = np.unique(np.concatenate([even, wide, *beside]))
    return grid[(grid > first) & (grid < last)]


def _dispersion(layers: Layers, u: NDArray[np.complex128], pol: str) -> NDArray[np.complex128]:
    """1 - a b without its poles: its zeros are the modes, and their dips show from afar.

    Phases make it even in the normal wavevector of every film, so that the choice of its sign,
    which changes from one side of the real axis to the other, does not show.
    """
    turn = layers.k0 * normal(layers.own, u, pol) * layers.own.thickness_nm
    below, above = layers.half(u, pol, 0), layers.half(u, pol, 1)
    even = np.exp(-1j * turn.real) / admittance(layers.own, u, pol)
    lack = 1.0 - below.r * above.r * np.exp(2j * turn)
    return np.asarray(lack * below.scale * above.scale * even)


def _polished(layers: Layers, start: complex, scale: float, pol: str) -> complex | None:
    """Zero of the dispersion function by the secant method; None if it does not settle."""

    def function(u: complex) -> complex:
        return complex(_dispersion(layers, np.array([u]), pol)[0])

    before, now = start + 0.2j * scale, start
    f_before, f_now = function(before), function(now)
    size, best, f_best = abs(f_now), start, abs(f_now)
    for _ in range(_ROUNDS):
        # Near the zero rounding takes over, and steps no longer mean anything.
        if f_now == f_before or f_best <= 1e-15 * size:
            break
        step = f_now * (now - before) / (f_now - f_before)
        before, f_before = now, f_now
        now = now - step
        if not np.isfinite(now) or abs(now - start) > 20.0 * scale:
            break
        f_now = function(now)
        if abs(f_now) < f_best:
            best, f_best = now, abs(f_now)
        if abs(step) < 1e-15:
            break
    return best if f_best <= 1e-9 * size else None


def _with_gaps(
    layers: Layers, places: list[tuple[complex, str]], edges: Sequence[float]
) -> tuple[Resonance, ...]:
    found = []
    for i, (place, pol) in enumerate(places):
        others = [*edges, *(p.real for k, (p, _) in enumerate(places) if k != i)]
        half = min(_GAP, min(abs(place.real - other) for other in others) / 3.0)
        sharp = abs(place.imag) < min(_SHARP, 0.01 * half)
        forward = _runs_forward(layers, place, pol) if sharp else place.imag > 0.0
        found.append(Resonance(place, sharp, forward, place.real - half, place.real + half))
    return tuple(found)


def _runs_forward(layers: Layers, place: complex, pol: str) -> bool:
    """Whether a little loss in all films moves a pole up, as it does for forward modes."""
    films = tuple(
        Medium(m.eps_o + _LITTLE_LOSS, m.eps_e + _LITTLE_LOSS, m.thickness_nm) for m in layers.films
    )
    moved = _polished(replace(layers, films=films), place, _STEP, pol)
    return moved is None or moved.imag >= place.imag
