"""Modes followed from one wavelength to the next, so that their lines never change places.

The stack is turned into the next one step by step (permittivities and k0 d in proportion) and
every mode is carried along by Newton steps; two modes that come close or cross keep their names.
Where a mode ends up off the sheet of bound modes it has passed its cut-off and its line ends.
"""

import numpy as np

from optics.kernels.arrays import Complexes, Floats, Integers
from optics.kernels.compiled import kernel
from optics.kernels.modal_sheet import Films, wronskian
from optics.kernels.poles import Modes, without_hidden_depth

_SMALLEST_STEP = 1.0 / 512.0
_LARGEST_MOVE = 0.15  # of s in one step
_TRUST = 0.25  # correction over the way to the nearest other mode
_SAME = 1e-6  # distance in s at which a followed mode is one that was found
_NUDGE = 1e-5  # of the way, for the pace of a mode


@kernel
def newton(films: Films, pol: int, s: Complexes, moved: Floats) -> None:
    """Polish zeros in place; moved (n,), output: how far each went, inf if it did not settle."""
    for i in range(s.size):
        start, last = s[i], np.inf
        for _ in range(12):
            value, slope, _ = wronskian(films, pol, s[i])
            if slope == 0.0:
                break
            change = value / slope
            s[i] -= change
            last = abs(change)
            if last < 1e-13 * (1.0 + abs(s[i])):
                break
        moved[i] = abs(s[i] - start) if last < 1e-8 else np.inf


@kernel
def change_of(here: Films, there: Films, pol: int, s: Complexes, change: Complexes) -> None:
    """First-order change (n,) of zeros of one stack in a slightly different one."""
    for i in range(s.size):
        value, slope, _ = wronskian(there, pol, s[i])
        own, _, _ = wronskian(here, pol, s[i])
        change[i] = -(value - own) / slope if slope != 0.0 else 0.0


def between(here: Films, there: Films, t: float) -> Films:
    """Stack a share t of the way from one to another."""
    return Films(
        here.eps_o + t * (there.eps_o - here.eps_o),
        here.eps_e + t * (there.eps_e - here.eps_e),
        here.kd + t * (there.kd - here.kd),
        here.bottom + t * (there.bottom - here.bottom),
        here.top + t * (there.top - here.top),
    )


def follow(here: Films, there: Films, start: Modes, end: Modes) -> Integers:
    """Tell which mode of the next wavelength continues each mode of this one.

    Parameters
    ----------
    here, there : Films
        The stack at both wavelengths.
    start, end : Modes
        Of `bound_modes` at both.

    Returns
    -------
    int (n,)
        Index in `end` by mode of `start`; -1 where a line ends.
    """
    here, there = without_hidden_depth(here), without_hidden_depth(there)
    found = np.full(start.s.size, -1)
    for pol in (0, 1):
        mine = np.flatnonzero(start.polarization == pol)
        theirs = np.flatnonzero(end.polarization == pol)
        if mine.size == 0 or theirs.size == 0:
            continue
        carried = _carried(here, there, pol, start.s[mine].copy())
        distance = np.abs(carried[:, None] - end.s[theirs][None, :])
        distance = np.where(np.isnan(distance), np.inf, distance)
        for i, j in zip(*np.unravel_index(np.argsort(distance, axis=None), distance.shape),
                        strict=True):  # fmt: skip
            if distance[i, j] > _SAME:
                break
            if found[mine[i]] < 0 and theirs[j] not in found:
                found[mine[i]] = theirs[j]
    return found


def _carried(here: Films, there: Films, pol: int, s: Complexes) -> Complexes:
    """Places of modes after the change; nan for one that was lost on the way."""
    t, step = 0.0, 1.0
    moved, pace = np.zeros(s.size), np.zeros_like(s)
    lost = np.zeros(s.size, dtype=np.bool_)
    now = here
    while t < 1.0:
        change_of(now, between(here, there, min(t + _NUDGE, 1.0)), pol, s, pace)
        pace /= max(min(_NUDGE, 1.0 - t), 1e-300)
        while True:
            step = min(step, 1.0 - t)
            ahead = between(here, there, t + step)
            trial = s + step * pace
            newton(ahead, pol, trial, moved)
            bad = ~lost & ((moved > _TRUST * _nearest(trial)) | (np.abs(trial - s) > _LARGEST_MOVE))
            if not bad.any() or step <= _SMALLEST_STEP:
                break
            step *= 0.5
        lost |= bad
        s, now, t = trial, ahead, t + step
        if 1.0 - t < 1e-12:
            break
        step *= 2.0
    return np.where(lost, np.nan, s)


def _nearest(s: Complexes) -> Floats:
    """Distance to the nearest other zero, at most 1 (n,)."""
    apart = np.abs(s[:, None] - s[None, :])
    np.fill_diagonal(apart, 1.0)
    smallest: Floats = apart.min(axis=1)
    return smallest
