"""Numbers that a study varies: their units, and whether the case takes a value."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

from optics.device.errors import CaseError, Fault

if TYPE_CHECKING:
    from optics.device.case import Case

_UNITS = {
    "_nm": "nm",
    "_mm": "mm",
    "_eV": "eV",
    "_V": "V",
    "_mA_cm2": "mA/cm2",
}


def path_unit(path: str) -> str:
    """Unit by the end of an address; 1 for ratios."""
    return next((unit for end, unit in _UNITS.items() if path.endswith(end)), "1")


def refused(case: Case, changes: Mapping[str, float]) -> tuple[Fault, ...]:
    """Faults of the case with other values at some addresses; none if there is such a device."""
    try:
        case.replace_all(changes)
    except CaseError as error:
        return error.faults
    return ()
