"""Kept answers of the literal model are its own, and the tests find them."""

from __future__ import annotations

from dataclasses import replace
from itertools import islice

import numpy as np
import pytest
import reference_kept
from reference import Reference
from reference_kept import kept, key_of, literal, record_of, result_of
from robustness.random_stacks import AGAINST_LITERAL, FAMILIES, random_stack
from thin_metals import BEYOND, FAR, NEAR, TRAP, WITHIN, far_metal, thin_metal

# Every so many a stack is asked for again.
EVERY = 40


def asked() -> list[tuple[Reference, float]]:
    """Stacks of the tests that ask for them, of each random family the first."""
    stacks = [thin_metal(seed) for seed in (*range(NEAR), TRAP)]
    stacks += [far_metal(seed, factor) for factor in (BEYOND, WITHIN) for seed in range(FAR)]
    random = [
        Reference(**random_stack(family, number).given())
        for family in FAMILIES
        for number in range(AGAINST_LITERAL)
    ]
    return [(stack, 1e-9) for stack in stacks] + [(stack, 1e-10) for stack in random]


def test_answers_are_of_the_model_as_it_stands() -> None:
    """Else: python tests/published/generate_literal_answers.py.

    Another processor may round a random number differently; its answer is computed then.
    """
    every = asked()
    found = sum(key_of(stack, tolerance) in kept() for stack, tolerance in every)
    assert found >= 0.95 * len(every)


@pytest.mark.parametrize("place", range(0, NEAR + 1 + 2 * FAR, EVERY))
def test_the_model_says_it_again(place: int) -> None:
    (stack, tolerance) = next(islice(asked(), place, None))
    record = kept()[key_of(stack, tolerance)]
    again = record_of(stack, tolerance)
    assert again.keys() == record.keys()
    if "refused" in record:
        assert again["refused"]
        return
    for orientation in "vh":
        assert [one is None for one in again[orientation]] == [
            one is None for one in record[orientation]
        ]
        one, other = (
            np.array([x or 0.0 for x in answer[orientation]]) for answer in (again, record)
        )
        # Twelve digits are kept; the quadrature may branch off where a number rounds otherwise.
        assert np.abs(one - other).max() <= record["error"] + 1e-11 * np.abs(other).max()


def test_a_kept_answer_is_read_back_as_the_model_gave_it() -> None:
    stack = Reference(550.0, [(2.25, 2.25, 60.0)], 1.5**2, 1.0, 0, 20.0)
    true, read = stack.destinations(1e-9), result_of(record_of(stack, 1e-9))
    assert read.v.destinations == pytest.approx(true.v.destinations, rel=1e-11)
    assert read.h.dissipated == pytest.approx(true.h.dissipated, rel=1e-11)
    assert read.h.near_field == pytest.approx(true.h.near_field, rel=1e-11, abs=1e-300)
    assert (read.v.matched_bottom, read.path, read.panels) == (None, true.path, true.panels)


def test_every_number_of_a_stack_counts() -> None:
    slab = {"k": 0.0, "thickness_nm": 1e6, "exit": "planar", "outside_n": 1.0}
    stack = Reference(550.0, [(2.25, 2.5, 60.0)], 1.5**2, 1.0, 0, 20.0, substrate=slab)
    others = [
        replace(stack, wavelength_nm=551.0),
        replace(stack, films=[(2.25, 2.5, 61.0)]),
        replace(stack, films=[(2.25 + 1e-9j, 2.5, 60.0)]),
        replace(stack, bottom=2.26),
        replace(stack, top=1.1),
        replace(stack, z_nm=21.0),
        replace(stack, substrate=None),
        replace(stack, substrate=None, cover=slab),
        replace(stack, substrate={**slab, "exit": "matched"}),
        replace(stack, substrate={**slab, "k": 1e-7}),
    ]
    keys = {key_of(one, 1e-9) for one in (stack, *others)} | {key_of(stack, 1e-8)}
    assert len(keys) == len(others) + 2


def test_a_changed_model_keeps_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    stack = thin_metal(0)
    assert key_of(stack, 1e-9) in kept()
    monkeypatch.setattr(reference_kept, "model_digest", lambda: "another")
    kept.cache_clear()
    assert kept() == {}
    monkeypatch.undo()
    kept.cache_clear()
    assert literal(stack, 1e-9) == result_of(kept()[key_of(stack, 1e-9)])
