"""Results in their containers: the JSON of the contract, the table, the labelled arrays."""

from __future__ import annotations

import dataclasses
import json
import math
from typing import Any

import pytest
import xarray
from devices import case, emitter, pixel, tandem

from optics import __version__
from optics.outcome.budget import Budget, budget

DESTINATIONS = [
    "air_bottom",
    "air_top",
    "substrate",
    "cover",
    "guided",
    "surface_plasmon",
    "absorbed",
]
EMITTER_KEYS = [
    "name",
    "unit",
    "purcell_factor",
    "decay_rate_ratio",
    "radiative_efficiency",
    "outcoupling_efficiency",
    "horizontal_fraction",
    "vertical_fraction",
    "order_parameter",
    "near_field_share",
    "lost_share",
    "destinations",
    "external_quantum_efficiency",
]
KEYS = [
    "schema",
    "version",
    "title",
    "case_sha256",
    "emitters",
    "outcoupling_efficiency",
    "destinations",
    "chain",
    "external_quantum_efficiency",
    "external_quantum_efficiency_bottom",
    "external_quantum_efficiency_top",
    "external_quantum_efficiency_matched",
    "accuracy",
    "warnings",
]


@pytest.fixture(scope="module")
def result() -> Budget:
    return budget(case(tandem()))


@pytest.fixture(scope="module")
def dark() -> Budget:
    """Nothing generated, no slab: every null there can be."""
    document = emitter(pixel(), quantum_yield=0.0)
    document["wavelength"] = {"values_nm": [540, 550]}
    del document["substrate"]
    return budget(case(document))


def test_keys_are_those_promised(result: Budget) -> None:
    found = result.to_dict()
    assert set(KEYS) <= set(found)
    assert found["schema"] == "outcouple.budget/1"
    assert found["version"] == __version__
    assert found["title"] == "invented pixel"
    assert len(found["case_sha256"]) == 64
    for entry in found["emitters"]:
        assert set(EMITTER_KEYS) <= set(entry)
        assert list(entry["destinations"]) == DESTINATIONS
    assert list(found["destinations"]) == DESTINATIONS
    for unit in found["chain"]:
        assert list(unit) == ["unit", "unbalanced", "dark_excitons", "nonradiative", *DESTINATIONS]
    assert set(found["accuracy"]) >= {"energy_balance", "integration_error"}


def test_plain_json_without_nan(result: Budget, dark: Budget) -> None:
    for found in (result, dark):
        text = json.dumps(found.to_dict(), allow_nan=False)
        assert json.loads(text) == found.to_dict()
    assert dark.to_dict()["destinations"] == dict.fromkeys(DESTINATIONS)
    assert dark.to_dict()["external_quantum_efficiency_matched"] is None


def test_results_are_immutable(result: Budget) -> None:
    with pytest.raises(dataclasses.FrozenInstanceError):
        result.external_quantum_efficiency = 1.0  # type: ignore[misc]
    with pytest.raises(TypeError):
        result.destinations["guided"] = 0.0  # type: ignore[index]
    with pytest.raises(TypeError):
        result.emitters[0].destinations["guided"] = 0.0  # type: ignore[index]
    with pytest.raises(TypeError):
        result.chain[0]["guided"] = 0.0  # type: ignore[index]
    # A dictionary or Dataset handed out is the reader's own.
    result.to_dict()["destinations"]["guided"] = -1.0
    assert result.to_dict()["destinations"]["guided"] != -1.0
    del result.spectral["green"]["guided"]
    assert "guided" in result.spectral["green"]


def test_spectral_arrays_are_labelled(result: Budget) -> None:
    assert list(result.spectral) == ["green", "red", "upper-green"]
    data = result.spectral["green"]
    for name in ["F", *DESTINATIONS]:
        assert data[name].dims == ("wavelength_nm", "position", "orientation")
        assert data[name].attrs["units"] == "1"
    assert set(data["orientation"].to_numpy().tolist()) == {"horizontal", "vertical"}
    assert data["wavelength_nm"].attrs["units"] == "nm"
    assert data["position_nm"].attrs["units"] == "nm"
    assert data["position_nm"].dims == ("position",)
    assert data["wavelength_nm"].to_numpy().tolist() == [490.0 + 10 * i for i in range(13)]
    for name in ("zone_weight", "emitted_profile"):
        assert data[name].dims == ("position",)
        assert float(data[name].sum()) == pytest.approx(1, rel=1e-12)
    assert ((data["position_nm"] > 0) & (data["position_nm"] < 30)).all()
    total = sum(data[name] for name in DESTINATIONS)
    assert float(abs(total / data["F"] - 1).max()) <= 1e-6


def flat(found: dict[str, Any]) -> dict[tuple[str, str, str], float | None]:
    """Every number of the JSON, by place."""
    rows: dict[tuple[str, str, str], float | None] = {}
    for key, value in found.items():
        if value is None or isinstance(value, float):
            rows["device", "", key] = value
    rows |= {("device", "", f"destinations.{k}"): v for k, v in found["destinations"].items()}
    rows |= {("accuracy", "", k): v for k, v in found["accuracy"].items()}
    for unit in found["chain"]:
        rows |= {("unit", unit["unit"], f"chain.{k}"): v for k, v in unit.items() if k != "unit"}
    for one in found["emitters"]:
        for key, value in one.items():
            if key == "destinations":
                rows |= {("emitter", one["name"], f"{key}.{k}"): v for k, v in value.items()}
            elif key not in ("name", "unit"):
                rows["emitter", one["name"], key] = value
    return rows


@pytest.mark.parametrize("which", ["result", "dark"])
def test_the_table_holds_every_number(which: str, request: pytest.FixtureRequest) -> None:
    found: Budget = request.getfixturevalue(which)
    frame = found.to_frame()
    assert list(frame.columns) == ["scope", "name", "quantity", "value", "unit"]
    rows = {
        (row.scope, row.name_, row.quantity): None if math.isnan(row.value) else row.value
        for row in frame.rename(columns={"name": "name_"}).itertuples()
    }
    assert len(rows) == len(frame)
    assert rows == flat(found.to_dict())


def test_the_table_survives_csv(result: Budget, tmp_path: Any) -> None:
    import pandas

    frame = result.to_frame()
    frame.to_csv(tmp_path / "budget.csv", index=False)
    back = pandas.read_csv(
        tmp_path / "budget.csv", keep_default_na=False, dtype={"unit": str, "value": float}
    )
    assert back["value"].tolist() == frame["value"].tolist()
    for column in ("scope", "name", "quantity", "unit"):
        assert back[column].tolist() == frame[column].tolist()


def test_the_tree_survives_a_file(result: Budget, tmp_path: Any) -> None:
    tree = result.to_tree()
    tree.to_netcdf(tmp_path / "budget.nc", engine="h5netcdf")
    with xarray.open_datatree(tmp_path / "budget.nc", engine="h5netcdf") as back:
        for name, data in result.spectral.items():
            xarray.testing.assert_identical(
                back[f"emitters/{name}"].to_dataset(inherit=False).load(), data
            )
        found = result.to_dict()
        for i, one in enumerate(found["emitters"]):
            assert float(back["emitter_purcell_factor"][i]) == one["purcell_factor"]
            shares = back["emitter_destinations"][i].to_numpy().tolist()
            assert shares == list(one["destinations"].values())
        for i, unit in enumerate(found["chain"]):
            assert back["chain"][i].to_numpy().tolist() == list(unit.values())[1:]
            assert str(back["unit"].to_numpy()[i]) == unit["unit"]
        assert back.attrs["case_sha256"] == found["case_sha256"]
        assert back.attrs["energy_balance"] == found["accuracy"]["energy_balance"]


def test_nulls_are_nan_in_arrays_only(dark: Budget) -> None:
    tree = dark.to_tree()
    assert all(math.isnan(value) for value in tree["destinations"].to_numpy())
    assert math.isnan(float(tree["external_quantum_efficiency_matched"]))
    assert dark.external_quantum_efficiency_matched is None
