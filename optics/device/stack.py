"""Films, slabs and surroundings: the layered body of a device.

``bottom`` is the substrate side, ``top`` the other; films are counted from the bottom.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING, Literal

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.materials import Material

Exit = Literal["planar", "matched"]

# A k below a few roundings of |n| is arithmetic, not absorption.
_ROUNDING = 8 * np.finfo(float).eps


@dataclass(frozen=True, slots=True)
class Film:
    """A coherent thin film.

    Attributes
    ----------
    name : str
        Name of the layer, unique in the stack.
    material : Material
        Its optical constants.
    thickness_nm : float
        Thickness in nm; a film of zero thickness is as good as absent.
    """

    name: str
    material: Material
    thickness_nm: float


@dataclass(frozen=True, slots=True)
class Slab:
    """A thick incoherent slab (substrate or cover).

    Attributes
    ----------
    material : Material
        Isotropic; its interfaces use Re n, its k acts by the Beer-Lambert law.
    thickness_mm : float
        Thickness in mm.
    exit : {"planar", "matched"}
        ``"matched"``: an index-matched hemisphere, one pass through the slab and no face.
    """

    material: Material
    thickness_mm: float
    exit: Exit


@dataclass(frozen=True, slots=True)
class Stack:
    """Everything light meets, from the bottom surroundings to the top ones.

    Attributes
    ----------
    films : tuple of Film
        From bottom to top.
    substrate, cover : Slab or None
        Slabs below and above the films.
    bottom, top : Material
        Surroundings; isotropic.
    """

    films: tuple[Film, ...]
    substrate: Slab | None
    cover: Slab | None
    bottom: Material
    top: Material

    @property
    def thickness_nm(self) -> NDArray[np.float64]:
        """Film thicknesses in nm from bottom to top, shape (n_film,)."""
        return np.array([film.thickness_nm for film in self.films], dtype=np.float64)

    def film_index(self, name: str) -> int:
        """Index of the film called `name`, counted from the bottom.

        Raises
        ------
        KeyError
            If there is no such film.
        """
        for index, film in enumerate(self.films):
            if film.name == name:
                return index
        raise KeyError(name)

    def permittivity(
        self, wavelength_nm: NDArray[np.float64]
    ) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
        """Permittivity of every film.

        Parameters
        ----------
        wavelength_nm : array, shape (n_wavelength,)
            Vacuum wavelengths in nm.

        Returns
        -------
        eps_ordinary, eps_extraordinary : complex arrays, shape (n_wavelength, n_film)
            Relative permittivity in the film plane and along the normal.

        Raises
        ------
        CaseError
            If a material does not cover a wavelength.
        """
        shape = (len(wavelength_nm), len(self.films))
        eps_o = np.empty(shape, dtype=np.complex128)
        eps_e = np.empty(shape, dtype=np.complex128)
        for index, film in enumerate(self.films):
            eps_o[:, index], eps_e[:, index] = film.material.permittivity(wavelength_nm)
        return eps_o, eps_e

    def absorbing(
        self, wavelength_nm: NDArray[np.float64]
    ) -> tuple[NDArray[np.bool_], tuple[bool, bool]]:
        """Which films and surroundings absorb (k > 0) at any of the wavelengths.

        Parameters
        ----------
        wavelength_nm : array, shape (n_wavelength,)
            Vacuum wavelengths in nm.

        Returns
        -------
        films : bool array, shape (n_film,)
            True where the ordinary or the extraordinary k is above 0.
        surroundings : (bool, bool)
            The same for the bottom and the top surroundings.
        """
        films = [absorbs(film.material, wavelength_nm) for film in self.films]
        outer = (absorbs(self.bottom, wavelength_nm), absorbs(self.top, wavelength_nm))
        return np.array(films, dtype=np.bool_), outer


def absorbs(material: Material, wavelength_nm: NDArray[np.float64]) -> bool:
    """Whether a material has k > 0, ordinary or extraordinary, at any of the wavelengths in nm."""
    return _absorbs(material, np.asarray(wavelength_nm, dtype=np.float64).tobytes())


@lru_cache(maxsize=512)
def _absorbs(material: Material, wavelength_nm: bytes) -> bool:
    index = [np.sqrt(eps) for eps in material.permittivity(np.frombuffer(wavelength_nm))]
    return any(bool(np.any(n.imag > _ROUNDING * np.abs(n))) for n in index)


def without_loss(eps: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """Permittivity with k set to 0 and n kept, same shape as `eps`."""
    index: NDArray[np.float64] = np.sqrt(eps).real
    return (index**2).astype(np.complex128)
