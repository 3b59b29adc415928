"""A sweep for eyes and programs: best points, words, files, pictures, the command."""

from __future__ import annotations

import json
import signal
import sys
import time
from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
import pytest
import xarray
from click.testing import CliRunner, Result
from own_process import kept_in, stopped
from study_case import DEVICE

from optics.cli import main
from optics.present.sweep import (
    best_point,
    direction,
    leading,
    print_sweep,
    sweep_dict,
    sweep_frame,
)
from optics.present.sweep_pictures import sweep_figure
from optics.present.sweep_progress import _Lines, spell
from optics.present.terminal import console

HTL, ETL = "layers.HTL.thickness_nm", "layers.ETL.thickness_nm"
EQE, GUIDED, X = "external_quantum_efficiency", "destinations.guided", "bottom.x_normal"

CASE = (
    DEVICE
    + """\
[sweep]
outcomes = ["external_quantum_efficiency", "destinations.guided"]
[sweep.axes]
"""
)
AXIS = '"layers.ETL.thickness_nm" = { start = 20, stop = 80, step = 10 }\n'


def made(sizes: dict[str, int], names: tuple[str, ...] = (EQE, GUIDED, X)) -> xarray.Dataset:
    """A sweep with invented values: EQE is best at the second, guided least at the last place."""
    grids = np.meshgrid(*(np.arange(float(n)) for n in sizes.values()), indexing="ij")
    bowl = sum((grid - 1.0) ** 2 for grid in grids)
    values = {EQE: 0.3 - 0.01 * bowl, GUIDED: 0.5 - 0.01 * sum(grids), X: 0.2 + 0.01 * grids[0]}
    dims = tuple(sizes)
    return xarray.Dataset(
        {n: (dims, values[n], {"units": "1", "long_name": n}) for n in names},
        coords={d: (d, 10.0 + 10.0 * np.arange(n), {"units": "nm"}) for d, n in sizes.items()},
        attrs={
            "schema": "outcouple.sweep/1", "version": "0", "title": "invented", "failed": "",
            "case_sha256": "0", "tolerance": 1e-6, "energy_balance": 1e-8,
            "integration_error": 2e-7, "warnings": "",
        },
    )  # fmt: skip


def test_best_is_most_or_least_or_nothing() -> None:
    found = made({HTL: 4, ETL: 3})
    assert [direction(found[name]) for name in (EQE, GUIDED, X)] == [1, -1, 0]
    assert best_point(found[EQE]) == {HTL: 20.0, ETL: 20.0}
    assert best_point(found[GUIDED]) == {HTL: 40.0, ETL: 30.0}
    assert best_point(found[X]) is None
    assert leading(found[[X, GUIDED]]) == GUIDED
    assert best_point(found[EQE].where(found[EQE] > 1.0)) is None
    assert best_point(found[EQE].where(found[HTL] != 20.0)) == {HTL: 10.0, ETL: 20.0}


def test_json_is_plain_with_null_for_what_is_undefined() -> None:
    from optics.present.files import as_json

    found = made({HTL: 2, ETL: 3})
    found[X] = found[X].where(found[HTL] == 10.0)
    told = json.loads(as_json(sweep_dict(found)))
    assert told["schema"] == "outcouple.sweep/1"
    assert list(told["axes"]) == [HTL, ETL]
    assert told["axes"][ETL] == {"units": "nm", "values": [10.0, 20.0, 30.0]}
    assert told["outcomes"][X]["values"] == [[0.2] * 3, [None] * 3]
    assert told["outcomes"][EQE]["best_at"] == {HTL: 20.0, ETL: 20.0}
    assert told["failed"] == []


def test_table_has_a_row_for_each_point() -> None:
    frame = sweep_frame(made({HTL: 2, ETL: 3}))
    assert list(frame.columns) == [HTL, ETL, EQE, GUIDED, X]
    assert frame[ETL].tolist() == [10.0, 20.0, 30.0] * 2
    assert frame[EQE][4] == 0.3


def test_words_name_ranges_best_points_and_failures(capsys: pytest.CaptureFixture[str]) -> None:
    found = made({ETL: 3}).assign_attrs(failed="a: why\nb: why", warnings="take care")
    print_sweep(console(sys.stdout), found)
    said = capsys.readouterr().out
    assert "ETL thickness (nm)" in said
    assert "0.3 *" in said  # the best of a short sweep is marked
    assert "energy balance 1e-08, integration error 2e-07" in said
    assert "Failed: a: why" in said
    assert "Warning: take care" in said


@pytest.fixture
def clock(monkeypatch: pytest.MonkeyPatch) -> list[float]:
    """The time in seconds, to be set."""
    now = [0.0]
    monkeypatch.setattr(time, "monotonic", lambda: now[0])
    return now


def test_time_left_is_reckoned_from_this_run_only(clock: list[float]) -> None:
    said: list[str] = []
    lines = _Lines(said.append)
    for clock[0], done in ((0.0, 50), (5.0, 60), (20.0, 70), (40.0, 100)):
        lines(done, 100)
    assert said == ["50 of 100 points are there from an earlier run", "70 of 100 points, 45 s left"]
    assert [spell(s) for s in (3.2, 59.6, 600.0, 7500.0)] == ["3 s", "1 min", "10 min", "2 h 5 min"]


def test_time_left_knows_nothing_of_the_first_compilation(clock: list[float]) -> None:
    """A minute for the compiler, then 10 points every 5 s: 160 points take 80 s."""
    said: list[str] = []
    lines = _Lines(said.append)
    # Two workers that waited for the same compiler come at once, which is no rate.
    steps = [(0.0, 0), (60.0, 10), (60.1, 20), (65.0, 20), (65.1, 30), (70.1, 40), (75.1, 50)]
    for clock[0], done in steps:
        lines(done, 200)
    assert said == ["10 of 200 points", "40 of 200 points, 1 min left"]
    # Each stage may begin with a compilation of its own.
    for clock[0], done in ((80.0, 0), (160.0, 1), (171.0, 2)):
        lines(done, 4, "polishing")
    assert said[2:] == ["1 of 4 polishing", "2 of 4 polishing, 22 s left"]


@pytest.mark.parametrize(
    "sizes",
    [{ETL: 5}, {ETL: 1}, {HTL: 4, ETL: 3}, {HTL: 1, ETL: 4}, {HTL: 4, ETL: 3, "q": 3},
     {HTL: 4, ETL: 3, "q": 7, "r": 2, "s": 2}],
)  # fmt: skip
def test_every_dimension_has_a_picture(sizes: dict[str, int], tmp_path: Path) -> None:
    figure = sweep_figure(made(sizes))
    figure.savefig(tmp_path / "one.png")
    assert figure.axes


def markers(figure: Any) -> list[tuple[float, float]]:
    return [
        (line.get_xdata()[0], line.get_ydata()[0])
        for axes in figure.axes
        for line in axes.lines
        if line.get_marker() == "*"
    ]


def test_maps_mark_the_best_point_of_the_first_outcome_on_all() -> None:
    figure = sweep_figure(made({HTL: 4, ETL: 3}))
    assert markers(figure) == [(20.0, 20.0)] * 3
    words = figure._supxlabel.get_text()  # type: ignore[attr-defined]
    assert "best external_quantum_efficiency, 30 %, at HTL thickness 20 nm, ETL thickness" in words


def test_small_multiples_mark_it_once() -> None:
    figure = sweep_figure(made({HTL: 4, ETL: 3, "q": 7}), [EQE])
    assert markers(figure) == [(20.0, 20.0)]
    titles = [axes.get_title() for axes in figure.axes if axes.get_title()]
    assert len(titles) == 5  # of seven values, the best among them
    assert any("20" in title for title in titles)


def test_curves_show_the_numbers_in_percent() -> None:
    figure = sweep_figure(made({ETL: 3}))
    (eqe,) = [line for line in figure.axes[0].lines if line.get_label() == EQE]
    assert np.asarray(eqe.get_ydata()) == pytest.approx([29.0, 30.0, 29.0])
    assert figure.axes[0].get_ylabel() == "%"


def test_undefined_and_constant_maps_say_so() -> None:
    found = made({HTL: 4, ETL: 3})
    found[EQE] = xarray.full_like(found[EQE], np.nan)
    found[X] = xarray.full_like(found[X], 0.25)
    texts = [text.get_text() for axes in sweep_figure(found).axes for text in axes.texts]
    assert "undefined" in texts
    assert "0.25 everywhere" in texts


@pytest.fixture
def case(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.setattr("optics.study.store.progress_folder", lambda: tmp_path / "kept")
    mpl.use("agg")
    path = tmp_path / "case.toml"
    path.write_text(CASE + AXIS)
    return path


def run(*arguments: object) -> Result:
    return CliRunner().invoke(main, ["sweep", *map(str, arguments)])


def test_command_writes_every_format(case: Path) -> None:
    ends = ("json", "csv", "nc", "png")
    paths = [case.with_name(f"out.{end}") for end in ends]
    done = run(case, "--json", *(part for path in paths for part in ("-o", path)))
    assert done.exit_code == 0
    told = json.loads(done.stdout)
    assert json.loads(paths[0].read_text()) == told
    assert len(told["outcomes"][EQE]["values"]) == 7
    with xarray.open_dataset(paths[2], engine="h5netcdf") as found:
        assert found[EQE].dims == (ETL,)
        assert found[ETL].attrs["units"] == "nm"
        assert found[EQE].to_numpy().tolist() == told["outcomes"][EQE]["values"]
    assert paths[1].read_text().splitlines()[0] == f"{ETL},{EQE},{GUIDED}"
    assert not list((case.parent / "kept").glob("*"))


def test_command_names_faults_with_status_2(case: Path) -> None:
    assert run(case, "--outcome", "destinations.giuded").exit_code == 2
    said = run(case, "--outcome", "destinations.giuded").stderr
    assert said.rstrip().endswith("(did you mean destinations.guided?)")
    case.write_text((CASE + AXIS).replace("destinations.guided", "guidde"))
    refused = run(case, "-o", case.with_name("out.csv"))
    assert refused.exit_code == 2
    assert "sweep.outcomes[1]: found guidde, no such outcome" in refused.stderr
    assert not case.with_name("out.csv").exists()


def test_command_names_failed_points_with_status_1_and_writes_the_rest(case: Path) -> None:
    axis = '"layers.EML.thickness_nm" = { values = [30, 20] }\n'
    place = '"emitters.green.zone.at_nm" = { values = [10, 25] }\n'
    case.write_text(CASE + axis + place)
    done = run(case, "-o", case.with_name("out.csv"))
    assert done.exit_code == 1
    assert "Failed: layers.EML.thickness_nm = 20, emitters.green.zone.at_nm = 25" in done.stdout
    rows = case.with_name("out.csv").read_text().splitlines()
    assert [row.endswith(",,") for row in rows[1:]] == [False, False, False, True]


def test_a_result_that_cannot_be_written_is_still_kept(
    case: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(*_: object, **__: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("optics.present.files.publish", full)
    lost = run(case, "-o", case.with_name("out.csv"))
    assert lost.exit_code == 1
    assert "7 of 7 points are kept; the same command continues from there." in lost.stderr
    monkeypatch.undo()
    monkeypatch.setattr("optics.study.store.progress_folder", lambda: case.parent / "kept")
    monkeypatch.setattr("optics.study.sweep.compute_block", full)
    assert run(case).exit_code == 0  # nothing is computed again


@pytest.mark.slow  # waits for a process of its own
@pytest.mark.skipif(sys.platform == "win32", reason="signals of POSIX")
def test_ctrl_c_keeps_what_is_done(tmp_path: Path) -> None:
    case = tmp_path / "case.toml"
    many = '"materials.host.n" = { start = 1.6, stop = 1.9, step = 0.0001 }\n'
    case.write_text(CASE + many)
    status, said = stopped(tmp_path, signal.SIGINT, "sweep", str(case))
    assert status == 1
    assert "points are kept; the same command continues from there." in said
    assert [part.name.split("-")[0] for part in kept_in(tmp_path)] == ["sweep"]
