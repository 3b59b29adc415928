"""Names of outcomes, such as ``external_quantum_efficiency`` or ``bottom.delta_uv_60``.

A full name says where an outcome lies: ``destinations.guided``, ``emitters.green.purcell_factor``,
``chain.device.nonradiative``, ``bottom.x_normal``. A shorter one will do where only one outcome
can be meant, and a bare name is the device's own value where the device has one.

The names stand here and not with the results, so that a case at fault can tell a study's wrong
ones with all its other faults.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import NamedTuple

from optics.device.errors import Fault, nearest

SIDES = ("bottom", "top")
DESTINATIONS = (
    "air_bottom", "air_top", "substrate", "cover", "guided", "surface_plasmon", "absorbed",
)  # fmt: skip
_DEVICE = (
    "external_quantum_efficiency",
    "external_quantum_efficiency_bottom",
    "external_quantum_efficiency_top",
    "external_quantum_efficiency_matched",
    "outcoupling_efficiency",
)
_EMITTER = (
    "external_quantum_efficiency",
    "outcoupling_efficiency",
    "radiative_efficiency",
    "purcell_factor",
    "decay_rate_ratio",
    "horizontal_fraction",
    "vertical_fraction",
    "order_parameter",
    "near_field_share",
    "lost_share",
)
_CHAIN = ("unbalanced", "dark_excitons", "nonradiative", *DESTINATIONS)
_ACCURACY = ("energy_balance", "integration_error")
#: Numbers of one side.
SIDE_NUMBERS = (
    "luminance_normal_cd_m2",
    "peak_luminance_normal_cd_m2",
    "current_efficiency_cd_A",
    "luminous_exitance_lm_m2",
    "radiant_exitance_W_m2",
    "luminous_efficacy_lm_W",
    "radiant_efficiency_W_W",
    "luminous_efficacy_of_radiation_lm_W",
    "external_quantum_efficiency",
    "lambertian_ratio",
    "half_luminance_angle_deg",
    "blue_index",
    "peak_nm_normal",
    "fwhm_nm_normal",
    "x_normal",
    "y_normal",
    "u_prime_normal",
    "v_prime_normal",
    "dominant_wavelength_nm",
    "excitation_purity",
    "correlated_color_temperature_K",
    "duv",
    "color_rendering_index",
)
#: What has a value at each angle.
SIDE_CURVES = (
    "radiance_W_sr_m2",
    "luminance_cd_m2",
    "relative_luminance",
    "x",
    "y",
    "u_prime",
    "v_prime",
    "delta_uv",
)
_AT_ANGLE = re.compile(r"(?P<base>.+)_(?P<angle>\d+(\.\d+)?)")
_MOST_LISTED = 8


class Place(NamedTuple):
    """Where an outcome lies: keys into a result, and the angle of a curve's point."""

    keys: tuple[str, ...]
    angle_deg: float | None = None


@dataclass(frozen=True, slots=True)
class OutcomeNames:
    """Outcomes of a device by full name.

    Attributes
    ----------
    plain : mapping of str to tuple of str
        Keys of every outcome that is one number, the device's own first.
    curves : mapping of str to tuple of str
        Keys of every outcome that has one value at each angle, by full name without the angle.
    """

    plain: Mapping[str, tuple[str, ...]]
    curves: Mapping[str, tuple[str, ...]]

    @staticmethod
    @lru_cache(maxsize=16)
    def of(emitters: tuple[str, ...], units: tuple[str, ...]) -> OutcomeNames:
        """Names for a device with these emitters and units of emission."""
        places: list[tuple[str, ...]] = [(key,) for key in _DEVICE]
        places += [("destinations", key) for key in DESTINATIONS]
        places += [("accuracy", key) for key in _ACCURACY]
        for emitter in emitters:
            places += [("emitters", emitter, key) for key in _EMITTER]
            places += [("emitters", emitter, "destinations", key) for key in DESTINATIONS]
        for unit in units:
            places += [("chain", unit, key) for key in _CHAIN]
        places += [(side, key) for side in SIDES for key in SIDE_NUMBERS]
        curves = [(side, key) for side in SIDES for key in SIDE_CURVES]
        return OutcomeNames(
            {".".join(keys): keys for keys in places}, {".".join(keys): keys for keys in curves}
        )

    def find(self, name: str) -> Place | Fault:
        """Place of a name, or the fault without where it stands."""
        meant = _meant(name, self.plain)
        if len(meant) == 1:
            return Place(self.plain[meant[0]])
        match = _AT_ANGLE.fullmatch(name)
        if not meant and match is not None:
            angle = float(match["angle"])
            meant = [f"{one}_{match['angle']}" for one in _meant(match["base"], self.curves)]
            if meant and angle > 90.0:
                return Fault("", "", f"{name}, {angle:g} degrees", "an angle from 0 to 90 degrees")
            if len(meant) == 1:
                return Place(self.curves[_meant(match["base"], self.curves)[0]], angle)
        if meant:
            more = ", ..." if len(meant) > _MOST_LISTED else ""
            listed = ", ".join(meant[:_MOST_LISTED]) + more
            return Fault("", "", f"{name}, which may mean several", f"one of {listed}")
        if _meant(name, self.curves):
            return Fault("", "", f"{name} without an angle", f"such as {name}_60 for 60 degrees")
        expected = "the name of an outcome"
        return Fault("", "", f"{name}, no such outcome", expected, self._near(name))

    @staticmethod
    def surely_wrong(name: str) -> bool:
        """Whether a name is at fault whatever emitters and units a device has."""
        some = OutcomeNames.of(("?",), ("?",))
        inside = name.startswith(("emitters.", "chain."))
        return not inside and isinstance(some.find(name), Fault)

    def find_all(
        self, names: Iterable[tuple[str, str]], where: str
    ) -> tuple[list[tuple[str, Place]], list[Fault]]:
        """Look up names, each with the key where it stands; places by name, and every fault.

        Faults are names that are unknown (and the nearest one), ambiguous (and what they may mean)
        or given twice.
        """
        found: list[tuple[str, Place]] = []
        faults: list[Fault] = []
        for key, name in names:
            answer = self.find(name)
            if isinstance(answer, Fault):
                faults.append(Fault(where, key, answer.found, answer.expected, answer.near))
                continue
            if any(other == name for other, _ in found):
                faults.append(Fault(where, key, f"{name} again", "each outcome once"))
            found.append((name, answer))
        return found, faults

    def _near(self, name: str) -> str | None:
        """Return the known name that looks most like a misspelled one, at its length."""
        match = _AT_ANGLE.fullmatch(name)
        angled = [f"{one}_{match['angle']}" for one in self.curves] if match else []
        full = [*self.plain, *angled]
        last = [one.rpartition(".")[2] for one in full]
        return nearest(name, full if "." in name else [*last, *full])


def _meant(name: str, known: Mapping[str, object]) -> list[str]:
    """Full names that a name may stand for: itself, or all that end in it."""
    return [name] if name in known else [one for one in known if one.endswith(f".{name}")]
