"""Effective indices of modes against wavelength, with every light line named."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from optics.outcome.dispersion import light_lines
from optics.outcome.resolved import emitter_called
from optics.present.pictures_dispersion import LINE_STYLES, Line, merged
from optics.present.pictures_style import (
    FAINT,
    INK,
    SMALL_SIZE,
    TEXT_SIZE,
    caption,
    figure_of,
    plain,
    spread,
)
from optics.present.wording import percent

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.outcome.modes_lines import ModeLine
    from optics.outcome.modes_result import EmitterModes, Modes

MODE_COLORS = {
    "guided": "#0072B2",
    "plasmon": "#CC79A7",
    "overdamped": "#BFBFBF",
    "leaky": "#E69F00",
}
_THICKEST, _THINNEST = 9.0, 1.1
_FULL_SHARE = 0.3  # share at which a line has its full width
_PALE = 0.45  # of the color of modes below the outer light line
_PIECES = 12  # of a line between two wavelengths
_FAR = 1.25  # modes beyond this many times the largest light line have an axis of their own
_FAR_HEIGHT = 0.32
_LABEL_GAP = 0.033
_ROOM = 0.02  # between axes and labels, of the axes' width


def dispersion_figure(case: Case, found: Modes) -> Figure:
    """Draw the effective index of every mode against wavelength.

    Parameters
    ----------
    case : Case
    found : Modes
        Of this case.
    """
    shown = {one.name: [line for line in one.lines if set(line.kind) != {"overdamped"}]
             for one in found.emitters}  # fmt: skip
    media = {one.name: _light_lines(case, one) for one in found.emitters}
    top = _FAR * max(float(np.nanmax(line.n)) for lines in media.values() for line in lines)
    far = any(_highest(line) > top for lines in shown.values() for line in lines)
    figure = figure_of(
        0.6 + (8.2 if len(found.emitters) == 1 else 6.6) * len(found.emitters),
        7.6 if far else 6.2,
        found.title,
    )
    panels = figure.subplots(
        2, len(found.emitters), squeeze=False, sharex="col",
        height_ratios=[_FAR_HEIGHT if far else 0.01, 1.0],
    )  # fmt: skip
    for (upper, lower), emitter in zip(panels.T, found.emitters, strict=True):
        lines = shown[emitter.name]
        low = [line for line in lines if not _highest(line) > top]
        high = [line for line in lines if _highest(line) > top]
        _draw_panel(lower, emitter, low, media[emitter.name], _LABEL_GAP)
        if high:
            _draw_panel(upper, emitter, high, [], _LABEL_GAP / _FAR_HEIGHT)
        else:
            upper.set_axis_off()
        # In place of a label at the axis, which the names leave no room for.
        (upper if high else lower).set_title(
            f"emitter {emitter.name}: effective index, real part", fontsize=TEXT_SIZE, loc="left"
        )
        lower.set_xlabel("vacuum wavelength (nm)")
    caption(
        figure,
        "Width: share of the emitter's photons at that wavelength; paler below the outer light "
        "line. Plain TE, white dashes TM. Blue guided, purple plasmons, orange leaky modes, "
        "which have no share. Thin lines, named at the right: index of surroundings (blue), slabs "
        "(dashed blue), the emitter's film (green), other films (dotted).",
    )
    return figure


def _highest(line: ModeLine) -> float:
    return float(line.effective_index.real.max())


def _light_lines(case: Case, emitter: EmitterModes) -> list[Line]:
    known = light_lines(case, emitter_called(case, emitter.name), emitter.wavelength_nm)
    return merged([Line(*line) for line in known])


def _draw_panel(
    axes: Axes,
    emitter: EmitterModes,
    lines: Sequence[ModeLine],
    media: Sequence[Line],
    gap: float,
) -> None:
    """Draw modes and light lines; gap : between labels, of the panel's height."""
    wavelength_nm = emitter.wavelength_nm
    one = wavelength_nm.size == 1
    left, right = float(wavelength_nm[0]), float(wavelength_nm[-1])
    if one:
        left, right = left - 0.25, right + 1.75
        axes.set_xticks(wavelength_nm)
    axes.set_xlim(left, right)
    values = [line.effective_index.real for line in lines] + [line.n for line in media]
    low = min(float(np.nanmin(part)) for part in values)
    high = max(float(np.nanmax(part)) for part in values)
    margin = 0.05 * max(high - low, 0.1)
    axes.set_ylim(low - margin, high + margin)
    for medium in media:
        x = np.array([left, right]) if one else wavelength_nm
        axes.plot(x, np.broadcast_to(medium.n, x.shape), zorder=1, **_thin(medium))
    for line in sorted(lines, key=lambda one: -float(np.nan_to_num(one.share).max())):
        _draw_line(axes, line)
    names = [(_label(line), float(line.wavelength_nm[0]), _first(line)) for line in lines]
    _name(axes, names, left, gap)
    _name(axes, [(medium.name, right, _end(medium)) for medium in media], right, gap)
    plain(axes)
    # Threads to the names pass behind the numbers of the axis.
    for label in axes.get_yticklabels():
        label.set_bbox({"facecolor": "white", "edgecolor": "none", "pad": 1.0})


def _thin(medium: Line) -> dict[str, Any]:
    return {**LINE_STYLES[medium.kind], "linewidth": 0.9, "alpha": 0.8}


def _first(line: ModeLine) -> float:
    return float(line.effective_index[0].real)


def _end(medium: Line) -> float:
    return float(medium.n[~np.isnan(medium.n)][-1])


def _label(line: ModeLine) -> str:
    if line.overall_share is None:
        return line.name
    return f"{line.name}  {percent(line.overall_share)} %"


def _draw_line(axes: Axes, line: ModeLine) -> None:
    """Draw a ribbon as wide as the share, in pieces so short that its width has no steps."""
    from matplotlib.collections import LineCollection
    from matplotlib.patches import Rectangle

    share = np.nan_to_num(line.share)
    width = _THINNEST + (_THICKEST - _THINNEST) * np.sqrt(np.clip(share / _FULL_SHARE, 0, 1))
    colors = [_color(kind, place) for kind, place in zip(line.kind, line.destination, strict=True)]
    x, y = line.wavelength_nm, line.effective_index.real
    if x.size == 1:
        marker = "o" if line.polarization == "s" else "D"
        axes.plot(x, y, marker, color=colors[0], markersize=float(2 + width[0]), zorder=3)
        return
    at = np.arange(x.size)
    fine = np.linspace(0.0, x.size - 1.0, _PIECES * (x.size - 1) + 1)
    points = np.column_stack([np.interp(fine, at, x), np.interp(fine, at, y)])
    middle = 0.5 * (fine[:-1] + fine[1:])
    ribbon = LineCollection(
        list(np.stack([points[:-1], points[1:]], axis=1)),
        linewidths=np.interp(middle, at, width),
        colors=[colors[i] for i in np.rint(middle).astype(int).tolist()],
        capstyle="round", zorder=3,
    )  # fmt: skip
    axes.add_collection(ribbon, autolim=False)
    # Round ends close the seams between pieces; the outermost two are cut off again.
    low, high = axes.get_ylim()
    window = Rectangle((x[0], low), x[-1] - x[0], high - low, transform=axes.transData)
    ribbon.set_clip_path(window)
    if line.polarization == "p":
        thin = float(np.clip(0.3 * width.mean(), 0.9, 1.8))
        axes.plot(x, y, color="white", linewidth=thin, linestyle=(0, (3, 3)), zorder=4)


def _color(kind: str, place: str) -> tuple[float, float, float]:
    """Color of a mode: toward white rather than transparent, so that pieces may overlap."""
    from matplotlib.colors import to_rgb

    part = _PALE if place == "below light line" and kind != "leaky" else 1.0
    red, green, blue = (1.0 - part * (1.0 - value) for value in to_rgb(MODE_COLORS[kind]))
    return red, green, blue


def _name(axes: Axes, labels: list[tuple[str, float, float]], side: float, gap: float) -> None:
    """Write names beside the axes, apart from each other, with a thread to what each names."""
    labels = sorted(labels, key=lambda label: label[2])
    low, high = axes.get_ylim()
    left, right = axes.get_xlim()
    at_left = side == left
    way = -1.0 if at_left else 1.0
    text_at = side + way * (0.11 if at_left else _ROOM) * (right - left)
    places: NDArray[np.float64] = np.array([label[2] for label in labels])
    room = gap * (high - low)
    for (name, start, y), moved in zip(
        labels, spread(places.tolist(), room, low, high), strict=True
    ):
        axes.annotate(
            name, xy=(start, y), xytext=(text_at, moved), annotation_clip=False,
            fontsize=SMALL_SIZE, color=INK, ha="right" if at_left else "left", va="center",
            zorder=0.9,
            arrowprops={"arrowstyle": "-", "color": FAINT, "linewidth": 0.6, "shrinkA": 1,
                        "shrinkB": 0, "relpos": (1.0 if at_left else 0.0, 0.5)},
        )  # fmt: skip
