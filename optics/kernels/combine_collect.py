"""Integrals of many devices sorted into destinations, and added up over wavelengths."""

import numpy as np
from numpy.typing import NDArray

from optics.kernels.arrays import Floats, Integers
from optics.kernels.combine import BEYOND_PART, GUIDED_PART, NEAR_PART, TOTAL_PART
from optics.kernels.compiled import kernel
from optics.kernels.exits import (
    ABSORBED,
    AIR_BOTTOM,
    AIR_TOP,
    COLUMNS,
    COVER,
    MATCHED_BOTTOM,
    MATCHED_TOP,
    SUBSTRATE,
)

_SMALLEST_SCALE = 1e-5  # as in `budget`


@kernel
def collect(
    dissipated: Floats,
    miss_dissipated: Floats,
    free: Floats,
    miss_free: Floats,
    plasmon: bool,
    zone: Floats,
    error: Floats,
    balance: Floats,
    power: Floats,
) -> None:
    """Sort one wavelength's integrals into destinations.

    Parameters
    ----------
    dissipated, miss_dissipated : float (PARTS, 3, z, p), (PARTS, 3, p)
        From `combine_dissipated`.
    free, miss_free : float (2, COLUMNS, z, p), (2, COLUMNS, p)
        From `combine_radiated`.
    plasmon : bool
        Whether TM power beyond counts as surface plasmon.
    zone : float (z,)
        Weights of the average whose error is estimated.
    error : float (p,), output
        Estimated error of the worst destination over F.
    balance : float (p,), output
        Largest share that no destination accounts for.
    power : float (2, KNOWN, z, p), output
        By orientation: the outcomes of `budget` in their order, then F.
    """
    z, points = free.shape[2], free.shape[3]
    mean = np.zeros(points)
    error[:], balance[:] = 0.0, 0.0
    for o in range(2):
        low, high = o, 2 * o + 1  # channels
        mean[:] = 0.0
        for q in range(z):
            out = power[o, :, q]
            for p in range(points):
                total, guided, tail, near = 0.0, 0.0, 0.0, 0.0
                for c in range(low, high):
                    total += dissipated[TOTAL_PART, c, q, p]
                    guided += dissipated[GUIDED_PART, c, q, p]
                    tail += dissipated[BEYOND_PART, c, q, p]
                    near += dissipated[NEAR_PART, c, q, p]
                # TM of the vertical or of the horizontal dipole.
                magnetic = dissipated[BEYOND_PART, o, q, p] + dissipated[NEAR_PART, o, q, p]
                magnetic = magnetic if plasmon else 0.0
                out[0, p], out[1, p] = free[o, AIR_BOTTOM, q, p], free[o, AIR_TOP, q, p]
                out[2, p], out[3, p] = free[o, SUBSTRATE, q, p], free[o, COVER, q, p]
                out[4, p], out[5, p] = guided + tail + near - magnetic, magnetic
                out[6, p] = free[o, ABSORBED, q, p]
                out[7, p] = free[o, MATCHED_BOTTOM, q, p]
                out[8, p] = free[o, MATCHED_TOP, q, p]
                out[9, p], out[10, p] = near, total + near
                known = out[0, p] + out[1, p] + out[2, p] + out[3, p] + out[4, p]
                known += out[5, p] + out[6, p]
                # The total comes from a path of its own.
                gap = abs(total + near - known)
                error[p] = max(error[p], gap / max(abs(total + near), _SMALLEST_SCALE))
                balance[p] = max(balance[p], abs(known / (total + near) - 1.0))
                mean[p] += zone[q] * (total + near)
        for p in range(points):
            whole, parts, near = 0.0, 0.0, 0.0
            for column in range(COLUMNS):
                parts = max(parts, miss_free[o, column, p])
            for c in range(low, high):
                whole += miss_dissipated[TOTAL_PART, c, p]
                parts += miss_dissipated[GUIDED_PART, c, p] + miss_dissipated[BEYOND_PART, c, p]
                near += miss_dissipated[NEAR_PART, c, p]
            worst = max(whole, parts) + near
            error[p] = max(error[p], worst / max(abs(mean[p]), _SMALLEST_SCALE))


@kernel
def add_averages(
    power: Floats, mix: Floats, places: Integers, chosen: NDArray[np.bool_], sums: Floats
) -> None:
    """Add the power of the chosen points to their averages.

    Parameters
    ----------
    power : float (2, KNOWN, z, p)
        From `collect`.
    mix : float (m, 2)
        Weights of vertical and horizontal dipoles in each average.
    places : int (p,)
        Of the points among all.
    chosen : bool (p,)
    sums : float (m, KNOWN, z, all), output
    """
    for m in range(mix.shape[0]):
        for k in range(power.shape[1]):
            for q in range(power.shape[2]):
                for p in range(places.size):
                    if chosen[p]:
                        sums[m, k, q, places[p]] += (
                            mix[m, 0] * power[0, k, q, p] + mix[m, 1] * power[1, k, q, p]
                        )
