"""The check command and its tables: exit status, pure JSON, failing rows always shown."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result

import optics
from optics.cli import main
from optics.present.check import where
from optics.study.check import Check

CASE = """
title = "two films, invented"
[wavelength]
values_nm = [500, 550, 600]
[materials.host]
n = 1.75
[materials.silver-like]
n = 0.1
k = 3.6
[[layers]]
name = "EML"
material = "host"
thickness_nm = 30
[[layers]]
name = "CAT"
material = "silver-like"
thickness_nm = 100
[surroundings]
bottom = "glass"
[materials.glass]
n = 1.5
[[emitters]]
name = "green"
layer = "EML"
spectrum = { peak_nm = 550, fwhm_nm = 20 }
zone = { shape = "point", at = 0.3 }
quantum_yield = 0.9
"""


@pytest.fixture
def case(tmp_path: Path) -> Path:
    path = tmp_path / "case.toml"
    path.write_text(CASE)
    return path


@pytest.fixture
def spoiled(monkeypatch: pytest.MonkeyPatch) -> None:
    """Let one comparison fail."""
    real = optics.check

    def change(case: optics.Case, **options: Any) -> Check:
        found = real(case, **options)
        first = replace(found.rows[0], result="fail", difference=0.5, engine=0.0123456)
        return replace(found, rows=(first, *found.rows[1:]))

    monkeypatch.setattr(optics, "check", change)


def run(*arguments: object) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments])


def test_a_good_case_passes_in_few_lines(case: Path) -> None:
    result = run("check", case)
    assert result.exit_code == 0
    assert "are within their tolerance" in result.stdout
    assert "Beyond the tolerance" not in result.stdout
    assert len(result.stdout.splitlines()) < 30
    for kind in ("far field", "light from outside", "power", "energy balance", "average"):
        assert any(line.startswith(kind) for line in result.stdout.splitlines())


def test_all_rows_on_request(case: Path) -> None:
    result = run("check", case, "--all", "--wavelengths", "550", "--angles", "0,30")
    assert result.exit_code == 0
    _, _, listed = result.stdout.partition("All comparisons")
    rows = json.loads(
        run("check", case, "--json", "--wavelengths", "550", "--angles", "0,30").stdout
    )["rows"]
    # caption's own line end, heads, rule, then the rows
    assert len(listed.splitlines()) == 3 + len(rows)
    assert "green, 550 nm, z 9.00 nm, horizontal, bottom, 30°, s" in listed
    assert "1.0e-09" in listed


@pytest.mark.usefixtures("spoiled")
def test_a_difference_beyond_its_tolerance_is_shown_and_gives_status_1(case: Path) -> None:
    result = run("check", case)
    assert result.exit_code == 1
    assert "1 of " in result.stdout
    assert "exceed their tolerance" in result.stdout
    shown = [line for line in result.stdout.splitlines() if "0.0123456" in line]
    assert len(shown) == 1
    assert "5.0e-01" in shown[0]
    assert json.loads(run("check", case, "--json").stdout)["passed"] is False
    assert run("check", case, "--json").exit_code == 1


def test_json_and_files_hold_the_same_rows(case: Path, tmp_path: Path) -> None:
    import pandas as pd

    paths = [tmp_path / "out.json", tmp_path / "out.csv"]
    result = run("check", case, "--json", *[word for path in paths for word in ("-o", path)])
    assert result.exit_code == 0
    printed = json.loads(result.stdout)
    assert printed == json.loads(paths[0].read_text())
    frame = pd.read_csv(paths[1])
    assert len(frame) == len(printed["rows"])
    assert "Warning: " in result.stderr  # three wavelengths lose much of the spectrum


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("--wavelengths", "551"), "found 551 nm; expected a wavelength of the case's grid"),
        (("--angles", "90"), "found 90; expected degrees from 0 to below 90"),
        (("--angles", "a"), "found 'a'; expected numbers such as 0,15,30"),
        (("-o", "x.nc"), "expected .json or .csv"),
    ],
)
def test_bad_input_gives_status_2(case: Path, options: tuple[str, str], said: str) -> None:
    result = run("check", case, *options)
    assert result.exit_code == 2
    assert said in result.stderr
    assert result.stdout == ""


def test_places_are_worded_from_what_is_known() -> None:
    keys = ("emitter", "wavelength_nm", "position_nm", "orientation", "side", "polarization")
    row: dict[str, Any] = {**dict.fromkeys(keys), "angle_deg": 0.0}
    assert where(row) == "0°"
    assert where({**row, "emitter": "green", "position_nm": 0.0}) == "green, z 0.00 nm, 0°"
