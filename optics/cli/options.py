"""Options that commands share, and the way their results go out."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

import click

if TYPE_CHECKING:
    from optics.present.files import Writer

TRACEBACK = "optics.traceback"
WIDE = 200  # columns of a table of comparisons outside a terminal
PICTURE_SUFFIXES = (".png", ".svg", ".pdf")
_Command = TypeVar("_Command", bound=Callable[..., Any])


def _keep_traceback(ctx: click.Context, _parameter: click.Parameter, value: bool) -> None:
    if value:
        ctx.meta[TRACEBACK] = True


def not_nan(_ctx: click.Context, _parameter: click.Parameter, value: float) -> float:
    """Refuse nan, which passes every range."""
    if value != value:
        raise click.BadParameter("nan is not a number")
    return value


def numbers(
    _ctx: click.Context, _parameter: click.Parameter, value: str | None
) -> tuple[float, ...] | None:
    """Numbers of a list such as 0,15,30."""
    if value is None:
        return None
    try:
        return tuple(float(word) for word in value.split(","))
    except ValueError:
        raise click.BadParameter(f"found {value!r}; expected numbers such as 0,15,30") from None


def traceback_option(command: _Command) -> _Command:
    """Take --traceback."""
    option = click.option(
        "--traceback",
        is_flag=True,
        expose_value=False,
        callback=_keep_traceback,
        help="Show where a failure comes from.",
    )
    return option(command)


def json_option(command: _Command) -> _Command:
    """Take --json."""
    text = "Print one JSON object and nothing else on standard output."
    return click.option("--json", "as_object", is_flag=True, help=text)(command)


def output_option(formats: str) -> Callable[[_Command], _Command]:
    """Take -o, any number of times."""
    return click.option(
        "-o",
        "--output",
        "outputs",
        type=click.Path(path_type=Path),
        multiple=True,
        metavar="PATH",
        help=f"Write to a file, {formats} by its suffix; may be given several times.",
    )


def case_argument(command: _Command) -> _Command:
    """Take the case file."""
    argument = click.argument("case", metavar="CASE", type=click.Path(path_type=Path))
    return argument(command)


def tolerance_option(command: _Command) -> _Command:
    """Take the wanted accuracy."""
    option = click.option(
        "--tolerance",
        type=click.FloatRange(min=1e-12, max=0.1),
        default=1e-6,
        callback=not_nan,
        show_default=True,
        help="Wanted accuracy of every destination, as a fraction of the dissipated power.",
    )
    return option(command)


def shown_option(command: _Command) -> _Command:
    """Take --outcome, any number of times."""
    option = click.option(
        "--outcome",
        "shown",
        multiple=True,
        metavar="NAME",
        help="Outcome that pictures show, all if not said; may be given several times.",
    )
    return option(command)


def cluster_option(command: _Command) -> _Command:
    """Take --cluster."""
    text = "Dask scheduler that takes the work."
    return click.option("--cluster", metavar="ADDRESS", help=text)(command)


def check_outputs(
    outputs: tuple[Path, ...], suffixes: tuple[str, ...], picture: str | None
) -> bool:
    """Refuse files that cannot be written, before any work; tell whether a picture is asked for.

    Raises
    ------
    click.UsageError
        If a picture is named and no file given for it.
    """
    from optics.present import files

    files.check_targets(outputs, suffixes)
    draws = any(path.suffix.lower() in PICTURE_SUFFIXES for path in outputs)
    if picture is not None and not draws:
        raise click.UsageError(f"--picture {picture} needs a file: give -o with .png, .svg or .pdf")
    return draws


def deliver(
    result: Mapping[str, Any],
    outputs: tuple[Path, ...],
    writers: Mapping[str, Writer],
    *,
    as_object: bool,
    notes: Iterable[tuple[str, Iterable[str]]],
    show: Callable[[], None],
) -> None:
    """Write the files, then print: one JSON object with notes on standard error, or words.

    Parameters
    ----------
    writers : mapping of suffix to writer
        Beside .json, which is the result itself.
    notes : pairs of kind and lines
        Printed on standard error beside a JSON object; `show` prints its own.
    show : callable
        Prints the result for people.
    """
    from optics.present import files

    every = {".json": lambda path: files.write_json(result, path), **writers}
    files.publish({path: every[path.suffix.lower()] for path in outputs})
    if as_object:
        click.echo(files.as_json(result))
        for kind, lines in notes:
            for line in lines:
                click.echo(f"{kind}: {line}", err=True)
    else:
        show()
    say_written(outputs)


def say_written(outputs: tuple[Path, ...]) -> None:
    """Name the files that were written, on standard error."""
    for path in outputs:
        click.echo(f"Wrote {path}", err=True)
