"""Emission against angle: identities, agreement with the budget, and what is said of darkness."""

from __future__ import annotations

import json
import math
import tomllib
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from devices import case, emitter, pixel, tandem

import optics
from optics.outcome import color
from optics.outcome.angular import angular
from optics.outcome.color import observer_at
from optics.outcome.directional import (
    index_outside,
    radiance,
    radiance_over_bulk,
    sources,
)
from optics.outcome.light import problem_of
from optics.present.files import as_json

PUBLISHED = tomllib.loads(
    (Path(__file__).parents[1] / "published" / "color_photometry.toml").read_text(encoding="utf-8")
)
SIDES = ("bottom", "top")


def driven(document: dict[str, Any]) -> dict[str, Any]:
    document["drive"] |= {"current_density_mA_cm2": 4.0, "voltage_V": 3.2}
    return document


def semitransparent(exit_: str = "planar") -> dict[str, Any]:
    """Glass below in air, an absorbing polymer slab above in water, a thin metal between."""
    document = driven(pixel())
    document["materials"] |= {"water": {"n": 1.33}, "polymer": {"n": 1.65, "k": 1e-8}}
    document["surroundings"] = {"top": "water"}
    document["cover"] = {"material": "polymer", "thickness_mm": 0.5, "exit": exit_}
    document["layers"][-1]["thickness_nm"] = 15
    return document


def without_slabs(bottom: str = "air") -> dict[str, Any]:
    document = driven(pixel())
    del document["substrate"]
    document["surroundings"] = {"bottom": bottom}
    document["layers"][-1]["thickness_nm"] = 15
    return document


DEVICES = {
    "planar": lambda: driven(pixel()),
    "matched, lines, two units": lambda: driven(tandem()),
    "two slabs": semitransparent,
    "two slabs, one matched": lambda: semitransparent("matched"),
    "no slabs": without_slabs,
    "on silicon": lambda: without_slabs("si"),
}


def same(found: Any, expected: Any) -> bool:
    """Equal but for rounding; null only to null."""
    if isinstance(expected, list):
        return all(same(a, b) for a, b in zip(found, expected, strict=True))
    if found is None or expected is None:
        return found is expected
    return bool(found == pytest.approx(expected, rel=1e-12))


def narrow(document: dict[str, Any], *wavelengths_nm: float) -> dict[str, Any]:
    """Few wavelengths, so that a test is quick."""
    document["wavelength"] = {"values_nm": list(wavelengths_nm)}
    return document


@pytest.mark.parametrize("name", DEVICES)
def test_directions_add_up_to_the_budget(name: str) -> None:
    """2 pi int u sin d(angle) = U by Gauss panels that nobody told of the engine's nodes."""
    device = case(narrow(DEVICES[name](), 520.0, 560.0))
    node, weight = np.polynomial.legendre.leggauss(240)
    for source in sources(device, optics.budget(device)):
        problem = problem_of(device, source.emitter, source.wavelength_nm, source.position_nm)
        for side in range(2):
            n = float(index_outside(device, problem, side)[0])
            lines = (1.0, 1.33, 1.52, 1.65, 1.8)
            ends = [0.0, *(x / n for x in lines if x < n), 1.0]
            total = np.zeros(source.wavelength_nm.size)
            for low, high in pairwise(ends):
                # Square roots at both ends become smooth.
                t = 0.5 * np.pi * 0.5 * (node + 1.0)
                sine = low + (high - low) * np.sin(t) ** 2
                slope = (high - low) * np.sin(2.0 * t) * 0.25 * np.pi
                ray = radiance_over_bulk(device, source, side, np.rad2deg(np.arcsin(sine)))
                total += 2.0 * np.pi * ray.sum(axis=2) @ (sine * slope * weight)
            # Both are over the rate in the bulk, the scale of which is 1.
            assert total == pytest.approx(source.leaves[:, side], abs=1e-6)


@pytest.mark.parametrize("name", DEVICES)
def test_photons_by_side_are_the_budgets(name: str) -> None:
    seen = angular(case(DEVICES[name]()), [0.0])
    for side in SIDES:
        expected = getattr(seen.budget, f"external_quantum_efficiency_{side}")
        found = seen.sides[side].external_quantum_efficiency
        assert found == pytest.approx(expected, rel=1e-12, abs=1e-15)


@pytest.mark.parametrize("row", PUBLISHED["lambertian"], ids=lambda r: r["wavelength_nm"])
def test_lambertian_of_the_same_exitance_has_the_published_efficiency(
    row: dict[str, float],
) -> None:
    """cd/A x exitance/(pi luminance)/EQE of a line is what a Lambertian gives per photon."""
    document = emitter(pixel(), spectrum={"line_nm": float(row["wavelength_nm"])})
    side = angular(case(document), [0.0]).sides["bottom"]
    assert side.lambertian_ratio is not None
    lambertian = side.current_efficiency_cd_A * side.lambertian_ratio
    per_photon = lambertian / side.external_quantum_efficiency
    assert per_photon == pytest.approx(row["cd_per_A"], abs=row["half_digit"])


def test_integrals_and_normal_do_not_depend_on_the_angles_listed() -> None:
    device = case(driven(pixel()))
    many, few = angular(device), angular(device, [60.0, 12.3])
    for side in SIDES:
        a, b = many.sides[side].to_dict(), few.sides[side].to_dict()
        for key, value in a.items():
            if not isinstance(value, list):
                assert same(b[key], value), key
        at_60 = few.sides[side].luminance_cd_m2
        assert at_60 is not None
        assert many.sides[side].luminance_cd_m2 is not None
        assert at_60[0] == pytest.approx(many.sides[side].luminance_cd_m2[60], rel=1e-12)


def test_numbers_follow_from_the_spectra_by_their_definitions() -> None:
    document = driven(pixel())
    document["drive"] |= {"aperture_ratio": 0.4, "duty": 0.5}
    seen = angular(case(document), [0.0, 35.0, 70.0])
    result = seen.to_dict(spectral=True, polarization=True)["sides"]["bottom"]
    nm = np.array(result["wavelength_nm"])
    s, p = (np.array(result[f"spectral_radiance_{one}_W_sr_m2_nm"]) for one in "sp")
    xyz = np.trapezoid((s + p)[:, :, None] * observer_at(nm), nm, axis=1)
    luminance = 683.0 * xyz[:, 1]
    assert result["luminance_cd_m2"] == pytest.approx(luminance, rel=1e-12)
    assert result["radiance_W_sr_m2"] == pytest.approx(np.trapezoid(s + p, nm), rel=1e-12)
    assert result["radiance_s_W_sr_m2"] == pytest.approx(np.trapezoid(s, nm), rel=1e-12)
    apart = np.array(result["luminance_s_cd_m2"]) + np.array(result["luminance_p_cd_m2"])
    assert apart == pytest.approx(luminance, rel=1e-12)
    assert result["relative_luminance"] == pytest.approx(luminance / luminance[0], rel=1e-12)
    x, y = xyz[:, 0] / xyz.sum(axis=1), xyz[:, 1] / xyz.sum(axis=1)
    below = -2 * x + 12 * y + 3
    u, v = 4 * x / below, 9 * y / below
    for key, expected in (("x", x), ("y", y), ("u_prime", u), ("v_prime", v)):
        assert result[key] == pytest.approx(expected, rel=1e-12)
    assert result["delta_uv"] == pytest.approx(np.hypot(u - u[0], v - v[0]), abs=1e-12)
    current, voltage = 40.0, 3.2
    assert result["current_efficiency_cd_A"] == pytest.approx(luminance[0] / current, rel=1e-12)
    assert result["blue_index"] == pytest.approx(luminance[0] / current / y[0], rel=1e-12)
    assert result["luminance_normal_cd_m2"] == pytest.approx(luminance[0], rel=1e-12)
    peak = result["peak_luminance_normal_cd_m2"]
    assert peak == pytest.approx(luminance[0] / (0.4 * 0.5), rel=1e-12)
    for efficiency, exitance in (
        ("luminous_efficacy_lm_W", "luminous_exitance_lm_m2"),
        ("radiant_efficiency_W_W", "radiant_exitance_W_m2"),
    ):
        assert result[efficiency] == pytest.approx(
            result[exitance] / (current * voltage), rel=1e-12
        )
    ratio = result["luminous_exitance_lm_m2"] / (np.pi * luminance[0])
    assert result["lambertian_ratio"] == pytest.approx(ratio, rel=1e-12)


def test_luminance_has_fallen_to_half_at_the_half_angle() -> None:
    device = case(semitransparent())
    for name, side in angular(device, [0.0]).sides.items():
        half = side.half_luminance_angle_deg
        assert half is not None
        (value,) = angular(device, [half]).sides[name].relative_luminance
        # Radiance falls steeply near 90 deg: 1e-6 of a degree is 1e-5 of the luminance there.
        assert value == pytest.approx(0.5, abs=1e-4)


def test_peak_and_width_are_those_of_the_spectrum_along_the_normal() -> None:
    seen = angular(case(pixel()), [0.0])
    spectrum = seen.spectral["spectral_radiance_W_sr_A_nm"].sel(side="bottom", angle_deg=0.0)
    power = spectrum.sum("polarization").to_numpy()
    at = spectrum["wavelength_nm"].to_numpy()
    side = seen.sides["bottom"]
    assert side.peak_nm_normal == at[power.argmax()]
    half = np.interp(0.5 * power.max(), power[: power.argmax()], at[: power.argmax()])
    end = np.interp(-0.5 * power.max(), -power[power.argmax() :], at[power.argmax() :])
    assert side.fwhm_nm_normal == pytest.approx(end - half, rel=1e-12)


def test_s_and_p_agree_along_the_normal_and_differ_aside() -> None:
    spectra = angular(case(pixel()), [0.0, 60.0]).spectral["spectral_radiance_W_sr_A_nm"]
    assert spectra.dims == ("side", "angle_deg", "wavelength_nm", "polarization")
    normal, aside = (spectra.sel(side="bottom", angle_deg=angle) for angle in (0.0, 60.0))
    np.testing.assert_allclose(
        normal.sel(polarization="s"), normal.sel(polarization="p"), rtol=1e-12
    )
    difference = (aside.sel(polarization="p") / aside.sel(polarization="s") - 1.0).to_numpy()
    assert np.abs(difference).min() > 0.01


def test_without_a_current_ratios_and_color_remain() -> None:
    with_current = angular(case(driven(pixel())), [0.0, 45.0])
    without = angular(case(pixel()), [0.0, 45.0])
    known, found = (one.to_dict()["sides"]["bottom"] for one in (with_current, without))
    absolute = {
        "radiance_W_sr_m2",
        "luminance_cd_m2",
        "luminance_normal_cd_m2",
        "peak_luminance_normal_cd_m2",
        "luminous_exitance_lm_m2",
        "radiant_exitance_W_m2",
        "luminous_efficacy_lm_W",  # these two for want of a voltage
        "radiant_efficiency_W_W",
    }
    for key, value in found.items():
        if key in absolute:
            assert value is None
        else:
            assert same(value, known[key]), key
    spectral = without.to_dict(spectral=True)["sides"]["bottom"]
    assert spectral["spectral_radiance_s_W_sr_m2_nm"] is None
    assert "spectral_radiance_W_sr_m2_nm" not in without.spectral
    assert "spectral_radiance_W_sr_m2_nm" in with_current.spectral


def test_efficacies_need_no_current() -> None:
    document = pixel()
    document["drive"]["voltage_V"] = 3.2
    side = angular(case(document), [0.0]).sides["bottom"]
    known = angular(case(driven(pixel())), [0.0]).sides["bottom"]
    assert side.luminous_efficacy_lm_W == pytest.approx(known.luminous_efficacy_lm_W, rel=1e-12)
    assert side.radiant_efficiency_W_W == pytest.approx(known.radiant_efficiency_W_W, rel=1e-12)


def test_filter_and_polarizer_act_on_angles_and_not_on_the_budget(tmp_path: Path) -> None:
    (tmp_path / "f.csv").write_text("wavelength_nm,transmittance\n480,0\n560,0.8\n620,0.5\n")
    plain = angular(case(driven(pixel())), [0.0, 50.0])
    document = driven(pixel())
    document["sides"] = {"bottom": {"filter": "f.csv", "polarizer_transmittance": 0.43}}
    filtered = angular(optics.device.case.case_from_dict(document, tmp_path), [0.0, 50.0])
    key = "spectral_radiance_W_sr_m2_nm"
    at = plain.spectral["wavelength_nm"].to_numpy()
    passed = 0.43 * np.interp(at, [480.0, 560.0, 620.0], [0.0, 0.8, 0.5])
    expected = plain.spectral[key] * passed[None, None, :, None]
    expected.loc[{"side": "top"}] = plain.spectral[key].sel(side="top")
    np.testing.assert_allclose(filtered.spectral[key], expected, rtol=1e-12)
    assert filtered.budget.to_dict()["destinations"] == plain.budget.to_dict()["destinations"]
    bottom = filtered.sides["bottom"]
    assert (
        bottom.external_quantum_efficiency < 0.43 * 0.8 * plain.budget.external_quantum_efficiency
    )
    assert filtered.sides["top"].x_normal == plain.sides["top"].x_normal


def test_a_polarizer_alone_scales_everything() -> None:
    document = driven(pixel())
    document["sides"] = {"bottom": {"polarizer_transmittance": 0.25}}
    plain, dimmed = (angular(case(d)).sides["bottom"] for d in (driven(pixel()), document))
    for key in ("current_efficiency_cd_A", "luminous_exitance_lm_m2", "radiant_efficiency_W_W"):
        assert getattr(dimmed, key) == pytest.approx(0.25 * getattr(plain, key), rel=1e-12)
    for key in ("half_luminance_angle_deg", "lambertian_ratio", "x_normal", "fwhm_nm_normal"):
        assert getattr(dimmed, key) == pytest.approx(getattr(plain, key), rel=1e-12)


def test_emitters_and_units_add_up() -> None:
    def alone(name: str) -> optics.Case:
        document = driven(tandem())
        for one in document["emitters"]:
            one["exciton_fraction"] = 0.8 if one["name"] == name else 0.0
        return case(document)

    document = driven(tandem())
    for one in document["emitters"]:
        one["exciton_fraction"] = 0.8
    together = angular(case(document), [0.0, 40.0])
    parts = [angular(alone(one["name"]), [0.0, 40.0]) for one in document["emitters"]]
    for side in SIDES:
        total = np.sum([part.sides[side].luminance_cd_m2 for part in parts], axis=0)
        assert together.sides[side].luminance_cd_m2 == pytest.approx(total, rel=1e-12)
        exitance = sum(part.sides[side].radiant_exitance_W_m2 or 0.0 for part in parts)
        assert together.sides[side].radiant_exitance_W_m2 == pytest.approx(exitance, rel=1e-12)


def test_a_line_is_apart_in_spectra_and_counts_in_luminance() -> None:
    device = case(driven(tandem()))
    seen = angular(device, [0.0, 30.0])
    data = seen.spectral
    assert data["line_nm"].to_numpy() == [601.5]
    assert data["line_radiance_W_sr_m2"].dims == ("side", "angle_deg", "line_nm", "polarization")
    nm = data["wavelength_nm"].to_numpy()
    spread = data["spectral_radiance_W_sr_m2_nm"].sel(side="bottom").sum("polarization")
    line = data["line_radiance_W_sr_m2"].sel(side="bottom").sum("polarization").to_numpy()[:, 0]
    visible = observer_at(nm)[:, 1]
    luminance = 683.0 * np.trapezoid(spread.to_numpy() * visible, nm, axis=1)
    luminance += 683.0 * line * observer_at(np.array([601.5]))[0, 1]
    assert line.min() > 0.0
    assert seen.sides["bottom"].luminance_cd_m2 == pytest.approx(luminance, rel=1e-12)
    listed = seen.to_dict(spectral=True)["sides"]["bottom"]
    assert listed["line_nm"] == [601.5]
    assert len(listed["line_radiance_s_W_sr_m2"]) == 2
    assert listed["color_rendering_index"] is None


def test_only_a_line_peaks_there_and_has_no_width() -> None:
    side = angular(case(emitter(pixel(), spectrum={"line_nm": 551.25})), [0.0]).sides["bottom"]
    assert side.peak_nm_normal == 551.25
    assert side.fwhm_nm_normal is None
    assert side.dominant_wavelength_nm == pytest.approx(551.25, abs=0.02)


def test_white_is_rated_and_green_is_not() -> None:
    path = Path(__file__).parents[2] / "cases" / "white-tandem.toml"
    white = angular(optics.read_case(path), [0.0]).sides["bottom"]
    xy = (white.x_normal or 0.0, white.y_normal or 0.0)
    assert color.temperature(xy) == (white.correlated_color_temperature_K, white.duv)
    index = white.to_dict()["color_rendering_index"]
    assert index == color.rendering_index(*white.normal_spectrum)
    assert 0.0 < index < 100.0
    green = angular(case(pixel()), [0.0]).sides["bottom"]
    assert green.correlated_color_temperature_K is None
    assert green.color_rendering_index is None
    assert green.dominant_wavelength_nm is not None


def test_a_single_wavelength_weighs_one() -> None:
    document = narrow(driven(pixel()), 545.0)
    line = emitter(driven(pixel()), spectrum={"line_nm": 545.0})
    one, other = (angular(case(d), [0.0, 30.0]).sides["bottom"] for d in (document, line))
    assert one.luminance_cd_m2 == pytest.approx(other.luminance_cd_m2, rel=1e-9)
    assert one.fwhm_nm_normal is None


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
    (source,) = sources(device, optics.budget(device))
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


def test_radiance_is_watts_per_current() -> None:
    """One photon per charge, all of it counted: the photon energy in volts."""
    document = emitter(pixel(), quantum_yield=1.0, exciton_fraction=1.0)
    document["drive"] = {"charge_balance": 1.0}
    device = case(narrow(document, 550.0))
    (source,) = sources(device, optics.budget(device))
    over_bulk = radiance_over_bulk(device, source, 0, np.array([20.0]))
    watts = radiance(device, source, 0, np.array([20.0]))
    np.testing.assert_allclose(watts, over_bulk * 1239.841984 / 550.0, rtol=1e-12)


def no_constants(text: str) -> Any:
    """Parse JSON that has no NaN and no Infinity."""

    def refuse(word: str) -> None:
        raise AssertionError(f"{word} in JSON")

    return json.loads(text, parse_constant=refuse)
