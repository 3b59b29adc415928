"""Errors planted in the engine itself: the check must see each, in the right kind of row.

Compiled kernels cannot be changed, so a process without compilation does it, before the kernels
that call the changed helper are imported.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
import textwrap
from pathlib import Path

import pytest

SCRIPT = """
import json, sys
import optics.kernels.{module} as module
real = module.{name}
def planted(*given):
{body}
if {plant}:
    module.{name} = planted
from optics.device.case import case_from_dict
from optics.study.check import check
document = json.loads(sys.stdin.read())
found = check(case_from_dict(document), angles_deg=(0.0, 50.0))
print(json.dumps([[r.kind, r.quantity, r.polarization] for r in found.rows if r.result == "fail"]))
"""

DEVICE = {
    "title": "invented",
    "wavelength": {"values_nm": [530]},
    "materials": {
        "host": {"n": 1.75},
        "lossy": {"n": 1.9, "k": 0.02},
        "silver-like": {"n": 0.1, "k": 3.6},
        "glass": {"n": 1.52},
    },
    "substrate": {"material": "glass", "thickness_mm": 0.7},
    "layers": [
        {"name": "anode", "material": "lossy", "thickness_nm": 90},
        {"name": "EML", "material": "host", "thickness_nm": 80},
        {"name": "cathode", "material": "silver-like", "thickness_nm": 60},
    ],
    "emitters": [
        {
            "name": "green",
            "layer": "EML",
            "spectrum": {"peak_nm": 530, "fwhm_nm": 40},
            "zone": {"shape": "point", "at": 0.3},
            "quantum_yield": 0.9,
        }
    ],
}

# module, helper, body of the changed helper
NOTHING = ("dipole", "outgoing_factor", "return real(*given)")
FACTOR = ("dipole", "outgoing_factor", "return 1.001 * real(*given)")
SIGN = (
    "dipole",
    "channel",
    "pol, sign = real(*given)\nreturn pol, (-sign if given[0] == 1 else sign)",
)
FILM = (
    "field",
    "film_coefficients",
    "real(*given)\ngiven[6][:] = 0.0\ngiven[7][:] = 0.0",
)
FACE = ("exits", "face_reflectances", "s, p = real(*given)\nreturn 0.999 * s, 0.999 * p")
PASS = ("exits", "once_through", "return (1.0 - 1e-5) * real(*given)")
LINE = ("geometry", "outer_light_line", "return real(*given) - 0.002")
BRANCH = ("halfstack", "sqrt_upper", "root = real(*given)\nreturn root * (1.0 + 1e-6)")


def failures(plant: tuple[str, str, str], *, plant_it: bool = True) -> set[tuple[str, str, str]]:
    module, name, body = plant
    script = SCRIPT.format(
        module=module, name=name, body=textwrap.indent(body, "    "), plant=plant_it
    )
    done = subprocess.run(
        [sys.executable, "-c", script],
        input=json.dumps(DEVICE),
        env={**os.environ, "NUMBA_DISABLE_JIT": "1"},
        cwd=Path(__file__).parents[2],
        capture_output=True,
        text=True,
        check=True,
    )
    return {
        (kind, quantity, polarization) for kind, quantity, polarization in json.loads(done.stdout)
    }


def kinds(found: set[tuple[str, str, str]]) -> set[str]:
    return {kind for kind, _, _ in found}


def test_without_a_planted_error_nothing_fails() -> None:
    assert failures(NOTHING) == set()


def test_a_factor_in_the_emitted_power_shows_in_the_far_field_and_in_what_leaves() -> None:
    found = failures(FACTOR)
    assert {"far field", "power", "energy balance"} <= kinds(found)
    assert "light from outside" not in kinds(found)
    assert ("power", "air_bottom", None) in found
    assert ("power", "guided", None) not in found


@pytest.mark.slow
def test_a_wrong_sign_shows_in_p_alone() -> None:
    found = failures(SIGN)
    assert ("far field", "power per solid angle", "p") in found
    assert ("far field", "power per solid angle", "s") not in found
    assert ("power", "dissipated", None) in found


def test_a_forgotten_film_shows_in_absorption() -> None:
    found = failures(FILM)
    assert ("power", "absorbed", None) in found
    assert ("light from outside", "absorptance of the films", "s") in found
    assert ("light from outside", "absorptance of the films", "p") in found
    assert ("light from outside", "reflectance", "s") not in found
    assert "energy balance" in kinds(found)
    assert "far field" not in kinds(found)


@pytest.mark.slow
def test_a_wrong_slab_face_shows_in_what_leaves() -> None:
    found = failures(FACE)
    assert ("power", "air_bottom", None) in found
    assert "far field" not in kinds(found)


def test_a_slab_that_swallows_too_much_shows_in_what_a_matched_exit_would_give() -> None:
    found = failures(PASS)
    assert ("power", "matched_bottom", None) in found
    assert ("power", "matched_top", None) not in found


def test_a_shifted_light_line_shows_in_what_is_trapped() -> None:
    found = failures(LINE)
    assert ("power", "substrate", None) in found
    assert ("power", "surface_plasmon", None) in found or ("power", "guided", None) in found
    assert ("power", "dissipated", None) not in found


@pytest.mark.slow
def test_a_slightly_wrong_wavevector_shows_everywhere() -> None:
    found = failures(BRANCH)
    assert {"far field", "light from outside"} <= kinds(found)
