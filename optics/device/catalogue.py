"""The bundled optical constants and emission spectra."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from optics.device.materials import Material


@dataclass(frozen=True, slots=True)
class Entry:
    """One name of the catalogue."""

    name: str
    family: str
    source: str
    range_nm: tuple[float, float]
    points: int
    origin: str
    table: str
    is_default: bool
    note: str


def names() -> tuple[str, ...]:
    """Every name that `load` knows."""
    raise NotImplementedError


def load(name: str) -> Material:
    """Material of that name; raises CaseError with the nearest name otherwise."""
    raise NotImplementedError


def entries() -> tuple[Entry, ...]:
    """One record per name."""
    raise NotImplementedError


def spectra_names() -> tuple[str, ...]:
    """Names of the bundled emission spectra."""
    raise NotImplementedError


def spectrum_path(name: str) -> Path:
    """File of a bundled emission spectrum; raises CaseError for an unknown name."""
    raise NotImplementedError
