"""Optimization at the command line."""

from __future__ import annotations

from pathlib import Path

import click

from optics.cli.options import (
    case_argument,
    cluster_option,
    json_option,
    output_option,
    say_written,
    tolerance_option,
    traceback_option,
)
from optics.cli.roof import main


@main.command()
@case_argument
@json_option
@output_option(".toml (the improved case), .json, .csv, .png, .svg or .pdf")
@click.option("--in-place", is_flag=True, help="Let -o overwrite the case file itself.")
@click.option(
    "--pick",
    type=click.IntRange(min=1),
    metavar="NUMBER",
    help="Point of a Pareto front that the improved case takes; the compromise if not said.",
)
@click.option(
    "--seed",
    type=click.IntRange(min=0),
    default=0,
    show_default=True,
    help="Seed of the points that the search begins with.",
)
@click.option(
    "--samples",
    type=click.IntRange(min=1, max=65536),
    help="How many those are, rounded up to a power of two; by the variables if not said.",
)
@tolerance_option
@cluster_option
@traceback_option
def optimize(
    case: Path,
    as_object: bool,
    outputs: tuple[Path, ...],
    in_place: bool,
    pick: int | None,
    seed: int,
    samples: int | None,
    tolerance: float,
    cluster: str | None,
) -> None:
    """Find the best values of chosen numbers under bounds and constraints.

    The case file says which, in its table [optimize]; see docs/optimize.md. Stopped with Ctrl-C,
    the best so far is told, and the same command continues where it was.
    """
    from optics.present import optimize_command

    optimize_command.run(
        case,
        outputs,
        as_object=as_object,
        in_place=in_place,
        pick=pick,
        seed=seed,
        samples=samples,
        tolerance=tolerance,
        cluster=cluster,
    )
    say_written(outputs)
