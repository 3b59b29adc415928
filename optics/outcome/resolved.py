"""Destinations of an emitter's photons against wavelength and against position in its film."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from optics.device.zone import zone_interval
from optics.device.zone_shapes import PointZone
from optics.kernels.budget import light_budget
from optics.outcome.efficiency import DESTINATIONS, orientation_average
from optics.outcome.light import problem_of

if TYPE_CHECKING:
    import xarray
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.outcome.budget import Budget

_POSITIONS = 60
_CROWDING = 0.75  # positions next to a face are so much closer together than on average


def emitter_called(case: Case, name: str) -> Emitter:
    """Return the emitter of a case by its name.

    Raises
    ------
    KeyError
        If there is no such emitter.
    """
    for emitter in case.emitters:
        if emitter.name == name:
            return emitter
    raise KeyError(name)


def exciton_weight(
    emitter: Emitter, data: xarray.Dataset, bulk: NDArray[np.float64]
) -> tuple[NDArray[np.float64], float]:
    """Weights over positions of the light budget's averages, and the average of F with them.

    Excitons at z decay at the rate 1 - q + q F(z) and form with the density zone(z), so each
    destination X counts with zone / (1 - q + q F).

    Parameters
    ----------
    emitter : Emitter
    data : xarray.Dataset
        The emitter's of ``Budget.spectral``.
    bulk : float (w, 2)
        Bulk rates, vertical and horizontal.

    Returns
    -------
    weight : float (z,)
    dissipated : float
        Sum of weight times spectral average of F.
    """
    q = emitter.quantum_yield
    by_wavelength = orientation_average(data["F"].to_numpy(), bulk, emitter.horizontal_fraction)
    average = data["spectrum_weight"].to_numpy() @ by_wavelength
    weight = data["zone_weight"].to_numpy() / (1.0 - q + q * average)
    return weight, float(weight @ average)


def shares_by_wavelength(case: Case, outcome: Budget, name: str) -> xarray.Dataset:
    """Destinations at every wavelength, averaged over zone and orientation as in the budget.

    Parameters
    ----------
    case : Case
    outcome : Budget
        Of this case.
    name : str
        Of the emitter.

    Returns
    -------
    xarray.Dataset
        By ``wavelength_nm``: every destination as a share of the photons dissipated at that
        wavelength; ``dissipated``, power at that wavelength over the spectral average;
        ``spectrum``, photons per nm of the emitter by itself, relative to the largest. The
        sum of spectrum_weight x dissipated x share is the budget's share.

    Raises
    ------
    KeyError
        If there is no such emitter.
    """
    emitter = emitter_called(case, name)
    data = outcome.spectral[name]
    wavelength_nm = data["wavelength_nm"].to_numpy()
    problem = problem_of(case, emitter, wavelength_nm, data["position_nm"].to_numpy())
    weight, average = exciton_weight(emitter, data, problem.source.bulk)

    def zone_average(variable: str) -> NDArray[np.float64]:
        values = data[variable].to_numpy()
        mean = orientation_average(values, problem.source.bulk, emitter.horizontal_fraction)
        return np.asarray(mean @ weight)

    dissipated = zone_average("F")
    shares = {destination: zone_average(destination) / dissipated for destination in DESTINATIONS}
    photons = (
        np.ones(1) if emitter.spectrum.line_nm is not None
        else emitter.spectrum.density(wavelength_nm)
    )  # fmt: skip
    found: xarray.Dataset = data[["spectrum_weight"]].assign(
        {
            **{key: ("wavelength_nm", value, {"units": "1"}) for key, value in shares.items()},
            "dissipated": ("wavelength_nm", dissipated / average, {"units": "1"}),
            "spectrum": ("wavelength_nm", photons / photons.max(), {"units": "1"}),
        }
    )
    return found


def shares_by_position(
    case: Case, name: str, tolerance: float = 1e-6, positions: int = _POSITIONS
) -> xarray.Dataset:
    """Destinations at every position of the emitter's film, averaged over spectrum, orientation.

    Positions within the closest approach of an absorber are left out.

    Parameters
    ----------
    case : Case
    name : str
        Of the emitter.
    tolerance : float
        Wanted accuracy of every destination as a fraction of the dissipated power.
    positions : int
        How many, a quarter as far apart at the faces as on average.

    Returns
    -------
    xarray.Dataset
        By ``position`` with ``position_nm`` from the bottom face: every destination as a share
        of the photons dissipated there; ``F``; and, but for point zones, ``zone``, density of
        exciton formation, and ``leaving``, density of the photons that leave, both relative to
        their largest value. A point zone is the attribute ``point_nm`` instead.

    Raises
    ------
    KeyError
        If there is no such emitter.
    """
    import xarray

    emitter = emitter_called(case, name)
    stack, every = case.stack, case.every_wavelength_nm
    thickness_nm = stack.films[emitter.film_index].thickness_nm
    low, high = interval = zone_interval(stack, emitter, every)
    # Never on a face, where an absorber's near field has no bound, but closer together there.
    even = (np.arange(positions) + 0.5) / positions
    place = even - _CROWDING * np.sin(2.0 * np.pi * even) / (2.0 * np.pi)
    position_nm = low + (high - low) * place
    wavelength_nm = emitter.spectrum.grid_nm(case.wavelength_nm)
    problem = problem_of(case, emitter, wavelength_nm, position_nm)
    engine = light_budget(problem, tolerance)
    spectrum, theta = emitter.spectrum.weights(wavelength_nm), emitter.horizontal_fraction
    dissipated = spectrum @ orientation_average(engine.dissipation, problem.source.bulk, theta)
    power = np.einsum(
        "w,wzk->zk", spectrum, orientation_average(engine.shares, problem.source.bulk, theta)
    )
    values = {key: power[:, place] / dissipated for key, place in DESTINATIONS.items()}
    values["F"] = dissipated
    attrs = {"emitter": name, "layer": emitter.layer, "thickness_nm": thickness_nm}
    if isinstance(emitter.zone, PointZone):
        attrs["point_nm"] = emitter.zone.position_nm(thickness_nm)
    else:
        q = emitter.quantum_yield
        zone = emitter.zone.density(position_nm, thickness_nm, interval)
        out = (values["air_bottom"] + values["air_top"]) * dissipated
        leaving = zone * out / (1.0 - q + q * dissipated)
        for key, density in (("zone", zone), ("leaving", leaving)):
            values[key] = density / density.max() if density.max() > 0.0 else density
    return xarray.Dataset(
        {key: ("position", value, {"units": "1"}) for key, value in values.items()},
        coords={
            "position_nm": (
                "position",
                position_nm,
                {"units": "nm", "long_name": "distance from the bottom face of the emitter film"},
            )
        },
        attrs=attrs,
    )
