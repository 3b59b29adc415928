"""Measure everything and write it down as Markdown."""

from __future__ import annotations

import argparse
import os
import platform
from dataclasses import dataclass, field
from functools import partial
from pathlib import Path

import llvmlite
import numba
import numpy as np

from optics.outcome import light

from . import batch
from .devices import Device, device
from .map import MapPlan
from .map import section as map_section
from .measure import (
    RIVAL_POINTS,
    STEP_NS,
    TOLERANCE,
    Truth,
    engine,
    engine_errors,
    exponent,
    fastest,
    median,
    points_for,
    rival_errors,
    run_rival,
    steps,
    truth,
    verdict,
)
from .tolerance import StudyPlan
from .tolerance import section as study_section

COMMAND = "python -m tests.benchmarks"
AIM_FASTER, AIM_CLOSER, AIM_FLOOR, AIM_ZONE = 30.0, 100.0, 3.0, 2.0


@dataclass(frozen=True, slots=True)
class Plan:
    """How much to measure; the default is the full benchmark."""

    wavelengths: int = 81
    samples: int = 9
    repeats: int = 15
    grids: tuple[int, ...] = (2_000, 8_000, 32_000, 128_000)
    films: tuple[int, ...] = (3, 6, 12, 24)
    spectra: tuple[int, ...] = (1, 11, 41, 81, 201, 401)
    zones: tuple[int, ...] = (1, 5, 10, 20, 40)
    map: MapPlan = field(default_factory=MapPlan)
    study: StudyPlan = field(default_factory=StudyPlan)


def markdown(header: list[str], rows: list[list[str]]) -> str:
    lines = [header, ["---"] * len(header), *rows]
    return "\n".join("| " + " | ".join(cells) + " |" for cells in lines)


def machine() -> str:
    """Cores, processor and versions."""
    model = platform.processor() or platform.machine()
    info = Path("/proc/cpuinfo")
    if info.exists():
        names = [line.split(":", 1)[1].strip() for line in info.read_text().splitlines()
                 if line.startswith("model name")]  # fmt: skip
        model = names[0] if names else model
    return (
        f"{model}, {os.cpu_count()} cores, {platform.system()}; Python "
        f"{platform.python_version()}, numpy {np.__version__}, numba {numba.__version__}, "
        f"llvmlite {llvmlite.__version__}."
    )


def main(output: Path, arguments: list[str] | None = None) -> None:
    """Command line of the benchmark."""
    parser = argparse.ArgumentParser(prog=COMMAND, description=__doc__)
    parser.add_argument("--repeats", type=int, default=Plan().repeats, help="of each timing")
    parser.add_argument("-o", "--output", type=Path, default=output)
    parser.add_argument("--profile", action="store_true", help="print where the time goes, only")
    parser.add_argument("--tolerance", action="store_true", help="print the study of it, only")
    given = parser.parse_args(arguments)
    only = _profile(Plan(repeats=given.repeats)) if given.profile else []
    only += study_section(Plan().study) if given.tolerance else []
    if only:
        print("\n\n".join(only))
        return
    text = report(Plan(repeats=given.repeats))
    given.output.write_text(text, encoding="utf-8")
    print(text)


def report(plan: Plan) -> str:
    """The whole page."""
    parts = [_head(), *_against_rival(plan), *_scaling(plan), *map_section(plan.map)]
    parts += [*study_section(plan.study), *_profile(plan)]
    return "\n\n".join(parts) + "\n"


def _head() -> str:
    return f"""# Benchmarks

Made by one command at the top of the checkout, which measures everything anew and overwrites this
page: `{COMMAND}`.

{machine()}

The shortest of several runs is given. Engine and rival run in one process, on one thread each, in
turns; compiling is not counted. The device is an invented bottom emitter (`tests/benchmarks/
devices.py`): on one planar glass slab an ITO film, two organic films, the emitter film, one more
organic film, aluminum; 400 to 800 nm, one dipole position, both orientations, all destinations,
default accuracy ({TOLERANCE:.0e} of the dissipated power).

The rival (`tests/benchmarks/rival.py`) is what a laboratory writes for itself: NumPy on
{RIVAL_POINTS:,} uniform points (middles of cells) of the real axis, all points at once for each
wavelength, both polarizations, the scattering recursion film by film. Its grid ends at twice the
largest index among films and glass, where the near field begins; what lies beyond (the engine
computes it, the rival does not) is not held against it, nor is its split of trapped power into
guided and plasmon. Two versions give the same answers. The *straight* one (`rival_plain.py`)
evaluates every output at every point, absorption in the films by volume integral both for the
dipole's own field and for light that the slab returns. The *spared* one (`rival.py`) saves what it
can: fields and slab only where light can leave, returned light's absorption as the rest. Below,
"the rival" is the spared one unless said otherwise. The straight version keeps what each film
absorbs, the engine only what all absorb together: there the comparison favors the engine."""


def _against_rival(plan: Plan) -> list[str]:
    timed = device(plan.wavelengths)
    sampled = np.unique(np.linspace(0, plan.wavelengths - 1, plan.samples).astype(int)).tolist()
    truths = [truth(timed, w) for w in sampled]
    budget = engine(timed)
    mine, theirs, spared, both_cores = fastest(
        [
            partial(engine, timed),
            partial(run_rival, timed, spared=False),
            partial(run_rival, timed),
            lambda: light.run_engine(timed.problem(), TOLERANCE),
        ],
        plan.repeats,
    )
    near = engine_errors(budget, truths)
    far = rival_errors(timed, RIVAL_POINTS, truths)
    count = plan.wavelengths
    rows = [
        ["time, ms", f"{1e3 * mine:.1f}", f"{1e3 * theirs:.0f}", f"{1e3 * spared:.0f}"],
        ["over the engine's", "1", f"{theirs / mine:.1f}", f"{spared / mine:.1f}"],
        ["per wavelength, us", f"{1e6 * mine / count:.0f}", f"{1e6 * theirs / count:.0f}",
         f"{1e6 * spared / count:.0f}"],
        ["worst error", f"{max(near):.1e}", f"{max(far):.1e}", "the same"],
        ["median error", f"{median(near):.1e}", f"{median(far):.1e}", "the same"],
    ]  # fmt: skip
    floor = steps(timed, budget) * STEP_NS * 1e-9
    claims = [
        f"- At least {AIM_FASTER:.0f} times faster than the straight rival: "
        f"{theirs / mine:.1f} times, "
        f"{verdict(theirs / mine >= AIM_FASTER)}.",
        f"- At least {AIM_CLOSER:.0f} times more accurate: {max(far) / max(near):,.0f} times, "
        f"{verdict(max(far) / max(near) >= AIM_CLOSER)}.",
        f"- Within {AIM_FLOOR:.0f} times of the floor (nodes x interfaces x {STEP_NS:.0f} ns, the "
        f"step of a tuned compiled recursion, both polarizations; {1e3 * floor:.1f} ms): "
        f"{mine / floor:.1f} times, {verdict(mine / floor <= AIM_FLOOR)}. That is "
        f"{1e9 * mine / steps(timed, budget):.0f} ns per interface step, everything included; "
        f"{budget.batches.mean():.1f} batches of 16 nodes per wavelength.",
        f"- All cores of this process (threads of the package itself): {1e3 * both_cores:.1f} ms, "
        f"{mine / both_cores:.2f} times one thread.",
    ]
    return [
        "## Against the rival",
        f"{timed.thickness_nm.size} films, one slab, {count} wavelengths. Errors: worst "
        f"destination over the dissipated power, both orientations, against the literal model of "
        f"the tests at {len(truths)} wavelengths.",
        markdown(["", "engine", "rival, straight", "rival, spared"], rows),
        "\n".join(claims),
        *_equal_accuracy(plan, truths, max(near), mine),
    ]


def _equal_accuracy(plan: Plan, truths: list[Truth], target: float, mine: float) -> list[str]:
    """How the rival's accuracy grows with its points, and what the engine costs when lax."""
    timed = device(plan.wavelengths)
    errors = [rival_errors(timed, points, truths) for points in plan.grids]
    worst = [max(found) for found in errors]
    timings = fastest(
        [partial(run_rival, timed, points) for points in plan.grids],
        max(1, plan.repeats // 8),
    )
    rows = [
        [f"{points:,}", f"{max(found):.1e}", f"{median(found):.1e}", f"{1e3 * seconds:,.0f}",
         f"{seconds / mine:,.0f}"]
        for points, found, seconds in zip(plan.grids, errors, timings, strict=True)
    ]  # fmt: skip

    def needed(accuracy: float) -> str:
        points = points_for(accuracy, plan.grids, worst)
        times = timings[-1] * points / plan.grids[-1] / mine
        return f"{points:.0e} points ({times:.0e} times the engine's time)"

    lax = []
    for tolerance in (1e-3, 1e-4, 1e-6, 1e-8):
        seconds = fastest([partial(engine, timed, tolerance)], plan.repeats)[0]
        found = engine(timed, tolerance)
        lax.append([f"{tolerance:.0e}", f"{max(engine_errors(found, truths)):.1e}",
                    f"{found.error.max():.1e}", f"{1e3 * seconds:.1f}",
                    f"{found.batches.mean():.1f}"])  # fmt: skip
    return [
        "### At equal accuracy",
        markdown(["rival's points", "worst error", "median error", "ms", "times the engine's time"],
                 rows),
        f"Its worst error falls as points to the power {exponent(plan.grids, worst):.2f}, for its "
        "points meet the square roots at the light lines by chance. Extrapolated by that law, at "
        f"the last row's time per point: {needed(TOLERANCE)} to reach the promised "
        f"{TOLERANCE:.0e}, {needed(target)} to reach the engine's {target:.1e}. Large grids are "
        "timed once, and the power comes from a few grids: orders of magnitude, no more.",
        "The engine at other accuracies:",
        markdown(["wanted", "worst error", "its own estimate", "ms", "batches per wavelength"],
                 lax),
    ]  # fmt: skip


def _times(devices: list[Device], repeats: int) -> list[float]:
    """Engine times of several devices, in turns."""
    return fastest([partial(engine, timed) for timed in devices], repeats)


def _scaling(plan: Plan) -> list[str]:
    stacked = [device(plan.wavelengths, films) for films in plan.films]
    rows = []
    for timed, seconds in zip(stacked, _times(stacked, plan.repeats), strict=True):
        budget = engine(timed)
        rows.append([
            str(timed.thickness_nm.size), f"{1e3 * seconds:.1f}",
            f"{1e6 * seconds / plan.wavelengths:.0f}", f"{budget.batches.mean():.1f}",
            f"{1e9 * seconds / steps(timed, budget):.0f}",
        ])  # fmt: skip
    spans = _times([device(count) for count in plan.spectra], plan.repeats)
    spectra = [
        [str(count), f"{1e3 * seconds:.2f}", f"{1e6 * seconds / count:.0f}"]
        for count, seconds in zip(plan.spectra, spans, strict=True)
    ]
    zoned = [device(plan.wavelengths, positions=count) for count in plan.zones]
    times = dict(zip(plan.zones, _times(zoned, plan.repeats), strict=True))
    zones = [
        [str(count), f"{1e3 * seconds:.1f}", f"{seconds / times[1]:.2f}"]
        for count, seconds in times.items()
    ]
    zone = times[20] / times[1]
    return [
        "## Scaling",
        "Films share the room below and above the emitter film, so that only their number grows.",
        markdown(["films", "ms", "us per wavelength", "batches per wavelength",
                  "ns per interface step"], rows),
        markdown(["wavelengths", "ms", "us per wavelength"], spectra),
        markdown(["positions", "ms", "times one position"], zones),
        f"A zone of 20 positions costs less than {AIM_ZONE:.0f} times one position: {zone:.2f} "
        f"times, {verdict(zone < AIM_ZONE)}.",
    ]  # fmt: skip


def _profile(plan: Plan) -> list[str]:
    timed = device(plan.wavelengths)
    found = batch.batch(timed.problem(), plan.wavelengths // 2, repeats=2 * plan.repeats)
    return [
        "## Where the time goes",
        "One batch of 16 nodes, both halves of the device, both polarizations. Batches below the "
        "axis find dissipated and trapped power; those on the axis find every destination, here "
        "with a slab that returns light at each node. The same table alone: "
        f"`{COMMAND} --profile`.",
        batch.table(found),
        f"The bare recursion (waves and reflection) takes {found.step_ns:.1f} ns per node and "
        f"interface on this machine; the floor above is set with {STEP_NS:.0f} ns.",
    ]
