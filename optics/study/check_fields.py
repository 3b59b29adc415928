"""Checks against a general thin-film library (tmm): far field by reciprocity, light from outside.

Reciprocity: a dipole's emission into a direction, s or p, is the squared field that a plane wave
from there makes at the dipole. In units of the rate in vacuum, into a medium of index n,
dP/dOmega = 3 n / (8 pi) |E . p|^2 for a wave of |E| = 1 and a unit dipole p.
"""

from __future__ import annotations

import contextlib
import io
from dataclasses import replace
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from optics.kernels.directions import lit_from_outside, sent_into_directions
from optics.study.check_rows import Place, Row, compared, not_checked
from optics.study.check_stack import SIDES, Layers, Medium, admittance, normal

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from numpy.typing import NDArray

    from optics.kernels.problem import Problem

TOLERANCE = 1e-9
_REAL = 1e-12  # an equivalent thickness counts as real up to this share
#: channel of the engine -> (name, orientation, polarization)
CHANNELS = (("vertical", "p"), ("horizontal", "p"), ("horizontal", "s"))
_LIBRARY = "plane wave by tmm"
_OWN = "plane wave by effective admittances"


class Unsuitable(Exception):  # noqa: N818  (not an error: it becomes a row of the result)
    """A stack that the library cannot stand for; the message says why."""


class Isotropic(NamedTuple):
    """Stand-ins for all media at one direction and polarization."""

    eps: tuple[complex, ...]
    thickness_nm: tuple[float, ...]


def far_field_rows(
    layers: Layers,
    problem: Problem,
    position_nm: Sequence[float],
    angles_deg: Sequence[float],
    place: Place,
) -> Iterator[Row]:
    """Compare the engine's far field on both sides with reciprocity.

    Parameters
    ----------
    layers : Layers
    problem : Problem
        The same wavelength and positions for the engine.
    position_nm : sequence of float
    angles_deg : sequence of float
        In the media next to the films, 0 to below 90.
    place : Place
        Emitter and wavelength.
    """
    cosine = np.cos(np.deg2rad(angles_deg))
    sine = np.sin(np.deg2rad(angles_deg))
    for side, outside in enumerate(layers.outside):
        if outside.kind == "absorbing":
            reason = "the surroundings absorb: there is no far field on this side"
            where = replace(place, side=SIDES[side])
            yield not_checked("far field", "power per solid angle", _LIBRARY, where, reason)
            continue
        n = outside.n_outer
        engine = np.zeros((1, 2, 3, len(sine), len(position_nm)))
        sent_into_directions(problem, np.ascontiguousarray(n * sine)[None], engine)
        found = engine[0, side] * (n * n * cosine / (2.0 * np.pi))[:, None]
        for channel, (orientation, polarization) in enumerate(CHANNELS):
            where = replace(
                place, side=SIDES[side], orientation=orientation, polarization=polarization
            )
            yield from _direction_rows(
                layers, side, n * sine, found[channel], position_nm, angles_deg, where
            )


def _direction_rows(
    layers: Layers,
    side: int,
    u: NDArray[np.float64],
    found: NDArray[np.float64],
    position_nm: Sequence[float],
    angles_deg: Sequence[float],
    place: Place,
) -> Iterator[Row]:
    """Rows of one side and channel; found (angle, position)."""
    expected = np.full(found.shape, np.nan)
    reasons = [""] * len(u)
    for i, at in enumerate(u):
        try:
            field = _library_field(layers, side, float(at), place.polarization, position_nm)
        except Unsuitable as reason:
            reasons[i] = str(reason)
            field = _own_field(layers, side, float(at), place.polarization, position_nm)
        expected[i] = _emission(layers, side, field, place.orientation, place.polarization)
    scale = np.abs(expected).max(axis=0)
    quantity = "power per solid angle"
    for i, angle in enumerate(angles_deg):
        for q, z in enumerate(position_nm):
            where = replace(place, angle_deg=float(angle), position_nm=float(z))
            if reasons[i]:
                yield not_checked("far field", quantity, _LIBRARY, where, reasons[i])
            method = _OWN if reasons[i] else _LIBRARY
            values = (float(found[i, q]), float(expected[i, q]), float(scale[q]))
            yield compared("far field", quantity, method, where, *values, TOLERANCE)


def _emission(
    layers: Layers,
    side: int,
    field: NDArray[np.complex128],
    orientation: str | None,
    polarization: str | None,
) -> NDArray[np.float64]:
    """Power per solid angle over the bulk rate from the field (3, z) of a unit plane wave."""
    squared = np.abs(field) ** 2
    if orientation == "vertical":
        along, rate = squared[2], layers.bulk[0]
    else:  # half of the in-plane moment lies along the field, averaged over azimuth
        along, rate = 0.5 * squared[1 if polarization == "s" else 0], layers.bulk[1]
    emitted: NDArray[np.float64] = 3.0 * layers.outside[side].n_outer / (8.0 * np.pi) * along / rate
    return emitted


def equivalents(media: Sequence[Medium], u: float, polarization: str) -> Isotropic:
    """Isotropic films of equal phase kz d and admittance Y at one direction.

    For p solve (eps' - u^2) / eps'^2 = Y^2 in units of k0; s only knows the ordinary index.

    Raises
    ------
    Unsuitable
        Where the equivalent film would have a complex thickness.
    """
    eps, thickness = [], []
    for medium in media:
        if polarization == "s" or medium.eps_o == medium.eps_e:
            eps.append(medium.eps_o)
            thickness.append(medium.thickness_nm)
            continue
        found = _equivalent(medium, u)
        eps.append(found)
        thickness.append((medium.thickness_nm * medium.eps_o / found).real)
    return Isotropic(tuple(eps), tuple(thickness))


def _equivalent(medium: Medium, u: float) -> complex:
    """Either root of the quadratic equation will do that makes the thickness real."""
    squared = (1.0 - u * u / medium.eps_e) / medium.eps_o  # Y^2
    root = complex(np.sqrt(1.0 - 4.0 * squared * u * u + 0j))
    candidates = [2.0 * u * u / (1.0 + root)]
    if squared != 0.0:
        candidates.insert(0, (1.0 + root) / (2.0 * squared))
    for eps in candidates:
        stretch = medium.eps_o / eps if eps != 0.0 else 0.0
        if stretch.real > 0.0 and abs(stretch.imag) <= _REAL * abs(stretch):
            return eps
    raise Unsuitable(
        "a birefringent film has no isotropic equivalent of real thickness at this angle"
    )


def _solve(
    layers: Layers, side: int, u: float, polarization: str | None
) -> tuple[dict[str, Any], Isotropic]:
    """Solution by the library for light from one side."""
    from tmm import coh_tmm

    media = layers.ordered(side)
    stand_in = equivalents(media, u, str(polarization))
    angle = np.arcsin(u / layers.outside[side].n_outer)
    index = [np.sqrt(eps) for eps in stand_in.eps]
    lengths = list(stand_in.thickness_nm)
    # The library announces on standard output that it limits opaque films (to 1e-30).
    with contextlib.redirect_stdout(io.StringIO()):
        return coh_tmm(polarization, index, lengths, angle, layers.wavelength_nm), stand_in


def _library_field(
    layers: Layers, side: int, u: float, polarization: str | None, position_nm: Sequence[float]
) -> NDArray[np.complex128]:
    """Field (x, y, z) at each dipole of a unit plane wave from one side, by the library."""
    from tmm import position_resolved

    solution, stand_in = _solve(layers, side, u, polarization)
    place = 1 + (layers.emitter if side == 0 else len(layers.films) - 1 - layers.emitter)
    stretch = stand_in.thickness_nm[place] / layers.own.thickness_nm
    # Normal D is the same in film and equivalent; so are H and the in-plane E.
    squeeze = stand_in.eps[place] / layers.own.eps_e if polarization == "p" else 1.0
    field = np.zeros((3, len(position_nm)), dtype=np.complex128)
    for q, z in enumerate(position_nm):
        depth = z if side == 0 else layers.own.thickness_nm - z
        found = position_resolved(place, depth * stretch, solution)
        field[:, q] = found["Ex"], found["Ey"], found["Ez"] * squeeze
    return field


def _own_field(
    layers: Layers, side: int, u: float, polarization: str | None, position_nm: Sequence[float]
) -> NDArray[np.complex128]:
    """Field as `_library_field` gives it, by effective admittances; birefringence included."""
    pol, n = str(polarization), layers.outside[side].n_outer
    at = np.array([u], dtype=np.complex128)
    kz = complex(normal(layers.own, at, pol)[0])
    near, far = layers.half(at, pol, side), layers.half(at, pol, 1 - side)
    # By reciprocity of the half stack, inward t is outward t times the ratio of admittances.
    own_y = kz if pol == "s" else kz / layers.own.eps_o
    inward = near.t[0] * near.flux[0] / own_y
    depth = np.array([z if side == 0 else layers.own.thickness_nm - z for z in position_nm])
    k, d = layers.k0 * kz, layers.own.thickness_nm
    forth = np.exp(1j * k * depth)
    back = far.r[0] * np.exp(1j * k * (2.0 * d - depth))
    amplitude = inward / (1.0 - near.r[0] * far.r[0] * np.exp(2j * k * d))
    field = np.zeros((3, len(position_nm)), dtype=np.complex128)
    if pol == "s":
        field[1] = amplitude * (forth + back)
    else:  # |H| = n for |E| = 1
        field[0] = n * amplitude * own_y * (forth - back)
        field[2] = n * amplitude * u / layers.own.eps_e * (forth + back)
    return field


def outside_rows(
    layers: Layers, problem: Problem, angles_deg: Sequence[float], place: Place
) -> Iterator[Row]:
    """Reflection, transmission and absorption of light that comes from outside."""
    from tmm import absorp_in_each_layer

    names = ("reflectance", "transmittance", "absorptance of the films")
    for side, outside in enumerate(layers.outside):
        where = replace(place, side=SIDES[side])
        if outside.kind == "absorbing":
            reason = "the surroundings absorb: no light comes from this side"
            yield not_checked("light from outside", "R, T, A", "tmm", where, reason)
            continue
        u = outside.n_outer * np.sin(np.deg2rad(angles_deg))
        powers = np.zeros((1, 2, len(u), 5))
        lit_from_outside(problem, np.ascontiguousarray(u)[None], powers)
        for pol, polarization in enumerate("sp"):
            for i, angle in enumerate(angles_deg):
                here = replace(where, polarization=polarization, angle_deg=float(angle))
                method = "tmm"
                try:
                    solution, _ = _solve(layers, side, float(u[i]), polarization)
                    absorbed = float(absorp_in_each_layer(solution)[1:-1].sum())
                    expected = (float(solution["R"]), float(solution["T"]), absorbed)
                except Unsuitable as reason:
                    yield not_checked("light from outside", "R, T, A", method, here, str(reason))
                    method = "effective admittances"
                    expected = _own_powers(layers, side, float(u[i]), polarization)
                found = powers[0, pol, i, [side, 2, 3 + side]].tolist()
                for name, ours, theirs in zip(names, found, expected, strict=True):
                    yield compared(
                        "light from outside", name, method, here, ours, theirs, 1.0, TOLERANCE
                    )


def _own_powers(
    layers: Layers, side: int, u: float, polarization: str
) -> tuple[float, float, float]:
    """R, T and what is missing to 1, by effective admittances; birefringence included."""
    at = np.array([u], dtype=np.complex128)
    reflected, amplitude = layers.whole(at, polarization, side)
    flux = [admittance(o.medium, at, polarization)[0].real for o in layers.outside]
    through = float(np.abs(amplitude[0]) ** 2 * flux[1 - side] / flux[side])
    return float(reflected[0]), through, 1.0 - float(reflected[0]) - through
