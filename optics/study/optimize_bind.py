"""Which limits and bounds hold an optimum back, and what the objectives would gain without."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.optimize_goals import gradient_of_objective, lines

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.study.optimize_local import Polished
    from optics.study.optimize_plan import Aim

    Floats = NDArray[np.float64]
    Flags = NDArray[np.bool_]

# A limit this close, in spreads of its outcome, and a bound this close, in ranges, may bind.
_TOUCHING = 1e-5
# Gain below this share of the steepest slope is none.
_NOTHING = 1e-6
# Gradients of two objectives that are parallel to within this hold one direction, not two.
_PARALLEL = 1e-2
# An objective is at its own optimum where its gradient is below this share of the steepest one.
_LEVEL = 1e-3


class Binding(NamedTuple):
    """What binds at an optimum of one objective, or at a point of the front of several.

    Attributes
    ----------
    shares : float (objectives,)
        Weights of the objectives, in units of their spreads, by which the point is the optimum of
        their sum; they sum to 1.
    limits : float (limits,)
        Gain of that sum, of one objective in its own unit, for each unit of a limit that is
        loosened; 0 where it does not bind.
    lower, upper : float (p,)
        The same for each unit that a bound is moved outward.
    weights : float (k,)
        Of the outcomes in the Lagrangian, whose minimum the optimum is.
    freedom : float (p, d)
        Orthonormal directions in the unit box along which all that binds stays as it is, and so
        does every one of several objectives.
    """

    shares: Floats
    limits: Floats
    lower: Floats
    upper: Floats
    weights: Floats
    freedom: Floats


def find_binding(aim: Aim, spread: Floats, end: Polished, slope: Floats) -> Binding:
    """Lagrange multipliers of all limits and bounds that are touched, by nonnegative least squares.

    Parameters
    ----------
    aim : Aim
    spread : float (k,)
    end : Polished
    slope : float (k, p)
        Derivatives of the outcomes there, over the unit box.
    """
    from scipy.linalg import null_space
    from scipy.optimize import nnls

    size = end.unit.size
    costs = np.stack([gradient_of_objective(one, spread) for one in aim.objectives])
    held = lines(aim.limits, spread)
    touched = np.abs(held.rows @ end.outcomes - held.floor) <= _TOUCHING
    # Gradients of everything that may hold the point back, each a column.
    columns = np.concatenate([(held.rows @ slope).T, np.eye(size), -np.eye(size)], axis=1)
    open_ = np.concatenate([touched, end.unit <= _TOUCHING, end.unit >= 1.0 - _TOUCHING])
    shares = _shares(costs @ slope, columns[:, open_])
    cost = shares @ costs
    forces = np.zeros(columns.shape[1])
    if open_.any():
        forces[open_] = nnls(columns[:, open_], cost @ slope)[0]
    steepest = float(np.abs(cost @ slope).max())
    pull = forces * np.linalg.norm(columns, axis=0)
    forces = np.where(pull > _NOTHING * max(steepest, 1.0), forces, 0.0)
    fixed, apart = columns[:, forces > 0.0], None
    if len(costs) > 1:
        fixed, apart = np.concatenate([fixed, _steep(costs @ slope).T], axis=1), _PARALLEL
    fixed = fixed / np.maximum(np.linalg.norm(fixed, axis=0), np.finfo(np.float64).tiny)
    count = len(aim.limits)
    unit = float(spread[aim.objectives[0].place]) if len(costs) == 1 else 1.0
    limit_unit = np.array([spread[one.place] for one in aim.limits]).reshape(count)
    ranges = aim.high - aim.low
    return Binding(
        shares,
        forces[:count] * unit / limit_unit,
        forces[count : count + size] * unit / ranges,
        forces[count + size :] * unit / ranges,
        cost - forces[:count] @ held.rows,
        null_space(fixed.T, rcond=apart) if fixed.size else np.eye(size),
    )


def _steep(gradients: Floats) -> Floats:
    """Gradients (m, p) of objectives, but for those that are at their own optimum."""
    norms = np.linalg.norm(gradients, axis=1)
    return np.asarray(gradients[norms > _LEVEL * norms.max()])


def _shares(gradients: Floats, columns: Floats) -> Floats:
    """Weights of objectives whose gradients (m, p) and what binds (p, n) are in balance."""
    from scipy.optimize import nnls

    count = len(gradients)
    if count == 1:
        return np.ones(1)
    # One more line wants the weights to sum to 1, as heavily as the gradients weigh.
    heavy = float(np.linalg.norm(gradients, axis=1).max()) or 1.0
    sums = np.concatenate([np.full(count, heavy), np.zeros(columns.shape[1])])
    balance = np.concatenate([np.concatenate([gradients.T, -columns], axis=1), sums[None]])
    found = nnls(balance, np.append(np.zeros(columns.shape[0]), heavy))[0][:count]
    return np.asarray(found / found.sum())
