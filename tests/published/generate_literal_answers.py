"""Write literal_answers.json: what the literal model says of the stacks that many tests ask it.

Run from anywhere: python tests/published/generate_literal_answers.py
Stacks and numbers are invented, all but the metals of the random stacks, which are bundled tables.
Answers that are there and of the model as it stands are kept, so a second run takes seconds, and
one after a change of the model some minutes. See `reference_kept`.
"""

from __future__ import annotations

import json
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy
import scipy

TESTS = Path(__file__).resolve().parents[1]
sys.path[:0] = [str(TESTS), str(TESTS / "kernels")]

from reference import Reference  # noqa: E402
from reference_kept import TARGET, kept, key_of, model_digest, record_of  # noqa: E402
from robustness.random_stacks import AGAINST_LITERAL, FAMILIES, random_stack  # noqa: E402
from thin_metals import BEYOND, FAR, NEAR, TRAP, WITHIN, far_metal, thin_metal  # noqa: E402


def main() -> None:
    """Ask the model what is not known yet, in the order of the tests."""
    known, answers = kept(), {}

    def ask(stack: Reference, tolerance: float) -> dict[str, Any]:
        key = key_of(stack, tolerance)
        answers[key] = known.get(key) or record_of(stack, tolerance)
        return answers[key]

    for stack in thin_metals():
        ask(stack, 1e-9)
    for family in FAMILIES:
        compared = number = 0
        while compared < AGAINST_LITERAL:
            stack = Reference(**random_stack(family, number).given())
            compared += "refused" not in ask(stack, 1e-10)
            number += 1
    write(answers)


def thin_metals() -> Iterator[Reference]:
    """Stacks of tests/kernels/test_settle.py."""
    yield from map(thin_metal, (*range(NEAR), TRAP))
    for factor in (BEYOND, WITHIN):
        yield from (far_metal(seed, factor) for seed in range(FAR))


def write(answers: dict[str, dict[str, Any]]) -> None:
    """Write the file, one answer a line."""
    document = {
        "source": "generate_literal_answers.py with tests/reference.py",
        "numpy": numpy.__version__,
        "scipy": scipy.__version__,
        "units": "rates relative to the orientation's own rate in the unbounded emitter medium",
        "columns": "v, h: destinations in the order of reference.DESTINATIONS, then dissipated, "
        "near_field, matched_bottom, matched_top; error: of the quadrature, absolute",
        "model": model_digest(),
    }
    head = json.dumps(document, indent=1).removesuffix("\n}")
    lines = ",\n".join(f'  "{key}": {json.dumps(record)}' for key, record in answers.items())
    TARGET.write_text(f'{head},\n "answers": {{\n{lines}\n }}\n}}\n', encoding="utf-8")


if __name__ == "__main__":
    main()
