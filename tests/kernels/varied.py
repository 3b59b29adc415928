"""Stacks that change along a direction: the engine's rates, and differences to compare with."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray
from reference_cases import ReferenceCase
from stacks import Stack, sides_of

from optics.kernels.exits import ABSORBING, MATCHED, OPEN, PLANAR
from optics.kernels.problem import Problem, Sides, make_problem
from optics.kernels.variation import Rates, Variation, make_rates, no_variation

Array = NDArray[Any]


@dataclass(frozen=True, slots=True)
class Device:
    """A stack as the arrays that a `Variation` changes."""

    wavelength_nm: Array
    emitter: int
    kind: Array
    eps_o: Array  # (1, m)
    eps_e: Array  # (1, m)
    thickness_nm: Array  # (m,)
    outer: Array  # (1, 2)
    n_out: Array  # (1, 2)
    loss: Array  # (1, 2)
    position_nm: Array  # (z,)

    @property
    def problem(self) -> Problem:
        n_outer = np.sqrt(self.outer).real
        n_out = np.where(self.kind == OPEN, n_outer, self.n_out)
        return make_problem(
            self.wavelength_nm,
            self.eps_o,
            self.eps_e,
            self.thickness_nm,
            self.outer,
            self.emitter,
            self.position_nm,
            Sides(self.kind, n_outer, n_out, self.loss),
        )

    def moved(self, direction: Variation, step: float) -> Device:
        """The device a step along the first direction of a variation."""
        changes = {
            name: getattr(self, name) + step * getattr(direction, name)[0]
            for name in Variation._fields
        }
        return replace(self, **changes)

    def rates(self, directions: list[Variation]) -> Rates:
        """Rates of its problem along all of them."""
        together = Variation(*(np.concatenate(parts) for parts in zip(*directions, strict=True)))
        return make_rates(self.problem, self.wavelength_nm, together)

    def nothing(self) -> Variation:
        """One direction in which nothing changes yet."""
        return no_variation(1, 1, self.thickness_nm.size, self.position_nm.size)


def device_of(stack: Stack, z_nm: list[float] | None = None) -> Device:
    """A stack of the literal model; other dipole positions if given."""
    sides = sides_of(stack)
    return Device(
        np.array([stack.wavelength_nm], float),
        stack.emitter,
        sides.kind,
        np.array([[f[0] for f in stack.films]], complex),
        np.array([[f[1] for f in stack.films]], complex),
        np.array([f[2] for f in stack.films], float),
        np.array([[stack.bottom, stack.top]], complex),
        sides.n_out,
        sides.loss,
        np.array([stack.z_nm] if z_nm is None else z_nm, float),
    )


def directions_of(device: Device) -> dict[str, Variation]:
    """Every number of a device as a direction, by name."""
    found: dict[str, Variation] = {}

    def add(name: str, field: str, place: tuple[int, ...], rate: complex) -> None:
        direction = found.setdefault(name, device.nothing())
        getattr(direction, field)[(0, *place)] = rate

    for j in range(device.thickness_nm.size):
        add(f"thickness of film {j}", "thickness_nm", (j,), 1.0)
        n_o, n_e = np.sqrt(device.eps_o[0, j]), np.sqrt(device.eps_e[0, j])
        isotropic = device.eps_o[0, j] == device.eps_e[0, j]
        for part, unit in (("n", 1.0), ("k", 1.0j)):
            if part == "k" and (j == device.emitter or device.eps_o[0, j].imag == 0.0):
                continue  # the emitter film has none, and k below 0 would be gain
            if isotropic:
                add(f"{part} of film {j}", "eps_o", (0, j), 2.0 * n_o * unit)
                add(f"{part} of film {j}", "eps_e", (0, j), 2.0 * n_e * unit)
            else:
                add(f"ordinary {part} of film {j}", "eps_o", (0, j), 2.0 * n_o * unit)
                add(f"extraordinary {part} of film {j}", "eps_e", (0, j), 2.0 * n_e * unit)
    for s, side in enumerate(("bottom", "top")):
        n = np.sqrt(device.outer[0, s])
        add(f"n next to the films at the {side}", "outer", (0, s), 2.0 * n)
        if device.kind[s] == ABSORBING:
            add(f"k next to the films at the {side}", "outer", (0, s), 2.0j * n)
        if device.kind[s] == PLANAR:
            add(f"n of the surroundings at the {side}", "n_out", (0, s), 1.0)
        if device.kind[s] in (PLANAR, MATCHED) and device.loss[0, s] > 0.0:
            add(f"loss of the slab at the {side}", "loss", (0, s), device.loss[0, s])
    for q in range(device.position_nm.size):
        add(f"position {q}", "position_nm", (q,), 1.0)
    return found


def step_of(name: str) -> float:
    """How far a difference goes along a direction of `directions_of`."""
    if name.startswith(("thickness", "position")):
        return 0.04  # nm
    return 0.01 if name.startswith("loss") else 2e-4  # of itself; of n or k


def slope(value: Callable[[float], Array], step: float) -> tuple[Array, float]:
    """Derivative at 0 by central differences, extrapolated twice; and how sure that is."""
    coarse, fine, finest = (
        (value(h) - value(-h)) / (2.0 * h) for h in (step, step / 2.0, step / 4.0)
    )
    once, again = (4.0 * fine - coarse) / 3.0, (4.0 * finest - fine) / 3.0
    twice: Array = (16.0 * again - once) / 15.0
    return twice, float(np.abs(twice - again).max())


def apart(case: ReferenceCase) -> ReferenceCase:
    """The case with air on top a little denser than the air behind its slab.

    Where light lines coincide there is no derivative by one of them alone.
    """
    return replace(case, top=1.02**2 + 0j) if case.top == 1.0 else case
