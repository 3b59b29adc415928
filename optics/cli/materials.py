"""Optical constants and the case file's schema at the command line."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from optics.cli.options import (
    json_option,
    output_option,
    say_written,
    traceback_option,
)
from optics.cli.roof import main

if TYPE_CHECKING:
    from optics.present.constants import Shown


@main.command()
@click.argument("name", metavar="[NAME | TABLE]", required=False)
@json_option
@output_option(".png, .svg or .pdf")
@traceback_option
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
    say_written(outputs)


@main.command()
@click.option(
    "-o", "--output", "outputs", type=click.Path(path_type=Path), multiple=True, metavar="PATH",
    help="Write to a .json file instead of standard output.",
)  # fmt: skip
@traceback_option
def schema(outputs: tuple[Path, ...]) -> None:
    """Print the JSON Schema of the case file, for editors."""
    from optics.present import files

    files.check_targets(outputs, (".json",))

    from optics.device.case import json_schema

    described = json_schema()
    if not outputs:
        click.echo(files.as_json(described))
    files.publish({path: lambda draft: files.write_json(described, draft) for path in outputs})
    say_written(outputs)


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
