"""A device seen from one emitter film, for many wavelengths, as plain tuples of arrays.

Compiled functions take named tuples as they take arrays; these carry no behavior.
"""

from collections.abc import Iterable, Iterator, Sequence
from typing import Any, NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats, Integers
from optics.kernels.compiled import inline
from optics.kernels.planar import LANES, ROW
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
    """Rows (`planar`) of one half stack at the nodes of one panel, by medium."""

    kz: Floats  # (m, ROW)
    y: Floats  # (m, ROW)
    e: Floats  # (m, ROW)
    r: Floats  # (ROW,) reflection of the half stack
    r_far: Floats  # (m, ROW), `halfstack.outward`
    f: Floats  # (m, ROW)
    r_near: Floats  # (m, ROW), `halfstack.inward`
    g: Floats  # (m, ROW)
    alpha: Floats  # (m, LANES), `field.film_coefficients`
    beta: Floats  # (m, LANES)
    absorbed: Floats  # (LANES,) in all films, lit from the emitter film
    absorbed_outside: Floats  # (LANES,) in all films, lit from outside


class Scratch(NamedTuple):
    """Arrays that the source terms of one panel need; n nodes."""

    # From one dipole to either face and back: phase factor; size of the one way's, squared.
    by_bottom: Floats  # (ROW,)
    by_top: Floats  # (ROW,)
    fade_bottom: Floats  # (LANES,)
    fade_top: Floats  # (LANES,)
    inverse: Floats  # (ROW,) 1/(1 - ab), all round trips in the emitter film
    # By channel: power without the phases of ways to a face and back, and what stands before
    # these, bottom and top; dissipated power, and power sent down, up.
    plain: Floats  # (3, n)
    before: Floats  # (3, 2, 2n), complex
    carried: Floats  # (3, n)
    mirrored: Floats  # (3, 2, n) before the size of the way's phase factor, squared
    crossed: Floats  # (3, 2, 2n), complex
    stack: Floats  # (5, LANES) as one row: the whole stack lit from outside, `StackPowers`
    faces: Floats  # (2, 3n) by side: `exits.fill_faces`


@inline
def work_space(m: int) -> Work:
    """Work arrays for a half stack of m media."""
    rows = np.zeros((7, m, ROW))
    lanes = np.zeros((2, m, LANES))
    return Work(
        rows[0], rows[1], rows[2], np.zeros(ROW), rows[3], rows[4], rows[5], rows[6],
        lanes[0], lanes[1], np.zeros(LANES), np.zeros(LANES),
    )  # fmt: skip


@inline
def scratch_space() -> Scratch:
    """Set up the arrays."""
    return Scratch(
        np.zeros(ROW),
        np.zeros(ROW),
        np.zeros(LANES),
        np.zeros(LANES),
        np.zeros(ROW),
        np.zeros((3, NODES)),
        np.zeros((3, 2, 2 * NODES)),
        np.zeros((3, NODES)),
        np.zeros((3, 2, NODES)),
        np.zeros((3, 2, 2 * NODES)),
        np.zeros(5 * LANES),
        np.zeros((2, 3 * NODES)),
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


def rows_of(problem: Problem, rows: Integers) -> Problem:
    """Only some wavelengths of a problem."""
    up, down = problem.up, problem.down
    return Problem(
        Source(*(part[rows] for part in problem.source)),
        Sides(problem.sides.kind, *(part[rows] for part in problem.sides[1:])),
        Half(up.eps_o[rows], up.eps_e[rows], up.kd[rows]),
        Half(down.eps_o[rows], down.eps_e[rows], down.kd[rows]),
    )


def lossless_film(eps: Complexes, film: int) -> Complexes:
    """Permittivities with k of one film set to 0 and its n kept: eps = (Re sqrt eps)^2."""
    changed = eps.copy()
    changed[:, film] = np.sqrt(eps[:, film]).real ** 2
    return changed
