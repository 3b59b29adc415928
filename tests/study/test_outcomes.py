"""Names of outcomes: full, short, ambiguous, misspelled, and their values."""

from __future__ import annotations

from dataclasses import fields

import pytest
from devices import case
from sweep_devices import coarse, two_emitters

import optics
from optics.device import outcome_names
from optics.device.errors import CaseError
from optics.device.outcome_names import SIDE_CURVES, SIDE_NUMBERS
from optics.outcome.efficiency import DESTINATIONS
from optics.outcome.side import SideAngular
from optics.study.outcomes import angles_needed, default_outcomes, find_outcomes, read_outcome


def keys_of(name: str, tandem: bool = False) -> tuple[str, ...]:
    (found,) = find_outcomes(case(two_emitters() if tandem else coarse()), {"here": name})
    return found.keys


def fault_of(name: str, tandem: bool = False) -> str:
    with pytest.raises(CaseError) as caught:
        keys_of(name, tandem)
    return str(caught.value)


def test_a_bare_name_is_the_devices_own_value() -> None:
    assert keys_of("external_quantum_efficiency", tandem=True) == ("external_quantum_efficiency",)
    assert keys_of("outcoupling_efficiency", tandem=True) == ("outcoupling_efficiency",)


def test_a_bare_name_that_one_emitter_has_will_do() -> None:
    assert keys_of("purcell_factor") == ("emitters", "green", "purcell_factor")
    assert keys_of("green.purcell_factor", tandem=True) == ("emitters", "green", "purcell_factor")


def test_an_ambiguous_name_lists_what_it_may_mean() -> None:
    said = fault_of("purcell_factor", tandem=True)
    assert said == (
        "my.toml: here: found purcell_factor, which may mean several; expected one of "
        "emitters.green.purcell_factor, emitters.red.purcell_factor, "
        "emitters.upper-green.purcell_factor"
    )
    assert "one of bottom.x_normal, top.x_normal" in fault_of("x_normal")
    assert "one of bottom.delta_uv_60, top.delta_uv_60" in fault_of("delta_uv_60")
    assert "destinations.guided, emitters.green.destinations.guided" in fault_of("guided")


@pytest.mark.parametrize(
    ("name", "near"),
    [
        ("external_quantum_eficiency", "external_quantum_efficiency"),
        ("destinations.giuded", "destinations.guided"),
        ("emitters.gren.purcell_factor", "emitters.green.purcell_factor"),
        ("bottom.delta_vu_60", "bottom.delta_uv_60"),
        ("bottom.luminance_normal_cd_m", "bottom.luminance_normal_cd_m2"),
    ],
)
def test_an_unknown_name_gets_the_nearest_one(name: str, near: str) -> None:
    said = fault_of(name)
    assert "no such outcome" in said
    assert said.endswith(f"(did you mean {near}?)")


def test_curves_need_an_angle_within_the_half_space() -> None:
    assert "such as bottom.delta_uv_60 for 60 degrees" in fault_of("bottom.delta_uv")
    assert "an angle from 0 to 90 degrees" in fault_of("bottom.delta_uv_95")


def test_all_faults_come_at_once() -> None:
    with pytest.raises(CaseError) as caught:
        find_outcomes(case(coarse()), {"a": "nonsense", "b": "x_normal", "c": "bottom.delta_uv"})
    assert [fault.key for fault in caught.value.faults] == ["a", "b", "c"]
    with pytest.raises(CaseError, match="purcell_factor again; expected each outcome once"):
        find_outcomes(case(coarse()), {"a": "purcell_factor", "b": "purcell_factor"})


def test_units_and_needs() -> None:
    names = [
        "destinations.guided",
        "bottom.current_efficiency_cd_A",
        "bottom.relative_luminance_45",
    ]
    found = find_outcomes(case(coarse()), {name: name for name in names})
    assert [one.units for one in found] == ["1", "cd A-1", "1"]
    assert [one.needs_angular for one in found] == [False, True, True]
    assert angles_needed(found) == (45.0,)


def test_values_are_those_of_the_results() -> None:
    device = case(two_emitters())
    seen = optics.angular(device, [0.0, 37.5])
    told = seen.budget.to_dict()
    expected = {
        "external_quantum_efficiency_matched": told["external_quantum_efficiency_matched"],
        "destinations.absorbed": told["destinations"]["absorbed"],
        "accuracy.energy_balance": told["accuracy"]["energy_balance"],
        "emitters.red.destinations.guided": told["emitters"][1]["destinations"]["guided"],
        "emitters.red.external_quantum_efficiency": (
            told["emitters"][1]["external_quantum_efficiency"]
        ),
        "chain.upper.nonradiative": told["chain"][1]["nonradiative"],
        "bottom.current_efficiency_cd_A": seen.sides["bottom"].current_efficiency_cd_A,
        "bottom.luminance_normal_cd_m2": None,  # no current is stated
        "bottom.relative_luminance_37.5": seen.sides["bottom"].relative_luminance[1],
        "bottom.luminance_cd_m2_37.5": None,
    }
    found = find_outcomes(device, {name: name for name in expected})
    assert {one.name: read_outcome(one, seen.budget, seen.sides) for one in found} == expected


def test_by_default_the_eqe_and_where_all_light_goes() -> None:
    device = case(coarse())
    outcome = optics.budget(device)
    found = find_outcomes(device, {name: name for name in default_outcomes()})
    eqe, *shares = (read_outcome(one, outcome) for one in found)
    assert eqe == outcome.external_quantum_efficiency
    assert sum(share or 0.0 for share in shares) == pytest.approx(1.0, abs=1e-6)


def test_names_are_those_of_the_results() -> None:
    """The names stand with the case, so that it can tell wrong ones; the results are elsewhere."""
    kinds = {one.name: str(one.type).split(" ")[0] for one in fields(SideAngular)}
    assert [name for name, kind in kinds.items() if kind == "Curve"] == list(SIDE_CURVES)
    assert [name for name, kind in kinds.items() if kind == "float"] == list(SIDE_NUMBERS[:-1])
    assert hasattr(SideAngular, SIDE_NUMBERS[-1])
    assert list(DESTINATIONS) == list(outcome_names.DESTINATIONS)
