"""Pictures of the device in light from outside."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from optics.device.case import Case
    from optics.outcome.ambient import Ambient

#: What can be drawn; the first if nothing is said. Nothing heavy loads with these names.
PICTURES = ("spectra", "map", "contrast")
#: Angles of the spectra, where none are chosen.
CHOSEN_DEG = (0.0, 60.0)
_COLORMAP = "cividis"  # even in lightness, so that it reads in gray and by color-blind eyes
# (part, color, hatch), from the bottom of the stack of areas; they differ in gray too.
_AREAS = (
    ("reflectance", "reflected", "#56B4E9", ""),
    ("transmittance", "passed on", "#F0E442", ".."),
    ("absorptance", "absorbed", "#4D4D4D", ""),
)
_DASHES: tuple[Any, ...] = ((0, (5, 2)), (0, (2, 1.5)), (0, (7, 2, 1.5, 2)), (0, (1, 1)))


def draw_case(
    picture: str | None, case: Case, outcome: Ambient, angles_deg: Sequence[float] | None
) -> Figure:
    """Compute a case at angles close enough for smooth curves, and draw one picture.

    Parameters
    ----------
    picture : one of `PICTURES`, or None for the first
    case : Case
    outcome : Ambient
        What was asked for: its wavelengths and illuminance are taken.
    angles_deg : sequence of float or None
        Of spectra; None for `CHOSEN_DEG`.
    """
    from optics.outcome.ambient import ambient

    chosen = CHOSEN_DEG if angles_deg is None else tuple(sorted(angles_deg))
    every = chosen if picture in (None, "spectra") else sorted({*range(91), *chosen})
    light = outcome.illuminance_lx if picture == "contrast" else None
    return draw(picture or PICTURES[0], ambient(case, light, every, outcome.wavelength_nm))


def draw(picture: str, outcome: Ambient) -> Figure:
    """Draw one picture of a device in light from outside.

    Parameters
    ----------
    picture : {"spectra", "map", "contrast"}
        Where light of the first angle goes against wavelength, with the reflectance at the
        other angles; reflectance over wavelength and angle; contrast against angle.
    outcome : Ambient
        At ascending angles.

    Raises
    ------
    ValueError
        If there is no such picture, or no contrast to draw.
    """
    if picture not in PICTURES:
        raise ValueError(f"picture: found {picture!r}; expected one of {', '.join(PICTURES)}")
    if picture == "contrast":
        return _contrast_figure(outcome)
    from optics.present.pictures_style import INK, TEXT_SIZE, caption, figure_of, plain

    names = [name for name, side in outcome.sides.items() if side is not None]
    figure = figure_of(max(6.4, 4.6 * len(names)), 4.2, outcome.title)
    panels = figure.subplots(1, len(names), squeeze=False, sharey=True)[0]
    data = outcome.to_dataset().mean("polarization")
    for axes, name in zip(panels, names, strict=True):
        axes.set_title(f"lit from the {name}", loc="left", fontsize=TEXT_SIZE, color=INK)
        here = data.sel(side=name)
        if picture == "map":
            image = _map(axes, here)
        else:
            _areas(axes, here)
        axes.set_xlabel("vacuum wavelength (nm)")
        axes.margins(x=0.0)
        plain(axes)
    if picture == "map":
        panels[0].set_ylabel("angle from the normal (\N{DEGREE SIGN})")
        bar = figure.colorbar(image, ax=panels, pad=0.02, aspect=30)
        bar.set_label("reflectance", fontsize=TEXT_SIZE)
        caption(figure, "Reflectance of films and slabs, s and p averaged.")
        return figure
    panels[0].set_ylabel("share of the incident light")
    handles, labels = panels[0].get_legend_handles_labels()
    figure.legend(handles, labels, loc="outside right upper", frameon=False, fontsize=TEXT_SIZE)
    first = f"{outcome.angle_deg[0]:g}\N{DEGREE SIGN}"
    caption(figure, f"Films and slabs at {first}, s and p averaged, filter and polarizer left out.")
    return figure


def _areas(axes: Axes, here: xarray.Dataset) -> None:
    """Stack the parts at the first angle; reflectance at the others as lines."""
    nm = here["wavelength_nm"].to_numpy()
    low = 0.0 * nm
    for part, label, color, hatch in _AREAS:
        high = low + here[part].isel(angle_deg=0).to_numpy()
        axes.fill_between(
            nm, low, high, facecolor=color, hatch=hatch, edgecolor="0.2", linewidth=0.4, label=label
        )
        low = high
    for place, angle in enumerate(here["angle_deg"].to_numpy()[1:]):
        curve = here["reflectance"].sel(angle_deg=angle)
        # White below black: seen on light and on dark areas.
        axes.plot(nm, curve, color="white", linewidth=3.0)
        axes.plot(
            nm, curve, color="black", linewidth=1.3, linestyle=_DASHES[place % len(_DASHES)],
            label=f"reflected at {angle:g}\N{DEGREE SIGN}",
        )  # fmt: skip
    axes.set_ylim(0.0, 1.0)


def _map(axes: Axes, here: xarray.Dataset) -> Any:
    return axes.pcolormesh(
        here["wavelength_nm"], here["angle_deg"], here["reflectance"].to_numpy(), cmap=_COLORMAP,
        shading="gouraud", rasterized=True, vmin=0.0, vmax=1.0,
    )  # fmt: skip


def _contrast_figure(outcome: Ambient) -> Figure:
    """Draw the contrast of every side that shines against the angle of view."""
    from optics.present.pictures_style import TEXT_SIZE, caption, figure_of, plain

    curves = {
        name: side.contrast_ratio
        for name, side in outcome.sides.items()
        if side is not None and side.contrast_ratio is not None
    }
    if not curves:
        raise ValueError("picture contrast: found no illuminance; expected one in lux")
    figure = figure_of(6.4, 4.2, outcome.title)
    axes = figure.subplots()
    for (name, curve), color, dash in zip(
        curves.items(), ("#0072B2", "#D55E00"), ("-", (0, (5, 2))), strict=False
    ):
        known = [(a, c) for a, c in zip(outcome.angle_deg, curve, strict=True) if c is not None]
        axes.plot(*zip(*known, strict=True), color=color, linestyle=dash, linewidth=1.8, label=name)
    axes.set_xlabel("angle of view from the normal (\N{DEGREE SIGN})")
    axes.set_ylabel("contrast ratio")
    axes.set_xlim(0.0, 90.0)
    axes.set_xticks(range(0, 91, 15))
    axes.set_ylim(bottom=1.0)
    axes.legend(frameon=False, fontsize=TEXT_SIZE, title="side", title_fontsize=TEXT_SIZE)
    plain(axes)
    caption(
        figure,
        f"Own over reflected light, plus 1. The surround gives {outcome.illuminance_lx:g} lx.",
    )
    return figure
