"""Outcomes over a grid of any numbers of a case, as one labelled dataset."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

import numpy as np

from optics._version import VERSION
from optics.outcome.budget import DEFAULT_TOLERANCE
from optics.study import evaluate
from optics.study.evaluate import Progress, compute_batch, gather, small_parts
from optics.study.sweep_blocks import blocks, combines
from optics.study.sweep_combined import Block, compute_block
from optics.study.sweep_plan import Plan, plan_sweep
from optics.study.trust import doubts, largest_errors, unkept

if TYPE_CHECKING:
    from concurrent.futures import Executor
    from pathlib import Path

    import xarray
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.study.store import Store

    Floats = NDArray[np.float64]

SCHEMA = "outcouple.sweep/1"


def sweep(
    case: Case,
    *,
    tolerance: float = DEFAULT_TOLERANCE,
    executor: Executor | None = None,
    progress: Progress | None = None,
    keep_in: Path | None = None,
) -> xarray.Dataset:
    """Compute outcomes over the grid of a case's `[sweep]` table.

    Parameters
    ----------
    case : Case
        From `optics.read_case`.
    tolerance : float
        Wanted accuracy of every destination, as a fraction of the dissipated power.
    executor : concurrent.futures.Executor, optional
        Takes the work; threads on all cores if not given. It stays open.
    progress : callable, optional
        Called with the number of points that are done and of all, as they come.
    keep_in : Path, optional
        Folder in which finished points are kept until the sweep is complete. Interrupted, the
        same sweep of the same case continues from there, with the same result to the last bit.

    Returns
    -------
    xarray.Dataset
        Dimensions are the dotted paths of the axes, variables the names of the outcomes; units
        on all. NaN where an outcome is undefined and at points that failed; the attributes
        ``warnings`` and ``failed`` name them, one line each.

    Raises
    ------
    CaseError
        With every fault of the `[sweep]` table.
    ValueError
        If the tolerance is not between 1e-12 and 0.1.

    Examples
    --------
    >>> import optics
    >>> found = optics.sweep(optics.read_case("cases/sweep-etl-htl-map.toml"))
    >>> found["external_quantum_efficiency"].max()  # doctest: +SKIP
    """
    if not 1e-12 <= tolerance <= 0.1:
        raise ValueError(f"tolerance: found {tolerance!r}; expected a number from 1e-12 to 0.1")
    plan = plan_sweep(case, tolerance)
    store = None if keep_in is None else store_for(plan, keep_in)
    found = run_sweep(plan, executor=executor, progress=progress, store=store)
    if store is not None and not found.attrs["failed"]:
        store.discard()
    return found


def run_sweep(
    plan: Plan,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    store: Store | None = None,
) -> xarray.Dataset:
    """Compute a checked sweep; as `sweep`, but the caller discards the store."""
    values, failed = _compute(plan, executor, progress, store)
    said = [] if store is None or store.trouble is None else [unkept(store.trouble)]
    return _dataset(plan, values, failed, said)


def store_for(plan: Plan, folder: Path) -> Store:
    """Open the file in which the finished points of this very sweep are kept.

    Parameters
    ----------
    plan : Plan
    folder : Path
        Need not exist yet.
    """
    axes = [[axis.path, *axis.values] for axis in plan.axes]
    return evaluate.store_for(plan.question, folder, "sweep", {"axes": axes}, plan.points)


def _compute(
    plan: Plan, executor: Executor | None, progress: Progress | None, store: Store | None
) -> tuple[Floats, dict[int, str]]:
    """Values (points, outcomes + TRUST) of the whole grid, and the reasons of failed points."""
    values = np.full((plan.points, plan.question.width), np.nan)
    if combines(plan):
        return gather(
            compute_block,
            lambda known: _blocks(plan, known),
            values,
            executor=executor,
            progress=progress,
            store=store,
        )
    return gather(
        compute_batch,
        lambda known: map(plan.batch, small_parts(np.flatnonzero(~known))),
        values,
        executor=executor,
        progress=progress,
        store=store,
    )


def _blocks(plan: Plan, known: NDArray[np.bool_]) -> Iterator[Block]:
    """Blocks that are not known whole; the others again, so that they keep their numbers."""
    for places in blocks(plan):
        if not known[places].all():
            yield Block(plan, places)


def _dataset(plan: Plan, values: Floats, failed: dict[int, str], said: list[str]) -> xarray.Dataset:
    import xarray

    dims = tuple(axis.path for axis in plan.axes)
    variables = {
        outcome.name: (
            dims,
            values[:, place].reshape(plan.shape),
            {"units": outcome.units, "long_name": ".".join(outcome.keys)},
        )
        for place, outcome in enumerate(plan.question.outcomes)
    }
    coords: dict[str, Any] = {
        axis.path: (axis.path, np.array(axis.values), {"units": axis.units}) for axis in plan.axes
    }
    for path, place in plan.question.followers:
        leader = plan.axes[place]
        about = {"units": leader.units, "long_name": f"follows {leader.path}"}
        coords[path] = (leader.path, np.array(leader.values), about)
    names = [f"{plan.name_of(place)}: {why}" for place, why in sorted(failed.items())]
    return xarray.Dataset(
        variables,
        coords=coords,
        attrs={
            "schema": SCHEMA,
            "version": VERSION,
            "title": plan.question.case.title,
            "case_sha256": plan.question.case.sha256,
            "tolerance": plan.question.tolerance,
            **largest_errors(plan.question, values),
            "warnings": "\n".join(
                [
                    *plan.question.case.warnings,
                    *said,
                    *doubts(plan.question, values, plan.name_of),
                ]
            ),
            "failed": "\n".join(names),
        },
    )
