"""Effective indices against closed forms and textbook characteristic equations."""

from __future__ import annotations

import csv
import tomllib
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq

from optics.kernels.halfstack import P, S
from optics.kernels.modal_sheet import Films
from optics.kernels.poles import Modes, bound_modes, leaky_modes, zeros_on_all_sheets

PUBLISHED = Path(__file__).parent.parent / "published"


def stack(eps: list[complex], thickness_nm: list[float], ends: tuple[complex, complex],
          nm: float = 550.0, eps_e: list[complex] | None = None) -> Films:  # fmt: skip
    e = np.array(eps, complex)
    normal = e.copy() if eps_e is None else np.array(eps_e, complex)
    return Films(e, normal, 2 * np.pi / nm * np.array(thickness_nm, float),
                 complex(ends[0]), complex(ends[1]))  # fmt: skip


def indices(modes: Modes, pol: int) -> np.ndarray:
    assert modes.missing == 0
    return modes.u[modes.polarization == pol]


def published(name: str) -> list[dict[str, str]]:
    with (PUBLISHED / name).open() as file:
        return list(csv.DictReader(line for line in file if not line.startswith("#")))


def test_modes_of_the_published_slab() -> None:
    modes = bound_modes(stack([1.8**2], [200.0], (1.5**2, 1.0)))
    for row in published("dipole_lossless_slab_modes.csv"):
        pol = S if row["mode"].startswith("TE") else P
        assert indices(modes, pol) == pytest.approx([float(row["mode_index"])], abs=1e-8)


def textbook_slab(n: float, nb: float, nt: float, kd: float, pol: int) -> list[float]:
    """Roots of h D = m pi + atan(f gb/h) + atan(f gt/h), mode by mode."""

    def lack(index: float, m: int) -> float:
        h = np.sqrt(n * n - index * index)
        turns = m * np.pi
        for outer in (nb, nt):
            f = (n / outer) ** 2 if pol == P else 1.0
            turns += np.arctan(f * np.sqrt(max(index * index - outer * outer, 0.0)) / h)
        return float(h * kd - turns)

    low, high = max(nb, nt) * (1 + 1e-15), n * (1 - 1e-12)
    found = []
    for m in range(200):
        if lack(low, m) <= 0:
            break
        found.append(brentq(lack, low, high, args=(m,), xtol=1e-14))
    return found


@pytest.mark.parametrize("pol", [S, P])
@pytest.mark.parametrize("kd", [0.01, 0.3, 2.0, 11.0, 60.0])
@pytest.mark.parametrize(("nb", "nt"), [(1.5, 1.0), (1.5, 1.5), (1.5, 1.4999999)])
def test_textbook_slab(pol: int, kd: float, nb: float, nt: float) -> None:
    nm = 2 * np.pi
    modes = bound_modes(stack([2.1**2], [kd], (nb**2, nt**2), nm))
    expected = textbook_slab(2.1, nb, nt, kd, pol)
    assert indices(modes, pol) == pytest.approx(expected, abs=1e-10)


@pytest.mark.parametrize("pol", [S, P])
@pytest.mark.parametrize("m", [0, 1, 4])
def test_modes_appear_at_their_cut_off(pol: int, m: int) -> None:
    """Cut-off of mode m: h D = m pi + atan(f g/h) with u at the larger outer index."""
    n, nb, nt = 2.0, 1.5, 1.0
    h, g = np.sqrt(n * n - nb * nb), np.sqrt(nb * nb - nt * nt)
    cut_off = (m * np.pi + np.arctan((n / nt) ** (2 if pol == P else 0) * g / h)) / h
    for change, number in ((-1e-6, m), (1e-6, m + 1)):
        kd = cut_off * (1 + change)
        modes = bound_modes(stack([n * n], [kd], (nb * nb, nt * nt), 2 * np.pi))
        assert len(indices(modes, pol)) == number
    # Just beyond, to first order: h^2 change = g f, and u - nb = g^2 / (2 nb).
    g = h * h * cut_off * 1e-6 / ((n / nb) ** 2 if pol == P else 1.0)
    assert modes.decay[modes.polarization == pol][-1, 0].real == pytest.approx(g, rel=1e-3)


@pytest.mark.parametrize("row", published("modes_plasmon_interface.csv"), ids=lambda r: r["metal"])
def test_plasmon_of_one_interface(row: dict[str, str]) -> None:
    model = tomllib.loads((PUBLISHED / "nk_lorentz_drude.toml").read_text())[row["metal"]]
    w = 1239.841984 / 550.0
    terms = [(model["f0"], model["gamma0_eV"], 0.0), *model["oscillators"]]
    eps = 1 + sum(
        f * model["plasma_eV"] ** 2 / (w0 * w0 - w * w - 1j * w * g) for f, g, w0 in terms
    )
    film = 1.7**2
    modes = bound_modes(stack([film], [150.0], (eps, film)))
    assert indices(modes, P) == pytest.approx([np.sqrt(eps * film / (eps + film))], abs=1e-12)
    printed = complex(float(row["n_eff_real"]), float(row["n_eff_imag"]))
    assert indices(modes, P)[0] == pytest.approx(printed, abs=1e-8)
    assert len(indices(modes, S)) == 0


def gap_residual(u: complex, gap: complex, metal: complex, kd: float, sign: int) -> complex:
    """tanh(g d/2)^(+-1) + (eps_gap g_metal)/(eps_metal g_gap): symmetric and other p modes."""
    g, gm = np.sqrt(u * u - gap), np.sqrt(u * u - metal)
    return np.tanh(g * kd / 2) ** sign + gap * gm / (metal * g)


@pytest.mark.parametrize("thickness_nm", [0.3, 20.0, 120.0])
def test_gap_between_two_metals(thickness_nm: float) -> None:
    nm, metal, gap = 600.0, -16 + 0.8j, 1.6**2
    kd = 2 * np.pi / nm * thickness_nm
    modes = bound_modes(stack([gap], [thickness_nm], (metal, metal), nm))
    found = indices(modes, P)
    assert found[0].real > 1.6  # the plasmon of the gap has no cut-off
    for u in found:
        residuals = [abs(gap_residual(u, gap, metal, kd, sign)) for sign in (1, -1)]
        assert min(residuals) < 1e-9 * max(1.0, abs(u))
    if thickness_nm == 0.3:
        # Narrow gaps, from the quasi-static limit: tanh(u d/2) = -eps_gap/eps_metal.
        assert found[0] == pytest.approx(2 / kd * np.arctanh(-gap / metal), rel=0.01)


def test_backward_mode_of_thin_silver_in_zinc_sulfide_like_films() -> None:
    """25 nm of a metal near its plasma resonance: a pole below the axis, on a symmetric film.

    Its equation is the textbook one for a film between equal half spaces.
    """
    nm, metal, outside = 390.0, -2.26 + 0.29j, 2.5**2
    modes = bound_modes(stack([metal], [25.0], (outside, outside), nm))
    found = indices(modes, P)
    backward = found[found.imag < 0]
    assert len(backward) == 1
    kd = 2 * np.pi / nm * 25.0
    for u in found:
        g, gm = np.sqrt(u * u - outside), np.sqrt(u * u - metal)
        ratio = metal * g / (outside * gm)
        assert min(abs(np.tanh(gm * kd / 2) ** sign + ratio) for sign in (1, -1)) < 1e-10
    s_modes = modes.u[modes.polarization == S]
    assert (s_modes.imag >= 0).all()


def test_birefringent_slab() -> None:
    """p modes of a uniaxial slab: h = sqrt(eps_o (1 - u^2/eps_e)), f = eps_o / eps_outer."""
    eo, ee, outer, kd = 1.9**2, 1.7**2, 1.5**2, 9.0
    modes = bound_modes(stack([eo], [kd], (outer, outer), 2 * np.pi, [ee]))
    found = indices(modes, P).real
    assert len(found) >= 1
    for m, u in enumerate(found):
        h, g = np.sqrt(eo * (1 - u * u / ee)), np.sqrt(u * u - outer)
        assert h * kd == pytest.approx(m * np.pi + 2 * np.arctan(eo / outer * g / h), abs=1e-10)
    assert len(indices(modes, S)) == 4 > len(found)  # the ordinary index is the larger one


def test_splitting_a_film_changes_nothing() -> None:
    metal = (0.06 + 3.6j) ** 2
    whole = bound_modes(stack([3.2, metal, 3.0], [80, 15, 60], (2.3, 1.0)))
    parts = bound_modes(stack([3.2, metal, metal, 3.0, 3.0], [80, 6, 9, 0, 60], (2.3, 1.0)))
    assert parts.u == pytest.approx(whole.u, abs=1e-10)


def test_a_metal_as_thick_as_you_like_overflows_nothing() -> None:
    metal = (0.06 + 3.6j) ** 2
    thick = bound_modes(stack([3.2, metal], [150, 1e5], (2.3, 1.0)))
    limit = bound_modes(stack([3.2], [150], (2.3, metal)))
    assert thick.missing == 0
    for u in limit.u[limit.u.real > 1.6]:
        assert np.abs(thick.u - u).min() < 1e-9


def test_two_far_guides_have_a_pair_of_modes_within_rounding() -> None:
    modes = bound_modes(stack([4.0, 2.25, 4.0], [300, 9000, 300], (2.25, 2.25)))
    one = bound_modes(stack([4.0], [300], (2.25, 2.25)))
    for pol in (S, P):
        assert len(indices(modes, pol)) == 2 * len(indices(one, pol))
        for u in indices(one, pol):
            assert np.sort(np.abs(indices(modes, pol) - u))[1] < 1e-13


def test_leaky_modes_of_a_cavity_radiate_outward() -> None:
    """Each solves the textbook slab's equation with outgoing waves on the leaking side."""
    n, outside, kd = 1.5, 2.0, 12.0  # an antiguide: every mode leaks
    films = stack([n * n], [kd], (outside**2, outside**2), 2 * np.pi)
    modes = leaky_modes(films, 0.2)
    assert modes.missing == 0
    assert len(bound_modes(films).u) == 0
    found = modes.u[modes.polarization == S]
    assert len(found) > 3
    for u in found:
        h, k_out = np.sqrt(n * n - u * u + 0j), np.sqrt(outside**2 - u * u + 0j)
        k_out = k_out if k_out.real > 0 else -k_out
        r = (h - k_out) / (h + k_out)
        assert abs((r * np.exp(1j * h * kd)) ** 2 - 1) < 1e-9
        assert u.imag > 0
        assert k_out.imag < 0


def test_a_leaky_mode_draws_nothing_in_from_the_other_side() -> None:
    """Waves below a light line run away from the stack on that side, leaking or not.

    A stack between glass and a polymer with a thin metal; its function has a zero that decays
    toward the glass, fed from there, and leaks into the polymer.
    """
    metal = (0.06 + 3.5j) ** 2
    films = stack([1.9**2 + 0.05j, 3.1, metal, 3.2], [150, 90, 12, 60], (1.52**2, 1.7**2), 540.0)
    every = zeros_on_all_sheets(films, 0.3)
    lines = np.array([1.52, 1.7])
    below = every.u.real[:, None] < lines
    incoming = below & (every.decay.imag > 0.0)
    decays = every.decay.real > 0.0
    drawn = (incoming & decays).any(axis=1) & (every.decay.real < 0.0).any(axis=1)
    assert drawn.any()
    leaky = leaky_modes(films, 0.3)
    assert len(leaky.u) > 0
    below = leaky.u.real[:, None] < lines
    assert (leaky.decay.imag[below] < 0.0).all()
    assert (leaky.decay.real[~below] > 0.0).all()


def test_a_mode_that_leaks_by_less_than_rounding_is_still_leaky() -> None:
    films = stack([1.4**2, 1.8**2], [6000, 400], (1.9**2, 1.0), 560.0)
    held = bound_modes(stack([1.4**2, 1.8**2], [6000, 400], (1.4**2, 1.0), 560.0))
    leaky = leaky_modes(films, 1e-6)
    # All but the one that is held by grazing incidence alone.
    deep = held.u.real > 1.42
    assert deep.sum() >= 4
    for pol, u in zip(held.polarization[deep], held.u[deep], strict=True):
        assert np.abs(indices(leaky, pol) - u).min() < 1e-12
    assert len(bound_modes(films).u) == 0


@pytest.mark.parametrize(
    ("films", "ends"),
    [
        ([2.25], (2.25, 2.25)),
        ([4.0], (2.25, 1.0)),
        ([2.25, -2.25], (2.25, 1.0)),
        ([2.25], (-10, -10)),
    ],
    ids=["no contrast", "zero thickness", "plasma resonance without loss", "lossless metal guide"],
)
def test_odd_stacks_are_ordinary_input(films: list[complex], ends: tuple[complex, complex]) -> None:
    thickness = [0.0] if films == [4.0] else [200.0, 20.0][: len(films)]
    modes = bound_modes(stack(films, thickness, ends))
    assert modes.missing == 0
    assert (modes.u.real > 0.0).all()
    if ends != (-10, -10):
        assert len(modes.u) == (2 if -2.25 in films else 0)
        return
    # Between lossless metals: h d = m pi + 2 atan(f g/h), all real.
    for pol, u in zip(modes.polarization, modes.u.real, strict=True):
        h, g = np.emath.sqrt(2.25 - u * u), np.sqrt(u * u + 10)
        f = -0.225 if pol == P else 1.0
        turn = np.exp(2j * h * 2 * np.pi / 550 * 200.0)
        assert turn * ((h - 1j * f * g) / (h + 1j * f * g)) ** 2 == pytest.approx(1, abs=1e-9)
