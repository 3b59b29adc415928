"""What must hold for any physical stack, tried on stacks nobody chose.

Energy is conserved (energy balance), space is mirror symmetric (turning over), a film is the
sum of its parts (splitting), Maxwell's equations know no length (scaling), and two dipoles see
each other alike (reciprocity). All stacks invented.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from reference import Reference
from stacks import (
    DESTINATIONS,
    HORIZONTAL,
    NAMES,
    VERTICAL,
    Film,
    answers,
    film,
    imbalance,
    slab,
    solved,
)

PROMISE = 1e-6  # of the dissipated power, at default settings
quick = settings(
    max_examples=25,
    deadline=None,
    derandomize=True,
    database=None,
    suppress_health_check=list(HealthCheck),
)
thorough = settings(quick, max_examples=400)

thickness = st.floats(0.5, 250.0)
index = st.floats(1.3, 2.6)
loss = st.floats(1e-4, 0.5)


@st.composite
def films(draw: st.DrawFn, metals: bool = True) -> Film:
    """Isotropic or uniaxial, lossless or lossy, or a metal."""
    kind = draw(st.sampled_from(["clear", "lossy", "uniaxial", "lossy uniaxial", "metal"]))
    if kind == "metal" and metals:
        eps = complex(draw(st.floats(-45.0, -1.5)), draw(st.floats(0.05, 15.0)))
        return eps, eps, draw(st.floats(2.0, 120.0))
    lossy = kind.startswith("lossy")
    n_o = complex(draw(index), draw(loss) if lossy else 0.0)
    n_e = n_o
    if kind.endswith("uniaxial"):
        n_e = complex(draw(index), draw(loss) if lossy else 0.0)
    return n_o**2, n_e**2, draw(thickness)


def slabs() -> st.SearchStrategy[dict[str, Any] | None]:
    some = st.builds(
        lambda k, mm, exit_, outside: {
            "k": k,
            "thickness_nm": mm * 1e6,
            "exit": exit_,
            "outside_n": outside,
        },
        st.sampled_from([0.0, 1e-8, 3e-7]),
        st.floats(0.1, 2.0),
        st.sampled_from(["planar", "matched"]),
        st.sampled_from([1.0, 1.33]),
    )
    return st.one_of(st.none(), some)


@st.composite
def stacks(draw: st.DrawFn) -> Reference:
    """One to seven films, a clear emitter film, slabs or none, one side may absorb."""
    below, above = draw(st.lists(films(), max_size=3)), draw(st.lists(films(), max_size=3))
    n_o = draw(st.floats(1.4, 2.1))
    n_e = draw(st.one_of(st.just(n_o), st.floats(1.4, 2.1)))
    own: Film = (complex(n_o**2), complex(n_e**2), draw(st.floats(5.0, 120.0)))
    # Half a nanometer and more from every face, as a case file has it by default.
    z_nm = draw(st.floats(0.5, own[2] - 0.5))
    substrate, cover = draw(slabs()), draw(slabs())
    bottom, top = (complex(draw(st.floats(1.0, 2.0)) ** 2) for _ in range(2))
    # The slab is the denser side of its face; less dense is as physical but rare.
    if substrate is None and draw(st.booleans()):
        bottom = draw(st.sampled_from([complex(3.9, 0.03) ** 2, complex(-30.0, 2.0)]))
    return Reference(
        draw(st.floats(400.0, 700.0)),
        [*below, own, *above],
        bottom,
        top,
        len(below),
        z_nm,
        substrate,
        cover,
    )


def everything(stack: Reference, tolerance: float = PROMISE) -> np.ndarray:
    """F and all outcomes of both orientations over F: (2, 1 + outcomes)."""
    budget = solved(stack, tolerance)
    rows = []
    for orientation in (VERTICAL, HORIZONTAL):
        got = answers(budget, orientation)
        rows.append([got[name] / got["dissipated"] for name in NAMES] + [got["dissipated"]])
    return np.array(rows)


def same(one: np.ndarray, other: np.ndarray, tolerance: float = 2 * PROMISE) -> None:
    """Both within the promise of the truth: within twice of each other."""
    assert one[:, :-1] == pytest.approx(other[:, :-1], abs=tolerance)
    assert one[:, -1] == pytest.approx(other[:, -1], rel=tolerance)


def check_energy(stack: Reference) -> None:
    budget = solved(stack)
    assert np.isfinite(budget.shares).all()
    assert np.isfinite(budget.dissipation).all()
    assert (budget.dissipation > 0).all()
    assert imbalance(budget) <= PROMISE
    assert budget.error[0] <= PROMISE
    shares = budget.shares / budget.dissipation[..., None]
    assert (shares[..., : len(DESTINATIONS)] >= -1e-7).all()
    # One pass out of a matched slab adds nothing to what there is.
    assert (shares <= 1 + PROMISE).all()


def turned_over(stack: Reference) -> Reference:
    films_up = list(stack.films)[::-1]
    own = stack.films[stack.emitter][2]
    return Reference(
        stack.wavelength_nm,
        films_up,
        stack.top,
        stack.bottom,
        len(films_up) - 1 - stack.emitter,
        own - stack.z_nm,
        stack.cover,
        stack.substrate,
    )


SWAPPED = [
    NAMES.index(
        {
            "air_bottom": "air_top",
            "air_top": "air_bottom",
            "substrate": "cover",
            "cover": "substrate",
            "matched_bottom": "matched_top",
            "matched_top": "matched_bottom",
        }.get(name, name)
    )
    for name in NAMES
] + [len(NAMES)]


def check_turning_over(stack: Reference) -> None:
    """What was below is above, absorbing surroundings too."""
    same(everything(turned_over(stack)), everything(stack)[:, SWAPPED])


def check_splitting(stack: Reference, which: int, part: float) -> None:
    j = which % len(stack.films)
    whole = stack.films[j]
    first, second = (*whole[:2], part * whole[2]), (*whole[:2], (1 - part) * whole[2])
    parts = [*stack.films[:j], first, second, *stack.films[j + 1 :]]
    emitter, z_nm = stack.emitter, stack.z_nm
    if j < emitter:
        emitter += 1
    elif j == emitter and z_nm > first[2]:
        emitter, z_nm = emitter + 1, z_nm - first[2]
    split = replace(stack, films=parts, emitter=emitter, z_nm=z_nm, _made=[])
    same(everything(split), everything(stack))


def check_nothing_inserted(stack: Reference, where: int, nothing: Film) -> None:
    """A film of zero thickness is as good as absent: not even names change."""
    j = where % (len(stack.films) + 1)
    thicker = [*stack.films[:j], (*nothing[:2], 0.0), *stack.films[j:]]
    emitter = stack.emitter + (j <= stack.emitter)
    same(everything(replace(stack, films=thicker, emitter=emitter, _made=[])), everything(stack))


def check_scaling(stack: Reference) -> None:
    def slab_of(given: dict[str, Any] | None) -> dict[str, Any] | None:
        return given and {**given, "thickness_nm": 2 * given["thickness_nm"]}

    twice = replace(
        stack,
        wavelength_nm=2 * stack.wavelength_nm,
        films=[(o, e, 2 * d) for o, e, d in stack.films],
        z_nm=2 * stack.z_nm,
        substrate=slab_of(stack.substrate),
        cover=slab_of(stack.cover),
        _made=[],
    )
    # Powers of two change no digit.
    same(everything(twice), everything(stack), 1e-12)


@quick
@given(stacks())
def test_energy_is_conserved(stack: Reference) -> None:
    check_energy(stack)


@quick
@given(stacks())
def test_turning_over_swaps_the_sides(stack: Reference) -> None:
    check_turning_over(stack)


@quick
@given(stacks(), st.integers(0, 20), st.floats(0.05, 0.95))
def test_splitting_a_film_changes_nothing(stack: Reference, which: int, part: float) -> None:
    check_splitting(stack, which, part)


@quick
@given(stacks(), st.integers(0, 20), films())
def test_a_film_of_no_thickness_changes_nothing(
    stack: Reference, where: int, nothing: Film
) -> None:
    check_nothing_inserted(stack, where, nothing)


@quick
@given(stacks())
def test_lengths_have_no_scale(stack: Reference) -> None:
    check_scaling(stack)


@pytest.mark.slow
@thorough
@given(stacks(), st.integers(0, 20), st.floats(0.05, 0.95), films())
def test_all_of_it_on_many_stacks(stack: Reference, which: int, part: float, nothing: Film) -> None:
    check_energy(stack)
    check_turning_over(stack)
    check_splitting(stack, which, part)
    check_nothing_inserted(stack, which, nothing)
    check_scaling(stack)


@quick
@given(index, index)
def test_touching_dipoles_are_reciprocal(n_1: float, n_2: float) -> None:
    """n1 F_par(1|2) = n2 F_par(2|1); n1 F_perp(1|2) = (n2/n1)^4 n2 F_perp(2|1)."""
    one = everything(Reference(550, [(n_1**2, n_1**2, 50.0)], n_2**2, n_1**2, 0, 0.0))
    two = everything(Reference(550, [(n_2**2, n_2**2, 50.0)], n_1**2, n_2**2, 0, 0.0))
    assert n_1 * one[HORIZONTAL, -1] == pytest.approx(n_2 * two[HORIZONTAL, -1], rel=2 * PROMISE)
    ratio = (n_2 / n_1) ** 4 * n_2 / n_1
    assert one[VERTICAL, -1] == pytest.approx(ratio * two[VERTICAL, -1], rel=2 * PROMISE)


ABSORBING_SIDES = {
    "metal above, glass below": Reference(
        550.0, [film(1.7, 60.0)], 1.52**2 + 0j, -10 + 1j, 0, 20.0, slab()
    ),
    "metal below, glass above": Reference(
        400.0, [(4 + 0j, 4 + 0j, 5.0)], -30 + 2j, 4 + 0j, 0, 1.0, None, slab()
    ),
    "slab less dense than its own surroundings, another slab below": Reference(
        550.0,
        [film(1.7, 60.0), film(2.0 + 0.2j, 50.0)],
        1.52**2 + 0j,
        1.1**2 + 0j,
        0,
        20.0,
        slab(),
        slab(outside=1.33),
    ),
}


@pytest.mark.parametrize("stack", ABSORBING_SIDES.values(), ids=ABSORBING_SIDES)
def test_light_that_returns_from_one_side_only(stack: Reference) -> None:
    """Once wrong: T into an absorber taken for T out of it; bounces beyond a slab's own line."""
    check_energy(stack)
    check_turning_over(stack)
