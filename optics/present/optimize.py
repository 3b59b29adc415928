"""The result of an optimization as tables for people."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from typing import TYPE_CHECKING

from optics.present.sweep import digits, short_name
from optics.present.wording import MISSING

if TYPE_CHECKING:
    from rich.console import Console, RenderableType

    from optics.study.optimum import Direction, Optimum, Point


def print_optimum(out: Console, found: Optimum) -> None:
    """Print `optimum_view`."""
    from optics.present.terminal import show

    show(out, optimum_view(found))


def optimum_view(found: Optimum) -> RenderableType:
    """Lay out an optimization: the best first, what holds it back, what else is as good."""
    from rich.console import Group
    from rich.text import Text

    single = len(found.objectives) == 1
    parts: list[RenderableType] = [Text(found.title, style="bold"), Text()]
    parts += [Text(line, style="bold green") for line in _headlines(found)]
    parts.append(Text())
    if not single:
        parts += [*_points("Pareto front", found.front, found), Text(), *_held(found), Text()]
    parts += [_variables(found), Text()]
    if found.constraints:
        parts += [_constraints(found), Text()]
    if single:
        parts += [Text(line) for line in _flatness(found)]
        if found.others:
            parts += [*_points("Other optima within 1 %", found.others, found), Text()]
        else:
            parts += [Text("No other optimum within 1 % was found."), Text()]
    parts += [Text(line) for line in _tried(found)]
    accuracy = ", ".join(
        f"{key.replace('_', ' ')} {value:.0e}" for key, value in found.accuracy.items()
    )
    parts.append(Text(f"Accuracy at the best: {accuracy}", style="dim"))
    parts += [Text(f"Warning: {one}", style="yellow") for one in found.warnings]
    return Group(*parts)


def _headlines(found: Optimum) -> Iterator[str]:
    kind = "" if len(found.objectives) == 1 else "compromise: "
    for one in found.objectives:
        unit = "" if one.units == "1" else f" {one.units}"
        was = "undefined" if one.start is None else digits(one.start)
        yield f"{kind}{one.name}  {digits(one.best)}{unit}, was {was}{unit}  ({one.kind})"


def _variables(found: Optimum) -> RenderableType:
    from optics.present.tables import plain_table, titled

    single = len(found.objectives) == 1
    heads = ["variable", "unit", "from", "to", "was", "best"]
    table = plain_table(*heads, *(["within 1 %", "held back by"] if single else []))
    table.columns[1].justify = "left"
    if single:
        table.columns[-1].justify = "left"
    size = abs(found.objectives[0].best) or 1.0
    for one in found.variables:
        row = [
            short_name(one.path), "" if one.units == "1" else one.units,
            f"{one.min:.6g}", f"{one.max:.6g}", f"{one.start:.6g}", f"{one.best:.7g}",
        ]  # fmt: skip
        if single:
            known = one.flat_from is not None and one.flat_to is not None
            row.append(f"{one.flat_from:.4g} .. {one.flat_to:.4g}" if known else MISSING)
            gain = _percent((one.gain_per_unit or 0.0) / size)
            unit = "1" if one.units == "1" else f"1 {one.units}"
            row.append("" if one.binds is None else f"{one.binds}: {unit} beyond gains {gain}")
        table.add_row(*row)
    return titled("Variables", table)


def _constraints(found: Optimum) -> RenderableType:
    from optics.present.tables import plain_table, titled

    single = len(found.objectives) == 1
    heads = ["constraint", "unit", "", "limit", "reached"]
    table = plain_table(*heads, *(["binds"] if single else []))
    table.columns[1].justify = "left"
    if single:
        table.columns[-1].justify = "left"
    size = abs(found.objectives[0].best) or 1.0
    for one in found.constraints:
        row = [
            one.name, "" if one.units == "1" else one.units, one.kind,
            f"{one.limit:.6g}", digits(one.value),
        ]  # fmt: skip
        if single:
            gain = _percent(0.1 * abs(one.limit) * (one.gain_per_unit or 0.0) / size)
            row.append(f"yes: a tenth looser gains {gain}" if one.binds else "no")
        table.add_row(*row)
    return titled("Constraints", table)


def _flatness(found: Optimum) -> Iterator[str]:
    """Sentence on the joint change that costs least."""
    if found.loosest is None:
        return
    told = " and ".join(_losses(found.loosest))
    yield f"Loosest together: {_moves(found, found.loosest)}; that and its opposite lose {told}."
    yield ""


def _moves(found: Optimum, way: Direction) -> str:
    """Changes of the variables, but for those that hardly move in units of their ranges."""
    shares = {one.path: abs(way.steps[one.path]) / (one.max - one.min) for one in found.variables}
    largest = max(shares.values())
    return ", ".join(
        f"{short_name(one.path)} {way.steps[one.path]:+.3g}"
        + ("" if one.units == "1" else f" {one.units}")
        for one in found.variables
        if shares[one.path] > 0.01 * largest
    )


def _losses(way: Direction) -> list[str]:
    return [
        MISSING if one is None else _percent(one) for one in (way.loss_forward, way.loss_backward)
    ]


def _held(found: Optimum) -> Iterator[RenderableType]:
    """Table of what holds the points of a front back, and how flat they are."""
    from rich.text import Text

    from optics.present.tables import plain_table, titled

    table = plain_table("", "held back by", "loosest together", "loses", "opposite")
    for place in (1, 2):
        table.columns[place].justify = "left"
    words = {one.path: short_name(one.path) for one in found.variables}
    for number, point in enumerate(found.front, 1):
        held = [f"{words.get(one.name, one.name)} {one.kind}" for one in point.held_by]
        way = point.loosest
        rest = [MISSING] * 3 if way is None else [_moves(found, way), *_losses(way)]
        table.add_row(str(number), ", ".join(held) or "nothing", *rest)
    yield titled("What holds them, and how flat they are", table)
    yield Text("Loosest: all objectives stay, to first order; the one that loses most is told.")


def _points(caption: str, points: Sequence[Point], found: Optimum) -> Iterator[RenderableType]:
    """Table of several devices, numbered from 1."""
    from optics.present.tables import plain_table, titled

    outcomes = list(found.best.outcomes)
    heads = [short_name(one.path) for one in found.variables]
    table = plain_table("", *heads, *(name.replace(".", ".\n") for name in outcomes))
    for number, point in enumerate(points, 1):
        mark = " *" if found.front and point == found.best else ""
        table.add_row(
            f"{number}{mark}",
            *(f"{point.values[one.path]:.6g}" for one in found.variables),
            *(digits(point.outcomes[name]) for name in outcomes),
        )
    yield titled(caption, table)
    if found.front:
        from rich.text import Text

        yield Text("* the compromise, nearest to the best of each; --pick NUMBER writes another")


def _tried(found: Optimum) -> Iterable[str]:
    tried = found.tried
    kind = "optimum" if tried.optima == 1 else "different optima"
    ends = f"{tried.starts} starts to {tried.optima} {kind}"
    if found.front:
        ends = f"{tried.starts} starts to {len(found.front)} points of the front"
    return (
        f"Tried {tried.samples} points spread over the bounds (seed {found.seed}), then followed "
        f"gradients from {ends};",
        f"{tried.evaluations} points and {tried.gradients} gradients in all. Gradients: "
        f"{tried.gradient_method}.",
    )


def _percent(share: float) -> str:
    return f"{100.0 * share:.2g} %"
