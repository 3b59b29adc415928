"""Destinations as stacked areas against wavelength or against the emitter's position."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.present.pictures_style import (
    FAINT,
    INK,
    LOOKS,
    SMALL_SIZE,
    TEXT_SIZE,
    caption,
    figure_of,
    plain,
    spread,
)

if TYPE_CHECKING:
    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

# A label goes into its area where that is thicker than this share of the axis ...
_ROOM = 0.06
_AMPLE = 0.11  # more room than this makes a label no better
# ... over this share of the width for each letter.
_LETTER = 0.0135
# Areas that are nowhere thicker than this are too thin to be seen, let alone named.
_VISIBLE = 1e-3
_GAP = 0.055  # between labels in the margin


class Band(NamedTuple):
    """One area of a stack."""

    key: str
    low: NDArray[np.float64]
    high: NDArray[np.float64]


def wavelength_figure(title: str, found: dict[str, xarray.Dataset]) -> Figure:
    """Draw where light goes against wavelength, below the emission spectrum.

    Parameters
    ----------
    title : str
    found : dict of str to xarray.Dataset
        By emitter, from `outcome.resolved.shares_by_wavelength`.
    """
    figure = figure_of(7.0, 1.2 + 3.9 * len(found), title)
    panels = figure.subplots(
        2 * len(found), 1, squeeze=False, height_ratios=[1.0, 3.2] * len(found)
    )[:, 0]
    for (name, data), upper, lower in zip(found.items(), panels[::2], panels[1::2], strict=True):
        x = data["wavelength_nm"].to_numpy()
        own = data["spectrum"].to_numpy()
        inside = own * data["dissipated"].to_numpy()
        out = inside * (data["air_bottom"] + data["air_top"]).to_numpy()
        _strip(
            upper, x, data["spectrum"].to_numpy(), "the emitter by itself", out, "light that leaves"
        )
        upper.set_ylabel("photons\nper nm")
        _stack(lower, x, bands(data))
        lower.set_xlabel("vacuum wavelength (nm)")
        upper.set_title(f"emitter {name}", loc="left", fontsize=TEXT_SIZE, color=INK)
    caption(
        figure,
        "Shares of the photons dissipated at each wavelength, averaged over the exciton zone and "
        "the dipoles' orientation. Spectra: photons per nm over the largest value of the emitter "
        "by itself; what leaves is drawn larger by the factor stated.",
    )
    return figure


def position_figure(title: str, found: dict[str, xarray.Dataset]) -> Figure:
    """Draw where light goes against the emitter's position in its film, below the exciton zone.

    Parameters
    ----------
    title : str
    found : dict of str to xarray.Dataset
        By emitter, from `outcome.resolved.shares_by_position`.
    """
    figure = figure_of(7.0, 1.2 + 3.9 * len(found), title)
    panels = figure.subplots(
        2 * len(found), 1, squeeze=False, height_ratios=[1.0, 3.2] * len(found)
    )[:, 0]
    for (name, data), upper, lower in zip(found.items(), panels[::2], panels[1::2], strict=True):
        x = data["position_nm"].to_numpy()
        thickness = data.attrs["thickness_nm"]
        if "zone" in data:
            zone, out = data["zone"].to_numpy(), data["leaving"].to_numpy()
            _strip(upper, x, zone, "excitons form", out, "light that leaves, by origin")
        else:
            _point(upper, data.attrs["point_nm"])
        upper.set_ylabel("density")
        _stack(lower, x, bands(data))
        for axes in (upper, lower):
            axes.set_xlim(0.0, thickness)
        layer = data.attrs["layer"]
        lower.set_xlabel(f"position in {layer} (nm from its bottom face, {thickness:g} nm thick)")
        upper.set_title(f"emitter {name}", loc="left", fontsize=TEXT_SIZE, color=INK)
    caption(
        figure,
        "Shares of the photons dissipated at each position, averaged over the spectrum and the "
        "dipoles' orientation. Densities are relative to their largest value.",
    )
    return figure


def bands(data: xarray.Dataset) -> list[Band]:
    """Stack the destinations, what leaves at the bottom."""
    shares = np.stack([data[key].to_numpy() for key in LOOKS])
    edges = np.vstack([np.zeros(shares.shape[1]), np.cumsum(shares, axis=0)])
    return [Band(key, edges[place], edges[place + 1]) for place, key in enumerate(LOOKS)]


def _stack(axes: Axes, x: NDArray[np.float64], stack: Sequence[Band]) -> None:
    if x.size == 1:
        axes.set_xticks(x)
        x = np.array([x[0] - 0.5, x[0] + 0.5])
        stack = [Band(one.key, np.repeat(one.low, 2), np.repeat(one.high, 2)) for one in stack]
    margin: list[Band] = []
    for band in stack:
        look = LOOKS[band.key]
        axes.fill_between(
            x, 100 * band.low, 100 * band.high, facecolor=look.color, hatch=look.hatch,
            edgecolor="white", linewidth=0.0,
        )  # fmt: skip
        axes.plot(x, 100 * band.high, color="white", linewidth=0.9)
        if (band.high - band.low).max() < _VISIBLE:
            continue
        if not _label_inside(axes, x, band):
            margin.append(band)
    _label_outside(axes, x, margin)
    plain(axes)
    axes.set_xlim(x[0], x[-1])
    axes.set_ylim(0.0, 100.0)
    axes.set_ylabel("share of the photons (%)")


def _label_inside(axes: Axes, x: NDArray[np.float64], band: Band) -> bool:
    """Name an area within it; False where it is too thin for that."""
    look = LOOKS[band.key]
    even = np.linspace(x[0], x[-1], 201)
    low, high = np.interp(even, x, band.low), np.interp(even, x, band.high)
    half = int(0.5 * _LETTER * len(look.short) * even.size) + 4
    best, where = 0.0, 0
    # From the middle outward: a place near it is as good as a roomier one at the rim.
    for place in sorted(range(half, even.size - half), key=lambda at: abs(at - even.size // 2)):
        part = slice(place - half, place + half + 1)
        room = min(float(high[part].min() - low[part].max()), _AMPLE)
        if room > best:
            best, where = room, place
    if best < _ROOM:
        return False
    part = slice(where - half, where + half + 1)
    middle = 50 * float(high[part].min() + low[part].max())
    ground = {"facecolor": look.color, "edgecolor": "none", "pad": 1.2} if look.hatch else None
    axes.text(
        even[where], middle, look.short, ha="center", va="center",
        fontsize=TEXT_SIZE, color=look.ink, bbox=ground,
    )  # fmt: skip
    return True


def _label_outside(axes: Axes, x: NDArray[np.float64], stack: Sequence[Band]) -> None:
    """Name thin areas in the right margin, each with a line that leads to it."""
    places = [0.5 * float(band.low[-1] + band.high[-1]) for band in stack]
    for band, place, moved in zip(stack, places, spread(places, _GAP, 0.02, 0.98), strict=True):
        axes.annotate(
            LOOKS[band.key].short,
            xy=(1.0, place), xytext=(1.035, moved), xycoords="axes fraction",
            va="center", ha="left", fontsize=SMALL_SIZE, color=INK, annotation_clip=False,
            arrowprops={"arrowstyle": "-", "color": FAINT, "linewidth": 0.7, "shrinkA": 1,
                        "shrinkB": 0},
        )  # fmt: skip


def _strip(
    axes: Axes,
    x: NDArray[np.float64],
    filled: NDArray[np.float64],
    filled_name: str,
    line: NDArray[np.float64],
    line_name: str,
) -> None:
    """Draw a filled curve and a line, each named next to its largest value."""
    if x.size == 1:
        _point(axes, float(x[0]))
        return
    axes.fill_between(x, filled, facecolor="0.85", edgecolor="0.6", linewidth=0.8)
    factor = 1.0 / line.max() if line.max() > 0.0 else 1.0
    axes.plot(x, factor * line, color=INK, linewidth=1.4)
    if abs(factor - 1.0) > 1e-6:
        line_name += f" (\N{MULTIPLICATION SIGN}{factor:.3g})"
    plain(axes)
    axes.set_xlim(x[0], x[-1])
    axes.set_ylim(0.0, 1.1)
    axes.set_yticks([0, 1])
    axes.tick_params(labelbottom=False)
    _legend_strip(axes, filled_name, line_name)


def _legend_strip(axes: Axes, filled_name: str, line_name: str) -> None:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    axes.legend(
        [Patch(facecolor="0.85", edgecolor="0.6"), Line2D([], [], color=INK, linewidth=1.4)],
        [filled_name, line_name],
        frameon=False, fontsize=SMALL_SIZE, handlelength=1.6, loc="lower right",
        bbox_to_anchor=(1.0, 1.02), ncols=2, borderpad=0.0, borderaxespad=0.2,
    )  # fmt: skip


def _point(axes: Axes, at: float) -> None:
    """Mark a zone or a spectrum that is one point."""
    axes.axvline(at, color=INK, linewidth=1.4)
    plain(axes)
    axes.set_yticks([])
    axes.tick_params(labelbottom=False)
    axes.annotate(
        f"all at {at:g} nm", xy=(at, 0.5), xycoords=("data", "axes fraction"),
        xytext=(5, 0), textcoords="offset points", va="center", fontsize=SMALL_SIZE, color=INK,
    )  # fmt: skip
