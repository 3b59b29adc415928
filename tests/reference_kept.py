"""Answers of the literal model kept from earlier: it takes a second a stack, many tests ask it.

`published/literal_answers.json` holds them, `published/generate_literal_answers.py` makes them.
They are looked up by every number of the stack, and only while the sources of the model are the
ones that gave them; whatever is not there is computed on the spot. So a kept answer is never
another than the model's own, and `test_reference_kept.py` asks the model for some of them again.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterator
from dataclasses import asdict
from functools import cache
from pathlib import Path
from typing import Any

import reference
from reference import Outcome, Reference, Result

HERE = Path(__file__).resolve().parent
TARGET = HERE / "published" / "literal_answers.json"
# What `Reference.destinations` rests on.
SOURCES = ("reference", "reference_exits", "reference_fields", "reference_geometry",
           "reference_paths")  # fmt: skip
DIGITS = 12  # the quadrature's error is 1e-10 and more


def literal(stack: Reference, tolerance: float) -> Result:
    """`stack.destinations(tolerance)`, kept or computed.

    Raises
    ------
    ArithmeticError
        As the model does.
    """
    answers = kept()
    record = answers.get(key_of(stack, tolerance))
    return stack.destinations(tolerance) if record is None else result_of(record)


@cache
def kept() -> dict[str, dict[str, Any]]:
    """Records by key; none if the model has changed since."""
    if not TARGET.exists():
        return {}
    document = json.loads(TARGET.read_text(encoding="utf-8"))
    answers: dict[str, dict[str, Any]] = document["answers"]
    return answers if document["model"] == model_digest() else {}


@cache
def model_digest() -> str:
    """Digest of the model's sources."""
    digest = hashlib.sha256()
    for name in SOURCES:
        digest.update((HERE / f"{name}.py").read_bytes())
    return digest.hexdigest()


def key_of(stack: Reference, tolerance: float) -> str:
    """Digest of every number given to the model, to twelve digits."""
    slabs = [sorted((stack.substrate or {}).items()), sorted((stack.cover or {}).items())]
    numbers = [
        stack.wavelength_nm, *(part for one in stack.films for part in one), stack.bottom,
        stack.top, stack.emitter, stack.z_nm, tolerance,
    ]  # fmt: skip
    text = " ".join([*(_written(one) for one in numbers), *(_slab(pairs) for pairs in slabs)])
    return hashlib.sha256(text.encode("ascii")).hexdigest()[:20]


def record_of(stack: Reference, tolerance: float) -> dict[str, Any]:
    """Ask the model, for keeping."""
    try:
        found = stack.destinations(tolerance)
    except ArithmeticError as reason:
        return {"refused": str(reason)}
    return {
        "error": _short(found.error),
        "path": found.path,
        "panels": found.panels,
        **{one: list(_rounded(getattr(found, one))) for one in "vh"},
    }


def result_of(record: dict[str, Any]) -> Result:
    """Answer that was kept."""
    if "refused" in record:
        raise ArithmeticError(record["refused"])
    v, h = (_outcome(record[one]) for one in "vh")
    return Result(v, h, record["error"], record["path"], record["panels"])


def _rounded(outcome: Outcome) -> Iterator[float | None]:
    found = asdict(outcome)
    shares = found.pop("destinations")
    for value in (*shares.values(), *found.values()):
        yield None if value is None else _short(value)


def _outcome(values: list[float | None]) -> Outcome:
    count = len(reference.DESTINATIONS)
    shares = dict(zip(reference.DESTINATIONS, values[:count], strict=True))
    return Outcome(values[count], shares, *values[count + 1 :])  # type: ignore[arg-type]


def _short(value: float) -> float:
    return float(f"{value:.{DIGITS}g}")


def _written(value: complex) -> str:
    plain = complex(value)
    return f"{plain.real:.{DIGITS}g},{plain.imag:.{DIGITS}g}"


def _slab(pairs: list[tuple[str, Any]]) -> str:
    said = [(key, value if isinstance(value, str) else _written(value)) for key, value in pairs]
    return ";".join(f"{key}={value}" for key, value in said)
