"""First arrivals outside a block of devices, and what becomes of them, at one real node.

As `exits.fates`, with everything that does not depend on the films done once a node,
and what depends on one half stack only taken from its table. Rows of work space lie BLOCK apart,
so that the compiler can tell that they do not overlap.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.combine_tables import (
    BACK_IM,
    BACK_RE,
    BLOCK,
    CROSS_IM,
    CROSS_RE,
    IN,
    IN_LOSS,
    LOSS,
    OUT,
    OUTSIDE,
    R_IM,
    R_RE,
    SIZE,
    WAY_IM,
    WAY_RE,
)
from optics.kernels.compiled import inline
from optics.kernels.exits import (
    ABSORBED,
    ABSORBING,
    AIR_BOTTOM,
    AIR_TOP,
    COLUMNS,
    MATCHED_BOTTOM,
    MATCHED_TOP,
    PLANAR,
    STUCK,
    TINY_LOSS,
    beside_matched,
    exit_line,
    fates,
    light_returns,
    open_ways,
    passage,
    slab_faces,
)
from optics.kernels.halfstack import S, abs2
from optics.kernels.problem import Sides

# Rows of work space: g, |g|^2 = G and factors of what is sent up, from `combine_radiated`; 1 - R
# and absorptance of the whole stack from below and above, T; then G times what goes to each
# destination of light sent down, and of light sent up.
G_RE, G_IM, G, SENT_UP = range(4)
LACK_B, LACK_T, LOSS_B, LOSS_T, THROUGH, DOWN = range(SENT_UP + 3, SENT_UP + 9)
UP = DOWN + COLUMNS
ROWS = UP + COLUMNS


class Outsides(NamedTuple):
    """What does not depend on the films, at the nodes of a panel."""

    bounces: NDArray[np.bool_]  # (nodes,) whether light comes back to the films and can leave
    faces: Floats  # (nodes, 2, 6) of unit flux into the slab: leaves, lost, comes back; the top's
    rows: Floats  # (nodes, 2, 2, COLUMNS) destinations of unit flux down, up without bounces
    beside: Floats  # (nodes, 2, 2) what the slab beside sends back if the bottom, top is matched
    goes: NDArray[np.bool_]  # (nodes, COLUMNS) which destinations anything can go to
    below: NDArray[np.bool_]  # (nodes,) whether the films may be lit from below


@inline
def row_of(w: Floats, row: int) -> Floats:
    """One row of work space; a number not known to the compiler has to be cut out, not added."""
    return w[row * BLOCK : (row + 1) * BLOCK]


@inline
def outsides(sides: Sides, u: Complexes) -> Outsides:
    """Look at what stands outside at real nodes u (nodes,)."""
    n = u.size
    found = Outsides(
        np.zeros(n, dtype=np.bool_), np.zeros((n, 2, 6)), np.zeros((n, 2, 2, COLUMNS)),
        np.zeros((n, 2, 2)), np.zeros((n, COLUMNS), dtype=np.bool_), np.zeros(n, dtype=np.bool_),
    )  # fmt: skip
    lines = (
        exit_line(sides.kind[0], sides.n_outer[0], sides.n_out[0]),
        exit_line(sides.kind[1], sides.n_outer[1], sides.n_out[1]),
    )
    for i in range(n):
        at = u[i].real
        returns = light_returns(sides, at)
        found.bounces[i] = returns and at < max(lines[0], lines[1])
        found.below[i] = sides.kind[0] == PLANAR and at < sides.n_outer[0]
        for pol in range(2):
            _note_node(sides, lines, pol, at, returns, found.faces[i, pol], found.rows[i, pol],
                       found.beside[i, pol])  # fmt: skip
            for column in range(COLUMNS):
                for way in range(2):
                    if found.rows[i, pol, way, column] != 0.0:
                        found.goes[i, column] = True
        found.goes[i, ABSORBED] = True
    return found


@inline
def _note_node(
    sides: Sides,
    lines: tuple[float, float],
    pol: int,
    u: float,
    returns: bool,
    faces: Floats,
    rows: Floats,
    beside: Floats,
) -> None:
    """Write down the rows of `Outsides` of one node and polarization."""
    once_b, s_b, p_b = slab_faces(sides.kind[0], sides.n_outer[0], sides.n_out[0], sides.loss[0], u)
    once_t, s_t, p_t = slab_faces(sides.kind[1], sides.n_outer[1], sides.n_out[1], sides.loss[1], u)
    once, rho = (once_b, once_t), (s_b, s_t) if pol == S else (p_b, p_t)
    # Nothing arrives beyond a light line.
    arrives_b = 1.0 if sides.kind[0] == ABSORBING or u < sides.n_outer[0] else 0.0
    arrives_t = 1.0 if sides.kind[1] == ABSORBING or u < sides.n_outer[1] else 0.0
    dark = (0.0, 0.0, 0.0, 0.0, 0.0)
    found = fates(open_ways(sides, u), once, rho, dark, arrives_b, arrives_t)
    for way in range(2):
        for k in range(COLUMNS - 1):
            rows[way, AIR_BOTTOM + k] = found[way][k]
    if not returns:
        return
    for side in range(2):
        leaves, lost, back = passage(rho[side], once[side])
        faces[3 * side], faces[3 * side + 1], faces[3 * side + 2] = leaves, lost, back
    beside[0] = beside_matched(u, sides.n_outer[0], lines[1], faces[5])
    beside[1] = beside_matched(u, sides.n_outer[1], lines[0], faces[2])


@inline
def arrivals(
    outside: Outsides,
    i: int,
    pol: int,
    up: Floats,
    down: Floats,
    phase: complex,
    w: Floats,
    lanes: int,
) -> None:
    """Fill rows DOWN and UP of w with destinations of a block's light at node i.

    Of those destinations that anything goes to; G times what goes there per |amplitude|^2.

    Parameters
    ----------
    up : float (KNOWN_OF_HALF,)
        The upper half.
    down : float (KNOWN_OF_HALF * BLOCK,)
        The block's lower halves.
    phase : complex
        exp(i kz d) of the emitter film.
    w : float (ROWS * BLOCK,)
        Work space, with G and g.
    lanes : int
        How many lower halves there are.
    """
    rows, beside, bounces = outside.rows[i, pol], outside.beside[i, pol], outside.bounces[i]
    for column in range(1, COLUMNS):
        if outside.goes[i, column] and (column >= MATCHED_BOTTOM or not bounces):
            inside = 1.0 if column == ABSORBED else 0.0
            from_up = rows[1, column] * up[OUT] + inside * up[LOSS]
            _arrive(column, rows[0, column], inside, from_up, down, w, lanes)
    if bounces or beside[0] > 0.0 or beside[1] > 0.0:
        _whole_stacks(outside.below[i], up, down, phase, w, lanes)
    if bounces:
        _bounce(outside.faces[i, pol], up, down, w, lanes)
    if beside[0] > 0.0:
        once, back = rows[0, MATCHED_BOTTOM] * up[OUT], beside[0]
        for p in range(lanes):
            passed = _beside(w[LACK_T * BLOCK + p], w[THROUGH * BLOCK + p], back)
            w[(UP + MATCHED_BOTTOM) * BLOCK + p] = w[G * BLOCK + p] * passed * once
    if beside[1] > 0.0:
        once, back = rows[1, MATCHED_TOP], beside[1]
        for p in range(lanes):
            passed = _beside(w[LACK_B * BLOCK + p], w[THROUGH * BLOCK + p], back)
            arrives = w[G * BLOCK + p] * down[OUT * BLOCK + p]
            w[(DOWN + MATCHED_TOP) * BLOCK + p] = arrives * passed * once


@inline
def _arrive(
    column: int, share: float, inside: float, from_up: float, down: Floats, w: Floats, lanes: int
) -> None:
    """Fill a destination's rows DOWN and UP with light that does not bounce."""
    to_down, to_up = row_of(w, DOWN + column), row_of(w, UP + column)
    for p in range(lanes):
        g = w[G * BLOCK + p]
        to_down[p] = g * (share * down[OUT * BLOCK + p] + inside * down[LOSS * BLOCK + p])
        to_up[p] = g * from_up


@inline
def _beside(lack: float, through: float, back: float) -> float:
    """What passes the films after bounces at one slab, per first arrival there: see `bounces`."""
    det = lack + (1.0 - lack) * (1.0 - back)
    return 0.0 if det <= STUCK else through * back / det


@inline
def _whole_stacks(
    below: bool, up: Floats, down: Floats, phase: complex, w: Floats, lanes: int
) -> None:
    """Fill rows LACK_B to THROUGH; docs/theory.md, section 5, and `exits.bounces`."""
    turn, size = phase * phase, abs2(phase)
    a = complex(up[R_RE], up[R_IM]) * turn
    way = complex(up[WAY_RE], up[WAY_IM]) * turn
    cross = complex(up[CROSS_RE], up[CROSS_IM]) * turn.conjugate()
    a_r, a_i, way_r, way_i, cross_r, cross_i = (
        a.real,
        a.imag,
        way.real,
        way.imag,
        cross.real,
        cross.imag,
    )
    above_r, above_i, above = up[BACK_RE], up[BACK_IM], up[OUTSIDE]
    far_loss, own_loss = size * up[LOSS], abs2(a)
    down_loss, back_loss = size * up[IN], size * size * up[IN_LOSS]
    # T is the same both ways.
    by_in, by_out = (size * up[OUT], 0.0) if below else (0.0, size * up[IN])
    for p in range(lanes):
        gr, gi, g = w[G_RE * BLOCK + p], w[G_IM * BLOCK + p], w[G * BLOCK + p]
        xr, xi = a_r * gr - a_i * gi, a_r * gi + a_i * gr
        ways_r, ways_i = down[WAY_RE * BLOCK + p], down[WAY_IM * BLOCK + p]
        r = down[BACK_RE * BLOCK + p] + (ways_r * xr - ways_i * xi)
        i = down[BACK_IM * BLOCK + p] + (ways_r * xi + ways_i * xr)
        lost = far_loss * down[IN * BLOCK + p] + own_loss * down[IN_LOSS * BLOCK + p]
        lost = down[OUTSIDE * BLOCK + p] + g * lost
        lost += xr * down[CROSS_RE * BLOCK + p] + xi * down[CROSS_IM * BLOCK + p]
        through = g * (by_in * down[IN * BLOCK + p] + by_out * down[OUT * BLOCK + p])
        lack = 1.0 - (r * r + i * i)
        w[LACK_B * BLOCK + p] = through + lost if lack < TINY_LOSS else lack
        w[LOSS_B * BLOCK + p], w[THROUGH * BLOCK + p] = lost, through
    for p in range(lanes):
        gr, gi, g = w[G_RE * BLOCK + p], w[G_IM * BLOCK + p], w[G * BLOCK + p]
        br, bi = down[R_RE * BLOCK + p], down[R_IM * BLOCK + p]
        xr, xi = br * gr - bi * gi, br * gi + bi * gr
        r, i = above_r + (way_r * xr - way_i * xi), above_i + (way_r * xi + way_i * xr)
        lost = down_loss * down[LOSS * BLOCK + p] + back_loss * down[SIZE * BLOCK + p]
        lost = above + g * lost + (xr * cross_r + xi * cross_i)
        lack = 1.0 - (r * r + i * i)
        w[LACK_T * BLOCK + p] = w[THROUGH * BLOCK + p] + lost if lack < TINY_LOSS else lack
        w[LOSS_T * BLOCK + p] = lost


@inline
def _bounce(faces: Floats, up: Floats, down: Floats, w: Floats, lanes: int) -> None:
    """Fill rows of light that bounces between slabs and films: see `exits.bounces`."""
    leaves_b, lost_b, back_b = faces[0], faces[1], faces[2]
    leaves_t, lost_t, back_t = faces[3], faces[4], faces[5]
    up_out, up_loss = up[OUT], up[LOSS]
    for p in range(lanes):
        g, through = w[G * BLOCK + p], w[THROUGH * BLOCK + p]
        lack_b, lack_t = w[LACK_B * BLOCK + p], w[LACK_T * BLOCK + p]
        diag_b = lack_b + (1.0 - lack_b) * (1.0 - back_b)
        diag_t = lack_t + (1.0 - lack_t) * (1.0 - back_t)
        det = diag_b * diag_t - through * through * back_b * back_t
        stuck = det <= STUCK
        per_det = 1.0 / (1.0 if stuck else det)
        diag_b, diag_t = 1.0 if stuck else diag_b, 1.0 if stuck else diag_t
        through = 0.0 if stuck else through
        p_b, p_t = g * down[OUT * BLOCK + p] * per_det, g * up_out * per_det
        bb, tb, bt, tt = diag_t * p_b, through * back_b * p_b, through * back_t * p_t, diag_b * p_t
        gone_b = lost_b + back_b * w[LOSS_B * BLOCK + p]
        gone_t = lost_t + back_t * w[LOSS_T * BLOCK + p]
        w[(DOWN + AIR_BOTTOM) * BLOCK + p], w[(UP + AIR_BOTTOM) * BLOCK + p] = (
            bb * leaves_b,
            bt * leaves_b,
        )
        w[(DOWN + AIR_TOP) * BLOCK + p], w[(UP + AIR_TOP) * BLOCK + p] = (
            tb * leaves_t,
            tt * leaves_t,
        )
        kept = g * down[LOSS * BLOCK + p]
        w[(DOWN + ABSORBED) * BLOCK + p] = kept + (bb * gone_b + tb * gone_t)
        w[(UP + ABSORBED) * BLOCK + p] = g * up_loss + (bt * gone_b + tt * gone_t)
