"""Pictures of an optimization: cuts through the best point, or the Pareto front."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.present.pictures_style import (
    FAINT,
    GRID,
    INK,
    SMALL_SIZE,
    TEXT_SIZE,
    caption,
    figure_of,
    plain,
)
from optics.present.sweep import digits, short_name
from optics.present.sweep_pictures import SHARES

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from optics.study.optimum import ObjectiveFound, Optimum, VariableFound

# Colors of Okabe and Ito (from memory); marks differ in shape as well.
_CUT, _OTHER, _BAND = "#0072B2", "#D55E00", "#F0E442"
_COLUMNS = 2
_PANEL = (4.0, 2.7)


def optimum_figure(found: Optimum) -> Figure:
    """Draw the front where there are several objectives, else a cut along each variable.

    Parameters
    ----------
    found : Optimum
    """
    return _front(found) if found.front else _cuts(found)


def _scaled(name: str, values: Any) -> Any:
    """Outcome as it is drawn: shares in percent."""
    array = np.asarray(values, dtype=np.float64)
    return 100.0 * array if name.rpartition(".")[2] in SHARES else array


def _unit(one: ObjectiveFound) -> str:
    return "%" if one.name.rpartition(".")[2] in SHARES else one.units


def _label(one: ObjectiveFound) -> str:
    unit = _unit(one)
    return one.name if unit == "1" else f"{one.name} ({unit})"


def _cuts(found: Optimum) -> Figure:
    (objective,) = found.objectives
    name = objective.name
    columns = min(len(found.variables), _COLUMNS)
    rows = math.ceil(len(found.variables) / columns)
    figure = figure_of(max(_PANEL[0] * columns, 5.5), 1.3 + _PANEL[1] * rows, found.title)
    grid = figure.subplots(rows, columns, sharey=True, squeeze=False)
    for axes, one in zip(grid.flat, found.variables, strict=False):
        _cut(axes, found, one, name)
    for axes in list(grid.flat)[len(found.variables) :]:
        axes.remove()
    for axes in grid[:, 0]:
        axes.set_ylabel(_label(objective))
    unit = "" if _unit(objective) == "1" else f" {_unit(objective)}"
    said = (
        f"Star: the best, {digits(float(_scaled(name, objective.best)))}{unit}. Line: one variable "
        "moved, the others at the best; dashed where a constraint is missed. Band: less than "
        "1 % lost. Dots: points tried, hollow where a constraint is missed."
    )
    if found.others:
        said += " Diamonds: other optima within 1 %."
    caption(figure, said)
    return figure


def _cut(axes: Axes, found: Optimum, one: VariableFound, name: str) -> None:
    cut = found.slices[one.path]
    x, y = np.array(cut.values), _scaled(name, cut.outcomes[name])
    allowed = np.array(cut.allowed)
    if one.flat_from is not None and one.flat_to is not None:
        axes.axvspan(one.flat_from, one.flat_to, color=_BAND, alpha=0.45, linewidth=0)
    tried = found.frame[found.frame["kind"] == "sample"]
    dots = _scaled(name, tried[name])
    met = tried["allowed"].to_numpy()
    at = tried[one.path].to_numpy()
    axes.plot(at[met], dots[met], ".", color=FAINT, markersize=3.5)
    axes.plot(at[~met], dots[~met], "o", color=FAINT, markersize=2.5, markerfacecolor="none",
              markeredgewidth=0.5)  # fmt: skip
    axes.plot(x, y, color=_CUT, linewidth=1.2, linestyle=(0, (3, 2)))
    # A piece is allowed where both of its ends are.
    axes.plot(x, np.where(allowed, y, np.nan), color=_CUT, linewidth=2.2)
    for other in found.others:
        axes.plot(
            other.values[one.path], _scaled(name, other.outcomes[name]), "D", color=_OTHER,
            markersize=5, markeredgecolor=INK, markeredgewidth=0.6,
        )  # fmt: skip
    axes.plot(
        one.best, _scaled(name, found.objectives[0].best), "*", markersize=14,
        markerfacecolor="white", markeredgecolor=INK, clip_on=False, zorder=5,
    )  # fmt: skip
    unit = "" if one.units == "1" else f" ({one.units})"
    axes.set_xlabel(f"{short_name(one.path)}{unit}")
    axes.grid(color=GRID, linewidth=0.6)
    axes.margins(x=0.02)
    plain(axes)


def _front(found: Optimum) -> Figure:
    """Each objective against the first, and the variables along the front."""
    first, *rest = found.objectives
    figure = figure_of(7.0, 1.3 + 2.8 * len(rest) + 2.6, found.title)
    panels = list(
        figure.subplots(len(rest) + 1, 1, sharex=False, squeeze=False,
                        height_ratios=[2.8] * len(rest) + [2.4])[:, 0]
    )  # fmt: skip
    for axes, other in zip(panels, rest, strict=False):
        _against(axes, found, first, other)
    _along(panels[-1], found, first)
    caption(
        figure,
        "Numbered points: the front, none of which can be bettered in all objectives. Star: the "
        "compromise. Gray: points tried, hollow where a constraint is missed. Below: the variables "
        "along the front, in shares of the way between their bounds.",
    )
    return figure


def _against(axes: Axes, found: Optimum, first: ObjectiveFound, other: ObjectiveFound) -> None:
    tried = found.frame[found.frame["kind"] == "sample"]
    met = tried["allowed"].to_numpy()
    x, y = _scaled(first.name, tried[first.name]), _scaled(other.name, tried[other.name])
    axes.plot(x[met], y[met], ".", color=FAINT, markersize=4)
    axes.plot(x[~met], y[~met], "o", color=FAINT, markersize=3, markerfacecolor="none",
              markeredgewidth=0.5)  # fmt: skip
    at = [
        (_scaled(first.name, p.outcomes[first.name]), _scaled(other.name, p.outcomes[other.name]))
        for p in found.front
    ]
    xs, ys = np.array(at).T
    axes.plot(xs, ys, color=_CUT, linewidth=1.4, marker="o", markersize=4)
    for number in sorted({0, len(at) // 2, len(at) - 1}):
        axes.annotate(
            str(number + 1), at[number], xytext=(4, 4), textcoords="offset points",
            fontsize=SMALL_SIZE, color=INK,
        )  # fmt: skip
    axes.plot(
        _scaled(first.name, first.best), _scaled(other.name, other.best), "*", markersize=15,
        markerfacecolor="white", markeredgecolor=INK, zorder=5,
    )  # fmt: skip
    axes.set_xlabel(_label(first))
    axes.set_ylabel(_label(other))
    axes.grid(color=GRID, linewidth=0.6)
    plain(axes)


def _along(axes: Axes, found: Optimum, first: ObjectiveFound) -> None:
    x = [float(_scaled(first.name, point.outcomes[first.name])) for point in found.front]
    dashes = ("-", "--", "-.", ":", (0, (5, 1, 1, 1, 1, 1)), (0, (3, 3)), (0, (8, 2)))
    colors = ("#000000", "#D55E00", "#0072B2", "#009E73", "#CC79A7", "#E69F00", "#56B4E9")
    for place, one in enumerate(found.variables):
        shares = [(point.values[one.path] - one.min) / (one.max - one.min) for point in found.front]
        unit = "" if one.units == "1" else f" {one.units}"
        axes.plot(
            x, shares, color=colors[place % len(colors)], linestyle=dashes[place % len(dashes)],
            marker="o", markersize=3, linewidth=1.5,
            label=f"{short_name(one.path)}, {one.min:g} to {one.max:g}{unit}",
        )  # fmt: skip
    axes.set_ylim(-0.04, 1.04)
    axes.set_xlabel(_label(first))
    axes.set_ylabel("share of the bounds")
    axes.legend(
        fontsize=SMALL_SIZE, frameon=False, loc="center left", bbox_to_anchor=(1.0, 0.5),
        handlelength=3.2,
    )  # fmt: skip
    axes.grid(color=GRID, linewidth=0.6)
    axes.set_title("variables along the front", loc="left", fontsize=TEXT_SIZE, color=INK)
    plain(axes)
