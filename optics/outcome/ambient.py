"""The device as seen from outside: what it reflects, lets through and absorbs, and its contrast."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from optics._version import VERSION
from optics.device.errors import CaseError, Fault
from optics.device.materials import all_tables, common_range_nm, span_text
from optics.device.spectrum import trapezoid_weights
from optics.device.stack import absorbs
from optics.kernels.ambient import lit_device
from optics.kernels.exits import ABSORBING, MATCHED
from optics.kernels.problem import Problem, make_problem
from optics.outcome.angular import angular, faults_of_angles
from optics.outcome.color import library, observer_at
from optics.outcome.directional import SIDES, transmitted
from optics.outcome.light import problem_of
from optics.outcome.side_ambient import (
    METER_DEG,
    Light,
    SideAmbient,
    ambient_dataset,
    seen_in_daylight,
)
from optics.outcome.spectra import angular_frame

if TYPE_CHECKING:
    import pandas
    import xarray
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.materials import Material, TableUse
    from optics.outcome.angular import Angular

    Floats = NDArray[np.float64]

SCHEMA = "outcouple.ambient/1"
DEFAULT_ANGLES_DEG = tuple(float(angle) for angle in range(0, 91, 5))
_FIRST_NM, _LAST_NM, _STEP_NM = 380, 780, 2
_LARGE_LOST_SHARE = 1e-3
_LARGEST_TURN = np.pi / 4  # of a film's round-trip phase between neighboring wavelengths
_REAL_PART = 1.1  # of the stand-in film's index over the largest outer one


@dataclass(frozen=True, slots=True)
class Ambient:
    """Optical response of a device to light from outside.

    Attributes
    ----------
    title, case_sha256 : str
    angle_deg : tuple of float
    wavelength_nm : tuple of float
        Of reflectance, transmittance and absorptance.
    sides : mapping of str to (SideAmbient or None)
        ``bottom`` and ``top``; None where absorbing surroundings leave no outside.
    illuminance_lx : float or None
        On the device's face; None if no contrast was asked for.
    energy_balance : float
        Largest distance of R + T + A from 1, with A added up film by film.
    lost_share : float
        Share of D65 daylight, weighted by the eye, outside the wavelengths.
    warnings : tuple of str
    tables : tuple of TableUse
    emission : Angular or None
        The device's own light that the contrast is made with.
    """

    title: str
    case_sha256: str
    angle_deg: tuple[float, ...]
    wavelength_nm: tuple[float, ...]
    sides: Mapping[str, SideAmbient | None]
    illuminance_lx: float | None
    energy_balance: float
    lost_share: float
    warnings: tuple[str, ...]
    tables: tuple[TableUse, ...]
    emission: Angular | None

    def to_dict(self, *, spectral: bool = False) -> dict[str, Any]:
        """Build the JSON result, ``outcouple.ambient/1``: plain types only.

        Parameters
        ----------
        spectral : bool
            With reflectance, transmittance and absorptance by angle and wavelength.
        """
        sides: dict[str, Any] = {}
        for name, side in self.sides.items():
            sides[name] = None if side is None else side.to_dict()
            if spectral and side is not None:
                sides[name] |= {"wavelength_nm": list(self.wavelength_nm), **side.spectra()}
        return {
            **self._head(),
            "sides": sides,
            "accuracy": {"energy_balance": self.energy_balance},
            "warnings": list(self.warnings),
        }

    def to_frame(self, *, spectral: bool = False) -> pandas.DataFrame:
        """Build a long table: side, angle_deg, wavelength_nm, quantity, value, unit."""
        sides = self.to_dict(spectral=spectral)["sides"]
        return angular_frame({name: side for name, side in sides.items() if side is not None})

    def to_dataset(self) -> xarray.Dataset:
        """Label everything by side, angle_deg, wavelength_nm and polarization; NaN for null."""
        head = {key: value for key, value in self._head().items() if value is not None}
        said = {"energy_balance": self.energy_balance, "warnings": "\n".join(self.warnings)}
        return ambient_dataset(self.sides, self.angle_deg, self.wavelength_nm, head | said)

    def _head(self) -> dict[str, Any]:
        return {
            "schema": SCHEMA,
            "version": VERSION,
            "title": self.title,
            "case_sha256": self.case_sha256,
            "illuminant": "D65",
            "illuminance_lx": self.illuminance_lx,
            "lost_share": self.lost_share,
        }


def ambient(
    case: Case,
    illuminance_lx: float | None = None,
    angles_deg: Sequence[float] = DEFAULT_ANGLES_DEG,
    wavelength_nm: Sequence[float] | None = None,
) -> Ambient:
    """Compute what a device does with light from outside, and its contrast in such light.

    Parameters
    ----------
    case : Case
    illuminance_lx : float or None
        On the device's face; gives the contrast, for which the case needs a current density.
    angles_deg : sequence of float
        0 to 90, of incidence and of view, in the medium outside; in the slab's medium where its
        exit is matched.
    wavelength_nm : sequence of float or None
        Ascending, of the ambient light; None: 380 to 780 by 2, as far as all optical constants
        and filters reach.

    Returns
    -------
    Ambient

    Raises
    ------
    CaseError
        If constants or filters do not cover the wavelengths, or a contrast is asked for without
        a current density.
    ValueError
        If an angle, a wavelength or the illuminance cannot be.
    """
    if faults := faults_of_question(illuminance_lx, angles_deg, wavelength_nm):
        raise ValueError("\n".join(faults))
    angle = np.abs(np.array(angles_deg, dtype=np.float64))  # -0 is 0
    grid = _grid(case) if wavelength_nm is None else np.array(wavelength_nm, dtype=np.float64)
    _check(case, grid, illuminance_lx)
    problem = _without_emitter(case, grid)
    seen = None if illuminance_lx is None else angular(case, angles_deg)
    weights, lost = _daylight(grid)
    sides: dict[str, SideAmbient | None] = {}
    balance = 0.0
    for place, name in enumerate(SIDES):
        if problem.sides.kind[place] == ABSORBING:
            sides[name] = None
            continue
        powers = _powers(problem, place, np.append(angle, METER_DEG))
        balance = max(balance, float(np.abs(powers.sum(axis=-1) - 1.0).max()))
        luminance = None if seen is None else seen.sides[name].luminance_cd_m2
        own, other = (transmitted(case, side, grid) for side in (place, 1 - place))
        light = Light(weights, own, other, illuminance_lx)
        sides[name] = seen_in_daylight(angle, powers, light, luminance)
    return Ambient(
        title=case.title,
        case_sha256=case.sha256,
        angle_deg=tuple(angle.tolist()),
        wavelength_nm=tuple(grid.tolist()),
        sides=MappingProxyType(sides),
        illuminance_lx=illuminance_lx,
        energy_balance=balance,
        lost_share=lost,
        warnings=(() if seen is None else seen.warnings) + tuple(_warnings(case, grid, lost)),
        tables=all_tables(_materials(case)) if seen is None else seen.tables,
        emission=seen,
    )


def faults_of_question(
    illuminance_lx: float | None,
    angles_deg: Sequence[float],
    wavelength_nm: Sequence[float] | None,
) -> list[str]:
    """What is wrong with what `ambient` is asked for, one line each; empty if nothing is."""
    faults = faults_of_angles(angles_deg)
    if illuminance_lx is not None and not 0.0 < illuminance_lx < np.inf:
        faults.append(f"illuminance: found {illuminance_lx:g}; expected lux above 0")
    if wavelength_nm is not None:
        values = np.array(wavelength_nm, dtype=np.float64)
        if values.size < 2 or not np.all(np.diff(values) > 0.0) or not values[0] > 0.0:
            faults.append(
                f"wavelengths: found {', '.join(f'{one:g}' for one in values) or 'none'}; "
                "expected two or more in nm, ascending"
            )
    return faults


def _materials(case: Case) -> list[Material]:
    stack = case.stack
    slabs = [slab.material for slab in (stack.substrate, stack.cover) if slab is not None]
    return [*(film.material for film in stack.films), *slabs, stack.bottom, stack.top]


def _grid(case: Case) -> Floats:
    """Visible wavelengths, as far as everything is known; the case's own where that is little."""
    low, high = common_range_nm(_materials(case))
    for outside in (case.sides.bottom, case.sides.top):
        if outside.filter is not None:
            low, high = max(low, outside.filter.x[0]), min(high, outside.filter.x[-1])
    every = np.arange(_FIRST_NM, _LAST_NM + 1, _STEP_NM, dtype=np.float64)
    kept: Floats = every[(every >= low) & (every <= high)]
    return kept if kept.size > 1 else case.wavelength_nm


def _check(case: Case, grid: Floats, illuminance_lx: float | None) -> None:
    """Raise every fault that stands between the case and the result."""
    faults: list[Fault] = []
    for material in _materials(case):
        try:
            material.permittivity(grid)
        except CaseError as error:
            faults += error.faults
    for name, outside in zip(SIDES, (case.sides.bottom, case.sides.top), strict=True):
        if outside.filter is not None:
            ends = (float(outside.filter.x[0]), float(outside.filter.x[-1]))
            if grid[0] < ends[0] or grid[-1] > ends[1]:
                found = f"a filter known from {span_text(ends)}"
                expected = f"one known from {span_text((float(grid[0]), float(grid[-1])))}"
                faults.append(Fault(case.label, f"sides.{name}.filter", found, expected))
    if illuminance_lx is not None and case.drive.current_density_mA_cm2 is None:
        key = "drive.current_density_mA_cm2"
        faults.append(
            Fault(case.label, key, "nothing", "a current density: contrast needs a luminance")
        )
    if grid.size < 2:
        faults.append(Fault(case.label, "wavelength", "one wavelength", "two or more in nm"))
    if faults:
        raise CaseError(dict.fromkeys(faults))


def _without_emitter(case: Case, grid: Floats) -> Problem:
    """Engine arrays in which every film keeps its loss, the emitters' own too.

    The engine takes the emitter's film as lossless. A film of no thickness, below all others,
    stands in for it; its index is above those outside, so that no wave in it is at its light line.
    """
    given = problem_of(case, case.emitters[0], grid, np.zeros(1))
    eps_o, eps_e = case.stack.permittivity(grid)
    outer = np.stack([given.down.eps_o[:, -1], given.up.eps_o[:, -1]], axis=1)
    index = _REAL_PART * np.maximum(given.sides.n_outer, given.sides.n_out).max(axis=1)
    stand_in = (index**2).astype(np.complex128)[:, None]
    return make_problem(
        grid,
        np.hstack([stand_in, eps_o]),
        np.hstack([stand_in, eps_e]),
        np.concatenate([[0.0], case.stack.thickness_nm]),
        outer,
        0,
        np.zeros(1),
        given.sides,
    )


def _powers(problem: Problem, side: int, angle_deg: Floats) -> Floats:
    """R, T and A of the device without filter and polarizer (w, 2, n, 3), s and p."""
    matched = problem.sides.kind[side] == MATCHED
    n = (problem.sides.n_outer if matched else problem.sides.n_out)[:, side]
    return lit_device(
        problem, np.ascontiguousarray(n[:, None] * np.sin(np.deg2rad(angle_deg))), side
    )


@cache
def _d65() -> tuple[Floats, Floats]:
    """CIE standard illuminant D65, relative power by wavelength in nm, of the library's table."""
    table = library().SDS_ILLUMINANTS["D65"]
    return np.array(table.wavelengths), np.array(table.values)


def daylight(wavelength_nm: Floats) -> Floats:
    """Relative spectral power (w,) of CIE standard illuminant D65; linear between table points."""
    nm, power = _d65()
    return np.interp(wavelength_nm, nm, power, left=0.0, right=0.0)


def _daylight(grid: Floats) -> tuple[Floats, float]:
    """D65 times observer, trapezoid weights included (w, 3), and the share of Y outside the grid.

    Normalized to Y = 1 on the grid, so that a perfect mirror has a luminous reflectance of 1.
    """
    every = np.union1d(np.arange(360.0, 831.0), grid[[0, -1]])
    whole = daylight(every) * observer_at(every)[:, 1]
    kept = (every >= grid[0]) & (every <= grid[-1])
    inside = np.trapezoid(whole[kept], every[kept]) / np.trapezoid(whole, every)
    weights = (daylight(grid) * trapezoid_weights(grid))[:, None] * observer_at(grid)
    total = weights[:, 1].sum()
    if not total > 0.0:
        raise ValueError(
            f"wavelengths: found {grid[0]:g} to {grid[-1]:g} nm; expected visible ones"
        )
    return weights / total, max(0.0, 1.0 - float(inside))


def _warnings(case: Case, grid: Floats, lost: float) -> list[str]:
    said = []
    if lost > _LARGE_LOST_SHARE:
        said.append(
            f"{100.0 * lost:.3g} % of daylight, as the eye weighs it, lies outside {grid[0]:g} to "
            f"{grid[-1]:g} nm, where optical constants or filters end; luminous values leave it out"
        )
    stack = case.stack
    ends = ((stack.substrate, stack.bottom), (stack.cover, stack.top))
    for name, outside, (slab, beyond) in zip(
        SIDES, (case.sides.bottom, case.sides.top), ends, strict=True
    ):
        if outside.polarizer_transmittance != 1.0:
            said.append(
                f"side {name}: the polarizer counts as a neutral factor that light passes twice; "
                "a circular polarizer returns less, a linear one more"
            )
        if absorbs(beyond, grid) and not absorbs(beyond, case.every_wavelength_nm):
            said.append(
                f"side {name}: its surroundings absorb at wavelengths outside the case's; they "
                "count as transparent"
            )
        if slab is not None and slab.exit == "matched":
            said.append(
                f"side {name}: its exit is matched; angles are those in the slab, and no face "
                "reflects"
            )
    return said + _unresolved(case, grid)


def _unresolved(case: Case, grid: Floats) -> list[str]:
    """Films whose interference the wavelengths do not follow."""
    said = []
    for film in case.stack.films:
        index = np.sqrt(np.maximum(*(eps.real for eps in film.material.permittivity(grid))).clip(0))
        turn = np.abs(np.diff(4.0 * np.pi * index * film.thickness_nm / grid))
        if turn.max() > _LARGEST_TURN:
            said.append(
                f"film {film.name}: its round-trip phase turns by {turn.max() / np.pi:.2f} pi "
                "between neighboring wavelengths of the ambient light"
            )
    return said
