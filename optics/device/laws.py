"""The formulas behind the materials: permittivity against wavelength.

Small frozen objects rather than closures, so that materials can be sent to worker processes.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from optics.device import mixing
from optics.device.constants import HC_EV_NM
from optics.device.materials import ComplexArray, FloatArray, Material, UndefinedError

MixRule = Literal["bruggeman", "linear"]

# Nearer to a resonance than this (relative, in λ²) a Sellmeier formula is not evaluated.
POLE_WIDTH = 1e-6

MIX_RULES: dict[str, Callable[[ComplexArray, FloatArray], ComplexArray]] = {
    "bruggeman": mixing.bruggeman,
    "linear": mixing.volume_average,
}


@dataclass(frozen=True, slots=True)
class Constant:
    """The same permittivity everywhere."""

    ordinary: complex
    extraordinary: complex

    def __call__(self, wavelength_nm: FloatArray, /) -> tuple[ComplexArray, ComplexArray]:
        """Return ordinary and extraordinary permittivity, as `Law` says."""
        ordinary = np.full(wavelength_nm.shape, self.ordinary, dtype=np.complex128)
        return ordinary, np.full(wavelength_nm.shape, self.extraordinary, dtype=np.complex128)


@dataclass(frozen=True, slots=True, eq=False)
class Tabulated:
    """Linear in n and in k against wavelength between the points of a table."""

    wavelength_nm: FloatArray
    n: FloatArray
    k: FloatArray

    def __call__(self, wavelength_nm: FloatArray, /) -> tuple[ComplexArray, ComplexArray]:
        """Return ordinary and extraordinary permittivity, as `Law` says."""
        n = _between_points(wavelength_nm, self.wavelength_nm, self.n)
        k = _between_points(wavelength_nm, self.wavelength_nm, self.k)
        return _isotropic((n + 1j * k) ** 2)


@dataclass(frozen=True, slots=True)
class Pair:
    """Ordinary and extraordinary permittivity from two isotropic materials."""

    ordinary: Material
    extraordinary: Material

    def __call__(self, wavelength_nm: FloatArray, /) -> tuple[ComplexArray, ComplexArray]:
        """Return ordinary and extraordinary permittivity, as `Law` says."""
        return (
            self.ordinary.permittivity(wavelength_nm)[0],
            self.extraordinary.permittivity(wavelength_nm)[0],
        )


@dataclass(frozen=True, slots=True)
class Cauchy:
    """Index as a polynomial in 1/λ², λ in nm; constant k."""

    coefficients: tuple[float, ...]
    k: float

    def __call__(self, wavelength_nm: FloatArray, /) -> tuple[ComplexArray, ComplexArray]:
        """Return ordinary and extraordinary permittivity, as `Law` says."""
        inverse_square = wavelength_nm**-2.0
        n = np.zeros_like(wavelength_nm)
        for coefficient in reversed(self.coefficients):
            n = n * inverse_square + coefficient
        if np.any(n <= 0.0):
            raise UndefinedError(n <= 0.0, "a refractive index at or below 0", "n > 0")
        return _isotropic(np.square(n + 1j * self.k, dtype=np.complex128))


@dataclass(frozen=True, slots=True, eq=False)
class Sellmeier:
    """n² = 1 + Σ b λ²/(λ² - c), λ in µm."""

    b: FloatArray
    c_um2: FloatArray

    def __call__(self, wavelength_nm: FloatArray, /) -> tuple[ComplexArray, ComplexArray]:
        """Return ordinary and extraordinary permittivity, as `Law` says."""
        squared_um2 = (wavelength_nm[:, None] * 1e-3) ** 2
        on_pole = np.any(np.abs(squared_um2 - self.c_um2) <= POLE_WIDTH * self.c_um2, axis=1)
        if np.any(on_pole):
            raise UndefinedError(
                on_pole, "a resonance of the formula", "wavelengths away from √c_um2"
            )
        squared_index = 1.0 + (self.b * squared_um2 / (squared_um2 - self.c_um2)).sum(axis=1)
        if np.any(squared_index <= 0.0):
            raise UndefinedError(squared_index <= 0.0, "n² at or below 0", "n² > 0")
        return _isotropic(squared_index.astype(np.complex128))


@dataclass(frozen=True, slots=True)
class LorentzDrude:
    """Free and bound electrons, oscillators as (f, Γ, ω_j), energies in eV."""

    plasma_ev: float
    f0: float
    gamma0_ev: float
    oscillators: tuple[tuple[float, float, float], ...]

    def __call__(self, wavelength_nm: FloatArray, /) -> tuple[ComplexArray, ComplexArray]:
        """Return ordinary and extraordinary permittivity, as `Law` says."""
        photon_eV = HC_EV_NM / wavelength_nm
        squared_eV2 = self.plasma_ev**2
        epsilon = 1.0 - self.f0 * squared_eV2 / (photon_eV * (photon_eV + 1j * self.gamma0_ev))
        for f, gamma_eV, omega_eV in self.oscillators:
            damping = 1j * photon_eV * gamma_eV
            epsilon = epsilon + f * squared_eV2 / (omega_eV**2 - photon_eV**2 - damping)
        # Undamped terms leave -0.0 in the imaginary part, which would flip the root of ε.
        return _isotropic(epsilon.real + 1j * (epsilon.imag + 0.0))


@dataclass(frozen=True, slots=True, eq=False)
class Mix:
    """Isotropic components by volume fraction."""

    components: tuple[Material, ...]
    fractions: FloatArray
    rule: MixRule

    def __call__(self, wavelength_nm: FloatArray, /) -> tuple[ComplexArray, ComplexArray]:
        """Return ordinary and extraordinary permittivity, as `Law` says."""
        parts = np.stack([part.permittivity(wavelength_nm)[0] for part in self.components])
        return _isotropic(MIX_RULES[self.rule](parts, self.fractions))


def _isotropic(epsilon: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    return epsilon, epsilon.copy()


def _between_points(x: FloatArray, points: FloatArray, values: FloatArray) -> FloatArray:
    """Linear interpolation that rounding cannot push outside the two neighboring values."""
    left = np.clip(np.searchsorted(points, x, side="right") - 1, 0, points.size - 2)
    low = np.minimum(values[left], values[left + 1])
    high = np.maximum(values[left], values[left + 1])
    return np.asarray(np.clip(np.interp(x, points, values), low, high), dtype=np.float64)
