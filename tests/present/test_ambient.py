"""The device as seen from outside: on paper, as pictures, in files and at the command line."""

from __future__ import annotations

import csv
import json
from pathlib import Path

import numpy as np
import pytest
import xarray
from click.testing import CliRunner, Result

import optics
from optics.cli import main
from optics.present import pictures_ambient

CASE = """
title = "a clear pixel, invented"
[wavelength]
start_nm = 500
stop_nm = 600
step_nm = 20
[materials.host]
n = 1.75
[materials.clear-metal]
n = 0.2
k = 2.8
[substrate]
material = "bk7"
thickness_mm = 0.7
[[layers]]
name = "EML"
material = "host"
thickness_nm = 60
[[layers]]
name = "CAT"
material = "clear-metal"
thickness_nm = 15
[[emitters]]
name = "green"
layer = "EML"
spectrum = { line_nm = 550 }
zone = { shape = "point", at = 0.3 }
quantum_yield = 0.9
"""
DRIVE = "[drive]\ncurrent_density_mA_cm2 = 10.0\n"


@pytest.fixture
def case_file(tmp_path: Path) -> Path:
    path = tmp_path / "clear.toml"
    path.write_text(CASE + DRIVE, encoding="utf-8")
    return path


def run(*words: object) -> Result:
    return CliRunner().invoke(main, ["ambient", *[str(word) for word in words]])


def test_tables_name_reflection_and_contrast(case_file: Path) -> None:
    done = run(case_file, "--illuminance", 500, "--angles", "0,60")
    assert done.exit_code == 0
    side = optics.ambient(optics.read_case(case_file), 500.0, [0, 60]).sides["bottom"]
    assert side is not None
    assert side.contrast_ratio is not None
    head = (
        f"bottom: reflects {100 * side.luminous_reflectance_8deg:.2f} % of daylight at 8 deg, "
        f"contrast {side.contrast_ratio[0]:.4g} at 0 deg in 500 lx"
    )
    assert head in done.stdout
    assert "159.2 cd/m\N{SUPERSCRIPT TWO}, which gives 500 lx" in " ".join(done.stdout.split())
    assert done.stdout.count("Caution: the case states an electrical drive") == 1


def test_without_illuminance_no_emission_is_shown(case_file: Path) -> None:
    done = run(case_file, "--spectral")
    assert done.exit_code == 0
    assert "contrast" not in done.stdout.lower()
    assert "Caution" not in done.stdout
    assert "Films and slabs alone, bottom, 0 deg" in done.stdout


def test_json_is_alone_on_standard_output_and_notes_are_beside_it(case_file: Path) -> None:
    done = run(case_file, "--json", "--illuminance", 100, "--wavelengths", "480,520,560,600")
    said = json.loads(done.stdout)
    assert said["schema"] == "outcouple.ambient/1"
    assert said["illuminance_lx"] == 100.0
    assert len(said["sides"]["top"]["contrast_ratio"]) == 19
    assert "Warning: " in done.stderr
    assert "of daylight, as the eye weighs it, lies outside 480 to 600 nm" in done.stderr
    assert "Caution: the case states an electrical drive" in done.stderr


def test_files_hold_the_same(case_file: Path, tmp_path: Path) -> None:
    names = [tmp_path / f"out{end}" for end in (".json", ".csv", ".nc")]
    outputs = [word for name in names for word in ("-o", name)]
    done = run(
        case_file, "--spectral", "--angles", "0,45", "--wavelengths", "450,550,650", *outputs
    )
    assert done.exit_code == 0, done.stderr
    said = json.loads(names[0].read_text(encoding="utf-8"))["sides"]["bottom"]
    with names[1].open(encoding="utf-8") as file:
        rows = [row for row in csv.DictReader(file) if row["quantity"] == "reflectance"]
    here = [float(row["value"]) for row in rows if row["side"] == "bottom"]
    assert here == pytest.approx([*said["reflectance"][0], *said["reflectance"][1]], rel=1e-14)
    with xarray.open_dataset(names[2], engine="h5netcdf") as data:
        kept = data["reflectance"].sel(side="bottom").mean("polarization").to_numpy()
    assert kept == pytest.approx(np.array(said["reflectance"]), rel=1e-14)


@pytest.mark.parametrize("picture", pictures_ambient.PICTURES)
def test_pictures_are_drawn(case_file: Path, tmp_path: Path, picture: str) -> None:
    path = tmp_path / "p.svg"
    done = run(case_file, "--illuminance", 200, "--picture", picture, "-o", path)
    assert done.exit_code == 0, done.stderr
    first = path.read_bytes()
    assert b"<svg" in first
    assert run(case_file, "--illuminance", 200, "--picture", picture, "-o", path).exit_code == 0
    assert path.read_bytes() == first


def test_areas_of_the_picture_are_the_numbers(case_file: Path) -> None:
    outcome = optics.ambient(optics.read_case(case_file), None, [0.0, 60.0])
    figure = pictures_ambient.draw("spectra", outcome)
    side = outcome.sides["bottom"]
    assert side is not None
    panel = figure.axes[0]
    (line,) = [one for one in panel.lines if str(one.get_label()).startswith("reflected at 60")]
    assert list(line.get_ydata()) == pytest.approx(list(side.powers[:, :, 1, 0].mean(axis=1)))
    area = np.asarray(panel.collections[0].get_paths()[0].vertices)
    assert area[:, 1].max() == pytest.approx(side.powers[:, :, 0, 0].mean(axis=1).max())


def test_faults_are_told_and_nothing_is_written(tmp_path: Path, case_file: Path) -> None:
    undriven, target = tmp_path / "dark.toml", tmp_path / "out.json"
    undriven.write_text(CASE, encoding="utf-8")
    done = run(undriven, "--illuminance", 500, "-o", target)
    assert done.exit_code == 2
    assert "drive.current_density_mA_cm2: found nothing; expected a current density" in done.stderr
    done = run(case_file, "--illuminance", -1, "--angles", "95", "-o", target)
    assert done.exit_code == 2
    assert "illuminance: found -1; expected lux above 0" in done.stderr
    assert "angles: found 95; expected degrees from 0 to 90" in done.stderr
    done = run(case_file, "--picture", "contrast", "-o", tmp_path / "p.png")
    assert done.exit_code == 2
    assert "--picture contrast needs --illuminance" in done.stderr
    done = run(case_file, "--wavelengths", "100,550", "-o", target)
    assert done.exit_code == 2
    assert "found 100 to 550 nm" in done.stderr
    assert list(tmp_path.glob("out*")) == []
