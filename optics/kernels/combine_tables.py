"""What half stacks are at fixed nodes, for many of them at once; and nodes good for many stacks.

A half stack does not depend on the dipole's place or on the other half, so a grid over films on
both sides of an emitter needs each half once. Tables keep real and imaginary parts apart and the
half stacks as the last axis, so that loops over them vectorize.
"""

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import kernel
from optics.kernels.exits import COLUMNS
from optics.kernels.halfstack import abs2, reflection, waves
from optics.kernels.integrate import at_wavelength
from optics.kernels.paths import TAIL, panel_error, place, probed_columns
from optics.kernels.problem import Half, Problem, scratch_space, work_space
from optics.kernels.rules import NODES, STAGES
from optics.kernels.source import dissipated, radiated, solve_half

# As in `integrate`: how often a panel is halved, and when a further stage is not tried.
_DEEPEST = 48
_HOPELESS = 10.0


# What is known of a half stack at a real node, in the order of a table's third axis.
(
    R_RE, R_IM,  # reflection seen from the emitter film
    OUT,  # flux carried out per |amplitude|^2 sent from the emitter film
    LOSS,  # absorbed, likewise
    FLUX,  # Re Y of the outer medium
    T_OUT_RE, T_OUT_IM,  # transmission outward; light from the other side leaves through it too
    T_IN_RE, T_IN_IM,  # lit from outside, where this side's slab sends light back: inward
    R_OUT_RE, R_OUT_IM,  # reflection
    OUTSIDE,  # absorbed per |amplitude|^2 sent from outside
    CROSS_RE, CROSS_IM,  # cross term of both
) = range(14)  # fmt: skip
KNOWN_OF_HALF = 14


@kernel
def tabulate_reflection(
    eps_o: Complexes, eps_e: Complexes, kd: Floats, u: Complexes, r: Floats
) -> None:
    """Reflection of half stacks that differ in thicknesses only.

    Parameters
    ----------
    eps_o, eps_e : complex (m,)
        Media from the emitter film outward, both ends included.
    kd : float (v, m)
        k0 times thickness, 0 at both ends.
    u : complex (n,)
        Nodes over k0, a multiple of NODES.
    r : float (n, 2, 2, v or more), output
        s, p; real and imaginary part.
    """
    work = work_space(eps_o.size)
    for j in range(kd.shape[0]):
        for start in range(0, u.size, NODES):
            waves(u[start : start + NODES], eps_o, eps_e, kd[j], work.kz, work.y, work.e)
            reflection(work.y, work.e, work.r)
            for i in range(NODES):
                for pol in range(2):
                    r[start + i, pol, 0, j] = work.r[pol, i].real
                    r[start + i, pol, 1, j] = work.r[pol, i].imag


@kernel
def tabulate_half(
    eps_o: Complexes,
    eps_e: Complexes,
    kd: Floats,
    u: Complexes,
    returns: NDArray[np.bool_],
    table: Floats,
) -> None:
    """Everything about half stacks at real nodes.

    Parameters
    ----------
    eps_o, eps_e, kd, u
        As of `tabulate_reflection`.
    returns : bool (n,)
        Where the half stack may be lit from outside.
    table : float (n, 2, KNOWN_OF_HALF, v or more), output
    """
    work = work_space(eps_o.size)
    for j in range(kd.shape[0]):
        half = Half(eps_o, eps_e, kd[j])
        for start in range(0, u.size, NODES):
            some = False
            for i in range(NODES):
                some = some or returns[start + i]
            solve_half(half, work, u[start : start + NODES], some)
            for i in range(NODES):
                n = start + i
                for pol in range(2):
                    known = table[n, pol]
                    r, t, flux = work.r_far[pol, 0, i], work.t[pol, i], work.y[pol, -1, i].real
                    known[R_RE, j], known[R_IM, j] = r.real, r.imag
                    known[OUT, j], known[LOSS, j] = abs2(t) * flux, work.form[0, pol, i].real
                    known[FLUX, j], known[T_OUT_RE, j], known[T_OUT_IM, j] = flux, t.real, t.imag
                    if some:
                        t, r, cross = work.g[pol, 0, i], work.r_out[pol, i], work.form[2, pol, i]
                        known[T_IN_RE, j], known[T_IN_IM, j] = t.real, t.imag
                        known[R_OUT_RE, j], known[R_OUT_IM, j] = r.real, r.imag
                        known[OUTSIDE, j] = work.form[1, pol, i].real
                        known[CROSS_RE, j], known[CROSS_IM, j] = cross.real, cross.imag


@kernel
def leaves(
    problem: Problem,
    w: int,
    path: Floats,
    everything: bool,
    scale: Floats,
    tolerance: float,
    found: Floats,
) -> int:
    """Panels that one path needs at one wavelength, as `integrate` would choose them.

    Parameters
    ----------
    problem : Problem
    w : int
        Wavelength.
    path : float (4,)
        kind, lo, hi, depth, see `paths.place`.
    everything : bool
        As of `integrate`.
    scale : float (q,)
        What errors are measured against.
    tolerance : float
        Largest error of one panel over scale.
    found : float (k, 3), output
        Ends of each panel, and the stage that sufficed.

    Returns
    -------
    int
        How many; k if there is no room for all.
    """
    source, sides, up, down = at_wavelength(problem, w)
    work_up, work_down = work_space(up.kd.size), work_space(down.kd.size)
    scratch = scratch_space(source.kz_positions.size, COLUMNS)
    u, du = np.zeros(NODES, dtype=np.complex128), np.zeros(NODES, dtype=np.complex128)
    values = np.zeros((STAGES * NODES, scale.size))
    moments, misses = np.zeros((4, scale.size)), np.zeros(scale.size)
    probed = probed_columns(scale.size, 1)
    ends = np.zeros((2, 2 * _DEEPEST))
    ends[1, 0] = 1.0
    waiting, count = 1, 0
    while waiting > 0:
        waiting -= 1
        a, b = ends[0, waiting], ends[1, waiting]
        worst, stage = np.inf, -1
        while worst > tolerance and stage < STAGES - 1:
            if stage >= 0 and worst * worst > _HOPELESS * tolerance:
                break
            stage += 1
            place(path[0], path[1], path[2], path[3], a, b, stage, u, du)
            batch = values[stage * NODES : (stage + 1) * NODES]
            if everything:
                radiated(source, sides, up, down, work_up, work_down, scratch, u, du, batch)
            else:
                beyond = path[0] == TAIL
                dissipated(source, up, down, work_up, work_down, scratch, u, du, beyond, batch)
            worst = panel_error(values, stage, scale, probed, moments, misses)
        if worst > tolerance and b - a > 0.5**_DEEPEST and count + waiting + 2 <= found.shape[0]:
            ends[0, waiting], ends[1, waiting] = a, 0.5 * (a + b)
            ends[0, waiting + 1], ends[1, waiting + 1] = 0.5 * (a + b), b
            waiting += 2
        else:
            found[count, 0], found[count, 1], found[count, 2] = a, b, stage
            count += 1
    return count


@kernel
def nodes_of(path: Floats, a: float, b: float, u: Complexes, du: Complexes) -> None:
    """All stages' nodes u, derivatives du (both (STAGES * NODES,)) of a panel of a path."""
    for stage in range(STAGES):
        batch = slice(stage * NODES, (stage + 1) * NODES)
        place(path[0], path[1], path[2], path[3], a, b, stage, u[batch], du[batch])


def finest(parts: list[Floats]) -> Floats:
    """Panels (k, 3) that are nowhere coarser than any of several sets of panels.

    Every set comes from halving 0..1. A panel takes the highest stage of those that it equals;
    one that is finer than another set's needs no more than its own.
    """
    chosen: dict[tuple[float, float], float] = {}
    for panels in parts:
        for a, b, stage in panels:
            chosen[a, b] = max(stage, chosen.get((a, b), 0.0))
    # By start, the longer first: whatever lies within a panel comes right after it.
    ends = sorted(chosen, key=lambda panel: (panel[0], -panel[1]))
    kept = [(a, b) for i, (a, b) in enumerate(ends) if i + 1 == len(ends) or ends[i + 1][0] >= b]
    return np.array([(a, b, chosen[a, b]) for a, b in kept])
