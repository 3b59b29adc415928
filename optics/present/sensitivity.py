"""Sensitivities beside a budget: what each nanometer does, for people and in files."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from rich.console import Group, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from optics.present.tables import plain_table, titled
from optics.present.wording import MISSING, accuracy

if TYPE_CHECKING:
    import pandas
    import xarray

    from optics.outcome.budget import Budget
    from optics.study.sensitivity import Sensitivity

#: What each kind of change is, above its rows.
CHANGES = {
    "thickness": "1 nm more of each film",
    "position": "1 nm that an emission zone moves up",
    "index": "0.01 more of each film's index n",
    "orientation": "0.01 more of the horizontal fraction",
}
# Columns of each side: head, key of the effect, factor, digits.
_OF_SIDE = (("luminance %", "luminance_relative", 100.0, 2), ("x", "x", 1.0, 5), ("y", "y", 1.0, 5))


def with_sensitivity(outcome: Budget, found: Sensitivity | None) -> dict[str, Any]:
    """Build the JSON result of a budget, with the key ``sensitivity`` if there is one."""
    extra = {} if found is None else {"sensitivity": found.to_dict()}
    return {**outcome.to_dict(), **extra}


def frame_of(outcome: Budget, found: Sensitivity | None) -> pandas.DataFrame:
    """Build the long table of a budget and of sensitivities below it."""
    import pandas

    frame = outcome.to_frame()
    return frame if found is None else pandas.concat([frame, found.to_frame()], ignore_index=True)


def tree_of(outcome: Budget, found: Sensitivity | None) -> xarray.DataTree:
    """Build the labelled arrays of a budget, with a node ``sensitivity`` if there is one."""
    tree = outcome.to_tree()
    if found is not None:
        import xarray

        tree["sensitivity"] = xarray.DataTree(found.to_dataset())
    return tree


def signed(value: float | None, digits: int) -> str:
    """Word a change as ``+0.12``; ``0`` is exact, ``<0.01`` is not."""
    if value is None:
        return MISSING
    if value == 0.0:
        return "0"
    if abs(value) < 0.5 * 10.0**-digits:
        return f"<{10.0**-digits:.{digits}f}"
    return f"{value:+.{digits}f}"


def sensitivity_view(found: Mapping[str, Any]) -> RenderableType:
    """Lay out sensitivities: one row for each film and emitter.

    Parameters
    ----------
    found : mapping
        Entry ``sensitivity`` of ``budget --sensitivity --json``.
    """
    rows: Sequence[Mapping[str, Any]] = found["rows"]
    widest = max(len(row["name"]) for row in rows)
    parts: list[RenderableType] = [Text("Sensitivity: what a small step changes", style="bold")]
    for change in dict.fromkeys(row["change"] for row in rows):
        these = [row for row in rows if row["change"] == change]
        parts.append(Padding(_table(these, f"by {CHANGES[change]}", widest), (1, 0, 0, 0)))
    explained = (
        "Points are percentage points of the EQE; EQE % and luminance % are relative changes. "
        "Luminance and color x, y along the normal. Exact derivatives, accuracy reached: "
        f"{accuracy(found['derivative_error'])} of their natural scale"
    )
    return Group(*parts, Padding(Text(explained), (1, 0, 0, 0)))


def _table(rows: Sequence[Mapping[str, Any]], caption: str, widest: int) -> Group:
    """Return the rows of one kind of step, names as wide as the widest of all."""
    lit = list(rows[0]["sides"])
    heads = ["EQE points", "EQE %"]
    for side in lit:
        prefix = f"{side} " if len(lit) > 1 else ""
        heads += [f"{prefix}{head}" for head, *_ in _OF_SIDE]
    table = plain_table("", *heads)
    table.columns[0].min_width = widest
    for column in table.columns[1:]:
        column.min_width = len("+0.00012")
    for row in rows:
        _add_row(table, row, lit)
    return titled(caption, table)


def _add_row(table: Table, row: Mapping[str, Any], lit: Sequence[str]) -> None:
    relative = row["external_quantum_efficiency_relative"]
    cells = [
        signed(100.0 * row["external_quantum_efficiency"], 3),
        signed(None if relative is None else 100.0 * relative, 2),
    ]
    for side in lit:
        for _, key, factor, digits in _OF_SIDE:
            value = row["sides"][side][key]
            cells.append(signed(None if value is None else factor * value, digits))
    table.add_row(row["name"], *cells)


__all__ = ["frame_of", "sensitivity_view", "signed", "tree_of", "with_sensitivity"]
