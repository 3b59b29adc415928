"""Derivatives of the light budget against differences, and what must hold for any of them."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from reference import Reference
from reference_cases import load
from stacks import DESTINATIONS, NAMES, film, metal, slab
from varied import Device, apart, device_of, directions_of, slope, step_of

from optics.kernels.budget import OUTCOMES, light_budget
from optics.kernels.varied_budget import Derivatives, light_budget_with_derivatives

Array = NDArray[Any]
CASES = {case.name: case for case in load()}
PROMISE = 1e-6  # of the scale of each derivative
STACKS = [
    "bottom_oled_absorbing_glass",
    "bottom_oled_absorbing_matched",
    "top_oled_thin_silver",
    "birefringent_emitter",
    "two_slabs_unequal_planar",
    "two_slabs_one_matched",
    "silicon_bottom",
    "lossless_guide_with_shielded_metal",
    "high_q_cavity",
]
FINEST = 1e-12


def everything(device: Device, tolerance: float = FINEST) -> Array:
    """All outcomes and F (z, 2, OUTCOMES + 1) at the only wavelength."""
    found = light_budget(device.problem, tolerance)
    return np.concatenate([found.shares[0], found.dissipation[0, ..., None]], axis=-1)


def all_rates(found: Derivatives, p: int) -> Array:
    return np.concatenate([found.shares[p, 0], found.dissipation[p, 0, ..., None]], axis=-1)


def in_scale(found: Derivatives, p: int, difference: Array) -> float:
    return float((np.abs(difference) / found.scale[p, 0, ..., None]).max())


@pytest.mark.parametrize("name", STACKS)
def test_every_derivative_equals_the_difference(name: str) -> None:
    device = device_of(apart(CASES[name]))
    directions = directions_of(device)
    rates = device.rates(list(directions.values()))
    _, found = light_budget_with_derivatives(device.problem, rates, 1e-8)
    misses = {}
    for p, (name_of, direction) in enumerate(directions.items()):
        numeric, unsure = slope(
            lambda h, to=direction: everything(device.moved(to, h)), step_of(name_of)
        )
        miss = in_scale(found, p, all_rates(found, p) - numeric)
        if not miss <= PROMISE:
            misses[name_of] = (miss, unsure)
    assert not misses
    assert found.error.max() <= 1e-8


def literal(device: Device, stack: Any) -> Array:
    """All outcomes and F (1, 2, OUTCOMES + 1) by the literal model of `tests/reference.py`."""
    films = zip(device.eps_o[0], device.eps_e[0], device.thickness_nm, strict=True)
    slabs = []
    for s, given in enumerate((stack.substrate, stack.cover)):
        changed = given
        if given is not None:
            k = device.loss[0, s] * stack.wavelength_nm / (4 * np.pi * given["thickness_nm"])
            changed = given | {"outside_n": device.n_out[0, s], "k": k}
        slabs.append(changed)
    model = Reference(
        stack.wavelength_nm,
        [(complex(o), complex(e), float(d)) for o, e, d in films],
        complex(device.outer[0, 0]),
        complex(device.outer[0, 1]),
        stack.emitter,
        float(device.position_nm[0]),
        *slabs,
    )
    both = model.destinations(1e-13)
    rows = []
    for found in (both.v, both.h):
        row = [found.destinations[name] for name in DESTINATIONS]
        row += [found.matched_bottom or 0.0, found.matched_top or 0.0, found.near_field]
        rows.append([*row, found.dissipated])
    return np.array([rows])


# One number of every kind; light bounces between two slabs.
@pytest.mark.slow
@pytest.mark.parametrize(
    "name_of",
    [
        "thickness of film 1",
        "n of film 1",
        "n of the surroundings at the top",
        "n next to the films at the bottom",
        "loss of the slab at the bottom",
        "position 0",
    ],
)
def test_derivatives_equal_differences_of_the_literal_model(name_of: str) -> None:
    stack = CASES["two_slabs_unequal_planar"]
    device = device_of(stack)
    direction = directions_of(device)[name_of]
    _, found = light_budget_with_derivatives(device.problem, device.rates([direction]), 1e-8)
    # The literal model rounds at 1e-12, so the steps are larger than the engine's.
    numeric, _ = slope(lambda h: literal(device.moved(direction, h), stack), 4 * step_of(name_of))
    assert in_scale(found, 0, all_rates(found, 0) - numeric) <= PROMISE


def test_value_is_the_budget_itself() -> None:
    device = device_of(CASES["bottom_oled_planar"])
    value, _ = light_budget_with_derivatives(device.problem, device.rates([device.nothing()]), 1e-6)
    plain = light_budget(device.problem, 1e-6)
    np.testing.assert_array_equal(value.shares, plain.shares)
    np.testing.assert_array_equal(value.dissipation, plain.dissipation)


def test_nothing_changes_along_no_direction() -> None:
    device = device_of(CASES["two_slabs_unequal_planar"])
    _, found = light_budget_with_derivatives(device.problem, device.rates([device.nothing()]), 1e-6)
    assert not found.shares.any()
    assert not found.dissipation.any()


@pytest.mark.parametrize("name", STACKS)
def test_destinations_add_up_to_the_dissipation(name: str) -> None:
    """The rate of the total runs on a path of its own, so this says something."""
    device = device_of(CASES[name])
    rates = device.rates(list(directions_of(device).values()))
    _, found = light_budget_with_derivatives(device.problem, rates, 1e-9)
    lack = found.shares[..., : len(DESTINATIONS)].sum(axis=-1) - found.dissipation
    assert (np.abs(lack) / found.scale).max() <= 1e-8


class Invented:
    """A stack with absorbing, uniaxial and metallic films, invented."""

    wavelength_nm = 540.0
    films = (
        film(1.9 + 0.01j, 90.0),
        film(1.72, 60.0),
        film(1.75, 30.0, 1.66),
        film(1.7, 45.0),
        metal(-20.0 + 1.5j, 100.0),
    )
    bottom, top, emitter, z_nm = 1.52**2 + 0j, 1.02**2 + 0j, 2, 11.0
    substrate, cover = slab(), None


def test_a_film_in_two_parts_changes_as_one() -> None:
    whole = device_of(Invented())
    films = [*Invented.films]
    films[1:2] = [film(1.72, 25.0), film(1.72, 35.0)]
    stack = Invented()
    stack.films, stack.emitter = tuple(films), 3  # type: ignore[misc, assignment]
    parts = device_of(stack)
    thicker, denser = (directions_of(whole)[x] for x in ("thickness of film 1", "n of film 1"))
    by_part = directions_of(parts)
    _, one = light_budget_with_derivatives(whole.problem, whole.rates([thicker, denser]), 1e-9)
    names = ("thickness of film 1", "thickness of film 2", "n of film 1", "n of film 2")
    _, two = light_budget_with_derivatives(
        parts.problem, parts.rates([by_part[x] for x in names]), 1e-9
    )
    assert in_scale(one, 0, all_rates(one, 0) - all_rates(two, 0)) <= 1e-8
    assert in_scale(one, 0, all_rates(one, 0) - all_rates(two, 1)) <= 1e-8
    index = all_rates(two, 2) + all_rates(two, 3)
    assert in_scale(one, 1, all_rates(one, 1) - index) <= 1e-8


def test_moving_the_dipole_is_moving_the_faces() -> None:
    """Between two films of its own material: more below and less above, or the dipole up."""
    stack = Invented()
    own = film(1.75, 20.0, 1.66)
    stack.films = (Invented.films[0], own, Invented.films[2], own, *Invented.films[3:])  # type: ignore[misc, assignment]
    device = device_of(stack)
    shift = device.nothing()
    shift.thickness_nm[0, [1, 3]] = 1.0, -1.0
    along = directions_of(device)["position 0"]
    _, found = light_budget_with_derivatives(device.problem, device.rates([shift, along]), 1e-9)
    assert in_scale(found, 0, all_rates(found, 0) - all_rates(found, 1)) <= 1e-8


def test_thicker_everywhere_is_a_shorter_wavelength() -> None:
    device = device_of(Invented())
    thicker = device.nothing()
    thicker.thickness_nm[0] = device.thickness_nm
    thicker.position_nm[0] = device.position_nm
    _, found = light_budget_with_derivatives(device.problem, device.rates([thicker]), 1e-9)
    numeric, _ = slope(
        lambda h: everything(replace(device, wavelength_nm=device.wavelength_nm / (1.0 + h))), 2e-3
    )
    assert in_scale(found, 0, all_rates(found, 0) - numeric) <= PROMISE


def test_positions_do_not_disturb_each_other() -> None:
    alone = device_of(Invented())
    many = device_of(Invented(), [4.0, 11.0, 25.0])
    _, one = light_budget_with_derivatives(
        alone.problem, alone.rates(list(directions_of(alone).values())), 1e-9
    )
    _, three = light_budget_with_derivatives(
        many.problem, many.rates(list(directions_of(many).values())), 1e-9
    )
    for p in range(one.shares.shape[0] - 1):
        assert in_scale(one, p, all_rates(one, p) - all_rates(three, p)[1:2]) <= 1e-8
    own = all_rates(three, one.shares.shape[0])  # along the second of three positions
    assert in_scale(one, -1, all_rates(one, -1) - own[1:2]) <= 1e-8
    assert not own[[0, 2]].any()


def test_lines_that_coincide_may_move_together() -> None:
    """Air on both sides, one film and the slab of equal index."""
    stack = Invented()
    stack.top = 1.0 + 0j  # type: ignore[misc]
    stack.films = (film(1.52, 90.0), *Invented.films[1:])  # type: ignore[misc, assignment]
    device = device_of(stack)
    air = device.nothing()
    air.outer[0, 0, 1], air.n_out[0, 0, 0] = 2.0, 1.0
    slab_index = directions_of(device)["n next to the films at the bottom"]
    found = light_budget_with_derivatives(device.problem, device.rates([air, slab_index]), 1e-9)[1]
    for p, direction in enumerate((air, slab_index)):
        numeric, _ = slope(lambda h, to=direction: everything(device.moved(to, h)), 2e-4)
        assert in_scale(found, p, all_rates(found, p) - numeric) <= PROMISE


def test_where_a_resonance_is_hidden_the_error_says_so() -> None:
    device = device_of(CASES["backward_lossless_metal"])
    thicker = directions_of(device)["thickness of film 0"]
    value, found = light_budget_with_derivatives(device.problem, device.rates([thicker]), 1e-6)
    assert value.error[0] <= 1e-6
    assert np.isinf(found.error[0, 0])


def test_a_resonance_too_narrow_for_doubles_is_not_kept_quiet() -> None:
    device = device_of(apart(CASES["thick_lossless_film"]))
    thicker = directions_of(device)["thickness of film 0"]
    _, found = light_budget_with_derivatives(device.problem, device.rates([thicker]), 1e-8)
    numeric, _ = slope(lambda h: everything(device.moved(thicker, h)), 0.04)
    assert in_scale(found, 0, all_rates(found, 0) - numeric) <= max(found.error[0, 0], PROMISE)


def test_columns_are_those_of_the_budget() -> None:
    assert len(NAMES) == OUTCOMES
