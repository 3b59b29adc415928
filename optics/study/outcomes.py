"""Outcomes of a case by their names (`optics.device.outcome_names`), and read from results."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from optics.device.errors import CaseError
from optics.device.outcome_names import DESTINATIONS, SIDES, OutcomeNames

if TYPE_CHECKING:
    from optics.device.case import Case
    from optics.outcome.budget import Budget
    from optics.outcome.side import SideAngular
    from optics.outcome.view import View


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
    return ("external_quantum_efficiency", *(f"destinations.{name}" for name in DESTINATIONS))


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
    found, faults = outcome_names(case).find_all(names.items(), case.label)
    if faults:
        raise CaseError(faults)
    return tuple(Outcome(name, place.keys, place.angle_deg) for name, place in found)


def outcome_names(case: Case) -> OutcomeNames:
    """Names of all outcomes of a case."""
    return OutcomeNames.of(tuple(emitter.name for emitter in case.emitters), case.units)


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
