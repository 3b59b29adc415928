"""How zone averages move: against differences of the averages themselves."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from optics.device.zone import (
    ExponentialZone,
    GaussianZone,
    PointZone,
    TableZone,
    UniformZone,
    Zone,
    zone_quadrature,
)
from optics.device.zone_rates import ZoneRate, quadrature_rates

THICKNESS_NM = 24.0
DIFFERENCE = ((1, 3 / 4), (2, -3 / 20), (3, 1 / 60))


def table(*, relative: bool) -> TableZone:
    points = np.array([0.1, 0.4, 0.9]) * (1.0 if relative else THICKNESS_NM)
    return TableZone.from_table(points, np.array([0.0, 2.0, 0.7]), relative=relative)


# Zone, interval, how everything moves.
MOVING: dict[str, tuple[Zone, tuple[float, float], ZoneRate]] = {
    "uniform, thicker": (UniformZone(), (0.0, 24.0), ZoneRate(1.0, 0.0, 1.0)),
    "uniform, cut": (UniformZone(), (0.5, 22.0), ZoneRate(1.0, 1.0, 1.0)),
    "uniform, closer": (UniformZone(), (0.5, 23.5), ZoneRate(0.0, 1.0, -1.0)),
    "point at": (PointZone(at=0.4), (0.0, 24.0), ZoneRate(1.0, 0.0, 1.0, at=0.3)),
    "point from below": (PointZone(at_nm=5.0), (0.0, 24.0), ZoneRate(1.0, 0.0, 1.0, at_nm=0.5)),
    "point from above": (
        PointZone(at_nm=5.0, start="top"), (0.0, 24.0), ZoneRate(1.0, 0.0, 1.0, at_nm=0.5),
    ),
    "exponential": (ExponentialZone("bottom", 6.0), (0.5, 24.0), ZoneRate(1.0, 0.0, 1.0)),
    "exponential, cut": (ExponentialZone("top", 6.0), (0.0, 23.5), ZoneRate(1.0, 0.0, 0.7)),
    "exponential, decay": (ExponentialZone("top", 6.0), (0.5, 24.0), ZoneRate(decay_nm=1.0)),
    "exponential, thin": (ExponentialZone("bottom", 0.2), (0.0, 24.0), ZoneRate(1.0, 0.0, 1.0,
                                                                                decay_nm=0.1)),
    "gaussian": (GaussianZone(0.4, 5.0), (0.0, 24.0), ZoneRate(1.0, 0.0, 1.0)),
    "gaussian, at": (GaussianZone(0.4, 5.0), (0.5, 23.0), ZoneRate(at=0.3)),
    "gaussian, width": (GaussianZone(0.4, 5.0), (0.5, 23.0), ZoneRate(width_nm=1.0)),
    "gaussian, narrow": (GaussianZone(0.4, 0.6), (0.0, 24.0), ZoneRate(1.0, 0.0, 1.0,
                                                                      width_nm=0.1)),
    "gaussian, beside": (GaussianZone(0.0, 3.0), (2.0, 24.0), ZoneRate(1.0, 0.3, 1.0)),
    "relative table": (table(relative=True), (0.0, 24.0), ZoneRate(1.0, 0.0, 1.0)),
    "relative table, cut": (table(relative=True), (5.0, 20.0), ZoneRate(1.0, 0.5, 0.2)),
    "table in nm": (table(relative=False), (0.0, 24.0), ZoneRate(1.0, 0.0, 1.0)),
    "table in nm, cut": (table(relative=False), (5.0, 20.0), ZoneRate(1.0, 0.5, 0.2)),
}  # fmt: skip


def moved(zone: Zone, rate: ZoneRate, step: float) -> Zone:
    numbers = {
        name: getattr(zone, name) + step * getattr(rate, name)
        for name in ("at", "at_nm", "width_nm", "decay_nm")
        if getattr(rate, name) != 0.0 and getattr(zone, name, None) is not None
    }
    return replace(zone, **numbers) if numbers else zone  # type: ignore[type-var]


def average(zone: Zone, thickness: float, interval: tuple[float, float]) -> Any:
    """Averages of what varies on the scale of light, and of the position's square."""
    position, weight = zone_quadrature(zone, thickness, interval, scale_nm=150.0)
    return np.array([weight @ np.cos(0.04 * position), weight @ position**2])


@pytest.mark.parametrize("name", MOVING)
def test_averages_move_as_their_differences_say(name: str) -> None:
    zone, interval, rate = MOVING[name]
    position, weight = zone_quadrature(zone, THICKNESS_NM, interval, scale_nm=150.0)
    moves, changes = quadrature_rates(zone, THICKNESS_NM, interval, position, weight, rate)
    assert abs(changes.sum()) < 1e-14
    slopes = np.array([-0.04 * np.sin(0.04 * position), 2.0 * position])
    values = np.array([np.cos(0.04 * position), position**2])
    found = slopes @ (weight * moves) + values @ changes

    def at(step: float) -> Any:
        ends = (interval[0] + step * rate.low_nm, interval[1] + step * rate.high_nm)
        return average(moved(zone, rate, step), THICKNESS_NM + step * rate.thickness_nm, ends)

    step = 0.02
    expected = sum(weight / step * (at(k * step) - at(-k * step)) for k, weight in DIFFERENCE)
    # Panels resolve a density to 1e-11 of itself, and a step of 0.02 nm magnifies that.
    scale = np.array([1.0, THICKNESS_NM**2])
    np.testing.assert_allclose(found / scale, expected / scale, rtol=0.0, atol=1e-9)
