"""Integration of the dipole's power along a path whose panels halve themselves."""

from optics.kernels.compiled import inline, kernel
from optics.kernels.exits import COLUMNS
from optics.kernels.paths import panel_error, panel_sum, place
from optics.kernels.source import dissipated, radiated

# A panel is halved at most this often, and no path uses more panels than this.
_DEEPEST = 48
_MOST_PANELS = 600


@inline
def evaluate(on_axis, path, a, b, problem, bench):
    """Fill bench.values for the panel theta in a..b of a path; return the number of columns."""
    kind, lo, hi, depth, beyond_bulk = path
    place(kind, lo, hi, depth, a, b, bench.u, bench.du)
    source, sides, up, down = problem.source, problem.sides, problem.up, problem.down
    positions = source.kz_positions.size
    if on_axis:
        radiated(
            source, sides, up, down, bench.up, bench.down, bench.u, bench.du,
            bench.shares, bench.spare, bench.values,
        )  # fmt: skip
        return 2 * COLUMNS * positions
    dissipated(
        source, up, down, bench.up, bench.down, bench.u, bench.du, beyond_bulk, bench.values
    )
    return 3 * positions


@kernel
def adapt(on_axis, path, a, b, problem, bench, scale, tolerance, result):
    """Integrate theta from a to b along a path, halving panels until each is resolved.

    Parameters
    ----------
    on_axis : bool
        Take all destinations (`radiated`, real paths) rather than the dissipated power only.
    path : (kind, lo, hi, depth, beyond_bulk)
        As in `paths.place`.
    scale : float (q,)
        What errors are measured against, column by column.
    tolerance : float
        Largest error of one panel over scale.
    result : float (q,)
        The integral is added to it.

    Returns
    -------
    error : float
        Sum of the panels' estimated errors over scale.
    panels : int
        Number of panels evaluated.
    """
    ends = bench.ends
    ends[0, 0], ends[1, 0] = a, b
    waiting, panels, error = 1, 0, 0.0
    narrowest = (b - a) * 0.5**_DEEPEST
    while waiting > 0:
        waiting -= 1
        lo, hi = ends[0, waiting], ends[1, waiting]
        q = evaluate(on_axis, path, lo, hi, problem, bench)
        panels += 1
        miss = panel_error(bench.values, q, scale, bench.moments)
        if miss > tolerance and hi - lo > narrowest and panels < _MOST_PANELS:
            middle = 0.5 * (lo + hi)
            ends[0, waiting], ends[1, waiting] = lo, middle
            ends[0, waiting + 1], ends[1, waiting + 1] = middle, hi
            waiting += 2
            continue
        error += miss
        panel_sum(bench.values, q, bench.total)
        for k in range(q):
            result[k] += bench.total[k]
    return error, panels
