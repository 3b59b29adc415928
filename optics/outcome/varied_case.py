"""A case whose numbers carry their rates of change along given directions."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, cast

import numpy as np

from optics.device.address import ORIENTATION_KEYS
from optics.device.case import Case, exchanged
from optics.device.direction import Direction, NumberStep
from optics.device.drive import ByUnit, Drive, Side, Sides
from optics.device.emitter import HORIZONTAL_PER
from optics.device.spectrum import FWHM_PER_SIGMA, GaussianSpectrum, Spectrum, trapezoid_weights
from optics.outcome.dual import Dual

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.emitter import Emitter

    Floats = NDArray[np.float64]


def varied_case(case: Case, directions: Sequence[Direction]) -> Case:
    """Copy of a case in which every number that moves is a `Dual`; what does not stays plain.

    Numbers of emitters, drive and sides only: films and zones act through the engine's arrays
    and the zone's quadrature, see `light_rates`.
    """
    return exchanged(
        case,
        emitters=tuple(_emitter(one, directions) for one in case.emitters),
        drive=_drive(case, directions),
        sides=Sides(*(_side(case, name, directions) for name in ("bottom", "top"))),
    )


def _rates(directions: Sequence[Direction], path: str) -> Floats:
    """How fast an address moves along each direction (p,)."""
    return np.array([float(direction.count(NumberStep(path))) for direction in directions])


def _moving(value: float | None, rates: Floats) -> Any:
    """Return a number with its rates, or as it is if nothing moves it."""
    return value if value is None or not rates.any() else Dual(value, rates)


def _emitter(emitter: Emitter, directions: Sequence[Direction]) -> Emitter:
    key = f"emitters.{emitter.name}"
    numbers = {
        name: _moving(getattr(emitter, name), _rates(directions, f"{key}.{name}"))
        for name in ("quantum_yield", "exciton_fraction", "share")
    }
    turning = sum(
        HORIZONTAL_PER[name] * _rates(directions, f"{key}.{name}") for name in ORIENTATION_KEYS
    )
    numbers["horizontal_fraction"] = _moving(emitter.horizontal_fraction, np.asarray(turning))
    return replace(emitter, spectrum=_spectrum(emitter, directions), **numbers)


def _spectrum(emitter: Emitter, directions: Sequence[Direction]) -> Spectrum:
    spectrum = emitter.spectrum
    if not isinstance(spectrum, GaussianSpectrum):
        return spectrum
    key = f"emitters.{emitter.name}.spectrum"
    center, width = (_rates(directions, f"{key}.{name}") for name in ("peak_nm", "fwhm_nm"))
    if not center.any() and not width.any():
        return spectrum
    return _MovingGaussian(spectrum, center, width / FWHM_PER_SIGMA)


def _drive(case: Case, directions: Sequence[Direction]) -> Drive:
    drive, whole = case.drive, _rates(directions, "drive.charge_balance")
    balance = tuple(
        (unit, _moving(value, whole + _rates(directions, f"drive.charge_balance.{unit}")))
        for unit, value in drive.charge_balance.pairs
    )
    numbers = {
        name: _moving(getattr(drive, name), _rates(directions, f"drive.{name}"))
        for name in ("current_density_mA_cm2", "voltage_V", "aperture_ratio", "duty")
    }
    return Drive(ByUnit(balance), **numbers)


def _side(case: Case, name: str, directions: Sequence[Direction]) -> Side:
    side: Side = getattr(case.sides, name)
    rates = _rates(directions, f"sides.{name}.polarizer_transmittance")
    return replace(side, polarizer_transmittance=_moving(side.polarizer_transmittance, rates))


@dataclass(frozen=True, slots=True)
class _MovingGaussian(Spectrum):
    """A Gaussian whose center and standard deviation move at the given rates (p,)."""

    at_rest: GaussianSpectrum
    center_rates: Floats
    sigma_rates: Floats

    @property
    def peak_nm(self) -> float:
        """Peak wavelength in nm."""
        return self.at_rest.peak_nm

    def photons(self, wavelength_nm: Floats) -> Floats:
        """Photons per nm without their rates, as those of the spectrum at rest."""
        return self.at_rest.photons(wavelength_nm)

    def density(self, wavelength_nm: Floats) -> Floats:
        """Weights over trapezoid steps, with rates."""
        return self.weights(wavelength_nm) / trapezoid_weights(wavelength_nm)

    def weights(self, wavelength_nm: Floats) -> Floats:
        """Weights with rates: d ln w = d ln s less its average, so that they still sum to 1."""
        weights = self.at_rest.weights(wavelength_nm)
        sigma = self.at_rest.sigma_nm
        away = (wavelength_nm - self.at_rest.center_nm) / sigma
        change = self.center_rates[:, None] * away + self.sigma_rates[:, None] * away**2
        change = (change - (change @ weights)[:, None]) / sigma
        return cast("Floats", Dual(weights, weights * change))

    def lost_share(self, wavelength_nm: Floats) -> float:
        """Part outside the grid, with the rates of its closed form."""
        lost = self.at_rest.lost_share(wavelength_nm)
        if wavelength_nm.size == 1:
            return lost
        sigma, rates = self.at_rest.sigma_nm, np.zeros_like(self.center_rates)
        for end, sign in ((float(wavelength_nm[0]), -1.0), (float(wavelength_nm[-1]), 1.0)):
            away = (end - self.at_rest.center_nm) / sigma
            bell = math.exp(-(away**2) / 2.0) / math.sqrt(2.0 * math.pi)
            rates += sign * bell / sigma * (self.center_rates + away * self.sigma_rates)
        return cast("float", Dual(lost, rates))


__all__ = ["varied_case"]
