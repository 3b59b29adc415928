"""Check and make the zones of a case's emitters."""

from __future__ import annotations

from typing import TYPE_CHECKING

from optics.device.door import shown
from optics.device.draft import Draft
from optics.device.loader import table_use
from optics.device.salvage import doubtful, known, stated
from optics.device.schema import (
    EmitterModel,
    ExponentialZoneModel,
    GaussianZoneModel,
    PointZoneModel,
    TableZoneModel,
    UniformZoneModel,
)
from optics.device.zone import (
    EmptyZoneError,
    ExponentialZone,
    GaussianZone,
    PointZone,
    TableZone,
    UniformZone,
    Zone,
    distances_to_absorbers,
    interval_between,
    unbounded_faces,
    zone_quadrature,
)

if TYPE_CHECKING:
    from optics.device.emitter import Emitter
    from optics.device.layering import Outline
    from optics.device.stack import Stack


def make_zone(
    draft: Draft, key: str, part: EmitterModel, thickness_nm: float | None
) -> Zone | None:
    """Zone of an emitter, None if it is not known; faults are noted in the draft.

    Parameters
    ----------
    draft : Draft
        The case in the making.
    key : str
        Dotted key of the emitter.
    part : EmitterModel
        The emitter, as far as it parsed.
    thickness_nm : float or None
        Thickness of its film in nm; None if not known.
    """
    described = known(part, "zone")
    key = f"{key}.zone"
    if isinstance(described, PointZoneModel):
        return _point(draft, key, described, thickness_nm)
    if isinstance(described, TableZoneModel):
        return _table_zone(draft, key, described, thickness_nm)
    if isinstance(described, ExponentialZoneModel):
        start, decay_nm = known(described, "start"), known(described, "decay_nm")
        return None if start is None or decay_nm is None else ExponentialZone(start, decay_nm)
    if isinstance(described, GaussianZoneModel):
        at, width_nm = known(described, "at"), known(described, "width_nm")
        return None if at is None or width_nm is None else GaussianZone(at, width_nm)
    return UniformZone() if isinstance(described, UniformZoneModel) else None


def _point(
    draft: Draft, key: str, described: PointZoneModel, thickness_nm: float | None
) -> PointZone | None:
    at, at_nm, start = (known(described, name) for name in ("at", "at_nm", "start"))
    if not _is_one_position(draft, key, described):
        return None
    if at_nm is not None and thickness_nm and at_nm > thickness_nm:
        expected = f"a position inside its film, 0 to {thickness_nm:.10g}"
        draft.faults.add(f"{key}.at_nm", shown(at_nm), expected)
        return None
    whole = at is not None if stated(described, "at") else None not in (at_nm, start)
    return PointZone(at, at_nm, start or "bottom") if whole else None


def _is_one_position(draft: Draft, key: str, described: PointZoneModel) -> bool:
    """Check which keys of a point there are, whatever their values."""
    given = stated(described, "at", "at_nm")
    expected = "either at, or at_nm with from"
    if len(given) == 2 or (not given and not doubtful(described, "at", "at_nm")):
        draft.faults.add(key, "at and at_nm" if given else "neither at nor at_nm", expected)
        return False
    if not given or doubtful(described, "at_nm", "start"):
        return bool(given)
    with_start = bool(stated(described, "start"))
    if with_start != (given == ["at_nm"]):
        found = "from without at_nm" if with_start else "at_nm without from"
        draft.faults.add(key, found, expected)
        return False
    return True


def _table_zone(
    draft: Draft, key: str, described: TableZoneModel, thickness_nm: float | None
) -> TableZone | None:
    key = f"{key}.table"
    path = known(described, "table")
    if path is None:
        return None
    curve = draft.files.curve(path, "density", key, draft.faults, "position", "position_nm")
    if curve is None:
        return None
    draft.tables.append(table_use(curve))
    relative = curve.coordinate == "position"
    outside = relative and (curve.x[0] < 0 or curve.x[-1] > 1)
    if outside:
        found = f"positions from {curve.x[0]:.6g} to {curve.x[-1]:.6g}"
        draft.faults.add(key, found, "positions from 0 (bottom face) to 1")
    if not curve.y.max() > 0:
        draft.faults.add(key, "a density that is zero everywhere", "some excitons")
        return None
    if outside:
        return None
    zone = TableZone.from_table(curve.x, curve.y, relative=relative)
    if thickness_nm:
        low, high = zone.support_nm(thickness_nm, (0.0, thickness_nm))
        if not high > low:
            expected = f"some density inside its film, 0 to {thickness_nm:.10g} nm"
            draft.faults.add(key, f"density from {curve.x[0]:.6g} nm on", expected)
            return None
    return zone


def check_reach(
    draft: Draft,
    key: str,
    outline: Outline,
    film_index: int,
    zone: Zone,
    closest_approach_nm: float | None,
) -> None:
    """Check the nearness of a zone to the absorbers that are certain.

    Parameters
    ----------
    draft, key
        As in `make_zone`.
    outline : Outline
        What is certain of the stack.
    film_index : int
        The emitter's film, counted from the bottom.
    zone : Zone
        Its zone.
    closest_approach_nm : float or None
        Its closest approach in nm; None if not known.
    """
    own_nm, thickness = outline.thickness_nm[film_index], outline.largest_nm[film_index]
    if own_nm == 0:  # noted before
        return
    distances = distances_to_absorbers(
        outline.largest_nm, outline.absorbing, outline.ends, film_index
    )
    if isinstance(zone, PointZone):
        position = zone.position_nm(thickness)
        distance = min(distances[0] + position, distances[1] + thickness - position)
        _check_point(draft, key, closest_approach_nm, distance)
    elif closest_approach_nm is not None and own_nm is not None:
        interval = interval_between(distances, thickness, closest_approach_nm)
        try:
            zone_quadrature(zone, thickness, interval, order=2)
        except EmptyZoneError:
            draft.faults.add(
                f"{key}.zone",
                f"nothing left of it beyond closest_approach_nm = {closest_approach_nm:.10g} "
                "from the absorbers around",
                f"a zone with a part farther away in its film of {thickness:.10g} nm",
            )


def _check_point(
    draft: Draft, key: str, closest_approach_nm: float | None, distance_nm: float
) -> None:
    if distance_nm <= 0:
        draft.faults.add(
            f"{key}.zone", "a point on the face of an absorber", "a point at some distance from it"
        )
    elif closest_approach_nm is not None and distance_nm < closest_approach_nm:
        draft.warnings.append(
            f"{key}: the point lies {distance_nm:.3g} nm from an absorber, nearer than "
            f"closest_approach_nm = {closest_approach_nm:.3g}"
        )


def warn_of_bare_absorbers(draft: Draft, key: str, stack: Stack, emitter: Emitter) -> None:
    """Note, for a case without fault, faces where the dissipated power has no bound."""
    if draft.every_nm is None or draft.faults.found:
        return
    for face in unbounded_faces(stack, emitter, draft.every_nm):
        draft.warnings.append(
            f"{key}: closest_approach_nm is 0 and the zone reaches an absorber at the {face} face "
            "of its film, where the dissipated power has no bound: purcell_factor and, unless "
            "quantum_yield is 0, decay_rate_ratio are left out"
        )
