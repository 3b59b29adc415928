"""Shares of variance against closed forms."""

from __future__ import annotations

import math

import numpy as np
import pytest

from optics.study.chaos import Influence, influences
from optics.study.draws import Draws, Group, Spread, draw


def of(
    drawn: Draws, spreads: list[Spread], values: np.ndarray, factors: list[list[int]]
) -> Influence:
    uniform = [one.kind == "uniform" for one in spreads]
    (found,) = influences(drawn.latent, uniform, values[:, None], drawn.sequence, factors)
    assert found is not None
    return found


def numbers(found: Influence) -> tuple[list[float], list[float]]:
    first = [one.value for one in found.first_order]
    total = [one.value for one in found.total]
    return first, total  # type: ignore[return-value]


def covers(found: Influence, first: list[float], total: list[float]) -> bool:
    """Whether every interval holds the truth, but for rounding."""
    pairs = zip((*found.first_order, *found.total), (*first, *total), strict=True)
    return all(
        one.low is not None and one.high is not None and one.low - 1e-9 <= truth <= one.high + 1e-9
        for one, truth in pairs
    )


def test_ishigami() -> None:
    """sin x + 7 sin² y + 0.1 z⁴ sin x over ±π (Ishigami and Homma 1990; from memory)."""
    spreads = [Spread(name, 0.0, "uniform", math.pi) for name in "xyz"]
    drawn = draw(spreads, [], 2048, 1)
    x, y, z = drawn.values.T
    a, b = 7.0, 0.1
    found = of(
        drawn, spreads, np.sin(x) + a * np.sin(y) ** 2 + b * z**4 * np.sin(x), [[0], [1], [2]]
    )
    variance = a**2 / 8 + b * math.pi**4 / 5 + b**2 * math.pi**8 / 18 + 0.5
    alone = [0.5 * (1 + b * math.pi**4 / 5) ** 2, a**2 / 8, 0.0]
    both = b**2 * math.pi**8 * (1 / 18 - 1 / 50)
    first = [part / variance for part in alone]
    total = [first[0] + both / variance, first[1], both / variance]
    assert numbers(found)[0] == pytest.approx(first, abs=1e-4)
    assert numbers(found)[1] == pytest.approx(total, abs=1e-4)
    assert found.unexplained < 1e-5


@pytest.mark.parametrize("samples", [500, 2000])
def test_a_product_with_kinks(samples: int) -> None:
    """The g-function of Sobol, whose kinks no polynomial follows: the intervals allow for them."""
    a = np.array([0.0, 1.0, 4.5, 9.0])
    spreads = [Spread(name, 0.5, "uniform", 0.5) for name in "abcd"]
    drawn = draw(spreads, [], samples, 2)
    values = np.prod((np.abs(4.0 * drawn.values - 2.0) + a) / (1.0 + a), axis=1)
    found = of(drawn, spreads, values, [[0], [1], [2], [3]])
    part = 1.0 / (3.0 * (1.0 + a) ** 2)
    variance = np.prod(1.0 + part) - 1.0
    first = part / variance
    total = [part[i] * np.prod(1.0 + np.delete(part, i)) / variance for i in range(4)]
    assert covers(found, first.tolist(), total)
    assert 1e-4 < found.unexplained < 0.05


def test_a_correlated_group_is_one_factor() -> None:
    """Of x + 2 y + u with the correlation r of x and y: 1 + 4 + 4 r to 1/3."""
    spreads = [
        Spread("x", 5.0, "normal", 1.0), Spread("u", 0.0, "uniform", 1.0),
        Spread("y", 3.0, "normal", 1.0),
    ]  # fmt: skip
    drawn = draw(spreads, [Group((0, 2), 0.5)], 1000, 3)
    values = drawn.values[:, 0] + 2.0 * drawn.values[:, 2] + drawn.values[:, 1]
    found = of(drawn, spreads, values, [[0, 2], [1]])
    whole = 7.0 + 1.0 / 3.0
    first, total = numbers(found)
    assert first == pytest.approx([7.0 / whole, 1.0 / 3.0 / whole], abs=0.005)
    assert total == pytest.approx(first, abs=1e-9)
    assert found.terms == 4


def test_pure_interaction_has_no_first_order() -> None:
    spreads = [Spread(name, 0.0, "normal", 1.0) for name in "xy"]
    drawn = draw(spreads, [], 2048, 4)
    found = of(drawn, spreads, drawn.values[:, 0] * drawn.values[:, 1], [[0], [1]])
    first, total = numbers(found)
    assert first == pytest.approx([0.0, 0.0], abs=1e-6)
    assert total == pytest.approx([1.0, 1.0], abs=1e-6)


def test_undefined_samples_are_left_out_and_constants_have_no_influence() -> None:
    spreads = [Spread(name, 0.0, "normal", 1.0) for name in "xy"]
    drawn = draw(spreads, [], 400, 5)
    line = 3.0 * drawn.values[:, 0] + drawn.values[:, 1]
    line[::50] = np.nan
    table = np.stack([line, np.full(400, 0.3), np.full(400, np.nan)], axis=1)
    found = influences(drawn.latent, [False] * 2, table, drawn.sequence, [[0], [1]])
    assert found[0] is not None
    assert numbers(found[0])[0] == pytest.approx([0.9, 0.1], abs=0.02)
    assert found[1:] == [None, None]


def test_too_few_samples_say_nothing() -> None:
    spreads = [Spread(name, 0.0, "normal", 1.0) for name in "xyz"]
    drawn = draw(spreads, [], 8, 6)
    values = drawn.values.sum(axis=1)[:, None]
    assert influences(drawn.latent, [False] * 3, values, drawn.sequence, [[0], [1], [2]]) == [None]
