"""Sweeps at the command line."""

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
@tolerance_option
@cluster_option
@traceback_option
def sweep(
    case: Path,
    as_object: bool,
    outputs: tuple[Path, ...],
    shown: tuple[str, ...],
    tolerance: float,
    cluster: str | None,
) -> None:
    """Compute any outcome over a grid of any numbers in the case.

    The case file says which, in its table [sweep]; see docs/sweep.md. Stopped with Ctrl-C, the
    same command continues where it was.
    """
    from optics.present import sweep_command

    complete = sweep_command.run(
        case, outputs, shown, as_object=as_object, tolerance=tolerance, cluster=cluster
    )
    say_written(outputs)
    if not complete:
        click.get_current_context().exit(FAILED)
