"""Sums over the nodes of a panel, and estimates of their errors.

Either of values at the nodes, or, for everything that reaches a destination, of what dipoles
send times the share of it that gets there: products are summed without ever being kept.
"""

from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Flags, Floats, Integers
from optics.kernels.compiled import borrowing, inline, reduction
from optics.kernels.exits import COLUMNS, TOTAL
from optics.kernels.halfstack import P, S
from optics.kernels.rules import DEGREE_ROWS, DEGREES, NODES, PANEL_NODES, WEIGHT

_PROBED = 4  # of so many neighboring positions one is looked at for errors


class Light(NamedTuple):
    """Power at all nodes of a panel on the real axis; n = PANEL_NODES, sides down, up."""

    total: Floats  # (3, z, n) dissipated, by channel
    sent: Floats  # (3, z, 2n) sent to either side, by channel
    shares: Floats  # (2, COLUMNS * 2n) share that gets to each destination, by polarization
    live: Flags  # (2, COLUMNS) destinations that any light gets to


@inline
def light_space(positions: int) -> Light:
    """Arrays for so many positions."""
    return Light(
        np.zeros((3, positions, PANEL_NODES)),
        np.zeros((3, positions, 2 * PANEL_NODES)),
        np.zeros((2, COLUMNS * 2 * PANEL_NODES)),
        np.zeros((2, COLUMNS), dtype=np.bool_),
    )


@reduction
def weighted(weights: Floats, values: Floats, count: int) -> float:
    """Sum of the first `count` values times their weights, in any order."""
    total = 0.0
    for i in range(count):
        total += weights[i] * values[i]
    return total


@borrowing
def panel_sum(values: Floats, stage: int, misses: Floats, result: Floats, error: Floats) -> None:
    """Add a panel's sums and error estimates to result and error (both (q,))."""
    for k in range(result.size):
        error[k] += misses[k]
    for k in range(result.size):
        result[k] += weighted(WEIGHT[stage], values[k], (stage + 1) * NODES)


@inline
def probed_columns(groups: int, positions: int) -> Integers:
    """Columns (group * positions + position) in which a panel's error is looked at.

    Neighboring positions differ by little: every fourth and the last will do.
    """
    stride = _PROBED if positions > _PROBED else 1
    count = (positions - 1) // stride + 1
    last = positions - 1 if (count - 1) * stride < positions - 1 else -1
    some = count + (1 if last > 0 else 0)
    found = np.zeros(groups * some, dtype=np.int64)
    for group in range(groups):
        for i in range(count):
            found[group * some + i] = group * positions + i * stride
        if last > 0:
            found[group * some + count] = group * positions + last
    return found


@borrowing
def panel_miss(last: float, second: float, earlier: float, earlier_second: float) -> float:
    """Estimate of a panel's error from Legendre coefficients of the interpolant.

    The last ones tell how far the integrand is resolved, and their ratio to those `rules.BEFORE`
    degrees earlier how fast it converges. Both rules are exact for about 16 degrees more than
    they have nodes, so that with geometric convergence they err by the fourth power of that
    ratio; the square used here is the cautious choice. Where something narrow keeps the
    coefficients up, the last ones themselves are the error.
    """
    unresolved = max(abs(last), abs(second))
    falling = min(1.0, unresolved / (max(abs(earlier), abs(earlier_second)) + 1e-300))
    return 2.0 * unresolved * falling * falling


@borrowing
def panel_error(
    values: Floats,
    stage: int,
    scale: Floats,
    probed: Integers,
    misses: Floats,
) -> float:
    """Estimate the error of a panel's sums by `panel_miss`.

    Parameters
    ----------
    values : float (q, PANEL_NODES)
    stage : int
        How many stages are filled in, less one.
    scale : float (q,)
        What each column's error is compared with.
    probed : int (c,)
        Columns to look at.
    misses : float (q,), output
        Estimated error of each of these columns.

    Returns
    -------
    float
        Largest error over scale.
    """
    count = (stage + 1) * NODES
    worst = 0.0
    for k in range(probed.size):
        column = probed[k]
        row = values[column]
        misses[column] = panel_miss(
            weighted(DEGREE_ROWS[0, stage], row, count),
            weighted(DEGREE_ROWS[1, stage], row, count),
            weighted(DEGREE_ROWS[2, stage], row, count),
            weighted(DEGREE_ROWS[3, stage], row, count),
        )
        worst = max(worst, misses[column] / scale[column])
    return worst


@reduction
def _arrived(weights: Floats, sent: Floats, shares: Floats, count: int) -> float:
    """Weighted sum of what arrives from both sides, over the first `count` nodes."""
    total = 0.0
    for i in range(count):
        total += weights[i] * (
            sent[i] * shares[i] + sent[PANEL_NODES + i] * shares[PANEL_NODES + i]
        )
    return total


@borrowing
def _add_arrived(weights: Floats, sent: Floats, shares: Floats, count: int, sums: Floats) -> None:
    """Add weighted sums of what arrives to sums (z,); sent (z, 2n), shares (2n,)."""
    for q in range(sums.size):
        sums[q] += _arrived(weights, sent[q], shares, count)


@borrowing
def _add_moments(
    stage: int, sent: Floats, shares: Floats, probed: Integers, moments: Floats
) -> None:
    """Add Legendre coefficients of what arrives to moments (DEGREES, p), at probed positions."""
    for d in range(DEGREES):
        row = DEGREE_ROWS[d, stage]
        for j in range(probed.size):
            moments[d, j] += _arrived(row, sent[probed[j]], shares, (stage + 1) * NODES)


@borrowing
def _total_moments(stage: int, total: Floats, probed: Integers, moments: Floats) -> None:
    """As `_add_moments`, of the dissipated power total (z, n)."""
    for d in range(DEGREES):
        row = DEGREE_ROWS[d, stage]
        for j in range(probed.size):
            moments[d, j] += weighted(row, total[probed[j]], (stage + 1) * NODES)


@borrowing
def light_error(
    light: Light, stage: int, scale: Floats, probed: Integers, moments: Floats, misses: Floats
) -> float:
    """As `panel_error`, of every destination.

    scale, misses : float (2 * COLUMNS * z,); probed : positions to look at; moments : float
    (DEGREES, probed.size), work space.
    """
    positions = light.total.shape[1]
    worst = 0.0
    for group in range(2 * COLUMNS):
        o, k = group // COLUMNS, group % COLUMNS
        moments[:, :] = 0.0
        if k == TOTAL:
            _total_moments(stage, light.total[o], probed, moments)
            if o == 1:
                _total_moments(stage, light.total[2], probed, moments)
        elif o == 0 and light.live[P, k]:
            _add_moments(
                stage, light.sent[0], light.shares[P, k * 2 * PANEL_NODES :], probed, moments
            )
        elif o == 1 and (light.live[P, k] or light.live[S, k]):
            _add_moments(
                stage, light.sent[1], light.shares[P, k * 2 * PANEL_NODES :], probed, moments
            )
            _add_moments(
                stage, light.sent[2], light.shares[S, k * 2 * PANEL_NODES :], probed, moments
            )
        for j in range(probed.size):
            column = group * positions + probed[j]
            misses[column] = panel_miss(moments[0, j], moments[1, j], moments[2, j], moments[3, j])
            worst = max(worst, misses[column] / scale[column])
    return worst


@borrowing
def light_sum(light: Light, stage: int, misses: Floats, result: Floats, error: Floats) -> None:
    """As `panel_sum`, of every destination: result and error (2 * COLUMNS * z,)."""
    count, positions, weights = (stage + 1) * NODES, light.total.shape[1], WEIGHT[stage]
    for column in range(result.size):
        error[column] += misses[column]
    for group in range(2 * COLUMNS):
        o, k = group // COLUMNS, group % COLUMNS
        sums = result[group * positions : (group + 1) * positions]
        if k == TOTAL:
            for q in range(positions):
                sums[q] += weighted(weights, light.total[o, q], count)
                if o == 1:
                    sums[q] += weighted(weights, light.total[2, q], count)
        elif o == 0 and light.live[P, k]:
            _add_arrived(
                weights, light.sent[0], light.shares[P, k * 2 * PANEL_NODES :], count, sums
            )
        elif o == 1 and (light.live[P, k] or light.live[S, k]):
            _add_arrived(
                weights, light.sent[1], light.shares[P, k * 2 * PANEL_NODES :], count, sums
            )
            _add_arrived(
                weights, light.sent[2], light.shares[S, k * 2 * PANEL_NODES :], count, sums
            )
