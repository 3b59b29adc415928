"""Numbers with rates: every operation against differences, and no silent loss."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from optics.outcome.dual import Dual, plain, rates_of, value_of

Floats = np.ndarray[Any, np.dtype[np.float64]]
RNG = np.random.default_rng(5)
MATRIX = RNG.uniform(0.5, 1.5, (3, 4))
# Two directions in which three numbers move: a vector, a matrix and a scalar.
AT = (RNG.uniform(0.5, 1.5, 4), RNG.uniform(0.5, 1.5, (4, 3)), np.array(0.7))
MOVES = tuple(RNG.uniform(-1.0, 1.0, (2, *one.shape)) for one in AT)

OPERATIONS: dict[str, Callable[..., Any]] = {
    "sum": lambda a, m, s: a + s - 2.0,
    "product": lambda a, m, s: s * a * m.sum(axis=1),
    "quotient": lambda a, m, s: (1.0 / a) / (m[:, 0] / s),
    "negative": lambda a, m, s: -a,
    "root": lambda a, m, s: np.sqrt(a) + np.square(s),
    "exponential": lambda a, m, s: np.exp(-a * s),
    "hypotenuse": lambda a, m, s: np.hypot(a, m[:, 1]),
    "vector by vector": lambda a, m, s: a @ m[:, 2],
    "vector by matrix": lambda a, m, s: a @ m,
    "matrix by vector": lambda a, m, s: MATRIX @ a,
    "matrix by matrix": lambda a, m, s: MATRIX @ m,
    "stack by matrix": lambda a, m, s: np.ones((2, 5, 4)) @ m,
    "stack by vector": lambda a, m, s: (m[None, :, :] * a[:, None]) @ np.ones(3),
    "einsum": lambda a, m, s: np.einsum("i,ij,ki->kj", a, m, MATRIX),
    "einsum behind": lambda a, m, s: np.einsum("i,i...->...", a, m),
    "broadcast": lambda a, m, s: a[:, None] * m + s,
    "index": lambda a, m, s: m[1:, ..., None] * a[2],
    "fancy index": lambda a, m, s: m[np.array([0, 2]), 1, None],
    "total": lambda a, m, s: m.sum() * np.sum(a),
    "kept axis": lambda a, m, s: m / m.sum(axis=1, keepdims=True),
    "stack": lambda a, m, s: np.stack([a, 2.0 * a, np.ones(4)], axis=1),
    "stack of scalars": lambda a, m, s: np.stack([1.0 - s, s, s * s]),
    "concatenate": lambda a, m, s: np.concatenate([a[:2], m[:, 0], np.ones(2)]),
    "where": lambda a, m, s: np.where(value_of(a) > 1.0, a * a, 3.0),
    "where of rows": lambda a, m, s: np.where(value_of(a)[:, None] > 1.0, np.nan_to_num(2.0), m),
}  # fmt: skip


def moved(direction: int, step: float) -> list[Floats]:
    return [at + step * rates[direction] for at, rates in zip(AT, MOVES, strict=True)]


@pytest.mark.parametrize("name", OPERATIONS)
def test_rates_are_those_of_differences(name: str) -> None:
    operation = OPERATIONS[name]
    found = operation(*(Dual(at, rates) for at, rates in zip(AT, MOVES, strict=True)))
    assert_allclose(found.value, operation(*AT), rtol=1e-15)
    step = 1e-3
    for direction in range(2):
        # Sixth order: step^6 leaves rounding, 1e-16 / step.
        difference = sum(
            weight / step
            * (operation(*moved(direction, k * step)) - operation(*moved(direction, -k * step)))
            for k, weight in ((1, 3 / 4), (2, -3 / 20), (3, 1 / 60))
        )  # fmt: skip
        assert_allclose(found.rates[direction], difference, rtol=0.0, atol=1e-11)


def test_questions_are_answered_by_the_value() -> None:
    two = Dual(np.array([1.0, 3.0]), np.ones((1, 2)))
    assert (two > 2.0).tolist() == [False, True]
    assert np.isfinite(two).all()


def test_no_distance_has_no_rate() -> None:
    nothing = Dual(0.0, [1.0])
    assert np.hypot(nothing, nothing).rates.tolist() == [0.0]


def test_rates_are_never_lost_unseen() -> None:
    one = Dual(np.ones(2), np.ones((1, 2)))
    for lossy in (np.asarray, np.sin, np.cumsum, np.array, lambda x: np.add.reduce(x)):
        with pytest.raises(TypeError):
            lossy(one)
    with pytest.raises(TypeError):
        float(one)


def test_rates_have_the_shape_of_the_values() -> None:
    with pytest.raises(ValueError, match="rates"):
        Dual(np.ones(2), np.ones((2, 3)))


def test_plain_numbers_pass() -> None:
    assert plain(np.float64(2.0)) == 2.0
    assert type(plain(np.float64(2.0))) is float
    assert rates_of(3.0, 2).tolist() == [0.0, 0.0]
    assert value_of(3.0) == 3.0
