"""The rival of the benchmark: dipole emission as a laboratory writes it for itself.

Plain NumPy on a uniform grid of real in-plane wavevectors (in units of k0), all of them at once
for each wavelength, isotropic films, one slab below. Written to be quick: phases are shared by
both polarizations, fields only where light can leave, bounces only where they happen, absorption
of returned light as what is neither reflected nor transmitted.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class PlainStack:
    """Films from bottom to top at one wavelength, lengths times k0; a slab below, air-like top."""

    eps: Complexes  # (m,), the emitter film's real
    kd: Floats  # (m,)
    emitter: int
    kz: float  # dipole from the bottom face of its film
    slab_index: float
    slab_loss: float  # 4 pi k d / lambda
    outside_bottom: float
    outside_top: float


@dataclass(frozen=True, slots=True)
class Half:
    """One half stack at all wavevectors: reflection, exit amplitude, waves in each film."""

    r: Complexes
    t: Complexes
    flux: Floats
    absorbed: Floats  # (films, n) for unit amplitude at the emitter film's face


def abs2(z: Complexes) -> Floats:
    """|z|^2 without the square root of `abs`."""
    return z.real**2 + z.imag**2


def waves(eps: Complexes, kd: Floats, u: Floats) -> tuple[Complexes, Complexes]:
    """kz (m, n) over k0 and one-pass phase factors (m - 2, n) of the films between the ends."""
    # The principal root has Im >= 0 here: Im eps is never negative, nor a negative zero.
    kz = np.sqrt(eps[:, None] - (u * u)[None, :])
    return kz, np.exp(1j * kd[1:-1, None] * kz[1:-1])


def reflection(y: list[Complexes], phase: list[Complexes]) -> Complexes:
    """Reflection seen from the first medium; y has one entry more at each end than phase."""
    r = (y[-2] - y[-1]) / (y[-2] + y[-1])
    for j in range(len(phase) - 1, -1, -1):
        fresnel = (y[j] - y[j + 1]) / (y[j] + y[j + 1])
        back = r * phase[j] ** 2
        r = (fresnel + back) / (1.0 + fresnel * back)
    return r


def amplitudes(
    y: list[Complexes], phase: list[Complexes]
) -> tuple[Complexes, list[Complexes], list[Complexes], Complexes]:
    """Reflection, forward and backward amplitudes where they enter each film, exit amplitude."""
    r = (y[-2] - y[-1]) / (y[-2] + y[-1])
    last = 2.0 * y[-2] / (y[-2] + y[-1])
    inside, step = [r], [last]
    for j in range(len(phase) - 1, -1, -1):
        fresnel = (y[j] - y[j + 1]) / (y[j] + y[j + 1])
        back = r * phase[j] ** 2
        bottom = 1.0 / (1.0 + fresnel * back)
        r = (fresnel + back) * bottom
        inside.append(r)
        step.append((1.0 + fresnel) * bottom)
    inside.reverse()
    step.reverse()
    forward, backward, wave = [], [], step[0]
    for j, e in enumerate(phase):
        forward.append(wave)
        wave = wave * e
        backward.append(wave * inside[j + 1])
        wave = wave * step[j + 1]
    return r, forward, backward, wave


def volume_integral(
    pol: str, u: Floats, eps: complex, kd: float, kz: Complexes, e: Complexes,
    forward: Complexes, backward: Complexes,
) -> Floats:  # fmt: skip
    """Im eps |E|^2 over a film, in units of Re(Y) |amplitude|^2."""
    same = (1.0 - abs2(e)) / (2.0 * kz.imag) * (abs2(forward) + abs2(backward))
    cross = 2.0 * e.imag / kz.real * (forward * backward.conj()).real
    if pol == "s":
        return eps.imag * (same + cross)
    normal, plane = u * u, abs2(kz)
    return eps.imag / abs(eps) ** 2 * ((normal + plane) * same + (normal - plane) * cross)


def solve_half(
    pol: str, u: Floats, eps: Complexes, kd: Floats, kz: Complexes, phase: Complexes,
) -> Half:  # fmt: skip
    """Everything of one half: media from the emitter film outward, phases of its films."""
    y = list(kz if pol == "s" else kz / eps[:, None])
    r, forward, backward, t = amplitudes(y, list(phase))
    absorbed = np.zeros((len(phase), u.size))
    for j, e in enumerate(phase, 1):
        if eps[j].imag > 0.0:
            absorbed[j - 1] = volume_integral(
                pol, u, complex(eps[j]), kd[j], kz[j], e, forward[j - 1], backward[j - 1]
            )
    return Half(r, t, y[-1].real, absorbed)


def seen_from_slab(y: list[Complexes], phase: list[Complexes]) -> tuple[Floats, Floats]:
    """Reflectance and transmittance of all films, lit from the slab."""
    r = (y[-2] - y[-1]) / (y[-2] + y[-1])
    t = 1.0 + r
    for j in range(len(phase) - 1, -1, -1):
        fresnel = (y[j] - y[j + 1]) / (y[j] + y[j + 1])
        back = r * phase[j] ** 2
        bottom = 1.0 / (1.0 + fresnel * back)
        t = t * (1.0 + fresnel) * phase[j] * bottom
        r = (fresnel + back) * bottom
    return abs2(r), abs2(t) * y[-1].real / y[0].real


class Grid:
    """Media of both halves at some of the grid's wavevectors."""

    def __init__(self, stack: PlainStack, u: Floats) -> None:
        self.u = u
        ends = np.array([stack.slab_index**2, stack.outside_top**2], dtype=complex)
        self.eps = np.concatenate([ends[:1], stack.eps, ends[1:]])
        self.kd = np.concatenate([[0.0], stack.kd, [0.0]])
        self.kz, self.phase = waves(self.eps, self.kd, u)
        self.own = stack.emitter + 1
        self.to_bottom = np.exp(1j * self.kz[self.own] * stack.kz)
        self.to_top = np.exp(1j * self.kz[self.own] * (self.kd[self.own] - stack.kz))
        # From the emitter film outward: its half's media, and which phases are those of films.
        films = np.arange(stack.eps.size)
        up = np.s_[self.own :], films[self.own :]
        down = np.s_[self.own :: -1], films[: stack.emitter][::-1]
        self.sides = up, down

    def reflections(self, pol: str) -> tuple[Complexes, Complexes]:
        """Of the upper and the lower half, seen from the emitter film's faces."""
        y = self.kz if pol == "s" else self.kz / self.eps[:, None]
        up, down = (
            reflection(list(y[media]), list(self.phase[films])) for media, films in self.sides
        )
        return up, down

    def half(self, pol: str, side: int) -> Half:
        media, films = self.sides[side]
        return solve_half(
            pol, self.u, self.eps[media], self.kd[media], self.kz[media], self.phase[films]
        )


def dissipated(grid: Grid, pol: str, sign: float, a: Complexes, b: Complexes) -> Complexes:
    """(1 + a)(1 + b) / (1 - ab) with reflections taken to the dipole's plane."""
    a = sign * a * grid.to_top**2
    b = sign * b * grid.to_bottom**2
    return (1.0 + a) * (1.0 + b) / (1.0 - a * b)


CHANNELS = (("v", "p", 1.0), ("h", "p", -1.0), ("h", "s", 1.0))


def factor(orientation: str, pol: str, grid: Grid) -> Complexes:
    """What stands before the reflections, relative to the bulk rate (n in vacuum's units)."""
    u, kz, eps = grid.u, grid.kz[grid.own], grid.eps[grid.own].real
    n = np.sqrt(eps)
    if orientation == "v":
        return 1.5 * u**3 / (eps * kz * n)
    return 0.75 * u * (kz / eps if pol == "p" else 1.0 / kz) / n


def outgoing_factor(orientation: str, pol: str, grid: Grid) -> Floats:
    u, kz, n = grid.u, grid.kz[grid.own], np.sqrt(grid.eps[grid.own].real)
    if orientation == "v":
        return 0.75 * u**3 / (abs2(kz) * n)
    return 0.375 * u / n if pol == "p" else 0.375 * u / (abs2(kz) * n)


def face(stack: PlainStack, pol: str, u: Floats) -> Floats:
    """Reflectance of the slab's outer face, u below its exit light line."""
    inside = np.sqrt(stack.slab_index**2 - u * u)
    outside = np.sqrt(stack.outside_bottom**2 - u * u)
    if pol == "p":
        inside, outside = inside / stack.slab_index**2, outside / stack.outside_bottom**2
    return ((inside - outside) / (inside + outside)) ** 2


def destinations(stack: PlainStack, points: int, end: float) -> dict[str, dict[str, float]]:
    """Where the power goes, for a vertical ("v") and a horizontal ("h") dipole.

    Parameters
    ----------
    points : int
        Of a uniform grid, middles of cells, from 0 to `end`.
    """
    step = end / points
    u = (np.arange(points) + 0.5) * step
    outer = max(stack.slab_index, stack.outside_top)
    cone = max(stack.outside_bottom, stack.outside_top)
    inner, free = int(np.searchsorted(u, cone)), int(np.searchsorted(u, outer))
    names = ("dissipated", "air_bottom", "air_top", "substrate", "cover", "guided",
             "surface_plasmon", "absorbed", "matched_bottom")  # fmt: skip
    out = {o: dict.fromkeys(names, 0.0) for o in "vh"}
    out["v"]["film_absorption"] = out["h"]["film_absorption"] = np.zeros(stack.eps.size)  # type: ignore[assignment]
    _leaving(stack, Grid(stack, u[:free]), inner, step, out)
    _trapped(stack, Grid(stack, u[free:]), step, out)
    return out


def _trapped(stack: PlainStack, grid: Grid, step: float, out: dict[str, dict[str, float]]) -> None:
    """Dissipated power beyond the outer light lines: guided modes and plasmons."""
    metallic = bool((stack.eps.real < 0.0).any())
    plasmon = np.searchsorted(grid.u, max(grid.u[0], np.sqrt(grid.eps[grid.own].real)))
    both = {pol: grid.reflections(pol) for pol in "sp"}
    for o, pol, sign in CHANNELS:
        a, b = both[pol]
        rate = (factor(o, pol, grid) * dissipated(grid, pol, sign, a, b)).real * step
        split = plasmon if metallic and pol == "p" else rate.size
        out[o]["guided"] += float(rate[:split].sum())
        out[o]["surface_plasmon"] += float(rate[split:].sum())
        out[o]["dissipated"] += float(rate.sum())


def _leaving(
    stack: PlainStack, grid: Grid, inner: int, step: float, out: dict[str, dict[str, float]]
) -> None:
    """Everything below the outer light lines; `inner` points can leave into the surroundings."""
    below = grid.own - 1  # films under the emitter film
    cone = grid.u[:inner]
    once = np.exp(-stack.slab_loss / np.sqrt(1.0 - (grid.u / stack.slab_index) ** 2))
    halves, slab = {}, {}
    for pol in "sp":
        halves[pol] = grid.half(pol, 0), grid.half(pol, 1)
        y = grid.kz[:, :inner] if pol == "s" else grid.kz[:, :inner] / grid.eps[:, None]
        seen = seen_from_slab(list(y), list(grid.phase[:, :inner]))
        slab[pol] = *seen, np.where(cone < stack.outside_bottom, face(stack, pol, cone), 1.0)
    for o, pol, sign in CHANNELS:
        up, down = halves[pol]
        a, b = sign * up.r * grid.to_top**2, sign * down.r * grid.to_bottom**2
        inverse = 1.0 / (1.0 - a * b)
        rate = (factor(o, pol, grid) * (1.0 + a) * (1.0 + b) * inverse).real
        sent = outgoing_factor(o, pol, grid) * abs2(inverse) * step
        sent_up = sent * abs2((1.0 + b) * grid.to_top)
        sent_down = sent * abs2((1.0 + a) * grid.to_bottom)
        films = np.zeros(stack.eps.size)
        films[:below] = (down.absorbed @ sent_down)[::-1]
        films[below + 1 :] = up.absorbed @ sent_up
        p_t = sent_up * abs2(up.t) * up.flux
        p_b = sent_down * abs2(down.t) * down.flux
        reflected, through, rho = slab[pol]
        pass_once = once[:inner]
        back = pass_once**2 * rho
        arrived = p_b[:inner] / (1.0 - reflected * back)
        soaked = (1.0 - pass_once) * (1.0 + rho * pass_once)
        returned = back * (1.0 - reflected - through)
        mine = out[o]
        mine["dissipated"] += float(rate.sum() * step)
        mine["air_bottom"] += float((arrived * pass_once * (1.0 - rho)).sum())
        mine["air_top"] += float(p_t[:inner].sum() + (arrived * back * through).sum())
        mine["substrate"] += float(p_b[inner:].sum())
        mine["matched_bottom"] += float((p_b * once).sum())
        mine["absorbed"] += float(films.sum() + (arrived * (soaked + returned)).sum())
        mine["film_absorption"] = mine["film_absorption"] + films
