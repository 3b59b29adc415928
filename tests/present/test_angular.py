"""Emission against angle on paper, as pictures, in files and at the command line."""

from __future__ import annotations

import io
import json
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner, Result

import optics
from optics.cli import main
from optics.device.case import case_from_dict
from optics.outcome.angular import Angular, angular
from optics.present import pictures_angular
from optics.present.angular import WIDTH, print_angular, sides_with_light
from optics.present.cautions import BRIGHT, brightest_cd_m2, cautions
from optics.present.terminal import console

CASE = """
title = "a pixel, invented"
[wavelength]
start_nm = 480
stop_nm = 640
step_nm = 10
[materials.host]
n = 1.75
[substrate]
material = "bk7"
thickness_mm = 0.7
[[layers]]
name = "ITO"
material = "ito"
thickness_nm = 110
[[layers]]
name = "EML"
material = "host"
thickness_nm = 60
[[layers]]
name = "CAT"
material = "al"
thickness_nm = {cathode_nm}
[[emitters]]
name = "green"
layer = "EML"
spectrum = {spectrum}
zone = {{ shape = "point", at = 0.3 }}
quantum_yield = {q}
{more}
"""
DRIVE = "[drive]\ncurrent_density_mA_cm2 = 10.0\nvoltage_V = 4.0\n"
GAUSSIAN = "{ peak_nm = 550, fwhm_nm = 40 }"


def text_of(
    *, cathode_nm: float = 100, spectrum: str = GAUSSIAN, q: float = 0.9, more: str = DRIVE
) -> str:
    return CASE.format(cathode_nm=cathode_nm, spectrum=spectrum, q=q, more=more)


def seen(*angles: float, **kind: Any) -> Angular:
    return angular(case_from_dict(tomllib.loads(text_of(**kind))), angles or (0.0, 30.0, 60.0))


@pytest.fixture
def case(tmp_path: Path) -> Path:
    path = tmp_path / "case.toml"
    path.write_text(text_of())
    return path


def run(*arguments: object) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments])


def printed(outcome: Angular, **kind: Any) -> str:
    stream = io.StringIO()
    every = kind.pop("every_angle", False)
    print_angular(console(stream, plain_width=WIDTH), outcome.to_dict(**kind), every_angle=every)
    return stream.getvalue()


def no_constants(text: str) -> Any:
    """Parse JSON that has no NaN and no Infinity."""

    def refuse(word: str) -> None:
        raise AssertionError(f"{word} in JSON")

    return json.loads(text, parse_constant=refuse)


def test_table_says_the_numbers_of_the_result() -> None:
    outcome = seen()
    text = printed(outcome)
    side = outcome.to_dict()["sides"]["bottom"]
    lines = text.splitlines()
    assert lines[0] == "a pixel, invented"
    assert f"{side['current_efficiency_cd_A']:.4g} cd/A along the normal" in lines[2]
    assert f"{side['luminance_normal_cd_m2']:.4g} cd/m" in lines[2]
    (row,) = [line.split() for line in lines if line.split()[:1] == ["60"]]
    assert float(row[2]) == pytest.approx(side["luminance_cd_m2"][2], rel=1e-3)
    assert float(row[3]) == pytest.approx(side["relative_luminance"][2], abs=1e-4)
    assert float(row[4]) == pytest.approx(side["x"][2], abs=1e-4)
    assert "Accuracy reached" in text


def test_a_side_without_worthwhile_light_has_one_line() -> None:
    text = printed(seen())
    assert "top: <0.01 % of the charges" in text
    assert "Against angle, top" not in text
    clear = printed(seen(cathode_nm=8))
    assert "Against angle, top" in clear


def test_many_angles_are_thinned_out_unless_asked_for() -> None:
    outcome = seen(*range(91))
    heads = [line.split()[0] for line in printed(outcome).splitlines() if line[:10].strip()]
    assert [head for head in heads if head.isdigit()] == [str(10 * i) for i in range(10)]
    assert "\n        37 " in printed(outcome, every_angle=True)


def test_without_a_drive_there_is_no_luminance_column() -> None:
    text = printed(seen(more=""))
    assert "cd/A along the normal" in text
    assert "radiance" not in text
    assert "lm/W" not in text


def test_polarization_and_spectra_have_their_columns() -> None:
    outcome = seen()
    text = printed(outcome, polarization=True, spectral=True)
    assert "of it s" in text
    data = outcome.spectral["spectral_radiance_W_sr_m2_nm"].sum("polarization")
    value = float(data.sel(side="bottom", angle_deg=60.0, wavelength_nm=550.0))
    (row,) = [line.split() for line in text.splitlines() if line.split()[:1] == ["550"]]
    assert float(row[3]) == pytest.approx(value, rel=1e-3)


def test_lines_have_a_table_of_their_own() -> None:
    text = printed(seen(spectrum="{ line_nm = 546.1 }"), spectral=True)
    assert "Radiance of lines, bottom" in text
    assert "546.1" in text


def test_a_side_counts_from_a_thousandth_of_the_light() -> None:
    assert sides_with_light({"bottom": 0.999, "top": 0.0011}) == ["bottom", "top"]
    assert sides_with_light({"bottom": 0.9995, "top": 0.0005}) == ["bottom"]
    assert sides_with_light({"bottom": 0.0, "top": 0.0}) == []


def test_no_light_is_said_in_words() -> None:
    text = printed(seen(q=0.0))
    assert "bottom: no light" in text
    assert "top: no light" in text


def test_a_bright_area_is_cautioned_of_once() -> None:
    outcome = seen(more="[drive]\ncurrent_density_mA_cm2 = 30.0\naperture_ratio = 0.1\n")
    device = case_from_dict({**PLAIN, "drive": DRIVEN})
    result = outcome.to_dict()
    brightest = brightest_cd_m2(device, result)
    luminance = result["sides"]["bottom"]["luminance_cd_m2"]
    assert brightest == pytest.approx(max(luminance) / 0.1, rel=1e-12)
    said = cautions(device, outcome.budget.to_dict(), brightest)
    assert said[0] == BRIGHT
    assert len(said) == 2
    assert BRIGHT not in cautions(device, outcome.budget.to_dict(), 9e3)
    assert brightest_cd_m2(device, seen(more="").to_dict()) is None


DRIVEN = {"current_density_mA_cm2": 30.0, "aperture_ratio": 0.1}
PLAIN: dict[str, Any] = {
    "title": "invented",
    "wavelength": {"values_nm": [550]},
    "materials": {"host": {"n": 1.75}},
    "layers": [{"name": "EML", "material": "host", "thickness_nm": 60}],
    "emitters": [
        {
            "name": "green",
            "layer": "EML",
            "spectrum": {"peak_nm": 550, "fwhm_nm": 40},
            "zone": {"shape": "uniform"},
            "quantum_yield": 0.9,
        }
    ],
}


@pytest.mark.parametrize("picture", pictures_angular.PICTURES)
@pytest.mark.parametrize(
    "kind",
    [
        {},
        {"cathode_nm": 8},
        {"more": ""},
        {"spectrum": "{ line_nm = 546.1 }"},
    ],
    ids=["one side", "both sides", "no drive", "a line"],
)
def test_pictures_come_without_a_warning(
    picture: str, kind: dict[str, Any], tmp_path: Path
) -> None:
    outcome = seen(*range(0, 91, 15), **kind)
    figure = pictures_angular.draw(picture, outcome)
    path = tmp_path / "picture.png"
    figure.savefig(path, dpi=40)
    assert path.stat().st_size > 3000
    axes = [one for one in figure.axes if one.lines or one.collections]
    assert len(axes) >= (2 if "cathode_nm" in kind else 1)


@pytest.mark.parametrize("picture", pictures_angular.PICTURES)
def test_a_picture_of_darkness_says_so(picture: str) -> None:
    (text,) = pictures_angular.draw(picture, seen(q=0.0)).texts[-1:]
    assert text.get_text() == "no light on either side"


def test_polar_curve_is_the_luminance_and_its_mirror() -> None:
    outcome = seen(*range(0, 91, 15))
    figure = pictures_angular.draw("luminance", outcome)
    lambertian, curve = figure.axes[0].lines
    assert set(np.asarray(lambertian.get_ydata())) == {1.0}
    known = list(outcome.sides["bottom"].relative_luminance)
    assert list(np.asarray(curve.get_ydata())) == [*known[::-1], *known]
    angle = np.rad2deg(np.asarray(curve.get_xdata(), dtype=float))
    assert angle == pytest.approx([*range(-90, 1, 15), *range(0, 91, 15)])


def test_spectra_are_those_at_the_chosen_angles() -> None:
    outcome = seen(0.0, 20.0, 40.0)
    axes = pictures_angular.draw("spectra", outcome, [0.0, 40.0]).axes[0]
    data = outcome.spectral["spectral_radiance_W_sr_m2_nm"].sum("polarization").sel(side="bottom")
    assert axes.get_ylabel() == "spectral radiance (W/(sr m\N{SUPERSCRIPT TWO} nm))"
    for line, angle in zip(axes.lines, (0.0, 40.0), strict=True):
        assert np.array_equal(np.asarray(line.get_ydata()), data.sel(angle_deg=angle))


def test_color_path_is_that_of_the_result() -> None:
    outcome = seen(0.0, 20.0, 40.0)
    whole = pictures_angular.draw("color", outcome, [0.0, 40.0]).axes[0]
    path = np.column_stack(
        [outcome.sides["bottom"].u_prime, outcome.sides["bottom"].v_prime]
    ).astype(float)
    drawn = [np.column_stack(line.get_data()) for line in whole.lines]
    assert any(one.shape == path.shape and np.array_equal(one, path) for one in drawn)


def test_no_such_picture() -> None:
    with pytest.raises(ValueError, match="expected one of luminance"):
        pictures_angular.draw("moon", seen())


def test_command_prints_tables(case: Path) -> None:
    result = run("angular", case)
    assert result.exit_code == 0
    assert result.stdout.splitlines()[0] == "a pixel, invented"
    assert "Caution: the case states an electrical drive" in result.stdout


def test_command_json_is_the_result_and_nothing_else(case: Path) -> None:
    device = optics.read_case(case)
    result = run("angular", case, "--json")
    assert result.exit_code == 0
    assert no_constants(result.stdout) == optics.angular(device).to_dict()
    angles = no_constants(result.stdout)["sides"]["bottom"]["angle_deg"]
    assert angles == [float(angle) for angle in range(91)]
    options = ("--spectral", "--polarization", "--angles", "0,15,30")
    result = run("angular", case, "--json", *options)
    expected = optics.angular(device, [0, 15, 30]).to_dict(spectral=True, polarization=True)
    assert no_constants(result.stdout) == expected
    assert "Caution: " in result.stderr


def test_command_writes_files(case: Path, tmp_path: Path) -> None:
    import pandas as pd
    import xarray as xr

    paths = [tmp_path / f"out{end}" for end in (".json", ".csv", ".nc", ".png", ".svg", ".pdf")]
    arguments = [word for path in paths for word in ("-o", path)]
    result = run("angular", case, "--angles", "0,40", "--spectral", "--json", *arguments)
    assert result.exit_code == 0, result.stderr
    known = no_constants(result.stdout)
    assert no_constants(paths[0].read_text()) == known
    frame = pd.read_csv(paths[1])
    picked = frame[(frame["side"] == "bottom") & (frame["quantity"] == "luminance_cd_m2")]
    assert picked["value"].to_list() == pytest.approx(known["sides"]["bottom"]["luminance_cd_m2"])
    with xr.open_dataset(paths[2], engine="h5netcdf") as data:
        found = data["spectral_radiance_W_sr_m2_nm"].sel(side="bottom", polarization="s")
        expected = known["sides"]["bottom"]["spectral_radiance_s_W_sr_m2_nm"]
        assert np.array_equal(found.transpose("angle_deg", "wavelength_nm"), expected)
        assert found.attrs["units"] == "W sr-1 m-2 nm-1"
    assert paths[3].read_bytes().startswith(b"\x89PNG")
    assert b"<svg" in paths[4].read_bytes()[:1000]
    assert paths[5].read_bytes().startswith(b"%PDF")


@pytest.mark.parametrize("picture", pictures_angular.PICTURES)
def test_command_draws_each_picture(case: Path, tmp_path: Path, picture: str) -> None:
    path = tmp_path / "one.png"
    result = run("angular", case, "--picture", picture, "-o", path)
    assert result.exit_code == 0, result.stderr
    assert path.exists()


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("--angles", "0,91,-3"), ("found 91", "found -3")),
        (("--angles", "nan"), ("found nan",)),
        (("--angles", "many"), ("expected numbers",)),
        (("--angles", "5,5"), ("found 5 twice",)),
        (("--picture", "map"), ("needs a file",)),
        (("-o", "out.txt"), ("suffix .txt",)),
    ],
)
def test_command_refuses_bad_options(
    case: Path, options: tuple[str, ...], said: tuple[str, ...]
) -> None:
    result = run("angular", case, *options)
    assert result.exit_code == 2
    assert result.stdout == ""
    for part in said:
        assert part in result.stderr
