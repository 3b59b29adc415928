"""Sensitivities on paper, at the command line and in files."""

from __future__ import annotations

import io
import json
from pathlib import Path
from typing import Any

import pandas
import pytest
import xarray
from budget_examples import budget
from click.testing import CliRunner, Result

from optics.cli import main
from optics.present.pictures_sensitivity import sensitivity_figure
from optics.present.sensitivity import signed
from optics.present.tables import print_budget
from optics.present.terminal import console

CASE = """
title = "invented pixel"
[wavelength]
values_nm = [530, 560]
[materials.host]
n = 1.8
[materials.metal]
n = 0.9
k = 6.4
[substrate]
material = "soda-lime"
thickness_mm = 0.7
[[layers]]
name = "HTL"
material = "host"
thickness_nm = 60
[[layers]]
name = "EML"
material = "host"
thickness_nm = 30
[[layers]]
name = "CAT"
material = "metal"
thickness_nm = 100
[[emitters]]
name = "green"
layer = "EML"
spectrum = { peak_nm = 540, fwhm_nm = 50 }
zone = { shape = "point", at = 0.4 }
quantum_yield = 0.9
"""


def row(change: str, name: str, eqe: float, **side: float | None) -> dict[str, Any]:
    effects = {"luminance_relative": 0.0042, "x": -3.4e-4, "y": 1e-7, "u_prime": -1e-4,
               "v_prime": 0.0}  # fmt: skip
    return {
        "change": change,
        "name": name,
        "path": None,
        "step": 1.0,
        "unit": "nm",
        "external_quantum_efficiency": eqe,
        "external_quantum_efficiency_relative": eqe / 0.2,
        "sides": {"bottom": effects | side},
    }


def entry() -> dict[str, Any]:
    rows = [
        row("thickness", "HTL", -0.00123),
        row("thickness", "EML", 0.002, x=None),
        row("position", "green", 0.0),
        row("index", "HTL", 1e-9),
        row("orientation", "green", 0.003),
    ]
    return {"rows": rows, "derivative_error": 3e-8}


def printed(found: dict[str, Any]) -> str:
    stream = io.StringIO()
    print_budget(console(stream), budget() | {"sensitivity": found}, ())
    return stream.getvalue()


def cells(text: str, name: str, occurrence: int = 0) -> list[str]:
    below = text[text.index("Sensitivity") :]
    rows = [line.split() for line in below.splitlines() if line.startswith(f"{name} ")]
    return rows[occurrence][1:]


def test_one_row_for_each_film_under_what_is_changed() -> None:
    text = printed(entry())
    assert "Sensitivity: what a small step changes" in text
    lines = text.splitlines()
    heads = [
        "1 nm more of each film", "1 nm that an emission zone moves up",
        "0.01 more of each film's index n",
        "0.01 more of the horizontal fraction",
    ]  # fmt: skip
    places = [
        next(i for i, line in enumerate(lines) if line.startswith(f"by {head}")) for head in heads
    ]
    assert places == sorted(places)
    assert cells(text, "HTL") == ["-0.123", "-0.61", "+0.42", "-0.00034", "<0.00001"]


def test_unknown_exact_and_tiny_changes_are_told_apart() -> None:
    text = printed(entry())
    assert cells(text, "EML")[3] == "-"
    assert cells(text, "green")[:2] == ["0", "0"]
    assert cells(text, "HTL", 1)[:2] == ["<0.001", "<0.01"]


def test_no_table_without_sensitivities() -> None:
    stream = io.StringIO()
    print_budget(console(stream), budget(), ())
    assert "Sensitivity" not in stream.getvalue()


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [(None, 2, "-"), (0.0, 2, "0"), (-0.0049, 2, "<0.01"), (0.005001, 2, "+0.01"),
     (-1.234, 2, "-1.23")],
)  # fmt: skip
def test_signed(value: float | None, digits: int, text: str) -> None:
    assert signed(value, digits) == text


def test_the_picture_ranks_films_by_their_influence_on_the_eqe() -> None:
    figure = sensitivity_figure("made up", entry())
    panels = figure.get_axes()
    assert [label.get_text() for label in panels[0].get_yticklabels()] == [
        "EML", "HTL", "zone of green",
    ]  # fmt: skip
    assert [axes.get_xlabel() for axes in panels] == [
        "EQE, relative (%)", "luminance (%)", "u' (0.001)", "v' (0.001)",
    ]  # fmt: skip
    widths = [bar.get_width() for bar in panels[0].patches]
    assert widths == pytest.approx([1.0, -0.615, 0.0])


# --- the command ----------------------------------------------------------------------------------


def run(*words: object) -> Result:
    return CliRunner().invoke(main, ["budget", *[str(word) for word in words]])


@pytest.fixture
def case(tmp_path: Path) -> Path:
    path = tmp_path / "pixel.toml"
    path.write_text(CASE)
    return path


def test_the_command_prints_the_table_when_asked(case: Path) -> None:
    plain, asked = run(case), run(case, "--sensitivity")
    assert plain.exit_code == asked.exit_code == 0
    assert "Sensitivity" not in plain.stdout
    assert "by 1 nm more of each film" in asked.stdout
    assert asked.stdout.startswith(plain.stdout[:200])


def test_json_gains_one_key(case: Path) -> None:
    plain = json.loads(run(case, "--json").stdout)
    asked = json.loads(run(case, "--json", "--sensitivity").stdout)
    found = asked.pop("sensitivity")
    assert asked == plain
    assert found["rows"][0]["path"] == "layers.HTL.thickness_nm"
    assert found["derivative_error"] < 1e-6


def test_files_hold_the_sensitivities_too(case: Path, tmp_path: Path) -> None:
    table, arrays = tmp_path / "s.csv", tmp_path / "s.nc"
    assert run(case, "--sensitivity", "-o", table, "-o", arrays).exit_code == 0
    frame = pandas.read_csv(table)
    picked = frame[(frame.scope == "sensitivity") & (frame.name == "EML")]
    assert set(picked.unit) == {"per 1 nm", "per 0.01"}
    tree = xarray.open_datatree(arrays, engine="h5netcdf")
    data = tree["sensitivity"]
    assert data["name"].to_numpy().tolist()[:3] == ["HTL", "EML", "CAT"]
    value = picked[picked.quantity == "thickness.external_quantum_efficiency"].value.item()
    assert float(data["external_quantum_efficiency"][1]) == pytest.approx(value, rel=1e-12)
    tree.close()


def test_the_picture_needs_no_other_option(case: Path, tmp_path: Path) -> None:
    path = tmp_path / "s.png"
    found = run(case, "-o", path, "--picture", "sensitivity")
    assert found.exit_code == 0
    assert "Sensitivity" not in found.stdout
    assert path.stat().st_size > 10_000
