"""What a nanometer of each film does, as bars ranked by their influence."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any, NamedTuple

from optics.present.pictures_style import FAINT, GRID, INK, LOOKS, TEXT_SIZE, caption, figure_of

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_ROW_IN, _NAMES_IN = 0.26, 1.6
_PANEL_IN, _NARROW_PANEL_IN, _MANY_PANELS = 2.6, 1.75, 5
_GAIN, _LOSS = LOOKS["guided"].color, LOOKS["air_top"].color


class _Column(NamedTuple):
    title: str
    values: list[float]  # one for each row


def sensitivity_figure(title: str, found: Mapping[str, Any]) -> Figure:
    """Draw changes of EQE, luminance and color per nm of each film and of the emission zones.

    Parameters
    ----------
    title : str
        Of the case.
    found : mapping
        Entry ``sensitivity`` of the JSON result.
    """
    rows = [row for row in found["rows"] if row["change"] in ("thickness", "position")]
    columns = _columns(rows)
    order = sorted(range(len(rows)), key=lambda place: -_influence(columns, place))
    names = [_name(rows[place]) for place in order]
    panel = _PANEL_IN if len(columns) < _MANY_PANELS else _NARROW_PANEL_IN
    width = _NAMES_IN + panel * len(columns)
    figure = figure_of(width, 1.5 + _ROW_IN * len(rows), title)
    panels = figure.subplots(1, len(columns), sharey=True, squeeze=False)[0]
    for axes, column in zip(panels, columns, strict=True):
        _draw(axes, column.title, [column.values[place] for place in order])
    panels[0].set_yticks(range(len(names)), names, fontsize=TEXT_SIZE)
    panels[0].set_ylim(len(names) - 0.4, -0.6)
    caption(
        figure,
        "What one nanometer more of each film does, to first order, and one nanometer that an "
        "emission zone moves up; strongest influence on the EQE first. EQE and luminance change "
        "relative to themselves; luminance and color along the normal.",
    )
    return figure


def _columns(rows: Sequence[Mapping[str, Any]]) -> list[_Column]:
    lit = list(rows[0]["sides"])

    def percent(values: Sequence[float | None]) -> list[float]:
        return [0.0 if value is None else 100.0 * value for value in values]

    eqe = [row["external_quantum_efficiency_relative"] for row in rows]
    columns = [_Column("EQE, relative (%)", percent(eqe))]
    for side in lit:
        prefix = f"{side} " if len(lit) > 1 else ""
        luminance = [row["sides"][side]["luminance_relative"] for row in rows]
        columns.append(_Column(f"{prefix}luminance (%)", percent(luminance)))
        for key, name in (("u_prime", "u'"), ("v_prime", "v'")):
            shift = [row["sides"][side][key] or 0.0 for row in rows]
            columns.append(_Column(f"{prefix}{name} (0.001)", [1e3 * one for one in shift]))
    return columns


def _influence(columns: Sequence[_Column], place: int) -> float:
    return abs(columns[0].values[place])


def _name(row: Mapping[str, Any]) -> str:
    return row["name"] if row["change"] == "thickness" else f"zone of {row['name']}"


def _draw(axes: Axes, title: str, values: Sequence[float]) -> None:
    colors = [_GAIN if value >= 0.0 else _LOSS for value in values]
    axes.barh(
        range(len(values)), values,
        color=colors, edgecolor=INK, linewidth=0.5, height=0.72, zorder=2,
    )  # fmt: skip
    largest = max((abs(value) for value in values), default=0.0) or 1.0
    axes.set_xlim(-1.7 * largest, 1.7 * largest)
    for place, value in enumerate(values):
        right = value >= 0.0
        axes.text(
            value + (0.04 if right else -0.04) * largest, place, _written(value),
            va="center", ha="left" if right else "right", fontsize=TEXT_SIZE - 1.5, color=INK,
        )  # fmt: skip
    axes.axvline(0.0, color=INK, linewidth=0.8, zorder=3)
    axes.grid(axis="x", color=GRID, linewidth=0.6, zorder=0)
    axes.locator_params(axis="x", nbins=4)
    axes.set_xlabel(title, fontsize=TEXT_SIZE)
    axes.tick_params(axis="x", labelsize=TEXT_SIZE - 1, color=FAINT)
    axes.tick_params(axis="y", length=0)
    axes.spines[["top", "right", "left"]].set_visible(False)


def _written(value: float) -> str:
    """Two digits behind the point, with a sign; nothing for what would round to 0."""
    return "" if abs(value) < 0.005 else f"{value:+.2f}".replace("-", "\N{MINUS SIGN}")
