"""How the quadrature over an emitter's zone moves with the numbers that describe the zone.

Nodes keep their relative place between the ends of each smooth stretch of the density, and the
ends move with film faces, absorbers and the density itself. So an integral with moving limits
becomes an ordinary one, and its derivative the sum over the nodes' own changes.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.device.zone import smooth_stretches
from optics.device.zone_shapes import (
    ExponentialZone,
    GaussianZone,
    PointZone,
    TableZone,
    UniformZone,
    Zone,
)

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]


class ZoneRate(NamedTuple):
    """Rates of change, along one direction, of what a zone's quadrature depends on."""

    thickness_nm: float = 0.0
    low_nm: float = 0.0  # of the interval in which the density may be nonzero
    high_nm: float = 0.0
    at: float = 0.0
    at_nm: float = 0.0
    width_nm: float = 0.0
    decay_nm: float = 0.0


def quadrature_rates(
    zone: Zone,
    thickness_nm: float,
    interval_nm: tuple[float, float],
    position_nm: Floats,
    weight: Floats,
    rate: ZoneRate,
) -> tuple[Floats, Floats]:
    """Rates of positions and weights of `zone_quadrature`.

    Parameters
    ----------
    zone, thickness_nm, interval_nm
        As given to `zone_quadrature`.
    position_nm, weight : arrays, shape (n,)
        What it returned.
    rate : ZoneRate

    Returns
    -------
    position_rate, weight_rate : arrays, shape (n,)
        The weights' rates sum to 0. With nodes z(t), t fixed, and weights proportional to
        dz/dt rho(z): d ln w = d ln(dz/dt) + d ln rho, less its average.
    """
    if isinstance(zone, PointZone):
        return np.array([_point_rate(zone, thickness_nm, rate)]), np.zeros(1)
    edges = np.array(smooth_stretches(zone, thickness_nm, interval_nm))
    moving = np.array([_edge_rate(zone, thickness_nm, interval_nm, edge, rate) for edge in edges])
    moved = np.interp(position_nm, edges, moving)
    stretch = (np.diff(moving) / np.diff(edges))[np.searchsorted(edges, position_nm) - 1]
    change = stretch + _log_density_rate(zone, thickness_nm, interval_nm, position_nm, moved, rate)
    return moved, weight * (change - weight @ change)


def _point_rate(zone: PointZone, thickness_nm: float, rate: ZoneRate) -> float:
    if zone.at_nm is None:
        return rate.at * thickness_nm + (zone.at or 0.0) * rate.thickness_nm
    return rate.at_nm if zone.start == "bottom" else rate.thickness_nm - rate.at_nm


def _edge_rate(
    zone: Zone,
    thickness_nm: float,
    interval_nm: tuple[float, float],
    edge: float,
    rate: ZoneRate,
) -> float:
    """Rate of an end of a smooth stretch.

    An end that is neither the interval's nor a kink lies where the density has faded away, so
    how it moves does not matter.
    """
    if edge == interval_nm[0]:
        return rate.low_nm
    if edge == interval_nm[1]:
        return rate.high_nm
    if isinstance(zone, GaussianZone) and edge == zone.at * thickness_nm:
        return rate.at * thickness_nm + zone.at * rate.thickness_nm
    if isinstance(zone, TableZone) and zone.relative:
        return edge / thickness_nm * rate.thickness_nm
    return 0.0


def _log_density_rate(
    zone: Zone,
    thickness_nm: float,
    interval_nm: tuple[float, float],
    position_nm: Floats,
    moved: Floats,
    rate: ZoneRate,
) -> Floats:
    """Rate of ln density at nodes that move, up to a constant."""
    if isinstance(zone, UniformZone):
        return np.zeros_like(position_nm)
    if isinstance(zone, ExponentialZone):
        from_bottom = zone.start == "bottom"
        depth = position_nm - interval_nm[0] if from_bottom else interval_nm[1] - position_nm
        deeper = moved - rate.low_nm if from_bottom else rate.high_nm - moved
        return np.asarray(-deeper / zone.decay_nm + depth * rate.decay_nm / zone.decay_nm**2)
    if isinstance(zone, GaussianZone):
        away = position_nm - zone.at * thickness_nm
        farther = moved - rate.at * thickness_nm - zone.at * rate.thickness_nm
        change = -away * farther / zone.width_nm**2 + away**2 * rate.width_nm / zone.width_nm**3
        return np.asarray(change)
    assert isinstance(zone, TableZone), zone
    points = zone.points_nm(thickness_nm)
    slope = np.diff(zone.values) / np.diff(points)
    here = slope[np.clip(np.searchsorted(points, position_nm) - 1, 0, slope.size - 1)]
    carried = position_nm / thickness_nm * rate.thickness_nm if zone.relative else 0.0
    density = np.interp(position_nm, points, zone.values)
    lit = density > 0.0
    return np.where(lit, here * (moved - carried) / np.where(lit, density, 1.0), 0.0)


__all__ = ["ZoneRate", "quadrature_rates"]
