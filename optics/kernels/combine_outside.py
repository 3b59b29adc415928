"""First arrivals outside a block of devices, and what becomes of them, at one real node.

As `source.share_out`, with everything that does not depend on the films done once a node.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Complexes, Floats, Integers
from optics.kernels.combine import BLOCK
from optics.kernels.combine_tables import (
    CROSS_IM,
    CROSS_RE,
    FLUX,
    LOSS,
    OUT,
    OUTSIDE,
    R_IM,
    R_OUT_IM,
    R_OUT_RE,
    R_RE,
    T_IN_IM,
    T_IN_RE,
    T_OUT_IM,
    T_OUT_RE,
)
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

# Rows of `combine_tables` up to those that are needed of a half: by itself, passed by light from
# the other side, and lit from its own side too.
_ALONE, _PASSED, _LIT = LOSS + 1, T_OUT_IM + 1, CROSS_IM + 1


class Faces(NamedTuple):
    """What the slabs do with light of one in-plane wavevector and polarization."""

    leaves: bool  # whether it can leave somewhere
    bottom: tuple[float, float, float]  # of unit flux into the slab: leaves, lost, comes back
    top: tuple[float, float, float]
    once: tuple[float, float]  # transmittance of one pass through the slab: bottom, top
    beside: tuple[float, float]  # what the other slab sends back if this one is matched


class Outsides(NamedTuple):
    """What does not depend on the films, at the nodes of a panel."""

    returns: NDArray[np.bool_]  # (nodes,) whether light comes back to the films
    faces: Floats  # (nodes, 2, 11) where it does: the numbers of `Faces` in their order
    rows: Floats  # (nodes, 2, 2, COLUMNS) where it does not: destinations of unit flux down, up
    known: Integers  # (nodes,) how many rows of `combine_tables` are needed of the lower halves
    goes: NDArray[np.bool_]  # (nodes, COLUMNS) which destinations anything can go to


@inline
def outsides(sides: Sides, u: Complexes) -> Outsides:
    """Look at what stands outside at real nodes u (nodes,)."""
    n = u.size
    found = Outsides(
        np.zeros(n, dtype=np.bool_),
        np.zeros((n, 2, 11)),
        np.zeros((n, 2, 2, COLUMNS)),
        np.zeros(n, dtype=np.int64),
        np.zeros((n, COLUMNS), dtype=np.bool_),
    )
    from_bottom = sides.kind[0] == PLANAR
    for i in range(n):
        found.returns[i] = light_returns(sides, u[i].real)
        found.known[i] = _ALONE if not found.returns[i] else _LIT if from_bottom else _PASSED
        found.goes[i, ABSORBED] = True
        for pol in range(2):
            if found.returns[i]:
                _note_faces(sides, pol, u[i].real, found.faces[i, pol])
            else:
                nothing = (0.0, 0.0, 0.0, 0.0, 0.0)
                share_out(sides, pol, u[i].real, nothing, 1.0, 1.0, found.rows[i, pol])
                for k in range(COLUMNS):
                    if found.rows[i, pol, 0, k] != 0.0 or found.rows[i, pol, 1, k] != 0.0:
                        found.goes[i, k] = True
        if found.returns[i]:
            leaves = found.faces[i, 0, 0] > 0.0
            found.goes[i, AIR_BOTTOM] = found.goes[i, AIR_TOP] = leaves
            found.goes[i, SUBSTRATE] = found.goes[i, COVER] = not leaves
            found.goes[i, MATCHED_BOTTOM] = sides.kind[0] in (PLANAR, MATCHED)
            found.goes[i, MATCHED_TOP] = sides.kind[1] in (PLANAR, MATCHED)
    return found


@inline
def _note_faces(sides: Sides, pol: int, u: float, note: Floats) -> None:
    """Write down `Faces`."""
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
    note[0] = 1.0 if u < max(line_b, line_t) else 0.0
    note[1], note[2], note[3] = passage(kind_b, rho_b, once_b)
    note[4], note[5], note[6] = passage(kind_t, rho_t, once_t)
    note[7], note[8] = once_b, once_t
    note[9] = note[6] if u < max(n_b, line_t) else 0.0
    note[10] = note[3] if u < max(n_t, line_b) else 0.0


@inline
def _read_faces(note: Floats) -> Faces:
    return Faces(
        note[0] > 0.0, (note[1], note[2], note[3]), (note[4], note[5], note[6]),
        (note[7], note[8]), (note[9], note[10]),
    )  # fmt: skip


@inline
def first_arrivals(
    sides: Sides,
    outside: Outsides,
    i: int,
    pol: int,
    up: Floats,
    half: Floats,
    phase: complex,
    stack: Floats,
    shares: Floats,
) -> None:
    """Destinations per |amplitude|^2 sent down, up by every device of a block at node i.

    Parameters
    ----------
    up : float (KNOWN_OF_HALF,)
        The upper half.
    half : float (KNOWN_OF_HALF, BLOCK)
        The block's lower halves.
    phase : complex
        exp(i kz d) of the emitter film.
    stack : float (5, BLOCK)
        Work space.
    shares : float (2, COLUMNS, BLOCK), output
        Row 0 for what is sent down; of those destinations that anything goes to.
    """
    if outside.returns[i]:
        for p in range(BLOCK):
            shares[0, ABSORBED, p] = half[LOSS, p]
            shares[1, ABSORBED, p] = up[LOSS]
        _whole_stacks(sides, up, half, phase, stack)
        _add_returning(sides, _read_faces(outside.faces[i, pol]), up[OUT], half[OUT], stack, shares)
        return
    # Where no light comes back, what happens outside does not depend on the films.
    to_down, to_up = outside.rows[i, pol, 0], outside.rows[i, pol, 1]
    for k in range(COLUMNS):
        if not outside.goes[i, k]:
            continue
        inside = 1.0 if k == ABSORBED else 0.0
        from_up, share = to_up[k] * up[OUT] + inside * up[LOSS], to_down[k]
        for p in range(BLOCK):
            shares[0, k, p] = share * half[OUT, p] + inside * half[LOSS, p]
            shares[1, k, p] = from_up


@inline
def _whole_stacks(sides: Sides, up: Floats, half: Floats, phase: complex, stack: Floats) -> None:
    """Fill rows R from the bottom, R from the top, T, A from the bottom, A from the top."""
    a, t_up = complex(up[R_RE], up[R_IM]), complex(up[T_OUT_RE], up[T_OUT_IM])
    flux_t, loss_t = up[FLUX], up[LOSS]
    for p in range(BLOCK):
        stack[0, p], stack[1, p] = 1.0, 1.0
        stack[2, p], stack[3, p], stack[4, p] = 0.0, 0.0, 0.0
    if sides.kind[1] == PLANAR and flux_t > 0.0:
        ports = (t_up, complex(up[T_IN_RE], up[T_IN_IM]), complex(up[R_OUT_RE], up[R_OUT_IM]))
        form = (loss_t, up[OUTSIDE], complex(up[CROSS_RE], up[CROSS_IM]))
        for p in range(BLOCK):
            b, t = (
                complex(half[R_RE, p], half[R_IM, p]),
                complex(half[T_OUT_RE, p], half[T_OUT_IM, p]),
            )
            r, through, absorbed = whole_stack(
                phase, b, a, (half[FLUX, p], flux_t), t, ports, half[LOSS, p], form
            )
            stack[1, p], stack[2, p], stack[4, p] = r, through, absorbed
    if sides.kind[0] == PLANAR:
        for p in range(BLOCK):
            b, t = (
                complex(half[R_RE, p], half[R_IM, p]),
                complex(half[T_OUT_RE, p], half[T_OUT_IM, p]),
            )
            t_in, r_out = (
                complex(half[T_IN_RE, p], half[T_IN_IM, p]),
                complex(half[R_OUT_RE, p], half[R_OUT_IM, p]),
            )
            form = (half[LOSS, p], half[OUTSIDE, p], complex(half[CROSS_RE, p], half[CROSS_IM, p]))
            flux_b = half[FLUX, p]
            lit = flux_b > 0.0
            r, through, absorbed = whole_stack(
                phase, a, b, (flux_t, flux_b if lit else 1.0), t_up, (t, t_in, r_out), loss_t, form
            )
            stack[0, p] = r if lit else stack[0, p]
            stack[2, p] = through if lit else stack[2, p]
            stack[3, p] = absorbed if lit else stack[3, p]


@inline
def _add_trapped(sides: Sides, p_t: float, out: Floats, shares: Floats) -> None:
    """First arrivals of light that cannot leave; `share_out` names them alike."""
    shares[:, SUBSTRATE] = 0.0
    shares[:, COVER] = 0.0
    to_b = ABSORBED if sides.kind[0] == ABSORBING else SUBSTRATE
    to_t = ABSORBED if sides.kind[1] == ABSORBING else COVER
    for p in range(BLOCK):
        shares[0, to_b, p] += out[p]
        shares[1, to_t, p] += p_t


@inline
def _add_returning(
    sides: Sides, face: Faces, p_t: float, out: Floats, stack: Floats, shares: Floats
) -> None:
    """Add destinations of light that bounces between slabs and films.

    out (BLOCK,), p_t: flux carried out below and above; stack of `_whole_stacks`.
    """
    slab_b = sides.kind[0] == PLANAR or sides.kind[0] == MATCHED
    slab_t = sides.kind[1] == PLANAR or sides.kind[1] == MATCHED
    out_b, lost_b, back_b = face.bottom
    out_t, lost_t, back_t = face.top
    if not face.leaves:
        _add_trapped(sides, p_t, out, shares)
    for p in range(BLOCK if face.leaves else 0):
        p_b = out[p]
        powers = (stack[0, p], stack[1, p], stack[2, p], stack[3, p], stack[4, p])
        bb, bt, tb, tt = bounces(back_b, back_t, powers)
        gone_b, gone_t = lost_b + back_b * powers[3], lost_t + back_t * powers[4]
        shares[0, AIR_BOTTOM, p] = bb * p_b * out_b
        shares[1, AIR_BOTTOM, p] = bt * p_t * out_b
        shares[0, AIR_TOP, p] = tb * p_b * out_t
        shares[1, AIR_TOP, p] = tt * p_t * out_t
        shares[0, ABSORBED, p] += (bb * gone_b + tb * gone_t) * p_b
        shares[1, ABSORBED, p] += (bt * gone_b + tt * gone_t) * p_t
    if slab_b:
        for p in range(BLOCK):
            powers = (stack[0, p], stack[1, p], stack[2, p], stack[3, p], stack[4, p])
            bb, bt, tb, tt = bounces(0.0, face.beside[0], powers)
            shares[0, MATCHED_BOTTOM, p] = bb * out[p] * face.once[0]
            shares[1, MATCHED_BOTTOM, p] = bt * p_t * face.once[0]
    if slab_t:
        for p in range(BLOCK):
            powers = (stack[0, p], stack[1, p], stack[2, p], stack[3, p], stack[4, p])
            bb, bt, tb, tt = bounces(face.beside[1], 0.0, powers)
            shares[0, MATCHED_TOP, p] = tb * out[p] * face.once[1]
            shares[1, MATCHED_TOP, p] = tt * p_t * face.once[1]
