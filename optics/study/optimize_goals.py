"""From objectives and limits to goals that a search can follow, in units of their spreads."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.optimize_local import Goal

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.study.optimize_plan import Aim, Limit, Objective

    Floats = NDArray[np.float64]
    Flags = NDArray[np.bool_]


class Lines(NamedTuple):
    """Limits as ``rows @ outcomes >= floor``."""

    rows: Floats  # (m, k)
    floor: Floats  # (m,)


def spreads(outcomes: Floats) -> Floats:
    """Range (k,) of each outcome over points (n, k); its size where it does not change."""
    ranges = np.ptp(outcomes, axis=0)
    sizes = np.abs(outcomes).max(axis=0)
    flat = ranges <= 1e-12 * sizes
    return np.where(flat, np.where(sizes > 0.0, sizes, 1.0), ranges)


def lines(limits: Iterable[Limit], spread: Floats) -> Lines:
    """Limits in units of the spreads (k,) of their outcomes."""
    chosen = tuple(limits)
    rows = np.zeros((len(chosen), spread.size))
    for index, one in enumerate(chosen):
        rows[index, one.place] = one.sign / spread[one.place]
    floor = np.array([one.sign * one.value / spread[one.place] for one in chosen])
    return Lines(rows, floor.reshape(len(chosen)))


def gradient_of_objective(objective: Objective, spread: Floats) -> Floats:
    """Cost (k,) that falls as the objective gets better, in units of its spread."""
    cost = np.zeros(spread.size)
    cost[objective.place] = -objective.sign / spread[objective.place]
    return cost


def single_goal(aim: Aim, objective: Objective, spread: Floats) -> Goal:
    """One objective under all limits."""
    held = lines(aim.limits, spread)
    return Goal(
        gradient_of_objective(objective, spread), held.rows, held.floor, np.zeros(held.floor.size)
    )


def least_miss(limits: Iterable[Limit], spread: Floats) -> Goal:
    """Miss the limits as little as possible."""
    held = lines(limits, spread)
    return Goal(np.zeros(spread.size), held.rows, held.floor, np.ones(held.floor.size))


def toward(aim: Aim, costs: Floats, corner: Floats, spread: Floats) -> Goal:
    """Go as far as possible from a point in the space of costs, equally along all of them.

    Pascoletti and Serafini, J. Optim. Theory Appl. 42, 499 (1984) (from memory).

    Parameters
    ----------
    aim : Aim
    costs : float (objectives, k)
        Each falls as its objective gets better, in units of the front's range.
    corner : float (objectives,)
        The point, as costs.
    spread : float (k,)
    """
    held = lines(aim.limits, spread)
    return Goal(
        np.zeros(spread.size),
        np.concatenate([-costs, held.rows]),
        np.concatenate([-corner, held.floor]),
        np.concatenate([np.ones(len(costs)), np.zeros(held.floor.size)]),
    )


def meets(aim: Aim, outcomes: Floats) -> Flags:
    """Whether every limit is met (...) by outcomes (..., k), to the last digit."""
    met = np.ones(outcomes.shape[:-1], dtype=np.bool_)
    for one in aim.limits:
        met &= one.sign * outcomes[..., one.place] >= one.sign * one.value
    return met
