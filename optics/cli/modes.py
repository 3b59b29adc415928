"""Guided modes at the command line."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from optics.cli.options import (
    PICTURE_SUFFIXES,
    WIDE,
    case_argument,
    check_outputs,
    deliver,
    json_option,
    not_nan,
    output_option,
    traceback_option,
)
from optics.cli.roof import main
from optics.present import pictures

if TYPE_CHECKING:
    from optics.present.files import Writer

PICTURES = ("dispersion", "fields", "absorption")
TABLES = ("modes", "trapped", "absorption", "fields")


@main.command()
@case_argument
@json_option
@output_option(".json, .csv, .nc, .png, .svg or .pdf")
@click.option(
    "--wavelength",
    "wavelength_nm",
    type=float,
    callback=not_nan,
    metavar="NM",
    help="Only this wavelength of the case, in nm.",
)
@click.option("--leaky", is_flag=True, help="List leaky modes too, marked as such.")
@click.option("--all", "every_mode", is_flag=True, help="Show modes that take next to nothing too.")
@click.option(
    "--picture",
    type=click.Choice(PICTURES),
    help="What a .png, .svg or .pdf shows: effective index against wavelength with shares (if "
    "not said), fields over the films, or where the light ends, film by film.",
)
@click.option(
    "--table",
    type=click.Choice(TABLES),
    help="What a .csv holds: modes by wavelength (if not said), trapped light mode by mode, where "
    "the light ends, or fields over the films.",
)
@traceback_option
def modes(
    case: Path,
    as_object: bool,
    outputs: tuple[Path, ...],
    wavelength_nm: float | None,
    leaky: bool,
    every_mode: bool,
    picture: str | None,
    table: str | None,
) -> None:
    """Show guided modes one by one, and the power absorbed in each film.

    CASE is a case file; see docs/modes.md for what the words and numbers mean.
    """
    draws = check_outputs(outputs, (".json", ".csv", ".nc", *PICTURE_SUFFIXES), picture)
    if table is not None and not any(path.suffix.lower() == ".csv" for path in outputs):
        raise click.UsageError(f"--table {table} needs a file: give -o with .csv")

    import optics
    from optics.kernels.compiled import cache_is_warm, mark_cache_warm
    from optics.present.terminal import compiling_notice

    device = optics.read_case(case)
    with compiling_notice(needed=not cache_is_warm("modes")):
        outcome = optics.modes(device, wavelength_nm, leaky=leaky)
    mark_cache_warm("modes")
    result = outcome.to_dict()
    frames = {
        "modes": outcome.to_frame,
        "trapped": outcome.trapped_frame,
        "absorption": outcome.absorption_frame,
        "fields": outcome.fields_frame,
    }
    writers: dict[str, Writer] = {
        ".csv": lambda path: frames[table or TABLES[0]]().to_csv(path, index=False),
        ".nc": lambda path: outcome.to_tree().to_netcdf(path, engine="h5netcdf"),
    }
    if draws:
        from optics.present import pictures_modes

        figure = pictures_modes.draw(picture or PICTURES[0], device, outcome)
        writers |= {end: lambda path: pictures.write(figure, path) for end in PICTURE_SUFFIXES}

    def show() -> None:
        from optics.present.modes import print_modes
        from optics.present.terminal import console

        print_modes(console(plain_width=WIDE), result, every_mode=every_mode)

    notes = (("Warning", outcome.warnings),)
    deliver(result, outputs, writers, as_object=as_object, notes=notes, show=show)
