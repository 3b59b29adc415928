"""From directions of change of a case to those of the engine's arrays: the twin of `light`."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.device.direction import Direction, IndexStep, NumberStep, ZoneStep
from optics.device.material_rates import (
    EpsilonRates,
    MaterialNumber,
    index_rates,
    permittivity_rates,
)
from optics.device.stack import absorbs
from optics.device.zone import absorber_distances, zone_interval
from optics.device.zone_rates import ZoneRate, quadrature_rates
from optics.kernels.variation import HalfRates, Rates, Variation, no_variation
from optics.outcome.light import NM_PER_MM

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.device.materials import Material
    from optics.device.stack import Slab, Stack

    Floats = NDArray[np.float64]
    Complexes = NDArray[np.complex128]


class LightRates(NamedTuple):
    """Rates of change of what the light of one emitter is computed from."""

    variation: Variation
    zone_weight: Floats  # (p, z)


def light_rates(
    case: Case,
    emitter: Emitter,
    directions: Sequence[Direction],
    wavelength_nm: Floats,
    position_nm: Floats,
    zone_weight: Floats,
) -> LightRates:
    """Rates of the engine's arrays and of the zone's quadrature along each direction.

    Parameters
    ----------
    case : Case
    emitter : Emitter
    directions : sequence of Direction
    wavelength_nm : float (w,)
    position_nm, zone_weight : float (z,)
        From `light.quadrature`.
    """
    films = len(case.stack.films)
    variation = no_variation(len(directions), wavelength_nm.size, films, position_nm.size)
    weights = np.zeros((len(directions), position_nm.size))
    for place, direction in enumerate(directions):
        _add_media(case, emitter, direction, wavelength_nm, _along(variation, place))
        thickness = _thickness_rates(case.stack, direction)
        variation.thickness_nm[place] = thickness
        rate = _zone_rate(case, emitter, direction, thickness)
        variation.position_nm[place], weights[place] = quadrature_rates(
            emitter.zone,
            case.stack.films[emitter.film_index].thickness_nm,
            zone_interval(case.stack, emitter, case.every_wavelength_nm),
            position_nm,
            zone_weight,
            rate,
        )
        variation.position_nm[place] += direction.count(ZoneStep(emitter.name))
    return LightRates(variation, weights)


def rates_at_rows(rates: Rates, rows: NDArray[np.int64]) -> Rates:
    """Return the engine's rates at some wavelengths, neighbors of each other."""
    here = slice(rows[0], rows[-1] + 1)
    up, down = (HalfRates._make(part[here] for part in half) for half in (rates.up, rates.down))
    return Rates._make([*(part[here] for part in rates[:-2]), up, down])


def _along(variation: Variation, place: int) -> Variation:
    """Views of one direction."""
    return Variation._make(part[place] for part in variation)


def _thickness_rates(stack: Stack, direction: Direction) -> Floats:
    rates = np.zeros(len(stack.films))
    for step in direction:
        if isinstance(step, NumberStep) and step.keys[0] == "layers":
            rates[stack.film_index(step.keys[1])] += 1.0
    return rates


def _add_media(
    case: Case, emitter: Emitter, direction: Direction, wavelength_nm: Floats, into: Variation
) -> None:
    """Add rates of permittivities, of films and of what stands outside."""
    stack = case.stack
    for place, film in enumerate(stack.films):
        for found in _film_rates(case, direction, film.name, film.material, wavelength_nm):
            rates = found
            if place == emitter.film_index:
                rates = _without_loss(film.material, found, wavelength_nm)
            into.eps_o[:, place] += rates[0]
            into.eps_e[:, place] += rates[1]
    outside = ((stack.substrate, stack.bottom), (stack.cover, stack.top))
    for side, (slab, surroundings) in enumerate(outside):
        _add_outside(case, direction, side, slab, surroundings, wavelength_nm, into)


def _film_rates(
    case: Case, direction: Direction, name: str, material: Material, wavelength_nm: Floats
) -> list[EpsilonRates]:
    found = _material_rates(case, direction, material, wavelength_nm)
    for step in direction:
        if isinstance(step, IndexStep) and step.layer == name:
            found.append(index_rates(*material.permittivity(wavelength_nm), step.step))
    return found


def _material_rates(
    case: Case, direction: Direction, material: Material, wavelength_nm: Floats
) -> list[EpsilonRates]:
    """Rates of a material's permittivities for each step that changes them."""
    found: list[EpsilonRates | None] = []
    for step in direction:
        if isinstance(step, NumberStep) and step.keys[0] == "materials":
            number = MaterialNumber(step.keys[1], step.keys[2:])
            found.append(permittivity_rates(material, number, case.local_materials, wavelength_nm))
    return [rates for rates in found if rates is not None]


def _without_loss(
    material: Material, rates: tuple[Complexes, Complexes], wavelength_nm: Floats
) -> tuple[Complexes, Complexes]:
    """Rates of (Re n)^2, the permittivity of a film whose loss is dropped."""
    eps_o, eps_e = material.permittivity(wavelength_nm)
    return _real_index(eps_o, rates[0]), _real_index(eps_e, rates[1])


def _real_index(eps: Complexes, rate: Complexes) -> Complexes:
    index = np.sqrt(eps)
    return (2.0 * index.real * (rate / (2.0 * index)).real).astype(np.complex128)


def _add_outside(
    case: Case,
    direction: Direction,
    side: int,
    slab: Slab | None,
    surroundings: Material,
    wavelength_nm: Floats,
    into: Variation,
) -> None:
    """Add rates of a slab and of the surroundings behind it; as `light` makes their values."""
    beyond = surroundings.permittivity(wavelength_nm)[0]
    for rates, _ in _material_rates(case, direction, surroundings, wavelength_nm):
        into.n_out[:, side] += (rates / (2.0 * np.sqrt(beyond))).real
        if slab is None:
            lossy = absorbs(surroundings, case.every_wavelength_nm)
            into.outer[:, side] += rates if lossy else _real_index(beyond, rates)
    if slab is None:
        return
    eps = slab.material.permittivity(wavelength_nm)[0]
    per_k = 4.0 * np.pi * NM_PER_MM / wavelength_nm
    for rates, _ in _material_rates(case, direction, slab.material, wavelength_nm):
        into.outer[:, side] += _real_index(eps, rates)
        into.loss[:, side] += per_k * slab.thickness_mm * (rates / (2.0 * np.sqrt(eps))).imag
    path = f"{('substrate', 'cover')[side]}.thickness_mm"
    into.loss[:, side] += direction.count(NumberStep(path)) * per_k * np.sqrt(eps).imag


def _zone_rate(case: Case, emitter: Emitter, direction: Direction, thickness: Floats) -> ZoneRate:
    """Rates of what the zone's quadrature depends on."""
    own = dict.fromkeys(("at", "at_nm", "width_nm", "decay_nm", "closest_approach_nm"), 0.0)
    for step in direction:
        if isinstance(step, NumberStep) and step.keys[:2] == ("emitters", emitter.name):
            key = step.keys[-1]
            if key in own and step.keys[2] in ("zone", "closest_approach_nm"):
                own[key] += 1.0
    closer = own.pop("closest_approach_nm")
    film, every = emitter.film_index, case.every_wavelength_nm
    below, above = absorber_distances(case.stack, film, every)
    orders = (range(film - 1, -1, -1), range(film + 1, len(thickness)))
    moving = [_distance_rate(case, order, thickness) for order in orders]
    reach = emitter.closest_approach_nm
    return ZoneRate(
        thickness_nm=float(thickness[film]),
        low_nm=closer - moving[0] if reach > below else 0.0,
        high_nm=float(thickness[film]) - (closer - moving[1] if reach > above else 0.0),
        **own,
    )


def _distance_rate(case: Case, order: range, thickness: Floats) -> float:
    """Rate of the distance to the first absorber through the films in the order given."""
    stack = case.stack
    absorbing, _ = stack.absorbing(case.every_wavelength_nm)
    total = 0.0
    for index in order:
        if absorbing[index] and stack.films[index].thickness_nm > 0:
            break
        total += float(thickness[index])
    return total


__all__ = ["LightRates", "light_rates", "rates_at_rows"]
