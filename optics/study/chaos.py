"""Shares of variance by polynomials in independent variables, fitted to samples.

A polynomial chaos: products of orthonormal polynomials, Hermite in normal and Legendre in uniform
variables. Their coefficients squared are parts of the variance, so indices of Sobol follow without
further samples (Sudret, Reliab. Eng. Syst. Saf. 93, 964, 2008; from memory). What no polynomial
explains is told by leave-one-out residuals.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.study.intervals import Estimate, estimates

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Integers = NDArray[np.int64]
    Flags = NDArray[np.bool_]

_MOST_TERMS = 500
_SAMPLES_PER_TERM = 3  # at least, so that the residuals mean something
_MOST_DEGREE = 14
# Terms of the degree p that mix variables are kept if (Σ degree^q)^(1/q) <= p: all of them, or
# only those of few variables, which leaves room for higher degrees.
_NORMS = (1.0, 0.6)
_EXPLAINED = 1e-5  # unexplained share that needs no better polynomial
_PATIENCE = 3  # degrees without gain after which no higher one is tried
_FLAT = 1e-20  # variance over squared size below which nothing varies


class Influence(NamedTuple):
    """Shares of an outcome's variance.

    Attributes
    ----------
    first_order : tuple of Estimate
        By factor: what fixing it alone would take away.
    total : tuple of Estimate
        By factor: what would remain if all others were fixed.
    unexplained : float
        Share that the polynomial leaves; intervals include it.
    terms : int
        Number of polynomials.
    """

    first_order: tuple[Estimate, ...]
    total: tuple[Estimate, ...]
    unexplained: float
    terms: int


def influences(
    latent: Floats,
    is_uniform: Sequence[bool],
    outcomes: Floats,
    sequence: Integers,
    factors: Sequence[Sequence[int]],
) -> list[Influence | None]:
    """First-order and total Sobol indices of every outcome.

    Parameters
    ----------
    latent : float (n, p)
        Independent variables of every sample, see `draws.Draws`.
    is_uniform : sequence of bool (p,)
        Uniform on -1 to 1, or standard normal.
    outcomes : float (n, k)
        NaN where undefined.
    sequence : int (n,)
    factors : sequence of sequence of int
        Variables that count as one, every variable in one of them.

    Returns
    -------
    list of Influence or None
        None where an outcome does not vary, or has too few samples for even straight lines.
    """
    found: list[Influence | None] = [None] * outcomes.shape[1]
    groups: dict[bytes, list[int]] = {}
    for place, column in enumerate(outcomes.T):
        known = np.isfinite(column)
        scale = float(np.square(column[known]).mean()) if known.any() else 0.0
        if known.any() and column[known].var() > _FLAT * scale:
            groups.setdefault(known.tobytes(), []).append(place)
    # Outcomes that are defined in the same samples share their polynomials.
    for mask, places in groups.items():
        known = np.frombuffer(mask, dtype=np.bool_)
        values = outcomes[known][:, places]
        values = (values - values.mean(axis=0)) / values.std(axis=0)
        fits = _best_fits(latent[known], is_uniform, values)
        for place, fit, column in zip(places, fits, values.T, strict=True):
            if fit is not None:
                found[place] = _indices(fit, column, sequence[known], factors)
    return found


def _best_fits(latent: Floats, is_uniform: Sequence[bool], values: Floats) -> list[_Fit | None]:
    """Fit of every standardized outcome (n, k) with the least unexplained."""
    best: list[_Fit | None] = [None] * values.shape[1]
    powers = _powers(latent, is_uniform)
    for norm in _NORMS:
        stale = 0
        for terms in _candidates(latent.shape[1], len(values), norm):
            fit = _fit(powers, terms, values)
            stale += 1
            for place, rest in enumerate(fit.unexplained.tolist()):
                known = best[place]
                if known is None or rest < known.unexplained:
                    best[place] = _Fit(terms, fit.design, rest)
                    stale = 0
            if stale == _PATIENCE or all(one and one.unexplained < _EXPLAINED for one in best):
                break
        if all(one and one.unexplained < _EXPLAINED for one in best):
            break
    return [one if one is not None and np.isfinite(one.unexplained) else None for one in best]


class _Fit(NamedTuple):
    terms: Integers  # (m, p) degree of each variable
    design: Floats  # (n, m)
    unexplained: float  # mean square of leave-one-out residuals over the variance


class _Fits(NamedTuple):
    design: Floats  # (n, m)
    unexplained: Floats  # (k,) of every outcome


def _powers(latent: Floats, is_uniform: Sequence[bool]) -> Floats:
    """Orthonormal polynomials (degree, n, p) by their recurrences (NIST DLMF 18.9)."""
    x = latent
    uniform = np.array(is_uniform, dtype=np.bool_)
    powers = np.ones((_MOST_DEGREE + 1, *x.shape))
    powers[1] = x
    for n in range(1, _MOST_DEGREE):
        legendre = ((2 * n + 1) * x * powers[n] - n * powers[n - 1]) / (n + 1)
        hermite = x * powers[n] - n * powers[n - 1]
        powers[n + 1] = np.where(uniform, legendre, hermite)
    norm = np.ones((_MOST_DEGREE + 1, 1, x.shape[1]))
    for n in range(1, _MOST_DEGREE + 1):
        factorial = norm[n - 1, 0] ** 2 * n
        norm[n, 0] = np.sqrt(np.where(uniform, 1.0, factorial))
    degree = np.arange(_MOST_DEGREE + 1)[:, None, None]
    found: Floats = np.where(uniform, powers * np.sqrt(2 * degree + 1), powers / norm)
    return found


def _candidates(variables: int, samples: int, norm: float) -> Iterator[Integers]:
    """Sets of terms (m, p) that the samples can carry, from straight lines on."""
    most = min(_MOST_TERMS, samples // _SAMPLES_PER_TERM)
    for degree in range(1, _MOST_DEGREE + 1):
        terms = _terms(variables, degree, norm, most)
        if terms is None:
            return
        yield terms


def _terms(variables: int, degree: int, norm: float, most: int) -> Integers | None:
    """Degrees of every term, the constant first; None if there are more than `most`."""
    found: list[tuple[int, ...]] = []
    limit = degree**norm * (1.0 + 1e-12)

    def extend(head: tuple[int, ...], left: float) -> bool:
        if len(head) == variables:
            found.append(head)
            return len(found) <= most
        power = 0
        while power == 0 or power**norm <= left:
            if not extend((*head, power), left - (power**norm if power else 0.0)):
                return False
            power += 1
        return True

    return np.array(found) if extend((), limit) else None


def _fit(powers: Floats, terms: Integers, values: Floats) -> _Fits:
    """Least squares for all outcomes (n, k) at once, and their leave-one-out residuals."""
    design = np.ones((len(values), len(terms)))
    for variable in range(terms.shape[1]):
        degrees = terms[:, variable]
        used = np.flatnonzero(degrees)
        design[:, used] *= powers[degrees[used], :, variable].T
    factor, coefficients = _solve(design.T @ design, design.T @ values)
    if factor is None:
        return _Fits(design, np.full(values.shape[1], np.inf))
    from scipy.linalg import solve_triangular

    leverage = np.square(solve_triangular(factor, design.T, lower=True)).sum(axis=0)
    left_out = (values - design @ coefficients) / np.maximum(1.0 - leverage, 1e-12)[:, None]
    return _Fits(design, np.square(left_out).mean(axis=0))


def _solve(gram: Floats, right: Floats) -> tuple[Floats | None, Floats]:
    """Lower Cholesky factor and solution; None and NaN where the terms are not independent."""
    try:
        factor: Floats = np.asarray(np.linalg.cholesky(gram), dtype=np.float64)
    except np.linalg.LinAlgError:
        return None, np.full(right.shape, np.nan)
    from scipy.linalg import cho_solve

    solution: Floats = cho_solve((factor, True), right)
    return factor, solution


def _indices(
    fit: _Fit, values: Floats, sequence: Integers, factors: Sequence[Sequence[int]]
) -> Influence:
    touched = np.stack([(fit.terms[:, list(one)] > 0).any(axis=1) for one in factors])
    alone = touched & (touched.sum(axis=0) == 1)
    parts = []
    for one in np.unique(sequence):
        design, right = fit.design[sequence == one], values[sequence == one]
        parts.append((int(one), design.T @ design, design.T @ right, right @ right, right.size))

    def shares(chosen: Flags) -> Floats:
        kept = set(np.unique(sequence[chosen]).tolist())
        mine = [part[1:] for part in parts if part[0] in kept]
        gram, right = (np.sum([part[place] for part in mine], axis=0) for place in (0, 1))
        square, rest = _squares(
            gram, right, *(sum(part[place] for part in mine) for place in (2, 3))
        )
        numbers = np.concatenate([alone @ square, touched @ square, [rest]])
        of_whole: Floats = numbers / (square[1:].sum() + rest)
        return of_whole

    found, widths = estimates(shares, sequence)
    rest = float(found[-1])
    numbers = [
        _bounded(value, None if widths is None else float(widths[place]), rest)
        for place, value in enumerate(found[:-1].tolist())
    ]
    half = len(factors)
    return Influence(tuple(numbers[:half]), tuple(numbers[half:]), rest, len(fit.terms))


def _squares(gram: Floats, right: Floats, square: float, samples: int) -> tuple[Floats, float]:
    """Squared coefficients without what their errors add on average, and the variance left over."""
    factor, coefficients = _solve(gram, right)
    if factor is None:
        return np.full(right.shape, np.nan), np.nan
    rest = max(square - float(coefficients @ right), 0.0) / max(samples - right.size, 1)
    error = rest * np.square(np.linalg.inv(factor)).sum(axis=0)
    return coefficients**2 - error, rest


def _bounded(value: float, width: float | None, rest: float) -> Estimate:
    """Interval that leaves room for what is not explained, within 0 and 1."""
    value = min(max(value, 0.0), 1.0)
    if width is None or not np.isfinite(width):
        return Estimate(value, None, None)
    low, high = max(value - width, 0.0), min(value + width + rest, 1.0)
    return Estimate(value, min(low, value), max(high, value))
