import pickle
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from optics.device.errors import RangeError
from optics.device.materials import Material
from optics.device.models import constant, mix, pair, tabulated
from optics.device.tables import IndexTable

positive = st.floats(0, 8)


def table(wavelength_nm: list[float], n: list[float], k: list[float], name: str = "t") -> Material:
    arrays = (np.array(wavelength_nm), np.array(n), np.array(k))
    return tabulated(
        name, IndexTable(*arrays, {"source": "S"}, f"sha of {name}", Path(f"{name}.csv"))
    )


@st.composite
def random_tables(draw: st.DrawFn) -> tuple[list[float], list[float], list[float]]:
    points = sorted(draw(st.sets(st.integers(300, 1100), min_size=2, max_size=12)))
    n = draw(st.lists(st.floats(0.01, 8), min_size=len(points), max_size=len(points)))
    k = draw(st.lists(positive, min_size=len(points), max_size=len(points)))
    return [float(point) for point in points], n, k


@given(random_tables(), st.floats(0, 1))
def test_interpolation_is_linear_and_never_overshoots(
    columns: tuple[list[float], list[float], list[float]], where: float
) -> None:
    x, n, k = columns
    material = table(x, n, k)
    wanted = x[0] + where * (x[-1] - x[0])
    index = np.sqrt(material.permittivity([wanted])[0][0])
    left = min(int(np.searchsorted(x, wanted, side="right")) - 1, len(x) - 2)
    share = (wanted - x[left]) / (x[left + 1] - x[left])
    for found, values in ((index.real, n), (index.imag, k)):
        pair_of_points = values[left], values[left + 1]
        # The square and its root cost a few roundings of |n + ik|.
        slack = 8e-16 * abs(index)
        assert min(pair_of_points) - slack <= found <= max(pair_of_points) + slack
        assert found == pytest.approx(
            (1 - share) * values[left] + share * values[left + 1], abs=1e-14 * abs(index)
        )


def test_ends_are_included_and_nothing_beyond() -> None:
    material = table([400, 500], [1.5, 1.7], [0, 0.1])
    ends = material.permittivity([400.0, 500.0])[0]
    np.testing.assert_allclose(np.sqrt(ends), [1.5, 1.7 + 0.1j], rtol=1e-15)
    # Rounding of a unit conversion, not an extrapolation: the value is that of the end.
    np.testing.assert_array_equal(material.permittivity([400 * (1 - 1e-10)])[0], ends[:1])
    for beyond in (400 * (1 - 1e-8), 500 * (1 + 1e-8)):
        assert not material.covers([450, beyond])
        with pytest.raises(RangeError):
            material.permittivity([450, beyond])


def test_range_error_names_material_range_and_request() -> None:
    pet = table([400, 1090], [1.6, 1.55], [0, 0], "pet-zhang")
    with pytest.raises(RangeError) as caught:
        pet.permittivity([380.0, 780.0])
    assert str(caught.value) == (
        "material pet-zhang: wavelength_nm: found 380 to 780 nm; "
        "expected within 400 to 1090 nm (table pet-zhang.csv)"
    )
    assert (caught.value.range_nm, caught.value.asked_nm) == ((400, 1090), (380, 780))
    again = pickle.loads(pickle.dumps(caught.value))
    assert (str(again), again.material) == (str(caught.value), "pet-zhang")


def test_range_and_tables_of_compounds_are_those_of_all_parts() -> None:
    one = table([400, 900], [1.6, 1.5], [0, 0], "one")
    two = table([300, 700], [1.6, 1.5], [0, 0], "two")
    blend = mix("blend", [(one, 0.5), (two, 0.5)])
    film = pair("film", blend, two)
    assert film.range_nm == (400, 700)
    assert [use.name for use in film.tables] == ["one.csv", "two.csv"]
    with pytest.raises(
        RangeError, match=r"within 400 to 700 nm \(table two.csv has 300 to 700 nm\)"
    ):
        film.permittivity([500.0, 800.0])


@pytest.mark.parametrize("wrong", [[-1.0], [0.0], [np.nan], [np.inf], [[500.0]], 500.0])
def test_what_is_no_list_of_wavelengths_is_refused(wrong: object) -> None:
    with pytest.raises(ValueError, match="expected 1-D, positive and finite"):
        constant("a", 1.5).permittivity(wrong)  # type: ignore[arg-type]


def test_a_material_survives_the_way_to_a_worker() -> None:
    material = pair("p", mix("m", [(table([400, 500], [1, 2], [0, 1]), 1.0)]), constant("c", 1.5))
    again = pickle.loads(pickle.dumps(material))
    for one, other in zip(material.permittivity([450]), again.permittivity([450]), strict=True):
        np.testing.assert_array_equal(one, other)
