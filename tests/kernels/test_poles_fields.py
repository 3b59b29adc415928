"""Residues and fields of modes: closed forms, the engine's totals, and the mode's own balance."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from stacks import Film, film, metal, problem_of, solved

from optics.kernels.budget import GUIDED, SURFACE_PLASMON
from optics.kernels.halfstack import P, S
from optics.kernels.modal_fields import ABSORBED, FLOW, mode_content, mode_profile, residues
from optics.kernels.modal_sheet import Films
from optics.kernels.poles import Modes, bound_modes, films_of, outer_line
from optics.kernels.problem import Problem


@dataclass(frozen=True)
class Stack:
    wavelength_nm: float
    films: list[Film]
    bottom: complex
    top: complex
    emitter: int
    z_nm: float
    substrate: None = None
    cover: None = None


def content_of(films: Films, pol: int, s: complex) -> np.ndarray:
    content = np.zeros((3, films.kd.size + 2))
    mode_content(films, pol, s, content)
    return content


def mode_powers(problem: Problem, stack: Stack) -> tuple[Films, Modes, np.ndarray]:
    """Power of every mode by channel (n, 3): Re(i pi residue), minus that if backward."""
    films = films_of(problem, 0)
    modes = bound_modes(films)
    powers = np.zeros((len(modes.s), 3))
    source = problem.source
    for i, (pol, s) in enumerate(zip(modes.polarization, modes.s, strict=True)):
        found = np.zeros((3, 1), complex)
        residues(films, stack.emitter, pol, s, 0.0, source.kz_positions[0], source.eps_e[0],
                 source.bulk[0], found)  # fmt: skip
        forward = modes.u[i].imag or content_of(films, pol, s)[FLOW].sum()
        powers[i] = np.sign(forward) * (1j * np.pi * found[:, 0]).real
    return films, modes, powers


def test_power_of_each_mode_of_a_slab_in_closed_form() -> None:
    """n1 = 1.8 between 1.5 and 1: TE (2/D_eff) cos^2, TM with its own D_eff."""
    n1, nb, nt, nm, thick, z = 1.8, 1.5, 1.0, 550.0, 700.0, 150.0
    stack = Stack(nm, [film(n1, thick)], nb**2, nt**2, 0, z)
    _, modes, powers = mode_powers(problem_of(stack), stack)
    k0 = 2 * np.pi / nm
    assert len(modes.u) == 6
    for pol, index, power in zip(modes.polarization, modes.u.real, powers, strict=True):
        h, k1 = k0 * np.sqrt(n1**2 - index**2), k0 * n1
        gammas = [k0 * np.sqrt(index**2 - n**2) for n in (nb, nt)]
        f = (n1 / nb) ** 2 if pol == P else 1.0
        phase = h * z - np.arctan(f * gammas[0] / h)
        if pol == S:
            wide = thick + sum(1 / g for g in gammas)
            expected = [0, 0, 3 * np.pi / (4 * k1) * 2 / wide * np.cos(phase) ** 2]
        else:
            wide = thick
            for n, g in zip((nb, nt), gammas, strict=True):
                wide += 1 / (((index / n1) ** 2 + (index / n) ** 2 - 1) * g)
            part = 3 * np.pi / (4 * k1) * 2 / wide
            normal = 2 * part * (index / n1) ** 2 * np.cos(phase) ** 2
            expected = [normal, part * (h / k1) ** 2 * np.sin(phase) ** 2, 0]
        assert power == pytest.approx(expected, abs=1e-12)


LOSSLESS = {
    "films": Stack(500.0, [film(1.9, 120), film(1.75, 40), film(1.6, 60)], 1.5**2, 1.0, 1, 13.0),
    "birefringent": Stack(
        550.0, [film(1.9, 150, 1.75), film(1.8, 40, 1.66), film(2.0, 90, 2.1)], 1.5**2, 1.5**2, 1, 9
    ),
    "metal": Stack(550.0, [film(1.9, 120), film(1.75, 40), metal(-13, 90)], 1.5**2, 1.0, 1, 13.0),
    "thin metal": Stack(
        550.0, [film(1.9, 99), film(1.75, 40), metal(-13, 15), film(2.1, 60)], 1.5**2, 1.0, 1, 13.0
    ),
    "backward": Stack(400.0, [film(1.9, 60), metal(-3, 20), film(1.9, 60)], 1.5**2, 1.0, 0, 15.0),
}


@pytest.mark.parametrize("stack", LOSSLESS.values(), ids=LOSSLESS.keys())
def test_modes_make_up_all_trapped_power_of_lossless_stacks(stack: Stack) -> None:
    """There is no continuum beyond the outer light lines where nothing absorbs."""
    problem = problem_of(stack)
    _, modes, powers = mode_powers(problem, stack)
    trapped = powers[modes.u.real > outer_line(problem, 0)].sum(axis=0)
    shares = solved(stack, 1e-8).shares[0, 0]
    expected = shares[:, GUIDED] + shares[:, SURFACE_PLASMON]
    assert trapped[0] == pytest.approx(expected[0], abs=1e-7)
    assert trapped[1] + trapped[2] == pytest.approx(expected[1], abs=1e-7)


def test_a_lossless_backward_mode_takes_power_and_carries_it_the_other_way() -> None:
    stack = LOSSLESS["backward"]
    films, modes, powers = mode_powers(problem_of(stack), stack)
    flows = [content_of(films, p, s)[FLOW].sum() for p, s in zip(modes.polarization, modes.s)]  # noqa: B905
    assert sum(flow < 0 for flow in flows) == 1
    assert (powers > -1e-12).all()


def test_a_mode_loses_along_the_film_what_its_films_absorb() -> None:
    """Absorption = 2 Im u x power along the film: Poynting's theorem for the mode alone."""
    lossy = [film(1.86 + 0.008j, 110), film(1.78, 60, 1.7 + 1e-3j), film(1.8, 30),
             film(1.72, 50), metal(-11 + 0.8j, 30)]  # fmt: skip
    stack = Stack(550.0, lossy, 1.52**2, 1.0, 2, 15.0)
    films = films_of(problem_of(stack), 0)
    modes = bound_modes(films)
    assert len(modes.u) >= 3
    for pol, s, u in zip(modes.polarization, modes.s, modes.u, strict=True):
        content = content_of(films, pol, s)
        absorbed, along = content[ABSORBED].sum(), content[FLOW].sum()
        assert absorbed == pytest.approx(2 * u.imag * along, rel=1e-9)


def test_profile_is_continuous_and_decays_outside() -> None:
    stack = LOSSLESS["thin metal"]
    films = films_of(problem_of(stack), 0)
    modes = bound_modes(films)
    total = films.kd.sum()
    faces = np.concatenate([[0.0], np.cumsum(films.kd)])
    z = np.sort(np.concatenate([faces - 1e-9, faces + 1e-9, [-40.0, total + 40.0]]))
    for pol, s in zip(modes.polarization, modes.s, strict=True):
        field = np.zeros((2, z.size), complex)
        mode_profile(films, pol, s, z, field)
        assert np.abs(field[:, 1:-1:2] - field[:, 2:-1:2]).max() < 1e-7
        assert np.abs(field[:, [0, -1]]).max() < 1e-3
        assert 0.9 < np.abs(field).sum(axis=0).max() < 1.1


def test_profile_behind_a_barrier_stays_small() -> None:
    """A guide's mode far away in the other guide's place: no growth of rounding errors."""
    films = [film(2.0, 300), film(1.5, 6000), film(1.9, 300)]
    stack = Stack(550.0, films, 1.5**2, 1.5**2, 0, 150.0)
    gathered = films_of(problem_of(stack), 0)
    modes = bound_modes(gathered)
    z = np.array([150.0, 6450.0]) * 2 * np.pi / 550.0
    field = np.zeros((2, 2), complex)
    mode_profile(gathered, modes.polarization[0], modes.s[0], z, field)
    assert np.abs(field[:, 0]).max() > 0.5
    assert np.abs(field[:, 1]).max() < 1e-20
