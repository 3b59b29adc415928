"""Rates of change of what becomes of light that reaches the outer media.

The twin of `exits`, which gives the values.
"""

import math

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline
from optics.kernels.exits import (
    ABSORBING,
    AIR_BOTTOM,
    AIR_TOP,
    COVER,
    MATCHED,
    MATCHED_BOTTOM,
    MATCHED_TOP,
    PLANAR,
    SUBSTRATE,
    bounces,
    exit_line,
    face_reflectance,
    once_through,
)
from optics.kernels.halfstack import S, abs2, reciprocal
from optics.kernels.problem import Sides, Work
from optics.kernels.variation import Rates
from optics.kernels.varied_response import Response

Four = tuple[float, float, float, float]


@inline
def _re(a: complex, b: complex) -> float:
    """Re(conj(a) b): half the rate of |a|^2 where b is the rate of a."""
    return a.real * b.real + a.imag * b.imag


@inline
def whole_stack_rates(
    phase: complex,
    phase_rate: complex,
    half_a: tuple[complex, complex, float],
    rates_a: tuple[complex, complex, float],
    half_b: tuple[complex, complex, complex, complex, float],
    rates_b: tuple[complex, complex, complex, complex, float],
) -> Four:
    """Whole stack lit from the medium outside half b: (R, T, dR, dT) per unit incident flux.

    Parameters
    ----------
    phase : complex
        exp(i kz d) of the emitter film.
    half_a : (complex, complex, float)
        Reflection seen from the emitter film, t outward, Re Y of the medium outside.
    half_b : (complex, complex, complex, complex, float)
        The same of half b, t inward and reflection from outside before the last.
    phase_rate, rates_a, rates_b
        Their rates.
    """
    r_a, t_a, flux_a = half_a
    r_b, t_b, in_b, out_b, flux_b = half_b
    dr_a, dt_a, dflux_a = rates_a
    dr_b, dt_b, din_b, dout_b, dflux_b = rates_b
    inv = reciprocal(1.0 - r_a * r_b * phase * phase)
    loop_rate = (dr_a * r_b + r_a * dr_b) * phase * phase + 2.0 * r_a * r_b * phase * phase_rate
    toward = in_b * phase * inv
    d_toward = (din_b * phase + in_b * phase_rate + toward * loop_rate) * inv
    back = phase * r_a
    d_back = phase_rate * r_a + phase * dr_a
    r = out_b + t_b * toward * back
    dr = dout_b + dt_b * toward * back + t_b * (d_toward * back + toward * d_back)
    x = t_a * toward
    dx = dt_a * toward + t_a * d_toward
    through = abs2(x) * flux_a / flux_b
    through_rate = (2.0 * _re(x, dx) * flux_a + abs2(x) * dflux_a - through * dflux_b) / flux_b
    return abs2(r), through, 2.0 * _re(r, dr), through_rate


@inline
def face_rate(
    pol: int, u: float, du: float, n_slab: float, dn_slab: float, n_out: float, dn_out: float
) -> float:
    """Rate of the reflectance of a slab's outer face; 0 beyond the light line."""
    if u >= n_out:
        return 0.0
    y1 = math.sqrt(n_slab * n_slab - u * u)
    y2 = math.sqrt(n_out * n_out - u * u)
    d1 = (n_slab * dn_slab - u * du) / y1
    d2 = (n_out * dn_out - u * du) / y2
    if pol != S:
        square_1, square_2 = n_slab * n_slab, n_out * n_out
        d1 = (d1 - 2.0 * y1 * dn_slab / n_slab) / square_1
        d2 = (d2 - 2.0 * y2 * dn_out / n_out) / square_2
        y1, y2 = y1 / square_1, y2 / square_2
    total = y1 + y2
    return 4.0 * (y1 - y2) * (d1 * y2 - y1 * d2) / (total * total * total)


@inline
def once_rate(
    once: float, u: float, du: float, n_outer: float, dn_outer: float, loss: float, dloss: float
) -> float:
    """Rate of the transmittance `once` of one pass through a slab."""
    if u >= n_outer or (loss == 0.0 and dloss == 0.0):
        return 0.0
    sine = u / n_outer
    cosine = math.sqrt(1.0 - sine * sine)
    sine_rate = (du - sine * dn_outer) / n_outer
    return -once * (dloss + loss * sine * sine_rate / (cosine * cosine)) / cosine


@inline
def _bounce_rates(
    m: Four, backs: tuple[float, float], back_rates: tuple[float, float], stack: Four, rates: Four
) -> Four:
    """Rates of `exits.bounces`: m is the inverse of 1 - K, so that dm = m dK m.

    stack, rates : R from the bottom, R from the top, T, unused
    """
    (bb, bt, tb, tt), (r_b, r_t, through, _), (dr_b, dr_t, dthrough, _) = m, stack, rates
    k_bb = dr_b * backs[0] + r_b * back_rates[0]
    k_tb = dthrough * backs[0] + through * back_rates[0]
    k_tt = dr_t * backs[1] + r_t * back_rates[1]
    k_bt = dthrough * backs[1] + through * back_rates[1]
    x_bb, x_bt = k_bb * bb + k_bt * tb, k_bb * bt + k_bt * tt
    x_tb, x_tt = k_tb * bb + k_tt * tb, k_tb * bt + k_tt * tt
    return (
        bb * x_bb + bt * x_tb,
        bb * x_bt + bt * x_tt,
        tb * x_bb + tt * x_tb,
        tb * x_bt + tt * x_tt,
    )


@inline
def _side(
    side: int, pol: int, sides: Sides, rates: Rates, p: int, u: float, du: float
) -> tuple[float, float, float, float, float, float]:
    """One outer medium: one pass, share that leaves, share that comes back; and their rates.

    Without a direction (p < 0) the rates are 0.
    """
    kind, n, n_out, loss = (
        sides.kind[side],
        sides.n_outer[side],
        sides.n_out[side],
        sides.loss[side],
    )
    if kind == ABSORBING:
        return 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
    once = once_through(u, n, loss)
    rho, d_once, d_rho = 1.0, 0.0, 0.0
    planar = kind == PLANAR and u < n
    if planar:
        rho = face_reflectance(pol, u, n, n_out)
    if p >= 0:
        dn = rates.n_outer[p, side]
        d_once = once_rate(once, u, du, n, dn, loss, rates.loss[p, side])
        if planar:
            d_rho = face_rate(pol, u, du, n, dn, n_out, rates.n_out[p, side])
    if kind == PLANAR:
        return (
            once, once * (1.0 - rho), once * once * rho,
            d_once, d_once * (1.0 - rho) - once * d_rho, once * (2.0 * d_once * rho + once * d_rho),
        )  # fmt: skip
    if kind == MATCHED:
        return once, once, 0.0, d_once, d_once, 0.0
    return 1.0, 1.0, 0.0, 0.0, 0.0, 0.0


@inline
def _lit(
    pol: int, i: int, p: int, sides: Sides, down: Work, up: Work, phase: complex,
    phase_rate: complex, vary_down: Response, vary_up: Response,
) -> tuple[Four, Four]:  # fmt: skip
    """R from the bottom, R from the top, T of the whole stack, and their rates (last ones 0)."""
    a_down = (down.r_far[pol, 0, i], down.t[pol, i], down.y[pol, -1, i].real)
    a_up = (up.r_far[pol, 0, i], up.t[pol, i], up.y[pol, -1, i].real)
    da_down = (vary_down.r[pol, p, i], vary_down.t[pol, p, i], vary_down.y_out[pol, p, i].real)
    da_up = (vary_up.r[pol, p, i], vary_up.t[pol, p, i], vary_up.y_out[pol, p, i].real)
    r_b, r_t, through, dr_b, dr_t, dthrough = 1.0, 1.0, 0.0, 0.0, 0.0, 0.0
    if sides.kind[1] == PLANAR and a_up[2] > 0.0:
        b = (a_up[0], a_up[1], up.g[pol, 0, i], up.r_out[pol, i], a_up[2])
        db = (da_up[0], da_up[1], vary_up.t_in[pol, p, i], vary_up.r_out[pol, p, i], da_up[2])
        r_t, through, dr_t, dthrough = whole_stack_rates(phase, phase_rate, a_down, da_down, b, db)
    if sides.kind[0] == PLANAR and a_down[2] > 0.0:
        b = (a_down[0], a_down[1], down.g[pol, 0, i], down.r_out[pol, i], a_down[2])
        db = (
            da_down[0], da_down[1], vary_down.t_in[pol, p, i], vary_down.r_out[pol, p, i],
            da_down[2],
        )  # fmt: skip
        r_b, through, dr_b, dthrough = whole_stack_rates(phase, phase_rate, a_up, da_up, b, db)
    return (r_b, r_t, through, 0.0), (dr_b, dr_t, dthrough, 0.0)


@inline
def _book(
    m: Four, d_m: Four, arrived: tuple[float, float], d_arrived: tuple[float, float],
    exits: tuple[float, float], d_exits: tuple[float, float],
    columns: tuple[int, int], shares: Floats, rates: Floats,
) -> None:  # fmt: skip
    """Add what leaves at the bottom and top (columns) to shares and rates (2, COLUMNS)."""
    for row in range(2):
        i_b, i_t = (m[0], m[2]) if row == 0 else (m[1], m[3])
        d_b, d_t = (d_m[0], d_m[2]) if row == 0 else (d_m[1], d_m[3])
        power, d_power = arrived[row], d_arrived[row]
        if exits[0] != 0.0 or d_exits[0] != 0.0:
            shares[row, columns[0]] += i_b * power * exits[0]
            rates[row, columns[0]] += (d_b * power + i_b * d_power) * exits[0]
            rates[row, columns[0]] += i_b * power * d_exits[0]
        if exits[1] != 0.0 or d_exits[1] != 0.0:
            shares[row, columns[1]] += i_t * power * exits[1]
            rates[row, columns[1]] += (d_t * power + i_t * d_power) * exits[1]
            rates[row, columns[1]] += i_t * power * d_exits[1]


@inline
def share_rates(
    pol: int, i: int, u: float, u_rate: Floats, sides: Sides, rates: Rates, down: Work, up: Work,
    phase: complex, phase_rate: Complexes, vary_down: Response, vary_up: Response,
    shares: Floats, d_shares: Floats,
) -> None:  # fmt: skip
    """Where light goes that the emitter film sends out with unit amplitude, without absorption.

    Parameters
    ----------
    u_rate : float (p,)
    phase_rate : complex (p,)
        Of the phase factor of the emitter film.
    shares : float (2, COLUMNS), output
        By destination; rows: sent down, up. Column ABSORBED stays 0.
    d_shares : float (p, 2, COLUMNS), output
    """
    kind_b, kind_t = sides.kind[0], sides.kind[1]
    line_b = exit_line(kind_b, sides.n_outer[0], sides.n_out[0])
    line_t = exit_line(kind_t, sides.n_outer[1], sides.n_out[1])
    y_b, y_t = down.y[pol, -1, i], up.y[pol, -1, i]
    t_b, t_t = down.t[pol, i], up.t[pol, i]
    p_b, p_t = abs2(t_b) * y_b.real, abs2(t_t) * y_t.real
    d_shares[:, :, :] = 0.0
    for p in range(u_rate.size):
        shares[:, :] = 0.0
        d_b = 2.0 * _re(t_b, vary_down.t[pol, p, i]) * y_b.real
        d_b += abs2(t_b) * vary_down.y_out[pol, p, i].real
        d_t = 2.0 * _re(t_t, vary_up.t[pol, p, i]) * y_t.real
        d_t += abs2(t_t) * vary_up.y_out[pol, p, i].real
        once_b, out_b, back_b, d_once_b, d_out_b, d_back_b = _side(
            0, pol, sides, rates, p, u, u_rate[p]
        )
        once_t, out_t, back_t, d_once_t, d_out_t, d_back_t = _side(
            1, pol, sides, rates, p, u, u_rate[p]
        )
        stack, d_stack = _lit(pol, i, p, sides, down, up, phase, phase_rate[p], vary_down, vary_up)
        powers = (
            stack[0], stack[1], stack[2],
            max(1.0 - stack[0] - stack[2], 0.0), max(1.0 - stack[1] - stack[2], 0.0),
        )  # fmt: skip
        arrived, d_arrived = (p_b, p_t), (d_b, d_t)
        if u < max(line_b, line_t):
            m = bounces(back_b, back_t, powers)
            d_m = _bounce_rates(m, (back_b, back_t), (d_back_b, d_back_t), stack, d_stack)
            _book(
                m, d_m, arrived, d_arrived, (out_b, out_t), (d_out_b, d_out_t),
                (AIR_BOTTOM, AIR_TOP), shares, d_shares[p],
            )  # fmt: skip
        else:
            if kind_b != ABSORBING:
                shares[0, SUBSTRATE] += p_b
                d_shares[p, 0, SUBSTRATE] += d_b
            if kind_t != ABSORBING:
                shares[1, COVER] += p_t
                d_shares[p, 1, COVER] += d_t
        # The same light if one slab's face were replaced by an index-matched hemisphere.
        if kind_b in (PLANAR, MATCHED):
            seen = u < max(sides.n_outer[0], line_t)
            back, d_back = (back_t, d_back_t) if seen else (0.0, 0.0)
            m = bounces(0.0, back, powers)
            d_m = _bounce_rates(m, (0.0, back), (0.0, d_back), stack, d_stack)
            _book(
                m, d_m, arrived, d_arrived, (once_b, 0.0), (d_once_b, 0.0),
                (MATCHED_BOTTOM, MATCHED_TOP), shares, d_shares[p],
            )  # fmt: skip
        if kind_t in (PLANAR, MATCHED):
            seen = u < max(sides.n_outer[1], line_b)
            back, d_back = (back_b, d_back_b) if seen else (0.0, 0.0)
            m = bounces(back, 0.0, powers)
            d_m = _bounce_rates(m, (back, 0.0), (d_back, 0.0), stack, d_stack)
            _book(
                m, d_m, arrived, d_arrived, (0.0, once_t), (0.0, d_once_t),
                (MATCHED_BOTTOM, MATCHED_TOP), shares, d_shares[p],
            )  # fmt: skip
