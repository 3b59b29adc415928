"""A case with other numbers of its films, materials and emitters, without the whole door.

Studies do this thousands of times. What such a number can touch is checked by the very functions
that check a case file; where anything is at fault, or could be touched beyond that, the whole
door decides and words the fault.
"""

from __future__ import annotations

from collections.abc import Mapping
from copy import copy
from dataclasses import replace
from typing import Any

from pydantic import ValidationError

from optics.device.address import changed, is_number
from optics.device.build import Built
from optics.device.door import Faults
from optics.device.draft import Draft, Parts
from optics.device.emission import make_emitters
from optics.device.layering import Outline, make_stack
from optics.device.loader import Materials
from optics.device.schema import CaseModel
from optics.device.stack import Stack


def rebuilt(built: Built, values: Mapping[str, float | str], label: str) -> Built | None:
    """Objects of a case with other numbers, the same as `build` makes of the changed document.

    Parameters
    ----------
    built : Built
        Of the case as it stands.
    values : mapping of str to number or str
        By dotted address.
    label : str
        How messages call the case.

    Returns
    -------
    Built or None
        None where it takes the whole door: anything else than numbers of films, materials
        and emitters, and any fault.

    Raises
    ------
    CaseError
        If there is no such address.
    """
    if not all(_is_local(path) and is_number(value) for path, value in values.items()):
        return None
    document: dict[str, Any] = dict(built.document)
    for path, value in values.items():
        document = changed(document, path, value, label)
    model = _parsed(built, document)
    if model is None:
        return None
    draft = _draft(built, document, model, label)
    stack, outline = _stack(built, draft, model)
    if stack is None:
        return None
    emitters = make_emitters(draft, stack, outline)
    if draft.faults.found:
        return None
    return replace(
        built,
        stack=stack,
        emitters=emitters,
        warnings=tuple(draft.warnings),  # those of a stack are faults, so all are of emitters
        document=document,
        model=model,
        outline=outline,
    )


def _is_local(path: str) -> bool:
    """Whether an address is one that acts on films and emitters only, and on no wavelengths."""
    if path.startswith("layers."):
        return path.endswith(".thickness_nm")
    return path.startswith(("emitters.", "materials.")) and not path.endswith(".line_nm")


def _parsed(built: Built, document: dict[str, Any]) -> CaseModel | None:
    """Model of a changed document, whose changed entries are written in full; None on a fault."""
    update: dict[str, Any] = {}
    for section in ("materials", "layers", "emitters"):
        before, entries = built.document.get(section), document.get(section)
        if before is None or entries is None or entries is before:
            continue
        parts = copy(getattr(built.model, section))
        for key in entries if isinstance(entries, dict) else range(len(entries)):
            if entries[key] is before[key]:
                continue
            try:
                parts[key] = type(parts[key]).model_validate(entries[key])
            except ValidationError:
                return None
            entries[key] = parts[key].model_dump(by_alias=True, exclude_none=True)
        update[section] = parts
    return built.model.model_copy(update=update)


def _draft(built: Built, document: Mapping[str, Any], model: CaseModel, label: str) -> Draft:
    """Workspace of a parsed document on the wavelengths of a case."""
    faults, parts = Faults(label), Parts.of(model)
    materials = Materials(parts.materials, built.files, faults)
    draft = Draft(document, built.files, faults, model, model, parts, materials, ())
    draft.grid_nm, draft.grid_is_whole = built.wavelength_nm, True
    draft.every_nm = built.every_wavelength_nm
    return draft


def _stack(built: Built, draft: Draft, model: CaseModel) -> tuple[Stack | None, Outline]:
    """Stack and its outline; of the same materials where none of their numbers has changed."""
    if model.materials is not built.model.materials:
        return make_stack(draft)
    thickness_nm = tuple(layer.thickness_nm for layer in model.layers)
    films = tuple(
        film if film.thickness_nm == own_nm else replace(film, thickness_nm=own_nm)
        for film, own_nm in zip(built.stack.films, thickness_nm, strict=True)
    )
    return replace(built.stack, films=films), replace(built.outline, thickness_nm=thickness_nm)


__all__ = ["rebuilt"]
