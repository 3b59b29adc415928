"""All directions together: agreement, and a planted error that the row catches."""

from __future__ import annotations

import pytest
from devices import case, pixel

import optics
from optics.outcome import directional
from optics.study import check_directions
from optics.study.check_directions import direction_rows


def rows(factor: float, monkeypatch: pytest.MonkeyPatch) -> list[tuple[str | None, str]]:
    def off(*given: object) -> object:
        return factor * directional.radiance_over_bulk(*given)  # type: ignore[arg-type]

    monkeypatch.setattr(check_directions, "radiance_over_bulk", off)
    device = case(pixel())
    outcome = optics.budget(device)
    data = outcome.spectral[device.emitters[0].name]
    some = {device.emitters[0].name: data["wavelength_nm"].to_numpy()[:1].tolist()}
    return [(row.side, row.result) for row in direction_rows(device, outcome, some)]


def test_directions_add_up_on_both_sides(monkeypatch: pytest.MonkeyPatch) -> None:
    assert rows(1.0, monkeypatch) == [("bottom", "pass"), ("top", "pass")]


def test_radiance_that_is_too_large_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    assert ("bottom", "fail") in rows(1.0 + 1e-4, monkeypatch)
