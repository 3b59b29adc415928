"""The optimize command behind its options: search with progress, write, print, keep."""

from __future__ import annotations

from collections.abc import Sequence
from contextlib import nullcontext
from pathlib import Path
from typing import TYPE_CHECKING

import click

from optics.device.case import read_case
from optics.device.errors import CaseError, Fault
from optics.present import files, pictures
from optics.present.study_command import publish, say_beside, say_compiling

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from optics.device.case import Case
    from optics.study.optimize_plan import Aim
    from optics.study.optimize_runner import Runner
    from optics.study.optimum import Optimum, Point

CASE = ".toml"
FORMATS = (CASE, ".json", ".csv", *pictures.SUFFIXES)


def run(
    path: Path,
    outputs: Sequence[Path],
    *,
    as_object: bool,
    in_place: bool,
    pick: int | None,
    seed: int,
    samples: int | None,
    tolerance: float,
    cluster: str | None,
) -> None:
    """Run `outcouple optimize`.

    Parameters
    ----------
    path : Path
        The case file.
    outputs : sequence of Path
    as_object : bool
        Print one JSON object on standard output and nothing else there.
    in_place : bool
        Whether an improved case may overwrite the case file.
    pick : int or None
        Point of a front, from 1, that the improved case takes.
    seed : int
    samples : int or None
    tolerance : float
    cluster : str or None
        Address of a Dask scheduler that takes the work.

    Raises
    ------
    KeyboardInterrupt
        If stopped, after it was said what is best so far.
    CaseError
        If the input is at fault or a constraint cannot be met.
    """
    from optics.present.case_text import check_place

    files.check_targets(outputs, FORMATS)
    case = read_case(path)
    for target in outputs:
        if target.suffix.lower() == CASE:
            check_place(case, target, in_place=in_place)

    from optics.study.optimize_plan import plan_optimize

    aim = plan_optimize(case, tolerance)
    if pick is not None and len(aim.objectives) == 1:
        raise click.UsageError("--pick chooses from a Pareto front, but there is one objective")
    say_compiling(aim.question, derivatives=True)
    runner, found = _search(aim, seed, samples, cluster)
    _write(case, found, outputs, _picked(case, found, pick))
    if as_object:
        click.echo(files.as_json(found.to_dict()))
        say_beside((("Warning", found.warnings),))
    else:
        from optics.present.optimize import print_optimum
        from optics.present.terminal import console

        print_optimum(console(plain_width=120), found)
    runner.discard()


def _search(
    aim: Aim, seed: int, samples: int | None, cluster: str | None
) -> tuple[Runner, Optimum]:
    from optics.present.sweep_progress import sweep_progress
    from optics.study.executor import cluster_executor, executor_or_threads
    from optics.study.optimize import run_optimize
    from optics.study.optimize_runner import Runner
    from optics.study.store import progress_folder

    with (
        nullcontext() if cluster is None else cluster_executor(cluster) as handed,
        executor_or_threads(handed) as pool,
        sweep_progress() as show,
    ):

        def progress(stage: str, done: int, total: int) -> None:
            show(done, total, _STAGES[stage])

        runner = Runner(aim, pool, progress_folder(), progress)
        try:
            return runner, run_optimize(runner, seed, samples)
        except KeyboardInterrupt:
            _say_best(runner)
            raise


_STAGES = {
    "sampling": "first points",
    "searching": "promising points",
    "polishing": "optima",
    "flatness": "points around the best",
    "front": "points of the front",
}


def _say_best(runner: Runner) -> None:
    """Tell the best point so far, and that nothing is lost."""
    if runner.trouble is not None:
        click.echo(f"Progress could not be kept: {runner.trouble}", err=True)
    if runner.best is None:
        return
    aim = runner.aim
    first = aim.objectives[0]
    values = runner.best[: len(aim.variables)]
    outcome = runner.best[len(aim.variables) + first.place]
    place = aim.question.name_of(float(f"{value:.6g}") for value in values)
    click.echo(f"Best so far: {first.name} = {outcome:.6g} at {place}", err=True)
    if runner.trouble is None:
        click.echo("What is done is kept; the same command continues from there.", err=True)


def _picked(case: Case, found: Optimum, pick: int | None) -> Point:
    if pick is None:
        return found.best
    if pick > len(found.front):
        expected = f"1 to {len(found.front)}, the points of the front"
        raise CaseError([Fault(case.label, "--pick", str(pick), expected)])
    return found.front[pick - 1]


def _write(case: Case, found: Optimum, outputs: Sequence[Path], point: Point) -> None:
    from optics.present.case_text import write_case

    def draw() -> Figure:
        from optics.present.optimize_pictures import optimum_figure

        return optimum_figure(found)

    def improved(final: Path) -> files.Writer:
        return lambda path: write_case(case, point.values, path, final)

    writers: dict[str, files.Writer] = {
        ".json": lambda path: files.write_json(found.to_dict(), path),
        ".csv": lambda path: found.frame.to_csv(path, index=False),
    }
    publish(outputs, writers, draw, {CASE: improved})
