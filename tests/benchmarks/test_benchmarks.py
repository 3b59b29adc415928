"""The benchmark itself works: tiny sizes, no word about time."""

from __future__ import annotations

import pytest
from benchmarks.devices import device
from benchmarks.map import MapPlan
from benchmarks.measure import (
    engine,
    engine_errors,
    points_for,
    rival_errors,
    run_rival,
    truth,
)
from benchmarks.report import Plan, report
from benchmarks.tolerance import StudyPlan, cost, spread

pytestmark = pytest.mark.slow


def test_rival_computes_the_same_quantities() -> None:
    """On a fine grid it comes to the literal model's answers: it is no straw man."""
    small = device(wavelengths=1)
    truths = [truth(small, 0)]
    coarse = rival_errors(small, 2_000, truths)[0]
    fine = rival_errors(small, 200_000, truths)[0]
    assert fine < 1e-4
    assert fine < 0.1 * coarse
    assert engine_errors(engine(small), truths)[0] < 1e-6


@pytest.mark.parametrize("films", [3, 4, 6, 24])
def test_devices_have_as_many_films_in_the_same_room(films: int) -> None:
    made = device(wavelengths=2, films=films, positions=5)
    assert made.eps.shape == (2, films)
    assert made.thickness_nm[made.emitter] == 24.0
    assert made.thickness_nm[made.emitter + 1 : -1].sum() in (0.0, pytest.approx(50.0))
    assert engine(made).shares.shape[1] == 5


def test_extrapolation_follows_the_power_law() -> None:
    assert points_for(1e-8, (100, 10_000), (1e-2, 1e-4)) == pytest.approx(1e8)


def test_a_study_is_scaled_from_what_was_measured() -> None:
    plan = StudyPlan(samples=64, measured=16, wavelengths=2, repeats=1)
    found = cost(plan)
    assert found.whole_s(1000) == 1000 * found.wall_s + found.statistics_s
    assert 0.0 < found.cpu_s < 1.0
    assert found.energy_balance < 1e-6
    assert len(spread(2).document["tolerance"]["spread"]) == 8


def test_report_is_written_from_measurements() -> None:
    plan = Plan(wavelengths=2, samples=1, repeats=1, grids=(500, 1000), films=(3,), spectra=(1,),
                zones=(1, 20), map=MapPlan(3, 2, 2, 4), study=StudyPlan(64, 16, 2, 1))  # fmt: skip
    text = report(plan)
    for heading in (
        "Against the rival",
        "At equal accuracy",
        "Scaling",
        "A map",
        "A tolerance study",
        "Where the time goes",
    ):
        assert heading in text
    assert "nan" not in text


def test_both_rivals_give_the_same_answers() -> None:
    """The straight one takes every saving of the other back; only the cost may differ."""
    small = device(wavelengths=3)
    for spared, straight in zip(
        run_rival(small, 500), run_rival(small, 500, spared=False), strict=True
    ):
        for orientation, destinations in straight.items():
            for name, value in destinations.items():
                assert value == pytest.approx(spared[orientation][name], rel=1e-12, abs=1e-15)
