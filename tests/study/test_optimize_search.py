"""The search by itself, on functions with known optima."""

from __future__ import annotations

import numpy as np
import pytest
from optimize_devices import Ripples, Worker

from optics.study.optimize_front import simplex, undominated
from optics.study.optimize_local import Goal, Start, polish
from optics.study.optimize_search import different, search, spread_points, usual_count
from optics.study.optimize_surrogate import Sample, surrogate

NO_LINES = (np.zeros((0, 2)), np.zeros(0), np.zeros(0))


def goal_of(sample: Sample, at_least: float | None = None) -> Goal:
    """Return the goal of a large first outcome, the second one limited from below."""
    cost = np.array([-1.0 / float(np.ptp(sample.outcomes[:, 0])), 0.0])
    if at_least is None:
        return Goal(cost, *NO_LINES)
    return Goal(cost, np.array([[0.0, 1.0]]), np.array([at_least]), np.zeros(1))


def sample_of(landscape: Ripples, seed: int) -> Sample:
    units = spread_points(landscape.size, usual_count(landscape.size), seed)
    return Sample(units, np.array([landscape.value(unit) for unit in units]))


def dense_best(landscape: Ripples, count: int, at_least: float = 0.0) -> float:
    """Best of a grid, written as a loop over its points."""
    best = -np.inf
    for place in np.ndindex(*[count] * landscape.size):
        outcomes = landscape.value(np.array(place) / (count - 1))
        if outcomes[1] >= at_least:
            best = max(best, float(outcomes[0]))
    return best


@pytest.mark.parametrize(("size", "count"), [(1, 4001), (2, 161), (3, 31)])
@pytest.mark.parametrize("seed", range(3))
def test_no_grid_is_better(size: int, count: int, seed: int) -> None:
    landscape = Ripples(size)
    sample = sample_of(landscape, seed)
    found = search(Worker(landscape), goal_of(sample), sample)
    assert found.optima[0].outcomes[0] >= dense_best(landscape, count)


@pytest.mark.parametrize("seed", range(3))
def test_no_grid_is_better_under_a_limit(seed: int) -> None:
    landscape = Ripples(2)
    sample = sample_of(landscape, seed)
    free = search(Worker(landscape), goal_of(sample), sample).optima[0]
    found = search(Worker(landscape), goal_of(sample, 1.2), sample)
    best = found.optima[0]
    assert free.outcomes[1] < 1.2 <= best.outcomes[1] + 1e-6
    assert best.outcomes[0] >= dense_best(landscape, 161, 1.2) - 1e-6


def test_the_limit_is_where_the_lagrangian_says() -> None:
    """Largest x y with x + y at most 1 is at one half each."""

    class Saddle:
        def value(self, unit: np.ndarray) -> np.ndarray:
            return np.array([unit[0] * unit[1], unit.sum()])

        def slope(self, unit: np.ndarray) -> np.ndarray:
            return np.array([unit[::-1], np.ones(2)])

    goal = Goal(np.array([-1.0, 0.0]), np.array([[0.0, -1.0]]), np.array([-1.0]), np.zeros(1))
    end = polish(Start(Saddle(), goal, np.array([0.1, 0.3])))
    assert end is not None
    assert end.settled
    assert end.unit == pytest.approx([0.5, 0.5], abs=1e-5)
    assert end.violation <= 1e-7


def test_polishing_ends_where_nothing_is_defined() -> None:
    class Hole:
        def value(self, unit: np.ndarray) -> np.ndarray:
            return np.array([np.nan, 0.0])

        def slope(self, unit: np.ndarray) -> np.ndarray:
            return np.zeros((2, unit.size))

    assert polish(Start(Hole(), Goal(np.array([1.0, 0.0]), *NO_LINES), np.zeros(1))) is None


def test_the_stand_in_goes_through_its_points_and_has_their_slopes() -> None:
    landscape = Ripples(2)
    model = surrogate(sample_of(landscape, 0))
    place = model.sample.units[5]
    assert model.value(place) == pytest.approx(landscape.value(place), abs=1e-9)
    middle = np.array([0.5, 0.5])
    assert model.slope(middle) == pytest.approx(landscape.slope(middle), abs=0.15)


def test_ends_of_one_optimum_count_once() -> None:
    landscape = Ripples(1)
    goal = Goal(np.array([-1.0, 0.0]), *NO_LINES)
    ends = [polish(Start(landscape, goal, np.array([at]))) for at in (0.12, 0.18, 0.8)]
    optima = different([end for end in ends if end is not None])
    assert len(optima) == 2
    assert optima[0].merit < optima[1].merit


def test_points_that_others_better_are_not_on_the_front() -> None:
    costs = np.array([[1.0, 4.0], [2.0, 2.0], [3.0, 3.0], [4.0, 1.0], [2.0, 2.0], [4.0, 1.5]])
    assert undominated(costs) == [0, 1, 3]


def test_shares_of_the_simplex_sum_to_one() -> None:
    for objectives in (2, 3, 4):
        shares = simplex(objectives, 21)
        assert 10 <= len(shares) <= 35
        assert shares.sum(axis=1) == pytest.approx(np.ones(len(shares)))
        assert shares.max() < 1.0


def test_points_are_those_of_their_seed() -> None:
    assert np.array_equal(spread_points(3, 64, 5), spread_points(3, 64, 5))
    assert not np.array_equal(spread_points(3, 64, 5), spread_points(3, 64, 6))
    assert spread_points(3, 64, 5).shape == (64, 3)
