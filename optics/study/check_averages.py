"""Check of the averages: a light budget's outcomes anew from its own spectral values.

Plain sums after the definitions, dipole by dipole on absolute rates: an emitter's dipoles at one
place and wavelength dissipate (1 - Theta) b_v F_v + Theta b_h F_h against
(1 - Theta) b_v + Theta b_h in the bulk.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from optics.study.check_rows import Place, Row, compared, not_checked
from optics.study.check_stack import layers_of

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    import xarray
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter

TOLERANCE = 1e-10
_METHOD = "plain sums"
_DESTINATIONS = (
    "air_bottom",
    "air_top",
    "substrate",
    "cover",
    "guided",
    "surface_plasmon",
    "absorbed",
)


def average_rows(
    case: Case, result: Mapping[str, Any], spectral: Mapping[str, xarray.Dataset]
) -> Iterator[Row]:
    """Compare every averaged outcome of a budget with sums of its own spectral values.

    Parameters
    ----------
    case : Case
    result : mapping
        As ``budget --json`` writes it.
    spectral : mapping of str to Dataset
        ``Budget.spectral``.
    """
    eqe = {"bottom": 0.0, "top": 0.0}
    for emitter, given in zip(case.emitters, result["emitters"], strict=True):
        place = Place(emitter.name)
        found = emitter_averages(case, emitter, spectral[emitter.name])
        pairs = {**given, **{f"destinations.{k}": v for k, v in given["destinations"].items()}}
        for name, value in found.items():
            if pairs[name] is None:
                reason = "null: the zone touches an absorber and the average has no bound"
                yield not_checked("average", name, _METHOD, place, reason)
            else:
                yield _row(name, place, pairs[name], value)
        per_photon = found["external_quantum_efficiency"] / (found["outcoupling_efficiency"] or 1.0)
        for side in eqe:
            eqe[side] += per_photon * found[f"destinations.air_{side}"]
    device = Place("")
    for side, value in eqe.items():
        name = f"external_quantum_efficiency_{side}"
        yield _row(name, device, result[name], value)
    total = eqe["bottom"] + eqe["top"]
    name = "external_quantum_efficiency"
    yield _row(name, device, result[name], total)


def _row(name: str, place: Place, ours: float, theirs: float) -> Row:
    scale = max(1.0, abs(theirs))
    return compared("average", name, _METHOD, place, ours, theirs, scale, TOLERANCE)


def emitter_averages(case: Case, emitter: Emitter, data: xarray.Dataset) -> dict[str, float]:
    """Averaged outcomes of one emitter by their names in ``budget --json``."""
    grid = data["wavelength_nm"].to_numpy()
    zone = data["zone_weight"].to_numpy()
    spectrum = _spectrum_weights(emitter, grid)
    fraction, q = emitter.horizontal_fraction, emitter.quantum_yield
    rates = np.array([layers_of(case, emitter, float(at)).bulk for at in grid])
    vertical, horizontal = (1.0 - fraction) * rates[:, 0], fraction * rates[:, 1]

    def averaged(name: str) -> NDArray[np.float64]:
        values = data[name]
        absolute = (
            vertical[:, None] * values.sel(orientation="vertical").to_numpy()
            + horizontal[:, None] * values.sel(orientation="horizontal").to_numpy()
        )
        relative: NDArray[np.float64] = absolute / (vertical + horizontal)[:, None]
        return np.asarray((spectrum[:, None] * relative).sum(axis=0))

    rate = averaged("F")
    decay = 1.0 - q + q * rate
    found = {
        "purcell_factor": float((zone * rate).sum()),
        "decay_rate_ratio": float((zone * decay).sum()),
        "radiative_efficiency": float((zone * q * rate / decay).sum()),
    }
    weight = zone * rate / decay
    for name in _DESTINATIONS:
        share = (weight * averaged(name) / rate).sum() / weight.sum()
        found[f"destinations.{name}"] = float(share)
    out = found["destinations.air_bottom"] + found["destinations.air_top"]
    charge = case.drive.charge_balance[emitter.unit] * emitter.share * emitter.exciton_fraction
    found["outcoupling_efficiency"] = out
    found["external_quantum_efficiency"] = charge * found["radiative_efficiency"] * out
    return found


def _spectrum_weights(emitter: Emitter, grid: NDArray[np.float64]) -> NDArray[np.float64]:
    """Photons times the trapezoid rule, sum 1; a single wavelength has weight 1."""
    if grid.size == 1:
        return np.ones(1)
    photons = emitter.spectrum.photons(grid)
    step = np.diff(grid)
    weights = np.zeros_like(grid)
    weights[:-1] += 0.5 * step
    weights[1:] += 0.5 * step
    weights *= photons
    return np.asarray(weights / weights.sum())
