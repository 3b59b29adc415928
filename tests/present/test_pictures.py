"""Pictures say what the numbers say, name what they show, and can be told apart in gray."""

from __future__ import annotations

from itertools import combinations, pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from budget_examples import DESTINATIONS, budget, chain
from click.testing import CliRunner, Result
from matplotlib.figure import Figure
from matplotlib.text import Annotation

import optics
from optics.cli import main
from optics.device.case import case_from_dict
from optics.outcome.dispersion import dispersion
from optics.outcome.resolved import shares_by_wavelength
from optics.present import plots
from optics.present.pictures import PICTURES, SUFFIXES, draw, write
from optics.present.pictures_areas import bands
from optics.present.pictures_chain import chain_figure, steps
from optics.present.pictures_dispersion import light_lines
from optics.present.pictures_style import LOOKS, spread
from optics.present.wording import CHAIN_LABELS

# Enough films of nearly the same index to crowd the names; two emitters; slabs on both sides.
DOCUMENT: dict[str, Any] = {
    "title": "two emitters, invented",
    "wavelength": {"start_nm": 500, "stop_nm": 600, "step_nm": 20},
    "materials": {
        "htl": {"n": 1.76}, "ebl": {"n": 1.74}, "host": {"n": 1.78}, "etl": {"n": 1.72},
        "aligned": {"n_ordinary": 1.80, "n_extraordinary": 1.70}, "twin": {"n": 1.721},
    },
    "substrate": {"material": "bk7", "thickness_mm": 0.7},
    "cover": {"material": "bk7", "thickness_mm": 0.7},
    "layers": [
        {"name": "anode", "material": "ito", "thickness_nm": 100},
        {"name": "HTL", "material": "htl", "thickness_nm": 40},
        {"name": "EBL", "material": "ebl", "thickness_nm": 10},
        {"name": "EML-a", "material": "host", "thickness_nm": 20},
        {"name": "EML-b", "material": "aligned", "thickness_nm": 20},
        {"name": "ETL", "material": "etl", "thickness_nm": 40},
        {"name": "EIL", "material": "twin", "thickness_nm": 5},
        {"name": "cathode", "material": "ag", "thickness_nm": 12},
    ],
    "emitters": [
        {
            "name": name, "layer": f"EML-{name}", "zone": zone, "quantum_yield": 0.8, "share": 0.5,
            "spectrum": {"peak_nm": peak, "fwhm_nm": 30},
        }
        for name, peak, zone in (
            ("a", 540, {"shape": "uniform"}), ("b", 560, {"shape": "point", "at": 0.25}),
        )
    ],
}  # fmt: skip


@pytest.fixture(scope="module")
def case() -> optics.Case:
    return case_from_dict(DOCUMENT)


@pytest.fixture(scope="module")
def outcome(case: optics.Case) -> optics.Budget:
    return optics.budget(case, tolerance=1e-4)


def texts(figure: Figure) -> list[str]:
    return [text.get_text() for text in figure.findobj(match=lambda one: hasattr(one, "get_text"))]


def gray(color: str) -> float:
    """Luma of a color, 0 to 1, as a gray print would show it."""
    red, green, blue = (int(color[place : place + 2], 16) / 255 for place in (1, 3, 5))
    return 0.299 * red + 0.587 * green + 0.114 * blue


def test_every_destination_has_a_look_and_plain_ones_differ_in_gray() -> None:
    assert set(LOOKS) == set(DESTINATIONS)
    hatches = [look.hatch for look in LOOKS.values() if look.hatch]
    assert len(set(hatches)) == len(hatches)
    for one, other in combinations([look for look in LOOKS.values() if not look.hatch], 2):
        assert abs(gray(one.color) - gray(other.color)) > 0.15
    for look in LOOKS.values():
        ink = 1.0 if look.ink == "white" else float(look.ink)
        assert abs(ink - gray(look.color)) > 0.4  # text on it can be read


def test_the_chain_loses_one_piece_after_the_other() -> None:
    unit = chain("device")
    rows = steps(unit, list(CHAIN_LABELS))
    losses = [row for row in rows if row.key and not row.key.startswith("air")]
    assert losses[0].stop == 1.0
    for above, below in pairwise(losses):
        assert below.stop == pytest.approx(above.start, abs=1e-12)
    for row in rows:
        if row.key:
            assert row.stop - row.start == pytest.approx(unit[row.key], abs=1e-12)
    left = {row.name: row.stop for row in rows if not row.key}
    assert left == pytest.approx(
        {"charge injected": 1.0, "light generated": 0.8, "light that leaves": 0.2}
    )


def test_one_bright_side_stands_for_the_sum() -> None:
    names = [row.name for row in steps(chain("device"), ["nonradiative", "air_bottom"])]
    assert names[-1] == CHAIN_LABELS["air_bottom"]
    assert "light that leaves" not in names


def test_the_chain_shows_every_unit_and_the_total() -> None:
    figure = chain_figure(budget("lower", "upper"))
    shown = texts(figure)
    assert {"unit lower", "unit upper", "of the charge injected (%)"} <= set(shown)
    assert any("External quantum efficiency 40.00 %: the sum" in text for text in shown)
    assert shown.count("\N{MINUS SIGN}24.00") == 2  # substrate, 0.8 x 0.30, in both units


def test_areas_fill_the_axis(case: optics.Case, outcome: optics.Budget) -> None:
    stack = bands(shares_by_wavelength(case, outcome, "a"))
    assert [band.key for band in stack] == list(LOOKS)
    np.testing.assert_array_equal(stack[0].low, 0.0)
    np.testing.assert_allclose(stack[-1].high, 1.0, atol=1e-4)
    for below, above in pairwise(stack):
        np.testing.assert_array_equal(below.high, above.low)


def test_light_lines_that_coincide_share_a_name(case: optics.Case, outcome: optics.Budget) -> None:
    lines = light_lines(dispersion(case, outcome, "a"))
    names = [line.name for line in lines]
    assert "surroundings" in names
    assert "substrate, cover" in names
    assert "ETL, EIL" in names
    assert {"EML-b ordinary", "EML-b extraordinary"} <= set(names)
    assert not any("cathode" in name for name in names)
    ends = [line.n[-1] for line in lines]
    assert ends == sorted(ends)


@pytest.mark.parametrize("picture", PICTURES)
def test_pictures_name_what_they_show(
    picture: str, case: optics.Case, outcome: optics.Budget
) -> None:
    figure = draw(picture, case, outcome, 1e-4)
    shown = texts(figure)
    assert "two emitters, invented" in shown
    axis = {
        "chain": "of the charge injected (%)",
        "wavelength": "vacuum wavelength (nm)",
        "position": "position in EML-a (nm from its bottom face, 20 nm thick)",
        "dispersion": "effective index (in-plane wavevector over that in vacuum)",
        "sensitivity": "EQE, relative (%)",
    }
    assert axis[picture] in shown
    if picture == "dispersion":
        for line in light_lines(dispersion(case, outcome, "b")):
            assert line.name in shown
    if picture == "position":
        assert "all at 5 nm" in shown
    if picture in ("wavelength", "position"):
        bright = {key for key, share in outcome.destinations.items() if share and share > 0.05}
        assert {LOOKS[key].short for key in bright} <= set(shown)


@pytest.mark.parametrize("picture", ["wavelength", "position", "dispersion"])
def test_names_do_not_cover_each_other(
    picture: str, case: optics.Case, outcome: optics.Budget
) -> None:
    figure = draw(picture, case, outcome, 1e-4)
    figure.draw_without_rendering()
    for axes in figure.axes:
        labels = [text for text in axes.texts if text.get_text()]
        boxes = [
            # Of an annotation only its text, not the line that leads away from it.
            super(Annotation, label).get_window_extent() if isinstance(label, Annotation)
            else label.get_window_extent()
            for label in labels
        ]  # fmt: skip
        for one, other in combinations(range(len(boxes)), 2):
            width = min(boxes[one].x1, boxes[other].x1) - max(boxes[one].x0, boxes[other].x0)
            height = min(boxes[one].y1, boxes[other].y1) - max(boxes[one].y0, boxes[other].y0)
            # Boxes hold the room for accents too, so they may touch a little.
            assert min(width, height) < 2.5, (labels[one].get_text(), labels[other].get_text())


@pytest.mark.parametrize("picture", PICTURES)
def test_a_single_line_and_a_single_point_can_be_drawn(picture: str, tmp_path: Path) -> None:
    one = dict(DOCUMENT["emitters"][1], spectrum={"line_nm": 550}, share=1.0)
    case = case_from_dict(DOCUMENT | {"emitters": [one], "wavelength": {"values_nm": [524]}})
    figure = draw(picture, case, optics.budget(case, tolerance=1e-4), 1e-4)
    path = tmp_path / "one.png"
    write(figure, path)
    assert path.read_bytes().startswith(b"\x89PNG")
    if picture == "wavelength":
        assert "all at 550 nm" in texts(figure)


@pytest.mark.parametrize("suffix", SUFFIXES)
def test_the_same_numbers_give_the_same_file(suffix: str, tmp_path: Path) -> None:
    files = [tmp_path / f"{name}{suffix}" for name in ("one", "two")]
    for path in files:
        write(chain_figure(budget()), path)
    first, second = (path.read_bytes() for path in files)
    assert first == second
    assert b"CreationDate" not in first
    assert b"dc:date" not in first


def test_formats_are_those_of_all_pictures() -> None:
    assert SUFFIXES == plots.SUFFIXES


def test_labels_move_apart_within_their_room() -> None:
    assert spread([0.2, 0.5], 0.1, 0.0, 1.0) == [0.2, 0.5]
    moved = spread([0.90, 0.95, 0.99], 0.1, 0.0, 1.0)
    assert moved == pytest.approx([0.8, 0.9, 1.0])
    crowded = spread([0.5] * 30, 0.1, 0.0, 1.0)
    assert crowded == pytest.approx(list(np.linspace(0.0, 1.0, 30)))
    assert spread([], 0.1, 0.0, 1.0) == []


def test_an_unknown_picture_is_refused(case: optics.Case, outcome: optics.Budget) -> None:
    with pytest.raises(ValueError, match="found 'pie'; expected one of chain"):
        draw("pie", case, outcome, 1e-4)


@pytest.fixture
def case_file(tmp_path: Path) -> Path:
    path = tmp_path / "case.toml"
    path.write_text(
        'title = "invented"\nwavelength = { values_nm = [550] }\nmaterials.host.n = 1.75\n'
        'layers = [{ name = "EML", material = "host", thickness_nm = 30 }]\n'
        'emitters = [{ name = "green", layer = "EML", zone = { shape = "uniform" }, '
        "spectrum = { line_nm = 550 }, quantum_yield = 0.9 }]\n"
    )
    return path


def run(*arguments: object) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments])


def test_the_command_draws_the_chain_unless_told_otherwise(
    case_file: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from optics.present import pictures

    asked: list[str] = []
    real = pictures.draw

    def spy(picture: str, *rest: Any) -> Figure:
        asked.append(picture)
        return real(picture, *rest)

    monkeypatch.setattr(pictures, "draw", spy)
    for suffix in SUFFIXES:
        path = case_file.with_name(f"out{suffix}")
        assert run("budget", case_file, "-o", path).exit_code == 0
        assert path.stat().st_size > 1000
    path = case_file.with_name("positions.png")
    result = run("budget", case_file, "--json", "-o", path, "--picture", "position")
    assert result.exit_code == 0
    assert result.stdout.startswith("{")
    assert asked == ["chain", "chain", "chain", "position"]
    assert run("budget", case_file).exit_code == 0
    assert len(asked) == 4  # nothing is drawn that nobody asked for


def test_a_picture_without_a_file_is_a_fault(case_file: Path) -> None:
    for words in ([], ["-o", case_file.with_name("out.json")]):
        result = run("budget", case_file, "--picture", "chain", *words)
        assert result.exit_code == 2
        assert "--picture chain needs a file" in result.stderr
    assert run("budget", case_file, "--picture", "pie").exit_code == 2
