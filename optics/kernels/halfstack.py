"""Two-ports of film sequences at the nodes of a panel, in the scattering form.

A sequence of media runs outward: medium 0 is the emitter film, the last one is semi-infinite
(slab or surroundings), the films lie between. Amplitudes are E for s and H for p. Admittances:
s, Y = kz; p, Y = kz / eps_o; both in units of k0. Rows are laid out as in `planar`.

Formulas: P. Yeh, Optical Waves in Layered Media (uniaxial films, optic axis along the normal);
the recursion in reflection coefficients never overflows, however thick a film is.
"""

import math

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import borrowing, rowwise, scalar
from optics.kernels.elementary import exp_i
from optics.kernels.planar import LANES, at, put
from optics.kernels.rules import NODES

S, P = 0, 1

# Below this |kz^2| a film counts as exactly at its light line. kz = 0 would give 0/0 between
# admittances; films are even in kz, so the replacement changes results by 1e-12 only.
NEXT_TO_LIGHT_LINE = 1e-12


@scalar
def sqrt_upper(z: complex) -> complex:
    """Square root with Im >= 0 (and Re >= 0 on the real axis): the branch of every kz."""
    x, y = z.real, z.imag
    m = math.sqrt(x * x + y * y)
    # Choices rather than branches, so that loops vectorize.
    at_line = m < NEXT_TO_LIGHT_LINE
    x = NEXT_TO_LIGHT_LINE if at_line else x
    y = 0.0 if at_line else y
    m = NEXT_TO_LIGHT_LINE if at_line else m
    large = math.sqrt(0.5 * (m + abs(x)))
    small = 0.5 * y / large
    a = large if x >= 0.0 else small
    b = small if x >= 0.0 else large
    sign = -1.0 if b < 0.0 else 1.0
    return complex(sign * a, sign * b)


@scalar
def reciprocal(z: complex) -> complex:
    """1 / z without the range checks that the language's own complex division makes."""
    m = 1.0 / (z.real * z.real + z.imag * z.imag)
    return complex(z.real * m, -z.imag * m)


@scalar
def abs2(z: complex) -> float:
    """|z|^2."""
    return z.real * z.real + z.imag * z.imag


@rowwise
def _isotropic_waves(eps: complex, u: Complexes, kz: Floats, y: Floats) -> None:
    """Normal wavevector and admittance of an isotropic medium, both polarizations."""
    inv = reciprocal(eps)
    for i in range(u.size):
        k = sqrt_upper(eps - u[i] * u[i])
        put(kz, i, k)
        put(kz, NODES + i, k)
        put(y, i, k)
        put(y, NODES + i, k * inv)


@rowwise
def _uniaxial_waves(eps_o: complex, eps_e: complex, u: Complexes, kz: Floats, y: Floats) -> None:
    """As `_isotropic_waves`, optic axis along the normal."""
    inv, ratio = reciprocal(eps_o), eps_o * reciprocal(eps_e)
    for i in range(u.size):
        squared = u[i] * u[i]
        k = sqrt_upper(eps_o - squared)
        put(kz, i, k)
        put(y, i, k)
        k = sqrt_upper(eps_o - ratio * squared)
        put(kz, NODES + i, k)
        put(y, NODES + i, k * inv)


@rowwise
def phase_factors(kz: Floats, kd: float, alike: bool, e: Floats) -> None:
    """exp(i kz kd) in a row; alike: p has the wavevectors of s."""
    if alike:
        for i in range(NODES):
            w = exp_i(at(kz, i) * kd)
            put(e, i, w)
            put(e, NODES + i, w)
    else:
        for lane in range(LANES):
            put(e, lane, exp_i(at(kz, lane) * kd))


@borrowing
def waves(
    first: int,
    u: Complexes,
    eps_o: Complexes,
    eps_e: Complexes,
    kd: Floats,
    kz: Floats,
    y: Floats,
    e: Floats,
) -> None:
    """Normal wavevector, admittance and one-pass phase factor of media from number first on.

    Parameters
    ----------
    u : complex (NODES,)
        In-plane wavevectors over k0.
    eps_o, eps_e : complex (m,)
        In-plane and normal permittivity of the media.
    kd : float (m,)
        k0 times thickness; not used for both ends.
    kz, y, e : float (m, ROW), output
        Normal wavevector over k0, admittance, exp(i kz kd) (films only).
    """
    last = eps_o.size - 1
    for j in range(first, last + 1):
        alike = eps_e[j] == eps_o[j]
        if alike:
            _isotropic_waves(eps_o[j], u, kz[j], y[j])
        else:
            _uniaxial_waves(eps_o[j], eps_e[j], u, kz[j], y[j])
        if 0 < j < last:
            phase_factors(kz[j], kd[j], alike, e[j])


@rowwise
def _onto_last(y1: Floats, y2: Floats, r: Floats) -> None:
    """Reflection of the interface between medium 1 and the last."""
    for lane in range(LANES):
        a, b = at(y1, lane), at(y2, lane)
        put(r, lane, (a - b) * reciprocal(a + b))


@rowwise
def _behind_film(y1: Floats, y2: Floats, e: Floats, r: Floats) -> None:
    """Reflection seen from medium 1, of film 2 whose other face reflects r (which is replaced)."""
    for lane in range(LANES):
        a, b, once = at(y1, lane), at(y2, lane), at(e, lane)
        plus, minus = a + b, a - b
        back = at(r, lane) * (once * once)
        put(r, lane, (minus + plus * back) * reciprocal(plus + minus * back))


@rowwise
def _into_last(y1: Floats, y2: Floats, r: Floats, f: Floats) -> None:
    """As `_onto_last`, with the amplitude f in the last medium per unit amplitude in medium 1."""
    for lane in range(LANES):
        a, b = at(y1, lane), at(y2, lane)
        inv = reciprocal(a + b)
        put(r, lane, (a - b) * inv)
        put(f, lane, (2.0 * a) * inv)


@rowwise
def _into_film(y1: Floats, y2: Floats, e: Floats, far: Floats, r: Floats, f: Floats) -> None:
    """As `_behind_film`, with the amplitude f in the film per unit amplitude in medium 1."""
    for lane in range(LANES):
        a, b, once = at(y1, lane), at(y2, lane), at(e, lane)
        plus, minus = a + b, a - b
        back = at(far, lane) * (once * once)
        inv = reciprocal(plus + minus * back)
        put(r, lane, (minus + plus * back) * inv)
        put(f, lane, (2.0 * a) * inv)


@rowwise
def _carry(before: Floats, e: Floats, f: Floats) -> None:
    """From the step into a film, f, to the amplitude itself: times what comes through."""
    for lane in range(LANES):
        put(f, lane, at(f, lane) * (at(before, lane) * at(e, lane)))


@borrowing
def reflection(y: Floats, e: Floats, r: Floats) -> None:
    """Reflection seen from medium 0: r (ROW,) from y, e (m, ROW) of `waves`."""
    last = y.shape[0] - 1
    _onto_last(y[last - 1], y[last], r)
    for j in range(last - 1, 0, -1):
        _behind_film(y[j - 1], y[j], e[j], r)


@borrowing
def outward(y: Floats, e: Floats, r_far: Floats, f: Floats) -> None:
    """Unit amplitude arrives from medium 0: reflection at every interface, and amplitudes.

    Parameters
    ----------
    y, e : float (m, ROW)
        From `waves`.
    r_far : float (m, ROW), output
        Entry j: reflection seen inside medium j looking outward, at its far face (the
        interface j | j+1). Entry 0 is the reflection of the half stack.
    f : float (m, ROW), output
        Amplitude of the outgoing wave at the near face of film j; the last entry is the
        amplitude in the last medium.
    """
    last = y.shape[0] - 1
    _into_last(y[last - 1], y[last], r_far[last - 1], f[last])
    for j in range(last - 1, 0, -1):
        _into_film(y[j - 1], y[j], e[j], r_far[j], r_far[j - 1], f[j])
    for j in range(2, last + 1):
        _carry(f[j - 1], e[j - 1], f[j])


@borrowing
def inward(y: Floats, e: Floats, beyond: Floats, r_near: Floats, g: Floats) -> None:
    """Unit amplitude arrives from the last medium: reflections looking inward, amplitudes.

    Parameters
    ----------
    y, e : float (m, ROW)
        From `waves`.
    beyond : float (ROW,)
        Reflection at the other face of medium 0; zeros for a half stack by itself.
    r_near : float (m, ROW), output
        Entry j: reflection seen inside medium j looking inward, at its near face (the
        interface j-1 | j). The last entry is the reflection of the stack seen from outside.
    g : float (m, ROW), output
        Amplitude of the inward wave at the far face of film j.
    """
    last = y.shape[0] - 1
    _into_film(y[1], y[0], e[0], beyond, r_near[1], g[0])
    for j in range(1, last):
        _into_film(y[j + 1], y[j], e[j], r_near[j], r_near[j + 1], g[j])
    for j in range(last - 2, -1, -1):
        _carry(g[j + 1], e[j + 1], g[j])
