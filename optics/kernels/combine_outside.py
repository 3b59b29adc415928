"""First arrivals outside many devices, and what becomes of them, at one real node.

As `source.share_out`, with everything that does not depend on the films done once a node.
"""

from typing import NamedTuple

from optics.kernels.arrays import Floats
from optics.kernels.combine_tables import HalfTable
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
    bounces,
    exit_line,
    face_reflectance,
    once_through,
    passage,
    whole_stack,
)
from optics.kernels.problem import Sides
from optics.kernels.source import light_returns, share_out


class Faces(NamedTuple):
    """What the slabs do with light of one in-plane wavevector and polarization."""

    leaves: bool  # whether it can leave somewhere
    bottom: tuple[float, float, float]  # of unit flux into the slab: leaves, lost, comes back
    top: tuple[float, float, float]
    once: tuple[float, float]  # transmittance of one pass through the slab: bottom, top
    beside: tuple[float, float]  # what the other slab sends back if this one is matched


@inline
def faces(sides: Sides, pol: int, u: float) -> Faces:
    """Everything about the outside that does not depend on the films."""
    kind_b, kind_t = sides.kind[0], sides.kind[1]
    n_b, n_t = float(sides.n_outer[0]), float(sides.n_outer[1])
    out_b, out_t = float(sides.n_out[0]), float(sides.n_out[1])
    line_b, line_t = exit_line(kind_b, n_b, out_b), exit_line(kind_t, n_t, out_t)
    once_b = once_through(u, n_b, float(sides.loss[0]))
    once_t = once_through(u, n_t, float(sides.loss[1]))
    rho_b, rho_t = 1.0, 1.0
    if kind_b == PLANAR and u < n_b:
        rho_b = face_reflectance(pol, u, n_b, out_b)
    if kind_t == PLANAR and u < n_t:
        rho_t = face_reflectance(pol, u, n_t, out_t)
    bottom, top = passage(kind_b, rho_b, once_b), passage(kind_t, rho_t, once_t)
    beside_b = top[2] if u < max(n_b, line_t) else 0.0
    beside_t = bottom[2] if u < max(n_t, line_b) else 0.0
    return Faces(u < max(line_b, line_t), bottom, top, (once_b, once_t), (beside_b, beside_t))


@inline
def first_arrivals(
    sides: Sides,
    pol: int,
    u: float,
    up: HalfTable,
    down: HalfTable,
    n: int,
    iu: int,
    low: int,
    a: complex,
    phase: complex,
    row: Floats,
    shares: Floats,
) -> None:
    """Destinations per |amplitude|^2 sent down, up by every point of a row.

    Parameters
    ----------
    n, iu, low : int
        Node, upper half, first of the lower halves.
    a, phase : complex
        Reflection of the upper half, exp(i kz d) of the emitter film.
    row : float (2, COLUMNS)
        Work space.
    shares : float (2, COLUMNS, l), output
        Row 0 for what is sent down.
    """
    shares[:, :, :] = 0.0
    points = shares.shape[2]
    p_t, loss_t = up.out[n, pol, iu], up.loss[n, pol, iu]
    for p in range(points):
        shares[0, ABSORBED, p] = down.loss[n, pol, low + p]
        shares[1, ABSORBED, p] = loss_t
    if light_returns(sides, u):
        _with_returns(sides, faces(sides, pol, u), pol, up, down, n, iu, low, a, phase, shares)
        return
    # Where no light comes back, what happens outside does not depend on the films.
    row[:, :] = 0.0
    share_out(sides, pol, u, (0.0, 0.0, 0.0, 0.0, 0.0), 1.0, 1.0, row)
    for k in range(COLUMNS):
        if row[0, k] != 0.0:
            for p in range(points):
                shares[0, k, p] += row[0, k] * down.out[n, pol, low + p]
        if row[1, k] != 0.0:
            for p in range(points):
                shares[1, k, p] += row[1, k] * p_t


@inline
def _with_returns(
    sides: Sides,
    face: Faces,
    pol: int,
    up: HalfTable,
    down: HalfTable,
    n: int,
    iu: int,
    low: int,
    a: complex,
    phase: complex,
    shares: Floats,
) -> None:
    """Add destinations of light that bounces between slabs and films, see `first_arrivals`."""
    p_t, flux_t = up.out[n, pol, iu], up.flux[n, pol, iu]
    ports_up = (up.ports[n, pol, 0, iu], up.ports[n, pol, 1, iu], up.ports[n, pol, 2, iu])
    form_up = (up.loss[n, pol, iu], up.outside[n, pol, iu], up.cross[n, pol, iu])
    slab_b = sides.kind[0] == PLANAR or sides.kind[0] == MATCHED
    slab_t = sides.kind[1] == PLANAR or sides.kind[1] == MATCHED
    from_bottom = sides.kind[0] == PLANAR
    from_top = sides.kind[1] == PLANAR and flux_t > 0.0
    for p in range(shares.shape[2]):
        d = low + p
        b = complex(down.r[n, pol, 0, d], down.r[n, pol, 1, d])
        flux_b, p_b, loss_b = down.flux[n, pol, d], down.out[n, pol, d], down.loss[n, pol, d]
        rb, rt, through, ab, at = 1.0, 1.0, 0.0, 0.0, 0.0
        if from_top:
            out_b = down.ports[n, pol, 0, d]
            rt, through, at = whole_stack(
                phase, b, a, (flux_b, flux_t), out_b, ports_up, loss_b, form_up
            )
        if from_bottom and flux_b > 0.0:
            ports = (down.ports[n, pol, 0, d], down.ports[n, pol, 1, d], down.ports[n, pol, 2, d])
            form = (loss_b, down.outside[n, pol, d], down.cross[n, pol, d])
            rb, through, ab = whole_stack(
                phase, a, b, (flux_t, flux_b), ports_up[0], ports, form_up[0], form
            )
        stack = (rb, rt, through, ab, at)
        if face.leaves:
            bb, bt, tb, tt = bounces(face.bottom[2], face.top[2], stack)
            lost_b = face.bottom[1] + face.bottom[2] * ab
            lost_t = face.top[1] + face.top[2] * at
            shares[0, AIR_BOTTOM, p] += bb * p_b * face.bottom[0]
            shares[1, AIR_BOTTOM, p] += bt * p_t * face.bottom[0]
            shares[0, AIR_TOP, p] += tb * p_b * face.top[0]
            shares[1, AIR_TOP, p] += tt * p_t * face.top[0]
            shares[0, ABSORBED, p] += (bb * lost_b + tb * lost_t) * p_b
            shares[1, ABSORBED, p] += (bt * lost_b + tt * lost_t) * p_t
        else:
            # First arrivals; `share_out` names them alike.
            shares[0, ABSORBED if sides.kind[0] == ABSORBING else SUBSTRATE, p] += p_b
            shares[1, ABSORBED if sides.kind[1] == ABSORBING else COVER, p] += p_t
        if slab_b:
            bb, bt, tb, tt = bounces(0.0, face.beside[0], stack)
            shares[0, MATCHED_BOTTOM, p] += bb * p_b * face.once[0]
            shares[1, MATCHED_BOTTOM, p] += bt * p_t * face.once[0]
        if slab_t:
            bb, bt, tb, tt = bounces(face.beside[1], 0.0, stack)
            shares[0, MATCHED_TOP, p] += tb * p_b * face.once[1]
            shares[1, MATCHED_TOP, p] += tt * p_t * face.once[1]
