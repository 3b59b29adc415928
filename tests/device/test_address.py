"""Dotted addresses of values in a case."""

from __future__ import annotations

import pytest
from case_examples import changed, plain_document

from optics.device.address import addresses
from optics.device.case import Case, case_from_dict
from optics.device.errors import CaseError


@pytest.fixture
def case() -> Case:
    return case_from_dict(plain_document(), label="my.toml")


@pytest.mark.parametrize(
    ("path", "value"),
    [
        ("layers.ETL.thickness_nm", 50),
        ("materials.htl-a.n", 1.79),
        ("materials.htl-a.k", 0),
        ("materials.htl-c.cauchy_nm.1", 9000),
        ("materials.metal.lorentz_drude.oscillators.0.2", 0.816),
        ("materials.doped.mix.htl-c", 0.08),
        ("substrate.thickness_mm", 0.7),
        ("wavelength.step_nm", 5),
        ("drive.voltage_V", 5.2),
        ("drive.charge_balance", 0.9),
        ("drive.charge_balance.device", 0.9),
        ("sides.bottom.polarizer_transmittance", 1),
        ("emitters.green.spectrum.peak_nm", 575),
        ("emitters.green.closest_approach_nm", 0.5),
        ("emitters.green.horizontal_fraction", 0.76),
        ("emitters.green.vertical_fraction", 0.24),
        ("emitters.green.order_parameter", -0.14),
    ],
)
def test_values(case: Case, path: str, value: float) -> None:
    assert case.value(path) == pytest.approx(value, rel=1e-12)
    assert path in addresses(case.document) or path == "drive.charge_balance.device"


@pytest.mark.parametrize(
    ("path", "near"),
    [
        ("layers.ETL.thickness", "layers.ETL.thickness_nm"),
        ("layers.ELT.thickness_nm", "layers.ETL.thickness_nm"),
        ("emitters.gren.share", "emitters.green.share"),
        ("material.htl-a.n", "materials.htl-a.n"),
        ("layers.2.thickness_nm", "layers.EML.thickness_nm"),
        ("emitters.green.spectrum.peak_nm.horizontal_fraction", None),
        ("sweep.axes", None),
        ("layers", None),
        ("", None),
        ("drive.charge_balance.upper", None),
    ],
)
def test_unknown_addresses(case: Case, path: str, near: str | None) -> None:
    for action in (lambda: case.value(path), lambda: case.replace(path, 1.0)):
        with pytest.raises(CaseError) as error:
            action()
        (fault,) = error.value.faults
        assert (fault.where, fault.key, fault.found) == ("my.toml", path, "no such address")
        if near is not None:
            assert fault.near is not None
            assert fault.near.split(".")[-1] == near.split(".")[-1]
            assert fault.near.split(".")[0] == near.split(".")[0]


@pytest.mark.parametrize(
    ("path", "value", "horizontal"),
    [
        ("horizontal_fraction", 0.9, 0.9),
        ("vertical_fraction", 0.1, 0.9),
        ("order_parameter", -0.35, 0.9),
    ],
)
@pytest.mark.parametrize("given", ["horizontal_fraction", "vertical_fraction", "order_parameter"])
def test_orientation_numbers_are_interchangeable(
    given: str, path: str, value: float, horizontal: float
) -> None:
    document = changed("emitters/0/horizontal_fraction", None)
    document["emitters"][0][given] = 0.5
    case = case_from_dict(document).replace(f"emitters.green.{path}", value)
    assert case.emitters[0].horizontal_fraction == pytest.approx(horizontal, rel=1e-12)
    assert case.value(f"emitters.green.{path}") == value


def test_values_absent_from_the_file_can_be_set(case: Case) -> None:
    document = plain_document()
    del document["drive"]
    assert case_from_dict(document).replace("drive.voltage_V", 4.0).drive.voltage_V == 4.0


def test_one_charge_balance_opens_into_units(case: Case) -> None:
    lower = plain_document()
    lower["emitters"][0]["unit"] = "lower"
    upper = {**lower["emitters"][0], "name": "red", "unit": "upper"}
    lower["emitters"].append(upper)
    tandem = case_from_dict(lower)
    assert tandem.units == ("lower", "upper")
    assert dict(tandem.replace("drive.charge_balance.upper", 0.5).drive.charge_balance) == {
        "lower": 0.9,
        "upper": 0.5,
    }
    assert tandem.value("drive.charge_balance") == 0.9
