"""Where the engine's time goes: each part of one batch of nodes, timed from a compiled loop."""

from __future__ import annotations

import time
from dataclasses import dataclass
from typing import Any

import numba
import numpy as np

from optics.kernels import halfstack, integrate, paths, source
from optics.kernels.exits import COLUMNS
from optics.kernels.problem import Problem, scratch_space, work_space
from optics.kernels.rules import NODES, STAGES

_compiled: Any = numba.njit(error_model="numpy")
# Changes a node by next to nothing, so that no compiler can do a part once for all rounds.
_NUDGE = 1e-16


@_compiled
def _setup(problem: Problem, w: int) -> Any:
    own, sides, up, down = integrate.at_wavelength(problem, w)
    work_up, work_down = work_space(up.kd.size), work_space(down.kd.size)
    scratch = scratch_space(own.kz_positions.size, COLUMNS)
    u, du = np.zeros(NODES, np.complex128), np.zeros(NODES, np.complex128)
    return own, sides, (up, down), (work_up, work_down), scratch, u, du


@_compiled
def _place(n, kind, hi, depth, u, du):  # type: ignore[no-untyped-def]
    for i in range(n):
        paths.place(kind, 0.0, hi, depth, 0.0, 1.0 - i * _NUDGE, 0, u, du)


@_compiled
def _waves(n, halves, works, u):  # type: ignore[no-untyped-def]
    for _ in range(n):
        u[0] += _NUDGE
        for h, w in zip(halves, works):  # noqa: B905 - not known to the compiler
            halfstack.waves(u, h.eps_o, h.eps_e, h.kd, w.kz, w.y, w.e)


@_compiled
def _reflection(n, works):  # type: ignore[no-untyped-def]
    for _ in range(n):
        for w in works:
            w.y[0, 0, 0] += _NUDGE
            halfstack.reflection(w.y, w.e, w.r)


@_compiled
def _outward(n, works):  # type: ignore[no-untyped-def]
    for _ in range(n):
        for w in works:
            w.y[0, 0, 0] += _NUDGE
            halfstack.outward(w.y, w.e, w.r_far, w.f, w.t)


@_compiled
def _inward(n, works):  # type: ignore[no-untyped-def]
    for _ in range(n):
        for w in works:
            w.y[0, 0, 0] += _NUDGE
            halfstack.inward(w.y, w.e, w.r_near, w.g, w.r_out)


@_compiled
def _halves(n, halves, works, u):  # type: ignore[no-untyped-def]
    for _ in range(n):
        u[0] += _NUDGE
        for h, w in zip(halves, works):  # noqa: B905 - not known to the compiler
            source.solve_half(h, w, u, True)


@_compiled
def _dissipated(n, own, halves, works, scratch, u, du, values):  # type: ignore[no-untyped-def]
    for _ in range(n):
        u[0] += _NUDGE
        source.dissipated(
            own, halves[0], halves[1], works[0], works[1], scratch, u, du, False, values
        )


@_compiled
def _radiated(n, own, sides, halves, works, scratch, u, du, values):  # type: ignore[no-untyped-def]
    for _ in range(n):
        u[0] += _NUDGE
        source.radiated(
            own, sides, halves[0], halves[1], works[0], works[1], scratch, u, du, values
        )


@_compiled
def _probed(groups, positions):  # type: ignore[no-untyped-def]
    return paths.probed_columns(groups, positions)


@_compiled
def _error(n, values, scale, probed, moments, misses):  # type: ignore[no-untyped-def]
    for _ in range(n):
        values[0, 0] += _NUDGE
        paths.panel_error(values, 0, scale, probed, moments, misses)


@dataclass(frozen=True, slots=True)
class Kind:
    """Parts of one kind of batch, microseconds; `whole` is timed by itself."""

    parts: dict[str, float]
    whole: float

    @property
    def rest(self) -> float:
        """Source terms, destinations, bounces: what the parts leave of the whole."""
        return self.whole - sum(self.parts.values())


@dataclass(frozen=True, slots=True)
class Batch:
    """A batch of NODES nodes of both halves, both polarizations, microseconds."""

    below_axis: Kind
    real: Kind
    error_below_axis: float
    error_real: float
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
    own, sides, halves, works, scratch, u, du = _setup(problem, w)
    z = own.kz_positions.size
    few, many = np.zeros((STAGES * NODES, 3 * z)), np.zeros((STAGES * NODES, 2 * COLUMNS * z))

    def error(values: Any) -> tuple[Any, ...]:
        columns = values.shape[1]
        probed = _probed(columns // z, z)
        return (
            _error,
            values,
            np.ones(columns),
            probed,
            np.zeros((4, probed.size)),
            np.zeros(columns),
        )

    arc = _us(
        {
            "nodes": (_place, paths.ARC, 3.5, 1.0, u, du),
            "waves": (_waves, halves, works, u),
            "reflection": (_reflection, works),
            "whole": (_dissipated, own, halves, works, scratch, u, du, few[:NODES]),
            "error": error(few),
        },
        calls,
        repeats,
    )
    # Up to the light line of air: the slab sends light back at every node.
    real = _us(
        {
            "nodes": (_place, paths.REAL_FROM_ZERO, 1.0, 0.0, u, du),
            "waves": (_waves, halves, works, u),
            "outward": (_outward, works),
            "inward": (_inward, works),
            "halves": (_halves, halves, works, u),
            "whole": (_radiated, own, sides, halves, works, scratch, u, du, many[:NODES]),
            "error": error(many),
        },
        calls,
        repeats,
    )
    real["fields"] = real.pop("halves") - real["waves"] - real["outward"] - real["inward"]
    errors = arc.pop("error"), real.pop("error")
    wholes = arc.pop("whole") + arc["nodes"], real.pop("whole") + real["nodes"]
    interfaces = sum(half.kd.size - 1 for half in halves)
    return Batch(Kind(arc, wholes[0]), Kind(real, wholes[1]), *errors, interfaces)


def table(found: Batch) -> str:
    """Both kinds of batch side by side, in Markdown."""
    rows = ["| part | below the axis, us | on the axis, us |", "| --- | --- | --- |"]
    names = list(dict.fromkeys([*found.below_axis.parts, *found.real.parts]))
    for name in names:
        cells = [kind.parts.get(name) for kind in (found.below_axis, found.real)]
        shown = ["" if us is None else f"{us:.2f}" for us in cells]
        rows.append(f"| {name} | {shown[0]} | {shown[1]} |")
    rows.append(
        f"| dipole, destinations, bounces (the rest) | {found.below_axis.rest:.2f} "
        f"| {found.real.rest:.2f} |"
    )
    rows.append(f"| **together** | **{found.below_axis.whole:.2f}** | **{found.real.whole:.2f}** |")
    rows.append(f"| error estimate | {found.error_below_axis:.2f} | {found.error_real:.2f} |")
    return "\n".join(rows)
