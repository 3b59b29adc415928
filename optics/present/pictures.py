"""Pictures of a light budget: which there are, and how each comes about."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from pathlib import Path

    from matplotlib.figure import Figure

    from optics.device.case import Case
    from optics.outcome.budget import Budget
    from optics.study.sensitivity import Sensitivity

#: What `draw` can draw, and the formats of `write`. Nothing heavy loads with these names.
SENSITIVITY = "sensitivity"
PICTURES = ("chain", "wavelength", "position", "dispersion", SENSITIVITY)
SUFFIXES = (".png", ".svg", ".pdf")


def draw(
    picture: str,
    case: Case,
    outcome: Budget,
    tolerance: float,
    sensitivity: Sensitivity | None = None,
) -> Figure:
    """Draw one picture of a light budget.

    Parameters
    ----------
    picture : {"chain", "wavelength", "position", "dispersion", "sensitivity"}
        Chain from charge to photons outside; destinations against wavelength; destinations
        against the emitter's position in its film; dissipated power over wavelength and
        effective index; what a nanometer of each film does.
    case : Case
    outcome : Budget
        Of this case.
    tolerance : float
        For what has to be computed anew.
    sensitivity : Sensitivity, optional
        Of this case; for its picture, which else computes it.

    Raises
    ------
    ValueError
        If there is no such picture.
    """
    names = [emitter.name for emitter in case.emitters]
    if picture == "chain":
        from optics.present.pictures_chain import chain_figure

        return chain_figure(outcome.to_dict())
    if picture == "wavelength":
        from optics.outcome.resolved import shares_by_wavelength
        from optics.present.pictures_areas import wavelength_figure

        return wavelength_figure(
            case.title, {name: shares_by_wavelength(case, outcome, name) for name in names}
        )
    if picture == "position":
        from optics.outcome.resolved import shares_by_position
        from optics.present.pictures_areas import position_figure

        return position_figure(
            case.title, {name: shares_by_position(case, name, tolerance) for name in names}
        )
    if picture == "dispersion":
        from optics.outcome.dispersion import dispersion
        from optics.present.pictures_dispersion import dispersion_figure

        return dispersion_figure(
            case.title, {name: dispersion(case, outcome, name) for name in names}
        )
    if picture == SENSITIVITY:
        from optics.present.pictures_sensitivity import sensitivity_figure
        from optics.study import sensitivity as study

        found = sensitivity or study.sensitivity(case, tolerance)
        return sensitivity_figure(case.title, found.to_dict())
    raise ValueError(f"picture: found {picture!r}; expected one of {', '.join(PICTURES)}")


def write(figure: Figure, path: Path) -> None:
    """Write a picture; the suffix picks the format, and the same numbers give the same file."""
    from optics.present.plots import save

    save(figure, path)
