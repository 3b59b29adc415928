"""What becomes of light that reaches the outer media: slab faces, bounces, first arrivals.

Slabs are thick and incoherent, so intensities add: light goes back and forth between the slab
faces and the film stack, a geometric series, solved for both sides together.
"""

import math
from typing import NamedTuple

from optics.kernels.arrays import Complexes, Floats, StackPowers
from optics.kernels.compiled import borrowing, rowwise, scalar
from optics.kernels.elementary import decay
from optics.kernels.halfstack import S
from optics.kernels.problem import Sides
from optics.kernels.rules import NODES

#: Power by column, AIR_BOTTOM to MATCHED_TOP.
Fate = tuple[float, float, float, float, float, float, float]

# What stands outside the films on one side.
OPEN, PLANAR, MATCHED, ABSORBING = 0, 1, 2, 3

# Columns of everything that is integrated on the real axis.
TOTAL, AIR_BOTTOM, AIR_TOP, SUBSTRATE, COVER, ABSORBED, MATCHED_BOTTOM, MATCHED_TOP = range(8)
COLUMNS = 8

# Where 1 - R falls below this, rounding of R shows; then T + A says the same, exactly.
TINY_LOSS = 1e-8
# Light in a slab between perfect mirrors has nowhere to go; it is left where it arrived.
STUCK = 1e-280


@scalar
def face_reflectances(u: float, n_slab: float, n_out: float) -> tuple[float, float]:
    """Fresnel reflectances (s, p) of a slab's outer face at wavevector u; 1 beyond its line."""
    if u >= n_out or u >= n_slab:
        return 1.0, 1.0
    y1 = math.sqrt(n_slab * n_slab - u * u)
    y2 = math.sqrt(n_out * n_out - u * u)
    s = (y1 - y2) / (y1 + y2)
    y1 *= n_out * n_out
    y2 *= n_slab * n_slab
    p = (y1 - y2) / (y1 + y2)
    return s * s, p * p


@borrowing
def face_reflectance(pol: int, u: float, n_slab: float, n_out: float) -> float:
    """One polarization of `face_reflectances`."""
    s, p = face_reflectances(u, n_slab, n_out)
    return s if pol == S else p


@borrowing
def exit_line(kind: int, n_outer: float, n_out: float) -> float:
    """In-plane wavevector below which light can leave on this side; 0 if it never can."""
    if kind == ABSORBING:
        return 0.0
    return n_outer if kind == MATCHED else n_out


@scalar
def once_through(u: float, n_outer: float, loss: float) -> float:
    """Transmittance of one pass through a slab by Beer-Lambert; loss = 4 pi k d / lambda."""
    if u >= n_outer:
        return 0.0
    return 1.0 if loss == 0.0 else decay(loss / math.sqrt(1.0 - (u / n_outer) ** 2))


@scalar
def passage(rho: float, once: float) -> tuple[float, float, float]:
    """Split of unit flux that enters an outer medium: (leaves, absorbed there, comes back).

    rho, once : reflectance of the outer face and transmittance of one pass, of `slab_faces`.
    """
    return once * (1.0 - rho), (1.0 - once) * (1.0 + rho * once), once * once * rho


@scalar
def beside_matched(u: float, n_outer: float, other_line: float, other_back: float) -> float:
    """What the other slab sends back while this one, of index n_outer, stands `matched`.

    Beyond that slab's index and the other side's exit line all light counts as trapped.
    """
    return other_back if u < max(n_outer, other_line) else 0.0


@scalar
def bounces(back_b: float, back_t: float, stack: StackPowers) -> tuple[float, float, float, float]:
    """Total fluxes into the outer media per first arrival there.

    Returns
    -------
    bottom from bottom, bottom from top, top from bottom, top from top : float
    """
    r_b, r_t, through, a_b, a_t = stack
    lack_b, lack_t = 1.0 - r_b, 1.0 - r_t
    lack_b = through + a_b if lack_b < TINY_LOSS else lack_b
    lack_t = through + a_t if lack_t < TINY_LOSS else lack_t
    # 1 - R g as a sum of non-negative terms, so that nothing cancels.
    diag_b = lack_b + (1.0 - lack_b) * (1.0 - back_b)
    diag_t = lack_t + (1.0 - lack_t) * (1.0 - back_t)
    det = diag_b * diag_t - through * through * back_b * back_t
    # Choices rather than branches, so that loops vectorize.
    stuck = det <= STUCK
    inv = 1.0 / (1.0 if stuck else det)
    cross = 0.0 if stuck else through * inv
    return (
        1.0 if stuck else diag_t * inv,
        cross * back_t,
        cross * back_b,
        1.0 if stuck else diag_b * inv,
    )


@scalar
def slab_faces(
    kind: int, n_outer: float, n_out: float, loss: float, u: float
) -> tuple[float, float, float]:
    """One side's transmittance of one pass, and reflectance of its outer face for s and p.

    Nothing outside the films counts as a slab without loss or face, absorbing surroundings as
    one that nothing passes.
    """
    if kind == OPEN:
        return 1.0, 0.0, 0.0
    if kind == ABSORBING:
        return 0.0, 0.0, 0.0
    once = once_through(u, n_outer, loss)
    if kind == MATCHED:
        return once, 0.0, 0.0
    rho_s, rho_p = face_reflectances(u, n_outer, n_out)
    return once, rho_s, rho_p


@rowwise
def fill_faces(
    kind: int, n_outer: float, n_out: float, loss: float, u: Complexes, faces: Floats
) -> None:
    """As `slab_faces` at all nodes: faces (3, NODES) as one row."""
    for i in range(NODES):
        once, rho_s, rho_p = slab_faces(kind, n_outer, n_out, loss, u[i].real)
        faces[i], faces[NODES + i], faces[2 * NODES + i] = once, rho_s, rho_p


class Ways(NamedTuple):
    """What is open to light of one in-plane wavevector, the same between light lines: 1 or 0."""

    out: float  # leaves on some side
    back_from_top: float  # comes back from the top where the bottom slab has a hemisphere
    back_from_bottom: float
    slab_b: float  # there is a slab below
    slab_t: float
    dark_b: float  # there are absorbing surroundings below
    dark_t: float


@borrowing
def open_ways(sides: Sides, u: float) -> Ways:
    """Compare a wavevector with the light lines of both sides."""
    kind_b, kind_t = sides.kind[0], sides.kind[1]
    n_b, n_t = sides.n_outer[0], sides.n_outer[1]
    line_b, line_t = exit_line(kind_b, n_b, sides.n_out[0]), exit_line(kind_t, n_t, sides.n_out[1])
    return Ways(
        1.0 if u < max(line_b, line_t) else 0.0,
        beside_matched(u, n_b, line_t, 1.0),
        beside_matched(u, n_t, line_b, 1.0),
        1.0 if kind_b in (PLANAR, MATCHED) else 0.0,
        1.0 if kind_t in (PLANAR, MATCHED) else 0.0,
        1.0 if kind_b == ABSORBING else 0.0,
        1.0 if kind_t == ABSORBING else 0.0,
    )


@scalar
def fates(
    ways: Ways,
    once: tuple[float, float],
    rho: tuple[float, float],
    stack: StackPowers,
    p_b: float,
    p_t: float,
) -> tuple[Fate, Fate]:
    """Where light goes that arrives first with p_b in the bottom, or p_t in the top medium.

    Parameters
    ----------
    ways : from `open_ways`
    once, rho : (bottom, top)
        Transmittance of one pass and reflectance of the outer face, from `slab_faces`.
    stack
        Whole stack lit from outside.

    Returns
    -------
    (Fate, Fate)
        Of p_b and of p_t: the columns AIR_BOTTOM to MATCHED_TOP.
    """
    out_b, lost_b, back_b = passage(rho[0], once[0])
    out_t, lost_t, back_t = passage(rho[1], once[1])
    bb, bt, tb, tt = bounces(back_b, back_t, stack)
    lost_b += back_b * stack[3]
    lost_t += back_t * stack[4]
    # The same light if one slab's face were replaced by an index-matched hemisphere.
    mbb, mbt, _, _ = bounces(0.0, back_t * ways.back_from_top, stack)
    _, _, mtb, mtt = bounces(back_b * ways.back_from_bottom, 0.0, stack)
    once_b, once_t = once[0] * ways.slab_b, once[1] * ways.slab_t
    # Trapped light counts at first arrival in a slab, or as swallowed by absorbing surroundings.
    free_b, free_t = p_b * ways.out, p_t * ways.out
    caught_b, caught_t = p_b - free_b, p_t - free_t
    return (
        (
            bb * free_b * out_b,
            tb * free_b * out_t,
            caught_b * (1.0 - ways.dark_b),
            0.0,
            bb * free_b * lost_b + tb * free_b * lost_t + caught_b * ways.dark_b,
            mbb * p_b * once_b,
            mtb * p_b * once_t,
        ),
        (
            bt * free_t * out_b,
            tt * free_t * out_t,
            0.0,
            caught_t * (1.0 - ways.dark_t),
            bt * free_t * lost_b + tt * free_t * lost_t + caught_t * ways.dark_t,
            mbt * p_t * once_b,
            mtt * p_t * once_t,
        ),
    )


@borrowing
def share_out(
    sides: Sides, pol: int, u: float, stack: StackPowers, p_b: float, p_t: float, shares: Floats
) -> None:
    """As `fates`, from the wavevector alone.

    shares : float (2, COLUMNS), added to; row 0 for p_b, row 1 for p_t.
    """
    once_b, s_b, p_b_face = slab_faces(
        sides.kind[0], sides.n_outer[0], sides.n_out[0], sides.loss[0], u
    )
    once_t, s_t, p_t_face = slab_faces(
        sides.kind[1], sides.n_outer[1], sides.n_out[1], sides.loss[1], u
    )
    rho = (s_b, s_t) if pol == S else (p_b_face, p_t_face)
    found = fates(open_ways(sides, u), (once_b, once_t), rho, stack, p_b, p_t)
    for row in range(2):
        for k in range(COLUMNS - 1):
            shares[row, 1 + k] += found[row][k]


@borrowing
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
