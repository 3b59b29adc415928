"""Exponentials and angles against numpy's, whose own error is one unit in the last place."""

import numba
import numpy as np
import pytest

from optics.kernels import elementary


@numba.njit(error_model="numpy")
def _phase_factors(z, out):
    for i in range(z.size):
        out[i] = elementary.exp_i(z[i])


@pytest.mark.parametrize("reach", [1e-8, 1.0, 50.0, 1e3, 1e5])
def test_phase_factors_agree_with_the_complex_exponential(reach: float) -> None:
    random = np.random.default_rng(3)
    z = random.uniform(-reach, reach, 5000) + 1j * random.uniform(0.0, min(reach, 600.0), 5000)
    found = np.empty_like(z)
    _phase_factors(z, found)
    # The argument of the reference is exact; five roundings of table, series and product.
    np.testing.assert_allclose(found, np.exp(1j * z), rtol=5 * np.finfo(float).eps, atol=0.0)


def test_a_wave_in_a_thick_metal_is_gone_without_a_fault() -> None:
    z = np.array([1j * 1e5, 3.0 + 1j * 2e3])
    found = np.empty_like(z)
    _phase_factors(z, found)
    assert np.all(np.abs(found) < 1e-300)


def test_no_way_at_all_changes_nothing() -> None:
    found = np.empty(1, dtype=np.complex128)
    _phase_factors(np.zeros(1, dtype=np.complex128), found)
    assert found[0] == 1.0
