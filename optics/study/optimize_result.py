"""From the ends of a search to its result: rounded values, what binds, how flat, what else."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.device.errors import CaseError
from optics.study.evaluate import TRUST, answer
from optics.study.optimize_bind import find_binding
from optics.study.optimize_flat import Summit, flat_ranges, loosest, size_of, slices
from optics.study.optimize_front import Front, undominated
from optics.study.optimize_goals import gradient_of_objective, meets, single_goal
from optics.study.optimize_search import Searched, close, search
from optics.study.optimum import (
    ConstraintFound,
    ObjectiveFound,
    Optimum,
    Point,
    Tried,
    VariableFound,
)

if TYPE_CHECKING:
    import pandas
    from numpy.typing import NDArray

    from optics.study.optimize_bind import Binding
    from optics.study.optimize_local import Polished
    from optics.study.optimize_plan import Aim
    from optics.study.optimize_runner import Runner
    from optics.study.optimize_settle import Settled
    from optics.study.optimize_surrogate import Sample

    Floats = NDArray[np.float64]

_LARGE_NEAR_FIELD = 0.01


class Ends(NamedTuple):
    """What the first stage left."""

    sample: Sample
    spread: Floats  # (k,)
    samples: int
    failed: dict[int, str]
    seed: int


class Best(NamedTuple):
    """Optima of one objective that are within 1 %, the best first, as found and as written."""

    ends: tuple[Polished, ...]
    settled: tuple[Settled, ...]
    searched: Searched


def best_optima(runner: Runner, first: Ends) -> Best:
    """Search for the one objective of an aim, and round what is found."""
    (objective,) = runner.aim.objectives
    goal = single_goal(runner.aim, objective, first.spread)
    found = search(runner, goal, first.sample)
    optima = close(found.optima)
    settled = runner.settle([(goal, one) for one in optima], "flatness")
    order = sorted(
        range(len(optima)),
        key=lambda place: -objective.sign * float(settled[place].found[objective.place]),
    )
    return Best(
        tuple(optima[place] for place in order), tuple(settled[place] for place in order), found
    )


def single_optimum(runner: Runner, first: Ends, found: Best) -> Optimum:
    """Result for one objective: what binds at the best point, and how flat it is."""
    aim = runner.aim
    (objective,) = aim.objectives
    best, end = found.settled[0], found.ends[0]
    top = Summit(aim.unit_at(best.point), best.found[: -len(TRUST)])
    size = size_of(float(top.outcomes[objective.place]), float(first.spread[objective.place]))
    (slope,) = runner.slopes(end.unit[None], "flatness")
    binding = find_binding(aim, objective, first.spread, end, slope)
    cut = slices(runner, top)
    ranges = flat_ranges(runner, top, objective, cut, size)
    direction = loosest(runner, top, objective, binding, size)
    return Optimum(
        title=aim.case.title,
        case_sha256=aim.case.sha256,
        seed=first.seed,
        tolerance=aim.question.tolerance,
        objectives=_objectives(aim, best),
        variables=_variables(aim, best, binding, ranges),
        constraints=_constraints(aim, best, binding),
        best=_point(aim, best.point, best.found),
        others=tuple(_point(aim, one.point, one.found) for one in found.settled[1:]),
        front=(),
        loosest=direction,
        slices=cut,
        tried=_tried(runner, first, [found.searched], found.searched.starts),
        accuracy=_accuracy(best.found),
        warnings=_warnings(runner, first, [best], not end.settled),
        frame=_frame(aim, first.sample, found.settled),
    )


def front_optimum(runner: Runner, first: Ends, front: Front) -> Optimum:
    """Result for several objectives."""
    aim = runner.aim
    settled = runner.settle(list(front.ends), "front")
    costs = np.stack([gradient_of_objective(one, first.spread) for one in aim.objectives])
    values = np.stack([costs @ one.found[: -len(TRUST)] for one in settled])
    kept = sorted(undominated(values), key=lambda place: float(values[place][0]))
    settled, values = [settled[place] for place in kept], values[kept]
    ranges = np.where(np.ptp(values, axis=0) > 0.0, np.ptp(values, axis=0), 1.0)
    far = np.linalg.norm((values - values.min(axis=0)) / ranges, axis=1)
    best = settled[int(far.argmin())]
    return Optimum(
        title=aim.case.title,
        case_sha256=aim.case.sha256,
        seed=first.seed,
        tolerance=aim.question.tolerance,
        objectives=_objectives(aim, best),
        variables=_variables(aim, best, None, None),
        constraints=_constraints(aim, best, None),
        best=_point(aim, best.point, best.found),
        others=(),
        front=tuple(_point(aim, one.point, one.found) for one in settled),
        loosest=None,
        slices={},
        tried=_tried(runner, first, front.anchors, front.starts),
        accuracy=_accuracy(best.found),
        warnings=_warnings(runner, first, settled, unsettled=False),
        frame=_frame(aim, first.sample, settled),
    )


def _point(aim: Aim, values: Floats, found: Floats) -> Point:
    names = [one.name for one in aim.question.outcomes]
    return Point(aim.question.changes(values), dict(zip(names, found.tolist(), strict=False)))


def _objectives(aim: Aim, best: Settled) -> tuple[ObjectiveFound, ...]:
    try:
        start = answer(aim.question, aim.start)
    except CaseError:
        start = np.full(aim.question.width, np.nan)
    outcomes = aim.question.outcomes
    return tuple(
        ObjectiveFound(
            one.name,
            one.kind,
            outcomes[one.place].units,
            float(start[one.place]) if np.isfinite(start[one.place]) else None,
            float(best.found[one.place]),
        )
        for one in aim.objectives
    )


def _variables(
    aim: Aim,
    best: Settled,
    binding: Binding | None,
    ranges: Sequence[tuple[float, float]] | None,
) -> tuple[VariableFound, ...]:
    found = []
    for place, one in enumerate(aim.variables):
        lower = 0.0 if binding is None else float(binding.lower[place])
        upper = 0.0 if binding is None else float(binding.upper[place])
        flat = (None, None) if ranges is None else ranges[place]
        found.append(
            VariableFound(
                path=one.path,
                units=one.units,
                min=one.low,
                max=one.high,
                start=float(aim.start[place]),
                best=float(best.point[place]),
                binds="min" if lower > 0.0 else "max" if upper > 0.0 else None,
                gain_per_unit=max(lower, upper),
                flat_from=flat[0],
                flat_to=flat[1],
            )
        )
    return tuple(found)


def _constraints(aim: Aim, best: Settled, binding: Binding | None) -> tuple[ConstraintFound, ...]:
    gains = np.zeros(len(aim.limits)) if binding is None else binding.limits
    return tuple(
        ConstraintFound(
            name=one.name,
            kind=one.kind,
            units=aim.question.outcomes[one.place].units,
            limit=one.value,
            value=float(best.found[one.place]),
            binds=bool(gain > 0.0),
            gain_per_unit=float(gain),
        )
        for one, gain in zip(aim.limits, gains, strict=True)
    )


def _tried(runner: Runner, first: Ends, searches: Sequence[Searched], starts: int) -> Tried:
    return Tried(
        samples=first.samples,
        failed=len(first.failed),
        starts=starts,
        settled=sum(one.settled for found in searches for one in found.polished),
        optima=sum(len(one.optima) for one in searches),
        evaluations=runner.evaluations,
        gradients=runner.gradients,
        gradient_method=runner.gradient_method,
    )


def _accuracy(found: Floats) -> dict[str, float]:
    return dict(zip(TRUST[:2], found[-len(TRUST) :].tolist(), strict=False))


def _warnings(
    runner: Runner, first: Ends, points: Sequence[Settled], unsettled: bool
) -> tuple[str, ...]:
    aim = runner.aim
    said = list(aim.case.warnings)
    if runner.trouble is not None:
        said.append(f"progress could not be kept ({runner.trouble}); the search went on without")
    if first.failed:
        why = next(iter(first.failed.values()))
        said.append(
            f"{len(first.failed)} of {first.samples} points between the bounds could not be used; "
            f"the first: {why}"
        )
    for one in aim.objectives:
        if np.ptp(first.sample.outcomes[:, one.place]) == 0.0:
            said.append(f"{one.name} is the same at every point tried")
    if unsettled:
        said.append("the search ended before the best point was an optimum in every digit")
    limits = (aim.question.tolerance, aim.question.tolerance, _LARGE_NEAR_FIELD)
    found = np.stack([one.found[-len(TRUST) :] for one in points])
    for key, limit, column in zip(TRUST, limits, found.T, strict=True):
        if not column.max() <= limit:
            where = "the best point" if len(points) == 1 else "a point of the front"
            word = key.replace("_", " ")
            said.append(f"at {where} the {word} is {column.max():.1e}, above {limit:.1e}")
    return tuple(said)


def _frame(aim: Aim, sample: Sample, written: Sequence[Settled]) -> pandas.DataFrame:
    """Every point of the first stage, and the result: the best first, or the front."""
    import pandas

    best = "front" if len(aim.objectives) > 1 else "best"
    kinds = ["sample"] * len(sample.units) + [best] * len(written[:1])
    kinds += ["front" if len(aim.objectives) > 1 else "other"] * len(written[1:])
    values = np.concatenate([aim.values_at(sample.units), [one.point for one in written]])
    outcomes = np.concatenate([sample.outcomes, [one.found[: -len(TRUST)] for one in written]])
    linked = {path: values[:, place] for path, place in aim.question.followers}
    return pandas.DataFrame(
        {
            "kind": kinds,
            **{path: values[:, place] for place, path in enumerate(aim.question.paths)},
            **linked,
            **{one.name: outcomes[:, place] for place, one in enumerate(aim.question.outcomes)},
            "allowed": meets(aim, outcomes),
        }
    )
