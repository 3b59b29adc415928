"""Sensitivities: against differences of budgets and angular results, and their layout."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from devices import case as make_case
from devices import pixel, tandem

import optics
from optics.study.sensitivity import Influence, Sensitivity, sensitivity

TIGHT = 1e-10


@cache
def device() -> optics.Case:
    document = pixel()
    document["wavelength"] = {"values_nm": [520, 550, 580]}
    return make_case(document)


@cache
def found() -> Sensitivity:
    return sensitivity(device(), TIGHT)


def one(change: str, name: str) -> Influence:
    (influence,) = [row for row in found().influences if (row.change, row.name) == (change, name)]
    return influence


def numbers(case: optics.Case) -> dict[str, float]:
    seen = optics.angular(case, [0], TIGHT)
    side = seen.sides["bottom"]
    return {
        "eqe": seen.budget.external_quantum_efficiency,
        "luminance": side.current_efficiency_cd_A,
        "x": side.x_normal or 0.0,
        "v_prime": side.v_prime_normal or 0.0,
    }


def slopes(path: str, step: float) -> dict[str, float]:
    """Derivatives by central differences of fourth order."""
    at = float(device().value(path))
    near = [numbers(device().replace(path, at + k * step)) for k in (-2, -1, 1, 2)]
    return {
        key: float(np.array([one[key] for one in near]) @ np.array([1, -8, 8, -1]) / (12 * step))
        for key in near[0]
    }


@pytest.mark.parametrize(
    ("change", "name", "path", "step", "unit"),
    [
        ("thickness", "ETL", "layers.ETL.thickness_nm", 0.05, 1.0),
        # Each material is that of one film alone, so its n is the film's.
        ("index", "HTL", "materials.htl.n", 1e-4, 0.01),
        ("index", "EML", "materials.host.n", 1e-4, 0.01),
        ("orientation", "green", "emitters.green.horizontal_fraction", 1e-2, 0.01),
    ],
)
def test_steps_are_those_of_differences(
    change: str, name: str, path: str, step: float, unit: float
) -> None:
    expected, at, row = slopes(path, step), numbers(device()), one(change, name)
    bottom = row.sides["bottom"]
    assert row.external_quantum_efficiency == pytest.approx(unit * expected["eqe"], rel=1e-6)
    relative = unit * expected["eqe"] / at["eqe"]
    assert row.external_quantum_efficiency_relative == pytest.approx(relative, rel=1e-6)
    luminance = unit * expected["luminance"] / at["luminance"]
    assert bottom["luminance_relative"] == pytest.approx(luminance, rel=1e-6)
    assert bottom["x"] == pytest.approx(unit * expected["x"], rel=1e-6, abs=1e-12)
    assert bottom["v_prime"] == pytest.approx(unit * expected["v_prime"], rel=1e-6, abs=1e-12)


def test_a_zone_that_moves_with_both_parts_of_its_film() -> None:
    # Moving a point up is the same as thickening the part below it and thinning that above.
    document = pixel()
    document["wavelength"] = {"values_nm": [550]}
    document["emitters"][0]["zone"] = {"shape": "point", "at_nm": 10.0, "from": "bottom"}
    case = make_case(document)
    row = next(row for row in sensitivity(case, TIGHT).influences if row.change == "position")
    eqe = [
        optics.budget(case.replace("emitters.green.zone.at_nm", at), TIGHT)
        for at in (9.98, 9.99, 10.01, 10.02)
    ]
    values = np.array([one.external_quantum_efficiency for one in eqe])
    expected = float(values @ np.array([1, -8, 8, -1]) / 0.12)
    assert row.external_quantum_efficiency == pytest.approx(expected, rel=1e-6)


def test_rows_are_films_from_below_then_emitters() -> None:
    films = ["ITO", "HTL", "EML", "ETL", "CAT"]
    assert [(row.change, row.name) for row in found().influences] == [
        *[("thickness", name) for name in films],
        ("position", "green"),
        *[("index", name) for name in films],
        ("orientation", "green"),
    ]


def test_only_lit_sides_are_told() -> None:
    assert list(one("thickness", "ETL").sides) == ["bottom"]


def test_a_film_of_one_material_among_several_moves_alone() -> None:
    document = tandem()
    document["wavelength"] = {"values_nm": [560]}
    rows = sensitivity(make_case(document), TIGHT).influences
    lower, upper = (
        next(row for row in rows if (row.change, row.name) == ("index", name))
        for name in ("EML", "EML-2")
    )
    assert lower.external_quantum_efficiency != upper.external_quantum_efficiency
    whole = next(row for row in rows if (row.change, row.name) == ("index", "ETL"))
    assert whole.path is None


def test_results_as_dictionary_table_and_arrays() -> None:
    entry = found().to_dict()
    row = entry["rows"][3]
    assert row["path"] == "layers.ETL.thickness_nm"
    assert (row["step"], row["unit"]) == (1.0, "nm")
    assert set(row["sides"]["bottom"]) == {"luminance_relative", "x", "y", "u_prime", "v_prime"}
    frame = found().to_frame()
    picked = frame[(frame.name == "ETL") & (frame.quantity == "thickness.bottom.x")]
    assert picked.value.item() == row["sides"]["bottom"]["x"]
    assert picked.unit.item() == "per 1 nm"
    data = found().to_dataset()
    assert float(data["bottom.x"][3]) == row["sides"]["bottom"]["x"]
    assert data.attrs["derivative_error"] == found().derivative_error < 1e-8


def test_a_dark_device_has_no_relative_changes() -> None:
    row = sensitivity(device().replace("drive.charge_balance", 0.0)).influences[0]
    assert row.external_quantum_efficiency == 0.0
    assert row.external_quantum_efficiency_relative is None
    assert dict(row.sides) == {}


def test_a_tolerance_out_of_range_is_refused() -> None:
    with pytest.raises(ValueError, match="tolerance"):
        sensitivity(device(), 0.5)
