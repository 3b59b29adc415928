"""No mode is missed: counts against a contour of its own around a determinant of its own.

The count here shares nothing with the search: boundary conditions of all films as one linear
system, its determinant from LAPACK, the contour in the plane of one outer decay constant.
All stacks are invented and random with fixed seeds.
"""

from __future__ import annotations

from collections.abc import Callable
from itertools import pairwise

import numpy as np
import pytest
from numpy.random import Generator, default_rng

from optics.kernels.halfstack import P, S
from optics.kernels.modal_sheet import Films
from optics.kernels.poles import Modes, bound_modes, zeros_on_all_sheets

SEED = 4001
NEAR = 1e-4  # left edge of the contour: smallest decay constant that is counted
FAR = 30.0  # right edge, unless a mode lies farther out
PHASE_STEP = 0.4


def stack(eps: list[complex], kd: list[float], bottom: complex, top: complex) -> Films:
    e = np.array(eps, complex)
    return Films(e, e.copy(), np.array(kd, float), complex(bottom), complex(top))


# --- an independent count ---------------------------------------------------------------------


def phase_of_determinant(films: Films, pol: int, gamma: np.ndarray) -> np.ndarray:
    """Unit phase of the determinant of the boundary conditions, zeros being modes.

    gamma : decay constant of the outer medium with the larger permittivity.
    """
    first = films.bottom if films.bottom.real >= films.top.real else films.top
    x = first + gamma**2
    eps = np.concatenate([[films.bottom], films.eps_o, [films.top]])
    eps_e = np.concatenate([[films.bottom], films.eps_e, [films.top]])
    ratio = eps / eps_e if pol == P else np.ones_like(eps)
    kz = np.sqrt(eps[:, None] - ratio[:, None] * x[None, :])
    kz = np.where(kz.imag < 0, -kz, kz)
    for at, outer in ((0, films.bottom), (-1, films.top)):
        # The outer waves decay: principal root of u^2 - eps, and gamma itself for the first.
        kz[at] = 1j * (gamma if outer == first else np.sqrt(x - outer))
    y = kz / eps[:, None] if pol == P else kz
    m, n = films.kd.size, x.size
    e = np.exp(1j * kz[1:-1] * films.kd[:, None])
    a = np.zeros((n, 2 * m + 2, 2 * m + 2), complex)
    # Unknowns: wave down into the bottom, per film f (from below) and g (from above), wave up.
    for i in range(m + 1):
        row = 2 * i
        if i == 0:
            a[:, row, 0], a[:, row + 1, 0] = 1, -y[0]
        else:
            f, g = 2 * i - 1, 2 * i
            a[:, row, f], a[:, row + 1, f] = e[i - 1], y[i] * e[i - 1]
            a[:, row, g], a[:, row + 1, g] = 1, -y[i]
        if i == m:
            a[:, row, 2 * m + 1], a[:, row + 1, 2 * m + 1] = -1, -y[m + 1]
        else:
            f, g = 2 * i + 1, 2 * i + 2
            a[:, row, f], a[:, row + 1, f] = -1, -y[i + 1]
            a[:, row, g], a[:, row + 1, g] = -e[i], y[i + 1] * e[i]
    sign, _ = np.linalg.slogdet(a)
    # kz -> -kz exchanges f and g: over prod(kz e) the determinant is even in every kz.
    shape = (kz[1:-1] * np.exp(1j * kz[1:-1].real * films.kd[:, None])).prod(axis=0)
    return sign / (shape / np.abs(shape))


def contour_count(films: Films, pol: int, right: float, half_height: float) -> int:
    """Zeros with NEAR < Re gamma < right and |Im gamma| < half_height."""
    corners = [
        NEAR - 1j * half_height, right - 1j * half_height, right + 1j * half_height,
        NEAR + 1j * half_height, NEAR - 1j * half_height,
    ]  # fmt: skip
    total = 0.0
    for a, b in pairwise(corners):
        if a.real == b.real == NEAR:
            # Close to the axis modes near cut-off crowd around 0.
            t = np.sinh(np.linspace(-1, 1, 1500) * np.arcsinh(half_height / NEAR)) * NEAR
            t *= np.sign(b.imag - a.imag)
            points = NEAR + 1j * t
        else:
            points = a + (b - a) * np.linspace(0, 1, 400)
        values = phase_of_determinant(films, pol, points)
        for _ in range(40):
            step = np.abs(np.angle(values[1:] / values[:-1]))
            rough = np.flatnonzero(step > PHASE_STEP)
            if rough.size == 0:
                break
            middle = 0.5 * (points[rough] + points[rough + 1])
            points = np.insert(points, rough + 1, middle)
            values = np.insert(values, rough + 1, phase_of_determinant(films, pol, middle))
        assert rough.size == 0, "a zero lies on the contour of the test"
        total += np.angle(values[1:] / values[:-1]).sum()
    return round(total / (2 * np.pi))


def found_inside(films: Films, modes: Modes, pol: int, right: float, half_height: float) -> int:
    g = modes.decay[:, 0 if films.bottom.real >= films.top.real else 1]
    inside = (g.real > NEAR) & (g.real < right) & (np.abs(g.imag) < half_height)
    return int((inside & (modes.polarization == pol)).sum())


def check(films: Films) -> None:
    modes = bound_modes(films)
    assert modes.missing == 0
    largest = np.sqrt(np.concatenate([films.eps_o, [films.bottom, films.top]])).real.max()
    farthest = modes.decay.real.max(initial=0.0)
    # Heights and widths within the region that the search promises.
    half_height = 1.7 * largest
    for pol in (S, P):
        right = max(FAR, 1.31 * farthest)
        counted = contour_count(films, pol, right, half_height)
        found = found_inside(films, modes, pol, right, half_height)
        assert found == counted, f"{'sp'[pol]}: found {found}, counted {counted} in {films}"


# --- random stacks ----------------------------------------------------------------------------


def dielectric(rng: Generator, low: float = 1.4, high: float = 2.4) -> complex:
    n = rng.uniform(low, high)
    k = 0.0 if rng.random() < 0.5 else 10 ** rng.uniform(-6, -1)
    return complex(n, k) ** 2


def outer(rng: Generator) -> tuple[complex, complex]:
    bottom = rng.uniform(1.3, 1.8) ** 2
    top = bottom if rng.random() < 0.2 else rng.uniform(1.0, 1.6) ** 2
    return bottom, top


def ordinary(rng: Generator) -> Films:
    m = int(rng.integers(1, 6))
    return stack([dielectric(rng) for _ in range(m)], list(rng.uniform(0.2, 5, m)), *outer(rng))


def thin_metal(rng: Generator) -> Films:
    films = ordinary(rng)
    j = int(rng.integers(films.kd.size))
    eps = complex(-(10 ** rng.uniform(0.0, 1.8)), 10 ** rng.uniform(-2, 0.8))
    return with_metal(films, j, eps, rng.uniform(0.02, 0.5))


def soft_metal(rng: Generator) -> Films:
    films = ordinary(rng)
    eps = complex(-rng.uniform(1, 10), 10 ** rng.uniform(-2, 0.5))
    return with_metal(films, int(rng.integers(films.kd.size)), eps, rng.uniform(0.03, 0.6))


def with_metal(films: Films, j: int, eps: complex, kd: float) -> Films:
    e, d = films.eps_o.copy(), films.kd.copy()
    e[j], d[j] = eps, kd
    return stack(list(e), list(d), films.bottom, films.top)


def coupled_guides(rng: Generator) -> Films:
    """Two guides, nearly or exactly alike, with what surrounds them, far apart."""
    guide, barrier = rng.uniform(1.9, 2.3) ** 2, rng.uniform(1.4, 1.6) ** 2
    side = rng.uniform(1.3, 1.6) ** 2
    width = rng.uniform(0.8, 4.0)
    apart = rng.uniform(9.0, 26.0)
    detuning = 10 ** rng.uniform(-12, -4) if rng.random() < 0.6 else 0.0
    loss = 0.0 if rng.random() < 0.5 else 10 ** rng.uniform(-8, -2)
    eps = complex(guide, loss)
    outermost = [side, side * (1 + detuning)]
    return stack([eps, barrier, eps], [width, apart, width * (1 + detuning)], *outermost)


def near_cutoff(rng: Generator, decay: float = 1.0) -> Films:
    """A mode within 1e-4 of the larger outer index; with -1, one that is not yet bound."""
    bottom, top = outer(rng)
    line = np.sqrt(max(bottom, top))
    u = line + 10 ** rng.uniform(-8, -4.01)
    eps = [rng.uniform(line + 0.1, 2.4) ** 2, rng.uniform(line + 0.2, 2.5) ** 2]
    cover = rng.uniform(0.3, 2.0)
    kz = [np.sqrt(complex(e - u * u)) for e in (bottom, *eps, top)]
    kz = [-k if k.imag < 0 else k for k in kz]
    for i, e in ((0, bottom), (3, top)):
        # Growing instead of decaying in the medium whose light line it is.
        kz[i] *= decay if e == max(bottom, top) else 1.0
    pol = int(rng.integers(2))
    y = [k / e for k, e in zip(kz, (bottom, *eps, top), strict=True)] if pol == P else kz

    def r(i: int, j: int) -> complex:
        return (y[i] - y[j]) / (y[i] + y[j])

    behind = np.exp(2j * kz[1] * cover) * r(1, 0)
    below = (r(2, 1) + behind) / (1 + r(2, 1) * behind)
    turn = np.angle(below * r(2, 3))
    width = (2 * np.pi * int(rng.integers(1, 3)) - turn) / (2 * kz[2].real)
    if rng.random() < 0.3:
        eps[0] = complex(eps[0], 10 ** rng.uniform(-8, -5))
    return stack([complex(eps[0]), complex(eps[1])], [cover, float(width)], bottom, top)


def not_yet_bound(rng: Generator) -> Films:
    return near_cutoff(rng, -1.0)


FAMILIES: dict[str, tuple[Callable[[Generator], Films], int]] = {
    "ordinary": (ordinary, 40),
    "thin metal": (thin_metal, 60),
    "soft metal": (soft_metal, 20),
    "coupled guides": (coupled_guides, 40),
    "near cut-off": (near_cutoff, 40),
    "not yet bound": (not_yet_bound, 20),
}
ALL = [(name, i) for name, (_, number) in FAMILIES.items() for i in range(number)]


def made(name: str, i: int) -> Films:
    return FAMILIES[name][0](default_rng([SEED, list(FAMILIES).index(name), i]))


@pytest.mark.parametrize(("name", "i"), ALL)
def test_all_modes_of_more_than_two_hundred_random_stacks_are_found(name: str, i: int) -> None:
    check(made(name, i))


def nearest_to_line(films: Films, modes: Modes) -> float:
    """Distance of a mode's index from the larger outer index; 1 without any."""
    line = np.sqrt(max(films.bottom.real, films.top.real))
    return float(np.abs(modes.u - line).min(initial=1.0))


def closest_pair(films: Films) -> float:
    """Smallest distance of two modes of one polarization; 1 if there are not two."""
    modes = bound_modes(films)
    apart = np.abs(modes.u[:, None] - modes.u[None, :])
    same = modes.polarization[:, None] == modes.polarization[None, :]
    return float(np.where(same & ~np.eye(modes.u.size, dtype=bool), apart, 1.0).min(initial=1.0))


def test_the_families_hold_what_they_promise() -> None:
    every = {name: [made(name, i) for i in range(number)] for name, (_, number) in FAMILIES.items()}
    assert sum(map(len, every.values())) >= 200
    metals = [films for name in ("thin metal", "soft metal") for films in every[name]]
    assert sum(bool((films.kd[films.eps_o.real < 0] <= 0.6).any()) for films in metals) >= 60
    soft = [(films.eps_o.real > -10) & (films.eps_o.real < -1) for films in metals]
    assert sum(bool(one.any()) for one in soft) >= 20
    pairs = np.array([closest_pair(films) for films in every["coupled guides"]])
    assert (pairs < 1e-3).sum() >= 40
    assert (pairs < 1e-8).sum() >= 10
    bound = [nearest_to_line(films, bound_modes(films)) for films in every["near cut-off"]]
    assert (np.array(bound) < 1e-4).sum() >= 40
    for films in every["not yet bound"]:
        assert nearest_to_line(films, bound_modes(films)) > 1e-4
        assert nearest_to_line(films, zeros_on_all_sheets(films, 1e-3)) < 1e-4
