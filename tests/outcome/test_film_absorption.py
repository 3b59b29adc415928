"""All photons end somewhere: the closure of whole devices, and what films it names."""

from __future__ import annotations

from typing import Any

import devices
import pytest

import optics
from optics.outcome.film_absorption import FilmAbsorption
from optics.outcome.modes import modes


def absorption(document: dict[str, Any]) -> FilmAbsorption:
    document["wavelength"] = {"start_nm": 500, "stop_nm": 600, "step_nm": 25}
    result = modes(devices.case(document))
    assert result.absorption is not None
    assert not any("shares by film" in warning for warning in result.warnings)
    return result.absorption


def silicon() -> dict[str, Any]:
    document = devices.pixel()
    del document["substrate"]
    document["materials"]["silicon-like"] = {"n": 4.1, "k": 0.04}
    document["surroundings"] = {"bottom": "silicon-like"}
    document["materials"]["metal"] = {"n": 0.12, "k": 3.4}
    document["layers"][-1]["thickness_nm"] = 15
    return document


def tinted_glass() -> dict[str, Any]:
    document = devices.pixel()
    document["materials"]["glass"]["k"] = 2e-6
    return document


def touching() -> dict[str, Any]:
    """The zone ends half a nanometer from the metal: near field far out."""
    document = devices.pixel()
    del document["layers"][3]
    return document


@pytest.mark.parametrize(
    "document",
    [devices.pixel(), devices.tandem(), silicon(), tinted_glass(), touching()],
    ids=["pixel", "tandem", "silicon", "tinted glass", "touching a metal"],
)
def test_shares_sum_to_one(document: dict[str, Any]) -> None:
    found = absorption(document)
    total = sum(found.films.values()) + sum(found.elsewhere.values())
    assert total == pytest.approx(1.0, abs=1e-5)
    assert found.closure_error == pytest.approx(total - 1.0, abs=1e-15)
    assert min([*found.films.values(), *found.elsewhere.values()]) >= -1e-12


def test_only_absorbing_films_absorb() -> None:
    found = absorption(devices.pixel())
    assert list(found.films) == ["ITO", "HTL", "EML", "ETL", "CAT"]
    assert {name for name, share in found.films.items() if share > 0.0} == {"ITO", "CAT"}
    assert found.elsewhere["guided"] == 0.0


def test_absorbing_surroundings_and_slabs_have_their_own_shares() -> None:
    assert absorption(silicon()).elsewhere["surroundings_bottom"] > 0.1
    tinted, clear = absorption(tinted_glass()), absorption(devices.pixel())
    assert tinted.elsewhere["substrate_absorbed"] > 0.01
    assert clear.elsewhere["substrate_absorbed"] == 0.0


def test_films_and_slab_hold_what_the_budget_calls_trapped_or_absorbed() -> None:
    document = tinted_glass()
    found = absorption(document)
    budget = optics.budget(devices.case(document)).destinations
    lost = sum(found.films.values()) + found.elsewhere["substrate_absorbed"]
    expected = sum(budget[key] or 0.0 for key in ("guided", "surface_plasmon", "absorbed"))
    assert lost == pytest.approx(expected, abs=5e-6)


def test_nothing_stays_in_a_slab_that_is_not_there() -> None:
    # At one of its wavelengths a node falls on the light line of air, where rounding decides.
    found = modes(optics.read_case("cases/green-bottom-pixel.toml")).absorption
    assert found is not None
    assert found.elsewhere["cover"] == 0.0
    assert found.elsewhere["substrate"] > 0.1
