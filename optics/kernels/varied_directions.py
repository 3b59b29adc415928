"""Rates of change of the light that leaves in one direction, after all slabs.

The twin of `directions` and `angles`. A direction fixed outside the device moves in in-plane
wavevector when the index there changes: u = n sin(angle).
"""

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import borrowing, kernel
from optics.kernels.dipole import channel
from optics.kernels.exits import AIR_BOTTOM, AIR_TOP, exit_line
from optics.kernels.integrate import at_wavelength
from optics.kernels.problem import Problem
from optics.kernels.rules import NODES
from optics.kernels.variation import Rates, rates_at
from optics.kernels.varied_radiated import sent_rates, shares_of_panel, solve_varied
from optics.kernels.varied_response import find_moves, moves_space, response_space
from optics.kernels.varied_solved import solved_space
from optics.kernels.varied_source import SENT_DOWN, SENT_UP, VariedScratch, varied_scratch

# Stands for u = 0, where the power per du over u is 0/0; as in `directions`.
_NORMAL = 1e-120


def leaving_rates(problem: Problem, rates: Rates, u: Floats, u_rate: Floats, side: int) -> Floats:
    """Rates of the power that leaves the device on one side, per du and divided by u.

    Parameters
    ----------
    problem : Problem
    rates : Rates
        From `variation.make_rates`.
    u : float (w, n)
        In-plane wavevectors over k0, from 0.
    u_rate : float (w, p, n)
        Their rates, 0 where u is 0: for directions fixed in a medium of index n, u dn/n.
    side : int
        0 bottom, 1 top.

    Returns
    -------
    float (p, w, 3, n, z)
        Rates of `angles.leaving`. 0 from the light line of that exit on.
    """
    w, directions, n = u_rate.shape
    out = np.zeros((w, directions, 3, n, problem.source.kz_positions.shape[1]))
    _leaving_rates(problem, rates, u, u_rate, side, out)
    return np.ascontiguousarray(out.transpose(1, 0, 2, 3, 4))


@kernel
def _leaving_rates(
    problem: Problem, rates: Rates, u: Floats, u_rate: Floats, side: int, out: Floats
) -> None:
    """Fill out (w, p, 3, n, z) of `leaving_rates`."""
    directions, n = u_rate.shape[1], u.shape[1]
    positions = problem.source.kz_positions.shape[1]
    solved_up = solved_space(problem.up.kd.shape[1])
    solved_down = solved_space(problem.down.kd.shape[1])
    vary_up, vary_down = response_space(directions), response_space(directions)
    scratch = varied_scratch(directions, positions)
    flags, ends = moves_space(directions), np.zeros((directions, 2))
    nodes, du = np.zeros(NODES, dtype=np.complex128), np.zeros(NODES, dtype=np.complex128)
    moves, stretch = np.zeros((directions, NODES)), np.zeros((directions, NODES))
    column = AIR_BOTTOM if side == 0 else AIR_TOP
    for w in range(u.shape[0]):
        source, sides, up, down = at_wavelength(problem, w)
        here = rates_at(rates, w)
        for p in range(directions):
            ends[p, 0] = np.abs(u_rate[w, p]).max()
        find_moves(here, ends, flags)
        line = exit_line(sides.kind[side], sides.n_outer[side], sides.n_out[side])
        for start in range(0, n, NODES):
            _place(w, start, u, u_rate, nodes, du, moves, stretch)
            solve_varied(
                source, here, flags, sides, up, down, solved_up, solved_down, vary_up, vary_down,
                nodes, moves, scratch.lit,
            )  # fmt: skip
            for c in (2, 0, 1):
                if c != 1:
                    shares_of_panel(
                        channel(c)[0], source, here, flags, sides, solved_up, solved_down, vary_up,
                        vary_down, nodes, moves, scratch,
                    )  # fmt: skip
                sent_rates(
                    c, source, here, flags, solved_up, solved_down, vary_up, vary_down, nodes, du,
                    moves, stretch, scratch,
                )  # fmt: skip
                for i in range(min(NODES, n - start)):
                    if nodes[i].real < line:
                        _book(column, i, scratch, out[w, :, c, start + i])


@borrowing
def _place(
    w: int, start: int, u: Floats, u_rate: Floats, nodes: Complexes, du: Complexes, moves: Floats,
    stretch: Floats,
) -> None:  # fmt: skip
    """Nodes of a batch and their rates; du is 1/u, by which the power is to be divided."""
    for i in range(NODES):
        at = min(start + i, u.shape[1] - 1)
        nodes[i] = max(u[w, at], _NORMAL)
        du[i] = 1.0 / nodes[i].real
        for p in range(moves.shape[0]):
            moves[p, i] = u_rate[w, p, at]
            stretch[p, i] = -moves[p, i] / nodes[i].real / nodes[i].real


@borrowing
def _book(column: int, i: int, scratch: VariedScratch, out: Floats) -> None:
    """Rates (p, z) of what leaves at one node."""
    rates, sent, shares, d_shares = scratch.rates, scratch.sent, scratch.shares, scratch.d_shares
    for p in range(out.shape[0]):
        for q in range(out.shape[1]):
            out[p, q] = (
                rates[SENT_DOWN, p, q, i] * shares[column, 0, i]
                + rates[SENT_UP, p, q, i] * shares[column, 1, i]
                + sent[0, q, i] * d_shares[p, column, 0, i]
                + sent[1, q, i] * d_shares[p, column, 1, i]
            )
