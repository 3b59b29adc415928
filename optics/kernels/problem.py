"""A device seen from one emitter film, for many wavelengths, as plain tuples of arrays.

Compiled functions take named tuples as they take arrays; these carry no behavior.
"""

from collections.abc import Iterable, Iterator, Sequence
from typing import Any, NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats, Integers
from optics.kernels.compiled import inline
from optics.kernels.rules import NODES


class Half(NamedTuple):
    """Media from the emitter film outward, both ends included."""

    eps_o: Complexes  # (w, m) in-plane permittivity
    eps_e: Complexes  # (w, m) normal permittivity
    kd: Floats  # (w, m) k0 * thickness; 0 for both ends


class Sides(NamedTuple):
    """What lies outside the films; last axis bottom, top."""

    kind: Integers  # (2,) OPEN, PLANAR, MATCHED, ABSORBING
    n_outer: Floats  # (w, 2) index of the medium next to the films (real part)
    n_out: Floats  # (w, 2) index of the surroundings behind the slab
    loss: Floats  # (w, 2) 4 pi k d / lambda of the slab


class Source(NamedTuple):
    """The emitter film (lossless) and the dipoles' places in it."""

    eps_o: Floats  # (w,)
    eps_e: Floats  # (w,)
    kd: Floats  # (w,)
    kz_positions: Floats  # (w, z) k0 * distance from the bottom face
    bulk: Floats  # (w, 2) rates of a vertical and a horizontal dipole in the bulk, vacuum = 1


class Problem(NamedTuple):
    """Everything the integrals need."""

    source: Source
    sides: Sides
    up: Half
    down: Half


class Work(NamedTuple):
    """Arrays that one half stack needs at the nodes of one panel."""

    kz: Complexes
    y: Complexes
    e: Complexes
    r: Complexes
    r_far: Complexes
    f: Complexes
    t: Complexes
    r_near: Complexes
    g: Complexes
    r_out: Complexes
    alpha: Floats
    beta: Floats
    a_in: Floats
    a_out: Floats
    a_cross: Complexes
    form: Complexes


class Scratch(NamedTuple):
    """Arrays that the source terms of one panel need."""

    to_bottom: Complexes  # (NODES, z) phase factor from the dipole to the bottom face
    to_top: Complexes  # (NODES, z)
    shares: Floats  # (2, COLUMNS) destinations of light sent down, up
    sent: Floats  # (2, z) power sent down, up
    faces: Floats  # (2, 3, NODES) by side: `source.side_face`


@inline
def work_space(m: int, nodes: int = NODES) -> Work:
    """Work arrays for a half stack of m media, at so many nodes together."""
    big = np.zeros((8, 2, m, nodes), dtype=np.complex128)
    small = np.zeros((3, 2, nodes), dtype=np.complex128)
    real = np.zeros((4, 2, m, nodes))
    form = np.zeros((3, 2, nodes), dtype=np.complex128)
    return Work(
        big[0], big[1], big[2], small[0], big[3], big[4], small[1], big[5], big[6],
        small[2], real[0], real[1], real[2], real[3], big[7], form,
    )  # fmt: skip


@inline
def scratch_space(positions: int, columns: int) -> Scratch:
    """Arrays for so many positions and columns of destinations."""
    phases = np.zeros((2, NODES, positions), dtype=np.complex128)
    return Scratch(
        phases[0],
        phases[1],
        np.zeros((2, columns)),
        np.zeros((2, positions)),
        np.zeros((2, 3, NODES)),
    )


def make_half(
    eps_o: Complexes, eps_e: Complexes, kd: Floats, outer: Complexes, emitter: int, step: int
) -> Half:
    """Media from the emitter film to one side: films in the direction of step, then outer.

    Parameters
    ----------
    eps_o, eps_e : complex (w, m)
        Films, bottom to top.
    kd : float (w, m)
    outer : complex (w,)
    emitter : int
    step : int
        1 for the upper half, -1 for the lower.
    """
    films = slice(emitter, None) if step > 0 else slice(emitter, None, -1)
    ends = np.zeros((kd.shape[0], 1))
    thickness = np.hstack([kd[:, films], ends])
    thickness[:, 0] = 0.0
    return Half(
        np.ascontiguousarray(np.hstack([eps_o[:, films], outer[:, None]])),
        np.ascontiguousarray(np.hstack([eps_e[:, films], outer[:, None]])),
        np.ascontiguousarray(thickness),
    )


def make_problem(
    wavelength_nm: Floats,
    eps_o: Complexes,
    eps_e: Complexes,
    thickness_nm: Floats,
    outer: Complexes,
    emitter: int,
    position_nm: Floats,
    sides: Sides,
) -> Problem:
    """Gather a device into arrays.

    Parameters
    ----------
    wavelength_nm : float (w,)
        In vacuum.
    eps_o, eps_e : complex (w, m)
        Permittivities of the films, bottom to top. Losses of the emitter film are dropped.
    thickness_nm : float (m,)
    outer : complex (w, 2)
        Permittivity of the media next to the films: bottom, top.
    emitter : int
        Index of the emitter film.
    position_nm : float (z,)
        Dipoles, from the bottom face of the emitter film.
    sides : Sides
    """
    k0_nm = 2.0 * np.pi / wavelength_nm
    kd = k0_nm[:, None] * thickness_nm[None, :]
    eps_o, eps_e = lossless_film(eps_o, emitter), lossless_film(eps_e, emitter)
    own_o, own_e = eps_o[:, emitter].real.copy(), eps_e[:, emitter].real.copy()
    n_o = np.sqrt(own_o)
    source = Source(
        own_o,
        own_e,
        kd[:, emitter].copy(),
        k0_nm[:, None] * position_nm[None, :],
        np.stack([n_o, (3.0 * own_o + own_e) / (4.0 * n_o)], axis=1),
    )
    return Problem(
        source,
        sides,
        make_half(eps_o, eps_e, kd, outer[:, 1], emitter, 1),
        make_half(eps_o, eps_e, kd, outer[:, 0], emitter, -1),
    )


def shape_of(problem: Problem) -> tuple[int | bytes, ...]:
    """What problems must have in common for `stacked`: sides, media above, below, positions."""
    _, positions = problem.source.kz_positions.shape
    media = problem.up.kd.shape[1], problem.down.kd.shape[1]
    return (problem.sides.kind.tobytes(), *media, positions)


def stacked(problems: Sequence[Problem]) -> Problem:
    """Many devices of one shape as one problem, wavelengths after each other.

    Each row of a problem is a device at a wavelength of its own, so whatever is computed of all
    of them at once is to the last bit what it is of each one alone.

    Parameters
    ----------
    problems : sequence of Problem
        Of the same `shape_of`.
    """
    if len(problems) == 1:
        return problems[0]

    def joined(parts: Iterable[tuple[Any, ...]]) -> Iterator[Any]:
        return (np.concatenate(arrays) for arrays in zip(*parts, strict=True))

    return Problem(
        Source(*joined(one.source for one in problems)),
        Sides(problems[0].sides.kind, *joined(one.sides[1:] for one in problems)),
        Half(*joined(one.up for one in problems)),
        Half(*joined(one.down for one in problems)),
    )


def lossless_film(eps: Complexes, film: int) -> Complexes:
    """Permittivities with k of one film set to 0 and its n kept: eps = (Re sqrt eps)^2."""
    changed = eps.copy()
    changed[:, film] = np.sqrt(eps[:, film]).real ** 2
    return changed
