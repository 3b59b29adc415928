"""One wavelength's problem and its work space as plain tuples of arrays.

Compiled functions take named tuples as they take arrays; these carry no behavior.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.compiled import kernel
from optics.kernels.paths import NODES


class Half(NamedTuple):
    """Media from the emitter film outward: permittivities and k0 * thickness."""

    eps_o: np.ndarray
    eps_e: np.ndarray
    kd: np.ndarray


class Sides(NamedTuple):
    """Outside of the films; index 0 is the bottom, 1 the top."""

    kind: np.ndarray  # OPEN, PLANAR, MATCHED, ABSORBING
    n_outer: np.ndarray  # index of the medium next to the films (real part)
    n_out: np.ndarray  # index of the surroundings behind the slab
    loss: np.ndarray  # 4 pi k d / lambda of the slab


class Source(NamedTuple):
    """The emitter film (lossless) and the dipoles' places in it."""

    eps_o: float
    eps_e: float
    kd: float
    kz_positions: np.ndarray  # k0 * distance from the bottom face
    bulk: np.ndarray  # rates of a vertical and a horizontal dipole in the bulk, vacuum = 1


class Work(NamedTuple):
    """Arrays that one half stack needs at the nodes of one panel."""

    kz: np.ndarray
    y: np.ndarray
    e: np.ndarray
    r: np.ndarray
    r_far: np.ndarray
    f: np.ndarray
    t: np.ndarray
    r_near: np.ndarray
    g: np.ndarray
    r_out: np.ndarray
    alpha: np.ndarray
    beta: np.ndarray
    a_in: np.ndarray
    a_out: np.ndarray
    a_cross: np.ndarray


class Problem(NamedTuple):
    """Everything that is known about one wavelength."""

    source: Source
    sides: Sides
    up: Half
    down: Half


class Bench(NamedTuple):
    """All work space for one wavelength, allocated once."""

    up: Work
    down: Work
    u: np.ndarray
    du: np.ndarray
    shares: np.ndarray
    spare: np.ndarray
    values: np.ndarray
    moments: np.ndarray
    total: np.ndarray
    ends: np.ndarray


@kernel
def work_space(m):
    """Work arrays for a half stack of m media."""
    big = np.zeros((8, 2, m, NODES), dtype=np.complex128)
    small = np.zeros((3, 2, NODES), dtype=np.complex128)
    real = np.zeros((4, 2, m, NODES))
    return Work(
        big[0], big[1], big[2], small[0], big[3], big[4], small[1], big[5], big[6],
        small[2], real[0], real[1], real[2], real[3], big[7],
    )  # fmt: skip


@kernel
def bench_space(media_up, media_down, positions, columns):
    """Work space for half stacks of so many media and so many positions."""
    width = max(3, 2 * columns) * positions
    return Bench(
        work_space(media_up),
        work_space(media_down),
        np.zeros(NODES, dtype=np.complex128),
        np.zeros(NODES, dtype=np.complex128),
        np.zeros((2, columns)),
        np.zeros(columns),
        np.zeros((NODES, width)),
        np.zeros((3, width)),
        np.zeros(width),
        np.zeros((2, 2 * 64)),
    )
