"""What one nanometer more of each film does to efficiency, color and luminance."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

from optics.device.direction import Direction, IndexStep, NumberStep, ZoneStep
from optics.device.outcome_names import SIDES
from optics.outcome.budget import DEFAULT_TOLERANCE
from optics.study.gradient import outcomes_and_rates
from optics.study.outcomes import find_outcomes

if TYPE_CHECKING:
    import numpy as np
    import pandas
    import xarray
    from numpy.typing import NDArray

    from optics.device.case import Case

    Floats = NDArray[np.float64]

_EQE = "external_quantum_efficiency"
_EQE_BY_SIDE = tuple(f"{_EQE}_{side}" for side in SIDES)
#: What is told of each lit side, by the outcome of the side that it comes from.
SIDE_EFFECTS = MappingProxyType(
    {
        "luminance_relative": "current_efficiency_cd_A",
        "x": "x_normal",
        "y": "y_normal",
        "u_prime": "u_prime_normal",
        "v_prime": "v_prime_normal",
    }
)
_FAINT_SHARE = 1e-3  # of the light that leaves: nobody asks for the color of such a side
_INDEX_STEP = _ORIENTATION_STEP = 0.01


@dataclass(frozen=True, slots=True)
class Influence:
    """What a small step of one number does, to first order.

    Attributes
    ----------
    change : {"thickness", "position", "index", "orientation"}
        Of a film's thickness; of an emitter's zone toward the top, as it is; of the index n of a
        film at all wavelengths; of an emitter's horizontal fraction.
    name : str
        Of the film or emitter.
    path : str or None
        Address of the number, where it has one.
    step : float
        How far the number goes: 1 nm, or 0.01.
    unit : str
        Of the step; empty for ratios.
    external_quantum_efficiency : float
        Change in photons per charge.
    external_quantum_efficiency_relative : float or None
        The same over the EQE; None without light.
    sides : mapping of str to mapping
        By lit side, along the normal: ``luminance_relative``, change of luminance over luminance,
        and changes of ``x``, ``y``, ``u_prime``, ``v_prime``; None without visible light.
    """

    change: str
    name: str
    path: str | None
    step: float
    unit: str
    external_quantum_efficiency: float
    external_quantum_efficiency_relative: float | None
    sides: Mapping[str, Mapping[str, float | None]]

    def to_dict(self) -> dict[str, Any]:
        """Row of the JSON result."""
        return {
            "change": self.change,
            "name": self.name,
            "path": self.path,
            "step": self.step,
            "unit": self.unit,
            "external_quantum_efficiency": self.external_quantum_efficiency,
            "external_quantum_efficiency_relative": self.external_quantum_efficiency_relative,
            "sides": {side: dict(effects) for side, effects in self.sides.items()},
        }


@dataclass(frozen=True, slots=True)
class Sensitivity:
    """Influence of every film and emitter of a device.

    Attributes
    ----------
    title : str
    influences : tuple of Influence
        Films from the bottom up, then emitters; thickness, position, index, orientation.
    derivative_error : float
        The engine's estimate for its rates of change, as a fraction of their natural scale.
    """

    title: str
    influences: tuple[Influence, ...]
    derivative_error: float

    def to_dict(self) -> dict[str, Any]:
        """Entry ``sensitivity`` of the JSON result: plain types only."""
        return {
            "rows": [one.to_dict() for one in self.influences],
            "derivative_error": self.derivative_error,
        }

    def to_frame(self) -> pandas.DataFrame:
        """Build a long table: columns scope, name, quantity, value, unit, as `Budget.to_frame`."""
        import pandas

        rows = [
            ("sensitivity", one.name, f"{one.change}.{quantity}", value,
             f"per {one.step:g} {one.unit}".rstrip())
            for one in self.influences
            for quantity, value in _flat(one).items()
        ]  # fmt: skip
        return pandas.DataFrame(rows, columns=["scope", "name", "quantity", "value", "unit"])

    def to_dataset(self) -> xarray.Dataset:
        """Build labelled arrays over the influences; NaN for what is undefined."""
        import numpy as np
        import xarray

        quantities = [_flat(one) for one in self.influences]
        variables: dict[str, Any] = {
            key: (
                "influence",
                [np.nan if one[key] is None else one[key] for one in quantities],
                {"units": "1", "long_name": "change for one step"},
            )
            for key in quantities[0]
        }
        variables["step"] = ("influence", [one.step for one in self.influences])
        coords = {
            key: ("influence", [getattr(one, name) for one in self.influences])
            for key, name in (("change", "change"), ("name", "name"), ("step_unit", "unit"))
        }
        attrs = {"title": self.title, "derivative_error": self.derivative_error}
        return xarray.Dataset(variables, coords=coords, attrs=attrs)


def sensitivity(case: Case, tolerance: float = DEFAULT_TOLERANCE) -> Sensitivity:
    """Compute what small steps of every film and emitter do to EQE, luminance and color.

    From exact derivatives, computed with the values and not by differences.

    Parameters
    ----------
    case : Case
        From `optics.read_case`.
    tolerance : float
        As of `optics.budget`.

    Returns
    -------
    Sensitivity

    Raises
    ------
    ValueError
        If the tolerance is not between 1e-12 and 0.1.

    Examples
    --------
    >>> import optics
    >>> found = optics.sensitivity(optics.read_case("cases/green-bottom-pixel.toml"))
    >>> found.influences[0].external_quantum_efficiency  # doctest: +SKIP
    """
    names = [_EQE, *_EQE_BY_SIDE]
    names += [f"{side}.{outcome}" for side in SIDES for outcome in SIDE_EFFECTS.values()]
    steps = _steps(case)
    outcomes = find_outcomes(case, {name: name for name in names})
    directions = [direction for _, direction in steps]
    found, rates, reached = outcomes_and_rates(case, directions, outcomes, tolerance)
    values = dict(zip(names, found.tolist(), strict=True))
    by_side = {side: values[key] for side, key in zip(SIDES, _EQE_BY_SIDE, strict=True)}
    lit = [side for side, light in by_side.items() if light > _FAINT_SHARE * values[_EQE]]
    influences = [
        _influence(head, dict(zip(names, rates[:, place].tolist(), strict=True)), values, lit)
        for place, (head, _) in enumerate(steps)
    ]
    return Sensitivity(case.title, tuple(influences), reached.derivative_error)


def _steps(case: Case) -> list[tuple[dict[str, Any], Direction]]:
    """What is changed: the head of each influence, and its direction at unit rate."""
    found: list[tuple[dict[str, Any], Direction]] = []

    def add(change: str, name: str, step: float, unit: str, taken: Any) -> None:
        path = taken.path if isinstance(taken, NumberStep) else None
        head = {"change": change, "name": name, "path": path, "step": step, "unit": unit}
        found.append((head, (taken,)))

    films, emitters = case.stack.films, case.emitters
    for film in films:
        add("thickness", film.name, 1.0, "nm", NumberStep(f"layers.{film.name}.thickness_nm"))
    for emitter in emitters:
        add("position", emitter.name, 1.0, "nm", ZoneStep(emitter.name))
    for film in films:
        add("index", film.name, _INDEX_STEP, "", IndexStep(film.name, 1.0))
    for emitter in emitters:
        path = f"emitters.{emitter.name}.horizontal_fraction"
        add("orientation", emitter.name, _ORIENTATION_STEP, "", NumberStep(path))
    return found


def _influence(
    head: Mapping[str, Any],
    rates: Mapping[str, float],
    values: Mapping[str, float],
    lit: list[str],
) -> Influence:
    step = head["step"]

    def relative(name: str) -> float | None:
        return step * rates[name] / values[name] if values[name] > 0.0 else None

    sides: dict[str, Mapping[str, float | None]] = {}
    for side in lit:
        effects: dict[str, float | None] = {}
        for key, outcome in SIDE_EFFECTS.items():
            name = f"{side}.{outcome}"
            if key == "luminance_relative":
                effects[key] = relative(name)
            else:
                effects[key] = None if values[name] != values[name] else step * rates[name]
        sides[side] = MappingProxyType(effects)
    return Influence(
        **head,
        external_quantum_efficiency=step * rates[_EQE],
        external_quantum_efficiency_relative=relative(_EQE),
        sides=MappingProxyType(sides),
    )


def _flat(one: Influence) -> dict[str, float | None]:
    """Effects by full name."""
    effects: dict[str, float | None] = {
        _EQE: one.external_quantum_efficiency,
        f"{_EQE}_relative": one.external_quantum_efficiency_relative,
    }
    for side, seen in one.sides.items():
        effects |= {f"{side}.{key}": value for key, value in seen.items()}
    return effects


__all__ = ["SIDE_EFFECTS", "Influence", "Sensitivity", "sensitivity"]
