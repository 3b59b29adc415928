"""Directions in which a case may change, for derivatives: numbers by address, and some more.

A direction is a set of steps that are taken together, each at unit rate.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

from optics.device import laws
from optics.device.address import ORIENTATION_KEYS
from optics.device.material_rates import has_rates

if TYPE_CHECKING:
    from optics.device.case import Case
    from optics.device.materials import Material
    from optics.device.stack import Stack


@dataclass(frozen=True, slots=True)
class NumberStep:
    """A number of the case, by its dotted address.

    Attributes
    ----------
    path : str
    """

    path: str

    @property
    def keys(self) -> tuple[str, ...]:
        """Parts of the address."""
        return tuple(self.path.split("."))


@dataclass(frozen=True, slots=True)
class IndexStep:
    """Index of one film at all wavelengths, whatever its material; other films keep theirs.

    Attributes
    ----------
    layer : str
        Name of the film.
    step : complex
        Change of n + ik, in the film plane and along the normal: 1 for n, 1j for k.
    """

    layer: str
    step: complex


@dataclass(frozen=True, slots=True)
class ZoneStep:
    """An emitter's zone, moved by 1 nm toward the top as it is.

    Attributes
    ----------
    emitter : str
        Name of the emitter.
    """

    emitter: str


Step = NumberStep | IndexStep | ZoneStep
Direction = tuple[Step, ...]

_EMITTER_NUMBERS = frozenset(
    {*ORIENTATION_KEYS, "quantum_yield", "exciton_fraction", "share", "closest_approach_nm"}
)
_ZONE_NUMBERS = frozenset({"at", "at_nm", "width_nm", "decay_nm"})
_SPECTRUM_NUMBERS = frozenset({"peak_nm", "fwhm_nm"})
_DRIVE_NUMBERS = frozenset(
    {"charge_balance", "current_density_mA_cm2", "voltage_V", "aperture_ratio", "duty"}
)


def why_not_differentiable(case: Case, path: str) -> str | None:
    """Why outcomes have no derivative with respect to a number; None if they have one.

    Parameters
    ----------
    case : Case
    path : str
        A dotted address.

    Raises
    ------
    CaseError
        If there is no such address.

    Notes
    -----
    Where k of a film next to an emitter starts to differ from 0, the closest approach sets in
    and outcomes jump; their derivative is that at the k of the case, with its zone. In the same
    way a film of zero thickness stays what it is for the zone.
    """
    value = case.value(path)
    if isinstance(value, bool) or not isinstance(value, int | float):
        return "it is no number"
    section, *rest = path.split(".")
    if section == "wavelength":
        return "it changes the wavelengths of the case"
    if section == "materials":
        return _of_material(case, rest)
    if section == "emitters":
        return _of_emitter(rest)
    is_known = {
        "layers": rest[1:] == ["thickness_nm"],
        "drive": rest[0] in _DRIVE_NUMBERS,
        "sides": rest[1:] == ["polarizer_transmittance"],
        "substrate": rest == ["thickness_mm"],
        "cover": rest == ["thickness_mm"],
    }
    return None if is_known.get(section, False) else _UNKNOWN


_UNKNOWN = "its derivative is not known"


def _of_material(case: Case, keys: list[str]) -> str | None:
    name, *rest = keys
    if rest[0] == "mix":
        return "fractions of a mixture sum to 1, so that none changes alone"
    found = next((one for one in _materials(case.stack) if one.name == name), None)
    if found is None or has_rates(found, rest):  # what nothing uses changes nothing
        return None
    return _UNKNOWN


def _of_emitter(keys: list[str]) -> str | None:
    rest = keys[1:]
    if rest == ["spectrum", "line_nm"]:
        return "it changes the wavelengths of the case"
    known = (
        (len(rest) == 1 and rest[0] in _EMITTER_NUMBERS)
        or (rest[0] == "zone" and rest[-1] in _ZONE_NUMBERS)
        or (rest[0] == "spectrum" and rest[-1] in _SPECTRUM_NUMBERS)
    )
    return None if known else _UNKNOWN


def _materials(stack: Stack) -> Iterator[Material]:
    """Every material of a stack, and those that they are made of."""
    slabs = [slab.material for slab in (stack.substrate, stack.cover) if slab is not None]
    waiting = [film.material for film in stack.films] + slabs + [stack.bottom, stack.top]
    while waiting:
        material = waiting.pop()
        yield material
        if isinstance(material.law, laws.Pair):
            waiting += [material.law.ordinary, material.law.extraordinary]
        elif isinstance(material.law, laws.Mix):
            waiting += material.law.components


__all__ = [
    "Direction",
    "IndexStep",
    "NumberStep",
    "Step",
    "ZoneStep",
    "why_not_differentiable",
]
