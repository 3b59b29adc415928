"""First literal route: tangential fields and their Wronskian, in double precision.

The wave equations of a uniaxial film (axis along z, k0 = 1, time factor exp(-i omega t))

    s:  E'' = -(eps_o - kappa^2) E                          with V = E'
    p:  H'' = -(eps_o - eps_o/eps_e kappa^2) H              with V = H'/eps_o

keep (E or H, V) continuous at every interface. Marching the outgoing wave of each outer
medium inward gives two solutions u+ and u-; a source is a jump in V (vertical dipole, and
horizontal dipole in s) or in H (horizontal dipole in p), and the field is the Green's
function built from u+ and u-. No reflection coefficient and no branch of kz inside the
films appears. Power flow is Im(u* V)/2, absorption the volume integral of Im eps |E|^2.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from reference_geometry import Film, Geometry, Slab

Array = Any  # complex or float numpy array over kappa


@dataclass(frozen=True, slots=True)
class March:
    """An outgoing solution of unit amplitude outside, carried to the inner face.

    `value`, `slope`: field and V at the inner face, times exp(-growth); `outgoing`: Re of
    the outer admittance (twice the flux outside); `absorbed`: twice the power lost in each
    film, times exp(-2 growth), in the order the films were given.
    """

    value: Array
    slope: Array
    growth: Array
    outgoing: Array
    absorbed: list[Array]


def outward_root(squared: Array) -> Array:
    """Normal wavenumber with Im >= 0 (outgoing or decaying)."""
    root = np.sqrt(np.asarray(squared, dtype=complex))
    return np.where(root.imag < 0, -root, root)


def normal_wavenumber(film: Film, kappa: Array, pol: str) -> Array:
    ratio = film.ordinary / film.extraordinary if pol == "p" else 1.0
    return outward_root(film.ordinary - ratio * kappa**2)


def march(films: tuple[Film, ...], outer: complex, kappa: Array, pol: str) -> March:
    """Carry the outgoing wave through `films` (given from the inner face outward)."""
    kz = outward_root(outer - kappa**2)
    admittance = kz / outer if pol == "p" else kz
    value, slope = np.ones_like(kz), 1j * admittance
    growth = np.zeros(np.shape(kappa))
    raw: list[tuple[Array, Array]] = []
    for film in reversed(films):
        q = normal_wavenumber(film, kappa, pol)
        weight = film.ordinary if pol == "p" else 1.0
        lost = _absorbed(film, q, value, slope, kappa, pol)
        step = np.expm1(2j * q * film.depth)
        cosine, sine = 1 + step / 2, step / 2j
        # sin(q d)/q, which is d on the film's own light line.
        reduced = np.where(q == 0, film.depth, sine / np.where(q == 0, 1.0, q))
        value, slope = (
            value * cosine - weight * slope * reduced,
            slope * cosine + q / weight * value * sine,
        )
        growth = growth + q.imag * film.depth
        raw.append((lost, growth))
    absorbed = [lost * np.exp(2 * (at - growth)) for lost, at in reversed(raw)]
    return March(value, slope, growth, admittance.real, absorbed)


def _absorbed(film: Film, q: Array, value: Array, slope: Array, kappa: Array, pol: str) -> Array:
    """Twice the power lost in one film, times exp(-2 Im q depth).

    Closed-form integral of |A exp(iqy) + B exp(-iqy)|^2 over the depth y from the outer
    face, and of its derivative.
    """
    if not film.absorbs:
        return np.zeros(np.shape(kappa))
    weight = film.ordinary if pol == "p" else 1.0
    a = (value + 1j * weight * slope / q) / 2
    b = (value - 1j * weight * slope / q) / 2
    decay = film.depth * _mean_exponential(-2 * q.imag * film.depth)
    beat = film.depth * _mean_exponential(2j * q.real * film.depth)
    fade = np.exp(-2 * q.imag * film.depth)
    even = np.abs(a) ** 2 * decay * fade + np.abs(b) ** 2 * decay
    cross = 2 * (a * b.conj() * beat).real * fade
    squared, steepness = even + cross, np.abs(q) ** 2 * (even - cross)
    if pol == "s":
        return film.ordinary.imag * squared
    in_plane = film.ordinary.imag / abs(film.ordinary) ** 2 * steepness
    normal = film.extraordinary.imag / abs(film.extraordinary) ** 2 * kappa**2 * squared
    return in_plane + normal


def _mean_exponential(x: Array) -> Array:
    """(exp(x) - 1)/x, 1 at x = 0."""
    safe = np.where(x == 0, 1.0, x)
    return np.where(x == 0, 1.0, np.expm1(safe) / safe)


@dataclass(frozen=True, slots=True)
class Halves:
    """Both half stacks seen from the dipole, for one polarization."""

    up: March
    down: March

    @property
    def wronskian(self) -> Array:
        # u- was marched in the mirrored coordinate: its V changes sign.
        return self.up.slope * self.down.value + self.up.value * self.down.slope


def halves(geo: Geometry, kappa: Array, pol: str) -> Halves:
    return Halves(march(geo.above, geo.top, kappa, pol), march(geo.below, geo.bottom, kappa, pol))


SOURCES = {"v_p": "p", "h_p": "p", "h_s": "s"}


def prefactor(geo: Geometry, kappa: Array, source: str) -> Array:
    """Power per d kappa over the field at the source, relative to the own bulk rate."""
    vertical, horizontal = geo.bulk_rates
    if source == "v_p":
        return 1.5 * kappa**3 / geo.emitter.extraordinary.real**2 / vertical
    return 0.75 * kappa / horizontal


def dissipated(geo: Geometry, kappa: Array, source: str, both: Halves | None = None) -> Array:
    """Analytic function of kappa whose real part is the dissipated power per d kappa."""
    both = both or halves(geo, kappa, SOURCES[source])
    if source == "h_p":
        local = -2j * both.up.slope * both.down.slope / both.wronskian
    else:
        local = 2j * both.up.value * both.down.value / both.wronskian
    return prefactor(geo, kappa, source) * local


@dataclass(frozen=True, slots=True)
class Direct:
    """The dipole's own field: flux out on each side, power lost in films below and above."""

    down: Array
    up: Array
    absorbed_below: list[Array]
    absorbed_above: list[Array]


def direct(geo: Geometry, kappa: Array, source: str, both: Halves) -> Direct:
    if source == "h_p":
        up_scale, down_scale = both.down.slope, both.up.slope
    else:
        up_scale, down_scale = both.down.value, both.up.value
    unit = 0.5 * prefactor(geo, kappa, source)
    up = unit * np.abs(2 * up_scale / both.wronskian) ** 2
    down = unit * np.abs(2 * down_scale / both.wronskian) ** 2
    return Direct(
        down=down * both.down.outgoing * np.exp(-2 * both.down.growth),
        up=up * both.up.outgoing * np.exp(-2 * both.up.growth),
        absorbed_below=[down * lost for lost in both.down.absorbed],
        absorbed_above=[up * lost for lost in both.up.absorbed],
    )


@dataclass(frozen=True, slots=True)
class Response:
    """Reflectance, transmittance and absorptance (volume integral) of the whole stack."""

    reflected: Array
    transmitted: Array
    absorbed: Array


def response(geo: Geometry, kappa: Array, pol: str, side: str) -> Response:
    """The whole stack seen from the outer medium on `side` (transparent, kappa below its line)."""
    if side == "bottom":
        films, inner, outer = geo.whole, geo.bottom, geo.top
    else:
        films, inner, outer = tuple(reversed(geo.whole)), geo.top, geo.bottom
    wave = march(films, outer, kappa, pol)
    kz = outward_root(inner - kappa**2)
    admittance = kz / inner if pol == "p" else kz
    incident = (wave.value + wave.slope / (1j * admittance)) / 2
    returned = (wave.value - wave.slope / (1j * admittance)) / 2
    power = admittance.real * np.abs(incident) ** 2
    return Response(
        reflected=np.abs(returned / incident) ** 2,
        transmitted=wave.outgoing * np.exp(-2 * wave.growth) / power,
        absorbed=sum(wave.absorbed, np.zeros(np.shape(kappa))) / power,
    )


def slab_pass(slab: Slab, kappa: Array, pol: str) -> tuple[Array, Array]:
    """Transmittance of one pass through the slab and reflectance of its outer face."""
    kz = np.sqrt(slab.index**2 - kappa**2)
    passed = np.exp(-slab.exponent * slab.index / kz)
    if slab.matched:
        return passed, np.zeros_like(passed)
    outside = outward_root(slab.outside**2 - kappa**2)
    weights = (slab.index**2, slab.outside**2) if pol == "p" else (1.0, 1.0)
    inner, outer = kz / weights[0], outside / weights[1]
    return passed, np.abs((inner - outer) / (inner + outer)) ** 2
