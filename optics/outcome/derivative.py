"""Light of a device with its exact rates of change along any directions.

The formulas are those of `efficiency` and `budget`, fed with numbers that carry rates; the
engine's own rates are computed with its values and not by differences.
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING, NamedTuple, cast

import numpy as np

from optics.kernels.budget import Budget as EngineBudget
from optics.kernels.problem import rows_of
from optics.kernels.variation import Rates, Variation, make_rates
from optics.kernels.varied_budget import Derivatives, light_budget_with_derivatives
from optics.outcome.budget import Accuracy, Lit, check_tolerance
from optics.outcome.directional import Source, sources
from optics.outcome.dual import Dual
from optics.outcome.efficiency import emission, energy_balance
from optics.outcome.light import Light, chunks_of, problem_of, quadrature, run_engine
from optics.outcome.light_rates import light_rates, rates_at_rows
from optics.outcome.varied_case import varied_case

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.direction import Direction
    from optics.device.emitter import Emitter
    from optics.kernels.problem import Problem

    Floats = NDArray[np.float64]


class VariedLight(NamedTuple):
    """Light of one emitter along p directions."""

    lit: Lit  # its numbers are `Dual`s where they move
    at_rest: Light
    rates: Rates  # of the engine's arrays
    error: float  # of the engine's rates, as a fraction of their natural scale


class VariedDevice(NamedTuple):
    """A device whose numbers are `Dual`s where they move."""

    case: Case
    lights: tuple[VariedLight, ...]

    @property
    def lit(self) -> tuple[Lit, ...]:
        """Light of every emitter, as of `budget.shine`."""
        return tuple(light.lit for light in self.lights)

    @property
    def sources(self) -> tuple[Source, ...]:
        """Light of every emitter, ready to be sent into directions."""
        return tuple(
            source._replace(rates=light.rates)
            for source, light in zip(sources(self.case, self.lit), self.lights, strict=True)
        )

    @property
    def accuracy(self) -> Accuracy:
        """Accuracy of the values."""
        return Accuracy(
            max(energy_balance(light.at_rest) for light in self.lights),
            max(float(light.at_rest.engine.error.max()) for light in self.lights),
        )

    @property
    def error(self) -> float:
        """Error of the engine's rates, as a fraction of their natural scale."""
        return max(light.error for light in self.lights)


def shine_with_rates(
    case: Case, directions: Sequence[Direction], tolerance: float, threads: int | None = None
) -> VariedDevice:
    """Compute the light of every emitter of a case and its rates of change.

    Parameters
    ----------
    case : Case
    directions : sequence of Direction
    tolerance : float
        As of `budget`, for the values and for the rates on their natural scale.
    threads : int, optional
        At most so many; as many as there are cores if not given. No number depends on it.

    Raises
    ------
    ValueError
        If the tolerance is not between 1e-12 and 0.1.
    """
    check_tolerance(tolerance)
    moving = varied_case(case, directions)
    return VariedDevice(
        moving,
        tuple(
            _light(case, still, emitter, directions, tolerance, threads)
            for still, emitter in zip(case.emitters, moving.emitters, strict=True)
        ),
    )


def _light(
    case: Case,
    still: Emitter,
    emitter: Emitter,
    directions: Sequence[Direction],
    tolerance: float,
    threads: int | None,
) -> VariedLight:
    """Light of one emitter, given as it is and with numbers that carry rates."""
    wavelength_nm = still.spectrum.grid_nm(case.wavelength_nm)
    position_nm, weight = quadrature(case, still, wavelength_nm)
    problem = problem_of(case, still, wavelength_nm, position_nm)
    variation, weight_rates = light_rates(
        case, still, directions, wavelength_nm, position_nm, weight
    )
    active = np.flatnonzero(_acts(variation))
    engine, found, error = _engine(
        problem, make_rates(problem, wavelength_nm, _chosen(variation, active)), tolerance, threads
    )
    at_rest = Light(wavelength_nm, position_nm, weight, problem.source.bulk, engine, problem)
    rates = make_rates(problem, wavelength_nm, variation)
    p = len(directions)
    moving = engine._replace(
        shares=_dual(engine.shares, found[0], active, p),
        dissipation=_dual(engine.dissipation, found[1], active, p),
    )
    bulk = Dual(problem.source.bulk, np.moveaxis(rates.bulk, 1, 0) * problem.source.bulk)
    light = at_rest._replace(
        zone_weight=_as_array(Dual(weight, weight_rates)), bulk=_as_array(bulk), engine=moving
    )
    return VariedLight(Lit(emitter, light, emission(emitter, light)), at_rest, rates, error)


def _as_array(number: Dual) -> Floats:
    """Pass a `Dual` where formulas are written for arrays."""
    return cast("Floats", number)


def _dual(value: Floats, rates: Floats, active: NDArray[np.int64], directions: int) -> Floats:
    every = np.zeros((directions, *value.shape))
    every[active] = rates
    return _as_array(Dual(value, every))


def _acts(variation: Variation) -> NDArray[np.bool_]:
    """Which directions (p,) change anything the engine sees."""
    flags = [np.any(part != 0, axis=tuple(range(1, part.ndim))) for part in variation]
    return np.asarray(np.any(flags, axis=0))


def _chosen(variation: Variation, active: NDArray[np.int64]) -> Variation:
    return Variation._make(part[active] for part in variation)


def _engine(
    problem: Problem, rates: Rates, tolerance: float, threads: int | None
) -> tuple[EngineBudget, tuple[Floats, Floats], float]:
    """Run the engine over all wavelengths: the budget, rates of shares and dissipation, error."""
    if rates.kd.shape[1] == 0:
        engine = run_engine(problem, tolerance, threads)
        empty = np.zeros((0, *engine.shares.shape)), np.zeros((0, *engine.dissipation.shape))
        return engine, empty, 0.0
    chunks, workers = chunks_of(problem, threads)

    def some(rows: NDArray[np.int64]) -> tuple[EngineBudget, Derivatives]:
        part = rates_at_rows(rates, rows)
        return light_budget_with_derivatives(rows_of(problem, rows), part, tolerance)

    if workers == 1:
        found = [some(rows) for rows in chunks]
    else:
        with ThreadPoolExecutor(workers) as pool:
            found = list(pool.map(some, chunks))
    values = (np.concatenate(parts) for parts in zip(*(one for one, _ in found), strict=True))
    shares = np.concatenate([rates.shares for _, rates in found], axis=1)
    dissipation = np.concatenate([rates.dissipation for _, rates in found], axis=1)
    error = max(float(np.max(rates.error, initial=0.0)) for _, rates in found)
    return EngineBudget(*values), (shares, dissipation), error


__all__ = ["VariedDevice", "VariedLight", "shine_with_rates"]
