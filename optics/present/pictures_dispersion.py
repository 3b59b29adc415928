"""Dissipated power over wavelength and effective index, with every light line named."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

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

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

_COLORMAP = "magma_r"  # light to dark, monotonous in gray too
_MAP_DECADES, _PROFILE_DECADES = 2.3, 3.3
# Lines nearer to each other than this at every wavelength share a name.
_SAME_LINE = 0.006
# The axis ends where so much of the power lies below, but not before the last light line.
_SHOWN_SHARE = 0.98
LINE_STYLES: dict[str, dict[str, Any]] = {
    "surroundings": {"linestyle": "-", "linewidth": 1.3, "color": "#0072B2"},
    "slab": {"linestyle": (0, (6, 2)), "linewidth": 1.3, "color": "#0072B2"},
    "emitter": {"linestyle": "-", "linewidth": 1.6, "color": "#009E73"},
    "film": {"linestyle": (0, (1, 1.6)), "linewidth": 1.2, "color": INK},
}
_ORDER = tuple(LINE_STYLES)
_LABEL_GAP = 0.028


class Line(NamedTuple):
    """A light line as drawn: several media whose indices are as good as the same."""

    name: str
    kind: str
    n: NDArray[np.float64]


def dispersion_figure(title: str, found: dict[str, xarray.Dataset]) -> Figure:
    """Draw the dissipated power of every emitter, side by side.

    Parameters
    ----------
    title : str
    found : dict of str to xarray.Dataset
        By emitter, from `outcome.dispersion.dispersion`.
    """
    spectral = any(data.sizes["wavelength_nm"] > 1 for data in found.values())
    figure = figure_of(0.6 + 6.4 * len(found), 7.4 if spectral else 4.6, title)
    heights = [3.0, 1.3] if spectral else [0.01, 1.3]
    panels = figure.subplots(2, len(found), squeeze=False, height_ratios=heights, sharex="col")
    for data, (upper, lower) in zip(found.values(), panels.T, strict=True):
        right = _right_end(data)
        _profile(lower, data)
        lower.set_xlim(0.0, right)
        name = f"emitter {data.attrs['emitter']}"
        if data.sizes["wavelength_nm"] > 1:
            _map(figure, upper, data)
            _name_lines(upper, data, right)
            name += ", mean over its spectrum"
            _name_curves(lower, loc="lower right", bbox_to_anchor=(1.0, 1.0))
            lower.set_title(name, loc="left", fontsize=SMALL_SIZE, color=INK)
        else:
            upper.set_axis_off()
            _name_lines(lower, data, right)
            name += f" at {float(data['wavelength_nm'][0]):g} nm"
            _name_curves(lower, loc="best", title=name, title_fontsize=SMALL_SIZE)
        lower.set_xlabel("effective index (in-plane wavevector over that in vacuum)")
    width = next(iter(found.values())).attrs["line_half_width"]
    caption(
        figure,
        "Dissipated power per effective index over the dissipated photons of the emitter. Guided "
        f"modes of lossless films have no width; they are drawn {width:g} wide at half height on "
        "either side, and everything else is blurred as much. Lines: blue surroundings, dashed "
        "blue slabs, green the emitter's film, dotted other films.",
    )
    return figure


def light_lines(data: xarray.Dataset) -> list[Line]:
    """Light lines of a dataset of `outcome.dispersion`, as `merged`."""
    values = data["light_line"].to_numpy()
    names, kinds = data["line"].to_numpy(), data["kind"].to_numpy()
    every = [
        Line(str(name), str(kind), n) for name, kind, n in zip(names, kinds, values, strict=True)
    ]
    return merged(every)


def merged(every: Sequence[Line]) -> list[Line]:
    """Merge light lines that coincide, and order them by index at the longest wavelength."""
    found: list[Line] = []
    for line in sorted(every, key=lambda one: _ORDER.index(one.kind)):
        twin = next((at for at, one in enumerate(found) if _coincide(one.n, line.n)), None)
        if twin is None:
            found.append(line)
        else:
            known = found[twin]
            found[twin] = known._replace(name=_joined(known.name, line.name))
    return sorted(found, key=_last)


def _joined(known: str, name: str) -> str:
    both = {"bottom surroundings", "top surroundings"}
    return "surroundings" if {known, name} == both else f"{known}, {name}"


def _coincide(one: NDArray[np.float64], other: NDArray[np.float64]) -> bool:
    return bool(np.all(np.abs(one - other) < _SAME_LINE))


def _last(line: Line) -> float:
    known = line.n[~np.isnan(line.n)]
    return float(known[-1])


def _right_end(data: xarray.Dataset) -> float:
    """End of the axis: beyond every light line and beyond nearly all of the power."""
    index = data["effective_index"].to_numpy()
    mean = (data["power"].sum("polarization") * data["spectrum_weight"]).sum("wavelength_nm")
    below = np.cumsum(np.maximum(mean.to_numpy(), 0.0))
    enough = index[int(np.searchsorted(below, _SHOWN_SHARE * below[-1]))]
    lines = float(np.nanmax(data["light_line"].to_numpy()))
    return float(min(index[-1], max(1.05 * enough, lines + 0.08)))


def _map(figure: Figure, axes: Axes, data: xarray.Dataset) -> None:
    from matplotlib.colors import LogNorm

    power = data["power"].sum("polarization").to_numpy()
    top = float(np.quantile(power, 0.9995))
    low = top * 10.0**-_MAP_DECADES
    image = axes.pcolormesh(
        data["effective_index"].to_numpy(), data["wavelength_nm"].to_numpy(),
        np.maximum(power, low), norm=LogNorm(low, top), cmap=_COLORMAP, shading="nearest",
        rasterized=True,
    )  # fmt: skip
    bar = figure.colorbar(image, ax=axes, pad=0.01, aspect=30, extend="both")
    bar.set_label("power per effective index", fontsize=TEXT_SIZE)
    bar.ax.tick_params(labelsize=SMALL_SIZE)
    for line in light_lines(data):
        (drawn,) = axes.plot(line.n, data["wavelength_nm"].to_numpy(), **LINE_STYLES[line.kind])
        _rim(drawn)
    plain(axes)
    axes.set_ylabel("vacuum wavelength (nm)")
    wavelength_nm = data["wavelength_nm"].to_numpy()
    axes.set_ylim(wavelength_nm[0], wavelength_nm[-1])


def _rim(line: Any) -> None:
    from matplotlib.patheffects import Normal, Stroke

    line.set_path_effects([Stroke(linewidth=2.6, foreground="white", alpha=0.7), Normal()])


def _profile(axes: Axes, data: xarray.Dataset) -> None:
    """Draw the spectral average, s and p apart."""
    index = data["effective_index"].to_numpy()
    mean = (data["power"] * data["spectrum_weight"]).sum("wavelength_nm")
    top = float(mean.max())
    styles: dict[str, dict[str, Any]] = {"s": {"linestyle": (0, (4, 1.5))}, "p": {"linestyle": "-"}}
    for polarization, style in styles.items():
        values = mean.sel(polarization=polarization).to_numpy()
        axes.plot(
            index, np.maximum(values, 1e-9), color="#D55E00" if polarization == "s" else INK,
            linewidth=1.3, label=f"{polarization} polarization", **style,
        )  # fmt: skip
    for line in light_lines(data):
        middle = float(np.nanmean(line.n))
        axes.axvline(middle, alpha=0.6, **{**LINE_STYLES[line.kind], "linewidth": 0.8})
    axes.set_yscale("log")
    axes.set_ylim(top * 10.0**-_PROFILE_DECADES, 3.0 * top)
    axes.set_ylabel("power per\neffective index")
    plain(axes)


def _name_curves(axes: Axes, **where: Any) -> None:
    axes.legend(
        frameon=False, fontsize=SMALL_SIZE, handlelength=2.6, ncols=2, borderpad=0.0,
        borderaxespad=0.3, **where,
    )  # fmt: skip


def _name_lines(axes: Axes, data: xarray.Dataset, right: float) -> None:
    """Name the light lines above the map, where they end."""
    lines = light_lines(data)
    places = [_last(line) / right for line in lines]
    for line, place, moved in zip(lines, places, spread(places, _LABEL_GAP, 0.01, 0.99),
                                  strict=True):  # fmt: skip
        axes.annotate(
            line.name, xy=(place, 1.0), xytext=(moved, 1.07), xycoords="axes fraction",
            rotation=90, ha="center", va="bottom", fontsize=SMALL_SIZE, color=INK,
            annotation_clip=False,
            arrowprops={"arrowstyle": "-", "color": FAINT, "linewidth": 0.7, "shrinkA": 0,
                        "shrinkB": 0, "relpos": (0.5, 0.0)},
        )  # fmt: skip
