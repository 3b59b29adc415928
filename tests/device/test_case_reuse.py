"""Changed copies of a case share what did not change, and are what a new case would be."""

from __future__ import annotations

import pickle
from typing import Any

import numpy as np
import pytest
from case_examples import plain_document

from optics.device.case import case_from_dict
from optics.device.stack import absorbs


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
