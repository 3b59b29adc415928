"""Global search: where to begin, how often, and which of the optima found are different ones."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, NamedTuple, Protocol

import numpy as np

from optics.study.optimize_local import FEASIBLE, Goal, Landscape, Polished, Start
from optics.study.optimize_surrogate import Sample, refine

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

# Optima nearer than this share of the bounds' ranges, along every variable, are one.
SAME = 0.01
#: Loss of the goal, as a share of its best value, up to which an optimum is worth telling.
CLOSE = 0.01
# Reach of a better point, in units of the critical distance: smaller means more starts.
_REACH = 2.0
# Weight of a missed limit against the goal, both in units of their spreads, in ranking starts.
_PENALTY = 3.0
# Starts worse than the best by more than this share of it are not polished.
_WORTH = 0.05


class Worker(Protocol):
    """Computes points and polishes them, in parallel if it can."""

    @property
    def landscape(self) -> Landscape:
        """What is searched."""

    def ask(self, units: Floats) -> Floats:
        """Outcomes (n, k) at points (n, p); NaN where undefined."""

    def polish(self, starts: list[Start]) -> list[Polished | None]:
        """Ends of starts, in their order; None where undefined."""


class Searched(NamedTuple):
    """What a search found."""

    optima: tuple[Polished, ...]  # different ones, the best first
    polished: tuple[Polished, ...]  # every end, in the order of the starts
    starts: int
    sample: Sample  # with all points computed on the way


def spread_points(variables: int, count: int, seed: int) -> Floats:
    """Scrambled Sobol points (count, variables) in the unit box.

    Parameters
    ----------
    count : int
        A power of two, for which the points are balanced.
    """
    from scipy.stats import qmc

    sobol = qmc.Sobol(variables, scramble=True, rng=seed)
    return np.asarray(sobol.random_base2(count.bit_length() - 1), dtype=np.float64)


def usual_count(variables: int) -> int:
    """Points of the first stage if not said: 64 to 1024, twice as many for each variable."""
    return int(min(max(16 * 2**variables, 64), 1024))


def search(worker: Worker, goal: Goal, sample: Sample) -> Searched:
    """Refine a sample by way of a stand-in, then polish what is left of the promising points.

    Parameters
    ----------
    worker : Worker
    goal : Goal
    sample : Sample
        At least one point.
    """
    most = 4 + 2 * sample.units.shape[1]
    # Points that crowd around optima must not bring the distance down.
    distance = critical_distance(*sample.units.shape)

    def starts(now: Sample, goal: Goal) -> list[int]:
        return promising(now, goal, distance)[: 3 * most]

    sample = refine(sample, [goal], starts, worker.ask, most)
    places = starts(sample, goal)
    rank = ranks(sample, goal)
    # Every basin has a point close to its optimum by now; those far below the best are left, but
    # for a few, since the stand-in may err.
    reach = rank[places[0]] + _WORTH * (1.0 if goal.slackens else abs(rank[places[0]]))
    worth = sum(rank[place] <= reach for place in places)
    chosen = places[: min(max(worth, 1 + sample.units.shape[1] // 2), most)]
    found = worker.polish([Start(worker.landscape, goal, sample.units[place]) for place in chosen])
    ends = tuple(one for one in found if one is not None)
    return Searched(different(ends), ends, len(chosen), sample)


def ranks(sample: Sample, goal: Goal) -> Floats:
    """Goal (n,) with a penalty on missed limits; less is better."""
    return np.asarray(goal.merit(sample.outcomes) + _PENALTY * goal.violation(sample.outcomes))


def promising(sample: Sample, goal: Goal, distance: float) -> list[int]:
    """Places of the points to start from, the best first: those with no better one at a distance.

    Multi-level single-linkage, Rinnooy Kan and Timmer, Math. Program. 39, 57 (1987) (from memory).
    """
    order = np.argsort(ranks(sample, goal), kind="stable")
    starts: list[int] = []
    for index, place in enumerate(order):
        better = sample.units[order[:index]]
        gaps = np.linalg.norm(better - sample.units[place], axis=1)
        if not (gaps < distance).any():
            starts.append(int(place))
    return starts


def critical_distance(count: int, variables: int) -> float:
    """Distance in the unit box within which a better point makes a start needless."""
    volume = math.gamma(1.0 + 0.5 * variables) * _REACH * math.log(max(count, 2)) / max(count, 2)
    return float(volume ** (1.0 / variables) / math.sqrt(math.pi))


def different(ends: Sequence[Polished]) -> tuple[Polished, ...]:
    """Ends that meet the limits, one of each optimum, the best first.

    If none does, the one that misses them least.
    """
    met = [one for one in ends if one.violation <= FEASIBLE]
    if not met:
        return tuple(sorted(ends, key=lambda one: one.violation)[:1])
    chosen: list[Polished] = []
    for one in sorted(met, key=lambda one: one.merit):
        if not any(_equal(one, other) for other in chosen):
            chosen.append(one)
    return tuple(chosen)


def close(optima: Sequence[Polished]) -> tuple[Polished, ...]:
    """Those within 1 % of the best, which comes first."""
    if not optima:
        return ()
    reach = optima[0].merit + CLOSE * abs(optima[0].merit)
    return tuple(one for one in optima if one.merit <= reach)


def _equal(one: Polished, other: Polished) -> bool:
    return bool(np.abs(one.unit - other.unit).max() <= SAME)
