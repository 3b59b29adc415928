"""Integration paths in the complex plane of the in-plane wavevector, nodes and error estimate.

Every path is a smooth map of theta in 0..1, so that a sub-interval of theta is a piece of the
same curve and panels can be halved until their estimate is met.
"""

import math

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline

NODES = 16

_X, _W = np.polynomial.legendre.leggauss(NODES)
_V = np.polynomial.legendre.legvander(_X, NODES - 1)
# Gauss weights, and the rows that give the last two Legendre coefficients of the sampled integrand.
GAUSS_X = _X
GAUSS_W = _W
LAST = _W * _V[:, NODES - 1] * (2 * NODES - 1) / 2.0
SECOND = _W * _V[:, NODES - 2] * (2 * NODES - 3) / 2.0

# Kinds of path, with their three parameters.
REAL = 0  # lo, hi: real axis, square roots at both ends smoothed
ARC = 1  # lo, hi, depth: half ellipse below the axis, both ends regular
ARC_FROM_BRANCH = 2  # the same with square roots at both ends
TAIL = 3  # lo: real axis from lo to infinity


@inline
def place(
    kind: float, lo: float, hi: float, depth: float, a: float, b: float, u: Complexes, du: Complexes
) -> None:
    """Nodes u and derivative du of a panel, theta from a to b, on a path (both complex (n,)).

    The derivative includes (b - a)/2, so that sum(GAUSS_W * f(u) * du) is the integral.
    """
    half = 0.5 * (b - a)
    for i in range(NODES):
        theta = a + half * (GAUSS_X[i] + 1.0)
        if kind == REAL:
            s = math.sin(0.5 * math.pi * theta)
            u[i] = lo + (hi - lo) * s * s
            du[i] = (hi - lo) * 0.5 * math.pi * math.sin(math.pi * theta) * half
        elif kind == TAIL:
            u[i] = lo / (1.0 - theta)
            du[i] = lo / (1.0 - theta) ** 2 * half
        else:
            t, dt = math.pi * theta, math.pi
            if kind == ARC_FROM_BRANCH:
                s = math.sin(0.5 * math.pi * theta)
                t, dt = math.pi * s * s, 0.5 * math.pi**2 * math.sin(math.pi * theta)
            radius = 0.5 * (hi - lo)
            # 1 - cos t written so that nothing cancels next to the branch point.
            s = math.sin(0.5 * t)
            u[i] = complex(lo + 2.0 * radius * s * s, -depth * math.sin(t))
            du[i] = complex(radius * math.sin(t), -depth * math.cos(t)) * dt * half


@inline
def panel_sum(values: Floats, misses: Floats, result: Floats, error: Floats) -> None:
    """Add a panel's Gauss sums and error estimates to result and error (both (q,))."""
    for k in range(result.size):
        error[k] += misses[k]
    for i in range(NODES):
        w = GAUSS_W[i]
        for k in range(result.size):
            result[k] += w * values[i, k]


@inline
def panel_error(values: Floats, scale: Floats, moments: Floats, misses: Floats) -> float:
    """Estimate the error of a panel's Gauss sums.

    The last Legendre coefficients tell how far the integrand is resolved. A Gauss rule errs by
    about the square of that ratio where convergence is geometric; the power 3/2 used here is
    the cautious choice.

    Parameters
    ----------
    values : float (NODES, q)
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
    for k in range(q):
        moments[0, k] = 0.0
        moments[1, k] = 0.0
        moments[2, k] = 0.0
    for i in range(NODES):
        w, p, s = GAUSS_W[i], LAST[i], SECOND[i]
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
