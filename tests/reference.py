"""The slow literal model of dipole emission in a planar stack: what the engine must equal.

Written from the textbook, twice, without a line of the engine: `reference_fields` (fields
and Wronskian, double precision, adaptive quadrature) gives the numbers, and
`reference_amplitudes` (interface and propagation matrices, mpmath) repeats them with other
formulas, other digits and another quadrature rule. Their difference is the stated error.

Rates are relative to the orientation's own rate in the unbounded emitter medium; `v` is the
vertical dipole, `h` the in-plane one (p and s together). kappa is in units of k0.

Path beyond the outer light lines:

- every Re eps > 0: a half ellipse below the axis (all poles are those of forward modes and
  lie on or above the axis), then, with absorption, a real tail;
- some Re eps < 0: the real axis, since backward modes lie below it; panels start at the
  poles that were located. A pole closer than 1e-6 to the axis is passed on a half circle:
  below a forward mode, above a backward one.

`path` in the result says which. Below the outer light lines everything is on the real axis.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from itertools import pairwise
from typing import Any

import numpy as np
import reference_amplitudes as amplitudes
import reference_exits as exits
import reference_fields as fields
import reference_paths as paths
from mpmath import mp  # type: ignore[import-untyped]
from reference_geometry import Geometry, geometry

Slab = dict[str, Any]
NUMERICALLY_REAL = 1e-6
SOURCES = ("v_p", "h_p", "h_s")
DESTINATIONS = (*exits.RADIATIVE[:4], "guided", "surface_plasmon", "absorbed")


@dataclass(frozen=True, slots=True)
class Outcome:
    """Rates of one orientation, relative to its own bulk rate.

    `destinations` sum to `dissipated` up to the quadrature and rounding errors: absorption
    is the volume integral, not the rest. `near_field` is the part of `dissipated` beyond
    twice the largest index; `matched_*` is None where that side has no slab.
    """

    dissipated: float
    destinations: dict[str, float]
    near_field: float
    matched_bottom: float | None
    matched_top: float | None

    @property
    def imbalance(self) -> float:
        return (self.dissipated - sum(self.destinations.values())) / self.dissipated


@dataclass(frozen=True, slots=True)
class Result:
    """Both orientations, the quadrature's own error estimate and the path taken."""

    v: Outcome
    h: Outcome
    error: float
    path: str
    panels: int


@dataclass(frozen=True, slots=True)
class Stretch:
    """One piece of path with its part in the account: "below", "guided", "plasmon", "near"."""

    part: str
    piece: paths.Piece


@dataclass(frozen=True)
class Reference:
    """A stack and a dipole: films (eps_o, eps_e, d_nm) from bottom to top, lossless emitter.

    `bottom`, `top`: permittivity next to the films (the slab's (Re n)^2, or the
    surroundings, complex on one side at most). `z_nm`: from the emitter film's bottom face.
    `substrate`, `cover`: None or dict(k, thickness_nm, exit, outside_n).
    """

    wavelength_nm: float
    films: list[tuple[complex, complex, float]]
    bottom: complex
    top: complex
    emitter: int
    z_nm: float
    substrate: Slab | None = None
    cover: Slab | None = None
    _made: list[Geometry] = field(default_factory=list, repr=False, compare=False)

    @property
    def geometry(self) -> Geometry:
        if not self._made:
            given = (self.bottom, self.top, self.emitter, self.z_nm, self.substrate, self.cover)
            self._made.append(geometry(self.wavelength_nm, self.films, *given))
        return self._made[0]

    def stretches(self) -> list[Stretch]:
        """The whole path, from kappa = 0 to where nothing is left."""
        return _below(self.geometry) + _beyond(self.geometry)

    def destinations(self, tolerance: float = 1e-11) -> Result:
        """First route: adaptive quadrature of the field formulas, in double precision.

        Raises
        ------
        ArithmeticError
            If the quadrature did not settle to 1e-6 of the dissipated rate: a mode below the
            outer light lines that leaks so little (through a micrometer-thick barrier) that
            doubles cannot resolve it. What leaves is not analytic, so no detour helps there.
        """
        parts, error, panels = _fresh(), 0.0, 0
        for stretch in self.stretches():
            got = paths.integrate(_density(self.geometry, stretch.part), stretch.piece, tolerance)
            _book(parts, stretch.part, got.value)
            error, panels = error + got.error, panels + len(got.panels)
        scale = max(1.0, parts["v"]["dissipated"], parts["h"]["dissipated"])
        if not error < 1e-6 * scale:
            raise ArithmeticError(f"quadrature error {error:.1e}: a mode too close to the axis")
        return _result(self.geometry, parts, error, panels)

    def repeated(self, digits: int = 22, nodes: int = 16, tolerance: float = 1e-11) -> Result:
        """Second route: matrix formulas in mpmath, another Gauss rule on the same panels."""
        parts, panels, geo = _fresh(), 0, self.geometry
        with mp.workdps(digits):
            rule = _mp_legendre(nodes)
            for stretch in self.stretches():
                fast = _density(geo, stretch.part)
                found = paths.integrate(fast, stretch.piece, tolerance).panels
                literal = _literal(geo, stretch.part)
                total = sum(_mp_panel(literal, stretch.piece, panel, rule) for panel in found)
                _book(parts, stretch.part, np.array(total, dtype=float))
                panels += len(found)
        return _result(geo, parts, float("nan"), panels)


def _below(geo: Geometry) -> list[Stretch]:
    """Real axis up to the largest outer light line, cut at every light line."""
    end = geo.largest_outer_line
    lines = {0.0, end, *geo.outer_lines}
    for slab in (geo.substrate, geo.cover):
        if slab:
            lines |= {slab.outside, slab.index}
    edges = sorted(x for x in lines if x <= end)
    near = paths.poles(geo, 1e-3 * end, end)
    return [
        Stretch("below", paths.Piece("line", a, b, breaks=_around(near)))
        for a, b in pairwise(edges)
    ]


def _around(poles: list[complex]) -> tuple[float, ...]:
    """Break points that close in on each pole on the scale of its distance to the axis."""
    scales = [0.0, *(s * 8.0**k for k in range(8) for s in (-1, 1))]
    return tuple(p.real + s * abs(p.imag) for p in poles for s in scales)


def _beyond(geo: Geometry) -> list[Stretch]:
    start, end = geo.largest_outer_line, geo.reach()
    near = min(geo.near_field_line, end)
    if not geo.metallic:
        depth = min(0.3, (near - start) / 2)
        path = [Stretch("guided", paths.Piece("ellipse", start, near, depth))]
        tail = [Stretch("near_guided", paths.Piece("log", near, end))]
        return path + (tail if end > near else [])
    own = geo.emitter.extraordinary.real**0.5
    edges = [("guided", start, own), ("plasmon", max(start, own), near)]
    edges += [("near_plasmon", near, end)]
    return [
        Stretch(part, piece)
        for part, lo, hi in edges
        if hi > lo
        for piece in _real_axis(geo, lo, hi, "log" if part.startswith("near") else "line")
    ]


def _real_axis(geo: Geometry, lo: float, hi: float, kind: str) -> list[paths.Piece]:
    """Real pieces between half circles around poles that are numerically real."""
    near = paths.poles(geo, lo, hi)
    breaks = _around([p for p in near if abs(p.imag) >= NUMERICALLY_REAL])
    at, pieces = lo, []
    for pole in near:
        if abs(pole.imag) >= NUMERICALLY_REAL:
            continue
        others = [abs(pole - p) for p in near if p != pole] + [pole.real - lo, hi - pole.real]
        radius = 0.3 * min([*others, 0.1])
        side = 1.0 if _forward(geo, pole) else -1.0
        left, right = pole.real - radius, pole.real + radius
        pieces.append(paths.Piece(kind, at, left, breaks=breaks))
        pieces.append(paths.Piece("ellipse", left, right, side * radius))
        at = right
    return [*pieces, paths.Piece(kind, at, hi, breaks=breaks)]


def _forward(geo: Geometry, pole: complex) -> bool:
    """Whether a little absorption in every film lifts the pole above the axis."""
    if abs(pole.imag) > 1e-10:
        return pole.imag > 0

    def lossy(film: Any) -> Any:
        extra = 1e-7j
        return replace(
            film, ordinary=film.ordinary + extra, extraordinary=film.extraordinary + extra
        )

    changed = replace(geo, below=tuple(map(lossy, geo.below)), above=tuple(map(lossy, geo.above)))
    moved = paths.polished(changed, pole)
    return moved.imag > 0


def _density(geo: Geometry, part: str) -> Callable[[Any], Any]:
    if part == "below":
        return lambda kappa: exits.densities(geo, kappa)

    def analytic(kappa: Any) -> Any:
        both = {pol: fields.halves(geo, kappa, pol) for pol in "ps"}
        rows = [fields.dissipated(geo, kappa, s, both[fields.SOURCES[s]]) for s in SOURCES]
        return np.array(rows)

    return analytic


def _literal(geo: Geometry, part: str) -> Callable[[Any], list[Any]]:
    if part != "below":
        return lambda kappa: [
            amplitudes.emission(geo, kappa, s, losses=False).dissipated for s in SOURCES
        ]

    def shares(kappa: Any) -> list[Any]:
        found = amplitudes.destinations(geo, kappa)
        return [found[o].get(name, mp.mpf(0)) for o in "vh" for name in exits.COLUMNS]

    return shares


def _mp_legendre(nodes: int) -> list[tuple[Any, Any]]:
    """Gauss-Legendre nodes and weights on (-1, 1), polished to the working precision."""
    rule = []
    for guess in np.polynomial.legendre.leggauss(nodes)[0]:
        x = mp.mpf(float(guess))
        for _ in range(4):
            before, now = mp.legendre(nodes - 1, x), mp.legendre(nodes, x)
            slope = nodes * (before - x * now) / (1 - x * x)
            x = x - now / slope
        rule.append((x, 2 / ((1 - x * x) * slope**2)))
    return rule


def _mp_panel(
    literal: Callable[[Any], list[Any]], piece: paths.Piece, panel: tuple[float, float], rule: Any
) -> Any:
    a, b = mp.mpf(panel[0]), mp.mpf(panel[1])
    total: Any = 0
    for x, weight in rule:
        kappa, rate = piece.at((a + b) / 2 + (b - a) / 2 * x, mp)
        rows = [mp.re(row * rate) * weight * (b - a) / 2 for row in literal(kappa)]
        total = total + np.array(rows, dtype=object)
    return total


def _fresh() -> dict[str, Any]:
    names = (*exits.COLUMNS, "guided", "surface_plasmon", "near_field")
    return {o: dict.fromkeys(names, 0.0) for o in "vh"}


def _book(parts: dict[str, Any], part: str, value: Any) -> None:
    """Add the integrals of one stretch to the account of both orientations."""
    if part == "below":
        for row, (o, name) in zip(
            value, [(o, n) for o in "vh" for n in exits.COLUMNS], strict=True
        ):
            parts[o][name] += float(row)
        return
    v_p, h_p, h_s = (float(x) for x in value)
    tm = "surface_plasmon" if part.endswith("plasmon") else "guided"
    for o, p, s in (("v", v_p, 0.0), ("h", h_p, h_s)):
        parts[o]["dissipated"] += p + s
        parts[o][tm] += p
        parts[o]["guided"] += s
        if part.startswith("near"):
            parts[o]["near_field"] += p + s


def _result(geo: Geometry, parts: dict[str, Any], error: float, panels: int) -> Result:
    outcomes = []
    for o in "vh":
        got = parts[o]
        outcomes.append(
            Outcome(
                dissipated=got["dissipated"],
                destinations={name: got[name] for name in DESTINATIONS},
                near_field=got["near_field"],
                matched_bottom=got["matched_bottom"] if geo.substrate else None,
                matched_top=got["matched_top"] if geo.cover else None,
            )
        )
    path = "real axis with poles located" if geo.metallic else "half ellipse below the axis"
    return Result(outcomes[0], outcomes[1], error, path, panels)
