"""The literal model's stored answers as plain records, for parametrized tests."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

FILE = Path(__file__).parent / "published" / "dipole_reference.json"


@dataclass(frozen=True, slots=True)
class ReferenceCase:
    """One stack with its answers.

    `films`: (eps_o, eps_e, thickness_nm) from bottom to top, the emitter film included;
    `bottom`, `top`: permittivity next to the films; `z_nm` from the bottom face of film
    number `emitter`; `substrate`, `cover`: None or dict(k, thickness_nm, exit, outside_n).
    `vertical`, `horizontal`: dissipated, the seven destinations, near_field, matched_bottom
    and matched_top, relative to that orientation's bulk rate. `stated_error` is relative to
    the dissipated rate.
    """

    name: str
    about: str
    wavelength_nm: float
    films: tuple[tuple[complex, complex, float], ...]
    bottom: complex
    top: complex
    emitter: int
    z_nm: float
    substrate: dict[str, Any] | None
    cover: dict[str, Any] | None
    vertical: dict[str, float | None]
    horizontal: dict[str, float | None]
    stated_error: float
    path: str


def load() -> list[ReferenceCase]:
    """All stored records, in the order of the file."""
    return [_case(record) for record in json.loads(FILE.read_text(encoding="utf-8"))["records"]]


def _case(record: dict[str, Any]) -> ReferenceCase:
    given = record["inputs"]
    return ReferenceCase(
        name=record["name"],
        about=record["about"],
        wavelength_nm=given["wavelength_nm"],
        films=tuple((complex(*o), complex(*e), d) for o, e, d in given["films"]),
        bottom=complex(*given["bottom"]),
        top=complex(*given["top"]),
        emitter=given["emitter"],
        z_nm=given["z_nm"],
        substrate=given["substrate"],
        cover=given["cover"],
        vertical=record["outputs"]["v"],
        horizontal=record["outputs"]["h"],
        stated_error=record["stated_error"],
        path=record["path"],
    )
