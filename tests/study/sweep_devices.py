"""Small cases with a `[sweep]` table. All numbers invented."""

from __future__ import annotations

from typing import Any

from devices import case, pixel, tandem

from optics.device.case import Case

HTL, ETL = "layers.HTL.thickness_nm", "layers.ETL.thickness_nm"
EQE = "external_quantum_efficiency"
# Metals with eps nearer to zero may carry modes that run backward, and are never combined.
FAR_FROM_RESONANCE = {"n": 0.9, "k": 6.4}


def swept(axes: dict[str, Any], *, document: dict[str, Any] | None = None, **table: Any) -> Case:
    """Return a coarse pixel, or a document, with a sweep over the axes."""
    document = coarse() if document is None else document
    document["sweep"] = {"axes": axes, **table}
    return case(document)


def coarse() -> dict[str, Any]:
    """Return the pixel at few wavelengths with a point of emission."""
    document = pixel()
    document["wavelength"] = {"values_nm": [510, 545, 580]}
    document["materials"]["metal"] = FAR_FROM_RESONANCE
    document["emitters"][0]["zone"] = {"shape": "point", "at": 0.4}
    return document


def two_emitters() -> dict[str, Any]:
    """Return the tandem at few wavelengths."""
    document = tandem()
    document["wavelength"] = {"values_nm": [520, 560, 600]}
    document["materials"]["metal"] = FAR_FROM_RESONANCE
    return document
