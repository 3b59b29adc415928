"""The rival straight from the formulas: every output at every point of the grid.

The same NumPy as `rival`, without its savings: fields, absorption in the films (for the dipole's
own light and for what the slab returns, both by volume integral) and slab factors are evaluated
at all wavevectors and masked where they do not count.
"""

from __future__ import annotations

import numpy as np

from .rival import (
    CHANNELS,
    Floats,
    Grid,
    PlainStack,
    abs2,
    dissipated,
    factor,
    outgoing_factor,
    solve_half,
)


def face(stack: PlainStack, pol: str, u: Floats) -> Floats:
    """Reflectance of the slab's outer face; 1 beyond its light line."""
    inside = np.sqrt(stack.slab_index**2 - u * u + 0j)
    outside = np.sqrt(stack.outside_bottom**2 - u * u + 0j)
    if pol == "p":
        inside, outside = inside / stack.slab_index**2, outside / stack.outside_bottom**2
    return np.where(u < stack.outside_bottom, abs2((inside - outside) / (inside + outside)), 1.0)


def destinations(stack: PlainStack, points: int, end: float) -> dict[str, dict[str, float]]:
    """As `rival.destinations`."""
    step = end / points
    u = (np.arange(points) + 0.5) * step
    grid = Grid(stack, u)
    outer = max(stack.slab_index, stack.outside_top)
    free, out_of_all = u < outer, u < max(stack.outside_bottom, stack.outside_top)
    metallic = bool((stack.eps.real < 0.0).any())
    own_index = float(np.sqrt(grid.eps[grid.own].real))
    plasmon = u >= max(outer, own_index) if metallic else np.zeros(points, dtype=bool)
    inside_slab = np.sqrt(np.maximum(1.0 - (u / stack.slab_index) ** 2, 1e-12))
    once = np.where(u < stack.slab_index, np.exp(-stack.slab_loss / inside_slab), 0.0)
    solved = {}
    for pol in "sp":
        up, down = grid.half(pol, 0), grid.half(pol, 1)
        whole = solve_half(pol, u, grid.eps, grid.kd, grid.kz, grid.phase)
        y = grid.kz[0] if pol == "s" else grid.kz[0] / grid.eps[0]
        flux = np.where(u < stack.slab_index, y.real, 1.0)
        seen = abs2(whole.r), abs2(whole.t) * whole.flux / flux, whole.absorbed / flux
        solved[pol] = up, down, seen, face(stack, pol, u)
    names = ("dissipated", "air_bottom", "air_top", "substrate", "cover", "guided",
             "surface_plasmon", "absorbed", "matched_bottom")  # fmt: skip
    out = {o: dict.fromkeys(names, 0.0) for o in "vh"}
    for o, pol, sign in CHANNELS:
        up, down, (reflected, through, absorbed), rho = solved[pol]
        rate = (factor(o, pol, grid) * dissipated(grid, pol, sign, up.r, down.r)).real * step
        a, b = sign * up.r * grid.to_top**2, sign * down.r * grid.to_bottom**2
        sent = outgoing_factor(o, pol, grid) * abs2(1.0 / (1.0 - a * b)) * step
        sent_up = sent * abs2((1.0 + b) * grid.to_top)
        sent_down = sent * abs2((1.0 + a) * grid.to_bottom)
        own = (down.absorbed * sent_down).sum(axis=0) + (up.absorbed * sent_up).sum(axis=0)
        p_t = sent_up * abs2(up.t) * up.flux
        p_b = sent_down * abs2(down.t) * down.flux
        back = np.where(out_of_all, once**2 * rho, 0.0)
        arrived = p_b / (1.0 - reflected * back)
        soaked = np.where(out_of_all, (1.0 - once) * (1.0 + rho * once), 0.0)
        returned = back * absorbed.sum(axis=0)
        tm = plasmon if pol == "p" else np.zeros(points, dtype=bool)
        mine = out[o]
        mine["dissipated"] += float(rate.sum())
        mine["air_bottom"] += float((arrived * once * (1.0 - rho))[out_of_all].sum())
        mine["air_top"] += float((p_t + arrived * back * through)[out_of_all].sum())
        mine["substrate"] += float(p_b[free & ~out_of_all].sum())
        mine["absorbed"] += float((own + arrived * (soaked + returned))[free].sum())
        mine["matched_bottom"] += float((p_b * once)[free].sum())
        mine["guided"] += float(rate[~free & ~tm].sum())
        mine["surface_plasmon"] += float(rate[tm].sum())
    return out
