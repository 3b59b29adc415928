from pathlib import Path

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given
from hypothesis import strategies as st

from optics.device.errors import CaseError
from optics.device.mixing import bruggeman, volume_average
from optics.device.models import birefringent, constant, mix, tabulated
from optics.device.tables import IndexTable

lossless = st.floats(1.0, 20.0)
lossy = st.builds(complex, st.floats(-40, 20), st.floats(0.05, 20))
shares = st.floats(0.02, 0.98)
Complex = npt.NDArray[np.complex128]


def effective(epsilon: list[complex], fraction: list[float]) -> complex:
    column = np.array(epsilon, dtype=complex)[:, None]
    return complex(bruggeman(column, np.array(fraction))[0])


def followed_from_average(one: complex, two: complex, f1: float, f2: float) -> complex:
    """Literal reading of the definition: track the root while the depolarization factor grows.

    Σ f (ε_i - ε)/(ε + L(ε_i - ε)) = 0 is the volume average at L = 0 and Bruggeman at L = 1/3.
    """
    root = f1 * one + f2 * two
    for L in np.linspace(0.0, 1.0 / 3.0, 4001)[1:]:
        linear = f1 * ((1 - L) * one - L * two) + f2 * ((1 - L) * two - L * one)
        half = np.sqrt(linear**2 + 4 * (1 - L) * L * one * two)
        candidates = [(linear + half) / (2 * (1 - L)), (linear - half) / (2 * (1 - L))]
        root = min(candidates, key=lambda candidate: abs(candidate - root))
    return complex(root)


@given(lossless, lossless, shares)
def test_two_dielectrics_meet_the_closed_quadratic(one: float, two: float, f: float) -> None:
    b = (3 * f - 1) * one + (3 * (1 - f) - 1) * two
    closed = (b + np.sqrt(b * b + 8 * one * two)) / 4
    found = effective([one, two], [f, 1 - f])
    assert found.imag == 0
    assert found.real == pytest.approx(closed, rel=1e-13)


@pytest.mark.parametrize("f", [0.05, 0.3, 1 / 3, 0.36, 0.5, 0.8])
@pytest.mark.parametrize(
    ("one", "two"),
    [(-11.8 + 0.4j, 3.1), (-4 + 0.05j, 2.25), (2 + 3j, 6 + 0.01j), (-44 + 15j, -2 + 0.5j)],
)
def test_root_is_the_one_continuous_from_the_volume_average(
    one: complex, two: complex, f: float
) -> None:
    found = effective([one, two], [f, 1 - f])
    assert found == pytest.approx(followed_from_average(one, two, f, 1 - f), rel=1e-9)


@given(st.lists(st.tuples(lossy, st.floats(0.01, 1)), min_size=2, max_size=9))
def test_many_components_solve_the_equation_passively(parts: list[tuple[complex, float]]) -> None:
    epsilon = np.array([part for part, _ in parts])
    fraction = np.array([share for _, share in parts])
    fraction /= fraction.sum()
    found = effective(list(epsilon), list(fraction))
    terms = fraction * (epsilon - found) / (epsilon + 2 * found)
    assert abs(terms.sum()) <= 1e-11 * np.abs(terms).max() + 1e-12
    assert found.imag >= 0


@given(st.lists(st.tuples(lossless, st.floats(0.01, 1)), min_size=2, max_size=6))
def test_dielectrics_stay_within_wiener_and_hashin_shtrikman_bounds(
    parts: list[tuple[float, float]],
) -> None:
    epsilon = np.array([part for part, _ in parts])
    fraction = np.array([share for _, share in parts])
    fraction /= fraction.sum()
    found = effective(list(epsilon), list(fraction)).real
    slack = 1e-12 * epsilon.max()
    assert 1 / (fraction / epsilon).sum() - slack <= found <= fraction @ epsilon + slack

    def coated(matrix: float) -> float:
        return float(1 / (fraction / (epsilon + 2 * matrix)).sum() - 2 * matrix)

    assert coated(epsilon.min()) - slack <= found <= coated(epsilon.max()) + slack


@given(lossy, lossy, lossy, shares, shares)
def test_order_and_splitting_of_components_change_nothing(
    one: complex, two: complex, three: complex, f: float, g: float
) -> None:
    fractions = [f * g, f * (1 - g), 1 - f]
    found = effective([one, two, three], fractions)
    assert effective([three, one, two], [1 - f, f * g, f * (1 - g)]) == pytest.approx(
        found, rel=1e-9
    )
    assert effective([one, one, three], fractions) == pytest.approx(
        effective([one, three], [f, 1 - f]), rel=1e-9
    )


@pytest.mark.parametrize("rule", [bruggeman, volume_average])
def test_limits(rule: object) -> None:
    epsilon = np.array([[-11.8 + 0.4j, 2.0], [3.1, 4.0 + 1j]])
    for fraction, expected in (([1.0, 0.0], epsilon[0]), ([0.0, 1.0], epsilon[1])):
        np.testing.assert_allclose(rule(epsilon, np.array(fraction)), expected, rtol=1e-15)  # type: ignore[operator]
    same = np.array([[2.25 + 0.1j], [2.25 + 0.1j]])
    np.testing.assert_allclose(rule(same, np.array([0.4, 0.6])), [2.25 + 0.1j], rtol=1e-14)  # type: ignore[operator]


@pytest.mark.parametrize("f", [0.05, 0.2, 0.4, 0.6, 0.9])
def test_lossless_metal_in_a_dielectric_is_the_limit_of_small_loss(f: float) -> None:
    exact = effective([-10.0, 4.0], [f, 1 - f])
    nearly = effective([-10.0 + 1e-9j, 4.0], [f, 1 - f])
    assert exact.imag >= 0
    assert exact == pytest.approx(nearly, rel=1e-7)


def test_mix_of_materials_by_both_rules() -> None:
    host, guest = constant("host", 1.7), constant("guest", 2.0, 0.1)
    parts = [(host, 0.92), (guest, 0.08)]
    average = 0.92 * 1.7**2 + 0.08 * (2.0 + 0.1j) ** 2
    linear = mix("m", parts, "linear").permittivity([500.0])[0][0]
    assert linear == pytest.approx(average, rel=1e-14)
    found = mix("m", parts).permittivity([500.0])[0][0]
    assert found == pytest.approx(
        followed_from_average(1.7**2, (2.0 + 0.1j) ** 2, 0.92, 0.08), rel=1e-9
    )


def test_mix_refusals() -> None:
    short = np.array([400.0, 450.0])
    arrays = (short, np.ones(2), np.zeros(2))
    blue = tabulated("blue", IndexTable(*arrays, {}, "", Path("blue.csv")))
    red = tabulated("red", IndexTable(short + 200, *arrays[1:], {}, "", Path("red.csv")))
    with pytest.raises(CaseError) as caught:
        mix(
            "m",
            [(birefringent("b", 1.8, 1.7), 0.5), (blue, 1.2), (red, -0.5)],
            "brugeman",  # type: ignore[arg-type]
        )
    assert str(caught.value).splitlines() == [
        "material m: mix.b: found b, which is birefringent; expected an isotropic material",
        "material m: mix.blue: found 1.2; expected a volume fraction from 0 to 1",
        "material m: mix.red: found -0.5; expected a volume fraction from 0 to 1",
        "material m: mix: found fractions that sum to 1.2; expected a sum of 1",
        "material m: mix: found b with 0 to inf nm, blue with 400 to 450 nm, "
        "red with 600 to 650 nm; expected materials with wavelengths in common",
        "material m: rule: found 'brugeman'; expected bruggeman or linear "
        "(did you mean bruggeman?)",
    ]
    with pytest.raises(CaseError, match="mix: found nothing"):
        mix("m", [])
