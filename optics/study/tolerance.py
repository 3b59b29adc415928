"""What process spread does to the outcomes of a case, and the yield against limits."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from optics._version import VERSION
from optics.outcome.budget import DEFAULT_TOLERANCE
from optics.study import evaluate
from optics.study.draws import Draws, draw
from optics.study.evaluate import Progress, answers, layout_of
from optics.study.linear import Tangent
from optics.study.tangent import slopes_of
from optics.study.tolerance_plan import Plan, plan_tolerance
from optics.study.tolerance_result import Tolerance
from optics.study.tolerance_statistics import outcome_spreads, warnings_of, yields_of
from optics.study.trust import doubts, largest_errors, unkept
from optics.study.varied import path_unit

if TYPE_CHECKING:
    from concurrent.futures import Executor
    from pathlib import Path

    import xarray
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.study.store import Store

    Floats = NDArray[np.float64]


def tolerance(
    case: Case,
    *,
    samples: int | None = None,
    seed: int | None = None,
    tolerance: float = DEFAULT_TOLERANCE,
    executor: Executor | None = None,
    progress: Progress | None = None,
    keep_in: Path | None = None,
) -> Tolerance:
    """Compute what the spread in a case's `[tolerance]` table does to its outcomes.

    Parameters
    ----------
    case : Case
        From `optics.read_case`.
    samples, seed : int, optional
        In the place of those in the table.
    tolerance : float
        Wanted accuracy of every destination, as a fraction of the dissipated power.
    executor : concurrent.futures.Executor, optional
        Takes the work; threads on all cores if not given. It stays open.
    progress : callable, optional
        Called with the number of points that are done and of all, as they come.
    keep_in : Path, optional
        Folder in which finished points are kept until all are there. Interrupted, the same study
        of the same case continues from there, with the same result to the last bit.

    Raises
    ------
    CaseError
        With every fault of the `[tolerance]` table.
    ValueError
        If the tolerance is not between 1e-12 and 0.1, no sample is asked for, or the seed is
        negative.

    Examples
    --------
    >>> import optics
    >>> found = optics.tolerance(optics.read_case("cases/tolerance-green-pixel.toml"))
    >>> found.joint_yield.share.value  # doctest: +SKIP
    """
    if not 1e-12 <= tolerance <= 0.1:
        raise ValueError(f"tolerance: found {tolerance!r}; expected a number from 1e-12 to 0.1")
    if samples is not None and samples < 1:
        raise ValueError(f"samples: found {samples!r}; expected at least 1")
    if seed is not None and seed < 0:
        raise ValueError(f"seed: found {seed!r}; expected 0 or more")
    plan = plan_tolerance(case, tolerance, samples, seed)
    drawn = draw(plan.spreads, plan.groups, plan.samples, plan.seed)
    points = points_of(plan, drawn)
    store = None if keep_in is None else store_for(plan, points, keep_in)
    found = run_tolerance(plan, drawn, executor=executor, progress=progress, store=store)
    if store is not None and not found.failed:
        store.discard()
    return found


def points_of(plan: Plan, drawn: Draws) -> Floats:
    """Points of a study: the nominal one, those for differences, then the samples."""
    steps = slopes_of(plan.question).stencil(plan.nominal, plan.sd)
    return np.concatenate([plan.nominal[None], steps, drawn.values])


def store_for(plan: Plan, points: Floats, folder: Path) -> Store:
    """Open the file in which the finished points of this very study are kept."""
    return evaluate.store_for(plan.question, folder, "tolerance", layout_of(points), len(points))


def run_tolerance(
    plan: Plan,
    drawn: Draws,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    store: Store | None = None,
) -> Tolerance:
    """Compute a checked study; as `tolerance`, but the caller discards the store."""
    points = points_of(plan, drawn)
    values, failed = answers(
        plan.question, points, executor=executor, progress=progress, store=store
    )
    said = [] if store is None or store.trouble is None else [unkept(store.trouble)]
    return evaluated(plan, drawn, values, failed, said)


def evaluated(
    plan: Plan, drawn: Draws, values: Floats, failed: dict[int, str], said: list[str]
) -> Tolerance:
    """Statistics of computed points.

    Parameters
    ----------
    plan : Plan
    drawn : Draws
    values : float (points, outcomes + TRUST)
        At `points_of`; NaN where undefined and where the point failed.
    failed : dict of int to str
        Reason by place of the points that failed.
    said : list of str
        Warnings from the way here.
    """
    question = plan.question
    points = points_of(plan, drawn)
    first = len(points) - plan.samples  # of the samples

    def name_of(place: int) -> str:
        if place == 0:
            return "the nominal values"
        which = f"sample {place - first}" if place >= first else "a point for differences"
        return f"{which} ({question.name_of(points[place])})"

    outcomes = values[:, : len(question.outcomes)]
    slopes = slopes_of(question)
    tangent = Tangent(outcomes[0], slopes.gradient(plan.nominal, plan.sd, outcomes[1:first]))
    sampled = outcomes[first:]
    lost = np.zeros(plan.samples, dtype=np.bool_)
    lost[[place - first for place in failed if place >= first]] = True
    spreads = outcome_spreads(plan, drawn, tangent, sampled, lost)
    yields, joint = yields_of(plan, drawn, tangent, sampled)
    names = tuple(f"{name_of(place)}: {why}" for place, why in sorted(failed.items()))
    correlation = {group.places: group.correlation for group in plan.groups}
    warnings = [*question.case.warnings, *said, *doubts(question, values, name_of)]
    warnings += warnings_of(spreads, yields, joint, lost)
    return Tolerance(
        title=question.case.title,
        version=VERSION,
        case_sha256=question.case.sha256,
        tolerance=question.tolerance,
        samples=plan.samples,
        sequences=int(drawn.sequence[-1]) + 1,
        seed=plan.seed,
        spreads=plan.spreads,
        factors=plan.factors,
        correlations=tuple(correlation.get(factor) for factor in plan.factors),
        linked={path: question.paths[place] for path, place in question.followers},
        outcomes=spreads,
        yields=yields,
        joint_yield=joint,
        derivatives=slopes.told(),
        accuracy=largest_errors(question, values),
        failed=names,
        warnings=tuple(warnings),
        data=_dataset(plan, drawn, sampled),
    )


def _dataset(plan: Plan, drawn: Draws, sampled: Floats) -> xarray.Dataset:
    """Every sample along one dimension; what was varied are coordinates."""
    import xarray

    question = plan.question
    coords: dict[str, Any] = {
        "sample": ("sample", np.arange(plan.samples), {"long_name": "number of the sample"}),
        "sequence": ("sample", drawn.sequence, {"long_name": "independent sequence it is of"}),
    }
    for place, path in enumerate(question.paths):
        coords[path] = ("sample", drawn.values[:, place], {"units": path_unit(path)})
    for path, place in question.followers:
        follows = {"units": path_unit(path), "long_name": f"follows {question.paths[place]}"}
        coords[path] = ("sample", drawn.values[:, place], follows)
    variables = {
        outcome.name: (
            "sample",
            sampled[:, place],
            {"units": outcome.units, "long_name": ".".join(outcome.keys)},
        )
        for place, outcome in enumerate(question.outcomes)
    }
    about: dict[str, Any] = {
        "title": question.case.title,
        "case_sha256": question.case.sha256,
        "version": VERSION,
        "seed": plan.seed,
        "tolerance": question.tolerance,
    }
    return xarray.Dataset(variables, coords=coords, attrs=about)
