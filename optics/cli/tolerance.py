"""Process spread at the command line."""

from __future__ import annotations

from pathlib import Path

import click

from optics.cli.options import (
    case_argument,
    cluster_option,
    json_option,
    output_option,
    say_written,
    shown_option,
    tolerance_option,
    traceback_option,
)
from optics.cli.roof import FAILED, main


@main.command()
@case_argument
@json_option
@output_option(".json, .csv, .nc, .png, .svg or .pdf")
@shown_option
@click.option(
    "--samples", type=click.IntRange(min=1), help="Number of samples, as in the case if not said."
)
@click.option(
    "--seed",
    type=click.IntRange(min=0),
    help="Seed of the random numbers, as in the case if not said.",
)
@tolerance_option
@cluster_option
@traceback_option
def tolerance(
    case: Path,
    as_object: bool,
    outputs: tuple[Path, ...],
    shown: tuple[str, ...],
    samples: int | None,
    seed: int | None,
    tolerance: float,
    cluster: str | None,
) -> None:
    """Tell what process spread does to the outcomes, and the yield against limits.

    The case file says what spreads and what must be kept, in its table [tolerance]; see
    docs/tolerance.md. Stopped with Ctrl-C, the same command continues where it was.
    """
    from optics.present import tolerance_command

    complete = tolerance_command.run(
        case,
        outputs,
        shown,
        as_object=as_object,
        samples=samples,
        seed=seed,
        tolerance=tolerance,
        cluster=cluster,
    )
    say_written(outputs)
    if not complete:
        click.get_current_context().exit(FAILED)
