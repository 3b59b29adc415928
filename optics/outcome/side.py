"""What is seen of a device from one side: radiance, luminance, color and their summary."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from optics.device.constants import HC_EV_NM
from optics.outcome import color, photometry
from optics.outcome.directional import (
    POLARIZATIONS,
    Source,
    exitance,
    radiance,
    unbounded_at_grazing,
)

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case

    Floats = NDArray[np.float64]

Curve = tuple[float | None, ...]
# Where the luminance is looked at for its half angle before that is refined.
_EVERY_DEGREE = np.arange(0.0, 91.0)


class Outside(NamedTuple):
    """What turns light per current into light."""

    current_A_m2: float | None
    voltage_V: float | None
    lit_share: float  # aperture ratio times duty


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
        return self.duv is not None and (self.excitation_purity or 0.0) <= (
            color.LARGEST_PURITY_WHITE
        )

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


def observed(
    case: Case, emitting: Sequence[Source], side: int, angle_deg: Floats, outside: Outside
) -> tuple[SideAngular, list[Floats]]:
    """Look at a device from one side.

    Returns
    -------
    SideAngular
    list of float (w, n, 2)
        Spectral radiance of every emitter in W/(sr A nm) at the angles asked for, s and p.
    """
    unbounded = any(unbounded_at_grazing(case, source, side) for source in emitting)
    every = np.union1d(angle_deg, _EVERY_DEGREE)
    rays = [radiance(case, source, side, every) for source in emitting]
    asked = np.searchsorted(every, angle_deg)
    seen = _add_up(emitting, rays)
    if unbounded:  # the last one is 90 deg
        seen = _Seen(*(part[:-1] for part in seen))
    at_all = _summary(case, emitting, side, outside, _luminance(seen)[0])

    def luminance(inner_deg: Floats) -> Floats:
        inner = [radiance(case, source, side, inner_deg) for source in emitting]
        return _luminance(_add_up(emitting, inner))

    half = photometry.half_angle_deg(every[: len(seen.xyz)], _luminance(seen), luminance)
    spectrum = _normal_spectrum(emitting, rays)
    top = _peak(emitting, rays, spectrum)
    result = SideAngular(
        angle_deg=tuple(angle_deg.tolist()),
        half_luminance_angle_deg=half,
        peak_nm_normal=top.wavelength_nm,
        fwhm_nm_normal=top.fwhm_nm,
        normal_spectrum=spectrum,
        grazing_is_unbounded=unbounded,
        **_curves(seen, asked, outside.current_A_m2),
        **at_all,
    )
    return result, [ray[:, asked] for ray in rays]


class _Seen(NamedTuple):
    """Sums over emitters and wavelengths, per current: W/(sr A)."""

    watts: Floats  # (n, 2) radiance, s and p
    xyz: Floats  # (n, 2, 3) radiance weighted by the observer


def _add_up(emitting: Sequence[Source], rays: Sequence[Floats]) -> _Seen:
    watts, xyz = 0.0, 0.0
    for source, ray in zip(emitting, rays, strict=True):
        watts = watts + np.einsum("w,wnp->np", source.step_nm, ray)
        weight = source.step_nm[:, None] * color.observer_at(source.wavelength_nm)
        xyz = xyz + np.einsum("wk,wnp->npk", weight, ray)
    return _Seen(np.asarray(watts), np.asarray(xyz))


def _luminance(seen: _Seen) -> Floats:
    """Luminance over current density (n,), cd/A."""
    result: Floats = photometry.LUMENS_PER_WATT * seen.xyz[:, :, 1].sum(axis=1)
    return result


def _curves(seen: _Seen, asked: NDArray[np.int64], current: float | None) -> dict[str, Any]:
    """Everything by angle, and the color along the normal."""
    luminance, normal = _luminance(seen), float(_luminance(seen)[0])
    xyz = seen.xyz.sum(axis=1)
    xy, uv = color.chromaticity(xyz)
    distance = np.hypot(*(uv - uv[0]).T)

    def curve(values: Floats) -> Curve:
        """Values at the angles asked for; None for NaN and where there is no limit."""
        known = [float(values[at]) if at < len(values) else np.nan for at in asked]
        return tuple(value if np.isfinite(value) else None for value in known)

    def relative(values: Floats) -> Curve:
        if normal > 0.0:
            return curve(values / normal)
        return curve(values if not luminance.any() else np.full_like(values, np.nan))

    def absolute(values: Floats) -> Curve | None:
        return None if current is None else curve(current * values)

    normal_color = [float(v) if np.isfinite(v) else None for v in (*xy[0], *uv[0])]
    polarized: dict[str, Curve | None] = {}
    for place, name in enumerate(POLARIZATIONS):
        visible = photometry.LUMENS_PER_WATT * seen.xyz[:, place, 1]
        polarized[f"radiance_{name}_W_sr_m2"] = absolute(seen.watts[:, place])
        polarized[f"luminance_{name}_cd_m2"] = absolute(visible)
        polarized[f"relative_luminance_{name}"] = relative(visible)
    return {
        "radiance_W_sr_m2": absolute(seen.watts.sum(axis=1)),
        "luminance_cd_m2": absolute(luminance),
        "relative_luminance": relative(luminance),
        "x": curve(xy[:, 0]),
        "y": curve(xy[:, 1]),
        "u_prime": curve(uv[:, 0]),
        "v_prime": curve(uv[:, 1]),
        "delta_uv": curve(distance),
        **dict(
            zip(
                ("x_normal", "y_normal", "u_prime_normal", "v_prime_normal"),
                normal_color,
                strict=True,
            )
        ),
        **_named_color(normal_color[0], normal_color[1], normal),
        "polarized": MappingProxyType(polarized),
    }


def _named_color(x: float | None, y: float | None, normal: float) -> dict[str, float | None]:
    """What a color along the normal is called, where that means something."""
    if x is None or y is None:
        hue, warmth, index = None, None, None
    else:
        hue, warmth = color.dominant((x, y)), color.temperature((x, y))
        if hue is not None and hue.purity > color.LARGEST_PURITY_GLOWING:
            warmth = None
        index = photometry.ratio(normal, y)
    return {
        "blue_index": index,
        "dominant_wavelength_nm": None if hue is None else hue.wavelength_nm,
        "excitation_purity": None if hue is None else hue.purity,
        "correlated_color_temperature_K": None if warmth is None else warmth.kelvin,
        "duv": None if warmth is None else warmth.duv,
    }


def _summary(
    case: Case, emitting: Sequence[Source], side: int, outside: Outside, normal: np.float64
) -> dict[str, Any]:
    """Numbers of the whole side; integrals over angle are the light budget's own."""
    watts, lumens, photons = 0.0, 0.0, 0.0
    for source in emitting:
        power = source.step_nm * exitance(case, source, side)
        watts += float(power.sum())
        visible = power @ color.observer_at(source.wavelength_nm)[:, 1]
        lumens += photometry.LUMENS_PER_WATT * float(visible)
        photons += float(power @ source.wavelength_nm) / HC_EV_NM
    current, voltage = outside.current_A_m2, outside.voltage_V
    average = None if current is None else float(normal) * current
    return {
        "luminance_normal_cd_m2": average,
        "peak_luminance_normal_cd_m2": None if average is None else average / outside.lit_share,
        "current_efficiency_cd_A": float(normal),
        "luminous_exitance_lm_m2": None if current is None else lumens * current,
        "radiant_exitance_W_m2": None if current is None else watts * current,
        "luminous_efficacy_lm_W": None if voltage is None else lumens / voltage,
        "radiant_efficiency_W_W": None if voltage is None else watts / voltage,
        "luminous_efficacy_of_radiation_lm_W": photometry.ratio(lumens, watts),
        "external_quantum_efficiency": photons,
        "lambertian_ratio": photometry.ratio(lumens, np.pi * float(normal)),
    }


def _normal_spectrum(emitting: Sequence[Source], rays: Sequence[Floats]) -> tuple[Floats, Floats]:
    """Spectral radiance along the normal, if all light is spread over the grid."""
    if any(source.is_line for source in emitting) or emitting[0].wavelength_nm.size < 2:
        return np.zeros(0), np.zeros(0)
    total = np.sum([ray[:, 0].sum(axis=1) for ray in rays], axis=0)
    total.setflags(write=False)
    return emitting[0].wavelength_nm, total


def _peak(
    emitting: Sequence[Source], rays: Sequence[Floats], spectrum: tuple[Floats, Floats]
) -> photometry.Peak:
    """Peak along the normal: of what is per nm, or else the strongest line."""
    spread = [ray[:, 0].sum(axis=1) for source, ray in zip(emitting, rays, strict=True)
              if not source.is_line]  # fmt: skip
    if spread:
        grid = next(source.wavelength_nm for source in emitting if not source.is_line)
        found = photometry.peak(grid, np.sum(spread, axis=0))
        if found.wavelength_nm is not None:
            return found
    lines = [(float(ray[0, 0].sum()), float(source.wavelength_nm[0]))
             for source, ray in zip(emitting, rays, strict=True) if source.is_line]  # fmt: skip
    power, at = max(lines, default=(0.0, 0.0))
    return photometry.Peak(at if power > 0.0 else None, None)
