"""Where the engine's time goes: each part of one batch of nodes, timed from a compiled loop."""

from __future__ import annotations

import time
from dataclasses import dataclass
from typing import Any

import numba
import numpy as np

from optics.kernels import halfstack, integrate, panel, paths, source, whole
from optics.kernels.exits import COLUMNS
from optics.kernels.problem import Problem, scratch_space, work_space
from optics.kernels.rules import DEGREES, NODES, PANEL_NODES

_compiled: Any = numba.njit(error_model="numpy")
# Changes a node by next to nothing, so that no compiler can do a part once for all rounds.
_NUDGE = 1e-16


@_compiled
def _setup(problem: Problem, w: int) -> Any:
    own, sides, up, down = integrate.at_wavelength(problem, w)
    works = work_space(up.kd.size), work_space(down.kd.size)
    u, du = np.zeros(NODES, np.complex128), np.zeros(NODES, np.complex128)
    light = panel.light_space(own.kz_positions.size)
    return own, sides, (up, down), works, scratch_space(), u, du, light


@_compiled
def _place(n, kind, hi, depth, u, du):  # type: ignore[no-untyped-def]
    for i in range(n):
        paths.place(kind, 0.0, hi, depth, 0.0, 1.0 - i * _NUDGE, 0, u, du)


@_compiled
def _waves(n, own, halves, works, u):  # type: ignore[no-untyped-def]
    for _ in range(n):
        u[0] += _NUDGE
        whole.solve_waves(own, halves[0], halves[1], works[0], works[1], u)


@_compiled
def _reflection(n, works):  # type: ignore[no-untyped-def]
    for _ in range(n):
        for w in works:
            w.y[0, 0] += _NUDGE
            halfstack.reflection(w.y, w.e, w.r)


@_compiled
def _outward(n, works):  # type: ignore[no-untyped-def]
    for _ in range(n):
        for w in works:
            w.y[0, 0] += _NUDGE
            halfstack.outward(w.y, w.e, w.r_far, w.f)


@_compiled
def _inward(n, near, far):  # type: ignore[no-untyped-def]
    for _ in range(n):
        near.y[0, 0] += _NUDGE
        halfstack.inward(near.y, near.e, far.r_far[0], near.r_near, near.g)


@_compiled
def _solve(n, halves, works, u):  # type: ignore[no-untyped-def]
    """Everything about the films but their waves: lit from the emitter film, and from below."""
    for _ in range(n):
        u[0] += _NUDGE
        for h, w in zip(halves, works):  # noqa: B905 - not known to the compiler
            w.y[0, 0] += _NUDGE
            whole.solve_half(h, w, u)
        whole.light_half(halves[1], works[0].r_far[0], works[1])


@_compiled
def _dissipated(n, own, halves, works, scratch, u, du, values):  # type: ignore[no-untyped-def]
    for _ in range(n):
        u[0] += _NUDGE
        source.dissipated(own, halves[0], halves[1], works[0], works[1], scratch, u, du, 0, values)


@_compiled
def _radiated(n, own, sides, halves, works, scratch, u, du, light):  # type: ignore[no-untyped-def]
    for _ in range(n):
        u[0] += _NUDGE
        source.radiated(
            own, sides, halves[0], halves[1], works[0], works[1], scratch, u, du, 0, light
        )


@_compiled
def _probed(groups, positions):  # type: ignore[no-untyped-def]
    return panel.probed_columns(groups, positions)


@_compiled
def _error(n, values, scale, probed, misses):  # type: ignore[no-untyped-def]
    for _ in range(n):
        values[0, 0] += _NUDGE
        panel.panel_error(values, 0, scale, probed, misses)


@_compiled
def _light_error(n, light, scale, probed, moments, misses):  # type: ignore[no-untyped-def]
    for _ in range(n):
        light.total[0, 0, 0] += _NUDGE
        panel.light_error(light, 0, scale, probed, moments, misses)


@_compiled
def _sum(n, values, misses, result, error):  # type: ignore[no-untyped-def]
    for _ in range(n):
        panel.panel_sum(values, 0, misses, result, error)


@_compiled
def _light_sum(n, light, misses, result, error):  # type: ignore[no-untyped-def]
    for _ in range(n):
        panel.light_sum(light, 0, misses, result, error)


@dataclass(frozen=True, slots=True)
class Kind:
    """Parts of one kind of batch, microseconds; `whole` is timed by itself."""

    parts: dict[str, float]
    whole: float
    error: float  # estimate of a panel's error after one batch
    sums: float  # of a panel of one batch

    @property
    def rest(self) -> float:
        """Source terms, slab faces, destinations: what the parts leave of the whole."""
        return self.whole - sum(self.parts.values())


@dataclass(frozen=True, slots=True)
class Batch:
    """A batch of NODES nodes of both halves, both polarizations, microseconds."""

    below_axis: Kind
    real: Kind
    interfaces: int

    @property
    def step_ns(self) -> float:
        """The bare recursion: waves and reflection, per node and interface."""
        bare = self.below_axis.parts["waves"] + self.below_axis.parts["reflection"]
        return 1e3 * bare / (NODES * self.interfaces)


def _us(jobs: dict[str, tuple[Any, ...]], calls: int, repeats: int) -> dict[str, float]:
    """Shortest time of one call of each job (function, arguments), in turns, microseconds."""
    best = dict.fromkeys(jobs, np.inf)
    for function, *given in jobs.values():
        function(1, *given)
    for _ in range(repeats):
        for name, (function, *given) in jobs.items():
            started = time.perf_counter()
            function(calls, *given)
            best[name] = min(best[name], (time.perf_counter() - started) / calls * 1e6)
    return best


def batch(problem: Problem, w: int, calls: int = 300, repeats: int = 25) -> Batch:
    """Time every part at wavelength number w."""
    own, sides, halves, works, scratch, u, du, light = _setup(problem, w)
    z = own.kz_positions.size
    power = np.zeros((3, z, PANEL_NODES))
    by_column = power.reshape(3 * z, PANEL_NODES)
    few, many = np.ones((4, 3 * z)), np.ones((4, 2 * COLUMNS * z))
    probed = _probed(1, z)
    waves = {"waves": (_waves, own, halves, works, u)}
    arc = _us(
        {
            "nodes": (_place, paths.ARC, 3.5, 1.0, u, du),
            **waves,
            "reflection": (_reflection, works),
            "whole": (_dissipated, own, halves, works, scratch, u, du, power),
            "error": (_error, by_column, few[0], _probed(3, z), few[1]),
            "sums": (_sum, by_column, few[1], few[2], few[3]),
        },
        calls,
        repeats,
    )
    # Up to the light line of air: the slab below sends light back at every node.
    real = _us(
        {
            "nodes": (_place, paths.REAL_FROM_ZERO, 1.0, 0.0, u, du),
            **waves,
            "outward": (_outward, works),
            "inward": (_inward, works[1], works[0]),
            "films": (_solve, halves, works, u),
            "whole": (_radiated, own, sides, halves, works, scratch, u, du, light),
            "error": (
                _light_error, light, many[0], probed, np.zeros((DEGREES, probed.size)), many[1]
            ),
            "sums": (_light_sum, light, many[1], many[2], many[3]),
        },
        calls,
        repeats,
    )  # fmt: skip
    real["fields"] = real.pop("films") - real["outward"] - real["inward"]
    interfaces = sum(half.kd.size - 1 for half in halves)
    return Batch(_kind(arc), _kind(real), interfaces)


def _kind(us: dict[str, float]) -> Kind:
    """Sort what was timed; `whole` was timed at nodes that were placed before."""
    beside = {"whole", "error", "sums"}
    parts = {name: time_us for name, time_us in us.items() if name not in beside}
    return Kind(parts, us["whole"] + us["nodes"], us["error"], us["sums"])


def table(found: Batch) -> str:
    """Both kinds of batch side by side, in Markdown."""
    rows = ["| part | below the axis, us | on the axis, us |", "| --- | --- | --- |"]
    below, real = found.below_axis, found.real
    for name in dict.fromkeys([*below.parts, *real.parts]):
        cells = [kind.parts.get(name) for kind in (below, real)]
        shown = ["" if us is None else f"{us:.2f}" for us in cells]
        rows.append(f"| {name} | {shown[0]} | {shown[1]} |")
    rows += [
        f"| source terms, slab faces, destinations (the rest) | {below.rest:.2f} "
        f"| {real.rest:.2f} |",
        f"| **together** | **{below.whole:.2f}** | **{real.whole:.2f}** |",
        f"| error estimate of a panel | {below.error:.2f} | {real.error:.2f} |",
        f"| sums of a panel | {below.sums:.2f} | {real.sums:.2f} |",
    ]
    return "\n".join(rows)
