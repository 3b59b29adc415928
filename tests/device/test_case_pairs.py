"""No fault hides another: faults two by two, and faults beside which others used to vanish.

A fault may silence only a check that rests on the very thing at fault, and brings no other line.
"""

from __future__ import annotations

import copy
from collections.abc import Iterator
from contextlib import suppress
from itertools import combinations
from pathlib import Path
from typing import Any, NamedTuple

import pytest
from case_examples import changed, faults_of, full_document
from hypothesis import given, settings
from hypothesis import strategies as st

from optics.device.case import case_from_dict
from optics.device.errors import CaseError


class Planted(NamedTuple):
    """A change that gives one line, and the parts besides the changed one that its check reads."""

    path: str
    value: Any
    line: str
    rests_on: tuple[str, ...] = ()


def base() -> dict[str, Any]:
    """A case with two units; the upper emitter stands beside the cathode. Invented."""
    document = full_document()
    upper = {**document["emitters"][0], "name": "upper", "layer": "ETL", "unit": "upper"}
    document["emitters"].append(upper)
    document["drive"]["charge_balance"] = {"device": 0.9, "upper": 0.9}
    document["layers"].append({"name": "CAP", "material": "htl-a", "thickness_nm": 30})
    return document


GRID = ("wavelength/start_nm", "wavelength/stop_nm")
METAL = ("materials/metal", "layers/4/material")
NO_FILE = 'found "no.csv", no such file; expected the path of a table, relative to the case file'

PLANTED = [
    Planted("title", 5, "title: found 5; expected text in quotes"),
    Planted(
        "titel",
        1,
        "titel: found unknown key with 1; expected one of title, wavelength, materials, substrate, "
        "cover, surroundings, sides, layers, emitters, drive, sweep, optimize, tolerance "
        "(did you mean title?)",
    ),
    Planted(
        "wavelength/step_nm",
        7,
        "wavelength.step_nm: found 7; expected a step that divides the range of 250 nm into whole "
        "steps",
        GRID,
    ),
    Planted("wavelength/step_nm", 0, "wavelength.step_nm: found 0; expected a number above 0"),
    Planted("wavelength/stop_nm", "x", 'wavelength.stop_nm: found "x"; expected a number'),
    Planted(
        "materials/htl-a/k", -1, "materials.htl-a.k: found -1; expected a number of at least 0"
    ),
    Planted("materials/lost", {"table": "no.csv"}, f"materials.lost.table: {NO_FILE}"),
    Planted(
        "materials/doped/rule",
        "lin",
        'materials.doped.rule: found "lin"; expected one of "bruggeman", "linear" '
        "(did you mean linear?)",
    ),
    Planted(
        "materials/doped/mix/htl-a",
        0.9,
        "materials.doped.mix: found fractions that sum to 0.98; expected a sum of 1",
    ),
    Planted(
        "substrate/material",
        "host",
        'substrate.material: found "host", which is birefringent; expected an isotropic material',
    ),
    Planted(
        "substrate/thickness_mm", 0, "substrate.thickness_mm: found 0; expected a number above 0"
    ),
    Planted(
        "surroundings/bottom",
        "metal",
        'surroundings.bottom: found "metal", which absorbs, behind a slab; expected transparent '
        "surroundings, or no [substrate] between",
        ("materials/metal", *GRID),
    ),
    Planted(
        "surroundings/top",
        "htl-aa",
        'surroundings.top: found "htl-aa", no such material; expected a material of [materials] or '
        "of the catalogue (did you mean htl-a?)",
    ),
    Planted(
        "sides/bottom/polarizer_transmittance",
        1.5,
        "sides.bottom.polarizer_transmittance: found 1.5; expected a number from 0 to 1",
    ),
    Planted("sides/bottom/filter", "no.csv", f"sides.bottom.filter: {NO_FILE}"),
    Planted(
        "layers/1/thickness_nm",
        -2,
        "layers.HTL.thickness_nm: found -2; expected a number from 0 to 1e+07",
    ),
    Planted(
        "layers/5/material",
        "htl-aa",
        'layers.CAP.material: found "htl-aa", no such material; expected a material of [materials] '
        "or of the catalogue (did you mean htl-a?)",
    ),
    Planted(
        "layers/5/thickness_nm",
        None,
        "layers.CAP.thickness_nm: found nothing; expected thickness in nm, at least 0",
    ),
    Planted(
        "emitters/0/layer",
        "CAT",
        'emitters.green.layer: found "CAT" of metal, a metal at 450 nm; expected a layer whose '
        "permittivity has a real part above 0",
        (*METAL, *GRID),
    ),
    Planted(
        "emitters/0/spectrum",
        {"table": "no.csv", "quantity": "power"},
        f"emitters.green.spectrum.table: {NO_FILE}",
    ),
    Planted(
        "emitters/0/spectrum",
        {"peak_nm": 575, "fwhm_nm": 0},
        "emitters.green.spectrum.fwhm_nm: found 0; expected a number above 0",
    ),
    Planted(
        "emitters/0/zone",
        {"shape": "point", "at_nm": 500, "from": "top", "width_nm": 3},
        "emitters.green.zone.width_nm: found unknown key with 3; expected one of shape, at, at_nm, "
        "from (did you mean at_nm?)",
        ("emitters/0/layer",),
    ),
    Planted(
        "emitters/0/quantum_yield",
        2,
        "emitters.green.quantum_yield: found 2; expected a number from 0 to 1",
    ),
    Planted(
        "emitters/0/order_parameter",
        0.1,
        "emitters.green.order_parameter: found 0.1 beside horizontal_fraction; expected one of "
        "horizontal_fraction, vertical_fraction, order_parameter",
    ),
    Planted(
        "emitters/0/share",
        0.5,
        "emitters: found shares 0.5 = 0.5 in unit device (green); expected shares that sum to 1 "
        "within each unit",
    ),
    Planted("emitters/1/share", 2, "emitters.upper.share: found 2; expected a number from 0 to 1"),
    Planted(
        "emitters/1/zone",
        {"shape": "point", "at": 1},
        "emitters.upper.zone: found a point on the face of an absorber; expected a point at some "
        "distance from it",
        (*METAL, *GRID),
    ),
    Planted(
        "emitters/1/closest_approach_nm",
        60,
        "emitters.upper.zone: found nothing left of it beyond closest_approach_nm = 60 from the "
        "absorbers around; expected a zone with a part farther away in its film of 50 nm",
        (*METAL, *GRID, "emitters/1/zone"),
    ),
    Planted("drive/duty", 0, "drive.duty: found 0; expected a number above 0 and of at most 1"),
    Planted(
        "drive/charge_balance/lower",
        0.9,
        'drive.charge_balance.lower: found a value for "lower", no such unit; expected a unit of '
        "the emitters: device, upper",
    ),
    Planted(
        "sweep/axes/layers.HTL.thickness",
        {"values": [1]},
        'sweep.axes."layers.HTL.thickness": found "layers.HTL.thickness", no such address; '
        "expected the address of a value, such as layers.NAME.thickness_nm (did you mean "
        "layers.HTL.thickness_nm?)",
        ("layers/1/thickness_nm",),  # only what the message suggests
    ),
    Planted(
        "sweep/axes/layers.HTL.thickness_nm",
        {"start": 20, "stop": 120, "step": 3},
        'sweep.axes."layers.HTL.thickness_nm".step: found 3; expected a step that divides 100',
    ),
    Planted(
        "optimize/variables/layers.HTL.thickness_nm/max",
        20,
        'optimize.variables."layers.HTL.thickness_nm".max: found 20; expected above min = 20',
    ),
    Planted("tolerance/samples", 10.5, "tolerance.samples: found 10.5; expected a whole number"),
]
# The point outside its film rests on nothing else at fault, and its zone has two faults at once.
SECOND_LINES = {
    "emitters.green.zone.width_nm": "emitters.green.zone.at_nm: found 500; expected a position "
    "inside its film, 0 to 24"
}


def lines_of(planted: Planted) -> set[str]:
    """What a planted fault has to give, alone and in any company that it does not rest on."""
    second = SECOND_LINES.get(planted.line.split(": ")[0])
    return {f"my.toml: {line}" for line in (planted.line, second) if line}


def touch(one: str, other: str) -> bool:
    """Whether two paths lead to the same part or one into the other."""
    shorter = min(len(one.split("/")), len(other.split("/")))
    return one.split("/")[:shorter] == other.split("/")[:shorter]


def independent(first: Planted, second: Planted) -> bool:
    """Whether neither fault touches what the check of the other reads."""
    return not any(
        touch(one.path, part)
        for one, other in ((first, second), (second, first))
        for part in (other.path, *other.rests_on)
    )


@pytest.mark.parametrize("planted", PLANTED, ids=lambda one: one.path)
def test_a_fault_alone_gives_its_lines_only(planted: Planted, tmp_path: Path) -> None:
    document = changed(planted.path, planted.value, base())
    assert set(faults_of(document, tmp_path)) == lines_of(planted)


@pytest.mark.parametrize("first", range(len(PLANTED)), ids=lambda i: PLANTED[i].path)
def test_independent_faults_come_out_together_and_alone(first: int, tmp_path: Path) -> None:
    one, tried = PLANTED[first], 0
    for other in PLANTED[first + 1 :]:
        if independent(one, other):
            document = changed(other.path, other.value, changed(one.path, one.value, base()))
            assert set(faults_of(document, tmp_path)) == lines_of(one) | lines_of(other)
            tried += 1
    assert tried or first >= len(PLANTED) - 1


def test_most_pairs_are_independent() -> None:
    pairs = list(combinations(PLANTED, 2))
    assert sum(independent(one, other) for one, other in pairs) > 0.9 * len(pairs)


def test_all_that_are_independent_come_out_at_once(tmp_path: Path) -> None:
    chosen: list[Planted] = []
    for planted in PLANTED:
        if all(independent(planted, other) for other in chosen):
            chosen.append(planted)
    document = base()
    for planted in chosen:
        document = changed(planted.path, planted.value, document)
    assert len(chosen) > 20
    assert set(faults_of(document, tmp_path)) == set.union(*map(lines_of, chosen))


def keys_of(document: dict[str, Any], folder: Path) -> list[str]:
    return [line.split(": ")[1] for line in faults_of(document, folder)]


def test_line_out_of_range_hides_nothing(tmp_path: Path) -> None:
    document = base()
    del document["substrate"]
    document["surroundings"] = {"bottom": "si", "top": "ag"}
    document["layers"][4]["material"] = "ag"
    document["emitters"][0] |= {"layer": "CAT", "spectrum": {"line_nm": 1550}}
    assert keys_of(document, tmp_path) == [
        "layers.CAT.material",
        "surroundings.bottom",
        "surroundings.top",
        "surroundings",  # absorbing on both sides
        "emitters.green.layer",  # a metal
    ]
    document["cover"] = {"material": "silica", "thickness_mm": 1}
    assert keys_of(document, tmp_path).count("surroundings.top") == 2  # and behind a slab


def test_every_fault_of_one_table_spectrum(tmp_path: Path) -> None:
    document = changed("emitters/0/spectrum", {"table": "no.csv"}, base())
    assert keys_of(document, tmp_path) == [
        "emitters.green.spectrum.quantity",
        "emitters.green.spectrum.table",
    ]


def test_one_wrong_wavelength_leaves_the_others_certain(tmp_path: Path) -> None:
    document = changed("wavelength", {"values_nm": [-5, 520]}, base())
    document["emitters"][0]["layer"] = "CAT"
    assert keys_of(document, tmp_path) == ["wavelength.values_nm[0]", "emitters.green.layer"]


@pytest.mark.parametrize(
    ("typo", "value"), [("closest_aproach_nm", 60), ("shar", 0.5), ("zoned", {"shape": "point"})]
)
def test_a_misspelled_key_is_one_fault(typo: str, value: Any, tmp_path: Path) -> None:
    document = base()
    document["emitters"][1][typo] = value
    assert keys_of(document, tmp_path) == [f"emitters.upper.{typo}"]


@pytest.mark.parametrize("section", ["materials", "surroundings", "drive", "sides", "substrate"])
def test_a_misspelled_section_is_one_fault(section: str, tmp_path: Path) -> None:
    document = {"sides": {}, "surroundings": {"bottom": "air"}, **base()}
    document[f"{section}x"] = document.pop(section)
    assert keys_of(document, tmp_path) == [f"{section}x"]


def test_a_layer_without_a_name_may_be_the_one_asked_for(tmp_path: Path) -> None:
    document = changed("layers/2/name", None, base())
    assert keys_of(document, tmp_path) == ["layers[2].name"]
    document = changed("layers/2/name", "ETL", base())
    document["emitters"] = document["emitters"][:1]
    document["drive"]["charge_balance"] = 1.0
    assert keys_of(document, tmp_path) == ["layers[3].name"]
    document["emitters"][0]["layer"] = "CATT"
    assert keys_of(document, tmp_path) == ["layers[3].name", "emitters.green.layer"]


def test_shares_beside_unknown_ones_may_be_too_large_but_not_too_small(tmp_path: Path) -> None:
    document = base()
    document["emitters"].append({**document["emitters"][0], "name": "red", "share": 5})
    document["emitters"][0]["share"] = 0.4
    assert keys_of(document, tmp_path) == ["emitters.red.share"]
    document["emitters"].append({**document["emitters"][0], "name": "blue", "share": 0.7})
    assert keys_of(document, tmp_path) == ["emitters.red.share", "emitters"]


@pytest.mark.parametrize(
    ("name", "meant"),
    [
        ("silicon", "si"),
        ("Silver", "ag"),
        ("aluminium", "al"),
        ("aluminum oxide", "al2o3"),
        ("silicon nitride", "si3n4"),
        ("sod-lime", "soda-lime"),
        ("htl-aa", "htl-a"),
    ],
)
def test_materials_are_known_by_their_description_too(name: str, meant: str) -> None:
    (line,) = faults_of(changed("surroundings/bottom", name, base()))
    assert line.endswith(f"(did you mean {meant}?)")


GARBAGE: list[Any] = [None, 5, -1, "x", [], {}, [1, {}], {"a": 1}, True, {"shape": "point"}]


def places(value: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    """Paths of every value inside a document."""
    if path:
        yield path
    if isinstance(value, dict):
        entries = list(value.items())
    else:
        entries = list(enumerate(value)) if isinstance(value, list) else []
    for key, inner in entries:
        yield from places(inner, (*path, key))


@given(data=st.data())
@settings(max_examples=150, deadline=None)
def test_any_ruin_of_a_case_ends_in_faults_at_most(data: st.DataObject) -> None:
    document = base()
    for _ in range(data.draw(st.integers(1, 4))):
        *keys, last = data.draw(st.sampled_from(list(places(document))))
        place: Any = document
        for key in keys:
            place = place[key]
        if isinstance(place, dict) and data.draw(st.booleans()):
            place[f"{str(last)[:-1]}q"] = place.pop(last)
        else:
            place[last] = copy.deepcopy(data.draw(st.sampled_from(GARBAGE)))
    with suppress(CaseError):  # whatever else it raises is a defect of the checks
        case_from_dict(document)
