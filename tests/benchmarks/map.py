"""A map of two film thicknesses, all destinations, against the rival on a sample of its points."""

from __future__ import annotations

import resource
import subprocess
import sys
import time
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np

import optics
from optics.device.case import Case, case_from_dict
from optics.outcome.light import cores, problem_of, quadrature

from . import rival, rival_plain
from .measure import RIVAL_POINTS, fastest, verdict
from .rival import PlainStack

ROOT = Path(__file__).resolve().parents[2]
BASE = ROOT / "cases" / "sweep-etl-htl-map.toml"
HTL, ETL = "layers.HTL.thickness_nm", "layers.ETL.thickness_nm"
AIM_S, AIM_FASTER, AIM_GIB = 10.0, 100.0, 1.0


@dataclass(frozen=True, slots=True)
class MapPlan:
    """How large a map; the default is what the aims speak of."""

    side: int = 100  # values on each axis
    wavelengths: int = 61
    sampled: int = 4  # points and wavelengths at which the rival is timed
    large: int = 700  # values on each axis of the grid whose memory is looked at


def mapped(side: int, wavelengths: int) -> Case:
    """The map's case of the examples, with other axes and wavelengths."""
    document = optics.read_case(BASE).document
    document["wavelength"] = {"values_nm": np.linspace(440.0, 680.0, wavelengths).tolist()}
    document["sweep"] = {
        "axes": {path: {"values": np.linspace(20.0, 200.0, side).tolist()} for path in (HTL, ETL)}
    }
    return case_from_dict(document, BASE.parent)


def section(plan: MapPlan) -> list[str]:
    """Measure, and write it down."""
    case = mapped(plan.side, plan.wavelengths)
    optics.sweep(mapped(3, 2))  # compiled before the clock starts
    wall, cpu = time.perf_counter(), time.process_time()
    found = optics.sweep(case)
    wall, cpu = time.perf_counter() - wall, time.process_time() - cpu
    straight, spared = (
        solve * plan.side**2 * plan.wavelengths for solve in _rival_seconds(case, plan.sampled)
    )
    peak = _peak_gib(plan.large)
    positions = _positions(case)
    return [
        "## A map",
        f"`{BASE.relative_to(ROOT)}` with {plan.side} x {plan.side} values of its two axes, "
        f"{len(case.stack.films)} films, {plan.wavelengths} wavelengths, default accuracy, EQE and "
        f"all destinations, {positions} dipole positions, on the {cores()} cores of this process.",
        "\n".join([
            f"- Within {AIM_S:.0f} s: {wall:.1f} s ({cpu:.1f} s of processor time), "
            f"{verdict(wall <= AIM_S)}.",
            f"- At least {AIM_FASTER:.0f} times faster than the straight rival: "
            f"{straight / wall:,.0f} times, {verdict(straight >= AIM_FASTER * wall)}; core for "
            f"core {straight / cpu:,.0f} times. Than the spared one: {spared / wall:,.0f} times, "
            f"core for core {spared / cpu:,.0f}. Both (one thread, a single dipole position) were "
            f"timed at {plan.sampled} points and as many wavelengths and scaled to "
            f"{straight:,.0f} s and {spared:,.0f} s for all.",
            f"- Memory below {AIM_GIB:.0f} GiB: a map of {plan.large} x {plan.large} points at one "
            f"wavelength peaks at {peak:.2f} GiB, everything loaded included, "
            f"{verdict(peak <= AIM_GIB)}.",
            f"- Worst energy balance of the map: {found.attrs['energy_balance']:.1e}.",
        ]),
    ]  # fmt: skip


def _positions(case: Case) -> int:
    """Dipole positions at which the map is computed."""
    position_nm, _ = quadrature(case, case.emitters[0], case.wavelength_nm)
    return int(position_nm.size)


def plain(case: Case, w: int) -> tuple[PlainStack, float]:
    """What the rival takes of a case at wavelength number w: first emitter, middle of its film."""
    emitter, stack = case.emitters[0], case.stack
    nm = case.wavelength_nm[w : w + 1]
    own_nm = stack.films[emitter.film_index].thickness_nm
    problem = problem_of(case, emitter, nm, np.array([0.5 * own_nm]))
    eps, k0_nm = stack.permittivity(nm)[0][0], float(2.0 * np.pi / nm[0])
    sides = problem.sides
    films = PlainStack(
        eps, k0_nm * stack.thickness_nm, emitter.film_index, 0.5 * k0_nm * own_nm,
        float(sides.n_outer[0, 0]), float(sides.loss[0, 0]), float(sides.n_out[0, 0]),
        float(sides.n_out[0, 1]),
    )  # fmt: skip
    return films, 2.0 * max(films.slab_index, float(np.sqrt(eps).real.max()))


def _rival_seconds(case: Case, sampled: int) -> tuple[float, float]:
    """Seconds of one point at one wavelength, averaged over a sample: straight, spared."""
    values = np.linspace(20.0, 200.0, sampled)
    rows = np.linspace(0, case.wavelength_nm.size - 1, sampled).astype(int).tolist()
    jobs: list[Any] = []
    for solve in (rival_plain.destinations, rival.destinations):
        for value, w in zip(values, rows, strict=True):
            stack, end = plain(case.replace_all({HTL: value, ETL: value}), w)
            jobs.append(partial(solve, stack, RIVAL_POINTS, end))
    seconds = fastest(jobs, 3)
    return sum(seconds[:sampled]) / sampled, sum(seconds[sampled:]) / sampled


def _peak_gib(side: int) -> float:
    """Peak memory of a process that computes a large map."""
    code = f"from benchmarks.map import largest; largest({side})"
    paths = [str(ROOT / "tests"), str(ROOT / "tests" / "kernels"), str(ROOT)]
    start = f"import sys; sys.path[:0] = {paths!r}; {code}"
    done = subprocess.run([sys.executable, "-c", start], capture_output=True, text=True, check=True)
    return float(done.stdout)


def largest(side: int) -> None:
    """Compute a map at one wavelength and print this process's peak memory in GiB."""
    optics.sweep(mapped(side, 1))
    print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20)
