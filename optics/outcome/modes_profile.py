"""Field of a mode across the films, with the indices that it meets."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from optics.kernels.halfstack import P, S
from optics.kernels.modal_fields import mode_profile
from optics.kernels.poles import place_on_sheet

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.kernels.modal_sheet import Films

_FARTHEST_NM = 400.0  # shown of an outer medium
_POINTS = 600


def heights(
    films: Films, wavelength_nm: float, place: complex | None = None
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Heights at which to show fields, and the films' faces, in nm above the lowest face.

    Parameters
    ----------
    films : Films
    wavelength_nm : float
    place : complex, optional
        A mode's on the engine's sheet: outer media are shown as far as its field reaches.

    Returns
    -------
    height_nm : float (n,)
        Each face is there from both sides.
    faces_nm : float (m + 1,)
    """
    k0 = 2.0 * np.pi / wavelength_nm
    faces = np.concatenate([[0.0], np.cumsum(films.kd)]) / k0
    reach = [_FARTHEST_NM, _FARTHEST_NM]
    if place is not None:
        decay = place_on_sheet(films, np.array([place]))[0][0]
        # A leaky mode's field grows outward; little of that is worth showing.
        ways = [(3.0 if g.real > 0.0 else 0.3) / max(k0 * abs(g.real), 1e-9) for g in decay]
        reach = [min(_FARTHEST_NM, way) for way in ways]
    even = np.linspace(-reach[0], faces[-1] + reach[1], _POINTS)
    gap = 1e-6 * max(faces[-1], 1.0)
    return np.unique(np.concatenate([even, faces - gap, faces + gap])), faces


def fields_at(
    films: Films,
    polarization: str,
    place: complex,
    wavelength_nm: float,
    height_nm: NDArray[np.float64],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """|E|^2 and |H|^2 of a mode (n,), each over its largest value.

    If it leaks, over the largest in the films, since it grows without bound outside.
    """
    k0 = 2.0 * np.pi / wavelength_nm
    decay, u = (part[0] for part in place_on_sheet(films, np.array([place])))
    field = np.zeros((2, height_nm.size), dtype=np.complex128)
    pol = S if polarization == "s" else P
    mode_profile(films, pol, place, k0 * height_nm, field)
    _, eps_e = _permittivity(films, wavelength_nm, height_nm)
    if pol == S:
        electric = np.abs(field[0]) ** 2
        magnetic = np.abs(field[1]) ** 2 + np.abs(u * field[0]) ** 2
    else:
        electric = np.abs(field[1]) ** 2 + np.abs(u * field[0] / eps_e) ** 2
        magnetic = np.abs(field[0]) ** 2
    inside = (height_nm >= 0.0) & (height_nm <= films.kd.sum() / k0) | (decay.real > 0.0).all()
    return electric / electric[inside].max(), magnetic / magnetic[inside].max()


def index_at(
    films: Films, wavelength_nm: float, height_nm: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Re n in the film plane (n,)."""
    eps_o, _ = _permittivity(films, wavelength_nm, height_nm)
    return np.asarray(np.sqrt(eps_o).real)


def _permittivity(
    films: Films, wavelength_nm: float, height_nm: NDArray[np.float64]
) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
    """Ordinary and extraordinary (n,)."""
    faces_nm = np.concatenate([[0.0], np.cumsum(films.kd)]) * wavelength_nm / (2.0 * np.pi)
    at = np.searchsorted(faces_nm, height_nm)
    outer = [films.bottom], [films.top]
    return (
        np.concatenate([outer[0], films.eps_o, outer[1]])[at],
        np.concatenate([outer[0], films.eps_e, outer[1]])[at],
    )
