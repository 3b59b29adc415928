"""How flat an optimum is: each variable moved alone, and the joint change that costs least."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.optimize_goals import meets
from optics.study.optimum import Direction, Slice

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.study.optimize_bind import Binding
    from optics.study.optimize_plan import Aim, Objective
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
    runner: Runner, tops: Sequence[Summit], bindings: Sequence[Binding], spread: Floats
) -> list[Direction | None]:
    """At each point the joint change that costs least, all that binds staying as it is.

    To first order, that is, and of several objectives each stays as well. The curvature is that of
    the Lagrangian, from differences of derivatives, in the space that what binds leaves free;
    variables are measured in ranges of their bounds.

    Parameters
    ----------
    runner : Runner
    tops : sequence of Summit
    bindings : sequence of Binding
        Of each of them.
    spread : float (k,)
    """
    ways = [
        _Way(place, *_softest(hessian, binding.freedom))
        for place, (hessian, binding) in enumerate(
            zip(_hessians(runner, tops, bindings), bindings, strict=True)
        )
        if hessian is not None
    ]
    found: list[Direction | None] = [None] * len(tops)
    if not ways:
        return found
    aim = runner.aim
    wanted = np.array([_wanted_loss(aim, tops[one.place], bindings[one.place], spread)
                       for one in ways])  # fmt: skip
    steps = [_step(one, tops[one.place], loss) for one, loss in zip(ways, wanted, strict=True)]
    ends = np.stack([tops[one.place].unit + side * step
                     for one, step in zip(ways, steps, strict=True)
                     for side in (1.0, -1.0)])  # fmt: skip
    outcomes, _ = runner.answers(ends, "flatness")
    for one, step, (forth, back) in zip(
        ways, steps, outcomes.reshape(len(ways), 2, -1), strict=True
    ):
        top = tops[one.place]
        losses = (_largest_loss(aim, top, end, spread) for end in (forth, back))
        changes = step * (aim.high - aim.low)
        found[one.place] = Direction(
            dict(zip(aim.question.paths, changes.tolist(), strict=True)),
            *(loss if np.isfinite(loss) else None for loss in losses),
        )
    return found


class _Way(NamedTuple):
    """Softest direction at a point, and the curvature along it."""

    place: int
    along: Floats  # (p,)
    curvature: float


def _softest(hessian: Floats, free: Floats) -> tuple[Floats, float]:
    """Direction (p,) among the free ones (p, d) along which least is lost, and how fast."""
    curvature = free.T @ hessian @ free
    values, vectors = np.linalg.eigh(0.5 * (curvature + curvature.T))
    along = free @ vectors[:, 0]
    return along * np.sign(along[np.abs(along).argmax()]), float(values[0])


def _wanted_loss(aim: Aim, top: Summit, binding: Binding, spread: Floats) -> float:
    """Loss of the Lagrangian that stands for a share of each objective, by their weights."""
    return LOSS * sum(
        float(share * size_of(float(top.outcomes[one.place]), float(spread[one.place])))
        / float(spread[one.place])
        for share, one in zip(binding.shares, aim.objectives, strict=True)
    )


def _step(way: _Way, top: Summit, loss: float) -> Floats:
    """Change (p,) in the unit box by which that much is lost, or as far as the bounds allow."""
    wanted = np.sqrt(2.0 * loss / way.curvature) if way.curvature > 0.0 else np.inf
    return np.asarray(min(float(wanted), _room(top.unit, way.along)) * way.along)


def _largest_loss(aim: Aim, top: Summit, end: Floats, spread: Floats) -> float:
    """Share that an objective really loses there; of several, the one that loses most."""
    return max(
        float(one.sign * (top.outcomes[one.place] - end[one.place]))
        / size_of(float(top.outcomes[one.place]), float(spread[one.place]))
        for one in aim.objectives
    )


def _room(unit: Floats, along: Floats) -> float:
    """Longest step in both directions that stays within the box."""
    moves = np.abs(along) > 1e-9
    return float(np.min(np.minimum(unit, 1.0 - unit)[moves] / np.abs(along[moves])))


def _hessians(
    runner: Runner, tops: Sequence[Summit], bindings: Sequence[Binding]
) -> list[Floats | None]:
    """Second derivatives (p, p) of the Lagrangian at each point, whose gradient is the slopes'.

    None where there is but one variable or nothing is left free.
    """
    size = len(runner.aim.variables)
    asked = [place for place, one in enumerate(bindings) if size > 1 and one.freedom.shape[1]]
    found: list[Floats | None] = [None] * len(tops)
    if not asked:
        return found
    ends = np.stack([_around(tops[place].unit) for place in asked])  # (n, 2, p, p)
    slopes = runner.slopes(ends.reshape(-1, size), "flatness")
    slopes = slopes.reshape(len(asked), 2, size, -1, size)
    for place, end, slope in zip(asked, ends, slopes, strict=True):
        gradients = np.einsum("k,snkp->snp", bindings[place].weights, slope)
        widths = np.diagonal(end[1] - end[0])
        found[place] = np.asarray((gradients[1] - gradients[0]) / widths[:, None])
    return found


def _around(unit: Floats) -> Floats:
    """Points (2, p, p) before and after one along every variable, within the box."""
    size = unit.size
    ends = np.broadcast_to(unit, (2, size, size)).copy()
    for side, step in enumerate((-_CURVATURE_STEP, _CURVATURE_STEP)):
        ends[side, range(size), range(size)] = np.clip(unit + step, 0.0, 1.0)
    return ends
