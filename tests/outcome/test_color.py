"""Color against published chromaticities, temperatures and indices."""

from __future__ import annotations

import subprocess
import sys
import tomllib
import warnings
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from optics.outcome import color

PUBLISHED = tomllib.loads(
    (Path(__file__).parents[1] / "published" / "color_photometry.toml").read_text(encoding="utf-8")
)
HC_EV_NM = 1239.841984


def illuminant(name: str) -> tuple[np.ndarray, np.ndarray]:
    spectrum = color.library().SDS_ILLUMINANTS[name]
    return np.array(spectrum.wavelengths, float), np.array(spectrum.values, float)


def xy_of(wavelength_nm: np.ndarray, power: np.ndarray) -> np.ndarray:
    total = np.trapezoid(color.observer_at(wavelength_nm) * power[:, None], wavelength_nm, axis=0)
    return color.chromaticity(total[None])[0][0]


@pytest.mark.parametrize("row", PUBLISHED["monochromatic"], ids=lambda r: r["wavelength_nm"])
def test_monochromatic_chromaticity(row: dict[str, float]) -> None:
    xy, _ = color.chromaticity(color.observer_at(np.array([float(row["wavelength_nm"])])))
    assert xy[0] == pytest.approx([row["x"], row["y"]], abs=row["half_digit"])


@pytest.mark.parametrize("row", PUBLISHED["illuminant"], ids=lambda r: r["name"])
def test_illuminants(row: dict[str, Any]) -> None:
    xy = xy_of(*illuminant(row["name"]))
    assert xy == pytest.approx([row["x"], row["y"]], abs=row["tolerance"])
    found = color.temperature((row["x"], row["y"]))
    assert found is not None
    assert found.kelvin == pytest.approx(row["kelvin"], abs=row["kelvin_tolerance"])


@pytest.mark.parametrize("row", PUBLISHED["lambertian"], ids=lambda r: r["wavelength_nm"])
def test_lambertian_of_one_wavelength(row: dict[str, float]) -> None:
    at = float(row["wavelength_nm"])
    visible = 683.0 * color.observer_at(np.array([at]))[0, 1]
    assert visible * HC_EV_NM / at / np.pi == pytest.approx(row["cd_per_A"], abs=row["half_digit"])


def test_gaussian() -> None:
    given = PUBLISHED["gaussian"]
    nm = np.arange(380.0, 781.0)
    power = np.exp(-4.0 * np.log(2.0) * ((nm - given["peak_nm"]) / given["fwhm_nm"]) ** 2)
    assert xy_of(nm, power) == pytest.approx([given["x"], given["y"]], abs=given["half_digit_xy"])
    lumens = 683.0 * np.trapezoid(power * color.observer_at(nm)[:, 1], nm)
    per_watt = lumens / np.trapezoid(power, nm)
    assert per_watt == pytest.approx(given["lm_per_W"], abs=given["half_digit"])
    charge = np.trapezoid(power * nm, nm) / HC_EV_NM
    assert lumens / charge / np.pi == pytest.approx(given["cd_per_A"], abs=given["half_digit"])


def test_observer_is_that_of_1931() -> None:
    given = PUBLISHED["efficiency"]
    found = color.observer_at(np.array([float(given["wavelength_nm"])]))[0, 1]
    assert found == pytest.approx(given["of_1931"], abs=5e-4)
    assert abs(found - given["of_1988"]) > 5e-3


def test_red_device_lies_where_a_lambertian_of_600_nm_does() -> None:
    ratios = [row["cd_per_A"] / row["quantum_efficiency"] for row in PUBLISHED["red_device"]]
    (at_600,) = [r["cd_per_A"] for r in PUBLISHED["lambertian"] if r["wavelength_nm"] == 600]
    assert min(ratios) < at_600 < max(ratios)


def test_observer_is_linear_between_its_points_and_zero_outside() -> None:
    found = color.observer_at(np.array([359.9, 500.0, 500.25, 501.0, 830.1]))
    assert not found[[0, 4]].any()
    assert found[2] == pytest.approx(0.75 * found[1] + 0.25 * found[3], rel=1e-14)
    assert color.observer().shape == (471, 4)
    with pytest.raises(ValueError, match="read-only"):
        color.observer()[0, 0] = 1.0


def test_observer_does_not_depend_on_its_cache(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    known = color.observer()
    monkeypatch.setattr(color, "CACHE_FOLDER", tmp_path)
    read = color.observer.__wrapped__
    assert np.array_equal(read(), known)
    (kept,) = tmp_path.iterdir()
    assert np.array_equal(read(), known)
    kept.write_bytes(b"half a file")
    assert np.array_equal(read(), known)
    monkeypatch.setattr(color, "CACHE_FOLDER", tmp_path / "absent")
    assert np.array_equal(read(), known)


def test_dark_has_no_chromaticity() -> None:
    xy, uv = color.chromaticity(np.zeros((1, 3)))
    assert np.isnan(xy).all()
    assert np.isnan(uv).all()


def test_white_of_equal_energy_by_hand() -> None:
    uv = color.uv_prime(np.array([color.WHITE_XY]))[0]
    assert uv == pytest.approx([4 / 19, 9 / 19], rel=1e-14)


@pytest.mark.parametrize("nm", [450.0, 489.5, 520.0, 577.25, 640.0])
def test_a_single_wavelength_is_its_own_dominant_one(nm: float) -> None:
    xy, _ = color.chromaticity(color.observer_at(np.array([nm])))
    found = color.dominant((xy[0, 0], xy[0, 1]))
    assert found is not None
    # The locus is straight between points 1 nm apart in x, y; the observer is in X, Y, Z.
    assert found.wavelength_nm == pytest.approx(nm, abs=0.02)
    assert found.purity == pytest.approx(1.0, abs=1e-4)


@pytest.mark.parametrize("xy", [(0.30, 0.60), (0.64, 0.33), (0.15, 0.06), (0.45, 0.50)])
def test_dominant_wavelength_against_the_library_which_steps_by_1_nm(
    xy: tuple[float, float],
) -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        expected = float(color.library().dominant_wavelength(xy, color.WHITE_XY)[0])
    found = color.dominant(xy)
    assert found is not None
    assert found.wavelength_nm == pytest.approx(expected, abs=1.0)


@pytest.mark.parametrize("xy", [color.WHITE_XY, (0.34, 0.335), (0.40, 0.20), (0.28, 0.10)])
def test_whites_and_purples_have_no_dominant_wavelength(xy: tuple[float, float]) -> None:
    assert color.dominant(xy) is None


@pytest.mark.parametrize("kelvin", [1200.0, 2700.0, 6500.0, 20000.0])
def test_a_black_body_has_its_own_temperature(kelvin: float) -> None:
    u, v = color.planckian_uv(np.array([kelvin]))[0]
    xy = (3 * u / (2 * u - 8 * v + 4), 2 * v / (2 * u - 8 * v + 4))
    found = color.temperature(xy)
    assert found is not None
    assert found.kelvin == pytest.approx(kelvin, rel=1e-6)
    assert found.duv == pytest.approx(0.0, abs=1e-9)


@pytest.mark.parametrize("xy", [(0.35, 0.38), (0.44, 0.39), (0.31, 0.31)])
def test_temperature_and_distance_against_the_library(xy: tuple[float, float]) -> None:
    colour = color.library()
    uv = colour.UCS_to_uv(colour.XYZ_to_UCS(colour.xy_to_XYZ(xy)))
    kelvin, duv = colour.temperature.uv_to_CCT_Ohno2013(uv)
    found = color.temperature(xy)
    assert found is not None
    assert found.kelvin == pytest.approx(kelvin, abs=1.0)  # what that method claims
    assert found.duv == pytest.approx(duv, abs=1e-5)


@pytest.mark.parametrize("xy", [(0.30, 0.60), (0.15, 0.06), (0.24, 0.23)])
def test_far_from_black_bodies_there_is_no_temperature(xy: tuple[float, float]) -> None:
    assert color.temperature(xy) is None


@pytest.mark.parametrize("row", PUBLISHED["rendering"], ids=lambda r: r["name"])
def test_rendering_of_fluorescent_standards(row: dict[str, Any]) -> None:
    found = color.rendering_index(*illuminant(row["name"]))
    assert found == pytest.approx(row["general_index"], abs=0.5)


def test_the_library_leaves_numbers_as_they_print() -> None:
    """In a process of its own, since it loads only once."""
    script = (
        "import numpy as np\n"
        "from optics.outcome import color\n"
        "before = np.get_printoptions()\n"
        "color.library()\n"
        "assert np.get_printoptions() == before\n"
        "assert str(np.float64(0.1234567890123456)) == '0.1234567890123456'\n"
    )
    subprocess.run([sys.executable, "-c", script], check=True)


def test_rendering_needs_a_spectrum() -> None:
    assert color.rendering_index(np.array([550.0]), np.ones(1)) is None
    assert color.rendering_index(np.array([550.0, 560.0]), np.zeros(2)) is None
