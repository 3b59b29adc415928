"""How numbers and names of the results are worded for readers."""

from __future__ import annotations

# In the order of the chain from injected charge to photons outside.
CHAIN_LABELS = {
    "unbalanced": "charge that forms no exciton",
    "dark_excitons": "excitons that may not radiate",
    "nonradiative": "nonradiative decay in the emitter",
    "air_bottom": "light out at the bottom",
    "air_top": "light out at the top",
    "substrate": "light trapped in the substrate",
    "cover": "light trapped in the cover",
    "guided": "light guided in the films",
    "surface_plasmon": "surface plasmons",
    "absorbed": "light absorbed on its way",
}

MISSING = "-"


def percent(share: float | None) -> str:
    """Word 0.2431 as ``24.31``, for columns in percent; ``0`` is exact, ``<0.01`` is not."""
    if share is None:
        return MISSING
    if share == 0.0:
        return "0"
    if abs(share) < 5e-5:
        return "<0.01"
    return f"{100 * share:.2f}"


def number(value: float | None, digits: int = 3) -> str:
    """Return a plain number with so many digits after the point."""
    return MISSING if value is None else f"{value:.{digits}f}"


def accuracy(value: float | None) -> str:
    """Return an error with one digit: nobody reads more of it."""
    return MISSING if value is None else f"{value:.0e}"
