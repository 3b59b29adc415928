"""Outcomes over a grid of any numbers of a case, as one labelled dataset."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import closing
from typing import TYPE_CHECKING, Any

import numpy as np

from optics._version import VERSION
from optics.outcome.budget import DEFAULT_TOLERANCE
from optics.study.executor import completed, cores, executor_or_threads
from optics.study.store import Store, content_key
from optics.study.sweep_blocks import blocks, combines
from optics.study.sweep_combined import compute_block
from optics.study.sweep_plan import Plan, plan_sweep
from optics.study.sweep_points import TRUST, Batch, Found, compute_batch

if TYPE_CHECKING:
    from concurrent.futures import Executor
    from pathlib import Path

    import xarray
    from numpy.typing import NDArray

    from optics.device.case import Case

    Floats = NDArray[np.float64]
    Integers = NDArray[np.int64]

SCHEMA = "outcouple.sweep/1"
Progress = Callable[[int, int], object]
# Points of one task at most: a stop loses no more than those of the running tasks.
_LARGEST_BATCH = 8
_LARGE_NEAR_FIELD = 0.01
_MOST_NAMED = 20


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
    said = [] if store is None or store.trouble is None else [_unkept(store.trouble)]
    return _dataset(plan, values, failed, said)


def store_for(plan: Plan, folder: Path) -> Store:
    """Open the file in which the finished points of this very sweep are kept.

    Parameters
    ----------
    plan : Plan
    folder : Path
        Need not exist yet.
    """
    from optics.kernels.compiled import CACHE_FOLDER

    content = {
        "case": plan.case.sha256,
        "axes": [[axis.path, *axis.values] for axis in plan.axes],
        "followers": [list(pair) for pair in plan.followers],
        "outcomes": [outcome.name for outcome in plan.outcomes],
        "tolerance": plan.tolerance,
        "version": VERSION,
        "kernels": CACHE_FOLDER.name,
    }
    width = len(plan.outcomes) + len(TRUST)
    return Store(folder / f"sweep-{content_key(content)}.part", width, plan.points)


def _compute(
    plan: Plan, executor: Executor | None, progress: Progress | None, store: Store | None
) -> tuple[Floats, dict[int, str]]:
    """Values (points, outcomes + TRUST) of the whole grid, and the reasons of failed points."""
    values = np.full((plan.points, len(plan.outcomes) + len(TRUST)), np.nan)
    known = np.zeros(plan.points, dtype=np.bool_)
    if store is not None:
        places, kept = store.load()
        values[places], known[places] = kept, True
    failed: dict[int, str] = {}

    def take(found: Found) -> None:
        values[found.places], known[found.places] = found.values, True
        failed.update(found.failed)
        if store is not None:
            store.add(found.places, found.values)
        if progress is not None:
            progress(int(known.sum()) + len(failed), plan.points)

    if progress is not None:
        progress(int(known.sum()), plan.points)
    if combines(plan):
        compute, batches = compute_block, _blocks(plan, known)
    else:
        compute, batches = compute_batch, _batches(plan, known)
    with (
        executor_or_threads(executor) as pool,
        closing(completed(pool, compute, batches)) as results,
    ):
        for found in results:
            take(found)
    return values, failed


def _blocks(plan: Plan, known: NDArray[np.bool_]) -> Iterator[Batch]:
    """Blocks that are not known whole; the others again, so that they keep their numbers."""
    for places in blocks(plan):
        if not known[places].all():
            yield Batch(plan, places)


def _batches(plan: Plan, known: NDArray[np.bool_]) -> Iterator[Batch]:
    left = np.flatnonzero(~known)
    size = max(1, min(_LARGEST_BATCH, left.size // (4 * cores())))
    for start in range(0, left.size, size):
        yield Batch(plan, left[start : start + size])


def _dataset(plan: Plan, values: Floats, failed: dict[int, str], said: list[str]) -> xarray.Dataset:
    import xarray

    dims = tuple(axis.path for axis in plan.axes)
    variables = {
        outcome.name: (
            dims,
            values[:, place].reshape(plan.shape),
            {"units": outcome.units, "long_name": ".".join(outcome.keys)},
        )
        for place, outcome in enumerate(plan.outcomes)
    }
    coords: dict[str, Any] = {
        axis.path: (axis.path, np.array(axis.values), {"units": axis.units}) for axis in plan.axes
    }
    for path, place in plan.followers:
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
            "title": plan.case.title,
            "case_sha256": plan.case.sha256,
            "tolerance": plan.tolerance,
            **{
                key: _largest(values[:, len(plan.outcomes) + place])
                for place, key in enumerate(TRUST)
            },
            "warnings": "\n".join([*plan.case.warnings, *said, *_doubts(plan, values)]),
            "failed": "\n".join(names),
        },
    )


def _largest(column: Floats) -> float:
    known = column[np.isfinite(column)]
    return float(known.max()) if known.size else np.nan


def _doubts(plan: Plan, values: Floats) -> Iterator[str]:
    """What is to be known about points although they did not fail."""
    limits = dict(zip(TRUST, (plan.tolerance, plan.tolerance, _LARGE_NEAR_FIELD), strict=True))
    for place, (key, limit) in enumerate(limits.items(), len(plan.outcomes)):
        column = values[:, place]
        # Written so that a value that is no number is told too, but not a point that failed.
        beyond = np.flatnonzero(np.isinf(column) | (column > limit))
        if beyond.size == 0:
            continue
        worst = int(beyond[column[beyond].argmax()])
        yield (
            f"at {beyond.size} of {plan.points} points the {key.replace('_', ' ')} is above "
            f"{limit:.1e}; the largest, {column[worst]:.1e}, at {plan.name_of(worst)}"
        )


def _unkept(trouble: str) -> str:
    return f"progress could not be kept ({trouble}); the sweep went on without"
