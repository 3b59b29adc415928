"""The light budget of a case: identities of the definitions, averages by hand, edge cases."""

from __future__ import annotations

import math
from functools import partial
from typing import Any

import numpy as np
import pytest
import xarray
from devices import case, emitter, pixel, tandem

from optics.device.zone import zone_quadrature
from optics.outcome import light
from optics.outcome.budget import Budget, budget

DESTINATIONS = (
    "air_bottom",
    "air_top",
    "substrate",
    "cover",
    "guided",
    "surface_plasmon",
    "absorbed",
)
EXACT = 1e-12
# What is summed over destinations is known to the promised accuracy of the engine.
PROMISE = 1e-6


def solved(document: dict[str, Any]) -> Budget:
    return budget(case(document))


@pytest.fixture(scope="module")
def plain() -> Budget:
    return solved(pixel())


@pytest.fixture(scope="module")
def stacked() -> Budget:
    return solved(tandem())


def test_efficiency_is_the_product_of_its_factors(stacked: Budget) -> None:
    """EQE = charge balance x share x exciton fraction x radiative x outcoupling, exactly."""
    given = tandem()
    for entry, found in zip(given["emitters"], stacked.emitters, strict=True):
        product = given["drive"]["charge_balance"][entry["unit"]]
        product *= entry.get("share", 1.0) * entry["exciton_fraction"]
        product *= found.radiative_efficiency * found.outcoupling_efficiency
        assert found.external_quantum_efficiency == pytest.approx(product, rel=EXACT)
        assert found.outcoupling_efficiency == pytest.approx(
            found.destinations["air_bottom"] + found.destinations["air_top"], rel=EXACT
        )
    total = sum(found.external_quantum_efficiency for found in stacked.emitters)
    assert stacked.external_quantum_efficiency == pytest.approx(total, rel=EXACT)
    sides = stacked.external_quantum_efficiency_bottom + stacked.external_quantum_efficiency_top
    assert sides == pytest.approx(total, rel=EXACT)


def test_parts_add_up(plain: Budget, stacked: Budget) -> None:
    for found in (plain, stacked):
        for one in found.emitters:
            assert set(one.destinations) == set(DESTINATIONS)
            assert sum(one.destinations.values()) == pytest.approx(1, abs=PROMISE)
        assert sum(v or 0.0 for v in found.destinations.values()) == pytest.approx(1, abs=PROMISE)
        for unit in found.chain:
            parts = [value for key, value in unit.items() if key != "unit"]
            assert len(parts) == 3 + len(DESTINATIONS)
            assert sum(parts) == pytest.approx(1, abs=PROMISE)


def test_chain_of_a_unit(stacked: Budget) -> None:
    lower, upper = stacked.chain
    assert (lower["unit"], upper["unit"]) == ("lower", "upper")
    assert lower["unbalanced"] == 0.0
    assert upper["unbalanced"] == pytest.approx(0.1, rel=EXACT)
    green, red, _ = stacked.emitters
    lost = 0.7 * (1 - green.radiative_efficiency) + 0.3 * (1 - red.radiative_efficiency)
    assert lower["nonradiative"] == pytest.approx(lost, rel=EXACT)
    assert lower["dark_excitons"] == 0.0
    out = sum(unit["air_bottom"] + unit["air_top"] for unit in stacked.chain)
    assert out == pytest.approx(stacked.external_quantum_efficiency, rel=EXACT)


def test_a_tandem_may_give_more_than_one_photon_per_electron(stacked: Budget) -> None:
    assert stacked.external_quantum_efficiency > 1.0
    assert max(one.external_quantum_efficiency for one in stacked.emitters) < 1.0
    assert stacked.outcoupling_efficiency is not None
    assert stacked.outcoupling_efficiency < 1.0


def test_device_destinations_weight_emitters_by_their_photons(stacked: Budget) -> None:
    given = tandem()
    weight = [
        given["drive"]["charge_balance"][entry["unit"]]
        * entry.get("share", 1.0)
        * entry["exciton_fraction"]
        * found.radiative_efficiency
        for entry, found in zip(given["emitters"], stacked.emitters, strict=True)
    ]
    for name in DESTINATIONS:
        shares = [found.destinations[name] for found in stacked.emitters]
        assert stacked.destinations[name] == pytest.approx(
            np.average(shares, weights=weight), abs=EXACT
        )


def by_hand(data: xarray.Dataset, n_o: float, n_e: float, theta: float, q: float) -> dict[str, Any]:
    """Averages of the definitions, loop by loop, from the labelled arrays."""
    b_v, b_h = n_o, (3 * n_o**2 + n_e**2) / (4 * n_o)
    names = ["F", *DESTINATIONS]
    zone = data["zone_weight"].values
    mean = {name: np.zeros(zone.size) for name in names}
    for name in names:
        for i in range(zone.size):
            for j, s in enumerate(data["spectrum_weight"].values):
                at = data[name].isel(wavelength_nm=j, position=i)
                x_v = float(at.sel(orientation="vertical"))
                x_h = float(at.sel(orientation="horizontal"))
                x = (1 - theta) * b_v * x_v + theta * b_h * x_h
                mean[name][i] += s * x / ((1 - theta) * b_v + theta * b_h)
    w = zone * q * mean["F"] / (1 - q + q * mean["F"])
    out = {name: float((w * mean[name] / mean["F"]).sum() / w.sum()) for name in DESTINATIONS}
    air = mean["air_bottom"] + mean["air_top"]
    profile = zone * q * air / (1 - q + q * mean["F"])
    return {
        "purcell_factor": float((zone * mean["F"]).sum()),
        "decay_rate_ratio": float((zone * (1 - q + q * mean["F"])).sum()),
        "radiative_efficiency": float(w.sum()),
        "destinations": out,
        "emitted_profile": profile / profile.sum(),
    }


@pytest.mark.parametrize(("n_o", "n_e"), [(1.8, 1.8), (1.8, 1.66), (1.7, 1.9)])
def test_averages_by_hand(n_o: float, n_e: float) -> None:
    """Purcell factor, yields and destinations from the spectral arrays, also birefringent."""
    document = pixel()
    document["materials"]["host"] = {"n_ordinary": n_o, "n_extraordinary": n_e}
    found = solved(document)
    one, data = found.emitters[0], found.spectral["green"]
    expected = by_hand(data, n_o, n_e, 0.76, 0.85)
    for name in ("purcell_factor", "decay_rate_ratio", "radiative_efficiency"):
        assert getattr(one, name) == pytest.approx(expected[name], rel=EXACT)
    assert dict(one.destinations) == pytest.approx(expected["destinations"], abs=EXACT)
    assert data["emitted_profile"].values == pytest.approx(expected["emitted_profile"], abs=EXACT)


def test_orientation_is_reported_in_every_convention(plain: Budget) -> None:
    one = plain.emitters[0]
    assert one.horizontal_fraction == 0.76
    assert one.vertical_fraction == pytest.approx(0.24, rel=EXACT)
    assert one.order_parameter == pytest.approx(1 - 1.5 * 0.76, rel=EXACT)


@pytest.mark.parametrize("theta", [0.0, 1.0])
def test_pure_orientations_are_the_engine_s_own(theta: float) -> None:
    found = solved(emitter(pixel(), horizontal_fraction=theta))
    data = found.spectral["green"].sel(orientation="horizontal" if theta else "vertical")
    mean = (data["F"] * data["spectrum_weight"]).sum("wavelength_nm")
    expected = float((mean * data["zone_weight"]).sum())
    assert found.emitters[0].purcell_factor == pytest.approx(expected, rel=EXACT)


def test_yield_of_one_radiates_always() -> None:
    one = solved(emitter(pixel(), quantum_yield=1.0)).emitters[0]
    assert one.radiative_efficiency == pytest.approx(1.0, rel=EXACT)
    assert one.decay_rate_ratio == pytest.approx(one.purcell_factor, rel=EXACT)


def test_yield_of_zero_is_the_limit_of_little() -> None:
    """Nothing is generated, so the device's destinations are null; the emitter's are not."""
    none = solved(emitter(pixel(), quantum_yield=0.0))
    little = solved(emitter(pixel(), quantum_yield=1e-9)).emitters[0]
    one = none.emitters[0]
    assert one.radiative_efficiency == 0.0
    assert one.decay_rate_ratio == pytest.approx(1.0, rel=EXACT)
    assert one.external_quantum_efficiency == 0.0
    assert one.purcell_factor == pytest.approx(little.purcell_factor, rel=EXACT)
    assert dict(one.destinations) == pytest.approx(dict(little.destinations), abs=1e-8)
    assert set(none.destinations.values()) == {None}
    assert none.outcoupling_efficiency is None
    assert none.external_quantum_efficiency == 0.0
    assert any("no light is generated" in text for text in none.warnings)
    assert none.chain[0]["nonradiative"] == pytest.approx(0.95 * 0.9, rel=EXACT)


def test_dark_excitons_only() -> None:
    none = solved(emitter(pixel(), exciton_fraction=0.0))
    assert set(none.destinations.values()) == {None}
    assert none.chain[0]["dark_excitons"] == pytest.approx(0.95, rel=EXACT)
    assert sum(none.emitters[0].destinations.values()) == pytest.approx(1, abs=PROMISE)


def test_line_off_the_grid_is_evaluated_exactly_there() -> None:
    line = solved(emitter(pixel(), spectrum={"line_nm": 547.3}))
    document = emitter(pixel(), spectrum={"peak_nm": 547.3, "fwhm_nm": 50})
    document["wavelength"] = {"values_nm": [547.3]}
    single = solved(document)
    data = line.spectral["green"]
    assert data["wavelength_nm"].values.tolist() == [547.3]
    assert data["spectrum_weight"].values.tolist() == [1.0]
    for one, other in zip(line.emitters, single.emitters, strict=True):
        assert one.lost_share == 0.0
        assert other.lost_share == 0.0
        assert one.purcell_factor == pytest.approx(other.purcell_factor, rel=PROMISE)
        assert dict(one.destinations) == pytest.approx(dict(other.destinations), abs=PROMISE)


@pytest.mark.parametrize(
    "zone",
    [
        {"shape": "uniform"},
        {"shape": "exponential", "from": "top", "decay_nm": 4},
        {"shape": "gaussian", "at": 0.3, "width_nm": 5},
        {"shape": "table", "table": "zone.csv"},
    ],
    ids=lambda zone: zone["shape"],
)
@pytest.mark.parametrize("layers", ["plain", "emitter at the metal"])
def test_zone_quadrature_has_converged(
    zone: dict[str, Any], layers: str, tmp_path: Any, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Four nodes more in every panel change nothing above 1e-8."""
    from optics.device.case import case_from_dict

    (tmp_path / "zone.csv").write_text("position,density\n0,0\n0.3,1\n0.5,0.4\n1,0.2\n")
    document = emitter(pixel(), zone=zone)
    document["wavelength"] = {"values_nm": [530, 550]}
    if layers != "plain":
        del document["layers"][3]
    given = case_from_dict(document, tmp_path, "my.toml")
    # The engine's own error must not show: it is asked for more than the quadrature.
    coarse = budget(given, 1e-9)
    monkeypatch.setattr(light, "zone_quadrature", partial(zone_quadrature, order=12))
    fine = budget(given, 1e-9)
    one, other = coarse.emitters[0], fine.emitters[0]
    assert one.purcell_factor == pytest.approx(other.purcell_factor, rel=1e-8)
    assert one.radiative_efficiency == pytest.approx(other.radiative_efficiency, rel=1e-8)
    assert dict(one.destinations) == pytest.approx(dict(other.destinations), abs=1e-8)


def test_a_point_is_the_limit_of_a_narrow_gaussian() -> None:
    """The difference is the curvature over the width, so it falls with its square."""
    point = solved(emitter(pixel(), zone={"shape": "point", "at": 0.4})).emitters[0]
    off = []
    for width_nm in (0.8, 0.4):
        zone = {"shape": "gaussian", "at": 0.4, "width_nm": width_nm}
        found = solved(emitter(pixel(), zone=zone)).emitters[0]
        off.append(found.destinations["air_bottom"] - point.destinations["air_bottom"])
    assert abs(off[1]) < 1e-4
    assert off[0] / off[1] == pytest.approx(4, rel=0.05)


def at_the_metal(closest_nm: float, q: float = 0.85) -> dict[str, Any]:
    document = emitter(pixel(), closest_approach_nm=closest_nm, quantum_yield=q)
    del document["layers"][3]
    document["wavelength"] = {"values_nm": [545]}
    return document


def test_zone_that_touches_an_absorber() -> None:
    """The average of F does not exist there; everything divided by it does."""
    touching = solved(at_the_metal(0.0))
    one = touching.emitters[0]
    assert one.purcell_factor is None
    assert one.decay_rate_ratio is None
    assert sum(one.destinations.values()) == pytest.approx(1, abs=PROMISE)
    assert any("reaches an absorber at the top face" in text for text in touching.warnings)
    close = solved(at_the_metal(0.02)).emitters[0]
    assert close.purcell_factor is not None
    assert one.radiative_efficiency == pytest.approx(close.radiative_efficiency, abs=2e-3)
    dark = solved(at_the_metal(0.0, q=0.0)).emitters[0]
    assert dark.purcell_factor is None
    assert dark.decay_rate_ratio == pytest.approx(1.0, rel=EXACT)


def test_matched_efficiency_is_that_of_a_matched_case(plain: Budget) -> None:
    document = pixel()
    document["substrate"]["exit"] = "matched"
    matched = solved(document)
    assert plain.external_quantum_efficiency_matched == pytest.approx(
        matched.external_quantum_efficiency_bottom, rel=PROMISE
    )
    assert matched.external_quantum_efficiency_matched == pytest.approx(
        matched.external_quantum_efficiency_bottom, rel=PROMISE
    )
    assert matched.destinations["substrate"] == 0.0


def test_matched_efficiency_needs_a_slab_on_the_brighter_side() -> None:
    document = pixel()
    del document["substrate"]
    assert solved(document).external_quantum_efficiency_matched is None


def lossless_porthole(water: bool) -> dict[str, Any]:
    document = pixel()
    document["layers"] = document["layers"][1:4]
    document["materials"]["water"] = {"n": 1.33}
    document["cover"] = {"material": "glass", "thickness_mm": 0.5}
    document["surroundings"] = {"top": "water" if water else "air"}
    return document


def test_light_between_unequal_exits_leaves_where_it_can() -> None:
    """Water above: light beyond the air line bounces until it leaves there, none is trapped."""
    air, water = solved(lossless_porthole(False)), solved(lossless_porthole(True))
    one, other = air.emitters[0].destinations, water.emitters[0].destinations
    # Slabs stand between films and surroundings, so first arrivals are the same.
    trapped = one["substrate"] + one["cover"] - other["substrate"] - other["cover"]
    gained = other["air_bottom"] + other["air_top"] - one["air_bottom"] - one["air_top"]
    assert gained == pytest.approx(trapped, abs=PROMISE)
    assert gained > 0.1
    assert other["air_top"] > one["air_top"] + gained
    assert one["absorbed"] == pytest.approx(0, abs=PROMISE)
    assert other["absorbed"] == pytest.approx(0, abs=PROMISE)
    assert other["guided"] == pytest.approx(one["guided"], abs=PROMISE)


def test_turning_the_device_over() -> None:
    """Bottom and top change places in every number."""
    document = pixel()
    document["layers"].reverse()
    document["cover"] = document.pop("substrate")
    down, up = solved(pixel()), solved(document)
    assert up.external_quantum_efficiency_top == pytest.approx(
        down.external_quantum_efficiency_bottom, rel=PROMISE
    )
    assert up.external_quantum_efficiency_matched == pytest.approx(
        down.external_quantum_efficiency_matched, rel=PROMISE
    )
    assert up.destinations["cover"] == pytest.approx(down.destinations["substrate"], abs=PROMISE)


def test_accuracy_is_met_and_balance_is_not_an_identity(plain: Budget) -> None:
    assert plain.accuracy.integration_error <= PROMISE
    assert 0.0 < plain.accuracy.energy_balance <= PROMISE
    data = plain.spectral["green"]
    total = sum(data[name] for name in DESTINATIONS)
    missing = float(abs(total / data["F"] - 1).max())
    assert plain.accuracy.energy_balance == pytest.approx(missing, rel=1e-9, abs=1e-15)


@pytest.mark.parametrize("tolerance", [0.0, 1.0, math.nan, 1e-13])
def test_tolerance_out_of_range(tolerance: float) -> None:
    with pytest.raises(ValueError, match="tolerance: found"):
        budget(case(pixel()), tolerance)
