"""Integration paths in the complex plane of the in-plane wavevector, nodes and error estimate.

Every path is a smooth map of theta in 0..1, so that a sub-interval of theta is a piece of the
same curve and panels can be halved until their estimate is met.
"""

import math

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline
from optics.kernels.rules import LAST, NODES, SECOND, WEIGHT, X

# Kinds of path, with their three parameters. Square roots of the integrand lie at light lines.
REAL = 0  # lo, hi: real axis, smooth where both ends are light lines
REAL_FROM_ZERO = 1  # lo, hi: real axis, only hi is a light line
ARC = 2  # lo, hi, depth: half ellipse below the axis, neither end is a light line
ARC_FROM_LINE = 3  # the same, lo is a light line
ARC_BETWEEN_LINES = 4  # the same, both ends are
TAIL = 5  # lo, hi = inf, length: real axis from lo to infinity, half the nodes within length


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
    for i in range(NODES):
        theta = a + half * (X[stage * NODES + i] + 1.0)
        if kind == REAL:
            s = math.sin(0.5 * math.pi * theta)
            u[i] = lo + (hi - lo) * s * s
            du[i] = (hi - lo) * 0.5 * math.pi * math.sin(math.pi * theta) * half
        elif kind == REAL_FROM_ZERO:
            u[i] = lo + (hi - lo) * math.sin(0.5 * math.pi * theta)
            du[i] = (hi - lo) * 0.5 * math.pi * math.cos(0.5 * math.pi * theta) * half
        elif kind == TAIL:
            u[i] = lo + depth * theta / (1.0 - theta)
            du[i] = depth / (1.0 - theta) ** 2 * half
        else:
            t, dt = math.pi * theta, math.pi
            if kind == ARC_FROM_LINE:
                t, dt = math.pi * theta * theta, 2.0 * math.pi * theta
            elif kind == ARC_BETWEEN_LINES:
                s = math.sin(0.5 * math.pi * theta)
                t, dt = math.pi * s * s, 0.5 * math.pi**2 * math.sin(math.pi * theta)
            radius = 0.5 * (hi - lo)
            # 1 - cos t written so that nothing cancels next to the branch point.
            s = math.sin(0.5 * t)
            u[i] = complex(lo + 2.0 * radius * s * s, -depth * math.sin(t))
            du[i] = complex(radius * math.sin(t), -depth * math.cos(t)) * dt * half


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
def panel_error(
    values: Floats, stage: int, scale: Floats, moments: Floats, misses: Floats
) -> float:
    """Estimate the error of a panel's sums.

    The last Legendre coefficients of the interpolant tell how far the integrand is resolved.
    Where convergence is geometric a Gauss rule errs by about the square of that ratio, its
    extension by the power 1.6; the power 3/2 used here is the cautious choice.

    Parameters
    ----------
    values : float (STAGES * NODES, q)
    stage : int
        How many stages are filled in, less one.
    scale : float (q,)
        What each column's error is compared with.
    moments : float (3, q)
        Work space.
    misses : float (q,), output
        Estimated error of each column.

    Returns
    -------
    float
        Largest error over scale.
    """
    q = scale.size
    moments[:, :] = 0.0
    for i in range((stage + 1) * NODES):
        w, p, s = WEIGHT[stage, i], LAST[stage, i], SECOND[stage, i]
        for k in range(q):
            v = values[i, k]
            moments[0, k] += w * abs(v)
            moments[1, k] += p * v
            moments[2, k] += s * v
    worst = 0.0
    for k in range(q):
        size = 0.5 * moments[0, k] + 1e-300
        unresolved = max(abs(moments[1, k]), abs(moments[2, k]))
        misses[k] = 2.0 * unresolved * math.sqrt(min(1.0, unresolved / size))
        worst = max(worst, misses[k] / scale[k])
    return worst
