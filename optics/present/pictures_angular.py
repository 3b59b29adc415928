"""Pictures of emission against angle: which there are, and how each comes about."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from optics.device.case import Case
    from optics.outcome.angular import Angular

#: What `draw` can draw; the first if nothing is said. Nothing heavy loads with these names.
PICTURES = ("luminance", "spectra", "color", "map")
#: Angles of spectra and of marks on color paths, where none are chosen.
CHOSEN_DEG = (0.0, 15.0, 30.0, 45.0, 60.0, 75.0)


def draw_case(picture: str, case: Case, angles_deg: Sequence[float] | None) -> Figure:
    """Compute a case at angles close enough for smooth curves, and draw one picture.

    Parameters
    ----------
    picture : one of `PICTURES`
    case : Case
    angles_deg : sequence of float or None
        Of spectra and of marks; None for `CHOSEN_DEG`.
    """
    from optics.outcome.angular import angular

    chosen = CHOSEN_DEG if angles_deg is None else tuple(sorted(angles_deg))
    every = sorted({*(0.5 * step for step in range(181)), *chosen})
    return draw(picture, angular(case, every), chosen)


def draw(picture: str, outcome: Angular, chosen_deg: Sequence[float] = CHOSEN_DEG) -> Figure:
    """Draw one picture of emission against angle.

    Parameters
    ----------
    picture : {"luminance", "spectra", "color", "map"}
        Luminance in polar form against a Lambertian; spectra at chosen angles; path of the
        color on CIE 1976 u', v'; spectral radiance over wavelength and angle.
    outcome : Angular
        At ascending angles close enough for smooth curves.
    chosen_deg : sequence of float
        Angles, among those of the outcome, of spectra and of marks.

    Raises
    ------
    ValueError
        If there is no such picture.
    """
    from optics.present.angular import sides_with_light

    if picture not in PICTURES:
        raise ValueError(f"picture: found {picture!r}; expected one of {', '.join(PICTURES)}")
    out = {side: one.external_quantum_efficiency for side, one in outcome.sides.items()}
    names = sides_with_light(out)
    chosen = [float(angle) for angle in chosen_deg]
    if not names:
        from optics.present.pictures_style import INK, figure_of

        figure = figure_of(6.4, 2.0, outcome.title)
        figure.text(0.5, 0.5, "no light on either side", ha="center", color=INK)
        return figure
    if picture == "color":
        from optics.present.pictures_color import color_figure

        return color_figure(outcome, names, chosen)
    from optics.present import pictures_directions as directions

    if picture == "luminance":
        return directions.luminance_figure(outcome, names)
    if picture == "spectra":
        return directions.spectra_figure(outcome, names, chosen)
    return directions.map_figure(outcome, names)
