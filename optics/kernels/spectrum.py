"""Dissipated power against the in-plane wavevector, for pictures and for the eye.

On the real axis a lossless guided mode is a line of no width. A path a little below the axis, at
u - i depth, shows each mode as a line of that half width and keeps its power, since the integrand
is analytic in between; only modes that run backward with less damping than the depth would not.
Of the bulk term, which grows as u^2 without carrying power, that part is taken off whose real
value the lowered path would feign.
"""

import math

import numpy as np

from optics.kernels.arrays import Floats, Integers
from optics.kernels.compiled import inline, kernel
from optics.kernels.integrate import at_wavelength
from optics.kernels.problem import Problem, Source, scratch_space, work_space
from optics.kernels.rules import NODES
from optics.kernels.source import dissipated


@inline
def feigned(c: int, source: Source, u: float, depth: float) -> float:
    """Real part at u - i depth of the bulk integrand's asymptote, -+ i (coefficient) u^2.

    From kz -> i sqrt(eps_o / eps_e) u; horizontal s tends to a constant and feigns nothing.
    """
    if c == 0:
        return -3.0 * math.sqrt(source.eps_o / source.eps_e**3) / source.bulk[0] * u * depth
    if c == 1:
        return 1.5 / (math.sqrt(source.eps_o * source.eps_e) * source.bulk[1]) * u * depth
    return 0.0


@kernel
def dissipated_spectrum(
    problem: Problem, rows: Integers, u: Floats, depth: float, power: Floats
) -> None:
    """Dissipated power per du of dipoles at every position.

    Parameters
    ----------
    problem : Problem
    rows : int (t,)
        Wavelengths to evaluate.
    u : float (n,)
        In-plane wavevectors over k0, above 0.
    depth : float
        How far below the real axis; 0 for the axis itself, where lossless modes do not show.
    power : float (t, 3, n, z), output
        Channels vertical p, horizontal p, horizontal s; relative to the orientation's own bulk
        rate, so that the horizontal ones sum.
    """
    n, positions = u.size, problem.source.kz_positions.shape[1]
    work_up, work_down = work_space(problem.up.kd.shape[1]), work_space(problem.down.kd.shape[1])
    scratch = scratch_space()
    nodes, du = np.zeros(NODES, dtype=np.complex128), np.ones(NODES, dtype=np.complex128)
    values = np.zeros((3, positions, NODES))
    for t in range(rows.size):
        source, _, up, down = at_wavelength(problem, rows[t])
        for start in range(0, n, NODES):
            for i in range(NODES):
                # The last batch is filled up with its last node.
                nodes[i] = complex(u[min(start + i, n - 1)], -depth)
            dissipated(source, up, down, work_up, work_down, scratch, nodes, du, 0, values)
            for i in range(min(NODES, n - start)):
                for c in range(3):
                    excess = feigned(c, source, u[start + i], depth)
                    for q in range(positions):
                        power[t, c, start + i, q] = values[c, q, i] - excess
