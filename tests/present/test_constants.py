"""What a name leads to, and how optical constants are shown as text and pictures."""

from __future__ import annotations

import io
from pathlib import Path

import numpy as np
import pytest

from optics.device import catalogue
from optics.device.errors import CaseError
from optics.present.constants import EmissionSpectrum, Measurement, Shown, find
from optics.present.materials import catalogue_view, measurements_view, sample_nm, spectrum_view
from optics.present.plots import SUFFIXES, draw, save
from optics.present.terminal import console, show

EVERYTHING = (
    *(name for name in catalogue.names() if name not in catalogue.BUILT_IN),
    *catalogue.spectra_names(),
)


def measurements(name: str) -> tuple[Measurement, ...]:
    shown = find(name)
    assert isinstance(shown, tuple)
    return shown


def text_of(shown: Shown) -> str:
    stream = io.StringIO()
    view = spectrum_view(shown) if isinstance(shown, EmissionSpectrum) else measurements_view(shown)
    show(console(stream), view)
    return stream.getvalue()


def test_a_plain_name_shows_every_measurement_the_default_first() -> None:
    assert [one.name for one in measurements("ag")] == ["ag-yang", "ag-mcpeak", "ag-rakic-ld"]
    assert [one.name for one in measurements("glass")] == ["soda-lime-rubin"]


def test_a_table_name_shows_that_table_alone() -> None:
    (one,) = measurements("ag-mcpeak")
    assert (one.name, one.aliases, one.points) == ("ag-mcpeak", (), 80)


def test_a_pair_has_two_axes() -> None:
    (one,) = measurements("f8bt")
    assert [axis.axis for axis in one.axes] == ["ordinary", "extraordinary"]
    assert [axis.table for axis in one.axes] == ["f8bt-o", "f8bt-e"]


def test_shown_values_are_those_of_the_material() -> None:
    wavelength = np.array([433.3, 550.0])
    eps, _ = catalogue.load("ag-yang").permittivity(wavelength)
    axis = measurements("ag-yang")[0].axes[0]
    shown = [axis.at(float(value)) for value in wavelength]
    assert [complex(*one) for one in shown if one] == pytest.approx(list(np.sqrt(eps)), rel=1e-12)


def test_nothing_is_shown_outside_a_table() -> None:
    axis = measurements("pet")[0].axes[0]
    assert axis.at(399.9) is None
    assert axis.at(400.0) is not None


def test_unknown_names_are_told_with_the_nearest() -> None:
    with pytest.raises(CaseError) as caught:
        find("ag-yan")
    assert str(caught.value) == (
        "bundled materials: found 'ag-yan'; expected the name of a bundled material or spectrum, "
        "or the path of a table (did you mean ag-yang?)"
    )


def test_air_has_no_table() -> None:
    with pytest.raises(CaseError, match="found air, which has n = 1 everywhere"):
        find("air")


def test_a_missing_file_is_a_fault_of_the_path() -> None:
    with pytest.raises(CaseError, match=r"nowhere\.csv: found no such file"):
        find("nowhere.csv")


def test_a_users_table_shows_its_own_points(tmp_path: Path) -> None:
    path = tmp_path / "own.csv"
    path.write_text("# source: own sample 3\nenergy_eV,n,k\n2.0,1.8,0\n2.5,1.9,0.01\n3.1,2.0,0.2\n")
    (one,) = measurements(str(path))
    assert len(sample_nm((one,))) == 3
    text = text_of((one,))
    assert "own sample 3" in text
    assert "Values at the table's points" in text
    row = next(line.split() for line in text.splitlines() if line.startswith("495.937"))
    assert row == ["495.937", "1.9000", "0.01"]


def test_sampled_wavelengths_are_round_and_few() -> None:
    sampled = sample_nm(measurements("ag"))
    assert sampled[:3] == [300.0, 350.0, 400.0]
    assert len(sampled) <= 17


@pytest.mark.parametrize("name", EVERYTHING)
def test_everything_bundled_can_be_shown(name: str) -> None:
    shown = find(name)
    text = text_of(shown)
    if isinstance(shown, EmissionSpectrum):
        assert "invented for demonstration" in text
        assert f'quantity = "{shown.quantity}"' in text
    else:
        flat = " ".join(text.split())
        for one in shown:
            assert " ".join(one.source.split()) in flat
            assert all(reason in flat for reason in one.reasons)
    assert "nan" not in text.split()


def test_the_list_names_every_table_and_spectrum() -> None:
    stream = io.StringIO()
    show(console(stream, plain_width=175), catalogue_view())
    first_words = {line.split()[0] for line in stream.getvalue().splitlines() if line.strip()}
    assert {entry.name for entry in catalogue.entries()} <= first_words
    assert set(catalogue.spectra_names()) <= first_words


@pytest.mark.parametrize("suffix", SUFFIXES)
def test_pictures_are_written_and_repeat_byte_for_byte(suffix: str, tmp_path: Path) -> None:
    magic = {".png": b"\x89PNG", ".svg": b"<?xml", ".pdf": b"%PDF"}[suffix]
    written = []
    for name in ("a", "b"):
        path = tmp_path / f"{name}{suffix}"
        save(draw(find("mgf2")), path)
        written.append(path.read_bytes())
    assert written[0].startswith(magic)
    assert written[0] == written[1]


def test_axes_carry_quantity_and_unit() -> None:
    upper, lower = draw(find("ag")).axes
    assert upper.get_ylabel() == "refractive index n"
    assert lower.get_ylabel() == "extinction coefficient k"
    assert lower.get_xlabel() == "vacuum wavelength (nm)"
    labels = [text.get_text() for text in upper.get_legend().get_texts()]
    assert labels == ["ag-yang (ag)", "ag-mcpeak", "ag-rakic-ld"]


def test_curves_differ_in_color_and_in_dashes() -> None:
    lines = draw(find("ag")).axes[0].get_lines()
    assert len({line.get_color() for line in lines}) == 3
    assert len({str(line._unscaled_dash_pattern) for line in lines}) == 3


def test_the_picture_shows_the_tables_points() -> None:
    line = draw(find("al-rakic")).axes[0].get_lines()[0]
    axis = measurements("al-rakic")[0].axes[0]
    assert np.array_equal(line.get_xydata(), np.column_stack([axis.wavelength_nm, axis.n]))
    assert line.get_marker() == "o"


def test_a_table_without_loss_says_so() -> None:
    lower = draw(find("sio2")).axes[1]
    assert [text.get_text() for text in lower.texts] == ["k = 0 in the table"]
