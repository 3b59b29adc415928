"""Derivatives of the light in one direction against differences of the light itself."""

from __future__ import annotations

import numpy as np
import pytest
from reference_cases import load
from varied import Device, apart, device_of, directions_of, slope, step_of

from optics.kernels.angles import leaving
from optics.kernels.exits import ABSORBING, PLANAR
from optics.kernels.varied_directions import leaving_rates

CASES = {case.name: case for case in load()}
SINES = np.sin(np.radians([0.0, 12.0, 45.0, 80.0]))


def outside_index(device: Device, side: int) -> float:
    """Index of the medium in which angles are measured."""
    if device.kind[side] == PLANAR:
        return float(device.n_out[0, side])
    return float(np.sqrt(device.outer[0, side]).real)


@pytest.mark.parametrize(
    "name",
    [
        "bottom_oled_absorbing_glass",
        "bottom_oled_absorbing_matched",
        "birefringent_emitter",
        "two_slabs_unequal_planar",
        "two_slabs_one_matched",
        "silicon_bottom",
        "no_slabs",
    ],
)
@pytest.mark.parametrize("side", [0, 1])
def test_rates_of_fixed_directions_equal_the_difference(name: str, side: int) -> None:
    device = device_of(apart(CASES[name]))
    if device.kind[side] == ABSORBING:
        side = 1 - side
    directions = directions_of(device)
    n = outside_index(device, side)
    step = 1e-6  # the index outside is linear, or the root of something linear, in every number
    moves = [
        (outside_index(device.moved(to, step), side) - outside_index(device.moved(to, -step), side))
        / (2 * step)
        for to in directions.values()
    ]
    rates = device.rates(list(directions.values()))
    u_rate = (np.array(moves)[:, None] * SINES)[None]
    found = leaving_rates(device.problem, rates, (n * SINES)[None], u_rate, side)
    assert found.shape[0] == len(directions)
    for p, (name_of, to) in enumerate(directions.items()):

        def value(h: float, to: object = to) -> np.ndarray:
            there = device.moved(to, h)  # type: ignore[arg-type]
            return leaving(there.problem, (outside_index(there, side) * SINES)[None], side)

        numeric, _ = slope(value, step_of(name_of))
        # Light itself rounds at 2e-15, and the finest difference divides that by a quarter step.
        rounding = 4.0 * 2e-15 / step_of(name_of) * np.abs(value(0.0)).max()
        miss = np.abs(found[p] - numeric).max()
        assert miss <= 1e-7 * np.abs(numeric).max() + rounding, name_of


def test_no_light_leaves_beyond_the_light_line() -> None:
    device = device_of(CASES["bottom_oled_planar"])
    directions = list(directions_of(device).values())
    u, still = np.array([[1.0, 1.2]]), np.zeros((1, len(directions), 2))
    found = leaving_rates(device.problem, device.rates(directions), u, still, 0)
    assert not found.any()
