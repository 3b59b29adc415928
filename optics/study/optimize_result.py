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
    FrontPoint,
    Held,
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
    (binding,) = _bindings(runner, first, [end])
    cut = slices(runner, top)
    ranges = flat_ranges(runner, top, objective, cut, size)
    (direction,) = loosest(runner, [top], [binding], first.spread)
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
        frame=_frame(aim, first.sample, found.settled, ()),
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
    number = int(far.argmin())
    best = settled[number]
    bindings = _bindings(runner, first, [front.ends[place][1] for place in kept])
    points = _front_points(runner, first, settled, bindings)
    return Optimum(
        title=aim.case.title,
        case_sha256=aim.case.sha256,
        seed=first.seed,
        tolerance=aim.question.tolerance,
        objectives=_objectives(aim, best),
        variables=_variables(aim, best, bindings[number], None),
        constraints=_constraints(aim, best, bindings[number]),
        best=points[number],
        others=(),
        front=points,
        loosest=None,
        slices={},
        tried=_tried(runner, first, front.anchors, front.starts),
        accuracy=_accuracy(best.found),
        warnings=_warnings(runner, first, settled, unsettled=False),
        frame=_frame(aim, first.sample, settled, points),
    )


def _bindings(runner: Runner, first: Ends, ends: Sequence[Polished]) -> list[Binding]:
    """What binds at each end."""
    slopes = runner.slopes(np.array([end.unit for end in ends]), "flatness")
    return [
        find_binding(runner.aim, first.spread, end, slope)
        for end, slope in zip(ends, slopes, strict=True)
    ]


def _front_points(
    runner: Runner, first: Ends, settled: Sequence[Settled], bindings: Sequence[Binding]
) -> tuple[FrontPoint, ...]:
    """Points of a front, with what holds each back and how flat it is."""
    aim = runner.aim
    tops = [Summit(aim.unit_at(one.point), one.found[: -len(TRUST)]) for one in settled]
    ways = loosest(runner, tops, bindings, first.spread)
    points = [_point(aim, one.point, one.found) for one in settled]
    return tuple(
        FrontPoint(point.values, point.outcomes, _held_by(aim, binding), way)
        for point, binding, way in zip(points, bindings, ways, strict=True)
    )


def _held_by(aim: Aim, binding: Binding) -> tuple[Held, ...]:
    """Constraints and bounds that bind."""
    limits = zip(aim.limits, binding.limits, strict=True)
    held = [Held(one.name, one.kind) for one, gain in limits if gain > 0.0]
    for kind, gains in (("min", binding.lower), ("max", binding.upper)):
        places = np.flatnonzero(gains > 0.0).tolist()
        held += [Held(aim.variables[place].path, kind) for place in places]
    return tuple(held)


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
    binding: Binding,
    ranges: Sequence[tuple[float, float]] | None,
) -> tuple[VariableFound, ...]:
    found = []
    for place, one in enumerate(aim.variables):
        lower, upper = float(binding.lower[place]), float(binding.upper[place])
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
                gain_per_unit=_gain(aim, max(lower, upper)),
                flat_from=flat[0],
                flat_to=flat[1],
            )
        )
    return tuple(found)


def _constraints(aim: Aim, best: Settled, binding: Binding) -> tuple[ConstraintFound, ...]:
    return tuple(
        ConstraintFound(
            name=one.name,
            kind=one.kind,
            units=aim.question.outcomes[one.place].units,
            limit=one.value,
            value=float(best.found[one.place]),
            binds=bool(gain > 0.0),
            gain_per_unit=_gain(aim, float(gain)),
        )
        for one, gain in zip(aim.limits, binding.limits, strict=True)
    )


def _gain(aim: Aim, gain: float) -> float | None:
    """Gain of the objective; of several there is no unit for it."""
    return gain if len(aim.objectives) == 1 else None


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


def _frame(
    aim: Aim, sample: Sample, written: Sequence[Settled], front: Sequence[FrontPoint]
) -> pandas.DataFrame:
    """Every point of the first stage, and the result: the best first, or the front."""
    import pandas

    kinds = ["best", *["other"] * (len(written) - 1)] if not front else ["front"] * len(front)
    values = np.concatenate([aim.values_at(sample.units), [one.point for one in written]])
    outcomes = np.concatenate([sample.outcomes, [one.found[: -len(TRUST)] for one in written]])
    linked = {path: values[:, place] for path, place in aim.question.followers}
    frame = pandas.DataFrame(
        {
            "kind": ["sample"] * len(sample.units) + kinds,
            **{path: values[:, place] for place, path in enumerate(aim.question.paths)},
            **linked,
            **{one.name: outcomes[:, place] for place, one in enumerate(aim.question.outcomes)},
            "allowed": meets(aim, outcomes),
        }
    )
    if not front:
        return frame
    told = pandas.DataFrame(
        [_told(one) for one in front], index=range(len(sample.units), len(frame))
    )
    return frame.join(told)


def _told(point: FrontPoint) -> dict[str, str | float | None]:
    """What a row of the front says beside its numbers."""
    row: dict[str, str | float | None] = {
        "held_by": "; ".join(f"{one.name} {one.kind}" for one in point.held_by)
    }
    if point.loosest is not None:
        row |= {f"loosest {path}": step for path, step in point.loosest.steps.items()}
        row |= {
            "loss_forward": point.loosest.loss_forward,
            "loss_backward": point.loosest.loss_backward,
        }
    return row
