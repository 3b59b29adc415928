"""Progress of a long study on disk, so that the same command continues what was stopped.

A file of records of one size: place, values, checksum. Records are only ever appended; one that
a crash or a full disk cut short fails its checksum and is dropped. The name of the file is a hash
of everything the numbers depend on, so results of different cases never meet.
"""

from __future__ import annotations

import hashlib
import json
import os
import time
import zlib
from collections.abc import Mapping
from contextlib import suppress
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Integers = NDArray[np.int64]


_ABANDONED_S = 30 * 86400.0


def content_key(content: Mapping[str, Any]) -> str:
    """Hash of plain content, the same however its keys are ordered."""
    text = json.dumps(content, sort_keys=True, ensure_ascii=True, allow_nan=False)
    return hashlib.sha256(text.encode("ascii")).hexdigest()


def progress_folder() -> Path:
    """Folder of unfinished studies: ``outcouple/studies`` in the user's cache folder."""
    if "XDG_CACHE_HOME" in os.environ:
        base = Path(os.environ["XDG_CACHE_HOME"])
    elif "LOCALAPPDATA" in os.environ:
        base = Path(os.environ["LOCALAPPDATA"])
    else:
        base = Path.home() / ".cache"
    return base / "outcouple" / "studies"


def clear_abandoned(folder: Path, besides: Path) -> None:
    """Remove progress files, besides one, that nobody has come back to for 30 days."""
    for path in folder.glob("*-*.part"):
        if path == besides:
            continue
        with suppress(OSError):  # another process may be quicker
            if time.time() - path.stat().st_mtime > _ABANDONED_S:
                path.unlink()


class Store:
    """Results by place, kept in one file.

    Parameters
    ----------
    path : Path
        Made, with its folder, when the first result arrives.
    width : int
        Values of one place.
    places : int
        Places are 0 to places - 1.

    Attributes
    ----------
    trouble : str or None
        Why results can no longer be kept, once that is so; the study may go on without.
    """

    def __init__(self, path: Path, width: int, places: int) -> None:
        self.path = path
        self.trouble: str | None = None
        self._places = places
        self._record = np.dtype([("place", "<i8"), ("values", "<f8", (width,)), ("sum", "<u4")])
        self._end = 0  # bytes of whole records

    def load(self) -> tuple[Integers, Floats]:
        """Read what an earlier run has kept.

        Returns
        -------
        places : int (n,)
        values : float (n, width)
        """
        try:
            raw = self.path.read_bytes()
        except OSError:
            raw = b""
        whole = len(raw) // self._record.itemsize * self._record.itemsize
        records = np.frombuffer(raw[:whole], dtype=self._record)
        good = self._sums(records) == records["sum"]
        good &= (records["place"] >= 0) & (records["place"] < self._places)
        count = records.size if good.all() else int(np.argmin(good))
        self._end = count * self._record.itemsize
        kept = records[:count]
        return kept["place"].astype(np.int64), kept["values"].astype(np.float64)

    def add(self, places: Integers, values: Floats) -> None:
        """Append results; after a first failure to write, do nothing.

        Parameters
        ----------
        places : int (n,)
        values : float (n, width)
        """
        if self.trouble is not None or places.size == 0:
            return
        records = np.zeros(places.size, dtype=self._record)
        records["place"], records["values"] = places, values
        records["sum"] = self._sums(records)
        try:
            self.path.parent.mkdir(parents=True, exist_ok=True)
            with self.path.open("r+b" if self.path.exists() else "w+b") as file:
                # Over whatever a write that failed has left behind.
                file.seek(self._end)
                file.write(records.tobytes())
                file.truncate()
        except OSError as error:
            self.trouble = f"{self.path}: {error.strerror or error}"
        else:
            self._end += records.nbytes

    def discard(self) -> None:
        """Remove the file, when its results have been handed on."""
        with suppress(OSError):  # not there, or a folder that turned away every write
            self.path.unlink()

    def _sums(self, records: NDArray[np.void]) -> NDArray[np.uint32]:
        size = self._record.itemsize - 4
        raw = records.tobytes()
        starts = range(0, len(raw), self._record.itemsize)
        return np.array([zlib.crc32(raw[at : at + size]) for at in starts], dtype=np.uint32)
