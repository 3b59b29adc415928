"""From a document to the objects of a case, or to every fault in it."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.device.address import ORIENTATION_KEYS
from optics.device.draft import Draft, grid_text
from optics.device.drive import ByUnit, Drive, Side, Sides
from optics.device.emission import make_emitters
from optics.device.emitter import ISOTROPIC_FRACTION, Emitter, horizontal_fraction_from
from optics.device.errors import CaseError
from optics.device.layering import Outline, make_stack
from optics.device.loader import Files, table_use
from optics.device.materials import TableUse, span_text
from optics.device.salvage import known, plain_types
from optics.device.schema import DEFAULT_UNIT, CaseModel, SideModel
from optics.device.stack import Stack
from optics.device.studies import check_studies, check_study_names
from optics.device.units import check_charge_balance

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.tables import Curve


@dataclass(frozen=True, eq=False)  # without slots, so that the hash is made when it is asked for
class Built:
    """Everything that follows from a document; most attributes are those of `Case`.

    The parsed document and the outline of the stack are kept for `rebuild`.
    """

    title: str
    wavelength_nm: NDArray[np.float64]
    every_wavelength_nm: NDArray[np.float64]
    stack: Stack
    emitters: tuple[Emitter, ...]
    drive: Drive
    sides: Sides
    tables: tuple[TableUse, ...]
    warnings: tuple[str, ...]
    document: Mapping[str, Any]
    files: Files
    model: CaseModel
    outline: Outline

    @cached_property
    def sha256(self) -> str:
        """Hash of the resolved case and of the bytes of every table used."""
        return _sha256(
            self.document, self.wavelength_nm, self.drive, self.files.hashes(), self.tables
        )

    def __setstate__(self, state: dict[str, Any]) -> None:
        """Restore from a pickle; arrays are read-only again."""
        for value in state.values():
            if isinstance(value, np.ndarray):
                value.setflags(write=False)
        self.__dict__.update(state)


def build(document: Mapping[str, Any], files: Files, label: str, *, is_new: bool = False) -> Built:
    """Check a document and make its objects.

    Parameters
    ----------
    document : mapping
        As read from the case file.
    files : Files
        Tables of the case.
    label : str
        How messages call the case.
    is_new : bool
        Whether it is read and not a changed copy; then the names in its studies are told with
        other faults.

    Raises
    ------
    CaseError
        With every fault.
    """
    draft = Draft.start(document, files, label)
    stack, outline = make_stack(draft)
    emitters = make_emitters(draft, stack, outline)
    drive = _drive(draft)
    sides = _sides(draft)
    resolved = _resolved(draft)
    check_studies(draft, resolved)
    if is_new and draft.faults.found:
        check_study_names(draft, resolved)
    if draft.faults.found:
        raise CaseError(dict.fromkeys(draft.faults.found))
    # Without a fault all of these are there; the checker cannot know.
    assert draft.model is not None
    assert draft.grid_nm is not None
    assert draft.every_nm is not None
    assert stack is not None
    assert drive is not None
    return Built(
        title=draft.model.title,
        wavelength_nm=draft.grid_nm,
        every_wavelength_nm=draft.every_nm,
        stack=stack,
        emitters=emitters,
        drive=drive,
        sides=sides,
        tables=tuple(dict.fromkeys(draft.tables)),
        warnings=tuple(draft.warnings),
        document=resolved,
        files=files,
        model=draft.model,
        outline=outline,
    )


def _drive(draft: Draft) -> Drive | None:
    """Electrical side; None if the document is at fault."""
    check_charge_balance(draft)
    part = draft.parts.drive
    if part is None or draft.model is None:
        return None
    units = dict.fromkeys(emitter.unit for emitter in draft.model.emitters)
    balance = part.charge_balance
    pairs = ((unit, balance.get(unit) if isinstance(balance, dict) else balance) for unit in units)
    return Drive(
        charge_balance=ByUnit(tuple((unit, value) for unit, value in pairs if value is not None)),
        current_density_mA_cm2=part.current_density_mA_cm2,
        voltage_V=part.voltage_V,
        aperture_ratio=part.aperture_ratio,
        duty=part.duty,
    )


def _sides(draft: Draft) -> Sides:
    part = draft.parts.sides
    return Sides(
        _side(draft, "bottom", known(part, "bottom")), _side(draft, "top", known(part, "top"))
    )


def _side(draft: Draft, name: str, part: SideModel | None) -> Side:
    path, transmittance = known(part, "filter"), known(part, "polarizer_transmittance")
    curve = None if path is None else _filter(draft, f"sides.{name}.filter", path)
    # Where the transmittance is not known the document is at fault and no side comes of it.
    return Side(curve, 1.0 if transmittance is None else transmittance)


def _filter(draft: Draft, key: str, path: str) -> Curve | None:
    curve = draft.files.curve(path, "transmittance", key, draft.faults, "wavelength_nm")
    if curve is not None:
        draft.tables.append(table_use(curve))
        if curve.y.max() > 1:
            draft.faults.add(key, f"a transmittance of {curve.y.max():.6g}", "at most 1")
        every = draft.every_nm
        if every is not None and (every[0] < curve.x[0] or every[-1] > curve.x[-1]):
            found = f"a table from {span_text((float(curve.x[0]), float(curve.x[-1])))}"
            expected = f"a table over every wavelength of the case, {grid_text(every)}"
            draft.faults.add(key, found, expected)
    return curve


def _resolved(draft: Draft) -> dict[str, Any]:
    """Document with every default filled in; of a document at fault what can be used."""
    if draft.model is not None:
        document = draft.model.model_dump(by_alias=True, exclude_none=True)
    else:
        document = {"emitters": [], "drive": {}, **plain_types(draft.salvaged)}
        for emitter in document["emitters"]:
            emitter.setdefault("unit", DEFAULT_UNIT)
    for emitter in document["emitters"]:
        if not any(key in emitter for key in ORIENTATION_KEYS):
            emitter["horizontal_fraction"] = ISOTROPIC_FRACTION
    return document


def _sha256(
    resolved: Mapping[str, Any],
    grid_nm: NDArray[np.float64],
    drive: Drive,
    hashes: Mapping[str, str],
    tables: tuple[TableUse, ...],
) -> str:
    """Hash of what a case says, in one spelling, and of the bytes of its tables."""
    canonical = {**resolved, "wavelength": [float(value) for value in grid_nm]}
    canonical["drive"] = {**resolved["drive"], "charge_balance": dict(drive.charge_balance)}
    canonical["emitters"] = [_canonical_emitter(entry) for entry in resolved["emitters"]]
    content = {
        "case": _with_hashes(canonical, hashes),
        "tables": sorted({use.sha256 for use in tables}),
    }
    text = json.dumps(content, sort_keys=True, ensure_ascii=True, allow_nan=False)
    return hashlib.sha256(text.encode("ascii")).hexdigest()


def _canonical_emitter(entry: Mapping[str, Any]) -> dict[str, Any]:
    """Emitter with its orientation as horizontal_fraction, whichever key the file uses."""
    given = next(key for key in ORIENTATION_KEYS if key in entry)
    plain = {key: value for key, value in entry.items() if key != given}
    return {**plain, "horizontal_fraction": horizontal_fraction_from(given, entry[given])}


def _with_hashes(value: Any, hashes: Mapping[str, str]) -> Any:
    """Copy in which the path of every table is replaced by the hash of its bytes."""
    if isinstance(value, Mapping):
        return {
            key: hashes.get(item, item)
            if key in ("table", "filter") and isinstance(item, str)
            else _with_hashes(item, hashes)
            for key, item in value.items()
        }
    if isinstance(value, list):
        return [_with_hashes(item, hashes) for item in value]
    return value
