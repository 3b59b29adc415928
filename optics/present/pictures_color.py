"""The path of the color with the angle on the CIE 1976 diagram."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from optics.outcome.color import (
    COOLEST_K,
    HOTTEST_K,
    WHITE_XY,
    planckian_uv,
    spectral_locus,
    uv_prime,
)
from optics.present.pictures_directions import CURVE, curve_of
from optics.present.pictures_style import (
    FAINT,
    INK,
    SMALL_SIZE,
    TEXT_SIZE,
    caption,
    figure_of,
    plain,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from optics.outcome.angular import Angular

    Floats = NDArray[np.float64]

_MARK = "#D55E00"
_LOCUS_LABELS_NM = (460, 480, 500, 520, 540, 560, 580, 600, 620, 700)
_JUST_SEEN = 0.004  # in u', v'; common practice, no source


def color_figure(outcome: Angular, names: Sequence[str], chosen: Sequence[float]) -> Figure:
    """Draw the whole diagram with the path, and the path from close up."""
    figure = figure_of(9.4, 0.9 + 4.2 * len(names), outcome.title)
    rows = figure.subplots(len(names), 2, squeeze=False, width_ratios=[1.08, 1.0])
    for (whole, near), name in zip(rows, names, strict=True):
        u, v = (curve_of(outcome, name, key) for key in ("u_prime", "v_prime"))
        known = np.isfinite(u.value)
        angle, path = u.angle_deg[known], np.column_stack([u.value, v.value])[known]
        whole.set_title(f"side {name}", loc="left", fontsize=TEXT_SIZE, color=INK)
        _diagram(whole, labelled=True)
        _diagram(near, labelled=False)
        for axes, width in ((whole, 1.6), (near, 2.0)):
            axes.plot(path[:, 0], path[:, 1], color=CURVE, linewidth=width)
            axes.set_aspect("equal", adjustable="box")
            axes.set_xlabel("u'")
            axes.set_ylabel("v'")
            plain(axes)
        whole.set_xlim(-0.045, 0.665)
        whole.set_ylim(-0.02, 0.63)
        if len(path):
            whole.plot(*path[0], "o", color=_MARK, markersize=5, markeredgecolor="white")
            _near(near, angle, path, chosen)
    caption(
        figure,
        "Path of the color with the angle on the CIE 1976 diagram, dots at chosen angles. Left: "
        "all colors, single wavelengths in nm around them; thin dashed line: black bodies; cross: "
        f"equal-energy white. Right: the same from close up; ring: {_JUST_SEEN} in u', v' around "
        "the color along the normal, a difference that is just seen (common practice, no source).",
    )
    return figure


def _diagram(axes: Axes, *, labelled: bool) -> None:
    """Draw the spectral locus, the black bodies and white."""
    wavelength_nm, xy = spectral_locus()
    locus = uv_prime(xy)
    closed = np.vstack([locus, locus[:1]])
    axes.plot(closed[:, 0], closed[:, 1], color=FAINT, linewidth=1.0)
    black = planckian_uv(np.geomspace(COOLEST_K, HOTTEST_K, 80))
    axes.plot(black[:, 0], 1.5 * black[:, 1], color=FAINT, linewidth=0.8, linestyle=(0, (4, 2)))
    white = uv_prime(np.array([WHITE_XY]))[0]
    axes.plot(*white, "+", color=INK, markersize=7)
    for nm in _LOCUS_LABELS_NM if labelled else ():
        place = int(np.searchsorted(wavelength_nm, nm))
        at = locus[place]
        axes.plot(*at, ".", color=FAINT, markersize=4)
        away = (at - white) / np.hypot(*(at - white))
        axes.annotate(
            str(nm), at, xytext=9.0 * away, textcoords="offset points", ha="center",
            va="center", fontsize=SMALL_SIZE - 1, color=FAINT,
        )  # fmt: skip


def _near(axes: Axes, angle: Floats, path: Floats, chosen: Sequence[float]) -> None:
    """Mark and name chosen angles, and frame the path."""
    from matplotlib.patches import Circle

    axes.add_patch(Circle(tuple(path[0]), _JUST_SEEN, fill=False, edgecolor=INK, linewidth=0.8))
    middle = 0.5 * (path.max(axis=0) + path.min(axis=0))
    half = max(0.62 * float(np.ptp(path, axis=0).max()), 0.012)
    axes.set_xlim(middle[0] - half, middle[0] + half)
    axes.set_ylim(middle[1] - half, middle[1] + half)
    named: list[Floats] = []
    for one in chosen:
        at = path[np.flatnonzero(angle == one)]
        if not len(at):
            continue
        axes.plot(*at[0], "o", color=_MARK, markersize=5.5, markeredgecolor="white")
        if any(np.hypot(*(at[0] - other)) < 0.12 * half for other in named):
            continue
        named.append(at[0])
        axes.annotate(
            f"{one:g}\N{DEGREE SIGN}", at[0], xytext=(6, 5), textcoords="offset points",
            fontsize=SMALL_SIZE, color=INK,
        )  # fmt: skip
