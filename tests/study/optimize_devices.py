"""Landscapes with closed forms, and small cases with an `[optimize]` table. Numbers invented."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from devices import case
from sweep_devices import EQE, ETL, HTL, coarse

from optics.study.optimize_local import Polished, Start, polish

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case

    Floats = NDArray[np.float64]

BOUNDS = {HTL: {"min": 20, "max": 120}, ETL: {"min": 20, "max": 120}}


def optimized(variables: dict[str, Any] | None = None, **table: Any) -> Case:
    """Return a coarse pixel with an optimization; of the EQE over two films if not said."""
    document = coarse()
    if not {"maximize", "minimize", "objectives"} & set(table):
        table["maximize"] = EQE
    document["optimize"] = {"variables": BOUNDS if variables is None else variables, **table}
    return case(document)


@dataclass(frozen=True)
class Ripples:
    """Product of cosines that falls slowly, and the sum of the coordinates."""

    size: int

    def value(self, unit: Floats) -> Floats:
        """Outcomes (2,) at a point."""
        waves = 0.6 + 0.4 * np.cos(9.1 * (unit - 0.15) * (1.0 + 0.07 * np.arange(self.size)))
        total = float(unit.sum())
        return np.array([float(np.prod(waves)) * np.exp(-0.1 * total), total])

    def slope(self, unit: Floats) -> Floats:
        """Derivatives (2, p) by differences."""
        step = 1e-5 * np.eye(self.size)
        rows = [(self.value(unit + one) - self.value(unit - one)) / 2e-5 for one in step]
        return np.stack(rows, axis=1)


@dataclass
class Worker:
    """Computes in this thread, and counts."""

    landscape: Any
    asked: int = 0
    starts: list[Start] = field(default_factory=list)

    def ask(self, units: Floats) -> Floats:
        """Outcomes at points."""
        self.asked += len(units)
        return np.array([self.landscape.value(unit) for unit in units])

    def polish(self, starts: list[Start]) -> list[Polished | None]:
        """Ends of starts."""
        self.starts += starts
        return [polish(start) for start in starts]
