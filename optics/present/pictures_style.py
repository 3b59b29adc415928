"""The look of the pictures: one color and one hatch for each destination, and a few helpers.

Colors are those of Okabe and Ito (from memory), which color-blind readers tell apart. Neighbors in
a stack of areas differ in lightness or in hatch, so that the pictures survive a gray print.
"""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING, NamedTuple

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

INK, FAINT, GRID = "0.1", "0.45", "0.88"
CHARGE = "#BBBBBB"
TITLE_SIZE, TEXT_SIZE, SMALL_SIZE = 11, 9, 8


class Look(NamedTuple):
    """How an area is filled and named."""

    short: str
    color: str
    hatch: str
    ink: str  # of text on it


#: By destination, in the order of stacking from the bottom: what leaves first.
LOOKS = {
    "air_bottom": Look("out at the bottom", "#F0E442", "", INK),
    "air_top": Look("out at the top", "#E69F00", "..", INK),
    "substrate": Look("substrate", "#56B4E9", "", INK),
    "cover": Look("cover", "#009E73", "///", "white"),
    "guided": Look("guided in the films", "#0072B2", "", "white"),
    "surface_plasmon": Look("surface plasmons", "#CC79A7", "\\\\\\", INK),
    "absorbed": Look("absorbed", "#2B2B2B", "", "white"),
}


def figure_of(width_in: float, height_in: float, title: str) -> Figure:
    """Return an empty figure with the case's title, free of any window system."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width_in, height_in), layout="constrained")
    lines = textwrap.wrap(title, max(20, int(width_in * 12.5)))
    figure.suptitle("\n".join(lines), x=0.01, ha="left", fontsize=TITLE_SIZE, color=INK)
    return figure


def caption(figure: Figure, text: str) -> None:
    """Write a line of explanation below the panels."""
    width_in = figure.get_size_inches()[0]
    lines = textwrap.wrap(text, int(width_in * 16))
    figure.supxlabel("\n".join(lines), x=0.01, ha="left", fontsize=SMALL_SIZE, color=FAINT)


def plain(axes: Axes) -> None:
    """Take away what carries no information."""
    axes.spines[["top", "right"]].set_visible(False)
    axes.tick_params(labelsize=TEXT_SIZE, color=FAINT)
    axes.xaxis.label.set_fontsize(TEXT_SIZE)
    axes.yaxis.label.set_fontsize(TEXT_SIZE)


def spread(places: list[float], gap: float, low: float, high: float) -> list[float]:
    """Move labels apart until neighbors are a gap away, in their order, within low to high.

    Parameters
    ----------
    places : list of float
        Ascending, where each label would like to be.
    gap : float
        Smallest distance; shrinks if there are too many for the room.
    low, high : float
        The room.
    """
    if len(places) > 1:
        gap = min(gap, (high - low) / (len(places) - 1))
    moved: list[float] = []
    for place in places:
        moved.append(max(place, low if not moved else moved[-1] + gap))
    limit = high
    for index in range(len(moved) - 1, -1, -1):
        moved[index] = min(moved[index], limit)
        limit = moved[index] - gap
    return moved
