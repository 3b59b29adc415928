"""Exact derivatives against differences: every outcome, every kind of number, bundled cases."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from devices import case as make_case
from devices import pixel, tandem
from gradient_cases import bundled, differences, question, values_of

from optics.device.address import addresses
from optics.device.case import Case
from optics.device.direction import why_not_differentiable
from optics.device.errors import CaseError
from optics.device.outcome_names import SIDES
from optics.study.evaluate import answer
from optics.study.gradient import values_and_gradient, why_no_derivative, why_no_gradient
from optics.study.outcomes import find_outcomes, outcome_names

# Step of a difference by the last words of a path: small on the scale on which outcomes vary,
# large against the engine's noise.
STEPS_NM = {"thickness_nm": 0.05, "decay_nm": 0.05, "width_nm": 0.05, "peak_nm": 0.2,
            "fwhm_nm": 0.2, "closest_approach_nm": 0.02, "at_nm": 0.1}  # fmt: skip

CASES: dict[str, tuple[list[float], list[str]]] = {
    "white-tandem": (
        [470.0, 540.0, 610.0],
        [
            "layers.ETL-yellow.thickness_nm",
            "layers.EML-blue.thickness_nm",
            "layers.cathode.thickness_nm",
            "layers.EIL.thickness_nm",
            "materials.lindenlicht-host.cauchy_nm.0",
            "materials.lindenlicht-etl-n.k",
            "emitters.blue.zone.decay_nm",
            "emitters.red.zone.at",
            "emitters.blue.exciton_fraction",
            "drive.charge_balance.yellow",
        ],
    ),
    "red-top-microcavity": (
        [600.0, 625.0, 650.0],
        [
            "layers.HTL.thickness_nm",
            "layers.EML.thickness_nm",
            "layers.cathode.thickness_nm",
            "layers.CPL.thickness_nm",
            "materials.lindenlicht-cpl.cauchy_nm.1",
            "materials.lindenlicht-red-host.cauchy_nm.0",
            "emitters.red.zone.width_nm",
            "emitters.red.spectrum.peak_nm",
            "emitters.red.order_parameter",
        ],
    ),
    "transparent-porthole": (
        [480.0, 520.0, 580.0],
        [
            "layers.cathode.thickness_nm",
            "layers.EML.thickness_nm",
            "materials.water.cauchy_nm.0",
            "materials.lindenlicht-etl.cauchy_nm.0",
            "substrate.thickness_mm",
            "emitters.aqua.spectrum.fwhm_nm",
            "emitters.aqua.vertical_fraction",
        ],
    ),
    "polymer-f8bt": (
        [530.0, 560.0, 600.0],
        [
            "layers.polymer.thickness_nm",
            "layers.HIL.thickness_nm",
            "emitters.f8bt.horizontal_fraction",
            "emitters.f8bt.zone.at",
            "emitters.f8bt.quantum_yield",
            "drive.voltage_V",
            "drive.current_density_mA_cm2",
        ],
    ),
    "silicon-microdisplay": (
        [500.0, 530.0, 560.0],
        [
            "layers.field-oxide.thickness_nm",
            "layers.anode.thickness_nm",
            "layers.planarizer.thickness_nm",
            "materials.lindenlicht-barrier-polymer.cauchy_nm.0",
            "drive.aperture_ratio",
            "drive.duty",
        ],
    ),
}


def step_of(case: Case, path: str) -> float:
    value = abs(float(case.value(path)))
    if path.startswith("materials"):
        return 1e-4 * value if value > 0.5 else 1e-2 * value
    return STEPS_NM.get(path.rpartition(".")[2], 1e-3 * max(value, 0.1))


def names_of(case: Case) -> list[str]:
    """Every outcome that has a derivative; curves at two angles."""
    names = list(outcome_names(case).plain)
    names += [f"{name}_{angle}" for name in outcome_names(case).curves for angle in (0, 55)]
    found = find_outcomes(case, {name: name for name in names})
    return [outcome.name for outcome in found if why_no_derivative(outcome) is None]


def assert_exact(case: Case, paths: list[str], names: list[str]) -> None:
    steps = {path: step_of(case, path) for path in paths}
    # The door refuses what no device has; those are moved inside first.
    asked = question(case, paths, names)
    assert not why_no_gradient(asked)
    values, gradient, reached = values_and_gradient(asked, values_of(asked))
    expected = differences(asked, steps)
    assert reached.derivative_error < 1e-8
    unit = np.array([1.0 if path.endswith("_nm") else abs(case.value(path)) for path in paths])
    # 1e-6 of the derivative; where it is small by chance, 1e-8 of the value per nm or per 100 %.
    room = 1e-6 * np.abs(expected) + 1e-8 * np.abs(values[:, None]) / unit
    wrong = np.abs(gradient - expected) > room + 1e-12
    wrong |= np.isnan(gradient) != np.isnan(expected)
    told = [
        (names[k], paths[p], gradient[k, p], expected[k, p]) for k, p in np.argwhere(wrong).tolist()
    ]
    assert not told, "\n".join(map(str, told))


@pytest.mark.slow
@pytest.mark.parametrize("stem", CASES)
def test_every_outcome_of_a_bundled_case(stem: str) -> None:
    wavelengths, paths = CASES[stem]
    case = bundled(stem, wavelengths)
    # Shares and fractions at 1 cannot be moved up; the case's own lie below.
    for path in ("drive.duty", "emitters.green.exciton_fraction"):
        if path in paths:
            case = case.replace(path, 0.8)
    assert_exact(case, paths, names_of(case))


# --- numbers that bundled cases do not have -------------------------------------------------------

ZONES: dict[str, dict[str, Any]] = {
    "uniform": {"shape": "uniform"},
    "point": {"shape": "point", "at": 0.4},
    "point from the top": {"shape": "point", "at_nm": 12.0, "from": "top"},
    "exponential": {"shape": "exponential", "from": "top", "decay_nm": 8.0},
    "gaussian": {"shape": "gaussian", "at": 0.3, "width_nm": 6.0},
}
FEW = ("external_quantum_efficiency", "emitters.green.purcell_factor", "destinations.absorbed",
       "destinations.surface_plasmon", "bottom.x_normal", "bottom.luminance_cd_m2_40")  # fmt: skip


def rich_pixel(zone: str, **substrate: Any) -> Case:
    """Return a pixel with absorbing glass, water below, birefringent and doped films."""
    document = pixel()
    document["wavelength"] = {"values_nm": [530, 570]}
    document["materials"] |= {
        "glass": {"n": 1.52, "k": 1e-8},
        "water": {"cauchy_nm": [1.3216, 4.1e3]},
        "host": {"n_ordinary": 1.80, "n_extraordinary": 1.68, "k_ordinary": 1e-4},
        "dye": {"n": 1.9, "k": 0.05},
        "etl": {"mix": {"htl": 0.9, "dye": 0.1}},
    }
    document["surroundings"] = {"bottom": "water"}
    document["substrate"] |= substrate
    document["emitters"][0] |= {"zone": ZONES[zone], "closest_approach_nm": 2.0}
    document["drive"] |= {"current_density_mA_cm2": 2.0}
    document["sides"] = {"bottom": {"polarizer_transmittance": 0.4}}
    return make_case(document)


MEDIA = [
    "materials.water.cauchy_nm.1", "materials.glass.n", "materials.glass.k", "materials.ito.k",
    "materials.host.n_ordinary", "materials.host.n_extraordinary", "materials.host.k_ordinary",
    "materials.dye.n", "materials.dye.k", "materials.metal.k", "substrate.thickness_mm",
    "sides.bottom.polarizer_transmittance",
]  # fmt: skip


@pytest.mark.parametrize("exit_kind", ["planar", "matched"])
def test_media_outside_and_inside(exit_kind: str) -> None:
    assert_exact(rich_pixel("uniform", exit=exit_kind), MEDIA, list(FEW))


@pytest.mark.parametrize("zone", ZONES)
def test_zones(zone: str) -> None:
    case = rich_pixel(zone)
    keys = [key for key in ZONES[zone] if key not in ("shape", "from")]
    paths = [f"emitters.green.zone.{key}" for key in keys]
    paths += ["layers.EML.thickness_nm", "layers.ETL.thickness_nm"]
    paths += [] if "point" in zone else ["emitters.green.closest_approach_nm"]
    assert_exact(case, paths, list(FEW))


def test_closest_approach_to_an_absorber_behind_a_thin_film() -> None:
    case = rich_pixel("uniform").replace("layers.ETL.thickness_nm", 1.0)
    case = case.replace_all({"materials.dye.k": 0.0, "emitters.green.closest_approach_nm": 3.0})
    paths = ["layers.ETL.thickness_nm", "emitters.green.closest_approach_nm"]
    assert_exact(case, paths, list(FEW))


def two_units() -> Case:
    """Return a tandem with a line, its metal far from resonance."""
    document = tandem()
    document["wavelength"] = {"values_nm": [540, 580]}
    document["materials"]["metal"] = {"n": 0.9, "k": 6.4}
    return make_case(document)


def test_lines_and_their_orientation() -> None:
    case = two_units().replace("emitters.red.horizontal_fraction", 0.7)
    paths = ["layers.CGL.thickness_nm", "emitters.red.order_parameter"]
    paths += ["drive.charge_balance.upper"]
    names = ["bottom.x_normal", "bottom.current_efficiency_cd_A", "chain.lower.guided"]
    assert_exact(case, paths, [*names, "emitters.red.order_parameter"])


def test_shares_of_a_unit_count_in_proportion() -> None:
    asked = question(
        two_units(),
        ["emitters.green.share"],
        ["external_quantum_efficiency", "emitters.green.external_quantum_efficiency"],
    )
    values, gradient, _ = values_and_gradient(asked, [0.7])
    assert gradient[:, 0] == pytest.approx(values[1] / 0.7, rel=1e-13)


def test_followers_move_with_their_leader() -> None:
    case, names = rich_pixel("uniform"), list(FEW)
    paths = ["layers.HTL.thickness_nm", "layers.ETL.thickness_nm"]
    apart = question(case.replace(paths[1], 60.0), paths, names)
    together = question(case, paths[:1], names, followers=[(paths[1], 0)])
    values, gradient, _ = values_and_gradient(apart, [60.0, 60.0])
    same, found, _ = values_and_gradient(together, [60.0])
    np.testing.assert_allclose(same, values, rtol=1e-12)
    np.testing.assert_allclose(found[:, 0], gradient.sum(axis=1), rtol=1e-7)


def test_values_are_those_of_plain_points() -> None:
    asked = question(rich_pixel("gaussian"), ["layers.ETL.thickness_nm"], list(FEW))
    values, _, reached = values_and_gradient(asked, [50.0])
    plain = answer(asked, [50.0])
    np.testing.assert_allclose(values, plain[: values.size], rtol=1e-13)
    assert reached.energy_balance == plain[values.size]
    assert reached.integration_error == plain[values.size + 1]


def test_dark_outcomes_are_not_numbers() -> None:
    case = rich_pixel("uniform").replace("drive.charge_balance", 0.0)
    names = ["outcoupling_efficiency", "bottom.x_normal", "bottom.relative_luminance_40"]
    asked = question(case, ["layers.HTL.thickness_nm"], [*names, "external_quantum_efficiency"])
    values, gradient, _ = values_and_gradient(asked, [60.0])
    assert np.isnan(values[:2]).all()
    assert np.isnan(gradient[:2]).all()
    assert values[3] == 0.0
    assert gradient[3, 0] == 0.0


# --- what has no derivative -----------------------------------------------------------------------


def test_what_has_no_derivative_says_why() -> None:
    case = rich_pixel("uniform")
    paths = ["materials.etl.mix.dye", "wavelength.values_nm.0", "layers.HTL.thickness_nm"]
    asked = question(case, paths, ["accuracy.energy_balance", "bottom.duv"])
    reasons = why_no_gradient(asked)
    assert set(reasons) == {*paths[:2], "accuracy.energy_balance", "bottom.duv"}
    assert "sum to 1" in reasons[paths[0]]
    with pytest.raises(CaseError) as caught:
        values_and_gradient(asked, values_of(asked))
    assert len(caught.value.faults) == 4


def test_every_number_of_a_case_has_a_derivative_or_a_reason() -> None:
    case = rich_pixel("gaussian")
    known, refused = set(), {}
    for path in addresses(case.document):
        if isinstance(case.value(path), int | float):
            reason = why_not_differentiable(case, path)
            if reason is None:
                known.add(path)
            else:
                refused[path] = reason
    assert set(refused) == {
        "wavelength.values_nm.0", "wavelength.values_nm.1",
        "materials.etl.mix.htl", "materials.etl.mix.dye",
    }  # fmt: skip
    assert {"layers.CAT.thickness_nm", "emitters.green.order_parameter"} <= known
    assert why_not_differentiable(case, "layers.CAT.material") == "it is no number"


def test_every_outcome_has_a_derivative_or_a_reason() -> None:
    case = rich_pixel("uniform")
    found = find_outcomes(case, {name: name for name in outcome_names(case).plain})
    reasons = {one.name: why_no_derivative(one) for one in found}
    without = {name for name, reason in reasons.items() if reason is not None}
    assert without == {"accuracy.energy_balance", "accuracy.integration_error"} | {
        f"{side}.{key}"
        for side in SIDES
        for key in (
            "peak_nm_normal", "dominant_wavelength_nm", "excitation_purity",
            "correlated_color_temperature_K", "duv", "color_rendering_index",
        )
    }  # fmt: skip
