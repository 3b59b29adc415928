"""Many dipoles from few nodes: what interpolation errs, against every dipole computed."""

from __future__ import annotations

import numpy as np
import pytest
from reference import Reference
from stacks import film, problem_of

from optics.kernels import places
from optics.kernels.budget import Budget, light_budget
from optics.kernels.problem import Problem, rows_of, stacked

TOLERANCE = 1e-6
ALUMINUM = -40 + 12j


def device(wavelength_nm: float, spacer_nm: float, film_nm: float, many: int) -> Problem:
    """Dipoles all over a film, with a metal behind a spacer."""
    films = [film(1.9 + 0.01j, 120), film(1.7, 40), film(1.8, film_nm), film(1.7, spacer_nm)]
    metal = (ALUMINUM, ALUMINUM, 100.0)
    stack = Reference(wavelength_nm, [*films, metal], 1.5**2, 1.0, 2, 0.5 * film_nm)
    return problem_of(stack, np.linspace(0.02, 0.98, many) * film_nm)


def one_by_one(problem: Problem, tolerance: float) -> Budget:
    """The same, each dipole alone: nothing is interpolated."""
    found = []
    for q in range(problem.source.kz_positions.shape[1]):
        alone = problem.source._replace(kz_positions=problem.source.kz_positions[:, q : q + 1])
        found.append(light_budget(problem._replace(source=alone), tolerance))
    return found[0]._replace(
        shares=np.concatenate([one.shares for one in found], axis=1),
        dissipation=np.concatenate([one.dissipation for one in found], axis=1),
        error=np.max([one.error for one in found], axis=0),
    )


@pytest.mark.parametrize("spacer_nm", [0.0, 2.0, 8.0, 40.0])
@pytest.mark.parametrize("film_nm", [20.0, 60.0, 400.0])
def test_many_dipoles_are_what_each_is_alone(spacer_nm: float, film_nm: float) -> None:
    problem = device(520.0, spacer_nm, film_nm, 20)
    together, alone = light_budget(problem, TOLERANCE), one_by_one(problem, 1e-9)
    over = np.abs(alone.dissipation).min()
    stated = together.error[0] + alone.error[0]
    assert stated <= 2 * TOLERANCE
    assert np.abs(together.shares - alone.shares).max() / over <= stated
    assert np.abs(together.dissipation - alone.dissipation).max() / over <= stated


def test_nodes_are_used_where_powers_vary_slowly_and_not_beside_a_metal() -> None:
    smooth, steep = device(520.0, 40.0, 24.0, 20), device(520.0, 0.0, 24.0, 20)
    assert not places.hopeless(smooth, TOLERANCE).any()
    assert places.hopeless(steep, TOLERANCE).all()
    few = places.fewer(smooth)
    assert few is not None
    assert few.problem.source.kz_positions.shape[1] < 20
    assert places.fewer(device(520.0, 40.0, 24.0, 8)) is None


def test_each_wavelength_decides_for_itself() -> None:
    smooth, steep = device(520.0, 40.0, 24.0, 20), device(520.0, 0.0, 24.0, 20)
    both = stacked([smooth, steep])
    together = light_budget(both, TOLERANCE)
    for row, alone in enumerate((smooth, steep)):
        found = light_budget(alone, TOLERANCE)
        assert np.array_equal(together.shares[row], found.shares[0])
        assert together.error[row] == found.error[0]
    assert np.array_equal(
        light_budget(rows_of(both, np.array([1])), TOLERANCE).shares[0], together.shares[1]
    )


def test_dipoles_in_one_place_change_nothing_at_other_wavelengths() -> None:
    spread, one_place = device(520.0, 40.0, 24.0, 20), device(520.0, 40.0, 24.0, 20)
    middle = np.full_like(spread.source.kz_positions, 0.5 * spread.source.kd[0])
    one_place = one_place._replace(source=one_place.source._replace(kz_positions=middle))
    together = light_budget(stacked([spread, one_place]), TOLERANCE)
    for row, alone in enumerate((spread, one_place)):
        found = light_budget(alone, TOLERANCE)
        assert np.array_equal(together.shares[row], found.shares[0])
        assert together.error[row] == found.error[0]
    assert np.ptp(together.shares[1], axis=0).max() <= 1e-14
    single = one_place.source._replace(kz_positions=middle[:, :1])
    exact = light_budget(one_place._replace(source=single), TOLERANCE)
    assert np.abs(together.shares[1, 0] - exact.shares[0, 0]).max() <= 1e-13


def test_interpolation_of_a_known_function() -> None:
    """1/(z - a) between 0 and 1: coefficients fall by a known rate, and the estimate holds."""
    problem = device(520.0, 40.0, 24.0, 20)
    few = places.fewer(problem)
    assert few is not None
    ends = problem.source.kz_positions[0, [0, -1]]
    for pole in (1.3, 2.0, 4.0):

        def power(z: np.ndarray, pole: float = pole) -> np.ndarray:
            return 1.0 / (pole - (z - ends[0]) / (ends[1] - ends[0]))

        found, error = places.at_places(few, power(few.problem.source.kz_positions))
        actual = np.abs(found - power(problem.source.kz_positions)).max()
        assert actual <= error.max()
        assert error.max() <= 300 * actual  # cautious, but not blind
