"""A case file with other numbers in it: comments, order and layout stay as the user wrote them."""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping, MutableMapping, MutableSequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from optics.device.address import ORIENTATION_KEYS, orientation_group
from optics.device.case import Case, read_case
from optics.device.errors import CaseError, Fault

if TYPE_CHECKING:
    from tomlkit import TOMLDocument

# Keys that hold the path of a table, relative to the case file.
_TABLE_KEYS = ("table", "filter")


def check_place(case: Case, target: Path, *, in_place: bool) -> None:
    """Refuse to overwrite the case by accident.

    Raises
    ------
    CaseError
        If the target is the case file itself, and that was not asked for.
    """
    source = _source(case)
    if not in_place and target.resolve() == source.resolve():
        expected = "another file, or --in-place to overwrite the case"
        raise CaseError([Fault(str(target), "-o", "the case file itself", expected)])


def write_case(case: Case, changes: Mapping[str, float], target: Path, final: Path) -> None:
    """Write a case file with other numbers at some addresses, and read it again to be sure.

    Parameters
    ----------
    case : Case
        Read from a file, which has not changed since.
    changes : mapping of str to float
        Numbers by address.
    target : Path
        File to write.
    final : Path
        Where it will stand: tables are named relative to this folder.

    Raises
    ------
    CaseError
        If the case file has changed since it was read, so that the result would be another device.
    """
    import tomlkit

    source = _source(case)
    document = tomlkit.parse(source.read_bytes().decode("utf-8-sig"))
    wanted = case.replace_all(changes)
    for path, value in changes.items():
        _set(document, wanted, path, value)
    for table, key in list(_table_paths(document)):
        table[key] = _moved(str(table[key]), source.parent, final.resolve().parent)
    target.write_text(tomlkit.dumps(document), encoding="utf-8", newline="")
    if _content(read_case(target)) != _content(wanted):
        expected = "the case as it was read; run the command again"
        raise CaseError([Fault(str(source), "", "a file that has changed since", expected)])


def _source(case: Case) -> Path:
    assert case.source_path is not None, "a case from a file"
    return case.source_path


def _set(document: TOMLDocument, wanted: Case, path: str, value: float) -> None:
    """Put a number at an address, making tables that the file leaves to their defaults."""
    import tomlkit

    *keys, last = path.split(".")
    if keys == ["drive", "charge_balance"]:
        drive = _descend(document, ["drive"])
        if not isinstance(drive.get("charge_balance"), Mapping):
            # One number for all units becomes a number for each.
            drive["charge_balance"] = tomlkit.inline_table()
            drive["charge_balance"].update(wanted.document["drive"]["charge_balance"])
    table = _descend(document, keys)
    if isinstance(table, MutableSequence):
        table[int(last)] = value
        return
    if orientation_group(path) is not None and last not in table:
        for other in ORIENTATION_KEYS:
            table.pop(other, None)
    table[last] = value


def _descend(document: MutableMapping[str, Any], keys: list[str]) -> Any:
    import tomlkit

    place: Any = document
    for key in keys:
        if isinstance(place, MutableSequence):
            named = [one for one in place if isinstance(one, Mapping) and one.get("name") == key]
            place = named[0] if named else place[int(key)]
            continue
        if key not in place:
            place[key] = tomlkit.table() if place is document else tomlkit.inline_table()
        place = place[key]
    return place


def _table_paths(place: Any) -> Iterator[tuple[MutableMapping[str, Any], str]]:
    """Every mapping and key in a case file that names a table."""
    entries = place.items() if isinstance(place, MutableMapping) else enumerate(place)
    for key, value in list(entries):
        if isinstance(place, MutableMapping) and key in _TABLE_KEYS and isinstance(value, str):
            yield place, str(key)
        elif isinstance(value, Mapping | list):
            yield from _table_paths(value)


def _moved(path: str, old: Path, new: Path) -> str:
    """Path of a table as seen from another folder; bundled spectra and full paths as they are."""
    file = old / path
    if Path(path).is_absolute() or old.resolve() == new or not file.is_file():
        return path
    return Path(os.path.relpath(file.resolve(), new)).as_posix()


def _content(case: Case) -> tuple[Any, list[str]]:
    """What a case says, but for the names of its tables, and the hashes of those."""
    document = case.document
    for table, key in list(_table_paths(document)):
        table[key] = ""
    return document, sorted(table.sha256 for table in case.tables)
