"""Checks of the study tables that the shape of a single value cannot tell."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from pydantic import BaseModel

from optics.device.address import orientation_group, value_at
from optics.device.door import shown
from optics.device.draft import MOST_WAVELENGTHS, STEP_SLACK, Draft
from optics.device.errors import CaseError
from optics.device.study_schema import (
    AxisModel,
    LimitModel,
    ObjectiveModel,
    OptimizeModel,
    SweepModel,
    ToleranceModel,
)

Path = tuple[str, str]  # key in the case file, address it holds


def check_studies(draft: Draft, resolved: Mapping[str, Any] | None) -> None:
    """Note faults of the sweep, optimize and tolerance tables.

    Parameters
    ----------
    draft : Draft
        The case in the making.
    resolved : mapping or None
        Resolved document, in which addresses are looked up; None if the document is at fault.
    """
    parts = draft.parts
    studies: list[list[Path]] = []
    if parts.sweep is not None:
        studies.append(_sweep(draft, parts.sweep))
    if parts.optimize is not None:
        studies.append(_optimize(draft, parts.optimize))
    if parts.tolerance is not None:
        studies.append(_tolerance(draft, parts.tolerance))
    for paths in studies:
        _check_orientations(draft, paths)
        if resolved is not None:
            _check_paths(draft, resolved, paths)


def _quoted(prefix: str, path: str) -> str:
    return f'{prefix}."{path}"' if "." in path else f"{prefix}.{path}"


def _linked(prefix: str, linked: Mapping[str, str]) -> list[Path]:
    key = f"{prefix}.linked"
    return [(_quoted(key, path), path) for path in linked] + [
        (_quoted(key, path), other) for path, other in linked.items()
    ]


def _sweep(draft: Draft, study: SweepModel) -> list[Path]:
    for path, axis in study.axes.items():
        _check_axis(draft, _quoted("sweep.axes", path), axis)
    axes = [(_quoted("sweep.axes", path), path) for path in study.axes]
    return axes + _linked("sweep", study.linked)


def _check_axis(draft: Draft, key: str, axis: AxisModel) -> None:
    stepped = [name for name in ("start", "stop", "step") if getattr(axis, name) is not None]
    if (axis.values is None) == (not stepped) or len(stepped) not in (0, 3):
        found = ", ".join([*stepped, *([] if axis.values is None else ["values"])]) or "nothing"
        draft.faults.add(key, found, "either start, stop and step, or values")
        return
    if axis.start is None or axis.stop is None or axis.step is None:
        return
    if not axis.stop > axis.start:
        draft.faults.add(f"{key}.stop", shown(axis.stop), f"above start = {axis.start:.10g}")
        return
    steps = (axis.stop - axis.start) / axis.step
    if steps > MOST_WAVELENGTHS:
        draft.faults.add(f"{key}.step", shown(axis.step), f"at most {MOST_WAVELENGTHS} values")
    elif abs(steps - round(steps)) > STEP_SLACK * max(steps, 1) or round(steps) < 1:
        span = axis.stop - axis.start
        draft.faults.add(f"{key}.step", shown(axis.step), f"a step that divides {span:.10g}")


def _optimize(draft: Draft, study: OptimizeModel) -> list[Path]:
    kinds = ("maximize", "minimize", "objectives")
    _exactly_one(draft, "optimize", study, kinds)
    for index, objective in enumerate(study.objectives or []):
        key = f"optimize.objectives[{index}]"
        _exactly_one(draft, key, objective, tuple(ObjectiveModel.model_fields))
    for path, bounds in study.variables.items():
        if not bounds.max > bounds.min:
            key = f"{_quoted('optimize.variables', path)}.max"
            draft.faults.add(key, shown(bounds.max), f"above min = {bounds.min:.10g}")
    _check_limits(draft, "optimize.constraints", study.constraints)
    variables = [(_quoted("optimize.variables", path), path) for path in study.variables]
    return variables + _linked("optimize", study.linked)


def _tolerance(draft: Draft, study: ToleranceModel) -> list[Path]:
    for path, spread in study.spread.items():
        key = _quoted("tolerance.spread", path)
        _exactly_one(draft, key, spread, ("relative_sd", "sd", "half_width"))
    _check_limits(draft, "tolerance.limits", study.limits)
    for index, group in enumerate(study.groups):
        for position, path in enumerate(group.paths):
            key = f"tolerance.groups[{index}].paths[{position}]"
            if path not in study.spread:
                draft.faults.add(key, f"{shown(path)} without spread", "a path of tolerance.spread")
            elif path in group.paths[:position]:
                draft.faults.add(key, f"{shown(path)} again", "each path once")
    spread_paths = [(_quoted("tolerance.spread", path), path) for path in study.spread]
    return spread_paths + _linked("tolerance", study.linked)


def _check_limits(draft: Draft, prefix: str, limits: Mapping[str, LimitModel]) -> None:
    for name, limit in limits.items():
        key = _quoted(prefix, name)
        if limit.min is None and limit.max is None:
            draft.faults.add(key, "nothing", "min, max or both")
        elif limit.min is not None and limit.max is not None and limit.min > limit.max:
            found = f"min = {limit.min:.10g} above max = {limit.max:.10g}"
            draft.faults.add(key, found, "min at most max")


def _exactly_one(draft: Draft, key: str, part: BaseModel, names: tuple[str, ...]) -> None:
    given = [name for name in names if getattr(part, name) is not None]
    if len(given) != 1:
        found = " and ".join(given) or "none of them"
        draft.faults.add(key, found, f"exactly one of {', '.join(names)}")


def _check_paths(draft: Draft, resolved: Mapping[str, Any], paths: Iterable[Path]) -> None:
    """Every address of a study leads to a number."""
    for key, path in paths:
        try:
            value = value_at(resolved, path, draft.faults.where)
        except CaseError as error:
            fault = error.faults[0]
            draft.faults.add(key, f"{shown(path)}, {fault.found}", fault.expected, fault.near)
            continue
        if isinstance(value, bool) or not isinstance(value, int | float):
            draft.faults.add(key, f"{shown(path)}, {shown(value)}", "the address of a number")


def _check_orientations(draft: Draft, paths: Iterable[Path]) -> None:
    """Two orientation numbers of one emitter in one study say the same thing twice."""
    seen: dict[str, str] = {}
    for key, path in paths:
        emitter = orientation_group(path)
        if emitter is None or seen.setdefault(emitter, path) == path:
            continue
        found = f"{shown(path)} beside {shown(seen[emitter])}"
        draft.faults.add(key, found, "one orientation number of an emitter in one study")
