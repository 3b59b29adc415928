"""The device as seen from outside, on paper."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from rich.console import Console, Group, RenderableType
from rich.padding import Padding
from rich.text import Text

from optics.present.tables import plain_table, titled
from optics.present.terminal import show
from optics.present.wording import MISSING, accuracy, percent

if TYPE_CHECKING:
    from rich.table import Table

    from optics.device.case import Case
    from optics.outcome.ambient import Ambient

_LUMEN = "cd/m\N{SUPERSCRIPT TWO}"
_SOME_WAVELENGTHS = 10  # rows of a table of spectra, about
# (head, key, form); what is null throughout has no column
_COLUMNS = (
    ("reflected, %", "luminous_reflectance", "%"),
    ("passed on, %", "luminous_transmittance", "%"),
    ("absorbed, %", "luminous_absorptance_stack", "%"),
    ("x", "reflected_x", ".4f"),
    ("y", "reflected_y", ".4f"),
    (f"reflected, {_LUMEN}", "reflected_luminance_cd_m2", ".4g"),
    (f"own, {_LUMEN}", "luminance_cd_m2", ".4g"),
    ("contrast", "contrast_ratio", ".4g"),
)


def reminders_of(device: Case, outcome: Ambient) -> tuple[str, ...]:
    """Cautions, where the device's own light is shown."""
    from optics.present.cautions import brightest_cd_m2, cautions

    seen = outcome.emission
    if seen is None:
        return ()
    return cautions(device, seen.budget.to_dict(), brightest_cd_m2(device, seen.to_dict()))


def ambient_view(result: Mapping[str, Any], cautions: Sequence[str] = ()) -> RenderableType:
    """Lay out what a device does with light from outside.

    Parameters
    ----------
    result : mapping
        As ``ambient --json`` writes it.
    cautions : sequence of str
        Said at the end, one line each.
    """
    parts: list[RenderableType] = [Text(result["title"], style="bold"), Text()]
    sides = {name: side for name, side in result["sides"].items() if side is not None}
    for name, side in result["sides"].items():
        parts.append(_headline(name, side, result["illuminance_lx"]))
    for name, side in sides.items():
        parts.append(_spaced(titled(f"Daylight (D65) on the {name}", _angle_table(side))))
        if "wavelength_nm" in side:
            parts.append(_spaced(_spectrum_table(name, side)))
    if result["illuminance_lx"] is not None:
        parts.append(
            _spaced(
                Text(
                    f"Contrast: (own + reflected) / reflected luminance. Reflected: the mirror "
                    f"image of a surround of {result['illuminance_lx'] / math.pi:.4g} "
                    f"{_LUMEN}, which gives {result['illuminance_lx']:g} lx."
                )
            )
        )
    balance = accuracy(result["accuracy"]["energy_balance"])
    parts.append(
        _spaced(
            Text(f"Accuracy reached: reflected, passed on and absorbed add up to 1 +- {balance}")
        )
    )
    for kind, lines in (("Warning", result["warnings"]), ("Caution", cautions)):
        parts += [_spaced(Text(f"{kind}: {line}", style="yellow")) for line in lines]
    return Group(*parts)


def print_ambient(out: Console, result: Mapping[str, Any], cautions: Sequence[str] = ()) -> None:
    """Print `ambient_view`."""
    show(out, ambient_view(result, cautions))


def _headline(name: str, side: Mapping[str, Any] | None, illuminance_lx: float | None) -> Text:
    if side is None:
        return Text(f"{name}: its surroundings absorb; no light comes from there")
    text = f"{name}: reflects {percent(side['luminous_reflectance_8deg'])} % of daylight at 8 deg"
    if side["contrast_ratio"] is not None and side["contrast_ratio"][0] is not None:
        text += f", contrast {side['contrast_ratio'][0]:.4g} at {side['angle_deg'][0]:g} deg"
        text += f" in {illuminance_lx:g} lx"
    return Text(text, style="bold")


def _angle_table(side: Mapping[str, Any]) -> Table:
    columns = [one for one in _COLUMNS if side[one[1]] is not None]
    table = plain_table("angle, deg", *[head for head, _, _ in columns])
    table.columns[0].justify = "right"
    for i, angle in enumerate(side["angle_deg"]):
        table.add_row(f"{angle:g}", *[_word(side[key][i], form) for _, key, form in columns])
    return table


def _spectrum_table(name: str, side: Mapping[str, Any]) -> Group:
    """Reflectance, transmittance, absorptance over wavelength at the first angle."""
    names = ("reflectance", "transmittance", "absorptance")
    table = plain_table("nm", *[f"{one}, %" for one in names])
    table.columns[0].justify = "right"
    count = len(side["wavelength_nm"])
    for w in range(0, count, max(1, count // _SOME_WAVELENGTHS)):
        cells = [percent(side[one][0][w]) for one in names]
        table.add_row(f"{side['wavelength_nm'][w]:g}", *cells)
    angle = side["angle_deg"][0]
    return titled(f"Films and slabs alone, {name}, {angle:g} deg; files have all", table)


def _word(value: float | None, form: str) -> str:
    if value is None:
        return MISSING
    return percent(value) if form == "%" else f"{value:{form}}"


def _spaced(part: RenderableType) -> Padding:
    return Padding(part, (1, 0, 0, 0))
