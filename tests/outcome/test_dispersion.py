"""The dispersion dataset: averages of the budget, and light lines by name."""

from __future__ import annotations

import copy
from typing import Any

import numpy as np
import pytest

import optics
from optics.device.case import case_from_dict
from optics.outcome.dispersion import LINE_HALF_WIDTH, dispersion, light_lines
from optics.outcome.efficiency import DESTINATIONS
from optics.outcome.resolved import shares_by_position, shares_by_wavelength

DOCUMENT: dict[str, Any] = {
    "title": "invented",
    "wavelength": {"start_nm": 500, "stop_nm": 600, "step_nm": 10},
    "materials": {"aligned": {"n_ordinary": 1.8, "n_extraordinary": 1.65}, "htl": {"n": 1.75}},
    "substrate": {"material": "bk7", "thickness_mm": 0.7},
    "surroundings": {"bottom": "air", "top": "air"},
    "layers": [
        {"name": "HTL", "material": "htl", "thickness_nm": 60},
        {"name": "EML", "material": "aligned", "thickness_nm": 40},
        {"name": "mirror", "material": "al", "thickness_nm": 100},
    ],
    "emitters": [
        {
            "name": "green",
            "layer": "EML",
            "spectrum": {"peak_nm": 550, "fwhm_nm": 40},
            "zone": {"shape": "exponential", "from": "bottom", "decay_nm": 8},
            "horizontal_fraction": 0.8,
            "quantum_yield": 0.7,
        }
    ],
}


@pytest.fixture(scope="module")
def case() -> optics.Case:
    return case_from_dict(DOCUMENT)


@pytest.fixture(scope="module")
def outcome(case: optics.Case) -> optics.Budget:
    return optics.budget(case)


def test_power_sums_to_all_photons_but_the_near_field(
    case: optics.Case, outcome: optics.Budget
) -> None:
    data = dispersion(case, outcome, "green")
    step = float(np.diff(data["effective_index"][:2]).item())
    mean = (data["power"].sum("polarization") * data["spectrum_weight"]).sum("wavelength_nm")
    near = outcome.emitters[0].near_field_share
    # Blurring loses about one half width, see the kernel's test.
    assert float(mean.sum()) * step == pytest.approx(1.0 - near, abs=1.5 * LINE_HALF_WIDTH)
    assert near > 3.0 * LINE_HALF_WIDTH  # else this would not tell


def test_a_finer_line_gives_the_same_power(case: optics.Case, outcome: optics.Budget) -> None:
    """Power in a range with no sharp line at either end does not depend on the line width."""
    found = []
    for width in (0.004, 0.001):
        data = dispersion(case, outcome, "green", half_width=width)
        inside = data["power"].sel(effective_index=slice(0.3, 2.4)).sum("effective_index")
        found.append(width * inside.sum("polarization").to_numpy())
    np.testing.assert_allclose(found[0], found[1], rtol=5e-3)


def test_light_lines_are_named_and_metals_have_none(case: optics.Case) -> None:
    lines = {line.name: line for line in light_lines(case, case.emitters[0], case.wavelength_nm)}
    assert {name: line.kind for name, line in lines.items()} == {
        "bottom surroundings": "surroundings",
        "top surroundings": "surroundings",
        "substrate": "slab",
        "HTL": "film",
        "EML ordinary": "emitter",
        "EML extraordinary": "emitter",
    }
    np.testing.assert_allclose(lines["EML ordinary"].n, 1.8)
    np.testing.assert_allclose(lines["EML extraordinary"].n, 1.65)
    assert lines["substrate"].n[5] == pytest.approx(1.5185, abs=5e-4)  # N-BK7 at 550 nm


def test_absorbing_surroundings_have_no_light_line() -> None:
    document = copy.deepcopy(DOCUMENT)
    document["surroundings"]["top"] = "si"
    case = case_from_dict(document)
    names = [line.name for line in light_lines(case, case.emitters[0], case.wavelength_nm)]
    assert "top surroundings" not in names


def test_shares_by_wavelength_average_to_the_budget(
    case: optics.Case, outcome: optics.Budget
) -> None:
    data = shares_by_wavelength(case, outcome, "green")
    for name in DESTINATIONS:
        mean = float((data["spectrum_weight"] * data["dissipated"] * data[name]).sum())
        assert mean == pytest.approx(outcome.emitters[0].destinations[name], abs=1e-12)
    every = sum(data[name] for name in DESTINATIONS)
    np.testing.assert_allclose(every, 1.0, atol=1e-6)


def test_shares_by_position_average_to_the_budget(
    case: optics.Case, outcome: optics.Budget
) -> None:
    """With its own trapezoid over the zone, an integral apart from the budget's quadrature."""
    data = shares_by_position(case, "green", positions=400)
    z, q = data["position_nm"].to_numpy(), 0.7
    rate = data["F"].to_numpy()
    weight = data["zone"].to_numpy() * rate / (1.0 - q + q * rate)
    low, high = z[0], z[-1]
    assert low == pytest.approx(0.0, abs=0.05)
    assert high == pytest.approx(39.5, abs=0.05)  # closest approach of the mirror
    for name in DESTINATIONS:
        mean = np.trapezoid(weight * data[name], z) / np.trapezoid(weight, z)
        assert mean == pytest.approx(outcome.emitters[0].destinations[name], abs=2e-4)


def test_a_point_zone_says_where_it_is() -> None:
    document = copy.deepcopy(DOCUMENT)
    document["emitters"][0]["zone"] = {"shape": "point", "at": 0.25}
    data = shares_by_position(case_from_dict(document), "green", 1e-4, positions=5)
    assert data.attrs["point_nm"] == 10.0
    assert "zone" not in data


def test_unknown_emitters_and_widths_are_refused(case: optics.Case, outcome: optics.Budget) -> None:
    with pytest.raises(KeyError, match="red"):
        dispersion(case, outcome, "red")
    with pytest.raises(KeyError, match="red"):
        shares_by_position(case, "red")
    for width in (0.0, -1.0, float("nan")):
        with pytest.raises(ValueError, match="half_width"):
            dispersion(case, outcome, "green", half_width=width)
