"""Points of a question: each is its own case, a failing one is named, kept ones are not redone."""

from __future__ import annotations

import pickle
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from sweep_devices import EQE, ETL, HTL, coarse, swept

import optics
from optics.device.case import Case
from optics.device.errors import CaseError
from optics.study import evaluate
from optics.study.evaluate import (
    TRUST,
    Batch,
    Question,
    answer,
    answers,
    compute_batch,
    layout_of,
    store_for,
)
from optics.study.outcomes import find_outcomes

CAT = "layers.CAT.thickness_nm"
POINTS = np.array([[40.0, 30.0], [60.0, -1.0], [60.0, 50.0], [55.0, 45.0]])


def asked(device: Case, *names: str) -> Question:
    outcomes = find_outcomes(device, {name: name for name in names})
    return Question(device, (HTL, ETL), ((CAT, 0),), outcomes, 1e-6)


@pytest.fixture
def question() -> Question:
    return asked(swept({HTL: {"values": [40]}}, document=coarse()), EQE, "destinations.guided")


def test_an_answer_is_the_budget_of_the_changed_case(question: Question) -> None:
    found = answer(question, [60.0, 50.0])
    alone = optics.budget(question.case.replace_all({HTL: 60.0, ETL: 50.0, CAT: 60.0}))
    assert found.shape == (question.width,) == (2 + len(TRUST),)
    assert found[0] == alone.external_quantum_efficiency
    assert found[1] == alone.destinations["guided"]
    assert found[2] == alone.accuracy.energy_balance


def test_an_impossible_point_raises_alone_and_is_named_among_others(question: Question) -> None:
    with pytest.raises(CaseError, match="found -1"):
        answer(question, POINTS[1])
    values, failed = answers(question, POINTS)
    assert np.isnan(values).all(axis=1).tolist() == [False, True, False, False]
    assert list(failed) == [1]
    assert "layers.ETL.thickness_nm: found -1" in failed[1]
    assert values[2].tobytes() == answer(question, POINTS[2]).tobytes()


def test_points_together_are_each_alone(question: Question) -> None:
    outcomes = find_outcomes(
        question.case, {name: name for name in (EQE, "bottom.x_normal", "bottom.delta_uv_60")}
    )
    wider = replace(question, outcomes=outcomes)
    found = compute_batch(Batch(wider, np.array([5, 0, 3, 2]), POINTS))
    assert found.places.tolist() == [5, 3, 2]
    for place, point, values in zip(found.places, POINTS[[0, 2, 3]], found.values, strict=True):
        assert values.tobytes() == answer(wider, point).tobytes(), place


def test_a_point_that_breaks_is_named_and_the_others_are_computed(
    question: Question, monkeypatch: pytest.MonkeyPatch
) -> None:
    whole = compute_batch(Batch(question, np.arange(4), POINTS))

    def breaking(cases: Sequence[Case], *args: Any, **kwargs: Any) -> Any:
        if any(case.value(ETL) == POINTS[2, 1] for case in cases):
            raise ArithmeticError("no such light")
        return together(cases, *args, **kwargs)

    together = evaluate.shine_together
    monkeypatch.setattr(evaluate, "shine_together", breaking)
    monkeypatch.setattr(
        evaluate, "shine", lambda case, *rest, **more: breaking([case], *rest, **more)[0]
    )
    found = compute_batch(Batch(question, np.arange(4), POINTS))
    assert found.places.tolist() == [0, 3]
    assert dict(found.failed)[2] == "ArithmeticError: no such light"
    assert "found -1" in dict(found.failed)[1]
    assert found.values.tobytes() == whole.values[[0, 2]].tobytes()


def test_kept_points_are_not_computed_again(question: Question, tmp_path: Path) -> None:
    whole, _ = answers(question, POINTS)
    store = store_for(question, tmp_path, "listed", layout_of(POINTS), len(POINTS))
    store.add(np.array([2]), np.full((1, question.width), 7.0))
    again = store_for(question, tmp_path, "listed", layout_of(POINTS), len(POINTS))
    seen: list[tuple[int, int]] = []
    values, failed = answers(
        question, POINTS, store=again, progress=lambda *both: seen.append(both)
    )
    assert (values[2] == 7.0).all()
    assert values[3].tobytes() == whole[3].tobytes()
    assert list(failed) == [1]
    assert (seen[0], seen[-1]) == ((1, 4), (4, 4))


def test_other_points_are_kept_in_another_file(question: Question, tmp_path: Path) -> None:
    moved = POINTS + np.array([1e-9, 0.0])
    one, other = (
        store_for(question, tmp_path, "listed", layout_of(points), len(points)).path
        for points in (POINTS, moved)
    )
    assert one != other


def test_a_question_travels_to_other_processes(question: Question) -> None:
    again = pickle.loads(pickle.dumps(question))
    assert answer(again, POINTS[0]).tobytes() == answer(question, POINTS[0]).tobytes()
