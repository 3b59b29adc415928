"""The chain from injected charge to photons in air, summed over emitters and units."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.device.zone import unbounded_faces
from optics.kernels import budget as engine
from optics.outcome.dual import plain
from optics.outcome.efficiency import DESTINATIONS, Averages, Emission, destinations

if TYPE_CHECKING:
    from optics.device.case import Case
    from optics.device.emitter import Emitter


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


def budget_numbers(case: Case, emissions: Mapping[str, Emission | Averages]) -> dict[str, Any]:
    """Fields of `Budget` that follow from what becomes of each emitter's excitons.

    Numbers of the case and of the emissions may carry rates (`outcome.dual.Dual`), or be arrays
    with one value for each of many devices; so do the results then, with NaN for None where only
    some are undefined.
    """
    emitters = tuple(
        _emitter_budget(case, emitter, emissions[emitter.name]) for emitter in case.emitters
    )
    return {
        "emitters": emitters,
        "chain": tuple(_chain(case, unit, emitters) for unit in case.units),
        **_device(case, emitters),
    }


def _emitter_budget(case: Case, emitter: Emitter, found: Emission | Averages) -> EmitterBudget:
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

    sums: dict[str, Any] = {
        name: sum(emitter.generated * emitter.destinations[name] for emitter in emitters)
        for name in DESTINATIONS
    }
    bottom, top = sums["air_bottom"], sums["air_top"]
    slabs = (case.stack.substrate, case.stack.cover)
    matched = [None if slab is None else _matched(emitters, i) for i, slab in enumerate(slabs)]
    lit = generated > 0.0
    divisor = _chosen(lit, generated, 1.0)
    shares = {name: _chosen(lit, value / divisor, None) for name, value in sums.items()}
    return {
        "destinations": MappingProxyType(shares),
        "outcoupling_efficiency": _chosen(lit, (bottom + top) / divisor, None),
        "external_quantum_efficiency": bottom + top,
        "external_quantum_efficiency_bottom": bottom,
        "external_quantum_efficiency_top": top,
        "external_quantum_efficiency_matched": _chosen(bottom >= top, *matched),
    }


def _matched(emitters: tuple[EmitterBudget, ...], side: int) -> Any:
    """What would leave on a side with a slab if that were matched, per charge."""
    parts: list[tuple[Any, Any]] = [(one.generated, one.matched[side]) for one in emitters]
    return sum(generated * share for generated, share in parts)


def _chosen(condition: Any, yes: Any, no: Any) -> Any:
    """One of two numbers, or of two arrays value by value; there NaN stands for None."""
    if np.ndim(condition) == 0:
        return yes if condition else no
    return np.where(condition, *(np.nan if value is None else value for value in (yes, no)))


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
