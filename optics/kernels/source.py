"""Power of a dipole per in-plane wavevector: dissipated, and carried to either side.

Methods: Lukosz & Kunz, J. Opt. Soc. Am. 67, 1607 (1977); Chance, Prock & Silbey, Adv. Chem.
Phys. 37, 1 (1978); Neyts, J. Opt. Soc. Am. A 15, 962 (1998); uniaxial emitter films after
Penninck et al., Opt. Express 19, 18558 (2011) (from memory).

Channels: 0 vertical (p), 1 horizontal p, 2 horizontal s. Everything is divided by the rate of
the same dipole in the unbounded emitter medium.
"""

from optics.kernels.arrays import Complexes, Floats, StackPowers
from optics.kernels.compiled import inline
from optics.kernels.elementary import exp_i
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
    beside_matched,
    bounces,
    exit_line,
    face_reflectances,
    once_through,
    passage,
    whole_stack,
)
from optics.kernels.field import absorbed_alone, absorbed_cross, film_coefficients, sum_films
from optics.kernels.halfstack import (
    P,
    S,
    abs2,
    inward,
    outward,
    reciprocal,
    reflection,
    waves,
    waves_from,
)
from optics.kernels.problem import Half, Scratch, Sides, Source, Work
from optics.kernels.rules import NODES

_FADED = 15.0  # Im kz d of the emitter film up to which its phase factors may be divided


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
def fill_phases(pol: int, source: Source, work: Work, scratch: Scratch) -> None:
    """Phase factors from every dipole to both faces of the emitter film, at every node."""
    if pol == P and source.eps_o == source.eps_e:
        return  # those of s, which came first
    for i in range(NODES):
        kz = work.kz[pol, 0, i]
        for q in range(source.kz_positions.size):
            scratch.to_bottom[i, q] = exp_i(kz * source.kz_positions[q])
        if kz.imag * source.kd < _FADED:
            # Both ways together lead through the film: a quotient costs less than a wave.
            through = exp_i(kz * source.kd)
            for q in range(source.kz_positions.size):
                scratch.to_top[i, q] = through * reciprocal(scratch.to_bottom[i, q])
            continue
        for q in range(source.kz_positions.size):
            scratch.to_top[i, q] = exp_i(kz * (source.kd - source.kz_positions[q]))


@inline
def waves_below(down: Half, work_up: Work, work_down: Work, u: Complexes) -> None:
    """Waves of the lower half; those of the emitter film are the upper half's own."""
    for pol in range(2):
        for i in range(NODES):
            work_down.kz[pol, 0, i] = work_up.kz[pol, 0, i]
            work_down.y[pol, 0, i] = work_up.y[pol, 0, i]
    waves_from(1, u, down.eps_o, down.eps_e, down.kd, work_down.kz, work_down.y, work_down.e)


@inline
def dissipated(
    source: Source,
    up: Half,
    down: Half,
    work_up: Work,
    work_down: Work,
    scratch: Scratch,
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
    waves_below(down, work_up, work_down, u)
    reflection(work_up.y, work_up.e, work_up.r)
    reflection(work_down.y, work_down.e, work_down.r)
    positions = source.kz_positions.size
    # The bracket of a reflection with either sign, 1 +- (a + b) + ab or what is beyond the bulk.
    own, both = (0.0, 2.0) if beyond_bulk else (1.0, 1.0)
    for pol in range(2):
        fill_phases(pol, source, work_up, scratch)
        for i in range(NODES):
            kz = work_up.kz[pol, 0, i]
            a_face, b_face = work_up.r[pol, i], work_down.r[pol, i]
            through = scratch.to_bottom[i, 0] * scratch.to_top[i, 0]
            inv = du[i] * reciprocal(1.0 - a_face * b_face * through * through)
            if pol == S:
                plus = inv * dissipated_factor(2, source, u[i], kz)
                for q in range(positions):
                    a = a_face * scratch.to_top[i, q] * scratch.to_top[i, q]
                    b = b_face * scratch.to_bottom[i, q] * scratch.to_bottom[i, q]
                    even = own + both * (a * b)
                    values[i, 2 * positions + q] = (plus * (even + (a + b))).real
                continue
            plus = inv * dissipated_factor(0, source, u[i], kz)
            minus = inv * dissipated_factor(1, source, u[i], kz)
            for q in range(positions):
                a = a_face * scratch.to_top[i, q] * scratch.to_top[i, q]
                b = b_face * scratch.to_bottom[i, q] * scratch.to_bottom[i, q]
                even, odd = own + both * (a * b), a + b
                values[i, q] = (plus * (even + odd)).real
                values[i, positions + q] = (minus * (even - odd)).real


@inline
def solve_half(half: Half, work: Work, u: Complexes, lit_from_outside: bool) -> None:
    """Fill the work space of one half stack at real nodes."""
    waves(u, half.eps_o, half.eps_e, half.kd, work.kz, work.y, work.e)
    solve_waves(half, work, u, lit_from_outside)


@inline
def solve_waves(half: Half, work: Work, u: Complexes, lit_from_outside: bool) -> None:
    """As `solve_half`, with the waves at hand."""
    outward(work.y, work.e, work.r_far, work.f, work.t)
    film_coefficients(u, half.eps_o, half.eps_e, half.kd, work.kz, work.e, work.alpha, work.beta)
    absorbed_alone(work.e, work.r_far, work.f, work.alpha, work.beta, work.a_in)
    if lit_from_outside:
        inward(work.y, work.e, work.r_near, work.g, work.r_out)
        absorbed_alone(work.e, work.r_near, work.g, work.alpha, work.beta, work.a_out)
        absorbed_cross(
            work.e, work.r_far, work.f, work.r_near, work.g, work.alpha, work.beta, work.a_cross
        )
        sum_films(work.a_out, work.form[1])
        sum_films(work.a_cross, work.form[2])
    sum_films(work.a_in, work.form[0])


@inline
def stack_from_outside(
    from_bottom: bool,
    from_top: bool,
    work_up: Work,
    work_down: Work,
    phase: complex,
    pol: int,
    i: int,
) -> StackPowers:
    """Solve the whole stack at one node, lit from either side: (R_b, R_t, T, A_b, A_t).

    A side that light does not come from stands as R = 1, A = 0. T is the same both ways between
    transparent media; from an absorbing one no light comes.
    """
    flux_t, flux_b = work_up.y[pol, -1, i].real, work_down.y[pol, -1, i].real
    r_a, r_b = work_up.r_far[pol, 0, i], work_down.r_far[pol, 0, i]
    out_up, out_down = work_up.t[pol, i], work_down.t[pol, i]
    ports_up = (out_up, work_up.g[pol, 0, i], work_up.r_out[pol, i])
    ports_down = (out_down, work_down.g[pol, 0, i], work_down.r_out[pol, i])
    in_up, in_down = work_up.form[0, pol, i].real, work_down.form[0, pol, i].real
    form_up = (in_up, work_up.form[1, pol, i].real, work_up.form[2, pol, i])
    form_down = (in_down, work_down.form[1, pol, i].real, work_down.form[2, pol, i])
    rb, rt, through, ab, at = 1.0, 1.0, 0.0, 0.0, 0.0
    if from_top and flux_t > 0.0:
        rt, through, at = whole_stack(
            phase, r_b, r_a, (flux_b, flux_t), out_down, ports_up, in_down, form_up
        )
    if from_bottom and flux_b > 0.0:
        rb, through, ab = whole_stack(
            phase, r_a, r_b, (flux_t, flux_b), out_up, ports_down, in_up, form_down
        )
    return rb, rt, through, ab, at


@inline
def share_out(
    sides: Sides, pol: int, u: float, stack: StackPowers, p_b: float, p_t: float, shares: Floats
) -> None:
    """Where light goes that arrives first with p_b in the bottom, p_t in the top medium.

    shares : float (2, COLUMNS), added to; row 0 for p_b, row 1 for p_t.
    """
    once_b, s_b, p_b_face = side_face(sides, 0, u)
    once_t, s_t, p_t_face = side_face(sides, 1, u)
    rho = (s_b, s_t) if pol == S else (p_b_face, p_t_face)
    share_by_faces(sides, u, (once_b, once_t), rho, stack, p_b, p_t, shares)


@inline
def side_face(sides: Sides, side: int, u: float) -> tuple[float, float, float]:
    """One side's transmittance of one pass, and reflectance of its outer face for s and p."""
    n_outer = sides.n_outer[side]
    rho_s, rho_p = 1.0, 1.0
    if sides.kind[side] == PLANAR:
        rho_s, rho_p = face_reflectances(u, n_outer, sides.n_out[side])
    return once_through(u, n_outer, sides.loss[side]), rho_s, rho_p


@inline
def share_by_faces(
    sides: Sides,
    u: float,
    once: tuple[float, float],
    rho: tuple[float, float],
    stack: StackPowers,
    p_b: float,
    p_t: float,
    shares: Floats,
) -> None:
    """As `share_out`, with both sides' transmittance and reflectance of `side_face` at hand."""
    kind_b, kind_t = sides.kind[0], sides.kind[1]
    n_b, n_t = sides.n_outer[0], sides.n_outer[1]
    line_b, line_t = exit_line(kind_b, n_b, sides.n_out[0]), exit_line(kind_t, n_t, sides.n_out[1])
    once_b, once_t = once
    out_b, lost_b, back_b = passage(kind_b, rho[0], once_b)
    out_t, lost_t, back_t = passage(kind_t, rho[1], once_t)
    if u < max(line_b, line_t):
        bb, bt, tb, tt = bounces(back_b, back_t, stack)
        lost_b += back_b * stack[3]
        lost_t += back_t * stack[4]
        for row in range(2):
            i_b = bb * p_b if row == 0 else bt * p_t
            i_t = tb * p_b if row == 0 else tt * p_t
            shares[row, AIR_BOTTOM] += i_b * out_b
            shares[row, AIR_TOP] += i_t * out_t
            shares[row, ABSORBED] += i_b * lost_b + i_t * lost_t
    else:
        # Trapped: counted at first arrival in a slab, or swallowed by absorbing surroundings.
        shares[0, ABSORBED if kind_b == ABSORBING else SUBSTRATE] += p_b
        shares[1, ABSORBED if kind_t == ABSORBING else COVER] += p_t
    # The same light if one slab's face were replaced by an index-matched hemisphere.
    if kind_b in (PLANAR, MATCHED):
        back = beside_matched(u, n_b, line_t, back_t)
        bb, bt, _, _ = bounces(0.0, back, stack)
        shares[0, MATCHED_BOTTOM] += bb * p_b * once_b
        shares[1, MATCHED_BOTTOM] += bt * p_t * once_b
    if kind_t in (PLANAR, MATCHED):
        back = beside_matched(u, n_t, line_b, back_b)
        _, _, tb, tt = bounces(back, 0.0, stack)
        shares[0, MATCHED_TOP] += tb * p_b * once_t
        shares[1, MATCHED_TOP] += tt * p_t * once_t


@inline
def light_returns(sides: Sides, u: float) -> bool:
    """Tell whether some slab sends light back at in-plane wavevector u (in any variant)."""
    for side in range(2):
        if sides.kind[side] == PLANAR and u < sides.n_outer[side]:
            other = 1 - side
            beyond = max(sides.n_outer[other], sides.n_out[other])
            if sides.kind[other] == ABSORBING:
                beyond = 0.0
            if u < max(sides.n_out[side], beyond):
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
    scratch: Scratch,
    u: Complexes,
    du: Complexes,
    values: Floats,
) -> None:
    """Dissipated power and all destinations at real nodes below the outer light lines.

    Parameters
    ----------
    u, du : complex (NODES,), real-valued
    values : float (NODES, 2 * COLUMNS * positions), output
        Column (orientation * COLUMNS + destination) * positions + position.
    """
    positions = source.kz_positions.size
    any_return = light_returns(sides, u[0].real) or light_returns(sides, u[-1].real)
    from_bottom = any_return and sides.kind[0] == PLANAR
    from_top = any_return and sides.kind[1] == PLANAR
    solve_half(up, work_up, u, from_top)
    waves_below(down, work_up, work_down, u)
    solve_waves(down, work_down, u, from_bottom)
    shares, faces = scratch.shares, scratch.faces
    for side in range(2):
        for i in range(NODES):
            passed, rho_s, rho_p = side_face(sides, side, u[i].real)
            faces[side, 0, i], faces[side, 1, i], faces[side, 2, i] = passed, rho_s, rho_p
    values[:, :] = 0.0
    for pol in range(2):
        fill_phases(pol, source, work_up, scratch)
        for i in range(NODES):
            kz = work_up.kz[pol, 0, i]
            phase = scratch.to_bottom[i, 0] * scratch.to_top[i, 0]
            a_face, b_face = work_up.r_far[pol, 0, i], work_down.r_far[pol, 0, i]
            inv = reciprocal(1.0 - a_face * b_face * phase * phase)
            stack = (0.0, 0.0, 0.0, 0.0, 0.0)
            if any_return and light_returns(sides, u[i].real):
                stack = stack_from_outside(from_bottom, from_top, work_up, work_down, phase, pol, i)
            shares[:, :] = 0.0
            shares[0, ABSORBED] = work_down.form[0, pol, i].real
            shares[1, ABSORBED] = work_up.form[0, pol, i].real
            p_t = abs2(work_up.t[pol, i]) * work_up.y[pol, -1, i].real
            p_b = abs2(work_down.t[pol, i]) * work_down.y[pol, -1, i].real
            once = faces[0, 0, i], faces[1, 0, i]
            rho = faces[0, 1 + pol, i], faces[1, 1 + pol, i]
            share_by_faces(sides, u[i].real, once, rho, stack, p_b, p_t, shares)
            for c in range(3):
                channel_pol, sign = channel(c)
                if channel_pol != pol:
                    continue
                base = 0 if c == 0 else COLUMNS * positions
                through = dissipated_factor(c, source, u[i], kz) * du[i] * inv
                carried = outgoing_factor(c, source, u[i].real, kz) * du[i].real * abs2(inv)
                for q in range(positions):
                    to_b, to_t = scratch.to_bottom[i, q], scratch.to_top[i, q]
                    a = 1.0 + sign * a_face * to_t * to_t
                    b = 1.0 + sign * b_face * to_b * to_b
                    scratch.sent[0, q] = carried * abs2(to_b * a)
                    scratch.sent[1, q] = carried * abs2(to_t * b)
                    values[i, base + q] += (through * a * b).real
                for k in range(1, COLUMNS):
                    down_share, up_share = shares[0, k], shares[1, k]
                    if down_share == 0.0 and up_share == 0.0:
                        continue
                    first = base + k * positions
                    for q in range(positions):
                        values[i, first + q] += (
                            scratch.sent[0, q] * down_share + scratch.sent[1, q] * up_share
                        )
