"""Intrinsic photon spectra of emitters and their averages on a case's wavelength grid."""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

Quantity = Literal["photons", "power"]

#: Beyond a spectrum table the spectrum counts as zero if that end is under this share of the peak.
END_SHARE = 0.01

FWHM_PER_SIGMA = 2 * math.sqrt(2 * math.log(2))


def trapezoid_weights(x: NDArray[np.float64]) -> NDArray[np.float64]:
    """Weights w with sum(w f(x)) = trapezoid rule of f over the ascending points `x`.

    A single point weighs 1.
    """
    if x.size == 1:
        return np.ones(1)
    half_step = np.diff(x) / 2
    weights = np.zeros(x.size)
    weights[:-1] += half_step
    weights[1:] += half_step
    return weights


class Spectrum(ABC):
    """Intrinsic photon spectrum of an emitter, of the bulk film, in photons per nm."""

    __slots__ = ()

    @property
    def line_nm(self) -> float | None:
        """Wavelength of a spectral line in nm; None for every extended spectrum."""
        return None

    @property
    @abstractmethod
    def peak_nm(self) -> float:
        """Vacuum wavelength in nm where the photon spectrum is largest."""

    def grid_nm(self, wavelength_nm: NDArray[np.float64]) -> NDArray[np.float64]:
        """Wavelengths in nm at which this emitter is to be evaluated on a case's grid."""
        return wavelength_nm

    @abstractmethod
    def photons(self, wavelength_nm: NDArray[np.float64]) -> NDArray[np.float64]:
        """Photons per nm in arbitrary units, shape of `wavelength_nm`."""

    def density(self, wavelength_nm: NDArray[np.float64]) -> NDArray[np.float64]:
        """Photons per nm, normalized on the grid by the trapezoid rule.

        Parameters
        ----------
        wavelength_nm : array, shape (n,)
            The case's ascending grid in nm.

        Returns
        -------
        array, shape (n,)
            In 1/nm. A grid of a single wavelength gives 1 (its weight is 1).

        Raises
        ------
        ValueError
            If the spectrum is zero everywhere on the grid, or is a line.
        """
        if wavelength_nm.size == 1:
            return np.ones(1)
        photons = self.photons(wavelength_nm)
        total = float(trapezoid_weights(wavelength_nm) @ photons)
        if not total > 0:
            raise ValueError("the spectrum is zero at every wavelength of the grid")
        return photons / total

    def weights(self, wavelength_nm: NDArray[np.float64]) -> NDArray[np.float64]:
        """Weights of a spectral average: `density` times the trapezoid weights.

        Parameters
        ----------
        wavelength_nm : array, shape (n,)
            The case's ascending grid in nm (for a line: exactly its wavelength, see `grid_nm`).

        Returns
        -------
        array, shape (n,)
            Dimensionless, sum 1.

        Raises
        ------
        ValueError
            As `density`.
        """
        weights = self.density(wavelength_nm) * trapezoid_weights(wavelength_nm)
        return np.asarray(weights / weights.sum())

    @abstractmethod
    def lost_share(self, wavelength_nm: NDArray[np.float64]) -> float:
        """Part of the spectrum's own integral outside the grid, 0 to 1.

        Zero for a line and for a single wavelength.
        """

    def cut_ends(self, wavelength_nm: NDArray[np.float64]) -> tuple[tuple[str, float], ...]:
        """List ends of a table inside the grid where the spectrum is too high to be cut.

        Returns
        -------
        tuple of (str, float)
            ``"start"`` or ``"end"`` with the share of the peak there; empty if all is well.
        """
        return ()


@dataclass(frozen=True, slots=True)
class LineSpectrum(Spectrum):
    """A spectral line, evaluated exactly there.

    Attributes
    ----------
    at_nm : float
        Vacuum wavelength in nm.
    """

    at_nm: float

    @property
    def line_nm(self) -> float:
        """Wavelength of the line in nm."""
        return self.at_nm

    @property
    def peak_nm(self) -> float:
        """Wavelength of the line in nm."""
        return self.at_nm

    def grid_nm(self, wavelength_nm: NDArray[np.float64]) -> NDArray[np.float64]:
        """Wavelength of the line in nm, shape (1,), whatever the case's grid."""
        return np.array([self.at_nm])

    def photons(self, wavelength_nm: NDArray[np.float64]) -> NDArray[np.float64]:
        """Refuse: a line has no value per nm.

        Raises
        ------
        ValueError
            Always.
        """
        raise ValueError(f"the line at {self.at_nm:g} nm has no density per nm")

    def density(self, wavelength_nm: NDArray[np.float64]) -> NDArray[np.float64]:
        """Refuse: see `photons`."""
        return self.photons(wavelength_nm)

    def weights(self, wavelength_nm: NDArray[np.float64]) -> NDArray[np.float64]:
        """Weight 1 at the line.

        Raises
        ------
        ValueError
            If asked at anything but the line's own wavelength.
        """
        if wavelength_nm.shape != (1,) or wavelength_nm[0] != self.at_nm:
            raise ValueError(f"the line at {self.at_nm:g} nm is evaluated exactly there")
        return np.ones(1)

    def lost_share(self, wavelength_nm: NDArray[np.float64]) -> float:
        """Zero: a line need not lie on the grid."""
        return 0.0


@dataclass(frozen=True, slots=True)
class GaussianSpectrum(Spectrum):
    """Gaussian in photon number per nm.

    Attributes
    ----------
    center_nm, fwhm_nm : float
        Peak wavelength and full width at half maximum in nm.
    """

    center_nm: float
    fwhm_nm: float

    @property
    def peak_nm(self) -> float:
        """Peak wavelength in nm."""
        return self.center_nm

    @property
    def sigma_nm(self) -> float:
        """Standard deviation in nm."""
        return self.fwhm_nm / FWHM_PER_SIGMA

    def photons(self, wavelength_nm: NDArray[np.float64]) -> NDArray[np.float64]:
        """Photons per nm, 1 at the largest value among `wavelength_nm`.

        Relative to the largest value on the grid, since far from the peak the plain Gaussian
        would vanish in rounding and leave nothing to normalize.
        """
        with np.errstate(over="ignore"):
            exponent = ((wavelength_nm - self.center_nm) / self.sigma_nm) ** 2 / 2
        if exponent.min() == np.inf:  # too far off for any number: no light
            return np.zeros(wavelength_nm.shape)
        return np.asarray(np.exp(exponent.min() - exponent))

    def lost_share(self, wavelength_nm: NDArray[np.float64]) -> float:
        """Part of the Gaussian outside the grid, in closed form by the error function."""
        if wavelength_nm.size == 1:
            return 0.0
        scale = self.sigma_nm * math.sqrt(2)
        below = math.erfc((self.center_nm - float(wavelength_nm[0])) / scale) / 2
        above = math.erfc((float(wavelength_nm[-1]) - self.center_nm) / scale) / 2
        return below + above


@dataclass(frozen=True, slots=True, eq=False)
class TableSpectrum(Spectrum):
    """Photon spectrum through table points, linear between them, zero outside.

    Attributes
    ----------
    points_nm : array, shape (n,)
        Ascending wavelengths in nm.
    photons_per_nm : array, shape (n,)
        Photon number per nm at the points, arbitrary units.
    """

    points_nm: NDArray[np.float64]
    photons_per_nm: NDArray[np.float64]

    @classmethod
    def from_table(
        cls,
        wavelength_nm: NDArray[np.float64],
        value: NDArray[np.float64],
        quantity: Quantity,
    ) -> TableSpectrum:
        """Spectrum from a measured table.

        Parameters
        ----------
        wavelength_nm, value : arrays, shape (n,)
            Ascending wavelengths in nm and values per nm.
        quantity : {"photons", "power"}
            Power per nm is turned into photons at the table's own points: photons ∝ value * λ.
        """
        photons = value * wavelength_nm if quantity == "power" else value
        photons = np.array(photons / photons.max() if photons.max() > 0 else photons)
        points = np.array(wavelength_nm)
        photons.setflags(write=False)
        points.setflags(write=False)
        return cls(points, photons)

    def __reduce__(self) -> tuple[object, ...]:
        """Pickle through `from_table`, which makes the arrays read-only again."""
        return (TableSpectrum.from_table, (self.points_nm, self.photons_per_nm, "photons"))

    @property
    def peak_nm(self) -> float:
        """Wavelength in nm of the highest table point."""
        return float(self.points_nm[int(np.argmax(self.photons_per_nm))])

    def photons(self, wavelength_nm: NDArray[np.float64]) -> NDArray[np.float64]:
        """Photons per nm relative to the highest table point; zero outside the table."""
        return np.interp(wavelength_nm, self.points_nm, self.photons_per_nm, left=0.0, right=0.0)

    def lost_share(self, wavelength_nm: NDArray[np.float64]) -> float:
        """Part of the table's trapezoidal integral outside the grid."""
        if wavelength_nm.size == 1:
            return 0.0
        total = float(np.trapezoid(self.photons_per_nm, self.points_nm))
        inside = (self.points_nm > wavelength_nm[0]) & (self.points_nm < wavelength_nm[-1])
        ends = np.clip([wavelength_nm[0], wavelength_nm[-1]], self.points_nm[0], self.points_nm[-1])
        points = np.concatenate(([ends[0]], self.points_nm[inside], [ends[1]]))
        kept = float(np.trapezoid(self.photons(points), points))
        return max(0.0, 1 - kept / total)

    def cut_ends(self, wavelength_nm: NDArray[np.float64]) -> tuple[tuple[str, float], ...]:
        """List ends of the table inside the grid that are not under 1 % of the peak."""
        peak = float(self.photons_per_nm.max())
        ends = (
            ("start", wavelength_nm[0] < self.points_nm[0], self.photons_per_nm[0]),
            ("end", wavelength_nm[-1] > self.points_nm[-1], self.photons_per_nm[-1]),
        )
        return tuple(
            (name, float(value) / peak)
            for name, inside, value in ends
            if inside and not value < END_SHARE * peak
        )
