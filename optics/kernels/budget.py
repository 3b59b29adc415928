"""Where the power of a dipole goes.

Total and trapped power are integrals of an analytic function and run on arcs below the real
axis, where the poles of forward guided modes (above or on the axis) are far away. What leaves or
is absorbed below the outer light lines is made of squared magnitudes and stays on the axis. The
total is found independently of its parts, so their difference is a true check; where it fails,
and where backward modes may lie below the axis, the careful way of `settle` decides.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from optics.kernels import places, settle
from optics.kernels.arrays import Floats, Integers
from optics.kernels.compiled import mark_cache_warm
from optics.kernels.exits import COLUMNS, TOTAL
from optics.kernels.geometry import (
    grazing_splits,
    light_lines,
    media_facts,
    nearest_absorber,
)
from optics.kernels.paths import ARC, ARC_BETWEEN_LINES, ARC_FROM_LINE, TAIL
from optics.kernels.problem import Problem, rows_of
from optics.kernels.second_look import SecondLook
from optics.kernels.tasks import Tasks, along_arcs, dissipated_power, every_destination

# Places on the last axis of Budget.shares.
(
    AIR_BOTTOM,
    AIR_TOP,
    SUBSTRATE,
    COVER,
    GUIDED,
    SURFACE_PLASMON,
    ABSORBED,
    MATCHED_BOTTOM,
    MATCHED_TOP,
    NEAR_FIELD,
) = range(10)
OUTCOMES = 10

# Column of the radiated integrals for each of those that they hold.
RADIATED = {
    AIR_BOTTOM: 1,
    AIR_TOP: 2,
    SUBSTRATE: 3,
    COVER: 4,
    ABSORBED: 5,
    MATCHED_BOTTOM: 6,
    MATCHED_TOP: 7,
}

_SMALLEST_SCALE = 1e-5  # errors are relative to the dissipated power, but not below this
# Of the arcs that parts of the total run on; other than the total's own, so that a pole that one
# of them passes under shows.
_FLATNESS = 0.7
# Of the wanted accuracy: parts that differ from the total by more hide something narrow.
_SUSPICIOUS = 0.1
_ANY = 1e300  # an accuracy that the first batch of nodes meets
_PANEL_SHARE = 0.05  # of the wanted accuracy, allowed to one panel
# Of that, allowed to one panel of the careful way: thick films have it add up a hundred intervals.
_CAREFUL_SHARE = 0.1


class Parts(NamedTuple):
    """Integrals by range of in-plane wavevector, orientation-resolved.

    The trapped ones have axes (w, 3, z): channels vertical, horizontal p, horizontal s.
    """

    total: Floats  # (w, 2, z), 0 to far, independent of the others where the fast way was taken
    free: Floats  # (w, 2, COLUMNS, z), 0 to the largest outer light line
    guided: Floats  # (w, 3, z), on to the place where TM power counts as plasmon
    beyond: Floats  # (w, 3, z), on to far = twice the largest index
    near: Floats  # (w, 3, z), on to infinity


class Budget(NamedTuple):
    """Result of `light_budget`; orientation 0 is vertical, 1 horizontal."""

    shares: Floats  # (w, z, 2, OUTCOMES), relative to the orientation's own bulk rate
    dissipation: Floats  # (w, z, 2), F
    error: Floats  # (w,), estimate for the worst destination over F
    batches: Integers  # (w,), batches of NODES nodes that were evaluated
    careful: NDArray[np.bool_]  # (w,), whether the careful way decided


def by_orientation(channels: Floats) -> Floats:
    """Sum (w, 3, z) over polarization to (w, 2, z)."""
    return np.stack([channels[:, 0], channels[:, 1] + channels[:, 2]], axis=1)


def light_budget(problem: Problem, tolerance: float) -> Budget:
    """Dissipated power and all destinations of dipoles at every wavelength and position.

    Parameters
    ----------
    problem : Problem
    tolerance : float
        Wanted accuracy of every destination as a fraction of the dissipated power.
    """
    few = places.fewer(problem)
    if few is None:
        return _at_each_place(problem, tolerance)
    direct = places.hopeless(problem, tolerance)
    found = _empty(problem)
    some = np.flatnonzero(~direct)
    if some.size:
        nodes = places.Places(rows_of(few.problem, some), few.basis[some])
        between, error = _between(nodes, _at_each_place(nodes.problem, tolerance))
        good = places.precise(error, tolerance)
        _fill(found, some, between._replace(error=between.error + error))
        direct[some[~good]] = True
    rest = np.flatnonzero(direct)
    if rest.size:
        _fill(found, rest, _at_each_place(rows_of(problem, rest), tolerance))
    return found


def _empty(problem: Problem) -> Budget:
    w, z = problem.source.kz_positions.shape
    shape = (w, z, 2)
    return Budget(
        np.empty((*shape, OUTCOMES)),
        np.empty(shape),
        np.empty(w),
        np.zeros(w, dtype=np.int64),
        np.zeros(w, dtype=np.bool_),
    )


def _fill(found: Budget, rows: Integers, part: Budget) -> None:
    """Write down the results of some wavelengths."""
    found.shares[rows], found.dissipation[rows], found.error[rows] = part[:3]
    found.batches[rows] += part.batches
    found.careful[rows] = part.careful


def _between(nodes: places.Places, at_nodes: Budget) -> tuple[Budget, Floats]:
    """Budget at the places asked for, and what interpolation errs over F (w,)."""
    shares, miss = places.at_places(nodes, at_nodes.shares)
    dissipation, miss_dissipation = places.at_places(nodes, at_nodes.dissipation)
    scale = np.maximum(np.abs(at_nodes.dissipation).min(axis=1), _SMALLEST_SCALE)
    error = np.maximum(miss.max(axis=2), miss_dissipation) / scale
    between = at_nodes._replace(shares=shares, dissipation=dissipation)
    return between, error.max(axis=1)


def _at_each_place(problem: Problem, tolerance: float) -> Budget:
    """As `light_budget`, with every dipole computed."""
    w = problem.source.eps_o.size
    rows = np.arange(w)
    media = media_facts(problem)
    far = 2.0 * media.largest_index
    lines = light_lines(problem)
    trapped = lines[:, -1]
    plasmon = media.plasmon
    start = np.where(plasmon, np.maximum(trapped, np.sqrt(problem.source.eps_e)), trapped)
    batches = np.zeros(w, dtype=np.int64)
    per_panel = _PANEL_SHARE * tolerance

    length = np.maximum(far, 1.0 / nearest_absorber(problem))
    tail = Tasks.on(rows, TAIL, far, np.inf, length)
    scale, near, miss_near = _scale_and_near(problem, far, tail, per_panel, batches)
    arc = along_arcs(rows, ARC, np.zeros(w), far)
    total, miss_total = dissipated_power(problem, arc, scale, per_panel, batches)
    ranges = (
        along_arcs(rows, ARC_FROM_LINE, trapped, start, _FLATNESS).nonempty(),
        along_arcs(rows, ARC_FROM_LINE, start, far, _FLATNESS),
    )
    (guided, miss_guided), (beyond, miss_beyond) = (
        dissipated_power(problem, tasks, scale, per_panel, batches) for tasks in ranges
    )
    axis = Tasks.between(rows, lines, grazing_splits(problem, lines, tolerance))
    free, miss_free = every_destination(problem, axis, scale, per_panel, batches)

    parts = Parts(by_orientation(total), free, guided, beyond, near)
    error = np.maximum(miss_total, miss_free + miss_guided + miss_beyond) + miss_near
    gap = _disagreement(parts, scale)
    careful = ~(error <= tolerance) | ~(gap <= _SUSPICIOUS * tolerance)
    suspects = media.backward | media.narrow
    again = SecondLook(problem, suspects & ~careful, scale, per_panel, batches)
    again.on_axis(trapped, start, guided)
    again.on_axis(start, far, beyond)
    again.on_arc(far, length, near)
    gap = np.maximum(gap, again.gap)
    careful |= ~(gap <= _SUSPICIOUS * tolerance)
    error = np.maximum(error, gap)
    for row in np.flatnonzero(careful).tolist():
        error[row] = _settle(
            problem, row, lines[row], start[row], far[row], scale, per_panel, parts
        )
    mark_cache_warm()
    return _collect(parts, plasmon, error, batches, careful)


def _scale_and_near(
    problem: Problem, far: Floats, tail: Tasks, per_panel: float, batches: Integers
) -> tuple[Floats, Floats, Floats]:
    """Scale (w, 2, z) errors are measured against, power beyond far (w, 3, z), its error (w,).

    One panel for each gives the scale. The tail is mostly resolved by it and done again where
    it is not.
    """
    w, z = problem.source.kz_positions.shape
    absolute = np.ones((w, 2, z))
    arc = along_arcs(tail.rows, ARC_BETWEEN_LINES, np.zeros(w), far)
    coarse, _ = dissipated_power(problem, arc, absolute, _ANY, batches)
    near, miss = dissipated_power(problem, tail, absolute, _ANY, batches)
    scale = np.maximum(np.abs(by_orientation(coarse + near)), _SMALLEST_SCALE)
    miss /= scale.min(axis=(1, 2))
    rough = ~(miss <= per_panel)
    if rough.any():
        again, miss_again = dissipated_power(problem, tail.where(rough), scale, per_panel, batches)
        near[rough], miss[rough] = again[rough], miss_again[rough]
    return scale, near, miss


def _disagreement(parts: Parts, scale: Floats) -> Floats:
    """Largest difference between the total and the sum of its parts, over scale (w,)."""
    known = parts.free[:, :, TOTAL] + by_orientation(parts.guided + parts.beyond)
    gap: Floats = (np.abs(parts.total - known) / scale).max(axis=(1, 2))
    return gap


def _settle(
    problem: Problem,
    row: int,
    lines: Floats,
    start: float,
    far: float,
    scale: Floats,
    per_panel: float,
    parts: Parts,
) -> float:
    """Replace one wavelength's parts by those of the careful way; return its error estimate."""
    careful = settle.Careful(problem, row, scale[row], _CAREFUL_SHARE * per_panel)
    free, error = careful.free(lines)
    parts.free[row] = free
    for values, lo, hi in (
        (parts.guided, lines[-1], start),
        (parts.beyond, start, far),
        (parts.near, far, np.inf),
    ):
        found, miss = careful.trapped(lo, hi)
        values[row] = found
        error += miss
    parts.total[row] = free[:, TOTAL] + by_orientation(
        parts.guided[row : row + 1] + parts.beyond[row : row + 1]
    )
    return error


def _collect(
    parts: Parts,
    plasmon: NDArray[np.bool_],
    error: Floats,
    batches: Integers,
    careful: NDArray[np.bool_],
) -> Budget:
    """Sort the integrals into destinations."""
    w, _, z = parts.total.shape
    shares = np.zeros((w, 2, OUTCOMES, z))
    for place, column in RADIATED.items():
        shares[:, :, place] = parts.free[:, :, column]
    tail = parts.beyond + parts.near
    magnetic = tail[:, :2]  # TM of the vertical and the horizontal dipole
    shares[:, :, SURFACE_PLASMON] = np.where(plasmon[:, None, None], magnetic, 0.0)
    shares[:, :, GUIDED] = by_orientation(parts.guided + tail) - shares[:, :, SURFACE_PLASMON]
    near = by_orientation(parts.near)
    shares[:, :, NEAR_FIELD] = near
    dissipation = parts.total + near
    return Budget(
        np.ascontiguousarray(shares.transpose(0, 3, 1, 2)),
        np.ascontiguousarray(dissipation.transpose(0, 2, 1)),
        error,
        batches,
        careful,
    )


__all__ = ["COLUMNS", "Budget", "Parts", "light_budget"]
