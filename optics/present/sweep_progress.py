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


# The first results of several workers come nearly at once, within this time of each other, and a
# rate rests on at least as long a time.
_LEAST_S = 2.0


class Show(Protocol):
    """Shows how many parts of a stage are done, and of how many."""

    def __call__(self, done: int, total: int, what: str = "points") -> None:
        """Show it; another name begins another stage."""


@contextmanager
def sweep_progress() -> Iterator[Show]:
    """Yield a function to call with the number of points done and of all.

    A bar with the time left on a terminal, now and then a line elsewhere.
    """
    out = console(sys.stderr)
    if not out.is_terminal:
        yield _Lines(out.print)
        return
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn

    columns = (
        TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(),
        TextColumn("{task.fields[left]}"),
    )  # fmt: skip
    with Progress(*columns, console=out, transient=True) as progress:
        task = progress.add_task("points", total=None, left="")
        pace = _Pace()

        def show(done: int, total: int, what: str = "points") -> None:
            left = pace.left(done, total, what)
            said = "" if left is None else f"{spell(left)} left"
            progress.update(task, completed=done, total=total, description=what, left=said)

        yield show


class _Pace:
    """Reckons the time left from what this run has done since its first results of a stage.

    Results kept from an earlier run took no time in this one, and the first results may have
    waited for the compiler.
    """

    def __init__(self) -> None:
        self._what = ""
        self._kept = 0
        self._first: float | None = None  # when the first result of this run came
        self._base = (0.0, 0)  # time and count from which the rate is reckoned

    def left(self, done: int, total: int, what: str) -> float | None:
        """Seconds left; None as long as there is nothing to reckon it from."""
        now = time.monotonic()
        if what != self._what:
            self._what, self._kept, self._first = what, done, None
        if self._first is None:
            if done == self._kept:
                return None
            self._first = now
        if now - self._first < _LEAST_S:
            self._base = now, done
            return None
        began, count = self._base
        if done == count or now - began < _LEAST_S:
            return None
        return (now - began) / (done - count) * (total - done)


class _Lines:
    """Writes a line when enough time has passed since the last one."""

    def __init__(self, write: Callable[[str], None]) -> None:
        self._write = write
        self._said = time.monotonic()
        self._what = ""
        self._pace = _Pace()

    def __call__(self, done: int, total: int, what: str = "points") -> None:
        left = self._pace.left(done, total, what)
        if what != self._what:
            self._what = what
            if done:
                self._write(f"{done} of {total} {what} are there from an earlier run")
        now = time.monotonic()
        if now - self._said < _EVERY_S or done == total:
            return
        self._said = now
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
