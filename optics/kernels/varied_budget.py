"""Exact derivatives of where the power of a dipole goes.

The integrals of `budget`, differentiated under the integral sign: dissipated and trapped power
on arcs, what leaves on the real axis, nodes that move with the light lines. The rate of the total
is found independently of its parts, as the value is; their difference goes into the error.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Floats
from optics.kernels.budget import (
    GUIDED,
    NEAR_FIELD,
    OUTCOMES,
    RADIATED,
    SURFACE_PLASMON,
    Budget,
    by_orientation,
    light_budget,
)
from optics.kernels.compiled import mark_cache_warm
from optics.kernels.exits import TOTAL
from optics.kernels.geometry import has_plasmon, largest_index, light_lines, nearest_absorber
from optics.kernels.paths import ARC, ARC_FROM_LINE, REAL, REAL_FROM_ZERO, TAIL
from optics.kernels.problem import Half, Problem
from optics.kernels.tasks import Tasks, along_arcs, dissipated_power, every_destination
from optics.kernels.variation import HalfRates, Rates
from optics.kernels.varied_geometry import (
    largest_index_rates,
    light_line_rates,
    plasmon_start_rates,
)
from optics.kernels.varied_tasks import (
    MovingTasks,
    by_wavelength,
    run_dissipated_rates,
    run_radiated_rates,
)

_FLATNESS = 0.7  # of the arcs that parts of the total run on, as in `budget`
_PANEL_SHARE = 0.05  # of the wanted accuracy, allowed to one panel
_AGREEMENT = 10.0  # times the wanted accuracy, within which two ways to a value agree
_SMALLEST_SCALE = 1e-5  # errors of values are relative to the dissipated power, at least this
_NOTHING = 1e-300  # scale of a direction in which nothing changes


class Derivatives(NamedTuple):
    """Rates of change of a `Budget` along p directions, at the wavelengths of its problem."""

    shares: Floats  # (p, w, z, 2, OUTCOMES)
    dissipation: Floats  # (p, w, z, 2)
    error: Floats  # (p, w) estimated error of the worst entry over scale; inf: not to be used
    scale: Floats  # (p, w, z, 2) what errors are measured against


class Ranges(NamedTuple):
    """Paths of every range of in-plane wavevector, see `budget.Parts`."""

    total: MovingTasks
    free: MovingTasks
    guided: MovingTasks
    beyond: MovingTasks
    near: MovingTasks


def light_budget_with_derivatives(
    problem: Problem, rates: Rates, tolerance: float
) -> tuple[Budget, Derivatives]:
    """Dissipated power and all destinations, and their derivatives along p directions.

    The derivative of the absorbed share is that of the dissipated power less those of all other
    destinations, by the identity of energy; the value is the volume integral.

    Parameters
    ----------
    problem : Problem
    rates : Rates
        From `variation.make_rates`.
    tolerance : float
        Wanted accuracy of every destination as a fraction of the dissipated power, and of every
        derivative as a fraction of its scale: the derivative of the dissipated power, but at
        least the dissipated power times the phase that the change adds.

    Returns
    -------
    Budget, Derivatives
        The error is infinite at wavelengths where a resonance is so narrow that paths alone pass
        it by, as with lossless metals: values are settled there by other means, derivatives not.
    """
    budget = light_budget(problem, tolerance)
    ranges = _ranges(problem, rates)
    per_panel = _PANEL_SHARE * tolerance
    scale = _scale(problem, rates, budget, ranges)
    w = problem.source.eps_o.size

    def dissipated(moving: MovingTasks) -> tuple[Floats, Floats]:
        found = run_dissipated_rates(problem, rates, moving, scale, per_panel)
        return by_wavelength(moving, w, *found)

    total, miss_total = dissipated(ranges.total)
    guided, miss_guided = dissipated(ranges.guided)
    beyond, miss_beyond = dissipated(ranges.beyond)
    near, miss_near = dissipated(ranges.near)
    free, miss_free = by_wavelength(
        ranges.free, w, *run_radiated_rates(problem, rates, ranges.free, scale, per_panel)
    )
    total = _by_orientation(total)
    known = free[:, :, :, TOTAL] + _by_orientation(guided + beyond)
    gap = (np.abs(total - known) / scale).max(axis=(2, 3))
    error = np.maximum(miss_total, miss_free + miss_guided + miss_beyond) + miss_near
    error = np.maximum(error, gap)
    error[_hides_something(problem, budget, ranges, tolerance)] = np.inf
    shares, dissipation = _collect(problem, total, free, guided, beyond, near)
    mark_cache_warm("derivatives")
    return budget, Derivatives(
        shares,
        dissipation,
        np.ascontiguousarray(error.T),
        np.ascontiguousarray(scale.transpose(1, 0, 3, 2)),
    )


def _hides_something(
    problem: Problem, budget: Budget, ranges: Ranges, tolerance: float
) -> NDArray[np.bool_]:
    """Tell where values on the paths of the derivatives are not those that were settled (w,)."""
    doubtful = budget.careful.copy()
    if not doubtful.any():
        return doubtful
    w, z, _ = budget.dissipation.shape
    power = np.maximum(np.abs(budget.dissipation), _SMALLEST_SCALE).transpose(0, 2, 1)
    batches = np.zeros(w, dtype=np.int64)
    found = np.zeros((w, 2, OUTCOMES, z))

    def kept(moving: MovingTasks) -> Tasks:
        some = doubtful[moving.tasks.rows]
        return Tasks(moving.tasks.rows[some], moving.tasks.paths[some])

    def trapped(moving: MovingTasks) -> Floats:
        per_panel = _PANEL_SHARE * tolerance
        return by_orientation(dissipated_power(problem, kept(moving), power, per_panel, batches)[0])

    free, _ = every_destination(
        problem, kept(ranges.free), power, _PANEL_SHARE * tolerance, batches
    )
    for place, column in RADIATED.items():
        found[:, :, place] = free[:, :, column]
    found[:, :, NEAR_FIELD] = trapped(ranges.near)
    found[:, :, GUIDED] = trapped(ranges.guided) + trapped(ranges.beyond) + found[:, :, NEAR_FIELD]
    settled = budget.shares.transpose(0, 2, 3, 1).copy()
    settled[:, :, GUIDED] += settled[:, :, SURFACE_PLASMON]
    settled[:, :, SURFACE_PLASMON] = 0.0
    miss = (np.abs(found - settled) / power[:, :, None]).max(axis=(1, 2, 3))
    hides: NDArray[np.bool_] = doubtful & ~(miss <= _AGREEMENT * tolerance)
    return hides


def _ranges(problem: Problem, rates: Rates) -> Ranges:
    """Paths from 0 to infinity, cut where `budget.light_budget` cuts."""
    w, directions = rates.kd.shape
    rows = np.arange(w)
    lines, line_rates = light_lines(problem), light_line_rates(problem, rates)
    trapped, trapped_rates = lines[:, -1], line_rates[:, :, -1]
    n_e = np.sqrt(problem.source.eps_e)
    start = np.where(has_plasmon(problem), np.maximum(trapped, n_e), trapped)
    start_rates = plasmon_start_rates(problem, rates, start, trapped_rates)
    far, far_rates = 2.0 * largest_index(problem), 2.0 * largest_index_rates(problem, rates)
    tail = Tasks.on(rows, TAIL, far, np.inf, np.maximum(far, 1.0 / nearest_absorber(problem)))
    arcs = along_arcs
    return Ranges(
        MovingTasks.between(
            arcs(rows, ARC, np.zeros(w), far), np.zeros((w, directions)), far_rates
        ),
        _between_lines(rows, lines, line_rates),
        MovingTasks.between(
            arcs(rows, ARC_FROM_LINE, trapped, start, _FLATNESS), trapped_rates, start_rates
        ),
        MovingTasks.between(
            arcs(rows, ARC_FROM_LINE, start, far, _FLATNESS), start_rates, far_rates
        ),
        MovingTasks.between(tail, far_rates, far_rates),
    )


def _between_lines(rows: NDArray[np.int64], lines: Floats, line_rates: Floats) -> MovingTasks:
    """Real paths between neighboring light lines (w, n), as `Tasks.between`."""
    lo, hi = lines[:, :-1].reshape(-1), lines[:, 1:].reshape(-1)
    kind = np.where(lo == 0.0, REAL_FROM_ZERO, REAL)
    tasks = Tasks.on(np.repeat(rows, lines.shape[1] - 1), kind, lo, hi)
    moves = line_rates.transpose(0, 2, 1)
    directions = moves.shape[2]
    return MovingTasks.between(
        tasks, moves[:, :-1].reshape(-1, directions), moves[:, 1:].reshape(-1, directions)
    )


def _scale(problem: Problem, rates: Rates, budget: Budget, ranges: Ranges) -> Floats:
    """What errors are measured against (w, p, 2, z), from a first coarse pass."""
    w, directions = rates.kd.shape
    power = budget.dissipation.transpose(0, 2, 1)
    anything = np.full((w, directions, *power.shape[1:]), np.inf)
    coarse = np.zeros(anything.shape)
    for moving in (ranges.total, ranges.near):
        found = run_dissipated_rates(problem, rates, moving, anything, 1.0)
        coarse += _by_orientation(by_wavelength(moving, w, *found)[0])
    natural = _phase_rates(problem, rates)[:, :, None, None] * power[:, None]
    return np.maximum(np.maximum(np.abs(coarse), natural), _NOTHING)


def _phase_rates(problem: Problem, rates: Rates) -> Floats:
    """How much phase, or relative index, each direction adds (w, p): the sum over all media."""
    total = np.abs(rates.kz_positions).max(axis=2, initial=0.0) + np.abs(rates.kd)
    total += np.abs(rates.loss).sum(axis=2)
    total += np.abs(rates.n_out).sum(axis=2) + np.abs(rates.n_outer).sum(axis=2)
    own = np.stack([problem.source.eps_o, problem.source.eps_e], axis=1)[:, None]
    total += np.abs(rates.eps / own).sum(axis=2) * (1.0 + problem.source.kd[:, None])
    for half, change in ((problem.up, rates.up), (problem.down, rates.down)):
        total += np.abs(change.kd).sum(axis=2)
        total += _index_phase(half, change)
    return total


def _index_phase(half: Half, change: HalfRates) -> Floats:
    """k0 d times the rate of the index, over all films (w, p)."""
    moved = np.abs(change.eps_o) + np.abs(change.eps_e)
    index = np.sqrt(np.abs(half.eps_o) + np.abs(half.eps_e))
    total: Floats = (moved * (half.kd / index)[:, None]).sum(axis=2)
    return total


def _by_orientation(channels: Floats) -> Floats:
    """Sum (w, p, 3, z) over polarization to (w, p, 2, z)."""
    return np.stack([channels[:, :, 0], channels[:, :, 1] + channels[:, :, 2]], axis=2)


def _collect(
    problem: Problem, total: Floats, free: Floats, guided: Floats, beyond: Floats, near: Floats
) -> tuple[Floats, Floats]:
    """Sort the integrals into destinations, as `budget` does: shares and dissipation."""
    w, directions, _, z = total.shape
    shares = np.zeros((w, directions, 2, OUTCOMES, z))
    for place, column in RADIATED.items():
        shares[:, :, :, place] = free[:, :, :, column]
    tail = beyond + near
    plasmon = has_plasmon(problem)[:, None, None, None]
    shares[:, :, :, SURFACE_PLASMON] = np.where(plasmon, tail[:, :, :2], 0.0)
    trapped = _by_orientation(guided + tail)
    shares[:, :, :, GUIDED] = trapped - shares[:, :, :, SURFACE_PLASMON]
    shares[:, :, :, NEAR_FIELD] = _by_orientation(near)
    dissipation = total + _by_orientation(near)
    return (
        np.ascontiguousarray(shares.transpose(1, 0, 4, 2, 3)),
        np.ascontiguousarray(dissipation.transpose(1, 0, 3, 2)),
    )
