"""Where in its film an emitter may emit, and the quadrature of averages over its zone.

Positions are in nm from the bottom face of the emitter film.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from functools import lru_cache
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from optics.device.zone_shapes import (
    ExponentialZone,
    Face,
    GaussianZone,
    PointZone,
    TableZone,
    UniformZone,
    Zone,
)

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.emitter import Emitter
    from optics.device.stack import Stack

__all__ = [
    "EmptyZoneError",
    "ExponentialZone",
    "GaussianZone",
    "PointZone",
    "TableZone",
    "UniformZone",
    "Zone",
    "absorber_distances",
    "distances_to_absorbers",
    "interval_between",
    "smooth_stretches",
    "unbounded_faces",
    "zone_interval",
    "zone_quadrature",
]

# Next to an absorber at zero distance the panels shrink geometrically down to this.
_SMALLEST_PANEL_NM = 1e-3
# Share of the zone below which a stretch between two kinks carries nothing that counts.
_SMALLEST_STRETCH = 1e-9


class EmptyZoneError(ValueError):
    """Nothing of a zone lies where it may be nonzero."""


@lru_cache(maxsize=64)
def _gauss_legendre(order: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Nodes and weights on -1 to 1."""
    node, weight = np.polynomial.legendre.leggauss(order)
    return node, weight


def zone_quadrature(
    zone: Zone,
    thickness_nm: float,
    interval_nm: tuple[float, float],
    singular_nm: tuple[float, float] = (math.inf, math.inf),
    scale_nm: float = math.inf,
    order: int = 8,
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Positions and weights for averages over a zone.

    Gauss-Legendre panels, each no longer than `scale_nm`, than what the density needs, and than
    the distance of its nearer end from the singularities outside the film.

    Parameters
    ----------
    zone : Zone
        Density of exciton formation.
    thickness_nm : float
        Thickness of the emitter film in nm.
    interval_nm : (float, float)
        Where the density may be nonzero, in nm from the bottom face (see `zone_interval`); a
        point zone ignores it.
    singular_nm : (float, float)
        Distance in nm from the bottom face down, and from the top face up, to the nearest
        absorber; inf if there is none, 0 if it touches.
    scale_nm : float
        Length in nm over which what is averaged varies.
    order : int
        Nodes of a full-length panel; panels far shorter than their limit get fewer. Raise it to
        refine.

    Returns
    -------
    position_nm, weight : arrays, shape (n,)
        Ascending positions in nm from the bottom face; weight = quadrature weight * density,
        with sum 1.

    Raises
    ------
    EmptyZoneError
        If the interval is empty or the density is zero all over it.
    """
    if isinstance(zone, PointZone):
        return np.array([zone.position_nm(thickness_nm)]), np.ones(1)
    edges = smooth_stretches(zone, thickness_nm, interval_nm)
    longest = min(scale_nm, zone.longest_panel_nm(thickness_nm, interval_nm))
    positions, weights = [], []
    for start, stop in pairwise(edges):
        for left, right, fill in _panels(start, stop, thickness_nm, singular_nm, longest):
            node, weight = _gauss_legendre(_nodes_for(fill, order))
            positions.append((left + right) / 2 + (right - left) / 2 * node)
            weights.append((right - left) / 2 * weight)
    position = np.concatenate(positions)
    weight = np.concatenate(weights) * zone.density(position, thickness_nm, interval_nm)
    total = float(weight.sum())
    if not total > 0:
        raise EmptyZoneError
    return position, weight / total


def smooth_stretches(
    zone: Zone, thickness_nm: float, interval_nm: tuple[float, float]
) -> list[float]:
    """List the ends of the stretches over which a zone's density is smooth.

    Kinks nearer than rounding to an end or to each other are left out: nodes of a stretch of no
    length would fall on the face itself.

    Parameters
    ----------
    zone, thickness_nm, interval_nm
        As of `zone_quadrature`; not a point zone.

    Returns
    -------
    list of float
        Ascending positions in nm from the bottom face.

    Raises
    ------
    EmptyZoneError
        If the interval is empty.
    """
    kinks_nm = zone.kinks_nm(thickness_nm)
    low, high = zone.support_nm(thickness_nm, interval_nm)
    if not high > low:
        raise EmptyZoneError
    gap = _SMALLEST_STRETCH * (high - low)
    edges = [low]
    for kink in sorted(kinks_nm):
        if edges[-1] + gap < kink < high - gap:
            edges.append(kink)
    return [*edges, high]


def _nodes_for(fill: float, order: int) -> int:
    """Nodes of a panel that fills its allowed length to the given share.

    Halving a panel keeps its Gauss error with about one node fewer for an analytic integrand
    whose nearest singularity is a panel length away.
    """
    halvings = int(-math.log2(fill)) if 0 < fill < 1 else 0
    return max(order - halvings - (halvings > 0), order // 2, 2)


def _panels(
    start: float,
    stop: float,
    thickness_nm: float,
    singular_nm: tuple[float, float],
    longest_nm: float,
) -> list[tuple[float, float, float]]:
    """Panels (left, right, share of the allowed length) that fill a smooth stretch.

    Panels are cut off at whichever end allows the shorter one, so both ends are graded.
    """
    lower: list[tuple[float, float, float]] = []
    upper: list[tuple[float, float, float]] = []
    left, right = start, stop
    while True:
        length = right - left
        below = max(left + singular_nm[0], _SMALLEST_PANEL_NM)
        above = max(thickness_nm - right + singular_nm[1], _SMALLEST_PANEL_NM)
        allowed = min(longest_nm, below, above)
        if length <= allowed * (1 + 1e-9):
            # Without any limit nothing is known about the integrand: the full order then.
            lower.append((left, right, length / allowed if allowed < math.inf else 1.0))
            return lower + upper[::-1]
        # Panels from here to the end in equal parts, unless growing distance allows longer ones.
        cut = length / max(math.ceil(length / allowed - 1e-9), 2)
        if below <= above:
            lower.append((left, left + cut, cut / allowed))
            left += cut
        else:
            upper.append((right - cut, right, cut / allowed))
            right -= cut


def absorber_distances(
    stack: Stack, film_index: int, wavelength_nm: NDArray[np.float64]
) -> tuple[float, float]:
    """Distance from each face of a film to the nearest absorber beyond it.

    Slabs count as transparent; a film of zero thickness is as good as absent.

    Parameters
    ----------
    stack : Stack
        The device.
    film_index : int
        The emitter film, counted from the bottom.
    wavelength_nm : array, shape (n,)
        Every wavelength of the case in nm.

    Returns
    -------
    below_nm, above_nm : float
        Through lossless films; 0 = adjacent, inf = none.
    """
    films, (bottom, top) = stack.absorbing(wavelength_nm)
    ends = (bottom and stack.substrate is None, top and stack.cover is None)
    thickness = [film.thickness_nm for film in stack.films]
    return distances_to_absorbers(thickness, films.tolist(), ends, film_index)


def distances_to_absorbers(
    thickness_nm: Sequence[float],
    absorbing: Sequence[bool],
    ends: tuple[bool, bool],
    film_index: int,
) -> tuple[float, float]:
    """Distance from each face of a film to the nearest absorber, from plain numbers.

    Parameters
    ----------
    thickness_nm, absorbing : sequences, shape (n_film,)
        Thickness in nm and whether it absorbs, of every film from the bottom.
    ends : (bool, bool)
        Whether an absorber stands directly below and above the films.
    film_index : int
        The emitter film, counted from the bottom.

    Returns
    -------
    below_nm, above_nm : float
        As `absorber_distances`.
    """
    orders = (range(film_index - 1, -1, -1), range(film_index + 1, len(thickness_nm)))
    below, above = (
        _distance(thickness_nm, order, absorbing, end)
        for order, end in zip(orders, ends, strict=True)
    )
    return below, above


def _distance(
    thickness_nm: Sequence[float], order: range, absorbing: Sequence[bool], absorbing_end: bool
) -> float:
    """Thickness of the lossless films in front of the first absorber, in the order given."""
    distance = 0.0
    for index in order:
        if absorbing[index] and thickness_nm[index] > 0:
            return distance
        distance += thickness_nm[index]
    return distance if absorbing_end else math.inf


def zone_interval(
    stack: Stack, emitter: Emitter, wavelength_nm: NDArray[np.float64]
) -> tuple[float, float]:
    """Where an emitter's continuous zone may be nonzero.

    Zones are zero within the closest approach of any absorber outside the emitter's own film.

    Parameters
    ----------
    stack : Stack
        The device.
    emitter : Emitter
        The emitter.
    wavelength_nm : array, shape (n,)
        Every wavelength of the case in nm.

    Returns
    -------
    low_nm, high_nm : float
        In nm from the bottom face; empty if ``high_nm <= low_nm``.
    """
    distances = absorber_distances(stack, emitter.film_index, wavelength_nm)
    thickness = stack.films[emitter.film_index].thickness_nm
    return interval_between(distances, thickness, emitter.closest_approach_nm)


def interval_between(
    distances_nm: tuple[float, float], thickness_nm: float, closest_approach_nm: float
) -> tuple[float, float]:
    """Where a continuous zone may be nonzero between absorbers at given distances from its film.

    Lengths in nm, from and to the bottom face; as `zone_interval`.
    """
    below, above = distances_nm
    low = max(0.0, closest_approach_nm - below)
    high = thickness_nm - max(0.0, closest_approach_nm - above)
    return low, high


def unbounded_faces(
    stack: Stack, emitter: Emitter, wavelength_nm: NDArray[np.float64]
) -> tuple[Face, ...]:
    """Faces of the emitter film where its continuous zone reaches an adjacent absorber.

    There the dissipated power has no bound, so its zone average does not exist. Happens only
    with a closest approach of 0. A table that falls to zero just at the face counts too: the
    power grows with the inverse cube of the distance.

    Returns
    -------
    tuple of {"bottom", "top"}
        Empty for point zones.
    """
    thickness = stack.films[emitter.film_index].thickness_nm
    kept_away = thickness - emitter.closest_approach_nm < thickness
    if isinstance(emitter.zone, PointZone) or kept_away:
        return ()
    distances = absorber_distances(stack, emitter.film_index, wavelength_nm)
    interval = zone_interval(stack, emitter, wavelength_nm)
    low, high = emitter.zone.support_nm(thickness, interval)
    faces: list[Face] = []
    if distances[0] == 0 and low <= 0:
        faces.append("bottom")
    if distances[1] == 0 and high >= thickness:
        faces.append("top")
    return tuple(faces)
