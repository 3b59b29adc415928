"""Integration paths in the complex plane of the in-plane wavevector, and their nodes.

Every path is a smooth map of theta in 0..1, so that a sub-interval of theta is a piece of the
same curve and panels can be halved until their estimate is met.
"""

import math

from optics.kernels.arrays import Complexes
from optics.kernels.compiled import inline
from optics.kernels.elementary import turn
from optics.kernels.rules import NODES, X

# Kinds of path, with their parameters. Square roots of the integrand lie at light lines.
REAL = 0  # lo, hi, split: real axis, smooth where both ends are light lines
REAL_FROM_ZERO = 1  # lo, hi, split: real axis, only hi is a light line
ARC = 2  # lo, hi, depth: half ellipse below the axis, neither end is a light line
ARC_FROM_LINE = 3  # the same, lo is a light line
ARC_BETWEEN_LINES = 4  # the same, both ends are
TAIL = 5  # lo, hi = inf, length: real axis from lo to infinity, half the nodes within length


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
