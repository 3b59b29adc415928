"""Shapes of exciton formation zones.

Positions are in nm from the bottom face of the emitter film.
"""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from dataclasses import dataclass
from functools import partial
from typing import TYPE_CHECKING, ClassVar, Literal

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

Face = Literal["top", "bottom"]

# exp(-42) is below a rounding of the zone's largest value: tails beyond it are left out.
_NEGLIGIBLE_EXPONENT = 42.0


class Zone(ABC):
    """Relative density of exciton formation across the emitter film."""

    __slots__ = ()
    shape: ClassVar[str]

    @abstractmethod
    def density(
        self,
        position_nm: NDArray[np.float64],
        thickness_nm: float,
        interval_nm: tuple[float, float],
    ) -> NDArray[np.float64]:
        """Density relative to its largest value in the interval, shape of `position_nm`."""

    def kinks_nm(self, thickness_nm: float) -> tuple[float, ...]:
        """Positions where the density is not smooth."""
        return ()

    def support_nm(
        self, thickness_nm: float, interval_nm: tuple[float, float]
    ) -> tuple[float, float]:
        """Part of the interval outside which the density is negligible."""
        return interval_nm

    def longest_panel_nm(self, thickness_nm: float, interval_nm: tuple[float, float]) -> float:
        """Longest panel of 8 Gauss nodes that resolves the density to about 1e-11."""
        return math.inf


@dataclass(frozen=True, slots=True)
class UniformZone(Zone):
    """The same density everywhere in the film."""

    shape: ClassVar[str] = "uniform"

    def density(
        self,
        position_nm: NDArray[np.float64],
        thickness_nm: float,
        interval_nm: tuple[float, float],
    ) -> NDArray[np.float64]:
        """One everywhere."""
        return np.ones_like(position_nm)


@dataclass(frozen=True, slots=True)
class PointZone(Zone):
    """All excitons at one position.

    Attributes
    ----------
    at : float or None
        Relative position, 0 (bottom face) to 1.
    at_nm : float or None
        Distance in nm from the face `start`; one of `at` and `at_nm` is given.
    start : {"top", "bottom"}
        The face from which `at_nm` counts.
    """

    shape: ClassVar[str] = "point"
    at: float | None = None
    at_nm: float | None = None
    start: Face = "bottom"

    def position_nm(self, thickness_nm: float) -> float:
        """Position in nm from the bottom face."""
        if self.at_nm is None:
            return (self.at or 0.0) * thickness_nm
        return self.at_nm if self.start == "bottom" else thickness_nm - self.at_nm

    def density(
        self,
        position_nm: NDArray[np.float64],
        thickness_nm: float,
        interval_nm: tuple[float, float],
    ) -> NDArray[np.float64]:
        """Refuse: a point has no density."""
        raise TypeError("a point zone has no density")


@dataclass(frozen=True, slots=True)
class ExponentialZone(Zone):
    """Density that falls off exponentially from one face.

    Attributes
    ----------
    start : {"top", "bottom"}
        Face where the density is largest.
    decay_nm : float
        Distance in nm over which it falls to 1/e.
    """

    shape: ClassVar[str] = "exponential"
    start: Face
    decay_nm: float

    def density(
        self,
        position_nm: NDArray[np.float64],
        thickness_nm: float,
        interval_nm: tuple[float, float],
    ) -> NDArray[np.float64]:
        """exp(-distance/decay), 1 at the near end of the interval."""
        low, high = interval_nm
        depth = position_nm - low if self.start == "bottom" else high - position_nm
        return np.asarray(np.exp(-depth / self.decay_nm))

    def support_nm(
        self, thickness_nm: float, interval_nm: tuple[float, float]
    ) -> tuple[float, float]:
        """Within 42 decay lengths of the near end."""
        low, high = interval_nm
        reach = _NEGLIGIBLE_EXPONENT * self.decay_nm
        if self.start == "bottom":
            return low, min(high, low + reach)
        return max(low, high - reach), high

    def longest_panel_nm(self, thickness_nm: float, interval_nm: tuple[float, float]) -> float:
        """Four decay lengths."""
        return 4 * self.decay_nm


@dataclass(frozen=True, slots=True)
class GaussianZone(Zone):
    """Gaussian density, cut to the film.

    Attributes
    ----------
    at : float
        Center, 0 (bottom face) to 1.
    width_nm : float
        Standard deviation in nm.
    """

    shape: ClassVar[str] = "gaussian"
    at: float
    width_nm: float

    def _offset_nm(self, thickness_nm: float, interval_nm: tuple[float, float]) -> float:
        """Distance from the center to the nearest position of the interval."""
        center = self.at * thickness_nm
        return max(interval_nm[0] - center, center - interval_nm[1], 0.0)

    def density(
        self,
        position_nm: NDArray[np.float64],
        thickness_nm: float,
        interval_nm: tuple[float, float],
    ) -> NDArray[np.float64]:
        """exp(-(z - center)²/(2 width²)) over its largest value in the interval."""
        offset = self._offset_nm(thickness_nm, interval_nm)
        distance = np.abs(position_nm - self.at * thickness_nm)
        exponent = (distance - offset) * (distance + offset) / (2 * self.width_nm**2)
        return np.asarray(np.exp(-exponent))

    def kinks_nm(self, thickness_nm: float) -> tuple[float, ...]:
        """Center: smooth there, but panels are best laid out from it."""
        return (self.at * thickness_nm,)

    def support_nm(
        self, thickness_nm: float, interval_nm: tuple[float, float]
    ) -> tuple[float, float]:
        """Where the density is not below exp(-42) of its largest value in the interval."""
        center = self.at * thickness_nm
        offset = self._offset_nm(thickness_nm, interval_nm)
        reach = math.sqrt(offset**2 + 2 * _NEGLIGIBLE_EXPONENT * self.width_nm**2)
        return max(interval_nm[0], center - reach), min(interval_nm[1], center + reach)

    def longest_panel_nm(self, thickness_nm: float, interval_nm: tuple[float, float]) -> float:
        """2.5 standard deviations, or four local decay lengths if the center lies outside."""
        offset = self._offset_nm(thickness_nm, interval_nm)
        wide = 2.5 * self.width_nm
        return min(wide, 4 * self.width_nm**2 / offset) if offset > 0 else wide


@dataclass(frozen=True, slots=True, eq=False)
class TableZone(Zone):
    """Density through table points: linear between them, zero outside.

    Attributes
    ----------
    points : array, shape (n,)
        Ascending positions from the bottom face, in nm or relative to the thickness.
    values : array, shape (n,)
        Densities at the points, arbitrary units.
    relative : bool
        Whether `points` run from 0 (bottom face) to 1.
    """

    shape: ClassVar[str] = "table"
    points: NDArray[np.float64]
    values: NDArray[np.float64]
    relative: bool

    @classmethod
    def from_table(
        cls, points: NDArray[np.float64], values: NDArray[np.float64], *, relative: bool
    ) -> TableZone:
        """Zone with read-only copies of the arrays."""
        own_points = np.array(points, dtype=np.float64)
        own_values = np.array(values, dtype=np.float64)
        own_points.setflags(write=False)
        own_values.setflags(write=False)
        return cls(own_points, own_values, relative)

    def __reduce__(self) -> tuple[object, ...]:
        """Pickle through `from_table`, which makes the arrays read-only again."""
        restore = partial(TableZone.from_table, relative=self.relative)
        return (restore, (self.points, self.values))

    def points_nm(self, thickness_nm: float) -> NDArray[np.float64]:
        """Table positions in nm from the bottom face."""
        return self.points * thickness_nm if self.relative else self.points

    def density(
        self,
        position_nm: NDArray[np.float64],
        thickness_nm: float,
        interval_nm: tuple[float, float],
    ) -> NDArray[np.float64]:
        """Linear interpolation over the table's largest value."""
        largest = float(self.values.max())
        points = self.points_nm(thickness_nm)
        values = np.interp(position_nm, points, self.values, left=0.0, right=0.0)
        return values / largest if largest > 0 else values

    def kinks_nm(self, thickness_nm: float) -> tuple[float, ...]:
        """Every table point."""
        return tuple(float(point) for point in self.points_nm(thickness_nm))

    def support_nm(
        self, thickness_nm: float, interval_nm: tuple[float, float]
    ) -> tuple[float, float]:
        """Where the table is above zero."""
        points = self.points_nm(thickness_nm)
        positive = np.flatnonzero(self.values > 0)
        if positive.size == 0:
            return interval_nm[0], interval_nm[0]
        first = points[max(int(positive[0]) - 1, 0)]
        last = points[min(int(positive[-1]) + 1, points.size - 1)]
        return max(interval_nm[0], float(first)), min(interval_nm[1], float(last))
