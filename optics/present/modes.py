"""Modes and absorption by film as tables for people."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

from rich.console import Console, Group, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from optics.present.tables import plain_table, titled
from optics.present.terminal import show
from optics.present.wording import percent

_FAINT = 5e-5  # share of a line below which it is shown only on request
_PLACES = {
    "air_bottom": "leaves at the bottom",
    "air_top": "leaves at the top",
    "substrate": "arrives in the substrate, stays there",
    "cover": "arrives in the cover, stays there",
    "substrate_absorbed": "absorbed in the substrate on its way",
    "cover_absorbed": "absorbed in the cover on its way",
    "surroundings_bottom": "enters absorbing surroundings, bottom",
    "surroundings_top": "enters absorbing surroundings, top",
    "guided": "stays guided, nothing absorbs it",
}
_TRAPPED = {"guided": "guided", "surface_plasmon": "surface plasmons"}
_BELOW = ("air_bottom", "surroundings_bottom", "substrate", "substrate_absorbed")
_ABOVE = ("cover_absorbed", "cover", "surroundings_top", "air_top", "guided")


def modes_view(result: Mapping[str, Any], *, every_mode: bool = False) -> RenderableType:
    """Lay out modes and absorption.

    Parameters
    ----------
    result : mapping
        As ``modes --json`` writes it.
    every_mode : bool
        Show modes that take next to nothing too.

    Returns
    -------
    rich renderable
    """
    parts: list[RenderableType] = [Text(result["title"], style="bold")]
    for emitter in result["emitters"]:
        span = _span(emitter["wavelength_nm"])
        shown, hidden = _chosen(emitter["modes"], every_mode=every_mode)
        table = titled(f"Modes, emitter {emitter['name']}, {span}", _mode_table(shown))
        parts.append(Padding(table, (1, 0, 0, 0)))
        if hidden:
            parts.append(
                Text(f"{hidden} more with shares below {100 * _FAINT:g} %: --all shows them")
            )
        caption = "Trapped light of the budget, mode by mode (% of the photons dissipated)"
        parts.append(Padding(titled(caption, _trapped(emitter["trapped"])), (1, 0, 0, 0)))
    parts += _absorption_parts(result)
    parts += [Text(f"Warning: {line}", style="yellow") for line in result["warnings"]]
    return Group(*parts)


def print_modes(out: Console, result: Mapping[str, Any], *, every_mode: bool = False) -> None:
    """Print `modes_view`."""
    show(out, modes_view(result, every_mode=every_mode))


def _span(wavelength_nm: Sequence[float]) -> str:
    first, last = wavelength_nm[0], wavelength_nm[-1]
    return f"{first:g} nm" if first == last else f"{first:g} to {last:g} nm"


def _chosen(
    lines: Sequence[Mapping[str, Any]], *, every_mode: bool
) -> tuple[list[Mapping[str, Any]], int]:
    kept = [
        line for line in lines if every_mode or line["leaky"] or abs(line["share"] or 0.0) >= _FAINT
    ]
    return kept, len(lines) - len(kept)


def _mode_table(lines: Sequence[Mapping[str, Any]]) -> Table:
    """One row per line, at the wavelength that adds most to its share."""
    table = plain_table("mode", "kind", "share %", "exists nm", "at nm", "n_eff", "1/e length um",
                        "mostly in")  # fmt: skip
    table.columns[1].justify = table.columns[-1].justify = "left"
    for line in lines:
        at = _strongest(line)
        kind = line["kind"][at]
        backward = line["direction"][at] == "backward"
        index = complex(line["effective_index"][at], line["effective_index_imaginary"][at])
        length = line["attenuation_length_um"][at]
        table.add_row(
            line["name"],
            f"{kind}, backward" if backward else kind,
            percent(line["share"]),
            _span(line["wavelength_nm"]).removesuffix(" nm"),
            f"{line['wavelength_nm'][at]:g}",
            f"{index.real:.4f}{index.imag:+.4f}i",
            "lossless" if length is None else _three_digits(length),
            _mostly_in(line["confinement"], at),
        )
    return table


def _three_digits(length: float) -> str:
    """Three significant digits, zeros too; whole numbers and powers of ten for long ways."""
    if length >= 1e6:
        return f"{length:.2e}"
    return f"{length:.{max(0, 2 - math.floor(math.log10(length)))}f}"


def _strongest(line: Mapping[str, Any]) -> int:
    added = [float(part) for part in line["contribution"]]
    if line["leaky"]:
        return len(added) // 2
    return added.index(max(added))


def _mostly_in(confinement: Mapping[str, Sequence[float]], at: int) -> str:
    inside = sorted(((float(part[at]), name) for name, part in confinement.items()), reverse=True)
    return ", ".join(f"{name} {100 * share:.0f} %" for share, name in inside[:2])


def _trapped(parts: Mapping[str, Mapping[str, float]]) -> Table:
    table = plain_table("in the budget as", "budget", "guided modes", "plasmons", "remainder")
    for key, label in _TRAPPED.items():
        part = parts[key]
        table.add_row(
            label,
            *(percent(part[name]) for name in ("budget", "guided_modes", "plasmons", "remainder")),
        )
    return table


def _absorption_parts(result: Mapping[str, Any]) -> list[RenderableType]:
    whole = result["absorption"]
    emitters = result["emitters"]
    if whole is not None and len(emitters) > 1:
        named = [("device", whole), *((one["name"], one["absorption"]) for one in emitters)]
    else:
        named = [(one["name"], one["absorption"]) for one in emitters]
    if not named:
        return []
    table = plain_table("where the light ends", *(name for name, _ in named))
    first = named[0][1]
    films = {name: f"absorbed in {name}" for name in first["films"]}
    for name in (*_BELOW, *films, *_ABOVE):
        found = [{**one["films"], **one["elsewhere"]}[name] for _, one in named]
        if any(found):
            table.add_row(films.get(name, _PLACES.get(name, name)), *map(percent, found))
    table.add_row("sum less 1", *(f"{one['closure_error']:+.0e}" for _, one in named))
    caption = "All light generated, film by film (%)"
    return [Padding(titled(caption, table), (1, 0, 0, 0))]
