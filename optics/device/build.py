"""From a document to the objects of a case, or to every fault in it."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.device.address import ORIENTATION_KEYS
from optics.device.door import shown
from optics.device.draft import Draft, grid_text
from optics.device.drive import ByUnit, Drive, Side, Sides
from optics.device.emission import make_emitters
from optics.device.emitter import ISOTROPIC_FRACTION, Emitter, horizontal_fraction_from
from optics.device.errors import CaseError, nearest
from optics.device.layering import make_stack
from optics.device.loader import Files, table_use
from optics.device.materials import TableUse, span_text
from optics.device.schema import DEFAULT_UNIT, CaseModel, SideModel
from optics.device.stack import Stack
from optics.device.studies import check_studies

if TYPE_CHECKING:
    from numpy.typing import NDArray


@dataclass(frozen=True, slots=True, eq=False)
class Built:
    """Everything that follows from a document; the attributes are those of `Case`."""

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
    sha256: str

    def __setstate__(self, state: list[Any]) -> None:
        """Restore from a pickle; arrays are read-only again."""
        for name, value in zip(self.__dataclass_fields__, state, strict=True):
            if isinstance(value, np.ndarray):
                value.setflags(write=False)
            object.__setattr__(self, name, value)


def build(document: Mapping[str, Any], files: Files, label: str) -> Built:
    """Check a document and make its objects.

    Parameters
    ----------
    document : mapping
        As read from the case file.
    files : Files
        Tables of the case.
    label : str
        How messages call the case.

    Raises
    ------
    CaseError
        With every fault.
    """
    draft = Draft.start(document, files, label)
    stack = make_stack(draft)
    emitters = make_emitters(draft, stack)
    drive = _drive(draft)
    sides = _sides(draft)
    resolved = _resolved(draft.model) if draft.model else None
    check_studies(draft, resolved)
    if draft.faults.found:
        raise CaseError(dict.fromkeys(draft.faults.found))
    # Without a fault all of these are there; the checker cannot know.
    assert draft.model is not None
    assert resolved is not None
    assert draft.grid_nm is not None
    assert draft.every_nm is not None
    assert stack is not None
    assert drive is not None
    tables = tuple(dict.fromkeys(draft.tables))
    return Built(
        title=draft.model.title,
        wavelength_nm=draft.grid_nm,
        every_wavelength_nm=draft.every_nm,
        stack=stack,
        emitters=emitters,
        drive=drive,
        sides=sides,
        tables=tables,
        warnings=tuple(draft.warnings),
        document=resolved,
        sha256=_sha256(resolved, draft.grid_nm, drive, files.hashes(), tables),
    )


def _drive(draft: Draft) -> Drive | None:
    part = draft.parts.drive
    if part is None:
        return None
    units = tuple(
        dict.fromkeys(str(raw.get("unit", DEFAULT_UNIT)) for raw in draft.raw("emitters"))
    )
    balance = part.charge_balance
    if isinstance(balance, dict):
        _check_units(draft, balance, units)
        by_unit = ByUnit(tuple((unit, balance[unit]) for unit in units if unit in balance))
    else:
        by_unit = ByUnit(tuple((unit, balance) for unit in units))
    return Drive(
        charge_balance=by_unit,
        current_density_mA_cm2=part.current_density_mA_cm2,
        voltage_V=part.voltage_V,
        aperture_ratio=part.aperture_ratio,
        duty=part.duty,
    )


def _check_units(draft: Draft, balance: Mapping[str, float], units: tuple[str, ...]) -> None:
    """Check that a charge balance by unit names every unit of the emitters and no other."""
    key = "drive.charge_balance"
    for unit in balance:
        if unit not in units:
            expected = f"a unit of the emitters: {', '.join(units)}"
            found = f"a value for {shown(unit)}, no such unit"
            draft.faults.add(f"{key}.{unit}", found, expected, nearest(unit, units))
    for unit in units:
        if unit not in balance:
            draft.faults.add(f"{key}.{unit}", "nothing", "a charge balance for every unit")


def _sides(draft: Draft) -> Sides:
    part = draft.parts.sides
    if part is None:
        return Sides()
    return Sides(_side(draft, "bottom", part.bottom), _side(draft, "top", part.top))


def _side(draft: Draft, name: str, part: SideModel) -> Side:
    if part.filter is None:
        return Side(None, part.polarizer_transmittance)
    key = f"sides.{name}.filter"
    curve = draft.files.curve(part.filter, "transmittance", key, draft.faults, "wavelength_nm")
    if curve is not None:
        draft.tables.append(table_use(curve))
        if curve.y.max() > 1:
            draft.faults.add(key, f"a transmittance of {curve.y.max():.6g}", "at most 1")
        every = draft.every_nm
        if every is not None and (every[0] < curve.x[0] or every[-1] > curve.x[-1]):
            found = f"a table from {span_text((float(curve.x[0]), float(curve.x[-1])))}"
            expected = f"a table over every wavelength of the case, {grid_text(every)}"
            draft.faults.add(key, found, expected)
    return Side(curve, part.polarizer_transmittance)


def _resolved(model: CaseModel) -> dict[str, Any]:
    """Document with every default filled in."""
    document = model.model_dump(by_alias=True, exclude_none=True)
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
