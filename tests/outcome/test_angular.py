"""Emission against angle: identities, agreement with the budget, and what adds up."""

from __future__ import annotations

import tomllib
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from angular_devices import DEVICES, SIDES, driven, narrow, same, semitransparent
from devices import case, emitter, pixel, tandem

import optics
from optics.device.case import case_from_dict
from optics.outcome import color
from optics.outcome.angular import angular
from optics.outcome.color import observer_at
from optics.outcome.directional import (
    index_outside,
    radiance,
    radiance_over_bulk,
    sources,
)

PUBLISHED = tomllib.loads(
    (Path(__file__).parents[1] / "published" / "color_photometry.toml").read_text(encoding="utf-8")
)


@pytest.mark.parametrize("name", DEVICES)
def test_directions_add_up_to_the_budget(name: str) -> None:
    """2 pi int u sin d(angle) = U by Gauss panels that nobody told of the engine's nodes."""
    device = case(narrow(DEVICES[name](), 520.0, 560.0))
    node, weight = np.polynomial.legendre.leggauss(240)
    for source in sources(device, optics.budget(device).lit):
        problem = source.problem
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
    filtered = angular(case_from_dict(document, tmp_path), [0.0, 50.0])
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
    assert not any("color rendering" in line for line in angular(optics.read_case(path)).warnings)
    amber_path = path.with_name("flexible-pet-barrier.toml")
    amber = angular(optics.read_case(amber_path), [0.0]).sides["bottom"]
    assert amber.excitation_purity is not None
    assert amber.excitation_purity > 0.95
    assert amber.correlated_color_temperature_K is None
    assert amber.color_rendering_index is None
    green = angular(case(pixel()), [0.0]).sides["bottom"]
    assert green.correlated_color_temperature_K is None
    assert green.color_rendering_index is None
    assert green.dominant_wavelength_nm is not None


def test_a_white_off_the_black_bodies_is_rated_with_a_warning() -> None:
    path = Path(__file__).parents[2] / "cases" / "white-lighting-panel.toml"
    panel = optics.read_case(path).replace("emitters.orange.exciton_fraction", 0.7)
    seen = angular(panel, [0.0])
    side = seen.sides["bottom"]
    assert side.duv is not None
    assert abs(side.duv) > color.ACCURATE_DUV
    assert side.color_rendering_index is not None
    (said,) = [line for line in seen.warnings if "color rendering index" in line]
    assert f"{abs(side.duv):.4f}" in said


def test_a_single_wavelength_weighs_one() -> None:
    document = narrow(driven(pixel()), 545.0)
    line = emitter(driven(pixel()), spectrum={"line_nm": 545.0})
    one, other = (angular(case(d), [0.0, 30.0]).sides["bottom"] for d in (document, line))
    assert one.luminance_cd_m2 == pytest.approx(other.luminance_cd_m2, rel=1e-9)
    assert one.fwhm_nm_normal is None


def test_radiance_is_watts_per_current() -> None:
    """One photon per charge, all of it counted: the photon energy in volts."""
    document = emitter(pixel(), quantum_yield=1.0, exciton_fraction=1.0)
    document["drive"] = {"charge_balance": 1.0}
    device = case(narrow(document, 550.0))
    (source,) = sources(device, optics.budget(device).lit)
    over_bulk = radiance_over_bulk(device, source, 0, np.array([20.0]))
    watts = radiance(device, source, 0, np.array([20.0]))
    np.testing.assert_allclose(watts, over_bulk * 1239.841984 / 550.0, rtol=1e-12)
