"""Several objectives: points of which none can be bettered in all, spread along their front."""

from __future__ import annotations

import itertools
import math
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.optimize_goals import gradient_of_objective, single_goal, toward
from optics.study.optimize_local import FEASIBLE, Goal, Polished, Start
from optics.study.optimize_search import Searched, search
from optics.study.optimize_surrogate import Sample, refine

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.study.optimize_runner import Runner

    Floats = NDArray[np.float64]

# About so many points, however many objectives there are.
_POINTS = 21
_STARTS = 2
_GAP = 0.1  # between them, in ranges of the bounds
# Costs nearer than this share of the front's range are one point.
_SAME = 2e-3
_BETTER = 1e-6


class Front(NamedTuple):
    """Ends along the front, each with the goal it was polished for."""

    ends: tuple[tuple[Goal, Polished], ...]
    anchors: tuple[Searched, ...]  # of each objective alone
    starts: int


def find_front(runner: Runner, sample: Sample, spread: Floats) -> Front:
    """Spread points along the front.

    Each objective alone gives the corners of the front. From points spread evenly on the simplex
    between the corners, in units of their ranges, the way leads toward better values of all
    objectives at once, as in normal-boundary intersection, Das and Dennis, SIAM J. Optim. 8, 631
    (1998) (from memory). Every way begins at the best point known once the sample was refined for
    all of them, and once more at the best one that other ways have found.
    """
    aim = runner.aim
    goals = [single_goal(aim, one, spread) for one in aim.objectives]
    anchors: list[Searched] = []
    for goal in goals:
        anchors.append(search(runner, goal, sample))
        sample = anchors[-1].sample
    ends = [(goal, one.optima[0]) for goal, one in zip(goals, anchors, strict=True)]
    known = [one for found in anchors for one in found.polished]
    sample = sample.joined(
        np.array([one.unit for one in known]), np.array([one.outcomes for one in known])
    )
    costs = np.stack([gradient_of_objective(one, spread) for one in aim.objectives])
    corners = np.stack([costs @ end.outcomes for _, end in ends])
    ranges = np.where(np.ptp(corners, axis=0) > _BETTER, np.ptp(corners, axis=0), 1.0)
    ways = [
        toward(aim, costs / ranges[:, None], (share @ corners) / ranges, spread)
        for share in simplex(len(goals), _POINTS)
    ]
    sample = refine(sample, ways, _best_apart, runner.ask, len(ways))
    begins = [
        Start(runner.landscape, way, sample.units[_best_apart(sample, way)[0]]) for way in ways
    ]
    first = runner.polish(begins)
    begins += _again(ways, begins, first)
    finished = [*first, *runner.polish(begins[len(first) :])]
    for start, end in zip(begins, finished, strict=True):
        if end is not None and end.violation <= FEASIBLE:
            ends.append((start.goal, end))
    total = sum(one.starts for one in anchors) + len(begins)
    return Front(tuple(_undominated(ends, costs / ranges[:, None])), tuple(anchors), total)


def _again(ways: list[Goal], begins: list[Start], ends: list[Polished | None]) -> list[Start]:
    """Starts of ways for which other ways have found a better point than their own."""
    found = [one for one in ends if one is not None]
    starts = []
    for way in ways:
        own = [
            end
            for start, end in zip(begins, ends, strict=True)
            if start.goal is way and end is not None
        ]
        best, other = _best(way, own), _best(way, found)
        if other is not None and (best is None or _merit(way, other) < _merit(way, best) - _BETTER):
            starts.append(Start(begins[0].landscape, way, other.unit))
    return starts


def simplex(objectives: int, count: int) -> Floats:
    """Evenly spread shares (n, objectives) that sum to 1, about so many, the corners left out."""
    steps = objectives
    while _simplex_size(objectives, steps + 1) <= count:
        steps += 1
    every = [
        parts
        for parts in itertools.product(range(steps + 1), repeat=objectives)
        if sum(parts) == steps and max(parts) < steps
    ]
    return np.array(every, dtype=np.float64) / steps


def _simplex_size(objectives: int, steps: int) -> int:
    return math.comb(steps + objectives - 1, objectives - 1)


def undominated(costs: Floats) -> list[int]:
    """Places of points whose costs (n, objectives) no other betters in one and equals in the rest.

    Of points with equal costs the first.
    """
    kept = []
    for place, one in enumerate(costs):
        no_worse = (costs <= one).all(axis=1)
        better = no_worse & (costs < one).any(axis=1)
        equal_before = no_worse[:place] & (costs[:place] == one).all(axis=1)
        if not better.any() and not equal_before.any():
            kept.append(place)
    return kept


def _undominated(ends: list[tuple[Goal, Polished]], costs: Floats) -> list[tuple[Goal, Polished]]:
    """Ends on the front, in the order of the first objective, near ones once."""
    values = np.stack([costs @ end.outcomes for _, end in ends])
    order = sorted(undominated(values), key=lambda place: float(values[place][0]))
    chosen: list[int] = []
    for place in order:
        if all(np.abs(values[place] - values[other]).max() > _SAME for other in chosen):
            chosen.append(place)
    return [ends[place] for place in chosen]


def _best_apart(sample: Sample, way: Goal) -> list[int]:
    """Places of the best few points that stand apart from each other."""
    rank = way.merit(sample.outcomes) + way.violation(sample.outcomes)
    chosen: list[int] = []
    for place in np.argsort(rank, kind="stable").tolist():
        near = [np.abs(sample.units[place] - sample.units[other]).max() < _GAP for other in chosen]
        if not any(near):
            chosen.append(place)
        if len(chosen) == _STARTS:
            break
    return chosen


def _best(way: Goal, ends: list[Polished]) -> Polished | None:
    met = [one for one in ends if one.violation <= FEASIBLE]
    return min(met, key=lambda one: _merit(way, one), default=None)


def _merit(way: Goal, end: Polished) -> float:
    return float(way.merit(end.outcomes))
