"""Sweeps equal single budgets, resume to the last bit, lose nothing to a failing point."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Executor, Future, ProcessPoolExecutor, ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from devices import case
from sweep_devices import EQE, ETL, HTL, coarse, swept, two_emitters

import optics
from optics.device.case import Case
from optics.device.errors import CaseError
from optics.study.sweep_plan import plan_sweep

AXES = {HTL: {"values": [40, 60]}, ETL: {"start": 30, "stop": 70, "step": 20}}


def faults_of(device: Callable[[], Case]) -> list[str]:
    with pytest.raises(CaseError) as caught:
        optics.sweep(device())
    return [str(fault) for fault in caught.value.faults]


def test_every_point_is_the_budget_of_its_case() -> None:
    device = swept(AXES, outcomes=[EQE, "destinations.guided", "purcell_factor"])
    found = optics.sweep(device)
    assert found[EQE].dims == (HTL, ETL)
    assert found[ETL].to_numpy().tolist() == [30.0, 50.0, 70.0]
    for htl in (40.0, 60.0):
        for etl in (30.0, 50.0, 70.0):
            alone = optics.budget(device.replace_all({HTL: htl, ETL: etl}))
            here = found.sel({HTL: htl, ETL: etl})
            assert float(here[EQE]) == pytest.approx(alone.external_quantum_efficiency, abs=1e-6)
            share = alone.destinations["guided"]
            assert float(here["destinations.guided"]) == pytest.approx(share, abs=1e-6)
            factor = alone.emitters[0].purcell_factor
            assert float(here["purcell_factor"]) == pytest.approx(factor, rel=1e-5)


def test_names_and_units_travel_with_the_numbers() -> None:
    yields = "emitters.green.quantum_yield"
    device = swept({HTL: {"values": [40]}, yields: {"values": [0.5, 1.0]}})
    found = optics.sweep(device)
    assert found[HTL].attrs["units"] == "nm"
    assert found[yields].attrs["units"] == "1"
    assert {one.attrs["units"] for one in found.data_vars.values()} == {"1"}
    assert len(found.data_vars) == 8  # the EQE and every destination
    assert found.attrs["case_sha256"] == device.sha256
    assert found.attrs["failed"] == ""
    assert found.attrs["energy_balance"] <= 1e-6


def test_linked_numbers_follow_through_other_links() -> None:
    linked = {ETL: HTL, "layers.CAT.thickness_nm": ETL}
    device = swept({HTL: {"values": [40, 80]}}, outcomes=[EQE], linked=linked)
    found = optics.sweep(device)
    paths = (HTL, ETL, "layers.CAT.thickness_nm")
    alone = optics.budget(device.replace_all(dict.fromkeys(paths, 80.0)))
    assert float(found[EQE][1]) == pytest.approx(alone.external_quantum_efficiency, abs=1e-6)
    assert found.coords[ETL].dims == (HTL,)
    assert found.coords["layers.CAT.thickness_nm"].to_numpy().tolist() == [40.0, 80.0]


@pytest.mark.parametrize(
    ("path", "values"),
    [
        ("emitters.green.horizontal_fraction", [0.5, 0.8]),
        ("emitters.green.order_parameter", [-0.2, 0.1]),
        ("emitters.green.zone.at", [0.2, 0.7]),
        ("emitters.green.quantum_yield", [0.2, 0.7]),
        ("materials.host.n", [1.7, 1.85]),
        ("layers.EML.thickness_nm", [20, 40]),
        ("drive.charge_balance", [0.5, 0.9]),
        ("substrate.thickness_mm", [0.1, 0.7]),
        ("wavelength.values_nm.1", [540, 550]),
    ],
)
def test_any_number_of_the_case_can_be_swept(path: str, values: list[float]) -> None:
    device = swept({path: {"values": values}}, outcomes=[EQE])
    found = optics.sweep(device)
    expected = [optics.budget(device.replace(path, v)).external_quantum_efficiency for v in values]
    assert found[EQE].to_numpy() == pytest.approx(expected, abs=1e-6)


def test_two_units_and_a_line() -> None:
    device = swept(AXES, document=two_emitters(), outcomes=[EQE, "emitters.red.purcell_factor"])
    found = optics.sweep(device)
    alone = optics.budget(device.replace_all({HTL: 40.0, ETL: 70.0}))
    here = found.sel({HTL: 40.0, ETL: 70.0})
    assert float(here[EQE]) == pytest.approx(alone.external_quantum_efficiency, abs=1e-6)
    factor = alone.emitters[1].purcell_factor
    assert float(here["emitters.red.purcell_factor"]) == pytest.approx(factor, rel=1e-5)


def test_what_is_undefined_is_nan_and_no_failure() -> None:
    document = coarse()
    del document["substrate"]
    device = swept(AXES, document=document, outcomes=["external_quantum_efficiency_matched"])
    found = optics.sweep(device)
    assert bool(found["external_quantum_efficiency_matched"].isnull().all())
    assert found.attrs["failed"] == ""


@pytest.mark.slow  # compiles the kernels of emission against angle
def test_emission_against_angle_is_that_of_single_points() -> None:
    names = ["bottom.current_efficiency_cd_A", "bottom.delta_uv_30"]
    device = swept({HTL: {"values": [40, 60]}}, outcomes=names)
    found = optics.sweep(device)
    alone = optics.angular(device.replace(HTL, 60.0), [30.0]).sides["bottom"]
    assert float(found[names[0]][1]) == pytest.approx(alone.current_efficiency_cd_A, rel=1e-12)
    assert float(found[names[1]][1]) == pytest.approx(alone.delta_uv[0], rel=1e-10)
    assert found[names[0]].attrs["units"] == "cd A-1"


def test_faults_of_the_table_come_all_at_once() -> None:
    said = faults_of(
        lambda: swept(
            {HTL: {"values": [40, 40]}, ETL: {"values": [-5, 30]}},
            outcomes=["destinations.giuded", "guided"],
            linked={ETL: HTL},
        )
    )
    assert said == [
        f'my.toml: sweep.linked."{ETL}": found {ETL}, which is swept itself; expected a path that '
        "is not itself swept",
        "my.toml: sweep.outcomes[0]: found destinations.giuded, no such outcome; expected the name "
        "of an outcome (did you mean destinations.guided?)",
        "my.toml: sweep.outcomes[1]: found guided, which may mean several; expected one of "
        "destinations.guided, emitters.green.destinations.guided, chain.device.guided",
        f'my.toml: sweep.axes."{HTL}": found 40 twice; expected each value once',
        f'my.toml: sweep.axes."{ETL}": found -5; expected a number from 0 to 1e+07',
    ]


@pytest.mark.parametrize(
    ("table", "part"),
    [
        ({"linked": {"layers.CAT.thickness_nm": "layers.ITO.thickness_nm"}}, "is not swept"),
        (
            {"linked": {"layers.CAT.thickness_nm": "layers.CAT.thickness_nm"}},
            "layers.CAT.thickness_nm follows layers.CAT.thickness_nm; expected links that end",
        ),
        ({"linked": {"layers.CTA.thickness_nm": HTL}}, "did you mean layers.CAT.thickness_nm?"),
        ({"outcomes": [HTL, EQE]}, "which is swept; expected an outcome that is no axis"),
    ],
)
def test_contradictions_are_faults(table: dict[str, Any], part: str) -> None:
    assert any(part in line for line in faults_of(lambda: swept(AXES, **table)))


@pytest.mark.parametrize(
    ("axis", "part"),
    [
        ({"start": 50, "stop": 40, "step": 5}, "above start = 50"),
        ({"start": 40, "stop": 50, "step": 3}, "a step that divides 10"),
        ({"start": 40, "stop": 50}, "either start, stop and step, or values"),
        ({"values": []}, "values"),
    ],
)
def test_grids_that_are_none_are_faults(axis: dict[str, Any], part: str) -> None:
    assert any(part in line for line in faults_of(lambda: swept({HTL: axis})))


def test_a_case_without_a_sweep_and_a_grid_beyond_all_memory() -> None:
    with pytest.raises(CaseError, match="sweep: found no such table"):
        optics.sweep(case(coarse()))
    huge = {"start": 1.0, "stop": 9001.0, "step": 1.0}
    assert any(
        "split the grid" in line for line in faults_of(lambda: swept({HTL: huge, ETL: huge}))
    )


@pytest.mark.parametrize("tolerance", [0.0, 0.2, float("nan")])
def test_a_tolerance_beyond_reason_is_refused(tolerance: float) -> None:
    with pytest.raises(ValueError, match="tolerance: found"):
        optics.sweep(swept(AXES), tolerance=tolerance)


def test_decimal_steps_are_free_of_dust() -> None:
    plan = plan_sweep(swept({HTL: {"start": 0.1, "stop": 0.7, "step": 0.1}}), 1e-6)
    assert plan.axes[0].values == (0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7)


def test_a_failing_point_is_named_and_loses_nothing_else() -> None:
    document = coarse()
    document["emitters"][0]["zone"] = {"shape": "point", "at_nm": 10.0, "from": "bottom"}
    eml, place = "layers.EML.thickness_nm", "emitters.green.zone.at_nm"
    axes = {eml: {"values": [40, 30, 20]}, place: {"values": [10, 25]}}
    device = swept(axes, document=document, outcomes=[EQE])
    found = optics.sweep(device)
    assert np.isnan(found[EQE].to_numpy()).tolist() == [[False] * 2, [False] * 2, [False, True]]
    (line,) = found.attrs["failed"].splitlines()
    assert line.startswith(
        "layers.EML.thickness_nm = 20, emitters.green.zone.at_nm = 25: my.toml: "
    )


class Stopper:
    """A progress function that interrupts when so many points are done."""

    def __init__(self, at: int) -> None:
        self.at = at
        self.seen: list[int] = []

    def __call__(self, done: int, total: int) -> None:
        self.seen.append(done)
        if done >= self.at:
            raise KeyboardInterrupt


ZONE = "emitters.green.zone.at"
# Point by point: too few points share their half stacks to gain from it.
LONG = {"materials.htl.n": {"start": 1.5, "stop": 1.8, "step": 0.05}, ZONE: {"values": [0.3, 0.5]}}
# Two blocks of seven points.
BLOCKS = {HTL: {"start": 30, "stop": 90, "step": 10}, "materials.etl.n": {"values": [1.7, 1.75]}}


@pytest.mark.parametrize("axes", [LONG, BLOCKS], ids=["point by point", "combined"])
def test_interrupted_and_resumed_equals_uninterrupted_to_the_last_bit(
    tmp_path: Path, axes: dict[str, Any]
) -> None:
    device = swept(axes)
    whole = optics.sweep(device)
    with pytest.raises(KeyboardInterrupt):
        optics.sweep(device, progress=Stopper(5), keep_in=tmp_path)
    assert len(list(tmp_path.iterdir())) == 1
    seen: list[int] = []
    resumed = optics.sweep(device, progress=lambda done, _: seen.append(done), keep_in=tmp_path)
    assert 5 <= seen[0] < 14
    assert seen[-1] == 14
    assert resumed.identical(whole)
    assert list(tmp_path.iterdir()) == []


def test_a_changed_case_or_tolerance_never_meets_kept_results(tmp_path: Path) -> None:
    changed = coarse()
    changed["materials"]["host"]["n"] += 1e-9
    for device, tolerance in (
        (swept(LONG), 1e-6), (swept(LONG), 1e-5), (swept(LONG, document=changed), 1e-6),
        (swept(LONG, outcomes=[EQE]), 1e-6),
    ):  # fmt: skip
        stop = Stopper(3)
        with pytest.raises(KeyboardInterrupt):
            optics.sweep(device, tolerance=tolerance, progress=stop, keep_in=tmp_path)
        assert stop.seen[0] == 0
    assert len(list(tmp_path.iterdir())) == 4


def test_a_disk_that_takes_nothing_costs_only_the_progress(tmp_path: Path) -> None:
    blocked = tmp_path / "no folder"
    blocked.write_text("")
    device = swept(LONG, outcomes=[EQE])
    found = optics.sweep(device, keep_in=blocked)
    assert "progress could not be kept" in found.attrs["warnings"]
    assert found[EQE].equals(optics.sweep(device)[EQE])


class Counting(Executor):
    """Runs everything at once, in this thread, and counts."""

    def __init__(self) -> None:
        self.tasks = 0

    def submit(self, function: Any, /, *arguments: Any, **named: Any) -> Future[Any]:
        self.tasks += 1
        future: Future[Any] = Future()
        try:
            future.set_result(function(*arguments, **named))
        except Exception as error:
            future.set_exception(error)
        return future


def test_any_executor_takes_the_work_and_stays_open() -> None:
    device = swept(LONG, outcomes=[EQE])
    own = optics.sweep(device)
    counting = Counting()
    assert optics.sweep(device, executor=counting).identical(own)
    assert counting.tasks > 0
    with ThreadPoolExecutor(1) as pool:
        assert optics.sweep(device, executor=pool).identical(own)
        assert pool.submit(int, "7").result() == 7


@pytest.mark.slow  # starts processes
def test_other_processes_give_the_same_bits() -> None:
    import multiprocessing

    device = swept(LONG, outcomes=[EQE])
    with ProcessPoolExecutor(2, mp_context=multiprocessing.get_context("spawn")) as pool:
        assert optics.sweep(device, executor=pool).identical(optics.sweep(device))


@pytest.mark.slow  # starts a cluster
@pytest.mark.filterwarnings("ignore")  # of the cluster's own libraries
def test_a_cluster_of_two_processes_gives_the_same_bits_even_if_one_dies() -> None:
    distributed = pytest.importorskip("distributed")
    from optics.study.executor import cluster_executor

    device = swept(LONG, outcomes=[EQE])
    own = optics.sweep(device)
    with distributed.LocalCluster(
        n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None
    ) as cluster:
        with cluster_executor(cluster.scheduler_address) as executor:
            assert optics.sweep(device, executor=executor).identical(own)
        killed = []

        def kill_one(done: int, _total: int) -> None:
            if done and not killed:
                killed.append(next(iter(cluster.workers.values())))
                killed[0].process.process._process.kill()

        with cluster_executor(cluster.scheduler_address) as executor:
            again = optics.sweep(device, executor=executor, progress=kill_one)
        assert killed
        assert again.identical(own)
