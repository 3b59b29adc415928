"""The engine against every stored answer of the literal model (tests/reference.py)."""

from __future__ import annotations

import pytest
from reference_cases import ReferenceCase, load
from stacks import HORIZONTAL, VERTICAL, answers, imbalance, solved

CASES = {case.name: case for case in load()}
# Dissipated power next to which doubles keep 1e-12 of each sum of some thousand terms.
ROUNDING = 1e-12
# The plasmon on the far side of 100 nm aluminum is a sharp line at kappa = 1.01 k0 that carries
# some 1e-9 of the power; nodes pass it by unless tighter still is asked for.
SHY_PLASMON = (
    "bottom_oled_planar",
    "bottom_oled_matched",
    "bottom_oled_absorbing_glass",
    "bottom_oled_absorbing_matched",
    "birefringent_emitter",
    "zero_thickness",
    "emitter_film_with_k",
)
BEHIND_THE_METAL = pytest.mark.xfail(
    strict=True, reason="1.3e-9 to 2.3e-9 where 1e-9 was asked for: see SHY_PLASMON"
)


def worst_miss(case: ReferenceCase, tolerance: float) -> tuple[float, str, float]:
    """Largest deviation over F, of which quantity, and the engine's own estimate."""
    budget = solved(case, tolerance)
    worst, where = 0.0, ""
    for orientation, stored in ((VERTICAL, case.vertical), (HORIZONTAL, case.horizontal)):
        got = answers(budget, orientation)
        scale = stored["dissipated"]
        assert scale is not None
        assert stored.keys() == got.keys()
        for name, value in stored.items():
            if value is None:  # no slab on that side
                assert got[name] == 0.0
                continue
            miss = abs(got[name] - value) / scale
            if miss > worst:
                worst, where = miss, f"{name} of orientation {orientation}"
    return worst, where, float(budget.error[0])


@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_engine_equals_the_literal_model(case: ReferenceCase) -> None:
    """1e-6 of the dissipated power is the promise at default settings."""
    worst, where, estimate = worst_miss(case, 1e-6)
    assert worst <= 1e-6 + case.stated_error, where
    assert worst <= estimate + case.stated_error + ROUNDING, f"optimistic about {where}"


@pytest.mark.parametrize(
    "case",
    [
        pytest.param(c, id=c.name, marks=BEHIND_THE_METAL if c.name in SHY_PLASMON else ())
        for c in CASES.values()
    ],
)
def test_engine_meets_a_tighter_tolerance(case: ReferenceCase) -> None:
    """Asked for 1e-9 it has to deliver 1e-9: the tolerance is the promise."""
    worst, where, _ = worst_miss(case, 1e-9)
    assert worst <= 1e-9 + case.stated_error, where


@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_engine_meets_its_own_tolerance(case: ReferenceCase) -> None:
    """The estimate that is reported stays within what was asked for."""
    budget = solved(case, 1e-6)
    assert budget.error[0] <= 1e-6
    assert imbalance(budget) <= 1e-6
