"""Grid points one by one: each is a case of its own, computed by the ordinary engine."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.device.errors import CaseError
from optics.outcome.angular import angular
from optics.outcome.budget import budget
from optics.study.outcomes import angles_needed, read_outcome

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.study.sweep_plan import Plan

    Floats = NDArray[np.float64]
    Integers = NDArray[np.int64]

#: What is kept of every point beside its outcomes, in this order after them.
TRUST = ("energy_balance", "integration_error", "near_field_share")


class Batch(NamedTuple):
    """Grid points to be computed in one task."""

    plan: Plan
    places: Integers  # (n,)


class Found(NamedTuple):
    """What became of some grid points."""

    places: Integers  # (n,) those that were computed
    values: Floats  # (n, outcomes + TRUST); NaN where an outcome is undefined
    failed: tuple[tuple[int, str], ...]  # place and reason of those that were not


def compute_batch(batch: Batch) -> Found:
    """Compute grid points; one that fails does not touch the others."""
    plan = batch.plan
    places, rows, failed = [], [], []
    for place, values in zip(batch.places.tolist(), plan.values_at(batch.places), strict=True):
        try:
            rows.append(compute_point(plan, plan.case.replace_all(plan.changes(values))))
            places.append(place)
        except CaseError as error:
            failed.append((place, "; ".join(str(fault) for fault in error.faults)))
        except Exception as error:  # one point of many: told by name, the others go on
            failed.append((place, f"{type(error).__name__}: {error}"))
    width = len(plan.outcomes) + len(TRUST)
    return Found(
        np.array(places, dtype=np.int64),
        np.array(rows, dtype=np.float64).reshape(-1, width),
        tuple(failed),
    )


def compute_point(plan: Plan, case: Case) -> list[float]:
    """Outcomes of one case and how far they can be trusted; NaN where undefined.

    Emission against angle is computed only if an outcome needs it.
    """
    seen = None
    if any(outcome.needs_angular for outcome in plan.outcomes):
        angles = angles_needed(plan.outcomes) or (0.0,)
        seen = angular(case, angles, plan.tolerance)
        found = seen.budget
    else:
        found = budget(case, plan.tolerance)
    values = [read_outcome(outcome, found, seen) for outcome in plan.outcomes]
    trust = (
        found.accuracy.energy_balance,
        found.accuracy.integration_error,
        max(emitter.near_field_share for emitter in found.emitters),
    )
    return [np.nan if value is None else value for value in (*values, *trust)]
