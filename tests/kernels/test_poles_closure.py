"""Shares by film sum to one where that is hard, and the stated error says how far off they are.

The films' account on real wavevectors against the engine's dissipated power, found on paths in
the complex plane. Random stacks are invented, with fixed seeds.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest
from numpy.random import Generator, default_rng
from stacks import Film, Slab, film, metal, problem_of, slab, solved

from optics.kernels.budget import AIR_BOTTOM, AIR_TOP
from optics.kernels.halfstack import P, S
from optics.kernels.modal_absorption import FILMS, LEAVES, TRAPPED
from optics.kernels.modal_nodes import Account, account
from optics.kernels.modal_power import mode_powers
from optics.kernels.poles import films_of, leaky_modes

SEED = 4003
WEIGHT = np.array([[0.3], [0.7]])
OF_BUDGET = 1e-8  # asked of the light budget that the account is compared with
CLOSED = 1e-5  # promised of every account


@dataclass(frozen=True)
class Stack:
    wavelength_nm: float
    films: list[Film]
    bottom: complex
    top: complex
    emitter: int
    z_nm: float
    substrate: Slab | None = None
    cover: Slab | None = None


def closure(stack: Stack) -> tuple[float, float, Account]:
    """Sum of all shares less 1, stated error, and the account."""
    dissipated = WEIGHT[:, 0] @ solved(stack, OF_BUDGET).dissipation[0, 0]
    found = account(problem_of(stack), 0, stack.emitter, WEIGHT, 1e-6)
    total = found.by_place[1:].sum() + found.stays_guided
    return total / dissipated - 1.0, found.miss / dissipated, found


def check(stack: Stack) -> Account:
    error, stated, found = closure(stack)
    assert abs(error) < CLOSED
    assert abs(error) <= stated + 2.0 * OF_BUDGET
    return found


# --- next to a cut-off ------------------------------------------------------------------------


def cut_off_nm(m: int, pol: int) -> float:
    """Thickness at which mode m of the published slab, 1.8 between 1.5 and 1, appears."""
    n, nb, nt, nm = 1.8, 1.5, 1.0, 550.0
    h, g = np.sqrt(n * n - nb * nb), np.sqrt(nb * nb - nt * nt)
    f = (n / nt) ** 2 if pol == P else 1.0
    return float((m * np.pi + np.arctan(f * g / h)) / h * nm / (2 * np.pi))


@pytest.mark.parametrize("change", [1e-3, 1e-5, 1e-6, 1e-8, -1e-8, -1e-6, -1e-5, -1e-3])
@pytest.mark.parametrize(("m", "pol"), [(1, S), (1, P), (0, P), (3, S)])
def test_next_to_a_cut_off_on_either_side(m: int, pol: int, change: float) -> None:
    thickness_nm = cut_off_nm(m, pol) * (1 + change)
    check(Stack(550.0, [film(1.8, thickness_nm)], 1.5**2, 1.0, 0, 50.0))


@pytest.mark.parametrize("change", [1e-5, -1e-5])
def test_next_to_a_cut_off_all_but_rounding_is_found(change: float) -> None:
    thickness_nm = cut_off_nm(1, S) * (1 + change)
    error, stated, _ = closure(Stack(550.0, [film(1.8, thickness_nm)], 1.5**2, 1.0, 0, 50.0))
    assert abs(error) < 2.0 * OF_BUDGET
    assert stated < 1e-7


# --- guides that leak by tunneling only ---------------------------------------------------------

LEAKS = {
    "birefringent core": Stack(
        560.0, [film(1.46, 1310), film(1.83, 463, 1.72), film(1.62, 60), film(1.4, 300)],
        1.887**2, 1.0, 1, 200.0, slab(),
    ),
    "open": Stack(560.0, [film(1.4, 1300), film(1.8, 400)], 1.9**2, 1.0, 1, 150.0),
    "far": Stack(560.0, [film(1.4, 4000), film(1.8, 400)], 1.9**2, 1.0, 1, 150.0),
    "lossy": Stack(
        560.0, [film(1.4, 1500), film(1.8 + 1e-13j, 400), film(1.7, 40)], 1.9**2, 1.0, 2, 15.0,
        slab(k=1e-6),
    ),
    "both sides": Stack(
        560.0, [film(1.4, 900), film(1.8, 400), film(1.4, 900)], 1.9**2, 1.9**2, 1, 150.0,
        slab(), slab(),
    ),
}  # fmt: skip


@pytest.mark.parametrize("stack", LEAKS.values(), ids=LEAKS.keys())
def test_lines_of_guides_that_leak_by_tunneling_are_not_lost(stack: Stack) -> None:
    found = check(stack)
    assert found.stays_guided == 0.0 or stack.substrate is None


@pytest.mark.parametrize("barrier_nm", [600.0, 1500.0, 2200.0, 3500.0])
def test_tunneling_takes_all_guided_light_however_thick_the_barrier(barrier_nm: float) -> None:
    """What a guide on a thick film of low index holds ends in the glass of high index behind."""
    films = [film(1.4, barrier_nm), film(1.8, 400)]
    held = Stack(560.0, films, 1.4**2, 1.0, 1, 150.0)
    guided = account(problem_of(held), 0, 1, WEIGHT, 1e-6).stays_guided
    leaks = replace(held, bottom=1.9**2)
    found = check(leaks)
    assert guided > 0.4
    assert found.stays_guided == 0.0
    # The engine looks for such lines in a way of its own.
    expected = WEIGHT[:, 0] @ solved(leaks, 1e-7).shares[0, 0]
    assert found.by_place[LEAVES] == pytest.approx(expected[AIR_BOTTOM], abs=1e-6)
    assert found.by_place[LEAVES] > guided


def test_a_narrow_leak_and_a_faint_loss_share_a_mode_by_their_rates() -> None:
    """What the film takes of a mode is what its loss adds to Im u, over the whole of it."""
    clear = [film(1.4, 1900), film(1.8, 200), film(1.8, 200)]
    tinted = [film(1.4, 1900), film(1.8 + 1e-10j, 200), film(1.8, 200)]
    stack = Stack(560.0, tinted, 1.9**2, 1.0, 2, 50.0, slab("matched"))
    problem, other = problem_of(stack), problem_of(replace(stack, films=clear))
    films = films_of(problem, 0)
    modes, leaks = leaky_modes(films, 1e-6), leaky_modes(films_of(other, 0), 1e-6)
    assert modes.u.real == pytest.approx(leaks.u.real, abs=1e-9)
    power, _ = mode_powers(problem, 0, stack.emitter, films, modes, WEIGHT)
    by_loss = 1.0 - leaks.u.imag / modes.u.imag
    assert ((by_loss > 0.01) & (by_loss < 0.99)).any()
    found = check(stack)
    # Im u of 1e-10 is known to 1e-6 of itself.
    assert found.by_place[FILMS + 1] == pytest.approx(power @ by_loss, rel=1e-5)


# --- shares that are no shares on their own -----------------------------------------------------


def test_plasmons_that_meet_take_opposite_shares_of_any_size_and_together_little() -> None:
    """A forward and a backward plasmon just past the point where they have become a pair."""
    stack = Stack(400.0, [film(1.8, 60), metal(-2 + 0.005j, 20), film(1.8, 60)], 1.5**2, 1, 0, 40)
    found = check(stack)
    dissipated = WEIGHT[:, 0] @ solved(stack, OF_BUDGET).dissipation[0, 0]
    plasmons = found.modes.polarization == P
    u, share = found.modes.u[plasmons], found.power[plasmons] / dissipated
    assert len(u) == 2
    assert np.sign(u.imag).tolist() in ([1, -1], [-1, 1])
    assert share.max() > 1.0
    assert share.min() < 0.0
    assert 0.0 < share.sum() < 1.0


# --- random stacks ------------------------------------------------------------------------------


def any_film(rng: Generator) -> Film:
    n = rng.uniform(1.3, 2.4)
    k = 0.0 if rng.random() < 0.4 else 10 ** rng.uniform(-14, -0.5)
    if rng.random() < 0.25:
        eps = complex(-(10 ** rng.uniform(0, 1.8)), 10 ** rng.uniform(-2, 0.8))
        return metal(eps, 10 ** rng.uniform(0.5, 2.2))
    n_e = n if rng.random() < 0.7 else rng.uniform(1.3, 2.2)
    return film(n + 1j * k, 10 ** rng.uniform(0.7, 3.2), n_e + 1j * k)


def any_stack(rng: Generator) -> Stack:
    """Films of every kind between slabs, absorbing surroundings, or nothing."""
    films = [any_film(rng) for _ in range(int(rng.integers(1, 7)))]
    emitter = int(rng.integers(len(films)))
    n = rng.uniform(1.5, 2.1)
    thickness_nm = 10 ** rng.uniform(1, 2.7)
    films[emitter] = film(n, thickness_nm, n if rng.random() < 0.6 else rng.uniform(1.4, 2.2))
    bottom = complex(rng.choice([1.0, 1.52**2, rng.uniform(1.3, 2.2) ** 2]))
    top = complex(rng.choice([1.0, 1.33**2, 1.5**2]))
    k = 0.0 if rng.random() < 0.5 else 1e-6
    substrate = cover = None
    outside = rng.random()
    if outside < 0.15:
        bottom = complex(rng.uniform(1.0, 4.2), 10 ** rng.uniform(-9, 0.5)) ** 2
    elif outside < 0.8:
        substrate = slab("planar" if rng.random() < 0.8 else "matched", k)
    if outside >= 0.15 and rng.random() < 0.25:
        cover, top = slab(k=k), 1.5**2
    z_nm = thickness_nm * rng.uniform(0.2, 0.8)
    return Stack(rng.uniform(420, 680), films, bottom, top, emitter, z_nm, substrate, cover)


@pytest.mark.parametrize("i", range(200))
def test_all_light_of_two_hundred_random_stacks_ends_somewhere(i: int) -> None:
    check(any_stack(default_rng([SEED, 0, i])))


def behind_a_barrier(rng: Generator) -> Stack:
    """A guide that leaks through films of low index, by much or by next to nothing."""
    low, core = rng.uniform(1.3, 1.5), rng.uniform(1.7, 2.0)
    core_e = rng.uniform(1.6, 2.0) if rng.random() < 0.5 else core
    loss = 0.0 if rng.random() < 0.5 else 1j * 10 ** rng.uniform(-12, -2)
    films = [
        film(low, rng.uniform(300, 2500)),
        film(core + loss, rng.uniform(100, 700), core_e + loss),
        film(rng.uniform(1.5, 1.8), 60),
    ]
    if rng.random() < 0.5:
        films.append(film(low, rng.uniform(100, 2000)))
    bottom = rng.uniform(1.6, 2.3) ** 2
    top = 1.0 if rng.random() < 0.5 else 1.5**2
    substrate = slab(k=0.0 if rng.random() < 0.5 else 1e-6) if rng.random() < 0.7 else None
    return Stack(rng.uniform(450, 650), films, bottom, top, 2, 20.0, substrate)


@pytest.mark.parametrize("i", range(40))
def test_all_light_of_guides_behind_barriers_ends_somewhere(i: int) -> None:
    stack = behind_a_barrier(default_rng([SEED, 1, i]))
    found = check(stack)
    shares = WEIGHT[:, 0] @ solved(stack, 1e-7).shares[0, 0]
    for column, destination in ((LEAVES, AIR_BOTTOM), (LEAVES + 1, AIR_TOP)):
        assert found.by_place[column] == pytest.approx(shares[destination], abs=1e-5)
    assert found.by_place[TRAPPED:].min() > -1e-12
