"""Check what the emitters of a unit have to fulfill together."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from optics.device.door import shown
from optics.device.draft import Draft
from optics.device.errors import nearest
from optics.device.salvage import doubtful, known
from optics.device.schema import DEFAULT_UNIT

# Shares are typed as decimals: their sum may miss 1 by rounding only.
SHARE_SUM_SLACK = 1e-9


def unit_names(draft: Draft) -> tuple[str | None, ...]:
    """Unit of every emitter, by the document even where it is no name; None where not known."""
    return tuple(
        _unit(part, raw)
        for part, raw in zip(draft.parts.emitters, draft.raw("emitters"), strict=True)
    )


def _unit(part: Any, raw: Mapping[str, Any]) -> str | None:
    unit = raw.get("unit", DEFAULT_UNIT)
    if part is None or doubtful(part, "unit") or not isinstance(unit, str):
        return None
    return unit


def check_shares(draft: Draft) -> None:
    """Check that the shares of the emitters of a unit sum to 1.

    Emitters of unknown unit and unknown shares can only add to the others.
    """
    units = unit_names(draft)
    emitters = list(zip(units, draft.parts.emitters, draft.raw("emitters"), strict=True))
    for unit in dict.fromkeys(units):
        if unit is None:
            continue
        members = [(part, raw) for other, part, raw in emitters if other == unit]
        shares = [(known(part, "share"), raw.get("name", "?")) for part, raw in members]
        present = [(share, name) for share, name in shares if share is not None]
        total = math.fsum(share for share, _ in present)
        is_all = None not in units and len(present) == len(members)
        if total > 1 + SHARE_SUM_SLACK or (is_all and total < 1 - SHARE_SUM_SLACK):
            listed = " + ".join(f"{share:.10g}" for share, _ in present)
            names = ", ".join(str(name) for _, name in present)
            draft.faults.add(
                "emitters",
                f"shares {listed} = {total:.10g} in unit {unit} ({names})",
                "shares that sum to 1 within each unit",
            )


def check_charge_balance(draft: Draft) -> None:
    """Check that a charge balance by unit names every unit of the emitters and no other."""
    balance = known(draft.parts.drive, "charge_balance")
    found_units = unit_names(draft)
    units = [unit for unit in dict.fromkeys(found_units) if unit is not None]
    if not isinstance(balance, dict) or not units:
        return
    key = "drive.charge_balance"
    for unit in balance:
        if unit not in units and None not in found_units:
            expected = f"a unit of the emitters: {', '.join(units)}"
            found = f"a value for {shown(unit)}, no such unit"
            draft.faults.add(f"{key}.{unit}", found, expected, nearest(unit, units))
    for unit in units:
        if unit not in balance:
            draft.faults.add(f"{key}.{unit}", "nothing", "a charge balance for every unit")
