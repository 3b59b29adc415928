"""What a tolerance study found: small frozen objects and their plain form."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from optics.study.chaos import Influence
from optics.study.draws import Spread
from optics.study.intervals import CONFIDENCE, Estimate
from optics.study.varied import path_unit

if TYPE_CHECKING:
    import pandas
    import xarray

SCHEMA = "outcouple.tolerance/1"
#: Shares of the samples below the quantiles that are told.
QUANTILES = (0.05, 0.5, 0.95)


@dataclass(frozen=True, slots=True)
class Linear:
    """What the derivatives at the nominal values predict of an outcome.

    Attributes
    ----------
    mean : float
        The nominal value: straight lines keep it.
    sd : float
        √(gᵀ C g) from the derivatives g and the covariance C of the numbers.
    derivatives : dict of str to float
        By path; per unit of the number, linked numbers included.
    shares : tuple of float
        By factor: share of the variance.
    failures : tuple of str
        Where the samples say otherwise, see `linear.failures`; empty if the prediction holds.
    """

    mean: float
    sd: float
    derivatives: Mapping[str, float]
    shares: tuple[float, ...]
    failures: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class OutcomeSpread:
    """How one outcome scatters.

    Attributes
    ----------
    name, units : str
    nominal : float or None
        Of the case as it stands; None where undefined.
    mean, sd : Estimate
    quantiles : tuple of Estimate
        At `QUANTILES`.
    smallest, largest : float or None
    undefined : int
        Samples that have no value although they did not fail.
    linear : Linear or None
        None where a derivative is not known.
    influence : Influence or None
        None where the outcome does not vary, or samples are too few.
    """

    name: str
    units: str
    nominal: float | None
    mean: Estimate
    sd: Estimate
    quantiles: tuple[Estimate, ...]
    smallest: float | None
    largest: float | None
    undefined: int
    linear: Linear | None
    influence: Influence | None


@dataclass(frozen=True, slots=True)
class Yield:
    """Share of the samples within limits.

    Attributes
    ----------
    outcome : str or None
        Name; None for all limits together.
    low, high : float or None
        Its limits.
    share : Estimate
        Samples that failed or have no value are not within.
    linear : float or None
        The share that the derivatives predict, for the same samples.
    failure : str or None
        Where the samples say otherwise.
    """

    outcome: str | None
    low: float | None
    high: float | None
    share: Estimate
    linear: float | None
    failure: str | None = None


@dataclass(frozen=True, slots=True)
class Tolerance:
    """What process spread does to the outcomes of a case.

    Attributes
    ----------
    title, version, case_sha256 : str
    tolerance : float
        Wanted accuracy of every destination, as a fraction of the dissipated power.
    samples, sequences, seed : int
        Samples in so many independent scrambled Sobol sequences.
    spreads : tuple of Spread
    factors : tuple of tuple of int
        Places in `spreads` of numbers that vary together, in the order of every influence.
    correlations : tuple of float or None
        By factor; None for a single number.
    linked : mapping of str to str
        Leader by path.
    outcomes : tuple of OutcomeSpread
    yields : tuple of Yield
        One for each outcome with limits.
    joint_yield : Yield or None
        All limits together; None without limits.
    derivatives : str
        Where those of the linear prediction come from.
    accuracy : mapping of str to float
        Of the worst sample.
    failed, warnings : tuple of str
    data : xarray.Dataset
        Every sample: varied and linked numbers and the outcomes by name, along ``sample``.
    """

    title: str
    version: str
    case_sha256: str
    tolerance: float
    samples: int
    sequences: int
    seed: int
    spreads: tuple[Spread, ...]
    factors: tuple[tuple[int, ...], ...]
    correlations: tuple[float | None, ...]
    linked: Mapping[str, str]
    outcomes: tuple[OutcomeSpread, ...]
    yields: tuple[Yield, ...]
    joint_yield: Yield | None
    derivatives: str
    accuracy: Mapping[str, float]
    failed: tuple[str, ...]
    warnings: tuple[str, ...]
    data: xarray.Dataset

    def outcome(self, name: str) -> OutcomeSpread:
        """Spread of one outcome.

        Raises
        ------
        KeyError
            If there is none of this name.
        """
        for one in self.outcomes:
            if one.name == name:
                return one
        raise KeyError(name)

    def paths_of(self, factor: int) -> tuple[str, ...]:
        """Paths of a factor."""
        return tuple(self.spreads[place].path for place in self.factors[factor])

    def to_frame(self) -> pandas.DataFrame:
        """Table with one row for each sample: its number, what was varied, the outcomes."""
        frame: pandas.DataFrame = self.data.to_dataframe().reset_index()
        varied = [str(name) for name in self.data.coords if name != "sample"]
        return frame[["sample", *varied, *map(str, self.data.data_vars)]]

    def to_dict(self) -> dict[str, Any]:
        """Build the JSON result, ``outcouple.tolerance/1``: plain types, null where undefined."""
        return {
            "schema": SCHEMA,
            "version": self.version,
            "title": self.title,
            "case_sha256": self.case_sha256,
            "tolerance": self.tolerance,
            "samples": self.samples,
            "sequences": self.sequences,
            "seed": self.seed,
            "confidence": CONFIDENCE,
            "spread": {one.path: _spread_dict(one) for one in self.spreads},
            "groups": [
                {"paths": list(self.paths_of(place)), "correlation": correlation}
                for place, correlation in enumerate(self.correlations)
                if correlation is not None
            ],
            "linked": dict(self.linked),
            "outcomes": {one.name: self._outcome_dict(one) for one in self.outcomes},
            "yield": {
                "limits": {str(one.outcome): _yield_dict(one) for one in self.yields},
                "joint": None if self.joint_yield is None else _yield_dict(self.joint_yield),
            },
            "derivatives": self.derivatives,
            "accuracy": dict(self.accuracy),
            "failed": list(self.failed),
            "warnings": list(self.warnings),
        }

    def _outcome_dict(self, one: OutcomeSpread) -> dict[str, Any]:
        return {
            "units": one.units,
            "nominal": one.nominal,
            "mean": one.mean.to_dict(),
            "sd": one.sd.to_dict(),
            "quantiles": {
                f"{level:g}": found.to_dict()
                for level, found in zip(QUANTILES, one.quantiles, strict=True)
            },
            "smallest": one.smallest,
            "largest": one.largest,
            "undefined": one.undefined,
            "linear": None if one.linear is None else _linear_dict(one.linear),
            "influence": None if one.influence is None else self._influence_dict(one),
        }

    def _influence_dict(self, one: OutcomeSpread) -> dict[str, Any]:
        found = one.influence
        assert found is not None
        return {
            "unexplained": found.unexplained,
            "polynomials": found.terms,
            "factors": [
                {
                    "paths": list(self.paths_of(place)),
                    "first_order": found.first_order[place].to_dict(),
                    "total": found.total[place].to_dict(),
                    "linear": None if one.linear is None else one.linear.shares[place],
                }
                for place in range(len(self.factors))
            ],
        }


def _spread_dict(spread: Spread) -> dict[str, Any]:
    return {
        "units": path_unit(spread.path),
        "nominal": spread.nominal,
        "distribution": spread.kind,
        "sd": spread.sd,
        "half_width": spread.scale if spread.kind == "uniform" else None,
    }


def _linear_dict(linear: Linear) -> dict[str, Any]:
    return {
        "mean": linear.mean,
        "sd": linear.sd,
        "derivatives": dict(linear.derivatives),
        "holds": not linear.failures,
    }


def _yield_dict(found: Yield) -> dict[str, Any]:
    return {
        "min": found.low,
        "max": found.high,
        **found.share.to_dict(),
        "linear": found.linear,
        "linear_holds": None if found.linear is None else found.failure is None,
    }
