"""Spectra: normalization, closed forms, what a grid loses."""

from __future__ import annotations

import math
import pickle

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from optics.device.spectrum import (
    GaussianSpectrum,
    LineSpectrum,
    TableSpectrum,
    trapezoid_weights,
)

GRID_NM = np.arange(450.0, 700.1, 5.0)


def table(points: list[float], values: list[float], quantity: str = "photons") -> TableSpectrum:
    return TableSpectrum.from_table(np.array(points), np.array(values), quantity)  # type: ignore[arg-type]


def test_trapezoid_weights_on_an_uneven_grid() -> None:
    x = np.array([1.0, 2.0, 5.0, 5.5])
    y = np.array([3.0, -1.0, 2.0, 7.0])
    assert trapezoid_weights(x) @ y == pytest.approx(np.trapezoid(y, x), rel=1e-14)
    assert trapezoid_weights(np.array([500.0])).tolist() == [1.0]


def test_gaussian_has_its_width() -> None:
    half = GaussianSpectrum(524.0, 58.0).photons(np.array([524.0, 524.0 - 29.0, 524.0 + 29.0]))
    assert_allclose(half, [1.0, 0.5, 0.5], rtol=1e-14)


def test_gaussian_average_of_the_wavelength_is_its_peak() -> None:
    # The trapezoid rule of a whole Gaussian converges faster than any power of the step.
    grid = np.arange(300.0, 760.1, 5.0)
    weights = GaussianSpectrum(524.0, 58.0).weights(grid)
    sigma = 58.0 / math.sqrt(8 * math.log(2))
    assert weights @ grid == pytest.approx(524.0, rel=1e-12)
    assert weights @ (grid - 524.0) ** 2 == pytest.approx(sigma**2, rel=1e-10)


def test_density_integrates_to_one_on_the_grid() -> None:
    density = GaussianSpectrum(524.0, 58.0).density(GRID_NM)
    assert np.trapezoid(density, GRID_NM) == pytest.approx(1.0, rel=1e-14)


@pytest.mark.parametrize(
    ("start", "stop", "lost"),
    [
        # One standard deviation to both sides, then half the line: textbook values of erf.
        (-1.0, 1.0, 0.31731050786291415),
        (-2.0, 2.0, 0.04550026389635842),
        (0.0, 40.0, 0.5),
        (-40.0, 40.0, 0.0),
    ],
)
def test_lost_share_of_a_gaussian(start: float, stop: float, lost: float) -> None:
    sigma = 20.0
    spectrum = GaussianSpectrum(1000.0, sigma * math.sqrt(8 * math.log(2)))
    grid = 1000.0 + sigma * np.linspace(start, stop, 7)
    assert spectrum.lost_share(grid) == pytest.approx(lost, rel=1e-12, abs=1e-15)


def test_gaussian_far_from_the_grid_still_normalizes() -> None:
    weights = GaussianSpectrum(300.0, 1.0).weights(GRID_NM)
    assert weights.sum() == pytest.approx(1.0)
    assert GaussianSpectrum(300.0, 1.0).lost_share(GRID_NM) == pytest.approx(1.0)


def test_table_is_linear_between_points_and_zero_outside() -> None:
    photons = table([500, 520, 560], [0, 2, 0]).photons(np.array([490.0, 510.0, 520.0, 540.0, 600]))
    assert_allclose(photons, [0.0, 0.5, 1.0, 0.5, 0.0], rtol=1e-15)


def test_power_becomes_photons_at_the_table_points() -> None:
    power = table([400, 500, 600], [1, 1, 1], "power")
    photons = table([400, 500, 600], [4, 5, 6])
    assert_allclose(power.weights(GRID_NM), photons.weights(GRID_NM), rtol=1e-14)
    assert power.peak_nm == 600


def test_lost_share_of_a_triangle() -> None:
    # Triangle 400-500-600 of area 100; below 450 lie 12.5 of it, above 560 lie 8.
    triangle = table([400, 500, 600], [0, 1, 0])
    assert triangle.lost_share(np.array([450.0, 555.0, 560.0])) == pytest.approx(0.205, rel=1e-14)
    assert triangle.lost_share(np.array([300.0, 700.0])) == 0.0


def test_ends_of_a_table_inside_the_grid() -> None:
    spectrum = table([460, 500, 690], [0.0099, 1, 0.5])
    assert spectrum.cut_ends(GRID_NM) == (("end", 0.5),)
    assert spectrum.cut_ends(np.array([460.0, 690.0])) == ()
    assert table([460, 500], [0.01, 1]).cut_ends(GRID_NM)[0] == ("start", 0.01)


def test_single_wavelength_weighs_one() -> None:
    one = np.array([524.0])
    for spectrum in (GaussianSpectrum(600.0, 20.0), table([500, 520, 560], [0, 2, 0])):
        assert spectrum.weights(one).tolist() == [1.0]
        assert spectrum.lost_share(one) == 0.0


def test_line_is_evaluated_exactly_there() -> None:
    line = LineSpectrum(523.4)
    assert line.line_nm == line.peak_nm == 523.4
    assert line.grid_nm(GRID_NM).tolist() == [523.4]
    assert line.weights(line.grid_nm(GRID_NM)).tolist() == [1.0]
    assert line.lost_share(GRID_NM) == 0.0
    for refuse in (line.weights, line.density, line.photons):
        with pytest.raises(ValueError, match=r"line at 523\.4 nm"):
            refuse(GRID_NM)
    assert GaussianSpectrum(524.0, 58.0).line_nm is None


def test_dark_spectrum_is_refused() -> None:
    with pytest.raises(ValueError, match="zero at every wavelength"):
        table([800, 850, 900], [0, 1, 0]).weights(GRID_NM)


def test_table_arrays_are_read_only_also_from_a_pickle() -> None:
    spectrum = table([500, 520, 560], [0, 2, 0])
    for one in (spectrum, pickle.loads(pickle.dumps(spectrum))):
        assert not one.points_nm.flags.writeable
        assert not one.photons_per_nm.flags.writeable
        assert_allclose(one.weights(GRID_NM), spectrum.weights(GRID_NM), rtol=0)


@given(
    st.floats(400, 750),
    st.floats(5, 200),
    st.lists(st.integers(300, 900), min_size=2, max_size=30, unique=True),
)
def test_weights_are_a_distribution(peak: float, fwhm: float, grid: list[int]) -> None:
    wavelength = np.array(sorted(grid), dtype=float)
    spectrum = GaussianSpectrum(peak, fwhm)
    weights = spectrum.weights(wavelength)
    assert np.all(weights >= 0)
    assert weights.sum() == pytest.approx(1.0, rel=1e-12)
    assert 0 <= spectrum.lost_share(wavelength) <= 1 + 1e-15
