"""Every worked example runs as it stands and says where its numbers come from."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

import optics

CASES = sorted((Path(__file__).parents[1] / "cases").glob("**/*.toml"))


def test_there_are_cases() -> None:
    assert "green-bottom-pixel.toml" in {path.name for path in CASES}


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_case_runs_without_warning_and_adds_up(path: Path) -> None:
    outcome = optics.budget(optics.read_case(path)).to_dict()
    assert outcome["warnings"] == []
    assert outcome["accuracy"]["energy_balance"] <= 1e-6
    assert outcome["accuracy"]["integration_error"] <= 1e-6
    for one in outcome["emitters"]:
        assert one["lost_share"] < 1e-3
        assert sum(one["destinations"].values()) == pytest.approx(1.0, abs=1e-6)
    for unit in outcome["chain"]:
        parts = [share for key, share in unit.items() if key != "unit"]
        assert sum(parts) == pytest.approx(1.0, abs=1e-6)
        assert min(parts) >= 0.0


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_own_optical_constants_are_marked_as_invented(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    local = tomllib.loads(text).get("materials", {})
    marked = {
        line.split("]")[0].removeprefix("[materials.")
        for line in text.splitlines()
        if line.startswith("[materials.") and "# invented" in line
    }
    assert marked == set(local)
    assert "invented" in tomllib.loads(text)["title"]


def test_the_green_pixel_behaves_like_a_plain_bottom_emitter() -> None:
    """Common practice, no source: some 20 to 30 % leave a plain planar device, more with a lens."""
    (path,) = [one for one in CASES if one.name == "green-bottom-pixel.toml"]
    case = optics.read_case(path)
    plain = optics.budget(case).to_dict()
    matched = optics.budget(case.replace("substrate.exit", "matched")).to_dict()
    assert 0.15 < plain["outcoupling_efficiency"] < 0.35
    assert plain["external_quantum_efficiency_top"] < 1e-6
    assert matched["external_quantum_efficiency_bottom"] == pytest.approx(
        plain["external_quantum_efficiency_matched"], abs=2e-6
    )
