"""A device at one wavelength in plain NumPy, for checks: shares no code with the engine.

Fields are carried through the films by effective admittances (the ratio of the two tangential
fields), not by reflection coefficients as in the engine. Lengths in 1/k0, wavevectors over k0,
time factor exp(-i w t). Amplitudes are E for s and H for p; admittance kz for s, kz / eps_o
for p. P. Yeh, Optical Waves in Layered Media (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.device.stack import absorbs, without_loss

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.device.materials import Material
    from optics.device.stack import Slab

    Array = NDArray[np.complex128]

SIDES = ("bottom", "top")
_NM_PER_MM = 1e6


class Medium(NamedTuple):
    """A film, or with infinite thickness an outer medium."""

    eps_o: complex
    eps_e: complex
    thickness_nm: float


class Outside(NamedTuple):
    """What stands outside the films on one side."""

    kind: str  # "open", "planar", "matched", "absorbing"
    medium: Medium  # next to the films
    n_out: float  # index of the surroundings
    loss: float  # 4 pi k d / lambda of the slab

    @property
    def n_outer(self) -> float:
        """Real index of the medium next to the films."""
        return float(np.sqrt(self.medium.eps_o).real)

    @property
    def exit_line(self) -> float:
        """In-plane wavevector below which light can leave; 0 if it never can."""
        if self.kind == "absorbing":
            return 0.0
        return self.n_outer if self.kind == "matched" else self.n_out


class Half(NamedTuple):
    """Response of one half stack to a wave from the emitter film."""

    r: Array  # reflection at the emitter film's face
    t: Array  # amplitude in the outer medium
    flux: NDArray[np.float64]  # Re Y of the outer medium
    scale: Array  # times r or t it has no poles left


@dataclass(frozen=True, slots=True)
class Layers:
    """Films at one wavelength, seen from one emitter.

    Attributes
    ----------
    wavelength_nm : float
    films : tuple of Medium
        Bottom to top; the emitter's own film without loss.
    emitter : int
        Index of the emitter's film.
    outside : (Outside, Outside)
        Bottom, top.
    """

    wavelength_nm: float
    films: tuple[Medium, ...]
    emitter: int
    outside: tuple[Outside, Outside]

    @property
    def k0(self) -> float:
        """Vacuum wavenumber in 1/nm."""
        return 2.0 * np.pi / self.wavelength_nm

    @property
    def own(self) -> Medium:
        """The emitter's film."""
        return self.films[self.emitter]

    @property
    def bulk(self) -> tuple[float, float]:
        """Rates of a vertical and a horizontal dipole in the bulk over that in vacuum."""
        o, e = self.own.eps_o.real, self.own.eps_e.real
        return float(np.sqrt(o)), float((3.0 * o + e) / (4.0 * np.sqrt(o)))

    def ordered(self, side: int) -> tuple[Medium, ...]:
        """Every medium in the order in which light from one side (0 bottom, 1 top) meets it."""
        media = (self.outside[0].medium, *self.films, self.outside[1].medium)
        return media if side == 0 else media[::-1]

    def half(self, u: Array, polarization: str, side: int) -> Half:
        """Half stack below (0) or above (1) the dipoles."""
        films = self.films[: self.emitter][::-1] if side == 0 else self.films[self.emitter + 1 :]
        outer = self.outside[side].medium
        load, passed, scale = self._behind(u, polarization, films, outer)
        own = admittance(self.own, u, polarization)
        r = (own - load) / (own + load)
        flux = admittance(outer, u, polarization).real
        return Half(r, (1.0 + r) * passed, flux, (own + load) * scale)

    def whole(self, u: Array, polarization: str, side: int) -> tuple[NDArray[np.float64], Array]:
        """Reflectance, and transmitted over incident |amplitude|, lit from one side."""
        first, *films, last = self.ordered(side)
        load, passed, _ = self._behind(u, polarization, films, last)
        own = admittance(first, u, polarization)
        r = (own - load) / (own + load)
        return np.abs(r) ** 2, (1.0 + r) * passed

    def _behind(
        self, u: Array, polarization: str, films: tuple[Medium, ...] | list[Medium], outer: Medium
    ) -> tuple[Array, Array, Array]:
        """Effective admittance in front of films, field behind over that in front, its poles."""
        load, passed = admittance(outer, u, polarization), np.ones_like(u)
        scale = np.ones_like(u)
        for film in reversed(films):
            own = admittance(film, u, polarization)
            turn = normal(film, u, polarization) * self.k0 * film.thickness_nm
            once = np.exp(1j * turn)
            twice = once * once
            ratio = load / own
            below = (1.0 + twice) + ratio * (1.0 - twice)
            load = own * ((1.0 - twice) + ratio * (1.0 + twice)) / below
            passed = passed * 2.0 * once / below
            scale = scale * 0.5 * below * np.exp(-1j * turn.real)
        return load, passed, scale


def normal(medium: Medium, u: Array, polarization: str) -> Array:
    """Normal wavevector over k0, Im >= 0."""
    ratio = 1.0 if polarization == "s" else medium.eps_o / medium.eps_e
    root = np.sqrt(medium.eps_o - ratio * u * u + 0j)
    return np.where(root.imag < 0.0, -root, root)


def admittance(medium: Medium, u: Array, polarization: str) -> Array:
    """Ratio of the second tangential field to the first."""
    kz = normal(medium, u, polarization)
    return kz if polarization == "s" else kz / medium.eps_o


def layers_of(case: Case, emitter: Emitter, wavelength_nm: float) -> Layers:
    """A case at one wavelength, straight from its materials."""
    grid = np.array([wavelength_nm])
    films = []
    for index, film in enumerate(case.stack.films):
        pair = film.material.permittivity(grid)
        if index == emitter.film_index:
            pair = (without_loss(pair[0]), without_loss(pair[1]))
        films.append(Medium(complex(pair[0][0]), complex(pair[1][0]), film.thickness_nm))
    stack = case.stack
    every = case.every_wavelength_nm
    outside = (
        _outside(stack.substrate, stack.bottom, wavelength_nm, every),
        _outside(stack.cover, stack.top, wavelength_nm, every),
    )
    return Layers(wavelength_nm, tuple(films), emitter.film_index, outside)


def _outside(
    slab: Slab | None,
    surroundings: Material,
    wavelength_nm: float,
    every_wavelength_nm: NDArray[np.float64],
) -> Outside:
    beyond = complex(surroundings.permittivity(np.array([wavelength_nm]))[0][0])
    n_out = float(np.sqrt(beyond).real)
    if slab is not None:
        index = complex(np.sqrt(slab.material.permittivity(np.array([wavelength_nm]))[0][0]))
        loss = 4.0 * np.pi * index.imag * slab.thickness_mm * _NM_PER_MM / wavelength_nm
        return Outside(slab.exit, _outer(index.real**2), n_out, loss)
    if absorbs(surroundings, every_wavelength_nm):
        return Outside("absorbing", _outer(beyond), n_out, 0.0)
    return Outside("open", _outer(n_out**2), n_out, 0.0)


def _outer(eps: complex) -> Medium:
    return Medium(complex(eps), complex(eps), np.inf)
