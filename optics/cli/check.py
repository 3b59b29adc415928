"""Verification of a case's own numbers at the command line."""

from __future__ import annotations

from pathlib import Path

import click

from optics.cli.options import (
    WIDE,
    case_argument,
    check_outputs,
    deliver,
    json_option,
    numbers,
    output_option,
    traceback_option,
)
from optics.cli.roof import FAILED, main


@main.command()
@case_argument
@json_option
@output_option(".json or .csv")
@click.option(
    "--wavelengths",
    callback=numbers,
    metavar="NM,NM,...",
    help="Wavelengths of the case in nm; default the first, the last and each emitter's peak.",
)
@click.option(
    "--angles",
    callback=numbers,
    metavar="DEG,DEG,...",
    help="Angles in the media next to the films; default 0,20,40,60,80.",
)
@click.option("--all", "every_row", is_flag=True, help="Show the comparisons that passed too.")
@traceback_option
def check(
    case: Path,
    as_object: bool,
    outputs: tuple[Path, ...],
    wavelengths: tuple[float, ...] | None,
    angles: tuple[float, ...] | None,
    every_row: bool,
) -> None:
    """Verify a case's own numbers by independent means.

    Exit status 1 if any difference exceeds its tolerance. What could not be checked is listed
    with the reason.
    """
    check_outputs(outputs, (".json", ".csv"), None)

    import optics
    from optics.kernels.compiled import cache_is_warm
    from optics.present.terminal import compiling_notice
    from optics.study.check import DEFAULT_ANGLES_DEG

    device = optics.read_case(case)
    with compiling_notice(needed=not cache_is_warm()):
        outcome = optics.check(
            device, wavelengths_nm=wavelengths, angles_deg=angles or DEFAULT_ANGLES_DEG
        )
    result = outcome.to_dict()

    def show() -> None:
        from optics.present.check import print_check
        from optics.present.terminal import console

        print_check(console(plain_width=WIDE), result, every_row=every_row)

    writers = {".csv": lambda path: outcome.to_frame().to_csv(path, index=False)}
    notes = (("Warning", outcome.warnings),)
    deliver(result, outputs, writers, as_object=as_object, notes=notes, show=show)
    if not outcome.passed:
        click.get_current_context().exit(FAILED)
