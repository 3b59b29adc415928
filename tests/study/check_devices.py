"""Small invented devices for the tests of the checks."""

from __future__ import annotations

import copy
from typing import Any

_MATERIALS: dict[str, Any] = {
    "host": {"n": 1.75},
    "high": {"n": 2.1},
    "lossy": {"n": 1.9, "k": 0.02},
    "silver-like": {"n": 0.1, "k": 3.6},
    "silicon-like": {"n": 4.1, "k": 0.05},
    "along": {"n_ordinary": 1.8, "n_extraordinary": 1.62},
    "across": {"n_ordinary": 1.62, "n_extraordinary": 1.85},
    "along-lossy": {
        "n_ordinary": 1.8,
        "n_extraordinary": 1.62,
        "k_ordinary": 0.01,
        "k_extraordinary": 0.002,
    },
    "glass": {"n": 1.52, "k": 1e-7},
}


def device(*films: tuple[str, float], emitter: int = 1, **sections: Any) -> dict[str, Any]:
    """Case document of films (material, thickness_nm) from the bottom; None drops a section."""
    document: dict[str, Any] = {
        "title": "invented test device",
        "wavelength": {"values_nm": [530]},
        "materials": copy.deepcopy(_MATERIALS),
        "substrate": {"material": "glass", "thickness_mm": 0.7},
        "layers": [
            {"name": f"L{i}", "material": material, "thickness_nm": thickness}
            for i, (material, thickness) in enumerate(films)
        ],
        "emitters": [
            {
                "name": "green",
                "layer": f"L{emitter}",
                "spectrum": {"peak_nm": 530, "fwhm_nm": 40},
                "zone": {"shape": "point", "at": 0.3},
                "horizontal_fraction": 0.76,
                "quantum_yield": 0.9,
            }
        ],
    }
    document.update(copy.deepcopy(sections))
    return {key: value for key, value in document.items() if value is not None}


def ordinary(**sections: Any) -> dict[str, Any]:
    """Absorbing anode, emitter film, spacer, metal."""
    films = (("lossy", 90.0), ("host", 40.0), ("high", 50.0), ("silver-like", 60.0))
    return device(*films, **sections)
