"""Zones: quadrature, nearness to absorbers."""

from __future__ import annotations

import math
import pickle

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from optics.device import models
from optics.device.emitter import Emitter
from optics.device.spectrum import LineSpectrum
from optics.device.stack import Film, Slab, Stack
from optics.device.zone import (
    EmptyZoneError,
    ExponentialZone,
    GaussianZone,
    PointZone,
    TableZone,
    UniformZone,
    Zone,
    absorber_distances,
    unbounded_faces,
    zone_interval,
    zone_quadrature,
)

INF = math.inf
FREE = (INF, INF)
WAVELENGTH_NM = np.array([500.0, 600.0])


def table_zone(points: list[float], values: list[float], *, relative: bool = True) -> TableZone:
    return TableZone.from_table(np.array(points), np.array(values), relative=relative)


def mean_nm(zone: Zone, thickness: float, interval: tuple[float, float] | None = None) -> float:
    position, weight = zone_quadrature(zone, thickness, interval or (0.0, thickness))
    return float(weight @ position)


# --- analytic means -------------------------------------------------------------------------------


def test_uniform() -> None:
    assert mean_nm(UniformZone(), 24.0) == pytest.approx(12.0, rel=1e-14)
    assert mean_nm(UniformZone(), 24.0, (0.5, 20.0)) == pytest.approx(10.25, rel=1e-14)


@pytest.mark.parametrize("decay", [0.05, 1.0, 7.0, 1e6])
def test_exponential(decay: float) -> None:
    # Mean of a truncated exponential: decay - d/(exp(d/decay) - 1).
    thickness = 24.0
    ratio = thickness / decay
    expected = decay - thickness / math.expm1(ratio) if ratio > 1e-3 else thickness / 2
    tolerance = 1e-10 if ratio > 1e-3 else ratio
    assert mean_nm(ExponentialZone("bottom", decay), thickness) == pytest.approx(
        expected, rel=tolerance
    )
    assert mean_nm(ExponentialZone("top", decay), thickness) == pytest.approx(
        thickness - expected, rel=tolerance
    )


@pytest.mark.parametrize(("at", "width"), [(0.5, 3.0), (0.0, 4.0), (1.0, 0.2), (0.3, 100.0)])
def test_gaussian(at: float, width: float) -> None:
    # Mean of a truncated normal: center + width (phi(a) - phi(b))/(Phi(b) - Phi(a)).
    thickness = 24.0
    low, high = -at * thickness / width, (1 - at) * thickness / width
    phi = [math.exp(-(x**2) / 2) / math.sqrt(2 * math.pi) for x in (low, high)]
    share = (math.erf(high / math.sqrt(2)) - math.erf(low / math.sqrt(2))) / 2
    expected = at * thickness + width * (phi[0] - phi[1]) / share
    assert mean_nm(GaussianZone(at, width), thickness) == pytest.approx(expected, rel=1e-9)


def test_gaussian_of_which_only_the_far_tail_is_left() -> None:
    # 50 standard deviations off: locally an exponential of decay width²/offset, to 1/50² or so.
    mean = mean_nm(GaussianZone(0.0, 0.01), 24.0, (0.5, 24.0))
    assert mean - 0.5 == pytest.approx(0.01**2 / 0.5, rel=2e-3)


def test_table() -> None:
    # Density 1 + 2x on 0 to 1: mean (1/2 + 2/3)/2.
    assert mean_nm(table_zone([0, 1], [1, 3]), 24.0) == pytest.approx(24 * 7 / 12, rel=1e-14)
    # Triangle from 5 to 11 nm with its peak at 8, zero elsewhere; then cut at the film's top.
    triangle = table_zone([5, 8, 11], [0, 1, 0], relative=False)
    assert mean_nm(triangle, 24.0) == pytest.approx(8.0, rel=1e-14)
    assert mean_nm(triangle, 8.0) == pytest.approx(7.0, rel=1e-14)
    step = table_zone([6, 10], [1, 1], relative=False)
    assert mean_nm(step, 24.0) == pytest.approx(8.0, rel=1e-14)


@pytest.mark.parametrize(
    ("zone", "position"),
    [
        (PointZone(at=0.25), 6.0),
        (PointZone(at=0.0), 0.0),
        (PointZone(at_nm=5.0, start="bottom"), 5.0),
        (PointZone(at_nm=5.0, start="top"), 19.0),
    ],
)
def test_point_is_one_node(zone: PointZone, position: float) -> None:
    node, weight = zone_quadrature(zone, 24.0, (1.0, 2.0))
    assert node.tolist() == [position]
    assert weight.tolist() == [1.0]


# --- quadrature -----------------------------------------------------------------------------------


@pytest.mark.parametrize("singular", [0.0, 0.5, 3.0])
def test_inverse_cube_of_the_distance_to_an_absorber(singular: float) -> None:
    # What a dipole loses to an absorber at small distance; the interval keeps it 0.5 nm away.
    low, thickness = max(0.0, 0.5 - singular), 24.0
    position, weight = zone_quadrature(
        UniformZone(), thickness, (low, thickness), (singular, INF), 150.0
    )
    near, far = low + singular, thickness + singular
    expected = (near**-2 - far**-2) / (2 * (thickness - low))
    assert weight @ (position + singular) ** -3.0 == pytest.approx(expected, rel=1e-9)
    mirrored, _ = zone_quadrature(
        UniformZone(), thickness, (0.0, thickness - low), (INF, singular), 150.0
    )
    assert_allclose(np.sort(thickness - mirrored), position, rtol=1e-9)


def test_one_wave_per_panel_is_resolved_and_order_refines() -> None:
    errors = []
    for order in (6, 8, 10):
        position, weight = zone_quadrature(UniformZone(), 450.0, (0.0, 450.0), FREE, 150.0, order)
        errors.append(abs(weight @ np.cos(2 * math.pi * position / 150.0 + 0.3)))
    assert errors[1] < 1e-9
    assert errors[0] > errors[1] > errors[2]


def test_few_nodes_where_little_happens() -> None:
    assert zone_quadrature(UniformZone(), 24.0, (0.0, 24.0), (40.0, 60.0), 150.0)[0].size <= 10
    assert zone_quadrature(UniformZone(), 24.0, (0.5, 24.0), (0.0, 60.0), 150.0)[0].size <= 60
    assert zone_quadrature(UniformZone(), 24.0, (0.0, 24.0), (0.0, 0.0), 150.0)[0].size <= 260


def test_panels_grade_down_at_an_absorber_that_touches() -> None:
    position, _ = zone_quadrature(UniformZone(), 24.0, (0.0, 24.0), (0.0, INF), 150.0)
    assert position[0] < 1e-3
    assert 24.0 - position[-1] > 1e-2


@pytest.mark.parametrize(
    ("zone", "interval"),
    [
        (UniformZone(), (12.0, 12.0)),
        (UniformZone(), (13.0, 12.0)),
        (table_zone([0.0, 0.1], [1, 1]), (6.0, 24.0)),
        (table_zone([0.0, 1.0], [0, 0]), (0.0, 24.0)),
        (table_zone([30, 40], [1, 1], relative=False), (0.0, 24.0)),
    ],
)
def test_empty_zones_are_refused(zone: Zone, interval: tuple[float, float]) -> None:
    with pytest.raises(EmptyZoneError):
        zone_quadrature(zone, 24.0, interval)


def zones() -> st.SearchStrategy[Zone]:
    face = st.sampled_from(["top", "bottom"])
    length = st.floats(1e-3, 1e4)
    values = st.lists(st.floats(0.01, 1), min_size=2, max_size=12)
    return st.one_of(
        st.just(UniformZone()),
        st.builds(ExponentialZone, face, length),
        st.builds(GaussianZone, st.floats(0, 1), length),
        values.map(lambda y: table_zone(np.linspace(0, 1, len(y)).tolist(), y)),
    )


@given(
    zones(),
    st.floats(0.6, 500),
    st.sampled_from([0.0, 0.3, 20.0, INF]),
    st.sampled_from([0.0, 0.3, 20.0, INF]),
    st.sampled_from([60.0, 150.0]),
    st.sampled_from([0.0, 0.2]),
)
@example(GaussianZone(0.9999999999999999, 1.0), 2.00001, 0.0, 0.0, 60.0, 0.0)
def test_weights_are_a_distribution_inside_the_interval(
    zone: Zone, thickness: float, below: float, above: float, scale: float, cut: float
) -> None:
    interval = (cut, thickness - cut)
    position, weight = zone_quadrature(zone, thickness, interval, (below, above), scale)
    assert np.all(weight >= 0)
    assert weight.sum() == pytest.approx(1.0, rel=1e-13)
    assert np.all((position > interval[0]) & (position < interval[1]))
    assert np.all(np.diff(position) > 0)
    finer_position, finer_weight = zone_quadrature(
        zone, thickness, interval, (below, above), scale, 12
    )
    assert weight @ position == pytest.approx(finer_weight @ finer_position, rel=1e-8)


# --- nearness to absorbers ------------------------------------------------------------------------

CLEAR = models.constant("clear", 1.8)
LOSSY = models.constant("lossy", 1.8, 0.01)
GLASS = models.constant("glass", 1.5, 1e-6)


def film(material: models.Material, thickness: float) -> Film:
    return Film(f"{material.name}-{thickness:g}", material, thickness)


def emitter_in(index: int, zone: Zone, closest: float = 0.5) -> Emitter:
    return Emitter(
        "green", "EML", index, "device", LineSpectrum(550.0), zone, closest, 0.7, 0.9, 1.0, 1.0
    )


@pytest.mark.parametrize(
    ("films", "index", "bottom", "slab", "expected"),
    [
        ([LOSSY, LOSSY, LOSSY], 1, CLEAR, False, (0.0, 0.0)),
        ([CLEAR, LOSSY, CLEAR], 1, CLEAR, False, (INF, INF)),
        ([LOSSY, CLEAR, CLEAR, CLEAR, LOSSY], 2, CLEAR, False, (10.0, 10.0)),
        ([CLEAR, CLEAR, LOSSY], 1, LOSSY, False, (10.0, 0.0)),
        ([CLEAR, CLEAR, LOSSY], 1, CLEAR, True, (INF, 0.0)),
        ([CLEAR], 0, LOSSY, False, (0.0, INF)),
    ],
)
def test_absorber_distances(
    films: list[models.Material],
    index: int,
    bottom: models.Material,
    slab: bool,
    expected: tuple[float, float],
) -> None:
    substrate = Slab(GLASS, 0.7, "planar") if slab else None
    layers = tuple(film(material, 10.0) for material in films)
    stack = Stack(layers, substrate, None, bottom, CLEAR)
    assert absorber_distances(stack, index, WAVELENGTH_NM) == expected


def test_absorbing_film_of_zero_thickness_is_as_good_as_absent() -> None:
    stack = Stack((film(LOSSY, 0.0), film(CLEAR, 10.0)), None, None, CLEAR, CLEAR)
    assert absorber_distances(stack, 1, WAVELENGTH_NM) == (INF, INF)


def test_interval_keeps_the_closest_approach() -> None:
    films = (film(LOSSY, 5.0), film(CLEAR, 0.3), film(LOSSY, 24.0), film(LOSSY, 5.0))
    stack = Stack(films, None, None, CLEAR, CLEAR)
    uniform = emitter_in(2, UniformZone())
    assert zone_interval(stack, uniform, WAVELENGTH_NM) == pytest.approx((0.2, 23.5), rel=1e-14)
    touching = emitter_in(2, UniformZone(), 0.0)
    assert zone_interval(stack, touching, WAVELENGTH_NM) == (0.0, 24.0)


def test_unbounded_faces() -> None:
    films = (film(LOSSY, 5.0), film(CLEAR, 24.0), film(LOSSY, 5.0))
    stack = Stack(films, None, None, CLEAR, CLEAR)

    def faces(zone: Zone, closest: float) -> tuple[str, ...]:
        return unbounded_faces(stack, emitter_in(1, zone, closest), WAVELENGTH_NM)

    assert faces(UniformZone(), 0.5) == ()
    assert faces(UniformZone(), 0.0) == ("bottom", "top")
    assert faces(PointZone(at=0.5), 0.0) == ()
    assert faces(table_zone([0.0, 0.5], [1, 1]), 0.0) == ("bottom",)
    assert faces(table_zone([0.2, 0.5], [1, 1]), 0.0) == ()


def test_zones_survive_pickling() -> None:
    zone = table_zone([0, 1], [1, 3])
    copied = pickle.loads(pickle.dumps(zone))
    assert not copied.points.flags.writeable
    assert mean_nm(copied, 24.0) == mean_nm(zone, 24.0)
