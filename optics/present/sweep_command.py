"""The sweep command behind its options: compute with progress, print, write, keep what is done."""

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
    import xarray
    from matplotlib.figure import Figure

FORMATS = (".json", ".csv", ".nc", *pictures.SUFFIXES)


def run(
    path: Path,
    outputs: Sequence[Path],
    shown: Sequence[str],
    *,
    as_object: bool,
    tolerance: float,
    cluster: str | None,
) -> bool:
    """Run `outcouple sweep`.

    Parameters
    ----------
    path : Path
        The case file.
    outputs : sequence of Path
    shown : sequence of str
        Outcomes that pictures show; all if empty.
    as_object : bool
        Print one JSON object on standard output and nothing else there.
    tolerance : float
    cluster : str or None
        Address of a Dask scheduler that takes the work.

    Returns
    -------
    bool
        Whether every point was computed.

    Raises
    ------
    KeyboardInterrupt
        If stopped, after it was said what is kept.
    CaseError
        If the input is at fault.
    """
    files.check_targets(outputs, FORMATS)
    case = read_case(path)

    from optics.present.sweep import print_sweep, sweep_dict
    from optics.study.store import progress_folder
    from optics.study.sweep import run_sweep, store_for
    from optics.study.sweep_plan import plan_sweep

    plan = plan_sweep(case, tolerance)
    check_shown(plan.question, shown)
    say_compiling(plan.question)
    store = store_for(plan, progress_folder())
    with saying_what_is_kept(store, plan.points) as note:
        with workers(cluster, note) as (executor, progress):
            found = run_sweep(plan, executor=executor, progress=progress, store=store)
        _write(found, outputs, shown)
    failed = found.attrs["failed"].splitlines()
    if as_object:
        click.echo(files.as_json(sweep_dict(found)))
        say_beside((("Failed", failed), ("Warning", found.attrs["warnings"].splitlines())))
    else:
        from optics.present.terminal import console

        print_sweep(console(plain_width=160), found)
    if not failed:
        store.discard()
    return not failed


def _write(found: xarray.Dataset, outputs: Sequence[Path], shown: Sequence[str]) -> None:
    from optics.present.sweep import sweep_dict, sweep_frame

    def draw() -> Figure:
        from optics.present.sweep_pictures import sweep_figure

        return sweep_figure(found, shown)

    writers: dict[str, files.Writer] = {
        ".json": lambda path: files.write_json(sweep_dict(found), path),
        ".csv": lambda path: sweep_frame(found).to_csv(path, index=False),
        ".nc": lambda path: found.to_netcdf(path, engine="h5netcdf"),
    }
    publish(outputs, writers, draw)
