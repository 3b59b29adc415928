"""Spectral radiance of every emitter against angle, and what leaves at all angles together.

Everything is per current density, A/m2, so that results without a stated current remain: spectral
radiance in W/(sr A nm), exitance in W/(A nm).
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING, NamedTuple, cast

import numpy as np

from optics.device.constants import HC_EV_NM
from optics.device.spectrum import trapezoid_weights
from optics.kernels.angles import leaving
from optics.kernels.budget import AIR_BOTTOM, AIR_TOP
from optics.kernels.problem import rows_of
from optics.kernels.varied_directions import leaving_rates
from optics.outcome.dual import Dual
from optics.outcome.efficiency import oriented
from optics.outcome.light import cores
from optics.outcome.light_rates import rates_at_rows

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.kernels.problem import Problem
    from optics.kernels.variation import Rates
    from optics.outcome.budget import Lit
    from optics.outcome.efficiency import Emission
    from optics.outcome.light import Light

    Floats = NDArray[np.float64]
    Rows = NDArray[np.int64]

SIDES = ("bottom", "top")
POLARIZATIONS = ("s", "p")
# Wavelengths times angles that are computed together: what they take of memory stays small.
_TOGETHER = 1000


class Source(NamedTuple):
    """Light of one emitter, ready to be sent into directions."""

    emitter: Emitter
    wavelength_nm: Floats  # (w,)
    step_nm: Floats  # (w,) trapezoid weights; 1 for a line and a single wavelength
    orientation: Floats  # (w, 2) shares of the bulk rate, vertical and horizontal
    problem: Problem  # what the engine was asked
    radiating: Floats  # (z,) zone weight * q / (1 - q + q F)
    watts: Floats  # (w,) W/(A nm) of one photon per exciton of the unit, before outcoupling
    leaves: Floats  # (w, 2) radiating-weighted power that leaves at the bottom, top; over bulk
    rates: Rates | None = None  # of the engine's arrays, where the numbers carry rates

    @property
    def is_line(self) -> bool:
        """Whether all its light has one wavelength, and nothing is per nm."""
        return self.emitter.spectrum.line_nm is not None


def sources(case: Case, lit: Sequence[Lit]) -> tuple[Source, ...]:
    """Gather the light of all emitters of a case.

    Parameters
    ----------
    case : Case
    lit : sequence of Lit
        Of this case's budget: its F and its light by side are used, so that what is integrated
        over angles is the light budget's own.
    """
    return tuple(source_of(case, *one) for one in lit)


def source_of(case: Case, emitter: Emitter, light: Light, found: Emission) -> Source:
    """Light of one emitter, ready to be sent into directions; its numbers may carry rates."""
    q = emitter.quantum_yield
    radiating = light.zone_weight * q / (1.0 - q + q * found.dissipated)
    leaves = [
        oriented(light.engine.shares[..., place], found.orientation) @ radiating
        for place in (AIR_BOTTOM, AIR_TOP)
    ]
    step_nm = trapezoid_weights(light.wavelength_nm)
    excitons = case.drive.charge_balance[emitter.unit] * emitter.share * emitter.exciton_fraction
    # The weights hold density times step; a line's density has no unit and its step is 1.
    photons = found.spectrum_weight / step_nm
    return Source(
        emitter,
        light.wavelength_nm,
        step_nm,
        found.orientation,
        light.problem,
        radiating,
        excitons * photons * HC_EV_NM / light.wavelength_nm,
        np.stack(leaves, axis=1),
    )


def transmitted(case: Case, side: int, wavelength_nm: Floats) -> Floats:
    """Share (w,) that filter and polarizer outside one side let through."""
    outside = (case.sides.bottom, case.sides.top)[side]
    share = np.ones(wavelength_nm.shape)
    if outside.filter is not None:
        share *= np.interp(wavelength_nm, outside.filter.x, outside.filter.y)
    return share * outside.polarizer_transmittance


def exitance(case: Case, source: Source, side: int) -> Floats:
    """Spectral exitance (w,) of one emitter in W/(A nm), after filter and polarizer."""
    passed = transmitted(case, side, source.wavelength_nm)
    result: Floats = source.watts * source.leaves[:, side] * passed
    return result


def radiance(
    case: Case, source: Source, side: int, angle_deg: Floats, threads: int | None = None
) -> Floats:
    """Spectral radiance of one emitter in W/(sr A nm), after filter and polarizer.

    Parameters
    ----------
    angle_deg : float (n,)
        0 to 90 in the medium outside: surroundings, or the slab of a matched exit.
    threads : int, optional
        At most so many; as many as there are cores if not given. No number depends on it.

    Returns
    -------
    float (w, n, 2)
        Polarizations s, p.
    """
    emitted = radiance_over_bulk(case, source, side, angle_deg, threads)
    factor = source.watts * transmitted(case, side, source.wavelength_nm)
    result: Floats = emitted * factor[:, None, None]
    return result


def radiance_over_bulk(
    case: Case, source: Source, side: int, angle_deg: Floats, threads: int | None = None
) -> Floats:
    """Integral of zone * q / (1 - q + q F) * u / cos(angle) over the zone (w, n, 2), s and p.

    u: photons per solid angle relative to the bulk rate. Where the side's surroundings absorb
    nothing leaves.
    """
    rows = np.arange(source.wavelength_nm.size)
    # A wavelength with more angles than go together is a part of its own.
    parts = np.array_split(rows, min(rows.size, -(-rows.size * angle_deg.size // _TOGETHER)))

    def some(part: Rows) -> Floats:
        return _some_wavelengths(case, source, side, angle_deg, part)

    workers = min(threads or cores(), len(parts))
    if workers == 1:
        return np.concatenate([some(part) for part in parts])
    with ThreadPoolExecutor(workers) as pool:
        return np.concatenate(list(pool.map(some, parts)))


def _some_wavelengths(
    case: Case, source: Source, side: int, angle_deg: Floats, rows: Rows
) -> Floats:
    problem = rows_of(source.problem, rows)
    n = index_outside(case, problem, side)
    sine = np.sin(np.deg2rad(angle_deg))
    if source.rates is None:
        leaves = leaving(problem, np.ascontiguousarray(n[:, None] * sine), side)
    else:
        n, leaves = _moving(case, problem, rates_at_rows(source.rates, rows), side, n, sine)
    channels = leaves @ source.radiating
    vertical, horizontal = (source.orientation[rows, k, None] for k in range(2))
    p = vertical * channels[:, 0] + horizontal * channels[:, 1]
    s = horizontal * channels[:, 2]
    # dP/dOmega = (dP/du) n^2 cos / (2 pi u), and the cosine goes into the radiance.
    result: Floats = np.stack([s, p], axis=2) * (n * n / (2.0 * np.pi))[:, None, None]
    return result


def _moving(
    case: Case, problem: Problem, rates: Rates, side: int, n: Floats, sine: Floats
) -> tuple[Floats, Floats]:
    """Index outside (w,) and what leaves (w, 3, n, z), both with their rates, at fixed angles."""
    moves = (rates.n_outer if _is_matched(case, side) else rates.n_out)[:, :, side]
    u = np.ascontiguousarray(n[:, None] * sine)
    leaves = leaving(problem, u, side)
    changes = leaving_rates(problem, rates, u, moves[:, :, None] * sine, side)
    return cast("Floats", Dual(n, moves.T)), cast("Floats", Dual(leaves, changes))


def index_outside(case: Case, problem: Problem, side: int) -> Floats:
    """Index (w,) of the medium in which a side's angles are measured."""
    return (problem.sides.n_outer if _is_matched(case, side) else problem.sides.n_out)[:, side]


def _is_matched(case: Case, side: int) -> bool:
    slab = (case.stack.substrate, case.stack.cover)[side]
    return slab is not None and slab.exit == "matched"


def unbounded_at_grazing(case: Case, source: Source, side: int) -> bool:
    """Whether radiance grows without bound toward 90 deg.

    Only where no face anywhere turns grazing light back: films, emitter and both outer media
    have one and the same index, and this side's exit is no slab face.
    """
    slab = (case.stack.substrate, case.stack.cover)[side]
    if slab is not None and slab.exit != "matched":
        return False
    problem = source.problem
    own = problem.source.eps_o[:, None]
    return all(
        bool(np.all(eps == own))
        for half in (problem.up, problem.down)
        for eps in (half.eps_o, half.eps_e)
    )
