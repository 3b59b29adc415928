"""The light budget of a device: the chain from injected charge to photons in air."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from typing import TYPE_CHECKING, Any, NamedTuple

from optics._version import VERSION
from optics.outcome import cautions
from optics.outcome.chain import EmitterBudget, budget_numbers
from optics.outcome.efficiency import (
    Emission,
    emission,
    energy_balance,
)
from optics.outcome.labelled import Spectral, budget_frame, budget_tree
from optics.outcome.light import Light, emitter_lights

if TYPE_CHECKING:
    import pandas
    import xarray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.device.materials import TableUse

SCHEMA = "outcouple.budget/1"
DEFAULT_TOLERANCE = 1e-6


class Lit(NamedTuple):
    """One emitter's light and its averages."""

    emitter: Emitter
    light: Light
    emission: Emission


@dataclass(frozen=True, slots=True)
class Accuracy:
    """How far the numbers can be trusted, as fractions of the dissipated power.

    Attributes
    ----------
    energy_balance : float
        What is missing when all destinations are added, at the worst wavelength, position and
        orientation.
    integration_error : float
        The engine's estimate for the worst destination.
    """

    energy_balance: float
    integration_error: float

    def to_dict(self) -> dict[str, float]:
        """Entry of the JSON result."""
        return {
            "energy_balance": self.energy_balance,
            "integration_error": self.integration_error,
        }


@dataclass(frozen=True, slots=True)
class Budget:
    """Where the generated light goes, and the EQE that follows.

    Attributes
    ----------
    title, case_sha256 : str
    emitters : tuple of EmitterBudget
    destinations : mapping of str to float or None
        Of the device: emitters weighted by the photons they generate. None without any.
    chain : tuple of mappings
        For each unit, the parts into which its injected charge splits; they sum to 1.
    external_quantum_efficiency, ..._bottom, ..._top : float
    external_quantum_efficiency_matched : float or None
        Of the brighter side, were its slab's exit index-matched; None where it has no slab.
    accuracy : Accuracy
    warnings : tuple of str
    tables : tuple of TableUse
        Tables of optical constants and spectra behind the numbers.
    spectral : mapping of str to xarray.Dataset
        By emitter: F and every destination against wavelength, position and orientation.
    lit : tuple of Lit
        The same as plain arrays, for what is computed further.
    """

    title: str
    case_sha256: str
    emitters: tuple[EmitterBudget, ...]
    outcoupling_efficiency: float | None
    destinations: Mapping[str, float | None]
    chain: tuple[Mapping[str, Any], ...]
    external_quantum_efficiency: float
    external_quantum_efficiency_bottom: float
    external_quantum_efficiency_top: float
    external_quantum_efficiency_matched: float | None
    accuracy: Accuracy
    warnings: tuple[str, ...]
    tables: tuple[TableUse, ...]
    spectral: Mapping[str, xarray.Dataset]
    lit: tuple[Lit, ...]

    def to_dict(self) -> dict[str, Any]:
        """Build the JSON result, ``outcouple.budget/1``: plain types only."""
        return {
            "schema": SCHEMA,
            "version": VERSION,
            "title": self.title,
            "case_sha256": self.case_sha256,
            "emitters": [emitter.to_dict() for emitter in self.emitters],
            "outcoupling_efficiency": self.outcoupling_efficiency,
            "destinations": dict(self.destinations),
            "chain": [dict(unit) for unit in self.chain],
            "external_quantum_efficiency": self.external_quantum_efficiency,
            "external_quantum_efficiency_bottom": self.external_quantum_efficiency_bottom,
            "external_quantum_efficiency_top": self.external_quantum_efficiency_top,
            "external_quantum_efficiency_matched": self.external_quantum_efficiency_matched,
            "accuracy": self.accuracy.to_dict(),
            "warnings": list(self.warnings),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Build a long table: columns scope, name, quantity, value, unit."""
        return budget_frame(self.to_dict())

    def to_tree(self) -> xarray.DataTree:
        """Build labelled arrays: a root with the totals, a node with the spectra per emitter."""
        return budget_tree(self.to_dict(), self.spectral)


def budget(case: Case, tolerance: float = DEFAULT_TOLERANCE) -> Budget:
    """Compute the light budget of a case.

    Parameters
    ----------
    case : Case
        From `optics.read_case`.
    tolerance : float
        Wanted accuracy of every destination at every wavelength, as a fraction of the
        dissipated power.

    Returns
    -------
    Budget
        A result that misses the tolerance carries a warning.

    Raises
    ------
    ValueError
        If the tolerance is not between 1e-12 and 0.1.

    Examples
    --------
    >>> import optics
    >>> result = optics.budget(optics.read_case("cases/green-bottom-pixel.toml"))
    >>> result.external_quantum_efficiency  # doctest: +SKIP
    """
    lit = shine(case, tolerance)
    emissions = {one.emitter.name: one.emission for one in lit}
    numbers = budget_numbers(case, emissions)
    accuracy = accuracy_of(lit)
    return Budget(
        title=case.title,
        case_sha256=case.sha256,
        accuracy=accuracy,
        warnings=tuple(_warnings(case, numbers["emitters"], emissions, accuracy, tolerance)),
        tables=case.tables,
        spectral=Spectral({one.emitter.name: one for one in lit}),
        lit=lit,
        **numbers,
    )


def shine(case: Case, tolerance: float, threads: int | None = None) -> tuple[Lit, ...]:
    """Compute the light of every emitter of a case and its averages.

    Parameters
    ----------
    case : Case
    tolerance : float
        As of `budget`.
    threads : int, optional
        At most so many; as many as there are cores if not given. No number depends on it.

    Raises
    ------
    ValueError
        If the tolerance is not between 1e-12 and 0.1.
    """
    return shine_together([case], tolerance, threads)[0]


def shine_together(
    cases: Sequence[Case], tolerance: float, threads: int | None = None
) -> list[tuple[Lit, ...]]:
    """As `shine` of every case, to the last bit; like devices cost less so."""
    check_tolerance(tolerance)
    wanted = [(case, emitter) for case in cases for emitter in case.emitters]
    lights = iter(emitter_lights(wanted, tolerance, threads))
    return [
        tuple(
            Lit(emitter, light, emission(emitter, light))
            for emitter, light in zip(case.emitters, lights, strict=False)
        )
        for case in cases
    ]


def check_tolerance(tolerance: float) -> None:
    """Refuse a tolerance outside 1e-12 to 0.1 with a ValueError."""
    if not 1e-12 <= tolerance <= 0.1:
        raise ValueError(f"tolerance: found {tolerance!r}; expected a number from 1e-12 to 0.1")


def accuracy_of(lit: Sequence[Lit]) -> Accuracy:
    """Accuracy of the worst emitter."""
    return Accuracy(
        max(energy_balance(one.light) for one in lit),
        max(float(one.light.engine.error.max()) for one in lit),
    )


def _warnings(
    case: Case,
    emitters: tuple[EmitterBudget, ...],
    emissions: Mapping[str, Emission],
    accuracy: Accuracy,
    tolerance: float,
) -> list[str]:
    """Everything the user should know, what the case's door noticed first."""
    found = list(case.warnings)
    found.extend(cautions.film_phase(case))
    for emitter, result in zip(case.emitters, emitters, strict=True):
        weight = emissions[emitter.name].spectrum_weight
        checks = (
            partial(cautions.own_absorption, case, emitter, weight),
            partial(cautions.near_field, case, emitter, result.near_field_share),
        )
        for check in checks:
            found.extend(check())
    if not any(result.generated > 0.0 for result in emitters):
        found.append("no light is generated: device destinations are undefined")
    found.extend(cautions.accuracy(tolerance, accuracy.energy_balance, accuracy.integration_error))
    return found


__all__ = ["DEFAULT_TOLERANCE", "SCHEMA", "Accuracy", "Budget", "EmitterBudget", "budget"]
