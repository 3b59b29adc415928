"""Every worked example passes its own check, with nothing left out unnamed."""

from __future__ import annotations

from pathlib import Path

import pytest

import optics

CASES = sorted((Path(__file__).parents[2] / "cases").glob("*.toml"))


@pytest.mark.slow
@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_worked_example_passes_its_check(path: Path) -> None:
    found = optics.check(optics.read_case(path))
    assert [row for row in found.rows if row.result == "fail"] == []
    assert all(entry["checked"] > 0 for entry in found.summary())
    assert all(row.note for row in found.rows if row.result == "not checked")
