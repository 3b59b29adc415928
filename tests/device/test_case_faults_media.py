"""Planted faults of wavelengths, materials, slabs and sides, each with its exact line."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from case_examples import changed, faults_of

KINDS = (
    "exactly one kind of material: n, table, n_ordinary with n_extraordinary, ordinary with "
    "extraordinary, cauchy_nm, sellmeier, lorentz_drude or mix"
)


# path of the change, new value (None removes), the one line that has to come of it
ONE_FAULT: list[tuple[str, Any, str]] = [
    ("title", None, "title: found nothing; expected a title in quotes"),
    ("title", 5, "title: found 5; expected text in quotes"),
    (
        "wavelenght",
        {"values_nm": [500]},
        "wavelenght: found unknown key with a table with values_nm; expected one of title, "
        "wavelength, materials, substrate, cover, surroundings, sides, layers, emitters, drive, "
        "sweep, optimize, tolerance (did you mean wavelength?)",
    ),
    # wavelengths
    (
        "wavelength/step_nm",
        7,
        "wavelength.step_nm: found 7; expected a step that divides the range of 250 nm into whole "
        "steps",
    ),
    (
        "wavelength/stop_nm",
        450,
        "wavelength.stop_nm: found 450; expected a wavelength above start_nm = 450; a single one "
        "goes into values_nm",
    ),
    ("wavelength/step_nm", 0, "wavelength.step_nm: found 0; expected a number above 0"),
    (
        "wavelength/step_nm",
        1e-5,
        "wavelength.step_nm: found 1e-05; expected at most 1000000 wavelengths",
    ),
    (
        "wavelength",
        {"values_nm": [500, 520, 520]},
        "wavelength.values_nm[2]: found 520 after 520; expected ascending wavelengths",
    ),
    (
        "wavelength",
        {"values_nm": [-5, 520]},
        "wavelength.values_nm[0]: found -5; expected a number above 0",
    ),
    (
        "wavelength",
        {"values_nm": []},
        "wavelength.values_nm: found a list of 0; expected at least 1",
    ),
    (
        "wavelength/values_nm",
        [500],
        "wavelength: found a table with start_nm, stop_nm, step_nm, values_nm; expected either "
        "start_nm, stop_nm and step_nm, or values_nm",
    ),
    # materials
    ("materials/htl-a/n", -1.5, "materials.htl-a.n: found -1.5; expected a number of at least 0"),
    ("materials/htl-a/n", True, "materials.htl-a.n: found true; expected a number"),
    ("materials/htl-a/n", "1.8", 'materials.htl-a.n: found "1.8"; expected a number'),
    (
        "materials/htl-a/n",
        float("nan"),
        "materials.htl-a.n: found nan; expected a finite number",
    ),
    (
        "materials/htl-a/n",
        float("inf"),
        "materials.htl-a.n: found inf; expected a finite number",
    ),
    ("materials/htl-a/k", -0.1, "materials.htl-a.k: found -0.1; expected a number of at least 0"),
    (
        "materials/htl-a/n",
        0,
        "materials.htl-a.n: found 0 with k = 0; expected a refractive index that is not zero "
        "altogether",
    ),
    (
        "materials/htl-a",
        {"n": 1.8, "table": "x.csv"},
        f"materials.htl-a: found a table with n, table; expected {KINDS}",
    ),
    ("materials/htl-a", {"k": 0.1}, f"materials.htl-a: found a table with k; expected {KINDS}"),
    (
        "materials/htl-a",
        {"cauhcy_nm": [1.7, 9e3]},
        f"materials.htl-a: found a table with cauhcy_nm; expected {KINDS} "
        "(did you mean cauchy_nm?)",
    ),
    (
        "materials/bad name",
        {"n": 1.5},
        'materials.bad name: found the name "bad name"; expected letters, digits, _ and - only',
    ),
    (
        "materials/htl-c/cauchy_nm",
        [1.7],
        "materials.htl-c.cauchy_nm: found a list of 1; expected at least 2",
    ),
    (
        "materials/silica/sellmeier/c_um2",
        [0.004, 0.01],
        "materials.silica.sellmeier: found 1 values of b and 2 of c_um2; expected as many of one "
        "as of the other, at least one",
    ),
    (
        "materials/doped/mix/htl-a",
        0.9,
        "materials.doped.mix: found fractions that sum to 0.98; expected a sum of 1",
    ),
    (
        "materials/doped/rule",
        "brugeman",
        'materials.doped.rule: found "brugeman"; expected one of "bruggeman", "linear" '
        "(did you mean bruggeman?)",
    ),
    (
        "materials/doped/mix",
        {"host": 0.5, "htl-a": 0.5},
        "materials.doped.mix.host: found host, which is birefringent; expected an isotropic "
        "material",
    ),
    (
        "materials/doped/mix",
        {"doped": 1.0},
        "materials.doped.mix.doped: found the cycle doped → doped; expected materials that do not "
        "contain themselves",
    ),
    (
        "materials/loop",
        {"ordinary": "loop", "extraordinary": "air"},
        "materials.loop.ordinary: found the cycle loop → loop; expected materials that do not "
        "contain themselves",
    ),
    (
        "materials/lost",
        {"table": "no.csv"},
        'materials.lost.table: found "no.csv", no such file; expected the path of a table, '
        "relative to the case file",
    ),
    # slabs, surroundings, sides
    (
        "substrate/exit",
        "plane",
        'substrate.exit: found "plane"; expected one of "planar", "matched" (did you mean planar?)',
    ),
    (
        "substrate/material",
        "host",
        'substrate.material: found "host", which is birefringent; expected an isotropic material',
    ),
    (
        "substrate/thickness_mm",
        0,
        "substrate.thickness_mm: found 0; expected a number above 0",
    ),
    (
        "surroundings",
        {"top": "host"},
        'surroundings.top: found "host", which is birefringent; expected an isotropic material',
    ),
    (
        "surroundings",
        {"bottom": "metal"},
        'surroundings.bottom: found "metal", which absorbs, behind a slab; expected transparent '
        "surroundings, or no [substrate] between",
    ),
    (
        "sides",
        {"bottom": {"polarizer_transmittance": 1.2}},
        "sides.bottom.polarizer_transmittance: found 1.2; expected a number from 0 to 1",
    ),
]


@pytest.mark.parametrize(("path", "value", "line"), ONE_FAULT)
def test_one_planted_fault_gives_one_line(path: str, value: Any, line: str, tmp_path: Path) -> None:
    assert faults_of(changed(path, value), tmp_path) == [f"my.toml: {line}"]
