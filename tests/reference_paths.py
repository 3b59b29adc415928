"""Paths in the plane of in-plane wavevectors, poles near them, and adaptive quadrature.

A path is a list of pieces; each maps t in [0, 1] to kappa so that square-root end points
become smooth. Panels in t halve until Gauss-Legendre rules of 12 and 20 nodes agree.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
import reference_fields as fields
from reference_geometry import Geometry

Array = Any
LOW, HIGH = np.polynomial.legendre.leggauss(12), np.polynomial.legendre.leggauss(20)


@dataclass(frozen=True, slots=True)
class Piece:
    """One stretch of path: real (`kind` "line" or "log") or a half ellipse below the axis."""

    kind: str
    lo: float
    hi: float
    depth: float = 0.0
    breaks: tuple[float, ...] = ()

    def at(self, t: Any, m: Any = np) -> tuple[Any, Any]:
        """Kappa and d kappa/dt; `m` offers sin, cos, exp, log, pi (numpy or mpmath's mp)."""
        span = self.hi - self.lo
        if self.kind == "log":
            ratio = (
                m.log(m.mpf(self.hi) / self.lo) if hasattr(m, "mpf") else m.log(self.hi / self.lo)
            )
            kappa = self.lo * m.exp(ratio * t)
            return kappa, ratio * kappa
        half = m.pi / 2
        if self.kind == "line":
            return self.lo + span * m.sin(half * t) ** 2, span * half * m.sin(m.pi * t)
        angle, rate = m.pi * m.sin(half * t) ** 2, m.pi * half * m.sin(m.pi * t)
        radius = span / 2
        kappa = self.lo + radius * (1 - m.cos(angle)) - 1j * self.depth * m.sin(angle)
        return kappa, (radius * m.sin(angle) - 1j * self.depth * m.cos(angle)) * rate

    def where(self, kappa: float) -> float:
        """The t of a real kappa on a real piece."""
        if self.kind == "log":
            return float(np.log(kappa / self.lo) / np.log(self.hi / self.lo))
        return float(np.arcsin(np.sqrt((kappa - self.lo) / (self.hi - self.lo))) * 2 / np.pi)


@dataclass(frozen=True, slots=True)
class Integral:
    """Values per row, the error estimate (12 against 20 nodes) and the panels reached."""

    value: Array
    error: float
    panels: tuple[tuple[float, float], ...]


def integrate(
    density: Callable[[Array], Array], piece: Piece, tolerance: float = 1e-11, initial: int = 8
) -> Integral:
    """Integrate the real part of density(kappa) d kappa along one piece, all rows at once.

    `tolerance` is per panel, relative to the largest row or to 1, whichever is more.
    """
    cuts = {float(x) for x in np.linspace(0, 1, initial + 1)}
    cuts |= {piece.where(k) for k in piece.breaks if piece.lo < k < piece.hi}
    edges = np.array(sorted(cuts))
    pending = np.column_stack([edges[:-1], edges[1:]])
    value: Array = 0.0
    error, done = 0.0, []
    while len(pending):
        high = _rule(density, piece, pending, HIGH)
        low = _rule(density, piece, pending, LOW)
        miss = np.abs(high - low).max(axis=0)
        width = pending[:, 1] - pending[:, 0]
        scale = max(1.0, float(np.abs(value + high.sum(axis=1)).max()))
        good = (
            (miss <= tolerance * scale)
            | (miss <= 1e-13 * np.abs(high).max(axis=0))
            | (width < 1e-13)
        )
        value = value + high[:, good].sum(axis=1)
        error += float(miss[good].sum())
        done += [(float(a), float(b)) for a, b in pending[good]]
        left = pending[~good]
        middle = left.mean(axis=1)
        pending = np.concatenate(
            [np.column_stack([left[:, 0], middle]), np.column_stack([middle, left[:, 1]])]
        )
        if len(done) + len(pending) > 200_000:
            raise ArithmeticError(f"no convergence on {piece}")
    return Integral(value, error, tuple(sorted(done)))


def _rule(density: Callable[[Array], Array], piece: Piece, panels: Array, rule: Any) -> Array:
    nodes, weights = rule
    half = (panels[:, 1] - panels[:, 0]) / 2
    t = panels.mean(axis=1)[:, None] + half[:, None] * nodes
    kappa, rate = piece.at(t.ravel())
    rows = (density(kappa) * rate).real.reshape(-1, len(panels), len(nodes))
    return (rows * weights).sum(axis=2) * half


def poles(
    geo: Geometry, lo: float, hi: float, count: int = 3000, spread: float = 0.05
) -> list[complex]:
    """Zeros of the Wronskian close to the real stretch, found from dips and sign changes.

    Kept are those with |Im| under `spread` times Re.
    """
    found: list[complex] = []
    marks = {f.ordinary.real**0.5 for f in geo.whole if f.ordinary.real > 0}
    marks |= {f.extraordinary.real**0.5 for f in geo.whole if f.extraordinary.real > 0}
    edges = [lo, *sorted(m for m in marks if lo < m < hi), hi]
    for pol in "ps":
        for a, b in pairwise(edges):
            if b - a < 1e-12:
                continue
            grid = Piece("line", a, b).at(np.linspace(0, 1, count + 2)[1:-1])[0]
            if b > 3 * a:
                grid = np.unique(np.concatenate([grid, np.geomspace(a, b, count + 2)[1:-1]]))
            found += _polish(geo, pol, _candidates(geo, pol, grid))
    kept: list[complex] = []
    for pole in sorted(found, key=lambda p: p.real):
        near = lo < pole.real < hi and abs(pole.imag) < spread * pole.real
        if near and all(abs(pole - other) > 1e-9 * abs(pole) for other in kept):
            kept.append(pole)
    return kept


def scaled_wronskian(geo: Geometry, kappa: Array, pol: str) -> Array:
    """The Wronskian over the size of its terms: of order one away from modes."""
    both = fields.halves(geo, kappa, pol)
    first = both.up.slope * both.down.value
    second = both.up.value * both.down.slope
    return (first + second) / (np.abs(first) + np.abs(second))


def _candidates(geo: Geometry, pol: str, grid: Array) -> list[complex]:
    w = scaled_wronskian(geo, grid, pol)
    size = np.abs(w)
    dips = np.flatnonzero((size[1:-1] <= size[:-2]) & (size[1:-1] <= size[2:])) + 1
    flips = np.flatnonzero(np.sign(w.real[1:]) != np.sign(w.real[:-1]))
    # A secant start beats the grid point where the mode is narrower than the grid.
    share = np.abs(w.real[flips]) / (np.abs(w.real[flips]) + np.abs(w.real[flips + 1]))
    starts = grid[flips] + share * (grid[flips + 1] - grid[flips])
    return [complex(k) for k in np.concatenate([grid[dips], starts])]


def polished(geo: Geometry, start: complex) -> complex:
    """The zero of the Wronskian, of either polarization, nearest to a start beside it."""
    ends = [p for pol in "ps" for p in _polish(geo, pol, [start])]
    return min(ends, key=lambda p: abs(p - start))


def _polish(geo: Geometry, pol: str, starts: list[complex]) -> list[complex]:
    """Newton on the bare Wronskian with a central difference, all starts at once."""
    if not starts:
        return []
    kappa = np.array(starts, dtype=complex)
    for _ in range(40):
        h = 1e-6 * np.abs(kappa)
        samples = [fields.halves(geo, k, pol) for k in (kappa, kappa + h, kappa - h)]
        w0, w1, w2 = (
            s.wronskian * np.exp(s.up.growth + s.down.growth - _growth(samples[0])) for s in samples
        )
        with np.errstate(all="ignore"):
            step = w0 * 2 * h / (w1 - w2)
        step = np.where(np.isfinite(step), step, 0.0)
        limit = 0.02 * np.abs(kappa)
        step = step * np.minimum(1, limit / np.maximum(np.abs(step), 1e-300))
        kappa = kappa - step
    settled = np.abs(step) < 1e-8 * np.abs(kappa)
    return [complex(k) for k in kappa[settled]]


def _growth(both: fields.Halves) -> Array:
    return both.up.growth + both.down.growth
