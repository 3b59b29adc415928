"""Published trends of whole devices, on stacks of our own.

The papers' inputs are incomplete, so only the direction and a part of the size is asked for.
"""

from __future__ import annotations

from functools import cache
from typing import Any

import pytest

import optics
from optics.device.case import case_from_dict
from optics.outcome.angular import angular


def _case(document: dict[str, Any], emitter: dict[str, Any]) -> optics.Case:
    organic = {"n": 1.75}
    base = {
        "title": "invented",
        "materials": {"htl": organic, "host": organic, "etl": organic, "cap": {"n": 1.9}},
        "emitters": [
            {"name": "e", "layer": "EML", "zone": {"shape": "point", "at": 0.5}, **emitter}
        ],
    }
    return case_from_dict({**base, **document})


def _layers(*films: tuple[str, str, float]) -> list[dict[str, Any]]:
    return [{"name": a, "material": b, "thickness_nm": c} for a, b, c in films]


def red_top_emitter(htl_nm: float, horizontal_fraction: float) -> optics.Case:
    """Thick silver below, thin silver and a capping layer above."""
    films = _layers(
        ("mirror", "ag", 100),
        ("HTL", "htl", htl_nm),
        ("EML", "host", 20),
        ("ETL", "etl", 60),
        ("cathode", "ag", 20),
        ("CPL", "cap", 60),
    )
    return _case(
        {
            "wavelength": {"start_nm": 550, "stop_nm": 720, "step_nm": 5},
            "layers": films,
            "surroundings": {"bottom": "si"},
        },
        {
            "spectrum": {"peak_nm": 615, "fwhm_nm": 50},
            "quantum_yield": 0.84,
            "horizontal_fraction": horizontal_fraction,
        },
    )


def green_bottom_emitter(etl_nm: float, ito_nm: float) -> optics.Case:
    """Glass, ITO, organics, aluminium; isotropic emitters."""
    films = _layers(
        ("anode", "ito", ito_nm),
        ("HTL", "htl", 40),
        ("EML", "host", 10),
        ("ETL", "etl", etl_nm),
        ("cathode", "al", 150),
    )
    return _case(
        {
            "wavelength": {"start_nm": 440, "stop_nm": 680, "step_nm": 10},
            "layers": films,
            "substrate": {"material": "bk7", "thickness_mm": 0.7},
        },
        {"spectrum": {"peak_nm": 525, "fwhm_nm": 60}, "quantum_yield": 0.9},
    )


@pytest.mark.parametrize("tuning_nm", [(50, 55, 60, 65), (235, 240, 245, 250)], ids=["1st", "2nd"])
def test_horizontal_dipoles_help_a_red_top_emitter(tuning_nm: tuple[float, ...]) -> None:
    """About 34 % isotropic to 50 % horizontal: Appl. Phys. Lett. 100, 253301 (2012), abstract."""

    def best(horizontal_fraction: float) -> float:
        found = [optics.budget(red_top_emitter(d, horizontal_fraction)) for d in tuning_nm]
        return max(one.outcoupling_efficiency or 0.0 for one in found)

    isotropic, horizontal = best(2 / 3), best(1.0)
    assert horizontal > 1.25 * isotropic
    assert 0.25 < isotropic < 0.5
    assert 0.4 < horizontal < 0.7


@cache
def _antinode(ito_nm: float, first: bool) -> tuple[float, float]:
    """Best total outcoupling, and best cd/A along the normal, near one antinode of the cathode."""
    thicknesses = (50, 60, 70, 80) if first else (200, 210, 220, 230)
    seen = [angular(green_bottom_emitter(etl_nm, ito_nm), [0.0]) for etl_nm in thicknesses]
    total = max(one.budget.outcoupling_efficiency or 0.0 for one in seen)
    return total, max(one.sides["bottom"].current_efficiency_cd_A for one in seen)


@pytest.mark.parametrize("ito_nm", [70.0, 100.0, 120.0])
def test_second_antinode_helps_in_total_and_more_forward(ito_nm: float) -> None:
    """Total x1.2, forward x1.6: Lin et al., Appl. Phys. Lett. 88, 081114 (2006), abstract."""
    first, second = _antinode(ito_nm, True), _antinode(ito_nm, False)
    total, forward = second[0] / first[0], second[1] / first[1]
    assert total > 1.0
    assert forward > 1.1
    assert forward > total


@pytest.mark.parametrize("ito_nm", [70.0, 100.0, 120.0])
def test_second_antinode_narrows_the_emission(ito_nm: float) -> None:
    """What goes forward is taken from the sides: the same paper."""
    ratios = []
    for etl_nm in (60.0, 210.0):
        side = angular(green_bottom_emitter(etl_nm, ito_nm), [0.0]).sides["bottom"]
        assert side.lambertian_ratio is not None
        ratios.append(side.lambertian_ratio)
    assert ratios[1] < ratios[0]
