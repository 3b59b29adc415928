"""Light budgets of many devices that differ in film thicknesses, each half stack solved once.

Nodes are chosen good for all: the panels that a few of the devices need, taken together. Every
device gets its own error estimate at these nodes, and its total power from another path than its
parts, so that whoever misses the wanted accuracy can be told, and computed by `budget` instead.
"""

from collections.abc import Iterator
from typing import NamedTuple

import numpy as np

from optics.kernels.arrays import Floats, Integers
from optics.kernels.budget import light_budget
from optics.kernels.combine import (
    BEYOND_PART,
    GUIDED_PART,
    NEAR_PART,
    PARTS,
    TOTAL_PART,
    Blocks,
    Nodes,
    combine_dissipated,
)
from optics.kernels.combine_collect import add_averages, collect
from optics.kernels.combine_radiated import combine_radiated
from optics.kernels.combine_tables import (
    BLOCK,
    KNOWN_OF_HALF,
    finest,
    leaves,
    nodes_of,
    tabulate_half,
    tabulate_reflection,
)
from optics.kernels.compiled import mark_cache_warm
from optics.kernels.exits import COLUMNS, PLANAR
from optics.kernels.geometry import has_plasmon, largest_index, light_lines, nearest_absorber
from optics.kernels.paths import ARC, ARC_FROM_LINE, TAIL
from optics.kernels.problem import Half, Problem, Sides, Source
from optics.kernels.rules import DEGREE_ROWS, DEGREES, NODES, PANEL_NODES, WEIGHT
from optics.kernels.tasks import Tasks, along_arcs

#: What is known of every device: the outcomes of `budget`, then F.
KNOWN = 11
_MIRRORED = [1, 0, 3, 2, 4, 5, 6, 8, 7, 9, 10]  # their places with top and bottom exchanged
# As in `budget`.
_FLATNESS = 0.7
_PANEL_SHARE = 0.05
_SMALLEST_SCALE = 1e-5
_MOST_LEAVES = 400
_ATTEMPTS = 4  # to find nodes for all devices at a wavelength,
_MORE_PROBES = 4  # each time with the panels of so many that have missed the tolerance
_STRICTER = 0.1  # by so much stricter
# Lanes of a vector of numbers, and positions times lanes of the products of a panel: twice as many
# and the linear algebra library would start threads of its own beside the sweep's.
_LANES, _LARGEST_PRODUCT = 8, 2048
_FREE = -1  # in the place of a part: the real axis below the outer light lines


class Family(NamedTuple):
    """Devices that differ in the thicknesses of films other than the emitter's.

    `pairs` (p, 2) says which upper and which lower half each device has.
    """

    problem: Problem  # of one of them, the one whose absorbers are nearest
    kd_up: Floats  # (w, u, m) k0 times thickness of every upper half, as in `problem.Half`
    kd_down: Floats  # (w, d, m)
    pairs: Integers


class Combined(NamedTuple):
    """Result of `combined_budget`."""

    sums: Floats  # (m, KNOWN, z, p) spectral averages, over the same bulk rates as mix
    error: Floats  # (p,) estimate for the worst destination and wavelength over F
    balance: Floats  # (p,) largest share that no destination accounts for


def combined_budget(
    family: Family, probes: Integers, zone: Floats, mix: Floats, tolerance: float
) -> Combined:
    """Compute spectral averages of F and all destinations of every device at every position.

    Parameters
    ----------
    family : Family
    probes : int (k,)
        Devices whose panels are taken.
    zone : float (z,)
        Weights over positions of the average whose error is estimated.
    mix : float (m, w, 2)
        Weights of every average over wavelength and orientation.
    tolerance : float
        Wanted accuracy of every destination as a fraction of the dissipated power.
    """
    mirrored = family.kd_up.shape[1] > family.kd_down.shape[1]
    if mirrored:
        # The longer list runs along the rows.
        family = _turned_over(family)
    points, z = family.pairs.shape[0], family.problem.source.kz_positions.shape[1]
    sums = np.zeros((mix.shape[0], KNOWN, z, points))
    error, balance = np.zeros(points), np.zeros(points)
    order = np.lexsort((family.pairs[:, 1], family.pairs[:, 0]))
    for w, panels in enumerate(_first_panels(family, probes, tolerance)):
        at_w = np.ascontiguousarray(mix[:, w])
        left = order
        for attempt in range(_ATTEMPTS):
            found = _at_nodes(family, w, panels, left, zone)
            good = found.error <= tolerance
            if attempt == _ATTEMPTS - 1 or good.all():
                good[:] = True
            add_averages(found.power, at_w, left, good, sums)
            error[left[good]] = np.maximum(error[left[good]], found.error[good])
            balance[left[good]] = np.maximum(balance[left[good]], found.balance[good])
            if good.all():
                break
            stricter = tolerance * _STRICTER ** (attempt + 1)
            panels = _refined(family, w, panels, left, found, tolerance, stricter)
            left = left[~good]
    mark_cache_warm("combined")
    sums = sums[:, _MIRRORED] if mirrored else sums
    return Combined(sums, error, balance)


class _Panels(NamedTuple):
    """Paths of one wavelength and the panels of each."""

    plasmon: bool
    part: list[int]  # of the dissipated power, by path; _FREE for the real axis
    paths: list[Floats]  # (4,) each
    panels: list[Floats]  # (k, 3) each


class _Found(NamedTuple):
    """Light of some devices at one wavelength, see `collect`."""

    error: Floats
    balance: Floats
    power: Floats


def _at_nodes(family: Family, w: int, panels: _Panels, places: Integers, zone: Floats) -> _Found:
    """Compute devices, given by their places in sorted order, at the nodes of these panels."""
    pairs = family.pairs[places]
    points, z = places.size, zone.size
    blocks = _blocks(pairs, family.kd_down.shape[1], z + DEGREES)
    lanes = blocks.lanes
    source, sides, up, down = _one(family.problem, w)
    kd_up, kd_down = family.kd_up[w], family.kd_down[w]
    found, missed = np.zeros((PARTS, 3, z, points)), np.zeros((PARTS, 3, points))
    nodes = _nodes(panels, free=False)
    r_up, r_down = (
        _reflections(half, kd, nodes, lanes) for half, kd in ((up, kd_up), (down, kd_down))
    )
    combine_dissipated(source, nodes, r_up, r_down, blocks, zone, found, missed)
    free, missed_free = np.zeros((2, COLUMNS, z, points)), np.zeros((2, COLUMNS, points))
    nodes = _nodes(panels, free=True)
    if nodes.part.size:
        above = _halves(up, kd_up, nodes, sides, 1, lanes)
        below = _halves(down, kd_down, nodes, sides, 0, lanes)
        combine_radiated(source, sides, nodes, above, below, blocks, zone, free, missed_free)
    result = _Found(np.zeros(points), np.zeros(points), np.zeros((2, KNOWN, z, points)))
    collect(found, missed, free, missed_free, panels.plasmon, zone, *result)
    return result


def _first_panels(family: Family, probes: Integers, tolerance: float) -> Iterator[_Panels]:
    """Panels of every wavelength that the probes need."""
    problem = family.problem
    devices = [_device(family, pair) for pair in family.pairs[probes]]
    scales = [np.abs(light_budget(one, tolerance).dissipation) for one in devices]  # (w, z, 2)
    w = problem.source.eps_o.size
    rows = np.arange(w)
    far, lines = 2.0 * largest_index(problem), light_lines(problem)
    trapped, plasmon = lines[:, -1], has_plasmon(problem)
    start = np.where(plasmon, np.maximum(trapped, np.sqrt(problem.source.eps_e)), trapped)
    length = np.maximum(far, 1.0 / nearest_absorber(problem))
    every = {
        TOTAL_PART: along_arcs(rows, ARC, np.zeros(w), far),
        GUIDED_PART: along_arcs(rows, ARC_FROM_LINE, trapped, start, _FLATNESS).nonempty(),
        BEYOND_PART: along_arcs(rows, ARC_FROM_LINE, start, far, _FLATNESS),
        NEAR_PART: Tasks.on(rows, TAIL, far, np.inf, length),
        _FREE: Tasks.between(rows, lines),
    }
    for row in range(w):
        part, paths, panels = [], [], []
        for place, tasks in every.items():
            for path in tasks.paths[tasks.rows == row]:
                part.append(place)
                paths.append(path)
                sets = [
                    _leaves(one, row, place, path, scale[row].T, tolerance)
                    for one, scale in zip(devices, scales, strict=True)
                ]
                panels.append(finest(sets))
        yield _Panels(bool(plasmon[row]), part, paths, panels)


def _refined(
    family: Family,
    w: int,
    panels: _Panels,
    places: Integers,
    found: _Found,
    tolerance: float,
    stricter: float,
) -> _Panels:
    """Panels that also suit some of the devices that missed the tolerance, the worst among them.

    Stricter than the tolerance, because panels cut for others are cut elsewhere than one's own.
    """
    missed = np.flatnonzero(~(found.error <= tolerance))
    ranked = missed[np.argsort(-found.error[missed], kind="stable")]
    chosen = ranked[np.unique(np.linspace(0, ranked.size - 1, _MORE_PROBES).astype(int))]
    better = list(panels.panels)
    for place in chosen:
        device = _device(family, family.pairs[places[place]])
        scale = np.abs(found.power[:, KNOWN - 1, :, place])
        for i, (part, path) in enumerate(zip(panels.part, panels.paths, strict=True)):
            better[i] = finest([better[i], _leaves(device, w, part, path, scale, stricter)])
    return panels._replace(panels=better)


def _leaves(
    problem: Problem, w: int, part: int, path: Floats, scale: Floats, tolerance: float
) -> Floats:
    """Panels (k, 3) of one path for one device; scale (2, z) is its F."""
    scale = np.maximum(scale, _SMALLEST_SCALE)
    scale = np.repeat(scale, COLUMNS, axis=0) if part == _FREE else scale[[0, 1, 1]]
    found = np.zeros((_MOST_LEAVES, 3))
    wanted = _PANEL_SHARE * tolerance
    count = leaves(problem, w, path, part == _FREE, scale.ravel(), wanted, found)
    return found[:count]


def _nodes(panels: _Panels, *, free: bool) -> Nodes:
    """Nodes of the paths on the real axis below the outer light lines, or of all others."""
    u, du, rule, part, first = [], [], [], [], [0]
    for place, path, found in zip(panels.part, panels.paths, panels.panels, strict=True):
        if (place == _FREE) != free:
            continue
        for a, b, stage in found:
            count = (int(stage) + 1) * NODES
            nodes, slope = np.zeros((2, PANEL_NODES), dtype=np.complex128)
            nodes_of(path, a, b, nodes, slope)
            u.append(nodes[:count])
            du.append(slope[:count])
            rule.append([table[int(stage), :count] for table in (WEIGHT, *DEGREE_ROWS)])
            part.append(TOTAL_PART if free else place)
            first.append(first[-1] + count)
    if not part:
        nothing = np.zeros(0)
        empty = nothing.astype(np.complex128)
        degrees = np.zeros((DEGREES, 0))
        return Nodes(empty, empty, nothing, degrees, np.array(first), np.array(part, int))
    rows = np.concatenate(rule, axis=1)
    return Nodes(
        np.concatenate(u), np.concatenate(du), rows[0], rows[1:], np.array(first), np.array(part)
    )


def _reflections(half: Half, kd: Floats, nodes: Nodes, lanes: int) -> Floats:
    table = np.zeros((nodes.u.size, 2, -(-kd.shape[0] // lanes), 2, BLOCK))
    tabulate_reflection(half.eps_o, half.eps_e, kd, nodes.u, lanes, table)
    return table


def _halves(half: Half, kd: Floats, nodes: Nodes, sides: Sides, side: int, lanes: int) -> Floats:
    """Table of the half stacks on one side (0 bottom, 1 top), lit from its slab where it can be."""
    table = np.zeros((nodes.u.size, 2, -(-kd.shape[0] // lanes), KNOWN_OF_HALF, BLOCK))
    lit = np.zeros(nodes.u.size, dtype=np.bool_)
    if sides.kind[side] == PLANAR:
        lit = nodes.u.real < sides.n_outer[side]
    tabulate_half(half.eps_o, half.eps_e, kd, nodes.u, lit, lanes, table)
    return table


def _blocks(pairs: Integers, halves: int, rows: int) -> Blocks:
    """Blocks of sorted pairs: one upper half with lower ones of one segment, of `halves` in all."""
    most = int(np.clip(_LARGEST_PRODUCT // rows // _LANES * _LANES, _LANES, BLOCK))
    segments = -(-halves // most)
    lanes = -(-halves // segments // _LANES) * _LANES
    up, segment = pairs[:, 0], pairs[:, 1] // lanes
    new = np.flatnonzero((np.diff(up) != 0) | (np.diff(segment) != 0)) + 1
    begin = np.concatenate([[0], new])
    by_segment = np.argsort(segment[begin], kind="stable")
    ends = np.append(begin, up.size)
    return Blocks(up[begin], segment[begin], ends, by_segment, pairs[:, 1] % lanes, lanes)


def _device(family: Family, pair: Integers) -> Problem:
    """Problem of one device."""
    source, sides, up, down = family.problem
    return Problem(
        source,
        sides,
        Half(up.eps_o, up.eps_e, np.ascontiguousarray(family.kd_up[:, pair[0]])),
        Half(down.eps_o, down.eps_e, np.ascontiguousarray(family.kd_down[:, pair[1]])),
    )


def _one(problem: Problem, w: int) -> tuple[Source, Sides, Half, Half]:
    """Arrays of one wavelength."""
    source, sides, up, down = problem
    return (
        Source(*(part[w] for part in source)),
        Sides(sides.kind, sides.n_outer[w], sides.n_out[w], sides.loss[w]),
        Half(*(part[w] for part in up)),
        Half(*(part[w] for part in down)),
    )


def _turned_over(family: Family) -> Family:
    """The same devices with top and bottom exchanged."""
    source, sides, up, down = family.problem
    places = source.kd[:, None] - source.kz_positions
    turned = Problem(
        source._replace(kz_positions=places),
        Sides(
            sides.kind[::-1].copy(),
            sides.n_outer[:, ::-1].copy(),
            sides.n_out[:, ::-1].copy(),
            sides.loss[:, ::-1].copy(),
        ),
        down,
        up,
    )
    pairs = np.ascontiguousarray(family.pairs[:, ::-1])
    return Family(turned, family.kd_down, family.kd_up, pairs)


__all__ = ["KNOWN", "Combined", "Family", "combined_budget"]
