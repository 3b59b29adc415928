"""Rates of change of what becomes of light that reaches the outer media.

The twin of `exits`, which gives the values.
"""

import math

from optics.kernels.arrays import Complexes, Flags, Floats
from optics.kernels.compiled import borrowing
from optics.kernels.exits import (
    ABSORBING,
    AIR_BOTTOM,
    AIR_TOP,
    COVER,
    MATCHED,
    MATCHED_BOTTOM,
    MATCHED_TOP,
    OPEN,
    SUBSTRATE,
    bounces,
    exit_line,
    passage,
    slab_faces,
)
from optics.kernels.halfstack import S, abs2, reciprocal
from optics.kernels.problem import Sides, Source
from optics.kernels.rules import NODES
from optics.kernels.variation import Rates
from optics.kernels.varied_response import Response
from optics.kernels.varied_solved import Solved

Two = tuple[float, float]
Three = tuple[float, float, float]
Four = tuple[float, float, float, float]
Ports = tuple[complex, complex, complex, complex]


@borrowing
def _re(a: complex, b: complex) -> float:
    """Re(a b)."""
    return a.real * b.real - a.imag * b.imag


@borrowing
def _reflected(phase: complex, r_a: complex, b: Ports) -> tuple[float, Ports, complex, complex]:
    """Reflectance R of the whole stack lit from outside half b, and what changes it.

    Parameters
    ----------
    phase : complex
        exp(i kz d) of the emitter film.
    r_a : complex
        Reflection of the far half seen from the emitter film.
    b : (complex, complex, complex, complex)
        The near half: reflection seen from the emitter film, t outward, t inward, reflection
        from outside.

    Returns
    -------
    R, then factors f so that dR is the sum of Re(f dx): for the ports of b, r_a, phase.
    """
    r_b, t, t_in, r_out = b
    inv = reciprocal(1.0 - r_a * r_b * phase * phase)
    there = phase * inv
    twice = there * phase
    echo = t_in * twice * r_a
    r = r_out + t * echo
    weight = 2.0 * r.conjugate()
    by_a = weight * t * t_in * twice * inv
    ports = (weight * t * echo * r_a * twice, weight * echo, weight * t * twice * r_a, weight)
    return abs2(r), ports, by_a, 2.0 * weight * t * t_in * r_a * there * inv


@borrowing
def _transmitted(
    phase: complex, r_a: complex, t_a: complex, r_b: complex, in_b: complex, ratio: float
) -> tuple[float, Ports, complex]:
    """Transmittance T of the whole stack lit from outside half b, and what changes it.

    ratio : Re Y of the medium outside half a over that outside half b

    Returns
    -------
    T, then factors f so that dT is the sum of Re(f dx): for r_a, t_a, r_b, in_b; phase.
    """
    inv = reciprocal(1.0 - r_a * r_b * phase * phase)
    x = t_a * in_b * phase * inv
    weight = 2.0 * ratio * x.conjugate()
    loop = weight * x * inv * phase * phase
    ports = (loop * r_b, weight * in_b * phase * inv, loop * r_a, weight * t_a * phase * inv)
    by_phase = weight * t_a * in_b * inv * inv * (1.0 + r_a * r_b * phase * phase)
    return abs2(x) * ratio, ports, by_phase


@borrowing
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


@borrowing
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


@borrowing
def _side(
    kind: int, matched: bool, pol: int, u: float, n_outer: float, n_out: float, loss: float
) -> Four:
    """One outer medium: one pass, face reflectance; share that leaves, share that comes back.

    matched : bool
        As if an index-matched hemisphere stood on the slab.
    """
    once, rho_s, rho_p = slab_faces(MATCHED if matched else kind, n_outer, n_out, loss, u)
    rho = rho_s if pol == S else rho_p
    leaves, _, back = passage(rho, once)
    return once, rho, leaves, back


@borrowing
def _side_rates(
    side: Four, kind: int, matched: bool, pol: int, u: float, du: float,
    n_outer: Two, n_out: Two, loss: Two,
) -> Two:  # fmt: skip
    """Rates of the share that leaves and of the share that comes back.

    side : from `_side`; n_outer, n_out, loss : values and their rates
    """
    if kind in (OPEN, ABSORBING) or u >= n_outer[0]:
        return 0.0, 0.0
    once, rho = side[0], side[1]
    d_once = once_rate(once, u, du, n_outer[0], n_outer[1], loss[0], loss[1])
    if matched or kind == MATCHED:
        return d_once, 0.0
    d_rho = face_rate(pol, u, du, n_outer[0], n_outer[1], n_out[0], n_out[1])
    return d_once * (1.0 - rho) - once * d_rho, once * (2.0 * d_once * rho + once * d_rho)


@borrowing
def _bounce_rates(m: Four, backs: Two, back_rates: Two, stack: Three, stack_rates: Three) -> Four:
    """Rates of `exits.bounces`: m is the inverse of 1 - K, so that dm = m dK m.

    stack, stack_rates : R from the bottom, R from the top, T
    """
    (bb, bt, tb, tt), (r_b, r_t, through), (dr_b, dr_t, d_through) = m, stack, stack_rates
    k_bb = dr_b * backs[0] + r_b * back_rates[0]
    k_tb = d_through * backs[0] + through * back_rates[0]
    k_tt = dr_t * backs[1] + r_t * back_rates[1]
    k_bt = d_through * backs[1] + through * back_rates[1]
    x_bb, x_bt = k_bb * bb + k_bt * tb, k_bb * bt + k_bt * tt
    x_tb, x_tt = k_tb * bb + k_tt * tb, k_tb * bt + k_tt * tt
    return (
        bb * x_bb + bt * x_tb,
        bb * x_bt + bt * x_tt,
        tb * x_bb + tt * x_tb,
        tb * x_bt + tt * x_tt,
    )


@borrowing
def _book(
    m: Four, d_m: Four, arrived: Two, d_arrived: Two, leaves: Two, d_leaves: Two, row: int
) -> tuple[float, float, float, float]:
    """What leaves at the bottom and top of light sent down (row 0) or up, and the rates."""
    to_b, to_t, d_b, d_t = m[row], m[2 + row], d_m[row], d_m[2 + row]
    power, d_power = arrived[row], d_arrived[row]
    return (
        to_b * power * leaves[0],
        to_t * power * leaves[1],
        (d_b * power + to_b * d_power) * leaves[0] + to_b * power * d_leaves[0],
        (d_t * power + to_t * d_power) * leaves[1] + to_t * power * d_leaves[1],
    )


@borrowing
def lit_from_outside(
    pol: int, side: int, source: Source, kd_rate: Floats, near: Solved, far: Solved,
    vary: Response, vary_far: Response, lit: Flags, stack: Floats, rates: Floats,
) -> None:  # fmt: skip
    """Reflectance and transmittance of the whole stack lit from one side, and their rates.

    Parameters
    ----------
    side : int
        0: the bottom one, 1: the top one.
    kd_rate : float (p,)
        Rates of k0 d of the emitter film.
    near, far : Solved
        Half stack on the side that is lit, and the other; vary, vary_far their rates.
    lit : bool (n,)
        Nodes where it is asked for.
    stack : float (3, n), output
        R from the bottom, R from the top, T.
    rates : float (p, 3, n), output
    """
    for i in range(NODES):
        y_near, y_far = near.y[pol, -1, i].real, far.y[pol, -1, i].real
        if not lit[i] or y_near <= 0.0:
            continue
        kz, e, ratio = near.kz[pol, 0, i], near.e[pol, 0, i], y_far / y_near
        r, r_far, t_in = near.r_far[pol, 0, i], far.r_far[pol, 0, i], near.g[pol, 0, i]
        ports = (r, near.t[pol, i], t_in, near.r_out[pol, i])
        stack[side, i], by, by_far, by_phase = _reflected(e, r_far, ports)
        through, to, to_phase = _transmitted(e, r_far, far.t[pol, i], r, t_in, ratio)
        stack[2, i] = through
        per_ratio = through / ratio if ratio > 0.0 else 0.0
        for p in range(kd_rate.size):
            turn = 1j * e * (vary.kz[pol, p, i] * source.kd + kz * kd_rate[p])
            dr, dr_far, dt_in = vary.r[pol, p, i], vary_far.r[pol, p, i], vary.t_in[pol, p, i]
            rates[p, side, i] = (
                _re(by[0], dr) + _re(by[1], vary.t[pol, p, i]) + _re(by[2], dt_in)
                + _re(by[3], vary.r_out[pol, p, i]) + _re(by_far, dr_far) + _re(by_phase, turn)
            )  # fmt: skip
            flux = (vary_far.y_out[pol, p, i].real - ratio * vary.y_out[pol, p, i].real) / y_near
            rates[p, 2, i] = (
                _re(to[0], dr_far) + _re(to[1], vary_far.t[pol, p, i]) + _re(to[2], dr)
                + _re(to[3], dt_in) + _re(to_phase, turn) + per_ratio * flux
            )  # fmt: skip


@borrowing
def arrival_rates(
    pol: int, down: Solved, up: Solved, vary_down: Response, vary_up: Response, arrived: Floats,
    rates: Floats,
) -> None:  # fmt: skip
    """Flux into the outer media per unit amplitude from the emitter film: bottom, top.

    Parameters
    ----------
    arrived : float (2, n), output
    rates : float (p, 2, n), output
    """
    for side in range(2):
        for i in range(NODES):
            t = down.t[pol, i] if side == 0 else up.t[pol, i]
            y = down.y[pol, -1, i].real if side == 0 else up.y[pol, -1, i].real
            arrived[side, i] = abs2(t) * y
            weight = 2.0 * y * t.conjugate()
            for p in range(rates.shape[0]):
                dt = vary_down.t[pol, p, i] if side == 0 else vary_up.t[pol, p, i]
                dy = vary_down.y_out[pol, p, i] if side == 0 else vary_up.y_out[pol, p, i]
                rates[p, side, i] = _re(weight, dt) + abs2(t) * dy.real


@borrowing
def share_rates(
    pol: int, u: Complexes, u_rate: Floats, sides: Sides, rates: Rates, moving: Flags,
    arrived: Floats, d_arrived: Floats, stack: Floats, d_stack: Floats, shares: Floats,
    d_shares: Floats,
) -> None:  # fmt: skip
    """Where light goes that the emitter film sends out with unit amplitude, without absorption.

    Parameters
    ----------
    moving : bool (p,)
        Directions along which anything outside changes, or the nodes move.
    arrived, d_arrived
        From `arrival_rates`.
    stack, d_stack
        From `lit_from_outside`.
    shares : float (COLUMNS, 2, n), output
        By destination; sent down, up. Column ABSORBED stays 0.
    d_shares : float (p, COLUMNS, 2, n), output
    """
    shares[:, :, :] = 0.0
    d_shares[:, :, :, :] = 0.0
    for variant in range(3):
        if variant > 0 and sides.kind[variant - 1] in (OPEN, ABSORBING):
            continue
        for i in range(NODES):
            _share_at_node(
                variant, i, pol, u[i].real, u_rate, sides, rates, moving, arrived, d_arrived,
                stack, d_stack, shares, d_shares,
            )  # fmt: skip


@borrowing
def _share_at_node(
    variant: int, i: int, pol: int, u: float, u_rate: Floats, sides: Sides, rates: Rates,
    moving: Flags, arrived: Floats, d_arrived: Floats, stack: Floats, d_stack: Floats,
    shares: Floats, d_shares: Floats,
) -> None:  # fmt: skip
    """Shares of one node: variant 0 as it is, 1 and 2 with the bottom, top slab matched."""
    kind_b, kind_t = sides.kind[0], sides.kind[1]
    n_b, n_t, out_b, out_t = sides.n_outer[0], sides.n_outer[1], sides.n_out[0], sides.n_out[1]
    line_b = exit_line(MATCHED if variant == 1 else kind_b, n_b, out_b)
    line_t = exit_line(MATCHED if variant == 2 else kind_t, n_t, out_t)
    free = u < max(line_b, line_t)
    if not free:
        if variant == 0:
            _book_trapped(i, kind_b, kind_t, arrived, d_arrived, shares, d_shares)
        return
    side_b = _side(kind_b, variant == 1, pol, u, n_b, out_b, sides.loss[0])
    side_t = _side(kind_t, variant == 2, pol, u, n_t, out_t, sides.loss[1])
    power, backs, leaves = (arrived[0, i], arrived[1, i]), (side_b[3], side_t[3]), (0.0, 0.0)
    if variant == 0:
        leaves = (side_b[2], side_t[2])
    elif variant == 1:
        leaves = (side_b[2], 0.0)
    else:
        leaves = (0.0, side_t[2])
    column_b, column_t = (AIR_BOTTOM, AIR_TOP) if variant == 0 else (MATCHED_BOTTOM, MATCHED_TOP)
    seen = (stack[0, i], stack[1, i], stack[2, i])
    kept = (max(1.0 - seen[0] - seen[2], 0.0), max(1.0 - seen[1] - seen[2], 0.0))
    m = bounces(backs[0], backs[1], (seen[0], seen[1], seen[2], kept[0], kept[1]))
    for p in range(u_rate.shape[0]):
        d_power, d_seen = (d_arrived[p, 0, i], d_arrived[p, 1, i]), (0.0, 0.0, 0.0)
        d_b, d_t, d_m = (0.0, 0.0), (0.0, 0.0), (0.0, 0.0, 0.0, 0.0)
        if moving[p]:
            d_b = _side_rates(
                side_b, kind_b, variant == 1, pol, u, u_rate[p, i], (n_b, rates.n_outer[p, 0]),
                (out_b, rates.n_out[p, 0]), (sides.loss[0], rates.loss[p, 0]),
            )  # fmt: skip
            d_t = _side_rates(
                side_t, kind_t, variant == 2, pol, u, u_rate[p, i], (n_t, rates.n_outer[p, 1]),
                (out_t, rates.n_out[p, 1]), (sides.loss[1], rates.loss[p, 1]),
            )  # fmt: skip
        if backs[0] != 0.0 or backs[1] != 0.0:
            d_seen = (d_stack[p, 0, i], d_stack[p, 1, i], d_stack[p, 2, i])
            d_m = _bounce_rates(m, backs, (d_b[1], d_t[1]), seen, d_seen)
        d_leaves = (0.0 if variant == 2 else d_b[0], 0.0 if variant == 1 else d_t[0])
        for row in range(2):
            b, t, rate_b, rate_t = _book(m, d_m, power, d_power, leaves, d_leaves, row)
            if variant != 2:
                shares[column_b, row, i] = b
                d_shares[p, column_b, row, i] = rate_b
            if variant != 1:
                shares[column_t, row, i] = t
                d_shares[p, column_t, row, i] = rate_t


@borrowing
def _book_trapped(
    i: int, kind_b: int, kind_t: int, arrived: Floats, d_arrived: Floats, shares: Floats,
    d_shares: Floats,
) -> None:  # fmt: skip
    """Light beyond every exit light line counts where it arrives first."""
    if kind_b != ABSORBING:
        shares[SUBSTRATE, 0, i] = arrived[0, i]
        for p in range(d_shares.shape[0]):
            d_shares[p, SUBSTRATE, 0, i] = d_arrived[p, 0, i]
    if kind_t != ABSORBING:
        shares[COVER, 1, i] = arrived[1, i]
        for p in range(d_shares.shape[0]):
            d_shares[p, COVER, 1, i] = d_arrived[p, 1, i]
