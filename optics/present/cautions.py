"""What a reader should be reminded of beyond optics: one line each."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from optics.device.case import Case

#: Emission counts as rich in blue where its mean peak lies below this wavelength.
BLUE_BELOW_NM = 500.0

PHOTOBIOLOGICAL = "emission rich in blue; this is no photobiological safety assessment (IEC 62471)"
ELECTRICAL = (
    "the case states an electrical drive; work on it by your local rules and licensed practice"
)


def cautions(case: Case, result: Mapping[str, Any]) -> tuple[str, ...]:
    """Reminders for a case and its light budget.

    Parameters
    ----------
    case : Case
    result : mapping
        As ``budget --json`` writes it. Its efficiencies weigh the peaks of the emitters.
    """
    said = []
    peak_nm = mean_peak_nm(case, result)
    if peak_nm is not None and peak_nm < BLUE_BELOW_NM:
        said.append(PHOTOBIOLOGICAL)
    if case.drive.current_density_mA_cm2 is not None or case.drive.voltage_V is not None:
        said.append(ELECTRICAL)
    return tuple(said)


def mean_peak_nm(case: Case, result: Mapping[str, Any]) -> float | None:
    """Mean peak wavelength in nm of the light that leaves, weighted by EQE; None without light."""
    weights = [one["external_quantum_efficiency"] or 0.0 for one in result["emitters"]]
    total = sum(weights)
    if total == 0.0:
        return None
    peaks = [emitter.spectrum.peak_nm for emitter in case.emitters]
    return sum(weight * peak for weight, peak in zip(weights, peaks, strict=True)) / total
