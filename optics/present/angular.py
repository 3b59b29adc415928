"""Emission against angle on paper: what a display or lighting engineer asks first at the top."""

from __future__ import annotations

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

#: A side with less than this share of the light that leaves is summed up in one line.
FAINT_SHARE = 1e-3
#: Columns of the widest table, with polarizations.
WIDTH = 120
_MOST_ROWS = 20
_WATT, _LUMEN = "W/(sr m\N{SUPERSCRIPT TWO})", "cd/m\N{SUPERSCRIPT TWO}"

# (label, key, significant digits or decimals)
_SUMMARY = (
    ("current efficiency, cd/A", "current_efficiency_cd_A", ".4g"),
    ("luminance along the normal, " + _LUMEN, "luminance_normal_cd_m2", ".4g"),
    ("    of the lit area while it is on", "peak_luminance_normal_cd_m2", ".4g"),
    ("luminous exitance, lm/m\N{SUPERSCRIPT TWO}", "luminous_exitance_lm_m2", ".4g"),
    ("radiant exitance, W/m\N{SUPERSCRIPT TWO}", "radiant_exitance_W_m2", ".4g"),
    ("luminous efficacy, lm/W", "luminous_efficacy_lm_W", ".4g"),
    ("radiant efficiency, %", "radiant_efficiency_W_W", "%"),
    ("lumens per watt of light", "luminous_efficacy_of_radiation_lm_W", ".4g"),
    ("photons out per charge, %", "external_quantum_efficiency", "%"),
    ("exitance against a Lambertian's", "lambertian_ratio", ".3f"),
    ("half-luminance angle, deg", "half_luminance_angle_deg", ".1f"),
    ("color along the normal: x", "x_normal", ".4f"),
    ("    y", "y_normal", ".4f"),
    ("    u'", "u_prime_normal", ".4f"),
    ("    v'", "v_prime_normal", ".4f"),
    ("blue index, cd/A over y", "blue_index", ".4g"),
    ("peak wavelength, nm", "peak_nm_normal", ".1f"),
    ("full width at half maximum, nm", "fwhm_nm_normal", ".1f"),
    ("dominant wavelength, nm", "dominant_wavelength_nm", ".1f"),
    ("excitation purity, %", "excitation_purity", "%"),
    ("correlated color temperature, K", "correlated_color_temperature_K", ".0f"),
    ("    distance from a black body, u v", "duv", ".4f"),
    ("color rendering index Ra", "color_rendering_index", ".1f"),
)


def angular_view(
    result: Mapping[str, Any],
    cautions: Sequence[str] = (),
    *,
    every_angle: bool = False,
) -> RenderableType:
    """Lay out emission against angle.

    Parameters
    ----------
    result : mapping
        As ``angular --json`` writes it, with spectra or polarization if they are to be shown.
    cautions : sequence of str
        Said at the end, one line each.
    every_angle : bool
        Show every angle, not about ten of many.
    """
    bright, faint = _by_light(result["sides"])
    parts: list[RenderableType] = [Text(result["title"], style="bold"), Text()]
    parts += [_headline(name, side) for name, side in bright.items()]
    parts += [Text(line) for line in faint]
    if bright:
        parts.append(_spaced(_summary(bright)))
    for name, side in bright.items():
        parts.append(_spaced(_angle_table(name, side, every_angle)))
        if "wavelength_nm" in side:
            parts += [_spaced(table) for table in _spectrum_tables(name, side, every_angle)]
    reached = result["accuracy"]
    parts.append(
        _spaced(
            Text(
                "Accuracy reached by what leaves at all angles together, as a fraction of the "
                f"dissipated power: {accuracy(reached['integration_error'])}"
            )
        )
    )
    for kind, lines in (("Warning", result["warnings"]), ("Caution", cautions)):
        parts += [_spaced(Text(f"{kind}: {line}", style="yellow")) for line in lines]
    return Group(*parts)


def print_angular(
    out: Console,
    result: Mapping[str, Any],
    cautions: Sequence[str] = (),
    *,
    every_angle: bool = False,
) -> None:
    """Print `angular_view`."""
    show(out, angular_view(result, cautions, every_angle=every_angle))


def sides_with_light(photons: Mapping[str, float]) -> list[str]:
    """Names of the sides that get more than a thousandth of what leaves.

    Parameters
    ----------
    photons : mapping of str to float
        Light of each side, such as photons per charge.
    """
    total = sum(photons.values())
    return [name for name, out in photons.items() if out > FAINT_SHARE * total]


def _by_light(
    sides: Mapping[str, Mapping[str, Any]],
) -> tuple[dict[str, Mapping[str, Any]], list[str]]:
    """Sides worth their tables, and a line for every other."""
    photons = {name: side["external_quantum_efficiency"] for name, side in sides.items()}
    bright = {name: sides[name] for name in sides_with_light(photons)}
    faint = []
    for name in sides:
        if name not in bright:
            out = photons[name]
            faint.append(
                f"{name}: no light"
                if out == 0.0
                else f"{name}: {percent(out)} % of the charges send a photon there; "
                "--json has the rest"
            )
    return bright, faint


def _spaced(part: RenderableType) -> Padding:
    return Padding(part, (1, 0, 0, 0))


def _word(value: float | None, form: str) -> str:
    if value is None:
        return MISSING
    return percent(value) if form == "%" else f"{value:{form}}"


def _headline(name: str, side: Mapping[str, Any]) -> Text:
    text = f"{name}: {side['current_efficiency_cd_A']:.4g} cd/A along the normal"
    if side["luminance_normal_cd_m2"] is not None:
        text += f", {side['luminance_normal_cd_m2']:.4g} {_LUMEN}"
    if side["x_normal"] is not None:
        text += f", color x {side['x_normal']:.4f}, y {side['y_normal']:.4f}"
    return Text(text, style="bold")


def _summary(sides: Mapping[str, Mapping[str, Any]]) -> Group:
    table = plain_table("", *sides)
    for label, key, form in _SUMMARY:
        values = [side[key] for side in sides.values()]
        if any(value is not None for value in values):
            table.add_row(label, *[_word(value, form) for value in values])
    return titled("Of each side", table)


def _rows(side: Mapping[str, Any], every_angle: bool) -> list[int]:
    """Which angles get a row."""
    count = len(side["angle_deg"])
    step = 1 if every_angle or count <= _MOST_ROWS else -(-(count - 1) // 9)
    return list(range(0, count, step))


def _angle_table(name: str, side: Mapping[str, Any], every_angle: bool) -> Group:
    columns = [("radiance", "radiance_W_sr_m2", ".4g"), ("luminance", "luminance_cd_m2", ".4g")]
    columns = [column for column in columns if side[column[1]] is not None]
    columns.append(("relative", "relative_luminance", ".4f"))
    if "relative_luminance_s" in side:
        columns += [(f"of it {one}", f"relative_luminance_{one}", ".4f") for one in "sp"]
    columns += [("x", "x", ".4f"), ("y", "y", ".4f"), ("u'", "u_prime", ".4f")]
    columns += [("v'", "v_prime", ".4f"), ("delta u'v'", "delta_uv", ".4f")]
    table = plain_table("angle, deg", *[head for head, _, _ in columns])
    table.columns[0].justify = "right"
    for i in _rows(side, every_angle):
        cells = [_word(side[key][i], form) for _, key, form in columns]
        table.add_row(f"{side['angle_deg'][i]:g}", *cells)
    units = f"; radiance in {_WATT}, luminance in {_LUMEN}" if columns[0][0] == "radiance" else ""
    return titled(f"Against angle, {name}{units}", table)


def _spectrum_tables(name: str, side: Mapping[str, Any], every_angle: bool) -> list[Group]:
    """Spectral radiance, and lines if there are any, at a few angles; s and p together."""
    angles = _rows(side, every_angle)[:7]
    found = []
    for head, at, key, end in (
        ("Spectral radiance", "wavelength_nm", "spectral_radiance", "_nm"),
        ("Radiance of lines", "line_nm", "line_radiance", ""),
    ):
        if at not in side:
            continue
        per = "m2" if side[f"{key}_s_W_sr_m2{end}"] is not None else "A"
        area = "m\N{SUPERSCRIPT TWO}" if per == "m2" else "A"
        unit = f"W/(sr {area}{' nm' if end else ''})"
        table = plain_table("nm", *[f"{side['angle_deg'][i]:g} deg" for i in angles])
        s, p = (side[f"{key}_{one}_W_sr_{per}{end}"] for one in "sp")
        _fill(table, side[at], s, p, angles)
        found.append(titled(f"{head}, {name}, {unit}", table))
    return found


def _fill(
    table: Table,
    wavelength_nm: Sequence[float],
    s: Sequence[Sequence[float]],
    p: Sequence[Sequence[float]],
    angles: Sequence[int],
) -> None:
    table.columns[0].justify = "right"
    for w, at in enumerate(wavelength_nm):
        table.add_row(f"{at:g}", *[f"{s[i][w] + p[i][w]:.4g}" for i in angles])
