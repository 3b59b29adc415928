"""What a tolerance study is to compute: the case's `[tolerance]` table, checked before any work."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from optics.device.errors import CaseError, Fault
from optics.device.study_names import STUDIES, followers, name_faults
from optics.study.draws import Group, Spread, correlation_range
from optics.study.evaluate import Question
from optics.study.outcomes import Outcome, find_outcomes, outcome_names
from optics.study.sweep_plan import LARGEST_RESULT
from optics.study.varied import refused

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case

    Floats = NDArray[np.float64]

_STUDY = "tolerance"
_FIRST = "external_quantum_efficiency"


class Limit(NamedTuple):
    """What an outcome must keep; a bound that is None is none."""

    outcome: int  # place among the outcomes of the question
    low: float | None
    high: float | None


@dataclass(frozen=True, slots=True)
class Plan:
    """A checked tolerance study.

    Attributes
    ----------
    question : Question
        Varies the numbers that spread.
    spreads : tuple of Spread
        One for each path of the question.
    groups : tuple of Group
    limits : tuple of Limit
    samples, seed : int
    """

    question: Question
    spreads: tuple[Spread, ...]
    groups: tuple[Group, ...]
    limits: tuple[Limit, ...]
    samples: int
    seed: int

    @property
    def nominal(self) -> Floats:
        """Values (p,) of the case as it stands."""
        return np.array([spread.nominal for spread in self.spreads])

    @property
    def sd(self) -> Floats:
        """Standard deviations (p,)."""
        return np.array([spread.sd for spread in self.spreads])

    @property
    def factors(self) -> tuple[tuple[int, ...], ...]:
        """Places of the numbers that vary together: every group, and every number in none.

        In the order of the spreads.
        """
        groups = {group.places[0]: group.places for group in self.groups}
        rest = {place for group in self.groups for place in group.places[1:]}
        every = [place for place in range(len(self.spreads)) if place not in rest]
        return tuple(groups.get(place, (place,)) for place in every)


def plan_tolerance(
    case: Case, tolerance: float, samples: int | None = None, seed: int | None = None
) -> Plan:
    """Read a case's `[tolerance]` table.

    Parameters
    ----------
    case : Case
    tolerance : float
        Wanted accuracy of every destination, as a fraction of the dissipated power.
    samples, seed : int, optional
        In the place of those in the table.

    Raises
    ------
    CaseError
        With every fault: no such table, outcomes that are unknown or ambiguous, no spread,
        spreads that the case refuses, correlations that cannot be, links that contradict them.
    """
    study: Mapping[str, Any] | None = case.document.get(_STUDY)
    if study is None:
        expected = "a table with tolerance.spread"
        raise CaseError([Fault(case.label, _STUDY, "no such table", expected)])
    faults = name_faults(case.label, STUDIES[_STUDY], study, outcome_names(case))
    # Of wrong names none is left to be computed.
    outcomes = () if faults else _outcomes(case, study)
    paths = tuple(study["spread"])
    spreads = tuple(_spread(case, path, study["spread"][path], faults) for path in paths)
    linked = followers(STUDIES[_STUDY], study)
    for place, spread in enumerate(spreads):
        alone = [path for path, leader in linked if leader == place]
        _check_ends(case, spread, alone, faults)
    # Every group keeps the order of the spreads.
    groups = tuple(
        Group(tuple(sorted(paths.index(path) for path in entry["paths"])), entry["correlation"])
        for entry in study.get("groups") or []
    )
    for index, group in enumerate(groups):
        _check_correlation(case, spreads, index, group, faults)
    limited: Mapping[str, Any] = study.get("limits") or {}
    count = study["samples"] if samples is None else samples
    _check_size(case, count, len(outcomes) + len(paths), faults)
    if faults:
        raise CaseError(faults)
    names = [outcome.name for outcome in outcomes]
    return Plan(
        Question(case, paths, linked, outcomes, tolerance),
        spreads,
        groups,
        tuple(
            Limit(names.index(name), limit.get("min"), limit.get("max"))
            for name, limit in limited.items()
        ),
        count,
        study["seed"] if seed is None else seed,
    )


def _spread(case: Case, path: str, entry: Mapping[str, Any], faults: list[Fault]) -> Spread:
    nominal = float(case.value(path))
    if entry.get("half_width") is not None:
        return Spread(path, nominal, "uniform", float(entry["half_width"]))
    if entry.get("sd") is not None:
        return Spread(path, nominal, "normal", float(entry["sd"]))
    if nominal == 0.0:
        key = f'tolerance.spread."{path}".relative_sd'
        faults.append(Fault(case.label, key, "no spread, the nominal value is 0", "sd"))
    return Spread(path, nominal, "normal", float(entry["relative_sd"]) * abs(nominal))


def _check_ends(case: Case, spread: Spread, alone: Sequence[str], faults: list[Fault]) -> None:
    """Note if the case refuses an end of a uniform spread, or one standard deviation of a normal.

    What is refused farther out, or only together with other values, is told as a failed sample.
    """
    word = "half width" if spread.kind == "uniform" else "standard deviation"
    for value in (spread.nominal - spread.scale, spread.nominal + spread.scale):
        for fault in refused(case, dict.fromkeys([spread.path, *alone], value)):
            known = fault.key == spread.path
            what = fault.found if known else f"{value:.10g}: {fault.key} is {fault.found}"
            said = f"{what} at one {word} from {spread.nominal:.10g}"
            key = f'tolerance.spread."{spread.path}"'
            faults.append(Fault(case.label, key, said, fault.expected))


def _check_correlation(
    case: Case, spreads: Sequence[Spread], index: int, group: Group, faults: list[Fault]
) -> None:
    low, high = correlation_range([spreads[place].kind for place in group.places])
    if not low - 1e-9 <= group.correlation <= high + 1e-9:
        mixed = len({spreads[place].kind for place in group.places}) > 1
        kinds = "numbers, normal and uniform ones" if mixed else "numbers"
        expected = f"{low:.6g} to {high:.6g} for {len(group.places)} {kinds}"
        key = f"tolerance.groups[{index}].correlation"
        faults.append(Fault(case.label, key, f"{group.correlation:.10g}", expected))


def _outcomes(case: Case, study: Mapping[str, Any]) -> tuple[Outcome, ...]:
    """Look up the outcomes asked for, or the EQE, then those with limits, each once."""
    asked = (_FIRST,) if study.get("outcomes") is None else study["outcomes"]
    names = dict.fromkeys([*asked, *(study.get("limits") or {})])
    return find_outcomes(case, {f"tolerance ({name})": name for name in names})


def _check_size(case: Case, samples: int, columns: int, faults: list[Fault]) -> None:
    if samples * columns > LARGEST_RESULT:
        found = f"{samples} of {columns} numbers"
        expected = f"at most {LARGEST_RESULT} numbers in all"
        faults.append(Fault(case.label, "tolerance.samples", found, expected))
