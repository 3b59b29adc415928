"""Files that appear only when they are complete, and JSON that every parser reads."""

from __future__ import annotations

import json
import math
import os
import secrets
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

from optics.device.errors import CaseError, Fault, nearest

Writer = Callable[[Path], object]


def as_json(value: Any) -> str:
    """Write a result as JSON.

    Parameters
    ----------
    value : dict, list, str, number, bool or None
        Nested; NumPy scalars and arrays are welcome.

    Returns
    -------
    str
        With null in the place of every number that is not finite, which JSON does not know.
    """
    return json.dumps(_plain(value), indent=2, ensure_ascii=False, allow_nan=False)


def write_json(value: Any, path: Path) -> None:
    """Write a result as a JSON file, see `as_json`."""
    path.write_text(as_json(value) + "\n", encoding="utf-8")


def check_targets(paths: Sequence[Path], suffixes: Sequence[str]) -> None:
    """Refuse result files that could not be written, before any work is done for them.

    Parameters
    ----------
    paths : sequence of Path
        Where results are to go.
    suffixes : sequence of str
        Formats that the command can write, such as ``.json``.

    Raises
    ------
    CaseError
        With every path at fault.
    """
    faults = [fault for path in paths if (fault := _target_fault(path, suffixes)) is not None]
    places = [_place(path) for path in paths]
    faults += [
        Fault(str(path), "-o", "the same file a second time", "every file once")
        for index, path in enumerate(paths)
        if places[index] in places[:index]
    ]
    if faults:
        raise CaseError(faults)


def publish(writers: Mapping[Path, Writer]) -> None:
    """Write several files and let them appear together, when all are complete.

    Parameters
    ----------
    writers : mapping of Path to callable
        Each callable writes its whole file to the path it is handed. That lies in the same
        folder as the final one, so that the last step is a mere change of name.
    """
    staged: list[tuple[Path, Path]] = []
    try:
        for path, write in writers.items():
            final = _place(path)
            draft = final.with_name(f".{secrets.token_hex(6)}.{final.name}")
            staged.append((draft, final))
            write(draft)
        for draft, final in staged:
            os.replace(draft, final)
    finally:
        for draft, _ in staged:
            draft.unlink(missing_ok=True)


def _place(path: Path) -> Path:
    # A link is followed: the file it leads to is replaced, not the link.
    return path.resolve()


def _target_fault(path: Path, suffixes: Sequence[str]) -> Fault | None:
    suffix = path.suffix.lower()
    if suffix not in suffixes:
        found = f"suffix {path.suffix}" if suffix else "no suffix"
        return Fault(str(path), "-o", found, _any_of(suffixes), nearest(suffix, suffixes))
    if path.is_dir():
        return Fault(str(path), "-o", "a folder", "a file name")
    folder = _place(path).parent
    if not folder.is_dir():
        return Fault(str(path), "-o", f"no folder {folder}", "a folder that exists")
    if not os.access(folder, os.W_OK | os.X_OK):
        return Fault(str(path), "-o", f"folder {folder} not writable", "a folder to write in")
    return None


def _any_of(suffixes: Sequence[str]) -> str:
    *most, last = suffixes
    return f"{', '.join(most)} or {last}" if most else last


def _plain(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [_plain(item) for item in value]
    if hasattr(value, "tolist"):  # NumPy scalars and arrays, without importing NumPy
        return _plain(value.tolist())
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
