"""What a user should know about a result although nothing is wrong with the input."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from optics.device.stack import absorbs

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter

_LARGE_NEAR_FIELD = 0.01
_LARGE_ABSORPTANCE = 0.01
_LARGEST_TURN = np.pi / 4  # of a film's round-trip phase between neighboring wavelengths


def film_phase(case: Case) -> Iterator[str]:
    """Films whose interference the wavelength grid does not follow."""
    grid = case.wavelength_nm
    if grid.size < 2:
        return
    for film in case.stack.films:
        eps = film.material.permittivity(grid)
        index = np.maximum(np.sqrt(eps[0]).real, np.sqrt(eps[1]).real)
        turn = np.abs(np.diff(4.0 * np.pi * index * film.thickness_nm / grid))
        if turn.max() <= _LARGEST_TURN:
            continue
        i = int(turn.argmax())
        needed_nm = (grid[i + 1] - grid[i]) * _LARGEST_TURN / turn[i]
        yield (
            f"film {film.name}: its round-trip phase turns by {turn[i] / np.pi:.2f} pi between "
            f"{grid[i]:g} and {grid[i + 1]:g} nm; a step of {needed_nm:.2g} nm or less follows it"
        )


def own_absorption(case: Case, emitter: Emitter, weight: NDArray[np.float64]) -> Iterator[str]:
    """Absorption of the emitter's own film, which the calculation leaves out.

    weight : float (w,)
        Spectral weights on the emitter's grid, sum 1.
    """
    film = case.stack.films[emitter.film_index]
    grid = emitter.spectrum.grid_nm(case.wavelength_nm)
    if not absorbs(film.material, grid):
        return
    k = np.sqrt(film.material.permittivity(grid)[0]).imag
    lost = float(weight @ -np.expm1(-4.0 * np.pi * k * film.thickness_nm / grid))
    text = (
        f"emitter {emitter.name}: its own film {film.name} is taken as transparent, which leaves "
        f"out an absorptance of {lost:.2%} (one pass along the normal, spectral average)"
    )
    yield text + ("; the result is an upper bound" if lost > _LARGE_ABSORPTANCE else "")


def near_field(case: Case, emitter: Emitter, share: float) -> Iterator[str]:
    """A large part of the power lost to the near field of a metal or other absorber."""
    if share <= _LARGE_NEAR_FIELD:
        return
    yield (
        f"emitter {emitter.name}: {share:.1%} of its power goes into near fields of "
        f"{nearest_absorber(case, emitter)}, where the local, sharp-faced model of optics ends"
    )


def nearest_absorber(case: Case, emitter: Emitter) -> str:
    """Name the absorbing film or surroundings nearest to the emitter's film."""
    stack, every = case.stack, case.every_wavelength_nm
    absorbing, (bottom, top) = stack.absorbing(every)
    ways = (
        (range(emitter.film_index - 1, -1, -1), bottom and stack.substrate is None, "bottom"),
        (range(emitter.film_index + 1, len(stack.films)), top and stack.cover is None, "top"),
    )
    found: list[tuple[float, str]] = []
    for order, end, side in ways:
        distance = 0.0
        for index in order:
            film = stack.films[index]
            if absorbing[index] and film.thickness_nm > 0.0:
                found.append((distance, f"film {film.name}"))
                break
            distance += film.thickness_nm
        else:
            if end:
                found.append((distance, f"the {side} surroundings"))
    return min(found)[1] if found else "the films around it"


def accuracy(tolerance: float, energy_balance: float, integration_error: float) -> Iterator[str]:
    """A result that misses its tolerance."""
    for name, value in (
        ("energy balance", energy_balance),
        ("integration error", integration_error),
    ):
        if not value <= tolerance:  # so that a value that is no number is told too
            yield f"the {name} is {value:.1e}, above the tolerance of {tolerance:.1e}"
