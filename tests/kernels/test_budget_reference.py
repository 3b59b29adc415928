"""The engine against every stored answer of the literal model (tests/reference.py)."""

from __future__ import annotations

import pytest
from reference_cases import ReferenceCase, load
from stacks import HORIZONTAL, VERTICAL, answers, imbalance, solved

CASES = {case.name: case for case in load()}
# Dissipated power next to which doubles keep 1e-12 of each sum of some thousand terms.
ROUNDING = 1e-12


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


# 1e-6 is the promise at default settings; asked for more, the engine promises that.
@pytest.mark.parametrize("tolerance", [1e-6, 1e-9])
@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_engine_equals_the_literal_model(case: ReferenceCase, tolerance: float) -> None:
    worst, where, _ = worst_miss(case, tolerance)
    assert worst <= tolerance + case.stated_error, where


@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_reported_error_is_not_optimistic(case: ReferenceCase) -> None:
    worst, where, estimate = worst_miss(case, 1e-6)
    assert worst <= estimate + case.stated_error + ROUNDING, where


@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_engine_meets_its_own_tolerance(case: ReferenceCase) -> None:
    """The estimate that is reported stays within what was asked for."""
    budget = solved(case, 1e-6)
    assert budget.error[0] <= 1e-6
    assert imbalance(budget) <= 1e-6
