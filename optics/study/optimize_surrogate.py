"""A smooth stand-in for the landscape, through all points known: cheap to search at length."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.optimize_local import Goal, Start, polish

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

Ask = Callable[[np.ndarray], np.ndarray]
_STEP = 1e-4  # of differences, on a function that is smooth to the last digits
_NEAR = 4e-3  # share of the bounds' ranges within which a point tells nothing new
_ROUNDS = 8


class Sample(NamedTuple):
    """Points whose outcomes are known."""

    units: Floats  # (n, p)
    outcomes: Floats  # (n, k), finite

    def joined(self, units: Floats, outcomes: Floats) -> Sample:
        """Sample with more points, those without finite outcomes left out."""
        good = np.isfinite(outcomes).all(axis=1)
        return Sample(
            np.concatenate([self.units, units[good]]),
            np.concatenate([self.outcomes, outcomes[good]]),
        )


@dataclass(frozen=True, slots=True, eq=False)
class Surrogate:
    """Radial cubic splines through a sample; a `optimize_local.Landscape`."""

    sample: Sample
    spline: Callable[[Floats], Floats]

    def value(self, unit: Floats) -> Floats:
        """Outcomes (k,) at a point (p,)."""
        return np.asarray(self.spline(unit[None])[0])

    def slope(self, unit: Floats) -> Floats:
        """Their derivatives (k, p) there."""
        steps = _STEP * np.eye(unit.size)
        around = self.spline(np.concatenate([unit + steps, unit - steps]))
        return np.asarray((around[: unit.size] - around[unit.size :]).T / (2.0 * _STEP))


def surrogate(sample: Sample) -> Surrogate:
    """Fit splines through a sample of more points than variables."""
    from scipy.interpolate import RBFInterpolator

    # Two points on the same place would make the equations singular.
    _, first = np.unique(np.round(sample.units, 9), axis=0, return_index=True)
    kept = Sample(sample.units[np.sort(first)], sample.outcomes[np.sort(first)])
    spline = RBFInterpolator(kept.units, kept.outcomes, kernel="cubic", degree=1)
    return Surrogate(kept, spline)


def refine(
    sample: Sample,
    goals: Sequence[Goal],
    starts: Callable[[Sample, Goal], list[int]],
    ask: Ask,
    most: int,
) -> Sample:
    """Search the stand-in, compute what it promises, fit it anew, until it promises nothing new.

    Parameters
    ----------
    sample : Sample
        Enough points for a first guess.
    goals : sequence of Goal
        What optima are sought for.
    starts : callable
        Places in a sample from which to search for a goal, the most promising first.
    ask : callable
        From points (n, p) to their outcomes (n, k), NaN where undefined.
    most : int
        Points computed in each round, at most.

    Returns
    -------
    Sample
        With all that was computed.
    """
    if sample.units.shape[0] <= 2 * sample.units.shape[1]:
        return sample
    for _ in range(_ROUNDS):
        model = surrogate(sample)
        promised: list[tuple[float, Floats]] = []
        for goal in goals:
            ends = [
                polish(Start(model, goal, sample.units[place])) for place in starts(sample, goal)
            ]
            known = [one for one in ends if one is not None]
            best = min((one.merit + one.violation for one in known), default=0.0)
            promised += [(one.merit + one.violation - best, one.unit) for one in known]
        new: list[Floats] = []
        for _, unit in sorted(promised, key=lambda pair: pair[0]):
            gaps = np.abs(np.concatenate([sample.units, *[one[None] for one in new]]) - unit)
            if gaps.max(axis=1).min() > _NEAR and len(new) < most:
                new.append(unit)
        if not new:
            break
        points = np.array(new)
        sample = sample.joined(points, ask(points))
    return sample
