"""Dissipated power of an emitter against wavelength and effective index, with the light lines."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.kernels.geometry import largest_index
from optics.kernels.spectrum import dissipated_spectrum
from optics.outcome.efficiency import orientation_average
from optics.outcome.light import problem_of
from optics.outcome.resolved import emitter_called, exciton_weight

if TYPE_CHECKING:
    import xarray
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.outcome.budget import Budget

#: Half width with which a lossless guided mode shows, in effective index.
LINE_HALF_WIDTH = 0.002
#: Power beyond this many times the largest index counts as near field, as in the light budget.
_NEAR_FIELD = 2.0


class LightLine(NamedTuple):
    """Index of a medium against wavelength, beyond which its waves are evanescent."""

    name: str
    kind: str  # surroundings, slab, emitter or film
    n: NDArray[np.float64]  # (w,), nan where the medium is a metal


def dispersion(
    case: Case, outcome: Budget, name: str, half_width: float = LINE_HALF_WIDTH
) -> xarray.Dataset:
    """Dissipated power of one emitter per effective index, at every wavelength of the case.

    Averaged over zone and orientation as in the light budget. The integrand is evaluated half a
    line width below the real axis: guided modes of lossless films, which have no width of their
    own, show as lines of that width, and every other structure is blurred by as much.

    Parameters
    ----------
    case : Case
    outcome : Budget
        Of this case.
    name : str
        Of the emitter.
    half_width : float
        In effective index.

    Returns
    -------
    xarray.Dataset
        ``power`` (polarization s | p, wavelength_nm, effective_index): dissipated power per unit
        of effective index over the emitter's dissipated photons. Its integral over effective
        index, weighted with ``spectrum_weight`` and summed, is 1 but for the near field beyond
        twice the largest index, and for about one half width lost in blurring. ``light_line``
        (line, wavelength_nm) with ``kind`` by line: index in every medium that carries waves.

    Raises
    ------
    KeyError
        If there is no such emitter.
    ValueError
        If the half width is not above 0.
    """
    if not half_width > 0.0:
        raise ValueError(f"half_width: found {half_width!r}; expected a number above 0")
    import xarray

    emitter = emitter_called(case, name)
    data = outcome.spectral[name]
    wavelength_nm = data["wavelength_nm"].to_numpy()
    problem = problem_of(case, emitter, wavelength_nm, data["position_nm"].to_numpy())
    weight, dissipated = exciton_weight(emitter, data, problem.source.bulk)
    count = int(np.ceil(_NEAR_FIELD * largest_index(problem).max() / half_width))
    index = np.asarray(half_width * (np.arange(count) + 0.5), dtype=np.float64)

    def at(row: int) -> NDArray[np.float64]:
        power: NDArray[np.float64] = np.zeros((1, 3, count, weight.size))
        dissipated_spectrum(problem, np.array([row]), index, half_width, power)
        vertical, parallel, across = power[0] @ weight  # each (n,)
        nothing = np.zeros_like(vertical)
        # (polarization s | p, n, orientation vertical | horizontal)
        channels = np.array([[nothing, across], [vertical, parallel]]).transpose(0, 2, 1)
        return orientation_average(
            channels, np.repeat(problem.source.bulk[row : row + 1], 2, axis=0),
            emitter.horizontal_fraction,
        )  # fmt: skip

    with ThreadPoolExecutor() as pool:
        found = np.stack(list(pool.map(at, range(wavelength_nm.size))), axis=1)
    lines = light_lines(case, emitter, wavelength_nm)
    return xarray.Dataset(
        {
            "power": (
                ("polarization", "wavelength_nm", "effective_index"),
                found / dissipated,
                {"units": "1", "long_name": "dissipated power per effective index"},
            ),
            "spectrum_weight": data["spectrum_weight"],
            "light_line": (
                ("line", "wavelength_nm"),
                np.stack([line.n for line in lines]),
                {"units": "1", "long_name": "refractive index of a medium"},
            ),
        },
        coords={
            "polarization": ["s", "p"],
            "wavelength_nm": data["wavelength_nm"],
            "effective_index": (
                "effective_index",
                index,
                {"units": "1", "long_name": "in-plane wavevector over that in vacuum"},
            ),
            "line": [line.name for line in lines],
            "kind": ("line", [line.kind for line in lines]),
        },
        attrs={"emitter": name, "line_half_width": half_width},
    )


def light_lines(
    case: Case, emitter: Emitter, wavelength_nm: NDArray[np.float64]
) -> tuple[LightLine, ...]:
    """Light line of every medium: surroundings, slabs, the emitter's film, other films.

    A birefringent film has two, one for each principal index. Metals and
    absorbing surroundings have none.

    Parameters
    ----------
    case : Case
    emitter : Emitter
        One of the case's.
    wavelength_nm : float (w,)
    """
    stack = case.stack
    lines: list[LightLine] = []

    def add(name: str, kind: str, eps: NDArray[np.complex128]) -> None:
        index = np.where(eps.real > 0.0, np.sqrt(eps).real, np.nan)
        if not np.isnan(index).all():
            lines.append(LightLine(name, kind, index))

    outside = (("bottom", stack.bottom), ("top", stack.top))
    _, absorbing = stack.absorbing(case.every_wavelength_nm)
    for (side, material), lossy in zip(outside, absorbing, strict=True):
        if lossy:
            continue
        add(f"{side} surroundings", "surroundings", material.permittivity(wavelength_nm)[0])
    for side, slab in (("substrate", stack.substrate), ("cover", stack.cover)):
        if slab is not None:
            add(side, "slab", slab.material.permittivity(wavelength_nm)[0])
    for place, film in enumerate(stack.films):
        if film.thickness_nm == 0.0:
            continue
        kind = "emitter" if place == emitter.film_index else "film"
        ordinary, extraordinary = film.material.permittivity(wavelength_nm)
        if np.array_equal(ordinary, extraordinary):
            add(film.name, kind, ordinary)
        else:
            add(f"{film.name} ordinary", kind, ordinary)
            add(f"{film.name} extraordinary", kind, extraordinary)
    return tuple(lines)
