"""Field of a mode across the films, with the indices that it meets."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from optics.kernels.halfstack import P, S
from optics.kernels.modal_fields import mode_profile
from optics.kernels.poles import films_of, place_on_sheet
from optics.outcome.light import problem_of
from optics.outcome.resolved import emitter_called

if TYPE_CHECKING:
    import xarray

    from optics.device.case import Case
    from optics.outcome.modes_lines import ModeLine

_FARTHEST_NM = 400.0  # shown of an outer medium


def field_profile(
    case: Case, emitter: str, line: ModeLine, wavelength_nm: float, points: int = 600
) -> xarray.Dataset:
    """Field of a mode against height at one wavelength.

    Parameters
    ----------
    case : Case
    emitter : str
        Name of the emitter whose film is taken as lossless.
    line : ModeLine
        Of `optics.modes` for this case and emitter.
    wavelength_nm : float
        One at which the line exists.
    points : int
        Heights; each film's faces are among them, from both sides.

    Returns
    -------
    xarray.Dataset
        By ``height_nm`` above the lowest film's bottom face: ``electric`` and ``magnetic``,
        |E|^2 and |H|^2, each over its largest value, and ``index``, Re n in the film plane.
        Attribute ``faces_nm``.

    Raises
    ------
    ValueError
        If the mode does not exist at that wavelength.
    """
    import xarray

    where = np.flatnonzero(line.wavelength_nm == wavelength_nm)
    if where.size == 0:
        first, last = line.wavelength_nm[0], line.wavelength_nm[-1]
        raise ValueError(
            f"wavelength_nm: found {wavelength_nm!r}; expected one of {line.name}, which runs "
            f"from {first:g} to {last:g} nm"
        )
    problem = problem_of(
        case, emitter_called(case, emitter), np.array([wavelength_nm]), np.zeros(1)
    )
    films = films_of(problem, 0)
    place = line.place[where]
    decay, u = (part[0] for part in place_on_sheet(films, place))
    k0 = 2.0 * np.pi / wavelength_nm
    faces = np.concatenate([[0.0], np.cumsum(films.kd)]) / k0
    reach = [min(_FARTHEST_NM, 3.0 / max(k0 * abs(g.real), 1e-9)) for g in decay]
    inner = np.linspace(-reach[0], faces[-1] + reach[1], points)
    gap = 1e-6 * max(faces[-1], 1.0)
    height = np.unique(np.concatenate([inner, faces - gap, faces + gap]))
    field = np.zeros((2, height.size), dtype=np.complex128)
    pol = S if line.polarization == "s" else P
    mode_profile(films, pol, complex(place[0]), k0 * height, field)
    at = np.searchsorted(faces, height)
    eps_o = np.concatenate([[films.bottom], films.eps_o, [films.top]])[at]
    eps_e = np.concatenate([[films.bottom], films.eps_e, [films.top]])[at]
    if pol == S:
        electric = np.abs(field[0]) ** 2
        magnetic = np.abs(field[1]) ** 2 + np.abs(u * field[0]) ** 2
    else:
        electric = np.abs(field[1]) ** 2 + np.abs(u * field[0] / eps_e) ** 2
        magnetic = np.abs(field[0]) ** 2
    return xarray.Dataset(
        {
            "electric": ("height_nm", electric / electric.max(), {"units": "1"}),
            "magnetic": ("height_nm", magnetic / magnetic.max(), {"units": "1"}),
            "index": ("height_nm", np.sqrt(eps_o).real, {"units": "1"}),
        },
        coords={"height_nm": ("height_nm", height, {"units": "nm"})},
        attrs={"faces_nm": faces, "wavelength_nm": wavelength_nm, "mode": line.name},
    )
