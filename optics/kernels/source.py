"""Power of dipoles at the nodes of a panel: dissipated, and what reaches every destination.

Puts together `dipole`, the half stacks (`whole`) and what lies outside the films (`exits`).
"""

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import borrowing, reduction, rowwise, scalar
from optics.kernels.dipole import (
    fades_out,
    fill_carried,
    fill_dissipated,
    fill_phases,
    first_lane,
    put_dissipated,
    put_sent,
)
from optics.kernels.exits import (
    ABSORBED,
    AIR_BOTTOM,
    AIR_TOP,
    COLUMNS,
    COVER,
    MATCHED_BOTTOM,
    MATCHED_TOP,
    PLANAR,
    SUBSTRATE,
    TOTAL,
    Fate,
    Ways,
    fates,
    fill_faces,
    light_returns,
    open_ways,
)
from optics.kernels.halfstack import abs2, reflection
from optics.kernels.panel import Light
from optics.kernels.planar import LANES, at
from optics.kernels.problem import Half, Scratch, Sides, Source, Work
from optics.kernels.rules import NODES, PANEL_NODES
from optics.kernels.whole import solve_half, solve_stack, solve_waves


@borrowing
def dissipated(
    source: Source,
    up: Half,
    down: Half,
    work_up: Work,
    work_down: Work,
    scratch: Scratch,
    u: Complexes,
    du: Complexes,
    first: int,
    values: Floats,
) -> None:
    """Dissipated power at the nodes of a panel on any path.

    Parameters
    ----------
    u, du : complex (NODES,)
        Nodes and derivative of the path.
    first : int
        Place of the first of these nodes.
    values : float (3, positions, nodes), output
        Re(integrand * du) by channel.
    """
    solve_waves(source, up, down, work_up, work_down, u)
    reflection(work_up.y, work_up.e, work_up.r)
    reflection(work_down.y, work_down.e, work_down.r)
    kz, through = work_up.kz[0], work_up.e[0]
    fill_dissipated(source, work_up.r, work_down.r, kz, through, u, du, scratch)
    fading = fades_out(source, kz)
    for q in range(source.kz_positions.size):
        fill_phases(q, source, kz, through, fading, scratch)
        for c in range(3):
            lane = first_lane(c, source)
            put_dissipated(
                scratch.plain[c], scratch.before[c, 0], scratch.before[c, 1],
                scratch.by_bottom[lane:], scratch.by_top[lane:], values[c, q, first:],
            )  # fmt: skip


@borrowing
def radiated(
    source: Source,
    sides: Sides,
    up: Half,
    down: Half,
    work_up: Work,
    work_down: Work,
    scratch: Scratch,
    u: Complexes,
    du: Complexes,
    first: int,
    light: Light,
) -> None:
    """Dissipated power and all destinations at real nodes below the outer light lines.

    Parameters
    ----------
    u, du : complex (NODES,), real-valued, between two neighboring light lines
    first : int
        Place of the first of these nodes.
    light : output
    """
    solve_waves(source, up, down, work_up, work_down, u)
    solve_half(up, work_up, u)
    solve_half(down, work_down, u)
    returns = light_returns(sides, u[0].real) or light_returns(sides, u[-1].real)
    from_bottom = returns and sides.kind[0] == PLANAR
    from_top = returns and sides.kind[1] == PLANAR
    solve_stack(from_bottom, from_top, up, down, work_up, work_down, scratch.stack)
    kz, through = work_up.kz[0], work_up.e[0]
    for side in range(2):
        fill_faces(
            sides.kind[side], sides.n_outer[side], sides.n_out[side], sides.loss[side], u,
            scratch.faces[side],
        )  # fmt: skip
    r_up, r_down = work_up.r_far[0], work_down.r_far[0]
    ways = open_ways(sides, u[NODES // 2].real)  # the same all over a panel
    last_b, last_t = down.kd.size - 1, up.kd.size - 1
    for pol in range(2):
        lane, face, shares = pol * NODES, (1 + pol) * NODES, light.shares[pol]
        _fill_shares(
            ways, work_down.f[last_b, lane:], work_down.y[last_b, lane:], work_up.f[last_t, lane:],
            work_up.y[last_t, lane:], work_down.absorbed[lane:], work_up.absorbed[lane:],
            scratch.faces[0], scratch.faces[1], scratch.faces[0, face:], scratch.faces[1, face:],
            scratch.stack[lane:], shares[first:],
        )  # fmt: skip
        light.live[pol, TOTAL] = True
        for k in range(1, COLUMNS):
            start = k * 2 * PANEL_NODES + first
            live = plain_sum(shares[start:]) + plain_sum(shares[start + PANEL_NODES :])
            light.live[pol, k] = live > 0.0
    fill_dissipated(source, r_up, r_down, kz, through, u, du, scratch)
    fill_carried(source, r_up, r_down, kz, u, du, scratch)
    fading = fades_out(source, kz)
    for q in range(source.kz_positions.size):
        fill_phases(q, source, kz, through, fading, scratch)
        for c in range(3):
            lane = first_lane(c, source)
            by_bottom, by_top = scratch.by_bottom[lane:], scratch.by_top[lane:]
            put_dissipated(
                scratch.plain[c], scratch.before[c, 0], scratch.before[c, 1], by_bottom, by_top,
                light.total[c, q, first:],
            )  # fmt: skip
            put_sent(
                scratch.carried[c], scratch.mirrored[c, 0], scratch.mirrored[c, 1],
                scratch.crossed[c, 0], scratch.crossed[c, 1], by_bottom, by_top,
                scratch.fade_bottom[lane:], scratch.fade_top[lane:], light.sent[c, q, first:],
            )  # fmt: skip


@rowwise
def _fill_shares(
    ways: Ways, f_down: Floats, y_down: Floats, f_up: Floats, y_up: Floats, absorbed_down: Floats,
    absorbed_up: Floats, once_b: Floats, once_t: Floats, rho_b: Floats, rho_t: Floats,
    stack: Floats, shares: Floats,
) -> None:  # fmt: skip
    """Destinations of one polarization's light per unit sent down, up, at each node.

    f, y : amplitude and admittance in the last medium of each half; once, rho : of `fill_faces`.
    All begin with the polarization's first lane, or the first node of the stage.
    """
    for i in range(NODES):
        p_b = abs2(at(f_down, i)) * y_down[i]
        p_t = abs2(at(f_up, i)) * y_up[i]
        powers = (
            stack[i], stack[LANES + i], stack[2 * LANES + i], stack[3 * LANES + i],
            stack[4 * LANES + i],
        )  # fmt: skip
        down, up = fates(ways, (once_b[i], once_t[i]), (rho_b[i], rho_t[i]), powers, p_b, p_t)
        _put_fate(shares, i, down, absorbed_down[i])
        _put_fate(shares, PANEL_NODES + i, up, absorbed_up[i])


@scalar
def _put_fate(shares: Floats, place: int, fate: Fate, absorbed: float) -> None:
    row = 2 * PANEL_NODES
    shares[AIR_BOTTOM * row + place] = fate[0]
    shares[AIR_TOP * row + place] = fate[1]
    shares[SUBSTRATE * row + place] = fate[2]
    shares[COVER * row + place] = fate[3]
    shares[ABSORBED * row + place] = fate[4] + absorbed
    shares[MATCHED_BOTTOM * row + place] = fate[5]
    shares[MATCHED_TOP * row + place] = fate[6]


@reduction
def plain_sum(row: Floats) -> float:
    """Sum of the values at the nodes of one stage, in any order."""
    total = 0.0
    for i in range(NODES):
        total += row[i]
    return total
