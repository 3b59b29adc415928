"""Which limits and bounds hold an optimum back, and what the objective would gain without."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.optimize_goals import gradient_of_objective, lines

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.study.optimize_local import Polished
    from optics.study.optimize_plan import Aim, Objective

    Floats = NDArray[np.float64]
    Flags = NDArray[np.bool_]

# A limit this close, in spreads of its outcome, and a bound this close, in ranges, may bind.
_TOUCHING = 1e-5
# Gain below this share of the steepest slope is none.
_NOTHING = 1e-6


class Binding(NamedTuple):
    """What binds at the optimum of one objective.

    Attributes
    ----------
    limits : float (limits,)
        Gain of the objective, in its own unit, for each unit of a limit that is loosened; 0 where
        it does not bind.
    lower, upper : float (p,)
        The same for each unit that a bound is moved outward.
    weights : float (k,)
        Of the outcomes in the Lagrangian, whose minimum the optimum is.
    freedom : float (p, d)
        Orthonormal directions in the unit box along which all that binds stays as it is.
    spread : float
        Unit of the Lagrangian in units of the objective.
    """

    limits: Floats
    lower: Floats
    upper: Floats
    weights: Floats
    freedom: Floats
    spread: float


def find_binding(
    aim: Aim, objective: Objective, spread: Floats, end: Polished, slope: Floats
) -> Binding:
    """Lagrange multipliers of all limits and bounds that are touched, by nonnegative least squares.

    Parameters
    ----------
    aim : Aim
    objective : Objective
    spread : float (k,)
    end : Polished
    slope : float (k, p)
        Derivatives of the outcomes there, over the unit box.
    """
    from scipy.linalg import null_space
    from scipy.optimize import nnls

    size = end.unit.size
    cost = gradient_of_objective(objective, spread)
    held = lines(aim.limits, spread)
    touched = np.abs(held.rows @ end.outcomes - held.floor) <= _TOUCHING
    # Gradients of everything that may hold the point back, each a column.
    columns = np.concatenate([(held.rows @ slope).T, np.eye(size), -np.eye(size)], axis=1)
    open_ = np.concatenate([touched, end.unit <= _TOUCHING, end.unit >= 1.0 - _TOUCHING])
    forces = np.zeros(columns.shape[1])
    if open_.any():
        forces[open_] = nnls(columns[:, open_], cost @ slope)[0]
    steepest = float(np.abs(cost @ slope).max())
    pull = forces * np.linalg.norm(columns, axis=0)
    forces = np.where(pull > _NOTHING * max(steepest, 1.0), forces, 0.0)
    binds = forces > 0.0
    freedom = null_space(columns[:, binds].T) if binds.any() else np.eye(size)
    count = len(aim.limits)
    unit = float(spread[objective.place])
    limit_unit = np.array([spread[one.place] for one in aim.limits]).reshape(count)
    ranges = aim.high - aim.low
    return Binding(
        forces[:count] * unit / limit_unit,
        forces[count : count + size] * unit / ranges,
        forces[count + size :] * unit / ranges,
        cost - forces[:count] @ held.rows,
        freedom,
        unit,
    )
