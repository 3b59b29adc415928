"""Derivatives by differences, shares of variance, and when the samples contradict."""

from __future__ import annotations

import numpy as np
import pytest

from optics.study.intervals import Estimate
from optics.study.linear import differences, failures, stencil, variance_shares, yield_failure


def test_differences_are_exact_for_polynomials_of_fourth_degree() -> None:
    nominal, sd = np.array([2.0, -1.0]), np.array([0.3, 0.05])
    points = stencil(nominal, sd, (0, 1))
    assert points.shape == (8, 2)
    x, y = points.T
    outcomes = np.stack([x**4 + y, x * y**3, 3.0 * x - 2.0 * y], axis=1)
    expected = [[32.0, 1.0], [-1.0, 6.0], [3.0, -2.0]]
    assert stencil(nominal, sd, (1,)).tolist() == points[4:].tolist()
    assert stencil(nominal, sd, ()).shape == (0, 2)
    assert differences(outcomes, sd) == pytest.approx(np.array(expected), rel=1e-10)


def test_shares_add_up_and_keep_groups_together() -> None:
    covariance = np.array([[1.0, 0.0, 0.5], [0.0, 4.0, 0.0], [0.5, 0.0, 1.0]])
    shares = variance_shares(np.array([1.0, 1.0, 2.0]), covariance, [(0, 2), (1,)])
    assert shares == pytest.approx((7.0 / 11.0, 4.0 / 11.0))
    assert variance_shares(np.zeros(3), covariance, [(0, 2), (1,)]) == (0.0, 0.0)


def test_a_prediction_fails_beyond_interval_and_threshold() -> None:
    mean, sd = Estimate(10.0, 9.9, 10.1), Estimate(1.0, 0.95, 1.05)
    assert failures(10.0, 1.0, mean, sd) == ()
    assert failures(10.2, 0.92, mean, sd) == ()  # beyond the intervals, but by little
    wide = Estimate(1.0, 0.5, 1.5)
    assert failures(10.0, 0.6, mean, wide) == ()  # by much, but not beyond the interval
    assert failures(10.3, 0.85, mean, sd) == (
        "mean 10, not 10.3", "standard deviation 1, not 0.85",
    )  # fmt: skip
    assert failures(10.3, 0.85, Estimate(None, None, None), sd) == ()
    assert failures(10.3, 0.85, Estimate(10.0, None, None), Estimate(1.0, None, None)) == ()
    share = Estimate(0.8, 0.79, 0.81)
    assert yield_failure(0.815, share) is None
    assert yield_failure(0.85, share) == "yield 80.0 %, not 85.0 %"
