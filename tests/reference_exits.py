"""What happens below the largest outer light line: slabs, exits, first literal route.

Everything here is per d kappa at real kappa below the largest outer light line, relative to
the bulk rate of the orientation; follows the definitions of exits and destinations.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import reference_fields as fields
from reference_geometry import Geometry, Slab

Array = Any
RADIATIVE = ("air_bottom", "air_top", "substrate", "cover", "absorbed")
ORIENTATIONS = {"v": ("v_p",), "h": ("h_p", "h_s")}
COLUMNS = ("dissipated", *RADIATIVE, "matched_bottom", "matched_top")


def densities(geo: Geometry, kappa: Array) -> Array:
    """Rows v then h, each with `COLUMNS`; shape (16, kappa.size)."""
    variants = {"": geo, "bottom": geo.matched("bottom"), "top": geo.matched("top")}
    both = {pol: fields.halves(geo, kappa, pol) for pol in "ps"}
    seen = {pol: _responses(geo, kappa, pol) for pol in "ps"}
    rows: list[Array] = []
    for sources in ORIENTATIONS.values():
        total = {name: np.zeros(np.shape(kappa)) for name in COLUMNS}
        for source in sources:
            pol = fields.SOURCES[source]
            own = fields.direct(geo, kappa, source, both[pol])
            loss = fields.dissipated(geo, kappa, source, both[pol]).real
            total["dissipated"] = total["dissipated"] + loss
            for side, variant in variants.items():
                if variant is None:
                    continue
                shares = _shares(variant, kappa, pol, own, seen[pol])
                if side:
                    name = f"matched_{side}"
                    total[name] = total[name] + shares[f"air_{side}"]
                else:
                    for name in RADIATIVE:
                        total[name] = total[name] + shares[name]
        rows += [total[name] for name in COLUMNS]
    return np.array(rows)


def _responses(geo: Geometry, kappa: Array, pol: str) -> dict[str, fields.Response]:
    """Whole-stack responses at the slab sides; an evanescent side never asks for them."""
    sides = {"bottom": geo.substrate, "top": geo.cover}
    return {
        side: fields.response(geo, np.where(kappa < slab.index, kappa, 0.0), pol, side)
        for side, slab in sides.items()
        if slab
    }


def _shares(
    geo: Geometry,
    kappa: Array,
    pol: str,
    own: fields.Direct,
    seen: dict[str, fields.Response],
) -> dict[str, Array]:
    """Destinations of one source and polarization: first arrival, then the bounces."""
    zero = np.zeros(np.shape(kappa))
    first = {"bottom": own.down, "top": own.up}
    lost = sum(own.absorbed_below + own.absorbed_above, zero)
    out = dict.fromkeys(RADIATIVE, zero) | {"absorbed": lost}
    slabs: dict[str, Slab | None] = {"bottom": geo.substrate, "top": geo.cover}
    bounces = kappa < geo.exit_line
    passed, face, back = {}, {}, {}
    for side, slab in slabs.items():
        if slab is None:
            passed[side], face[side], back[side] = zero + 1, zero, zero
            continue
        inside = kappa < slab.index
        at = np.where(inside, kappa, 0.0)
        passed[side], face[side] = fields.slab_pass(slab, at, pol)
        back[side] = np.where(inside, passed[side] ** 2 * face[side], 0.0)
    x_bottom, x_top = _series(first, back, seen, zero)
    arrived = {"bottom": x_bottom, "top": x_top}
    for side, slab, name in (
        ("bottom", slabs["bottom"], "substrate"),
        ("top", slabs["top"], "cover"),
    ):
        x = np.where(bounces, arrived[side], first[side])
        eps = geo.bottom if side == "bottom" else geo.top
        if slab is None:
            sink = "absorbed" if eps.imag != 0 else f"air_{side}"
            out[sink] = out[sink] + x
            continue
        leaving = passed[side] * (1 - face[side]) * x
        soaked = (1 - passed[side]) * (1 + passed[side] * face[side]) * x
        heated = back[side] * x * np.where(kappa < slab.index, seen[side].absorbed, 0.0)
        out[f"air_{side}"] = np.where(bounces, leaving, 0.0)
        out[name] = np.where(bounces, 0.0, x)
        out["absorbed"] = out["absorbed"] + np.where(bounces, soaked + heated, 0.0)
    return out


def _series(
    first: dict[str, Array], back: dict[str, Array], seen: dict[str, fields.Response], zero: Array
) -> tuple[Array, Array]:
    """Sum of all bounces: light that enters each slab from the films, both sides coupled."""

    def part(side: str, name: str) -> Array:
        # Where the slab is evanescent nothing comes back; its response is meaningless there.
        if side not in seen:
            return zero
        return np.where(back[side] > 0, back[side] * getattr(seen[side], name), 0.0)

    rb, tb = part("bottom", "reflected"), part("bottom", "transmitted")
    rt, tt = part("top", "reflected"), part("top", "transmitted")
    determinant = (1 - rb) * (1 - rt) - tb * tt
    safe = np.where(determinant == 0, 1.0, determinant)
    x_bottom = ((1 - rt) * first["bottom"] + tt * first["top"]) / safe
    x_top = ((1 - rb) * first["top"] + tb * first["bottom"]) / safe
    return x_bottom, x_top
