"""Two-ports and absorption of film sequences against `tmm` and textbook thin films."""

from __future__ import annotations

import cmath
import math
import tomllib
from pathlib import Path

import numpy as np
import pytest
import tmm  # type: ignore[import-untyped]
from probe import HalfStack, P, S, half_stack
from reference import Reference
from stacks import Film, film, metal, problem_of

PUBLISHED = Path(__file__).parents[1] / "published"
ROUNDING = 1e-11
SHARES = [0.0, 0.2, 0.5, 0.9]


def of_sequence(
    n_in: float, films: list[Film], n_out: complex, nm: float, u: list[complex]
) -> HalfStack:
    """The films between two half spaces, seen from the first, which plays the emitter film."""
    stack = Reference(nm, [film(n_in, 10.0), *films], n_in**2, complex(n_out) ** 2, 0, 5.0)
    return half_stack(problem_of(stack), True, u)


def reflectance(n_in: float, films: list[Film], n_out: complex, nm: float, u: float) -> np.ndarray:
    """R of s, p."""
    return np.asarray(np.abs(of_sequence(n_in, films, n_out, nm, [u]).r[:, 0]) ** 2)


def transmittance(found: HalfStack) -> np.ndarray:
    """T (2, n) from the emitter film's side."""
    return np.asarray(np.abs(found.t) ** 2 * found.y_out.real / found.y_in.real)


SEQUENCES = {
    "lossless": (1.7, [film(1.9, 80), film(1.4, 120)], 1.2),
    "absorbing": (1.8, [film(2.0 + 0.2j, 60), film(1.5, 90), film(1.7 + 0.03j, 40)], 1.52),
    "metals": (1.75, [metal(-12 + 0.5j, 15), film(1.6, 100), metal(-40 + 12j, 30)], 1.0),
    "into silicon": (1.6, [film(1.46, 70)], 4.0 + 0.03j),
    "single face": (1.5, [], 1.0),
}


@pytest.mark.parametrize("pol", ["s", "p"])
@pytest.mark.parametrize("name", SEQUENCES)
def test_two_port_equals_tmm(name: str, pol: str) -> None:
    n_in, films, n_out = SEQUENCES[name]
    u = [share * n_in for share in SHARES]
    found, row = of_sequence(n_in, films, n_out, 550, list(u)), S if pol == "s" else P
    indices = [n_in, *(cmath.sqrt(f[0]) for f in films), n_out]
    lengths = [np.inf, *(f[2] for f in films), np.inf]
    for i, kappa in enumerate(u):
        other = tmm.coh_tmm(pol, indices, lengths, math.asin(kappa / n_in), 550)
        assert found.r[row, i] == pytest.approx(other["r"], abs=ROUNDING)
        # tmm's t is of E; H carries the ratio of indices.
        t = other["t"] * (n_out / n_in if pol == "p" else 1.0)
        assert found.t[row, i] == pytest.approx(t, abs=ROUNDING)
        flux = found.y_in[row, i].real
        lost = tmm.absorp_in_each_layer(other)[1:-1]
        assert found.absorbed[row, 1:-1, i] / flux == pytest.approx(lost, abs=ROUNDING)


@pytest.mark.parametrize("pol", ["s", "p"])
@pytest.mark.parametrize("name", [n for n in SEQUENCES if n != "into silicon"])
def test_two_port_from_outside_equals_tmm(name: str, pol: str) -> None:
    n_in, films, n_out = SEQUENCES[name]
    assert isinstance(n_out, float)
    u = [share * min(n_in, n_out) for share in SHARES]
    found, row = of_sequence(n_in, films, n_out, 550, list(u)), S if pol == "s" else P
    indices = [n_in, *(cmath.sqrt(f[0]) for f in films), n_out][::-1]
    lengths = [np.inf, *(f[2] for f in films), np.inf][::-1]
    for i, kappa in enumerate(u):
        other = tmm.coh_tmm(pol, indices, lengths, math.asin(kappa / n_out), 550)
        assert found.r_out[row, i] == pytest.approx(other["r"], abs=ROUNDING)
        t = other["t"] * (n_in / n_out if pol == "p" else 1.0)
        assert found.t_in[row, i] == pytest.approx(t, abs=ROUNDING)
        lost = tmm.absorp_in_each_layer(other)[1:-1][::-1]
        flux = found.y_out[row, i].real
        assert found.absorbed_from_outside[row, 1:-1, i] / flux == pytest.approx(lost, abs=ROUNDING)


UNIAXIAL: list[Film] = [
    film(1.8 + 0.02j, 70, 1.65 + 0.1j),
    film(1.5, 60),
    film(1.7, 50, 1.9 + 0.2j),
]


@pytest.mark.parametrize("films", [SEQUENCES["absorbing"][1], SEQUENCES["metals"][1], UNIAXIAL])
def test_nothing_is_lost_and_transmittance_is_the_same_both_ways(films: list[Film]) -> None:
    """R + T + sum of A = 1, A being volume integrals; T both ways, absorbing or not."""
    found = of_sequence(1.7, films, 1.4, 550, [0.0, 0.4, 0.9, 1.3])
    through = transmittance(found)
    back = np.abs(found.t_in) ** 2 * found.y_in.real / found.y_out.real
    assert through == pytest.approx(back, rel=1e-12)
    lost = found.absorbed[:, 1:-1].sum(axis=1) / found.y_in.real
    assert np.abs(found.r) ** 2 + through + lost == pytest.approx(np.ones_like(lost), abs=1e-12)
    lost = found.absorbed_from_outside[:, 1:-1].sum(axis=1) / found.y_out.real
    assert np.abs(found.r_out) ** 2 + back + lost == pytest.approx(np.ones_like(lost), abs=1e-12)


def test_each_film_absorbs_its_own_share() -> None:
    """Only films with loss absorb, and together what R and T leave over."""
    films = SEQUENCES["absorbing"][1]
    found = of_sequence(1.8, films, 1.52, 550, [0.3, 1.1])
    rest = 1 - np.abs(found.r) ** 2 - transmittance(found)
    by_film = found.absorbed[:, 1:-1] / found.y_in.real[:, None]
    assert (by_film[:, 1] == 0.0).all()
    assert (by_film[:, [0, 2]] > 1e-3).all()
    assert by_film.sum(axis=1) == pytest.approx(rest, abs=1e-12)


def test_brewster_angle() -> None:
    """1 to 1.5 at 56.309932 degrees: tan(theta) = n2/n1."""
    angle = math.radians(56.309932)
    assert reflectance(1.0, [], 1.5, 550, math.sin(angle))[P] < 1e-15
    assert reflectance(1.0, [], 1.5, 550, math.sin(angle))[S] > 0.1


def test_critical_angle() -> None:
    """1.8 to 1.5 at 56.442690 degrees."""
    below, beyond = (1.8 * math.sin(math.radians(56.442690 + d)) for d in (-1e-4, 1e-4))
    assert (reflectance(1.8, [], 1.5, 550, below) < 1 - 1e-3).all()
    assert reflectance(1.8, [], 1.5, 550, beyond) == pytest.approx([1.0, 1.0], abs=1e-14)


def test_quarter_wave_coating() -> None:
    """MgF2 (1.38) on 1.52: R = 0.01260079."""
    coating = [film(1.38, 550 / (4 * 1.38))]
    assert reflectance(1.0, coating, 1.52, 550, 0.0) == pytest.approx([0.01260079] * 2, abs=5e-9)


def test_pairs_of_quarter_waves() -> None:
    """R = ((n0 - ns (nH/nL)^2N)/(n0 + ns (nH/nL)^2N))^2; N = 5: 0.9777061888."""
    pair = [film(2.35, 550 / (4 * 2.35)), film(1.46, 550 / (4 * 1.46))]
    for pairs in (1, 2, 5):
        y = 1.52 * (2.35 / 1.46) ** (2 * pairs)
        found = reflectance(1.0, pair * pairs, 1.52, 550, 0.0)
        assert found == pytest.approx([((1 - y) / (1 + y)) ** 2] * 2, abs=1e-13)
    assert found == pytest.approx([0.9777061888] * 2, abs=5e-11)


@pytest.mark.parametrize("n", [1.38, 2.1])
def test_absentee_half_wave(n: float) -> None:
    """A half wave leaves R unchanged, along the normal and, by its own phase, elsewhere."""
    bare = reflectance(1.0, [film(1.7, 60)], 1.52, 550, 0.0)
    layer = film(n, 550 / (2 * n))
    assert reflectance(1.0, [layer, film(1.7, 60)], 1.52, 550, 0.0) == pytest.approx(
        bare, abs=1e-14
    )
    u = 0.6
    tilted = film(n, 550 / (2 * math.sqrt(n**2 - u**2)))
    bare = reflectance(1.0, [film(1.7, 60)], 1.52, 550, u)
    assert reflectance(1.0, [tilted, film(1.7, 60)], 1.52, 550, u) == pytest.approx(bare, abs=1e-14)


def lorentz_drude(name: str, nm: float) -> complex:
    """Permittivity from the published parameters (Rakic et al. 1998)."""
    table = tomllib.loads((PUBLISHED / "nk_lorentz_drude.toml").read_text(encoding="utf-8"))[name]
    w, plasma = 1239.841984 / nm, table["plasma_eV"]
    eps = 1 - table["f0"] * plasma**2 / (w * (w + 1j * table["gamma0_eV"]))
    for strength, width, at in table["oscillators"]:
        eps += strength * plasma**2 / (at**2 - w**2 - 1j * w * width)
    return complex(eps)


@pytest.mark.parametrize("name", ["silver", "aluminum"])
def test_surface_plasmon_is_the_pole_of_the_reflection(name: str) -> None:
    """r of p grows without bound at n_eff = sqrt(eps1 eps2/(eps1 + eps2)): secant on 1/r."""
    text = (PUBLISHED / "nk_lorentz_drude.toml").read_text(encoding="utf-8")
    printed = complex(*tomllib.loads(text)["plasmon"][name])
    n_metal = cmath.sqrt(lorentz_drude(name, 550))

    def inverse(u: complex) -> complex:
        return complex(1 / of_sequence(1.7, [], n_metal, 550, [u]).r[P, 0])

    a, b = printed + 1e-3, printed - 1e-3j
    at_a, at_b = inverse(a), inverse(b)
    for _ in range(8):
        if abs(at_b) < 1e-13:
            break
        a, b, at_a = b, b - at_b * (b - a) / (at_b - at_a), at_b
        at_b = inverse(b)
    assert b == pytest.approx(printed, abs=1e-8)
    # s has no such pole.
    assert abs(of_sequence(1.7, [], n_metal, 550, [b]).r[S, 0]) < 10
