"""What is seen of a device from one side, complete: every number of its `View`."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.outcome import color, photometry
from optics.outcome.directional import POLARIZATIONS

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.outcome.view import View

    Floats = NDArray[np.float64]

Curve = tuple[float | None, ...]


@dataclass(frozen=True, slots=True, eq=False)
class SideAngular:
    """Emission of one side. Null is None; curves have one value for each angle.

    Attributes
    ----------
    angle_deg : tuple of float
        In the medium outside; in the slab's medium where its exit is matched.
    radiance_W_sr_m2, luminance_cd_m2 : tuple of float or None
        Average over the display area; None without a current density.
    relative_luminance : tuple of (float or None)
        Over that along the normal.
    x, y, u_prime, v_prime : tuple of (float or None)
        CIE 1931 and 1976 chromaticity; None where no visible light goes.
    delta_uv : tuple of (float or None)
        Distance in u', v' from the color along the normal.
    luminance_normal_cd_m2, peak_luminance_normal_cd_m2 : float or None
        Along the normal, average, and of the emitting area while it is on.
    current_efficiency_cd_A : float
        Luminance along the normal over current density.
    luminous_exitance_lm_m2, radiant_exitance_W_m2 : float or None
        Over all angles; None without a current density.
    luminous_efficacy_lm_W, radiant_efficiency_W_W : float or None
        Exitance over electrical power; None without a voltage.
    luminous_efficacy_of_radiation_lm_W : float or None
    external_quantum_efficiency : float
        Photons per charge on this side, after filter and polarizer.
    lambertian_ratio : float or None
        Luminous exitance over pi times the luminance along the normal.
    half_luminance_angle_deg : float or None
        Smallest angle with half the luminance along the normal.
    blue_index : float or None
        Current efficiency over y, along the normal.
    peak_nm_normal, fwhm_nm_normal : float or None
        Of spectral radiance in power along the normal.
    dominant_wavelength_nm, excitation_purity : float or None
        Along the normal, against equal-energy white.
    correlated_color_temperature_K, duv : float or None
        Along the normal; None far from black bodies and for saturated colors.
    polarized : mapping
        Radiance and relative luminance of s and p apart, by key of the JSON result.
    normal_spectrum : tuple of two float arrays
        Wavelengths in nm, and spectral radiance along the normal in W/(sr A nm); empty where
        lines or a single wavelength make a spectrum per nm meaningless.
    grazing_is_unbounded : bool
        Radiance has no limit toward 90 deg.
    """

    angle_deg: tuple[float, ...]
    radiance_W_sr_m2: Curve | None
    luminance_cd_m2: Curve | None
    relative_luminance: Curve
    x: Curve
    y: Curve
    u_prime: Curve
    v_prime: Curve
    delta_uv: Curve
    luminance_normal_cd_m2: float | None
    peak_luminance_normal_cd_m2: float | None
    current_efficiency_cd_A: float
    luminous_exitance_lm_m2: float | None
    radiant_exitance_W_m2: float | None
    luminous_efficacy_lm_W: float | None
    radiant_efficiency_W_W: float | None
    luminous_efficacy_of_radiation_lm_W: float | None
    external_quantum_efficiency: float
    lambertian_ratio: float | None
    half_luminance_angle_deg: float | None
    blue_index: float | None
    peak_nm_normal: float | None
    fwhm_nm_normal: float | None
    x_normal: float | None
    y_normal: float | None
    u_prime_normal: float | None
    v_prime_normal: float | None
    dominant_wavelength_nm: float | None
    excitation_purity: float | None
    correlated_color_temperature_K: float | None
    duv: float | None
    polarized: Mapping[str, Curve | None]
    normal_spectrum: tuple[Floats, Floats]
    grazing_is_unbounded: bool

    @property
    def color_rendering_index(self) -> float | None:
        """General index Ra along the normal; None for light that is not white."""
        return None if not self.is_white else color.rendering_index(*self.normal_spectrum)

    @property
    def is_white(self) -> bool:
        """Whether the color along the normal is near a black body's and not saturated."""
        return _is_white(self.duv, self.excitation_purity)

    @property
    def normal_is_dark(self) -> bool:
        """Whether no visible light goes along the normal."""
        return not self.current_efficiency_cd_A > 0.0

    @property
    def grid_is_narrow(self) -> bool:
        """Whether the wavelength grid ends before the spectrum has fallen to half."""
        return self.normal_spectrum[0].size > 1 and (
            self.peak_nm_normal is not None and self.fwhm_nm_normal is None
        )

    def to_dict(self, *, polarization: bool = False) -> dict[str, Any]:
        """Entry of ``sides`` in the JSON result.

        Parameters
        ----------
        polarization : bool
            With s and p apart.
        """
        hidden = ("polarized", "normal_spectrum", "grazing_is_unbounded")
        entry = {
            field.name: getattr(self, field.name)
            for field in fields(self)
            if field.name not in hidden
        }
        entry["color_rendering_index"] = self.color_rendering_index
        if polarization:
            entry |= self.polarized
        return {key: list(v) if isinstance(v, tuple) else v for key, v in entry.items()}


def _polarized(view: View) -> Mapping[str, Curve | None]:
    found: dict[str, Curve | None] = {}
    for place, name in enumerate(POLARIZATIONS):
        visible = photometry.LUMENS_PER_WATT * view.seen.xyz[:, place, 1]
        found[f"radiance_{name}_W_sr_m2"] = view.absolute(view.seen.watts[:, place])
        found[f"luminance_{name}_cd_m2"] = view.absolute(visible)
        found[f"relative_luminance_{name}"] = view.relative(visible)
    return MappingProxyType(found)


def _times(value: float, factor: float | None) -> float | None:
    return None if factor is None else value * factor


def _over(value: float, divisor: float | None) -> float | None:
    return None if divisor is None else value / divisor


def _peak_luminance(view: View) -> float | None:
    average, drive = _times(view.normal, view.current), view.drive
    return None if average is None else average / (drive.aperture_ratio * drive.duty)


def _blue_index(view: View) -> float | None:
    y = view.normal_color[1]
    return None if y is None else photometry.ratio(view.normal, y)


def _rendering_index(view: View) -> float | None:
    duv, purity = (NUMBERS[key](view) for key in ("duv", "excitation_purity"))
    return color.rendering_index(*view.normal_spectrum) if _is_white(duv, purity) else None


def _is_white(duv: float | None, purity: float | None) -> bool:
    return duv is not None and (purity or 0.0) <= color.LARGEST_PURITY_WHITE


#: How each number of a side is read from a view of it.
NUMBERS: Mapping[str, Callable[[View], Any]] = MappingProxyType(
    {
        "angle_deg": lambda view: view.angle_deg,
        "radiance_W_sr_m2": lambda view: view.absolute(view.seen.watts.sum(axis=1)),
        "luminance_cd_m2": lambda view: view.absolute(view.seen.luminance),
        "relative_luminance": lambda view: view.relative(view.seen.luminance),
        "x": lambda view: view.curve(view.chromaticity[0][:, 0]),
        "y": lambda view: view.curve(view.chromaticity[0][:, 1]),
        "u_prime": lambda view: view.curve(view.chromaticity[1][:, 0]),
        "v_prime": lambda view: view.curve(view.chromaticity[1][:, 1]),
        "delta_uv": lambda view: view.curve(view.delta_uv),
        "luminance_normal_cd_m2": lambda view: _times(view.normal, view.current),
        "peak_luminance_normal_cd_m2": _peak_luminance,
        "current_efficiency_cd_A": lambda view: view.normal,
        "luminous_exitance_lm_m2": lambda view: _times(view.totals.lumens, view.current),
        "radiant_exitance_W_m2": lambda view: _times(view.totals.watts, view.current),
        "luminous_efficacy_lm_W": lambda view: _over(view.totals.lumens, view.drive.voltage_V),
        "radiant_efficiency_W_W": lambda view: _over(view.totals.watts, view.drive.voltage_V),
        "luminous_efficacy_of_radiation_lm_W": lambda view: photometry.ratio(
            view.totals.lumens, view.totals.watts
        ),
        "external_quantum_efficiency": lambda view: view.totals.photons,
        "lambertian_ratio": lambda view: photometry.ratio(view.totals.lumens, np.pi * view.normal),
        "half_luminance_angle_deg": lambda view: view.half_angle_deg,
        "blue_index": _blue_index,
        "peak_nm_normal": lambda view: view.peak.wavelength_nm,
        "fwhm_nm_normal": lambda view: view.peak.fwhm_nm,
        "x_normal": lambda view: view.normal_color[0],
        "y_normal": lambda view: view.normal_color[1],
        "u_prime_normal": lambda view: view.normal_color[2],
        "v_prime_normal": lambda view: view.normal_color[3],
        "dominant_wavelength_nm": lambda view: view.hue and view.hue.wavelength_nm,
        "excitation_purity": lambda view: view.hue and view.hue.purity,
        "correlated_color_temperature_K": lambda view: view.warmth and view.warmth.kelvin,
        "duv": lambda view: view.warmth and view.warmth.duv,
        "color_rendering_index": _rendering_index,
        "polarized": _polarized,
        "normal_spectrum": lambda view: view.normal_spectrum,
        "grazing_is_unbounded": lambda view: view.grazing_is_unbounded,
    }
)


def side_angular(view: View) -> SideAngular:
    """Read everything that a side is known by from a view of it."""
    return SideAngular(**{field.name: NUMBERS[field.name](view) for field in fields(SideAngular)})


def side_number(side: SideAngular | View, key: str) -> Any:
    """One number or curve of a side."""
    return getattr(side, key) if isinstance(side, SideAngular) else NUMBERS[key](side)
