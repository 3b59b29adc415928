"""Power of a dipole per in-plane wavevector: dissipated, and carried to either side.

Methods: Lukosz & Kunz, J. Opt. Soc. Am. 67, 1607 (1977); Chance, Prock & Silbey, Adv. Chem.
Phys. 37, 1 (1978); Neyts, J. Opt. Soc. Am. A 15, 962 (1998); uniaxial emitter films after
Penninck et al., J. Appl. Phys. 109 (2011) (from memory).

Channels: 0 vertical (p), 1 horizontal p, 2 horizontal s. Everything is divided by the rate of
the same dipole in the unbounded emitter medium.
"""

from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Complexes, Floats, StackPowers
from optics.kernels.compiled import inline
from optics.kernels.exits import (
    ABSORBED,
    ABSORBING,
    AIR_BOTTOM,
    AIR_TOP,
    COLUMNS,
    COVER,
    MATCHED,
    MATCHED_BOTTOM,
    MATCHED_TOP,
    PLANAR,
    SUBSTRATE,
    exit_line,
    passage,
    settle_bounces,
    whole_stack,
)
from optics.kernels.field import (
    absorbed_cross,
    absorbed_from_inside,
    absorbed_from_outside,
    film_coefficients,
)
from optics.kernels.halfstack import (
    P,
    S,
    abs2,
    exp_i,
    inward,
    outward,
    reciprocal,
    reflection,
    waves,
)
from optics.kernels.paths import NODES
from optics.kernels.problem import Half, Sides, Source, Work

_Number = TypeVar("_Number", np.float64, np.complex128)


@inline
def channel(c: int) -> tuple[int, float]:
    """Polarization of a channel and the sign with which its reflections enter."""
    return (S, 1.0) if c == 2 else (P, 1.0 if c == 0 else -1.0)


@inline
def dissipated_factor(c: int, source: Source, u: complex, kz: complex) -> complex:
    """Factor before the reflection bracket in the dissipated power per du."""
    if c == 0:
        return 1.5 * u * u * u * source.eps_o / (source.eps_e**2 * source.bulk[0]) * reciprocal(kz)
    if c == 1:
        return 0.75 / (source.eps_o * source.bulk[1]) * u * kz
    return 0.75 / source.bulk[1] * u * reciprocal(kz)


@inline
def outgoing_factor(c: int, source: Source, u: float, kz: complex) -> float:
    """Factor before |amplitude|^2 in the power carried to one side per du (u real)."""
    if c == 0:
        return 0.75 * u**3 * (source.eps_o / source.eps_e) ** 2 / (abs2(kz) * source.bulk[0])
    if c == 1:
        return 0.375 * u / source.bulk[1]
    return 0.375 * u / (abs2(kz) * source.bulk[1])


@inline
def dissipated(
    source: Source,
    up: Half,
    down: Half,
    work_up: Work,
    work_down: Work,
    u: Complexes,
    du: Complexes,
    beyond_bulk: bool,
    values: Floats,
) -> None:
    """Dissipated power at the nodes of a panel on any path.

    Parameters
    ----------
    u, du : complex (NODES,)
        Nodes and derivative of the path.
    beyond_bulk : bool
        Leave out the bulk term. Right on the real axis beyond the emitter's own light lines,
        where it carries no power but would drown what does.
    values : float (NODES, 3 * positions), output
        Re(integrand * du); column channel * positions + position.
    """
    waves(u, up.eps_o, up.eps_e, up.kd, work_up.kz, work_up.y, work_up.e)
    waves(u, down.eps_o, down.eps_e, down.kd, work_down.kz, work_down.y, work_down.e)
    reflection(work_up.y, work_up.e, work_up.r)
    reflection(work_down.y, work_down.e, work_down.r)
    nz = source.kz_positions.size
    for c in range(3):
        pol, sign = channel(c)
        for i in range(NODES):
            kz = work_up.kz[pol, 0, i]
            factor = dissipated_factor(c, source, u[i], kz) * du[i]
            a_face, b_face = work_up.r[pol, i], work_down.r[pol, i]
            through = exp_i(kz * source.kd)
            inv = reciprocal(1.0 - a_face * b_face * through * through)
            factor *= inv
            for q in range(nz):
                e_b = exp_i(kz * source.kz_positions[q])
                e_a = exp_i(kz * (source.kd - source.kz_positions[q]))
                a = sign * a_face * e_a * e_a
                b = sign * b_face * e_b * e_b
                bracket = a + b + 2.0 * a * b if beyond_bulk else (1.0 + a) * (1.0 + b)
                values[i, c * nz + q] = (factor * bracket).real


@inline
def solve_half(half: Half, work: Work, u: Complexes, lit_from_outside: bool) -> None:
    """Fill the work space of one half stack at real nodes."""
    waves(u, half.eps_o, half.eps_e, half.kd, work.kz, work.y, work.e)
    outward(work.y, work.e, work.r_far, work.f, work.t)
    film_coefficients(u, half.eps_o, half.eps_e, half.kd, work.kz, work.alpha, work.beta)
    absorbed_from_inside(work.e, work.r_far, work.f, work.alpha, work.beta, work.a_in)
    if lit_from_outside:
        inward(work.y, work.e, work.r_near, work.g, work.r_out)
        absorbed_from_outside(work.e, work.r_near, work.g, work.alpha, work.beta, work.a_out)
        absorbed_cross(
            work.e, work.r_far, work.f, work.r_near, work.g, work.alpha, work.beta, work.a_cross
        )


@inline
def sum_films(a: NDArray[_Number], pol: int, i: int) -> _Number:
    """Sum over films of a per-film absorption (2, m, n) at one node."""
    total = a[pol, 0, i] * 0.0
    for j in range(1, a.shape[1] - 1):
        total += a[pol, j, i]
    return total


@inline
def stack_from_both_sides(
    work_up: Work, work_down: Work, phase: complex, pol: int, i: int
) -> StackPowers:
    """(R_b, R_t, T, A_b, A_t) of the whole stack at one node."""
    last_a, last_b = work_up.y.shape[1] - 1, work_down.y.shape[1] - 1
    flux_t, flux_b = work_up.y[pol, last_a, i].real, work_down.y[pol, last_b, i].real
    r_a, r_b = work_up.r_far[pol, 0, i], work_down.r_far[pol, 0, i]
    ports_up = (work_up.t[pol, i], work_up.g[pol, 0, i], work_up.r_out[pol, i])
    ports_down = (work_down.t[pol, i], work_down.g[pol, 0, i], work_down.r_out[pol, i])
    in_up, in_down = sum_films(work_up.a_in, pol, i), sum_films(work_down.a_in, pol, i)
    form_up = (in_up, sum_films(work_up.a_out, pol, i), sum_films(work_up.a_cross, pol, i))
    form_down = (in_down, sum_films(work_down.a_out, pol, i), sum_films(work_down.a_cross, pol, i))
    rb, rt, through, ab, at = 1.0, 1.0, 0.0, 0.0, 0.0
    if flux_b > 0.0:
        rb, through, ab = whole_stack(
            phase, r_a, r_b, (flux_t, flux_b), ports_up[0], ports_down, in_up, form_down
        )
    if flux_t > 0.0:
        rt, through, at = whole_stack(
            phase, r_b, r_a, (flux_b, flux_t), ports_down[0], ports_up, in_down, form_up
        )
    return rb, rt, through, ab, at


@inline
def exit_shares(
    sides: Sides,
    kind_b: int,
    kind_t: int,
    pol: int,
    u: float,
    stack: StackPowers,
    p_b: float,
    p_t: float,
    shares: Floats,
) -> None:
    """Where first arrivals p_b, p_t end up: adds to shares (COLUMNS,)."""
    exits = max(
        exit_line(kind_b, sides.n_outer[0], sides.n_out[0]),
        exit_line(kind_t, sides.n_outer[1], sides.n_out[1]),
    )
    out_b, lost_b, back_b = passage(kind_b, pol, u, sides.n_outer[0], sides.n_out[0], sides.loss[0])
    out_t, lost_t, back_t = passage(kind_t, pol, u, sides.n_outer[1], sides.n_out[1], sides.loss[1])
    if u >= exits:
        # Trapped: counted at first arrival in a slab, or swallowed by absorbing surroundings.
        shares[ABSORBED if kind_b == ABSORBING else SUBSTRATE] += p_b
        shares[ABSORBED if kind_t == ABSORBING else COVER] += p_t
        return
    i_b, i_t = settle_bounces(back_b, back_t, stack, p_b, p_t)
    shares[AIR_BOTTOM] += i_b * out_b
    shares[AIR_TOP] += i_t * out_t
    shares[ABSORBED] += i_b * (lost_b + back_b * stack[3]) + i_t * (lost_t + back_t * stack[4])


@inline
def node_weights(
    sides: Sides,
    work_up: Work,
    work_down: Work,
    phase: complex,
    pol: int,
    i: int,
    u: float,
    returns: bool,
    shares: Floats,
    spare: Floats,
) -> None:
    """Destinations of unit |amplitude|^2 sent up or down in the emitter film at one node.

    shares : float (2, COLUMNS), output; row 0 for light sent down, row 1 for light sent up.
    """
    shares[:, :] = 0.0
    last_a, last_b = work_up.y.shape[1] - 1, work_down.y.shape[1] - 1
    p_t = abs2(work_up.t[pol, i]) * work_up.y[pol, last_a, i].real
    p_b = abs2(work_down.t[pol, i]) * work_down.y[pol, last_b, i].real
    stack = (0.0, 0.0, 0.0, 0.0, 0.0)
    if returns:
        stack = stack_from_both_sides(work_up, work_down, phase, pol, i)
    kind_b, kind_t = sides.kind[0], sides.kind[1]
    exit_shares(sides, kind_b, kind_t, pol, u, stack, p_b, 0.0, shares[0])
    exit_shares(sides, kind_b, kind_t, pol, u, stack, 0.0, p_t, shares[1])
    shares[0, ABSORBED] += sum_films(work_down.a_in, pol, i)
    shares[1, ABSORBED] += sum_films(work_up.a_in, pol, i)
    # The same light if one slab's face were replaced by an index-matched hemisphere.
    for side in range(2):
        if sides.kind[side] != PLANAR and sides.kind[side] != MATCHED:
            continue
        column = MATCHED_BOTTOM if side == 0 else MATCHED_TOP
        air = AIR_BOTTOM if side == 0 else AIR_TOP
        for sent in range(2):
            spare[:] = 0.0
            arrive_b = p_b if sent == 0 else 0.0
            arrive_t = p_t if sent == 1 else 0.0
            exit_shares(
                sides,
                MATCHED if side == 0 else kind_b,
                MATCHED if side == 1 else kind_t,
                pol,
                u,
                stack,
                arrive_b,
                arrive_t,
                spare,
            )
            shares[sent, column] = spare[air]


@inline
def light_returns(sides: Sides, u: float) -> bool:
    """Tell whether some slab sends light back at in-plane wavevector u (in any variant)."""
    for side in range(2):
        if sides.kind[side] == PLANAR and u < sides.n_outer[side]:
            other = sides.kind[1 - side]
            line = exit_line(PLANAR, sides.n_outer[side], sides.n_out[side])
            beyond = sides.n_outer[1 - side] if other != ABSORBING else 0.0
            if u < max(line, beyond):
                return True
    return False


@inline
def radiated(
    source: Source,
    sides: Sides,
    up: Half,
    down: Half,
    work_up: Work,
    work_down: Work,
    u: Complexes,
    du: Complexes,
    shares: Floats,
    spare: Floats,
    values: Floats,
) -> None:
    """Dissipated power and all destinations at real nodes below the outer light lines.

    Parameters
    ----------
    u, du : complex (NODES,), real-valued
    shares, spare : float (2, COLUMNS), (COLUMNS,), work space
    values : float (NODES, 2 * COLUMNS * positions), output
        Column (orientation * COLUMNS + destination) * positions + position.
    """
    nz = source.kz_positions.size
    any_return = False
    for i in range(NODES):
        any_return = any_return or light_returns(sides, u[i].real)
    solve_half(up, work_up, u, any_return)
    solve_half(down, work_down, u, any_return)
    for i in range(NODES):
        for k in range(2 * COLUMNS * nz):
            values[i, k] = 0.0
        returns = any_return and light_returns(sides, u[i].real)
        for pol in range(2):
            kz = work_up.kz[pol, 0, i]
            phase = exp_i(kz * source.kd)
            node_weights(
                sides, work_up, work_down, phase, pol, i, u[i].real, returns, shares, spare
            )
            a_face, b_face = work_up.r_far[pol, 0, i], work_down.r_far[pol, 0, i]
            inv = reciprocal(1.0 - a_face * b_face * phase * phase)
            for c in range(3):
                channel_pol, sign = channel(c)
                if channel_pol != pol:
                    continue
                orientation = 0 if c == 0 else 1
                base = orientation * COLUMNS * nz
                through = dissipated_factor(c, source, u[i], kz) * du[i] * inv
                carried = outgoing_factor(c, source, u[i].real, kz) * du[i].real * abs2(inv)
                for q in range(nz):
                    e_b = exp_i(kz * source.kz_positions[q])
                    e_a = exp_i(kz * (source.kd - source.kz_positions[q]))
                    a = sign * a_face * e_a * e_a
                    b = sign * b_face * e_b * e_b
                    sent_up = carried * abs2(e_a * (1.0 + b))
                    sent_down = carried * abs2(e_b * (1.0 + a))
                    values[i, base + q] += (through * (1.0 + a) * (1.0 + b)).real
                    for k in range(1, COLUMNS):
                        values[i, base + k * nz + q] += (
                            sent_down * shares[0, k] + sent_up * shares[1, k]
                        )
