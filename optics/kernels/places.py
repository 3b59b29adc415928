"""Many dipoles in one film from fewer: powers are analytic in a dipole's place.

At each wavevector a power varies as exp(+-2 i kz z) across a film, so that interpolation between
Chebyshev nodes converges geometrically; slowest next to a medium that swallows near fields, where
the power has a pole at its face. Every wavelength decides for itself, by the last coefficients of
the interpolant, whether that was good enough.

Error of Chebyshev interpolation: L. N. Trefethen, Approximation Theory and Approximation Practice,
chapters 4 and 8 (from memory).
"""

from typing import NamedTuple

import numpy as np
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

from optics.kernels.arrays import Floats
from optics.kernels.geometry import nearest_absorber
from optics.kernels.problem import Problem

_MANY = 16  # positions from which on fewer nodes save time
_NODES = 10
_SHARE = 0.05  # of the wanted accuracy, what interpolation may add
# How much the coefficients left out are taken to exceed what they are if they go on falling as
# those known do, from _BEFORE degrees earlier to the last ones.
_CAUTION, _BEFORE = 8.0, 4

_X = chebyshev.chebpts1(_NODES)
# Coefficients of the interpolant: discrete orthogonality of the polynomials at their own nodes.
_TO_COEFFICIENTS = chebyshev.chebvander(_X, _NODES - 1).T * (2.0 / _NODES)
_TO_COEFFICIENTS[0] *= 0.5


class Places(NamedTuple):
    """Nodes that stand for many dipoles."""

    problem: Problem  # with a dipole at each of _NODES nodes
    basis: Floats  # (w, z, _NODES) Chebyshev polynomials at the places asked for


def fewer(problem: Problem) -> Places | None:
    """Chebyshev nodes between the outermost dipoles; None where there are few dipoles."""
    places = problem.source.kz_positions
    if places.shape[1] < _MANY:
        return None
    lo, span = places.min(axis=1, keepdims=True), np.ptp(places, axis=1, keepdims=True)
    nodes = lo + span * (0.5 * (_X + 1.0))
    x = np.clip(2.0 * (places - lo) / _some(span) - 1.0, -1.0, 1.0)
    source = problem.source._replace(kz_positions=nodes)
    return Places(problem._replace(source=source), chebyshev.chebvander(x, _NODES - 1))


def _some(span: Floats) -> Floats:
    """Span of the dipoles; any for dipoles that all lie in one place, where powers are constant."""
    given: Floats = np.where(span > 0.0, span, 1.0)
    return given


def hopeless(problem: Problem, tolerance: float) -> NDArray[np.bool_]:
    """Where a medium that swallows near fields is too near for few nodes (w,).

    Its face is a pole of the power; coefficients fall by the parameter of the ellipse through it.
    """
    places = problem.source.kz_positions
    x = 1.0 + 2.0 * nearest_absorber(problem) / _some(np.ptp(places, axis=1))
    falling = x - np.sqrt(x * x - 1.0)
    wrong: NDArray[np.bool_] = falling**_NODES > _SHARE * tolerance
    return wrong


def at_places(places: Places, values: Floats) -> tuple[Floats, Floats]:
    """Interpolate values (w, nodes, ...) to the places asked for.

    Returns
    -------
    float (w, z, ...)
        The values there.
    float (w, ...)
        Estimated error.
    """
    w, z, _ = places.basis.shape
    coefficients = np.matmul(_TO_COEFFICIENTS, values.reshape(w, _NODES, -1))
    error = _left_out(coefficients)
    there = np.matmul(places.basis, coefficients)
    rest = values.shape[2:]
    return there.reshape(w, z, *rest), error.reshape(w, *rest)


def _left_out(coefficients: Floats) -> Floats:
    """Size of what comes after the last of coefficients (w, nodes, ...), which fall geometrically.

    In pairs, because every other one may vanish; two degrees more take the root of what _BEFORE
    degrees take.
    """
    size = np.abs(coefficients)
    last, earlier = size[:, -2:].max(axis=1), size[:, -2 - _BEFORE : -_BEFORE].max(axis=1)
    falling = np.minimum(1.0, last / np.maximum(earlier, np.finfo(float).tiny))
    left: Floats = _CAUTION * last * np.sqrt(falling)
    return left


def precise(error: Floats, tolerance: float) -> NDArray[np.bool_]:
    """Whether interpolation was good enough (w,), from its error over the dissipated power."""
    good: NDArray[np.bool_] = error <= _SHARE * tolerance
    return good
