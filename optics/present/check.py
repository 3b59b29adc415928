"""The outcome of a check as tables for people: what was compared first, what failed always."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from rich.console import Console, Group, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from optics.present.tables import plain_table, titled
from optics.present.terminal import show
from optics.present.wording import MISSING

_PLACES = (
    ("emitter", "{}"),
    ("wavelength_nm", "{:g} nm"),
    ("position_nm", "z {:.2f} nm"),
    ("orientation", "{}"),
    ("side", "{}"),
    ("angle_deg", "{:g}°"),
    ("polarization", "{}"),
)


def check_view(result: Mapping[str, Any], *, every_row: bool = False) -> RenderableType:
    """Lay out a check.

    Parameters
    ----------
    result : mapping
        As ``check --json`` writes it.
    every_row : bool
        Show the comparisons that passed too.

    Returns
    -------
    rich renderable
    """
    rows = result["rows"]
    failed = [row for row in rows if row["result"] == "fail"]
    parts: list[RenderableType] = [
        Text(result["title"], style="bold"),
        Text(),
        _verdict(rows, failed),
        Padding(_summary(result["summary"]), (1, 0, 0, 0)),
        *(Text(line) for line in _scales(result["summary"])),
    ]
    if failed:
        table = titled("Beyond the tolerance", _rows(failed))
        parts.append(Padding(table, (1, 0, 0, 0)))
    left_out = _left_out(rows)
    if left_out.row_count:
        table = titled("Not checked", left_out)
        parts.append(Padding(table, (1, 0, 0, 0)))
    parts += [Text(f"Remark: {note}") for note in _notes(rows)]
    if every_row:
        table = titled("All comparisons", _rows(rows))
        parts.append(Padding(table, (1, 0, 0, 0)))
    return Group(*parts)


def print_check(out: Console, result: Mapping[str, Any], *, every_row: bool = False) -> None:
    """Print `check_view`."""
    show(out, check_view(result, every_row=every_row))


def _verdict(rows: Sequence[Mapping[str, Any]], failed: Sequence[Mapping[str, Any]]) -> Text:
    made = sum(row["result"] != "not checked" for row in rows)
    if failed:
        return Text(f"{len(failed)} of {made} comparisons exceed their tolerance", style="bold red")
    return Text(f"All {made} comparisons are within their tolerance", style="bold green")


def _summary(entries: Iterable[Mapping[str, Any]]) -> Table:
    table = plain_table("kind", "checked", "failed", "not checked", "worst difference / tolerance")
    for entry in entries:
        ratio = entry["worst_ratio"]
        table.add_row(
            entry["kind"],
            str(entry["checked"]),
            str(entry["failed"]),
            str(entry["not_checked"]),
            MISSING if ratio is None else f"{ratio:.1e}",
            style="red" if entry["failed"] else None,
        )
    return table


def _scales(entries: Iterable[Mapping[str, Any]]) -> list[str]:
    """Say what the differences of each kind are fractions of."""
    scales = [f"{entry['kind']}: {entry['difference_of']}" for entry in entries]
    return ["", "Differences are fractions of:", *(f"  {line}" for line in scales)]


def _rows(rows: Iterable[Mapping[str, Any]]) -> Table:
    table = plain_table("what", "where", "engine", "independent", "difference", "tolerance", "by")
    for column in (1, 6):
        table.columns[column].justify = "left"
    for row in rows:
        table.add_row(
            f"{row['kind']}: {row['quantity']}",
            where(row),
            *(_value(row[key], ".6g") for key in ("engine", "independent")),
            *(_value(row[key], ".1e") for key in ("difference", "tolerance")),
            row["method"],
            style="red" if row["result"] == "fail" else None,
        )
    return table


def where(row: Mapping[str, Any]) -> str:
    """Word the place of a row: ``green, 525 nm, z 3.20 nm, vertical``."""
    known = ((row[key], text) for key, text in _PLACES)
    return ", ".join(text.format(value) for value, text in known if value not in (None, ""))


def _value(value: float | None, form: str) -> str:
    return MISSING if value is None else format(value, form)


def _left_out(rows: Iterable[Mapping[str, Any]]) -> Table:
    """Count what was left out, by kind, method and reason."""
    counts: dict[tuple[str, str, str], int] = {}
    for row in rows:
        if row["result"] == "not checked":
            key = (row["kind"], row["method"], row["note"])
            counts[key] = counts.get(key, 0) + 1
    table = plain_table("kind", "by", "rows", "reason")
    for column in (1, 3):
        table.columns[column].justify = "left"
    for (kind, method, reason), count in counts.items():
        table.add_row(kind, method, str(count), reason)
    return table


def _notes(rows: Iterable[Mapping[str, Any]]) -> list[str]:
    """List what had to be done to be able to check, each once."""
    found = dict.fromkeys(
        f"{row['kind']} at {row['wavelength_nm']:g} nm: {row['note']}"
        for row in rows
        if row["note"] and row["result"] != "not checked"
    )
    return list(found)
