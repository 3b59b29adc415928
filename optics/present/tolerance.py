"""What process spread does, as tables for people."""

from __future__ import annotations

from typing import TYPE_CHECKING

from optics.present.sweep import digits, short_name
from optics.present.tables import plain_table, titled
from optics.present.wording import MISSING
from optics.study.tolerance_result import QUANTILES, Tolerance
from optics.study.varied import path_unit

if TYPE_CHECKING:
    from rich.console import Console, RenderableType

    from optics.study.draws import Spread
    from optics.study.intervals import Estimate
    from optics.study.tolerance_result import OutcomeSpread, Yield

_MOST_FAILURES = 10
_MOST_FACTORS = 12
_BAR_WIDTH = 20


def print_tolerance(out: Console, found: Tolerance) -> None:
    """Print `tolerance_view`."""
    from optics.present.terminal import show

    show(out, tolerance_view(found))


def tolerance_view(found: Tolerance) -> RenderableType:
    """Lay out a tolerance study: yield first, then outcomes, influences and what was assumed."""
    from rich.console import Group
    from rich.text import Text

    parts: list[RenderableType] = [Text(found.title, style="bold"), Text()]
    if found.joint_yield is not None:
        parts += [_yields(found), Text()]
    parts += [_outcomes(found), Text()]
    for one in found.outcomes:
        if one.influence is not None:
            parts += [_influences(found, one), Text()]
    parts += [_spreads(found), Text()]
    accuracy = ", ".join(
        f"{key.replace('_', ' ')} {found.accuracy[key]:.0e}"
        for key in ("energy_balance", "integration_error")
    )
    said = (
        f"{found.samples} samples in {found.sequences} independent Sobol sequences, seed "
        f"{found.seed}; intervals (±) at 95 % confidence; derivatives: {found.derivatives}"
    )
    parts.append(Text(said, style="dim"))
    parts.append(Text(f"Accuracy at the worst point: {accuracy}", style="dim"))
    parts += [Text(f"Failed: {line}", style="red") for line in found.failed[:_MOST_FAILURES]]
    if len(found.failed) > _MOST_FAILURES:
        more = len(found.failed) - _MOST_FAILURES
        parts.append(Text(f"Failed: {more} more points", style="red"))
    parts += [Text(f"Warning: {one}", style="yellow") for one in found.warnings]
    return Group(*parts)


def _yields(found: Tolerance) -> RenderableType:
    table = plain_table("", "of the samples", "interval", "from the derivatives")
    joint = found.joint_yield
    assert joint is not None
    several = len(found.yields) > 1
    for one in found.yields:
        table.add_row(limit_text(one), *_yield_cells(one))
    if several:
        table.add_section()
        table.add_row("all together", *_yield_cells(joint), style="bold")
    return titled("Yield, %", table)


def limit_text(one: Yield) -> str:
    """Word a limit: ``external_quantum_efficiency >= 0.25``."""
    name = one.outcome or "all together"
    if one.low is not None and one.high is not None:
        return f"{one.low:.6g} <= {name} <= {one.high:.6g}"
    if one.low is not None:
        return f"{name} >= {one.low:.6g}"
    return f"{name} <= {one.high:.6g}"


def _yield_cells(one: Yield) -> tuple[str, ...]:
    share = one.share
    value = MISSING if share.value is None else f"{100 * share.value:.2f}"
    interval = MISSING
    if share.low is not None and share.high is not None:
        interval = f"{100 * share.low:.2f} to {100 * share.high:.2f}"
    linear = MISSING if one.linear is None else f"{100 * one.linear:.2f}"
    return value, interval, linear + (" !" if one.failure else "  ")


def _outcomes(found: Tolerance) -> RenderableType:
    heads = ("", "nominal", "mean", "sd", *(f"{100 * one:g} %" for one in QUANTILES))
    table = plain_table(*heads)
    for one in found.outcomes:
        nominal = MISSING if one.nominal is None else digits(one.nominal)
        table.add_row(
            one.name, nominal, with_error(one.mean), with_error(one.sd),
            *(MISSING if at.value is None else digits(at.value) for at in one.quantiles),
        )  # fmt: skip
        linear = one.linear
        if linear is not None:
            mark = " !" if linear.failures else ""
            sd = f"{linear.sd:.3g}{mark}"
            table.add_row("  from the derivatives", "", digits(linear.mean), sd, style="dim")
    return titled("Outcomes: mean and standard deviation of the samples, quantiles", table)


def _influences(found: Tolerance, one: OutcomeSpread) -> RenderableType:
    influence = one.influence
    assert influence is not None
    table = plain_table("", "alone", "in all", "from the derivatives")
    table.add_column("", justify="left")
    for place in ranked(one)[:_MOST_FACTORS]:
        linear = MISSING if one.linear is None else f"{100 * one.linear.shares[place]:.1f}"
        total = influence.total[place]
        table.add_row(
            factor_name(found, place), _percent(influence.first_order[place]), _percent(total),
            linear, "#" * round(_BAR_WIDTH * min(total.value or 0.0, 1.0)),
        )  # fmt: skip
    caption = f"Influence on {one.name}, % of its variance"
    if influence.unexplained >= 5e-4:
        caption += f"; {100 * influence.unexplained:.1f} % unexplained"
    return titled(caption, table)


def ranked(one: OutcomeSpread) -> list[int]:
    """Factors of an outcome by their influence in all, the largest first."""
    influence = one.influence
    if influence is None:
        return []
    total = [found.value or 0.0 for found in influence.total]
    return sorted(range(len(total)), key=lambda place: -total[place])


def factor_name(found: Tolerance, place: int) -> str:
    """Word a factor: ``HTL thickness``, ``HTL thickness + ETL thickness``."""
    return " + ".join(short_name(path) for path in found.paths_of(place))


def _percent(found: Estimate) -> str:
    """Share in percent, with an error of at least a tenth of a percent."""
    if found.value is None:
        return MISSING
    half = found.half_width
    error = "" if half is None else f" ± {max(100 * half, 0.1):.1f}"
    return f"{100 * found.value:.1f}{error}"


def with_error(found: Estimate) -> str:
    """Word an estimate with two digits of its error: ``0.25720 ± 0.00011``."""
    if found.value is None:
        return MISSING
    half = found.half_width
    if half is None or half <= 0.0:
        return digits(found.value)
    places = 1 - int(f"{half:.1e}".partition("e")[2])
    if not 0 < places < 12:
        return f"{found.value:.5g} ± {half:.2g}"
    return f"{found.value:.{places}f} ± {half:.{places}f}"


def _spreads(found: Tolerance) -> RenderableType:
    table = plain_table("", "unit", "nominal", "spread", "correlation")
    for column in (1, 3, 4):
        table.columns[column].justify = "left"
    for factor, correlation in zip(found.factors, found.correlations, strict=True):
        for place in factor:
            spread = found.spreads[place]
            unit = path_unit(spread.path)
            said = "" if correlation is None else f"{correlation:g}"
            if len(factor) > 1 and place == factor[0]:
                said = f"┐ {said}"
            elif said:
                said = "┘" if place == factor[-1] else "│"
            table.add_row(
                short_name(spread.path), "" if unit == "1" else unit, digits(spread.nominal),
                spread_text(spread), said,
            )  # fmt: skip
    return titled("Spread", table)


def spread_text(spread: Spread) -> str:
    """Word a distribution: ``normal, sd 1.75``."""
    if spread.kind == "normal":
        return f"normal, sd {spread.scale:.4g}"
    return f"uniform, ± {spread.scale:.4g}"
