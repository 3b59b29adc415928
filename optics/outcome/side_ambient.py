"""One side of a device in light from outside: spectra folded with daylight and the eye."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from optics.outcome.color import chromaticity
from optics.outcome.directional import POLARIZATIONS
from optics.outcome.spectra import unit_of

if TYPE_CHECKING:
    import xarray
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

Curve = tuple[float, ...]
#: Parts of unit incident flux, in the order of the engine's last axis.
PARTS = ("reflectance", "transmittance", "absorptance")
#: Angle of incidence at which the reflectance of displays is measured (common practice, no source).
METER_DEG = 8.0


class Light(NamedTuple):
    """Daylight at a device, and what stands in its way."""

    weights: Floats  # (w, 3) D65 times observer times step, sum of Y = 1
    own_pass: Floats  # (w,) share that filter and polarizer of the lit side let through
    other_pass: Floats  # (w,) those of the other side
    illuminance_lx: float | None


@dataclass(frozen=True, slots=True, eq=False)
class SideAmbient:
    """Response of one side. Curves have one value for each angle; null is None.

    Attributes
    ----------
    angle_deg : tuple of float
        Of incidence and of view.
    luminous_reflectance, luminous_transmittance : tuple of float
        Of D65, with filter and polarizer: passed twice, or on both sides.
    luminous_reflectance_8deg : float
        The same at 8 deg.
    luminous_reflectance_stack, luminous_transmittance_stack, luminous_absorptance_stack
        Tuples of float; films and slabs alone, sum 1.
    luminous_reflectance_stack_8deg : float
    reflected_x, reflected_y : tuple of (float or None)
        CIE 1931 chromaticity of reflected D65; None where nothing comes back.
    reflected_luminance_cd_m2, luminance_cd_m2 : tuple or None
        Of the surround's mirror image, and of the device itself; None without an illuminance.
    contrast_ratio : tuple of (float or None), or None
        (Luminance + reflected luminance) / reflected luminance.
    powers : float (w, 2, n, 3), read-only
        Wavelength, polarization s and p, angle; reflectance, transmittance, absorptance of
        films and slabs alone.
    """

    angle_deg: Curve
    luminous_reflectance: Curve
    luminous_reflectance_8deg: float
    luminous_transmittance: Curve
    luminous_reflectance_stack: Curve
    luminous_reflectance_stack_8deg: float
    luminous_transmittance_stack: Curve
    luminous_absorptance_stack: Curve
    reflected_x: tuple[float | None, ...]
    reflected_y: tuple[float | None, ...]
    reflected_luminance_cd_m2: Curve | None
    luminance_cd_m2: tuple[float | None, ...] | None
    contrast_ratio: tuple[float | None, ...] | None
    powers: Floats

    def to_dict(self) -> dict[str, Any]:
        """Entry of ``sides`` in the JSON result, without spectra."""
        names = [field.name for field in fields(self) if field.name != "powers"]
        entry = {name: getattr(self, name) for name in names}
        return {key: list(v) if isinstance(v, tuple) else v for key, v in entry.items()}

    def spectra(self) -> dict[str, list[list[float]]]:
        """Reflectance, transmittance, absorptance of unpolarized light, by angle, wavelength."""
        mean = self.powers.mean(axis=1)
        return {name: mean[:, :, k].T.tolist() for k, name in enumerate(PARTS)}


def seen_in_daylight(
    angle_deg: Floats,
    powers: Floats,
    light: Light,
    luminance_cd_m2: Sequence[float | None] | None,
) -> SideAmbient:
    """Fold the response of one side with daylight and the eye.

    Parameters
    ----------
    angle_deg : float (n,)
    powers : float (w, 2, n + 1, 3)
        Polarizations s, p; R, T, A; the last angle is `METER_DEG`.
    light : Light
    luminance_cd_m2 : sequence of (float or None), or None
        Of the device itself at the angles, after filter and polarizer.

    Notes
    -----
    Films are flat, so the device is a mirror. In a surround of one luminance E / pi, which gives
    the illuminance E, it shows at angle t the luminance R(t) E / pi. That is what a Lambertian
    surface of reflectance R(t) would show, the formula of display standards (common practice, no
    source).
    """
    mean = powers.mean(axis=1)
    bare = np.einsum("w,wnk->nk", light.weights[:, 1], mean)
    passed = light.weights * (light.own_pass**2)[:, None]
    reflected = np.einsum("wk,wn->nk", passed, mean[:, :, 0])
    through = (light.weights[:, 1] * light.own_pass * light.other_pass) @ mean[:, :, 1]
    xy, _ = chromaticity(reflected[:-1])
    glare, contrast = None, None
    if light.illuminance_lx is not None and luminance_cd_m2 is not None:
        glare = _tuple(reflected[:-1, 1] * light.illuminance_lx / np.pi)
        contrast = tuple(
            _contrast(own, back) for own, back in zip(luminance_cd_m2, glare, strict=True)
        )
    kept = powers[:, :, :-1].copy()
    kept.setflags(write=False)
    return SideAmbient(
        angle_deg=_tuple(angle_deg),
        luminous_reflectance=_tuple(reflected[:-1, 1]),
        luminous_reflectance_8deg=float(reflected[-1, 1]),
        luminous_transmittance=_tuple(through[:-1]),
        luminous_reflectance_stack=_tuple(bare[:-1, 0]),
        luminous_reflectance_stack_8deg=float(bare[-1, 0]),
        luminous_transmittance_stack=_tuple(bare[:-1, 1]),
        luminous_absorptance_stack=_tuple(bare[:-1, 2]),
        reflected_x=_nullable(xy[:, 0]),
        reflected_y=_nullable(xy[:, 1]),
        reflected_luminance_cd_m2=glare,
        luminance_cd_m2=None if glare is None else tuple(luminance_cd_m2 or ()),
        contrast_ratio=contrast,
        powers=kept,
    )


def _contrast(own: float | None, back: float) -> float | None:
    return None if own is None or not back > 0.0 else (own + back) / back


def _tuple(values: Floats) -> Curve:
    return tuple(values.tolist())


def _nullable(values: Floats) -> tuple[float | None, ...]:
    return tuple(float(one) if np.isfinite(one) else None for one in values)


def ambient_dataset(
    sides: Mapping[str, SideAmbient | None],
    angle_deg: Sequence[float],
    wavelength_nm: Sequence[float],
    head: Mapping[str, Any],
) -> xarray.Dataset:
    """Label everything; NaN for null, and throughout for a side that no light comes from."""
    import xarray

    spectral = ("side", "angle_deg", "wavelength_nm", "polarization")
    shape = (len(sides), len(angle_deg), len(wavelength_nm), len(POLARIZATIONS))
    powers = np.full((*shape, len(PARTS)), np.nan)
    for place, side in enumerate(sides.values()):
        if side is not None:
            powers[place] = side.powers.transpose(2, 0, 1, 3)
    variables: dict[str, Any] = {
        name: (spectral, powers[..., k], {"units": "1"}) for k, name in enumerate(PARTS)
    }
    known = {name: side.to_dict() for name, side in sides.items() if side is not None}
    for key in [key for key in next(iter(known.values())) if key != "angle_deg"]:
        by_side = [known[name][key] if name in known else None for name in sides]
        if all(value is None for value in by_side):
            continue
        curve = any(isinstance(value, list) for value in by_side)
        size = shape[:2] if curve else shape[:1]
        values = np.full(size, np.nan)
        for place, value in enumerate(by_side):
            if value is not None:
                values[place] = np.array(value, dtype=np.float64)  # None becomes NaN
        dims = ("side", "angle_deg") if curve else ("side",)
        variables[key] = (dims, values, {"units": unit_of(key)})
    coords = {
        "side": list(sides),
        "angle_deg": ("angle_deg", list(angle_deg), {"units": "degree"}),
        "wavelength_nm": ("wavelength_nm", list(wavelength_nm), {"units": "nm"}),
        "polarization": list(POLARIZATIONS),
    }
    return xarray.Dataset(variables, coords=coords, attrs=dict(head))
