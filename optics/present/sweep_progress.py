"""How far a sweep is and how long it will take, on standard error."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Protocol

from optics.present.terminal import console

# Outside a terminal a line appears at most so often, and the first one not before.
_EVERY_S = 10.0


class Show(Protocol):
    """Shows how many parts of a stage are done, and of how many."""

    def __call__(self, done: int, total: int, what: str = "points") -> None:
        """Show it; another name begins another stage."""


@contextmanager
def sweep_progress() -> Iterator[Show]:
    """Yield a function to call with the number of points done and of all.

    A bar with the time left on a terminal, now and then a line elsewhere. The time left is
    reckoned from the points computed in this run; those kept from an earlier one took none.
    """
    out = console(sys.stderr)
    if not out.is_terminal:
        yield _Lines(out.print)
        return
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn
    from rich.progress import TimeRemainingColumn as TimeLeft

    columns = (
        TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), TimeLeft(),
        TextColumn("left"),
    )  # fmt: skip
    with Progress(*columns, console=out, transient=True) as progress:
        task = progress.add_task("points", total=None)

        def show(done: int, total: int, what: str = "points") -> None:
            if progress.tasks[0].description != what:
                progress.reset(task, description=what)
            progress.update(task, completed=done, total=total)

        yield show


class _Lines:
    """Writes a line when enough time has passed since the last one."""

    def __init__(self, write: Callable[[str], None]) -> None:
        self._write = write
        self._began = self._said = time.monotonic()
        self._kept: int | None = None
        self._what = "points"

    def __call__(self, done: int, total: int, what: str = "points") -> None:
        now = time.monotonic()
        if what != self._what:
            self._what, self._kept, self._began = what, None, now
        if self._kept is None:
            self._kept = done
            if done:
                self._write(f"{done} of {total} {what} are there from an earlier run")
        if now - self._said < _EVERY_S or done == total:
            return
        self._said = now
        fresh = done - self._kept
        left = (now - self._began) / fresh * (total - done) if fresh else None
        self._write(f"{done} of {total} {what}" + ("" if left is None else f", {spell(left)} left"))


def spell(seconds: float) -> str:
    """Word a time with two digits of precision or so: ``40 s``, ``5 min``, ``2 h 10 min``.

    Parameters
    ----------
    seconds : float
        Not negative.
    """
    if seconds < 59.5:
        return f"{seconds:.0f} s"
    minutes = round(seconds / 60.0)
    hours, minutes = divmod(minutes, 60)
    return f"{hours} h {minutes} min" if hours else f"{minutes} min"
