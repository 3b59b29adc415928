"""How far the points of a study can be trusted, over all of them."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import TYPE_CHECKING

import numpy as np

from optics.study.evaluate import TRUST, Question

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

_LARGE_NEAR_FIELD = 0.01


def largest_errors(question: Question, values: Floats) -> dict[str, float]:
    """Largest value of every measure of trust, NaN where no point is known.

    Parameters
    ----------
    question : Question
    values : float (n, outcomes + TRUST)
        From `evaluate.answers`.
    """
    found = {}
    for place, key in enumerate(TRUST, len(question.outcomes)):
        known = values[np.isfinite(values[:, place]), place]
        found[key] = float(known.max()) if known.size else np.nan
    return found


def doubts(question: Question, values: Floats, name_of: Callable[[int], str]) -> Iterator[str]:
    """Yield what is to be known about points although they did not fail.

    Parameters
    ----------
    question : Question
    values : float (n, outcomes + TRUST)
        From `evaluate.answers`.
    name_of : callable
        Names the point at a place for people.
    """
    limits = (question.tolerance, question.tolerance, _LARGE_NEAR_FIELD)
    for place, (key, limit) in enumerate(zip(TRUST, limits, strict=True), len(question.outcomes)):
        column = values[:, place]
        # Written so that a value that is no number is told too, but not a point that failed.
        beyond = np.flatnonzero(np.isinf(column) | (column > limit))
        if beyond.size == 0:
            continue
        worst = int(beyond[column[beyond].argmax()])
        yield (
            f"at {beyond.size} of {len(values)} points the {key.replace('_', ' ')} is above "
            f"{limit:.1e}; the largest, {column[worst]:.1e}, at {name_of(worst)}"
        )


def unkept(trouble: str) -> str:
    """Word that a study went on although its progress could not be kept."""
    return f"progress could not be kept ({trouble}); the study went on without"
