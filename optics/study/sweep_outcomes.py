"""Outcomes of many points at once, from spectral averages at the emitters' positions.

The formulas are those of one point, with one value for each point where that has one number.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from optics.kernels import budget as engine
from optics.outcome.budget import Accuracy
from optics.outcome.chain import budget_numbers
from optics.outcome.efficiency import Averages, zone_average
from optics.study.outcomes import read_outcome

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.study.outcomes import Outcome

    Floats = NDArray[np.float64]


class Source(NamedTuple):
    """One emitter in one source case."""

    emitter: Emitter
    zone_weight: Floats  # (z,) sum 1
    positions: slice  # of its zone among all
    mixture: int  # which of the averages over orientation is its


def emitter_averages(source: Source, sums: Floats) -> Averages:
    """Average over an emitter's zone.

    Parameters
    ----------
    source : Source
    sums : float (m, engine.OUTCOMES + 1, z, p)
        Averages over spectrum and orientation: outcomes, then F.
    """
    mine = sums[source.mixture, :, source.positions]
    shares, dissipated = mine[: engine.OUTCOMES].transpose(1, 0, 2), mine[engine.OUTCOMES]
    return zone_average(source.emitter.quantum_yield, source.zone_weight, dissipated, shares)


def outcome_values(
    case: Case,
    averages: Mapping[str, Averages],
    outcomes: Sequence[Outcome],
    error: Floats,
    balance: Floats,
) -> list[Floats]:
    """Values (p,) of every outcome; NaN where undefined.

    Parameters
    ----------
    case : Case
        Of any of the points: what it says beside film thicknesses holds for all.
    averages : mapping of str to Averages
        Of every emitter of the case by name.
    outcomes : sequence of Outcome
        Of the light budget.
    error, balance : float (p,)
        Accuracy of each point.
    """
    numbers = budget_numbers(case, averages)
    accuracy: Any = (balance, error)
    numbers["accuracy"] = Accuracy(*accuracy)
    values = [read_outcome(outcome, numbers) for outcome in outcomes]
    return [np.broadcast_to(np.nan if one is None else one, error.shape) for one in values]
