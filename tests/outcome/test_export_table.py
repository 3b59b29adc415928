"""Outcoupling against position and wavelength: its averages are the light budget's."""

from __future__ import annotations

import numpy as np
import pytest
from devices import case, emitter, pixel, tandem

import optics
from optics.outcome.export_table import COLUMNS, coupling_by_position, coupling_frame, coupling_tree

MANY = 60


def test_sums_over_positions_are_the_budget() -> None:
    """A uniform zone fills the same cells; midpoints of 0.5 nm are good to 1e-4 of a fringe."""
    given = case(pixel())
    table, (found,) = coupling_by_position(given, "green", MANY), optics.budget(given).emitters
    q = 0.85
    assert float(table["F_average"].mean()) == pytest.approx(found.purcell_factor, rel=1e-4)
    assert float(table["decay_rate_ratio"].mean()) == pytest.approx(
        found.decay_rate_ratio, rel=1e-4
    )
    yields = float(table["effective_yield_average"].mean())
    assert yields == pytest.approx(found.radiative_efficiency, rel=1e-4)
    out = float(table["photons_out_bottom"].mean())
    assert out == pytest.approx(
        found.radiative_efficiency * found.destinations["air_bottom"], rel=1e-4
    )
    f = table["F"].to_numpy()
    assert table["effective_yield"].to_numpy() == pytest.approx(q * f / (1 - q + q * f), rel=1e-12)
    weighted = (table["F"] * table["spectrum_weight"]).sum("wavelength_nm").to_numpy()
    assert table["F_average"].to_numpy() == pytest.approx(weighted, rel=1e-12)


def test_a_point_of_the_table_is_a_point_emitter() -> None:
    table = coupling_by_position(case(pixel()), "green", 3)
    at = float(table["position_nm"][1])
    assert at == pytest.approx(15.0)
    point = case(emitter(pixel(), zone={"shape": "point", "at_nm": at, "from": "bottom"}))
    outcome = optics.budget(point)
    assert float(table["F_average"][1]) == pytest.approx(outcome.emitters[0].purcell_factor)
    data = outcome.spectral["green"]
    # Both orientations over one bulk rate: the host is isotropic.
    by_orientation = data["air_bottom"].isel(position=0)
    flat, upright = (by_orientation.sel(orientation=one) for one in ("horizontal", "vertical"))
    share = (0.76 * flat + 0.24 * upright).to_numpy()
    assert table["U_bottom"][1].to_numpy() == pytest.approx(share, rel=1e-5)


def test_cells_leave_out_what_lies_close_to_an_absorber() -> None:
    document = pixel()
    document["layers"][2:4] = [document["layers"][2]]  # the metal stands on the emitting film
    document["emitters"][0]["closest_approach_nm"] = 2.0
    table = coupling_by_position(case(document), "green", 7)
    assert (table.attrs["first_nm"], table.attrs["last_nm"]) == (0.0, 28.0)
    assert table["position_nm"].to_numpy() == pytest.approx(4.0 * np.arange(7) + 2.0)
    assert table["stack_position_nm"].to_numpy() == pytest.approx(4.0 * np.arange(7) + 172.0)


def test_no_photons_means_no_light_but_a_rate() -> None:
    table = coupling_by_position(case(emitter(pixel(), quantum_yield=0.0)), "green", 2)
    assert np.all(table["decay_rate_ratio"] == 1.0)
    assert np.all(table["effective_yield"] == 0.0)
    assert np.all(table["photons_out_bottom"] == 0.0)
    assert np.all(table["F"] > 0.0)


def test_every_emitter_has_its_rows_units_and_group() -> None:
    given = case(tandem())
    tables = {one.name: coupling_by_position(given, one.name, 2) for one in given.emitters}
    frame = coupling_frame(tables)
    assert list(frame.columns) == ["emitter", "layer", *[name for name, _, _ in COLUMNS]]
    count = frame.groupby("emitter").size()
    # A line has one wavelength, the others the case's thirteen.
    assert count.to_dict() == {"green": 26, "red": 2, "upper-green": 26}
    assert not frame.isna().to_numpy().any()
    tree = coupling_tree(given, tables)
    assert set(tree.children) == set(tables)
    assert tree.attrs["case_sha256"] == given.sha256
    assert all(one.attrs["units"] for one in tree["green"].data_vars.values())


def test_impossible_questions_are_told() -> None:
    given = case(pixel())
    with pytest.raises(ValueError, match="positions: found 0; expected 1 or more"):
        coupling_by_position(given, "green", 0)
    with pytest.raises(KeyError, match="mauve"):
        coupling_by_position(given, "mauve")
