"""The command line: reads the options, calls, prints. Heavy libraries load inside commands."""

from __future__ import annotations

import sys
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

import click

from optics.present import pictures, pictures_angular

if TYPE_CHECKING:
    from optics.present.constants import Shown

DONE, FAILED, INPUT_AT_FAULT = 0, 1, 2
_TRACEBACK = "optics.traceback"
_WIDE = 200  # columns of a table of comparisons outside a terminal
_MODE_PICTURES = ("dispersion", "fields", "absorption")
_Command = TypeVar("_Command", bound=Callable[..., Any])


class Roof(click.Group):
    """Turns what commands raise into a message and an exit status."""

    def invoke(self, ctx: click.Context) -> Any:
        """Run the command; status 2 if the input is at fault, 1 for anything else."""
        try:
            return super().invoke(ctx)
        except (click.ClickException, click.exceptions.Exit, click.Abort, BrokenPipeError):
            raise
        except Exception as error:
            from optics.device.errors import CaseError

            if isinstance(error, CaseError):
                click.echo(str(error), err=True)
                ctx.exit(INPUT_AT_FAULT)
            if ctx.meta.get(_TRACEBACK):
                raise
            click.echo(_short(error), err=True)
            ctx.exit(FAILED)


def _short(error: Exception) -> str:
    said = str(error) or "no message"
    return f"outcouple failed: {type(error).__name__}: {said}\n--traceback tells where."


def _keep_traceback(ctx: click.Context, _parameter: click.Parameter, value: bool) -> None:
    if value:
        ctx.meta[_TRACEBACK] = True


def _version(ctx: click.Context, _parameter: click.Parameter, value: bool) -> None:
    if not value or ctx.resilient_parsing:
        return
    from optics._version import VERSION

    click.echo(f"outcouple {VERSION}")
    ctx.exit()


def _not_nan(_ctx: click.Context, _parameter: click.Parameter, value: float) -> float:
    if value != value:
        raise click.BadParameter("nan is not a number")
    return value


def _numbers(
    _ctx: click.Context, _parameter: click.Parameter, value: str | None
) -> tuple[float, ...] | None:
    """Numbers of a list such as 0,15,30."""
    if value is None:
        return None
    try:
        return tuple(float(word) for word in value.split(","))
    except ValueError:
        raise click.BadParameter(f"found {value!r}; expected numbers such as 0,15,30") from None


def _traceback_option(command: _Command) -> _Command:
    option = click.option(
        "--traceback",
        is_flag=True,
        expose_value=False,
        callback=_keep_traceback,
        help="Show where a failure comes from.",
    )
    return option(command)


def _json_option(command: _Command) -> _Command:
    text = "Print one JSON object and nothing else on standard output."
    return click.option("--json", "as_object", is_flag=True, help=text)(command)


def _output_option(formats: str) -> Callable[[_Command], _Command]:
    return click.option(
        "-o",
        "--output",
        "outputs",
        type=click.Path(path_type=Path),
        multiple=True,
        metavar="PATH",
        help=f"Write to a file, {formats} by its suffix; may be given several times.",
    )


@click.group(cls=Roof, context_settings={"help_option_names": ["-h", "--help"]})
@click.option(
    "--version", is_flag=True, is_eager=True, expose_value=False, callback=_version,
    help="Show the version and exit.",
)  # fmt: skip
@_traceback_option
def main() -> None:
    """Where the light generated in a thin-film stack goes, and how much of it gets out.

    A device is described in a case file (TOML). Exit status: 0 done, 2 the input is at fault,
    1 anything else.
    """
    for stream in (sys.stdout, sys.stderr):
        # Sources have names with accents; a terminal that lacks them gets question marks.
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")


@main.command()
@click.argument("case", metavar="CASE", type=click.Path(path_type=Path))
@_json_option
@_output_option(".json, .csv, .nc, .png, .svg or .pdf")
@click.option(
    "--picture",
    type=click.Choice(pictures.PICTURES),
    help="What a .png, .svg or .pdf shows: the chain from charge to air (if not said), "
    "destinations against wavelength or against the emitter's position, or dissipated power "
    "over wavelength and effective index.",
)
@click.option(
    "--tolerance",
    type=click.FloatRange(min=0.0, max=0.1, min_open=True),
    default=1e-6,
    callback=_not_nan,
    show_default=True,
    help="Wanted accuracy of every destination, as a fraction of the dissipated power.",
)
@_traceback_option
def budget(
    case: Path, as_object: bool, outputs: tuple[Path, ...], picture: str | None, tolerance: float
) -> None:
    """Show where the generated light goes, and the EQE chain.

    CASE is a case file; see docs/case-file.md, or outcouple schema for editors.
    """
    from optics.present import files

    files.check_targets(outputs, (".json", ".csv", ".nc", *pictures.SUFFIXES))
    draws = any(path.suffix.lower() in pictures.SUFFIXES for path in outputs)
    if picture is not None and not draws:
        raise click.UsageError(f"--picture {picture} needs a file: give -o with .png, .svg or .pdf")

    import optics

    device = optics.read_case(case)

    from optics.kernels.compiled import cache_is_warm, mark_cache_warm
    from optics.present.cautions import cautions
    from optics.present.terminal import compiling_notice

    with compiling_notice(needed=not cache_is_warm()):
        outcome = optics.budget(device, tolerance=tolerance)
    mark_cache_warm()
    result = outcome.to_dict()
    writers: dict[str, files.Writer] = {
        ".json": lambda path: files.write_json(result, path),
        ".csv": lambda path: outcome.to_frame().to_csv(path, index=False),
        ".nc": lambda path: outcome.to_tree().to_netcdf(path, engine="h5netcdf"),
    }
    if draws:
        figure = pictures.draw(picture or pictures.PICTURES[0], device, outcome, tolerance)
        writers |= {end: lambda path: pictures.write(figure, path) for end in pictures.SUFFIXES}
    files.publish({path: writers[path.suffix.lower()] for path in outputs})
    reminders = cautions(device, result)
    if as_object:
        click.echo(files.as_json(result))
        for kind, lines in (("Warning", outcome.warnings), ("Caution", reminders)):
            for line in lines:
                click.echo(f"{kind}: {line}", err=True)
    else:
        from optics.present.tables import print_budget
        from optics.present.terminal import console

        print_budget(console(), result, outcome.tables, reminders)
    _say_written(outputs)


@main.command()
@click.argument("case", metavar="CASE", type=click.Path(path_type=Path))
@_json_option
@_output_option(".json, .csv, .nc, .png, .svg or .pdf")
@click.option(
    "--angles",
    callback=_numbers,
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
@_traceback_option
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
    from optics.present import files

    files.check_targets(outputs, (".json", ".csv", ".nc", *pictures.SUFFIXES))
    draws = any(path.suffix.lower() in pictures.SUFFIXES for path in outputs)
    if picture is not None and not draws:
        raise click.UsageError(f"--picture {picture} needs a file: give -o with .png, .svg or .pdf")

    import optics
    from optics.kernels.angles import angles_are_compiled
    from optics.kernels.compiled import mark_cache_warm
    from optics.outcome.angular import DEFAULT_ANGLES_DEG, faults_of_angles
    from optics.present.cautions import brightest_cd_m2, cautions
    from optics.present.terminal import compiling_notice

    asked = DEFAULT_ANGLES_DEG if angles is None else angles
    if faults := faults_of_angles(asked):
        raise click.UsageError("\n".join(faults))
    device = optics.read_case(case)
    with compiling_notice(needed=not angles_are_compiled()):
        outcome = optics.angular(device, asked)
    mark_cache_warm()
    result = outcome.to_dict(spectral=spectral, polarization=polarization)
    choice = {"spectral": spectral, "polarization": polarization}
    writers: dict[str, files.Writer] = {
        ".json": lambda path: files.write_json(result, path),
        ".csv": lambda path: outcome.to_frame(**choice).to_csv(path, index=False),
        ".nc": lambda path: outcome.to_dataset().to_netcdf(path, engine="h5netcdf"),
    }
    if draws:
        figure = pictures_angular.draw_case(picture or pictures_angular.PICTURES[0], device, angles)
        writers |= {end: lambda path: pictures.write(figure, path) for end in pictures.SUFFIXES}
    files.publish({path: writers[path.suffix.lower()] for path in outputs})
    reminders = cautions(device, outcome.budget.to_dict(), brightest_cd_m2(device, result))
    if as_object:
        click.echo(files.as_json(result))
        for kind, lines in (("Warning", outcome.warnings), ("Caution", reminders)):
            for line in lines:
                click.echo(f"{kind}: {line}", err=True)
    else:
        from optics.present.angular import WIDTH, print_angular
        from optics.present.terminal import console

        print_angular(console(plain_width=WIDTH), result, reminders, every_angle=angles is not None)
    _say_written(outputs)


@main.command()
@click.argument("case", metavar="CASE", type=click.Path(path_type=Path))
@_json_option
@_output_option(".json or .csv")
@click.option(
    "--wavelengths",
    callback=_numbers,
    metavar="NM,NM,...",
    help="Wavelengths of the case in nm; default the first, the last and each emitter's peak.",
)
@click.option(
    "--angles",
    callback=_numbers,
    metavar="DEG,DEG,...",
    help="Angles in the media next to the films; default 0,20,40,60,80.",
)
@click.option("--all", "every_row", is_flag=True, help="Show the comparisons that passed too.")
@_traceback_option
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
    from optics.present import files

    files.check_targets(outputs, (".json", ".csv"))

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
    writers: dict[str, files.Writer] = {
        ".json": lambda path: files.write_json(result, path),
        ".csv": lambda path: outcome.to_frame().to_csv(path, index=False),
    }
    files.publish({path: writers[path.suffix.lower()] for path in outputs})
    if as_object:
        click.echo(files.as_json(result))
        for line in outcome.warnings:
            click.echo(f"Warning: {line}", err=True)
    else:
        from optics.present.check import print_check
        from optics.present.terminal import console

        print_check(console(plain_width=_WIDE), result, every_row=every_row)
    _say_written(outputs)
    if not outcome.passed:
        click.get_current_context().exit(FAILED)


@main.command()
@click.argument("case", metavar="CASE", type=click.Path(path_type=Path))
@_json_option
@_output_option(".json, .csv, .nc, .png, .svg or .pdf")
@click.option(
    "--outcome",
    "shown",
    multiple=True,
    metavar="NAME",
    help="Outcome that pictures show, all if not said; may be given several times.",
)
@click.option(
    "--tolerance",
    type=click.FloatRange(min=1e-12, max=0.1),
    default=1e-6,
    callback=_not_nan,
    show_default=True,
    help="Wanted accuracy of every destination, as a fraction of the dissipated power.",
)
@click.option("--cluster", metavar="ADDRESS", help="Dask scheduler that takes the work.")
@_traceback_option
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
    _say_written(outputs)
    if not complete:
        click.get_current_context().exit(FAILED)


@main.command()
@click.argument("case", metavar="CASE", type=click.Path(path_type=Path))
@_json_option
@_output_option(".json, .csv, .nc, .png, .svg or .pdf")
@click.option(
    "--wavelength",
    "wavelength_nm",
    type=float,
    callback=_not_nan,
    metavar="NM",
    help="Only this wavelength of the case, in nm.",
)
@click.option("--leaky", is_flag=True, help="List leaky modes too, marked as such.")
@click.option("--all", "every_mode", is_flag=True, help="Show modes that take next to nothing too.")
@click.option(
    "--picture",
    type=click.Choice(_MODE_PICTURES),
    help="What a .png, .svg or .pdf shows: effective index against wavelength with shares (if "
    "not said), fields over the films, or where the light ends, film by film.",
)
@_traceback_option
def modes(
    case: Path,
    as_object: bool,
    outputs: tuple[Path, ...],
    wavelength_nm: float | None,
    leaky: bool,
    every_mode: bool,
    picture: str | None,
) -> None:
    """Show guided modes one by one, and the power absorbed in each film.

    CASE is a case file; see docs/modes.md for what the words and numbers mean.
    """
    from optics.present import files

    files.check_targets(outputs, (".json", ".csv", ".nc", *pictures.SUFFIXES))
    draws = any(path.suffix.lower() in pictures.SUFFIXES for path in outputs)
    if picture is not None and not draws:
        raise click.UsageError(f"--picture {picture} needs a file: give -o with .png, .svg or .pdf")

    import optics
    from optics.kernels.compiled import cache_is_warm, mark_cache_warm
    from optics.present.terminal import compiling_notice

    device = optics.read_case(case)
    with compiling_notice(needed=not cache_is_warm("modes")):
        outcome = optics.modes(device, wavelength_nm, leaky=leaky)
    mark_cache_warm("modes")
    result = outcome.to_dict()
    writers: dict[str, files.Writer] = {
        ".json": lambda path: files.write_json(result, path),
        ".csv": lambda path: outcome.to_frame().to_csv(path, index=False),
        ".nc": lambda path: outcome.to_tree().to_netcdf(path, engine="h5netcdf"),
    }
    if draws:
        from optics.present import pictures_modes

        figure = pictures_modes.draw(picture or _MODE_PICTURES[0], device, outcome)
        writers |= {end: lambda path: pictures.write(figure, path) for end in pictures.SUFFIXES}
    files.publish({path: writers[path.suffix.lower()] for path in outputs})
    if as_object:
        click.echo(files.as_json(result))
        for line in outcome.warnings:
            click.echo(f"Warning: {line}", err=True)
    else:
        from optics.present.modes import print_modes
        from optics.present.terminal import console

        print_modes(console(plain_width=_WIDE), result, every_mode=every_mode)
    _say_written(outputs)


@main.command()
@click.argument("name", metavar="[NAME | TABLE]", required=False)
@_json_option
@_output_option(".png, .svg or .pdf")
@_traceback_option
def materials(name: str | None, as_object: bool, outputs: tuple[Path, ...]) -> None:
    """List, plot and check optical constants.

    Without a name: all that is bundled. NAME: a table (ag-yang), a plain name (ag: every
    measurement of that material) or an emission spectrum (green). TABLE: path of a table of
    your own, which is checked.
    """
    from optics.present import constants, files, plots

    files.check_targets(outputs, plots.SUFFIXES)
    if name is None:
        if outputs:
            raise click.UsageError("-o draws one material: give its NAME")
        _list_catalogue(as_object)
        return
    shown = constants.find(name)
    if outputs:
        figure = plots.draw(shown)
        files.publish({path: lambda draft: plots.save(figure, draft) for path in outputs})
    _show_constants(name, shown, as_object)
    _say_written(outputs)


@main.command()
@click.option(
    "-o", "--output", "outputs", type=click.Path(path_type=Path), multiple=True, metavar="PATH",
    help="Write to a .json file instead of standard output.",
)  # fmt: skip
@_traceback_option
def schema(outputs: tuple[Path, ...]) -> None:
    """Print the JSON Schema of the case file, for editors."""
    from optics.present import files

    files.check_targets(outputs, (".json",))

    from optics.device.case import json_schema

    described = json_schema()
    if not outputs:
        click.echo(files.as_json(described))
    files.publish({path: lambda draft: files.write_json(described, draft) for path in outputs})
    _say_written(outputs)


def _list_catalogue(as_object: bool) -> None:
    from optics._version import VERSION
    from optics.present import constants, files

    if as_object:
        head = {"schema": "outcouple.materials/1", "version": VERSION}
        click.echo(files.as_json({**head, **constants.catalogue_dict()}))
        return
    from optics.present.materials import CATALOGUE_WIDTH, catalogue_view
    from optics.present.terminal import console, show

    show(console(plain_width=CATALOGUE_WIDTH), catalogue_view())


def _show_constants(name: str, shown: Shown, as_object: bool) -> None:
    from optics._version import VERSION
    from optics.present import files
    from optics.present.constants import EmissionSpectrum

    if as_object:
        head = {"version": VERSION, "name": name}
        if isinstance(shown, EmissionSpectrum):
            body = {"schema": "outcouple.spectrum/1", **head, **shown.to_dict()}
        else:
            each = [one.to_dict() for one in shown]
            body = {"schema": "outcouple.material/1", **head, "measurements": each}
        click.echo(files.as_json(body))
        return
    from optics.present.materials import measurements_view, spectrum_view
    from optics.present.terminal import console, show

    if isinstance(shown, EmissionSpectrum):
        show(console(), spectrum_view(shown))
    else:
        show(console(), measurements_view(shown))


def _say_written(outputs: tuple[Path, ...]) -> None:
    for path in outputs:
        click.echo(f"Wrote {path}", err=True)


if __name__ == "__main__":
    main()
