"""Write dipole_reference.json: the literal model's answers for a set of diverse stacks.

Run from anywhere: python tests/published/generate_dipole_reference.py [NAME ...]
With names only those records are renewed (or added), otherwise all. Stacks and optical
constants are invented; the metals use the Lorentz-Drude model of Rakic et al., Appl. Opt.
37, 5271 (1998) (parameters from memory, checked against tables of that source to 1.1e-4).
Each record states as its error the largest difference between the two literal routes over
all outputs, relative to the dissipated rate. A case takes some ten seconds.
"""

from __future__ import annotations

import json
import sys
import time
from dataclasses import asdict
from pathlib import Path
from typing import Any

import mpmath
import numpy

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE.parent))

from generate_dipole_stacks import STACKS  # noqa: E402
from reference import Reference, Result  # noqa: E402

TARGET = HERE / "dipole_reference.json"
DIGITS, NODES = 22, 16


def flat(result: Result) -> dict[str, dict[str, float | None]]:
    """Every output of both orientations under one name each."""
    out: dict[str, dict[str, float | None]] = {}
    for orientation in "vh":
        found = asdict(getattr(result, orientation))
        out[orientation] = found.pop("destinations") | found
    return out


def numbers(value: complex) -> list[float]:
    return [complex(value).real, complex(value).imag]


def record(name: str, stack: dict[str, Any]) -> dict[str, Any]:
    """Solve one stack by both routes; the mpmath values are kept."""
    given = {key: value for key, value in stack.items() if key != "about"}
    model = Reference(**given)
    first, second = model.destinations(), model.repeated(DIGITS, NODES)
    fast, slow = flat(first), flat(second)
    worst = max(
        abs(fast[o][k] - slow[o][k]) / slow[o]["dissipated"]  # type: ignore[operator]
        for o in "vh"
        for k in slow[o]
        if slow[o][k] is not None
    )
    balance = max(abs(second.v.imbalance), abs(second.h.imbalance))
    inputs = given | {
        "films": [[numbers(o), numbers(e), d] for o, e, d in given["films"]],
        "bottom": numbers(given["bottom"]),
        "top": numbers(given["top"]),
        "substrate": given.get("substrate"),
        "cover": given.get("cover"),
    }
    return {
        "name": name,
        "about": stack["about"],
        "inputs": inputs,
        "outputs": slow,
        "stated_error": worst,
        "energy_imbalance": balance,
        "path": second.path,
        "panels": second.panels,
    }


def main(wanted: list[str]) -> None:
    kept: dict[str, Any] = {}
    if TARGET.exists():
        kept = {r["name"]: r for r in json.loads(TARGET.read_text())["records"]}
    for name in wanted or STACKS:
        start = time.perf_counter()
        kept[name] = record(name, STACKS[name])
        spent = time.perf_counter() - start
        note = f"error {kept[name]['stated_error']:.1e}, {kept[name]['energy_imbalance']:.1e}"
        print(f"{name}: {note}, {kept[name]['panels']} panels, {spent:.0f} s", flush=True)
        write([kept[n] for n in STACKS if n in kept])


def write(records: list[dict[str, Any]]) -> None:
    document = {
        "source": "generate_dipole_reference.py with tests/reference.py (two literal routes)",
        "mpmath": mpmath.__version__,
        "numpy": numpy.__version__,
        "digits": DIGITS,
        "units": "lengths nm; permittivities [re, im]; rates relative to the orientation's own "
        "rate in the unbounded emitter medium; emitter k set to 0",
        "columns": {
            "stated_error": "largest difference of the two routes / dissipated",
            "energy_imbalance": "(dissipated - sum of destinations) / dissipated",
            "near_field": "part of dissipated beyond 2 x the largest Re n",
            "matched_bottom": "light out at that side if its slab were matched, null without",
        },
        "records": records,
    }
    TARGET.write_text(json.dumps(document, indent=1) + "\n")


if __name__ == "__main__":
    main(sys.argv[1:])
