"""The group that holds the commands, and what becomes of their exceptions."""

from __future__ import annotations

import sys
from typing import Any

import click

from optics.cli.options import TRACEBACK, traceback_option

DONE, FAILED, INPUT_AT_FAULT = 0, 1, 2


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
            if ctx.meta.get(TRACEBACK):
                raise
            click.echo(_short(error), err=True)
            ctx.exit(FAILED)


def _short(error: Exception) -> str:
    said = str(error) or "no message"
    return f"outcouple failed: {type(error).__name__}: {said}\n--traceback tells where."


def _version(ctx: click.Context, _parameter: click.Parameter, value: bool) -> None:
    if not value or ctx.resilient_parsing:
        return
    from optics._version import VERSION

    click.echo(f"outcouple {VERSION}")
    ctx.exit()


@click.group(cls=Roof, context_settings={"help_option_names": ["-h", "--help"]})
@click.option(
    "--version", is_flag=True, is_eager=True, expose_value=False, callback=_version,
    help="Show the version and exit.",
)  # fmt: skip
@traceback_option
def main() -> None:
    """Where the light generated in a thin-film stack goes, and how much of it gets out.

    A device is described in a case file (TOML). Exit status: 0 done, 2 the input is at fault,
    1 anything else.
    """
    for stream in (sys.stdout, sys.stderr):
        # Sources have names with accents; a terminal that lacks them gets question marks.
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
