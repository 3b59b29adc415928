"""Intervals cover what they are to cover, as often as they say."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pytest
from scipy.stats import binom, norm

from optics.study.draws import Spread, draw
from optics.study.intervals import Estimate, as_estimates, estimates, quantile, share, wilson

SEEDS = 200
NORMAL = Spread("a", 0.0, "normal", 1.0)
# An interval that holds the truth in 95 % of all cases does so for at least as many seeds, with a
# probability of 1 - 1e-6.
LEAST = int(binom.ppf(1e-6, SEEDS, 0.95))


class Hits(NamedTuple):
    """How often an interval held the truth."""

    mean: int
    sd: int
    median: int
    tail: int
    share: int


def hits(samples: int) -> Hits:
    """Count over many seeds, for exp(0.3 (a + b)) of two normal numbers."""
    sigma = 0.3 * np.sqrt(2.0)
    mean = np.exp(0.5 * sigma**2)
    sd = mean * np.sqrt(np.expm1(sigma**2))
    truth = [mean, sd, 1.0, np.exp(norm.ppf(0.95) * sigma), norm.cdf(0.5)]
    limit = np.exp(0.5 * sigma)
    found = np.zeros(5, dtype=int)
    for seed in range(SEEDS):
        drawn = draw([NORMAL, NORMAL], [], samples, seed)
        values = np.exp(0.3 * drawn.values.sum(axis=1))

        def of(chosen: np.ndarray, values: np.ndarray = values) -> np.ndarray:
            some = values[chosen]
            return np.array([some.mean(), some.std(ddof=1)])

        every = [
            *as_estimates(*estimates(of, drawn.sequence)),
            quantile(values, 0.5, drawn.sequence),
            quantile(values, 0.95, drawn.sequence),
            share(values <= limit, drawn.sequence),
        ]
        for place, (one, true) in enumerate(zip(every, truth, strict=True)):
            assert one.low is not None
            assert one.high is not None
            found[place] += one.low <= true <= one.high
    return Hits(*found.tolist())


@pytest.mark.parametrize("samples", [512, pytest.param(2000, marks=pytest.mark.slow)])
def test_coverage_over_many_seeds(samples: int) -> None:
    found = hits(samples)
    assert min(found) >= LEAST, found


def test_intervals_are_narrower_than_those_of_independent_samples() -> None:
    """For a smooth average: that is what the sequences are for."""
    drawn = draw([NORMAL, NORMAL], [], 4096, 1)
    values = drawn.values.sum(axis=1)
    _, width = estimates(lambda chosen: np.array([values[chosen].mean()]), drawn.sequence)
    assert width is not None
    assert width[0] < 0.1 * 1.96 * values.std() / np.sqrt(values.size)


@pytest.mark.parametrize(
    ("hit", "count", "low", "high"),
    # Newcombe, Stat. Med. 17, 857 (1998), table I, score method without correction; from memory.
    [(81, 263, 0.2553, 0.3662), (15, 148, 0.0624, 0.1605), (0, 20, 0.0, 0.1611),
     (1, 29, 0.0061, 0.1718)],
)  # fmt: skip
def test_wilson_of_published_examples(hit: int, count: int, low: float, high: float) -> None:
    assert wilson(hit, count) == pytest.approx((low, high), abs=6e-5)


def test_shares_of_all_or_nothing_keep_an_open_interval() -> None:
    sequence = np.repeat(np.arange(16), 10)
    for inside, value in ((np.ones(160, dtype=bool), 1.0), (np.zeros(160, dtype=bool), 0.0)):
        found = share(inside, sequence)
        assert found.value == value
        assert found.low is not None
        assert found.high is not None
        assert found.high - found.low == pytest.approx(0.02345, abs=1e-4)


def test_what_is_unknown_is_none() -> None:
    found = as_estimates(np.array([1.0, np.nan, 2.0]), np.array([0.5, 0.1, np.nan]))
    assert found == [
        Estimate(1.0, 0.5, 1.5), Estimate(None, None, None), Estimate(2.0, None, None),
    ]  # fmt: skip
    assert found[0].half_width == 0.5
    assert found[2].half_width is None
    single = estimates(lambda chosen: np.array([7.0]), np.zeros(1, dtype=np.int64))
    assert single[1] is None
