"""The kernels with compilation off: same numbers, covered lines, and errors that show."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import without_compiler
from stacks import DESTINATIONS, HORIZONTAL, NAMES, VERTICAL

import optics

SCRIPT = Path(without_compiler.__file__)
ABSORBED, GUIDED = NAMES.index("absorbed"), NAMES.index("guided")
PLANTED = without_compiler.PLANTED


def interpreted(*arguments: str, under: tuple[str, ...] = ()) -> dict[str, Any]:
    """What `without_compiler` prints, in a process of its own."""
    places = (Path(optics.__file__).parents[1], SCRIPT.parent, SCRIPT.parents[1])
    inherited = {k: v for k, v in os.environ.items() if not k.startswith("COV")}
    done = subprocess.run(
        [sys.executable, *under, str(SCRIPT), *arguments],
        env={
            **inherited,
            "NUMBA_DISABLE_JIT": "1",
            "PYTHONPATH": os.pathsep.join(map(str, places)),
        },
        capture_output=True,
        text=True,
        check=False,
        timeout=500,
    )
    assert done.returncode == 0, done.stderr
    found: dict[str, Any] = json.loads(done.stdout)
    return found


def missing(found: dict[str, Any]) -> np.ndarray:
    """Sum of all destinations over F, minus 1, of vertical and horizontal dipoles."""
    shares = np.array(found["shares"])[0, 0, :, : len(DESTINATIONS)].sum(axis=-1)
    return np.asarray(shares / np.array(found["dissipation"])[0, 0] - 1)


@pytest.fixture(scope="module")
def sound() -> dict[str, Any]:
    found: dict[str, Any] = interpreted("plain", "one absorber")["one absorber"]
    return found


def test_balance_is_sound_without_an_error(sound: dict[str, Any]) -> None:
    assert np.abs(missing(sound)).max() < 1e-9
    assert sound["careful"] == [False]


def test_an_error_in_one_film_s_field_shows_in_the_balance(sound: dict[str, Any]) -> None:
    """A field too large by 1e-6 absorbs 2e-6 more, of which the energy balance shows all."""
    found = interpreted("film", "one absorber")["one absorber"]
    lost = np.array(sound["shares"])[0, 0, :, ABSORBED] / np.array(sound["dissipation"])[0, 0]
    assert (lost > 0.05).all()
    moved = missing(found) - missing(sound)
    assert moved == pytest.approx(2 * PLANTED * lost, rel=1e-5)
    assert (np.abs(moved) > 100 * np.abs(missing(sound))).all()


def test_an_error_in_the_dissipated_power_shows_in_the_balance(sound: dict[str, Any]) -> None:
    """F too large by 1e-6: the guided part is taken from it, what leaves and is absorbed not."""
    found = interpreted("source", "one absorber")["one absorber"]
    guided = np.array(sound["shares"])[0, 0, :, GUIDED] / np.array(sound["dissipation"])[0, 0]
    moved = missing(found) - missing(sound)
    assert moved[VERTICAL] == pytest.approx(-PLANTED * (1 - guided[VERTICAL]), rel=1e-3)
    assert moved[HORIZONTAL] == 0.0


# Between them: slabs of every kind, absorbing surroundings, uniaxial and zero-thickness films,
# and every branch of the careful way.
CHEAP = ("two_slabs_one_matched", "silicon_bottom", "one absorber")
ALL = (
    *CHEAP,
    "bottom_oled_absorbing_glass",
    "birefringent_transport",
    "equal_everywhere",
    "zero_thickness",
    "backward_lossless_metal",
    "hidden mode",
    "many dipoles",
)


def same_as_compiled(found: dict[str, Any], mode: str) -> None:
    run = without_compiler.directed if mode == "directions" else without_compiler.outcome
    for name, values in found.items():
        compiled = run(name)
        for key in ("shares", "dissipation", "sent", "lit"):
            if key in values:
                scale = max(1.0, float(np.abs(compiled[key]).max()))
                assert np.array(values[key]) / scale == pytest.approx(
                    np.array(compiled[key]) / scale, abs=1e-12
                ), (name, key)


def test_compiled_numbers_are_the_interpreter_s() -> None:
    same_as_compiled(interpreted("plain", *CHEAP[:2]), "plain")


# What `optics.kernels.budget` and `directions` rest on.
OF_THE_BUDGET = (
    "arrays",
    "budget",
    "compiled",
    "dipole",
    "directions",
    "elementary",
    "exits",
    "field",
    "geometry",
    "halfstack",
    "integrate",
    "panel",
    "paths",
    "places",
    "planar",
    "problem",
    "rules",
    "settle",
    "source",
    "tasks",
    "whole",
)


@pytest.mark.slow
def test_every_line_of_the_budget_s_kernels_is_run(tmp_path: Path) -> None:
    """At least 95 % of the lines, and the numbers are those of the compiled kernels.

    Of the light budget and of single directions; kernels of other commands have tests of their
    own, with compilation on.
    """
    data = tmp_path / "coverage"
    kernels = Path(optics.__file__).parent / "kernels"
    under = ("-m", "coverage", "run", "--append", f"--data-file={data}", f"--source={kernels}")
    same_as_compiled(interpreted("plain", *ALL, under=under), "plain")
    same_as_compiled(interpreted("directions", "one absorber", under=under), "directions")
    report = tmp_path / "coverage.json"
    subprocess.run(
        [
            *(sys.executable, "-m", "coverage", "json", "-q"),
            *(f"--data-file={data}", "-o", str(report)),
            f"--include={','.join(str(kernels / f'{name}.py') for name in OF_THE_BUDGET)}",
        ],
        check=True,
        cwd=tmp_path,
    )
    found = json.loads(report.read_text(encoding="utf-8"))
    gaps = {
        Path(name).name: entry["missing_lines"]
        for name, entry in found["files"].items()
        if entry["missing_lines"]
    }
    assert len(found["files"]) == len(OF_THE_BUDGET)
    assert found["totals"]["percent_covered"] >= 95.0, gaps
