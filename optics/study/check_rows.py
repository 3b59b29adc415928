"""Rows of a check: one number of the engine beside the same number found another way."""

from __future__ import annotations

import math
from dataclasses import asdict, dataclass
from typing import Any, Literal

Verdict = Literal["pass", "fail", "not checked"]

#: Kind of row -> (what the difference is a fraction of, why the tolerance is what it is).
KINDS: dict[str, tuple[str, str]] = {
    "far field": (
        "largest value among the angles of this side, wavelength, position and dipole",
        "both are closed expressions, so only rounding may part them: 1e-16, magnified by the "
        "phases of films (up to 1e3 rad) and by resonances (up to 1e4)",
    ),
    "light from outside": (
        "the incident power",
        "both are closed expressions, so only rounding may part them: 1e-16, magnified by the "
        "phases of films (up to 1e3 rad) and by resonances (up to 1e4)",
    ),
    "power": (
        "the dissipated power",
        "accuracy asked of the engine, and what the quadrature says of itself",
    ),
    "energy balance": (
        "the dissipated power (of a chain: the charge injected)",
        "accuracy asked of the engine: absorption comes from fields, the total from its own path",
    ),
    "all directions": (
        "the power of the same excitons in the bulk medium",
        "accuracy asked of the engine; the integral over angles is refined until it stands still",
    ),
    "average": (
        "the value, or 1 where it is smaller",
        "the same sums in another order: rounding only",
    ),
}


@dataclass(frozen=True, slots=True)
class Row:
    """One comparison.

    Attributes
    ----------
    kind : str
        A key of `KINDS`.
    quantity, method : str
        What is compared, and how the independent value was found.
    emitter : str
    wavelength_nm, position_nm : float or None
        Position from the bottom face of the emitter film.
    orientation : {"vertical", "horizontal"} or None
    side : {"bottom", "top"} or None
    angle_deg : float or None
        In the medium next to the films on that side.
    polarization : {"s", "p"} or None
    engine, independent, difference, tolerance : float or None
        None where nothing was compared.
    difference_of, tolerance_reason : str
    result : {"pass", "fail", "not checked"}
    note : str
        Why something was not checked, or what was done to be able to check it.
    """

    kind: str
    quantity: str
    method: str
    emitter: str
    wavelength_nm: float | None
    position_nm: float | None
    orientation: str | None
    side: str | None
    angle_deg: float | None
    polarization: str | None
    engine: float | None
    independent: float | None
    difference: float | None
    tolerance: float | None
    difference_of: str
    tolerance_reason: str
    result: Verdict
    note: str

    @property
    def ratio(self) -> float | None:
        """Difference over tolerance; infinite where a value is not a number at all."""
        if self.difference is None or self.tolerance is None:
            return None
        ratio = self.difference / self.tolerance
        return ratio if math.isfinite(ratio) else math.inf

    def to_dict(self) -> dict[str, Any]:
        """Plain types only."""
        return asdict(self)


@dataclass(frozen=True, slots=True)
class Place:
    """Where a comparison is made; fields as in `Row`."""

    emitter: str
    wavelength_nm: float | None = None
    position_nm: float | None = None
    orientation: str | None = None
    side: str | None = None
    angle_deg: float | None = None
    polarization: str | None = None


def compared(
    kind: str,
    quantity: str,
    method: str,
    place: Place,
    engine: float,
    independent: float,
    scale: float,
    tolerance: float,
    note: str = "",
) -> Row:
    """Compare two values; anything but a finite difference within the tolerance fails.

    scale : float
        What the difference is divided by; where it is 0 both values must be 0.
    """
    gap = abs(engine - independent)
    difference = 0.0 if gap == 0.0 else gap / scale if scale > 0.0 else math.inf
    difference = math.inf if math.isnan(difference) else difference
    result: Verdict = "pass" if difference <= tolerance else "fail"
    return Row(
        kind,
        quantity,
        method,
        **asdict(place),
        engine=float(engine),
        independent=float(independent),
        difference=float(difference),
        tolerance=float(tolerance),
        difference_of=KINDS[kind][0],
        tolerance_reason=KINDS[kind][1],
        result=result,
        note=note,
    )


def not_checked(kind: str, quantity: str, method: str, place: Place, reason: str) -> Row:
    """Say what was left out, and why."""
    return Row(
        kind,
        quantity,
        method,
        **asdict(place),
        engine=None,
        independent=None,
        difference=None,
        tolerance=None,
        difference_of=KINDS[kind][0],
        tolerance_reason=KINDS[kind][1],
        result="not checked",
        note=reason,
    )
