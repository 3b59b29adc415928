"""Tables that other programs read: comment lines with units and definitions, then plain CSV."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import TYPE_CHECKING, Any, NamedTuple

from optics._version import VERSION

if TYPE_CHECKING:
    from datetime import date
    from pathlib import Path

    import pandas
    import xarray

    from optics.device.case import Case
    from optics.outcome.angular import Angular
    from optics.present.files import Writer

#: What can be handed on, and the formats of each. Nothing heavy loads with these names.
FORMATS = {
    "electrical": (".csv", ".nc"),
    "angular": (".csv", ".nc"),
    "photometric": (".ies",),
}


class Column(NamedTuple):
    """A column of a table: what its header line says."""

    name: str
    unit: str
    meaning: str


class Handed(NamedTuple):
    """What is handed on: writers by suffix, and what is said about it."""

    details: dict[str, Any]  # of the JSON summary
    sentence: str
    warnings: tuple[str, ...]
    cautions: tuple[str, ...]
    writers: dict[str, Writer]


def electrical(case: Case, positions: int) -> Handed:
    """Outcoupling against position and wavelength, for electrical simulation."""
    from optics.outcome.budget import DEFAULT_TOLERANCE, budget
    from optics.outcome.export_table import coupling_by_position, coupling_tree
    from optics.present.cautions import cautions

    tables = {one.name: coupling_by_position(case, one.name, positions) for one in case.emitters}
    outcome = budget(case)
    missed = [
        f"emitter {name}: integration error {data.attrs['integration_error']:.0e} in this table, "
        f"more than {DEFAULT_TOLERANCE:.0e}"
        for name, data in tables.items()
        if data.attrs["integration_error"] > DEFAULT_TOLERANCE
    ]
    emitters = {
        name: {
            "positions": data.sizes["position"],
            "wavelengths": data.sizes["wavelength_nm"],
            **{key: data.attrs[key] for key in ("first_nm", "last_nm", "integration_error")},
        }
        for name, data in tables.items()
    }
    sentence = "; ".join(
        f"{name}: {one['positions']} cells from {one['first_nm']:.4g} to {one['last_nm']:.4g} "
        f"nm, {one['wavelengths']} wavelengths"
        for name, one in emitters.items()
    )
    return Handed(
        {"emitters": emitters},
        sentence,
        (*outcome.warnings, *missed),
        cautions(case, outcome.to_dict()),
        {
            ".csv": lambda path: write_coupling_csv(case, tables, path),
            ".nc": lambda path: coupling_tree(case, tables).to_netcdf(path, engine="h5netcdf"),
        },
    )


def angular_spectra(case: Case, angles_deg: Sequence[float]) -> Handed:
    """Spectral radiance of both sides against angle and wavelength."""
    from optics.outcome.angular import angular

    outcome = angular(case, angles_deg)
    data = outcome.spectral
    sizes = {
        "angles": data.sizes["angle_deg"],
        "wavelengths": data.sizes["wavelength_nm"],
        "lines": data.sizes.get("line_nm", 0),
    }
    return Handed(
        sizes,
        f"both sides at {sizes['angles']} angles and {sizes['wavelengths']} wavelengths",
        outcome.warnings,
        _reminders(case, outcome),
        {
            ".csv": lambda path: write_angular_csv(case, outcome, path),
            ".nc": lambda path: data.to_netcdf(path, engine="h5netcdf"),
        },
    )


def photometric(case: Case, size_mm: tuple[float, float], side: str | None, issued: date) -> Handed:
    """Photometric file of a panel."""
    from optics.present.photometric_file import panel, photometric_file

    made = panel(case, size_mm, side)
    reminders = _reminders(case, made.emission)
    text = photometric_file(made, issued, reminders)
    details = {
        "side": made.side,
        "size_mm": list(made.size_mm),
        "luminous_flux_lm": made.flux_lm,
        "intensity_normal_cd": float(made.candela[0]),
        "input_W": made.watts,
        "angles": made.angle_deg.size,
        "flux_error": made.flux_error,
    }
    sentence = (
        f"{made.side}, {size_mm[0]:g} x {size_mm[1]:g} mm: {made.flux_lm:.4g} lm, "
        f"{made.candela[0]:.4g} cd along the normal; the file's {made.angle_deg.size} angles add "
        f"up to the flux within {abs(made.flux_error):.0e}"
    )
    return Handed(
        details,
        sentence,
        (*made.emission.warnings, *made.remarks),
        reminders,
        {".ies": lambda path: path.write_bytes(text.encode("ascii"))},
    )


def _reminders(case: Case, outcome: Angular) -> tuple[str, ...]:
    from optics.present.cautions import brightest_cd_m2, cautions

    brightest = brightest_cd_m2(case, outcome.to_dict())
    return cautions(case, outcome.budget.to_dict(), brightest)


def write_coupling_csv(case: Case, tables: Mapping[str, xarray.Dataset], path: Path) -> None:
    """Write outcoupling against position and wavelength, for electrical simulation.

    Parameters
    ----------
    tables : mapping of str to xarray.Dataset
        By emitter, from `optics.outcome.export_table.coupling_by_position`.
    """
    from optics.outcome.export_table import COLUMNS, coupling_frame

    columns = [
        Column("emitter", "", "of the case"),
        Column("layer", "", "its film"),
        *(Column(*one) for one in COLUMNS),
    ]
    about = [
        f"{name}: film {data.attrs['layer']}, q = {data.attrs['quantum_yield']:g}, "
        f"horizontal fraction {data.attrs['horizontal_fraction']:.6g}; centers of "
        f"{data.sizes['position']} equal cells from {data.attrs['first_nm']:.6g} to "
        f"{data.attrs['last_nm']:.6g} nm"
        for name, data in tables.items()
    ]
    _write(coupling_frame(tables), [*_head(case), *about], columns, path)


def write_angular_csv(case: Case, outcome: Angular, path: Path) -> None:
    """Write spectral radiance of both sides against angle and wavelength.

    Spectral lines are rows of their own, with radiance that is not per nm in columns of its own.
    """
    frame, columns = _angular_table(outcome)
    one = ["a single wavelength: values are not per nm"] if case.wavelength_nm.size == 1 else []
    _write(frame, [*_head(case), *one], columns, path)


def _angular_table(outcome: Angular) -> tuple[pandas.DataFrame, list[Column]]:
    import pandas

    data = outcome.spectral
    per = "m2" if "spectral_radiance_W_sr_m2_nm" in data else "A"
    over = "" if per == "m2" else ", over the current"
    columns = [
        Column("side", "", "bottom is the substrate side"),
        Column("angle_deg", "deg", "from the normal, outside; inside the slab of a matched exit"),
        Column("wavelength_nm", "nm", "in vacuum"),
    ]
    parts = []
    kinds = (("wavelength_nm", "spectral_radiance", "_nm"), ("line_nm", "line_radiance", ""))
    for at, key, end in kinds:
        if at not in data:
            continue
        what = "after filter and polarizer" + over + ("" if end else "; of spectral lines")
        unit = f"W/(sr {per}{' nm' if end else ''})"
        values = data[f"{key}_W_sr_{per}{end}"]
        each = {
            f"{key}_s_W_sr_{per}{end}": ("s polarized", values.sel(polarization="s", drop=True)),
            f"{key}_p_W_sr_{per}{end}": ("p polarized", values.sel(polarization="p", drop=True)),
            f"{key}_W_sr_{per}{end}": ("s and p together", values.sum("polarization")),
        }
        columns += [Column(name, unit, f"{word}, {what}") for name, (word, _) in each.items()]
        part = pandas.DataFrame({name: one.to_series() for name, (_, one) in each.items()})
        parts.append(part.reset_index().rename(columns={at: "wavelength_nm"}))
    return pandas.concat(parts, ignore_index=True)[[one.name for one in columns]], columns


def _head(case: Case) -> list[str]:
    return [
        f"outcouple {VERSION}: {' '.join(case.title.split())}",
        f"case sha256 {case.sha256}",
    ]


def _write(
    frame: pandas.DataFrame,
    head: Iterable[str],
    columns: Iterable[Column],
    path: Path,
) -> None:
    with path.open("w", encoding="utf-8", newline="") as file:
        file.writelines(f"# {line}\n" for line in head)
        for name, unit, meaning in columns:
            file.write(f"# {name} [{unit}]: {meaning}\n" if unit else f"# {name}: {meaning}\n")
        frame.to_csv(file, index=False, lineterminator="\n")


def summary(case: Case, what: str, handed: Handed, outputs: Sequence[Path]) -> dict[str, Any]:
    """JSON summary of an export, ``outcouple.export/1``."""
    return {
        "schema": "outcouple.export/1",
        "version": VERSION,
        "title": case.title,
        "case_sha256": case.sha256,
        "what": what,
        "files": [str(path) for path in outputs],
        **handed.details,
        "warnings": list(handed.warnings),
    }
