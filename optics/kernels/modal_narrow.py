"""Lines too narrow for nodes on the real axis, and where their power ends.

What a bound mode holds ends as the mode's own absorption does. A leaky one, of a guide that
light leaves by tunneling only, gives to films, slabs and what lies outside them in proportions
that change across the line itself where slabs send light back, and are averaged over it.
"""

from collections.abc import Callable
from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.modal_absorption import DISSIPATED, FILMS, LEAVES, SURROUNDINGS
from optics.kernels.modal_fields import ABSORBED
from optics.kernels.modal_sheet import Films
from optics.kernels.poles import Modes, chosen, touch_axis

_BOUND, _LEAKY = 1e-7, 1e-8  # |Im u| of lines that may be too narrow
_ANGLES = 16


class NarrowLines(NamedTuple):
    """Lines that may be too narrow."""

    u: Complexes  # (n,)
    ends: Floats  # (n, columns + 1) power by place, columns of `modal_absorption`; stays guided


def narrow_lines(
    films: Films,
    line: float,
    modes: Modes,
    others: Modes,
    known: tuple[Floats, Floats],
    powers: Callable[[Modes], Floats],
    integrand: Callable[[Floats], Floats],
) -> NarrowLines:
    """Gather lines that may be too narrow.

    Parameters
    ----------
    films : Films
    line : float
        Largest outer light line.
    modes, others : Modes
        Bound ones, and zeros on all sheets.
    known : tuple of float (n,), float (n, 3, m + 2)
        Power and content of the bound ones, of `mode_powers`.
    powers : function of Modes
        Power (n,) of others.
    integrand : function of u (n,)
        Power per du (n, columns).
    """
    power, content = known
    bound = np.flatnonzero((np.abs(modes.u.imag) < _BOUND) & (modes.u.real > line)).tolist()
    ends = [_ends_of_bound(power[i], content[i, ABSORBED]) for i in bound]
    leaks = touch_axis(films, others) & (others.u.real < line)
    leaky = chosen(others, leaks & (np.abs(others.u.imag) < _LEAKY))
    for u, taken in zip(leaky.u.tolist(), powers(leaky).tolist(), strict=True):
        ends.append(taken * _fate(u, integrand))
    empty = np.zeros((0, FILMS + films.kd.size + 1))
    return NarrowLines(np.concatenate([modes.u[bound], leaky.u]), np.array(ends).reshape(
        -1, empty.shape[1]))  # fmt: skip


def _ends_of_bound(power: float, absorbed: Floats) -> Floats:
    """Ends (columns + 1,) of a bound mode's power; absorbed (m + 2,): by medium."""
    ends = np.zeros(FILMS + absorbed.size - 1)
    ends[DISSIPATED] = power
    if absorbed.sum() > 0.0:
        share = power * absorbed / absorbed.sum()
        ends[FILMS:-1] = share[1:-1]
        ends[SURROUNDINGS : SURROUNDINGS + 2] = share[[0, -1]]
    else:
        ends[-1] = power
    return ends


def _fate(u: complex, integrand: Callable[[Floats], Floats]) -> Floats:
    """Shares (columns + 1,) of a leaky line's power by place, averaged over the line."""
    # Equal angles as seen from the pole: equal parts of the line.
    angle = np.pi * ((np.arange(_ANGLES) + 0.5) / _ANGLES - 0.5)
    values = integrand(u.real + abs(u.imag) * np.tan(angle))
    ending = values[:, LEAVES:]
    total = ending.sum(axis=1, keepdims=True)
    shares = np.divide(ending, total, out=np.zeros_like(ending), where=total > 0.0).mean(axis=0)
    return np.concatenate([[1.0], shares, [0.0]])
