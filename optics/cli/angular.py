"""Emission against angle at the command line."""

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
    numbers,
    output_option,
    traceback_option,
)
from optics.cli.roof import main
from optics.present import pictures, pictures_angular

if TYPE_CHECKING:
    from optics.present.files import Writer


@main.command()
@case_argument
@json_option
@output_option(".json, .csv, .nc, .png, .svg or .pdf")
@click.option(
    "--angles",
    callback=numbers,
    metavar="DEG,DEG,...",
    help="Angles outside the device, 0 to 90; default every degree.",
)
@click.option("--spectral", is_flag=True, help="With spectral radiance by angle and wavelength.")
@click.option("--polarization", is_flag=True, help="With s and p apart.")
@click.option(
    "--picture",
    type=click.Choice(pictures_angular.PICTURES),
    help="What a .png, .svg or .pdf shows: luminance against a Lambertian (if not said), spectra "
    "at chosen angles, the path of the color, or spectral radiance over wavelength and angle.",
)
@traceback_option
def angular(
    case: Path,
    as_object: bool,
    outputs: tuple[Path, ...],
    angles: tuple[float, ...] | None,
    spectral: bool,
    polarization: bool,
    picture: str | None,
) -> None:
    """Show emission against angle: radiance, luminance and color.

    Angles count from the normal in the medium outside; where a slab's exit is matched, in the
    slab. Numbers of a whole side do not depend on the angles listed.
    """
    draws = check_outputs(outputs, (".json", ".csv", ".nc", *PICTURE_SUFFIXES), picture)

    import optics
    from optics.kernels.angles import angles_are_compiled
    from optics.outcome.angular import DEFAULT_ANGLES_DEG, faults_of_angles
    from optics.present.cautions import brightest_cd_m2, cautions
    from optics.present.terminal import compiling_notice

    asked = DEFAULT_ANGLES_DEG if angles is None else angles
    if faults := faults_of_angles(asked):
        raise click.UsageError("\n".join(faults))
    device = optics.read_case(case)
    with compiling_notice(needed=not angles_are_compiled()):
        outcome = optics.angular(device, asked)
    result = outcome.to_dict(spectral=spectral, polarization=polarization)
    choice = {"spectral": spectral, "polarization": polarization}
    writers: dict[str, Writer] = {
        ".csv": lambda path: outcome.to_frame(**choice).to_csv(path, index=False),
        ".nc": lambda path: outcome.to_dataset().to_netcdf(path, engine="h5netcdf"),
    }
    if draws:
        figure = pictures_angular.draw_case(picture or pictures_angular.PICTURES[0], device, angles)
        writers |= {end: lambda path: pictures.write(figure, path) for end in PICTURE_SUFFIXES}
    reminders = cautions(device, outcome.budget.to_dict(), brightest_cd_m2(device, result))

    def show() -> None:
        from optics.present.angular import WIDTH, print_angular
        from optics.present.terminal import console

        print_angular(console(plain_width=WIDTH), result, reminders, every_angle=angles is not None)

    notes = (("Warning", outcome.warnings), ("Caution", reminders))
    deliver(result, outputs, writers, as_object=as_object, notes=notes, show=show)
