"""Global search: where to begin, how often, and which of the optima found are different ones."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.optimize_local import FEASIBLE, Goal, Landscape, Polished, Start

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

Run = Callable[[list[Start]], list[Polished | None]]
# Optima nearer than this share of the bounds' ranges, along every variable, are one.
SAME = 0.01
#: Loss of the goal, as a share of its best value, up to which an optimum is worth telling.
CLOSE = 0.01
# Reach of a better point, in units of the critical distance: smaller means more starts.
_REACH = 2.0
# Weight of a missed limit against the spread of the goal when starts are ranked.
_PENALTY = 3.0
_MOST_ROUNDS = 4


class Sample(NamedTuple):
    """Points of the first stage whose outcomes are known."""

    units: Floats  # (n, p)
    outcomes: Floats  # (n, k), finite


class Searched(NamedTuple):
    """What the second stage found."""

    optima: tuple[Polished, ...]  # different ones, the best first
    polished: tuple[Polished, ...]  # every end, in the order of the starts
    starts: int
    expected: float  # number of optima that the search would find if it went on


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
    """Points of the first stage if not said: a power of two from 48 a variable on, at most 1024."""
    return int(min(2 ** math.ceil(math.log2(48 * variables)), 1024))


def search(landscape: Landscape, goal: Goal, sample: Sample, run: Run) -> Searched:
    """Polish from the most promising sample points until nothing new is to be expected.

    Starts are those without a better point within the critical distance of multi-level
    single-linkage, Rinnooy Kan and Timmer, Math. Program. 39, 57 (1987) (from memory). After each
    round the number of optima to be expected is estimated from how many different ones were found,
    Boender and Rinnooy Kan, Math. Program. 37, 59 (1987) (from memory); the search ends when that
    is less than one more, or when a further round found none among those within 1 % of the best.

    Parameters
    ----------
    landscape : Landscape
    goal : Goal
    sample : Sample
        At least one point.
    run : callable
        Polishes starts, in their order.
    """
    queue = promising(sample, goal)
    size = 4 + 2 * sample.units.shape[1]
    ends: list[Polished] = []
    optima: tuple[Polished, ...] = ()
    started = 0
    for _ in range(_MOST_ROUNDS):
        chosen, queue = queue[:size], queue[size:]
        if not chosen:
            break
        found = run([Start(landscape, goal, sample.units[place]) for place in chosen])
        ends += [one for one in found if one is not None]
        started += len(chosen)
        before, optima = optima, different(ends)
        if expected_optima(len(optima), started) < len(optima) + 1.0:
            break
        if before and len(close(before)) == len(close(optima)) and _equal(before[0], optima[0]):
            break
    return Searched(optima, tuple(ends), started, expected_optima(len(optima), started))


def promising(sample: Sample, goal: Goal) -> list[int]:
    """Places of the points to start from, the best first."""
    merit, violation = goal.merit(sample.outcomes), goal.violation(sample.outcomes)
    spread = float(np.ptp(merit)) or 1.0
    rank = merit / spread + _PENALTY * violation
    order = np.argsort(rank, kind="stable")
    count, variables = sample.units.shape
    reach = critical_distance(count, variables)
    starts: list[int] = []
    for index, place in enumerate(order):
        better = sample.units[order[:index]]
        gaps = np.linalg.norm(better - sample.units[place], axis=1)
        if not (gaps < reach).any():
            starts.append(int(place))
    # The best points that meet every limit may stand close to a better one that does not.
    met = [int(place) for place in order if violation[place] <= FEASIBLE][:2]
    return list(dict.fromkeys([*met, *starts]))


def critical_distance(count: int, variables: int) -> float:
    """Distance in the unit box within which a better point makes a start needless."""
    volume = math.gamma(1.0 + 0.5 * variables) * _REACH * math.log(max(count, 2)) / max(count, 2)
    return float(volume ** (1.0 / variables) / math.sqrt(math.pi))


def expected_optima(found: int, starts: int) -> float:
    """Bayesian estimate of the number of optima from how many different ones were found."""
    if starts <= found + 2:
        return math.inf
    return found * (starts - 1) / (starts - found - 2)


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
