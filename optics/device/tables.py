"""Tables of numbers that users and the catalogue hand over: optical constants and curves."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np

from optics.device.columns import RawTable, by_line, read_columns
from optics.device.constants import HC_EV_NM
from optics.device.errors import CaseError, Fault, nearest
from optics.device.materials import FloatArray

SPECTRAL_COORDINATES = ("wavelength_nm", "wavelength_um", "energy_eV")
VALUE_COLUMNS = ("n", "k", "eps1", "eps2")


@dataclass(frozen=True, slots=True, eq=False)
class IndexTable:
    """Optical constants at a table's own points; arrays are read-only.

    Attributes
    ----------
    wavelength_nm : ndarray of float, shape (n_point,)
        Vacuum wavelengths, nm, strictly ascending.
    n, k : ndarray of float, shape (n_point,)
        Refractive index and extinction coefficient, k ≥ 0 for loss.
    header : mapping of str to str
        The ``# key: value`` lines.
    sha256 : str
        Of the file's bytes.
    path : Path
    """

    wavelength_nm: FloatArray
    n: FloatArray
    k: FloatArray
    header: Mapping[str, str]
    sha256: str
    path: Path


@dataclass(frozen=True, slots=True, eq=False)
class Curve:
    """One quantity against one coordinate; arrays are read-only.

    Attributes
    ----------
    x, y : ndarray of float, shape (n_point,)
        Coordinate, strictly ascending, and value, nowhere negative.
    coordinate : str
        Name of the column that x comes from; it carries the unit.
    header, sha256, path
        As in `IndexTable`.
    """

    x: FloatArray
    y: FloatArray
    coordinate: str
    header: Mapping[str, str]
    sha256: str
    path: Path


def read_index_table(path: Path) -> IndexTable:
    """Read optical constants.

    Parameters
    ----------
    path : Path
        Comma- or blank-separated text with one line of column names: ``wavelength_nm``,
        ``wavelength_um`` or ``energy_eV``, and ``n`` with or without ``k``, or ``eps1`` and
        ``eps2``. Rows in strictly ascending or strictly descending order.

    Returns
    -------
    IndexTable
        In ascending wavelength; n + ik is the root of ε with k ≥ 0.

    Raises
    ------
    CaseError
        With every fault of the file.
    """
    raw = read_columns(path)
    faults = raw.faults
    coordinate = _one_of(raw, SPECTRAL_COORDINATES, faults)
    wanted = _index_columns(raw, faults)
    _no_other_columns(raw, SPECTRAL_COORDINATES + VALUE_COLUMNS, faults)
    _enough_rows(raw, faults)
    if coordinate:
        _check_order(raw, coordinate, faults, zero_allowed=False)
    for column in wanted:
        if column != "eps1":
            _check_sign(raw, column, faults)
    if len(wanted) == 2 or wanted == ("n",):
        _check_not_zero(raw, wanted, faults)
    if faults or coordinate is None:
        raise CaseError(by_line(faults))
    wavelength_nm = _as_wavelength_nm(raw.values[coordinate], coordinate)
    n, k = _as_index(raw, wanted)
    wavelength_nm, n, k = _ascending(wavelength_nm, n, k)
    return IndexTable(wavelength_nm, n, k, raw.header, raw.sha256, path)


def read_curve(
    path: Path, value_column: str, *, coordinate: str | tuple[str, ...] = "wavelength_nm"
) -> Curve:
    """Read one quantity against one coordinate: a spectrum, a filter, an emission zone.

    Parameters
    ----------
    path : Path
        File as in `read_index_table`.
    value_column : str
        Name of the column of values, 0 or more.
    coordinate : str or tuple of str
        Names allowed for the coordinate's column; the file has exactly one of them. Wavelengths
        and energies are positive, others 0 or more.

    Returns
    -------
    Curve
        In ascending coordinate, which keeps the file's own unit.

    Raises
    ------
    CaseError
        With every fault of the file.
    """
    raw = read_columns(path)
    faults = raw.faults
    allowed = (coordinate,) if isinstance(coordinate, str) else coordinate
    chosen = _one_of(raw, allowed, faults)
    if value_column not in raw.values:
        faults.append(_missing(raw, value_column))
    _no_other_columns(raw, (*allowed, value_column), faults)
    _enough_rows(raw, faults)
    if chosen:
        _check_order(raw, chosen, faults, zero_allowed=chosen not in SPECTRAL_COORDINATES)
    _check_sign(raw, value_column, faults)
    if faults or chosen is None:
        raise CaseError(by_line(faults))
    x, y = _ascending(raw.values[chosen], raw.values[value_column])
    return Curve(x, y, chosen, raw.header, raw.sha256, path)


def _one_of(raw: RawTable, allowed: tuple[str, ...], faults: list[Fault]) -> str | None:
    present = [column for column in allowed if column in raw.values]
    if len(present) == 1:
        return present[0]
    wanted = " or ".join(allowed)
    if not present:
        faults.append(_missing(raw, wanted))
    else:
        both = " and ".join(present)
        faults.append(raw.fault(raw.names_line, f"columns {both}", f"one of {wanted} only"))
    return None


def _index_columns(raw: RawTable, faults: list[Fault]) -> tuple[str, ...]:
    """Return the columns that hold the optical constants, checked for a complete set."""
    present = tuple(column for column in VALUE_COLUMNS if column in raw.values)
    if present in (("n",), ("n", "k"), ("eps1", "eps2")):
        return present
    found = f"columns {', '.join(present)}" if present else _column_list(raw)
    faults.append(raw.fault(raw.names_line, found, "n, or n and k, or eps1 and eps2"))
    return present


def _no_other_columns(raw: RawTable, known: tuple[str, ...], faults: list[Fault]) -> None:
    for column in raw.values:
        if column not in known:
            near = nearest(column, known)
            expected = f"only columns among {', '.join(known)}"
            faults.append(raw.fault(raw.names_line, f"column {column!r}", expected, near=near))


def _enough_rows(raw: RawTable, faults: list[Fault]) -> None:
    if raw.n_rows < 2:
        found = "no row" if raw.n_rows == 0 else "1 row"
        faults.append(Fault(str(raw.path), "", f"{found} of numbers", "2 rows or more"))


def _check_sign(raw: RawTable, column: str, faults: list[Fault]) -> None:
    values = raw.values.get(column)
    if values is None:
        return
    for row in np.flatnonzero(values < 0.0):
        faults.append(raw.fault(raw.lines[row], f"{values[row]:g}", "0 or more", column))


def _check_not_zero(raw: RawTable, columns: tuple[str, ...], faults: list[Fault]) -> None:
    """List rows where the permittivity vanishes: no film has that."""
    zero = np.all([raw.values[column] == 0.0 for column in columns], axis=0)
    named = " and ".join(columns)
    for row in np.flatnonzero(zero):
        faults.append(raw.fault(raw.lines[row], "0", "a value that is not 0", named))


def _check_order(raw: RawTable, column: str, faults: list[Fault], *, zero_allowed: bool) -> None:
    """List coordinates out of range, repeated, or against the direction of the table."""
    values = raw.values[column]
    low = values < 0.0 if zero_allowed else values <= 0.0
    for row in np.flatnonzero(low):
        expected = "0 or more" if zero_allowed else "more than 0"
        faults.append(raw.fault(raw.lines[row], f"{values[row]:.10g}", expected, column))
    usable = np.flatnonzero(np.isfinite(values) & ~low)
    # The direction of most steps is the table's; the others are the misplaced rows.
    falling = int(np.sign(np.diff(values[usable])).sum()) < 0
    order = "descending" if falling else "ascending"
    for before, row in pairwise(usable):
        step = values[row] - values[before]
        if step == 0.0:
            found = f"{values[row]:.10g} a second time"
            faults.append(raw.fault(raw.lines[row], found, "every value once", column))
        elif (step < 0.0) != falling:
            found = f"{values[row]:.10g} after {values[before]:.10g}"
            faults.append(raw.fault(raw.lines[row], found, f"{order} values", column))


def _missing(raw: RawTable, wanted: str) -> Fault:
    return raw.fault(raw.names_line, _column_list(raw), f"a column {wanted}")


def _column_list(raw: RawTable) -> str:
    return f"columns {', '.join(raw.values)}" if raw.values else "no column names"


def _as_wavelength_nm(values: FloatArray, coordinate: str) -> FloatArray:
    if coordinate == "energy_eV":
        return np.asarray(HC_EV_NM / values, dtype=np.float64)
    return values * 1e3 if coordinate == "wavelength_um" else values


def _as_index(raw: RawTable, columns: tuple[str, ...]) -> tuple[FloatArray, FloatArray]:
    if columns == ("n",):
        return raw.values["n"], np.zeros(raw.n_rows)
    if columns == ("n", "k"):
        return raw.values["n"], raw.values["k"]
    # Adding 0.0 turns -0.0 into 0.0, on which side of the cut the root has k ≥ 0.
    index = np.sqrt(raw.values["eps1"] + 1j * (raw.values["eps2"] + 0.0))
    return index.real, index.imag


def _ascending(x: FloatArray, *others: FloatArray) -> tuple[FloatArray, ...]:
    order = slice(None, None, -1) if x[0] > x[-1] else slice(None)
    columns = tuple(np.array(column[order], dtype=np.float64) for column in (x, *others))
    for column in columns:
        column.flags.writeable = False
    return columns
