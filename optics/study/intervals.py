"""Confidence intervals from independent sequences of samples.

Within a sequence samples depend on each other, between sequences they do not. So a smooth statistic
is computed from all samples and again without each sequence in turn (the jackknife of Quenouille
and Tukey), and its error comes from the scatter of those. A quantile is not smooth; its interval
comes from that of the share of samples below it.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Integers = NDArray[np.int64]
    Flags = NDArray[np.bool_]

CONFIDENCE = 0.95
# With fewer samples than this on either side of a limit the scatter between sequences says
# little, and a share gets the wider interval of independent samples.
_FEW = 30


@dataclass(frozen=True, slots=True)
class Estimate:
    """A number from samples and the interval it lies in, at a confidence of 95 %.

    Attributes
    ----------
    value : float or None
        None where it is undefined.
    low, high : float or None
        None where too few samples tell nothing of the error.
    """

    value: float | None
    low: float | None
    high: float | None

    @property
    def half_width(self) -> float | None:
        """Half the width of the interval."""
        return None if self.low is None or self.high is None else 0.5 * (self.high - self.low)

    def to_dict(self) -> dict[str, float | None]:
        """Plain types."""
        return {"value": self.value, "low": self.low, "high": self.high}


def estimates(
    statistic: Callable[[Flags], Floats], sequence: Integers
) -> tuple[Floats, Floats | None]:
    """Compute smooth statistics and the half widths of their intervals.

    Parameters
    ----------
    statistic : callable
        From a choice of samples (n,) to numbers (k,).
    sequence : int (n,)
        Sequence of every sample.

    Returns
    -------
    values : float (k,)
    half_widths : float (k,) or None
        None with a single sequence.
    """
    from scipy.stats import t

    values = statistic(np.ones(sequence.size, dtype=np.bool_))
    present = np.unique(sequence)
    if present.size < 2:
        return values, None
    without = np.array([statistic(sequence != one) for one in present])
    scatter = (without - without.mean(axis=0)) ** 2
    error = np.sqrt((present.size - 1) / present.size * scatter.sum(axis=0))
    factor = float(t.ppf(0.5 + 0.5 * CONFIDENCE, present.size - 1))
    return values, factor * error


def as_estimates(values: Floats, half_widths: Floats | None) -> list[Estimate]:
    """Pair numbers with their intervals; what is not finite becomes None."""
    found = []
    for place, value in enumerate(values.tolist()):
        width = math.nan if half_widths is None else float(half_widths[place])
        if not math.isfinite(value):
            found.append(Estimate(None, None, None))
        elif not math.isfinite(width):
            found.append(Estimate(value, None, None))
        else:
            found.append(Estimate(value, value - width, value + width))
    return found


def share(inside: Flags, sequence: Integers) -> Estimate:
    """Share of samples inside limits.

    From the scatter between sequences; where fewer than 30 samples lie on one side, the interval
    of Wilson for independent samples, which never closes on 0 or 1.

    Parameters
    ----------
    inside : bool (n,)
    sequence : int (n,)
    """
    count, hits = inside.size, int(inside.sum())
    if min(hits, count - hits) < _FEW:
        low, high = wilson(hits, count)
        return Estimate(hits / count, low, high)

    def of(chosen: Flags) -> Floats:
        return np.array([inside[chosen].mean()])

    (found,) = as_estimates(*estimates(of, sequence))
    if found.value is None or found.low is None or found.high is None:
        return found
    return Estimate(found.value, max(found.low, 0.0), min(found.high, 1.0))


def quantile(values: Floats, level: float, sequence: Integers) -> Estimate:
    """Quantile, with the interval that the share of samples below it leads to.

    After Woodruff, J. Am. Stat. Assoc. 47, 635 (1952); from memory.

    Parameters
    ----------
    values : float (n,)
        At least one.
    level : float
        Between 0 and 1.
    sequence : int (n,)
    """
    value = float(np.quantile(values, level))
    below = share(values <= value, sequence)
    if below.low is None or below.high is None or values.size < 2:
        return Estimate(value, None, None)
    # From the level, not from the share, which is off by up to one sample.
    off = 0.0 if below.value is None else level - below.value
    ends = np.clip([below.low + off, below.high + off], 0.0, 1.0)
    low, high = np.quantile(values, ends).tolist()
    return Estimate(value, low, high)


def wilson(hits: int, count: int) -> tuple[float, float]:
    """Interval of Wilson (J. Am. Stat. Assoc. 22, 209, 1927; from memory) for a share.

    Parameters
    ----------
    hits, count : int
        0 <= hits <= count, count at least 1.
    """
    from scipy.stats import binomtest

    found: Any = binomtest(hits, count).proportion_ci(CONFIDENCE, method="wilson")
    return float(found.low), float(found.high)
