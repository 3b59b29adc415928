"""Pictures of a sweep: curves over one number, maps over two, small multiples beyond."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.present.pictures_style import (
    FAINT,
    GRID,
    INK,
    LOOKS,
    SMALL_SIZE,
    TEXT_SIZE,
    caption,
    figure_of,
    plain,
)
from optics.present.sweep import best_point, digits, leading, spot, with_unit

if TYPE_CHECKING:
    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

# Lines differ in dashes as well as in color; colors of Okabe and Ito (from memory).
_COLORS = ("#000000", "#D55E00", "#0072B2", "#009E73", "#CC79A7", "#E69F00", "#56B4E9")
_DASHES = ("-", "--", "-.", ":", (0, (5, 1, 1, 1, 1, 1)), (0, (3, 3)), (0, (8, 2)))
#: Outcomes, by the last part of their name, that pictures show in percent.
SHARES = {
    *LOOKS, "unbalanced", "dark_excitons", "nonradiative", "outcoupling_efficiency",
    "external_quantum_efficiency", "external_quantum_efficiency_bottom",
    "external_quantum_efficiency_top", "external_quantum_efficiency_matched",
    "radiative_efficiency", "near_field_share", "lost_share",
}  # fmt: skip
_LEVELS = 11
_COLUMNS = 3
_MOST_MULTIPLES = 5  # along either direction
_MAP_INCHES = (3.5, 3.1)
# Values that differ by less than this share of their size are one.
_FLAT = 1e-9


def sweep_figure(found: xarray.Dataset, shown: Sequence[str] = ()) -> Figure:
    """Draw a sweep; numbers with a single value take no direction.

    Parameters
    ----------
    found : xarray.Dataset
        From `optics.sweep`.
    shown : sequence of str
        Outcomes to draw; all if empty. Small multiples show the first one only.
    """
    if shown:
        found = found[list(shown)]
    single = [dim for dim, size in found.sizes.items() if size == 1]
    fixed = spot(found, {str(dim): float(found[dim][0]) for dim in single})
    found = found.squeeze(single, drop=True)
    found = found.sortby([str(dim) for dim in found.sizes])
    if len(found.sizes) < 2:
        figure, said = _curves(found)
    elif len(found.sizes) == 2:
        figure, said = _maps(found)
    else:
        figure, said = _multiples(found)
    where = f" Fixed: {fixed}." if fixed else ""
    caption(figure, said + where)
    return figure


def _label(found: xarray.Dataset, path: str) -> str:
    return with_unit(path, found[path].attrs["units"])


def _is_share(data: xarray.DataArray) -> bool:
    return str(data.attrs["long_name"]).rpartition(".")[2] in SHARES


def _scaled(data: xarray.DataArray) -> tuple[NDArray[np.float64], str]:
    """Values as they are drawn, and their unit; shares in percent."""
    values = np.asarray(data.to_numpy(), dtype=np.float64)
    if _is_share(data):
        return 100.0 * values, "%"
    unit = data.attrs["units"]
    return values, "" if unit == "1" else unit


def _curves(found: xarray.Dataset) -> tuple[Figure, str]:
    """One panel for shares, one for each other unit, one for each other ratio."""
    groups: dict[str, list[str]] = {}
    for name, data in found.data_vars.items():
        unit = _scaled(data)[1]
        groups.setdefault(unit or str(name), []).append(str(name))
    axis = next((str(dim) for dim in found.sizes), None)
    x = np.zeros(1) if axis is None else found[axis].to_numpy()
    figure = figure_of(8.0, 1.4 + 2.3 * len(groups), found.attrs["title"])
    panels = figure.subplots(len(groups), 1, sharex=True, squeeze=False)[:, 0]
    first = leading(found)
    best = None if first is None or axis is None else best_point(found[first])
    for axes, (unit, names) in zip(panels, groups.items(), strict=True):
        for place, name in enumerate(names):
            values = np.atleast_1d(_scaled(found[name])[0])
            axes.plot(
                x, values, label=name, marker="o" if x.size < 30 else "", **_line(name, place)
            )
        if best is not None and axis is not None:
            axes.axvline(best[axis], color=FAINT, linewidth=0.8, linestyle=(0, (2, 2)))
        axes.grid(color=GRID, linewidth=0.6)
        axes.margins(x=0.02)
        axes.set_ylabel("" if unit in names else unit)
        if len(names) == 1:
            axes.set_title(names[0], loc="left", fontsize=TEXT_SIZE, color=INK)
        else:
            axes.legend(
                fontsize=SMALL_SIZE, frameon=False, loc="center left", bbox_to_anchor=(1.0, 0.5),
                handlelength=3.2,
            )  # fmt: skip
        plain(axes)
    panels[-1].set_xlabel("" if axis is None else _label(found, axis))
    if best is None or axis is None or first is None:
        return figure, "One value at each point of the sweep."
    value, unit = _scaled(found[first].sel(best))
    told = f"{digits(float(value))}{_spaced(unit)}"
    return figure, f"Dashed line: best {first}, {told}, at {spot(found, best)}."


def _line(name: str, place: int) -> dict[str, Any]:
    look = LOOKS.get(name.removeprefix("destinations."))
    color = _COLORS[place % len(_COLORS)] if look is None else look.color
    return {
        "color": color, "linestyle": _DASHES[place % len(_DASHES)], "linewidth": 1.7,
        "markersize": 3.0,
    }  # fmt: skip


def _maps(found: xarray.Dataset) -> tuple[Figure, str]:
    """One map for each outcome, the best point of the leading one marked on all."""
    names = [str(name) for name in found.data_vars]
    columns = min(len(names), _COLUMNS)
    rows = math.ceil(len(names) / columns)
    # A single map gets a width that its title and caption fit in.
    width = max(_MAP_INCHES[0] * columns, 5.0)
    figure = figure_of(width, 1.2 + _MAP_INCHES[1] * rows, found.attrs["title"])
    grid = figure.subplots(rows, columns, sharex=True, sharey=True, squeeze=False)
    first = leading(found)
    best = None if first is None else best_point(found[first])
    for axes, name in zip(grid.flat, names, strict=False):
        values, unit = _scaled(found[name])
        _map(figure, [axes], [found[name].copy(data=values)], unit)
        axes.set_title(f"{name}{f' ({unit})' if unit else ''}", fontsize=TEXT_SIZE, color=INK)
        if best is not None:
            _star(axes, found, best)
    for axes in list(grid.flat)[len(names) :]:
        axes.remove()
    _name_axes(figure, found)
    if best is None or first is None:
        return figure, "Contours of each outcome."
    value, unit = _scaled(found[first].sel(best))
    told = f"{digits(float(value))}{_spaced(unit)}"
    return figure, f"Star: best {first}, {told}, at {spot(found, best)}."


def _multiples(found: xarray.Dataset) -> tuple[Figure, str]:
    """Maps over the first two numbers for each value of the third and fourth, one scale for all.

    Numbers beyond the fourth stay at the best point.
    """
    name = leading(found) or str(next(iter(found.data_vars)))
    data = found[name]
    best = best_point(data)
    start = best or {str(dim): float(data[dim][0]) for dim in data.dims}
    beyond = {str(dim): start[str(dim)] for dim in data.dims[4:]}
    data = data.sel(beyond)
    across = str(data.dims[2])
    down = str(data.dims[3]) if data.ndim > 3 else None
    columns = _chosen(data[across].to_numpy(), start[across])
    rows = [None] if down is None else _chosen(data[down].to_numpy(), start[down])
    figure = figure_of(
        1.2 + 2.3 * max(len(columns), 2), 1.4 + 2.4 * len(rows), found.attrs["title"]
    )
    grid = figure.subplots(len(rows), len(columns), sharex=True, sharey=True, squeeze=False)
    values, unit = _scaled(data)
    data = data.copy(data=values)
    panels: list[xarray.DataArray] = []
    for i, row in enumerate(rows):
        for j, column in enumerate(columns):
            at = {across: column} | ({} if down is None or row is None else {down: row})
            panels.append(data.sel(at))
            grid[i, j].set_title(
                spot(found, at).replace(", ", "\n"), fontsize=SMALL_SIZE, color=INK
            )
            if best is not None and all(best[path] == value for path, value in at.items()):
                _star(grid[i, j], found, best)
    _map(figure, list(grid.flat), panels, f"{name}{f' ({unit})' if unit else ''}")
    _name_axes(figure, found)
    said = [f"Contours of {name}."]
    if best is not None:
        top = digits(float(data.sel({str(dim): best[str(dim)] for dim in data.dims})))
        said.append(f"Star: the best, {top}{_spaced(unit)}, at {spot(found, best)}.")
    if beyond:
        said.append(f"All at {spot(found, beyond)}.")
    if len(columns) < data.sizes[across] or (down and len(rows) < data.sizes[down]):
        said.append("Not every value has a map of its own.")
    return figure, " ".join(said)


def _chosen(values: NDArray[np.float64], kept: float) -> list[float]:
    """At most so many values, spread evenly, the one to be kept among them."""
    if values.size <= _MOST_MULTIPLES:
        return [float(value) for value in values]
    places = np.linspace(0, values.size - 1, _MOST_MULTIPLES).round().astype(int)
    home = int(np.abs(values - kept).argmin())
    places[int(np.abs(places - home).argmin())] = home
    return [float(values[place]) for place in np.unique(places)]


def _map(figure: Figure, panels: list[Axes], data: list[xarray.DataArray], unit: str) -> None:
    """Contours of several maps on one scale, with one color bar."""
    every = np.concatenate([one.to_numpy().ravel() for one in data])
    every = every[np.isfinite(every)]
    for axes in panels:
        plain(axes)
    if every.size == 0:
        for axes in panels:
            axes.text(0.5, 0.5, "undefined", transform=axes.transAxes, ha="center", color=FAINT)
        return
    if np.ptp(every) <= _FLAT * max(float(np.abs(every).max()), 1e-300):
        for axes in panels:
            text = f"{digits(float(every[0]))} everywhere"
            axes.text(0.5, 0.5, text, transform=axes.transAxes, ha="center", color=INK)
        return
    from matplotlib.ticker import MaxNLocator

    levels = MaxNLocator(_LEVELS).tick_values(float(every.min()), float(every.max()))
    for axes, one in zip(panels, data, strict=True):
        x, y = (one[dim].to_numpy() for dim in one.dims)
        values = np.ma.masked_invalid(one.to_numpy().T)
        filled = axes.contourf(x, y, values, levels=levels, cmap="cividis")
        lines = axes.contour(x, y, values, levels=levels, colors="white", linewidths=0.5)
        if len(panels) == 1:
            axes.clabel(lines, fontsize=6, fmt="%g")
    bar = figure.colorbar(filled, ax=panels, shrink=0.9)
    bar.ax.tick_params(labelsize=SMALL_SIZE)
    if len(panels) > 1:
        bar.set_label(unit, fontsize=TEXT_SIZE)


def _star(axes: Axes, found: xarray.Dataset, best: dict[str, float]) -> None:
    x, y = list(best)[:2]
    axes.plot(
        best[x], best[y], marker="*", markersize=13, markerfacecolor="white", markeredgecolor=INK,
        linestyle="", clip_on=False, zorder=5,
    )  # fmt: skip


def _name_axes(figure: Figure, found: xarray.Dataset) -> None:
    x, y = (str(dim) for dim in list(found.sizes)[:2])
    for axes in figure.axes:
        place = axes.get_subplotspec()
        if (
            place is None
            or not hasattr(axes, "get_shared_x_axes")
            or axes.get_label() == "<colorbar>"
        ):
            continue
        if place.is_last_row():
            axes.set_xlabel(_label(found, x))
        if place.is_first_col():
            axes.set_ylabel(_label(found, y))


def _spaced(unit: str) -> str:
    return f" {unit}" if unit else ""
