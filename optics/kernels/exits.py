"""What becomes of light that reaches the outer media: slab faces, bounces, first arrivals.

Slabs are thick and incoherent, so intensities add: light goes back and forth between the slab
faces and the film stack, a geometric series, solved for both sides together.
"""

import math

from optics.kernels.arrays import StackPowers
from optics.kernels.compiled import inline
from optics.kernels.elementary import decay
from optics.kernels.halfstack import S, abs2, reciprocal

# What stands outside the films on one side.
OPEN, PLANAR, MATCHED, ABSORBING = 0, 1, 2, 3

# Columns of everything that is integrated on the real axis.
TOTAL, AIR_BOTTOM, AIR_TOP, SUBSTRATE, COVER, ABSORBED, MATCHED_BOTTOM, MATCHED_TOP = range(8)
COLUMNS = 8

# Where 1 - R falls below this, rounding of R shows; then T + A says the same, exactly.
TINY_LOSS = 1e-8
# Light in a slab between perfect mirrors has nowhere to go; it is left where it arrived.
STUCK = 1e-280


@inline
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


@inline
def face_reflectance(pol: int, u: float, n_slab: float, n_out: float) -> float:
    """One polarization of `face_reflectances`."""
    s, p = face_reflectances(u, n_slab, n_out)
    return s if pol == S else p


@inline
def exit_line(kind: int, n_outer: float, n_out: float) -> float:
    """In-plane wavevector below which light can leave on this side; 0 if it never can."""
    if kind == ABSORBING:
        return 0.0
    return n_outer if kind == MATCHED else n_out


@inline
def once_through(u: float, n_outer: float, loss: float) -> float:
    """Transmittance of one pass through a slab by Beer-Lambert; loss = 4 pi k d / lambda."""
    if u >= n_outer:
        return 0.0
    return 1.0 if loss == 0.0 else decay(loss / math.sqrt(1.0 - (u / n_outer) ** 2))


@inline
def passage(kind: int, rho: float, once: float) -> tuple[float, float, float]:
    """Split of unit flux that enters an outer medium: (leaves, absorbed there, comes back).

    rho : reflectance of the slab's outer face; once : transmittance of one pass.
    """
    if kind == OPEN:
        return 1.0, 0.0, 0.0
    if kind == ABSORBING:
        return 0.0, 1.0, 0.0
    if kind == MATCHED:
        return once, 1.0 - once, 0.0
    return once * (1.0 - rho), (1.0 - once) * (1.0 + rho * once), once * once * rho


@inline
def beside_matched(u: float, n_outer: float, other_line: float, other_back: float) -> float:
    """What the other slab sends back while this one, of index n_outer, stands `matched`.

    Beyond that slab's index and the other side's exit line all light counts as trapped.
    """
    return other_back if u < max(n_outer, other_line) else 0.0


@inline
def bounces(back_b: float, back_t: float, stack: StackPowers) -> tuple[float, float, float, float]:
    """Total fluxes into the outer media per first arrival there.

    Returns
    -------
    bottom from bottom, bottom from top, top from bottom, top from top : float
    """
    if back_b == 0.0 and back_t == 0.0:
        return 1.0, 0.0, 0.0, 1.0
    r_b, r_t, through, a_b, a_t = stack
    lack_b, lack_t = 1.0 - r_b, 1.0 - r_t
    if lack_b < TINY_LOSS:
        lack_b = through + a_b
    if lack_t < TINY_LOSS:
        lack_t = through + a_t
    # 1 - R g as a sum of non-negative terms, so that nothing cancels.
    diag_b = lack_b + (1.0 - lack_b) * (1.0 - back_b)
    diag_t = lack_t + (1.0 - lack_t) * (1.0 - back_t)
    det = diag_b * diag_t - through * through * back_b * back_t
    if det <= STUCK:
        return 1.0, 0.0, 0.0, 1.0
    return diag_t / det, through * back_t / det, through * back_b / det, diag_b / det


@inline
def whole_stack(
    phase: complex,
    r_a: complex,
    r_b: complex,
    flux_out: tuple[float, float],
    ports_a: complex,
    ports_b: tuple[complex, complex, complex],
    absorbed_a: float,
    absorbed_b: tuple[float, float, complex],
) -> tuple[float, float, float]:
    """Whole stack lit from the medium outside half b: (R, T, A) per unit incident flux.

    Parameters
    ----------
    phase : complex
        exp(i kz d) of the emitter film.
    r_a, r_b : complex
        Reflections of both halves seen from the emitter film.
    flux_out : (float, float)
        Re Y of the medium outside half a (transmitted) and outside half b (incident).
    ports_a : complex
        t of half a, from the emitter film out.
    ports_b : (complex, complex, complex)
        t of half b outward, t inward, reflection from outside.
    absorbed_a : float
        Absorption of half a for unit amplitude from the emitter film.
    absorbed_b : (float, float, complex)
        Hermitian absorption form of half b: inside, outside, cross.
    """
    t_out, t_in, r_out = ports_b
    toward_a = t_in * phase * reciprocal(1.0 - r_a * r_b * phase * phase)
    toward_b = toward_a * phase * r_a
    r = r_out + t_out * toward_b
    inside, outside, cross = absorbed_b
    absorbed = absorbed_a * abs2(toward_a) + outside + inside * abs2(toward_b)
    absorbed += 2.0 * (toward_b.conjugate() * cross).real
    through = abs2(ports_a * toward_a) * flux_out[0]
    return abs2(r), through / flux_out[1], absorbed / flux_out[1]
