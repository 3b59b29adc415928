"""What a reader should be reminded of beyond optics: one line each."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from optics.device.case import Case

#: Emission counts as rich in blue where its mean peak lies below this wavelength.
BLUE_BELOW_NM = 500.0

#: Emission counts as bright above this luminance (IEC 62471, from memory: below it a white
#: source needs no spectral evaluation).
BRIGHT_CD_M2 = 1e4

BRIGHT = (
    "bright emission, computed and not measured; this is no photobiological safety assessment "
    "(IEC 62471)"
)
PHOTOBIOLOGICAL = "emission rich in blue; this is no photobiological safety assessment (IEC 62471)"
ELECTRICAL = (
    "the case states an electrical drive; work on it by your local rules and licensed practice"
)


def cautions(
    case: Case, result: Mapping[str, Any], brightest_cd_m2: float | None = None
) -> tuple[str, ...]:
    """Reminders for a case and its light budget.

    Parameters
    ----------
    case : Case
    result : mapping
        As ``budget --json`` writes it. Its efficiencies weigh the peaks of the emitters.
    brightest_cd_m2 : float or None
        Largest luminance of the lit area, where it is known.
    """
    said = []
    peak_nm = mean_peak_nm(case, result)
    if peak_nm is not None and peak_nm < BLUE_BELOW_NM:
        said.append(PHOTOBIOLOGICAL)
    elif brightest_cd_m2 is not None and brightest_cd_m2 > BRIGHT_CD_M2:
        said.append(BRIGHT)
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


def brightest_cd_m2(case: Case, result: Mapping[str, Any]) -> float | None:
    """Largest luminance of the lit area at any angle; None without a current density.

    Parameters
    ----------
    case : Case
    result : mapping
        As ``angular --json`` writes it.
    """
    curves = [side["luminance_cd_m2"] or () for side in result["sides"].values()]
    known = [value for curve in curves for value in curve if value is not None]
    lit = case.drive.aperture_ratio * case.drive.duty
    return max(known) / lit if known else None
