"""One block of a sweep: every half stack solved once, combined for every point."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.device.zone import zone_interval
from optics.kernels.budget import NEAR_FIELD
from optics.kernels.combined import Combined, Family, combined_budget
from optics.kernels.geometry import backward_modes_possible
from optics.outcome.light import problem_of, quadrature
from optics.study.evaluate import Found, compute_batch
from optics.study.sweep_blocks import FEWEST_POINTS, kinds_of
from optics.study.sweep_outcomes import Source, emitter_averages, outcome_values

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.kernels.problem import Problem
    from optics.study.sweep_plan import Plan

    Floats = NDArray[np.float64]
    Integers = NDArray[np.int64]

_MOST_PROBES = 9


class Block(NamedTuple):
    """A block of `sweep_blocks.blocks`, to be computed in one task."""

    plan: Plan
    places: Integers  # (n,) in its grid


class _Grid(NamedTuple):
    """A block's grid: points are films times sources."""

    plan: Plan
    places: Integers  # (f, s) of the points in the whole grid
    thickness_nm: Floats  # (f, films)
    thinnest: Case  # all swept films at their smallest, the first source
    sources: Sequence[Case]  # (s,) the same films


def compute_block(block: Block) -> Found:
    """Compute a block; points that miss the tolerance one by one.

    Stacks that may carry backward modes are left to the careful way of single points, and so is
    every point that this way cannot place: those are the ones whose failures are to be named.
    """
    plan = block.plan
    if block.places.size < FEWEST_POINTS:
        return compute_batch(plan.batch(block.places))
    grid = _grid(plan, block.places)
    if grid is None:
        return compute_batch(plan.batch(block.places))
    emitters = [_Light(grid, index) for index in range(len(grid.thinnest.emitters))]
    if any(light.is_hard for light in emitters):
        return compute_batch(plan.batch(block.places))
    combined = [light.compute() for light in emitters]
    error = np.max([one.error for one in combined], axis=0)
    balance = np.max([one.balance for one in combined], axis=0)
    places, values = [], []
    for number, case in enumerate(grid.sources):
        averages = {
            light.name: emitter_averages(light.source(number), one.sums)
            for light, one in zip(emitters, combined, strict=True)
        }
        near = np.max([one.shares[NEAR_FIELD] for one in averages.values()], axis=0)
        found = outcome_values(case, averages, plan.question.outcomes, error, balance)
        places.append(grid.places[:, number])
        values.append(np.column_stack([*found, balance, error, near]))
    every, numbers = np.concatenate(places), np.concatenate(values)
    trusted = np.tile(
        (error <= plan.question.tolerance) & (balance <= plan.question.tolerance), len(grid.sources)
    )
    return _completed(plan, every, numbers, trusted)


def _completed(plan: Plan, places: Integers, values: Floats, trusted: NDArray[np.bool_]) -> Found:
    """Add the points that are to be computed one by one."""
    if trusted.all():
        return Found(places, values, ())
    again = compute_batch(plan.batch(places[~trusted]))
    return Found(
        np.concatenate([places[trusted], again.places]),
        np.concatenate([values[trusted], again.values]),
        again.failed,
    )


def _grid(plan: Plan, places: Integers) -> _Grid | None:
    """Cases of a block; None if the case refuses any of them, or zones depend on the films."""
    from optics.device.errors import CaseError

    kinds = kinds_of(plan)
    sources = int(np.prod([plan.shape[place] for place in kinds.source], dtype=np.int64))
    grid = places.reshape(-1, sources)
    values = plan.values_at(grid.ravel()).reshape(*grid.shape, -1)
    films = values[:, 0]
    ends = [films[0].copy(), films[0].copy()]
    for place in kinds.film:
        ends[0][place], ends[1][place] = films[:, place].min(), films[:, place].max()
    try:
        thick = plan.question.case.replace_all(plan.question.changes(ends[1]))
        cases = []
        for source in values[0]:
            chosen = ends[0].copy()
            chosen[list(kinds.source)] = source[list(kinds.source)]
            cases.append(plan.question.case.replace_all(plan.question.changes(chosen)))
    except CaseError:
        return None
    for emitter in cases[0].emitters:
        intervals = {
            zone_interval(case.stack, emitter, case.every_wavelength_nm)
            for case in (cases[0], thick)
        }
        if len(intervals) > 1:
            # A film between zone and absorber is thinner than the closest approach, here or there.
            return None
    return _Grid(plan, grid, _thicknesses(plan, cases[0], films), cases[0], cases)


def _thicknesses(plan: Plan, case: Case, films: Floats) -> Floats:
    """Thickness of every film (f, films) at each combination of values."""
    thickness = np.tile(case.stack.thickness_nm, (len(films), 1))
    leaders = {axis.path: place for place, axis in enumerate(plan.axes)} | dict(
        plan.question.followers
    )
    for path, place in leaders.items():
        section, name, *rest = path.split(".")
        if section == "layers" and rest == ["thickness_nm"]:
            thickness[:, case.stack.film_index(name)] = films[:, place]
    return thickness


class _Light:
    """One emitter's light in all points of a block."""

    def __init__(self, grid: _Grid, index: int) -> None:
        self._grid = grid
        first = grid.thinnest.emitters[index]
        self._emitters: list[Emitter] = [case.emitters[index] for case in grid.sources]
        self._wavelength_nm = first.spectrum.grid_nm(grid.thinnest.wavelength_nm)
        self._zones: list[tuple[Floats, Floats]] = []
        self._zone_of: list[int] = []
        self._theta_of: list[int] = []
        thetas: list[float] = []
        known: dict[bytes, int] = {}
        for case, emitter in zip(grid.sources, self._emitters, strict=True):
            zone = quadrature(case, emitter, self._wavelength_nm)
            key = np.concatenate(zone).tobytes()
            if known.setdefault(key, len(self._zones)) == len(self._zones):
                self._zones.append(zone)
            self._zone_of.append(known[key])
            if emitter.horizontal_fraction not in thetas:
                thetas.append(emitter.horizontal_fraction)
            self._theta_of.append(thetas.index(emitter.horizontal_fraction))
        positions = np.concatenate([position for position, _ in self._zones])
        self._weights = np.concatenate([weight for _, weight in self._zones]) / len(self._zones)
        self._problem: Problem = problem_of(grid.thinnest, first, self._wavelength_nm, positions)
        self._thetas = np.array(thetas)

    @property
    def name(self) -> str:
        """Of the emitter."""
        return self._emitters[0].name

    @property
    def is_hard(self) -> bool:
        """Whether modes may run backward, which paths below the axis could miss."""
        return bool(backward_modes_possible(self._problem).any())

    def compute(self) -> Combined:
        """Spectral averages at every position, one for each orientation that occurs."""
        film = self._emitters[0].film_index
        thickness = self._grid.thickness_nm
        up, of_up = np.unique(thickness[:, film + 1 :], axis=0, return_inverse=True)
        down, of_down = np.unique(thickness[:, :film][:, ::-1], axis=0, return_inverse=True)
        k0_nm = 2.0 * np.pi / self._wavelength_nm
        kd = [k0_nm[:, None, None] * np.pad(part, ((0, 0), (1, 1))) for part in (up, down)]
        pairs = np.stack([of_up.ravel(), of_down.ravel()], axis=1)
        family = Family(self._problem, kd[0], kd[1], pairs)
        return combined_budget(
            family, _probes(pairs), self._weights, self._mix(), self._grid.plan.question.tolerance
        )

    def source(self, number: int) -> Source:
        """What is left to be known for the averages of one source case."""
        place = self._zone_of[number]
        start = sum(position.size for position, _ in self._zones[:place])
        weight = self._zones[place][1]
        return Source(
            self._emitters[number],
            weight,
            slice(start, start + weight.size),
            self._theta_of[number],
        )

    def _mix(self) -> Floats:
        """Weights (orientations, w, 2) of spectrum and dipoles, as of `orientation_average`."""
        spectrum = self._emitters[0].spectrum.weights(self._wavelength_nm)
        share = np.stack([1.0 - self._thetas, self._thetas], axis=1)
        rate = share[:, None, :] * self._problem.source.bulk
        mix: Floats = spectrum[:, None] * rate / rate.sum(axis=2, keepdims=True)
        return mix


def _probes(pairs: Integers) -> Integers:
    """Some points: the corners of the block and others spread over it."""
    corners = [
        int((pairs @ np.array(sign)).argmin()) for sign in ((1, 1), (1, -1), (-1, 1), (-1, -1))
    ]
    spread = np.linspace(0, len(pairs) - 1, _MOST_PROBES - len(corners) + 2).astype(int)[1:-1]
    return np.unique(np.concatenate([corners, spread]))
