"""Best values of chosen numbers of a case, under bounds and constraints."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.device.errors import CaseError, Fault
from optics.outcome.budget import DEFAULT_TOLERANCE
from optics.study.evaluate import TRUST
from optics.study.executor import executor_or_threads
from optics.study.optimize_front import find_front
from optics.study.optimize_goals import meets, spreads
from optics.study.optimize_plan import Aim, plan_optimize
from optics.study.optimize_reach import meet_limits
from optics.study.optimize_result import Ends, best_optima, front_optimum, single_optimum
from optics.study.optimize_runner import Progress, Runner
from optics.study.optimize_search import spread_points, usual_count
from optics.study.optimize_surrogate import Sample

if TYPE_CHECKING:
    from concurrent.futures import Executor
    from pathlib import Path

    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.study.optimum import Optimum

    Floats = NDArray[np.float64]

DEFAULT_SEED = 0
LARGEST_SAMPLE = 65536


def optimize(
    case: Case,
    *,
    seed: int = DEFAULT_SEED,
    samples: int | None = None,
    tolerance: float = DEFAULT_TOLERANCE,
    executor: Executor | None = None,
    progress: Progress | None = None,
    keep_in: Path | None = None,
) -> Optimum:
    """Find the best values of the numbers in a case's `[optimize]` table.

    Parameters
    ----------
    case : Case
        From `optics.read_case`.
    seed : int
        Of the scrambled points that the search begins with.
    samples : int, optional
        How many, rounded up to a power of two; by the number of variables if not given.
    tolerance : float
        Wanted accuracy of every destination, as a fraction of the dissipated power.
    executor : concurrent.futures.Executor, optional
        Takes the work; threads on all cores if not given. It stays open.
    progress : callable, optional
        Called with the stage, the number of its parts that are done and of all, as they come.
    keep_in : Path, optional
        Folder in which finished work is kept until the result is there. Interrupted, the same
        optimization of the same case continues from there, with the same result.

    Returns
    -------
    Optimum

    Raises
    ------
    CaseError
        With every fault of the `[optimize]` table, or every constraint that cannot be met.
    ValueError
        If seed, samples or tolerance are out of range.

    Examples
    --------
    >>> import optics
    >>> found = optics.optimize(optics.read_case("cases/optimize-color.toml"))  # doctest: +SKIP
    >>> found.best.values  # doctest: +SKIP
    """
    if not 1e-12 <= tolerance <= 0.1:
        raise ValueError(f"tolerance: found {tolerance!r}; expected a number from 1e-12 to 0.1")
    aim = plan_optimize(case, tolerance)
    with executor_or_threads(executor) as pool:
        runner = Runner(aim, pool, keep_in, progress)
        found = run_optimize(runner, seed, samples)
    runner.discard()
    return found


def run_optimize(runner: Runner, seed: int, samples: int | None = None) -> Optimum:
    """Run a checked optimization; as `optimize`, but the caller discards what is kept."""
    ends = first_stage(runner, seed, samples)
    if len(runner.aim.objectives) > 1:
        return front_optimum(runner, ends, find_front(runner, ends.sample, ends.spread))
    return single_optimum(runner, ends, best_optima(runner, ends))


def first_stage(runner: Runner, seed: int, samples: int | None = None) -> Ends:
    """Compute points between the bounds, and if none meets the limits, search for those that do."""
    aim = runner.aim
    count = _count(len(aim.variables), samples)
    if seed < 0:
        raise ValueError(f"seed: found {seed}; expected 0 or a positive integer")
    first = _first(runner, spread_points(len(aim.variables), count, seed))
    sample, spread = first.sample, spreads(first.sample.outcomes)
    if not meets(aim, sample.outcomes).any():
        sample = meet_limits(runner, sample, spread)
    return Ends(sample, spread, len(first.found), first.failed, seed)


class _First(NamedTuple):
    """The first stage."""

    sample: Sample
    found: Floats  # (n, k + 3)
    failed: dict[int, str]


def _count(variables: int, samples: int | None) -> int:
    if samples is None:
        return usual_count(variables)
    if not 1 <= samples <= LARGEST_SAMPLE:
        raise ValueError(f"samples: found {samples}; expected 1 to {LARGEST_SAMPLE}")
    return 1 << (samples - 1).bit_length()


def _first(runner: Runner, units: Floats) -> _First:
    """Compute the first points, and the case as it stands where that lies within the bounds."""
    aim = runner.aim
    own = aim.unit_at(aim.start)
    if own.min() >= 0.0 and own.max() <= 1.0:
        units = np.concatenate([own[None], units])
    found, failed = runner.answers(units, "sampling")
    outcomes = found[:, : -len(TRUST)]
    known = np.asarray(np.isfinite(outcomes).all(axis=1))
    if not known.any():
        raise CaseError(_undefined(aim, outcomes, failed))
    for place in np.arange(len(known))[~known].tolist():
        failed.setdefault(place, "an outcome is undefined")
    return _First(Sample(units[known], outcomes[known]), found, failed)


def _undefined(aim: Aim, outcomes: Floats, failed: dict[int, str]) -> list[Fault]:
    """Why no point of the first stage is of any use."""
    label = aim.case.label
    if len(failed) == len(outcomes):
        why = next(iter(failed.values()))
        found = f"bounds within which none of {len(outcomes)} points could be computed: {why}"
        return [Fault(label, "optimize.variables", found, "bounds with devices between them")]
    never = np.asarray(~np.isfinite(outcomes).any(axis=0))
    keys = {one.place: f"optimize ({one.name})" for one in aim.objectives}
    keys |= {one.place: one.key for one in aim.limits if one.place not in keys}
    return [
        Fault(
            label,
            keys[place],
            f"{one.name}, undefined at every point tried",
            "an outcome that this case defines (absolute light needs drive.current_density_mA_cm2)",
        )
        for place, one in enumerate(aim.question.outcomes)
        if never[place] or not never.any()
    ]
