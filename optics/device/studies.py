"""Checks of the study tables that the shape of a single value cannot tell."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from pydantic import BaseModel

from optics.device.address import (
    is_number,
    nearest_address,
    numeric_addresses,
    orientation_group,
    value_at,
)
from optics.device.door import shown
from optics.device.draft import MOST_WAVELENGTHS, STEP_SLACK, Draft
from optics.device.errors import CaseError, Fault
from optics.device.outcome_names import OutcomeNames
from optics.device.salvage import doubtful, known, plain_types, stated
from optics.device.study_names import STUDIES, Study, name_faults
from optics.device.study_schema import (
    AxisModel,
    ObjectiveModel,
    OptimizeModel,
    SweepModel,
    ToleranceModel,
)
from optics.device.units import unit_names

Path = tuple[str, str]  # key in the case file, address it holds


def check_studies(draft: Draft, resolved: Mapping[str, Any]) -> None:
    """Note faults of the sweep, optimize and tolerance tables.

    Parameters
    ----------
    draft : Draft
        The case in the making.
    resolved : mapping
        Resolved document, in which addresses are looked up; of a document at fault what can be
        used.
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
        _check_paths(draft, resolved, paths)


def check_study_names(draft: Draft, resolved: Mapping[str, Any]) -> None:
    """Note links and outcomes of the studies that are wrong whatever else is mended.

    Of a case that is sound otherwise the study itself tells them, see `study_names`.
    """
    parts: Mapping[str, BaseModel | None] = {
        "sweep": draft.parts.sweep,
        "optimize": draft.parts.optimize,
        "tolerance": draft.parts.tolerance,
    }
    for name, part in parts.items():
        if part is not None:
            _check_names(draft, resolved, STUDIES[name], part)


def _quoted(prefix: str, path: str) -> str:
    return f'{prefix}."{path}"' if "." in path else f"{prefix}.{path}"


def _paths(prefix: str, table: Mapping[str, Any] | None) -> list[Path]:
    """Addresses that are the keys of a table, if that is known."""
    return [(_quoted(prefix, path), path) for path in table or {}]


def _linked(prefix: str, study: BaseModel) -> list[Path]:
    key = f"{prefix}.linked"
    linked: Mapping[str, str | None] = known(study, "linked") or {}
    others = [(_quoted(key, path), other) for path, other in linked.items() if other is not None]
    return _paths(key, linked) + others


def _entries(study: BaseModel, name: str) -> list[tuple[str, Any]]:
    """Entries of a table of tables by path, those of no use left out."""
    table: Mapping[str, Any] = known(study, name) or {}
    return [(path, entry) for path, entry in table.items() if entry is not None]


def _sweep(draft: Draft, study: SweepModel) -> list[Path]:
    for path, axis in _entries(study, "axes"):
        _check_axis(draft, _quoted("sweep.axes", path), axis)
    return _paths("sweep.axes", known(study, "axes")) + _linked("sweep", study)


def _check_axis(draft: Draft, key: str, axis: AxisModel) -> None:
    stepped = stated(axis, "start", "stop", "step")
    given = stepped + stated(axis, "values")
    lacking = not doubtful(axis, *AxisModel.model_fields) and len(stepped) not in (0, 3)
    if (stepped and given != stepped) or lacking or not (given or doubtful(axis, "values")):
        draft.faults.add(
            key, ", ".join(given) or "nothing", "either start, stop and step, or values"
        )
        return
    start, stop, step = (known(axis, name) for name in ("start", "stop", "step"))
    if start is None or stop is None:
        return
    if not stop > start:
        draft.faults.add(f"{key}.stop", shown(stop), f"above start = {start:.10g}")
    elif step is not None:
        _check_step(draft, f"{key}.step", stop - start, step)


def _check_step(draft: Draft, key: str, span: float, step: float) -> None:
    steps = span / step
    if steps > MOST_WAVELENGTHS:
        draft.faults.add(key, shown(step), f"at most {MOST_WAVELENGTHS} values")
    elif abs(steps - round(steps)) > STEP_SLACK * max(steps, 1) or round(steps) < 1:
        draft.faults.add(key, shown(step), f"a step that divides {span:.10g}")


def _optimize(draft: Draft, study: OptimizeModel) -> list[Path]:
    _exactly_one(draft, "optimize", study, ("maximize", "minimize", "objectives"))
    for index, objective in enumerate(known(study, "objectives") or []):
        if objective is not None:
            key = f"optimize.objectives[{index}]"
            _exactly_one(draft, key, objective, tuple(ObjectiveModel.model_fields))
    for path, bounds in _entries(study, "variables"):
        low, high = known(bounds, "min"), known(bounds, "max")
        if None not in (low, high) and not high > low:
            key = f"{_quoted('optimize.variables', path)}.max"
            draft.faults.add(key, shown(high), f"above min = {low:.10g}")
    _check_limits(draft, "optimize", study, "constraints")
    return _paths("optimize.variables", known(study, "variables")) + _linked("optimize", study)


def _tolerance(draft: Draft, study: ToleranceModel) -> list[Path]:
    for path, spread in _entries(study, "spread"):
        key = _quoted("tolerance.spread", path)
        _exactly_one(draft, key, spread, ("relative_sd", "sd", "half_width"))
    _check_limits(draft, "tolerance", study, "limits")
    seen: list[str] = []
    for index, group in enumerate(known(study, "groups") or []):
        paths = known(group, "paths")
        _check_group(draft, f"tolerance.groups[{index}]", paths, study, seen)
        seen += [path for path in paths or [] if path is not None]
    return _paths("tolerance.spread", known(study, "spread")) + _linked("tolerance", study)


def _check_group(
    draft: Draft,
    key: str,
    paths: list[str | None] | None,
    study: ToleranceModel,
    seen: list[str],
) -> None:
    """Note paths without spread, given twice, or among those of an earlier group."""
    spread = known(study, "spread")
    for position, path in enumerate(paths or []):
        if path is None:
            continue
        place = f"{key}.paths[{position}]"
        if spread and path not in spread:
            draft.faults.add(place, f"{shown(path)} without spread", "a path of tolerance.spread")
        elif paths and path in paths[:position]:
            draft.faults.add(place, f"{shown(path)} again", "each path once")
        elif path in seen:
            found = f"{shown(path)}, which is in another group"
            draft.faults.add(place, found, "each path in one group")


def _check_limits(draft: Draft, study_name: str, study: BaseModel, table: str) -> None:
    for name, limit in _entries(study, table):
        key = _quoted(f"{study_name}.{table}", name)
        low, high = known(limit, "min"), known(limit, "max")
        if not stated(limit, "min", "max"):
            if not doubtful(limit, "min", "max"):
                draft.faults.add(key, "nothing", "min, max or both")
        elif None not in (low, high) and low > high:
            found = f"min = {low:.10g} above max = {high:.10g}"
            draft.faults.add(key, found, "min at most max")


def _exactly_one(draft: Draft, key: str, part: BaseModel, names: tuple[str, ...]) -> None:
    given = stated(part, *names)
    if len(given) > 1 or not (given or doubtful(part, *names)):
        found = " and ".join(given) or "none of them"
        draft.faults.add(key, found, f"exactly one of {', '.join(names)}")


def _check_paths(draft: Draft, resolved: Mapping[str, Any], paths: Iterable[Path]) -> None:
    """Every address of a study leads to a number."""
    for key, path in paths:
        if _is_unsettled(draft, path):
            continue
        try:
            value = value_at(resolved, path, draft.faults.where)
        except CaseError as error:
            fault, near = error.faults[0], nearest_address(path, numeric_addresses(resolved))
            draft.faults.add(key, f"{shown(path)}, {fault.found}", fault.expected, near)
            continue
        if not is_number(value):
            draft.faults.add(key, f"{shown(path)}, {shown(value)}", "the address of a number")


def _check_names(draft: Draft, resolved: Mapping[str, Any], study: Study, part: BaseModel) -> None:
    """Tell wrong links and outcomes beside other faults, as far as they are sure."""
    table = plain_types(part)
    paths = known(part, study.table)
    names, units = draft.names("emitters"), unit_names(draft)
    draft.faults.found += name_faults(
        draft.faults.where,
        study,
        table,
        OutcomeNames.of(
            tuple(name for name in names if name is not None),
            tuple(dict.fromkeys(unit for unit in units if unit is not None)),
        ),
        every_path=paths is not None and all(_leads(draft, resolved, path) for path in paths),
        every_name=draft.has_sure_names("emitters") and None not in units,
    )


def _leads(draft: Draft, resolved: Mapping[str, Any], path: str) -> bool:
    """Whether an address surely leads to a number; one that does not may be a misspelled other."""
    return not _is_unsettled(draft, path) and path in numeric_addresses(resolved)


def _is_unsettled(draft: Draft, path: str) -> bool:
    """Whether the place an address leads to is itself at fault, so that nothing can be said."""
    if path.startswith("drive.charge_balance.") and None in unit_names(draft):
        return True
    section, name = (*path.split("."), "", "")[:2]
    if section in ("layers", "emitters") and not draft.has_sure_names(section):
        return name not in draft.names(section)
    return any(_covers(fault, path) for fault in draft.shape_faults)


def _covers(fault: Fault, path: str) -> bool:
    """Whether a fault lies at or above an address, or may have meant a key there."""
    table = fault.key.rpartition(".")[0]
    meant = f"{table}.{fault.near}" if table else str(fault.near)
    return any(path == key or path.startswith(f"{key}.") for key in (fault.key, meant))


def _check_orientations(draft: Draft, paths: Iterable[Path]) -> None:
    """Two orientation numbers of one emitter in one study say the same thing twice."""
    seen: dict[str, str] = {}
    for key, path in paths:
        emitter = orientation_group(path)
        if emitter is None or seen.setdefault(emitter, path) == path:
            continue
        found = f"{shown(path)} beside {shown(seen[emitter])}"
        draft.faults.add(key, found, "one orientation number of an emitter in one study")
