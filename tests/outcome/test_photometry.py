"""Peaks, widths and half angles, and the identities of a Lambertian."""

from __future__ import annotations

import numpy as np
import pytest

from optics.outcome.photometry import half_angle_deg, peak, ratio


def test_width_lies_between_the_outermost_half_points() -> None:
    nm = np.array([500.0, 510.0, 520.0, 530.0, 540.0, 550.0])
    found = peak(nm, np.array([0.0, 1.0, 0.2, 0.8, 0.2, 0.0]))
    assert found.wavelength_nm == 510.0
    # 0.5 is crossed at 505 and, beyond the dip, at 530 + 10 * 0.3/0.6.
    assert found.fwhm_nm == pytest.approx(30.0)


def test_half_points_on_the_grid_count() -> None:
    found = peak(np.array([1.0, 2.0, 3.0]), np.array([0.5, 1.0, 0.5]))
    assert found.fwhm_nm == pytest.approx(2.0)


@pytest.mark.parametrize("power", [[0.6, 1.0, 0.1], [0.1, 1.0, 0.6], [0.1, 0.2, 1.0]])
def test_no_width_where_the_grid_ends_too_soon(power: list[float]) -> None:
    found = peak(np.array([1.0, 2.0, 3.0]), np.array(power))
    assert found.wavelength_nm is not None
    assert found.fwhm_nm is None


def test_no_light_no_peak() -> None:
    assert peak(np.array([1.0, 2.0]), np.zeros(2)) == (None, None)


def test_half_angle_of_a_power_of_the_cosine() -> None:
    def luminance(angle_deg: np.ndarray) -> np.ndarray:
        return np.cos(np.deg2rad(angle_deg)) ** 2.5

    coarse = np.arange(0.0, 91.0)
    found = half_angle_deg(coarse, luminance(coarse), luminance)
    exact = np.rad2deg(np.arccos(0.5 ** (1 / 2.5)))
    assert found == pytest.approx(exact, abs=1e-6)


def test_half_angle_is_the_smallest() -> None:
    def luminance(angle_deg: np.ndarray) -> np.ndarray:
        return 1.0 + 0.9 * np.cos(np.deg2rad(8.0 * angle_deg))

    coarse = np.arange(0.0, 91.0)
    found = half_angle_deg(coarse, luminance(coarse), luminance)
    exact = np.rad2deg(np.arccos((0.95 - 1.0) / 0.9)) / 8.0
    assert found == pytest.approx(exact, abs=1e-6)


def test_no_half_angle_of_a_lambertian_or_without_light() -> None:
    coarse = np.arange(0.0, 91.0)
    assert half_angle_deg(coarse, np.ones(91), np.ones_like) is None
    assert half_angle_deg(coarse, np.zeros(91), np.zeros_like) is None


def test_ratio_needs_a_reference() -> None:
    assert ratio(1.0, 2.0) == 0.5
    assert ratio(1.0, 0.0) is None
