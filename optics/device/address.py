"""Dotted addresses of the values in a case, such as ``layers.ETL.thickness_nm``."""

from __future__ import annotations

import copy
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from optics.device.emitter import horizontal_fraction_from, orientation_from
from optics.device.errors import CaseError, Fault, nearest

ORIENTATION_KEYS = ("horizontal_fraction", "vertical_fraction", "order_parameter")
_SECTIONS = (
    "title", "wavelength", "materials", "substrate", "cover", "surroundings", "sides", "layers",
    "emitters", "drive",
)  # fmt: skip
# A plain dictionary is told without asking what an abstract class takes for a table.
_TABLE = (dict, Mapping)
# Keys without a default: they may be set although the file leaves them out.
_OPTIONAL = frozenset(
    {
        ("drive", "current_density_mA_cm2"),
        ("drive", "voltage_V"),
        ("sides", "bottom", "filter"),
        ("sides", "top", "filter"),
    }
)


def addresses(document: Mapping[str, Any]) -> tuple[str, ...]:
    """Every address of a single value in a resolved document."""
    return tuple(path for path, _ in _single_values(document))


def numeric_addresses(document: Mapping[str, Any]) -> tuple[str, ...]:
    """Every address of a number in a resolved document."""
    return tuple(path for path, value in _single_values(document) if is_number(value))


def is_number(value: Any) -> bool:
    """Whether a value of a document is a number."""
    return isinstance(value, int | float) and not isinstance(value, bool)


def _single_values(document: Mapping[str, Any]) -> Iterator[tuple[str, Any]]:
    for section in _SECTIONS:
        if section in document:
            yield from _walk(document[section], section)


def _walk(value: Any, path: str) -> Iterator[tuple[str, Any]]:
    if isinstance(value, Mapping):
        for key, item in value.items():
            if _is_orientation(path.split("."), key):
                # Interchangeable; what one of them is, number or not, the others are.
                yield from ((f"{path}.{other}", item) for other in ORIENTATION_KEYS)
            else:
                yield from _walk(item, f"{path}.{key}")
    elif isinstance(value, list):
        for index, item in enumerate(value):
            name = item.get("name") if isinstance(item, Mapping) else None
            yield from _walk(item, f"{path}.{index if name is None else name}")
    else:
        yield path, value


def value_at(document: Mapping[str, Any], path: str, where: str) -> Any:
    """Value at an address of a resolved document.

    Parameters
    ----------
    document : mapping
        The resolved document of a case.
    path : str
        Dotted address; list entries by name (plain numbers in a list by their index from 0). The
        three orientation keys of an emitter are interchangeable.
    where : str
        How messages call the case.

    Raises
    ------
    CaseError
        If there is no such address; the message names the nearest one.
    """
    container, key = _locate(_opened(document, path), path, where)
    if isinstance(container, list):
        return container[int(key)]
    if key in container:
        return container[key]
    given = next((other for other in ORIENTATION_KEYS if other in container), None)
    if key not in ORIENTATION_KEYS or given is None:
        raise _unknown(document, path, where)
    return orientation_from(str(key), horizontal_fraction_from(given, container[given]))


def changed(document: Mapping[str, Any], path: str, value: Any, where: str) -> dict[str, Any]:
    """Copy of a resolved document with another value at an address; the rest is shared.

    Parameters
    ----------
    document, path, where
        As in `value_at`.
    value : number or str
        The new value; NumPy scalars become plain numbers.

    Raises
    ------
    CaseError
        If there is no such address; the message names the nearest one.
    """
    opened = _opened(document, path)
    _, key = _locate(opened, path, where)
    copied, container = _copied_along(opened, path)
    if isinstance(container, dict) and key in ORIENTATION_KEYS:
        for other in ORIENTATION_KEYS:
            container.pop(other, None)
    container[key] = value.item() if hasattr(value, "item") else value
    return copied


def _copied_along(document: dict[str, Any], path: str) -> tuple[dict[str, Any], Any]:
    """Copy in which tables and lists on the way to an address are new, and the last of them."""
    copied = container = dict(document)
    for key in path.split(".")[:-1]:
        step: Any = _step(container, key)
        container[step] = copy.copy(container[step])
        container = container[step]
    return copied, container


def orientation_group(path: str) -> str | None:
    """Emitter whose orientation a path addresses; None for every other path."""
    *keys, last = path.split(".")
    return keys[1] if _is_orientation(keys, last) else None


def _is_orientation(keys: list[str], last: str) -> bool:
    return last in ORIENTATION_KEYS and len(keys) == 2 and keys[0] == "emitters"


def _locate(document: Mapping[str, Any], path: str, where: str) -> tuple[Any, str | int]:
    """Table or list that holds a value, and the key or index of the value in it."""
    *keys, last = path.split(".")
    if not keys or keys[0] not in _SECTIONS:
        if path == "title":
            return document, path
        raise _unknown(document, path, where)
    container: Any = document
    for key in keys:
        step = _step(container, key)
        if step is None:
            raise _unknown(document, path, where)
        container = container[step]
    step = _step(container, last)
    if step is not None:
        return container, step
    settable = _is_orientation(keys, last) or (*keys, last) in _OPTIONAL
    if isinstance(container, Mapping) and settable:
        return container, last
    raise _unknown(document, path, where)


def _step(container: Any, key: str) -> str | int | None:
    """Key or index of an entry, by name where the entries have names."""
    if isinstance(container, _TABLE):
        return key if key in container else None
    if not isinstance(container, list):
        return None
    for index, item in enumerate(container):
        if isinstance(item, _TABLE) and item.get("name") == key:
            return index
    if key.isascii() and key.isdigit() and int(key) < len(container):
        return None if isinstance(container[int(key)], Mapping) else int(key)
    return None


def _opened(document: Mapping[str, Any], path: str) -> dict[str, Any]:
    """Shallow copy in which a charge balance that is one number is a table by unit.

    Only where the path asks for a unit.
    """
    opened = dict(document)
    balance = document.get("drive", {}).get("charge_balance")
    if path.startswith("drive.charge_balance.") and not isinstance(balance, Mapping):
        by_unit = {emitter["unit"]: balance for emitter in document["emitters"]}
        opened["drive"] = {**document["drive"], "charge_balance": by_unit}
    return opened


def nearest_address(path: str, candidates: Sequence[str]) -> str | None:
    """Return the address that looks most like `path`, or that begins most like a short one."""
    depth = path.count(".") + 1
    heads: dict[str, str] = {}
    for candidate in candidates:
        heads.setdefault(".".join(candidate.split(".")[:depth]), candidate)
    head = nearest(path, heads)
    return heads[head] if head is not None else nearest(path, candidates)


def _unknown(document: Mapping[str, Any], path: str, where: str) -> CaseError:
    near = nearest_address(path, addresses(document))
    expected = "the address of a value, such as layers.NAME.thickness_nm"
    return CaseError([Fault(where, path, "no such address", expected, near)])
