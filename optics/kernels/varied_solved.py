"""Both half stacks at the nodes of a panel as complex arrays, for the rates of change.

Solved in rows (`planar`) like everything else, then unpacked: formulas of rates are many and
touch few numbers each, so they read better in complex numbers, and lose nothing.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import borrowing, inline
from optics.kernels.halfstack import inward, outward
from optics.kernels.planar import ROW, at
from optics.kernels.problem import Half, Source, Work, work_space
from optics.kernels.rules import NODES
from optics.kernels.whole import solve_waves


class Solved(NamedTuple):
    """One half stack; m media from the emitter film outward, leading axis s, p."""

    rows: Work  # what the others are unpacked from
    beyond: Floats  # (ROW,) zeros: reflection that a half by itself meets in the emitter film
    kz: Complexes  # (2, m, n), `halfstack.waves`
    y: Complexes  # (2, m, n)
    e: Complexes  # (2, m, n), of the emitter film too
    r_far: Complexes  # (2, m, n), `halfstack.outward`
    f: Complexes  # (2, m, n)
    t: Complexes  # (2, n) amplitude in the last medium: the last of f
    r_near: Complexes  # (2, m, n), `halfstack.inward`
    g: Complexes  # (2, m, n); entry 0 is the amplitude that arrives in the emitter film
    r_out: Complexes  # (2, n) reflection seen from the last medium: the last of r_near


@inline
def solved_space(m: int) -> Solved:
    """Arrays for a half stack of m media."""
    found = np.zeros((7, 2, m, NODES), dtype=np.complex128)
    return Solved(
        work_space(m),
        np.zeros(ROW),
        found[0],
        found[1],
        found[2],
        found[3],
        found[4],
        found[4, :, m - 1],
        found[5],
        found[6],
        found[5, :, m - 1],
    )


@borrowing
def unpack(rows: Floats, found: Complexes) -> None:
    """Rows (m, ROW) as complex numbers (2, m, NODES)."""
    for pol in range(2):
        for j in range(rows.shape[0]):
            row, to = rows[j], found[pol, j]
            for i in range(NODES):
                to[i] = at(row, pol * NODES + i)


@borrowing
def solve_outward(
    source: Source, up: Half, down: Half, solved_up: Solved, solved_down: Solved, u: Complexes
) -> None:
    """Waves of both halves at nodes u (NODES,), each lit from the emitter film."""
    solve_waves(source, up, down, solved_up.rows, solved_down.rows, u)
    _light_outward(solved_up)
    _light_outward(solved_down)


@borrowing
def _light_outward(half: Solved) -> None:
    rows = half.rows
    outward(rows.y, rows.e, rows.r_far, rows.f)
    unpack(rows.kz, half.kz)
    unpack(rows.y, half.y)
    unpack(rows.e, half.e)
    unpack(rows.r_far, half.r_far)
    unpack(rows.f, half.f)


@borrowing
def light_inward(half: Solved) -> None:
    """Light one half by itself from outside; its waves are at hand."""
    rows = half.rows
    inward(rows.y, rows.e, half.beyond, rows.r_near, rows.g)
    unpack(rows.r_near, half.r_near)
    unpack(rows.g, half.g)
