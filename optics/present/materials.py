"""The catalogue of optical constants and single materials as tables for people."""

from __future__ import annotations

import numpy as np
from rich.console import Group, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from optics.device import catalogue
from optics.device.materials import span_text
from optics.present.citation import short_source
from optics.present.constants import AxisData, EmissionSpectrum, Measurement, all_spectra
from optics.present.tables import plain_table, titled

#: Wide enough to list every table on one line.
CATALOGUE_WIDTH = 175

# Round steps in nm for sampled values; the first that gives no more rows than this is taken.
_STEPS_NM = (5, 10, 20, 25, 50, 100, 200, 500, 1000)
_MOST_ROWS = 17


def catalogue_view() -> RenderableType:
    """List every bundled table and spectrum, one line each."""
    view = plain_table("name", "stands for", "material", "nm", "points", "source")
    for column in (1, 2, 5):
        view.columns[column].justify = "left"
    for entry in catalogue.entries():
        if not entry.source:
            view.add_row(entry.name, "", entry.title, "any", "", "built in")
            continue
        low, high = entry.range_nm
        view.add_row(
            entry.name,
            ", ".join(entry.aliases),
            entry.title,
            f"{low:.0f} - {high:.0f}",
            str(entry.points),
            short_source(entry.source),
        )
    spectra = plain_table("name", "nm", "peak, nm", "counts", "origin")
    for column in (3, 4):
        spectra.columns[column].justify = "left"
    for one in all_spectra():
        low, high = one.range_nm
        span = f"{low:.0f} - {high:.0f}"
        spectra.add_row(one.name, span, f"{one.peak_nm:.0f}", one.quantity, one.source)
    hint = Text("outcouple materials NAME tells more; -o FILE.png draws it.")
    return Group(view, _below(titled("Emission spectra", spectra)), _below(hint))


def measurements_view(shown: tuple[Measurement, ...]) -> RenderableType:
    """Say everything about one material: each measurement, then values side by side."""
    parts: list[RenderableType] = []
    for one in shown:
        parts.append(Padding(_described(one), (0, 0, 1, 0)))
    columns = [(one, axis) for one in shown for axis in one.axes]
    heads = [f"{symbol} {_label(one, axis)}" for one, axis in columns for symbol in ("n", "k")]
    wavelengths = sample_nm(shown)
    caption = "Values on straight lines between the table's points, as calculations use them"
    if any(_is_point(wavelengths, one) for one in shown):
        caption = "Values at the table's points"
    table = plain_table("nm", *heads)
    table.columns[0].justify = "right"
    for wavelength in wavelengths:
        cells = [cell for _, axis in columns for cell in _pair(axis.at(wavelength))]
        table.add_row(f"{wavelength:.6g}", *cells)
    parts.append(titled(caption, table))
    return Group(*parts)


def spectrum_view(one: EmissionSpectrum) -> RenderableType:
    """Say everything about one emission spectrum."""
    lines = (
        f"{one.name}: emission spectrum, {one.quantity} per nm",
        f"  source   {one.source}",
        f"  range    {span_text(one.range_nm)}, {one.points} points, peak {one.peak_nm:.0f} nm",
    )
    table = plain_table("nm", one.quantity)
    table.columns[0].justify = "right"
    grid = _round_grid(*one.range_nm)
    values = np.interp(grid, one.wavelength_nm, one.value / one.value.max())
    for wavelength, value in zip(grid, values, strict=True):
        table.add_row(f"{wavelength:.6g}", f"{value:.4f}")
    usage = Text(f'In a case: spectrum = {{ table = "{one.name}", quantity = "{one.quantity}" }}')
    return Group(
        Text("\n".join(lines)), _below(titled("Values relative to the peak", table)), _below(usage)
    )


def sample_nm(shown: tuple[Measurement, ...]) -> list[float]:
    """Round wavelengths (nm) over the range of all measurements; a short table's own points."""
    if len(shown) == 1 and shown[0].points <= _MOST_ROWS and len(shown[0].axes) == 1:
        return [float(value) for value in shown[0].axes[0].wavelength_nm]
    axes = [axis for one in shown for axis in one.axes]
    low = min(float(axis.wavelength_nm[0]) for axis in axes)
    high = max(float(axis.wavelength_nm[-1]) for axis in axes)
    return _round_grid(low, high)


def _round_grid(low: float, high: float) -> list[float]:
    for step in _STEPS_NM:
        first, last = int(np.ceil(low / step)), int(np.floor(high / step))
        if last - first < _MOST_ROWS:
            inside = [float(step * index) for index in range(first, last + 1)]
            return inside or [low, high]
    return [low, high]


def _is_point(wavelengths: list[float], one: Measurement) -> bool:
    own = one.axes[0].wavelength_nm
    return len(wavelengths) == own.size and bool(np.all(own == wavelengths))


def _described(one: Measurement) -> Group:
    head = f"{one.name}: {one.title}" if one.title else one.name
    low, high = one.range_nm
    lines = [
        ("source", one.source or "not stated in the file (a line # source: ... is quoted)"),
        ("range", f"{low:.6g} to {high:.6g} nm, {one.points} points"),
        ("values", one.origin),
        ("note", one.note),
    ]
    lines += [
        ("default", f"{alias} stands for this table: {reason}")
        for alias, reason in zip(one.aliases, one.reasons, strict=True)
    ]
    if not one.aliases and one.name in catalogue.names():
        lines.append(("default", "no; name it in full to use it"))
    grid = Table.grid(padding=(0, 2))
    for key, said in lines:
        if said:
            grid.add_row(f"  {key}", said)
    return Group(Text(head, style="bold"), grid)


def _label(one: Measurement, axis: AxisData) -> str:
    return one.name if axis.axis == "isotropic" else axis.axis


def _pair(values: tuple[float, float] | None) -> tuple[str, str]:
    if values is None:
        return "-", "-"
    n, k = values
    return f"{n:.4f}", "0" if k == 0.0 else f"{k:.4g}" if k >= 1e-3 else f"{k:.2e}"


def _below(view: RenderableType) -> Padding:
    return Padding(view, (1, 0, 0, 0))
