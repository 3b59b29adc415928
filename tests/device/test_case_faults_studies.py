"""Planted faults of the study tables, each with its exact line."""

from __future__ import annotations

from typing import Any

import pytest
from case_examples import changed, faults_of, full_document

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
