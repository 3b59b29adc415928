"""What half stacks are at fixed nodes, for many of them at once; and nodes good for many stacks.

A half stack does not depend on the dipole's place or on the other half, so a grid over films on
both sides of an emitter needs each half once. Tables keep real and imaginary parts apart and the
half stacks as the last axis, so that loops over them vectorize.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import kernel
from optics.kernels.exits import COLUMNS
from optics.kernels.halfstack import abs2, reflection, waves
from optics.kernels.integrate import at_wavelength
from optics.kernels.paths import TAIL, panel_error, place
from optics.kernels.problem import Half, Problem, scratch_space, work_space
from optics.kernels.rules import NODES, STAGES
from optics.kernels.source import dissipated, radiated, solve_half

# As in `integrate`: how often a panel is halved, and when a further stage is not tried.
_DEEPEST = 48
_HOPELESS = 10.0


class HalfTable(NamedTuple):
    """Half stacks at real nodes; v of them on the last axis."""

    r: Floats  # (n, 2, 2, v) reflection seen from the emitter film; s, p; real, imaginary
    out: Floats  # (n, 2, v) flux carried out per |amplitude|^2 sent from the emitter film
    loss: Floats  # (n, 2, v) absorbed, likewise
    flux: Floats  # (n, 2, v) Re Y of the outer medium
    ports: Complexes  # (n, 2, 3, v) t outward; and lit from outside: t inward, reflection,
    # filled, as what follows, at nodes where this side's slab sends light back.
    outside: Floats  # (n, 2, v) absorbed per |amplitude|^2 sent from outside
    cross: Complexes  # (n, 2, v) cross term of both


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
    r : float (n, 2, 2, v), output
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
    table: HalfTable,
) -> None:
    """Everything about half stacks at real nodes.

    Parameters
    ----------
    eps_o, eps_e, kd, u
        As of `tabulate_reflection`.
    returns : bool (n,)
        Where the half stack may be lit from outside.
    table : HalfTable, output
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
                    r = work.r_far[pol, 0, i]
                    flux = work.y[pol, -1, i].real
                    table.r[n, pol, 0, j], table.r[n, pol, 1, j] = r.real, r.imag
                    table.out[n, pol, j] = abs2(work.t[pol, i]) * flux
                    table.loss[n, pol, j] = work.form[0, pol, i].real
                    table.flux[n, pol, j] = flux
                    # Light that comes back from the other side leaves through this half too.
                    table.ports[n, pol, 0, j] = work.t[pol, i]
                    if some:
                        table.ports[n, pol, 1, j] = work.g[pol, 0, i]
                        table.ports[n, pol, 2, j] = work.r_out[pol, i]
                        table.outside[n, pol, j] = work.form[1, pol, i].real
                        table.cross[n, pol, j] = work.form[2, pol, i]


def empty_table(nodes: int, halves: int) -> HalfTable:
    """Table with room for so many nodes and half stacks."""
    real = [np.zeros((nodes, 2, halves)) for _ in range(4)]
    return HalfTable(
        np.zeros((nodes, 2, 2, halves)),
        real[0],
        real[1],
        real[2],
        np.zeros((nodes, 2, 3, halves), dtype=np.complex128),
        real[3],
        np.zeros((nodes, 2, halves), dtype=np.complex128),
    )


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
    moments, misses = np.zeros((3, scale.size)), np.zeros(scale.size)
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
            worst = panel_error(values, stage, scale, moments, misses)
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
