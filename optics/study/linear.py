"""The linear prediction of a tolerance study, and where samples say otherwise."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.intervals import Estimate

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

# The prediction fails where it misses what the samples say by more than their interval and more
# than this: of the mean as a share of the standard deviation, of the standard deviation as a share
# of itself, of a yield as it stands.
MEAN_SHARE, SD_SHARE, YIELD_POINTS = 0.25, 0.1, 0.02
# Central differences over this share of a standard deviation and twice it.
_STEP = 0.2
_STENCIL = ((-2.0, 1.0 / 12.0), (-1.0, -2.0 / 3.0), (1.0, 2.0 / 3.0), (2.0, -1.0 / 12.0))


class Tangent(NamedTuple):
    """Outcomes at the nominal values, and their derivatives."""

    nominal: Floats  # (k,) NaN where undefined
    gradient: Floats  # (k, p) NaN where not known

    def at(self, values: Floats, nominal: Floats) -> Floats:
        """Straight line (n, k) at values (n, p) of the numbers, whose nominal ones are (p,)."""
        line: Floats = self.nominal + (values - nominal) @ self.gradient.T
        return line


def stencil(nominal: Floats, sd: Floats, places: Sequence[int]) -> Floats:
    """Points (4 m, p) at which outcomes give `differences` for m of the p numbers.

    Parameters
    ----------
    nominal, sd : float (p,)
    places : sequence of int (m,)
    """
    points = [
        nominal + _STEP * step * sd * (np.arange(nominal.size) == place)
        for place in places
        for step, _ in _STENCIL
    ]
    return np.array(points).reshape(-1, nominal.size)


def differences(outcomes: Floats, sd: Floats) -> Floats:
    """Gradient (k, m) from outcomes (4 m, k) at the points of `stencil`; fourth order.

    Parameters
    ----------
    outcomes : float (4 m, k)
    sd : float (m,)
        Of the numbers that were stepped.
    """
    weights = np.array([weight for _, weight in _STENCIL])
    by_number = outcomes.reshape(sd.size, len(weights), -1)
    gradient: Floats = np.einsum("psk,s->kp", by_number, weights) / (_STEP * sd)
    return gradient


def failures(
    mean: float, sd: float, sampled_mean: Estimate, sampled_sd: Estimate
) -> tuple[str, ...]:
    """Tell where the samples contradict a linear prediction; nothing where it holds.

    Parameters
    ----------
    mean, sd : float
        As predicted.
    sampled_mean, sampled_sd : Estimate
    """
    found: list[str] = []
    if sampled_sd.value is None or sampled_mean.value is None:
        return ()
    scatter = sampled_sd.value
    if _contradicts(mean, sampled_mean, MEAN_SHARE * scatter):
        found.append(f"mean {sampled_mean.value:.5g}, not {mean:.5g}")
    if _contradicts(sd, sampled_sd, SD_SHARE * scatter):
        found.append(f"standard deviation {scatter:.3g}, not {sd:.3g}")
    return tuple(found)


def yield_failure(predicted: float, sampled: Estimate) -> str | None:
    """Tell if the samples contradict a predicted yield; None where it holds."""
    if sampled.value is None or not _contradicts(predicted, sampled, YIELD_POINTS):
        return None
    return f"yield {100 * sampled.value:.1f} %, not {100 * predicted:.1f} %"


def _contradicts(predicted: float, sampled: Estimate, threshold: float) -> bool:
    if sampled.value is None or sampled.low is None or sampled.high is None:
        return False
    outside = not sampled.low <= predicted <= sampled.high
    return outside and abs(predicted - sampled.value) > threshold


def variance_shares(
    gradient: Floats, covariance: Floats, factors: Sequence[Sequence[int]]
) -> tuple[float, ...]:
    """Share of the predicted variance by factor; factors are independent of each other.

    Parameters
    ----------
    gradient : float (p,)
    covariance : float (p, p)
    factors : sequence of sequence of int
    """
    parts = []
    for factor in factors:
        places = list(factor)
        mine = gradient[places]
        parts.append(float(mine @ covariance[np.ix_(places, places)] @ mine))
    whole = sum(parts)
    return tuple(part / whole if whole > 0.0 else 0.0 for part in parts)
