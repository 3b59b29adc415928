"""Power absorbed in each film: the closed-form volume integral of Im eps |E|^2.

A half stack can be lit from both ends. Its absorption for amplitudes x (from the emitter film)
and w (from outside) is the Hermitian form  a_in |x|^2 + a_out |w|^2 + 2 Re(conj(x) w a_cross),
film by film, in the units of flux Re(Y) |amplitude|^2.
"""

import math

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline
from optics.kernels.halfstack import P, S, abs2

# Up to this one-pass attenuation exponent the integral over a film is taken from its series.
_THIN = 1e-4


@inline
def film_coefficients(
    u: Complexes,
    eps_o: Complexes,
    eps_e: Complexes,
    kd: Floats,
    kz: Complexes,
    e: Complexes,
    alpha: Floats,
    beta: Floats,
) -> None:
    """Absorption of a film as alpha (|f|^2 + |g|^2) + 2 beta Re(conj(f) g).

    f and g are the two waves' amplitudes, each at the face where it enters the film.
    From Poynting's theorem: s, d(flux)/dz = -Im eps_o |E|^2; p (H amplitudes),
    d(flux)/dz = -(Im eps_o |E_x|^2 + Im eps_e |E_z|^2) with |E_x| = |H' / eps_o| and
    |E_z| = |u H / eps_e|, lengths in 1/k0.

    Parameters
    ----------
    u : complex (n,)
        Real in-plane wavevectors over k0 (imaginary parts are not used).
    eps_o, eps_e : complex (m,)
    kd : float (m,)
    kz, e : complex (2, m, n)
        From `waves`.
    alpha, beta : float (2, m, n), output
        Zero for lossless films and for both ends.
    """
    last = eps_o.size - 1
    for j in range(last + 1):
        loss_o, loss_e = eps_o[j].imag, eps_e[j].imag
        if j == 0 or j == last or (loss_o == 0.0 and loss_e == 0.0):
            alpha[:, j, :] = 0.0
            beta[:, j, :] = 0.0
            continue
        d = kd[j]
        inv_o, inv_e = 1.0 / abs2(eps_o[j]), 1.0 / abs2(eps_e[j])
        for pol in range(2):
            for i in range(u.size):
                k = kz[pol, j, i]
                x = 2.0 * k.imag * d
                # Integrals of |e^{i kz z}|^2 and of the cross term, both real; the one-pass
                # factor already holds the exponential and the sine. Choices rather than
                # branches, so that the loop vectorizes.
                passed = abs2(e[pol, j, i])
                thin = x < _THIN
                series = 1.0 - 0.5 * x * (1.0 - x / 3.0)
                same = d * (series if thin else (1.0 - passed) / (1.0 if thin else x))
                still = abs(k.real * d) < 1e-8
                turning = e[pol, j, i].imag / (1.0 if still else k.real)
                cross = d * math.sqrt(passed) if still else turning
                if pol == S:
                    alpha[S, j, i] = loss_o * same
                    beta[S, j, i] = loss_o * cross
                else:
                    plane = loss_o * inv_o * abs2(k)
                    normal = loss_e * inv_e * u[i].real * u[i].real
                    alpha[P, j, i] = (normal + plane) * same
                    beta[P, j, i] = (normal - plane) * cross


@inline
def lossless(alpha: Floats, beta: Floats) -> bool:
    """Tell a film that absorbs nothing by its coefficients (n,): all are 0, or none is."""
    return alpha[0] == 0.0 and beta[0] == 0.0 and alpha[-1] == 0.0 and beta[-1] == 0.0


@inline
def absorbed_alone(
    e: Complexes, back: Complexes, amplitude: Complexes, alpha: Floats, beta: Floats, a: Floats
) -> None:
    """Absorption in each film for unit amplitude from one end: a (2, m, n).

    back is the reflection at each film's other face, amplitude the wave where it enters the
    film: r_far and f of `outward` for light from medium 0, r_near and g of `inward` for light
    from the last medium.
    """
    for pol in range(2):
        for j in range(1, e.shape[1] - 1):
            if lossless(alpha[pol, j], beta[pol, j]):
                a[pol, j, :] = 0.0
                continue
            for i in range(e.shape[2]):
                q = back[pol, j, i] * e[pol, j, i]
                power = alpha[pol, j, i] * (1.0 + abs2(q)) + 2.0 * beta[pol, j, i] * q.real
                a[pol, j, i] = power * abs2(amplitude[pol, j, i])


@inline
def absorbed_cross(
    e: Complexes,
    r_far: Complexes,
    f: Complexes,
    r_near: Complexes,
    g: Complexes,
    alpha: Floats,
    beta: Floats,
    a_cross: Complexes,
) -> None:
    """Cross term between both ways of lighting the half stack: a_cross, complex (2, m, n)."""
    for pol in range(2):
        for j in range(1, e.shape[1] - 1):
            if lossless(alpha[pol, j], beta[pol, j]):
                a_cross[pol, j, :] = 0.0
                continue
            for i in range(e.shape[2]):
                f1 = f[pol, j, i]
                g1 = r_far[pol, j, i] * e[pol, j, i] * f1
                g2 = g[pol, j, i]
                f2 = r_near[pol, j, i] * e[pol, j, i] * g2
                a_cross[pol, j, i] = alpha[pol, j, i] * (
                    f1.conjugate() * f2 + g1.conjugate() * g2
                ) + beta[pol, j, i] * (f1.conjugate() * g2 + g1.conjugate() * f2)


@inline
def sum_films(a: Floats | Complexes, total: Complexes) -> None:
    """Add up the films of a half stack: total (2, n) from a (2, m, n)."""
    total[:, :] = 0.0
    for pol in range(2):
        for j in range(1, a.shape[1] - 1):
            for i in range(a.shape[2]):
                total[pol, i] += a[pol, j, i]
