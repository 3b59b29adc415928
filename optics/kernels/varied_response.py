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

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline
from optics.kernels.halfstack import P, S, abs2, reciprocal
from optics.kernels.problem import Half, Work
from optics.kernels.rules import NODES
from optics.kernels.variation import HalfRates

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
    forms: Complexes  # (FORMS, 2, p, n) work space: Y dS by films
    terms: Complexes  # (4, FORMS, n) work space: rates by normal, in-plane eps, thickness; by u


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
        np.zeros((FORMS, 2, directions, NODES), dtype=np.complex128),
        np.zeros((4, FORMS, NODES), dtype=np.complex128),
    )


@inline
def respond(
    u: Complexes,
    u_rate: Floats,
    half: Half,
    rates: HalfRates,
    work: Work,
    forms: int,
    found: Response,
) -> None:
    """Rates of reflection and transmission of a half stack.

    Parameters
    ----------
    u : complex (NODES,)
    u_rate : float (p, NODES)
        Motion of the nodes.
    work : Work
        After `outward`; with more than one form also after `inward`.
    forms : int
        1: only r. FORMS: everything.
    """
    found.forms[:forms] = 0.0
    for pol in range(2):
        found.terms[3, :forms] = 0.0
        for j in range(1, half.kd.size - 1):
            _film_terms(pol, j, u, half, work, forms, found.terms)
            _add_film(pol, j, rates, forms, found)
        for p in range(u_rate.shape[0]):
            for s in range(forms):
                for i in range(NODES):
                    found.forms[s, pol, p, i] += found.terms[3, s, i] * u_rate[p, i]
            _ends(pol, p, u, u_rate[p], half, rates, work, forms, found)


@inline
def _film_terms(
    pol: int, j: int, u: Complexes, half: Half, work: Work, forms: int, terms: Complexes
) -> None:
    """Rates of Y S by one film's kz Y (or kz / Y), thickness; adds up those by u.

    terms : complex (4, FORMS, n), output; rows: d by normal permittivity in p, in-plane in s;
    by in-plane permittivity in p; by k0 d; the last, by u, is added to.
    """
    d, inv_e, inv_o = half.kd[j], reciprocal(half.eps_e[j]), reciprocal(half.eps_o[j])
    for i in range(NODES):
        kz, e, at = work.kz[pol, j, i], work.e[pol, j, i], u[i]
        phase = kz * d
        if abs2(phase) < _THIN:
            q = 1j * phase
            mean = d * (1.0 + q * (1.0 + q * (2.0 / 3.0 + q * (1.0 / 3.0))))
        else:
            mean = (e * e - 1.0) * reciprocal(2j * kz)
        y = kz if pol == S else kz * inv_o
        normal = complex(1.0, 0.0) if pol == S else at * at * inv_e * inv_e
        by_u = -2.0 * at if pol == S else -2.0 * at * inv_e
        f, g = work.f[pol, j, i], work.r_far[pol, j, i] * e * work.f[pol, j, i]
        for s in range(forms):
            f1, g1, f2, g2 = f, g, f, g
            if s != INSIDE:
                g2 = work.g[pol, j, i]
                f2 = work.r_near[pol, j, i] * e * g2
            if s == OUTSIDE:
                f1, g1 = f2, g2
            running = (f1 * f2 + g1 * g2) * mean
            standing = (f1 * g2 + g1 * f2) * e
            psi = 0.5j * (running + standing * d)
            terms[0, s, i] = normal * psi
            terms[1, s, i] = -0.5j * y * y * (running - standing * d)
            terms[2, s, i] = 1j * y * kz * standing
            terms[3, s, i] += by_u * psi


@inline
def _add_film(pol: int, j: int, rates: HalfRates, forms: int, found: Response) -> None:
    """Add one film's part along every direction in which it changes."""
    for p in range(rates.kd.shape[0]):
        in_plane, normal, thicker = rates.eps_o[p, j], rates.eps_e[p, j], rates.kd[p, j]
        if in_plane == 0.0 and normal == 0.0 and thicker == 0.0:
            continue
        first = in_plane if pol == S else normal
        second = complex(0.0, 0.0) if pol == S else in_plane
        for s in range(forms):
            for i in range(NODES):
                found.forms[s, pol, p, i] += (
                    found.terms[0, s, i] * first
                    + found.terms[1, s, i] * second
                    + found.terms[2, s, i] * thicker
                )


@inline
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


@inline
def _ends(
    pol: int,
    p: int,
    u: Complexes,
    u_rate: Floats,
    half: Half,
    rates: HalfRates,
    work: Work,
    forms: int,
    found: Response,
) -> None:
    """Finish the rates along one direction: what the media at both ends do.

    A change of the admittance at an end acts like a face with reflection dY / 2Y put there.
    """
    last = half.kd.size - 1
    for i in range(NODES):
        y_in, y_out = work.y[pol, 0, i], work.y[pol, last, i]
        r, t = work.r_far[pol, 0, i], work.t[pol, i]
        kz_rate, in_rate, kz_by_u, in_by_u = _outer_wave(
            pol, half.eps_o[0], half.eps_e[0], rates.eps_o[p, 0], rates.eps_e[p, 0], u[i],
            work.kz[pol, 0, i],
        )  # fmt: skip
        _, out_rate, _, out_by_u = _outer_wave(
            pol, half.eps_o[last], half.eps_e[last], rates.eps_o[p, last], rates.eps_e[p, last],
            u[i], work.kz[pol, last, i],
        )  # fmt: skip
        found.kz[pol, p, i] = kz_rate + kz_by_u * u_rate[i]
        in_rate += in_by_u * u_rate[i]
        out_rate += out_by_u * u_rate[i]
        found.y_in[pol, p, i], found.y_out[pol, p, i] = in_rate, out_rate
        inv_in, inv_out = reciprocal(y_in), reciprocal(y_out)
        face_in, face_out = 0.5 * in_rate * inv_in, 0.5 * out_rate * inv_out
        inside = found.forms[INSIDE, pol, p, i] - 0.5 * out_rate * t * t
        found.r[pol, p, i] = inside * inv_in + face_in * (1.0 - r * r)
        if forms > 1:
            t_in, r_out = work.g[pol, 0, i], work.r_out[pol, i]
            through = found.forms[THROUGH, pol, p, i]
            found.t[pol, p, i] = through * inv_out + t * (
                face_in * (1.0 - r) - face_out * (1.0 + r_out)
            )
            found.t_in[pol, p, i] = through * inv_in + t_in * (
                face_out * (1.0 - r_out) - face_in * (1.0 + r)
            )
            found.r_out[pol, p, i] = (
                found.forms[OUTSIDE, pol, p, i] * inv_out
                + face_out * (1.0 - r_out * r_out)
                - face_in * t * t_in
            )


__all__ = ["FORMS", "P", "Response", "respond", "response_space"]
