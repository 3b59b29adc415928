"""Second literal route: wave amplitudes, interface and propagation matrices, in mpmath.

The textbook form: each film carries an outgoing and a returning wave (E for s, H for p);
an interface is (1/t) [[1, r], [r, 1]], a film diag(exp(-i kz d), exp(i kz d)); the dipole's
power follows from the reflection coefficients a, b of both half stacks (Lukosz and Kunz
1977; Chance, Prock and Silbey 1978; from memory). Numbers are mpmath complex numbers, so
nothing overflows and nothing needs care; it shares no formula with `reference_fields`.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from mpmath import mp  # type: ignore[import-untyped]
from reference_geometry import Film, Geometry, Slab

Number = Any


def root(squared: Number) -> Number:
    """Square root with Im >= 0."""
    value = mp.sqrt(mp.mpc(squared))
    return -value if value.imag < 0 else value


def wave(o: Number, e: Number, kappa: Number, pol: str) -> tuple[Number, Number]:
    """Normal wavenumber and admittance."""
    if pol == "s":
        kz = root(o - kappa**2)
        return kz, kz
    kz = root(o - o / e * kappa**2)
    return kz, kz / o


@dataclass(frozen=True, slots=True)
class Amplitudes:
    """Waves at the inner face for a unit wave outside; Re Y outside; loss per film."""

    out: Number
    back: Number
    outgoing: Number
    absorbed: list[Number]


def amplitudes(
    films: tuple[Film, ...], outer: complex, kappa: Number, pol: str, losses: bool = True
) -> Amplitudes:
    """March inward; `films` run from the inner face outward. Losses need real kappa."""
    _, y_outer = wave(mp.mpc(outer), mp.mpc(outer), kappa, pol)
    outgoing, y_next, out, back = y_outer.real, y_outer, mp.mpc(1), mp.mpc(0)
    absorbed = []
    for film in reversed(films):
        kz, y = wave(mp.mpc(film.ordinary), mp.mpc(film.extraordinary), kappa, pol)
        out, back = _interface(y, y_next, out, back)
        if losses:
            absorbed.append(_loss(film, kz, out, back, kappa, pol))
        phase = mp.exp(1j * kz * film.depth)
        out, back, y_next = out / phase, back * phase, y
    return Amplitudes(out, back, outgoing, absorbed[::-1])


def _interface(y1: Number, y2: Number, out: Number, back: Number) -> tuple[Number, Number]:
    r, t = (y1 - y2) / (y1 + y2), 2 * y1 / (y1 + y2)
    return (out + r * back) / t, (r * out + back) / t


def _loss(film: Film, kz: Number, out: Number, back: Number, kappa: Number, pol: str) -> Number:
    """Volume integral of Im eps |E|^2 over the film; waves given at its outer face."""
    if not film.absorbs or film.depth == 0:
        return mp.mpf(0)
    d, re, im = mp.mpf(film.depth), kz.real, kz.imag
    # The outgoing wave was larger nearer the dipole, the returning one smaller.
    # Im kz = 0 for s waves where only the normal permittivity absorbs.
    gain = (mp.exp(2 * im * d) - 1) / (2 * im) if im != 0 else d
    fade = (1 - mp.exp(-2 * im * d)) / (2 * im) if im != 0 else d
    beat = (1 - mp.exp(-2j * re * d)) / (2j * re) if re != 0 else d
    plain = abs(out) ** 2 * gain + abs(back) ** 2 * fade
    mixed = 2 * (out * mp.conj(back) * beat).real
    if pol == "s":
        return film.ordinary.imag * (plain + mixed)
    o, e = mp.mpc(film.ordinary), mp.mpc(film.extraordinary)
    in_plane = o.imag / abs(o) ** 2 * abs(kz) ** 2 * (plain - mixed)
    return in_plane + e.imag / abs(e) ** 2 * kappa**2 * (plain + mixed)


@dataclass(frozen=True, slots=True)
class Emission:
    """One source at one kappa, relative to its orientation's bulk rate."""

    dissipated: Number
    up: Number
    down: Number
    absorbed: Number


def emission(geo: Geometry, kappa: Number, source: str, losses: bool = True) -> Emission:
    """Textbook dipole power: `dissipated` is analytic in kappa, the rest needs real kappa."""
    pol = source[-1]
    o, e = mp.mpf(geo.emitter.ordinary.real), mp.mpf(geo.emitter.extraordinary.real)
    kz, _ = wave(o, e, kappa, pol)
    above = amplitudes(geo.above, geo.top, kappa, pol, losses)
    below = amplitudes(geo.below, geo.bottom, kappa, pol, losses)
    a, b = above.back / above.out, below.back / below.out
    vertical, horizontal = mp.sqrt(o), (3 * o + e) / (4 * mp.sqrt(o))
    if source == "v_p":
        bulk, sign = vertical, 1
        analytic = mp.mpf(3) / 2 * kappa**3 * o / (e**2 * kz)
        flux = mp.mpf(3) / 4 * kappa**3 * o**2 / (e**2 * abs(kz) ** 2)
    elif source == "h_p":
        bulk, sign = horizontal, -1
        analytic, flux = mp.mpf(3) / 4 * kappa * kz / o, mp.mpf(3) / 8 * kappa
    else:
        bulk, sign = horizontal, 1
        analytic = mp.mpf(3) / 4 * kappa / kz
        flux = mp.mpf(3) / 8 * kappa / abs(kz) ** 2
    analytic = analytic * (1 + sign * a) * (1 + sign * b) / (1 - a * b) / bulk
    up = flux / bulk * abs((1 + sign * b) / (1 - a * b) / above.out) ** 2
    down = flux / bulk * abs((1 + sign * a) / (1 - a * b) / below.out) ** 2
    lost = up * mp.fsum(above.absorbed) + down * mp.fsum(below.absorbed)
    return Emission(analytic, up * above.outgoing, down * below.outgoing, lost)


def response(geo: Geometry, kappa: Number, pol: str, side: str) -> tuple[Number, Number, Number]:
    """Reflectance, transmittance, absorptance of the whole stack seen from one side."""
    films = geo.whole if side == "bottom" else geo.whole[::-1]
    inner, outer = (geo.bottom, geo.top) if side == "bottom" else (geo.top, geo.bottom)
    _, y_in = wave(mp.mpc(inner), mp.mpc(inner), kappa, pol)
    marched = amplitudes(films, outer, kappa, pol)
    _, y_first = _first_admittance(films, outer, kappa, pol)
    out, back = _interface(y_in, y_first, marched.out, marched.back)
    power = y_in.real * abs(out) ** 2
    lost = mp.fsum(marched.absorbed) / power
    return abs(back / out) ** 2, marched.outgoing / power, lost


def _first_admittance(
    films: tuple[Film, ...], outer: complex, kappa: Number, pol: str
) -> tuple[Number, Number]:
    if films:
        return wave(mp.mpc(films[0].ordinary), mp.mpc(films[0].extraordinary), kappa, pol)
    return wave(mp.mpc(outer), mp.mpc(outer), kappa, pol)


def destinations(geo: Geometry, kappa: Number) -> dict[str, dict[str, Number]]:
    """Shares per d kappa below the largest outer light line, keyed by orientation and name."""
    variants = {"": geo, "bottom": geo.matched("bottom"), "top": geo.matched("top")}
    slabs = {"bottom": geo.substrate, "top": geo.cover}
    seen = {
        (pol, side): response(geo, kappa, pol, side)
        for side, slab in slabs.items()
        for pol in "ps"
        if slab and kappa < slab.index
    }
    result = {}
    for orientation, sources in {"v": ("v_p",), "h": ("h_p", "h_s")}.items():
        total: dict[str, Number] = {}
        for source in sources:
            own = emission(geo, kappa, source)
            parts = {"dissipated": own.dissipated.real}
            for side, variant in variants.items():
                if variant is None:
                    continue
                shares = _follow(variant, kappa, source[-1], own, seen)
                parts |= {f"matched_{side}": shares[f"air_{side}"]} if side else shares
            for name, x in parts.items():
                total[name] = total.get(name, mp.mpf(0)) + x
        result[orientation] = total
    return result


def _follow(
    geo: Geometry, kappa: Number, pol: str, own: Emission, seen: dict[Any, Any]
) -> dict[str, Number]:
    """Follow the light through slabs and films until it left or was absorbed."""
    names = ("air_bottom", "air_top", "substrate", "cover")
    out = dict.fromkeys(names, mp.mpf(0)) | {"absorbed": own.absorbed}
    slabs = {"bottom": geo.substrate, "top": geo.cover}
    arrived = {"bottom": own.down, "top": own.up}
    if kappa < geo.exit_line:
        arrived = _bounce(arrived, slabs, kappa, pol, seen)
    for side, slab in slabs.items():
        x = arrived[side]
        if slab is None:
            eps = geo.bottom if side == "bottom" else geo.top
            out["absorbed" if eps.imag else f"air_{side}"] += x
        elif kappa >= geo.exit_line:
            out["substrate" if side == "bottom" else "cover"] += x
        elif kappa < slab.index:
            once, face = _slab(slab, kappa, pol)
            out[f"air_{side}"] += once * (1 - face) * x
            out["absorbed"] += (1 - once) * x + once * face * (1 - once) * x
            out["absorbed"] += once**2 * face * x * seen[pol, side][2]
    return out


def _bounce(
    arrived: dict[str, Number], slabs: dict[str, Slab | None], kappa: Number, pol: str, seen: Any
) -> dict[str, Number]:
    """Sum the series x + M x + M^2 x + ... by doubling: (1 + M)(1 + M^2)(1 + M^4)... x."""
    step = mp.zeros(2)
    for column, side in enumerate(("bottom", "top")):
        slab = slabs[side]
        if slab is None or kappa >= slab.index:
            continue
        once, face = _slab(slab, kappa, pol)
        reflected, transmitted, _ = seen[pol, side]
        step[column, column] = once**2 * face * reflected
        step[1 - column, column] = once**2 * face * transmitted
    x = mp.matrix([arrived["bottom"], arrived["top"]])
    for _ in range(200):
        x = x + step * x
        step = step * step
        if mp.norm(step) < mp.eps:
            return {"bottom": x[0], "top": x[1]}
    raise ArithmeticError("light between the slabs never leaves and is never absorbed")


def _slab(slab: Slab, kappa: Number, pol: str) -> tuple[Number, Number]:
    """One pass (Beer-Lambert along the ray) and the reflectance of the outer face."""
    cosine = mp.sqrt(1 - (kappa / mp.mpf(slab.index)) ** 2)
    once = mp.exp(-slab.exponent / cosine)
    if slab.matched:
        return once, mp.mpf(0)
    inside, outside = mp.mpf(slab.index) ** 2, mp.mpf(slab.outside) ** 2
    _, y1 = wave(inside, inside, kappa, pol)
    _, y2 = wave(outside, outside, kappa, pol)
    return once, abs((y1 - y2) / (y1 + y2)) ** 2
