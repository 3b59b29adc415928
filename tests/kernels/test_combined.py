"""Half stacks combined in pairs give what the engine gives for every device on its own."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from optics.kernels.budget import light_budget
from optics.kernels.combine_tables import finest
from optics.kernels.combined import Family, combined_budget
from optics.kernels.exits import ABSORBING, MATCHED, OPEN, PLANAR
from optics.kernels.problem import Half, Problem, Sides, make_problem

WAVELENGTH_NM = np.array([470.0, 560.0])
MIX = np.array([[[0.3, 0.2], [0.1, 0.4]], [[0.0, 0.5], [0.0, 0.5]]])  # (m, w, 2)
POSITION_NM = np.array([3.0, 11.0, 26.0])
ZONE = np.array([0.5, 0.3, 0.2])
TOLERANCE = 1e-6

# Bottom to top: index, extraordinary index, thickness in nm; the emitter film is the third.
METAL_ON_TOP = [(1.9, 1.9, 110.0), (1.75, 1.75, 40.0), (1.8, 1.7, 30.0), (1.7, 1.7, 50.0),
                (0.9 + 6.5j, 0.9 + 6.5j, 80.0)]  # fmt: skip
CLEAR = [(1.9 + 0.01j, 1.9 + 0.01j, 110.0), (1.75, 1.68, 40.0), (1.5, 1.5, 30.0), (1.7, 1.7, 50.0),
         (1.9 + 0.02j, 1.8 + 0.01j, 80.0)]  # fmt: skip
SIDES = {
    "glass, metal": (METAL_ON_TOP, (PLANAR, OPEN), (1.52, 1.0), (1.0, 1.0), (0.0, 0.0)),
    "lens, metal": (METAL_ON_TOP, (MATCHED, OPEN), (1.52, 1.0), (1.0, 1.0), (0.1, 0.0)),
    "lossy slabs, water": (CLEAR, (PLANAR, PLANAR), (1.6, 1.45), (1.0, 1.33), (0.2, 0.05)),
    "dense slab": (CLEAR, (PLANAR, OPEN), (1.85, 1.0), (1.0, 1.0), (0.0, 0.0)),
    "no slab": (CLEAR, (OPEN, OPEN), (1.0, 1.0), (1.0, 1.0), (0.0, 0.0)),
    "silicon below": (CLEAR, (ABSORBING, PLANAR), (3.9 + 0.03j, 1.5), (3.9, 1.0), (0.0, 0.0)),
}  # fmt: skip


def problem_of(name: str) -> Problem:
    films, kind, outer, beyond, loss = SIDES[name]
    same = np.ones((WAVELENGTH_NM.size, 1))
    index = np.array([film[:2] for film in films], dtype=np.complex128)
    eps_outer = np.array(outer, dtype=np.complex128) ** 2
    return make_problem(
        WAVELENGTH_NM, index[:, 0] ** 2 * same, index[:, 1] ** 2 * same,
        np.array([film[2] for film in films]), eps_outer * same, 2, POSITION_NM,
        Sides(
            np.array(kind), np.array(outer).real * same, np.array(beyond) * same,
            np.array(loss) * same,
        ),
    )  # fmt: skip


def family_of(problem: Problem, above: list[float], below: list[float]) -> Family:
    """Vary the films next to the emitter's."""
    k0_nm = 2.0 * np.pi / WAVELENGTH_NM
    kd = []
    for half, values in ((problem.up, above), (problem.down, below)):
        many = np.repeat(half.kd[:, None], len(values), axis=1)
        many[:, :, 1] = k0_nm[:, None] * np.array(values)
        kd.append(many)
    pairs = [(i, j) for j in range(len(below)) for i in range(len(above))]
    return Family(problem, kd[0], kd[1], np.array(pairs))


def alone(family: Family, place: int) -> NDArray[np.float64]:
    """Averages (m, 11, z) of one device by the engine."""
    i, j = family.pairs[place]
    source, sides, up, down = family.problem
    device = Problem(
        source,
        sides,
        Half(up.eps_o, up.eps_e, np.ascontiguousarray(family.kd_up[:, i])),
        Half(down.eps_o, down.eps_e, np.ascontiguousarray(family.kd_down[:, j])),
    )
    found = light_budget(device, TOLERANCE)
    assert found.error.max() <= TOLERANCE
    every = np.concatenate([found.shares, found.dissipation[..., None]], axis=3)
    average: NDArray[np.float64] = np.einsum("mwo,wzok->mkz", MIX, every)
    return average


@pytest.mark.parametrize("name", SIDES)
@pytest.mark.parametrize(
    ("above", "below"),
    [([20.0, 45.0], [30.0, 90.0, 140.0]), ([20.0, 80.0, 150.0], [35.0])],
    ids=["long below", "long above"],
)
def test_every_device_has_its_own_light(name: str, above: list[float], below: list[float]) -> None:
    family = family_of(problem_of(name), above, below)
    found = combined_budget(
        family, np.array([0, len(above) * len(below) - 1]), ZONE, MIX, TOLERANCE
    )
    assert found.error.max() <= TOLERANCE
    for place in range(len(family.pairs)):
        expected = alone(family, place)
        # Each of both errs by the tolerance at most, relative to F.
        within = 2.0 * TOLERANCE * expected[:, 10:].max()
        assert np.abs(found.sums[..., place] - expected).max() <= within


def test_numbers_of_a_device_do_not_depend_on_the_order_of_the_others() -> None:
    family = family_of(problem_of("glass, metal"), [20.0, 45.0], [30.0, 90.0, 140.0])
    mixed = np.array([4, 0, 5, 2, 1, 3])
    found = combined_budget(family, np.array([0, 5]), ZONE, MIX, TOLERANCE)
    probes = np.array([1, 2])  # the same devices
    other = combined_budget(
        family._replace(pairs=family.pairs[mixed]), probes, ZONE, MIX, TOLERANCE
    )
    assert other.sums.tobytes() == found.sums[..., mixed].tobytes()


def test_a_device_that_misses_the_tolerance_says_so() -> None:
    # No panels reach 1e-12 of all destinations; what was reached must cover the true error.
    family = family_of(problem_of("no slab"), [20.0, 60.0], [30.0, 400.0])
    found = combined_budget(family, np.array([0]), ZONE, MIX, 1e-12)
    for place in range(4):
        truth = alone(family, place)
        gap = np.abs(found.sums[..., place] - truth).max() / truth[:, 10].max()
        # The engine's own error at its tolerance, and the estimate.
        assert gap <= found.error[place] + TOLERANCE


def test_panels_of_several_devices_are_nowhere_coarser_than_any() -> None:
    one = np.array([[0.0, 0.5, 1.0], [0.5, 1.0, 0.0]])
    two = np.array([[0.0, 0.5, 0.0], [0.5, 0.75, 1.0], [0.75, 1.0, 0.0]])
    three = np.array([[0.0, 1.0, 1.0]])
    expected = [[0.0, 0.5, 1.0], [0.5, 0.75, 1.0], [0.75, 1.0, 0.0]]
    assert finest([one, two, three]).tolist() == expected
    assert finest([three]).tolist() == three.tolist()
    assert finest([two, one]).tolist() == expected
