"""The command line: reads the options, calls, prints. Heavy libraries load inside commands."""

# Each module hangs its commands on the group when it is imported.
from optics.cli import (
    ambient,
    angular,
    budget,
    check,
    export,
    materials,
    modes,
    optimize,
    sweep,
    tolerance,
)
from optics.cli.roof import main

__all__ = [
    "ambient",
    "angular",
    "budget",
    "check",
    "export",
    "main",
    "materials",
    "modes",
    "optimize",
    "sweep",
    "tolerance",
]
