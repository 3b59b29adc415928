"""Small cases with a `[tolerance]` table. All numbers invented."""

from __future__ import annotations

from typing import Any

from devices import case
from sweep_devices import coarse

from optics.device.case import Case

HTL, ETL = "layers.HTL.thickness_nm", "layers.ETL.thickness_nm"
YIELD = "emitters.green.quantum_yield"
EQE, GUIDED = "external_quantum_efficiency", "destinations.guided"
SPREAD = {HTL: {"sd": 2.0}, ETL: {"relative_sd": 0.05}, YIELD: {"half_width": 0.03}}


def spread_out(
    spread: dict[str, Any] | None = None, *, document: dict[str, Any] | None = None, **table: Any
) -> Case:
    """Return a coarse pixel, or a document, with a tolerance study."""
    document = coarse() if document is None else document
    document["tolerance"] = {"spread": SPREAD if spread is None else spread, **table}
    return case(document)
