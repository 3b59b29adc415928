"""The optimize command: words, files, pictures, the improved case, exit status."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

import optics
from optics.cli import main
from optics.device.errors import CaseError
from optics.present.case_text import write_case

HTL, ETL = "layers.HTL.thickness_nm", "layers.ETL.thickness_nm"
EQE = "external_quantum_efficiency"
CASES = Path(__file__).parents[2] / "cases"

CASE = """
# A comment at the head.
title = "four films, invented"
[wavelength]
values_nm = [500, 550, 600]
[materials.host]      # of no company
table = "host.csv"
[[layers]]
name = "HTL"
material = "host"
thickness_nm = 35     # a guess
[[layers]]
name = "EML"
material = "host"
thickness_nm = 30
[[layers]]
name = "ETL"
material = "host"
thickness_nm = 40     # another guess
[[layers]]
name = "CAT"
material = "al"
thickness_nm = 100
[[emitters]]
name = "green"
layer = "EML"
spectrum = { peak_nm = 550, fwhm_nm = 20 }
zone = { shape = "point", at_nm = 10, from = "bottom" }   # kept
horizontal_fraction = 0.7
quantum_yield = 0.9
[drive]
charge_balance = 0.9
[optimize]
"""
SINGLE = """maximize = "external_quantum_efficiency"
[optimize.variables]
"layers.HTL.thickness_nm" = { min = 20, max = 90 }
"layers.ETL.thickness_nm" = { min = 20, max = 90 }
"""
FRONT = """objectives = [{ maximize = "external_quantum_efficiency" },
  { minimize = "destinations.guided" }]
""" + SINGLE[SINGLE.index("[") :]


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))
    monkeypatch.chdir(tmp_path)
    (tmp_path / "host.csv").write_text("wavelength_nm,n\n450,1.76\n650,1.74\n")
    return tmp_path


def ran(*words: str) -> Result:
    return CliRunner().invoke(main, ["optimize", *words])


def test_it_tells_writes_and_draws(folder: Path) -> None:
    Path("c.toml").write_text(CASE + SINGLE)
    (folder / "sub").mkdir()
    result = ran(
        "c.toml",
        "-o",
        "sub/better.toml",
        "-o",
        "r.json",
        "-o",
        "r.csv",
        "-o",
        "r.png",
        "--seed",
        "4",
    )
    assert result.exit_code == 0, result.output
    assert "HTL thickness" in result.stdout
    assert "was" in result.stdout
    assert "(seed 4)" in result.stdout
    assert "Gradients: exact." in result.stdout
    said = json.loads(Path("r.json").read_text())
    assert said["schema"] == "outcouple.optimize/1"
    assert said["seed"] == 4
    assert Path("r.png").read_bytes().startswith(b"\x89PNG")
    rows = Path("r.csv").read_text().splitlines()
    assert rows[0].startswith("kind,layers.HTL.thickness_nm,layers.ETL.thickness_nm,external")
    assert len(rows) == 1 + said["tried"]["samples"] + 1 + len(said["others"])
    better = optics.read_case("sub/better.toml")
    assert better.value(HTL) == said["best"]["values"][HTL]
    assert optics.budget(better).external_quantum_efficiency == pytest.approx(
        said["best"]["outcomes"][EQE], abs=1e-6
    )
    text = Path("sub/better.toml").read_text()
    assert text.count("#") == CASE.count("#")
    assert 'table = "../host.csv"' in text
    changed = [
        (old, new)
        for old, new in zip((CASE + SINGLE).splitlines(), text.splitlines(), strict=True)
        if old != new
    ]
    assert len(changed) == 3  # two films and the path of the table
    assert not list((folder / "cache").rglob("*.part"))


def test_json_is_pure_and_the_same_as_from_python(folder: Path) -> None:
    Path("c.toml").write_text(CASE + SINGLE)
    result = ran("c.toml", "--json")
    assert result.exit_code == 0, result.output
    assert json.loads(result.stdout)["best"] == json.loads(
        json.dumps(optics.optimize(optics.read_case("c.toml")).to_dict()["best"])
    )


def test_a_front_is_numbered_and_any_point_can_be_taken(folder: Path) -> None:
    Path("c.toml").write_text(CASE + FRONT)
    result = ran("c.toml", "-o", "r.svg", "-o", "r.json", "-o", "p.toml", "--pick", "1")
    assert result.exit_code == 0, result.output
    assert "Pareto front" in result.stdout
    assert "compromise" in result.stdout
    first = json.loads(Path("r.json").read_text())["front"][0]
    assert optics.read_case("p.toml").value(HTL) == first["values"][HTL]
    result = ran("c.toml", "-o", "p.toml", "--pick", "99")
    assert result.exit_code == 2
    assert "the points of the front" in result.stderr


def test_the_case_itself_is_overwritten_only_when_asked(folder: Path) -> None:
    text = CASE + SINGLE
    Path("c.toml").write_text(text)
    result = ran("c.toml", "-o", "c.toml")
    assert result.exit_code == 2
    assert "--in-place" in result.stderr
    assert Path("c.toml").read_text() == text
    assert ran("c.toml", "-o", "c.toml", "--in-place").exit_code == 0
    assert optics.read_case("c.toml").value(HTL) != 35.0


def test_faults_exit_with_two_and_write_nothing(folder: Path) -> None:
    limit = '[optimize.constraints]\n"external_quantum_efficiency" = { min = 0.95 }\n'
    Path("c.toml").write_text(CASE + SINGLE + limit)
    result = ran("c.toml", "-o", "better.toml", "-o", "r.json")
    assert result.exit_code == 2
    assert "at best 0." in result.stderr
    assert not Path("better.toml").exists()
    assert not Path("r.json").exists()
    result = ran("c.toml", "--pick", "2")
    assert result.exit_code == 2
    assert "one objective" in result.stderr


def test_written_cases_take_numbers_that_the_file_leaves_to_defaults(folder: Path) -> None:
    Path("c.toml").write_text(CASE + SINGLE)
    case = optics.read_case("c.toml")
    changes = {
        "emitters.green.order_parameter": -0.2,
        "emitters.green.exciton_fraction": 0.5,
        "drive.charge_balance.device": 0.8,
        "drive.aperture_ratio": 0.5,
    }
    target = folder / "out.toml"
    write_case(case, changes, target, target)
    text = target.read_text()
    assert "horizontal_fraction" not in text
    for path, value in changes.items():
        assert optics.read_case(target).value(path) == value


def test_every_bundled_case_survives_rewriting(tmp_path: Path) -> None:
    """Bytes stay as they are when a number is replaced by itself, but for how it is written."""
    for path in sorted(CASES.glob("*.toml")):
        case = optics.read_case(path)
        name = case.document["layers"][0]["name"]
        address = f"layers.{name}.thickness_nm"
        target = tmp_path / path.name
        write_case(case, {address: float(case.value(address)) + 0.25}, target, target)
        old, new = path.read_text(encoding="utf-8"), target.read_text(encoding="utf-8")
        changed = [
            pair
            for pair in zip(old.splitlines(), new.splitlines(), strict=True)
            if pair[0] != pair[1]
        ]
        assert len(changed) == 1, path


def test_a_case_that_changed_meanwhile_is_not_written(folder: Path) -> None:
    Path("c.toml").write_text(CASE + SINGLE)
    case = optics.read_case("c.toml")
    Path("c.toml").write_text((CASE + SINGLE).replace("thickness_nm = 30", "thickness_nm = 31"))
    with pytest.raises(CaseError, match="changed since"):
        write_case(case, {HTL: 50.0}, folder / "out.toml", folder / "out.toml")


@pytest.mark.slow
def test_the_worked_case_keeps_its_comments(folder: Path) -> None:
    shutil.copy(CASES / "optimize-two-antinodes.toml", "two.toml")
    assert ran("two.toml", "-o", "better.toml").exit_code == 0
    old, new = Path("two.toml").read_text(), Path("better.toml").read_text()
    assert old.count("#") == new.count("#")
    assert sum(a != b for a, b in zip(old.splitlines(), new.splitlines(), strict=True)) == 2
