"""What each mode takes of the dipoles' power, and which way it runs."""

import math

import numpy as np

from optics.kernels.arrays import Floats
from optics.kernels.modal_fields import FLOW, mode_content, residues
from optics.kernels.modal_sheet import Films
from optics.kernels.poles import Modes
from optics.kernels.problem import Problem

_TWINS = 1e-7  # distance on the sheet below which modes count as twins
_AROUND = 1e-4  # of the path around twins


def mode_powers(
    problem: Problem, row: int, emitter: int, films: Films, modes: Modes, weight: Floats
) -> tuple[Floats, Floats]:
    """Power that each mode takes, and what it holds.

    Parameters
    ----------
    weight : float (2, z)
        Weights of vertical and horizontal dipoles over positions.

    Returns
    -------
    power : float (n,)
        Re(i pi residue) for modes above the axis, its negative below: the integral of the line
        that the mode makes, over the whole axis.
    content : float (n, 3, m + 2)
    """
    source = problem.source
    residue = np.zeros_like(modes.s)
    content = np.zeros((modes.s.size, 3, films.kd.size + 2))
    found = np.zeros((3, source.kz_positions.shape[1]), dtype=np.complex128)

    def weighted(pol: int, s: complex, radius: float) -> complex:
        residues(
            films, emitter, pol, s, radius, source.kz_positions[row], source.eps_e[row],
            source.bulk[row], found,
        )  # fmt: skip
        return complex((found * weight[[0, 1, 1]]).sum())

    for i, (pol, s) in enumerate(zip(modes.polarization.tolist(), modes.s.tolist(), strict=True)):
        mode_content(films, pol, s, content[i])
        residue[i] = weighted(pol, s, 0.0)
    for group in _twins(modes):
        # Each on its own is a small difference; their sum is sound.
        middle = complex(modes.s[group].mean())
        together = weighted(int(modes.polarization[group[0]]), middle, _AROUND)
        alone = residue[group].sum()
        if alone != 0.0:
            residue[group] *= together / alone
    ways = [direction(u, held) for u, held in zip(modes.u.tolist(), content, strict=True)]
    return np.array(ways) * (1j * math.pi * residue).real, content


def _twins(modes: Modes) -> list[list[int]]:
    """Groups of modes too close to each other to be told apart in double precision."""
    groups: list[list[int]] = []
    for i in range(modes.s.size):
        same = modes.polarization == modes.polarization[i]
        group = np.flatnonzero(same & (np.abs(modes.s - modes.s[i]) < _TWINS)).tolist()
        others = same & (np.abs(modes.s - modes.s[i]) < 2.0 * _AROUND)
        if len(group) > 1 and group not in groups and others.sum() == len(group):
            groups.append(group)
    return groups


def direction(u: complex, content: Floats) -> float:
    """Tell a forward mode (1) from a backward one (-1), whose power runs against its phase."""
    # Without loss the pole lies on the axis, and only the flow of power tells.
    deciding = u.imag if abs(u.imag) > 1e-13 else content[FLOW].sum()
    return -1.0 if deciding < 0.0 else 1.0
