"""Faults in what the user handed over, and the error that carries all of them at once."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from difflib import SequenceMatcher

# Share of matching characters from which a name passes for a misspelling of another.
LIKENESS_NEEDED = 0.6


@dataclass(frozen=True, slots=True)
class Fault:
    """One thing that is wrong with the input.

    Attributes
    ----------
    where : str
        The file, or the material when there is no file.
    key : str
        Dotted path inside the file, or the line (and column) of a table; may be empty.
    found, expected : str
        What stands there, and what should.
    near : str or None
        The known name that was probably meant.
    """

    where: str
    key: str
    found: str
    expected: str
    near: str | None = None

    def __str__(self) -> str:
        place = f"{self.where}: {self.key}" if self.key else self.where
        hint = f" (did you mean {self.near}?)" if self.near else ""
        return f"{place}: found {self.found}; expected {self.expected}{hint}"


class CaseError(Exception):
    """The input is at fault; `faults` lists everything that was noticed.

    Parameters
    ----------
    faults : iterable of Fault
        At least one.
    """

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults: tuple[Fault, ...] = tuple(faults)
        super().__init__(self.faults)

    def __str__(self) -> str:
        return "\n".join(str(fault) for fault in self.faults)


class RangeError(CaseError):
    """A material was asked for wavelengths at which it is not defined.

    Parameters
    ----------
    faults : iterable of Fault
        At least one.
    material : str
        Name of the material.
    range_nm : tuple of float
        Where the material is defined, nm.
    asked_nm : tuple of float
        Smallest and largest wavelength that was refused, nm.
    """

    def __init__(
        self,
        faults: Iterable[Fault],
        material: str,
        range_nm: tuple[float, float],
        asked_nm: tuple[float, float],
    ) -> None:
        super().__init__(faults)
        self.material = material
        self.range_nm = range_nm
        self.asked_nm = asked_nm
        # Exceptions are rebuilt from `args` when a worker process sends them back.
        self.args = (self.faults, material, range_nm, asked_nm)


def nearest(name: str, candidates: Iterable[str]) -> str | None:
    """Return the candidate that looks most like `name` (the first of equals), or None."""

    def likeness(candidate: str) -> float:
        return SequenceMatcher(None, candidate.lower(), name.lower()).ratio()

    best = max(candidates, key=likeness, default=None)
    return best if best is not None and likeness(best) >= LIKENESS_NEEDED else None
