"""Pictures of modes: dispersion with shares, fields across the films, absorption by film."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from optics.present.pictures_indices import MODE_COLORS, dispersion_figure
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
from optics.present.wording import percent

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from optics.device.case import Case
    from optics.outcome.film_absorption import FilmAbsorption
    from optics.outcome.modes_lines import ModeLine
    from optics.outcome.modes_result import EmitterModes, Modes

#: What `draw` can draw.
PICTURES = ("dispersion", "fields", "absorption")

_MOST_FIELDS = 6
_PLACES = {
    "air_bottom": ("leaves, bottom", LOOKS["air_bottom"]),
    "air_top": ("leaves, top", LOOKS["air_top"]),
    "substrate": ("stays in the substrate", LOOKS["substrate"]),
    "cover": ("stays in the cover", LOOKS["cover"]),
    "substrate_absorbed": ("absorbed in the substrate", LOOKS["substrate"]),
    "cover_absorbed": ("absorbed in the cover", LOOKS["cover"]),
    "surroundings_bottom": ("enters the surroundings, bottom", LOOKS["absorbed"]),
    "surroundings_top": ("enters the surroundings, top", LOOKS["absorbed"]),
    "guided": ("stays guided", LOOKS["guided"]),
}


def draw(picture: str, case: Case, found: Modes) -> Figure:
    """Draw one picture of modes.

    Parameters
    ----------
    picture : {"dispersion", "fields", "absorption"}
        Effective index against wavelength, line width by share; |E|^2 over the films with their
        indices behind; where all generated light ends.
    case : Case
    found : Modes
        Of this case.

    Raises
    ------
    ValueError
        If there is no such picture.
    """
    if picture == "dispersion":
        return dispersion_figure(case, found)
    if picture == "fields":
        return fields_figure(found)
    if picture == "absorption":
        return absorption_figure(found)
    raise ValueError(f"picture: found {picture!r}; expected one of {', '.join(PICTURES)}")


def fields_figure(found: Modes) -> Figure:
    """Draw |E|^2 of the strongest modes over the films of the stack."""
    emitter = found.emitters[0]
    ranked = [line for line in emitter.lines if not line.leaky]
    ranked.sort(key=lambda line: -(line.overall_share or 0.0))
    lines = [*ranked[:_MOST_FIELDS], *(line for line in emitter.lines if line.leaky)]
    lines = lines[:_MOST_FIELDS]
    columns = 2 if len(lines) > 1 else 1
    rows = max(1, math.ceil(len(lines) / columns))
    figure = figure_of(5.2 * columns, 0.8 + 2.5 * rows, found.title)
    panels = figure.subplots(rows, columns, squeeze=False).ravel()
    for axes in panels[len(lines) :]:
        axes.set_axis_off()
    for axes, line in zip(panels, lines, strict=False):
        _draw_field(axes, emitter, line)
    caption(
        figure,
        f"|E|^2 of the modes that take most, emitter {emitter.name}, at the wavelength that "
        "adds most to each; over its largest value (of leaky modes: in the films). Steps behind: "
        "real index in the film plane.",
    )
    return figure


def _draw_field(axes: Axes, emitter: EmitterModes, line: ModeLine) -> None:
    strongest = line.strongest
    wavelength_nm = float(line.wavelength_nm[strongest])
    data = emitter.field_profile(line.name, wavelength_nm)
    height = data["height_nm"].to_numpy()
    behind = axes.twinx()
    behind.fill_between(height, data["index"].to_numpy(), color=GRID, linewidth=0)
    behind.set_ylim(0.0, 1.15 * float(data["index"].max()))
    behind.tick_params(labelsize=SMALL_SIZE, colors=FAINT)
    behind.spines[["top"]].set_visible(False)
    behind.set_ylabel("index", fontsize=SMALL_SIZE, color=FAINT)
    axes.set_zorder(behind.get_zorder() + 1)
    axes.patch.set_visible(False)
    axes.plot(
        height, data["electric"].to_numpy(), color=MODE_COLORS[line.kind[strongest]], linewidth=1.8
    )
    faces = data.attrs["faces_nm"]
    for face in faces:
        axes.axvline(face, color="white", linewidth=0.8, zorder=0)
    for name, low, high in zip(emitter.media[1:-1], faces[:-1], faces[1:], strict=True):
        if high - low > 0.045 * (height[-1] - height[0]):
            axes.text(
                0.5 * (low + high), 1.13, name, rotation=90, fontsize=6.5, color=FAINT,
                ha="center", va="top",
            )  # fmt: skip
    axes.set_xlim(height[0], height[-1])
    axes.set_ylim(0.0, 1.15)
    index = line.effective_index[strongest]
    kind = line.kind[strongest]
    if line.direction[strongest] == "backward":
        kind += ", backward"
    words = line.name if line.leaky else f"{line.name} ({kind}), {percent(line.overall_share)} %"
    axes.set_title(
        f"{words}, {wavelength_nm:g} nm, "
        f"n = {index.real:.3f}{index.imag:+.3f}i",
        fontsize=SMALL_SIZE, loc="left",
    )  # fmt: skip
    axes.set_xlabel("height above the lowest film's face (nm)")
    plain(axes)


def absorption_figure(found: Modes) -> Figure:
    """Draw where all generated light ends, in the order of the stack."""
    parts: list[tuple[str, FilmAbsorption]] = [(one.name, one.absorption) for one in found.emitters]
    if found.absorption is not None and len(parts) > 1:
        parts.insert(0, ("device", found.absorption))
    rows = _rows(found.emitters)
    figure = figure_of(2.4 + 3.4 * len(parts), 1.4 + 0.3 * len(rows), found.title)
    panels = figure.subplots(1, len(parts), squeeze=False, sharey=True)[0]
    for axes, (name, part) in zip(panels, parts, strict=True):
        shares = [100.0 * {**part.films, **part.elsewhere}[key] for key, _ in rows]
        for place, ((key, _), share) in enumerate(zip(rows, shares, strict=True)):
            look = _PLACES[key][1] if key in _PLACES else LOOKS["absorbed"]
            axes.barh(place, share, color=look.color, edgecolor=INK, linewidth=0.5, height=0.72)
            axes.text(
                share + 0.01 * max(shares), place, percent(0.01 * share), va="center",
                fontsize=SMALL_SIZE, color=INK,
            )  # fmt: skip
        axes.set_xlim(0.0, 1.18 * max(shares))
        axes.set_xlabel("share of the photons (%)")
        axes.set_title(
            f"{name}, sum less 1: {part.closure_error:+.0e}", fontsize=TEXT_SIZE, loc="left"
        )
        plain(axes)
    panels[0].set_yticks(range(len(rows)), [label for _, label in rows], fontsize=TEXT_SIZE)
    caption(
        figure,
        "From the bottom of the stack to its top. Films: everything absorbed in them, light on "
        "its way out, guided light, plasmons and near field.",
    )
    return figure


def _rows(emitters: Sequence[EmitterModes]) -> list[tuple[str, str]]:
    """Places that some light reaches, with labels, in the order of the stack."""
    below = ("air_bottom", "surroundings_bottom", "substrate", "substrate_absorbed")
    above = ("cover_absorbed", "cover", "surroundings_top", "air_top", "guided")
    every = [{**one.absorption.films, **one.absorption.elsewhere} for one in emitters]
    films = tuple(emitters[0].absorption.films)
    labels = {**{name: f"absorbed in {name}" for name in films},
              **{name: label for name, (label, _) in _PLACES.items()}}  # fmt: skip
    order = (*below, *films, *above)
    return [(name, labels[name]) for name in order if any(one[name] != 0.0 for one in every)]
