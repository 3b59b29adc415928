"""Check and assemble the emitters of a case."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from optics.device.address import ORIENTATION_KEYS
from optics.device.door import shown
from optics.device.draft import Draft, grid_text
from optics.device.emitter import ISOTROPIC_FRACTION, Emitter, horizontal_fraction_from
from optics.device.errors import nearest
from optics.device.layering import Outline
from optics.device.loader import table_use
from optics.device.salvage import known, stated
from optics.device.schema import (
    EmitterModel,
    GaussianSpectrumModel,
    LineSpectrumModel,
    TableSpectrumModel,
)
from optics.device.spectrum import GaussianSpectrum, LineSpectrum, Spectrum, TableSpectrum
from optics.device.units import check_shares
from optics.device.zoning import check_reach, make_zone, warn_of_bare_absorbers

if TYPE_CHECKING:
    from optics.device.stack import Stack
    from optics.device.zone import Zone

LOST_SHARE_WARNING = 1e-3


def make_emitters(draft: Draft, stack: Stack | None, outline: Outline) -> tuple[Emitter, ...]:
    """Emitters in the order of the file; every check runs for which enough of the draft is known.

    Parameters
    ----------
    draft : Draft
        The case in the making; faults are noted in it.
    stack : Stack or None
        The stack if it has no fault.
    outline : Outline
        What is certain of the stack.

    Returns
    -------
    tuple of Emitter
        Those without fault.
    """
    draft.check_names("emitters")
    check_shares(draft)
    made = [
        _emitter(draft, stack, outline, index, part)
        for index, part in enumerate(draft.parts.emitters)
        if part is not None
    ]
    return tuple(emitter for emitter in made if emitter is not None)


def _emitter(
    draft: Draft, stack: Stack | None, outline: Outline, index: int, part: EmitterModel
) -> Emitter | None:
    key = draft.key("emitters", index)
    film_index = _film_index(draft, key, part)
    is_oriented = _has_one_orientation(draft, key, part)
    spectrum = _spectrum(draft, key, part)
    thickness = None if film_index is None else outline.thickness_nm[film_index]
    zone = make_zone(draft, key, part, thickness)
    if film_index is not None:
        _check_host(draft, key, part.layer, outline, film_index)
        if zone is not None:
            closest = known(part, "closest_approach_nm")
            check_reach(draft, key, outline, film_index, zone, closest)
    if draft.model is None or film_index is None or spectrum is None or zone is None:
        return None
    if not is_oriented:
        return None
    emitter = _assembled(part, film_index, spectrum, zone)
    if stack is not None:
        warn_of_bare_absorbers(draft, key, stack, emitter)
    return emitter


def _assembled(part: EmitterModel, film_index: int, spectrum: Spectrum, zone: Zone) -> Emitter:
    """Emitter of a part without fault."""
    given = stated(part, *ORIENTATION_KEYS)
    horizontal = (
        horizontal_fraction_from(given[0], getattr(part, given[0])) if given else ISOTROPIC_FRACTION
    )
    return Emitter(
        name=part.name,
        layer=part.layer,
        film_index=film_index,
        unit=part.unit,
        spectrum=spectrum,
        zone=zone,
        closest_approach_nm=part.closest_approach_nm,
        horizontal_fraction=horizontal,
        quantum_yield=part.quantum_yield,
        exciton_fraction=part.exciton_fraction,
        share=part.share,
    )


def _film_index(draft: Draft, key: str, part: EmitterModel) -> int | None:
    """Index of the emitter's film; None where it is not certain which one is meant."""
    layer = known(part, "layer")
    names = draft.names("layers")
    if layer is None or not any(names):
        return None
    if layer not in names:
        known_names = [name for name in names if name]
        near = nearest(layer, known_names)
        # A layer at fault in its own name may be the one, unless the name looks like another's.
        if draft.has_sure_names("layers") or (None not in names and _is_sure(draft, near)):
            found = f"{shown(layer)}, no such layer"
            expected = f"the name of a layer: {', '.join(known_names)}"
            draft.faults.add(f"{key}.layer", found, expected, near)
        return None
    if names.count(layer) > 1:
        return None
    index = names.index(layer)
    if known(draft.parts.layers[index], "thickness_nm") == 0:
        layer_key = f"{draft.key('layers', index)}.thickness_nm"
        emitter = known(part, "name") or "an emitter"
        draft.faults.add(layer_key, "0", f"above 0 nm, since {emitter} emits in this layer")
    return index


def _is_sure(draft: Draft, name: str | None) -> bool:
    """Whether exactly one layer has the name, and the name has no fault."""
    return [known(layer, "name") for layer in draft.parts.layers].count(name) == 1


def _has_one_orientation(draft: Draft, key: str, part: EmitterModel) -> bool:
    """Check that an orientation is told once, whatever the values."""
    given = stated(part, *ORIENTATION_KEYS)
    if len(given) > 1:
        value = _raw_orientation(draft, part, given[1])
        draft.faults.add(
            f"{key}.{given[1]}",
            f"{shown(value)} beside {given[0]}",
            f"one of {', '.join(ORIENTATION_KEYS)}",
        )
    return len(given) <= 1


def _raw_orientation(draft: Draft, part: EmitterModel, name: str) -> object:
    """Orientation number as the document has it, even where it is at fault."""
    index = next(i for i, other in enumerate(draft.parts.emitters) if other is part)
    return draft.raw("emitters")[index].get(name)


def _spectrum(draft: Draft, key: str, part: EmitterModel) -> Spectrum | None:
    """Spectrum, None if it is not known or at fault."""
    described = known(part, "spectrum")
    if isinstance(described, LineSpectrumModel):
        line = known(described, "line_nm")
        return None if line is None else LineSpectrum(line)
    if isinstance(described, GaussianSpectrumModel):
        peak, width = known(described, "peak_nm"), known(described, "fwhm_nm")
        if peak is None or width is None:
            return None
        spectrum = GaussianSpectrum(peak, width)
        return spectrum if _fits_grid(draft, key, spectrum) else None
    if isinstance(described, TableSpectrumModel):
        return _table_spectrum(draft, key, described)
    return None


def _table_spectrum(draft: Draft, key: str, described: TableSpectrumModel) -> Spectrum | None:
    path, quantity = known(described, "table"), known(described, "quantity")
    curve_key = f"{key}.spectrum.table"
    curve = None if path is None else draft.files.spectrum(path, curve_key, draft.faults)
    if curve is None:
        return None
    draft.tables.append(table_use(curve))
    stated_there = curve.header.get("quantity", quantity)
    if quantity is not None and stated_there != quantity:
        found = f"{shown(quantity)}, while the table says {stated_there}"
        draft.faults.add(f"{key}.spectrum.quantity", found, "what the table says")
        quantity = None
    if not curve.y.max() > 0:
        draft.faults.add(curve_key, "a spectrum that is zero everywhere", "some light")
        return None
    if quantity is None:
        # Power or photons, it is dark at the same wavelengths.
        _has_light(draft, key, TableSpectrum.from_table(curve.x, curve.y, "photons"))
        return None
    spectrum = TableSpectrum.from_table(curve.x, curve.y, quantity)
    return spectrum if _fits_grid(draft, key, spectrum) else None


def _fits_grid(draft: Draft, key: str, spectrum: Spectrum) -> bool:
    grid = draft.grid_nm
    if grid is None:
        return True
    cut = spectrum.cut_ends(grid)
    for end, share in cut:
        draft.faults.add(
            f"{key}.spectrum.table",
            f"{100 * share:.3g} % of the peak at its {end}, inside the grid of {grid_text(grid)}",
            "under 1 % of the peak at an end that the grid goes beyond",
        )
    if cut or not _has_light(draft, key, spectrum):
        return False
    lost = spectrum.lost_share(grid)
    if lost > LOST_SHARE_WARNING:
        draft.warnings.append(
            f"{key}: {_percent(lost)} of the spectrum lies outside the wavelength grid of "
            f"{grid_text(grid)}"
        )
    return True


def _has_light(draft: Draft, key: str, spectrum: Spectrum) -> bool:
    grid = draft.grid_nm
    if grid is None or not draft.grid_is_whole or grid.size == 1:
        return True
    if np.any(spectrum.photons(grid) > 0):
        return True
    draft.faults.add(
        f"{key}.spectrum",
        f"no light at any wavelength of the grid of {grid_text(grid)}",
        "a spectrum that overlaps the grid",
    )
    return False


def _percent(share: float) -> str:
    """Write a share in percent with two digits, and more than that only close to all of it."""
    percent = 100 * share
    if percent < 10:
        return f"{percent:.2g} %"
    return f"{percent:.0f} %" if percent < 99.5 else "more than 99 %"


def _check_host(draft: Draft, key: str, layer: str, outline: Outline, film_index: int) -> None:
    """Check that the emitter film is a dielectric at every wavelength of the case."""
    material = outline.materials[film_index]
    if material is None:
        return
    wavelength_nm, *permittivities = draft.permittivity(material)
    for axis, eps in zip(("ordinary", "extraordinary"), permittivities, strict=True):
        metallic = wavelength_nm[eps.real <= 0]
        if metallic.size:
            which = "" if material.isotropic else f"{axis} "
            draft.faults.add(
                f"{key}.layer",
                f"{shown(layer)} of {material.name}, a metal at {metallic[0]:.6g} nm",
                f"a layer whose {which}permittivity has a real part above 0",
            )
            return
