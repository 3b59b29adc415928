"""Outcomes with their exact derivatives with respect to the numbers that a study varies."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from optics.device.direction import Direction, NumberStep, why_not_differentiable
from optics.device.errors import CaseError, Fault
from optics.device.outcome_names import SIDES
from optics.outcome.chain import budget_numbers
from optics.outcome.derivative import VariedDevice, shine_with_rates
from optics.outcome.dual import rates_of, value_of
from optics.outcome.view import View
from optics.study.outcomes import Outcome, angles_needed, read_outcome

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.study.evaluate import Question

    Floats = NDArray[np.float64]


class Reached(NamedTuple):
    """How far a point's values and derivatives can be trusted.

    Attributes
    ----------
    energy_balance, integration_error : float
        Of the values, as of `optics.budget`.
    derivative_error : float
        The engine's estimate for its rates of change, as a fraction of their natural scale.
    """

    energy_balance: float
    integration_error: float
    derivative_error: float


def values_and_gradient(
    question: Question, values: Iterable[float], threads: int | None = None
) -> tuple[Floats, Floats, Reached]:
    """Compute one point's outcomes with their derivatives, in one go and not by differences.

    Parameters
    ----------
    question : Question
        Linked paths move with their leaders.
    values : float (p,)
        One for each of `question.paths`.
    threads : int, optional
        At most so many; as many as there are cores if not given. No number depends on it.

    Returns
    -------
    values : float (k,)
        Of the question's outcomes; NaN where undefined.
    gradient : float (k, p)
        Change of each outcome per unit of each path; NaN where the outcome is undefined.
    accuracy : Reached

    Raises
    ------
    CaseError
        If there is no such device, or a path or an outcome has no derivative
        (`why_no_gradient` tells beforehand).
    """
    case = question.case_at(values)
    faults = [
        Fault(case.label, name, reason, "a number with a derivative")
        for name, reason in why_no_gradient(question).items()
    ]
    if faults:
        raise CaseError(faults)
    return outcomes_and_rates(
        case, directions_of(question), question.outcomes, question.tolerance, threads
    )


def why_no_gradient(question: Question) -> dict[str, str]:
    """Reasons by path or outcome for which `values_and_gradient` refuses; empty if it does not."""
    paths = [*question.paths, *(path for path, _ in question.followers)]
    found = {path: why_not_differentiable(question.case, path) for path in paths}
    found |= {outcome.name: why_no_derivative(outcome) for outcome in question.outcomes}
    return {name: reason for name, reason in found.items() if reason is not None}


def why_no_derivative(outcome: Outcome) -> str | None:
    """Why an outcome has no derivative with respect to anything; None if it has one."""
    if outcome.keys[0] == "accuracy":
        return "how far a result can be trusted is no physical quantity"
    if outcome.keys[0] in SIDES:
        return _WITHOUT.get(outcome.keys[1])
    return None


_NAMED = "it is looked up in tables of colors, and its derivative is not known"
_WITHOUT = {
    "peak_nm_normal": "it is a point of the wavelength grid",
    "dominant_wavelength_nm": _NAMED,
    "excitation_purity": _NAMED,
    "correlated_color_temperature_K": _NAMED,
    "duv": _NAMED,
    "color_rendering_index": _NAMED,
}


def directions_of(question: Question) -> tuple[Direction, ...]:
    """Direction of each path of a question, together with those that follow it."""
    together: list[list[NumberStep]] = [[NumberStep(path)] for path in question.paths]
    for path, place in question.followers:
        together[place].append(NumberStep(path))
    return tuple(tuple(steps) for steps in together)


def outcomes_and_rates(
    case: Case,
    directions: Sequence[Direction],
    outcomes: Sequence[Outcome],
    tolerance: float,
    threads: int | None = None,
) -> tuple[Floats, Floats, Reached]:
    """Outcomes (k,) of a case and their rates (k, p) along directions; as `values_and_gradient`."""
    found = shine_with_rates(case, directions, tolerance, threads)
    budget = budget_numbers(found.case, {one.emitter.name: one.emission for one in found.lit})
    sides = _sides(found, outcomes, threads)
    numbers = [read_outcome(outcome, budget, sides) for outcome in outcomes]
    numbers = [np.nan if number is None else number for number in numbers]
    values = np.array([value_of(number) for number in numbers], dtype=np.float64)
    rates = np.stack([rates_of(number, len(directions)) for number in numbers])
    rates[np.isnan(values)] = np.nan
    trust = found.accuracy
    return values, rates, Reached(trust.energy_balance, trust.integration_error, found.error)


def _sides(
    device: VariedDevice, outcomes: Sequence[Outcome], threads: int | None
) -> dict[str, View]:
    """Views of the sides that outcomes are asked of."""
    asked = {one.keys[0] for one in outcomes if one.needs_angular}
    if not asked:
        return {}
    angles, emitting = np.array(angles_needed(outcomes)), device.sources
    return {
        name: View(device.case, emitting, place, angles, threads=threads)
        for place, name in enumerate(SIDES)
        if name in asked
    }


__all__ = [
    "Reached",
    "directions_of",
    "outcomes_and_rates",
    "values_and_gradient",
    "why_no_derivative",
    "why_no_gradient",
]
