"""Where all generated photons end, film by film, over the whole range of wavevectors."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.kernels.modal_absorption import FILMS, LEAVES, SLAB, SURROUNDINGS, TRAPPED

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.kernels.modal_nodes import Account

#: Where power ends outside the films, with its column among the engine's.
PLACES = {
    "air_bottom": LEAVES,
    "air_top": LEAVES + 1,
    "substrate": TRAPPED,
    "cover": TRAPPED + 1,
    "substrate_absorbed": SLAB,
    "cover_absorbed": SLAB + 1,
    "surroundings_bottom": SURROUNDINGS,
    "surroundings_top": SURROUNDINGS + 1,
}


@dataclass(frozen=True, slots=True)
class FilmAbsorption:
    """Shares of the dissipated photons by the place where they end.

    Attributes
    ----------
    films : mapping of str to float
        Absorbed in each film, from the bottom: light on its way out, guided light, plasmons and
        near field together.
    elsewhere : mapping of str to float
        ``air_bottom``, ``air_top``: leaves the device. ``substrate``, ``cover``: arrives in a
        slab beyond every exit light line. ``substrate_absorbed``, ``cover_absorbed``: absorbed
        in a slab below one. ``surroundings_bottom``, ``surroundings_top``: enters absorbing
        surroundings. ``guided``: in modes that no film absorbs.
    closure_error : float
        Sum of all shares less 1. The shares come from fields and fluxes at real wavevectors, what
        they are shares of from a path in the complex plane: nothing makes them sum to 1 but the
        physics.
    integration_error : float
        Estimate for the worst share.
    """

    films: Mapping[str, float]
    elsewhere: Mapping[str, float]
    closure_error: float
    integration_error: float

    def by_place(self) -> dict[str, float]:
        """Shares of films (``films.NAME``) and of all other places, which sum to 1."""
        films = {f"films.{name}": share for name, share in self.films.items()}
        return {**films, **self.elsewhere}

    def to_dict(self) -> dict[str, Any]:
        """Entry of the JSON result."""
        return {
            "films": dict(self.films),
            "elsewhere": dict(self.elsewhere),
            "closure_error": self.closure_error,
            "integration_error": self.integration_error,
        }


def film_absorption(
    case: Case,
    accounts: Sequence[Account],
    weight: NDArray[np.float64],
    dissipated: NDArray[np.float64],
) -> FilmAbsorption:
    """Average the accounts of all wavelengths over the spectrum.

    Parameters
    ----------
    case : Case
    accounts : sequence of Account
        One per wavelength.
    weight : float (w,)
        Spectral weights.
    dissipated : float (w,)
        Dissipated power at each wavelength, from the light budget, in the accounts' units.
    """
    total = float(weight @ dissipated)
    by_place = weight @ np.stack([one.by_place for one in accounts]) / total
    guided = float(weight @ np.array([one.stays_guided for one in accounts])) / total
    elsewhere = {name: float(by_place[column]) for name, column in PLACES.items()}
    elsewhere["guided"] = guided
    films = zip(case.stack.films, by_place[FILMS:].tolist(), strict=True)
    miss = float(weight @ np.array([one.miss for one in accounts])) / total
    return FilmAbsorption(
        MappingProxyType({film.name: share for film, share in films}),
        MappingProxyType(elsewhere),
        float(by_place[LEAVES:].sum() + guided - 1.0),
        miss,
    )


def of_device(parts: Sequence[FilmAbsorption], generated: Sequence[float]) -> FilmAbsorption | None:
    """Average emitters by the photons that they generate; None if there are none."""
    total = sum(generated)
    if not total > 0.0:
        return None
    shares = [one / total for one in generated]

    def mean(values: Sequence[Mapping[str, float]]) -> Mapping[str, float]:
        pairs = list(zip(shares, values, strict=True))
        return MappingProxyType({key: sum(w * one[key] for w, one in pairs) for key in values[0]})

    return FilmAbsorption(
        mean([part.films for part in parts]),
        mean([part.elsewhere for part in parts]),
        sum(w * part.closure_error for w, part in zip(shares, parts, strict=True)),
        sum(w * part.integration_error for w, part in zip(shares, parts, strict=True)),
    )
