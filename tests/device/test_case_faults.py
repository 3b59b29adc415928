"""Many faults at once, faults between several parts of a case, faults of files."""

from __future__ import annotations

from datetime import date
from pathlib import Path
from typing import Any

import pytest
from case_examples import changed, faults_of, full_document, plain_document

from optics.device.case import case_from_dict, read_case
from optics.device.errors import CaseError


def test_many_faults_come_out_together() -> None:
    document = full_document()
    document["titel"] = "typo"
    document["layers"][0]["thickness_nm"] = -1
    document["layers"][0]["material"] = "htl-x"
    document["layers"][3]["material"] = "htl-y"
    document["emitters"][0] |= {"horizontal_fraction": 1.2, "layer": "EMLX"}
    document["wavelength"]["step_nm"] = 7
    document["materials"]["doped"]["mix"] = {"htl-a": 0.5, "htl-z": 0.4}
    document["drive"]["charge_balance"] = {"upper": 2}
    document["sweep"]["axes"]["layers.HTL.thickness_nm"] = {"start": 1}
    keys = [line.split(": ")[1] for line in faults_of(document)]
    assert sorted(keys) == [
        "drive.charge_balance.device",
        "drive.charge_balance.upper",
        "drive.charge_balance.upper",
        "emitters.green.horizontal_fraction",
        "emitters.green.layer",
        "layers.ETL.material",
        "layers.ITO.material",
        "layers.ITO.thickness_nm",
        "materials.doped.mix",
        "materials.doped.mix.htl-z",
        'sweep.axes."layers.HTL.thickness_nm"',
        "titel",
        "wavelength.step_nm",
    ]


def test_absorbing_surroundings_on_both_sides() -> None:
    document = changed("surroundings", {"bottom": "metal", "top": "metal"})
    del document["substrate"]
    assert faults_of(document) == [
        "my.toml: surroundings: found absorbing media on both sides; expected absorbing "
        "surroundings on one side"
    ]
    document["surroundings"]["bottom"] = "air"
    case_from_dict(document)


def test_birefringent_host_that_is_a_metal_along_the_normal_only() -> None:
    host = {"n_ordinary": 1.8, "n_extraordinary": 0.3, "k_extraordinary": 2.0}
    assert faults_of(changed("materials/host", host)) == [
        'my.toml: emitters.green.layer: found "EML" of host, a metal at 450 nm; expected a layer '
        "whose extraordinary permittivity has a real part above 0"
    ]


def test_zone_that_closest_approach_leaves_empty() -> None:
    document = plain_document()
    document["layers"][2]["thickness_nm"] = 0.9
    document["layers"][1]["material"] = document["layers"][3]["material"] = "metal"
    assert faults_of(document) == [
        "my.toml: emitters.green.zone: found nothing left of it beyond closest_approach_nm = 0.5 "
        "from the absorbers around; expected a zone with a part farther away in its film of 0.9 nm"
    ]
    document["layers"][2]["thickness_nm"] = 1.1
    case_from_dict(document)


@pytest.mark.parametrize("at", [0.0, 1.0])
def test_point_on_the_face_of_an_absorber(at: float) -> None:
    document = changed("emitters/0/zone", {"shape": "point", "at": at})
    document["layers"][1]["material"] = document["layers"][3]["material"] = "metal"
    assert faults_of(document) == [
        "my.toml: emitters.green.zone: found a point on the face of an absorber; expected a point "
        "at some distance from it"
    ]


def test_point_nearer_than_the_closest_approach_is_a_warning() -> None:
    document = changed("emitters/0/zone", {"shape": "point", "at_nm": 0.2, "from": "top"})
    assert case_from_dict(document).warnings == ()
    document["layers"][3]["material"] = "metal"
    assert case_from_dict(document).warnings == (
        "emitters.green: the point lies 0.2 nm from an absorber, nearer than "
        "closest_approach_nm = 0.5",
    )


def test_no_closest_approach_at_an_absorber_is_a_warning() -> None:
    document = changed("emitters/0/closest_approach_nm", 0)
    assert case_from_dict(document).warnings == ()
    document["layers"][3]["material"] = "metal"
    assert case_from_dict(document).warnings == (
        "emitters.green: closest_approach_nm is 0 and the zone reaches an absorber at the top face "
        "of its film, where the dissipated power has no bound: purcell_factor and, unless "
        "quantum_yield is 0, decay_rate_ratio are left out",
    )


def test_spectrum_cut_by_the_grid_is_a_warning() -> None:
    case = case_from_dict(changed("emitters/0/spectrum", {"peak_nm": 524, "fwhm_nm": 58}))
    assert case.warnings == (
        "emitters.green: 0.13 % of the spectrum lies outside the wavelength grid of 450 to 700 nm",
    )


@pytest.mark.parametrize(
    ("peak_nm", "said"), [(690, "34 %"), (702.5, "54 %"), (900, "more than 99 %")]
)
def test_a_large_lost_share_is_said_in_plain_numbers(peak_nm: float, said: str) -> None:
    document = changed("emitters/0/spectrum", {"peak_nm": peak_nm, "fwhm_nm": 58})
    (warning,) = case_from_dict(document).warnings
    assert warning.startswith(f"emitters.green: {said} of the spectrum lies outside")


def write(folder: Path, name: str, text: str) -> None:
    (folder / name).write_text(text)


def test_table_that_does_not_cover_the_wavelengths(tmp_path: Path) -> None:
    write(tmp_path, "etl.csv", "wavelength_nm,n,k\n460,1.7,0\n650,1.7,0\n")
    document = changed("materials/etl", {"table": "etl.csv"})
    document["layers"][3]["material"] = document["layers"][1]["material"] = "etl"
    document["surroundings"] = {"top": "etl"}
    assert faults_of(document, tmp_path) == [
        f'my.toml: {key}: found "etl", known from 460 to 650 nm; expected a material known at '
        "every wavelength of the case, 450 to 700 nm"
        for key in ("layers.HTL.material", "layers.ETL.material", "surroundings.top")
    ]


def test_lines_need_coverage_too(tmp_path: Path) -> None:
    write(tmp_path, "etl.csv", "wavelength_nm,n,k\n450,1.7,0\n700,1.7,0\n")
    document = changed("materials/etl", {"table": "etl.csv"})
    document["layers"][3]["material"] = "etl"
    document["emitters"][0]["spectrum"] = {"line_nm": 720}
    assert faults_of(document, tmp_path) == [
        'my.toml: layers.ETL.material: found "etl", known from 450 to 700 nm; expected a material '
        "known at every wavelength of the case, 450 to 720 nm"
    ]


def test_faults_inside_a_table_name_its_line(tmp_path: Path) -> None:
    write(tmp_path, "etl.csv", "wavelength_nm,n,k\n450,1.7,0\n700,1.7,-0.1\n")
    (line,) = faults_of(changed("materials/etl", {"table": "etl.csv"}), tmp_path)
    assert line.startswith("my.toml: materials.etl.table: etl.csv: line 3")
    assert "-0.1" in line


@pytest.mark.parametrize(
    ("rows", "found"),
    [
        ("460,0.02\n524,1\n690,0", "2 % of the peak at its start"),
        ("460,0\n524,1\n690,0.05", "5 % of the peak at its end"),
    ],
)
def test_spectrum_table_that_the_grid_goes_beyond(tmp_path: Path, rows: str, found: str) -> None:
    write(tmp_path, "pl.csv", f"wavelength_nm,value\n{rows}\n")
    document = changed("emitters/0/spectrum", {"table": "pl.csv", "quantity": "photons"})
    assert faults_of(document, tmp_path) == [
        f"my.toml: emitters.green.spectrum.table: found {found}, inside the grid of 450 to 700 nm; "
        "expected under 1 % of the peak at an end that the grid goes beyond"
    ]


def test_spectrum_off_the_grid(tmp_path: Path) -> None:
    write(tmp_path, "pl.csv", "wavelength_nm,value\n800,0\n900,1\n950,0\n")
    document = changed("emitters/0/spectrum", {"table": "pl.csv", "quantity": "photons"})
    assert faults_of(document, tmp_path) == [
        "my.toml: emitters.green.spectrum: found no light at any wavelength of the grid of 450 to "
        "700 nm; expected a spectrum that overlaps the grid"
    ]


def test_spectrum_quantity_that_the_table_contradicts(tmp_path: Path) -> None:
    write(tmp_path, "pl.csv", "# quantity: power\nwavelength_nm,value\n450,0\n500,1\n700,0\n")
    document = changed("emitters/0/spectrum", {"table": "pl.csv", "quantity": "photons"})
    assert faults_of(document, tmp_path) == [
        'my.toml: emitters.green.spectrum.quantity: found "photons", while the table says power; '
        "expected what the table says"
    ]


@pytest.mark.parametrize(
    ("text", "line"),
    [
        (
            "position,density\n0,1\n1.5,1\n",
            "found positions from 0 to 1.5; expected positions from 0 (bottom face) to 1",
        ),
        (
            "position,density\n0,0\n1,0\n",
            "found a density that is zero everywhere; expected some excitons",
        ),
        (
            "position_nm,density\n30,1\n40,1\n",
            "found density from 30 nm on; expected some density inside its film, 0 to 24 nm",
        ),
    ],
)
def test_zone_tables(tmp_path: Path, text: str, line: str) -> None:
    write(tmp_path, "zone.csv", text)
    document = changed("emitters/0/zone", {"shape": "table", "table": "zone.csv"})
    assert faults_of(document, tmp_path) == [f"my.toml: emitters.green.zone.table: {line}"]


def test_filter_tables(tmp_path: Path) -> None:
    write(tmp_path, "f.csv", "wavelength_nm,transmittance\n460,0.5\n700,1.1\n")
    assert faults_of(changed("sides", {"top": {"filter": "f.csv"}}), tmp_path) == [
        "my.toml: sides.top.filter: found a transmittance of 1.1; expected at most 1",
        "my.toml: sides.top.filter: found a table from 460 to 700 nm; expected a table over every "
        "wavelength of the case, 450 to 700 nm",
    ]


def test_syntax_error_tells_line_and_column(tmp_path: Path) -> None:
    file = tmp_path / "case.toml"
    file.write_text('title = "x"\n[wavelength]\nstart_nm = = 3\n')
    with pytest.raises(CaseError) as error:
        read_case(file)
    assert (
        str(error.value) == f"{file}: line 3, column 12: found invalid value; expected valid TOML"
    )
    file.write_text('title = "x')
    with pytest.raises(CaseError, match="line 1"):
        read_case(file)


def test_file_that_is_not_there(tmp_path: Path) -> None:
    (tmp_path / "green.toml").write_text("")
    with pytest.raises(CaseError) as error:
        read_case(tmp_path / "gren.toml")
    assert str(error.value) == (
        f"{tmp_path / 'gren.toml'}: found no such file; expected a case file in TOML "
        "(did you mean green.toml?)"
    )
    with pytest.raises(CaseError, match="directory"):
        read_case(tmp_path)


def test_file_that_is_not_text(tmp_path: Path) -> None:
    (tmp_path / "case.toml").write_bytes(b'title = "\xff"')
    with pytest.raises(CaseError, match="found a byte that is not UTF-8 at offset 9"):
        read_case(tmp_path / "case.toml")


@pytest.mark.parametrize("section", ["layers", "emitters", "materials", "drive", "wavelength"])
@pytest.mark.parametrize("value", [5, "x", [1, "a", {}], {"a": 1}, [], {}, [[]], True])
def test_nonsense_never_escapes_as_another_error(section: str, value: Any) -> None:
    document = full_document()
    document[section] = value
    if section in ("materials", "drive") and value == {}:
        document["layers"] = value
    assert faults_of(document)


@pytest.mark.parametrize(
    ("path", "value", "line"),
    [
        (
            "layers/0/thickness_nm",
            10**400,
            "layers.ITO.thickness_nm: found 10000... of 401 digits; expected a number",
        ),
        (
            "layers/0/thickness_nm",
            date(2020, 1, 1),
            "layers.ITO.thickness_nm: found the date 2020-01-01; expected a number",
        ),
        (
            "emitters/0/layer",
            5,
            "emitters.green.layer: found 5; expected text in quotes",
        ),
        (
            "emitters/0/zone",
            "uniform",
            'emitters.green.zone: found "uniform"; expected a table with shape, one of uniform, '
            "point, exponential, gaussian, table",
        ),
    ],
)
def test_strange_values(path: str, value: Any, line: str) -> None:
    assert faults_of(changed(path, value)) == [f"my.toml: {line}"]


def test_wavelengths_beyond_all_reason() -> None:
    wavelength = {"start_nm": 1, "stop_nm": 1e308, "step_nm": 1e-300}
    assert faults_of(changed("wavelength", wavelength)) == [
        "my.toml: wavelength.step_nm: found 1e-300; expected at most 1000000 wavelengths",
        'my.toml: substrate.material: found "silica" with no passive permittivity at 1e+308 nm; '
        "expected finite, nonzero, Im ε ≥ 0",
    ]


def test_keys_that_are_no_text() -> None:
    document = plain_document()
    document["materials"][5] = {"n": 1.5}
    assert len(faults_of(document)) == 1


def test_everything_missing() -> None:
    assert [line.split(": ")[1] for line in faults_of({})] == [
        "title",
        "wavelength",
        "layers",
        "emitters",
    ]
