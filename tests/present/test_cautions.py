"""Reminders appear where the case calls for them, and only there."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from budget_examples import budget

from optics.device.case import Case, case_from_dict
from optics.present.cautions import ELECTRICAL, PHOTOBIOLOGICAL, cautions, mean_peak_nm


def case(peaks_nm: list[float], **drive: float) -> Case:
    document: dict[str, Any] = {
        "title": "invented",
        "wavelength": {"start_nm": 400, "stop_nm": 700, "step_nm": 50},
        "layers": [{"name": "EML", "material": "host", "thickness_nm": 20}],
        "materials": {"host": {"n": 1.8}},
        "emitters": [
            {
                "name": f"e{index}",
                "layer": "EML",
                "unit": f"u{index}",
                "spectrum": {"peak_nm": peak, "fwhm_nm": 40},
                "zone": {"shape": "uniform"},
                "quantum_yield": 1.0,
            }
            for index, peak in enumerate(peaks_nm)
        ],
        "drive": dict(drive),
    }
    return case_from_dict(document, Path())


def test_green_without_drive_needs_no_reminder() -> None:
    assert cautions(case([524]), budget()) == ()


@pytest.mark.parametrize("key", ["current_density_mA_cm2", "voltage_V"])
def test_a_stated_drive_is_reminded_of(key: str) -> None:
    assert cautions(case([524], **{key: 3.0}), budget()) == (ELECTRICAL,)


def test_blue_is_reminded_of() -> None:
    assert cautions(case([460]), budget()) == (PHOTOBIOLOGICAL,)


def test_peaks_are_weighted_by_eqe() -> None:
    result = budget("lower", "upper")
    two = case([460, 560])
    assert mean_peak_nm(two, result) == pytest.approx(510.0)
    assert cautions(two, result) == ()
    result["emitters"][1]["external_quantum_efficiency"] = 0.05
    assert mean_peak_nm(two, result) == pytest.approx(480.0)
    assert cautions(two, result) == (PHOTOBIOLOGICAL,)


def test_no_light_has_no_peak() -> None:
    result = budget()
    result["emitters"][0]["external_quantum_efficiency"] = 0.0
    assert mean_peak_nm(case([460]), result) is None
    assert cautions(case([460]), result) == ()
