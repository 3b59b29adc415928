"""A sweep as tables for people and as plain types for programs."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.present.wording import MISSING

if TYPE_CHECKING:
    import pandas
    import xarray
    from rich.console import Console, RenderableType

# A grid over one number of at most so many values is shown whole.
_LONGEST_TABLE = 41
_MOST_FAILURES = 10
# Outcomes of which less is better, by the last part of their name; for the others more is, except
# for those of which neither can be said.
_LESS = {
    "substrate", "cover", "guided", "surface_plasmon", "absorbed", "unbalanced", "dark_excitons",
    "nonradiative", "near_field_share", "lost_share", "energy_balance", "integration_error",
    "delta_uv",
}  # fmt: skip
_NEITHER = {
    "x", "y", "u_prime", "v_prime", "x_normal", "y_normal", "u_prime_normal", "v_prime_normal",
    "peak_nm_normal", "fwhm_nm_normal", "dominant_wavelength_nm", "duv", "lambertian_ratio",
    "correlated_color_temperature_K", "horizontal_fraction", "vertical_fraction",
    "order_parameter", "half_luminance_angle_deg", "excitation_purity", "relative_luminance",
    "luminous_efficacy_of_radiation_lm_W",
}  # fmt: skip


def direction(data: xarray.DataArray) -> int:
    """1 where more of an outcome is better, -1 where less is, 0 where neither can be said."""
    last = str(data.attrs["long_name"]).rpartition(".")[2]
    return -1 if last in _LESS else 0 if last in _NEITHER else 1


def best_point(data: xarray.DataArray) -> dict[str, float] | None:
    """Coordinates of the best value of one outcome by path, the first of equals.

    None where neither more nor less is better, or where no value is known.
    """
    sign = direction(data)
    if sign == 0 or not bool(np.isfinite(data.to_numpy()).any()):
        return None
    place = (sign * data).argmax(dim=list(data.dims))
    return {str(path): float(data[path][index]) for path, index in place.items()}


def leading(found: xarray.Dataset) -> str | None:
    """First outcome of which a best value can be named; what pictures mark."""
    return next((str(n) for n in found.data_vars if best_point(found[n]) is not None), None)


def sweep_dict(found: xarray.Dataset) -> dict[str, Any]:
    """Build the JSON result, ``outcouple.sweep/1``: plain types, null where undefined.

    Values are nested lists, the first axis outermost.
    """
    attrs = found.attrs
    axes = [str(dim) for dim in next(iter(found.data_vars.values())).dims]
    outcomes = {
        str(name): {
            "units": data.attrs["units"],
            "best_at": best_point(data),
            "values": data.to_numpy(),
        }
        for name, data in found.data_vars.items()
    }
    return {
        **{key: attrs[key] for key in ("schema", "version", "title", "case_sha256", "tolerance")},
        "axes": {
            path: {"units": found[path].attrs["units"], "values": found[path].to_numpy()}
            for path in axes
        },
        "linked": {
            str(path): str(coord.dims[0])
            for path, coord in found.coords.items()
            if path not in axes
        },
        "outcomes": outcomes,
        "accuracy": {key: attrs[key] for key in ("energy_balance", "integration_error")},
        "failed": attrs["failed"].splitlines(),
        "warnings": attrs["warnings"].splitlines(),
    }


def sweep_frame(found: xarray.Dataset) -> pandas.DataFrame:
    """Build a table with one row for each grid point: axes, linked numbers, outcomes."""
    frame: pandas.DataFrame = found.to_dataframe().reset_index()
    axes = [str(dim) for dim in next(iter(found.data_vars.values())).dims]
    linked = [str(path) for path in found.coords if path not in axes]
    return frame[[*axes, *linked, *map(str, found.data_vars)]]


def print_sweep(out: Console, found: xarray.Dataset) -> None:
    """Print `sweep_view`."""
    from optics.present.terminal import show

    show(out, sweep_view(found))


def sweep_view(found: xarray.Dataset) -> RenderableType:
    """Lay out a sweep: the whole of a short one over one number, else ranges and best points."""
    from rich.console import Group
    from rich.text import Text

    sizes: Mapping[Any, int] = found.sizes
    parts: list[RenderableType] = [Text(found.attrs["title"], style="bold"), Text()]
    if len(sizes) == 1 and next(iter(sizes.values())) <= _LONGEST_TABLE:
        parts += [_whole(found), Text()]
    parts += [_ranges(found), Text()]
    accuracy = ", ".join(
        f"{key.replace('_', ' ')} {found.attrs[key]:.0e}"
        for key in ("energy_balance", "integration_error")
    )
    parts.append(Text(f"Accuracy at the worst point: {accuracy}", style="dim"))
    failed = found.attrs["failed"].splitlines()
    parts += [Text(f"Failed: {line}", style="red") for line in failed[:_MOST_FAILURES]]
    if len(failed) > _MOST_FAILURES:
        parts.append(Text(f"Failed: {len(failed) - _MOST_FAILURES} more points", style="red"))
    parts += [
        Text(f"Warning: {one}", style="yellow") for one in found.attrs["warnings"].splitlines()
    ]
    return Group(*parts)


def _whole(found: xarray.Dataset) -> RenderableType:
    from optics.present.tables import plain_table

    (axis,) = (str(dim) for dim in found.sizes)
    names = [str(name) for name in found.data_vars]
    table = plain_table(
        with_unit(axis, found[axis].attrs["units"]), *map(_heading, found.data_vars.values())
    )
    marked = {name: best_point(found[name]) for name in names}
    for index, at in enumerate(found[axis].to_numpy().tolist()):
        cells = []
        for name in names:
            best = marked[name]
            star = " *" if best is not None and best[axis] == at else "  "
            cells.append(digits(float(found[name][index])) + star)
        table.add_row(f"{at:.6g}", *cells)
    return table


def _ranges(found: xarray.Dataset) -> RenderableType:
    from optics.present.tables import plain_table

    table = plain_table(
        "outcome", "unit", "smallest", "largest", "best", *map(short_name, found.sizes)
    )
    for name, data in found.data_vars.items():
        best = best_point(data)
        at = (MISSING,) * (1 + len(found.sizes))
        if best is not None:
            at = (digits(float(data.sel(best))), *(f"{best[str(dim)]:.6g}" for dim in found.sizes))
        unit = data.attrs["units"]
        table.add_row(
            str(name), "" if unit == "1" else unit,
            digits(float(data.min())), digits(float(data.max())), *at,
        )  # fmt: skip
    table.columns[1].justify = "left"
    return table


def with_unit(name: str, unit: str) -> str:
    """Name with its unit in parentheses, unless it is a ratio or the name ends in the unit."""
    return name if unit == "1" else f"{short_name(name)} ({unit})"


def short_name(path: object) -> str:
    """Path without the first part and without the unit, for heads: ``HTL thickness``."""
    words = str(path).split(".")
    last = words[-1]
    for end in ("_nm", "_mm", "_eV", "_V", "_mA_cm2"):
        last = last.removesuffix(end)
    return " ".join([*words[1:-1], last.replace("_", " ")])


def spot(found: xarray.Dataset, at: Mapping[str, float]) -> str:
    """Word a place on the grid: ``HTL thickness 40 nm, ETL thickness 210 nm``."""
    words = []
    for path, value in at.items():
        unit = found[path].attrs["units"]
        words.append(f"{short_name(path)} {value:.6g}{'' if unit == '1' else f' {unit}'}")
    return ", ".join(words)


def _heading(data: xarray.DataArray) -> str:
    """Head of a column, a line for each part of the name: columns stay narrow."""
    unit = data.attrs["units"]
    lines = str(data.name).replace(".", ".\n")
    return lines if unit == "1" else f"{lines}\n({unit})"


def digits(value: float) -> str:
    """Word a value with four or five significant digits; what is undefined is a dash."""
    return MISSING if value != value else f"{value:.5g}"
