"""Optical constants and emission spectra gathered for showing: the bundled ones or a user's."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from optics.device import catalogue
from optics.device.errors import CaseError, Fault, nearest
from optics.device.tables import IndexTable, read_curve, read_index_table

FloatArray = npt.NDArray[np.float64]
AXES = ("isotropic", "ordinary", "extraordinary")


@dataclass(frozen=True, slots=True, eq=False)
class AxisData:
    """n and k along one axis, at the points of the table.

    Attributes
    ----------
    axis : {"isotropic", "ordinary", "extraordinary"}
    table : str
        Name of the table.
    wavelength_nm, n, k : ndarray of float, shape (n_point,)
    """

    axis: str
    table: str
    wavelength_nm: FloatArray
    n: FloatArray
    k: FloatArray

    def at(self, wavelength_nm: float) -> tuple[float, float] | None:
        """Return n and k on the straight line between two points, or None outside."""
        if not self.wavelength_nm[0] <= wavelength_nm <= self.wavelength_nm[-1]:
            return None
        n, k = (np.interp(wavelength_nm, self.wavelength_nm, column) for column in (self.n, self.k))
        return float(n), float(k)


@dataclass(frozen=True, slots=True, eq=False)
class Measurement:
    """One published or user's set of optical constants.

    Attributes
    ----------
    name, title, source, origin, note : str
        Name for the case file, material in words, full primary source, how the values came into
        the table, what to know before use.
    aliases : tuple of str
        Plain names that stand for it.
    reasons : tuple of str
        Why, one for each alias.
    axes : tuple of AxisData
        One, or the ordinary and the extraordinary.
    sha256 : tuple of str
        Of the tables' bytes.
    """

    name: str
    title: str
    source: str
    origin: str
    note: str
    aliases: tuple[str, ...]
    reasons: tuple[str, ...]
    axes: tuple[AxisData, ...]
    sha256: tuple[str, ...]

    @property
    def range_nm(self) -> tuple[float, float]:
        """Wavelengths in nm that all axes cover."""
        first = max(float(axis.wavelength_nm[0]) for axis in self.axes)
        return first, min(float(axis.wavelength_nm[-1]) for axis in self.axes)

    @property
    def points(self) -> int:
        """Rows of the table, the smaller number of two."""
        return min(axis.wavelength_nm.size for axis in self.axes)

    def to_dict(self) -> dict[str, Any]:
        """Entry of the JSON result."""
        return {
            "name": self.name,
            "title": self.title,
            "aliases": list(self.aliases),
            "source": self.source,
            "origin": self.origin,
            "note": self.note,
            "range_nm": list(self.range_nm),
            "points": self.points,
            "axes": [
                {
                    "axis": axis.axis,
                    "table": axis.table,
                    "wavelength_nm": axis.wavelength_nm,
                    "n": axis.n,
                    "k": axis.k,
                }
                for axis in self.axes
            ],
        }


@dataclass(frozen=True, slots=True, eq=False)
class EmissionSpectrum:
    """A bundled emission spectrum.

    Attributes
    ----------
    name, source, quantity : str
        `quantity` is ``photons`` or ``power``, per nm.
    wavelength_nm, value : ndarray of float, shape (n_point,)
    """

    name: str
    source: str
    quantity: str
    wavelength_nm: FloatArray
    value: FloatArray

    @property
    def range_nm(self) -> tuple[float, float]:
        """First and last wavelength in nm."""
        return float(self.wavelength_nm[0]), float(self.wavelength_nm[-1])

    @property
    def peak_nm(self) -> float:
        """Wavelength in nm of the highest point."""
        return float(self.wavelength_nm[int(np.argmax(self.value))])

    @property
    def points(self) -> int:
        """Rows of the table."""
        return self.wavelength_nm.size

    def to_dict(self) -> dict[str, Any]:
        """Entry of the JSON result."""
        return {
            "name": self.name,
            "source": self.source,
            "quantity": self.quantity,
            "range_nm": list(self.range_nm),
            "points": self.points,
            "wavelength_nm": self.wavelength_nm,
            "value": self.value,
        }


Shown = tuple[Measurement, ...] | EmissionSpectrum


def find(name: str) -> Shown:
    """Look up what a reader of optical constants may name.

    Parameters
    ----------
    name : str
        A bundled table, a plain name (all measurements of that material, the default first), a
        bundled spectrum, or the path of a table of the user's.

    Raises
    ------
    CaseError
        For an unknown name, and with every fault of a user's table.
    """
    entries = {entry.name: entry for entry in catalogue.entries() if entry.source}
    default = next((entry for entry in entries.values() if name in entry.aliases), None)
    if default is not None:
        others = [entry for entry in entries.values() if entry.title == default.title]
        pair = len(catalogue.load(default.name).tables) > 1
        chosen = [default] if pair else [default, *(one for one in others if one is not default)]
        return tuple(_bundled(entry) for entry in chosen)
    if name in entries:
        return (_bundled(entries[name]),)
    if name in catalogue.spectra_names():
        return spectrum(name)
    path = Path(name)
    if name in catalogue.BUILT_IN and not path.exists():
        found = f"{name}, which has n = 1 everywhere"
        raise CaseError([Fault(catalogue.WHERE, "", found, "a material with a table")])
    if path.exists() or path.suffix or path.name != name:
        return (user_table(path),)
    known = (*catalogue.names(), *catalogue.spectra_names())
    expected = "the name of a bundled material or spectrum, or the path of a table"
    raise CaseError([Fault(catalogue.WHERE, "", f"{name!r}", expected, nearest(name, known))])


def user_table(path: Path) -> Measurement:
    """Read and check a table of the user's; CaseError lists all its faults."""
    table = read_index_table(path)
    header = table.header
    return Measurement(
        name=path.name,
        title=header.get("material", ""),
        source=header.get("source", ""),
        origin=header.get("values", ""),
        note=header.get("note", ""),
        aliases=(),
        reasons=(),
        axes=(_axis("isotropic", path.name, table),),
        sha256=(table.sha256,),
    )


def spectrum(name: str) -> EmissionSpectrum:
    """Read a bundled emission spectrum."""
    curve = read_curve(catalogue.spectrum_path(name), "value")
    source, quantity = curve.header["source"], curve.header["quantity"]
    return EmissionSpectrum(name, source, quantity, curve.x, curve.y)


def catalogue_dict() -> dict[str, Any]:
    """List the catalogue as the JSON result has it."""
    return {
        "materials": [
            {
                "name": entry.name,
                "title": entry.title,
                "aliases": list(entry.aliases),
                "source": entry.source,
                "origin": entry.origin,
                "note": entry.note,
                "range_nm": [edge if math.isfinite(edge) else None for edge in entry.range_nm],
                "points": entry.points,
            }
            for entry in catalogue.entries()
        ],
        "spectra": [
            {
                "name": one.name,
                "source": one.source,
                "quantity": one.quantity,
                "range_nm": list(one.range_nm),
                "peak_nm": one.peak_nm,
                "points": one.points,
            }
            for one in all_spectra()
        ],
    }


def all_spectra() -> Iterable[EmissionSpectrum]:
    """Bundled emission spectra in alphabetical order."""
    return (spectrum(name) for name in catalogue.spectra_names())


def _bundled(entry: catalogue.Entry) -> Measurement:
    uses = catalogue.load(entry.name).tables
    names = AXES[1:] if len(uses) > 1 else AXES[:1]
    folder = catalogue.data_folder()
    axes = tuple(
        _axis(axis, use.name, read_index_table(folder / f"{use.name}.csv"))
        for axis, use in zip(names, uses, strict=True)
    )
    return Measurement(
        name=entry.name,
        title=entry.title,
        source=entry.source,
        origin=entry.origin,
        note=entry.note,
        aliases=entry.aliases,
        reasons=entry.reasons,
        axes=axes,
        sha256=tuple(use.sha256 for use in uses),
    )


def _axis(axis: str, name: str, table: IndexTable) -> AxisData:
    return AxisData(axis, name, table.wavelength_nm, table.n, table.k)
