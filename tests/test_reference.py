"""The literal model against published values, closed forms and itself."""

from __future__ import annotations

import csv
import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import reference_amplitudes as amplitudes
import reference_fields as fields
import reference_paths as paths
from mpmath import mp  # type: ignore[import-untyped]
from reference import DESTINATIONS, SOURCES, Outcome, Reference, Result
from reference_cases import ReferenceCase, load
from reference_geometry import Geometry

PUBLISHED = Path(__file__).parent / "published"
# Good conductors. What they lack to a perfect mirror goes as their surface impedance,
# 1/sqrt(|eps|): 1e-5 and 1e-6 here, so the limit follows from both to second order.
MIRRORS = (1e10j, 1e12j)
EIGHT_DIGITS = 1e-8  # printed digits of the values
CASES = {case.name: case for case in load()}


def rows(name: str) -> list[dict[str, str]]:
    lines = (PUBLISHED / name).read_text(encoding="utf-8").splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))


def model(case: ReferenceCase) -> Reference:
    return Reference(
        case.wavelength_nm,
        list(case.films),
        case.bottom,
        case.top,
        case.emitter,
        case.z_nm,
        case.substrate,
        case.cover,
    )


def film(n: float, d_nm: float) -> tuple[complex, complex, float]:
    return n**2, n**2, d_nm


def perfect(results: list[Result]) -> tuple[float, float]:
    """The perfect mirror's F (vertical, horizontal), linear in the impedance."""
    less, more = results
    return (
        (10 * more.v.dissipated - less.v.dissipated) / 9,
        (10 * more.h.dissipated - less.h.dissipated) / 9,
    )


@pytest.mark.parametrize("row", rows("dipole_perfect_mirror.csv"))
def test_perfect_mirror(row: dict[str, str]) -> None:
    n, wavelength_nm = 1.5, 600.0
    d_nm = float(row["distance_n_over_wavelength"]) * wavelength_nm / n
    vertical, horizontal = perfect(
        [
            Reference(wavelength_nm, [film(n, 2 * d_nm)], m, n**2, 0, d_nm).destinations()
            for m in MIRRORS
        ]
    )
    assert vertical == pytest.approx(float(row["F_perp"]), abs=EIGHT_DIGITS)
    assert horizontal == pytest.approx(float(row["F_par"]), abs=EIGHT_DIGITS)


@pytest.mark.parametrize("row", rows("dipole_two_mirrors.csv"))
def test_two_perfect_mirrors(row: dict[str, str]) -> None:
    n, wavelength_nm = 1.2, 600.0
    gap_nm = float(row["gap_half_waves"]) * wavelength_nm / (2 * n)
    z_nm = float(row["position"]) * gap_nm
    # The upper mirror is a film, many skin depths thick: one side has to be transparent.
    found = [
        Reference(wavelength_nm, [film(n, gap_nm), (m, m, 50.0)], m, 1.0, 0, z_nm).destinations()
        for m in MIRRORS
    ]
    vertical, horizontal = perfect(found)
    assert vertical == pytest.approx(float(row["F_perp"]), abs=EIGHT_DIGITS)
    assert horizontal == pytest.approx(float(row["F_par"]), abs=EIGHT_DIGITS)
    for result in found:
        assert abs(result.v.imbalance) < 1e-9
        assert abs(result.h.imbalance) < 1e-9


@pytest.mark.parametrize("row", rows("dipole_touching_interface.csv"))
def test_touching_interface(row: dict[str, str]) -> None:
    n1, n2 = float(row["n1"]), float(row["n2"])
    found = Reference(550, [film(n1, 100)], n2**2, n1**2, 0, 0.0).destinations()
    for outcome, which in ((found.v, "perp"), (found.h, "par")):
        entering = outcome.destinations["air_bottom"] / outcome.dissipated
        assert outcome.dissipated == pytest.approx(float(row[f"F_{which}"]), abs=EIGHT_DIGITS)
        assert entering == pytest.approx(float(row[f"fraction_{which}"]), abs=EIGHT_DIGITS)


@pytest.mark.parametrize(("n1", "n2"), [(1.5, 1.0), (1.7, 1.5), (1.31, 2.4)])
def test_touching_interface_is_reciprocal(n1: float, n2: float) -> None:
    """n1 F_par(1|2) = n2 F_par(2|1); n1 F_perp(1|2) = (n2/n1)^4 n2 F_perp(2|1), exactly."""
    one = Reference(550, [film(n1, 100)], n2**2, n1**2, 0, 0.0).destinations()
    two = Reference(550, [film(n2, 100)], n1**2, n2**2, 0, 0.0).destinations()
    assert n1 * one.h.dissipated == pytest.approx(n2 * two.h.dissipated, rel=1e-11)
    ratio = (n2 / n1) ** 4
    assert n1 * one.v.dissipated == pytest.approx(ratio * n2 * two.v.dissipated, rel=1e-11)


SLAB = Reference(550, [film(1.8, 200)], 1.5**2, 1.0, 0, 50)


@pytest.mark.parametrize("row", rows("dipole_lossless_slab.csv"), ids=lambda r: r["quantity"])
def test_lossless_slab(row: dict[str, str]) -> None:
    found = SLAB.destinations()
    for outcome, column in ((found.v, "vertical"), (found.h, "horizontal")):
        value = {"dissipated": outcome.dissipated, **outcome.destinations}[row["quantity"]]
        assert value == pytest.approx(float(row[column]), abs=EIGHT_DIGITS)


def test_lossless_slab_modes_in_closed_form() -> None:
    """Guided power mode by mode from the textbook's effective thickness."""
    n1, nb, nt, k0, z0, depth = 1.8, 1.5, 1.0, 2 * math.pi / 550, 50.0, 200.0
    found = SLAB.destinations()
    index = {
        row["mode"]: float(row["mode_index"]) for row in rows("dipole_lossless_slab_modes.csv")
    }
    located = [p.real for p in paths.poles(SLAB.geometry, 1.5, 1.8)]
    assert sorted(located) == pytest.approx(sorted(index.values()), abs=EIGHT_DIGITS)
    k1, power = n1 * k0, {"v": 0.0, "h": 0.0}
    for n in located:
        tm = abs(n - index["TM0"]) < 1e-6
        h, gb, gt = (k0 * math.sqrt(x) for x in (n1**2 - n**2, n**2 - nb**2, n**2 - nt**2))
        phase = math.atan((n1 / nb) ** 2 * gb / h) if tm else math.atan(gb / h)
        q = [(n / n1) ** 2 + (n / x) ** 2 - 1 if tm else 1.0 for x in (nb, nt)]
        effective = depth + 1 / (q[0] * gb) + 1 / (q[1] * gt)
        square = math.cos(h * z0 - phase) ** 2
        unit = 3 * math.pi / (4 * k1) * 2 / effective
        if tm:
            power["v"] += 2 * unit * (n * k0 / k1) ** 2 * square
            power["h"] += unit * (h / k1) ** 2 * (1 - square)
        else:
            power["h"] += unit * square
    assert power["v"] == pytest.approx(found.v.destinations["guided"], rel=1e-10)
    assert power["h"] == pytest.approx(found.h.destinations["guided"], rel=1e-10)


@pytest.mark.parametrize("d_nm", [0.25, 0.5, 1.0])
def test_quenching_near_silver(d_nm: float) -> None:
    """(3/8) Im[(eps2 - eps1)/(eps2 + eps1)]/(k1 d)^3: within 3 % below 2 nm only.

    Chance, Prock and Silbey 1978; Ford and Weber, Phys. Rep. 113, 195 (1984): from memory.
    """
    n, silver = 1.7, CASES["metal_surroundings"].bottom
    found = Reference(550, [film(n, 30)], silver, n**2, 0, d_nm).destinations()
    contrast = ((silver - n**2) / (silver + n**2)).imag
    asymptote = 3 / 8 * contrast / (2 * math.pi * n * d_nm / 550) ** 3
    assert found.v.dissipated == pytest.approx(asymptote, rel=0.03)
    assert found.h.dissipated == pytest.approx(asymptote / 2, rel=0.03)
    assert found.v.near_field > 0.9 * found.v.dissipated


@pytest.mark.parametrize("n", [1.2, 1.5, 1.8])
def test_escape_cone(n: float) -> None:
    """Power of a bulk dipole inside the escape cone of one face (geometry)."""
    c = math.sqrt(1 - 1 / n**2)
    bulk = Reference(550, [film(n, 100)], n**2, n**2, 0, 30).geometry

    def up(source: str) -> float:
        def density(kappa: np.ndarray) -> np.ndarray:
            both = fields.halves(bulk, kappa, fields.SOURCES[source])
            return np.array([fields.direct(bulk, kappa, source, both).up])

        return float(paths.integrate(density, paths.Piece("line", 0.0, 1.0)).value[0])

    normal, in_plane = up("v_p"), up("h_p") + up("h_s")
    assert normal == pytest.approx(0.5 * (1 - 1.5 * c + 0.5 * c**3), rel=1e-11)
    assert in_plane == pytest.approx(0.5 * (1 - 0.75 * c - 0.25 * c**3), rel=1e-11)
    assert (normal + 2 * in_plane) / 3 == pytest.approx((1 - c) / 2, rel=1e-11)


def test_fresnel_loss_of_the_escape_cone() -> None:
    n = 1 / math.sin(math.radians(25))
    c = math.sqrt(1 - 1 / n**2)
    face = {"k": 0.0, "thickness_nm": 1e6, "exit": "planar", "outside_n": 1.0}
    found = Reference(550, [film(n, 100)], n**2, n**2, 0, 30, substrate=face).destinations()
    out = {
        "normal": found.v.destinations["air_bottom"],
        "in_plane": found.h.destinations["air_bottom"],
    }
    out["isotropic"] = (out["normal"] + 2 * out["in_plane"]) / 3
    cone = {
        "normal": 0.5 * (1 - 1.5 * c + 0.5 * c**3),
        "in_plane": 0.5 * (1 - 0.75 * c - 0.25 * c**3),
        "isotropic": (1 - c) / 2,
    }
    for row in rows("dipole_fresnel_loss.csv"):
        loss = 100 * (1 - out[row["orientation"]] / cone[row["orientation"]])
        assert loss == pytest.approx(float(row["loss_percent"]), abs=0.05)


@pytest.mark.slow
def test_thick_film_on_a_mirror_converges_to_the_cone() -> None:
    """Averaged over position, 1 - c leaves in the end; the face effects fade as 1/thickness."""
    n = 1.5
    face = {"k": 0.0, "thickness_nm": 1e6, "exit": "planar", "outside_n": 1.0}
    for depth_nm in (1500.0, 3000.0):
        t, weights = np.polynomial.legendre.leggauss(int(depth_nm / 50))
        total, out = 0.0, 0.0
        for position, weight in zip((1 + t) / 2, weights / 2, strict=True):
            films = [film(n, depth_nm)]
            found = Reference(
                550, films, MIRRORS[1], n**2, 0, float(position) * depth_nm, cover=face
            ).destinations(1e-8)
            for outcome, share in ((found.v, 1 / 3), (found.h, 2 / 3)):
                total += weight * share * outcome.dissipated
                out += weight * share * outcome.destinations["air_top"]
        # What the mirror changes within x = 1 of it, at most all of it, over the thickness.
        faces = 550 / (4 * math.pi * n * depth_nm)
        assert total == pytest.approx(1, abs=faces)
        assert out / (1 - math.sqrt(1 - 1 / n**2)) == pytest.approx(1, abs=faces)


def lossy_dielectrics() -> Geometry:
    films = [(3.2 + 0.02j, 2.9 + 0.01j, 90.0), film(1.75, 40), (3.6 + 0.3j, 3.6 + 0.3j, 60.0)]
    return Reference(520, films, 1.5**2, 1.0, 1, 13).geometry


def all_of(geo: Geometry, piece: paths.Piece) -> np.ndarray:
    def density(kappa: np.ndarray) -> np.ndarray:
        return np.array([fields.dissipated(geo, kappa, s) for s in SOURCES])

    return np.asarray(paths.integrate(density, piece).value)


def test_detour_equals_real_axis_without_metals() -> None:
    geo = lossy_dielectrics()
    detour = all_of(geo, paths.Piece("ellipse", 1.5, 4.0, 0.3))
    deeper = all_of(geo, paths.Piece("ellipse", 1.5, 4.0, 0.9))
    straight = all_of(geo, paths.Piece("line", 1.5, 4.0))
    assert detour == pytest.approx(straight, abs=1e-11)
    assert deeper == pytest.approx(straight, abs=1e-11)


@pytest.mark.parametrize(
    ("name", "near", "depth"),
    [("backward_silver", 1.77 - 2.57j, 8.0), ("backward_model_metal", 7.85 - 1.74j, 3.5)],
)
def test_detour_under_a_backward_mode_misses_its_residue(
    name: str, near: complex, depth: float
) -> None:
    """The trap: arc and real axis differ by the residue of the pole between them."""
    geo = model(CASES[name]).geometry
    lo = geo.largest_outer_line
    arc = all_of(geo, paths.Piece("ellipse", lo, 14.0, depth))
    straight = all_of(geo, paths.Piece("line", lo, 14.0))
    pole = paths.polished(geo, near)
    assert abs(pole - near) < 0.01
    turn = np.exp(2j * np.pi * np.arange(64) / 64) * 0.02
    samples = np.array([fields.dissipated(geo, pole + turn, s) for s in SOURCES])
    # Out along the axis and back along the arc goes round the pole clockwise.
    jump = (-2j * np.pi * (samples * turn).mean(axis=1)).real
    assert np.abs(jump).max() > 1e-2
    assert straight - arc == pytest.approx(jump, abs=1e-9)


@pytest.mark.parametrize("name", ["lossless_metal", "backward_lossless_metal"])
def test_modes_on_the_axis_are_the_limit_of_little_loss(name: str) -> None:
    """Half circles around real poles against the real axis with a loss that goes to zero."""
    given = model(CASES[name])
    exact = given.destinations()
    off = []
    for loss in (2e-4j, 1e-4j):
        films = [(o + loss * (o.real < 0), e + loss * (e.real < 0), d) for o, e, d in given.films]
        lossy = replace(given, films=films, _made=[]).destinations()
        off.append(
            (lossy.v.dissipated - exact.v.dissipated, lossy.h.dissipated - exact.h.dissipated)
        )
    # Linear in the loss: extrapolation to none meets the exact value.
    for first, second in zip(*off, strict=True):
        assert abs(second) < 1e-2
        assert 2 * second - first == pytest.approx(0, abs=1e-5)


def test_closed_form_absorption_is_the_volume_integral() -> None:
    geo = model(CASES["birefringent_transport"]).geometry
    kappa = np.array([0.3, 0.9, 1.4])
    for pol in "ps":
        wave = fields.march(geo.above, geo.top, kappa, pol)
        for j, film_ in enumerate(geo.above):
            if film_.absorbs:
                volume = _volume_integral(geo, kappa, pol, j)
                assert wave.absorbed[j] == pytest.approx(volume, rel=1e-10)


def _volume_integral(geo: Geometry, kappa: np.ndarray, pol: str, j: int) -> np.ndarray:
    """Gauss quadrature over depth of Im eps |E|^2, the field marched to every depth."""
    films, target = geo.above, geo.above[j]
    t, weights = np.polynomial.legendre.leggauss(80)
    whole = fields.march(films, geo.top, kappa, pol)
    total = np.zeros(kappa.shape)
    for y, weight in zip((1 + t) / 2 * target.depth, weights / 2 * target.depth, strict=True):
        part = fields.march((replace(target, depth=y), *films[j + 1 :]), geo.top, kappa, pol)
        scale = np.exp(2 * (part.growth - whole.growth))
        value, slope = np.abs(part.value) ** 2 * scale, np.abs(part.slope) ** 2 * scale
        if pol == "s":
            total += weight * target.ordinary.imag * value
        else:
            normal = kappa**2 * value / abs(target.extraordinary) ** 2
            total += weight * (target.ordinary.imag * slope + target.extraordinary.imag * normal)
    return total


@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_both_routes_agree_point_by_point(case: ReferenceCase) -> None:
    geo = model(case).geometry
    points = [0.37 * geo.largest_outer_line, 0.93 * geo.largest_outer_line]
    points += [1.03 * geo.largest_outer_line, 0.7 * geo.near_field_line]
    for source in SOURCES:
        fast = fields.dissipated(geo, np.array(points), source)
        for kappa, found in zip(points, fast, strict=True):
            with mp.workdps(25):
                literal = complex(amplitudes.emission(geo, mp.mpf(kappa), source).dissipated)
            assert found == pytest.approx(literal, rel=1e-9)


QUICK = ("slab_dense_inside", "two_slabs_unequal_planar", "backward_silver", "near_cutoff")


@pytest.mark.parametrize(
    "case",
    [
        pytest.param(c, id=c.name, marks=() if c.name in QUICK else pytest.mark.slow)
        for c in CASES.values()
    ],
)
def test_stored_records_are_what_the_model_says(case: ReferenceCase) -> None:
    found = model(case).destinations()
    for outcome, stored in ((found.v, case.vertical), (found.h, case.horizontal)):
        _compare(outcome, stored)
    assert case.stated_error < 1e-9


def _compare(outcome: Outcome, stored: dict[str, float | None]) -> None:
    got = outcome.destinations | {
        "dissipated": outcome.dissipated,
        "near_field": outcome.near_field,
        "matched_bottom": outcome.matched_bottom,
        "matched_top": outcome.matched_top,
    }
    assert got.keys() == stored.keys()
    for name, value in stored.items():
        if value is None:
            assert got[name] is None
        else:
            assert got[name] == pytest.approx(value, abs=1e-9 * outcome.dissipated), name


@pytest.mark.parametrize(
    "name", ["slab_dense_inside", pytest.param("backward_silver", marks=pytest.mark.slow)]
)
def test_second_route_repeats_a_record(name: str) -> None:
    """Matrix formulas in mpmath with digits and nodes other than those of the record."""
    found = model(CASES[name]).repeated(digits=18, nodes=14)
    _compare(found.v, CASES[name].vertical)
    _compare(found.h, CASES[name].horizontal)


@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_stored_records_add_up(case: ReferenceCase) -> None:
    for stored in (case.vertical, case.horizontal):
        parts = [stored[name] for name in DESTINATIONS]
        total = sum(p for p in parts if p is not None)
        assert stored["dissipated"] == pytest.approx(total, rel=1e-9)


def test_unresolved_mode_is_refused() -> None:
    """A guide that leaks through 2.5 um into a dense medium: a mode 1e-17 from the axis."""
    films = [film(1.5, 400), film(1.75, 80), film(1.5, 2500)]
    leaky = Reference(385, films, 1.5**2, 1.72**2, 1, 30.0)
    with pytest.raises(ArithmeticError, match="too close to the axis"):
        leaky.destinations()


def test_dipole_on_an_absorber_is_refused() -> None:
    touching = Reference(550, [film(1.7, 30)], -12 + 0.5j, 1.7**2, 0, 0.0)
    with pytest.raises(ValueError, match="touches an absorber"):
        touching.destinations()
