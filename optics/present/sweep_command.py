"""The sweep command behind its options: compute with progress, print, write, keep what is done."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from contextlib import nullcontext
from pathlib import Path
from typing import TYPE_CHECKING

import click

from optics.device.case import read_case
from optics.device.errors import CaseError, Fault, nearest
from optics.present import files, pictures

if TYPE_CHECKING:
    from optics.study.sweep_plan import Plan

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

    from optics.present.sweep_progress import sweep_progress
    from optics.study.executor import cluster_executor
    from optics.study.store import progress_folder
    from optics.study.sweep import run_sweep, store_for
    from optics.study.sweep_plan import plan_sweep

    plan = plan_sweep(case, tolerance)
    _check_shown(plan, shown)
    _say_compiling(plan)
    store = store_for(plan, progress_folder())
    done = 0
    try:
        with (
            nullcontext() if cluster is None else cluster_executor(cluster) as executor,
            sweep_progress() as show,
        ):

            def progress(now: int, total: int) -> None:
                nonlocal done
                done = now
                show(now, total)

            found = run_sweep(plan, executor=executor, progress=progress, store=store)
    except BaseException:
        _say_kept(done, plan.points, store.trouble)
        raise

    from optics.present.sweep import print_sweep, sweep_dict, sweep_frame

    writers: dict[str, files.Writer] = {
        ".json": lambda path: files.write_json(sweep_dict(found), path),
        ".csv": lambda path: sweep_frame(found).to_csv(path, index=False),
        ".nc": lambda path: found.to_netcdf(path, engine="h5netcdf"),
    }
    if any(path.suffix.lower() in pictures.SUFFIXES for path in outputs):
        from optics.present.sweep_pictures import sweep_figure

        figure = sweep_figure(found, shown)
        writers |= {end: lambda path: pictures.write(figure, path) for end in pictures.SUFFIXES}
    try:
        files.publish({path: writers[path.suffix.lower()] for path in outputs})
    except BaseException:
        _say_kept(done, plan.points, store.trouble)
        raise
    failed = found.attrs["failed"].splitlines()
    if as_object:
        click.echo(files.as_json(sweep_dict(found)))
        for kind, lines in (("Failed", failed), ("Warning", found.attrs["warnings"].splitlines())):
            for line in lines:
                click.echo(f"{kind}: {line}", err=True)
    else:
        from optics.present.terminal import console

        print_sweep(console(plain_width=160), found)
    if not failed:
        store.discard()
    return not failed


def _check_shown(plan: Plan, shown: Sequence[str]) -> None:
    names = [outcome.name for outcome in plan.question.outcomes]
    faults = [
        Fault(
            plan.question.case.label,
            "--outcome",
            name,
            f"one of {', '.join(names)}",
            nearest(name, names),
        )
        for name in shown
        if name not in names
    ]
    if faults:
        raise CaseError(faults)


def _say_compiling(plan: Plan) -> None:
    """Announce the wait where kernels are not compiled yet."""
    from optics.kernels.angles import angles_are_compiled
    from optics.kernels.compiled import cache_is_warm
    from optics.present.terminal import COMPILING

    by_angle = any(outcome.needs_angular for outcome in plan.question.outcomes)
    if not cache_is_warm() or (by_angle and not angles_are_compiled()):
        print(COMPILING, file=sys.stderr)


def _say_kept(done: int, points: int, trouble: str | None) -> None:
    if trouble is not None:
        text = f"Progress could not be kept: {trouble}"
    elif done:
        text = f"{done} of {points} points are kept; the same command continues from there."
    else:
        return
    click.echo(text, err=True)
