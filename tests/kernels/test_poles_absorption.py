"""Where power ends, film by film: against the engine's own totals, found another way."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest
from stacks import Film, Slab, film, metal, problem_of, slab, solved

from optics.kernels.budget import ABSORBED, AIR_BOTTOM, AIR_TOP, COVER, GUIDED, SUBSTRATE
from optics.kernels.modal_absorption import FILMS, LEAVES, SLAB, SURROUNDINGS, TRAPPED
from optics.kernels.modal_nodes import Account, account

TOLERANCE = 3e-6


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


ORGANIC = [film(1.86 + 0.008j, 110), film(1.78, 60), film(1.8, 30), film(1.72, 50)]
GLASS = 1.52**2
STACKS = {
    "slab of glass": Stack(
        550.0, [*ORGANIC, metal(-11 + 0.8j, 100)], GLASS, 1.0, 2, 15.0, slab(k=1e-6)
    ),
    "two slabs": Stack(
        550.0, [*ORGANIC, metal(-11 + 0.8j, 18)], GLASS, GLASS, 2, 15.0, slab(k=1e-6), slab()
    ),
    "slab of high index": Stack(550.0, ORGANIC, 1.9**2, 1.0, 2, 15.0, slab(k=1e-6)),
    "matched": Stack(550.0, [*ORGANIC, metal(-11 + 0.8j, 100)], GLASS, 1, 2, 15.0, slab("matched")),
    "on silicon": Stack(550.0, ORGANIC, (4.08 + 0.03j) ** 2, 1.0, 2, 15.0),
    "on silicon, slab above": Stack(
        550.0, ORGANIC, (4.08 + 0.03j) ** 2, GLASS, 2, 15.0, None, slab(k=1e-6)
    ),
    "birefringent": Stack(
        520.0, [film(1.9 + 0.01j, 80, 1.7 + 0.03j), film(1.8, 40, 1.66)], GLASS, 1.0, 1, 9.0, slab()
    ),
    "backward": Stack(
        400.0, [film(1.9, 60), metal(-3 + 0.2j, 20), film(1.9, 60)], GLASS, 1.0, 0, 40.0
    ),
    "cavity": Stack(
        550.0, [metal(-11 + 0.5j, 35), film(1.8, 600), metal(-11 + 0.5j, 35)], GLASS, 1, 1, 140.0
    ),
}


def accounts(stack: Stack) -> list[Account]:
    problem = problem_of(stack)
    return [
        account(problem, 0, stack.emitter, np.array(weight, float), TOLERANCE)
        for weight in ([[1.0], [0.0]], [[0.0], [1.0]])
    ]


@pytest.mark.parametrize("stack", STACKS.values(), ids=STACKS.keys())
def test_all_power_ends_somewhere_and_agrees_with_the_budget(stack: Stack) -> None:
    budget = solved(stack, 1e-7)
    for orientation, found in enumerate(accounts(stack)):
        dissipated = budget.dissipation[0, 0, orientation]
        shares = budget.shares[0, 0, orientation] / dissipated
        place = found.by_place / dissipated
        closure = place[1:].sum() + found.stays_guided / dissipated
        assert closure == pytest.approx(1.0, abs=1e-5)
        assert place[LEAVES : LEAVES + 2] == pytest.approx(shares[[AIR_BOTTOM, AIR_TOP]], abs=1e-6)
        assert place[TRAPPED : TRAPPED + 2] == pytest.approx(shares[[SUBSTRATE, COVER]], abs=1e-6)
        # Below the outer light lines the budget's "absorbed" is part of what is found here.
        assert place[SLAB:].sum() >= shares[ABSORBED] - 1e-6
        assert found.by_place.min() > -1e-12


def test_transparent_films_absorb_nothing() -> None:
    for found in accounts(STACKS["slab of glass"]):
        assert (found.by_place[FILMS + 1 : FILMS + 4] == 0.0).all()
        assert found.by_place[FILMS] > 1e-3
        assert (found.by_place[SURROUNDINGS : SURROUNDINGS + 2] == 0.0).all()


@pytest.mark.parametrize("k", [1e-4, 1e-7, 1e-9, 1e-11, 1e-14])
def test_ever_fainter_absorption_swallows_all_guided_light(k: float) -> None:
    """Lines of any width: what a lossless film guides, the faintest loss absorbs."""
    films = [film(1.9, 120), film(1.75, 40)]
    clear = Stack(550.0, films, 1.5**2, 1.0, 1, 13.0)
    tinted = replace(clear, films=[film(1.9 + 1j * k, 120), film(1.75, 40)])
    for bright, dim in zip(accounts(clear), accounts(tinted), strict=True):
        guided = bright.stays_guided
        assert guided > 0.1
        assert dim.stays_guided == 0.0
        # Light on its way out is absorbed too: a few passes through 120 nm.
        passes = 8 * 4 * np.pi * k * 120 / 550
        assert dim.by_place[FILMS] == pytest.approx(guided, abs=passes + 1e-5 * guided)


def test_splitting_a_film_splits_its_absorption() -> None:
    whole = STACKS["two slabs"]
    thick, thin = metal(-11 + 0.8j, 12), metal(-11 + 0.8j, 6)
    parts = replace(whole, films=[*ORGANIC, thick, thin])
    for one, two in zip(accounts(whole), accounts(parts), strict=True):
        assert two.by_place[-2:].sum() == pytest.approx(one.by_place[-1], abs=1e-7)
        assert two.by_place[:-2] == pytest.approx(one.by_place[:-1], abs=1e-7)


@pytest.mark.parametrize("apart_nm", [1000.0, 2000.0, 6000.0])
@pytest.mark.parametrize("detuning_nm", [0.0, 1e-9])
def test_twin_guides_share_what_they_guide(apart_nm: float, detuning_nm: float) -> None:
    """Pairs of modes as close as 1e-7 down to rounding: their powers still sum to the budget's."""
    films = [film(2.0, 300), film(1.5, apart_nm), film(2.0, 300 + detuning_nm)]
    stack = Stack(550.0, films, 1.5**2, 1.5**2, 0, 100.0)
    shares = solved(stack, 1e-8).shares[0, 0]
    for orientation, found in enumerate(accounts(stack)):
        assert len(found.modes.u) == 8
        guided = shares[orientation, GUIDED]
        assert found.power.sum() == pytest.approx(guided, abs=1e-8)
        assert found.stays_guided == pytest.approx(guided, abs=1e-8)
