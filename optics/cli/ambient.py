"""The device as seen from outside, at the command line."""

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
from optics.present import pictures, pictures_ambient

if TYPE_CHECKING:
    from optics.present.files import Writer


@main.command()
@case_argument
@json_option
@output_option(".json, .csv, .nc, .png, .svg or .pdf")
@click.option(
    "--illuminance",
    "illuminance_lx",
    type=float,
    metavar="LX",
    help="Ambient light on the device in lux: gives the contrast, for which the case needs a "
    "current density.",
)
@click.option(
    "--angles",
    callback=numbers,
    metavar="DEG,DEG,...",
    help="Angles of incidence and of view, 0 to 90; default every 5.",
)
@click.option(
    "--wavelengths",
    callback=numbers,
    metavar="NM,NM,...",
    help="Of the ambient light; default 380 to 780 by 2, as far as all constants are known.",
)
@click.option("--spectral", is_flag=True, help="With values by angle and wavelength.")
@click.option(
    "--picture",
    type=click.Choice(pictures_ambient.PICTURES),
    help="What a .png, .svg or .pdf shows: where the light goes against wavelength (if not "
    "said), reflectance over wavelength and angle, or contrast against angle.",
)
@traceback_option
def ambient(
    case: Path,
    as_object: bool,
    outputs: tuple[Path, ...],
    illuminance_lx: float | None,
    angles: tuple[float, ...] | None,
    wavelengths: tuple[float, ...] | None,
    spectral: bool,
    picture: str | None,
) -> None:
    """Show the device from outside: reflectance, transmittance, absorptance, contrast.

    For each side, in daylight (D65). See docs/ambient.md.
    """
    draws = check_outputs(outputs, (".json", ".csv", ".nc", *PICTURE_SUFFIXES), picture)
    if picture == "contrast" and illuminance_lx is None:
        raise click.UsageError("--picture contrast needs --illuminance")

    import optics
    from optics.kernels.angles import angles_are_compiled
    from optics.kernels.compiled import cache_is_warm, mark_cache_warm
    from optics.outcome.ambient import DEFAULT_ANGLES_DEG, faults_of_question
    from optics.present.terminal import compiling_notice

    asked = DEFAULT_ANGLES_DEG if angles is None else angles
    if faults := faults_of_question(illuminance_lx, asked, wavelengths):
        raise click.UsageError("\n".join(faults))
    device = optics.read_case(case)
    shines = illuminance_lx is not None
    warm = cache_is_warm("ambient") and (angles_are_compiled() or not shines)
    with compiling_notice(needed=not warm):
        outcome = optics.ambient(device, illuminance_lx, asked, wavelengths)
    mark_cache_warm("ambient")
    if shines:
        mark_cache_warm()
    result = outcome.to_dict(spectral=spectral)
    writers: dict[str, Writer] = {
        ".csv": lambda path: outcome.to_frame(spectral=spectral).to_csv(path, index=False),
        ".nc": lambda path: outcome.to_dataset().to_netcdf(path, engine="h5netcdf"),
    }
    if draws:
        figure = pictures_ambient.draw_case(picture, device, outcome, angles)
        writers |= {end: lambda path: pictures.write(figure, path) for end in PICTURE_SUFFIXES}
    from optics.present.ambient import print_ambient, reminders_of
    from optics.present.terminal import console

    reminders = reminders_of(device, outcome)
    deliver(
        result,
        outputs,
        writers,
        as_object=as_object,
        notes=(("Warning", outcome.warnings), ("Caution", reminders)),
        show=lambda: print_ambient(console(plain_width=120), result, reminders),
    )
