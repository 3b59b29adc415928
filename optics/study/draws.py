"""Random values of several numbers: normal or uniform, alone or correlated in groups.

Points are those of scrambled Sobol sequences, several of them and independent, so that the
scatter between them tells how far an average can be trusted. Numbers of a group are tied together
by a normal copula whose correlations are chosen such that those of the numbers themselves are the
ones asked for.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, NamedTuple

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Integers = NDArray[np.int64]

#: Independent sequences, or as many as there are samples.
SEQUENCES = 16
_BITS = 30  # of the coordinates of a Sobol point
# Eigenvalues of a correlation of 1 that rounding may leave below zero.
_DUST = 1e-9


@dataclass(frozen=True, slots=True)
class Spread:
    """How one number scatters.

    Attributes
    ----------
    path : str
    nominal : float
        Mean, the value in the case.
    kind : {"normal", "uniform"}
    scale : float
        Standard deviation of a normal, half width of a uniform distribution; in the unit of the
        number.
    """

    path: str
    nominal: float
    kind: Literal["normal", "uniform"]
    scale: float

    @property
    def sd(self) -> float:
        """Standard deviation; that of a uniform distribution is half width / √3."""
        return self.scale if self.kind == "normal" else self.scale / math.sqrt(3.0)


class Group(NamedTuple):
    """Numbers of which every two have the same correlation coefficient."""

    places: tuple[int, ...]  # among the spreads
    correlation: float


class Draws(NamedTuple):
    """Samples.

    Attributes
    ----------
    values : float (n, p)
        Of every number.
    latent : float (n, p)
        Independent standard variables from which the values come: uniform on -1 to 1 for a
        uniform number outside all groups, standard normal for the others. Those of a group
        determine its numbers together, not one by one.
    sequence : int (n,)
        Which of the independent sequences a sample belongs to, from 0.
    """

    values: Floats
    latent: Floats
    sequence: Integers


def draw(spreads: Sequence[Spread], groups: Sequence[Group], samples: int, seed: int) -> Draws:
    """Draw samples; the same seed gives the same ones.

    Parameters
    ----------
    spreads : sequence of Spread
    groups : sequence of Group
        Each number in one group at most, correlations within `correlation_range`.
    samples : int
        At least 1.
    seed : int
        Not negative.
    """
    from scipy.special import ndtr, ndtri

    parts, sequence = _sequences(len(spreads), samples, seed)
    normal = ndtri(parts)
    latent = normal.copy()
    grouped = {place for group in groups for place in group.places}
    for place, spread in enumerate(spreads):
        if spread.kind == "uniform" and place not in grouped:
            latent[:, place] = 2.0 * parts[:, place] - 1.0
    for group in groups:
        places = list(group.places)
        root = _root(_copula([spreads[place].kind for place in places], group.correlation))
        normal[:, places] = normal[:, places] @ root.T
    values = np.empty_like(normal)
    for place, spread in enumerate(spreads):
        if spread.kind == "normal":
            unit = normal[:, place]
        elif place in grouped:
            unit = 2.0 * ndtr(normal[:, place]) - 1.0
        else:
            unit = latent[:, place]
        values[:, place] = spread.nominal + spread.scale * unit
    return Draws(values, latent, sequence)


def covariance(spreads: Sequence[Spread], groups: Sequence[Group]) -> Floats:
    """Covariance matrix (p, p) of the numbers."""
    correlation = np.eye(len(spreads))
    for group in groups:
        for one in group.places:
            for other in group.places:
                if one != other:
                    correlation[one, other] = group.correlation
    sd = np.array([spread.sd for spread in spreads])
    matrix: Floats = correlation * np.outer(sd, sd)
    return matrix


def correlation_range(kinds: Sequence[str]) -> tuple[float, float]:
    """Smallest and largest common correlation that numbers of these kinds can have.

    Parameters
    ----------
    kinds : sequence of {"normal", "uniform"}
        At least two.
    """
    return _edge(kinds, -1.0), _edge(kinds, 1.0)


def _edge(kinds: Sequence[str], far: float) -> float:
    """Correlation farthest from 0 toward `far`, by bisection."""
    if _possible(kinds, far):
        return far
    inside, outside = 0.0, far
    while abs(outside - inside) > 1e-12:
        middle = 0.5 * (inside + outside)
        if _possible(kinds, middle):
            inside = middle
        else:
            outside = middle
    return inside


def _possible(kinds: Sequence[str], correlation: float) -> bool:
    matrix = _copula(kinds, correlation)
    return bool(np.abs(matrix).max() <= 1.0 and np.linalg.eigvalsh(matrix).min() >= -_DUST)


def _copula(kinds: Sequence[str], correlation: float) -> Floats:
    """Correlation matrix of the normal variables behind equally correlated numbers.

    Two uniform numbers made of normal ones that have the correlation r have (6/π) asin(r/2), a
    uniform and a normal one r √(3/π).
    """
    of_pair = {
        ("normal", "normal"): correlation,
        ("uniform", "uniform"): 2.0 * math.sin(math.pi * correlation / 6.0),
    }
    mixed = correlation * math.sqrt(math.pi / 3.0)
    size = len(kinds)
    matrix = np.eye(size)
    for one in range(size):
        for other in range(size):
            if one != other:
                matrix[one, other] = of_pair.get((kinds[one], kinds[other]), mixed)
    return matrix


def _root(matrix: Floats) -> Floats:
    """Matrix whose product with its transpose is a correlation matrix, singular ones included.

    The largest share comes first: the first coordinates of a Sobol point are the most even.
    """
    values, vectors = np.linalg.eigh(matrix)
    root: Floats = (vectors * np.sqrt(np.maximum(values, 0.0)))[:, ::-1]
    return root


def _sequences(numbers: int, samples: int, seed: int) -> tuple[Floats, Integers]:
    """Points (n, p) between 0 and 1 of independent sequences, and the sequence of each."""
    from scipy.stats.qmc import Sobol

    sizes = [part.size for part in np.array_split(np.arange(samples), min(SEQUENCES, samples))]
    sources = np.random.SeedSequence(seed).spawn(len(sizes))
    parts = []
    for size, source in zip(sizes, sources, strict=True):
        engine = Sobol(numbers, scramble=True, bits=_BITS, rng=np.random.default_rng(source))
        parts.append(engine.random_base2(max(size - 1, 0).bit_length())[:size])
    # The middle of a coordinate's last bit: never 0, where a normal variable has no bounds.
    points: Floats = np.concatenate(parts) + 0.5 ** (_BITS + 1)
    return points, np.repeat(np.arange(len(sizes)), sizes)
