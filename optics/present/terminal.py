"""Where text goes: consoles, plain when nobody watches, and a clock for slow first steps."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TextIO

from rich.console import Console, RenderableType

# Without a terminal there is no width to ask for.
PLAIN_WIDTH = 100
COMPILING = "Compiling the kernels (first use only, about half a minute) ..."
COMPILING_RATES = (
    "Compiling the kernels and their derivatives (first use only, about two minutes) ..."
)


def console(stream: TextIO | None = None, *, plain_width: int = PLAIN_WIDTH) -> Console:
    """Console for results (standard output) or another stream; plain text outside a terminal."""
    file = sys.stdout if stream is None else stream
    width = None if file.isatty() else plain_width
    return Console(file=file, width=width, highlight=False, markup=False, emoji=False)


def show(out: Console, view: RenderableType) -> None:
    """Print a view; outside a terminal without the blanks that pad tables to their width."""
    if out.is_terminal:
        out.print(view)
        return
    with out.capture() as captured:
        out.print(view)
    lines = captured.get().splitlines()
    out.file.write("".join(f"{line.rstrip()}\n" for line in lines))


@contextmanager
def compiling_notice(*, needed: bool, message: str = COMPILING) -> Iterator[None]:
    """Say on standard error that kernels are being compiled, with the time that passes.

    Parameters
    ----------
    needed : bool
        False when compiled kernels lie in the cache; then nothing is said.
    message : str
        What is said.
    """
    if not needed:
        yield
        return
    out = console(sys.stderr)
    if not out.is_terminal:
        out.print(message)
        yield
        return
    from rich.progress import Progress, SpinnerColumn, TextColumn, TimeElapsedColumn

    columns = (SpinnerColumn(), TextColumn("{task.description}"), TimeElapsedColumn())
    with Progress(*columns, console=out, transient=True) as progress:
        progress.add_task(message, total=None)
        yield
