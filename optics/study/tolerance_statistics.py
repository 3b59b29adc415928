"""Statistics of a tolerance study from its computed points."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from optics.study.chaos import influences
from optics.study.draws import covariance
from optics.study.intervals import Estimate, as_estimates, estimates, quantile, share
from optics.study.linear import Tangent, failures, variance_shares, yield_failure
from optics.study.tolerance_result import QUANTILES, Linear, OutcomeSpread, Yield

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.study.chaos import Influence
    from optics.study.draws import Draws
    from optics.study.tolerance_plan import Plan

    Floats = NDArray[np.float64]
    Integers = NDArray[np.int64]
    Flags = NDArray[np.bool_]

_LARGE_UNEXPLAINED = 0.1


def outcome_spreads(
    plan: Plan, drawn: Draws, tangent: Tangent, sampled: Floats, lost: Flags
) -> tuple[OutcomeSpread, ...]:
    """How every outcome scatters.

    Parameters
    ----------
    plan : Plan
    drawn : Draws
    tangent : Tangent
    sampled : float (n, k)
        Outcomes of the samples; NaN where undefined.
    lost : bool (n,)
        Samples that failed.
    """
    grouped = {place for group in plan.groups for place in group.places}
    uniform = [
        spread.kind == "uniform" and place not in grouped
        for place, spread in enumerate(plan.spreads)
    ]
    influence = influences(drawn.latent, uniform, sampled, drawn.sequence, plan.factors)
    return tuple(
        _outcome_spread(plan, drawn.sequence, tangent, sampled[:, place], place, lost, influence)
        for place in range(sampled.shape[1])
    )


def _outcome_spread(
    plan: Plan,
    sequence: Integers,
    tangent: Tangent,
    column: Floats,
    place: int,
    lost: Flags,
    influence: list[Influence | None],
) -> OutcomeSpread:
    known = np.isfinite(column)
    mean, sd, *quantiles = _statistics(column[known], sequence[known])
    nominal = float(tangent.nominal[place])
    outcome = plan.question.outcomes[place]
    gradient = tangent.gradient[place]
    linear = None
    if np.isfinite(nominal) and bool(np.isfinite(gradient).all()):
        matrix = covariance(plan.spreads, plan.groups)
        predicted = float(np.sqrt(max(gradient @ matrix @ gradient, 0.0)))
        linear = Linear(
            nominal,
            predicted,
            dict(zip(plan.question.paths, gradient.tolist(), strict=True)),
            variance_shares(gradient, matrix, plan.factors),
            failures(nominal, predicted, mean, sd),
        )
    return OutcomeSpread(
        outcome.name,
        outcome.units,
        nominal if np.isfinite(nominal) else None,
        mean,
        sd,
        tuple(quantiles),
        float(column[known].min()) if known.any() else None,
        float(column[known].max()) if known.any() else None,
        int((~known & ~lost).sum()),
        linear,
        influence[place],
    )


def _statistics(values: Floats, sequence: Integers) -> list[Estimate]:
    """Mean, standard deviation and quantiles, with intervals."""
    if values.size == 0:
        return [Estimate(None, None, None)] * (2 + len(QUANTILES))

    def of(chosen: Flags) -> Floats:
        some = values[chosen]
        return np.array([some.mean(), some.std(ddof=1) if some.size > 1 else np.nan])

    smooth = as_estimates(*estimates(of, sequence))
    return smooth + [quantile(values, level, sequence) for level in QUANTILES]


def yields_of(
    plan: Plan, drawn: Draws, tangent: Tangent, sampled: Floats
) -> tuple[tuple[Yield, ...], Yield | None]:
    """Yield of every limit, and of all together; parameters as of `outcome_spreads`."""
    line = tangent.at(drawn.values, plan.nominal)
    everywhere = np.ones(plan.samples, dtype=np.bool_)
    joint, joint_line, has_line = everywhere.copy(), everywhere.copy(), True
    found = []
    for limit in plan.limits:
        inside = _inside(sampled[:, limit.outcome], limit.low, limit.high)
        straight = line[:, limit.outcome]
        predicted = None
        if np.isfinite(straight).all():
            on_line = _inside(straight, limit.low, limit.high)
            predicted = float(on_line.mean())
            joint_line &= on_line
        else:
            has_line = False
        joint &= inside
        name = plan.question.outcomes[limit.outcome].name
        found.append(_yield(name, limit.low, limit.high, inside, drawn.sequence, predicted))
    if not found:
        return (), None
    predicted = float(joint_line.mean()) if has_line else None
    return tuple(found), _yield(None, None, None, joint, drawn.sequence, predicted)


def _yield(
    name: str | None,
    low: float | None,
    high: float | None,
    inside: Flags,
    sequence: Integers,
    predicted: float | None,
) -> Yield:
    sampled = share(inside, sequence)
    failure = None if predicted is None else yield_failure(predicted, sampled)
    return Yield(name, low, high, sampled, predicted, failure)


def _inside(values: Floats, low: float | None, high: float | None) -> Flags:
    """Whether values keep limits; what is undefined does not."""
    inside: Flags = np.isfinite(values)
    if low is not None:
        inside &= values >= low
    if high is not None:
        inside &= values <= high
    return inside


def warnings_of(
    spreads: tuple[OutcomeSpread, ...], yields: tuple[Yield, ...], joint: Yield | None, lost: Flags
) -> Iterator[str]:
    """Yield what the reader should know: lost samples, failed predictions, unexplained variance."""
    if lost.any():
        yield (
            f"{lost.sum()} of {lost.size} samples failed; they count as outside the limits, and "
            "statistics leave them out: a spread that reaches beyond what a device can be is cut "
            "off there"
        )
    said: dict[str, list[str]] = {}
    for one in spreads:
        if one.linear is not None and one.linear.failures:
            said.setdefault(one.name, []).extend(one.linear.failures)
    for limit in (*yields, *([] if joint is None else [joint])):
        if limit.failure is not None:
            said.setdefault(limit.outcome or "all limits together", []).append(limit.failure)
    for name, parts in said.items():
        yield f"the linear prediction fails for {name}: the samples give {'; '.join(parts)}"
    for one in spreads:
        if one.influence is not None and one.influence.unexplained > _LARGE_UNEXPLAINED:
            share = 100 * one.influence.unexplained
            yield (
                f"influences on {one.name} leave {share:.0f} % of its variance unexplained: more "
                "samples would tell more"
            )
