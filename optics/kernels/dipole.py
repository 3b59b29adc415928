"""Power of a dipole per in-plane wavevector: dissipated, and carried to either side.

Methods: Lukosz & Kunz, J. Opt. Soc. Am. 67, 1607 (1977); Chance, Prock & Silbey, Adv. Chem.
Phys. 37, 1 (1978); Neyts, J. Opt. Soc. Am. A 15, 962 (1998); uniaxial emitter films after
Penninck et al., Opt. Express 19, 18558 (2011) (from memory).

Channels: 0 vertical (p), 1 horizontal p, 2 horizontal s. Everything is divided by the rate of
the same dipole in the unbounded emitter medium.
"""

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import borrowing, rowwise, scalar
from optics.kernels.elementary import exp_i
from optics.kernels.halfstack import P, S, abs2, reciprocal
from optics.kernels.planar import LANES, at, put
from optics.kernels.problem import Scratch, Source
from optics.kernels.rules import NODES, PANEL_NODES

_FADED = 15.0  # Im kz d of the emitter film up to which its phase factors may be divided


@borrowing
def channel(c: int) -> tuple[int, float]:
    """Polarization of a channel and the sign with which its reflections enter."""
    return (S, 1.0) if c == 2 else (P, 1.0 if c == 0 else -1.0)


@scalar
def dissipated_factor(c: int, source: Source, u: complex, kz: complex) -> complex:
    """Factor before the reflection bracket in the dissipated power per du."""
    if c == 0:
        scale = 1.5 * source.eps_o / (source.eps_e * source.eps_e * source.bulk[0])
        return scale * (u * u * u) * reciprocal(kz)
    if c == 1:
        return 0.75 / (source.eps_o * source.bulk[1]) * u * kz
    return 0.75 / source.bulk[1] * u * reciprocal(kz)


@scalar
def outgoing_factor(c: int, source: Source, u: float, kz: complex) -> float:
    """Factor before |amplitude|^2 in the power carried to one side per du (u real)."""
    if c == 0:
        return 0.75 * u**3 * (source.eps_o / source.eps_e) ** 2 / (abs2(kz) * source.bulk[0])
    if c == 1:
        return 0.375 * u / source.bulk[1]
    return 0.375 * u / (abs2(kz) * source.bulk[1])


@borrowing
def first_lane(c: int, source: Source) -> int:
    """First lane of a channel's phase factors: in an isotropic film p shares those of s."""
    return NODES if c < 2 and source.eps_o != source.eps_e else 0


@borrowing
def fades_out(source: Source, kz: Floats) -> bool:
    """Whether waves die out across the emitter film at some node; kz : float (ROW,)."""
    fading = 0.0
    for lane in range(LANES):
        fading = max(fading, kz[LANES + lane])
    return bool(fading * source.kd >= _FADED)


@borrowing
def fill_phases(
    q: int, source: Source, kz: Floats, through: Floats, fading: bool, scratch: Scratch
) -> None:
    """Phase factors from dipole number q to both faces of the emitter film, at every node.

    kz, through : float (ROW,), normal wavevector and phase factor of the film.
    """
    below = source.kz_positions[q]
    # In an isotropic film p has the phases of s.
    for start in range(0, NODES if source.eps_o == source.eps_e else LANES, NODES):
        by_bottom, fade_bottom = scratch.by_bottom[start:], scratch.fade_bottom[start:]
        by_top, fade_top = scratch.by_top[start:], scratch.fade_top[start:]
        _put_phase(below, kz[start:], by_bottom, fade_bottom)
        if fading:
            _put_phase(source.kd - below, kz[start:], by_top, fade_top)
        else:
            _put_rest(through[start:], by_bottom, fade_bottom, by_top, fade_top)


@rowwise
def _put_phase(way: float, kz: Floats, there_and_back: Floats, fade: Floats) -> None:
    """Phase factor of one way across the emitter film and back, and |once|^2."""
    for i in range(NODES):
        once = exp_i(at(kz, i) * way)
        put(there_and_back, i, once * once)
        fade[i] = abs2(once)


@rowwise
def _put_rest(
    through: Floats, by_bottom: Floats, fade_bottom: Floats, by_top: Floats, fade_top: Floats
) -> None:
    """As `_put_phase` to the other face: both ways together lead through the film.

    A quotient costs less than a wave.
    """
    for i in range(NODES):
        phase = at(through, i)
        put(by_top, i, (phase * phase) * reciprocal(at(by_bottom, i)))
        fade_top[i] = abs2(phase) / fade_bottom[i]


@rowwise
def fill_inverse(a: Floats, b: Floats, through: Floats, inverse: Floats) -> None:
    """All round trips in the emitter film: 1/(1 - ab) with both reflections brought together."""
    for lane in range(LANES):
        phase = at(through, lane)
        put(inverse, lane, reciprocal(1.0 - at(a, lane) * at(b, lane) * (phase * phase)))


@borrowing
def fill_dissipated(
    source: Source, r_up: Floats, r_down: Floats, kz: Floats, through: Floats, u: Complexes,
    du: Complexes, scratch: Scratch,
) -> None:  # fmt: skip
    """Dissipated power at all nodes but for the phases that depend on the dipole's place.

    Factor times 1 + (2 ab +- (a + b)) / (1 - ab); ab is the same for every dipole. The bulk
    term stands apart because it carries no power at real nodes beyond the emitter's light line:
    there the factor is imaginary, and what it would drown stays.
    """
    fill_inverse(r_up, r_down, through, scratch.inverse)
    for c in range(3):
        lane = channel(c)[0] * NODES
        _put_before(
            c, source, r_up[lane:], r_down[lane:], kz[lane:], through[lane:], u, du,
            scratch.inverse[lane:], scratch.plain[c], scratch.before[c, 0], scratch.before[c, 1],
        )  # fmt: skip


@rowwise
def _put_before(
    c: int, source: Source, r_up: Floats, r_down: Floats, kz: Floats, through: Floats,
    u: Complexes, du: Complexes, inverse: Floats, plain: Floats, bottom: Floats, top: Floats,
) -> None:  # fmt: skip
    """One channel of `fill_dissipated`; rows begin with its polarization's first lane."""
    _, sign = channel(c)
    for i in range(NODES):
        factor = dissipated_factor(c, source, u[i], at(kz, i)) * du[i]
        front = factor * at(inverse, i)
        phase, a, b = at(through, i), at(r_up, i), at(r_down, i)
        plain[i] = factor.real + 2.0 * (front * (a * b * (phase * phase))).real
        z = sign * (front * b)
        bottom[i], bottom[NODES + i] = z.real, z.imag
        z = sign * (front * a)
        top[i], top[NODES + i] = z.real, z.imag


@borrowing
def fill_carried(
    source: Source, r_up: Floats, r_down: Floats, kz: Floats, u: Complexes, du: Complexes,
    scratch: Scratch,
) -> None:  # fmt: skip
    """Power sent to both sides at all nodes but for what depends on the dipole's place.

    Factor times |1 +- a|^2 / |1 - ab|^2 downward, with b upward; `fill_inverse` comes first.
    """
    for c in range(3):
        lane = channel(c)[0] * NODES
        _put_carried(
            c, source, r_up[lane:], r_down[lane:], kz[lane:], u, du, scratch.inverse[lane:],
            scratch.carried[c], scratch.mirrored[c, 0], scratch.mirrored[c, 1],
            scratch.crossed[c, 0], scratch.crossed[c, 1],
        )  # fmt: skip


@rowwise
def _put_carried(
    c: int, source: Source, r_up: Floats, r_down: Floats, kz: Floats, u: Complexes,
    du: Complexes, inverse: Floats, carried: Floats, by_down: Floats, by_up: Floats,
    cross_down: Floats, cross_up: Floats,
) -> None:  # fmt: skip
    """One channel of `fill_carried`; rows begin with its polarization's first lane."""
    _, sign = channel(c)
    for i in range(NODES):
        size = outgoing_factor(c, source, u[i].real, at(kz, i)) * du[i].real
        size *= abs2(at(inverse, i))
        a, b = at(r_up, i), at(r_down, i)
        carried[i] = size
        by_down[i], by_up[i] = size * abs2(b), size * abs2(a)
        twice = 2.0 * sign * size
        cross_down[i], cross_down[NODES + i] = twice * b.real, twice * b.imag
        cross_up[i], cross_up[NODES + i] = twice * a.real, twice * a.imag


@rowwise
def put_dissipated(
    plain: Floats, bottom: Floats, top: Floats, by_bottom: Floats, by_top: Floats, power: Floats
) -> None:
    """Dissipated power of one channel and dipole, from `fill_dissipated` and `fill_phases`."""
    for i in range(NODES):
        down, up = at(by_bottom, i), at(by_top, i)
        power[i] = (
            plain[i]
            + (bottom[i] * down.real - bottom[NODES + i] * down.imag)
            + (top[i] * up.real - top[NODES + i] * up.imag)
        )


@rowwise
def put_sent(
    carried: Floats, by_down: Floats, by_up: Floats, cross_down: Floats, cross_up: Floats,
    by_bottom: Floats, by_top: Floats, fade_bottom: Floats, fade_top: Floats, sent: Floats,
) -> None:  # fmt: skip
    """Power that one channel of one dipole sends down, up; from `fill_carried`.

    |1 +- a|^2 = 1 + |a|^2 +- 2 Re a.
    """
    for i in range(NODES):
        down, up = at(by_bottom, i), at(by_top, i)
        fade_b, fade_t = fade_bottom[i], fade_top[i]
        mixed = cross_up[i] * up.real - cross_up[NODES + i] * up.imag
        sent[i] = (carried[i] + by_up[i] * (fade_t * fade_t) + mixed) * fade_b
        mixed = cross_down[i] * down.real - cross_down[NODES + i] * down.imag
        sent[PANEL_NODES + i] = (carried[i] + by_down[i] * (fade_b * fade_b) + mixed) * fade_t
