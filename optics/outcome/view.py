"""A device looked at from one side: everything is computed when it is first asked for.

Studies ask for a few numbers of many devices, `angular` for all numbers of one; both ask here.
Sources whose numbers carry rates (`dual.Dual`) give numbers that do.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import cached_property
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from optics.device.constants import HC_EV_NM
from optics.outcome import color, photometry
from optics.outcome.directional import (
    Source,
    exitance,
    radiance,
    unbounded_at_grazing,
)
from optics.outcome.dual import plain, value_of

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.drive import Drive

    Floats = NDArray[np.float64]

Curve = tuple[float | None, ...]
# Where the luminance is looked at for its half angle before that is refined.
_EVERY_DEGREE = np.arange(0.0, 91.0)
_NORMAL = np.zeros(1)
_AMPERE_PER_M2 = 10.0  # one mA/cm2


class Seen(NamedTuple):
    """Sums over emitters and wavelengths, per current: W/(sr A)."""

    watts: Floats  # (n, 2) radiance, s and p
    xyz: Floats  # (n, 2, 3) radiance weighted by the observer

    @property
    def luminance(self) -> Floats:
        """Luminance over current density (n,), cd/A."""
        result: Floats = photometry.LUMENS_PER_WATT * self.xyz[:, :, 1].sum(axis=1)
        return result


class Totals(NamedTuple):
    """What leaves on the side at all angles together, per current."""

    watts: float  # W/A
    lumens: float  # lm/A
    photons: float  # per charge


class View:
    """One side of a device, from which `side.NUMBERS` are read.

    Parameters
    ----------
    case : Case
    emitting : sequence of Source
        Of this case.
    side : int
        0 bottom, 1 top.
    angle_deg : float (n,)
        Ascending or not, each once.
    threads : int, optional
        At most so many; as many as there are cores if not given. No number depends on it.
    thorough : bool
        Everything will be asked for: look at every degree at once.
    """

    def __init__(
        self,
        case: Case,
        emitting: Sequence[Source],
        side: int,
        angle_deg: Floats,
        *,
        threads: int | None = None,
        thorough: bool = False,
    ) -> None:
        self._case, self._emitting, self._side = case, emitting, side
        self._angles, self._threads = angle_deg, threads
        self._looked_at = np.union1d(angle_deg, _EVERY_DEGREE if thorough else _NORMAL)

    @cached_property
    def rays(self) -> list[Floats]:
        """Spectral radiance (w, n, 2) of every emitter at the angles asked for; W/(sr A nm)."""
        return [ray[:, self._asked] for ray in self._rays]

    @cached_property
    def _rays(self) -> list[Floats]:
        return self._radiance(self._looked_at)

    def _radiance(self, angle_deg: Floats) -> list[Floats]:
        return [
            radiance(self._case, source, self._side, angle_deg, self._threads)
            for source in self._emitting
        ]

    @cached_property
    def _asked(self) -> NDArray[np.int64]:
        """Places of the angles asked for among those that are looked at, of which 0 is first."""
        return np.searchsorted(self._looked_at, self._angles)

    @cached_property
    def seen(self) -> Seen:
        """Sums at all angles that are looked at, the normal first."""
        return self._bounded(self._looked_at, self._rays)

    def _bounded(self, angle_deg: Floats, rays: Sequence[Floats]) -> Seen:
        """Sums at ascending angles, without 90 deg where there is no limit."""
        seen = add_up(self._emitting, rays)
        if angle_deg[-1] == 90.0 and self.grazing_is_unbounded:
            return Seen(*(part[:-1] for part in seen))
        return seen

    @property
    def angle_deg(self) -> tuple[float, ...]:
        """Angles asked for."""
        return tuple(self._angles.tolist())

    @cached_property
    def grazing_is_unbounded(self) -> bool:
        """Whether radiance grows without bound toward 90 deg."""
        return any(unbounded_at_grazing(self._case, one, self._side) for one in self._emitting)

    def curve(self, values: Floats) -> Curve:
        """Values at the angles asked for; None for NaN and where there is no limit."""
        known = [plain(values[at]) if at < values.size else np.nan for at in self._asked]
        return tuple(value if np.isfinite(value) else None for value in known)

    def relative(self, values: Floats) -> Curve:
        """Curve of amounts of light over the luminance along the normal."""
        luminance = self.seen.luminance
        if luminance[0] > 0.0:
            return self.curve(values / luminance[0])
        lit = self.totals.lumens > 0.0
        return self.curve(np.nan * values if lit else values)

    def absolute(self, values: Floats) -> Curve | None:
        """Curve of amounts of light; None without a current density."""
        current = self.current
        return None if current is None else self.curve(current * values)

    @cached_property
    def chromaticity(self) -> tuple[Floats, Floats]:
        """x, y and u', v' (n, 2) at all angles that are looked at."""
        return color.chromaticity(self.seen.xyz.sum(axis=1))

    @property
    def delta_uv(self) -> Floats:
        """Distance (n,) in u', v' from the color along the normal."""
        uv = self.chromaticity[1]
        away = uv - uv[0]
        distance: Floats = np.hypot(away[:, 0], away[:, 1])
        return distance

    @property
    def normal_color(self) -> tuple[float | None, ...]:
        """x, y, u', v' along the normal; None without visible light."""
        values = [plain(part[0, place]) for part in self.chromaticity for place in range(2)]
        return tuple(value if np.isfinite(value) else None for value in values)

    @property
    def normal(self) -> float:
        """Luminance along the normal over current density, cd/A."""
        number: float = plain(self.seen.luminance[0])
        return number

    @cached_property
    def hue(self) -> color.Dominant | None:
        """Dominant wavelength and purity along the normal."""
        x, y, *_ = self.normal_color
        return None if x is None or y is None else color.dominant((x, y))

    @cached_property
    def warmth(self) -> color.Temperature | None:
        """Color temperature along the normal, where that means something."""
        x, y, *_ = self.normal_color
        if x is None or y is None:
            return None
        if self.hue is not None and self.hue.purity > color.LARGEST_PURITY_GLOWING:
            return None
        return color.temperature((x, y))

    @cached_property
    def normal_spectrum(self) -> tuple[Floats, Floats]:
        """Wavelengths and spectral radiance along the normal, if all light is on the grid."""
        emitting = self._emitting
        if any(source.is_line for source in emitting) or emitting[0].wavelength_nm.size < 2:
            return np.zeros(0), np.zeros(0)
        total = np.sum([ray[:, 0].sum(axis=1) for ray in self._rays], axis=0)
        total.setflags(write=False)
        return emitting[0].wavelength_nm, total

    @cached_property
    def peak(self) -> photometry.Peak:
        """Peak along the normal: of what is per nm, or else the strongest line."""
        pairs = list(zip(self._emitting, self._rays, strict=True))
        spread = [ray[:, 0].sum(axis=1) for source, ray in pairs if not source.is_line]
        if spread:
            grid = next(source.wavelength_nm for source, _ in pairs if not source.is_line)
            found = photometry.peak(grid, sum(spread[1:], spread[0]))
            if found.wavelength_nm is not None:
                return found
        lines = [
            (float(value_of(ray[0, 0].sum())), float(source.wavelength_nm[0]))
            for source, ray in pairs
            if source.is_line
        ]
        power, at = max(lines, default=(0.0, 0.0))
        return photometry.Peak(at if power > 0.0 else None, None)

    @property
    def current(self) -> float | None:
        """Current density in A/m2, averaged over the display area."""
        current = self._case.drive.current_density_mA_cm2
        return None if current is None else _AMPERE_PER_M2 * current

    @property
    def drive(self) -> Drive:
        """Electrical side of the case."""
        return self._case.drive

    @cached_property
    def totals(self) -> Totals:
        """Integrals over angle: the light budget's own."""
        watts, lumens, photons = 0.0, 0.0, 0.0
        for source in self._emitting:
            power = source.step_nm * exitance(self._case, source, self._side)
            watts += plain(power.sum())
            visible = power @ color.observer_at(source.wavelength_nm)[:, 1]
            lumens += photometry.LUMENS_PER_WATT * plain(visible)
            photons += plain(power @ source.wavelength_nm) / HC_EV_NM
        return Totals(watts, lumens, photons)

    @cached_property
    def half_angle_deg(self) -> float | None:
        """Smallest angle with half the luminance along the normal."""
        every, rays = self._looked_at, self._rays
        if not np.isin(_EVERY_DEGREE, every).all():
            every = np.union1d(every, _EVERY_DEGREE)
            rays = self._radiance(every)
        luminance = self._bounded(every, rays).luminance

        def between(inner_deg: Floats) -> Floats:
            return add_up(self._emitting, self._radiance(inner_deg)).luminance

        return photometry.half_angle_deg(every[: luminance.size], luminance, between)


def add_up(emitting: Sequence[Source], rays: Sequence[Floats]) -> Seen:
    """Sum spectral radiance (w, n, 2) over emitters and wavelengths."""
    watts: Any = 0.0
    xyz: Any = 0.0
    for source, ray in zip(emitting, rays, strict=True):
        watts = watts + np.einsum("w,wnp->np", source.step_nm, ray)
        weight = source.step_nm[:, None] * color.observer_at(source.wavelength_nm)
        xyz = xyz + np.einsum("wk,wnp->npk", weight, ray)
    return Seen(watts, xyz)
