"""Rates of permittivities with the numbers of every material model, against differences."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from optics.device import models
from optics.device.case import Case, case_from_dict
from optics.device.material_rates import MaterialNumber, has_rates, index_rates, permittivity_rates

WAVELENGTH_NM = np.array([470.0, 550.0, 640.0])
# Sixth order: nodes and weights of a central difference.
DIFFERENCE = ((1, 3 / 4), (2, -3 / 20), (3, 1 / 60))
MATERIALS: dict[str, Any] = {
    "plain": {"n": 1.7, "k": 0.02},
    "host": {"n_ordinary": 1.8, "n_extraordinary": 1.66, "k_ordinary": 0.01,
             "k_extraordinary": 0.03},
    "cauchy": {"cauchy_nm": [1.7, 9.0e3, 4.0e8], "k": 0.004},
    "silica": {"sellmeier": {"b": [0.6961663, 0.4], "c_um2": [0.0046791, 0.0135]}},
    "metal": {"lorentz_drude": {"plasma_eV": 9.01, "f0": 0.845, "gamma0_eV": 0.048,
                                "oscillators": [[0.065, 3.886, 0.816]]}},
    "mixed": {"mix": {"plain": 0.4, "cauchy": 0.35, "silica": 0.25}},
    "averaged": {"mix": {"plain": 0.4, "metal": 0.6}, "rule": "linear"},
    "of-mixed": {"mix": {"mixed": 0.5, "silica": 0.5}},
    "pair": {"ordinary": "mixed", "extraordinary": "cauchy"},
}  # fmt: skip
# Material of the film, number that moves, step.
MOVING = [
    ("plain", "plain.n", 1e-2),
    ("plain", "plain.k", 5e-3),
    ("host", "host.n_ordinary", 1e-2),
    ("host", "host.n_extraordinary", 1e-2),
    ("host", "host.k_ordinary", 3e-3),
    ("host", "host.k_extraordinary", 1e-2),
    ("cauchy", "cauchy.cauchy_nm.0", 1e-2),
    ("cauchy", "cauchy.cauchy_nm.1", 1e2),
    ("cauchy", "cauchy.cauchy_nm.2", 1e7),
    ("cauchy", "cauchy.k", 1e-3),
    ("silica", "silica.sellmeier.b.1", 1e-2),
    ("silica", "silica.sellmeier.c_um2.0", 1e-4),
    ("metal", "metal.lorentz_drude.plasma_eV", 3e-2),
    ("metal", "metal.lorentz_drude.f0", 1e-2),
    ("metal", "metal.lorentz_drude.gamma0_eV", 1e-3),
    ("metal", "metal.lorentz_drude.oscillators.0.0", 1e-3),
    ("metal", "metal.lorentz_drude.oscillators.0.1", 3e-2),
    ("metal", "metal.lorentz_drude.oscillators.0.2", 1e-2),
    ("mixed", "plain.n", 1e-2),
    ("mixed", "plain.k", 3e-3),
    ("mixed", "cauchy.cauchy_nm.0", 1e-2),
    ("averaged", "metal.lorentz_drude.f0", 1e-2),
    ("of-mixed", "silica.sellmeier.b.0", 1e-2),
    ("pair", "cauchy.cauchy_nm.0", 1e-2),
    ("pair", "plain.n", 1e-2),
]


def device(material: str) -> Case:
    return case_from_dict(
        {
            "title": "invented",
            "wavelength": {"values_nm": [550]},
            "materials": MATERIALS,
            "layers": [
                {"name": "X", "material": material, "thickness_nm": 30},
                {"name": "EML", "material": "silica", "thickness_nm": 20},
            ],
            "emitters": [
                {"name": "e", "layer": "EML", "zone": {"shape": "uniform"},
                 "spectrum": {"line_nm": 550}, "quantum_yield": 1.0},
            ],
        }
    )  # fmt: skip


@pytest.mark.parametrize(("material", "path", "step"), MOVING)
def test_rates_are_those_of_differences(material: str, path: str, step: float) -> None:
    case = device(material)
    name, *keys = path.split(".")
    found = permittivity_rates(
        case.stack.films[0].material,
        MaterialNumber(name, tuple(keys)),
        case.local_materials,
        WAVELENGTH_NM,
    )
    assert found is not None
    at = case.value(f"materials.{path}")

    def permittivity(value: float) -> np.ndarray[Any, Any]:
        changed = case.replace(f"materials.{path}", value)
        return np.array(changed.stack.films[0].material.permittivity(WAVELENGTH_NM))

    expected = sum(
        weight / step * (permittivity(at + k * step) - permittivity(at - k * step))
        for k, weight in DIFFERENCE
    )
    # Steps of a percent leave (1 %)^6 of the scale on which a law changes.
    assert_allclose(np.array(found), expected, rtol=0.0, atol=1e-9 * float(np.abs(expected).max()))


def test_a_material_that_does_not_hold_the_number_has_no_rates() -> None:
    case = device("plain")
    material = case.stack.films[0].material
    number = MaterialNumber("cauchy", ("cauchy_nm", "0"))
    assert permittivity_rates(material, number, case.local_materials, WAVELENGTH_NM) is None


def test_a_bundled_material_is_not_the_local_one_of_the_same_name() -> None:
    bundled = models.constant("air", 1.0)
    assert permittivity_rates(bundled, MaterialNumber("air", ("n",)), (), WAVELENGTH_NM) is None


def test_fractions_and_tables_have_no_rates() -> None:
    case = device("mixed")
    assert not has_rates(case.stack.films[0].material, ["mix", "plain"])


def test_a_step_of_the_index() -> None:
    eps = np.array([(1.7 + 0.1j) ** 2])
    ordinary, extraordinary = index_rates(eps, 4.0 * eps, 1.0j)
    assert_allclose(ordinary, [2.0j * (1.7 + 0.1j)], rtol=1e-15)
    assert_allclose(extraordinary, [4.0j * (1.7 + 0.1j)], rtol=1e-15)
