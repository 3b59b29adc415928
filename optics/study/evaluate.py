"""Outcomes at any points of a case's varied numbers: what every study asks again and again.

A question says what is varied and what is to be known; a point is one value for each of its
paths. Each point is a case of its own, computed by the ordinary engine.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from contextlib import closing
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, NamedTuple, TypeVar

import numpy as np

from optics._version import VERSION
from optics.device.errors import CaseError
from optics.kernels.budget import NEAR_FIELD
from optics.outcome.budget import accuracy_of, shine, shine_together
from optics.outcome.chain import budget_numbers
from optics.outcome.directional import SIDES, sources
from optics.outcome.light import cores
from optics.outcome.view import View
from optics.study.executor import completed, executor_or_threads
from optics.study.outcomes import Outcome, angles_needed, read_outcome
from optics.study.store import Store, clear_abandoned, content_key

if TYPE_CHECKING:
    from concurrent.futures import Executor
    from pathlib import Path

    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.outcome.budget import Lit

    Floats = NDArray[np.float64]
    Integers = NDArray[np.int64]
    Flags = NDArray[np.bool_]

Progress = Callable[[int, int], object]
#: What is known of every point beside its outcomes, in this order after them.
TRUST = ("energy_balance", "integration_error", "near_field_share")
# Points of one task at most: a stop loses no more than those of the running tasks.
_LARGEST_BATCH = 8
_Task = TypeVar("_Task")
_Item = TypeVar("_Item")
_Result = TypeVar("_Result")


@dataclass(frozen=True, slots=True)
class Question:
    """What is varied and what is to be known.

    Attributes
    ----------
    case : Case
    paths : tuple of str
        Of the numbers that are varied.
    followers : tuple of (str, int)
        Linked paths, each with the place in `paths` of the one whose value it takes.
    outcomes : tuple of Outcome
    tolerance : float
        Wanted accuracy of every destination, as a fraction of the dissipated power.
    """

    case: Case
    paths: tuple[str, ...]
    followers: tuple[tuple[str, int], ...]
    outcomes: tuple[Outcome, ...]
    tolerance: float

    @property
    def width(self) -> int:
        """Numbers of one answer: the outcomes, then `TRUST`."""
        return len(self.outcomes) + len(TRUST)

    def changes(self, values: Iterable[float]) -> dict[str, float]:
        """Values by path of one point (paths,), followers included."""
        given = [float(value) for value in values]
        every = dict(zip(self.paths, given, strict=True))
        return every | {path: given[place] for path, place in self.followers}

    def case_at(self, values: Iterable[float]) -> Case:
        """Case of one point (paths,).

        Raises
        ------
        CaseError
            If there is no such device.
        """
        return self.case.replace_all(self.changes(values))

    def name_of(self, values: Iterable[float]) -> str:
        """Name a point (paths,) for people, such as ``layers.HTL.thickness_nm = 40``."""
        pairs = zip(self.paths, values, strict=True)
        return ", ".join(f"{path} = {value:.10g}" for path, value in pairs)


class Batch(NamedTuple):
    """Points to be computed in one task."""

    question: Question
    places: Integers  # (n,) among all points
    points: Floats  # (n, paths)


class Found(NamedTuple):
    """What became of some points."""

    places: Integers  # (n,) those that were computed
    values: Floats  # (n, outcomes + TRUST); NaN where an outcome is undefined
    failed: tuple[tuple[int, str], ...]  # place and reason of those that were not


def answer(question: Question, values: Iterable[float], threads: int | None = None) -> Floats:
    """Compute one point.

    Parameters
    ----------
    question : Question
    values : float (paths,)
    threads : int, optional
        At most so many; as many as there are cores if not given. No number depends on it.

    Returns
    -------
    float (outcomes + TRUST,)
        NaN where an outcome is undefined.

    Raises
    ------
    CaseError
        If there is no such device.
    """
    case = question.case_at(values)
    return _outcomes(question, case, shine(case, question.tolerance, threads), threads)


def answers(
    question: Question,
    points: Floats,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    store: Store | None = None,
) -> tuple[Floats, dict[int, str]]:
    """Compute many points in parallel; one that fails does not touch the others.

    Parameters
    ----------
    question : Question
    points : float (n, paths)
    executor : concurrent.futures.Executor, optional
        Takes the work; threads on all cores if not given. It stays open.
    progress : callable, optional
        Called with the number of points that are done and of all, as they come.
    store : Store, optional
        From `store_for`: points found there are not computed again. The caller discards it.

    Returns
    -------
    values : float (n, outcomes + TRUST)
        NaN where an outcome is undefined, and at points that failed.
    failed : dict of int to str
        Reason by place of those.
    """

    def batches(known: Flags) -> Iterator[Batch]:
        for places in small_parts(np.flatnonzero(~known)):
            yield Batch(question, places, points[places])

    return gather(
        compute_batch,
        batches,
        np.full((len(points), question.width), np.nan),
        executor=executor,
        progress=progress,
        store=store,
    )


def gather(
    compute: Callable[[_Task], Found],
    tasks: Callable[[Flags], Iterable[_Task]],
    values: Floats,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    store: Store | None = None,
) -> tuple[Floats, dict[int, str]]:
    """Hand out tasks and fill in what they find; as `answers`, for points in any arrangement.

    Parameters
    ----------
    compute : callable
        Picklable; takes a task.
    tasks : callable
        From which points are known already (n,) to the tasks that find the others.
    values : float (n, width)
        Filled in; NaN at first.
    """
    known = np.zeros(len(values), dtype=np.bool_)
    if store is not None:
        places, kept = store.load()
        values[places], known[places] = kept, True
    failed: dict[int, str] = {}
    if progress is not None:
        progress(int(known.sum()), known.size)
    with (
        executor_or_threads(executor) as pool,
        closing(completed(pool, compute, tasks(known.copy()))) as results,
    ):
        for found in results:
            values[found.places], known[found.places] = found.values, True
            failed.update(found.failed)
            if store is not None:
                store.add(found.places, found.values)
            if progress is not None:
                progress(int(known.sum()) + len(failed), known.size)
    return values, failed


def store_for(
    question: Question,
    folder: Path,
    study: str,
    layout: Mapping[str, Any],
    places: int,
    width: int | None = None,
) -> Store:
    """Open the file in which the finished points of this very study are kept.

    Files of other studies that were left there long ago are removed.

    Parameters
    ----------
    question : Question
    folder : Path
        Need not exist yet.
    study : str
        Begins the name of the file.
    layout : mapping
        Plain content that says which point is at which place, such as `layout_of` says.
    places : int
        Number of points.
    width : int, optional
        Numbers of each; those of an answer if not given.
    """
    from optics.kernels.compiled import CACHE_FOLDER

    content = {
        "case": question.case.sha256,
        "paths": list(question.paths),
        "followers": [list(pair) for pair in question.followers],
        "outcomes": [outcome.name for outcome in question.outcomes],
        "tolerance": question.tolerance,
        "layout": dict(layout),
        "version": VERSION,
        "kernels": CACHE_FOLDER.name,
    }
    path = folder / f"{study}-{content_key(content)}.part"
    store = Store(path, question.width if width is None else width, places)
    clear_abandoned(folder, besides=store.path)
    return store


def layout_of(points: Floats) -> dict[str, str]:
    """Layout of listed points (n, paths), for `store_for`."""
    shape = "x".join(str(size) for size in points.shape)
    return {"points": f"{shape} {hashlib.sha256(points.tobytes()).hexdigest()}"}


def small_parts(places: Integers) -> Iterator[Integers]:
    """Cut places into tasks that keep all cores busy to the end."""
    size = max(1, min(_LARGEST_BATCH, places.size // (4 * cores())))
    for start in range(0, places.size, size):
        yield places[start : start + size]


def compute_batch(batch: Batch) -> Found:
    """Compute points, like devices together; one that fails does not touch the others."""
    question, points = batch.question, dict(zip(batch.places.tolist(), batch.points, strict=True))
    failed: dict[int, str] = {}
    cases = dict(_each(points, question.case_at, failed))
    try:
        every = shine_together(list(cases.values()), question.tolerance, threads=1)
        lit = dict(zip(cases, every, strict=True))
    except Exception:  # whose fault it is will show, each by itself
        lit = dict(_each(cases, lambda case: shine(case, question.tolerance, threads=1), failed))
    lights = {place: (cases[place], light) for place, light in lit.items()}
    rows = dict(_each(lights, lambda one: _outcomes(question, *one, threads=1), failed))
    return Found(
        np.array(list(rows), dtype=np.int64),
        np.array(list(rows.values()), dtype=np.float64).reshape(-1, question.width),
        tuple(failed.items()),
    )


def _each(
    items: Mapping[int, _Item], compute: Callable[[_Item], _Result], failed: dict[int, str]
) -> Iterator[tuple[int, _Result]]:
    """What becomes of every item by place; the reasons of those that fail are noted."""
    for place, item in items.items():
        try:
            yield place, compute(item)
        except CaseError as error:
            failed[place] = "; ".join(str(fault) for fault in error.faults)
        except Exception as error:  # one point of many: told by name, the others go on
            failed[place] = f"{type(error).__name__}: {error}"


def _outcomes(
    question: Question, case: Case, lit: Sequence[Lit], threads: int | None = None
) -> Floats:
    """Outcomes of one case and how far they can be trusted; nothing else is computed."""
    accuracy = accuracy_of(lit)
    numbers = budget_numbers(case, {one.emitter.name: one.emission for one in lit})
    numbers["accuracy"] = accuracy
    asked = {one.keys[0] for one in question.outcomes if one.needs_angular}
    sides: dict[str, View] = {}
    if asked:
        angles = np.array(angles_needed(question.outcomes))
        emitting = sources(case, lit)
        sides = {
            name: View(case, emitting, place, angles, threads=threads)
            for place, name in enumerate(SIDES)
            if name in asked
        }
    values = [read_outcome(outcome, numbers, sides) for outcome in question.outcomes]
    near = max(float(one.emission.shares[NEAR_FIELD]) for one in lit)
    trust = (accuracy.energy_balance, accuracy.integration_error, near)
    return np.array([np.nan if value is None else value for value in (*values, *trust)])
