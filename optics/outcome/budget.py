"""The light budget of a device: the chain from injected charge to photons in air."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, NamedTuple

from optics._version import VERSION
from optics.device.zone import unbounded_faces
from optics.kernels import budget as engine
from optics.outcome import cautions
from optics.outcome.dual import plain
from optics.outcome.efficiency import (
    DESTINATIONS,
    Emission,
    destinations,
    emission,
    energy_balance,
)
from optics.outcome.labelled import Spectral, budget_frame, budget_tree
from optics.outcome.light import Light, emitter_light

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
class EmitterBudget:
    """What becomes of the excitons of one emitter.

    Attributes
    ----------
    name, unit : str
    purcell_factor, decay_rate_ratio : float or None
        Zone averages of F and of 1 - q + q F; None where the zone touches an absorber.
    radiative_efficiency, outcoupling_efficiency, external_quantum_efficiency : float
    horizontal_fraction, vertical_fraction, order_parameter : float
    near_field_share, lost_share : float
    destinations : mapping of str to float
        Shares of the dissipated photons; they sum to 1.
    matched : (float or None, float or None)
        Share that would leave at the bottom, top if that slab's exit were matched.
    generated : float
        Photons per injected charge of its unit before outcoupling: charge balance x share x
        exciton fraction x radiative efficiency.
    """

    name: str
    unit: str
    purcell_factor: float | None
    decay_rate_ratio: float | None
    radiative_efficiency: float
    outcoupling_efficiency: float
    horizontal_fraction: float
    vertical_fraction: float
    order_parameter: float
    near_field_share: float
    lost_share: float
    destinations: Mapping[str, float]
    external_quantum_efficiency: float
    matched: tuple[float | None, float | None]
    generated: float

    def to_dict(self) -> dict[str, Any]:
        """Entry of ``emitters`` in the JSON result."""
        keys = (
            "name",
            "unit",
            "purcell_factor",
            "decay_rate_ratio",
            "radiative_efficiency",
            "outcoupling_efficiency",
            "horizontal_fraction",
            "vertical_fraction",
            "order_parameter",
            "near_field_share",
            "lost_share",
        )
        entry = {key: getattr(self, key) for key in keys}
        entry["destinations"] = dict(self.destinations)
        entry["external_quantum_efficiency"] = self.external_quantum_efficiency
        return entry


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
    check_tolerance(tolerance)
    lights = [emitter_light(case, emitter, tolerance, threads) for emitter in case.emitters]
    return tuple(
        Lit(emitter, light, emission(emitter, light))
        for emitter, light in zip(case.emitters, lights, strict=True)
    )


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


def budget_numbers(case: Case, emissions: Mapping[str, Emission]) -> dict[str, Any]:
    """Fields of `Budget` that follow from what becomes of each emitter's excitons.

    Numbers of the case and of the emissions may carry rates (`outcome.dual.Dual`); so do the
    results then.
    """
    emitters = tuple(
        _emitter_budget(case, emitter, emissions[emitter.name]) for emitter in case.emitters
    )
    return {
        "emitters": emitters,
        "chain": tuple(_chain(case, unit, emitters) for unit in case.units),
        **_device(case, emitters),
    }


def _emitter_budget(case: Case, emitter: Emitter, found: Emission) -> EmitterBudget:
    unbounded = bool(unbounded_faces(case.stack, emitter, case.every_wavelength_nm))
    shares = destinations(found.shares)
    outcoupling = shares["air_bottom"] + shares["air_top"]
    generated = (
        case.drive.charge_balance[emitter.unit]
        * emitter.share
        * emitter.exciton_fraction
        * found.radiative_efficiency
    )
    slabs = (case.stack.substrate, case.stack.cover)
    matched = (found.shares[engine.MATCHED_BOTTOM], found.shares[engine.MATCHED_TOP])
    return EmitterBudget(
        name=emitter.name,
        unit=emitter.unit,
        purcell_factor=None if unbounded else found.purcell_factor,
        decay_rate_ratio=(
            None if unbounded and emitter.quantum_yield > 0.0 else found.decay_rate_ratio
        ),
        radiative_efficiency=found.radiative_efficiency,
        outcoupling_efficiency=outcoupling,
        horizontal_fraction=emitter.horizontal_fraction,
        vertical_fraction=emitter.vertical_fraction,
        order_parameter=emitter.order_parameter,
        near_field_share=plain(found.shares[engine.NEAR_FIELD]),
        lost_share=emitter.spectrum.lost_share(case.wavelength_nm),
        destinations=MappingProxyType(shares),
        external_quantum_efficiency=generated * outcoupling,
        matched=(
            None if slabs[0] is None else plain(matched[0]),
            None if slabs[1] is None else plain(matched[1]),
        ),
        generated=generated,
    )


def _device(case: Case, emitters: tuple[EmitterBudget, ...]) -> dict[str, Any]:
    """Sum over emitters and units; in a tandem the full current passes every unit."""
    generated = sum(emitter.generated for emitter in emitters)

    def per_charge(share: float | None, emitter: EmitterBudget) -> float:
        return emitter.generated * (share or 0.0)

    sums = {
        name: sum(per_charge(emitter.destinations[name], emitter) for emitter in emitters)
        for name in DESTINATIONS
    }
    bottom, top = sums["air_bottom"], sums["air_top"]
    brighter = 0 if bottom >= top else 1
    has_slab = (case.stack.substrate, case.stack.cover)[brighter] is not None
    matched = sum(per_charge(emitter.matched[brighter], emitter) for emitter in emitters)
    shares = {name: value / generated if generated > 0.0 else None for name, value in sums.items()}
    return {
        "destinations": MappingProxyType(shares),
        "outcoupling_efficiency": (bottom + top) / generated if generated > 0.0 else None,
        "external_quantum_efficiency": bottom + top,
        "external_quantum_efficiency_bottom": bottom,
        "external_quantum_efficiency_top": top,
        "external_quantum_efficiency_matched": matched if has_slab else None,
    }


def _chain(case: Case, unit: str, emitters: tuple[EmitterBudget, ...]) -> Mapping[str, Any]:
    """Parts into which the charge injected into one unit splits."""
    balance = case.drive.charge_balance[unit]
    pairs = [
        (emitter, found)
        for emitter, found in zip(case.emitters, emitters, strict=True)
        if emitter.unit == unit
    ]
    bright = [balance * emitter.share * emitter.exciton_fraction for emitter, _ in pairs]
    parts: dict[str, Any] = {
        "unit": unit,
        "unbalanced": 1.0 - balance,
        "dark_excitons": sum(
            balance * emitter.share * (1.0 - emitter.exciton_fraction) for emitter, _ in pairs
        ),
        "nonradiative": sum(
            part * (1.0 - found.radiative_efficiency)
            for part, (_, found) in zip(bright, pairs, strict=True)
        ),
    }
    for name in DESTINATIONS:
        parts[name] = sum(found.generated * found.destinations[name] for _, found in pairs)
    return MappingProxyType(parts)


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
