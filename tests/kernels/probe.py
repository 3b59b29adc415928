"""Ways into the compiled kernels at single wavevectors, for comparison with other programs."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from optics.kernels.compiled import kernel
from optics.kernels.field import absorbed_in_film, absorbs
from optics.kernels.integrate import at_wavelength
from optics.kernels.paths import NODES, REAL
from optics.kernels.planar import LANES, ROW, at
from optics.kernels.problem import Problem, work_space
from optics.kernels.tasks import Tasks, run_radiated
from optics.kernels.whole import light_half, solve_half, solve_waves

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
S, P = 0, 1
# Half width of an interval that stands for a point. What its mean misses is the second
# derivative times a sixth of the square of this; what rounding adds is 1e-16 over this.
POINT = 1e-5


class HalfStack(NamedTuple):
    """One half stack at real wavevectors; leading axis of all s, p, last one the nodes."""

    r: Complexes  # (2, n) reflection seen from the emitter film
    t: Complexes  # (2, n) E (s) or H (p) in the outer medium per unit in the emitter film
    r_out: Complexes  # (2, n) reflection seen from outside
    t_in: Complexes  # (2, n) from outside into the emitter film
    y_in: Complexes  # (2, n) admittance of the emitter film
    y_out: Complexes  # (2, n) and of the outer medium
    absorbed: Floats  # (2, m, n) by film, lit from the emitter film
    absorbed_from_outside: Floats  # (2, m, n)


def sums(problem: Problem, lo: float, hi: float, tolerance: float = 1e-12) -> Floats:
    """All that leaves, is trapped or absorbed between two wavevectors: (2, COLUMNS, positions)."""
    z = problem.source.kz_positions.shape[1]
    path = Tasks.on(np.zeros(1, dtype=np.int64), REAL, lo, hi)
    return np.asarray(run_radiated(problem, path, np.ones((1, 2, z)), tolerance)[0][0])


def density(problem: Problem, u: float) -> Floats:
    """The same per du at one wavevector."""
    return sums(problem, u - POINT, u + POINT) / (2 * POINT)


def half_stack(problem: Problem, upper: bool, u: list[complex]) -> HalfStack:
    """Two-port and absorption of one half stack at up to 16 wavevectors."""
    m = (problem.up if upper else problem.down).kd.shape[1]
    nodes = np.array([*u, *([u[-1]] * (NODES - len(u)))], complex)
    ports, films = np.zeros((6, 2, NODES), complex), np.zeros((2, 2, m, NODES))
    _half_stack(problem, upper, nodes, ports, films)
    n = len(u)
    return HalfStack(*ports[..., :n], *films[..., :n])


@kernel
def _half_stack(
    problem: Problem, upper: bool, u: Complexes, ports: Complexes, films: Floats
) -> None:
    source, _, up, down = at_wavelength(problem, 0)
    work_up, work_down = work_space(up.kd.size), work_space(down.kd.size)
    half, work = (up, work_up) if upper else (down, work_down)
    solve_waves(source, up, down, work_up, work_down, u)
    last = half.kd.size - 1
    solve_half(half, work, u)
    light_half(half, np.zeros(ROW), work)
    for pol in range(2):
        for i in range(NODES):
            lane = pol * NODES + i
            ports[0, pol, i] = at(work.r_far[0], lane)
            ports[1, pol, i] = at(work.f[last], lane)
            ports[2, pol, i] = at(work.r_near[last], lane)
            ports[3, pol, i] = at(work.g[0], lane)
            ports[4, pol, i] = at(work.y[0], lane)
            ports[5, pol, i] = at(work.y[last], lane)
    alone = np.zeros(LANES)
    for j in range(1, last):
        if not absorbs(half.eps_o[j], half.eps_e[j]):
            continue
        films_of = (work.r_far[j], work.f[j]), (work.r_near[j], work.g[j])
        for way in range(2):
            alone[:] = 0.0
            back, amplitude = films_of[way]
            absorbed_in_film(work.e[j], back, amplitude, work.alpha[j], work.beta[j], alone)
            for pol in range(2):
                films[way, pol, j] = alone[pol * NODES : (pol + 1) * NODES]
