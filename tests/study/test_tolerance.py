"""Tolerance studies: statistics against closed forms, samples against single budgets, resuming."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.stats import norm
from sweep_devices import coarse
from tolerance_devices import EQE, ETL, GUIDED, HTL, SPREAD, YIELD, spread_out

import optics
from optics.device.errors import CaseError
from optics.study import tangent
from optics.study import tolerance as tolerance_module
from optics.study.evaluate import TRUST, Question, answers
from optics.study.tolerance_plan import plan_tolerance
from optics.study.tolerance_result import Tolerance

LIMITS = {EQE: {"min": 0.2}}


def planted(monkeypatch: pytest.MonkeyPatch, function: Any) -> None:
    """Let outcomes be functions of the varied numbers instead of physics."""

    def answers(question: Question, points: Any, **_: Any) -> Any:
        columns = [np.asarray(one, dtype=float) for one in function(points.T)]
        trust = np.full((len(points), len(TRUST)), 1e-9)
        return np.column_stack([*columns, trust]), {}

    def slopes(_: Question, nominal: Any) -> Any:
        # Exact for outcomes up to the second degree.
        ends = [
            [function(nominal + sign * step) for sign in (1, -1)] for step in np.eye(len(nominal))
        ]
        return None, np.array([np.subtract(*pair) / 2.0 for pair in ends]).T, None

    monkeypatch.setattr(tolerance_module, "answers", answers)
    monkeypatch.setattr(tangent, "values_and_gradient", slopes)


def said(found: Tolerance) -> list[str]:
    """Warnings of the study, without those of the case."""
    return [line for line in found.warnings if not line.startswith("emitters.")]


def contains(found: Any, truth: float) -> bool:
    return bool(found.low <= truth <= found.high)


def test_straight_lines_of_normal_numbers_have_closed_forms(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    device = spread_out(
        {HTL: {"sd": 2.0}, ETL: {"sd": 3.0}},
        samples=4096, seed=1, groups=[{"paths": [HTL, ETL], "correlation": 0.6}],
        outcomes=[EQE, GUIDED], limits={EQE: {"min": -0.1, "max": 0.2}, GUIDED: {"max": 0.3}},
    )  # fmt: skip
    htl, etl = (float(device.value(path)) for path in (HTL, ETL))
    planted(
        monkeypatch,
        lambda x: (0.02 * (x[0] - htl) + 0.01 * (x[1] - etl), 0.3 + 0.02 * (x[0] - htl)),
    )
    found = optics.tolerance(device)
    first, second = found.outcomes
    sd = np.sqrt(0.04**2 + 0.03**2 + 2 * 0.6 * 0.04 * 0.03)
    assert first.nominal == pytest.approx(0.0, abs=1e-15)
    assert contains(first.mean, 0.0)
    assert contains(first.sd, sd)
    assert first.sd.value == pytest.approx(sd, rel=0.01)
    for one, level in zip(first.quantiles, (0.05, 0.5, 0.95), strict=True):
        assert contains(one, norm.ppf(level) * sd)
    assert first.linear is not None
    assert first.linear.sd == pytest.approx(sd, rel=1e-9)
    assert first.linear.derivatives == pytest.approx({HTL: 0.02, ETL: 0.01}, rel=1e-9)
    assert first.linear.failures == second.linear.failures == ()
    truth = norm.cdf(0.2 / sd) - norm.cdf(-0.1 / sd)
    assert contains(found.yields[0].share, truth)
    assert found.yields[0].linear == pytest.approx(found.yields[0].share.value, abs=1e-3)
    assert found.yields[1].share.value == pytest.approx(0.5, abs=0.01)
    assert found.joint_yield is not None
    both = (found.data[EQE] >= -0.1) & (found.data[EQE] <= 0.2) & (found.data[GUIDED] <= 0.3)
    assert found.joint_yield.share.value == float(both.mean())
    assert found.factors == ((0, 1),)
    assert said(found) == []


def test_at_an_extremum_the_linear_prediction_fails_and_says_so(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    device = spread_out({HTL: {"sd": 2.0}}, samples=2048, limits={EQE: {"min": 0.29}})
    htl = float(device.value(HTL))
    planted(monkeypatch, lambda x: (0.3 - 0.005 * ((x[0] - htl) / 2.0) ** 2,))
    found = optics.tolerance(device)
    (one,) = found.outcomes
    assert contains(one.mean, 0.295)
    assert contains(one.sd, 0.005 * np.sqrt(2.0))
    assert contains(found.yields[0].share, norm.cdf(np.sqrt(2)) - norm.cdf(-np.sqrt(2)))
    assert one.linear is not None
    assert one.linear.sd == pytest.approx(0.0, abs=1e-12)
    assert found.yields[0].linear == 1.0
    mine, joint = said(found)
    assert mine.startswith(f"the linear prediction fails for {EQE}: the samples give mean 0.29")
    assert "standard deviation 0.00" in mine
    assert "yield 84" in mine
    assert joint.startswith("the linear prediction fails for all limits together: ")
    told = found.to_dict()
    assert told["outcomes"][EQE]["linear"]["holds"] is False
    assert told["yield"]["joint"]["linear_holds"] is False


def test_samples_without_value_count_as_outside(monkeypatch: pytest.MonkeyPatch) -> None:
    device = spread_out({HTL: {"sd": 2.0}}, samples=512, limits={EQE: {"min": 0.1}})
    htl = float(device.value(HTL))
    planted(monkeypatch, lambda x: (np.where(x[0] > htl + 3.0, np.nan, 0.2 + 0.001 * x[0]),))
    found = optics.tolerance(device)
    lost = int((found.data[HTL] > htl + 3.0).sum())
    assert found.outcomes[0].undefined == lost > 20
    assert found.yields[0].share.value == 1.0 - lost / 512
    assert found.outcomes[0].largest is not None


def test_every_sample_is_the_budget_of_its_case_and_linked_numbers_follow() -> None:
    device = spread_out(
        {HTL: {"sd": 2.0}, YIELD: {"half_width": 0.03}},
        samples=20, seed=5, outcomes=[EQE, "purcell_factor"], linked={ETL: HTL},
    )  # fmt: skip
    found = optics.tolerance(device)
    for sample in (0, 7, 19):
        here = found.data.isel(sample=sample)
        values = {path: float(here[path]) for path in (HTL, YIELD, ETL)}
        assert values[HTL] == values[ETL]
        alone = optics.budget(device.replace_all(values))
        assert float(here[EQE]) == pytest.approx(alone.external_quantum_efficiency, abs=1e-12)
        factor = alone.emitters[0].purcell_factor
        assert float(here["purcell_factor"]) == pytest.approx(factor, rel=1e-12)
    nominal = optics.budget(device.replace_all({ETL: device.value(HTL)}))
    assert found.outcomes[0].nominal == pytest.approx(nominal.external_quantum_efficiency)
    assert found.linked == {ETL: HTL}
    assert found.data[ETL].attrs["long_name"] == f"follows {HTL}"
    assert found.to_frame().shape == (20, 7)
    assert found.accuracy["energy_balance"] <= 1e-6


def test_derivatives_and_influences_of_a_device_agree() -> None:
    """Within a small spread every outcome is a straight line."""
    small = {HTL: {"sd": 0.02}, ETL: {"sd": 0.02}, YIELD: {"half_width": 1e-4}}
    found = optics.tolerance(spread_out(small, samples=64, outcomes=[EQE, GUIDED]))
    for one in found.outcomes:
        assert one.linear is not None
        assert one.influence is not None
        assert one.linear.failures == ()
        assert one.sd.value == pytest.approx(one.linear.sd, rel=0.1)
        assert one.influence.unexplained < 1e-3
        whole = [part.value for part in one.influence.total]
        assert whole == pytest.approx(list(one.linear.shares), abs=0.05)


def test_derivatives_are_exact_or_differences_and_agree() -> None:
    """What changes the wavelengths has no exact derivative, nor has one that it follows."""
    wave = "wavelength.values_nm.1"
    device = spread_out({HTL: {"sd": 2.0}, wave: {"sd": 1.0}}, samples=2, outcomes=[EQE, GUIDED])
    question = plan_tolerance(device, 1e-9).question
    slopes = tangent.slopes_of(question)
    assert (slopes.paths, slopes.outcomes, slopes.by_differences) == ((0,), (0, 1), (1,))
    found = optics.tolerance(device, tolerance=1e-9)
    assert found.derivatives == f"exact, for {wave} by differences of fourth order"
    nominal, sd = np.array([device.value(HTL), 545.0]), np.array([2.0, 1.0])
    every = tangent.Slopes(question, (), ())
    assert every.by_differences == (0, 1)
    values, _ = answers(question, every.stencil(nominal, sd))
    stepped = every.gradient(nominal, sd, values[:, :2])
    for row, one in zip(stepped, found.outcomes, strict=True):
        assert one.linear is not None
        assert list(one.linear.derivatives.values()) == pytest.approx(row.tolist(), rel=1e-5)
    assert tangent.slopes_of(replace(question, followers=((wave, 0),), paths=(HTL,))).paths == ()


def test_linked_numbers_move_with_their_leader_in_the_derivatives() -> None:
    both = spread_out({HTL: {"sd": 2.0}}, samples=2, linked={ETL: HTL})
    apart = spread_out({HTL: {"sd": 2.0}, ETL: {"sd": 1.0}}, samples=2)
    apart = apart.replace(ETL, apart.value(HTL))
    slopes = [optics.tolerance(device).outcomes[0].linear for device in (both, apart)]
    assert slopes[0] is not None
    assert slopes[1] is not None
    total = sum(slopes[1].derivatives.values())
    assert slopes[0].derivatives[HTL] == pytest.approx(total, rel=1e-9)


def faults_of(spread: dict[str, Any] | None = None, **table: Any) -> list[str]:
    with pytest.raises(CaseError) as caught:
        optics.tolerance(spread_out(spread, **table))
    return [str(fault) for fault in caught.value.faults]


def test_faults_of_the_table_come_all_at_once() -> None:
    said = faults_of(
        {
            **SPREAD,
            "materials.host.k": {"relative_sd": 0.1},
            "layers.CAT.thickness_nm": {"sd": 900},
        },
        limits={"destinations.giuded": {"max": 0.1}, "guided": {"max": 0.1}},
        groups=[{"paths": [HTL, ETL, YIELD], "correlation": -0.9}],
        linked={ETL: HTL},
    )
    assert said == [
        f'my.toml: tolerance.linked."{ETL}": found {ETL}, which is varied itself; expected a path '
        "that is not itself varied",
        'my.toml: tolerance.limits."destinations.giuded": found destinations.giuded, no such '
        "outcome; expected the name of an outcome (did you mean destinations.guided?)",
        'my.toml: tolerance.limits."guided": found guided, which may mean several; expected one of '
        "destinations.guided, emitters.green.destinations.guided, chain.device.guided",
        'my.toml: tolerance.spread."materials.host.k".relative_sd: found no spread, the nominal '
        "value is 0; expected sd",
        'my.toml: tolerance.spread."layers.CAT.thickness_nm": found -800 at one standard deviation '
        "from 100; expected a number from 0 to 1e+07",
        "my.toml: tolerance.groups[0].correlation: found -0.9; expected -0.492334 to 0.969799 for "
        "3 numbers, normal and uniform ones",
    ]


@pytest.mark.parametrize(
    ("spread", "table", "part"),
    [
        ({HTL: {"sd": 0}}, {}, "found 0; expected a number above 0"),
        ({HTL: {"half_width": 0.0}}, {}, "found 0; expected a number above 0"),
        ({"layers.HLT.thickness_nm": {"sd": 1}}, {}, "did you mean layers.HTL.thickness_nm?"),
        (None, {"limits": {HTL: {"max": 50}}}, "found layers.HTL.thickness_nm, which is varied"),
        (None, {"samples": 100_000_000}, "found 100000000 of 4 numbers; expected at most"),
        (
            None,
            {"groups": [{"paths": [HTL, ETL], "correlation": 0.1},
                        {"paths": [ETL, YIELD], "correlation": 0.1}]},
            'found "layers.ETL.thickness_nm", which is in another group; expected each path in one',
        ),
        ({YIELD: {"half_width": 0.2}}, {}, "1.05 at one half width from 0.85; expected"),
    ],
)  # fmt: skip
def test_what_cannot_be_is_a_fault(
    spread: dict[str, Any] | None, table: dict[str, Any], part: str
) -> None:
    assert any(part in line for line in faults_of(spread, **table)), faults_of(spread, **table)


def test_arguments_beyond_reason_are_refused() -> None:
    device = spread_out()
    for wrong in ({"samples": 0}, {"seed": -1}, {"tolerance": 0.2}, {"tolerance": float("nan")}):
        with pytest.raises(ValueError, match="found"):
            optics.tolerance(device, **wrong)  # type: ignore[arg-type]
    from devices import case

    with pytest.raises(CaseError, match="tolerance: found no such table"):
        optics.tolerance(case(coarse()))


def test_impossible_samples_fail_by_name_and_lose_nothing_else() -> None:
    """A normal film so thin that one sample in forty would have no thickness."""
    document = coarse()
    next(film for film in document["layers"] if film["name"] == "HTL")["thickness_nm"] = 4.0
    device = spread_out(
        {HTL: {"sd": 2.0}}, document=document, samples=128, limits={EQE: {"min": 0.0}}
    )
    found = optics.tolerance(device)
    negative = found.data[HTL].to_numpy() < 0.0
    assert 1 <= negative.sum() <= 8
    assert np.isnan(found.data[EQE].to_numpy()).tolist() == negative.tolist()
    assert len(found.failed) == negative.sum()
    first = int(np.flatnonzero(negative)[0])
    assert found.failed[0].startswith(f"sample {first} ({HTL} = -")
    assert "expected a number from 0" in found.failed[0]
    assert found.yields[0].share.value == 1.0 - negative.mean()
    assert found.outcomes[0].undefined == 0
    lost = f"{negative.sum()} of 128 samples failed; they count as outside the limits"
    assert any(line.startswith(lost) for line in said(found))


class Stopper:
    """A progress function that interrupts when so many points are done."""

    def __init__(self, at: int) -> None:
        self.at = at

    def __call__(self, done: int, total: int) -> None:
        if done >= self.at:
            raise KeyboardInterrupt


def same(one: Tolerance, other: Tolerance) -> bool:
    return one.data.identical(other.data) and one.to_dict() == other.to_dict()


def test_interrupted_and_resumed_equals_uninterrupted_to_the_last_bit(tmp_path: Path) -> None:
    device = spread_out(samples=24, limits=LIMITS)
    whole = optics.tolerance(device)
    with pytest.raises(KeyboardInterrupt):
        optics.tolerance(device, progress=Stopper(9), keep_in=tmp_path)
    assert len(list(tmp_path.iterdir())) == 1
    for other in ({"seed": 9}, {"samples": 23}, {"tolerance": 1e-5}):  # never meet what is kept
        seen: list[int] = []
        optics.tolerance(
            device, progress=lambda done, _, seen=seen: seen.append(done), keep_in=tmp_path, **other
        )
        assert seen[0] == 0
    seen = []
    resumed = optics.tolerance(device, progress=lambda done, _: seen.append(done), keep_in=tmp_path)
    assert seen[0] >= 9
    assert same(resumed, whole)
    assert list(tmp_path.iterdir()) == []


def test_seeds_are_told_and_change_the_samples() -> None:
    device = spread_out(samples=4, seed=3)
    found = optics.tolerance(device)
    assert (found.seed, found.samples, found.to_dict()["seed"]) == (3, 4, 3)
    other = optics.tolerance(device, seed=4, samples=5)
    assert (other.seed, other.samples) == (4, 5)
    assert float(other.data[HTL][0]) != float(found.data[HTL][0])
    alone = optics.tolerance(device, samples=1)
    assert alone.outcomes[0].mean.low is None
    assert alone.outcomes[0].sd.value is None
    assert alone.outcomes[0].influence is None


def test_any_executor_gives_the_same_bits() -> None:
    device = spread_out(samples=12, limits=LIMITS)
    with ThreadPoolExecutor(1) as pool:
        assert same(optics.tolerance(device, executor=pool), optics.tolerance(device))


@pytest.mark.slow  # starts a cluster
@pytest.mark.filterwarnings("ignore")  # of the cluster's own libraries
def test_a_cluster_of_two_processes_gives_the_same_bits() -> None:
    distributed = pytest.importorskip("distributed")
    from optics.study.executor import cluster_executor

    device = spread_out(samples=40, limits=LIMITS)
    own = optics.tolerance(device)
    with (
        distributed.LocalCluster(
            n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None
        ) as cluster,
        cluster_executor(cluster.scheduler_address) as executor,
    ):
        assert same(optics.tolerance(device, executor=executor), own)
