"""Limits that no point meets: which, and how near one comes."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from optics.device.errors import CaseError, Fault
from optics.study.optimize_goals import least_miss
from optics.study.optimize_local import FEASIBLE
from optics.study.optimize_search import search
from optics.study.optimize_surrogate import Sample

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.study.optimize_local import Polished
    from optics.study.optimize_plan import Aim, Limit
    from optics.study.optimize_runner import Runner

    Floats = NDArray[np.float64]


def meet_limits(runner: Runner, sample: Sample, spread: Floats) -> Sample:
    """Search for points that meet every limit where no sample point does.

    Returns
    -------
    Sample
        With what was found.

    Raises
    ------
    CaseError
        If none is found: with each limit that no point meets, and how near the nearest comes; or
        if each alone can be met, with those that the nearest point misses.
    """
    aim = runner.aim
    found = search(runner, least_miss(aim.limits, spread), sample)
    if any(one.merit <= FEASIBLE for one in found.polished):
        units = np.array([one.unit for one in found.polished])
        return found.sample.joined(units, np.array([one.outcomes for one in found.polished]))
    faults: list[Fault] = []
    for limit in aim.limits:
        nearest = _nearest(runner, found.sample, limit, spread)
        if nearest is not None:
            faults.append(_out_of_reach(aim, limit, nearest, "at best", ""))
    if not faults:
        nearest = found.optima[0]
        faults = [
            _out_of_reach(aim, limit, nearest, "together with the others at best", " together")
            for limit in aim.limits
            if _missed(limit, nearest) > 0.0
        ]
    raise CaseError(faults)


def _nearest(runner: Runner, sample: Sample, limit: Limit, spread: Floats) -> Polished | None:
    """Point that misses one limit least; None if it can be met."""
    if (limit.sign * sample.outcomes[:, limit.place] >= limit.sign * limit.value).any():
        return None
    found = search(runner, least_miss([limit], spread), sample)
    best = found.optima[0]
    return None if best.merit <= FEASIBLE else best


def _missed(limit: Limit, point: Polished) -> float:
    return limit.sign * (limit.value - float(point.outcomes[limit.place]))


def _out_of_reach(aim: Aim, limit: Limit, point: Polished, how: str, with_: str) -> Fault:
    value = float(point.outcomes[limit.place])
    place = aim.question.name_of(float(f"{one:.6g}") for one in aim.values_at(point.unit))
    return Fault(
        aim.case.label,
        limit.key,
        f"{limit.value:.6g}; {how} {value:.6g} was reached, at {place}",
        f"limits that can be met{with_} within the bounds of optimize.variables",
    )
