"""Sharp modes of a stack near the real axis, found for the quadrature of the checks."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.check_stack import Layers, Medium, normal

if TYPE_CHECKING:
    from numpy.typing import NDArray

_STEP = 5e-4  # of the scan over u
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


def resonances(layers: Layers, far: float) -> tuple[Resonance, ...]:
    """Modes near the real axis below u = far, ascending, one of each."""
    grid = np.arange(0.5 * _STEP, far, _STEP)
    places: list[tuple[complex, str]] = []
    for pol in "sp":
        size = np.abs(_lack(layers, grid.astype(np.complex128), pol))
        dips = np.flatnonzero((size[1:-1] < size[:-2]) & (size[1:-1] < size[2:])) + 1
        for index in dips:
            found = _polished(layers, complex(grid[index]), pol)
            near = found is not None and abs(found.real - grid[index]) < 2.0 * _STEP
            if found is not None and near and abs(found.imag) < 0.02:
                places.append((found, pol))
    places.sort(key=lambda place: place[0].real)
    kept = [p for i, p in enumerate(places) if i == 0 or abs(p[0] - places[i - 1][0]) > 1e-9]
    distinct, pols = [place for place, _ in kept], [pol for _, pol in kept]
    return _with_gaps(layers, distinct, pols)


def _lack(layers: Layers, u: NDArray[np.complex128], pol: str) -> NDArray[np.complex128]:
    """1 - a b, whose zeros are the modes."""
    turn = np.exp(2j * layers.k0 * normal(layers.own, u, pol) * layers.own.thickness_nm)
    lack: NDArray[np.complex128] = 1.0 - layers.half(u, pol, 0).r * layers.half(u, pol, 1).r * turn
    return lack


def _polished(layers: Layers, start: complex, pol: str) -> complex | None:
    """Zero of 1 - a b by the secant method; None if it does not settle."""

    def lack(u: complex) -> complex:
        return complex(_lack(layers, np.array([u]), pol)[0])

    before, now = start + 0.2j * _STEP, start
    f_before, f_now = lack(before), lack(now)
    for _ in range(_ROUNDS):
        if f_now == f_before:
            break
        step = f_now * (now - before) / (f_now - f_before)
        before, f_before = now, f_now
        now = now - step
        if not np.isfinite(now) or abs(now - start) > 20.0 * _STEP:
            return None
        f_now = lack(now)
        if abs(step) < 1e-14:
            return now
    return now if abs(f_now) < 1e-9 else None


def _branches(layers: Layers) -> list[float]:
    """Branch points that a detour must not cross."""
    media = (layers.own, *(o.medium for o in layers.outside))
    lines = {float(np.sqrt(eps).real) for m in media for eps in (m.eps_o, m.eps_e)}
    return sorted(lines | {o.n_out for o in layers.outside})


def _with_gaps(layers: Layers, places: list[complex], pols: list[str]) -> tuple[Resonance, ...]:
    found = []
    branches = _branches(layers)
    for i, place in enumerate(places):
        others = [*branches, *(p.real for k, p in enumerate(places) if k != i)]
        room = min((abs(place.real - other) for other in others), default=_GAP)
        half = min(_GAP, room / 3.0)
        sharp = abs(place.imag) < _SHARP
        forward = _runs_forward(layers, place, pols[i]) if sharp else place.imag > 0.0
        found.append(Resonance(place, sharp, forward, place.real - half, place.real + half))
    return tuple(found)


def _runs_forward(layers: Layers, place: complex, pol: str) -> bool:
    """Whether a little loss in all films moves a pole up, as it does for forward modes."""
    films = tuple(
        Medium(m.eps_o + _LITTLE_LOSS, m.eps_e + _LITTLE_LOSS, m.thickness_nm) for m in layers.films
    )
    moved = _polished(replace(layers, films=films), place, pol)
    return moved is None or moved.imag >= place.imag
