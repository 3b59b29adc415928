"""What a film is made of: permittivity against wavelength, and the tables it rests on."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Protocol

import numpy as np
import numpy.typing as npt

from optics.device.errors import Fault, RangeError

FloatArray = npt.NDArray[np.float64]
ComplexArray = npt.NDArray[np.complex128]

UNLIMITED_NM = (0.0, float("inf"))
# Room for the rounding of a unit conversion at a table's ends; not an extrapolation.
RANGE_SLACK = 1e-9
# Permittivities at more wavelengths than this are worth their memory only once.
_MOST_KEPT = 4096


@dataclass(frozen=True, slots=True)
class TableUse:
    """A table of optical constants that a material rests on.

    Attributes
    ----------
    name : str
        Catalogue name, or the file name of a table of the user's.
    source : str
        Primary source from the table's header; empty when the table names none.
    range_nm : tuple of float
        First and last wavelength, nm.
    sha256 : str
        Of the file's bytes.
    """

    name: str
    source: str
    range_nm: tuple[float, float]
    sha256: str


class UndefinedError(ValueError):
    """A law has no physical value at some wavelengths.

    Parameters
    ----------
    where : ndarray of bool
        True at the wavelengths that are refused.
    found, expected : str
        For the fault that the material makes of it.
    """

    def __init__(self, where: npt.NDArray[np.bool_], found: str, expected: str) -> None:
        super().__init__(found)
        self.where = where
        self.found = found
        self.expected = expected


class Law(Protocol):
    """Permittivity against wavelength; picklable, raises `UndefinedError` instead of a NaN."""

    def __call__(self, wavelength_nm: FloatArray, /) -> tuple[ComplexArray, ComplexArray]:
        """Ordinary (in the film plane) and extraordinary (along its normal) permittivity."""


@dataclass(frozen=True, slots=True, eq=False)
class Material:
    """Optical constants of one material, isotropic or with the optic axis along the normal.

    Time factor exp(-iωt): Im ε ≥ 0 is loss.

    Attributes
    ----------
    name : str
    law : Law
    isotropic : bool
    range_nm : tuple of float
        Where the material is defined, nm; (0, inf) for a formula without limit.
    tables : tuple of TableUse
        Every table behind it, components of mixtures and pairs included.
    """

    name: str
    law: Law = field(repr=False)
    isotropic: bool = True
    range_nm: tuple[float, float] = UNLIMITED_NM
    tables: tuple[TableUse, ...] = ()

    def covers(self, wavelength_nm: npt.ArrayLike) -> bool:
        """Whether every wavelength (nm) lies inside `range_nm`, ends included."""
        return not bool(np.any(_outside(np.asarray(wavelength_nm, dtype=float), self.range_nm)))

    def permittivity(self, wavelength_nm: npt.ArrayLike) -> tuple[ComplexArray, ComplexArray]:
        """Permittivity at vacuum wavelengths.

        Parameters
        ----------
        wavelength_nm : array_like, shape (n,)
            Vacuum wavelengths, nm, positive and finite.

        Returns
        -------
        ordinary, extraordinary : ndarray of complex128, shape (n,)
            In the film plane and along its normal; equal for an isotropic material. Read-only.

        Raises
        ------
        RangeError
            When the material is not defined at some of the wavelengths.
        ValueError
            When the argument is not a list of wavelengths at all.
        """
        wanted = np.asarray(wavelength_nm, dtype=float)
        if wanted.size > _MOST_KEPT:
            return self._evaluated(wanted)
        return _kept_permittivity(self, wanted.tobytes(), wanted.shape)

    def _evaluated(self, wanted: FloatArray) -> tuple[ComplexArray, ComplexArray]:
        if wanted.ndim != 1 or not np.all(np.isfinite(wanted)) or np.any(wanted <= 0.0):
            raise ValueError(f"wavelength_nm: found {wanted}; expected 1-D, positive and finite")
        outside = _outside(wanted, self.range_nm)
        if np.any(outside):
            raise self._range_error(wanted)
        try:
            # Division by zero or overflow in a law is caught below, by value, not by warning.
            with np.errstate(all="ignore"):
                ordinary, extraordinary = self.law(np.clip(wanted, *self.range_nm))
        except UndefinedError as undefined:
            raise self._undefined_error(wanted, undefined) from None
        bad = ~(np.isfinite(ordinary) & np.isfinite(extraordinary))
        bad |= (ordinary.imag < 0.0) | (extraordinary.imag < 0.0)
        bad |= (ordinary == 0.0) | (extraordinary == 0.0)
        if np.any(bad):
            nothing = UndefinedError(bad, "no passive permittivity", "finite, nonzero, Im ε ≥ 0")
            raise self._undefined_error(wanted, nothing)
        for eps in (ordinary, extraordinary):
            eps.setflags(write=False)
        return ordinary, extraordinary

    def _range_error(self, wanted: FloatArray) -> RangeError:
        span = (float(wanted.min()), float(wanted.max()))
        short = [use for use in self.tables if np.any(_outside(wanted, use.range_nm))]
        because = ", ".join(f"table {use.name} has {span_text(use.range_nm)}" for use in short)
        if len(short) == 1 and short[0].range_nm == self.range_nm:
            because = f"table {short[0].name}"
        fault = Fault(
            where=f"material {self.name}",
            key="wavelength_nm",
            found=span_text(span),
            expected=f"within {span_text(self.range_nm)}" + (f" ({because})" if because else ""),
        )
        return RangeError([fault], self.name, self.range_nm, span)

    def _undefined_error(self, wanted: FloatArray, undefined: UndefinedError) -> RangeError:
        refused = wanted[undefined.where]
        span = (float(refused.min()), float(refused.max()))
        fault = Fault(
            where=f"material {self.name}",
            key="wavelength_nm",
            found=f"{undefined.found} at {span_text(span)}",
            expected=undefined.expected,
        )
        return RangeError([fault], self.name, self.range_nm, span)


# Studies ask again and again for the same materials at the same wavelengths.
@lru_cache(maxsize=512)
def _kept_permittivity(
    material: Material, wavelength_nm: bytes, shape: tuple[int, ...]
) -> tuple[ComplexArray, ComplexArray]:
    return material._evaluated(np.frombuffer(wavelength_nm, dtype=np.float64).reshape(shape))


def span_text(range_nm: tuple[float, float]) -> str:
    """Write a range of wavelengths for a message: ``400 to 1090 nm``."""
    low, high = range_nm
    return f"{low:.6g} nm" if low == high else f"{low:.6g} to {high:.6g} nm"


def common_range_nm(materials: Iterable[Material]) -> tuple[float, float]:
    """Wavelengths (nm) at which all the materials are defined; low > high when there are none."""
    ranges = [material.range_nm for material in materials]
    return max(low for low, _ in ranges), min(high for _, high in ranges)


def all_tables(materials: Iterable[Material]) -> tuple[TableUse, ...]:
    """Every table behind the materials, each once, in order of first use."""
    return tuple(dict.fromkeys(use for material in materials for use in material.tables))


def _outside(wavelength_nm: FloatArray, range_nm: tuple[float, float]) -> npt.NDArray[np.bool_]:
    low, high = range_nm
    below = wavelength_nm < low * (1.0 - RANGE_SLACK)
    return below | (wavelength_nm > high * (1.0 + RANGE_SLACK))
