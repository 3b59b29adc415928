"""The command line: exit status, wording, pure JSON, files that are complete or absent."""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result

import optics
from optics.cli import main

CASE = """
title = "two films, invented"
[wavelength]
values_nm = [500, 550, 600]
[materials.host]
n = 1.75
[substrate]
material = "bk7"
thickness_mm = 0.7
[[layers]]
name = "EML"
material = "host"
thickness_nm = 30
[[layers]]
name = "CAT"
material = "al"
thickness_nm = 100
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


def run(*arguments: object) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments])


def no_constants(text: str) -> Any:
    """Parse JSON that has no NaN and no Infinity."""

    def refuse(word: str) -> None:
        raise AssertionError(f"{word} in JSON")

    return json.loads(text, parse_constant=refuse)


def test_budget_prints_tables(case: Path) -> None:
    result = run("budget", case)
    assert result.exit_code == 0
    expected = optics.budget(optics.read_case(case)).to_dict()
    eqe = 100 * expected["external_quantum_efficiency"]
    assert result.stdout.splitlines()[0] == "two films, invented"
    assert f"EQE {eqe:.2f} %" in result.stdout
    assert "bk7-datasheet" in result.stdout
    assert "Warning: " in result.stdout  # three wavelengths lose much of the spectrum


def test_budget_json_is_the_result_and_nothing_else(case: Path) -> None:
    result = run("budget", case, "--json")
    assert result.exit_code == 0
    printed = no_constants(result.stdout)
    assert printed == optics.budget(optics.read_case(case)).to_dict()
    assert result.stdout.lstrip().startswith("{")
    for warning in printed["warnings"]:
        assert f"Warning: {warning}" in result.stderr


def test_budget_files_hold_the_same_numbers(case: Path, tmp_path: Path) -> None:
    import pandas as pd
    import xarray as xr

    paths = [tmp_path / f"out{suffix}" for suffix in (".json", ".csv", ".nc")]
    result = run("budget", case, "--json", *[word for path in paths for word in ("-o", path)])
    assert result.exit_code == 0
    printed = no_constants(result.stdout)
    eqe = printed["external_quantum_efficiency"]
    assert no_constants(paths[0].read_text()) == printed
    frame = pd.read_csv(paths[1])
    device = frame[
        (frame["scope"] == "device") & (frame["quantity"] == "external_quantum_efficiency")
    ]
    assert device["value"].to_list() == [pytest.approx(eqe, rel=1e-15)]
    with xr.open_datatree(paths[2], engine="h5netcdf") as tree:
        assert float(tree["external_quantum_efficiency"]) == eqe
    assert [f"Wrote {path}" for path in paths] == result.stderr.splitlines()[-3:]


def test_tolerance_reaches_the_engine(case: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    seen: list[float] = []
    real: Callable[..., optics.Budget] = optics.budget

    def spy(device: optics.Case, tolerance: float) -> optics.Budget:
        seen.append(tolerance)
        return real(device, tolerance=tolerance)

    monkeypatch.setattr(optics, "budget", spy)
    assert run("budget", case, "--tolerance", "1e-4").exit_code == 0
    assert run("budget", case).exit_code == 0
    assert seen == [1e-4, 1e-6]


@pytest.mark.parametrize("value", ["0", "-1", "nan", "half"])
def test_a_tolerance_that_makes_no_sense_is_refused(case: Path, value: str) -> None:
    result = run("budget", case, "--tolerance", value)
    assert result.exit_code == 2
    assert "--tolerance" in result.stderr


def test_every_fault_on_its_own_line_and_nothing_written(case: Path, tmp_path: Path) -> None:
    case.write_text(CASE.replace("quantum_yield = 0.9", "quantum_yield = 1.9").replace("al", "aal"))
    output = tmp_path / "out.json"
    result = run("budget", case, "--json", "-o", output)
    assert result.exit_code == 2
    assert result.stdout == ""
    lines = result.stderr.splitlines()
    assert len(lines) >= 2
    assert all(line.startswith(f"{case}: ") for line in lines)
    assert any("emitters.green.quantum_yield: found 1.9" in line for line in lines)
    assert not output.exists()


def test_a_missing_case_is_a_fault(tmp_path: Path) -> None:
    result = run("budget", tmp_path / "no.toml")
    assert result.exit_code == 2
    assert result.stderr.count("\n") == 1
    assert "no such file" in result.stderr


def test_an_unknown_suffix_is_refused_before_the_case_is_read(tmp_path: Path) -> None:
    result = run("budget", tmp_path / "no.toml", "-o", tmp_path / "out.xlsx")
    assert result.exit_code == 2
    assert result.stderr == (
        f"{tmp_path}/out.xlsx: -o: found suffix .xlsx; "
        "expected .json, .csv, .nc, .png, .svg or .pdf\n"
    )


def _explode(*_arguments: object, **_options: object) -> None:
    raise RuntimeError("the engine stopped")


def test_other_failures_are_a_short_message(case: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(optics, "budget", _explode)
    result = run("budget", case)
    assert result.exit_code == 1
    assert result.stdout == ""
    assert result.stderr.splitlines()[-2:] == [
        "outcouple failed: RuntimeError: the engine stopped",
        "--traceback tells where.",
    ]


@pytest.mark.parametrize("before", [True, False])
def test_traceback_on_demand(case: Path, monkeypatch: pytest.MonkeyPatch, before: bool) -> None:
    monkeypatch.setattr(optics, "budget", _explode)
    words = ("--traceback", "budget", case) if before else ("budget", case, "--traceback")
    result = run(*words)
    assert result.exit_code == 1
    assert isinstance(result.exception, RuntimeError)


def test_a_write_that_fails_leaves_no_file(
    case: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from optics.present import files

    def full(_value: object, path: Path) -> None:
        path.write_text("{")
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(files, "write_json", full)
    result = run("budget", case, "-o", tmp_path / "out.csv", "-o", tmp_path / "out.json")
    assert result.exit_code == 1
    assert "No space left on device" in result.stderr
    assert [path.name for path in tmp_path.iterdir()] == ["case.toml"]


def test_compiling_is_announced_on_standard_error(
    case: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from optics.kernels import compiled

    monkeypatch.setattr(compiled, "cache_is_warm", lambda job="budget": False)
    cold = run("budget", case, "--json")
    assert cold.stderr.startswith("Compiling the kernels (first use only, about half a minute) ...")
    no_constants(cold.stdout)
    monkeypatch.setattr(compiled, "cache_is_warm", lambda job="budget": True)
    assert "Compiling" not in run("budget", case, "--json").stderr


def test_materials_list_and_json() -> None:
    listed = run("materials")
    assert listed.exit_code == 0
    assert "ag-yang" in listed.stdout
    printed = no_constants(run("materials", "--json").stdout)
    assert printed["schema"] == "outcouple.materials/1"
    by_name = {entry["name"]: entry for entry in printed["materials"]}
    assert by_name["air"]["range_nm"] == [0.0, None]
    assert by_name["ag-yang"]["aliases"] == ["ag"]
    assert {"green", "deep-blue"} <= {one["name"] for one in printed["spectra"]}


def test_materials_of_one_name() -> None:
    printed = no_constants(run("materials", "al", "--json").stdout)
    assert printed["schema"] == "outcouple.material/1"
    assert [one["name"] for one in printed["measurements"]] == [
        "al-rakic-ld",
        "al-mcpeak",
        "al-rakic",
    ]
    axis = printed["measurements"][2]["axes"][0]
    assert len(axis["wavelength_nm"]) == len(axis["n"]) == len(axis["k"]) == 22
    spectrum = no_constants(run("materials", "green", "--json").stdout)
    assert (spectrum["schema"], spectrum["quantity"]) == ("outcouple.spectrum/1", "photons")


def test_materials_draws(tmp_path: Path) -> None:
    picture = tmp_path / "ag.png"
    result = run("materials", "ag", "-o", picture)
    assert result.exit_code == 0
    assert picture.read_bytes().startswith(b"\x89PNG")
    assert "ag-mcpeak" in result.stdout
    nameless = run("materials", "-o", picture)
    assert nameless.exit_code == 2
    assert "give its NAME" in nameless.stderr


def test_materials_lists_every_fault_of_a_users_table(tmp_path: Path) -> None:
    table = tmp_path / "own.csv"
    table.write_text("wavelength_nm,n,k\n400,1.8,-1\n390,x,0\n380,1.9,0\n")
    result = run("materials", table, "-o", tmp_path / "own.png")
    assert result.exit_code == 2
    assert result.stderr.splitlines() == [
        f"{table}: line 2, column k: found -1; expected 0 or more",
        f"{table}: line 3, column n: found 'x'; expected a finite number",
    ]
    assert [path.name for path in tmp_path.iterdir()] == ["own.csv"]


def test_schema_to_standard_output_or_file(tmp_path: Path) -> None:
    printed = run("schema")
    assert no_constants(printed.stdout)["title"] == "outcouple case file"
    path = tmp_path / "case.schema.json"
    written = run("schema", "-o", path)
    assert (written.exit_code, written.stdout) == (0, "")
    assert path.read_text() == printed.stdout


def test_version_and_unknown_commands() -> None:
    assert run("--version").stdout == f"outcouple {optics.__version__}\n"
    unknown = run("budgte")
    assert unknown.exit_code == 2
    assert "budgte" in unknown.stderr


HEAVY = ("numpy", "scipy", "numba", "pandas", "xarray", "matplotlib", "pydantic", "rich", "h5py")


@pytest.mark.parametrize("code", ["import optics.cli", "import optics"])
def test_a_start_loads_nothing_heavy(code: str) -> None:
    script = f"{code}; import sys; print(*[name for name in {HEAVY!r} if name in sys.modules])"
    loaded = subprocess.run(
        [sys.executable, "-c", script], check=True, capture_output=True, text=True
    )
    assert loaded.stdout.split() == []


def test_materials_do_not_start_the_compiler() -> None:
    script = "import sys, optics.present.constants; print('numba' in sys.modules)"
    loaded = subprocess.run(
        [sys.executable, "-c", script], check=True, capture_output=True, text=True
    )
    assert loaded.stdout.strip() == "False"
