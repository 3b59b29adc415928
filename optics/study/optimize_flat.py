"""How flat an optimum is: each variable moved alone, and the joint change that costs least."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.optimize_goals import meets
from optics.study.optimum import Direction, Slice

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.study.optimize_bind import Binding
    from optics.study.optimize_plan import Objective
    from optics.study.optimize_runner import Runner

    Floats = NDArray[np.float64]

#: Loss of the objective, as a share of its size, by which flatness is measured.
LOSS = 0.01
_SLICE = 33  # values of each variable
_REFINEMENTS = 8
_CLOSE = 1e-4  # of the bounds' range, for the ends of a flat range
_CURVATURE_STEP = 2e-3


class Summit(NamedTuple):
    """The best point of one objective."""

    unit: Floats  # (p,)
    outcomes: Floats  # (k,)


def size_of(value: float, spread: float) -> float:
    """Size by which losses of an objective are measured: its own, or its spread if it is 0."""
    return abs(value) or spread


def slices(runner: Runner, top: Summit) -> dict[str, Slice]:
    """Every variable through its bounds, the others at the best, by path."""
    aim = runner.aim
    ramp = np.linspace(0.0, 1.0, _SLICE)
    moved: list[Floats] = []
    for place in range(len(aim.variables)):
        along = np.unique(np.append(ramp, top.unit[place]))
        rows = np.repeat(top.unit[None], along.size, axis=0)
        rows[:, place] = along
        moved.append(rows)
    found, _ = runner.answers(np.concatenate(moved), "flatness")
    cut: dict[str, Slice] = {}
    begin = 0
    names = [one.name for one in aim.question.outcomes]
    for place, (one, rows) in enumerate(zip(aim.variables, moved, strict=True)):
        part = found[begin : begin + len(rows), : len(names)]
        begin += len(rows)
        cut[one.path] = Slice(
            tuple(aim.values_at(rows)[:, place].tolist()),
            {name: tuple(part[:, index].tolist()) for index, name in enumerate(names)},
            tuple((np.isfinite(part).all(axis=1) & meets(aim, part)).tolist()),
        )
    return cut


def flat_ranges(
    runner: Runner, top: Summit, objective: Objective, cut: dict[str, Slice], size: float
) -> list[tuple[float, float]]:
    """For each variable, the values around the best where less than `LOSS` is lost.

    From the slices the neighbors between which the loss is reached, then roots by Chandrupatla's
    method (from memory), all at once.
    """
    from scipy.optimize.elementwise import find_root

    aim = runner.aim
    ends = np.stack([aim.low, aim.high], axis=1)
    asked: list[tuple[int, int, float, float]] = []  # variable, side, inner and outer unit
    for place, one in enumerate(aim.variables):
        values = np.array(cut[one.path].values)
        curve = np.array(cut[one.path].outcomes[objective.name])
        loss = objective.sign * (top.outcomes[objective.place] - curve) / size
        units = (values - one.low) / (one.high - one.low)
        home = int(np.abs(units - top.unit[place]).argmin())
        for side, step in ((0, -1), (1, 1)):
            index = home
            while 0 <= index + step < units.size and loss[index + step] < LOSS:
                index += step
            # An undefined neighbor ends the range where it is still known.
            if 0 <= index + step < units.size and np.isfinite(loss[index + step]):
                asked.append((place, side, units[index], units[index + step]))
            else:
                ends[place, side] = values[index]
    if not asked:
        return [(float(low), float(high)) for low, high in ends]

    def excess(along: Floats, which: NDArray[np.float64]) -> Floats:
        rows = np.repeat(top.unit[None], along.size, axis=0)
        places = np.array([asked[int(index)][0] for index in which])
        rows[np.arange(along.size), places] = along
        found, _ = runner.answers(rows, "flatness")
        lost = objective.sign * (top.outcomes[objective.place] - found[:, objective.place]) / size
        return np.asarray(lost - LOSS)

    inner, outer = (np.array([one[side] for one in asked]) for side in (2, 3))
    result = find_root(
        excess, (inner, outer), args=(np.arange(len(asked), dtype=np.float64),),
        tolerances={"xatol": _CLOSE, "xrtol": 0.0, "fatol": 1e-5, "frtol": 0.0},
        maxiter=_REFINEMENTS,
    )  # fmt: skip
    for (place, side, _, _), root in zip(asked, result.x.tolist(), strict=True):
        one = aim.variables[place]
        ends[place, side] = one.low + root * (one.high - one.low)
    return [(float(low), float(high)) for low, high in ends]


def loosest(
    runner: Runner, top: Summit, objective: Objective, binding: Binding, size: float
) -> Direction | None:
    """Joint change that costs least, along which all that binds stays as it is, to first order.

    The curvature is that of the Lagrangian, from differences of derivatives, in the space that
    what binds leaves free; variables are measured in ranges of their bounds.
    """
    free = binding.freedom
    if top.unit.size < 2 or free.shape[1] == 0:
        return None
    curvature = free.T @ _hessian(runner, top, binding) @ free
    values, vectors = np.linalg.eigh(0.5 * (curvature + curvature.T))
    along = free @ vectors[:, 0]
    along *= np.sign(along[np.abs(along).argmax()])
    room = _room(top.unit, along)
    # The objective is in units of its spread there, and so is the loss.
    wanted = np.sqrt(2.0 * LOSS * size / binding.spread / values[0]) if values[0] > 0.0 else np.inf
    step = min(float(wanted), room)
    found, _ = runner.answers(
        np.stack([top.unit + step * along, top.unit - step * along]), "flatness"
    )
    lost = objective.sign * (top.outcomes[objective.place] - found[:, objective.place]) / size
    ranges = runner.aim.high - runner.aim.low
    return Direction(
        {
            one.path: float(change)
            for one, change in zip(runner.aim.variables, step * along * ranges, strict=True)
        },
        *(float(one) if np.isfinite(one) else None for one in lost),
    )


def _room(unit: Floats, along: Floats) -> float:
    """Longest step in both directions that stays within the box."""
    moves = np.abs(along) > 1e-9
    return float(np.min(np.minimum(unit, 1.0 - unit)[moves] / np.abs(along[moves])))


def _hessian(runner: Runner, top: Summit, binding: Binding) -> Floats:
    """Second derivatives (p, p) of the Lagrangian, whose gradient is the weighted slopes."""
    size = top.unit.size
    ends = np.repeat(top.unit[None, None], 2, axis=0).repeat(size, axis=1)
    for side, step in enumerate((-_CURVATURE_STEP, _CURVATURE_STEP)):
        ends[side, range(size), range(size)] = np.clip(top.unit + step, 0.0, 1.0)
    widths = np.diagonal(ends[1] - ends[0])
    slopes = runner.slopes(ends.reshape(2 * size, size), "flatness")
    gradients = np.einsum("k,nkp->np", binding.weights, slopes).reshape(2, size, size)
    return np.asarray((gradients[1] - gradients[0]) / widths[:, None])
