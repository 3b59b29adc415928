"""What is handed on, read back as other programs read it."""

from __future__ import annotations

import datetime
import json
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
import pandas
import pytest
import xarray
from angular_devices import DEVICES, driven, narrow
from click.testing import CliRunner, Result
from devices import case, pixel, tandem

import optics
from optics.cli import main
from optics.device.errors import CaseError
from optics.present.export import write_angular_csv
from optics.present.photometric_file import LONGEST_LINE, Panel, panel, photometric_file

DAY = datetime.date(2026, 1, 31)
DRIVE = "[drive]\ncharge_balance = 0.9\ncurrent_density_mA_cm2 = 5.0\nvoltage_V = 4.0\n"
CASE = """
title = "a panel with \N{LATIN SMALL LETTER O WITH DIAERESIS}dd letters, invented"
[wavelength]
start_nm = 480
stop_nm = 640
step_nm = 20
[materials.host]
n = 1.75
[substrate]
material = "bk7"
thickness_mm = 0.7
[[layers]]
name = "EML"
material = "host"
thickness_nm = 60
[[layers]]
name = "CAT"
material = "al"
thickness_nm = 100
[[emitters]]
name = "green"
layer = "EML"
spectrum = { peak_nm = 550, fwhm_nm = 40 }
zone = { shape = "point", at = 0.3 }
quantum_yield = 0.9
"""


class Photometry(NamedTuple):
    """A photometric file as a lighting program reads it."""

    keywords: list[tuple[str, str]]
    lamps: int
    lumens: float
    multiplier: float
    kind: int
    unit: int
    opening: tuple[float, float, float]
    watts: float
    vertical: list[float]
    horizontal: list[float]
    candela: list[list[float]]


def read_photometry(text: str) -> Photometry:
    """Parse by the layout of LM-63-2002, knowing nothing of how it was written."""
    lines = text.split("\r\n")
    assert lines.pop() == ""
    assert all(len(line) <= 256 for line in lines)
    assert lines[0] == "IESNA:LM-63-2002"
    tilt = lines.index("TILT=NONE")
    keywords = []
    for line in lines[1:tilt]:
        name, _, value = line.removeprefix("[").partition("] ")
        if name == "MORE":
            keywords[-1] = (keywords[-1][0], f"{keywords[-1][1]} {value}")
        else:
            keywords.append((name, value))
    words = " ".join(lines[tilt + 1 :]).split()
    lamps, lumens, multiplier, n_v, n_h, kind, unit = (float(one) for one in words[:7])
    opening = (float(words[7]), float(words[8]), float(words[9]))
    ballast, future, watts = (float(one) for one in words[10:13])
    assert (ballast, future) == (1.0, 1.0)
    rest = [float(one) for one in words[13:]]
    v, h = int(n_v), int(n_h)
    assert len(rest) == v + h + v * h
    rows = [rest[v + h + v * i : v + h + v * (i + 1)] for i in range(h)]
    return Photometry(
        keywords, int(lamps), lumens, multiplier, int(kind), int(unit), opening, watts,
        rest[:v], rest[v : v + h], rows,
    )  # fmt: skip


def zonal_lumens(read: Photometry) -> float:
    """Add up zones; one horizontal angle of 0 means the same at every azimuth."""
    total = 0.0
    (row,) = read.candela
    for i in range(len(row) - 1):
        low, high = np.deg2rad(read.vertical[i : i + 2])
        solid = 2 * np.pi * (np.cos(low) - np.cos(high))
        total += read.multiplier * solid * (row[i] + row[i + 1]) / 2
    return total


@pytest.mark.parametrize("name", DEVICES)
def test_a_photometric_file_integrates_to_the_luminous_flux(name: str) -> None:
    given = case(DEVICES[name]())
    size_mm = (120.0, 40.0)
    made = panel(given, size_mm)
    read = read_photometry(photometric_file(made, DAY))
    seen = optics.angular(given, [0, 60]).sides
    exitance = max(one.luminous_exitance_lm_m2 or 0.0 for one in seen.values())
    assert seen[made.side].luminous_exitance_lm_m2 == exitance
    flux = exitance * 0.12 * 0.04
    assert zonal_lumens(read) == pytest.approx(flux, rel=1e-3)
    assert made.flux_error == pytest.approx(zonal_lumens(read) / flux - 1.0, abs=1e-6)
    luminance = seen[made.side].luminance_cd_m2 or ()
    at_60 = read.candela[0][read.vertical.index(60.0)]
    assert read.candela[0][0] == pytest.approx((luminance[0] or 0.0) * 0.0048, rel=1e-6)
    assert at_60 == pytest.approx((luminance[1] or 0.0) * 0.0048 * 0.5, rel=1e-6)


def test_a_photometric_file_says_what_it_is() -> None:
    made = panel(case(driven(pixel())), (100.0, 50.0), "bottom")
    read = read_photometry(photometric_file(made, DAY, ["mind the " + "very " * 80 + "end"]))
    words = dict(read.keywords)
    assert {"TEST", "TESTLAB", "ISSUEDATE", "MANUFAC"} <= set(words)
    assert words["TEST"].endswith("computed by outcouple 0.1.0, not measured")
    assert words["ISSUEDATE"] == "2026-01-31"
    assert words["LUMINAIRE"] == "invented pixel"
    assert read.keywords[-1] == ("OTHER", "Caution: mind the " + "very " * 80 + "end")
    assert (read.lamps, read.lumens, read.kind, read.unit) == (1, -1.0, 1, 2)
    assert read.opening == (0.1, 0.05, 0.0)
    # 4 mA/cm2 at 3.2 V on 50 cm2.
    assert read.watts == pytest.approx(0.64)
    assert (read.vertical[0], read.vertical[-1], read.horizontal) == (0.0, 90.0, [0.0])
    assert read.candela[0][-1] == 0.0


def test_angles_get_closer_where_light_is_narrow(monkeypatch: pytest.MonkeyPatch) -> None:
    """With a coarse first step the file must refine; and it refuses what it cannot resolve."""
    module = "optics.present.photometric_file"
    given = case(driven(pixel()))
    monkeypatch.setattr(f"{module}._STEPS_DEG", (30.0, 1.0))
    assert panel(given, (10.0, 10.0)).angle_deg.size == 91
    monkeypatch.setattr(f"{module}._STEPS_DEG", (30.0,))
    with pytest.raises(ValueError, match=r"angles of 30 deg miss the luminous flux by"):
        panel(given, (10.0, 10.0))


def test_numbers_have_no_exponent_and_lines_fit() -> None:
    tiny = panel(case(driven(pixel())), (0.01, 0.02))
    text = photometric_file(tiny, DAY)
    numbers = text.split("TILT=NONE")[1]
    assert "e" not in numbers.lower()
    assert max(len(line) for line in text.splitlines()) <= LONGEST_LINE
    read = read_photometry(text)
    assert zonal_lumens(read) == pytest.approx(tiny.flux_lm, rel=1e-3)


def test_panels_without_light_or_drive_are_refused() -> None:
    with pytest.raises(CaseError, match=r"drive\.current_density_mA_cm2: found nothing"):
        panel(case(pixel()), (10.0, 10.0))
    with pytest.raises(ValueError, match="size: found 0 x 10 mm; expected two lengths above 0"):
        panel(case(driven(pixel())), (0.0, 10.0))
    on_silicon = case(DEVICES["on silicon"]())
    with pytest.raises(CaseError, match="side bottom: found no visible light"):
        panel(on_silicon, (10.0, 10.0), "bottom")


def test_panels_say_what_a_reader_should_know() -> None:
    document = driven(pixel())
    del document["drive"]["voltage_V"]
    document["drive"] |= {"duty": 0.5}
    document["substrate"]["exit"] = "matched"
    made: Panel = panel(case(document), (10.0, 10.0))
    read = read_photometry(photometric_file(made, DAY))
    said = " / ".join(value for name, value in read.keywords if name == "OTHER")
    assert read.watts == 0.0
    assert "states no voltage" in said
    assert "the exit is matched" in said
    assert "average over the panel's face and over time" in said


def table(path: Path) -> tuple[list[str], pandas.DataFrame]:
    """Comment lines and table."""
    text = path.read_text(encoding="utf-8").splitlines()
    return [line for line in text if line.startswith("#")], pandas.read_csv(path, comment="#")


def test_angular_tables_are_the_spectra(tmp_path: Path) -> None:
    given = case(narrow(driven(tandem()), 530, 560, 601.5, 620))
    outcome = optics.angular(given, [0, 40])
    write_angular_csv(given, outcome, tmp_path / "a.csv")
    head, frame = table(tmp_path / "a.csv")
    for column in frame.columns:
        assert sum(line.startswith(f"# {column}") for line in head) == 1
    data = outcome.spectral
    spread = frame[frame["spectral_radiance_W_sr_m2_nm"].notna()]
    row = spread[
        (spread["side"] == "bottom")
        & (spread["angle_deg"] == 40)
        & (spread["wavelength_nm"] == 560)
    ]
    here = {"side": "bottom", "angle_deg": 40.0, "wavelength_nm": 560.0}
    both = data["spectral_radiance_W_sr_m2_nm"].sel(here)
    s, p = (float(both.sel(polarization=one)) for one in "sp")
    assert row["spectral_radiance_s_W_sr_m2_nm"].item() == pytest.approx(s, rel=1e-12)
    assert row["spectral_radiance_W_sr_m2_nm"].item() == pytest.approx(s + p, rel=1e-12)
    lines = frame[frame["line_radiance_W_sr_m2"].notna()]
    assert len(spread) + len(lines) == len(frame) == 2 * 2 * 4 + 2 * 2
    here = {"side": "bottom", "angle_deg": 0.0, "line_nm": 601.5}
    whole = float(data["line_radiance_W_sr_m2"].sel(here).sum())
    assert lines.iloc[0]["line_radiance_W_sr_m2"] == pytest.approx(whole, rel=1e-12)


@pytest.fixture
def case_file(tmp_path: Path) -> Path:
    path = tmp_path / "panel.toml"
    path.write_text(CASE + DRIVE, encoding="utf-8")
    return path


def run(*words: object) -> Result:
    return CliRunner().invoke(main, ["export", *[str(word) for word in words]])


def test_the_command_writes_tables_for_electrical_simulation(
    case_file: Path, tmp_path: Path
) -> None:
    out, labelled = tmp_path / "e.csv", tmp_path / "e.nc"
    done = run(
        case_file, "--what", "electrical", "--positions", 3, "-o", out, "-o", labelled, "--json"
    )
    assert done.exit_code == 0, done.stderr
    said: dict[str, Any] = json.loads(done.stdout)
    assert said["emitters"]["green"]["positions"] == 3
    assert "Caution: the case states an electrical drive" in done.stderr
    head, frame = table(out)
    assert len(frame) == 3 * 9
    for column in frame.columns:
        assert sum(line.split("#")[1].split()[0].rstrip(":") == column for line in head) == 1
    with xarray.open_datatree(labelled, engine="h5netcdf") as tree:
        kept = tree["green"]["F"].to_numpy()
        assert tree["green"]["F"].attrs["units"] == "1"
    assert frame["F"].to_numpy() == pytest.approx(kept.ravel(), rel=1e-14)


def test_the_command_writes_a_photometric_file(case_file: Path, tmp_path: Path) -> None:
    out = tmp_path / "panel.ies"
    done = run(case_file, "--what", "photometric", "--size", "100,100", "-o", out)
    assert done.exit_code == 0, done.stderr
    read = read_photometry(out.read_bytes().decode("ascii"))
    assert ("LUMINAIRE", "a panel with odd letters, invented") in read.keywords
    assert any("Caution: the case states an electrical drive" in one for _, one in read.keywords)
    seen = optics.angular(optics.read_case(case_file), [0]).sides["bottom"]
    flux = (seen.luminous_exitance_lm_m2 or 0.0) * 0.01
    assert zonal_lumens(read) == pytest.approx(flux, rel=1e-3)
    assert f"bottom, 100 x 100 mm: {flux:.4g} lm" in done.stdout


def test_the_command_writes_angular_spectra(case_file: Path, tmp_path: Path) -> None:
    out, labelled = tmp_path / "a.csv", tmp_path / "a.nc"
    done = run(case_file, "--what", "angular", "--angles", "0,30,60", "-o", out, "-o", labelled)
    assert done.exit_code == 0, done.stderr
    assert len(table(out)[1]) == 2 * 3 * 9
    with xarray.open_dataset(labelled, engine="h5netcdf") as data:
        assert data["spectral_radiance_W_sr_m2_nm"].attrs["units"] == "W sr-1 m-2 nm-1"


@pytest.mark.parametrize(
    ("words", "complaint"),
    [
        (("--what", "electrical"), "nothing to write: give -o with .csv or .nc"),
        (("--what", "electrical", "-o", "x.ies"), "found suffix .ies; expected .csv or .nc"),
        (("--what", "photometric", "-o", "x.ies"), "--size: expected two lengths in mm above 0"),
        (("--what", "photometric", "--size", "5", "-o", "x.ies"), "--size: expected two lengths"),
        (("--what", "angular", "--size", "5,5", "-o", "x.csv"), "--size: of no use with --what"),
        (("--what", "angular", "--angles", "91", "-o", "x.csv"), "angles: found 91; expected"),
    ],
)
def test_faults_are_told(
    case_file: Path, monkeypatch: pytest.MonkeyPatch, words: tuple[str, ...], complaint: str
) -> None:
    monkeypatch.chdir(case_file.parent)
    done = run(case_file, *words)
    assert done.exit_code == 2
    assert complaint in done.stderr
    assert list(case_file.parent.glob("x*")) == []


def test_a_case_without_current_leaves_no_photometric_file(tmp_path: Path) -> None:
    undriven, out = tmp_path / "dark.toml", tmp_path / "x.ies"
    undriven.write_text(CASE, encoding="utf-8")
    done = run(undriven, "--what", "photometric", "--size", "9,9", "-o", out)
    assert done.exit_code == 2
    assert "drive.current_density_mA_cm2: found nothing; expected a current density" in done.stderr
    assert not out.exists()
