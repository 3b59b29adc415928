"""Power absorbed in each film: the closed-form volume integral of Im eps |E|^2.

In the units of flux Re(Y) |amplitude|^2, for unit amplitude of the wave that arrives.
"""

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import borrowing, rowwise, scalar
from optics.kernels.halfstack import abs2
from optics.kernels.planar import LANES, at, put
from optics.kernels.rules import NODES

# Up to this one-pass attenuation exponent the integral over a film is taken from its series.
_THIN = 1e-4
_STILL = 1e-8  # up to this phase the two waves of a film keep their phase all through it


@scalar
def _overlaps(kz: complex, e: complex, d: float) -> tuple[float, float]:
    """Integrals over a film of |exp(i kz z)|^2 and of the cross term of both waves, both real.

    The one-pass factor e already holds the exponential and the sine. Choices rather than
    branches, so that loops vectorize.
    """
    x = 2.0 * kz.imag * d
    passed = abs2(e)
    thin = x < _THIN
    series = 1.0 - 0.5 * x * (1.0 - x / 3.0)
    same = d * (series if thin else (1.0 - passed) / (1.0 if thin else x))
    still = abs(kz.real * d) < _STILL
    turning = e.imag / (1.0 if still else kz.real)
    return same, d * e.real if still else turning


@scalar
def _put_s(i: int, loss: float, same: float, cross: float, alpha: Floats, beta: Floats) -> None:
    """Coefficients of s at one node, from the overlaps."""
    alpha[i], beta[i] = loss * same, loss * cross


@scalar
def _put_p(
    i: int, plane: float, normal: float, same: float, cross: float, alpha: Floats, beta: Floats
) -> None:
    """Coefficients of p at one node, from the overlaps and the losses of both field components."""
    alpha[NODES + i], beta[NODES + i] = (normal + plane) * same, (normal - plane) * cross


@rowwise
def film_coefficients(
    u: Complexes,
    eps_o: complex,
    eps_e: complex,
    kd: float,
    kz: Floats,
    e: Floats,
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
    u : complex (NODES,)
        Real in-plane wavevectors over k0 (imaginary parts are not used).
    eps_o, eps_e, kd
        Of the film.
    kz, e : float (ROW,)
        From `waves`.
    alpha, beta : float (LANES,), output
    """
    loss, plane, normal = eps_o.imag, eps_o.imag / abs2(eps_o), eps_e.imag / abs2(eps_e)
    if eps_e == eps_o:
        for i in range(NODES):
            k, along = at(kz, i), u[i].real * u[i].real
            same, cross = _overlaps(k, at(e, i), kd)
            _put_s(i, loss, same, cross, alpha, beta)
            _put_p(i, plane * abs2(k), normal * along, same, cross, alpha, beta)
        return
    for i in range(NODES):
        same, cross = _overlaps(at(kz, i), at(e, i), kd)
        _put_s(i, loss, same, cross, alpha, beta)
    for i in range(NODES):
        k, along = at(kz, NODES + i), u[i].real * u[i].real
        same, cross = _overlaps(k, at(e, NODES + i), kd)
        _put_p(i, plane * abs2(k), normal * along, same, cross, alpha, beta)


@borrowing
def absorbs(eps_o: complex, eps_e: complex) -> bool:
    """Whether a film absorbs at all."""
    return eps_o.imag != 0.0 or eps_e.imag != 0.0


@rowwise
def absorbed_in_film(
    e: Floats, back: Floats, amplitude: Floats, alpha: Floats, beta: Floats, total: Floats
) -> None:
    """Add what a film absorbs to total (LANES,).

    back is the reflection at the film's other face, amplitude the wave where it enters the
    film: r_far and f of `outward`, r_near and g of `inward`.
    """
    for lane in range(LANES):
        q = at(back, lane) * at(e, lane)
        power = alpha[lane] * (1.0 + abs2(q)) + (2.0 * beta[lane]) * q.real
        total[lane] += power * abs2(at(amplitude, lane))


@rowwise
def crossed_in_film(
    e: Floats, r_far: Floats, f: Floats, r_near: Floats, g: Floats, alpha: Floats, beta: Floats,
    total: Floats,
) -> None:  # fmt: skip
    """Add the cross term between both ways of lighting a half stack to total (ROW,).

    A half stack lit from both ends absorbs a_in |x|^2 + a_out |w|^2 + 2 Re(conj(x) w a_cross)
    for amplitudes x from the emitter film and w from outside.
    """
    for lane in range(LANES):
        once = at(e, lane)
        f1, g2 = at(f, lane), at(g, lane)
        g1, f2 = at(r_far, lane) * once * f1, at(r_near, lane) * once * g2
        same = alpha[lane] * (f1.conjugate() * f2 + g1.conjugate() * g2)
        cross = beta[lane] * (f1.conjugate() * g2 + g1.conjugate() * f2)
        put(total, lane, at(total, lane) + same + cross)
