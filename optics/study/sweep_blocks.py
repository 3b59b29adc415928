"""How the grid of a sweep is cut into blocks whose points share their half stacks.

A block is one set of values of all that changes media, wavelengths or emitter films, times
film thicknesses elsewhere, times what concerns sources and drive only. The cut depends on the
sweep alone, so that numbers do not depend on who computes them or what was there before.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from optics.device.address import ORIENTATION_KEYS

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.study.sweep_plan import Plan

    Integers = NDArray[np.int64]

FILM, SOURCE, OTHER = "film", "source", "other"
# Films of one block at most, so that progress shows and memory stays small, and those of a grid
# that are not worth cutting up for a second core ...
_MOST_FILMS, _FEW_FILMS = 2500, 400
# ... and points; fewer than this are as quick one by one.
_MOST_POINTS = 20_000
FEWEST_POINTS = 6
_FILM = re.compile(r"layers\.([^.]+)\.thickness_nm")
_SOURCE = re.compile(
    r"drive\..+|emitters\.[^.]+\.(quantum_yield|exciton_fraction|share|closest_approach_nm|"
    r"zone\.(at|at_nm|decay_nm|width_nm)|" + "|".join(ORIENTATION_KEYS) + ")"
)


@dataclass(frozen=True, slots=True)
class Kinds:
    """Axes of a plan by what they change."""

    film: tuple[int, ...]
    source: tuple[int, ...]
    other: tuple[int, ...]


def kinds_of(plan: Plan) -> Kinds:
    """Sort the axes of a plan; an axis whose followers are of another kind is `other`."""
    emitting = {emitter.layer for emitter in plan.question.case.emitters}

    def kind(path: str) -> str:
        film = _FILM.fullmatch(path)
        if film is not None and film[1] not in emitting:
            return FILM
        return SOURCE if _SOURCE.fullmatch(path) else OTHER

    found: dict[str, list[int]] = {FILM: [], SOURCE: [], OTHER: []}
    for place, axis in enumerate(plan.axes):
        paths = [axis.path, *(path for path, leader in plan.question.followers if leader == place)]
        kinds = {kind(path) for path in paths}
        found[kinds.pop() if len(kinds) == 1 else OTHER].append(place)
    return Kinds(tuple(found[FILM]), tuple(found[SOURCE]), tuple(found[OTHER]))


def combines(plan: Plan) -> bool:
    """Whether a plan gains from half stacks that are shared: emission against angle does not."""
    if any(outcome.needs_angular for outcome in plan.question.outcomes):
        return False
    kinds = kinds_of(plan)
    shared = [plan.shape[place] for place in (*kinds.film, *kinds.source)]
    return bool(shared) and int(np.prod(shared)) >= FEWEST_POINTS


def blocks(plan: Plan) -> Iterator[Integers]:
    """Places of the grid points of every block.

    Films of no thickness are absent rather than thin and have blocks of their own.
    """
    kinds = kinds_of(plan)
    grid = np.arange(plan.points).reshape(plan.shape)
    order = (*kinds.other, *kinds.film, *kinds.source)
    sizes = [
        int(np.prod([plan.shape[place] for place in axes], dtype=np.int64))
        for axes in (kinds.other, kinds.film, kinds.source)
    ]
    grid = grid.transpose(order).reshape(sizes)
    absent = _absent(plan, kinds.film)
    most = max(1, min(_MOST_FILMS, _MOST_POINTS // sizes[2]))
    for group in grid:
        for pattern in np.unique(absent):
            films = group[absent == pattern]
            few = min(_FEW_FILMS, most)
            # An even number of parts keeps an even number of cores busy to the end.
            parts = 1 if len(films) <= few else 2 * -(-len(films) // (2 * most))
            for part in np.array_split(films, parts):
                yield part.ravel()


def _absent(plan: Plan, film: tuple[int, ...]) -> Integers:
    """Number for each combination of film values that says which of them are 0."""
    shape = [plan.shape[place] for place in film]
    pattern = np.zeros(shape, dtype=np.int64)
    for bit, place in enumerate(film):
        zero = np.array(plan.axes[place].values) == 0.0
        shaped = [1] * len(film)
        shaped[bit] = zero.size
        pattern += zero.reshape(shaped).astype(np.int64) << bit
    return pattern.ravel()
