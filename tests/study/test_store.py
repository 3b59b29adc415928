"""Progress on disk: read back to the last bit, torn and foreign records dropped."""

from __future__ import annotations

import os
import time
from pathlib import Path

import numpy as np
import pytest

from optics.study.store import Store, clear_abandoned, content_key, progress_folder


def filled(path: Path) -> Store:
    store = Store(path, 2, 10)
    store.add(np.array([3, 1]), np.array([[0.1, np.nan], [1.0 / 3.0, -2.0]]))
    store.add(np.array([7]), np.array([[5e-324, 1e300]]))
    return store


def test_values_come_back_to_the_last_bit(tmp_path: Path) -> None:
    path = tmp_path / "deep" / "one.part"
    assert Store(path, 2, 10).load()[0].size == 0
    filled(path)
    places, values = Store(path, 2, 10).load()
    assert places.tolist() == [3, 1, 7]
    expected = np.array([[0.1, np.nan], [1.0 / 3.0, -2.0], [5e-324, 1e300]])
    assert values.tobytes() == expected.tobytes()


@pytest.mark.parametrize("cut", [1, 17, 27])
def test_a_record_cut_short_is_dropped_and_written_over(tmp_path: Path, cut: int) -> None:
    path = tmp_path / "one.part"
    filled(path)
    os.truncate(path, path.stat().st_size - cut)
    store = Store(path, 2, 10)
    assert store.load()[0].tolist() == [3, 1]
    store.add(np.array([4]), np.array([[1.0, 2.0]]))
    assert Store(path, 2, 10).load()[0].tolist() == [3, 1, 4]


def test_a_spoiled_record_ends_what_is_trusted(tmp_path: Path) -> None:
    path = tmp_path / "one.part"
    filled(path)
    raw = bytearray(path.read_bytes())
    raw[30] ^= 1  # in the second record
    path.write_bytes(raw)
    assert Store(path, 2, 10).load()[0].tolist() == [3]


def test_places_outside_the_grid_are_not_taken(tmp_path: Path) -> None:
    filled(tmp_path / "one.part")
    assert Store(tmp_path / "one.part", 2, 7).load()[0].tolist() == [3, 1]


def test_a_failure_to_write_is_told_and_keeps_what_was_there(tmp_path: Path) -> None:
    path = tmp_path / "folder" / "one.part"
    store = filled(path)
    path.rename(tmp_path / "saved")
    path.parent.rmdir()
    path.parent.write_text("no folder")  # now nothing can be written there
    store.add(np.array([9]), np.array([[1.0, 2.0]]))
    assert store.trouble is not None
    assert str(path) in store.trouble
    store.add(np.array([8]), np.array([[1.0, 2.0]]))  # does nothing, raises nothing
    assert Store(tmp_path / "saved", 2, 10).load()[0].tolist() == [3, 1, 7]


def test_a_full_disk_is_told() -> None:
    if not Path("/dev/full").exists():
        pytest.skip("this system has no device that is always full")
    store = Store(Path("/dev/full"), 2, 10)
    store.add(np.array([9]), np.array([[1.0, 2.0]]))
    assert store.trouble == "/dev/full: No space left on device"


def test_discarding_removes_the_file(tmp_path: Path) -> None:
    store = filled(tmp_path / "one.part")
    store.discard()
    assert list(tmp_path.iterdir()) == []
    store.discard()


def test_keys_do_not_depend_on_order_but_on_every_value() -> None:
    assert content_key({"a": 1, "b": [2.0]}) == content_key({"b": [2.0], "a": 1})
    assert content_key({"a": 1}) != content_key({"a": 2})


def test_progress_is_kept_in_the_users_cache(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", "/somewhere")
    assert progress_folder() == Path("/somewhere/outcouple/studies")


def test_only_what_was_left_long_ago_is_cleared(tmp_path: Path) -> None:
    names = ("sweep-a.part", "sweep-b.part", "sweep-mine.part", "notes.txt")
    old, new, mine, foreign = (tmp_path / name for name in names)
    for path in (old, new, mine, foreign):
        path.write_bytes(b"1")
    for path in (old, mine, foreign):
        os.utime(path, (0, time.time() - 31 * 86400))
    clear_abandoned(tmp_path, besides=mine)
    assert set(tmp_path.iterdir()) == {new, mine, foreign}
    clear_abandoned(tmp_path / "no such folder", besides=mine)
