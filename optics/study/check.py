"""Check a case: its own numbers recomputed by independent means, with every difference."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from optics._version import VERSION
from optics.device.errors import CaseError, Fault
from optics.kernels import budget as engine
from optics.outcome.budget import DEFAULT_TOLERANCE, budget
from optics.outcome.light import problem_of
from optics.study.check_averages import average_rows
from optics.study.check_directions import direction_rows
from optics.study.check_fields import far_field_rows, outside_rows
from optics.study.check_powers import DESTINATIONS, QUANTITIES, powers
from optics.study.check_rows import KINDS, Place, Row, compared, not_checked
from optics.study.check_stack import layers_of

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    import pandas
    import xarray
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.device.stack import Slab

__all__ = ["DEFAULT_ANGLES_DEG", "SCHEMA", "Check", "Row", "check"]

SCHEMA = "outcouple.check/1"
DEFAULT_ANGLES_DEG = (0.0, 20.0, 40.0, 60.0, 80.0)
_ORIENTATIONS = ("vertical", "horizontal")
# Quantities that only the engine's own result holds.
_BESIDE = {
    "near_field": engine.NEAR_FIELD,
    "matched_bottom": engine.MATCHED_BOTTOM,
    "matched_top": engine.MATCHED_TOP,
}
_QUADRATURE = "adaptive quadrature on the real axis"


@dataclass(frozen=True, slots=True)
class Check:
    """Every comparison that was made for a case, and every one that could not be made.

    Attributes
    ----------
    title, case_sha256 : str
    rows : tuple of Row
    warnings : tuple of str
        Those of the case's light budget.
    """

    title: str
    case_sha256: str
    rows: tuple[Row, ...]
    warnings: tuple[str, ...]

    @property
    def passed(self) -> bool:
        """Whether nothing exceeds its tolerance."""
        return not any(row.result == "fail" for row in self.rows)

    def summary(self) -> list[dict[str, Any]]:
        """Return one entry for each kind of row: counts, and the worst difference over tolerance.

        Returns
        -------
        list of dict
            Keys kind, checked, failed, not_checked, worst_ratio (None if nothing was checked),
            difference_of, tolerance_reason.
        """
        entries = []
        for kind, (of, why) in KINDS.items():
            rows = [row for row in self.rows if row.kind == kind]
            ratios = [row.ratio for row in rows if row.ratio is not None]
            entries.append(
                {
                    "kind": kind,
                    "checked": len(ratios),
                    "failed": sum(row.result == "fail" for row in rows),
                    "not_checked": sum(row.result == "not checked" for row in rows),
                    "worst_ratio": max(ratios, default=None),
                    "difference_of": of,
                    "tolerance_reason": why,
                }
            )
        return entries

    def to_dict(self) -> dict[str, Any]:
        """Build the JSON result, ``outcouple.check/1``: plain types only."""
        return {
            "schema": SCHEMA,
            "version": VERSION,
            "title": self.title,
            "case_sha256": self.case_sha256,
            "passed": self.passed,
            "summary": self.summary(),
            "rows": [row.to_dict() for row in self.rows],
            "warnings": list(self.warnings),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Build a table with a line for each row; columns as the fields of `Row`."""
        import pandas

        return pandas.DataFrame([row.to_dict() for row in self.rows], columns=list(Row.__slots__))


def check(
    case: Case,
    *,
    wavelengths_nm: Sequence[float] | None = None,
    angles_deg: Sequence[float] = DEFAULT_ANGLES_DEG,
) -> Check:
    """Recompute a case by independent means and compare.

    Far field by reciprocity and light from outside through a general thin-film library, all
    destinations by quadrature on the real axis, the energy balance, light added up over all
    directions, and the averages. At the
    first, middle and last position of each emitter's zone.

    Parameters
    ----------
    case : Case
    wavelengths_nm : sequence of float, optional
        Wavelengths of the case's grid; by default the first, the last and each emitter's peak.
        An emitter with a line is checked at its line.
    angles_deg : sequence of float
        In the media next to the films, from 0 to below 90.

    Returns
    -------
    Check

    Raises
    ------
    CaseError
        If a wavelength is not one of the case or an angle is out of range.
    """
    _refuse(case, wavelengths_nm, angles_deg)
    outcome = budget(case)
    rows: list[Row] = []
    looked_at: dict[str, list[float]] = {}
    for emitter in case.emitters:
        data = outcome.spectral[emitter.name]
        picked = _wavelengths(data, wavelengths_nm)
        looked_at[emitter.name] = data["wavelength_nm"].to_numpy()[picked].tolist()
        for index in picked:
            rows += _point_rows(case, emitter, data.isel(wavelength_nm=index), angles_deg)
        rows += _energy_rows(emitter, data)
    rows += direction_rows(case, outcome, looked_at)
    result = outcome.to_dict()
    rows += _chain_rows(result)
    rows += average_rows(case, result, outcome.spectral)
    order = {kind: place for place, kind in enumerate(KINDS)}
    rows.sort(key=lambda row: order[row.kind])
    return Check(case.title, case.sha256, tuple(rows), outcome.warnings)


def _refuse(
    case: Case, wavelengths_nm: Sequence[float] | None, angles_deg: Sequence[float]
) -> None:
    grid = case.every_wavelength_nm
    faults = [
        Fault(case.label, "wavelengths", f"{at:g} nm", "a wavelength of the case's grid")
        for at in wavelengths_nm or ()
        if not np.any(grid == at)
    ]
    faults += [
        Fault(case.label, "angles", f"{angle:g}", "degrees from 0 to below 90")
        for angle in angles_deg
        if not 0.0 <= angle < 90.0
    ]
    for name, values in (("wavelengths", wavelengths_nm), ("angles", angles_deg)):
        if values is not None and len(values) == 0:
            faults.append(Fault(case.label, name, "nothing", "at least one number"))
    if faults:
        raise CaseError(faults)


def _wavelengths(data: xarray.Dataset, wanted_nm: Sequence[float] | None) -> list[int]:
    """Places on an emitter's grid: start, peak of the spectrum, end, or those wanted."""
    grid = data["wavelength_nm"].to_numpy()
    if wanted_nm is None or grid.size == 1:
        return sorted({0, int(data["spectrum_weight"].to_numpy().argmax()), grid.size - 1})
    return sorted({int(np.flatnonzero(grid == at)[0]) for at in wanted_nm if np.any(grid == at)})


def _slabs(case: Case) -> dict[str, Slab | None]:
    """Slab that stands where light of a matched exit would leave."""
    return {"matched_bottom": case.stack.substrate, "matched_top": case.stack.cover}


def _point_rows(
    case: Case, emitter: Emitter, data: xarray.Dataset, angles_deg: Sequence[float]
) -> Iterator[Row]:
    """Everything that is compared at one wavelength, at three positions."""
    at_nm = float(data["wavelength_nm"])
    every = data["position_nm"].to_numpy()
    chosen = sorted({0, every.size // 2, every.size - 1})
    position_nm: NDArray[np.float64] = every[chosen]
    layers = layers_of(case, emitter, at_nm)
    problem = problem_of(case, emitter, np.array([at_nm]), position_nm)
    place = Place(emitter.name, at_nm)
    yield from far_field_rows(layers, problem, position_nm.tolist(), angles_deg, place)
    yield from outside_rows(layers, problem, angles_deg, place)
    found = powers(layers, position_nm.tolist())
    shares = engine.light_budget(problem, DEFAULT_TOLERANCE).shares[0]
    absent = [name for name, slab in _slabs(case).items() if slab is None]
    for index, quantity in enumerate(QUANTITIES):
        if quantity in absent:
            continue
        if found.failure or found.error > DEFAULT_TOLERANCE:
            reason = found.failure or f"the quadrature only reached {found.error:.0e}"
            yield not_checked("power", quantity, _QUADRATURE, place, reason)
            continue
        if quantity in _BESIDE:
            ours = shares[:, :, _BESIDE[quantity]]
        else:
            name = "F" if quantity == "dissipated" else quantity
            ours = data[name].isel(position=chosen).transpose("position", ...).to_numpy()
        for q, z in enumerate(position_nm.tolist()):
            for o, orientation in enumerate(_ORIENTATIONS):
                where = replace(place, position_nm=z, orientation=orientation)
                theirs, scale = found.budget[index, o, q], found.budget[0, o, q]
                yield compared(
                    "power",
                    quantity,
                    _QUADRATURE,
                    where,
                    float(ours[q, o]),
                    float(theirs),
                    float(scale),
                    DEFAULT_TOLERANCE + found.error,
                    found.note,
                )


def _chain_rows(result: Mapping[str, Any]) -> Iterator[Row]:
    """The parts into which the charge of a unit splits add up to all of it."""
    for unit in result["chain"]:
        total = sum(value for key, value in unit.items() if key != "unit")
        name = f"chain of unit {unit['unit']}"
        yield compared("energy balance", name, "sum", Place(""), total, 1.0, 1.0, DEFAULT_TOLERANCE)


def _energy_rows(emitter: Emitter, data: xarray.Dataset) -> Iterator[Row]:
    """Sum of the destinations against the dissipated power: the worst place at each wavelength."""
    total = data["F"].transpose("wavelength_nm", "position", "orientation").to_numpy()
    summed = np.zeros_like(total)
    for quantity in DESTINATIONS:
        summed += data[quantity].transpose("wavelength_nm", "position", "orientation").to_numpy()
    gap = np.abs(summed / total - 1.0)
    gap[np.isnan(gap)] = np.inf
    for w, at_nm in enumerate(data["wavelength_nm"].to_numpy().tolist()):
        z, o = np.unravel_index(int(gap[w].argmax()), gap[w].shape)
        place = Place(
            emitter.name,
            at_nm,
            float(data["position_nm"][z]),
            _ORIENTATIONS[int(o)],
        )
        yield compared(
            "energy balance",
            "all destinations",
            "total by a path of its own",
            place,
            float(summed[w, z, o]),
            float(total[w, z, o]),
            float(total[w, z, o]),
            DEFAULT_TOLERANCE,
        )
