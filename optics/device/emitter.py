"""Emitters: what makes the light, where, and with which dipole orientation."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from optics.device.spectrum import Spectrum
    from optics.device.zone import Zone

#: Share of the squared transition dipole moment in the film plane of isotropic emitters.
ISOTROPIC_FRACTION = 2 / 3
#: Change of Θ per unit of each of the three ways to state an orientation.
HORIZONTAL_PER = {
    "horizontal_fraction": 1.0,
    "vertical_fraction": -1.0,
    "order_parameter": -1 / 1.5,
}


@dataclass(frozen=True, slots=True)
class Emitter:
    """One kind of emitter in one film.

    Attributes
    ----------
    name : str
        Unique among the emitters.
    layer : str
        Name of its film.
    film_index : int
        Index of that film, counted from the bottom.
    unit : str
        Emission unit of a tandem.
    spectrum : Spectrum
        Intrinsic photon spectrum of the bulk film.
    zone : Zone
        Where its excitons form.
    closest_approach_nm : float
        A continuous zone is zero within this distance of any absorber outside its own film.
    horizontal_fraction : float
        Θ, share of the squared transition dipole moment in the film plane.
    quantum_yield : float
        Intrinsic radiative yield q in the unbounded emitter medium.
    exciton_fraction : float
        Share of the excitons on this emitter that may radiate.
    share : float
        Share of its unit's excitons formed on this emitter.
    """

    name: str
    layer: str
    film_index: int
    unit: str
    spectrum: Spectrum
    zone: Zone
    closest_approach_nm: float
    horizontal_fraction: float
    quantum_yield: float
    exciton_fraction: float
    share: float

    @property
    def vertical_fraction(self) -> float:
        """1 - Θ, share of the squared transition dipole moment along the normal."""
        return orientation_from("vertical_fraction", self.horizontal_fraction)

    @property
    def order_parameter(self) -> float:
        """S = 1 - 1.5 Θ: 1 all vertical, 0 isotropic, -0.5 all horizontal."""
        return orientation_from("order_parameter", self.horizontal_fraction)


def horizontal_fraction_from(key: str, value: float) -> float:
    """Θ from any of the three ways to state an orientation.

    Parameters
    ----------
    key : {"horizontal_fraction", "vertical_fraction", "order_parameter"}
        Which number is given.
    value : float
        Its value.

    Returns
    -------
    float
        Share of the squared transition dipole moment in the film plane.
    """
    if key == "vertical_fraction":
        return 1 - value
    if key == "order_parameter":
        return (1 - value) / 1.5
    return value


def orientation_from(key: str, horizontal_fraction: float) -> float:
    """Any of the three orientation numbers from Θ; the inverse of `horizontal_fraction_from`."""
    if key == "vertical_fraction":
        return 1 - horizontal_fraction
    if key == "order_parameter":
        return 1 - 1.5 * horizontal_fraction
    return horizontal_fraction
