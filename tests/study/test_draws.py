"""Samples have the means, spreads and correlations that were asked for."""

from __future__ import annotations

import math

import numpy as np
import pytest

from optics.study.draws import (
    SEQUENCES,
    Draws,
    Group,
    Spread,
    correlation_range,
    covariance,
    draw,
)

NORMAL = Spread("a", 50.0, "normal", 2.0)
UNIFORM = Spread("b", 0.7, "uniform", 0.03)
MANY = 16384


def correlation_of(drawn: Draws, one: int, other: int) -> float:
    return float(np.corrcoef(drawn.values[:, one], drawn.values[:, other])[0, 1])


def test_normal_and_uniform_numbers_have_their_mean_and_standard_deviation() -> None:
    drawn = draw([NORMAL, UNIFORM], [], MANY, 1)
    mean, sd = drawn.values.mean(axis=0), drawn.values.std(axis=0)
    # Far within the error 1/√n of independent samples, 0.008 standard deviations.
    assert mean == pytest.approx([50.0, 0.7], abs=1e-3)
    assert sd == pytest.approx([2.0, 0.03 / math.sqrt(3.0)], rel=1e-3)
    assert [NORMAL.sd, UNIFORM.sd] == pytest.approx([2.0, 0.03 / math.sqrt(3.0)], rel=1e-12)
    uniform = drawn.values[:, 1]
    assert uniform.min() > 0.67
    assert uniform.max() < 0.73
    quarter = np.quantile(drawn.values[:, 0], 0.25)
    assert quarter == pytest.approx(50.0 - 0.6744898 * 2.0, abs=2e-3)


@pytest.mark.parametrize("correlation", [-0.4, 0.3, 0.8])
@pytest.mark.parametrize(
    "spreads", [[NORMAL] * 3, [UNIFORM] * 3, [NORMAL, UNIFORM, UNIFORM]], ids=str
)
def test_correlations_are_those_of_the_numbers_themselves(
    spreads: list[Spread], correlation: float
) -> None:
    drawn = draw(spreads, [Group((0, 1, 2), correlation)], MANY, 3)
    for one, other in ((0, 1), (0, 2), (1, 2)):
        # An error of independent samples is (1 - r²)/√n, 0.008 at most.
        assert correlation_of(drawn, one, other) == pytest.approx(correlation, abs=0.004)
    sd = drawn.values.std(axis=0)
    assert sd == pytest.approx([spread.sd for spread in spreads], rel=3e-3)
    # Only the numbers are correlated, not what they are made of.
    assert np.corrcoef(drawn.latent.T) == pytest.approx(np.eye(3), abs=0.004)


def test_numbers_outside_groups_are_independent() -> None:
    drawn = draw([NORMAL, UNIFORM, NORMAL], [Group((0, 2), 0.9)], MANY, 4)
    assert correlation_of(drawn, 0, 2) == pytest.approx(0.9, abs=0.002)
    assert abs(correlation_of(drawn, 0, 1)) < 0.004
    assert drawn.latent[:, 1] == pytest.approx((drawn.values[:, 1] - 0.7) / 0.03, abs=1e-9)


@pytest.mark.parametrize("correlation", [-1.0, 1.0])
def test_full_correlation_ties_two_numbers_together(correlation: float) -> None:
    drawn = draw([NORMAL, NORMAL], [Group((0, 1), correlation)], 256, 0)
    off = drawn.values - 50.0
    assert off[:, 1] == pytest.approx(correlation * off[:, 0], abs=1e-9)


def test_covariance_is_that_of_the_samples() -> None:
    spreads, groups = [NORMAL, UNIFORM, UNIFORM], [Group((0, 2), -0.6)]
    matrix = covariance(spreads, groups)
    sampled = np.cov(draw(spreads, groups, MANY, 5).values.T)
    scale = np.outer([one.sd for one in spreads], [one.sd for one in spreads])
    assert sampled / scale == pytest.approx(matrix / scale, abs=0.005)
    assert matrix[0, 2] == pytest.approx(-0.6 * 2.0 * 0.03 / math.sqrt(3.0), rel=1e-12)


@pytest.mark.parametrize(
    ("kinds", "low", "high"),
    [
        (["normal"] * 2, -1.0, 1.0),
        (["normal"] * 3, -0.5, 1.0),
        (["normal"] * 5, -0.25, 1.0),
        (["uniform"] * 2, -1.0, 1.0),
        (["uniform"] * 3, -6.0 / math.pi * math.asin(0.25), 1.0),
        # Two normal ones with the correlation r, the third with s = r √(π/3): 1 + r = 2 s².
        (
            ["normal", "normal", "uniform"],
            *((1 + sign * math.sqrt(1 + 8 * math.pi / 3)) / (4 * math.pi / 3) for sign in (-1, 1)),
        ),
        # A normal number cannot follow a uniform one any closer.
        (["normal", "uniform"], -math.sqrt(3.0 / math.pi), math.sqrt(3.0 / math.pi)),
    ],
)
def test_the_range_of_a_common_correlation(kinds: list[str], low: float, high: float) -> None:
    assert correlation_range(kinds) == pytest.approx((low, high), abs=1e-8)


def test_seeds_and_sequences() -> None:
    first = draw([NORMAL, UNIFORM], [], 1000, 7)
    assert np.array_equal(first.values, draw([NORMAL, UNIFORM], [], 1000, 7).values)
    assert not np.any(first.values == draw([NORMAL, UNIFORM], [], 1000, 8).values)
    count = np.bincount(first.sequence)
    assert count.size == SEQUENCES
    assert count.sum() == 1000
    assert count.max() - count.min() <= 1
    few = draw([NORMAL], [], 3, 7)
    assert few.sequence.tolist() == [0, 1, 2]


def test_a_million_samples_hold_no_infinity() -> None:
    assert np.isfinite(draw([NORMAL], [], 1_000_000, 0).values).all()
