"""Bundled cases at few wavelengths, and differences of what studies ask of them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

import optics
from optics.device.case import Case, case_from_dict
from optics.study.evaluate import Question, answer
from optics.study.outcomes import find_outcomes

FOLDER = Path(__file__).parents[2] / "cases"
# Accuracy that is asked of the engine, so that differences show the derivative and not noise.
TIGHT = 1e-10
# Weights of a central difference of sixth order.
_DIFFERENCE = ((1, 3 / 4), (2, -3 / 20), (3, 1 / 60))

Floats = np.ndarray[Any, np.dtype[np.float64]]


def bundled(stem: str, wavelengths_nm: Sequence[float]) -> Case:
    """Return a bundled case at other wavelengths."""
    document = optics.read_case(FOLDER / f"{stem}.toml").document
    document["wavelength"] = {"values_nm": list(wavelengths_nm)}
    return case_from_dict(document, FOLDER)


def question(
    case: Case,
    paths: Sequence[str],
    names: Sequence[str],
    followers: Sequence[tuple[str, int]] = (),
) -> Question:
    """Ask for outcomes by name, as tightly as it goes."""
    outcomes = find_outcomes(case, {name: name for name in names})
    return Question(case, tuple(paths), tuple(followers), outcomes, TIGHT)


def values_of(asked: Question) -> list[float]:
    """Values that the case itself has."""
    return [float(asked.case.value(path)) for path in asked.paths]


def differences(asked: Question, steps: Mapping[str, float]) -> Floats:
    """Derivatives (outcomes, paths) from values of the public function alone."""
    at = np.array(values_of(asked))
    columns = []
    for place, path in enumerate(asked.paths):
        total = np.zeros(len(asked.outcomes))
        for k, weight in _DIFFERENCE:
            step = np.zeros(at.size)
            step[place] = k * steps[path]
            ahead, behind = answer(asked, at + step), answer(asked, at - step)
            total += weight / steps[path] * (ahead - behind)[: total.size]
        columns.append(total)
    return np.stack(columns, axis=1)
