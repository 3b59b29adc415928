"""Emission against angle: radiance, luminance and color on both sides of a device."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from optics._version import VERSION
from optics.outcome.budget import DEFAULT_TOLERANCE, Accuracy, Budget, budget
from optics.outcome.color import ACCURATE_DUV, observer_at
from optics.outcome.directional import SIDES, Source, sources
from optics.outcome.side import SideAngular, side_angular
from optics.outcome.spectra import (
    Spectra,
    angular_dataset,
    angular_frame,
    curves_dataset,
    gather,
    spectra_dict,
)
from optics.outcome.view import View

if TYPE_CHECKING:
    import pandas
    import xarray

    from optics.device.case import Case
    from optics.device.materials import TableUse

SCHEMA = "outcouple.angular/1"
DEFAULT_ANGLES_DEG = tuple(float(angle) for angle in range(91))
_FAINT_SHARE = 1e-3  # of the light that leaves: nobody rates the color of such a side


@dataclass(frozen=True, slots=True)
class Angular:
    """Emission of a device against angle.

    Attributes
    ----------
    title, case_sha256 : str
    sides : mapping of str to SideAngular
        ``bottom`` and ``top``.
    accuracy : Accuracy
        Of the light budget that the integrals over angle are taken from.
    warnings : tuple of str
    tables : tuple of TableUse
        Tables of optical constants and spectra behind the numbers.
    budget : Budget
        Light budget of the case, before filter and polarizer.
    """

    title: str
    case_sha256: str
    sides: Mapping[str, SideAngular]
    accuracy: Accuracy
    warnings: tuple[str, ...]
    tables: tuple[TableUse, ...]
    budget: Budget
    _spectra: Spectra

    @property
    def spectral(self) -> xarray.Dataset:
        """Spectral radiance by side, angle_deg, wavelength_nm and polarization (s, p).

        Per area and current, and per area where the case states a current density. Lines are
        apart, by line_nm and not per nm.
        """
        return angular_dataset(self._spectra, self._head())

    def to_dict(self, *, spectral: bool = False, polarization: bool = False) -> dict[str, Any]:
        """Build the JSON result, ``outcouple.angular/1``: plain types only.

        Parameters
        ----------
        spectral : bool
            With spectral radiance by angle and wavelength.
        polarization : bool
            With radiance and luminance of s and p apart.
        """
        sides = {}
        for place, (name, side) in enumerate(self.sides.items()):
            sides[name] = side.to_dict(polarization=polarization)
            if spectral:
                sides[name] |= spectra_dict(self._spectra, place)
        return {
            **self._head(),
            "sides": sides,
            "accuracy": self.accuracy.to_dict(),
            "warnings": list(self.warnings),
        }

    def to_frame(self, *, spectral: bool = False, polarization: bool = False) -> pandas.DataFrame:
        """Build a long table: side, angle_deg, wavelength_nm, quantity, value, unit."""
        return angular_frame(self.to_dict(spectral=spectral, polarization=polarization)["sides"])

    def to_dataset(self) -> xarray.Dataset:
        """Build labelled arrays: `spectral`, every curve by side and angle, numbers by side."""
        curves = curves_dataset(self.to_dict(polarization=True)["sides"])
        said = {**self.accuracy.to_dict(), "warnings": "\n".join(self.warnings)}
        merged: xarray.Dataset = self.spectral.merge(curves).assign_attrs(said)
        return merged

    def _head(self) -> dict[str, Any]:
        return {
            "schema": SCHEMA,
            "version": VERSION,
            "title": self.title,
            "case_sha256": self.case_sha256,
        }


def angular(
    case: Case,
    angles_deg: Sequence[float] = DEFAULT_ANGLES_DEG,
    tolerance: float = DEFAULT_TOLERANCE,
) -> Angular:
    """Compute emission against angle, with luminance and color.

    Parameters
    ----------
    case : Case
        From `optics.read_case`.
    angles_deg : sequence of float
        0 to 90, in the medium outside; in the slab's medium where its exit is matched. They
        say what is listed; integrals over angle do not depend on them.
    tolerance : float
        Wanted accuracy of what leaves at all angles together, as a fraction of the dissipated
        power.

    Returns
    -------
    Angular

    Raises
    ------
    ValueError
        If an angle lies outside 0 to 90 or is given twice, or as `budget`.

    Examples
    --------
    >>> import optics
    >>> result = optics.angular(optics.read_case("cases/green-bottom-pixel.toml"), [0, 60])
    >>> result.sides["bottom"].current_efficiency_cd_A  # doctest: +SKIP
    """
    angles = _checked(angles_deg)
    outcome = budget(case, tolerance)
    emitting = sources(case, outcome.lit)
    views = [View(case, emitting, side, angles, thorough=True) for side in range(2)]
    sides = {name: side_angular(view) for name, view in zip(SIDES, views, strict=True)}
    return Angular(
        title=case.title,
        case_sha256=case.sha256,
        sides=MappingProxyType(sides),
        accuracy=outcome.accuracy,
        warnings=outcome.warnings + tuple(_warnings(case, emitting, sides)),
        tables=outcome.tables,
        budget=outcome,
        _spectra=gather(case, emitting, angles, views),
    )


def faults_of_angles(angles_deg: Sequence[float]) -> list[str]:
    """What is wrong with a list of angles, one line each; empty if nothing is."""
    if len(angles_deg) == 0:
        return ["angles: found none; expected angles in degrees from 0 to 90"]
    faults = [
        f"angles: found {angle:g}; expected degrees from 0 to 90"
        for angle in angles_deg
        if not 0.0 <= angle <= 90.0
    ]
    twice = sorted({angle for angle in angles_deg if list(angles_deg).count(angle) > 1})
    faults += [f"angles: found {angle:g} twice; expected every angle once" for angle in twice]
    return faults


def _checked(angles_deg: Sequence[float]) -> np.ndarray[Any, np.dtype[np.float64]]:
    faults = faults_of_angles(angles_deg)
    if faults:
        raise ValueError("\n".join(faults))
    return np.abs(np.array(angles_deg, dtype=np.float64))  # -0 is 0


def _warnings(
    case: Case, emitting: Sequence[Source], sides: Mapping[str, SideAngular]
) -> list[str]:
    checks = (
        partial(_blind, case, emitting),
        partial(_about_sides, sides),
    )
    return [line for check in checks for line in check()]


def _blind(case: Case, emitting: Sequence[Source]) -> list[str]:
    """Emitters whose whole spectrum the standard observer does not see."""
    return [
        f"emitter {one.emitter.name}: all its light lies outside 360 to 830 nm; it adds nothing "
        "to luminance and color"
        for one in emitting
        if not np.any((observer_at(one.wavelength_nm)[:, 1] > 0.0) & (one.watts > 0.0))
        and np.any(one.watts > 0.0)
    ]


def _about_sides(sides: Mapping[str, SideAngular]) -> list[str]:
    said = []
    total = sum(side.external_quantum_efficiency for side in sides.values())
    for name, side in sides.items():
        if side.external_quantum_efficiency == 0.0:
            continue
        if side.normal_is_dark:
            said.append(
                f"side {name}: no visible light along the normal; what is relative to it is null"
            )
        if side.grid_is_narrow:
            said.append(
                f"side {name}: the spectrum along the normal has not fallen to half of its peak "
                "where the wavelength grid ends; its width is null"
            )
        if side.grazing_is_unbounded:
            said.append(
                f"side {name}: all media have one index, so radiance grows without bound toward "
                "90 deg; its values there are null"
            )
        duv, faint = side.duv, side.external_quantum_efficiency < _FAINT_SHARE * total
        if duv is not None and abs(duv) > ACCURATE_DUV and side.is_white and not faint:
            said.append(
                f"side {name}: the color lies {abs(duv):.4f} in u, v from a black body's, more "
                f"than the {ACCURATE_DUV} that the color rendering index is made for"
            )
    return said


__all__ = [
    "DEFAULT_ANGLES_DEG",
    "SCHEMA",
    "Angular",
    "SideAngular",
    "angular",
    "faults_of_angles",
]
