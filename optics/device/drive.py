"""What drives the device and what stands outside its faces."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from optics.device.tables import Curve


@dataclass(frozen=True, slots=True, eq=False)
class ByUnit(Mapping[str, float]):
    """Numbers by emission unit: an immutable mapping that can be pickled and hashed.

    Attributes
    ----------
    pairs : tuple of (str, float)
        Unit and number, in the order in which the units first appear.
    """

    pairs: tuple[tuple[str, float], ...]

    def __getitem__(self, unit: str) -> float:
        for name, value in self.pairs:
            if name == unit:
                return value
        raise KeyError(unit)

    def __iter__(self) -> Iterator[str]:
        return (name for name, _ in self.pairs)

    def __len__(self) -> int:
        return len(self.pairs)

    def __hash__(self) -> int:
        return hash(frozenset(self.pairs))


@dataclass(frozen=True, slots=True)
class Drive:
    """Electrical side of the device.

    Attributes
    ----------
    charge_balance : mapping of unit to float
        Share of the injected charge that forms excitons, for every unit.
    current_density_mA_cm2 : float or None
        Average over the display area; None leaves absolute light quantities undefined.
    voltage_V : float or None
        None leaves efficacies undefined.
    aperture_ratio, duty : float
        Peak luminance = average / (aperture_ratio * duty).
    """

    charge_balance: ByUnit
    current_density_mA_cm2: float | None = None
    voltage_V: float | None = None
    aperture_ratio: float = 1.0
    duty: float = 1.0


@dataclass(frozen=True, slots=True)
class Side:
    """What stands outside one side; acts on angular quantities only.

    Attributes
    ----------
    filter : Curve or None
        Transmittance against wavelength_nm, the same at every angle.
    polarizer_transmittance : float
        Factor on s and p alike.
    """

    filter: Curve | None = None
    polarizer_transmittance: float = 1.0


@dataclass(frozen=True, slots=True)
class Sides:
    """The two outer sides of the device."""

    bottom: Side = field(default_factory=Side)
    top: Side = field(default_factory=Side)
