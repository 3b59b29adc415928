"""What commands of long studies share: progress, clusters, and words on what is kept."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from concurrent.futures import Executor
from contextlib import contextmanager, nullcontext
from typing import TYPE_CHECKING

import click

from optics.device.errors import CaseError, Fault, nearest
from optics.present import files, pictures

if TYPE_CHECKING:
    from pathlib import Path

    from matplotlib.figure import Figure

    from optics.study.evaluate import Progress, Question
    from optics.study.store import Store


@contextmanager
def saying_what_is_kept(store: Store, points: int) -> Iterator[Progress]:
    """Yield a function that notes how far a study is; whatever stops the block, say what is kept.

    Parameters
    ----------
    store : Store
    points : int
        Of the whole study.
    """
    done = 0

    def note(now: int, _total: int) -> None:
        nonlocal done
        done = now

    try:
        yield note
    except BaseException:
        if store.trouble is not None:
            click.echo(f"Progress could not be kept: {store.trouble}", err=True)
        elif done:
            text = f"{done} of {points} points are kept; the same command continues from there."
            click.echo(text, err=True)
        raise


@contextmanager
def workers(cluster: str | None, note: Progress) -> Iterator[tuple[Executor | None, Progress]]:
    """Yield who takes the work and a function that shows progress.

    Parameters
    ----------
    cluster : str or None
        Address of a Dask scheduler; threads of this process if None.
    note : callable
        Told of progress as well.
    """
    from optics.present.sweep_progress import sweep_progress
    from optics.study.executor import cluster_executor

    with (
        nullcontext() if cluster is None else cluster_executor(cluster) as executor,
        sweep_progress() as show,
    ):

        def progress(now: int, total: int) -> None:
            note(now, total)
            show(now, total)

        yield executor, progress


def check_shown(question: Question, shown: Sequence[str]) -> None:
    """Refuse outcomes for pictures that are not computed.

    Raises
    ------
    CaseError
        With every one, and the nearest that is.
    """
    names = [outcome.name for outcome in question.outcomes]
    expected = f"one of {', '.join(names)}"
    faults = [
        Fault(question.case.label, "--outcome", name, expected, nearest(name, names))
        for name in shown
        if name not in names
    ]
    if faults:
        raise CaseError(faults)


def say_compiling(question: Question, *, derivatives: bool = False) -> None:
    """Announce the wait where kernels, or those of derivatives, are not compiled yet."""
    from optics.kernels.angles import angles_are_compiled
    from optics.kernels.compiled import cache_is_warm
    from optics.present.terminal import COMPILING, COMPILING_RATES

    by_angle = any(outcome.needs_angular for outcome in question.outcomes)
    if derivatives and not cache_is_warm("derivatives"):
        print(COMPILING_RATES, file=sys.stderr)
    elif not cache_is_warm() or (by_angle and not angles_are_compiled()):
        print(COMPILING, file=sys.stderr)


def say_beside(kinds: Iterable[tuple[str, Iterable[str]]]) -> None:
    """Say lines on standard error beside a JSON object, each after its kind."""
    for kind, lines in kinds:
        for line in lines:
            click.echo(f"{kind}: {line}", err=True)


def publish(
    outputs: Sequence[Path],
    writers: Mapping[str, files.Writer],
    draw: Callable[[], Figure],
    named: Mapping[str, Callable[[Path], files.Writer]] | None = None,
) -> None:
    """Write a study's files, all complete or none.

    Parameters
    ----------
    outputs : sequence of Path
    writers : mapping of str to Writer
        By suffix.
    draw : callable
        Makes the picture, once, if one is asked for.
    named : mapping of str to callable, optional
        By suffix, makes the writer of a file whose content depends on where it will lie.
    """
    every = dict(writers)
    if any(path.suffix.lower() in pictures.SUFFIXES for path in outputs):
        figure = draw()
        every |= dict.fromkeys(pictures.SUFFIXES, lambda path: pictures.write(figure, path))
    made = {path: (named or {}).get(path.suffix.lower()) for path in outputs}
    files.publish(
        {path: every[path.suffix.lower()] if make is None else make(path)
         for path, make in made.items()}
    )  # fmt: skip
