import tomllib

import numpy as np
import pytest

from optics.device import catalogue
from optics.device.errors import CaseError
from optics.device.tables import read_curve

TABLES = sorted(path.stem for path in catalogue.data_folder().glob("*.csv"))
INDEX = tomllib.loads((catalogue.data_folder() / "index.toml").read_text(encoding="utf-8"))


def test_index_and_files_name_the_same_tables() -> None:
    assert sorted(INDEX["tables"]) == TABLES
    assert len(TABLES) > 40


@pytest.mark.parametrize("name", TABLES)
def test_every_bundled_table_reads_and_says_where_it_comes_from(name: str) -> None:
    table = catalogue._table(name)
    assert set(table.header) == {"material", "source", "via", "values"}
    assert all(len(text) > 10 for text in table.header.values())
    assert "CC0" in table.header["via"]
    assert np.all(table.n > 0)
    assert np.all(table.k >= 0)
    assert table.wavelength_nm[0] < 450
    assert table.wavelength_nm[-1] > 780
    ordinary, extraordinary = catalogue.load(name).permittivity(table.wavelength_nm)
    np.testing.assert_allclose(np.sqrt(ordinary), table.n + 1j * table.k, rtol=1e-15)
    np.testing.assert_array_equal(ordinary, extraordinary)


@pytest.mark.parametrize("name", TABLES)
def test_a_table_without_k_says_so(name: str) -> None:
    table = catalogue._table(name)
    written_zero = "k not given by the source, written 0" in table.header["values"]
    assert written_zero == bool(np.all(table.k == 0))


@pytest.mark.parametrize("name", sorted(INDEX["families"]))
def test_a_plain_name_leads_to_its_default_and_results_name_the_table(name: str) -> None:
    default = INDEX["families"][name]["default"]
    parts = INDEX["pairs"].get(default, {"ordinary": default})
    material = catalogue.load(name)
    assert material.name == name
    wanted = [parts[key] for key in ("ordinary", "extraordinary") if key in parts]
    assert [use.name for use in material.tables] == wanted
    assert all(use.source and len(use.sha256) == 64 for use in material.tables)


def test_names_the_case_file_promises() -> None:
    known = set(catalogue.names())
    assert {"air", "vacuum", "f8bt-o", "f8bt-e", "f8bt", "ag", "ag-yang", "glass"} <= known
    for name in known:
        assert catalogue.load(name).name == name
    for name in ("air", "vacuum"):
        np.testing.assert_array_equal(catalogue.load(name).permittivity([1.0, 1e6])[0], [1, 1])


def test_pair_takes_each_ray_from_its_own_table() -> None:
    ordinary, extraordinary = catalogue.load("f8bt").permittivity([520.0])
    np.testing.assert_array_equal(ordinary, catalogue.load("f8bt-o").permittivity([520.0])[0])
    np.testing.assert_array_equal(extraordinary, catalogue.load("f8bt-e").permittivity([520.0])[0])
    assert not catalogue.load("f8bt").isotropic


def test_entries_list_everything_once() -> None:
    records = {record.name: record for record in catalogue.entries()}
    assert set(records) == {*TABLES, *INDEX["pairs"], "air", "vacuum"}
    assert records["soda-lime-rubin"].aliases == ("glass", "soda-lime")
    assert records["soda-lime-rubin"].is_default
    assert not records["ag-mcpeak"].is_default
    assert (records["pet-zhang"].range_nm, records["pet-zhang"].points) == ((400, 1090), 70)
    assert "begins at 400 nm" in records["pet-zhang"].note
    aliases = [alias for record in records.values() for alias in record.aliases]
    assert sorted(aliases) == sorted(INDEX["families"])


def test_published_silver_differs_widely() -> None:
    # The reason why every result names its table.
    tables = ("ag-mcpeak", "ag-yang", "ag-rakic-ld")
    n = [np.sqrt(catalogue.load(name).permittivity([550.0])[0][0]).real for name in tables]
    assert n == sorted(n)
    assert n[-1] > 2.5 * n[0]


def test_unknown_names() -> None:
    with pytest.raises(CaseError) as caught:
        catalogue.load("f8bto")
    assert str(caught.value) == (
        "bundled materials: found no material 'f8bto'; "
        "expected the name of a bundled material (did you mean f8bt-o?)"
    )
    with pytest.raises(CaseError, match=r"found no spectrum 'gren'.*did you mean green\?"):
        catalogue.spectrum_path("gren")


@pytest.mark.parametrize("name", catalogue.spectra_names())
def test_bundled_spectra_are_what_their_headers_say(name: str) -> None:
    curve = read_curve(catalogue.spectrum_path(name), "value")
    assert curve.header["source"] == "invented for demonstration"
    assert curve.header["quantity"] in ("photons", "power")
    energy_eV = 1239.841984 / curve.x
    shape = np.zeros_like(curve.x)
    for text in curve.header["gaussians"].split(";"):
        center_nm, fwhm_eV, height = (float(word) for word in text.split())
        offset = (energy_eV - 1239.841984 / center_nm) / fwhm_eV
        shape += height * np.exp(-4 * np.log(2) * offset**2)
    np.testing.assert_allclose(curve.y, shape / shape.max(), atol=5.1e-7, rtol=0)
    # Cut where nothing is left, so that a wider grid is no fault.
    assert max(curve.y[0], curve.y[-1]) < 0.01


def test_user_page_lists_the_catalogue_as_it_is() -> None:
    page = (catalogue.data_folder().parent / "docs" / "materials.md").read_text(encoding="utf-8")
    for record in catalogue.entries():
        if record.points:
            low, high = record.range_nm
            aliases = ", ".join(f"`{alias}`" for alias in record.aliases)
            row = f"| `{record.name}` | {aliases} | {record.title} | {low:.0f} to {high:.0f} "
            assert row + f"| {record.points} | {record.note} |" in page
        for alias, reason in zip(record.aliases, record.reasons, strict=True):
            if reason != "the only table":
                assert f"| `{alias}` | `{record.name}` | {reason} |" in page
    for name in catalogue.spectra_names():
        assert f"`{name}`" in page
