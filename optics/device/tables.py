"""Tables of numbers that users and the catalogue hand over."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class IndexTable:
    """Optical constants at a table's own points."""

    wavelength_nm: FloatArray
    n: FloatArray
    k: FloatArray
    header: Mapping[str, str]
    sha256: str
    path: Path


@dataclass(frozen=True, slots=True, eq=False)
class Curve:
    """One quantity against one coordinate; `coordinate` says which one the file used."""

    x: FloatArray
    y: FloatArray
    coordinate: str
    header: Mapping[str, str]
    sha256: str
    path: Path


def read_index_table(path: Path) -> IndexTable:
    """Read optical constants; raises CaseError with every fault."""
    raise NotImplementedError


def read_curve(
    path: Path, value_column: str, *, coordinate: str | tuple[str, ...] = "wavelength_nm"
) -> Curve:
    """Read a two-column curve; raises CaseError with every fault."""
    raise NotImplementedError
