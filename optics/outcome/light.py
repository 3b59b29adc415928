"""From a case to the engine's arrays and back: the light of emitters at every wavelength."""

from __future__ import annotations

import os
from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.device.stack import absorbs
from optics.device.zone import absorber_distances, interval_between, zone_quadrature
from optics.kernels.budget import Budget as EngineBudget
from optics.kernels.budget import light_budget
from optics.kernels.exits import ABSORBING, MATCHED, OPEN, PLANAR
from optics.kernels.problem import (
    Problem,
    Sides,
    make_problem,
    rows_of,
    shape_of,
    stacked,
)

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.device.materials import Material
    from optics.device.stack import Slab

# Fewer wavelengths than this are not worth a second thread.
_SMALLEST_CHUNK = 4
_MANY = 100
# Rows of like devices that are computed together: enough to spread what is not compiled, few
# enough to stay in a core's own cache.
_ROWS_TOGETHER = 512
NM_PER_MM = 1e6


class Light(NamedTuple):
    """Power of one emitter by wavelength, position and orientation (vertical, horizontal)."""

    wavelength_nm: NDArray[np.float64]  # (w,)
    position_nm: NDArray[np.float64]  # (z,) from the bottom face of the emitter film
    zone_weight: NDArray[np.float64]  # (z,) quadrature weight times density, sum 1
    bulk: NDArray[np.float64]  # (w, 2) bulk rates over that in vacuum
    engine: EngineBudget
    problem: Problem  # what the engine was asked


def emitter_lights(
    wanted: Sequence[tuple[Case, Emitter]], tolerance: float, threads: int | None = None
) -> list[Light]:
    """Run the engine for some emitters, each of its case.

    Parameters
    ----------
    wanted : sequence of (Case, Emitter)
        Many of like devices cost less together than one by one, and give the same to the last
        bit.
    tolerance : float
        Wanted accuracy of every destination as a fraction of the dissipated power.
    threads : int, optional
        At most so many; as many as there are cores if not given. No number depends on it.
    """
    places, problems = [], []
    for case, emitter in wanted:
        wavelength_nm = emitter.spectrum.grid_nm(case.wavelength_nm)
        position_nm, zone_weight = quadrature(case, emitter, wavelength_nm)
        places.append((wavelength_nm, position_nm, zone_weight))
        problems.append(problem_of(case, emitter, wavelength_nm, position_nm))
    engines = run_engines(problems, tolerance, threads)
    return [
        Light(*place, problem.source.bulk, engine, problem)
        for place, problem, engine in zip(places, problems, engines, strict=True)
    ]


def quadrature(
    case: Case, emitter: Emitter, wavelength_nm: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Positions and weights over an emitter's zone.

    A panel is at most half a wavelength in the film long: one period of the interference.
    """
    film = case.stack.films[emitter.film_index]
    every = case.every_wavelength_nm
    eps = film.material.permittivity(wavelength_nm)
    index = np.sqrt(np.maximum(eps[0].real, eps[1].real))
    distances = absorber_distances(case.stack, emitter.film_index, every)
    return zone_quadrature(
        emitter.zone,
        film.thickness_nm,
        interval_between(distances, film.thickness_nm, emitter.closest_approach_nm),
        distances,
        float((wavelength_nm / (2.0 * index)).min()),
    )


def problem_of(
    case: Case,
    emitter: Emitter,
    wavelength_nm: NDArray[np.float64],
    position_nm: NDArray[np.float64],
) -> Problem:
    """Engine arrays of a case, seen from one emitter's film."""
    stack = case.stack
    eps_o, eps_e = stack.permittivity(wavelength_nm)
    sides = [
        _side(slab, surroundings, wavelength_nm, case.every_wavelength_nm)
        for slab, surroundings in ((stack.substrate, stack.bottom), (stack.cover, stack.top))
    ]
    return make_problem(
        wavelength_nm,
        eps_o,
        eps_e,
        stack.thickness_nm,
        np.stack([side.outer for side in sides], axis=1),
        emitter.film_index,
        position_nm,
        Sides(
            np.array([side.kind for side in sides]),
            np.stack([np.sqrt(side.outer).real for side in sides], axis=1),
            np.stack([side.n_out for side in sides], axis=1),
            np.stack([side.loss for side in sides], axis=1),
        ),
    )


class _Outside(NamedTuple):
    kind: int
    outer: NDArray[np.complex128]  # permittivity next to the films
    n_out: NDArray[np.float64]  # index of the surroundings
    loss: NDArray[np.float64]  # 4 pi k d / lambda of the slab


def _side(
    slab: Slab | None,
    surroundings: Material,
    wavelength_nm: NDArray[np.float64],
    every_wavelength_nm: NDArray[np.float64],
) -> _Outside:
    """What stands outside the films on one side."""
    beyond = np.sqrt(surroundings.permittivity(wavelength_nm)[0])
    nothing = np.zeros_like(wavelength_nm)
    if slab is None:
        if absorbs(surroundings, every_wavelength_nm):
            return _Outside(ABSORBING, beyond**2, beyond.real, nothing)
        return _Outside(OPEN, (beyond.real**2).astype(np.complex128), beyond.real, nothing)
    index = np.sqrt(slab.material.permittivity(wavelength_nm)[0])
    loss = 4.0 * np.pi * index.imag * slab.thickness_mm * NM_PER_MM / wavelength_nm
    kind = MATCHED if slab.exit == "matched" else PLANAR
    return _Outside(kind, (index.real**2).astype(np.complex128), beyond.real, loss)


def run_engine(problem: Problem, tolerance: float, threads: int | None = None) -> EngineBudget:
    """Run the engine over all wavelengths, on at most so many threads."""
    chunks, workers = chunks_of(problem, threads)
    if workers == 1:
        return light_budget(problem, tolerance)
    with ThreadPoolExecutor(workers) as pool:
        found = list(pool.map(lambda rows: light_budget(rows_of(problem, rows), tolerance), chunks))
    return EngineBudget(*(np.concatenate(parts) for parts in zip(*found, strict=True)))


def run_engines(
    problems: Sequence[Problem], tolerance: float, threads: int | None = None
) -> list[EngineBudget]:
    """Run the engine for many problems, like ones together."""
    alike: dict[tuple[int | bytes, ...], list[int]] = {}
    for place, problem in enumerate(problems):
        alike.setdefault(shape_of(problem), []).append(place)
    found: dict[int, EngineBudget] = {}
    for places in alike.values():
        most = max(1, _ROWS_TOGETHER // problems[places[0]].source.eps_o.size)
        for start in range(0, len(places), most):
            some = places[start : start + most]
            sizes = [problems[place].source.eps_o.size for place in some]
            every = run_engine(stacked([problems[place] for place in some]), tolerance, threads)
            found |= zip(some, _parted(every, sizes), strict=True)
    return [found[place] for place in range(len(problems))]


def _parted(engine: EngineBudget, sizes: Sequence[int]) -> Iterator[EngineBudget]:
    """Cut what was computed together into parts of so many rows."""
    last = 0
    for size in sizes:
        first, last = last, last + size
        yield EngineBudget._make(values[first:last] for values in engine)


def chunks_of(problem: Problem, threads: int | None = None) -> tuple[list[NDArray[np.int64]], int]:
    """Neighboring wavelengths to be computed together, and the number of threads for them."""
    rows = np.arange(problem.source.eps_o.size)
    workers = min(threads or cores(), max(1, rows.size // _SMALLEST_CHUNK))
    if workers == 1:
        return [rows], workers
    # Smaller pieces even out what some wavelengths take longer; each costs what is not compiled.
    pieces = 2 if rows.size >= _MANY * workers else 1
    return np.array_split(rows, pieces * workers), workers


def cores() -> int:
    """Cores that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1
