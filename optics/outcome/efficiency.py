"""Averages over spectrum, zone and orientation, and the chain from charge to photon.

Symbols as in the definitions: s(lambda) intrinsic photon spectrum, F dissipated power, q
intrinsic radiative yield, zone(z) density of exciton formation, X any destination.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from optics.kernels import budget as engine
from optics.outcome.dual import plain

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.emitter import Emitter
    from optics.outcome.light import Light

#: Destinations in the order in which they are reported, with their place in the engine's result.
DESTINATIONS = {
    "air_bottom": engine.AIR_BOTTOM,
    "air_top": engine.AIR_TOP,
    "substrate": engine.SUBSTRATE,
    "cover": engine.COVER,
    "guided": engine.GUIDED,
    "surface_plasmon": engine.SURFACE_PLASMON,
    "absorbed": engine.ABSORBED,
}
_PLACES = list(DESTINATIONS.values())


class Averages(NamedTuple):
    """Averages over an emitter's zone: numbers, or arrays (...) of many devices."""

    purcell_factor: Any
    decay_rate_ratio: Any
    radiative_efficiency: Any
    shares: NDArray[np.float64]  # (engine.OUTCOMES, ...) of the dissipated photons


class Emission(NamedTuple):
    """What becomes of the excitons and photons of one emitter."""

    purcell_factor: float
    decay_rate_ratio: float
    radiative_efficiency: float
    shares: NDArray[np.float64]  # (engine.OUTCOMES,) of the dissipated photons
    emitted_profile: NDArray[np.float64]  # (z,), sum 1, or all 0 where no light leaves
    spectrum_weight: NDArray[np.float64]  # (w,) s times trapezoid weights, sum 1
    orientation: NDArray[np.float64]  # (w, 2) shares of the bulk rate, vertical and horizontal
    dissipated: NDArray[np.float64]  # (z,) F, averaged over spectrum and orientation


def orientation_average(
    values: NDArray[np.float64], bulk: NDArray[np.float64], horizontal_fraction: float
) -> NDArray[np.float64]:
    """Ensemble average over orientation, on absolute rates.

    X = ((1 - T) b_v X_v + T b_h X_h) / ((1 - T) b_v + T b_h), with X_v, X_h relative to their
    own bulk rates b_v, b_h per squared dipole moment.

    Parameters
    ----------
    values : float (w, z, 2, ...)
        Vertical, horizontal.
    bulk : float (w, 2)
    horizontal_fraction : float
        T, share of the squared transition dipole moment in the film plane.

    Returns
    -------
    float (w, z, ...)
    """
    return oriented(values, orientation_shares(bulk, horizontal_fraction))


def oriented(values: NDArray[np.float64], shares: NDArray[np.float64]) -> NDArray[np.float64]:
    """Average (w, z, ...) of values (w, z, 2, ...) with the shares (w, 2) of both orientations."""
    average: NDArray[np.float64] = np.einsum("wo,wzo...->wz...", shares, values)
    return average


def orientation_shares(
    bulk: NDArray[np.float64], horizontal_fraction: float
) -> NDArray[np.float64]:
    """Share (w, 2) of the vertical and the horizontal dipoles in the bulk rate (w, 2)."""
    rate = bulk * np.stack([1.0 - horizontal_fraction, horizontal_fraction])
    shares: NDArray[np.float64] = rate / rate.sum(axis=1, keepdims=True)
    return shares


def emission(emitter: Emitter, light: Light) -> Emission:
    """Average an emitter's light over spectrum, zone and orientation.

    Destinations are ratios of averages, int w X/F dz / int w dz with
    w = zone q F / (1 - q + q F); the factor q cancels and is left out, so that q = 0 is the
    limit.
    """
    spectrum_weight = emitter.spectrum.weights(light.wavelength_nm)
    theta, q = emitter.horizontal_fraction, emitter.quantum_yield
    orientation = orientation_shares(light.bulk, theta)
    dissipated = spectrum_weight @ oriented(light.engine.dissipation, orientation)
    shares = np.einsum("w,wzk->zk", spectrum_weight, oriented(light.engine.shares, orientation))
    leaving = light.zone_weight * (shares[:, engine.AIR_BOTTOM] + shares[:, engine.AIR_TOP])
    leaving = leaving / (1.0 - q + q * dissipated)
    total = leaving.sum()
    return Emission(
        *zone_average(q, light.zone_weight, dissipated, shares),
        emitted_profile=leaving / total if total > 0.0 else np.zeros_like(leaving),
        spectrum_weight=spectrum_weight,
        orientation=orientation,
        dissipated=dissipated,
    )


def zone_average(
    quantum_yield: float,
    zone_weight: NDArray[np.float64],
    dissipated: NDArray[np.float64],
    shares: NDArray[np.float64],
) -> Averages:
    """Average over a zone what was averaged over spectrum and orientation.

    Parameters
    ----------
    quantum_yield : float
    zone_weight : float (z,)
        Sum 1.
    dissipated : float (z, ...)
        F; further axes are those of many devices, and stay.
    shares : float (z, engine.OUTCOMES, ...)
    """
    decay = 1.0 - quantum_yield + quantum_yield * dissipated
    radiating = np.einsum("z,z...->...", zone_weight, dissipated / decay)
    return Averages(
        purcell_factor=plain(np.einsum("z,z...->...", zone_weight, dissipated)),
        decay_rate_ratio=plain(np.einsum("z,z...->...", zone_weight, decay)),
        radiative_efficiency=plain(quantum_yield * radiating),
        shares=np.einsum("z,z...,zk...->k...", zone_weight, 1.0 / decay, shares) / radiating,
    )


def destinations(shares: NDArray[np.float64]) -> dict[str, float]:
    """Name the destinations among an engine's outcomes (engine.OUTCOMES, ...)."""
    return {name: plain(shares[place]) for name, place in DESTINATIONS.items()}


def energy_balance(light: Light) -> float:
    """Largest share of the dissipated power that no destination accounts for."""
    found = light.engine.shares[..., _PLACES].sum(axis=-1)
    return float(np.abs(found / light.engine.dissipation - 1.0).max())
