"""What an optimization found: values, what binds, how flat it is, what else is as good."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any

from optics._version import VERSION

if TYPE_CHECKING:
    import pandas

SCHEMA = "outcouple.optimize/1"


@dataclass(frozen=True, slots=True)
class Point:
    """One device: values of the variables and outcomes, by path and by name.

    Attributes
    ----------
    values : mapping of str to float
        Variables, then linked numbers.
    outcomes : mapping of str to float
        Of objectives and constraints.
    """

    values: Mapping[str, float]
    outcomes: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Held:
    """A constraint or bound that holds a point back.

    Attributes
    ----------
    name, kind : str
        Outcome or path; "min" or "max".
    """

    name: str
    kind: str


@dataclass(frozen=True, slots=True)
class FrontPoint(Point):
    """A point of a Pareto front.

    Attributes
    ----------
    held_by : tuple of Held
        Without these a point would be within reach that is better in all objectives.
    loosest : Direction or None
        Joint change of the variables that costs least; None for a single variable and where
        nothing is left free.
    """

    held_by: tuple[Held, ...]
    loosest: Direction | None


@dataclass(frozen=True, slots=True)
class Slice:
    """One variable moved through its bounds, all others at the best.

    Attributes
    ----------
    values : tuple of float
    outcomes : mapping of str to tuple of float
        NaN where undefined.
    allowed : tuple of bool
        Whether every constraint is met.
    """

    values: tuple[float, ...]
    outcomes: Mapping[str, tuple[float, ...]]
    allowed: tuple[bool, ...]


@dataclass(frozen=True, slots=True)
class VariableFound:
    """One variable at the best.

    Attributes
    ----------
    path, units : str
    min, max : float
        Bounds.
    start : float
        Value in the case file.
    best : float
    binds : str or None
        "min" or "max" where the objective, or all of several, would gain from a wider bound.
    gain_per_unit : float or None
        What the objective would gain for each unit that this bound is moved outward; 0 if none.
        None for a Pareto front.
    flat_from, flat_to : float or None
        Range around the best in which the objective loses less than 1 % of its value, whatever
        the constraints, all other variables fixed. None for a Pareto front.
    """

    path: str
    units: str
    min: float
    max: float
    start: float
    best: float
    binds: str | None
    gain_per_unit: float | None
    flat_from: float | None
    flat_to: float | None


@dataclass(frozen=True, slots=True)
class ConstraintFound:
    """One limit at the best.

    Attributes
    ----------
    name, kind, units : str
        Outcome; "min" or "max"; its unit.
    limit, value : float
    binds : bool
        Whether the objective, or all of several, would gain from a looser limit.
    gain_per_unit : float or None
        What the objective would gain for each unit that the limit is loosened, at first. None for
        a Pareto front.
    """

    name: str
    kind: str
    units: str
    limit: float
    value: float
    binds: bool
    gain_per_unit: float | None


@dataclass(frozen=True, slots=True)
class ObjectiveFound:
    """One objective.

    Attributes
    ----------
    name, kind, units : str
        Outcome; "maximize" or "minimize"; its unit.
    start : float or None
        With the values in the case file; None where undefined.
    best : float
    """

    name: str
    kind: str
    units: str
    start: float | None
    best: float


@dataclass(frozen=True, slots=True)
class Direction:
    """Joint change of the variables that costs least, along which binding limits stay.

    At a point of a front each objective stays as well, to first order.

    Attributes
    ----------
    steps : mapping of str to float
        Change of each variable that by the curvature there loses 1 % of the objective (of several,
        by their weights at this point), or less where bounds are nearer.
    loss_forward, loss_backward : float or None
        Share of the objective that is really lost there and at the opposite steps, of several the
        largest; None where undefined or beyond bounds.
    """

    steps: Mapping[str, float]
    loss_forward: float | None
    loss_backward: float | None


@dataclass(frozen=True, slots=True)
class Tried:
    """What was done.

    Attributes
    ----------
    samples, failed : int
        Points of the first stage, and how many of them are no device or undefined.
    starts : int
        Promising points from which the gradients were followed.
    settled : int
        How many of those ended at an optimum.
    optima : int
        Different ones that meet the constraints.
    evaluations, gradients : int
        Points computed in all, and derivatives of all outcomes beside them.
    gradient_method : str
        How derivatives were made.
    """

    samples: int
    failed: int
    starts: int
    settled: int
    optima: int
    evaluations: int
    gradients: int
    gradient_method: str


@dataclass(frozen=True, slots=True, eq=False)
class Optimum:
    """Result of `optics.optimize`.

    Attributes
    ----------
    title, case_sha256 : str
        Of the case as it was.
    seed : int
    tolerance : float
    objectives : tuple of ObjectiveFound
    variables : tuple of VariableFound
    constraints : tuple of ConstraintFound
    best : Point
        Of a front, the compromise nearest to the ideal, objectives in units of their range.
    others : tuple of Point
        Other optima whose objective is within 1 % of the best, best first. Empty for a front.
    front : tuple of FrontPoint
        No objective of any of them can be better without another being worse, as far as was
        found; in the order of the first objective. Empty for one objective.
    loosest : Direction or None
        None for a front, for a single variable and where constraints leave no freedom.
    slices : mapping of str to Slice
        By path of the variable. Empty for a front.
    tried : Tried
    accuracy : mapping of str to float
        Energy balance and integration error at the best.
    warnings : tuple of str
    frame : pandas.DataFrame
        Every point of the first stage and every end: kind, variables, outcomes, whether all
        constraints are met.
    """

    title: str
    case_sha256: str
    seed: int
    tolerance: float
    objectives: tuple[ObjectiveFound, ...]
    variables: tuple[VariableFound, ...]
    constraints: tuple[ConstraintFound, ...]
    best: Point
    others: tuple[Point, ...]
    front: tuple[FrontPoint, ...]
    loosest: Direction | None
    slices: Mapping[str, Slice]
    tried: Tried
    accuracy: Mapping[str, float]
    warnings: tuple[str, ...]
    frame: pandas.DataFrame

    def to_dict(self) -> dict[str, Any]:
        """Plain types as ``optimize --json`` prints them; null where undefined."""
        return {
            "schema": SCHEMA,
            "version": VERSION,
            "title": self.title,
            "case_sha256": self.case_sha256,
            "seed": self.seed,
            "tolerance": self.tolerance,
            "objectives": [asdict(one) for one in self.objectives],
            "variables": [asdict(one) for one in self.variables],
            "constraints": [asdict(one) for one in self.constraints],
            "best": asdict(self.best),
            "others": [asdict(one) for one in self.others],
            "front": [asdict(one) for one in self.front],
            "loosest": None if self.loosest is None else asdict(self.loosest),
            "slices": {
                path: {
                    "values": list(one.values),
                    "outcomes": {name: list(curve) for name, curve in one.outcomes.items()},
                    "allowed": list(one.allowed),
                }
                for path, one in self.slices.items()
            },
            "tried": asdict(self.tried),
            "accuracy": dict(self.accuracy),
            "warnings": list(self.warnings),
        }
