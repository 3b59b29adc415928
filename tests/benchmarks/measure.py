"""Timings and errors of the engine and of its rival, in one process on one thread each."""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from stacks import HORIZONTAL, VERTICAL, answers

from optics.kernels.budget import Budget, light_budget
from optics.kernels.rules import NODES

from . import rival, rival_plain
from .devices import Device

TOLERANCE = 1e-6  # the default of the package
RIVAL_POINTS = 2000
#: The compiled recursion's cost per interface and node, both polarizations, on the machine that
#: this aim was set on; `floor` measures it anew where the benchmark runs.
STEP_NS = 24.0

# Destinations that the device has; it has no cover and gets no light from above.
COMPARED = ("dissipated", "air_bottom", "air_top", "substrate", "guided", "surface_plasmon",
            "absorbed", "matched_bottom")  # fmt: skip
# What the near field is part of, with which the rival's grid ends. How it splits into guided and
# plasmon power is not known, so their sum is compared.
_TRAPPED = ("guided", "surface_plasmon")


def fastest(jobs: Sequence[Callable[[], Any]], repeats: int) -> list[float]:
    """Shortest time of each job in seconds; jobs take turns, so that a busy spell hits all."""
    best = [np.inf] * len(jobs)
    for _ in range(repeats):
        for i, job in enumerate(jobs):
            started = time.perf_counter()
            job()
            best[i] = min(best[i], time.perf_counter() - started)
    return best


def engine(device: Device, tolerance: float = TOLERANCE) -> Budget:
    return light_budget(device.problem(), tolerance)


def run_rival(
    device: Device, points: int = RIVAL_POINTS, spared: bool = True
) -> list[dict[str, dict[str, float]]]:
    """All wavelengths, one after the other; spared: with every saving, see `rival`."""
    solve = rival.destinations if spared else rival_plain.destinations
    stacks = range(device.wavelength_nm.size)
    return [solve(device.plain(w), points, device.end(w)) for w in stacks]


@dataclass(frozen=True, slots=True)
class Truth:
    """Answers of the literal model at one wavelength, by orientation and destination."""

    w: int
    whole: tuple[dict[str, float], dict[str, float]]
    stated_error: float


def within_grid(found: dict[str, float], near_field: float) -> dict[str, float]:
    """Sum up what is trapped, and leave out the near field that a grid does not reach."""
    kept = {name: found[name] for name in COMPARED if name not in _TRAPPED}
    kept["dissipated"] -= near_field
    return kept | {"trapped": sum(found[name] for name in _TRAPPED) - near_field}


def truth(device: Device, w: int) -> Truth:
    """Ask the literal model."""
    result = device.reference(w).destinations()
    whole = []
    for outcome in (result.v, result.h):
        beside = {
            "dissipated": outcome.dissipated,
            "near_field": outcome.near_field,
            "matched_bottom": outcome.matched_bottom or 0.0,
        }
        whole.append({**outcome.destinations, **beside})
    return Truth(w, (whole[VERTICAL], whole[HORIZONTAL]), result.error)


def engine_errors(budget: Budget, truths: Sequence[Truth]) -> list[float]:
    """Worst destination of each sampled wavelength, as a fraction of the dissipated power."""
    worst = []
    for true in truths:
        misses = [
            abs(answers(budget, o, true.w)[name] - true.whole[o][name])
            / true.whole[o]["dissipated"]
            for o in (VERTICAL, HORIZONTAL)
            for name in COMPARED
        ]
        worst.append(max(misses))
    return worst


def rival_errors(device: Device, points: int, truths: Sequence[Truth]) -> list[float]:
    """The same for the rival, the near field beyond its grid not held against it."""
    worst = []
    for true in truths:
        found = rival.destinations(device.plain(true.w), points, device.end(true.w))
        misses = []
        for o, key in ((VERTICAL, "v"), (HORIZONTAL, "h")):
            wanted = within_grid(true.whole[o], true.whole[o]["near_field"])
            got = within_grid(found[key], 0.0)
            misses += [abs(got[n] - wanted[n]) / true.whole[o]["dissipated"] for n in wanted]
        worst.append(max(misses))
    return worst


def exponent(points: Sequence[int], errors: Sequence[float]) -> float:
    """Slope of log error against log points, least squares."""
    return float(np.polyfit(np.log(points), np.log(errors), 1)[0])


def points_for(target: float, points: Sequence[int], errors: Sequence[float]) -> float:
    """Points at which the fitted power law comes down to the target."""
    slope, offset = np.polyfit(np.log(points), np.log(errors), 1)
    return float(np.exp((np.log(target) - offset) / slope))


def steps(device: Device, budget: Budget) -> int:
    """Interface steps that the engine made: nodes times interfaces."""
    interfaces = device.thickness_nm.size + 1
    return int(budget.batches.sum()) * NODES * interfaces


def median(values: Sequence[float]) -> float:
    return float(statistics.median(values))


def verdict(reached: bool) -> str:
    """How the page says whether an aim is reached."""
    return "reached" if reached else "**not reached**"
