"""Reading a case: objects, hash, changed copies, files."""

from __future__ import annotations

import pickle
import re
import tomllib
from pathlib import Path

import numpy as np
import pytest
from case_examples import changed, full_document, plain_document

from optics.device.case import Case, case_from_dict, json_schema, read_case
from optics.device.errors import CaseError
from optics.device.schema import schema_text

TOML = """
title = "three films" # a comment
[wavelength]
values_nm = [500, 520.5, 600]
[materials.etl]
table = "etl.csv"
[[layers]]
name = "HTL"
material = "air"
thickness_nm = 40
[[layers]]
name = "EML"
material = "etl"
thickness_nm = 20
[[emitters]]
name = "green"
layer = "EML"
spectrum = { table = "pl.csv", quantity = "power" }
zone = { shape = "table", table = "zone.csv" }
quantum_yield = 0.9
[sides.bottom]
filter = "filter.csv"
"""

# The same case: other order, formatting and number format.
TOML_REORDERED = """
title = "three films"
layers = [ { thickness_nm = 40.0, name = "HTL", material = "air" },
           { name = "EML", thickness_nm = 2.0e1, material = "etl" } ]
[sides.bottom]
filter = "filter.csv"
[materials]
etl.table = "etl.csv"
[wavelength]
values_nm = [ 5e2, 520.5, 600.0 ]
[[emitters]]
quantum_yield = 0.90
zone = { table = "zone.csv", shape = "table" }
layer = "EML"
spectrum = { quantity = "power", table = "pl.csv" }
name = "green"
share = 1
"""


def write_case(folder: Path, text: str = TOML) -> Path:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "etl.csv").write_text("# source: invented\nwavelength_nm,n,k\n400,1.8,0\n700,1.7,0\n")
    (folder / "pl.csv").write_text("wavelength_nm,value\n480,0\n520,1\n620,0\n")
    (folder / "zone.csv").write_text("position,density\n0,1\n1,3\n")
    (folder / "filter.csv").write_text("wavelength_nm,transmittance\n400,0.5\n700,0.9\n")
    file = folder / "case.toml"
    file.write_text(text)
    return file


def test_full_case_becomes_objects() -> None:
    case = case_from_dict(full_document())
    assert case.title == "invented bottom-emitting stack"
    np.testing.assert_allclose(case.wavelength_nm, np.arange(450, 701, 5), rtol=1e-15)
    assert [film.name for film in case.stack.films] == ["ITO", "HTL", "EML", "ETL", "CAT"]
    assert case.stack.substrate is not None
    assert (case.stack.substrate.thickness_mm, case.stack.substrate.exit) == (0.7, "planar")
    assert case.stack.cover is None
    assert (case.stack.bottom.name, case.stack.top.name) == ("air", "air")
    (green,) = case.emitters
    assert (green.film_index, green.unit, green.share, green.exciton_fraction) == (
        2,
        "device",
        1.0,
        1.0,
    )
    assert green.closest_approach_nm == 0.5
    assert green.vertical_fraction == pytest.approx(0.24)
    assert green.order_parameter == pytest.approx(-0.14)
    assert dict(case.drive.charge_balance) == {"device": 0.9}
    assert (case.drive.voltage_V, case.drive.duty) == (5.2, 1.0)
    assert case.sides.top.polarizer_transmittance == 1.0
    assert case.warnings == ()


def test_defaults_are_filled_in() -> None:
    document = changed("emitters/0/horizontal_fraction", None)
    del document["drive"]
    case = case_from_dict(document)
    assert case.emitters[0].horizontal_fraction == pytest.approx(2 / 3)
    assert dict(case.drive.charge_balance) == {"device": 1.0}
    assert case.drive.current_density_mA_cm2 is None
    assert case.document["drive"] == {"charge_balance": 1.0, "aperture_ratio": 1.0, "duty": 1.0}


@pytest.mark.parametrize(
    ("key", "value"),
    [("horizontal_fraction", 0.8), ("vertical_fraction", 0.2), ("order_parameter", -0.2)],
)
def test_three_ways_to_state_an_orientation(key: str, value: float) -> None:
    document = changed("emitters/0/horizontal_fraction", None)
    document["emitters"][0][key] = value
    assert case_from_dict(document).emitters[0].horizontal_fraction == pytest.approx(0.8)


def test_case_with_files(tmp_path: Path) -> None:
    case = read_case(write_case(tmp_path))
    assert case.source_path == tmp_path / "case.toml"
    assert {use.name for use in case.tables} >= {"etl.csv", "pl.csv", "zone.csv", "filter.csv"}
    assert case.sides.bottom.filter is not None
    assert case.stack.films[1].material.tables[0].source == "invented"


def test_arrays_are_read_only_and_survive_pickling(tmp_path: Path) -> None:
    case = read_case(write_case(tmp_path))
    copied: Case = pickle.loads(pickle.dumps(case))
    for one in (case, copied):
        with pytest.raises(ValueError, match="read-only"):
            one.wavelength_nm[0] = 1.0
    assert copied.sha256 == case.sha256
    assert copied.document == case.document
    assert copied.replace("layers.HTL.thickness_nm", 41).sha256 != case.sha256


def test_document_is_a_copy() -> None:
    case = case_from_dict(plain_document())
    case.document["layers"][0]["thickness_nm"] = -5.0
    assert case.document["layers"][0]["thickness_nm"] == 100.0


def test_hash_ignores_formatting_order_and_place(tmp_path: Path) -> None:
    first = read_case(write_case(tmp_path / "a"))
    second = read_case(write_case(tmp_path / "b" / "c", TOML_REORDERED))
    assert first.sha256 == second.sha256


def test_hash_ignores_how_the_same_thing_is_said() -> None:
    plain = case_from_dict(plain_document())
    other = changed("emitters/0/horizontal_fraction", None)
    other["emitters"][0]["vertical_fraction"] = 0.25
    same = changed("emitters/0/horizontal_fraction", 0.75)
    assert case_from_dict(other).sha256 == case_from_dict(same).sha256
    by_unit = changed("drive/charge_balance", {"device": 0.9})
    assert case_from_dict(by_unit).sha256 == plain.sha256
    grid = changed("wavelength", {"values_nm": list(range(450, 701, 5))})
    assert case_from_dict(grid).sha256 == plain.sha256


@pytest.mark.parametrize("name", ["etl.csv", "pl.csv", "zone.csv", "filter.csv"])
def test_hash_knows_the_bytes_of_every_table(tmp_path: Path, name: str) -> None:
    before = read_case(write_case(tmp_path)).sha256
    table = tmp_path / name
    table.write_text("# one more line\n" + table.read_text())
    assert read_case(tmp_path / "case.toml").sha256 != before


def test_hash_knows_every_number() -> None:
    case = case_from_dict(plain_document())
    hashes = {case.sha256}
    for path, value in (
        ("layers.ETL.thickness_nm", 50.0000001),
        ("materials.metal.lorentz_drude.f0", 0.846),
        ("emitters.green.quantum_yield", 0.94),
        ("surroundings.top", "htl-a"),
    ):
        hashes.add(case.replace(path, value).sha256)
    assert len(hashes) == 5


def test_bundled_spectrum_by_name_unless_a_file_has_it(tmp_path: Path) -> None:
    from optics.device import catalogue

    name = catalogue.spectra_names()[0]
    quantity = next(
        line.split(":")[1].strip()
        for line in catalogue.spectrum_path(name).read_text().splitlines()
        if line.startswith("# quantity")
    )
    document = changed("emitters/0/spectrum", {"table": name, "quantity": quantity})
    document["wavelength"] = {"values_nm": [460, 500, 550, 600, 650]}
    bundled = case_from_dict(document, tmp_path)
    (tmp_path / name).write_text("wavelength_nm,value\n400,0\n500,1\n700,0\n")
    own = case_from_dict(document, tmp_path)
    assert own.emitters[0].spectrum.peak_nm == 500
    assert own.sha256 != bundled.sha256


def test_replace_checks_like_a_file() -> None:
    case = case_from_dict(plain_document(), label="my.toml")
    assert case.replace("layers.ETL.thickness_nm", np.float64(55)).stack.films[3].thickness_nm == 55
    assert case.stack.films[3].thickness_nm == 50
    with pytest.raises(CaseError) as error:
        case.replace("layers.ETL.thickness_nm", -1.0)
    assert str(error.value) == (
        "my.toml: layers.ETL.thickness_nm: found -1; expected a number from 0 to 1e+07"
    )


def test_replace_all_checks_when_everything_is_in_place() -> None:
    document = plain_document()
    second = {**document["emitters"][0], "name": "red", "share": 0.25}
    document["emitters"] = [{**document["emitters"][0], "share": 0.75}, second]
    case = case_from_dict(document)
    with pytest.raises(CaseError, match=r"shares 0\.5 \+ 0\.25 = 0\.75"):
        case.replace("emitters.green.share", 0.5)
    changed_case = case.replace_all({"emitters.green.share": 0.5, "emitters.red.share": 0.5})
    assert [emitter.share for emitter in changed_case.emitters] == [0.5, 0.5]


def test_wavelengths_of_lines_count_but_are_not_on_the_grid() -> None:
    case = case_from_dict(changed("emitters/0/spectrum", {"line_nm": 523.4}))
    assert 523.4 not in case.wavelength_nm
    assert 523.4 in case.every_wavelength_nm


def test_integers_are_numbers() -> None:
    case = case_from_dict(changed("materials/htl-a", {"n": 2}))
    assert case.value("materials.htl-a.n") == 2.0


def test_json_schema_in_the_documents_is_current() -> None:
    written = Path(__file__).parents[2] / "docs" / "case.schema.json"
    assert written.read_text(encoding="utf-8") == schema_text(), (
        "python -m optics.device.schema > docs/case.schema.json"
    )


def test_schema_says_what_every_key_is() -> None:
    def check(part: dict[str, object]) -> None:
        properties = part.get("properties", {})
        assert isinstance(properties, dict)
        for key, value in properties.items():
            said = {"description", "$ref", "const", "oneOf"} & set(value)
            assert said, key

    for part in json_schema()["$defs"].values():
        check(part)


def test_documents_name_every_key_and_their_example_runs() -> None:
    text = (Path(__file__).parents[2] / "docs" / "case-file.md").read_text(encoding="utf-8")
    schema = json_schema()
    parts = [schema, *schema["$defs"].values()]
    keys = {key for part in parts for key in part.get("properties", {})}
    marked = re.findall(r"`[^`\n]+`", text)
    unnamed = {key for key in keys if not any(re.search(rf"\b{key}\b", one) for one in marked)}
    assert unnamed == set()
    example = re.search(r"```toml\n(.*?)```", text, re.DOTALL)
    assert example is not None
    assert case_from_dict(tomllib.loads(example[1])).warnings == ()
