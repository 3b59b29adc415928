"""Engine problems from plain stacks, and the engine's answers under the contract's names."""

from __future__ import annotations

from typing import Any, Protocol

import numpy as np

from optics.kernels import budget as engine
from optics.kernels.exits import ABSORBING, MATCHED, OPEN, PLANAR
from optics.kernels.problem import Problem, Sides, make_problem

Film = tuple[complex, complex, float]
Slab = dict[str, Any]

#: The seven destinations, in the engine's order, then what is reported beside them.
DESTINATIONS = (
    "air_bottom",
    "air_top",
    "substrate",
    "cover",
    "guided",
    "surface_plasmon",
    "absorbed",
)
NAMES = (*DESTINATIONS, "matched_bottom", "matched_top", "near_field")
VERTICAL, HORIZONTAL = 0, 1


class Stack(Protocol):
    """What `Reference` and `ReferenceCase` of the literal model have in common."""

    @property
    def wavelength_nm(self) -> float: ...
    @property
    def films(self) -> Any: ...
    @property
    def bottom(self) -> complex: ...
    @property
    def top(self) -> complex: ...
    @property
    def emitter(self) -> int: ...
    @property
    def z_nm(self) -> float: ...
    @property
    def substrate(self) -> Slab | None: ...
    @property
    def cover(self) -> Slab | None: ...


def film(n: complex, d_nm: float, n_e: complex | None = None) -> Film:
    """A film by its indices."""
    return complex(n) ** 2, complex(n if n_e is None else n_e) ** 2, d_nm


def metal(eps: complex, d_nm: float) -> Film:
    return complex(eps), complex(eps), d_nm


def slab(exit: str = "planar", k: float = 0.0, mm: float = 0.7, outside: float = 1.0) -> Slab:  # noqa: A002
    return {"k": k, "thickness_nm": mm * 1e6, "exit": exit, "outside_n": outside}


def sides_of(stack: Stack) -> Sides:
    """What lies outside the films, for one wavelength."""
    kinds, outer, out, loss = [], [], [], []
    for given, eps in ((stack.substrate, stack.bottom), (stack.cover, stack.top)):
        eps = complex(eps)
        index = np.sqrt(eps).real
        outer.append(index)
        if given is None:
            absorbing = eps.imag > 0.0 or eps.real < 0.0
            kinds.append(ABSORBING if absorbing else OPEN)
            out.append(index)
            loss.append(0.0)
        else:
            kinds.append(MATCHED if given["exit"] == "matched" else PLANAR)
            out.append(given["outside_n"])
            loss.append(4 * np.pi * given["k"] * given["thickness_nm"] / stack.wavelength_nm)
    return Sides(np.array(kinds), np.array([outer]), np.array([out], float), np.array([loss]))


def problem_of(stack: Stack, z_nm: list[float] | None = None) -> Problem:
    """Engine problem of a stack at its wavelength; other dipole positions if given."""
    return make_problem(
        np.array([stack.wavelength_nm], float),
        np.array([[f[0] for f in stack.films]], complex),
        np.array([[f[1] for f in stack.films]], complex),
        np.array([f[2] for f in stack.films], float),
        np.array([[stack.bottom, stack.top]], complex),
        stack.emitter,
        np.array([stack.z_nm] if z_nm is None else z_nm, float),
        sides_of(stack),
    )


def solved(
    stack: Stack, tolerance: float = 1e-6, positions_nm: list[float] | None = None
) -> engine.Budget:
    return engine.light_budget(problem_of(stack, positions_nm), tolerance)


def answers(budget: engine.Budget, orientation: int, row: int = 0, z: int = 0) -> dict[str, float]:
    """F ("dissipated") and every outcome of one orientation, by name."""
    named = dict(zip(NAMES, budget.shares[row, z, orientation].tolist(), strict=True))
    return {"dissipated": float(budget.dissipation[row, z, orientation]), **named}


def imbalance(budget: engine.Budget) -> float:
    """Largest share of the dissipated power that no destination accounts for."""
    found = budget.shares[..., : len(DESTINATIONS)].sum(axis=-1)
    return float(np.abs(found / budget.dissipation - 1.0).max())
