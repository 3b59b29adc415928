"""Rates of change of a half stack's reflections and transmissions.

A film changes the amplitude S that comes out of one end per unit sent into another by
    Y dS = (i/2) integral [ d(kz Y) psi_a psi_b - d(kz / Y) phi_a phi_b ] dz,
psi and phi the two continuous fields (E and H, or H and E) of the waves sent in at both ends in
question, Y the admittance where S comes out; from the reciprocity of both solutions. Neither
kz Y nor kz / Y has a root in it, so a film at its own light line is nothing special. One pass
over the films gives the rates for every film, thickness, index and in-plane wavevector.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Flags, Floats
from optics.kernels.compiled import borrowing, inline
from optics.kernels.halfstack import S, abs2, reciprocal
from optics.kernels.problem import Half
from optics.kernels.rules import NODES
from optics.kernels.variation import HalfRates, Rates
from optics.kernels.varied_solved import Solved

# Waves sent in: from the emitter film at both ends of the pair, from either end, from outside.
INSIDE, THROUGH, OUTSIDE = 0, 1, 2
FORMS = 3

# Up to this |kz d|^2 the mean of exp(2 i kz z) over a film is taken from its series.
_THIN = 1e-6


class Response(NamedTuple):
    """Rates of one half stack at the nodes of a panel; the nodes' own motion is included."""

    kz: Complexes  # (2, p, n) in the emitter film
    y_in: Complexes  # (2, p, n) admittance of the emitter film
    y_out: Complexes  # (2, p, n) of the outer medium
    r: Complexes  # (2, p, n) reflection seen from the emitter film
    t: Complexes  # (2, p, n) from the emitter film out
    t_in: Complexes  # (2, p, n) from outside into the emitter film
    r_out: Complexes  # (2, p, n) reflection seen from outside
    forms: Complexes  # (FORMS, p, n) work space: Y dS by films
    terms: Complexes  # (4, FORMS, n) work space: rates by normal, in-plane eps, thickness; by u
    waves: Complexes  # (4, n) work space: both waves in a film, lit from inside and outside


class Moves(NamedTuple):
    """What changes along each of p directions, so that the rest need not be computed."""

    nodes: Flags  # (p,) the nodes move, or the emitter film's index changes
    outer: Flags  # (p,) that, or the index of an outer medium changes
    sides: Flags  # (p,) or whatever else stands outside


@inline
def response_space(directions: int) -> Response:
    """Work arrays for so many directions."""
    found = np.zeros((7, 2, directions, NODES), dtype=np.complex128)
    return Response(
        found[0],
        found[1],
        found[2],
        found[3],
        found[4],
        found[5],
        found[6],
        np.zeros((FORMS, directions, NODES), dtype=np.complex128),
        np.zeros((4, FORMS, NODES), dtype=np.complex128),
        np.zeros((4, NODES), dtype=np.complex128),
    )


@inline
def moves_space(directions: int) -> Moves:
    """Flags for so many directions."""
    flags = np.zeros((3, directions), dtype=np.bool_)
    return Moves(flags[0], flags[1], flags[2])


@borrowing
def find_moves(rates: Rates, ends: Floats, moves: Moves) -> None:
    """Fill the flags of a path whose ends move at the rates ends (p, 2)."""
    for p in range(ends.shape[0]):
        nodes = ends[p, 0] != 0.0 or ends[p, 1] != 0.0
        nodes |= rates.eps[p, 0] != 0.0 or rates.eps[p, 1] != 0.0
        outer = nodes or rates.up.eps_o[p, -1] != 0.0 or rates.down.eps_o[p, -1] != 0.0
        sides = outer
        for side in range(2):
            sides |= rates.n_out[p, side] != 0.0 or rates.loss[p, side] != 0.0
        moves.nodes[p], moves.outer[p], moves.sides[p] = nodes, outer, sides


@borrowing
def respond(
    u: Complexes,
    u_rate: Floats,
    half: Half,
    rates: HalfRates,
    moves: Moves,
    solved: Solved,
    forms: int,
    found: Response,
) -> None:
    """Rates of reflection and transmission of a half stack.

    Parameters
    ----------
    u : complex (NODES,)
    u_rate : float (p, NODES)
        Motion of the nodes.
    solved : Solved
        Lit outward; with more than one form also inward.
    forms : int
        1: only r. THROUGH + 1: t and t_in too. FORMS: everything.
    """
    moving = False
    for p in range(u_rate.shape[0]):
        moving |= moves.nodes[p]
    for pol in range(2):
        found.forms[:forms] = 0.0
        found.terms[3, :forms] = 0.0
        for j in range(1, half.kd.size - 1):
            index, thickness = False, False
            for p in range(u_rate.shape[0]):
                index |= rates.eps_o[p, j] != 0.0 or rates.eps_e[p, j] != 0.0
                thickness |= rates.kd[p, j] != 0.0
            if not (index or thickness or moving):
                continue
            _standing_terms(pol, j, half, solved, forms, found)
            if index or moving:
                _running_terms(pol, j, u, half, solved, forms, found)
            _add_film(pol, j, rates, forms, found)
        if moving:
            _add_motion(u_rate, forms, found)
        _finish(pol, u, u_rate, half, rates, moves, solved, forms, found)


@borrowing
def _standing_terms(
    pol: int, j: int, half: Half, solved: Solved, forms: int, found: Response
) -> None:
    """Rates of Y S by one film's thickness; leaves the waves and f1 g2 + g1 f2 for others."""
    terms, waves = found.terms, found.waves
    inv_o = complex(1.0, 0.0) if pol == S else reciprocal(half.eps_o[j])
    for i in range(NODES):
        e = solved.e[pol, j, i]
        waves[0, i] = solved.f[pol, j, i]
        waves[1, i] = solved.r_far[pol, j, i] * e * solved.f[pol, j, i]
    if forms > 1:
        for i in range(NODES):
            e = solved.e[pol, j, i]
            waves[3, i] = solved.g[pol, j, i]
            waves[2, i] = solved.r_near[pol, j, i] * e * solved.g[pol, j, i]
    for s in range(forms):
        one, other = 2 * (s == OUTSIDE), 2 * (s != INSIDE)
        for i in range(NODES):
            kz = solved.kz[pol, j, i]
            f1, g1, f2, g2 = waves[one, i], waves[one + 1, i], waves[other, i], waves[other + 1, i]
            standing = (f1 * g2 + g1 * f2) * solved.e[pol, j, i]
            terms[0, s, i] = standing
            terms[2, s, i] = 1j * kz * kz * inv_o * standing


@borrowing
def _running_terms(
    pol: int, j: int, u: Complexes, half: Half, solved: Solved, forms: int, found: Response
) -> None:
    """Rates of Y S by one film's permittivities; those by u are added up over the films."""
    terms, waves = found.terms, found.waves
    d, inv_e, inv_o = half.kd[j], reciprocal(half.eps_e[j]), reciprocal(half.eps_o[j])
    for i in range(NODES):
        kz, e, at = solved.kz[pol, j, i], solved.e[pol, j, i], u[i]
        phase = kz * d
        if abs2(phase) < _THIN:
            q = 1j * phase
            mean = d * (1.0 + q * (1.0 + q * (2.0 / 3.0 + q * (1.0 / 3.0))))
        else:
            mean = (e * e - 1.0) * reciprocal(2j * kz)
        y = kz if pol == S else kz * inv_o
        normal = complex(1.0, 0.0) if pol == S else at * at * inv_e * inv_e
        by_u = -2.0 * at if pol == S else -2.0 * at * inv_e
        for s in range(forms):
            one, other = 2 * (s == OUTSIDE), 2 * (s != INSIDE)
            running = waves[one, i] * waves[other, i] + waves[one + 1, i] * waves[other + 1, i]
            running *= mean
            standing = terms[0, s, i] * d
            psi = 0.5j * (running + standing)
            terms[0, s, i] = normal * psi
            terms[1, s, i] = -0.5j * y * y * (running - standing)
            terms[3, s, i] += by_u * psi


@borrowing
def _add_film(pol: int, j: int, rates: HalfRates, forms: int, found: Response) -> None:
    """Add one film's part along every direction in which it changes."""
    terms = found.terms
    for p in range(rates.kd.shape[0]):
        in_plane, normal, thicker = rates.eps_o[p, j], rates.eps_e[p, j], rates.kd[p, j]
        if thicker != 0.0:
            for s in range(forms):
                for i in range(NODES):
                    found.forms[s, p, i] += terms[2, s, i] * thicker
        if pol == S:
            normal, in_plane = in_plane, complex(0.0, 0.0)
        if normal != 0.0:
            for s in range(forms):
                for i in range(NODES):
                    found.forms[s, p, i] += terms[0, s, i] * normal
        if in_plane != 0.0:
            for s in range(forms):
                for i in range(NODES):
                    found.forms[s, p, i] += terms[1, s, i] * in_plane


@borrowing
def _add_motion(u_rate: Floats, forms: int, found: Response) -> None:
    """Add what the nodes' own motion does in all films."""
    for s in range(forms):
        for p in range(u_rate.shape[0]):
            for i in range(NODES):
                found.forms[s, p, i] += found.terms[3, s, i] * u_rate[p, i]


@borrowing
def _finish(
    pol: int,
    u: Complexes,
    u_rate: Floats,
    half: Half,
    rates: HalfRates,
    moves: Moves,
    solved: Solved,
    forms: int,
    found: Response,
) -> None:
    """Divide by the admittances, and add what the media at both ends do."""
    last = half.kd.size - 1
    for i in range(NODES):
        found.waves[0, i] = reciprocal(solved.y[pol, 0, i])
        found.waves[1, i] = reciprocal(solved.y[pol, last, i])
    for p in range(u_rate.shape[0]):
        for i in range(NODES):
            found.r[pol, p, i] = found.forms[INSIDE, p, i] * found.waves[0, i]
        if forms > THROUGH:
            for i in range(NODES):
                found.t[pol, p, i] = found.forms[THROUGH, p, i] * found.waves[1, i]
                found.t_in[pol, p, i] = found.forms[THROUGH, p, i] * found.waves[0, i]
        if forms > OUTSIDE:
            for i in range(NODES):
                found.r_out[pol, p, i] = found.forms[OUTSIDE, p, i] * found.waves[1, i]
        if moves.outer[p]:
            _ends(pol, p, u, u_rate, half, rates, solved, forms, found)
        else:
            found.kz[pol, p, :] = 0.0
            found.y_in[pol, p, :] = 0.0
            found.y_out[pol, p, :] = 0.0


@borrowing
def _outer_wave(
    pol: int, eps_o: complex, eps_e: complex, d_o: complex, d_e: complex, at: complex, kz: complex
) -> tuple[complex, complex, complex, complex]:
    """Rates of kz and admittance of a medium: by its permittivities, and by u."""
    half_inv = 0.5 * reciprocal(kz)
    if pol == S:
        by_u = -2.0 * at * half_inv
        own = d_o * half_inv
        return own, own, by_u, by_u
    inv_o, inv_e = reciprocal(eps_o), reciprocal(eps_e)
    own = (d_o + at * at * inv_e * (eps_o * inv_e * d_e - d_o)) * half_inv
    by_u = -2.0 * eps_o * inv_e * at * half_inv
    return own, (own - kz * inv_o * d_o) * inv_o, by_u, by_u * inv_o


@borrowing
def _ends(
    pol: int,
    p: int,
    u: Complexes,
    u_rate: Floats,
    half: Half,
    rates: HalfRates,
    solved: Solved,
    forms: int,
    found: Response,
) -> None:
    """Add what the media at both ends do along one direction.

    A change of the admittance at an end acts like a face with reflection dY / 2Y put there.
    """
    last = half.kd.size - 1
    o_0, e_0, o_l, e_l = half.eps_o[0], half.eps_e[0], half.eps_o[last], half.eps_e[last]
    do_0, de_0, do_l, de_l = (
        rates.eps_o[p, 0],
        rates.eps_e[p, 0],
        rates.eps_o[p, last],
        rates.eps_e[p, last],
    )
    for i in range(NODES):
        r, t = solved.r_far[pol, 0, i], solved.t[pol, i]
        kz, in_rate, kz_u, in_u = _outer_wave(pol, o_0, e_0, do_0, de_0, u[i], solved.kz[pol, 0, i])
        _, out_rate, _, out_u = _outer_wave(
            pol, o_l, e_l, do_l, de_l, u[i], solved.kz[pol, last, i]
        )
        in_rate += in_u * u_rate[p, i]
        out_rate += out_u * u_rate[p, i]
        found.kz[pol, p, i] = kz + kz_u * u_rate[p, i]
        found.y_in[pol, p, i], found.y_out[pol, p, i] = in_rate, out_rate
        face_in, face_out = 0.5 * in_rate * found.waves[0, i], 0.5 * out_rate * found.waves[1, i]
        half_out = 0.5 * out_rate * found.waves[0, i]
        found.r[pol, p, i] += face_in * (1.0 - r * r) - half_out * t * t
        if forms > THROUGH:
            t_in, r_out = solved.g[pol, 0, i], solved.r_out[pol, i]
            found.t[pol, p, i] += t * (face_in * (1.0 - r) - face_out * (1.0 + r_out))
            found.t_in[pol, p, i] += t_in * (face_out * (1.0 - r_out) - face_in * (1.0 + r))
            if forms > OUTSIDE:
                found.r_out[pol, p, i] += face_out * (1.0 - r_out * r_out) - face_in * t * t_in
