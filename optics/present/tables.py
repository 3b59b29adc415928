"""The light budget as tables for people."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from rich import box
from rich.console import Console, Group, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from optics.device.materials import TableUse, span_text
from optics.present.citation import short_source
from optics.present.digits import large
from optics.present.terminal import show
from optics.present.wording import CHAIN_LABELS, MISSING, accuracy, number, percent

_BAR_WIDTH = 30
_DARK_STEPS = ("unbalanced", "dark_excitons", "nonradiative")
_DESTINATIONS = tuple(key for key in CHAIN_LABELS if key not in _DARK_STEPS)
_OUT = ("air_bottom", "air_top")


def budget_view(
    result: Mapping[str, Any],
    tables: Sequence[TableUse],
    cautions: Sequence[str] = (),
    *,
    terminal: bool = False,
) -> RenderableType:
    """Lay out a light budget, what a device engineer asks first at the top.

    Parameters
    ----------
    result : mapping
        As ``budget --json`` writes it.
    tables : sequence of TableUse
        Optical constants that the result rests on.
    cautions : sequence of str
        Said at the end, one line each.
    terminal : bool
        Whether large digits are drawn.

    Returns
    -------
    rich renderable
    """
    parts: list[RenderableType] = [
        Text(result["title"], style="bold"),
        Text(),
        _headline(result, terminal=terminal),
        *_spaced(
            _chain_table(result["chain"]),
            _destination_table(result),
            _emitter_table(result["emitters"]),
            _constants_table(tables),
            _accuracy_line(result["accuracy"]),
            *_sensitivity(result),
        ),
    ]
    parts += _remarks("Warning", result["warnings"], "yellow")
    parts += _remarks("Caution", cautions, "yellow")
    return Group(*parts)


def _sensitivity(result: Mapping[str, Any]) -> list[RenderableType]:
    """Sensitivities, where the result holds them."""
    from optics.present.sensitivity import sensitivity_view

    found = result.get("sensitivity")
    return [] if found is None else [sensitivity_view(found)]


def print_budget(
    out: Console,
    result: Mapping[str, Any],
    tables: Sequence[TableUse],
    cautions: Sequence[str] = (),
) -> None:
    """Print `budget_view`."""
    show(out, budget_view(result, tables, cautions, terminal=out.is_terminal))


def plain_table(*headers: str) -> Table:
    """Return a table in the house's style: one rule under the heads, numbers to the right."""
    table = Table(box=box.SIMPLE_HEAD, header_style="bold", show_edge=False, pad_edge=False)
    for index, header in enumerate(headers):
        table.add_column(header, justify="left" if index == 0 else "right")
    return table


def titled(caption: str, table: Table) -> Group:
    """Return a table below its caption, which unlike a title of its own may be the wider one."""
    return Group(Text(caption, style="bold"), table)


def _headline(result: Mapping[str, Any], *, terminal: bool) -> RenderableType:
    total = result["external_quantum_efficiency"]
    eqe = percent(total)
    lines: list[RenderableType] = []
    if terminal and "<" not in eqe:
        lines += [Text(line, style="bold green") for line in large(f"{eqe} %")]
        lines.append(Text("external quantum efficiency (EQE), photons out per charge injected"))
    else:
        lines.append(Text(f"EQE {eqe} %   external quantum efficiency, photons out per charge"))
    sides = ", ".join(
        f"{side} {percent(result[f'external_quantum_efficiency_{side}'])} %"
        for side in ("bottom", "top")
    )
    matched = result["external_quantum_efficiency_matched"]
    lines.append(Text(f"    by side: {sides}"))
    if matched is not None:
        lines.append(
            Text(f"    with an index-matched hemisphere on the brighter side: {percent(matched)} %")
        )
    lines.append(Text(f"    of the light generated, {percent(_outcoupled(result))} % leaves"))
    return Group(*lines)


def _spaced(*parts: RenderableType) -> list[RenderableType]:
    return [Padding(part, (1, 0, 0, 0)) for part in parts]


def _outcoupled(result: Mapping[str, Any]) -> float | None:
    value: float | None = result["outcoupling_efficiency"]
    return value


def _chain_table(chain: Sequence[Mapping[str, Any]]) -> Group:
    """Where each injected charge ends, one column for each unit; a bar where there is one."""
    single = len(chain) == 1
    heads = ["%"] if single else [str(part["unit"]) for part in chain]
    caption = "Of the charge injected" if single else "Of the charge injected, % in each unit"
    table = plain_table("", *heads)
    if single:
        table.add_column("", justify="left")
    for key, label in CHAIN_LABELS.items():
        cells = [percent(part[key]) for part in chain]
        if single:
            cells.append("#" * round(_BAR_WIDTH * chain[0][key]))
        table.add_row(label, *cells, style="bold" if key in _OUT else None)
    table.add_section()
    table.add_row("sum", *[percent(sum(part[key] for key in CHAIN_LABELS)) for part in chain])
    return titled(caption, table)


def _emitter_table(emitters: Sequence[Mapping[str, Any]]) -> Group:
    table = plain_table("", *[str(one["name"]) for one in emitters])
    rows = (
        ("unit", "unit", str),
        ("EQE, %", "external_quantum_efficiency", percent),
        ("outcoupling efficiency, %", "outcoupling_efficiency", percent),
        ("radiative efficiency in the device, %", "radiative_efficiency", percent),
        ("Purcell factor", "purcell_factor", number),
        ("decay rate against the bulk", "decay_rate_ratio", number),
        ("horizontal fraction of the dipoles", "horizontal_fraction", number),
        ("vertical fraction", "vertical_fraction", number),
        ("order parameter S", "order_parameter", number),
        ("near-field share, %", "near_field_share", percent),
        ("spectrum outside the grid, %", "lost_share", percent),
    )
    for label, key, worded in rows:
        table.add_row(label, *[worded(one[key]) for one in emitters])
    return titled("Emitters", table)


def _destination_table(result: Mapping[str, Any]) -> Group:
    """Where the photons and the near field of each emitter go, and of all together."""
    emitters = result["emitters"]
    columns = [(str(one["name"]), one["destinations"]) for one in emitters]
    if len(emitters) > 1:
        columns.append(("device", result["destinations"]))
    heads = [name for name, _ in columns]
    table = plain_table("", *heads)
    for key in _DESTINATIONS:
        cells = [percent(shares.get(key)) for _, shares in columns]
        table.add_row(CHAIN_LABELS[key], *cells, style="bold" if key in _OUT else None)
    table.add_section()
    table.add_row("sum", *[_sum(shares) for _, shares in columns])
    return titled("Of the light generated, %", table)


def _sum(shares: Mapping[str, float | None]) -> str:
    known = [value for value in shares.values() if value is not None]
    return percent(sum(known)) if len(known) == len(shares) and known else MISSING


def _constants_table(tables: Sequence[TableUse]) -> RenderableType:
    if not tables:
        return Text("No table of optical constants was used.")
    view = plain_table("table", "range", "source")
    view.columns[2].justify = "left"
    for use in tables:
        view.add_row(use.name, span_text(use.range_nm), short_source(use.source) or "not stated")
    return titled("Tables used", view)


def _accuracy_line(reached: Mapping[str, Any]) -> RenderableType:
    energy, integration = (
        accuracy(reached[key]) for key in ("energy_balance", "integration_error")
    )
    return Text(
        "Accuracy reached, as a fraction of the dissipated power: "
        f"energy balance {energy}, integration {integration}"
    )


def _remarks(kind: str, lines: Iterable[str], style: str) -> list[RenderableType]:
    return [Padding(Text(f"{kind}: {line}", style=style), (1, 0, 0, 0)) for line in lines]
