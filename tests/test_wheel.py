"""The wheel carries everything that a run needs, with no checkout beside it."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

pytestmark = pytest.mark.slow

ROOT = Path(__file__).parents[1]


def run(*words: object, folder: Path, **environment: str) -> str:
    done = subprocess.run(
        [sys.executable, *map(str, words)],
        cwd=folder,
        env=os.environ | environment,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    return done.stdout


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("wheel")
    # The build tool is among the development dependencies: no download, no isolation.
    build = ("-m", "pip", "wheel", "--quiet", "--no-deps", "--no-build-isolation", "-w", folder)
    run(*build, ROOT, folder=folder)
    (built,) = folder.glob("outcouple-*.whl")
    return built


def test_every_table_is_in_the_wheel(wheel: Path) -> None:
    inside = set(zipfile.ZipFile(wheel).namelist())
    tables = [path for path in (ROOT / "materials").rglob("*") if path.is_file()]
    assert len(tables) > 40
    for path in tables:
        assert f"optics/_materials/{path.relative_to(ROOT / 'materials').as_posix()}" in inside
    assert "optics/py.typed" in inside
    assert not [name for name in inside if name.startswith(("tests/", "cases/"))]


def test_the_wheel_runs_without_the_checkout(wheel: Path, tmp_path: Path) -> None:
    site = tmp_path / "site"
    install = ("-m", "pip", "install", "--quiet", "--no-deps", "--target", site, wheel)
    run(*install, folder=tmp_path)
    where = run(
        "-c", "import optics; print(optics.__file__)", folder=tmp_path, PYTHONPATH=str(site)
    )
    assert Path(where.strip()).is_relative_to(site)
    # Installing compiles to byte code: a first start without it takes seconds.
    assert list((site / "optics" / "cli" / "__pycache__").glob("budget.*.pyc"))
    case = ROOT / "cases" / "green-bottom-pixel.toml"
    command = ("-m", "optics.cli", "budget", case, "--json")
    inside = json.loads(run(*command, folder=tmp_path, PYTHONPATH=str(site)))
    checkout = json.loads(run(*command, folder=ROOT))
    assert inside == checkout
