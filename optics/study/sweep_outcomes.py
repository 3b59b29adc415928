"""Outcomes of many points at once, from spectral averages at the emitters' positions.

The formulas are those of `outcome.efficiency` and `outcome.budget`, with one value for each point
where those have one number; tests hold them together.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.device.zone import unbounded_faces
from optics.kernels import budget as engine
from optics.outcome.efficiency import DESTINATIONS

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.study.outcomes import Outcome

    Floats = NDArray[np.float64]

_OUT = ("air_bottom", "air_top")


class Source(NamedTuple):
    """One emitter in one source case."""

    emitter: Emitter
    zone_weight: Floats  # (z,) sum 1
    positions: slice  # of its zone among all
    mixture: int  # which of the averages over orientation is its


class Averages(NamedTuple):
    """One emitter's light at every point; see `outcome.efficiency.Emission`."""

    emitter: Emitter
    purcell_factor: Floats  # (p,)
    decay_rate_ratio: Floats
    radiative_efficiency: Floats
    shares: Floats  # (engine.OUTCOMES, p)

    @property
    def near_field_share(self) -> Floats:
        """Share of the dissipated power lost to near fields."""
        near: Floats = self.shares[engine.NEAR_FIELD]
        return near

    def destination(self, name: str) -> Floats:
        """Share of the dissipated photons that goes to one destination."""
        share: Floats = self.shares[DESTINATIONS[name]]
        return share


def emitter_averages(source: Source, sums: Floats) -> Averages:
    """Average over an emitter's zone.

    Parameters
    ----------
    source : Source
    sums : float (m, engine.OUTCOMES + 1, z, p)
        Averages over spectrum and orientation: outcomes, then F.
    """
    mine = sums[source.mixture, :, source.positions]
    shares, dissipated = mine[: engine.OUTCOMES], mine[engine.OUTCOMES]
    q, weight = source.emitter.quantum_yield, source.zone_weight
    decay = 1.0 - q + q * dissipated
    radiating = np.einsum("z,zp->p", weight, dissipated / decay)
    return Averages(
        source.emitter,
        purcell_factor=weight @ dissipated,
        decay_rate_ratio=weight @ decay,
        radiative_efficiency=q * radiating,
        shares=np.einsum("z,kzp->kp", weight, shares / decay) / radiating,
    )


def outcome_values(
    case: Case,
    averages: Sequence[Averages],
    outcomes: Sequence[Outcome],
    error: Floats,
    balance: Floats,
) -> list[Floats]:
    """Values (p,) of every outcome; NaN where undefined.

    Parameters
    ----------
    case : Case
        Of any of the points: what it says beside film thicknesses holds for all.
    averages : sequence of Averages
        One for each emitter of the case.
    outcomes : sequence of Outcome
        Of the light budget.
    error, balance : float (p,)
        Accuracy of each point.
    """
    device = _Device(case, averages, {"integration_error": error, "energy_balance": balance})
    return [device.value(outcome.keys) for outcome in outcomes]


class _Device:
    """Sums over emitters and units, as of `outcome.budget`."""

    def __init__(
        self, case: Case, averages: Sequence[Averages], accuracy: dict[str, Floats]
    ) -> None:
        self._case = case
        self._averages = {one.emitter.name: one for one in averages}
        self._accuracy = accuracy
        self._generated = {
            one.emitter.name: self._bright(one) * one.radiative_efficiency for one in averages
        }

    def _bright(self, one: Averages) -> float:
        """Excitons that may radiate per charge injected into the unit."""
        emitter = one.emitter
        balance = self._case.drive.charge_balance[emitter.unit]
        return balance * emitter.share * emitter.exciton_fraction

    def value(self, keys: tuple[str, ...]) -> Floats:
        first, *rest = keys
        if first == "emitters":
            return self._of_emitter(self._averages[rest[0]], rest[1:])
        if first == "chain":
            return self._of_unit(rest[0], rest[1])
        if first == "accuracy":
            return self._accuracy[rest[0]]
        if first == "destinations":
            return self._per_photon(self._per_charge(rest[0]))
        bottom, top = (self._per_charge(name) for name in _OUT)
        if first == "outcoupling_efficiency":
            return self._per_photon(bottom + top)
        if first == "external_quantum_efficiency_matched":
            return self._matched(bottom, top)
        return {
            "external_quantum_efficiency": bottom + top,
            "external_quantum_efficiency_bottom": bottom,
            "external_quantum_efficiency_top": top,
        }[first]

    def _per_charge(self, name: str) -> Floats:
        every = self._averages.items()
        parts = [self._generated[key] * one.destination(name) for key, one in every]
        total: Floats = np.sum(parts, axis=0)
        return total

    def _per_photon(self, per_charge: Floats) -> Floats:
        generated = np.sum(list(self._generated.values()), axis=0)
        lit = generated > 0.0
        return np.where(lit, per_charge / np.where(lit, generated, 1.0), np.nan)

    def _matched(self, bottom: Floats, top: Floats) -> Floats:
        """Of the brighter side, the bottom on a tie; undefined without a slab there."""
        stack = self._case.stack
        sides = []
        for slab, place in (
            (stack.substrate, engine.MATCHED_BOTTOM), (stack.cover, engine.MATCHED_TOP),
        ):  # fmt: skip
            every = self._averages.items()
            found = np.sum([self._generated[key] * one.shares[place] for key, one in every], axis=0)
            sides.append(np.full_like(bottom, np.nan) if slab is None else found)
        return np.where(bottom >= top, sides[0], sides[1])

    def _of_emitter(self, one: Averages, keys: Sequence[str]) -> Floats:
        if keys[0] == "destinations":
            return one.destination(keys[1])
        emitter, case = one.emitter, self._case
        unbounded = bool(unbounded_faces(case.stack, emitter, case.every_wavelength_nm))
        everywhere = np.ones_like(one.purcell_factor)
        out = one.destination("air_bottom") + one.destination("air_top")
        no_decay = unbounded and emitter.quantum_yield > 0.0
        return {
            "purcell_factor": np.nan * everywhere if unbounded else one.purcell_factor,
            "decay_rate_ratio": np.nan * everywhere if no_decay else one.decay_rate_ratio,
            "radiative_efficiency": one.radiative_efficiency,
            "outcoupling_efficiency": out,
            "external_quantum_efficiency": self._generated[emitter.name] * out,
            "near_field_share": one.near_field_share,
            "horizontal_fraction": emitter.horizontal_fraction * everywhere,
            "vertical_fraction": emitter.vertical_fraction * everywhere,
            "order_parameter": emitter.order_parameter * everywhere,
            "lost_share": emitter.spectrum.lost_share(case.wavelength_nm) * everywhere,
        }[keys[0]]

    def _of_unit(self, unit: str, key: str) -> Floats:
        mine = [one for one in self._averages.values() if one.emitter.unit == unit]
        balance = self._case.drive.charge_balance[unit]
        everywhere = np.ones_like(mine[0].purcell_factor)
        if key == "unbalanced":
            return (1.0 - balance) * everywhere
        parts = []
        for one in mine:
            emitter = one.emitter
            if key == "dark_excitons":
                dark = balance * emitter.share * (1.0 - emitter.exciton_fraction)
                parts.append(dark * everywhere)
            elif key == "nonradiative":
                parts.append(self._bright(one) * (1.0 - one.radiative_efficiency))
            else:
                parts.append(self._generated[emitter.name] * one.destination(key))
        total: Floats = np.sum(parts, axis=0)
        return total
