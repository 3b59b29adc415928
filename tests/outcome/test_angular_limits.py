"""Darkness, grazing angles, bad input, and the form of the result."""

from __future__ import annotations

import json
import math
from typing import Any

import numpy as np
import pytest
from angular_devices import SIDES, driven, narrow, no_constants, without_slabs
from devices import case, emitter, pixel, tandem

import optics
from optics.outcome.angular import angular
from optics.outcome.directional import radiance_over_bulk, sources
from optics.present.files import as_json


def test_vertical_dipoles_leave_the_normal_exactly_dark() -> None:
    document = emitter(driven(pixel()), horizontal_fraction=0.0)
    seen = angular(case(document), [0.0, 40.0, 90.0])
    side = seen.sides["bottom"]
    assert side.luminance_cd_m2 is not None
    assert side.luminance_cd_m2[0] == 0.0
    assert side.luminance_cd_m2[1] > 0.0  # type: ignore[operator]
    assert side.relative_luminance == (None, None, None)
    assert side.delta_uv == (None, None, None)
    assert side.x[0] is None
    assert side.x[1] is not None
    for key in ("lambertian_ratio", "half_luminance_angle_deg", "blue_index", "peak_nm_normal"):
        assert getattr(side, key) is None
    assert any("no visible light along the normal" in line for line in seen.warnings)
    no_constants(as_json(seen.to_dict(spectral=True, polarization=True)))


def test_toward_90_deg_light_fades_with_the_cosine_and_is_gone_there() -> None:
    side = angular(case(driven(pixel())), [89.999, 89.9999, 90.0]).sides["bottom"]
    near, nearer, there = side.relative_luminance
    assert nearer == pytest.approx(0.1 * near, rel=2e-3)  # type: ignore[operator]
    assert there == 0.0
    assert side.x[1] is not None
    assert side.x[2] is None


@pytest.mark.parametrize(
    ("document", "dark"),
    [
        (emitter(driven(pixel()), quantum_yield=0.0), SIDES),
        (emitter(driven(pixel()), exciton_fraction=0.0), SIDES),
        (without_slabs("si"), ("bottom",)),
    ],
    ids=["no yield", "no excitons", "absorbing side"],
)
def test_darkness_is_zero_and_null_color(document: dict[str, Any], dark: tuple[str, ...]) -> None:
    seen = angular(case(document), [0.0, 30.0, 90.0])
    for name in dark:
        side = seen.to_dict()["sides"][name]
        for key in ("radiance_W_sr_m2", "luminance_cd_m2", "relative_luminance"):
            assert side[key] == [0.0, 0.0, 0.0]
        for key in ("x", "y", "u_prime", "v_prime", "delta_uv"):
            assert side[key] == [None, None, None]
        for key in ("current_efficiency_cd_A", "luminous_exitance_lm_m2", "luminous_efficacy_lm_W"):
            assert side[key] == 0.0
        for key in ("lambertian_ratio", "blue_index", "peak_nm_normal", "duv"):
            assert side[key] is None
    no_constants(as_json(seen.to_dict(spectral=True, polarization=True)))


def test_invisible_light_has_radiance_and_no_luminance() -> None:
    document = emitter(driven(pixel()), spectrum={"peak_nm": 900, "fwhm_nm": 20})
    document["wavelength"] = {"start_nm": 850, "stop_nm": 950, "step_nm": 5}
    seen = angular(case(document), [0.0, 30.0])
    side = seen.sides["bottom"]
    assert side.radiance_W_sr_m2 is not None
    assert side.radiance_W_sr_m2[0] > 0.0  # type: ignore[operator]
    assert side.luminance_cd_m2 == (0.0, 0.0)
    assert side.x == (None, None)
    assert side.fwhm_nm_normal is not None
    assert any("outside 360 to 830 nm" in line for line in seen.warnings)


def test_a_grid_too_narrow_for_the_spectrum_is_said() -> None:
    document = pixel()
    document["wavelength"] = {"start_nm": 545, "stop_nm": 610, "step_nm": 5}
    seen = angular(case(document), [0.0])
    assert seen.sides["bottom"].fwhm_nm_normal is None
    assert any("has not fallen to half" in line for line in seen.warnings)
    assert any("lies outside the wavelength grid" in line for line in seen.warnings)


def test_nothing_around_gives_the_same_intensity_everywhere() -> None:
    """In one medium without faces radiance is 1/(4 pi cos), unbounded at 90 deg."""
    document = emitter(driven(pixel()), horizontal_fraction=2 / 3, quantum_yield=1.0)
    document["materials"]["host"] = {"n": 1.5}
    document["layers"] = [document["layers"][2]]
    del document["substrate"]
    document["surroundings"] = {"bottom": "host", "top": "host"}
    device = case(narrow(document, 540.0, 550.0))
    angles = np.array([0.0, 30.0, 60.0, 89.0])
    (source,) = sources(device, optics.budget(device).lit)
    for side in range(2):
        found = radiance_over_bulk(device, source, side, angles).sum(axis=2)
        expected = 1.0 / (4.0 * np.pi * np.cos(np.deg2rad(angles)))
        np.testing.assert_allclose(found, np.broadcast_to(expected, found.shape), rtol=1e-9)
    seen = angular(device, [0.0, 60.0, 90.0])
    bottom = seen.sides["bottom"]
    assert bottom.relative_luminance[1] == pytest.approx(2.0, rel=1e-9)
    assert bottom.relative_luminance[2] is None
    assert bottom.half_luminance_angle_deg is None
    assert bottom.lambertian_ratio == pytest.approx(2.0, rel=1e-6)
    assert any("without bound" in line for line in seen.warnings)


@pytest.mark.parametrize(
    ("angles", "said"),
    [
        ([], "found none"),
        ([-0.1, 10.0], "found -0.1"),
        ([10.0, 90.5], "found 90.5"),
        ([math.nan], "found nan"),
        ([10.0, 20.0, 10.0], "found 10 twice"),
    ],
)
def test_bad_angles(angles: list[float], said: str) -> None:
    with pytest.raises(ValueError, match=said):
        angular(case(pixel()), angles)


def test_all_bad_angles_at_once() -> None:
    with pytest.raises(ValueError, match=r"(?s)found 91.*found 95"):
        angular(case(pixel()), [0.0, 91.0, 95.0])


def test_one_wavelength_takes_any_number_of_angles() -> None:
    """Angles go together in limited numbers; a narrow resonance needs thousands of them."""
    device = case(narrow(pixel(), 545.0))
    (source,) = sources(device, optics.budget(device).lit)
    angles = np.linspace(0.0, 90.0, 2501)
    found = radiance_over_bulk(device, source, 0, angles)
    assert found.shape == (1, 2501, 2)
    assert np.array_equal(found[:, ::500], radiance_over_bulk(device, source, 0, angles[::500]))


def test_result_is_plain_frozen_and_labelled() -> None:
    seen = angular(case(driven(pixel())), [0.0, 30.0])
    result = seen.to_dict()
    assert result["schema"] == "outcouple.angular/1"
    assert no_constants(json.dumps(result, allow_nan=False)) == result
    with pytest.raises(AttributeError):
        seen.title = "other"  # type: ignore[misc]
    with pytest.raises(ValueError, match="read-only"):
        seen.sides["bottom"].normal_spectrum[1][0] = 1.0
    first = seen.spectral
    first["spectral_radiance_W_sr_m2_nm"][:] = 0.0
    assert float(seen.spectral["spectral_radiance_W_sr_m2_nm"].sum()) > 0.0
    frame = seen.to_frame(polarization=True)
    row = frame[(frame["side"] == "bottom") & (frame["quantity"] == "luminance_cd_m2")]
    assert row["value"].to_list() == result["sides"]["bottom"]["luminance_cd_m2"]
    assert set(row["unit"]) == {"cd m-2"}
    units = dict(zip(frame["quantity"], frame["unit"], strict=True))
    assert units["current_efficiency_cd_A"] == "cd A-1"
    assert units["half_luminance_angle_deg"] == "degree"
    assert units["lambertian_ratio"] == "1"
    assert units["radiance_s_W_sr_m2"] == "W sr-1 m-2"
    data = seen.to_dataset()
    assert float(data["x"].sel(side="bottom", angle_deg=30.0)) == result["sides"]["bottom"]["x"][1]
    assert data["fwhm_nm_normal"].attrs["units"] == "nm"


def test_spectral_rows_of_the_table() -> None:
    seen = angular(case(driven(tandem())), [0.0, 30.0])
    frame = seen.to_frame(spectral=True)
    here = frame[(frame["side"] == "bottom") & (frame["angle_deg"] == 30.0)]
    spread = here[here["quantity"] == "spectral_radiance_p_W_sr_m2_nm"]
    expected = seen.spectral["spectral_radiance_W_sr_m2_nm"].sel(
        side="bottom", angle_deg=30.0, polarization="p"
    )
    assert spread["value"].to_numpy() == pytest.approx(expected.to_numpy())
    line = here[here["quantity"] == "line_radiance_s_W_sr_m2"]
    assert line["wavelength_nm"].to_list() == [601.5]
