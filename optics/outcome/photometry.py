"""From spectral radiance to what eyes and drivers see: luminance, exitance, widths, half angle."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from optics.outcome.dual import plain, value_of

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

#: Luminous efficacy of radiation of 540 THz, lm/W; exact by definition of the candela.
LUMENS_PER_WATT = 683.0

_PIECES = 16  # a bracket of the half angle is cut into so many parts,
_CUTS = 2  # so many times; what is left is a cubic
# Coefficients of the cubic through values at 0, 1, 2, 3.
_CUBIC = np.linalg.inv(np.vander(np.arange(4.0), increasing=True))
_NEWTON_STEPS = 3


class Peak(NamedTuple):
    """Peak of a spectrum at a point of its grid, and its full width at half maximum."""

    wavelength_nm: float | None
    fwhm_nm: float | None


def peak(wavelength_nm: Floats, power: Floats) -> Peak:
    """Peak and width of a spectrum in power per nm.

    Parameters
    ----------
    wavelength_nm, power : float (w,)

    Returns
    -------
    Peak
        The width lies between the outermost half points, interpolated linearly; None where the
        grid ends before the spectrum has fallen to half. Both None without light.
    """
    top = int(value_of(power).argmax())
    if not power[top] > 0.0:
        return Peak(None, None)
    at = float(wavelength_nm[top])
    half = 0.5 * power[top]
    above = np.flatnonzero(power >= half)
    first, last = int(above[0]), int(above[-1])
    ends = []
    for inside, outside in ((first, first - 1), (last, last + 1)):
        if power[inside] == half:
            ends.append(float(wavelength_nm[inside]))
            continue
        if not 0 <= outside < power.size:
            return Peak(at, None)
        part = (power[inside] - half) / (power[inside] - power[outside])
        step = wavelength_nm[outside] - wavelength_nm[inside]
        ends.append(plain(wavelength_nm[inside] + part * step))
    return Peak(at, ends[1] - ends[0])


def half_angle_deg(
    angle_deg: Floats, luminance: Floats, evaluate: Callable[[Floats], Floats]
) -> float | None:
    """Smallest angle at which the luminance has fallen to half of that along the normal.

    Parameters
    ----------
    angle_deg, luminance : float (n,)
        Ascending from 0; fine enough that no fall is stepped over.
    evaluate : callable
        Luminance at any angles in degrees, for what lies between.

    Returns
    -------
    float or None
        None if it never falls to half, or without light along the normal.
    """
    if not luminance[0] > 0.0:
        return None
    half = 0.5 * luminance[0]
    for cut in range(_CUTS + 1):
        below = np.flatnonzero(luminance <= half)
        if below.size == 0:
            return None
        end = int(below[0])
        low, high = angle_deg[end - 1], angle_deg[end]
        if cut < _CUTS:
            angle_deg = np.linspace(low, high, _PIECES + 1)
            inner = evaluate(angle_deg[1:-1])
            luminance = np.concatenate([luminance[end - 1 : end], inner, luminance[end : end + 1]])
    start = min(max(end - 2, 0), _PIECES - 3)
    four = slice(start, start + 4)
    crossing = _crossing(luminance[four] - half, end - 1 - start)
    angle: float = plain(angle_deg[start] + crossing * (high - low))
    return angle


def _crossing(values: Floats, start: int) -> Any:
    """Where a cubic through values at 0, 1, 2, 3 is 0 between `start` and the next place."""
    shape = _CUBIC @ value_of(values)
    place = start + _straight(value_of(values), start)
    for _ in range(_NEWTON_STEPS):
        powers = place ** np.arange(4)
        slope = shape[1:] @ (np.arange(1, 4) * powers[:3])
        place = float(np.clip(place - powers @ shape / slope, start, start + 1))
    powers = place ** np.arange(4)
    slope = shape[1:] @ (np.arange(1, 4) * powers[:3])
    # The last step, at an unchanged slope, carries the rates of the values, if they have any.
    return place - (powers @ _CUBIC) @ values / slope


def _straight(values: Floats, start: int) -> float:
    """Share of the way from one value to the next at which a straight line is 0."""
    return float(values[start] / (values[start] - values[start + 1]))


def ratio(value: float, reference: float) -> float | None:
    """Quotient of two amounts of light; None without a reference."""
    return value / reference if reference > 0.0 else None
