"""The light budget on paper: what stands where."""

from __future__ import annotations

import io
from typing import Any

from budget_examples import budget
from rich.console import Console

from optics.device.materials import TableUse
from optics.present.tables import print_budget
from optics.present.terminal import console

USE = TableUse("al-x", "A. One, B. Two. A title of it. J. X 1, 2 (1999)", (300.0, 1000.0), "0")


def printed(result: dict[str, Any], *cautions: str, tables: tuple[TableUse, ...] = (USE,)) -> str:
    stream = io.StringIO()
    print_budget(console(stream), result, tables, cautions)
    return stream.getvalue()


def row(text: str, start: str, occurrence: int = 0) -> list[str]:
    rows = [line for line in text.splitlines() if line.startswith(start)]
    return rows[occurrence].removeprefix(start).split()


def test_eqe_comes_first_then_sides() -> None:
    lines = printed(budget()).splitlines()
    assert lines[0] == "made-up budget"
    assert lines[2].startswith("EQE 20.00 %")
    assert lines[3].strip() == "by side: bottom 20.00 %, top 0 %"
    assert lines[4].strip().endswith("on the brighter side: 44.00 %")
    assert lines[5].strip() == "of the light generated, 25.00 % leaves"


def test_no_matched_line_without_a_slab() -> None:
    assert "hemisphere" not in printed(budget() | {"external_quantum_efficiency_matched": None})


def test_chain_and_destinations_add_up_to_the_printed_sum() -> None:
    text = printed(budget())
    assert row(text, "nonradiative decay in the emitter") == ["20.00", "######"]
    assert row(text, "light out at the bottom", 0)[0] == "20.00"
    assert row(text, "light out at the bottom", 1) == ["25.00"]
    assert row(text, "sum", 0) == ["100.00"]
    assert row(text, "sum", 1) == ["100.00"]


def test_sum_is_added_up_from_the_rows() -> None:
    result = budget()
    result["chain"][0]["absorbed"] += 0.01
    assert row(printed(result), "sum", 0) == ["101.00"]


def test_a_tandem_has_a_column_for_each_unit_and_one_for_the_device() -> None:
    text = printed(budget("lower", "upper"))
    assert row(text, "surface plasmons", 0) == ["16.00", "16.00"]
    assert row(text, "surface plasmons", 1) == ["20.00", "20.00", "20.00"]
    assert row(text, "unit") == ["lower", "upper"]


def test_emitter_numbers_stand_with_their_names() -> None:
    text = printed(budget())
    assert row(text, "Purcell factor") == ["1.234"]
    assert row(text, "horizontal fraction of the dipoles") == ["0.760"]
    assert row(text, "vertical fraction") == ["0.240"]
    assert row(text, "order parameter S") == ["-0.140"]
    assert row(text, "near-field share, %") == ["<0.01"]
    assert row(text, "radiative efficiency in the device, %") == ["80.00"]


def test_nulls_are_a_dash() -> None:
    result = budget()
    result["emitters"][0] |= {"purcell_factor": None, "decay_rate_ratio": None}
    result["destinations"] = result["emitters"][0]["destinations"] = dict.fromkeys(
        result["destinations"]
    )
    result["outcoupling_efficiency"] = None
    text = printed(result)
    assert row(text, "Purcell factor") == ["-"]
    assert row(text, "sum", 1) == ["-"]
    assert "of the light generated, - % leaves" in text


def test_tables_accuracy_warnings_and_cautions_are_told() -> None:
    text = printed(budget(), "mind the step")
    assert " ".join(row(text, "al-x")) == "300 to 1000 nm One et al., J. X 1, 2 (1999)"
    assert "energy balance 1e-09, integration 3e-08" in text
    assert "\nWarning: something [to] heed\n" in text
    assert "\nCaution: mind the step\n" in text
    assert "No table of optical constants was used." in printed(budget(), tables=())


def test_plain_text_has_neither_color_nor_trailing_blanks() -> None:
    text = printed(budget())
    assert "\x1b" not in text
    assert all(line == line.rstrip() for line in text.splitlines())
    assert max(len(line) for line in text.splitlines()) <= 100


def test_a_terminal_gets_large_digits() -> None:
    stream = io.StringIO()
    print_budget(Console(file=stream, force_terminal=True, width=90), budget(), (USE,))
    text = stream.getvalue()
    assert "╺━┓ ┏━┓   ┏━┓ ┏━┓" in text
    assert "external quantum efficiency (EQE)" in text
