"""Power by direction: exact limits, batches of any length, its integral over all directions."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from optics.kernels.budget import AIR_BOTTOM, AIR_TOP, light_budget
from optics.kernels.directions import lit_from_outside, sent_into_directions
from optics.kernels.exits import OPEN
from optics.kernels.problem import Problem, Sides, make_problem

N_BOTTOM, N_TOP = 1.5, 1.2


def problem() -> Problem:
    """Absorbing film, uniaxial emitter film, thin metal; open on both sides; two wavelengths."""
    eps_o = np.array([[3.6 + 0.1j, 3.2, -9.0 + 0.5j]] * 2)
    eps_e = np.array([[3.6 + 0.1j, 2.7, -9.0 + 0.5j]] * 2)
    outer = np.array([[N_BOTTOM**2, N_TOP**2]] * 2, dtype=complex)
    index = np.sqrt(outer).real
    sides = Sides(np.array([OPEN, OPEN]), index, index, np.zeros((2, 2)))
    return make_problem(
        np.array([500.0, 600.0]), eps_o, eps_e, np.array([60.0, 80.0, 20.0]), outer, 1,
        np.array([10.0, 55.0]), sides,
    )  # fmt: skip


def sent(u: NDArray[np.float64]) -> NDArray[np.float64]:
    power = np.full((2, 2, 3, u.size, 2), np.nan)
    sent_into_directions(problem(), np.ascontiguousarray(np.tile(u, (2, 1))), power)
    return power


@pytest.mark.parametrize("count", [1, 15, 16, 17, 40])
def test_batches_do_not_depend_on_each_other(count: int) -> None:
    u = np.linspace(0.0, 1.6, count)
    together = sent(u)
    alone = np.concatenate([sent(u[i : i + 1]) for i in range(count)], axis=3)
    assert np.all(np.isfinite(together))
    np.testing.assert_array_equal(together, alone)


def test_the_normal_direction_is_exact() -> None:
    power = sent(np.array([0.0, 1e-5]))
    assert np.all(power[:, :, 0, 0] == 0.0)  # a vertical dipole sends nothing along its axis
    # s and p are the same there
    np.testing.assert_allclose(power[:, :, 1, 0], power[:, :, 2, 0], rtol=1e-12)
    np.testing.assert_allclose(power[:, :, 1:, 1], power[:, :, 1:, 0], rtol=1e-8)


def test_nothing_is_sent_from_the_light_line_on() -> None:
    power = sent(np.array([N_TOP - 1e-9, N_TOP, 1.3, N_BOTTOM, 2.5]))
    assert np.all(power[:, 1, :, 1:] == 0.0)
    assert np.all(power[:, 0, :, 3:] == 0.0)
    assert np.all(power[:, 0, :, :3] > 0.0)
    # power per du falls to 0 as cos(angle), 1e-4 of its scale here
    assert np.all(power[:, 1, :, 0] < 1e-3)


def test_all_directions_together_are_what_leaves() -> None:
    node, weight = np.polynomial.legendre.leggauss(40)
    budget = light_budget(problem(), 1e-8)
    for side, (n, place) in enumerate(((N_BOTTOM, AIR_BOTTOM), (N_TOP, AIR_TOP))):
        total = np.zeros((2, 3, 2))
        # halves end at every branch point below the side's own line
        for lo, hi in ((0.0, N_TOP), (N_TOP, N_BOTTOM))[: 2 - side]:
            t = 0.25 * np.pi * (node + 1.0)
            u = lo + (hi - lo) * np.sin(t) ** 2
            du = (hi - lo) * np.sin(2.0 * t) * 0.25 * np.pi * weight
            total += np.einsum("wcnz,n->wcz", sent(u)[:, side], u * du)
        found = np.stack([total[:, 0], total[:, 1] + total[:, 2]], axis=1).transpose(0, 2, 1)
        assert n > 1.0
        np.testing.assert_allclose(found, budget.shares[..., place], rtol=0, atol=1e-8)


def test_light_from_outside_is_reflected_transmitted_or_absorbed() -> None:
    u = np.linspace(0.0, 1.45, 21)
    powers = np.zeros((2, 2, u.size, 5))
    lit_from_outside(problem(), np.ascontiguousarray(np.tile(u, (2, 1))), powers)
    bottom, top, through, absorbed_b, absorbed_t = np.moveaxis(powers, -1, 0)
    np.testing.assert_allclose(bottom + through + absorbed_b, 1.0, atol=1e-12)
    inside = u < N_TOP
    np.testing.assert_allclose((top + through + absorbed_t)[..., inside], 1.0, atol=1e-12)
    assert np.all(through[..., ~inside] == 0.0)
    assert np.all(absorbed_b[..., inside] > 0.01)
