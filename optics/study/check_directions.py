"""Light added up over all directions against what the light budget says leaves a side."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from optics.kernels.geometry import light_lines
from optics.kernels.problem import rows_of
from optics.outcome.budget import DEFAULT_TOLERANCE, Budget
from optics.outcome.directional import SIDES, Source, index_outside, radiance_over_bulk, sources
from optics.study.check_rows import Place, Row, compared, not_checked

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case

_KIND = "all directions"
_QUANTITY = "light that leaves"
_METHOD = "Gauss panels over angles"
_NODES = 48
_MOST_PANELS = 256  # of each stretch between light lines
_RESOLVED = 0.01  # of the tolerance


def direction_rows(
    case: Case, outcome: Budget, wavelengths_nm: Mapping[str, Sequence[float]]
) -> Iterator[Row]:
    """Compare 2 pi int u sin d(angle) with U, zone and orientation averaged, side by side.

    Parameters
    ----------
    outcome : Budget
        Of this case.
    wavelengths_nm : mapping of emitter to wavelengths
        Those of the emitter's own grid that are looked at.
    """
    for source in sources(case, outcome.lit):
        for at_nm in wavelengths_nm[source.emitter.name]:
            row = int(np.flatnonzero(source.wavelength_nm == at_nm)[0])
            for side in range(2):
                yield _row(case, _one_wavelength(source, row), side)


def _one_wavelength(source: Source, row: int) -> Source:
    """The same light at one wavelength only."""
    kept = slice(row, row + 1)
    return source._replace(
        wavelength_nm=source.wavelength_nm[kept],
        step_nm=source.step_nm[kept],
        orientation=source.orientation[kept],
        watts=source.watts[kept],
        leaves=source.leaves[kept],
        problem=rows_of(source.problem, np.array([row])),
    )


def _row(case: Case, source: Source, side: int) -> Row:
    place = Place(source.emitter.name, float(source.wavelength_nm[0]), side=SIDES[side])
    scale = float(source.radiating.sum())
    if scale == 0.0:
        return not_checked(_KIND, _QUANTITY, _METHOD, place, "the emitter gives no light")
    outside = float(index_outside(case, source.problem, side)[0])
    lines = np.unique(light_lines(source.problem)[0]) / outside
    ends = np.append(lines[lines < 1.0], 1.0)
    before, panels = np.inf, 1
    while True:
        total = _all_directions(case, source, side, ends, panels)
        if abs(total - before) <= _RESOLVED * DEFAULT_TOLERANCE * scale:
            break
        if panels == _MOST_PANELS:
            reason = f"{panels} panels between light lines do not resolve it"
            return not_checked(_KIND, _QUANTITY, _METHOD, place, reason)
        before, panels = total, 2 * panels
    return compared(
        _KIND,
        _QUANTITY,
        _METHOD,
        place,
        float(source.leaves[0, side]),
        total,
        scale,
        DEFAULT_TOLERANCE,
    )


def _all_directions(
    case: Case, source: Source, side: int, ends: NDArray[np.float64], panels: int
) -> float:
    """2 pi int radiance sin cos d(angle), each stretch between light lines in equal panels."""
    node, weight = np.polynomial.legendre.leggauss(_NODES)
    total = 0.0
    for low, high in pairwise(ends.tolist()):
        # An angle of its own for each stretch smooths the square roots at its ends.
        starts = 0.5 * np.pi * np.arange(panels)[:, None] / panels
        turn = (starts + 0.25 * np.pi / panels * (node + 1.0)).reshape(-1)
        sine = low + (high - low) * np.sin(turn) ** 2
        slope = (high - low) * np.sin(2.0 * turn) * 0.25 * np.pi / panels
        ray = radiance_over_bulk(case, source, side, np.rad2deg(np.arcsin(np.minimum(sine, 1.0))))
        total += float(2.0 * np.pi * ray[0].sum(axis=1) @ (sine * slope * np.tile(weight, panels)))
    return total
