"""Dissipated power per in-plane wavevector against closed forms and against the integrals."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from stacks import HORIZONTAL, VERTICAL, Film, Slab, film, metal, problem_of

from optics.kernels.budget import NEAR_FIELD, light_budget
from optics.kernels.problem import Problem
from optics.kernels.spectrum import dissipated_spectrum


@dataclass(frozen=True)
class Plain:
    """A stack without slabs at 550 nm; permittivities outside."""

    films: tuple[Film, ...]
    bottom: complex
    top: complex
    emitter: int = 0
    z_nm: float = 0.0
    wavelength_nm: float = 550.0
    substrate: Slab | None = None
    cover: Slab | None = None


def spectrum(problem: Problem, u: np.ndarray, depth: float) -> np.ndarray:
    power = np.zeros((1, 3, u.size, problem.source.kz_positions.shape[1]))
    dissipated_spectrum(problem, np.array([0]), u, depth, power)
    return power[0]


@pytest.mark.parametrize("count", [1, 16, 37])
def test_unbounded_medium_has_the_textbook_integrand(count: int) -> None:
    """Any number of wavevectors; n = 1.7 everywhere, power relative to the bulk's."""
    n = 1.7
    problem = problem_of(Plain((film(n, 30.0),), bottom=n**2, top=n**2), [5.0, 20.0])
    u = np.linspace(0.1, 1.6, count)
    kz = np.sqrt(n**2 - u**2)
    expected = [1.5 * u**3 / (n**3 * kz), 0.75 * u * kz / n**3, 0.75 * u / (n * kz)]
    found = spectrum(problem, u, 0.0)
    for position in range(2):
        np.testing.assert_allclose(found[:, :, position], expected, rtol=1e-12)


def test_a_lossless_mode_shows_as_a_line_of_the_stated_half_width() -> None:
    """TE0 and TM0 of a slab, in closed form (derived): N = 1.63135333, 1.57139233."""
    slab = Plain((film(1.8, 200.0),), bottom=1.5**2, top=1.0)
    depth = 0.002
    u = np.arange(1.52, 1.75, 1e-5)
    found = spectrum(problem_of(slab, [50.0]), u, depth)[:, :, 0]
    # The rest of the spectrum tilts a line by a hair: well below a twentieth of its width.
    for channel, index in ((2, 1.63135335), (0, 1.57139233)):
        near = np.abs(u - index) < 8 * depth
        line = found[channel, near]
        assert u[near][line.argmax()] == pytest.approx(index, abs=0.05 * depth)
        wide = u[near][line > 0.5 * line.max()]
        assert np.ptp(wide) == pytest.approx(2 * depth, rel=0.05)


@pytest.mark.parametrize("orientation", [VERTICAL, HORIZONTAL])
def test_the_spectrum_integrates_to_the_dissipated_power(orientation: int) -> None:
    """Guided, plasmon and air light together, on a path that the engine never takes."""
    stack = Plain(
        (film(1.9 + 0.01j, 100.0), film(1.75, 60.0, 1.65), metal(-34.0 + 1.5j, 100.0)),
        bottom=1.52**2, top=1.0, emitter=1,
    )  # fmt: skip
    problem = problem_of(stack, [25.0])
    engine = light_budget(problem, 1e-7)
    far = 2.0 * 1.9
    step = 2.5e-4
    u = np.arange(0.5 * step, far, step)
    sums = []
    for depth in (0.002, 0.001):
        channels = spectrum(problem, u, depth)[:, :, 0]
        power = channels[0] if orientation == VERTICAL else channels[1] + channels[2]
        sums.append(power.sum() * step)
    expected = (engine.dissipation - engine.shares[..., NEAR_FIELD])[0, 0, orientation]
    # Blurring loses depth x the imaginary part of the integrand at the end, which is about 1 ...
    assert sums[0] == pytest.approx(expected, abs=2 * 0.002)
    # ... and is linear in the depth, so that two depths tell what none at all would give.
    assert 2 * sums[1] - sums[0] == pytest.approx(expected, rel=1e-5)
