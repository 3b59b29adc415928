"""Planted faults of layers, emitters and drive, each with its exact line."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from case_examples import changed, faults_of

from optics.device.catalogue import spectra_names

# path of the change, new value (None removes), the one line that has to come of it
ONE_FAULT: list[tuple[str, Any, str]] = [
    # layers
    ("layers", None, "layers: found nothing; expected at least one [[layers]]"),
    ("emitters", [], "emitters: found a list of 0; expected at least 1"),
    (
        "layers/3/thickness_nm",
        None,
        "layers.ETL.thickness_nm: found nothing; expected thickness in nm, at least 0",
    ),
    (
        "layers/3/thickness_nm",
        -2,
        "layers.ETL.thickness_nm: found -2; expected a number from 0 to 1e+07",
    ),
    (
        "layers/2/thickness_nm",
        0,
        "layers.EML.thickness_nm: found 0; expected above 0 nm, since green emits in this layer",
    ),
    (
        "layers/3/name",
        "HTL",
        'layers[3].name: found "HTL" again, already the name of layers[1]; expected a name of its '
        "own",
    ),
    (
        "layers/3/name",
        "E T L",
        'layers.E T L.name: found "E T L"; expected letters, digits, _ and - only',
    ),
    (
        "layers/3/material",
        "htl-aa",
        'layers.ETL.material: found "htl-aa", no such material; expected a material of '
        "[materials] or of the catalogue (did you mean htl-a?)",
    ),
    # emitters
    (
        "emitters/0/layer",
        "EMLL",
        'emitters.green.layer: found "EMLL", no such layer; expected the name of a layer: ITO, '
        "HTL, EML, ETL, CAT (did you mean EML?)",
    ),
    (
        "emitters/0/layer",
        "CAT",
        'emitters.green.layer: found "CAT" of metal, a metal at 450 nm; expected a layer whose '
        "permittivity has a real part above 0",
    ),
    (
        "emitters/0/horizontal_fraction",
        1.2,
        "emitters.green.horizontal_fraction: found 1.2; expected a number from 0 to 1",
    ),
    (
        "emitters/0/order_parameter",
        0.1,
        "emitters.green.order_parameter: found 0.1 beside horizontal_fraction; expected one of "
        "horizontal_fraction, vertical_fraction, order_parameter",
    ),
    (
        "emitters/0/quantum_yield",
        1.01,
        "emitters.green.quantum_yield: found 1.01; expected a number from 0 to 1",
    ),
    (
        "emitters/0/share",
        0.5,
        "emitters: found shares 0.5 = 0.5 in unit device (green); expected shares that sum to 1 "
        "within each unit",
    ),
    (
        "emitters/0/spectrum",
        {"peak_nm": 524, "fwhm_nm": 58, "line_nm": 520},
        "emitters.green.spectrum: found a table with peak_nm, fwhm_nm, line_nm; expected exactly "
        "one of: peak_nm with fwhm_nm, line_nm, table with quantity",
    ),
    (
        "emitters/0/spectrum",
        {"table": spectra_names()[0]},
        'emitters.green.spectrum.quantity: found nothing; expected "photons" or "power", per nm',
    ),
    (
        "emitters/0/zone",
        {"shape": "unifrom"},
        'emitters.green.zone.shape: found "unifrom"; expected one of uniform, point, exponential, '
        "gaussian, table (did you mean uniform?)",
    ),
    (
        "emitters/0/zone",
        {"at": 0.5},
        "emitters.green.zone.shape: found nothing; expected one of uniform, point, exponential, "
        "gaussian, table",
    ),
    (
        "emitters/0/zone",
        {"shape": "point", "at": 1.2},
        "emitters.green.zone.at: found 1.2; expected a number from 0 to 1",
    ),
    (
        "emitters/0/zone",
        {"shape": "point"},
        "emitters.green.zone: found neither at nor at_nm; expected either at, or at_nm with from",
    ),
    (
        "emitters/0/zone",
        {"shape": "point", "at_nm": 3},
        "emitters.green.zone: found at_nm without from; expected either at, or at_nm with from",
    ),
    (
        "emitters/0/zone",
        {"shape": "point", "at_nm": 24.5, "from": "top"},
        "emitters.green.zone.at_nm: found 24.5; expected a position inside its film, 0 to 24",
    ),
    (
        "emitters/0/zone",
        {"shape": "exponential", "from": "left", "decay_nm": 5},
        'emitters.green.zone.from: found "left"; expected one of "top", "bottom"',
    ),
    (
        "emitters/0/zone",
        {"shape": "gaussian", "at": 0.5, "width_nm": 0},
        "emitters.green.zone.width_nm: found 0; expected a number of at least 1e-06",
    ),
    # drive
    (
        "drive/charge_balance",
        {"upper": 1.0, "device": 0.9},
        'drive.charge_balance.upper: found a value for "upper", no such unit; expected a unit of '
        "the emitters: device",
    ),
    (
        "drive/charge_balance",
        {},
        "drive.charge_balance.device: found nothing; expected a charge balance for every unit",
    ),
    ("drive/duty", 0, "drive.duty: found 0; expected a number above 0 and of at most 1"),
    (
        "drive/current_density_mA_cm2",
        -1,
        "drive.current_density_mA_cm2: found -1; expected a number above 0",
    ),
    (
        "drive/voltage_v",
        5,
        "drive.voltage_v: found unknown key with 5; expected one of charge_balance, "
        "current_density_mA_cm2, voltage_V, aperture_ratio, duty (did you mean voltage_V?)",
    ),
]


@pytest.mark.parametrize(("path", "value", "line"), ONE_FAULT)
def test_one_planted_fault_gives_one_line(path: str, value: Any, line: str, tmp_path: Path) -> None:
    assert faults_of(changed(path, value), tmp_path) == [f"my.toml: {line}"]
