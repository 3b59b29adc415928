"""Check and assemble the stack of a case."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.device.door import shown
from optics.device.draft import Draft, grid_text
from optics.device.errors import CaseError
from optics.device.materials import Material, span_text
from optics.device.schema import SlabModel
from optics.device.stack import Film, Slab, Stack, absorbs

if TYPE_CHECKING:
    from numpy.typing import NDArray


def make_stack(draft: Draft) -> Stack | None:
    """Stack of a case; None if something in it is at fault (noted in the draft)."""
    draft.check_names("layers")
    uses = _Uses(draft)
    films = [_film(draft, uses, index) for index in range(len(draft.parts.layers))]
    substrate = _slab(draft, uses, "substrate", draft.parts.substrate)
    cover = _slab(draft, uses, "cover", draft.parts.cover)
    surroundings = draft.parts.surroundings
    outer: list[Material | None] = [None, None]
    if surroundings is not None:
        outer = [
            uses.material(surroundings.bottom, "surroundings.bottom"),
            uses.material(surroundings.top, "surroundings.top"),
        ]
        _check_outer(draft, outer)
    for name in draft.parts.materials:
        # A material that nothing uses is still read, so that its faults show.
        draft.materials.get(name, f"materials.{name}")
    bottom, top = outer
    whole = [film for film in films if film is not None]
    complete = len(whole) == len(films) > 0
    lost_slab = any(
        slab is None and name in draft.document
        for name, slab in (("substrate", substrate), ("cover", cover))
    )
    if not complete or lost_slab or bottom is None or top is None:
        return None
    draft.tables += [use for material in uses.used() for use in material.tables]
    return Stack(tuple(whole), substrate, cover, bottom, top)


class _Uses:
    """Materials in use; each is checked against the wavelengths where it is first used."""

    def __init__(self, draft: Draft) -> None:
        self._draft = draft
        self._known: dict[str, Material | None] = {}

    def material(self, name: str, key: str) -> Material | None:
        """Material `name`, or None (noted) if it is unknown or does not cover the wavelengths."""
        draft = self._draft
        if name in self._known and self._known[name] is not None:
            return self._known[name]
        material = draft.materials.get(name, key)
        if material is not None and name not in self._known and draft.every_nm is not None:
            material = _covering(draft, material, name, key, draft.every_nm)
        elif name in self._known:
            material = None
        self._known.setdefault(name, material)
        return material

    def used(self) -> list[Material]:
        """Every material in use, in order of first use."""
        return [material for material in self._known.values() if material is not None]


def _covering(
    draft: Draft, material: Material, name: str, key: str, every_nm: NDArray[np.float64]
) -> Material | None:
    """Return the material itself if it is defined at every wavelength of the case."""
    try:
        material.permittivity(every_nm)
    except CaseError as error:
        if material.covers(every_nm):
            for fault in error.faults:
                draft.faults.add(key, f'"{name}" with {fault.found}', fault.expected)
        else:
            draft.faults.add(
                key,
                f'"{name}", known from {span_text(material.range_nm)}',
                f"a material known at every wavelength of the case, {grid_text(every_nm)}",
            )
        return None
    return material


def _film(draft: Draft, uses: _Uses, index: int) -> Film | None:
    layer = draft.parts.layers[index]
    if layer is None:
        _check_name(draft, draft.raw("layers")[index], draft.key("layers", index))
        return None
    material = uses.material(layer.material, f"{draft.key('layers', index)}.material")
    return Film(layer.name, material, layer.thickness_nm) if material else None


def _check_name(draft: Draft, raw: Any, key: str) -> None:
    """Look up the material of an entry that has other faults, so that all come to light."""
    name = raw.get("material") if isinstance(raw, Mapping) else None
    if isinstance(name, str):
        draft.materials.get(name, f"{key}.material")


def _slab(draft: Draft, uses: _Uses, section: str, part: SlabModel | None) -> Slab | None:
    if part is None:
        _check_name(draft, draft.document.get(section), section)
        return None
    key = f"{section}.material"
    material = uses.material(part.material, key)
    if material is None or not _isotropic(draft, material, key):
        return None
    if draft.every_nm is not None:
        index = np.sqrt(material.permittivity(draft.every_nm)[0]).real
        if not np.all(index > 0):
            draft.faults.add(key, f"{shown(part.material)} with n = 0", "a slab with n above 0")
            return None
    return Slab(material, part.thickness_mm, part.exit)


def _isotropic(draft: Draft, material: Material, key: str) -> bool:
    if not material.isotropic:
        found = f"{shown(material.name)}, which is birefringent"
        draft.faults.add(key, found, "an isotropic material")
    return material.isotropic


def _check_outer(draft: Draft, outer: list[Material | None]) -> None:
    """Surroundings: isotropic, absorbing on one side at most and there without a slab."""
    absorbing = []
    for side, slab, material in zip(("bottom", "top"), ("substrate", "cover"), outer, strict=True):
        if material is None:
            continue
        key = f"surroundings.{side}"
        if not _isotropic(draft, material, key) or draft.every_nm is None:
            continue
        if absorbs(material, draft.every_nm):
            absorbing.append(side)
            if slab in draft.document:
                found = f"{shown(material.name)}, which absorbs, behind a slab"
                draft.faults.add(key, found, f"transparent surroundings, or no [{slab}] between")
    if len(absorbing) == 2:
        draft.faults.add(
            "surroundings", "absorbing media on both sides", "absorbing surroundings on one side"
        )
