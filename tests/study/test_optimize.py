"""Optimizations of devices: never worse than a grid, constraints met, faults told."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np
import pytest
from optimize_devices import BOUNDS, optimized
from sweep_devices import EQE, ETL, HTL

import optics
from optics.device.case import Case, case_from_dict
from optics.device.errors import CaseError
from optics.outcome.budget import DEFAULT_TOLERANCE
from optics.study.evaluate import answers
from optics.study.optimize import first_stage, run_optimize
from optics.study.optimize_goals import meets
from optics.study.optimize_plan import plan_optimize
from optics.study.optimize_result import best_optima
from optics.study.optimize_runner import Runner
from optics.study.optimum import FrontPoint, Optimum

CASES = Path(__file__).parents[2] / "cases"
ONE = {HTL: {"min": 20, "max": 120}}
GUIDED = "destinations.guided"


def faults_of(device: Callable[[], Case]) -> list[str]:
    with pytest.raises(CaseError) as caught:
        optics.optimize(device())
    return [str(fault) for fault in caught.value.faults]


def grid_best(device: Case, step_nm: float, most_guided: float = 1.0) -> float:
    """Best EQE of the films' grid, by a sweep."""
    axes = {path: {"start": 20, "stop": 120, "step": step_nm} for path in BOUNDS}
    document = device.document
    document.pop("optimize")
    document["sweep"] = {"axes": axes, "outcomes": [EQE, GUIDED]}
    from devices import case

    found = optics.sweep(case(document))
    return float(found[EQE].where(found[GUIDED] <= most_guided).max())


def test_no_grid_is_better_and_values_are_what_they_say() -> None:
    device = optimized()
    found = optics.optimize(device, seed=3)
    assert found.seed == 3
    assert found.best.outcomes[EQE] >= grid_best(device, 5.0)
    again = optics.budget(device.replace_all(found.best.values))
    assert again.external_quantum_efficiency == pytest.approx(found.best.outcomes[EQE], abs=1e-6)
    assert all(round(value, 2) == value for value in found.best.values.values())
    assert found.objectives[0].start == pytest.approx(
        optics.budget(device).external_quantum_efficiency, abs=1e-6
    )
    assert found.tried.gradient_method == "exact"


def test_a_constraint_binds_and_its_gain_is_real() -> None:
    free = optics.optimize(optimized())
    inside = optics.budget(optimized().replace_all(free.best.values)).destinations["guided"]
    assert inside is not None
    limit = 0.9 * inside
    device = optimized(constraints={GUIDED: {"max": limit}})
    held = optics.optimize(device)
    (constraint,) = held.constraints
    assert constraint.binds
    assert constraint.value <= limit
    assert held.best.outcomes[EQE] < free.best.outcomes[EQE]
    assert held.best.outcomes[EQE] >= grid_best(device, 5.0, limit)
    looser = optics.optimize(optimized(constraints={GUIDED: {"max": 1.01 * limit}}))
    gained = looser.best.outcomes[EQE] - held.best.outcomes[EQE]
    # To first order, so to within the curvature over a step of 1 %.
    assert gained == pytest.approx(0.01 * limit * constraint.gain_per_unit, rel=0.2)


def test_a_bound_that_holds_back_is_named() -> None:
    wide = optics.optimize(optimized(ONE))
    best = wide.variables[0].best
    narrow = optics.optimize(optimized({HTL: {"min": 20, "max": best - 5.0}}))
    (variable,) = narrow.variables
    assert variable.binds == "max"
    assert variable.best == pytest.approx(best - 5.0, abs=0.02)
    further = optics.optimize(optimized({HTL: {"min": 20, "max": best - 4.9}}))
    gained = further.best.outcomes[EQE] - narrow.best.outcomes[EQE]
    assert gained == pytest.approx(0.1 * variable.gain_per_unit, rel=0.05)
    assert wide.variables[0].binds is None


def test_flat_range_loses_one_percent_at_its_ends() -> None:
    device = optimized()
    found = optics.optimize(device)
    for one in found.variables:
        for end, bound in ((one.flat_from, one.min), (one.flat_to, one.max)):
            assert end is not None
            if end == bound:
                continue
            moved = device.replace_all({**found.best.values, one.path: end})
            lost = 1.0 - optics.budget(moved).external_quantum_efficiency / found.best.outcomes[EQE]
            assert lost == pytest.approx(0.01, abs=3e-4)


def test_linked_numbers_are_in_the_best_point() -> None:
    found = optics.optimize(optimized(ONE, linked={ETL: HTL}))
    assert found.best.values[ETL] == found.best.values[HTL]


def test_what_has_no_derivative_is_polished_by_differences() -> None:
    found = optics.optimize(optimized(ONE, constraints={"bottom.peak_nm_normal": {"min": 500}}))
    assert found.tried.gradient_method.startswith("differences (bottom.peak_nm_normal")


def test_no_point_of_a_front_betters_another() -> None:
    found = optics.optimize(optimized(objectives=[{"maximize": EQE}, {"minimize": GUIDED}]))
    assert len(found.front) > 3
    pairs = [(-point.outcomes[EQE], point.outcomes[GUIDED]) for point in found.front]
    for one in pairs:
        for other in pairs:
            assert one == other or not (other[0] <= one[0] and other[1] <= one[1])
    assert found.best in found.front
    alone = optics.optimize(optimized())
    assert -pairs[0][0] == pytest.approx(alone.best.outcomes[EQE], rel=1e-4)


PLASMON = "destinations.surface_plasmon"


@pytest.fixture(scope="module")
def held_front() -> Optimum:
    """A front that begins free, follows a limit and ends at a bound."""
    wanted = [{"maximize": EQE}, {"minimize": PLASMON}]
    return optics.optimize(optimized(objectives=wanted, constraints={GUIDED: {"max": 0.3}}))


def test_a_front_says_what_holds_each_point(held_front: Optimum) -> None:
    held = [{(one.name, one.kind) for one in point.held_by} for point in held_front.front]
    assert {frozenset(one) for one in held} >= {
        frozenset(), frozenset({(GUIDED, "max")}), frozenset({(HTL, "max")}),
    }  # fmt: skip
    for names, point in zip(held, held_front.front, strict=True):
        at_bound = point.values[HTL] == BOUNDS[HTL]["max"]
        at_limit = point.outcomes[GUIDED] > 0.3 - 1e-3
        assert ((HTL, "max") in names) <= at_bound
        assert ((GUIDED, "max") in names) <= at_limit
        assert bool(names) == (at_bound or at_limit)
    (constraint,) = held_front.constraints
    assert constraint.gain_per_unit is None


@pytest.mark.parametrize("held_by", [GUIDED, HTL])
def test_what_holds_a_point_of_a_front_keeps_better_ones_away(
    held_front: Optimum, held_by: str
) -> None:
    """A little beyond it there is a device better in both; of a free point there is none around."""
    device = optimized()
    points = [one for one in held_front.front if [held.name for held in one.held_by] == [held_by]]
    point = points[len(points) // 2]
    around = [(a, b) for a in np.linspace(-2.0, 2.0, 9) for b in np.linspace(-2.0, 2.0, 9)]

    def betters(start: FrontPoint) -> list[dict[str, float]]:
        found = []
        for step in around:
            moved = {p: start.values[p] + s for p, s in zip((HTL, ETL), step, strict=True)}
            budget = optics.budget(device.replace_all(moved))
            shares = {name: budget.destinations[name] for name in ("guided", "surface_plasmon")}
            if (
                budget.external_quantum_efficiency > start.outcomes[EQE] + 1e-6
                and shares["surface_plasmon"] < start.outcomes[PLASMON] - 1e-6
            ):
                found.append({**moved, GUIDED: shares["guided"]})
        return found

    better = betters(point)
    assert better
    limit = {GUIDED: 0.3, HTL: BOUNDS[HTL]["max"]}[held_by]
    assert all(one[held_by] > limit for one in better)
    free = next(one for one in held_front.front[1:] if not one.held_by)
    assert betters(free) == []


def test_a_front_says_how_flat_each_point_is(held_front: Optimum) -> None:
    """Losses are real, and no other change so long costs less in both."""
    device = optimized()
    ranges = {path: bounds["max"] - bounds["min"] for path, bounds in BOUNDS.items()}

    def lost(point: FrontPoint, steps: dict[str, float]) -> float:
        moved = {path: point.values[path] + steps[path] for path in steps}
        budget = optics.budget(device.replace_all(moved))
        return max(
            1.0 - budget.external_quantum_efficiency / point.outcomes[EQE],
            (budget.destinations["surface_plasmon"] or 0.0) / point.outcomes[PLASMON] - 1.0,
        )

    free = [point for point in held_front.front if not point.held_by]
    assert len(free) > 3
    # With two variables, one held and both objectives level leave no way.
    assert all(point.loosest is None for point in held_front.front if point.held_by)
    for point in (free[0], free[len(free) // 2]):
        assert point.loosest is not None
        steps = dict(point.loosest.steps)
        back = {path: -step for path, step in steps.items()}
        assert lost(point, steps) == pytest.approx(point.loosest.loss_forward, abs=1e-5)
        assert lost(point, back) == pytest.approx(point.loosest.loss_backward, abs=1e-5)
        length = np.hypot(*(steps[path] / ranges[path] for path in (HTL, ETL)))
        at = np.arctan2(steps[ETL] / ranges[ETL], steps[HTL] / ranges[HTL])
        for turn in (0.3, 0.6, 1.0, 1.57, 2.2, 2.8):
            other = {
                HTL: length * np.cos(at + turn) * ranges[HTL],
                ETL: length * np.sin(at + turn) * ranges[ETL],
            }
            both = (lost(point, other), lost(point, {p: -s for p, s in other.items()}))
            assert max(both) > max(lost(point, steps), lost(point, back))


def test_a_table_of_a_front_says_what_holds_it(held_front: Optimum) -> None:
    rows = held_front.frame[held_front.frame["kind"] == "front"]
    assert f"{GUIDED} max" in set(rows["held_by"])
    point, row = held_front.front[1], rows.iloc[1]
    assert point.loosest is not None
    assert row[f"loosest {HTL}"] == point.loosest.steps[HTL]
    assert row["loss_forward"] == point.loosest.loss_forward
    assert held_front.frame["held_by"].isna().sum() == held_front.tried.samples


def test_faults_are_told_all_at_once() -> None:
    said = faults_of(
        lambda: optimized(
            maximize="external_quantum_eficiency", constraints={"x_normal": {"max": 1}}
        )
    )
    assert len(said) == 2
    assert "did you mean external_quantum_efficiency?" in said[0]
    assert "bottom.x_normal, top.x_normal" in said[1]
    assert "no such table" in faults_of(lambda: optics.read_case(CASES / "white-tandem.toml"))[0]
    said = faults_of(
        lambda: optimized({HTL: {"min": 90, "max": 40}, "layers.HTX": {"min": 1, "max": 2}})
    )
    assert any("expected above min = 90" in one for one in said)
    assert any("layers.HT" in one and "did you mean" in one for one in said)
    said = faults_of(lambda: optimized({"emitters.green.quantum_yield": {"min": 0.5, "max": 1.5}}))
    assert said
    assert 'optimize.variables."emitters.green.quantum_yield".max' in said[0]
    assert "which is varied" in faults_of(lambda: optimized(maximize=HTL))[0]


def test_limits_out_of_reach_are_named_with_the_nearest_point() -> None:
    (said,) = faults_of(lambda: optimized(constraints={EQE: {"min": 0.9}, GUIDED: {"max": 0.99}}))
    assert f'optimize.constraints."{EQE}".min: found 0.9; at best 0.' in said
    assert f"{HTL} = " in said
    assert f"{ETL} = " in said


def test_limits_that_exclude_each_other_are_named_together() -> None:
    found = optics.optimize(optimized(ONE))
    other = optics.optimize(optimized(ONE, minimize=EQE))
    low, high = other.best.outcomes[EQE], found.best.outcomes[EQE]
    limits = {EQE: {"min": low + 0.6 * (high - low), "max": low + 0.4 * (high - low)}}
    with pytest.raises(CaseError):  # a smallest above a largest value, at the door
        optimized(ONE, constraints=limits)


def test_undefined_objectives_are_told() -> None:
    (said,) = faults_of(lambda: optimized(ONE, maximize="bottom.luminous_efficacy_lm_W"))
    assert "undefined at every point" in said


def test_interrupted_it_continues_with_the_same_result(tmp_path: Path) -> None:
    device = optimized()
    whole = optics.optimize(device)

    def stop(stage: str, done: int, _total: int) -> None:
        if stage == "polishing" and done:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        optics.optimize(device, progress=stop, keep_in=tmp_path)
    assert list(tmp_path.glob("optimize-*.part"))
    calls: list[tuple[str, int]] = []
    found = optics.optimize(
        device, progress=lambda stage, done, total: calls.append((stage, done)), keep_in=tmp_path
    )
    assert calls[0] == ("sampling", found.tried.samples)
    assert found.to_dict() == whole.to_dict()
    assert not list(tmp_path.glob("optimize-*.part"))


def test_the_best_so_far_meets_all_limits() -> None:
    with ThreadPoolExecutor(2) as pool:
        runner = Runner(plan_optimize(optimized(constraints={GUIDED: {"max": 0.3}}), 1e-6), pool)
        found = run_optimize(runner, 0)
    assert runner.best is not None
    assert runner.best[2] == pytest.approx(found.best.outcomes[EQE], abs=1e-4)


@pytest.mark.parametrize("wrong", [{"seed": -1}, {"samples": 0}, {"tolerance": 1.0}])
def test_arguments_out_of_range_are_refused(wrong: dict[str, float]) -> None:
    with pytest.raises(ValueError, match=next(iter(wrong))):
        optics.optimize(optimized(), **wrong)


@pytest.mark.slow  # starts a cluster
@pytest.mark.filterwarnings("ignore")  # of the cluster's own libraries
def test_a_cluster_of_two_processes_gives_the_same_bits_even_if_one_dies() -> None:
    distributed = pytest.importorskip("distributed")
    from optics.study.executor import cluster_executor

    device = optimized(constraints={GUIDED: {"max": 0.17}})
    own = optics.optimize(device).to_dict()
    with distributed.LocalCluster(
        n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None
    ) as cluster:
        with cluster_executor(cluster.scheduler_address) as executor:
            assert optics.optimize(device, executor=executor).to_dict() == own
        killed = []

        def kill_one(stage: str, done: int, _total: int) -> None:
            if stage == "polishing" and done and not killed:
                killed.append(next(iter(cluster.workers.values())))
                killed[0].process.process._process.kill()

        with cluster_executor(cluster.scheduler_address) as executor:
            again = optics.optimize(device, executor=executor, progress=kill_one)
        assert killed
        assert again.to_dict() == own


# Values of each variable of the dense grids.
DENSE = {"optimize-two-antinodes": 45, "optimize-color": 6, "optimize-front": 10}


def worked(stem: str, step_nm: float) -> Case:
    """Return a bundled problem on a coarser grid, of a front the first objective alone."""
    document = optics.read_case(CASES / f"{stem}.toml").document
    document["wavelength"]["step_nm"] = step_nm
    table = document["optimize"]
    if table.pop("objectives", None):
        table["maximize"] = EQE
    return case_from_dict(document, CASES)


def dense_best(device: Case, count: int) -> float:
    """Best of a grid over all variables, by single points."""
    aim = plan_optimize(device, DEFAULT_TOLERANCE)
    axes = [np.linspace(one.low, one.high, count) for one in aim.variables]
    points = np.stack([axis.ravel() for axis in np.meshgrid(*axes)], axis=1)
    found, failed = answers(aim.question, points)
    assert not failed
    outcomes = found[:, : len(aim.question.outcomes)]
    return float(outcomes[meets(aim, outcomes), aim.objectives[0].place].max())


def best_of(device: Case, seed: int) -> float:
    """What the search finds; how flat it is there costs a quarter more and is not asked."""
    with ThreadPoolExecutor() as pool:
        runner = Runner(plan_optimize(device, DEFAULT_TOLERANCE), pool)
        best = best_optima(runner, first_stage(runner, seed)).settled[0]
    return float(best.found[runner.aim.objectives[0].place])


@pytest.mark.slow
@pytest.mark.parametrize("stem", DENSE)
def test_twenty_seeds_find_the_same_best_and_no_grid_a_better(stem: str) -> None:
    """Same: the objective to 1e-4 of itself, far below the gap to the next optimum."""
    device = worked(stem, 20.0)
    bests = [best_of(device, seed) for seed in range(20)]
    assert optics.optimize(device, seed=0).best.outcomes[EQE] == bests[0]
    top = max(bests)
    assert sum(best >= top * (1.0 - 1e-4) for best in bests) >= 19
    assert min(bests) >= dense_best(device, DENSE[stem])


@pytest.mark.slow
def test_the_two_antinodes_are_within_one_percent() -> None:
    found = optics.optimize(optics.read_case(CASES / "optimize-two-antinodes.toml"))
    assert found.best.values[ETL] == pytest.approx(216.0, abs=2.0)
    assert [one.values[ETL] for one in found.others] == [pytest.approx(50.4, abs=2.0)]
