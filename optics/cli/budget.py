"""The light budget at the command line."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from optics.cli.options import (
    PICTURE_SUFFIXES,
    case_argument,
    check_outputs,
    deliver,
    json_option,
    output_option,
    tolerance_option,
    traceback_option,
)
from optics.cli.roof import main
from optics.present import pictures

if TYPE_CHECKING:
    from optics.present.files import Writer


@main.command()
@case_argument
@json_option
@output_option(".json, .csv, .nc, .png, .svg or .pdf")
@click.option(
    "--picture",
    type=click.Choice(pictures.PICTURES),
    help="What a .png, .svg or .pdf shows: the chain from charge to air (if not said), "
    "destinations against wavelength or against the emitter's position, dissipated power "
    "over wavelength and effective index, or what a nanometer of each film does.",
)
@click.option(
    "--sensitivity",
    "sensitive",
    is_flag=True,
    help="Also show what one nanometer more of each film, and small steps of index, emission "
    "zone and orientation, do to EQE, luminance and color.",
)
@tolerance_option
@traceback_option
def budget(
    case: Path,
    as_object: bool,
    outputs: tuple[Path, ...],
    picture: str | None,
    sensitive: bool,
    tolerance: float,
) -> None:
    """Show where the generated light goes, and the EQE chain.

    CASE is a case file; see docs/case-file.md, or outcouple schema for editors.
    """
    draws = check_outputs(outputs, (".json", ".csv", ".nc", *PICTURE_SUFFIXES), picture)

    import optics

    device = optics.read_case(case)

    from optics.kernels.compiled import cache_is_warm
    from optics.present.cautions import cautions
    from optics.present.sensitivity import frame_of, tree_of, with_sensitivity
    from optics.present.terminal import COMPILING, COMPILING_RATES, compiling_notice

    differentiates = sensitive or picture == pictures.SENSITIVITY
    is_warm = cache_is_warm() and (not differentiates or cache_is_warm("derivatives"))
    found = None
    message = COMPILING_RATES if differentiates else COMPILING
    with compiling_notice(needed=not is_warm, message=message):
        outcome = optics.budget(device, tolerance=tolerance)
        if differentiates:
            found = optics.sensitivity(device, tolerance=tolerance)
    told = found if sensitive else None
    result = with_sensitivity(outcome, told)
    writers: dict[str, Writer] = {
        ".csv": lambda path: frame_of(outcome, told).to_csv(path, index=False),
        ".nc": lambda path: tree_of(outcome, told).to_netcdf(path, engine="h5netcdf"),
    }
    if draws:
        figure = pictures.draw(picture or pictures.PICTURES[0], device, outcome, tolerance, found)
        writers |= {end: lambda path: pictures.write(figure, path) for end in PICTURE_SUFFIXES}
    reminders = cautions(device, result)

    def show() -> None:
        from optics.present.tables import print_budget
        from optics.present.terminal import console

        print_budget(console(), result, outcome.tables, reminders)

    notes = (("Warning", outcome.warnings), ("Caution", reminders))
    deliver(result, outputs, writers, as_object=as_object, notes=notes, show=show)
