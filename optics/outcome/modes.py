"""Guided modes and plasmons one by one: indices, losses, fields, and the power that each takes."""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from optics.device.errors import CaseError, Fault
from optics.kernels.geometry import has_plasmon
from optics.kernels.modal_fields import mode_content
from optics.kernels.modal_nodes import Account, account
from optics.kernels.poles import leaky_modes, outer_line
from optics.outcome.budget import Budget, budget
from optics.outcome.efficiency import orientation_average
from optics.outcome.film_absorption import film_absorption, of_device
from optics.outcome.light import problem_of
from optics.outcome.modes_lines import Snapshot, destination_of, join, kind_of
from optics.outcome.modes_result import EmitterModes, Modes, Trapped
from optics.outcome.resolved import exciton_weight

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter
    from optics.kernels.problem import Problem

TRAPPED = ("guided", "surface_plasmon")
_TOLERANCE = 1e-6  # of the light budget, and of each share in the account of the films
_LARGEST_GAP = 1e-5


def modes(case: Case, wavelength_nm: float | None = None, *, leaky: bool = False) -> Modes:
    """Find every guided and plasmon mode of a case, and where its light is absorbed.

    Parameters
    ----------
    case : Case
        From `optics.read_case`.
    wavelength_nm : float, optional
        Only this wavelength of the case; averages over the spectrum become values there.
    leaky : bool
        Also list modes that leak into an outer medium, up to an imaginary index of 0.3. Their
        power is part of what leaves, so they have no share.

    Returns
    -------
    Modes

    Raises
    ------
    CaseError
        If the wavelength is none of the case's.

    Examples
    --------
    >>> import optics
    >>> found = optics.modes(optics.read_case("cases/green-bottom-pixel.toml"))
    >>> found.emitters[0].lines[0].name  # doctest: +SKIP
    """
    _check_wavelength(case, wavelength_nm)
    outcome = budget(case, tolerance=_TOLERANCE)
    found = tuple(
        _emitter_modes(case, outcome, emitter, wavelength_nm, leaky=leaky)
        for emitter in case.emitters
        if wavelength_nm is None or wavelength_nm in _grid(case, emitter)
    )
    if wavelength_nm is None:
        generated = [one.generated for one in outcome.emitters]
        absorption = of_device([one.absorption for one in found], generated)
    else:
        absorption = None
    return Modes(case.title, case.sha256, found, absorption, (*outcome.warnings, *_warnings(found)))


def _grid(case: Case, emitter: Emitter) -> NDArray[np.float64]:
    return emitter.spectrum.grid_nm(case.wavelength_nm)


def _check_wavelength(case: Case, wavelength_nm: float | None) -> None:
    every = np.unique(np.concatenate([_grid(case, emitter) for emitter in case.emitters]))
    if wavelength_nm is None or wavelength_nm in every:
        return
    nearest = every[np.abs(every - wavelength_nm).argmin()]
    span = f"{every[0]:g}" if len(every) == 1 else f"{every[0]:g} to {every[-1]:g}"
    expected = f"a wavelength of the case, {span} nm"
    raise CaseError(
        [Fault(case.label, "wavelength", f"{wavelength_nm:g} nm", expected, f"{nearest:g}")]
    )


def _warnings(found: Sequence[EmitterModes]) -> list[str]:
    said = []
    for one in found:
        if one.missing:
            said.append(f"emitter {one.name}: {one.missing} modes were counted but not found")
        gap = one.absorption.closure_error
        if abs(gap) > _LARGEST_GAP:
            said.append(
                f"emitter {one.name}: shares by film sum to 1 {gap:+.1e}, "
                f"more than {_LARGEST_GAP:g} off"
            )
    return said


def _emitter_modes(
    case: Case, outcome: Budget, emitter: Emitter, wavelength_nm: float | None, *, leaky: bool
) -> EmitterModes:
    data = outcome.spectral[emitter.name]
    grid = data["wavelength_nm"].to_numpy()
    problem = problem_of(case, emitter, grid, data["position_nm"].to_numpy())
    theta, bulk = emitter.horizontal_fraction, problem.source.bulk
    over_zone, average = exciton_weight(emitter, data, bulk)
    rate = bulk * np.array([1.0 - theta, theta])
    rate /= rate.sum(axis=1, keepdims=True)
    weight = rate[:, :, None] * over_zone / average  # (w, 2, z)

    def averaged(variable: str) -> NDArray[np.float64]:
        values = orientation_average(data[variable].to_numpy(), bulk, theta)
        return np.asarray(values @ over_zone / average)

    dissipated = averaged("F")
    rows = np.arange(grid.size) if wavelength_nm is None else np.flatnonzero(grid == wavelength_nm)
    with ThreadPoolExecutor() as pool:
        accounts = list(
            pool.map(
                lambda row: account(problem, row, emitter.film_index, weight[row], _TOLERANCE),
                rows.tolist(),
            )
        )
    spectrum = data["spectrum_weight"].to_numpy()[rows]
    if not spectrum.sum() > 0.0:
        spectrum = np.ones(rows.size)
    # So that sums over the spectrum are shares of all photons that the emitter dissipates.
    of_all = spectrum * dissipated[rows] / (spectrum @ dissipated[rows])
    snapshots = [
        _snapshot(problem, row, grid, one, dissipated[row])
        for row, one in zip(rows.tolist(), accounts, strict=True)
    ]
    lines = join(snapshots, of_all)
    if leaky:
        lines += join([_leaky_snapshot(now) for now in snapshots], of_all, leaky=True)
    return EmitterModes(
        name=emitter.name,
        media=_media(case),
        wavelength_nm=grid[rows],
        stacks=tuple(one.films for one in accounts),
        lines=lines,
        trapped=MappingProxyType(
            {key: _trapped(key, snapshots, of_all, (averaged(key) / dissipated)[rows])
             for key in TRAPPED}
        ),
        absorption=film_absorption(case, accounts, spectrum, dissipated[rows]),
        missing=sum(one.modes.missing for one in accounts),
    )  # fmt: skip


def _media(case: Case) -> tuple[str, ...]:
    stack = case.stack
    below = "bottom surroundings" if stack.substrate is None else "substrate"
    above = "top surroundings" if stack.cover is None else "cover"
    return (below, *(film.name for film in stack.films), above)


def _snapshot(
    problem: Problem, row: int, grid: NDArray[np.float64], one: Account, dissipated: float
) -> Snapshot:
    line = outer_line(problem, row)
    plasmon_from = np.inf
    if has_plasmon(problem)[row]:
        plasmon_from = max(line, float(np.sqrt(problem.source.eps_e[row])))
    # An overdamped wave makes no line on the axis whose power could be called its own.
    overdamped = np.abs(one.modes.u.imag) > one.modes.u.real
    share = np.where(overdamped, np.nan, one.power / dissipated)
    return Snapshot(float(grid[row]), one.films, one.modes, share, one.content, line, plasmon_from)


def _leaky_snapshot(now: Snapshot) -> Snapshot:
    """Leaky modes of the same stack; their power is part of what leaves."""
    found = leaky_modes(now.films)
    content = np.zeros((found.s.size, 3, now.films.kd.size + 2))
    for i, (pol, s) in enumerate(zip(found.polarization.tolist(), found.s.tolist(), strict=True)):
        mode_content(now.films, pol, s, content[i])
    return now._replace(modes=found, share=np.full(found.s.size, np.nan), content=content)


def _trapped(
    key: str,
    snapshots: Sequence[Snapshot],
    weight: NDArray[np.float64],
    of_budget: NDArray[np.float64],
) -> Trapped:
    total = {"guided": 0.0, "plasmon": 0.0}
    for now, part in zip(snapshots, weight.tolist(), strict=True):
        for mode in range(now.modes.s.size):
            kind = kind_of(now, mode)
            if kind in total and destination_of(now, mode) == key:
                total[kind] += part * float(now.share[mode])
    in_budget = float(weight @ of_budget)
    guided, plasmons = total["guided"], total["plasmon"]
    return Trapped(in_budget, guided, plasmons, in_budget - guided - plasmons)
