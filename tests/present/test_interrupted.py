"""Studies that are stopped in the middle: killed, out of disk, with another case in between."""

from __future__ import annotations

import resource
import signal
import subprocess
import sys
from collections.abc import Callable
from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory

import pytest
from own_process import cache_for, kept_in, stopped
from study_case import DEVICE

pytestmark = [
    pytest.mark.slow,  # every run is a process of its own
    pytest.mark.skipif(sys.platform == "win32", reason="signals and limits of POSIX"),
]

ETL, N = "layers.ETL.thickness_nm", "materials.host.n"
STUDIES = {
    "sweep": f"""\
[sweep]
outcomes = ["external_quantum_efficiency", "bottom.delta_uv_45"]
[sweep.axes]
"{N}" = {{ start = 1.6, stop = 1.9, step = 0.002 }}
"{ETL}" = {{ values = [30, 45, 60] }}
""",
    "tolerance": f"""\
[tolerance]
samples = 500
seed = 7
outcomes = ["external_quantum_efficiency", "bottom.delta_uv_45"]
[tolerance.spread]
"{N}" = {{ sd = 0.01 }}
"{ETL}" = {{ relative_sd = 0.05 }}
""",
    "optimize": f"""\
[optimize]
maximize = "external_quantum_efficiency"
[optimize.variables]
"{N}" = {{ min = 1.6, max = 1.9 }}
"{ETL}" = {{ min = 20, max = 90 }}
"layers.EML.thickness_nm" = {{ min = 20, max = 40 }}
[optimize.constraints]
"bottom.delta_uv_45" = {{ max = 0.02 }}
""",
}


def write_case(folder: Path, study: str, **changed: str) -> Path:
    text = DEVICE + STUDIES[study]
    for old, new in changed.items():
        text = text.replace(f"{old} = ", f"{old} = {new} # ", 1)
    path = folder / "case.toml"
    path.write_text(text, encoding="utf-8")
    return path


def finished(
    folder: Path, *words: str, limits: Callable[[], None] | None = None
) -> subprocess.CompletedProcess[str]:
    """Run a command to its end, with the cache in a folder."""
    return subprocess.run(
        [sys.executable, "-m", "optics.cli", *words],
        env=cache_for(folder),
        capture_output=True,
        text=True,
        check=False,
        timeout=300,
        preexec_fn=limits,
    )


@cache
def whole(study: str, **changed: str) -> bytes:
    """What an undisturbed run writes; computed once."""
    with TemporaryDirectory() as name:
        folder = Path(name)
        case = write_case(folder, study, **changed)
        done = finished(folder, study, str(case), "-o", str(folder / "whole.json"))
        assert done.returncode == 0, done.stderr
        return (folder / "whole.json").read_bytes()


@pytest.mark.parametrize("study", STUDIES)
def test_killed_and_started_again_it_ends_with_the_same_bytes(study: str, tmp_path: Path) -> None:
    """Killed twice, so that the second run has results of the first and adds its own."""
    case = write_case(tmp_path, study)
    target = tmp_path / "found.json"
    words = (study, str(case), "-o", str(target))
    for growths in (1, 2):
        status, _ = stopped(tmp_path, signal.SIGKILL, *words, growths=growths)
        assert status == -signal.SIGKILL
        assert not target.exists()
        assert kept_in(tmp_path)
    done = finished(tmp_path, *words)
    assert done.returncode == 0, done.stderr
    assert target.read_bytes() == whole(study)
    assert kept_in(tmp_path) == []


@pytest.mark.parametrize("study", STUDIES)
def test_a_changed_case_takes_nothing_of_the_old_one(study: str, tmp_path: Path) -> None:
    case = write_case(tmp_path, study)
    stopped(tmp_path, signal.SIGINT, study, str(case), growths=1)
    (old,) = {part.name for part in kept_in(tmp_path)} or {""}
    write_case(tmp_path, study, quantum_yield="0.8")
    target = tmp_path / "found.json"
    done = finished(tmp_path, study, str(case), "-o", str(target))
    assert done.returncode == 0, done.stderr
    assert target.read_bytes() == whole(study, quantum_yield="0.8")
    assert old in {part.name for part in kept_in(tmp_path)}


@pytest.mark.parametrize("study", STUDIES)
def test_a_full_disk_costs_nothing_but_the_progress(study: str, tmp_path: Path) -> None:
    """No file may grow beyond 2 kB: progress is lost with a word, results are absent or whole."""

    def full() -> None:
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        resource.setrlimit(resource.RLIMIT_FSIZE, (2048, 2048))

    case = write_case(tmp_path, study)
    target = tmp_path / "found.json"
    done = finished(tmp_path, study, str(case), "-o", str(target), limits=full)
    assert done.returncode == 1
    assert "File too large" in done.stderr
    assert "Traceback" not in done.stderr
    assert not target.exists()
    assert [path.name for path in tmp_path.glob("*found*")] == []
    # Whatever the full disk has left behind, the next run ends right.
    again = finished(tmp_path, study, str(case), "-o", str(target))
    assert again.returncode == 0, again.stderr
    assert target.read_bytes() == whole(study)
