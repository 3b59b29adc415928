"""Case documents the tests of this folder start from. All numbers invented."""

from __future__ import annotations

import copy
from pathlib import Path
from typing import Any

import pytest

from optics.device.case import case_from_dict
from optics.device.errors import CaseError

_FULL: dict[str, Any] = {
    "title": "invented bottom-emitting stack",
    "wavelength": {"start_nm": 450, "stop_nm": 700, "step_nm": 5},
    "materials": {
        "htl-a": {"n": 1.79},
        "host": {"n_ordinary": 1.80, "n_extraordinary": 1.66},
        "htl-c": {"cauchy_nm": [1.70, 9.0e3]},
        "silica": {"sellmeier": {"b": [0.6961663], "c_um2": [0.0046791]}},
        "metal": {
            "lorentz_drude": {
                "plasma_eV": 9.01,
                "f0": 0.845,
                "gamma0_eV": 0.048,
                "oscillators": [[0.065, 3.886, 0.816]],
            }
        },
        "doped": {"mix": {"htl-a": 0.92, "htl-c": 0.08}},
    },
    "substrate": {"material": "silica", "thickness_mm": 0.7},
    "layers": [
        {"name": "ITO", "material": "htl-c", "thickness_nm": 100},
        {"name": "HTL", "material": "doped", "thickness_nm": 40},
        {"name": "EML", "material": "host", "thickness_nm": 24},
        {"name": "ETL", "material": "htl-a", "thickness_nm": 50},
        {"name": "CAT", "material": "metal", "thickness_nm": 100},
    ],
    "emitters": [
        {
            "name": "green",
            "layer": "EML",
            "spectrum": {"peak_nm": 575, "fwhm_nm": 40},
            "zone": {"shape": "uniform"},
            "horizontal_fraction": 0.76,
            "quantum_yield": 0.93,
        }
    ],
    "drive": {"charge_balance": 0.9, "current_density_mA_cm2": 10.0, "voltage_V": 5.2},
    "sweep": {
        "outcomes": ["external_quantum_efficiency"],
        "axes": {"layers.HTL.thickness_nm": {"start": 20, "stop": 120, "step": 2}},
        "linked": {"layers.ETL.thickness_nm": "layers.HTL.thickness_nm"},
    },
    "optimize": {
        "maximize": "external_quantum_efficiency",
        "variables": {"layers.HTL.thickness_nm": {"min": 20, "max": 120}},
        "constraints": {"bottom.delta_uv_60": {"max": 0.02}},
    },
    "tolerance": {
        "samples": 2000,
        "seed": 7,
        "groups": [
            {"paths": ["layers.HTL.thickness_nm", "layers.ETL.thickness_nm"], "correlation": 0.8}
        ],
        "spread": {
            "layers.HTL.thickness_nm": {"relative_sd": 0.02},
            "layers.ETL.thickness_nm": {"half_width": 2},
        },
        "limits": {"external_quantum_efficiency": {"min": 0.22}},
    },
}


def full_document() -> dict[str, Any]:
    """A case with every section that needs no file."""
    return copy.deepcopy(_FULL)


def plain_document() -> dict[str, Any]:
    """The same without studies."""
    document = full_document()
    for study in ("sweep", "optimize", "tolerance"):
        del document[study]
    return document


def changed(path: str, value: Any, document: dict[str, Any] | None = None) -> dict[str, Any]:
    """Plain document with another value at a path of keys and indexes; None removes it."""
    document = document or plain_document()
    *keys, last = [int(key) if key.isdigit() else key for key in path.split("/")]
    place: Any = document
    for key in keys:
        place = place.setdefault(key, {}) if isinstance(place, dict) else place[key]
    if value is None:
        del place[last]
    else:
        place[last] = value
    return document


def faults_of(document: dict[str, Any], folder: Path | str = ".") -> list[str]:
    """Lines of the error that a document at fault must raise."""
    with pytest.raises(CaseError) as error:
        case_from_dict(document, folder, "my.toml")
    return str(error.value).splitlines()
