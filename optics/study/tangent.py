"""Outcomes of a question near one point: values, and derivatives with respect to what it varies.

Derivatives are exact where there are any; where there are none, such as for a number that changes
the wavelengths or for a color temperature looked up in tables, differences take their place.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from optics.study.gradient import values_and_gradient, why_no_derivative, why_no_gradient
from optics.study.linear import differences, stencil

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.study.evaluate import Question

    Floats = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Slopes:
    """How the derivatives of a question are to be found.

    Attributes
    ----------
    question : Question
    paths : tuple of int
        Places of those with an exact derivative.
    outcomes : tuple of int
        Places of those with an exact derivative.
    """

    question: Question
    paths: tuple[int, ...]
    outcomes: tuple[int, ...]

    @property
    def by_differences(self) -> tuple[int, ...]:
        """Places of the paths that need differences, if only for some of the outcomes."""
        every = range(len(self.question.paths))
        if len(self.outcomes) < len(self.question.outcomes):
            return tuple(every)
        return tuple(place for place in every if place not in self.paths)

    def stencil(self, nominal: Floats, sd: Floats) -> Floats:
        """Points (n, p) for differences about the nominal values (p,)."""
        return stencil(nominal, sd, self.by_differences)

    def gradient(self, nominal: Floats, sd: Floats, stepped: Floats) -> Floats:
        """Gradient (k, p) of the outcomes; NaN where it is not known.

        Parameters
        ----------
        nominal : float (p,)
        sd : float (p,)
        stepped : float (n, k)
            Outcomes at the points of `stencil`.
        """
        gradient = np.full((len(self.question.outcomes), nominal.size), np.nan)
        places = list(self.by_differences)
        if places:
            gradient[:, places] = differences(stepped, sd[places])
        if self.paths and self.outcomes:
            exact = values_and_gradient(self._exact(nominal), nominal[list(self.paths)])[1]
            gradient[np.ix_(self.outcomes, self.paths)] = exact
        return gradient

    def told(self) -> str:
        """Word where the derivatives come from."""
        if not self.by_differences:
            return "exact"
        question = self.question
        lacking = [
            *(path for place, path in enumerate(question.paths) if place not in self.paths),
            *(
                one.name
                for place, one in enumerate(question.outcomes)
                if place not in self.outcomes
            ),
        ]
        return f"exact, for {', '.join(lacking)} by differences of fourth order"

    def _exact(self, nominal: Floats) -> Question:
        """Question of what has exact derivatives, the other numbers at their nominal values."""
        place_of = {place: number for number, place in enumerate(self.paths)}
        question = self.question
        return replace(
            question,
            case=question.case_at(nominal),
            paths=tuple(question.paths[place] for place in self.paths),
            followers=tuple(
                (path, place_of[place]) for path, place in question.followers if place in place_of
            ),
            outcomes=tuple(question.outcomes[place] for place in self.outcomes),
        )


def slopes_of(question: Question) -> Slopes:
    """Sort the paths and outcomes of a question by whether they have exact derivatives."""
    lacking = why_no_gradient(question)
    led = {place for path, place in question.followers if path in lacking}
    return Slopes(
        question,
        tuple(
            place
            for place, path in enumerate(question.paths)
            if path not in lacking and place not in led
        ),
        tuple(
            place
            for place, outcome in enumerate(question.outcomes)
            if why_no_derivative(outcome) is None
        ),
    )
