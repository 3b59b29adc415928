"""Spectral radiance of both sides, labelled: arrays, JSON lists and tables."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from optics.outcome.directional import POLARIZATIONS, SIDES, Source

if TYPE_CHECKING:
    import pandas
    import xarray
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.outcome.view import View

    Floats = NDArray[np.float64]

_DIMS = ("side", "angle_deg", "wavelength_nm", "polarization")
_LINE_DIMS = ("side", "angle_deg", "line_nm", "polarization")
_UNITS = {
    "_W_sr_m2_nm": "W sr-1 m-2 nm-1",
    "_W_sr_A_nm": "W sr-1 A-1 nm-1",
    "_W_sr_m2": "W sr-1 m-2",
    "_W_sr_A": "W sr-1 A-1",
    "_cd_m2": "cd m-2",
    "_cd_A": "cd A-1",
    "_lm_m2": "lm m-2",
    "_W_m2": "W m-2",
    "_lm_W": "lm W-1",
    "_W_W": "1",
    "_deg": "degree",
    "_nm": "nm",
    "_nm_normal": "nm",
    "_K": "K",
    "_cd_m2_normal": "cd m-2",
}


class Spectra(NamedTuple):
    """Spectral radiance per current density by side, angle, wavelength and polarization."""

    angle_deg: Floats  # (n,)
    wavelength_nm: Floats  # (w,)
    per_current: Floats  # (2, n, w, 2) W/(sr A nm)
    line_nm: Floats  # (l,) ascending
    line_per_current: Floats  # (2, n, l, 2) W/(sr A)
    current_A_m2: float | None


def gather(
    case: Case,
    emitting: Sequence[Source],
    angle_deg: Floats,
    views: Sequence[View],
) -> Spectra:
    """Add up the emitters: those per nm on the case's grid, lines by their wavelength."""
    grid, n = case.wavelength_nm, angle_deg.size
    lines = np.array(sorted({float(one.wavelength_nm[0]) for one in emitting if one.is_line}))
    spread, apart = np.zeros((2, n, grid.size, 2)), np.zeros((2, n, lines.size, 2))
    for side, view in enumerate(views):
        for source, ray in zip(emitting, view.rays, strict=True):
            if source.is_line:
                place = int(np.searchsorted(lines, source.wavelength_nm[0]))
                apart[side, :, place] += ray[0]
            else:
                spread[side] += ray.transpose(1, 0, 2)
    for values in (angle_deg, spread, lines, apart):
        values.setflags(write=False)
    return Spectra(angle_deg, grid, spread, lines, apart, views[0].current)


def unit_of(key: str) -> str:
    """Unit of a quantity by the end of its name; 1 for ratios."""
    fitting = [end for end in _UNITS if key.endswith(end)]
    return _UNITS[max(fitting, key=len)] if fitting else "1"


def spectra_dict(spectra: Spectra, side: int) -> dict[str, Any]:
    """Spectral part of one side's JSON entry: lists by angle, then wavelength.

    Values per area are null without a current density; those per current are always there.
    """
    current = spectra.current_A_m2
    entry: dict[str, Any] = {"wavelength_nm": spectra.wavelength_nm.tolist()}
    for place, name in enumerate(POLARIZATIONS):
        values = spectra.per_current[side, :, :, place]
        key = f"spectral_radiance_{name}"
        entry[f"{key}_W_sr_m2_nm"] = None if current is None else (current * values).tolist()
        entry[f"{key}_W_sr_A_nm"] = values.tolist()
    if spectra.line_nm.size:
        entry["line_nm"] = spectra.line_nm.tolist()
        for place, name in enumerate(POLARIZATIONS):
            values = spectra.line_per_current[side, :, :, place]
            key = f"line_radiance_{name}"
            entry[f"{key}_W_sr_m2"] = None if current is None else (current * values).tolist()
            entry[f"{key}_W_sr_A"] = values.tolist()
    return entry


def angular_dataset(spectra: Spectra, head: Mapping[str, Any]) -> xarray.Dataset:
    """Label the spectra; values per area only where a current density is stated."""
    import xarray

    parts = {"spectral_radiance_W_sr_{}_nm": (_DIMS, spectra.per_current)}
    if spectra.line_nm.size:
        parts["line_radiance_W_sr_{}"] = (_LINE_DIMS, spectra.line_per_current)
    current = spectra.current_A_m2
    variables: dict[str, Any] = {}
    for name, (dims, values) in parts.items():
        key, about = name.format("A"), name.split("_W")[0].replace("_", " ")
        attrs = {"units": unit_of(key), "long_name": f"{about} per current density"}
        variables[key] = (dims, values.copy(), attrs)
        if current is not None:
            key = name.format("m2")
            attrs = {"units": unit_of(key), "long_name": about}
            variables[key] = (dims, current * values, attrs)
    coords: dict[str, Any] = {
        "side": list(SIDES),
        "angle_deg": ("angle_deg", spectra.angle_deg, {"units": "degree"}),
        "wavelength_nm": ("wavelength_nm", spectra.wavelength_nm, {"units": "nm"}),
        "polarization": list(POLARIZATIONS),
    }
    if spectra.line_nm.size:
        coords["line_nm"] = ("line_nm", spectra.line_nm, {"units": "nm"})
    return xarray.Dataset(variables, coords=coords, attrs=dict(head))


def curves_dataset(sides: Mapping[str, Mapping[str, Any]]) -> xarray.Dataset:
    """Label the JSON result's sides: curves by side and angle_deg, numbers by side.

    Null becomes NaN; quantities that are null throughout on both sides are left out.
    """
    import xarray

    def number(value: float | None) -> float:
        return np.nan if value is None else value

    variables: dict[str, Any] = {}
    angles = next(iter(sides.values()))["angle_deg"]
    for key in [key for key in next(iter(sides.values())) if key != "angle_deg"]:
        values = [side[key] for side in sides.values()]
        if all(value is None for value in values):
            continue
        attrs = {"units": unit_of(key)}
        if isinstance(values[0], list):
            rows = [[number(one) for one in value] for value in values]
            variables[key] = (("side", "angle_deg"), rows, attrs)
        else:
            variables[key] = (("side",), [number(value) for value in values], attrs)
    coords = {"side": list(sides), "angle_deg": ("angle_deg", angles, {"units": "degree"})}
    return xarray.Dataset(variables, coords=coords)


def angular_frame(sides: Mapping[str, Mapping[str, Any]]) -> pandas.DataFrame:
    """Long table of the JSON result's sides.

    Columns side, angle_deg, wavelength_nm, quantity, value, unit; the first two coordinates are
    empty where a quantity has none. Spectra are there if the result holds them.
    """
    import pandas

    columns = ["side", "angle_deg", "wavelength_nm", "quantity", "value", "unit"]
    rows: list[tuple[str, float | None, float | None, str, float | None, str]] = []
    for name, side in sides.items():
        angles = side["angle_deg"]
        for key, value in side.items():
            if key in ("angle_deg", "wavelength_nm", "line_nm"):
                continue
            if not isinstance(value, list):
                rows.append((name, None, None, key, value, unit_of(key)))
                continue
            at = side.get("line_nm" if key.startswith("line_") else "wavelength_nm", [])
            for angle, one in zip(angles, value, strict=True):
                if isinstance(one, list):
                    pairs = zip(at, one, strict=True)
                    rows += [(name, angle, nm, key, number, unit_of(key)) for nm, number in pairs]
                else:
                    rows.append((name, angle, None, key, one, unit_of(key)))
    return pandas.DataFrame(rows, columns=columns)
