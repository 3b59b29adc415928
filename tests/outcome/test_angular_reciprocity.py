"""Radiance of s and p against the field that `tmm` finds at the dipole, in air and in the slab.

Exact (Lorentz reciprocity): into a direction of a medium of index n a dipole along e sends
(3/8 pi) n |e.E|^2 per solid angle and per rate in vacuum, E the field at the dipole of a unit
plane wave that comes from there.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
import tmm  # type: ignore[import-untyped]
from devices import case, emitter, pixel

import optics
from optics.outcome.angular import angular

NM, AT_NM, THETA, Q = 550.0, 11.0, 0.76, 0.85
HC_EV_NM = 1239.841984
ANGLES = [0.0, 10.0, 33.0, 58.0, 80.0]
CLOSE = 1e-9  # tmm is double precision too


def device(*, slab: str | None, cathode_nm: float = 20.0) -> optics.Case:
    """A pixel with a thin cathode at one wavelength, dipoles at one place; no slab above."""
    document = emitter(
        pixel(),
        zone={"shape": "point", "at_nm": AT_NM, "from": "bottom"},
        horizontal_fraction=THETA,
        quantum_yield=Q,
        exciton_fraction=1.0,
    )
    document["wavelength"] = {"values_nm": [NM]}
    document["drive"] = {"charge_balance": 1.0, "current_density_mA_cm2": 1.0}
    document["layers"][-1]["thickness_nm"] = cathode_nm
    if slab is None:
        del document["substrate"]
    else:
        document["substrate"]["exit"] = slab
    return case(document)


def films(given: optics.Case) -> tuple[list[complex], list[float], int]:
    """Indices and thicknesses bottom to top; the place of the emitter film, which is lossless."""
    eps, _ = given.stack.permittivity(np.array([NM]))
    return list(np.sqrt(eps[0])), given.stack.thickness_nm.tolist(), 2


def field_squared(
    given: optics.Case, side: str, angle_deg: float, pol: str, ends: tuple[float, float]
) -> tuple[float, float]:
    """|E|^2 at the dipole in the plane and along the normal, for light from one side."""
    n, d, film = films(given)
    depth = AT_NM
    if side == "top":
        n, d, film, ends = n[::-1], d[::-1], len(d) - 1 - film, ends[::-1]
        depth = d[film] - AT_NM
    found = tmm.coh_tmm(
        pol, [ends[0], *n, ends[1]], [np.inf, *d, np.inf], math.radians(angle_deg), NM
    )
    field = tmm.position_resolved(film + 1, depth, found)
    plane = abs(field["Ex"]) ** 2 + abs(field["Ey"]) ** 2
    return plane, abs(field["Ez"]) ** 2


def radiance(
    given: optics.Case, side: str, angle_deg: float, pol: str, ends: tuple[float, float]
) -> float:
    """Radiance in W/(sr m2) at 10 A/m2, from reciprocity and the budget's F."""
    plane, normal = field_squared(given, side, angle_deg, pol, ends)
    n_i = ends[0] if side == "bottom" else ends[1]
    bulk = 1.80  # of an isotropic film, either orientation
    # Half of an in-plane moment lies along the field, averaged over azimuth.
    squared = (1.0 - THETA) * normal + THETA * 0.5 * plane
    per_solid_angle = 3.0 * n_i / (8.0 * np.pi) * squared / bulk
    purcell = optics.budget(given, 1e-11).emitters[0].purcell_factor
    assert purcell is not None
    photons = Q / (1.0 - Q + Q * purcell) * per_solid_angle / math.cos(math.radians(angle_deg))
    return 10.0 * photons * HC_EV_NM / NM


@pytest.mark.parametrize("angle", ANGLES)
@pytest.mark.parametrize("pol", ["s", "p"])
@pytest.mark.parametrize("side", ["bottom", "top"])
def test_radiance_in_air(side: str, pol: str, angle: float) -> None:
    given = device(slab=None)
    curves = angular(given, [angle], tolerance=1e-11).sides[side].polarized
    (found,) = curves[f"radiance_{pol}_W_sr_m2"] or (None,)
    assert found == pytest.approx(radiance(given, side, angle, pol, (1.0, 1.0)), rel=CLOSE)


@pytest.mark.parametrize("angle", ANGLES)
@pytest.mark.parametrize("pol", ["s", "p"])
def test_radiance_in_the_substrate(pol: str, angle: float) -> None:
    given = device(slab="matched")
    curves = angular(given, [angle], tolerance=1e-11).sides["bottom"].polarized
    (found,) = curves[f"radiance_{pol}_W_sr_m2"] or (None,)
    assert found == pytest.approx(radiance(given, "bottom", angle, pol, (1.52, 1.0)), rel=CLOSE)


@pytest.mark.parametrize("angle", ANGLES)
@pytest.mark.parametrize("pol", ["s", "p"])
def test_radiance_through_a_slab_that_light_bounces_in(pol: str, angle: float) -> None:
    """Radiance over n^2 in the glass, times (1 - rho)/(1 - rho R), both sides' light with it.

    rho from Fresnel, R and T of the films from tmm. Light that leaves the films at the top does
    not come back, light that the face reflects does.
    """
    given = device(slab="planar")
    curves = angular(given, [angle], tolerance=1e-11).sides["bottom"].polarized
    (found,) = curves[f"radiance_{pol}_W_sr_m2"] or (None,)
    inside_deg = math.degrees(math.asin(math.sin(math.radians(angle)) / 1.52))
    in_glass = radiance(given, "bottom", inside_deg, pol, (1.52, 1.0))
    n, d, _ = films(given)
    inside = math.radians(inside_deg)
    lit = tmm.coh_tmm(pol, [1.52, *n, 1.0], [np.inf, *d, np.inf], inside, NM)
    rho = tmm.interface_R(pol, 1.52, 1.0, inside, math.radians(angle))
    expected = in_glass / 1.52**2 * (1.0 - rho) / (1.0 - rho * lit["R"])
    assert found == pytest.approx(expected, rel=CLOSE)


def test_normal_is_the_limit() -> None:
    """s and p of 0 and of a very small angle agree to the square of that angle."""
    given = device(slab="planar")
    curves: Any = angular(given, [0.0, 1e-3]).sides["bottom"].polarized
    for pol in "sp":
        at_0, near = curves[f"radiance_{pol}_W_sr_m2"]
        assert near == pytest.approx(at_0, rel=1e-8)
