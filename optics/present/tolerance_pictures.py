"""Pictures of a tolerance study: a histogram and the ranked influences of each outcome."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

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
from optics.present.sweep import digits
from optics.present.tolerance import factor_name, ranked

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from optics.study.tolerance_result import OutcomeSpread, Tolerance, Yield

    Floats = NDArray[np.float64]

# Colors of Okabe and Ito (from memory), apart in lightness as well.
_INSIDE, _OUTSIDE, _LIMIT, _TOTAL = "#56B4E9", "#D9D9D9", "#B04400", "#C7E3F4"
_ALONE = "#0072B2"
_ROW_INCHES = 2.5
_MOST_FACTORS = 8
_BINS = (12, 60)
# Values that differ by less than this share of their size are one.
_FLAT = 1e-9


def tolerance_figure(found: Tolerance, shown: Sequence[str] = ()) -> Figure:
    """Draw histograms with limits and linear prediction, and ranked influences beside them.

    Parameters
    ----------
    found : Tolerance
    shown : sequence of str
        Outcomes to draw; all if empty.
    """
    names = list(shown) or [one.name for one in found.outcomes]
    figure = figure_of(9.6, 1.3 + _ROW_INCHES * len(names), found.title)
    grid = figure.subplots(len(names), 2, squeeze=False, width_ratios=(1.15, 1.0))
    limits = {one.outcome: one for one in found.yields}
    reach = _reach([found.outcome(name) for name in names])
    for (left, right), name in zip(grid, names, strict=True):
        one = found.outcome(name)
        _histogram(left, found, one, limits.get(name))
        _influence(right, found, one)
        right.set_xlim(0.0, reach)
    grid[-1, 1].set_xlabel("share of the variance (%)")
    caption(figure, _explained(found, names))
    return figure


def _reach(outcomes: Sequence[OutcomeSpread]) -> float:
    """Largest share in percent that the bars of any outcome show, so that all have one scale."""
    ends = [
        part.high if part.high is not None else part.value or 0.0
        for one in outcomes
        if one.influence is not None
        for part in one.influence.total
    ]
    return min(105.0 * max(ends, default=1.0), 102.0)


def _explained(found: Tolerance, names: Sequence[str]) -> str:
    said = [
        f"{found.samples} samples, seed {found.seed}. Dashed outline: the same samples as the "
        "derivatives at the nominal values predict them; triangle: the nominal value."
    ]
    if any(one.outcome in names for one in found.yields):
        said.append("Red lines: limits; gray: samples outside.")
    said.append(
        "Bars on the right: dark, what a number does alone; light, what it does in all, with its "
        "95 % interval; circle, what the derivatives predict."
    )
    return " ".join(said)


def _histogram(axes: Axes, found: Tolerance, one: OutcomeSpread, limit: Yield | None) -> None:
    factor, unit = (
        (100.0, "%") if _is_percent(one) else (1.0, "" if one.units == "1" else one.units)
    )
    every = factor * np.asarray(found.data[one.name].to_numpy(), dtype=np.float64)
    values = every[np.isfinite(every)]
    axes.set_title(
        one.name + (f" ({unit})" if unit else ""), loc="left", fontsize=TEXT_SIZE, color=INK
    )
    plain(axes)
    axes.spines["left"].set_visible(False)
    axes.set_yticks([])
    if values.size == 0 or np.ptp(values) <= _FLAT * max(float(np.abs(values).max()), 1e-300):
        text = "undefined" if values.size == 0 else f"{digits(float(values[0]))} in every sample"
        axes.text(0.5, 0.5, text, transform=axes.transAxes, ha="center", color=FAINT)
        return
    line = _line(found, one)
    straight = None if line is None else factor * line
    bounds = [] if limit is None else [limit.low, limit.high]
    edges = _edges(values, straight, [factor * one for one in bounds if one is not None])
    axes.hist(values, bins=edges, color=_INSIDE, edgecolor="white", linewidth=0.4)
    if straight is not None:
        axes.hist(straight, bins=edges, histtype="step", color=INK, linewidth=1.3, linestyle="--")
    if limit is not None:
        _limits(axes, limit, factor, values, edges)
    if one.nominal is not None:
        axes.plot(
            factor * one.nominal, 0.0, marker="^", color=INK, markersize=6, clip_on=False, zorder=5
        )
    axes.margins(x=0.02)
    axes.locator_params(axis="x", nbins=7)


def _is_percent(one: OutcomeSpread) -> bool:
    """Whether an outcome is told in percent, as the EQE and shares are."""
    last = one.name.rpartition(".")[2]
    return last.startswith(("external_quantum", "outcoupling")) or "destinations." in one.name


def _line(found: Tolerance, one: OutcomeSpread) -> Floats | None:
    """What the derivatives predict for every sample."""
    if one.linear is None:
        return None
    line = np.full(found.samples, one.linear.mean)
    for spread in found.spreads:
        off = found.data[spread.path].to_numpy() - spread.nominal
        line += one.linear.derivatives[spread.path] * off
    return line


def _edges(values: Floats, straight: Floats | None, bounds: Sequence[float]) -> list[float]:
    """Edges of the bins over both, as fine as the samples allow; the first limit is an edge."""
    both = values if straight is None else np.concatenate([values, straight])
    low, high = float(both.min()), float(both.max())
    count = int(np.clip(np.histogram_bin_edges(values, "auto").size - 1, *_BINS))
    # Straight lines may reach far beyond the values.
    width = max(float(np.ptp(values)) / count, (high - low) / (4 * _BINS[1]))
    at = bounds[0] if bounds and low < bounds[0] < high else low
    first, last = math.floor((low - at) / width), math.ceil((high - at) / width)
    return [at + width * step for step in range(first, last + 1)]


def _limits(axes: Axes, limit: Yield, factor: float, values: Floats, edges: list[float]) -> None:
    """Mark the limits, and gray what lies outside by a histogram of its own."""
    inside = np.ones(values.size, dtype=np.bool_)
    for bound, sign in ((limit.low, 1.0), (limit.high, -1.0)):
        if bound is not None:
            inside &= sign * values >= sign * factor * bound
            axes.axvline(factor * bound, color=_LIMIT, linewidth=1.4)
    axes.hist(values[~inside], bins=edges, color=_OUTSIDE, edgecolor="white", linewidth=0.4)
    if limit.share.value is not None:
        text = f"yield {100 * limit.share.value:.1f} %"
        axes.set_title(text, loc="right", fontsize=TEXT_SIZE, color=_LIMIT)


def _influence(axes: Axes, found: Tolerance, one: OutcomeSpread) -> None:
    plain(axes)
    influence = one.influence
    if influence is None:
        axes.set_axis_off()
        return
    order = ranked(one)[:_MOST_FACTORS]
    rows = np.arange(len(order))
    total = [influence.total[place] for place in order]
    first = [influence.first_order[place] for place in order]
    width = [100.0 * (part.value or 0.0) for part in total]
    axes.barh(rows, width, height=0.7, color=_TOTAL, edgecolor=_ALONE, linewidth=0.6)
    axes.barh(rows, [100.0 * (part.value or 0.0) for part in first], height=0.4, color=_ALONE)
    for row, part in zip(rows, total, strict=True):
        if part.low is not None and part.high is not None:
            ends = [100.0 * part.low, 100.0 * part.high]
            axes.plot(ends, [row + 0.275] * 2, color=INK, linewidth=1.0)
    if one.linear is not None:
        shares = [100.0 * one.linear.shares[place] for place in order]
        axes.plot(
            shares, rows, linestyle="", marker="o", markersize=5, markerfacecolor="white",
            markeredgecolor=INK, zorder=4, clip_on=False,
        )  # fmt: skip
    axes.set_title(f"influence on {one.name}", loc="left", fontsize=TEXT_SIZE, color=INK)
    axes.set_yticks(rows, [factor_name(found, place).replace(" + ", "\n+ ") for place in order])
    axes.tick_params(axis="y", length=0, labelsize=SMALL_SIZE)
    axes.invert_yaxis()
    axes.grid(axis="x", color=GRID, linewidth=0.6)
    axes.set_axisbelow(True)
