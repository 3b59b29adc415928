import tomllib
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from optics.device import catalogue
from optics.device.errors import CaseError, RangeError
from optics.device.materials import Material
from optics.device.models import birefringent, cauchy, constant, lorentz_drude, pair, sellmeier

PUBLISHED = Path(__file__).parent.parent / "published"
METALS = tomllib.loads((PUBLISHED / "nk_lorentz_drude.toml").read_text(encoding="utf-8"))
GLASSES = tomllib.loads((PUBLISHED / "nk_sellmeier.toml").read_text(encoding="utf-8"))


def index(material: Material, wavelength_nm: float) -> complex:
    return complex(np.sqrt(material.permittivity([wavelength_nm])[0][0]))


def metal(name: str) -> Material:
    given_ = METALS[name]
    keys = ("plasma_eV", "f0", "gamma0_eV", "oscillators")
    return lorentz_drude(name, *(given_[key] for key in keys))


@pytest.mark.parametrize("name", ["silver", "aluminum"])
def test_lorentz_drude_reproduces_the_published_table(name: str) -> None:
    table = catalogue._table(METALS[name]["table"])
    model = np.sqrt(metal(name).permittivity(table.wavelength_nm)[0])
    deviation = np.abs(model / (table.n + 1j * table.k) - 1)
    assert deviation.max() < METALS["rtol"]


@pytest.mark.parametrize("name", ["silver", "aluminum"])
def test_plasmon_index_from_lorentz_drude(name: str) -> None:
    given_ = METALS["plasmon"]
    metallic = index(metal(name), given_["wavelength_nm"]) ** 2
    dielectric = given_["n_dielectric"] ** 2
    found = np.sqrt(metallic * dielectric / (metallic + dielectric))
    # hc = 1239.841984 against one rounded differently: 1e-8 is the printed digit.
    assert found == pytest.approx(complex(*given_[name]), abs=2e-8)


@pytest.mark.parametrize("name", GLASSES)
def test_sellmeier_gives_the_printed_index(name: str) -> None:
    glass = GLASSES[name]
    found = index(sellmeier(name, glass["b"], glass["c_um2"]), glass["wavelength_nm"])
    assert found.imag == 0
    assert abs(found.real - glass["n"]) <= glass["half_digit"]


@pytest.mark.parametrize("name", GLASSES)
def test_sampled_table_is_as_good_as_its_digits_and_steps(name: str) -> None:
    glass = GLASSES[name]
    formula = sellmeier(name, glass["b"], glass["c_um2"])
    table = catalogue._table(glass["table"])
    exact = np.sqrt(formula.permittivity(table.wavelength_nm)[0].real)
    rounding = 5e-6
    assert np.abs(exact - table.n).max() <= rounding * 1.01
    # Chord against curve: at most h²/8 times the second derivative.
    step = 5.0
    near = glass["wavelength_nm"] + np.array([-step, 0.0, step])
    low, middle, high = np.sqrt(formula.permittivity(near)[0].real)
    chord = abs(low - 2 * middle + high) / 8 * 1.1
    found = index(catalogue.load(glass["table"]), glass["wavelength_nm"]).real
    assert abs(found - glass["n"]) <= rounding + chord + glass["half_digit"]


def test_simple_models_at_values_worked_by_hand() -> None:
    assert index(constant("a", 0.1, 3.0), 550) == pytest.approx(0.1 + 3j, rel=1e-15)
    assert index(cauchy("a", [1.7, 9e3]), 500) == pytest.approx(1.7 + 9e3 / 25e4, rel=1e-15)
    third = index(cauchy("a", [1.7, 9e3, 1e9], k=0.01), 500)
    assert third == pytest.approx(1.7 + 0.036 + 1e9 / 625e8 + 0.01j, rel=1e-14)
    # b = 1, c = 0.09 at 500 nm: 1 + 0.25/0.16
    assert index(sellmeier("a", [1.0], [0.09]), 500) == pytest.approx(np.sqrt(2.5625), rel=1e-14)
    # A Drude metal without loss at half its plasma energy has ε = -3.
    half = 1239.841984 / 4.5
    assert lorentz_drude("a", 9.0, 1.0, 0.0, []).permittivity([half])[0] == pytest.approx([-3 + 0j])


def test_birefringent_numbers_and_pair_agree() -> None:
    direct = birefringent("a", 1.8, 1.66, 0.0, 0.02)
    paired = pair("b", constant("o", 1.8), constant("e", 1.66, 0.02))
    assert not direct.isotropic
    assert not paired.isotropic
    for one, other in zip(direct.permittivity([500]), paired.permittivity([500]), strict=True):
        np.testing.assert_array_equal(one, other)
    np.testing.assert_allclose(np.sqrt(direct.permittivity([500])[1]), [1.66 + 0.02j], rtol=1e-14)


def test_lossless_metals_stay_on_the_upper_side_of_the_cut() -> None:
    for material in (constant("a", 0.0, 3.0), lorentz_drude("b", 9.0, 1.0, 0.0, [])):
        assert index(material, 550).imag > 0


def test_sellmeier_refuses_resonances_and_imaginary_indices() -> None:
    glass = sellmeier("glass", [1.0], [0.16])
    with pytest.raises(RangeError) as caught:
        glass.permittivity([400.0, 600.0])
    assert str(caught.value) == (
        "material glass: wavelength_nm: found a resonance of the formula at 400 nm; "
        "expected wavelengths away from √c_um2"
    )
    with pytest.raises(RangeError, match="n² at or below 0 at 380 to 390 nm; expected n² > 0"):
        glass.permittivity([380.0, 390.0, 600.0])


@given(
    st.lists(st.tuples(st.floats(-5, 5), st.floats(0, 1)), min_size=1, max_size=4),
    st.floats(200, 2000),
)
def test_sellmeier_gives_a_lossless_index_or_refuses(
    terms: list[tuple[float, float]], wavelength_nm: float
) -> None:
    material = sellmeier("a", [b for b, _ in terms], [c for _, c in terms])
    try:
        epsilon = material.permittivity([wavelength_nm])[0][0]
    except RangeError:
        return
    assert np.isfinite(epsilon)
    assert epsilon.real > 0
    assert epsilon.imag == 0


def test_undamped_resonance_is_refused_not_nan() -> None:
    energy_eV = 1239.841984 / 500.0
    on_resonance = lorentz_drude("m", 1.0, 0.0, 0.0, [[1.0, 0.0, energy_eV]])
    with pytest.raises(RangeError, match="no passive permittivity at 500 nm"):
        on_resonance.permittivity([500.0])


def test_cauchy_refuses_a_negative_index() -> None:
    with pytest.raises(RangeError, match="a refractive index at or below 0 at 300 nm"):
        cauchy("a", [1.5, -2e5]).permittivity([300.0, 800.0])


def test_nonsense_is_refused_with_every_fault() -> None:
    with pytest.raises(CaseError) as caught:
        lorentz_drude("m", -9.0, float("nan"), 0.1, [[1.0, 2.0], [1.0, -2.0, 3.0]])
    assert str(caught.value).splitlines() == [
        "material m: lorentz_drude.plasma_eV: found -9; expected a finite number, 0 or more",
        "material m: lorentz_drude.f0: found nan; expected a finite number, 0 or more",
        "material m: lorentz_drude.oscillators[0]: found 2 numbers; "
        "expected three: f, Γ in eV, ω in eV",
        "material m: lorentz_drude.oscillators[1] Γ: found -2; expected a finite number, 0 or more",
    ]


@pytest.mark.parametrize(
    ("make", "line"),
    [
        (lambda: constant("a", -1.0), "a: n: found -1; expected a finite number, 0 or more"),
        (lambda: constant("a", 1.0, -0.1), "a: k: found -0.1; expected a finite number, 0 or more"),
        (lambda: constant("a", 0.0), "a: n: found 0 with k = 0; expected a refractive index that"),
        (lambda: cauchy("a", [1.5]), "a: cauchy_nm: found 1 coefficients; expected 2 or 3"),
        (lambda: sellmeier("a", [1.0], []), "sellmeier: found 1 values of b and 0 of c_um2"),
        (lambda: sellmeier("a", [1.0], [-1.0]), r"c_um2\[0\]: found -1; expected a finite number"),
        (
            lambda: pair("a", birefringent("b", 1.8, 1.7), constant("c", 1.5)),
            "a: ordinary: found b, which is birefringent; expected an isotropic material",
        ),
    ],
)
def test_wording_of_refusals(make: object, line: str) -> None:
    with pytest.raises(CaseError, match=line):
        make()  # type: ignore[operator]
