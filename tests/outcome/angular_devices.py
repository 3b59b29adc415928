"""Devices for tests of emission against angle, and how results are compared. Numbers invented."""

from __future__ import annotations

import json
from typing import Any

import pytest
from devices import pixel, tandem

SIDES = ("bottom", "top")


def driven(document: dict[str, Any]) -> dict[str, Any]:
    document["drive"] |= {"current_density_mA_cm2": 4.0, "voltage_V": 3.2}
    return document


def semitransparent(exit_: str = "planar") -> dict[str, Any]:
    """Glass below in air, an absorbing polymer slab above in water, a thin metal between."""
    document = driven(pixel())
    document["materials"] |= {"water": {"n": 1.33}, "polymer": {"n": 1.65, "k": 1e-8}}
    document["surroundings"] = {"top": "water"}
    document["cover"] = {"material": "polymer", "thickness_mm": 0.5, "exit": exit_}
    document["layers"][-1]["thickness_nm"] = 15
    return document


def without_slabs(bottom: str = "air") -> dict[str, Any]:
    document = driven(pixel())
    del document["substrate"]
    document["surroundings"] = {"bottom": bottom}
    document["layers"][-1]["thickness_nm"] = 15
    return document


DEVICES = {
    "planar": lambda: driven(pixel()),
    "matched, lines, two units": lambda: driven(tandem()),
    "two slabs": semitransparent,
    "two slabs, one matched": lambda: semitransparent("matched"),
    "no slabs": without_slabs,
    "on silicon": lambda: without_slabs("si"),
}


def same(found: Any, expected: Any) -> bool:
    """Equal but for rounding; null only to null."""
    if isinstance(expected, list):
        return all(same(a, b) for a, b in zip(found, expected, strict=True))
    if found is None or expected is None:
        return found is expected
    return bool(found == pytest.approx(expected, rel=1e-12))


def narrow(document: dict[str, Any], *wavelengths_nm: float) -> dict[str, Any]:
    """Few wavelengths, so that a test is quick."""
    document["wavelength"] = {"values_nm": list(wavelengths_nm)}
    return document


def no_constants(text: str) -> Any:
    """Parse JSON that has no NaN and no Infinity."""

    def refuse(word: str) -> None:
        raise AssertionError(f"{word} in JSON")

    return json.loads(text, parse_constant=refuse)
