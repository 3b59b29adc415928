"""Check and assemble the emitters of a case."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.device.address import ORIENTATION_KEYS
from optics.device.door import shown
from optics.device.draft import Draft, grid_text
from optics.device.emitter import ISOTROPIC_FRACTION, Emitter, horizontal_fraction_from
from optics.device.errors import nearest
from optics.device.loader import table_use
from optics.device.schema import (
    DEFAULT_UNIT,
    EmitterModel,
    ExponentialZoneModel,
    GaussianSpectrumModel,
    GaussianZoneModel,
    LineSpectrumModel,
    PointZoneModel,
    TableZoneModel,
)
from optics.device.spectrum import GaussianSpectrum, LineSpectrum, Spectrum, TableSpectrum
from optics.device.zone import (
    EmptyZoneError,
    ExponentialZone,
    GaussianZone,
    PointZone,
    TableZone,
    UniformZone,
    Zone,
    absorber_distances,
    unbounded_faces,
    zone_interval,
    zone_quadrature,
)

if TYPE_CHECKING:
    from optics.device.stack import Stack

# Shares are typed as decimals: their sum may miss 1 by rounding only.
SHARE_SUM_SLACK = 1e-9
LOST_SHARE_WARNING = 1e-3


def make_emitters(draft: Draft, stack: Stack | None) -> tuple[Emitter, ...]:
    """Emitters without fault, in the order of the file; faults are noted in the draft."""
    draft.check_names("emitters")
    _check_shares(draft)
    made = []
    for index, part in enumerate(draft.parts.emitters):
        if part is not None:
            made.append(_emitter(draft, stack, index, part))
        else:
            _check_faulty(draft, index)
    return tuple(emitter for emitter in made if emitter is not None)


def _check_faulty(draft: Draft, index: int) -> None:
    """Check what can be of an emitter that has other faults, so that all come to light."""
    raw = draft.raw("emitters")[index]
    key = draft.key("emitters", index)
    if isinstance(raw.get("layer"), str):
        _film_index(draft, key, raw["layer"], str(raw.get("name", "an emitter")))
    given = [name for name in ORIENTATION_KEYS if name in raw]
    _one_orientation(draft, key, given, raw)


def _emitter(draft: Draft, stack: Stack | None, index: int, part: EmitterModel) -> Emitter | None:
    key = draft.key("emitters", index)
    film_index = _film_index(draft, key, part.layer, part.name)
    horizontal = _horizontal_fraction(draft, key, part)
    spectrum = _spectrum(draft, key, part)
    thickness = _thickness_nm(draft, film_index)
    zone = _zone(draft, key, part, thickness)
    if film_index is None or horizontal is None or spectrum is None or zone is None:
        return None
    emitter = Emitter(
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
    if stack is not None:
        _check_host(draft, key, stack, emitter)
        if thickness:
            _check_reach(draft, key, stack, emitter)
    return emitter


def _film_index(draft: Draft, key: str, layer: str, emitter: str) -> int | None:
    names = draft.names("layers")
    if layer not in names:
        known = [name for name in names if name]
        if not known:  # which is a fault of its own
            return None
        found = f"{shown(layer)}, no such layer"
        expected = f"the name of a layer: {', '.join(known)}"
        draft.faults.add(f"{key}.layer", found, expected, nearest(layer, known))
        return None
    index = names.index(layer)
    if _thickness_nm(draft, index) == 0:
        layer_key = f"{draft.key('layers', index)}.thickness_nm"
        draft.faults.add(layer_key, "0", f"above 0 nm, since {emitter} emits in this layer")
        return None
    return index


def _thickness_nm(draft: Draft, film_index: int | None) -> float | None:
    layer = draft.parts.layers[film_index] if film_index is not None else None
    return layer.thickness_nm if layer else None


def _horizontal_fraction(draft: Draft, key: str, part: EmitterModel) -> float | None:
    given = [name for name in ORIENTATION_KEYS if getattr(part, name) is not None]
    if not given:
        return ISOTROPIC_FRACTION
    if not _one_orientation(draft, key, given, part.model_dump()):
        return None
    return horizontal_fraction_from(given[0], getattr(part, given[0]))


def _one_orientation(
    draft: Draft, key: str, given: Sequence[str], values: Mapping[str, Any]
) -> bool:
    if len(given) > 1:
        draft.faults.add(
            f"{key}.{given[1]}",
            f"{shown(values[given[1]])} beside {given[0]}",
            f"one of {', '.join(ORIENTATION_KEYS)}",
        )
    return len(given) <= 1


def _spectrum(draft: Draft, key: str, part: EmitterModel) -> Spectrum | None:
    described = part.spectrum
    spectrum: Spectrum
    if isinstance(described, LineSpectrumModel):
        return LineSpectrum(described.line_nm)
    if isinstance(described, GaussianSpectrumModel):
        spectrum = GaussianSpectrum(described.peak_nm, described.fwhm_nm)
    else:
        curve_key = f"{key}.spectrum.table"
        curve = draft.files.spectrum(described.table, curve_key, draft.faults)
        if curve is None:
            return None
        draft.tables.append(table_use(curve))
        stated = curve.header.get("quantity", described.quantity)
        if stated != described.quantity:
            found = f"{shown(described.quantity)}, while the table says {stated}"
            draft.faults.add(f"{key}.spectrum.quantity", found, "what the table says")
            return None
        if not curve.y.max() > 0:
            draft.faults.add(curve_key, "a spectrum that is zero everywhere", "some light")
            return None
        spectrum = TableSpectrum.from_table(curve.x, curve.y, described.quantity)
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
    if cut:
        return False
    lost = spectrum.lost_share(grid)
    if grid.size > 1 and not np.any(spectrum.photons(grid) > 0):
        draft.faults.add(
            f"{key}.spectrum",
            f"no light at any wavelength of the grid of {grid_text(grid)}",
            "a spectrum that overlaps the grid",
        )
        return False
    if lost > LOST_SHARE_WARNING:
        draft.warnings.append(
            f"{key}: {100 * lost:.2g} % of the spectrum lies outside the wavelength grid of "
            f"{grid_text(grid)}"
        )
    return True


def _zone(draft: Draft, key: str, part: EmitterModel, thickness_nm: float | None) -> Zone | None:
    described = part.zone
    key = f"{key}.zone"
    if isinstance(described, PointZoneModel):
        return _point(draft, key, described, thickness_nm)
    if isinstance(described, ExponentialZoneModel):
        return ExponentialZone(described.start, described.decay_nm)
    if isinstance(described, GaussianZoneModel):
        return GaussianZone(described.at, described.width_nm)
    if isinstance(described, TableZoneModel):
        return _table_zone(draft, key, described, thickness_nm)
    return UniformZone()


def _point(
    draft: Draft, key: str, described: PointZoneModel, thickness_nm: float | None
) -> PointZone | None:
    given = [name for name in ("at", "at_nm") if getattr(described, name) is not None]
    if len(given) != 1:
        found = "at and at_nm" if given else "neither at nor at_nm"
        draft.faults.add(key, found, "either at, or at_nm with from")
        return None
    if (described.at_nm is None) != (described.start is None):
        found = "from without at_nm" if described.at_nm is None else "at_nm without from"
        draft.faults.add(key, found, "either at, or at_nm with from")
        return None
    if described.at_nm is not None and thickness_nm and described.at_nm > thickness_nm:
        expected = f"a position inside its film, 0 to {thickness_nm:.10g}"
        draft.faults.add(f"{key}.at_nm", shown(described.at_nm), expected)
        return None
    return PointZone(described.at, described.at_nm, described.start or "bottom")


def _table_zone(
    draft: Draft, key: str, described: TableZoneModel, thickness_nm: float | None
) -> TableZone | None:
    key = f"{key}.table"
    curve = draft.files.curve(
        described.table, "density", key, draft.faults, "position", "position_nm"
    )
    if curve is None:
        return None
    draft.tables.append(table_use(curve))
    relative = curve.coordinate == "position"
    if relative and (curve.x[0] < 0 or curve.x[-1] > 1):
        found = f"positions from {curve.x[0]:.6g} to {curve.x[-1]:.6g}"
        draft.faults.add(key, found, "positions from 0 (bottom face) to 1")
        return None
    if not curve.y.max() > 0:
        draft.faults.add(key, "a density that is zero everywhere", "some excitons")
        return None
    zone = TableZone.from_table(curve.x, curve.y, relative=relative)
    if thickness_nm:
        low, high = zone.support_nm(thickness_nm, (0.0, thickness_nm))
        if not high > low:
            expected = f"some density inside its film, 0 to {thickness_nm:.10g} nm"
            draft.faults.add(key, f"density from {curve.x[0]:.6g} nm on", expected)
            return None
    return zone


def _check_host(draft: Draft, key: str, stack: Stack, emitter: Emitter) -> None:
    """Check that the emitter film is a dielectric at every wavelength of the case."""
    if draft.every_nm is None:
        return
    material = stack.films[emitter.film_index].material
    for axis, eps in zip(
        ("ordinary", "extraordinary"), material.permittivity(draft.every_nm), strict=True
    ):
        metallic = draft.every_nm[eps.real <= 0]
        if metallic.size:
            which = "" if material.isotropic else f"{axis} "
            draft.faults.add(
                f"{key}.layer",
                f"{shown(emitter.layer)} of {material.name}, a metal at {metallic[0]:.6g} nm",
                f"a layer whose {which}permittivity has a real part above 0",
            )
            return


def _check_reach(draft: Draft, key: str, stack: Stack, emitter: Emitter) -> None:
    """Nearness of the zone to absorbers."""
    if draft.every_nm is None:
        return
    thickness = stack.films[emitter.film_index].thickness_nm
    zone = emitter.zone
    if isinstance(zone, PointZone):
        below, above = absorber_distances(stack, emitter.film_index, draft.every_nm)
        position = zone.position_nm(thickness)
        distance = min(below + position, above + thickness - position)
        _check_point(draft, key, emitter, distance)
        return
    interval = zone_interval(stack, emitter, draft.every_nm)
    try:
        zone_quadrature(zone, thickness, interval, order=2)
    except EmptyZoneError:
        draft.faults.add(
            f"{key}.zone",
            f"nothing left of it beyond closest_approach_nm = {emitter.closest_approach_nm:.10g} "
            "from the absorbers around",
            f"a zone with a part farther away in its film of {thickness:.10g} nm",
        )
        return
    for face in unbounded_faces(stack, emitter, draft.every_nm):
        draft.warnings.append(
            f"{key}: closest_approach_nm is 0 and the zone reaches an absorber at the {face} face "
            "of its film, where the dissipated power has no bound: purcell_factor and, unless "
            "quantum_yield is 0, decay_rate_ratio are left out"
        )


def _check_point(draft: Draft, key: str, emitter: Emitter, distance_nm: float) -> None:
    if distance_nm <= 0:
        draft.faults.add(
            f"{key}.zone", "a point on the face of an absorber", "a point at some distance from it"
        )
    elif distance_nm < emitter.closest_approach_nm:
        draft.warnings.append(
            f"{key}: the point lies {distance_nm:.3g} nm from an absorber, nearer than "
            f"closest_approach_nm = {emitter.closest_approach_nm:.3g}"
        )


def _check_shares(draft: Draft) -> None:
    """Check that the shares of the emitters of a unit sum to 1."""
    units: dict[Any, list[Mapping[str, Any]]] = {}
    for raw in draft.raw("emitters"):
        share = raw.get("share", 1.0)
        if isinstance(share, bool) or not isinstance(share, int | float) or not 0 <= share <= 1:
            return  # noted before
        units.setdefault(str(raw.get("unit", DEFAULT_UNIT)), []).append({**raw, "share": share})
    for unit, members in units.items():
        total = math.fsum(member["share"] for member in members)
        if not abs(total - 1) <= SHARE_SUM_SLACK:
            listed = " + ".join(f"{member['share']:.10g}" for member in members)
            names = ", ".join(str(member.get("name", "?")) for member in members)
            draft.faults.add(
                "emitters",
                f"shares {listed} = {total:.10g} in unit {unit} ({names})",
                "shares that sum to 1 within each unit",
            )
