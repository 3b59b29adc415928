"""Two-ports of film sequences, s and p as the leading axis, in the scattering form.

A sequence of media runs outward: medium 0 is semi-infinite (the emitter film), the last one is
semi-infinite too (slab or surroundings), the films lie between. Amplitudes are E for s and H for
p. Admittances: s, Y = kz; p, Y = kz / eps_o; both in units of k0.

Formulas: P. Yeh, Optical Waves in Layered Media (uniaxial films, optic axis along the normal);
the recursion in reflection coefficients never overflows, however thick a film is.
"""

import math

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline
from optics.kernels.elementary import exp_i

S, P = 0, 1

# Below this |kz^2| a film counts as exactly at its light line. kz = 0 would give 0/0 between
# admittances; films are even in kz, so the replacement changes results by 1e-12 only.
NEXT_TO_LIGHT_LINE = 1e-12


@inline
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


@inline
def reciprocal(z: complex) -> complex:
    """1 / z without the range checks that the language's own complex division makes."""
    m = 1.0 / (z.real * z.real + z.imag * z.imag)
    return complex(z.real * m, -z.imag * m)


@inline
def abs2(z: complex) -> float:
    """|z|^2."""
    return z.real * z.real + z.imag * z.imag


@inline
def waves(
    u: Complexes,
    eps_o: Complexes,
    eps_e: Complexes,
    kd: Floats,
    kz: Complexes,
    y: Complexes,
    e: Complexes,
) -> None:
    """Normal wavevector, admittance and one-pass phase factor of every medium.

    Parameters
    ----------
    u : complex (n,)
        In-plane wavevectors over k0.
    eps_o, eps_e : complex (m,)
        In-plane and normal permittivity of the media.
    kd : float (m,)
        k0 times thickness; not used for the semi-infinite media at both ends.
    kz, y, e : complex (2, m, n), output
        Normal wavevector over k0, admittance, exp(i kz kd); leading axis s, p.
    """
    waves_from(0, u, eps_o, eps_e, kd, kz, y, e)


@inline
def waves_from(
    first: int,
    u: Complexes,
    eps_o: Complexes,
    eps_e: Complexes,
    kd: Floats,
    kz: Complexes,
    y: Complexes,
    e: Complexes,
) -> None:
    """As `waves`, from medium number first on."""
    n = u.size
    last = eps_o.size - 1
    for j in range(first, last + 1):
        eo = eps_o[j]
        inv = reciprocal(eo)
        isotropic = eps_e[j] == eo
        ratio = eo * reciprocal(eps_e[j])
        for i in range(n):
            k = sqrt_upper(eo - u[i] * u[i])
            kz[S, j, i] = k
            y[S, j, i] = k
        if isotropic:
            for i in range(n):
                kz[P, j, i] = kz[S, j, i]
                y[P, j, i] = kz[S, j, i] * inv
        else:
            for i in range(n):
                k = sqrt_upper(eo - ratio * u[i] * u[i])
                kz[P, j, i] = k
                y[P, j, i] = k * inv
        if 0 < j < last:
            one_pass(j, kd[j], isotropic, kz, e)


@inline
def one_pass(j: int, kd: float, isotropic: bool, kz: Complexes, e: Complexes) -> None:
    """Fill the one-pass phase factors e of film j from its kz, both as of `waves`."""
    n = kz.shape[2]
    for i in range(n):
        e[S, j, i] = exp_i(kz[S, j, i] * kd)
    if isotropic:
        for i in range(n):
            e[P, j, i] = e[S, j, i]
    else:
        for i in range(n):
            e[P, j, i] = exp_i(kz[P, j, i] * kd)


@inline
def reflection(y: Complexes, e: Complexes, r: Complexes) -> None:
    """Reflection seen from medium 0: r (2, n) from y, e (2, m, n) of `waves`."""
    last = y.shape[1] - 1
    n = y.shape[2]
    for pol in range(2):
        for i in range(n):
            y1, y2 = y[pol, last - 1, i], y[pol, last, i]
            r[pol, i] = (y1 - y2) * reciprocal(y1 + y2)
        for j in range(last - 1, 0, -1):
            for i in range(n):
                y1, y2 = y[pol, j - 1, i], y[pol, j, i]
                back = r[pol, i] * e[pol, j, i] * e[pol, j, i]
                plus, minus = y1 + y2, y1 - y2
                r[pol, i] = (minus + plus * back) * reciprocal(plus + minus * back)


@inline
def outward(y: Complexes, e: Complexes, r_far: Complexes, f: Complexes, t: Complexes) -> None:
    """Unit amplitude arrives from medium 0: reflection at every interface, amplitudes, exit.

    Parameters
    ----------
    y, e : complex (2, m, n)
        From `waves`.
    r_far : complex (2, m, n), output
        Entry j: reflection seen inside medium j looking outward, at its far face (the
        interface j | j+1). Entry 0 is the reflection of the half stack.
    f : complex (2, m, n), output
        Amplitude of the outgoing wave at the near face of film j.
    t : complex (2, n), output
        Amplitude in the last medium.
    """
    last = y.shape[1] - 1
    n = y.shape[2]
    for pol in range(2):
        for i in range(n):
            y1, y2 = y[pol, last - 1, i], y[pol, last, i]
            r_far[pol, last - 1, i] = (y1 - y2) * reciprocal(y1 + y2)
        for j in range(last - 1, 0, -1):
            for i in range(n):
                y1, y2 = y[pol, j - 1, i], y[pol, j, i]
                back = r_far[pol, j, i] * e[pol, j, i] * e[pol, j, i]
                plus, minus = y1 + y2, y1 - y2
                inv = reciprocal(plus + minus * back)
                r_far[pol, j - 1, i] = (minus + plus * back) * inv
                f[pol, j, i] = 2.0 * y1 * inv
        for i in range(n):
            y1, y2 = y[pol, last - 1, i], y[pol, last, i]
            f[pol, last, i] = 2.0 * y1 * reciprocal(y1 + y2)
        # So far f holds the step into each medium; multiplied up, it is the amplitude itself.
        for j in range(2, last + 1):
            for i in range(n):
                f[pol, j, i] *= f[pol, j - 1, i] * e[pol, j - 1, i]
        for i in range(n):
            t[pol, i] = f[pol, last, i]


@inline
def inward(y: Complexes, e: Complexes, r_near: Complexes, g: Complexes, r_out: Complexes) -> None:
    """Unit amplitude arrives from the last medium: reflections looking inward, amplitudes.

    Parameters
    ----------
    y, e : complex (2, m, n)
        From `waves`.
    r_near : complex (2, m, n), output
        Entry j: reflection seen inside medium j looking inward, at its near face (the
        interface j-1 | j), medium 0 being semi-infinite.
    g : complex (2, m, n), output
        Amplitude of the inward wave at the far face of film j; entry 0 the amplitude that
        arrives in medium 0.
    r_out : complex (2, n), output
        Reflection of the half stack seen from the last medium.
    """
    last = y.shape[1] - 1
    n = y.shape[2]
    for pol in range(2):
        for i in range(n):
            y1, y2 = y[pol, 0, i], y[pol, 1, i]
            inv = reciprocal(y1 + y2)
            r_near[pol, 1, i] = (y2 - y1) * inv
            g[pol, 0, i] = 2.0 * y2 * inv
        for j in range(1, last):
            for i in range(n):
                y1, y2 = y[pol, j, i], y[pol, j + 1, i]
                back = r_near[pol, j, i] * e[pol, j, i] * e[pol, j, i]
                plus, minus = y2 + y1, y2 - y1
                inv = reciprocal(plus + minus * back)
                r_near[pol, j + 1, i] = (minus + plus * back) * inv
                g[pol, j, i] = 2.0 * y2 * inv
        for j in range(last - 2, -1, -1):
            for i in range(n):
                g[pol, j, i] *= g[pol, j + 1, i] * e[pol, j + 1, i]
        for i in range(n):
            r_out[pol, i] = r_near[pol, last, i]
