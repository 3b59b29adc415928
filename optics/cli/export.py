"""Numbers for other programs, at the command line."""

from __future__ import annotations

import datetime
from pathlib import Path

import click

from optics.cli.options import (
    case_argument,
    json_option,
    numbers,
    output_option,
    say_written,
    traceback_option,
)
from optics.cli.roof import main
from optics.present.export import FORMATS, angular_spectra, electrical, photometric


@main.command()
@case_argument
@json_option
@output_option(".csv or .nc, a photometric file .ies,")
@click.option(
    "--what",
    type=click.Choice(tuple(FORMATS)),
    required=True,
    help="Outcoupling against position and wavelength, for electrical simulation; spectral "
    "radiance against angle; photometric file of a lighting panel (IES LM-63-2002).",
)
@click.option(
    "--positions",
    type=click.IntRange(min=1),
    metavar="N",
    help="For electrical: positions in each emitter's film, default 40.",
)
@click.option(
    "--angles",
    callback=numbers,
    metavar="DEG,DEG,...",
    help="For angular: 0 to 90; default every degree.",
)
@click.option(
    "--size",
    callback=numbers,
    metavar="MM,MM",
    help="For photometric: width and length of the panel's lit face.",
)
@click.option(
    "--side",
    type=click.Choice(("bottom", "top")),
    help="For photometric: default the side with more lumens.",
)
@traceback_option
def export(
    case: Path,
    as_object: bool,
    outputs: tuple[Path, ...],
    what: str,
    positions: int | None,
    angles: tuple[float, ...] | None,
    size: tuple[float, ...] | None,
    side: str | None,
) -> None:
    """Hand numbers on to electrical, optical and lighting programs.

    Tables begin with lines that say units and definitions. See docs/export.md.
    """
    given = {"positions": positions, "angles": angles, "size": size, "side": side}
    _check_options(what, {key for key, value in given.items() if value is not None})
    if not outputs:
        raise click.UsageError(f"nothing to write: give -o with {' or '.join(FORMATS[what])}")
    if what == "photometric" and (size is None or len(size) != 2 or not all(x > 0 for x in size)):
        raise click.UsageError("--size: expected two lengths in mm above 0, such as 100,100")

    from optics.device.case import read_case
    from optics.kernels.angles import angles_are_compiled
    from optics.kernels.compiled import cache_is_warm, mark_cache_warm
    from optics.outcome.angular import DEFAULT_ANGLES_DEG, faults_of_angles
    from optics.outcome.export_table import DEFAULT_POSITIONS
    from optics.present import files
    from optics.present.terminal import compiling_notice

    files.check_targets(outputs, FORMATS[what])
    if angles is not None and (faults := faults_of_angles(angles)):
        raise click.UsageError("\n".join(faults))
    device = read_case(case)
    warm = cache_is_warm() if what == "electrical" else angles_are_compiled()
    with compiling_notice(needed=not warm):
        if what == "electrical":
            handed = electrical(device, positions or DEFAULT_POSITIONS)
        elif what == "angular":
            handed = angular_spectra(device, angles or DEFAULT_ANGLES_DEG)
        else:
            width, length = size or (0.0, 0.0)
            today = datetime.datetime.now(tz=datetime.UTC).date()
            handed = photometric(device, (width, length), side, today)
    mark_cache_warm()
    files.publish({path: handed.writers[path.suffix.lower()] for path in outputs})
    if as_object:
        from optics.present.export import summary

        click.echo(files.as_json(summary(device, what, handed, outputs)))
    else:
        click.echo(handed.sentence)
    for kind, lines in (("Warning", handed.warnings), ("Caution", handed.cautions)):
        for line in lines:
            click.echo(f"{kind}: {line}", err=True)
    say_written(outputs)


def _check_options(what: str, given: set[str]) -> None:
    """Refuse options that say nothing about what is exported."""
    fitting = {
        "electrical": {"positions"},
        "angular": {"angles"},
        "photometric": {"size", "side"},
    }[what]
    if lost := sorted(given - fitting):
        names = ", ".join(f"--{one}" for one in lost)
        raise click.UsageError(f"{names}: of no use with --what {what}")
