"""Outcomes by name, such as ``external_quantum_efficiency`` or ``bottom.delta_uv_60``.

A full name says where an outcome lies: ``destinations.guided``, ``emitters.green.purcell_factor``,
``chain.device.nonradiative``, ``bottom.x_normal``. A shorter one will do where only one outcome
can be meant, and a bare name is the device's own value where the device has one.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, fields, replace
from typing import TYPE_CHECKING, Any

from optics.device.errors import CaseError, Fault, nearest

if TYPE_CHECKING:
    from optics.device.case import Case
    from optics.outcome.budget import Budget
    from optics.outcome.side import SideAngular
    from optics.outcome.view import View

SIDES = ("bottom", "top")
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
_CHAIN = ("unbalanced", "dark_excitons", "nonradiative")
_ACCURACY = ("energy_balance", "integration_error")
_AT_ANGLE = re.compile(r"(?P<base>.+)_(?P<angle>\d+(\.\d+)?)")
_MOST_LISTED = 8


@dataclass(frozen=True, slots=True)
class Outcome:
    """One number of a result.

    Attributes
    ----------
    name : str
        As it was asked for.
    keys : tuple of str
        Where it lies; the first is a side where it needs emission against angle.
    angle_deg : float or None
        Of a curve's point.
    """

    name: str
    keys: tuple[str, ...]
    angle_deg: float | None = None

    @property
    def needs_angular(self) -> bool:
        """Whether emission against angle must be computed for it."""
        return self.keys[0] in SIDES

    @property
    def units(self) -> str:
        """Unit; 1 for shares and ratios."""
        from optics.outcome.spectra import unit_of

        return unit_of(self.keys[-1])


def default_outcomes() -> tuple[str, ...]:
    """Names of what a study shows if nothing was asked for: the EQE and all destinations."""
    return ("external_quantum_efficiency", *(f"destinations.{name}" for name in _destinations()))


def find_outcomes(case: Case, names: Mapping[str, str]) -> tuple[Outcome, ...]:
    """Look up outcomes by their names, without computing anything.

    Parameters
    ----------
    case : Case
    names : mapping of str to str
        Name by the key in the case file where it stands, for messages.

    Raises
    ------
    CaseError
        With every name that is unknown (and the nearest one), ambiguous (and what it may mean)
        or given twice.
    """
    plain, curves = _single_numbers(case), _curves()
    found: list[Outcome] = []
    faults: list[Fault] = []
    for key, name in names.items():
        answer = _find(name, plain, curves)
        if isinstance(answer, Outcome):
            if any(other.name == name for other in found):
                faults.append(Fault(case.label, key, f"{name} again", "each outcome once"))
            found.append(answer)
        else:
            faults.append(replace(answer, where=case.label, key=key))
    if faults:
        raise CaseError(faults)
    return tuple(found)


def angles_needed(outcomes: Iterable[Outcome]) -> tuple[float, ...]:
    """Ascending angles in degrees at which curves are asked for."""
    return tuple(sorted({one.angle_deg for one in outcomes if one.angle_deg is not None}))


def read_outcome(
    outcome: Outcome,
    budget: Budget | Mapping[str, Any],
    sides: Mapping[str, SideAngular | View] | None = None,
) -> Any:
    """Take one outcome from a result: a float, None where it is undefined.

    From results whose numbers carry rates, `optics.outcome.dual.Dual`, it takes such a number.

    Parameters
    ----------
    outcome : Outcome
    budget : Budget or mapping
        The result, or some of its fields by name.
    sides : mapping, optional
        ``Angular.sides``, or views by name of the side. Needed if `outcome.needs_angular`;
        computed at its angle among others.
    """
    from optics.outcome.dual import plain

    first, *rest = outcome.keys
    if outcome.needs_angular:
        assert sides is not None, outcome.name
        from optics.outcome.side import side_number

        side = sides[first]
        value: Any = side_number(side, rest[0])
        if outcome.angle_deg is not None and value is not None:
            value = value[side.angle_deg.index(outcome.angle_deg)]
    elif first == "emitters":
        emitter = next(one for one in _inside(budget, ["emitters"]) if one.name == rest[0])
        value = _inside(emitter, rest[1:])
    elif first == "chain":
        value = next(unit for unit in _inside(budget, ["chain"]) if unit["unit"] == rest[0])[
            rest[1]
        ]
    else:
        value = _inside(budget, outcome.keys)
    return None if value is None else plain(value)


def _inside(result: Any, keys: Sequence[str]) -> Any:
    for key in keys:
        result = result[key] if isinstance(result, Mapping) else getattr(result, key)
    return result


def _destinations() -> tuple[str, ...]:
    from optics.outcome.efficiency import DESTINATIONS

    return tuple(DESTINATIONS)


def _single_numbers(case: Case) -> dict[str, tuple[str, ...]]:
    """Keys of every outcome that is one number, by full name, the device's own first."""
    places: list[tuple[str, ...]] = [(key,) for key in _DEVICE]
    places += [("destinations", key) for key in _destinations()]
    places += [("accuracy", key) for key in _ACCURACY]
    for emitter in case.emitters:
        places += [("emitters", emitter.name, key) for key in _EMITTER]
        places += [("emitters", emitter.name, "destinations", key) for key in _destinations()]
    for unit in case.units:
        places += [("chain", unit, key) for key in (*_CHAIN, *_destinations())]
    places += [(side, key) for side in SIDES for key in _side_keys("float")]
    places += [(side, "color_rendering_index") for side in SIDES]
    return {".".join(keys): keys for keys in places}


def _curves() -> dict[str, tuple[str, ...]]:
    """Keys of every outcome that has one value at each angle, by full name without the angle."""
    return {f"{side}.{key}": (side, key) for side in SIDES for key in _side_keys("Curve")}


def _side_keys(kind: str) -> list[str]:
    """Names of a side's numbers (kind "float") or curves ("Curve"), by their declared types."""
    from optics.outcome.side import SideAngular

    return [one.name for one in fields(SideAngular) if str(one.type).split(" ")[0] == kind]


def _find(
    name: str, plain: Mapping[str, tuple[str, ...]], curves: Mapping[str, tuple[str, ...]]
) -> Outcome | Fault:
    """Outcome of a name, or the fault without its place."""
    meant = _meant(name, plain)
    if len(meant) == 1:
        return Outcome(name, plain[meant[0]])
    match = _AT_ANGLE.fullmatch(name)
    if not meant and match is not None:
        angle = float(match["angle"])
        meant = [f"{one}_{match['angle']}" for one in _meant(match["base"], curves)]
        if meant and angle > 90.0:
            return Fault("", "", f"{name}, {angle:g} degrees", "an angle from 0 to 90 degrees")
        if len(meant) == 1:
            return Outcome(name, curves[_meant(match["base"], curves)[0]], angle)
    if meant:
        listed = ", ".join(meant[:_MOST_LISTED]) + (", ..." if len(meant) > _MOST_LISTED else "")
        return Fault("", "", f"{name}, which may mean several", f"one of {listed}")
    if _meant(name, curves):
        return Fault("", "", f"{name} without an angle", f"such as {name}_60 for 60 degrees")
    return Fault(
        "", "", f"{name}, no such outcome", "the name of an outcome", _near(name, plain, curves)
    )


def _meant(name: str, known: Iterable[str]) -> list[str]:
    """Full names that a name may stand for: itself, or all that end in it."""
    names = list(known)
    return [name] if name in names else [one for one in names if one.endswith(f".{name}")]


def _near(name: str, plain: Iterable[str], curves: Iterable[str]) -> str | None:
    """Return the known name that looks most like a misspelled one, at its length."""
    match = _AT_ANGLE.fullmatch(name)
    angled = [f"{one}_{match['angle']}" for one in curves] if match else []
    full = [*plain, *angled]
    last = [one.rpartition(".")[2] for one in full]
    return nearest(name, full if "." in name else [*last, *full])
