"""Lines of modes against wavelength: no exchange at crossings, ends only at cut-offs."""

from __future__ import annotations

import numpy as np

from optics.kernels.halfstack import P, S
from optics.kernels.modal_follow import follow
from optics.kernels.modal_sheet import Films
from optics.kernels.poles import bound_modes


def slab(kd: float, n: float = 2.0) -> Films:
    e = np.array([n * n], complex)
    return Films(e, e.copy(), np.array([kd]), 1.5**2 + 0j, 1.0 + 0j)


def guides(kd: float, first: float, second: float, apart: float) -> Films:
    e = np.array([4.0, 2.25, 4.0], complex)
    return Films(e, e.copy(), np.array([first, apart, second]) * kd, 2.25 + 0j, 2.25 + 0j)


def test_every_mode_goes_on_as_its_own_order() -> None:
    here, there = slab(20.0), slab(15.0)
    start, end = bound_modes(here), bound_modes(there)
    found = follow(here, there, start, end)
    for pol in (S, P):
        mine = np.flatnonzero(start.polarization == pol)
        theirs = np.flatnonzero(end.polarization == pol)
        # Modes of one polarization never cross: the order of the indices is kept, the
        # highest ones are cut off.
        assert found[mine[: len(theirs)]].tolist() == theirs.tolist()
        assert (found[mine[len(theirs) :]] == -1).all()
        assert len(theirs) < len(mine)


def test_modes_of_two_far_guides_cross_and_keep_their_guide() -> None:
    """One guide grows, the other shrinks: far apart their indices cross without exchange."""

    def at(t: float) -> Films:
        return guides(1.0, 1.3 + t, 2.3 - t, 9.0)

    here, there = at(0.3), at(0.7)
    start, end = bound_modes(here), bound_modes(there)
    found = follow(here, there, start, end)
    s_start = np.flatnonzero(start.polarization == S)
    # Fundamental modes: the higher index belongs to the wider guide, before and after.
    first, second = s_start[:2]
    assert found[first] == second
    assert found[second] == first


def test_modes_of_two_coupled_guides_avoid_each_other_and_keep_their_order() -> None:
    def at(t: float) -> Films:
        return guides(1.0, 1.3 + t, 2.3 - t, 0.5)

    here, there = at(0.3), at(0.7)
    start, end = bound_modes(here), bound_modes(there)
    found = follow(here, there, start, end)
    first, second = np.flatnonzero(start.polarization == S)[:2]
    assert (found[first], found[second]) == (first, second)


def test_nothing_changes_nothing() -> None:
    films = guides(1.0, 3.0, 3.0, 4.0)
    modes = bound_modes(films)
    assert follow(films, films, modes, modes).tolist() == list(range(len(modes.s)))
