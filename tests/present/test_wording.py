"""Numbers as readers see them."""

from __future__ import annotations

import pytest

from optics.present.digits import large
from optics.present.wording import CHAIN_LABELS, accuracy, number, percent


@pytest.mark.parametrize(
    ("share", "text"),
    [
        (None, "-"),
        (0.0, "0"),
        (0.24313, "24.31"),
        (1.2, "120.00"),
        (4.9e-5, "<0.01"),
        (1e-13, "<0.01"),
        (-1e-3, "-0.10"),
    ],
)
def test_percent(share: float | None, text: str) -> None:
    assert percent(share) == text


def test_numbers_and_errors() -> None:
    assert number(1.23456) == "1.235"
    assert number(None) == "-"
    assert accuracy(3.4e-9) == "3e-09"
    assert accuracy(None) == "-"


def test_every_step_of_the_chain_has_its_own_label() -> None:
    assert len(set(CHAIN_LABELS.values())) == len(CHAIN_LABELS) == 10


def test_large_digits_are_three_lines_of_equal_length() -> None:
    drawn = large("0123456789. -%")
    assert len({len(line) for line in drawn}) == 1
    digits = [large(str(digit)) for digit in range(10)]
    assert len(set(digits)) == 10
