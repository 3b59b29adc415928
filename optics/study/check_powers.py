"""Check of every destination by adaptive quadrature on the real axis.

Plain formulas (Lukosz & Kunz 1977; Neyts 1998; uniaxial emitter films after Penninck et al.
2011, from memory) on `check_stack`'s fields, integrated by SciPy's adaptive Gauss-Kronrod
rule. Absorbed light is what neither leaves nor is trapped, while the engine integrates the
fields inside the films.

Poles of sharp modes become break points. Where one is too sharp for any quadrature (a guide
without loss) the path steps around it off the axis, where the dissipated power is analytic:
below the axis, or above it for a mode that runs backward.
"""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.check_resonances import Resonance, resonances
from optics.study.check_stack import Layers, admittance, normal

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from numpy.typing import NDArray

    Array = NDArray[np.complex128]
    Floats = NDArray[np.float64]
    Integrand = Callable[[Floats], Floats]

#: Quantities of `Powers.budget`; `near_field` is a part of the others, and a matched one is what
#: would leave through a slab's exit if that alone were index-matched.
QUANTITIES = (
    "dissipated",
    "air_bottom",
    "air_top",
    "substrate",
    "cover",
    "guided",
    "surface_plasmon",
    "absorbed",
    "near_field",
    "matched_bottom",
    "matched_top",
)
#: Those that add up to the first.
DESTINATIONS = QUANTITIES[1:8]
_ALL, _AIR, _SLAB = 0, (1, 2), (3, 4)
_GUIDED, _PLASMON, _ABSORBED, _NEAR = 5, 6, 7, 8
_MATCHED = (9, 10)
_STUCK = 1e-280  # light that a slab's faces and films never let go of
_ABSOLUTE, _RELATIVE = 3e-9, 3e-9
_MOST_SUBDIVISIONS = 1000
_DEEP = 8.0  # resonances are looked for up to this multiple of the start of the near field


class Powers(NamedTuple):
    """Independent budget at one wavelength."""

    budget: Floats  # (quantity, orientation vertical|horizontal, z) over bulk rates
    error: float  # what the quadrature says of the worst value, over the dissipated power
    note: str  # what had to be done
    failure: str  # why there is no result; empty if there is one


def powers(layers: Layers, position_nm: Sequence[float]) -> Powers:
    """Integrate the dissipated power and all destinations.

    Parameters
    ----------
    layers : Layers
    position_nm : sequence of float, length z
        From the bottom face of the emitter film.
    """
    media = layers.ordered(0)
    indices = [float(np.sqrt(eps).real) for m in media for eps in (m.eps_o, m.eps_e)]
    far = 2.0 * max(indices)
    line = max(o.n_outer for o in layers.outside if o.kind != "absorbing")
    counted = [o for side, o in enumerate(layers.outside) if o.kind != "absorbing"]
    breaks = {0.0, line, far, float(np.sqrt(layers.own.eps_o).real)}
    breaks |= {float(np.sqrt(layers.own.eps_e).real)}
    breaks |= {value for o in counted for value in (o.n_outer, o.n_out)}
    edges = [*sorted(b for b in breaks if b <= far), _DEEP * far]
    found = resonances(layers, edges)
    z = np.asarray(position_nm, dtype=float)
    below = [r for r in found if r.place.real < line and r.sharp]
    nothing = np.full((len(QUANTITIES), 2, z.size), np.nan)
    if below:
        text = f"a resonance at n_eff = {below[0].place.real:.6f} is too sharp for real quadrature"
        return Powers(nothing, np.inf, "", text)
    total, error = np.zeros_like(nothing), np.zeros_like(nothing)
    near = np.zeros_like(nothing)
    detours = [r for r in found if r.sharp]
    try:
        for lo, hi in _pieces(edges, found):
            part, miss = _on_axis(layers, z, lo, hi, line)
            total, error, near = total + part, error + miss, near + (part if lo >= far else 0.0)
        for resonance in detours:
            part, miss = _around(layers, z, resonance, line)
            beyond = resonance.lo >= far
            total, error, near = total + part, error + miss, near + (part if beyond else 0.0)
        part, miss = _tail(layers, z, _DEEP * far, line)
    except _NotConverged as reason:
        return Powers(nothing, np.inf, "", str(reason))
    total, error = total + part, error + miss
    total[_NEAR] = (near + part)[_ALL]
    note = f"the path steps around {len(detours)} guided mode(s) without loss" if detours else ""
    return Powers(total, float((error / total[_ALL]).max()), note, "")


class _NotConverged(Exception):  # noqa: N818
    """The quadrature gave up."""


def _pieces(edges: Sequence[float], found: Sequence[Resonance]) -> list[tuple[float, float]]:
    """Intervals between break points; gaps are left around sharp resonances."""
    cuts = [(edge, edge) for edge in edges]
    cuts += [(r.lo, r.hi) if r.sharp else (r.place.real,) * 2 for r in found]
    cuts = sorted(c for c in cuts if edges[0] <= c[0] and c[1] <= edges[-1])
    return [(left[1], right[0]) for left, right in pairwise(cuts) if right[0] - left[1] > 1e-13]


def _integrate(integrand: Integrand, lo: float, hi: float) -> tuple[Floats, Floats]:
    from scipy.integrate import cubature

    found = cubature(
        lambda t: integrand(t[:, 0]), [lo], [hi], rule="gk21", atol=_ABSOLUTE, rtol=_RELATIVE,
        max_subdivisions=_MOST_SUBDIVISIONS,
    )  # fmt: skip
    if found.status != "converged":
        raise _NotConverged(f"adaptive quadrature did not converge in {_MOST_SUBDIVISIONS} steps")
    return found.estimate, found.error


def _on_axis(layers: Layers, z: Floats, lo: float, hi: float, line: float) -> tuple[Floats, Floats]:
    """One piece of the real axis; square roots at its ends are smoothed."""

    def integrand(t: Floats) -> Floats:
        s = np.sin(t)
        u = (lo + (hi - lo) * s * s).astype(np.complex128)
        du = ((hi - lo) * np.sin(2.0 * t)).astype(np.complex128)
        return _per_wavevector(layers, z, u, du, line)

    return _integrate(integrand, 0.0, 0.5 * np.pi)


def _tail(layers: Layers, z: Floats, far: float, line: float) -> tuple[Floats, Floats]:
    def integrand(t: Floats) -> Floats:
        u = (far / t).astype(np.complex128)
        return _per_wavevector(layers, z, u, (far / t**2).astype(np.complex128), line)

    return _integrate(integrand, 0.0, 1.0)


def _around(layers: Layers, z: Floats, resonance: Resonance, line: float) -> tuple[Floats, Floats]:
    """Half circle below a pole (above one that runs backward), from one end of its gap."""
    center, radius = 0.5 * (resonance.lo + resonance.hi), 0.5 * (resonance.hi - resonance.lo)

    def integrand(t: Floats) -> Floats:
        arrow: Array = np.asarray(np.exp(1j * t))
        return _per_wavevector(layers, z, center + radius * arrow, 1j * radius * arrow, line)

    if resonance.forward:
        return _integrate(integrand, np.pi, 2.0 * np.pi)
    part, miss = _integrate(integrand, 0.0, np.pi)
    return -part, miss


def _per_wavevector(layers: Layers, z: Floats, u: Array, du: Array, line: float) -> Floats:
    """All quantities per step of the path: (n, quantity, orientation, z)."""
    values = np.zeros((u.size, len(QUANTITIES), 2, z.size))
    own, bulk = layers.own, layers.bulk
    beyond_emitter = u.real > max(np.sqrt(own.eps_o).real, np.sqrt(own.eps_e).real)
    start = max(line, float(np.sqrt(own.eps_e).real)) if _has_plasmon(layers) else np.inf
    trapped = u.real >= line
    for pol in "sp":
        kz = normal(own, u, pol)
        y = admittance(own, u, pol)
        down, up = layers.half(u, pol, 0), layers.half(u, pol, 1)
        phase = 1j * layers.k0 * kz[:, None]
        to_bottom = np.exp(phase * z)
        to_top = np.exp(phase * (own.thickness_nm - z))
        after = np.zeros((6, 2, u.size))
        if not trapped.all():
            after = _destinations(layers, u.real, pol)
        for orientation in (0, 1) if pol == "p" else (1,):
            sign = -1.0 if pol == "p" and orientation == 1 else 1.0
            a, b = sign * up.r[:, None] * to_top**2, sign * down.r[:, None] * to_bottom**2
            if pol == "s":
                factor, square = 0.75 * u / kz, 0.375 * u / np.abs(kz) ** 2
            elif orientation == 0:
                ratio = own.eps_o / own.eps_e
                factor = 1.5 * u**3 * ratio / own.eps_e / kz
                square = 0.75 * u**3 * ratio**2 / np.abs(kz) ** 2
            else:
                factor, square = 0.75 * u * y, 0.375 * u
            open_end = (1.0 + a) * (1.0 + b) / (1.0 - a * b)
            # Beyond the emitter's light line the bulk term carries nothing on the real axis.
            closed_end = (a + b + 2.0 * a * b) / (1.0 - a * b)
            bracket = np.where(beyond_emitter[:, None], closed_end, open_end)
            lost = (factor[:, None] * bracket * du[:, None]).real / bulk[orientation]
            values[:, _ALL, orientation] += lost
            plasmon = (u.real >= start) & (pol == "p")
            kept = np.where((trapped & plasmon)[:, None], lost, 0.0)
            values[:, _PLASMON, orientation] += kept
            values[:, _GUIDED, orientation] += np.where(trapped[:, None], lost, 0.0) - kept
            weight = (square * du).real[:, None] / bulk[orientation]
            sent = np.stack(
                [
                    np.abs((1.0 + a) * to_bottom * down.t[:, None] / (1.0 - a * b)) ** 2
                    * (weight * down.flux[:, None]),
                    np.abs((1.0 + b) * to_top * up.t[:, None] / (1.0 - a * b)) ** 2
                    * (weight * up.flux[:, None]),
                ]
            )
            sent = np.where(trapped[None, :, None], 0.0, sent)
            known = np.einsum("dsn,snz->dnz", after, sent)
            for place, part in zip((*_AIR, *_SLAB, *_MATCHED), known, strict=True):
                values[:, place, orientation] += part
            rest = np.where(trapped[:, None], 0.0, lost) - known[:4].sum(axis=0)
            values[:, _ABSORBED, orientation] += rest
    return values


def _has_plasmon(layers: Layers) -> bool:
    media = [*layers.films, *(o.medium for o in layers.outside if o.kind == "absorbing")]
    return any(m.eps_o.real < 0.0 or m.eps_e.real < 0.0 for m in media)


def _destinations(layers: Layers, u: Floats, pol: str) -> Floats:
    """Share of unit first arrivals (bottom, top) that ends in air_bottom, air_top, slabs.

    Returns
    -------
    float (6, 2, n)
        air_bottom, air_top, substrate, cover, and what would leave through the bottom's, the
        top's slab were its exit matched, by side of arrival.
    """
    lines = [o.exit_line for o in layers.outside]
    once, face = np.zeros((2, u.size)), np.ones((2, u.size))
    for side, o in enumerate(layers.outside):
        inside = u < o.n_outer
        cosine = np.sqrt(np.where(inside, 1.0 - (u / o.n_outer) ** 2, 1.0))
        once[side] = np.where(inside, np.exp(-o.loss / cosine), 0.0)
        if o.kind in ("open", "matched"):
            face[side] = 0.0
        elif o.kind == "planar":
            face[side] = _fresnel(u, o.n_outer, o.n_out, pol)
    slabbed = np.array([o.kind == "planar" for o in layers.outside])[:, None]
    back = np.where(slabbed, once**2 * face, 0.0)
    reflect, through = _from_outside(layers, u, pol)
    leaves = once * (1.0 - face)
    leaves[[o.kind == "absorbing" for o in layers.outside]] = 0.0
    free = u < max(lines)
    flux = _fluxes(reflect, through, np.where(free, back, 0.0))
    shares = np.zeros((6, 2, u.size))
    for side, o in enumerate(layers.outside):
        shares[side] = np.where(free, flux[:, side, :].T * leaves[side], 0.0)
        if o.kind != "absorbing":
            shares[2 + side, side] = np.where(free, 0.0, 1.0)
        if o.kind in ("planar", "matched"):
            other_back = back.copy()
            other_back[side] = 0.0
            arriving = _fluxes(reflect, through, other_back)[:, side, :]
            shares[4 + side] = arriving.T * once[side]
    return shares


def _fluxes(reflect: Floats, through: Floats, back: Floats) -> Floats:
    """Flux into each side's slab by side of first arrival (n, 2, 2), all bounces included.

    I_b = first + R_b g_b I_b + T g_t I_t, and the same for the top, with g what a slab returns.
    """
    system = np.zeros((through.size, 2, 2))
    system[:, 0, 0] = 1.0 - reflect[0] * back[0]
    system[:, 1, 1] = 1.0 - reflect[1] * back[1]
    system[:, 0, 1], system[:, 1, 0] = -through * back[1], -through * back[0]
    stuck = np.abs(np.linalg.det(system)) < _STUCK
    system[stuck] = np.eye(2)
    return np.asarray(np.linalg.inv(system), dtype=np.float64)


def _from_outside(layers: Layers, u: Floats, pol: str) -> tuple[Floats, Floats]:
    """Reflectance from bottom and top (2, n) and transmittance (n,) of the whole stack."""
    at = u.astype(np.complex128)
    reflect, through = np.ones((2, u.size)), np.zeros(u.size)
    flux = [admittance(o.medium, at, pol).real for o in layers.outside]
    for side in (0, 1):
        travels = u < layers.outside[side].n_outer
        found, amplitude = layers.whole(at, pol, side)
        reflect[side] = np.where(travels, found, 1.0)
        if side == 0:
            carried = np.abs(amplitude) ** 2 * flux[1] / np.where(travels, flux[0], 1.0)
            through = np.where(travels, carried, 0.0)
    return reflect, through


def _fresnel(u: Floats, n: float, n_out: float, pol: str) -> Floats:
    """Reflectance of a slab's outer face, by the angles on both sides."""
    sine_in, sine_out = np.minimum(u / n, 1.0), np.minimum(u / n_out, 1.0)
    cos_in, cos_out = np.sqrt(1.0 - sine_in**2), np.sqrt(1.0 - sine_out**2)
    if pol == "s":
        r = (n * cos_in - n_out * cos_out) / (n * cos_in + n_out * cos_out + 1e-300)
    else:
        r = (n_out * cos_in - n * cos_out) / (n_out * cos_in + n * cos_out + 1e-300)
    return np.where(u < n_out, r**2, 1.0)
