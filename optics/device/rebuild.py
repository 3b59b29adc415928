"""A case with other numbers of its films and emitters, without going through the whole door again.

Studies do this thousands of times. What such a number can touch is checked by the very functions
that check a case file; where anything is at fault, or could be touched beyond that, the whole
door decides and words the fault.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from pydantic import BaseModel, ValidationError

from optics.device.address import changed, is_number
from optics.device.build import Built
from optics.device.door import Faults
from optics.device.draft import Draft, Parts
from optics.device.emission import make_emitters
from optics.device.emitter import Emitter
from optics.device.layering import Outline
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
        None where it takes the whole door: anything else than numbers of films and emitters,
        and any fault.

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
    outline = replace(
        built.outline, thickness_nm=tuple(layer.thickness_nm for layer in model.layers)
    )
    stack = _stack(built.stack, outline)
    made = _emitters(built, document, label, model, stack, outline)
    if made is None:
        return None
    emitters, warnings = made
    return replace(
        built,
        stack=stack,
        emitters=emitters,
        warnings=warnings,
        document=document,
        model=model,
        outline=outline,
    )


def _is_local(path: str) -> bool:
    """Whether an address is one that acts on films and emitters only, and on no wavelengths."""
    if path.startswith("layers."):
        return path.endswith(".thickness_nm")
    return path.startswith("emitters.") and not path.endswith(".line_nm")


def _parsed(built: Built, document: dict[str, Any]) -> CaseModel | None:
    """Model of a changed document, whose changed entries are written in full; None on a fault."""
    update: dict[str, list[BaseModel]] = {}
    for section in ("layers", "emitters"):
        before, entries = built.document[section], document[section]
        if entries is before:
            continue
        parts = list(getattr(built.model, section))
        for index, entry in enumerate(entries):
            if entry is before[index]:
                continue
            try:
                parts[index] = type(parts[index]).model_validate(entry)
            except ValidationError:
                return None
            entries[index] = parts[index].model_dump(by_alias=True, exclude_none=True)
        update[section] = parts
    return built.model.model_copy(update=update)


def _stack(stack: Stack, outline: Outline) -> Stack:
    """Stack with the thicknesses of an outline without fault."""
    films = tuple(
        film if film.thickness_nm == thickness_nm else replace(film, thickness_nm=thickness_nm)
        for film, thickness_nm in zip(stack.films, outline.largest_nm, strict=True)
    )
    return replace(stack, films=films)


def _emitters(
    built: Built,
    document: Mapping[str, Any],
    label: str,
    model: CaseModel,
    stack: Stack,
    outline: Outline,
) -> tuple[tuple[Emitter, ...], tuple[str, ...]] | None:
    """Emitters and all warnings of the case, which emitters alone cause; None on a fault."""
    faults, parts = Faults(label), Parts.of(model)
    materials = Materials(parts.materials, built.files, faults)
    draft = Draft(document, built.files, faults, model, model, parts, materials, ())
    draft.grid_nm, draft.grid_is_whole = built.wavelength_nm, True
    draft.every_nm = built.every_wavelength_nm
    emitters = make_emitters(draft, stack, outline)
    return None if faults.found else (emitters, tuple(draft.warnings))


__all__ = ["rebuilt"]
