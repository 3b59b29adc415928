"""What a result tells its reader: one test per warning, and none without a reason."""

from __future__ import annotations

import math
from typing import Any

import pytest
from devices import case, emitter, pixel

from optics.outcome.budget import budget
from optics.outcome.cautions import accuracy


def quiet() -> dict[str, Any]:
    """A pixel without any reason to warn: the grid covers its spectrum."""
    document = emitter(pixel(), spectrum={"line_nm": 545})
    document["wavelength"] = {"start_nm": 535, "stop_nm": 555, "step_nm": 5}
    return document


def warnings_of(document: dict[str, Any], tolerance: float = 1e-6) -> tuple[str, ...]:
    return budget(case(document), tolerance).warnings


def test_nothing_to_warn_of() -> None:
    assert warnings_of(quiet()) == ()


def test_absorption_of_the_emitter_s_own_film() -> None:
    """1 - exp(-4 pi k d/lambda) for one pass; above 1 % the result is an upper bound."""
    for k, bound in ((0.01, False), (0.02, True)):
        document = quiet()
        document["materials"]["host"] = {"n": 1.8, "k": k}
        absorptance = -math.expm1(-4 * math.pi * k * 30 / 545)
        (text,) = warnings_of(document)
        assert "emitter green" in text
        assert "its own film EML is taken as transparent" in text
        assert f"{absorptance:.2%}" in text
        assert ("upper bound" in text) is bound is (absorptance > 0.01)


def test_own_absorption_is_averaged_over_the_spectrum(tmp_path: Any) -> None:
    document = pixel()
    document["wavelength"] = {"start_nm": 440, "stop_nm": 660, "step_nm": 10}
    document["materials"]["host"] = {"n": 1.8, "k": 0.03}
    found = budget(case(document))
    weight = found.spectral["green"]["spectrum_weight"]
    one_pass = [-math.expm1(-4 * math.pi * 0.03 * 30 / nm) for nm in weight["wavelength_nm"].values]
    expected = float((weight.values * one_pass).sum())
    assert any(f"{expected:.2%}" in text for text in found.warnings)


def test_near_field_names_the_film() -> None:
    document = emitter(quiet(), zone={"shape": "point", "at": 0.9})
    del document["layers"][3]
    found = budget(case(document))
    share = found.emitters[0].near_field_share
    assert share > 0.01
    (text,) = found.warnings
    assert text.startswith(f"emitter green: {share:.1%} of its power goes into near fields of")
    assert "film CAT" in text
    # The other neighbor, if that is the one.
    document["layers"].reverse()
    document["emitters"][0]["zone"] = {"shape": "point", "at": 0.1}
    document["cover"] = document.pop("substrate")
    assert "film CAT" in warnings_of(document)[0]


def test_point_closer_than_the_closest_approach() -> None:
    document = emitter(quiet(), zone={"shape": "point", "at_nm": 29.8, "from": "bottom"})
    document["emitters"][0]["zone"] = {"shape": "point", "at": 29.8 / 30}
    del document["layers"][3]
    found = warnings_of(document)
    assert any("nearer than closest_approach_nm = 0.5" in text for text in found)


def thick_film_turn(step_nm: float, thickness_nm: float) -> float:
    """Largest turn of the round-trip phase of the film of n = 1.78 between grid points."""
    return 4 * math.pi * 1.78 * thickness_nm * (1 / 535 - 1 / (535 + step_nm))


def test_film_too_thick_for_the_grid_says_the_step_needed() -> None:
    document = quiet()
    document["layers"][1]["thickness_nm"] = 3000
    turn = thick_film_turn(5, 3000)
    assert turn > math.pi / 4
    (text,) = warnings_of(document)
    assert text.startswith("film HTL:")
    assert f"{turn / math.pi:.2f} pi between 535 and 540 nm" in text
    needed = 5 * math.pi / 4 / turn
    assert f"a step of {needed:.2g} nm or less" in text
    # With that step it is silent.
    document["wavelength"] = {"values_nm": [535, 535 + 0.95 * needed, 535 + 1.9 * needed]}
    document["emitters"][0]["spectrum"] = {"line_nm": 536}
    assert warnings_of(document) == ()


def test_film_just_thin_enough_is_silent() -> None:
    document = quiet()
    limit = 3000 * math.pi / 4 / thick_film_turn(5, 3000)
    document["layers"][1]["thickness_nm"] = 0.999 * limit
    assert warnings_of(document) == ()
    document["layers"][1]["thickness_nm"] = 1.001 * limit
    assert len(warnings_of(document)) == 1


def test_spectrum_beyond_the_grid() -> None:
    document = pixel()
    found = budget(case(document))
    (text,) = found.warnings
    assert found.emitters[0].lost_share > 1e-3
    # Gaussian of FWHM 50 at 545, grid 490 to 610.
    sigma = 50 / (2 * math.sqrt(2 * math.log(2)))
    inside = [math.erf(x / sigma / math.sqrt(2)) / 2 for x in (55, 65)]
    assert found.emitters[0].lost_share == pytest.approx(1 - sum(inside), rel=1e-9)
    assert "lies outside the wavelength grid" in text


def test_missed_tolerance() -> None:
    """A result that misses its tolerance says so; one that meets it does not."""
    thick = quiet()
    thick["layers"][0]["thickness_nm"] = 30_000
    result = budget(case(thick), 1e-12)
    missed = result.accuracy.integration_error > 1e-12
    assert missed
    assert any(text.startswith("the integration error is") for text in result.warnings)
    assert list(accuracy(1e-6, 2e-6, 0.0)) == [
        "the energy balance is 2.0e-06, above the tolerance of 1.0e-06"
    ]
    assert list(accuracy(1e-6, 0.0, 3e-6)) == [
        "the integration error is 3.0e-06, above the tolerance of 1.0e-06"
    ]
    assert list(accuracy(1e-6, 1e-6, 1e-6)) == []
