"""What half stacks are at fixed nodes, for many of them at once; and nodes good for many stacks.

A half stack does not depend on the dipole's place or on the other half, so a grid over films on
both sides of an emitter needs each half once. Tables keep real and imaginary parts apart and half
stacks side by side, so that loops over them vectorize. Their rows lie BLOCK apart, a number that
the compiler knows: it can then tell that rows do not overlap.
"""

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import borrowing, kernel
from optics.kernels.field import absorbs, crossed_in_film
from optics.kernels.halfstack import abs2, phase_factors, reflection, waves
from optics.kernels.integrate import at_wavelength
from optics.kernels.panel import light_error, light_space, panel_error
from optics.kernels.paths import place
from optics.kernels.planar import ROW, at
from optics.kernels.problem import Half, Problem, Work, scratch_space, work_space
from optics.kernels.rules import DEGREES, NODES, PANEL_NODES, STAGES
from optics.kernels.source import dissipated, radiated
from optics.kernels.whole import light_half, solve_half

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


@borrowing
def next_waves(
    j: int, u: Complexes, eps_o: Complexes, eps_e: Complexes, kd: Floats, work: Work
) -> None:
    """Waves of half stack j of kd (v, m) at nodes u, those of j - 1 being at hand."""
    if j == 0:
        waves(0, u, eps_o, eps_e, kd[0], work.kz, work.y, work.e)
        return
    for film in range(1, eps_o.size - 1):
        if kd[j, film] != kd[j - 1, film]:
            phase_factors(work.kz[film], kd[j, film], eps_o[film] == eps_e[film], work.e[film])


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
                    found = at(work.r, pol * NODES + i)
                    r[start + i, pol, segment, R_RE, lane] = found.real
                    r[start + i, pol, segment, R_IM, lane] = found.imag


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
    work, alone, cross = work_space(eps_o.size), np.zeros(ROW), np.zeros(ROW)
    for start in range(0, u.size, NODES):
        some = bool(lit[start : start + NODES].any())
        for j in range(kd.shape[0]):
            half = Half(eps_o, eps_e, kd[j])
            next_waves(j, u[start : start + NODES], eps_o, eps_e, kd, work)
            solve_half(half, work, u[start : start + NODES])
            if some:
                _light_alone(half, work, alone, cross)
            segment, lane = j // lanes, j % lanes
            for i in range(NODES):
                for pol in range(2):
                    known = table[start + i, pol, segment]
                    _note_inside(work, pol * NODES + i, known, lane)
                    if lit[start + i]:
                        _note_outside(work, cross, pol * NODES + i, known, lane)
                    else:
                        known[BACK_RE, lane] = 1.0


@borrowing
def _light_alone(half: Half, work: Work, alone: Floats, cross: Floats) -> None:
    """Light a half stack from outside, by itself: nothing comes back from the other half.

    alone : zeros (ROW,); cross : (ROW,), output, `field.crossed_in_film` of all films.
    """
    light_half(half, alone, work)
    for lane in range(ROW):
        cross[lane] = 0.0
    for j in range(1, half.kd.size - 1):
        if absorbs(half.eps_o[j], half.eps_e[j]):
            crossed_in_film(
                work.e[j], work.r_far[j], work.f[j], work.r_near[j], work.g[j], work.alpha[j],
                work.beta[j], cross,
            )  # fmt: skip


@borrowing
def _note_inside(work: Work, place: int, known: Floats, lane: int) -> None:
    """Write down what becomes of light from the emitter film."""
    last = work.y.shape[0] - 1
    r = at(work.r_far[0], place)
    known[R_RE, lane], known[R_IM, lane], known[SIZE, lane] = r.real, r.imag, abs2(r)
    known[OUT, lane] = abs2(at(work.f[last], place)) * work.y[last, place]
    known[LOSS, lane] = work.absorbed[place]


@borrowing
def _note_outside(work: Work, crossed: Floats, place: int, known: Floats, lane: int) -> None:
    """Write down what becomes of light from outside."""
    last = work.y.shape[0] - 1
    per_flux = 1.0 / work.y[last, place]
    inward, back = at(work.g[0], place), at(work.r_near[last], place)
    cross = (2.0 * per_flux) * (inward.conjugate() * at(crossed, place))
    way = inward * at(work.f[last], place)
    known[IN, lane] = per_flux * abs2(inward)
    known[IN_LOSS, lane] = known[IN, lane] * known[LOSS, lane]
    known[OUTSIDE, lane] = per_flux * work.absorbed_outside[place]
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
    scratch, positions = scratch_space(), source.kz_positions.size
    u, du = np.zeros(NODES, dtype=np.complex128), np.zeros(NODES, dtype=np.complex128)
    light, power = light_space(positions), np.zeros((3, positions, PANEL_NODES))
    by_column = power.reshape(3 * positions, PANEL_NODES)
    probed = np.arange(positions if everything else 3 * positions)
    moments, misses = np.zeros((DEGREES, probed.size)), np.zeros(scale.size)
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
            first = stage * NODES
            if everything:
                radiated(source, sides, up, down, work_up, work_down, scratch, u, du, first, light)
                worst = light_error(light, stage, scale, probed, moments, misses)
            else:
                dissipated(
                    source, up, down, work_up, work_down, scratch, u, du, first, power,
                )  # fmt: skip
                worst = panel_error(by_column, stage, scale, probed, misses)
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
    """All stages' nodes u, derivatives du (both (PANEL_NODES,)) of a panel of a path."""
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
