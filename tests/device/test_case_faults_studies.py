"""Planted faults of the study tables, each with its exact line."""

from __future__ import annotations

from typing import Any

import pytest
from case_examples import changed, faults_of, full_document

import optics
from optics.device.case import case_from_dict
from optics.device.errors import CaseError

# as in the tests of single faults
STUDY_FAULTS: list[tuple[str, Any, str]] = [
    (
        "sweep/axes",
        {"layers.HTL.thickness": {"values": [1]}},
        'sweep.axes."layers.HTL.thickness": found "layers.HTL.thickness", no such address; '
        "expected the address of a value, such as layers.NAME.thickness_nm (did you mean "
        "layers.HTL.thickness_nm?)",
    ),
    (
        # the nearest address is layers.HTL.material, a text; a study needs a number
        "sweep/axes",
        {"layers.HTL.materials": {"values": [1]}},
        'sweep.axes."layers.HTL.materials": found "layers.HTL.materials", no such address; '
        "expected the address of a value, such as layers.NAME.thickness_nm (did you mean "
        "layers.HTL.thickness_nm?)",
    ),
    (
        "sweep/axes",
        {"layers.HTL.material": {"values": [1]}},
        'sweep.axes."layers.HTL.material": found "layers.HTL.material", "doped"; expected the '
        "address of a number",
    ),
    (
        "sweep/axes",
        {"layers.HTL.thickness_nm": {"start": 20, "stop": 120, "step": 3}},
        'sweep.axes."layers.HTL.thickness_nm".step: found 3; expected a step that divides 100',
    ),
    (
        "sweep/axes",
        {"layers.HTL.thickness_nm": {"start": 20, "stop": 120}},
        'sweep.axes."layers.HTL.thickness_nm": found start, stop; expected either start, stop and '
        "step, or values",
    ),
    (
        "sweep/axes",
        {"layers.HTL.thickness_nm": {"values": [1], "strt": 1}},
        'sweep.axes."layers.HTL.thickness_nm".strt: found unknown key with 1; expected one of '
        "start, stop, step, values (did you mean start?)",
    ),
    (
        "sweep/axes",
        {
            "layers.HTL.thickness_nm": {"values": [1]},
            "emitters.green.horizontal_fraction": {"values": [0.5]},
            "emitters.green.order_parameter": {"values": [0.5]},
        },
        'sweep.axes."emitters.green.order_parameter": found "emitters.green.order_parameter" '
        'beside "emitters.green.horizontal_fraction"; expected one orientation number of an '
        "emitter in one study",
    ),
    (
        "optimize/minimize",
        "destinations.guided",
        "optimize: found maximize and minimize; expected exactly one of maximize, minimize, "
        "objectives",
    ),
    (
        "optimize/variables/layers.HTL.thickness_nm/max",
        20,
        'optimize.variables."layers.HTL.thickness_nm".max: found 20; expected above min = 20',
    ),
    (
        "optimize/constraints/bottom.delta_uv_60",
        {},
        'optimize.constraints."bottom.delta_uv_60": found nothing; expected min, max or both',
    ),
    (
        "tolerance/spread/layers.ETL.thickness_nm/sd",
        1,
        'tolerance.spread."layers.ETL.thickness_nm": found sd and half_width; expected exactly one '
        "of relative_sd, sd, half_width",
    ),
    (
        "tolerance/groups/0/paths/1",
        "layers.ITO.thickness_nm",
        'tolerance.groups[0].paths[1]: found "layers.ITO.thickness_nm" without spread; expected a '
        "path of tolerance.spread",
    ),
    (
        "tolerance/groups/0/correlation",
        1.5,
        "tolerance.groups[0].correlation: found 1.5; expected a number from -1 to 1",
    ),
    ("tolerance/samples", 10.5, "tolerance.samples: found 10.5; expected a whole number"),
]


@pytest.mark.parametrize(("path", "value", "line"), STUDY_FAULTS)
def test_one_planted_fault_in_a_study_gives_one_line(path: str, value: Any, line: str) -> None:
    assert faults_of(changed(path, value, full_document())) == [f"my.toml: {line}"]


HTL, ETL, ITO = (f"layers.{name}.thickness_nm" for name in ("HTL", "ETL", "ITO"))

# Each: a study with faults of its shape, its links and its outcomes, and the lines.
SEVERAL: list[tuple[str, Any, list[str]]] = [
    (
        "sweep",
        {
            "axes": {HTL: {"start": 20, "stop": 120, "step": 3}},
            "linked": {HTL: ETL, ETL: ITO},
            "outcomes": ["destinations.giuded", 7, "x_normal", "bottom.delta_uv", HTL],
        },
        [
            "sweep.outcomes[1]: found 7; expected text in quotes",
            f'sweep.axes."{HTL}".step: found 3; expected a step that divides 100',
            f'sweep.linked."{HTL}": found {HTL}, which is swept itself; expected a path that is '
            "not "
            "itself swept",
            f'sweep.linked."{ETL}": found {ITO}, which is not swept; expected a path of '
            "sweep.axes: "
            f"{HTL}",
            f"sweep.outcomes[4]: found {HTL}, which is swept; expected an outcome that is no axis",
            "sweep.outcomes[0]: found destinations.giuded, no such outcome; expected the name of "
            "an "
            "outcome (did you mean destinations.guided?)",
            "sweep.outcomes[2]: found x_normal, which may mean several; expected one of "
            "bottom.x_normal, top.x_normal",
            "sweep.outcomes[3]: found bottom.delta_uv without an angle; expected such as "
            "bottom.delta_uv_60 for 60 degrees",
        ],
    ),
    (
        "optimize",
        {
            "objectives": [{"maximize": "external_quantum_eficiency"}, {"minimise": "x_normal"}],
            "variables": {HTL: {"min": 20, "max": 20}},
            "constraints": {"top.delta_uv_95": {"max": 0.1}, "bottom.x_normal": {}},
            "linked": {ETL: ITO, ITO: ETL},
        },
        [
            'optimize.objectives[1].minimise: found unknown key with "x_normal"; expected one of '
            "maximize, minimize (did you mean minimize?)",
            f'optimize.variables."{HTL}".max: found 20; expected above min = 20',
            'optimize.constraints."bottom.x_normal": found nothing; expected min, max or both',
            f'optimize.linked."{ETL}": found {ETL} follows {ITO} follows {ETL}; expected links '
            "that "
            "end at a path of optimize.variables",
            f'optimize.linked."{ITO}": found {ITO} follows {ETL} follows {ITO}; expected links '
            "that "
            "end at a path of optimize.variables",
            "optimize.objectives[0].maximize: found external_quantum_eficiency, no such outcome; "
            "expected the name of an outcome (did you mean external_quantum_efficiency?)",
            'optimize.constraints."top.delta_uv_95": found top.delta_uv_95, 95 degrees; expected '
            "an "
            "angle from 0 to 90 degrees",
        ],
    ),
    (
        "tolerance",
        {
            "samples": 0,
            "spread": {HTL: {"sd": 1}},
            "outcomes": ["nonsense_at_all", "outcoupling_efficiency", "outcoupling_efficiency"],
            "limits": {"chain.device.dark_exciton": {"max": 0.1}},
            "linked": {ETL: ITO},
        },
        [
            "tolerance.samples: found 0; expected a number of at least 1",
            f'tolerance.linked."{ETL}": found {ITO}, which is not varied; expected a path of '
            f"tolerance.spread: {HTL}",
            "tolerance.outcomes[0]: found nonsense_at_all, no such outcome; expected the name of "
            "an "
            "outcome",
            "tolerance.outcomes[2]: found outcoupling_efficiency again; expected each outcome once",
            'tolerance.limits."chain.device.dark_exciton": found chain.device.dark_exciton, no '
            "such "
            "outcome; expected the name of an outcome (did you mean chain.device.dark_excitons?)",
        ],
    ),
]


@pytest.mark.parametrize(("study", "table", "lines"), SEVERAL)
def test_faults_of_shape_links_and_outcomes_come_at_once(
    study: str, table: Any, lines: list[str]
) -> None:
    assert faults_of(changed(study, table, full_document())) == [f"my.toml: {one}" for one in lines]


def test_a_fault_of_the_device_does_not_hide_those_of_its_studies() -> None:
    document = changed("sweep/outcomes", ["guidd"], full_document())
    document = changed("layers/1/thickness_nm", -5, document)
    assert [line.split(":")[1].strip() for line in faults_of(document)] == [
        "layers.HTL.thickness_nm",
        "sweep.outcomes[0]",
    ]


def test_what_hangs_on_another_fault_is_not_told() -> None:
    """A misspelled axis may be the one that a link follows, a nameless emitter the one named."""
    axes = {"layers.HTX.thickness_nm": {"values": [1]}}
    document = changed("sweep", {"axes": axes, "linked": {ETL: HTL}}, full_document())
    assert [line.split(":")[1] for line in faults_of(document)] == [
        ' sweep.axes."layers.HTX.thickness_nm"'
    ]
    outcomes = ["emitters.grn.purcell_factor", "purcell_factor", "chain.devise.guided", "x"]
    document = changed("sweep/outcomes", outcomes, full_document())
    document["emitters"][0]["name"] = 7
    told = [line for line in faults_of(document) if "sweep.outcomes" in line]
    assert [line.split(":")[1] for line in told] == [" sweep.outcomes[3]"]


def test_other_commands_do_not_ask_for_a_study_s_names() -> None:
    case = case_from_dict(changed("sweep/outcomes", ["guidd"], full_document()))
    with pytest.raises(CaseError, match="guidd"):
        optics.sweep(case)
