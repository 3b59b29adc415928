"""The case: a device as its user describes it, read and checked at this door."""

from __future__ import annotations

import copy
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.device.address import changed, value_at
from optics.device.build import Built, build
from optics.device.errors import CaseError, Fault, nearest
from optics.device.loader import Files
from optics.device.rebuild import rebuilt
from optics.device.schema import json_schema

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.drive import Drive, Sides
    from optics.device.emitter import Emitter
    from optics.device.materials import TableUse
    from optics.device.stack import Stack

__all__ = ["Case", "case_from_dict", "json_schema", "read_case"]


@dataclass(frozen=True, slots=True, eq=False)
class Case:
    """A checked device with its drive; immutable.

    Attributes
    ----------
    label : str
        How messages call it: the file as the user named it.
    source_path : Path or None
        The case file; None for a case made from a dictionary.
    """

    label: str
    source_path: Path | None
    _built: Built

    @property
    def title(self) -> str:
        """Title of the case."""
        return self._built.title

    @property
    def wavelength_nm(self) -> NDArray[np.float64]:
        """Ascending wavelength grid in nm, shape (n,), read-only."""
        return self._built.wavelength_nm

    @property
    def every_wavelength_nm(self) -> NDArray[np.float64]:
        """Grid and spectral lines together in nm: "any wavelength of the case"; read-only."""
        return self._built.every_wavelength_nm

    @property
    def stack(self) -> Stack:
        """Films, slabs and surroundings."""
        return self._built.stack

    @property
    def local_materials(self) -> frozenset[str]:
        """Names of the case's own materials, which stand before bundled ones."""
        return frozenset(self._built.document.get("materials", {}))

    @property
    def emitters(self) -> tuple[Emitter, ...]:
        """Emitters in the order of the file."""
        return self._built.emitters

    @property
    def units(self) -> tuple[str, ...]:
        """Emission units in the order in which the emitters name them."""
        return tuple(dict.fromkeys(emitter.unit for emitter in self.emitters))

    @property
    def drive(self) -> Drive:
        """Electrical side."""
        return self._built.drive

    @property
    def sides(self) -> Sides:
        """What stands outside either side."""
        return self._built.sides

    @property
    def sha256(self) -> str:
        """Hash of the resolved case and of the bytes of every table used.

        Independent of formatting, comments, order of keys and place of the files.
        """
        return self._built.sha256

    @property
    def tables(self) -> tuple[TableUse, ...]:
        """Every table the case rests on, each once."""
        return self._built.tables

    @property
    def warnings(self) -> tuple[str, ...]:
        """What the user should know although it is no fault."""
        return self._built.warnings

    @property
    def document(self) -> dict[str, Any]:
        """Resolved document with every default filled in, plain types only; a copy."""
        return copy.deepcopy(dict(self._built.document))

    def value(self, path: str) -> Any:
        """Value at a dotted address, such as ``layers.ETL.thickness_nm``.

        Raises
        ------
        CaseError
            If there is no such address.
        """
        return value_at(self._built.document, path, self.label)

    def replace(self, path: str, value: float | str) -> Case:
        """Copy with another value at a dotted address, checked like a case file.

        Parameters
        ----------
        path : str
            Such as ``layers.ETL.thickness_nm``; list entries by name.
        value : number or str
            The new value.

        Raises
        ------
        CaseError
            If there is no such address, or the changed case is at fault.
        """
        return self.replace_all({path: value})

    def replace_all(self, values: Mapping[str, float | str]) -> Case:
        """Copy with several values changed at once, checked when all are in place.

        Raises
        ------
        CaseError
            As `replace`.
        """
        built = rebuilt(self._built, values, self.label)
        if built is None:
            document = self._built.document
            for path, value in values.items():
                document = changed(document, path, value, self.label)
            built = build(document, self._built.files, self.label)
        return Case(self.label, self.source_path, built)


def exchanged(case: Case, **parts: Any) -> Case:
    """Copy of a case with some of its checked objects exchanged; nothing is checked again.

    Parameters
    ----------
    case : Case
    **parts
        Attributes of `Case` by name: ``emitters``, ``drive``, ``sides``.
    """
    return Case(case.label, case.source_path, replace(case._built, **parts))


def read_case(path: str | Path) -> Case:
    """Read and check a case file.

    Parameters
    ----------
    path : str or Path
        TOML file; paths in it are relative to its folder.

    Returns
    -------
    Case

    Raises
    ------
    CaseError
        With every fault of the file and of the tables it names.
    """
    file = Path(path)
    label = str(path)
    try:
        text = file.read_bytes().decode("utf-8-sig")
    except FileNotFoundError:
        raise _unreadable(label, "no such file", nearest(file.name, _neighbors(file))) from None
    except UnicodeDecodeError as error:
        raise _unreadable(label, f"a byte that is not UTF-8 at offset {error.start}") from None
    except OSError as error:
        raise _unreadable(label, error.strerror or "an unreadable file") from None
    try:
        document = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise CaseError([_syntax_fault(label, str(error), text)]) from None
    files = Files(file.parent)
    return Case(label, file, build(document, files, label, is_new=True))


def case_from_dict(
    document: Mapping[str, Any], base_folder: str | Path = ".", label: str = "case"
) -> Case:
    """Check a case given as a dictionary shaped like the case file.

    Parameters
    ----------
    document : mapping
        Plain numbers, strings, lists and dictionaries.
    base_folder : str or Path
        Paths in the document are relative to it.
    label : str
        How messages call the case.

    Raises
    ------
    CaseError
        With every fault.
    """
    files = Files(Path(base_folder))
    return Case(label, None, build(document, files, label, is_new=True))


def _neighbors(file: Path) -> list[str]:
    folder = file.parent
    return [entry.name for entry in folder.glob("*.toml")] if folder.is_dir() else []


def _unreadable(label: str, found: str, near: str | None = None) -> CaseError:
    return CaseError([Fault(label, "", found, "a case file in TOML", near)])


def _syntax_fault(label: str, message: str, text: str) -> Fault:
    """Fault from the parser's message, which ends in ``(at line 3, column 5)``."""
    reason, _, place = message.rpartition(" (at ")
    place = place.removesuffix(")")
    if place == "end of document" or not reason:
        place = f"line {len(text.splitlines())}"
    reason = reason or message
    return Fault(label, place, reason[:1].lower() + reason[1:], "valid TOML")
