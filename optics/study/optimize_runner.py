"""Points and polishing of one optimization, on an executor, kept on disk until all is done."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.evaluate import Found, answers, gather, layout_of, store_for
from optics.study.executor import completed
from optics.study.optimize_goals import meets
from optics.study.optimize_landscape import DeviceLandscape, landscape_of
from optics.study.optimize_local import Goal, Polished, Start, polish
from optics.study.optimize_settle import Settled, settle

if TYPE_CHECKING:
    from concurrent.futures import Executor
    from pathlib import Path

    from numpy.typing import NDArray

    from optics.study.optimize_plan import Aim
    from optics.study.store import Store

    Floats = NDArray[np.float64]
    Flags = NDArray[np.bool_]

#: Told of the stage, how many of its parts are done, and how many there are.
Progress = Callable[[str, int, int], object]
_TALLY = 5  # numbers of an end beside its point and outcomes


class _Numbered(NamedTuple):
    place: int
    start: Start


class _Slope(NamedTuple):
    place: int
    landscape: DeviceLandscape
    unit: Floats


class _Rounding(NamedTuple):
    place: int
    aim: Aim
    goal: Goal
    end: Polished
    slope: Floats


@dataclass(slots=True)
class Runner:
    """Does the work of one optimization and counts it.

    Attributes
    ----------
    aim : Aim
    executor : Executor
    keep_in : Path or None
        Folder of what is done, if it is to be kept.
    progress : callable or None
    evaluations, gradients : int
        Points and derivatives so far, those kept from an earlier run included.
    best : float (p + k,) or None
        Values and outcomes of the best point so far that meets every limit, by the first objective.
    landscape : DeviceLandscape
        Outcomes over the unit box.
    gradient_method : str
        How its derivatives are made, and why.
    """

    aim: Aim
    executor: Executor
    keep_in: Path | None = None
    progress: Progress | None = None
    evaluations: int = 0
    gradients: int = 0
    best: Floats | None = None
    landscape: DeviceLandscape = field(init=False)
    gradient_method: str = field(init=False)
    _stores: list[Store] = field(default_factory=list)

    def __post_init__(self) -> None:
        """See which derivatives there are."""
        aim = self.aim
        self.landscape, self.gradient_method = landscape_of(aim.question, aim.low, aim.high)

    @property
    def trouble(self) -> str | None:
        """Why not all that was done could be kept, if so."""
        return next((one.trouble for one in self._stores if one.trouble), None)

    def answers(self, units: Floats, stage: str) -> tuple[Floats, dict[int, str]]:
        """Outcomes and trust (n, k + 3) at points (n, p) of the unit box, and failed ones."""
        points = self.aim.values_at(units)
        store = self._store(layout_of(points), len(points))
        found = answers(
            self.aim.question, points, executor=self.executor, progress=self._watch(stage),
            store=store,
        )  # fmt: skip
        self.evaluations += len(points)
        self._keep_best(units, found[0][:, : len(self.aim.question.outcomes)])
        return found

    def ask(self, units: Floats) -> Floats:
        """Outcomes (n, k) at points (n, p) of the unit box; NaN where undefined."""
        return self.answers(units, "searching")[0][:, : len(self.aim.question.outcomes)]

    def polish(self, starts: list[Start]) -> list[Polished | None]:
        """Polish starts in parallel; ends in their order."""
        if not starts:
            return []
        variables = starts[0].unit.size
        width = variables + len(self.aim.question.outcomes) + _TALLY
        store = self._store(_layout(starts), len(starts), width)

        def tasks(known: Flags) -> Iterator[_Numbered]:
            for place in np.flatnonzero(~known).tolist():
                yield _Numbered(place, starts[place])

        rows, _ = gather(
            _polish_one,
            tasks,
            np.full((len(starts), width), np.nan),
            executor=self.executor,
            progress=self._watch("polishing"),
            store=store,
        )
        ends = [_end(row, variables) for row in rows]
        for one in ends:
            if one is not None:
                self.evaluations += one.values
                self.gradients += one.slopes
                self._keep_best(one.unit[None], one.outcomes[None])
        return ends

    def slopes(self, units: Floats, stage: str) -> Floats:
        """Derivatives (n, k, p) of the outcomes at points (n, p) of the unit box; NaN if none."""
        shape = (len(units), len(self.aim.question.outcomes), units.shape[1])

        def tasks(known: Flags) -> Iterator[_Slope]:
            for place in np.flatnonzero(~known).tolist():
                yield _Slope(place, self.landscape, units[place])

        rows, _ = gather(
            _slope_one,
            tasks,
            np.full((len(units), shape[1] * shape[2]), np.nan),
            executor=self.executor,
            progress=self._watch(stage),
        )
        self.gradients += len(units)
        return rows.reshape(shape)

    def settle(self, ends: list[tuple[Goal, Polished]], stage: str) -> list[Settled]:
        """Round ends to values that one can write down, see `optimize_settle.settle`."""
        slopes = self.slopes(np.array([end.unit for _, end in ends]), stage)
        tasks = [
            _Rounding(place, self.aim, goal, end, slope)
            for place, ((goal, end), slope) in enumerate(zip(ends, slopes, strict=True))
        ]
        settled: dict[int, Settled] = {}
        for place, one in completed(self.executor, _settle_one, tasks):
            settled[place] = one
            self.evaluations += one.evaluations
        return [settled[place] for place in range(len(tasks))]

    def discard(self) -> None:
        """Remove what is kept on disk, when the result has been handed on."""
        for store in self._stores:
            store.discard()

    def _keep_best(self, units: Floats, outcomes: Floats) -> None:
        first = self.aim.objectives[0]
        good = np.isfinite(outcomes).all(axis=1) & meets(self.aim, outcomes)
        size = units.shape[1]
        for unit, row in zip(units[good], outcomes[good], strict=True):
            gain = first.sign * row[first.place]
            if self.best is None or gain > first.sign * self.best[size + first.place]:
                self.best = np.concatenate([self.aim.values_at(unit), row])

    def _watch(self, stage: str) -> Callable[[int, int], object] | None:
        told = self.progress
        return None if told is None else lambda done, total: told(stage, done, total)

    def _store(self, layout: dict[str, str], places: int, width: int | None = None) -> Store | None:
        if self.keep_in is None:
            return None
        every = [f"{one.path} {one.low!r} {one.high!r}" for one in self.aim.variables]
        store = store_for(
            self.aim.question, self.keep_in, "optimize", {**layout, "bounds": every}, places, width
        )
        self._stores.append(store)
        return store


def _layout(starts: list[Start]) -> dict[str, str]:
    digest = hashlib.sha256()
    for start in starts:
        for part in (start.unit, *start.goal):
            digest.update(repr(part.shape).encode("ascii"))
            digest.update(part.tobytes())
    return {"starts": digest.hexdigest()}


def _polish_one(task: _Numbered) -> Found:
    end = polish(task.start)
    if end is None:
        nothing = np.zeros((0, task.start.unit.size + task.start.goal.cost.size + _TALLY))
        return Found(np.zeros(0, dtype=np.int64), nothing, ((task.place, "undefined"),))
    tally = [end.merit, end.violation, end.values, end.slopes, end.settled]
    row = np.concatenate([end.unit, end.outcomes, np.array(tally, dtype=np.float64)])
    return Found(np.array([task.place]), row[None], ())


def _end(row: Floats, variables: int) -> Polished | None:
    if np.isnan(row[0]):
        return None
    merit, violation, values, slopes, settled = row[-_TALLY:].tolist()
    return Polished(
        row[:variables].copy(), row[variables:-_TALLY].copy(),
        merit, violation, int(values), int(slopes), bool(settled),
    )  # fmt: skip


def _slope_one(task: _Slope) -> Found:
    row = task.landscape.slope(task.unit).reshape(1, -1)
    return Found(np.array([task.place]), row, ())


def _settle_one(task: _Rounding) -> tuple[int, Settled]:
    return task.place, settle(task.aim, task.goal, task.end, task.slope)
