"""A study in a process of its own, stopped by a signal once it has something to keep."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

from optics.kernels.compiled import CACHE_FOLDER


def cache_for(folder: Path) -> dict[str, str]:
    """Environment with a cache of its own in a folder, but for the kernels: those are compiled."""
    own = folder / "outcouple" / CACHE_FOLDER.name
    own.parent.mkdir(parents=True, exist_ok=True)
    if not own.exists():
        own.symlink_to(CACHE_FOLDER)
    return {**os.environ, "XDG_CACHE_HOME": str(folder), "PYTHONUNBUFFERED": "1"}


def stopped(folder: Path, sent: signal.Signals, *words: str, growths: int = 2) -> tuple[int, str]:
    """Run a command and stop it after its kept file has grown; exit status and standard error.

    Parameters
    ----------
    folder : Path
        Where the cache is; what is kept lies in `kept_in(folder)`.
    sent : signal.Signals
        SIGINT is Ctrl-C, SIGKILL cannot be caught.
    words : str
        Of the command line.
    growths : int
        Sizes of kept files to be seen first.
    """
    with subprocess.Popen(
        [sys.executable, "-m", "optics.cli", *words],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
        text=True,
        env=cache_for(folder),
        # A test run in the background inherits deafness to Ctrl-C.
        preexec_fn=lambda: signal.signal(signal.SIGINT, signal.SIG_DFL),
    ) as process:
        deadline = time.monotonic() + 300
        seen: set[tuple[str, int]] = set()
        while len(seen) < growths and time.monotonic() < deadline and process.poll() is None:
            seen |= {(part.name, part.stat().st_size) for part in kept_in(folder)}
            time.sleep(0.01)
        process.send_signal(sent)
        _, said = process.communicate(timeout=60)
    return process.returncode, said


def kept_in(folder: Path) -> list[Path]:
    """Files of unfinished studies."""
    return list((folder / "outcouple" / "studies").glob("*.part"))
