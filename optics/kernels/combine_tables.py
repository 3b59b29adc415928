"""What half stacks are at fixed nodes, for many of them at once; and nodes good for many stacks.

A half stack does not depend on the dipole's place or on the other half, so a grid over films on
both sides of an emitter needs each half once. Tables keep real and imaginary parts apart and half
stacks side by side, so that loops over them vectorize. Their rows lie BLOCK apart, a number that
the compiler knows: it can then tell that rows do not overlap.
"""

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline, kernel
from optics.kernels.exits import COLUMNS
from optics.kernels.halfstack import abs2, one_pass, reflection, waves
from optics.kernels.integrate import at_wavelength
from optics.kernels.paths import TAIL, panel_error, place, probed_columns
from optics.kernels.problem import Half, Problem, Work, scratch_space, work_space
from optics.kernels.rules import NODES, STAGES
from optics.kernels.source import dissipated, radiated, solve_waves

# As in `integrate`: how often a panel is halved, and when a further stage is not tried.
_DEEPEST = 48
_HOPELESS = 10.0


# Longest list of half stacks that lie side by side, so that loops over them vectorize.
BLOCK = 104

# What is known of a half stack at a real node, in the order of a table's rows. Light from the
# emitter film has |amplitude|^2 = 1; light from outside has unit flux, for the other rows to be
# products already. A half that is not lit from outside stands as a mirror there.
(
    R_RE, R_IM,  # reflection seen from the emitter film
    SIZE,  # |reflection|^2
    OUT,  # flux carried out
    LOSS,  # absorbed
    IN,  # |amplitude|^2 that arrives in the emitter film from outside
    IN_LOSS,  # times LOSS
    OUTSIDE,  # absorbed of light from outside
    CROSS_RE, CROSS_IM,  # cross term of both, 2 conj(t inward) a_cross
    WAY_RE, WAY_IM,  # transmission inward times outward
    BACK_RE, BACK_IM,  # reflection seen from outside
) = range(14)  # fmt: skip
KNOWN_OF_HALF = 14


@inline
def next_waves(
    j: int, u: Complexes, eps_o: Complexes, eps_e: Complexes, kd: Floats, work: Work
) -> None:
    """Waves of half stack j of kd (v, m) at nodes u, those of j - 1 being at hand."""
    if j == 0:
        waves(u, eps_o, eps_e, kd[0], work.kz, work.y, work.e)
        return
    for film in range(1, eps_o.size - 1):
        if kd[j, film] != kd[j - 1, film]:
            one_pass(film, kd[j, film], eps_o[film] == eps_e[film], work.kz, work.e)


@kernel
def tabulate_reflection(
    eps_o: Complexes, eps_e: Complexes, kd: Floats, u: Complexes, lanes: int, r: Floats
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
    lanes : int
        How many half stacks lie side by side, BLOCK at most.
    r : float (n, 2, v / lanes, 2, BLOCK), output
        s, p; half stacks in order, `lanes` in each segment; real and imaginary part.
    """
    work = work_space(eps_o.size)
    for start in range(0, u.size, NODES):
        for j in range(kd.shape[0]):
            next_waves(j, u[start : start + NODES], eps_o, eps_e, kd, work)
            reflection(work.y, work.e, work.r)
            segment, lane = j // lanes, j % lanes
            for i in range(NODES):
                for pol in range(2):
                    r[start + i, pol, segment, R_RE, lane] = work.r[pol, i].real
                    r[start + i, pol, segment, R_IM, lane] = work.r[pol, i].imag


@kernel
def tabulate_half(
    eps_o: Complexes,
    eps_e: Complexes,
    kd: Floats,
    u: Complexes,
    lit: NDArray[np.bool_],
    lanes: int,
    table: Floats,
) -> None:
    """Everything about half stacks at real nodes.

    Parameters
    ----------
    eps_o, eps_e, kd, u, lanes
        As of `tabulate_reflection`.
    lit : bool (n,)
        Where the half stack may be lit from outside.
    table : float (n, 2, v / lanes, KNOWN_OF_HALF, BLOCK), output
    """
    work = work_space(eps_o.size)
    for start in range(0, u.size, NODES):
        some = bool(lit[start : start + NODES].any())
        for j in range(kd.shape[0]):
            half = Half(eps_o, eps_e, kd[j])
            next_waves(j, u[start : start + NODES], eps_o, eps_e, kd, work)
            solve_waves(half, work, u[start : start + NODES], some)
            segment, lane = j // lanes, j % lanes
            for i in range(NODES):
                for pol in range(2):
                    known = table[start + i, pol, segment]
                    _note_inside(work, pol, i, known, lane)
                    if lit[start + i]:
                        _note_outside(work, pol, i, known, lane)
                    else:
                        known[BACK_RE, lane] = 1.0


@inline
def _note_inside(work: Work, pol: int, i: int, known: Floats, lane: int) -> None:
    """Write down what becomes of light from the emitter film."""
    r = work.r_far[pol, 0, i]
    known[R_RE, lane], known[R_IM, lane], known[SIZE, lane] = r.real, r.imag, abs2(r)
    known[OUT, lane] = abs2(work.t[pol, i]) * work.y[pol, -1, i].real
    known[LOSS, lane] = work.form[0, pol, i].real


@inline
def _note_outside(work: Work, pol: int, i: int, known: Floats, lane: int) -> None:
    """Write down what becomes of light from outside."""
    per_flux = 1.0 / work.y[pol, -1, i].real
    inward, back = work.g[pol, 0, i], work.r_out[pol, i]
    cross = 2.0 * per_flux * inward.conjugate() * work.form[2, pol, i]
    way = inward * work.t[pol, i]
    known[IN, lane] = per_flux * abs2(inward)
    known[IN_LOSS, lane] = known[IN, lane] * known[LOSS, lane]
    known[OUTSIDE, lane] = per_flux * work.form[1, pol, i].real
    known[CROSS_RE, lane], known[CROSS_IM, lane] = cross.real, cross.imag
    known[WAY_RE, lane], known[WAY_IM, lane] = way.real, way.imag
    known[BACK_RE, lane], known[BACK_IM, lane] = back.real, back.imag


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
