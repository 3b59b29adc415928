"""Changed copies of a case share what did not change, and are what a new case would be."""

from __future__ import annotations

import pickle
from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from case_examples import plain_document

import optics
from optics.device.address import changed, numeric_addresses
from optics.device.case import Case, case_from_dict
from optics.device.emitter import Emitter
from optics.device.errors import CaseError
from optics.device.stack import absorbs

MOST_ADDRESSES = 12  # of one case, for the sake of time
REBUILT = ("layers", "materials", "emitters")


def document() -> dict[str, Any]:
    return plain_document()


def test_a_changed_copy_is_what_a_new_case_would_be() -> None:
    base = case_from_dict(document())
    film = base.stack.films[0].name
    changed = base.replace_all({f"layers.{film}.thickness_nm": 33.0})
    afresh = case_from_dict(changed.document)
    assert changed.document == afresh.document
    assert changed.sha256 == afresh.sha256 != base.sha256
    assert base.stack.films[0].thickness_nm != 33.0
    assert base.document == case_from_dict(document()).document


CASES = [
    Path(__file__).parents[2] / "cases" / f"{name}.toml"
    for name in ("polymer-f8bt", "red-top-microcavity", "silicon-microdisplay", "white-tandem")
]


def told(make: Callable[[], Case]) -> Any:
    """Everything of a case that can be compared, or its faults."""
    try:
        case = make()
    except CaseError as error:
        return error.faults
    # Tables are read anew by another case, so arrays tell equality there.
    emitters = [
        [getattr(one, field) for field in Emitter.__dataclass_fields__] for one in case.emitters
    ]
    return [
        case.document,
        case.sha256,
        [(film.name, film.material.name, film.thickness_nm) for film in case.stack.films],
        [eps.tobytes() for eps in case.stack.permittivity(case.wavelength_nm)],
        repr(emitters),
        case.drive,
        case.tables,
        case.warnings,
    ]


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_a_number_of_films_materials_and_emitters_does_what_the_whole_door_does(path: Path) -> None:
    """Whether the new value is small, large or none that a device can have."""
    base = optics.read_case(path)
    addresses = [one for one in numeric_addresses(base.document) if one.split(".")[0] in REBUILT]
    some = addresses[:: 1 + len(addresses) // MOST_ADDRESSES]
    assert some
    for address in (*some, *(one for one in addresses if one.endswith((".share", ".n", ".k")))):
        value = base.value(address)
        for other in (1.01 * value, 0, -1.0, 1e3):
            document = changed(base.document, address, other, base.label)
            anew = told(partial(case_from_dict, document, path.parent, base.label))
            assert told(partial(base.replace, address, other)) == anew, (address, other)


def test_a_copy_of_a_copy_is_what_a_new_case_would_be() -> None:
    base = optics.read_case(CASES[0])
    emitter, film = base.emitters[0].name, base.stack.films[-1].name
    fraction = f"emitters.{emitter}.vertical_fraction"
    copy = base.replace(fraction, 0.2).replace(f"layers.{film}.thickness_nm", 77.0)
    copy = copy.replace(f"emitters.{emitter}.order_parameter", -0.1)
    anew = partial(case_from_dict, copy.document, CASES[0].parent, base.label)
    assert told(lambda: copy) == told(anew)
    assert copy.emitters[0].horizontal_fraction == pytest.approx(1.1 / 1.5, rel=1e-15)


def test_the_whole_door_is_not_asked_for_such_a_number(monkeypatch: pytest.MonkeyPatch) -> None:
    base = case_from_dict(document())
    film = base.stack.films[0].name
    monkeypatch.setattr("optics.device.case.build", None)
    assert base.replace(f"layers.{film}.thickness_nm", 33.0).stack.films[0].thickness_nm == 33.0
    with pytest.raises(TypeError):
        base.replace("drive.charge_balance", 0.5)


def test_materials_that_did_not_change_are_shared() -> None:
    base = case_from_dict(document())
    film = base.stack.films[0].name
    changed = base.replace(f"layers.{film}.thickness_nm", 33.0)
    assert [one.material for one in changed.stack.films] == [
        one.material for one in base.stack.films
    ]


def test_what_is_kept_of_a_material_cannot_be_written_to() -> None:
    case = case_from_dict(document())
    material = case.stack.films[0].material
    first = material.permittivity(case.wavelength_nm)
    with pytest.raises(ValueError, match="read-only"):
        first[0][0] = 1.0
    again = material.permittivity(case.wavelength_nm + 0.0)
    assert np.array_equal(first[0], again[0])
    assert absorbs(material, case.wavelength_nm) is absorbs(material, case.wavelength_nm)


def test_a_case_travels_with_its_hash() -> None:
    case = case_from_dict(document())
    assert pickle.loads(pickle.dumps(case)).sha256 == case.sha256
