"""The modes command, its tables and its pictures."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner, Result
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure

import optics
from optics import cli
from optics.outcome.modes_result import Modes
from optics.present import pictures_modes
from optics.present.modes import print_modes
from optics.present.terminal import console

CASE = """
title = "a pixel, invented"
[wavelength]
values_nm = [520, 550, 580]
[materials.host]
n = 1.75
[materials.conductor]
n = 1.9
k = 0.01
[substrate]
material = "bk7"
thickness_mm = 0.7
[[layers]]
name = "TCO"
material = "conductor"
thickness_nm = 110
[[layers]]
name = "EML"
material = "host"
thickness_nm = 90
[[layers]]
name = "CAT"
material = "al"
thickness_nm = 100
[[emitters]]
name = "green"
layer = "EML"
spectrum = { peak_nm = 550, fwhm_nm = 30 }
zone = { shape = "point", at = 0.3 }
quantum_yield = 0.9
"""


@pytest.fixture(scope="module")
def path(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("modes") / "case.toml"
    path.write_text(CASE)
    return path


@pytest.fixture(scope="module")
def found(path: Path) -> Modes:
    return optics.modes(optics.read_case(path), leaky=True)


def run(*arguments: object) -> Result:
    return CliRunner().invoke(cli.main, ["modes", *(str(argument) for argument in arguments)])


def printed(result: dict[str, Any], capsys: pytest.CaptureFixture[str], **options: bool) -> str:
    print_modes(console(plain_width=180), result, **options)
    return capsys.readouterr().out


def test_json_is_the_result(path: Path, found: Modes) -> None:
    result = run(path, "--json", "--leaky")
    assert result.exit_code == 0
    parsed = json.loads(result.stdout)
    assert parsed["schema"] == "outcouple.modes/1"
    shown = [line["name"] for line in parsed["emitters"][0]["modes"]]
    assert shown == [line.name for line in found.emitters[0].lines]
    leaky = [line for line in parsed["emitters"][0]["modes"] if line["leaky"]]
    assert {line["share"] for line in leaky} == {None}


def test_tables_name_modes_shares_and_films(
    found: Modes, capsys: pytest.CaptureFixture[str]
) -> None:
    text = printed(found.to_dict(), capsys)
    emitter = found.emitters[0]
    te0 = emitter.lines[0]
    assert "TE0   " in text
    assert f"{100 * (te0.overall_share or 0.0):.2f}" in text
    assert f"{100 * emitter.absorption.films['CAT']:.2f}" in text
    assert "absorbed in TCO" in text
    assert "absorbed in EML" not in text
    assert "sum less 1" in text


def test_faint_modes_are_hidden_until_asked_for(
    found: Modes, capsys: pytest.CaptureFixture[str]
) -> None:
    result = found.to_dict()
    faint = [line for line in result["emitters"][0]["modes"] if not line["leaky"]]
    faint[-1]["share"] = 1e-7
    short, full = printed(result, capsys), printed(result, capsys, every_mode=True)
    assert "1 more with shares below 0.005 %: --all shows them" in short
    assert "--all" not in full
    assert len(full.splitlines()) == len(short.splitlines())  # a row instead of the remark


def test_ways_have_three_digits(found: Modes, capsys: pytest.CaptureFixture[str]) -> None:
    result = found.to_dict()
    line = result["emitters"][0]["modes"][0]
    ways = {7.9961: "8.00", 0.17: "0.170", 12.02: "12.0", 1234.5: "1234", 2.5e7: "2.50e+07"}
    for length, expected in ways.items():
        line["attenuation_length_um"] = [length] * len(line["wavelength_nm"])
        assert f" {expected}   " in printed(result, capsys)


def test_one_wavelength(path: Path) -> None:
    result = run(path, "--wavelength", 550)
    assert result.exit_code == 0
    assert "emitter green, 550 nm" in result.stdout
    result = run(path, "--wavelength", 551)
    assert result.exit_code == 2
    assert "found 551 nm; expected a wavelength of the case, 520 to 580 nm" in result.stderr


@pytest.mark.parametrize("picture", pictures_modes.PICTURES)
def test_pictures(picture: str, path: Path, found: Modes, tmp_path: Path) -> None:
    figure = pictures_modes.draw(picture, optics.read_case(path), found)
    file = tmp_path / "picture.svg"
    figure.savefig(file)
    text = file.read_text()
    assert len(text) > 5000
    words = {
        text.get_text()
        for axes in figure.axes
        for text in (*axes.texts, axes.title, axes.get_yaxis().label, *axes.get_yticklabels())
    } | {axes.get_title(loc="left") for axes in figure.axes}
    expected = {
        "dispersion": "TE0",
        "fields": "TE0 (guided)",
        "absorption": "absorbed in CAT",
    }[picture]
    assert any(word.startswith(expected) for word in words)


def ribbons(figure: Figure) -> list[LineCollection]:
    return [one for axes in figure.axes for one in axes.collections
            if isinstance(one, LineCollection)]  # fmt: skip


def test_width_of_a_line_grows_with_its_share(path: Path, found: Modes) -> None:
    figure = pictures_modes.draw("dispersion", optics.read_case(path), found)
    (emitter,) = found.emitters
    shown = [line for line in emitter.lines if set(line.kind) != {"overdamped"}]
    drawn = ribbons(figure)
    assert len(drawn) == len([line for line in shown if line.wavelength_nm.size > 1])
    widths = np.array([np.max(one.get_linewidth()) for one in drawn])
    strongest = max(shown, key=lambda line: float(np.nan_to_num(line.share).max()))
    widest = drawn[int(widths.argmax())]
    assert widths.max() > widths.min() + 1.0
    # The first piece of the widest ribbon begins where the strongest mode does.
    start = widest.get_segments()[0][0]
    assert start == pytest.approx(
        [strongest.wavelength_nm[0], strongest.effective_index[0].real], rel=1e-12
    )


def test_ribbons_have_neither_seams_nor_transparency(path: Path, found: Modes) -> None:
    figure = pictures_modes.draw("dispersion", optics.read_case(path), found)
    for ribbon in ribbons(figure):
        assert ribbon.get_capstyle() == "round"
        assert (ribbon.get_colors()[:, 3] == 1.0).all()
        pieces = np.array(ribbon.get_segments())
        assert (pieces[1:, 0] == pieces[:-1, 1]).all()
        assert np.abs(np.diff(ribbon.get_linewidth())).max() < 1.0


def test_every_mode_and_every_light_line_is_named(path: Path, found: Modes) -> None:
    figure = pictures_modes.draw("dispersion", optics.read_case(path), found)
    labels = [text.get_text() for axes in figure.axes for text in axes.texts]
    for line in found.emitters[0].lines:
        if set(line.kind) != {"overdamped"}:
            assert any(label.split("  ")[0] == line.name for label in labels)
    for medium in ("substrate", "TCO", "EML", "surroundings"):
        assert any(medium in label for label in labels)


def test_names_threads_do_not_strike_numbers_out(path: Path, found: Modes) -> None:
    figure = pictures_modes.draw("dispersion", optics.read_case(path), found)
    axes = figure.axes[-1]
    numbers = axes.get_yticklabels()
    assert numbers
    assert all(one.get_bbox_patch().get_facecolor() == (1.0, 1.0, 1.0, 1.0) for one in numbers)
    assert all(text.get_zorder() < axes.yaxis.get_zorder() for text in axes.texts)


def test_modes_far_out_have_an_axis_of_their_own() -> None:
    case = optics.read_case("cases/transparent-porthole.toml")
    result = optics.modes(case, 540.0)
    figure = pictures_modes.draw("dispersion", case, result)
    upper, lower = figure.axes
    far = max(line.effective_index[0].real for line in result.emitters[0].lines)
    assert far > 4.0
    assert upper.get_ylim()[0] < far < upper.get_ylim()[1]
    assert lower.get_ylim()[1] < 2.5


def test_negative_shares_are_shown_with_their_sign(
    found: Modes, capsys: pytest.CaptureFixture[str]
) -> None:
    result = found.to_dict()
    result["emitters"][0]["modes"][0]["share"] = -0.0723
    assert "-7.23" in printed(result, capsys)


def test_fields_say_which_mode_runs_backward(path: Path, found: Modes) -> None:
    (emitter,) = found.emitters
    line = emitter.line("TE0")
    turned = replace(line, direction=("backward",) * line.wavelength_nm.size)
    lines = tuple(turned if one is line else one for one in emitter.lines)
    changed = replace(found, emitters=(replace(emitter, lines=lines),))
    figure = pictures_modes.draw("fields", optics.read_case(path), changed)
    titles = [axes.get_title(loc="left") for axes in figure.axes]
    assert [title for title in titles if "backward" in title] == [
        title for title in titles if title.startswith("TE0 (guided, backward)")
    ]
    assert any("backward" in title for title in titles)


def test_an_unknown_picture_is_refused(path: Path, found: Modes) -> None:
    with pytest.raises(ValueError, match="expected one of dispersion, fields, absorption"):
        pictures_modes.draw("chain", optics.read_case(path), found)


def test_the_command_offers_the_pictures_there_are() -> None:
    assert cli.modes.PICTURES == pictures_modes.PICTURES


def test_files(path: Path, tmp_path: Path) -> None:
    files = [tmp_path / f"modes{suffix}" for suffix in (".json", ".csv", ".nc", ".png")]
    result = run(path, *(part for file in files for part in ("-o", file)))
    assert result.exit_code == 0
    assert all(file.stat().st_size > 200 for file in files)
    assert (tmp_path / "modes.csv").read_text().startswith("emitter,mode,polarization,leaky")
    refused = run(path, "--picture", "fields")
    assert refused.exit_code == 2
    assert "needs a file" in refused.stderr


@pytest.mark.parametrize(
    ("table", "columns"),
    [
        ("modes", "emitter,mode,polarization,leaky,wavelength_nm"),
        ("trapped", "emitter,destination,budget,guided_modes,plasmons,remainder"),
        ("absorption", "emitter,place,share"),
        ("fields", "emitter,mode,wavelength_nm,height_nm,electric,magnetic,index"),
    ],
)
def test_tables_of_csv_files(table: str, columns: str, path: Path, tmp_path: Path) -> None:
    file = tmp_path / "table.csv"
    assert run(path, "-o", file, "--table", table).exit_code == 0
    first, *rows = file.read_text().splitlines()
    assert first.startswith(columns)
    assert rows


def test_a_table_needs_a_csv_file(path: Path, tmp_path: Path) -> None:
    refused = run(path, "--table", "fields", "-o", tmp_path / "modes.nc")
    assert refused.exit_code == 2
    assert "--table fields needs a file: give -o with .csv" in refused.stderr
    assert not list(tmp_path.iterdir())
