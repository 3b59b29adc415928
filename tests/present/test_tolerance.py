"""A tolerance study for eyes and programs: words, files, pictures, the command."""

from __future__ import annotations

import json
import signal
import sys
from pathlib import Path

import matplotlib as mpl
import numpy as np
import pytest
import xarray
from click.testing import CliRunner, Result
from matplotlib.colors import to_hex
from own_process import kept_in, stopped
from study_case import DEVICE

from optics.cli import main
from optics.present.terminal import console
from optics.present.tolerance import limit_text, print_tolerance, ranked, with_error
from optics.present.tolerance_pictures import tolerance_figure
from optics.study.chaos import Influence
from optics.study.draws import Spread
from optics.study.intervals import Estimate
from optics.study.tolerance_result import Linear, OutcomeSpread, Tolerance, Yield

HTL, ETL, THETA = (
    "layers.HTL.thickness_nm", "layers.ETL.thickness_nm", "emitters.green.horizontal_fraction",
)  # fmt: skip
EQE, X = "external_quantum_efficiency", "bottom.x_normal"
SAMPLES = 400

CASE = (
    DEVICE
    + """\
[tolerance]
samples = 32
seed = 5
outcomes = ["external_quantum_efficiency", "destinations.guided"]
[tolerance.spread]
"layers.ETL.thickness_nm" = { sd = 2 }
"emitters.green.quantum_yield" = { half_width = 0.02 }
[tolerance.limits]
"external_quantum_efficiency" = { min = 0.1 }
"""
)


def about(value: float, half: float) -> Estimate:
    return Estimate(value, value - half, value + half)


def made() -> Tolerance:
    """A study with invented numbers: the EQE falls off a maximum, the color has no samples."""
    source = np.random.default_rng(1)
    htl, etl = source.normal(40.0, 2.0, SAMPLES), source.normal(50.0, 1.0, SAMPLES)
    theta = source.uniform(0.7, 0.8, SAMPLES)
    eqe = 0.25 - 0.001 * (htl - 40.0) ** 2 + 0.02 * (theta - 0.75)
    influence = Influence(
        (about(0.1, 0.01), about(0.7, 0.02)), (about(0.3, 0.01), about(0.9, 0.02)), 0.01, 9
    )
    paths = (HTL, THETA, ETL)
    linear = Linear(
        0.25, 0.001, {HTL: 0.0, THETA: 0.02, ETL: 0.0}, (0.0, 1.0), ("mean 0.246, not 0.25",)
    )
    nothing = Estimate(None, None, None)
    known = OutcomeSpread(
        EQE, "1", 0.25, about(0.246, 1e-4), about(0.0057, 2e-4),
        (about(0.235, 1e-3), about(0.248, 1e-3), about(0.2508, 1e-4)),
        float(eqe.min()), float(eqe.max()), 0, linear, influence,
    )  # fmt: skip
    lost = OutcomeSpread(
        X, "1", None, nothing, nothing, (nothing,) * 3, None, None, SAMPLES, None, None
    )
    values = {EQE: ("sample", eqe, {}), X: ("sample", np.full(SAMPLES, np.nan), {})}
    varied = dict(zip(paths, (htl, theta, etl), strict=True))
    return Tolerance(
        title="invented", version="0", case_sha256="0", tolerance=1e-6, samples=SAMPLES,
        sequences=16, seed=1,
        spreads=(
            Spread(HTL, 40.0, "normal", 2.0), Spread(THETA, 0.75, "uniform", 0.05),
            Spread(ETL, 50.0, "normal", 1.0),
        ),
        factors=((0, 2), (1,)), correlations=(0.6, None), linked={},
        outcomes=(known, lost),
        yields=(
            Yield(EQE, 0.24, None, about(0.85, 0.01), 1.0, "yield 85.0 %, not 100.0 %"),
            Yield(X, 0.19, 0.2, about(0.0, 0.01), None),
        ),
        joint_yield=Yield(None, None, None, about(0.0, 0.01), None),
        derivatives="exact", accuracy={"energy_balance": 1e-8, "integration_error": 2e-7},
        failed=tuple(f"sample {one}: why" for one in range(12)), warnings=("take care",),
        data=xarray.Dataset(
            values, coords={path: ("sample", varied[path], {}) for path in paths}
        ),
    )  # fmt: skip


def words(text: str) -> list[list[str]]:
    return [line.split() for line in text.splitlines()]


def test_words_tell_yield_outcomes_influences_and_spread(
    capsys: pytest.CaptureFixture[str],
) -> None:
    print_tolerance(console(sys.stdout, plain_width=120), made())
    said = capsys.readouterr().out
    lines = words(said)
    assert [EQE, ">=", "0.24", "85.00", "84.00", "to", "86.00", "100.00", "!"] in lines
    assert ["0.19", "<=", X, "<=", "0.2", "0.00", "-1.00", "to", "1.00", "-"] in lines
    assert [EQE, "0.25", "0.24600", "±", "0.00010", "0.00570", "±", "0.00020",
            "0.235", "0.248", "0.2508"] in lines  # fmt: skip
    assert ["from", "the", "derivatives", "0.25", "0.001", "!"] in lines
    assert [X, "-", "-", "-", "-", "-", "-"] in lines
    most = ["green", "horizontal", "fraction", "70.0", "±", "2.0", "90.0", "±", "2.0", "100.0"]
    less = [
        "HTL",
        "thickness",
        "+",
        "ETL",
        "thickness",
        "10.0",
        "±",
        "1.0",
        "30.0",
        "±",
        "1.0",
        "0.0",
    ]
    assert lines.index([*most, "#" * 18]) < lines.index([*less, "#" * 6])
    assert "% of its variance; 1.0 % unexplained" in said
    assert "400 samples in 16 independent Sobol sequences, seed 1" in said
    assert "Failed: sample 9: why" in said
    assert "Failed: 2 more points" in said
    assert "Warning: take care" in said
    assert "uniform, ± 0.05" in said


@pytest.mark.parametrize(
    ("found", "text"),
    [
        (about(0.2572027, 0.000109), "0.25720 ± 0.00011"),
        (about(83.805, 0.03), "83.805 ± 0.030"),
        (about(1234.5, 120.0), "1234.5 ± 1.2e+02"),
        (Estimate(0.5, 0.5, 0.5), "0.5"),
        (Estimate(0.5, None, None), "0.5"),
        (Estimate(None, None, None), "-"),
    ],
)
def test_digits_follow_the_error(found: Estimate, text: str) -> None:
    assert with_error(found) == text


def test_limits_and_ranks() -> None:
    found = made()
    assert [limit_text(one) for one in found.yields] == [
        f"{EQE} >= 0.24", f"0.19 <= {X} <= 0.2",
    ]  # fmt: skip
    assert limit_text(Yield("a", None, 2.0, about(0.5, 0.1), None)) == "a <= 2"
    assert [ranked(one) for one in found.outcomes] == [[1, 0], []]


def test_plain_form_is_json_with_null_where_undefined() -> None:
    from optics.present.files import as_json

    told = json.loads(as_json(made().to_dict()))
    assert told["schema"] == "outcouple.tolerance/1"
    assert told["groups"] == [{"paths": [HTL, ETL], "correlation": 0.6}]
    assert told["spread"][THETA] == {
        "units": "1", "nominal": 0.75, "distribution": "uniform",
        "sd": pytest.approx(0.05 / 3**0.5), "half_width": 0.05,
    }  # fmt: skip
    assert told["outcomes"][X]["mean"] == {"value": None, "low": None, "high": None}
    factors = told["outcomes"][EQE]["influence"]["factors"]
    assert [one["paths"] for one in factors] == [[HTL, ETL], [THETA]]
    assert factors[1]["linear"] == 1.0
    assert told["yield"]["limits"][EQE]["linear_holds"] is False
    assert told["yield"]["limits"][X]["linear_holds"] is None
    with pytest.raises(KeyError):
        made().outcome("nothing")


def test_the_picture_holds_samples_limits_prediction_and_ranks() -> None:
    figure = tolerance_figure(made())
    left, right, empty = figure.axes[:3]
    assert left.get_title(loc="left") == f"{EQE} (%)"
    eqe = 100.0 * made().data[EQE].to_numpy()
    inside, outside = (
        sum(bar.get_height() for bar in left.patches if to_hex(bar.get_facecolor()) == color)
        for color in ("#56b4e9", "#d9d9d9")
    )
    assert inside == SAMPLES  # gray lies over what is outside
    assert outside == (eqe < 24.0).sum() > 0
    assert 24.0 in {line.get_xdata()[0] for line in left.lines}
    # No bin holds samples on both sides of the limit.
    edges = {round(bar.get_x(), 9) for bar in left.patches if hasattr(bar, "get_x")}
    assert round(24.0, 9) in edges
    labels = [label.get_text() for label in right.get_yticklabels()]
    assert labels == ["green horizontal fraction", "HTL thickness\n+ ETL thickness"]
    assert right.patches[0].get_width() == pytest.approx(90.0)
    assert [text.get_text() for text in empty.texts] == ["undefined"]
    words_below = figure._supxlabel.get_text()  # type: ignore[attr-defined]
    assert "400 samples, seed 1." in words_below
    one = tolerance_figure(made(), [EQE])
    assert len(one.axes) == 2


@pytest.fixture
def case(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.setattr("optics.study.store.progress_folder", lambda: tmp_path / "kept")
    mpl.use("agg")
    path = tmp_path / "case.toml"
    path.write_text(CASE)
    return path


def run(*arguments: object) -> Result:
    return CliRunner().invoke(main, ["tolerance", *map(str, arguments)])


def test_command_writes_every_format(case: Path) -> None:
    ends = ("json", "csv", "nc", "png")
    paths = [case.with_name(f"out.{end}") for end in ends]
    done = run(case, "--json", *(part for path in paths for part in ("-o", path)))
    assert done.exit_code == 0, done.stderr
    told = json.loads(done.stdout)
    assert json.loads(paths[0].read_text()) == told
    assert (told["samples"], told["seed"]) == (32, 5)
    with xarray.open_dataset(paths[2], engine="h5netcdf") as found:
        assert found[EQE].dims == ("sample",)
        assert found[ETL].attrs["units"] == "nm"
        assert float(found[EQE].mean()) == pytest.approx(told["outcomes"][EQE]["mean"]["value"])
        assert found.attrs["seed"] == 5
    rows = paths[1].read_text().splitlines()
    varied = f"{ETL},emitters.green.quantum_yield"
    assert rows[0] == f"sample,sequence,{varied},{EQE},destinations.guided"
    assert len(rows) == 33
    assert paths[3].stat().st_size > 10_000
    assert not list((case.parent / "kept").glob("*"))


def test_samples_and_seed_of_the_command_come_first(case: Path) -> None:
    done = run(case, "--samples", 8, "--seed", 9)
    assert done.exit_code == 0
    assert "8 samples in 8 independent Sobol sequences, seed 9" in done.stdout
    assert run(case, "--samples", 0).exit_code == 2
    assert run(case, "--seed", -1).exit_code == 2


def test_command_names_faults_with_status_2(case: Path) -> None:
    wrong = run(case, "--outcome", "destinations.giuded")
    assert wrong.exit_code == 2
    assert wrong.stderr.rstrip().endswith("(did you mean destinations.guided?)")
    case.write_text(
        CASE.replace("sd = 2 ", "sd = 0 ").replace('"external_quantum_efficiency" =', '"eqe" =')
    )
    refused = run(case, "-o", case.with_name("out.csv"))
    assert refused.exit_code == 2
    assert 'tolerance.spread."layers.ETL.thickness_nm".sd: found 0; expected a number above 0' in (
        refused.stderr
    )
    assert not case.with_name("out.csv").exists()


def test_command_names_failed_samples_with_status_1_and_writes_the_rest(case: Path) -> None:
    case.write_text(CASE.replace("sd = 2 ", "sd = 30 "))
    done = run(case, "-o", case.with_name("out.csv"))
    assert done.exit_code == 1
    assert "samples failed; they count as outside the limits" in done.stdout
    assert "Failed: sample " in done.stdout
    rows = case.with_name("out.csv").read_text().splitlines()
    assert 0 < sum(row.endswith(",,") for row in rows) < 8


@pytest.mark.slow  # waits for a process of its own
@pytest.mark.skipif(sys.platform == "win32", reason="signals of POSIX")
def test_ctrl_c_keeps_what_is_done(tmp_path: Path) -> None:
    case = tmp_path / "case.toml"
    case.write_text(CASE)
    status, said = stopped(tmp_path, signal.SIGINT, "tolerance", str(case), "--samples", "50000")
    assert status == 1
    assert "points are kept; the same command continues from there." in said
    assert [part.name.split("-")[0] for part in kept_in(tmp_path)] == ["tolerance"]
