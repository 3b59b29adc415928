"""Integration paths in the complex plane of the in-plane wavevector, nodes and error estimate.

Every path is a smooth map of theta in 0..1, so that a sub-interval of theta is a piece of the
same curve and panels can be halved until their estimate is met.
"""

import math

import numpy as np

from optics.kernels.arrays import Complexes, Floats, Integers
from optics.kernels.compiled import inline
from optics.kernels.elementary import turn
from optics.kernels.rules import DEGREE_ROWS, NODES, WEIGHT, X

# Kinds of path, with their parameters. Square roots of the integrand lie at light lines.
REAL = 0  # lo, hi, split: real axis, smooth where both ends are light lines
REAL_FROM_ZERO = 1  # lo, hi, split: real axis, only hi is a light line
ARC = 2  # lo, hi, depth: half ellipse below the axis, neither end is a light line
ARC_FROM_LINE = 3  # the same, lo is a light line
ARC_BETWEEN_LINES = 4  # the same, both ends are
TAIL = 5  # lo, hi = inf, length: real axis from lo to infinity, half the nodes within length

_PROBED = 4  # of so many neighboring positions one is looked at for errors


@inline
def first_split(kind: float, split: float) -> float:
    """Parameter at which the first two panels of a path meet; 0 where one panel begins."""
    if kind == REAL:
        return split
    # Long paths, which one panel hardly ever resolves.
    if kind == REAL_FROM_ZERO:
        return max(split, 0.5)
    return 0.5 if kind in (ARC, ARC_FROM_LINE) else 0.0


@inline
def place(
    kind: float,
    lo: float,
    hi: float,
    depth: float,
    a: float,
    b: float,
    stage: int,
    u: Complexes,
    du: Complexes,
) -> None:
    """Nodes u, derivative du of one stage of a panel, theta from a to b (both complex (NODES,)).

    The derivative includes (b - a)/2, so that sum(weight * f(u) * du) is the integral.
    """
    half = 0.5 * (b - a)
    span = hi - lo
    for i in range(NODES):
        theta = a + half * (X[stage * NODES + i] + 1.0)
        if kind == TAIL:
            u[i] = lo + depth * theta / (1.0 - theta)
            du[i] = depth / (1.0 - theta) ** 2 * half
            continue
        # All other paths run on the circle; half angles, so that nothing cancels at the ends.
        quarter = turn(0.5 * math.pi * theta)
        if kind == REAL:
            u[i] = lo + span * quarter.imag**2
            du[i] = span * math.pi * quarter.imag * quarter.real * half
        elif kind == REAL_FROM_ZERO:
            u[i] = lo + span * quarter.imag
            du[i] = span * 0.5 * math.pi * quarter.real * half
        else:
            speed = math.pi * half
            if kind == ARC_FROM_LINE:
                quarter = turn(0.5 * math.pi * theta * theta)
                speed *= 2.0 * theta
            elif kind == ARC_BETWEEN_LINES:
                speed *= math.pi * quarter.imag * quarter.real
                quarter = turn(0.5 * math.pi * quarter.imag**2)
            sine = 2.0 * quarter.imag * quarter.real
            cosine = quarter.real**2 - quarter.imag**2
            u[i] = complex(lo + span * quarter.imag**2, -depth * sine)
            du[i] = complex(0.5 * span * sine, -depth * cosine) * speed


@inline
def panel_sum(values: Floats, stage: int, misses: Floats, result: Floats, error: Floats) -> None:
    """Add a panel's sums and error estimates to result and error (both (q,))."""
    for k in range(result.size):
        error[k] += misses[k]
    for i in range((stage + 1) * NODES):
        w = WEIGHT[stage, i]
        for k in range(result.size):
            result[k] += w * values[i, k]


@inline
def probed_columns(groups: int, positions: int) -> Integers:
    """Columns (group * positions + position) in which a panel's error is looked at.

    Neighboring positions differ by little: every fourth and the last will do.
    """
    stride = _PROBED if positions > _PROBED else 1
    count = (positions - 1) // stride + 1
    last = positions - 1 if (count - 1) * stride < positions - 1 else -1
    some = count + (1 if last > 0 else 0)
    found = np.zeros(groups * some, dtype=np.int64)
    for group in range(groups):
        for i in range(count):
            found[group * some + i] = group * positions + i * stride
        if last > 0:
            found[group * some + count] = group * positions + last
    return found


@inline
def panel_miss(last: float, second: float, earlier: float, earlier_second: float) -> float:
    """Estimate of a panel's error from Legendre coefficients of the interpolant.

    The last ones tell how far the integrand is resolved, and their ratio to those `rules.BEFORE`
    degrees earlier how fast it converges. Both rules are exact for about 16 degrees more than
    they have nodes, so that with geometric convergence they err by the fourth power of that
    ratio; the square used here is the cautious choice. Where something narrow keeps the
    coefficients up, the last ones themselves are the error.
    """
    unresolved = max(abs(last), abs(second))
    falling = min(1.0, unresolved / (max(abs(earlier), abs(earlier_second)) + 1e-300))
    return 2.0 * unresolved * falling * falling


@inline
def panel_error(
    values: Floats,
    stage: int,
    scale: Floats,
    probed: Integers,
    moments: Floats,
    misses: Floats,
) -> float:
    """Estimate the error of a panel's sums by `panel_miss`.

    Parameters
    ----------
    values : float (STAGES * NODES, q)
    stage : int
        How many stages are filled in, less one.
    scale : float (q,)
        What each column's error is compared with.
    probed : int (c,)
        Columns to look at.
    moments : float (4, c)
        Work space.
    misses : float (q,), output
        Estimated error of each of these columns.

    Returns
    -------
    float
        Largest error over scale.
    """
    moments[:, :] = 0.0
    for i in range((stage + 1) * NODES):
        first, second = DEGREE_ROWS[0, stage, i], DEGREE_ROWS[1, stage, i]
        third, fourth = DEGREE_ROWS[2, stage, i], DEGREE_ROWS[3, stage, i]
        for k in range(probed.size):
            v = values[i, probed[k]]
            moments[0, k] += first * v
            moments[1, k] += second * v
            moments[2, k] += third * v
            moments[3, k] += fourth * v
    worst = 0.0
    for k in range(probed.size):
        column = probed[k]
        misses[column] = panel_miss(moments[0, k], moments[1, k], moments[2, k], moments[3, k])
        worst = max(worst, misses[column] / scale[column])
    return worst
