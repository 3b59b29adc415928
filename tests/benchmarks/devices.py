"""The device that is timed: an invented bottom emitter of six films on glass.

Conductor, three films below and one above the emitter film, aluminum; conductor and metal are
bundled tables, the rest is invented.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from reference import Reference

from optics.device import catalogue
from optics.kernels.exits import OPEN, PLANAR
from optics.kernels.problem import Problem, Sides, make_problem

from .rival import PlainStack

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]

GLASS_INDEX, GLASS_K, GLASS_MM = 1.52, 1e-8, 0.7
# Cauchy coefficients A, B (nm^2) and k of the organic films, invented.
INJECTION, TRANSPORT, HOST, BLOCKING = (
    (1.66, 9e3, 2e-3), (1.71, 1.3e4, 0.0), (1.70, 1.6e4, 0.0), (1.65, 1.1e4, 0.0),
)  # fmt: skip
EMITTER_NM, DIPOLE_NM = 24.0, 8.0


@dataclass(frozen=True, slots=True)
class Device:
    """Films bottom to top at all wavelengths."""

    wavelength_nm: Floats  # (w,)
    eps: Complexes  # (w, m)
    thickness_nm: Floats  # (m,)
    emitter: int
    positions_nm: Floats  # (z,)

    @property
    def slab_loss(self) -> Floats:
        """4 pi k d / lambda of the glass (w,)."""
        loss: Floats = 4 * np.pi * GLASS_K * GLASS_MM * 1e6 / self.wavelength_nm
        return loss

    def problem(self) -> Problem:
        """What the engine takes."""
        one = np.ones(self.wavelength_nm.size)
        sides = Sides(
            np.array([PLANAR, OPEN]),
            np.stack([GLASS_INDEX * one, one], axis=1),
            np.stack([one, one], axis=1),
            np.stack([self.slab_loss, 0.0 * one], axis=1),
        )
        outer = np.stack([GLASS_INDEX**2 * one, one], axis=1).astype(complex)
        return make_problem(
            self.wavelength_nm, self.eps, self.eps, self.thickness_nm, outer, self.emitter,
            self.positions_nm, sides,
        )  # fmt: skip

    def plain(self, w: int) -> PlainStack:
        """What the rival takes: wavelength number w, first position."""
        k0_nm = 2 * np.pi / self.wavelength_nm[w]
        return PlainStack(
            self.eps[w],
            k0_nm * self.thickness_nm,
            self.emitter,
            float(k0_nm * self.positions_nm[0]),
            GLASS_INDEX,
            float(self.slab_loss[w]),
            1.0,
            1.0,
        )

    def reference(self, w: int) -> Reference:
        """What the literal model takes: wavelength number w, first position."""
        films = [(complex(e), complex(e), float(d))
                 for e, d in zip(self.eps[w], self.thickness_nm, strict=True)]  # fmt: skip
        glass = {"k": GLASS_K, "thickness_nm": GLASS_MM * 1e6, "exit": "planar", "outside_n": 1.0}
        return Reference(
            float(self.wavelength_nm[w]), films, complex(GLASS_INDEX**2), 1 + 0j, self.emitter,
            float(self.positions_nm[0]), glass,
        )  # fmt: skip

    def end(self, w: int) -> float:
        """Cut-off of the rival's grid: twice the largest index, where the near field begins."""
        return 2.0 * max(GLASS_INDEX, float(np.sqrt(self.eps[w]).real.max()))


def _tabulated(name: str, wavelength_nm: Floats) -> Complexes:
    eps: Complexes = catalogue.load(name).permittivity(wavelength_nm)[0]
    return eps


def _cauchy(constants: tuple[float, float, float], wavelength_nm: Floats) -> Complexes:
    a, b, k = constants
    eps: Complexes = (a + b / wavelength_nm**2 + 1j * k) ** 2
    return eps


def device(wavelengths: int = 81, films: int = 6, positions: int = 1) -> Device:
    """The device at so many wavelengths from 400 to 800 nm, with so many films and dipoles.

    The room below and above the emitter film stays as thick, whatever the number of films that
    share it. More than one dipole are spread evenly over the emitter film.
    """
    nm = np.linspace(400.0, 800.0, wavelengths) if wavelengths > 1 else np.array([550.0])
    ito, mirror = _tabulated("ito-konig", nm), _tabulated("al-rakic", nm)
    transport, host = _cauchy(TRANSPORT, nm), _cauchy(HOST, nm)
    injection, blocking = _cauchy(INJECTION, nm), _cauchy(BLOCKING, nm)
    # Three films are conductor, emitter film and metal; the others fill the room between them.
    above = max(films - 4, 0) // 2
    below = films - 3 - above
    eps = [ito, *([injection] + [transport, blocking] * below)[:below], host]
    eps += [*([blocking, transport] * above)[:above], mirror]
    thickness = [120.0, *[80.0 / max(below, 1)] * below, EMITTER_NM]
    thickness += [*[50.0 / max(above, 1)] * above, 100.0]
    emitter = below + 1
    at = (
        np.array([DIPOLE_NM])
        if positions == 1
        else EMITTER_NM * (np.arange(positions) + 0.5) / positions
    )
    return Device(nm, np.stack(eps, axis=1), np.array(thickness), emitter, at)
