"""Result files: refused early, complete or absent, JSON without NaN."""

from __future__ import annotations

import json
import os
from pathlib import Path

import numpy as np
import pytest

from optics.device.errors import CaseError
from optics.present.files import as_json, check_targets, publish, write_json

SUFFIXES = (".json", ".csv", ".nc")


def test_json_has_null_for_what_is_not_finite() -> None:
    value = {"a": float("nan"), "b": [np.float64("inf"), np.array([1.0, np.nan])], "c": None}
    assert json.loads(as_json(value)) == {"a": None, "b": [None, [1.0, None]], "c": None}


def test_json_keeps_every_digit_and_plain_types() -> None:
    value = {"x": 0.1 + 0.2, "n": np.int64(3), "t": (True, "é")}
    assert json.loads(as_json(value)) == {"x": 0.1 + 0.2, "n": 3, "t": [True, "é"]}


def test_all_bad_targets_are_listed_at_once(tmp_path: Path) -> None:
    (tmp_path / "folder.csv").mkdir()
    paths = [
        tmp_path / "a.jsno",
        tmp_path / "b",
        tmp_path / "folder.csv",
        tmp_path / "no" / "c.nc",
        tmp_path / "d.csv",
        tmp_path / "." / "d.csv",
    ]
    with pytest.raises(CaseError) as caught:
        check_targets(paths, SUFFIXES)
    assert str(caught.value).splitlines() == [
        f"{tmp_path}/a.jsno: -o: found suffix .jsno; expected .json, .csv or .nc "
        "(did you mean .json?)",
        f"{tmp_path}/b: -o: found no suffix; expected .json, .csv or .nc",
        f"{tmp_path}/folder.csv: -o: found a folder; expected a file name",
        f"{tmp_path}/no/c.nc: -o: found no folder {tmp_path}/no; expected a folder that exists",
        f"{tmp_path}/d.csv: -o: found the same file a second time; expected every file once",
    ]


def test_good_targets_pass(tmp_path: Path) -> None:
    check_targets([tmp_path / "a.json", tmp_path / "b.CSV"], SUFFIXES)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.skipif(
    not hasattr(os, "geteuid") or os.geteuid() == 0, reason="the superuser may write anywhere"
)
def test_unwritable_folder_is_said(tmp_path: Path) -> None:
    folder = tmp_path / "closed"
    folder.mkdir(mode=0o555)
    with pytest.raises(CaseError, match="not writable; expected a folder to write in"):
        check_targets([folder / "a.json"], SUFFIXES)


def test_unwritable_folder_is_said_to_any_user(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(os, "access", lambda _path, _mode: False)
    with pytest.raises(CaseError) as caught:
        check_targets([tmp_path / "a.json"], SUFFIXES)
    assert str(caught.value) == (
        f"{tmp_path}/a.json: -o: found folder {tmp_path} not writable; expected a folder to "
        "write in"
    )


def test_files_appear_only_when_all_are_complete(tmp_path: Path) -> None:
    first, second = tmp_path / "a.json", tmp_path / "b.csv"
    first.write_text("old")

    def fail(path: Path) -> None:
        path.write_text("half")
        assert not second.exists()
        assert first.read_text() == "old"
        raise OSError("disk full")

    with pytest.raises(OSError, match="disk full"):
        publish({first: lambda path: write_json({"x": 1}, path), second: fail})
    assert first.read_text() == "old"
    assert [path.name for path in tmp_path.iterdir()] == ["a.json"]


def test_published_files_replace_old_ones_and_leave_nothing_else(tmp_path: Path) -> None:
    first, second = tmp_path / "a.json", tmp_path / "b.csv"
    first.write_text("old")
    publish({first: lambda path: write_json({"x": 1}, path), second: lambda p: p.write_text("y")})
    assert json.loads(first.read_text()) == {"x": 1}
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.json", "b.csv"]


def test_a_link_is_followed(tmp_path: Path) -> None:
    real, link = tmp_path / "real.json", tmp_path / "link.json"
    real.write_text("old")
    link.symlink_to(real)
    publish({link: lambda path: path.write_text("new")})
    assert link.is_symlink()
    assert real.read_text() == "new"


def test_the_draft_keeps_the_suffix_for_writers_that_go_by_it(tmp_path: Path) -> None:
    seen: list[Path] = []

    def write(path: Path) -> None:
        seen.append(path)
        path.write_text("x")

    publish({tmp_path / "a.nc": write})
    assert seen[0].suffix == ".nc"
    assert seen[0].parent == tmp_path
