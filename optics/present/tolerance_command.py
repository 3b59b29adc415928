"""The tolerance command behind its options: compute with progress, write, print, keep."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import click

from optics.device.case import read_case
from optics.present import files, pictures
from optics.present.study_command import (
    check_shown,
    publish,
    say_beside,
    say_compiling,
    saying_what_is_kept,
    workers,
)

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from optics.study.tolerance_result import Tolerance

FORMATS = (".json", ".csv", ".nc", *pictures.SUFFIXES)


def run(
    path: Path,
    outputs: Sequence[Path],
    shown: Sequence[str],
    *,
    as_object: bool,
    samples: int | None,
    seed: int | None,
    tolerance: float,
    cluster: str | None,
) -> bool:
    """Run `outcouple tolerance`.

    Parameters
    ----------
    path : Path
        The case file.
    outputs : sequence of Path
    shown : sequence of str
        Outcomes that pictures show; all if empty.
    as_object : bool
        Print one JSON object on standard output and nothing else there.
    samples, seed : int or None
        In the place of those in the case.
    tolerance : float
    cluster : str or None
        Address of a Dask scheduler that takes the work.

    Returns
    -------
    bool
        Whether every sample was computed.

    Raises
    ------
    KeyboardInterrupt
        If stopped, after it was said what is kept.
    CaseError
        If the input is at fault.
    """
    files.check_targets(outputs, FORMATS)
    case = read_case(path)

    from optics.present.tolerance import print_tolerance
    from optics.study.draws import draw
    from optics.study.store import progress_folder
    from optics.study.tolerance import points_of, run_tolerance, store_for
    from optics.study.tolerance_plan import plan_tolerance

    plan = plan_tolerance(case, tolerance, samples, seed)
    check_shown(plan.question, shown)
    say_compiling(plan.question, derivatives=True)
    drawn = draw(plan.spreads, plan.groups, plan.samples, plan.seed)
    points = points_of(plan, drawn)
    store = store_for(plan, points, progress_folder())
    with saying_what_is_kept(store, len(points)) as note:
        with workers(cluster, note) as (executor, progress):
            found = run_tolerance(plan, drawn, executor=executor, progress=progress, store=store)
        _write(found, outputs, shown)
    if as_object:
        click.echo(files.as_json(found.to_dict()))
        say_beside((("Failed", found.failed), ("Warning", found.warnings)))
    else:
        from optics.present.terminal import console

        print_tolerance(console(plain_width=120), found)
    if not found.failed:
        store.discard()
    return not found.failed


def _write(found: Tolerance, outputs: Sequence[Path], shown: Sequence[str]) -> None:
    def draw() -> Figure:
        from optics.present.tolerance_pictures import tolerance_figure

        return tolerance_figure(found, shown)

    writers: dict[str, files.Writer] = {
        ".json": lambda path: files.write_json(found.to_dict(), path),
        ".csv": lambda path: found.to_frame().to_csv(path, index=False),
        ".nc": lambda path: found.data.to_netcdf(path, engine="h5netcdf"),
    }
    publish(outputs, writers, draw)
