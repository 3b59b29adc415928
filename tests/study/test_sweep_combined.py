"""Blocks of a sweep give what single points give; what cannot be combined is left to those."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from sweep_devices import EQE, ETL, HTL, coarse, swept, two_emitters

from optics.device.case import Case
from optics.kernels.combined import Combined
from optics.study import sweep_combined
from optics.study.evaluate import TRUST, Batch, Found, compute_batch
from optics.study.outcomes import outcome_names
from optics.study.sweep_blocks import FEWEST_POINTS, blocks, combines, kinds_of
from optics.study.sweep_combined import Block, compute_block
from optics.study.sweep_plan import Plan, plan_sweep

EML = "layers.EML.thickness_nm"
FILMS = {HTL: {"values": [30, 60, 90]}, ETL: {"values": [30, 60]}}
Q, THETA, ZONE = (
    f"emitters.green.{key}" for key in ("quantum_yield", "horizontal_fraction", "zone.at")
)


def every_outcome(device: Case) -> list[str]:
    """Full names of all numbers of a light budget."""
    sides = ("bottom.", "top.")
    return [name for name in outcome_names(device).plain if not name.startswith(sides)]


def planned(axes: dict[str, Any], document: dict[str, Any] | None = None, **table: Any) -> Plan:
    device = swept(axes, document=document, **table)
    names = [name for name in every_outcome(device) if name not in axes]
    return plan_sweep(swept(axes, document=device.document, outcomes=names, **table), 1e-6)


def in_order(found: Found) -> np.ndarray[Any, np.dtype[np.float64]]:
    return found.values[np.argsort(found.places)]


def assert_same(plan: Plan) -> None:
    """Every outcome of every point, but for the accuracy, which is each way's own.

    Nothing is left to single points, except blocks too small to gain.
    """
    assert combines(plan)
    parts = list(blocks(plan))
    with pytest.MonkeyPatch.context() as patch:
        if min(part.size for part in parts) >= FEWEST_POINTS:
            patch.setattr(sweep_combined, "compute_batch", not_single)
        whole = [compute_block(Block(plan, places)) for places in parts]
    places = np.concatenate([one.places for one in whole])
    assert sorted(places) == list(range(plan.points))
    found = np.concatenate([one.values for one in whole])[np.argsort(places)]
    single = compute_batch(plan.batch(np.arange(plan.points)))
    expected = in_order(single)
    assert single.failed == ()
    for column, outcome in enumerate(plan.question.outcomes):
        if outcome.keys[0] == "accuracy":
            assert found[:, column].max() <= 1e-6
        else:
            assert found[:, column] == pytest.approx(expected[:, column], abs=2e-6, nan_ok=True), (
                outcome.name
            )
    near = len(plan.question.outcomes) + TRUST.index("near_field_share")
    assert found[:, near] == pytest.approx(expected[:, near], abs=2e-6)


def not_single(batch: Batch) -> Found:
    raise AssertionError(f"{batch.places.size} points were left to be computed one by one")


def line_and_units() -> dict[str, Any]:
    document = two_emitters()
    document["emitters"][0]["zone"] = {"shape": "exponential", "from": "bottom", "decay_nm": 8}
    document["emitters"][1]["exciton_fraction"] = 0.7
    return document


def birefringent() -> dict[str, Any]:
    document = coarse()
    document["materials"]["host"] = {"n_ordinary": 1.82, "n_extraordinary": 1.7}
    document["emitters"][0]["zone"] = {"shape": "uniform"}
    return document


def covered() -> dict[str, Any]:
    document = coarse()
    document["layers"].pop()
    document["cover"] = {"material": "glass", "thickness_mm": 0.5}
    document["surroundings"] = {"bottom": "air", "top": "water"}
    document["materials"]["water"] = {"n": 1.33}
    return document


@pytest.mark.parametrize(
    ("axes", "document"),
    [
        (FILMS, coarse()),
        (FILMS, birefringent()),
        (FILMS, covered()),
        ({**FILMS, "layers.CGL.thickness_nm": {"values": [100, 140]}}, line_and_units()),
        ({HTL: {"values": [30, 80]}, THETA: {"values": [0.5, 0.9]}, ZONE: {"values": [0.2, 0.6]}},
         birefringent() | {"emitters": coarse()["emitters"]}),
        ({THETA: {"values": [0.4, 0.6, 0.8]}, Q: {"values": [0.0, 0.5, 1.0]}}, coarse()),
        ({EML: {"values": [20, 40]}, ETL: {"start": 20, "stop": 70, "step": 10}},
         coarse()),
        ({"drive.charge_balance.upper": {"values": [0.5, 1.0]}, HTL: {"values": [30, 60, 90]}},
         line_and_units()),
    ],
    ids=["films", "birefringent", "two slabs", "tandem", "sources", "sources only",
         "emitter film", "drive"],
)  # fmt: skip
def test_a_block_is_its_points(axes: dict[str, Any], document: dict[str, Any]) -> None:
    assert_same(planned(axes, document))


def test_a_link_across_the_emitter_pairs_halves() -> None:
    axes = {ETL: {"start": 30, "stop": 80, "step": 10}}
    assert_same(planned(axes, linked={HTL: ETL}))


def test_films_of_no_thickness_have_blocks_of_their_own() -> None:
    axes = {ETL: {"values": [0, 30, 60]}, HTL: {"values": [0, 20, 40, 60]}}
    document = coarse()
    # A buffer keeps the point of emission away from the metal.
    document["layers"].insert(4, {"name": "EIL", "material": "etl", "thickness_nm": 20})
    plan = planned(axes, document)
    parts = [plan.values_at(places) for places in blocks(plan)]
    assert [{tuple(row) for row in part == 0.0} for part in parts] == [
        {(False, False)}, {(True, False)}, {(False, True)}, {(True, True)},
    ]  # fmt: skip
    assert_same(plan)


def test_half_stacks_are_solved_once(monkeypatch: pytest.MonkeyPatch) -> None:
    asked: list[tuple[int, int, int]] = []
    real = sweep_combined.combined_budget

    def counted(family: Any, *arguments: Any) -> Combined:
        asked.append((family.kd_up.shape[1], family.kd_down.shape[1], len(family.pairs)))
        return real(family, *arguments)

    monkeypatch.setattr(sweep_combined, "combined_budget", counted)
    axes = {**FILMS, ZONE: {"values": [0.2, 0.5, 0.8]}, Q: {"values": [0.5, 0.9]}}
    plan = planned(axes)
    (places,) = blocks(plan)
    assert compute_block(Block(plan, places)).places.size == 36
    # Neither positions nor yields ask for anything anew.
    assert asked == [(2, 3, 6)]


def test_axes_are_sorted_by_what_they_change() -> None:
    axes = {
        HTL: {"values": [30, 60]}, Q: {"values": [0.5, 1.0]}, "materials.etl.n": {"values": [1.7]},
        EML: {"values": [20, 30]}, ETL: {"values": [40]},
    }  # fmt: skip
    linked = {"layers.CAT.thickness_nm": HTL, "substrate.thickness_mm": ETL}
    kinds = kinds_of(planned(axes, linked=linked))
    assert (kinds.film, kinds.source, kinds.other) == ((0,), (1,), (2, 3, 4))


def test_what_gains_nothing_is_computed_point_by_point() -> None:
    many = {"start": 30, "stop": 90, "step": 10}
    assert combines(plan_sweep(swept({HTL: many}, outcomes=[EQE]), 1e-6))
    assert not combines(plan_sweep(swept({"materials.etl.n": {"values": [1.7, 1.8]}}), 1e-6))
    assert not combines(plan_sweep(swept({HTL: many}, outcomes=["bottom.x_normal"]), 1e-6))


def refused(*_: Any) -> Combined:
    raise AssertionError("combined all the same")


def test_backward_modes_are_left_to_single_points(monkeypatch: pytest.MonkeyPatch) -> None:
    document = coarse()
    # Near its plasma resonance: eps = -4 beside eps = 3.2 of the organic films.
    document["materials"]["metal"] = {"n": 0.1, "k": 2.0}
    document["layers"][-1]["thickness_nm"] = 25
    plan = plan_sweep(swept(FILMS, document=document, outcomes=[EQE]), 1e-6)
    (places,) = blocks(plan)
    monkeypatch.setattr(sweep_combined, "combined_budget", refused)
    found = in_order(compute_block(Block(plan, places)))
    assert found.tobytes() == in_order(compute_batch(plan.batch(places))).tobytes()


def test_zones_that_depend_on_the_films_are_left_to_single_points(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    document = coarse()
    document["emitters"][0] |= {"zone": {"shape": "uniform"}, "closest_approach_nm": 5.0}
    axes = {ETL: {"values": [1, 4, 20]}, HTL: {"values": [30, 60]}}
    plan = plan_sweep(swept(axes, document=document, outcomes=[EQE]), 1e-6)
    monkeypatch.setattr(sweep_combined, "combined_budget", refused)
    for places in blocks(plan):
        assert compute_block(Block(plan, places)).failed == ()


def test_points_that_miss_the_tolerance_are_computed_anew(monkeypatch: pytest.MonkeyPatch) -> None:
    real = sweep_combined.combined_budget

    def spoiled(*arguments: Any) -> Combined:
        found = real(*arguments)
        found.error[2], found.balance[4] = 1e-3, np.nan
        return found._replace(sums=found.sums * 1.5)

    plan = plan_sweep(swept(FILMS, outcomes=["destinations.guided", "purcell_factor"]), 1e-6)
    (places,) = blocks(plan)
    monkeypatch.setattr(sweep_combined, "combined_budget", spoiled)
    found = compute_block(Block(plan, places))
    alone = compute_batch(plan.batch(places))
    again = np.isin(found.places, places[[2, 4]])
    assert again.sum() == 2
    factor = found.values[np.argsort(found.places), 1] / in_order(alone)[:, 1]
    anew = again[np.argsort(found.places)]
    assert factor[anew] == pytest.approx(1.0, abs=1e-12)
    assert factor[~anew] == pytest.approx(1.5, abs=1e-5)


def test_large_grids_are_cut_into_blocks_of_bounded_size() -> None:
    axes = {HTL: {"start": 1, "stop": 300, "step": 1}, ETL: {"start": 1, "stop": 300, "step": 1}}
    plan = plan_sweep(swept(axes, outcomes=[EQE]), 1e-6)
    parts = list(blocks(plan))
    assert max(part.size for part in parts) <= 2500
    assert len(parts) % 2 == 0
    assert np.array_equal(np.sort(np.concatenate(parts)), np.arange(90_000))
