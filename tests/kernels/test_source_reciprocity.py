"""What a dipole sends into a direction, against the field that `tmm` finds at the dipole.

Exact (Lorentz reciprocity): into direction theta of a medium of index n_i, polarization s or p,
a dipole along e sends (3/8 pi) n_i |e.E|^2 per solid angle and per rate in vacuum, E the field
at the dipole of a unit plane wave from there. Per du, u = n_i sin(theta), averaged over the
azimuth: (3/4) u/(n_i cos theta) <|e.E|^2>.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import replace

import numpy as np
import pytest
import tmm  # type: ignore[import-untyped]
from probe import density
from reference import Reference
from reference_cases import load
from stacks import Film, film, metal, problem_of, slab

from optics.kernels.exits import AIR_BOTTOM, AIR_TOP, COVER, SUBSTRATE

# `density` takes a mean over 2e-5 in kappa; its rounding is 1e-11, its curvature up to 1e4.
CLOSE = 1e-6
V, H = 0, 1
SILVER = next(case.bottom for case in load() if case.name == "metal_surroundings")

STACKS = {
    "three films in air": Reference(
        550, [film(1.76, 70), film(1.8, 40), film(1.7, 60)], 1.0, 1.0, 1, 13
    ),
    "absorbing films": Reference(
        520, [film(1.9 + 0.05j, 90), film(1.75, 50), film(2.1 + 0.3j, 30)], 1.52**2, 1.0, 1, 20
    ),
    "metals on both sides": Reference(
        550,
        [metal(SILVER, 25), film(1.6, 60), film(1.8, 40), film(1.7, 45), metal(SILVER, 15)],
        1.52**2,
        1.33**2,
        2,
        31,
    ),
    "dense outside, evanescent emitter": Reference(
        550, [film(1.9, 60), film(1.45, 80), film(1.7, 50)], 2.0**2, 1.8**2, 1, 25
    ),
    "evanescent emitter beside silver": Reference(
        600, [film(1.5, 60), metal(SILVER, 20), film(1.9 + 0.01j, 30)], 2.2**2, 2.4**2, 0, 44
    ),
    "uniaxial films": Reference(
        550,
        [film(1.82, 60, 1.68), film(1.7, 40), film(1.75, 90, 1.95), film(1.6, 20)],
        1.52**2,
        1.0,
        1,
        9,
    ),
    "uniaxial emitter": Reference(
        550, [film(1.75, 50), film(1.8, 60, 1.66), film(1.7, 30, 1.9)], 1.52**2, 1.3**2, 1, 22
    ),
}


def isotropic_equivalent(given: Film, pol: str, u: float) -> tuple[complex, float]:
    """Index and thickness of the isotropic film of equal kz d and Y at one wavevector.

    Solves (eps' k0^2 - kappa^2)/eps'^2 = Y^2; only where eps' comes out real can `tmm` take it.
    """
    eps_o, eps_e, d_nm = given
    if pol == "s" or eps_o == eps_e:
        return cmath.sqrt(eps_o), d_nm
    kz = cmath.sqrt(eps_o - u**2 * eps_o / eps_e)
    y = kz / eps_o
    root = cmath.sqrt(1 - 4 * y**2 * u**2)
    for eps in ((1 + root) / (2 * y**2), (1 - root) / (2 * y**2)):
        thickness = kz * d_nm / cmath.sqrt(eps - u**2)
        if abs(eps.imag) < 1e-12 and eps.real > 0 and abs(cmath.sqrt(eps - u**2) / eps - y) < 1e-9:
            return cmath.sqrt(eps.real), thickness.real
    raise NotImplementedError("not checked: no real isotropic equivalent")


def lit_from(stack: Reference, side: str, pol: str, u: float) -> tuple[float, float, float]:
    """|Ex|^2, |Ey|^2, |Ez|^2 at the dipole for a unit plane wave from one outer medium."""
    films = list(stack.films)
    eps_o, eps_e, d_nm = films[stack.emitter]
    films[stack.emitter] = (eps_o.real, eps_e.real, d_nm)
    ends = [cmath.sqrt(stack.bottom), cmath.sqrt(stack.top)]
    layer, depth = stack.emitter + 1, stack.z_nm / d_nm
    equivalents = [isotropic_equivalent(f, pol, u) for f in films]
    if side == "top":
        equivalents, ends = equivalents[::-1], ends[::-1]
        layer, depth = len(films) - stack.emitter, 1 - depth
    n = [ends[0], *(e[0] for e in equivalents), ends[1]]
    d = [np.inf, *(e[1] for e in equivalents), np.inf]
    found = tmm.coh_tmm(pol, n, d, math.asin(u / n[0].real), stack.wavelength_nm)
    field = tmm.position_resolved(layer, depth * d[layer], found)
    # H and Ex are those of the true film; Ez = kappa H/eps_e.
    normal = abs(field["Ez"] * n[layer] ** 2 / eps_e) ** 2
    return abs(field["Ex"]) ** 2, abs(field["Ey"]) ** 2, normal


def by_reciprocity(stack: Reference, side: str, u: float) -> tuple[float, float]:
    """Power per du into one outer medium (vertical, horizontal), relative to the bulk rate."""
    n_i = math.sqrt(complex(stack.bottom if side == "bottom" else stack.top).real)
    eps_o, eps_e, _ = (complex(x).real for x in stack.films[stack.emitter])
    bulk = math.sqrt(eps_o), (3 * eps_o + eps_e) / (4 * math.sqrt(eps_o))
    factor = 0.75 * u / math.sqrt(n_i**2 - u**2)
    in_plane, _, normal = lit_from(stack, side, "p", u)
    _, across, _ = lit_from(stack, side, "s", u)
    return factor * normal / bulk[0], factor * (in_plane + across) / 2 / bulk[1]


def sent(stack: Reference, side: str, u: float) -> tuple[float, float]:
    """The engine's first arrivals in an outer medium without a slab."""
    found = density(problem_of(stack), u)[:, :, 0]
    columns = [AIR_BOTTOM, SUBSTRATE] if side == "bottom" else [AIR_TOP, COVER]
    vertical, horizontal = found[:, columns].sum(axis=1)
    return float(vertical), float(horizontal)


@pytest.mark.parametrize("share", [0.03, 0.3, 0.55, 0.83, 0.97])
@pytest.mark.parametrize("side", ["bottom", "top"])
@pytest.mark.parametrize("name", STACKS)
def test_emission_is_the_field_of_a_wave_from_there(name: str, side: str, share: float) -> None:
    stack = STACKS[name]
    u = share * math.sqrt(complex(stack.bottom if side == "bottom" else stack.top).real)
    try:
        expected = by_reciprocity(stack, side, u)
    except NotImplementedError as reason:
        pytest.skip(str(reason))
    assert sent(stack, side, u) == pytest.approx(expected, rel=CLOSE)


def random_stack(seed: int) -> Reference:
    """Isotropic films, one in four absorbing, one in four a metal; invented."""
    draw = np.random.default_rng(seed)
    films = []
    for _ in range(int(draw.integers(2, 7))):
        kind = draw.integers(4)
        d_nm = float(draw.uniform(5, 120))
        if kind == 0:
            films.append(metal(complex(-draw.uniform(2, 30), draw.uniform(0.1, 3)), d_nm / 4))
        else:
            k = draw.uniform(0.001, 0.3) if kind == 1 else 0.0
            films.append(film(complex(draw.uniform(1.3, 2.5), k), d_nm))
    emitter = int(draw.integers(len(films)))
    films[emitter] = film(draw.uniform(1.4, 2.0), 60.0)
    bottom, top = draw.uniform(1.0, 2.2, 2) ** 2
    return Reference(
        float(draw.uniform(400, 700)), films, bottom, top, emitter, float(draw.uniform(2, 58))
    )


@pytest.mark.parametrize("side", ["bottom", "top"])
@pytest.mark.parametrize("seed", range(12))
def test_emission_of_random_stacks(seed: int, side: str) -> None:
    stack = random_stack(seed)
    n_i = math.sqrt(complex(stack.bottom if side == "bottom" else stack.top).real)
    for share in (0.2, 0.6, 0.9):
        expected = by_reciprocity(stack, side, share * n_i)
        assert sent(stack, side, share * n_i) == pytest.approx(expected, rel=CLOSE)


def through_slabs(stack: Reference, side: str, u: float) -> tuple[float, float]:
    """Emission into air behind incoherent slabs: intensities of `tmm.inc_tmm`, fields of coh_tmm.

    A wave from the air arrives in both slabs with certain intensities; fields of the two ways
    of lighting the films add as intensities.
    """
    below, above = stack.substrate, stack.cover
    assert below is not None
    assert above is not None
    n_b, n_t = math.sqrt(complex(stack.bottom).real), math.sqrt(complex(stack.top).real)
    indices = [below["outside_n"], n_b + 1j * below["k"]]
    indices += [cmath.sqrt(f[0]) for f in stack.films]
    indices += [n_t + 1j * above["k"], above["outside_n"]]
    lengths = [np.inf, below["thickness_nm"], *(f[2] for f in stack.films)]
    lengths += [above["thickness_nm"], np.inf]
    coherent = ["i", "i", *("c" for _ in stack.films), "i", "i"]
    if side == "top":
        indices, lengths, coherent = indices[::-1], lengths[::-1], coherent[::-1]
    squares = {}
    for pol in "sp":
        found = tmm.inc_tmm(
            pol, indices, lengths, coherent, math.asin(u / indices[0]), stack.wavelength_nm
        )
        toward, back = found["stackFB_list"][0]
        if side == "top":
            toward, back = back, toward
        # Fluxes per flux; amplitudes go with flux/(n cos theta).
        low, high = toward / math.sqrt(n_b**2 - u**2), back / math.sqrt(n_t**2 - u**2)
        squares[pol] = low * np.array(lit_from(stack, "bottom", pol, u)) + high * np.array(
            lit_from(stack, "top", pol, u)
        )
    bulk = math.sqrt(complex(stack.films[stack.emitter][0]).real)
    vertical = 0.75 * u * squares["p"][2] / bulk
    return vertical, 0.75 * u * (squares["p"][0] + squares["s"][1]) / 2 / bulk


SLABBED = {
    "two unequal slabs, one over water": Reference(
        550,
        [film(1.9 + 0.005j, 90), film(1.76, 70), film(1.8, 20), film(1.7, 60)],
        1.52**2,
        1.65**2,
        2,
        7,
        slab(k=3e-8),
        slab(k=5e-8, mm=0.5, outside=1.33),
    ),
    "thin silver between": Reference(
        600,
        [metal(SILVER, 18), film(1.7, 55), film(1.8, 30), film(1.72, 60)],
        1.5**2,
        1.8**2,
        2,
        21,
        slab(),
        slab(),
    ),
}


@pytest.mark.parametrize("share", [0.05, 0.4, 0.8, 0.95])
@pytest.mark.parametrize("side", ["bottom", "top"])
@pytest.mark.parametrize("name", SLABBED)
def test_emission_through_bouncing_slabs(name: str, side: str, share: float) -> None:
    """The k of a slab acts in `tmm` on its faces too: 1e-7 at most."""
    stack = SLABBED[name]
    outside = stack.substrate if side == "bottom" else stack.cover
    assert outside is not None
    u = share * outside["outside_n"]
    column = AIR_BOTTOM if side == "bottom" else AIR_TOP
    vertical, horizontal = density(problem_of(stack), u)[:, column, 0]
    assert (vertical, horizontal) == pytest.approx(through_slabs(stack, side, u), rel=CLOSE)


def test_the_comparison_notices_a_wrong_position() -> None:
    """A dipole 0.1 nm off is not the same: the tests above can fail."""
    stack = STACKS["absorbing films"]
    expected = by_reciprocity(stack, "bottom", 0.7)
    moved = replace(stack, z_nm=stack.z_nm + 0.1, _made=[])
    assert sent(moved, "bottom", 0.7) != pytest.approx(expected, rel=100 * CLOSE)
