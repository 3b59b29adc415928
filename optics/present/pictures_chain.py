"""The chain from injected charge to photons outside, as bars that lose a piece at every step."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import TYPE_CHECKING, Any, NamedTuple

from optics.present.pictures_style import (
    CHARGE,
    FAINT,
    INK,
    LOOKS,
    TEXT_SIZE,
    caption,
    figure_of,
)
from optics.present.wording import CHAIN_LABELS, percent

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_DARK = ("unbalanced", "dark_excitons", "nonradiative")
_TRAPPED = ("absorbed", "surface_plasmon", "guided", "cover", "substrate")
_OUT = ("air_top", "air_bottom")
# Below this share a step is left out: its bar would be thinner than its outline.
_VISIBLE = 5e-5
_ROW_IN, _PANEL_IN, _NAMES_IN = 0.3, 4.1, 2.7


class Step(NamedTuple):
    """One row: a bar from start to stop, as shares of the injected charge."""

    name: str
    key: str  # part of the chain, or "" for what is left after the parts above
    start: float
    stop: float


def steps(unit: Mapping[str, Any], shown: Sequence[str]) -> list[Step]:
    """Rows for one unit: losses one after the other, with what is left in between.

    Parameters
    ----------
    unit : mapping
        Entry of ``chain`` in the JSON result; its parts sum to 1.
    shown : sequence of str
        Parts that get a row.
    """
    rows = [Step("charge injected", "", 0.0, 1.0)]
    left = 1.0
    for keys, remains in ((_DARK, "light generated"), (_TRAPPED, "light that leaves")):
        for key in keys:
            before, left = left, left - unit[key]
            if key in shown:
                rows.append(Step(CHAIN_LABELS[key], key, left, before))
        rows.append(Step(remains, "", 0.0, left))
    start = 0.0
    for key in reversed(_OUT):
        if key in shown:
            rows.append(Step(CHAIN_LABELS[key], key, start, start + unit[key]))
            start += unit[key]
    if sum(key in shown for key in _OUT) == 1:
        del rows[-2]  # the one side says what their sum would say
    return rows


def chain_figure(result: Mapping[str, Any]) -> Figure:
    """Draw the chain of every unit, side by side.

    Parameters
    ----------
    result : mapping
        As ``budget --json`` writes it.
    """
    chain = result["chain"]
    shown = _shown(chain)
    rows = len(steps(chain[0], shown))
    width = _NAMES_IN + _PANEL_IN * len(chain)
    figure = figure_of(width, 1.45 + _ROW_IN * rows, result["title"])
    panels = figure.subplots(1, len(chain), sharey=True, squeeze=False)[0]
    for axes, unit in zip(panels, chain, strict=True):
        _draw(axes, steps(unit, shown))
        if len(chain) > 1:
            axes.set_title(f"unit {unit['unit']}", loc="left", fontsize=TEXT_SIZE, color=INK)
        axes.set_xlabel("of the charge injected (%)", fontsize=TEXT_SIZE)
    _name_rows(panels[0], steps(chain[0], shown))
    total = percent(result["external_quantum_efficiency"])
    text = f"External quantum efficiency {total} %"
    if len(chain) > 1:
        text += ": the sum of all units, since each charge passes every one"
    matched = result["external_quantum_efficiency_matched"]
    if matched is not None:
        text += (
            f"; with an index-matched hemisphere on the brighter side {percent(matched)} % there"
        )
    caption(figure, text + ".")
    return figure


def _shown(chain: Sequence[Mapping[str, Any]]) -> list[str]:
    """Parts that are visible in some unit; the brighter side always."""
    brighter = max(_OUT, key=lambda key: float(sum(unit[key] for unit in chain)))
    return [
        key
        for key in (*_DARK, *_TRAPPED, *_OUT)
        if key == brighter or max(unit[key] for unit in chain) >= _VISIBLE
    ]


def _draw(axes: Axes, rows: Sequence[Step]) -> None:
    for place, row in enumerate(rows):
        look = LOOKS.get(row.key)
        style: dict[str, Any] = {"edgecolor": INK, "linewidth": 0.6, "height": 0.72, "zorder": 2}
        if look is not None:
            style |= {"facecolor": look.color, "hatch": look.hatch}
        elif row.key:
            style |= {"facecolor": CHARGE}
        else:
            style |= {"facecolor": "white", "linewidth": 1.2}
        axes.barh(place, 100 * (row.stop - row.start), left=100 * row.start, **style)
        _number(axes, place, row)
    _thread(axes, rows)
    axes.tick_params(axis="y", length=0)
    axes.tick_params(axis="x", labelsize=TEXT_SIZE, color=FAINT)
    axes.set_ylim(len(rows) - 0.4, -0.6)
    axes.set_xlim(0, 117)
    axes.set_xticks(range(0, 101, 20))
    axes.spines[["top", "right", "left"]].set_visible(False)
    axes.axvline(0.0, color=INK, linewidth=0.8, zorder=3)


def _name_rows(axes: Axes, rows: Sequence[Step]) -> None:
    axes.set_yticks(range(len(rows)), [row.name for row in rows], fontsize=TEXT_SIZE)
    for label, row in zip(axes.get_yticklabels(), rows, strict=True):
        if _is_total(row):
            label.set_fontweight("bold")


def _is_total(row: Step) -> bool:
    return row.key == "" or row.key in _OUT


def _number(axes: Axes, place: int, row: Step) -> None:
    """Write the share next to its bar, where there is room; losses carry a minus sign."""
    value = percent(row.stop - row.start)
    loss = row.key != "" and row.key not in _OUT
    text = f"\N{MINUS SIGN}{value}" if loss and value != "0" else value
    axes.text(
        100 * row.stop + 1.2, place, text, va="center", ha="left",
        fontsize=TEXT_SIZE, color=INK, fontweight="bold" if _is_total(row) else "normal",
    )  # fmt: skip


def _thread(axes: Axes, rows: Sequence[Step]) -> None:
    """Lead the eye from what is left after one step to the next one."""
    for place, (above, below) in enumerate(pairwise(rows)):
        level = above.stop if not above.key else above.start
        if above.key in _OUT:
            level = above.stop
        elif below.key in _OUT:
            continue
        axes.plot(
            [100 * level] * 2, [place + 0.36, place + 0.64],
            color=FAINT, linewidth=0.8, linestyle=(0, (2, 1.5)), zorder=1,
        )  # fmt: skip
