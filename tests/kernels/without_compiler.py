"""Run the engine with compilation off, optionally with an error planted; print JSON.

Usage: python without_compiler.py MODE STACK...
with NUMBA_DISABLE_JIT=1, and this folder and the one above it on PYTHONPATH.

MODE: plain, directions, film (fields of one film 1 + 1e-6 too large), source (F of the vertical
dipole 1 + 1e-6 too large).
"""

from __future__ import annotations

import json
import sys
from typing import Any

import numpy as np
from reference import Reference
from reference_cases import load
from stacks import film, problem_of, solved

from optics.kernels import dipole, directions, whole

PLANTED = 1e-6
STACKS: dict[str, Any] = {case.name: case for case in load()}
# One absorbing film, the first above the emitter film; no slabs, so nothing comes back.
STACKS["one absorber"] = Reference(
    550, [film(1.6, 60), film(1.8, 40), film(1.9 + 0.3j, 60)], 1.5**2, 1.0, 1, 18
)
# A guide that leaks through 2.5 um into a dense medium: a mode 1e-17 from the axis.
STACKS["hidden mode"] = Reference(
    385, [film(1.5, 400), film(1.75, 80), film(1.5, 2500)], 1.5**2, 1.72**2, 1, 30.0
)
# Twenty dipoles, computed from fewer.
STACKS["many dipoles"] = Reference(
    550, [film(1.7, 60), film(1.8, 40), film(1.7, 60)], 1.5**2, 1.0, 1, 18
)
MANY = {"many dipoles": np.linspace(1.0, 39.0, 20).tolist()}
# What resolves a hidden mode is interpreted line by line; a coarse answer takes the same lines.
TOLERANCES = {"one absorber": 1e-9, "hidden mode": 1e-3}


def plant(mode: str) -> None:
    """Put the error in."""
    if mode == "film":
        right = whole.absorbed_in_film

        def wrong(*arrays: Any) -> None:
            *given, total = arrays
            alone = np.zeros_like(total)
            right(*given, alone)
            total += alone * (1 + PLANTED) ** 2

        whole.absorbed_in_film = wrong
    elif mode == "source":
        factor = dipole.dissipated_factor

        def larger(c: int, *rest: Any) -> complex:
            return factor(c, *rest) * (1 + PLANTED if c == 0 else 1)

        dipole.dissipated_factor = larger


def outcome(name: str) -> dict[str, Any]:
    found = solved(STACKS[name], TOLERANCES.get(name, 1e-6), MANY.get(name))
    return {
        "shares": found.shares.tolist(),
        "dissipation": found.dissipation.tolist(),
        "error": found.error.tolist(),
        "careful": found.careful.tolist(),
    }


def directed(name: str) -> dict[str, Any]:
    problem = problem_of(STACKS[name])
    u = np.linspace(0.0, 1.5, 18)[None]
    sent = np.zeros((1, 2, 3, u.size, 1))
    directions.sent_into_directions(problem, u, sent)
    lit = np.zeros((1, 2, u.size, 5))
    directions.lit_from_outside(problem, u, lit)
    return {"sent": sent.tolist(), "lit": lit.tolist()}


if __name__ == "__main__":
    mode, *names = sys.argv[1:]
    plant(mode)
    run = directed if mode == "directions" else outcome
    print(json.dumps({name: run(name) for name in names}))
