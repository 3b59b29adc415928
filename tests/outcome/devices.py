"""Small devices for tests of outcomes. All numbers invented."""

from __future__ import annotations

import copy
from typing import Any

from optics.device.case import Case, case_from_dict

_PIXEL: dict[str, Any] = {
    "title": "invented pixel",
    "wavelength": {"start_nm": 490, "stop_nm": 610, "step_nm": 10},
    "materials": {
        "glass": {"n": 1.52},
        "ito": {"n": 1.86, "k": 0.008},
        "htl": {"n": 1.78},
        "host": {"n": 1.80},
        "etl": {"n": 1.72},
        "metal": {"n": 0.12, "k": 3.4},
    },
    "substrate": {"material": "glass", "thickness_mm": 0.7},
    "layers": [
        {"name": "ITO", "material": "ito", "thickness_nm": 110},
        {"name": "HTL", "material": "htl", "thickness_nm": 60},
        {"name": "EML", "material": "host", "thickness_nm": 30},
        {"name": "ETL", "material": "etl", "thickness_nm": 50},
        {"name": "CAT", "material": "metal", "thickness_nm": 100},
    ],
    "emitters": [
        {
            "name": "green",
            "layer": "EML",
            "spectrum": {"peak_nm": 545, "fwhm_nm": 50},
            "zone": {"shape": "uniform"},
            "horizontal_fraction": 0.76,
            "quantum_yield": 0.85,
            "exciton_fraction": 0.9,
        }
    ],
    "drive": {"charge_balance": 0.95},
}


def pixel() -> dict[str, Any]:
    """A bottom-emitting pixel with one emitter, as a document."""
    return copy.deepcopy(_PIXEL)


def tandem() -> dict[str, Any]:
    """Two units with little loss: two emitters below, one above."""
    document = pixel()
    document["substrate"]["exit"] = "matched"
    document["layers"] = [
        {"name": "HTL", "material": "htl", "thickness_nm": 60},
        {"name": "EML", "material": "host", "thickness_nm": 30},
        {"name": "CGL", "material": "etl", "thickness_nm": 130},
        {"name": "EML-2", "material": "host", "thickness_nm": 20},
        {"name": "ETL", "material": "etl", "thickness_nm": 65},
        {"name": "CAT", "material": "metal", "thickness_nm": 100},
    ]
    base = {**document["emitters"][0], "quantum_yield": 1.0, "exciton_fraction": 1.0}
    base["horizontal_fraction"] = 1.0
    document["emitters"] = [
        {**base, "name": "green", "unit": "lower", "share": 0.7},
        {
            **base,
            "name": "red",
            "unit": "lower",
            "share": 0.3,
            "spectrum": {"line_nm": 601.5},
            "quantum_yield": 0.5,
        },
        {**base, "name": "upper-green", "unit": "upper", "layer": "EML-2"},
    ]
    document["drive"] = {"charge_balance": {"lower": 1.0, "upper": 0.9}}
    return document


def emitter(document: dict[str, Any], **values: Any) -> dict[str, Any]:
    """The document with other values in its first emitter."""
    document["emitters"][0].update(values)
    return document


def case(document: dict[str, Any]) -> Case:
    return case_from_dict(document, ".", "my.toml")
