"""Check and assemble the stack of a case."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from optics.device.door import shown
from optics.device.draft import Draft, grid_text
from optics.device.errors import CaseError
from optics.device.materials import Material, span_text
from optics.device.salvage import known
from optics.device.schema import SlabModel
from optics.device.stack import Film, Slab, Stack

# What a film of unknown thickness counts for: the most there may be leaves most room to a zone.
_MOST_NM = 1e7


@dataclass(frozen=True, slots=True)
class Outline:
    """What is certain of a stack, even where some of it is at fault.

    Whatever is unknown counts as what excludes least: transparent, and as thick as can be. So a
    fault found on it stays one, whatever the unknown turns out to be.

    Attributes
    ----------
    materials : tuple of Material or None
        Of every film from the bottom.
    thickness_nm : tuple of float or None
        The same.
    absorbing : tuple of bool
        The same: whether the film certainly absorbs at some wavelength of the case.
    ends : (bool, bool)
        Whether absorbing surroundings certainly stand directly below and above the films.
    """

    materials: tuple[Material | None, ...]
    thickness_nm: tuple[float | None, ...]
    absorbing: tuple[bool, ...]
    ends: tuple[bool, bool]

    @property
    def largest_nm(self) -> tuple[float, ...]:
        """Largest thickness in nm that every film may have."""
        return tuple(_MOST_NM if value is None else value for value in self.thickness_nm)


def make_stack(draft: Draft) -> tuple[Stack | None, Outline]:
    """Stack of a case, None if anything in the draft is at fault so far, and its outline."""
    draft.check_names("layers")
    uses = _Uses(draft)
    materials = tuple(_film_material(draft, uses, i) for i in range(len(draft.parts.layers)))
    slabs = {
        section: _slab_material(draft, uses, section, part)
        for section, part in (("substrate", draft.parts.substrate), ("cover", draft.parts.cover))
    }
    outer = tuple(
        uses.material(known(draft.parts.surroundings, side), f"surroundings.{side}")
        for side in ("bottom", "top")
    )
    _check_outer(draft, outer)
    for name in draft.parts.materials or {}:
        # A material that nothing uses is still read, so that its faults show.
        draft.materials.get(name, f"materials.{name}")
    outline = _outline(draft, materials, outer)
    if draft.faults.found:
        return None, outline
    draft.tables += [use for material in uses.used() for use in material.tables]
    return _assembled(draft, materials, slabs, outer), outline


def _assembled(
    draft: Draft,
    materials: Sequence[Material | None],
    slabs: Mapping[str, Material | None],
    outer: Sequence[Material | None],
) -> Stack:
    """Stack of a draft without fault so far."""
    parts = draft.parts
    films = tuple(
        Film(layer.name, material, layer.thickness_nm)
        for layer, material in zip(parts.layers, materials, strict=True)
        if layer is not None and material is not None
    )
    substrate, cover = (
        Slab(material, part.thickness_mm, part.exit)
        if part is not None and (material := slabs[section]) is not None
        else None
        for section, part in (("substrate", parts.substrate), ("cover", parts.cover))
    )
    bottom, top = outer
    # Without a fault they are there; the checker cannot know.
    assert bottom is not None
    assert top is not None
    assert len(films) == len(materials)
    return Stack(films, substrate, cover, bottom, top)


def _outline(
    draft: Draft, materials: tuple[Material | None, ...], outer: Sequence[Material | None]
) -> Outline:
    thickness = [known(layer, "thickness_nm") for layer in draft.parts.layers]
    below, above = (
        material is not None and not _may_have_slab(draft, slab) and draft.absorbs(material)
        for slab, material in zip(("substrate", "cover"), outer, strict=True)
    )
    return Outline(
        materials,
        tuple(thickness),
        tuple(material is not None and draft.absorbs(material) for material in materials),
        (below, above),
    )


def _may_have_slab(draft: Draft, section: str) -> bool:
    return section in draft.document or section in draft.parts.doubtful


class _Uses:
    """Materials in use, each checked against the wavelengths."""

    def __init__(self, draft: Draft) -> None:
        self._draft = draft
        self._used: dict[str, Material] = {}
        self._gaps: dict[str, list[tuple[str, str]]] = {}

    def material(self, name: str | None, key: str) -> Material | None:
        """Material `name`, None if it is not known what it is.

        Under every key that names it is noted that it is unknown or does not cover the wavelengths.
        """
        material = None if name is None else self._draft.materials.get(name, key)
        if name is None or material is None:
            return None
        if name not in self._used:
            self._used[name] = material
            self._gaps[name] = _gaps(self._draft, material, name)
        for found, expected in self._gaps[name]:
            self._draft.faults.add(key, found, expected)
        return material

    def used(self) -> list[Material]:
        """Every material in use, in order of first use."""
        return list(self._used.values())


def _gaps(draft: Draft, material: Material, name: str) -> list[tuple[str, str]]:
    """Wavelengths of the case at which a material is not defined: what is found and expected."""
    every = draft.every_nm
    if every is None:
        return []
    try:
        material.permittivity(every)
    except CaseError as error:
        if material.covers(every):
            return [(f'"{name}" with {fault.found}', fault.expected) for fault in error.faults]
        expected = f"a material known at every wavelength of the case, {grid_text(every)}"
        return [(f'"{name}", known from {span_text(material.range_nm)}', expected)]
    return []


def _film_material(draft: Draft, uses: _Uses, index: int) -> Material | None:
    name = known(draft.parts.layers[index], "material")
    return uses.material(name, f"{draft.key('layers', index)}.material")


def _slab_material(
    draft: Draft, uses: _Uses, section: str, part: SlabModel | None
) -> Material | None:
    key = f"{section}.material"
    material = uses.material(known(part, "material"), key)
    if material is None or not _isotropic(draft, material, key):
        return None
    index = np.sqrt(draft.permittivity(material)[1]).real
    if not np.all(index > 0):
        draft.faults.add(key, f"{shown(material.name)} with n = 0", "a slab with n above 0")
    return material


def _isotropic(draft: Draft, material: Material, key: str) -> bool:
    if not material.isotropic:
        found = f"{shown(material.name)}, which is birefringent"
        draft.faults.add(key, found, "an isotropic material")
    return material.isotropic


def _check_outer(draft: Draft, outer: Sequence[Material | None]) -> None:
    """Surroundings: isotropic, absorbing on one side at most and there without a slab."""
    absorbing = []
    for side, slab, material in zip(("bottom", "top"), ("substrate", "cover"), outer, strict=True):
        if material is None:
            continue
        key = f"surroundings.{side}"
        if not _isotropic(draft, material, key) or not draft.absorbs(material):
            continue
        absorbing.append(side)
        if slab in draft.document:
            found = f"{shown(material.name)}, which absorbs, behind a slab"
            draft.faults.add(key, found, f"transparent surroundings, or no [{slab}] between")
    if len(absorbing) == 2:
        draft.faults.add(
            "surroundings", "absorbing media on both sides", "absorbing surroundings on one side"
        )
