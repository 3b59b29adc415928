"""What a check compares, what it says it did not compare, and what it refuses."""

from __future__ import annotations

import importlib.util
import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import optics
from optics.device.case import case_from_dict
from optics.kernels import budget as engine
from optics.outcome import budget as outcome
from optics.outcome import light
from optics.study.check import Check, check
from optics.study.check_rows import KINDS

_spec = importlib.util.spec_from_file_location(
    "check_devices", Path(__file__).with_name("check_devices.py")
)
assert _spec is not None
assert _spec.loader is not None
devices = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(devices)

ANGLES = (0.0, 35.0, 70.0)


def checked(document: dict[str, Any], **options: Any) -> Check:
    return check(case_from_dict(document), **{"angles_deg": ANGLES, **options})


def results(outcome: Check, kind: str, quantity: str | None = None) -> list[str]:
    return [
        row.result for row in outcome.rows if row.kind == kind and quantity in (None, row.quantity)
    ]


def failing(outcome: Check) -> set[tuple[str, str]]:
    return {(row.kind, row.quantity) for row in outcome.rows if row.result == "fail"}


def test_an_ordinary_device_passes_in_every_kind() -> None:
    found = checked(devices.ordinary())
    assert found.passed
    assert found.summary() == [
        {**entry, "failed": 0, "not_checked": 0} for entry in found.summary()
    ]
    # 2 sides, 3 channels, 3 angles; 2 sides, s and p, 3 angles, 3 numbers; 10 powers, 2 dipoles
    counts = {entry["kind"]: entry["checked"] for entry in found.summary()}
    assert counts["far field"] == 18
    assert counts["light from outside"] == 36
    assert counts["power"] == 20
    assert counts["energy balance"] == 2
    assert counts["average"] > 10


@pytest.mark.parametrize(
    "document",
    [
        devices.device(
            ("high", 60.0), ("host", 80.0), ("silver-like", 20.0),
            substrate={"material": "glass", "thickness_mm": 0.7, "exit": "matched"},
            cover={"material": "host", "thickness_mm": 0.2},
        ),
        devices.device(
            ("high", 60.0), ("host", 80.0), ("silver-like", 20.0),
            cover={"material": "glass", "thickness_mm": 0.2},
        ),
        devices.device(("silver-like", 35.0), ("host", 350.0), ("silver-like", 35.0)),
        devices.device(("high", 60.0), ("along", 80.0), ("silver-like", 100.0)),
    ],
    ids=["matched", "two slabs", "cavity", "birefringent emitter film"],
)  # fmt: skip
def test_devices_of_other_kinds_pass_with_nothing_left_out(document: dict[str, Any]) -> None:
    found = checked(document)
    assert failing(found) == set()
    assert all(row.result == "pass" for row in found.rows)


def test_guides_without_loss_are_checked_on_a_path_around_their_modes() -> None:
    found = checked(devices.device(("high", 60.0), ("host", 150.0), substrate=None))
    assert found.passed
    notes = {row.note for row in found.rows if row.kind == "power"}
    assert len(notes) == 1
    assert "guided mode(s) without loss" in notes.pop()
    guided = [row.engine for row in found.rows if row.quantity == "guided"]
    assert all(value is not None and value > 0.01 for value in guided)


@pytest.mark.parametrize(
    "document",
    [
        # found at random: a plasmon that couples weakly through its metal, modes near cut-off
        devices.device(
            ("host", 180.0),
            ("lossless-metal", 32.0),
            emitter=0,
            cover={"material": "glass", "thickness_mm": 0.5},
        ),
        devices.device(("host", 28.0), ("lossless-metal", 90.0), emitter=0, substrate=None),
        devices.device(("along", 125.0), ("high", 190.0), ("host", 30.0), emitter=0),
    ],
    ids=["weakly coupled plasmon", "near cut-off", "s and p close together"],
)
def test_sharp_modes_are_not_overlooked(document: dict[str, Any]) -> None:
    document["materials"]["lossless-metal"] = {"n": 1e-9, "k": 4.6}
    found = checked(document)
    assert failing(found) == set()
    assert "pass" in results(found, "power", "dissipated")


def test_absorbing_surroundings_are_listed_with_the_reason() -> None:
    document = devices.device(
        ("high", 60.0), ("host", 80.0), substrate=None, surroundings={"bottom": "silicon-like"}
    )
    found = checked(document)
    assert found.passed
    left_out = [row for row in found.rows if row.result == "not checked"]
    assert {(row.kind, row.side) for row in left_out} == {
        ("far field", "bottom"),
        ("light from outside", "bottom"),
    }
    assert all("surroundings absorb" in row.note for row in left_out)


@pytest.mark.parametrize(
    "films",
    [
        (("high", 60.0), ("across", 80.0), ("silver-like", 100.0)),
        (("along-lossy", 60.0), ("host", 80.0), ("silver-like", 100.0)),
    ],
    ids=["emitter film", "lossy film"],
)
def test_films_without_an_equivalent_are_listed_and_checked_another_way(
    films: tuple[tuple[str, float], ...],
) -> None:
    found = checked(devices.device(*films), angles_deg=(0.0, 60.0, 75.0))
    assert found.passed
    left_out = [row for row in found.rows if row.result == "not checked"]
    assert left_out
    assert {row.polarization for row in left_out} == {"p"}
    assert all("no isotropic equivalent" in row.note for row in left_out)
    for gap in (row for row in left_out if row.kind == "far field"):
        here = (gap.side, gap.angle_deg, gap.orientation, gap.polarization, gap.position_nm)
        others = [
            row
            for row in found.rows
            if row.kind == "far field"
            and (row.side, row.angle_deg, row.orientation, row.polarization, row.position_nm)
            == here
            and row.result == "pass"
        ]
        assert [row.method for row in others] == ["plane wave by effective admittances"]


def test_start_peak_and_end_unless_told_otherwise() -> None:
    grid = {"start_nm": 490, "stop_nm": 570, "step_nm": 10}
    document = devices.ordinary(wavelength=grid)
    found = checked(document)
    powers = {row.wavelength_nm for row in found.rows if row.kind == "power"}
    assert powers == {490.0, 530.0, 570.0}
    balance = [row.wavelength_nm for row in found.rows if row.quantity == "all destinations"]
    assert balance == list(np.arange(490.0, 571.0, 10.0))
    found = checked(document, wavelengths_nm=[510.0])
    assert {row.wavelength_nm for row in found.rows if row.kind == "power"} == {510.0}


def test_all_faults_of_the_options_at_once() -> None:
    with pytest.raises(optics.CaseError) as error:
        checked(devices.ordinary(), wavelengths_nm=[530.0, 531.0], angles_deg=(90.0, float("nan")))
    assert str(error.value).splitlines() == [
        "case: wavelengths: found 531 nm; expected a wavelength of the case's grid",
        "case: angles: found 90; expected degrees from 0 to below 90",
        "case: angles: found nan; expected degrees from 0 to below 90",
    ]


def test_the_result_is_plain_and_complete() -> None:
    found = optics.check(case_from_dict(devices.ordinary()))
    result = json.loads(json.dumps(found.to_dict(), allow_nan=False))
    assert result["schema"] == "outcouple.check/1"
    assert result["passed"] is True
    assert [entry["kind"] for entry in result["summary"]] == list(KINDS)
    frame = found.to_frame()
    assert len(frame) == len(result["rows"]) == len(found.rows)
    assert frame["difference"].max() <= frame["tolerance"].max()
    assert list(frame.columns) == list(result["rows"][0])


def _changed(
    monkeypatch: pytest.MonkeyPatch, module: Any, name: str, change: Callable[[Any], Any]
) -> None:
    real = getattr(module, name)
    monkeypatch.setattr(module, name, lambda *given: change(real(*given)))


@pytest.mark.parametrize("place", ["AIR_BOTTOM", "SUBSTRATE", "GUIDED", "SURFACE_PLASMON"])
def test_a_wrong_destination_is_caught(monkeypatch: pytest.MonkeyPatch, place: str) -> None:
    def change(found: engine.Budget) -> engine.Budget:
        shares = found.shares.copy()
        shares[..., getattr(engine, place)] *= 1.001
        return found._replace(shares=shares)

    _changed(monkeypatch, light, "light_budget", change)
    quantity = place.lower()
    expected = {
        ("power", quantity),
        ("energy balance", "all destinations"),
        ("energy balance", "chain of unit device"),
    }
    if place.startswith("AIR"):
        expected |= {("all directions", "light that leaves")}
    assert failing(checked(devices.ordinary())) == expected


def test_light_booked_under_another_name_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    def change(found: engine.Budget) -> engine.Budget:
        shares = found.shares.copy()
        shares[..., [engine.GUIDED, engine.SURFACE_PLASMON]] = found.shares[
            ..., [engine.SURFACE_PLASMON, engine.GUIDED]
        ]
        return found._replace(shares=shares)

    _changed(monkeypatch, light, "light_budget", change)
    found = checked(devices.ordinary())
    assert failing(found) == {("power", "guided"), ("power", "surface_plasmon")}


def test_a_wrong_average_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    _changed(
        monkeypatch,
        outcome,
        "emission",
        lambda found: found._replace(radiative_efficiency=1.001 * found.radiative_efficiency),
    )
    wrong = failing(checked(devices.ordinary()))
    assert ("average", "radiative_efficiency") in wrong
    assert ("average", "external_quantum_efficiency") in wrong


def test_a_value_that_is_no_number_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    _changed(
        monkeypatch,
        light,
        "light_budget",
        lambda found: found._replace(shares=np.full_like(found.shares, np.nan)),
    )
    found = checked(devices.ordinary())
    assert not found.passed
    assert results(found, "energy balance", "all destinations") == ["fail"]
    assert set(results(found, "power", "guided")) == {"fail"}
