"""The function whose zeros are the modes of a stack, on the whole surface it lives on.

With decay constants gb, gt of the outer media (fields ~ exp(-g |z|), lengths in 1/k0) the modes
are the zeros of the Wronskian of the two solutions that are pure outer waves at the bottom and at
the top. It is even in kz of every film, hence free of branch points but for gb and gt. Both
become single-valued in w = gb + gt, since gb - gt = (eps_top - eps_bottom) / w, and s = log w
makes the function entire: cut-offs are ordinary points, bound modes (Re gb > 0, Re gt > 0) and
leaky ones lie on one plane, and a count of zeros needs no care for cuts.

Fields: s, psi = E, sigma = 1; p, psi = H, sigma = eps_o; the pair (psi, psi'/sigma) is continuous.
"""

import cmath
from typing import NamedTuple

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline
from optics.kernels.elementary import decay, turn
from optics.kernels.halfstack import P, abs2, sqrt_upper

# Below this |kz^2 d^2| a film's matrix comes from its series, with terms to the sixth power.
_SERIES = 0.1
# From this exponent on growing and decaying waves are carried apart.
_GROWS = 1.0


class Films(NamedTuple):
    """A whole stack at one wavelength, bottom to top."""

    eps_o: Complexes  # (m,)
    eps_e: Complexes  # (m,)
    kd: Floats  # (m,)
    bottom: complex  # permittivity of the outer media
    top: complex


@inline
def sheet(films: Films, s: complex) -> tuple[complex, complex, complex]:
    """Decay constants at the bottom and the top, and u^2, at s."""
    w = cmath.exp(s)
    other = (films.top - films.bottom) / w
    bottom, top = 0.5 * (w + other), 0.5 * (w - other)
    # From the smaller of both: next to its cut-off nothing cancels.
    if abs2(top) < abs2(bottom):
        return bottom, top, films.top + top * top
    return bottom, top, films.bottom + bottom * bottom


@inline
def normal_square(films: Films, pol: int, j: int, x: complex) -> complex:
    """kz^2 of film j at u^2 = x."""
    if pol == P:
        return films.eps_o[j] * (1.0 - x / films.eps_e[j])
    return films.eps_o[j] - x


@inline
def film_matrix(q: complex, d: float) -> tuple[complex, complex, complex, float]:
    """cos(kz d), sin(kz d)/kz and the latter's slope in q = kz^2, times exp(-x); and x.

    x = Im kz d keeps them from overflowing. The slope of the cosine is -d/2 times the second.
    """
    z = q * d * d
    if abs2(z) < _SERIES * _SERIES:
        c = s = g = 0j
        power = 1.0 + 0j
        for n in range(7):
            # (-z)^n / (2n)!, / (2n+1)!, and the slope's term of the next order
            c += power
            s += power / (2 * n + 1)
            g -= power * (n + 1) / ((2 * n + 1) * (2 * n + 2) * (2 * n + 3))
            power *= -z / ((2 * n + 1) * (2 * n + 2))
        return c, d * s, d * d * d * g, 0.0
    k = sqrt_upper(q)
    x = k.imag * d
    up = turn(k.real * d) * decay(2.0 * x)
    down = turn(-k.real * d)
    c = 0.5 * (up + down)
    s = (up - down) / (2j * k)
    return c, s, 0.5 * (d * c - s) / q, x


@inline
def growing_part(q: complex, d: float) -> tuple[complex, complex, complex, float]:
    """Decay constant g = -i kz, factors of the growing and the decaying wave over exp(x), and x."""
    k = sqrt_upper(q)
    x = k.imag * d
    return -1j * k, turn(-k.real * d), turn(k.real * d) * decay(2.0 * x), x


@inline
def carried(
    q: complex, sigma: complex, d: float, w: complex, v: complex
) -> tuple[complex, complex, float]:
    """Fields a way d > 0 up in a film, psi and v, both over exp(third result).

    Where waves grow much they are carried apart: what grows out of the small difference of psi
    and v must be rounded once, not in either of them, or modes of far guides would smear.
    """
    if sqrt_upper(q).imag * d < _GROWS:
        c, t, _, x = film_matrix(q, d)
        return c * w + sigma * t * v, c * v - q * t / sigma * w, x
    g, up, down, x = growing_part(q, d)
    grows, decays = 0.5 * (w + sigma * v / g) * up, 0.5 * (w - sigma * v / g) * down
    return grows + decays, g / sigma * (grows - decays), x


@inline
def carried_slope(
    q: complex,
    dq: complex,
    sigma: complex,
    d: float,
    state: tuple[complex, complex, complex, complex],
) -> tuple[complex, complex, complex, complex, float]:
    """As `carried`, with slopes: from psi, v, psi', v' at the bottom to those at the top.

    dq : slope of q = kz^2.
    """
    w, v, dw, dv = state
    if sqrt_upper(q).imag * d < _GROWS:
        c, t, dt, x = film_matrix(q, d)
        dc = -0.5 * d * t * dq
        dt *= dq
        lower, d_lower = -q * t / sigma, -(dq * t + q * dt) / sigma
        return (
            c * w + sigma * t * v,
            lower * w + c * v,
            dc * w + sigma * dt * v + c * dw + sigma * t * dv,
            d_lower * w + dc * v + lower * dw + c * dv,
            x,
        )
    g, up, down, x = growing_part(q, d)
    dg = -0.5 * dq / g
    part, d_part = sigma * v / g, sigma * (dv - v * dg / g) / g
    grows, decays = 0.5 * (w + part) * up, 0.5 * (w - part) * down
    d_grows = 0.5 * (dw + d_part) * up + grows * d * dg
    d_decays = 0.5 * (dw - d_part) * down - decays * d * dg
    y = g / sigma
    return (
        grows + decays,
        y * (grows - decays),
        d_grows + d_decays,
        dg / sigma * (grows - decays) + y * (d_grows - d_decays),
        x,
    )


@inline
def wronskian(films: Films, pol: int, s: complex) -> tuple[complex, complex, float]:
    """Value and slope in s of the Wronskian, both over exp(third result).

    The factor is positive, so phases and the ratio of both are those of the function itself.
    """
    bottom, top, x = sheet(films, s)
    dx = 2.0 * bottom * top
    below = films.bottom if pol == P else 1.0 + 0j
    above = films.top if pol == P else 1.0 + 0j
    w, v = 1.0 + 0j, bottom / below
    dw, dv = 0j, top / below
    log = 0.0
    for j in range(films.kd.size):
        if films.kd[j] == 0.0:
            continue
        sigma = films.eps_o[j] if pol == P else 1.0 + 0j
        ratio = sigma / films.eps_e[j] if pol == P else 1.0 + 0j
        q, dq = normal_square(films, pol, j, x), -ratio * dx
        w, v, dw, dv, shrink = carried_slope(q, dq, sigma, films.kd[j], (w, v, dw, dv))
        size = abs(w) + abs(v)
        w, v, dw, dv = w / size, v / size, dw / size, dv / size
        log += shrink + cmath.log(size).real
    value = v + top / above * w
    slope = dv + top / above * dw + bottom / above * w
    return value, slope, log
