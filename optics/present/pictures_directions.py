"""Luminance, spectra and their map against angle, as pictures."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any, NamedTuple

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

if TYPE_CHECKING:
    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from optics.outcome.angular import Angular

    Floats = NDArray[np.float64]

CURVE = "#0072B2"
_PANEL_IN = 4.6
# Sequential and even in lightness, so that it reads in gray and by color-blind eyes.
_COLORMAP = "cividis"
_DASHES: tuple[Any, ...] = ("-", (0, (6, 2)), (0, (7, 2, 1.5, 2)), (0, (2, 1.5)), (0, (10, 3)),
                            (0, (1, 1)))  # fmt: skip


def _panels(
    outcome: Angular, names: Sequence[str], height_in: float, **kind: Any
) -> tuple[Figure, Any]:
    """One panel for each side, side by side; its name above it where there are several."""
    figure = figure_of(max(6.4, _PANEL_IN * len(names)), height_in, outcome.title)
    panels = figure.subplots(1, len(names), squeeze=False, subplot_kw=kind)[0]
    for axes, name in zip(panels, names, strict=True):
        axes.set_title(f"side {name}", loc="left", fontsize=TEXT_SIZE, color=INK)
    return figure, panels


class Curve(NamedTuple):
    """One quantity against angle."""

    angle_deg: Floats  # ascending
    value: Floats


def curve_of(outcome: Angular, side: str, key: str) -> Curve:
    """Read a curve of one side; NaN for null."""
    seen = outcome.sides[side]
    angle = np.array(seen.angle_deg)
    order = np.argsort(angle)
    values = [np.nan if one is None else one for one in getattr(seen, key)]
    return Curve(angle[order], np.array(values)[order])


def luminance_figure(outcome: Angular, names: Sequence[str]) -> Figure:
    """Draw luminance in polar form, next to that of a Lambertian."""
    from matplotlib.ticker import MaxNLocator

    figure, panels = _panels(outcome, names, 4.2, projection="polar")
    for axes, name in zip(panels, names, strict=True):
        curve = curve_of(outcome, name, "relative_luminance")
        known = np.isfinite(curve.value)
        angle, value = np.deg2rad(curve.angle_deg[known]), curve.value[known]
        axes.set_theta_zero_location("N")
        axes.set_theta_direction(-1)
        axes.set_thetamin(-90)
        axes.set_thetamax(90)
        both = np.linspace(-0.5 * np.pi, 0.5 * np.pi, 181)
        axes.plot(both, np.ones_like(both), color=INK, linestyle=(0, (5, 2)), linewidth=1.1,
                  label="Lambertian")  # fmt: skip
        axes.plot(
            np.concatenate([-angle[::-1], angle]), np.concatenate([value[::-1], value]),
            color=CURVE, linewidth=1.9, label="luminance",
        )  # fmt: skip
        top = 1.1 * max(1.0, float(value.max(initial=0.0)))
        axes.set_ylim(0.0, top)
        axes.set_xticks(np.deg2rad(np.arange(-90, 91, 30)))
        axes.yaxis.set_major_locator(MaxNLocator(4))
        axes.grid(color=GRID, linewidth=0.7)
        axes.tick_params(labelsize=SMALL_SIZE)
        axes.set_rlabel_position(-90)
        axes.legend(frameon=False, fontsize=SMALL_SIZE, loc="lower center",
                    bbox_to_anchor=(0.5, 0.06), ncols=2)  # fmt: skip
        if not known.any():
            axes.text(0.0, 0.5 * top, "no light along the normal", ha="center")
    caption(
        figure,
        "Luminance over that along the normal, against the angle from the normal in the medium "
        "outside.",
    )
    return figure


def _spectral(outcome: Angular) -> tuple[xarray.Dataset, str, str]:
    """Spectra, the kind of their names, and the unit in words."""
    data = outcome.spectral
    absolute = "spectral_radiance_W_sr_m2_nm" in data
    per = "m2" if absolute else "A"
    return data, per, "m\N{SUPERSCRIPT TWO}" if absolute else "A"


def spectra_figure(outcome: Angular, names: Sequence[str], chosen: Sequence[float]) -> Figure:
    """Draw spectra at chosen angles."""
    data, per, area = _spectral(outcome)
    figure, panels = _panels(outcome, names, 4.4)
    colors = _shades(len(chosen))
    for axes, name in zip(panels, names, strict=True):
        for place, angle in enumerate(chosen):
            here = data.sel(side=name, angle_deg=angle).sum("polarization")
            style = {"color": colors[place], "linestyle": _DASHES[place % len(_DASHES)],
                     "linewidth": 1.6, "label": f"{angle:g}\N{DEGREE SIGN}"}  # fmt: skip
            values = here[f"spectral_radiance_W_sr_{per}_nm"]
            if values.size > 1:
                axes.plot(here["wavelength_nm"], values, **style)
            else:
                axes.plot(here["wavelength_nm"], values, marker="o", **style)
        axes.set_ylim(bottom=0.0)
        axes.set_xlabel("vacuum wavelength (nm)")
        axes.set_ylabel(f"spectral radiance (W/(sr {area} nm))")
        plain(axes)
        _stems(axes, data, name, per, area, chosen, colors)
        axes.legend(frameon=False, fontsize=SMALL_SIZE, handlelength=3.2, title="angle",
                    title_fontsize=SMALL_SIZE)  # fmt: skip
    text = "Spectral radiance, s and p together, at chosen angles."
    if data["wavelength_nm"].size == 1:
        text = "Radiance at the single wavelength of the case, W/(sr " + area + "), not per nm."
    if "line_nm" in data:
        text += " Dots: spectral lines, on the scale to the right."
    caption(figure, text)
    return figure


def _stems(
    axes: Axes, data: xarray.Dataset, side: str, per: str, area: str,
    chosen: Sequence[float], colors: Sequence[Any],
) -> None:  # fmt: skip
    """Draw spectral lines on a scale of their own, which is not per nm."""
    if "line_nm" not in data:
        return
    right = axes.twinx()
    for place, angle in enumerate(chosen):
        values = data[f"line_radiance_W_sr_{per}"].sel(side=side, angle_deg=angle)
        total = values.sum("polarization")
        right.vlines(data["line_nm"], 0.0, total, color=colors[place], linewidth=1.0)
        right.plot(data["line_nm"], total, "o", color=colors[place], markersize=4)
    right.set_ylim(bottom=0.0)
    right.set_ylabel(f"radiance of lines (W/(sr {area}))", fontsize=TEXT_SIZE)
    right.tick_params(labelsize=TEXT_SIZE, color=FAINT)
    right.spines["top"].set_visible(False)


def _shades(count: int) -> list[Any]:
    """Colors in order of lightness, without the lightest."""
    from matplotlib import colormaps

    return [colormaps[_COLORMAP](x) for x in np.linspace(0.0, 0.82, max(count, 1))]


def map_figure(outcome: Angular, names: Sequence[str]) -> Figure:
    """Draw spectral radiance over wavelength and angle."""
    data, per, area = _spectral(outcome)
    data = data.sortby("angle_deg")
    figure, panels = _panels(outcome, names, 4.4)
    values = data[f"spectral_radiance_W_sr_{per}_nm"].sum("polarization")
    for axes, name in zip(panels, names, strict=True):
        here = values.sel(side=name)
        # One wavelength has no neighbors to shade toward.
        shading = "gouraud" if min(here.shape) > 1 else "nearest"
        image = axes.pcolormesh(
            here["wavelength_nm"], here["angle_deg"], here.to_numpy(), cmap=_COLORMAP,
            shading=shading, rasterized=True, vmin=0.0,
        )  # fmt: skip
        bar = figure.colorbar(image, ax=axes, pad=0.02, aspect=30)
        bar.set_label(f"spectral radiance (W/(sr {area} nm))", fontsize=TEXT_SIZE)
        bar.ax.tick_params(labelsize=SMALL_SIZE)
        _contours(axes, here)
        for line in data["line_nm"].to_numpy() if "line_nm" in data else []:
            axes.axvline(line, color="white", linestyle=(0, (1, 2)), linewidth=1.2)
        axes.set_xlabel("vacuum wavelength (nm)")
        axes.set_ylabel("angle from the normal (\N{DEGREE SIGN})")
        axes.set_yticks(np.arange(0, 91, 15))
        axes.set_ylim(0.0, 90.0)
        plain(axes)
    text = "Spectral radiance, s and p together. White curves: half of the largest value, "
    text += "and a tenth of it (dashed)."
    if "line_nm" in data:
        text += " Dotted: where spectral lines lie, which have no value per nm."
    caption(figure, text)
    return figure


def _contours(axes: Axes, here: xarray.DataArray) -> None:
    """Draw where the radiance is a half and a tenth of the largest."""
    top = float(here.max())
    if min(here.shape) < 2 or not top > 0.0:
        return
    axes.contour(
        here["wavelength_nm"], here["angle_deg"], here.to_numpy(), levels=[0.1 * top, 0.5 * top],
        colors="white", linewidths=[0.8, 1.2], linestyles=["--", "-"],
    )  # fmt: skip
