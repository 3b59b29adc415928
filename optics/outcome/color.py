"""Color of light by the CIE: tristimulus values, chromaticity, and what is read from them.

CIE 15 (colorimetry): 1931 2 degree observer, chromaticity x, y and 1976 u', v'. The observer's
table is that of the colour-science library, read once.
"""

from __future__ import annotations

import os
import secrets
import warnings
from functools import cache, lru_cache
from importlib.metadata import version
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from optics.kernels.compiled import CACHE_FOLDER

if TYPE_CHECKING:
    from pathlib import Path

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

_OBSERVER = "CIE 1931 2 Degree Standard Observer"
#: Chromaticity x, y of the white that dominant wavelengths refer to: equal energy.
WHITE_XY = (1.0 / 3.0, 1.0 / 3.0)
#: Below this excitation purity a color has no dominant wavelength worth naming.
SMALLEST_PURITY = 0.1
#: Beyond this distance from the Planckian locus in CIE 1960 u, v a correlated color temperature
#: has no meaning (CIE 15).
LARGEST_DUV = 0.05
#: Beyond this distance a color rendering index is less accurate (CIE 13.3, from memory).
ACCURATE_DUV = 5.4e-3
#: Above this purity a color is that of a single wavelength and not of something that glows; black
#: bodies reach it at 1450 K. And above this one it is too far from white to render colors (2100 K).
#: Both are choices.
LARGEST_PURITY_GLOWING, LARGEST_PURITY_WHITE = 0.95, 0.8
#: Color temperatures that are looked for, in kelvin.
COOLEST_K, HOTTEST_K = 1000.0, 25000.0

_SECOND_RADIATION_NM_K = 1.438776877e7  # h c / k, exact in the SI but for rounding
# Where the locus of single wavelengths has left its ends, at which it turns back on itself.
_LOCUS_NM = (400.0, 700.0)


class Temperature(NamedTuple):
    """Correlated color temperature, and the distance from the Planckian locus, above it > 0."""

    kelvin: float
    duv: float


class Dominant(NamedTuple):
    """Dominant wavelength, and excitation purity from 0 (white) to 1 (a single wavelength)."""

    wavelength_nm: float
    purity: float


@cache
def observer() -> Floats:
    """CIE 1931 2 degree observer at 360 to 830 nm in steps of 1 nm.

    Returns
    -------
    float (471, 4)
        Wavelength in nm, and x, y, z; read-only.
    """
    # The library takes longer to load than everything else together.
    kept = CACHE_FOLDER / f"observer-{version('colour-science')}.npy"
    try:
        table: Floats = np.load(kept)
    except (OSError, ValueError):
        table = _read_observer()
        _keep(table, kept)
    table.setflags(write=False)
    return table


def library() -> Any:
    """Load the colour-science library without what it does to the whole process.

    It warns of optional parts that are not used here, and shortens every number that NumPy and
    pandas print from then on, files included.
    """
    with warnings.catch_warnings(), np.printoptions():
        warnings.simplefilter("ignore")
        import colour
    return colour


def _read_observer() -> Floats:
    functions = library().MSDS_CMFS[_OBSERVER]
    return np.column_stack([functions.wavelengths, functions.values])


def _keep(table: Floats, path: Path) -> None:
    draft = path.with_name(f".{secrets.token_hex(6)}.npy")
    try:
        np.save(draft, table)
        os.replace(draft, path)
    except OSError:
        draft.unlink(missing_ok=True)


def observer_at(wavelength_nm: Floats) -> Floats:
    """Observer at any wavelengths: linear between the table's, zero outside 360 to 830 nm.

    Parameters
    ----------
    wavelength_nm : float (w,)

    Returns
    -------
    float (w, 3)
        Read-only.
    """
    return _observer_at(wavelength_nm.tobytes())


@lru_cache(maxsize=64)  # studies ask thousands of times for the same wavelengths
def _observer_at(wavelength_nm: bytes) -> Floats:
    table, wanted = observer(), np.frombuffer(wavelength_nm)
    columns = [np.interp(wanted, table[:, 0], table[:, k], left=0.0, right=0.0) for k in (1, 2, 3)]
    found = np.stack(columns, axis=1)
    found.setflags(write=False)
    return found


def chromaticity(tristimulus: Floats) -> tuple[Floats, Floats]:
    """Chromaticity x, y and 1976 u', v' from tristimulus values X, Y, Z.

    Parameters
    ----------
    tristimulus : float (n, 3)

    Returns
    -------
    xy, uv_prime : float (n, 2)
        NaN where there is no light; callers say null.
    """
    total = tristimulus.sum(axis=1, keepdims=True)
    dark = ~(total > 0.0)
    xy = tristimulus[:, :2] / np.where(dark, 1.0, total)
    xy = np.where(dark, np.nan, xy)
    return xy, uv_prime(xy)


def uv_prime(xy: Floats) -> Floats:
    """CIE 1976 u', v' (n, 2) from x, y (n, 2): u' = 4x/(3 - 2x + 12y), v' = 9y/(same)."""
    x, y = xy[:, 0], xy[:, 1]
    below = -2.0 * x + 12.0 * y + 3.0
    return np.stack([4.0 * x / below, 9.0 * y / below], axis=1)


def spectral_locus() -> tuple[Floats, Floats]:
    """Wavelengths (n,) in nm of the locus of single wavelengths, and its x, y (n, 2)."""
    table = observer()
    kept = (table[:, 0] >= _LOCUS_NM[0]) & (table[:, 0] <= _LOCUS_NM[1])
    return table[kept, 0], chromaticity(table[kept, 1:])[0]


def dominant(xy: tuple[float, float]) -> Dominant | None:
    """Dominant wavelength of a chromaticity: where the ray from white through it meets the locus.

    Linear between the locus's points of 1 nm. White is that of equal energy.

    Returns
    -------
    Dominant or None
        None for purples, whose ray meets the line that joins the locus's ends, and for colors
        of a purity below `SMALLEST_PURITY`.
    """
    white, target = np.array(WHITE_XY), np.array(xy)
    ray = target - white
    if not float(np.hypot(*ray)) > 0.0:
        return None
    wavelength_nm, locus = spectral_locus()
    start, along = locus[:-1] - white, np.diff(locus, axis=0)
    # white + a ray = start + b along, by Cramer's rule for every piece of the locus.
    det = ray[1] * along[:, 0] - ray[0] * along[:, 1]
    safe = np.where(det == 0.0, 1.0, det)
    a = (start[:, 1] * along[:, 0] - start[:, 0] * along[:, 1]) / safe
    b = (start[:, 1] * ray[0] - start[:, 0] * ray[1]) / safe
    met = np.flatnonzero((det != 0.0) & (a > 0.0) & (b >= 0.0) & (b <= 1.0))
    if met.size == 0:
        return None
    here = met[0]
    purity = min(float(1.0 / a[here]), 1.0)
    if purity < SMALLEST_PURITY:
        return None
    step = wavelength_nm[here + 1] - wavelength_nm[here]
    return Dominant(float(wavelength_nm[here] + b[here] * step), purity)


def planckian_uv(kelvin: Floats) -> Floats:
    """CIE 1960 u, v (n, 2) of black bodies, by Planck's law and the observer's own points."""
    table = observer()
    exponent = _SECOND_RADIATION_NM_K / (table[:, 0] * np.asarray(kelvin)[:, None])
    # Relative to the longest wavelength, so that no temperature overflows.
    radiance = (table[-1, 0] / table[:, 0]) ** 5 * np.exp(exponent[:, -1:] - exponent)
    radiance /= -np.expm1(-exponent)
    return _uv_1960(uv_prime(chromaticity(radiance @ table[:, 1:])[0]))


def _uv_1960(uv: Floats) -> Floats:
    result: Floats = uv * np.array([1.0, 2.0 / 3.0])
    return result


def temperature(xy: tuple[float, float]) -> Temperature | None:
    """Correlated color temperature: the black body nearest in CIE 1960 u, v.

    Returns
    -------
    Temperature or None
        None beyond `LARGEST_DUV` from the locus or outside `COOLEST_K` to `HOTTEST_K`.
    """
    target = _uv_1960(uv_prime(np.array([xy])))
    low, high = 1.0 / HOTTEST_K, 1.0 / COOLEST_K
    ends = (low, high)
    for _ in range(6):  # even steps in 1/T are about even on the locus
        inverse = np.linspace(low, high, 49)
        distance = np.hypot(*(planckian_uv(1.0 / inverse) - target).T)
        nearest = int(distance.argmin())
        low, high = inverse[max(nearest - 1, 0)], inverse[min(nearest + 1, 48)]
    best = inverse[nearest]
    if distance[nearest] > LARGEST_DUV or not ends[0] < best < ends[1]:
        return None
    above = planckian_uv(np.array([1.0 / best]))[0, 1] < target[0, 1]
    return Temperature(float(1.0 / best), float(distance[nearest] if above else -distance[nearest]))


def rendering_index(wavelength_nm: Floats, power: Floats) -> float | None:
    """General color rendering index Ra (CIE 13.3) of a spectrum, by the colour-science library.

    Parameters
    ----------
    wavelength_nm, power : float (w,)
        Spectrum in power per nm, any unit.

    Returns
    -------
    float or None
        None for fewer than two wavelengths or without light.
    """
    if wavelength_nm.size < 2 or not power.max() > 0.0:
        return None
    even = np.arange(360.0, 831.0, 1.0)
    values = np.interp(even, wavelength_nm, power / power.max(), left=0.0, right=0.0)
    colour = library()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # that its own data must be interpolated
        return float(colour.colour_rendering_index(colour.SpectralDistribution(values, even)))
