"""Pictures of optical constants and spectra: for screen and paper, in color and in gray."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import cycle
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.present.citation import short_source
from optics.present.constants import EmissionSpectrum, Measurement, Shown

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

#: Formats of pictures.
SUFFIXES = (".png", ".svg", ".pdf")

# Colors of Okabe and Ito (from memory), which color-blind readers tell apart; the order steps
# through lightness, and the dashes tell curves apart in gray.
_COLORS = ("#000000", "#D55E00", "#0072B2", "#009E73", "#CC79A7", "#E69F00")
_DASHES = ("-", (0, (6, 2)), (0, (2, 1.5)), (0, (7, 2, 1.5, 2)), (0, (1, 1)), (0, (10, 3)))
_FEW_POINTS = 60
# Ratios of largest to smallest value from which an axis is logarithmic: n of metals, any k.
_LOG_FROM_N, _LOG_FROM_K = 10.0, 300.0


def draw(shown: Shown) -> Figure:
    """Draw optical constants, n above k, or an emission spectrum."""
    if isinstance(shown, EmissionSpectrum):
        return spectrum_figure(shown)
    return constants_figure(shown)


def save(figure: Figure, path: Path) -> None:
    """Write a picture; the suffix picks the format."""
    from matplotlib import rc_context

    kind = path.suffix.lower().removeprefix(".")
    # Without a date and with fixed identifiers the same numbers give the same file.
    undated: dict[str, Any] = {"pdf": {"CreationDate": None}, "svg": {"Date": None}}
    with rc_context({"svg.hashsalt": "outcouple"}):
        figure.savefig(path, format=kind, dpi=150, metadata=undated.get(kind))


def constants_figure(shown: tuple[Measurement, ...]) -> Figure:
    """Draw n and k of one material or of several measurements of it against wavelength.

    Parameters
    ----------
    shown : tuple of Measurement
        At least one.
    """
    figure, (upper, lower) = _figure(rows=2)
    styles = _styles()
    for one in shown:
        for axis in one.axes:
            label = one.name if axis.axis == "isotropic" else f"{one.name}, {axis.axis}"
            if one.aliases and len(shown) > 1:
                label += f" ({one.aliases[0]})"
            style = next(styles)
            if axis.wavelength_nm.size <= _FEW_POINTS:
                style |= {"marker": "o", "markersize": 3.0}
            upper.plot(axis.wavelength_nm, axis.n, label=label, **style)
            lower.plot(axis.wavelength_nm, np.where(axis.k > 0.0, axis.k, np.nan), **style)
    upper.set_ylabel("refractive index n")
    lower.set_ylabel("extinction coefficient k")
    lower.set_xlabel("vacuum wavelength (nm)")
    upper.margins(y=0.08)
    indices = np.concatenate([axis.n for one in shown for axis in one.axes])
    if indices.max() > _LOG_FROM_N * indices.min() > 0.0:
        upper.set_yscale("log")
    _scale_k(lower, shown)
    upper.legend(frameon=False, fontsize=9, handlelength=4.0)
    upper.set_title(_title(shown), loc="left", fontsize=11)
    if len(shown) == 1 and shown[0].source:
        figure.supxlabel(short_source(shown[0].source), fontsize=8, x=0.99, ha="right")
    return figure


def spectrum_figure(one: EmissionSpectrum) -> Figure:
    """Draw an emission spectrum relative to its peak."""
    figure, (axes,) = _figure(rows=1)
    axes.plot(one.wavelength_nm, one.value / one.value.max(), **next(_styles()))
    axes.set_xlabel("vacuum wavelength (nm)")
    axes.set_ylabel(f"{one.quantity} per nm, relative to the peak")
    axes.set_ylim(0.0, 1.05)
    axes.set_title(f"emission spectrum {one.name} ({one.source})", loc="left", fontsize=11)
    return figure


def _figure(rows: int) -> tuple[Figure, list[Axes]]:
    """Return a figure with its panels one below the other, free of any window system."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7.0, 3.0 + 1.6 * rows), layout="constrained")
    panels = list(figure.subplots(rows, 1, sharex=True, squeeze=False)[:, 0])
    for axes in panels:
        axes.grid(color="0.88", linewidth=0.6)
        axes.spines[["top", "right"]].set_visible(False)
        axes.margins(x=0.02)
    return figure, panels


def _styles() -> Iterator[dict[str, Any]]:
    for color, dash in zip(cycle(_COLORS), cycle(_DASHES), strict=False):
        yield {"color": color, "linestyle": dash, "linewidth": 1.6}


def _scale_k(axes: Axes, shown: tuple[Measurement, ...]) -> None:
    """Choose a linear or a logarithmic axis for k, and say where k = 0 leaves a curve out."""
    every = np.concatenate([axis.k for one in shown for axis in one.axes])
    positive = every[every > 0.0]
    if positive.size == 0:
        axes.set_yticks([])
        axes.text(0.5, 0.5, "k = 0 in the table", transform=axes.transAxes, ha="center")
        return
    if positive.max() > _LOG_FROM_K * positive.min():
        axes.set_yscale("log")
    else:
        axes.set_ylim(0.0, 1.08 * float(positive.max()))
    if positive.size < every.size:
        axes.text(
            0.99, 0.96, "k = 0 is not drawn", transform=axes.transAxes, ha="right", va="top",
            fontsize=8, color="0.3",
        )  # fmt: skip


def _title(shown: tuple[Measurement, ...]) -> str:
    first = shown[0]
    return f"{first.title or first.name}: optical constants"
